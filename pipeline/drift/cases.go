package drift

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
	Instruments []string    `json:"instruments"` // affected
	Impact      float64     `json:"impact"`      // largest absolute change of a pKa, upper 95 % bound
	OverLimit   bool        `json:"over_limit"`
	Inside      int         `json:"inside"`    // consecutive nights with data and all references inside
	LastData    Night       `json:"last_data"` // last night with data from an affected cell
	AckBy       string      `json:"ack_by,omitempty"`
	AckOn       Night       `json:"ack_on,omitempty"`
	Escalated   Night       `json:"escalated,omitempty"`
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

// CaseRules are the choices of Update.
type CaseRules struct {
	ImpactLimit   float64 // pKa; 0.02
	InsideNights  int     // nights inside that close a case; 2
	EscalateAfter int     // nights unacknowledged; 3
}

// A Decision of a person or an event that ends or acknowledges a case.
type Decision struct {
	CaseID int64
	Kind   string // "acknowledge", "close", "replaced"
	By     string
	Reason string
}

// Update moves the open cases on by one night. It is pure: the same input
// gives the same output. No data neither opens nor closes a case. Closed cases
// are returned once, with their transition, and need not be passed again.
func Update(open []Case, ev Evaluation, events []Event, decisions []Decision, rules CaseRules) ([]Case, []Transition) {
	return open, nil
}
