package brief

import (
	"fmt"
	"html/template"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"
	"unicode"
	"unicode/utf8"
)

// Levels of detail, most first.
const (
	everything  = iota
	spectraGo   // of sets that can go: no limit spectra, no budgets
	plainGo     // no pictures of sets that can go
	plainGoLook // pictures of the first sets to look at only
	wordsOnly   // no pictures of sets, no tables of rungs
)

// picturedLook is how many sets to look at keep pictures when space is short.
const picturedLook = 25

// A view is what the page shows, pictures drawn.
type view struct {
	*Data
	Style      template.CSS
	Level      int
	Thinned    string // what was left out for size, "" nothing
	Summary    string
	Strips     []strip
	RefPicture template.HTML
	CaseViews  []caseView
	LookViews  []setView
	GoViews    []setView
	ChartViews []chartView
	Noted      int
	pictures   int
}

// A strip shows one instrument's sets of the night, a sign each.
type strip struct {
	Instrument, Signs, Words string
}

type caseView struct {
	Case
	Anchor     string
	Odds       []Candidate
	ChartViews []chartView
}

type setView struct {
	Set
	Anchor                           string
	Numbers                          []number
	Conditions                       string
	Reasons                          []string // notes other than the headline
	Family, Residual, Limits, Budget template.HTML
	Table                            bool
	Thermo, Beside                   []string
	Touched                          []string // what cases do to it
}

// A number is one constant ready to be read.
type number struct{ Name, Value, K string }

type chartView struct {
	Chart
	Picture template.HTML
	Key     []flagged
	Last    string
	Levels  string
}

func viewOf(d *Data, level int) *view {
	v := &view{Data: d, Style: template.CSS(styleText), Level: level, Summary: capital(d.summary()) + ".", Strips: strips(d)}
	v.RefPicture = v.picture(func(id string) string { return referencePicture(id, d.InControl.References) })
	for i, c := range d.Cases {
		cv := caseView{Case: c, Anchor: fmt.Sprintf("case-%d", i+1), Odds: slices.Clone(c.Candidates)}
		slices.SortStableFunc(cv.Odds, func(a, b Candidate) int { return cmpFloat(b.Probability, a.Probability) })
		for j := range c.Charts {
			cv.ChartViews = append(cv.ChartViews, v.chart(&c.Charts[j]))
		}
		v.CaseViews = append(v.CaseViews, cv)
	}
	for i := range d.Look {
		pictures := level < plainGoLook || level == plainGoLook && i < picturedLook
		v.LookViews = append(v.LookViews, v.set(&d.Look[i], fmt.Sprintf("look-%d", i+1), pictures, false))
	}
	for i := range d.Go {
		v.GoViews = append(v.GoViews, v.set(&d.Go[i], fmt.Sprintf("go-%d", i+1), level < plainGo, true))
		if d.Go[i].Verdict == "stands-noted" {
			v.Noted++
		}
	}
	for i := range d.Charts {
		v.ChartViews = append(v.ChartViews, v.chart(&d.Charts[i]))
	}
	switch level {
	case spectraGo:
		v.Thinned = "To keep this page small, sets that can go have no pictures of limit spectra and budgets here."
	case plainGo:
		v.Thinned = "To keep this page small, sets that can go have no pictures here."
	case plainGoLook:
		v.Thinned = fmt.Sprintf("To keep this page small, only the first %d sets to look at have pictures here.", picturedLook)
	case wordsOnly:
		v.Thinned = "To keep this page small, sets have no pictures and no tables of rungs here."
	}
	return v
}

// AnyChart says whether a control chart is drawn anywhere on the page.
func (v *view) AnyChart() bool {
	return len(v.ChartViews) > 0 || slices.ContainsFunc(v.CaseViews, func(c caseView) bool { return len(c.ChartViews) > 0 })
}

// finding says in words how far an explanation is to be believed.
func finding(f string) string {
	switch f {
	case "named":
		return "one cause stands out"
	case "class":
		return "the class of causes is clear, the cause within it is not"
	case "cannot tell":
		return "cannot tell: several causes are likely"
	}
	return f
}

// answer is the sentence about the system without the word that stands before
// it on the page.
func answer(c Control) string {
	s := c.Sentence
	for _, w := range []string{"Yes, ", "Yes. ", "No, ", "No. ", "Not known: ", "Not known. "} {
		if strings.HasPrefix(s, w) {
			return sentence(s[len(w):])
		}
	}
	return sentence(s)
}

func cmpFloat(a, b float64) int {
	switch {
	case a < b || math.IsNaN(a) && !math.IsNaN(b):
		return -1
	case a > b || math.IsNaN(b) && !math.IsNaN(a):
		return 1
	}
	return 0
}

// picture draws with a fresh id, which title and description refer to.
func (v *view) picture(f func(id string) string) template.HTML {
	v.pictures++
	// The pictures escape every text themselves, see pen.
	return template.HTML(f("p" + strconv.Itoa(v.pictures)))
}

// set prepares one set; calm sets lose their second pictures first.
func (v *view) set(s *Set, anchor string, pictures, calm bool) setView {
	sv := setView{Set: *s, Anchor: anchor, Numbers: numbers(s), Conditions: conditions(s), Table: v.Level < wordsOnly && len(s.Rungs) > 0}
	for _, n := range s.Notes {
		if n != s.Headline && n != "" {
			sv.Reasons = append(sv.Reasons, n)
		}
	}
	sv.Thermo, sv.Beside = besides(s)
	sv.Touched = touchedBy(v.Cases, s)
	if !pictures {
		return sv
	}
	sv.Family = v.picture(func(id string) string { return familyPicture(id, s) })
	sv.Residual = v.picture(func(id string) string { return residualPicture(id, s) })
	if calm && v.Level >= spectraGo {
		return sv
	}
	sv.Limits = v.picture(func(id string) string { return limitPicture(id, s) })
	sv.Budget = v.picture(func(id string) string { return budgetPicture(id, s) })
	return sv
}

// More says whether there is anything to open beneath a set.
func (s setView) More() bool {
	return len(s.Reasons)+len(s.Thermo)+len(s.Beside)+len(s.Touched)+len(s.Lot)+len(s.Limits)+len(s.Budget) > 0 || s.Table
}

// touchedBy says which open cases reach a result, and how far.
func touchedBy(cases []Case, s *Set) []string {
	var out []string
	for _, c := range cases {
		for _, t := range c.Results {
			if c.State == "closed" || t.ResultID != s.ResultID || t.Set != s.Key {
				continue
			}
			line := fmt.Sprintf("Case %d touches it", c.ID)
			if known(t.Impact) {
				line += ": estimated effect on pKa " + signed(t.Impact, 3)
				if known(t.Bound) {
					line += ", at most " + fixed(t.Bound, 3)
				}
			}
			out = append(out, line+".")
		}
	}
	return out
}

// numbers states the constants of a set.
func numbers(s *Set) []number {
	var out []number
	for _, c := range s.Constants {
		name := "pKa"
		if len(s.Constants) > 1 {
			name += " " + strconv.Itoa(max(1, c.Step))
		}
		k := fixed(c.K, 2)
		if c.K == math.Trunc(c.K) {
			k = fixed(c.K, 0)
		}
		if !(c.K > 0) {
			k = "\u2013"
		}
		out = append(out, number{name, measured(c.PKa, c.U), k})
	}
	return out
}

// conditions states the kind of constant and where it holds.
func conditions(s *Set) string {
	var parts []string
	if s.Constant != "" {
		parts = append(parts, s.Constant)
	}
	if known(s.TemperatureC) {
		parts = append(parts, fixed(s.TemperatureC, 1)+"\u00a0°C")
	}
	if known(s.Ionic) && s.Ionic >= 0 {
		parts = append(parts, "I\u00a0=\u00a0"+fixed(s.Ionic, 3)+"\u00a0mol/L")
	}
	return strings.Join(parts, ", ")
}

// besides gives the thermodynamic constants, and the library and anchored ones
// that stand beside the reported number.
func besides(s *Set) (thermo, beside []string) {
	for _, c := range s.Constants {
		name := ""
		if len(s.Constants) > 1 {
			name = fmt.Sprintf("step %d: ", max(1, c.Step))
		}
		d := decimals(c.U)
		if known(c.Thermo) && c.Thermo != 0 {
			thermo = append(thermo, name+measured(c.Thermo, c.UThermo))
		}
		if known(c.Library) && c.Library != 0 {
			beside = append(beside, name+"with archived limit spectra "+fixed(c.Library, d))
		}
		if known(c.Anchored) && c.Anchored != 0 {
			beside = append(beside, name+"anchored to the reference of the night "+fixed(c.Anchored, d))
		}
		if c.UOwn > 0 || c.URun > 0 || c.ULab > 0 {
			beside = append(beside, fmt.Sprintf("%sstandard uncertainty from this set %s, from the run %s, from the laboratory %s", name, small(c.UOwn), small(c.URun), small(c.ULab)))
		}
	}
	return thermo, beside
}

func (v *view) chart(c *Chart) chartView {
	cv := chartView{Chart: *c, Key: flagKey(c)}
	cv.Picture = v.picture(func(id string) string { return controlPicture(id, c) })
	for i := min(len(c.Values), len(c.Nights)) - 1; i >= 0; i-- {
		if known(c.Values[i]) {
			cv.Last = c.Nights[i] + ": " + strings.TrimSpace(c.number(c.Values[i])+" "+c.unit())
			break
		}
	}
	var parts []string
	add := func(name string, x float64) {
		if known(x) {
			parts = append(parts, name+" "+c.number(x))
		}
	}
	add("centre", c.Centre)
	if known(c.Low) && known(c.High) {
		parts = append(parts, "action limits "+c.number(c.Low)+" and "+c.number(c.High))
	} else {
		add("lower action limit", c.Low)
		add("upper action limit", c.High)
	}
	add("assigned value", c.Assigned)
	cv.Levels = strings.Join(parts, ", ")
	return cv
}

// strips groups the sets of a night by instrument.
func strips(d *Data) []strip {
	signs := map[string]string{}
	tally := map[string]map[string]int{}
	var order []string
	for _, list := range [][]Set{d.Look, d.Go} {
		for _, s := range list {
			if tally[s.Instrument] == nil {
				tally[s.Instrument] = map[string]int{}
				order = append(order, s.Instrument)
			}
			signs[s.Instrument] += glyph(s.Verdict)
			tally[s.Instrument][s.Verdict]++
		}
	}
	slices.Sort(order)
	var out []strip
	for _, i := range order {
		var parts []string
		for _, k := range []string{"no number", "held", "in-question", "stands-noted", "stands"} {
			if n := tally[i][k]; n > 0 {
				parts = append(parts, fmt.Sprintf("%d %s", n, k))
			}
		}
		out = append(out, strip{i, signs[i], strings.Join(parts, ", ")})
	}
	if n := len(d.Waiting); n > 0 {
		out = append(out, strip{"not here", strings.Repeat("◌", min(n, 200)), fmt.Sprintf("%d waiting", n)})
	}
	return out
}

// Label names a reference in one line.
func (r Reference) Label() string {
	s := r.Title
	if s == "" {
		s = r.Key
	}
	if r.Instrument != "" {
		s = r.Instrument + ", " + s
	}
	if r.Slot != "" {
		s += ", " + r.Slot
	}
	return s
}

// percent writes a probability.
func percent(p float64) string {
	switch {
	case !known(p):
		return "\u2013"
	case p > 0 && p < 0.005:
		return "< 1 %"
	case p > 0.995 && p < 1:
		return "> 99 %"
	}
	return fixed(100*p, 0) + " %"
}

// odds is a bar beside a probability; the number beside it says the same.
func odds(p float64) string {
	if !known(p) {
		p = 0
	}
	w := 72 * math.Max(0, math.Min(1, p))
	return `<svg class="odds" viewBox="0 0 72 10" width="72" height="10" aria-hidden="true"><path class="axis" d="M0 9.5H72"/><rect class="bar own" y="1" width="` + coord(w) + `" height="8"/></svg>`
}

// small writes a standard uncertainty or an effect on a pKa.
func small(u float64) string {
	if !known(u) {
		return "\u2013"
	}
	return fixed(u, max(3, min(4, decimals(math.Abs(u)))))
}

// stamp writes a time without any country's habits; "" unknown.
func stamp(t time.Time) string {
	if t.IsZero() {
		return "not known"
	}
	return t.Format("2006-01-02 15:04 -07:00")
}

// when is a time as machines read it.
func when(t time.Time) string { return t.Format(time.RFC3339) }

// capital makes the first letter large where the first word is a plain one;
// pH, pKa and names of files keep their writing.
func capital(s string) string {
	word, _, _ := strings.Cut(s, " ")
	if word == "" {
		return s
	}
	for _, r := range strings.TrimRight(word, ",;:.") {
		if !unicode.IsLower(r) {
			return s
		}
	}
	r, n := utf8.DecodeRuneInString(s)
	return string(unicode.ToUpper(r)) + s[n:]
}

// sentence ends a text with a stop if it has none.
func sentence(s string) string {
	s = capital(strings.TrimSpace(s))
	if s == "" || strings.ContainsAny(s[len(s)-1:], ".!?:") {
		return s
	}
	return s + "."
}
