package spectra

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"
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

func TestDebug(t *testing.T) {
	s := newPaperSet()
	s.edit = func(i int, x, y []float64, rng *rand.Rand) {
		if i == 4 {
			for j := range y {
				y[j] += 0.084
			}
		}
		if i == 7 {
			for j := range y {
				y[j] = s.dye.at(x[j]-0.2, s.ph[7]) + 0.0006*rng.NormFloat64()
			}
		}
	}
	o := paperOptions()
	o.Align = true
	p := prepared(t, s, o)
	t.Logf("%+v", p.Records)
	t.Logf("%+v", p.LeftOut)
	t.Logf("%+v", p.ShiftNM)
}
