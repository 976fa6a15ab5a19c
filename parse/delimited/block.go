package delimited

import (
	"bytes"
	"math"

	"pkvigil/parse"
)

// A block is a run of lines that hold numbers in the same number of fields.
type block struct {
	first, last int // indices of lines
	cols        int // fields per line
	off         int // where its cells begin in grid.vals
	rows        int
}

// A grid is everything numeric in a file under one dialect.
type grid struct {
	d      dialect
	vals   []float64
	decs   []int8 // decimals of each value, or what the cell is instead
	blocks []block
}

func (g *grid) value(b block, row, col int) float64 { return g.vals[b.off+row*b.cols+col] }
func (g *grid) kind(b block, row, col int) int8     { return g.decs[b.off+row*b.cols+col] }

// numeric appends the cells of a line and reports their number; 0 means that
// the line is no row of numbers. The first cell that is not empty must be a
// number, at least half of the cells numbers, marks or empty.
func (d *dialect) numeric(line []byte, vals []float64, decs []int8, fields [][]byte) ([]float64, []int8, int, [][]byte) {
	if !d.joined {
		if v, c, n := d.fast(line, vals, decs); n > 0 {
			return v, c, n, fields
		}
	}
	fields = d.split(line, fields[:0])
	if d.joined {
		return d.join(vals, decs, fields)
	}
	n0 := len(vals)
	numbers, texts := 0, 0
	for _, f := range fields {
		v, dec := d.number(f)
		switch {
		case dec == cellText:
			texts++
		case dec >= parse.Exponential:
			numbers++
		}
		if numbers == 0 && (texts > 0 || dec == cellMissing) {
			return vals[:n0], decs[:n0], 0, fields
		}
		vals, decs = append(vals, v), append(decs, dec)
	}
	if numbers == 0 || texts > (len(fields)-texts)/2 {
		return vals[:n0], decs[:n0], 0, fields
	}
	return vals, decs, len(fields), fields
}

// fast reads a line of plain numbers in one pass without cutting it first.
func (d *dialect) fast(line []byte, vals []float64, decs []int8) ([]float64, []int8, int) {
	if len(d.marks) > 0 {
		return vals, decs, 0
	}
	n0, i := len(vals), 0
	delim, point := d.delim, d.point
	for {
		for i < len(line) && (line[i] == ' ' || line[i] == '\t' && delim != '\t') {
			i++
		}
		v, dec, k := parse.Prefix(line[i:], point)
		if k == 0 {
			return vals[:n0], decs[:n0], 0
		}
		vals, decs = append(vals, v), append(decs, int8(min(dec, 99)))
		if i += k; i == len(line) {
			return vals, decs, len(vals) - n0
		}
		if line[i] == delim && delim != ' ' {
			if i++; i < len(line) {
				continue
			}
			vals, decs = append(vals, math.NaN()), append(decs, cellEmpty)
			return vals, decs, len(vals) - n0
		}
		from := i
		for i < len(line) && (line[i] == ' ' || line[i] == '\t' && delim != '\t') {
			i++
		}
		switch {
		case i == len(line):
			return vals, decs, len(vals) - n0
		case delim == ' ' && i > from:
		case line[i] == delim:
			if i++; i == len(line) {
				vals, decs = append(vals, math.NaN()), append(decs, cellEmpty)
				return vals, decs, len(vals) - n0
			}
		default:
			return vals[:n0], decs[:n0], 0
		}
	}
}

// join puts neighbouring fields together where the comma both delimits fields
// and marks decimals. With an odd number of fields the first stands alone.
func (d *dialect) join(vals []float64, decs []int8, fields [][]byte) ([]float64, []int8, int, [][]byte) {
	n0 := len(vals)
	fail := func() ([]float64, []int8, int, [][]byte) { return vals[:n0], decs[:n0], 0, fields }
	if len(fields) < 3 {
		return fail()
	}
	i := 0
	if len(fields)%2 == 1 {
		v, dec, ok := parse.Float(fields[0], '.')
		if !ok || dec != 0 {
			return fail()
		}
		vals, decs, i = append(vals, v), append(decs, 0), 1
	}
	var room [64]byte
	for ; i < len(fields); i += 2 {
		a, b := fields[i], fields[i+1]
		if len(b) == 0 || b[0]-'0' > 9 {
			return fail()
		}
		whole := append(append(append(room[:0], a...), '.'), b...)
		v, dec, ok := parse.Float(whole, '.')
		if !ok {
			return fail()
		}
		vals, decs = append(vals, v), append(decs, int8(min(dec, 99)))
	}
	return vals, decs, len(vals) - n0, fields
}

// survey reads every line under a dialect and collects the blocks.
func (d dialect) survey(s *source) *grid {
	g := &grid{d: d}
	g.vals = make([]float64, 0, 2*len(s.spans)+16)
	g.decs = make([]int8, 0, 2*len(s.spans)+16)
	var fields [][]byte
	var open *block
	for i := range s.spans {
		n0 := len(g.vals)
		var n int
		g.vals, g.decs, n, fields = d.numeric(s.line(i), g.vals, g.decs, fields)
		if n == 0 {
			open = nil
			continue
		}
		if open != nil && n != open.cols {
			n = g.reconcile(open, n0, n)
		}
		if open == nil || n != open.cols {
			g.blocks = append(g.blocks, block{first: i, cols: n, off: n0})
			open = &g.blocks[len(g.blocks)-1]
		}
		open.last = i
		open.rows++
	}
	return g
}

// reconcile lets a line with more or fewer fields join the open block when
// the difference is nothing but empty fields at the end.
func (g *grid) reconcile(open *block, n0, n int) int {
	for n > open.cols && g.decs[n0+n-1] == cellEmpty {
		n--
	}
	g.vals, g.decs = g.vals[:n0+n], g.decs[:n0+n]
	if n >= open.cols {
		return n
	}
	end := open.off + (open.rows-1)*open.cols
	for c := n; c < open.cols; c++ {
		if k := g.decs[end+c]; k != cellEmpty {
			return n
		}
	}
	for ; n < open.cols; n++ {
		g.vals, g.decs = append(g.vals, math.NaN()), append(g.decs, cellEmpty)
	}
	return n
}

// hopeful tells from a few lines spread over the file whether a dialect reads
// rows of at least two numbers at all.
func (d dialect) hopeful(s *source) bool {
	var vals []float64
	var decs []int8
	var fields [][]byte
	const looks = 9
	n := len(s.spans)
	for k := range min(looks, n) {
		at := n/2 + (1-2*(k%2))*((k+1)/2)*n/(looks+1) // the middle first, then outward
		line := s.line(min(max(at, 0), n-1))
		if d.delim != ' ' && bytes.IndexByte(line, d.delim) < 0 || d.delim == ' ' && bytes.IndexByte(line, ' ') < 0 && bytes.IndexByte(line, '\t') < 0 {
			continue
		}
		var cols int
		vals, decs, cols, fields = d.numeric(line, vals[:0], decs[:0], fields)
		if cols >= 2 {
			return true
		}
	}
	return false
}

// longest is the block of at least two columns with the most rows; ok is
// false when there is none. A block beginning at the declared line wins.
func (g *grid) longest(declared int) (block, bool) {
	var best block
	for _, b := range g.blocks {
		if b.cols < 2 {
			continue
		}
		if declared > 0 && b.first <= declared-1 && declared-1 <= b.last {
			skip := declared - 1 - b.first
			b.first, b.off, b.rows = b.first+skip, b.off+skip*b.cols, b.rows-skip
			return b, true
		}
		if b.rows > best.rows {
			best = b
		}
	}
	return best, best.rows > 0 && declared == 0
}

// trim drops columns at the end in which every cell is empty.
func (g *grid) trim(b block) block {
	used := b.cols
	for used > 1 {
		for r := range b.rows {
			if g.kind(b, r, used-1) != cellEmpty {
				return g.narrow(b, used)
			}
		}
		used--
	}
	return g.narrow(b, used)
}

func (g *grid) narrow(b block, used int) block {
	if used == b.cols {
		return b
	}
	for r := range b.rows {
		copy(g.vals[b.off+r*used:b.off+(r+1)*used], g.vals[b.off+r*b.cols:])
		copy(g.decs[b.off+r*used:b.off+(r+1)*used], g.decs[b.off+r*b.cols:])
	}
	b.cols = used
	return b
}

// monotone is +1 for strictly ascending, -1 for strictly descending, 0 else;
// bad is the first row that breaks the order the first two rows set.
func (g *grid) monotone(b block, col int) (dir, bad int) {
	prev := math.NaN()
	for r := range b.rows {
		v := g.value(b, r, col)
		if g.kind(b, r, col) < parse.Exponential {
			return 0, r
		}
		switch {
		case r == 0:
		case r == 1 && v > prev:
			dir = 1
		case r == 1 && v < prev:
			dir = -1
		case r == 1, dir > 0 && v <= prev, dir < 0 && v >= prev:
			return 0, r
		}
		prev = v
	}
	return dir, -1
}
