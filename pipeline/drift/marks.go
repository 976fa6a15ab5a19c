package drift

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// marks are the wavelengths at which ratios and amounts are read.
type marks struct {
	acid, base, iso        float64 // nm
	heightAcid, heightBase float64
}

func nominalMarks(w, acid, base []float64) marks {
	var m marks
	m.acid, m.heightAcid = bandTop(w, acid)
	m.base, m.heightBase = bandTop(w, base)
	m.iso = crossing(w, acid, base, m.acid, m.base)
	return m
}

// bandTop gives place and height of the highest point, by the parabola
// through it and its neighbours.
func bandTop(w, y []float64) (place, height float64) {
	k := 0
	for j := range y {
		if y[j] > y[k] {
			k = j
		}
	}
	if k == 0 || k == len(y)-1 {
		return w[k], y[k]
	}
	x0, x2 := w[k-1]-w[k], w[k+1]-w[k]
	d0, d2 := (y[k-1]-y[k])/x0, (y[k+1]-y[k])/x2
	c := (d2 - d0) / (x2 - x0)
	b := d0 - c*x0
	if c >= 0 {
		return w[k], y[k]
	}
	t := -b / (2 * c)
	return w[k] + t, y[k] + t*(b+c*t)
}

// crossing gives the isosbestic wavelength between the bands; where they
// cross more than once, the crossing of largest difference in slope. NaN if none.
func crossing(w, a, b []float64, from, to float64) float64 {
	lo, hi := math.Min(from, to), math.Max(from, to)
	best, place := 0.0, math.NaN()
	for j := 1; j < len(w); j++ {
		if w[j] < lo || w[j-1] > hi {
			continue
		}
		d0, d1 := a[j-1]-b[j-1], a[j]-b[j]
		if d0 == d1 || d0*d1 > 0 {
			continue
		}
		if s := math.Abs(d1-d0) / (w[j] - w[j-1]); s > best {
			best, place = s, w[j-1]+(w[j]-w[j-1])*d0/(d0-d1)
		}
	}
	return place
}

// values turns a reading into characteristics. Ratios refer to the absorbance
// at the undisturbed isosbestic wavelength, as a chart with a fixed wavelength does.
func (s *study) values(a []float64, r Reading) map[Characteristic]float64 {
	w := s.d.WavelengthNM
	n, m := len(w), len(s.d.Ladder)
	acid, base := r.Spectra[:n], r.Spectra[n:2*n]
	mk := nominalMarks(w, acid, base)
	v := map[Characteristic]float64{
		PKa: r.PKa, Slope: r.Slope, Library: r.LibraryPKa - r.PKa,
		LambdaA: mk.acid, LambdaB: mk.base, AmountVar: r.AmountVar,
		AmountTrend: r.AmountTrend, LatentVar: r.LatentVar,
		Third: thirdSquared(a, m, n),
	}
	if iso := s.marks.iso; !math.IsNaN(iso) && !math.IsNaN(mk.iso) {
		v[LambdaIso] = mk.iso
		v[RatioA] = math.Log(mk.heightAcid / cubicAt(w, acid, iso))
		v[RatioB] = math.Log(mk.heightBase / cubicAt(w, base, iso))
		mean := 0.0
		for i := range m {
			mean += cubicAt(w, a[i*n:(i+1)*n], iso) / float64(m)
		}
		v[AmountIso] = math.Log(mean)
	}
	return v
}

// thirdSquared is the square of the third singular value of A/sqrt(m w).
func thirdSquared(a []float64, m, w int) float64 {
	if m < 3 {
		return 0
	}
	g := mat.NewSymDense(m, nil)
	for i := range m {
		for j := i; j < m; j++ {
			sum := 0.0
			for k := range w {
				sum += a[i*w+k] * a[j*w+k]
			}
			g.SetSym(i, j, sum/float64(m*w))
		}
	}
	var e mat.EigenSym
	if !e.Factorize(g, false) {
		return 0
	}
	return math.Max(0, e.Values(nil)[m-3])
}
