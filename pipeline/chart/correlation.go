package chart

import (
	"math"

	"gonum.org/v1/gonum/stat"
)

// Lag1 is the correlation of x with itself one value later,
// sum (x_t - m)(x_(t+1) - m) / sum (x_t - m)^2, as the NIST StRD certificates define
// it. It is 0 for fewer than two values and for a constant series.
func Lag1(x []float64) float64 {
	if len(x) < 2 {
		return 0
	}
	m := stat.Mean(x, nil)
	var num, den float64
	for i, v := range x {
		den += (v - m) * (v - m)
		if i+1 < len(x) {
			num += (v - m) * (x[i+1] - m)
		}
	}
	if den == 0 {
		return 0
	}
	return num / den
}

// lag1P is the one-sided probability of a lag-1 correlation of at least r among n
// independent values: normal with mean -1/(n-1) and variance (n-2)/(n-1)^2
// (Anderson 1942).
func lag1P(r float64, n int) float64 {
	if n < 4 {
		return 1
	}
	f := float64(n)
	return below(-(r*(f-1) + 1) / math.Sqrt(f-2))
}

// unbiasedLag1 takes the small-sample bias -(1+3 rho)/n out of a lag-1 correlation
// (Marriott and Pope 1954) and keeps the result below 0.9, where twenty nights can
// no longer tell a correlation from a trend.
func unbiasedLag1(r float64, n int) float64 {
	if n <= 4 {
		return r
	}
	f := float64(n)
	return min(0.9, (f*r+1)/(f-3))
}

// DurbinWatson is the statistic of Durbin and Watson 1950 for residuals e:
// sum (e_t - e_(t-1))^2 / sum e_t^2, near 2 without day-to-day correlation, near 0
// when neighbours agree. It is NaN when all residuals are zero.
func DurbinWatson(e []float64) float64 {
	var num, den float64
	for i, v := range e {
		den += v * v
		if i > 0 {
			num += (v - e[i-1]) * (v - e[i-1])
		}
	}
	return num / den
}

// spreadShrink is the share of the variance of a first-order correlated series that
// its sample variance of n values recovers on average:
// 1 - 2/(n-1) sum (1-k/n) phi^k.
func spreadShrink(phi float64, n int) float64 {
	if phi == 0 || n < 2 {
		return 1
	}
	sum, p := 0.0, 1.0
	for k := 1; k < n; k++ {
		p *= phi
		sum += (1 - float64(k)/float64(n)) * p
	}
	return max(0.1, 1-2/float64(n-1)*sum)
}
