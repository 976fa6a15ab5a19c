package acidbase

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// An Ingredient is one substance of a buffer recipe.
type Ingredient struct {
	Name  string  // "KH2PO4", "sodium acetate", "TRIS HCl"; SubstanceNames lists them
	Molar float64 // amount per litre or per kg of water
	URel  float64 // relative standard uncertainty of the amount; 0: taken as exact
}

// ParseRecipe reads "KH2PO4 0.025, Na2HPO4 0.025": substances with amounts in
// mol/L (or mol/kg), separated by commas, semicolons or plus signs.
func ParseRecipe(text string) ([]Ingredient, error) {
	var out []Ingredient
	for part := range strings.FieldsFuncSeq(text, func(r rune) bool { return r == ',' || r == ';' || r == '+' }) {
		part = strings.TrimSpace(part)
		at := strings.LastIndexAny(part, " \t")
		if at < 0 {
			return nil, fmt.Errorf("recipe part %q: expected a substance and its amount in mol/L, as in \"KH2PO4 0.025\"", part)
		}
		v, err := strconv.ParseFloat(part[at+1:], 64)
		if err != nil || !(v >= 0) {
			return nil, fmt.Errorf("recipe part %q: amount %q is not a number in mol/L", part, part[at+1:])
		}
		name := strings.TrimSpace(part[:at])
		if _, ok := substanceNamed(name); !ok {
			return nil, fmt.Errorf("recipe part %q: substance %q is not known; known are %s", part, name, strings.Join(SubstanceNames(), ", "))
		}
		out = append(out, Ingredient{Name: name, Molar: v})
	}
	if len(out) == 0 {
		return nil, fmt.Errorf("recipe %q is empty; expected for example \"KH2PO4 0.025, Na2HPO4 0.025\"", text)
	}
	return out, nil
}

// SubstanceNames lists the substances a recipe may name.
func SubstanceNames() []string {
	var out []string
	for _, s := range substances() {
		out = append(out, s.names[0])
	}
	return out
}

func substanceNamed(name string) (substance, bool) {
	word := strings.ToLower(strings.Join(strings.Fields(name), " "))
	for _, s := range substances() {
		for _, n := range s.names {
			if n == word {
				return s, true
			}
		}
	}
	return substance{}, false
}

// A Species is one dissolved kind of particle.
type Species struct {
	Name   string
	Charge int
	Conc   float64
}

// A Solution is the composition of a buffer recipe at equilibrium.
type Solution struct {
	PH         float64 // activity scale of the model
	UModel     float64 // standard uncertainty of PH from the activity model
	Ionic      float64 // ionic strength, unit of the recipe
	UIonic     float64 // standard uncertainty of Ionic from the amounts
	URecipe    float64 // standard uncertainty of PH from the amounts
	Capacity   float64 // buffer value, d(strong base)/d pH
	Species    []Species
	Model      Model
	A          float64 // Debye-Hueckel A used
	Iterations int
	Beyond     bool // ionic strength lies outside the range of the model
}

// A RecipeOption fixes how a recipe is computed; the zero value is Davies with
// the molal A of Malmberg & Maryott 1956.
type RecipeOption struct {
	Model Model
	Water Water
	Basis Basis
}

// system is an acid with its total concentration in a recipe.
type system struct {
	acid  Acid
	total float64
}

// mixture is a recipe sorted into acid systems and strong ions.
type mixture struct {
	systems []system
	strong  []Species
	tC      float64
	a, b    float64
	option  RecipeOption
	pKw     float64
}

// Speciate computes the pH and the ionic strength of a recipe at tC: charge
// balance over pH by a bracketed root finder inside an iteration on ionic
// strength, with activity coefficients of the chosen model. Carbonate systems
// are closed: no carbon dioxide enters or leaves.
//
// Expect 0.01 to 0.015 of model error at I = 0.1.
func Speciate(recipe []Ingredient, tC float64, o RecipeOption) (*Solution, error) {
	mix, err := mixed(recipe, tC, o)
	if err != nil {
		return nil, err
	}
	out, err := mix.solve()
	if err != nil {
		return nil, err
	}
	// Errors of the amounts are independent; each is propagated by a small change.
	const part = 1e-4
	moved := append([]Ingredient(nil), recipe...)
	var pH, ionic float64
	for i, in := range recipe {
		if in.URel <= 0 || in.Molar <= 0 {
			continue
		}
		moved[i].Molar = in.Molar * (1 + part)
		if mix, err = mixed(moved, tC, o); err != nil {
			return nil, err
		}
		with, err := mix.solve()
		if err != nil {
			return nil, err
		}
		moved[i].Molar = in.Molar
		dp, di := (with.PH-out.PH)/part*in.URel, (with.Ionic-out.Ionic)/part*in.URel
		pH, ionic = pH+dp*dp, ionic+di*di
	}
	out.URecipe, out.UIonic = math.Sqrt(pH), math.Sqrt(ionic)
	return out, nil
}

// RecipeSlope is the temperature coefficient of a recipe's pH in 1/K at tC.
func RecipeSlope(recipe []Ingredient, tC float64, o RecipeOption) (float64, error) {
	const h = 0.5
	var pH [2]float64
	for i, t := range [2]float64{tC - h, tC + h} {
		mix, err := mixed(recipe, t, o)
		if err != nil {
			return 0, err
		}
		s, err := mix.solve()
		if err != nil {
			return 0, err
		}
		pH[i] = s.PH
	}
	return (pH[1] - pH[0]) / (2 * h), nil
}

// solve finds pH and ionic strength.
func (m *mixture) solve() (*Solution, error) {
	o := m.option
	ionic, step := 0.0, math.Inf(1)
	out := &Solution{Model: o.Model, A: m.a}
	for out.Iterations = 1; out.Iterations <= 200; out.Iterations++ {
		pH, ok := m.balance(ionic)
		if !ok {
			return nil, fmt.Errorf("recipe: no pH between -2 and 16 balances the charges at I = %.3g; check the amounts", ionic)
		}
		out.PH = pH
		out.Species = m.species(pH, ionic)
		next := 0.0
		for _, s := range out.Species {
			next += s.Conc * float64(s.Charge*s.Charge) / 2
		}
		change := next - ionic
		// Halve the step where the iteration swings.
		if math.Abs(change) > 0.9*step {
			change /= 2
		}
		step = math.Abs(change)
		ionic += change
		if step <= 1e-13+1e-12*ionic {
			out.Ionic = ionic
			out.Beyond = o.Model.Check(ionic) != nil
			out.Capacity = m.capacity(pH, ionic)
			out.UModel = o.Model.ModelUncertainty(m.multiple(pH, ionic), ionic)
			return out, nil
		}
	}
	return nil, fmt.Errorf("recipe: ionic strength did not settle near %.3g in 200 rounds; the recipe is too concentrated for %s", ionic, o.Model)
}

// mixed sorts a recipe into acid systems and strong ions.
func mixed(recipe []Ingredient, tC float64, o RecipeOption) (*mixture, error) {
	m := &mixture{tC: tC, option: o, pKw: PKwAt(tC)}
	m.a, m.b = DebyeHueckel(tC, o.Water, o.Basis)
	for _, in := range recipe {
		s, ok := substanceNamed(in.Name)
		if !ok {
			return nil, fmt.Errorf("recipe: substance %q is not known; known are %s", in.Name, strings.Join(SubstanceNames(), ", "))
		}
		if !(in.Molar >= 0) || math.IsInf(in.Molar, 0) {
			return nil, fmt.Errorf("recipe: amount of %s is %v, expected mol/L of at least 0", in.Name, in.Molar)
		}
		if s.acid != "" {
			m.addAcid(s.acid, s.moles*in.Molar)
		}
		for _, ion := range s.strong {
			m.addStrong(ion.ion, ion.count*in.Molar)
		}
	}
	return m, nil
}

func (m *mixture) addAcid(name string, conc float64) {
	for i := range m.systems {
		if m.systems[i].acid.Name == name {
			m.systems[i].total += conc
			return
		}
	}
	a, _ := AcidNamed(name)
	m.systems = append(m.systems, system{a, conc})
}

func (m *mixture) addStrong(ion string, conc float64) {
	for i := range m.strong {
		if m.strong[i].Name == ion {
			m.strong[i].Conc += conc
			return
		}
	}
	m.strong = append(m.strong, Species{ion, ionCharge(ion), conc})
}

func (m *mixture) logGamma(z int, ionic, size float64) float64 {
	return m.option.Model.LogGamma(z, ionic, m.a, m.b, size)
}

// mixedPK are the step constants with the activity of H+ and concentrations.
func (m *mixture) mixedPK(dst []float64, a Acid, ionic float64) []float64 {
	dst = dst[:0]
	for k := range a.Steps {
		z := a.Charge - k
		pk := a.PKAt(k, m.tC) + m.logGamma(z-1, ionic, formSize(a.Name, z-1)) - m.logGamma(z, ionic, formSize(a.Name, z))
		dst = append(dst, pk)
	}
	return dst
}

// balance finds the pH at which the charges add to zero for a fixed ionic strength.
func (m *mixture) balance(ionic float64) (float64, bool) {
	constants := make([][]float64, len(m.systems))
	for i, s := range m.systems {
		constants[i] = m.mixedPK(nil, s.acid, ionic)
	}
	charge := func(pH float64) float64 { return m.charge(pH, ionic, constants) }
	lo, hi := -2.0, 16.0
	flo, fhi := charge(lo), charge(hi)
	if !(flo >= 0 && fhi <= 0) {
		return math.NaN(), false
	}
	// The charge falls steadily with pH: halving with regula falsi steps between.
	for range 200 {
		mid := (lo + hi) / 2
		if secant := lo + (hi-lo)*flo/(flo-fhi); secant > lo && secant < hi && hi-lo < 0.5 {
			mid = secant
		}
		f := charge(mid)
		if f == 0 {
			return mid, true
		}
		if f > 0 {
			lo, flo = mid, f
			fhi /= 2
		} else {
			hi, fhi = mid, f
			flo /= 2
		}
		if hi-lo < 1e-14*(1+math.Abs(lo)) {
			break
		}
	}
	return (lo + hi) / 2, true
}

// charge is the sum of charges at a pH.
func (m *mixture) charge(pH, ionic float64, constants [][]float64) float64 {
	h, oh := m.waterIons(pH, ionic)
	sum := h - oh
	for _, s := range m.strong {
		sum += float64(s.Charge) * s.Conc
	}
	for i, s := range m.systems {
		sum += s.total * (float64(s.acid.Charge) - MeanProtonsLost(pH, constants[i]))
	}
	return sum
}

// waterIons are the concentrations of hydrogen and hydroxide ions.
func (m *mixture) waterIons(pH, ionic float64) (h, oh float64) {
	h = math.Pow(10, -pH-m.logGamma(1, ionic, 9))
	oh = math.Pow(10, pH-m.pKw-m.logGamma(-1, ionic, 3.5))
	return h, oh
}

// species lists everything dissolved, water's ions first.
func (m *mixture) species(pH, ionic float64) []Species {
	h, oh := m.waterIons(pH, ionic)
	out := []Species{{"H+", 1, h}, {"OH-", -1, oh}}
	out = append(out, m.strong...)
	for _, s := range m.systems {
		pk := m.mixedPK(nil, s.acid, ionic)
		alpha := make([]float64, len(pk)+1)
		Fractions(alpha, pH, pk)
		for j, a := range alpha {
			z := s.acid.Charge - j
			out = append(out, Species{fmt.Sprintf("%s(%+d)", s.acid.Name, z), z, a * s.total})
		}
	}
	return out
}

// capacity is -d charge / d pH at constant ionic strength.
func (m *mixture) capacity(pH, ionic float64) float64 {
	constants := make([][]float64, len(m.systems))
	for i, s := range m.systems {
		constants[i] = m.mixedPK(nil, s.acid, ionic)
	}
	const d = 1e-4
	return (m.charge(pH-d, ionic, constants) - m.charge(pH+d, ionic, constants)) / (2 * d)
}

// multiple is the multiple of the activity coefficient that the pH of the
// recipe carries: 2z-1 of the step that buffers most.
func (m *mixture) multiple(pH, ionic float64) float64 {
	best, at := 0.0, 1.0
	for _, s := range m.systems {
		for k, pk := range m.mixedPK(nil, s.acid, ionic) {
			share := 1 / (1 + math.Pow(10, pk-pH))
			if b := s.total * share * (1 - share); b > best {
				best, at = b, float64(2*(s.acid.Charge-k)-1)
			}
		}
	}
	return at
}
