package alert

import (
	"encoding/json"
	"math"
	"time"
)

// JSONVersion is the version of the documented JSON fields. Fields are added
// within a version, never removed or changed.
const JSONVersion = 1

// A Document is the body a webhook receives. Its fields are a promise: see
// JSONVersion. Numbers that do not exist are null.
type Document struct {
	Version      int             `json:"version"`
	Laboratory   string          `json:"laboratory"`
	Kind         string          `json:"kind"` // code of the kind: "drift.case", "root.blind", ...
	Key          string          `json:"key"`  // of the condition; equal keys are one thing
	CaseID       int64           `json:"case_id"`
	Why          string          `json:"why"` // "opened", "closed", "still there", ...
	At           string          `json:"at"`  // RFC 3339
	Subject      string          `json:"subject"`
	Instruments  []string        `json:"instruments"`
	Sentence     string          `json:"sentence"`
	Since        string          `json:"since"`
	Finding      string          `json:"finding"`
	Candidates   []CandidateLine `json:"candidates"`
	Alike        []string        `json:"alike"`
	Results      []ResultLine    `json:"results"` // at most 25
	ResultsTotal int             `json:"results_total"`
	Stopped      []string        `json:"stopped"`
	NextCheck    string          `json:"next_check"`
	Responsible  string          `json:"responsible"`
	Links        []string        `json:"links"`
	Notes        []string        `json:"notes"`
	Answer       []string        `json:"answer"` // command lines
	Chart        *chartDocument  `json:"chart"`
}

type chartDocument struct {
	Title  string   `json:"title"`
	Unit   string   `json:"unit"`
	Labels []string `json:"labels"`
	Values []number `json:"values"`
	Centre number   `json:"centre"`
	Low    number   `json:"low"`
	High   number   `json:"high"`
}

// number is a float64 that writes null where there is none.
type number float64

// MarshalJSON writes null for NaN and infinities.
func (n number) MarshalJSON() ([]byte, error) {
	if v := float64(n); math.IsNaN(v) || math.IsInf(v, 0) {
		return []byte("null"), nil
	}
	return json.Marshal(float64(n))
}

func (c Content) document(subject string) Document {
	list := func(s []string) []string {
		if s == nil {
			return []string{}
		}
		return s
	}
	d := Document{
		Version: JSONVersion, Laboratory: c.Laboratory, Kind: c.Kind, Key: c.Key, CaseID: c.CaseID, Why: string(c.Why),
		Subject: subject, Instruments: list(c.Instruments), Sentence: c.Sentence, Since: c.Since,
		Finding: c.Finding, Candidates: c.Candidates, Alike: list(c.Alike), Results: c.Results, ResultsTotal: c.ResultsAll,
		Stopped: list(c.Stopped), NextCheck: c.NextCheck, Responsible: c.Responsible, Links: list(c.Links), Notes: list(c.Notes), Answer: list(c.Answer),
	}
	if !c.At.IsZero() {
		d.At = c.At.Format(time.RFC3339)
	}
	if d.Candidates == nil {
		d.Candidates = []CandidateLine{}
	}
	for i := range d.Candidates {
		d.Candidates[i].Probability = finite(d.Candidates[i].Probability)
	}
	if d.Results == nil {
		d.Results = []ResultLine{}
	}
	for i := range d.Results {
		r := &d.Results[i]
		r.PKa, r.Impact, r.Bound = finite(r.PKa), finite(r.Impact), finite(r.Bound)
	}
	if c.Chart != nil {
		k := chartDocument{Title: c.Chart.Title, Unit: c.Chart.Unit, Labels: list(c.Chart.Labels),
			Centre: number(c.Chart.Centre), Low: number(c.Chart.Low), High: number(c.Chart.High), Values: []number{}}
		for _, v := range c.Chart.Values {
			k.Values = append(k.Values, number(v))
		}
		d.Chart = &k
	}
	return d
}

// finite keeps JSON writable: a bound that could not be computed is 0 with its
// reason in the notes; callers leave such results out.
func finite(v float64) float64 {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return 0
	}
	return v
}
