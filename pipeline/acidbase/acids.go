package acidbase

// A Step is one dissociation of a buffer acid at I = 0 and 25 C.
type Step struct {
	PK           float64
	EnthalpyKJ   float64 // kJ/mol
	HeatCapacity float64 // J/(mol K)
}

// An Acid is a buffer acid with the charge of its most protonated form here.
type Acid struct {
	Name   string
	Charge int
	Steps  []Step
}

// PKAt is the constant of a step at tC and I = 0 (Clarke & Glew 1966).
func (a Acid) PKAt(step int, tC float64) float64 {
	s := a.Steps[step]
	return ClarkeGlew(s.PK, s.EnthalpyKJ, s.HeatCapacity, 25, tC)
}

// AcidNamed finds a buffer acid by name.
func AcidNamed(name string) (Acid, bool) {
	for _, a := range Acids() {
		if a.Name == name {
			return a, true
		}
	}
	return Acid{}, false
}

// Acids lists the buffer acids. Constants, enthalpies and heat capacities at
// 25 C and I = 0 after Goldberg, Kishore & Lennen, J. Phys. Chem. Ref. Data 31
// (2002) 231: phosphate as printed, the others from memory and checked against
// listed temperature coefficients. Hydrogen sulfate 1.988 as in common geochemical
// tables; formic acid 3.751 from memory.
func Acids() []Acid {
	return []Acid{
		{"oxalate", 0, []Step{{1.270, -3.9, -231}, {4.266, -7.0, -231}}},
		{"phosphate", 0, []Step{{2.148, -8.0, -141}, {7.198, 3.6, -230}, {12.350, 16.0, -242}}},
		{"phthalate", 0, []Step{{2.950, -2.7, -91}, {5.408, -2.17, -295}}},
		{"citrate", 0, []Step{{3.128, 4.07, -131}, {4.761, 2.23, -178}, {6.396, -3.38, -254}}},
		{"acetate", 0, []Step{{4.756, -0.41, -142}}},
		{"succinate", 0, []Step{{4.207, 3.0, -121}, {5.636, -0.5, -217}}},
		{"tartrate", 0, []Step{{3.036, 3.19, -147}, {4.366, 0.93, -218}}},
		{"carbonate", 0, []Step{{6.351, 9.15, -371}, {10.329, 14.7, -249}}},
		{"borate", 0, []Step{{9.237, 13.8, -240}}},
		{"ammonia", 1, []Step{{9.245, 51.95, 8}}},
		{"tris", 1, []Step{{8.072, 47.45, -59}}},
		{"mes", 0, []Step{{6.270, 14.8, 5}}},
		{"bis-tris", 1, []Step{{6.484, 28.4, 27}}},
		{"pipes", -1, []Step{{7.141, 11.2, 22}}},
		{"imidazole", 1, []Step{{6.993, 36.64, -9}}},
		{"mops", 0, []Step{{7.184, 21.1, 25}}},
		{"hepes", 0, []Step{{7.564, 20.4, 47}}},
		{"glycine", 1, []Step{{2.351, 4.0, -139}, {9.780, 44.2, -57}}},
		{"ches", 0, []Step{{9.394, 39.55, 9}}},
		{"caps", 0, []Step{{10.499, 48.1, 57}}},
		{"formate", 0, []Step{{3.751, -0.1, -140}}},
		{"sulfate", -1, []Step{{1.988, -16.1, -260}}},
	}
}

// A substance is what one weighs in: an acid system and strong ions.
type substance struct {
	names  []string
	acid   string
	moles  float64 // of the acid system per mole of substance
	strong []strongIon
}

type strongIon struct {
	ion   string
	count float64
}

func substances() []substance {
	ion := func(name string, n float64) strongIon { return strongIon{name, n} }
	list := []substance{
		{names: []string{"hcl"}, strong: []strongIon{ion("Cl-", 1)}},
		{names: []string{"hclo4"}, strong: []strongIon{ion("ClO4-", 1)}},
		{names: []string{"hno3"}, strong: []strongIon{ion("NO3-", 1)}},
		{names: []string{"naoh"}, strong: []strongIon{ion("Na+", 1)}},
		{names: []string{"koh"}, strong: []strongIon{ion("K+", 1)}},
		{names: []string{"nacl"}, strong: []strongIon{ion("Na+", 1), ion("Cl-", 1)}},
		{names: []string{"kcl"}, strong: []strongIon{ion("K+", 1), ion("Cl-", 1)}},
		{names: []string{"nano3"}, strong: []strongIon{ion("Na+", 1), ion("NO3-", 1)}},
		{names: []string{"kno3"}, strong: []strongIon{ion("K+", 1), ion("NO3-", 1)}},
		{names: []string{"naclo4"}, strong: []strongIon{ion("Na+", 1), ion("ClO4-", 1)}},
		{names: []string{"kbr"}, strong: []strongIon{ion("K+", 1), ion("Br-", 1)}},
		{names: []string{"mgcl2"}, strong: []strongIon{ion("Mg2+", 1), ion("Cl-", 2)}},
		{names: []string{"cacl2"}, strong: []strongIon{ion("Ca2+", 1), ion("Cl-", 2)}},
		{names: []string{"ca(oh)2"}, strong: []strongIon{ion("Ca2+", 1)}},
		{names: []string{"h2so4"}, acid: "sulfate", moles: 1},
		{names: []string{"na2so4"}, acid: "sulfate", moles: 1, strong: []strongIon{ion("Na+", 2)}},
		{names: []string{"h3po4"}, acid: "phosphate", moles: 1},
		{names: []string{"kh2po4"}, acid: "phosphate", moles: 1, strong: []strongIon{ion("K+", 1)}},
		{names: []string{"nah2po4"}, acid: "phosphate", moles: 1, strong: []strongIon{ion("Na+", 1)}},
		{names: []string{"k2hpo4"}, acid: "phosphate", moles: 1, strong: []strongIon{ion("K+", 2)}},
		{names: []string{"na2hpo4"}, acid: "phosphate", moles: 1, strong: []strongIon{ion("Na+", 2)}},
		{names: []string{"na3po4"}, acid: "phosphate", moles: 1, strong: []strongIon{ion("Na+", 3)}},
		{names: []string{"h3bo3", "boric acid"}, acid: "borate", moles: 1},
		{names: []string{"na2b4o7", "borax"}, acid: "borate", moles: 4, strong: []strongIon{ion("Na+", 2)}},
		{names: []string{"nahco3"}, acid: "carbonate", moles: 1, strong: []strongIon{ion("Na+", 1)}},
		{names: []string{"na2co3"}, acid: "carbonate", moles: 1, strong: []strongIon{ion("Na+", 2)}},
		{names: []string{"khco3"}, acid: "carbonate", moles: 1, strong: []strongIon{ion("K+", 1)}},
		{names: []string{"k2co3"}, acid: "carbonate", moles: 1, strong: []strongIon{ion("K+", 2)}},
		{names: []string{"nh3", "ammonia"}, acid: "ammonia", moles: 1},
		{names: []string{"nh4cl"}, acid: "ammonia", moles: 1, strong: []strongIon{ion("Cl-", 1)}},
		{names: []string{"tetroxalate", "kh3(c2o4)2"}, acid: "oxalate", moles: 2, strong: []strongIon{ion("K+", 1)}},
		{names: []string{"khp", "potassium hydrogen phthalate"}, acid: "phthalate", moles: 1, strong: []strongIon{ion("K+", 1)}},
	}
	list = append(list, carboxylates()...)
	for _, base := range []string{"tris", "bis-tris", "imidazole"} {
		list = append(list,
			substance{names: []string{base}, acid: base, moles: 1},
			substance{names: []string{base + " hcl"}, acid: base, moles: 1, strong: []strongIon{ion("Cl-", 1)}})
	}
	for _, zwitterion := range []string{"mes", "mops", "hepes", "ches", "caps"} {
		list = append(list,
			substance{names: []string{zwitterion}, acid: zwitterion, moles: 1},
			substance{names: []string{"sodium " + zwitterion}, acid: zwitterion, moles: 1, strong: []strongIon{ion("Na+", 1)}})
	}
	list = append(list,
		substance{names: []string{"sodium pipes"}, acid: "pipes", moles: 1, strong: []strongIon{ion("Na+", 1)}},
		substance{names: []string{"disodium pipes"}, acid: "pipes", moles: 1, strong: []strongIon{ion("Na+", 2)}},
		substance{names: []string{"glycine"}, acid: "glycine", moles: 1, strong: nil})
	return list
}

// carboxylates lists acids and their salts: "acetic acid", "disodium hydrogen citrate".
func carboxylates() []substance {
	var list []substance
	acids := []struct {
		acid, formal string
		salts        int
	}{
		{"acetate", "acetic acid", 1}, {"formate", "formic acid", 1}, {"citrate", "citric acid", 3}, {"succinate", "succinic acid", 2},
		{"tartrate", "tartaric acid", 2}, {"phthalate", "phthalic acid", 2}, {"oxalate", "oxalic acid", 2},
	}
	prefix := []string{"", "di", "tri"}
	for _, a := range acids {
		list = append(list, substance{names: []string{a.formal}, acid: a.acid, moles: 1})
		for n := 1; n <= a.salts; n++ {
			for _, metal := range []struct{ word, ion string }{{"sodium", "Na+"}, {"potassium", "K+"}} {
				// "sodium dihydrogen citrate", "disodium hydrogen citrate", "trisodium citrate", "sodium acetate"
				word := prefix[n-1] + metal.word + " "
				if h := a.salts - n; h > 0 {
					word += prefix[h-1] + "hydrogen "
				}
				list = append(list, substance{names: []string{word + a.acid}, acid: a.acid, moles: 1, strong: []strongIon{{metal.ion, float64(n)}}})
			}
		}
	}
	return list
}

// ionCharge is the charge of a strong ion.
func ionCharge(name string) int {
	for _, i := range kielland() {
		if i.Ion == name {
			return i.Charge
		}
	}
	return 0
}

// formSize is the size in angstrom of a form of an acid system.
func formSize(acid string, charge int) float64 {
	byForm := map[string]map[int]float64{
		"phosphate": {-1: 4.25, -2: 4, -3: 4}, "citrate": {-1: 3.5, -2: 4.5, -3: 5}, "carbonate": {-1: 4.25, -2: 4.5},
		"acetate": {-1: 4.25}, "phthalate": {-2: 6}, "oxalate": {-2: 4.5}, "sulfate": {-2: 4}, "ammonia": {1: 2.5},
	}
	if v, ok := byForm[acid][charge]; ok {
		return v
	}
	return DefaultSize
}
