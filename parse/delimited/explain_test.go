package delimited

import (
	"fmt"
	"strings"
	"testing"

	"github.com/BurntSushi/toml"

	"pkvigil/parse"
)

// TestExplain checks that the report tells the decisions and that the layout
// it prints reads the same file to the same numbers.
func TestExplain(t *testing.T) {
	for name, x := range map[string]struct {
		text string
		opt  parse.Options
		says []string
	}{
		"comma": {spectrum(head+"Wavelength (nm),Absorbance\n", "%.1f,%.5f", 41, band), parse.Options{},
			[]string{"utf-8", "line 5", "41 lines of 2 numbers", "only reading", `"Path length (mm)" is a header line`, "[[layout]]", `abscissa = "nm"`}},
		"semicolon and comma": {comma(spectrum("Probe;QX\nWellenlänge [nm];Extinktion\n", "%.1f;%.5f", 41, band)), parse.Options{}, []string{`decimal = ","`, `delimiter = ";"`}},
		"wide":                {spectrum("Mode\tAbsorbance\nnm\tS1\tS2\n", "%.1f\t%.5f\t0.25", 41, band), parse.Options{}, []string{`columns = ["wavelength", "absorbance", "absorbance"]`}},
		"layout that does not fit": {spectrum("Wavelength (nm),Absorbance\n", "%.1f,%.5f", 41, band), parse.Options{Layouts: []parse.Layout{{Name: "other", Delimiter: ";"}}},
			[]string{`trying the declared layout "other"`, "does not fit", "only reading"}},
	} {
		report, lay := Explain("f.csv", []byte(x.text), x.opt)
		text := strings.Join(report, "\n")
		for _, s := range x.says {
			if !strings.Contains(text, s) {
				t.Errorf("%s: the report does not say %q:\n%s", name, s, text)
			}
		}
		var back struct{ Layout []parse.Layout }
		if _, err := toml.Decode(Declaration(lay), &back); err != nil || len(back.Layout) != 1 || fmt.Sprint(back.Layout[0]) != fmt.Sprint(lay) {
			t.Errorf("%s: the declaration does not decode to the layout: %v\n%s", name, err, Declaration(lay))
			continue
		}
		want := mustRead(t, x.text, x.opt)
		lay.Files = "."
		got, err := Read("f.csv", []byte(x.text), parse.Options{Layouts: []parse.Layout{lay}})
		if err != nil {
			t.Errorf("%s: its own layout is refused: %v\n%s", name, err, Declaration(lay))
			continue
		}
		if d := difference(want, got); d != "" || got.Layout != "as-found" {
			t.Errorf("%s: its own layout reads other numbers: %s", name, d)
		}
	}
	report, lay := Explain("f", []byte(comma(spectrum("", "%.1f,%.5f", 41, band))), parse.Options{})
	if text := strings.Join(report, "\n"); !strings.Contains(text, "refused: ") || lay.Name != "" {
		t.Errorf("%s", text)
	}
	report, _ = Explain("f", []byte(ladder(phHead, asIs)), parse.Options{})
	if text := strings.Join(report, "\n"); !strings.Contains(text, `shape = "ph-table"`) || !strings.Contains(text, "12 pH readings") {
		t.Errorf("%s", text)
	}
}

func TestDeclarationQuotes(t *testing.T) {
	in := parse.Layout{Name: `a "b" \c` + "\n\x1b", Files: `\.csv$`, Overflow: []string{"****", `"`}}
	var back struct{ Layout []parse.Layout }
	if _, err := toml.Decode(Declaration(in), &back); err != nil || fmt.Sprint(back.Layout[0]) != fmt.Sprint(in) {
		t.Errorf("%v: %+v", err, back)
	}
}
