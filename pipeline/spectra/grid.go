package spectra

import (
	"fmt"
	"math"
	"slices"
	"sort"
)

// leastCover is the share of the wanted range that every scan must cover.
const leastCover = 0.8

// sameNM is the difference of wavelengths below which two grids are one.
const sameNM = 1e-3

// clean copies a trace without unusable ends: infinite values and overflow
// become NaN, NaN at either end is cut off.
func clean(t Trace) (Trace, error) {
	n := len(t.WavelengthNM)
	if n != len(t.Absorbance) {
		return t, fmt.Errorf("%d wavelengths and %d absorbances", n, len(t.Absorbance))
	}
	y := slices.Clone(t.Absorbance)
	for j := range y {
		if math.IsInf(y[j], 0) || math.Abs(y[j]) > 50 {
			y[j] = math.NaN()
		}
		if j > 0 && !(t.WavelengthNM[j] > t.WavelengthNM[j-1]) {
			return t, fmt.Errorf("wavelengths do not ascend at %.4g nm", t.WavelengthNM[j])
		}
	}
	lo, hi := 0, n
	for lo < hi && math.IsNaN(y[lo]) {
		lo++
	}
	for hi > lo && math.IsNaN(y[hi-1]) {
		hi--
	}
	if hi-lo < 5 {
		return t, fmt.Errorf("%d usable points", hi-lo)
	}
	t.WavelengthNM, t.Absorbance = t.WavelengthNM[lo:hi], y[lo:hi]
	return t, nil
}

// wanted is the range the set is to be used in: the declared one, else the
// median first and last wavelength of the scans.
func wanted(scans []Trace, opt Options) [2]float64 {
	if opt.RangeNM[1] > opt.RangeNM[0] {
		return opt.RangeNM
	}
	lo, hi := make([]float64, len(scans)), make([]float64, len(scans))
	for i, t := range scans {
		lo[i], hi[i] = t.WavelengthNM[0], t.WavelengthNM[len(t.WavelengthNM)-1]
	}
	return [2]float64{median(lo), median(hi)}
}

// covered is the share of a range that a trace covers.
func covered(t Trace, rng [2]float64) float64 {
	lo := math.Max(rng[0], t.WavelengthNM[0])
	hi := math.Min(rng[1], t.WavelengthNM[len(t.WavelengthNM)-1])
	if rng[1] <= rng[0] {
		return 0
	}
	return math.Max(0, (hi-lo)/(rng[1]-rng[0]))
}

// commonGrid is the coarsest of the scans' grids, cut to the range that all
// cover. Returned are the grid, its median step and whether all scans lie on it.
func commonGrid(scans []Trace) (grid []float64, step float64, same bool) {
	lo, hi := math.Inf(-1), math.Inf(1)
	coarsest := 0
	for i, t := range scans {
		lo = math.Max(lo, t.WavelengthNM[0])
		hi = math.Min(hi, t.WavelengthNM[len(t.WavelengthNM)-1])
		if s := medianStep(t.WavelengthNM); s > step+sameNM {
			step, coarsest = s, i
		}
	}
	for _, x := range scans[coarsest].WavelengthNM {
		if x >= lo-sameNM && x <= hi+sameNM {
			grid = append(grid, x)
		}
	}
	same = true
	for _, t := range scans {
		same = same && onGrid(t, grid)
	}
	return grid, step, same
}

// onGrid says whether a trace, cut to the grid's range, has the grid's wavelengths.
func onGrid(t Trace, grid []float64) bool {
	if len(grid) == 0 {
		return false
	}
	i := sort.SearchFloat64s(t.WavelengthNM, grid[0]-sameNM)
	if i+len(grid) > len(t.WavelengthNM) {
		return false
	}
	for j, x := range grid {
		if math.Abs(t.WavelengthNM[i+j]-x) > sameNM {
			return false
		}
	}
	return true
}

// resample writes a trace's values at the grid's wavelengths into out: the
// value itself where the trace has the wavelength, else a cubic through the
// four nearest points. NaN outside the trace and beside missing values.
func resample(out, grid []float64, t Trace) {
	x, y := t.WavelengthNM, t.Absorbance
	i := 0
	for j, at := range grid {
		for i < len(x) && x[i] < at-sameNM {
			i++
		}
		switch {
		case i < len(x) && math.Abs(x[i]-at) <= sameNM:
			out[j] = y[i]
		case i == 0 || i == len(x):
			out[j] = math.NaN()
		default:
			out[j] = lagrange(x, y, i, at)
		}
	}
}

// lagrange interpolates between x[i-1] and x[i] with a cubic through four
// points, fewer at the ends.
func lagrange(x, y []float64, i int, at float64) float64 {
	lo, hi := max(i-2, 0), min(i+2, len(x))
	sum := 0.0
	for a := lo; a < hi; a++ {
		term := y[a]
		for b := lo; b < hi; b++ {
			if b != a {
				term *= (at - x[b]) / (x[a] - x[b])
			}
		}
		sum += term
	}
	return sum
}

// shifted writes y displaced back by delta nm, y(x + delta), into out; ends keep their values.
func shifted(out, x, y []float64, delta float64) {
	for j := range x {
		at := x[j] + delta
		i := sort.SearchFloat64s(x, at)
		if i == 0 || i == len(x) {
			out[j] = y[j]
			continue
		}
		if v := lagrange(x, y, i, at); !math.IsNaN(v) {
			out[j] = v
		} else {
			out[j] = y[j]
		}
	}
}

func medianStep(x []float64) float64 {
	d := make([]float64, 0, len(x))
	for j := 1; j < len(x); j++ {
		d = append(d, x[j]-x[j-1])
	}
	return median(d)
}

// median sorts its argument and returns the middle value, ignoring NaN; NaN if none is left.
func median(v []float64) float64 {
	slices.Sort(v) // NaN first
	k := 0
	for k < len(v) && math.IsNaN(v[k]) {
		k++
	}
	v = v[k:]
	n := len(v)
	switch {
	case n == 0:
		return math.NaN()
	case n%2 == 1:
		return v[n/2]
	}
	return (v[n/2-1] + v[n/2]) / 2
}

// quantile of the values that are not NaN, by the nearest rank; sorts its argument.
func quantile(v []float64, q float64) float64 {
	slices.Sort(v)
	k := 0
	for k < len(v) && math.IsNaN(v[k]) {
		k++
	}
	v = v[k:]
	if len(v) == 0 {
		return math.NaN()
	}
	return v[min(len(v)-1, int(q*float64(len(v))))]
}
