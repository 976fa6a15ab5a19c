package watcher

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"golang.org/x/text/unicode/norm"
)

const (
	// sweepStands is how long a sweep is worked off before the folder is listed
	// again, while settled files of it are left: listing 200,000 names for every
	// thousand files would double the work, and longer would keep tonight's
	// files waiting behind old ones.
	sweepStands = 10 * time.Second
	// emptied is the number of files whose disappearance all at once is taken
	// for a lost share rather than for tidying, where no marker file can tell.
	emptied = 5
	// deepest is the greatest depth of directories below a root.
	deepest = 64
	// maxWaits bounds Report.Waits per root.
	maxWaits = 100
	// growingLong and emptyLong are when waiting becomes worth a sentence.
	growingLong = 30 * time.Minute
	emptyLong   = time.Minute
	// A file that was taken in and has stood unchanged for calmAfter is asked
	// for its size and time every askAgain only; its name is looked for in each
	// sweep. Asking is what costs on a network share: an archive of 200,000
	// files would keep it busy for ever.
	calmAfter = time.Hour
	askAgain  = 5 * time.Minute
)

// listing is what a sweep of the directories found, before it is compared with
// what was known.
type listing struct {
	files  map[string]found
	dirs   []string          // absolute
	unread map[string]string // relative directory -> why it could not be read
	links  []string
	tally
}

// found is a file of a listing; asked says that the stamp is of now and not
// carried over.
type found struct {
	Stamp
	asked bool
}

// look is one look at the root: acknowledgements, visibility, sweep, settling, offers.
func (r *root) look(ctx context.Context, now time.Time) outcome {
	var o outcome
	o.changed = r.acknowledge(now)
	known, err := r.load(ctx)
	if err != nil {
		o.why = fmt.Sprintf("Folder %s waits: what was taken in earlier cannot be asked (%v).", r.Name, err)
		return o
	}
	if o.why = r.blind(); o.why != "" {
		return o
	}
	since := now.Sub(r.sweptAt)
	if !(r.more && known == nil && since >= 0 && since < sweepStands) {
		l, err := r.list(ctx, now)
		switch {
		case ctx.Err() != nil:
			o.aborted = true
			return o
		case err != nil:
			o.why = fmt.Sprintf("Folder %s (%s) cannot be read: %s.", r.Name, r.Path, reason(err))
			return o
		case len(l.files) == 0 && r.MarkerFile == "" && r.present() >= emptied:
			o.why = fmt.Sprintf("Folder %s (%s) is empty although it held %d files; its share may not be mounted. A marker file (marker_file) would tell.",
				r.Name, r.Path, r.present())
			return o
		}
		r.compare(now, l, &o)
		r.takenElsewhere(known, now)
		r.settle(now, l)
		r.waiting = r.waits(now, l)
	}
	o.visible = true
	o.waits = r.waiting
	r.offer(ctx, now, &o)
	return o
}

// load asks what was taken in before: at the first look, and when told to
// recall. What a recall gives is returned for takenElsewhere.
func (r *root) load(ctx context.Context) (map[string]Stamp, error) {
	recall := r.recall.Swap(false)
	if (r.loaded && !recall) || r.opt.Known == nil {
		r.loaded = true
		return nil, nil
	}
	known, err := r.opt.Known(ctx, r.Name)
	if err != nil {
		r.recall.Store(recall)
		return nil, err
	}
	if r.loaded {
		return known, nil
	}
	for p, s := range known {
		if e := r.entries[p]; e == nil { // Done may have been quicker
			r.entries[p] = &entry{stamp: s, taken: true}
		}
	}
	r.loaded = true
	return nil, nil
}

// takenElsewhere acknowledges what another process took in with the stamp it has now.
func (r *root) takenElsewhere(known map[string]Stamp, now time.Time) {
	for p, s := range known {
		if e := r.entries[p]; e != nil && !e.taken && e.stamp.same(s) {
			e.take(now)
		}
	}
}

func (e *entry) take(now time.Time) {
	e.taken, e.pending, e.calm = true, nil, now.UnixNano()
}

// acknowledge applies what Done said. A file that changed after it was offered
// keeps settling and is reported as changed.
func (r *root) acknowledge(now time.Time) []Gone {
	r.mu.Lock()
	acks := r.acks
	r.acks = nil
	r.mu.Unlock()
	var changed []Gone
	for _, a := range acks {
		e := r.entries[a.path]
		switch {
		case e == nil:
			r.entries[a.path] = &entry{stamp: a.stamp, taken: true, sweep: r.sweeps, calm: now.UnixNano()}
		case e.stamp.same(a.stamp):
			e.take(now)
		default:
			changed = append(changed, Gone{Root: r.Name, Path: a.path, Stamp: a.stamp, Taken: true})
		}
	}
	return changed
}

// blind says why the root cannot be seen, "" when it can.
func (r *root) blind() string {
	// The root itself may be a link: that is how shares are often given a stable name.
	fi, err := r.disk.lstat(r.Path + string(filepath.Separator) + ".")
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return fmt.Sprintf("Folder %s (%s) is not there.", r.Name, r.Path)
	case err != nil:
		return fmt.Sprintf("Folder %s (%s) cannot be reached: %s.", r.Name, r.Path, reason(err))
	case !fi.IsDir():
		return fmt.Sprintf("Folder %s (%s) is no folder.", r.Name, r.Path)
	case r.MarkerFile == "":
		return ""
	}
	_, err = r.disk.lstat(filepath.Join(r.Path, filepath.FromSlash(r.MarkerFile)))
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return fmt.Sprintf("Folder %s (%s) is not visible: its marker file %s is not there, so its share is probably not mounted.", r.Name, r.Path, r.MarkerFile)
	case err != nil:
		return fmt.Sprintf("Folder %s (%s) is not visible: its marker file %s cannot be reached: %s.", r.Name, r.Path, r.MarkerFile, reason(err))
	}
	return ""
}

// reason is the last part of a file system error, fit for a sentence.
func reason(err error) string {
	var pe *fs.PathError
	if errors.As(err, &pe) {
		return pe.Err.Error()
	}
	return err.Error()
}

// present counts the files that the last complete sweep saw, or that were
// known before the first one.
func (r *root) present() int {
	n := 0
	for _, e := range r.entries {
		if e.sweep == r.sweeps {
			n++
		}
	}
	return n
}

// list sweeps the directories. An unreadable directory below the root is
// noted; only the root's own failure is an error.
func (r *root) list(ctx context.Context, now time.Time) (*listing, error) {
	l := &listing{files: make(map[string]found, len(r.entries)), unread: map[string]string{}}
	if err := r.listDir(ctx, "", 0, l, now); err != nil {
		return nil, err
	}
	r.mu.Lock()
	r.dirs = l.dirs
	r.mu.Unlock()
	return l, nil
}

func (r *root) listDir(ctx context.Context, rel string, depth int, l *listing, now time.Time) error {
	abs := filepath.Join(r.Path, filepath.FromSlash(rel))
	l.dirs = append(l.dirs, abs)
	var below []string
	err := r.disk.list(abs, func(d fs.DirEntry) error {
		if err := ctx.Err(); err != nil {
			return err
		}
		name := path.Join(rel, d.Name())
		switch {
		case d.IsDir():
			if !isLitterDir(d.Name()) {
				below = append(below, name)
			}
		case name == r.MarkerFile:
		case isLitter(d.Name(), r.Ignore):
			l.litter++
		case d.Type().IsRegular() && r.entries[name].resting(now, r.opt.AskAgain):
			l.note(name, found{r.entries[name].stamp, false})
		default:
			l.add(name, d)
		}
		return nil
	})
	if err != nil {
		return err
	}
	for _, b := range below {
		if depth >= deepest {
			l.unread[b] = fmt.Sprintf("more than %d folders deep", deepest)
			continue
		}
		if err := r.listDir(ctx, b, depth+1, l, now); err != nil {
			if ctx.Err() != nil {
				return ctx.Err()
			}
			if !errors.Is(err, fs.ErrNotExist) { // removed while we looked
				l.unread[b] = reason(err)
			}
		}
	}
	return nil
}

// add notes one thing that is no directory.
func (l *listing) add(name string, d fs.DirEntry) {
	// Some network file systems do not tell the type with the name; Info does.
	fi, err := d.Info()
	if err != nil {
		return // removed while we looked
	}
	if !fi.Mode().IsRegular() {
		l.skipped++
		if fi.Mode()&os.ModeSymlink != 0 {
			l.links = append(l.links, name)
		}
		return
	}
	l.note(name, found{stampOf(fi), true})
}

func (l *listing) note(name string, s found) {
	l.files[name] = s
	l.tally.files++
	if s.Mod.After(l.newest) {
		l.newest = s.Mod
	}
}

// resting reports whether a file need not be asked for its size and time in this sweep.
func (e *entry) resting(now time.Time, trust time.Duration) bool {
	if e == nil || !e.taken || e.calm == 0 {
		return false
	}
	calm, asked := now.UnixNano()-e.calm, now.UnixNano()-e.asked
	return calm >= int64(calmAfter) && asked >= 0 && asked < int64(trust)
}

// compare brings the entries up to what the sweep saw.
func (r *root) compare(now time.Time, l *listing, o *outcome) {
	r.sweeps++
	r.sweptAt = now
	var fresh []string
	for p, f := range l.files {
		e := r.entries[p]
		if e == nil {
			e = &entry{stamp: f.Stamp, pending: &pending{first: now, since: now, sweep: r.sweeps}}
			r.entries[p] = e
			fresh = append(fresh, p)
		} else {
			r.update(p, e, f, now, o)
		}
		e.sweep = r.sweeps
		if f.asked {
			e.asked = now.UnixNano()
		}
	}
	r.departed(fresh, l, o)
}

// update compares a file that was known with what the sweep saw.
func (r *root) update(p string, e *entry, f found, now time.Time, o *outcome) {
	if e.stamp.same(f.Stamp) {
		if e.taken && e.calm == 0 {
			e.calm = now.UnixNano()
		}
		if d := e.pending; d != nil && d.since.After(now) {
			d.since, d.retry = now, now // our clock was put back
		}
		return
	}
	if e.taken {
		o.changed = append(o.changed, Gone{Root: r.Name, Path: p, Stamp: e.stamp, Taken: true})
	}
	began := now
	if e.pending != nil {
		began = e.pending.first
	}
	e.stamp, e.taken, e.calm = f.Stamp, false, 0
	e.pending = &pending{first: began, since: now, sweep: r.sweeps}
}

// departed finds what is gone, and what only changed the spelling of its name.
func (r *root) departed(fresh []string, l *listing, o *outcome) {
	byFold := map[string]string{}
	for _, p := range fresh {
		byFold[fold(p)] = p
	}
	for p, e := range r.entries {
		if e.sweep == r.sweeps || l.unreadable(p) {
			continue
		}
		delete(r.entries, p)
		known := r.sweeps == 1 // gone before this program began to look; it saw nothing vanish
		if to, ok := byFold[fold(p)]; ok && e.taken && r.entries[to].stamp.same(e.stamp) {
			e.sweep = r.sweeps
			r.entries[to] = e
			o.renamed = append(o.renamed, Renamed{Root: r.Name, From: p, To: to})
			continue
		}
		if !known {
			o.vanished = append(o.vanished, Gone{Root: r.Name, Path: p, Stamp: e.stamp, Taken: e.taken})
		}
	}
	slices.SortFunc(o.vanished, func(a, b Gone) int { return strings.Compare(a.Path, b.Path) })
	slices.SortFunc(o.changed, func(a, b Gone) int { return strings.Compare(a.Path, b.Path) })
}

// fold is a name without regard to case and Unicode form.
func fold(p string) string {
	ascii := true
	for i := 0; i < len(p); i++ {
		ascii = ascii && p[i] < 0x80
	}
	if ascii {
		return strings.ToLower(p)
	}
	return norm.NFC.String(strings.ToLower(strings.ToUpper(norm.NFC.String(p))))
}

// unreadable reports whether a path lies below a directory that could not be read.
func (l *listing) unreadable(p string) bool {
	if len(l.unread) == 0 {
		return false
	}
	for dir := path.Dir(p); dir != "." && dir != "/"; dir = path.Dir(dir) {
		if _, ok := l.unread[dir]; ok {
			return true
		}
	}
	return false
}
