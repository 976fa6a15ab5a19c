package alert

import "time"

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

// The reasons for speaking.
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

// Rules of pacing.
type Rules struct {
	PerCase time.Duration // least pause between two mails on one key; 0: 12 h
	PerDay  int           // mails in 24 h before the rest goes into one summary; 0: 6
}

// Decide says whether to speak of now, and why or why not. active lists what
// else is present, for dependence. It is pure.
func Decide(now State, last Said, active []State, at time.Time, rules Rules) (Why, bool) {
	return WhyNothingNew, false
}

// A Waiting message has been decided and not yet sent.
type Waiting struct {
	Key string
	Why Why
	At  time.Time // decided
}

// A Plan says what to do with waiting messages now.
type Plan struct {
	Send   []int     // indices to send singly
	Digest []int     // indices to gather in one summary, sent now
	Hold   []int     // indices that wait, with the reason in Why
	Why    []Why     // parallel to Hold
	Next   time.Time // when to look again; zero if nothing waits
}

// Pace applies the caps to waiting messages to one person or sink: one per
// key in rules.PerCase, rules.PerDay in 24 hours, then one summary a day. sent lists
// what went to the same place in the last 24 hours or more.
func Pace(waiting []Waiting, sent []Waiting, at time.Time, rules Rules) Plan {
	return Plan{}
}
