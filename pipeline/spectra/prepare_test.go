package spectra

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func prepared(t *testing.T, s paperSet, opt Options) *Prepared {
	t.Helper()
	rungs, blanks := s.make()
	p, err := Prepare(rungs, blanks, opt)
	if err != nil {
		t.Fatalf("Prepare: %v", err)
	}
	m, w := len(p.Keys), len(p.WavelengthNM)
	if len(p.A) != m*w || len(p.PH) != m || len(p.NoiseRung) != m || len(p.NoiseWave) != w || len(p.ClearOffset) != m || len(p.ShiftNM) != m {
		t.Fatalf("shapes: m %d w %d A %d rung %d wave %d", m, w, len(p.A), len(p.NoiseRung), len(p.NoiseWave))
	}
	for _, v := range p.A {
		if math.IsNaN(v) {
			t.Fatal("NaN left in the matrix")
		}
	}
	return p
}

func rms(v []float64) float64 { return math.Sqrt(dot(v, v) / float64(len(v))) }

func TestCleanSetNoise(t *testing.T) {
	for seed := range uint64(6) {
		s := newPaperSet()
		s.seed = seed + 10
		s.blank = func(x float64) float64 { return 0.02 + 0.03*math.Exp(-(x-350)/60) }
		p := prepared(t, s, paperOptions())
		if len(p.LeftOut) != 0 {
			t.Errorf("left out %v", p.LeftOut)
		}
		if n := rms(p.NoiseWave); math.Abs(n/0.0006-1) > 0.05 {
			t.Errorf("noise %.6f, true 0.0006", n)
		}
		if math.Abs(p.Lag1) > 0.06 || p.Effective != float64(len(p.WavelengthNM)) {
			t.Errorf("lag %.3f effective %.1f of %d", p.Lag1, p.Effective, len(p.WavelengthNM))
		}
		for i, f := range p.NoiseRung {
			if math.Abs(f-1) > 0.15 {
				t.Errorf("rung factor %d %.3f", i, f)
			}
		}
		for i := range p.BlankSD {
			if math.Abs(p.BlankSD[i]/0.0006-1) > 0.35 {
				t.Errorf("blank sd %v", p.BlankSD)
			}
		}
		for i, d := range p.ShiftNM {
			if math.Abs(d) > 0.05 {
				t.Errorf("shift %d %.3f in an undisturbed set", i, d)
			}
		}
		for _, r := range p.Records {
			if strings.HasPrefix(r.Key, "scan.") {
				t.Errorf("seed %d: finding in an undisturbed set: %+v", seed, r)
			}
		}
	}
}

// Quiet sets of many kinds: no rung is lost, nothing is found that is not
// there, the noise is right within its own scatter.
func TestQuietSets(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := newPaperSet()
		s.seed = rapid.Uint64().Draw(t, "seed")
		s.noise = math.Pow(10, rapid.Float64Range(-4, -2.6).Draw(t, "log noise"))
		s.dye.pKa = rapid.Float64Range(5, 8).Draw(t, "pKa")
		m := rapid.IntRange(5, 20).Draw(t, "rungs")
		s.ph = make([]float64, m)
		for i := range s.ph {
			s.ph[i] = s.dye.pKa - 2 + 4*float64(i)/float64(m-1)
		}
		step := rapid.SampledFrom([]float64{0.5, 1, 2}).Draw(t, "step")
		s.x = grid(350, 750, step)
		if rapid.Bool().Draw(t, "colourless acid") {
			s.dye.acid = [][3]float64{{0.002, 360, 40}}
		}
		rungs, blanks := s.make()
		o := paperOptions()
		o.Align = rapid.Bool().Draw(t, "align")
		p, err := Prepare(rungs, blanks, o)
		if err != nil {
			t.Fatal(err)
		}
		if len(p.LeftOut) > 0 {
			t.Fatalf("left out %v", p.LeftOut)
		}
		for _, r := range p.Records {
			if strings.HasPrefix(r.Key, "scan.") || strings.HasPrefix(r.Key, "mask.") {
				t.Fatalf("found %+v", r)
			}
		}
		// The relative standard deviation of the noise is about 1/sqrt(2 df); the
		// few components taken for real cost up to some 6 % of it.
		df := float64((m - 2) * len(p.WavelengthNM))
		if n := rms(p.NoiseWave) / s.noise; math.Abs(n-1) > 0.02+4/math.Sqrt(2*df) {
			t.Fatalf("noise %.4f of the true one (m %d, step %g)", n, m, step)
		}
		mean := 0.0
		for _, f := range p.NoiseRung {
			mean += f * f / float64(m)
		}
		if math.Abs(mean-1) > 1e-9 {
			t.Fatalf("mean square of rung factors %g", mean)
		}
	})
}

// A noisier scan and a noisier end of the spectrum are seen for what they are.
func TestNoiseModel(t *testing.T) {
	s := newPaperSet()
	s.noise = 0
	s.edit = func(i int, x, y []float64, rng *rand.Rand) {
		scale := 0.0005
		if i == 5 {
			scale *= 3
		}
		for j := range y {
			y[j] += scale * (1 + 2*math.Exp(-(x[j]-380)/50)) * rng.NormFloat64()
		}
	}
	p := prepared(t, s, paperOptions())
	ratio := p.NoiseRung[5] / p.NoiseRung[7]
	if math.Abs(ratio-3) > 0.3 {
		t.Errorf("rung 6 is noisier by %.2f, true 3", ratio)
	}
	end := p.NoiseWave[3] / p.NoiseWave[len(p.NoiseWave)-3]
	if end < 1.9 || end > 3.2 {
		t.Errorf("blue end noisier by %.2f, true about 2.7 in the window", end)
	}
}

func TestDeclaredNoiseIsAFloor(t *testing.T) {
	s := newPaperSet()
	o := paperOptions()
	o.SigmaA = 0.002
	p := prepared(t, s, o)
	for _, n := range p.NoiseWave {
		if n < 0.002 {
			t.Fatalf("noise %g below the declared one", n)
		}
	}
	if _, ok := find(p.Records, "noise.declared"); !ok {
		t.Error("not recorded")
	}
}

// Scans on different grids meet on the coarsest; the interpolated ones are right.
func TestGrids(t *testing.T) {
	s := newPaperSet()
	s.noise = 1e-6
	rungs, blanks := s.make()
	coarse := grid(352, 748, 2)
	rungs[3].Scans[0] = Trace{WavelengthNM: coarse, Absorbance: sample(s, coarse, 3), Decimals: -1, Order: 3}
	odd := grid(350.5, 749.5, 1)
	rungs[4].Scans[0] = Trace{WavelengthNM: odd, Absorbance: sample(s, odd, 4), Decimals: -1, Order: 4}
	p, err := Prepare(rungs, blanks, paperOptions())
	if err != nil {
		t.Fatal(err)
	}
	r, ok := find(p.Records, "grid.coarsest")
	if !ok || r.Value != 2 {
		t.Errorf("record %+v", r)
	}
	w := len(p.WavelengthNM)
	for i := range p.Keys {
		for j, x := range p.WavelengthNM {
			if d := p.A[i*w+j] - s.dye.at(x, s.ph[i]); math.Abs(d) > 6e-5 {
				t.Fatalf("%s at %g nm: off by %g", p.Keys[i], x, d)
			}
		}
	}
}

func sample(s paperSet, x []float64, i int) []float64 {
	y := make([]float64, len(x))
	for j := range x {
		y[j] = s.dye.at(x[j], s.ph[i])
	}
	return y
}

func TestShortScans(t *testing.T) {
	s := newPaperSet()
	rungs, blanks := s.make()
	rungs[2].Scans[0].WavelengthNM = rungs[2].Scans[0].WavelengthNM[:150]
	rungs[2].Scans[0].Absorbance = rungs[2].Scans[0].Absorbance[:150]
	p, err := Prepare(rungs, blanks, paperOptions())
	if err != nil || len(p.LeftOut) != 1 || p.LeftOut[0].Check != "grid.short" {
		t.Errorf("%v %+v", err, p.LeftOut)
	}
	// Two halves: nothing in common.
	for i := range rungs {
		tr := &rungs[i].Scans[0]
		if i%2 == 0 && len(tr.WavelengthNM) > 300 {
			tr.WavelengthNM, tr.Absorbance = tr.WavelengthNM[:260], tr.Absorbance[:260]
		} else if len(tr.WavelengthNM) > 300 {
			tr.WavelengthNM, tr.Absorbance = tr.WavelengthNM[150:], tr.Absorbance[150:]
		}
	}
	p, err = Prepare(rungs, blanks, paperOptions())
	if !errors.Is(err, ErrUnusable) || p == nil || !strings.Contains(err.Error(), "one range") {
		t.Errorf("halves: %v", err)
	}
	if _, err = Prepare(nil, nil, Options{}); !errors.Is(err, ErrUnusable) {
		t.Errorf("nothing: %v", err)
	}
}

func TestClones(t *testing.T) {
	s := newPaperSet()
	rungs, blanks := s.make()
	rungs[5].Scans[0].Absorbance = slices.Clone(rungs[4].Scans[0].Absorbance)
	rungs[7].Scans = append(rungs[7].Scans, rungs[7].Scans[0])
	p, err := Prepare(rungs, blanks, paperOptions())
	if err != nil {
		t.Fatal(err)
	}
	if len(p.LeftOut) != 1 || p.LeftOut[0] != (LeftOut{"r06", "scan.clone", "r06 holds the same numbers as r05."}) {
		t.Errorf("left out %+v", p.LeftOut)
	}
	if r, ok := find(p.Records, "scan.clone"); !ok || r.Rung != "r06" || r.Other != "r05" {
		t.Errorf("clone: %+v", r)
	}
	if r, ok := find(p.Records, "scan.repeated"); !ok || r.Rung != "r08" {
		t.Errorf("repeated scan: %+v", p.Records)
	}
}

func TestReplicates(t *testing.T) {
	s := newPaperSet()
	rungs, blanks := s.make()
	s.seed = 99
	second, _ := s.make()
	for i := range rungs {
		rungs[i].Scans = append(rungs[i].Scans, second[i].Scans[0])
		rungs[i].Scans[1].Order = 20 + i
	}
	for j := range rungs[0].Scans[1].Absorbance {
		rungs[0].Scans[1].Absorbance[j] += 0.022
	}
	p, err := Prepare(rungs, blanks, paperOptions())
	if err != nil {
		t.Fatal(err)
	}
	r, ok := find(p.Records, "scan.settling")
	if !ok || r.Rung != "r01" || math.Abs(r.Value-0.022) > 0.001 || !strings.HasPrefix(r.Text, "Repeat scans of r01 differ by 2") {
		t.Errorf("disagreement: %+v", r)
	}
	averaged := 0
	for _, r := range p.Records {
		if r.Key == "scan.averaged" {
			averaged++
		}
	}
	if averaged != 11 {
		t.Errorf("%d rungs averaged, expected 11", averaged)
	}
	// The one single scan is noisier than the means of two by sqrt 2.
	if f := p.NoiseRung[0] / p.NoiseRung[5]; math.Abs(f-math.Sqrt2) > 0.3 {
		t.Errorf("noise of the single scan %.2f of a mean of two", f)
	}
}

func TestBlanks(t *testing.T) {
	s := newPaperSet()
	s.blank = func(x float64) float64 { return 0.05 * math.Exp(-(x-350)/80) }
	rungs, blanks := s.make()
	short := blanks[0]
	short.WavelengthNM, short.Absorbance = short.WavelengthNM[100:], short.Absorbance[100:]
	sub := blanks[0]
	sub.Name = "blank of the night before"
	o := paperOptions()
	o.Substitute = &sub
	p, err := Prepare(rungs, []Trace{short}, o)
	if err != nil {
		t.Fatal(err)
	}
	if _, ok := find(p.Records, "blank.short"); !ok {
		t.Error("short blank not recorded")
	}
	if r, ok := find(p.Records, "blank.substitute"); !ok || !strings.Contains(r.Text, "night before") || !p.HasBlank {
		t.Errorf("substitute: %+v", p.Records)
	}
	// Several blanks that agree are averaged: less noise is carried into the spectra.
	s.seed = 5
	_, more := s.make()
	p2, err := Prepare(rungs, []Trace{blanks[0], more[0]}, paperOptions())
	if err != nil {
		t.Fatal(err)
	}
	if f := rms(p2.BlankNoise) / rms(p.BlankNoise); math.Abs(f-math.Sqrt(0.5)) > 0.1 {
		t.Errorf("blank noise of two over one: %.2f", f)
	}
	// Without any: works, says so.
	p3, err := Prepare(rungs, nil, paperOptions())
	if err != nil || p3.HasBlank || p3.BlankNoise != nil || !math.IsNaN(p3.BlankSD[0]) {
		t.Errorf("no blank: %v %v", err, p3.HasBlank)
	}
}

func TestNoClearWindow(t *testing.T) {
	p := prepared(t, newPaperSet(), Options{})
	if p.HasClear || !math.IsNaN(p.ClearMean) || rms(p.ClearOffset) != 0 {
		t.Errorf("clear window out of nothing: %+v", p.ClearOffset)
	}
	o := paperOptions()
	o.Clear = [][2]float64{{800, 850}}
	p = prepared(t, newPaperSet(), o)
	if _, ok := find(p.Records, "clear.outside"); !ok || p.HasClear {
		t.Error("window outside the scans not said")
	}
}

func TestPathNormalised(t *testing.T) {
	s := newPaperSet()
	rungs, blanks := s.make()
	for i := range rungs {
		tr := &rungs[i].Scans[0]
		tr.PathMM = 50
		for j := range tr.Absorbance {
			tr.Absorbance[j] *= 5
		}
	}
	blanks[0].PathMM = 50
	o := paperOptions()
	o.Ceiling = 3
	p, err := Prepare(rungs, blanks, o)
	if err != nil {
		t.Fatal(err)
	}
	// What the detector saw decides about the ceiling.
	if p.MaxA < 4 || p.LostInfo < 0.5 {
		t.Errorf("top %g lost %g", p.MaxA, p.LostInfo)
	}
	w := len(p.WavelengthNM)
	for j, x := range p.WavelengthNM {
		if d := p.A[5*w+j] - s.dye.at(x, s.ph[5]); math.Abs(d) > 0.006 {
			t.Fatalf("at %g nm off by %g", x, d)
		}
	}
}

func TestThreeSolutions(t *testing.T) {
	s := newPaperSet()
	s.ph = []float64{2, 6.5, 11}
	p := prepared(t, s, paperOptions())
	if len(p.Keys) != 3 || math.Abs(rms(p.NoiseWave)/0.0006-1) > 0.12 {
		t.Errorf("keys %v noise %g", p.Keys, rms(p.NoiseWave))
	}
	s.ph = []float64{2, 11}
	p = prepared(t, s, paperOptions())
	if math.Abs(rms(p.NoiseWave)/0.0006-1) > 0.15 {
		t.Errorf("two rungs: noise %g", rms(p.NoiseWave))
	}
}

// Prepare leaves its input alone and gives the same bits again.
func TestInputUntouched(t *testing.T) {
	s := newPaperSet()
	s.edit = func(i int, _, y []float64, _ *rand.Rand) {
		if i == 3 {
			y[7] = math.NaN()
		}
	}
	rungs, blanks := s.make()
	before := fmt.Sprint(rungs, blanks)
	first, err := Prepare(rungs, blanks, paperOptions())
	if err != nil {
		t.Fatal(err)
	}
	if fmt.Sprint(rungs, blanks) != before {
		t.Error("input changed")
	}
	for range 5 {
		again, err := Prepare(rungs, blanks, paperOptions())
		if err != nil || fmt.Sprintf("%v", *again) != fmt.Sprintf("%v", *first) {
			t.Fatalf("not the same again: %v", err)
		}
	}
}

// No bytes of any scan make it fall over.
func TestStrangeScans(t *testing.T) {
	values := []float64{0, 1, -1, 0.5, 3, 1e300, math.Inf(1), math.Inf(-1), math.NaN(), 1e-300}
	rapid.Check(t, func(t *rapid.T) {
		var rungs []Rung
		for i := range rapid.IntRange(0, 6).Draw(t, "rungs") {
			n := rapid.IntRange(0, 60).Draw(t, "n")
			tr := Trace{Decimals: -1, Order: i}
			x := rapid.Float64Range(200, 400).Draw(t, "x0")
			for range n {
				x += rapid.SampledFrom([]float64{0.5, 1, 1, 1, 5, 0}).Draw(t, "dx")
				tr.WavelengthNM = append(tr.WavelengthNM, x)
				tr.Absorbance = append(tr.Absorbance, rapid.SampledFrom(values).Draw(t, "a"))
			}
			rungs = append(rungs, Rung{Key: fmt.Sprint(i), PH: rapid.Float64Range(0, 14).Draw(t, "pH"), Scans: []Trace{tr}})
		}
		p, err := Prepare(rungs, nil, Options{Clear: [][2]float64{{230, 260}}, Align: true})
		if p == nil {
			t.Fatal("nothing returned")
		}
		if err == nil {
			for _, v := range p.A {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Fatal("not a number in the matrix")
				}
			}
			for _, v := range p.NoiseWave {
				if !(v > 0) || math.IsInf(v, 0) {
					t.Fatalf("noise %v", v)
				}
			}
		}
	})
}

func BenchmarkPrepare(b *testing.B) {
	s := newPaperSet()
	s.ph = make([]float64, 20)
	for i := range s.ph {
		s.ph[i] = 4.4 + 4*float64(i)/19
	}
	s.x = grid(350, 950, 1)
	rungs, blanks := s.make()
	o := paperOptions()
	o.RangeNM = [2]float64{}
	o.Align = true
	b.ReportAllocs()
	for b.Loop() {
		if _, err := Prepare(rungs, blanks, o); err != nil {
			b.Fatal(err)
		}
	}
}

// A further coloured form that nobody announced is not taken for displaced
// scans, and displaced scans are still found beside it.
func TestUnannouncedForm(t *testing.T) {
	third := [][3]float64{{0.5, 500, 70}}
	s := newPaperSet()
	s.ph = make([]float64, 16)
	for i := range s.ph {
		s.ph[i] = 4 + 0.4*float64(i)
	}
	form := func(x, pH float64) float64 {
		// second step at 8.4: base form to third form
		a := 1 / (1 + math.Pow(10, 8.4-pH))
		b := 1 / (1 + math.Pow(10, s.dye.pKa-pH))
		return (1-b)*gauss(s.dye.acid, x) + b*(1-a)*gauss(s.dye.base, x) + b*a*gauss(third, x)
	}
	for _, moved := range []float64{0, 0.22, 0.45} {
		for seed := range uint64(10) {
			s.seed = seed
			s.edit = func(i int, x, y []float64, rng *rand.Rand) {
				d := 0.0
				if i == 9 {
					d = moved
				}
				for j := range y {
					y[j] = form(x[j]-d, s.ph[i]) + s.noise*rng.NormFloat64()
				}
			}
			o := paperOptions()
			o.Align = true
			p := prepared(t, s, o)
			if _, spike := find(p.Records, "scan.spike"); spike || len(p.LeftOut) > 0 {
				t.Fatalf("seed %d: %+v %+v", seed, p.Records, p.LeftOut)
			}
			for i, d := range p.ShiftNM {
				want := 0.0
				if i == 9 {
					want = moved
				}
				if math.Abs(d-want) > 0.06 {
					t.Fatalf("seed %d: scan %d displaced by %.3f, truth %.2f", seed, i+1, d, want)
				}
			}
			if n := rms(p.NoiseWave) / s.noise; moved < 0.3 && math.Abs(n-1) > 0.12 {
				t.Fatalf("noise %.3f of the true one", n)
			}
		}
	}
}
