package chart

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
)

// Robust is a robust centre and spread.
type Robust struct {
	Centre, SD float64 // in the unit of the data
	Iterations int     // steps until both stood still
	Converged  bool
}

// AlgorithmA returns the robust mean and standard deviation of x by Algorithm A of
// ISO 13528 (Annex C): start from the median and 1.483 times the median absolute
// deviation, pull values in to centre +- 1.5 sd, take their mean and 1.134 times
// their standard deviation, and repeat until nothing changes.
//
// Where more than half of the values are equal the starting spread would be zero, or
// the iteration would pull everything onto them; then the result is the median and the
// ordinary standard deviation (ISO 13528 leaves the choice of another scale to the
// user). x is not changed. An empty x gives NaN, a single value
// a spread of zero.
func AlgorithmA(x []float64) Robust {
	n := len(x)
	if n == 0 {
		return Robust{Centre: math.NaN(), SD: math.NaN()}
	}
	centre := Median(x)
	sd := 1.483 * medianDeviation(x, centre)
	r := Robust{Centre: centre, SD: sd}
	plain := Robust{Centre: centre, Converged: true}
	if n > 1 {
		plain.SD = stat.StdDev(x, nil)
	}
	if sd == 0 {
		return plain
	}
	clipped := make([]float64, n)
	for r.Iterations = 1; r.Iterations <= 500; r.Iterations++ {
		low, high := centre-1.5*sd, centre+1.5*sd
		for i, v := range x {
			clipped[i] = min(max(v, low), high)
		}
		m, s := stat.MeanStdDev(clipped, nil)
		s *= 1.134
		still := math.Abs(m-centre) <= 1e-13*(math.Abs(m)+s) && math.Abs(s-sd) <= 1e-13*s
		centre, sd = m, s
		if sd < 1e-6*r.SD {
			return plain
		}
		if still {
			r.Converged = true
			break
		}
	}
	r.Centre, r.SD = centre, sd
	return r
}

// Median returns the middle of x, the mean of the two middle values for an even
// count, and NaN for none. x is not changed.
func Median(x []float64) float64 {
	n := len(x)
	if n == 0 {
		return math.NaN()
	}
	s := slices.Clone(x)
	slices.Sort(s)
	if n%2 == 1 {
		return s[n/2]
	}
	return (s[n/2-1] + s[n/2]) / 2
}

// medianDeviation is the median absolute deviation of x from centre, unscaled.
func medianDeviation(x []float64, centre float64) float64 {
	d := make([]float64, len(x))
	for i, v := range x {
		d[i] = math.Abs(v - centre)
	}
	return Median(d)
}
