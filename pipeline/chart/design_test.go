package chart

import (
	"math"
	"strings"
	"testing"
)

// Limits for a stated run length, against the inverse tables.
func TestInverseDesignTables(t *testing.T) {
	near(t, "sum 0.5 for 370 (4.77 Hawkins 1993, from memory)", fitCusum(Rules{CusumSlack: .5}, 370).CusumDecision, 4.773834, 2e-7)
	near(t, "weighted mean 0.2 for 370", fitEWMA(Rules{EWMAWeight: .2}, 370).EWMAWidth, 2.863877, 1e-6)
	near(t, "limits for 370.4", fitZones(Rules{Individuals: 1}, 370.3983473).Individuals, 3, 1e-9)
	for _, r := range figures(t, "cusum_h_for_arl.csv") {
		got := fitCusum(Rules{CusumSlack: number(t, r["k"])}, number(t, r["ARL0"])).CusumDecision
		near(t, "sum "+r["k"]+" "+r["ARL0"], got, number(t, r["h"]), 5e-7)
	}
	for _, r := range figures(t, "ewma_L_for_arl.csv") {
		w := number(t, r["lambda"])
		fixed := solveLimit(number(t, r["ARL0"]), .5, 8, func(l float64) float64 { return EWMARunLength(w, l, 0, 1).Mean })
		near(t, "weighted mean "+r["lambda"]+" "+r["ARL0"], fixed, number(t, r["L_fixed"]), 1e-6)
		if a := r["ARL0"]; a == "370" && w > 0.04 || a == "500" && w >= 0.1 {
			near(t, "exact "+r["lambda"]+" "+r["ARL0"], fitEWMA(Rules{EWMAWeight: w}, number(t, r["ARL0"])).EWMAWidth, number(t, r["L_exact"]), 2e-6)
		}
	}
}

// One false alarm in 365 nights per instrument, all charts together.
func TestLimitsForTheUsersRate(t *testing.T) {
	kinds := Rules{Individuals: 3, EWMAWeight: .2, EWMAWidth: 2.8, CusumSlack: .5, CusumDecision: 5}
	r, d, err := LimitsFor(365, 40, kinds)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "values between false alarms of one chart", d.PerChart, 365*40, 0)
	near(t, "as asked", d.AtLeast, d.PerChart, 1e-6)
	for _, row := range d.Rows {
		near(t, row.Rule, row.InControl, 3*d.PerChart, 1e-6)
		for i := 1; i < len(row.Shifted); i++ {
			if row.Shifted[i].Mean >= row.Shifted[i-1].Mean {
				t.Errorf("%s: a larger step is seen later", row.Rule)
			}
		}
	}
	if near(t, "limits", 2*below(-r.Individuals), 1.0/43800, 1e-12); r.MovingRange != 0 || r.Runs.any() {
		t.Errorf("%+v", r)
	}
	t.Logf("one in 365 nights over 40 charts: limits %.2f, weighted mean %.2f, sum %.2f", r.Individuals, r.EWMAWidth, r.CusumDecision)
	// All together, judged: not more often than asked (less often, since rules overlap).
	r, d, err = LimitsFor(60, 2, kinds)
	if err != nil {
		t.Fatal(err)
	}
	together := Simulate(Known(0, 1), r, Disturbance{}, 3000, 5)
	t.Logf("one in 60 nights over 2 charts: judged run length %.0f +- %.1f, asked %.0f", together.Mean, together.SE, d.PerChart)
	if together.Mean < d.PerChart-3*together.SE || together.Mean > 1.6*d.PerChart {
		t.Errorf("all rules together run %.1f +- %.1f values, asked %.0f", together.Mean, together.SE, d.PerChart)
	}
}

func TestLimitsForRunTests(t *testing.T) {
	for name, runs := range map[string]Runs{"zones": ZoneRuns(), "patterns": PatternRuns(), "multirule": Multirule()} {
		r, d, err := LimitsFor(365, 10, Rules{Individuals: 3, Runs: runs})
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%s: limits %.2f, %+v, left out %v, at least %.0f", name, r.Individuals, r.Runs, d.LeftOut, d.AtLeast)
		if d.AtLeast < d.PerChart*(1-1e-6) {
			t.Errorf("%s: %.0f values between false alarms, asked %.0f", name, d.AtLeast, d.PerChart)
		}
		if err := r.Check(); err != nil {
			t.Error(err)
		}
	}
	// The runs in a row of closed form.
	near(t, "nine on one side", inARow(8, .5, 0).Mean+1, 511, 1e-12)
	near(t, "fifteen close", inARow(15, between(-1, 1), 0).Mean, 963.2715441, 1e-9)
	if d := Describe(Rules{Individuals: 3, Runs: ZoneRuns()}, []float64{1}); math.Abs(d.Rows[0].InControl-91.750773) > 1e-4 || math.Abs(d.Rows[0].Shifted[0].Mean-9.22186) > 1e-5 {
		t.Errorf("%+v", d)
	}
}

func TestLimitsForRefusesNonsense(t *testing.T) {
	for _, c := range []struct {
		nights float64
		charts int
		r      Rules
		says   string
	}{
		{0, 1, DefaultRules(), "expected"}, {math.NaN(), 1, DefaultRules(), "expected"}, {365, 0, DefaultRules(), "expected"},
		{365, 1, Rules{}, "no chart"}, {365, 1, Rules{EWMAWeight: 2, EWMAWidth: 3}, "weight"}, {365, 1, Rules{Individuals: math.NaN()}, "individual limit"},
		{365, 1, Rules{Runs: Runs{OneSide: 2}}, "run of 2"},
	} {
		if _, _, err := LimitsFor(c.nights, c.charts, c.r); err == nil || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%v nights, %d charts: %v", c.nights, c.charts, err)
		}
	}
}

// What is printed must be what was found.
func TestDesignLines(t *testing.T) {
	_, d, err := LimitsFor(365, 10, Rules{Individuals: 3, SelfStarting: 5})
	if err != nil {
		t.Fatal(err)
	}
	text := strings.Join(d.Lines(), "\n")
	t.Log("\n" + text)
	for _, want := range []string{BeyondLimits, SelfStarting, "7300", "one in 365 nights over 10 charts", "at least 3650"} {
		if !strings.Contains(text, want) {
			t.Errorf("%q is not printed", want)
		}
	}
}
