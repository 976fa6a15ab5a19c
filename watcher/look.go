package watcher

import (
	"context"
	"fmt"
	"slices"
	"sync"
	"sync/atomic"
	"time"
)

// A Watcher looks at its roots. Look, Done and Run may be called from
// different goroutines; looks never overlap.
type Watcher struct {
	opt   Options
	turn  chan struct{} // held by the one Look that is going on; guards roots' outer fields
	roots []*root
	acked atomic.Int64 // files acknowledged so far: Run asks whether offering more is any use
}

// New makes a watcher. Nothing is read until the first Look.
func New(roots []Root, opt Options) *Watcher {
	if opt.MaxFiles <= 0 {
		opt.MaxFiles = 1000
	}
	if opt.AskAgain <= 0 {
		opt.AskAgain = askAgain
	}
	if opt.Answer <= 0 {
		opt.Answer = 30 * time.Second
	}
	w := &Watcher{opt: opt, turn: make(chan struct{}, 1)}
	for _, r := range roots {
		w.roots = append(w.roots, &root{Root: r, opt: opt, disk: localDisk{}, entries: map[string]*entry{}})
	}
	return w
}

// Done acknowledges a file of a Report after what came of it was committed.
// It never waits for a share.
func (w *Watcher) Done(rootName, path string, size int64, mod time.Time) {
	for _, r := range w.roots {
		if r.Name == rootName {
			r.mu.Lock()
			r.acks = append(r.acks, ack{path, Stamp{size, mod}})
			r.mu.Unlock()
			w.acked.Add(1)
			return
		}
	}
}

// Recall has Options.Known asked again before the next look at a root: what
// another process took in meanwhile is then not offered here.
func (w *Watcher) Recall(rootName string) {
	for _, r := range w.roots {
		if r.Name == rootName {
			r.recall.Store(true)
		}
	}
}

// Look looks at every root once, in parallel. now is the time of the look: a
// replay passes its own. A file is offered in Report.Files at each look until
// Done acknowledges it. A root that does not answer within Options.Answer is
// reported so, stays in the hands of its unfinished look, and costs the other
// roots nothing more. The error is that of ctx.
func (w *Watcher) Look(ctx context.Context, now time.Time) (Report, error) {
	select {
	case w.turn <- struct{}{}:
		defer func() { <-w.turn }()
	case <-ctx.Done():
		return Report{}, ctx.Err()
	}
	rep := Report{At: now, States: make([]State, len(w.roots))}
	for _, r := range w.roots {
		r.begin(ctx, now, &rep)
	}
	patience := time.NewTimer(w.opt.Answer)
	defer patience.Stop()
	expired := false
	offers := make([][]File, len(w.roots))
	for i, r := range w.roots {
		o, ok := r.await(ctx, patience.C, &expired)
		for ok && o.aborted && ctx.Err() == nil { // what is left of an earlier Look that was called off
			r.begin(ctx, now, &rep)
			o, ok = r.await(ctx, patience.C, &expired)
		}
		if err := ctx.Err(); err != nil {
			return Report{}, err
		}
		if !ok {
			rep.States[i] = r.publish(now, false, fmt.Sprintf("Folder %s (%s) does not answer.", r.Name, r.Path))
			continue
		}
		o.addTo(&rep)
		offers[i] = o.files
		rep.States[i] = r.merge(now, o)
	}
	rep.Files = takeTurns(offers, w.opt.MaxFiles)
	w.leftOver(&rep, offers)
	return rep, nil
}

// leftOver tells the roots whose settled files did not all fit into the report.
func (w *Watcher) leftOver(rep *Report, offers [][]File) {
	given := map[string]int{}
	for _, f := range rep.Files {
		given[f.Root]++
	}
	for i, r := range w.roots {
		if r.running != nil {
			continue
		}
		r.more = r.more || given[r.Name] < len(offers[i])
		rep.More = rep.More || r.more
	}
}

// takeTurns takes the newest file of each root, then the next newest of each,
// until max are taken: a backlog or a fast clock in one root cannot push
// tonight's files of another back.
func takeTurns(offers [][]File, max int) []File {
	var out []File
	for rank := 0; len(out) < max; rank++ {
		any := false
		for _, files := range offers {
			if rank < len(files) && len(out) < max {
				out = append(out, files[rank])
				any = true
			}
		}
		if !any {
			break
		}
	}
	return out
}

// root is one root with what is known of it. The fields of the second group
// belong to the look that is going on at this root, which may outlive the Look
// that began it; running says whose turn it is.
type root struct {
	Root
	opt  Options
	disk disk

	mu   sync.Mutex // guards acks and dirs only
	acks []ack
	dirs []string // directories found by the last sweep, for the event watches

	events atomic.Bool // event watches are in place
	recall atomic.Bool // Known is to be asked again

	running chan outcome // the unfinished look; nil: none, and the fields below belong to Look
	state   State
	more    bool // settled files are left from the last look

	entries map[string]*entry
	loaded  bool
	sweeps  int         // complete sweeps so far
	sweptAt time.Time   // now of the last one
	seen    tally       // of the last one
	ready   []readyFile // settled at the last sweep, newest first
	waiting []Wait      // of the last sweep
}

// readyFile is a settled file; the pointer holds until the next sweep.
type readyFile struct {
	path string
	*entry
}

// ack is one acknowledged file.
type ack struct {
	path  string
	stamp Stamp
}

// entry is one file of a root.
type entry struct {
	stamp   Stamp
	sweep   int      // last sweep that saw it
	taken   bool     // acknowledged with this stamp
	calm    int64    // since when it has been taken unchanged, Unix nanoseconds
	asked   int64    // when size and time were last asked
	pending *pending // nil when taken
}

// pending is a file on its way to being settled.
type pending struct {
	first  time.Time // first seen
	since  time.Time // first seen with this stamp
	sweep  int       // sweep of since
	denied time.Time // first failure to open; zero: none
	retry  time.Time // do not try to open before
	tries  int
	why    string // of the last failure
}

// outcome is what one look at one root found.
type outcome struct {
	aborted  bool // ctx ended; nothing was concluded
	visible  bool
	why      string
	files    []File
	more     bool
	next     time.Time
	changed  []Gone
	vanished []Gone
	renamed  []Renamed
	waits    []Wait
}

// tally counts what a sweep saw.
type tally struct {
	files, settling, stuck, litter, skipped int
	newest                                  time.Time
}

func (o outcome) addTo(rep *Report) {
	rep.Changed = append(rep.Changed, o.changed...)
	rep.Vanished = append(rep.Vanished, o.vanished...)
	rep.Renamed = append(rep.Renamed, o.renamed...)
	rep.Waits = append(rep.Waits, o.waits...)
	if !o.next.IsZero() && (rep.Next.IsZero() || o.next.Before(rep.Next)) {
		rep.Next = o.next
	}
}

// begin starts a look at the root unless an earlier one still hangs. What a
// late one found meanwhile is not lost; its files are offered again by the new one.
func (r *root) begin(ctx context.Context, now time.Time, rep *Report) {
	if r.running != nil {
		select {
		case late := <-r.running:
			late.next = time.Time{}
			late.addTo(rep)
		default:
			return
		}
	}
	ch := make(chan outcome, 1)
	r.running = ch
	go func() { ch <- r.look(ctx, now) }()
}

// await waits for the root's look, until the common patience ends.
func (r *root) await(ctx context.Context, patience <-chan time.Time, expired *bool) (outcome, bool) {
	if *expired {
		select {
		case o := <-r.running:
			r.running = nil
			return o, true
		default:
			return outcome{}, false
		}
	}
	select {
	case o := <-r.running:
		r.running = nil
		return o, true
	case <-patience:
		*expired = true
		return outcome{}, false
	case <-ctx.Done():
		return outcome{}, false
	}
}

// merge takes over the result of a finished look.
func (r *root) merge(now time.Time, o outcome) State {
	r.more = o.more
	s := r.publish(now, o.visible, o.why)
	s.LookedAt = now
	s.Newest = r.seen.newest
	s.Files, s.Settling, s.Stuck, s.Litter, s.Skipped = r.seen.files, r.seen.settling, r.seen.stuck, r.seen.litter, r.seen.skipped
	s.Events = r.events.Load()
	r.state = s
	return s
}

// publish notes visibility and keeps the moment it began.
func (r *root) publish(now time.Time, visible bool, why string) State {
	if r.state.Root == "" || r.state.Visible != visible {
		r.state.Since = now
	}
	r.state.Root, r.state.Visible, r.state.Why = r.Name, visible, why
	return r.state
}

// directories gives what the last sweep found, for the event watches.
func (r *root) directories() []string {
	r.mu.Lock()
	defer r.mu.Unlock()
	return slices.Clone(r.dirs)
}
