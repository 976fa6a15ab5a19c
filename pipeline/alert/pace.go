package alert

import (
	"slices"
	"time"
)

// A Waiting message has been decided and not yet sent; or, in a list of what
// was sent, one that was.
type Waiting struct {
	Key string
	Why Why
	At  time.Time // decided, or sent
}

// A Plan says what to do with waiting messages now; its numbers are indices.
type Plan struct {
	Send   []int     // singly
	Digest []int     // together in one summary
	Merged []int     // nothing: a later one on the same key says it too
	Hold   []int     // not yet
	Why    []Why     // parallel to Hold
	Next   time.Time // when to look again; zero if nothing waits
}

// Pace applies the caps to the messages waiting for one person or sink: one per
// key in rules.PerCase, rules.PerDay in 24 hours, then one summary in 24 hours.
// sent lists what went to the same place in the last day at least; a summary is
// listed with WhyDigest. Test messages pass.
func Pace(waiting, sent []Waiting, at time.Time, rules Rules) Plan {
	rules = rules.filled()
	var p Plan
	singles, digest := 0, time.Time{}
	for _, s := range sent {
		switch {
		case at.Sub(s.At) >= 24*time.Hour || s.Why == WhyTest:
		case s.Why == WhyDigest:
			digest = later(digest, s.At)
		default:
			singles++
		}
	}
	order := make([]int, len(waiting))
	for i := range order {
		order[i] = i
	}
	slices.SortStableFunc(order, func(a, b int) int { return waiting[a].At.Compare(waiting[b].At) })
	newest := map[string]int{}
	for _, i := range order {
		if waiting[i].Why != WhyTest {
			newest[waiting[i].Key] = i
		}
	}
	hold := func(i int, why Why, until time.Time) {
		p.Hold, p.Why = append(p.Hold, i), append(p.Why, why)
		if p.Next.IsZero() || until.Before(p.Next) {
			p.Next = until
		}
	}
	for _, i := range order {
		w := waiting[i]
		switch free := lastOn(w.Key, sent).Add(rules.PerCase); {
		case w.Why == WhyTest:
			p.Send = append(p.Send, i)
		case newest[w.Key] != i:
			p.Merged = append(p.Merged, i)
		case free.After(at):
			hold(i, WhyPaced, free)
		case singles < rules.PerDay:
			p.Send = append(p.Send, i)
			singles++
		case digest.IsZero():
			p.Digest = append(p.Digest, i)
		default:
			hold(i, WhyFull, digest.Add(24*time.Hour))
		}
	}
	return p
}

func lastOn(key string, sent []Waiting) time.Time {
	var t time.Time
	for _, s := range sent {
		if s.Key == key && s.Why != WhyTest {
			t = later(t, s.At)
		}
	}
	return t
}

func later(a, b time.Time) time.Time {
	if b.After(a) {
		return b
	}
	return a
}
