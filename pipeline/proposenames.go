package pipeline

import (
	"fmt"
	"maps"
	"regexp"
	"slices"
	"strings"

	"pkvigil/pipeline/naming"
)

// proposeRules is naming.Propose with one more try: where a counter behind a
// letter ends most names and no rung was recognised, the counter is the rung.
func proposeRules(paths []string) []naming.Proposal {
	base := naming.Propose(paths)
	letter := counterLetter(paths)
	lacks := slices.ContainsFunc(base, func(x naming.Proposal) bool {
		return slices.ContainsFunc(x.Doubts, func(d string) bool { return strings.HasPrefix(d, "No rung was recognised") })
	})
	if letter == "" || !lacks {
		return base
	}
	tail := counterTail(letter)
	back := map[string]string{}
	renamed := make([]string, len(paths))
	for i, x := range paths {
		renamed[i] = tail.ReplaceAllString(x, "${1}r${2}${3}")
		if _, twice := back[renamed[i]]; twice {
			return base
		}
		back[renamed[i]] = x
	}
	other := naming.Propose(renamed)
	var rules []naming.Rule
	for i := range other {
		o := &other[i]
		o.Rule.Pattern = strings.ReplaceAll(o.Rule.Pattern, "r(?P<rung>", regexp.QuoteMeta(letter)+"(?P<rung>")
		for k := range o.Paths {
			o.Paths[k] = back[o.Paths[k]]
		}
		for k := range o.Rule.Example {
			o.Rule.Example[k] = back[o.Rule.Example[k]]
		}
		if o.Rule.Name != "" {
			o.Doubts = append(o.Doubts, doubtOfLetter(o.Rule.Pattern, letter)...)
			rules = append(rules, o.Rule)
		}
	}
	if _, err := naming.Compile(rules); err != nil || unplacedNames(other) > unplacedNames(base) {
		return base
	}
	return other
}

func doubtOfLetter(pattern, letter string) []string {
	if !strings.Contains(pattern, regexp.QuoteMeta(letter)+"(?P<rung>") {
		return nil
	}
	return []string{fmt.Sprintf("The number behind %q was taken for the rung, because it counts within each name before it.", letter)}
}

func unplacedNames(list []naming.Proposal) int {
	n := 0
	for _, x := range list {
		if x.Rule.Name == "" {
			n += len(x.Paths)
		}
	}
	return n
}

// counterTail matches a name that ends in a letter word with a number.
func counterTail(letter string) *regexp.Regexp {
	return regexp.MustCompile(`([_.\- ])` + letter + `(\d{1,4})((?: \(\d+\))?\.[A-Za-z0-9]+)$`)
}

// counterLetter finds the letters before a number that counts at the end of
// names: at least three numbers for each beginning of a name. "" if there are none.
func counterLetter(paths []string) string {
	tail := counterTail(`([A-Za-z]{1,6})`)
	heads := map[string]map[string]bool{}
	count := map[string]int{}
	for _, x := range paths {
		m := tail.FindStringSubmatchIndex(x)
		if m == nil {
			continue
		}
		letter := x[m[4]:m[5]]
		if slices.Contains([]string{"night", "n", "run", "plate", "day", "v", "rev"}, strings.ToLower(letter)) {
			continue // a counter of something else
		}
		if heads[letter] == nil {
			heads[letter] = map[string]bool{}
		}
		heads[letter][x[:m[2]]] = true
		count[letter]++
	}
	best := ""
	for _, l := range slices.Sorted(maps.Keys(count)) {
		if count[l] >= 3*len(heads[l]) && 5*count[l] >= len(paths) && count[l] > count[best] {
			best = l
		}
	}
	return best
}

// columnPattern finds what the labels of the traces in a file have in common:
// positions where the file is a run, a counter, a pH, or with names anything
// that names can be made of.
func columnPattern(labels []string, run, names bool) (string, []string) {
	var rest, blanks []string
	for _, l := range labels {
		l = strings.TrimSpace(naming.Normal(l))
		if role, ok := naming.RoleOf(l); ok && role == naming.RoleBlank {
			blanks = append(blanks, regexp.QuoteMeta(l))
			continue
		}
		rest = append(rest, l)
	}
	all := func(pattern string) bool {
		re := regexp.MustCompile(pattern)
		return len(rest) > 0 && !slices.ContainsFunc(rest, func(l string) bool { return !re.MatchString(l) })
	}
	pattern := ""
	switch word := regexp.MustCompile(`^[\pL]{0,6}[ _-]?`).FindString(strings.Join(rest[:min(1, len(rest))], "")); {
	case run && all(`^[A-P]\d{1,2}$`): // without a run a letter and a number are as good as any name
		pattern = `(?P<pos>[A-P]\d{1,2})`
	case all(`^`+regexp.QuoteMeta(word)+`\d{1,3}$`) && counts(rest):
		pattern = regexp.QuoteMeta(word) + `(?P<rung>\d{1,3})`
	case all(`^(?i:ph)[ _=]*\d{1,2}[.,]\d{1,3}$`):
		pattern = `(?i:ph)[ _=]*(?P<ph>\d{1,2}[.,]\d{1,3})`
	case names:
		return naming.ProposeColumn(labels)
	default:
		return "", nil
	}
	if len(blanks) > 0 {
		slices.Sort(blanks)
		pattern = `(?:` + pattern + `|(?P<role>` + strings.Join(slices.Compact(blanks), "|") + `))`
	}
	return `^` + pattern + `$`, nil
}

// counts says whether labels come in several numbers.
func counts(labels []string) bool {
	v := slices.Clone(labels)
	slices.Sort(v)
	return len(slices.Compact(v)) >= 3
}
