package spectra

import (
	"math"
	"sort"
)

// A LibraryEntry is an archived spectrum, or several forms of one compound.
type LibraryEntry struct {
	Name         string
	WavelengthNM []float64 // w, ascending
	Spectra      []float64 // forms*w
}

// A Likeness says how well a compound of the library explains a spectrum.
type Likeness struct {
	Name   string
	Cosine float64 // cosine of the angle between the spectrum and its projection on the forms, 0..1
	Share  []float64
	// Overlap is the share of the unknown's range that the entry covers.
	Overlap float64
}

// DyeMatch compares a spectrum with a library, best first. For an entry with
// several forms the spectrum is compared with its best mixture of them with
// non-negative shares, so that an intermediate pH does no harm. Amount and
// path drop out. Entries that cover less than half of the range are left out.
//
// Two different dyes seldom come above 0.98; the same dye lies above 0.995.
func DyeMatch(wavelength, unknown []float64, library []LibraryEntry) []Likeness {
	var out []Likeness
	for _, e := range library {
		if l, ok := likeness(wavelength, unknown, e); ok {
			out = append(out, l)
		}
	}
	sort.SliceStable(out, func(a, b int) bool { return out[a].Cosine > out[b].Cosine })
	return out
}

func likeness(x, y []float64, e LibraryEntry) (Likeness, bool) {
	w := len(e.WavelengthNM)
	if w < 2 || len(x) < 2 {
		return Likeness{}, false
	}
	forms := len(e.Spectra) / w
	if forms == 0 {
		return Likeness{}, false
	}
	var target []float64
	basis := make([][]float64, forms)
	for j, nm := range x {
		if nm < e.WavelengthNM[0] || nm > e.WavelengthNM[w-1] || math.IsNaN(y[j]) {
			continue
		}
		target = append(target, y[j])
		for f := range forms {
			basis[f] = append(basis[f], linearAt(e.WavelengthNM, e.Spectra[f*w:(f+1)*w], nm))
		}
	}
	l := Likeness{Name: e.Name, Overlap: float64(len(target)) / float64(len(x))}
	if l.Overlap < 0.5 || len(target) < 3 {
		return Likeness{}, false
	}
	share := nonNegative(basis, target)
	dot, model, own := 0.0, 0.0, 0.0
	for j, v := range target {
		fit := 0.0
		for f := range forms {
			fit += share[f] * basis[f][j]
		}
		dot, model, own = dot+fit*v, model+fit*fit, own+v*v
	}
	if model > 0 && own > 0 {
		l.Cosine = dot / math.Sqrt(model*own)
	}
	total := 0.0
	for _, s := range share {
		total += s
	}
	if total > 0 {
		for f := range share {
			share[f] /= total
		}
	}
	l.Share = share
	return l, true
}

// nonNegative solves least squares with non-negative coefficients for few
// columns by trying every subset: at most 2^forms, forms <= 5.
func nonNegative(basis [][]float64, y []float64) []float64 {
	forms := min(len(basis), 5)
	best, bestGain := make([]float64, len(basis)), 0.0
	for subset := 1; subset < 1<<forms; subset++ {
		var cols []int
		for f := range forms {
			if subset&(1<<f) != 0 {
				cols = append(cols, f)
			}
		}
		c, gain, ok := solveSubset(basis, y, cols)
		if ok && gain > bestGain {
			bestGain = gain
			clear(best)
			for k, f := range cols {
				best[f] = c[k]
			}
		}
	}
	return best
}

// solveSubset solves the normal equations of the chosen columns; gain is the
// explained sum of squares. Not ok when a coefficient is negative.
func solveSubset(basis [][]float64, y []float64, cols []int) (c []float64, gain float64, ok bool) {
	k := len(cols)
	a := make([]float64, k*k)
	b := make([]float64, k)
	for p, f := range cols {
		for q, g := range cols {
			for j := range y {
				a[p*k+q] += basis[f][j] * basis[g][j]
			}
		}
		for j := range y {
			b[p] += basis[f][j] * y[j]
		}
	}
	c, ok = solveSPD(a, b, k)
	if !ok {
		return nil, 0, false
	}
	for p := range k {
		if c[p] < 0 {
			return nil, 0, false
		}
		gain += c[p] * b[p]
	}
	return c, gain, true
}

// solveSPD solves a symmetric positive definite system by Cholesky.
func solveSPD(a, b []float64, k int) ([]float64, bool) {
	l := append([]float64(nil), a...)
	x := append([]float64(nil), b...)
	for i := range k {
		for j := 0; j <= i; j++ {
			s := l[i*k+j]
			for p := range j {
				s -= l[i*k+p] * l[j*k+p]
			}
			if i == j {
				if !(s > 1e-13*a[i*k+i]) {
					return nil, false
				}
				l[i*k+i] = math.Sqrt(s)
				continue
			}
			l[i*k+j] = s / l[j*k+j]
		}
	}
	for i := range k {
		for p := range i {
			x[i] -= l[i*k+p] * x[p]
		}
		x[i] /= l[i*k+i]
	}
	for i := k - 1; i >= 0; i-- {
		for p := i + 1; p < k; p++ {
			x[i] -= l[p*k+i] * x[p]
		}
		x[i] /= l[i*k+i]
	}
	return x, true
}

// linearAt interpolates linearly; x is inside the grid.
func linearAt(x, y []float64, at float64) float64 {
	i := sort.SearchFloat64s(x, at)
	if i == 0 {
		return y[0]
	}
	if i >= len(x) {
		return y[len(x)-1]
	}
	t := (at - x[i-1]) / (x[i] - x[i-1])
	return y[i-1] + t*(y[i]-y[i-1])
}
