package watcher

import (
	"context"
	"fmt"
	"time"
)

const (
	quiet   = 200 * time.Millisecond // a burst of events is over when none came for so long
	longest = 2 * time.Second        // and is answered after so long in any case
	// duty bounds the share of time spent listing: after a look that took t, the
	// next one comes no sooner than duty*t.
	duty = 4
)

// RunOptions steer Run.
type RunOptions struct {
	Every time.Duration    // longest time between two looks; 0: 15 s
	Now   func() time.Time // clock of the looks; nil: time.Now
	Poll  bool             // do not ask the operating system for events
	Wake  <-chan struct{}  // further reasons to look soon; may be nil
}

// Run looks until ctx ends: at once, soon after events, on overflow of their
// queue, on the timer, and as soon as something may settle. Events are hints
// only; where none can be had the timer goes on alone. handle gets every
// report; an error of it ends Run and is returned, so a handler that merely
// could not commit returns nil and leaves the files unacknowledged: they come
// again. The error is handle's or ctx's.
func (w *Watcher) Run(ctx context.Context, o RunOptions, handle func(context.Context, Report) error) error {
	if o.Every <= 0 {
		o.Every = 15 * time.Second
	}
	if o.Now == nil {
		o.Now = time.Now
	}
	h := newHints()
	defer h.close()
	for {
		began := time.Now()
		acked := w.acked.Load()
		rep, err := w.Look(ctx, o.Now())
		if err != nil {
			return err
		}
		took := time.Since(began)
		if !o.Poll {
			for _, r := range w.roots {
				h.follow(r)
			}
		}
		if err := handle(ctx, rep); err != nil {
			return fmt.Errorf("handling the look of %s: %w", rep.At.Format(time.RFC3339), err)
		}
		if rep.More && w.acked.Load() > acked {
			continue // a backlog that is being worked off
		}
		if !pause(ctx, took, o.wait(rep, took), h.wake, o.Wake) {
			return ctx.Err()
		}
	}
}

// wait is how long to rest when nothing calls.
func (o RunOptions) wait(rep Report, took time.Duration) time.Duration {
	d := o.Every
	if !rep.Next.IsZero() {
		d = min(d, max(rep.Next.Sub(rep.At), 0))
	}
	return max(d, min(duty*took, o.Every))
}

// pause waits for the timer or for the end of a burst of wake-ups, never less
// than duty allows. It returns false when ctx ends.
func pause(ctx context.Context, took, wait time.Duration, hints, others <-chan struct{}) bool {
	soonest := time.Now().Add(duty * took)
	timer := time.NewTimer(wait)
	defer timer.Stop()
	end := time.Now().Add(wait)
	for woken := false; ; {
		select {
		case <-ctx.Done():
			return false
		case <-timer.C:
			return true
		case <-hints:
		case <-others:
		}
		now := time.Now()
		if latest := now.Add(longest); !woken && latest.Before(end) {
			end = latest
		}
		woken = true
		// Each further event puts the look off by the quiet time, up to the longest.
		due := now.Add(quiet)
		if due.After(end) {
			due = end
		}
		if due.Before(soonest) {
			due = soonest
		}
		timer.Reset(due.Sub(now))
	}
}
