package assay

import (
	"encoding/json"
	"fmt"
	"math"
	"reflect"
	"slices"
	"strings"
	"testing"

	"pkvigil/pipeline/rehearse"
	"pkvigil/pipeline/settings"
	"pkvigil/pipeline/spectra"
	"pkvigil/pipeline/verdict"
)

// The stated interval holds the true constant: 48 sets of five dyes with the
// scatter of a quiet room, a fresh calibration each. With a coverage factor of
// 2 about one in twenty may fall outside; more than one in ten would be a
// wrong budget, and so would intervals that are never left by a wide margin.
func TestIntervalsHoldTheTruth(t *testing.T) {
	dyes := rehearse.Dyes()
	sc := &rehearse.Scenario{Seed: 3, Noise: rehearse.Quiet(),
		Design: rehearse.Design{Dyes: []rehearse.Dye{dyes["PR"], dyes["CR"], dyes["BCP"], dyes["RI-C"]}, CalibrateEvery: 1}}
	n, inside, stand := 0, 0, 0
	var far float64
	for k := 1; k <= 12; k++ {
		for _, s := range night(t, sc, k) {
			out := Compute(input(t, sc, s))
			if out.Err != nil {
				t.Fatalf("%s: %v", s.Key(), out.Err)
			}
			c := out.Constants[0]
			n++
			off := math.Abs(c.PKa-s.PKa[0]) / c.Expanded
			far = max(far, off)
			if off <= 1 {
				inside++
			}
			if out.Report.Verdict == verdict.Stands || out.Report.Verdict == verdict.Noted {
				stand++
			}
		}
	}
	t.Logf("%d of %d intervals hold the truth, the farthest is %.2f U away; %d stand", inside, n, far, stand)
	if float64(inside) < 0.9*float64(n) || far > 2 {
		t.Errorf("only %d of %d intervals hold the truth, the farthest is %.2f U away", inside, n, far)
	}
	if far < 0.2 {
		t.Errorf("no result is farther than %.2f U from the truth: U is far too large", far)
	}
	if stand < n*9/10 {
		t.Errorf("only %d of %d undisturbed sets stand", stand, n)
	}
}

func TestUndisturbedSetStands(t *testing.T) {
	out := compute(t, room("PR"))
	if out.Report.Verdict != verdict.Stands {
		t.Fatalf("%s: %v", out.Report.Verdict, out.Report.Reasons())
	}
	c := out.Constants[0]
	if got := math.Sqrt(c.UOwn*c.UOwn + c.URun*c.URun + c.ULab*c.ULab); math.Abs(got-c.U) > 1e-9 {
		t.Errorf("the buckets make %.6f, the combined uncertainty is %.6f", got, c.U)
	}
	if c.Expanded != c.K*c.U || c.K != 2 {
		t.Errorf("U = %g with k = %g and u = %g", c.Expanded, c.K, c.U)
	}
	keys := map[string]bool{}
	for _, k := range c.Components {
		if keys[k.Key] {
			t.Errorf("component %s is counted twice", k.Key)
		}
		keys[k.Key] = true
	}
	for _, want := range []string{"buffer:B-4", "buffer:B-7", "buffer:B-10"} {
		if !keys[want] {
			t.Errorf("the budget lacks %s; it has %v", want, keys)
		}
	}
	// Thermodynamic constant of HIn-/In2- at I = 0.1 by Davies (1962): mixed + 0.509*(2*2-1)*0.2098... with the
	// project's own Debye-Hueckel slope; the requirements give +0.32 for z = -1 (A = 0.509, f = 0.210).
	if d := c.Thermo - c.PKa; math.Abs(d-0.509*3*0.210) > 0.004 {
		t.Errorf("thermodynamic minus mixed is %.4f, expected %.4f", d, 0.509*3*0.210)
	}
	for _, want := range []string{"lambda_acid", "lambda_base", "lambda_isosbestic", "pka", "slope", "temperature"} {
		found := false
		for k := range out.Figures {
			found = found || strings.EqualFold(k, want)
		}
		if !found {
			t.Errorf("figure %s is missing; there are %v", want, slices.Sorted(mapsKeys(out.Figures)))
		}
	}
}

func mapsKeys(m map[string]Figure) func(func(string) bool) {
	return func(yield func(string) bool) {
		for k := range m {
			if !yield(k) {
				return
			}
		}
	}
}

// What each fault of a set is found as. The pKa of the sets that are not held
// stays within U of the truth.
func TestFaultsGiveTheirChecks(t *testing.T) {
	for _, c := range []struct {
		key     string
		rung    int
		check   string
		outcome verdict.Outcome
		left    string // the rung left out, and why
		why     string
	}{
		{"scan.bubble", 5, "rung.out", verdict.Noted, "06", "bubble"},
		{"scan.open", 5, "rung.out", verdict.Noted, "06", ""},
		{"scan.blocked", 5, "rung.out", verdict.Noted, "06", ""},
		{"scan.clone", 5, "scan.clone", verdict.Held, "07", ""},
		{"scan.twice", 5, "rung.out", verdict.Noted, "07", ""},
		{"scan.vial", 5, "scan.foreign", verdict.Held, "06", ""},
		{"scan.wljitter", 5, "wavelength.spread", verdict.Held, "", ""},
		{"scan.saturated", 0, "absorbance.ceiling", verdict.Held, "", ""},
		{"scan.warmup", 0, "clear.window", verdict.Noted, "", ""},
		{"name.swap2", 4, "label.exchange", verdict.Held, "", ""},
		{"name.shift1", 0, "ladder.shift", verdict.Held, "", ""},
		{"name.noblank", 0, "blank", verdict.Held, "", ""},
		{"name.phrows", 5, "rung.out", verdict.Noted, "06", "no pH row"},
		{"name.missing", 5, "ladder.gap", verdict.Noted, "", ""},
		{"ph.typed", 5, "rung.out", verdict.Noted, "06", "pH reading"},
		{"ph.copy", 5, "ph.copy", verdict.Noted, "07", "pH reading"},
		{"ph.coarse", 0, "ph.latent", verdict.Held, "", ""},
		{"ph.mV", 0, "ladder.nominal", verdict.Held, "", ""},
		{"ph.gap", 0, "ladder.gap", verdict.Held, "", ""},
		{"chem.amount", 0, "amount.scatter", verdict.Noted, "", ""},
		{"chem.none", 0, "colour.change", verdict.Held, "", ""},
		{"chem.thermo", 0, "temperature", verdict.Held, "", ""},
		{"chem.complex", 0, "third.component", verdict.Held, "", ""},
		{"chem.nolimits", 0, "forms.reached", verdict.Noted, "", ""},
		{"file.coarse", 0, "digits.coarse", verdict.Noted, "", ""},
		{"file.smoothed", 0, "scan.smoothed", verdict.Noted, "", ""},
		{"scan.precip", 0, "slope", verdict.Held, "", ""},
	} {
		t.Run(c.key, func(t *testing.T) {
			out := compute(t, room("PR", rehearse.Fault{Key: c.key, Rung: c.rung}))
			got := verdict.Stands
			var sentence, action string
			for _, k := range out.Report.Checks {
				if k.Key == c.check && verdict.Worse(got, k.Outcome) != got {
					got, sentence, action = k.Outcome, k.Sentence, k.Action
				}
			}
			if got != c.outcome {
				t.Errorf("check %s is %q, expected %q; the set says %v", c.check, got, c.outcome, out.Report.Reasons())
			}
			if sentence == "" || (c.outcome == verdict.Held && action == "") {
				t.Errorf("check %s says %q and asks for %q", c.check, sentence, action)
			}
			if c.left != "" {
				i := slices.IndexFunc(out.LeftOut, func(l spectra.LeftOut) bool { return l.Key == c.left })
				if i < 0 || !strings.Contains(out.LeftOut[i].Text, c.why) {
					t.Errorf("left out: %v, expected %s because of %q", out.LeftOut, c.left, c.why)
				}
			}
			if v := out.Report.Verdict; v == verdict.Stands || v == verdict.Noted {
				if k := out.Constants[0]; math.Abs(k.PKa-7.8) > k.Expanded {
					t.Errorf("pKa %.4f ± %.4f is %s, the true one is 7.8", k.PKa, k.Expanded, v)
				}
			}
		})
	}
}

// No fault that moves the pKa out of its interval leaves the set released.
func TestNoFaultReleasesAWrongNumber(t *testing.T) {
	for _, key := range rehearse.FaultKeys() {
		for _, dye := range []string{"PR", "BCP"} {
			out := compute(t, room(dye, rehearse.Fault{Key: key, Rung: 4}))
			v := out.Report.Verdict
			if v != verdict.Stands && v != verdict.Noted {
				continue
			}
			truth := rehearse.Dyes()[dye].PKa[0]
			if c := out.Constants[0]; math.Abs(c.PKa-truth) > 1.5*c.Expanded {
				t.Errorf("%s in %s: pKa %.4f ± %.4f is %s, the true one is %.2f", key, dye, c.PKa, c.Expanded, v, truth)
			}
		}
	}
}

// A rung is left out by a rule, and the result with all rungs stays beside it.
func TestLeftOutKeepsTheOtherResult(t *testing.T) {
	out := compute(t, room("PR", rehearse.Fault{Key: "ph.typed", Rung: 5}))
	if out.WithAll == nil || len(out.WithAll.Own.Eta) != len(out.Fit.Own.Eta)+1 {
		t.Fatal("the result with all rungs is not kept")
	}
	if out.Facts.Rungs != 12 || len(out.Facts.Keys) != 11 {
		t.Errorf("%d rungs delivered, %d used", out.Facts.Rungs, len(out.Facts.Keys))
	}
}

// Labels exchanged: proposed with both names and odds, and right once signed.
func TestSignedExchange(t *testing.T) {
	for _, rung := range []int{3, 4, 6, 7} {
		sc := room("PR", rehearse.Fault{Key: "name.swap2", Rung: rung})
		out := compute(t, sc)
		a, b := fmt.Sprintf("%02d", rung+1), fmt.Sprintf("%02d", rung+2)
		if len(out.Facts.Suspects) != 1 || out.Facts.Suspects[0].Kind != "exchange" || out.Facts.Suspects[0].A != a || out.Facts.Suspects[0].B != b {
			t.Errorf("rungs %s and %s exchanged: suspects %v", a, b, out.Facts.Suspects)
			continue
		}
		if out.Facts.Suspects[0].Odds < 100 {
			t.Errorf("rungs %s and %s exchanged: odds only %.1f", a, b, out.Facts.Suspects[0].Odds)
		}
		right := compute(t, sc, func(in *Input) { in.Exchange = [][2]string{{b, a}} })
		plain := compute(t, room("PR"))
		if right.Report.Verdict != verdict.Stands || math.Abs(right.Constants[0].PKa-plain.Constants[0].PKa) > 1e-9 {
			t.Errorf("signed: %s with pKa %.6f, undisturbed it is %.6f", right.Report.Verdict, right.Constants[0].PKa, plain.Constants[0].PKa)
		}
	}
}

// A bottle 0.06 off moves pKa by minus its weight there; the signed value
// brings back what an honest bottle gives.
func TestSignedBufferCorrection(t *testing.T) {
	honest := compute(t, room("CR"))
	sc := room("CR")
	sc.Causes = []rehearse.Cause{{Kind: rehearse.BufferHigh, Size: -0.06, Onset: 1}}
	wrong := compute(t, sc)
	w := (8.2 - 6.865) / (10.012 - 6.865) // weight of the high buffer at the pKa, straight line between the buffers
	if d := wrong.Constants[0].PKa - honest.Constants[0].PKa; math.Abs(d-w*0.06) > 0.004 {
		t.Errorf("the bottle moves pKa by %+.4f, expected %+.4f", d, w*0.06)
	}
	right := compute(t, sc, func(in *Input) { in.Corrections = map[string]float64{"B-10": 10.012 - 0.06, "another": 4} })
	if d := right.Constants[0].PKa - honest.Constants[0].PKa; math.Abs(d) > 0.0015 {
		t.Errorf("corrected, pKa is still %+.4f off", d)
	}
	if right.Report.Verdict == verdict.Held {
		t.Errorf("corrected, the set is held: %v", right.Report.Reasons())
	}
}

func TestSecondDye(t *testing.T) {
	sc := room("TB")
	sc.Causes = []rehearse.Cause{{Kind: rehearse.SecondDye, Size: 4, Onset: 1}}
	out := compute(t, sc)
	if out.Report.Verdict != verdict.Held || out.Hidden == nil {
		t.Fatalf("4 %% of a second dye: %s, %v", out.Report.Verdict, out.Report.Reasons())
	}
	if out.Facts.SecondDyeShare < 0.015 || out.Facts.SecondDyeShare > 0.09 {
		t.Errorf("the share is estimated as %.3f, it is 0.04", out.Facts.SecondDyeShare)
	}
	if !slices.ContainsFunc(out.Report.Checks, func(c verdict.Check) bool { return c.Key == "second.dye" && c.Outcome == verdict.Held }) {
		t.Errorf("not said: %v", out.Report.Reasons())
	}
	if math.Abs(out.Hidden.Main-8.9) > 0.02 || math.Abs(out.Hidden.PKa-9.7) > 0.2 {
		t.Errorf("the dyes come apart as %.3f and %.2f, they are 8.90 and 9.70", out.Hidden.Main, out.Hidden.PKa)
	}
	if len(out.Facts.Foreign) > 0 {
		t.Errorf("vial %v is accused of what is in all", out.Facts.Foreign)
	}
	if clean := compute(t, room("TB")); clean.Facts.SecondDyeShare != 0 {
		t.Errorf("a pure dye is accused of %.3f of another", clean.Facts.SecondDyeShare)
	}
}

// The vial of another dye: the archived spectra of that dye fit better.
func TestWrongDye(t *testing.T) {
	entry := func(dye string) spectra.LibraryEntry {
		out := compute(t, room(dye))
		x := out.Prepared.WavelengthNM
		return spectra.LibraryEntry{Name: dye, WavelengthNM: x, Spectra: out.Fit.Spectra[len(x):]}
	}
	others := []spectra.LibraryEntry{entry("PR"), entry("CR"), entry("BCP")}
	asCalled := compute(t, room("PR"), func(in *Input) { in.Others = others })
	if asCalled.Facts.BestDye != "" {
		t.Errorf("phenol red is taken for %s", asCalled.Facts.BestDye)
	}
	cfg, err := settings.Read(room("PR").Settings("/export"), "rehearsal.toml")
	if err != nil {
		t.Fatal(err)
	}
	wrong := compute(t, room("CR"), func(in *Input) { in.Others, in.Compound = others, cfg.CompoundByName("PR") })
	if wrong.Report.Verdict != verdict.Held || wrong.Facts.BestDye != "CR" {
		t.Errorf("cresol red called phenol red: %s, best match %q, %v", wrong.Report.Verdict, wrong.Facts.BestDye, wrong.Report.Reasons())
	}
}

// Archived spectra of the same reference give the library pKa beside the free one.
func TestLibraryPKa(t *testing.T) {
	first := compute(t, room("RI-C"))
	x := first.Prepared.WavelengthNM
	w := len(x)
	a := &Archive{Source: "result 1", WavelengthNM: x, Acid: first.Fit.Spectra[:w], Base: first.Fit.Spectra[w : 2*w], SDAcid: first.Fit.SpectraSD[:w], SDBase: first.Fit.SpectraSD[w : 2*w]}
	sc := room("RI-C")
	in := input(t, sc, night(t, sc, 2)[0])
	in.Archive = a
	out := Compute(in)
	if out.Library == nil || math.Abs(out.Library.PKa-out.Fit.Own.PKa[0]) > 0.01 {
		t.Fatalf("library pKa %+v beside %.4f", out.Library, out.Fit.Own.PKa[0])
	}
	sc.Causes = []rehearse.Cause{{Kind: rehearse.ConstantImpurity, Size: 6, Onset: 2}}
	in = input(t, sc, night(t, sc, 2)[0])
	in.Archive = a
	if moved := Compute(in); math.Abs(moved.Facts.LibraryDiff) <= math.Abs(out.Facts.LibraryDiff) {
		t.Errorf("an impurity does not show in the library difference: %.4f, before %.4f", moved.Facts.LibraryDiff, out.Facts.LibraryDiff)
	}
}

// Three solutions: the two-form result stands beside the fit and agrees with it.
func TestThreeSolutions(t *testing.T) {
	d := rehearse.ThreeSolutions(rehearse.Dyes()["PR"], 7.6, 8.0)
	sc := &rehearse.Scenario{Seed: 4, Noise: rehearse.Quiet(), Design: rehearse.Design{Dyes: []rehearse.Dye{d}, CalibrateEvery: 1}}
	out := compute(t, sc)
	if out.Facts.Profile != verdict.ThreeSolution || out.Classical == nil {
		t.Fatalf("profile %s, classical %v, %v", out.Facts.Profile, out.Classical, out.Err)
	}
	if c := out.Constants[0]; math.Abs(out.Classical.PKa-c.PKa) > c.Expanded || math.Abs(c.PKa-7.8) > c.Expanded {
		t.Errorf("two-form pKa %.4f, fit %.4f ± %.4f, true 7.8", out.Classical.PKa, c.PKa, c.Expanded)
	}
}

// Sets without a number say why.
func TestNoNumberSaysWhy(t *testing.T) {
	for name, change := range map[string]func(*Input){
		"two solutions": func(in *Input) { in.Solutions = in.Solutions[:3] },
		"no pH":         func(in *Input) { in.Readings = nil },
		"nothing":       func(in *Input) { in.Solutions, in.Readings = nil, nil },
	} {
		out := compute(t, room("PR"), change)
		if out.Err == nil || out.Report.Verdict != verdict.NoNumber || len(out.Constants) != 0 || !strings.HasPrefix(out.Report.Headline(), "No pKa: ") {
			t.Errorf("%s: %s, %q, %v", name, out.Report.Verdict, out.Report.Headline(), out.Err)
		}
	}
}

// Buffers in each other's places are refused, and the set is held for it.
func TestInterchangedBuffers(t *testing.T) {
	sc := room("PR")
	out := compute(t, sc, func(in *Input) { in.Calibration = calibration(rehearse.SwapBuffers(sc.Calibration(1))) })
	if out.Report.Verdict != verdict.Held || out.Facts.Calibration.Refused == "" {
		t.Errorf("%s, refused %q", out.Report.Verdict, out.Facts.Calibration.Refused)
	}
}

func TestLimitsOfSettings(t *testing.T) {
	in := Input{Compound: &settings.Compound{Name: "PR"}, Limits: []settings.Limit{
		{Check: "slope", Compound: "PR", Hold: []float64{0.2}},
		{Check: "slope", Note: []float64{0.1}, Hold: []float64{0.15}},
		{Check: "rungs.usable", Note: []float64{9}},
		{Check: "calibration.slope", Hold: []float64{90, 105}},
		{Check: "library", Off: true},
		{Check: "temperature", Compound: "CR", Hold: []float64{9}},
	}}
	got := in.limits()
	for key, want := range map[string]verdict.Limit{
		"slope":             {Note: verdict.Within(0.1), Hold: verdict.Within(0.2)}, // the compound's word counts, wherever it stands
		"rungs.usable":      {Note: verdict.AtLeast(9), Hold: verdict.AtLeast(5)},
		"calibration.slope": {Note: verdict.Band{Low: 95, High: 102}, Hold: verdict.Band{Low: 90, High: 105}},
		"temperature":       verdict.Defaults["temperature"],
	} {
		if got[key] != want {
			t.Errorf("%s: %+v, expected %+v", key, got[key], want)
		}
	}
	if !got["library"].Off || verdict.Defaults["library"].Off {
		t.Error("switching a check off does not work, or reaches into the defaults")
	}
}

// The same input gives the same bytes, and computing changes nothing of it.
func TestDeterminism(t *testing.T) {
	for _, key := range []string{"", "name.swap2", "scan.bubble", "chem.complex"} {
		sc := room("PR", rehearse.Fault{Key: key, Rung: 4})
		if key == "" {
			sc = room("PR")
		}
		in := input(t, sc, night(t, sc, 1)[0])
		before := input(t, sc, night(t, sc, 1)[0])
		first := bytesOf(t, Compute(in))
		if !same(in, before) {
			t.Errorf("%q: computing changes its input", key)
		}
		for range 3 {
			if again := bytesOf(t, Compute(in)); again != first {
				t.Fatalf("%q: the same input gives other digits", key)
			}
		}
	}
}

// bytesOf writes an outcome down to the last digit.
func bytesOf(t *testing.T, o *Outcome) string {
	t.Helper()
	rep, err := json.Marshal(o.Report.Actions)
	if err != nil {
		t.Fatal(err)
	}
	return fmt.Sprintf("%s %+v %+v %+v %+v %+v %v %v", rep, o.Report.Checks, o.Constants, o.Figures, *o.Fit, o.LeftOut, o.Prepared.Records, o.Facts.Suspects)
}

// same compares inputs, NaN being equal to NaN.
func same(a, b Input) bool {
	x, y := fmt.Sprintf("%+v", a.Solutions), fmt.Sprintf("%+v", b.Solutions)
	return x == y && fmt.Sprintf("%+v", a.Readings) == fmt.Sprintf("%+v", b.Readings) && reflect.DeepEqual(a.Calibration, b.Calibration)
}
