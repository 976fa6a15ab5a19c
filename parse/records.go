// Package parse turns the bytes of an exported file into records: scans, pH
// readings, electrode calibrations, sample sheets, night plans and logged
// events. It recognises a file by its content, never by its extension, and it
// never guesses a unit: a value is either read as the file or the declared
// layout says, or the file is refused with line, field, found, expected and
// remedy.
//
// The package knows no database, queue, logger or clock.
package parse

import (
	"fmt"
	"strings"
	"time"
)

// A Scan is one absorbance spectrum.
type Scan struct {
	// Label is what the file calls this trace: a column header, a block title,
	// a long-form key. Column naming rules are matched against it.
	Label string

	WavelengthNM []float64 // strictly ascending
	Absorbance   []float64 // decadic; NaN where missing or overflown

	PathMM       float64 // 0: not stated
	TemperatureC float64 // NaN: not stated
	BandwidthNM  float64 // 0: not stated

	// Measured is the moment the file states, zero if none. Where the file
	// names no zone (Zoned false) the wall clock was read in Options.Zone.
	Measured time.Time
	Zoned    bool

	// Decimals is the number of decimals the absorbances were printed with,
	// -1 if it cannot be told; coarse digits enter the noise model.
	Decimals int
	// Scale is the ordinate as the file holds it: "absorbance",
	// "transmittance" (0..1) or "percent transmittance"; Absorbance is already converted.
	Scale string

	Instrument string
	PH         float64 // NaN unless the file itself carries the pH of this trace
	Meta       []Field // everything else the header says, in order
}

// A Field is one key and value of a file's header.
type Field struct{ Key, Value string }

// A Reading is one pH reading, or the stable part of a time series.
type Reading struct {
	Label        string  // rung, position or sample key of the row; "" for a single reading
	PH           float64 // NaN where only a potential is given
	MilliVolt    float64 // NaN: not stated
	TemperatureC float64 // NaN: not stated
	SD           float64 // scatter of the stable part; NaN for a single reading
	SlopePerMin  float64 // remaining drift of the stable part, pH per minute; NaN for a single reading
	Points       int     // readings averaged; 1 for a single reading
	Measured     time.Time
	Zoned        bool
	Electrode    string
	Meter        string
	Line         int // line the reading ends on
}

// A Calibration is one electrode calibration as recorded: what was read in
// which buffer. Slopes and residuals are computed by pipeline/acidbase.
type Calibration struct {
	Electrode string
	Meter     string
	Measured  time.Time
	Zoned     bool
	Points    []CalibrationPoint // at least two, as in the file
	Meta      []Field
}

// A CalibrationPoint is the potential of the electrode in one buffer.
type CalibrationPoint struct {
	Lot          string  // bottle or lot of the buffer, "" if not stated
	PH           float64 // the value the calibration used for the buffer
	MilliVolt    float64
	TemperatureC float64 // NaN: not stated
	Line         int
}

// A Row of a sample sheet maps a position of a run to what stands there.
type Row struct {
	Position      string
	Set           string
	Rung          string
	Role          string // "", "blank", ...
	Compound      string
	Lot           string
	Dilution      float64 // factor >= 1; 0: not stated
	IonicStrength float64 // mol/L; NaN: not stated
	Buffer        string  // recipe name
	Cosolvent     string
	CosolventPct  float64 // volume percent; NaN: not stated
	PH            float64 // NaN: not stated
	Line          int
	Other         []Field
}

// An Event is something a person or a machine logged: lamp change, new buffer
// bottle, electrode replaced, new lot.
type Event struct {
	At       time.Time
	Zoned    bool
	Kind     string // "lamp", "electrode", "buffer", "cell", "stock", "lot", "calibration", "service", "signature", ...
	Resource string // the thing by name: E-35, CB-207
	// Instrument is the instrument concerned, "" if the event is not tied to one.
	Instrument string
	Text       string
	By         string
	Line       int
}

// A Planned set is one row of a night plan.
type Planned struct {
	Night      string // local date the night begins, YYYY-MM-DD
	Instrument string
	Set        string
	Compound   string
	Slot       string // "", "open", "mid", "close"
	Line       int
}

// A Remark says what the reader accepted although it deviates from the norm.
type Remark struct {
	Line int // 1-based; 0: the whole file
	Text string
}

// Content is everything one file holds.
type Content struct {
	Format       string // "jcamp-dx", "delimited", "ph-table", "ph-series", "ph-single", "calibration", "sheet", "events", "plan"
	Encoding     string // "utf-8", "utf-16le", "utf-16be", "windows-1252", ...
	Layout       string // name of the declared layout used, or a description of the one found
	Scans        []Scan
	Readings     []Reading
	Calibrations []Calibration
	Sheet        []Row
	Events       []Event
	Plan         []Planned
	Remarks      []Remark
	Complete     bool // the format has an end mark and it was seen
}

// Options steer a reader.
type Options struct {
	Layouts  []Layout       // declared layouts, tried before finding one
	Zone     *time.Location // zone of wall clocks without one; nil: UTC
	Role     string         // what the naming rule says the file is: "", "scan", "blank", "ph", "calibration", "sheet", "events", "plan"
	MaxBytes int64          // larger input is refused; 0: 64 MiB

	// Stability rule for pH time series: the last window in which the reading
	// moved less than StablePH over StableFor counts. Zero values: 0.01 pH, 30 s.
	StablePH  float64
	StableFor time.Duration
}

// A Layout declares how a family of delimited exports is laid out. Zero
// fields are found from the file. Keys as in the settings.
type Layout struct {
	Name       string   `toml:"name" json:"name"`
	Files      string   `toml:"files" json:"files,omitempty"`             // RE2 on the path; empty: every file
	Encoding   string   `toml:"encoding" json:"encoding,omitempty"`       // utf-8, utf-16le, utf-16be, windows-1252, latin-1
	Delimiter  string   `toml:"delimiter" json:"delimiter,omitempty"`     // ",", ";", "tab", "space"
	Decimal    string   `toml:"decimal" json:"decimal,omitempty"`         // "." or ","
	Thousands  string   `toml:"thousands" json:"thousands,omitempty"`     // "", ".", ",", "'", "space"
	Shape      string   `toml:"shape" json:"shape,omitempty"`             // "columns", "pairs", "rows", "long", "ph-table", "ph-series", "calibration", "sheet", "events", "plan"
	HeaderLine int      `toml:"header_line" json:"header_line,omitempty"` // 1-based line of column names
	FirstLine  int      `toml:"first_line" json:"first_line,omitempty"`   // 1-based first data line
	Abscissa   string   `toml:"abscissa" json:"abscissa,omitempty"`       // "nm", "um", "angstrom", "1/cm"
	Ordinate   string   `toml:"ordinate" json:"ordinate,omitempty"`       // "absorbance", "transmittance", "percent transmittance", "counts"
	Columns    []string `toml:"columns" json:"columns,omitempty"`         // meaning of each column: "wavelength", "absorbance", "skip", "label", "ph", "millivolt", "temperature", "time", "sample", "reference", "dark"
	TimeFormat string   `toml:"time_format" json:"time_format,omitempty"` // Go reference layout
	Overflow   []string `toml:"overflow" json:"overflow,omitempty"`       // marks that stand for an overflow, beside the usual ones
}

// An Error refuses a file, or a part of it, and says where and what to do.
type Error struct {
	File     string
	Line     int    // 1-based; 0: the whole file
	Field    string // label, column or field name
	Found    string // what stands there, shortened and made printable
	Expected string
	Remedy   string
	Err      error // cause, may be nil
}

// Error gives one sentence with everything known.
func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString(Clean(e.File))
	if e.Line > 0 {
		fmt.Fprintf(&b, ":%d", e.Line)
	}
	if e.Field != "" {
		fmt.Fprintf(&b, ": %s", e.Field)
	}
	if e.Found != "" {
		fmt.Fprintf(&b, ": found %s", e.Found)
	}
	if e.Expected != "" {
		fmt.Fprintf(&b, ", expected %s", e.Expected)
	}
	if e.Err != nil {
		fmt.Fprintf(&b, ": %v", e.Err)
	}
	if e.Remedy != "" {
		fmt.Fprintf(&b, "; %s", e.Remedy)
	}
	return b.String()
}

// Unwrap returns the cause.
func (e *Error) Unwrap() error { return e.Err }
