package drift

import (
	"fmt"
	"slices"
)

// A State of a case.
type State string

// The states of a case.
const (
	Open         State = "open"
	Acknowledged State = "acknowledged" // a person has said "I know"; not closed, verdicts unchanged
	Closed       State = "closed"
)

// A Case is one explained disturbance on one resource.
type Case struct {
	ID          int64       `json:"id"` // 0 until stored
	Resource    Resource    `json:"resource"`
	State       State       `json:"state"`
	Opened      Night       `json:"opened"`
	Closed      Night       `json:"closed,omitempty"`
	ClosedWhy   string      `json:"closed_why,omitempty"`
	Explanation Explanation `json:"explanation"` // the latest that supported it
	Resources   []Resource  `json:"resources"`   // all that were named first so far
	Parts       []Mask      `json:"parts"`       // every cause that was joined to the case
	Instruments []string    `json:"instruments"` // affected
	Impact      float64     `json:"impact"`      // largest absolute change of a reference's pKa so far, upper 95 % bound
	OverLimit   bool        `json:"over_limit"`
	Inside      int         `json:"inside"`    // consecutive telling nights on which the disturbance did not show
	LastSeen    Night       `json:"last_seen"` // last night on which it showed
	AckBy       string      `json:"ack_by,omitempty"`
	AckOn       Night       `json:"ack_on,omitempty"`
	AckWhy      string      `json:"ack_why,omitempty"`
	Escalated   Night       `json:"escalated,omitempty"`
}

// Lead is the likeliest known cause of the case; false if there is none.
func (c Case) Lead() (Candidate, bool) { return c.Explanation.Lead() }

// Lead is the likeliest known cause; false if there is none.
func (e Explanation) Lead() (Candidate, bool) {
	for _, c := range e.Candidates {
		if c.Cause != Unknown {
			return c, true
		}
	}
	return Candidate{}, false
}

// Masks take the disturbances of a closed case out of later evaluations.
func (c Case) Masks() []Mask {
	until := c.Closed
	if c.Inside > 0 && c.LastSeen > c.Opened && c.LastSeen < until {
		until = c.LastSeen
	}
	out := slices.Clone(c.Parts)
	for i := range out {
		out[i].Until = max(until, out[i].From)
	}
	return out
}

// join records a cause of the case with the earliest onset it was given.
func (c *Case) join(k Candidate) {
	for i, p := range c.Parts {
		if p.Resource == k.Resource && p.Cause == k.Cause {
			c.Parts[i].From = min(p.From, k.Since.Low)
			return
		}
	}
	c.Parts = append(c.Parts, Mask{Resource: k.Resource, Cause: k.Cause, From: k.Since.Low})
}

// Watch asks the next evaluation whether the disturbance still shows; false
// where no known cause could be watched.
func (c Case) Watch() (Watch, bool) {
	lead, ok := c.Lead()
	return Watch{CaseID: c.ID, Candidate: lead}, ok
}

// A Change says what happened to a case in one night.
type Change string

// The changes of a case, each a reason to speak.
const (
	ChangeOpened    Change = "opened"
	ChangeCause     Change = "likeliest cause changed"
	ChangeImpact    Change = "impact crossed the limit"
	ChangeResource  Change = "another instrument or resource affected"
	ChangeEscalated Change = "unacknowledged"
	ChangeClosed    Change = "closed"
)

// A Transition is one change of one case. Index points into the cases returned by Update.
type Transition struct {
	Index  int    `json:"index"`
	Change Change `json:"change"`
	Text   string `json:"text"`
}

// CaseRules are the choices of Update; zero fields take the values stated.
type CaseRules struct {
	ImpactLimit   float64 // pKa; 0.02
	InsideNights  int     // telling nights inside that close a case; 2
	EscalateAfter int     // nights unacknowledged; 3
}

func (r CaseRules) filled() CaseRules {
	if r.ImpactLimit == 0 {
		r.ImpactLimit = 0.02
	}
	if r.InsideNights == 0 {
		r.InsideNights = 2
	}
	if r.EscalateAfter == 0 {
		r.EscalateAfter = 3
	}
	return r
}

// The kinds of decision.
const (
	DecideAcknowledge = "acknowledge" // silences repetition and escalation, changes nothing else
	DecideClose       = "close"       // with a person's reason
	DecideReplaced    = "replaced"    // the resource is out of use
)

// A Decision of a person, or of an event, on one case.
type Decision struct {
	CaseID int64
	Kind   string
	By     string
	Reason string
}

// Update moves the open cases on by one night. ev must come from a History that
// follows the cases (History.Follow); without it nothing closes by itself. It is pure: the same input
// gives the same output, and open is not changed. A night without data neither opens
// nor closes a case. Cases closed in this night are returned with their
// transition and need not be passed again; further evaluations should have their Masks.
func Update(open []Case, ev Evaluation, events []Event, decisions []Decision, rules CaseRules) ([]Case, []Transition) {
	u := &updating{ev: ev, rules: rules.filled()}
	for _, c := range open {
		c.Resources, c.Instruments, c.Parts = slices.Clone(c.Resources), slices.Clone(c.Instruments), slices.Clone(c.Parts)
		u.cases = append(u.cases, c)
	}
	u.decide(decisions)
	u.events(events)
	for _, harmless := range []bool{false, true} { // what harms results leads its case
		for _, e := range ev.Explanations {
			if lead, ok := e.Lead(); ok && isHarmless(lead.Cause) == harmless {
				u.explain(e, lead)
			}
		}
	}
	u.watch()
	u.escalate()
	return u.cases, u.said
}

type updating struct {
	ev    Evaluation
	rules CaseRules
	cases []Case
	said  []Transition
	fresh []int // opened tonight
	taken []int // explained tonight
}

func (u *updating) say(i int, c Change, format string, args ...any) {
	u.said = append(u.said, Transition{i, c, fmt.Sprintf(format, args...)})
}

func (u *updating) close(i int, why string) {
	if u.cases[i].State == Closed {
		return
	}
	u.cases[i].State, u.cases[i].Closed, u.cases[i].ClosedWhy = Closed, u.ev.Night, why
	u.say(i, ChangeClosed, "%s", why)
}

func (u *updating) decide(ds []Decision) {
	for _, d := range ds {
		i := slices.IndexFunc(u.cases, func(c Case) bool { return c.ID == d.CaseID && c.State != Closed })
		if i < 0 {
			continue
		}
		switch d.Kind {
		case DecideAcknowledge:
			c := &u.cases[i]
			c.State, c.AckBy, c.AckOn, c.AckWhy = Acknowledged, d.By, u.ev.Night, d.Reason
		case DecideClose:
			u.close(i, fmt.Sprintf("closed by %s: %s", d.By, d.Reason))
		case DecideReplaced:
			u.close(i, fmt.Sprintf("%v replaced", u.cases[i].Resource))
		}
	}
}

// events closes cases whose resource was replaced before tonight's measurements.
func (u *updating) events(events []Event) {
	for _, e := range events {
		if e.Night != u.ev.Night || string(e.Kind) == string(EventCalibration) {
			continue
		}
		for i := range u.cases {
			c := &u.cases[i]
			same := string(c.Resource.Kind) == string(e.Kind)
			here := slices.Contains(c.Instruments, e.Instrument) && len(c.Instruments) == 1
			if same && c.Opened < u.ev.Night && (e.Resource == c.Resource.Name || here) {
				u.close(i, fmt.Sprintf("%v replaced on %s", c.Resource, e.Night.Short()))
			}
		}
	}
}

// explain joins an explanation to its case or opens one.
func (u *updating) explain(e Explanation, lead Candidate) {
	i := u.match(e, lead)
	if i < 0 {
		u.open(e, lead)
		return
	}
	c := &u.cases[i]
	c.join(lead)
	if c.State == Closed || slices.Contains(u.taken, i) {
		return // that resource's disturbance was told tonight
	}
	u.taken = append(u.taken, i)
	before, _ := c.Lead()
	c.Explanation = e
	if !slices.Contains(c.Resources, lead.Resource) {
		c.Resources = append(c.Resources, lead.Resource)
	}
	sameSizes := electrodeSize(before.Cause) && electrodeSize(lead.Cause)
	if (before.Class != lead.Class || before.Resource != lead.Resource) && (!sameSizes || before.Resource != lead.Resource) && e.ClassProbability >= 0.5 {
		c.Resource = lead.Resource
		u.say(i, ChangeCause, "likeliest cause is now %s (%v), before %s (%v)", lead.Title, lead.Resource, before.Title, before.Resource)
	}
	for _, name := range e.Instruments {
		if !slices.Contains(c.Instruments, name) {
			c.Instruments = append(c.Instruments, name)
			u.say(i, ChangeResource, "%s is affected too", name)
		}
	}
	u.impact(i, e.Impact, true)
}

func isHarmless(c Cause) bool {
	t, _ := TraitOf(c)
	return t.Harmless
}

func (u *updating) impact(i int, v float64, say bool) {
	c := &u.cases[i]
	if v > c.Impact {
		c.Impact = v
	}
	if v > u.rules.ImpactLimit && !c.OverLimit {
		c.OverLimit = true
		if say {
			u.say(i, ChangeImpact, "the shift of a reference's pKa may have reached %.3f; the limit is %.3f", v, u.rules.ImpactLimit)
		}
	}
}

func (u *updating) open(e Explanation, lead Candidate) {
	if e.Minor || e.Score <= u.ev.Threshold || (e.Retired && isHarmless(lead.Cause)) {
		return
	}
	c := Case{
		Resource: lead.Resource, State: Open, Opened: u.ev.Night, Explanation: e,
		Resources: []Resource{lead.Resource}, Instruments: slices.Clone(e.Instruments), LastSeen: u.ev.Night,
	}
	c.join(lead)
	u.cases = append(u.cases, c)
	i := len(u.cases) - 1
	u.fresh, u.taken = append(u.fresh, i), append(u.taken, i)
	u.impact(i, e.Impact, false)
	u.say(i, ChangeOpened, "%s", e.Sentence)
}

// match finds the case that an explanation belongs to: the same resource, or one
// that was or is among the likely ones for the same cells at the same time.
func (u *updating) match(e Explanation, lead Candidate) int {
	for i, c := range u.cases {
		if c.Resource == lead.Resource || slices.Contains(c.Resources, lead.Resource) {
			return i
		}
	}
	for i, c := range u.cases {
		old, ok := c.Lead()
		if !ok || !overlap(old.Since, lead.Since, 2) || !shareCells(c.Explanation, e) {
			continue
		}
		for _, k := range e.Candidates {
			if k.Probability >= 0.05 && k.Resource == c.Resource {
				return i
			}
		}
		for _, k := range c.Explanation.Candidates {
			if k.Probability >= 0.05 && k.Resource == lead.Resource {
				return i
			}
		}
		if old.Class == lead.Class {
			return i
		}
	}
	return -1
}

func overlap(a, b Interval, slack Night) bool { return a.Low <= b.High+slack && b.Low <= a.High+slack }

// shareCells reports whether two explanations are about changes in the same cells.
func shareCells(a, b Explanation) bool {
	n := 0
	for _, t := range b.Touched {
		if slices.ContainsFunc(a.Touched, func(o Touched) bool {
			return o.Cell == t.Cell && o.Characteristic == t.Characteristic
		}) {
			n++
		}
	}
	return 2*n >= min(len(a.Touched), len(b.Touched)) && n > 0
}

// watch counts telling nights on which a case's disturbance did not show.
func (u *updating) watch() {
	for _, w := range u.ev.Watched {
		i := slices.IndexFunc(u.cases, func(c Case) bool { return c.ID == w.CaseID && c.State != Closed })
		if i < 0 || slices.Contains(u.fresh, i) {
			continue
		}
		c := &u.cases[i]
		switch {
		case w.Retired:
			u.close(i, fmt.Sprintf("%v is no longer in use", c.Resource))
		case !w.Data || w.Expected < 2:
		case w.Inside:
			c.Inside++
			if c.Inside >= u.rules.InsideNights {
				u.close(i, fmt.Sprintf("references back inside for %d nights", c.Inside))
			}
		default:
			c.Inside, c.LastSeen = 0, u.ev.Night
		}
	}
}

func (u *updating) escalate() {
	for i := range u.cases {
		c := &u.cases[i]
		if c.State != Open || c.Escalated != 0 || int(u.ev.Night-c.Opened) < u.rules.EscalateAfter {
			continue
		}
		c.Escalated = u.ev.Night
		u.say(i, ChangeEscalated, "open since %s and acknowledged by nobody", c.Opened.Short())
	}
}
