package naming

import (
	"errors"
	"fmt"
	"regexp"
	"slices"
	"strings"
)

// wordsOf lists words of a role group that need no declaration, role by role.
func wordsOf() map[string][]string {
	return map[string][]string{
		RoleScan:        {"scan", "spectrum"},
		RoleBlank:       {"blank", "blk", "bl", "buffer"},
		RolePH:          {"ph", "pht", "phlog", "phtable"},
		RoleCalibration: {"calibration", "cal"},
		RoleSheet:       {"sheet", "map", "sequence", "seq", "joblist", "jobs"},
		RoleEvents:      {"events", "log"},
		RolePlan:        {"plan"},
		RoleEnd:         {"end", "done", "ready"},
		RoleIgnore:      {"ignore"},
	}
}

// Roles lists the roles of this program.
func Roles() []string {
	return []string{RoleScan, RoleBlank, RolePH, RoleCalibration, RoleSheet, RoleEvents, RolePlan, RoleEnd, RoleIgnore}
}

// RoleOf gives the role of a word that needs no declaration ("blk" is a
// blank), and whether there is one. Case does not matter.
func RoleOf(word string) (string, bool) {
	word = strings.ToLower(word)
	for role, words := range wordsOf() {
		if slices.Contains(words, word) {
			return role, true
		}
	}
	return "", false
}

// Compile makes rules ready for use. All faults of all rules are returned at
// once, joined, each a *RuleError: patterns that are no RE2, templates that
// name a group no pattern has, unknown roles, examples that do not match or
// that match another rule of the same folder as well.
func Compile(rules []Rule) (*Rules, error) {
	out := &Rules{rules: make([]compiled, len(rules))}
	var errs []error
	names := map[string]bool{}
	for i, r := range rules {
		k := ruleCheck{index: i, rule: r}
		switch {
		case r.Name == "":
			k.fault("name", "", "a name for the rule", `name = "ladder"`, nil)
		case names[r.Name]:
			k.fault("name", r.Name, "a name no other rule has", "", nil)
		}
		names[r.Name] = true
		out.rules[i] = k.compile()
		errs = append(errs, k.errs...)
	}
	if len(errs) == 0 {
		errs = checkExamples(out)
	}
	if err := errors.Join(errs...); err != nil {
		return nil, err
	}
	return out, nil
}

// ruleCheck collects the faults of one rule.
type ruleCheck struct {
	index int
	rule  Rule
	errs  []error
}

func (k *ruleCheck) fault(key, found, expected, example string, err error) {
	k.errs = append(k.errs, &RuleError{Index: k.index, Rule: k.rule.Name, Key: key, Found: found, Expected: expected, Example: example, Err: err})
}

func (k *ruleCheck) compile() compiled {
	r := k.rule
	c := compiled{Rule: r}
	c.path = k.pattern("pattern", r.Pattern, true)
	c.column = k.pattern("column", r.Column, false)
	groups := groupNames(c.path, c.column)
	c.set = k.template("set", r.Set, "set", groups)
	c.series = k.template("series", r.Series, "series", groups)
	c.run = k.template("run", r.Run, "run", groups)
	c.roles = map[string]string{}
	for role, words := range wordsOf() {
		for _, w := range words {
			c.roles[w] = role
		}
	}
	for w, role := range r.Roles {
		k.word("roles."+w, role, Roles())
		c.roles[strings.ToLower(w)] = role
	}
	k.word("role", r.Role, append(Roles(), ""))
	k.word("pair", r.Pair, []string{"", "name", "key", "clock", "inside"})
	k.word("pair_by", r.PairBy, []string{"", "rung", "pos"})
	k.word("check_digit", r.CheckDigit, append(CheckDigits(), ""))
	if r.First != 0 && r.First != 1 {
		k.fault("first", fmt.Sprint(r.First), "0 or 1", "first = 1", nil)
	}
	if r.CheckDigit != "" && c.path != nil && !slices.Contains(groups, "check") {
		k.fault("check_digit", r.CheckDigit, "a group named check in the pattern", `(?P<order>\d{5})-(?P<check>\d)`, nil)
	}
	return c
}

// pattern compiles one regular expression, which must cover the whole path:
// a pattern that may begin or end anywhere matches by accident.
func (k *ruleCheck) pattern(key, text string, needed bool) *regexp.Regexp {
	if text == "" {
		if needed {
			k.fault(key, "", "a regular expression", `pattern = '^(?P<set>[A-Z]{2}-\d{4})_r(?P<rung>\d{2})\.csv$'`, nil)
		}
		return nil
	}
	if _, err := regexp.Compile(text); err != nil {
		k.fault(key, text, "a regular expression in RE2 syntax", `'^(?P<set>[A-Z]{2}-\d{4})_r(?P<rung>\d{2})\.csv$'`, err)
		return nil
	}
	re, err := regexp.Compile(`^(?:` + text + `)$`)
	if err != nil {
		k.fault(key, text, "a regular expression that stands by itself", "", err)
		return nil
	}
	return re
}

func (k *ruleCheck) word(key, found string, allowed []string) {
	if slices.Contains(allowed, found) {
		return
	}
	var shown []string
	for _, a := range allowed {
		if a != "" {
			shown = append(shown, a)
		}
	}
	k.fault(key, found, "one of "+strings.Join(shown, ", "), fmt.Sprintf("%s = %q", key, ClosestWord(found, shown)), nil)
}

func groupNames(res ...*regexp.Regexp) []string {
	var out []string
	for _, re := range res {
		if re == nil {
			continue
		}
		for _, n := range re.SubexpNames() {
			if n != "" && !slices.Contains(out, n) {
				out = append(out, n)
			}
		}
	}
	return out
}

// checkExamples holds every example against all rules that share a folder with its rule.
func checkExamples(rs *Rules) []error {
	var errs []error
	for i := range rs.rules {
		c := &rs.rules[i]
		k := ruleCheck{index: i, rule: c.Rule}
		for _, ex := range c.Example {
			g := capture(c.path, Normal(ex))
			if g == nil {
				k.fault("example", ex, "a path that fits the rule's own pattern", "", nil)
				continue
			}
			if _, err := c.read(g); err != nil {
				err.Path, err.Rule, err.Folder = ex, c.Name, "(example)"
				k.fault("example", ex, "a path whose groups can be read", "", err)
			}
			for j := range rs.rules {
				if o := &rs.rules[j]; j != i && shareFolder(c.Rule, o.Rule) && o.path.MatchString(Normal(ex)) {
					k.fault("example", ex, fmt.Sprintf("a path that fits this rule only, but it fits rule %q too", o.Name), "", nil)
				}
			}
		}
		for _, ex := range c.ColumnEx {
			if c.column == nil || !c.column.MatchString(Normal(ex)) {
				k.fault("column_example", ex, "a label that fits the rule's column pattern", "", nil)
			}
		}
		errs = append(errs, k.errs...)
	}
	return errs
}

func shareFolder(a, b Rule) bool {
	if len(a.Folders) == 0 || len(b.Folders) == 0 {
		return true
	}
	return slices.ContainsFunc(a.Folders, func(f string) bool { return slices.Contains(b.Folders, f) })
}

// A template is literal text with ${group} in it.
type template []piece

type piece struct {
	text  string
	group bool
}

// template reads a template; an empty one is the group of the same name where
// a pattern has it.
func (k *ruleCheck) template(key, text, group string, groups []string) template {
	if text == "" {
		if slices.Contains(groups, group) {
			return template{{text: group, group: true}}
		}
		return nil
	}
	var t template
	rest := text
	for rest != "" {
		lit, after, ok := strings.Cut(rest, "${")
		if lit != "" {
			t = append(t, piece{text: lit})
		}
		if !ok {
			break
		}
		name, tail, closed := strings.Cut(after, "}")
		if !closed {
			k.fault(key, text, "a closing } after ${", fmt.Sprintf(`%s = "${compound}-${percent}"`, key), nil)
			return nil
		}
		if len(groups) > 0 && !slices.Contains(groups, name) {
			k.fault(key, text, fmt.Sprintf("only groups of the pattern (%s); it has no %q", strings.Join(groups, ", "), name),
				fmt.Sprintf(`%s = "${%s}"`, key, ClosestWord(name, groups)), nil)
		}
		t = append(t, piece{text: name, group: true})
		rest = tail
	}
	return t
}

// fill gives the text, or "" where not one of its groups took part: a
// calibration file of a rule whose set group is optional belongs to no set.
func (t template) fill(g map[string]string, m *Match) string {
	var b strings.Builder
	used, groups := false, false
	for _, p := range t {
		if !p.group {
			b.WriteString(p.text)
			continue
		}
		groups = true
		v := g[p.text]
		if p.text == "date" && m.Date != "" {
			v = m.Date
		}
		if v != "" {
			used = true
			b.WriteString(v)
		}
	}
	if groups && !used {
		return ""
	}
	return b.String()
}

// ClosestWord returns the word nearest to a mistyped one, the first of equally near ones.
func ClosestWord(found string, words []string) string {
	best, dist := "", -1
	for _, w := range words {
		if d := Distance(strings.ToLower(found), strings.ToLower(w)); dist < 0 || d < dist {
			best, dist = w, d
		}
	}
	return best
}
