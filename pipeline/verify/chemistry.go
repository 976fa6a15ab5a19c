package verify

import (
	"fmt"
	"math"

	"pkvigil/pipeline/acidbase"
)

// activity: the figures are computed independently to four digits from the
// equations as published; H+ rows follow Kielland's size.
func activity() []Check {
	g := group{name: "activity coefficients"}
	for _, r := range activityTable() {
		for i, c := range []struct {
			m          acidbase.Model
			a, b, size float64
			source     string
		}{
			{acidbase.LimitingLaw, 0.509, 0, 0, "Debye & Hueckel 1923, computed"},
			{acidbase.Guentelberg, 0.509, 0, 0, "Guentelberg 1926, computed"},
			{acidbase.Davies, 0.509, 0, 0, "Davies 1962, computed"},
			{acidbase.Davies1938, 0.509, 0, 0, "Davies 1938, computed"},
			{acidbase.Extended, 0.51, 1 / 3.05, 4, "Debye & Hueckel 1923 with 4 angstrom, computed"},
			{acidbase.Extended, 0.51, 1 / 3.05, 9, "Debye & Hueckel 1923 with 9 angstrom, computed"},
		} {
			want := r[2+i]
			if want < 0.01 {
				continue // four decimals carry less than one per cent there
			}
			g.source = c.source
			g.is(fmt.Sprintf("%s, I %g, |z| %g", c.m, r[0], r[1]), want, 6e-5, func() float64 {
				return math.Pow(10, c.m.LogGamma(int(r[1]), r[0], c.a, c.b, c.size))
			})
		}
	}
	g.source = "open-source library's published test value"
	g.is("limiting law, log gamma, I 0.4, z -3, A 0.50669", -2.88413, 2e-5, func() float64 { return acidbase.LimitingLaw.LogGamma(-3, 0.4, 0.50669, 0, 0) })
	g.is("ionic strength of four ions, mol/L", 17.7, 1e-9, func() float64 {
		return acidbase.IonicStrength([]float64{0.1, 1.3, 2.1, 0.7}, []int{-1, 2, -3, 4})
	})
	g.source = "Bates & Guggenheim 1960: A sqrt(I)/(1 + 1.5 sqrt(I)), computed"
	g.is("Bates-Guggenheim, log gamma, I 0.09, A 0.509", -0.509*0.3/1.45, 1e-9, func() float64 { return acidbase.BatesGuggenheim.LogGamma(1, 0.09, 0.509, 0, 0) })
	for _, s := range ionSizes() {
		g.source = "Kielland 1937"
		if s.memory {
			g.source += " (from memory)"
		}
		g.try("size of "+s.ion+", angstrom", s.size, 1e-9, func() (float64, error) {
			v, ok := acidbase.IonSize(s.ion)
			if !ok {
				return 0, fmt.Errorf("no size for %s", s.ion)
			}
			return v, nil
		})
	}
	return g.list
}

// water: Malmberg & Maryott print the linear coefficient 0.40008; the table of
// figures was computed with 0.4008, a difference of 0.00072 t that is added.
func water() []Check {
	g := group{name: "water and Debye-Hueckel A"}
	for _, r := range waterTable() {
		t := r[0]
		at := fmt.Sprintf(", %g C", t)
		table := func() float64 { return acidbase.PermittivityMM(t) - 0.00072*t }
		row := func(name, source string, want, within float64, got func() float64) {
			if !math.IsNaN(want) {
				g.source = source
				g.is(name+at, want, within, got)
			}
		}
		row("density, kg/m3", "Tanaka et al. 2001, computed", r[1], 6e-4, func() float64 { return acidbase.DensityTanaka(t) })
		row("density, kg/m3", "Kell 1975, computed", r[2], 6e-4, func() float64 { return acidbase.DensityKell(t) })
		row("permittivity", "Malmberg & Maryott 1956, computed", r[3], 6e-4, table)
		row("permittivity", "Bradley & Pitzer 1979, computed", r[4], 6e-4, func() float64 { return acidbase.PermittivityBP(t, 1) })
		row("permittivity", "IAPWS R8-97, computed", r[5], 8e-4, func() float64 { return acidbase.IAPWS.Permittivity(t) })
		a := func(eps func() float64, rho func() float64) func() float64 {
			return func() float64 { v, _ := acidbase.DebyeHueckelFrom(eps(), t+acidbase.Kelvin, rho()); return v }
		}
		rho := func() float64 { return acidbase.Density(t) }
		row("A, molal", "with Malmberg & Maryott 1956, computed", r[6], 6e-5, a(table, rho))
		row("A, molal", "with IAPWS R8-97, computed", r[8], 6e-5, a(func() float64 { return acidbase.IAPWS.Permittivity(t) }, rho))
		row("A, molar", "with Malmberg & Maryott 1956, computed", r[9], 6e-5, a(table, func() float64 { return 1000 }))
		row("A, molal as printed", "Bates 1973 (from memory)", r[13], 2e-4, func() float64 {
			v, _ := acidbase.DebyeHueckel(t, acidbase.MalmbergMaryott, acidbase.Molal)
			return v
		})
		row("A, molar as printed", "Robinson & Stokes 1959 (from memory)", r[14], 2e-4, func() float64 {
			v, _ := acidbase.DebyeHueckel(t, acidbase.MalmbergMaryott, acidbase.Molar)
			return v
		})
		row("pKw", "IAPWS R11-07, computed", r[16], 6e-4, func() float64 { return acidbase.PKwAt(t) })
		row("pKw", "Nordstrom et al. 1990, computed", r[18], 6e-4, func() float64 { return acidbase.PKwNordstrom(t) })
	}
	g.source = "IAPWS R8-97, printed check value"
	g.is("permittivity, 999.242866 kg/m3, 298.15 K", 78.5907250, 5e-7, func() float64 { return acidbase.PermittivityIAPWS(999.242866, 298.15) })
	g.is("permittivity, 26.0569558 kg/m3, 873.15 K", 1.12620970, 5e-9, func() float64 { return acidbase.PermittivityIAPWS(26.0569558, 873.15) })
	g.source = "Bradley & Pitzer 1979, check value"
	g.is("permittivity, 298.15 K, 1 bar", 78.38436874, 5e-8, func() float64 { return acidbase.PermittivityBP(25, 1) })
	g.source = "IAPWS R11-07, printed check value"
	g.is("pKw, 1000 kg/m3, 300 K", 13.906565, 5e-7, func() float64 { return acidbase.PKw(1, 300) })
	g.source = "published check value for permittivity 80.1 at 293.15 K"
	g.is("A, molal", 0.50669, 5e-6, func() float64 { a, _ := acidbase.DebyeHueckelFrom(80.1, 293.15, 998.2071); return a })
	g.is("B, per angstrom", 0.3279, 5e-5, func() float64 { _, b := acidbase.DebyeHueckelFrom(80.1, 293.15, 998.2071); return b })
	return g.list
}

func nernst() []Check {
	g := group{name: "Nernst slope", source: "CODATA 2018, computed"}
	for _, r := range nernstTable() {
		g.is(fmt.Sprintf("slope, mV per pH, %g C", r[0]), r[1], 6e-5, func() float64 { return acidbase.NernstSlope(r[0]) })
	}
	return g.list
}

func buffers() []Check {
	g := group{name: "standard buffers"}
	for i, key := range []string{"tetroxalate", "tartrate", "citrate", "phthalate-nbs", "phthalate", "phthalate-1977", "phthalate-1946",
		"phosphate", "phosphate-1:3.5", "borax", "carbonate", "calcium-hydroxide"} {
		switch key {
		case "citrate", "carbonate":
			g.source = "Staples & Bates 1969; 25 C as printed, the others from memory"
		case "phthalate":
			g.source = "IUPAC, Buck et al. 2002 (from memory)"
		case "phthalate-1977":
			g.source = "Hetzer et al. 1977, equation as printed"
		case "phthalate-1946":
			g.source = "Hamer, Pinching & Acree 1946, equation as printed"
		default:
			g.source = "Bates 1962 (from memory, checked)"
		}
		for _, r := range bufferTable() {
			if math.IsNaN(r[1+i]) {
				continue
			}
			within := 1e-9 // tabulated temperatures are met exactly
			if key == "phthalate-1977" || key == "phthalate-1946" {
				within = 6e-4
			}
			g.try(fmt.Sprintf("pH(S) of %s, %g C", key, r[0]), r[1+i], within, func() (float64, error) {
				b, err := acidbase.BufferAt(key, r[0])
				return b.PH, err
			})
		}
	}
	return append(g.list, bufferFigures()...)
}

// bufferFigures: what is stated of a buffer besides its pH(S).
func bufferFigures() []Check {
	g := group{name: "standard buffers", source: "Buck et al. 2002, U = 0.003 with k = 2 (from memory)"}
	at := func(key string, get func(acidbase.Buffer) float64) func() (float64, error) {
		return func() (float64, error) {
			b, err := acidbase.BufferAt(key, 25)
			return get(b), err
		}
	}
	for _, key := range []string{"tartrate", "citrate", "phthalate", "phthalate-nbs", "phosphate", "phosphate-1:3.5", "phthalate-1977"} {
		g.try("standard uncertainty of "+key, 0.0015, 1e-9, at(key, func(b acidbase.Buffer) float64 { return b.U }))
	}
	g.source = "Buck et al. 2002, U = 0.01 with k = 2 (from memory)"
	g.try("standard uncertainty of the convention", 0.005, 1e-9, at("phosphate", func(b acidbase.Buffer) float64 { return b.UConvention }))
	g.source = "Bates 1962 (from memory, checked)"
	g.try("nominal value of borax", 9.180, 1e-9, at("borax", func(b acidbase.Buffer) float64 { return b.At25 }))
	return g.list
}

// acidFigures: the tabulated enthalpies and heat capacities themselves, some of
// which are too small to show in a constant of three decimals.
func acidFigures() []Check {
	g := group{name: "buffer acids"}
	figure := func(name string, step int, what string, want float64, get func(acidbase.Step) float64) {
		g.try(fmt.Sprintf("%s of %s, step %d", what, name, step), want, math.Abs(want)*1e-9, func() (float64, error) {
			acid, ok := acidbase.AcidNamed(name)
			if !ok || len(acid.Steps) < step {
				return 0, fmt.Errorf("no step %d of %s", step, name)
			}
			return get(acid.Steps[step-1]), nil
		})
	}
	for _, a := range acidTable() {
		g.source = "Goldberg, Kishore & Lennen 2002"
		if a.memory {
			g.source += " (from memory)"
		}
		figure(a.name, a.step, "enthalpy, kJ/mol,", a.enthalpy, func(s acidbase.Step) float64 { return s.EnthalpyKJ })
		figure(a.name, a.step, "heat capacity, J/(mol K),", a.capacity, func(s acidbase.Step) float64 { return s.HeatCapacity })
	}
	g.source = "common geochemical tables"
	figure("sulfate", 1, "pK", 1.988, func(s acidbase.Step) float64 { return s.PK })
	g.source = "handbook value (from memory)"
	figure("formate", 1, "pK", 3.751, func(s acidbase.Step) float64 { return s.PK })
	return g.list
}

// acids: constants of buffer acids against temperature.
func acids() []Check {
	g := group{name: "buffer acids"}
	for _, a := range acidTable() {
		g.source = "Goldberg, Kishore & Lennen 2002"
		if a.memory {
			g.source += " (from memory)"
		}
		for i, t := range []float64{25, 5, 15, 20, 37, 50} {
			want, within := a.pk[i], 6e-4
			g.try(fmt.Sprintf("pK%d of %s, %g C", a.step, a.name, t), want, within, func() (float64, error) {
				acid, ok := acidbase.AcidNamed(a.name)
				if !ok {
					return 0, fmt.Errorf("no acid %s", a.name)
				}
				return acid.PKAt(a.step-1, t), nil
			})
		}
	}
	g.list = append(g.list, acidFigures()...)
	for _, r := range carbonateTable() {
		g.source = "Plummer & Busenberg 1982, computed"
		g.is(fmt.Sprintf("pK1 of carbonic acid, %g C", r[0]), r[1], 6e-4, func() float64 { v, _ := acidbase.CarbonatePK(r[0]); return v })
		g.is(fmt.Sprintf("pK2 of carbonic acid, %g C", r[0]), r[2], 6e-4, func() float64 { _, v := acidbase.CarbonatePK(r[0]); return v })
		if r[0] <= 50 {
			g.source = "Bates & Pinching 1949, computed"
			g.is(fmt.Sprintf("pK of ammonium, %g C", r[0]), r[3], 6e-4, func() float64 { return acidbase.AmmoniumPK(r[0]) })
		}
	}
	g.source = "Clarke & Glew 1966, checked by integration"
	g.is("phosphate, second step, 5 C", 7.27299, 5e-6, func() float64 { return acidbase.ClarkeGlew(7.198, 3.6, -230, 25, 5) })
	g.is("TRIS, 5 C", 8.67733, 5e-6, func() float64 { return acidbase.ClarkeGlew(8.072, 47.45, -59, 25, 5) })
	g.source = "van 't Hoff 1884, from Yao & Byrne 2001, computed"
	g.is("enthalpy of phenol red, kJ/mol", 12.76, 5e-3, func() float64 { return acidbase.EnthalpyKJ(-0.00750, 25) })
	return g.list
}

func recipes() []Check {
	g := group{name: "buffer recipes"}
	for _, r := range []struct {
		recipe string
		model  acidbase.Model
		want   float64
		source string
	}{
		{"KH2PO4 0.025, Na2HPO4 0.025", acidbase.BatesGuggenheim, 6.869, "computed; published pH(S) 6.865"},
		{"KH2PO4 0.025, Na2HPO4 0.025", acidbase.Davies, 6.877, "computed; published pH(S) 6.865"},
		{"KH2PO4 0.008695, Na2HPO4 0.03043", acidbase.BatesGuggenheim, 7.413, "computed; published pH(S) 7.413"},
		{"KH2PO4 0.008695, Na2HPO4 0.03043", acidbase.Davies, 7.421, "computed; published pH(S) 7.413"},
		{"borax 0.01", acidbase.Davies, 9.180, "Bates 1962 (from memory); the model misses by up to 0.02"},
		{"NaHCO3 0.025, Na2CO3 0.025", acidbase.Davies, 10.012, "Staples & Bates 1969; the model misses by up to 0.02"},
		{"potassium hydrogen phthalate 0.05", acidbase.Davies, 4.005, "IUPAC 2002 (from memory); the model misses by up to 0.02"},
	} {
		within := 0.0016
		if r.want == 9.180 || r.want == 10.012 || r.want == 4.005 {
			within = 0.021
		}
		g.source = r.source
		g.try("pH of "+r.recipe+", "+r.model.String(), r.want, within, func() (float64, error) {
			in, err := acidbase.ParseRecipe(r.recipe)
			if err != nil {
				return 0, err
			}
			s, err := acidbase.Speciate(in, 25, acidbase.RecipeOption{Model: r.model})
			if err != nil {
				return 0, err
			}
			return s.PH, nil
		})
	}
	return g.list
}

// constants: kinds of constants at an ionic strength, Davies with A of 25 C.
func constants() []Check {
	g := group{name: "kinds of constants"}
	for _, r := range constantTable() {
		for _, k := range []struct {
			kind acidbase.Constant
			want float64
		}{{acidbase.Mixed, r.mixed}, {acidbase.Concentration, r.conc}} {
			// The figures stand for A 0.509; the program's A at 25 C is 0.5107, which moves them by up to 0.0035.
			g.source = "Davies 1962 with A 0.509, computed"
			g.try(fmt.Sprintf("%s constant of %s, I %g", k.kind, r.name, r.ionic), k.want, 0.0037, func() (float64, error) {
				c, err := acidbase.Convert(r.pka, acidbase.Thermodynamic, k.kind, r.z, acidbase.Conditions{TemperatureC: 25, Ionic: r.ionic})
				return c.PKa, err
			})
		}
	}
	g.source = "Henderson 1908, Hasselbalch 1917; bromophenol blue, Patterson 1999 (data from memory, checked)"
	g.is("two-form estimate at pH 3.94", 3.9421, 6e-5, func() float64 { v, _ := acidbase.TwoForm(3.94, 0.411, 0.006, 0.818, 0.001); return v })
	return g.list
}

func dyes() []Check {
	g := group{name: "indicator equations"}
	for _, r := range dyeTable() {
		e, _ := acidbase.DyeEquationNamed(r.key)
		g.source = e.Source + ", computed"
		if e.Memory {
			g.source += " (coefficients from memory)"
		}
		g.try(fmt.Sprintf("pH by %s, S %g, %g C, I %g, R %g", r.key, r.s, r.t, r.i, r.r), r.ph, 6e-5, func() (float64, error) {
			e, ok := acidbase.DyeEquationNamed(r.key)
			if !ok {
				return 0, fmt.Errorf("no equation %s", r.key)
			}
			return e.PH(r.r, acidbase.DyeCondition{Salinity: r.s, TempC: r.t, Ionic: r.i}), nil
		})
	}
	g.list = append(g.list, dyeFigures()...)
	g.source = "Mueller & Rehder 2018, printed"
	g.is("pH by mcp-2018, S 35, 25 C, R 1", 7.6713, 5e-5, func() float64 {
		e, _ := acidbase.DyeEquationNamed("mcp-2018")
		return e.PH(1, acidbase.DyeCondition{Salinity: 35, TempC: 25})
	})
	g.source = "DelValls & Dickson 1998; 8.0936 from memory, further digit computed"
	g.is("TRIS, S 35, 25 C", 8.09355, 6e-6, func() float64 { return acidbase.TrisPH(35, 25) })
	g.source = "Dickson et al. 2007; 6.7866 from memory, further digit computed"
	g.is("2-aminopyridine, S 35, 25 C", 6.78658, 6e-6, func() float64 { return acidbase.AminopyridinePH(35, 25) })
	g.source = "published example of a potentiometric pH"
	g.is("-67 mV against TRIS at -72.4 mV", 8.00227, 6e-6, func() float64 {
		return acidbase.PotentiometricPH(acidbase.TrisPH(35, 25), -67, -72.4, 25)
	})
	g.source = "Patsavas, Byrne & Liu 2013, printed check values (second-hand)"
	g.is("cresol red e3/e2, S 35, 25 C", 0.032303, 6e-7, func() float64 { _, v := acidbase.CresolRedRatios(35, 25); return v })
	g.is("cresol red e1, S 35, 25 C", 0.001278, 6e-7, func() float64 { v, _ := acidbase.CresolRedRatios(35, 25); return v })
	return g.list
}

// dyeFigures: the wavelengths of the ratios, and conditions at which the small
// coefficients show.
func dyeFigures() []Check {
	g := group{name: "indicator equations"}
	named := func(key string, get func(acidbase.DyeEquation) float64) func() (float64, error) {
		return func() (float64, error) {
			e, ok := acidbase.DyeEquationNamed(key)
			if !ok {
				return 0, fmt.Errorf("no equation %s", key)
			}
			return get(e), nil
		}
	}
	for _, r := range []struct {
		key        string
		base, acid float64
	}{{"mcp-1993", 578, 434}, {"mcp-2011", 578, 434}, {"mcp-2018", 578, 434}, {"tb-1996", 596, 435}, {"bcg-1993", 616, 444}, {"bcp-1998", 589, 432},
		{"bpb-2018", 590, 436}, {"cr-1989", 573, 433}, {"bcp-2001", 589, 432}, {"pr-2001", 558, 433}} {
		g.source = "as the equation is published"
		g.try("wavelength of the base form, "+r.key+", nm", r.base, 1e-9, named(r.key, func(e acidbase.DyeEquation) float64 { return e.BaseNM }))
		g.try("wavelength of the acid form, "+r.key+", nm", r.acid, 1e-9, named(r.key, func(e acidbase.DyeEquation) float64 { return e.AcidNM }))
	}
	for _, r := range []struct {
		key    string
		ratio  float64
		s, t   float64
		ph     float64
		source string
	}{
		{"bcg-1993", 0.02, 35, 25, 2.1930349807, "Breland & Byrne 1993, computed"},
		{"pr-2001", 0.02, 0, 25, 5.8421904191, "Yao & Byrne 2001, computed"},
		{"cr-1989", 0.02, 20, 25, 5.6637657116, "Byrne & Breland 1989 (from memory), computed"},
		{"bcp-2021", 0.02, 35, 25, 3.6847725374, "Hudson-Heck, Liu & Byrne 2021, computed"},
		{"bcp-2021", 20, 35, 25, 6.8661588832, "Hudson-Heck, Liu & Byrne 2021, computed"},
		{"mcp-2011", 5, 20, 25, 8.5289196542, "Liu, Patsavas & Byrne 2011, computed"},
	} {
		g.source = r.source
		g.try(fmt.Sprintf("pH by %s, S %g, %g C, R %g", r.key, r.s, r.t, r.ratio), r.ph, 1e-8, named(r.key, func(e acidbase.DyeEquation) float64 {
			return e.PH(r.ratio, acidbase.DyeCondition{Salinity: r.s, TempC: r.t})
		}))
		g.try(fmt.Sprintf("ratio by %s, S %g, %g C, at that pH for R %g", r.key, r.s, r.t, r.ratio), r.ratio, r.ratio*1e-7, named(r.key, func(e acidbase.DyeEquation) float64 {
			return e.Ratio(r.ph, acidbase.DyeCondition{Salinity: r.s, TempC: r.t})
		}))
	}
	g.source = "Patsavas, Byrne & Liu 2013 (second-hand), computed"
	g.is("cresol red e3/e2, S 20, 25 C", 0.0318285705, 1e-9, func() float64 { _, v := acidbase.CresolRedRatios(20, 25); return v })
	return g.list
}
