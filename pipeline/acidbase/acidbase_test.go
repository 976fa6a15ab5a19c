package acidbase

import (
	"errors"
	"fmt"
	"math"
	"math/big"
	"math/rand/v2"
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

// demoElectrode is a three-buffer calibration with chosen slopes.
func demoElectrode(t *testing.T, acid, base float64) *Electrode {
	t.Helper()
	k := NernstSlope(25)
	p := []CalPoint{{10.012, -(10.012-6.865)*k*base - 3, 25, "C"}, {4.005, (6.865-4.005)*k*acid - 3, 25, "A"}, {6.865, -3, 25, "B"}}
	e, err := Calibrate(p, 25)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

func TestCalibrate(t *testing.T) {
	e := demoElectrode(t, 0.99, 0.97)
	near(t, "acid slope", e.Segments[0].Percent, 99, 1e-9)
	near(t, "base slope", e.Segments[1].Percent, 97, 1e-9)
	near(t, "potential at 7", e.PotentialAt7, -3-0.135*0.97*e.Nernst, 1e-9)
	// The middle buffer on the chord of its neighbours.
	chord := 4.005 + (e.Points[0].MilliVolt+3)*(10.012-4.005)/(e.Points[0].MilliVolt-e.Points[2].MilliVolt)
	near(t, "residual of the middle buffer", e.Worst, chord-6.865, 1e-12)
	for _, p := range e.Points {
		near(t, "buffer back", e.PH(p.MilliVolt), p.PH, 1e-12)
	}
	rapid.Check(t, func(t *rapid.T) {
		pH := rapid.Float64Range(0, 14).Draw(t, "pH")
		if got := e.PH(e.MilliVolt(pH)); math.Abs(got-pH) > 1e-10 {
			t.Fatalf("pH %g back as %g", pH, got)
		}
	})
	near(t, "outside", e.Outside(3.5), 0.505, 1e-12)
	near(t, "inside", e.Outside(7), 0, 0)
}

// TestSharedAgainstRecalibration: every effect against a calibration in which
// the input is really wrong.
func TestSharedAgainstRecalibration(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		k := NernstSlope(25)
		label := []float64{1.68, 4.005, 6.865, 10.012}[rapid.IntRange(0, 2).Draw(t, "first"):]
		truth := make([]float64, len(label))
		noise := make([]float64, len(label))
		for j := range label {
			truth[j] = label[j] + rapid.Float64Range(-1e-4, 1e-4).Draw(t, "e")
			noise[j] = rapid.Float64Range(-1e-3, 1e-3).Draw(t, "mV")
		}
		slope := rapid.Float64Range(0.93, 1.02).Draw(t, "slope")
		at := func(pH float64) float64 { return -(pH - 7) * k * slope }
		pts := make([]CalPoint, len(label))
		ideal := make([]CalPoint, len(label))
		for j := range label {
			lot := fmt.Sprint("lot", j)
			pts[j] = CalPoint{label[j], at(truth[j]) + noise[j], 25, lot}
			ideal[j] = CalPoint{label[j], at(label[j]), 25, lot}
		}
		e, err := Calibrate(pts, 25)
		if err != nil {
			t.Fatal(err)
		}
		ref, err := Calibrate(ideal, 25)
		if err != nil {
			t.Fatal(err)
		}
		ph := []float64{rapid.Float64Range(0, 13).Draw(t, "pH")}
		predicted := 0.0
		buffers, readings := 0, 0
		for _, f := range ref.Shared(ph) {
			switch f.Kind {
			case BufferValue:
				predicted += f.S[0] * (truth[buffers] - label[buffers])
				buffers++
			case PointReading:
				predicted += f.S[0] * noise[readings]
				readings++
			}
		}
		got := e.PH(at(ph[0])) - ph[0]
		// Near a kink the reading may fall on the other segment.
		if math.Abs(got-predicted) > 2e-6+0.01*math.Abs(predicted) {
			t.Fatalf("reading error at %g: %g, predicted %g", ph[0], got, predicted)
		}
	})
}

// TestBufferFingerprints: the figures a drift table is built on: high buffer
// -0.05 moves readings at 8.26 by +0.022 and the segment by -1.59 %; compensation
// two kelvin too warm acts as a slope.
func TestBufferFingerprints(t *testing.T) {
	e := demoElectrode(t, 1, 1)
	s := e.Shared([]float64{4.66, 8.26, 8.90})
	high := s[2] // buffers ascending: 4.005, 6.865, 10.012
	if high.Kind != BufferValue || high.Lot != "C" {
		t.Fatalf("third effect is %+v", high)
	}
	near(t, "high buffer -0.05 at 8.26", high.S[1]*-0.05, 0.0220, 0.0003)
	near(t, "high buffer -0.05 at 8.90", high.S[2]*-0.05, 0.0323, 0.0001)
	near(t, "high buffer at 4.66", high.S[0], 0, 0)
	near(t, "segment", -0.05/(10.012-6.865), -0.0159, 0.0001)
	last := s[len(s)-1]
	near(t, "compensation +2 K at 8.26", 2*last.S[1], -0.009, 0.0006)
	near(t, "compensation +2 K at 4.66", 2*last.S[0], 0.016, 0.0006)
	slope := s[len(s)-2]
	near(t, "slope -1 % at 4.66", -0.01*slope.S[0], 0.0234, 0.0001)
	near(t, "slope -1 % at 8.26", -0.01*slope.S[1], -0.0126, 0.0001)
	// A lot used for two buffers counts once, with both weights.
	k := NernstSlope(25)
	two, err := Calibrate([]CalPoint{{4.005, 3 * k, 25, "X"}, {6.865, 0.1 * k, 25, "X"}}, 25)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "one lot for both buffers", two.Shared([]float64{5})[0].S[0], -1, 1e-12)
}

func TestInterchangedBuffers(t *testing.T) {
	k := NernstSlope(25)
	_, err := Calibrate([]CalPoint{{4.005, 3 * k, 25, ""}, {6.865, -3 * k, 25, ""}, {10.012, 0.1 * k, 25, ""}}, 25)
	var s *SlopeError
	if !errors.As(err, &s) {
		t.Fatalf("interchanged buffers gave %v", err)
	}
	if s.Exchange != [2]float64{6.865, 10.012} {
		t.Errorf("exchange %v: %s", s.Exchange, s)
	}
	if _, err = Calibrate([]CalPoint{{4.005, 0, 25, ""}, {6.865, 1, 25, ""}, {10.012, 0.5, 25, ""}}, 25); !errors.As(err, &s) || s.Exchange != [2]float64{} {
		t.Errorf("dead electrode: %v", err)
	}
	for _, bad := range [][]CalPoint{nil, {{7, 0, 25, ""}}, {{7, 0, 25, ""}, {7.1, -6, 25, ""}}, {{7, math.NaN(), 25, ""}, {4, 170, 25, ""}}, {{70, 0, 25, ""}, {4, 170, 25, ""}}} {
		if _, err := Calibrate(bad, 25); err == nil {
			t.Errorf("%v was accepted", bad)
		}
	}
}

// A calibration read in buffers of another temperature is brought to its own.
func TestCalibrationTemperature(t *testing.T) {
	k20 := NernstSlope(20)
	e, err := Calibrate([]CalPoint{{4.0, 3*k20*0.98 + 5, 20, ""}, {7, 5, 20, ""}, {10, -3*k20*0.98 + 5, 20, ""}}, 25)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "percent at 25 °C", e.Segments[0].Percent, 98, 1e-9)
	near(t, "potential at 7", e.PotentialAt7, 5, 1e-9)
}

// TestSeriesCoverage: the stated uncertainty of each extrapolation is the
// scatter it really has, with a shared calibration error in it.
func TestSeriesCoverage(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 5))
	kinds := map[string]struct {
		points func(shared float64) []SeriesPoint
		solve  func([]SeriesPoint) (*Series, error)
		truth  float64
	}{
		"ionic strength": {
			points: func(shared float64) []SeriesPoint {
				var out []SeriesPoint
				for _, i := range []float64{0.01, 0.02, 0.04, 0.07, 0.1} {
					c, _ := Convert(8.1+0.2*i, Thermodynamic, Mixed, -1, Conditions{TemperatureC: 25, Ionic: i})
					out = append(out, SeriesPoint{PKa: c.PKa + shared + 0.004*rng.NormFloat64(), U: 0.004, TemperatureC: 25, Ionic: i})
				}
				return out
			},
			solve: func(p []SeriesPoint) (*Series, error) { return AtZeroIonicStrength(p, -1, RecipeOption{}, true) },
			truth: 8.1,
		},
		"temperature": {
			points: func(shared float64) []SeriesPoint {
				var out []SeriesPoint
				for _, c := range []float64{10, 15, 20, 25, 30, 40} {
					out = append(out, SeriesPoint{PKa: ClarkeGlew(8.1, 20, -150, 25, c) + shared + 0.004*rng.NormFloat64(), U: 0.004, TemperatureC: c})
				}
				return out
			},
			solve: func(p []SeriesPoint) (*Series, error) { return OverTemperature(p, 25, true) },
			truth: 8.1,
		},
		"cosolvent": {
			points: func(shared float64) []SeriesPoint {
				var out []SeriesPoint
				water := math.Log10(Density(25) / 1000 / molarMassWater)
				for _, x := range []float64{0.2, 0.3, 0.4, 0.5, 0.6} {
					eps, molar := 78.3-45*x, 55.3*(1-x)
					y := 4.2 + water + 110*(1/eps-1/PermittivityMM(25)) - math.Log10(molar)
					out = append(out, SeriesPoint{PKa: y + shared + 0.02*rng.NormFloat64(), U: 0.01, UComposition: math.Sqrt(0.0003), Permittivity: eps, WaterMolar: molar})
				}
				return out
			},
			solve: func(p []SeriesPoint) (*Series, error) { return YasudaShedlovsky(p, 25) },
			truth: 4.2,
		},
	}
	for name, k := range kinds {
		const sets = 4000
		inside, chi, own := 0, 0.0, 0.0
		var last *Series
		for range sets {
			shared := 0.01 * rng.NormFloat64()
			p := k.points(shared)
			for i := range p {
				p[i].Terms = []Term{{Key: "calibration", C: 1, U: 0.01, Unit: "pH"}}
			}
			s, err := k.solve(p)
			if err != nil {
				t.Fatal(err)
			}
			if math.Abs(s.Coef[0]-k.truth) < 1.96*s.U {
				inside++
			}
			chi += s.ChiSq / float64(s.DOF) / sets
			own += (s.Coef[0] - k.truth - shared) * (s.Coef[0] - k.truth - shared) / sets
			last = s
		}
		near(t, name+" coverage", float64(inside)/sets, 0.95, 0.012)
		near(t, name+" chi square per degree", chi, 1, 0.06)
		near(t, name+" own uncertainty", math.Sqrt(own)/last.UOwn, 1, 0.05)
		near(t, name+" budget", Combined(last.Terms), last.U, 1e-9)
		near(t, name+" shared sensitivity", last.Terms[0].C, 1, 1e-6)
	}
}

// An outlier is named by its distance from the line of the others.
func TestSeriesLeaveOneOut(t *testing.T) {
	var p []SeriesPoint
	for i, c := range []float64{5, 12, 20, 28, 36, 44} {
		p = append(p, SeriesPoint{PKa: VantHoff(7, 15, 25, c), U: 0.004, TemperatureC: c})
		if i == 3 {
			p[i].PKa += 0.06
		}
	}
	s, err := OverTemperature(p, 25, false)
	if err != nil {
		t.Fatal(err)
	}
	for i, z := range s.ZOut {
		if i == 3 && math.Abs(z) < 8 {
			t.Errorf("point %d: %g", i, z)
		}
		if i != 3 && math.Abs(z) >= math.Abs(s.ZOut[3]) {
			t.Errorf("point %d stands out more than the outlier: %v", i, s.ZOut)
		}
	}
	if _, err := OverTemperature(p[:1], 25, false); !errors.Is(err, ErrSeries) {
		t.Errorf("one point for two coefficients: %v", err)
	}
	if _, err := OverTemperature([]SeriesPoint{p[0], p[0]}, 25, false); !errors.Is(err, ErrSeries) {
		t.Errorf("one temperature twice: %v", err)
	}
}

// The five-point cosolvent series 20..60 % gives 1.34 sigma at 0 % when the
// abscissa is the fraction itself: the intercept formula of a straight line.
func TestInterceptFormula(t *testing.T) {
	x := [][]float64{{1, 0.2}, {1, 0.3}, {1, 0.4}, {1, 0.5}, {1, 0.6}}
	own := []float64{1, 1, 1, 1, 1}
	s, err := generalised(x, []float64{1, 2, 3, 4, 5}, own, make([][]Term, 5))
	if err != nil {
		t.Fatal(err)
	}
	near(t, "intercept", s.U, 1.34, 0.005)
}

func TestSpeciateProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		names := SubstanceNames()
		var recipe []Ingredient
		for range rapid.IntRange(1, 4).Draw(t, "parts") {
			recipe = append(recipe, Ingredient{rapid.SampledFrom(names).Draw(t, "name"), rapid.Float64Range(1e-4, 0.05).Draw(t, "amount")})
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
		more, err := Speciate(append(recipe, Ingredient{"naoh", 1e-3}), c, RecipeOption{})
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
