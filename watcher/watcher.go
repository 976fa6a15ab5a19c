// Package watcher turns folders into settled files. An event of the operating
// system is only a hint that looking is worth while; the folder is the truth.
// Start-up, an event, a queue overflow, a returned share and the slow timer
// all lead to the same sweep, so network shares, which deliver no events,
// work like local disks.
//
// The package knows files and time and nothing of spectra or databases. It
// never writes to a folder it watches.
package watcher

import "time"

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
