package fit

import (
	"math"
	"math/rand/v2"
)

// A design is an invented experiment for tests.
type design struct {
	pka                   []float64
	lo, hi                float64
	m, w                  int
	sigPH, ukap, ub, sigA float64
	offset, slope         float64 // shared standard uncertainties: pH, relative slope about 7
}

// band is an invented Gaussian absorption band.
func band(nm, centre, width, height float64) float64 {
	x := (nm - centre) / width
	return height * math.Exp(-x*x/2)
}

// spectrumOf is an invented spectrum of form j.
func spectrumOf(j int, nm float64) float64 {
	c := [...]float64{430, 590, 510, 650, 390}[j]
	return band(nm, c, 35, [...]float64{0.6, 0.9, 0.7, 0.8, 0.5}[j]) + band(nm, c-90, 30, 0.2) + 0.02
}

// draw makes one set; truth is d.pka.
func (d design) draw(rng *rand.Rand) Problem {
	p := Problem{Steps: len(d.pka), UAmount: d.ukap, UBaseline: d.ub}
	n1 := len(d.pka) + 1
	for j := 0; j < d.w; j++ {
		p.WavelengthNM = append(p.WavelengthNM, 380+320*float64(j)/math.Max(1, float64(d.w-1)))
		p.NoiseWave = append(p.NoiseWave, d.sigA)
	}
	off, slope := rng.NormFloat64()*d.offset, rng.NormFloat64()*d.slope
	ones, lean := make([]float64, d.m), make([]float64, d.m)
	f, ft := make([]float64, n1), make([]float64, n1)
	for i := 0; i < d.m; i++ {
		ph := d.lo + (d.hi-d.lo)*float64(i)/float64(d.m-1)
		ones[i], lean[i] = 1, ph-7
		p.PH = append(p.PH, ph)
		true_ := ph - off - slope*(ph-7) - rng.NormFloat64()*d.sigPH
		species(true_, d.pka, f, ft, nil)
		amount := math.Exp(rng.NormFloat64() * d.ukap)
		base := rng.NormFloat64() * d.ub
		for _, nm := range p.WavelengthNM {
			a := 0.0
			for k := 0; k < n1; k++ {
				a += f[k] * spectrumOf(k, nm)
			}
			p.A = append(p.A, a*amount+base+rng.NormFloat64()*d.sigA)
		}
		p.SigmaPH = append(p.SigmaPH, d.sigPH)
	}
	if d.offset > 0 {
		p.Shared = append(p.Shared, Shared{Key: "offset", Name: "electrode offset", U: d.offset, Unit: "pH", S: ones, Bucket: "run"})
	}
	if d.slope > 0 {
		p.Shared = append(p.Shared, Shared{Key: "slope", Name: "electrode slope", U: d.slope, Unit: "1", S: lean, Bucket: "run"})
	}
	return p
}
