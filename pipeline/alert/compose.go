package alert

import "time"

// Content is everything a message may say. Empty parts are left out.
type Content struct {
	Laboratory  string
	Kind        string // code
	Key         string
	CaseID      int64
	Why         Why
	At          time.Time // of the decision, in the laboratory's zone
	Instrument  []string
	Sentence    string // with size, unit and direction, no jargon: "pH readings wrong by +0.04 at pH 4.7, growing since 14 Mar"
	Since       string // "between 12 Mar and 15 Mar (90 %)"
	Finding     string // how far the cause is known, a sentence
	Candidates  []CandidateLine
	Alike       []string // what cannot be told apart
	Results     []ResultLine
	ResultsAll  int      // number touched when Results is a selection; 0: len(Results)
	Stopped     []string // what was stopped automatically
	NextCheck   string
	Responsible string
	Links       []string // files: brief, spectra; paths or URLs
	Chart       *Chart
	Answer      []string // command lines; nil: the acknowledge line of the case
	Notes       []string
}

// A CandidateLine is one possible cause.
type CandidateLine struct {
	Title       string   `json:"title"`
	Resource    string   `json:"resource"`
	Probability float64  `json:"probability"`
	Size        string   `json:"size,omitempty"`
	For         []string `json:"for,omitempty"`
	Against     []string `json:"against,omitempty"`
}

// A ResultLine is one touched result.
type ResultLine struct {
	ID       int64   `json:"id"`
	Set      string  `json:"set"`
	Compound string  `json:"compound"`
	PKa      float64 `json:"pka"`
	Impact   float64 `json:"impact"`
	Bound    float64 `json:"bound"`
	Released bool    `json:"released"`
	Proposed string  `json:"proposed,omitempty"` // "unaffected" or ""
}

// A Chart is the one small drawing of a message.
type Chart struct {
	Title  string    `json:"title"`
	Unit   string    `json:"unit"`
	Labels []string  `json:"labels"` // one per value, e.g. dates
	Values []float64 `json:"values"` // NaN: gap
	Centre float64   `json:"centre"`
	Low    float64   `json:"low"`
	High   float64   `json:"high"`
}

// A Message is ready to send.
type Message struct {
	Subject string
	Text    string
	HTML    string
	JSON    []byte
}

// JSONVersion is the version of the documented JSON fields. Fields are added
// within a version, never removed or changed.
const JSONVersion = 1

// Compose writes subject, text, HTML and JSON. Every string of c is escaped and
// stripped of control characters; the subject is one line of at most 200 characters.
func Compose(c Content) (Message, error) {
	return Message{}, nil
}

// Digest writes one message out of several.
func Digest(laboratory string, parts []Content, at time.Time) (Message, error) {
	return Message{}, nil
}
