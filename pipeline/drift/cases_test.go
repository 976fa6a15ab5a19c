package drift

import (
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// an explanation as Evaluate makes it, for the state machine alone.
func explained(cause Cause, res Resource, ins []string, since Night, score, impact float64) Explanation {
	tr, _ := TraitOf(cause)
	return Explanation{
		Score: score, Finding: Named, Class: tr.Class, ClassProbability: 0.97, Instruments: ins, Impact: impact, Sentence: tr.Title,
		Candidates: []Candidate{{Cause: cause, Title: tr.Title, Class: tr.Class, Resource: res, Shape: ShapeStep, Since: Interval{since - 1, since, since + 1}, Probability: 0.97, Theta: []float64{1}, ThetaCov: []float64{0.01}}},
		Touched:    []Touched{{Cell: "U1/RI-A", Characteristic: PKa, Predicted: 0.02, Observed: 0.02, SD: 0.004}},
	}
}

func changes(ts []Transition) string {
	var out []string
	for _, t := range ts {
		out = append(out, string(t.Change))
	}
	return strings.Join(out, ", ")
}

func TestCaseLife(t *testing.T) {
	e31 := Resource{KindElectrode, "E-31"}
	night := Night(20500)
	quiet := func() Evaluation { return Evaluation{Night: night, Threshold: 8} }
	loud := func(e Explanation) Evaluation {
		return Evaluation{Night: night, Threshold: 8, Score: e.Score, Rings: true, Explanations: []Explanation{e}}
	}
	step := func(open []Case, ev Evaluation, events []Event, ds []Decision, want string) []Case {
		t.Helper()
		next, said := Update(open, ev, events, ds, CaseRules{})
		if got := changes(said); got != want {
			t.Fatalf("night %v: %q, %q expected", ev.Night, got, want)
		}
		for i := range next {
			next[i].ID = int64(i + 1)
		}
		return next
	}
	seen := func(share, expected float64) Evaluation {
		ev := quiet()
		ev.Watched = []Watched{{CaseID: 1, Data: expected > 0, Expected: expected, Share: share, Inside: expected >= 2 && share < 0.5}}
		return ev
	}
	open := step(nil, quiet(), nil, nil, "")
	open = step(open, loud(explained(ElectrodeOffset, e31, []string{"U1"}, night, 12, 0.012)), nil, nil, "opened")
	night++
	open = step(open, loud(explained(ElectrodeOffset, e31, []string{"U1"}, night-1, 20, 0.019)), nil, nil, "")
	open = step(open, loud(explained(ElectrodeOffset, e31, []string{"U1"}, night-1, 25, 0.026)), nil, nil, "impact crossed the limit")
	// the same disturbance, now better explained by a bottle that both instruments used
	other := explained(BufferLow, Resource{KindBuffer, "CB-1"}, []string{"U1", "U2"}, night-1, 30, 0.03)
	other.Candidates = append(other.Candidates, Candidate{Cause: ElectrodeOffset, Resource: e31, Probability: 0.1})
	open = step(open, loud(other), nil, nil, "likeliest cause changed, another instrument or resource affected")
	// nobody answers
	night += 2
	open = step(open, quiet(), nil, nil, "unacknowledged")
	night++
	open = step(open, quiet(), nil, []Decision{{CaseID: 1, Kind: DecideAcknowledge, By: "A. Novak", Reason: "fresh bottle ordered"}}, "")
	if open[0].State != Acknowledged || open[0].AckBy != "A. Novak" {
		t.Fatalf("%+v", open[0])
	}
	// inside once, no data, too little to see, outside again, inside twice
	for _, s := range []struct {
		share, expected float64
		want            string
		inside          int
	}{{0.1, 5, "", 1}, {0, 0, "", 1}, {0.1, 1.2, "", 1}, {0.9, 5, "", 0}, {0.2, 5, "", 1}, {0.1, 5, "closed", 2}} {
		night++
		open = step(open, seen(s.share, s.expected), nil, nil, s.want)
		if open[0].Inside != s.inside {
			t.Fatalf("night %v: inside %d, %d expected", night, open[0].Inside, s.inside)
		}
	}
	if open[0].State != Closed || open[0].Closed != night {
		t.Fatalf("%+v", open[0])
	}
	masks := open[0].Masks()
	if len(masks) != 2 || masks[0].Resource != e31 || masks[0].Until >= night || masks[0].From != Night(20499) {
		t.Errorf("masks %+v", masks)
	}
}

func TestCaseEnds(t *testing.T) {
	e31 := Resource{KindElectrode, "E-31"}
	night := Night(20500)
	made := func() []Case {
		open, _ := Update(nil, Evaluation{Night: night, Threshold: 8, Rings: true, Explanations: []Explanation{explained(ElectrodeOffset, e31, []string{"U1"}, night, 12, 0.01)}}, nil, nil, CaseRules{})
		open[0].ID = 1
		return open
	}
	for name, c := range map[string]struct {
		events []Event
		ds     []Decision
		watch  []Watched
		closed bool
	}{
		"replaced":         {events: []Event{{Night: night + 1, Kind: EventElectrode, Resource: "E-35", Instrument: "U1"}}, closed: true},
		"replaced on U2":   {events: []Event{{Night: night + 1, Kind: EventElectrode, Resource: "E-36", Instrument: "U2"}}},
		"another thing":    {events: []Event{{Night: night + 1, Kind: EventLamp, Resource: "L-2", Instrument: "U1"}}},
		"yesterday":        {events: []Event{{Night: night, Kind: EventElectrode, Resource: "E-31", Instrument: "U1"}}},
		"calibrated":       {events: []Event{{Night: night + 1, Kind: EventCalibration, Resource: "E-31", Instrument: "U1"}}},
		"a person":         {ds: []Decision{{CaseID: 1, Kind: DecideClose, By: "B", Reason: "cleaned"}}, closed: true},
		"another case":     {ds: []Decision{{CaseID: 2, Kind: DecideClose, By: "B", Reason: "cleaned"}}},
		"out of use":       {watch: []Watched{{CaseID: 1, Retired: true}}, closed: true},
		"nothing arrives":  {watch: []Watched{{CaseID: 1}}},
		"nothing is asked": {},
	} {
		open := made()
		next, said := Update(open, Evaluation{Night: night + 1, Threshold: 8, Watched: c.watch}, c.events, c.ds, CaseRules{})
		if (next[0].State == Closed) != c.closed || (len(said) > 0) != c.closed {
			t.Errorf("%s: %v, %q", name, next[0].State, changes(said))
		}
		if open[0].State != Open {
			t.Errorf("%s: Update changed its argument", name)
		}
	}
}

// One electrode with a real drift and ageing that calibrations remove is one case, led by what does harm.
func TestTwoCausesOneCase(t *testing.T) {
	e31, night := Resource{KindElectrode, "E-31"}, Night(20500)
	ev := Evaluation{Night: night, Threshold: 8, Rings: true, Explanations: []Explanation{
		explained(ElectrodeAgeing, e31, []string{"U1"}, night, 90, 0), explained(ElectrodeAged, e31, []string{"U1"}, night, 15, 0.03)}}
	open, said := Update(nil, ev, nil, nil, CaseRules{})
	if len(open) != 1 || changes(said) != "opened" {
		t.Fatalf("%d cases, %q", len(open), changes(said))
	}
	if lead, _ := open[0].Lead(); lead.Cause != ElectrodeAged {
		t.Errorf("led by %s", lead.Cause)
	}
	if m := open[0].Masks(); len(m) != 2 {
		t.Errorf("masks %+v", m)
	}
}

// Whatever is evaluated: equal input gives equal output, closed cases stay closed, no
// transition without its case, nothing opens without ringing.
func TestUpdateProperty(t *testing.T) {
	res := []Resource{{KindElectrode, "E-31"}, {KindBuffer, "CB-1"}, {KindInstrument, "U1"}}
	causes := []Cause{ElectrodeOffset, BufferLow, WavelengthShift, Unknown}
	rapid.Check(t, func(t *rapid.T) {
		var open []Case
		night := Night(20500)
		id := int64(0)
		for range rapid.IntRange(1, 12).Draw(t, "nights") {
			night++
			ev := Evaluation{Night: night, Threshold: 8}
			for range rapid.IntRange(0, 2).Draw(t, "explanations") {
				k := rapid.IntRange(0, 2).Draw(t, "resource")
				e := explained(causes[rapid.IntRange(0, 3).Draw(t, "cause")], res[k], []string{"U1"}, night, rapid.Float64Range(5, 40).Draw(t, "score"), 0.01)
				ev.Explanations = append(ev.Explanations, e)
			}
			for _, c := range open {
				ev.Watched = append(ev.Watched, Watched{CaseID: c.ID, Data: rapid.Bool().Draw(t, "data"), Expected: 3, Share: 0.1, Inside: rapid.Bool().Draw(t, "inside")})
			}
			a, said := Update(open, ev, nil, nil, CaseRules{})
			b, again := Update(open, ev, nil, nil, CaseRules{})
			if changes(said) != changes(again) || len(a) != len(b) {
				t.Fatal("not the same twice")
			}
			if len(a) < len(open) {
				t.Fatal("a case was lost")
			}
			for _, s := range said {
				if s.Index < 0 || s.Index >= len(a) || s.Text == "" {
					t.Fatalf("%+v", s)
				}
			}
			for i, c := range a[len(open):] {
				if c.Explanation.Score <= ev.Threshold {
					t.Fatalf("case %d opened at %.1f", i, c.Explanation.Score)
				}
			}
			open = open[:0:0]
			for _, c := range a {
				if c.ID == 0 {
					id++
					c.ID = id
				}
				if c.State != Closed {
					open = append(open, c)
				}
			}
		}
	})
}

func TestForecast(t *testing.T) {
	now := Night(20500)
	line := func(n int, slope, noise float64) (ts []Night, v, sd []float64) {
		rng := rand.New(rand.NewPCG(5, uint64(n)))
		for i := range n {
			ts = append(ts, now-Night(n-1-i))
			v = append(v, 99-slope*float64(n-1-i)*-1-slope*float64(n-1)+noise*rng.NormFloat64())
			sd = append(sd, math.Max(noise, 1e-6))
		}
		return ts, v, sd
	}
	// exact: falls 0.25 a night, is at 97 now after 9 nights from 99.25: leaves 95 eight nights from now
	ts, v, sd := line(9, 0, 0)
	for i := range v {
		v[i], sd[i] = 97+0.25*float64(len(v)-1-i), 1e-9
	}
	if f := ForecastExit(ts, v, sd, 95, 102, now); !f.Known || f.Night != now+8 || f.Low != now+8 || f.High != now+8 {
		t.Errorf("exact line: %+v", f)
	}
	if f := ForecastExit(ts, v, sd, 97.2, 102, now); f.Night != now || f.Text != "outside its limits now" {
		t.Errorf("outside: %+v", f)
	}
	ts, v, sd = line(12, 0, 0.2)
	if f := ForecastExit(ts, v, sd, 95, 102, now); f.Known {
		t.Errorf("no trend: %+v", f)
	}
	if f := ForecastExit(ts[:2], v[:2], sd[:2], 95, 102, now); f.Known {
		t.Errorf("two points: %+v", f)
	}
	// the 90 % interval must hold the true night about nine times in ten
	inside, trials := 0, 400
	for s := range trials {
		rng := rand.New(rand.NewPCG(8, uint64(s)))
		ts, v, sd = nil, nil, nil
		for i := range 15 {
			ts, sd = append(ts, now-Night(14-i)), append(sd, 0.25)
			v = append(v, 98-0.15*float64(i-14)+0.25*rng.NormFloat64())
		}
		f := ForecastExit(ts, v, sd, 95, 102, now) // truly 20 nights from now
		if f.Known && f.Low <= now+20 && (f.High == 0 || f.High >= now+20) {
			inside++
		}
	}
	t.Logf("90 %% interval of the forecast holds the night in %d of %d", inside, trials)
	if inside < 86*trials/100 || inside > 95*trials/100 {
		t.Errorf("held %d of %d", inside, trials)
	}
}

func TestNights(t *testing.T) {
	z := time.FixedZone("", 2*3600)
	n := NightOf(time.Date(2026, 3, 14, 0, 30, 0, 0, z))
	if n.String() != "2026-03-14" || n.Short() != "14 Mar" || NightOf(time.Date(2026, 3, 15, 23, 0, 0, 0, z)) != n+1 {
		t.Errorf("%v", n)
	}
}

// Reach: a bad high buffer harms results above the mid buffer by their weight, an
// optical cause none with free spectra, another electrode none.
func TestReach(t *testing.T) {
	l := quillmere()
	m, err := NewModel(l.cells, Rules{Threshold: 8.2}, Plain)
	if err != nil {
		t.Fatal(err)
	}
	first := nightZero + 15
	h := l.draw(m, rand.New(rand.NewPCG(3, 9)), first, nightZero+42, 2, storyFaults())
	h.Observations = slices.DeleteFunc(h.Observations, func(o Observation) bool { return o.Night < nightZero+35 && o.Night > nightZero+14 })
	h.Observations = l.calibrations(m, rand.New(rand.NewPCG(3, 10)), h.Observations, storyFaults())
	h.Observations = slices.DeleteFunc(h.Observations, func(o Observation) bool { return o.Night > nightZero+42 || o.Night < nightZero+35 })
	ev, err := m.Evaluate(h)
	if err != nil {
		t.Fatal(err)
	}
	ladder := func(pka float64) []float64 { return invented(pka, -1, 434, 578, 0, 0).Ladder }
	base := func(id int64, pka float64) ResultFacts {
		return ResultFacts{ID: id, Night: nightZero + 42, Instrument: "U1", PKa: pka, U: 0.023, Ladder: ladder(pka), Charge: -1, Buffers: []float64{4.005, 6.865, 10.012},
			Resources: []Resource{{KindBuffer, "CB-200"}, {KindBuffer, "CB-201"}, {KindBuffer, "CB-207"}, {KindElectrode, "E-35"}, {KindLamp, "lamp 2"}, {KindMeter, "M-1"}},
			Roles:     []string{"low", "mid", "high", "", "", ""}}
	}
	before := base(5, 8.9)
	before.Night = nightZero + 40
	old := base(6, 8.9)
	old.Resources = slices.Clone(old.Resources)
	old.Resources[2].Name = "CB-202"
	var buffer, wave *Explanation
	for i := range ev.Explanations {
		switch lead, _ := ev.Explanations[i].Lead(); lead.Cause {
		case BufferHigh:
			buffer = &ev.Explanations[i]
		case WavelengthShift:
			wave = &ev.Explanations[i]
		}
	}
	if buffer == nil || wave == nil {
		t.Fatalf("found %d explanations: %+v", len(ev.Explanations), ev.Explanations)
	}
	hs, err := m.Reach(*buffer, h, nightZero+40, 0, []ResultFacts{base(1, 8.2), base(2, 8.9), base(3, 7.8), base(4, 4.7), before, old})
	if err != nil {
		t.Fatal(err)
	}
	if len(hs) != 5 {
		t.Fatalf("%d results", len(hs))
	}
	// the specification's section 9: cresol red +.025, thymol blue +.039, phenol red +.018
	for i, want := range []float64{0.025, 0.039, 0.018, 0} {
		if math.Abs(hs[i].Impact-want) > 0.006 {
			t.Errorf("result %d: impact %+.4f, about %+.3f expected", hs[i].ID, hs[i].Impact, want)
		}
		t.Logf("result %d: impact %+.4f, at most %.4f, corrected %.4f, unaffected %v: %s", hs[i].ID, hs[i].Impact, hs[i].Bound, hs[i].Corrected, hs[i].Unaffected, hs[i].Why)
	}
	if hs[1].Unaffected || !hs[3].Unaffected || !hs[4].Unaffected || hs[4].Impact != 0 {
		t.Errorf("%+v", hs)
	}
	if math.Abs(hs[1].Corrected-(8.9-hs[1].Impact)) > 1e-12 {
		t.Errorf("corrected %v", hs[1].Corrected)
	}
	hs, err = m.Reach(*wave, h, nightZero+30, 0, []ResultFacts{base(1, 8.2)})
	if err != nil || len(hs) != 1 || !hs[0].Unaffected || hs[0].Impact != 0 || !math.IsNaN(hs[0].Corrected) {
		t.Errorf("wavelength: %+v, %v", hs, err)
	}
}
