package naming

import (
	"regexp"
	"strconv"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"
)

// kind says what a part of a name is taken for.
type kind int

const (
	literal kind = iota // as written
	dash                // a dash with spaces around it, of whatever length
	letters             // not understood: part of an identity, or a constant word
	digits              // likewise
	kDate
	kStamp
	kPH
	kCelsius
	kRung
	kRole
	kSlot
	kNight
	kRev
	kFix
	kCopy
	kRep
	kPos
	kSeq
	kInst
)

// field is one part of a name.
type field struct {
	kind kind
	text string
}

// lexRule recognises one meaning at the beginning of a text. Sub-match 1, if
// any, is literal text before the value, the last sub-match the value.
type lexRule struct {
	kind kind
	re   *regexp.Regexp
	ok   func(value string) bool
}

// lexer takes names apart. It looks at one name at a time; what only shows in
// many names together is decided afterwards.
type lexer struct {
	rules      []lexRule
	dash, copy *regexp.Regexp
}

func newLexer() *lexer {
	rx := func(s string) *regexp.Regexp { return regexp.MustCompile(`^(?:` + s + `)`) }
	yes := func(string) bool { return true }
	return &lexer{dash: rx(` +[-–—] +`), copy: rx(`( ?)\((\d{1,2})\)$`), rules: []lexRule{
		{kStamp, rx(`(\d{8}[T_ -]?\d{6}|\d{4}-\d{2}-\d{2}[T_ ]\d{2}[-:.]?\d{2}[-:.]?\d{2})`), isStamp},
		{kDate, rx(`(\d{4}-\d{2}-\d{2}|\d{8})`), isDate},
		{kPH, rx(`((?i:pH)[ _-]?)(\d{1,2}[.,p]\d{1,3})`), isPH},
		{kPH, rx(`(\d{1,2}[,p]\d{1,3}|\d{1,2}\.\d{1,3})`), isPH},
		{kCelsius, rx(`(T)(\d{1,2}(?:[.,]\d)?)`), isCelsius},
		{kRung, rx(`((?i:rung|scan|spectrum|spec|r)[ _-]?)(\d{1,4})`), yes},
		{kNight, rx(`((?i:night|nacht|n)_?)(\d{1,4})`), yes},
		{kRev, rx(`((?i:version|ver|rev|run|v)[ _-]?)(\d{1,3})`), yes},
		{kFix, rx(`((?i:corrected|corr|korr|fixed))`), yes},
		{kSlot, rx(`((?i:opening|open|middle|mid|closing|close))`), yes},
		{kRole, rx(`(\p{L}+)`), func(s string) bool { r, ok := RoleOf(s); return ok && r != RoleScan }},
	}}
}

// lex takes one normalised path apart. The extension comes last, as a literal.
func (x *lexer) lex(path string) []field {
	stem, ext := splitExt(path)
	var out []field
	for i := 0; i < len(stem); {
		if f, n := x.meaning(stem, i); n > 0 {
			out = append(out, f...)
			i += n
			continue
		}
		r, w := utf8.DecodeRuneInString(stem[i:])
		is := class(r)
		n := w
		for i+n < len(stem) {
			r2, w2 := utf8.DecodeRuneInString(stem[i+n:])
			if class(r2) != is || is == literal {
				break
			}
			n += w2
		}
		out = append(out, field{is, stem[i : i+n]})
		i += n
	}
	out = replicate(out)
	if role, ok := RoleOf(strings.TrimPrefix(ext, ".")); ok && role == RolePH {
		return append(out, field{literal, "."}, field{kRole, ext[1:]})
	}
	return append(out, field{literal, ext})
}

// meaning tries the rules at i. A meaning begins and ends at a boundary, or it
// is an accident inside a longer word.
func (x *lexer) meaning(s string, i int) ([]field, int) {
	if m := x.dash.FindString(s[i:]); m != "" {
		return []field{{dash, m}}, len(m)
	}
	if m := x.copy.FindStringSubmatch(s[i:]); m != nil && i > 0 {
		return []field{{literal, m[1] + "("}, {kCopy, m[2]}, {literal, ")"}}, len(m[0])
	}
	if i > 0 {
		if r, _ := utf8.DecodeLastRuneInString(s[:i]); class(r) != literal {
			return nil, 0
		}
	}
	for _, rule := range x.rules {
		m := rule.re.FindStringSubmatch(s[i:])
		if m == nil || !rule.ok(m[len(m)-1]) || !boundary(s, i+len(m[0])) {
			continue
		}
		var out []field
		if len(m) == 3 && m[1] != "" {
			out = append(out, field{literal, m[1]})
		}
		return append(out, field{rule.kind, m[len(m)-1]}), len(m[0])
	}
	return nil, 0
}

func boundary(s string, i int) bool {
	if i >= len(s) {
		return true
	}
	r, _ := utf8.DecodeRuneInString(s[i:])
	return class(r) == literal
}

func class(r rune) kind {
	switch {
	case r >= '0' && r <= '9':
		return digits
	case unicode.IsLetter(r):
		return letters
	}
	return literal
}

// splitExt cuts off the extension: a point and at most five characters with a letter first.
func splitExt(path string) (stem, ext string) {
	i := strings.LastIndexByte(path, '.')
	if i <= 0 || strings.ContainsAny(path[i:], "/ ") || len(path)-i > 6 || len(path)-i < 2 {
		return path, ""
	}
	if r, _ := utf8.DecodeRuneInString(path[i+1:]); !unicode.IsLetter(r) {
		return path, ""
	}
	return path[:i], path[i:]
}

// replicate takes a single small letter at the end of a name for the mark of a replicate.
func replicate(f []field) []field {
	n := len(f)
	if n >= 3 && f[n-1].kind == letters && len(f[n-1].text) == 1 && f[n-1].text >= "a" && f[n-1].text <= "h" &&
		f[n-2].kind == literal && !strings.ContainsAny(f[n-2].text, "/") {
		f[n-1].kind = kRep
	}
	return f
}

func isStamp(s string) bool { _, ok := parseTime(s, stampLayouts()); return ok && plausible(s[:4]) }

func isDate(s string) bool {
	_, ok := parseTime(s, []string{"20060102", time.DateOnly})
	return ok && plausible(s[:4])
}

// plausible refuses eight digits that are a date only by accident.
func plausible(year string) bool { return year >= "1990" && year <= "2099" }

func isPH(s string) bool {
	v, ok := number(s, "p")
	return ok && v >= -2 && v <= 16
}

func isCelsius(s string) bool {
	v, err := strconv.ParseFloat(strings.Replace(s, ",", ".", 1), 64)
	return err == nil && v >= 1 && v <= 95
}
