package chart

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// noise draws n standard normal values; the seed makes it repeatable.
func noise(seed uint64, n int) []float64 {
	rng := rand.New(rand.NewPCG(seed, 99))
	x := make([]float64, n)
	for i := range x {
		x[i] = rng.NormFloat64()
	}
	return x
}

// scaled returns values centre + sd x with own uncertainties of zero.
func scaled(x []float64, centre, sd float64) []Value {
	vs := make([]Value, len(x))
	for i, v := range x {
		vs[i] = Value{Night: i + 1, X: centre + sd*v}
	}
	return vs
}

func TestStages(t *testing.T) {
	vs := scaled(noise(1, 40), 8.26, 0.006)
	const budget = 0.0066
	for _, c := range []struct {
		n     int
		stage Stage
	}{{0, Unproven}, {1, Unproven}, {7, Unproven}, {8, Young}, {19, Young}, {20, Settled}, {40, Settled}} {
		b := Learn(vs[:c.n], budget)
		if b.Stage != c.stage || b.Nights != c.n {
			t.Errorf("%d nights: %s of %d, want %s", c.n, b.Stage, b.Nights, c.stage)
		}
		if b.Usable() != (c.n > 0) {
			t.Errorf("%d nights: usable %v (%s)", c.n, b.Usable(), b.Refused)
		}
	}
	b := Learn(vs[:5], budget)
	near(t, "unproven spread is the budget's", b.SD, budget, 0)
	js := Judge(b, vs[:1], Rules{Individuals: 3})
	near(t, "unproven limits", js[0].LimitHigh-js[0].Centre, 3*budget*math.Sqrt(1+1.0/5), 1e-12)

	// Young: s^2 = (6 budget^2 + (n-1) s^2)/(n+5) with n+5 degrees of freedom.
	n := 12
	var x []float64
	for _, v := range vs[:n] {
		x = append(x, v.X)
	}
	s := AlgorithmA(x).SD
	b = Learn(vs[:n], budget)
	near(t, "young spread", b.SD, math.Sqrt((6*budget*budget+float64(n-1)*s*s)/float64(n+5)), 1e-12)
	near(t, "young degrees of freedom", b.DOF, float64(n+5), 1e-12)
	js = Judge(b, vs[:1], Rules{Individuals: 3})
	near(t, "young limits", (js[0].LimitHigh-js[0].Centre)/b.SD, studentQuantile(3, 17)*math.Sqrt(1+1.0/12), 1e-12)

	// Settled: t_(n-1) sqrt(1+1/n); 3.532363 for twenty nights.
	b = Learn(vs[:20], budget)
	js = Judge(b, vs[:1], Rules{Individuals: 3})
	near(t, "settled multiplier", (js[0].LimitHigh-js[0].Centre)/b.SD, 3.532363, 1e-6)
	if later := b.Update(vs); later.Centre != b.Centre || later.SD != b.SD || later.Version != b.Version {
		t.Error("a settled baseline followed the data")
	}
	young := Learn(vs[:10], budget)
	if grown := young.Update(vs[:11]); grown.Nights != 11 || grown.Version != 2 {
		t.Errorf("a young baseline did not grow: %d nights, version %d", grown.Nights, grown.Version)
	}
	if same := young.Update(vs[:10]); same.Version != 1 {
		t.Errorf("version %d for the same nights", same.Version)
	}
	if without := Learn(vs[:5], 0); without.Usable() || !strings.Contains(without.Refused, "budget") {
		t.Errorf("five nights without a budget: %q", without.Refused)
	}
	if _, err := json.Marshal(Learn(nil, 0)); err != nil {
		t.Errorf("an empty baseline cannot be stored: %v", err)
	}
}

// "The 14 baseline nights contain a trend."
func TestRefusals(t *testing.T) {
	x := noise(2, 14)
	vs := scaled(x, 8.26, 0.006)
	for i := range vs {
		vs[i].X += 0.0025 * float64(i)
	}
	b := Learn(vs, 0.02)
	if !strings.HasPrefix(b.Refused, "The 14 baseline nights contain a trend") || b.Usable() {
		t.Errorf("refused %q", b.Refused)
	}
	for _, j := range Judge(b, vs, DefaultRules()) {
		if !math.IsNaN(j.LimitHigh) || j.Matters {
			t.Error("a refused baseline was judged by")
		}
		for _, f := range j.Flags {
			if f.Rule != SelfStarting {
				t.Errorf("a refused baseline raised %q", f.Rule)
			}
		}
	}
	b = Learn(scaled(noise(8, 14), 8.26, 0.03), 0.0066)
	if !strings.Contains(b.Refused, "more than twice") {
		t.Errorf("refused %q", b.Refused)
	}
	b = Learn(scaled(make([]float64, 25), 8.26, 0), 0)
	if !strings.Contains(b.Refused, "do not differ") {
		t.Errorf("refused %q", b.Refused)
	}
	// Good baselines are refused seldom: both trend tests must fall below 2 %.
	refused := 0
	for seed := range uint64(1000) {
		if Learn(scaled(noise(seed+10, 20), 1, 1), 1).Refused != "" {
			refused++
		}
	}
	t.Logf("good baselines of twenty nights refused: %d of 1000", refused)
	if refused > 35 {
		t.Errorf("%d of 1000 good baselines refused", refused)
	}
	// A ramp of four spreads across the nights is found nearly always.
	found := 0
	for seed := range uint64(300) {
		vs := scaled(noise(seed+5000, 20), 1, 1)
		for i := range vs {
			vs[i].X += 0.2 * float64(i)
		}
		if strings.Contains(Learn(vs, 2).Refused, "trend") {
			found++
		}
	}
	t.Logf("baselines with a ramp of four spreads refused: %d of 300", found)
	if found < 270 {
		t.Errorf("only %d of 300 baselines with a trend were refused", found)
	}
}

func TestCorrelationIsTakenIntoAccount(t *testing.T) {
	e := noise(5, 60)
	x := make([]float64, 60)
	for i := range x {
		x[i] = e[i] * math.Sqrt(1-0.25)
		if i > 0 {
			x[i] += 0.5 * x[i-1]
		}
	}
	b := Learn(scaled(x, 0, 1), 1.2)
	if b.Phi < 0.25 || b.Phi > 0.75 {
		t.Fatalf("correlation taken %.2f, true 0.5 (%s)", b.Phi, b.Correlation)
	}
	if !strings.Contains(b.Correlation, "first-order model") || !strings.Contains(b.Correlation, "long-term spread") {
		t.Errorf("not said what was done and why: %q", b.Correlation)
	}
	plain := b
	plain.Phi = 0
	if b.DOF >= 59 || b.CentreSD <= b.SD/math.Sqrt(60) {
		t.Errorf("correlated nights count in full: %v degrees of freedom, centre %.3g", b.DOF, b.CentreSD)
	}
	a, c := Judge(b, scaled(x, 0, 1), DefaultRules()), Judge(plain, scaled(x, 0, 1), DefaultRules())
	if !(a[40].EWMAHigh > 1.2*c[40].EWMAHigh) {
		t.Errorf("weighted mean not widened: %.3f against %.3f", a[40].EWMAHigh, c[40].EWMAHigh)
	}
	// Variance of a weighted mean of AR(1) values, stationary:
	// w/(2-w) (1+phi(1-w))/(1-phi(1-w)).
	k := Known(0, 1)
	k.Phi = 0.5
	ch := NewChart(k, Rules{EWMAWeight: 0.2, EWMAWidth: 3})
	for i := range 200 {
		ch.Next(Value{Night: i, X: 0})
	}
	near(t, "stationary variance", ch.ewmaVar, 0.2/1.8*(1+0.4)/(1-0.4), 1e-12)
}

func TestSignedActs(t *testing.T) {
	vs := scaled(noise(4, 60), 8.26, 0.006)
	b := Learn(vs[:25], 0.0066)
	if _, err := b.Replace(vs, 0.0066, Signature{FirstNight: 30, LastNight: 60}); err == nil {
		t.Error("a baseline was replaced without a name and a reason")
	}
	by := Signature{Name: "M. Okoye", Because: "new lamp", FirstNight: 31, LastNight: 55, Overlap: 0}
	n, err := b.Replace(vs, 0.0066, by)
	if err != nil || n.Version != 2 || n.Signed != by || n.Nights != 25 || n.FirstNight != 31 {
		t.Errorf("%v: %+v", err, n)
	}
	by.FirstNight, by.LastNight = 100, 120
	if kept, err := b.Replace(vs, 0.0066, by); err == nil || kept.Version != 1 {
		t.Error("a baseline was replaced by nights without values")
	}
	pairs := []Pair{{1, 8.260, 8.262}, {2, 8.255, 8.258}, {3, 8.266, 8.267}, {4, 8.259, 8.261}, {5, 8.262, 8.264}}
	by = Signature{Name: "M. Okoye", Because: "lot 7 used up", FirstNight: 1, LastNight: 5}
	m, c, err := b.NewLot(pairs, 0.005, by)
	if err != nil || c.Question != "" || m.Version != 2 || m.Signed.Overlap != 5 {
		t.Errorf("%v: %+v %+v", err, m, c)
	}
	near(t, "carried centre", m.Centre, b.Centre+0.002, 1e-12)
	near(t, "uncertainty of the centre", m.CentreSD, math.Hypot(b.CentreSD, c.StepSE), 1e-15)
	if m.SD != b.SD {
		t.Error("the spread changed with the lot")
	}
	if _, _, err := b.NewLot(pairs[:4], 0.005, by); err == nil {
		t.Error("four paired nights were enough")
	}
	for i := range pairs {
		pairs[i].New += 0.01
	}
	if _, c, _ := b.NewLot(pairs, 0.005, by); !strings.Contains(c.Question, "same chemical") {
		t.Errorf("a pKa step of 0.012 raised no question: %q", c.Question)
	}
	if _, c, _ := b.NewLot(pairs, 0, by); c.Question != "" {
		t.Errorf("an amount may step: %q", c.Question)
	}
}

// Squares: chi-squared values on f degrees of freedom must keep the rate of false
// flags, and a contribution in quadrature must move the chart by its square.
func TestSquares(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	const f = 10
	norm := func(scale float64) float64 {
		ss := 0.0
		for range f {
			z := rng.NormFloat64()
			ss += z * z
		}
		return scale * math.Sqrt(ss/f)
	}
	out, doubled := 0, 0
	const n, baselines = 400, 50
	for k := range baselines {
		var base []Value
		for i := range 60 {
			base = append(base, Value{Night: i + 1, X: norm(0.8)})
		}
		b := LearnOn(Squares, base, 0.8/math.Sqrt(2*f))
		if b.Refused != "" {
			continue
		}
		centre, sd := b.Shown()
		js := Judge(b, base[:1], Rules{Individuals: 3})
		if centre != js[0].Centre || sd != js[0].SD || math.Abs(sd-0.64*math.Sqrt(2.0/f)) > 0.12 {
			t.Errorf("baseline %d: shown %.3f +- %.3f; a mean square on ten degrees of freedom scatters by 0.45 of itself", k, centre, sd)
		}
		if math.Abs(js[0].Centre-0.64) > 0.15 || !(js[0].LimitLow >= 0) || !(js[0].LimitHigh-js[0].Centre > js[0].Centre-js[0].LimitLow) {
			t.Errorf("baseline %d: limits %.3f %.3f about %.3f; squares of 0.8 are near 0.64 and skewed", k, js[0].LimitLow, js[0].LimitHigh, js[0].Centre)
		}
		c := NewChart(b, Rules{Individuals: 3})
		for i := range n {
			if len(c.Next(Value{Night: i, X: norm(0.8)}).Flags) > 0 {
				out++
			}
			if len(c.Next(Value{Night: i, X: norm(1.6)}).Flags) > 0 {
				doubled++
			}
		}
	}
	total := float64(n * baselines)
	t.Logf("squares on ten degrees of freedom: %.4f outside in control, %.2f with the noise doubled", float64(out)/total, float64(doubled)/total)
	if r := float64(out) / total; r > 0.0045 || r < 0.001 || float64(doubled)/total < 0.5 {
		t.Errorf("%d of %.0f outside in control, %d with the noise doubled", out, total, doubled)
	}
}

// A value more uncertain than usual is judged by its own uncertainty as well.
func TestOwnUncertainty(t *testing.T) {
	vs := scaled(noise(7, 25), 8.26, 0.006)
	for i := range vs {
		vs[i].SD = 0.005
	}
	b := Learn(vs, 0.0066)
	near(t, "usual own uncertainty", b.OwnSD, 0.005, 1e-15)
	odd := Value{Night: 30, X: b.Centre + 0.03, SD: 0.005}
	if js := Judge(b, []Value{odd}, Rules{Individuals: 3}); len(js[0].Flags) != 1 {
		t.Errorf("five spreads off with usual uncertainty: %v", js[0].Flags)
	}
	odd.SD = 0.02
	js := Judge(b, []Value{odd}, Rules{Individuals: 3})
	if len(js[0].Flags) != 0 {
		t.Errorf("the same with an own uncertainty of 0.02: %v", js[0].Flags)
	}
	near(t, "its spread", js[0].SD, math.Sqrt(b.SD*b.SD+0.02*0.02-0.005*0.005), 1e-12)
}

func TestImpactLimit(t *testing.T) {
	b := Known(8.26, 0.001)
	rules := Rules{Individuals: 3, EWMAWeight: .2, EWMAWidth: 2.864, ImpactLimit: 0.02}
	// Surely drifted by 0.004, four spreads: recorded, matters to nobody.
	js := Judge(b, scaled(make([]float64, 5), 8.264, 0), rules)
	if len(js[4].Flags) == 0 || js[4].Matters {
		t.Errorf("a sure drift of 0.004: flags %v, matters %v", js[4].Flags, js[4].Matters)
	}
	js = Judge(b, scaled(make([]float64, 5), 8.29, 0), rules)
	if !js[0].Matters || !hasRule(js[0], BeyondImpact) {
		t.Errorf("0.03 off: %v, matters %v", js[0].Flags, js[0].Matters)
	}
}

// Properties that hold for every series.
func TestJudgeProperties(t *testing.T) {
	rules := goldenRules()
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.Float64Range(-4, 4), 1, 60).Draw(t, "x")
		phi := rapid.SampledFrom([]float64{0, 0.4}).Draw(t, "phi")
		b := Known(0, 1)
		b.Phi, b.DOF, b.CentreSD = phi, 19, 0.2
		vs := series(x)
		js := Judge(b, vs, rules)
		if len(js) != len(vs) {
			t.Fatal("one judgement per value")
		}
		// Point by point: later values do not change earlier judgements.
		k := rapid.IntRange(0, len(x)).Draw(t, "k")
		for i, j := range Judge(b, vs[:k], rules) {
			if !same(j, js[i]) {
				t.Fatalf("judgement %d depends on later values", i)
			}
		}
		// The mirror image raises the same flags on the other side.
		mirrored := make([]Value, len(vs))
		for i, v := range vs {
			mirrored[i] = Value{Night: v.Night, X: -v.X}
		}
		for i, j := range Judge(b, mirrored, rules) {
			if len(j.Flags) != len(js[i].Flags) || !close(j.CusumHigh, js[i].CusumLow) {
				t.Fatalf("mirror image differs at %d", i)
			}
		}
		// Another unit and origin say the same.
		u := b
		u.Centre, u.SD, u.CentreSD = 7, 0.01, 0.002
		for i, j := range Judge(u, scaled(x, 7, 0.01), Rules{Individuals: 3, CusumSlack: .5, CusumDecision: 5}) {
			if !close(j.CusumHigh, js[i].CusumHigh) || math.Abs(j.Score-js[i].Score) > 1e-7 {
				t.Fatalf("unit changes the judgement at %d", i)
			}
		}
	})
}

func close(a, b float64) bool { return math.Abs(a-b) < 1e-7*(1+math.Abs(b)) }

// same compares judgements with NaN equal to NaN.
func same(a, b Judgement) bool {
	x, _ := json.Marshal(flags(a))
	y, _ := json.Marshal(flags(b))
	eq := func(p, q float64) bool { return p == q || math.IsNaN(p) && math.IsNaN(q) }
	return string(x) == string(y) && eq(a.EWMA, b.EWMA) && eq(a.CusumHigh, b.CusumHigh) && eq(a.Score, b.Score) && eq(a.LimitHigh, b.LimitHigh) && eq(a.SelfLow, b.SelfLow)
}

func flags(j Judgement) []string {
	var s []string
	for _, f := range j.Flags {
		s = append(s, f.Rule+f.Sentence)
	}
	return s
}

// A night without data neither clears nor rings, wherever it falls.
func TestNoDataHoldsEverything(t *testing.T) {
	rules := goldenRules()
	rapid.Check(t, func(t *rapid.T) {
		x := rapid.SliceOfN(rapid.Float64Range(-4, 4), 1, 50).Draw(t, "x")
		b := Known(0, 1)
		plain := Judge(b, series(x), rules)
		var gapped []Value
		var at []int
		for i, v := range series(x) {
			for range rapid.IntRange(0, 2).Draw(t, "gap") {
				gapped = append(gapped, Value{Night: v.Night, X: math.NaN()})
				at = append(at, -1)
			}
			gapped = append(gapped, v)
			at = append(at, i)
		}
		for i, j := range Judge(b, gapped, rules) {
			if at[i] < 0 {
				if !j.NoData || len(j.Flags) > 0 {
					t.Fatalf("a night without data raised %v", j.Flags)
				}
				continue
			}
			if !same(j, plain[at[i]]) {
				t.Fatalf("value %d is judged differently after a gap", at[i])
			}
		}
	})
}

// Twice the budget is the border; what wanders without a trend is no baseline; and of
// independent nights one baseline in twenty is taken for correlated.
func TestRefusalBorders(t *testing.T) {
	x := noise(8, 25)
	s := AlgorithmA(x).SD
	if b := Learn(scaled(x, 5, 1), s/1.95); b.Refused != "" {
		t.Errorf("1.95 times the budget: %s", b.Refused)
	}
	if b := Learn(scaled(x, 5, 1), s/2.05); !strings.Contains(b.Refused, "more than twice") {
		t.Errorf("2.05 times the budget: %q", b.Refused)
	}
	wave := make([]float64, 60)
	for i := range wave {
		wave[i] = math.Cos(2*math.Pi*float64(i)/30) + 0.05*x[i%25]
	}
	if b := Learn(scaled(wave, 5, 1), 1); !strings.Contains(b.Refused, "wander") {
		t.Errorf("two slow waves: %q", b.Refused)
	}
	for seed := range uint64(200) {
		if b := Learn(scaled(noise(seed+700, 7), 5, 1), 1); b.Phi != 0 || b.Refused != "" {
			t.Fatalf("seven nights: correlation taken %.2f, refused %q; that is too few to say either", b.Phi, b.Refused)
		}
	}
	taken := 0
	for seed := range uint64(1000) {
		if Learn(scaled(noise(seed+9000, 25), 5, 1), 1).Phi > 0 {
			taken++
		}
	}
	if taken < 20 || taken > 80 {
		t.Errorf("%d of 1000 independent baselines taken for correlated, want about 50", taken)
	}
}

// After a gap yesterday's value foretells less: phi to the power of the nights between.
func TestCorrelationFadesOverGaps(t *testing.T) {
	b := Known(0, 1)
	b.Phi = 0.5
	rules := Rules{CusumSlack: 0.5, CusumDecision: 50}
	for _, gap := range []int{1, 2, 10} {
		js := Judge(b, []Value{{1, 2, 0}, {1 + gap, 2, 0}}, rules)
		f := math.Pow(0.5, float64(gap))
		near(t, "sum after a gap", js[1].CusumHigh, (2-0.5)+(2-2*f)/math.Sqrt(1-f*f)-0.5, 1e-12)
	}
}

// The widening of the weighted mean in closed form: the Student multiplier, and half
// the uncertainty of the centre beside the exact variance.
func TestWeightedMeanWidening(t *testing.T) {
	b := Learn(scaled(noise(8, 20), 5, 1), 1)
	if b.Phi != 0 || b.Stage != Settled {
		t.Fatalf("%+v", b)
	}
	js := Judge(b, []Value{{1, 5, 0}, {2, 5, 0}}, Rules{EWMAWeight: 0.2, EWMAWidth: 2.864})
	exact := 0.2 / 1.8 * (1 - math.Pow(0.8, 4))
	near(t, "half width", (js[1].EWMAHigh-b.Centre)/b.SD, studentQuantile(2.864, 19)*math.Sqrt(exact+0.25/20), 1e-12)
}
