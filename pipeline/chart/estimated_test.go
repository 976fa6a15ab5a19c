package chart

import (
	"math"
	"math/rand/v2"
	"testing"
)

// c4, d2, d3 and what follows; 10 decimals computed, 3-4 digits published (ASTM,
// ISO 7870-2, Montgomery App. VI, from memory).
func TestConstants(t *testing.T) {
	c := ConstantsFor(5)
	near(t, "c4(5) 0.9400", c.C4, 0.9399856030, 1e-9)
	near(t, "d2(5) 2.326", c.D2, 2.3259289473, 1e-9)
	near(t, "d3(5) 0.864", c.D3, 0.8640819411, 1e-9)
	near(t, "A2(5) 0.577", c.A2, 0.5768193341, 1e-9)
	near(t, "D4(2) 3.267", ConstantsFor(2).TopD, 3.2665319193, 1e-9)
	near(t, "D3(25) 0.459", ConstantsFor(25).LowD, 0.4592920932, 1e-9)
	for _, r := range figures(t, "control_chart_constants.csv") {
		c := ConstantsFor(int(number(t, r["n"])))
		for name, got := range map[string]float64{"c4": c.C4, "d2": c.D2, "d3": c.D3, "A2": c.A2, "A3": c.A3, "B3": c.B3, "B4": c.B4, "D3": c.LowD, "D4": c.TopD, "E2": c.E2} {
			near(t, name+" of "+r["n"], got, number(t, r[name]), 2e-9)
		}
	}
}

// t_(n-1) sqrt(1+1/n) for the chance of three standard deviations.
func TestPredictionFactors(t *testing.T) {
	for n, want := range map[int]float64{5: 7.252072299, 8: 4.804763, 10: 4.294091192, 12: 4.007141, 15: 3.755039, 20: 3.532363, 30: 3.334652, 100: 3.092899} {
		near(t, "factor", PredictionFactor(n, 3), want, 5e-7)
	}
	for _, r := range figures(t, "prediction_limit_factors.csv") {
		n := int(number(t, r["n"]))
		for col, alpha := range map[string]float64{"K_alpha_0.05": .05, "K_alpha_0.01": .01, "K_alpha_0.0026998 (3 sigma)": 0.0026997960632601866, "K_alpha_0.002": .002, "K_alpha_0.001": .001} {
			near(t, col+" "+r["n"], PredictionFactor(n, -quantile(alpha/2)), number(t, r[col]), 1e-7)
		}
	}
}

func TestEstimatedLimits(t *testing.T) {
	e := EstimatedLimits(20, 3)
	near(t, "false alarms from 20", e.FalseAlarm, 0.00792853, 1e-8)
	near(t, "mean run length from 20", e.MeanRunLength, 2324.4, 2e-4)
	near(t, "tenth percentile", e.Low, 49.25, 5e-4)
	near(t, "median", e.Mid, 289.2, 5e-4)
	near(t, "ninetieth percentile", e.High, 2834, 2e-3)
	for _, r := range figures(t, "estimated_limits_individuals.csv") {
		n := int(number(t, r["n"]))
		e := EstimatedLimits(n, 3)
		near(t, "false alarms "+r["n"], e.FalseAlarm, number(t, r["FAR_s_over_c4"]), 1e-8)
		near(t, "factor "+r["n"], e.WidenedTo, number(t, r["t_multiplier_K"]), 1e-6)
		near(t, "median "+r["n"], e.Mid, number(t, r["ARL_P50"]), 1e-3)
		// The table's tenths come from a simulation of baselines.
		near(t, "low "+r["n"], e.Low, number(t, r["ARL_P10"]), 1e-2)
		near(t, "high "+r["n"], e.High, number(t, r["ARL_P90"]), 2e-2)
	}
}

// A baseline of any length must not raise more false flags in a hundred nights than a
// known one, and those that hold most of the rate must keep half of it at least from
// twenty nights on.
func TestShortBaselinesKeepTheRate(t *testing.T) {
	rules := Rules{Individuals: 3, MovingRange: 4.28, EWMAWeight: .2, EWMAWidth: 2.864, CusumSlack: .5, CusumDecision: 4.774, SelfStarting: 4.774, Runs: Runs{OneSide: 9}}
	rng := rand.New(rand.NewPCG(3, 4))
	const runs, nights = 1500, 100
	rate := func(n int) map[string]float64 {
		count := map[string]float64{}
		used := 0.0
		for range runs {
			vs := make([]Value, n)
			for i := range vs {
				vs[i] = Value{Night: i, X: rng.NormFloat64()}
			}
			b := Learn(vs, 1)
			if n == 0 {
				b = Known(0, 1)
			}
			if !b.Usable() {
				continue
			}
			used++
			c := NewChart(b, rules)
			seen := map[string]bool{}
			for i := range nights {
				for _, f := range c.Next(Value{Night: n + i, X: rng.NormFloat64()}).Flags {
					seen[f.Rule] = true
				}
			}
			for k := range seen {
				count[k] += 1
			}
		}
		for k := range count {
			count[k] /= used
		}
		return count
	}
	known := rate(0)
	t.Logf("share of hundred-night stretches with a false flag, known baseline: %.3v", known)
	for _, n := range []int{3, 8, 14, 20, 40} {
		got := rate(n)
		t.Logf("from %d nights: %.3v", n, got)
		for _, rule := range rules.Words() {
			// Four binomial standard errors and a tenth.
			if limit := known[rule]*1.1 + 4*math.Sqrt(known[rule]*(1-known[rule])/runs); got[rule] > limit {
				t.Errorf("%s from %d nights: %.3f of stretches, known baseline %.3f", rule, n, got[rule], known[rule])
			}
			if n >= 20 && got[rule] < known[rule]/2 {
				t.Errorf("%s from %d nights: %.3f of stretches, less than half of %.3f", rule, n, got[rule], known[rule])
			}
		}
	}
}
