package chart

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// density is the standard normal density.
func density(z float64) float64 { return math.Exp(-z*z/2) / math.Sqrt(2*math.Pi) }

// below is the standard normal probability of a value below z.
func below(z float64) float64 { return 0.5 * math.Erfc(-z/math.Sqrt2) }

// between is the standard normal probability of a value between a and b, formed in
// the tail where both lie so that small probabilities keep their digits.
func between(a, b float64) float64 {
	if b <= a {
		return 0
	}
	if a > 0 {
		return below(-a) - below(-b)
	}
	return below(b) - below(a)
}

// quantile is the standard normal quantile of p.
func quantile(p float64) float64 { return distuv.UnitNormal.Quantile(p) }

// studentQuantile is the upper quantile of Student's t at the two-sided normal
// multiplier c: the t that is exceeded as often as c is by a normal variable.
// dof of 0 stands for known spread and returns c.
func studentQuantile(c, dof float64) float64 {
	if dof <= 0 || c <= 0 {
		return c
	}
	return -distuv.StudentsT{Mu: 0, Sigma: 1, Nu: dof}.Quantile(below(-c))
}

// normalScore turns a Student-distributed ratio into the normal deviate that is as
// improbable. dof of 0 stands for known spread and returns t.
func normalScore(t, dof float64) float64 {
	if dof <= 0 || t == 0 {
		return t
	}
	p := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: dof}.CDF(-math.Abs(t))
	if p < 1e-300 {
		p = 1e-300
	}
	z := -quantile(p)
	if t < 0 {
		return -z
	}
	return z
}

// studentTwoSided is the two-sided probability of a Student ratio beyond |t|.
func studentTwoSided(t, dof float64) float64 {
	return 2 * distuv.StudentsT{Mu: 0, Sigma: 1, Nu: dof}.CDF(-math.Abs(t))
}
