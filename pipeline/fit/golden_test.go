package fit

import (
	"math"
	"testing"
)

// goldenPH and goldenA are the multiwavelength case of check-values
// statistics section 5 (12 pH x 8 wavelengths, 4 decimals), computed there by
// variable projection and by the full 17-parameter fit.
var goldenNM = []float64{400, 433, 460, 500, 560, 590, 616, 650}
var goldenPH = []float64{4.98, 5.62, 6.10, 6.45, 6.80, 7.05, 7.31, 7.62, 7.98, 8.41, 9.02, 9.77}
var goldenA = []float64{
	0.4061, 0.6483, 0.5179, 0.2118, 0.0638, 0.0272, 0.0145, 0.0042,
	0.4038, 0.6399, 0.5064, 0.2080, 0.0735, 0.0405, 0.0338, 0.0105,
	0.3893, 0.6075, 0.4825, 0.2042, 0.0910, 0.0796, 0.0855, 0.0299,
	0.3640, 0.5589, 0.4457, 0.1986, 0.1238, 0.1436, 0.1659, 0.0581,
	0.3261, 0.4829, 0.3856, 0.1951, 0.1753, 0.2405, 0.2984, 0.1047,
	0.2920, 0.4064, 0.3309, 0.1845, 0.2255, 0.3325, 0.4214, 0.1450,
	0.2525, 0.3321, 0.2683, 0.1805, 0.2798, 0.4324, 0.5537, 0.1920,
	0.2096, 0.2499, 0.2036, 0.1700, 0.3331, 0.5356, 0.6890, 0.2371,
	0.1816, 0.1832, 0.1551, 0.1679, 0.3762, 0.6179, 0.7963, 0.2722,
	0.1619, 0.1433, 0.1247, 0.1623, 0.4024, 0.6680, 0.8626, 0.2958,
	0.1537, 0.1244, 0.1127, 0.1599, 0.4140, 0.6908, 0.8935, 0.3034,
	0.1505, 0.1195, 0.1078, 0.1585, 0.4181, 0.6980, 0.9025, 0.3081,
}

func golden() Problem {
	return Problem{WavelengthNM: goldenNM, A: goldenA, PH: goldenPH, Steps: 1}
}

// within fails the test unless got is within tol of want.
func within(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: got %.12g, want %.12g, off by %.3g, allowed %.3g", what, got, want, got-want, tol)
	}
}

func TestGoldenMultiwavelength(t *testing.T) {
	r, err := Solve(golden(), Options{})
	if err != nil {
		t.Fatal(err)
	}
	if r.Status != Converged {
		t.Fatalf("status %v", r.Status)
	}
	for _, e := range []Estimate{r.Own, r.Full} {
		within(t, "pKa", e.PKa[0], 7.11968262512, 1e-10)
		within(t, "standard error", math.Sqrt(e.Cov[0]), 0.0014262564, 1e-9)
		// The objective is in units of the residual variance, RSS/79.
		within(t, "RSS", e.Objective*r.NoiseSD*r.NoiseSD, 0.00016582809781, 1e-13)
	}
	within(t, "residual sd", r.NoiseSD, 0.0014488236, 1e-9)
}
