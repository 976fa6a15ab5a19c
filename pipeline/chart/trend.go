package chart

import (
	"math"
	"slices"
)

// Trend is what the tests for a monotone or linear trend say about a series.
type Trend struct {
	S        int     // Kendall's sum of signs
	Variance float64 // of S, corrected for ties
	Z        float64 // normal score of S with continuity correction
	P        float64 // two-sided probability of so large an S without a trend
	Exact    bool    // P counted exactly (no ties, at most 60 values), else normal

	Slope   float64 // least-squares slope per unit of time
	SlopeSE float64
	SlopeP  float64 // two-sided, Student's t on n-2
}

// exactUpTo is the length up to which the distribution of Kendall's S is counted
// out; beyond it the normal approximation is right to the digits anybody uses.
const exactUpTo = 60

// TestTrend applies the Mann-Kendall test (Mann 1945; Kendall 1975) and the slope
// test of the least-squares line to y at the times t, which must be increasing.
// Fewer than three values give probabilities of one.
func TestTrend(t, y []float64) Trend {
	n := len(y)
	tr := Trend{P: 1, SlopeP: 1}
	if n < 3 {
		return tr
	}
	tr.S, tr.Variance = kendall(y)
	ties := tr.Variance < fullVariance(n)-1e-9
	if tr.S != 0 && tr.Variance > 0 {
		tr.Z = (math.Abs(float64(tr.S)) - 1) / math.Sqrt(tr.Variance)
		if tr.S < 0 {
			tr.Z = -tr.Z
		}
	}
	if !ties && n <= exactUpTo {
		tr.Exact = true
		tr.P = min(1, 2*KendallTail(n, abs(tr.S)))
	} else {
		tr.P = min(1, 2*below(-math.Abs(tr.Z)))
	}
	line := fitLine(t, y)
	tr.Slope, tr.SlopeSE = line.slope, line.slopeSE
	switch {
	case line.slopeSE > 0:
		tr.SlopeP = studentTwoSided(line.slope/line.slopeSE, float64(n-2))
	case line.slope != 0:
		tr.SlopeP = 0
	}
	return tr
}

func abs(i int) int {
	if i < 0 {
		return -i
	}
	return i
}

// kendall returns the sum of signs of later minus earlier values and its variance
// without a trend, corrected for ties.
func kendall(y []float64) (s int, variance float64) {
	n := len(y)
	for i := range y {
		for j := i + 1; j < n; j++ {
			switch {
			case y[j] > y[i]:
				s++
			case y[j] < y[i]:
				s--
			}
		}
	}
	sorted := slices.Clone(y)
	slices.Sort(sorted)
	variance = fullVariance(n)
	for i := 0; i < n; {
		j := i
		for j < n && sorted[j] == sorted[i] {
			j++
		}
		g := float64(j - i)
		variance -= g * (g - 1) * (2*g + 5) / 18
		i = j
	}
	return s, variance
}

func fullVariance(n int) float64 {
	f := float64(n)
	return f * (f - 1) * (2*f + 5) / 18
}

// KendallTail is the exact probability that Kendall's S of n untied values without
// trend is at least s, from the number of permutations by inversions.
func KendallTail(n, s int) float64 {
	most := n * (n - 1) / 2
	if s <= -most {
		return 1
	}
	if s > most {
		return 0
	}
	// p[k] is the share of permutations with k inversions; a further element adds
	// 0..m-1 inversions, each equally often.
	p := make([]float64, most+1)
	q := make([]float64, most+1)
	p[0] = 1
	for m := 2; m <= n; m++ {
		top := m * (m - 1) / 2
		sum := 0.0
		for k := 0; k <= top; k++ {
			sum += p[k]
			if k >= m {
				sum -= p[k-m]
			}
			q[k] = sum / float64(m)
		}
		p, q = q, p
	}
	// S = most - 2 inversions, so S >= s means at most (most-s)/2 inversions.
	tail := 0.0
	for k := 0; 2*k <= most-s; k++ {
		tail += p[k]
	}
	return min(1, tail)
}

// SenSlope is the median of all pairwise slopes (Theil 1950; Sen 1968) of y at the
// times t, with the order-statistic limits of Gilbert 1987 at the given two-sided
// confidence, interpolated between ranks. Pairs at equal times are left out.
func SenSlope(t, y []float64, confidence float64) (slope, low, high float64) {
	var slopes []float64
	for i := range y {
		for j := i + 1; j < len(y); j++ {
			if t[j] != t[i] {
				slopes = append(slopes, (y[j]-y[i])/(t[j]-t[i]))
			}
		}
	}
	if len(slopes) == 0 {
		return math.NaN(), math.NaN(), math.NaN()
	}
	slices.Sort(slopes)
	_, variance := kendall(y)
	half := quantile(0.5+confidence/2) * math.Sqrt(variance)
	count := float64(len(slopes))
	return Median(slopes), ranked(slopes, (count-half)/2), ranked(slopes, (count+half)/2+1)
}

// ranked interpolates the sorted s at the one-based, possibly broken rank r.
func ranked(s []float64, r float64) float64 {
	r = min(max(r, 1), float64(len(s)))
	i := int(math.Floor(r))
	if i >= len(s) {
		return s[len(s)-1]
	}
	f := r - float64(i)
	return s[i-1] + f*(s[i]-s[i-1])
}

// line is a least-squares straight line y = level + slope (t - middle).
type line struct {
	middle, level, slope      float64
	levelSE, slopeSE, sd, ssT float64
	n                         int
}

// at returns the height of the line at time t.
func (l line) at(t float64) float64 { return l.level + l.slope*(t-l.middle) }

// fitLine fits a straight line by least squares, centred so that level and slope
// are uncorrelated. Standard errors need three values.
func fitLine(t, y []float64) line {
	n := len(y)
	l := line{n: n}
	for i := range y {
		l.middle += t[i] / float64(n)
		l.level += y[i] / float64(n)
	}
	var sty float64
	for i := range y {
		l.ssT += (t[i] - l.middle) * (t[i] - l.middle)
		sty += (t[i] - l.middle) * (y[i] - l.level)
	}
	if l.ssT > 0 {
		l.slope = sty / l.ssT
	}
	rss := 0.0
	for i := range y {
		r := y[i] - l.at(t[i])
		rss += r * r
	}
	if n > 2 {
		l.sd = math.Sqrt(rss / float64(n-2))
		l.levelSE = l.sd / math.Sqrt(float64(n))
		if l.ssT > 0 {
			l.slopeSE = l.sd / math.Sqrt(l.ssT)
		}
	}
	return l
}
