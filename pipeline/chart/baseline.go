package chart

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
)

// Stage says how much a baseline can carry.
type Stage string

const (
	// Unproven: fewer than 8 nights. Limits come from the uncertainty budget alone.
	Unproven Stage = "unproven"
	// Young: 8 to 19 nights. Spread is budget and observation together.
	Young Stage = "young"
	// Settled: 20 nights and more. Spread is the observed one and is frozen.
	Settled Stage = "settled"
)

// Night counts at which the stages begin.
const (
	YoungFrom   = 8
	SettledFrom = 20
)

// budgetWeight is the number of nights the budget counts for in a young baseline.
const budgetWeight = 6

// trendLevel is the probability below which both trend tests must fall before a
// baseline is refused. Asking both keeps one outlier from passing for a trend.
const trendLevel = 0.02

// correlationLevel is the one-sided probability below which day-to-day correlation
// is taken as real and limits are widened for it.
const correlationLevel = 0.05

// wanders is the day-to-day correlation from which a baseline of some twenty nights is
// no baseline: its effective number of nights is about two.
const wanders = 0.8

// Signature is a person's act: who, why, on which nights, and how many nights old
// and new ran side by side.
type Signature struct {
	Name, Because         string
	FirstNight, LastNight int
	Overlap               int
}

// Baseline is what is usual for one characteristic of one reference on one
// instrument. It holds ordinary numbers only (no NaN, no infinity), so that it can be
// stored as it is. Centre, CentreSD and SD are on the charting scale: the unit of the
// characteristic, or for Squares the cube root of its square.
type Baseline struct {
	Version               int
	Stage                 Stage
	Scale                 Scale
	Nights                int // values learnt from
	FirstNight, LastNight int
	Centre                float64
	CentreSD              float64 // standard uncertainty of Centre
	SD                    float64 // spread of one night's value
	DOF                   float64 // degrees of freedom of SD; 0 means known exactly
	BudgetSD              float64 // what the uncertainty budget promises
	OwnSD                 float64 // median of the values' own uncertainties, 0 if none
	Lag1                  float64 // day-to-day correlation as observed
	Phi                   float64 // correlation taken into account; 0 where not significant
	Correlation           string  // what was done about it, and why
	Trend                 Trend
	Refused               string   // why this baseline must not be used; empty if it may
	Notes                 []string // worth knowing, not disqualifying
	Signed                Signature
}

// Usable reports whether values may be judged against the baseline.
func (b Baseline) Usable() bool { return b.Refused == "" && b.SD > 0 }

// Shown returns centre and spread in the unit that is reported: the characteristic's
// own, or its square (the spread then to first order).
func (b Baseline) Shown() (centre, sd float64) {
	return b.Scale.toShow(b.Centre), b.Scale.spreadToShow(b.Centre, b.SD)
}

// Known returns a baseline with a centre and spread that are taken as exact, as
// textbook charts and run-length theory do.
func Known(centre, sd float64) Baseline {
	return Baseline{Version: 1, Stage: Settled, Scale: Plain, Centre: centre, SD: sd}
}

// Learn learns a baseline from the values of one characteristic and the standard
// deviation its uncertainty budget promises for one night (0 if there is none).
//
// Centre and spread are those of Algorithm A. With n values and spread s:
// fewer than 8, the spread is the budget's; from 8 to 19 it is
// s^2 = (6 budget^2 + (n-1) s^2)/(n+5) with n+5 degrees of freedom; from 20 on it is
// s with n-1. The baseline is refused, with a sentence, when it contains a trend or
// spreads more than twice as wide as the budget. Values that are not numbers are
// left out.
func Learn(values []Value, budgetSD float64) Baseline { return LearnOn(Plain, values, budgetSD) }

// LearnOn is Learn on a scale. For Squares the values are norms (not yet squared),
// and budgetSD is the standard deviation of the norm.
func LearnOn(scale Scale, values []Value, budgetSD float64) Baseline {
	b := Baseline{Version: 1, Stage: Unproven, Scale: scale}
	vs := usableValues(values)
	n := len(vs)
	b.Nights = n
	if n == 0 {
		b.Refused = "There is no baseline yet: not one night has a value."
		return b
	}
	b.FirstNight, b.LastNight = vs[0].Night, vs[n-1].Night
	t, y := make([]float64, n), make([]float64, n)
	var own []float64
	for i, v := range vs {
		t[i], y[i] = float64(v.Night), scale.toChart(v.X)
		if v.SD > 0 && finite(v.SD) {
			own = append(own, scale.spreadToChart(v.X, v.SD))
		}
	}
	if len(own) > 0 {
		b.OwnSD = Median(own)
	}
	r := AlgorithmA(y)
	b.Centre = r.Centre
	if budgetSD > 0 && finite(budgetSD) {
		b.BudgetSD = scale.spreadToChart(scale.norm(r.Centre), budgetSD)
	}
	b.correlate(y)
	s := r.SD / math.Sqrt(spreadShrink(b.Phi, n))
	b.spread(s, n)
	b.refuse(t, y, s)
	if k := countOutside(y, r.Centre, 3*r.SD); k > 0 && n >= YoungFrom {
		b.Notes = append(b.Notes, fmt.Sprintf("%s of the %d baseline nights lie more than three robust standard deviations from the centre; the robust centre and spread hardly feel them.", numeral(k), n))
	}
	return b
}

// usableValues returns the values that are numbers, in order of night.
func usableValues(values []Value) []Value {
	vs := make([]Value, 0, len(values))
	for _, v := range values {
		if finite(v.X) {
			vs = append(vs, v)
		}
	}
	slices.SortStableFunc(vs, func(a, b Value) int { return a.Night - b.Night })
	return vs
}

func countOutside(y []float64, centre, half float64) int {
	k := 0
	for _, v := range y {
		if half > 0 && math.Abs(v-centre) > half {
			k++
		}
	}
	return k
}

// correlate tests the day-to-day correlation and records what follows from it.
func (b *Baseline) correlate(y []float64) {
	n := len(y)
	b.Lag1 = Lag1(y)
	if n < YoungFrom {
		b.Correlation = "Too few nights to test whether one night's value follows the last one's."
		return
	}
	r := b.Lag1
	if lag1P(r, n) >= correlationLevel {
		b.Correlation = fmt.Sprintf("Neighbouring nights are not noticeably alike (lag-1 correlation %.2f).", r)
		return
	}
	b.Phi = max(0, unbiasedLag1(r, n))
	b.Correlation = fmt.Sprintf("Neighbouring nights are alike (lag-1 correlation %.2f, %.2f without its small-sample bias). "+
		"Individual limits and those of the weighted mean are widened from the long-term spread, because they are read in the characteristic's own unit; "+
		"the cumulative sum and the run tests use the residuals of a first-order model, because no width makes dependent neighbours count as independent ones.", r, b.Phi)
}

// besideLine is the day-to-day correlation of what remains beside the straight line
// through y, 0 where it is not significant: a trend makes neighbours alike too, and
// must not be excused by the likeness it makes.
func besideLine(t, y []float64) float64 {
	l := fitLine(t, y)
	e := make([]float64, len(y))
	for i := range y {
		e[i] = y[i] - l.at(t[i])
	}
	r := Lag1(e)
	if lag1P(r, len(y)) >= correlationLevel {
		return 0
	}
	return max(0, unbiasedLag1(r, len(y)))
}

// spread sets stage, spread and the uncertainty of the centre from the observed
// spread s of n values.
func (b *Baseline) spread(s float64, n int) {
	f := float64(n)
	// A correlated series holds fewer independent values, for the spread and,
	// more so, for the mean.
	effective := (f - 1) * (1 - b.Phi*b.Phi) / (1 + b.Phi*b.Phi)
	forMean := max(1, f*(1-b.Phi)/(1+b.Phi))
	switch {
	case n < YoungFrom:
		b.Stage, b.SD, b.DOF = Unproven, b.BudgetSD, 0
	case n < SettledFrom && b.BudgetSD > 0:
		b.Stage = Young
		b.SD = math.Sqrt((budgetWeight*b.BudgetSD*b.BudgetSD + effective*s*s) / (effective + budgetWeight))
		b.DOF = effective + budgetWeight
	case n < SettledFrom:
		b.Stage, b.SD, b.DOF = Young, s, effective
	default:
		b.Stage, b.SD, b.DOF = Settled, s, effective
	}
	b.CentreSD = b.SD / math.Sqrt(forMean)
}

// refuse writes the sentence that forbids the use of the baseline, if one applies.
// s is the observed spread.
func (b *Baseline) refuse(t, y []float64, s float64) {
	n := len(y)
	b.Trend = TestTrend(t, y)
	if b.SD <= 0 {
		if n < YoungFrom {
			b.Refused = fmt.Sprintf("There is no spread to judge by: %s of %d nights, and no uncertainty budget for this characteristic.", plural(n, "night"), YoungFrom)
		} else {
			b.Refused = fmt.Sprintf("The %d baseline nights do not differ at all; a value that never moves cannot be charted.", n)
		}
		return
	}
	if n < YoungFrom {
		return
	}
	// Correlation widens the chance variation of a slope; the tests are told so.
	beside := besideLine(t, y)
	widen := math.Sqrt((1 + beside) / (1 - beside))
	kendallP, slopeP := b.Trend.P, b.Trend.SlopeP
	if beside > 0 {
		kendallP = 2 * below(-math.Abs(b.Trend.Z)/widen)
		if b.Trend.SlopeSE > 0 {
			slopeP = studentTwoSided(b.Trend.Slope/b.Trend.SlopeSE/widen, float64(n-2))
		}
	}
	// Where the nights wander as well, the two cannot be told apart; the trend is said
	// because it is what a person can look for.
	plain := b.Trend.P < trendLevel && b.Trend.SlopeP < trendLevel
	if b.Phi >= wanders && plain {
		kendallP, slopeP = b.Trend.P, b.Trend.SlopeP
	}
	if kendallP < trendLevel && slopeP < trendLevel {
		whole := b.Trend.Slope * (t[n-1] - t[0])
		b.Refused = fmt.Sprintf("The %d baseline nights contain a trend: %+.3g from the first to the last, %.1f times their spread (chance %.2g). Learn from other nights, or remove the cause first.",
			n, whole, math.Abs(whole)/s, max(kendallP, slopeP))
		return
	}
	if b.Phi >= wanders {
		b.Refused = fmt.Sprintf("The %d baseline nights wander: each resembles the one before so closely (correlation %.2f) that a drift could not be told from chance.", n, b.Phi)
		return
	}
	if b.BudgetSD > 0 && s > 2*b.BudgetSD {
		b.Refused = fmt.Sprintf("The %d baseline nights spread by %.3g, more than twice the %.3g of the uncertainty budget: they were learnt in a bad time, or the budget is too small.", n, s, b.BudgetSD)
	}
}

// Update learns from more nights while the baseline is not settled. A settled
// baseline is frozen and comes back unchanged: baselines never follow the data. The
// version counts up whenever the numbers change.
func (b Baseline) Update(values []Value) Baseline {
	if b.Stage == Settled && b.Refused == "" {
		return b
	}
	budget := b.BudgetSD
	if b.Scale == Squares && b.Centre > 0 {
		budget = b.BudgetSD * 1.5 * math.Sqrt(b.Centre)
	}
	n := LearnOn(b.Scale, values, budget)
	n.Version = b.Version
	if n.Nights != b.Nights || n.Centre != b.Centre || n.SD != b.SD {
		n.Version = b.Version + 1
	}
	return n
}

// errSignature says what a signed act needs.
var errSignature = errors.New("a new baseline is a signed act: it needs a name, a reason, and the first and last night it is learnt from")

func (s Signature) check() error {
	if strings.TrimSpace(s.Name) == "" || strings.TrimSpace(s.Because) == "" || s.LastNight < s.FirstNight {
		return errSignature
	}
	return nil
}

// Replace learns a new baseline from the nights the signature names and puts it in
// the place of b. It fails without a name, a reason and a range, and when the new
// baseline would be refused; b then stays in force.
func (b Baseline) Replace(values []Value, budgetSD float64, by Signature) (Baseline, error) {
	if err := by.check(); err != nil {
		return b, err
	}
	var within []Value
	for _, v := range values {
		if v.Night >= by.FirstNight && v.Night <= by.LastNight {
			within = append(within, v)
		}
	}
	n := LearnOn(b.Scale, within, budgetSD)
	if n.Refused != "" {
		return b, fmt.Errorf("nights %d to %d give no baseline: %s", by.FirstNight, by.LastNight, n.Refused)
	}
	n.Version, n.Signed = b.Version+1, by
	return n, nil
}

// Pair is one night on which the old and the new lot of a reference ran together.
type Pair struct {
	Night    int
	Old, New float64 // values of the characteristic
}

// PairsNeeded is the number of nights two lots of a reference run side by side
// before the new one takes over (needs of the trade; common practice, no source).
const PairsNeeded = 5

// LotChange is the step from one reference lot to the next.
type LotChange struct {
	Step, StepSE float64 // mean paired difference new - old on the charting scale
	Pairs        int
	// Question is not empty when the characteristic belongs to the chemical and not
	// to the lot (pKa, band positions) and yet moved by more than allowed.
	Question string
}

// NewLot carries the baseline over to a new lot of the reference: the new centre is
// the old one plus the mean paired difference, the spread stays, and the uncertainty
// of the difference widens the limits. allowed is the largest step that raises no
// question, in the unit of the characteristic (0.005 for pKa, 0.15 nm for band
// positions; 0 where a step is natural, as for amounts and ratios).
func (b Baseline) NewLot(pairs []Pair, allowed float64, by Signature) (Baseline, LotChange, error) {
	if err := by.check(); err != nil {
		return b, LotChange{}, err
	}
	var d []float64
	for _, p := range pairs {
		if finite(p.Old) && finite(p.New) {
			d = append(d, b.Scale.toChart(p.New)-b.Scale.toChart(p.Old))
		}
	}
	if len(d) < PairsNeeded {
		return b, LotChange{}, fmt.Errorf("old and new lot ran together on %s; %d are needed before the new lot takes over", plural(len(d), "night"), PairsNeeded)
	}
	mean, ss := 0.0, 0.0
	for _, v := range d {
		mean += v / float64(len(d))
	}
	for _, v := range d {
		ss += (v - mean) * (v - mean)
	}
	c := LotChange{Step: mean, Pairs: len(d)}
	c.StepSE = math.Sqrt(ss / float64(len(d)-1) / float64(len(d)))
	if allowed > 0 && math.Abs(mean) > allowed {
		c.Question = fmt.Sprintf("The new lot reads %+.4g beside the old one (standard error %.2g), more than the %.3g that two lots of the same chemical may differ by: is it the same chemical?", mean, c.StepSE, allowed)
	}
	n := b
	n.Notes = append(slices.Clone(b.Notes), fmt.Sprintf("Carried over to a new reference lot by %d paired nights, step %+.4g.", c.Pairs, c.Step))
	n.Version, n.Signed = b.Version+1, by
	n.Signed.Overlap = c.Pairs
	n.Centre += mean
	n.CentreSD = math.Hypot(b.CentreSD, c.StepSE)
	return n, c, nil
}
