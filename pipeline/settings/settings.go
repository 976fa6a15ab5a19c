// Package settings reads the one TOML file that says what a laboratory has
// and wants. Reading is strict: an unknown key is an error with its line, the
// wrong word, the nearest right one and an example.
//
// The package is pure: bytes in, Settings or errors out.
package settings

import (
	"regexp"
	"time"

	"pkvigil/parse"
	"pkvigil/pipeline/naming"
)

// Settings is the whole file. Every field is documented in
// deploy/pkvigil.example.toml with its default.
type Settings struct {
	Laboratory  Laboratory     `toml:"laboratory"`
	Storage     Storage        `toml:"storage"`
	Folders     []Folder       `toml:"folder"`
	Rules       []naming.Rule  `toml:"rule"`
	Layouts     []parse.Layout `toml:"layout"`
	Compounds   []Compound     `toml:"compound"`
	Instruments []Instrument   `toml:"instrument"`
	Resources   []Resource     `toml:"resource"`
	Complete    Complete       `toml:"complete"`
	Method      Method         `toml:"method"`
	Budget      Budget         `toml:"budget"`
	Checks      []Limit        `toml:"check"`
	Charts      Charts         `toml:"charts"`
	People      []Person       `toml:"person"`
	Mail        Mail           `toml:"mail"`
	Webhooks    []Webhook      `toml:"webhook"`
	Serve       Serve          `toml:"serve"`

	naming *naming.Rules
}

// Laboratory names the place and its night.
type Laboratory struct {
	Name        string `toml:"name"`
	Zone        string `toml:"zone"`         // IANA zone, e.g. "Europe/Vienna"
	NightBegins string `toml:"night_begins"` // "18:00"
	NightEnds   string `toml:"night_ends"`   // "06:00"
	BriefAt     string `toml:"brief_at"`     // "06:30"
}

// Storage says where data go. With no database URL the program runs a private server in DataDir.
type Storage struct {
	DataDir         string        `toml:"data_dir"`
	DatabaseURLEnv  string        `toml:"database_url_env"`  // name of an environment variable
	DatabaseURLFile string        `toml:"database_url_file"` // path of a file holding the URL, mode 0600
	MaxFileMiB      int64         `toml:"max_file_mib"`
	Workers         int           `toml:"workers"` // sets computed at once; 0: one per core
	JobTimeout      time.Duration `toml:"job_timeout"`
}

// Folder is one watched folder.
type Folder struct {
	Name       string        `toml:"name"`
	Path       string        `toml:"path"`
	Instrument string        `toml:"instrument"` // part of every set key; "" if the rule has an inst group
	MarkerFile string        `toml:"marker_file"`
	Settle     time.Duration `toml:"settle"`
	Sweep      time.Duration `toml:"sweep"`
	Zone       string        `toml:"zone"`        // zone of the clock that stamps the files; default the laboratory's
	ClockAhead time.Duration `toml:"clock_ahead"` // how far that clock is ahead
	Ignore     []string      `toml:"ignore"`
	ExpectFrom string        `toml:"expect_first"` // "18:20": silence after this plus silence_deadline rings; "" = no expectation
	Silence    time.Duration `toml:"silence_deadline"`
}

// Compound is a dye, an indicator or another absorbing acid, matched to sets by name.
type Compound struct {
	Name        string    `toml:"name"`
	Title       string    `toml:"title"`       // chemical name for people
	Sets        string    `toml:"sets"`        // RE2 on the set name
	Lot         string    `toml:"lot"`         // lot, or a template over groups of Sets: "${lot}"
	Charge      int       `toml:"charge"`      // z of the acid form
	Steps       int       `toml:"steps"`       // number of pKa in the ladder's range, 1..4
	PKa         []float64 `toml:"pka"`         // expected
	Assigned    float64   `toml:"assigned"`    // reference value, mixed constant at IonicStrength and 25 C; 0 = none
	UAssigned   float64   `toml:"u_assigned"`  // standard uncertainty of it
	DPKaDT      float64   `toml:"dpka_dt"`     // 1/K at 25 C
	EnthalpyKJ  float64   `toml:"enthalpy_kj"` // of ionisation; used when dpka_dt is 0
	Ladder      []float64 `toml:"ladder_nominal"`
	Reference   bool      `toml:"reference"` // measured to watch the system
	Since       string    `toml:"since"`     // date a reference lot came into use
	RefLot      string    `toml:"reference_lot"`
	Clear       []float64 `toml:"clear_window"`   // nm, pairs from, to
	Range       []float64 `toml:"range"`          // nm used in the fit: from, to
	Profile     string    `toml:"profile"`        // "ladder" (default) or "three-solution"
	Ionic       float64   `toml:"ionic_strength"` // mol/L in the ladder
	UIonicRel   float64   `toml:"u_ionic_rel"`    // relative standard uncertainty
	Medium      string    `toml:"medium"`
	Temperature float64   `toml:"temperature"` // C the sets are measured at
	Target      float64   `toml:"target_u"`    // largest expanded uncertainty that is fit for purpose
	Fixed       bool      `toml:"fixed_model"` // the number of steps is fixed by the method; choice only alarms
	PathMM      float64   `toml:"path_mm"`
	Molar       float64   `toml:"concentration"` // mol/L of dye, for molar coefficients; 0: per set

	sets *regexp.Regexp // Sets, compiled
}

// Instrument is one spectrophotometer with what belongs to it.
type Instrument struct {
	Name      string    `toml:"name"`
	RangeNM   []float64 `toml:"range"`
	Ceiling   float64   `toml:"absorbance_ceiling"`
	SigmaA    float64   `toml:"sigma_absorbance"` // declared noise, absorbance
	Electrode string    `toml:"electrode"`        // in use until an event says otherwise
	Meter     string    `toml:"meter"`
	Lamp      string    `toml:"lamp"`
	Cell      string    `toml:"cell"`
	Room      string    `toml:"room"`
	SigmaPH   float64   `toml:"sigma_ph"`   // reading repeatability, declared until 20 sets are there
	UAmount   float64   `toml:"u_amount"`   // relative scatter of the amount of dye between rungs
	UBaseline float64   `toml:"u_baseline"` // absorbance
}

// Resource is a thing that several sets depend on: an electrode, a bottle of buffer, a lamp, a stock.
type Resource struct {
	Name     string   `toml:"name"`
	Kind     string   `toml:"kind"`
	SharedBy []string `toml:"shared_by"` // instruments or compounds
	Value    float64  `toml:"value"`     // pH of a buffer at 25 C
	U        float64  `toml:"u"`         // its standard uncertainty
	From     string   `toml:"from"`      // date in use
	Until    string   `toml:"until"`
}

// Complete says when a set is whole.
type Complete struct {
	Roles    []string      `toml:"roles"`     // roles that must be there besides scans: "blank", "ph"
	Rungs    int           `toml:"rungs_min"` // least number of rungs
	Silence  time.Duration `toml:"silence"`   // quiet time after which a set with all roles counts as whole
	Every    bool          `toml:"every_row"` // every pH row has its scan and the reverse
	Deadline time.Duration `toml:"deadline"`  // after this a set still lacking something is reported as waiting
}

// Method holds the choices of the computation.
type Method struct {
	Activity        string        `toml:"activity"`  // "davies", "guentelberg", "extended"
	ReportAt        float64       `toml:"report_at"` // C
	Constant        string        `toml:"constant"`  // "mixed" or "thermodynamic": which number is the headline
	CoverageK       float64       `toml:"coverage_factor"`
	Ceiling         float64       `toml:"absorbance_ceiling"`
	MonteCarlo      int           `toml:"monte_carlo"` // draws; 0 = only where linear propagation is doubtful
	CalibrationAge  time.Duration `toml:"calibration_age_hold"`
	SubstituteBlank bool          `toml:"substitute_blank"`
}

// Budget holds the shared standard uncertainties that no file states.
type Budget struct {
	UBuffer      float64 `toml:"u_buffer"`         // pH, one bottle
	UCalibration float64 `toml:"u_calibration_mv"` // mV per calibration reading
	UDriftPerDay float64 `toml:"u_drift_per_day"`  // pH per day since calibration
	UJunction    float64 `toml:"u_junction"`       // pH, residual liquid-junction potential
	UTemperature float64 `toml:"u_temperature"`    // K, cell
	UActivity    float64 `toml:"u_activity_rel"`   // of the activity correction, relative
	UStray       float64 `toml:"u_stray"`          // half width of stray light fraction
	UImpurity    float64 `toml:"u_impurity"`       // pKa, hidden second dye below detection
}

// Limit overrides one check for everything, a compound or an instrument.
type Limit struct {
	Check    string    `toml:"check"`
	Compound string    `toml:"compound"`
	Note     []float64 `toml:"note_when"` // outside low..high (or above one value): stands-noted
	Hold     []float64 `toml:"hold_when"` // outside: held
	Off      bool      `toml:"off"`
}

// Charts says how often a false alarm is tolerable and what matters.
type Charts struct {
	FalseAlarmNights float64 `toml:"false_alarm_nights"` // one false case in so many nights per instrument, all together
	ImpactLimit      float64 `toml:"impact_limit"`       // pKa
	BaselineNights   int     `toml:"baseline_nights"`
	YoungNights      int     `toml:"young_nights"`
	Multirule        bool    `toml:"multirule"`
}

// Person can be told and can sign.
type Person struct {
	Name  string        `toml:"name"`
	Mail  string        `toml:"mail"`
	Tells []string      `toml:"tells"` // "cases", "brief", "absence", "delivery"
	After time.Duration `toml:"after"` // told when a case is unacknowledged this long
}

// Mail is the relay.
type Mail struct {
	Host         string `toml:"host"`
	Port         int    `toml:"port"`
	From         string `toml:"from"`
	User         string `toml:"user"`
	PasswordEnv  string `toml:"password_env"`
	PasswordFile string `toml:"password_file"`
	TLS          string `toml:"tls"` // "starttls" (default), "implicit", "off" (loopback only)
}

// Webhook is one receiver of signed JSON.
type Webhook struct {
	Name       string `toml:"name"`
	URL        string `toml:"url"`
	SecretEnv  string `toml:"secret_env"`
	SecretFile string `toml:"secret_file"`
}

// Serve is the loopback page.
type Serve struct {
	Listen string `toml:"listen"` // "127.0.0.1:8711"; "" = off
}
