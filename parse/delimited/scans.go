package delimited

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"pkvigil/parse"
)

// scans reads a file of spectra.
func (r *reader) scans() (*parse.Content, error) {
	if r.lay.Shape == "" || r.lay.Shape == "long" {
		if t := r.table("long"); t != nil && (r.lay.Shape == "long" || t.grouped()) {
			return r.long(t)
		} else if r.lay.Shape == "long" {
			return nil, r.refuse(0, "", r.opening(), "heads naming wavelength, absorbance and sample", "correct the layout")
		}
	}
	a, err := r.choose()
	if err != nil {
		return nil, r.betterReason(err)
	}
	r.noteFound(a)
	f, pre := r.preamble(a)
	if f.points > 0 && f.points > a.b.rows && a.shape != "rows" {
		return nil, r.refuse(a.b.last+1, "", fmt.Sprintf("%d rows", a.b.rows), fmt.Sprintf("%d, as the header says", f.points), "the file is cut short; export it again")
	} else if f.points > 0 && f.points < a.b.rows && a.shape != "rows" {
		r.remark(a.b.first+1, "the header says %d points, %d rows follow", f.points, a.b.rows)
	}
	if err := r.truncated(a); err != nil {
		return nil, err
	}
	var scans []parse.Scan
	switch a.shape {
	case "rows":
		scans, err = r.fromRows(a, f)
	default:
		scans, err = r.fromColumns(a, f, pre)
	}
	if err != nil {
		return nil, err
	}
	if err := r.unique(scans, a.header+1); err != nil {
		return nil, err
	}
	r.found.Shape = a.shape
	return &parse.Content{Format: "delimited", Scans: scans, Complete: r.ending(a.b.last+1, scans)}, nil
}

// noteFound keeps how the file was read for the layout that Explain prints.
func (r *reader) noteFound(a *reading) {
	r.found.Delimiter = delimiterWord(a.d.delim)
	if r.found.Delimiter == "comma" || r.found.Delimiter == "semicolon" {
		r.found.Delimiter = string(rune(a.d.delim))
	}
	r.found.Decimal = string(rune(a.d.point))
	if a.d.thousands != 0 {
		r.found.Thousands = string(rune(a.d.thousands))
	}
	if !a.named { // heads that name the wavelength are found again, on whatever line
		r.found.HeaderLine, r.found.FirstLine = a.header+1, a.b.first+1
	}
	if !r.telling {
		return
	}
	if a.header >= 0 {
		r.say(a.header+1, "%s are the heads of the columns", parse.Show(r.src.line(a.header)))
	}
	if a.units != nil {
		r.say(a.header+2, "%s are their units", parse.Show(strings.Join(a.units, " ")))
	}
}

// preamble reads the lines before the table.
func (r *reader) preamble(a *reading) (facts, []entry) {
	top := a.b.first
	if a.header >= 0 {
		top = min(top, a.header)
	}
	pre := r.entries(a.d, 0, top)
	if a.header >= 0 && a.header+1 < a.b.first { // lines between heads and rows, units left out
		from := a.header + 1
		if a.units != nil {
			from++
		}
		pre = append(pre, r.entries(a.d, from, a.b.first)...)
	}
	f := noFacts()
	for _, e := range pre {
		if e.marker || len(e.cells) > 2 && len(e.cells) >= a.b.cols-1 {
			continue // a value per column
		}
		r.learn(&f, a.d.point, e.line, e.key, e.value)
		if r.telling && e.key != "" && headerKey(e.key) != 0 {
			r.say(e.line, "%s is a header line: %s", parse.Show(e.key), parse.Show(e.value))
		}
	}
	r.settle(&f)
	return f, pre
}

// ending remarks on what follows the table and tells whether an end mark does.
func (r *reader) ending(from int, scans []parse.Scan) bool {
	complete, rest := false, 0
	for i := from; i < len(r.src.spans); i++ {
		line := r.src.line(i)
		if blank(line) {
			continue
		}
		if marker(line) == "end" {
			complete = complete || rest == 0
			continue
		}
		rest++
	}
	if rest > 0 {
		r.remark(from+1, "%d lines after the table are not read", rest)
	}
	return complete
}

// betterReason names the kind of a file that is no spectrum, where words in
// it tell.
func (r *reader) betterReason(err error) error {
	const look = 60
	var because error
	for i := range min(look, len(r.src.spans)) {
		line := r.src.line(i)
		if !wordy(line) {
			continue
		}
		for _, delim := range [...]byte{'\t', ';', ',', ' '} {
			cells := dialect{delim: delim, point: '.'}.headCells(line)
			if slices.ContainsFunc(cells, isAxis) && quantity(cells[0]) != qTime {
				return err
			}
			if len(cells) < 2 || because != nil {
				continue
			}
			if q := quantity(cells[0]); q == qTime && headerKey(cells[0]) == 0 || q == qTime && len(cells) > 2 {
				because = r.refuse(i+1, "", parse.Show(line), "wavelengths in the first column", "this is a time trace, not a spectrum")
			}
		}
	}
	if because != nil {
		return because
	}
	return err
}

// axisUnitOf finds the unit of a wavelength axis; stated is false where
// nothing says that the column holds wavelengths at all.
func (r *reader) axisUnitOf(a *reading, c int, f facts) (unit string, stated bool) {
	for _, s := range [...]string{r.lay.Abscissa, axisUnit(a.head(c)), axisUnit(a.unit(c)), axisUnit(f.axis)} {
		if s != "" {
			return s, true
		}
	}
	if quantity(a.head(c)) == qWavelength || len(r.lay.Columns) > 0 || strings.Contains(fold(f.axis), " wave") {
		return "", true
	}
	return "", false
}

// nanometres converts an axis to nanometres in place. An axis whose unit is
// not stated is taken as nanometres only where no other unit gives light that
// a UV-visible photometer measures.
func (r *reader) nanometres(axis []float64, unit string, line int) error {
	lo, hi := axis[0], axis[len(axis)-1]
	if lo > hi {
		lo, hi = hi, lo
	}
	switch unit {
	case unitNM:
	case unitUM:
		scale(axis, func(x float64) float64 { return x * 1000 })
		r.remark(line, "wavelengths are in micrometres; converted to nanometres")
	case unitAngstrom:
		scale(axis, func(x float64) float64 { return x / 10 })
		r.remark(line, "wavelengths are in angstrom; converted to nanometres")
	case unitPerCM:
		if lo <= 0 {
			return r.refuse(line, "wavenumber", fmt.Sprintf("%g", lo), "positive wavenumbers", "export the file again")
		}
		scale(axis, func(x float64) float64 { return 1e7 / x })
		r.remark(line, "the axis is in wavenumbers (1/cm); converted to nanometres")
	case "":
		if lo < 120 || hi > 1250 {
			return r.refuse(line, "wavelength", fmt.Sprintf("%g to %g without a unit", lo, hi), "a stated unit", "declare abscissa in a layout")
		}
		r.remark(line, "the unit of the wavelengths is not stated; %g to %g can only be nanometres", lo, hi)
	default:
		return r.refuse(0, "abscissa", parse.Show(unit), `"nm", "um", "angstrom" or "1/cm"`, "correct the layout")
	}
	lo, hi = axis[0], axis[len(axis)-1]
	if lo > hi {
		lo, hi = hi, lo
	}
	if lo < 100 || hi > 4000 {
		return r.refuse(line, "wavelength", fmt.Sprintf("%g to %g nm", lo, hi), "wavelengths between 100 and 4000 nm", "check the unit; declare abscissa in a layout if the header is wrong")
	}
	return nil
}

func scale(x []float64, f func(float64) float64) {
	for i := range x {
		x[i] = f(x[i])
	}
}

// ascend orders an axis and the ordinates on it and checks that the axis is
// strictly monotone.
func (r *reader) ascend(x []float64, y []float64, decs []int8, line int) error {
	if len(x) > 1 && x[0] > x[len(x)-1] {
		slices.Reverse(x)
		slices.Reverse(y)
		slices.Reverse(decs)
		r.remark(line, "wavelengths descend; put in ascending order")
	}
	for i := 1; i < len(x); i++ {
		if !(x[i] > x[i-1]) {
			return r.refuse(line, "wavelength", fmt.Sprintf("%g nm beside %g nm", x[i], x[i-1]), "a strictly monotone axis", "declare a layout if another column holds the wavelength")
		}
	}
	return nil
}

// unique refuses several traces that cannot be told apart by name.
func (r *reader) unique(scans []parse.Scan, line int) error {
	if len(scans) < 2 {
		return nil
	}
	seen := make(map[string]bool, len(scans))
	for _, s := range scans {
		if s.Label == "" || mere(s.Label) && !strings.ContainsAny(s.Label, "0123456789") {
			return r.refuse(line, "", fmt.Sprintf("%d traces without names", len(scans)), "a name at the head of each", "export with sample names, or one file per scan")
		}
		if seen[s.Label] {
			return r.refuse(line, "", fmt.Sprintf("the name %s twice", parse.Show(s.Label)), "different names for the traces", "rename the samples and export again")
		}
		seen[s.Label] = true
	}
	return nil
}

// newScan makes a scan from the facts of a header.
func newScan(f facts) parse.Scan {
	return parse.Scan{
		PathMM: f.pathMM, TemperatureC: f.temperature, BandwidthNM: f.bandwidthNM,
		Measured: f.measured, Zoned: f.zoned, Instrument: f.instrument, PH: f.ph,
		Meta: slices.Clone(f.meta), Decimals: -1,
	}
}

// finite counts the values that are numbers.
func finite(y []float64) int {
	n := 0
	for _, v := range y {
		if !math.IsNaN(v) {
			n++
		}
	}
	return n
}
