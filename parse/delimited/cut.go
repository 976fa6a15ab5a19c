package delimited

import (
	"bytes"
	"fmt"
	"math"

	"pkvigil/parse"
)

// A file that ends without a line end may have been cut inside its last
// number or word. What cannot be told from a whole one is not used.

func (r *reader) cutShort(line, cols int) error {
	return r.refuse(line+1, "", fmt.Sprintf("%s without a line end", parse.Show(r.src.line(line))),
		fmt.Sprintf("%d complete fields as in the lines before", cols), "the file is cut short; export it again")
}

// partial tells whether a line could be the beginning of a row.
func (d dialect) partial(line []byte) bool {
	v := d.split(line, nil)
	if len(v) == 0 {
		return false
	}
	_, k := d.number(v[0])
	return k >= parse.Exponential
}

// whole is what the last field of an unterminated file can be.
type whole int

const (
	complete whole = iota // as long as its fellows, which all are equally long
	shorter               // shorter than all of them
	doubtful              // its fellows differ in length
)

const leastFellows = 2 // fewer equally long fields prove nothing

// judge compares the last field with those above it in its column: by the
// decimals where all are plain numbers, else by length.
func judge(last []byte, kind int8, above func(i int) ([]byte, int8), n int) whole {
	if n < leastFellows {
		return doubtful
	}
	size := func(cell []byte, kind int8) int {
		if kind >= 0 {
			return int(kind)
		}
		return len(cell)
	}
	own := size(last, kind)
	low, high := math.MaxInt, -1
	for i := range n {
		cell, k := above(i)
		if (k >= 0) != (kind >= 0) {
			return doubtful
		}
		low, high = min(low, size(cell, k)), max(high, size(cell, k))
	}
	switch {
	case own < low:
		return shorter
	case low == high:
		return complete
	}
	return doubtful
}

// truncated checks the last number of a table of scans where the file ends in
// it without a line end. One that may have lost digits is masked.
func (r *reader) truncated(a *reading) error {
	if !r.src.open || a.b.last != len(r.src.spans)-1 {
		return nil
	}
	c, rows := a.b.cols-1, a.b.rows
	if a.shape == "rows" {
		// The fellows of the last number are the others of its row.
		cells := a.d.split(r.src.line(a.b.last), nil)
		return r.lastNumber(a, cells[len(cells)-1], func(i int) ([]byte, int8) { return cells[i+1], a.g.kind(a.b, rows-1, i) }, c)
	}
	cells := func(i int) ([]byte, int8) {
		k := a.g.kind(a.b, i, c)
		if k >= 0 {
			return nil, k
		}
		return []byte(r.cell(a, i, c)), k
	}
	last, _ := cells(rows - 1)
	return r.lastNumber(a, last, cells, rows-1)
}

func (r *reader) lastNumber(a *reading, last []byte, above func(int) ([]byte, int8), n int) error {
	kind := a.g.kind(a.b, a.b.rows-1, a.b.cols-1)
	if kind < parse.Exponential && len(last) < 2 { // nothing, or a lone sign that began a number
		return r.cutShort(a.b.last, a.b.cols)
	}
	switch judge(last, kind, above, n) {
	case shorter:
		return r.cutShort(a.b.last, a.b.cols)
	case complete:
		r.remark(a.b.last+1, "the file does not end with a line end; the last line has as many digits as the others")
		return nil
	}
	at := a.b.off + a.b.rows*a.b.cols - 1
	a.g.vals[at], a.g.decs[at] = math.NaN(), cellMissing
	r.remark(a.b.last+1, "the file does not end with a line end; the last number may have lost digits and is masked")
	return nil
}

// cutTable refuses a labelled table whose last row may lack its end.
func (r *reader) cutTable(t *table) error {
	if !r.src.open || len(t.rows) == 0 {
		return nil
	}
	last := t.rows[len(t.rows)-1]
	if last.line != len(r.src.spans) {
		return nil
	}
	c := len(last.cells) - 1
	if len(last.cells) < len(t.heads) || unclosed(r.src.line(last.line-1)) && !bytes.ContainsRune(last.cells[c], '"') {
		return r.cutShort(last.line-1, len(t.heads))
	}
	_, kind := t.d.number(last.cells[c])
	above := func(i int) ([]byte, int8) {
		cells := t.rows[i].cells
		if c >= len(cells) {
			return nil, cellEmpty
		}
		_, k := t.d.number(cells[c])
		return cells[c], k
	}
	switch judge(last.cells[c], kind, above, len(t.rows)-1) {
	case complete:
		r.remark(last.line, "the file does not end with a line end; the last row is as long as the others")
		return nil
	case shorter:
		return r.cutShort(last.line-1, len(t.heads))
	}
	return r.refuse(last.line, "", fmt.Sprintf("%s without a line end", parse.Show(r.src.line(last.line-1))), "a last row that is surely whole",
		"its last field may be cut short; export the file again, or end it with a line end")
}
