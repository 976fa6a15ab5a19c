package delimited

import (
	"bytes"
	"fmt"
	"math"
	"slices"

	"pkvigil/parse"
)

// Least numbers of points of a spectrum, and the most columns.
const (
	leastPoints   = 5
	leastDeclared = 2
	maxTraces     = 4096 // columns of one file
)

// A reading is the numeric part of a file under one dialect.
type reading struct {
	d      dialect
	g      *grid
	b      block
	header int      // index of the line with the heads, -1: none
	heads  []string // one per column, nil without header
	units  []string // cells of a units row, nil without
	axes   []int    // columns with wavelengths, at least one
	named  bool     // the heads say which column holds the wavelength
	shape  string   // "columns", "pairs" or "rows"
	row    []float64
	err    error // why it is no spectrum, nil if it can be one
}

// candidates lists the dialects worth trying, the likeliest first.
func (r *reader) candidates(grouped bool) []dialect {
	var out []dialect
	delims := []byte{'\t', ';', ',', '|', ' '}
	if d := delimiterByte(r.lay.Delimiter); d != 0 {
		delims = []byte{d}
	}
	points := []byte{'.', ','}
	if r.lay.Decimal != "" {
		points = []byte{r.lay.Decimal[0]}
	}
	has := func(c byte) bool { return bytes.IndexByte(r.src.text, c) >= 0 }
	for _, delim := range delims {
		if !has(delim) && !(delim == ' ' && has('\t')) {
			continue
		}
		for _, point := range points {
			if point == ',' && !has(',') && r.lay.Decimal == "" {
				continue
			}
			d := dialect{delim: delim, point: point, marks: r.lay.Overflow}
			switch {
			case r.lay.Thousands != "":
				d.thousands = thousandsByte(r.lay.Thousands)
			case grouped:
				if d.thousands = byte('.' + ',' - point); !has(d.thousands) || d.thousands == delim {
					continue
				}
			}
			if point == delim {
				d.joined = !has('"') && !grouped
				if !d.joined && !has('"') {
					continue
				}
			}
			out = append(out, d)
		}
	}
	return out
}

func delimiterByte(word string) byte {
	switch word {
	case "":
		return 0
	case "tab", "\t":
		return '\t'
	case "space", " ":
		return ' '
	case "comma":
		return ','
	case "semicolon":
		return ';'
	}
	return word[0]
}

func thousandsByte(word string) byte {
	if word == "space" {
		return ' '
	}
	return word[0]
}

// choose finds the only reading of the file, or refuses.
func (r *reader) choose() (*reading, error) {
	good, bad := r.assessAll(false)
	if len(good) == 0 {
		more, _ := r.assessAll(true)
		good = append(good, more...)
	}
	good = r.distinct(good)
	switch len(good) {
	case 1:
		g := good[0]
		r.say(0, "read with %s: the only reading with a strictly monotone axis and numeric columns", g.d)
		return g, nil
	case 0:
		if len(bad) > 0 {
			return nil, bad[0].err
		}
		return nil, r.refuse(0, "", r.opening(), "lines of numbers with a wavelength axis",
			"check that this is an export of a scan; declare a layout if it is")
	}
	a, b := good[0], good[1]
	line := r.src.line(a.b.first)
	return nil, r.refuse(a.b.first+1, "decimal sign",
		fmt.Sprintf("%s, which reads as %s (%s) and as %s (%s)", parse.Show(line), a.sample(), a.d, b.sample(), b.d),
		"one reading", "declare delimiter and decimal in a layout, or export with a decimal point")
}

// assessAll assesses the hopeful dialects, or all where none is hopeful.
// bad are sorted by the number of rows they nearly read.
func (r *reader) assessAll(grouped bool) (good, bad []*reading) {
	all := r.candidates(grouped)
	some := slices.DeleteFunc(slices.Clone(all), func(d dialect) bool { return !d.hopeful(r.src) })
	if len(some) == 0 {
		some = all
	}
	for _, d := range some {
		a := r.assess(d)
		switch {
		case a == nil:
			r.say(0, "%s: no lines of numbers", d)
		case a.err != nil:
			r.say(0, "%s: %v", d, a.err)
			bad = append(bad, a)
		default:
			r.say(a.b.first+1, "%s: %d lines of %d numbers from here", d, a.b.rows, a.b.cols)
			good = append(good, a)
		}
	}
	slices.SortStableFunc(bad, func(a, b *reading) int { return b.b.rows - a.b.rows })
	return good, bad
}

// distinct drops readings that give the same numbers as an earlier one. Where
// there are as many heads as fields every field is a column, and the comma
// marks no decimals.
func (r *reader) distinct(good []*reading) []*reading {
	var out []*reading
	for _, a := range good {
		same := slices.ContainsFunc(out, func(o *reading) bool { return sameNumbers(a, o) })
		if !same {
			out = append(out, a)
		}
	}
	if len(out) < 2 {
		return out
	}
	plain := slices.DeleteFunc(slices.Clone(out), (*reading).wordy)
	if len(plain) > 0 { // columns are numbers: a reading with words among them is none beside one without
		out = plain
	}
	fits := slices.DeleteFunc(slices.Clone(out), func(a *reading) bool { return a.d.joined || !a.named || len(a.heads) != a.b.cols })
	if len(fits) == 1 {
		r.say(fits[0].header+1, "of %d readings only %s agrees with the number of heads", len(out), fits[0].d)
		return fits
	}
	return out
}

// wordy tells whether some cell of the table is text under this reading.
func (a *reading) wordy() bool {
	return slices.Contains(a.g.decs[a.b.off:a.b.off+a.b.rows*a.b.cols], cellText)
}

func sameNumbers(a, b *reading) bool {
	if a.b.rows != b.b.rows || a.b.cols != b.b.cols || a.b.first != b.b.first {
		return false
	}
	n := a.b.rows * a.b.cols
	for i := range n {
		x, y := a.g.vals[a.b.off+i], b.g.vals[b.b.off+i]
		if x != y && !(math.IsNaN(x) && math.IsNaN(y)) {
			return false
		}
	}
	return true
}

// sample shows the first row as numbers.
func (a *reading) sample() string {
	s := ""
	for c := range min(a.b.cols, 4) {
		if c > 0 {
			s += " | "
		}
		s += fmt.Sprintf("%g", a.g.value(a.b, 0, c))
	}
	return s
}

// opening shows the first line that is not blank.
func (r *reader) opening() string {
	for i := range r.src.spans {
		if !blank(r.src.line(i)) {
			return "text beginning " + parse.Show(r.src.line(i))
		}
	}
	return "nothing but blanks"
}

// assess reads the file under one dialect; nil without any block of numbers.
func (r *reader) assess(d dialect) *reading {
	g := d.survey(r.src)
	b, ok := g.longest(r.lay.FirstLine)
	if r.lay.Shape == "rows" || r.lay.Shape == "" && !d.joined {
		if a := r.rowwise(d); a != nil && (a.err == nil || r.lay.Shape == "rows") {
			return a
		}
	}
	if !ok {
		return nil
	}
	b = g.trim(b)
	a := &reading{d: d, g: g, b: b, header: -1, shape: r.lay.Shape}
	r.findHeads(a)
	r.findAxes(a)
	if a.err == nil {
		a.err = r.sound(a)
	}
	return a
}

// sound checks what makes a block a spectrum: enough rows, strictly monotone
// axes, no damage inside it and no second table beside it.
func (r *reader) sound(a *reading) error {
	least := leastPoints
	if r.lay.Name != "" || r.lay.Abscissa != "" {
		least = leastDeclared
	}
	if err := r.broken(a); err != nil {
		return err
	}
	if a.b.rows < least {
		return r.refuse(a.b.first+1, "", fmt.Sprintf("%d lines of numbers", a.b.rows), fmt.Sprintf("a spectrum of at least %d points", least),
			"check that this is an export of a scan")
	}
	if a.b.cols > maxTraces {
		return r.refuse(a.b.first+1, "", fmt.Sprintf("%d columns", a.b.cols), fmt.Sprintf("at most %d", maxTraces), "split the export")
	}
	for _, c := range a.axes {
		if a.shape == "pairs" {
			continue // lengths differ: each pair is checked when it is taken out
		}
		dir, bad := a.g.monotone(a.b, c)
		if dir != 0 {
			continue
		}
		line := a.b.first + bad
		found := "a value that is no number"
		if a.g.kind(a.b, bad, c) >= parse.Exponential {
			found = fmt.Sprintf("%g after %g", a.g.value(a.b, bad, c), a.g.value(a.b, max(bad-1, 0), c))
		}
		return r.refuse(line+1, fmt.Sprintf("column %d", c+1), found, "a strictly monotone wavelength axis",
			"declare a layout if another column holds the wavelength")
	}
	return nil
}

// broken refuses a table with a damaged line in its middle or a line cut short.
func (r *reader) broken(a *reading) error {
	next := a.b.last + 1
	if r.src.open && next == len(r.src.spans)-1 {
		if _, _, n, _ := a.d.numeric(r.src.line(next), nil, nil, nil); n > 0 || a.d.partial(r.src.line(next)) {
			return r.cutShort(next, a.b.cols)
		}
	}
	if next < len(r.src.spans) && r.almost(a, next, false) {
		return r.damaged(next, a.b.cols)
	}
	if before := a.b.first - 1; before >= 0 && before != a.header && r.lay.FirstLine == 0 && r.almost(a, before, true) {
		return r.damaged(before, a.b.cols)
	}
	for _, o := range a.g.blocks {
		after := o.first > a.b.last && o.first-a.b.last <= 3 && (o.cols > 1 || o.first == next)
		if after && !r.unbroken(next, o.first) {
			return r.damaged(next, a.b.cols)
		}
		before := o.last < a.b.first && o.cols == a.b.cols && a.b.first-o.last <= 3 && r.lay.FirstLine == 0
		if before && !r.unbroken(o.last+1, a.b.first) {
			return r.damaged(o.last+1, a.b.cols)
		}
		if o.first != a.b.first && o.cols > 1 && 2*o.rows > a.b.rows && o.rows >= leastPoints && r.lay.FirstLine == 0 {
			return r.refuse(o.first+1, "", fmt.Sprintf("a second table of %d lines beside the one of %d lines from line %d", o.rows, a.b.rows, a.b.first+1),
				"one table", "declare first_line in a layout, or export the tables one by one")
		}
	}
	return nil
}

// almost tells whether a line beside the table looks like one of its rows
// that could not be read; strict asks that only its first field could not.
func (r *reader) almost(a *reading, line int, strict bool) bool {
	cells := a.d.split(r.src.line(line), nil)
	for len(cells) > a.b.cols && len(cells[len(cells)-1]) == 0 {
		cells = cells[:len(cells)-1]
	}
	if len(cells) != a.b.cols || !dataish(cells[0]) {
		return false
	}
	for _, c := range cells[1:] {
		if _, k := a.d.number(c); strict && k == cellText {
			return false
		}
	}
	return true
}

// unbroken tells whether a blank line or a new head stands among the lines
// from..to-1, so that two blocks of numbers are two tables.
func (r *reader) unbroken(from, to int) bool {
	for i := from; i < to; i++ {
		line := r.src.line(i)
		if blank(line) || marker(line) != "" || quantity(string(line[:min(len(line), 200)])) != qUnknown {
			return true
		}
	}
	return false
}

func (r *reader) damaged(line, cols int) error {
	return r.refuse(line+1, "", parse.Show(r.src.line(line)), fmt.Sprintf("%d numbers as in the lines beside it", cols),
		"export the file again; a damaged line is not left out silently")
}
