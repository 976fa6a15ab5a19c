package parse

import (
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"
)

const (
	shownRunes = 48   // longest value quoted in a message
	keptRunes  = 2000 // longest text kept from a file in one field
)

// Show quotes a value from a file for a message: shortened, and with every
// character that a terminal could act on written as an escape.
func Show[T ~string | ~[]byte](value T) string {
	s := string(value[:min(len(value), 4*shownRunes+utf8.UTFMax)])
	cut := len(s) < len(value)
	n := 0
	for i := range s {
		if n++; n > shownRunes {
			s, cut = s[:i], true
			break
		}
	}
	q := strconv.Quote(s)
	if cut {
		q = q[:len(q)-1] + `…"`
	}
	return q
}

// Clean makes text from a file fit to be kept and printed: control and
// direction-changing characters are dropped, tabs and line ends become blanks,
// no-break spaces too, blanks at the ends go, and the length is bounded.
func Clean[T ~string | ~[]byte](text T) string {
	s := string(text)
	if plain(s) {
		return strings.Trim(s, " ")
	}
	var b strings.Builder
	n := 0
	for _, r := range s {
		switch {
		case r == '\t' || r == '\n' || r == '\r' || r == '\u00a0' || r == '\u202f':
			r = ' '
		case r == utf8.RuneError || unicode.In(r, unicode.Cc, unicode.Cf, unicode.Zl, unicode.Zp, unicode.Co, unicode.Cs):
			continue
		}
		if n++; n > keptRunes {
			break
		}
		b.WriteRune(r)
	}
	return strings.Trim(b.String(), " ")
}

func plain(s string) bool {
	if len(s) > keptRunes {
		return false
	}
	for i := range len(s) {
		if c := s[i]; c < 0x20 || c >= 0x7f {
			return false
		}
	}
	return true
}
