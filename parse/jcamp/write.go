package jcamp

import (
	"math"
	"strconv"
	"strings"

	"pkvigil/parse"
)

// maxLine is the longest line of the published text.
const maxLine = 80

// Append writes blocks in canonical spelling: a block with its header first,
// then its table, then the blocks inside it. form is AFFN for plain numbers,
// or DIF for differences with repeat counts; a table whose tabulated ordinates
// are no whole numbers is then written plain. What Decode reads from the
// result equals f in titles, records, tables and numbers, bit by bit; records
// used up by the tables are written anew.
// A file with an Err in a table cannot be written.
func Append(dst []byte, f *File, form Forms) ([]byte, error) {
	w := &writer{f: f, out: dst, form: form, inside: make([][]int, len(f.Blocks))}
	for i := range f.Blocks {
		if p := f.Blocks[i].Parent; p >= 0 {
			w.inside[p] = append(w.inside[p], i)
		}
	}
	for i := range f.Blocks {
		if f.Blocks[i].Parent < 0 {
			if err := w.block(i); err != nil {
				return dst, err
			}
		}
	}
	return w.out, nil
}

type writer struct {
	f      *File
	inside [][]int // blocks one level inside each
	out    []byte
	form   Forms
}

func (w *writer) record(label, value string) {
	w.out = append(w.out, "##"+label+"= "+strings.ReplaceAll(value, "\n", "\r\n")+"\r\n"...)
}

func (w *writer) block(at int) error {
	b := &w.f.Blocks[at]
	w.record("TITLE", b.Title)
	for i := range b.Records {
		r := &b.Records[i]
		if r.key != "DATACLASS" && structural(r.key) {
			continue
		}
		w.record(r.Name, r.Value)
	}
	units, section := [2]string{}, false // units as last written; inside NTUPLES
	for i := range b.Tables {
		t := &b.Tables[i]
		switch paged := t.Kind == "DATATABLE"; {
		case t.Err != nil:
			return t.Err
		case paged && !section:
			w.record("NTUPLES", parse.Clean(b.get("NTUPLES")))
		case section && !paged:
			w.record("END NTUPLES", "")
		}
		if section = t.Kind == "DATATABLE"; section {
			w.page(t)
		} else {
			w.table(t, &units)
		}
	}
	if section {
		w.record("END NTUPLES", "")
	}
	for _, i := range w.inside[at] {
		if err := w.block(i); err != nil {
			return err
		}
	}
	w.record("END", "")
	return nil
}

// tabulated gives the ordinates as they are written and the factor to them:
// whole numbers where form asks for differences and the factor allows it.
func (w *writer) tabulated(t *Table) (y []float64, factor float64, whole bool) {
	if w.form&(DIF|SQZ|DUP) == 0 || !t.Steady || math.IsNaN(t.Y[0]) {
		return t.Y, 1, false
	}
	y = make([]float64, len(t.Y))
	for i, v := range t.Y {
		y[i] = v
		if v == v {
			if y[i] = math.Round(v / t.YFactor); y[i]*t.YFactor != v || math.Abs(y[i]) >= 1e15 {
				return t.Y, 1, false
			}
		}
	}
	return y, t.YFactor, true
}

func (w *writer) table(t *Table, units *[2]string) {
	sx, sy := t.XSymbol, t.YSymbol
	for i, u := range [2]string{t.XUnits, t.YUnits} {
		if u != units[i] {
			w.record([2]string{sx, sy}[i]+"UNITS", u)
			units[i] = u
		}
	}
	y, factor, whole := w.tabulated(t)
	w.record("NPOINTS", strconv.Itoa(len(y)))
	w.record(sx+"FACTOR", "1")
	w.record(sy+"FACTOR", exact(factor))
	w.record("FIRST"+sx, exact(t.X[0]))
	w.record("LAST"+sx, exact(t.X[len(t.X)-1]))
	switch {
	case t.Steady:
		w.record(t.Kind, "("+sx+"++("+sy+".."+sy+"))")
		w.steady(t, y, whole)
	case t.Kind == "PEAKASSIGNMENTS":
		w.record(t.Kind, "(XYA)")
		for i := range t.Y {
			w.out = append(w.out, "("+exact(t.X[i])+", "+strings.Trim(exact(t.Y[i]), "?")+", <>)\r\n"...)
		}
	default:
		w.record(t.Kind, "(XY..XY)")
		w.pairs(t)
	}
}

func (w *writer) pairs(t *Table) {
	for i := range t.Y {
		w.out = append(w.out, exact(t.X[i])+", "+exact(t.Y[i])+"\r\n"...)
	}
}

// page writes one page of NTUPLES; every page repeats its rows.
func (w *writer) page(t *Table) {
	y, factor, whole := w.tabulated(t)
	w.record("PAGE", t.Page)
	w.record("SYMBOL", t.XSymbol+", "+t.YSymbol)
	w.record("VAR_TYPE", "INDEPENDENT, DEPENDENT")
	w.record("UNITS", t.XUnits+", "+t.YUnits)
	w.record("FACTOR", "1, "+exact(factor))
	w.record("NPOINTS", strconv.Itoa(len(y)))
	if !t.Steady {
		w.record("DATA TABLE", "("+t.XSymbol+t.YSymbol+".."+t.XSymbol+t.YSymbol+"), PEAKS")
		w.pairs(t)
		return
	}
	w.record("FIRST", exact(t.X[0])+",")
	w.record("LAST", exact(t.X[len(t.X)-1])+",")
	w.record("DATA TABLE", "("+t.XSymbol+"++("+t.YSymbol+".."+t.YSymbol+")), XYDATA")
	w.steady(t, y, whole)
}

// exact prints a number so that it reads back the same; '?' stands for a
// missing one.
func exact(v float64) string {
	if v != v {
		return "?"
	}
	s := strconv.FormatFloat(v, 'f', -1, 64)
	if len(s) > 17 {
		s = strconv.FormatFloat(v, 'E', -1, 64)
	}
	return s
}

func (w *writer) steady(t *Table, y []float64, whole bool) {
	if whole {
		w.differences(t, y)
		return
	}
	for i := 0; i < len(y); {
		line := exact(t.X[i])
		for n := 0; i < len(y); n++ {
			item := " " + exact(y[i])
			if n > 0 && len(line)+len(item) > maxLine {
				break
			}
			line += item
			i++
		}
		w.out = append(append(w.out, line...), '\r', '\n')
	}
}

// differences writes the DIF form with repeat counts. A line that ends in a
// difference is followed by one that repeats its last ordinate as a check.
func (w *writer) differences(t *Table, y []float64) {
	line := append([]byte(exact(t.X[0])), pseudo(int64(y[0]), "@ABCDEFGHI", "@abcdefghi")...)
	dif := false // the line ends in a difference
	end := func() { w.out = append(append(w.out, line...), '\r', '\n') }
	for i := 1; i < len(y); {
		item, n := w.item(y, i)
		if len(line)+len(item) > maxLine {
			end()
			at := i
			if dif {
				at--
			}
			line = append(line[:0], exact(t.X[at])...)
			if !dif {
				// the line before ends in an actual or missing ordinate: begin anew with the next
				line = append(line, first(y[i])...)
				i++
				dif = false
				continue
			}
			line = append(line, first(y[at])...)
		}
		dif = y[i] == y[i] && y[i-1] == y[i-1]
		line = append(line, item...)
		i += n
	}
	end()
	if dif {
		line = append(append(line[:0], exact(t.X[len(y)-1])...), first(y[len(y)-1])...)
		end()
	}
}

// first writes an ordinate that does not depend on the one before.
func first(v float64) string {
	if v != v {
		return "?"
	}
	return pseudo(int64(v), "@ABCDEFGHI", "@abcdefghi")
}

// item writes ordinate i and those after it that repeat its difference.
func (w *writer) item(y []float64, i int) (s string, n int) {
	if y[i] != y[i] || y[i-1] != y[i-1] {
		return first(y[i]), 1
	}
	step := y[i] - y[i-1]
	for n = 1; i+n < len(y) && y[i+n]-y[i+n-1] == step; n++ {
	}
	s = pseudo(int64(step), "%JKLMNOPQR", "%jklmnopqr")
	if n > 1 {
		s += pseudo(int64(n), "0STUVWXYZs", "")
	}
	return s, n
}

// pseudo writes a number whose first digit carries sign and separator.
func pseudo(v int64, up, down string) string {
	table := up
	if v < 0 {
		table, v = down, -v
	}
	s := []byte(strconv.FormatInt(v, 10))
	s[0] = table[s[0]-'0']
	return string(s)
}
