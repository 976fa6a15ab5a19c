package pipeline

import (
	"bytes"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"pkvigil/db"
	"pkvigil/db/dbtest"
	"pkvigil/pipeline/alert"
	"pkvigil/pipeline/rehearse"
)

func clockOf(hhmm string) time.Time {
	t, err := time.Parse("2006-01-02 15:04", "2026-03-02 "+hhmm)
	if err != nil {
		panic(err)
	}
	if t.Hour() < 12 {
		t = t.AddDate(0, 0, 1)
	}
	return t
}

func refSet(id int64, name, slot, hhmm string) timed {
	m := db.Measured{Set: db.Set{ID: id, Key: "U1/2026-03-02/" + name, Name: name, Night: "2026-03-02", Slot: slot, Compound: strings.SplitN(name, ".", 2)[0], Kind: db.KindReference}}
	return timed{m, clockOf(hhmm)}
}

func sampleSet(id int64, hhmm string) timed {
	x := refSet(id, fmt.Sprintf("CR-%d", id), "", hhmm)
	x.Set.Kind, x.PKa, x.Expanded, x.ResultID = db.KindSample, 8.2, 0.024, id
	return x
}

func names(st []*station) string {
	var out []string
	for _, s := range st {
		var sets []string
		for _, x := range s.sets {
			sets = append(sets, x.Set.Name)
		}
		out = append(out, s.name+"["+strings.Join(sets, " ")+"]")
	}
	return strings.Join(out, " ")
}

func TestStations(t *testing.T) {
	samples := []timed{sampleSet(10, "20:00"), sampleSet(11, "23:00"), sampleSet(12, "03:00")}
	for name, c := range map[string]struct {
		refs []timed
		want string
	}{
		"slots":          {[]timed{refSet(3, "RI-C.close", "close", "05:00"), refSet(1, "RI-A.open", "open", "18:00"), refSet(2, "RI-C.open", "open", "18:40")}, "open[RI-A.open RI-C.open] close[RI-C.close]"},
		"by time":        {[]timed{refSet(1, "RI-A", "", "18:00"), refSet(2, "RI-C", "", "18:40"), refSet(3, "RI-B", "", "01:00")}, "RI-A[RI-A RI-C] RI-B[RI-B]"},
		"sample between": {[]timed{refSet(1, "RI-A", "", "19:50"), refSet(2, "RI-C", "", "20:30")}, "RI-A[RI-A] RI-C[RI-C]"},
		"slot twice":     {[]timed{refSet(1, "RI-A.open", "open", "18:00"), refSet(2, "RI-A.open2", "open", "22:00")}, "open[RI-A.open] open.2200[RI-A.open2]"},
		"none":           {nil, ""},
	} {
		if got := names(stations(c.refs, samples)); got != c.want {
			t.Errorf("%s: %s, expected %s", name, got, c.want)
		}
	}
}

// judged settles stations from a table: set id -> shift; absent sets are spoiled.
func judged(st []*station, d map[int64]float64) {
	for _, s := range st {
		s.settle(func(x timed) (shift, string) {
			v, ok := d[x.Set.ID]
			switch {
			case !ok:
				return shift{}, stationSpoiled
			case math.IsNaN(v):
				return shift{}, stationPending
			}
			pka := map[string]float64{"RI-A": 4.66, "RI-C": 8.26}[x.Set.Compound]
			r := shift{Reference: x.Set.Compound, PKa: pka, D: v, SD: 0.002, Failed: math.Abs(v) > 0.02, Sentence: x.Set.Name}
			if r.Failed {
				return r, stationFailed
			}
			return r, stationGood
		})
	}
}

func TestSpans(t *testing.T) {
	refs := []timed{refSet(1, "RI-C.open", "open", "18:00"), refSet(2, "RI-C.mid", "mid", "23:30"), refSet(3, "RI-C.close", "close", "05:00")}
	samples := []timed{sampleSet(10, "17:00"), sampleSet(11, "20:00"), sampleSet(12, "02:00"), sampleSet(13, "06:00")}
	nan := math.NaN()
	for name, c := range map[string]struct {
		d    map[int64]float64
		want string
	}{
		"all good":            {map[int64]float64{1: 0, 2: 0.001, 3: 0.01}, "10 good, 11 good, 12 good, 13 open"},
		"closing to come":     {map[int64]float64{1: 0, 2: 0, 3: nan}, "10 good, 11 good, 12 open, 13 open"},
		"middle fails":        {map[int64]float64{1: 0, 2: 0.04, 3: 0}, "10 good, 11 failed, 12 failed, 13 open"},
		"middle spoiled":      {map[int64]float64{1: 0, 3: 0}, "10 good, 11 good, 12 good, 13 open"},
		"spoiled before bad":  {map[int64]float64{1: 0, 3: 0.03}, "10 good, 11 failed, 12 failed, 13 failed"},
		"pending before bad":  {map[int64]float64{1: 0, 2: nan, 3: 0.03}, "10 good, 11 open, 12 failed, 13 failed"},
		"opening fails alone": {map[int64]float64{1: -0.03, 2: 0, 3: 0}, "10 failed, 11 failed, 12 good, 13 open"},
	} {
		st := stations(refs, samples)
		judged(st, c.d)
		var got []string
		for _, b := range spans("U1", st, samples) {
			for _, x := range b.samples {
				got = append(got, fmt.Sprintf("%d %s", x.Set.ID, b.State))
			}
		}
		if s := strings.Join(got, ", "); s != c.want {
			t.Errorf("%s: %s, expected %s", name, s, c.want)
		}
	}
}

// A repeated check replaces the first one of the same reference.
func TestRepeatedReferenceCounts(t *testing.T) {
	st := stations([]timed{refSet(1, "RI-C.open", "open", "18:00"), refSet(2, "RI-C.open2", "open", "18:40")}, nil)
	judged(st, map[int64]float64{1: 0.05, 2: 0.001})
	if len(st) != 1 || st[0].state != stationGood {
		t.Errorf("state %s", st[0].state)
	}
	judged(st, map[int64]float64{1: 0.001, 2: 0.05})
	if st[0].state != stationFailed {
		t.Errorf("state %s", st[0].state)
	}
}

func TestShut(t *testing.T) {
	refs := []timed{refSet(1, "RI-C.open", "open", "18:00"), refSet(2, "RI-C.mid", "mid", "23:30"), refSet(3, "RI-C.close", "close", "05:00")}
	samples := []timed{sampleSet(11, "20:00"), sampleSet(12, "02:00")}
	for name, c := range map[string]struct {
		d     map[int64]float64
		since time.Time
		want  string
	}{
		"one failure":             {map[int64]float64{1: 0, 2: 0.04, 3: 0}, time.Time{}, ""},
		"two in a row":            {map[int64]float64{1: 0, 2: 0.04, 3: 0.03}, time.Time{}, "two checks in a row"},
		"two, a good one between": {map[int64]float64{1: 0.04, 2: 0, 3: 0.04}, time.Time{}, ""},
		"a spoiled one between":   {map[int64]float64{1: 0.04, 3: 0.04}, time.Time{}, "two checks in a row"},
		"more than twice U":       {map[int64]float64{1: 0, 2: 0.049, 3: 0}, time.Time{}, "more than twice its U"},
		"reopened since":          {map[int64]float64{1: 0.04, 2: 0.04, 3: 0}, clockOf("23:40"), ""},
	} {
		st := stations(refs, samples)
		judged(st, c.d)
		why := shut(st, spans("U1", st, samples), c.since)
		if (why == nil) != (c.want == "") || why != nil && !strings.Contains(why.reason, c.want) {
			t.Errorf("%s: %+v, expected %q", name, why, c.want)
		}
	}
}

// Between references the shift is on the straight line through them, outside
// it is that of the nearest, and it is never larger than the largest of them.
func TestShiftAt(t *testing.T) {
	s := &station{shifts: []shift{{PKa: 4.66, D: 0.02, SD: 0.003}, {PKa: 8.26, D: -0.01, SD: 0.004}}}
	for _, c := range []struct{ pka, d float64 }{{3, 0.02}, {4.66, 0.02}, {6.46, 0.005}, {8.26, -0.01}, {9.5, -0.01}} {
		if d, _ := s.at(c.pka); math.Abs(d-c.d) > 1e-12 {
			t.Errorf("at %.2f: %.4f, expected %.4f", c.pka, d, c.d)
		}
	}
	rapid.Check(t, func(rt *rapid.T) {
		n := rapid.IntRange(1, 5).Draw(rt, "n")
		s := &station{}
		most := 0.0
		for range n {
			v := shift{PKa: rapid.Float64Range(2, 11).Draw(rt, "pka"), D: rapid.Float64Range(-0.1, 0.1).Draw(rt, "d"), SD: 0.01}
			s.shifts, most = append(s.shifts, v), max(most, math.Abs(v.D))
		}
		slices.SortFunc(s.shifts, func(a, b shift) int {
			if a.PKa < b.PKa {
				return -1
			}
			return 1
		})
		d, sd := s.at(rapid.Float64Range(0, 14).Draw(rt, "at"))
		if math.Abs(d) > most+1e-12 || !(sd > 0) || sd > 0.01+1e-12 {
			rt.Fatalf("shift %v ± %v of at most %v", d, sd, most)
		}
	})
}

// sampleLab is newLab with the dyes of these names as samples, and calibrations that may be ten days old.
func sampleLab(t testing.TB, sc *rehearse.Scenario, samples ...string) *lab {
	t.Helper()
	l := &lab{t: t, base: t.TempDir(), url: dbtest.URL(t), log: &lines{}}
	text := bytes.Replace(sc.Settings(l.base), []byte(`(?P<set>[A-Z][A-Za-z0-9-]*)`), []byte(`(?P<set>[A-Z]{2,3}(?:-[A-D])?-\d+)`), 1)
	for _, name := range samples {
		i := bytes.Index(text, []byte("[[compound]]\nname = \""+name+"\""))
		if i < 0 {
			t.Fatalf("no compound %s in\n%s", name, text)
		}
		tail := text[i:]
		for _, line := range []string{"reference = true\n", "reference_lot = \"" + name + " lot 1\"\n"} {
			j := bytes.Index(tail, []byte(line))
			tail = append(slices.Clone(tail[:j]), tail[j+len(line):]...)
		}
		text = append(slices.Clone(text[:i]), tail...)
	}
	l.text = append(text, more+`
[charts]
impact_limit = 0.02

[method]
calibration_age_hold = "240h"

[[check]]
check = "calibration.age"
note_when = [240.0]
hold_when = [260.0]

[[rule]]
name = "plan"
folders = ["U1"]
role = "plan"
pattern = '^plan_(?P<date>\d{4}-\d{2}-\d{2})\.csv$'
`+fmt.Sprintf("\n[storage]\ndata_dir = %q\n", filepath.Join(l.base, "data"))...)
	l.clock = NewSetClock(time.Date(2026, 3, 2, 17, 0, 0, 0, time.UTC))
	l.open()
	return l
}

// night plays a night of a scenario: everything is written at 21:00 and
// settled by midnight; then the night ends.
func (l *lab) night(sc *rehearse.Scenario, n int, but ...string) {
	l.t.Helper()
	ds, err := sc.Export(n, rehearse.Style{})
	if err != nil {
		l.t.Fatal(err)
	}
	l.clock.MoveTo(time.Date(2026, 3, 1+n, 21, 0, 0, 0, time.UTC))
	l.put(ds, but...)
	l.settle()
	l.clock.MoveTo(time.Date(2026, 3, 2+n, 6, 0, 0, 0, time.UTC))
	l.steps(time.Minute)
}

// verdictOf is what the result of a set amounts to now.
func (l *lab) verdictOf(name string) string {
	l.t.Helper()
	r := l.result(name)
	if r == nil {
		return "none"
	}
	return r.Standing.Verdict
}

func (l *lab) said(kind string) []db.Said {
	l.t.Helper()
	said, err := l.s.store.SaidSince(l.t.Context(), nil, kind, time.Time{})
	if err != nil {
		l.t.Fatal(err)
	}
	return said
}

// Five nights on a real database: good, displaced by 0.07, good while closed,
// displaced again with references that a person strikes, good.
func TestBracketsThroughNights(t *testing.T) {
	dyes := rehearse.Dyes()
	sc := &rehearse.Scenario{Seed: 7, Noise: rehearse.Quiet(), Design: rehearse.Design{Dyes: []rehearse.Dye{dyes["RI-A"], dyes["CR"], dyes["RI-C"]}},
		Causes: []rehearse.Cause{{Kind: rehearse.ElectrodeOffset, Onset: 2, Until: 2, Size: 0.07}, {Kind: rehearse.ElectrodeOffset, Onset: 4, Until: 4, Size: 0.07}}}
	l := sampleLab(t, sc, "CR")
	state := func(night string) string {
		t.Helper()
		rows, err := l.s.store.Brackets(t.Context(), nil, "U1", night)
		if err != nil {
			t.Fatal(err)
		}
		for _, b := range rows {
			if b.Night == night {
				return b.State
			}
		}
		return "none"
	}

	l.night(sc, 1)
	if s, v := state("2026-03-02"), l.verdictOf("CR-1.n001"); s != "good" || v != db.Stands {
		t.Fatalf("night 1: bracket %s, result %s: %s", s, v, l.result("CR-1.n001").Headline)
	}

	l.night(sc, 2)
	if s, v := state("2026-03-03"), l.verdictOf("CR-1.n002"); s != "failed" || v != "in-question" {
		t.Fatalf("night 2: bracket %s, result %s", s, v)
	}
	if said := l.said(alert.InstrumentShut); len(said) != 1 || !strings.Contains(said[0].Subject, "U1") {
		t.Fatalf("closing told %d times: %+v", len(said), said)
	}
	d, err := l.s.BriefData(t.Context(), "2026-03-03", l.clock.Now())
	if err != nil {
		t.Fatal(err)
	}
	if text := d.Text(); !strings.Contains(text, "U1 is closed") || !strings.Contains(text, "failed") {
		t.Errorf("the brief says nothing of it:\n%s", text)
	}

	// While closed: stored, held for that reason alone, and computed again the same.
	l.night(sc, 3)
	r := l.result("CR-1.n003")
	if r.Verdict != db.Held || !slices.ContainsFunc(r.Checks, func(c db.Check) bool { return c.Key == checkClosed && c.Outcome == db.Held }) || len(r.PKa) != 1 {
		t.Fatalf("night 3: %s, %+v", r.Verdict, r.Checks)
	}
	if v := l.verdictOf("RI-A-1.n003"); v != db.Stands && v != db.StandsNoted {
		t.Errorf("a reference of a closed instrument is %s", v)
	}
	for _, name := range []string{"CR-1.n001", "CR-1.n003"} {
		if a, err := l.s.Recompute(t.Context(), l.result(name).ID); err != nil || !a.Same {
			t.Errorf("again: %+v, %v", a, err)
		}
	}

	// Opened again: what only waited stands, what lay in the failed bracket stays in question.
	l.signed("reopen", "U1")
	if v := l.verdictOf("CR-1.n003"); v != db.Stands {
		t.Errorf("after reopening: %s", v)
	}
	if v := l.verdictOf("CR-1.n002"); v != "in-question" {
		t.Errorf("night 2 after reopening: %s", v)
	}
	if len(l.said(alert.InstrumentShut)) != 1 {
		t.Error("closed again by checks made before it was opened")
	}
	in := l.result("CR-1.n002")
	if _, err := l.sign("confirm", "U1/2026-03-03/after-RI-A-1.n002", "all"); err == nil {
		t.Error("a result displaced by 0.07 was proposed as unaffected")
	}
	l.signed("confirm", "U1/2026-03-03/after-RI-A-1.n002", fmt.Sprint(in.ID))
	if v := l.verdictOf("CR-1.n002"); v != db.Stands && v != db.StandsNoted {
		t.Errorf("confirmed: %s", v)
	}
	l.steps(time.Minute, time.Hour)
	if v := l.verdictOf("CR-1.n002"); v == "in-question" {
		t.Error("asked again after a person has decided")
	}

	// The failed checks turn out to be no checks at all: the doubt is taken back.
	l.night(sc, 4)
	if v := l.verdictOf("CR-1.n004"); v != "in-question" {
		t.Fatalf("night 4: %s", v)
	}
	l.signed("reopen", "U1")
	l.signed("strike", "RI-A-1.n004")
	l.signed("strike", "RI-C-1.n004")
	l.night(sc, 5)
	if s, v := state("2026-03-05"), l.verdictOf("CR-1.n004"); v == "in-question" {
		t.Errorf("struck checks still doubt: bracket %s, result %s", s, v)
	}
	if v := l.verdictOf("CR-1.n005"); v != db.Stands {
		t.Errorf("night 5: %s", v)
	}
}

// A plan names a closing reference that never comes: one message, and the
// results of a night without any good reference are in question until one is.
func TestReferenceNotRun(t *testing.T) {
	dyes := rehearse.Dyes()
	sc := &rehearse.Scenario{Seed: 8, Noise: rehearse.Quiet(), Design: rehearse.Design{Dyes: []rehearse.Dye{dyes["RI-A"], dyes["CR"], dyes["RI-C"]}}}
	l := sampleLab(t, sc, "CR")
	plan := func(night string, names ...string) {
		t.Helper()
		var rows []rehearse.Planned
		for _, n := range names {
			rows = append(rows, rehearse.Planned{Instrument: "U1", Set: n})
		}
		l.write("U1/plan_"+night+".csv", rehearse.PlanCSV(night, rows))
	}
	plan("2026-03-02", "RI-A-1.n001", "CR-1.n001", "RI-C-1.n001")
	l.night(sc, 1, "RI-C")
	if said := l.said(alert.ReferenceUnrun); len(said) != 1 || !strings.Contains(said[0].Subject, "RI-C-1.n001") {
		t.Fatalf("told: %+v", said)
	}
	if v := l.verdictOf("CR-1.n001"); v != db.Stands {
		t.Errorf("one good reference, closing not run: %s", v)
	}
	plan("2026-03-03", "RI-A-1.n002", "CR-1.n002", "RI-C-1.n002")
	l.night(sc, 2, "RI-C", "RI-A")
	l.steps(time.Hour)
	if said := l.said(alert.ReferenceUnrun); len(said) != 2 {
		t.Errorf("told %d times, expected once per night", len(said))
	}
	if v := l.verdictOf("CR-1.n002"); v != "in-question" {
		t.Errorf("no reference in the night: %s", v)
	}
	l.night(sc, 3)
	if v := l.verdictOf("CR-1.n002"); v != db.Stands {
		t.Errorf("after the next good reference: %s", v)
	}
}

// A reference that lacks something says nothing until it comes: the run waits
// for the next one. When the late table comes, it divides the bracket.
func TestLateReferenceDividesTheBracket(t *testing.T) {
	dyes := rehearse.Dyes()
	sc := &rehearse.Scenario{Seed: 11, Noise: rehearse.Quiet(), Design: rehearse.Design{Dyes: []rehearse.Dye{dyes["RI-A"], dyes["CR"], dyes["RI-C"], dyes["PR"]}}}
	l := sampleLab(t, sc, "CR", "PR")
	ds, err := sc.Export(1, rehearse.Style{})
	if err != nil {
		t.Fatal(err)
	}
	l.night(sc, 1, "RI-C-1_ph")
	l.steps(2 * time.Hour)
	if x := l.set("RI-C-1.n001"); x.State != db.SetWaiting {
		t.Fatalf("the reference is %s", x.State)
	}
	brackets := func() string {
		rows, err := l.s.store.Brackets(t.Context(), nil, "U1", "2026-03-01")
		if err != nil {
			t.Fatal(err)
		}
		var out []string
		for _, b := range rows {
			out = append(out, fmt.Sprintf("%s %s %d", strings.TrimPrefix(b.Key, "U1/2026-"), b.State, len(b.Sets)))
		}
		return strings.Join(out, ", ")
	}
	if got := brackets(); got != "03-02/after-RI-A-1.n001 open 1, 03-02/after-RI-C-1.n001 open 1" {
		t.Errorf("while it waits: %s", got)
	}
	l.night(sc, 2)
	if got := brackets(); !strings.HasPrefix(got, "03-02/after-RI-A-1.n001 good 1, 03-02/after-RI-C-1.n001 good 1") {
		t.Errorf("after the next good one: %s", got)
	}
	for _, d := range ds {
		if strings.Contains(d.Path, "RI-C-1_ph") {
			l.write("U1/"+d.Path, d.Bytes)
		}
	}
	l.settle()
	if x := l.set("RI-C-1.n001"); x.State != db.SetFitted {
		t.Fatalf("the reference is %s", x.State)
	}
	if got := brackets(); !strings.HasPrefix(got, "03-02/after-RI-A-1.n001 good 1, 03-02/after-RI-C-1.n001 good 1") {
		t.Errorf("with the late table: %s", got)
	}
}
