package chart

import "math"

// Run lengths under a linear drift: the mean of value t lies at perValue times
// t-1+first standard deviations. first is 1 where the first value already carries one
// step (Aerne, Champ and Rigdon 1991), 0 where it carries none (Gan 1991, 1992).

// survivalEnd is the survival probability below which the sum over values stops.
const survivalEnd = 1e-14

// IndividualsDriftRunLength is the run length of an individuals chart under drift.
func IndividualsDriftRunLength(c, perValue float64, first int) RunLength {
	return driftSum(perValue, func(t int, alive float64) float64 {
		m := perValue * float64(t-1+first)
		return alive * between(-c-m, c-m)
	})
}

// driftSum adds up survival probabilities; next gives the survival after value t.
func driftSum(perValue float64, next func(t int, alive float64) float64) RunLength {
	mean, second, alive := 0.0, 0.0, 1.0
	for t := 1; alive > survivalEnd; t++ {
		mean += alive
		second += float64(2*t-1) * alive
		alive = next(t, alive)
	}
	return RunLength{Shift: perValue, Mean: mean, SD: math.Sqrt(max(0, second-mean*mean))}
}

// EWMADriftRunLength is the run length of the exponentially weighted mean with
// constant limits under drift.
func EWMADriftRunLength(weight, width, perValue float64, first int) RunLength {
	h := width * math.Sqrt(weight/(2-weight))
	n := ewmaNodes(weight, h, 1)
	x, w := legendre(n, -h, h)
	f, g := make([]float64, n), make([]float64, n)
	return driftSum(perValue, func(t int, _ float64) float64 {
		m := weight * perValue * float64(t-1+first)
		for j := range n {
			if t == 1 {
				g[j] = w[j] * density((x[j]-m)/weight) / weight
				continue
			}
			g[j] = 0
			for l := range n {
				g[j] += f[l] * density((x[j]-(1-weight)*x[l]-m)/weight)
			}
			g[j] *= w[j] / weight
		}
		f, g = g, f
		return sum(f)
	})
}

// CusumDriftRunLength is the run length of the upper cumulative sum under an upward
// drift.
func CusumDriftRunLength(k, h, perValue float64, first int) RunLength {
	n := cusumNodes(h, 1)
	x, w := legendre(n, 0, h)
	atom := 1.0
	f, g := make([]float64, n), make([]float64, n)
	return driftSum(perValue, func(t int, _ float64) float64 {
		m := perValue * float64(t-1+first)
		down := atom * below(k-m)
		for l := range n {
			down += f[l] * below(k-x[l]-m)
		}
		for j := range n {
			g[j] = atom * density(x[j]+k-m)
			for l := range n {
				g[j] += f[l] * density(x[j]-x[l]+k-m)
			}
			g[j] *= w[j]
		}
		atom = down
		f, g = g, f
		return atom + sum(f)
	})
}
