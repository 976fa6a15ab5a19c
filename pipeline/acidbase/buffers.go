package acidbase

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// A Buffer is the pH(S) of a standard buffer at one temperature, with its source.
type Buffer struct {
	Key          string  // "phosphate", "phthalate-nbs", ...
	Name         string  // for people
	Recipe       string  // composition
	PH           float64 // pH(S) at TemperatureC
	U            float64 // standard uncertainty within the scale: between good preparations
	UConvention  float64 // standard uncertainty added by the Bates-Guggenheim convention when pH is to be an activity
	DPHDT        float64 // 1/K at TemperatureC
	TemperatureC float64
	At25         float64 // pH(S) at 25 C
	Source       string
}

// UScale is the standard uncertainty that the Bates-Guggenheim convention adds
// to a buffer value taken as an activity: U = 0.01 with k = 2 (Buck et al.,
// Pure Appl. Chem. 74 (2002) 2169, from memory).
const UScale = 0.005

type tablePoint struct{ t, ph float64 }

// A standard is one buffer as published: a table or an equation.
type standard struct {
	key, name, recipe, source string
	u                         float64
	table                     []tablePoint
	equation                  func(t float64) float64 // of degrees Celsius
	low, high                 float64                 // range of the equation
}

// standards lists the buffers. Values from 0 to 60 C, 1962 table and 1969
// carbonate and citrate from memory and checked against the smoothing equations
// and the two-decimal Japanese table; uncertainties after Buck et al. 2002
// (primary standards U = 0.003 to 0.004, k = 2).
func standards() []standard {
	return []standard{
		{key: "tetroxalate", name: "potassium tetroxalate", recipe: "0.05 mol/kg KH3(C2O4)2·2H2O", source: "Bates, J. Res. NBS 66A (1962) 179", u: 0.0025, table: []tablePoint{{0, 1.666}, {5, 1.668}, {10, 1.670}, {15, 1.672}, {20, 1.675}, {25, 1.679}, {30, 1.683}, {35, 1.688}, {37, 1.690}, {40, 1.694}, {45, 1.700}, {50, 1.707}, {55, 1.715}, {60, 1.723}}},
		{key: "tartrate", name: "potassium hydrogen tartrate", recipe: "saturated at 25 °C", source: "Bates, J. Res. NBS 66A (1962) 179", u: 0.0015, table: []tablePoint{{25, 3.557}, {30, 3.552}, {35, 3.549}, {37, 3.548}, {40, 3.547}, {45, 3.547}, {50, 3.549}, {55, 3.554}, {60, 3.560}}},
		{key: "citrate", name: "potassium dihydrogen citrate", recipe: "0.05 mol/kg", source: "Staples & Bates, J. Res. NBS 73A (1969) 37", u: 0.0015, table: []tablePoint{{0, 3.863}, {5, 3.84}, {10, 3.82}, {15, 3.802}, {20, 3.788}, {25, 3.776}, {30, 3.766}, {35, 3.759}, {37, 3.756}, {40, 3.753}, {45, 3.75}, {50, 3.749}}},
		{key: "phthalate", name: "potassium hydrogen phthalate", recipe: "0.05 mol/kg", source: "IUPAC 2002; Buck et al., Pure Appl. Chem. 74 (2002) 2169", u: 0.0015, table: []tablePoint{{0, 4.0}, {5, 3.998}, {10, 3.997}, {15, 3.998}, {20, 4.0}, {25, 4.005}, {30, 4.011}, {35, 4.018}, {37, 4.022}, {40, 4.027}, {50, 4.05}}},
		{key: "phthalate-nbs", name: "potassium hydrogen phthalate", recipe: "0.05 mol/kg", source: "Bates, J. Res. NBS 66A (1962) 179", u: 0.0015, table: []tablePoint{{0, 4.003}, {5, 3.999}, {10, 3.998}, {15, 3.999}, {20, 4.002}, {25, 4.008}, {30, 4.015}, {35, 4.024}, {37, 4.028}, {40, 4.035}, {45, 4.047}, {50, 4.060}, {55, 4.075}, {60, 4.091}}},
		{key: "phosphate", name: "phosphate 1:1", recipe: "0.025 mol/kg KH2PO4 + 0.025 mol/kg Na2HPO4", source: "Bates, J. Res. NBS 66A (1962) 179", u: 0.0015, table: []tablePoint{{0, 6.984}, {5, 6.951}, {10, 6.923}, {15, 6.900}, {20, 6.881}, {25, 6.865}, {30, 6.853}, {35, 6.844}, {37, 6.841}, {40, 6.838}, {45, 6.834}, {50, 6.833}, {55, 6.833}, {60, 6.836}}},
		{key: "phosphate-1:3.5", name: "phosphate 1:3.5", recipe: "0.008695 mol/kg KH2PO4 + 0.03043 mol/kg Na2HPO4", source: "Bates, J. Res. NBS 66A (1962) 179", u: 0.0015, table: []tablePoint{{0, 7.534}, {5, 7.500}, {10, 7.472}, {15, 7.448}, {20, 7.429}, {25, 7.413}, {30, 7.400}, {35, 7.389}, {37, 7.386}, {40, 7.380}, {45, 7.373}, {50, 7.367}}},
		{key: "borax", name: "borax", recipe: "0.01 mol/kg Na2B4O7·10H2O", source: "Bates, J. Res. NBS 66A (1962) 179", u: 0.002, table: []tablePoint{{0, 9.464}, {5, 9.395}, {10, 9.332}, {15, 9.276}, {20, 9.225}, {25, 9.180}, {30, 9.139}, {35, 9.102}, {37, 9.088}, {40, 9.068}, {45, 9.038}, {50, 9.010}, {55, 8.985}, {60, 8.962}}},
		{key: "carbonate", name: "carbonate", recipe: "0.025 mol/kg NaHCO3 + 0.025 mol/kg Na2CO3", source: "Staples & Bates, J. Res. NBS 73A (1969) 37", u: 0.002, table: []tablePoint{{0, 10.317}, {5, 10.245}, {10, 10.179}, {15, 10.118}, {20, 10.062}, {25, 10.012}, {30, 9.966}, {35, 9.926}, {37, 9.91}, {40, 9.889}, {45, 9.856}, {50, 9.828}}},
		{key: "calcium-hydroxide", name: "calcium hydroxide", recipe: "saturated at 25 °C", source: "Bates, J. Res. NBS 66A (1962) 179", u: 0.005, table: []tablePoint{{0, 13.424}, {5, 13.207}, {10, 13.003}, {15, 12.810}, {20, 12.627}, {25, 12.454}, {30, 12.289}, {35, 12.133}, {37, 12.072}, {40, 11.984}, {45, 11.841}, {50, 11.705}, {55, 11.574}, {60, 11.449}}},
		{key: "phthalate-1977", name: "potassium hydrogen phthalate", recipe: "0.05 mol/kg", source: "Hetzer, Durst, Robinson & Bates, J. Res. NBS 81A (1977) 21", u: 0.0015, low: 0, high: 60,
			equation: func(t float64) float64 {
				k := t + Kelvin
				return 2073.44/k - 13.3270 + 0.045199*k - 3.4846e-5*k*k
			}},
		{key: "phthalate-1946", name: "potassium hydrogen phthalate", recipe: "0.05 mol/kg", source: "Hamer, Pinching & Acree, J. Res. NBS 36 (1946) 47", u: 0.002, low: 0, high: 60,
			equation: func(t float64) float64 { return 4.000 + 4.79e-5*(t-15)*(t-15) }},
	}
}

// at is the value of a standard at t degrees Celsius: the equation, or a cubic
// through the four nearest tabulated points.
func (s standard) at(t float64) float64 {
	if s.equation != nil {
		return s.equation(t)
	}
	n := len(s.table)
	i := 0
	for i < n && s.table[i].t < t {
		i++
	}
	lo := min(max(i-2, 0), max(n-4, 0))
	hi := min(lo+4, n)
	sum := 0.0
	for a := lo; a < hi; a++ {
		term := s.table[a].ph
		for b := lo; b < hi; b++ {
			if b != a {
				term *= (t - s.table[b].t) / (s.table[a].t - s.table[b].t)
			}
		}
		sum += term
	}
	return sum
}

func (s standard) limits() (low, high float64) {
	if s.equation != nil {
		return s.low, s.high
	}
	return s.table[0].t, s.table[len(s.table)-1].t
}

func (s standard) buffer(t float64) (Buffer, error) {
	low, high := s.limits()
	if math.IsNaN(t) || t < low || t > high {
		return Buffer{}, fmt.Errorf("buffer %s: %v °C is outside %.0f to %.0f °C, where %s states it; give the value from the certificate", s.key, t, low, high, s.source)
	}
	const h = 0.5
	a, b := math.Max(low, t-h), math.Min(high, t+h)
	return Buffer{Key: s.key, Name: s.name, Recipe: s.recipe, Source: s.source, U: s.u, UConvention: UScale,
		PH: s.at(t), DPHDT: (s.at(b) - s.at(a)) / (b - a), TemperatureC: t, At25: s.at(25)}, nil
}

// BufferAt is the pH(S) of a standard buffer at tC. name is a key ("phosphate",
// "phthalate-nbs"; BufferKeys lists them) or the nominal value at 25 C
// ("6.865", "4.01", "10.012"), which must lie within 0.02 of a standard.
// Phthalate without more is the value of IUPAC 2002 (4.005 at 25 C).
func BufferAt(name string, tC float64) (Buffer, error) {
	word := strings.ToLower(strings.TrimSpace(name))
	for _, s := range standards() {
		if s.key == word {
			return s.buffer(tC)
		}
	}
	if v, err := strconv.ParseFloat(word, 64); err == nil {
		return BufferNear(v, tC)
	}
	return Buffer{}, fmt.Errorf("buffer %q is not known; expected a nominal pH at 25 °C or one of %s", name, strings.Join(BufferKeys(), ", "))
}

// BufferNear is BufferAt for a nominal pH at 25 C.
func BufferNear(nominal, tC float64) (Buffer, error) {
	best, distance := standard{}, math.Inf(1)
	for _, s := range standards() {
		if strings.HasPrefix(s.key, "phthalate-") {
			continue // other versions only by name
		}
		if d := math.Abs(s.at(25) - nominal); d < distance {
			best, distance = s, d
		}
	}
	if !(distance <= 0.02) {
		return Buffer{}, fmt.Errorf("buffer of nominal pH %v is not a standard with a published temperature table (nearest: %s, %.3f); give the value from its certificate", nominal, best.key, best.at(25))
	}
	return best.buffer(tC)
}

// BufferKeys lists the names that BufferAt knows.
func BufferKeys() []string {
	var keys []string
	for _, s := range standards() {
		keys = append(keys, s.key)
	}
	return keys
}
