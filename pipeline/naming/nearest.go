package naming

import (
	"cmp"
	"errors"
	"fmt"
	"path"
	"slices"
	"strings"
	"unicode"
)

// A KnownSet is a set that exists, as far as a parked file might belong to it.
type KnownSet struct {
	Folder string   // name of the folder its files came from; "" fits every folder
	Set    string   // as Match.Set
	Rungs  []string // rungs it has
	Roles  []string // roles it has besides scans
	Ladder []string // rungs it ought to have; nil: unknown, then every rung it has not may be lacking
}

// A Suggestion says where a parked file may belong. The zero value is no idea.
type Suggestion struct {
	Rule     string // nearest rule; "" if none is near
	Set      string // set that lacks exactly this; "" if none does
	Role     string
	Rung     string
	Path     string // the path as it probably should read; "" without a set
	Distance int    // characters that differ between the path and Path
	Sentence string // for people, always filled
}

// maxDistance is how many characters may be wrong; beyond two, different sets look alike.
const maxDistance = 2

// Nearest says where a parked path may belong: the set that lacks exactly the
// rung or role the path would have after at most two characters are put right,
// else the rule it resembles most. Characters taken for each other by eye (1
// and l, 0 and O) and dropped dashes count before other mistakes. It only
// suggests; a person adopts.
func Nearest(folder, p string, rules *Rules, known []KnownSet) Suggestion {
	p = Normal(p)
	s := search{folder: folder, path: p, rules: rules, known: known, tried: map[string]bool{}}
	s.tokens()
	s.edits()
	if s.best.Set != "" {
		s.best.Sentence = s.sentence()
		return s.best
	}
	return s.byRule()
}

// search looks for the repaired path that fits best.
type search struct {
	folder, path string
	rules        *Rules
	known        []KnownSet
	tried        map[string]bool
	best         Suggestion
	eye          bool  // all differences of best are look-alikes or separators
	bytes        []int // how often each byte stands in the path
}

// tokens replaces each piece of the path that nearly reads like a known set by
// that set's name.
func (s *search) tokens() {
	r := []rune(s.path)
	for _, k := range s.known {
		if (k.Folder != "" && k.Folder != s.folder) || !s.couldHold(k.Set) {
			continue
		}
		name := []rune(k.Set)
		for n := max(1, len(name)-maxDistance); n <= len(name)+maxDistance; n++ {
			for i := 0; i+n <= len(r); i++ {
				piece := string(r[i : i+n])
				if piece == k.Set || Distance(piece, k.Set) > maxDistance {
					continue
				}
				fixed := string(r[:i]) + k.Set + string(r[i+n:])
				s.try(fixed)
			}
		}
	}
}

// couldHold reports whether at most two bytes of a set's name are missing from
// the path, in whatever order: thousands of sets are passed over this way
// without comparing them piece by piece.
func (s *search) couldHold(set string) bool {
	if s.bytes == nil {
		s.bytes = make([]int, 256)
		for i := range len(s.path) {
			s.bytes[s.path[i]]++
		}
	}
	var used [256]int
	missing := 0
	for i := range len(set) {
		c := set[i]
		if used[c]++; used[c] > s.bytes[c] {
			missing++
		}
	}
	// A character outside ASCII has up to four bytes.
	return missing <= maxDistance || (missing <= 4*maxDistance && !isASCII(set+s.path))
}

func isASCII(s string) bool {
	for i := range len(s) {
		if s[i] >= 0x80 {
			return false
		}
	}
	return true
}

// edits tries every single change that hands and eyes make: a look-alike, a
// missing, doubled or other separator, neighbours exchanged, another case.
func (s *search) edits() {
	r := []rune(s.path)
	splice := func(i, j int, with ...rune) { s.try(string(r[:i]) + string(with) + string(r[j:])) }
	for i := range r {
		for _, a := range alikes(r[i]) {
			splice(i, i+1, a)
		}
		splice(i, i+1)
		if c := unicode.ToUpper(r[i]); c != r[i] {
			splice(i, i+1, c)
		}
		if c := unicode.ToLower(r[i]); c != r[i] {
			splice(i, i+1, c)
		}
		if i+1 < len(r) && r[i] != r[i+1] {
			splice(i, i+2, r[i+1], r[i])
		}
		for _, sep := range "-_. " {
			splice(i, i, sep)
		}
		if unicode.IsDigit(r[i]) {
			splice(i, i, '0') // a leading zero dropped
		}
	}
}

// try holds a repaired path against rules and known sets.
func (s *search) try(fixed string) {
	if s.tried[fixed] {
		return
	}
	s.tried[fixed] = true
	m, err := s.rules.Match(s.folder, fixed)
	if err != nil || m.Set == "" {
		return
	}
	d := Distance(s.path, fixed)
	if d == 0 || d > maxDistance {
		return
	}
	for _, k := range s.known {
		if k.Set != m.Set || (k.Folder != "" && k.Folder != s.folder) || !k.lacks(m) {
			continue
		}
		eye := onlyAlike(s.path, fixed)
		if s.best.Set == "" || d < s.best.Distance || (d == s.best.Distance && eye && !s.eye) {
			s.best = Suggestion{Rule: m.Rule, Set: m.Set, Role: m.Role, Rung: m.Rung, Path: fixed, Distance: d}
			s.eye = eye
		}
	}
}

// lacks reports whether the set lacks exactly what a match would bring.
func (k KnownSet) lacks(m Match) bool {
	if m.Role != RoleScan {
		return !slices.Contains(k.Roles, m.Role)
	}
	has := func(list []string) bool {
		return slices.ContainsFunc(list, func(r string) bool { return RungKey(r) == RungKey(m.Rung) })
	}
	return m.Rung != "" && !has(k.Rungs) && (k.Ladder == nil || has(k.Ladder))
}

// onlyAlike reports whether two texts differ only in look-alikes and in
// separators that one of them has and the other has not.
func onlyAlike(a, b string) bool {
	strip := func(s string) []rune {
		return []rune(strings.Map(func(r rune) rune {
			if strings.ContainsRune("-_. –—", r) {
				return -1
			}
			return r
		}, s))
	}
	x, y := strip(a), strip(b)
	return slices.EqualFunc(x, y, lookAlike)
}

func (s *search) sentence() string {
	b := s.best
	what := "the " + b.Role
	switch b.Role {
	case RoleScan:
		what = "rung " + b.Rung
	case RolePH:
		what = "the pH table"
	}
	_, err := s.rules.Match(s.folder, s.path)
	fits := "fits no rule"
	var ve *ValueError
	var two *TwoRulesError
	switch {
	case err == nil:
		fits = "belongs to no known set"
	case errors.As(err, &two):
		fits = "fits several rules"
	case errors.As(err, &ve):
		fits = "has an impossible " + ve.Group
	}
	return fmt.Sprintf("%q %s; set %s lacks %s and would have it as %q (%s). Adopt it with: pkvigil adopt %q %q",
		path.Base(s.path), fits, b.Set, what, path.Base(b.Path), differing(b.Distance), s.path, b.Set)
}

func differing(n int) string {
	if n == 1 {
		return "1 character differs"
	}
	return fmt.Sprintf("%d characters differ", n)
}

// byRule finds the rule whose names have the most similar shape.
func (s *search) byRule() Suggestion {
	type near struct {
		rule     string
		distance int
		like     string
	}
	var list []near
	want := shape(s.path)
	for i := range s.rules.rules {
		c := &s.rules.rules[i]
		if !c.appliesTo(s.folder) {
			continue
		}
		for _, ex := range append(slices.Clone(c.Example), sampleOf(c.path)) {
			if ex != "" {
				list = append(list, near{c.Name, Distance(want, shape(Normal(ex))), ex})
			}
		}
	}
	// A shape that differs in more than a third resembles nothing.
	list = slices.DeleteFunc(list, func(n near) bool { return n.distance > max(maxDistance, len([]rune(want))/3) })
	if len(list) == 0 {
		return Suggestion{Sentence: fmt.Sprintf("%q fits no rule of folder %s and resembles none; add a [[rule]] or an ignore pattern for it.", s.path, s.folder)}
	}
	n := slices.MinFunc(list, func(a, b near) int { return cmp.Compare(a.distance, b.distance) })
	return Suggestion{Rule: n.rule, Distance: n.distance,
		Sentence: fmt.Sprintf("%q fits no rule of folder %s; nearest is rule %q, whose names look like %q, but no set is known that lacks it.", s.path, s.folder, n.rule, n.like)}
}

// shape is a path with every digit a 0 and every letter an a or A.
func shape(p string) string {
	return strings.Map(func(r rune) rune {
		switch {
		case unicode.IsDigit(r):
			return '0'
		case unicode.IsUpper(r):
			return 'A'
		case unicode.IsLetter(r):
			return 'a'
		}
		return r
	}, p)
}
