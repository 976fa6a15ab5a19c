package verdict

import (
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/spectra"
)

const tiny = 1e-9

// sound is a set of eleven rungs in which nothing is wrong: 0.4 apart, one
// step at pKa 8, everything well inside its limits.
func sound() Facts {
	const m, w = 11, 4
	f := Facts{
		Set: "U1/2026-09-14/PR-1001.n001", Profile: Ladder, SigmaPH: 0.006, Rungs: m, U: []float64{0.02}, Target: 0.05,
		NeedsCalibration: true, TemperatureC: 25.05, NominalC: 25, LibraryDiff: 0.001,
		Calibration: &Calibration{Electrode: "E-31", AgeHours: 10, SlopesPct: []float64{99.2, 98.8}, Potential7: 3, Residuals: []float64{0.004}, LowestPH: 4.005, HighestPH: 10.012},
		NamePHDiff:  map[string]float64{"03": 0.01},
	}
	r := &fit.Result{Status: fit.Converged, Steps: 1, Iterations: 6, Free: true, Slope: 1.004, SlopeSD: 0.008, NoiseEdge: 0.001,
		Singular: []float64{0.5, 0.2, 0.0009, 0.0008}, Spectra: make([]float64, 2*w), SpectraSD: make([]float64, 2*w)}
	for i := range r.Spectra {
		r.Spectra[i], r.SpectraSD[i] = 0.4, 0.0001
	}
	r.Full.PKa, r.Own.PKa = []float64{8}, []float64{8}
	r.Full.Components = []fit.Component{{Key: "buffer:CB-201", Name: "value of buffer CB-201", C: 0.5, U: 0.003, Bucket: "lab"}, {Key: "own", Name: "pH readings", C: 1, U: 0.002, Bucket: "own"}}
	p := &spectra.Prepared{BestChange: 0.9, MaxA: 0.95, HasBlank: true, BlankNoise: make([]float64, w)}
	for i := range m {
		ph := 6 + 0.4*float64(i)
		f.Keys, f.PH, f.Nominal = append(f.Keys, string([]byte{'0' + byte((i+1)/10), '0' + byte((i+1)%10)})), append(f.PH, ph), append(f.Nominal, ph+0.01)
		f.DelayMin = append(f.DelayMin, 1)
		base := 1 / (1 + math.Pow(10, 8-ph))
		r.Alpha = append(r.Alpha, 1-base, base)
		e := 0.003 * float64(1-2*(i%2))
		r.Own.Eta, r.Own.Kappa = append(r.Own.Eta, e), append(r.Own.Kappa, e/3)
		r.LeaveOneOut = append(r.LeaveOneOut, 0.001)
		p.ClearOffset, p.ShiftNM = append(p.ClearOffset, 0.001), append(p.ShiftNM, 0.02*float64(i%2))
	}
	f.Fit, f.Prepared = r, p
	return f
}

func find(t *testing.T, r Report, key string) Check {
	t.Helper()
	i := slices.IndexFunc(r.Checks, func(c Check) bool { return c.Key == key })
	if i < 0 {
		t.Fatalf("no check %s in the report", key)
	}
	return r.Checks[i]
}

func TestSoundSetStands(t *testing.T) {
	r := Judge(sound(), nil)
	if r.Verdict != Stands || len(r.Actions) != 0 || r.Headline() != "All checks passed." {
		t.Errorf("a sound set is %s: %v, actions %v", r.Verdict, r.Reasons(), r.Actions)
	}
	if len(r.Checks) < 20 {
		t.Errorf("only %d checks were made", len(r.Checks))
	}
	for _, c := range r.Checks {
		if c.Sentence == "" || math.IsNaN(c.Value) {
			t.Errorf("check %s: sentence %q, value %g", c.Key, c.Sentence, c.Value)
		}
	}
}

// A point is a value a check may find, beside the limit by a step up or down,
// and what becomes of it.
type point struct {
	v    float64
	step float64
	o    Outcome
}

// atMost, atLeast and within spell out the points at, below and above limits.
func atMost(note, hold float64) []point {
	return []point{{note, -1, Stands}, {note, 0, Stands}, {note, 1, Noted}, {hold, 0, Noted}, {hold, 1, Held}, {3 * hold, 0, Held}}
}

func atLeast(note, hold float64) []point {
	return []point{{note, 1, Stands}, {note, 0, Stands}, {note, -1, Noted}, {hold, 0, Noted}, {hold, -1, Held}, {hold / 3, 0, Held}}
}

func within(note, hold float64) []point {
	var out []point
	for _, p := range atMost(note, hold) {
		out = append(out, p, point{-p.v, -p.step, p.o})
	}
	return out
}

// exact are points of counts and of values that need no step.
func exact(pairs ...any) []point {
	var out []point
	for i := 0; i < len(pairs); i += 2 {
		out = append(out, point{v: pairs[i].(float64), o: pairs[i+1].(Outcome)})
	}
	return out
}

// latent gives the rungs latent pH errors whose standard deviation on m-3
// degrees of freedom is v.
func latent(f *Facts, v float64) {
	m := float64(len(f.Fit.Own.Eta))
	for i := range f.Fit.Own.Eta {
		f.Fit.Own.Eta[i] = v * math.Sqrt((m-3)/m) * float64(1-2*(i%2))
	}
}

// Each check with a number, at, below and above its limits.
func TestEveryCheckAtItsLimits(t *testing.T) {
	type row struct {
		key    string
		set    func(f *Facts, v float64)
		points []point
		near   bool // the value is computed, so equality with the limit is not to be had
	}
	rows := []row{
		{"rungs.usable", func(f *Facts, v float64) { f.PH = make([]float64, int(v)) }, exact(8.0, Stands, 7.0, Stands, 6.0, Noted, 5.0, Noted, 4.0, Held), false},
		{"forms.reached", func(f *Facts, v float64) {
			for i := range f.PH {
				f.Fit.Alpha[2*i] = math.Min(f.Fit.Alpha[2*i], v)
			}
			f.Fit.Alpha[0] = v
		}, atLeast(0.90, 0.75), false},
		{"ladder.gap", func(f *Facts, v float64) { f.PH = []float64{6.9, 7.25, 7.6, 7.6 + v, 8.45, 8.8, 9.1} }, exact(0.45, Stands, 0.51, Noted, 0.79, Noted), true},
		{"ladder.gap", func(f *Facts, v float64) { f.PH = []float64{5, 5.1, 5.2, 8, 8 + v, 10, 11} }, exact(0.9, Held), true},
		{"rungs.near", func(f *Facts, v float64) {
			f.PH = append([]float64{5, 5.5, 6, 6.5, 10, 10.5}, []float64{7.6, 8.4, 8.6, 7.4}[:int(v)]...)
		}, exact(4.0, Stands, 3.0, Stands, 2.0, Noted, 1.0, Held, 0.0, Held), false},
		{"slope", func(f *Facts, v float64) { f.Fit.Slope = 1 + v }, within(0.025, 0.05), true},
		{"ph.latent", latent, atMost(0.015, 0.03), true},
		{"rung.out", func(f *Facts, v float64) {
			f.Rungs, f.LeftOut = 24, nil
			for range int(v) {
				f.LeftOut = append(f.LeftOut, spectra.LeftOut{Key: "07", Check: "ph.outlier", Text: "its pH reading is off."})
			}
		}, exact(0.0, Stands, 1.0, Noted, 3.0, Noted, 4.0, Held), false},
		{"rung.influence", func(f *Facts, v float64) { f.Fit.LeaveOneOut[4] = -v * f.U[0] }, atMost(0.5, 1), true},
		{"amount.scatter", func(f *Facts, v float64) {
			for i := range f.Fit.Own.Kappa {
				f.Fit.Own.Kappa[i] = 0
			}
			f.Fit.Own.Kappa[5] = v / 100 * math.Sqrt(11) // standard deviation v %, no trend: the middle rung
		}, atMost(1, 5), true},
		{"amount.trend", func(f *Facts, v float64) {
			for i := range f.Fit.Own.Kappa {
				f.Fit.Own.Kappa[i] = v / 100 * float64(i) / 10
			}
		}, within(2, 5), true},
		{"third.component", func(f *Facts, v float64) { f.Fit.Singular[2] = v * f.Fit.NoiseEdge }, atMost(1.15, 2), true},
		{"spectra.negative", func(f *Facts, v float64) {
			f.Fit.SpectraSD = make([]float64, 8)
			f.Fit.Spectra[1] = -v * 0.4
		}, exact(0.0, Stands, 0.001, Noted, 0.0199, Noted, 0.0201, Held), false},
		{"absorbance.ceiling", func(f *Facts, v float64) { f.Prepared.LostInfo = v }, exact(0.0, Stands, tiny, Noted, 0.30, Noted, 0.30+tiny, Held), false},
		{"colour.change", func(f *Facts, v float64) { f.Prepared.BestChange = v }, atLeast(0.10, 0.03), false},
		{"clear.window", func(f *Facts, v float64) { f.Prepared.ClearOffset[6] = -v / 1000 }, atMost(5, 20), true},
		{"wavelength.spread", func(f *Facts, v float64) { f.Prepared.ShiftNM = append(make([]float64, 10), v) }, atMost(0.15, 0.3), false},
		{"temperature", func(f *Facts, v float64) { f.NominalC, f.TemperatureC = 25, 25+v }, within(0.3, 1), true},
		{"calibration.age", func(f *Facts, v float64) { f.Calibration.AgeHours = v }, atMost(24, 72), false},
		{"calibration.slope", func(f *Facts, v float64) { f.Calibration.SlopesPct = []float64{99, v} },
			exact(95.0, Stands, 95-tiny, Noted, 92.0, Noted, 92-tiny, Held, 102.0, Stands, 102+tiny, Noted, 103.0, Noted, 103+tiny, Held), false},
		{"calibration.potential", func(f *Facts, v float64) { f.Calibration.Potential7 = v }, within(30, 45), false},
		{"calibration.residual", func(f *Facts, v float64) { f.Calibration.Residuals = []float64{v} }, within(0.02, 0.04), false},
		{"ph.range", func(f *Facts, v float64) { f.Calibration.HighestPH = slices.Max(f.PH) - v }, atMost(0.5, 1.5), true},
		{"ph.range", func(f *Facts, v float64) { f.Calibration.LowestPH = slices.Min(f.PH) + v }, atMost(0.5, 1.5), true},
		{"ph.delay", func(f *Facts, v float64) { f.DelayMin[9] = v }, atMost(15, 60), false},
		{"library", func(f *Facts, v float64) { f.LibraryDiff = v }, within(0.010, 0.02), false},
		{"uncertainty.target", func(f *Facts, v float64) { f.U[0] = v * f.Target }, atMost(1, 2), true},
		{"ladder.nominal", func(f *Facts, v float64) {
			for i := range int(v) {
				f.Nominal[i] = f.PH[i] + 0.2
			}
		}, exact(0.0, Stands, 2.0, Stands, 3.0, Noted, 5.0, Noted, 6.0, Held), false},
		{"ph.name", func(f *Facts, v float64) { f.NamePHDiff["05"] = -v }, atMost(0.02, 0.05), false},
		{"limit.distance", func(f *Facts, v float64) { f.Profile, f.PH = ThreeSolution, []float64{8 - v, 8.1, 11} }, atLeast(2, 1.5), true},
		{"limit.distance", func(f *Facts, v float64) { f.Profile, f.PH = ThreeSolution, []float64{5, 8.1, 8 + v} }, atLeast(2, 1.5), true},
	}
	for _, r := range rows {
		for _, p := range r.points {
			v := p.v + p.step*tiny
			if r.near { // rounding decides at the limit itself, so stay off it
				if v = p.v + 10*p.step*tiny; p.step == 0 && p.o == Noted || p.step == 0 && p.o == Stands {
					v += 10 * tiny * r.points[0].step * math.Copysign(1, p.v*r.points[0].v)
				}
			}
			f := sound()
			r.set(&f, v)
			rep := Judge(f, nil)
			worst := Stands
			var c Check
			for _, x := range rep.Checks { // a check may be made several times: once per segment
				if x.Key == r.key && (c.Key == "" || severity[x.Outcome] > severity[worst]) {
					c, worst = x, x.Outcome
				}
			}
			if c.Key == "" {
				t.Fatalf("%s at %g: not checked", r.key, p.v)
			}
			if c.Outcome != p.o {
				t.Errorf("%s at %.12g: %s, expected %s (value %.12g, note %v, hold %v)", r.key, v, c.Outcome, p.o, c.Value, c.Note, c.Hold)
			}
			if c.Sentence == "" || !strings.HasSuffix(c.Sentence, ".") {
				t.Errorf("%s at %g: sentence %q", r.key, v, c.Sentence)
			}
			if p.o != Stands && !strings.HasSuffix(c.Action, ".") {
				t.Errorf("%s at %g: action %q", r.key, v, c.Action)
			}
			if severity[rep.Verdict] < severity[p.o] {
				t.Errorf("%s at %g: verdict %s is better than its worst check %s", r.key, v, rep.Verdict, p.o)
			}
			if p.o == Held && len(rep.Actions) == 0 {
				t.Errorf("%s at %g: held, and nothing that would make it stand", r.key, v)
			}
		}
	}
}

// Residuals of standard deviation 0.006 on eight degrees of freedom: the
// upper 1 % point of chi-squared is 20.09, the upper 0.01 % point 31.83 (common
// tables).
func TestImprobableResiduals(t *testing.T) {
	for _, p := range []struct {
		chi2 float64
		o    Outcome
	}{{20.0, Stands}, {20.2, Noted}, {31.7, Noted}, {32.0, Held}} {
		f := sound()
		latent(&f, 0.006*math.Sqrt(p.chi2/8))
		c := find(t, Judge(f, nil), "ph.improbable")
		if c.Outcome != p.o {
			t.Errorf("chi-squared %.2f on 8 degrees of freedom: %s with p = %.3g, expected %s", p.chi2, c.Outcome, c.Value, p.o)
		}
	}
}

// Findings without a number: each with its sentence and what to do.
func TestFindings(t *testing.T) {
	for _, c := range []struct {
		key  string
		set  func(*Facts)
		o    Outcome
		says []string
	}{
		{"fit", func(f *Facts) { f.Fit.Status = fit.HitLimit }, Held, []string{"did not settle"}},
		{"fit", func(f *Facts) { f.Fit.Status = fit.Undetermined }, Held, []string{"do not fix every pKa"}},
		{"label.exchange", func(f *Facts) { f.Suspects = []Suspect{{Kind: "exchange", A: "05", B: "06", Odds: 4000, PKa: 8.01}} }, Held, []string{"05 and 06", "8.010", "4000 to 1"}},
		{"ladder.shift", func(f *Facts) { f.Suspects = []Suspect{{Kind: "shift", B: "+1", Odds: 4e7, PKa: 7.6}} }, Held, []string{"+1 row", "7.600"}},
		{"scan.clone", func(f *Facts) { f.Cloned = [][2]string{{"03", "04"}} }, Held, []string{"04", "03"}},
		{"scan.doubled", func(f *Facts) { f.Doubled = [][2]string{{"03", "04"}} }, Held, []string{"03 and 04", "same solution"}},
		{"scan.foreign", func(f *Facts) { f.Foreign = []string{"07"} }, Held, []string{"07"}},
		{"ph.copy", func(f *Facts) { f.SamePH = [][2]string{{"03", "04"}} }, Noted, []string{"03 and 04"}},
		{"dye.identity", func(f *Facts) { f.BestDye, f.BestCosine = "cresol red", 0.99991 }, Held, []string{"cresol red"}},
		{"lot.unknown", func(f *Facts) { f.UnknownLot = "XX-1" }, Held, []string{"XX-1"}},
		{"blank", func(f *Facts) { f.MissingBlank = true }, Held, []string{"No blank"}},
		{"blank", func(f *Facts) { f.MissingBlank, f.SubstituteBlank = true, true }, Noted, []string{"substitute"}},
		{"calibration", func(f *Facts) { f.Calibration = nil }, Held, []string{"No electrode calibration"}},
		{"calibration", func(f *Facts) { f.Calibration.Refused = "Buffers 4.005 and 6.865 are interchanged." }, Held, []string{"interchanged"}},
		{"second.dye", func(f *Facts) { f.SecondDyeShare, f.SecondDyeLimit, f.SecondDyePKa = 0.015, 0.01, 9.1 }, Noted, []string{"second dye", "9.1"}},
		{"second.dye", func(f *Facts) { f.SecondDyeShare, f.SecondDyeLimit, f.SecondDyePKa = 0.04, 0.03, 9.1 }, Held, []string{"4 %"}},
		{"scan.smoothed", func(f *Facts) {
			f.Prepared.Records = []spectra.Record{{Key: "scan.smoothed", Text: "The scans were smoothed."}}
		}, Noted, []string{"smoothed"}},
		{"digits.coarse", func(f *Facts) {
			f.Prepared.Records = []spectra.Record{{Key: "digits.coarse", Text: "Two decimals only."}}
		}, Noted, []string{"decimals"}},
		{"grid", func(f *Facts) {
			f.Prepared.Records = []spectra.Record{{Key: "grid.coarsest", Text: "Grids of 1 and 2 nm."}}
		}, Noted, []string{"Grids"}},
	} {
		f := sound()
		c.set(&f)
		r := Judge(f, nil)
		got := find(t, r, c.key)
		if got.Outcome != c.o || r.Verdict != c.o {
			t.Errorf("%s: check %s, set %s, expected %s", c.key, got.Outcome, r.Verdict, c.o)
		}
		for _, w := range c.says {
			if !strings.Contains(got.Sentence, w) {
				t.Errorf("%s says %q, without %q", c.key, got.Sentence, w)
			}
		}
		if c.o == Held && (got.Action == "" || len(r.Actions) == 0) {
			t.Errorf("%s holds without an action", c.key)
		}
	}
}

// What cannot be computed is never judged as sound.
func TestNotANumberHolds(t *testing.T) {
	f := sound()
	f.Fit.Slope = math.NaN()
	if c := find(t, Judge(f, nil), "slope"); c.Outcome != Held || c.Value != 0 {
		t.Errorf("a slope that is no number is %s with value %g", c.Outcome, c.Value)
	}
}

func TestNoNumber(t *testing.T) {
	for name, set := range map[string]func(*Facts){
		"nothing fitted": func(f *Facts) { f.Fit = nil },
		"not run":        func(f *Facts) { f.Fit.Status = fit.NotRun },
		"unusable":       func(f *Facts) { f.Fit.Status = fit.Unusable },
	} {
		f := sound()
		set(&f)
		f.FitError, f.MissingBlank = errors.New("2 solutions with scan and pH are usable"), true
		r := Judge(f, nil)
		if r.Verdict != NoNumber || !strings.Contains(r.Headline(), "2 solutions with scan and pH are usable.") || len(r.Actions) == 0 {
			t.Errorf("%s: %s, %q, actions %v", name, r.Verdict, r.Headline(), r.Actions)
		}
		if find(t, r, "blank").Outcome != Held {
			t.Errorf("%s: the missing blank is not said", name)
		}
	}
}

// Two steps ask for four more rungs and say so.
func TestTwoStepsAskForMoreRungs(t *testing.T) {
	f := sound()
	f.Fit.Steps, f.Fit.Full.PKa, f.Fit.Slope = 2, []float64{7, 9}, math.NaN()
	f.Fit.Alpha = nil
	for n, want := range map[int]Outcome{11: Stands, 10: Noted, 8: Noted, 7: Held} {
		g := f
		g.PH = make([]float64, n)
		for i := range g.PH {
			g.PH[i] = 6 + 4*float64(i)/float64(n-1)
		}
		if c := find(t, Judge(g, nil), "rungs.usable"); c.Outcome != want {
			t.Errorf("%d rungs for two steps: %s (%s), expected %s", n, c.Outcome, c.Sentence, want)
		}
	}
}

// The worst outcome wins, the worst check stands first, and a check that names
// a cause stands before those that show its symptoms.
func TestWorstWinsAndComesFirst(t *testing.T) {
	f := sound()
	f.Fit.Slope = 1.03                                                             // noted
	f.Calibration.AgeHours = 100                                                   // held
	f.SamePH = [][2]string{{"03", "04"}}                                           // noted
	f.Suspects = []Suspect{{Kind: "exchange", A: "05", B: "06", Odds: 50, PKa: 8}} // held
	latent(&f, 0.2)                                                                // held, a symptom of the exchange
	r := Judge(f, nil)
	if r.Verdict != Held || r.Checks[0].Key != "label.exchange" {
		t.Errorf("verdict %s, first check %s", r.Verdict, r.Checks[0].Key)
	}
	for i := 1; i < len(r.Checks); i++ {
		if severity[r.Checks[i].Outcome] > severity[r.Checks[i-1].Outcome] {
			t.Errorf("%s (%s) stands after %s (%s)", r.Checks[i].Key, r.Checks[i].Outcome, r.Checks[i-1].Key, r.Checks[i-1].Outcome)
		}
	}
	// The shortest list: what mends the exchange mends the residuals too; the old calibration is a thing of its own.
	if len(r.Actions) != 2 || !strings.Contains(r.Actions[0], "labels of 05 and 06") || !strings.Contains(r.Actions[1], "Calibrate electrode") {
		t.Errorf("actions %q", r.Actions)
	}
}

// Every held set has at least one action, whichever checks hold together.
func TestHeldAlwaysHasAnAction(t *testing.T) {
	sets := []func(*Facts){
		func(f *Facts) { latent(f, 0.2) },
		func(f *Facts) { f.LeftOut, f.Rungs = make([]spectra.LeftOut, 2), 11 },
		func(f *Facts) { f.Fit.LeaveOneOut[3] = 1 },
		func(f *Facts) { f.U[0] = 0.5 },
		func(f *Facts) { f.Fit.Slope = 1.2 },
		func(f *Facts) { f.Fit.Singular[2] = 0.1 },
		func(f *Facts) { f.Suspects = []Suspect{{Kind: "exchange", A: "05", B: "06", Odds: 50, PKa: 8}} },
		func(f *Facts) { f.Suspects = append(f.Suspects, Suspect{Kind: "shift", B: "-1", Odds: 50, PKa: 8}) },
		func(f *Facts) { f.Calibration.Refused = "Refused." },
	}
	for mask := 1; mask < 1<<len(sets); mask++ {
		f := sound()
		for i, set := range sets {
			if mask>>i&1 == 1 {
				set(&f)
			}
		}
		r := Judge(f, nil)
		if r.Verdict == Held && len(r.Actions) == 0 {
			t.Fatalf("combination %b is held by %v without an action", mask, r.Reasons())
		}
		seen := map[string]bool{}
		for _, a := range r.Actions {
			if seen[a] {
				t.Fatalf("combination %b says %q twice", mask, a)
			}
			seen[a] = true
		}
	}
}

func TestLimitsOverride(t *testing.T) {
	f := sound()
	f.Fit.Slope = 1.04
	if o := find(t, Judge(f, nil), "slope").Outcome; o != Noted {
		t.Fatalf("slope 1.04 is %s by default", o)
	}
	if o := find(t, Judge(f, Limits{"slope": {Note: Within(0.01), Hold: Within(0.02)}}), "slope").Outcome; o != Held {
		t.Errorf("slope 1.04 is %s under a limit of 0.02", o)
	}
	if o := find(t, Judge(f, Limits{"slope": {Note: Within(0.1), Hold: Within(0.2)}}), "slope").Outcome; o != Stands {
		t.Errorf("slope 1.04 is %s under a limit of 0.1", o)
	}
	off := Judge(f, Limits{"slope": {Off: true}, "blank": {Off: true}})
	if c := find(t, off, "slope"); c.Outcome != Stands || !strings.Contains(c.Sentence, "switched off") || off.Verdict != Stands {
		t.Errorf("a check that is switched off: %+v, the set is %s", c, off.Verdict)
	}
	f.MissingBlank = true
	if r := Judge(f, Limits{"blank": {Off: true}, "slope": {Off: true}}); r.Verdict != Stands {
		t.Errorf("a finding that is switched off holds: %v", r.Reasons())
	}
	// Other keys keep their defaults.
	f.Calibration.AgeHours = 100
	if o := find(t, Judge(f, Limits{"slope": {Off: true}}), "calibration.age").Outcome; o != Held {
		t.Errorf("an override of one check changes another: %s", o)
	}
}

// Every default limit belongs to a check that some set is judged by; its note
// band lies inside its hold band.
func TestDefaultsAreUsed(t *testing.T) {
	made := map[string]bool{}
	f := sound()
	f.LeftOut = []spectra.LeftOut{{Key: "05", Text: "off."}}
	for _, c := range Judge(f, nil).Checks {
		made[c.Key] = true
	}
	g := sound()
	g.Profile = ThreeSolution
	g.Fit.Spectra[0] = -0.1
	for _, c := range Judge(g, nil).Checks {
		made[c.Key] = true
	}
	for key, l := range Defaults {
		if !made[key] {
			t.Errorf("limit %s belongs to no check", key)
		}
		if l.Note.Low < l.Hold.Low || l.Note.High > l.Hold.High {
			t.Errorf("%s: notes outside %v, holds outside %v", key, l.Note, l.Hold)
		}
	}
}

func TestWorse(t *testing.T) {
	all := []Outcome{Stands, Noted, Held, NoNumber}
	for i, a := range all {
		for j, b := range all {
			if got, want := Worse(a, b), all[max(i, j)]; got != want {
				t.Errorf("Worse(%s, %s) = %s", a, b, got)
			}
		}
	}
}
