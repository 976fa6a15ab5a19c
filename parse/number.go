package parse

import (
	"math"
	"strconv"
)

// pow10 holds the powers of ten that a float64 represents exactly.
var pow10 = [...]float64{
	1e0, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11,
	1e12, 1e13, 1e14, 1e15, 1e16, 1e17, 1e18, 1e19, 1e20, 1e21, 1e22,
}

// Exponential is the number of decimals Prefix reports for a number written
// with an exponent, whose printed resolution is relative.
const Exponential = -1

// Prefix reads the decimal number at the start of b. point is the decimal
// sign, '.' or ','. It returns the value, how many decimals were printed
// (Exponential for a number with an exponent), and the number of bytes used;
// n is 0 when b does not start with a number or the number exceeds the range
// of a float64. A leading U+2212 counts as a minus.
//
// The value is bit-identical to strconv.ParseFloat: with fewer than 2^53 in
// the digits and a power of ten up to 22 both operands are exact, so that one
// multiplication or division rounds once, as IEEE 754 asks; everything else is
// left to strconv.
func Prefix(b []byte, point byte) (v float64, decimals, n int) {
	i := 0
	neg := false
	switch {
	case len(b) > 0 && (b[0] == '-' || b[0] == '+'):
		neg = b[0] == '-'
		i = 1
	case len(b) > 3 && b[0] == 0xE2 && b[1] == 0x88 && b[2] == 0x92:
		neg = true
		i = 3
	}
	start := i
	var m uint64
	for i < len(b) {
		c := b[i] - '0'
		if c > 9 {
			break
		}
		m = m*10 + uint64(c)
		i++
	}
	digits := i - start
	if i < len(b) && b[i] == point {
		i++
		from := i
		for i < len(b) {
			c := b[i] - '0'
			if c > 9 {
				break
			}
			m = m*10 + uint64(c)
			i++
		}
		decimals = i - from
		digits += decimals
	}
	if digits == 0 {
		return 0, 0, 0
	}
	exp := -decimals
	if i < len(b) && b[i]|0x20 == 'e' {
		if e, k := exponent(b[i:]); k > 0 {
			exp += e
			i += k
			decimals = Exponential
		}
	}
	if digits > 18 || m >= 1<<53 || exp < -22 || exp > 22 {
		v, ok := slow(b[start:i], point)
		if !ok {
			return 0, 0, 0
		}
		if neg {
			v = -v
		}
		return v, decimals, i
	}
	v = float64(m)
	if exp < 0 {
		v /= pow10[-exp]
	} else if exp > 0 {
		v *= pow10[exp]
	}
	if neg {
		v = -v
	}
	return v, decimals, i
}

// exponent reads "e", an optional sign and digits; k is 0 when there is none.
func exponent(b []byte) (e, k int) {
	i := 1
	neg := false
	if i < len(b) && (b[i] == '-' || b[i] == '+') {
		neg = b[i] == '-'
		i++
	}
	from := i
	for i < len(b) && b[i]-'0' <= 9 {
		if e < 100000 {
			e = e*10 + int(b[i]-'0')
		}
		i++
	}
	if i == from {
		return 0, 0
	}
	if neg {
		e = -e
	}
	return e, i
}

// slow gives unsigned digits with an optional point and exponent to strconv.
func slow(b []byte, point byte) (float64, bool) {
	var room [48]byte
	t := append(room[:0], b...)
	if point != '.' {
		for i, c := range t {
			if c == point {
				t[i] = '.'
				break
			}
		}
	}
	v, err := strconv.ParseFloat(string(t), 64)
	if err != nil || math.IsInf(v, 0) {
		return 0, false
	}
	return v, true
}

// Float reads b, all of it, as a decimal number; see Prefix.
func Float(b []byte, point byte) (v float64, decimals int, ok bool) {
	v, decimals, n := Prefix(b, point)
	return v, decimals, n > 0 && n == len(b)
}
