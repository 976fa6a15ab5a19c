package rehearse

// Kinds of truth.
const (
	KindEpisode = "episode" // something was wrong with the measuring system over some nights: one case is expected
	KindSet     = "set"     // something is wrong with one set
	KindFile    = "file"    // something is wrong with one file
	KindAbsence = "absence" // something is not there, or cannot be seen
	KindPKa     = "pka"     // the true constants of one set; nothing is wrong
	KindHarm    = "harm"    // how far an episode displaces the pKa of one set; belongs to the episode of the same Resource
)

// What the program ought to make of a truth.
const (
	ExpectCase    = "case"     // a case on the resource
	ExpectHeld    = "held"     // the set is held
	ExpectNoted   = "noted"    // the set is noted, or a rung left out, or held
	ExpectWaiting = "waiting"  // the set waits for something named
	ExpectRefused = "refused"  // the file is refused
	ExpectParked  = "parked"   // the file is parked
	ExpectTwin    = "twin"     // the file is a twin
	ExpectRevised = "replaced" // the result is replaced
	ExpectAbsence = "absence"  // the absence is told
	ExpectNothing = "nothing"  // no word is needed: saying nothing and saying it are both right
	ExpectLate    = "late"     // waiting at first, then complete
	ExpectAsk     = "ask"      // a question or a note, no case about the system
)

// A Truth is one thing that is really so. Truths are written beside the
// exports and read by the scorer alone.
type Truth struct {
	Night     int       `json:"night"`               // 1-based
	Key       string    `json:"key"`                 // key of the failure catalogue or of the story: "scan.bubble", "drift.electrode", ...
	Kind      string    `json:"kind"`                // one of the Kind constants
	Set       string    `json:"set,omitempty"`       // instrument/set name
	File      string    `json:"file,omitempty"`      // folder/path
	Resource  string    `json:"resource,omitempty"`  // the thing that is to blame
	Resources []string  `json:"resources,omitempty"` // other names of it that are as right
	Cause     string    `json:"cause,omitempty"`     // Kind of the cause engine: "electrode.slope", ...
	Accept    []string  `json:"accept,omitempty"`    // cause classes that are right; a class matches when it begins a found cause
	From      int       `json:"from,omitempty"`      // first night of an episode
	To        int       `json:"to,omitempty"`        // last night of an episode
	Size      float64   `json:"size,omitempty"`      // in Unit
	Unit      string    `json:"unit,omitempty"`      //
	Expect    string    `json:"expect,omitempty"`    // one of the Expect constants
	PKa       []float64 `json:"pka,omitempty"`       // KindPKa: mixed constants at 25.0 C and the nominal ionic strength
	Clean     bool      `json:"clean,omitempty"`     // KindPKa: nothing was injected that reaches this set
	Compound  string    `json:"compound,omitempty"`  // KindPKa
	Note      string    `json:"note,omitempty"`
}
