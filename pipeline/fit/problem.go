// Package fit estimates acid dissociation constants from the absorbance of a
// ladder of solutions at many wavelengths, with a covariance that counts every
// shared input exactly once.
//
// The package is pure: it knows no file, database, queue, logger or clock.
package fit

// A Problem is one set ready for the fit: blank-corrected absorbances on one
// grid, the pH read in each solution, and what is known of the errors.
// m is the number of rungs, w the number of wavelengths, n the number of steps.
type Problem struct {
	WavelengthNM []float64 // w, ascending
	A            []float64 // m*w, row-major, one row per rung
	PH           []float64 // m, as read
	Steps        int       // n, 1..4
	Start        []float64 // n starting values, or nil: several starts are tried

	// Noise of A[i,j] is NoiseRung[i]*NoiseWave[j]; nil NoiseRung means 1.
	// Factorised noise keeps the reduction to an m x m matrix exact.
	NoiseRung []float64
	NoiseWave []float64 // absorbance, one standard deviation; nil: estimated from the residual

	SigmaPH   []float64 // m, standard deviation of reading each pH (own part only)
	UAmount   float64   // relative standard deviation of the amount of dye between rungs; 0: amounts are fixed
	UBaseline float64   // absorbance, prior standard deviation of one flat offset per rung; 0: no offset
	Shared    []Shared  // errors common to rungs of this set and to other sets
	Effective float64   // number of independent wavelengths when the instrument smooths; 0: all

	// Library, when not nil, fixes the spectra of the n+1 forms up to the
	// amount: (n+1)*w, row-major, acid form first.
	Library     []float64
	ULibrary    []float64 // standard deviation of the above, may be nil
	NonNegative bool      // constrain the spectra of the forms to be >= 0
}

// A Shared error moves every pH reading (and, through Direct, the pKa itself)
// by S[i] times one common unknown with standard uncertainty U.
type Shared struct {
	Key    string    // identifies the thing: "buffer:CB-201", "calibration:E-31:2026-03-09", "junction:nacl"; equal keys are equal errors
	Name   string    // for people
	U      float64   // standard uncertainty of the unknown, in Unit
	Unit   string    // "pH", "K", "mV", "1"
	DOF    float64   // degrees of freedom of U; +Inf if from a certificate
	S      []float64 // m: pH reading error per unit; nil: none
	Direct []float64 // n: error of the stated pKa per unit that does not come through the readings; nil: none
	Bucket string    // "own", "run" or "lab": where the summary for people puts it
}

// A Component is one row of the uncertainty budget of one pKa.
type Component struct {
	Key    string  `json:"key"`
	Name   string  `json:"name"`
	Step   int     `json:"step"` // 0-based index of the pKa
	C      float64 `json:"c"`    // signed sensitivity, d pKa / d unknown
	U      float64 `json:"u"`    // standard uncertainty of the unknown
	Unit   string  `json:"unit"`
	DOF    float64 `json:"dof"`    // 0 stands for infinite
	Bucket string  `json:"bucket"` // "own", "run", "lab"
	Shared bool    `json:"shared"` // false: belongs to this set alone
}

// Status says how a fit ended. The zero value is not success.
type Status int

// The ways a fit can end.
const (
	NotRun Status = iota
	Converged
	HitLimit     // iterations used up
	Undetermined // the data do not fix all pKa
	Unusable     // the input cannot be fitted
)

// An Estimate is one way of weighting the same data.
type Estimate struct {
	PKa        []float64   `json:"pka"`        // n
	Cov        []float64   `json:"cov"`        // n*n, everything included
	CovOwn     []float64   `json:"cov_own"`    // n*n, without the shared errors
	Gain       []float64   `json:"gain"`       // n*m, d pKa / d pH reading
	Eta        []float64   `json:"eta"`        // m, true minus read pH
	Kappa      []float64   `json:"kappa"`      // m, log amount factor
	Baseline   []float64   `json:"baseline"`   // m, absorbance
	Components []Component `json:"components"` // budget: own rows and one per shared key
	Objective  float64     `json:"objective"`  // penalised sum of squares at the solution
	RMS        float64     `json:"rms"`        // absorbance residual, root mean square
}

// A Result is the outcome of Solve.
type Result struct {
	Status     Status  `json:"status"`
	Steps      int     `json:"steps"`
	Iterations int     `json:"iterations"`
	Starts     int     `json:"starts"`
	Condition  float64 `json:"condition"` // of the scaled normal matrix of the pKa after elimination

	Own  Estimate `json:"own"`  // pH readings weighted by their own noise: what charts use
	Full Estimate `json:"full"` // with the full covariance of the shared errors: what is reported

	Slope   float64 `json:"slope"` // apparent slope of the titration, own-weighted; NaN for n > 1
	SlopeSD float64 `json:"slope_sd"`

	Spectra   []float64 `json:"spectra"`    // (n+1)*w absorbance of each form, acid form first
	SpectraSD []float64 `json:"spectra_sd"` // (n+1)*w
	Residual  []float64 `json:"-"`          // m*w

	NoiseSD    float64   `json:"noise_sd"`   // absorbance, as used
	Singular   []float64 `json:"singular"`   // singular values of A / sqrt(m*w) after the baseline projection
	NoiseEdge  float64   `json:"noise_edge"` // largest singular value noise alone would give, same scale
	Components int       `json:"components"` // singular values above the edge
	Indicator  int       `json:"indicator"`  // components by Malinowski's indicator function (1977)

	LeaveOneOut []float64 `json:"leave_one_out"`     // m, change of the first-listed pKa of largest change when the rung is left out
	Alpha       []float64 `json:"alpha"`             // m*(n+1), share of each form per rung
	Free        bool      `json:"free"`              // spectra were free (no library)
	FullMatrix  bool      `json:"full_matrix"`       // the reduction was not exact, so the full matrix was used
	Overlap     *Overlap  `json:"overlap,omitempty"` // two steps that the data do not separate
	Notes       []string  `json:"notes,omitempty"`
}
