package delimited

import (
	"fmt"
	"strings"

	"pkvigil/parse"
)

// long reads scans in long form: one row per point, the name of the scan in
// a column of its own. Further columns that stay the same within a scan are
// facts about it.
func (r *reader) long(t *table) (*parse.Content, error) {
	if err := r.need(t, "heads naming sample, wavelength and absorbance"); err != nil {
		return nil, err
	}
	q := quantity(t.heads[t.col[colOrdinate]])
	if d := declaredOrdinate(r.lay.Ordinate); d != qUnknown {
		q = d
	}
	unit := r.lay.Abscissa
	if unit == "" {
		if unit = unitAt(t, colWavelength); axisUnit(unit) != "" {
			unit = axisUnit(unit)
		} else {
			unit = axisUnit(t.heads[t.col[colWavelength]])
		}
	}
	groups, order, err := r.gather(t)
	if err != nil {
		return nil, err
	}
	f := r.tableFacts(t)
	c := &parse.Content{Format: "delimited"}
	r.found.Shape, r.found.Ordinate, r.found.Abscissa = "long", declaredWord(q), unit
	for _, name := range order {
		g := groups[name]
		if len(g.x) < leastDeclared {
			return nil, r.refuse(g.line, "", fmt.Sprintf("%d points for %s", len(g.x), parse.Show(name)), "a spectrum", "this may be a list of single wavelengths, not of spectra")
		}
		own := f
		own.sample = ""
		for _, e := range g.facts {
			r.learn(&own, t.d.point, g.line, e.Key, e.Value)
		}
		r.settle(&own)
		s := newScan(own)
		s.Label = name
		if err := r.nanometres(g.x, unit, t.header+1); err != nil {
			return nil, err
		}
		if err := r.ascend(g.x, g.y, g.decs, g.line); err != nil {
			return nil, err
		}
		s.Decimals = decimals(g.decs)
		if s.Scale, err = r.absorb(name, q, g.x, g.y, g.decs, g.line); err != nil {
			return nil, err
		}
		s.WavelengthNM, s.Absorbance = g.x, g.y
		c.Scans = append(c.Scans, s)
	}
	return c, nil
}

// grouped tells whether the column of names groups the rows into spectra, and
// is not itself a measured column that happens to be called sample.
func (t *table) grouped() bool {
	key := labelColumn(t)
	if key == colNone {
		key = colPH
	}
	names := map[string]bool{}
	for _, row := range t.rows {
		names[string(t.at(row, key))] = true
		if len(names)*leastPoints > len(t.rows) {
			return false
		}
	}
	return len(names) > 0
}

// group is one scan of a long form.
type group struct {
	line  int
	x, y  []float64
	decs  []int8
	facts []parse.Field
}

// gather sorts the rows by the name of their scan.
func (r *reader) gather(t *table) (map[string]*group, []string, error) {
	key := labelColumn(t)
	if key == colNone {
		key = colPH
	}
	groups := map[string]*group{}
	var order []string
	for _, row := range t.rows {
		if r.footer(t, row) {
			continue
		}
		x, err := r.must(t, row, colWavelength)
		if err != nil {
			return nil, nil, err
		}
		v, k := t.d.number(t.at(row, colOrdinate))
		if k == cellText {
			return nil, nil, r.refuse(row.line, t.field(colOrdinate), parse.Show(t.at(row, colOrdinate)), "a number", "export the file again")
		}
		name := t.text(row, key)
		g := groups[name]
		if g == nil {
			g = &group{line: row.line}
			groups[name] = g
			order = append(order, name)
			for i, h := range t.heads {
				if i == t.col[key] && key != colPH || i == t.col[colWavelength] || i == t.col[colOrdinate] || i >= len(row.cells) {
					continue
				}
				if value := parse.Clean(row.cells[i]); value != "" {
					g.facts = append(g.facts, parse.Field{Key: h, Value: value})
				}
			}
		} else if err := r.constant(t, row, g, key); err != nil {
			return nil, nil, err
		}
		g.x, g.y, g.decs = append(g.x, x), append(g.y, v), append(g.decs, k)
	}
	if len(order) > 1 {
		for _, name := range order {
			if name == "" {
				return nil, nil, r.refuse(groups[name].line, t.field(key), "a row without a name", "the name of its scan", "complete the rows")
			}
		}
	}
	return groups, order, nil
}

// constant refuses a fact that changes within a scan: a pH or a time that
// differs from row to row means that the rows are no spectrum.
func (r *reader) constant(t *table, row tableRow, g *group, key int) error {
	for _, m := range [...]int{colPH, colTime} {
		if m == key || !t.has(m) {
			continue
		}
		head, value := t.heads[t.col[m]], t.text(row, m)
		for _, f := range g.facts {
			if f.Key == head && f.Value != value && strings.TrimSpace(value) != "" {
				return r.refuse(row.line, t.field(m), parse.Show(value), parse.Show(f.Value)+" as in the rows before", "give each scan a name of its own")
			}
		}
	}
	return nil
}
