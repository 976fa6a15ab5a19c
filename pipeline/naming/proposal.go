package naming

import (
	"fmt"
	"regexp"
	"slices"
	"strings"
)

// piece of a pattern: regular expression text and the group it defines.
type part struct {
	re    string
	group string
}

// form is a cluster turned into parts.
type form struct {
	c     *cluster
	parts []part
}

// rules turns clusters into rules: forms that begin alike become one rule with
// alternatives. column says that the names are labels inside one file.
func (p *proposer) rules(column bool) []Proposal {
	widths := p.widths()
	var forms []form
	for _, c := range p.clusters {
		if p.stray(c) {
			continue
		}
		forms = append(forms, form{c: c, parts: c.parts(widths, p.exact)})
	}
	var out []Proposal
	used := map[string]bool{}
	for _, family := range families(forms) {
		r := Rule{Pattern: `^` + alternatives(family, 0) + `$`}
		var paths []string
		for _, f := range family {
			for _, row := range f.c.rows {
				paths = append(paths, row.path)
			}
		}
		var doubts []string
		describe(&r, family, &doubts, column)
		r.Name = freeName(r, family, used)
		out = append(out, Proposal{Rule: r, Paths: paths, Doubts: doubts})
	}
	p.pairByClock(out)
	return out
}

// stray reports whether a cluster is too small and too unlike the others to make a rule of.
func (p *proposer) stray(c *cluster) bool {
	_, ext := splitExt(Normal(c.rows[0].path))
	if slices.Contains([]string{".pdf", ".jpg", ".jpeg", ".png", ".doc", ".docx", ".xls", ".xlsx", ".zip", ".exe", ".bak", ".ini", ".log"}, strings.ToLower(ext)) {
		return true
	}
	if len(c.rows) > 2 || len(p.paths) < 12 {
		return false
	}
	// Few of a kind among many: kept when a known identity stands behind it, or none does and a role says what it is.
	for _, r := range c.rows {
		n := c.name(r)
		if n == "" {
			if slices.Contains(c.kinds, kRole) {
				return false
			}
			continue
		}
		for _, o := range p.clusters {
			if o != c && slices.ContainsFunc(o.rows, func(x row) bool { return o.name(x) == n }) {
				return false
			}
		}
	}
	return true
}

// width is what was seen of one column of identities of one form.
type width struct {
	min, max int
	values   map[string]bool
	sets     map[string]bool
}

// widths gathers identities over all clusters, so that scans and blanks of the
// same sets get the same expression.
func (p *proposer) widths() map[string][]width {
	out := map[string][]width{}
	for _, c := range p.clusters {
		if len(c.set) == 0 {
			continue
		}
		key := c.identityForm()
		w := out[key]
		if w == nil {
			w = make([]width, len(c.set))
			for i := range w {
				w[i] = width{min: 1 << 30, values: map[string]bool{}, sets: map[string]bool{}}
			}
		}
		for n, i := range c.set {
			for _, r := range c.rows {
				t := r.fields[i].text
				l := len([]rune(t))
				w[n].min, w[n].max = min(w[n].min, l), max(w[n].max, l)
				w[n].values[t] = true
				w[n].sets[c.name(r)] = true
			}
		}
		out[key] = w
	}
	return out
}

func (c *cluster) identityForm() string {
	return formOf(c.rows[0].fields[c.set[0] : c.set[len(c.set)-1]+1])
}

// parts writes the cluster as pattern parts.
func (c *cluster) parts(widths map[string][]width, exact bool) []part {
	var out []part
	for i := 0; i < len(c.kinds); i++ {
		if len(c.set) > 0 && i == c.set[0] {
			group := "set"
			if c.isRun {
				group = "run"
			}
			out = append(out, part{re: fmt.Sprintf(`(?P<%s>%s)`, group, c.identityRE(widths[c.identityForm()], exact)), group: group})
			i = c.set[len(c.set)-1]
			continue
		}
		if slices.Contains(c.free, i) {
			out = append(out, part{re: `[^/]+`})
			for i+1 < len(c.kinds) && (slices.Contains(c.free, i+1) || (slices.Contains(c.free, i+2) && c.rows[0].fields[i+1].text != "/")) {
				i++
			}
			continue
		}
		out = append(out, c.part(i))
	}
	return out
}

// identityRE writes the expression of the identity: classes for what may vary,
// words for what is the same in many sets.
func (c *cluster) identityRE(w []width, exact bool) string {
	var b strings.Builder
	n := 0
	for i := c.set[0]; i <= c.set[len(c.set)-1]; i++ {
		if c.kinds[i] != letters && c.kinds[i] != digits {
			b.WriteString(regexp.QuoteMeta(c.rows[0].fields[i].text))
			continue
		}
		x := w[n]
		n++
		word := ""
		for v := range x.values {
			word = v
		}
		switch {
		case c.kinds[i] == digits && x.min == x.max && x.min >= 3:
			fmt.Fprintf(&b, `\d{%d}`, x.min)
		case c.kinds[i] == digits:
			b.WriteString(`\d+`)
		case len(x.values) == 1 && len(x.sets) >= 3 && (exact || !upper(word)):
			b.WriteString(regexp.QuoteMeta(word))
		case !upper(word):
			b.WriteString(`\p{L}+`)
		case x.max == 1:
			b.WriteString(`[A-Z]`)
		default:
			fmt.Fprintf(&b, `[A-Z]{%d,%d}`, min(2, x.min), max(4, x.max+1))
		}
	}
	return b.String()
}

// part writes one column that is no identity.
func (c *cluster) part(i int) part {
	v := c.distinct(i)
	group := func(name, re string) part { return part{re: fmt.Sprintf(`(?P<%s>%s)`, name, re), group: name} }
	switch c.kinds[i] {
	case dash:
		return part{re: ` +[-–—] +`}
	case kDate:
		return group("date", digitsRE(v[0]))
	case kStamp:
		return group("stamp", digitsRE(v[0]))
	case kPH:
		return group("ph", `\d{1,2}`+regexp.QuoteMeta(pointOf(v[0]))+`\d{1,3}`)
	case kCelsius:
		return group("celsius", `\d{1,2}(?:[.,]\d)?`)
	case kRung:
		return group("rung", numberRE(v))
	case kSeq:
		return group("pos", `\d{1,3}`)
	case kPos:
		return group("pos", `[A-P]\d{1,2}`)
	case kNight:
		return group("night", numberRE(v))
	case kRev:
		return group("rev", `\d+`)
	case kCopy:
		return group("copy", `\d+`)
	case kRep:
		return group("rep", `[a-z]`)
	case kInst:
		return group("inst", strings.Join(v, "|"))
	case kRole:
		return group("role", strings.Join(v, "|"))
	case kSlot:
		return group("slot", strings.Join(slotWords(v), "|"))
	case kFix:
		return group("fix", strings.Join(v, "|"))
	case digits:
		return part{re: numberRE(v)}
	}
	for k := range v {
		v[k] = regexp.QuoteMeta(v[k])
	}
	if len(v) == 1 {
		return part{re: v[0]}
	}
	return part{re: `(?:` + strings.Join(v, "|") + `)`}
}

// slotWords adds the other words of the same series, which other nights will bring.
func slotWords(seen []string) []string {
	for _, series := range [][]string{{"open", "mid", "close"}, {"opening", "middle", "closing"}} {
		if !slices.ContainsFunc(seen, func(s string) bool { return !slices.Contains(series, s) }) {
			return series
		}
	}
	return seen
}

func pointOf(s string) string {
	for _, p := range []string{",", "p"} {
		if strings.Contains(s, p) {
			return p
		}
	}
	return "."
}

// digitsRE turns a date or time into the same with \d for its digits.
func digitsRE(s string) string {
	var b strings.Builder
	n := 0
	flush := func() {
		if n > 0 {
			fmt.Fprintf(&b, `\d{%d}`, n)
		}
		n = 0
	}
	for _, r := range s {
		if r >= '0' && r <= '9' {
			n++
			continue
		}
		flush()
		b.WriteString(regexp.QuoteMeta(string(r)))
	}
	flush()
	return b.String()
}

// numberRE is \d{n} where every number has n digits and more than one, else \d{1,n}.
func numberRE(v []string) string {
	lo, hi := len(v[0]), len(v[0])
	for _, s := range v {
		lo, hi = min(lo, len(s)), max(hi, len(s))
	}
	if lo == hi && hi > 1 {
		return fmt.Sprintf(`\d{%d}`, hi)
	}
	return fmt.Sprintf(`\d{1,%d}`, max(3, hi))
}

// families groups forms that begin with the same identity.
func families(forms []form) [][]form {
	var out [][]form
next:
	for _, f := range forms {
		for i, fam := range out {
			if joins(fam, f) {
				out[i] = append(out[i], f)
				continue next
			}
		}
		out = append(out, []form{f})
	}
	return out
}

func joins(fam []form, f form) bool {
	n := common(fam[0].parts, f.parts)
	return slices.ContainsFunc(fam[0].parts[:n], func(p part) bool { return p.group == "set" || p.group == "run" })
}

func common(a, b []part) int {
	n := 0
	for n < len(a) && n < len(b) && a[n] == b[n] {
		n++
	}
	return n
}

// alternatives writes forms that agree up to part n as one expression.
func alternatives(forms []form, n int) string {
	if len(forms) == 1 {
		return written(forms[0].parts[n:])
	}
	same := len(forms[0].parts)
	for _, f := range forms[1:] {
		same = min(same, common(forms[0].parts, f.parts))
	}
	var groups [][]form // forms that go on alike stay together
	for _, f := range forms {
		i := slices.IndexFunc(groups, func(g []form) bool {
			return same < len(f.parts) && same < len(g[0].parts) && g[0].parts[same] == f.parts[same]
		})
		if i >= 0 {
			groups[i] = append(groups[i], f)
		} else {
			groups = append(groups, []form{f})
		}
	}
	var alts []string
	for _, g := range groups {
		alts = append(alts, alternatives(g, same))
	}
	alts, tail := commonTail(alts)
	body := `(?:` + strings.Join(alts, "|") + `)`
	if i := slices.Index(alts, ""); i >= 0 {
		alts = slices.Delete(alts, i, i+1)
		body = `(?:` + strings.Join(alts, "|") + `)?`
	}
	return written(forms[0].parts[n:same]) + body + tail
}

// commonTail takes an extension that all alternatives share out of them.
func commonTail(alts []string) ([]string, string) {
	at := strings.LastIndex(alts[0], `\.`)
	if at < 0 {
		return alts, ""
	}
	tail := alts[0][at:]
	if strings.ContainsAny(tail, "()|[]") {
		return alts, ""
	}
	out := make([]string, len(alts))
	for i, a := range alts {
		cut, ok := strings.CutSuffix(a, tail)
		if !ok {
			return alts, ""
		}
		out[i] = cut
	}
	return out, tail
}

func written(parts []part) string {
	var b strings.Builder
	for _, p := range parts {
		b.WriteString(p.re)
	}
	return b.String()
}
