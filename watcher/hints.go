package watcher

import (
	"github.com/fsnotify/fsnotify"
)

// hints turns events of the operating system into wake-ups. One event watcher
// per root, so that a share that hangs while a watch is added silences only
// its own events. Nothing is concluded from an event but that looking is worth
// while, so lost events, overflow and failure to watch are all harmless.
type hints struct {
	wake  chan struct{} // holds at most one wake-up
	roots map[*root]*rootHints
}

// rootHints is the event watcher of one root.
type rootHints struct {
	w    *fsnotify.Watcher
	dirs chan []string // newest list of directories; holds at most one
}

func newHints() *hints {
	return &hints{wake: make(chan struct{}, 1), roots: map[*root]*rootHints{}}
}

// follow has the directories that the last sweep found watched.
func (h *hints) follow(r *root) {
	dirs := r.directories()
	if len(dirs) == 0 {
		return
	}
	rh, ok := h.roots[r]
	if !ok {
		w, err := fsnotify.NewBufferedWatcher(4096)
		if err != nil {
			r.events.Store(false) // no more watchers to be had; tried again at the next look
			return
		}
		rh = &rootHints{w: w, dirs: make(chan []string, 1)}
		h.roots[r] = rh
		go h.watch(r, rh)
		go h.forward(w)
	}
	select { // replace a list that nobody has fetched yet
	case <-rh.dirs:
	default:
	}
	rh.dirs <- dirs
}

// forward turns every event and every error, overflow among them, into a wake-up.
func (h *hints) forward(w *fsnotify.Watcher) {
	for {
		select {
		case _, ok := <-w.Events:
			if !ok {
				return
			}
		case _, ok := <-w.Errors:
			if !ok {
				return
			}
		}
		h.call()
	}
}

// call leaves a wake-up unless one is waiting already.
func (h *hints) call() {
	select {
	case h.wake <- struct{}{}:
	default:
	}
}

// watch keeps the watched directories equal to the newest list. What came into
// a directory after it was listed and before it was watched caused no event,
// so a directory that is newly watched calls for one more look.
func (h *hints) watch(r *root, rh *rootHints) {
	for dirs := range rh.dirs {
		before := map[string]bool{}
		for _, d := range rh.w.WatchList() {
			before[d] = true
		}
		all, fresh := true, false
		for _, d := range dirs {
			// A directory that was removed and made again may still stand in the
			// list without its watch; adding again is cheap and right in every case.
			if err := rh.w.Add(d); err != nil {
				all = false
				continue
			}
			fresh = fresh || !before[d]
			delete(before, d)
		}
		for d := range before {
			_ = rh.w.Remove(d) // it is gone already, or no longer of interest
		}
		r.events.Store(all)
		if fresh {
			h.call()
		}
	}
}

// close ends all event watchers.
func (h *hints) close() {
	for _, rh := range h.roots {
		close(rh.dirs)
		_ = rh.w.Close() // a watch that cannot be taken down ends with the process
	}
}
