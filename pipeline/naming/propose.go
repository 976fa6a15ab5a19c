package naming

import (
	"fmt"
	"path"
	"slices"
	"strconv"
	"strings"
	"time"
)

// A Proposal is a rule made from names that were seen.
type Proposal struct {
	Rule   Rule
	Paths  []string // that it covers, as given
	Doubts []string // sentences on what could not be decided from the names
}

// Propose clusters names into patterns with named groups, for a first
// settings file. Every path it covers fits exactly one of the rules. Paths
// that resemble nothing come back in a last Proposal with an empty Rule.
func Propose(paths []string) []Proposal {
	p := proposer{paths: paths}
	p.cluster()
	p.understand()
	// Expressions that leave room for other codes serve longer; where they get
	// into each other's way, words that never vary are written out.
	wide := verified(p.rules(false), paths)
	if n := unplaced(wide); n > 0 {
		p.exact = true
		if exact := verified(p.rules(false), paths); unplaced(exact) < n {
			return exact
		}
	}
	return wide
}

// unplaced counts the paths that no rule covers.
func unplaced(props []Proposal) int {
	n := 0
	for _, p := range props {
		if p.Rule.Name == "" {
			n += len(p.Paths)
		}
	}
	return n
}

// ProposeColumn does for the labels of the traces in one file what Propose
// does for paths: a column pattern, "" if none can be made, and doubts.
func ProposeColumn(labels []string) (pattern string, doubts []string) {
	p := proposer{paths: labels}
	p.cluster()
	p.understand()
	out := p.rules(true)
	if len(out) != 1 || out[0].Rule.Pattern == "" {
		return "", []string{"The labels inside the file follow no single pattern; write the column pattern by hand."}
	}
	for _, l := range labels {
		if !slices.Contains(out[0].Paths, l) {
			doubts = append(doubts, fmt.Sprintf("The label %q does not fit the column pattern.", l))
		}
	}
	return out[0].Rule.Pattern, doubts
}

// proposer holds the names while they are sorted.
type proposer struct {
	paths    []string
	clusters []*cluster
	runs     map[string]bool // identities that are runs: a sheet or tray positions go with them
	exact    bool            // write constant words out instead of leaving room for other codes
}

// cluster is a group of names of one form.
type cluster struct {
	rows  []row
	kinds []kind // of each column, after all decisions
	set   []int  // columns of the identity, ascending; nil: none
	free  []int  // columns of directories that say nothing
	isRun bool   // the identity is a run and not a set
}

// row is one name.
type row struct {
	path   string // as given
	fields []field
}

func (c *cluster) column(i int) []string {
	out := make([]string, len(c.rows))
	for k, r := range c.rows {
		out[k] = r.fields[i].text
	}
	return out
}

func (c *cluster) distinct(i int) []string {
	v := c.column(i)
	slices.Sort(v)
	return slices.Compact(v)
}

// cluster sorts the names by form.
func (p *proposer) cluster() {
	x := newLexer()
	byForm := map[string]*cluster{}
	for _, given := range p.paths {
		f := x.lex(Normal(given))
		form := formOf(f)
		c := byForm[form]
		if c == nil {
			c = &cluster{}
			for _, e := range f {
				c.kinds = append(c.kinds, e.kind)
			}
			byForm[form] = c
			p.clusters = append(p.clusters, c)
		}
		c.rows = append(c.rows, row{given, f})
	}
}

// formOf is what names of one cluster have in common.
func formOf(f []field) string {
	var b strings.Builder
	for _, e := range f {
		switch e.kind {
		case literal:
			b.WriteString(e.text)
		case letters:
			if strings.ToUpper(e.text) == e.text {
				b.WriteString("\x01A")
			} else {
				b.WriteString("\x01a")
			}
		default:
			fmt.Fprintf(&b, "\x02%d.", e.kind)
		}
	}
	return b.String()
}

// understand decides what only shows in many names together.
func (p *proposer) understand() {
	for _, c := range p.clusters {
		c.dates()
		c.positions()
		c.instrument()
	}
	for _, c := range p.clusters {
		p.tail(c)
	}
	for _, c := range p.clusters {
		c.identity()
	}
	p.findRuns()
}

// dates takes columns of six digits that are dates throughout.
func (c *cluster) dates() {
	for i, k := range c.kinds {
		if k != digits || !c.bounded(i) {
			continue
		}
		all := true
		for _, v := range c.distinct(i) {
			t, err := time.Parse("060102", v)
			all = all && err == nil && t.Year() >= 2010 && t.Year() <= 2040
		}
		if all {
			c.kinds[i] = kDate
		}
	}
}

// bounded reports whether a column stands between separators.
func (c *cluster) bounded(i int) bool {
	return (i == 0 || c.kinds[i-1] == literal) && (i+1 >= len(c.kinds) || c.kinds[i+1] == literal)
}

// positions takes a letter with a number for a tray position where letters and
// numbers vary as those of trays do and no rung is there.
func (c *cluster) positions() {
	if slices.Contains(c.kinds, kRung) {
		return
	}
	for i := 1; i+1 < len(c.kinds); i++ {
		if c.kinds[i] != letters || c.kinds[i+1] != digits || c.kinds[i-1] != literal || (i+2 < len(c.kinds) && c.kinds[i+2] != literal) {
			continue
		}
		ok := true
		for _, r := range c.rows {
			l, d := r.fields[i].text, r.fields[i+1].text
			n, err := strconv.Atoi(d)
			ok = ok && err == nil && len(l) == 1 && l >= "A" && l <= "P" && n >= 1 && n <= 24 && len(d) <= 2
		}
		if !ok || len(c.distinct(i))*len(c.distinct(i+1)) < 3 || len(c.distinct(i+1)) < 2 {
			continue
		}
		if len(c.distinct(i)) < 2 && !slices.Contains(c.kinds, kStamp) {
			continue
		}
		for k := range c.rows {
			f := c.rows[k].fields
			f[i].text += f[i+1].text
			c.rows[k].fields = slices.Delete(f, i+1, i+2)
		}
		c.kinds = slices.Delete(c.kinds, i+1, i+2)
		c.kinds[i] = kPos
		return
	}
}

// instrument takes a first directory such as U1, U2 for the instrument.
func (c *cluster) instrument() {
	if len(c.kinds) < 4 || c.kinds[0] != letters || c.kinds[1] != digits || c.kinds[2] != literal || c.rows[0].fields[2].text != "/" {
		return
	}
	for _, r := range c.rows {
		if len(r.fields[0].text) > 4 || len(r.fields[1].text) > 1 {
			return
		}
	}
	if !slices.ContainsFunc(c.kinds[3:], func(k kind) bool { return k == digits }) {
		return // then it is the only thing that can tell sets apart
	}
	for k := range c.rows {
		f := c.rows[k].fields
		f[0].text += f[1].text
		c.rows[k].fields = slices.Delete(f, 1, 2)
	}
	c.kinds = slices.Delete(c.kinds, 1, 2)
	c.kinds[0] = kInst
}

// tail decides what a bare number at the end of a name is: a rung, a place in
// a sequence, a version, or part of the identity.
func (p *proposer) tail(c *cluster) {
	i := len(c.kinds) - 2
	if i < 1 || c.kinds[i] != digits {
		return
	}
	if slices.ContainsFunc(c.kinds, func(k kind) bool { return k == kRung || k == kPos || k == kPH }) {
		return
	}
	switch {
	case c.kinds[i-1] == literal && p.withoutTail(c, i):
		c.kinds[i] = kRev
	case c.kinds[i-1] == literal && i >= 2 && c.kinds[i-2] != literal && c.counts(i):
		c.kinds[i] = kRung
	case c.kinds[i-1] == letters && len(c.distinct(i-1)) == 1 && c.alone(i) && c.counts(i):
		c.kinds[i] = kSeq
	}
}

// withoutTail reports whether names without the number exist too and the numbers are small: then it is a version.
func (p *proposer) withoutTail(c *cluster, i int) bool {
	for _, v := range c.distinct(i) {
		if n, err := strconv.Atoi(v); err != nil || n > 20 || v[0] == '0' {
			return false
		}
	}
	stems := map[string]bool{} // the first version may bear another extension
	for _, o := range p.clusters {
		for _, r := range o.rows {
			stem, _ := splitExt(Normal(r.path))
			stems[stem] = true
		}
	}
	hits := 0
	for _, r := range c.rows {
		if stems[textOf(r.fields[:i-1])] {
			hits++
		}
	}
	return 2*hits > len(c.rows)
}

func textOf(f []field) string {
	var b strings.Builder
	for _, e := range f {
		b.WriteString(e.text)
	}
	return b.String()
}

// counts reports whether a column counts from 0 or 1 within what stands before it.
func (c *cluster) counts(i int) bool {
	by := map[string][]int{}
	for _, r := range c.rows {
		n, err := strconv.Atoi(r.fields[i].text)
		if err != nil {
			return false
		}
		k := textOf(r.fields[:i])
		by[k] = append(by[k], n)
	}
	good := 0
	for _, n := range by {
		if len(n) >= 3 && slices.Min(n) <= 1 && slices.Max(n)-slices.Min(n)+1 <= 2*len(n) {
			good++
		}
	}
	return 2*good > len(by)
}

// alone reports whether nothing else before column i could tell sets apart.
func (c *cluster) alone(i int) bool {
	for k := range i - 1 {
		if (c.kinds[k] == letters || c.kinds[k] == digits) && len(c.distinct(k)) > 1 {
			return false
		}
	}
	return true
}

// identity finds the columns that name the set. What is left of letters and
// digits falls into stretches broken by directories and by parts that are
// understood; the last stretch with a digit is the name.
func (c *cluster) identity() {
	var stretches [][]int
	var cur []int
	flush := func() {
		if len(cur) > 0 {
			stretches = append(stretches, cur)
		}
		cur = nil
	}
	for i, k := range c.kinds {
		switch {
		case k == letters || k == digits:
			cur = append(cur, i)
		case k == literal && !strings.Contains(c.rows[0].fields[i].text, "/"):
		default:
			flush()
		}
	}
	flush()
	best := -1
	for n, s := range stretches {
		word := c.rows[0].fields[s[0]].text
		code := best < 0 && c.hasMarks() && len(word) > 1 && upper(word) // the only set so far, without a number
		if code || slices.ContainsFunc(s, func(i int) bool { return c.kinds[i] == digits || len(c.distinct(i)) > 1 }) {
			best = n
		}
	}
	for n, s := range stretches {
		switch {
		case n == best:
			c.set = c.trimPrefix(s)
		case slices.ContainsFunc(s, func(i int) bool { return len(c.distinct(i)) > 1 }):
			c.free = append(c.free, s...)
		}
	}
}

func upper(s string) bool { return strings.ToUpper(s) == s }

// hasMarks reports whether the names carry something that only the names of sets carry.
func (c *cluster) hasMarks() bool {
	return slices.ContainsFunc(c.kinds, func(k kind) bool {
		return k == kRung || k == kRole || k == kRev || k == kNight || k == kSlot || k == kPH || k == kFix
	})
}

// trimPrefix takes a constant word in capitals off the front of an identity
// where a whole code follows it: TIT_TB2219 is set TB2219.
func (c *cluster) trimPrefix(s []int) []int {
	if len(s) < 3 || c.kinds[s[0]] != letters || len(c.distinct(s[0])) != 1 || s[1] != s[0]+2 || c.rows[0].fields[s[0]+1].text != "_" {
		return s
	}
	if c.kinds[s[1]] != letters || c.kinds[s[2]] != digits || s[2] != s[1]+1 {
		return s
	}
	for _, r := range c.rows {
		if len(r.fields[s[1]].text) < 2 || len(r.fields[s[2]].text) < 3 {
			return s
		}
	}
	return s[1:]
}

// name is the identity of one name.
func (c *cluster) name(r row) string {
	if len(c.set) == 0 {
		return ""
	}
	return textOf(r.fields[c.set[0] : c.set[len(c.set)-1]+1])
}

// findRuns finds identities that are runs: their sheet says which set stands where.
func (p *proposer) findRuns() {
	p.runs = map[string]bool{}
	for _, c := range p.clusters {
		role := slices.Index(c.kinds, kRole)
		for _, r := range c.rows {
			sheet := false
			if role >= 0 {
				what, _ := RoleOf(r.fields[role].text)
				sheet = what == RoleSheet
			}
			if n := c.name(r); n != "" && (sheet || slices.Contains(c.kinds, kPos)) {
				p.runs[n] = true
			}
		}
	}
	for _, c := range p.clusters {
		hits := 0
		for _, r := range c.rows {
			if p.runs[c.name(r)] {
				hits++
			}
		}
		c.isRun = 2*hits > len(c.rows)
	}
}

// verified holds the rules against all paths: what does not fit exactly one
// is left over.
func verified(out []Proposal, paths []string) []Proposal {
	var left []string
	rules := make([]Rule, len(out))
	for i, o := range out {
		rules[i] = o.Rule
		out[i].Paths = nil
	}
	rs, err := Compile(rules)
	if err != nil {
		return []Proposal{{Paths: paths, Doubts: []string{fmt.Sprintf("No rules can be made from these names: %v", err)}}}
	}
	for _, given := range paths {
		m, err := rs.Match("", given)
		if err != nil {
			left = append(left, given)
			continue
		}
		i := slices.IndexFunc(rules, func(r Rule) bool { return r.Name == m.Rule })
		out[i].Paths = append(out[i].Paths, given)
	}
	out = slices.DeleteFunc(out, func(o Proposal) bool { return len(o.Paths) == 0 })
	for i := range out {
		out[i].Rule.Example = examples(out[i].Paths)
	}
	if len(left) > 0 {
		slices.Sort(left)
		out = append(out, Proposal{Paths: left, Doubts: []string{fmt.Sprintf(
			"%d of %d names resemble none of the others, for example %q; they would be parked.", len(left), len(paths), path.Base(left[0]))}})
	}
	return out
}

// examples picks a few paths of different shape.
func examples(paths []string) []string {
	var out []string
	seen := map[string]bool{}
	for _, p := range paths {
		if s := shape(p); !seen[s] && len(out) < 4 {
			seen[s] = true
			out = append(out, p)
		}
	}
	return out
}
