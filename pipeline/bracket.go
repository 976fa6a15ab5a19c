package pipeline

import (
	"cmp"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"pkvigil/db"
)

// States of a station: what its reference sets say of the measuring system.
const (
	stationPending = "pending" // not computed yet
	stationSpoiled = "spoiled" // failed by itself: says nothing of the system
	stationGood    = "good"
	stationFailed  = "failed"
)

// stationGap ends a station: references this far apart are two looks at the
// system, even in one slot.
const stationGap = 3 * time.Hour

// A timed set is a set with its result and the moment it was measured.
type timed struct {
	db.Measured
	at time.Time
}

// longestSet bounds the time one set takes: a scan that was repeated in the
// morning does not move its set there.
const longestSet = 2 * time.Hour

// timedSet finds the moment of a set: the middle of its scans where they say
// when, else the newest scan, else the arrival of its first file.
func timedSet(m db.Measured) timed {
	t := timed{m, m.Set.LastScanAt}
	switch {
	case !m.From.IsZero():
		t.at = m.From.Add(min(m.To.Sub(m.From), longestSet) / 2)
	case t.at.IsZero():
		t.at = m.Set.FirstSeen
	}
	return t
}

// A shift is how far one reference is from where it should be.
type shift struct {
	Reference string
	PKa       float64 // where it should be
	D, SD     float64 // observed minus that, and the usual scatter of one set
	Failed    bool
	Sentence  string
}

// A station is one look at the system: reference sets measured together.
type station struct {
	name   string // for keys: the slot, or the name of its first set
	night  string
	from   time.Time
	to     time.Time
	sets   []timed
	state  string
	shifts []shift // one per reference that says something
}

// stations groups the reference sets of an instrument, by time: sets of one
// slot belong together; without slots, those with no sample between them.
func stations(refs, samples []timed) []*station {
	byTime := func(a, b timed) int {
		return cmp.Or(a.at.Compare(b.at), cmp.Compare(a.Set.Key, b.Set.Key))
	}
	refs, samples = slices.Clone(refs), slices.Clone(samples)
	slices.SortFunc(refs, byTime)
	slices.SortFunc(samples, byTime)
	var out []*station
	for _, r := range refs {
		var last *station
		if len(out) > 0 {
			last = out[len(out)-1]
		}
		if last == nil || last.night != r.Set.Night || r.at.Sub(last.to) > stationGap || !sameStation(last, r, samples) {
			last = &station{night: r.Set.Night, from: r.at, name: cmp.Or(r.Set.Slot, r.Set.Name)}
			for _, o := range out {
				if o.night == last.night && o.name == last.name {
					last.name += "." + r.at.UTC().Format("1504")
					break
				}
			}
			out = append(out, last)
		}
		last.sets, last.to = append(last.sets, r), r.at
	}
	return out
}

func sameStation(s *station, r timed, samples []timed) bool {
	before := s.sets[len(s.sets)-1]
	if before.Set.Slot != "" || r.Set.Slot != "" {
		return before.Set.Slot == r.Set.Slot && before.Set.Run == r.Set.Run
	}
	return !slices.ContainsFunc(samples, func(x timed) bool { return x.at.After(s.to) && x.at.Before(r.at) })
}

// settle decides what a station says. Of several sets of one reference the
// last that can be judged counts: a repeated check replaces the first.
func (s *station) settle(judge func(timed) (shift, string)) {
	last := map[string]shift{}
	pending := false
	for _, x := range s.sets {
		v, state := judge(x)
		switch state {
		case stationGood, stationFailed:
			last[v.Reference] = v
		case stationPending:
			pending = true
		}
	}
	s.shifts = nil
	for _, v := range last {
		s.shifts = append(s.shifts, v)
	}
	slices.SortFunc(s.shifts, func(a, b shift) int { return cmp.Or(cmp.Compare(a.PKa, b.PKa), cmp.Compare(a.Reference, b.Reference)) })
	switch {
	case slices.ContainsFunc(s.shifts, func(v shift) bool { return v.Failed }):
		s.state = stationFailed
	case len(s.shifts) > 0:
		s.state = stationGood
	case pending:
		s.state = stationPending
	default:
		s.state = stationSpoiled
	}
}

// says is what a failed station says, in words.
func (s *station) says() string {
	var out []string
	for _, v := range s.shifts {
		if v.Failed {
			out = append(out, v.Sentence)
		}
	}
	return strings.Join(out, "; ")
}

// at interpolates the shifts of a station to a pKa: straight between
// references, constant outside them.
func (s *station) at(pka float64) (d, sd float64) {
	v := s.shifts
	if len(v) == 0 || math.IsNaN(pka) {
		return math.NaN(), math.NaN()
	}
	i := slices.IndexFunc(v, func(x shift) bool { return x.PKa >= pka })
	switch {
	case i < 0:
		return v[len(v)-1].D, v[len(v)-1].SD
	case i == 0:
		return v[0].D, v[0].SD
	}
	a, b := v[i-1], v[i]
	if b.PKa == a.PKa {
		return (a.D + b.D) / 2, math.Hypot(a.SD, b.SD) / 2
	}
	w := (pka - a.PKa) / (b.PKa - a.PKa)
	return (1-w)*a.D + w*b.D, math.Hypot((1-w)*a.SD, w*b.SD)
}

// A span is a bracket with what it was decided from.
type span struct {
	db.Bracket
	left, right *station // nearest judged ones; nil: none yet
	samples     []timed
}

// spans lays the samples of an instrument between its stations. A spoiled
// station bounds a span but says nothing: the next judged one counts in its
// place. A sample before the first station counts with that alone.
func spans(instrument string, st []*station, samples []timed) []span {
	if len(st) == 0 {
		return nil
	}
	out := make([]span, len(st)+1)
	for i := range out {
		b := &out[i]
		b.Instrument, b.State = instrument, "open"
		if i == 0 {
			b.Night, b.Key = st[0].night, instrument+"/"+st[0].night+"/before-"+st[0].name
		} else {
			b.Night, b.Key = st[i-1].night, instrument+"/"+st[i-1].night+"/after-"+st[i-1].name
		}
		for j := i - 1; j >= 0 && b.left == nil; j-- {
			if st[j].speaks() {
				b.left = st[j]
			}
		}
		for j := i; j < len(st) && b.right == nil && st[j].state != stationPending; j++ {
			if st[j].speaks() {
				b.right = st[j]
			}
		}
		b.OpenedBySet, b.ClosedBySet = b.left.first(), b.right.first()
		switch {
		case b.left.failed() || b.right.failed():
			b.State = stationFailed
		case b.right != nil:
			b.State = stationGood
		}
	}
	for _, x := range samples {
		i := 0
		for i < len(st) && x.at.After(st[i].from.Add(st[i].to.Sub(st[i].from)/2)) {
			i++
		}
		out[i].samples = append(out[i].samples, x)
		out[i].Sets = append(out[i].Sets, x.Set.ID)
	}
	for i := range out {
		slices.Sort(out[i].Sets)
		if run := commonRun(out[i].samples); run != "" {
			out[i].Run = run
		}
	}
	return slices.DeleteFunc(out, func(b span) bool { return len(b.samples) == 0 })
}

func commonRun(samples []timed) string {
	run := ""
	for i, x := range samples {
		if i > 0 && x.Set.Run != run {
			return ""
		}
		run = x.Set.Run
	}
	return run
}

func (s *station) speaks() bool { return s.state == stationGood || s.state == stationFailed }

func (s *station) failed() bool { return s != nil && s.state == stationFailed }

func (s *station) first() *int64 {
	if s == nil {
		return nil
	}
	id := s.sets[0].Set.ID
	return &id
}

// why says why a bracket failed.
func (b *span) why() string {
	var out []string
	for _, s := range []*station{b.left, b.right} {
		if s.failed() && !slices.Contains(out, s.says()) {
			out = append(out, s.says())
		}
	}
	return strings.Join(out, "; ")
}

// impact bounds what the failed checks of a bracket mean for a result: the
// larger of the failed sides, and its upper bound at 95 %.
func (b *span) impact(pka float64) (size, bound float64) {
	for _, s := range []*station{b.left, b.right} {
		if !s.failed() {
			continue
		}
		if d, sd := s.at(pka); !math.IsNaN(d) {
			size, bound = max(size, math.Abs(d)), max(bound, math.Abs(d)+1.645*sd)
		}
	}
	return size, bound
}

// A shutting is a reason to close an instrument.
type shutting struct {
	station *station
	reason  string
}

// shut looks for a reason to close an instrument in what was measured after it
// was last opened: two failed checks in a row, or one that displaces a result
// by more than twice its expanded uncertainty. A bracket is bad when the check
// that ends it fails, so two bad brackets in a row are two failed checks in a row.
func shut(st []*station, all []span, since time.Time) *shutting {
	var last *station
	for _, s := range st {
		if !s.speaks() || !s.from.After(since) {
			continue
		}
		if s.failed() && last.failed() {
			return &shutting{s, fmt.Sprintf("two checks in a row failed (%s; then %s)", last.says(), s.says())}
		}
		if s.failed() {
			for i := range all {
				b := &all[i]
				if b.left != s && b.right != s {
					continue
				}
				for _, x := range b.samples {
					if d, _ := s.at(x.PKa); math.Abs(d) > 2*x.Expanded {
						return &shutting{s, fmt.Sprintf("%s, which displaces %s by %.3f, more than twice its U of %.3f", s.says(), x.Set.Key, math.Abs(d), x.Expanded)}
					}
				}
			}
		}
		last = s
	}
	return nil
}
