package acidbase

import (
	"errors"
	"fmt"
	"math"
	"math/big"
	"testing"

	"pgregory.net/rapid"
)

// TestFractionsAgainstProducts compares with the textbook quotient of products
// of [H+] in 200-bit arithmetic.
func TestFractionsAgainstProducts(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 6).Draw(t, "n")
		pKa := make([]float64, n)
		for k := range pKa {
			pKa[k] = rapid.Float64Range(-3, 17).Draw(t, "pKa")
		}
		pH := rapid.Float64Range(-2, 16).Draw(t, "pH")
		alpha := make([]float64, n+1)
		Fractions(alpha, pH, pKa)
		terms := make([]*big.Float, n+1)
		sum := new(big.Float).SetPrec(200)
		exponent := 0.0
		for j := range terms {
			if j > 0 {
				exponent += pH - pKa[j-1]
			}
			// 10^x = 2^(x/log10 2): whole part exact, the rest from float64.
			x := exponent * math.Log2(10)
			whole := math.Floor(x)
			terms[j] = new(big.Float).SetPrec(200).SetMantExp(big.NewFloat(math.Exp2(x-whole)), int(whole))
			sum.Add(sum, terms[j])
		}
		total := 0.0
		for j, a := range alpha {
			want, _ := new(big.Float).Quo(terms[j], sum).Float64()
			if math.Abs(a-want) > 2e-12*want+1e-300 {
				t.Fatalf("share %d: %g, expected %g", j, a, want)
			}
			total += a
		}
		if math.Abs(total-1) > 1e-14 {
			t.Fatalf("shares sum to %.17g", total)
		}
	})
}

func TestFractionsGradients(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 4).Draw(t, "n")
		pKa := make([]float64, n)
		for k := range pKa {
			pKa[k] = rapid.Float64Range(0, 14).Draw(t, "pKa")
		}
		pH := rapid.Float64Range(-2, 16).Draw(t, "pH")
		alpha, dPH, dPKa := make([]float64, n+1), make([]float64, n+1), make([]float64, (n+1)*n)
		FractionsGrad(alpha, dPH, dPKa, pH, pKa)
		up, down := make([]float64, n+1), make([]float64, n+1)
		const h = 1e-4
		agree := func(name string, got, hi, lo float64) {
			want := (hi - lo) / (2 * h)
			// The third derivative is at most some ln10^3 times the share itself.
			if math.Abs(got-want) > 1e-6*math.Abs(want)+3e-7*math.Max(hi, lo)+1e-11 {
				t.Fatalf("%s: %g, difference quotient %g", name, got, want)
			}
		}
		Fractions(up, pH+h, pKa)
		Fractions(down, pH-h, pKa)
		sum := 0.0
		for j := range alpha {
			agree(fmt.Sprintf("d alpha %d / d pH", j), dPH[j], up[j], down[j])
			sum += dPH[j]
		}
		if math.Abs(sum) > 1e-13 {
			t.Fatalf("derivatives sum to %g", sum)
		}
		for k := range pKa {
			moved := append([]float64(nil), pKa...)
			moved[k] = pKa[k] + h
			Fractions(up, pH, moved)
			moved[k] = pKa[k] - h
			Fractions(down, pH, moved)
			for j := range alpha {
				agree(fmt.Sprintf("d alpha %d / d pKa %d", j, k), dPKa[j*n+k], up[j], down[j])
			}
		}
	})
}

// In the far tails the derivative keeps its relative precision.
func TestFractionsTails(t *testing.T) {
	alpha, dPH, dPKa := make([]float64, 2), make([]float64, 2), make([]float64, 2)
	FractionsGrad(alpha, dPH, dPKa, -2, []float64{16})
	near(t, "base form", alpha[1]/1e-18, 1, 1e-13)
	near(t, "d base / d pH", dPH[1]/(math.Ln10*1e-18), 1, 1e-13)
	near(t, "d acid / d pH", dPH[0]/(-math.Ln10*1e-18), 1, 1e-13)
	near(t, "d base / d pKa", dPKa[1]/(-math.Ln10*1e-18), 1, 1e-13)
	alpha = make([]float64, 5)
	Fractions(alpha, 16, []float64{-300, 400, -300, 400})
	for _, a := range alpha {
		if math.IsNaN(a) || math.IsInf(a, 0) {
			t.Fatalf("shares %v", alpha)
		}
	}
}

func TestFractionsAllocateNothing(t *testing.T) {
	alpha, d, g := make([]float64, 4), make([]float64, 4), make([]float64, 12)
	pKa := []float64{2.1, 7.2, 12.3}
	if n := testing.AllocsPerRun(100, func() { FractionsGrad(alpha, d, g, 7, pKa); _ = MeanProtonsLost(7, pKa) }); n != 0 {
		t.Errorf("%v allocations", n)
	}
}

// TestTwoForm: textbook problems solved again.
func TestTwoForm(t *testing.T) {
	sum := 0.0
	for _, r := range outside(t, "worked_bromophenol_blue.csv")[1:] { // Harvey, Analytical Chemistry 2.1, chapter 10
		got, _ := TwoForm(number(t, r[0]), number(t, r[1]), number(t, r[2]), number(t, r[3]), 0)
		near(t, "bromophenol blue, pH "+r[0], got, number(t, r[4]), 0.00006)
		sum += got / 5
	}
	near(t, "mean", sum, 3.953, 0.0006)
	// Skoog, weak acid at one wavelength: 4.8e-4 mol/L.
	pKa, _ := TwoForm(7.38, 0.45, 1.25, 0.29, 0)
	near(t, "weak acid", pKa, 6.681, 0.0006)
	// Noise in A: with amplitude one, 1.74 sigma at ratio 1 and 5.25 at ratio 10.
	_, u := TwoForm(7, 0.5, 0, 1, 1)
	near(t, "noise at ratio 1", u, 1.74, 0.005)
	_, u = TwoForm(7, 10.0/11, 0, 1, 1)
	near(t, "noise at ratio 10", u, 5.25, 0.005)
	if v, _ := TwoForm(7, 1.1, 0, 1, 0.001); !math.IsNaN(v) {
		t.Error("absorbance outside the limits gave a number")
	}
}

// TestLimitForms: bias of the ratio method when a limit form is not reached.
func TestLimitForms(t *testing.T) {
	alpha := make([]float64, 2)
	base := func(pH float64) float64 { Fractions(alpha, pH, []float64{7}); return alpha[1] }
	for _, r := range outside(t, "limit_form_error.csv")[1:] {
		d, at := number(t, r[0]), number(t, r[1])
		for i, high := range []float64{1, base(7 + d)} {
			got, _ := TwoForm(7+at, base(7+at), base(7-d), high, 0)
			if r[2+i] == "nan" {
				if !math.IsNaN(got) && !math.IsInf(got, 0) && math.Abs(got) < 20 {
					t.Errorf("d %g at %g: %g, expected none", d, at, got)
				}
				continue
			}
			near(t, fmt.Sprintf("d %g, pH-pKa %g, case %d", d, at, i), got-7, number(t, r[2+i]), 0.00006)
		}
	}
}

func TestConvertRoundTrip(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		z := rapid.IntRange(-3, 2).Draw(t, "z")
		c := Conditions{TemperatureC: rapid.Float64Range(5, 45).Draw(t, "t"), Ionic: rapid.Float64Range(0, 0.1).Draw(t, "I"),
			UIonic: 0.002, Model: Model(rapid.SampledFrom([]int{0, 1, 2, 3, 5}).Draw(t, "model"))}
		from, to := Constant(rapid.IntRange(0, 2).Draw(t, "from")), Constant(rapid.IntRange(0, 2).Draw(t, "to"))
		a, err := Convert(7.3, from, to, z, c)
		if err != nil {
			t.Fatal(err)
		}
		b, err := Convert(a.PKa, to, from, z, c)
		if err != nil {
			t.Fatal(err)
		}
		if math.Abs(b.PKa-7.3) > 1e-12 {
			t.Fatalf("back: %v", b.PKa)
		}
		if from == to {
			return
		}
		// The sensitivity to ionic strength is the slope of the shift.
		h := 1e-5
		c.Ionic += h
		up, err := Convert(7.3, from, to, z, c)
		if c.Ionic > 0.1 || err != nil {
			return
		}
		if got := (up.PKa - a.PKa) / h; c.Ionic > 0.005 && math.Abs(got-a.Terms[0].C) > 0.02*math.Abs(got)+1e-3 {
			t.Fatalf("sensitivity %g, slope %g", a.Terms[0].C, got)
		}
	})
}

// TestIonicFingerprint: to first order, +10 % of I at I = 0.1 moves a mixed
// constant by -0.0094 (z = -1), -0.0031 (0), +0.0031 (+1), with A = 0.509.
func TestIonicFingerprint(t *testing.T) {
	for z, want := range map[int]float64{-1: -0.0094, 0: -0.0031, 1: 0.0031} {
		a, _ := Convert(7, Thermodynamic, Mixed, z, Conditions{TemperatureC: 25, Ionic: 0.1})
		near(t, fmt.Sprintf("z %+d", z), a.Terms[0].C*0.01*0.509/a.A, want, 0.00005)
	}
	c, _ := Convert(7, Mixed, Thermodynamic, -1, Conditions{TemperatureC: 25, Ionic: 0.1})
	near(t, "model uncertainty at I = 0.1, z = -1", c.Terms[1].U, 0.02, 1e-12)
	_, err := Convert(7, Mixed, Thermodynamic, -1, Conditions{TemperatureC: 25, Ionic: 0.6})
	if !errors.Is(err, ErrIonicStrength) {
		t.Errorf("I = 0.6 with Davies: %v", err)
	}
}

func TestSpeciateProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		names := SubstanceNames()
		var recipe []Ingredient
		for range rapid.IntRange(1, 4).Draw(t, "parts") {
			recipe = append(recipe, Ingredient{Name: rapid.SampledFrom(names).Draw(t, "name"), Molar: rapid.Float64Range(1e-4, 0.05).Draw(t, "amount")})
		}
		c := rapid.Float64Range(5, 45).Draw(t, "t")
		s, err := Speciate(recipe, c, RecipeOption{})
		if err != nil {
			t.Fatalf("%v: %v", recipe, err)
		}
		charge, ionic := 0.0, 0.0
		for _, sp := range s.Species {
			if sp.Conc < 0 {
				t.Fatalf("negative concentration %+v", sp)
			}
			charge += float64(sp.Charge) * sp.Conc
			ionic += float64(sp.Charge*sp.Charge) * sp.Conc / 2
		}
		if math.Abs(charge) > 1e-10*(1+ionic) || math.Abs(ionic-s.Ionic) > 1e-9 {
			t.Fatalf("%v: charge %g, ionic strength %g against %g", recipe, charge, ionic, s.Ionic)
		}
		// More strong base never lowers the pH.
		more, err := Speciate(append(recipe, Ingredient{Name: "naoh", Molar: 1e-3}), c, RecipeOption{})
		if err != nil {
			t.Fatal(err)
		}
		if more.PH < s.PH-0.01 {
			t.Fatalf("%v: base moved pH from %g to %g", recipe, s.PH, more.PH)
		}
	})
}

func BenchmarkFractionsGrad(b *testing.B) {
	alpha, d, g := make([]float64, 4), make([]float64, 4), make([]float64, 12)
	pKa := []float64{2.1, 7.2, 12.3}
	for b.Loop() {
		FractionsGrad(alpha, d, g, 7, pKa)
	}
}
