package rehearse

import (
	"strings"
	"testing"
)

// A program that reports exactly the truth gets everything found and nothing
// accused; the same report with single lies loses exactly those.
func TestPerfectReportScoresPerfectly(t *testing.T) {
	truth := NewStory(1).Truth()
	card := Score(truth, perfect(truth))
	if card.Missed() != 0 || card.FalselyAccused() != 0 || card.EpisodesFound != 3 || card.RightCause != 3 {
		t.Errorf("perfect report:\n%s", card)
	}
	if card.Intervals == 0 || card.Covered != card.Intervals || card.HarmSets == 0 || card.HarmCaught != card.HarmSets {
		t.Errorf("perfect report:\n%s", card)
	}
	if card.Injected() < 150 {
		t.Errorf("%d faults in the story, expected more than 150", card.Injected())
	}
	if text := card.String(); !strings.Contains(text, "drift.electrode") || !strings.Contains(text, "0 missed; 0 falsely accused") {
		t.Errorf("card:\n%s", text)
	}
}

func TestLiesCost(t *testing.T) {
	truth := NewStory(1).Truth()
	for _, c := range []struct {
		name string
		lie  func(f *Found)
		want func(c ScoreCard) bool
	}{
		{"a case nobody can explain", func(f *Found) {
			f.Cases = append(f.Cases, FoundCase{Cause: "stray", Resource: "U2", Opened: 30})
		}, func(c ScoreCard) bool { return len(c.FalseCases) == 1 && c.Missed() == 0 }},
		{"the right thing, the wrong electrode", func(f *Found) { f.Cases[0].Resource = "E-34" },
			func(c ScoreCard) bool { return c.EpisodesFound == 2 && len(c.FalseCases) == 1 && c.Missed() == 1 }},
		{"harmless ageing first, the drift second", func(f *Found) {
			f.Cases[0].Cause, f.Cases[0].Others = "electrode.ageing", []string{"electrode.aged"}
		}, func(c ScoreCard) bool { return c.EpisodesFound == 3 && c.RightCause == 2 && c.Missed() == 0 }},
		{"two mails", func(f *Found) { f.Cases[1].Openings = 4 },
			func(c ScoreCard) bool { return c.MessagesPerEpisode == 2 }},
		{"a case after the end", func(f *Found) { f.Cases[2].Opened = 55 },
			func(c ScoreCard) bool { return c.EpisodesFound == 2 && c.Missed() == 1 }},
		{"true things nobody asked for", func(f *Found) {
			f.Cases = append(f.Cases, FoundCase{Cause: "electrode.ageing", Resource: "E-31", Opened: 22}, FoundCase{Cause: "reference.lot", Resource: "RC-12", Opened: 49})
		}, func(c ScoreCard) bool { return c.FalselyAccused() == 0 && c.EpisodesFound == 3 }},
		{"a good file refused", func(f *Found) {
			f.Files = append(f.Files, FoundFile{"U1/n002/RI-A.open_s01.csv", ExpectRefused})
		}, func(c ScoreCard) bool { return len(c.FalseFiles) == 1 }},
		{"nothing reported", func(f *Found) { *f = Found{} },
			func(c ScoreCard) bool { return c.Found() == 0 && c.Missed() == c.Injected() && c.FalselyAccused() == 0 }},
	} {
		f := perfect(truth)
		c.lie(&f)
		if card := Score(truth, f); !c.want(card) {
			t.Errorf("%s:\n%s", c.name, card)
		}
	}
}

// Good sets held, and intervals that miss, are counted.
func TestFalseHoldsAndMissedIntervals(t *testing.T) {
	truth := []Truth{
		{Key: "set.pka", Kind: KindPKa, Set: "U1/a", PKa: []float64{6}, Clean: true},
		{Key: "set.pka", Kind: KindPKa, Set: "U1/b", PKa: []float64{6}, Clean: true},
		{Key: "set.pka", Kind: KindPKa, Set: "U1/c", PKa: []float64{6}},
		{Key: "set.pka", Kind: KindPKa, Set: "U1/d", PKa: []float64{6}, Clean: true},
	}
	card := Score(truth, Found{Sets: []FoundSet{
		{Set: "U1/a", Verdict: "held"},
		{Set: "U1/b", Verdict: "stands", PKa: []float64{6.03}, U: []float64{0.02}},
		{Set: "U1/c", Verdict: "stands-noted", PKa: []float64{6.01}, U: []float64{0.02}},
	}})
	if len(card.FalseHolds) != 1 || card.CleanSets != 2 || card.Intervals != 1 || card.Covered != 0 || card.AllStanding != 2 || card.CoveredAll != 1 {
		t.Errorf("%+v", card)
	}
}

// perfect is what a program would report that knew the truth.
func perfect(truth []Truth) Found {
	var f Found
	sets := map[string]*FoundSet{}
	var order []string
	get := func(name string) *FoundSet {
		if sets[name] == nil {
			sets[name] = &FoundSet{Set: name, Verdict: "stands", Revision: 1}
			order = append(order, name)
		}
		return sets[name]
	}
	for _, t := range truth {
		switch {
		case t.Kind == KindEpisode && t.Expect == ExpectCase:
			f.Cases = append(f.Cases, FoundCase{Cause: t.Accept[0], Resource: t.Resource, Onset: t.From, Opened: t.From, Openings: 1})
		case t.Kind == KindAbsence:
			f.Absences = append(f.Absences, FoundAbsence{t.Key, t.Resource, t.Night})
		case t.Kind == KindHarm:
			get(t.Set).Verdict = "in-question"
		case t.Kind == KindPKa:
			s := get(t.Set)
			s.PKa, s.U = t.PKa, []float64{0.02}
		case t.Kind == KindFile && t.Expect != ExpectNothing:
			f.Files = append(f.Files, FoundFile{t.File, t.Expect})
		case t.Kind == KindSet:
			s := get(t.Set)
			switch t.Expect {
			case ExpectHeld:
				s.Verdict = "held"
			case ExpectNoted:
				s.Verdict = "stands-noted"
			case ExpectWaiting, ExpectLate:
				s.Waited = true
			case ExpectRevised:
				s.Revision = 2
			case ExpectAsk:
				s.Asked = true
			}
		}
	}
	for _, name := range order {
		f.Sets = append(f.Sets, *sets[name])
	}
	return f
}
