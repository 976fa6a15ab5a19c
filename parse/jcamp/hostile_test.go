package jcamp

import (
	"errors"
	"fmt"
	"runtime"
	"strings"
	"testing"

	"pkvigil/parse"
)

// Files made to ask for memory are refused, or read, within a few megabytes.
func TestHostileFiles(t *testing.T) {
	flat := func(n int, table string) string { return spectrum("1", "1", "400", "500", n, table) }
	for name, text := range map[string]string{
		"huge count, no data":      flat(999_999_999, "400 1\n"),
		"huge repeat count":        flat(999_999_999, "400AZ99999999\n"),
		"endless repeat count":     flat(500, "400A"+strings.Repeat("Z99", 400)+"\n"),
		"many repeat counts":       strings.Replace(flat(5, strings.Repeat("400AZ0000B\n", 5000)), "##NPOINTS= 5\n", "", 1),
		"overflowing repeat count": flat(500, "400AZ"+strings.Repeat("9", 4000)+"\n"),
		"endless digits":           flat(500, "400"+strings.Repeat("1", 1<<20)+"\n"),
		"endless line":             flat(500, "400 "+strings.Repeat("x", 1<<20)+"\n"),
		"deep nesting":             strings.Repeat("##TITLE= a\n", 100_000),
		"many records":             "##TITLE= a\n" + strings.Repeat("##A=\n", 600_000),
		"many pages":               "##TITLE= a\n##NTUPLES= b\n##SYMBOL= X, Y\n##VAR_DIM= 99999999, 9\n##FIRST= 1,\n##LAST= 9,\n" + strings.Repeat("##PAGE= 1\n##DATA TABLE= (X++(Y..Y)), XYDATA\n1AZ0000000\n", 2000),
		"long title":               "##TITLE= " + strings.Repeat("a", 1<<20) + sound[10:],
		"escape sequences":         strings.Replace(sound, "SPECTRUM", "\x1b[31mSPECTR\u202eUM", 1),
	} {
		var before, after runtime.MemStats
		runtime.ReadMemStats(&before)
		c, err := Read("t", []byte(text), parse.Options{})
		runtime.ReadMemStats(&after)
		if used := after.TotalAlloc - before.TotalAlloc; used > 64<<20+40*uint64(len(text)) {
			t.Errorf("%s: %d MB allocated for %d bytes", name, used>>20, len(text))
		}
		if err != nil {
			var e *parse.Error
			if !errors.As(err, &e) || len(err.Error()) > 1000 || strings.ContainsAny(err.Error(), "\x1b\u202e\x00") {
				t.Errorf("%s: %.300q", name, err)
			}
			continue
		}
		for _, s := range c.Scans {
			if len(s.Label) > 1<<14 || strings.ContainsAny(fmt.Sprint(s.Label, s.Meta, c.Remarks), "\x1b\u202e") {
				t.Errorf("%s: label of %d bytes", name, len(s.Label))
			}
		}
	}
}

// A file cut anywhere is refused, except where only its last ##END= is lost.
func TestCutFiles(t *testing.T) {
	for cut := range len(sound) {
		c, err := Read("t", []byte(sound[:cut]), parse.Options{})
		if err != nil {
			continue
		}
		if cut < len(sound)-len("##END=\n") || !closeTo(c.Scans[0].Absorbance[5], 0.6) || c.Complete != strings.HasSuffix(sound[:cut], "##END=") && c.Complete != strings.HasSuffix(sound[:cut], "##END") {
			t.Errorf("cut at %d of %d: read, complete %v", cut, len(sound), c.Complete)
		}
	}
}
