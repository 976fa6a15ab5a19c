package jcamp

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"strconv"
	"strings"

	"pkvigil/parse"
)

func isTable(key string) bool {
	switch key {
	case "XYDATA", "XYPOINTS", "PEAKTABLE", "PEAKASSIGNMENTS", "RADATA", "DATATABLE":
		return true
	}
	return false
}

// frame is what the header says about a table.
type frame struct {
	first, last, delta          float64
	hasFirst, hasLast, hasDelta bool
	xf, yf                      float64
	n                           int // -1: not stated
	point                       byte
}

// table decodes the table of a record into block at.
func (d *decoder) table(at int, key string, value []byte, r record) {
	b := &d.file.Blocks[at]
	t := Table{Kind: key, Line: r.line, Declared: -1, XSymbol: "X", YSymbol: "Y", YFactor: 1}
	if key == "RADATA" {
		t.XSymbol, t.YSymbol = "R", "A"
	}
	b.Tables = append(b.Tables, t)
	p := &b.Tables[len(b.Tables)-1]
	err := d.fill(b, p, value, r)
	if err != nil {
		var e *parse.Error
		if !errors.As(err, &e) {
			e = &parse.Error{File: d.name, Line: r.line, Field: key, Err: err}
		}
		p.Err, p.X, p.Y = e, nil, nil
	}
	d.budget -= len(p.Y)
}

// fill reads list, header and data of a table.
func (d *decoder) fill(b *Block, t *Table, value []byte, r record) error {
	l, err := d.list(t, value)
	if err != nil {
		return err
	}
	f, err := d.frame(b, t, &l)
	if err != nil {
		return err
	}
	t.Declared, t.YFactor, t.Steady = f.n, f.yf, l.steady
	if f.xf < 0 || f.yf < 0 {
		t.note(r.line, "a negative factor, applied as it stands")
	}
	if f.n > d.budget {
		return d.fail(b.at("NPOINTS"), "NPOINTS", strconv.Itoa(f.n), fmt.Sprintf("at most %d in a file of this size", d.budget), "correct the header or split the file")
	}
	switch {
	case l.steady:
		err = d.steady(t, f, r)
	case l.text:
		err = d.assignments(t, f, l, r)
	default:
		err = d.groups(t, f, l, r)
	}
	if err != nil {
		return err
	}
	if !l.steady {
		if err := d.counted(t, f, r); err != nil {
			return err
		}
	}
	for i, v := range t.Y {
		if math.IsInf(v, 0) || math.IsInf(t.X[i], 0) || t.X[i] != t.X[i] {
			return d.fail(r.line, t.Kind, "a number beyond 1.8e308 after multiplication with its factor", "finite numbers", "correct the factors")
		}
	}
	d.compare(b, t, f)
	return nil
}

// counted compares the number of points with the header. Never more than the
// stated number are decoded before.
func (d *decoder) counted(t *Table, f frame, r record) error {
	switch n := len(t.Y); {
	case n == 0:
		return d.fail(r.line, t.Kind, "an empty table", "data on the lines below", "export the file again")
	case f.n >= 0 && n != f.n:
		end := r.line + 1 + bytes.Count(bytes.TrimRight(r.body, "\n"), []byte{'\n'})
		return d.fail(end, t.Kind, fmt.Sprintf("%d points", n), fmt.Sprintf("%d as the header says", f.n), "the table is cut or damaged; export the file again")
	case f.n < 0:
		t.note(r.line, "no NPOINTS: the count of %d cannot be checked", n)
	}
	return nil
}

// list is a variable list taken apart.
type list struct {
	steady bool // (X++(Y..Y))
	text   bool // groups in parentheses that end in a text
	size   int  // numbers of a group
	x, y   int  // places of abscissa and ordinate in a group; y is -1 where there is none
}

// list reads the variable list behind the label of a table.
func (d *decoder) list(t *Table, value []byte) (list, error) {
	raw := trim(value)
	t.List = parse.Clean(raw)
	s := strings.ToUpper(strings.Map(func(c rune) rune {
		if c == ' ' || c == '\t' {
			return -1
		}
		return c
	}, string(raw[:min(len(raw), 200)])))
	form, rest, closed := cutList(s)
	switch {
	case s == "":
		form = map[string]string{"XYDATA": "X++(Y..Y)", "XYPOINTS": "XY..XY", "PEAKTABLE": "XY..XY"}[t.Kind]
		if form == "" {
			return list{}, d.fail(t.Line, t.Kind, "no variable list", "such as (XY..XY)", "complete the line")
		}
		t.note(t.Line, "no variable list; read as (%s)", form)
	case !closed:
		t.note(t.Line, "variable list without its closing parenthesis: %s", parse.Show(raw))
	case rest != "" && (t.Kind != "DATATABLE" || rest[0] != ','):
		return list{}, d.fail(t.Line, t.Kind, parse.Show(raw), "a variable list alone on the line", "put the numbers on the next line")
	}
	if x, y, ok := strings.Cut(form, "++("); ok {
		a, z, ok := strings.Cut(strings.TrimRight(y, ")"), "..")
		if !ok || a != z || x == a || !word(x) || !word(a) {
			return list{}, d.badList(t, raw)
		}
		if t.Kind != "DATATABLE" && (x != t.XSymbol || a != t.YSymbol) {
			return list{}, d.badList(t, raw)
		}
		t.XSymbol, t.YSymbol = x, a
		return list{steady: true}, nil
	}
	if t.Kind == "PEAKASSIGNMENTS" && !strings.Contains(form, "..") {
		return d.lettered(t, raw, strings.TrimSuffix(form, "A"), strings.HasSuffix(form, "A"))
	}
	a, z, ok := strings.Cut(form, "..")
	if !ok || a != z {
		return list{}, d.badList(t, raw)
	}
	if t.Kind == "XYDATA" {
		t.note(t.Line, "XYDATA holds pairs")
	}
	if t.Kind == "DATATABLE" {
		return d.symbols(t, raw, a)
	}
	return d.lettered(t, raw, a, false)
}

// cutList takes the outer parentheses off.
func cutList(s string) (form, rest string, closed bool) {
	if !strings.HasPrefix(s, "(") {
		return s, "", false
	}
	depth := 0
	for i, c := range s {
		switch c {
		case '(':
			depth++
		case ')':
			if depth--; depth == 0 {
				return s[1:i], s[i+1:], true
			}
		}
	}
	return s[1:], "", false
}

func (d *decoder) badList(t *Table, raw []byte) error {
	return d.fail(t.Line, t.Kind, parse.Show(raw), "a published variable list such as (X++(Y..Y)) or (XY..XY)", "the form of the table is not known")
}

// word tells whether a symbol is made of letters and digits.
func word(s string) bool {
	return s != "" && strings.Trim(s, "ABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789") == ""
}

// lettered reads a group of one-letter variables.
func (d *decoder) lettered(t *Table, raw []byte, group string, text bool) (list, error) {
	l := list{size: len(group), x: strings.IndexByte(group, 'X'), y: strings.IndexByte(group, 'Y'), text: text}
	if l.x != 0 || l.size > 8 || l.y < 0 && !text || strings.Count(group, "X") != 1 || strings.Count(group, "Y") > 1 || strings.Trim(group, "ABCDEFGHIJKLMNOPQRSTUVWXYZ") != "" {
		return list{}, d.badList(t, raw)
	}
	return l, nil
}

// frame collects the header of a table outside NTUPLES, or asks for the rows
// of NTUPLES.
func (d *decoder) frame(b *Block, t *Table, l *list) (frame, error) {
	if t.Kind == "DATATABLE" {
		return d.tupleFrame(b, t, l)
	}
	f := frame{n: -1, xf: 1, yf: 1, point: '.'}
	sx, sy := t.XSymbol, t.YSymbol
	t.XUnits, t.YUnits = parse.Clean(b.get(sx+"UNITS")), parse.Clean(b.get(sy+"UNITS"))
	for _, key := range [...]string{sx + "UNITS", sy + "UNITS", sx + "FACTOR", sy + "FACTOR", "FIRST" + sx, "LAST" + sx, "NPOINTS"} {
		if i, ok := b.index["\x00"+key]; ok {
			return f, d.fail(b.Records[i].Line, key, "a second, different value "+parse.Show(b.Records[i].Value), "one value", "the header contradicts itself; export the file again")
		}
	}
	var err error
	if f.point, err = d.decimalSign(b); err != nil {
		return f, err
	}
	if f.point == ',' {
		t.note(b.at("FIRST"+sx), "decimal commas, as the header shows")
	}
	number := func(key string, v *float64) bool {
		s, ok := b.index[key]
		if !ok || err != nil {
			return false
		}
		if b.Records[s].Value == "" {
			t.note(b.Records[s].Line, "%s without a value", key)
			return false
		}
		*v, err = d.headNumber(b, key, f.point)
		return err == nil
	}
	var n float64
	counted := number("NPOINTS", &n)
	f.hasFirst, f.hasLast, f.hasDelta = number("FIRST"+sx, &f.first), number("LAST"+sx, &f.last), number("DELTA"+sx, &f.delta)
	hasXF, hasYF := number(sx+"FACTOR", &f.xf), number(sy+"FACTOR", &f.yf)
	if err != nil {
		return f, err
	}
	if counted {
		if f.n = int(n); n < 1 || n > 1e9 || float64(f.n) != n {
			return f, d.fail(b.at("NPOINTS"), "NPOINTS", parse.Show(b.get("NPOINTS")), "a whole number from 1", "correct the header")
		}
	}
	if l.steady && (!hasXF || !hasYF) {
		t.note(t.Line, "factors not stated are taken as 1")
	}
	if f.xf == 0 || f.yf == 0 {
		return f, d.fail(t.Line, sx+"FACTOR", "a factor of 0", "another number", "correct the header")
	}
	return f, nil
}

// headNumber reads the one number of a record.
func (d *decoder) headNumber(b *Block, key string, point byte) (float64, error) {
	if key == "NPOINTS" { // some write 6.000, whatever the decimal sign elsewhere
		point = '.'
	}
	v, _, ok := parse.Float([]byte(b.get(key)), point)
	if !ok {
		return 0, d.fail(b.at(key), key, parse.Show(b.get(key)), "one number", "correct the header")
	}
	return v, nil
}

// decimalSign tells from the header whether a block is written with decimal
// commas. A single comma between digits is one; a point elsewhere contradicts.
func (d *decoder) decimalSign(b *Block) (byte, error) {
	commas, points := "", ""
	for _, key := range [...]string{"FIRSTX", "LASTX", "XFACTOR", "YFACTOR", "FIRSTY", "DELTAX", "MAXX", "MINX", "MAXY", "MINY"} {
		s := b.get(key)
		comma, point := strings.IndexByte(s, ',') >= 0, strings.IndexByte(s, '.') >= 0
		switch {
		case comma && point:
			return 0, d.fail(b.at(key), key, parse.Show(s), "one number", "correct the header")
		case comma:
			commas = key
		case point:
			points = key
		}
	}
	switch {
	case commas != "" && points != "":
		return 0, d.fail(b.at(commas), commas, parse.Show(b.get(commas)), "a decimal point as in "+points, "the header mixes decimal signs; export the file again")
	case commas != "":
		return ',', nil
	}
	return '.', nil
}

// groups reads (XY..XY) and longer groups: numbers between commas, semicolons
// and blanks; the end of a line also ends a group.
func (d *decoder) groups(t *Table, f frame, l list, r record) error {
	limit := d.budget
	if f.n >= 0 {
		limit = f.n
	}
	room := min(limit, len(r.body)/(2*l.size)+1)
	t.X, t.Y = make([]float64, 0, room), make([]float64, 0, room)
	var g [8]float64
	line := r.line
	for raw := range bytes.SplitSeq(r.body, []byte{'\n'}) {
		line++
		b, k := uncomment(raw), 0
		for i := 0; ; {
			for i < len(b) && separator(b[i]) {
				i++
			}
			if i >= len(b) {
				break
			}
			v, dec, n := item(b[i:], f.point)
			if n == 0 {
				return d.fail(line, t.Kind, parse.Show(b[i:]), "a number", "the line is damaged; export the file again")
			}
			if i += n; k == l.y {
				t.printed(dec, v)
			}
			if g[k] = v; k+1 < l.size {
				k++
				continue
			}
			if k = 0; len(t.Y) >= limit {
				return d.fail(line, t.Kind, fmt.Sprintf("more than %d points", limit), fmt.Sprintf("%d", limit), "the header or the table is damaged; export the file again")
			}
			if math.IsNaN(g[l.x]) {
				return d.fail(line, t.Kind, "a missing abscissa", "a number", "the line is damaged; export the file again")
			}
			t.X, t.Y = append(t.X, g[l.x]*f.xf), append(t.Y, g[l.y]*f.yf)
		}
		if k != 0 {
			return d.fail(line, t.Kind, parse.Show(trim(b)), fmt.Sprintf("groups of %d numbers", l.size), "the line is damaged or its decimal sign is not the one of the header; export the file again")
		}
	}
	return nil
}

func separator(c byte) bool {
	return c == ' ' || c == ',' || c == ';' || c == '\t' || c == '\r' || c == '\v' || c == '\f' || c == 0x1a
}

// item reads a number that must be followed by a separator, or a '?'.
func item(b []byte, point byte) (v float64, decimals, n int) {
	if b[0] == '?' {
		if len(b) > 1 && !separator(b[1]) {
			return 0, 0, 0
		}
		return math.NaN(), 0, 1
	}
	v, decimals, n = parse.Prefix(b, point)
	if n > 1 && b[n-1] == ',' { // a comma before a blank separates
		n--
	}
	if n < len(b) && !separator(b[n]) {
		return 0, 0, 0
	}
	return v, decimals, n
}

// printed keeps count of decimals and missing values.
func (t *Table) printed(decimals int, v float64) {
	switch {
	case v != v:
		t.Missing++
	case decimals == parse.Exponential || t.Decimals < 0:
		t.Decimals = parse.Exponential
	case decimals > t.Decimals:
		t.Decimals = decimals
	}
	t.Forms |= AFFN
}

// assignments reads groups in parentheses, (x, y, <text>).
func (d *decoder) assignments(t *Table, f frame, l list, r record) error {
	limit := d.budget
	if f.n >= 0 {
		limit = f.n
	}
	line := r.line
	for raw := range bytes.SplitSeq(r.body, []byte{'\n'}) {
		line++
		b := trim(uncomment(raw))
		for len(b) > 0 {
			g, rest, err := group(b, f.point, l.size)
			if err != nil {
				return d.fail(line, t.Kind, parse.Show(b), "groups such as (x, y, <text>)", err.Error())
			}
			b = rest
			y := math.NaN()
			if l.y >= 0 {
				y = g[l.y] * f.yf
			}
			if len(t.Y) >= limit {
				return d.fail(line, t.Kind, fmt.Sprintf("more than %d groups", limit), fmt.Sprintf("%d", limit), "the header or the table is damaged; export the file again")
			}
			if t.printed(0, y); math.IsNaN(g[l.x]) {
				return d.fail(line, t.Kind, "a missing abscissa", "a number", "the line is damaged")
			}
			t.X, t.Y = append(t.X, g[l.x]*f.xf), append(t.Y, y)
		}
	}
	return nil
}

// group takes the numbers of one group and skips its text.
func group(b []byte, point byte, size int) (g [8]float64, rest []byte, err error) {
	if b[0] != '(' {
		return g, nil, errors.New("a group opens with a parenthesis")
	}
	b = b[1:]
	for k := range size {
		b = bytes.TrimLeft(b, " \t")
		v, _, n := parse.Prefix(b, point)
		if n > 1 && b[n-1] == ',' {
			n--
		}
		if g[k] = v; n == 0 {
			g[k] = math.NaN()
		}
		b = bytes.TrimLeft(b[n:], " \t")
		if len(b) == 0 || b[0] != ',' {
			return g, nil, errors.New("members of a group stand between commas")
		}
		b = b[1:]
	}
	open := bytes.IndexByte(b, '<')
	end := bytes.IndexByte(b, '>')
	if open < 0 || end < open {
		return g, nil, errors.New("a group ends in a text between < and >")
	}
	b = bytes.TrimLeft(b[end+1:], " \t")
	if len(b) == 0 || b[0] != ')' {
		return g, nil, errors.New("a group closes with a parenthesis")
	}
	return g, trim(b[1:]), nil
}
