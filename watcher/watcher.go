// Package watcher turns folders into settled files. An event of the operating
// system is only a hint that looking is worth while; the folder is the truth.
// Start-up, an event, a queue overflow, a returned share and the slow timer
// all lead to the same sweep, so network shares, which deliver no events,
// work like local disks.
//
// The package knows files and time and nothing of spectra or databases. It
// never writes to a folder it watches.
package watcher

import (
	"context"
	"errors"
	"time"
)

// A Root is one watched folder.
type Root struct {
	Name       string        // name in the settings
	Path       string        // absolute
	MarkerFile string        // relative path that must exist, or the root is blind; "" = none
	Settle     time.Duration // two looks at least this far apart must agree in size and time
	Ignore     []string      // additional base-name globs that are litter
	EndMarks   []string      // base-name globs of formats that carry an end mark: may settle at once
}

// A File is a settled file: two looks agreed in size and time, and it opens.
type File struct {
	Root    string    // Root.Name
	Path    string    // slash-separated, relative to the root, as on disk
	Abs     string    // absolute path to open
	Size    int64     // bytes
	ModTime time.Time // as the share says; compared only with itself
	Seen    time.Time // when we first saw it, by our clock
	Settled time.Time // when the second look agreed
	Early   bool      // offered at first sight because of Root.EndMarks: if its end record is not there, do not acknowledge it
}

// A State is what can be said of a root after a look.
type State struct {
	Root     string
	Visible  bool      // the folder can be read and its marker is there
	Why      string    // reason when not visible, a sentence
	Since    time.Time // when this visibility began
	LookedAt time.Time // last completed look
	Newest   time.Time // newest modification time seen
	Files    int       // files seen in the last look, litter not counted
	Settling int       // of these, not settled yet
	Litter   int       // temporary and lock files ignored
}

// A Stamp is what a file looked like when it was taken in. Times are compared
// to the microsecond, the resolution of the database.
type Stamp struct {
	Size int64
	Mod  time.Time
}

// Options steer a Watcher. The zero value is usable.
type Options struct {
	// Known tells, once per root before its first look, what was taken in
	// before: path -> stamp, so that a restart offers only what is new. A root
	// whose Known fails is not visible until it succeeds. Nil: nothing is known.
	Known func(ctx context.Context, root string) (map[string]Stamp, error)
	// MaxFiles bounds the files of one Report; the rest comes with the next
	// looks, newest first, roots taking turns. 0: 1000.
	MaxFiles int
	// Answer is how long a root may take to be looked at, in real time; then it
	// counts as not answering and the others go on. 0: 30 s.
	Answer time.Duration
}

// A Report is what one Look found.
type Report struct {
	At       time.Time // the now given to Look
	Files    []File    // newly settled and not yet acknowledged, newest first, roots in turns; at most Options.MaxFiles
	States   []State   // one per root, in the order given to New
	Changed  []Gone    // acknowledged files that look different now and will settle again
	Vanished []Gone    // files that are no longer there although their root is visible
	Renamed  []Renamed // acknowledged files whose name changed in case or Unicode form only
	Waits    []Wait    // files that keep us waiting: growing, empty, locked; at most 100 a root
	More     bool      // settled files are left: look again at once
	Next     time.Time // when the passing of time alone may bring something new; zero: nothing is pending
}

// A Gone file is not what or where it was.
type Gone struct {
	Root, Path string
	Stamp      Stamp // as last seen
	Taken      bool  // it had been acknowledged
}

// A Renamed file carries the same stamp under a name that differs only in
// case or Unicode form.
type Renamed struct{ Root, From, To string }

// A Wait says why a file has not settled for longer than is usual.
type Wait struct {
	Root, Path string
	Since      time.Time
	Size       int64
	Why        string // a sentence
}

// Read failures that mean "not now": do not acknowledge, the file is offered again.
var (
	ErrChanged  = errors.New("the file is not what it was when it settled")
	ErrTooLarge = errors.New("the file is larger than allowed")
)

// A Watcher looks at its roots. Look, Done and Run may be called from
// different goroutines; looks never overlap.
type Watcher struct{}

// New makes a watcher. Nothing is read until the first Look.
func New(roots []Root, opt Options) *Watcher { panic("being written") }

// Look looks at every root once, in parallel. now is the time of the look: a
// replay passes its own. A file is offered in Report.Files at each look until
// Done acknowledges it. Look returns an error only when ctx ends.
func (w *Watcher) Look(ctx context.Context, now time.Time) (Report, error) { panic("being written") }

// Done acknowledges a file of a Report after what came of it was committed.
func (w *Watcher) Done(root, path string, size int64, mod time.Time) { panic("being written") }

// RunOptions steer Run.
type RunOptions struct {
	Every time.Duration    // longest time between two looks; 0: 15 s
	Now   func() time.Time // clock of the looks; nil: time.Now
	Poll  bool             // do not ask the operating system for events
}

// Run looks until ctx ends: at once, on events, on overflow of their queue, on
// the timer, and as soon as something may settle. handle gets every report; an
// error of it ends Run and is returned, so a handler that merely could not
// commit returns nil and leaves the files unacknowledged.
func (w *Watcher) Run(ctx context.Context, o RunOptions, handle func(context.Context, Report) error) error {
	panic("being written")
}

// Read reads a settled file whole, at most max bytes, without ever blocking on
// a pipe or device put in its place. It fails with ErrChanged when the file is
// not the one that settled, before or after reading, and with ErrTooLarge.
func Read(ctx context.Context, f File, max int64) ([]byte, error) { panic("being written") }
