package drift

import (
	"errors"
	"fmt"
	"math"
)

// A Design is what a fingerprint is computed from: the chemistry of one
// reference, its ladder, its spectra, and the buffers of the calibration.
// m rungs, w wavelengths.
type Design struct {
	PKa          float64   // mixed constant in the ladder
	Charge       int       // of the acid form
	Ladder       []float64 // m pH values in the order measured
	WavelengthNM []float64 // w, ascending
	Acid, Base   []float64 // w, absorbance of the limiting forms in the ladder
	Ionic        float64   // mol/L; 0: 0.1
	DPKaDT       float64   // 1/K
	DPHDT        float64   // 1/K, of the ladder's buffers; 0 means little known, not zero effect
	TemperatureC float64   // 0: 25
	Buffers      []float64 // pH of the calibration buffers, ascending: low, mid, high
	CO2Above     float64   // pH from which uptake of carbon dioxide shows; 0: 7.5
	BandwidthNM  float64   // spectral bandwidth; 0: 2

	Minus float64 // impurity: pKa of a second dye less that of the first; 0: 0.8
	Band  float64 // displacement of the second dye's bands, nm; 0: -10

	SigmaPH   float64 // reading repeatability, pH; 0: 0.006
	UAmount   float64 // relative; 0: 0.003
	UBaseline float64 // absorbance; 0: 0.0005
	SigmaA    float64 // absorbance; 0: 0.0006

	// Centre holds baseline centres of norm-like characteristics, which scale with them.
	Centre map[Characteristic]float64
}

// A Reading is what an estimator makes of a noise-free ladder.
type Reading struct {
	PKa, Slope  float64
	LibraryPKa  float64
	Spectra     []float64 // 2*w, acid form first
	Residual    float64   // root mean square
	AmountVar   float64   // variance of the amount factors
	AmountTrend float64   // from first to last rung, relative
	LatentVar   float64   // variance of latent pH errors
}

// An Estimator turns a ladder (a is m*w, row-major) into the charted numbers.
// library is 2*w, the archived spectra.
type Estimator func(d Design, a, ph, library []float64) (Reading, error)

// ErrDesign says that a design cannot be simulated.
var ErrDesign = errors.New("drift: design incomplete")

func (d Design) filled() Design {
	set := func(p *float64, v float64) {
		if *p == 0 {
			*p = v
		}
	}
	set(&d.Ionic, 0.1)
	set(&d.TemperatureC, 25)
	set(&d.CO2Above, 7.5)
	set(&d.BandwidthNM, 2)
	set(&d.Minus, 0.8)
	set(&d.Band, -10)
	set(&d.SigmaPH, 0.006)
	set(&d.UAmount, 0.003)
	set(&d.UBaseline, 0.0005)
	set(&d.SigmaA, 0.0006)
	return d
}

// optical reports whether the design holds enough to simulate spectra.
func (d Design) optical() error {
	w := len(d.WavelengthNM)
	switch {
	case len(d.Ladder) < 3:
		return fmt.Errorf("%w: ladder has %d rungs, at least 3 are needed", ErrDesign, len(d.Ladder))
	case w < 5 || len(d.Acid) != w || len(d.Base) != w:
		return fmt.Errorf("%w: spectra of %d and %d values on a grid of %d", ErrDesign, len(d.Acid), len(d.Base), w)
	case math.IsNaN(d.PKa):
		return fmt.Errorf("%w: no pKa", ErrDesign)
	}
	return nil
}
