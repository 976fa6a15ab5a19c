package chart

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// PredictionFactor is K such that mean +- K s of n values covers the next one as often
// as c standard deviations cover a normal value: t_(n-1) sqrt(1+1/n).
func PredictionFactor(n int, c float64) float64 {
	return studentQuantile(c, float64(n-1)) * math.Sqrt(1+1/float64(n))
}

// Estimated says what individual limits at mean +- c s/c4 of n values do when they
// are used as if mean and spread were known.
type Estimated struct {
	FalseAlarm      float64 // expected probability of a flag at one value in control
	MeanRunLength   float64 // expected in-control run length; infinite below 8 values or so
	Low, Mid, High  float64 // run lengths that 10, 50 and 90 % of such baselines stay below
	WidenedTo       float64 // factor of s that keeps the asked false-alarm probability
	FalseAlarmKnown float64 // the probability asked for
}

// EstimatedLimits returns the effect of a short baseline on individual limits
// (compare Quesenberry 1993; Jones, Champ and Rigdon 2001).
func EstimatedLimits(n int, c float64) Estimated {
	f := float64(n)
	c4 := ConstantsFor(n).C4
	dof := f - 1
	e := Estimated{FalseAlarmKnown: 2 * below(-c), WidenedTo: PredictionFactor(n, c)}
	e.FalseAlarm = studentTwoSided(c/(c4*math.Sqrt(1+1/f)), dof)
	run := func(centre, ratio float64) float64 {
		half := c * ratio / c4
		return 1 / (below(-half-centre) + below(-half+centre))
	}
	e.MeanRunLength = overBaselines(1/math.Sqrt(f), dof, run)
	quant := func(share float64) float64 {
		// The share of baselines with a shorter run length grows with the length.
		g := func(l float64) float64 { return shareBelow(1/math.Sqrt(f), dof, math.Exp(l), run) - share }
		a, b := 0.01, 60.0
		for range 60 {
			m := (a + b) / 2
			if g(m) < 0 {
				a = m
			} else {
				b = m
			}
		}
		return math.Exp((a + b) / 2)
	}
	e.Low, e.Mid, e.High = quant(0.1), quant(0.5), quant(0.9)
	return e
}

// overBaselines averages a figure over the centres (normal with the given standard
// uncertainty) and spread ratios (chi with dof degrees of freedom) that baselines of
// a stable process give.
func overBaselines(centreSD, dof float64, figure func(centre, ratio float64) float64) float64 {
	xs, ws := legendre(48, -7, 7)
	chi := distuv.ChiSquared{K: dof}
	mid, wide := dof, math.Sqrt(2*dof)
	rs, rw := legendre(200, math.Sqrt(math.Max(0, mid-8*wide)/dof), math.Sqrt((mid+14*wide)/dof))
	total := 0.0
	for j, r := range rs {
		p := chi.Prob(r*r*dof) * 2 * r * dof * rw[j]
		inner := 0.0
		for i, x := range xs {
			inner += ws[i] * density(x) * figure(x*centreSD, r)
		}
		total += p * inner
	}
	return total
}

// shareBelow is the share of baselines whose run length is at most l.
func shareBelow(centreSD, dof, l float64, run func(centre, ratio float64) float64) float64 {
	xs, ws := legendre(48, -7, 7)
	chi := distuv.ChiSquared{K: dof}
	total := 0.0
	for i, x := range xs {
		a, b := 0.0, 10.0
		for range 50 {
			m := (a + b) / 2
			if run(x*centreSD, m) <= l {
				a = m
			} else {
				b = m
			}
		}
		total += ws[i] * density(x) * chi.CDF(a*a*dof)
	}
	return total
}
