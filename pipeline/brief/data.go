// Package brief writes the morning report: one self-contained HTML file with
// drawn charts and spectra, and the same in plain text for a terminal. It
// begins with what was not seen.
//
// The package is pure: data in, bytes out.
package brief

import "time"

// Data is everything a brief says about one night.
type Data struct {
	Laboratory   string
	Night        string    // local date the night began, YYYY-MM-DD
	Made         time.Time // in the laboratory's zone
	Revision     int       // 1; an addendum counts up, what changed stands in Changes
	Changes      []string
	Program      string
	Settings     string // hash of the settings, shortened
	CompleteUpTo time.Time

	NotSeen   []Notice // what was not seen: blind folders, silence, planned sets and references that did not come, waiting sets
	InControl Control
	Counts    []Count   // one per instrument
	Go        []Set     // can go: stands, stands-noted
	Look      []Set     // look at these first: held, no number, in question
	Waiting   []Waiting // did not happen (yet)
	Cases     []Case    // open, and closed this night
	Charts    []Chart   // control charts worth drawing: of open cases and of signals
	Signals   []string  // chart signals without a case, sentences
	Files     []File    // refused, parked, twins
	Messages  []Message // what was said tonight and whether it was delivered
	Forecasts []string
}

// A Notice is one sentence with what to do.
type Notice struct{ What, Action string }

// Control says whether the measuring system is in control.
type Control struct {
	Yes        bool
	Known      bool // false: no reference could be judged tonight
	Sentence   string
	References []Reference
}

// A Reference is one reference set of the night.
type Reference struct {
	Key, Title, Slot, Verdict string
	Instrument                string  // "" left out of the name of the row
	PKa, U, Assigned, Centre  float64 // NaN unknown
	Sentence                  string
}

// A Count is one instrument's night in numbers.
type Count struct {
	Instrument                                                        string
	Planned, Seen, References, Stands, Noted, Held, NoNumber, Waiting int
	InQuestion, Refused, Parked                                       int
}

// A Set is one result.
type Set struct {
	Key, Compound, Title, Lot, Instrument string
	ResultID                              int64
	Verdict                               string
	Headline                              string   // one sentence
	Notes                                 []string // sentences of checks that note or hold
	Actions                               []string // shortest list that would make it stand
	Constants                             []Constant
	Constant                              string  // kind: "mixed"
	TemperatureC, Ionic                   float64 // NaN unknown
	Rungs                                 []Rung
	WavelengthNM                          []float64   // thinned grid of the family
	Family                                [][]float64 // one spectrum per rung, absorbance
	Accused                               string      // rung in contrast, "" none
	FamilyKeys                            []string    // rung key of each spectrum of Family; empty: in the order of Rungs
	Acid, Base                            []float64   // limit spectra on the same grid
	AcidSD, BaseSD                        []float64
	Between                               []Form  // spectra of the forms between acid and base, for two steps and more
	SigmaPH                               float64 // standard deviation expected of a latent pH residual; 0 or NaN unknown
	IsosbesticNM                          float64 // NaN none
	Budget                                []Component
	InQuestionWhy                         string
}

// A Form is the spectrum of one form on the grid of its set.
type Form struct {
	Name      string
	Value, SD []float64
}

// A Constant is one pKa.
type Constant struct {
	Step              int
	PKa, U, K         float64 // U expanded
	UOwn, URun, ULab  float64
	Thermo, UThermo   float64 // NaN none
	Library, Anchored float64 // NaN none
}

// A Rung is one solution.
type Rung struct {
	Key                               string
	PH, Residual, AmountPct, Baseline float64 // Baseline in mAU; NaN where left out
	LeftOut                           string  // why, "" if used
}

// A Component is one row of a budget, in pKa.
type Component struct {
	Name   string
	UPKa   float64 // |c| u
	Bucket string
}

// Waiting is a set that waits.
type Waiting struct {
	Key     string
	Missing []string
	Since   time.Time
}

// A Case is one explained disturbance.
type Case struct {
	ID                        int64
	Sentence, State, Resource string
	Since                     string // interval in words
	Finding, NextCheck        string
	Candidates                []Candidate
	Alike                     []string
	Results                   []Touched
	Opened                    time.Time
	Acknowledged              string
	Answer                    string  // command line
	CannotTell                string  // what cannot be told apart, a sentence; "": Alike is listed
	Charts                    []Chart // of the characteristics that speak, with limits and onset interval
}

// A Candidate is one possible cause.
type Candidate struct {
	Title, Resource, Size string
	Probability           float64
	For, Against          string
}

// Touched is a result a case reaches.
type Touched struct {
	Set           string
	ResultID      int64
	PKa           float64
	Impact, Bound float64
	Resolution    string
	Verdict       string // "" unknown
	Released      bool
}

// A Chart is one control chart.
type Chart struct {
	Title, Unit         string
	Nights              []string  // ascending
	Values              []float64 // NaN gap
	EWMA                []float64
	Centre              float64
	Low, High           float64  // action limits; NaN none
	Flags               []string // per night, "" none
	OnsetLow, OnsetHigh string   // nights of a case's onset interval, "" none
	Assigned            float64  // NaN none
}

// A File is a file that was not simply taken.
type File struct{ Path, State, Sentence, Remedy string }

// A Message is what was said.
type Message struct {
	At                 time.Time
	Subject, Delivered string
}
