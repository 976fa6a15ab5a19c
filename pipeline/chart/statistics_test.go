package chart

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/stat"
)

// Handbook flow rates (e-Handbook 6.3.2.2): mean 50.81, mean moving range 1.8778,
// limits 55.8041 and 45.8159 with d2 rounded to 1.128.
func TestHandbookIndividuals(t *testing.T) {
	x := []float64{49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1}
	mr := 0.0
	for i := 1; i < len(x); i++ {
		mr += math.Abs(x[i]-x[i-1]) / 9
	}
	near(t, "mean moving range", mr, 1.87777777778, 1e-11)
	for _, c := range []struct{ d2, high, low float64 }{{1.128, 55.8040898345, 45.8159101655}, {ConstantsFor(2).D2, 55.8024116801, 45.8175883199}} {
		js := Judge(Known(50.81, mr/c.d2), series(x), Rules{Individuals: 3, MovingRange: 3.6858865664})
		near(t, "upper", js[0].LimitHigh, c.high, 1e-10)
		near(t, "lower", js[0].LimitLow, c.low, 1e-10)
		for _, j := range js {
			if len(j.Flags) > 0 {
				t.Errorf("run %d: %v; no point is out", j.Night, j.Flags)
			}
		}
	}
	near(t, "range limit", ConstantsFor(2).TopD*mr, 6.13382104844, 1e-10)
}

// e-Handbook 6.3.2.4: weight 0.3, target 50, s 2.0539, factor 3.
func TestHandbookWeightedMean(t *testing.T) {
	x := []float64{52.0, 47.0, 53.0, 49.3, 50.1, 47.0, 51.0, 50.1, 51.2, 50.5, 49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1}
	printed := []float64{50.60, 49.52, 50.56, 50.18, 50.16, 49.21, 49.75, 49.85, 50.26, 50.33, 50.11, 49.36, 49.52, 50.05, 49.38, 49.92, 50.73, 51.23, 51.94, 51.99}
	js := Judge(Known(50, 2.0539), series(x), Rules{EWMAWeight: .3, EWMAWidth: 3})
	for i, j := range js {
		if math.Abs(j.EWMA-printed[i]) > 0.0051 {
			t.Errorf("run %d: %.4f, printed %.2f", i+1, j.EWMA, printed[i])
		}
	}
	// The page draws the limits that the exact ones approach: 52.5884 and 47.4115.
	near(t, "upper", js[19].EWMAHigh, 52.5884317381, 1e-6)
	near(t, "lower", js[19].EWMALow, 47.4115682619, 1e-6)
	for i, r := range figures(t, "nist_ewma_example.csv") {
		near(t, "mean", js[i].EWMA, number(t, r["ewma_computed"]), 1e-11)
		near(t, "half width", js[i].EWMAHigh-50, number(t, r["half_width_exact_time_varying"]), 2e-6)
	}
}

// e-Handbook 6.3.2.3: target 325, slack 0.3175, limit 4.1959 in data units.
func TestHandbookCumulativeSum(t *testing.T) {
	x := []float64{324.925, 324.675, 324.725, 324.350, 325.350, 325.225, 324.125, 324.525, 325.225, 324.600, 324.625, 325.150, 328.325, 327.250, 327.825, 328.500, 326.675, 327.775, 326.875, 328.350}
	high := []float64{0, 0, 0, 0, .03, 0, 0, 0, 0, 0, 0, 0, 3.01, 4.94, 7.45, 10.63, 11.99, 14.44, 16.00, 19.04}
	low := []float64{0, .01, 0, .33, 0, 0, .56, .72, .17, .25, .31, 0, 0, 0, 0, 0, 0, 0, 0, 0}
	js := Judge(Known(325, 1), series(x), Rules{CusumSlack: .3175, CusumDecision: 4.1959})
	for i, j := range js {
		if math.Abs(j.CusumHigh-high[i]) > 0.0051 || math.Abs(j.CusumLow-low[i]) > 0.0051 {
			t.Errorf("group %d: %.4f and %.4f, printed %.2f and %.2f", i+1, j.CusumHigh, j.CusumLow, high[i], low[i])
		}
	}
	if got := firstNight(js, CumulativeSum); got != 14 {
		t.Errorf("first signal at group %d, published 14", got)
	}
}

// textbook is the series of Montgomery, Introduction to Statistical Quality Control,
// Table 9.1: twenty values about 10, ten about 11.
func textbook() []float64 {
	return []float64{9.45, 7.99, 9.29, 11.66, 12.16, 10.18, 8.04, 11.46, 9.2, 10.34, 9.03, 11.47, 10.51, 9.4, 10.08, 9.37, 10.62, 10.31, 8.52, 10.84, 10.9, 9.33, 12.29, 11.5, 10.6, 11.08, 10.38, 11.62, 11.31, 10.52}
}

func TestTextbookSeries(t *testing.T) {
	upper := []float64{0, 0, 0, 1.16, 2.82, 2.50, .04, 1.00, 0, 0, 0, .97, .98, 0, 0, 0, .12, 0, 0, .34, .74, 0, 1.79, 2.79, 2.89, 3.47, 3.35, 4.47, 5.28, 5.30} // the last from recomputation
	b := Known(10, 1)
	js := Judge(b, series(textbook()), Rules{EWMAWeight: .1, EWMAWidth: 2.7, CusumSlack: .5, CusumDecision: 5, SelfStarting: 5})
	for i, j := range js {
		near(t, "upper sum", j.CusumHigh, upper[i], 1e-9)
	}
	if got := firstNight(js, CumulativeSum); got != 29 || js[28].CusumHighSince != 7 {
		t.Errorf("sum signals at %d with count %d, published 29 and 7", got, js[28].CusumHighSince)
	}
	if got := firstNight(js, WeightedMean); got != 29 {
		t.Errorf("weighted mean signals at %d, want 29", got)
	}
	// A negative check: the self-starting sum takes the ten shifted values for normal.
	if got := firstNight(js, SelfStarting); got != 0 {
		t.Errorf("self-starting sum signals at %d; it must not on this series", got)
	}
	q := SelfStart(textbook())
	for i, want := range []float64{0.3446263039, 1.660087901, 1.202167666, 0.03438044903, -1.097765456, 0.8707279783} {
		near(t, "score", q[i+2], want, 1e-8)
	}
	c := FindStep(series(textbook()[:29]), b)
	if c.Last != 22 {
		t.Errorf("step after value %d, want 22", c.Last)
	}
	near(t, "level after", c.After, 11.2542857143, 1e-10)
	for i, r := range figures(t, "textbook_cusum_ewma_series.csv") {
		near(t, "lower sum", js[i].CusumLow, number(t, r["Cminus"]), 1e-9)
		near(t, "weighted mean", js[i].EWMA, number(t, r["ewma"]), 1e-9)
		near(t, "its limit", js[i].EWMAHigh, number(t, r["ewma_UCL"]), 1e-8)
		if i >= 2 {
			near(t, "score", q[i], number(t, r["Q_selfstarting"]), 1e-8)
			near(t, "self-starting sum", js[i].SelfHigh, number(t, r["Q_Cplus"]), 1e-7)
		}
	}
}

// Nile flow: change after 1898 (Cobb 1978; near 1898 in the help of the R data set).
func TestNile(t *testing.T) {
	rows := figures(t, "nile.csv")
	var vs []Value
	var times, flow []float64
	for _, r := range rows {
		v := Value{Night: int(number(t, r["year"])), X: number(t, r["flow"])}
		vs = append(vs, v)
		times, flow = append(times, float64(v.Night)), append(flow, v.X)
	}
	c := FindStepWithin(vs, Plain)
	if c.Last != 28 || c.OnsetNight != 1899 {
		t.Errorf("change after observation %d, first changed year %d", c.Last, c.OnsetNight)
	}
	near(t, "before", c.Before, 1097.75, 1e-12)
	near(t, "after", c.After, 849.972222222, 1e-11)
	if c.OnsetLow > 1899 || c.OnsetHigh < 1899 || c.OnsetHigh-c.OnsetLow > 8 {
		t.Errorf("onset interval %d to %d", c.OnsetLow, c.OnsetHigh)
	}
	t.Log(c.Sentence)
	mk := TestTrend(times, flow)
	if mk.S != -1387 || mk.Exact {
		t.Errorf("trend %+v", mk)
	}
	near(t, "variance", mk.Variance, 112728.333333, 1e-11)
	near(t, "Z", mk.Z, -4.12806652284, 1e-10)
	near(t, "P", mk.P, 3.65826292166e-05, 1e-12)
	slope, low, high := SenSlope(times, flow, 0.95)
	near(t, "Sen", slope, -2.6, 1e-12)
	near(t, "low", low, -3.62792647784, 1e-9)
	near(t, "high", high, -1.42844437595, 1e-9)
}

func TestTrendExamples(t *testing.T) {
	// Sen 1968: slope 4.
	slope, _, _ := SenSlope([]float64{1, 2, 3, 4, 10, 12, 18}, []float64{9, 15, 19, 20, 45, 55, 78}, 0.93)
	near(t, "Sen slope", slope, 4, 1e-12)
	mk := TestTrend([]float64{1, 2, 3, 4, 10, 12, 18}, []float64{9, 15, 19, 20, 45, 55, 78})
	near(t, "exact P", mk.P, 0.000396825397, 1e-12)
	near(t, "Z", mk.Z, 3.00375704593, 1e-10)
	y := []float64{7.103, 7.101, 7.106, 7.104, 7.104, 7.109, 7.107, 7.112, 7.110, 7.115, 7.113, 7.118}
	times := []float64{1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12}
	mk = TestTrend(times, y)
	if mk.S != 53 || mk.Exact {
		t.Errorf("with a tie: %+v", mk)
	}
	near(t, "variance with a tie", mk.Variance, 211.666666667, 1e-11)
	near(t, "Z with a tie", mk.Z, 3.57418566244, 1e-10)
	slope, low, high := SenSlope(times, y, 0.95)
	near(t, "slope", slope, 0.00143181818182, 1e-12)
	near(t, "low", low, 0.001, 1e-11)
	near(t, "high", high, 0.00171287656, 1e-9)
	// Exact distribution (Kendall; Gilbert 1987 Table A18, from memory).
	near(t, "P(S>=6), n 4", KendallTail(4, 6), 0.041666667, 1e-8)
	near(t, "P(S>=0), n 4", KendallTail(4, 0), 0.625, 1e-12)
	for _, r := range figures(t, "mann_kendall_exact.csv") {
		near(t, "tail "+r["n"]+" "+r["s"], KendallTail(int(number(t, r["n"])), int(number(t, r["s"]))), number(t, r["P_S_ge_s"]), 2e-8)
	}
}

// Chem: 24 copper results (Analyst 114:1693, 1989); abbey: 31 nickel results.
func TestAlgorithmA(t *testing.T) {
	chem := []float64{2.90, 3.10, 3.40, 3.40, 3.70, 3.70, 2.80, 2.50, 2.40, 2.40, 2.70, 2.20, 5.28, 3.37, 3.03, 3.03, 28.95, 3.77, 3.40, 2.20, 3.50, 3.60, 3.70, 3.70}
	abbey := []float64{5.2, 6.5, 6.9, 7.0, 7.0, 7.0, 7.4, 8.0, 8.0, 8.0, 8.0, 8.5, 9.0, 9.0, 10.0, 11.0, 11.0, 12.0, 12.0, 13.7, 14.0, 14.0, 14.0, 16.0, 17.0, 17.0, 18.0, 24.0, 28.0, 34.0, 125.0}
	brief := []float64{4.5, 4.9, 5.6, 4.2, 6.2, 5.2, 9.9} // from memory
	for _, c := range []struct {
		x          []float64
		centre, sd float64
	}{{chem, 3.20556592273, 0.67415010003}, {abbey, 11.732640758127, 5.263550078245}, {brief, 5.386489230095, 1.145956920381}} {
		r := AlgorithmA(c.x)
		near(t, "centre", r.Centre, c.centre, 1e-10)
		near(t, "spread", r.SD, c.sd, 1e-10)
		if !r.Converged {
			t.Error("not converged")
		}
	}
	if r := AlgorithmA([]float64{1, 1, 1, 1, 2}); !(r.SD > 0) || !r.Converged {
		t.Errorf("mostly equal values: %+v", r)
	}
	if r := AlgorithmA([]float64{7, 7, 7}); r.SD != 0 || r.Centre != 7 {
		t.Errorf("equal values: %+v", r)
	}
	if r := AlgorithmA(nil); !math.IsNaN(r.Centre) {
		t.Errorf("no values: %+v", r)
	}
}

// Rosner, Technometrics 25:165, 1983; e-Handbook 1.3.5.17.3 (truncated in print).
func TestManyOutliersPublished(t *testing.T) {
	x := []float64{-0.25, 0.68, 0.94, 1.15, 1.2, 1.26, 1.26, 1.34, 1.38, 1.43, 1.49, 1.49, 1.55, 1.56, 1.58, 1.65, 1.69, 1.7, 1.76, 1.77, 1.81, 1.91, 1.94, 1.96, 1.99, 2.06, 2.09, 2.1, 2.14, 2.15, 2.23, 2.24, 2.26, 2.35, 2.37, 2.4, 2.47, 2.54, 2.62, 2.64, 2.9, 2.92, 2.92, 2.93, 3.21, 3.26, 3.3, 3.59, 3.68, 4.3, 4.64, 5.34, 5.42, 6.01}
	out, steps := ManyOutliers(x, 10, 0.05)
	if len(out) != 3 {
		t.Errorf("%d outliers, published three", len(out))
	}
	want := [][3]float64{{6.01, 3.118906049, 3.158793941}, {5.42, 2.942973114, 3.151430023}, {5.34, 3.179423937, 3.143889685}, {4.64, 2.810181144, 3.136164956}, {-0.25, 2.815579563, 3.128247334},
		{4.3, 2.848171628, 3.120127738}, {3.68, 2.279327055, 3.111796454}, {3.59, 2.310366059, 3.103243078}, {0.68, 2.101580651, 3.094456447}, {3.3, 2.067178078, 3.085424571}}
	for i, w := range want {
		if steps[i].Value != w[0] || x[steps[i].Index] != w[0] {
			t.Errorf("step %d took away %v, want %v", i+1, steps[i].Value, w[0])
		}
		near(t, "deviate", steps[i].R, w[1], 1e-9)
		near(t, "critical", steps[i].Critical, w[2], 1e-8)
	}
}

// e-Handbook 1.3.5.17.1: G 2.4687, one-sided critical value 2.032.
func TestGrubbsPublished(t *testing.T) {
	x := []float64{199.31, 199.53, 200.19, 200.82, 201.92, 201.95, 202.18, 245.57}
	g := GrubbsTest(x, 0.05, false)
	near(t, "G", g.G, 2.46876461121, 1e-10)
	near(t, "critical", g.Critical, 2.03165200155, 1e-9)
	if !g.Outlier || g.Index != 7 {
		t.Errorf("%+v", g)
	}
	near(t, "two-sided", GrubbsCritical(8, 0.05, true), 2.12664508720, 1e-9)
	for _, r := range figures(t, "grubbs_critical.csv") {
		n := int(number(t, r["n"]))
		if n < 4 {
			// On one degree of freedom the table is within 5e-8 of its bound.
			continue
		}
		near(t, "one-sided "+r["n"], GrubbsCritical(n, .05, false), number(t, r["one_sided_0.05"]), 2e-7)
		near(t, "two-sided "+r["n"], GrubbsCritical(n, .01, true), number(t, r["two_sided_0.01"]), 2e-7)
	}
}

// vector20 is a 20-value vector used in cross-checks between statistics packages.
func vector20() []float64 {
	return []float64{-0.1184, -1.3403, 0.0063, -0.612, -0.3869, -0.2313, -2.8485, -0.2167, 0.4153, 1.8492, -0.3706, 0.9726, -0.1501, -0.0337, -1.4423, 1.2489, 0.9182, -0.2331, -0.6182, 0.183}
}

func TestResidualTests(t *testing.T) {
	v := vector20()
	near(t, "Durbin-Watson 1.95298958377419", DurbinWatson(v), 1.95298958377419, 1e-14)
	a := TestNormality(v)
	near(t, "A2 0.5867235358882148", a.A2, 0.5867235358882148, 1e-12)
	near(t, "P 0.1115380760041617", a.P, 0.1115380760041617, 1e-10)
	sq := make([]float64, len(v))
	for i, x := range v {
		sq[i] = x * x
	}
	near(t, "A2 of squares 2.976266267594575", TestNormality(sq).A2, 2.976266267594575, 1e-11)
	near(t, "Durbin-Watson of squares", DurbinWatson(sq), 1.848802400319998, 1e-13)
	var ones23 []float64
	for range 5 {
		ones23 = append(ones23, 1)
	}
	for range 6 {
		ones23 = append(ones23, 2)
	}
	for range 8 {
		ones23 = append(ones23, 3)
	}
	r := RunsAbout(ones23, stat.Mean(ones23, nil))
	near(t, "runs Z -4.007095978613213", r.Z, -4.007095978613213, 1e-12)
	near(t, "runs exact", r.FewP, 2.6461327e-05, 1e-9)
	r = RunsAbout(ones23, Median(ones23))
	near(t, "runs about the median -3.944254410803499", r.Z, -3.944254410803499, 1e-12)
	near(t, "runs exact", r.FewP, 0.00017199862, 1e-9)
	r = RunsAbout(v, 0)
	near(t, "runs of signs", r.Z, -0.0507707518591, 1e-10)
	near(t, "few", r.FewP, 0.57004644, 1e-8)
	near(t, "many", r.ManyP, 0.62151703, 1e-8)
}

// zeta scores computed from their definition (ISO 13528, from memory).
func TestAgreementScores(t *testing.T) {
	for _, c := range []struct {
		x, u, a, ua, want float64
		verdict           string
	}{{7.135, .01, 7.12, .004, 1.392715, "agrees"}, {7.161, .012, 7.12, .004, 3.2413346, "disagrees"}, {7.105, .005, 7.12, .004, -2.3426064, "questionable"}, {7.18, .01, 7.12, .004, 5.5708601, "disagrees"}} {
		a := Agree(c.x, c.u, c.a, c.ua)
		near(t, "zeta", a.Score, c.want, 1e-6)
		if a.Verdict != c.verdict {
			t.Errorf("zeta %v: %s, want %s", a.Score, a.Verdict, c.verdict)
		}
	}
	if a := Agree(7, 0, 7.1, 0); !math.IsNaN(a.Score) || a.Verdict == "agrees" {
		t.Errorf("without uncertainties: %+v", a)
	}
	scores := func(scale float64, n int) []float64 {
		q := SelfStart(golden()[:30])
		var z []float64
		for i := range n {
			z = append(z, scale*q[2+i%28]/1.0)
		}
		return z
	}
	if s := SpreadOfScores(scores(1, 28)); !s.Honest {
		t.Errorf("honest scores: %s", s.Sentence)
	}
	if s := SpreadOfScores(scores(2, 28)); s.Honest || s.RMS < HonestHigh {
		t.Errorf("too wide: %s", s.Sentence)
	}
	if s := SpreadOfScores(scores(0.4, 28)); s.Honest || s.RMS > HonestLow {
		t.Errorf("too narrow: %s", s.Sentence)
	}
	if s := SpreadOfScores(scores(1.5, 4)); !s.Honest {
		t.Errorf("four scores are too few to accuse anybody: %s", s.Sentence)
	}
}

// NIST one-kilogram check standard: baseline before date 85, a real drift after it.
func TestMassCheckStandard(t *testing.T) {
	rows := figures(t, "nist_mass_check_standard.csv")
	var x []float64
	var base []float64
	for _, r := range rows {
		v := number(t, r["y_mg"])
		x = append(x, v)
		if r["baseline"] == "1" {
			base = append(base, v)
		}
	}
	m, s := stat.MeanStdDev(base, nil)
	near(t, "baseline mean", m, -19.4785098990, 1e-11)
	near(t, "baseline s", s, 0.0306522698662, 1e-11)
	near(t, "baseline lag-1", Lag1(base), 0.1113445282, 1e-9)
	js := Judge(Known(m, s), series(x), Rules{Individuals: 3, EWMAWeight: .2, EWMAWidth: 3, CusumSlack: .5, CusumDecision: 5})
	for i, r := range rows {
		near(t, "weighted mean", js[i].EWMA, number(t, r["ewma"]), 1e-9)
		near(t, "half width", js[i].EWMAHigh-m, number(t, r["ewma_half_width"]), 1e-8)
		out, ewma := "0", "0"
		for _, f := range js[i].Flags {
			switch f.Rule {
			case BeyondLimits:
				out = "1"
			case WeightedMean:
				ewma = "1"
			}
		}
		if out != r["outside_3s"] || ewma != r["ewma_signal"] {
			t.Errorf("calibration %d: out %s, weighted mean %s; want %s, %s", i+1, out, ewma, r["outside_3s"], r["ewma_signal"])
		}
	}
	for name, c := range map[string]Change{"from the baseline": FindStep(series(x), Known(m, s)), "between unknown levels": FindStepWithin(series(x), Plain)} {
		if c.Last != 150 {
			t.Errorf("step %s after calibration %d, want 150 (date 86.489)", name, c.Last)
		}
	}
	t.Log(FindStep(series(x), Known(m, s)).Sentence)
}
