package delimited

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"pkvigil/parse"
)

// A trace is a column that becomes a scan.
type trace struct {
	col, axis int
	quantity  string
}

// quantityOf joins what head and unit of a column say.
func (a *reading) quantityOf(c int) string {
	h, u := a.head(c), a.unit(c)
	q, uq := quantity(h), quantity(u)
	switch {
	case q == qTransmittance && (uq == qPercent || strings.Contains(u, "%")):
		return qPercent
	case q == qUnknown && a.b.cols == 2 && fold(h) == " a ":
		return qAbsorbance
	case q == qUnknown && a.b.cols == 2 && fold(h) == " t ":
		return qTransmittance
	case q == qUnknown:
		return uq
	}
	return q
}

// traces decides which columns hold scans and of what quantity.
func (r *reader) traces(a *reading, f facts) ([]trace, error) {
	if len(r.lay.Columns) > 0 {
		return r.declaredTraces(a)
	}
	mode := declaredOrdinate(r.lay.Ordinate)
	if mode == qUnknown && r.lay.Ordinate != "" && r.lay.Ordinate != "counts" {
		return nil, r.refuse(0, "ordinate", parse.Show(r.lay.Ordinate), `"absorbance", "transmittance", "percent transmittance" or "counts"`, "correct the layout")
	}
	if mode == qUnknown {
		if mode = quantity(f.mode); !ordinate(mode) {
			mode = qUnknown
		}
	}
	by := map[string][]trace{}
	for c := range a.b.cols {
		if slices.Contains(a.axes, c) || a.textual(c) {
			continue
		}
		q := a.quantityOf(c)
		if q == qWavelength && strings.ContainsAny(a.head(c), "0123456789") {
			q = qUnknown
		}
		by[q] = append(by[q], trace{c, a.axisFor(c), q})
	}
	for _, q := range [...]string{qAbsorbance, qMilli, qPercent, qTransmittance} {
		if len(by[q]) == 0 {
			continue
		}
		if mode != qUnknown && r.lay.Ordinate != "" {
			if err := r.contradicted(a.header+1, "ordinate", mode, q, mode == qPercent && q == qTransmittance || mode == qAbsorbance && q == qMilli); err != nil {
				return nil, err
			}
			for i := range by[q] {
				if q != qMilli || mode != qAbsorbance {
					by[q][i].quantity = mode
				}
			}
		}
		r.skipped(a, by, q)
		return by[q], nil
	}
	return r.unnamedQuantity(a, f, by, mode)
}

// contradicted deals with a layout that declares other than the file says: a
// layout bound to the file by its name overrides it with a remark, one for
// every file does not fit.
func (r *reader) contradicted(line int, what, declared, stated string, agree bool) error {
	if declared == stated || stated == "" || agree {
		return nil
	}
	if r.lay.Files == "" {
		return r.refuse(line, what, parse.Show(stated), parse.Show(declared)+" as the layout declares", "give the layout a files pattern if the file is wrong")
	}
	r.remark(line, "%s: the file says %s; read as %s, as the layout declares", what, stated, declared)
	return nil
}

// unnamedQuantity settles traces whose heads state no quantity: the header or
// the layout must.
func (r *reader) unnamedQuantity(a *reading, f facts, by map[string][]trace, mode string) ([]trace, error) {
	free := slices.Clone(by[qUnknown])
	if len(free) == 0 && mode != qUnknown && mode != qOther && r.lay.Ordinate != "" {
		free = append(by[qOther], by[qTime]...)
	}
	line := max(a.header, 0) + 1
	switch {
	case len(free) == 0 && len(by[qOther]) > 0:
		c := by[qOther][0].col
		return nil, r.refuse(line, fmt.Sprintf("column %d", c+1), parse.Show(strings.TrimSpace(a.head(c)+" "+a.unit(c))), "absorbance or transmittance",
			"export absorbance, or declare ordinate in a layout")
	case mode == qOther:
		return nil, r.refuse(f.modeLine, "", parse.Show(f.mode), "absorbance or transmittance", "export absorbance, or declare ordinate in a layout")
	case len(free) == 0:
		return nil, r.refuse(line, "", "no column of numbers beside the wavelength", "a column of absorbances", "check the export")
	case mode == qUnknown:
		c := free[0].col
		found := fmt.Sprintf("column %d without a statement of what it holds", c+1)
		if h := a.head(c); h != "" {
			found = "the head " + parse.Show(h)
		}
		return nil, r.refuse(line, "", found, "absorbance or transmittance, stated in the file", `declare a layout with ordinate = "absorbance" if that is what it holds`)
	}
	processed := slices.DeleteFunc(slices.Clone(free), func(t trace) bool { return !says(fold(a.head(t.col)), "processed result") })
	if len(processed) == 1 && len(free) > 1 {
		free = processed
	} else if a.header >= 0 && len(free) > 1 {
		free = slices.DeleteFunc(free, func(t trace) bool { return counting(a, t.col) && a.axes[0] != 0 })
	}
	for i := range free {
		free[i].quantity = mode
	}
	by[mode] = free
	by[qUnknown] = slices.DeleteFunc(by[qUnknown], func(t trace) bool { return slices.ContainsFunc(free, func(o trace) bool { return o.col == t.col }) })
	r.skipped(a, by, mode)
	return free, nil
}

// counting tells whether a column before the axis merely counts the rows.
func counting(a *reading, c int) bool {
	if c >= a.axes[0] || a.b.rows < 3 {
		return false
	}
	for i := range a.b.rows {
		if a.g.value(a.b, i, c) != a.g.value(a.b, 0, c)+float64(i) {
			return false
		}
	}
	return true
}

func declaredOrdinate(word string) string {
	switch word {
	case "absorbance", "transmittance", "percent transmittance":
		return word
	}
	return qUnknown
}

// declaredTraces follows the columns a layout declares.
func (r *reader) declaredTraces(a *reading) ([]trace, error) {
	q := declaredOrdinate(r.lay.Ordinate)
	if q == qUnknown {
		q = qAbsorbance
	}
	var out []trace
	for c, w := range r.lay.Columns {
		if c >= a.b.cols {
			return nil, r.refuse(a.b.first+1, "", fmt.Sprintf("%d columns", a.b.cols), fmt.Sprintf("%d, as the layout declares", len(r.lay.Columns)), "correct the layout")
		}
		switch w {
		case "absorbance", "transmittance", "percent transmittance":
			if r.lay.Ordinate == "" {
				q = w
			}
			out = append(out, trace{c, a.axisFor(c), q})
		case "sample":
			if r.lay.Ordinate == "counts" {
				out = append(out, trace{c, a.axisFor(c), "counts"})
			}
		}
	}
	if len(out) == 0 {
		return nil, r.refuse(0, "columns", strings.Join(r.lay.Columns, ", "), `"absorbance", "transmittance", or "sample" with "reference"`, "correct the layout")
	}
	return out, nil
}

// axisFor is the axis a column is measured on: the nearest one to its left.
func (a *reading) axisFor(c int) int {
	best := a.axes[0]
	for _, x := range a.axes {
		if x < c {
			best = x
		}
	}
	return best
}

// textual tells whether a column holds words more often than numbers.
func (a *reading) textual(c int) bool {
	text := 0
	for i := range a.b.rows {
		if k := a.g.kind(a.b, i, c); k == cellText || k == cellEmpty {
			text++
		}
	}
	return 2*text > a.b.rows && a.shape != "pairs"
}

// skipped remarks on the columns that are not read.
func (r *reader) skipped(a *reading, by map[string][]trace, used string) {
	var names []string
	for q, ts := range by {
		if q == used {
			continue
		}
		for _, t := range ts {
			names = append(names, parse.Show(a.head(t.col)))
		}
	}
	if len(names) > 0 {
		slices.Sort(names)
		r.remark(a.header+1, "columns not read: %s", strings.Join(names, ", "))
	}
}

// fromColumns takes scans out of columns, sharing one axis or each with its own.
func (r *reader) fromColumns(a *reading, f facts, pre []entry) ([]parse.Scan, error) {
	if len(a.row) == 0 && r.lay.Abscissa == "" && len(r.lay.Columns) == 0 && !a.named {
		if _, stated := r.axisUnitOf(a, a.axes[0], f); !stated {
			return nil, r.notAxis(a, f)
		}
	}
	traces, err := r.traces(a, f)
	if err != nil {
		return nil, err
	}
	r.found.Columns = slices.Repeat([]string{"skip"}, a.b.cols)
	scans := make([]parse.Scan, 0, len(traces))
	for _, t := range traces {
		s, err := r.scan(a, t, f, pre, len(traces))
		if err != nil {
			return nil, err
		}
		scans = append(scans, s)
		r.found.Columns[t.axis] = "wavelength"
		r.found.Columns[t.col] = declaredWord(t.quantity)
		r.found.Ordinate = declaredWord(t.quantity)
	}
	if len(r.lay.Columns) > 0 {
		r.found.Columns, r.found.Ordinate = r.lay.Columns, r.lay.Ordinate
	}
	return scans, nil
}

func declaredWord(q string) string {
	if q == qMilli {
		return "absorbance"
	}
	return q
}

// notAxis refuses a table whose first column nothing calls a wavelength.
func (r *reader) notAxis(a *reading, f facts) error {
	line := max(a.header, a.b.first) + 1
	first := "column 1 without a name"
	if h := a.head(0); h != "" {
		line, first = a.header+1, "the head "+parse.Show(h)
		if quantity(h) == qTime {
			return r.refuse(line, "", first, "wavelengths in the first column", "this is a time trace, not a spectrum")
		}
		if q := quantity(h); q != qUnknown {
			return r.refuse(line, "", first, "wavelengths in the first column", "this is no spectrum")
		}
	}
	if q := quantity(f.mode); q == qOther {
		return r.refuse(f.modeLine, "", parse.Show(f.mode), "absorbance or transmittance", "export absorbance, or declare ordinate in a layout")
	}
	return r.refuse(line, "", first, "a column named as wavelength, with its unit",
		`declare a layout with abscissa = "nm" and ordinate = "absorbance" if that is what the file holds`)
}

// scan takes one trace out of the grid.
func (r *reader) scan(a *reading, t trace, f facts, pre []entry, of int) (parse.Scan, error) {
	line := a.b.first + 1
	x, y, decs, err := r.take(a, t)
	if err != nil {
		return parse.Scan{}, err
	}
	if len(x) < leastDeclared {
		return parse.Scan{}, r.refuse(line, fmt.Sprintf("column %d", t.col+1), fmt.Sprintf("%d values", len(x)), "a spectrum", "export the file again")
	}
	own := r.columnFacts(a, t, f, pre, of)
	s := newScan(own)
	unit, _ := r.axisUnitOf(a, t.axis, f)
	stated := axisUnit(a.head(t.axis))
	if stated == "" {
		stated = axisUnit(a.unit(t.axis))
	}
	if err := r.contradicted(a.header+1, "abscissa", unit, stated, false); err != nil {
		return s, err
	}
	if err := r.nanometres(x, unit, max(a.header, 0)+1); err != nil {
		return s, err
	}
	if r.found.Abscissa = unit; unit == "" {
		r.found.Abscissa = unitNM
	}
	if err := r.ascend(x, y, decs, line); err != nil {
		return s, err
	}
	s.Label = r.label(a, t, own, of)
	s.Decimals = decimals(decs)
	q := t.quantity
	if q == "counts" {
		q, s.Decimals = qAbsorbance, -1
	}
	s.Scale, err = r.absorb(s.Label, q, x, y, decs, max(a.header, a.b.first-1)+1)
	s.WavelengthNM, s.Absorbance = x, y
	return s, err
}

// take copies a trace and its axis out of the grid.
func (r *reader) take(a *reading, t trace) (x, y []float64, decs []int8, err error) {
	n, cols := a.b.rows, a.b.cols
	x, y, decs = make([]float64, n), make([]float64, n), make([]int8, n)
	vals, kinds := a.g.vals[a.b.off:a.b.off+n*cols], a.g.decs[a.b.off:a.b.off+n*cols]
	k := 0
	for i, at := 0, 0; i < n; i, at = i+1, at+cols {
		kind, v := kinds[at+t.col], vals[at+t.col]
		if kinds[at+t.axis] < parse.Exponential || kind == cellText || kind == cellEmpty {
			if a.shape == "pairs" && kind == cellEmpty && kinds[at+t.axis] == cellEmpty {
				continue // this pair is shorter than the longest
			}
			if err := r.notNumber(a, i, t); err != nil {
				return nil, nil, nil, err
			}
		}
		if t.quantity == "counts" {
			v = r.fromCounts(a, i)
		}
		x[k], y[k], decs[k] = vals[at+t.axis], v, kind
		k++
	}
	return x[:k], y[:k], decs[:k], nil
}

// notNumber refuses a row without a wavelength or with words for a value; an
// empty value is a missing one.
func (r *reader) notNumber(a *reading, row int, t trace) error {
	line := a.b.first + 1 + row
	if a.g.kind(a.b, row, t.axis) < parse.Exponential {
		return r.refuse(line, fmt.Sprintf("column %d", t.axis+1), "no wavelength", "a number", "export the file again")
	}
	if a.g.kind(a.b, row, t.col) == cellText {
		return r.refuse(line, fmt.Sprintf("column %d", t.col+1), parse.Show(r.cell(a, row, t.col)), "a number", "export the file again")
	}
	return nil
}

// cell is the text of one cell.
func (r *reader) cell(a *reading, row, col int) string {
	cells := a.d.split(r.src.line(a.b.first+row), nil)
	if col < len(cells) {
		return string(cells[col])
	}
	return ""
}

// fromCounts computes the absorbance from detector counts of sample,
// reference and, where declared, dark: -log10((S - D)/(R - D)).
func (r *reader) fromCounts(a *reading, row int) float64 {
	var v [3]float64
	for c, w := range r.lay.Columns {
		switch w {
		case "sample":
			v[0] = a.g.value(a.b, row, c)
		case "reference":
			v[1] = a.g.value(a.b, row, c)
		case "dark":
			v[2] = a.g.value(a.b, row, c)
		}
	}
	s, ref := v[0]-v[2], v[1]-v[2]
	if !(s > 0) || !(ref > 0) {
		return math.NaN()
	}
	return -math.Log10(s / ref)
}

// columnFacts adds to the header's facts what its lines say column by column.
func (r *reader) columnFacts(a *reading, t trace, f facts, pre []entry, of int) facts {
	if of > 1 {
		f.sample = ""
	}
	f.meta = slices.Clone(f.meta)
	for _, e := range pre {
		if len(e.cells) <= 2 || len(e.cells) < a.b.cols-1 || t.col >= len(e.cells) {
			continue
		}
		value := parse.Clean(e.cells[t.col])
		if value == "" && a.shape == "pairs" {
			value = parse.Clean(e.cells[t.axis]) // a name above the first column of its pair
		}
		if value != "" {
			r.learn(&f, a.d.point, e.line, e.key, value)
		}
	}
	if a.shape == "pairs" && f.sample == "" {
		f.sample = r.nameAbove(a, t)
	}
	r.settle(&f)
	return f
}

// nameAbove is the name on the line above the heads of pairs of columns.
func (r *reader) nameAbove(a *reading, t trace) string {
	if a.header < 1 {
		return ""
	}
	cells := a.d.headCells(r.src.line(a.header - 1))
	if len(cells) < 2 {
		return ""
	}
	for _, c := range [...]int{t.axis, t.col} {
		if c < len(cells) && cells[c] != "" {
			return cells[c]
		}
	}
	return ""
}

// label names a trace: its head, unless that only states a quantity and the
// header names the sample.
func (r *reader) label(a *reading, t trace, f facts, of int) string {
	head := a.head(t.col)
	if head != "" && !mere(head) {
		return head
	}
	if f.sample != "" {
		return f.sample
	}
	if f.title != "" && of == 1 {
		return f.title
	}
	return head
}

// fromRows takes scans out of rows; the first field of each is its name.
func (r *reader) fromRows(a *reading, f facts) ([]parse.Scan, error) {
	q := declaredOrdinate(r.lay.Ordinate)
	if q == qUnknown {
		if q = quantity(a.heads[0]); !ordinate(q) {
			q = quantity(f.mode)
		}
	}
	if !ordinate(q) || q == qOther {
		found := "rows of numbers without a statement of what they hold"
		if q == qOther {
			found = parse.Show(f.mode)
		}
		return nil, r.refuse(a.header+1, "", found, "absorbance or transmittance, stated in the file", `declare a layout with ordinate = "absorbance" if that is what it holds`)
	}
	unit := r.lay.Abscissa
	if unit == "" {
		unit = axisUnit(a.heads[0])
	}
	r.found.Ordinate, r.found.Abscissa = q, unit
	if unit == "" {
		r.found.Abscissa = unitNM
	}
	scans := make([]parse.Scan, 0, a.b.rows)
	var fields [][]byte
	for i := range a.b.rows {
		line := a.g.blocks[i].first
		fields = a.d.split(r.src.line(line), fields[:0])
		s := newScan(f)
		s.Label = parse.Clean(fields[0])
		x := slices.Clone(a.row)
		y := slices.Clone(a.g.vals[i*a.b.cols : (i+1)*a.b.cols])
		decs := slices.Clone(a.g.decs[i*a.b.cols : (i+1)*a.b.cols])
		if err := r.nanometres(x, unit, a.header+1); err != nil {
			return nil, err
		}
		if err := r.ascend(x, y, decs, a.header+1); err != nil {
			return nil, err
		}
		s.Decimals = decimals(decs)
		var err error
		if s.Scale, err = r.absorb(s.Label, q, x, y, decs, line+1); err != nil {
			return nil, err
		}
		s.WavelengthNM, s.Absorbance = x, y
		scans = append(scans, s)
	}
	return scans, nil
}
