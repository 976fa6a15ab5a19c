package jcamp

import (
	"fmt"
	"math"
	"slices"

	"pkvigil/parse"
)

// steady reads a (X++(Y..Y)) table: abscissae from the header, those of the
// lines as a check.
func (d *decoder) steady(t *Table, f frame, r record) error {
	a := asdf{b: r.body, line: r.line + 1, point: f.point, xf: f.xf, limit: d.budget}
	if f.n >= 0 {
		a.limit = f.n
	}
	a.y = make([]float64, 0, min(a.limit, len(r.body)/2+1))
	known := f.hasFirst && f.hasLast && f.n >= 1
	if known {
		a.first = f.first
		a.step = (f.last - f.first) / float64(max(f.n-1, 1))
	} else {
		a.keep = true
	}
	if p := a.run(); p != nil {
		return &parse.Error{File: d.name, Line: p.line, Field: t.Kind, Found: p.found, Expected: p.expected, Remedy: p.remedy}
	}
	t.Y, t.Forms, t.Missing, t.Decimals = a.y, a.forms, a.missing, a.decimals
	if a.decimals == math.MaxInt {
		t.Decimals = parse.Exponential
	}
	if err := d.counted(t, f, r); err != nil {
		return err
	}
	if a.prev == isDIF {
		t.note(r.line, "no final check ordinate")
	}
	if math.IsNaN(t.Y[0]) {
		t.note(r.line+1, "the table begins with a missing ordinate")
	}
	if len(t.Y) == t.Missing {
		return d.fail(r.line, t.Kind, "missing ordinates only", "numbers", "export the file again")
	}
	if a.strayed && known || !known {
		if !a.keep { // read again, this time keeping the abscissae of the lines
			again := asdf{b: r.body, line: r.line + 1, point: f.point, xf: f.xf, limit: a.limit, y: make([]float64, 0, len(a.y)), keep: true, first: a.first, step: a.step}
			again.run()
			a.marks = again.marks
		}
		if err := d.axis(t, &f, a.marks); err != nil {
			return err
		}
		if err := d.sequence(t, f, a.marks); err != nil {
			return err
		}
	}
	t.X = make([]float64, len(t.Y))
	span, n := f.last-f.first, float64(max(len(t.X)-1, 1))
	for i := range t.X {
		t.X[i] = f.first + float64(i)*span/n
	}
	if len(t.X) > 1 {
		t.X[len(t.X)-1] = f.last
	}
	if f.yf != 1 {
		for i := range t.Y {
			t.Y[i] *= f.yf
		}
	}
	return nil
}

// axis completes a header that lacks FIRSTX or LASTX.
func (d *decoder) axis(t *Table, f *frame, marks []mark) error {
	n := float64(len(t.Y) - 1)
	if !f.hasFirst && (f.hasLast || f.hasDelta) {
		f.first = marks[0].x
		t.note(marks[0].line, "no FIRST%s: the abscissa of the first line is taken", t.XSymbol)
	} else if !f.hasFirst {
		return d.fail(t.Line, "FIRST"+t.XSymbol, "nothing", "first and last abscissa", "complete the header")
	}
	switch {
	case f.hasLast:
	case f.hasDelta && f.delta != 0:
		f.last = f.first + n*f.delta
		t.note(t.Line, "no LAST%s: abscissae from DELTA%s", t.XSymbol, t.XSymbol)
		t.Doubt = d.fail(t.Line, "LAST"+t.XSymbol, "nothing", "the last abscissa", "the nominal step is not exact enough for a scan; complete the header")
	default:
		return d.fail(t.Line, "LAST"+t.XSymbol, "nothing", "first and last abscissa", "complete the header")
	}
	return nil
}

// sequence judges abscissae of lines that stray from those of the header. By
// the published text the header counts. Abscissae on one straight line have
// another scale, or drift because the writer rounded its step, up to one step
// of which is harmless; one or two lines off by one step are met in otherwise
// sound files; all else means lost, doubled or exchanged lines.
func (d *decoder) sequence(t *Table, f frame, marks []mark) error {
	step := (f.last - f.first) / float64(max(len(t.Y)-1, 1))
	slack := 1e-9 * max(math.Abs(f.first), math.Abs(f.last))
	bad, worst, place := 0, 0.0, 0
	for i, m := range marks {
		off := math.Abs(m.x - (f.first + float64(m.index)*step))
		if off > 0.5*math.Abs(step)+m.unit+slack {
			if bad++; off > worst {
				worst, place = off, i
			}
		}
	}
	if bad == 0 {
		return nil
	}
	m := marks[place]
	want := number(f.first + float64(m.index)*step)
	doubt := d.fail(m.line, t.Kind, "abscissa "+number(m.x), want+" by FIRST"+t.XSymbol+" and LAST"+t.XSymbol, "header and table disagree about the abscissa; export the file again")
	head, tail := marks[0], marks[len(marks)-1]
	slope := 0.0
	if tail.index > head.index {
		slope = (tail.x - head.x) / float64(tail.index-head.index)
	}
	straight := true
	for _, m := range marks {
		off := math.Abs(m.x - (head.x + float64(m.index-head.index)*slope))
		if off > 0.5*math.Abs(slope)+2*m.unit+slack {
			straight = false
			break
		}
	}
	switch {
	case straight:
		t.note(m.line, "the abscissae of the lines stray by up to %.3g steps from those of the header, which count", worst/math.Abs(step))
	case bad <= 2 && worst <= 1.01*math.Abs(step)+2*m.unit+slack:
		t.note(m.line, "the abscissa of this line is %s, the header gives %s", number(m.x), want)
	default:
		doubt.Remedy = "lines are missing, doubled or out of order; export the file again"
		return doubt
	}
	if !straight || worst > math.Abs(step)+m.unit+slack {
		t.Doubt = doubt
	}
	return nil
}

// compare sets the extremes and the first ordinate that the header states
// against the table. Differences are remarks; when the header is consistently
// off by one factor, the scale of the ordinates is in doubt.
func (d *decoder) compare(b *Block, t *Table, f frame) {
	if t.Kind == "DATATABLE" || t.Kind == "PEAKASSIGNMENTS" {
		return
	}
	lo, hi := math.Inf(1), math.Inf(-1)
	for _, v := range t.Y {
		if v < lo {
			lo = v
		}
		if v > hi {
			hi = v
		}
	}
	sy := t.YSymbol
	stated := [...]struct {
		key  string
		want float64
	}{{"FIRST" + sy, t.Y[0]}, {"MAX" + sy, hi}, {"MIN" + sy, lo}}
	var ratios []float64
	for _, s := range stated {
		text := b.get(s.key)
		v, _, ok := parse.Float([]byte(text), f.point)
		if !ok {
			if text != "" {
				t.note(b.at(s.key), "%s is not a number: %s", s.key, parse.Show(text))
			}
			continue
		}
		if math.Abs(v-s.want) <= 0.005*(hi-lo)+math.Abs(f.yf)+place([]byte(text), f.point)+1e-6*math.Abs(s.want) {
			continue
		}
		t.note(b.at(s.key), "%s says %s, the table %s", s.key, number(v), number(s.want))
		if s.want != 0 && v != 0 {
			ratios = append(ratios, v/s.want)
		}
	}
	if n := len(ratios); n > 1 && math.Abs(ratios[n-1]/ratios[n-2]-1) < 0.02 && math.Abs(ratios[n-1]-1) > 0.05 {
		t.Doubt = d.fail(b.at("MAX"+sy), "MAX"+sy, fmt.Sprintf("extremes %s times those of the table", number(ratios[n-1])), "the same scale", "the scale of the ordinates is not certain; export the file again")
	}
	if t.Kind == "XYPOINTS" && (f.hasFirst || f.hasLast) {
		d.ends(b, t, f)
	}
}

// ends sets FIRSTX and LASTX against the pairs.
func (d *decoder) ends(b *Block, t *Table, f frame) {
	n := len(t.X) - 1
	tol := 1e-3*math.Abs(t.X[n]-t.X[0]) + 1e-6*math.Abs(t.X[0])
	for _, s := range [...]struct {
		key       string
		has       bool
		said, got float64
	}{{"FIRSTX", f.hasFirst, f.first, t.X[0]}, {"LASTX", f.hasLast, f.last, t.X[n]}} {
		if s.has && math.Abs(s.said-s.got) > tol {
			t.note(b.at(s.key), "%s says %s, the table %s", s.key, number(s.said), number(s.got))
			t.Doubt = d.fail(b.at(s.key), s.key, number(s.said), number(s.got)+" as in the table", "header and table disagree about the abscissa; export the file again")
		}
	}
}

// finish runs when a block ends.
func (d *decoder) finish(b *Block) {
	n := len(b.Tables)
	if n == 0 {
		return
	}
	if class := normal([]byte(b.get("DATACLASS"))); class != "" && !slices.ContainsFunc(b.Tables, func(t Table) bool { return classOf(t.Kind) == class }) {
		d.note(b.at("DATACLASS"), "DATA CLASS says %s, the table is %s", parse.Show(b.get("DATACLASS")), classOf(b.Tables[0].Kind))
	}
	t := &b.Tables[n-1]
	for _, key := range [...]string{"XUNITS", "YUNITS", "XFACTOR", "YFACTOR", "FIRSTX", "LASTX"} {
		if t.Kind != "DATATABLE" && t.Err == nil && b.at(key) > t.Line {
			t.Err, t.X, t.Y = d.fail(b.at(key), key, "a parameter after the table", "all parameters before it", "put the line before the table"), nil, nil
		}
	}
}

// classOf is the DATA CLASS that goes with a kind of table.
func classOf(kind string) string {
	switch kind {
	case "DATATABLE":
		return "NTUPLES"
	case "PEAKASSIGNMENTS":
		return "ASSIGNMENTS"
	}
	return kind
}
