package rehearse

import "math"

// Physical constants of this room: the molar gas constant and the Faraday
// constant (CODATA 2018, exact by definition of the SI).
const (
	gasConstant = 8.314462618 // J/(mol K)
	faraday     = 96485.33212 // C/mol
	zeroC       = 273.15      // K
)

// nernstMV is the ideal slope of a glass electrode in mV per pH at t C.
func nernstMV(t float64) float64 {
	return 1000 * math.Ln10 * gasConstant * (t + zeroC) / faraday
}

// shares fills dst with the fractions of the forms H_nX, H_(n-1)X ... X at the
// hydrogen ion activity h, given the acidity constants k of the steps in
// order. It multiplies constants up in linear space: term j is K_1...K_j/h^j.
// dst has len(k)+1 elements.
func shares(dst []float64, h float64, k []float64) {
	term, sum := 1.0, 1.0
	dst[0] = 1
	for j, kj := range k {
		term *= kj / h
		dst[j+1] = term
		sum += term
	}
	for j := range dst {
		dst[j] /= sum
	}
}

// permittivity of water at t C, relative (Malmberg & Maryott 1956, from memory).
func permittivity(t float64) float64 {
	return 87.740 - 0.40008*t + 9.398e-4*t*t - 1.410e-6*t*t*t
}

// debyeA is the limiting-law slope for decadic activity coefficients on the
// molar scale, scaled from 0.509 at 25 C with the permittivity of water.
func debyeA(t float64) float64 {
	at25 := permittivity(25) * (25 + zeroC)
	return 0.509 * math.Pow(at25/(permittivity(t)*(t+zeroC)), 1.5)
}

// daviesTerm is f(I) of Davies (1962): sqrt(I)/(1+sqrt(I)) - 0.3 I.
func daviesTerm(ionic float64) float64 {
	s := math.Sqrt(ionic)
	return s/(1+s) - 0.3*ionic
}

// shiftIonic is the change of a mixed pKa between two ionic strengths for an
// acid form of charge z: A(2z-1)[f(to)-f(from)].
func shiftIonic(z int, from, to, t float64) float64 {
	return debyeA(t) * float64(2*z-1) * (daviesTerm(to) - daviesTerm(from))
}

// Thermodynamic turns a mixed constant at ionic strength (mol/L) and t (C)
// into the constant at zero ionic strength, for an acid form of charge z.
func Thermodynamic(mixed float64, z int, ionic, t float64) float64 {
	return mixed - debyeA(t)*float64(2*z-1)*daviesTerm(ionic)
}

// EnthalpySlope is d pKa / dT in 1/K at t (C) for an enthalpy of ionisation in
// kJ/mol (van 't Hoff): -dH/(ln10 R T^2).
func EnthalpySlope(kJ, t float64) float64 {
	k := t + zeroC
	return -1000 * kJ / (math.Ln10 * gasConstant * k * k)
}

// carbonDioxide is the number of protons set free per CO2 taken up at a pH,
// from the two steps of carbonic acid (6.35 and 10.33 at 25 C, common
// textbook values, from memory), faded out below pH 7.5 where the buffers of
// a ladder swallow it.
func carbonDioxide(pH float64) float64 {
	var f [3]float64
	shares(f[:], math.Pow(10, -pH), []float64{math.Pow(10, -6.35), math.Pow(10, -10.33)})
	fade := 1 / (1 + math.Exp(-(pH-7.6)/0.15))
	return (f[1] + 2*f[2]) * fade
}
