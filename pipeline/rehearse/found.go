package rehearse

// Found is what the program reported, in plain values. Set keys are
// "instrument/set"; files are "folder/path"; nights are 1-based numbers of the
// story.
type Found struct {
	Cases    []FoundCase
	Sets     []FoundSet
	Files    []FoundFile
	Absences []FoundAbsence
}

// A FoundCase is one case the program opened.
type FoundCase struct {
	Cause    string   // first-ranked cause or class, e.g. "electrode.slope"
	Others   []string // further candidates in order of rank
	Resource string   // the accused thing
	Onset    int      // night it says the trouble began
	Opened   int      // night in which the case was opened
	Closed   int      // 0: still open
	Openings int      // opening messages sent for it
	Messages int      // all messages sent for it
}

// A FoundSet is the last word of the program on one set, and what it said on the way.
type FoundSet struct {
	Set       string
	Verdict   string    // "stands", "stands-noted", "held", "in-question", "no number", "waiting"
	Checks    []string  // keys of the checks that did not pass
	PKa       []float64 // empty without a number
	U         []float64 // expanded uncertainty, coverage factor 2, same length
	Revision  int       // 1-based
	Waited    bool      // it was waiting for something at some time
	LeftOut   []string  // keys of rungs left out
	Corrected bool      // computed again with a corrected input after a person accepted it
	Asked     bool      // the program asked a person something about it, or proposed a repair
}

// A FoundFile is a file the program did not simply take.
type FoundFile struct {
	File  string // folder/path
	State string // "refused", "parked", "twin"
}

// A FoundAbsence is something the program said was missing.
type FoundAbsence struct {
	Key      string // "share.gone", "night.silent", "db.down", "ref.absent"
	Resource string // folder or instrument
	Night    int
}
