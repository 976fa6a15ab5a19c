package db

import (
	"encoding/json"
	"time"

	"pkvigil/parse"
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/naming"
)

// A Holder is a process that sweeps or works.
type Holder struct {
	Host    string
	PID     int
	Program string    // version
	Since   time.Time // when it first held; filled when read
	Until   time.Time // end of the lease; filled when read
}

// A RootState is what the last look at a watched folder found.
type RootState struct {
	Root         string
	Instrument   string
	Visible      bool
	Why          string    // reason when not visible, a sentence
	Since        time.Time // when this visibility began
	LookedAt     time.Time
	Newest       time.Time // newest modification time seen; zero: none
	Files        int
	Settling     int
	Litter       int
	CompleteUpTo time.Time     // everything that stood there before this moment is stored; zero: unknown
	ClockOffset  time.Duration // share clock minus ours, as last estimated
}

// A Stamp is what is known of a file's newest revision. ModTime is kept to the
// microsecond: truncate before comparing.
type Stamp struct {
	FileID  int64
	Size    int64
	ModTime time.Time
	SHA256  [32]byte
	State   string
}

// States of a file.
const (
	FileTaken   = "taken"
	FileRefused = "refused"
	FileParked  = "parked"
	FileTwin    = "twin"
)

// A Reason says why a file is not taken.
type Reason struct {
	Line     int    `json:"line,omitempty"`
	Field    string `json:"field,omitempty"`
	Found    string `json:"found,omitempty"`
	Expected string `json:"expected,omitempty"`
	Remedy   string `json:"remedy,omitempty"`
	Sentence string `json:"sentence"`
}

// A File is one revision of one path below a root.
type File struct {
	ID          int64
	Root        string
	Path        string // relative to the root, slash-separated
	Size        int64
	ModTime     time.Time
	Seen        time.Time // when it was first seen
	Taken       time.Time // when it was read
	SHA256      [32]byte
	State       string // FileTaken, FileRefused, FileParked, FileTwin
	Format      string
	Encoding    string
	Layout      string
	Match       *naming.Match // nil: no rule matched
	Revision    int           // 1, 2, ... per root and path; 0 on the way in: given by the store
	Replaces    *int64        // the earlier revision of the path
	TwinOf      *int64        // the file with the same bytes
	Reason      *Reason       // for refused and parked files
	NearestRule string
	NearestSet  string
	Distance    int // edit distance to the nearest; -1: unknown
	Remarks     []parse.Remark
	Late        bool // arrived after the deadline of its set
	SettingsID  int64
}

// A Taken is one file on its way in: what to store and, afterwards, the ids it got.
type Taken struct {
	File    File
	Raw     []byte         // the bytes; stored once per hash
	Content *parse.Content // records to store; nil for refused, parked and twin files

	// Instruments tells which instruments an event concerns; nil: none named.
	Instruments func(parse.Event) []string

	// Twin is the earlier entry of the same batch with the same bytes, if that
	// is what makes this file a twin; File.TwinOf is then filled in.
	Twin *Taken

	Stored Stored // filled by TakeFile and TakeBatch
}

// Stored holds the ids of the records of one file, in the order of its parse.Content.
type Stored struct {
	Scans        []int64
	Readings     []int64
	Calibrations []int64
	Events       []int64
}

// States and kinds of a set.
const (
	SetGathering = "gathering"
	SetWaiting   = "waiting"
	SetComplete  = "complete"
	SetFitted    = "fitted"

	KindSample    = "sample"
	KindReference = "reference"
)

// A Missing thing is what a waiting set waits for.
type Missing struct {
	Role string `json:"role"`
	Rung string `json:"rung,omitempty"` // "" : the whole role
	Text string `json:"text,omitempty"` // for people
}

// A Set is one sample set or one reference set.
type Set struct {
	ID          int64
	Key         string // unique: instrument/night/name[/slot][/run]
	Instrument  string
	Night       string // local date the night began, YYYY-MM-DD
	Name        string
	Slot        string
	Run         string
	Series      string
	Compound    string
	Lot         string
	Kind        string // KindSample or KindReference
	State       string
	Revision    int       // counts changes of content; results name the one they saw
	FirstSeen   time.Time // first file
	LastSeen    time.Time // newest file
	LastScanAt  time.Time // newest moment of measurement of a scan; zero: none known
	PHAt        time.Time // arrival of the pH data; zero: not yet
	CompletedAt time.Time
	Missing     []Missing
	Deadline    time.Time // zero: none
}

// A Member is one file, or one trace of a file, in its place within a set.
type Member struct {
	ID         int64
	SetID      int64
	FileID     int64
	ScanID     *int64 // nil for pH tables, sheets and markers
	Role       string // roles of package naming
	Rung       string
	Rep        string
	Pos        string
	PH         *float64 // pH the name or the trace itself carries
	Rev        int
	Measured   time.Time
	Rule       string
	Active     bool
	LeftOutWhy string    // why it is not active
	At         time.Time // when it joined
}

// An OpenSet is a set still gathering or waiting, with what it has so far.
type OpenSet struct {
	Set
	Roles     map[string]int // active members by role
	Rungs     []string       // distinct rungs of active scans of role scan, sorted as text
	Positions []string       // their distinct positions where they have one
	RungPH    map[string]int // labels of the pH readings of its active tables, counted
	Ended     bool           // an end marker is among its members
}

// A ScanRow is a stored scan.
type ScanRow struct {
	ID     int64
	FileID int64
	Index  int // position within its file
	parse.Scan
}

// A ReadingRow is a stored pH reading.
type ReadingRow struct {
	ID     int64
	FileID int64
	Index  int
	parse.Reading
}

// A SheetRow is a stored row of a sample sheet.
type SheetRow struct {
	FileID int64
	parse.Row
}

// A LoadedMember is an active member with its file and, where it has one, its scan.
type LoadedMember struct {
	Member
	Path   string
	Root   string
	SHA256 [32]byte
	Late   bool
	Scan   *ScanRow
}

// SetData is everything that a computation of a set reads.
type SetData struct {
	Set      Set
	Members  []LoadedMember // active ones, by role, rung, rep, file, index
	Readings []ReadingRow   // of its active pH files
	Sheet    []SheetRow     // of its active sheets
	Inactive []Member
}

// A CalibrationRow is a stored electrode calibration.
type CalibrationRow struct {
	ID     int64
	FileID int64
	parse.Calibration
	Figures *CalibrationFigures // nil: not computed yet
}

// CalibrationFigures are computed from a calibration by the pipeline. NaN: cannot be told.
type CalibrationFigures struct {
	SlopeAcidPct        float64 // of the theoretical slope, segment below the middle buffer
	SlopeBasePct        float64
	Potential7MV        float64
	ThirdBufferResidual float64 // pH
	StableS             float64 // seconds until stable
	ForecastLimitNight  string  // YYYY-MM-DD on which a limit is reached at the present rate; "": not foreseen
	Text                string
}

// An EventRow is a stored event.
type EventRow struct {
	ID          int64
	FileID      *int64 // nil: entered by command
	Instruments []string
	parse.Event
}

// A PlanRow is a stored row of a night plan.
type PlanRow struct {
	FileID int64
	parse.Planned
}

// Verdicts.
const (
	Stands      = "stands"
	StandsNoted = "stands-noted"
	Held        = "held"
	NoNumber    = "no number"
)

// Words of a result's status rows.
const (
	StatusCurrent    = "current"
	StatusReplaced   = "replaced"
	StatusInQuestion = "in-question"
	StatusCleared    = "cleared" // a doubt was removed
	StatusLifted     = "lifted"  // a hold was lifted by a person
	StatusStruck     = "struck"
	StatusReleased   = "released"
)

// A Result is one computation of one set. Optional float64 fields are NaN when absent.
type Result struct {
	ID          int64
	SetID       int64
	SetRevision int
	SettingsID  int64
	Program     string   // version and architecture
	InputSHA256 [32]byte // of everything the computation read
	At          time.Time
	Because     string // why it was computed: "first computation", "file re-exported", ...
	By          string // "pkvigil" or a person

	Verdict  string // Stands, StandsNoted, Held, NoNumber
	Headline string // one sentence
	Steps    int
	Constant string // headline constant: "mixed" or "thermodynamic"

	TemperatureC  float64
	IonicStrength float64 // mol/L
	Slope         float64 // apparent slope
	SlopeSD       float64
	RMS           float64 // absorbance
	LambdaAcidNM  float64
	LambdaBaseNM  float64
	IsosbesticNM  float64
	Ratio         float64 // band ratio charted for lots
	RungsUsed     int
	CalibrationID *int64 // calibration of the electrode used
	MeasuredFrom  time.Time
	MeasuredTo    time.Time

	PKa        []PKa
	Checks     []Check
	Components []fit.Component
	Rungs      []Rung
	Spectra    []LimitSpectrum
	Inputs     []Input
	Figures    map[string]Figure // characteristics and other numbers worth a name
	Record     json.RawMessage   // calculation record, the caller's

	Standing Standing // filled when read
}

// A Figure is a named number of a result.
type Figure struct {
	Value float64
	SD    float64 // NaN: none
	Unit  string
}

// A PKa is one constant of a result. Step counts from 1.
type PKa struct {
	Step     int
	PKa      float64 // reported mixed constant, full covariance
	U        float64 // combined standard uncertainty
	K        float64 // coverage factor
	Expanded float64 // K*U
	UOwn     float64
	URun     float64
	ULab     float64
	DOF      float64 // effective; +Inf is stored as NULL

	PKaOwn     float64 // own-weighted estimate, what charts use
	UPKaOwn    float64 // its own part
	Thermo     float64 // thermodynamic, at ThermoAtC
	UThermo    float64
	ThermoAtC  float64
	Library    float64
	ULibrary   float64
	Anchored   float64
	UAnchored  float64
	AnchoredTo string  // reference set key
	Classical  float64 // two-form number of three-solution sets
	UClassical float64
	Assigned   float64 // reference value, references only
	UAssigned  float64
}

// A Check is one judgement about a result.
type Check struct {
	Key       string
	Rung      string
	Value     float64 // NaN: not a number
	LimitLow  float64 // NaN: none
	LimitHigh float64
	Unit      string
	Outcome   string // Stands, StandsNoted, Held, or NoNumber
	Sentence  string
	Action    string // what would make it stand
}

// A Rung is one solution as the result saw it.
type Rung struct {
	Key             string
	PHRead          float64
	PHLatent        float64
	Residual        float64 // latent minus read
	U               float64
	AmountFactorPct float64 // exp(kappa)-1 in percent
	BaselineMAU     float64
	Alpha           []float64 // share of each form, acid form first
	LeftOut         bool
	LeftOutWhy      string
}

// A LimitSpectrum is the spectrum of one form, or a named residual spectrum.
type LimitSpectrum struct {
	Species      string // "acid", "base", "H2X", ...
	WavelengthNM []float64
	Value        []float64 // absorbance, or L/(mol cm) when Molar
	SD           []float64
	Molar        bool
}

// An Input is one file or trace that a result used or left out.
type Input struct {
	FileID     int64
	ScanID     *int64
	Role       string
	Rung       string
	Used       bool
	LeftOutWhy string
}

// A Standing is what a result amounts to now, from its status rows.
type Standing struct {
	Current    bool
	InQuestion bool
	Lifted     bool
	Struck     bool
	ReleasedAt time.Time // zero: not released
	ReleasedBy string
	Verdict    string // "stands", "stands-noted", "held", "no number", "in-question", "replaced", "struck"
}

// A StatusRow is one thing that happened to a result.
type StatusRow struct {
	ResultID int64
	Status   string
	At       time.Time
	Actor    string
	Because  string
	CaseID   *int64
}

// A Summary is a result without its arrays, for lists.
type Summary struct {
	Result
	Set Set
}
