// Package verdict judges the result of one set: every check stores the value
// it looked at, its limits and its outcome, and says in a sentence what was
// found and what would make a held set stand. The verdict is the worst of the
// checks.
//
// Nothing is repaired here. What changes meaning (an exchange of labels, a
// shifted table) is proposed with odds for a person to sign.
//
// The package is pure: it knows no file, database, queue, logger or clock.
package verdict

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"
)

// An Outcome is the judgement of one check, and of a set.
type Outcome string

// Outcomes from best to worst.
const (
	Stands   Outcome = "stands"       // report
	Noted    Outcome = "stands-noted" // report, the notes go with the number everywhere
	Held     Outcome = "held"         // stored and shown to staff, not released
	NoNumber Outcome = "no number"    // could not be computed
)

var severity = map[Outcome]int{Stands: 0, Noted: 1, Held: 2, NoNumber: 3}

// Worse returns the worse of two outcomes.
func Worse(a, b Outcome) Outcome {
	if severity[b] > severity[a] {
		return b
	}
	return a
}

// A Check is one judged quantity.
type Check struct {
	Key      string  `json:"key"`
	Value    float64 `json:"value"` // NaN only while being built; checks without a number carry 0 and no limits
	Unit     string  `json:"unit,omitempty"`
	Note     Band    `json:"note"` // outside: stands-noted
	Hold     Band    `json:"hold"` // outside: held
	Outcome  Outcome `json:"outcome"`
	Sentence string  `json:"sentence"`
	Action   string  `json:"action,omitempty"` // what would make it stand
}

// A Band is an interval a value may lie in; infinities leave a side open.
type Band struct{ Low, High float64 }

// Contains reports whether v lies in the band. NaN lies in none.
func (b Band) Contains(v float64) bool { return v >= b.Low && v <= b.High }

// AtMost, AtLeast and Within build bands.
func AtMost(v float64) Band { return Band{math.Inf(-1), v} }

// AtLeast is the band from v upwards.
func AtLeast(v float64) Band { return Band{v, math.Inf(1)} }

// Within is the symmetric band around zero.
func Within(v float64) Band { return Band{-v, v} }

// Anything is the band that holds every number.
func Anything() Band { return Band{math.Inf(-1), math.Inf(1)} }

// A Limit is the pair of bands of one check.
type Limit struct {
	Note, Hold Band
	Off        bool
}

// Limits are the limits in force by check key. Keys that are missing use Defaults.
type Limits map[string]Limit

// A Report is the judgement of one set.
type Report struct {
	Verdict Outcome  `json:"verdict"`
	Checks  []Check  `json:"checks"`  // worst first, then by key
	Actions []string `json:"actions"` // shortest list of actions that would make a held set stand
}

// Reasons returns the sentences of every check that is not simply passed, worst first.
func (r Report) Reasons() []string {
	var s []string
	for _, c := range r.Checks {
		if c.Outcome != Stands {
			s = append(s, c.Sentence)
		}
	}
	return s
}

// Headline is one sentence that says why, for a list.
func (r Report) Headline() string {
	if s := r.Reasons(); len(s) > 0 {
		return s[0]
	}
	return "All checks passed."
}

// judge collects checks.
type judge struct {
	limits Limits
	checks []Check
}

// number judges v under the limits of key. Sentence and action are used only
// when the value is outside a band; a NaN value is held as uncomputable.
func (j *judge) number(key string, v float64, unit, sentence, action string) {
	lim, ok := j.limits[key]
	if !ok {
		lim = Defaults[key]
	}
	if lim.Off {
		j.off(key)
		return
	}
	c := Check{Key: key, Value: v, Unit: unit, Note: lim.Note, Hold: lim.Hold, Outcome: Stands}
	switch {
	case math.IsNaN(v):
		c.Value, c.Outcome = 0, Held
		c.Sentence, c.Action = "The check "+key+" could not be computed for this set.", action
	case !lim.Hold.Contains(v):
		c.Outcome, c.Sentence, c.Action = Held, sentence, action
	case !lim.Note.Contains(v):
		c.Outcome, c.Sentence, c.Action = Noted, sentence, action
	default:
		c.Sentence = fmt.Sprintf("%s within limits.", key)
	}
	j.checks = append(j.checks, c)
}

// finding records a check without a number.
func (j *judge) finding(key string, o Outcome, sentence, action string) {
	if lim, ok := j.limits[key]; ok && lim.Off {
		j.off(key)
		return
	}
	j.checks = append(j.checks, Check{Key: key, Note: Anything(), Hold: Anything(), Outcome: o, Sentence: sentence, Action: action})
}

// off records that a check was not made, once.
func (j *judge) off(key string) {
	if !slices.ContainsFunc(j.checks, func(c Check) bool { return c.Key == key }) {
		j.checks = append(j.checks, Check{Key: key, Note: Anything(), Hold: Anything(), Outcome: Stands, Sentence: key + " is switched off in the settings: not checked."})
	}
}

// report sorts the checks and derives verdict and actions.
func (j *judge) report() Report {
	slices.SortStableFunc(j.checks, func(a, b Check) int {
		return cmp.Or(cmp.Compare(severity[b.Outcome], severity[a.Outcome]), rank(a.Key)-rank(b.Key), strings.Compare(a.Key, b.Key))
	})
	r := Report{Verdict: Stands, Checks: j.checks}
	seen := map[string]bool{}
	for _, c := range j.checks {
		r.Verdict = Worse(r.Verdict, c.Outcome)
		if severity[c.Outcome] >= severity[Held] && c.Action != "" && !seen[c.Action] {
			seen[c.Action] = true
			r.Actions = append(r.Actions, c.Action)
		}
	}
	r.Actions = shortest(r.Actions, j.checks)
	return r
}

// causes names checks that explain others: when the first is held, the
// actions of the second add nothing, because mending the first mends them.
var causes = map[string][]string{
	"label.exchange": {"ph.latent", "ph.improbable", "rung.out", "rung.influence", "slope", "uncertainty.target", "third.component", "ladder.nominal"},
	"ladder.shift":   {"ladder.nominal"},
	"second.dye":     {"third.component", "slope", "library"},
	"scan.doubled":   {"ph.latent", "ph.improbable", "rung.out", "rung.influence"},
	"calibration":    {"calibration.slope", "calibration.potential", "calibration.residual"},
	"rung.out":       {"ph.latent", "ph.improbable", "rung.influence"},
	"rungs.usable":   {"uncertainty.target", "rungs.near"},
}

// shortest drops actions that a more basic held check makes needless.
func shortest(actions []string, checks []Check) []string {
	implied := map[string]bool{}
	for _, c := range checks {
		if severity[c.Outcome] < severity[Held] {
			continue
		}
		for _, k := range causes[c.Key] {
			for _, d := range checks {
				if d.Key == k && d.Action != c.Action {
					implied[d.Action] = true
				}
			}
		}
	}
	return slices.DeleteFunc(actions, func(a string) bool { return implied[a] && len(actions) > 1 })
}

// order lists checks that name a cause before those that show its symptoms.
var order = []string{"fit", "label.exchange", "ladder.shift", "ladder.nominal", "scan.doubled", "scan.clone", "dye.identity", "calibration", "second.dye",
	"rungs.usable", "forms.reached", "rungs.near", "ladder.gap", "rung.out", "blank", "colour.change", "absorbance.ceiling", "clear.window",
	"third.component", "slope", "ph.improbable", "ph.latent", "rung.influence", "uncertainty.target"}

func rank(key string) int {
	if i := slices.Index(order, key); i >= 0 {
		return i
	}
	return len(order)
}
