package fit

import (
	"fmt"
	"hash/fnv"
	"math"
	"math/rand/v2"
	"slices"
)

// MCOptions size a Monte Carlo propagation.
type MCOptions struct {
	Draws    int  // 0: 2000; with Adaptive the least number
	Adaptive bool // go on until the standard uncertainty is known to two digits (JCGM 101, 7.9)
	Max      int  // with Adaptive; 0: 20000
	Seed     uint64
	Workers  int  // goroutines; the numbers do not depend on it
	Keep     bool // keep the draws
}

// An MCStep is the distribution of one pKa.
type MCStep struct {
	Mean    float64   `json:"mean"`
	U       float64   `json:"u"`      // standard deviation
	Low     float64   `json:"low"`    // shortest 95 % interval
	High    float64   `json:"high"`   //
	Linear  float64   `json:"linear"` // standard uncertainty of the linear propagation
	Differs bool      `json:"differs"`
	Draws   []float64 `json:"draws,omitempty"`
}

// An MCResult is the outcome of MonteCarlo.
type MCResult struct {
	Draws  int      `json:"draws"`
	Failed int      `json:"failed"` // refits that did not converge
	Seed   uint64   `json:"seed"`
	Steps  []MCStep `json:"steps"`
	Stable bool     `json:"stable"` // adaptive: two digits were reached
}

// mcBlock is the number of draws that share one random stream.
const mcBlock = 50

// SharedDraw is the standard normal number of draw i of the shared error key.
// It depends on key and number only, so all results that share a key share
// the draw, in whatever order and on whatever machine they are computed.
func SharedDraw(key string, i int) float64 {
	h := fnv.New64a()
	h.Write([]byte(key))
	rng := rand.New(rand.NewPCG(h.Sum64(), uint64(i)))
	return rng.NormFloat64()
}

// sharedT scales SharedDraw to Student's t when the uncertainty has finite degrees of freedom.
func sharedT(s *Shared, i int) float64 {
	z := SharedDraw(s.Key, i)
	if !(s.DOF > 0) || math.IsInf(s.DOF, 0) {
		return z
	}
	h := fnv.New64a()
	h.Write([]byte(s.Key + "|dof"))
	rng := rand.New(rand.NewPCG(h.Sum64(), uint64(i)))
	return z / math.Sqrt(chiSquare(rng, s.DOF)/s.DOF)
}

// MonteCarlo propagates distributions through the fit (JCGM 101): the fitted
// set is disturbed by fresh reading errors, amounts, offsets, noise and shared
// errors, and refitted from the solution with the weighting of the full
// estimate. r must be a converged Result of Solve for the same p.
//
// Only the part of the noise that the spectra can see is drawn point by point.
// The rest enters through its Gram matrix, drawn as a Bartlett triangle
// (Bartlett 1933); since the weighted noise is independent and equal this is
// exact, and a draw costs the same for any number of wavelengths.
func MonteCarlo(p Problem, r *Result, opt MCOptions) (*MCResult, error) {
	if r == nil || r.Status != Converged || len(r.Full.PKa) != p.Steps {
		return nil, fmt.Errorf("%w: Monte Carlo needs a converged result of the same set", ErrProblem)
	}
	if p.Library != nil || p.NonNegative {
		return nil, fmt.Errorf("%w: Monte Carlo is for free spectra without the constraint of non-negativity", ErrProblem)
	}
	if opt.Draws <= 0 {
		opt.Draws = 2000
	}
	if opt.Max < opt.Draws {
		opt.Max = max(20000, opt.Draws)
	}
	shared, err := merge(&p)
	if err != nil {
		return nil, err
	}
	base, err := newTemplate(&p, shared, r)
	if err != nil {
		return nil, err
	}
	out := &MCResult{Seed: opt.Seed}
	var draws []float64
	for want := opt.Draws; ; want = min(len(draws)/p.Steps+1000, opt.Max) {
		have := len(draws) / p.Steps
		draws = append(draws, make([]float64, (want-have)*p.Steps)...)
		base.run(draws, have, want, opt)
		out.summarise(draws, p.Steps, r, opt.Keep)
		if !opt.Adaptive {
			break
		}
		out.Stable = settled(draws, p.Steps)
		if out.Stable || want >= opt.Max {
			break
		}
	}
	return out, nil
}

// template is what all draws of one set have in common.
type template struct {
	p      *Problem
	shared []Shared
	s      Solver
	full   *Estimate
	clean  []float64 // m*q: errorless data in the basis of the row space (and offset direction)
	free   int       // wavelengths beyond that basis
}

// newTemplate evaluates the errorless set at the solution.
func newTemplate(p *Problem, shared []Shared, r *Result) (*template, error) {
	t := &template{p: p, shared: shared, full: &r.Full}
	if err := t.s.prepare(p, Options{}); err != nil {
		return nil, err
	}
	if p.NoiseWave == nil {
		// Same noise as the result, which an independent estimate need not repeat exactly.
		t.s.red.scale(r.NoiseSD/t.s.noiseSD(), p.UBaseline)
	}
	c := &t.s.c
	c.shape(c.n, 0)
	c.frozen = true
	c.now.zero()
	copy(c.now.p, r.Full.PKa)
	ph := slices.Clone(p.PH)
	for i, e := range r.Full.Eta {
		ph[i] += e
	}
	c.ph = ph
	for i := range c.now.k {
		if c.ukap > 0 {
			c.now.k[i] = r.Full.Kappa[i] / c.ukap
		}
	}
	c.evaluate(&c.now, true)
	// The spectra are those of the fit; the drawn set has even amounts again.
	f := &c.now
	clear(f.k)
	c.design(f)
	var x, x0 [(maxSteps + 1) * (maxSteps + 1)]float64
	multiply(x[:], f.ri, f.l, c.n1)
	if c.base {
		for j := 0; j < c.n1; j++ {
			for k := j; k < c.n1; k++ {
				x0[j] += f.ri0[j*c.n1+k] * f.e0[k]
			}
		}
	}
	t.clean = make([]float64, c.m*c.q)
	c.map1(t.clean, f.bm, x[:], x0[:])
	if c.base {
		for i := 0; i < c.m; i++ {
			t.clean[i*c.q+c.q-1] /= c.w0[i]
		}
	}
	t.free = int(c.effective(p.Effective)) - c.n1
	return t, nil
}

// run fills draws[from*n:to*n], seeding one stream per block of draws.
func (t *template) run(draws []float64, from, to int, opt MCOptions) {
	first := from / mcBlock
	inBlocks((to-1)/mcBlock-first+1, 1, opt.Workers, nil, nil, func(a, b int) {
		w := t.worker()
		for blk := first + a; blk < first+b; blk++ {
			rng := rand.New(rand.NewPCG(opt.Seed, uint64(blk)))
			for i := blk * mcBlock; i < min((blk+1)*mcBlock, to); i++ {
				out := w.draw(rng, i)
				if i >= from {
					copy(draws[i*t.p.Steps:], out)
				}
			}
		}
	})
}

// worker has its own reduced data and core.
type worker struct {
	t     *template
	red   reduced
	c     core
	ph    []float64
	wish  []float64
	delta []float64
	out   []float64
	y, l  []float64
}

func (t *template) worker() *worker {
	src := &t.s.c
	m := src.m
	w := &worker{t: t, ph: make([]float64, m), wish: make([]float64, m*m), delta: make([]float64, len(t.shared)), out: make([]float64, src.n),
		y: make([]float64, m*src.q), l: make([]float64, m*m)}
	w.red = reduced{m: m, w: src.w, base: src.base, v: src.v, vnorm: src.vnorm, inv: src.inv, rung: src.rung,
		d: src.d, w0: src.w0, gram: make([]float64, m*m), y0: make([]float64, m)}
	w.c = core{reduced: &w.red, n: src.n, n1: src.n1, ukap: src.ukap, sig: src.sig, ph: w.ph}
	w.c.shape(src.n, len(t.shared))
	w.c.shift = make([]float64, m*len(t.shared))
	for k, sh := range t.shared {
		for i := 0; i < m && sh.S != nil; i++ {
			w.c.shift[i*len(t.shared)+k] = sh.S[i] * sh.U
		}
	}
	return w
}

// draw makes and refits one disturbed set; it returns one possible value of
// each pKa: the estimate minus the error this draw brought about.
func (w *worker) draw(rng *rand.Rand, number int) []float64 {
	t, c := w.t, &w.c
	m, q, n1 := c.m, c.q, c.n1
	for k := range w.delta {
		w.delta[k] = sharedT(&t.shared[k], number) * t.shared[k].U
	}
	y := w.y
	for i := 0; i < m; i++ {
		w.ph[i] = t.s.c.ph[i] + rng.NormFloat64()*c.sig[i]
		for k, d := range w.delta {
			if s := t.shared[k].S; s != nil {
				w.ph[i] += s[i] * d
			}
		}
		amount := math.Exp(c.ukap * rng.NormFloat64())
		for j := 0; j < q; j++ {
			y[i*q+j] = t.clean[i*q+j]*amount + rng.NormFloat64()
		}
		if c.base {
			w.red.y0[i] = y[i*q+q-1] + rng.NormFloat64()*math.Sqrt(c.d[i]-1)
		}
	}
	w.wishart(rng, t.free)
	for i := 0; i < m; i++ {
		for k := 0; k <= i; k++ {
			s := w.wish[i*m+k] + dot(y[i*q:i*q+n1], y[k*q:k*q+n1])
			w.red.gram[i*m+k], w.red.gram[k*m+i] = s, s
		}
	}
	w.red.sums()
	c.now.zero()
	copy(c.now.p, t.full.PKa)
	c.lambda = 0
	st, _ := c.descend(100)
	for k := range w.out {
		if st != Converged {
			w.out[k] = math.NaN()
			continue
		}
		e := c.now.p[k] - t.full.PKa[k]
		for j, d := range w.delta {
			if dir := t.shared[j].Direct; dir != nil {
				e += dir[k] * d
			}
		}
		w.out[k] = t.full.PKa[k] - e
	}
	return w.out
}

// wishart draws the Gram matrix of m rows of `free` independent normals.
func (w *worker) wishart(rng *rand.Rand, free int) {
	m := w.c.m
	if free <= 0 {
		clear(w.wish)
		return
	}
	cols := min(m, free)
	l := w.l[:m*cols]
	for i := 0; i < m; i++ {
		for k := 0; k < min(i, cols); k++ {
			l[i*cols+k] = rng.NormFloat64()
		}
		if i < cols {
			l[i*cols+i] = math.Sqrt(chiSquare(rng, float64(free-i)))
		}
	}
	for i := 0; i < m; i++ {
		for k := 0; k <= i; k++ {
			w.wish[i*m+k] = dot(l[i*cols:i*cols+min(k+1, cols)], l[k*cols:k*cols+min(k+1, cols)])
		}
	}
}

// chiSquare draws with k > 0 degrees of freedom (Marsaglia & Tsang 2000).
func chiSquare(rng *rand.Rand, k float64) float64 {
	a, boost := k/2, 1.0
	if a < 1 {
		boost = math.Pow(1-rng.Float64(), 1/a)
		a++
	}
	d := a - 1.0/3
	c := 1 / math.Sqrt(9*d)
	for {
		x := rng.NormFloat64()
		v := 1 + c*x
		if v <= 0 {
			continue
		}
		v = v * v * v
		if math.Log(1-rng.Float64()) < x*x/2+d-d*v+d*math.Log(v) {
			return 2 * d * v * boost
		}
	}
}

// summarise turns draws into steps.
func (out *MCResult) summarise(draws []float64, n int, r *Result, keep bool) {
	out.Draws, out.Failed, out.Steps = len(draws)/n, 0, out.Steps[:0]
	for k := 0; k < n; k++ {
		var v []float64
		for i := k; i < len(draws); i += n {
			if !math.IsNaN(draws[i]) {
				v = append(v, draws[i])
			}
		}
		out.Failed = out.Draws - len(v)
		s := MCStep{Linear: math.Sqrt(r.Full.Cov[k*(n+1)])}
		s.Mean, s.U = meanSD(v)
		sorted := slices.Clone(v)
		slices.Sort(sorted)
		s.Low, s.High = Shortest(sorted, 0.95)
		s.Differs = math.Abs(s.U-s.Linear) > 0.1*s.Linear
		if keep {
			s.Draws = v
		}
		out.Steps = append(out.Steps, s)
	}
}

// Shortest returns the ends of the shortest interval that holds the share p of
// the sorted draws (JCGM 101, 5.3.4 and 7.7).
func Shortest(sorted []float64, p float64) (low, high float64) {
	m := len(sorted)
	if m == 0 {
		return math.NaN(), math.NaN()
	}
	k := min(int(p*float64(m)+0.5), m-1)
	best := math.Inf(1)
	for i := 0; i+k < m; i++ {
		if d := sorted[i+k] - sorted[i]; d < best {
			best, low, high = d, sorted[i], sorted[i+k]
		}
	}
	return low, high
}

// meanSD is the two-pass mean and standard deviation.
func meanSD(v []float64) (mean, sd float64) {
	n := float64(len(v))
	for _, x := range v {
		mean += x / n
	}
	for _, x := range v {
		sd += (x - mean) * (x - mean)
	}
	return mean, math.Sqrt(sd / (n - 1))
}

// settled reports whether, over blocks of 500 draws, twice the standard error of u
// is below half a unit of its second digit for every pKa.
func settled(draws []float64, n int) bool {
	const size = 500
	blocks := len(draws) / n / size
	if blocks < 4 {
		return false
	}
	for k := 0; k < n; k++ {
		us := make([]float64, blocks)
		for b := range us {
			v := make([]float64, 0, size)
			for i := b * size; i < (b+1)*size; i++ {
				if x := draws[i*n+k]; !math.IsNaN(x) {
					v = append(v, x)
				}
			}
			_, us[b] = meanSD(v)
		}
		u, s := meanSD(us)
		digit := math.Pow(10, math.Floor(math.Log10(u))-1)
		if !(2*s/math.Sqrt(float64(blocks)) <= digit/2) {
			return false
		}
	}
	return true
}
