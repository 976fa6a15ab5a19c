package db

import (
	"encoding/json"
	"time"
)

// Kinds of scope of a chart.
const (
	ScopeInstrument = "instrument"
	ScopeElectrode  = "electrode"
	ScopeRoom       = "room"
)

// A Series names one chart.
type Series struct {
	ScopeKind      string // ScopeInstrument, ScopeElectrode, ScopeRoom
	Scope          string // name of the instrument, electrode or room
	Reference      string // "" for charts without one
	RefLot         string
	Characteristic string
}

// A Point is one value on a chart.
type Point struct {
	ID int64
	Series
	Unit          string
	At            time.Time
	Night         string // YYYY-MM-DD
	Slot          string
	SetID         *int64
	ResultID      *int64
	CalibrationID *int64
	Value         float64
	SD            float64 // NaN: unknown
	Judged        bool    // false: shown, but its set failed its own checks
}

// A PointFilter narrows a history; empty fields do not.
type PointFilter struct {
	ScopeKind      string
	Scope          string
	Reference      string
	RefLot         string
	Characteristic string
	FromNight      string
	All            bool // also points of results that have been replaced or struck
}

// Stages of a baseline.
const (
	Unproven = "unproven"
	Young    = "young"
	Settled  = "settled"
)

// A Baseline is one version of the centre and spread of a chart.
type Baseline struct {
	ID int64
	Series
	Version   int // given by the store: 1, 2, ...
	Stage     string
	Centre    float64
	Spread    float64 // one standard deviation
	N         int
	FromNight string
	ToNight   string
	SignedBy  string
	Because   string
	FrozenAt  time.Time // zero: not frozen
	At        time.Time
}

// A PointJudgement is what a chart said of a point. NaN where a line does not exist.
type PointJudgement struct {
	PointID    int64
	BaselineID *int64
	At         time.Time
	Centre     float64
	SD         float64
	LimitLow   float64
	LimitHigh  float64
	EWMA       float64
	EWMALow    float64
	EWMAHigh   float64
	CUSUMHigh  float64
	CUSUMLow   float64
	CUSUMLimit float64
	Flags      []string // visible names of rules that fired
}

// A JudgedPoint is a point with its newest judgement.
type JudgedPoint struct {
	Point
	Judgement *PointJudgement // nil: none yet
}

// States of a case.
const (
	CaseOpen         = "open"
	CaseAcknowledged = "acknowledged"
	CaseClosed       = "closed"
)

// A Case is one explained disturbance on one resource.
type Case struct {
	ID         int64
	Key        string // unique
	OpenedAt   time.Time
	Resource   string
	Instrument string // "" when it concerns several

	// What follows may change; each change is a row.
	At         time.Time
	Actor      string // who changed it; "pkvigil" for the program
	Because    string
	State      string
	Cause      string
	Class      string
	Shape      string // "step", "ramp", "sawtooth", ...
	OnsetLow   string // night, YYYY-MM-DD
	OnsetBest  string
	OnsetHigh  string
	Size       float64
	SizeSD     float64
	Unit       string
	Sentence   string
	Impact     float64 // pKa, largest on a result; NaN unknown
	NextCheck  string
	Evaluation json.RawMessage // the caller's, may be nil
}

// A RankRow is one candidate of a ranking; Rank counts from 1.
type RankRow struct {
	Rank        int
	Cause       string
	Resource    string
	Probability float64
	LogBayes    float64
	Size        float64
	SizeSD      float64
	Unit        string
	For         string
	Against     string
}

// Resolutions of a reached result.
const (
	ReachOpen       = "open"       // touched, nobody has decided
	ReachProposed   = "proposed"   // proposed as unaffected
	ReachUnaffected = "unaffected" // a person confirmed
	ReachAffected   = "affected"
	ReachCorrected  = "corrected"
)

// A ReachRow is one result a case touches.
type ReachRow struct {
	ResultID    int64
	Impact      float64 // pKa
	ImpactUpper float64 // 95 % upper bound of its size
	Resolution  string
}

// A Bracket is a stretch of a run between two references.
type Bracket struct {
	ID          int64
	Key         string // unique
	Instrument  string
	Night       string
	Run         string
	OpenedBySet *int64
	ClosedBySet *int64
	State       string // "open", "good", "failed"
	At          time.Time
	Sets        []int64 // sets measured within
}

// An InstrumentState is whether results of an instrument may stand.
type InstrumentState struct {
	Instrument string
	State      string // "open" or "closed"
	At         time.Time
	Actor      string
	Because    string
	CaseID     *int64
}

// A Message is one thing said.
type Message struct {
	ID      int64
	Key     string // unique: nothing is said twice
	Kind    string // "case", "brief", "absence", "delivery", ...
	CaseID  *int64
	Reason  string // why it speaks
	Subject string
	Text    string
	HTML    string
	JSON    json.RawMessage
	At      time.Time
}

// A Delivery is one message to one sink.
type Delivery struct {
	ID        int64
	MessageID int64
	Sink      string // "mail:anna@example.org", "webhook:plant"
	State     string // "pending", "delivered", "failed"
	Attempts  int
	LastAt    time.Time
	LastError string
	Message   Message
}

// A Said is what was last said about something.
type Said struct {
	MessageID int64
	Key       string
	Kind      string
	CaseID    *int64
	Reason    string
	Subject   string
	At        time.Time
	JSON      json.RawMessage
	Delivered bool // at least one sink has it
}

// A Deed is one entry of the trail.
type Deed struct {
	Seq        int64 // 1, 2, ... without gaps
	At         time.Time
	Actor      string
	OSUser     string
	Action     string
	Object     string
	Before     string
	After      string
	Because    string
	SettingsID *int64
	Program    string
	Prev       [32]byte
	Hash       [32]byte
}

// A ResourceUse is the thing in use.
type ResourceUse struct {
	Resource string
	Since    time.Time
	EventID  int64
	Text     string
}

// A NightCount is one night of one instrument in numbers.
type NightCount struct {
	Night       string
	Instrument  string
	Planned     int
	Seen        int
	References  int
	Stands      int
	StandsNoted int
	Held        int
	NoNumber    int
	Waiting     int
	Gathering   int
	InQuestion  int
	Refused     int
	Parked      int
}

// A HeldReason is one check that holds or notes a current result.
type HeldReason struct {
	SetID    int64
	SetKey   string
	ResultID int64
	Check
}

// A Gap is something a set waits for.
type Gap struct {
	SetID  int64
	SetKey string
	Missing
	Since    time.Time
	Deadline time.Time
}

// A NotSeen planned set has no set with files.
type NotSeen struct {
	Night      string
	Instrument string
	Set        string
	Compound   string
	Slot       string
}

// A CheckUse counts how often a check was the reason.
type CheckUse struct {
	Check  string
	Sets   int
	Held   int
	Lifted int
}
