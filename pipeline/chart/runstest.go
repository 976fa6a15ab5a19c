package chart

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
)

// RunsResult is the test of Wald and Wolfowitz 1940 for too few or too many runs.
type RunsResult struct {
	Above, Below, Runs int
	Expected, Variance float64
	Z, P               float64 // normal score without continuity correction, two-sided
	FewP, ManyP        float64 // exact probabilities of so few, and of so many, runs
}

// RunsAbout counts the runs of x at or above and below cut.
func RunsAbout(x []float64, cut float64) RunsResult {
	var r RunsResult
	for i, v := range x {
		up := v >= cut
		if up {
			r.Above++
		} else {
			r.Below++
		}
		if i == 0 || up != (x[i-1] >= cut) {
			r.Runs++
		}
	}
	a, b := float64(r.Above), float64(r.Below)
	n := a + b
	r.Z, r.P, r.FewP, r.ManyP = 0, 1, 1, 1
	if r.Above == 0 || r.Below == 0 {
		return r
	}
	r.Expected = 2*a*b/n + 1
	r.Variance = 2 * a * b * (2*a*b - n) / (n * n * (n - 1))
	if r.Variance > 0 {
		r.Z = (float64(r.Runs) - r.Expected) / math.Sqrt(r.Variance)
		r.P = 2 * below(-math.Abs(r.Z))
	}
	few, at := 0.0, 0.0
	for k := 2; k <= r.Runs; k++ {
		at = runsProbability(r.Above, r.Below, k)
		few += at
	}
	r.FewP, r.ManyP = min(1, few), min(1, max(0, 1-few+at))
	return r
}

// runsProbability is the chance of exactly k runs of a and b things.
func runsProbability(a, b, k int) float64 {
	choose := func(n, r int) float64 {
		if r < 0 || r > n {
			return math.Inf(-1)
		}
		x, _ := math.Lgamma(float64(n + 1))
		y, _ := math.Lgamma(float64(r + 1))
		z, _ := math.Lgamma(float64(n - r + 1))
		return x - y - z
	}
	all := choose(a+b, a)
	h := k / 2
	if k%2 == 0 {
		return 2 * math.Exp(choose(a-1, h-1)+choose(b-1, h-1)-all)
	}
	return math.Exp(choose(a-1, h)+choose(b-1, h-1)-all) + math.Exp(choose(a-1, h-1)+choose(b-1, h)-all)
}

// Normality is the Anderson-Darling test for a normal distribution with mean and
// spread estimated.
type Normality struct {
	A2       float64 // statistic
	Adjusted float64 // A2 (1 + 0.75/n + 2.25/n^2)
	P        float64 // D'Agostino and Stephens 1986, Table 4.9
}

// TestNormality applies the Anderson-Darling test to x, at least eight values of
// which not all are equal; otherwise P is one.
func TestNormality(x []float64) Normality {
	n := len(x)
	m, s := stat.MeanStdDev(x, nil)
	if n < 8 || !(s > 0) {
		return Normality{P: 1}
	}
	z := slices.Clone(x)
	slices.Sort(z)
	total := 0.0
	for i := range z {
		a, b := (z[i]-m)/s, (z[n-1-i]-m)/s
		total += float64(2*i+1) * (math.Log(below(a)) + math.Log(below(-b)))
	}
	f := float64(n)
	r := Normality{A2: -f - total/f}
	a := r.A2 * (1 + 0.75/f + 2.25/(f*f))
	r.Adjusted = a
	switch {
	case a < 0.2:
		r.P = 1 - math.Exp(-13.436+101.14*a-223.73*a*a)
	case a < 0.34:
		r.P = 1 - math.Exp(-8.318+42.796*a-59.938*a*a)
	case a < 0.6:
		r.P = math.Exp(0.9177 - 4.279*a - 1.38*a*a)
	case a < 10:
		r.P = math.Exp(1.2937 - 5.709*a + 0.0186*a*a)
	default:
		r.P = 3.7e-24
	}
	return r
}
