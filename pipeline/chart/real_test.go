package chart

import (
	"maps"
	"math"
	"slices"
	"strings"
	"testing"
	"time"
)

// Series of real laboratories, read when they lie beside the source tree. Each test
// prints what the charts say and holds it to what the laboratory itself noted, or to
// what is published about the series.

// says prints the baseline and the nights with flags.
func says(t *testing.T, what string, b Baseline, js []Judgement, label func(i int) string) {
	t.Helper()
	t.Logf("%s: %s baseline of %d, centre %.5g, spread %.3g. %s", what, b.Stage, b.Nights, b.Centre, b.SD, b.Correlation)
	if b.Refused != "" {
		t.Logf("  refused: %s", b.Refused)
	}
	for i, j := range js {
		if len(j.Flags) == 0 {
			continue
		}
		var rules []string
		for _, f := range j.Flags {
			rules = append(rules, f.Rule)
		}
		t.Logf("  %s  %.5g (score %+.1f): %s", label(i), j.X, j.Score, strings.Join(rules, "; "))
	}
}

func hasRule(j Judgement, rule string) bool {
	return slices.ContainsFunc(j.Flags, func(f Flag) bool { return f.Rule == rule })
}

// day numbers a date.
func day(t *testing.T, layout, s string) int {
	t.Helper()
	d, err := time.Parse(layout, s)
	if err != nil {
		t.Fatal(err)
	}
	return int(d.Unix() / 86400)
}

// Calibrations of one electrode position with the laboratory's own verdicts. The
// baseline is the steady stretch of one probe and one set of buffers (ten calibrations
// in spring 2021); its spread in the budget is 0.1 % of the slope.
func TestRealElectrodeCalibrations(t *testing.T) {
	rows := table(t, "data", "real", "electrode_history", "calibrations_2020_to_jun2022.csv")
	var vs []Value
	at := map[string]int{}
	for i, r := range rows {
		vs = append(vs, Value{Night: day(t, "20060102", r["date"]), X: number(t, r["slope_mV_per_pH"])})
		at[r["date"]] = i
	}
	label := func(from int) func(i int) string {
		return func(i int) string {
			r := rows[from+i]
			return r["date"] + " " + r["status"] + " " + r["event"]
		}
	}
	b := Learn(vs[at["20210428"]:at["20210603"]+1], 0.058)
	if !b.Usable() || b.Stage != Young {
		t.Fatalf("baseline of the steady stretch: %s, refused %q", b.Stage, b.Refused)
	}
	before := Judge(b, vs[:at["20210428"]], Rules{Individuals: 3})
	says(t, "slope before the steady stretch", b, before, label(0))
	for i, j := range before {
		if rows[i]["status"] == "BAD" && !hasRule(j, BeyondLimits) {
			t.Errorf("%s: called bad, slope %.2f not flagged", rows[i]["date"], j.X)
		}
		// The chart is stricter than the laboratory: it also sees that a probe just put
		// in has not settled yet. What the laboratory called bad lies farther out.
		if rows[i]["status"] == "GOOD" && !(j.Score < 4.5) {
			t.Errorf("%s: called good, slope %.2f scores %.1f", rows[i]["date"], j.X, j.Score)
		}
	}
	for _, j := range Judge(b, vs[at["20210428"]:at["20210603"]+1], DefaultRules()) {
		if len(j.Flags) > 0 {
			t.Errorf("steady stretch, slope %.2f: %v", j.X, j.Flags)
		}
	}
	from := at["20210603"] + 1
	after := Judge(b, vs[from:], Rules{Individuals: 3, EWMAWeight: .2, EWMAWidth: 2.864, CusumSlack: .5, CusumDecision: 4.774})
	says(t, "slope after it", b, after[:11], label(from))
	first := ""
	for i, j := range after {
		if len(j.Flags) > 0 {
			first = rows[from+i]["date"]
			break
		}
	}
	t.Logf("first flag of the ageing %s; the laboratory's verdict went down on 20210715", first)
	if first == "" || first > "20210715" {
		t.Errorf("ageing first flagged %q, the laboratory lowered its verdict on 20210715", first)
	}
	for _, date := range []string{"20220224", "20220630"} {
		if !hasRule(after[at[date]-from], BeyondLimits) {
			t.Errorf("%s: the fallen slope %.2f is not beyond the limits", date, vs[at[date]].X)
		}
	}
	// Learnt across the ageing, a baseline must be refused.
	bad := Learn(vs[at["20210428"]:at["20210811"]+1], 0.15)
	t.Logf("baseline learnt across the ageing: %s", bad.Refused)
	if !strings.Contains(bad.Refused, "contain a trend") {
		t.Error("a baseline with the ageing inside was accepted")
	}
	ageing := vs[at["20210428"] : at["20210811"]+1]
	c := FindChange(ageing, b)
	t.Logf("electrode: %s", c.Sentence)
	if c.Shape != Drift || c.Size <= 0 {
		t.Errorf("ageing explained as %s of %v", c.Shape, c.Size)
	}
	f := ForecastExit(vs[at["20210603"]:at["20210708"]+1], 0, -59.16, -57.3)
	t.Logf("forecast on 20210708 for a slope of -57.3: %s", f.Sentence)
	if reached := float64(vs[at["20210811"]].Night); !f.Leaves || f.Low > reached || f.High < reached-14 {
		t.Errorf("the slope passed -57.3 near day %.0f; foretold %.0f to %.0f", reached, f.Low, f.High)
	}
}

// Certified seawater run as a control: percent off the certificate, daily means.
func TestRealSeawaterControls(t *testing.T) {
	rows := table(t, "data", "real", "crm_alkalinity_history", "runs_to_2022.csv")
	sums, counts := map[string]float64{}, map[string]float64{}
	for _, r := range rows {
		if r["batch"] != "180" {
			continue
		}
		sums[r["date"]] += number(t, r["percent_off"])
		counts[r["date"]]++
	}
	dates := slices.Sorted(maps.Keys(sums))
	var vs []Value
	at := map[string]int{}
	for i, d := range dates {
		vs = append(vs, Value{Night: day(t, "20060102", d), X: sums[d] / counts[d]})
		at[d] = i
	}
	b := Learn(vs[at["20210428"]:at["20211206"]+1], 0.15)
	label := func(i int) string { return dates[i] }
	js := Judge(b, vs, Rules{Individuals: 3, EWMAWeight: .2, EWMAWidth: 2.864})
	says(t, "alkalinity", b, js, label)
	if !b.Usable() || b.Stage != Settled {
		t.Fatalf("baseline %s, refused %q", b.Stage, b.Refused)
	}
	// New and faulty probes in March and April 2021, the run of January 2022 and the
	// spoiled runs of May and June 2022 are a percent off and more.
	for _, d := range []string{"20210314", "20210404", "20220118", "20220504", "20220518", "20220520"} {
		if !hasRule(js[at[d]], BeyondLimits) {
			t.Errorf("%s: %.2f %% off is not flagged", d, vs[at[d]].X)
		}
	}
	// In the year between nothing else leaves the limits.
	for i, d := range dates {
		if d >= "20210428" && d < "20220427" && d != "20220118" && hasRule(js[i], BeyondLimits) {
			t.Errorf("%s: %.2f %% off is flagged", d, vs[i].X)
		}
	}
	spring := vs[at["20220315"]:at["20220520"]]
	c := FindStep(spring, b)
	t.Logf("alkalinity, spring 2022: %s", c.Sentence)
	// The first run a percent off is that of 4 May; 27 April was already low.
	if low, high := day(t, "20060102", "20220427"), day(t, "20060102", "20220504"); c.OnsetNight < low || c.OnsetNight > high {
		t.Errorf("onset day %d, want %d to %d", c.OnsetNight, low, high)
	}
}

// Reference indicator in reference buffer, three wells a day: the wells of one day
// share their day's error.
func TestRealReferenceIndicator(t *testing.T) {
	rows := table(t, "data", "real", "mcp_tris_reference", "daily_jan_feb_2020.csv")
	sums, counts := map[int]float64{}, map[int]float64{}
	var wells []Value
	for _, r := range rows {
		if r["temp_in_situ_C"] != "25" {
			continue
		}
		d := day(t, "2006-01-02", r["date"])
		x := number(t, r["lab_pH_reported"]) - number(t, r["tris_pH_reported"])
		wells = append(wells, Value{Night: d, X: x})
		sums[d] += x
		counts[d]++
	}
	var days []Value
	for _, d := range slices.Sorted(maps.Keys(sums)) {
		days = append(days, Value{Night: d, X: sums[d] / counts[d]})
	}
	byWell, byDay := Learn(wells, 0.012), Learn(days, 0.012)
	t.Logf("wells: n %d, correlation %.2f. %s", byWell.Nights, byWell.Lag1, byWell.Correlation)
	t.Logf("days: n %d, correlation %.2f. %s %s", byDay.Nights, byDay.Lag1, byDay.Correlation, byDay.Refused)
	if byWell.Phi < 0.3 || byDay.Phi != 0 {
		t.Errorf("wells share their day, days share nothing: correlation taken %.2f and %.2f", byWell.Phi, byDay.Phi)
	}
	if !byWell.Usable() || !byDay.Usable() {
		t.Fatalf("refused: %q %q", byWell.Refused, byDay.Refused)
	}
	mr := 0.0
	for i := 1; i < len(wells); i++ {
		mr += math.Abs(wells[i].X-wells[i-1].X) / float64(len(wells)-1)
	}
	count := func(js []Judgement) int {
		n := 0
		for _, j := range js {
			n += len(j.Flags)
		}
		return n
	}
	narrow := count(Judge(Known(byWell.Centre, mr/ConstantsFor(2).D2), wells, Rules{Individuals: 3}))
	wide := count(Judge(byWell, wells, Rules{Individuals: 3}))
	t.Logf("wells outside: %d with limits from the moving range, %d with long-term limits", narrow, wide)
	if wide > 0 || narrow == 0 {
		t.Errorf("long-term limits flag %d wells, the moving range %d", wide, narrow)
	}
	// One day ran at 26 degrees; the laboratory corrected both figures for it, and the
	// corrected difference belongs among the others.
	warm := 0.0
	for _, r := range rows {
		if r["temp_in_situ_C"] == "26" {
			warm += (number(t, r["lab_pH_reported"]) - number(t, r["tris_pH_reported"])) / 3
		}
	}
	j := Judge(byDay, []Value{{Night: 1, X: warm}}, Rules{Individuals: 3})[0]
	t.Logf("the day at 26 degrees: score %+.1f among days at 25", j.Score)
	if !(math.Abs(j.Score) < 2) {
		t.Errorf("the corrected warm day scores %+.2f", j.Score)
	}
}

// Reference-water scans of a photometer: eight against one blank, the last two against
// another. Repeat baselines of the same instrument stay within its noise.
func TestRealPhotometer(t *testing.T) {
	rows := table(t, "data", "real", "photometer_baseline", "series.csv")
	var repeat, water []Value
	for _, r := range rows {
		if r["wavelength_nm"] != "578" {
			continue
		}
		for i, c := range []string{"baseline_20160425", "baseline_20160429", "baseline_20160503", "baseline_20160509", "baseline_20160912"} {
			repeat = append(repeat, Value{Night: i + 1, X: number(t, r[c])})
		}
		for i, c := range []string{"refwater_20160425", "refwater_20160426", "refwater_20160429", "refwater_20160503", "refwater_20160509", "refwater_20160523", "refwater_20160616", "refwater_20160630", "refwater_20160822_151523", "refwater_20160822_152212"} {
			water = append(water, Value{Night: i + 1, X: number(t, r[c])})
		}
	}
	still := Judge(Learn(repeat, 0.0003), repeat, Rules{Individuals: 3, EWMAWeight: .2, EWMAWidth: 2.864})
	for _, j := range still {
		if len(j.Flags) > 0 {
			t.Errorf("repeat baseline %d: %v", j.Night, j.Flags)
		}
	}
	b := Learn(water[:8], 0.0005)
	js := Judge(b, water, DefaultRules())
	says(t, "reference water at 578 nm", b, js, func(i int) string { return "scan" })
	if b.Stage != Young || !b.Usable() {
		t.Fatalf("%s, refused %q", b.Stage, b.Refused)
	}
	for i, j := range js {
		if hasRule(j, BeyondLimits) != (i >= 8) {
			t.Errorf("scan %d: beyond limits %v", i+1, i < 8)
		}
	}
	if c := FindStep(water, b); c.Last != 8 || c.OnsetLow != 9 || c.OnsetHigh != 9 {
		t.Errorf("blank changed after scan %d (%d to %d), want 8", c.Last, c.OnsetLow, c.OnsetHigh)
	}
	// Seen without any baseline, by the self-starting sum.
	if got := firstNight(js, SelfStarting); got != 9 {
		t.Errorf("self-starting sum signals at scan %d, want 9", got)
	}
}

// Filter transmittance, ten readings a second: certified lag-1 correlation
// 0.937989183438248 (StRD Mavro). No baseline can be learnt from that.
func TestRealFilter(t *testing.T) {
	rows := table(t, "data", "real", "nist_series", "filter_transmittance.csv")
	var vs []Value
	for _, r := range rows {
		vs = append(vs, Value{Night: int(number(t, r["n"])), X: number(t, r["transmittance"])})
	}
	b := Learn(vs, 0.0005)
	near(t, "lag-1", b.Lag1, 0.937989183438248, 1e-9)
	t.Logf("filter: %s", b.Refused)
	if b.Refused == "" {
		t.Error("a wandering series was accepted as a baseline")
	}
}

// Three line-width artefacts on six days through a linear calibration: out of control
// on the fourth day only (e-Handbook 2.3.7; line 0.2357 + 0.9870 x with standard
// deviation 0.06203 on 38 degrees of freedom, 5 % for three artefacts, from memory).
func TestRealLinewidth(t *testing.T) {
	rows := table(t, "data", "real", "nist_series", "linewidth_control.csv")
	b := Known(0, 0.06203/0.9870)
	b.DOF = 38
	rules := Rules{Individuals: -quantile(0.05 / 6)}
	for _, r := range rows {
		d := int(number(t, r["day"]))
		x := (number(t, r["measured"])-0.2357)/0.9870 - number(t, r["reference"])
		j := Judge(b, []Value{{Night: d, X: x}}, rules)[0]
		if out := hasRule(j, BeyondLimits); out != (d == 4) {
			t.Errorf("day %d %s: %+.3f, limits %+.3f to %+.3f, out %v", d, r["position"], x, j.LimitLow, j.LimitHigh, out)
		}
	}
}
