package spectra

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
)

// A fault is put into a quiet set; what is found is compared with what was done.
type fault struct {
	name   string
	set    func(s *paperSet)
	opt    func(o *Options)
	blanks int    // 1 unless given: -1 none
	out    string // rung and check left out, "r05 scan.bubble"
	record string // key that must be there
	value  func(r Record, p *Prepared) error
	text   string // part of a sentence
}

func between(lo, hi float64) func(Record, *Prepared) error {
	return func(r Record, _ *Prepared) error {
		if !(r.Value >= lo && r.Value <= hi) {
			return fmt.Errorf("value %g, expected %g to %g", r.Value, lo, hi)
		}
		return nil
	}
}

func flat(rung int, rise float64) func(*paperSet) {
	return func(s *paperSet) {
		s.edit = func(i int, _, y []float64, rng *rand.Rand) {
			if i == rung {
				for j := range y {
					y[j] += rise + 4*s.noise*rng.NormFloat64()
				}
			}
		}
	}
}

func faultTable() []fault {
	return []fault{
		{name: "bubble", set: flat(6, 0.084), out: "r07 scan.bubble", text: "r07 left out: baseline 84 mAU, bubble likely."},
		{name: "small offset", set: flat(6, 0.012), record: "clear.offset", value: between(0.011, 0.013)},
		{name: "dirty blank", set: func(s *paperSet) {
			s.edit = func(i int, _, y []float64, _ *rand.Rand) {
				if i < 12 {
					for j := range y {
						y[j] += 0.006
					}
				}
			}
		}, record: "scan.blankdirty", value: between(0.0055, 0.0065), text: "All scans share a 6 mAU offset from the blank."},
		{name: "dirty blank beyond the limit of a rung", set: func(s *paperSet) {
			s.edit = func(_ int, _, y []float64, _ *rand.Rand) {
				for j := range y {
					y[j] += 0.045
				}
			}
		}, record: "scan.blankdirty", value: between(0.044, 0.046)},
		{name: "lamp drift", set: func(s *paperSet) {
			s.edit = func(i int, _, y []float64, _ *rand.Rand) {
				for j := range y {
					y[j] += 0.006 * float64(i) / 11
				}
			}
		}, record: "scan.warmup", value: func(_ Record, p *Prepared) error {
			if math.Abs(p.ClearTrend-0.006) > 0.0005 {
				return fmt.Errorf("trend %g", p.ClearTrend)
			}
			return nil
		}},
		{name: "too concentrated", set: func(s *paperSet) {
			s.dye.base[0][0] = 1.9
		}, record: "mask.ceiling", value: func(r Record, p *Prepared) error {
			if r.Value != p.LostInfo || p.LostInfo < 0.3 || p.LostInfo > 0.95 || len(p.Masked) != 1 || p.MaxA < 1.9 || p.MaxA > 2.1 {
				return fmt.Errorf("lost %g masked %v top %g", p.LostInfo, p.Masked, p.MaxA)
			}
			for _, a := range p.A {
				if a > 1.51 {
					return fmt.Errorf("absorbance %g is left", a)
				}
			}
			return nil
		}, text: "dilute about 1.5×"},
		{name: "blocked", set: func(s *paperSet) {
			s.edit = func(i int, _, y []float64, rng *rand.Rand) {
				if i == 8 {
					for j := range y {
						y[j] = 3.5 + 0.2*rng.NormFloat64()
					}
				}
			}
		}, out: "r09 scan.blocked", text: "r09 left out: it has no light."},
		{name: "open", set: func(s *paperSet) {
			s.edit = func(i int, _, y []float64, rng *rand.Rand) {
				if i == 1 {
					for j := range y {
						y[j] = 0.03 * rng.NormFloat64()
					}
				}
			}
		}, out: "r02 scan.open", text: "r02 has no dye band and a light leak."},
		{name: "blank among the rungs", set: func(s *paperSet) {
			s.edit = func(i int, _, y []float64, rng *rand.Rand) {
				if i == 0 {
					for j := range y {
						y[j] = s.noise * rng.NormFloat64()
					}
				}
			}
		}, blanks: -1, out: "r01 scan.nodye", text: "r01 has no dye band; is it the blank?"},
		{name: "spike", set: func(s *paperSet) {
			s.edit = func(i int, x, y []float64, _ *rand.Rand) {
				if i == 3 {
					y[slices.Index(x, 520)] += 0.1
				}
			}
		}, record: "scan.spike", value: func(_ Record, p *Prepared) error {
			if !slices.Equal(p.Masked, [][2]float64{{520, 520}}) {
				return fmt.Errorf("masked %v", p.Masked)
			}
			return nil
		}},
		{name: "missing values", set: func(s *paperSet) {
			s.edit = func(i int, _, y []float64, _ *rand.Rand) {
				if i == 3 {
					y[100], y[101], y[102] = math.NaN(), math.Inf(1), 9999
				}
			}
		}, record: "mask.gaps", value: between(3, 3)},
		{name: "torn scan", set: func(s *paperSet) {
			s.edit = func(i int, _, y []float64, _ *rand.Rand) {
				if i == 3 {
					for j := 60; j < 200; j++ {
						y[j] = math.NaN()
					}
				}
			}
		}, out: "r04 scan.gaps"},
		{name: "other cell in one rung", set: func(s *paperSet) {
			s.edit = func(i int, _, y []float64, _ *rand.Rand) {
				if i == 4 {
					for j := range y {
						y[j] *= 0.2
					}
				}
			}
		}, out: "r05 scan.path", record: "scan.path", value: between(0.195, 0.205), text: "Absorbance of r05 is 0.20 of normal; other path length?"},
		{name: "other cell in all rungs", set: func(s *paperSet) {
			s.edit = func(_ int, _, y []float64, _ *rand.Rand) {
				for j := range y {
					y[j] *= 0.2
				}
			}
		}, opt: func(o *Options) { o.TopA = 1.05 }, record: "scan.path", value: between(0.18, 0.22), text: "of normal; other path length?"},
		{name: "source change", set: func(s *paperSet) {
			s.blank = func(x float64) float64 { return 0.02 + 0.008*b2f(x < 480.5) }
		}, record: "scan.step", value: func(r Record, p *Prepared) error {
			if math.Abs(r.Value+0.008) > 0.002 || len(p.Masked) != 1 || p.Masked[0][0] > 480 || p.Masked[0][1] < 481 {
				return fmt.Errorf("step %g masked %v", r.Value, p.Masked)
			}
			return nil
		}, text: "at 480 nm in the blank"},
		{name: "displaced, mended", set: displace(map[int]float64{7: 0.2}), opt: func(o *Options) { o.Align = true }, record: "scan.aligned", value: shifts(map[int]float64{7: 0.2})},
		{name: "displaced, not allowed to mend", set: displace(map[int]float64{7: 0.2}), record: "scan.jitter", value: shifts(map[int]float64{7: 0.2})},
		{name: "displaced too far", set: displace(map[int]float64{3: 0.4, 8: 0.4}), opt: func(o *Options) { o.Align = true }, record: "scan.jitter", value: shifts(map[int]float64{3: 0.4, 8: 0.4}), text: "r04 and r09 are displaced by up to 0.4"},
		{name: "precipitate", set: func(s *paperSet) {
			s.x = grid(350, 850, 1)
			s.edit = func(i int, x, y []float64, _ *rand.Rand) {
				if i < 3 {
					for j := range y {
						y[j] += 0.010 * math.Pow(500/x[j], 3)
					}
				}
			}
		}, opt: func(o *Options) { o.Clear = [][2]float64{{720, 850}}; o.Scatter = true }, record: "scan.precip", value: between(0.005, 0.015), text: "up to pH 5.1"},
		{name: "subtracted twice", set: func(s *paperSet) {
			shape := func(x float64) float64 { return 0.12 * math.Exp(-math.Pow((x-712)/12, 2)) }
			s.blank = shape
			s.edit = func(_ int, x, y []float64, _ *rand.Rand) {
				for j := range y {
					y[j] -= shape(x[j])
				}
			}
		}, opt: func(o *Options) { o.RangeNM = [2]float64{380, 735}; o.Clear = [][2]float64{{742, 750}} }, record: "scan.doubleblank"},
		{name: "tail in the clear window", set: func(*paperSet) {}, opt: func(o *Options) { o.Clear = [][2]float64{{660, 750}} }, record: "clear.absorbs"},
		{name: "coarse digits", set: func(s *paperSet) {
			s.edit = func(_ int, _, y []float64, _ *rand.Rand) {
				for j := range y {
					y[j] = math.Round(y[j]*100) / 100
				}
			}
		}, record: "digits.coarse", value: func(r Record, p *Prepared) error {
			if n := rms(p.NoiseWave); math.Abs(r.Value-0.01/math.Sqrt(12)) > 1e-9 || n < 0.0028 || n > 0.0036 {
				return fmt.Errorf("step %g noise %g", r.Value, n)
			}
			return nil
		}},
		{name: "smoothing", set: func(s *paperSet) {
			s.noise = 0
			s.edit = func(_ int, _, y []float64, rng *rand.Rand) {
				raw := make([]float64, len(y)+8)
				for j := range raw {
					raw[j] = 0.0018 * rng.NormFloat64()
				}
				for j := range y {
					for k := range 9 {
						y[j] += raw[j+k] / 9
					}
				}
			}
		}, record: "scan.smoothed", value: func(_ Record, p *Prepared) error {
			w := float64(len(p.WavelengthNM))
			if p.Lag1 < 0.75 || p.Lag1 > 0.95 || math.Abs(p.Effective/(w/9)-1) > 0.35 {
				return fmt.Errorf("lag %g effective %g of %g", p.Lag1, p.Effective, w)
			}
			if n := rms(p.NoiseWave); math.Abs(n/0.0006-1) > 0.1 {
				return fmt.Errorf("noise %g, true 0.0006", n)
			}
			return nil
		}},
	}
}

func b2f(b bool) float64 {
	if b {
		return 1
	}
	return 0
}

func displace(by map[int]float64) func(*paperSet) {
	return func(s *paperSet) {
		s.edit = func(i int, x, y []float64, rng *rand.Rand) {
			if d, ok := by[i]; ok {
				for j := range y {
					y[j] = s.dye.at(x[j]-d, s.ph[i]) + s.noise*rng.NormFloat64()
				}
			}
		}
	}
}

func shifts(want map[int]float64) func(Record, *Prepared) error {
	return func(_ Record, p *Prepared) error {
		for i, d := range p.ShiftNM {
			if math.Abs(d-want[i]) > 0.035 {
				return fmt.Errorf("scan %d displaced by %.3f, expected %.3f", i+1, d, want[i])
			}
		}
		return nil
	}
}

func TestFaults(t *testing.T) {
	for _, f := range faultTable() {
		t.Run(f.name, func(t *testing.T) {
			s, o := newPaperSet(), paperOptions()
			if f.set != nil {
				f.set(&s)
			}
			if f.opt != nil {
				f.opt(&o)
			}
			rungs, blanks := s.make()
			if f.blanks < 0 {
				blanks = nil
			}
			p, err := Prepare(rungs, blanks, o)
			if err != nil {
				t.Fatal(err)
			}
			var out, texts []string
			for _, l := range p.LeftOut {
				out = append(out, l.Key+" "+l.Check)
				texts = append(texts, l.Text)
			}
			for _, r := range p.Records {
				texts = append(texts, r.Text)
			}
			if got := strings.Join(out, ", "); got != f.out {
				t.Errorf("left out %q, expected %q", got, f.out)
			}
			if f.record != "" {
				r, ok := find(p.Records, f.record)
				if !ok {
					t.Fatalf("no record %s in %q", f.record, texts)
				}
				if f.value != nil {
					if err := f.value(r, p); err != nil {
						t.Error(err)
					}
				}
			}
			if all := strings.Join(texts, " | "); !strings.Contains(all, f.text) {
				t.Errorf("%q is not in %q", f.text, all)
			}
		})
	}
}
