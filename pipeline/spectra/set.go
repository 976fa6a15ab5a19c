// Package spectra prepares the scans of one set for the fit and describes the
// spectra that come out of it: common grid, blanks, clear window, scatter,
// alignment, masks, noise; isosbestic points and band positions.
//
// The package is pure: it knows no file, database, queue, logger or clock.
package spectra

// A Trace is one scan on its own grid.
type Trace struct {
	ID           int64 // identity for records; the database's scan id
	Name         string
	WavelengthNM []float64 // ascending
	Absorbance   []float64 // NaN: missing
	Decimals     int       // -1: unknown
	PathMM       float64   // 0: unknown
	Order        int       // order of measurement within the set, 0-based
}

// A Rung is one solution with its replicate scans.
type Rung struct {
	Key   string
	PH    float64
	Scans []Trace
}

// Options say how a set is to be prepared.
type Options struct {
	RangeNM    [2]float64   // used in the fit; 0,0: everything common
	Clear      [][2]float64 // wavelengths where nothing absorbs
	Ceiling    float64      // absorbance above which a wavelength does not take part; 0: 1.5
	NominalMM  float64      // path the results are stated for; 0: 10
	Substitute *Trace       // blank to use when the set has none
	SigmaA     float64      // declared noise of the instrument; 0: estimate only
	Align      bool         // allow alignment up to 0.3 nm within the set

	Forms     int     // absorbing forms expected, steps + 1; 0: 2
	Scatter   bool    // remove a lambda^-p rise seen in the clear windows
	MaxOffset float64 // deviation of a scan's clear-window offset from the set above which the rung takes no part, absorbance; 0: 0.020
	TopA      float64 // usual highest absorbance of this compound at NominalMM; 0: unknown
}

// A Record is one thing the preparation did or found.
type Record struct {
	Key   string  `json:"key"` // "blank.subtracted", "grid.coarsest", "mask.ceiling", "clear.offset", "scan.smoothed", ...
	Rung  string  `json:"rung,omitempty"`
	Other string  `json:"other,omitempty"` // the second rung where two are concerned
	Value float64 `json:"value"`
	Unit  string  `json:"unit,omitempty"`
	Text  string  `json:"text"` // sentence
}

// Prepared is a set ready for the fit.
type Prepared struct {
	WavelengthNM []float64 // w, the columns that take part
	A            []float64 // m*w
	Keys         []string  // m
	PH           []float64 // m

	NoiseRung []float64 // m, factors of mean square 1
	NoiseWave []float64 // w, absorbance
	Effective float64   // number of independent wavelengths; w unless the instrument smooths
	Lag1      float64   // lag-1 autocorrelation of the noise

	ClearOffset []float64    // m, absorbance in the clear window after the blank (subtracted)
	ClearMean   float64      // absorbance
	ClearTrend  float64      // absorbance over the whole run
	BlankSD     [3]float64   // blue, centre, red; NaN without a blank
	ShiftNM     []float64    // m, displacement of each scan found within the set, before it was mended; 0 where none is sure
	MaxA        float64      // highest absorbance seen in the range
	LostInfo    float64      // share of the colour change lost to masks, 0..1
	BestChange  float64      // largest colour change left, absorbance
	Masked      [][2]float64 // nm intervals taken out, for all rungs
	HasBlank    bool
	HasClear    bool      // a clear window lay inside the scans; without it ClearOffset is zero and ClearMean, ClearTrend are NaN
	BlankNoise  []float64 // w, standard deviation of the subtracted blank; common to all rungs, so free spectra take it up and it is not part of NoiseWave; nil without a blank
	Scatter     []float64 // m, absorbance at 500 nm of a lambda^-p rise found in the clear windows; nil where it cannot be told from an offset
	ScatterP    float64   // exponent p of that rise; 0: none
	Records     []Record
	LeftOut     []LeftOut // rungs that could not take part
}

// A LeftOut rung did not take part, by a rule written before the night.
type LeftOut struct {
	Key   string `json:"key"`
	Check string `json:"check"`
	Text  string `json:"text"`
}
