package acidbase

import (
	"fmt"
	"math"
)

// A DyeEquation is a published equation that gives pH from the ratio R of the
// absorbances of an indicator at the maxima of its base and acid form.
type DyeEquation struct {
	Key      string
	Dye      string
	Source   string
	Scale    string     // "total", "free", "seawater"
	BaseNM   float64    // numerator of R
	AcidNM   float64    // denominator of R
	Salinity [2]float64 // range stated; NaN: none known here
	TempC    [2]float64 // range stated, degrees Celsius; NaN: none known here
	Fresh    bool       // takes ionic strength instead of salinity
	Memory   bool       // coefficients quoted from memory

	terms func(c DyeCondition) ratioTerms
}

// A DyeCondition is where R was measured.
type DyeCondition struct {
	Salinity float64 // practical salinity
	TempC    float64
	Ionic    float64 // mol/L, for fresh-water equations
}

// ratioTerms are pH = pk + log10((R f - e1)/(e2 - R f e3)).
type ratioTerms struct{ pk, e1, e2, e3, f float64 }

// PH is the pH of a ratio R; NaN when R lies outside the limits of the forms.
// Range is not checked: see Check.
func (e DyeEquation) PH(r float64, c DyeCondition) float64 {
	t := e.terms(c)
	if t.f != 0 {
		r *= t.f
	}
	q := (r - t.e1) / (t.e2 - r*t.e3)
	if !(q > 0) {
		return math.NaN()
	}
	return t.pk + math.Log10(q)
}

// Ratio is the ratio R that belongs to a pH: the inverse of PH.
func (e DyeEquation) Ratio(pH float64, c DyeCondition) float64 {
	t := e.terms(c)
	q := math.Pow(10, pH-t.pk)
	r := (q*t.e2 + t.e1) / (1 + q*t.e3)
	if t.f != 0 {
		r /= t.f
	}
	return r
}

// Check says whether the condition lies in the range stated for the equation.
func (e DyeEquation) Check(c DyeCondition) error {
	if c.TempC < e.TempC[0] || c.TempC > e.TempC[1] {
		return fmt.Errorf("%s: %.4g °C is outside %.4g to %.4g °C", e.Key, c.TempC, e.TempC[0], e.TempC[1])
	}
	if !e.Fresh && (c.Salinity < e.Salinity[0] || c.Salinity > e.Salinity[1]) {
		return fmt.Errorf("%s: salinity %.4g is outside %.4g to %.4g", e.Key, c.Salinity, e.Salinity[0], e.Salinity[1])
	}
	return nil
}

// DyeEquationNamed finds an equation by key.
func DyeEquationNamed(key string) (DyeEquation, bool) {
	for _, e := range DyeEquations() {
		if e.Key == key {
			return e, true
		}
	}
	return DyeEquation{}, false
}

// DyeEquations lists the published equations. Those of purified dye and of dye
// as bought differ by about 0.01 for m-cresol purple; a chart must not mix them.
func DyeEquations() []DyeEquation {
	return []DyeEquation{
		{Key: "mcp-1993", Dye: "m-cresol purple", Source: "Clayton & Byrne, Deep-Sea Res. I 40 (1993) 2115", Scale: "total",
			BaseNM: 578, AcidNM: 434, Salinity: [2]float64{30, 37}, TempC: [2]float64{20, 30},
			terms: func(c DyeCondition) ratioTerms {
				return ratioTerms{pk: 1245.69/(c.TempC+Kelvin) + 3.8275 + 0.00211*(35-c.Salinity), e1: 0.0069, e2: 2.2220, e3: 0.1330}
			}},
		{Key: "mcp-2011", Dye: "m-cresol purple, purified", Source: "Liu, Patsavas & Byrne, Environ. Sci. Technol. 45 (2011) 4862", Scale: "total",
			BaseNM: 578, AcidNM: 434, Salinity: [2]float64{20, 40}, TempC: [2]float64{5, 35}, terms: mcp2011},
		{Key: "mcp-2018", Dye: "m-cresol purple, purified", Source: "Müller & Rehder, Front. Mar. Sci. 5 (2018) 177", Scale: "total",
			BaseNM: 578, AcidNM: 434, Salinity: [2]float64{5, 40}, TempC: [2]float64{5, 35}, Memory: true, terms: mcp2018},
		{Key: "tb-1996", Dye: "thymol blue", Source: "Zhang & Byrne, Deep-Sea Res. I 43 (1996) 1439", Scale: "total",
			BaseNM: 596, AcidNM: 435, Salinity: [2]float64{30, 40}, TempC: [2]float64{5, 35}, Memory: true,
			terms: func(c DyeCondition) ratioTerms {
				t := c.TempC + Kelvin
				return ratioTerms{pk: 4.706*c.Salinity/t + 26.3300 - 7.17218*math.Log10(t) - 0.017316*c.Salinity,
					e1: -0.00132 + 1.600e-5*t, e2: 7.2326 - 0.0299717*t + 4.600e-5*t*t, e3: 0.0223 + 0.0003917*t}
			}},
		{Key: "bcg-1993", Dye: "bromocresol green", Source: "Breland & Byrne 1993, as given by Yao & Byrne, Deep-Sea Res. I 45 (1998) 1383", Scale: "total",
			BaseNM: 616, AcidNM: 444, Salinity: [2]float64{29, 37}, TempC: [2]float64{13, 32},
			terms: func(c DyeCondition) ratioTerms {
				return ratioTerms{pk: 4.2699 + 0.002578*(35-c.Salinity) - math.Log10(1-0.001005*c.Salinity),
					e1: 0.00131, e2: 2.3148, e3: 0.1299, f: 1 + 0.00909*(25-c.TempC)}
			}},
		{Key: "bcp-1998", Dye: "bromocresol purple", Source: "Yao & Byrne, Deep-Sea Res. I 45 (1998) 1383", Scale: "total",
			BaseNM: 589, AcidNM: 432, Salinity: [2]float64{29, 37}, TempC: [2]float64{13, 32},
			terms: func(c DyeCondition) ratioTerms {
				return ratioTerms{pk: 5.8182 + 0.00129*(35-c.Salinity), e1: 0.00381, e2: 2.8729, e3: 0.05104, f: 1 + 0.01869*(25-c.TempC)}
			}},
		{Key: "bcp-2021", Dye: "bromocresol purple, purified", Source: "Hudson-Heck, Liu & Byrne, ACS Omega 6 (2021) 17941", Scale: "seawater",
			BaseNM: 588, AcidNM: 432, Salinity: [2]float64{0, 40}, TempC: [2]float64{5, 35}, terms: bcp2021},
		{Key: "bpb-2018", Dye: "bromophenol blue, purified", Source: "Nand & Ellwood, Limnol. Oceanogr. Methods (2018)", Scale: "total",
			BaseNM: 590, AcidNM: 436, Salinity: [2]float64{math.NaN(), math.NaN()}, TempC: [2]float64{math.NaN(), math.NaN()},
			terms: func(c DyeCondition) ratioTerms {
				return ratioTerms{pk: 3.513 + 0.001746*(35-c.Salinity), e1: 0.00533, e2: 2.232, e3: 0.0319, f: 1 + 0.006774*(25-c.TempC)}
			}},
		{Key: "cr-1989", Dye: "cresol red", Source: "Byrne & Breland, Deep-Sea Res. 36 (1989) 803", Scale: "total",
			BaseNM: 573, AcidNM: 433, Salinity: [2]float64{30, 37}, TempC: [2]float64{25, 25}, Memory: true,
			terms: func(c DyeCondition) ratioTerms {
				return ratioTerms{pk: 7.8164 + 0.004*(35-c.Salinity), e1: 0.00286, e2: 2.7985, e3: 0.09025}
			}},
		{Key: "bcp-2001", Dye: "bromocresol purple", Source: "Yao & Byrne, Environ. Sci. Technol. 35 (2001) 1197", Scale: "free",
			BaseNM: 589, AcidNM: 432, TempC: [2]float64{10, 30}, Fresh: true,
			terms: func(c DyeCondition) ratioTerms {
				return ratioTerms{pk: 5.226 + 378.1/(c.TempC+Kelvin) - freshSalt(c), e1: 0.00387, e2: 2.858, e3: 0.0181}
			}},
		{Key: "pr-2001", Dye: "phenol red", Source: "Yao & Byrne, Environ. Sci. Technol. 35 (2001) 1197", Scale: "free",
			BaseNM: 558, AcidNM: 433, TempC: [2]float64{10, 30}, Fresh: true,
			terms: func(c DyeCondition) ratioTerms {
				return ratioTerms{pk: 5.798 + 666.7/(c.TempC+Kelvin) - freshSalt(c), e1: 0.00244, e2: 2.734, e3: 0.1075}
			}},
	}
}

// freshSalt is the salt effect as Yao & Byrne 2001 use it: 4 A (r/(1+r) - 0.3 I).
func freshSalt(c DyeCondition) float64 {
	a := 0.5092 + (c.TempC+Kelvin-298.15)*8.5e-4
	return -4 * Davies.LogGamma(1, c.Ionic, a, 0, 0)
}

// mcpRatios are e1 and e3/e2 of purified m-cresol purple (Liu et al. 2011);
// PH then reads -log10(K2 e2) + log10((R - e1)/(1 - R e3/e2)).
func mcpRatios(t, s float64) (e1, e32 float64) {
	return -0.007762 + 4.5174e-5*t, -0.020813 + 2.60262e-4*t + 1.0436e-4*(s-35)
}

func mcp2011(c DyeCondition) ratioTerms {
	t, s := c.TempC+Kelvin, c.Salinity
	a := -246.64209 + 0.315971*s + 2.8855e-4*s*s
	b := 7229.23864 - 7.098137*s - 0.057034*s*s
	k := 44.493382 - 0.052711*s
	e1, e32 := mcpRatios(t, s)
	// The natural logarithm: with log10 the constant becomes -129.8 instead of 7.6479.
	return ratioTerms{pk: a + b/t + k*math.Log(t) - 0.0781344*t, e1: e1, e2: 1, e3: e32}
}

func mcp2018(c DyeCondition) ratioTerms {
	t, s := c.TempC+Kelvin, c.Salinity
	r := math.Sqrt(s)
	s15, s2, s25, ln := s*r, s*s, s*s*r, math.Log(t)
	pk := 1.08071477e+03 - 1.35394946e-01*r - 1.98063716e+02*s15 + 6.31924397e+01*s2 - 5.18141866e+00*s25 +
		(-2.66457425e+04+5.08796578e+03*s15-1.62454827e+03*s2+1.33276788e+02*s25)/t +
		(-1.89671212e+02+3.49038762e+01*s15-1.11336508e+01*s2+9.12761930e-01*s25)*ln +
		(3.27430677e-01-7.51448528e-04*r+3.94838229e-04*s-6.00237876e-02*s15+1.90997693e-02*s2-1.56396488e-03*s25)*t
	e1, e32 := mcpRatios(t, s)
	return ratioTerms{pk: pk, e1: e1, e2: 1, e3: e32}
}

func bcp2021(c DyeCondition) ratioTerms {
	t, s := c.TempC+Kelvin, c.Salinity
	r := math.Sqrt(s)
	s15 := s * r
	pk := 4.981 - 0.1710*r + 0.09428*s + 0.3794*s15 + 0.0009129*s*s + 310.2/t - 17.33*s15/t - 0.05895*s15*math.Log(t) - 0.0005730*r*t
	return ratioTerms{pk: pk, e1: 0.00049, e2: 1, e3: -7.101e-3 + 7.674e-5*t + 1.361e-5*s}
}

// CresolRedRatios are e1 and e3/e2 of purified cresol red (Patsavas, Byrne &
// Liu, Mar. Chem. 150 (2013) 19).
func CresolRedRatios(salinity, tC float64) (e1, e32 float64) {
	t := tC + Kelvin
	return -0.00413 + 1.814e-5*t, -0.021683 + 1.8107e-4*t + 3.163e-5*(salinity-35)
}

// TrisPH is the total-scale pH of 0.04 mol/kg TRIS buffer in synthetic seawater
// (DelValls & Dickson, Deep-Sea Res. I 45 (1998) 1541; coefficients from memory,
// they reproduce 8.0936 at S = 35, 25 C).
func TrisPH(salinity, tC float64) float64 {
	t, s := tC+Kelvin, salinity
	return (11911.08-18.2499*s-0.039336*s*s)/t - 366.27059 + 0.53993607*s + 0.00016329*s*s + (64.52243-0.084041*s)*math.Log(t) - 0.11149858*t
}

// AminopyridinePH is the total-scale pH of 2-aminopyridine buffer in synthetic
// seawater (Dickson, Sabine & Christian 2007; coefficients from memory, they
// reproduce 6.7866 at S = 35, 25 C).
func AminopyridinePH(salinity, tC float64) float64 {
	t, s := tC+Kelvin, salinity
	return (111.35+5.44875*s)/t + 41.6775 - 0.015683*s - 6.20815*math.Log(t) - math.Log10(1-0.00106*s)
}

// PotentiometricPH is the pH of a sample from the potentials in it and in a
// standard, mV: standard + (E_standard - E_sample)/k.
func PotentiometricPH(standardPH, sampleMV, standardMV, tC float64) float64 {
	return standardPH + (standardMV-sampleMV)/NernstSlope(tC)
}
