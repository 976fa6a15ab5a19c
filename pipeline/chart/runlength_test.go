package chart

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"
)

// The most telling run lengths, compiled in. Published figures stand beside them where
// a source prints them; the digits are those of independent computations.
func TestRunLengthsPublished(t *testing.T) {
	for _, c := range []struct {
		what      string
		got, want float64
		published string
	}{
		{"limits at 3", IndividualsRunLength(3, 0, 1).Mean, 370.3983473, "370.4"},
		{"limits at 3, shift 1", IndividualsRunLength(3, 1, 1).Mean, 43.89468172, "43.9"},
		{"limits at 3, SD", IndividualsRunLength(3, 0, 1).SD, 369.89801, ""},
		{"cumulative sum 0.5 3, one side", OneSidedCusumRunLength(.5, 3, 0, 0, 1).Mean, 117.5957042, "117.59 Brook and Evans 1972"},
		{"cumulative sum 0.5 3, one side, shift 1.5", OneSidedCusumRunLength(.5, 3, 0, 1.5, 1).Mean, 3.7491084, "3.75 Brook and Evans 1972"},
		{"cumulative sum 0 10, one side, shift -0.25", OneSidedCusumRunLength(0, 10, 0, -.25, 1).Mean, 2071.5721, "2071.51 Vance 1986"},
		{"cumulative sum 0.5 4", CusumRunLength(.5, 4, 0, 1, false).Mean, 167.68379, "168 Lucas and Crosier 1982"},
		{"cumulative sum 0.5 4, shift 1", CusumRunLength(.5, 4, 1, 1, false).Mean, 8.3831319, "8.38 Lucas and Crosier 1982"},
		{"cumulative sum 0.5 4, head start", CusumRunLength(.5, 4, 0, 1, true).Mean, 148.69565, "149 Lucas and Crosier 1982"},
		{"cumulative sum 0.5 4, head start, shift 1", CusumRunLength(.5, 4, 1, 1, true).Mean, 5.2868862, "5.29 Lucas and Crosier 1982"},
		{"cumulative sum 0.5 5", CusumRunLength(.5, 5, 0, 1, false).Mean, 465.44351, "465 (from memory, Montgomery)"},
		{"cumulative sum 0.5 5, shift 1", CusumRunLength(.5, 5, 1, 1, false).Mean, 10.37597, "10.4 (from memory, Montgomery)"},
		{"weighted mean 0.5 3.071", EWMARunLength(.5, 3.071, 0, 1).Mean, 499.90601, "500 Lucas and Saccucci 1990"},
		{"weighted mean 0.2 2.962", EWMARunLength(.2, 2.962, 0, 1).Mean, 499.73512, "500 (from memory, Lucas and Saccucci)"},
		{"weighted mean 0.2 2.962, shift 1", EWMARunLength(.2, 2.962, 1, 1).Mean, 10.541666, "10.5 (from memory, Lucas and Saccucci)"},
		{"weighted mean 0.03 2.437, shift 0.25", EWMARunLength(.03, 2.437, .25, 1).Mean, 76.72574, "76.7 Lucas and Saccucci 1990"},
		{"weighted mean 0.1 2.814, exact limits", EWMAExactRunLength(.1, 2.814, 0, 1).Mean, 486.4293, ""},
		{"weighted mean 0.03 2.437, exact limits", EWMAExactRunLength(.03, 2.437, 0, 1).Mean, 444.9556, ""},
		{"action limits, two of three", RunsRunLength(3, Runs{TwoOfThree: true}, 0, 1).Mean, 225.43841, "225.44 Champ and Woodall 1987"},
		{"action limits, four of five", RunsRunLength(3, Runs{FourOfFive: true}, 0, 1).Mean, 166.05452, "166.05 Champ and Woodall 1987"},
		{"action limits, eight on one side", RunsRunLength(3, Runs{OneSide: 8}, 0, 1).Mean, 152.73007, "152.73 Champ and Woodall 1987"},
		{"all four zone tests", RunsRunLength(3, ZoneRuns(), 0, 1).Mean, 91.750773, "91.75 (from memory, Champ and Woodall)"},
		{"all four zone tests, shift 1", RunsRunLength(3, ZoneRuns(), 1, 1).Mean, 9.22186, ""},
		{"multirule without opposite neighbours", RunsRunLength(3, Runs{TwoBeyond: true, FourBeyond: true, OneSide: 10}, 0, 1).Mean, 182.9976, ""},
		{"limits and ten on one side", RunsRunLength(3, Runs{OneSide: 10}, 0, 1).Mean, 273.68884, ""},
		{"nine on one side alone", RunsRunLength(0, Runs{OneSide: 9}, 0, 1).Mean, 511, "2^9 - 1"},
		{"fifteen close to the centre", RunsRunLength(0, Runs{Inner: 15}, 0, 1).Mean, 963.2715441, ""},
		{"eight away from the centre", RunsRunLength(0, Runs{Outer: 8}, 0, 1).Mean, 14251.36662, ""},
		{"six rising or falling", OrderRunLength(6, 0).Mean, 421.5986260, ""},
		{"seven rising or falling", OrderRunLength(7, 0).Mean, 2881.851877, ""},
		{"fourteen up and down", OrderRunLength(0, 14).Mean, 601.0078040, ""},
		{"correlation 0.5, limits from the moving range", CorrelatedIndividualsRunLength(.5, 3*math.Sqrt(.5), 0).Mean, 34.23314, ""},
		{"correlation 0.4, long-term limits", CorrelatedIndividualsRunLength(.4, 3.09023, 0).Mean, 515.45079, "515.44 Kramer and Schmid 2000"},
		{"correlation 0.4, long-term limits, shift 1", CorrelatedIndividualsRunLength(.4, 3.09023, 1).Mean, 61.85249, "61.85 Kramer and Schmid 2000"},
		{"limits and moving range", IndividualsRangeRunLength(3, 3.685886566, 0, 1).Mean, 105.33093, ""},
		{"limits and moving range, shift 1", IndividualsRangeRunLength(3, 3.685886566, 1, 1).Mean, 37.464037, ""},
		{"limits and moving range, spread doubled", IndividualsRangeRunLength(3, 3.685886566, 0, 2).Mean, 5.4206389, ""},
		{"limits 2.992 and moving range 4.139", IndividualsRangeRunLength(2.992, 4.139, 0, 1).Mean, 200.05735, "200 Rigdon, Cruthis and Champ 1994"},
		{"weighted mean with action limits", IndividualsEWMARunLength(3.5, .2, 2.962, 0, 1).Mean, 424.6221, ""},
		{"weighted mean with action limits, shift 1", IndividualsEWMARunLength(3.5, .2, 2.962, 1, 1).Mean, 10.44713, ""},
		{"cumulative sum with action limits, shift 1", IndividualsCusumRunLength(3.5, .5, 5, 1, 1).Mean, 10.2643, "10.21 (from memory, Lucas 1982; 1-3 % low)"},
		{"drift 0.1, limits at 3.069", IndividualsDriftRunLength(3.069, .1, 1).Mean, 19.109587, "Aerne, Champ and Rigdon 1991"},
		{"drift 0.01, weighted mean", EWMADriftRunLength(.133, 2.856, .01, 1).Mean, 54.229734, "Aerne, Champ and Rigdon 1991"},
		{"drift 0.01, cumulative sum 0.25 8", CusumDriftRunLength(.25, 8, .01, 0).Mean, 51.958031, "52.0 Gan 1992"},
	} {
		tol := 2e-7
		if strings.Contains(c.what, "with action limits") {
			tol = 5e-6 // the reference value is itself extrapolated from two grids
		}
		near(t, c.what+" "+c.published, c.got, c.want, tol)
	}
}

func TestRunLengthTables(t *testing.T) {
	for _, r := range figures(t, "arl_shewhart.csv") {
		l := IndividualsRunLength(number(t, r["c"]), number(t, r["shift"]), 1)
		near(t, "limits "+r["c"]+" "+r["shift"], l.Mean, number(t, r["ARL"]), 2e-9)
		near(t, "limits SD "+r["c"]+" "+r["shift"], l.SD, number(t, r["SDRL"]), 2e-7)
	}
	for _, r := range figures(t, "arl_cusum.csv") {
		k, h, s := number(t, r["k"]), number(t, r["h"]), number(t, r["shift"])
		what := fmt.Sprintf("cumulative sum %v %v %v", k, h, s)
		near(t, what+" one side", OneSidedCusumRunLength(k, h, 0, s, 1).Mean, number(t, r["ARL_one_sided_upper"]), 2e-7)
		near(t, what, CusumRunLength(k, h, s, 1, false).Mean, number(t, r["ARL_two_sided"]), 2e-7)
		near(t, what+" head start", CusumRunLength(k, h, s, 1, true).Mean, number(t, r["ARL_two_sided_FIR_h_over_2"]), 2e-7)
	}
	for _, r := range figures(t, "arl_ewma.csv") {
		w, l, s := number(t, r["lambda"]), number(t, r["L"]), number(t, r["shift"])
		what := fmt.Sprintf("weighted mean %v %v %v", w, l, s)
		near(t, what, EWMARunLength(w, l, s, 1).Mean, number(t, r["ARL_fixed_limits"]), 2e-7)
		near(t, what+" exact", EWMAExactRunLength(w, l, s, 1).Mean, number(t, r["ARL_exact_limits"]), 2e-6)
	}
	for _, r := range figures(t, "arl_combined_shewhart_ewma.csv") {
		got := IndividualsEWMARunLength(number(t, r["c"]), number(t, r["lambda"]), number(t, r["L"]), number(t, r["shift"]), 1).Mean
		near(t, "limits and weighted mean "+r["lambda"]+" "+r["shift"], got, number(t, r["ARL_extrapolated"]), 3e-5)
	}
	for _, r := range figures(t, "arl_ar1_individuals.csv") {
		got := CorrelatedIndividualsRunLength(number(t, r["rho"]), number(t, r["c"]), number(t, r["delta"])).Mean
		near(t, "correlated "+r["rho"]+" "+r["delta"], got, number(t, r["ARL"]), 2e-6)
	}
}

func TestCombinedSumTable(t *testing.T) {
	for _, r := range figures(t, "arl_combined_shewhart_cusum.csv") {
		if s := number(t, r["shift"]); s != 0 && s != 1 && s != 3 {
			continue // each row costs two chains; three shifts of every design tell
		}
		got := IndividualsCusumRunLength(number(t, r["c"]), number(t, r["k"]), number(t, r["h"]), number(t, r["shift"]), 1).Mean
		near(t, "limits and cumulative sum "+r["h"]+" "+r["c"]+" "+r["shift"], got, number(t, r["ARL_extrapolated"]), 5e-5)
	}
	// Without action limits the chain must give what the integral equation gives.
	near(t, "chain against integral equation", IndividualsCusumRunLength(30, .5, 5, 0, 1).Mean, CusumRunLength(.5, 5, 0, 1, false).Mean, 3e-5)
}

func TestDriftTable(t *testing.T) {
	for _, r := range figures(t, "arl_drift.csv") {
		d, first := number(t, r["delta"]), 1
		if r["with0"] == "1" {
			first = 0
		}
		if d < 0.001 && strings.HasPrefix(r["chart"], "cusum") {
			continue // thousands of values until survival has died out
		}
		// The published deltas are eighths of a decade, rounded to six digits.
		if e := math.Pow(10, math.Round(8*math.Log10(d))/8); math.Abs(e-d) < 6e-7 {
			d = e
		}
		p := map[string]float64{}
		for _, kv := range strings.Split(r["params"], ";") {
			k, v, _ := strings.Cut(kv, "=")
			p[k] = number(t, v)
		}
		var got float64
		switch r["chart"] {
		case "shewhart":
			got = IndividualsDriftRunLength(p["c"], d, first).Mean
		case "ewma_two_sided":
			got = EWMADriftRunLength(p["lambda"], p["L"], d, first).Mean
		case "cusum_one_sided":
			got = CusumDriftRunLength(p["k"], p["h"], d, first).Mean
		default:
			t.Fatalf("unknown chart %q", r["chart"])
		}
		near(t, fmt.Sprint(r), got, number(t, r["ARL_computed"]), 2e-7)
	}
}

func TestRunRuleTable(t *testing.T) {
	for _, r := range figures(t, "arl_run_rules.csv") {
		var runs Runs
		c := 0.0
		for _, name := range strings.Split(r["rules"], "+") {
			switch name {
			case "1of1_3s":
				c = 3
			case "2of3_2s":
				runs.TwoOfThree = true
			case "4of5_1s":
				runs.FourOfFive = true
			case "2_2s":
				runs.TwoBeyond = true
			case "4_1s":
				runs.FourBeyond = true
			case "run8":
				runs.OneSide = 8
			case "run9":
				runs.OneSide = 9
			case "run10":
				runs.OneSide = 10
			case "1_2s":
				c = -1
			default:
				t.Fatalf("unknown rule %q", name)
			}
		}
		var got RunLength
		s := number(t, r["shift"])
		if c < 0 {
			got = IndividualsRunLength(2, s, 1)
		} else {
			got = RunsRunLength(c, runs, s, 1)
		}
		near(t, r["rule_set"]+" at "+r["shift"], got.Mean, number(t, r["ARL"]), 2e-7)
		near(t, r["rule_set"]+" SD at "+r["shift"], got.SD, number(t, r["SDRL"]), 2e-5)
	}
}

// The Markov chain of Brook and Evans on t states approaches the integral equation as
// its published convergence table says; the product uses the integral equation.
func TestChainConvergence(t *testing.T) {
	for _, r := range figures(t, "arl_cusum_markov_convergence.csv") {
		got := OneSidedCusumRunLength(number(t, r["k"]), number(t, r["h"]), 0, number(t, r["shift"]), 1).Mean
		near(t, "integral equation "+r["h"]+" "+r["shift"], got, number(t, r["ARL_integral_equation"]), 2e-7)
	}
}

// The code that judges nights must run as long as theory says. The seeds are fixed;
// four standard errors and a fixed seed make the test deterministic.
func TestJudgingRunsAsLongAsTheorySays(t *testing.T) {
	k := Known(0, 1)
	for i, c := range []struct {
		name  string
		rules Rules
		d     Disturbance
		want  float64
	}{
		{"limits", Rules{Individuals: 2.5}, Disturbance{}, IndividualsRunLength(2.5, 0, 1).Mean},
		{"exact weighted mean", Rules{EWMAWeight: .1, EWMAWidth: 2.2}, Disturbance{}, EWMAExactRunLength(.1, 2.2, 0, 1).Mean},
		{"sum", Rules{CusumSlack: .5, CusumDecision: 4}, Disturbance{Shift: 1}, CusumRunLength(.5, 4, 1, 1, false).Mean},
		{"sum with head start", Rules{CusumSlack: .5, CusumDecision: 4, HeadStart: true}, Disturbance{Shift: 1}, CusumRunLength(.5, 4, 1, 1, true).Mean},
		{"moving range and limits", Rules{Individuals: 3, MovingRange: 3.6859}, Disturbance{}, IndividualsRangeRunLength(3, 3.6859, 0, 1).Mean},
		{"zones", Rules{Individuals: 3, Runs: ZoneRuns()}, Disturbance{}, 91.750773},
		{"multirule", Rules{Individuals: 3, Runs: Multirule()}, Disturbance{Shift: 1}, RunsRunLength(3, Multirule(), 1, 1).Mean},
		{"six in order", Rules{Runs: Runs{Monotone: 5}}, Disturbance{}, OrderRunLength(5, 0).Mean},
		{"up and down", Rules{Runs: Runs{Alternating: 9}}, Disturbance{}, OrderRunLength(0, 9).Mean},
		{"sum and limits", Rules{Individuals: 3.5, CusumSlack: .5, CusumDecision: 4}, Disturbance{Shift: .5}, 26.42824},
		{"self-starting sum", Rules{CusumSlack: .5, SelfStarting: 3}, Disturbance{}, CusumRunLength(.5, 3, 0, 1, false).Mean + 2},
		{"drift", Rules{Individuals: 3}, Disturbance{PerValue: .1}, IndividualsDriftRunLength(3, .1, 1).Mean},
		{"correlated limits", Rules{Individuals: 2}, Disturbance{Phi: .5}, CorrelatedIndividualsRunLength(.5, 2, 0).Mean},
	} {
		got := Simulate(k, c.rules, c.d, 4000, uint64(i+1))
		if math.Abs(got.Mean-c.want) > 4*got.SE {
			t.Errorf("%s: judged run length %.3f +- %.3f, theory %.3f", c.name, got.Mean, got.SE, c.want)
		}
	}
}

// Known to the chart, a correlation must cost no more false alarms than independence.
func TestCorrelatedNightsKeepTheRate(t *testing.T) {
	b := Known(0, 1)
	b.Phi = 0.5
	rules := Rules{Individuals: 3, EWMAWeight: .2, EWMAWidth: 2.864, CusumSlack: .5, CusumDecision: 4.774, Runs: Runs{OneSide: 9}}
	for _, c := range []struct {
		name  string
		rules Rules
		least float64
	}{
		{"limits", Rules{Individuals: 3}, 370},
		{"weighted mean", Rules{EWMAWeight: .2, EWMAWidth: rules.EWMAWidth}, 370},
		{"sum", Rules{CusumSlack: .5, CusumDecision: rules.CusumDecision}, 370},
		{"nine on one side", Rules{Runs: Runs{OneSide: 9}}, 511},
	} {
		aware := Simulate(b, c.rules, Disturbance{Phi: .5}, 1500, 7)
		naive := Simulate(Known(0, 1), c.rules, Disturbance{Phi: .5}, 1500, 7)
		t.Logf("%s under a day-to-day correlation of 0.5: %.0f nights, %.0f if it were ignored", c.name, aware.Mean, naive.Mean)
		if aware.Mean < c.least-4*aware.SE {
			t.Errorf("%s: %.1f +- %.1f, want at least %.0f", c.name, aware.Mean, aware.SE, c.least)
		}
	}
}

// Published run-length tables as printed by their authors, with the recomputed figure.
func TestPublishedTables(t *testing.T) {
	checked := 0
	for _, r := range figures(t, "arl_published_tables.csv") {
		p := map[string]float64{}
		for _, kv := range strings.FieldsFunc(r["parameters"], func(c rune) bool { return c == ' ' || c == ';' }) {
			k, v, _ := strings.Cut(kv, "=")
			if x, err := strconv.ParseFloat(v, 64); err == nil {
				p[k] = x
			}
		}
		mu := number(t, r["mu"])
		var got float64
		switch r["chart"] {
		case "I_MR":
			got = IndividualsRangeRunLength(p["M"], p["R"], mu, 1).Mean
		case "I_MR_sigma":
			got = IndividualsRangeRunLength(p["M"], p["R"], 0, mu).Mean
		case "cusum_one":
			got = OneSidedCusumRunLength(p["k"], p["h"], 0, mu, 1).Mean
		case "cusum_two":
			got = CusumRunLength(p["k"], p["h"], mu, 1, false).Mean
		case "cusum_two_FIR":
			got = CusumRunLength(p["k"], p["h"], mu, 1, true).Mean
		case "ewma_two", "ewma_two_fixed", "ewma_two_exact_limits":
			w, l := p["lambda"], p["L"]
			if w == 0 || l == 0 {
				t.Fatalf("parameters %q", r["parameters"])
			}
			if r["chart"] == "ewma_two_exact_limits" {
				got = EWMAExactRunLength(w, l, mu, 1).Mean
			} else {
				got = EWMARunLength(w, l, mu, 1).Mean
			}
		default:
			continue // head starts of the weighted mean, steady states: not offered
		}
		checked++
		near(t, r["source"]+" "+r["parameters"]+" at "+r["mu"], got, number(t, r["computed"]), 2e-6)
	}
	t.Logf("%d printed run lengths", checked)
	if checked < 100 {
		t.Errorf("only %d rows were recognised", checked)
	}
}

// Sets of pattern tests against independent simulations of 200 000 runs.
func TestPatternSetsAgainstSimulation(t *testing.T) {
	near(t, "limits, nine on one side, two of three, four of five", RunsRunLength(3, Runs{OneSide: 9, TwoOfThree: true, FourOfFive: true}, 0, 1).Mean, 109.0493, 1e-6)
	all := Simulate(Known(0, 1), Rules{Individuals: 3, Runs: PatternRuns()}, Disturbance{}, 4000, 77)
	if math.Abs(all.Mean-73.491) > 4*all.SE {
		t.Errorf("all eight tests: %.2f +- %.2f, independent simulation 73.49", all.Mean, all.SE)
	}
	for _, r := range figures(t, "arl_multirule.csv") {
		if r["N"] != "1" {
			continue
		}
		c, runs := 3.0, Runs{}
		switch r["rules"] {
		case "1_2s":
			c = 2
		case "1_3s":
		case "1_3s/2_2s/R_4s":
			runs = Runs{TwoBeyond: true, Opposite: true}
		case "1_3s/2_2s/R_4s/4_1s/10_x":
			runs = Multirule()
		default:
			t.Fatalf("unknown set %q", r["rules"])
		}
		got := RunsRunLength(c, runs, number(t, r["shift"]), 1).Mean
		// With one value a night the table's set leaves neighbours beyond opposite
		// borders to single runs, where it cannot fire.
		runs.Opposite = false
		without := RunsRunLength(c, runs, number(t, r["shift"]), 1).Mean
		want, se := number(t, r["ARL_runs"]), number(t, r["standard_error"])
		if math.Abs(without-want) > 4*se {
			t.Errorf("%s at %s: %.3f, simulated %.3f +- %.3f", r["rules"], r["shift"], without, want, se)
		}
		if got > without+1e-9 {
			t.Errorf("%s at %s: one more test makes runs longer", r["rules"], r["shift"])
		}
	}
}
