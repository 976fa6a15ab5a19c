package jcamp

import (
	"slices"
	"strings"

	"pkvigil/parse"
)

// tuples is the state of an NTUPLES section: one value per symbol in every
// row; rows below ##PAGE= hold for that page.
type tuples struct {
	base, page map[string][]string
	name       string // of the page
	paged      bool
}

// pageLabel tells the labels of NTUPLES that may repeat in a block.
func pageLabel(key string) bool {
	switch key {
	case "PAGE", "ENDNTUPLES", "NTUPLES", "VARNAME", "SYMBOL", "VARTYPE", "VARFORM", "VARDIM", "UNITS", "FIRST", "LAST", "MIN", "MAX", "FACTOR", "NPOINTS":
		return true
	}
	return false
}

// tuple lets a record of an NTUPLES section take effect.
func (d *decoder) tuple(depth int, key, value string) {
	switch key {
	case "NTUPLES":
		d.tuples[depth] = &tuples{base: map[string][]string{}}
		return
	case "ENDNTUPLES":
		d.tuples[depth] = nil
		return
	}
	n := d.tuples[depth]
	if n == nil || !pageLabel(key) {
		return
	}
	switch {
	case key == "PAGE":
		n.name, n.page, n.paged = parse.Clean(value), map[string][]string{}, true
	case key == "NPOINTS" && !n.paged: // of the block, not of a page
	case n.paged:
		n.page[key] = row(value)
	default:
		n.base[key] = row(value)
	}
}

// row cuts a comma list; an empty entry keeps its place.
func row(value string) []string {
	out := strings.Split(strings.ReplaceAll(value, "\n", " "), ",")
	for i, s := range out {
		out[i] = strings.Trim(s, " \t")
	}
	return out
}

func (n *tuples) symbolRow() []string {
	if r, ok := n.page["SYMBOL"]; ok {
		return r
	}
	return n.base["SYMBOL"]
}

// entry is what a row says about symbol i on this page.
func (n *tuples) entry(key string, i int) string {
	if r := n.page[key]; i < len(r) && r[i] != "" {
		return r[i]
	}
	if r := n.base[key]; i < len(r) {
		return r[i]
	}
	return ""
}

func (d *decoder) section() *tuples { return d.tuples[len(d.open)-1] }

// symbols reads a group of named variables such as "F2Y" or "XYT": the first
// independent one is the abscissa, the first dependent one the ordinate.
func (d *decoder) symbols(t *Table, raw []byte, group string) (list, error) {
	n := d.section()
	if n == nil {
		return list{}, d.fail(t.Line, t.Kind, "a DATA TABLE outside NTUPLES", "##NTUPLES= before it", "the header is damaged; export the file again")
	}
	names := n.symbolRow()
	l := list{x: -1, y: -1}
	for group != "" {
		size := 1 // a letter and the digits behind it
		for size < len(group) && group[size]-'0' <= 9 {
			size++
		}
		at := slices.IndexFunc(names, func(s string) bool { return strings.EqualFold(s, group[:size]) })
		if at < 0 || l.size >= 8 || !word(group[:size]) {
			return list{}, d.badList(t, raw)
		}
		switch dependent := strings.HasPrefix(strings.ToUpper(n.entry("VARTYPE", at)), "DEP"); {
		case !dependent && l.x < 0:
			l.x, t.XSymbol = l.size, group[:size]
		case !dependent:
			return list{}, d.fail(t.Line, t.Kind, parse.Show(raw), "one independent variable", "tables of two dimensions are not read")
		case l.y < 0:
			l.y, t.YSymbol = l.size, group[:size]
		}
		group, l.size = group[size:], l.size+1
	}
	if l.x < 0 || l.y < 0 {
		return list{}, d.badList(t, raw)
	}
	return l, nil
}

// tupleFrame collects the header of a page.
func (d *decoder) tupleFrame(b *Block, t *Table, l *list) (frame, error) {
	f := frame{n: -1, xf: 1, yf: 1, point: '.'}
	n := d.section()
	if n == nil {
		return f, d.fail(t.Line, t.Kind, "a DATA TABLE outside NTUPLES", "##NTUPLES= before it", "the header is damaged; export the file again")
	}
	t.Page = n.name
	find := func(symbol string) int {
		return slices.IndexFunc(n.symbolRow(), func(s string) bool { return strings.EqualFold(s, symbol) })
	}
	ix, iy := find(t.XSymbol), find(t.YSymbol)
	if ix < 0 || iy < 0 {
		return f, d.fail(t.Line, t.Kind, parse.Show(t.List), "symbols of the row SYMBOL", "the header is damaged; export the file again")
	}
	t.XUnits, t.YUnits = parse.Clean(n.entry("UNITS", ix)), parse.Clean(n.entry("UNITS", iy))
	var err error
	number := func(key string, i int, v *float64) bool {
		s := n.entry(key, i)
		if s == "" || err != nil {
			return false
		}
		var ok bool
		if *v, _, ok = parse.Float([]byte(s), '.'); !ok {
			err = d.fail(b.at(key), key, parse.Show(s), "a number for "+n.symbolRow()[i], "correct the header")
		}
		return ok
	}
	var count float64
	counted := false
	if r := n.page["NPOINTS"]; len(r) == 1 {
		counted = number("NPOINTS", 0, &count)
	} else {
		counted = number("VARDIM", ix, &count)
	}
	f.hasFirst, f.hasLast = number("FIRST", ix, &f.first), number("LAST", ix, &f.last)
	number("FACTOR", ix, &f.xf)
	number("FACTOR", iy, &f.yf)
	if err != nil {
		return f, err
	}
	if counted {
		if f.n = int(count); count < 1 || count > 1e9 || float64(f.n) != count {
			return f, d.fail(b.at("VARDIM"), "VAR_DIM", parse.Show(n.entry("VARDIM", ix)), "a whole number from 1", "correct the header")
		}
	}
	if f.xf == 0 || f.yf == 0 {
		return f, d.fail(b.at("FACTOR"), "FACTOR", "a factor of 0", "another number", "correct the header")
	}
	return f, nil
}
