package fit

import (
	"fmt"
	"math"
)

// Options say how to fit. The zero value is right for daily work.
type Options struct {
	MaxIterations int     // per descent; 0: 500
	Effective     float64 // when not 0, in place of Problem.Effective
	Bare          bool    // only the two estimates with their covariances: no spectra, singular values, slope or leave-one-out
}

// A Solver fits problems one after the other in the same memory. It is not
// safe for concurrent use; the zero value is ready.
type Solver struct {
	red  reduced
	c    core
	inf  influence
	sig  []float64
	one  params // the solution to come back to
	scan scan
	list []candidate // starts, then distinct minima
	all  []candidate
}

// Solve fits one set. The error is not nil only when p cannot be fitted at all
// (wrapping ErrProblem); how the fit ended is in Result.Status.
func Solve(p Problem, opt Options) (*Result, error) {
	var s Solver
	return s.Solve(p, opt)
}

// Solve is the method form, which reuses the memory of earlier fits.
func (s *Solver) Solve(p Problem, opt Options) (*Result, error) {
	r := &Result{}
	return r, s.Refit(&p, opt, r)
}

// Refit is Solve into an existing Result, whose slices are reused where they
// are long enough: a bare fit then allocates nothing.
func (s *Solver) Refit(p *Problem, opt Options, r *Result) error {
	r.reset(p)
	opt.Effective = p.effective(opt)
	if err := check(p); err != nil {
		return err
	}
	shared, err := merge(p)
	if err != nil {
		return err
	}
	if err := s.prepare(p, opt); err != nil {
		return err
	}
	r.NoiseSD = s.noiseSD()
	r.Status = NotRun
	s.search(p, shared, opt, r)
	if r.Status != Converged {
		r.Notes = append(r.Notes, fmt.Sprintf("The fit ended as %v after %d iterations.", r.Status, r.Iterations))
	}
	return nil
}

// effective is the number of independent wavelengths to reckon with; 0: all.
func (p *Problem) effective(opt Options) float64 {
	if opt.Effective > 0 {
		return opt.Effective
	}
	return p.Effective
}

// reset empties the result; it is unusable until the fit says otherwise.
func (r *Result) reset(p *Problem) {
	*r = Result{Status: Unusable, Steps: p.Steps, Free: p.Library == nil, Own: r.Own, Full: r.Full,
		Slope: math.NaN(), SlopeSD: math.NaN()}
	for _, e := range [2]*Estimate{&r.Own, &r.Full} {
		*e = Estimate{PKa: e.PKa[:0], Cov: e.Cov[:0], CovOwn: e.CovOwn[:0], Gain: e.Gain[:0], Eta: e.Eta[:0],
			Kappa: e.Kappa[:0], Baseline: e.Baseline[:0], Components: e.Components[:0]}
	}
}

// String names the status in words.
func (s Status) String() string {
	switch s {
	case NotRun:
		return "not run"
	case Converged:
		return "converged"
	case HitLimit:
		return "iterations used up"
	case Undetermined:
		return "undetermined"
	case Unusable:
		return "unusable"
	}
	return fmt.Sprintf("status %d", int(s))
}

// prepare weights and reduces the data and sizes the buffers.
func (s *Solver) prepare(p *Problem, opt Options) error {
	s.red.load(p, p.effective(opt))
	c := &s.c
	c.reduced = &s.red
	c.n, c.n1, c.slope, c.full, c.fixed = p.Steps, p.Steps+1, false, false, p.Library != nil
	s.sig = grow(s.sig, len(p.PH))
	clear(s.sig)
	copy(s.sig, p.SigmaPH)
	c.ph, c.sig, c.ukap = p.PH, s.sig, p.UAmount
	if s.red.total == 0 {
		return bad("all absorbances are zero")
	}
	return s.settleNoise(p, opt)
}

// nuisance reports whether readings or amounts or offsets are uncertain.
func (c *core) nuisance() bool {
	if c.ukap > 0 || c.base {
		return true
	}
	for _, v := range c.sig {
		if v > 0 {
			return true
		}
	}
	return false
}

// settleNoise estimates the absorbance noise when none is stated: from the
// residual of the plain fit where nothing else is uncertain, else from what is
// left beyond n+1 singular values, which reading errors cannot reach.
func (s *Solver) settleNoise(p *Problem, opt Options) error {
	c := &s.c
	if p.NoiseWave != nil {
		return nil
	}
	inflate := c.inv[0]
	sigma, ok := 0.0, false
	if c.nuisance() {
		sigma, ok = s.red.rankNoise(c.n1)
		sigma *= 1 / math.Min(inflate, 1)
	}
	if !ok {
		c.plain(p)
		s.locate(p, opt, nil, false)
		free := float64((c.m-c.n1)*c.w - c.n)
		if c.fixed {
			free = float64(c.m*c.w - c.n - 1)
		}
		if free < 1 {
			free = 1
		}
		rss := c.now.rss
		if rss <= 1e-12*c.total && !c.fixed {
			c.full = true
			c.plain(p)
			s.restart()
			c.evaluate(&c.now, true)
			rss = c.now.rss
			c.full = false
		}
		sigma = math.Sqrt(math.Max(rss, 0) / free)
	}
	floor := 1e-12 * math.Sqrt(c.total/float64(c.m*c.w))
	s.red.scale(math.Max(sigma, floor), p.UBaseline)
	return nil
}

// noiseSD is the root mean square absorbance noise as used.
func (s *Solver) noiseSD() float64 {
	t := 0.0
	for _, v := range s.red.inv {
		t += 1 / (v * v)
	}
	return math.Sqrt(t / float64(s.red.w))
}

// plain makes the core ready for a fit without nuisance parameters.
func (c *core) plain(p *Problem) {
	np := c.n
	if c.fixed {
		np++
	}
	c.shape(np, 0)
	c.frozen = true
	if c.fixed {
		c.library(p)
	}
	c.now.zero()
	c.try.zero()
}

// equip switches nuisance parameters on, with the shared errors or without.
func (c *core) equip(shared []Shared) {
	var p [maxSteps + 1]float64
	copy(p[:], c.now.p)
	c.shape(c.np, len(shared))
	c.frozen = false
	c.shift = grow(c.shift, c.m*len(shared))
	for k, sh := range shared {
		for i := 0; i < c.m; i++ {
			c.shift[i*len(shared)+k] = 0
			if sh.S != nil {
				c.shift[i*len(shared)+k] = sh.S[i] * sh.U
			}
		}
	}
	copy(c.now.p, p[:])
}

// remember and restart keep a solution over a change of shape.
func (s *Solver) remember() {
	f := &s.c.now
	s.one.p = append(s.one.p[:0], f.p...)
	s.one.a = append(s.one.a[:0], f.a...)
	s.one.k = append(s.one.k[:0], f.k...)
}

func (s *Solver) restart() {
	f := &s.c.now
	f.zero()
	copy(f.p, s.one.p)
	copy(f.a, s.one.a)
	copy(f.k, s.one.k)
}
