package fit

import (
	"fmt"
	"math"
	"slices"
)

// A ClassicalResult is the two-form ratio result at one wavelength.
type ClassicalResult struct {
	WavelengthNM float64   `json:"wavelength_nm"` // the one with the smallest uncertainty
	Index        int       `json:"index"`
	PKa          float64   `json:"pka"`         // corrected for limit forms not wholly reached
	U            float64   `json:"u"`           // standard uncertainty, shared errors included
	UOwn         float64   `json:"u_own"`       // without the shared errors
	Uncorrected  float64   `json:"uncorrected"` // limits taken as they are
	Acid         []int     `json:"acid"`        // rungs averaged as acid form
	Base         []int     `json:"base"`        // rungs averaged as base form
	Between      []int     `json:"between"`
	EachPKa      []float64 `json:"each_pka"` // one per rung between, corrected
	Gain         []float64 `json:"gain"`     // m, d pKa / d pH reading
}

// Classical computes pKa = pH - log10((A - A_acid)/(A_base - A)) (Henderson
// 1908, Hasselbalch 1917) from an acid form, a base form and one or more
// solutions between, at the wavelength where it is known best. Where the limit
// solutions still hold some of the other form, the shares at their own pH are
// taken into account (by iteration, since they depend on the pKa). Absorbances
// are used as they are: no amount factors and no offsets are fitted, but their
// scatter is in the uncertainty.
func Classical(p Problem) (*ClassicalResult, error) {
	q := p
	q.Steps, q.Start, q.Library = 1, nil, nil
	if err := check(&q); err != nil {
		return nil, err
	}
	shared, err := merge(&q)
	if err != nil {
		return nil, err
	}
	acid, base, between, err := roles(&q)
	if err != nil {
		return nil, err
	}
	best := &ClassicalResult{U: math.Inf(1)}
	noise := classicalNoise(&q)
	for l := range q.WavelengthNM {
		c := ratioAt{p: &q, l: l, acid: acid, base: base, between: between, noise: noise}
		r, ok := c.solve(shared)
		if ok && r.UOwn < best.UOwn || ok && math.IsInf(best.U, 1) {
			best = r
		}
	}
	if math.IsInf(best.U, 1) {
		return nil, fmt.Errorf("%w: at no wavelength does a solution lie between the two limit forms", ErrProblem)
	}
	return best, nil
}

// roles sorts the rungs by the position of their absorbance between the rungs
// of lowest and highest pH, at the wavelength of largest change.
func roles(p *Problem) (acid, base, between []int, err error) {
	m, w := len(p.PH), len(p.WavelengthNM)
	lo, hi := 0, 0
	for i, v := range p.PH {
		if v < p.PH[lo] {
			lo = i
		}
		if v > p.PH[hi] {
			hi = i
		}
	}
	top := 0
	for l := range w {
		if math.Abs(p.A[hi*w+l]-p.A[lo*w+l]) > math.Abs(p.A[hi*w+top]-p.A[lo*w+top]) {
			top = l
		}
	}
	span := p.A[hi*w+top] - p.A[lo*w+top]
	if span == 0 {
		return nil, nil, nil, fmt.Errorf("%w: the solutions of lowest and highest pH have the same absorbance everywhere", ErrProblem)
	}
	for i := range m {
		x := (p.A[i*w+top] - p.A[lo*w+top]) / span
		switch {
		case i == lo || (i != hi && x < 0.02):
			acid = append(acid, i)
		case i == hi || x > 0.98:
			base = append(base, i)
		default:
			between = append(between, i)
		}
	}
	if len(between) == 0 {
		return nil, nil, nil, fmt.Errorf("%w: no solution lies between the acid form (pH %.2f) and the base form (pH %.2f)", ErrProblem, p.PH[lo], p.PH[hi])
	}
	return acid, base, between, nil
}

// classicalNoise is the noise per wavelength, or 0.001 where none is stated:
// three solutions leave nothing to estimate it from.
func classicalNoise(p *Problem) []float64 {
	if p.NoiseWave != nil {
		return p.NoiseWave
	}
	out := make([]float64, len(p.WavelengthNM))
	for l := range out {
		out[l] = 0.001
	}
	return out
}

// ratioAt is the classical computation at wavelength l.
type ratioAt struct {
	p                   *Problem
	l                   int
	acid, base, between []int
	noise               []float64
}

// value computes the pKa from absorbances a and readings ph (per rung).
func (c *ratioAt) value(a, ph, weight []float64, each []float64) (pka, raw float64, ok bool) {
	mean := func(v []float64, idx []int) float64 {
		s := 0.0
		for _, i := range idx {
			s += v[i] / float64(len(idx))
		}
		return s
	}
	lo, hi := mean(a, c.acid), mean(a, c.base)
	if lo == hi {
		return 0, 0, false
	}
	combine := func(alo, ahi float64) (float64, bool) {
		s, sw := 0.0, 0.0
		for b, i := range c.between {
			x := (a[i] - lo) / (hi - lo)
			al := alo + x*(ahi-alo)
			if !(al > 0) || !(al < 1) {
				return 0, false
			}
			each[b] = ph[i] - math.Log10(al/(1-al))
			s += weight[b] * each[b]
			sw += weight[b]
		}
		return s / sw, true
	}
	raw, ok = combine(0, 1)
	if !ok {
		return 0, 0, false
	}
	pka = raw
	for range 200 {
		alo, ahi := 0.0, 0.0
		for _, i := range c.acid {
			alo += 1 / (1 + math.Pow(10, pka-ph[i])) / float64(len(c.acid))
		}
		for _, i := range c.base {
			ahi += 1 / (1 + math.Pow(10, pka-ph[i])) / float64(len(c.base))
		}
		next, ok := combine(alo, ahi)
		if !ok {
			return 0, 0, false
		}
		if math.Abs(next-pka) < 1e-13 {
			return next, raw, true
		}
		pka = next
	}
	return pka, raw, true
}

// solve gives value and uncertainty; derivatives are central differences of
// the whole computation, limits and correction included.
func (c *ratioAt) solve(shared []Shared) (*ClassicalResult, bool) {
	p, w := c.p, len(c.p.WavelengthNM)
	m := len(p.PH)
	a := make([]float64, m)
	for i := range a {
		a[i] = p.A[i*w+c.l]
	}
	ph := slices.Clone(p.PH)
	each, weight := make([]float64, len(c.between)), make([]float64, len(c.between))
	for b := range weight {
		weight[b] = 1
	}
	if _, _, ok := c.value(a, ph, weight, each); !ok {
		return nil, false
	}
	sd := func(i int) float64 {
		s := c.noise[c.l]
		if p.NoiseRung != nil {
			s *= p.NoiseRung[i]
		}
		return math.Sqrt(s*s + sq2(p.UAmount*a[i]) + sq2(p.UBaseline))
	}
	for b, i := range c.between { // weight by noise of A and of the reading
		x := (a[i] - a[c.acid[0]]) / (a[c.base[0]] - a[c.acid[0]])
		x = math.Min(math.Max(x, 0.001), 0.999)
		d := sd(i) / math.Abs(a[c.base[0]]-a[c.acid[0]]) / (ln10 * x * (1 - x))
		if p.SigmaPH != nil {
			d = math.Hypot(d, p.SigmaPH[i])
		}
		weight[b] = 1 / math.Max(d*d, 1e-12)
	}
	pka, raw, ok := c.value(a, ph, weight, each)
	if !ok {
		return nil, false
	}
	r := &ClassicalResult{WavelengthNM: p.WavelengthNM[c.l], Index: c.l, PKa: pka, Uncorrected: raw,
		Acid: c.acid, Base: c.base, Between: c.between, EachPKa: slices.Clone(each), Gain: make([]float64, m)}
	if !c.uncertainty(r, a, ph, weight, shared, sd) {
		return nil, false
	}
	return r, true
}

// uncertainty fills gains and uncertainties of r.
func (c *ratioAt) uncertainty(r *ClassicalResult, a, ph, weight []float64, shared []Shared, sd func(int) float64) bool {
	p := c.p
	each := make([]float64, len(c.between))
	v := 0.0
	slope := func(x []float64, i int, h float64) (float64, bool) {
		keep := x[i]
		x[i] = keep + h
		up, _, ok1 := c.value(a, ph, weight, each)
		x[i] = keep - h
		down, _, ok2 := c.value(a, ph, weight, each)
		x[i] = keep
		return (up - down) / (2 * h), ok1 && ok2
	}
	for i := range p.PH {
		h := math.Min(1e-5, sd(i)/10)
		da, ok1 := slope(a, i, math.Max(h, 1e-9))
		dp, ok2 := slope(ph, i, 1e-5)
		if !ok1 || !ok2 {
			return false
		}
		r.Gain[i] = dp
		v += sq2(da * sd(i))
		if p.SigmaPH != nil {
			v += sq2(dp * p.SigmaPH[i])
		}
	}
	r.UOwn = math.Sqrt(v)
	for _, sh := range shared {
		v += sq2(sh.coefficient(0, r.Gain) * sh.U)
	}
	r.U = math.Sqrt(v)
	return true
}

func sq2(x float64) float64 { return x * x }
