package drift

import (
	"fmt"
	"math"

	"pkvigil/pipeline/fit"
)

// Weighted is the estimator of the charts: the multiwavelength fit in which each
// pH reading counts with its own noise, amounts and baselines are free within
// their priors, and no shared error is known.
func Weighted(d Design, a, ph, lib []float64) (Reading, error) {
	d = d.filled()
	m, w := len(ph), len(d.WavelengthNM)
	p := fit.Problem{
		WavelengthNM: d.WavelengthNM, A: a, PH: ph, Steps: 1, Start: []float64{d.PKa},
		NoiseWave: constant(w, d.SigmaA), SigmaPH: constant(m, d.SigmaPH),
		UAmount: d.UAmount, UBaseline: d.UBaseline,
	}
	free, err := fit.Solve(p, fit.Options{})
	if err != nil {
		return Reading{}, fmt.Errorf("free spectra: %w", err)
	}
	if free.Status != fit.Converged {
		return Reading{}, fmt.Errorf("%w: ended as %v", ErrNoFit, free.Status)
	}
	p.Library = lib
	tied, err := fit.Solve(p, fit.Options{Bare: true})
	if err != nil {
		return Reading{}, fmt.Errorf("archived spectra: %w", err)
	}
	own := free.Own
	return Reading{
		PKa: own.PKa[0], Slope: free.Slope, LibraryPKa: tied.Own.PKa[0],
		Spectra: free.Spectra, Residual: own.RMS,
		AmountVar: variance(own.Kappa), AmountTrend: trend(own.Kappa), LatentVar: variance(own.Eta),
	}, nil
}

func constant(n int, v float64) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = v
	}
	return x
}

// variance is the mean square about the mean.
func variance(x []float64) float64 {
	if len(x) < 2 {
		return 0
	}
	mean, ss := 0.0, 0.0
	for _, v := range x {
		mean += v / float64(len(x))
	}
	for _, v := range x {
		ss += (v - mean) * (v - mean)
	}
	return ss / float64(len(x)-1)
}

// trend is the change of the regression line of x on its index from first to last.
func trend(x []float64) float64 {
	n := float64(len(x))
	if n < 2 {
		return 0
	}
	var sxy, sxx float64
	for i, v := range x {
		c := float64(i) - (n-1)/2
		sxy += c * v
		sxx += c * c
	}
	return math.Expm1(sxy / sxx * (n - 1))
}
