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
	return 500
}

// starts lists starting values, best first, from a coarse grid of pKa over the
// ladder and one unit beyond, keeping only those better than their neighbours.
func (s *Solver) starts(p *Problem) []candidate {
	c := &s.c
	if p.Start != nil {
		var x candidate
		copy(x.p[:], p.Start)
		s.list = append(s.list[:0], x)
		return s.list
	}
	lo, hi := slices.Min(p.PH)-1, slices.Max(p.PH)+1
	step := [...]float64{0.25, 0.5, 0.8, 1.1}[c.n-1]
	k := int(math.Ceil((hi-lo)/step)) + 1
	k = max(min(k, [...]int{80, 40, 16, 12}[c.n-1]), c.n+1)
	grid := lo
	width := (hi - lo) / float64(k-1)
	if !c.fixed {
		s.scan.prepare(c, grid, width, k)
	}
	s.all = s.all[:0]
	var idx [maxSteps]int
	s.visit(&idx, 0, 0, k, grid, width)
	slices.SortFunc(s.all, byRSS)
	return apart(s.list[:0], s.all, c.n, 1.5*width, 3)
}

// byRSS orders candidates, best first.
func byRSS(a, b candidate) int {
	switch {
	case a.rss < b.rss:
		return -1
	case a.rss > b.rss:
		return 1
	}
	return 0
}

// visit tries all ascending choices of n values out of the grid of k.
func (s *Solver) visit(idx *[maxSteps]int, level, from, k int, lo, width float64) {
	c := &s.c
	if level == c.n {
		var x candidate
		for j := 0; j < c.n; j++ {
			x.p[j] = lo + width*float64(idx[j])
		}
		if c.fixed {
			x = s.try(x)
		} else {
			x.rss = s.scan.rss(c, idx[:c.n])
		}
		s.all = append(s.all, x)
		return
	}
	for i := from; i < k; i++ {
		idx[level] = i
		s.visit(idx, level+1, i+1, k, lo, width)
	}
}

// A scan ranks starts: powers of ten of (pH - grid) are tabulated, and of the
// data only the strongest signals take part, so that a try costs no exponential
// and no m x m product.
type scan struct {
	m, n1, d int
	power    []float64 // k*m: 10^(pH_i - grid_k)
	z        []float64 // m*d: strongest signals
	work     []float64 // eigenvalues, vectors and copy
	b, q, r  []float64
}

func (t *scan) prepare(c *core, lo, width float64, k int) {
	m := c.m
	t.m, t.n1 = m, c.n1
	t.d = min(c.n1+1, m)
	t.power, t.z = grow(t.power, k*m), grow(t.z, m*t.d)
	t.work = grow(t.work, m+2*m*m)
	t.b, t.q, t.r = grow(t.b, m*c.n1), grow(t.q, m*c.n1), grow(t.r, c.n1*c.n1)
	for g := range k {
		for i := range m {
			t.power[g*m+i] = math.Exp(ln10 * math.Min(math.Max(c.ph[i]-lo-width*float64(g), -70), 70))
		}
	}
	val, vec, gram := t.work[:m], t.work[m:m+m*m], t.work[m+m*m:]
	copy(gram, c.gram)
	eigenInto(val, gram, m, vec)
	for j := range t.d {
		s := math.Sqrt(math.Max(val[j], 0))
		for i := range m {
			t.z[i*t.d+j] = s * vec[i*m+j]
		}
	}
}

// rss is the part of the signals that the forms at these grid points leave.
func (t *scan) rss(c *core, idx []int) float64 {
	m, n1, d := t.m, t.n1, t.d
	for i := range m {
		var x [maxSteps + 1]float64
		x[0] = 1
		sum := 1.0
		for j, g := range idx {
			x[j+1] = x[j] * t.power[g*m+i]
			sum += x[j+1]
		}
		f := c.rung[i] / sum
		for j, v := range x[:n1] {
			t.b[i*n1+j] = v * f
		}
	}
	orthonormalise(t.q, t.r, t.b, m, n1)
	left := 0.0
	for _, v := range t.z[:m*d] {
		left += v * v
	}
	for j := range n1 {
		var s [maxSteps + 2]float64
		for i := range m {
			q := t.q[i*n1+j]
			for l, v := range t.z[i*d : i*d+d] {
				s[l] += q * v
			}
		}
		for _, v := range s[:d] {
			left -= v * v
		}
	}
	return left
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

// apart appends to out up to most candidates that differ by more than gap somewhere.
func apart(out, all []candidate, n int, gap float64, most int) []candidate {
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
func (s *Solver) locate(p *Problem, opt Options, r *Result, rough bool) ([]candidate, Status) {
	c := &s.c
	list := s.starts(p)
	found := s.all[:0]
	status := NotRun
	best := math.Inf(1)
	for _, x := range list {
		copy(c.now.p, x.p[:c.n])
		if c.fixed {
			s.try(x)
		}
		st, it := c.descend(opt.limit())
		if r != nil {
			r.Iterations += it
			r.Starts++
		}
		if c.now.rss < best && st != Unusable {
			best, status = c.now.rss, st
		}
		if st == Unusable {
			continue
		}
		y := candidate{rss: c.now.rss}
		copy(y.p[:], c.now.p[:c.n])
		found = append(found, y)
	}
	slices.SortStableFunc(found, byRSS)
	if len(found) == 0 {
		found = append(found, list[0])
	}
	c.rough = false
	several := len(list) > 1
	found = apart(s.list[:0], found, c.n, 0.02, 3)
	if several {
		c.now.zero()
		s.try(found[0])
	}
	s.remember()
	return found, status
}

// search makes both estimates and, unless bare, what describes them.
func (s *Solver) search(p *Problem, shared []Shared, opt Options, r *Result) {
	c := &s.c
	c.plain(p)
	free := c.nuisance()
	found, status := s.locate(p, opt, r, free)
	r.Status = status
	if free {
		r.Status = s.own(found, opt, r)
	}
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
	s.doubt(p, opt, r)
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
	for _, x := range found {
		c.equip(nil)
		c.now.zero()
		s.try(x)
		st, it := c.descend(opt.limit())
		r.Iterations += it
		if c.now.phi < best {
			best, status = c.now.phi, st
			s.remember()
		}
	}
	if len(found) > 1 {
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
func (s *Solver) doubt(p *Problem, opt Options, r *Result) {
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
			o.describe(p, opt)
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
