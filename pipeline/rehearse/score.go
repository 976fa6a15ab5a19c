package rehearse

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// A ScoreCard compares what was reported with what was so.
type ScoreCard struct {
	Lines []ScoreLine // one per key, in order of the alphabet

	Episodes, EpisodesFound int         // disturbances of the measuring system
	RightCause              int         // of the found ones: cause and resource both right in first place
	Delays                  []Delay     // one per episode found
	FalseCases              []FoundCase // cases that fit no episode
	MessagesPerEpisode      float64     // opening messages, mean over the episodes found
	FalseHolds              []string    // sets held although nothing reaches them
	CleanSets               int         // sets that nothing reaches and that have a verdict
	Covered, Intervals      int         // standing results of clean sets; of these pKa +- U holds the true constant
	CoveredAll, AllStanding int         // the same over every standing result
	HarmSets, HarmCaught    int         // results displaced by more than U/3 by an episode; of these not plainly standing
	FalseFiles              []string    // files refused or parked although nothing is wrong with them
}

// A ScoreLine counts one key.
type ScoreLine struct {
	Key      string
	Expect   string
	Injected int
	Found    int
	Missed   []string // what was missed
}

// A Delay says how long an episode stayed unseen.
type Delay struct {
	Key      string
	Resource string
	From     int // first night in which something was wrong
	Opened   int // night in which the case was opened
	Nights   int // Opened - From
}

// Score compares. Truths of expectation "nothing" count neither for nor
// against, and a case that tells one is not a false one. A case matches an episode when its resource is one of the
// episode's (any, if the episode names none), its cause or one of its further
// candidates begins with an accepted class, and it was opened
// between the episode's first night and two nights after its last.
func Score(truth []Truth, found Found) ScoreCard {
	sc := &scorer{truth: truth, sets: map[string]FoundSet{}, files: map[string]string{}, lines: map[string]*ScoreLine{}, taken: make([]bool, len(found.Cases)), found: found}
	for _, s := range found.Sets {
		sc.sets[s.Set] = s
	}
	for _, f := range found.Files {
		sc.files[f.File] = f.State
	}
	for _, expected := range []bool{true, false} {
		for _, t := range truth {
			if t.Kind == KindEpisode && (t.Expect != ExpectNothing) == expected {
				sc.episode(t)
			}
		}
	}
	for _, t := range truth {
		switch t.Kind {
		case KindSet, KindFile:
			sc.count(t, sc.seen(t))
		case KindAbsence:
			sc.count(t, sc.absence(t))
		case KindPKa:
			sc.coverage(t)
		case KindHarm:
			sc.harm(t)
		}
	}
	return sc.finish()
}

type scorer struct {
	truth    []Truth
	found    Found
	sets     map[string]FoundSet
	files    map[string]string
	lines    map[string]*ScoreLine
	taken    []bool // cases that belong to an episode
	messages int
	card     ScoreCard
}

// count enters one expectation that was met or missed.
func (s *scorer) count(t Truth, met bool) {
	if t.Expect == ExpectNothing {
		return
	}
	key := t.Key + "\x00" + t.Expect
	l := s.lines[key]
	if l == nil {
		l = &ScoreLine{Key: t.Key, Expect: t.Expect}
		s.lines[key] = l
	}
	l.Injected++
	if met {
		l.Found++
		return
	}
	what := t.Set
	if t.Kind == KindFile {
		what = t.File
	}
	if what == "" {
		what = fmt.Sprintf("%s night %d", t.Resource, t.Night)
	}
	l.Missed = append(l.Missed, what)
}

// episode looks for cases that name it.
func (s *scorer) episode(t Truth) {
	if t.Expect == ExpectNothing {
		s.claim(t)
		return
	}
	s.card.Episodes++
	best := -1
	for i, c := range s.found.Cases {
		if s.taken[i] || !fitsCase(t, c) {
			continue
		}
		s.taken[i] = true
		s.messages += c.Openings
		if best < 0 || c.Opened < s.found.Cases[best].Opened {
			best = i
		}
	}
	s.count(t, best >= 0)
	if best < 0 {
		return
	}
	c := s.found.Cases[best]
	s.card.EpisodesFound++
	if fitsCause(t, c.Cause) {
		s.card.RightCause++
	}
	s.card.Delays = append(s.card.Delays, Delay{t.Key, t.Resource, t.From, c.Opened, c.Opened - t.From})
}

// claim marks the cases that tell a truth nobody asked for, and says whether there are any.
func (s *scorer) claim(t Truth) bool {
	found := false
	for i, c := range s.found.Cases {
		if !s.taken[i] && fitsCase(t, c) {
			s.taken[i], found = true, true
		}
	}
	return found
}

func fitsCase(t Truth, c FoundCase) bool {
	return c.Opened >= t.From && c.Opened <= t.To+2 && fitsResource(t, c.Resource) &&
		(fitsCause(t, c.Cause) || slices.ContainsFunc(c.Others, func(o string) bool { return fitsCause(t, o) }))
}

func fitsResource(t Truth, name string) bool {
	return t.Resource == "" || name == t.Resource || slices.Contains(t.Resources, name)
}

func fitsCause(t Truth, cause string) bool {
	return slices.ContainsFunc(t.Accept, func(a string) bool { return strings.HasPrefix(cause, a) })
}

// seen says whether the program made of a set or file what it ought to.
func (s *scorer) seen(t Truth) bool {
	set := s.sets[t.Set]
	switch t.Expect {
	case ExpectHeld:
		return set.Verdict == "held"
	case ExpectNoted:
		return set.Verdict == "held" || set.Verdict == "stands-noted" || set.Verdict == "in-question" || len(set.LeftOut) > 0
	case ExpectWaiting:
		return set.Waited || set.Verdict == "waiting"
	case ExpectLate:
		return set.Waited && len(set.PKa) > 0
	case ExpectRevised:
		return set.Revision > 1
	case ExpectAsk:
		return s.claim(t) || set.Asked
	case ExpectRefused, ExpectParked, ExpectTwin:
		return s.files[t.File] == t.Expect
	}
	return false
}

func (s *scorer) absence(t Truth) bool {
	return slices.ContainsFunc(s.found.Absences, func(a FoundAbsence) bool {
		return a.Key == t.Key && a.Night == t.Night && (t.Resource == "" || a.Resource == t.Resource)
	})
}

// coverage asks whether the stated interval holds the true constant.
func (s *scorer) coverage(t Truth) {
	set, ok := s.sets[t.Set]
	if !ok || set.Verdict == "" {
		return
	}
	if t.Clean {
		s.card.CleanSets++
		if set.Verdict == "held" || set.Verdict == "no number" {
			s.card.FalseHolds = append(s.card.FalseHolds, t.Set)
		}
	}
	if set.Verdict != "stands" && set.Verdict != "stands-noted" {
		return
	}
	for j, pka := range t.PKa {
		if j >= len(set.PKa) || j >= len(set.U) {
			break
		}
		in := 0
		if math.Abs(set.PKa[j]-pka) <= set.U[j] {
			in = 1
		}
		s.card.AllStanding++
		s.card.CoveredAll += in
		if t.Clean {
			s.card.Intervals++
			s.card.Covered += in
		}
	}
}

// harm asks whether a displaced result was kept from standing unremarked.
func (s *scorer) harm(t Truth) {
	set, ok := s.sets[t.Set]
	if !ok || len(set.U) == 0 || math.Abs(t.Size) <= set.U[0]/3 {
		return
	}
	s.card.HarmSets++
	if set.Verdict != "stands" || set.Corrected {
		s.card.HarmCaught++
	}
}

// finish sorts the lines and counts what was accused without reason.
func (s *scorer) finish() ScoreCard {
	c := &s.card
	for _, l := range s.lines {
		c.Lines = append(c.Lines, *l)
	}
	slices.SortFunc(c.Lines, func(a, b ScoreLine) int {
		return strings.Compare(a.Key+"\x00"+a.Expect, b.Key+"\x00"+b.Expect)
	})
	for i, k := range s.found.Cases {
		if !s.taken[i] {
			c.FalseCases = append(c.FalseCases, k)
		}
	}
	if c.EpisodesFound > 0 {
		c.MessagesPerEpisode = float64(s.messages) / float64(c.EpisodesFound)
	}
	wrong := map[string]bool{}
	for _, t := range s.truth {
		if t.File != "" {
			wrong[t.File] = true
		}
	}
	for _, f := range s.found.Files {
		if (f.State == ExpectRefused || f.State == ExpectParked) && !wrong[f.File] {
			c.FalseFiles = append(c.FalseFiles, f.File)
		}
	}
	slices.Sort(c.FalseFiles)
	slices.Sort(c.FalseHolds)
	return *c
}

// Injected, Found and Missed are the totals over the lines.
func (c ScoreCard) Injected() (n int) {
	for _, l := range c.Lines {
		n += l.Injected
	}
	return n
}

// Found is how many of the injected faults the program reported as it ought to.
func (c ScoreCard) Found() (n int) {
	for _, l := range c.Lines {
		n += l.Found
	}
	return n
}

// Missed is how many it did not.
func (c ScoreCard) Missed() int { return c.Injected() - c.Found() }

// FalselyAccused counts cases, holds and files that nothing justifies.
func (c ScoreCard) FalselyAccused() int {
	return len(c.FalseCases) + len(c.FalseHolds) + len(c.FalseFiles)
}

// String is the card for people.
func (c ScoreCard) String() string {
	var b strings.Builder
	fmt.Fprintf(&b, "%d faults injected: %d found, %d missed; %d falsely accused\n", c.Injected(), c.Found(), c.Missed(), c.FalselyAccused())
	for _, l := range c.Lines {
		fmt.Fprintf(&b, "  %-18s %-9s %3d of %3d", l.Key, l.Expect, l.Found, l.Injected)
		if len(l.Missed) > 0 {
			shown := l.Missed[:min(3, len(l.Missed))]
			fmt.Fprintf(&b, "   missed: %s", strings.Join(shown, ", "))
			if more := len(l.Missed) - len(shown); more > 0 {
				fmt.Fprintf(&b, " and %d more", more)
			}
		}
		b.WriteByte('\n')
	}
	fmt.Fprintf(&b, "disturbances of the system: %d, found %d, right cause first %d, opening messages per disturbance %.1f\n",
		c.Episodes, c.EpisodesFound, c.RightCause, c.MessagesPerEpisode)
	for _, d := range c.Delays {
		fmt.Fprintf(&b, "  %-18s %-8s began night %d, case in night %d: %d nights later\n", d.Key, d.Resource, d.From, d.Opened, d.Nights)
	}
	fmt.Fprintf(&b, "cases without a reason: %d\n", len(c.FalseCases))
	for _, k := range c.FalseCases {
		fmt.Fprintf(&b, "  %s on %s, opened night %d\n", k.Cause, k.Resource, k.Opened)
	}
	fmt.Fprintf(&b, "sets held without a reason: %d of %d\n", len(c.FalseHolds), c.CleanSets)
	fmt.Fprintf(&b, "files accused without a reason: %d\n", len(c.FalseFiles))
	fmt.Fprintf(&b, "stated intervals that hold the true constant: %s of undisturbed results, %s of all that stand\n",
		share(c.Covered, c.Intervals), share(c.CoveredAll, c.AllStanding))
	fmt.Fprintf(&b, "results displaced by more than a third of U: %d, not left standing unremarked %d\n", c.HarmSets, c.HarmCaught)
	return b.String()
}

func share(k, n int) string {
	if n == 0 {
		return "none"
	}
	return fmt.Sprintf("%d of %d (%.1f %%)", k, n, 100*float64(k)/float64(n))
}
