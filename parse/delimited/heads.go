package delimited

import (
	"bytes"
	"fmt"
	"slices"
	"strings"

	"pkvigil/parse"
)

// ordinate tells whether a quantity can be the ordinate of a scan.
func ordinate(q string) bool {
	switch q {
	case qAbsorbance, qMilli, qTransmittance, qPercent, qOther:
		return true
	}
	return false
}

// headCells cuts a line of heads. Under a dialect of blanks a unit in
// brackets belongs to the word before it.
func (d dialect) headCells(line []byte) []string {
	cells := d.split(line, nil)
	for len(cells) > 1 && len(cells[len(cells)-1]) == 0 {
		cells = cells[:len(cells)-1]
	}
	var out []string
	for _, c := range cells {
		t := parse.Clean(c)
		if d.delim == ' ' && len(out) > 0 && t != "" && strings.ContainsRune("([/", rune(t[0])) {
			out[len(out)-1] += " " + t
			continue
		}
		out = append(out, t)
	}
	return out
}

// findHeads looks upward from the first row for the line that names the
// columns, and for a row of units below it.
func (r *reader) findHeads(a *reading) {
	if r.lay.HeaderLine > 0 && r.lay.HeaderLine <= len(r.src.spans) {
		a.header = r.lay.HeaderLine - 1
		a.heads = a.d.headCells(r.src.line(a.header))
		a.named = slices.ContainsFunc(a.heads, isAxis)
		return
	}
	const up = 8
	seen := 0
	nearest := -1
	for i := a.b.first - 1; i >= 0 && seen < up; i-- {
		line := r.src.line(i)
		if blank(line) {
			continue
		}
		seen++
		if marker(line) != "" {
			if seen > 1 {
				break
			}
			continue
		}
		cells := a.d.headCells(line)
		if nearest < 0 && len(cells) == a.b.cols && a.b.cols > 1 {
			nearest = i
		}
		if !r.axisLine(a, i, cells) {
			continue
		}
		a.header, a.heads, a.named = i, cells, true
		if allUnits(cells) {
			r.headsAbove(a, i)
		} else if i+1 < a.b.first {
			if u := a.d.headCells(r.src.line(i + 1)); len(u) > 1 && allUnits(u) {
				a.units = u
			}
		}
		return
	}
	if nearest == a.b.first-1 && nearest >= 0 {
		cells := a.d.headCells(r.src.line(nearest))
		if a.b.cols > 2 || headerKey(cells[0]) == 0 || ordinate(quantity(cells[1])) {
			a.header, a.heads = nearest, cells
		}
	}
}

// isAxis tells whether a head names the wavelength. One wavelength in the
// head of a trace, such as "A 590 nm", does not.
func isAxis(cell string) bool {
	if quantity(cell) != qWavelength {
		return false
	}
	if !strings.ContainsAny(cell, "0123456789") || perCM(cell) {
		return true
	}
	words := slices.DeleteFunc(strings.Fields(fold(cell)), func(w string) bool { return oneOf(w, wordsNM) })
	return quantity(strings.Join(words, " ")) == qWavelength
}

// axisLine tells whether cells are heads of which one names the wavelength.
func (r *reader) axisLine(a *reading, i int, cells []string) bool {
	k := slices.IndexFunc(cells, isAxis)
	if k < 0 || k >= a.b.cols {
		return false
	}
	if len(cells) == 1 {
		return mere(cells[0]) || a.d.delim == ' ' && a.b.cols == 2
	}
	if len(cells) > 2 {
		return true
	}
	if _, kind := a.d.number([]byte(cells[1])); kind >= parse.Exponential {
		return i == a.b.first-1 && mere(cells[0]) // the name of the trace is a number
	}
	return true
}

func allUnits(cells []string) bool {
	some := false
	for _, c := range cells {
		bare := strings.Trim(c, "[]() ")
		switch {
		case c == "":
		case c != bare, isUnit(bare):
			some = true
		default:
			return false
		}
	}
	return some
}

// headsAbove takes the names above a row of units, if the line there has them.
func (r *reader) headsAbove(a *reading, units int) {
	if units == 0 {
		return
	}
	cells := a.d.headCells(r.src.line(units - 1))
	if len(cells) >= 2 && len(cells) >= a.b.cols-1 && slices.ContainsFunc(cells, func(c string) bool { return quantity(c) != qUnknown }) && headerKey(cells[0]) == 0 {
		a.units, a.heads, a.header = a.heads, cells, units-1
	}
}

// findAxes decides which columns hold wavelengths.
func (r *reader) findAxes(a *reading) {
	if len(r.lay.Columns) > 0 {
		for c, w := range r.lay.Columns {
			if w == "wavelength" && c < a.b.cols {
				a.axes = append(a.axes, c)
			}
		}
		if len(a.axes) == 0 {
			a.err = r.refuse(0, "columns", fmt.Sprintf("%d declared columns without one of them \"wavelength\"", len(r.lay.Columns)), "a wavelength column", "correct the layout")
		}
	} else if a.named {
		for c, h := range a.heads {
			if c < a.b.cols && isAxis(h) {
				a.axes = append(a.axes, c)
			}
		}
	}
	if r.lay.Shape == "pairs" && len(a.axes) < 2 {
		a.axes = a.axes[:0]
		for c := 0; c+1 < a.b.cols; c += 2 {
			a.axes = append(a.axes, c)
		}
	}
	if len(a.axes) == 0 {
		a.axes = []int{0}
	}
	if a.shape == "" {
		a.shape = "columns"
		if len(a.axes) > 1 {
			a.shape = "pairs"
		}
	}
	if a.shape == "columns" {
		a.axes = a.axes[:1]
	}
}

// head is the name of a column, "" without one.
func (a *reading) head(c int) string {
	if c < len(a.heads) {
		return a.heads[c]
	}
	return ""
}

func (a *reading) unit(c int) string {
	if c < len(a.units) {
		return a.units[c]
	}
	return ""
}

// rowwise looks for scans in rows: a line of wavelengths across, below it one
// line per scan with as many numbers. Nil where there is no such line.
func (r *reader) rowwise(d dialect) *reading {
	const search, least = 200, 10
	var fields [][]byte
	for i := range min(search, len(r.src.spans)) {
		line := r.src.line(i)
		if r.lay.HeaderLine > 0 && i != r.lay.HeaderLine-1 || len(line) < 2*least {
			continue
		}
		fields = d.split(line, fields[:0])
		if len(fields) <= least && r.lay.Shape != "rows" || len(fields) < 3 {
			continue
		}
		axis := d.across(fields[1:])
		if axis == nil {
			continue
		}
		corner := parse.Clean(fields[0])
		if unit := axisUnit(corner); r.lay.Shape != "rows" && unit != unitPerCM && (axis[0] < 100 || axis[0] > 1300) {
			continue
		}
		return r.takeRows(d, i, corner, axis)
	}
	return nil
}

// across reads the cells as a strictly monotone axis; nil where they are none.
func (d dialect) across(cells [][]byte) []float64 {
	for len(cells) > 0 && len(cells[len(cells)-1]) == 0 {
		cells = cells[:len(cells)-1]
	}
	axis := make([]float64, 0, len(cells))
	for i, c := range cells {
		c = bytes.TrimSpace(bytes.TrimSuffix(bytes.TrimSpace(c), []byte("nm")))
		v, kind := d.number(c)
		if kind < parse.Exponential {
			return nil
		}
		axis = append(axis, v)
		if i > 1 && (axis[i]-axis[i-1])*(axis[1]-axis[0]) <= 0 || i == 1 && axis[1] == axis[0] {
			return nil
		}
	}
	if len(axis) < 2 {
		return nil
	}
	return axis
}

// takeRows reads the rows below a line of wavelengths into a grid whose
// columns are the wavelengths.
func (r *reader) takeRows(d dialect, header int, corner string, axis []float64) *reading {
	g := &grid{d: d}
	a := &reading{d: d, g: g, header: header, heads: []string{corner}, row: axis, shape: "rows", named: true}
	a.b = block{first: -1, cols: len(axis)}
	var fields [][]byte
	for i := header + 1; i < len(r.src.spans); i++ {
		line := r.src.line(i)
		if blank(line) {
			continue
		}
		fields = d.split(line, fields[:0])
		for len(fields) > len(axis)+1 && len(fields[len(fields)-1]) == 0 {
			fields = fields[:len(fields)-1]
		}
		if len(fields) != len(axis)+1 {
			if a.b.rows > 0 && i == len(r.src.spans)-1 && r.src.open {
				a.err = r.cutShort(i, len(axis))
			}
			if a.b.rows == 0 {
				continue // units or other lines between heads and rows
			}
			if a.err == nil && len(fields) > 2 {
				a.err = r.damaged(i, len(axis))
			}
			break
		}
		numbers := 0
		for _, f := range fields[1:] {
			v, kind := d.number(f)
			if kind >= parse.Exponential {
				numbers++
			} else if kind == cellText {
				a.err = r.refuse(i+1, "", parse.Show(f), "a number", "export the file again")
			}
			g.vals, g.decs = append(g.vals, v), append(g.decs, kind)
		}
		if numbers == 0 && a.b.rows == 0 {
			g.vals, g.decs, a.err = g.vals[:0], g.decs[:0], nil
			continue
		}
		if a.b.first < 0 {
			a.b.first = i
		}
		a.b.last = i
		a.b.rows++
		g.blocks = append(g.blocks, block{first: i, last: i, cols: len(axis), off: len(g.vals) - len(axis), rows: 1})
	}
	if a.b.rows == 0 {
		return nil
	}
	return a
}
