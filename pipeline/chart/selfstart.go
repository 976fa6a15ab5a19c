package chart

import "math"

// selfState is the running state of the self-starting cumulative sum.
type selfState struct {
	n        int
	mean, ss float64 // of the values so far (Welford 1962)
	up, down tally
}

// SelfStart returns the self-starting scores of x (Hawkins, The Statistician 36:299,
// 1987; the Q statistic of Quesenberry, J. Qual. Technol. 23:213, 1991):
//
//	T_n = (x_n - mean_(n-1)) / s_(n-1)
//	Q_n = normal quantile of Student's t_(n-2) distribution at T_n sqrt((n-1)/n)
//
// for n >= 3, independent standard normal while nothing changes; the first two are
// NaN. A value equal to constant predecessors scores 0, another one is clipped.
func SelfStart(x []float64) []float64 {
	var s selfState
	q := make([]float64, len(x))
	for i, v := range x {
		q[i] = s.score(v)
	}
	return q
}

// score returns the score of the next value and takes it in.
func (s *selfState) score(x float64) float64 {
	q := math.NaN()
	if s.n >= 2 {
		n := float64(s.n + 1)
		sd := math.Sqrt(s.ss / float64(s.n-1))
		d := x - s.mean
		switch {
		case sd > 0:
			q = normalScore(d/sd*math.Sqrt((n-1)/n), n-2)
		case d == 0:
			q = 0
		default:
			q = math.Copysign(8, d)
		}
	}
	s.n++
	d := x - s.mean
	s.mean += d / float64(s.n)
	s.ss += d * (x - s.mean)
	return q
}

// selfStart advances the self-starting cumulative sum, which needs no baseline. Where
// the baseline knows of a day-to-day correlation the values are freed from it first.
func (c *Chart) selfStart(j *Judgement, night int, y float64) {
	h := c.r.SelfStarting
	if h == 0 {
		return
	}
	if f := c.carry(night); f > 0 {
		y = (y - f*c.last) / math.Sqrt(1-f*f)
	}
	q := c.self.score(y)
	if math.IsNaN(q) {
		return
	}
	k := c.r.selfSlack()
	c.self.up.add(q, k, night)
	c.self.down.add(-q, k, night)
	j.SelfHigh, j.SelfLow = c.self.up.sum, c.self.down.sum
	j.cusumFlag(SelfStarting, c.self.up, c.self.down, h)
}
