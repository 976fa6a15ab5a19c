package brief

import "slices"

// Centred says whether any reference has a centre of its chart.
func (c Control) Centred() bool {
	return slices.ContainsFunc(c.References, func(r Reference) bool { return known(r.Centre) })
}

// A row is one row of the picture of tonight's references.
type row struct {
	name   string
	d, u   float64
	centre bool // against the centre of its chart, else the assigned value
	bad    bool
}

func deviations(list []Reference) []row {
	var out []row
	for _, r := range list {
		x := row{name: r.Label(), d: r.PKa - r.Centre, centre: true, bad: !good(r.Verdict)}
		if !known(x.d) {
			x.d, x.centre = r.PKa-r.Assigned, false
		}
		if !known(x.d) {
			continue
		}
		if known(r.U) && r.U > 0 {
			x.u = r.U
		}
		if r.Instrument == "" && r.Key != "" {
			x.name = r.Key // the title alone may stand there twice
		}
		out = append(out, x)
	}
	return out
}

// referencePicture draws the deviations of tonight's references from the
// centres of their charts, or from the assigned values where there is no
// centre; "" without any.
func referencePicture(id string, list []Reference) string {
	rows, x := deviations(list), nothing()
	x.take(0)
	mixed, about := false, ""
	for i, r := range rows {
		x.take(r.d-r.u, r.d+r.u)
		mixed = mixed || r.centre != rows[0].centre
		if i > 0 {
			about += ", "
		}
		about += r.name + " " + signed(r.d, 3)
	}
	if len(rows) == 0 {
		return ""
	}
	const step = 32
	p := draw(id, "References of the night", "Deviation of each reference, with its expanded uncertainty: "+about+".", 360, float64(len(rows))*step+46)
	f := newFrame(p, x.widened(0.1), span{0, 1})
	f.left, f.top = 12, 4
	name := "pKa − assigned value, bar = U"
	if rows[0].centre {
		name = "pKa − centre, bar = U"
	}
	if mixed {
		name = "pKa − centre (* assigned value), bar = U"
	}
	f.foot(name, ticks(f.x0, f.x1, 6))
	for _, t := range ticks(f.x0, f.x1, 6) {
		f.line("grid", f.px(t.at), f.top, f.px(t.at), f.bottom)
	}
	f.line("zero", f.px(0), f.top, f.px(0), f.bottom)
	for i, r := range rows {
		f.deviation(r, f.top+float64(i)*step, mixed && !r.centre)
	}
	return p.svg()
}

// deviation draws one row: name, bar of U, mark; a reference that does not
// stand is a diamond.
func (f *frame) deviation(r row, y float64, star bool) {
	name := short(r.name, 52)
	if star {
		name += " *"
	}
	f.text("note halo", "start", f.left, y+11, name)
	f.line("spread", f.px(r.d-r.u), y+21, f.px(r.d+r.u), y+21)
	shape, class := rune(dot), "mark full"
	if r.bad {
		shape, class = diamond, "mark bad full"
	}
	f.mark(shape, class, f.px(r.d), y+21, 4.2)
}
