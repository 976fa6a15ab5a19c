package jcamp

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"pkvigil/parse"
)

// Read makes scans of the ultraviolet and visible spectra of a file, in the
// order of their tables: wavelengths ascending in nm, absorbances decadic.
// Blocks of another kind beside them are left out with a remark; a file
// without any is refused by the name of its kind. A damaged or contradictory
// table, of whatever kind, refuses the whole file. Errors are *parse.Error.
func Read(name string, data []byte, opt parse.Options) (*parse.Content, error) {
	f, err := Decode(name, data, opt)
	if err != nil {
		return nil, err
	}
	if f.Cut != nil {
		return nil, f.Cut
	}
	c := &parse.Content{Format: "jcamp-dx", Encoding: f.Encoding, Layout: "JCAMP-DX", Complete: f.Complete, Remarks: f.Remarks}
	m := &maker{name: name, opt: opt, content: c}
	for i := range f.Blocks {
		for j := range f.Blocks[i].Tables {
			if err := f.Blocks[i].Tables[j].Err; err != nil {
				return nil, err
			}
		}
	}
	for i := range f.Blocks {
		if err := m.block(&f.Blocks[i]); err != nil {
			return nil, err
		}
	}
	if len(c.Scans) == 0 {
		return nil, m.none()
	}
	for _, r := range m.other {
		m.note(r.Line, "%s", r.Text)
	}
	return c, nil
}

// maker turns blocks into scans.
type maker struct {
	name    string
	opt     parse.Options
	content *parse.Content
	other   []parse.Remark // tables that are no scans
	kind    string         // of the first of them
	line    int
}

func (m *maker) note(line int, format string, args ...any) {
	if len(m.content.Remarks) < 2*maxRemarks {
		m.content.Remarks = append(m.content.Remarks, parse.Remark{Line: line, Text: fmt.Sprintf(format, args...)})
	}
}

func (m *maker) fail(line int, field, found, expected, remedy string) *parse.Error {
	return &parse.Error{File: m.name, Line: line, Field: field, Found: found, Expected: expected, Remedy: remedy}
}

// none refuses a file without a scan.
func (m *maker) none() error {
	return m.fail(m.line, "DATA TYPE", m.kind, "a UV/VIS SPECTRUM with XYDATA, XYPOINTS or NTUPLES",
		"other kinds of spectra are not used; correct DATA TYPE if it is wrong")
}

// left notes that a table is no scan.
func (m *maker) left(b *Block, t *Table, kind string) {
	if m.kind == "" {
		m.kind, m.line = kind, b.at("DATATYPE")
	}
	if len(m.other) < maxRemarks {
		m.other = append(m.other, parse.Remark{Line: t.Line, Text: kind + " left out: not a UV-visible spectrum"})
	}
}

// block makes scans of the tables of one block.
func (m *maker) block(b *Block) error {
	for i := range b.Tables {
		t := &b.Tables[i]
		typ := b.DataType
		if typ == "" && opticalUnits(t) {
			m.note(b.Line, "no DATA TYPE; taken as a UV-visible spectrum by its units")
		} else if !ultravioletVisible(typ) {
			m.left(b, t, parse.Show(typ))
			continue
		}
		if t.Kind == "PEAKTABLE" || t.Kind == "PEAKASSIGNMENTS" || t.Kind == "RADATA" {
			m.left(b, t, parse.Show(typ+" "+t.Kind))
			continue
		}
		if t.Doubt != nil {
			return t.Doubt
		}
		s, err := m.scan(b, t, len(b.Tables) > 1)
		if err != nil {
			return err
		}
		m.content.Scans = append(m.content.Scans, s)
		for _, r := range t.Remarks {
			m.note(r.Line, "%s", r.Text)
		}
	}
	return nil
}

// ultravioletVisible tells whether a DATA TYPE is that of a UV-visible
// spectrum. The wording was never standardised.
func ultravioletVisible(s string) bool {
	s = strings.ToUpper(s)
	for _, w := range [...]string{"SPECTRUM", "SPECTRA", "SPECTROSCOPY", "ABSORPTION", "ABSORBANCE"} {
		s = strings.ReplaceAll(s, w, "")
	}
	s = strings.Map(func(r rune) rune {
		if r < 'A' || r > 'Z' {
			return -1
		}
		return r
	}, s)
	switch s {
	case "UV", "VIS", "UVVIS", "UVVISIBLE", "VISIBLE", "ULTRAVIOLET", "ULTRAVIOLETVISIBLE", "ULTRAVIOLETVIS", "ULTRAVIOLETANDVISIBLE", "ELECTRONIC",
		"UVVISNIR", "UVVISIBLENIR", "UVNIR", "VISNIR", "VISIBLENIR":
		return true
	}
	return false
}

// opticalUnits tells whether units alone prove a UV-visible absorption spectrum.
func opticalUnits(t *Table) bool {
	_, x := abscissaUnit(t.XUnits)
	_, y := ordinateScale(t.YUnits)
	return x && y && t.Kind != "PEAKTABLE" && t.Kind != "PEAKASSIGNMENTS" && !strings.Contains(normal([]byte(t.XUnits)), "CM")
}

// scan turns one table into a scan.
func (m *maker) scan(b *Block, t *Table, several bool) (parse.Scan, error) {
	s := parse.Scan{Label: parse.Clean(b.Title), TemperatureC: math.NaN(), PH: math.NaN(), Decimals: -1, Instrument: parse.Clean(b.get("SPECTROMETERDATASYSTEM"))}
	if several || t.Page != "" {
		s.Label = strings.TrimSpace(s.Label + " " + t.Page)
	}
	x, y := t.X, t.Y // the table is not used afterwards
	if err := m.wavelengths(b, t, x); err != nil {
		return s, err
	}
	if n := len(x); n > 1 && x[0] > x[n-1] {
		slices.Reverse(x)
		slices.Reverse(y)
	}
	for i := 1; i < len(x); i++ {
		if !(x[i] > x[i-1]) {
			return s, m.fail(t.Line, t.Kind, fmt.Sprintf("%s nm beside %s nm", number(x[i]), number(x[i-1])), "wavelengths in one strict order", "a scan has one absorbance per wavelength; export the file again")
		}
	}
	var err error
	if s.Scale, err = m.absorbances(b, t, y); err != nil {
		return s, err
	}
	s.WavelengthNM, s.Absorbance = x, y
	if s.Scale == "absorbance" {
		s.Decimals = decimals(t)
	}
	if n := t.Missing; n > 0 {
		m.note(t.Line, "%d ordinates are missing or off scale", n)
	}
	m.facts(b, t, &s)
	return s, nil
}

// decimals is the number of decimals the actual ordinates were printed with:
// those of the tabulated numbers and of the factor together.
func decimals(t *Table) int {
	if t.Decimals < 0 || t.YFactor == 0 {
		return -1
	}
	n := float64(t.Decimals) - math.Log10(math.Abs(t.YFactor))
	if r := math.Round(n); math.Abs(n-r) < 1e-6 {
		n = r
	}
	return int(max(0, math.Floor(n)))
}

// abscissaUnit gives the factor that turns a wavelength into nm; 0 stands for
// a wavenumber in 1/cm.
func abscissaUnit(units string) (float64, bool) {
	u := strings.NewReplacer(" ", "", "(", "", ")", "", "[", "", "]", "", "/", "", "-", "", "^", "", "*", "", "_", "", "²", "2").Replace(strings.ToUpper(units))
	for _, w := range [...]string{"WAVELENGTH", "WAVENUMBERS", "WAVENUMBER"} {
		if rest, ok := strings.CutPrefix(u, w); ok && rest != "" {
			u = strings.TrimPrefix(rest, "IN")
		}
	}
	switch u {
	case "NANOMETERS", "NANOMETRES", "NANOMETER", "NANOMETRE", "NM":
		return 1, true
	case "MICROMETERS", "MICROMETRES", "MICROMETER", "MICROMETRE", "MICRONS", "MICRON", "UM", "µM", "ΜM":
		return 1000, true
	case "ANGSTROMS", "ANGSTROM", "ÅNGSTRÖM", "Å":
		return 0.1, true
	case "1CM", "CM1", "CM⁻¹", "RECIPROCALCENTIMETERS", "RECIPROCALCENTIMETRES", "WAVENUMBERS", "WAVENUMBER", "PERCM":
		return 0, true
	}
	return 0, false
}

// wavelengths turns abscissae into nm in place.
func (m *maker) wavelengths(b *Block, t *Table, x []float64) error {
	factor, ok := abscissaUnit(t.XUnits)
	if !ok {
		return m.fail(b.at("XUNITS"), "XUNITS", parse.Show(t.XUnits), "NANOMETERS, MICROMETERS, ANGSTROMS or 1/CM", "the unit is not guessed; correct the header")
	}
	if factor == 0 {
		m.note(b.at("XUNITS"), "wavelengths computed from wavenumbers are those in vacuum")
	}
	for i, v := range x {
		if factor != 1 {
			x[i] = inNM(v, factor)
		}
		if !(x[i] >= 50 && x[i] <= 20000) {
			return m.fail(b.at("XUNITS"), "XUNITS", fmt.Sprintf("abscissa %s in %s", number(v), parse.Show(t.XUnits)), "wavelengths from 50 to 20000 nm", "the unit does not fit the numbers; correct the header")
		}
	}
	return nil
}

// inNM turns an abscissa into nm; factor is one of abscissaUnit.
func inNM(v, factor float64) float64 {
	switch {
	case factor == 0 && v != 0:
		return 1e7 / v
	case factor == 0.1: // exact where the multiplication is not
		return v / 10
	}
	return v * factor
}

// ordinateScale gives the scale that a text of units names.
func ordinateScale(units string) (string, bool) {
	u := strings.NewReplacer(" ", "", "(", "", ")", "", "[", "", "]", "", "-", "", "_", "").Replace(strings.ToUpper(units))
	switch u {
	case "ABSORBANCE", "A", "ABS", "ABSORBANCEUNITS", "ABSORBANCEAU", "ABSUNITS", "OPTICALDENSITY", "OD":
		return "absorbance", true
	case "TRANSMITTANCE", "TRANSMISSION", "T":
		return "transmittance", true
	case "%TRANSMITTANCE", "TRANSMITTANCE%", "PERCENTTRANSMITTANCE", "TRANSMITTANCEPERCENT", "%TRANSMISSION", "TRANSMISSION%", "PERCENTTRANSMISSION", "%T", "T%":
		return "percent transmittance", true
	}
	return "", false
}

// absorbances turns ordinates into absorbance in place and names the scale
// they had. Numbers that the named scale cannot have are refused, but for
// percents under the bare word TRANSMITTANCE, which no fraction can be.
func (m *maker) absorbances(b *Block, t *Table, y []float64) (string, error) {
	scale, ok := ordinateScale(t.YUnits)
	line := b.at("YUNITS")
	if !ok {
		return "", m.fail(line, "YUNITS", parse.Show(t.YUnits), "ABSORBANCE or TRANSMITTANCE", "the unit is not guessed; correct the header")
	}
	top, ok := highest(y)
	if !ok {
		return "", m.fail(t.Line, t.Kind, "missing ordinates only", "ordinates", "export the file again")
	}
	wrong := func(remedy string) error {
		return m.fail(line, "YUNITS", fmt.Sprintf("%s with a median of %s and a maximum of %s", parse.Show(t.YUnits), number(median(y)), number(top)), "ordinates of that scale", remedy)
	}
	switch scale {
	case "absorbance":
		if mostly(y, 15) {
			return "", wrong("these numbers are no absorbances; correct YUNITS or the factor")
		}
		return scale, nil
	case "transmittance":
		if top > 2 && (!mostly(y, 1.5) || mostly(y, 150)) {
			return "", wrong("write %TRANSMITTANCE if these are percents, else correct the factor")
		}
		if top > 2 {
			scale = "percent transmittance"
			m.note(line, "TRANSMITTANCE up to %s can only be percents and is read so", number(top))
		}
	case "percent transmittance":
		if mostly(y, 150) || top <= 1.5 {
			return "", wrong("write TRANSMITTANCE if these are fractions, or correct what the numbers are")
		}
	}
	whole := 1.0
	if scale == "percent transmittance" {
		whole = 100
	}
	lost := 0
	for i, v := range y {
		if v > 0 {
			y[i] = -math.Log10(v / whole)
			continue
		}
		if v == v {
			lost++
		}
		y[i] = math.NaN()
	}
	if lost > 0 {
		m.note(t.Line, "%d transmittances of zero or below have no absorbance and count as missing", lost)
	}
	return scale, nil
}

// highest gives the largest ordinate; ok tells whether there is any.
func highest(y []float64) (top float64, ok bool) {
	top = math.Inf(-1)
	for _, v := range y {
		if v > top {
			top = v
		}
	}
	return top, !math.IsInf(top, -1)
}

// mostly tells whether more than half of the ordinates exceed a bound, which
// asks for their median without sorting them.
func mostly(y []float64, bound float64) bool {
	above, all := 0, 0
	for _, v := range y {
		if v > bound {
			above++
		}
		if v == v {
			all++
		}
	}
	return 2*above > all
}

func median(y []float64) float64 {
	v := slices.DeleteFunc(slices.Clone(y), math.IsNaN)
	slices.Sort(v)
	return v[len(v)/2]
}
