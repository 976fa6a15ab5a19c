package chart

import (
	"fmt"
	"math"
)

// Flag is one rule that fired at one value.
type Flag struct {
	Rule     string // in words
	Sentence string
	Since    int     // night of the first value that takes part
	Sign     float64 // +1 above the centre, -1 below, 0 neither
}

// Judgement is what the charts say about one value. Lengths are in the unit of the
// characteristic, or its square for Squares; sums and scores are in standard
// deviations. Numbers that do not apply (no data, chart not kept, no usable baseline)
// are NaN.
type Judgement struct {
	Night                         int
	X                             float64
	NoData                        bool // the night has no value: every chart kept its state
	Score                         float64
	Centre, SD                    float64 // SD includes the value's own uncertainty where it is larger than usual
	LimitLow, LimitHigh           float64
	MovingRange, MovingLimit      float64 // on the charting scale
	EWMA, EWMALow, EWMAHigh       float64
	CusumHigh, CusumLow           float64
	CusumHighSince, CusumLowSince int // values since the sum was last zero
	SelfHigh, SelfLow             float64
	Flags                         []Flag
	// Matters is true when a rule fired and the deviation it speaks of, estimated by
	// the value or by the weighted mean, is larger than the impact limit.
	Matters bool
}

// Judge judges every value of history, oldest first, against the baseline. The
// charts start afresh with the first value; call it with all values since the
// baseline was accepted (or since the last correction). Cost and memory are linear
// in the number of values.
func Judge(b Baseline, history []Value, rules Rules) []Judgement {
	c := NewChart(b, rules)
	out := make([]Judgement, len(history))
	for i, v := range history {
		out[i] = c.Next(v)
	}
	return out
}

// Chart is the running state of the charts of one characteristic. It is not safe for
// concurrent use.
type Chart struct {
	b     Baseline
	r     Rules
	fresh bool // no value yet

	individual, moving, weighted float64 // limits widened for the baseline
	slack                        float64 // cumulative sum slack, widened
	centreRatio                  float64 // CentreSD / SD

	last      float64 // last value on the charting scale
	lastNight int
	lastScore float64
	ewma      float64
	ewmaVar   float64 // variance of the weighted mean about the true centre, in SD^2
	ewmaCov   float64 // covariance of the weighted mean with its newest value
	up, down  tally
	self      selfState
	window    window
}

// NewChart prepares the charts of a characteristic.
func NewChart(b Baseline, r Rules) *Chart {
	c := &Chart{b: b, r: r, fresh: true}
	if b.SD > 0 {
		c.centreRatio = b.CentreSD / b.SD
	}
	c.individual = studentQuantile(r.Individuals, b.DOF)
	c.moving = math.Sqrt2 * studentQuantile(r.MovingRange/math.Sqrt2, b.DOF) * math.Sqrt(1-b.Phi)
	c.weighted = studentQuantile(r.EWMAWidth, b.DOF)
	c.slack = r.CusumSlack + centreShare(b, slackForCentre)
	if r.HeadStart {
		c.up.sum, c.down.sum = r.CusumDecision/2, r.CusumDecision/2
	}
	c.ewma = b.Centre
	return c
}

// Charts that add up neighbouring values feel an error of the centre night after
// night. What they take off for it, in standard uncertainties of the centre, was
// chosen so that the chance of a false flag in a hundred nights stays near that of a
// known centre whatever the length of the baseline (TestShortBaselinesKeepTheRate
// holds the figures).
const (
	slackForCentre = 0.5 // added to the slack of the cumulative sum
	sideForCentre  = 0.6 // how far beyond the centre a value must lie to count for a side
	meanForCentre  = 0.5 // taken into the variance of the weighted mean
)

// centreShare is the common share; while a baseline is unproven the whole uncertainty
// of its centre counts, for there is no Student factor yet that would cover part of it.
func centreShare(b Baseline, share float64) float64 {
	if b.SD <= 0 {
		return 0
	}
	if b.Stage == Unproven {
		share = 1
	}
	return share * b.CentreSD / b.SD
}

// tally is one side of a cumulative sum.
type tally struct {
	sum   float64
	count int // values since the sum was last zero
	since int // night of the first of them
}

func (t *tally) add(z, slack float64, night int) {
	s := t.sum + z - slack
	if s <= 0 {
		*t = tally{}
		return
	}
	if t.count == 0 {
		t.since = night
	}
	t.sum, t.count = s, t.count+1
}

// Next judges one more value.
func (c *Chart) Next(v Value) Judgement {
	nan := math.NaN()
	j := Judgement{
		Night: v.Night, X: v.X, Score: nan, Centre: nan, SD: nan, LimitLow: nan, LimitHigh: nan, MovingRange: nan, MovingLimit: nan,
		EWMA: nan, EWMALow: nan, EWMAHigh: nan, CusumHigh: nan, CusumLow: nan, SelfHigh: nan, SelfLow: nan,
	}
	j.NoData = !finite(v.X)
	y := 0.0
	if !j.NoData {
		y = c.b.Scale.toChart(v.X)
		c.selfStart(&j, v.Night, y)
	}
	if !c.b.Usable() {
		return j
	}
	sd := c.nightSD(v, y, j.NoData)
	c.lines(&j, sd)
	if j.NoData {
		c.holdLines(&j)
		return j
	}
	wide := sd * math.Sqrt(1+c.centreRatio*c.centreRatio)
	j.Score = normalScore((y-c.b.Centre)/wide, c.b.DOF)
	c.individuals(&j, y, sd, wide/sd)
	c.movingRange(&j, y)
	c.weightedMean(&j, v.Night, y, sd)
	z := c.residual(j.Score, v.Night)
	c.cumulative(&j, z, v.Night)
	c.window.push(z, v.Night)
	c.patterns(&j)
	c.impact(&j, y)
	c.last, c.lastNight, c.lastScore, c.fresh = y, v.Night, j.Score, false
	return j
}

// nightSD is the spread expected of this night's value: the baseline's, larger where
// the value's own uncertainty is larger than it was in the baseline.
func (c *Chart) nightSD(v Value, y float64, none bool) float64 {
	if none || !(v.SD > 0) || !finite(v.SD) || c.b.OwnSD == 0 {
		return c.b.SD
	}
	own := c.b.Scale.spreadToChart(v.X, v.SD)
	return math.Sqrt(c.b.SD*c.b.SD + max(0, own*own-c.b.OwnSD*c.b.OwnSD))
}

// lines fills in centre and individual limits.
func (c *Chart) lines(j *Judgement, sd float64) {
	show := c.b.Scale.toShow
	j.Centre, j.SD = show(c.b.Centre), c.b.Scale.spreadToShow(c.b.Centre, sd)
	if c.r.Individuals > 0 {
		half := c.individual * sd * math.Sqrt(1+c.centreRatio*c.centreRatio)
		j.LimitLow, j.LimitHigh = show(c.b.Centre-half), show(c.b.Centre+half)
	}
}

// holdLines repeats the state of the charts on a night without data.
func (c *Chart) holdLines(j *Judgement) {
	if c.r.EWMAWeight > 0 && !c.fresh {
		j.EWMA = c.b.Scale.toShow(c.ewma)
	}
	if c.r.CusumDecision > 0 {
		j.CusumHigh, j.CusumLow = c.up.sum, c.down.sum
		j.CusumHighSince, j.CusumLowSince = c.up.count, c.down.count
	}
}

func (c *Chart) individuals(j *Judgement, y, sd, widened float64) {
	if c.r.Individuals > 0 && math.Abs(j.Score) > c.r.Individuals {
		j.flag(BeyondLimits, j.Night, j.Score, fmt.Sprintf("The value lies %.1f standard deviations %s its centre; values belong within %.1f.",
			math.Abs(y-c.b.Centre)/sd, side(j.Score), c.individual*widened))
	}
}

func (c *Chart) movingRange(j *Judgement, y float64) {
	if c.r.MovingRange == 0 || c.fresh {
		return
	}
	j.MovingRange, j.MovingLimit = math.Abs(y-c.last), c.moving*c.b.SD
	if j.MovingRange > j.MovingLimit {
		j.flag(MovingTooFar, c.lastNight, y-c.last, fmt.Sprintf("The value moved by %.1f standard deviations since night %d; moves belong within %.1f.",
			j.MovingRange/c.b.SD, c.lastNight, c.moving))
	}
}

// weightedMean advances the exponentially weighted mean. Its variance is carried
// along exactly, for first-order correlated values too:
//
//	var_t = (1-w)^2 var_(t-1) + w^2 s_t^2 + 2 w (1-w) phi cov_(t-1)
//	cov_t = w s_t^2 + (1-w) phi cov_(t-1)
func (c *Chart) weightedMean(j *Judgement, night int, y, sd float64) {
	w := c.r.EWMAWeight
	if w == 0 {
		return
	}
	rel := sd / c.b.SD
	carried := c.carry(night) * c.ewmaCov
	c.ewmaVar = (1-w)*(1-w)*c.ewmaVar + w*w*rel*rel + 2*w*(1-w)*carried
	c.ewmaCov = w*rel*rel + (1-w)*carried
	c.ewma = (1-w)*c.ewma + w*y
	u := centreShare(c.b, meanForCentre)
	half := c.weighted * c.b.SD * math.Sqrt(c.ewmaVar+u*u)
	show := c.b.Scale.toShow
	j.EWMA, j.EWMALow, j.EWMAHigh = show(c.ewma), show(c.b.Centre-half), show(c.b.Centre+half)
	if d := c.ewma - c.b.Centre; math.Abs(d) > half {
		since := night
		if t := c.sideTally(d); t.count > 0 {
			since = t.since
		}
		j.flag(WeightedMean, since, d, fmt.Sprintf("The weighted mean of the last nights lies %.2f standard deviations %s the centre; it belongs within %.2f.",
			math.Abs(d)/c.b.SD, side(d), half/c.b.SD))
	}
}

func (c *Chart) sideTally(d float64) tally {
	if d > 0 {
		return c.up
	}
	return c.down
}

// carry is the correlation left after the nights since the last value.
func (c *Chart) carry(night int) float64 {
	if c.b.Phi == 0 || c.fresh {
		return 0
	}
	return math.Pow(c.b.Phi, float64(max(1, night-c.lastNight)))
}

// residual is the score freed from what the last night's score foretells, scaled to
// one standard deviation; the score itself where nights are independent.
func (c *Chart) residual(score float64, night int) float64 {
	f := c.carry(night)
	if f == 0 {
		return score
	}
	return (score - f*c.lastScore) / math.Sqrt(1-f*f)
}

func (c *Chart) cumulative(j *Judgement, z float64, night int) {
	h := c.r.CusumDecision
	if h == 0 {
		return
	}
	c.up.add(z, c.slack, night)
	c.down.add(-z, c.slack, night)
	j.CusumHigh, j.CusumLow = c.up.sum, c.down.sum
	j.CusumHighSince, j.CusumLowSince = c.up.count, c.down.count
	j.cusumFlag(CumulativeSum, c.up, c.down, h)
}

// cusumFlag raises the flag of a cumulative sum on whichever side is over h.
func (j *Judgement) cusumFlag(rule string, up, down tally, h float64) {
	for _, s := range []struct {
		t    tally
		sign float64
	}{{up, 1}, {down, -1}} {
		if s.t.sum > h {
			from := "the centre"
			if rule == SelfStarting {
				from = "the mean of all values before"
			}
			j.flag(rule, s.t.since, s.sign, fmt.Sprintf("Small deviations %s %s have added up to %.1f standard deviations over %s since night %d; the limit is %.1f.",
				side(s.sign), from, s.t.sum, plural(s.t.count, "value"), s.t.since, h))
		}
	}
}

// impact flags a deviation that matters for results.
func (c *Chart) impact(j *Judgement, y float64) {
	limit := c.r.ImpactLimit
	if limit == 0 {
		return
	}
	own := c.b.Scale.norm
	single := own(y) - own(c.b.Centre)
	mean := single
	if c.r.EWMAWeight > 0 {
		mean = own(c.ewma) - own(c.b.Centre)
	}
	for _, f := range j.Flags {
		d := mean
		if f.Rule == BeyondLimits || f.Rule == MovingTooFar {
			d = single
		}
		if math.Abs(d) > limit {
			j.Matters = true
		}
	}
	if math.Abs(single) > limit {
		j.flag(BeyondImpact, j.Night, single, fmt.Sprintf("The value lies %.3g %s the centre, more than the %.3g that matters for results.", math.Abs(single), side(single), limit))
	}
}

func (j *Judgement) flag(rule string, since int, sign float64, sentence string) {
	f := Flag{Rule: rule, Sentence: sentence, Since: since}
	if sign > 0 {
		f.Sign = 1
	} else if sign < 0 {
		f.Sign = -1
	}
	j.Flags = append(j.Flags, f)
}
