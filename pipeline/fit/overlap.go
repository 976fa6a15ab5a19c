package fit

import (
	"fmt"
	"math"
	"slices"
)

// An Overlap describes two neighbouring steps that the data do not separate:
// the spectra have fewer independent shapes than forms. Then the mean of the
// two is reported with an interval for their difference, not the two values.
type Overlap struct {
	Pair    int     `json:"pair"`     // index of the first of the two constants
	Mean    float64 `json:"mean"`     // mean of the two pKa at the optimum
	UMean   float64 `json:"u_mean"`   // standard uncertainty, widened to the range over the interval of the difference
	Delta   float64 `json:"delta"`    // pKa_(i+1) - pKa_i at the optimum
	Low     float64 `json:"low"`      // 95 % profile-likelihood interval of the difference
	High    float64 `json:"high"`     //
	LowAny  bool    `json:"low_any"`  // no lower end was found within the searched range
	HighAny bool    `json:"high_any"` // no upper end
	Meaning string  `json:"meaning"`  // sentence
	Single  float64 `json:"one_step"` // pKa of the one-step fit of the same set, which may describe it as well; 0: not fitted
	USingle float64 `json:"u_one_step"`
}

// chi95 is the 0.95 quantile of chi-square with one degree of freedom.
const chi95 = 3.841458820694124

// deltaRange is how far from the optimum the difference is searched.
const deltaRange = 6

// overlap profiles the difference of the pair that is determined worst. c.now
// holds the solution and r its covariance; both are left as found.
func (s *Solver) overlap(opt Options, est *Estimate) *Overlap {
	c := &s.c
	n := c.n
	pair, worst := 0, -1.0
	for k := 0; k+1 < n; k++ {
		v := est.Cov[k*n+k] + est.Cov[(k+1)*n+k+1] - 2*est.Cov[k*n+k+1]
		if v > worst || math.IsNaN(v) {
			pair, worst = k, v
		}
	}
	var home frame
	home.copyFrom(&c.now)
	best := home.phi
	o := &Overlap{Pair: pair, Delta: home.p[pair+1] - home.p[pair], Mean: (home.p[pair+1] + home.p[pair]) / 2}
	lo, hi := o.Mean, o.Mean
	end := func(sign float64) (float64, bool) {
		at, step := o.Delta, math.Min(math.Max(math.Sqrt(math.Max(worst, 1e-12)), 1e-3), 0.1)
		inside := at
		c.now.set(home.params)
		for math.Abs(at-o.Delta) < deltaRange {
			next := at + sign*step
			phi := s.profile(opt, pair, next)
			if phi-best > chi95 {
				return s.crossing(opt, pair, inside, next, best, &lo, &hi), true
			}
			m := (c.now.p[pair] + c.now.p[pair+1]) / 2
			lo, hi = math.Min(lo, m), math.Max(hi, m)
			at, inside = next, next
			step = math.Min(step*1.6, 0.4)
		}
		return at, false
	}
	var found bool
	o.Low, found = end(-1)
	o.LowAny = !found
	o.High, found = end(1)
	o.HighAny = !found
	c.pair = -1
	c.now.set(home.params)
	c.evaluate(&c.now, true)
	vm := (est.Cov[pair*n+pair] + est.Cov[(pair+1)*n+pair+1] + 2*est.Cov[pair*n+pair+1]) / 4
	o.UMean = math.Max(math.Sqrt(vm), (hi-lo)/3.92)
	if math.IsNaN(vm) || o.LowAny || o.HighAny {
		o.UMean = math.Max((hi-lo)/3.92, 0)
	}
	return o
}

// describe adds the one-step fit and the sentence.
func (o *Overlap) describe(p *Problem, opt Options) {
	few, most := fmt.Sprintf("%.2f", o.Low), fmt.Sprintf("%.2f", o.High)
	if o.LowAny {
		few = "less than " + few
	}
	if o.HighAny {
		most = "more than " + most
	}
	o.Meaning = fmt.Sprintf("pKa %d and pKa %d cannot be told apart: their mean is %.3f (u %.3f), their difference anything from %s to %s.",
		o.Pair+1, o.Pair+2, o.Mean, o.UMean, few, most)
	if p.Steps != 2 {
		return
	}
	q := *p
	q.Steps, q.Start = 1, nil
	q.Shared = slices.Clone(p.Shared)
	for i := range q.Shared {
		q.Shared[i].Direct = nil // stated per constant of two
	}
	opt.Bare = true
	if r, err := Solve(q, opt); err == nil && r.Status == Converged {
		o.Single, o.USingle = r.Full.PKa[0], math.Sqrt(r.Full.Cov[0])
		o.Meaning += fmt.Sprintf(" One step at pKa %.3f (u %.3f) is the same set read as a single proton.", o.Single, o.USingle)
	}
}

// profile minimises phi with the difference of the pair held, from c.now.
func (s *Solver) profile(opt Options, pair int, delta float64) float64 {
	c := &s.c
	mid := (c.now.p[pair] + c.now.p[pair+1]) / 2
	c.now.p[pair], c.now.p[pair+1] = mid-delta/2, mid+delta/2
	c.pair = pair
	c.descend(opt.limit())
	c.pair = -1
	return c.now.phi
}

// crossing bisects for the difference at which phi is chi95 above best.
func (s *Solver) crossing(opt Options, pair int, in, out, best float64, lo, hi *float64) float64 {
	for range 30 {
		mid := (in + out) / 2
		if math.Abs(out-in) < 1e-4 {
			break
		}
		if s.profile(opt, pair, mid)-best > chi95 {
			out = mid
			continue
		}
		in = mid
		m := (s.c.now.p[pair] + s.c.now.p[pair+1]) / 2
		*lo, *hi = math.Min(*lo, m), math.Max(*hi, m)
	}
	return (in + out) / 2
}

// copyFrom copies the parameters and phi.
func (f *frame) copyFrom(g *frame) {
	f.p = append(f.p[:0], g.p...)
	f.a = append(f.a[:0], g.a...)
	f.k = append(f.k[:0], g.k...)
	f.b = append(f.b[:0], g.b...)
	f.phi = g.phi
}
