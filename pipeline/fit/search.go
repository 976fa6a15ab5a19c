package fit

import (
	"math"
	"slices"
)

// A candidate is a start with the plain sum of squares it gives.
type candidate struct {
	p   [maxSteps]float64
	rss float64
}

// limit is the number of iterations per descent.
func (o Options) limit() int {
	if o.MaxIterations > 0 {
		return o.MaxIterations
	}
	return 200
}

// starts lists starting values, best first, from a coarse grid of pKa over the
// ladder and one unit beyond, keeping only those better than their neighbours.
func (s *Solver) starts(p *Problem) []candidate {
	c := &s.c
	if p.Start != nil {
		var x candidate
		copy(x.p[:], p.Start)
		return []candidate{x}
	}
	lo, hi := slices.Min(p.PH)-1, slices.Max(p.PH)+1
	step := [...]float64{0.25, 0.5, 0.8, 1.1}[c.n-1]
	k := int(math.Ceil((hi-lo)/step)) + 1
	k = min(k, [...]int{80, 40, 16, 12}[c.n-1])
	grid := make([]float64, k)
	for i := range grid {
		grid[i] = lo + (hi-lo)*float64(i)/float64(k-1)
	}
	var all []candidate
	var idx [maxSteps]int
	var visit func(level, from int)
	visit = func(level, from int) {
		if level == c.n {
			var x candidate
			for j := 0; j < c.n; j++ {
				x.p[j] = grid[idx[j]]
			}
			all = append(all, s.try(x))
			return
		}
		for i := from; i < k; i++ {
			idx[level] = i
			visit(level+1, i+1)
		}
	}
	visit(0, 0)
	slices.SortFunc(all, func(a, b candidate) int {
		switch {
		case a.rss < b.rss:
			return -1
		case a.rss > b.rss:
			return 1
		}
		return 0
	})
	return apart(all, c.n, 1.5*step, 3)
}

// try evaluates the plain sum of squares at x.
func (s *Solver) try(x candidate) candidate {
	c := &s.c
	copy(c.now.p, x.p[:c.n])
	if c.fixed {
		c.now.p[c.n] = 0
	}
	c.evaluate(&c.now, false)
	if c.fixed { // the amount is linear: take its best value
		var yy, xy float64
		for i := 0; i < c.m*c.q; i++ {
			yy += c.now.dk[i] * c.now.dk[i]
			xy += c.now.dk[i] * (c.now.c[i] + c.now.dk[i])
		}
		if xy > 0 && yy > 0 {
			c.now.p[c.n] = math.Log(xy / yy)
			c.evaluate(&c.now, false)
		}
	}
	x.rss = c.now.rss
	return x
}

// apart keeps up to most candidates that differ by more than gap somewhere.
func apart(all []candidate, n int, gap float64, most int) []candidate {
	var out []candidate
	for _, x := range all {
		near := false
		for _, y := range out {
			d := 0.0
			for j := 0; j < n; j++ {
				d = math.Max(d, math.Abs(x.p[j]-y.p[j]))
			}
			near = near || d <= gap
		}
		if !near {
			out = append(out, x)
		}
		if len(out) == most {
			break
		}
	}
	return out
}

// locate finds the plain solution (no nuisance) from the best starts and leaves
// it in c.now and in s.one. It returns the distinct minima, best first.
func (s *Solver) locate(p *Problem, opt Options, r *Result, rough bool) []candidate {
	c := &s.c
	list := s.starts(p)
	var found []candidate
	c.rough = rough
	for _, x := range list {
		s.try(x)
		st, it := c.descend(opt.limit())
		if r != nil {
			r.Iterations += it
			r.Starts++
		}
		if st == Unusable {
			continue
		}
		y := candidate{rss: c.now.rss}
		copy(y.p[:], c.now.p[:c.n])
		found = append(found, y)
	}
	slices.SortStableFunc(found, func(a, b candidate) int {
		switch {
		case a.rss < b.rss:
			return -1
		case a.rss > b.rss:
			return 1
		}
		return 0
	})
	if len(found) == 0 {
		found = list[:1]
	}
	c.rough = false
	found = apart(found, c.n, 0.02, 3)
	if len(list) > 1 {
		c.now.zero()
		s.try(found[0])
	}
	s.remember()
	return found
}

// search makes both estimates and, unless bare, what describes them.
func (s *Solver) search(p *Problem, shared []Shared, opt Options, r *Result) {
	c := &s.c
	c.plain(p)
	found := s.locate(p, opt, r, true)
	r.Status = s.own(found, opt, r)
	if c.now.rss <= 1e-12*c.total && !c.fixed {
		// The residual is a small difference of large traces: take the full matrix.
		c.full, r.FullMatrix = true, true
		c.shape(c.np, 0)
		s.restart()
		st, it := c.descend(opt.limit())
		r.Status = st
		r.Iterations += it
		s.remember()
	}
	if !s.write(p, shared, opt, r, &r.Own) {
		return
	}
	if !opt.Bare {
		s.apparentSlope(opt, r)
	}
	if opt.Bare && !weighty(shared) {
		r.Full.copyFrom(&r.Own) // no shared reading error: both weightings are one
	} else {
		c.equip(shared)
		s.restart()
		c.lambda = 0
		st, it := c.descend(opt.limit())
		r.Iterations += it
		if st != Converged {
			r.Status = st
		}
		if !s.write(p, shared, opt, r, &r.Full) {
			return
		}
	}
	if opt.Bare {
		if p.NonNegative && !c.fixed {
			s.constrain(p, shared, opt, r)
		}
		return
	}
	r.Residual = make([]float64, c.m*c.w)
	r.Full.RMS = s.rms(p, opt, r, &r.Full, r.Residual)
	c.spectra(p, r)
	c.shares(r)
	c.components(opt, r)
	if r.Status == Converged {
		s.leaveOneOut(shared, opt, r)
	}
	s.doubt(opt, r)
	if p.NonNegative && !c.fixed && r.Status == Converged {
		s.constrain(p, shared, opt, r)
	}
}

// write fills est from the state of the core; false: the constants are not fixed.
func (s *Solver) write(p *Problem, shared []Shared, opt Options, r *Result, est *Estimate) bool {
	c := &s.c
	if c.frozen { // derivatives by pH were not needed so far
		c.frozen = false
		c.evaluate(&c.now, true)
	}
	c.influences(&s.inf)
	r.Condition = s.inf.cond
	if !s.inf.ok {
		r.Status = Undetermined
		return false
	}
	c.fill(p, shared, &s.inf, est)
	c.libraryRow(p, &s.inf, est)
	est.RMS = s.rms(p, opt, r, est, nil)
	return true
}

// weighty reports whether some shared error moves readings.
func weighty(shared []Shared) bool {
	for i := range shared {
		if shared[i].S != nil && shared[i].U > 0 {
			return true
		}
	}
	return false
}

// copyFrom makes e a deep copy of x in the memory that e has.
func (e *Estimate) copyFrom(x *Estimate) {
	e.PKa, e.Cov, e.CovOwn = append(e.PKa[:0], x.PKa...), append(e.Cov[:0], x.Cov...), append(e.CovOwn[:0], x.CovOwn...)
	e.Gain, e.Eta, e.Kappa = append(e.Gain[:0], x.Gain...), append(e.Eta[:0], x.Eta...), append(e.Kappa[:0], x.Kappa...)
	e.Baseline, e.Components = append(e.Baseline[:0], x.Baseline...), append(e.Components[:0], x.Components...)
	e.Objective, e.RMS = x.Objective, x.RMS
}

// own makes the own-weighted estimate from every distinct plain minimum, so
// that a minimum that only reading errors made look best does not win.
func (s *Solver) own(found []candidate, opt Options, r *Result) Status {
	c := &s.c
	status, best := NotRun, math.Inf(1)
	free := c.nuisance()
	for i, x := range found {
		if i > 0 && !free {
			break
		}
		c.equip(nil)
		c.frozen = !free
		c.now.zero()
		s.try(x)
		st, it := c.descend(opt.limit())
		r.Iterations += it
		if c.now.phi < best {
			best, status = c.now.phi, st
			s.remember()
		}
	}
	if len(found) > 1 && free {
		c.now.zero()
		s.restart()
		c.evaluate(&c.now, true)
	}
	return status
}

// rms is the root mean square residual in absorbance; the bare fit takes it
// from the weighted sum of squares.
func (s *Solver) rms(p *Problem, opt Options, r *Result, e *Estimate, out []float64) float64 {
	if opt.Bare {
		return r.NoiseSD * math.Sqrt(math.Max(s.c.now.rss, 0)/float64(s.c.m*s.c.w))
	}
	return s.c.residual(p, e.Baseline, out)
}

// doubt turns a formally converged fit into Undetermined where the data do not
// fix the constants, and says why.
func (s *Solver) doubt(opt Options, r *Result) {
	c := &s.c
	if r.Status != Converged || c.fixed {
		return
	}
	n := c.n
	rank := min(c.w, c.m)
	if c.base {
		rank = min(c.w-1, c.m)
	}
	if n == 1 && rank >= 2 && r.Components < 2 && len(r.Singular) >= 2 {
		r.Status = Undetermined
		r.Notes = append(r.Notes, "No colour change stands out from the noise in this pH range.")
		return
	}
	if n >= 2 && rank > n && r.Components < n+1 {
		o := s.overlap(opt, &r.Full)
		if o.High-o.Low > 0.3 || o.HighAny || o.LowAny {
			r.Status, r.Overlap = Undetermined, o
			r.Notes = append(r.Notes, o.Meaning)
		}
		return
	}
	for k := 0; k < n; k++ {
		if !(r.Full.CovOwn[k*(n+1)] < 1) {
			r.Status = Undetermined
			r.Notes = append(r.Notes, "The solutions do not reach far enough to fix every pKa.")
			return
		}
	}
}
