package acidbase

import (
	"fmt"
	"math"
	"strings"
	"testing"
)

// TestWater compares with the table of water constants computed from the named
// equations. Malmberg & Maryott 1956 print the linear coefficient 0.40008; the
// companion table was computed with 0.4008, so that its permittivity lies
// 0.00072 t below the paper's, and its A up to 0.0005 above. The difference is
// taken out here. With 0.40008 the printed A of Bates and of Robinson & Stokes
// come out to 0.0002 at every temperature.
func TestWater(t *testing.T) {
	for _, r := range outside(t, "water_debye_huckel_pKw.csv")[1:] {
		v := func(i int) float64 { return number(t, r[i]) }
		c := v(0)
		what := fmt.Sprintf("%.0f °C ", c)
		if r[1] != "" {
			near(t, what+"density, Tanaka 2001", DensityTanaka(c), v(1), 0.0006)
		}
		near(t, what+"density, Kell 1975", DensityKell(c), v(2), 0.0006)
		table := PermittivityMM(c) - 0.00072*c
		near(t, what+"permittivity, Malmberg & Maryott 1956 as tabulated", table, v(3), 0.0006)
		near(t, what+"permittivity, Bradley & Pitzer 1979", PermittivityBP(c, 1), v(4), 0.0006)
		near(t, what+"permittivity, IAPWS R8-97", IAPWS.Permittivity(c), v(5), 0.0008)
		near2 := func(name string, eps, rho float64, a, b int) {
			ga, gb := DebyeHueckelFrom(eps, c+Kelvin, rho)
			near(t, what+"A "+name, ga, v(a), 0.00006)
			if b > 0 {
				near(t, what+"B "+name, gb, v(b), 0.00006)
			}
		}
		near2("molal, tabulated", table, Density(c), 6, 10)
		near2("molal, Bradley & Pitzer", PermittivityBP(c, 1), Density(c), 7, 0)
		near2("molal, IAPWS", IAPWS.Permittivity(c), Density(c), 8, 11)
		near2("molar, tabulated", table, 1000, 9, 12)
		if r[13] != "" {
			a, _ := DebyeHueckel(c, MalmbergMaryott, Molal)
			near(t, what+"A molal as printed by Bates (from memory)", a, v(13), 0.0002)
			a, b := DebyeHueckel(c, MalmbergMaryott, Molar)
			near(t, what+"A molar, Robinson & Stokes (from memory)", a, v(14), 0.0002)
			near(t, what+"B molar, Robinson & Stokes (from memory)", b, v(15), 0.00015)
		}
		near(t, what+"pKw, IAPWS R11-07", PKwAt(c), v(16), 0.0006)
		near(t, what+"pKw, Nordstrom 1990", PKwNordstrom(c), v(18), 0.0006)
	}
}

func TestWaterCheckValues(t *testing.T) {
	near(t, "IAPWS R8-97, 999.242866 kg/m3, 298.15 K", PermittivityIAPWS(999.242866, 298.15), 78.5907250, 5e-7)
	near(t, "IAPWS R8-97, 26.0569558 kg/m3, 873.15 K", PermittivityIAPWS(26.0569558, 873.15), 1.12620970, 5e-9)
	near(t, "Bradley & Pitzer 1979, 298.15 K, 1 bar", PermittivityBP(25, 1), 78.38436874, 5e-8)
	near(t, "Malmberg & Maryott 1956, 25 °C (from memory)", PermittivityMM(25), 78.30, 0.005)
	near(t, "IAPWS R11-07, 1000 kg/m3, 300 K", PKw(1, 300), 13.906565, 5e-7)
	for c, want := range map[float64]float64{10: 999.7026, 15: 999.1026, 20: 998.2071, 22: 997.7735} {
		// printed tables of air-free water differ from the equation by up to 0.0009 kg/m3
		near(t, fmt.Sprintf("density, %g °C", c), DensityTanaka(c), want, 0.0009)
	}
	near(t, "Tanaka 2001, 25 °C by the formula", DensityTanaka(25), 997.04702, 5e-6)
	a, b := DebyeHueckelFrom(80.1, 293.15, 998.2071)
	near(t, "A, permittivity 80.1, 293.15 K", a, 0.50669, 5e-6)
	near(t, "B, permittivity 80.1, 293.15 K", b, 0.3279, 5e-5)
	near(t, "A short form, molar", 1.82483e6*math.Pow(78.303*298.15, -1.5), 0.5115, 0.0002)
	near(t, "limiting law, I 0.4, z -3, A 0.50669", LimitingLaw.LogGamma(-3, 0.4, 0.50669, 0, 0), -2.88413, 0.00002)
	near(t, "ionic strength of four ions", IonicStrength([]float64{0.1, 1.3, 2.1, 0.7}, []int{-1, 2, -3, 4}), 17.7, 1e-9)
}

func TestNernst(t *testing.T) {
	for _, r := range outside(t, "nernst_slope.csv")[1:] {
		near(t, "CODATA 2018, "+r[0]+" °C", NernstSlope(number(t, r[0])), number(t, r[1]), 0.00006)
		near(t, "pharmacopoeial rule, "+r[0]+" °C", NernstSlope(number(t, r[0])), number(t, r[2]), 0.02)
	}
	near(t, "25 °C", NernstSlope(25), 59.1593, 0.00005)
}

func TestActivityCoefficients(t *testing.T) {
	for _, r := range outside(t, "activity_coefficients.csv")[1:] {
		ionic, z := number(t, r[0]), int(number(t, r[1]))
		g := func(m Model, a, b, size float64) float64 { return math.Pow(10, m.LogGamma(z, ionic, a, b, size)) }
		for i, got := range []float64{
			g(LimitingLaw, 0.509, 0, 0), g(Guentelberg, 0.509, 0, 0), g(Davies, 0.509, 0, 0), g(Davies1938, 0.509, 0, 0),
			g(Extended, 0.51, 1/3.05, 4), g(Extended, 0.51, 1/3.05, 9),
		} {
			near(t, fmt.Sprintf("I %s, z %s, column %d", r[0], r[1], i+3), got, number(t, r[i+2]), 0.00006)
		}
	}
	// Harris, table of activity coefficients, H+ (from memory, two to three figures).
	for ionic, want := range map[float64]float64{0.001: 0.967, 0.005: 0.933, 0.01: 0.914, 0.05: 0.86, 0.1: 0.83} {
		size, ok := IonSize("H+")
		near(t, fmt.Sprintf("H+ at %g", ionic), math.Pow(10, Extended.LogGamma(1, ionic, 0.51, 1/3.05, size)), want, 0.0065)
		if !ok {
			t.Error("no size for H+")
		}
	}
	// A university manual for bromocresol green: 0.3281 times 7 angstrom is 2.30, A 0.5085 times 4 is 2.034.
	r := math.Sqrt(0.05)
	near(t, "dianion of 7 angstrom", Extended.LogGamma(-2, 0.05, 0.5085, 0.3281, 7), -2.034*r/(1+2.2967*r), 1e-9)
}

func TestKielland(t *testing.T) {
	rows := outside(t, "kielland_ion_sizes.csv")[1:]
	for _, r := range rows {
		size, ok := IonSize(r[0])
		if !ok {
			t.Errorf("no size for %s", r[0])
		}
		near(t, r[0]+", Kielland 1937", size, number(t, r[1]), 0)
	}
	if len(Ions()) != len(rows) {
		t.Errorf("%d ions, expected %d", len(Ions()), len(rows))
	}
}

// TestPKaAgainstIonicStrength: Davies columns computed with A 0.509; the printed
// ones of Scopes, Protein Purification, within 0.02 (citrate at 0.01 dropped as
// inconsistent in the source).
func TestPKaAgainstIonicStrength(t *testing.T) {
	for _, r := range outside(t, "pKa_ionic_strength_examples.csv")[1:] {
		z, pk, ionic := int(number(t, r[1])), number(t, r[2]), number(t, r[3])
		f := -Davies.LogGamma(1, ionic, 0.509, 0, 0)
		mixed := pk + kindMultiple(Mixed, z)*f
		near(t, r[0]+" mixed", mixed, number(t, r[4]), 0.0006)
		near(t, r[0]+" concentration", pk+kindMultiple(Concentration, z)*f, number(t, r[5]), 0.0006)
		if !(r[0] == "citrate3" && ionic == 0.01) {
			near(t, r[0]+" printed by Scopes", mixed, number(t, r[6]), 0.021)
		}
		c := Conditions{TemperatureC: 25, Ionic: ionic}
		got, err := Convert(pk, Thermodynamic, Mixed, z, c)
		if err != nil {
			t.Fatal(err)
		}
		near(t, r[0]+" Convert", got.PKa, number(t, r[4]), 0.0035)
	}
	// Harris, appendix G: acetic acid 4.756 at I = 0 and 4.56 at 0.1 is a
	// concentration constant; the mixed one is 0.1 higher.
	c := Conditions{TemperatureC: 25, Ionic: 0.1}
	conc, _ := Convert(4.756, Thermodynamic, Concentration, 0, c)
	mixed, _ := Convert(4.756, Thermodynamic, Mixed, 0, c)
	near(t, "acetic acid, concentration constant", conc.PKa, 4.56, 0.025)
	near(t, "mixed above concentration", mixed.PKa-conc.PKa, 0.107, 0.002)
}

// TestClassicalSaltEffect: the drop of the sulfonephthaleins from I = 0 to 0.1
// in Kolthoff's table (from memory) has the sign and size of 3 f.
func TestClassicalSaltEffect(t *testing.T) {
	c, err := Convert(7, Thermodynamic, Mixed, -1, Conditions{TemperatureC: 25, Ionic: 0.1})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "3 f(0.1)", c.Shift, -0.32, 0.005)
	for name, drop := range map[string]float64{"bromophenol blue": 0.25, "bromocresol green": 0.24, "chlorophenol red": 0.25, "bromocresol purple": 0.28, "cresol red": 0.21, "m-cresol purple": 0.34, "thymol blue": 0.30} {
		near(t, name, -c.Shift, drop, 0.13)
	}
	z, err := Convert(5.00, Mixed, Thermodynamic, 0, Conditions{TemperatureC: 25, Ionic: 0.1, Zwitterion: true})
	if err != nil || z.PKa != 5 || math.Abs(z.Terms[0].U-0.107) > 0.003 {
		t.Errorf("methyl red as a zwitterion: %+v %v", z, err)
	}
}

func TestBuffersAgainstTemperature(t *testing.T) {
	rows := outside(t, "buffers_pHS_vs_T.csv")
	keys := []string{"", "tetroxalate", "tartrate", "citrate", "phthalate-nbs", "phthalate", "phthalate-1977", "phthalate-1946",
		"phosphate", "phosphate-1:3.5", "borax", "carbonate", "calcium-hydroxide", "tetroxalate", "phthalate-nbs", "phosphate", "borax", "carbonate"}
	for _, r := range rows[1:] {
		for i := 1; i < len(r); i++ {
			if r[i] == "" {
				continue
			}
			b, err := BufferAt(keys[i], number(t, r[0]))
			if i >= 13 && err != nil {
				continue // the two-decimal table goes further than the three-decimal one
			}
			if err != nil {
				t.Errorf("%s at %s °C: %v", keys[i], r[0], err)
				continue
			}
			tol := 0.0006
			if i >= 13 { // JIS Z 8802, molar recipes, two decimals, some cut off
				tol = 0.0115
			}
			near(t, rows[0][i]+" "+r[0], b.PH, number(t, r[i]), tol)
		}
	}
	// Between tabulated temperatures: leaving a table point out, the cubic still
	// finds it. (Not for the short tartrate table.)
	for _, s := range standards() {
		for i := 2; i+2 < len(s.table); i++ {
			if s.key == "tartrate" {
				continue
			}
			less := s
			less.table = append(append([]tablePoint(nil), s.table[:i]...), s.table[i+1:]...)
			near(t, fmt.Sprintf("%s at %g °C from its neighbours", s.key, s.table[i].t), less.at(s.table[i].t), s.table[i].ph, 0.0025)
		}
	}
}

func TestBufferFacts(t *testing.T) {
	// Bates, 25 °C: temperature coefficients (from memory).
	for key, slope := range map[string]float64{"tetroxalate": 0.001, "phthalate-nbs": 0.0012, "phosphate": -0.0028, "phosphate-1:3.5": -0.0028, "borax": -0.0082, "carbonate": -0.0096, "calcium-hydroxide": -0.033} {
		b, err := BufferAt(key, 25)
		if err != nil {
			t.Fatal(err)
		}
		near(t, key+" dpH/dT", b.DPHDT, slope, 0.0006+0.02*math.Abs(slope))
		if b.Source == "" || b.U <= 0 {
			t.Errorf("%s without source or uncertainty", key)
		}
	}
	for nominal, key := range map[string]string{"1.68": "tetroxalate", "4.01": "phthalate", "4.005": "phthalate", "6.865": "phosphate", "6.86": "phosphate", "7.413": "phosphate-1:3.5", "9.18": "borax", "10.012": "carbonate", "10.01": "carbonate", "12.45": "calcium-hydroxide"} {
		b, err := BufferAt(nominal, 20)
		if err != nil || b.Key != key {
			t.Errorf("%s: %s %v, expected %s", nominal, b.Key, err, key)
		}
	}
	for _, name := range []string{"7.00", "water", ""} {
		if _, err := BufferAt(name, 25); err == nil {
			t.Errorf("buffer %q was accepted", name)
		}
	}
	if _, err := BufferAt("carbonate", 80); err == nil || !strings.Contains(err.Error(), "outside") {
		t.Errorf("carbonate at 80 °C: %v", err)
	}
}

func TestBufferAcids(t *testing.T) {
	for _, r := range outside(t, "buffer_acids_thermo.csv")[1:] {
		name := strings.ToLower(strings.TrimSuffix(r[0], "(L)"))
		a, ok := AcidNamed(name)
		if !ok {
			t.Errorf("no acid %s", name)
			continue
		}
		z := int(number(t, r[2]))
		step := a.Charge - z
		near(t, r[0]+" pK", a.Steps[step].PK, number(t, r[3]), 0)
		near(t, r[0]+" dpK/dT", DPKaDT(a.Steps[step].EnthalpyKJ, 25), number(t, r[6]), 0.000006)
		near(t, r[0]+" enthalpy back", EnthalpyKJ(DPKaDT(a.Steps[step].EnthalpyKJ, 25), 25), a.Steps[step].EnthalpyKJ, 1e-9)
		for i, c := range []float64{5, 15, 20, 37, 50} {
			near(t, fmt.Sprintf("%s at %g °C", r[0], c), a.PKAt(step, c), number(t, r[7+i]), 0.0006)
		}
	}
	p, _ := AcidNamed("phosphate")
	near(t, "phosphate 2 at 5 °C", p.PKAt(1, 5), 7.27299, 5e-6)
	tris, _ := AcidNamed("tris")
	near(t, "TRIS at 5 °C", tris.PKAt(0, 5), 8.67733, 5e-6)
	for c, want := range map[float64]float64{20: 8.20, 25: 8.06, 37: 7.72} { // printed, 0.1 mol/L
		near(t, "TRIS practical", tris.PKAt(0, c), want, 0.035)
	}
	for _, r := range outside(t, "carbonate_ammonia_pK_vs_T.csv")[1:] {
		c := number(t, r[0])
		one, two := CarbonatePK(c)
		near(t, "carbonate 1 at "+r[0], one, number(t, r[1]), 0.0006)
		near(t, "carbonate 2 at "+r[0], two, number(t, r[2]), 0.0006)
		near(t, "ammonium at "+r[0], AmmoniumPK(c), number(t, r[3]), 0.0006)
		carbonate, _ := AcidNamed("carbonate")
		if c <= 50 {
			near(t, "carbonate 1 by heat capacity", carbonate.PKAt(0, c), one, 0.02)
			near(t, "carbonate 2 by heat capacity", carbonate.PKAt(1, c), two, 0.015)
		}
	}
}

// TestEnthalpies: from the temperature terms of the published equations.
func TestEnthalpies(t *testing.T) {
	for _, c := range []struct {
		name            string
		coef, dH, slope float64
	}{
		{"m-cresol purple pK2, Clayton & Byrne 1993", 1245.69, 23.85, -0.01401},
		{"m-cresol purple pK1", 782.62, 14.98, -0.00880},
		{"phenol red, Yao & Byrne 2001", 666.7, 12.76, -0.00750},
		{"bromocresol purple, Yao & Byrne 2001", 378.1, 7.24, -0.00425},
		{"cresol red, Patsavas 2013", 838.872749, 16.06, -0.00944},
		{"cresol red pK1", 386.341751, 7.40, -0.00435},
	} {
		slope := -c.coef / (298.15 * 298.15)
		near(t, c.name, EnthalpyKJ(slope, 25), c.dH, 0.0061)
		near(t, c.name, DPKaDT(c.dH, 25), c.slope, 0.000006)
		near(t, c.name+" by van 't Hoff", VantHoff(c.coef/298.15, EnthalpyKJ(slope, 25), 25, 10), c.coef/283.15, 1e-9)
	}
	// 2,5-dinitrophenol: -33.206 + 2106.7/T + 5.495 ln T.
	f := func(k float64) float64 { return -33.206 + 2106.7/k + 5.495*math.Log(k) }
	near(t, "2,5-dinitrophenol at 25 °C", f(298.15), 5.168, 0.0006)
	slope := (f(298.16) - f(298.14)) / 0.02
	near(t, "2,5-dinitrophenol", EnthalpyKJ(slope, 25), 9.0, 0.06)
	e1, e32 := CresolRedRatios(35, 25)
	near(t, "cresol red e1 at 298.15 K (printed)", e1, 0.00128, 0.000005)
	near(t, "cresol red e3/e2 at 298.15 K (printed)", e32, 0.03230, 0.000005)
}

// TestRecipes: published pH(S), and the two models as computed beside it.
func TestRecipes(t *testing.T) {
	for _, c := range []struct {
		recipe             string
		model              Model
		want, published, I float64
	}{
		{"KH2PO4 0.025, Na2HPO4 0.025", BatesGuggenheim, 6.869, 6.865, 0.10},
		{"KH2PO4 0.025, Na2HPO4 0.025", Davies, 6.877, 6.865, 0.10},
		{"KH2PO4 0.008695, Na2HPO4 0.03043", BatesGuggenheim, 7.413, 7.413, 0.10},
		{"KH2PO4 0.008695, Na2HPO4 0.03043", Davies, 7.421, 7.413, 0.10},
		{"potassium hydrogen phthalate 0.05", Davies, math.NaN(), 4.005, 0.053},
		{"borax 0.01", Davies, math.NaN(), 9.180, 0.020},
		{"NaHCO3 0.025, Na2CO3 0.025", Davies, math.NaN(), 10.012, 0.10},
		{"potassium dihydrogen citrate 0.05", Davies, math.NaN(), 3.776, math.NaN()},
		{"tetroxalate 0.05", Davies, math.NaN(), 1.679, math.NaN()},
	} {
		recipe, err := ParseRecipe(c.recipe)
		if err != nil {
			t.Fatal(err)
		}
		s, err := Speciate(recipe, 25, RecipeOption{Model: c.model})
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%-40s %-22s pH %.4f I %.4f beta %.4f rounds %d", c.recipe, c.model, s.PH, s.Ionic, s.Capacity, s.Iterations)
		if !math.IsNaN(c.want) {
			near(t, c.recipe+" "+c.model.String(), s.PH, c.want, 0.0016)
		}
		near(t, c.recipe+" published", s.PH, c.published, 0.021)
		if !math.IsNaN(c.I) { // Bates, from memory
			near(t, c.recipe+" ionic strength", s.Ionic, c.I, 0.0006)
		}
		charge := 0.0
		for _, sp := range s.Species {
			charge += float64(sp.Charge) * sp.Conc
		}
		near(t, "electroneutrality", charge, 0, 1e-12)
	}
	// Bates, buffer values in mol/L per pH at 25 °C (from memory: plausibility
	// only; his 0.070 of tetroxalate leaves out part of what free acid gives).
	for recipe, beta := range map[string]float64{"khp 0.05": 0.016, "KH2PO4 0.025; Na2HPO4 0.025": 0.029, "KH2PO4 0.008695; Na2HPO4 0.03043": 0.016, "borax 0.01": 0.020, "NaHCO3 0.025; Na2CO3 0.025": 0.029} {
		in, _ := ParseRecipe(recipe)
		s, err := Speciate(in, 25, RecipeOption{})
		if err != nil {
			t.Fatal(err)
		}
		near(t, recipe+" buffer value", s.Capacity, beta, 0.17*beta)
	}
	// Half dilution of 1:1 phosphate raises the pH by 0.080 (Bates, from memory).
	in, _ := ParseRecipe("KH2PO4 0.0125, Na2HPO4 0.0125")
	half, _ := Speciate(in, 25, RecipeOption{Model: BatesGuggenheim})
	in, _ = ParseRecipe("KH2PO4 0.025, Na2HPO4 0.025")
	full, _ := Speciate(in, 25, RecipeOption{Model: BatesGuggenheim})
	near(t, "dilution of phosphate", half.PH-full.PH, 0.080, 0.01)
	// Air-equilibrated water is a matter of CO2; pure water is pH 7.00 at 25 °C.
	water, err := Speciate(nil, 25, RecipeOption{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "pure water", water.PH, PKwAt(25)/2, 1e-6)
}

// TestRecipeSlopes: temperature coefficients at 25 °C of Bates's standards and
// of TRIS (-0.028 /K, handbook figure).
func TestRecipeSlopes(t *testing.T) {
	for recipe, want := range map[string]float64{
		"KH2PO4 0.025, Na2HPO4 0.025": -0.0028, "borax 0.01": -0.0082, "NaHCO3 0.025, Na2CO3 0.025": -0.0096,
		"khp 0.05": 0.0012, "TRIS 0.02, TRIS HCl 0.02": -0.028,
	} {
		in, err := ParseRecipe(recipe)
		if err != nil {
			t.Fatal(err)
		}
		got, err := RecipeSlope(in, 25, RecipeOption{})
		if err != nil {
			t.Fatal(err)
		}
		near(t, recipe, got, want, 0.0009)
	}
}

// Uncertainty of the amounts: of a 1:1 buffer log10 e times the relative
// uncertainty of each, less what the ionic strength does: 3 A f'(0.1) = 0.94
// per mol/kg.
func TestRecipeUncertainty(t *testing.T) {
	in, _ := ParseRecipe("KH2PO4 0.025, Na2HPO4 0.025")
	in[0].URel, in[1].URel = 0.01, 0.02
	s, err := Speciate(in, 25, RecipeOption{})
	if err != nil {
		t.Fatal(err)
	}
	near(t, "u(pH)", s.URecipe, math.Hypot(0.01/math.Ln10+0.94*0.025*0.01, 0.02/math.Ln10-0.94*0.075*0.02), 0.0001)
	near(t, "u(I)", s.UIonic, math.Hypot(0.025*0.01, 0.075*0.02), 2e-5)
}
