package drift

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/mathext"
)

// modelError is the share of a predicted change by which a fingerprint itself
// may be wrong (shapes of spectra, curvature); it keeps a large and well
// explained disturbance from being called unexplained.
const modelError = 0.05

// describe puts one pass into an Explanation. found lists all passes, so that
// what belongs to another cause is not held against this one.
func (l *look) describe(r *ranked, found []*ranked) Explanation {
	top := r.list[0]
	e := Explanation{Score: r.score}
	others := l.others(r, found)
	noneAt := math.Exp(r.none - r.total)
	for i, c := range r.list {
		p := math.Exp(c.weight - r.total)
		if i >= 8 || (i > 1 && p < 0.005) {
			break
		}
		e.Candidates = append(e.Candidates, l.candidate(c, p, others, i == 0))
	}
	if noneAt >= 0.01 {
		c := Candidate{Cause: Unknown, Title: string(Unknown), Class: string(Unknown), Probability: noneAt, LnB: r.none}
		c.Since = Interval{l.night(top.interval[0]), l.night(top.onset), l.night(top.interval[1])}
		k := 0
		for k < len(e.Candidates) && e.Candidates[k].Probability >= noneAt {
			k++
		}
		e.Candidates = slices.Insert(e.Candidates, k, c)
	}
	l.classify(&e, r, noneAt)
	l.fit(&e, top, found)
	l.judge(&e, noneAt)
	e.Touched = l.touched(top, others)
	for _, i := range top.out.s.cells {
		c := l.cells[i].c
		e.Cells = append(e.Cells, c.Key)
		if c.Instrument != "" && !slices.Contains(e.Instruments, c.Instrument) {
			e.Instruments = append(e.Instruments, c.Instrument)
		}
	}
	e.Impact = l.impact(top)
	e.Retired = l.retired(top.out.s, l.m.traits[top.out.s.trait].Role)
	e.Alike = l.alike(r)
	e.Next = l.next(r)
	e.Sentence = l.sentence(top, e)
	return e
}

func (l *look) night(n int) Night { return l.h.First + Night(n) }

func (l *look) candidate(c rankedCause, p float64, others [][][]float64, leads bool) Candidate {
	tr := l.m.traits[c.out.s.trait]
	out := Candidate{
		Cause: tr.Cause, Title: tr.Title, Class: tr.Class, Resource: c.out.s.res, Shape: c.shape,
		Since: Interval{l.night(c.interval[0]), l.night(c.onset), l.night(c.interval[1])},
		LnB:   c.h.lnB, Probability: p, Theta: c.h.theta[:tr.Columns:tr.Columns],
		PerNight: c.shape == ShapeRamp || c.shape == ShapeSawtooth,
	}
	out.ThetaCov = []float64{c.h.cov[0]}
	if tr.Columns > 1 {
		out.ThetaCov = []float64{c.h.cov[0], c.h.cov[1], c.h.cov[1], c.h.cov[2]}
	}
	course := l.course(c.out.s, c.shape, c.onset)
	s, lastNight := latest(course)
	if c.shape == ShapeUntil {
		out.Until = l.night(lastNight)
	}
	out.Now = sizes(tr, c.h, s)
	if c.logged {
		out.Logged = l.loggedText(c.out.s, c.onset)
	}
	out.For, out.Against = l.evidence(c, others, leads)
	if out.Logged != "" {
		out.For = append(out.For, out.Logged)
	}
	return out
}

// latest gives the last value of a course that is not zero, and its night.
func latest(course []float64) (s float64, night int) {
	for t := len(course) - 1; t >= 0; t-- {
		if course[t] != 0 {
			return course[t], t
		}
	}
	return 0, len(course) - 1
}

// sizes states theta times s in the units of the cause.
func sizes(tr Trait, h hypothesis, s float64) []Amount {
	one := func(name string, k int, step float64, unit string) Amount {
		v := h.cov[0]
		if k == 1 {
			v = h.cov[2]
		}
		return Amount{name, h.theta[k] * s * step, math.Abs(s*step) * math.Sqrt(v), unit}
	}
	switch tr.Cause {
	case ElectrodeAged:
		return []Amount{one("offset", 0, 0.02, "pH"), one("slope", 1, -1, "%")}
	case ElectrodeAgeing:
		return []Amount{one("slopes of the calibration", 0, -2, "%"), one("potential in the mid buffer", 1, -4, "mV")}
	case ReferenceLot:
		return []Amount{one("amount", 0, 1, "%"), one("band ratios", 1, 1, "%")}
	}
	return []Amount{one(tr.Title, 0, tr.Step, tr.Unit)}
}

// others is what the other passes' causes predict, per cell, observation.
func (l *look) others(r *ranked, found []*ranked) [][][]float64 {
	out := l.blank()
	for _, f := range found {
		if f != r {
			l.addPrediction(out, f.list[0], 1)
		}
	}
	return out
}

func (l *look) blank() [][][]float64 {
	out := make([][][]float64, len(l.cells))
	for i := range l.cells {
		out[i] = make([][]float64, len(l.cells[i].obs))
		for k := range out[i] {
			out[i][k] = make([]float64, l.cells[i].c.k)
		}
	}
	return out
}

func (l *look) addPrediction(out [][][]float64, c rankedCause, f float64) {
	s := c.out.s
	tr := l.m.traits[s.trait]
	course := l.course(s, c.shape, c.onset)
	for a, i := range s.cells {
		cl := l.cells[i].c
		for k, o := range l.cells[i].obs {
			if !s.nights[a][o.night] {
				continue
			}
			for n := range tr.Columns {
				for j := range cl.k {
					out[i][k][j] += f * course[o.night] * c.h.theta[n] * cl.cols[s.trait][n*cl.k+j]
				}
			}
		}
	}
}

// impact is the upper 95 % bound of the largest change of a reference's pKa.
func (l *look) impact(c rankedCause) float64 {
	s := c.out.s
	tr := l.m.traits[s.trait]
	now, _ := latest(l.course(s, c.shape, c.onset))
	worst := 0.0
	for _, i := range s.cells {
		cl := l.cells[i].c
		j := slices.Index(cl.Characteristics, PKa)
		if j < 0 {
			continue
		}
		f := [2]float64{cl.cols[s.trait][j]}
		if tr.Columns > 1 {
			f[1] = cl.cols[s.trait][cl.k+j]
		}
		worst = math.Max(worst, upper(f, c.h.theta, c.h.cov, now))
	}
	return worst
}

// upper bounds |s f'theta| with 95 %.
func upper(f, theta [2]float64, cov [3]float64, s float64) float64 {
	mean := f[0]*theta[0] + f[1]*theta[1]
	v := f[0]*f[0]*cov[0] + 2*f[0]*f[1]*cov[1] + f[1]*f[1]*cov[2]
	return math.Abs(s) * (math.Abs(mean) + 1.645*math.Sqrt(math.Max(0, v)))
}

// classify sums the probability of the winner's class.
func (l *look) classify(e *Explanation, r *ranked, none float64) {
	top := r.list[0]
	tr := l.m.traits[top.out.s.trait]
	e.Class = tr.Class
	for _, c := range r.list {
		if l.sameClass(top, c) {
			e.ClassProbability += math.Exp(c.weight - r.total)
		}
	}
}

// sameClass reports whether two causes are one to a person: the same class
// acting on some of the same cells, or sizes of the same electrode.
func (l *look) sameClass(a, b rankedCause) bool {
	ta, tb := l.m.traits[a.out.s.trait], l.m.traits[b.out.s.trait]
	if electrodeSize(ta.Cause) && electrodeSize(tb.Cause) && a.out.s.res == b.out.s.res {
		return true
	}
	if ta.Class != tb.Class {
		return false
	}
	for _, i := range a.out.s.cells {
		if slices.Contains(b.out.s.cells, i) {
			return true
		}
	}
	return false
}

func electrodeSize(c Cause) bool {
	return c == ElectrodeAged || c == ElectrodeOffset || c == ElectrodeSlope
}

// judge says how far the explanation is to be believed.
func (l *look) judge(e *Explanation, none float64) {
	first := e.Candidates[0]
	switch {
	case first.Cause == Unknown || (e.P < 0.01 && e.ChiSquare-float64(e.DOF) > 0.5*e.Score):
		// improbable, and what is left is a quarter or more of what was explained
		e.Finding = NoneKnown
	case first.Probability >= l.m.rules.SayAt:
		e.Finding = Named
	case e.ClassProbability >= l.m.rules.SayAt:
		e.Finding = ClassOnly
	default:
		e.Finding = CannotTell
	}
}

// fit tests what all found causes together leave since the onset, in the cells
// the first of them acts on.
func (l *look) fit(e *Explanation, top rankedCause, found []*ranked) {
	pred := l.blank()
	for _, f := range found {
		l.addPrediction(pred, f.list[0], 1)
	}
	free := l.m.traits[top.out.s.trait].Columns
	type odd struct {
		z    float64
		text string
	}
	var odds []odd
	for _, i := range top.out.s.cells {
		s := &l.cells[i]
		x, ok := s.left(pred[i], top.onset)
		if !ok {
			continue
		}
		e.ChiSquare += x.chi
		e.DOF += len(x.idx)
		for a, j := range x.idx {
			if z := x.mean[a] / x.sd[a]; math.Abs(z) > 3 {
				odds = append(odds, odd{math.Abs(z), fmt.Sprintf("%s: %s differs by %s from what the cause explains (%.1f standard deviations)",
					s.c.Title, s.c.Characteristics[j].Words(), signed(s.c.Characteristics[j], x.mean[a]), math.Abs(z))})
			}
		}
	}
	e.DOF = max(1, e.DOF-free)
	e.P = mathext.GammaIncRegComp(float64(e.DOF)/2, e.ChiSquare/2)
	slices.SortFunc(odds, func(a, b odd) int {
		if a.z > b.z {
			return -1
		}
		return 1
	})
	for i, o := range odds {
		if i < 5 {
			e.Disagree = append(e.Disagree, o.text)
		}
	}
}

// leftover is the mean residual of one cell since a night.
type leftover struct {
	idx  []int
	mean []float64
	sd   []float64
	chi  float64
}

// left gives the weighted mean of y - pred since the onset, its sd with the
// centre's own error and the model's, and its chi-square.
func (s *seen) left(pred [][]float64, onset int) (leftover, bool) {
	k := s.c.k
	p, before := make([]float64, k*k), make([]float64, k*k)
	u, size := make([]float64, k), make([]float64, k)
	if s.c.prior != nil {
		copy(before, s.c.prior)
	}
	for n, o := range s.obs {
		if o.night < onset {
			for j, v := range o.key.w {
				before[j] += v
			}
			continue
		}
		r := make([]float64, k)
		for j := range r {
			if o.have[j] {
				r[j] = o.y[j] - pred[n][j]
				size[j] = math.Max(size[j], math.Abs(pred[n][j]))
			}
		}
		for j, v := range o.key.w {
			p[j] += v
		}
		for j, v := range times(o.key.w, r, k) {
			u[j] += v
		}
	}
	var x leftover
	for j := range k {
		if p[j*k+j] > 0 {
			x.idx = append(x.idx, j)
		}
	}
	n := len(x.idx)
	if n == 0 {
		return x, false
	}
	inv, ok := inverse(picked(p, k, x.idx), n)
	if !ok {
		return x, false
	}
	x.mean = times(inv, pickedVector(u, x.idx), n)
	cov := slices.Clone(inv)
	if s.c.prior != nil {
		if b, ok := inverse(before, k); ok {
			for a, v := range picked(b, k, x.idx) {
				cov[a] += v
			}
		}
	}
	for a, j := range x.idx {
		cov[a*n+a] += modelError * modelError * size[j] * size[j]
		x.sd = append(x.sd, math.Sqrt(cov[a*n+a]))
	}
	w, ok := inverse(cov, n)
	if !ok {
		return x, false
	}
	x.chi = dot(x.mean, times(w, x.mean, n))
	return x, true
}

func picked(a []float64, k int, idx []int) []float64 {
	n := len(idx)
	out := make([]float64, n*n)
	for r, i := range idx {
		for c, j := range idx {
			out[r*n+c] = a[i*k+j]
		}
	}
	return out
}

func pickedVector(a []float64, idx []int) []float64 {
	out := make([]float64, len(idx))
	for r, i := range idx {
		out[r] = a[i]
	}
	return out
}
