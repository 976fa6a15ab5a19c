package verdict

import (
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/spectra"
)

// Profile says what kind of set is judged.
type Profile string

// Profiles of sets.
const (
	Ladder        Profile = "ladder"
	ThreeSolution Profile = "three-solution" // limiting forms and one or more solutions between
)

// Calibration is what is known of the electrode calibration in force.
type Calibration struct {
	Electrode  string
	AgeHours   float64
	SlopesPct  []float64 // per segment, low pH first
	Potential7 float64   // mV at pH 7
	Residuals  []float64 // of inner buffers from the chord of their neighbours, pH
	LowestPH   float64   // outermost buffers
	HighestPH  float64
	Refused    string // sentence when the calibration cannot be right (interchanged buffers)
}

// A Suspect is one proposed explanation by wrong labels; see fit.LabelSuspects.
type Suspect struct {
	Kind string  // "exchange", "shift"
	A, B string  // rung keys, or "" and the number of rows
	Odds float64 // likelihood ratio against the labels as given
	PKa  float64 // first pKa with the labels so changed
}

// Facts is everything a set is judged by.
type Facts struct {
	Set      string
	Profile  Profile
	Prepared *spectra.Prepared
	Fit      *fit.Result
	FitError error

	Keys    []string  // m, rung keys of the fit, in order
	PH      []float64 // m, as read
	SigmaPH float64   // own scatter of a reading as used
	Nominal []float64 // nominal ladder, nil if none

	LeftOut []spectra.LeftOut // rungs that took no part, with the written rule
	Rungs   int               // solutions delivered, left-out ones counted

	U      []float64 // n, expanded uncertainties of the headline pKa
	Target float64   // largest U fit for purpose

	Calibration      *Calibration // nil: none on record
	NeedsCalibration bool         // the laboratory records calibrations, so a missing one is a finding

	TemperatureC    float64            // measured, NaN unknown
	NominalC        float64            // 0: unknown
	DelayMin        []float64          // m, scan to pH reading, NaN unknown
	NamePHDiff      map[string]float64 // rung -> pH in name minus pH in table
	LibraryDiff     float64            // library minus free pKa, NaN: no library
	BestDye         string             // compound whose archived spectra match better, "" none
	BestCosine      float64
	Suspects        []Suspect
	SecondDyeShare  float64 // estimated share of a further dye, 0 none
	SecondDyePKa    float64
	SecondDyeLimit  float64     // share that could have been seen
	Doubled         [][2]string // rungs whose spectra are the same within noise though pH differs
	Cloned          [][2]string // rungs whose numbers are the same digit by digit
	SamePH          [][2]string // consecutive rungs with the same pH and different spectra
	Foreign         []string    // rungs whose spectrum does not belong to this dye
	MissingBlank    bool
	SubstituteBlank bool
	NewLot          string // sentence when the lot of a reference is new beside an older one
	UnknownLot      string
}
