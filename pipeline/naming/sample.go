package naming

import (
	"regexp"
	"regexp/syntax"
	"strings"
	"unicode"
)

// sampleOf writes a short text that a pattern matches, to show people what its
// names look like; "" if it finds none.
func sampleOf(re *regexp.Regexp) string {
	if re == nil {
		return ""
	}
	t, err := syntax.Parse(re.String(), syntax.Perl)
	if err != nil {
		return ""
	}
	var b strings.Builder
	sampleNode(t.Simplify(), &b)
	if s := b.String(); re.MatchString(s) {
		return s
	}
	return ""
}

func sampleNode(t *syntax.Regexp, b *strings.Builder) {
	switch t.Op {
	case syntax.OpLiteral:
		for _, r := range t.Rune {
			b.WriteRune(r)
		}
	case syntax.OpCharClass:
		b.WriteRune(pick(t.Rune))
	case syntax.OpAnyChar, syntax.OpAnyCharNotNL:
		b.WriteRune('x')
	case syntax.OpPlus, syntax.OpCapture:
		sampleNode(t.Sub[0], b)
	case syntax.OpRepeat:
		for range max(t.Min, 1) {
			sampleNode(t.Sub[0], b)
		}
	case syntax.OpConcat:
		for _, s := range t.Sub {
			sampleNode(s, b)
		}
	case syntax.OpAlternate:
		sampleNode(t.Sub[0], b)
	}
}

// pick takes a character of a class that people would write: a digit, a letter, else the first.
func pick(ranges []rune) rune {
	if len(ranges) == 0 {
		return 'x'
	}
	for _, want := range []rune{'1', 'A', 'a', '-', '_', ' '} {
		for i := 0; i+1 < len(ranges); i += 2 {
			if ranges[i] <= want && want <= ranges[i+1] {
				return want
			}
		}
	}
	if unicode.IsPrint(ranges[0]) {
		return ranges[0]
	}
	return ranges[1]
}
