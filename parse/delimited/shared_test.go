package delimited

import (
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
	"text/tabwriter"

	"pkvigil/parse"
)

// sharedDir finds the folder of real exports beside the module, or skips.
func sharedDir(t testing.TB, name string) string {
	t.Helper()
	dir, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	for {
		if _, err := os.Stat(filepath.Join(dir, "go.mod")); err == nil {
			break
		}
		if filepath.Dir(dir) == dir {
			t.Skip("no go.mod above the test")
		}
		dir = filepath.Dir(dir)
	}
	at := filepath.Join(dir, "..", "shared", "data", name)
	if _, err := os.Stat(at); err != nil {
		t.Skipf("the folder of real exports is not here: %v", err)
	}
	return at
}

// outcome is what must happen to a real file without any declared layout:
// read, or refused with a message that holds these words.
var sharedOutcome = map[string]string{
	"absmatrix-wide-minutes-descending.csv":         `ordinate = "absorbance"`,
	"absscan-csv-dotted-header-descending.csv":      `ordinate = "absorbance"`,
	"absscan-csv-noheader-b.csv":                    `abscissa = "nm"`,
	"absscan-keyvalue-preamble-6col.csv":            "read",
	"dashdata-instrument-header.txt":                "wavelength",
	"logger-thousands-separator.txt":                "refused",
	"markers-column-letters.txt":                    "wavelength",
	"markers-latin1-spanish-decimal-comma.txt":      "wavelength",
	"markers-scientific-mixed-eol.txt":              "absorbance or transmittance",
	"markers-tab-transmission-mdY.txt":              "wavelength",
	"not-a-spectrum.txt":                            "refused",
	"quoted-preamble-fixedwidth.txt":                "wavelength",
	"scans-columns-4header-rows-trailing-comma.csv": "second table",
	"semicolon-2headers-2col.txt":                   "read",
	"semicolon-2headers-5col.txt":                   "read",
	"semicolon-decimal-comma-5col.txt":              "read",
	"semicolon-padded-blank-first-line.txt":         "absorbance or transmittance",
	"sequence-number-header.txt":                    "Intensities",
	"tab-keyvalue-then-table.txt":                   "refused",
	"threelines-tab.txt":                            "Reflectance",
	"titration-broken-header.csv":                   "refused",
	"titration-mv-csv.csv":                          "no spectrum",
	"titration-report-sections-b.txt":               "refused",
	"twocol-noheader.csv":                           `abscissa = "nm"`,
}

// TestShared reads every real export without a declared layout, checks that
// the numbers of its table are found as its description says whatever they
// mean, and prints what became of it.
func TestShared(t *testing.T) {
	dir := sharedDir(t, "delimited")
	f, err := os.Open(filepath.Join(dir, "LAYOUTS.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var table strings.Builder
	w := tabwriter.NewWriter(&table, 2, 0, 2, ' ', 0)
	for _, row := range rows[1:] {
		name := row[0]
		data, err := os.ReadFile(filepath.Join(dir, name))
		if err != nil {
			t.Error(err)
			continue
		}
		c, err := Read(name, data, parse.Options{})
		numbers := checkTable(t, name, data, row)
		if err != nil {
			if e, ok := err.(*parse.Error); !ok || e.Expected == "" || e.Remedy == "" {
				t.Errorf("%s: the refusal %v does not say what was expected and what to do", name, err)
			}
			if want := sharedOutcome[name]; want == "read" || want != "refused" && !strings.Contains(err.Error(), want) {
				t.Errorf("%s: refused with %q, want %q", name, err, want)
			}
			fmt.Fprintf(w, "%s\trefused\t%s\t%s\n", name, numbers, strings.TrimPrefix(err.Error(), name))
			continue
		}
		if sharedOutcome[name] != "read" {
			t.Errorf("%s: read, want refused", name)
		}
		s := c.Scans[0]
		fmt.Fprintf(w, "%s\tread\t%s\t%d scans, %g-%g nm, %s, %d remarks\n", name, numbers, len(c.Scans), s.WavelengthNM[0], s.WavelengthNM[len(s.WavelengthNM)-1], s.Scale, len(c.Remarks))
	}
	w.Flush()
	t.Log("\n" + table.String())
}

// checkTable looks for a reading of the file whose table has the described
// number of rows and columns and the described first and last row.
func checkTable(t *testing.T, name string, data []byte, row []string) string {
	t.Helper()
	want, err := strconv.Atoi(row[9])
	if err != nil || want < 2 || name == "tab-keyvalue-then-table.txt" || name == "logger-thousands-separator.txt" {
		return "no table of plain numbers"
	}
	cols, err := strconv.Atoi(row[11])
	if err != nil {
		t.Fatal(err)
	}
	text, _, err := parse.Decode(name, data, "")
	if err != nil {
		t.Errorf("%s: %v", name, err)
		return "not decoded"
	}
	text, _ = silence(text)
	src, err := cut(name, text)
	if err != nil {
		t.Errorf("%s: %v", name, err)
		return "not cut"
	}
	r := &reader{src: src}
	for _, d := range r.candidates(false) {
		g := d.survey(src)
		for _, b := range g.blocks {
			b = g.trim(b)
			if b.rows == want && b.cols == cols && sameRow(g, b, 0, row[12], row[7]) && sameRow(g, b, b.rows-1, row[13], row[7]) {
				return fmt.Sprintf("%d x %d numbers as described", b.rows, b.cols)
			}
		}
	}
	t.Errorf("%s: no reading gives %d rows of %d numbers from %q to %q", name, want, cols, row[12], row[13])
	return "other numbers"
}

func sameRow(g *grid, b block, i int, described, mark string) bool {
	for c, cell := range strings.Split(described, "|") {
		cell = strings.TrimSpace(cell)
		if mark == "comma" {
			cell = strings.ReplaceAll(cell, ",", ".")
		}
		v, err := strconv.ParseFloat(cell, 64)
		if err != nil || c >= b.cols || g.value(b, i, c) != v {
			return false
		}
	}
	return true
}

// TestSharedDeclared reads real exports under declared layouts and checks
// values against the files' own lines.
func TestSharedDeclared(t *testing.T) {
	dir := sharedDir(t, "delimited")
	counts := parse.Layout{Name: "counts", Files: ".", Abscissa: "nm", Ordinate: "counts", Columns: []string{"wavelength", "dark", "reference", "sample", "skip"}}
	for _, x := range []struct {
		file   string
		lay    parse.Layout
		scans  int
		points int
		first  float64 // wavelength and absorbance of the lowest point of the first scan
		a      float64
	}{
		{"absscan-csv-dotted-header-descending.csv", parse.Layout{Name: "d", Files: ".", Ordinate: "absorbance"}, 1, 258, 231, 0.312803},
		{"absscan-csv-noheader-b.csv", parse.Layout{Name: "d", Files: ".", Ordinate: "absorbance", Abscissa: "nm"}, 1, 521, 230, 0.0782},
		{"absmatrix-wide-minutes-descending.csv", parse.Layout{Name: "d", Files: ".", Ordinate: "absorbance"}, 35, 551, 250, 0.0529},
		{"absscan-keyvalue-preamble-6col.csv", parse.Layout{}, 1, 1024, 247.94, 0.18046},
		{"markers-tab-transmission-mdY.txt", parse.Layout{Name: "d", Files: ".", Ordinate: "percent transmittance", Abscissa: "nm"}, 1, 3648, 178.53, -math.Log10(0.95380)},
		{"semicolon-2headers-2col.txt", parse.Layout{}, 1, 401, 300, -math.Log10(0.031487)},
		{"semicolon-decimal-comma-5col.txt", parse.Layout{}, 1, 1453, 299.87, -math.Log10(0.018921)},
		{"semicolon-decimal-comma-5col.txt", counts, 1, 1453, 299.87, -math.Log10((124.99 - 3.4050) / (6429.1 - 3.4050))},
	} {
		data, err := os.ReadFile(filepath.Join(dir, x.file))
		if err != nil {
			t.Error(err)
			continue
		}
		opt := parse.Options{}
		if x.lay.Name != "" {
			opt.Layouts = []parse.Layout{x.lay}
		}
		c, err := Read(x.file, data, opt)
		if err != nil {
			t.Error(err)
			continue
		}
		s := c.Scans[0]
		if len(c.Scans) != x.scans || len(s.WavelengthNM) != x.points || s.WavelengthNM[0] != x.first || math.Abs(s.Absorbance[0]-x.a) > 1e-12 {
			t.Errorf("%s: %d scans of %d points from %g nm, %g; want %d of %d from %g nm, %g", x.file, len(c.Scans), len(s.WavelengthNM), s.WavelengthNM[0], s.Absorbance[0],
				x.scans, x.points, x.first, x.a)
		}
	}
}

// TestSharedCounts compares the absorbance computed from the counts in a real
// export with the transmittance the same file states: they agree as far as
// that was printed.
func TestSharedCounts(t *testing.T) {
	dir := sharedDir(t, "delimited")
	for _, file := range []string{"semicolon-decimal-comma-5col.txt", "semicolon-2headers-5col.txt"} {
		data, err := os.ReadFile(filepath.Join(dir, file))
		if err != nil {
			t.Fatal(err)
		}
		stated, err := Read(file, data, parse.Options{})
		if err != nil {
			t.Fatal(err)
		}
		own, err := Read(file, data, parse.Options{Layouts: []parse.Layout{{Name: "counts", Files: ".", Abscissa: "nm", Ordinate: "counts",
			Columns: []string{"wavelength", "dark", "reference", "sample", "skip"}}}})
		if err != nil {
			t.Fatal(err)
		}
		bad := 0
		for i, a := range stated.Scans[0].Absorbance {
			if d := math.Abs(a - own.Scans[0].Absorbance[i]); d > 2e-3 {
				bad++
			}
		}
		if n := len(stated.Scans[0].Absorbance); 50*bad > n {
			t.Errorf("%s: %d of %d absorbances from counts differ from the stated ones by more than 0.002", file, bad, n)
		}
	}
}

// TestSharedRecoded re-encodes real exports as other programs would write
// them and expects the same numbers.
func TestSharedRecoded(t *testing.T) {
	dir := sharedDir(t, "delimited")
	data, err := os.ReadFile(filepath.Join(dir, "absscan-keyvalue-preamble-6col.csv"))
	if err != nil {
		t.Fatal(err)
	}
	want, err := Read("a", data, parse.Options{})
	if err != nil {
		t.Fatal(err)
	}
	for name, bytes := range recodings(string(data)) {
		got, err := Read(name, bytes, parse.Options{})
		if err != nil {
			t.Errorf("%s: %v", name, err)
			continue
		}
		for i, a := range want.Scans[0].Absorbance {
			if got.Scans[0].Absorbance[i] != a || got.Scans[0].WavelengthNM[i] != want.Scans[0].WavelengthNM[i] {
				t.Errorf("%s: point %d differs", name, i)
				break
			}
		}
	}
}
