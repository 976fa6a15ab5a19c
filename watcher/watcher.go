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
	Stuck    int       // of these, empty or locked for longer than is usual; not counted in Settling
	Litter   int       // temporary and lock files ignored
	Skipped  int       // links, pipes and devices, which are never opened
	Events   bool      // the operating system tells of changes here; without it only the timer looks
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
	// AskAgain is how long the size and time of a file that was taken in and has
	// stood unchanged for an hour are trusted before it is asked again; its name is
	// looked for in every sweep. 0: 5 min.
	AskAgain time.Duration
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
