package delimited

import (
	"bytes"
	"math"

	"pkvigil/parse"
)

// A dialect is one way to cut a line into fields and to read a number.
type dialect struct {
	delim     byte // ',', ';', '\t', '|'; ' ' stands for any run of blanks
	point     byte // '.' or ','
	thousands byte // 0: none; ' ' stands for blanks and no-break spaces
	joined    bool // comma delimits fields and decimals alike: neighbouring fields belong together
	marks     []string
}

// Kinds of cells that are no numbers; numbers have their count of decimals
// (or parse.Exponential) instead.
const (
	cellMissing int8 = -2 // an overflow mark or a word for "nothing measured"
	cellEmpty   int8 = -3
	cellText    int8 = -4
)

func (d dialect) String() string {
	return "fields separated by " + delimiterWord(d.delim) + ", decimal " + map[byte]string{'.': "point", ',': "comma"}[d.point]
}

func delimiterWord(c byte) string {
	switch c {
	case '\t':
		return "tab"
	case ' ':
		return "space"
	case ',':
		return "comma"
	case ';':
		return "semicolon"
	}
	return string(rune(c))
}

// split cuts a line into trimmed fields, RFC 4180 quotes undone. The fields
// share the line's memory unless a doubled quote had to be undone.
func (d dialect) split(line []byte, dst [][]byte) [][]byte {
	if d.delim == ' ' {
		return splitBlanks(line, dst)
	}
	for {
		line = bytes.TrimLeft(line, trimSet(d.delim))
		var field []byte
		if len(line) > 0 && line[0] == '"' {
			var closed bool
			if field, line, closed = unquote(line[1:]); closed {
				k := bytes.IndexByte(line, d.delim)
				if k < 0 {
					return append(dst, field)
				}
				dst = append(dst, field)
				line = line[k+1:]
				continue
			}
			return append(dst, bytes.TrimSpace(field))
		}
		k := bytes.IndexByte(line, d.delim)
		if k < 0 || len(dst) == maxFields {
			return append(dst, bytes.TrimSpace(line))
		}
		dst = append(dst, bytes.TrimSpace(line[:k]))
		line = line[k+1:]
	}
}

func trimSet(delim byte) string {
	if delim == '\t' {
		return " "
	}
	return " \t"
}

// unquote reads up to the closing quote. closed is false where there is none.
func unquote(b []byte) (field, rest []byte, closed bool) {
	k := bytes.IndexByte(b, '"')
	if k < 0 {
		return b, nil, false
	}
	if k+1 == len(b) || b[k+1] != '"' {
		return b[:k], b[k+1:], true
	}
	var out []byte
	for {
		k = bytes.IndexByte(b, '"')
		if k < 0 {
			return append(out, b...), nil, false
		}
		out = append(out, b[:k]...)
		if k+1 < len(b) && b[k+1] == '"' {
			out = append(out, '"')
			b = b[k+2:]
			continue
		}
		return out, b[k+1:], true
	}
}

func splitBlanks(line []byte, dst [][]byte) [][]byte {
	for {
		line = bytes.TrimLeft(line, " \t")
		if len(line) == 0 || len(dst) == maxFields {
			return dst
		}
		if line[0] == '"' {
			if field, rest, closed := unquote(line[1:]); closed {
				dst, line = append(dst, field), rest
				continue
			}
		}
		k := bytes.IndexAny(line, " \t")
		if k < 0 {
			return append(dst, line)
		}
		dst, line = append(dst, line[:k]), line[k:]
	}
}

// number reads one cell: its value and its decimals, or what else it is.
func (d dialect) number(cell []byte) (float64, int8) {
	if len(cell) == 0 {
		return math.NaN(), cellEmpty
	}
	if v, dec, ok := parse.Float(cell, d.point); ok {
		if len(d.marks) > 0 && d.marked(cell) {
			return math.NaN(), cellMissing
		}
		return v, int8(min(dec, 99))
	}
	if d.thousands != 0 {
		if v, dec, ok := d.grouped(cell); ok {
			return v, dec
		}
	}
	if missing(cell) || d.marked(cell) {
		return math.NaN(), cellMissing
	}
	return math.NaN(), cellText
}

func (d dialect) marked(cell []byte) bool {
	for _, m := range d.marks {
		if string(cell) == m {
			return true
		}
	}
	return false
}

// grouped reads a number with thousands separators in correct groups of three.
func (d dialect) grouped(cell []byte) (float64, int8, bool) {
	var room [64]byte
	out := room[:0]
	run, groups := 0, 0
	for i := 0; i < len(cell); i++ {
		c := cell[i]
		sep := c == d.thousands
		if d.thousands == ' ' && bytes.HasPrefix(cell[i:], []byte("\u00a0")) {
			sep = true
			i++
		} else if d.thousands == ' ' && bytes.HasPrefix(cell[i:], []byte("\u202f")) {
			sep = true
			i += 2
		}
		switch {
		case sep:
			if run == 0 || run > 3 || groups > 0 && run != 3 {
				return 0, 0, false
			}
			run = 0
			groups++
		case c-'0' <= 9:
			run++
			out = append(out, c)
		case c == d.point:
			if groups > 0 && run != 3 {
				return 0, 0, false
			}
			out = append(out, cell[i:]...)
			v, dec, ok := parse.Float(out, d.point)
			return v, int8(min(dec, 99)), ok
		default:
			if len(out) > 0 || c != '-' && c != '+' {
				return 0, 0, false
			}
			out = append(out, c)
		}
	}
	if groups > 0 && run != 3 {
		return 0, 0, false
	}
	v, dec, ok := parse.Float(out, d.point)
	return v, int8(min(dec, 99)), ok
}

// missing tells whether a cell holds one of the usual marks of instruments
// for an overflow or for nothing measured (common practice, no source).
func missing(cell []byte) bool {
	if len(cell) > 12 {
		return filled(cell)
	}
	switch string(bytes.ToLower(cell)) {
	case "inf", "+inf", "-inf", "infinity", "-infinity", "∞", "+∞", "-∞", "1.#inf", "-1.#inf", "1.#qnan", "-1.#ind", "1.#ind",
		"nan", "-nan", "n/a", "na", "#n/a", "#num!", "#value!", "#div/0!", "null", "nil",
		"over", "ovr", "ovf", "ovl", "ovrflw", "overflow", "overrange", "over range", "saturated", "sat", "sat.", "under", "undef",
		"-", "--", "---", "----", "-----", "–", "—", "+++", "++++", "+++++", "?", "???", ".":
		return true
	}
	return filled(cell)
}

// filled tells whether a cell is two or more asterisks or hash marks.
func filled(cell []byte) bool {
	if len(cell) < 2 || cell[0] != '*' && cell[0] != '#' {
		return false
	}
	for _, c := range cell {
		if c != cell[0] {
			return false
		}
	}
	return true
}
