package drift

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// leadOf is the first cause of an evaluation.
func leadOf(t testing.TB, ev Evaluation) Candidate {
	t.Helper()
	if len(ev.Explanations) == 0 {
		t.Fatalf("nothing found; score %.1f, threshold %.1f", ev.Score, ev.Threshold)
	}
	c, ok := ev.Explanations[0].Lead()
	if !ok {
		t.Fatal("no known cause")
	}
	return c
}

// A change that no cause makes is said to be none of the known ones, and the characteristics are named.
func TestNoneOfTheKnown(t *testing.T) {
	first, last := Night(20000), Night(20025)
	l := buildLab(2, family(), refNames, 20, first, last)
	m := l.model(t, "none", Rules{})
	none, trials := 0, 20
	for s := range trials {
		h := l.draw(m, rand.New(rand.NewPCG(21, uint64(s))), first, last, 3, nil)
		for i := range h.Observations {
			o := &h.Observations[i]
			if o.Night > last-2 && (o.Cell == "U1/RI-A" || o.Cell == "U1/RI-C") {
				o.Values[0] += 0.03 // pKa up, slope up, bands apart, ratios together: nothing does that
				o.Values[1] += 0.04
				o.Values[3] += 0.5
				o.Values[4] -= 0.3
				o.Values[6] += 0.03
				o.Values[7] += 0.03
			}
		}
		ev, err := m.Evaluate(h)
		if err != nil {
			t.Fatal(err)
		}
		if len(ev.Explanations) == 0 {
			continue
		}
		if e := ev.Explanations[0]; e.Finding == NoneKnown {
			none++
			if len(e.Disagree) == 0 {
				t.Errorf("run %d: nothing is said to disagree", s)
			}
		}
	}
	t.Logf("an impossible pattern was called none of the known causes in %d of %d runs", none, trials)
	if none < 18 {
		t.Errorf("%d of %d", none, trials)
	}
}

// With one reference, offset, lag and ionic strength are one thing; the program must say so.
func TestCannotTell(t *testing.T) {
	first, last := Night(20000), Night(20025)
	l := buildLab(1, family()[2:3], refNames[2:3], 20, first, last)
	m := l.model(t, "one", Rules{})
	named := 0
	for s := range 20 {
		h := l.draw(m, rand.New(rand.NewPCG(22, uint64(s))), first, last, 3,
			[]fault{{cause: ElectrodeOffset, res: Resource{KindElectrode, "E-31"}, theta: []float64{1.5}, from: last - 2, to: last}})
		ev, err := m.Evaluate(h)
		if err != nil {
			t.Fatal(err)
		}
		e := ev.Explanations[0]
		if e.Finding == Named {
			named++
		} else if len(e.Alike) == 0 {
			t.Errorf("run %d: %s, and nothing is said to be alike", s, e.Finding)
		}
	}
	if named > 2 {
		t.Errorf("one reference named a single cause in %d of 20 runs", named)
	}
}

// A logged lamp change makes what a lamp change does likelier, by the stated factor.
func TestEventOdds(t *testing.T) {
	first, last := Night(20000), Night(20030)
	l := buildLab(1, family()[:2], refNames[:2], 20, first, last)
	m := l.model(t, "events", Rules{Threshold: 1})
	h := l.draw(m, rand.New(rand.NewPCG(23, 1)), first, last, 2,
		[]fault{{cause: Gain, res: Resource{KindInstrument, "U1"}, theta: []float64{1}, from: last - 3, to: last}})
	odds := func() float64 {
		ev, err := m.Evaluate(h)
		if err != nil {
			t.Fatal(err)
		}
		var gain, path float64
		for _, c := range ev.Explanations[0].Candidates {
			switch c.Cause {
			case Gain:
				gain = c.Probability
			case Path:
				path = c.Probability
			}
		}
		return gain / path
	}
	before := odds()
	h.Events = append(slices.Clone(h.Events), Event{Night: last - 3, Kind: EventLamp, Resource: "L-1", Instrument: "U1"})
	after := odds()
	t.Logf("odds of gain against path %.2f, with a logged lamp change %.2f", before, after)
	if r := after / before; r < 4 || r > 11 {
		t.Errorf("the event changed the odds by %.1f", r)
	}
}

// The evaluation does not depend on the order of cells, observations or uses, nor on the unit of a
// characteristic where the fingerprint follows it.
func TestOrderDoesNotMatter(t *testing.T) {
	_, m, h := smallLab(t, 10)
	want, _, err := m.Score(h)
	if err != nil {
		t.Fatal(err)
	}
	rapid.Check(t, func(t *rapid.T) {
		g := h
		g.Observations, g.Uses, g.Events = slices.Clone(h.Observations), slices.Clone(h.Uses), slices.Clone(h.Events)
		rng := rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1))
		rng.Shuffle(len(g.Observations), func(i, j int) { g.Observations[i], g.Observations[j] = g.Observations[j], g.Observations[i] })
		rng.Shuffle(len(g.Uses), func(i, j int) { g.Uses[i], g.Uses[j] = g.Uses[j], g.Uses[i] })
		rng.Shuffle(len(g.Events), func(i, j int) { g.Events[i], g.Events[j] = g.Events[j], g.Events[i] })
		got, _, err := m.Score(g)
		if err != nil || math.Abs(got-want) > 1e-9*math.Abs(want) {
			t.Fatalf("%.12g, %.12g before; %v", got, want, err)
		}
	})
}

// Bad input is refused with words, and missing numbers are missing, not zero.
func TestBadInput(t *testing.T) {
	l, m, h := smallLab(t, 10)
	for name, change := range map[string]func(*History){
		"empty":    func(h *History) { h.Last = h.First - 1 },
		"stranger": func(h *History) { h.Observations = append(h.Observations, Observation{Cell: "U9", Night: h.First}) },
		"short row": func(h *History) {
			h.Observations = append(h.Observations, Observation{Cell: "U1/RI-A", Night: h.First, Values: []float64{1}})
		},
	} {
		g := h
		g.Observations = slices.Clone(h.Observations)
		change(&g)
		if _, err := m.Evaluate(g); err == nil {
			t.Errorf("%s was taken", name)
		}
	}
	for name, change := range map[string]func(*Cell){
		"no spread": func(c *Cell) { c.Cov = make([]float64, len(c.Cov)) },
		"no sets":   func(c *Cell) { c.N = 0 },
		"sizes":     func(c *Cell) { c.Centre = c.Centre[1:] },
		"nothing":   func(c *Cell) { c.Characteristics = nil },
	} {
		c := l.cells[0]
		change(&c)
		if _, err := NewModel([]Cell{c}, Rules{}, Plain); err == nil {
			t.Errorf("%s was taken", name)
		}
	}
	if _, err := NewModel([]Cell{l.cells[0], l.cells[0]}, Rules{}, Plain); err == nil {
		t.Error("a cell given twice was taken")
	}
	g := h
	g.Observations = nil
	ev, err := m.Evaluate(g)
	if err != nil || ev.Rings || len(ev.Observed) != 0 {
		t.Errorf("no observation: %+v, %v", ev, err)
	}
	g.Observations = []Observation{{Cell: "U1/RI-A", Night: h.Last, Values: slices.Repeat([]float64{math.NaN()}, 15)}, {Cell: "U1/RI-A", Night: h.Last - 1, Values: slices.Repeat([]float64{math.Inf(1)}, 15)}}
	if ev, err = m.Evaluate(g); err != nil || ev.Rings || len(ev.Observed) != 0 {
		t.Errorf("only gaps: %+v, %v", ev, err)
	}
}

// A mask takes a closed disturbance out: nothing rings for it any more, and other things still do.
func TestMask(t *testing.T) {
	first, last := Night(20000), Night(20030)
	l := buildLab(1, family()[:3], refNames[:3], 20, first, last)
	m := l.model(t, "mask", Rules{})
	u1 := Resource{KindInstrument, "U1"}
	rng := rand.New(rand.NewPCG(24, 1))
	wave := fault{cause: WavelengthShift, res: u1, theta: []float64{1}, from: last - 20, to: last - 15}
	h := l.draw(m, rng, first, last, 2, []fault{wave, {cause: ElectrodeOffset, res: Resource{KindElectrode, "E-31"}, theta: []float64{2}, from: last - 5, to: last}})
	ev, err := m.Evaluate(h)
	if err != nil {
		t.Fatal(err)
	}
	if !slices.ContainsFunc(ev.Explanations, func(e Explanation) bool { c, _ := e.Lead(); return c.Cause == WavelengthShift }) {
		t.Fatal("the wavelength displacement was not found")
	}
	h.Masks = []Mask{{Resource: u1, Cause: WavelengthShift, From: last - 21, Until: last - 14}}
	if ev, err = m.Evaluate(h); err != nil {
		t.Fatal(err)
	}
	for _, e := range ev.Explanations {
		if c, _ := e.Lead(); c.Cause == WavelengthShift {
			t.Errorf("the masked disturbance is still found: %s", e.Sentence)
		}
	}
	if c := leadOf(t, ev); c.Class != "electrode since calibration" && c.Class != "offset, lag or ionic strength" {
		t.Errorf("%s first", c.Cause)
	}
}

// The harmless ageing of the calibration scores higher at night 27 than the real
// drift of the same electrode; the second pass must name the real one.
func TestSecondCause(t *testing.T) {
	l := quillmere()
	m, err := NewModel(l.cells, Rules{Threshold: 8.2}, Plain)
	if err != nil {
		t.Fatal(err)
	}
	runs := 10
	if long() {
		runs = 100
	}
	for _, size := range []float64{1, 4} { // of the specification's ageing, -1 % in both slopes and -4 mV at night 22
		faults := storyFaults()
		faults[2].theta = []float64{0.5 * size, size}
		harmlessFirst, named := 0, 0
		for s := range runs {
			rng := rand.New(rand.NewPCG(25, uint64(s)))
			h := l.draw(m, rng, nightZero+15, nightZero+27, 1, faults)
			h.Observations = l.calibrations(m, rng, h.Observations, faults)
			h.Observations = slices.DeleteFunc(h.Observations, func(o Observation) bool { return o.Night < nightZero+22 || o.Night > nightZero+27 })
			h.First = nightZero + 22
			ev, err := m.Evaluate(h)
			if err != nil {
				t.Fatal(err)
			}
			if c := leadOf(t, ev); c.Cause == ElectrodeAgeing {
				harmlessFirst++
			}
			if slices.ContainsFunc(ev.Explanations, func(e Explanation) bool {
				c, ok := e.Lead()
				return ok && electrodeSize(c.Cause) && c.Resource.Name == "E-31"
			}) {
				named++
			}
		}
		t.Logf("ageing of %.0f %%: that which calibrations remove came first in %d of %d runs; the real drift of the electrode was named in %d", size, harmlessFirst, runs, named)
		if named < (85*runs)/100 {
			t.Errorf("the real drift was named in %d of %d runs", named, runs)
		}
		if size > 1 && harmlessFirst < runs/2 {
			t.Errorf("the large harmless ageing came first in %d of %d runs only, so the second pass was not tried", harmlessFirst, runs)
		}
	}
}

// Renewing keeps fingerprints and gives the same numbers.
func TestRenew(t *testing.T) {
	l, m, h := smallLab(t, 10)
	r, err := m.Renew(l.cells, func(Design, []float64, []float64, []float64) (Reading, error) {
		t.Error("an unchanged design was fitted again")
		return Reading{}, ErrNoFit
	})
	if err != nil {
		t.Fatal(err)
	}
	a, _, err := m.Score(h)
	if err != nil {
		t.Fatal(err)
	}
	if b, _, err := r.Score(h); err != nil || a != b {
		t.Errorf("%v and %v, %v", a, b, err)
	}
	changed := slices.Clone(l.cells)
	d := *changed[0].Design
	d.DPKaDT *= 2
	changed[0].Design = &d
	if _, err := m.Renew(changed, func(Design, []float64, []float64, []float64) (Reading, error) { return Reading{}, ErrNoFit }); err == nil {
		t.Error("a changed design was not fitted")
	}
}

// Readings that differ a little from calibration to calibration, on all
// references together, are not news where the rules know of it; a real drift still is.
func TestCalibrationsDiffer(t *testing.T) {
	first, last := Night(20000), Night(20048)
	l := buildLab(1, family()[:3], refNames[:3], 40, first, last)
	const sd = 0.006
	quiet := map[bool]int{}
	found := 0
	for _, known := range []bool{false, true} {
		r := Rules{Threshold: 8}
		if known {
			r.CalibrationPH = sd
		}
		m, err := NewModel(l.cells, r, Plain)
		if err != nil {
			t.Fatal(err)
		}
		for s := range 12 {
			rng := rand.New(rand.NewPCG(51, uint64(s)))
			var shift float64
			faults := []fault{{cause: ElectrodeOffset, res: Resource{KindElectrode, "E-31"}, theta: []float64{1}, from: first, to: last}}
			by := map[Night]float64{}
			for n := first; n <= last; n++ {
				if int(n)%7 == 0 {
					shift = sd / 0.02 * rng.NormFloat64()
				}
				by[n] = shift
			}
			faults[0].course = func(n Night) float64 { return by[n] }
			h := l.draw(m, rng, first, last, 2, faults)
			ev, err := m.Evaluate(h)
			if err != nil {
				t.Fatal(err)
			}
			if ev.Rings {
				quiet[known]++
			}
			if known {
				h = l.draw(m, rng, first, last, 2, append(faults, fault{cause: ElectrodeSlope, res: Resource{KindElectrode, "E-31"}, theta: []float64{0.35}, from: last - 6, to: last,
					course: func(n Night) float64 { return float64(n - (last - 7)) }}))
				if ev, err = m.Evaluate(h); err != nil {
					t.Fatal(err)
				}
				if ev.Rings {
					found++
				}
			}
		}
	}
	t.Logf("calibrations that differ by %.3f rang in %d of 12 series, with the rule in %d; a real drift on top rang in %d", sd, quiet[false], quiet[true], found)
	if quiet[true] > quiet[false]/2 || found < 10 {
		t.Errorf("rang in %d, with the rule %d; drift found in %d", quiet[false], quiet[true], found)
	}
}
