package chart

import (
	"math"
	"slices"
	"strings"
	"testing"

	"gonum.org/v1/gonum/stat"
)

// golden is a series of 60 reference values: 30 baseline runs, then monitoring with a
// drift of 0.0012 a run from run 37 (computed series; every figure below was derived
// twice, by independent programs).
func golden() []float64 {
	return []float64{7.1069, 7.1255, 7.1173, 7.1213, 7.1171, 7.1247, 7.1168, 7.1283, 7.1192, 7.1264, 7.1058, 7.1245, 7.1299, 7.1152, 7.1172, 7.1211, 7.1139, 7.1307, 7.1357, 7.1204,
		7.1247, 7.1152, 7.1110, 7.1188, 7.1242, 7.1334, 7.1268, 7.1282, 7.1168, 7.1222, 7.1190, 7.1320, 7.1244, 7.1260, 7.1296, 7.1128, 7.1248, 7.1206, 7.1215, 7.1308,
		7.1253, 7.1189, 7.1238, 7.1234, 7.1279, 7.1301, 7.1361, 7.1402, 7.1435, 7.1319, 7.1451, 7.1419, 7.1332, 7.1380, 7.1399, 7.1383, 7.1372, 7.1444, 7.1477, 7.1453}
}

// series numbers values from night 1 on.
func series(x []float64) []Value {
	vs := make([]Value, len(x))
	for i, v := range x {
		vs[i] = Value{Night: i + 1, X: v}
	}
	return vs
}

// textbook limits: mean and mean moving range over d2 of the first 30.
func goldenTextbook() Baseline {
	x := golden()[:30]
	mr := 0.0
	for i := 1; i < len(x); i++ {
		mr += math.Abs(x[i]-x[i-1]) / 29
	}
	return Known(stat.Mean(x, nil), mr/ConstantsFor(2).D2)
}

func goldenRules() Rules {
	all := PatternRuns()
	all.TwoBeyond, all.Opposite, all.FourBeyond = true, true, true
	return Rules{Individuals: 3, MovingRange: ConstantsFor(2).TopD * ConstantsFor(2).D2, EWMAWeight: .2, EWMAWidth: 2.859, CusumSlack: .5, CusumDecision: 5, SelfStarting: 5, Runs: all}
}

// firstNight returns the first night on which a rule of that name fired, 0 for none.
func firstNight(js []Judgement, rule string) int {
	for _, j := range js {
		for _, f := range j.Flags {
			if f.Rule == rule {
				return j.Night
			}
		}
	}
	return 0
}

func TestGoldenScalars(t *testing.T) {
	x := golden()
	b := goldenTextbook()
	near(t, "mean", b.Centre, 7.12130666667, 1e-11)
	near(t, "spread from moving range", b.SD, 0.00773462189076, 1e-12)
	js := Judge(b, series(x), goldenRules())
	near(t, "upper limit", js[0].LimitHigh, 7.14451053234, 1e-11)
	near(t, "lower limit", js[0].LimitLow, 7.09810280099, 1e-11)
	near(t, "moving range limit", js[1].MovingLimit, 0.0285089389232, 1e-12)
	for rule, want := range map[string]int{
		BeyondLimits: 51, WeightedMean: 48, CumulativeSum: 49, SelfStarting: 49,
		oneSideName(9): 51, monotoneName(6): 49, alternatingName(14): 0, twoOfThreeName(): 49, fourOfFiveName(): 49, innerName(15): 0, outerName(8): 53,
		twoBeyondName(): 49, oppositeName(): 0, fourBeyondName(): 49, MovingTooFar: 0,
	} {
		if got := firstNight(js, rule); got != want {
			t.Errorf("%s: first at run %d, want %d", rule, got, want)
		}
	}
	other := goldenRules()
	other.EWMAWeight, other.EWMAWidth, other.Runs = .1, 2.703, Runs{OneSide: 10}
	js2 := Judge(b, series(x), other)
	if got := firstNight(js2, WeightedMean); got != 48 {
		t.Errorf("weighted mean 0.1: first at %d, want 48", got)
	}
	if got := firstNight(js2, oneSideName(10)); got != 52 {
		t.Errorf("ten on one side: first at %d, want 52", got)
	}
	other.Runs.OneSide = 8
	if got := firstNight(Judge(b, series(x), other), oneSideName(8)); got != 50 {
		t.Errorf("eight on one side: first at %d, want 50", got)
	}
	// The sum was last at zero at run 44, five values before it crossed.
	if j := js[48]; j.CusumHighSince != 5 || j.Flags[slices.IndexFunc(j.Flags, func(f Flag) bool { return f.Rule == CumulativeSum })].Since != 45 {
		t.Errorf("cumulative sum at run 49: count %d", j.CusumHighSince)
	}
	near(t, "new level from the sum", b.Centre+b.SD*(0.5+js[48].CusumHigh/5), 7.13556, 1e-6)
}

// With limits widened for thirty estimated nights the series leaves them at run 59.
func TestGoldenWidenedLimits(t *testing.T) {
	x := golden()
	m, s := stat.MeanStdDev(x[:30], nil)
	near(t, "s", s, 0.0072266715443, 1e-12)
	b := Baseline{Stage: Settled, Scale: Plain, Centre: m, SD: s, DOF: 29, CentreSD: s / math.Sqrt(30)}
	js := Judge(b, series(x), Rules{Individuals: 3})
	near(t, "upper", js[0].LimitHigh, 7.14540509914, 1e-10)
	near(t, "lower", js[0].LimitLow, 7.09720823419, 1e-10)
	if got := firstNight(js, BeyondLimits); got != 59 {
		t.Errorf("first outside at %d, want 59", got)
	}
	l := Learn(series(x[:30]), 0.007)
	near(t, "robust centre", l.Centre, 7.12143846154, 1e-11)
	near(t, "robust spread", l.SD, 0.00725178352921, 1e-11)
	if l.Stage != Settled || !l.Usable() || l.Phi != 0 {
		t.Errorf("baseline: stage %s, refused %q, correlation %v", l.Stage, l.Refused, l.Phi)
	}
	near(t, "lag-1", l.Lag1, -0.049706470732, 1e-11)
}

func TestGoldenStatistics(t *testing.T) {
	x := golden()
	base, later := x[:30], x[30:]
	times := make([]float64, 30)
	for i := range times {
		times[i] = float64(i + 31)
	}
	a := TestNormality(base)
	near(t, "A2", a.A2, 0.176590692818, 1e-10)
	near(t, "A2 adjusted", a.Adjusted, 0.181446936871, 1e-10)
	near(t, "normality P", a.P, 0.913733812446, 1e-9)
	r := RunsAbout(base, Median(base))
	if r.Runs != 20 || r.Above != 15 || r.Below != 15 {
		t.Errorf("runs %+v", r)
	}
	near(t, "runs Z", r.Z, 1.48644670591, 1e-10)
	near(t, "runs P", r.P, 0.13716100358, 1e-10)
	out, steps := ManyOutliers(base, 3, 0.05)
	if len(out) != 0 {
		t.Errorf("outliers %v", out)
	}
	for i, want := range [][2]float64{{2.14575500929, 2.90847305972}, {2.22224659036, 2.89270471121}, {2.15264707073, 2.87620913431}} {
		near(t, "deviate", steps[i].R, want[0], 1e-10)
		near(t, "critical deviate", steps[i].Critical, want[1], 1e-9)
	}
	mk := TestTrend(times, later)
	if mk.S != 257 {
		t.Errorf("S %d", mk.S)
	}
	near(t, "S variance", mk.Variance, 3141.66666667, 1e-10)
	near(t, "Z", mk.Z, 4.5673039369, 1e-10)
	near(t, "slope", mk.Slope, 0.000852413793103, 1e-13)
	near(t, "slope SE", mk.SlopeSE, 0.000119854798656, 1e-13)
	slope, low, high := SenSlope(times, later, 0.95)
	near(t, "Sen", slope, 0.000889473684211, 1e-13)
	near(t, "Sen low", low, 0.000624571587112, 1e-12)
	near(t, "Sen high", high, 0.00115836729032, 1e-12)
	mb := TestTrend(times, base)
	near(t, "baseline Z", mb.Z, 0.874628213283, 1e-10)
	e := make([]float64, 30)
	for i, v := range base {
		e[i] = v - stat.Mean(base, nil)
	}
	near(t, "von Neumann ratio", DurbinWatson(e), 1.96184442318, 1e-10)
}

// The step estimate lags behind the true onset of the drift (run 37), the drift
// estimate does not.
func TestGoldenChangePoints(t *testing.T) {
	x := golden()
	b := goldenTextbook()
	s := FindStep(series(x), b)
	if s.Last != 46 {
		t.Errorf("step after run %d, want 46", s.Last)
	}
	near(t, "step level", s.After, 7.14019285714, 1e-10)
	at := FindStep(series(x[:49]), b)
	if at.Last != 45 {
		t.Errorf("step at the signal after run %d, want 45", at.Last)
	}
	near(t, "level at the signal", at.After, 7.137475, 1e-10)
	if u := FindStepWithin(series(x), Plain); u.Last != 46 {
		t.Errorf("step between unknown levels after run %d, want 46", u.Last)
	}
	d := FindDrift(series(x), b)
	if d.Last != 37 {
		t.Errorf("drift after run %d, want 37", d.Last)
	}
	near(t, "drift", d.Size, 0.00107825161887, 1e-12)
	if d.OnsetLow > 36 || d.OnsetHigh < 36 || d.SizeLow > 0.0012 || d.SizeHigh < 0.0012 {
		t.Errorf("the intervals miss the truth (run 36, 0.0012): %+v", d)
	}
	if c := FindChange(series(x), b); c.Shape != Drift {
		t.Errorf("the drift passes for a %s", c.Shape)
	}
	t.Log(d.Sentence)
	t.Log(s.Sentence)
	f := ForecastExit(series(x)[36:57], 0, 7.0981, 7.14541)
	t.Log(f.Sentence)
	// From 21 drifting runs the exit at run 59 to 60 (limits widened) is foreseen.
	if !f.Leaves || f.Low > 60 || f.High < 57 || f.Night < 55 || f.Night > 66 {
		t.Errorf("forecast %+v", f)
	}
}

func TestGoldenRowByRow(t *testing.T) {
	x := golden()
	b := goldenTextbook()
	rules := goldenRules()
	js := Judge(b, series(x), rules)
	slow := rules
	slow.EWMAWeight, slow.EWMAWidth = .1, 2.703
	js1 := Judge(b, series(x), slow)
	head := rules
	head.HeadStart, head.CusumDecision = true, 4.77
	jh := Judge(b, series(x)[30:], head)
	q := SelfStart(x)
	flagged := func(j Judgement, rule string) string {
		if slices.ContainsFunc(j.Flags, func(f Flag) bool { return f.Rule == rule }) {
			return "1"
		}
		return "0"
	}
	for i, r := range figures(t, "golden60_points.csv") {
		j := js[i]
		cell := func(col string, got, tol float64) {
			if r[col] == "" {
				if !math.IsNaN(got) {
					t.Errorf("run %d %s: got %v, want none", i+1, col, got)
				}
				return
			}
			near(t, "run "+r["run"]+" "+col, got, number(t, r[col]), tol)
		}
		cell("z", j.Score, 1e-9)
		cell("MR", j.MovingRange, 1e-10)
		cell("ewma_0.2", j.EWMA, 1e-11)
		cell("ewma_0.2_halfwidth", j.EWMAHigh-b.Centre, 1e-11)
		cell("ewma_0.1", js1[i].EWMA, 1e-11)
		cell("ewma_0.1_halfwidth", b.Centre-js1[i].EWMALow, 1e-11)
		cell("Cplus", j.CusumHigh, 1e-8)
		cell("Cminus", j.CusumLow, 1e-8)
		cell("Nplus", float64(j.CusumHighSince), 0)
		cell("Nminus", float64(j.CusumLowSince), 0)
		cell("Q", q[i], 1e-8)
		if i >= 2 {
			cell("Q_Cplus", j.SelfHigh, 1e-8)
			cell("Q_Cminus", j.SelfLow, 1e-8)
		}
		if i >= 30 {
			cell("FIR_Cplus", jh[i-30].CusumHigh, 1e-8)
			cell("FIR_Cminus", jh[i-30].CusumLow, 1e-8)
			if got := flagged(jh[i-30], CumulativeSum); got != r["FIR_signal"] {
				t.Errorf("run %d head start signal %s, want %s", i+1, got, r["FIR_signal"])
			}
		}
		for col, got := range map[string]string{
			"out_I": flagged(j, BeyondLimits), "out_MR": flagged(j, MovingTooFar), "ewma_0.2_signal": flagged(j, WeightedMean), "ewma_0.1_signal": flagged(js1[i], WeightedMean),
			"cusum_signal": flagged(j, CumulativeSum), "Q_cusum_signal": flagged(j, SelfStarting),
		} {
			if got != r[col] {
				t.Errorf("run %d %s: got %s, want %s", i+1, col, got, r[col])
			}
		}
	}
}

// patternColumns maps the columns of the flag tables to a judgement of scores.
func patternColumns(z []float64) []map[string]bool {
	rules := goldenRules()
	rules.EWMAWeight, rules.CusumDecision, rules.SelfStarting = 0, 0, 0
	long := Rules{Individuals: 2, Runs: Runs{OneSide: 10}}
	short := Rules{Runs: Runs{OneSide: 8}}
	a, b, c := Judge(Known(0, 1), series(z), rules), Judge(Known(0, 1), series(z), long), Judge(Known(0, 1), series(z), short)
	out := make([]map[string]bool, len(z))
	for i := range z {
		has := func(j Judgement, rule string) bool {
			return slices.ContainsFunc(j.Flags, func(f Flag) bool { return f.Rule == rule })
		}
		out[i] = map[string]bool{
			"N1": has(a[i], BeyondLimits), "WE1": has(a[i], BeyondLimits), "M_1_3s": has(a[i], BeyondLimits), "M_1_2s": has(b[i], BeyondLimits),
			"N2": has(a[i], oneSideName(9)), "N3": has(a[i], monotoneName(6)), "N4": has(a[i], alternatingName(14)), "N5": has(a[i], twoOfThreeName()), "WE2": has(a[i], twoOfThreeName()),
			"N6": has(a[i], fourOfFiveName()), "WE3": has(a[i], fourOfFiveName()), "N7": has(a[i], innerName(15)), "N8": has(a[i], outerName(8)), "WE4": has(c[i], oneSideName(8)),
			"M_2_2s": has(a[i], twoBeyondName()), "M_R_4s": has(a[i], oppositeName()), "M_4_1s": has(a[i], fourBeyondName()), "M_10_x": has(b[i], oneSideName(10)),
		}
	}
	return out
}

func TestGoldenFlags(t *testing.T) {
	b := goldenTextbook()
	var z []float64
	for _, x := range golden() {
		z = append(z, (x-b.Centre)/b.SD)
	}
	got := patternColumns(z)
	checked := 0
	for i, r := range figures(t, "golden60_flags.csv") {
		for col, on := range got[i] {
			checked++
			if (r[col] == "1") != on {
				t.Errorf("run %d %s: got %v, want %s", i+1, col, on, r[col])
			}
		}
	}
	if checked != 60*18 {
		t.Errorf("checked %d flags, want 1080", checked)
	}
}

// The demonstration sequences compiled in: each exercises one rule, with the place at
// which it must fire (0: must not).
func TestRuleDemonstrations(t *testing.T) {
	for _, c := range []struct {
		z    []float64
		rule string
		at   int
	}{
		{[]float64{0.2, -0.5, 3.2, 0.1}, "N1", 3},
		{[]float64{0.3, 2.1, 0.5, 2.3, 0.2}, "N5", 4},
		{[]float64{0.3, 2.1, 0.5, -2.3, 0.2}, "N5", 0},
		{[]float64{0.2, 1.2, 1.4, 0.3, 1.1, 1.6, 0.2}, "N6", 6},
		{[]float64{0.5, 0.2, 0.9, 0.1, 0.3, 0.6, 0.4, 0.8, 0.2, -0.3}, "WE4", 8},
		{[]float64{-0.5, -0.2, -0.9, -0.1, -0.3, -0.6, -0.4, -0.8, -0.2, 0.3}, "N2", 9},
		{[]float64{0.5, 0.2, 0.9, 0.1, 0.0, 0.6, 0.4, 0.8, 0.2, 0.7, 0.3}, "WE4", 0},
		{[]float64{-1.5, -1.0, -0.4, 0.1, 0.6, 1.1, 0.9}, "N3", 6},
		{[]float64{-1.5, -1.0, -1.0, 0.1, 0.6, 1.1, 1.2}, "N3", 0},
		{[]float64{0.5, -0.4, 0.3, -0.6, 0.2, -0.1, 0.4, -0.5, 0.6, -0.3, 0.1, -0.2, 0.5, -0.4, -0.6}, "N4", 14},
		{[]float64{0.5, -0.4, 0.3, -0.6, 0.2, 0.1, 0.4, -0.5, 0.6, 0.3, -0.1, -0.2, 0.5, 0.4, -0.6, 0.7}, "N7", 15},
		{[]float64{1.2, -1.4, 1.6, -1.1, 1.3, 1.5, -1.2, -1.7, 0.2}, "N8", 8},
		{[]float64{0.1, -2.2, -2.4, 0.3}, "M_2_2s", 3},
		{[]float64{0.2, 2.3, -2.1, 0.1}, "M_R_4s", 3},
		{[]float64{-0.4, 1.1, 1.3, 1.2, 1.7, 0.2}, "M_4_1s", 5},
		{[]float64{0.5, 0.2, 0.9, 0.1, 0.3, 0.6, 0.4, 0.8, 0.2, 0.7, -0.1}, "M_10_x", 10},
	} {
		first := 0
		for i, m := range patternColumns(c.z) {
			if m[c.rule] && first == 0 {
				first = i + 1
			}
		}
		if first != c.at {
			t.Errorf("%s of %v: fired at %d, want %d", c.rule, c.z, first, c.at)
		}
	}
}

func TestRuleDemonstrationTable(t *testing.T) {
	rows := figures(t, "rule_demo_sequences.csv")
	checked := 0
	for start := 0; start < len(rows); {
		end := start
		var z []float64
		for end < len(rows) && rows[end]["sequence"] == rows[start]["sequence"] {
			z = append(z, number(t, rows[end]["z"]))
			end++
		}
		for i, m := range patternColumns(z) {
			for col, on := range m {
				checked++
				if (rows[start+i][col] == "1") != on {
					t.Errorf("%s value %d %s: got %v", rows[start]["sequence"], i+1, col, on)
				}
			}
		}
		start = end
	}
	if checked != 131*18 {
		t.Errorf("checked %d flags, want 2358", checked)
	}
}

// Visible names are words: no digits, no letters standing for rules.
func TestRuleNamesAreWords(t *testing.T) {
	r := goldenRules()
	r.ImpactLimit = 0.02
	r.Runs.OneSide, r.Runs.Alternating, r.Runs.Inner = 14, 24, 64
	for _, w := range r.Words() {
		if strings.ContainsAny(w, "0123456789_") {
			t.Errorf("rule name %q", w)
		}
	}
}
