package drift

import (
	"time"
)

// A Night is the local date on which a night began, as days since 1970-01-01.
type Night int

// NightOf returns the night that began on the date of t in t's own zone.
func NightOf(t time.Time) Night {
	y, m, d := t.Date()
	return Night(time.Date(y, m, d, 0, 0, 0, 0, time.UTC).Unix() / 86400)
}

// String gives the date as 2006-01-02.
func (n Night) String() string { return n.date().Format("2006-01-02") }

// Short gives the date as "14 Mar".
func (n Night) Short() string { return n.date().Format("2 Jan") }

func (n Night) date() time.Time { return time.Unix(int64(n)*86400, 0).UTC() }

// A CellKind says what a cell of the chart table watches.
type CellKind string

// The kinds of cell.
const (
	ReferenceCell  CellKind = "reference"  // instrument x reference x lot
	ElectrodeCell  CellKind = "electrode"  // one electrode; observed on the nights it is calibrated
	InstrumentCell CellKind = "instrument" // blank noise
	RoomCell       CellKind = "room"       // recorded temperature
)

// A Cell is one row of characteristics with its frozen baseline. K is the
// number of characteristics.
type Cell struct {
	Key             string // unique, e.g. "U1/RI-C/2026-01"
	Kind            CellKind
	Instrument      string // "" where it does not apply
	Reference       string // "" except for reference cells
	Title           string // for people, e.g. "m-cresol purple on U1"; Key if empty
	Characteristics []Characteristic
	Centre          []float64 // K, baseline centre
	Cov             []float64 // K*K, covariance of one set about the night's true value
	NightCov        []float64 // K*K or nil, covariance between nights in control
	N               float64   // sets behind the centre; +Inf where the centre is assigned
	DOF             float64   // degrees of freedom of Cov; 0: taken as known
	Design          *Design   // nil for instrument and room cells
}

// An Observation is the mean of the sets of one cell in one night.
type Observation struct {
	Cell   string
	Night  Night
	Sets   int       // sets averaged, at least 1
	Values []float64 // K, NaN where a characteristic is missing
	// Variance, when not nil, replaces the diagonal of Cov/Sets (K, NaN keeps the
	// baseline's): a night with fewer rungs is worth less.
	Variance []float64
}

// A Resource is a thing that several cells depend on.
type Resource struct {
	Kind Kind   `json:"kind"`
	Name string `json:"name"`
}

// String gives "electrode E-31".
func (r Resource) String() string {
	if r.Name == "" {
		return string(r.Kind)
	}
	return string(r.Kind) + " " + r.Name
}

// A Use says that a cell depended on a resource from one night to another,
// both included. For a buffer lot it is the nights on which the calibration in
// force had been made with that lot, and Role says its place. For an electrode
// cell, the buffers of its calibrations and the electrode itself are its uses.
type Use struct {
	Resource    Resource
	Role        string // "low", "mid", "high" for buffers
	Cell        string
	From, Until Night
}

// An EventKind says what was logged.
type EventKind string

// The kinds of event.
const (
	EventLamp        EventKind = "lamp"
	EventCalibration EventKind = "calibration"
	EventElectrode   EventKind = "electrode"
	EventBuffer      EventKind = "buffer"
	EventCuvette     EventKind = "cell"
	EventStock       EventKind = "stock"
	EventSeries      EventKind = "series"
	EventWavelength  EventKind = "wavelength"
	EventService     EventKind = "service"
)

// An Event is something that was done, before the measurements of its night.
type Event struct {
	Night      Night
	Kind       EventKind
	Resource   string // electrode, lot, lamp ...; "" if only the instrument is known
	Instrument string // "" if the resource says it
	Text       string
}

// A Mask takes an explained and closed disturbance out of later evaluations:
// the observations it touched say nothing about anything new.
type Mask struct {
	Resource    Resource
	Cause       Cause
	From, Until Night
}

// Follow adds to h what the cases of a laboratory mean for an evaluation: closed ones are
// taken out of the observations, the others are watched.
func (h *History) Follow(cases []Case) {
	for _, c := range cases {
		if c.State == Closed {
			h.Masks = append(h.Masks, c.Masks()...)
		} else if w, ok := c.Watch(); ok {
			h.Watch = append(h.Watch, w)
		}
	}
}

// A History is what one evaluation looks at. Observations outside First..Last
// are ignored.
type History struct {
	First, Last  Night
	Observations []Observation
	Uses         []Use
	Events       []Event
	Masks        []Mask
	Watch        []Watch // open cases to be looked at in this night
}

// A Watch asks whether the disturbance of an open case still shows.
type Watch struct {
	CaseID    int64
	Candidate Candidate
}

// Rules are the choices of an evaluation; DefaultRules fills what is zero.
type Rules struct {
	Tau              float64 // prior sd of theta, in table units; 1.5
	Threshold        float64 // ln B at which the group score rings; 0: Threshold(hypotheses, FalseAlarmNights)
	FalseAlarmNights float64 // one false case in so many nights; 365
	Shrink           float64 // share by which correlations are shrunk to the diagonal; 0.1
	EventFactor      float64 // prior odds of a cause whose event was logged within one night; 10
	// CalibrationPH is the sd in pH by which readings differ from one calibration
	// to the next in control (0.3 mV in each buffer is about 0.005). A constant shift
	// of that size since a calibration is then nothing new. 0: none
	CalibrationPH float64
	MaxCauses     int     // passes: 1 + second causes looked for; 3
	Least         float64 // size in table units below which a disturbance is recorded and not rung; 0.2
	SayAt         float64 // probability below which "cannot tell" is said; 0.8
	Causes        []Cause // nil: all
}

// DefaultRules fills the zero fields of r.
func DefaultRules(r Rules) Rules {
	set := func(p *float64, v float64) {
		if *p == 0 {
			*p = v
		}
	}
	set(&r.Tau, 1.5)
	set(&r.FalseAlarmNights, 365)
	set(&r.Shrink, 0.1)
	set(&r.EventFactor, 10)
	set(&r.SayAt, 0.8)
	set(&r.Least, 0.2)
	if r.MaxCauses == 0 {
		r.MaxCauses = 3
	}
	return r
}
