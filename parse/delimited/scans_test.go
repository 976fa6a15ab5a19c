package delimited

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"
	"time"

	"pkvigil/parse"
)

// head is a header block followed by the heads of two columns.
const head = "Sample, QX-104 r03\nMeasured, 2026-03-11T21:45:33\nPath length (mm), 10\nCell temperature (C), 25.0\n"

// spectrum prints n points of an invented band under the heads given.
func spectrum(heads, form string, n int, value func(i int) float64) string {
	var b strings.Builder
	b.WriteString(heads)
	for i := range n {
		fmt.Fprintf(&b, form+"\n", 400+2*float64(i), value(i))
	}
	return b.String()
}

// band is an invented absorption band with a little noise that repeats no value.
func band(i int) float64 {
	x := float64(i - 20)
	return 0.8*math.Exp(-x*x/120) + 0.003*math.Sin(7*float64(i))
}

func comma(s string) string { return strings.ReplaceAll(s, ".", ",") }

func mustRead(t *testing.T, text string, opt parse.Options) *parse.Content {
	t.Helper()
	c, err := Read("file.csv", []byte(text), opt)
	if err != nil {
		t.Fatalf("%v\n%.300s", err, text)
	}
	return c
}

func declared(l parse.Layout) parse.Options {
	l.Name, l.Files = "declared", "."
	return parse.Options{Layouts: []parse.Layout{l}}
}

// TestScansRead gives the same spectrum in the forms met in laboratories
// (common practice, no source) and expects the same numbers.
func TestScansRead(t *testing.T) {
	const n = 41
	plain := "Wavelength (nm),Absorbance\n"
	for name, x := range map[string]struct {
		text   string
		opt    parse.Options
		remark string // words of a remark that must be there
		tol    float64
	}{
		"comma":                       {text: spectrum(head+plain, "%.1f,%.5f", n, band)},
		"scan role":                   {text: spectrum(head+plain, "%.1f,%.5f", n, band), opt: parse.Options{Role: "blank"}},
		"semicolon":                   {text: spectrum("Wavelength (nm);Absorbance\n", "%.1f;%.5f", n, band)},
		"semicolon and comma":         {text: comma(spectrum("Wavelength (nm);Absorbance\n", "%.1f;%.5f", n, band))},
		"tab":                         {text: spectrum("Wavelength (nm)\tAbsorbance\n", "%.1f\t%.5f", n, band)},
		"tab and comma":               {text: comma(spectrum("Wellenlänge [nm]\tExtinktion\n", "%.1f\t%.5f", n, band))},
		"blanks":                      {text: spectrum("Wavelength (nm) Absorbance\n", "  %.1f   %.5f", n, band)},
		"blanks and comma":            {text: comma(spectrum("Wavelength (nm) Absorbance\n", "%.1f %.5f", n, band))},
		"comma and blank":             {text: spectrum("wavelength (nm), abs\n", "%.1f, %.5f", n, band)},
		"quoted decimal commas":       {text: comma(spectrum(`"nm","Abs"`+"\n", `"%.1f"|"%.5f"`, n, band)), remark: ""},
		"quoted numbers":              {text: spectrum(`"Wavelength (nm)","Absorbance"`+"\n", `"%.1f","%.5f"`, n, band)},
		"exponents":                   {text: spectrum(plain, "%.5E,%.8E", n, band), tol: 1e-7},
		"units row":                   {text: spectrum("Wave;Absorbance\n[nm];[Abs]\n", "%.1f;%.5f", n, band)},
		"unit row only":               {text: spectrum("Mode;Absorbance\nnm;A\n", "%.1f;%.5f", n, band)},
		"French":                      {text: comma(spectrum("Échantillon;QX\nLongueur d'onde (nm);Absorbance\n", "%.1f;%.5f", n, band))},
		"Spanish":                     {text: comma(spectrum("Longitud de onda (nm);Absorbancia\n", "%.1f;%.5f", n, band))},
		"Italian":                     {text: comma(spectrum("Lunghezza d'onda (nm);Assorbanza\n", "%.1f;%.5f", n, band))},
		"Russian":                     {text: comma(spectrum("Длина волны, нм;Оптическая плотность\n", "%.1f;%.5f", n, band)), remark: "only be nanometres"},
		"Chinese":                     {text: spectrum("波长,吸光度\n", "%.1f,%.5f", n, band), remark: "only be nanometres"},
		"no unit":                     {text: spectrum("wavelength,absorbance\n", "%.1f,%.5f", n, band), remark: "only be nanometres"},
		"trailing delimiter":          {text: spectrum("nm,Absorbance,\n", "%.1f,%.5f,", n, band)},
		"trailing flag":               {text: spectrum("nm,Absorbance,Flag\n", "%.1f,%.5f,ok", n, band)},
		"footer":                      {text: spectrum(head+plain, "%.1f,%.5f", n, band) + "\nRemarks, none\n", remark: "after the table"},
		"markers":                     {text: spectrum("X units: nm\nOrdinate: absorbance\n>>>>>Begin Data<<<<<\n", "%.1f\t%.5f", n, band) + ">>>>>End Data<<<<<\n"},
		"mode above":                  {text: spectrum("Photometric mode,Absorbance\nWavelength (nm),QX-104 r03\n", "%.1f,%.5f", n, band)},
		"thousandths":                 {text: spectrum("nm,mAU\n", "%.1f,%.2f", n, func(i int) float64 { return 1000 * band(i) }), remark: "thousandths"},
		"percent":                     {text: spectrum("Wavelength (nm),%T\n", "%.1f,%.6f", n, func(i int) float64 { return 100 * math.Pow(10, -band(i)) }), remark: "percent transmittance converted", tol: 1e-6},
		"percent in units row":        {text: spectrum("Wave;Transmittance\n[nm];[%]\n", "%.1f;%.6f", n, func(i int) float64 { return 100 * math.Pow(10, -band(i)) }), tol: 1e-6},
		"percent without sign":        {text: spectrum("nm,Transmittance\n", "%.1f,%.6f", n, func(i int) float64 { return 100 * math.Pow(10, -band(i)) }), remark: "only be in per cent", tol: 1e-6},
		"fraction":                    {text: spectrum("nm,Transmittance\n", "%.1f,%.8f", n, func(i int) float64 { return math.Pow(10, -band(i)) }), remark: "is a fraction", tol: 1e-6},
		"declared without header":     {text: spectrum("", "%.1f,%.5f", n, band), opt: declared(parse.Layout{Abscissa: "nm", Ordinate: "absorbance"})},
		"declared columns":            {text: spectrum("", "7,%.1f,%.5f,9", n, band), opt: declared(parse.Layout{Abscissa: "nm", Ordinate: "absorbance", Columns: []string{"skip", "wavelength", "absorbance", "skip"}})},
		"declared over the header":    {text: spectrum("x,y\n", "%.1f,%.5f", n, band), opt: declared(parse.Layout{Abscissa: "nm", Ordinate: "absorbance"})},
		"no line end":                 {text: strings.TrimSuffix(spectrum(plain, "%.1f,%.5f", n, band), "\n"), remark: "does not end with a line end"},
		"points declared":             {text: spectrum("Points,41\n"+plain, "%.1f,%.5f", n, band)},
		"more points than declared":   {text: spectrum("Points,40\n"+plain, "%.1f,%.5f", n, band), remark: "40 points, 41 rows"},
		"NUL bytes in header":         {text: "Operator,x\x00\x00\x00\n" + spectrum(plain, "%.1f,%.5f", n, band), remark: "NUL bytes"},
		"column counting the rows":    {text: counted41(), opt: parse.Options{}},
		"kept apart from other kinds": {text: spectrum("nm,Dark [counts],Absorbance\n", "%.1f,812,%.5f", n, band), remark: "not read"},
	} {
		t.Run(name, func(t *testing.T) {
			if name == "quoted decimal commas" {
				x.text = strings.ReplaceAll(x.text, "|", ",")
			}
			c := mustRead(t, x.text, x.opt)
			if len(c.Scans) != 1 {
				t.Fatalf("%d scans", len(c.Scans))
			}
			s := c.Scans[0]
			if len(s.WavelengthNM) != n {
				t.Fatalf("%d points, want %d", len(s.WavelengthNM), n)
			}
			tol := max(x.tol, 0.51e-5)
			for i := range n {
				if s.WavelengthNM[i] != 400+2*float64(i) || math.Abs(s.Absorbance[i]-band(i)) > tol {
					t.Fatalf("point %d: %g nm, %g; want %g nm, %g", i, s.WavelengthNM[i], s.Absorbance[i], 400+2*float64(i), band(i))
				}
			}
			if x.remark != "" && !remarked(c, x.remark) {
				t.Errorf("no remark says %q: %v", x.remark, c.Remarks)
			}
		})
	}
}

func counted41() string {
	var b strings.Builder
	b.WriteString("Technique,Absorbance\nPixel,Wavelength (nm),Processed,Raw\n")
	for i := range 41 {
		fmt.Fprintf(&b, "%d,%.1f,%.5f,%d\n", i, 400+2*float64(i), band(i), 900+i)
	}
	return b.String()
}

func remarked(c *parse.Content, words string) bool {
	return slices.ContainsFunc(c.Remarks, func(m parse.Remark) bool { return strings.Contains(m.Text, words) })
}

// TestScansRefused goes through the faults of files that a reader must see;
// the comments name them as the failure catalogue does.
func TestScansRefused(t *testing.T) {
	plain := "Wavelength (nm),Absorbance\n"
	good := spectrum(head+plain, "%.1f,%.5f", 41, band)
	third := func(i int) float64 { return band(i) + 0.1 }
	for name, x := range map[string]struct {
		text string
		opt  parse.Options
		want string // words of the message
	}{
		"empty":                  {"", parse.Options{}, "empty"},                                                           // file.empty
		"cut in a number":        {good[:len(good)-3], parse.Options{}, "cut short"},                                       // file.cut
		"cut behind a comma":     {good[:strings.LastIndex(good, ",")+1], parse.Options{}, "cut short"},                    // file.cut
		"cut in the wavelength":  {good[:strings.LastIndex(good, ",")-2], parse.Options{}, "cut short"},                    // file.cut
		"cut by the count":       {spectrum("Points,42\n"+plain, "%.1f,%.5f", 41, band), parse.Options{}, "cut short"},     // file.cut
		"cut in UTF-16":          {"\xFF\xFEW\x00a\x00v\x00e", parse.Options{}, "odd number of bytes"},                     // file.cut
		"lost character":         {"Wavelength (nm),Absorbance\n400,0.1\uFFFD\n", parse.Options{}, "cannot be decoded"},    // file.encoding
		"undefined 1252":         {"Wavelength (nm),Absorbance \xB0\x81\n400,0.1\n", parse.Options{}, "cannot be decoded"}, // file.encoding
		"comma for both":         {comma(spectrum(plain, "%.1f,%.5f", 41, band)), parse.Options{}, "which reads as"},       // file.comma
		"comma without decimals": {comma(spectrum("", "%.0f,%.3f", 41, band)), parse.Options{}, "which reads as"},          // file.comma
		"percent as absorbance":  {spectrum(plain, "%.1f,%.3f", 41, percent), parse.Options{}, "looks like transmittance"}, // file.percentT
		"two units":              {spectrum("nm,Transmittance\n", "%.1f,%.5f", 41, func(i int) float64 { return 0.1 }), parse.Options{}, "fraction or per cent"},
		"no header":              {spectrum("", "%.1f,%.5f", 41, band), parse.Options{}, "declare a layout"},      // file.percentT
		"heads of no meaning":    {spectrum("x,y\n", "%.1f,%.5f", 41, band), parse.Options{}, "declare a layout"}, // file.percentT
		"quantity not stated":    {spectrum("Wavelength (nm),S1\n", "%.1f,%.5f", 41, band), parse.Options{}, `ordinate = "absorbance"`},
		"reflectance":            {spectrum("Wavelength (nm),Reflectance\n", "%.1f,%.5f", 41, band), parse.Options{}, "Reflectance"},
		"counts":                 {spectrum("Wavelength (nm),Counts\n", "%.1f,%.5f", 41, band), parse.Options{}, "Counts"},
		"axis not monotone":      {good + "481.0,0.1\n480.5,0.2\n482.0,0.3\n", parse.Options{}, "strictly monotone"},  // file.axis
		"axis twice the same":    {good + "480.0,0.1\n", parse.Options{}, "strictly monotone"},                        // file.axis
		"axis in no range":       {spectrum(plain, "%.1f,%.5f", 41, band) + "9000,0.1\n", parse.Options{}, "4000 nm"}, // file.axis
		"axis without unit":      {strings.ReplaceAll(spectrum("wavelength,absorbance\n", "%.1f,%.5f", 41, band), "\n4", "\n24"), parse.Options{}, "a stated unit"},
		"three without names":    {strings.ReplaceAll(spectrum("nm,Abs,Abs,Abs\n", "%.1f,%.5f,0.2,0.3", 41, band), "", ""), parse.Options{}, "3 traces without names"}, // file.multi
		"three declared":         {spectrum("", "%.1f,%.5f,0.2,0.3", 41, band), declared(parse.Layout{Abscissa: "nm", Ordinate: "absorbance"}), "3 traces without names"},
		"the same name twice":    {spectrum("nm,S1 Abs,S1 Abs\n", "%.1f,%.5f,0.2", 41, band), parse.Options{}, "twice"},
		"nothing but overflow":   {spectrum(plain, "%.1f,****%.0s", 41, band), parse.Options{}, ""},                                                // file.sentinel
		"time trace":             {spectrum("Wavelength (nm),578\n\nTime (s),Absorbance\n", "%.1f,%.5f", 41, band), parse.Options{}, "time trace"}, // file.otherkind
		"time and wavelengths":   {spectrum("Time (s),A 590 nm,A 434 nm\n", "%.1f,%.5f,0.2", 41, band), parse.Options{}, "time trace"},             // file.otherkind
		"single wavelength":      {plain + "434,0.2\n590,0.4\n", parse.Options{}, "at least 5 points"},                                             // file.otherkind
		"damaged line":           {strings.Replace(good, "440.0,0.", "440.0,0x", 1), parse.Options{}, "damaged line"},
		"missing field":          {strings.Replace(good, "440.0,", "440.0", 1), parse.Options{}, "numbers"},
		"two tables":             {good + "\n" + spectrum(plain, "%.1f,%.5f", 41, third), parse.Options{}, "second table"},
		"no text":                {strings.Repeat("\x00\x01\x02\x00", 500), parse.Options{}, ""},
		"endless line":           {"1," + strings.Repeat("2,", 1<<20), parse.Options{}, "bytes"},
		"too large":              {good, parse.Options{MaxBytes: 100}, "at most 100"},
		"pattern that is none":   {good, parse.Options{Layouts: []parse.Layout{{Name: "x", Files: "("}}}, "regular expression"},
		"layout that fails":      {good, declared(parse.Layout{Delimiter: ";"}), ""},
		"unknown ordinate":       {good, declared(parse.Layout{Ordinate: "brightness"}), "correct the layout"},
		"unknown encoding":       {good, declared(parse.Layout{Encoding: "klingon"}), "correct the layout"},
	} {
		t.Run(name, func(t *testing.T) {
			c, err := Read("folder/file.csv", []byte(x.text), x.opt)
			if err == nil {
				t.Fatalf("read: %d scans, %v", len(c.Scans), c.Remarks)
			}
			e, ok := errors.AsType[*parse.Error](err)
			if !ok || e.File != "folder/file.csv" || e.Expected == "" || e.Remedy == "" {
				t.Fatalf("%#v does not say where, what and what to do", err)
			}
			if !strings.Contains(err.Error(), x.want) {
				t.Errorf("%v does not say %q", err, x.want)
			}
			t.Log(err)
		})
	}
}

func percent(i int) float64 { return 100 * math.Pow(10, -band(i)) }

// TestAxes converts and reorders axes and says so (file.axis).
func TestAxes(t *testing.T) {
	for name, x := range map[string]struct {
		heads, form string
		axis        func(nm float64) float64
		remark      string
	}{
		"wavenumber": {"Wavenumber (cm-1),Absorbance\n", "%.9f,%.5f\n", func(nm float64) float64 { return 1e7 / nm }, "wavenumbers"},
		"micrometre": {"Wavelength (µm),Absorbance\n", "%.9f,%.5f\n", func(nm float64) float64 { return nm / 1000 }, "micrometres"},
		"angstrom":   {"Wavelength (Å),Absorbance\n", "%.9f,%.5f\n", func(nm float64) float64 { return nm * 10 }, "angstrom"},
		"descending": {"Wavelength (nm),Absorbance\n", "%.9f,%.5f\n", func(nm float64) float64 { return nm }, "descend"},
	} {
		var b strings.Builder
		b.WriteString(x.heads)
		for i := range 41 {
			j := i
			if name == "descending" {
				j = 40 - i
			}
			fmt.Fprintf(&b, x.form, x.axis(400+2*float64(j)), band(j))
		}
		c := mustRead(t, b.String(), parse.Options{})
		s := c.Scans[0]
		for i := range 41 {
			if math.Abs(s.WavelengthNM[i]-400-2*float64(i)) > 1e-4 || math.Abs(s.Absorbance[i]-band(i)) > 1e-5 {
				t.Fatalf("%s: point %d is %g nm, %g", name, i, s.WavelengthNM[i], s.Absorbance[i])
			}
		}
		if !remarked(c, x.remark) {
			t.Errorf("%s: no remark says %q: %v", name, x.remark, c.Remarks)
		}
	}
}

// TestOverflow masks the marks of an overflow and nothing else (file.sentinel).
func TestOverflow(t *testing.T) {
	for _, mark := range []string{"****", "inf", "OVER", "-", "9.999", "NaN", "", "99.9999", "#####", "1.#INF", "SAT", "+++++", "4.000"} {
		lines := strings.Split(strings.TrimSpace(spectrum("Wavelength (nm);Absorbance\n", "%.1f;%.5f", 41, band)), "\n")
		for i := 18; i < 23; i++ {
			lines[1+i] = lines[1+i][:strings.Index(lines[1+i], ";")+1] + mark
		}
		c := mustRead(t, strings.Join(lines, "\n")+"\n", parse.Options{})
		for i, a := range c.Scans[0].Absorbance {
			if masked := math.IsNaN(a); masked != (i >= 18 && i < 23) {
				t.Errorf("mark %q: point %d is %g", mark, i, a)
			}
		}
		if mark != "" && !remarked(c, "436 to 444 nm are marked as overflow") {
			t.Errorf("mark %q: %v", mark, c.Remarks)
		}
	}
	c := mustRead(t, spectrum("nm;Absorbance\n", "%.1f;%.5f", 41, band), declared(parse.Layout{Overflow: []string{"0.79980"}}))
	if n := finite(c.Scans[0].Absorbance); n != 41 {
		t.Errorf("%d values left though no cell is the declared mark", n)
	}
	top := fmt.Sprintf("%.5f", band(20))
	c = mustRead(t, spectrum("nm;Absorbance\n", "%.1f;%.5f", 41, band), declared(parse.Layout{Overflow: []string{top}}))
	if !math.IsNaN(c.Scans[0].Absorbance[20]) {
		t.Error("a declared mark is not masked")
	}
}

// TestSideBySide reads several scans in one file.
func TestSideBySide(t *testing.T) {
	var shared, pairs, rows, long, unsorted strings.Builder
	shared.WriteString("Sample,QX r01,QX r02,QX blank\npH,6.2,7.4,\nMeasured,2026-03-11T21:45:33,2026-03-11T21:55:33,2026-03-11T22:05:33\nWavelength (nm),Absorbance,Absorbance,Absorbance\n")
	pairs.WriteString("Data mode,Absorbance\nQX r01,,QX r02,,QX blank,\nWavelength (nm),Abs,Wavelength (nm),Abs,Wavelength (nm),Abs\n")
	long.WriteString("Sample;pH;Wavelength (nm);Absorbance\n")
	rows.WriteString("Mode\tAbsorbance\nSample\\nm")
	for i := range 41 {
		x := 400 + 2*float64(i)
		fmt.Fprintf(&shared, "%g,%.5f,%.5f,%.5f\n", x, band(i), 2*band(i), band(i)/10)
		tail := fmt.Sprintf("%.4f,%.5f", x+0.02, band(i)/10)
		if i > 35 {
			tail = "," // the last scan is shorter
		}
		fmt.Fprintf(&pairs, "%.4f,%.5f,%.4f,%.5f,%s\n", x, band(i), x+0.01, 2*band(i), tail)
		fmt.Fprintf(&rows, "\t%g", x)
	}
	for k, label := range []string{"QX r01", "QX r02", "QX blank"} {
		fmt.Fprintf(&rows, "\n%s", label)
		for i := range 41 {
			v := []float64{band(i), 2 * band(i), band(i) / 10}[k]
			fmt.Fprintf(&rows, "\t%.5f", v)
			fmt.Fprintf(&long, "%s;%s;%g;%.5f\n", label, []string{"6.2", "7.4", ""}[k], 400+2*float64(i), v)
		}
	}
	rows.WriteString("\n")
	for i := range 41 { // long form ordered by wavelength
		for k, label := range []string{"QX r01", "QX r02", "QX blank"} {
			if i == 0 && k == 0 {
				unsorted.WriteString("Wavelength (nm),Absorbance,Sample\n")
			}
			fmt.Fprintf(&unsorted, "%g,%.5f,%s\n", 480-2*float64(i), []float64{band(40 - i), 2 * band(40-i), band(40-i) / 10}[k], label)
		}
	}
	for name, text := range map[string]string{"shared": shared.String(), "pairs": pairs.String(), "rows": rows.String(), "long": long.String(), "long by wavelength": unsorted.String()} {
		c := mustRead(t, text, parse.Options{})
		if len(c.Scans) != 3 {
			t.Errorf("%s: %d scans", name, len(c.Scans))
			continue
		}
		for k, s := range c.Scans {
			want, n := []string{"QX r01", "QX r02", "QX blank"}[k], 41
			if name == "pairs" && k == 2 {
				n = 36
			}
			if s.Label != want || len(s.Absorbance) != n || s.Scale != "absorbance" || s.Decimals != 5 {
				t.Errorf("%s: scan %d is %q with %d points, %d decimals", name, k, s.Label, len(s.Absorbance), s.Decimals)
			}
			for i, a := range s.Absorbance {
				if v := []float64{band(i), 2 * band(i), band(i) / 10}[k]; math.Abs(a-v) > 1e-5 {
					t.Errorf("%s: scan %d point %d is %g, want %g", name, k, i, a, v)
					break
				}
			}
			if x := 400 + 0.01*float64(k); name == "pairs" && s.WavelengthNM[0] != x {
				t.Errorf("%s: scan %d begins at %g, want %g", name, k, s.WavelengthNM[0], x)
			}
		}
		if name == "shared" || name == "long" {
			if c.Scans[0].PH != 6.2 || c.Scans[1].PH != 7.4 || !math.IsNaN(c.Scans[2].PH) {
				t.Errorf("%s: pH %g %g %g", name, c.Scans[0].PH, c.Scans[1].PH, c.Scans[2].PH)
			}
		}
		if name == "shared" && !c.Scans[1].Measured.Equal(time.Date(2026, 3, 11, 21, 55, 33, 0, time.UTC)) {
			t.Errorf("%s: measured %v", name, c.Scans[1].Measured)
		}
	}
	night := strings.ReplaceAll(strings.ReplaceAll(shared.String(), "Absorbance,Absorbance,Absorbance", "TB-2219|r04|8.41,TB-2219|r05|8.77,TB-2219|blank"), "Sample,QX r01,QX r02,QX blank\n", "")
	c := mustRead(t, night, declared(parse.Layout{Ordinate: "absorbance"}))
	if len(c.Scans) != 3 || c.Scans[0].Label != "TB-2219|r04|8.41" {
		t.Errorf("a column's head is not its label: %q", c.Scans[0].Label)
	}
}

// TestHeaderFacts keeps what a header says and leaves open what it does not.
func TestHeaderFacts(t *testing.T) {
	vienna, err := time.LoadLocation("Europe/Vienna")
	if err != nil {
		t.Skipf("no zone data: %v", err)
	}
	read := func(block string) *parse.Content {
		t.Helper()
		return mustRead(t, spectrum(block+"\nWavelength (nm);Absorbance\n", "%.1f;%.5f", 41, band), parse.Options{Zone: vienna})
	}
	c := read("Probe: QX-104\nDatum: 11.03.2026\nUhrzeit: 21:45:33\nSchichtdicke: 1 cm\nTemperatur: 25,1 °C\nSpektrale Bandbreite: 1,5 nm\nGerät: U2\nBediener: A. Weld\nIntegrationszeit: 100 ms")
	s := c.Scans[0]
	if s.Label != "QX-104" || s.PathMM != 10 || s.TemperatureC != 25.1 || s.BandwidthNM != 1.5 || s.Instrument != "U2" || s.Zoned ||
		!s.Measured.Equal(time.Date(2026, 3, 11, 21, 45, 33, 0, vienna)) {
		t.Errorf("%+v", s)
	}
	if !slices.Contains(s.Meta, parse.Field{Key: "Integrationszeit", Value: "100 ms"}) || !slices.Contains(s.Meta, parse.Field{Key: "Bediener", Value: "A. Weld"}) {
		t.Errorf("header lines lost: %v", s.Meta)
	}
	for block, remark := range map[string]string{
		"Date: 03/04/2026\nTime: 10:00:00": "can be 3 April 2026 or 4 March 2026",
		"Path length: 1":                   "states no unit",
		"Temperature: -14.5":               "no temperature of an aqueous solution",
		"Measured: 2026-10-25T02:30:00":    "occurs twice",
		"Measured: 1899-12-30T00:00:00":    "year 1899",
		"Date: 11/03/26\nTime: 21:45":      "can be",
		"Date: 2026-03-11 25:00":           "no time",
		"Date: Wed Mar 11 21:45 EST 2026":  "several meanings",
		"Date: 2026-13-11\nTime: 21:45:00": "no date",
		"Path length: -1 mm":               "no path length",
		"Temperature: 25":                  "degrees Celsius",
	} {
		if c := read(block); !remarked(c, remark) {
			t.Errorf("%q: no remark says %q: %v", block, remark, c.Remarks)
		}
	}
	for block, want := range map[string]time.Time{
		"Date: 03-23-2026, 12:15:51":            time.Date(2026, 3, 23, 12, 15, 51, 0, vienna),
		"Date: 23/03/2026\nTime: 9:05:00 PM":    time.Date(2026, 3, 23, 21, 5, 0, 0, vienna),
		"Date: Mon Mar 23 02:15:43 2026":        time.Date(2026, 3, 23, 2, 15, 43, 0, vienna),
		"Fecha: Thu Apr 20 21:15:04 CEST 2017":  time.Date(2017, 4, 20, 19, 15, 4, 0, time.UTC),
		"Measured: 2026-03-11T21:45:33+02:00":   time.Date(2026, 3, 11, 19, 45, 33, 0, time.UTC),
		"Measured: 2026-03-11 21:45:33":         time.Date(2026, 3, 11, 21, 45, 33, 0, vienna),
		"Time: 2026/03/11_09:24:26":             time.Date(2026, 3, 11, 9, 24, 26, 0, vienna),
		"Datum: 11. März 2026\nZeit: 21:45":     time.Date(2026, 3, 11, 21, 45, 0, 0, vienna),
		"Date: 11-Mar-2026\nTime: 21:45:00":     time.Date(2026, 3, 11, 21, 45, 0, 0, vienna),
		"Date: 05/05/2026\nTime: 21:45:00":      time.Date(2026, 5, 5, 21, 45, 0, 0, vienna),
		"Timestamp: 2026-03-11 00:53:36.877725": time.Date(2026, 3, 11, 0, 53, 36, 877725000, vienna),
	} {
		if c := read(block); !c.Scans[0].Measured.Equal(want) {
			t.Errorf("%q: %v, want %v; %v", block, c.Scans[0].Measured, want, c.Remarks)
		}
	}
}

// TestThousands reads grouped numbers where that is the only reading, or a
// layout says so.
func TestThousands(t *testing.T) {
	var mixed, spaced, apostrophe strings.Builder
	mixed.WriteString("Wavelength (nm)\tAbsorbance\n")
	spaced.WriteString("Wellenlänge (nm);Extinktion\n")
	apostrophe.WriteString("nm;A\n")
	for i := range 41 {
		x := fmt.Sprintf("%d", 980+i)
		if i >= 20 {
			x = fmt.Sprintf("1,%03d", 980+i-1000)
		}
		fmt.Fprintf(&mixed, "%s.5\t%.5f\n", x, band(i))
		fmt.Fprintf(&spaced, "%s,5;%s\n", strings.ReplaceAll(x, ",", "\u00a0"), comma(fmt.Sprintf("%.5f", band(i))))
		fmt.Fprintf(&apostrophe, "%s.5;%.5f\n", strings.ReplaceAll(x, ",", "'"), band(i))
	}
	for name, x := range map[string]struct {
		text string
		opt  parse.Options
	}{
		"point and comma":     {mixed.String(), parse.Options{}},
		"declared":            {mixed.String(), declared(parse.Layout{Thousands: ","})},
		"no-break space":      {spaced.String(), declared(parse.Layout{Thousands: "space"})},
		"declared apostrophe": {apostrophe.String(), declared(parse.Layout{Thousands: "'", Ordinate: "absorbance"})},
	} {
		c := mustRead(t, x.text, x.opt)
		s := c.Scans[0]
		if len(s.WavelengthNM) != 41 || s.WavelengthNM[0] != 980.5 || s.WavelengthNM[40] != 1020.5 || math.Abs(s.Absorbance[40]-band(40)) > 1e-5 {
			t.Errorf("%s: %d points from %g to %g", name, len(s.WavelengthNM), s.WavelengthNM[0], s.WavelengthNM[len(s.WavelengthNM)-1])
		}
	}
	for cell, want := range map[string]float64{"1,234.5": 1234.5, "12,345,678": 12345678, "-1,000.25": -1000.25, "999.5": 999.5} {
		if v, k := (dialect{delim: '\t', point: '.', thousands: ','}).number([]byte(cell)); v != want || k < 0 {
			t.Errorf("%q is %g", cell, v)
		}
	}
	for _, cell := range []string{"1,23.4", "1234,567", ",123", "1,,234", "12,34", "1,234,5", "1,2345.6"} {
		if v, k := (dialect{delim: '\t', point: '.', thousands: ','}).number([]byte(cell)); k != cellText {
			t.Errorf("%q is read as %g", cell, v)
		}
	}
}

// TestQuotes undoes RFC 4180 quotes.
func TestQuotes(t *testing.T) {
	d := dialect{delim: ',', point: '.'}
	for line, want := range map[string][]string{
		`a,b`:             {"a", "b"},
		`"a,b",c`:         {"a,b", "c"},
		`"say ""no""",""`: {`say "no"`, ""},
		` "a" , b `:       {"a", "b"},
		`"open,b`:         {"open,b"},
		`a"b,c`:           {`a"b`, "c"},
		`,`:               {"", ""},
		`"""",x`:          {`"`, "x"},
		`"a" junk,b`:      {"a", "b"},
	} {
		var got []string
		for _, f := range d.split([]byte(line), nil) {
			got = append(got, string(f))
		}
		if !slices.Equal(got, want) {
			t.Errorf("%s: %q, want %q", line, got, want)
		}
	}
}

// TestContradiction: a layout for every file gives way to what a file says, a
// layout bound to it by name overrides it and says so.
func TestContradiction(t *testing.T) {
	text := spectrum("Wavelength (nm),Absorbance\n", "%.1f,%.5f", 41, band)
	for _, l := range []parse.Layout{{Name: "t", Ordinate: "percent transmittance"}, {Name: "u", Abscissa: "um"}} {
		c := mustRead(t, text, parse.Options{Layouts: []parse.Layout{l}})
		if s := c.Scans[0]; s.Scale != "absorbance" || s.WavelengthNM[0] != 400 || c.Layout == l.Name {
			t.Errorf("layout %s: %s from %g nm", l.Name, s.Scale, s.WavelengthNM[0])
		}
	}
	c := mustRead(t, strings.ReplaceAll(text, "Absorbance", "Transmittance"), declared(parse.Layout{Ordinate: "absorbance"}))
	if c.Scans[0].Scale != "absorbance" || !remarked(c, "the file says transmittance") {
		t.Errorf("%s, %v", c.Scans[0].Scale, c.Remarks)
	}
	c = mustRead(t, strings.ReplaceAll(text, "(nm)", "(um)"), declared(parse.Layout{Abscissa: "nm"}))
	if c.Scans[0].WavelengthNM[0] != 400 || !remarked(c, "the file says um") {
		t.Errorf("%g, %v", c.Scans[0].WavelengthNM[0], c.Remarks)
	}
}
