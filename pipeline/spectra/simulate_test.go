package spectra

import (
	"fmt"
	"math"
	"math/rand/v2"
)

// A paper dye for tests of the preparation: invented bands, no real compound.
type dye struct {
	acid, base [][3]float64 // height, centre, full width
	pKa        float64
}

func paperDye() dye {
	return dye{
		acid: [][3]float64{{0.55, 438, 88}, {0.12, 395, 60}},
		base: [][3]float64{{0.95, 585, 74}, {0.18, 400, 80}, {0.25, 548, 60}},
		pKa:  6.4,
	}
}

func gauss(bands [][3]float64, x float64) float64 {
	s := 0.0
	for _, b := range bands {
		d := (x - b[1]) / b[2]
		s += b[0] * math.Exp(-4*math.Ln2*d*d)
	}
	return s
}

func (d dye) at(x, pH float64) float64 {
	alpha := 1 / (1 + math.Pow(10, d.pKa-pH))
	return (1-alpha)*gauss(d.acid, x) + alpha*gauss(d.base, x)
}

func grid(from, to, step float64) []float64 {
	n := int(math.Round((to-from)/step)) + 1
	x := make([]float64, n)
	for j := range x {
		x[j] = from + step*float64(j)
	}
	return x
}

// A paperSet makes rungs on one grid with noise; edit may change a scan.
type paperSet struct {
	dye   dye
	x     []float64
	ph    []float64
	noise float64
	seed  uint64
	blank func(x float64) float64
	edit  func(i int, x []float64, y []float64, rng *rand.Rand)
}

func newPaperSet() paperSet {
	ph := make([]float64, 12)
	for i := range ph {
		ph[i] = 4.4 + 4*float64(i)/11
	}
	return paperSet{dye: paperDye(), x: grid(350, 750, 1), ph: ph, noise: 0.0006, seed: 1}
}

func (s paperSet) make() ([]Rung, []Trace) {
	rng := rand.New(rand.NewPCG(s.seed, 7))
	var rungs []Rung
	for i, p := range s.ph {
		y := make([]float64, len(s.x))
		for j, x := range s.x {
			y[j] = s.dye.at(x, p) + s.noise*rng.NormFloat64()
			if s.blank != nil {
				y[j] += s.blank(x)
			}
		}
		if s.edit != nil {
			s.edit(i, s.x, y, rng)
		}
		rungs = append(rungs, Rung{Key: fmt.Sprintf("r%02d", i+1), PH: p,
			Scans: []Trace{{ID: int64(i + 1), WavelengthNM: s.x, Absorbance: y, Decimals: -1, Order: i}}})
	}
	b := make([]float64, len(s.x))
	for j, x := range s.x {
		b[j] = s.noise * rng.NormFloat64()
		if s.blank != nil {
			b[j] += s.blank(x)
		}
	}
	return rungs, []Trace{{Name: "blank", WavelengthNM: s.x, Absorbance: b, Decimals: -1}}
}

func paperOptions() Options {
	return Options{RangeNM: [2]float64{380, 680}, Clear: [][2]float64{{715, 750}}}
}

func find(records []Record, key string) (Record, bool) {
	for _, r := range records {
		if r.Key == key {
			return r, true
		}
	}
	return Record{}, false
}
