package fit

import "math"

// ln10 converts decadic exponents.
const ln10 = math.Ln10

// maxSteps is the largest number of dissociation steps a Problem may have.
const maxSteps = 4

// species fills f (n+1) with the shares of H_nX, H_(n-1)X, ... X at one pH,
// ft (n+1) with d f / d pH and, when fp is not nil, fp (n*(n+1), one row per
// constant) with d f / d pKa.
//
//	f_j = 10^(j pH - pKa_1 - ... - pKa_j) / sum over j
//
// The largest exponent is taken out first (log-sum-exp), so every share is
// right to rounding for any pH and any spacing of the constants, in ascending
// order or not. Source: mass action.
func species(pH float64, pka, f, ft, fp []float64) {
	n := len(pka)
	var l [maxSteps + 1]float64
	top := 0.0
	for j := 1; j <= n; j++ {
		l[j] = l[j-1] + pH - pka[j-1]
		if l[j] > top {
			top = l[j]
		}
	}
	sum := 0.0
	for j := 0; j <= n; j++ {
		f[j] = math.Exp(ln10 * (l[j] - top))
		sum += f[j]
	}
	mean := 0.0
	for j := 0; j <= n; j++ {
		f[j] /= sum
		mean += float64(j) * f[j]
	}
	for j := 0; j <= n; j++ {
		ft[j] = ln10 * f[j] * (float64(j) - mean)
	}
	if fp == nil {
		return
	}
	for k := 1; k <= n; k++ {
		beyond := 0.0 // share of the forms that have lost proton k
		for j := k; j <= n; j++ {
			beyond += f[j]
		}
		row := fp[(k-1)*(n+1) : k*(n+1)]
		for j := range row {
			if j >= k {
				row[j] = -ln10 * f[j] * (1 - beyond)
			} else {
				row[j] = ln10 * f[j] * beyond
			}
		}
	}
}
