package rehearse

import (
	"math"
	"slices"
	"testing"
	"time"

	"pgregory.net/rapid"

	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
)

func TestEveryCauseActs(t *testing.T) {
	d := Dyes()["RI-C"]
	for _, k := range CauseKinds() {
		size := 2.0
		if k.Unit == "pH" {
			size = 0.03
		}
		onset := 2
		switch k.Kind {
		case BufferLow, BufferMid, BufferHigh, ElectrodeAgeing:
			onset = 1 // these act through a calibration
		}
		sc := &Scenario{Seed: 1, Design: Design{Dyes: []Dye{d}}, Noise: Quiet(), Causes: []Cause{{Kind: k.Kind, Size: size, Onset: onset}}}
		quiet := &Scenario{Seed: 1, Design: Design{Dyes: []Dye{d}}, Noise: Quiet()}
		a, err := sc.Night(2)
		if err != nil {
			t.Errorf("%s: %v", k.Kind, err)
			continue
		}
		b, err := quiet.Night(2)
		if err != nil {
			t.Fatal(err)
		}
		same := slices.Equal(flat(a[0]), flat(b[0]))
		if same && calibrationDiffers(sc, quiet) {
			same = false
		}
		if same {
			t.Errorf("%s %g %s changes nothing", k.Kind, size, k.Unit)
		}
		if before, err := sc.Night(1); err != nil || onset == 2 {
			if first, _ := quiet.Night(1); err != nil || !slices.Equal(flat(before[0]), flat(first[0])) {
				t.Errorf("%s acts before its onset", k.Kind)
			}
		}
	}
	bad := &Scenario{Seed: 1, Design: Design{Dyes: []Dye{d}}, Causes: []Cause{{Kind: "moon.phase", Size: 1}}}
	if _, err := bad.Night(1); err == nil {
		t.Error("an unknown cause is accepted")
	}
}

// flat is everything measured in a set.
func flat(s *Set) []float64 {
	out := slices.Clone(s.Blank.Absorbance)
	for _, r := range s.Rungs {
		out = append(append(out, r.Scan.Absorbance...), r.Reading.PH, r.Reading.TemperatureC, r.Scan.TemperatureC)
	}
	return out
}

func calibrationDiffers(a, b *Scenario) bool {
	return !slices.Equal(a.Calibration(2).Points, b.Calibration(2).Points)
}

func TestEveryFaultChangesTheSet(t *testing.T) {
	for _, key := range FaultKeys() {
		d := Dyes()["PR"]
		d.Ladder = EvenLadder(d.PKa, -2, 3.8, 12) // far enough up for what happens above pH 11 only
		sc := Scenario{Seed: 5, Design: Design{Dyes: []Dye{d}}, Noise: Quiet(), Causes: []Cause{{Kind: RoomTemperature, Size: 0.6}}}
		clean, err := sc.Night(1)
		if err != nil {
			t.Fatal(err)
		}
		before := flat(clean[0])
		sc.Faults = map[int][]Fault{1: {{Key: key, Rung: 5}}}
		struck, err := sc.Night(1)
		if err != nil {
			t.Errorf("%s: %v", key, err)
			continue
		}
		s := struck[0]
		marks := s.NoBlank || slices.ContainsFunc(s.Rungs, func(r Rung) bool { return r.NoRow || r.NoScan }) || s.Blank.Decimals != 5
		if slices.Equal(before, flat(s)) && !marks {
			t.Errorf("%s changes nothing", key)
		}
		if !slices.Equal(before, flat(clean[0])) {
			t.Errorf("%s reaches into a set made earlier", key)
		}
	}
	sc := Scenario{Seed: 5, Design: Design{Dyes: []Dye{Dyes()["PR"]}}, Faults: map[int][]Fault{1: {{Key: "name.swap2", Rung: 11}}}}
	if _, err := sc.Night(1); err == nil {
		t.Error("exchange with a rung that does not exist is accepted")
	}
}

func TestEveryFileFaultChangesTheFiles(t *testing.T) {
	sc := Scenario{Seed: 5, Design: Design{Dyes: []Dye{Dyes()["PR"]}}, Noise: Quiet()}
	sets, err := sc.Night(1)
	if err != nil {
		t.Fatal(err)
	}
	before := Files(sets[0], Style{})
	for _, key := range FileFaultKeys() {
		after, err := SpoilFiles(before, Fault{Key: key, Rung: 3}, dice(1, key))
		if err != nil {
			t.Errorf("%s: %v", key, err)
			continue
		}
		same := len(after) == len(before)
		for i := range before {
			same = same && after[i].Path == before[i].Path && string(after[i].Bytes) == string(before[i].Bytes) && after[i].At.Equal(before[i].At)
		}
		if same {
			t.Errorf("%s changes nothing", key)
		}
		if fresh := Files(sets[0], Style{}); string(fresh[4].Bytes) != string(before[4].Bytes) || fresh[4].Path != before[4].Path {
			t.Errorf("%s changes the files it was given", key)
		}
	}
}

// A shifted table is a perfect fit with pKa wrong by one step: 0.3636 on the
// even ladder of the requirements' conclusion 4.
func TestShiftedTableFitsPerfectly(t *testing.T) {
	d := Dyes()["PR"]
	s := quietRoom(t, d)
	if err := Spoil(s, Fault{Key: "name.shift1"}, dice(1)); err != nil {
		t.Fatal(err)
	}
	p, n := plainFit(s, d.PKa[0]+0.36, 0)
	if math.Abs(p-d.PKa[0]-0.3636) > 0.002 || math.Abs(n-1) > 0.003 {
		t.Errorf("pKa moved by %.4f with slope %.4f, expected one step of 0.3636 and 1", p-d.PKa[0], n)
	}
}

// Conclusion 10: with an intermediate half way between the end spectra, two
// steps 0.602 apart are one step at pK1 - log10(1/2).
func TestDegenerateTwoSteps(t *testing.T) {
	d := Between(Violet("V2", []float64{6, 6 + math.Log10(4)}, -1), 0.5)
	s := quietRoom(t, d)
	p, n := plainFit(s, 6.3, 0)
	if math.Abs(p-(6+math.Log10(2))) > 5e-4 || math.Abs(n-1) > 1e-3 {
		t.Errorf("pKa %.4f slope %.4f, expected %.4f and 1", p, n, 6+math.Log10(2))
	}
}

func TestCosolventLawIsALine(t *testing.T) {
	sc := &Scenario{Seed: 2, Noise: Silent()}
	law := CosolventLaw{WaterPKa: 8.3, Slope: 95}
	d := Dyes()["RI-C"]
	fractions := []float64{0.2, 0.3, 0.4, 0.5, 0.6}
	sets, err := sc.CosolventSeries(1, d, law, fractions, nil)
	if err != nil {
		t.Fatal(err)
	}
	var sx, sy, sxx, sxy float64
	n := float64(len(sets))
	for i, s := range sets {
		p := plainPKa(s, s.PKa[0])
		x, y := 1/Permittivity(fractions[i]), p+math.Log10(waterMolar(fractions[i]))
		sx, sy, sxx, sxy = sx+x, sy+y, sxx+x*x, sxy+x*y
	}
	slope := (n*sxy - sx*sy) / (n*sxx - sx*sx)
	water := (sy-slope*sx)/n + slope/Permittivity(0) - math.Log10(waterMolar(0))
	if math.Abs(slope-95) > 0.3 || math.Abs(water-8.3) > 0.002 {
		t.Errorf("slope %.3f and pKa in water %.4f, expected 95 and 8.3", slope, water)
	}
	if _, err := sc.CosolventSeries(1, d, law, []float64{0.99}, []float64{0.02}); err == nil {
		t.Error("more cosolvent than solvent is accepted")
	}
}

func TestTemperatureSeriesFollowsTheCoefficient(t *testing.T) {
	d := Dyes()["RI-C"]
	sc := &Scenario{Seed: 2, Noise: Silent(), Design: Design{Dyes: []Dye{d}}}
	sets, err := sc.TemperatureSeries(1, d, []float64{15, 25, 37})
	if err != nil {
		t.Fatal(err)
	}
	for i, c := range []float64{15, 25, 37} {
		want := 8.26 - 0.014*(c-25)
		if got := plainPKa(sets[i], want); math.Abs(got-want) > 0.001 || math.Abs(sets[i].PKa[0]-want) > 1e-9 {
			t.Errorf("%g C: pKa %.4f, stated %.4f, expected %.4f", c, got, sets[i].PKa[0], want)
		}
	}
}

// One night of a scenario does not depend on others having been made.
func TestNightsAreIndependent(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		night := rapid.IntRange(1, 40).Draw(t, "night")
		sc := func() *Scenario {
			return &Scenario{Seed: 9, Design: Design{Dyes: []Dye{Dyes()["BCP"]}, CalibrateEvery: 7}, Noise: Quiet(),
				Causes: []Cause{{Kind: ElectrodeSlope, Onset: 5, Size: -0.15, Shape: Sawtooth}}}
		}
		alone, err := sc().Night(night)
		if err != nil {
			t.Fatal(err)
		}
		other := sc()
		for _, n := range []int{night + 1, 1, night} {
			after, err := other.Night(n)
			if err != nil {
				t.Fatal(err)
			}
			if n == night && !slices.Equal(flat(alone[0]), flat(after[0])) {
				t.Fatalf("night %d differs when others come first", night)
			}
		}
	})
}

func TestSharesAreFractions(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 4).Draw(t, "steps")
		pH := rapid.Float64Range(-2, 16).Draw(t, "pH")
		k := make([]float64, n)
		sum := 0.0
		pka := make([]float64, n)
		for j := range k {
			pka[j] = rapid.Float64Range(-2, 16).Draw(t, "pKa")
			k[j] = math.Pow(10, -pka[j])
		}
		f := make([]float64, n+1)
		shares(f, math.Pow(10, -pH), k)
		for _, x := range f {
			if !(x >= 0 && x <= 1) {
				t.Fatalf("share %g", x)
			}
			sum += x
		}
		if math.Abs(sum-1) > 1e-12 {
			t.Fatalf("shares sum to %g", sum)
		}
		// Each step obeys its own mass action law.
		for j := range k {
			if f[j] < 1e-200 || f[j+1] < 1e-200 {
				continue
			}
			if got := math.Log10(f[j+1]/f[j]) - pH + pka[j]; math.Abs(got) > 1e-9 {
				t.Fatalf("step %d is off by %g", j, got)
			}
		}
	})
}

// A calibration in true buffers reads every pH right, whatever the electrode,
// and a slope or offset since then gives exactly the error the equation says.
func TestCalibrationReadsBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		e := Electrode{Name: "E", E7MV: rapid.Float64Range(-30, 30).Draw(t, "E7"),
			SlopeAcid: rapid.Float64Range(0.96, 1.02).Draw(t, "acid"), SlopeBase: rapid.Float64Range(0.96, 1.02).Draw(t, "base")}
		bottles := []Buffer{{"a", 1.679, 1.679}, {"b", 4.005, 4.005}, {"c", 6.865, 6.865}, {"d", 10.012, 10.012}}
		c := Calibrate(e, bottles, 25, func() float64 { return 0 })
		pH := rapid.Float64Range(1, 12).Draw(t, "pH")
		if got := c.Read(e.Potential(pH, 25), 25); math.Abs(got-pH) > 3e-4 {
			t.Fatalf("reads %.5f at pH %.5f", got, pH)
		}
		// The meter turns millivolts into pH with its own slope, 4 % off Nernst at most here.
		offset, eps := rapid.Float64Range(-0.1, 0.1).Draw(t, "offset"), rapid.Float64Range(-0.03, 0.03).Draw(t, "eps")
		got := c.Read(e.drifted(offset, eps).Potential(pH, 25), 25) - pH
		if want := offset + eps*(pH-7); math.Abs(got-want) > 0.08*(math.Abs(offset)+math.Abs(eps)*6)+5e-4 {
			t.Fatalf("pH %.3f: reads %+.5f off, expected %+.5f", pH, got, want)
		}
		sum := 0.0
		for _, w := range c.Weights(pH) {
			sum += w
		}
		if math.Abs(sum-1) > 1e-12 {
			t.Fatalf("weights sum to %g", sum)
		}
	})
}

// Repeatability of the quiet room, plain least squares without amount factors:
// the requirements simulate 0.0066 in pKa and 0.8 % in slope.
func TestQuietRoomRepeatability(t *testing.T) {
	d := Dyes()["RI-C"]
	sc := &Scenario{Seed: 11, Design: Design{Dyes: []Dye{d}, Repeats: 150}, Noise: Quiet()}
	sets, err := sc.Night(1)
	if err != nil {
		t.Fatal(err)
	}
	var sp, spp, sn, snn float64
	for _, s := range sets {
		p, n := plainFit(s, d.PKa[0], 0)
		sp, spp, sn, snn = sp+p-d.PKa[0], spp+(p-d.PKa[0])*(p-d.PKa[0]), sn+n-1, snn+(n-1)*(n-1)
	}
	k := float64(len(sets))
	sdP, sdN := math.Sqrt(spp/k-sp*sp/k/k), math.Sqrt(snn/k-sn*sn/k/k)
	t.Logf("sd of pKa %.4f, of slope %.2f %%", sdP, 100*sdN)
	if sdP < 0.0052 || sdP > 0.0082 {
		t.Errorf("sd of pKa %.4f, expected near 0.0066", sdP)
	}
	if sdN < 0.006 || sdN > 0.011 {
		t.Errorf("sd of slope %.2f %%, expected near 0.8", 100*sdN)
	}
}

func TestScenarioExportsAndTruth(t *testing.T) {
	sc := &Scenario{Seed: 4, Design: Design{Dyes: []Dye{Dyes()["CR"], Dyes()["RI-D"]}}, Noise: Quiet(),
		FileFaults: map[int][]Fault{1: {{Key: "file.cut", Rung: 2}, {Key: "name.typo", Rung: 4}}},
		Causes:     []Cause{{Kind: ScaleShift, Resource: "U1", Onset: 1, Size: 0.5}}}
	deposits, err := sc.Export(1, Style{Zone: time.UTC})
	if err != nil {
		t.Fatal(err)
	}
	paths := map[string]bool{}
	for _, d := range deposits {
		paths[d.Folder+"/"+d.Path] = true
	}
	if len(paths) != 2*14+1 {
		t.Errorf("%d files, expected two sets of 14 and a calibration", len(paths))
	}
	truth, err := sc.TruthOf(1, Style{Zone: time.UTC})
	if err != nil {
		t.Fatal(err)
	}
	seen := map[string]int{}
	for _, tr := range truth {
		seen[tr.Key]++
		if tr.Kind == KindFile && !paths[tr.File] {
			t.Errorf("%s names %s, which was not written", tr.Key, tr.File)
		}
	}
	for key, want := range map[string]int{"set.pka": 2, "file.cut": 1, "name.typo": 1, "wavelength.shift": 1} {
		if seen[key] != want {
			t.Errorf("truth has %d of %s, expected %d", seen[key], key, want)
		}
	}
}

// The settings of a scenario are valid and sort its files.
func TestScenarioSettings(t *testing.T) {
	sc := &Scenario{Seed: 4, Design: Design{Dyes: []Dye{Dyes()["RI-C"], Violet("V2", []float64{4, 8}, 0), ThreeSolutions(Dyes()["PR"], 7.6, 8.0)}}, Noise: Quiet()}
	set, err := settings.Read(sc.Settings("/data/room"), "room.toml")
	if err != nil {
		t.Fatal(err)
	}
	rules, err := naming.Compile(set.Rules)
	if err != nil {
		t.Fatal(err)
	}
	sets, err := sc.Night(1)
	if err != nil {
		t.Fatal(err)
	}
	names := map[string]bool{}
	for _, s := range sets {
		names[s.Name] = true
	}
	for _, st := range []Style{{}, {JCAMP: true}} {
		deposits, err := sc.Export(1, st)
		if err != nil {
			t.Fatal(err)
		}
		for _, d := range deposits {
			m, err := rules.Match(d.Folder, d.Path)
			if err != nil {
				t.Errorf("%v", err)
			} else if m.Role != naming.RoleCalibration && !names[m.Set] {
				t.Errorf("%s belongs to %q", d.Path, m.Set)
			}
		}
	}
	if p := set.Compounds[2].Profile; p != "three-solution" || set.Compounds[1].Steps != 2 {
		t.Errorf("profile %q, steps %d", p, set.Compounds[1].Steps)
	}
}

// Interchanged buffers imply an impossible slope; exchanged tables move both
// sets by the distance of their ladders, in opposite directions.
func TestExchangedThings(t *testing.T) {
	sc := &Scenario{Seed: 3, Design: Design{Dyes: []Dye{Dyes()["PR"], Dyes()["CR"]}}, Noise: Silent()}
	if c := SwapBuffers(sc.Calibration(1)); c.SegmentSlope(0) > 0 && c.SegmentSlope(1) > 0 {
		t.Errorf("slopes %.2f and %.2f after an interchange", c.SegmentSlope(0), c.SegmentSlope(1))
	}
	sets, err := sc.Night(1)
	if err != nil {
		t.Fatal(err)
	}
	ExchangeTables(sets[0], sets[1])
	a, b := plainPKa(sets[0], 8.2)-7.8, plainPKa(sets[1], 7.8)-8.2
	if math.Abs(a-0.4) > 0.005 || math.Abs(b+0.4) > 0.005 {
		t.Errorf("pKa moved by %+.3f and %+.3f, expected +0.4 and -0.4", a, b)
	}
}
