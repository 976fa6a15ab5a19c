// Package acidbase holds the solution chemistry that a pKa stands on: shares
// of the forms of an acid, activity coefficients, water, temperature, standard
// buffers, buffer recipes, series extrapolated to a reference condition, the
// calibration of a glass electrode, and published indicator equations.
//
// Quantities are pH (activity scale unless said otherwise), degrees Celsius,
// mol/kg of water or mol/L as named, millivolt. Standard uncertainties are one
// standard deviation. Where a figure is published, its source stands beside it.
//
// The package is pure: it knows no file, database, queue, logger or clock.
package acidbase

import "math"

// Fractions writes the shares of the n+1 forms of an n-step acid at one pH
// into alpha. Index j is the number of protons lost: alpha[0] is the acid form.
// pKa holds the n step constants in the order in which protons are lost; they
// need not be ascending or separated. len(alpha) must be len(pKa)+1.
//
// The largest exponent is taken out first, so nothing overflows and a share
// keeps its relative precision down to 1e-300.
func Fractions(alpha []float64, pH float64, pKa []float64) {
	_ = alpha[len(pKa)]
	exponent, largest := 0.0, 0.0
	alpha[0] = 0
	for j, pk := range pKa {
		exponent += pH - pk
		alpha[j+1] = exponent
		largest = math.Max(largest, exponent)
	}
	sum := 0.0
	for j := range len(pKa) + 1 {
		alpha[j] = math.Exp(math.Ln10 * (alpha[j] - largest))
		sum += alpha[j]
	}
	for j := range len(pKa) + 1 {
		alpha[j] /= sum
	}
}

// FractionsGrad does what Fractions does and adds the derivatives with respect
// to pH, dPH[j] = d alpha_j / d pH (n+1 values), and to the step constants,
// dPKa[j*n+k] = d alpha_j / d pKa_k ((n+1)*n values). Either may be nil.
//
// The derivatives are sums of products of one sign wherever a difference would
// lose digits, so they stay right in the far tails.
func FractionsGrad(alpha, dPH, dPKa []float64, pH float64, pKa []float64) {
	Fractions(alpha, pH, pKa)
	n := len(pKa)
	if dPH != nil {
		for j := 0; j <= n; j++ {
			s := 0.0
			for l := 0; l <= n; l++ {
				s += float64(j-l) * alpha[l]
			}
			dPH[j] = math.Ln10 * alpha[j] * s
		}
	}
	if dPKa == nil {
		return
	}
	for k := range n {
		fewer, more := 0.0, 0.0 // shares of the forms before and after step k
		for l := 0; l <= k; l++ {
			fewer += alpha[l]
		}
		for l := k + 1; l <= n; l++ {
			more += alpha[l]
		}
		for j := 0; j <= n; j++ {
			if j > k {
				dPKa[j*n+k] = -math.Ln10 * alpha[j] * fewer
			} else {
				dPKa[j*n+k] = math.Ln10 * alpha[j] * more
			}
		}
	}
}

// MeanProtonsLost is the mean number of protons lost at one pH, 0..n.
func MeanProtonsLost(pH float64, pKa []float64) float64 {
	var room [8]float64
	var alpha []float64
	if len(pKa) < len(room) {
		alpha = room[:len(pKa)+1]
	} else {
		alpha = make([]float64, len(pKa)+1)
	}
	Fractions(alpha, pH, pKa)
	mean := 0.0
	for j, a := range alpha {
		mean += float64(j) * a
	}
	return mean
}

// TwoForm is the classical estimate from one wavelength,
// pKa = pH - log10((A - aAcid)/(aBase - A)) (Henderson 1908, Hasselbalch 1917),
// with its standard uncertainty from the noise sigmaA of A alone: a sum of two
// reciprocals, because the same A stands in numerator and denominator.
// It is NaN when A does not lie between the limits.
func TwoForm(pH, a, aAcid, aBase, sigmaA float64) (pKa, u float64) {
	ratio := (a - aAcid) / (aBase - a)
	if !(ratio > 0) {
		return math.NaN(), math.NaN()
	}
	u = sigmaA / math.Ln10 * math.Abs(1/(a-aAcid)+1/(aBase-a))
	return pH - math.Log10(ratio), u
}
