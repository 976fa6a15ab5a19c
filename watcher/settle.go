package watcher

import (
	"cmp"
	"context"
	"fmt"
	"path"
	"path/filepath"
	"slices"
	"strings"
	"time"
)

// settle collects what stands still, newest first.
func (r *root) settle(now time.Time, l *listing) {
	r.ready = r.ready[:0]
	r.seen = l.tally
	for p, e := range r.entries {
		if e.taken || e.sweep != r.sweeps {
			continue
		}
		switch {
		case !e.pending.denied.IsZero(), e.stamp.Size == 0 && now.Sub(e.pending.since) >= emptyLong:
			r.seen.stuck++
			if e.stamp.Size > 0 {
				r.ready = append(r.ready, readyFile{p, e})
			}
		case r.still(p, e, now):
			r.ready = append(r.ready, readyFile{p, e})
		default:
			r.seen.settling++
		}
	}
	slices.SortFunc(r.ready, func(a, b readyFile) int {
		return cmp.Or(b.stamp.Mod.Compare(a.stamp.Mod), cmp.Compare(a.path, b.path))
	})
}

// still reports whether a file has settled, or may be offered early.
func (r *root) still(p string, e *entry, now time.Time) bool {
	if e.stamp.Size == 0 {
		return false // an empty file is one that somebody is about to fill
	}
	if e.pending.sweep < r.sweeps && now.Sub(e.pending.since) >= r.Settle {
		return true
	}
	return matchesAny(path.Base(p), r.EndMarks)
}

// offer opens settled files, newest first, until the report of this root is full.
func (r *root) offer(ctx context.Context, now time.Time, o *outcome) {
	left := 0
	for _, f := range r.ready {
		p, e := f.path, f.entry
		if e.taken || now.Before(e.pending.retry) || !r.still(p, e, now) {
			continue
		}
		if len(o.files) >= r.opt.MaxFiles || ctx.Err() != nil {
			left++
			continue
		}
		if r.opens(p, e, now) {
			o.files = append(o.files, r.file(p, e, now))
		}
	}
	o.more = left > 0
	r.nextLook(now, o)
}

func (r *root) abs(p string) string { return filepath.Join(r.Path, filepath.FromSlash(p)) }

func (r *root) file(p string, e *entry, now time.Time) File {
	early := e.pending.sweep == r.sweeps || now.Sub(e.pending.since) < r.Settle
	return File{Root: r.Name, Path: p, Abs: r.abs(p), Size: e.stamp.Size, ModTime: e.stamp.Mod, Seen: e.pending.first, Settled: now, Early: early}
}

// opens tries to open a file that stands still. A file that cannot be opened
// is tried again after growing pauses; one that is different by now begins to
// settle anew.
func (r *root) opens(p string, e *entry, now time.Time) bool {
	fi, err := r.disk.probe(r.abs(p))
	d := e.pending
	if err != nil {
		if d.denied.IsZero() {
			d.denied = now
		}
		d.tries++
		d.why = reason(err)
		d.retry = now.Add(min(5*time.Minute, max(r.Settle, time.Second)<<min(d.tries-1, 10)))
		return false
	}
	d.denied, d.tries, d.why = time.Time{}, 0, ""
	if s := stampOf(fi); !s.same(e.stamp) {
		e.stamp = s
		d.since, d.sweep = now, r.sweeps
		return false
	}
	return true
}

// nextLook finds when the passing of time alone may settle something.
func (r *root) nextLook(now time.Time, o *outcome) {
	for _, e := range r.entries {
		d := e.pending
		if e.taken || d == nil || e.stamp.Size == 0 || e.sweep != r.sweeps {
			continue
		}
		due := d.since.Add(r.Settle)
		if due.Before(d.retry) {
			due = d.retry
		}
		if d.sweep < r.sweeps && !due.After(now) {
			continue // settled and offered, or left for want of room
		}
		if !due.After(now) {
			due = now.Add(time.Millisecond) // settle = 0 still needs a second look
		}
		if o.next.IsZero() || due.Before(o.next) {
			o.next = due
		}
	}
}

// waits says why files have not settled for longer than is usual.
func (r *root) waits(now time.Time, l *listing) []Wait {
	var out []Wait
	for dir, why := range l.unread {
		out = append(out, Wait{Root: r.Name, Path: dir, Since: now, Why: fmt.Sprintf("Folder %s below %s cannot be read: %s.", dir, r.Name, why)})
	}
	for p, e := range r.entries {
		d := e.pending
		if e.taken || d == nil || e.sweep != r.sweeps {
			continue
		}
		w := Wait{Root: r.Name, Path: p, Since: d.first, Size: e.stamp.Size}
		switch {
		case !d.denied.IsZero():
			w.Since = d.denied
			w.Why = fmt.Sprintf("Cannot read %s for %s (%s).", p, span(now.Sub(d.denied)), d.why)
		case e.stamp.Size == 0 && now.Sub(d.since) >= emptyLong:
			w.Why = fmt.Sprintf("%s is empty.", p)
		case now.Sub(d.first) >= growingLong && now.Sub(d.since) < r.Settle:
			w.Why = fmt.Sprintf("%s is still growing (%d bytes); waiting.", p, e.stamp.Size)
		default:
			continue
		}
		out = append(out, w)
	}
	for _, p := range l.links {
		out = append(out, Wait{Root: r.Name, Path: p, Since: now, Why: fmt.Sprintf("%s is a link and is not followed; declare its target as a folder of its own.", p)})
	}
	slices.SortStableFunc(out, func(a, b Wait) int { return cmp.Or(a.Since.Compare(b.Since), strings.Compare(a.Path, b.Path)) })
	return out[:min(len(out), maxWaits)]
}

// span writes a length of time as people say it.
func span(d time.Duration) string {
	switch {
	case d < time.Minute:
		return fmt.Sprintf("%d s", int(d.Seconds()))
	case d < 2*time.Hour:
		return fmt.Sprintf("%d min", int(d.Minutes()))
	}
	return fmt.Sprintf("%d h", int(d.Hours()))
}
