package drift

import (
	"math"
)

// maxExtra is how many disturbances the covariance can hold: those explained,
// and the usual differences between calibrations.
const (
	maxExtra  = 64
	maxCauses = 8
)

// sums are what a hypothesis has gathered over its nights: products with y,
// with the explained disturbances, and with itself.
type sums struct {
	p [2]float64   // x' V^-1 y
	e [][2]float64 // x' z
	q [3]float64   // sum s^2 j' W j: 00, 01, 11
	g [][]float64  // per cell of the scope: columns*k, sum s L' W j
	n int          // observations with s > 0
}

func newSums(l *look, s *scope, columns int) *sums {
	a := &sums{g: make([][]float64, len(s.cells)), e: make([][2]float64, len(l.extra))}
	total := 0
	for _, i := range s.cells {
		total += columns * l.cells[i].c.k
	}
	buf := make([]float64, total)
	for n, i := range s.cells {
		w := columns * l.cells[i].c.k
		a.g[n], buf = buf[:w:w], buf[w:]
	}
	return a
}

func (a *sums) clear() {
	for _, x := range a.g {
		clear(x)
	}
	clear(a.e)
	*a = sums{g: a.g, e: a.e}
}

func (a *sums) copyFrom(b *sums) {
	g, e := a.g, a.e
	for i := range g {
		copy(g[i], b.g[i])
	}
	copy(e, b.e)
	*a = *b
	a.g, a.e = g, e
}

// addLinear adds the sums of b that are linear in the shape.
func (a *sums) addLinear(b *sums, extra int) {
	a.p[0] += b.p[0]
	a.p[1] += b.p[1]
	for k := range extra {
		a.e[k][0] += b.e[k][0]
		a.e[k][1] += b.e[k][1]
	}
	for i := range a.g {
		x := a.g[i]
		for j, v := range b.g[i] {
			x[j] += v
		}
	}
}

// A hypothesis is one cause on one resource with one onset and shape, weighed.
type hypothesis struct {
	lnB   float64
	theta [2]float64
	cov   [3]float64
}

// weigh turns sums into a Bayes factor against no change; the prior of theta
// has standard deviation tau.
func (a *sums) weigh(columns, extra int, tau float64, oneSided bool) hypothesis {
	q := a.q
	for _, g := range a.g {
		k := len(g) / columns
		for i := range k {
			q[0] -= g[i] * g[i]
			if columns > 1 {
				q[1] -= g[i] * g[k+i]
				q[2] -= g[k+i] * g[k+i]
			}
		}
	}
	for k := range extra {
		e := a.e[k]
		q[0] -= e[0] * e[0]
		if columns > 1 {
			q[1] -= e[0] * e[1]
			q[2] -= e[1] * e[1]
		}
	}
	r := 1 / (tau * tau)
	if columns == 1 {
		v := 1 / (math.Max(0, q[0]) + r)
		h := hypothesis{theta: [2]float64{v * a.p[0]}, cov: [3]float64{v}}
		h.lnB = 0.5*math.Log(v*r) + 0.5*a.p[0]*a.p[0]*v
		if oneSided {
			h.lnB += logTwicePhi(h.theta[0] / math.Sqrt(v))
		}
		return h
	}
	a0, b0, d0 := math.Max(0, q[0])+r, q[1], math.Max(0, q[2])+r
	det := a0*d0 - b0*b0
	if det <= 0 {
		return hypothesis{lnB: math.Inf(-1)}
	}
	h := hypothesis{cov: [3]float64{d0 / det, -b0 / det, a0 / det}}
	h.theta[0] = h.cov[0]*a.p[0] + h.cov[1]*a.p[1]
	h.theta[1] = h.cov[1]*a.p[0] + h.cov[2]*a.p[1]
	h.lnB = 0.5*math.Log(r*r/det) + 0.5*(a.p[0]*h.theta[0]+a.p[1]*h.theta[1])
	return h
}

// logTwicePhi is ln(2 Phi(x)), also for very negative x.
func logTwicePhi(x float64) float64 {
	if x > -30 {
		return math.Log(math.Erfc(-x / math.Sqrt2))
	}
	return -x*x/2 - math.Log(-x*math.Sqrt(math.Pi/2))
}

// An outcome is a scanned scope: the evidence of every onset and shape.
type outcome struct {
	s      *scope
	shapes []Shape
	lnB    [][]float64 // per shape, per onset night; -Inf where impossible
	best   hypothesis
	shape  Shape
	onset  int
	any    bool
	sum    float64 // ln of the weighted sum over onsets and shapes
}

// score is what the group score takes the largest of: the best single
// hypothesis or the sum over onsets. The sum sees small steps sooner, in which no onset stands out;
// the best one sees large steps sooner.
func (o *outcome) score() float64 { return math.Max(o.best.lnB, o.sum) }

// Weights of the sum over onsets, ln: found by comparing delays with tuned
// cumulative sums.
const (
	stepWeight  = -1.0
	shapeWeight = -2.0
)

// scanner walks the onsets of one scope backwards through the nights.
type scanner struct {
	l       *look
	s       *scope
	columns int
	extra   int
	at      [][]entry // observations by night
	step    *sums     // s = 1 since the onset
	until   *sums     // the same within the onset's own segment between ending events
	ended   bool      // an ending event lies after the onset
	ramp    *climb    // s = nights since the onset, 1 on it
	tooth   *climb    // the same within the onset's own segment between resets
	saved   *sums     // tooth as it was one night after the segment's first
	rest    *sums     // sawtooth of all later segments
	both    *sums
	segEnd  int // last night of the segment the onset is in
	restMax int // largest s in later segments
	reset   bool
}

// A climb keeps the sums of s = 1, 2, 3 ... and what is needed to move its
// onset back by a night: every s grows by one.
type climb struct {
	one, sum *sums
	mid      [3]float64 // sum s j' W j
}

func (c *climb) clear() {
	c.one.clear()
	c.sum.clear()
	c.mid = [3]float64{}
}

// grow adds one to every s; c.one already holds the new night's observations.
func (c *climb) grow(extra int) {
	c.sum.addLinear(c.one, extra)
	for i := range c.mid {
		c.sum.q[i] += 2*c.mid[i] + c.one.q[i]
		c.mid[i] += c.one.q[i]
	}
	c.sum.n = c.one.n
}

type entry struct {
	n int // index into scope.cells
	o *obs
}

// scan weighs every onset and shape of a scope; keep asks for all of them.
func (l *look) scan(s *scope, keep bool) outcome {
	tr := l.m.traits[s.trait]
	c := newScanner(l, s, tr)
	out := outcome{s: s, shapes: tr.Shapes, best: hypothesis{lnB: math.Inf(-1)}, sum: math.Inf(-1)}
	if keep {
		out.lnB = make([][]float64, len(tr.Shapes))
		for i := range out.lnB {
			out.lnB[i] = constant(l.nights, math.Inf(-1))
		}
	}
	for t := l.nights - 1; t >= 0; t-- {
		c.back(t)
		if len(c.at[t]) == 0 || (s.fixed >= 0 && t != s.fixed) {
			continue
		}
		for k, sh := range tr.Shapes {
			h, ok := c.judge(sh, t, tr)
			if !ok {
				continue
			}
			if keep {
				out.lnB[k][t] = h.lnB
			}
			weight := shapeWeight
			if sh == ShapeStep {
				weight = stepWeight
			}
			if h.lnB > out.sum-12 {
				out.sum = logAdd(out.sum, h.lnB+weight)
			}
			if h.lnB > out.best.lnB {
				out.best, out.shape, out.onset, out.any = h, sh, t, true
			}
		}
	}
	return out
}

func newScanner(l *look, s *scope, tr Trait) *scanner {
	c := &scanner{l: l, s: s, columns: tr.Columns, extra: len(l.extra), segEnd: l.nights - 1}
	fresh := func() *sums { return newSums(l, s, tr.Columns) }
	c.step = fresh()
	for _, sh := range tr.Shapes {
		switch sh {
		case ShapeUntil:
			c.until = fresh()
		case ShapeRamp:
			c.ramp = &climb{one: c.step, sum: fresh()}
		case ShapeSawtooth:
			c.tooth = &climb{one: fresh(), sum: fresh()}
			c.saved, c.rest, c.both = fresh(), fresh(), fresh()
		}
	}
	c.at = make([][]entry, l.nights)
	for n, i := range s.cells {
		used, obs := s.nights[n], l.cells[i].obs
		for k := range obs {
			if used[obs[k].night] {
				c.at[obs[k].night] = append(c.at[obs[k].night], entry{n, &obs[k]})
			}
		}
	}
	return c
}

// back moves the onset one night earlier, to night t.
func (c *scanner) back(t int) {
	next := t + 1
	if c.until != nil && next < c.l.nights && c.s.ended[next] {
		c.until.clear()
		c.ended = true
	}
	if c.tooth != nil {
		if next < c.l.nights && c.s.reset[next] {
			c.rest.addLinear(c.saved, c.extra)
			for i, v := range c.saved.q {
				c.rest.q[i] += v
			}
			c.restMax = max(c.restMax, c.segEnd-next)
			c.segEnd, c.reset = t, true
			c.tooth.clear()
		}
		if c.s.reset[t] { // here s is the number of nights since the reset, 0 on its night
			c.saved.copyFrom(c.tooth.sum)
		}
	}
	for _, e := range c.at[t] {
		c.add(c.step, e)
		if c.until != nil {
			c.add(c.until, e)
		}
		if c.tooth != nil {
			c.add(c.tooth.one, e)
		}
	}
	if c.ramp != nil {
		c.ramp.grow(c.extra)
	}
	if c.tooth != nil {
		c.tooth.grow(c.extra)
	}
}

// judge weighs one shape with its onset on night t; false where the shape
// is the same as a simpler one.
func (c *scanner) judge(sh Shape, t int, tr Trait) (hypothesis, bool) {
	tau := c.l.m.rules.Tau
	last := c.l.nights - 1
	switch sh {
	case ShapeStep:
		return c.step.weigh(c.columns, c.extra, tau, tr.OneSided), true
	case ShapeRamp:
		if t == last {
			return hypothesis{}, false
		}
		return c.ramp.sum.weigh(c.columns, c.extra, tau/rampLength(last-t+1), tr.OneSided), true
	case ShapeUntil:
		if !c.ended || c.until.n == 0 {
			return hypothesis{}, false
		}
		return c.until.weigh(c.columns, c.extra, tau, tr.OneSided), true
	case ShapeSawtooth:
		if !c.reset || c.restMax == 0 {
			return hypothesis{}, false
		}
		c.both.copyFrom(c.tooth.sum)
		c.both.addLinear(c.rest, c.extra)
		for i, v := range c.rest.q {
			c.both.q[i] += v
		}
		return c.both.weigh(c.columns, c.extra, tau/rampLength(max(c.segEnd-t+1, c.restMax)), tr.OneSided), true
	}
	return hypothesis{}, false
}

// rampLength is the number of nights in which a ramp is expected to reach an
// ordinary size; very short ramps are not thought to be steeper for it.
func rampLength(n int) float64 { return math.Max(3, float64(n)) }

// add includes one observation with s = 1.
func (c *scanner) add(a *sums, e entry) {
	col := c.l.m.cells[c.s.cells[e.n]].cols[c.s.trait]
	k := len(e.o.y)
	p := &e.o.key.cols[c.s.trait]
	for n := range c.columns {
		j := col[n*k : (n+1)*k]
		a.p[n] += dot(j, e.o.v)
		for x, z := range e.o.z {
			if z != nil {
				a.e[x][n] += dot(j, z)
			}
		}
	}
	for i, v := range p.q {
		a.q[i] += v
	}
	g := a.g[e.n]
	for i, v := range p.g {
		g[i] += v
	}
	a.n++
}

// course gives s for every night: what judge assumes.
func (l *look) course(s *scope, sh Shape, onset int) []float64 {
	out := make([]float64, l.nights)
	from, over := onset-1, false
	for t := onset; t < l.nights; t++ {
		switch {
		case t > onset && sh == ShapeSawtooth && s.reset[t]:
			from = t
		case t > onset && sh == ShapeUntil && s.ended[t]:
			over = true
		}
		switch {
		case over:
		case sh == ShapeRamp || sh == ShapeSawtooth:
			out[t] = float64(t - from)
		default:
			out[t] = 1
		}
	}
	return out
}
