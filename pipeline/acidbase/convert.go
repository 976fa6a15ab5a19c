package acidbase

import (
	"fmt"
	"math"
	"strings"
)

// Constant is the kind of an acid dissociation constant. A number without its
// kind cannot be compared: the kinds differ by 0.1 to 0.4 at I = 0.1.
type Constant int

// The kinds of constants. The zero value is what a pH meter and an absorbance give.
const (
	Mixed         Constant = iota // activity of H+, concentrations of the two forms
	Concentration                 // all three as concentrations
	Thermodynamic                 // all three as activities
)

// String names the kind as it is printed beside every result.
func (c Constant) String() string {
	switch c {
	case Concentration:
		return "concentration"
	case Thermodynamic:
		return "thermodynamic"
	}
	return "mixed"
}

// ParseConstant reads "mixed", "concentration" (or "stoichiometric") and
// "thermodynamic". An empty word is mixed.
func ParseConstant(word string) (Constant, error) {
	switch strings.ToLower(strings.TrimSpace(word)) {
	case "", "mixed":
		return Mixed, nil
	case "concentration", "stoichiometric":
		return Concentration, nil
	case "thermodynamic":
		return Thermodynamic, nil
	}
	return Mixed, fmt.Errorf("kind of constant %q is not known: use mixed, concentration or thermodynamic", word)
}

// A Term is one row of an uncertainty: an input named by its key, the
// sensitivity of the result to it and the standard uncertainty of the input.
// Terms with equal keys in two results are the same error; a term without a key
// belongs to its result alone.
type Term struct {
	Key  string  `json:"key"`
	Name string  `json:"name"`
	C    float64 `json:"c"` // d result / d input
	U    float64 `json:"u"` // standard uncertainty of the input, Unit
	Unit string  `json:"unit"`
}

// Combined is the root sum of squares of the terms. Terms of one key must name
// the same input and uncertainty: their sensitivities are added first.
func Combined(terms []Term) float64 {
	sum := 0.0
	for i, t := range terms {
		c := t.C
		repeated := false
		for j, o := range terms {
			if o.Key != t.Key || j == i || t.Key == "" {
				continue
			}
			if j < i {
				repeated = true
				break
			}
			c += o.C
		}
		if !repeated {
			sum += c * c * t.U * t.U
		}
	}
	return math.Sqrt(sum)
}

// Conditions are those under which a constant was measured.
type Conditions struct {
	TemperatureC float64
	Ionic        float64 // ionic strength, in Basis
	UIonic       float64 // its standard uncertainty
	IonicKey     string  // key of the error of Ionic, "" for "ionic-strength"
	Model        Model
	Water        Water
	Basis        Basis
	SizeAcid     float64 // angstrom, Extended only; 0: DefaultSize
	SizeBase     float64

	// Zwitterion says that the acid form carries its charges apart and behaves
	// as an ion pair (methyl red, methyl orange): its constant hardly moves with
	// ionic strength. No correction is made and its size is the uncertainty.
	Zwitterion bool
}

// Converted is a constant of another kind with what the step added.
type Converted struct {
	PKa   float64
	Kind  Constant
	Shift float64 // added to the input
	A     float64 // Debye-Hueckel A used, in the basis of the conditions
	Terms []Term  // uncertainty added by the step: ionic strength and the model
	Text  string  // how it was done, in one sentence
}

// ModelKey is the key of the error of an activity model: everybody who uses
// the model shares it.
func (m Model) ModelKey() string { return "activity-model:" + m.String() }

// ModelUncertainty is the standard uncertainty that the model adds to a shift
// of a constant by -log10 gamma times multiple at an ionic strength: 0.02/3 per
// unit multiple at I = 0.1 in proportion to I, our choice after the spread of
// published models and the 0.01 to 0.015 by which standard buffers are missed.
func (m Model) ModelUncertainty(multiple, ionic float64) float64 {
	return 0.02 / 3 * math.Abs(multiple) * ionic / 0.1
}

// Convert turns a constant of one kind into another. z is the charge of the
// acid form. With f(I) = -log10 of the activity coefficient of a singly
// charged ion,
//
//	mixed         = thermodynamic + (2z-1) f(I)
//	concentration = thermodynamic + 2(z-1) f(I)
//
// The terms hold the sensitivity to ionic strength and the model's own
// uncertainty, signed, so that they can be joined to a budget by key.
func Convert(pKa float64, from, to Constant, z int, c Conditions) (Converted, error) {
	if math.IsNaN(pKa) || math.IsInf(pKa, 0) {
		return Converted{}, fmt.Errorf("convert %s to %s constant: pKa is %v, expected a number", from, to, pKa)
	}
	out := Converted{PKa: pKa, Kind: to}
	a, b := DebyeHueckel(c.TemperatureC, c.Water, c.Basis)
	out.A = a
	if from == to {
		out.Text = fmt.Sprintf("%s constant, not converted", to)
		return out, nil
	}
	if err := c.Model.Check(c.Ionic); err != nil {
		return Converted{}, fmt.Errorf("convert %s to %s constant: %w", from, to, err)
	}
	above := func(k Constant, ionic float64) float64 { return c.above(k, z, ionic, a, b) }
	shift := above(to, c.Ionic) - above(from, c.Ionic)
	h := math.Max(1e-6, 1e-4*c.Ionic)
	lo := math.Max(0, c.Ionic-h)
	slope := (above(to, c.Ionic+h) - above(from, c.Ionic+h) - above(to, lo) + above(from, lo)) / (c.Ionic + h - lo)
	multiple := kindMultiple(to, z) - kindMultiple(from, z)
	key := c.IonicKey
	if key == "" {
		key = "ionic-strength"
	}
	model := Term{Key: c.Model.ModelKey(), Name: "activity model " + c.Model.String(), C: 1, U: c.Model.ModelUncertainty(multiple, c.Ionic), Unit: "pH"}
	if multiple < 0 {
		model.C = -1
	}
	if c.Zwitterion {
		model.U = math.Hypot(model.U, math.Abs(shift))
		out.Terms = []Term{model}
		out.Text = fmt.Sprintf("%s taken as %s constant: a zwitterionic acid form behaves as an ion pair; the usual shift %+.3f is its uncertainty", from, to, shift)
		return out, nil
	}
	out.Shift, out.PKa = shift, pKa+shift
	out.Terms = []Term{{Key: key, Name: "ionic strength", C: slope, U: c.UIonic, Unit: c.Basis.String()}, model}
	out.Text = fmt.Sprintf("%s to %s constant at I = %.4g %s, %.4g °C: %+.4f by %s with A = %.4f (%s)",
		from, to, c.Ionic, c.Basis, c.TemperatureC, shift, c.Model, a, c.Water)
	return out, nil
}

// kindMultiple is the multiple of f(I) by which a kind lies above the thermodynamic constant.
func kindMultiple(k Constant, z int) float64 {
	switch k {
	case Mixed:
		return float64(2*z - 1)
	case Concentration:
		return float64(2 * (z - 1))
	}
	return 0
}

// above is how far a kind lies above the thermodynamic constant.
func (c Conditions) above(k Constant, z int, ionic, a, b float64) float64 {
	if k == Thermodynamic {
		return 0
	}
	// Ka0 = aH gBase cBase / (gAcid cAcid), so mixed - thermodynamic = log gBase - log gAcid.
	d := c.Model.LogGamma(z-1, ionic, a, b, c.SizeBase) - c.Model.LogGamma(z, ionic, a, b, c.SizeAcid)
	if k == Concentration {
		d += c.Model.LogGamma(1, ionic, a, b, 9) // hydrogen ion, 9 angstrom
	}
	return d
}
