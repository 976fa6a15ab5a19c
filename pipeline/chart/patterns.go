package chart

import (
	"fmt"
	"math"
)

// window holds the newest scores, newest first, as far back as a run test may look.
type window struct {
	z     [longestRun]float64
	night [longestRun]int
	head  int
	n     int
}

func (w *window) push(z float64, night int) {
	w.head = (w.head + longestRun - 1) % longestRun
	w.z[w.head], w.night[w.head] = z, night
	w.n = min(w.n+1, longestRun)
}

// at returns the score i values back; 0 is the newest.
func (w *window) at(i int) float64 { return w.z[(w.head+i)%longestRun] }

// since returns the night of the value i back.
func (w *window) since(i int) int { return w.night[(w.head+i)%longestRun] }

// ofLast reports whether the newest value and at least need-1 of the of-1 before it
// lie beyond border on the same side, and how far back the first of them lies.
func (w *window) ofLast(need, of int, border float64) (sign float64, back int, ok bool) {
	if w.n == 0 {
		return 0, 0, false
	}
	sign = math.Copysign(1, w.at(0))
	count := 0
	for i := 0; i < min(of, w.n); i++ {
		if sign*w.at(i) > border {
			count++
			back = i
		} else if i == 0 {
			return 0, 0, false
		}
		if count == need {
			return sign, back, true
		}
	}
	return 0, 0, false
}

// all reports whether the newest n values all meet a condition.
func (w *window) all(n int, meets func(z float64) bool) bool {
	if w.n < n {
		return false
	}
	for i := range n {
		if !meets(w.at(i)) {
			return false
		}
	}
	return true
}

// monotone reports whether the newest n values rise, or fall, at every step.
func (w *window) monotone(n int) (sign float64, ok bool) {
	if w.n < n {
		return 0, false
	}
	sign = math.Copysign(1, w.at(0)-w.at(1))
	for i := range n - 1 {
		if sign*(w.at(i)-w.at(i+1)) <= 0 {
			return 0, false
		}
	}
	return sign, true
}

// alternating reports whether the newest n values go up and down in turn.
func (w *window) alternating(n int) bool {
	if w.n < n {
		return false
	}
	for i := range n - 2 {
		if (w.at(i)-w.at(i+1))*(w.at(i+1)-w.at(i+2)) >= 0 {
			return false
		}
	}
	return true
}

// patterns applies the run tests to the newest scores.
func (c *Chart) patterns(j *Judgement) {
	r := c.r.Runs
	if !r.any() {
		return
	}
	inner, outer := c.r.zone(), 2*c.r.zone()
	w := &c.window
	// Names are built only where a test fires: most nights none does.
	same := func(on bool, need, of int, border float64) (sign float64, since int, ok bool) {
		if !on {
			return 0, 0, false
		}
		sign, back, ok := w.ofLast(need, of, border)
		return sign, w.since(back), ok
	}
	if sign, since, ok := same(r.TwoOfThree, 2, 3, outer); ok {
		c.patternFlag(j, twoOfThreeName(), since, sign, 2, 3, outer)
	}
	if sign, since, ok := same(r.FourOfFive, 4, 5, inner); ok {
		c.patternFlag(j, fourOfFiveName(), since, sign, 4, 5, inner)
	}
	if sign, since, ok := same(r.OneSide > 0, r.OneSide, r.OneSide, centreShare(c.b, sideForCentre)); ok {
		c.patternFlag(j, oneSideName(r.OneSide), since, sign, r.OneSide, r.OneSide, 0)
	}
	if sign, since, ok := same(r.TwoBeyond, 2, 2, outer); ok {
		c.patternFlag(j, twoBeyondName(), since, sign, 2, 2, outer)
	}
	if sign, since, ok := same(r.FourBeyond, 4, 4, inner); ok {
		c.patternFlag(j, fourBeyondName(), since, sign, 4, 4, inner)
	}
	c.spreadPatterns(j, inner, outer)
}

// spreadPatterns applies the tests that look at order and scatter and not at a side.
func (c *Chart) spreadPatterns(j *Judgement, inner, outer float64) {
	r, w := c.r.Runs, &c.window
	if r.Opposite && w.n >= 2 && math.Abs(w.at(0)) > outer && math.Abs(w.at(1)) > outer && w.at(0)*w.at(1) < 0 {
		j.flag(oppositeName(), w.since(1), 0, "Two neighbouring values lie more than two thirds of the way to the action limits on opposite sides: the scatter has grown.")
	}
	if n := r.Monotone; n > 0 {
		if sign, ok := w.monotone(n); ok {
			j.flag(monotoneName(n), w.since(n-1), sign, fmt.Sprintf("The last %d values each lie %s the one before.", n, side(sign)))
		}
	}
	if n := r.Alternating; n > 0 && w.alternating(n) {
		j.flag(alternatingName(n), w.since(n-1), 0, fmt.Sprintf("The last %d values go up and down in turn: two sources may be taking turns.", n))
	}
	if n := r.Inner; n > 0 && w.all(n, func(z float64) bool { return math.Abs(z) < inner }) {
		j.flag(innerName(n), w.since(n-1), 0, fmt.Sprintf("The last %d values all lie less than a third of the way to the action limits: the scatter is smaller than it was learnt.", n))
	}
	if n := r.Outer; n > 0 && w.all(n, func(z float64) bool { return math.Abs(z) > inner }) {
		j.flag(outerName(n), w.since(n-1), 0, fmt.Sprintf("The last %d values all lie more than a third of the way to the action limits: the scatter has grown, or there are two levels.", n))
	}
}

func (c *Chart) patternFlag(j *Judgement, name string, since int, sign float64, need, of int, border float64) {
	where := side(sign) + " the centre"
	switch {
	case border >= 2*c.r.zone():
		where = "more than two thirds of the way to the action limit " + where
	case border >= c.r.zone():
		where = "more than a third of the way to the action limit " + where
	}
	if need == of {
		j.flag(name, since, sign, fmt.Sprintf("The last %d values all lie %s.", of, where))
		return
	}
	j.flag(name, since, sign, fmt.Sprintf("%d of the last %d values lie %s.", need, of, where))
}
