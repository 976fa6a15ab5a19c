package jcamp

import (
	"fmt"
	"math"
	"strconv"

	"pkvigil/parse"
)

// What the first character of an item tells: its form in the high bits, its
// first digit in the low ones (McDonald and Wilks 1988, Table VII).
const (
	isNumber   = 0x10 // digit, sign or point of a plain number
	isSQZ      = 0x20
	isMinusSQZ = 0x30
	isDIF      = 0x40
	isMinusDIF = 0x50
	isDUP      = 0x60
	isMissing  = 0x70
	isBlank    = 0x80
	isComment  = 0x90
	isEnd      = 0xA0
)

var forms = [256]uint8{
	'0': isNumber, '1': isNumber, '2': isNumber, '3': isNumber, '4': isNumber, '5': isNumber, '6': isNumber, '7': isNumber, '8': isNumber, '9': isNumber,
	'+': isNumber, '-': isNumber, '.': isNumber,
	'@': isSQZ, 'A': isSQZ | 1, 'B': isSQZ | 2, 'C': isSQZ | 3, 'D': isSQZ | 4, 'E': isSQZ | 5, 'F': isSQZ | 6, 'G': isSQZ | 7, 'H': isSQZ | 8, 'I': isSQZ | 9,
	'a': isMinusSQZ | 1, 'b': isMinusSQZ | 2, 'c': isMinusSQZ | 3, 'd': isMinusSQZ | 4, 'e': isMinusSQZ | 5, 'f': isMinusSQZ | 6, 'g': isMinusSQZ | 7, 'h': isMinusSQZ | 8, 'i': isMinusSQZ | 9,
	'%': isDIF, 'J': isDIF | 1, 'K': isDIF | 2, 'L': isDIF | 3, 'M': isDIF | 4, 'N': isDIF | 5, 'O': isDIF | 6, 'P': isDIF | 7, 'Q': isDIF | 8, 'R': isDIF | 9,
	'j': isMinusDIF | 1, 'k': isMinusDIF | 2, 'l': isMinusDIF | 3, 'm': isMinusDIF | 4, 'n': isMinusDIF | 5, 'o': isMinusDIF | 6, 'p': isMinusDIF | 7, 'q': isMinusDIF | 8, 'r': isMinusDIF | 9,
	'S': isDUP | 1, 'T': isDUP | 2, 'U': isDUP | 3, 'V': isDUP | 4, 'W': isDUP | 5, 'X': isDUP | 6, 'Y': isDUP | 7, 'Z': isDUP | 8, 's': isDUP | 9,
	'?': isMissing, ' ': isBlank, '\t': isBlank, '\r': isBlank, '\v': isBlank, '\f': isBlank, 0x1a: isBlank, ',': isBlank, ';': isBlank,
	'$': isComment, '\n': isEnd,
}

// maxExact is the largest whole number up to which sums are exact.
const maxExact = 1 << 53

var tens = [...]float64{1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15}

// plain reads the plain number at b[i]; end is i where there is none. An 'E'
// belongs to it only if a sign and a digit follow, since it is a digit of the
// squeezed form otherwise.
func plain(b []byte, i int, point byte) (v float64, decimals, end int) {
	j := i
	if j < len(b) && (b[j] == '-' || b[j] == '+') {
		j++
	}
	from := j
	var m uint64
	for j < len(b) && b[j]-'0' <= 9 {
		m = m*10 + uint64(b[j]-'0')
		j++
	}
	digits := j - from
	if j < len(b) && b[j] == point && (point == '.' || j+1 < len(b) && b[j+1]-'0' <= 9) {
		j++
		at := j
		for j < len(b) && b[j]-'0' <= 9 {
			m = m*10 + uint64(b[j]-'0')
			j++
		}
		decimals = j - at
		digits += decimals
	}
	if digits == 0 {
		return 0, 0, i
	}
	long := digits > 15
	if j+2 < len(b) && b[j]|0x20 == 'e' && (b[j+1] == '+' || b[j+1] == '-') && b[j+2]-'0' <= 9 {
		for j, long = j+3, true; j < len(b) && b[j]-'0' <= 9; {
			j++
		}
	}
	if long {
		v, decimals, n := parse.Prefix(b[i:j], point)
		return v, decimals, i + n
	}
	v = float64(m)
	if decimals > 0 {
		v /= tens[decimals]
	}
	if b[i] == '-' {
		v = -v
	}
	return v, decimals, j
}

// mark is the abscissa at the start of a line.
type mark struct {
	index int // of the ordinate it belongs to
	line  int
	x     float64 // times the factor
	unit  float64 // one unit of the last printed place, times the factor
}

// asdf reads the lines of a (X++(Y..Y)) table.
type asdf struct {
	b     []byte
	pos   int
	line  int
	point byte
	limit int       // most ordinates
	y     []float64 // tabulated

	last, delta float64 // last ordinate and last difference
	prev        uint8   // form of the item before; 0 at the start of a line
	repeated    bool    // the item before was a repeat count
	expect      bool    // the first ordinate of the line repeats the last one as a check
	decimals    int
	forms       Forms
	missing     int

	// abscissae of lines: strayed is set when one is more than half a step from
	// where it should be. marks are kept only when asked for.
	xf, first, step float64
	strayed         bool
	keep            bool
	marks           []mark
}

// problem is where and why reading stopped.
type problem struct {
	line                    int
	found, expected, remedy string
}

const damaged = "the line is damaged; export the file again"

func (a *asdf) stop(found, expected string) *problem {
	return &problem{a.line, found, expected, damaged}
}

// run reads all lines.
func (a *asdf) run() *problem {
	for a.pos < len(a.b) {
		if p := a.row(); p != nil {
			return p
		}
		a.line++
	}
	return nil
}

// row reads one line: an abscissa and the ordinates behind it.
func (a *asdf) row() *problem {
	b, i := a.b, a.pos
	for i < len(b) && forms[b[i]] == isBlank {
		i++
	}
	if i >= len(b) || b[i] == '\n' || a.comment(i) {
		a.pos = a.endOfLine(i)
		return nil
	}
	x, _, end := plain(b, i, a.point)
	if end == i {
		return a.stop(parse.Show(b[i:a.endOfLine(i)]), "an abscissa at the start of the line")
	}
	a.expect = a.prev == isDIF
	a.prev, a.repeated = 0, false
	a.abscissa(x*a.xf, b[i:end])
	before := len(a.y)
	for i = end; i < len(b); {
		var p *problem
		f := forms[b[i]]
		switch f & 0xF0 {
		case isBlank:
			i++
			continue
		case isNumber:
			v, dec, end := plain(b, i, a.point)
			if end == i {
				return a.stop(parse.Show(b[i:a.endOfLine(i)]), "an ordinate")
			}
			i = end
			if dec > a.decimals {
				a.decimals = dec
			} else if dec < 0 {
				a.decimals = math.MaxInt
			}
			a.forms |= AFFN
			p = a.actual(v)
		case isEnd:
			a.pos = i + 1
			return a.whole(before)
		case isComment, 0:
			if !a.comment(i) {
				return a.stop(parse.Show(b[i:a.endOfLine(i)]), "an ordinate in one of the published forms")
			}
			a.pos = a.endOfLine(i)
			return a.whole(before)
		default:
			i, p = a.item(i, f)
		}
		if p != nil {
			return p
		}
		a.repeated = f&0xF0 == isDUP
	}
	a.pos = i
	return a.whole(before)
}

// item reads an ordinate in a compressed form; the end is behind it.
func (a *asdf) item(i int, f uint8) (end int, p *problem) {
	switch f & 0xF0 {
	case isSQZ, isMinusSQZ:
		var v float64
		if v, i, p = a.pseudo(i, f, isMinusSQZ); p == nil {
			a.forms |= SQZ
			p = a.actual(v)
		}
	case isDIF, isMinusDIF:
		if a.delta, i, p = a.pseudo(i, f, isMinusDIF); p == nil {
			p = a.difference()
		}
	case isDUP:
		i, p = a.repeat(i, int(f&0xF))
	default: // missing
		i++
		p = a.gap()
	}
	return i, p
}

// whole checks that a line held an ordinate.
func (a *asdf) whole(before int) *problem {
	if len(a.y) == before && a.prev == 0 {
		return a.stop("an abscissa alone", "ordinates behind it")
	}
	return nil
}

func (a *asdf) comment(i int) bool { return a.b[i] == '$' && i+1 < len(a.b) && a.b[i+1] == '$' }

// endOfLine is the position after the line that i is on.
func (a *asdf) endOfLine(i int) int {
	for i < len(a.b) && a.b[i] != '\n' {
		i++
	}
	return min(i+1, len(a.b))
}

// actual takes an ordinate written out, or the check of the last one.
func (a *asdf) actual(v float64) *problem {
	if a.expect {
		a.expect = false
		if v != a.last && !(a.decimals > 0 && a.decimals < 20 && math.Abs(v-a.last) <= 0.5*math.Pow(10, -float64(a.decimals))) {
			return &problem{a.line, "check ordinate " + number(v), number(a.last) + " as the line before ends", "a difference is damaged; export the file again"}
		}
		a.last, a.prev = v, isSQZ
		return nil
	}
	a.last, a.prev = v, isSQZ
	if len(a.y) >= a.limit {
		return a.tooMany(1)
	}
	a.y = append(a.y, v)
	return nil
}

func (a *asdf) add(v float64) *problem {
	if len(a.y) >= a.limit {
		return a.tooMany(1)
	}
	a.y = append(a.y, v)
	return nil
}

func (a *asdf) tooMany(n int) *problem {
	return &problem{a.line, fmt.Sprintf("%d or more ordinates", len(a.y)+n), strconv.Itoa(a.limit), "the header or the table is damaged; export the file again"}
}

func (a *asdf) difference() *problem {
	switch {
	case a.expect:
		return a.stop("a difference", "the last ordinate again as a check")
	case a.prev == 0 || a.prev == isMissing:
		return a.stop("a difference", "an actual ordinate at the start of a line and after '?'")
	}
	a.forms |= DIF
	a.prev = isDIF
	if a.last += a.delta; a.last > maxExact || a.last < -maxExact {
		return a.stop("a sum of differences of "+number(a.last), "less than 2^53")
	}
	return a.add(a.last)
}

func (a *asdf) gap() *problem {
	if a.expect {
		return a.stop("'?'", "the last ordinate again as a check")
	}
	a.missing++
	a.last, a.prev = math.NaN(), isMissing
	return a.add(a.last)
}

// repeat handles a count: so many equal items including the one before.
func (a *asdf) repeat(i, n int) (int, *problem) {
	for i++; i < len(a.b) && a.b[i]-'0' <= 9; i++ {
		if n = 10*n + int(a.b[i]-'0'); n > maxPoints {
			return i, a.tooMany(n)
		}
	}
	switch {
	case a.prev == 0 || a.expect:
		return i, a.stop("a repeat count", "an ordinate before it")
	case a.repeated:
		return i, a.stop("a repeat count after a repeat count", "an ordinate between them")
	case len(a.y)+n-1 > a.limit:
		return i, a.tooMany(n - 1)
	}
	a.forms |= DUP
	if a.prev == isMissing {
		a.missing += n - 1
	}
	if a.prev != isDIF {
		for range n - 1 {
			a.y = append(a.y, a.last)
		}
		return i, nil
	}
	if end := a.last + float64(n)*a.delta; end > maxExact || end < -maxExact {
		return i, a.stop("a sum of differences of "+number(end), "less than 2^53")
	}
	for range n - 1 {
		a.last += a.delta
		a.y = append(a.y, a.last)
	}
	return i, nil
}

// pseudo reads a number whose first character stands for sign and digit.
func (a *asdf) pseudo(i int, form, minus uint8) (v float64, end int, p *problem) {
	b := a.b
	m, j := uint64(form&0xF), i+1
	for j < len(b) && b[j]-'0' <= 9 {
		m = m*10 + uint64(b[j]-'0')
		j++
	}
	digits := j - i
	if j < len(b) && (b[j] == '.' || b[j] == '+' || b[j] == '-' || b[j]|0x20 == 'e') {
		return a.unusual(i, j, m, form&0xF0 == minus)
	}
	if digits > 15 {
		return 0, j, a.stop(parse.Show(b[i:j]), "at most 15 digits")
	}
	if v = float64(m); form&0xF0 == minus {
		v = -v
	}
	return v, j, nil
}

// unusual finishes a pseudo-digit number with decimals, which are met though
// not foreseen, and refuses what could be an exponent.
func (a *asdf) unusual(i, j int, m uint64, negative bool) (v float64, end int, p *problem) {
	b, decimals := a.b, 0
	if b[j] == '.' {
		for j++; j < len(b) && b[j]-'0' <= 9; j++ {
			m = m*10 + uint64(b[j]-'0')
			decimals++
		}
	}
	if j-i > 15 {
		return 0, j, a.stop(parse.Show(b[i:j]), "at most 15 digits")
	}
	lone := j == i+1 && b[i]|0x20 == 'e' && j < len(b) && (b[j] == '+' || b[j] == '-')
	if power := j+1 < len(b) && b[j]|0x20 == 'e' && (b[j+1] == '+' || b[j+1] == '-'); lone || power {
		return 0, j, a.stop(parse.Show(b[i:min(len(b), j+4)]), "no exponent in a squeezed number")
	}
	a.decimals = max(a.decimals, decimals)
	if v = float64(m) / tens[decimals]; negative {
		v = -v
	}
	return v, j, nil
}

// abscissa compares the x at the start of a line with the one counted.
func (a *asdf) abscissa(x float64, text []byte) {
	at := len(a.y)
	if a.expect {
		at--
	}
	if math.Abs(x-(a.first+float64(at)*a.step)) > 0.5*math.Abs(a.step) {
		a.strayed = true
	}
	if a.keep {
		a.marks = append(a.marks, mark{at, a.line, x, math.Abs(a.xf) * place(text, a.point)})
	}
}

// place is one unit of the last place of a printed number.
func place(text []byte, point byte) float64 {
	exp, decimals, behind := 0, 0, false
	for i, c := range text {
		switch {
		case c == point:
			behind = true
		case c|0x20 == 'e':
			exp, _ = strconv.Atoi(string(text[i+1:]))
			return math.Pow(10, float64(exp-decimals))
		case behind:
			decimals++
		}
	}
	return math.Pow(10, float64(-decimals))
}

func number(v float64) string { return strconv.FormatFloat(v, 'g', 12, 64) }
