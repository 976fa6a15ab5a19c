package fit

import (
	"fmt"
	"math"
	"slices"
)

// A Hidden is a second dye in the solution with a pKa of its own.
type Hidden struct {
	Found    bool      `json:"found"`    // a third component exceeds the noise edge and decomposes into two dyes
	Share    float64   `json:"share"`    // size of its colour change relative to that of the main dye
	PKa      float64   `json:"pka"`      // of the second dye
	UPKa     float64   `json:"u_pka"`    //
	Main     float64   `json:"main"`     // pKa of the main dye with the second one allowed for
	Spectrum []float64 `json:"spectrum"` // w, its colour change, base minus acid form, absorbance
	Limit    float64   `json:"limit"`    // share from which a second dye would be seen: 1 pKa away, its change displaced by 10 nm
	Third    float64   `json:"third"`    // third singular value over the noise edge
	Text     string    `json:"text"`     // sentence
}

// SecondDye looks for a second one-step dye behind a one-step result r of the
// same set. Two independent dyes have the pH curve of one acid with two steps
// whose polynomial h^2 + K1 h + K1 K2 has real roots; the two-step fit is
// decomposed into them. A constant coloured impurity is invisible here, since
// free spectra absorb it. Options are those r was made with.
func SecondDye(p Problem, r *Result, opt Options) (*Hidden, error) {
	if r == nil || r.Steps != 1 || len(r.Spectra) == 0 || p.Library != nil || p.Steps != 1 {
		return nil, fmt.Errorf("%w: a second dye is looked for behind a full one-step result with free spectra", ErrProblem)
	}
	if len(p.PH) < 5 {
		return nil, fmt.Errorf("%w: %d rungs, at least 5 are needed to see a second dye", ErrProblem, len(p.PH))
	}
	h := &Hidden{}
	var s Solver
	s.prepareAs(&p, r)
	h.limit(&s.red, &p, r, opt)
	if len(r.Singular) > 2 && r.NoiseEdge > 0 {
		h.Third = r.Singular[2] / r.NoiseEdge
	}
	if r.Components < 3 {
		h.Text = fmt.Sprintf("No second dye is visible; one whose colour change is %.1f %% of the main one or more would be, if its pKa is about one unit away.", 100*h.Limit)
		return h, nil
	}
	q := p
	q.Steps, q.Start = 2, nil
	q.Shared = slices.Clone(p.Shared)
	for i, e := range q.Shared {
		if len(e.Direct) == 1 { // what acts on the one constant acts on both alike
			q.Shared[i].Direct = []float64{e.Direct[0], e.Direct[0]}
		}
	}
	opt.Bare = false
	two, err := s.Solve(q, opt)
	if err != nil {
		return nil, err
	}
	if len(two.Full.PKa) != 2 || len(two.Spectra) == 0 {
		h.Text = "A third component is there, but a model with two equilibria does not come to an end on it."
		return h, nil
	}
	h.decompose(two, len(p.WavelengthNM))
	return h, nil
}

// decompose splits the two-step fit into two dyes.
func (h *Hidden) decompose(two *Result, w int) {
	p1, p2 := two.Full.PKa[0], two.Full.PKa[1]
	x := math.Pow(10, p1-p2) // K2/K1
	disc := 1 - 4*x
	if disc <= 0 {
		h.Text = "A third component is there, but its curve is not that of two independent dyes: the steps belong to one acid, or the pH axis is wrong."
		return
	}
	big, small := (1+math.Sqrt(disc))/2, 2*x/(1+math.Sqrt(disc)) // roots over K1
	pk := [2]float64{p1 - math.Log10(big), p1 - math.Log10(small)}
	change := [2][]float64{make([]float64, w), make([]float64, w)}
	var norm [2]float64
	for l := range w {
		e0, e1, e2 := two.Spectra[l], two.Spectra[w+l], two.Spectra[2*w+l]
		a := ((e1 - e0) - (e2-e0)*small) / (big - small)
		change[0][l], change[1][l] = a, e2-e0-a
		norm[0] += a * a
		norm[1] += sq2(e2 - e0 - a)
	}
	main := 0
	if norm[1] > norm[0] {
		main = 1
	}
	h.Found = true
	h.Main, h.PKa = pk[main], pk[1-main]
	h.UPKa = math.Sqrt(two.Full.Cov[(1-main)*3])
	h.Share = math.Sqrt(norm[1-main] / norm[main])
	h.Spectrum = change[1-main]
	h.Text = fmt.Sprintf("About %.1f %% of a second dye, pKa near %.1f.", 100*h.Share, h.PKa)
}

// limit is the share at which the third singular value reaches the level that
// noise passes once in a thousand sets. A component of size s among unit noise
// shows the singular value sqrt((s^2+m)(s^2+w))/s (Benaych-Georges &
// Nadakuditi 2012, from memory), so below (m w)^(1/4) it shows nothing.
func (h *Hidden) limit(red *reduced, p *Problem, r *Result, opt Options) {
	m, w := red.m, red.w
	eff := red.effective(p.effective(opt))
	fm := float64(m)
	rm, rw := math.Sqrt(fm), math.Sqrt(eff)
	level := (rm+rw)*(rm+rw) + tracyWidom*(rm+rw)*math.Cbrt(1/rm+1/rw)
	// (s2+m)(s2+w) = level s2
	b := level - fm - eff
	s := math.Sqrt((b + math.Sqrt(math.Max(b*b-4*fm*eff, 0))) / 2)
	gain := 0.0
	for _, d := range []float64{1, -1} {
		gain = math.Max(gain, red.secondGain(p, r, d, w))
	}
	h.Limit = 1
	if gain > 0 {
		h.Limit = math.Min(1, s/gain)
	}
}

// secondGain is the singular value that a second dye of share 1 would add: the
// parts of its curve and of its spectrum that the main dye cannot absorb.
func (d *reduced) secondGain(p *Problem, r *Result, apart float64, w int) float64 {
	m, pka := d.m, r.Own.PKa[0]
	b, q, rr := make([]float64, m*3), make([]float64, m*3), make([]float64, 9)
	for i, ph := range p.PH {
		t := ph + r.Own.Eta[i]
		b[i*3], b[i*3+1] = d.rung[i], d.rung[i]/(1+math.Pow(10, pka-t))
		b[i*3+2] = d.rung[i] / (1 + math.Pow(10, pka+apart-t))
	}
	orthonormalise(q, rr, b, m, 3)
	e, qe, re := make([]float64, w*3), make([]float64, w*3), make([]float64, 9)
	for l := range w {
		e[l*3] = r.Spectra[l] * d.inv[l]
		e[l*3+1] = (r.Spectra[w+l] - r.Spectra[l]) * d.inv[l]
		k := at(p.WavelengthNM, p.WavelengthNM[l]-10)
		e[l*3+2] = (r.Spectra[w+k] - r.Spectra[k]) * d.inv[l]
	}
	if d.base {
		for j := 0; j < 3; j++ {
			s := 0.0
			for l := range w {
				s += e[l*3+j] * d.v[l]
			}
			for l := range w {
				e[l*3+j] -= s * d.v[l]
			}
		}
	}
	orthonormalise(qe, re, e, w, 3)
	return rr[8] * re[8]
}

// at is the index of the grid point nearest to x; the grid ascends.
func at(grid []float64, x float64) int {
	best := 0
	for i, g := range grid {
		if math.Abs(g-x) < math.Abs(grid[best]-x) {
			best = i
		}
	}
	return best
}
