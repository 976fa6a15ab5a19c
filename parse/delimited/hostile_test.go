package delimited

import (
	"bytes"
	"fmt"
	"strings"
	"testing"
	"time"

	"pkvigil/parse"
)

// hostile are inputs that are large in the way that hurts most.
func hostile(size int) map[string][]byte {
	repeat := func(s string) []byte { return bytes.Repeat([]byte(s), size/len(s)) }
	wide := "Mode,Absorbance\nnm" + strings.Repeat(",S", 4000) + "\n"
	for i := range 40 {
		wide += fmt.Sprint(400+i) + strings.Repeat(",0.1", 4000) + "\n"
	}
	return map[string][]byte{
		"short numbers":     repeat("1,1\n"),
		"one long line":     repeat("1,"),
		"quotes":            repeat("\"\n"),
		"open quotes":       append([]byte("rung,pH\n"), repeat("\"a,1\nb,2\n")...),
		"heads":             repeat("rung,pH,mV,temperature,electrode\n"),
		"keys":              repeat("Sample: x\nDate: 2026-03-11\n"),
		"blank lines":       repeat("\n"),
		"carriage returns":  repeat("\r"),
		"commas":            repeat(",,,,,,,,,\n"),
		"NUL":               repeat("\x00"),
		"NUL among text":    repeat("1,2\x00\n"),
		"escapes":           repeat("\x1b[2J\x1b]0;x\x07,1\n"),
		"digits":            repeat("1234567890"),
		"many scans":        []byte(wide),
		"same name":         []byte(strings.ReplaceAll(wide, "nm,S", "nm,nm")),
		"pH rows":           append([]byte("rung,pH\n"), repeat("1,7\n")...),
		"pH series":         append([]byte("time (s),pH\n"), repeat("1,7\n")...),
		"long form":         append([]byte("Sample,nm,Abs\n"), repeat("a,1,7\n")...),
		"words":             repeat("pH mV wavelength nm absorbance time "),
		"letters":           repeat("x"),
		"two-byte":          append([]byte{0xFF, 0xFE}, repeat("1\x00,\x002\x00\n\x00")...),
		"8-bit":             repeat("\xE4,\xF6\n"),
		"exponents":         repeat("1e999999999999999999,1e-99999\n"),
		"formulas and HTML": repeat("=HYPERLINK(\"x\"),<script>alert(1)</script>\n"),
	}
}

// TestHostile: large senseless input is refused or read in bounded time and
// its texts are harmless.
func TestHostile(t *testing.T) {
	for name, data := range hostile(1 << 17) {
		for _, role := range []string{"", "ph", "sheet"} {
			start := time.Now()
			c, err := Read("f", data, parse.Options{Role: role})
			if err != nil {
				harmless(t, err.Error())
			} else {
				for _, m := range c.Remarks {
					harmless(t, m.Text)
				}
				for _, s := range c.Scans {
					sane(t, s)
				}
			}
			if d := time.Since(start); d > 20*time.Second {
				t.Errorf("%s as %q took %v", name, role, d)
			} else if testing.Verbose() {
				t.Logf("%-18s %-6s %8.1f ms", name, role, 1000*d.Seconds())
			}
		}
	}
}
