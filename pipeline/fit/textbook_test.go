package fit

import (
	"encoding/csv"
	"encoding/json"
	"math"
	"os"
	"slices"
	"sort"
	"strconv"
	"testing"
)

// far is a pH at which a limit form is wholly reached.
const far = 7

func TestClassicalBromophenolBlue(t *testing.T) {
	// check-values chemistry 6.1 item 2 (worked_bromophenol_blue.csv): limits
	// 0.006 and 0.818, five points, pointwise pKa to 4 decimals, mean 3.953.
	p := Problem{WavelengthNM: []float64{590}, Steps: 1,
		PH: []float64{3.95 - far, 3.35, 3.65, 3.94, 4.30, 4.64, 3.95 + far},
		A:  []float64{0.006, 0.170, 0.287, 0.411, 0.562, 0.670, 0.818}}
	r, err := Classical(p)
	if err != nil {
		t.Fatal(err)
	}
	mean := 0.0
	for i, want := range []float64{3.9467, 3.9264, 3.9421, 3.9632, 3.9881} {
		within(t, "pointwise pKa", r.EachPKa[i], want, 6e-5)
		mean += r.EachPKa[i] / 5
	}
	within(t, "mean", mean, 3.953, 5e-4)
	// Weighted by the noise of A with the limits fixed: 3.948, u 0.009 with
	// s(A) 0.0078. Limits measured 200 times over are as good as fixed.
	p.NoiseWave = []float64{0.0078}
	for range 200 {
		p.PH, p.A = append(p.PH, 3.95-far, 3.95+far), append(p.A, 0.006, 0.818)
	}
	r, err = Classical(p)
	if err != nil {
		t.Fatal(err)
	}
	within(t, "weighted pKa", r.PKa, 3.948, 2e-3)
	within(t, "u", r.UOwn, 0.009, 5e-4)
}

func TestWeakAcidOneWavelength(t *testing.T) {
	// check-values chemistry 6.1 item 4 (worked_weak_acid_HA.csv): pKa 6.681.
	p := Problem{WavelengthNM: []float64{300}, Steps: 1,
		PH: []float64{1, 2, 7.38, 11, 12}, A: []float64{1.25, 1.25, 0.45, 0.29, 0.29}}
	r, err := Classical(p)
	if err != nil {
		t.Fatal(err)
	}
	within(t, "classical pKa", r.PKa, 6.681, 1e-3)
	f, err := Solve(p, Options{})
	if err != nil {
		t.Fatal(err)
	}
	within(t, "fitted pKa", f.Full.PKa[0], 6.681, 1e-3)
	if len(r.Acid) != 2 || len(r.Base) != 2 || len(r.Between) != 1 {
		t.Errorf("roles %v %v %v", r.Acid, r.Between, r.Base)
	}
}

func TestTwoWavelengthIndicator(t *testing.T) {
	// check-values chemistry 6.1 item 3 (worked_two_wavelength.csv): pKa 5.731
	// from two wavelengths without assuming the amount.
	lib := []float64{0.487, 0.181, 0.075, 0.904} // acid form, base form at 485 and 625 nm
	p := Problem{WavelengthNM: []float64{485, 625}, Steps: 1, PH: []float64{5},
		A: []float64{0.567, 0.395}, Library: lib, NoiseWave: []float64{0.001, 0.001}, SigmaPH: []float64{0.01}}
	r, err := Solve(p, Options{})
	if err != nil || r.Status != Converged {
		t.Fatalf("%v %v", err, r.Status)
	}
	within(t, "library pKa", r.Full.PKa[0], 5.731, 5e-4)
	within(t, "gain of the only reading", r.Full.Gain[0], 1, 1e-9)
	// Unknown pH of the second mixture: pH 4.582.
	p.A = []float64{0.492, 0.245}
	r, err = Solve(p, Options{})
	if err != nil {
		t.Fatal(err)
	}
	within(t, "pH from absorbances", 5.7310+5-r.Full.PKa[0], 4.582, 1e-3)
}

func TestLimitFormError(t *testing.T) {
	// check-values chemistry, limit_form_error.csv: bias when both limit solutions
	// stand at pKa -+ d and are taken as pure; our correction removes it.
	for _, c := range []struct{ d, at, bias float64 }{
		{1, -0.5, 0.1511}, {1.5, 0.5, -0.0414}, {2, -1, 0.0453}, {2, 0.5, -0.0126}, {2.5, 1, -0.0138}, {3, -0.5, 0.0012},
	} {
		const pka = 7.0
		ph := []float64{pka - c.d, pka + c.at, pka + c.d}
		p := Problem{WavelengthNM: []float64{500}, Steps: 1, PH: ph, NoiseWave: []float64{1e-4}}
		for _, v := range ph {
			p.A = append(p.A, 0.1+0.8/(1+math.Pow(10, pka-v)))
		}
		r, err := Classical(p)
		if err != nil {
			t.Fatal(err)
		}
		within(t, "bias without correction", r.Uncorrected-pka, c.bias, 1e-4)
		within(t, "corrected", r.PKa, pka, 1e-9)
		s, err := Solve(p, Options{})
		if err != nil {
			t.Fatal(err)
		}
		within(t, "fit of three solutions", s.Full.PKa[0], pka, 1e-6)
	}
}

// phenolRed interpolates the digitised points linearly in steps of 5 nm, as the
// published computation does.
func phenolRed(t *testing.T) Problem {
	f, err := os.Open(sharedFolder(t, "data", "real", "phenol_red_digitised", "vertices.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	rows, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	p := Problem{Steps: 1}
	points := map[float64][][2]float64{}
	for _, r := range rows[1:] {
		var v [3]float64
		for i := range v {
			if v[i], err = strconv.ParseFloat(r[i], 64); err != nil {
				t.Fatal(err)
			}
		}
		if points[v[0]] == nil {
			p.PH = append(p.PH, v[0])
		}
		points[v[0]] = append(points[v[0]], [2]float64{v[1], v[2]})
	}
	for nm := 360.0; nm <= 620; nm += 5 {
		p.WavelengthNM = append(p.WavelengthNM, nm)
	}
	for _, ph := range p.PH {
		for _, nm := range p.WavelengthNM {
			list := points[ph]
			sort.Slice(list, func(i, j int) bool { return list[i][0] < list[j][0] })
			list = slices.CompactFunc(list, func(a, b [2]float64) bool { return a[0] == b[0] })
			k := 1
			for k < len(list)-1 && (list[k][0] < nm) {
				k++
			}
			a, b := list[k-1], list[k]
			x := min(max((nm-a[0])/(b[0]-a[0]), 0), 1)
			p.A = append(p.A, a[1]+(b[1]-a[1])*x)
		}
	}
	return p
}

// TestPhenolRedDigitised: the published facts about the digitised spectra
// (check-values chemistry 6.1 item 1): multiwavelength pKa 7.935, residual
// 0.029, singular values, two components by the indicator function.
func TestPhenolRedDigitised(t *testing.T) {
	p := phenolRed(t)
	r, err := Solve(p, Options{})
	if err != nil {
		t.Fatal(err)
	}
	within(t, "pKa", r.Full.PKa[0], 7.935, 1e-3)
	within(t, "residual standard deviation", r.NoiseSD, 0.029, 6e-4) // RSS over (m-2)w-1
	if r.Indicator != 2 {
		t.Errorf("indicator function: %d components, published 2", r.Indicator)
	}
	scale := math.Sqrt(float64(len(p.A)))
	for i, want := range []float64{9.433, 5.425, 0.0332, 0.0220, 0.0203, 0.0153, 0.0146} {
		within(t, "singular value", r.Singular[i]*scale, want, 0.0006)
	}
	// Even with readings uncertain by 0.02 and amounts by 1 % the two-form model is
	// refused, and two steps are no answer: the pH axis, printed in integers, is wrong.
	for range p.PH {
		p.SigmaPH = append(p.SigmaPH, 0.02)
	}
	p.UAmount, p.UBaseline = 0.01, 0.002
	c, err := ModelChoice(p, 2)
	if err != nil {
		t.Fatal(err)
	}
	if c.Steps != 1 || c.Warning == "" {
		t.Errorf("chose %d steps, warning %q: want one step and a warning about equilibria or the pH axis", c.Steps, c.Warning)
	}
	for _, m := range c.Models {
		t.Logf("%d steps: misfit %.1f on %d, p %.2g, gain %.1f: %s", m.Steps, m.Misfit, m.DOF, m.P, m.Gain, m.Reason)
	}
}

func TestYorkLine(t *testing.T) {
	// Pearson 1901 points with York 1966 weights (check-values statistics 4).
	x := []float64{0, .9, 1.8, 2.6, 3.3, 4.4, 5.2, 6.1, 6.5, 7.4}
	y := []float64{5.9, 5.4, 4.4, 4.6, 3.5, 3.7, 2.8, 2.8, 2.4, 1.5}
	wx := []float64{1000, 1000, 500, 800, 200, 80, 60, 20, 1.8, 1}
	wy := []float64{1, 1.8, 4, 8, 20, 20, 70, 70, 100, 500}
	sx, sy := make([]float64, 10), make([]float64, 10)
	for i := range x {
		sx[i], sy[i] = 1/math.Sqrt(wx[i]), 1/math.Sqrt(wy[i])
	}
	l, err := York(x, y, sx, sy, nil)
	if err != nil {
		t.Fatal(err)
	}
	within(t, "slope", l.Slope, -0.480533407446202, 1e-13)
	within(t, "intercept", l.Intercept, 5.47991022403287, 1e-12)
	within(t, "S", l.S, 11.8663531940614, 1e-11)
	within(t, "MSWD", l.MSWD, 1.48329414925768, 1e-12)
	within(t, "u slope", l.USlope, 0.0579850090007744, 1e-13)
	within(t, "u intercept", l.UIntercept, 0.294970735493109, 1e-13)
	within(t, "sd slope", l.SDSlope, 0.0706202695287709, 1e-13)
	within(t, "sd intercept", l.SDIntercept, 0.359246522551112, 1e-12)
	within(t, "covariance", l.Covariance, -0.0164725446581158, 1e-13)
}

func TestResultJSON(t *testing.T) {
	p := golden()
	p.Steps = 1
	r, err := Solve(p, Options{})
	if err != nil {
		t.Fatal(err)
	}
	r.Slope, r.SlopeSD, r.Condition = math.NaN(), math.NaN(), math.Inf(1)
	b, err := json.Marshal(r)
	if err != nil {
		t.Fatal(err)
	}
	var back Result
	if err := json.Unmarshal(b, &back); err != nil {
		t.Fatal(err)
	}
	if !math.IsNaN(back.Slope) || !math.IsInf(back.Condition, 1) || back.Full.PKa[0] != r.Full.PKa[0] || back.Status != r.Status {
		t.Errorf("the result does not come back: %+v", back)
	}
}
