package drift

// A Shape is the course of a disturbance in time.
type Shape string

// The shapes.
const (
	ShapeStep     Shape = "step"
	ShapeRamp     Shape = "ramp"
	ShapeSawtooth Shape = "sawtooth" // a ramp that each calibration puts back to zero
	ShapeUntil    Shape = "step until an event"
)

// An Interval of nights holds the onset with 90 % probability.
type Interval struct {
	Low  Night `json:"low"`
	Best Night `json:"best"`
	High Night `json:"high"`
}

// An Amount is a size with its standard deviation.
type Amount struct {
	Name string  `json:"name"`
	Size float64 `json:"size"`
	SD   float64 `json:"sd"`
	Unit string  `json:"unit"`
}

// A Candidate is one cause on one resource with its weight.
type Candidate struct {
	Cause       Cause     `json:"cause"`
	Title       string    `json:"title"`
	Class       string    `json:"class"`
	Resource    Resource  `json:"resource"`
	Shape       Shape     `json:"shape"`
	Since       Interval  `json:"since"`
	Until       Night     `json:"until,omitempty"` // last night of a shape that an event ended; 0: still there
	LnB         float64   `json:"ln_b"`            // best onset and shape, against no change
	Probability float64   `json:"probability"`
	Theta       []float64 `json:"theta"` // 1 or 2 sizes in table units; per night for ramps
	ThetaCov    []float64 `json:"theta_cov"`
	Now         []Amount  `json:"now"`              // sizes on the last night, in words' units
	PerNight    bool      `json:"per_night"`        // the shape grows, so Theta is a rate
	Logged      string    `json:"logged,omitempty"` // event that raised its odds
	For         []string  `json:"for"`              // evidence in words
	Against     []string  `json:"against"`
}

// A Check is a measurement that would decide.
type Check struct {
	Text       string   `json:"text"`
	Separation float64  `json:"separation"` // expected difference over its standard deviation
	Between    [2]Cause `json:"between"`
}

// A Finding says how far an explanation is to be believed.
type Finding string

// The findings.
const (
	Named      Finding = "named"       // one cause on one resource
	ClassOnly  Finding = "class"       // a class of causes on one resource
	CannotTell Finding = "cannot tell" // several are likely
	NoneKnown  Finding = "none of the known causes"
)

// An Explanation is one disturbance with its candidates, likeliest first.
type Explanation struct {
	Score            float64     `json:"score"` // ln B of the best hypothesis given the earlier explanations
	Finding          Finding     `json:"finding"`
	Candidates       []Candidate `json:"candidates"`
	Class            string      `json:"class"`
	ClassProbability float64     `json:"class_probability"`
	ChiSquare        float64     `json:"chi_square"` // of what the winner leaves
	DOF              int         `json:"dof"`
	P                float64     `json:"p"`
	Disagree         []string    `json:"disagree,omitempty"` // what the winner does not explain, in words
	Alike            []string    `json:"alike,omitempty"`    // what these data cannot tell apart
	Next             *Check      `json:"next,omitempty"`
	Cells            []string    `json:"cells"`             // cells it acts on
	Instruments      []string    `json:"instruments"`       // of those cells
	Impact           float64     `json:"impact"`            // upper 95 % bound of the largest change of a reference's pKa tonight
	Touched          []Touched   `json:"touched"`           // what it does to each reference tonight
	Retired          bool        `json:"retired,omitempty"` // the resource is no longer in use
	// Minor: certain but too small to matter; recorded, not rung.
	Minor    bool   `json:"minor,omitempty"`
	Sentence string `json:"sentence"` // size, direction, since when
}

// Touched is the size of a disturbance in one characteristic of one cell on the last night.
type Touched struct {
	Cell           string         `json:"cell"`
	Characteristic Characteristic `json:"characteristic"`
	Predicted      float64        `json:"predicted"`
	Observed       float64        `json:"observed"` // mean since the onset, against the baseline; for growing shapes the last night
	SD             float64        `json:"sd"`
}

// An Evaluation is the judgement of one night.
type Evaluation struct {
	Night        Night         `json:"night"`
	Score        float64       `json:"score"` // group score: largest ln B, or ln of the weighted sum over onsets where that is larger
	Threshold    float64       `json:"threshold"`
	Rings        bool          `json:"rings"`
	Hypotheses   int           `json:"hypotheses"`   // cause x resource x shape
	Explanations []Explanation `json:"explanations"` // those above the threshold, first cause first
	Observed     []string      `json:"observed"`     // cells with an observation in this night
	Inside       []string      `json:"inside"`       // observed cells whose values lie within their limits
	Outside      []string      `json:"outside"`
	Watched      []Watched     `json:"watched,omitempty"` // parallel to History.Watch
}

// Watched says what one night alone says of a disturbance that was found earlier.
type Watched struct {
	CaseID int64 `json:"case_id"`
	Data   bool  `json:"data"` // a cell it acts on was observed tonight
	// Expected is how many standard deviations the disturbance would show tonight
	// if it had gone on; below about 2 the night says nothing about it.
	Expected float64 `json:"expected"`
	// Share is tonight's estimate of it as a share of what was expected, 1: goes on, 0: gone.
	Share float64 `json:"share"`
	// Inside: it would show, and it does not.
	Inside bool `json:"inside"`
	// Retired: cells that used the resource were observed tonight, and none of them uses it any more.
	Retired bool `json:"retired"`
}
