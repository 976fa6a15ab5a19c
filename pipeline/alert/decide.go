package alert

import (
	"slices"
	"time"
)

// A Presence says what is known of a condition now.
type Presence int

// The presences. Unknown is the zero value: no data is not good data.
const (
	Unknown Presence = iota
	Present
	Gone
)

// Why is the reason for speaking, or for not speaking.
type Why string

// The reasons for speaking. Those of cases are the texts of drift.Change.
const (
	WhyOpened    Why = "opened"
	WhyCause     Why = "likeliest cause changed"
	WhyImpact    Why = "impact crossed the limit"
	WhyResource  Why = "another instrument or resource affected"
	WhyEscalated Why = "unacknowledged"
	WhyReminder  Why = "still there"
	WhyClosed    Why = "closed"
	WhyTest      Why = "test message"
	WhyDigest    Why = "summary"
)

// The reasons for silence.
const (
	WhyNothingNew Why = "nothing new"
	WhyHolding    Why = "has not lasted long enough"
	WhyMoot       Why = "explained by something already said"
	WhyNoData     Why = "no data"
	WhyKnown      Why = "acknowledged"
	WhyQuiet      Why = "in the brief only"
	WhyPaced      Why = "said little ago; waits"
	WhyFull       Why = "enough messages today; in the summary"
)

// A State is one condition or case now.
type State struct {
	Kind       string
	Key        string // of the condition: instrument, folder, case id
	Instrument string // "" concerns all
	Presence   Presence
	Since      time.Time // since when it is in this presence
	// Changes are the changes of a case since anything was last said of it, in
	// the order they happened; empty for other kinds.
	Changes      []Why
	Acknowledged bool
	Escalate     bool // a case nobody acknowledged: due for the next person
}

// Said is what was last said of one State; the zero value: nothing yet.
type Said struct {
	Why Why
	At  time.Time
}

// Rules of pacing; zero fields take the values stated.
type Rules struct {
	PerCase time.Duration // least pause between two mails on one key; 12 h
	PerDay  int           // mails in 24 h before the rest goes into one summary; 6
}

func (r Rules) filled() Rules {
	if r.PerCase == 0 {
		r.PerCase = 12 * time.Hour
	}
	if r.PerDay == 0 {
		r.PerDay = 6
	}
	return r
}

// Decide says whether to speak of now, and why or why not. active lists what
// else is present, for dependence. It is pure: the same arguments give the same answer.
func Decide(now State, last Said, active []State, at time.Time) (Why, bool) {
	kind, _ := KindOf(now.Kind)
	switch {
	case now.Presence == Unknown:
		return WhyNoData, false
	case kind.Quiet:
		return WhyQuiet, false
	case len(now.Changes) > 0:
		return ofCase(now.Changes), true
	case now.Escalate && !now.Acknowledged && last.Why != WhyEscalated:
		return WhyEscalated, true
	case kind.Code == DriftCase: // a case speaks when it changes, and only then
		return silent(now), false
	case now.Presence == Present:
		return whilePresent(kind, now, last, active, at)
	}
	return whenGone(kind, now, last, at)
}

func silent(now State) Why {
	if now.Acknowledged {
		return WhyKnown
	}
	return WhyNothingNew
}

// ofCase picks the change that a message about several is named after.
func ofCase(changes []Why) Why {
	for _, w := range []Why{WhyClosed, WhyOpened, WhyCause, WhyResource, WhyImpact, WhyEscalated} {
		if slices.Contains(changes, w) {
			return w
		}
	}
	return changes[len(changes)-1]
}

func whilePresent(kind Kind, now State, last Said, active []State, at time.Time) (Why, bool) {
	if moot(kind, now, active) {
		return WhyMoot, false
	}
	if last.Why == "" || last.Why == WhyClosed {
		if at.Sub(now.Since) < kind.Hold {
			return WhyHolding, false
		}
		return WhyOpened, true
	}
	switch {
	case now.Acknowledged:
		return WhyKnown, false
	case kind.Repeat > 0 && at.Sub(last.At) >= kind.Repeat:
		return WhyReminder, true
	}
	return WhyNothingNew, false
}

func whenGone(kind Kind, now State, last Said, at time.Time) (Why, bool) {
	if last.Why == "" || last.Why == WhyClosed {
		return WhyNothingNew, false
	}
	if at.Sub(now.Since) < kind.Clear {
		return WhyHolding, false
	}
	return WhyClosed, true
}

// moot reports whether something this kind depends on is present, for the same instrument or for all.
func moot(kind Kind, now State, active []State) bool {
	return slices.ContainsFunc(active, func(a State) bool {
		same := a.Instrument == "" || now.Instrument == "" || a.Instrument == now.Instrument
		return a.Presence == Present && same && slices.Contains(kind.Needs, a.Kind)
	})
}
