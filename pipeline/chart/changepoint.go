package chart

import (
	"fmt"
	"math"
	"slices"
)

// Shape is how a change goes on after its onset.
type Shape string

// Shapes of a change.
const (
	Step  Shape = "step"
	Drift Shape = "drift"
)

// onsetCover is the probability of the interval stated for an onset.
const onsetCover = 0.90

// Change is the most likely change in a series.
type Change struct {
	Shape Shape
	Last  int // number of values before the change (index of the first changed value)
	// OnsetNight is the night of the first changed value of a step, the night from
	// which a drift rises. OnsetLow to OnsetHigh is its 90 % interval.
	OnsetNight, OnsetLow, OnsetHigh int
	// Size is the step, or the drift per night, in the unit of the charting scale,
	// with its standard error given the onset; SizeLow to SizeHigh is its 95 %
	// interval with the onset unknown.
	Size, SizeSE, SizeLow, SizeHigh float64
	Before, After                   float64 // level before, and after (of a drift: at the last value)
	LogLikelihood                   float64 // gain over no change
	Sentence                        string
}

// candidate is one possible onset.
type candidate struct {
	last     int
	gain     float64 // log-likelihood gain over no change
	logW     float64 // log posterior weight, size integrated out under a flat prior
	size, se float64
}

// FindStep finds the step away from a known baseline that is most likely in values:
// the onset t that maximises (T-t) (mean of what follows - centre)^2 (Samuel,
// Pignatiello and Calvin, Qual. Eng. 10:521, 1998), with the uncertainty of the
// centre and a day-to-day correlation taken into the variance. The onset interval is
// the smallest set of onsets holding 90 % of the likelihood, the size integrated out.
func FindStep(values []Value, b Baseline) Change {
	vs := usableValues(values)
	n := len(vs)
	if n == 0 || !b.Usable() {
		return Change{Shape: Step}
	}
	variance := b.SD * b.SD * (1 + b.Phi) / (1 - b.Phi)
	var cs []candidate
	total := 0.0
	for i := n - 1; i >= 0; i-- {
		total += b.Scale.toChart(vs[i].X) - b.Centre
		m := float64(n - i)
		v := variance/m + b.CentreSD*b.CentreSD
		size := total / m
		g := size * size / (2 * v)
		cs = append(cs, candidate{last: i, gain: g, logW: g + 0.5*math.Log(v), size: size, se: math.Sqrt(v)})
	}
	c := summarise(cs, Step, vs)
	c.Before, c.After = b.Centre, b.Centre+c.Size
	return c
}

// FindStepWithin finds the step between two unknown levels with one unknown spread
// that is most likely in values: the t that maximises t (T-t)/T (mean before - mean
// after)^2. It needs four values.
func FindStepWithin(values []Value, scale Scale) Change {
	vs := usableValues(values)
	n := len(vs)
	if n < 4 {
		return Change{Shape: Step}
	}
	y := make([]float64, n)
	total := 0.0
	for i, v := range vs {
		y[i] = scale.toChart(v.X)
		total += y[i]
	}
	mean, whole := total/float64(n), 0.0
	for _, v := range y {
		whole += (v - mean) * (v - mean)
	}
	var cs []candidate
	left := 0.0
	f := float64(n)
	for t := 1; t < n; t++ {
		left += y[t-1]
		a, m := float64(t), float64(n-t)
		size := (total-left)/m - left/a
		rss := max(whole-a*m/f*size*size, 1e-300)
		se := math.Sqrt(rss / (f - 2) * (1/a + 1/m))
		g := f / 2 * math.Log(whole/rss)
		cs = append(cs, candidate{last: t, gain: g, logW: (f-2)/2*math.Log(whole/rss) - 0.5*math.Log(a*m), size: size, se: se})
	}
	c := summarise(cs, Step, vs)
	before := 0.0
	for _, v := range y[:c.Last] {
		before += v / float64(c.Last)
	}
	c.Before, c.After = before, before+c.Size
	return c
}

// FindDrift finds the linear drift away from a known baseline that is most likely in
// values: centre up to a night, then a straight line from there, by least squares
// over the onset. Time is counted in nights, so gaps do no harm.
func FindDrift(values []Value, b Baseline) Change {
	vs := usableValues(values)
	n := len(vs)
	if n < 2 || !b.Usable() {
		return Change{Shape: Drift}
	}
	variance := b.SD * b.SD * (1 + b.Phi) / (1 - b.Phi)
	var cs []candidate
	// From the last onset back to the one before the first value; sums are carried
	// along, so the cost is linear.
	var s0, st, stt, sy, sty float64
	origin := float64(vs[n-1].Night)
	for i := n - 1; i >= 0; i-- {
		t := float64(vs[i].Night) - origin
		y := b.Scale.toChart(vs[i].X) - b.Centre
		s0, st, stt, sy, sty = s0+1, st+t, stt+t*t, sy+y, sty+t*y
		start := float64(vs[0].Night) - 1 - origin
		if i > 0 {
			start = float64(vs[i-1].Night) - origin
		}
		dd := stt - 2*start*st + start*start*s0
		dy := sty - start*sy
		if dd <= 0 || i == n-1 && n > 2 {
			continue
		}
		d1 := st - start*s0
		v := variance/dd + b.CentreSD*b.CentreSD*(d1/dd)*(d1/dd)
		size := dy / dd
		g := size * size / (2 * v)
		cs = append(cs, candidate{last: i, gain: g, logW: g + 0.5*math.Log(v), size: size, se: math.Sqrt(v)})
	}
	if len(cs) == 0 {
		return Change{Shape: Drift}
	}
	c := summarise(cs, Drift, vs)
	from := vs[0].Night - 1
	if c.Last > 0 {
		from = vs[c.Last-1].Night
	}
	c.Before = b.Centre
	c.After = b.Centre + c.Size*float64(vs[n-1].Night-from)
	return c
}

// FindChange returns the more likely of a step and a drift away from the baseline.
// Both have an onset and a size, so their likelihoods compare directly.
func FindChange(values []Value, b Baseline) Change {
	s, d := FindStep(values, b), FindDrift(values, b)
	if d.LogLikelihood > s.LogLikelihood {
		return d
	}
	return s
}

// summarise picks the most likely candidate and forms the intervals.
func summarise(cs []candidate, shape Shape, vs []Value) Change {
	best, top := cs[0], math.Inf(-1)
	for _, c := range cs {
		if c.gain > best.gain {
			best = c
		}
		top = max(top, c.logW)
	}
	w := make([]float64, len(cs))
	total := 0.0
	for i, c := range cs {
		w[i] = math.Exp(c.logW - top)
		total += w[i]
	}
	order := make([]int, len(cs))
	var mean, second float64
	for i, c := range cs {
		order[i] = i
		p := w[i] / total
		mean += p * c.size
		second += p * (c.se*c.se + c.size*c.size)
	}
	slices.SortStableFunc(order, func(a, b int) int {
		switch {
		case w[a] > w[b]:
			return -1
		case w[a] < w[b]:
			return 1
		}
		return 0
	})
	low, high, held := best.last, best.last, 0.0
	for _, i := range order {
		if held >= onsetCover*total {
			break
		}
		held += w[i]
		low, high = min(low, cs[i].last), max(high, cs[i].last)
	}
	spread := math.Sqrt(max(0, second-mean*mean))
	night := func(last int) int {
		if shape == Step {
			return vs[last].Night
		}
		if last == 0 {
			return vs[0].Night - 1
		}
		return vs[last-1].Night
	}
	c := Change{
		Shape: shape, Last: best.last, OnsetNight: night(best.last), OnsetLow: night(low), OnsetHigh: night(high),
		Size: best.size, SizeSE: best.se, SizeLow: mean - 1.96*spread, SizeHigh: mean + 1.96*spread, LogLikelihood: best.gain,
	}
	what := fmt.Sprintf("a step of %+.3g (95 %% interval %+.3g to %+.3g)", c.Size, c.SizeLow, c.SizeHigh)
	if shape == Drift {
		what = fmt.Sprintf("a drift of %+.3g per night (95 %% interval %+.3g to %+.3g)", c.Size, c.SizeLow, c.SizeHigh)
	}
	c.Sentence = fmt.Sprintf("Most likely %s since night %d; onset between nights %d and %d (90 %%).", what, c.OnsetNight, c.OnsetLow, c.OnsetHigh)
	return c
}
