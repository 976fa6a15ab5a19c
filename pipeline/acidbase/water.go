package acidbase

import "math"

// Constants of CODATA 2018 and the SI.
const (
	GasConstant = 8.31446261815324 // J/(mol K)
	Faraday     = 96485.33212331   // C/mol
	Kelvin      = 273.15           // 0 C in K

	avogadro       = 6.02214076e23
	boltzmann      = 1.380649e-23
	elementary     = 1.602176634e-19
	vacuum         = 8.8541878128e-12 // F/m
	molarMassWater = 0.018015268      // kg/mol, IAPWS
)

// NernstSlope is the ideal slope RT ln10 / F of a hydrogen-ion electrode in
// mV per pH at tC degrees Celsius (CODATA 2018); 59.1593 at 25 C.
func NernstSlope(tC float64) float64 {
	return 1000 * GasConstant * (tC + Kelvin) * math.Ln10 / Faraday
}

// DensityTanaka is the density of air-free water in kg/m3 at one atmosphere,
// 0..40 C (Tanaka, Girard, Davis, Peuto & Bignell, Metrologia 38 (2001) 301).
func DensityTanaka(tC float64) float64 {
	d := tC - 3.983035
	return 999.97495 * (1 - d*d*(tC+301.797)/(522528.9*(tC+69.34881)))
}

// DensityKell is the density of water in kg/m3 at one atmosphere, 0..100 C
// (Kell, J. Chem. Eng. Data 20 (1975) 97).
func DensityKell(tC float64) float64 {
	num := 999.83952 + tC*(16.945176+tC*(-7.9870401e-3+tC*(-46.170461e-6+tC*(105.56302e-9-280.54253e-12*tC))))
	return num / (1 + 16.879850e-3*tC)
}

// Density is the density of water in kg/m3: Tanaka 2001 up to 40 C, Kell 1975
// above, where the former is not stated. The two agree to 0.003 kg/m3 below.
func Density(tC float64) float64 {
	if tC <= 40 {
		return DensityTanaka(tC)
	}
	return DensityKell(tC)
}

// PermittivityMM is the relative permittivity of water at one atmosphere,
// 0..100 C (Malmberg & Maryott, J. Res. NBS 56 (1956) 1).
func PermittivityMM(tC float64) float64 {
	return 87.740 + tC*(-0.40008+tC*(9.398e-4-1.410e-6*tC))
}

// PermittivityBP is the relative permittivity of water at tC and a pressure in
// bar (Bradley & Pitzer, J. Phys. Chem. 83 (1979) 1599).
func PermittivityBP(tC, bar float64) float64 {
	t := tC + Kelvin
	d1000 := 3.4279e2 * math.Exp(t*(-5.0866e-3+9.4690e-7*t))
	c := -2.0525 + 3.1159e3/(t-1.8289e2)
	b := -8.0325e3 + 4.2142e6/t + 2.1417*t
	return d1000 + c*math.Log((b+bar)/(b+1000))
}

// PermittivityIAPWS is the relative permittivity of water of density rho kg/m3
// at kelvin K (IAPWS R8-97; Fernandez, Goodwin, Lemmon, Levelt Sengers &
// Williams, J. Phys. Chem. Ref. Data 26 (1997) 1125).
func PermittivityIAPWS(rho, kelvin float64) float64 {
	// The release fixes its own values of the constants.
	const (
		n   = 6.0221367e23
		k   = 1.380658e-23
		e0  = 8.854187817620389e-12
		pol = 1.636e-40
		dip = 6.138e-30
		m   = 0.018015268
	)
	terms := [...]struct{ c, i, j float64 }{
		{0.978224486826, 1, 0.25}, {-0.957771379375, 1, 1}, {0.237511794148, 1, 2.5},
		{0.714692244396, 2, 1.5}, {-0.298217036956, 3, 1.5}, {-0.108863472196, 3, 2.5},
		{0.949327488264e-1, 4, 2}, {-0.980469816509e-2, 5, 2}, {0.165167634970e-4, 6, 5},
		{0.937359795772e-4, 7, 0.5}, {-0.123179218720e-9, 10, 10},
	}
	delta, tau := rho/322, 647.096/kelvin
	g := 1 + 0.196096504426e-2*delta*math.Pow(kelvin/228-1, -1.2)
	for _, t := range terms {
		g += t.c * math.Pow(delta, t.i) * math.Pow(tau, t.j)
	}
	a := n * dip * dip * rho * g / (m * e0 * k * kelvin)
	b := n * pol * rho / (3 * m * e0)
	root := math.Sqrt(9 + 2*a + 18*b + a*a + 10*a*b + 9*b*b)
	return (1 + a + 5*b + root) / (4 - 4*b)
}

// Water names a permittivity equation.
type Water int

// The permittivity equations available. The zero value is the default.
const (
	MalmbergMaryott Water = iota // 1956
	BradleyPitzer                // 1979, 1 bar
	IAPWS                        // R8-97, 1997
)

// String names the equation with its year.
func (w Water) String() string {
	switch w {
	case BradleyPitzer:
		return "Bradley & Pitzer 1979"
	case IAPWS:
		return "IAPWS R8-97"
	}
	return "Malmberg & Maryott 1956"
}

// Permittivity is the relative permittivity of water at tC by the named equation.
func (w Water) Permittivity(tC float64) float64 {
	switch w {
	case BradleyPitzer:
		return PermittivityBP(tC, 1)
	case IAPWS:
		return PermittivityIAPWS(Density(tC), tC+Kelvin)
	}
	return PermittivityMM(tC)
}

// Basis says whether ionic strength counts per kg of water or per litre.
type Basis int

// The bases of concentration. The zero value is the default.
const (
	Molal Basis = iota // mol/kg of water
	Molar              // mol/L
)

// String names the unit.
func (b Basis) String() string {
	if b == Molar {
		return "mol/L"
	}
	return "mol/kg"
}

// DebyeHueckelFrom computes the Debye-Hueckel parameters of a medium of
// relative permittivity eps at kelvin K: A in (mol/kg)^-1/2 or (mol/L)^-1/2,
// decadic, and B in the same per angstrom. rho is the density in kg/m3 for the
// molal basis, 1000 for the molar basis.
//
//	A = e^3 sqrt(2 N rho) / (ln10 8 pi (eps0 eps k T)^1.5)
//	B = e sqrt(2 N rho / (eps0 eps k T))
func DebyeHueckelFrom(eps, kelvin, rho float64) (a, b float64) {
	d := vacuum * eps * boltzmann * kelvin
	a = elementary * elementary * elementary * math.Sqrt(2*avogadro*rho) / (math.Ln10 * 8 * math.Pi * d * math.Sqrt(d))
	b = elementary * math.Sqrt(2*avogadro*rho/d) * 1e-10
	return a, b
}

// DebyeHueckel computes A and B (per angstrom) of water at tC. At 25 C, with
// Malmberg & Maryott 1956, A is 0.5110 molal and 0.5117 molar; values from
// 0.5085 to 0.5117 are in print, so every result says which one it used.
func DebyeHueckel(tC float64, w Water, basis Basis) (a, b float64) {
	rho := Density(tC)
	if basis == Molar {
		rho = 1000
	}
	return DebyeHueckelFrom(w.Permittivity(tC), tC+Kelvin, rho)
}

// PKw is the ion product of water, -log10 Kw on the molal scale, at a density
// in g/cm3 (IAPWS R11-07; Bandura & Lvov, J. Phys. Chem. Ref. Data 35 (2006) 15).
func PKw(gPerCM3, kelvin float64) float64 {
	const n = 6
	q := gPerCM3 * math.Exp(-0.864671+8659.19/kelvin-22786.2/(kelvin*kelvin)*math.Pow(gPerCM3, 2.0/3))
	gas := 6.141500e-1 + 4.825133e4/kelvin - 6.770793e4/(kelvin*kelvin) + 1.010210e7/(kelvin*kelvin*kelvin)
	return -2*n*(math.Log10(1+q)-q/(q+1)*gPerCM3*(0.642044-56.8534/kelvin-0.375754*gPerCM3)) +
		gas + 2*math.Log10(molarMassWater)
}

// PKwAt is PKw of liquid water at one atmosphere and tC.
func PKwAt(tC float64) float64 { return PKw(Density(tC)/1000, tC+Kelvin) }

// PKwNordstrom is the ion product of water after Nordstrom et al. (1990).
func PKwNordstrom(tC float64) float64 {
	t := tC + Kelvin
	return -(-283.971 - 0.05069842*t + 13323/t + 102.24447*math.Log10(t) - 1119669/(t*t))
}
