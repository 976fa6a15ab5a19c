package drift

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"testing"
)

const nightZero = Night(20000)

// quillmere is the sixty-night laboratory of the specification's section 9:
// two instruments, an electrode that ages, a lamp, a bad buffer lot.
func quillmere() *lab {
	f := family()
	l := &lab{designs: f[:3], names: refNames[:3], baseline: 14, calibrate: 1000, setsOf: map[string]int{"U1/RI-A": 2, "U1/RI-C": 2, "U2/RI-C": 2}}
	at := func(n int) Night { return nightZero + Night(n) }
	add := func(kind Kind, name, role, cell string, from, to int) {
		l.uses = append(l.uses, Use{Resource{kind, name}, role, cell, at(from), at(to)})
	}
	for u, refs := range [][]int{{0, 1, 2}, {0, 2}} {
		ins := fmt.Sprintf("U%d", u+1)
		for _, r := range refs {
			c := newCell(ins+"/"+refNames[r], ReferenceCell, refCharacteristics(), 14)
			c.Instrument, c.Reference, c.Title, c.Design = ins, refNames[r], refNames[r]+" on "+ins, &f[r]
			c.Centre[0] = f[r].PKa
			l.cells = append(l.cells, c)
			add(KindStock, "stock "+refNames[r], "", c.Key, -100, 100)
		}
		name := []string{"E-31", "E-34"}[u]
		e := newCell(name, ElectrodeCell, []Characteristic{SlopeAcid, SlopeBase, PotentialMid, ThirdBuffer}, 5)
		e.Instrument, e.Title, e.Design = ins, "electrode "+name, &Design{Buffers: f[0].Buffers}
		l.cells = append(l.cells, e)
	}
	for _, c := range l.cells {
		u := 1
		if c.Instrument == "U2" {
			u = 2
		}
		add(KindMeter, fmt.Sprintf("M-%d", u), "", c.Key, -100, 100)
		add(KindRoom, "lab", "", c.Key, -100, 100)
		add(KindBuffer, "CB-200", "low", c.Key, -100, 100)
		add(KindBuffer, "CB-201", "mid", c.Key, -100, 100)
		add(KindBuffer, "CB-202", "high", c.Key, -100, 40)
		add(KindBuffer, "CB-207", "high", c.Key, 41, 45)
		add(KindBuffer, "CB-208", "high", c.Key, 46, 100)
		switch {
		case u == 2:
			add(KindElectrode, "E-34", "", c.Key, -100, 100)
		case c.Kind == ElectrodeCell:
			add(KindElectrode, "E-31", "", c.Key, -100, 27)
		default:
			add(KindElectrode, "E-31", "", c.Key, -100, 27)
			add(KindElectrode, "E-35", "", c.Key, 28, 100)
		}
		if u == 1 {
			add(KindLamp, "lamp 1", "", c.Key, -100, 33)
			add(KindLamp, "lamp 2", "", c.Key, 34, 100)
		} else {
			add(KindLamp, "lamp 9", "", c.Key, -100, 100)
		}
	}
	for _, n := range calibrationNights() {
		el := "E-31"
		if n >= 28 {
			el = "E-35"
		}
		l.events = append(l.events, Event{Night: at(n), Kind: EventCalibration, Resource: el, Instrument: "U1"},
			Event{Night: at(n), Kind: EventCalibration, Resource: "E-34", Instrument: "U2"})
	}
	l.events = append(l.events,
		Event{Night: at(28), Kind: EventElectrode, Resource: "E-35", Instrument: "U1", Text: "electrode E-31 replaced by E-35"},
		Event{Night: at(34), Kind: EventLamp, Resource: "lamp 2", Instrument: "U1", Text: "lamp changed"},
		Event{Night: at(37), Kind: EventWavelength, Instrument: "U1", Text: "wavelength scale adjusted"},
		Event{Night: at(41), Kind: EventBuffer, Resource: "CB-207", Text: "new lot CB-207"},
		Event{Night: at(46), Kind: EventBuffer, Resource: "CB-208", Text: "new lot CB-208"})
	return l
}

func calibrationNights() []int { return []int{1, 8, 15, 22, 28, 29, 36, 41, 43, 46, 50, 57} }

// storyFaults are the numbers for the simulator of section 9.
func storyFaults() []fault {
	at := func(n int) Night { return nightZero + Night(n) }
	e31 := Resource{KindElectrode, "E-31"}
	saw := func(first, second float64) func(Night) float64 {
		return func(n Night) float64 {
			if k := float64(n - nightZero); k < 22 {
				return first * (k - 15)
			} else {
				return second * (k - 22)
			}
		}
	}
	lamp := func(n Night) float64 {
		if n < at(37) {
			return 0.60
		}
		return 0.05
	}
	return []fault{
		{ElectrodeSlope, e31, []float64{1}, at(15), at(27), saw(0.15, 0.22)},
		{ElectrodeOffset, e31, []float64{1}, at(15), at(27), saw(0.003/0.02, 0.004/0.02)},
		{ElectrodeAgeing, e31, []float64{0.5, 1}, at(22), at(27), nil},
		{WavelengthShift, Resource{KindInstrument, "U1"}, []float64{2}, at(34), at(60), lamp},
		{BufferHigh, Resource{KindBuffer, "CB-207"}, []float64{0.06 / 0.05}, at(41), at(45), nil},
	}
}

// tell runs the sixty nights and returns every transition with its night.
type told struct {
	night int
	Transition
	c Case
}

func tellStory(t *testing.T, l *lab, m *Model, seed uint64, faults []fault, threshold float64) []told {
	t.Helper()
	first := nightZero + 15
	rng := rand.New(rand.NewPCG(seed, 77))
	all := l.draw(m, rng, first, nightZero+60, 1, faults)
	all.Observations = l.calibrations(m, rng, all.Observations, faults)
	var open []Case
	var closed []Case
	var out []told
	id := int64(0)
	for n := first; n <= nightZero+60; n++ {
		h := all
		h.Last = n
		h.Follow(append(slices.Clone(closed), open...))
		ev, err := m.Evaluate(h)
		if err != nil {
			t.Fatal(err)
		}
		cases, said := Update(open, ev, l.events, nil, CaseRules{})
		for i := range cases {
			if cases[i].ID == 0 {
				id++
				cases[i].ID = id
			}
		}
		for _, s := range said {
			out = append(out, told{int(n - nightZero), s, cases[s.Index]})
		}
		open = open[:0:0]
		for _, c := range cases {
			if c.State == Closed {
				closed = append(closed, c)
			} else {
				open = append(open, c)
			}
		}
	}
	return out
}

// calibrations replaces the electrode cells' nightly draws by calibration nights.
func (l *lab) calibrations(m *Model, rng *rand.Rand, obs []Observation, faults []fault) []Observation {
	for _, key := range []string{"E-31", "E-34"} {
		i := m.byKey[key]
		c := &m.cells[i]
		low := lower(c.Cov, c.k)
		for _, k := range calibrationNights() {
			n := nightZero + Night(k)
			if k < 15 || (key == "E-31" && k > 27) {
				continue
			}
			v := slices.Clone(c.Cell.Centre)
			gauss(rng, low, v, 1)
			for _, f := range faults {
				l.apply(m, i, n, f, v)
			}
			obs = append(obs, Observation{Cell: key, Night: n, Sets: 1, Values: v})
		}
	}
	return obs
}

func TestStory(t *testing.T) {
	l := quillmere()
	m, err := NewModel(l.cells, Rules{Threshold: 8.2}, Plain)
	if err != nil {
		t.Fatal(err)
	}
	runs := 3
	if long() {
		runs = 40
	}
	var good, openings int
	delays := map[string][]int{}
	for seed := range runs {
		said := tellStory(t, l, m, uint64(seed), storyFaults(), 8.2)
		episodes := map[string]bool{}
		extra := 0
		for _, s := range said {
			if seed < 3 || s.Change == ChangeOpened {
				t.Logf("run %d night %d: %s: %s [%v, %s]", seed, s.night, s.Change, s.Text, s.c.Resource, s.c.Explanation.Finding)
			}
			if s.Change != ChangeOpened {
				continue
			}
			openings++
			lead, _ := s.c.Lead()
			name := ""
			switch {
			case s.night < 28 && (s.c.Resource.Name == "E-31" || s.c.Resource.Name == "M-1"): // the meter at first, where "cannot tell" is said
				name = "electrode"
			case s.night >= 34 && s.night <= 36 && lead.Cause == WavelengthShift && s.c.Resource.Name == "U1":
				name = "lamp"
			case s.night >= 41 && s.night <= 43 && lead.Cause == BufferHigh && s.c.Resource.Name == "CB-207":
				name = "buffer"
			}
			if name == "" || episodes[name] {
				extra++
				continue
			}
			episodes[name] = true
			delays[name] = append(delays[name], s.night)
		}
		if len(episodes) == 3 && extra == 0 {
			good++
		} else {
			t.Logf("run %d: found %v, %d further openings", seed, episodes, extra)
		}
	}
	for k, v := range delays {
		slices.Sort(v)
		t.Logf("%s: found in %d of %d runs, night %d to %d, median %d", k, len(v), runs, v[0], v[len(v)-1], v[len(v)/2])
	}
	t.Logf("%d of %d runs told exactly one opening per episode; %d openings", good, runs, openings)
	if good < (9*runs)/10 {
		t.Errorf("%d of %d runs told exactly one opening per episode", good, runs)
	}
	for name, limit := range map[string]int{"electrode": 20, "lamp": 34, "buffer": 41} {
		if v := delays[name]; len(v) == 0 || v[len(v)/2] > limit {
			t.Errorf("%s: nights %v, median night %d at most", name, v, limit)
		}
	}
}
