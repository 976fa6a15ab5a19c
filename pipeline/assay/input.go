// Package assay computes one set: it pairs scans with pH readings, prepares
// the spectra, builds the measurement model with everything the set shares
// with others, fits, judges, and states the result with its budget.
//
// The package is pure: the same Input gives the same Outcome, digit by digit,
// whoever asks and wherever the data came from.
package assay

import (
	"time"

	"pkvigil/parse"
	"pkvigil/pipeline/settings"
	"pkvigil/pipeline/spectra"
)

// A Solution is one scan or blank with its place in the set.
type Solution struct {
	FileID   int64
	ScanID   int64
	Role     string // naming.RoleScan or naming.RoleBlank
	Rung     string
	Rep      string
	PH       float64 // pH in the name or the trace; NaN: none
	Path     string  // of its file, for sentences
	Measured time.Time
	Scan     parse.Scan
}

// An Archive is what is kept of the limit spectra of a compound, from a set
// that stood.
type Archive struct {
	Source       string    // set key
	WavelengthNM []float64 // w
	Acid, Base   []float64 // w, absorbance
	SDAcid       []float64 // w
	SDBase       []float64 // w
	Nominal      spectra.Nominal
}

// Input is everything a computation reads.
type Input struct {
	Key        string
	Night      string
	Compound   *settings.Compound // nil: not in the settings
	Lot        string
	Instrument settings.Instrument
	Method     settings.Method
	Budget     settings.Budget
	Limits     []settings.Limit
	Resources  []settings.Resource

	Solutions []Solution
	Readings  []parse.Reading
	PHFirst   string // "name" when the pH in the name counts before the table's
	PairClock bool   // pH finds its scan by time

	Electrode        string
	Calibration      *parse.Calibration // nil: none on record
	NeedsCalibration bool
	Home             *time.Location

	NewLot     string                 // sentence when the lot of a reference is new beside an older one
	Archive    *Archive               // limit spectra of the same compound on the same instrument; nil: none yet
	Others     []spectra.LibraryEntry // archived spectra of other compounds, for the wrong-dye check
	Substitute *spectra.Trace
	Exchange   [][2]string // label exchanges a person has signed
	// Corrections are signed true values of buffer lots: readings are carried
	// back to potentials by the calibration as recorded and read again with these.
	Corrections map[string]float64
}
