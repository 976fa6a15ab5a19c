package chart

import (
	"fmt"
	"math"
	"math/rand/v2"
)

// DesignRow is what one chart, or one group of tests that share their limits, costs in
// false alarms and how soon it sees a change.
type DesignRow struct {
	Rule      string // in words
	InControl float64
	Shifted   []RunLength // one for each shift of the design
}

// Design states the run lengths of a set of rules, in values.
type Design struct {
	FalseAlarmNights float64 // asked for: one false alarm in so many nights, all charts together
	Charts           int
	PerChart         float64 // values between false alarms that each chart is given
	Shifts           []float64
	Rows             []DesignRow
	// LeftOut are rules that cannot be kept at so low a rate, in words.
	LeftOut []string
	// AtLeast is a lower bound of the in-control run length of one chart with all its
	// rules: their rates added, as if no two ever fired together.
	AtLeast float64
}

// Lines writes the design as a plain table, one line per chart, for a terminal.
func (d Design) Lines() []string {
	head := fmt.Sprintf("%-45s %12s", "rule", "in control")
	for _, s := range d.Shifts {
		head += fmt.Sprintf(" %9s", fmt.Sprintf("%+.3g sd", s))
	}
	lines := []string{head}
	for _, r := range d.Rows {
		line := fmt.Sprintf("%-45s %12.0f", r.Rule, r.InControl)
		for _, l := range r.Shifted {
			if math.IsNaN(l.Mean) {
				line += fmt.Sprintf(" %9s", "-")
				continue
			}
			line += fmt.Sprintf(" %9.1f", l.Mean)
		}
		lines = append(lines, line)
	}
	lines = append(lines, fmt.Sprintf("All rules of one chart together: at least %.0f values between false flags.", d.AtLeast))
	if d.FalseAlarmNights > 0 {
		lines = append(lines, fmt.Sprintf("Asked for: one in %.4g nights over %s, so %.0f values for each chart.", d.FalseAlarmNights, plural(d.Charts, "chart"), d.PerChart))
	}
	for _, l := range d.LeftOut {
		lines = append(lines, "Not kept: "+l+".")
	}
	return lines
}

// designShifts are the steps, in standard deviations, that a design is stated for.
func designShifts() []float64 { return []float64{0.5, 1, 1.5, 2, 3} }

// family is a group of rules whose limits are found together.
type family struct {
	name  string
	run   func(r Rules, shift float64) RunLength
	fit   func(r Rules, want float64) Rules // sets the limits for an in-control run length
	share float64                           // share of the false alarms, in equal parts per rule
}

// families lists what is kept in r.
func families(r Rules) []family {
	var fs []family
	if near := r.Runs.nearby(); r.Individuals > 0 || near.any() {
		name, share := BeyondLimits, 1.0
		if near.any() {
			name, share = "action limits and runs in their zones", 2
			if r.Individuals == 0 {
				name, share = "runs in zones", 1
			}
		}
		fs = append(fs, family{name, func(r Rules, s float64) RunLength { return RunsRunLength(r.Individuals, r.Runs.nearby(), s, 1) }, fitZones, share})
	}
	if n := r.Runs.Inner; n > 0 {
		fs = append(fs, family{innerName(n), func(r Rules, s float64) RunLength {
			return inARow(r.Runs.Inner, between(-r.zone()-s, r.zone()-s), s)
		}, fitInner, 1})
	}
	if n := r.Runs.Outer; n > 0 {
		fs = append(fs, family{outerName(n), func(r Rules, s float64) RunLength {
			return inARow(r.Runs.Outer, below(-r.zone()-s)+below(-r.zone()+s), s)
		}, fitOuter, 1})
	}
	if r.MovingRange > 0 {
		fs = append(fs, family{MovingTooFar, func(r Rules, s float64) RunLength { return IndividualsRangeRunLength(8, r.MovingRange, s, 1) }, fitRange, 1})
	}
	if r.EWMAWeight > 0 {
		fs = append(fs, family{WeightedMean, func(r Rules, s float64) RunLength { return EWMAExactRunLength(r.EWMAWeight, r.EWMAWidth, s, 1) }, fitEWMA, 1})
	}
	if r.CusumDecision > 0 {
		fs = append(fs, family{CumulativeSum, func(r Rules, s float64) RunLength {
			return CusumRunLength(r.CusumSlack, r.CusumDecision, s, 1, r.HeadStart)
		}, fitCusum, 1})
	}
	if r.SelfStarting > 0 {
		// Its scores are those of a known baseline in control; out of control it sees
		// the least when the change comes early, and no single figure is honest.
		fs = append(fs, family{SelfStarting, func(r Rules, s float64) RunLength {
			if s != 0 {
				return RunLength{Shift: s, Mean: math.NaN(), SD: math.NaN()}
			}
			return CusumRunLength(r.selfSlack(), r.SelfStarting, 0, 1, false)
		}, fitSelf, 1})
	}
	if n := r.Runs.Monotone; n > 0 {
		fs = append(fs, family{monotoneName(n), func(r Rules, s float64) RunLength { return shifted(OrderRunLength(r.Runs.Monotone, 0), s) }, fitMonotone, 1})
	}
	if n := r.Runs.Alternating; n > 0 {
		fs = append(fs, family{alternatingName(n), func(r Rules, s float64) RunLength { return shifted(OrderRunLength(0, r.Runs.Alternating), s) }, fitAlternating, 1})
	}
	return fs
}

// nearby are the tests whose limits are found together with the action limits: those
// on a side or beyond a zone border on a side. The long counts within or beyond the
// inner border have run lengths of their own in closed form.
func (r Runs) nearby() Runs {
	r.Inner, r.Outer, r.Monotone, r.Alternating = 0, 0, 0, 0
	return r
}

// inARow is the run length until n values in a row meet a condition that each meets
// with probability p: (1-p^n)/((1-p) p^n) (Feller 1968, XIII.7).
func inARow(n int, p, shift float64) RunLength {
	pn, f := math.Pow(p, float64(n)), float64(n)
	q := 1 - p
	variance := 1/(q*q*pn*pn) - (2*f+1)/(q*pn) - p/(q*q)
	return RunLength{Shift: shift, Mean: (1 - pn) / (q * pn), SD: math.Sqrt(max(0, variance))}
}

func shifted(l RunLength, s float64) RunLength { l.Shift = s; return l }

func (r Rules) selfSlack() float64 {
	if r.CusumSlack > 0 {
		return r.CusumSlack
	}
	return 0.5
}

// Describe states the run lengths of rules as they are, for the shifts given (nil for
// steps of half to three standard deviations).
func Describe(rules Rules, shifts []float64) Design {
	if shifts == nil {
		shifts = designShifts()
	}
	d := Design{Charts: 1, Shifts: shifts}
	rate := 0.0
	for _, f := range families(rules) {
		row := DesignRow{Rule: f.name, InControl: f.run(rules, 0).Mean}
		for _, s := range shifts {
			row.Shifted = append(row.Shifted, f.run(rules, s))
		}
		rate += 1 / row.InControl
		d.Rows = append(d.Rows, row)
	}
	d.AtLeast = 1 / rate
	return d
}

// LimitsFor finds the limits with which nCharts charts, keeping the kinds of charts
// that are on in rules, raise together one false alarm in falseAlarmNights nights.
// The false alarms are divided equally among the rules of a chart, and rates are
// added: since rules often fire together, the true rate is a little lower than asked,
// never higher. Counts of run tests on sides grow as needed; the zones follow the
// action limits. What is off stays off; the impact limit stays as it is.
//
// The limits are those for a known baseline; Judge widens them where it is short.
func LimitsFor(falseAlarmNights float64, nCharts int, rules Rules) (Rules, Design, error) {
	if !(falseAlarmNights >= 2) || !finite(falseAlarmNights) || nCharts < 1 {
		return rules, Design{}, fmt.Errorf("chart limits: one false alarm in %v nights over %d charts; expected at least 2 nights and 1 chart", falseAlarmNights, nCharts)
	}
	if err := rules.Check(); err != nil {
		return rules, Design{}, err
	}
	fs := families(rules)
	if len(fs) == 0 {
		return rules, Design{}, fmt.Errorf("chart limits: no chart is kept; switch on at least one kind, for example individual limits of 3")
	}
	parts := 0.0
	for _, f := range fs {
		parts += f.share
	}
	per := falseAlarmNights * float64(nCharts)
	for _, f := range fs {
		rules = f.fit(rules, per*parts/f.share)
	}
	var left []string
	if rules.Runs.Inner >= longestRun {
		left = append(left, "values close to the centre: with limits this wide they usually are")
		rules.Runs.Inner = 0
	}
	d := Describe(rules, nil)
	d.LeftOut = left
	d.FalseAlarmNights, d.Charts, d.PerChart = falseAlarmNights, nCharts, per
	return rules, d, nil
}

// solveLimit finds the x from low to high at which the in-control run length is want;
// run must grow with x. Brackets grow from low, so that run lengths beyond double
// precision are never asked for where they can be avoided. It works on the logarithm,
// where run lengths are nearly straight, by the Illinois form of the rule of false
// position. Where the whole range falls short, high is returned.
func solveLimit(want, low, high float64, run func(x float64) float64) float64 {
	f := func(x float64) float64 {
		l := run(x)
		if !(l > 0) || math.IsInf(l, 0) {
			return math.Inf(1) // beyond double precision
		}
		return math.Log(l) - math.Log(want)
	}
	a, fa := low, f(low)
	if fa >= 0 {
		return low
	}
	step := (high - low) / 32
	b := low + step
	fb := f(b)
	for fb < 0 {
		if b >= high {
			return high
		}
		step *= 1.5
		a, fa = b, fb
		b = min(high, b+step)
		fb = f(b)
	}
	for range 200 {
		m := (a + b) / 2
		if !math.IsInf(fb, 0) {
			m = (a*fb - b*fa) / (fb - fa)
		}
		fm := f(m)
		if math.Abs(fm) < 1e-9 || math.Abs(b-a) < 1e-12 {
			return m
		}
		switch {
		case math.IsInf(fb, 0) && fm < 0:
			a, fa = m, fm
		case math.IsInf(fb, 0):
			b, fb = m, fm
		case fm*fb < 0:
			a, fa, b, fb = b, fb, m, fm
		default:
			b, fb, fa = m, fm, fa/2
		}
	}
	return b
}

func fitZones(r Rules, want float64) Rules {
	near := r.Runs.nearby()
	if !near.any() {
		// 1/want = 2 below(-c).
		r.Individuals = -quantile(0.5 / want)
		return r
	}
	// A run of n on either side comes every 2^n - 1 values; give it half the share.
	if near.OneSide > 0 {
		near.OneSide = min(longestRun, max(3, int(math.Ceil(math.Log2(2*want+1)))))
		r.Runs.OneSide = near.OneSide
	}
	r.Individuals = solveLimit(want, 1.5, 9, func(c float64) float64 { return RunsRunLength(c, near, 0, 1).Mean })
	return r
}

func fitInner(r Rules, want float64) Rules {
	p := between(-r.zone(), r.zone())
	for r.Runs.Inner = 3; r.Runs.Inner < longestRun && inARow(r.Runs.Inner, p, 0).Mean < want; r.Runs.Inner++ {
		continue
	}
	return r
}

func fitOuter(r Rules, want float64) Rules {
	p := 2 * below(-r.zone())
	for r.Runs.Outer = 3; r.Runs.Outer < longestRun && inARow(r.Runs.Outer, p, 0).Mean < want; r.Runs.Outer++ {
		continue
	}
	return r
}

func fitRange(r Rules, want float64) Rules {
	r.MovingRange = solveLimit(want, 1, 12, func(d float64) float64 { return IndividualsRangeRunLength(8, d, 0, 1).Mean })
	return r
}

func fitEWMA(r Rules, want float64) Rules {
	w := r.EWMAWeight
	fixed := solveLimit(want, 0.5, 8, func(l float64) float64 { return EWMARunLength(w, l, 0, 1).Mean })
	r.EWMAWidth = solveLimit(want, fixed-1e-9, fixed+0.7, func(l float64) float64 { return EWMAExactRunLength(w, l, 0, 1).Mean })
	return r
}

func fitCusum(r Rules, want float64) Rules {
	k := r.CusumSlack
	r.CusumDecision = solveLimit(want, 0.1, 40, func(h float64) float64 { return CusumRunLength(k, h, 0, 1, r.HeadStart).Mean })
	return r
}

func fitSelf(r Rules, want float64) Rules {
	k := r.selfSlack()
	r.SelfStarting = solveLimit(want, 0.1, 40, func(h float64) float64 { return CusumRunLength(k, h, 0, 1, false).Mean })
	return r
}

func fitMonotone(r Rules, want float64) Rules {
	for r.Runs.Monotone = 3; r.Runs.Monotone < 16 && OrderRunLength(r.Runs.Monotone, 0).Mean < want; r.Runs.Monotone++ {
		continue
	}
	return r
}

func fitAlternating(r Rules, want float64) Rules {
	for r.Runs.Alternating = 4; r.Runs.Alternating < 40 && OrderRunLength(0, r.Runs.Alternating).Mean < want; r.Runs.Alternating++ {
		continue
	}
	return r
}

// Disturbance is what a simulated series goes through, in standard deviations of the
// baseline it is judged against.
type Disturbance struct {
	Shift    float64 // step present from the first value on
	PerValue float64 // linear drift, one step with the first value
	Phi      float64 // day-to-day correlation of the values
}

// Simulate draws normal series and judges them with the very code that judges nights,
// until the first flag of rules other than the impact limit: the run length of any set
// of rules together, for which no chain is small enough. It is reproducible: the same
// arguments give the same figures. A run is cut off after a million values.
func Simulate(b Baseline, r Rules, d Disturbance, runs int, seed uint64) RunLength {
	rng := rand.New(rand.NewPCG(seed, 0x9e3779b97f4a7c15))
	r.ImpactLimit = 0
	keep := math.Sqrt(1 - d.Phi*d.Phi)
	mean, ss := 0.0, 0.0
	for i := range runs {
		c := NewChart(b, r)
		e := rng.NormFloat64()
		t := 1
		for ; t < 1_000_000; t++ {
			x := b.Centre + b.SD*(e+d.Shift+d.PerValue*float64(t))
			if len(c.Next(Value{Night: t, X: x}).Flags) > 0 {
				break
			}
			e = d.Phi*e + keep*rng.NormFloat64()
		}
		delta := float64(t) - mean
		mean += delta / float64(i+1)
		ss += delta * (float64(t) - mean)
	}
	sd := math.Sqrt(ss / float64(runs-1))
	return RunLength{Shift: d.Shift, Mean: mean, SD: sd, SE: sd / math.Sqrt(float64(runs))}
}
