package acidbase

import "math"

// VantHoff moves a constant from temperature theta to t (both degrees Celsius)
// with the enthalpy of ionisation in kJ/mol, taken as constant (van 't Hoff 1884).
func VantHoff(pKa, enthalpyKJ, thetaC, tC float64) float64 {
	return ClarkeGlew(pKa, enthalpyKJ, 0, thetaC, tC)
}

// ClarkeGlew moves a constant from theta to t with enthalpy in kJ/mol and heat
// capacity of ionisation in J/(mol K), the latter taken as constant (Clarke &
// Glew, Trans. Faraday Soc. 62 (1966) 539):
//
//	pK(T) = pK + dH/(R ln10) (1/T - 1/theta) - dCp/(R ln10) (theta/T - 1 + ln(T/theta))
func ClarkeGlew(pKa, enthalpyKJ, heatCapacity, thetaC, tC float64) float64 {
	dh, dc := clarkeGlewRow(thetaC, tC)
	return pKa + dh*enthalpyKJ + dc*heatCapacity
}

// clarkeGlewRow gives d pKa(t) / d enthalpy (per kJ/mol) and / d heat capacity (per J/(mol K)).
func clarkeGlewRow(thetaC, tC float64) (enthalpy, capacity float64) {
	t, theta := tC+Kelvin, thetaC+Kelvin
	x := (t - theta) / theta
	enthalpy = -1000 / (GasConstant * math.Ln10) * x / t
	// theta/T - 1 + ln(T/theta), written so that it keeps its digits near theta.
	capacity = -(math.Log1p(x) - x/(1+x)) / (GasConstant * math.Ln10)
	return enthalpy, capacity
}

// DPKaDT is the temperature coefficient of a constant in 1/K at tC for an
// enthalpy in kJ/mol valid at tC: -dH/(R ln10 T^2).
func DPKaDT(enthalpyKJ, tC float64) float64 {
	t := tC + Kelvin
	return -1000 * enthalpyKJ / (GasConstant * math.Ln10 * t * t)
}

// EnthalpyKJ is the enthalpy of ionisation in kJ/mol that belongs to a
// temperature coefficient in 1/K at tC.
func EnthalpyKJ(dPKaDT, tC float64) float64 {
	t := tC + Kelvin
	return -dPKaDT * GasConstant * math.Ln10 * t * t / 1000
}

// ToTemperature moves a constant from one temperature to another and gives
// the terms that this adds: temperature (key temperatureKey, uncertainty uT in
// K, with the sign of an error of the measured temperature) and enthalpy (key
// enthalpyKey, uncertainty uH in kJ/mol).
func ToTemperature(pKa, enthalpyKJ, heatCapacity, fromC, toC, uT, uH float64, temperatureKey, enthalpyKey string) (float64, []Term) {
	moved := ClarkeGlew(pKa, enthalpyKJ, heatCapacity, fromC, toC)
	dh, _ := clarkeGlewRow(fromC, toC)
	// Reading the cell too warm by one kelvin makes the correction start from
	// the wrong place: d moved / d fromC = -dpKa/dT at fromC.
	return moved, []Term{
		{Key: temperatureKey, Name: "temperature", C: -DPKaDT(enthalpyKJ, fromC), U: uT, Unit: "K"},
		{Key: enthalpyKey, Name: "enthalpy of ionisation", C: dh, U: uH, Unit: "kJ/mol"},
	}
}

// CarbonatePK are the two constants of carbonic acid at tC and I = 0 (Plummer &
// Busenberg, Geochim. Cosmochim. Acta 46 (1982) 1011), 0..90 C.
func CarbonatePK(tC float64) (first, second float64) {
	t := tC + Kelvin
	lg := math.Log10(t)
	first = 356.3094 + 0.06091964*t - 21834.37/t - 126.8339*lg + 1684915/(t*t)
	second = 107.8871 + 0.03252849*t - 5151.79/t - 38.92561*lg + 563713.9/(t*t)
	return first, second
}

// AmmoniumPK is the constant of the ammonium ion at tC and I = 0 (Bates &
// Pinching, J. Res. NBS 42 (1949) 419), 0..50 C.
func AmmoniumPK(tC float64) float64 {
	t := tC + Kelvin
	return 2835.76/t - 0.6322 + 0.001225*t
}
