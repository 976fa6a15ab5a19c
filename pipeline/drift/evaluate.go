package drift

import (
	"math"
	"slices"
)

// Evaluate judges the last night of h: the group score, the first cause and,
// with each cause put into the covariance, further ones. It rings when a
// disturbance above the threshold is large enough to matter.
func (m *Model) Evaluate(h History) (Evaluation, error) {
	l, err := m.newLook(h)
	if err != nil {
		return Evaluation{}, err
	}
	ev := Evaluation{Night: h.Last, Hypotheses: l.hypotheses()}
	ev.Threshold = m.rules.Threshold
	if ev.Threshold == 0 {
		ev.Threshold = Threshold(ev.Hypotheses, m.tolerable())
	}
	l.standing(&ev)
	found := l.passes(&ev)
	for _, r := range found {
		e := l.describe(r, found)
		e.Minor = r.minor
		ev.Rings = ev.Rings || !e.Minor
		ev.Explanations = append(ev.Explanations, e)
	}
	return ev, nil
}

// passes finds causes one after the other, each with the earlier ones in the
// covariance. Those too small to matter do not count towards MaxCauses.
func (l *look) passes(ev *Evaluation) (found []*ranked) {
	counted := 0
	for counted < l.m.rules.MaxCauses && len(found) < 2*l.m.rules.MaxCauses && len(l.extra)+2 <= maxExtra && counted+len(found) < 2*maxCauses {
		outs, top := l.scanAll(true)
		if top < 0 {
			break
		}
		score := outs[top].score()
		if len(found) == 0 {
			ev.Score = score
		}
		if score <= ev.Threshold {
			break
		}
		r := l.rank(outs)
		first := r.list[0]
		r.minor = l.minor(first)
		if !r.minor {
			counted++
		}
		found = append(found, r)
		l.explain(first.out.s, first.shape, first.onset, first.h)
	}
	return found
}

// minor reports whether a disturbance is, at its largest, below what is worth a case.
func (l *look) minor(c rankedCause) bool {
	peak := 0.0
	for _, s := range l.course(c.out.s, c.shape, c.onset) {
		peak = math.Max(peak, s)
	}
	return peak*math.Max(math.Abs(c.h.theta[0]), math.Abs(c.h.theta[1])) < l.m.rules.Least
}

// Score gives the group score of the last night of h alone, and the number of
// hypotheses (cause x resource x shape) behind it.
func (m *Model) Score(h History) (score float64, hypotheses int, err error) {
	l, err := m.newLook(h)
	if err != nil {
		return 0, 0, err
	}
	outs, top := l.scanAll(false)
	if top < 0 {
		return 0, l.hypotheses(), nil
	}
	return outs[top].score(), l.hypotheses(), nil
}

func (l *look) hypotheses() int {
	n := 0
	for _, s := range l.scopes {
		n += len(l.m.traits[s.trait].Shapes)
	}
	return n
}

// scanAll scans every scope; top is the index of the best, -1 if none.
func (l *look) scanAll(keep bool) (outs []outcome, top int) {
	outs, top = make([]outcome, len(l.scopes)), -1
	for i := range l.scopes {
		outs[i] = l.scan(&l.scopes[i], keep)
		if outs[i].any && (top < 0 || outs[i].score() > outs[top].score()) {
			top = i
		}
	}
	return outs, top
}

// ranked is the outcome of one pass.
type ranked struct {
	score float64
	list  []rankedCause
	minor bool
	none  float64 // ln weight of "none of the known causes"
	total float64 // ln of the sum of weights
}

type rankedCause struct {
	out      *outcome
	shape    Shape
	onset    int
	h        hypothesis
	weight   float64 // ln, onsets and shapes summed with their prior odds
	interval [2]int
	logged   bool
}

// shown is how many candidates have their sizes worked out; no more are ever shown.
const shown = 16

// rank turns evidence into odds: the weight of a cause on a resource is the sum
// over onsets and shapes of Bayes factor times prior odds.
func (l *look) rank(outs []outcome) *ranked {
	r := &ranked{score: math.Inf(-1)}
	for i := range outs {
		o := &outs[i]
		if !o.any {
			continue
		}
		r.score = math.Max(r.score, o.score())
		r.list = append(r.list, l.weighOnsets(o))
	}
	slices.SortStableFunc(r.list, func(a, b rankedCause) int {
		switch {
		case a.weight > b.weight:
			return -1
		case a.weight < b.weight:
			return 1
		}
		return 0
	})
	if len(r.list) == 0 {
		return r
	}
	for i := range r.list[:min(len(r.list), shown)] {
		c := &r.list[i]
		c.h = l.again(c.out.s, c.shape, c.onset)
	}
	r.none = l.unstructured(r.list[0].onset) - math.Log(float64(l.nights))
	r.total = r.none
	for _, c := range r.list {
		r.total = logAdd(r.total, c.weight)
	}
	return r
}

// weighOnsets sums a cause's evidence over onsets and shapes, with the event
// factor, and finds the interval that holds the onset with 90 %. The best
// single hypothesis is the likeliest of them, event included.
func (l *look) weighOnsets(o *outcome) rankedCause {
	each := -math.Log(float64(l.nights * len(o.shapes)))
	event := math.Log(l.m.rules.EventFactor)
	onset := constant(l.nights, math.Inf(-1))
	c := rankedCause{out: o, weight: math.Inf(-1)}
	top := math.Inf(-1)
	for k := range o.shapes {
		for t, b := range o.lnB[k] {
			if math.IsInf(b, -1) {
				continue
			}
			v := b + each
			if o.s.logged[t] {
				v += event
			}
			if v > top {
				top, c.shape, c.onset, c.logged = v, o.shapes[k], t, o.s.logged[t]
			}
			onset[t] = logAdd(onset[t], v)
			c.weight = logAdd(c.weight, v)
		}
	}
	c.interval = credible(onset, c.weight, 0.9, c.onset)
	return c
}

// again weighs one hypothesis of a scope.
func (l *look) again(s *scope, sh Shape, onset int) hypothesis {
	tr := l.m.traits[s.trait]
	c := newScanner(l, s, tr)
	for t := l.nights - 1; t >= onset; t-- {
		c.back(t)
	}
	h, _ := c.judge(sh, onset, tr)
	return h
}

// credible finds the shortest run of nights around the best that holds the share.
func credible(ln []float64, total, share float64, best int) [2]int {
	lo, hi := best, best
	sum := math.Exp(ln[best] - total)
	for sum < share && (lo > 0 || hi < len(ln)-1) {
		left, right := -1.0, -1.0
		if lo > 0 {
			left = math.Exp(ln[lo-1] - total)
		}
		if hi < len(ln)-1 {
			right = math.Exp(ln[hi+1] - total)
		}
		if right >= left {
			hi++
			sum += right
		} else {
			lo--
			sum += left
		}
	}
	for lo < best && math.IsInf(ln[lo], -1) {
		lo++
	}
	for hi > best && math.IsInf(ln[hi], -1) {
		hi--
	}
	return [2]int{lo, hi}
}

func logAdd(a, b float64) float64 {
	if a < b {
		a, b = b, a
	}
	if math.IsInf(b, -1) {
		return a
	}
	return a + math.Log1p(math.Exp(b-a))
}

// unstructured is the evidence that, from an onset on, every characteristic of some cells has
// moved by an amount of its own (prior: three standard deviations of a set),
// averaged over which cells: each alone, each instrument's, or all.
func (l *look) unstructured(onset int) float64 {
	each := constant(len(l.cells), math.NaN())
	groups := map[string]float64{}
	all, n := 0.0, 0
	for i := range l.cells {
		b, ok := l.cells[i].anyChange(onset)
		if !ok {
			continue
		}
		each[i] = b
		all += b
		n++
		if name := l.cells[i].c.Instrument; name != "" {
			groups[name] += b
		}
	}
	if n == 0 {
		return math.Inf(-1)
	}
	options := float64(n + len(groups) + 1)
	sum := all
	for _, b := range each {
		if !math.IsNaN(b) {
			sum = logAdd(sum, b)
		}
	}
	for _, b := range groups {
		sum = logAdd(sum, b)
	}
	return sum - math.Log(options)
}

// anyChange weighs a free shift of every characteristic since onset against none.
func (s *seen) anyChange(onset int) (float64, bool) {
	k := s.c.k
	p := make([]float64, k*k)
	u := make([]float64, k)
	any := false
	for _, o := range s.obs {
		if o.night < onset {
			continue
		}
		any = true
		for j, v := range o.key.w {
			p[j] += v
		}
		for j, v := range o.v {
			u[j] += v
		}
	}
	if !any {
		return 0, false
	}
	if s.comb != nil { // the centre's error: P - P C P
		pc := multiply(p, s.comb, k)
		corr := multiply(pc, p, k)
		for j := range p {
			p[j] -= corr[j]
		}
	}
	var a = make([]float64, k*k)
	var prior []float64 // precision of the shift
	for j := range k {
		prior = append(prior, 1/(9*s.c.cov[j*k+j]))
	}
	lnDet := 0.0
	for i := range k {
		for j := range k {
			a[i*k+j] = p[i*k+j] / math.Sqrt(prior[i]*prior[j])
		}
		a[i*k+i]++
		u[i] /= math.Sqrt(prior[i])
	}
	low := lower(a, k)
	for i := range k {
		if low[i*k+i] <= 0 {
			return 0, false
		}
		lnDet += 2 * math.Log(low[i*k+i])
	}
	q := 0.0
	for i := range k { // forward substitution: |L^-1 u|^2
		x := u[i]
		for j := range i {
			x -= low[i*k+j] * u[j]
		}
		u[i] = x / low[i*k+i]
		q += u[i] * u[i]
	}
	return 0.5*q - 0.5*lnDet, true
}

func multiply(a, b []float64, k int) []float64 {
	out := make([]float64, k*k)
	for i := range k {
		for n := range k {
			x := a[i*k+n]
			if x == 0 {
				continue
			}
			for j := range k {
				out[i*k+j] += x * b[n*k+j]
			}
		}
	}
	return out
}
