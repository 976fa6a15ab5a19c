package watcher

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"testing/synctest"
	"time"

	"github.com/fsnotify/fsnotify"
)

// The timing of Run is tested in a bubble with its own clock: a look at the
// real disk takes no time there, and minutes pass in none.

func TestRunLooksOnTheTimer(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		ctx, cancel := context.WithCancel(t.Context())
		w := New([]Root{{Name: "u1", Path: t.TempDir(), Settle: 5 * time.Second}}, Options{})
		began := time.Now()
		var at []time.Duration
		err := w.Run(ctx, RunOptions{Every: 15 * time.Second, Poll: true}, func(_ context.Context, r Report) error {
			at = append(at, r.At.Sub(began))
			if len(at) == 4 {
				cancel()
			}
			return nil
		})
		if !errors.Is(err, context.Canceled) || fmt.Sprint(at) != "[0s 15s 30s 45s]" {
			t.Errorf("%v, %v", at, err)
		}
	})
}

func TestRunComesBackWhenAFileSettles(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		dir := t.TempDir()
		if err := os.WriteFile(filepath.Join(dir, "a.csv"), []byte("1"), 0o644); err != nil {
			t.Fatal(err)
		}
		ctx, cancel := context.WithCancel(t.Context())
		w := New([]Root{{Name: "u1", Path: dir, Settle: 5 * time.Second}}, Options{})
		began := time.Now()
		var log []string
		_ = w.Run(ctx, RunOptions{Every: time.Minute, Poll: true}, func(_ context.Context, r Report) error {
			log = append(log, fmt.Sprintf("%v:%s", r.At.Sub(began), names(r.Files)))
			switch len(log) {
			case 3: // the database was away before: acknowledged only now
				w.Done("u1", r.Files[0].Path, r.Files[0].Size, r.Files[0].ModTime)
			case 4:
				cancel()
			}
			return nil
		})
		if got := strings.Join(log, " "); got != "0s: 5s:a.csv 1m5s:a.csv 2m5s:" {
			t.Errorf("looks: %s", got)
		}
	})
}

func TestRunAnswersABurstOnce(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		ctx, cancel := context.WithCancel(t.Context())
		defer cancel()
		w := New([]Root{{Name: "u1", Path: t.TempDir()}}, Options{})
		wake := make(chan struct{})
		began := time.Now()
		var at []time.Duration
		ended := make(chan error, 1)
		go func() {
			ended <- w.Run(ctx, RunOptions{Every: time.Hour, Poll: true, Wake: wake}, func(_ context.Context, r Report) error {
				at = append(at, r.At.Sub(began))
				return nil
			})
		}()
		synctest.Wait()
		time.Sleep(10 * time.Minute)
		for range 5 { // a burst: one look, a quiet time after its last event
			wake <- struct{}{}
			time.Sleep(100 * time.Millisecond)
		}
		time.Sleep(10 * time.Minute)
		for range 100 { // events without end: a look every two seconds
			wake <- struct{}{}
			time.Sleep(100 * time.Millisecond)
		}
		cancel()
		if err := <-ended; !errors.Is(err, context.Canceled) {
			t.Errorf("got %v", err)
		}
		if len(at) < 2 || at[1] != 10*time.Minute+600*time.Millisecond {
			t.Fatalf("the burst was answered at %v", at)
		}
		if n := len(at) - 2; n < 4 || n > 5 {
			t.Errorf("%d looks in 10 s of events, expected one every two seconds: %v", n, at)
		}
	})
}

func TestRunWorksOffABacklogWithoutPausing(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		dir := t.TempDir()
		for i := range 10 {
			if err := os.WriteFile(filepath.Join(dir, fmt.Sprint(i)), []byte("1"), 0o644); err != nil {
				t.Fatal(err)
			}
		}
		ctx, cancel := context.WithCancel(t.Context())
		w := New([]Root{{Name: "u1", Path: dir, Settle: time.Second}}, Options{MaxFiles: 3})
		began := time.Now()
		n, stuck := 0, true
		var last time.Duration
		_ = w.Run(ctx, RunOptions{Every: time.Minute, Poll: true}, func(_ context.Context, r Report) error {
			if len(r.Files) > 0 && stuck {
				stuck = false // cannot commit: Run must rest and not spin
				return nil
			}
			for _, f := range r.Files {
				n++
				w.Done(f.Root, f.Path, f.Size, f.ModTime)
			}
			if n == 10 {
				last = r.At.Sub(began)
				cancel()
			}
			return nil
		})
		if n != 10 || last != time.Minute+time.Second {
			t.Errorf("%d files, the last after %v; four batches ought to follow each other at once after one rest", n, last)
		}
	})
}

func TestRunReturnsTheHandlersError(t *testing.T) {
	w := New([]Root{{Name: "u1", Path: t.TempDir()}}, Options{})
	stop := errors.New("stop")
	err := w.Run(t.Context(), RunOptions{}, func(context.Context, Report) error { return stop })
	if !errors.Is(err, stop) {
		t.Errorf("got %v", err)
	}
}

// eventually runs Run with real events and an hour between timed looks, and
// does each step when the handler has seen what the one before it caused. That
// the files arrive at all shows that events woke it.
func eventually(t *testing.T, dir string, steps ...struct {
	do   func()
	want string
}) {
	t.Helper()
	ctx, cancel := context.WithTimeout(t.Context(), 20*time.Second)
	defer cancel()
	w := New([]Root{{Name: "u1", Path: dir}}, Options{})
	i := -1
	got := map[string]bool{}
	err := w.Run(ctx, RunOptions{Every: time.Hour}, func(_ context.Context, r Report) error {
		for _, f := range r.Files {
			got[f.Path] = true
			w.Done(f.Root, f.Path, f.Size, f.ModTime)
		}
		for i < 0 || got[steps[i].want] {
			if i++; i == len(steps) {
				cancel()
				return nil
			}
			steps[i].do()
		}
		return nil
	})
	if i < len(steps) {
		t.Fatalf("step %d (%s) was not noticed: %v, %v", i, steps[i].want, got, err)
	}
}

func TestEventsWakeRun(t *testing.T) {
	dir := t.TempDir()
	type step = struct {
		do   func()
		want string
	}
	write := func(name string) func() {
		return func() {
			p := filepath.Join(dir, name)
			if err := os.MkdirAll(filepath.Dir(p), 0o755); err != nil {
				t.Error(err)
			}
			if err := os.WriteFile(p, []byte("1"), 0o644); err != nil {
				t.Error(err)
			}
		}
	}
	eventually(t, dir,
		step{write("a.csv"), "a.csv"},
		step{write("day/b.csv"), "day/b.csv"},
		step{write("day/sub/c.csv"), "day/sub/c.csv"},
		step{write("day/sub/d.csv"), "day/sub/d.csv"},
		step{func() {
			if err := os.Rename(filepath.Join(dir, "day"), filepath.Join(dir, "other")); err != nil {
				t.Error(err)
			}
		}, "other/sub/d.csv"},
		step{write("other/sub/e.csv"), "other/sub/e.csv"},
	)
}

// A storm of events larger than any queue: whatever the events lose, every
// file comes.
func TestEventStorm(t *testing.T) {
	dir := t.TempDir()
	ctx, cancel := context.WithTimeout(t.Context(), 20*time.Second)
	defer cancel()
	w := New([]Root{{Name: "u1", Path: dir}}, Options{})
	const n = 2000
	got := map[string]bool{}
	wrote := false
	err := w.Run(ctx, RunOptions{Every: time.Hour}, func(_ context.Context, r Report) error {
		if !wrote {
			wrote = true
			go func() {
				for i := range n {
					p := filepath.Join(dir, fmt.Sprintf("%d.csv", i))
					if err := os.WriteFile(p, []byte("1"), 0o644); err != nil {
						t.Error(err)
						return
					}
				}
			}()
		}
		for _, f := range r.Files {
			got[f.Path] = true
			w.Done(f.Root, f.Path, f.Size, f.ModTime)
		}
		if len(got) == n {
			cancel()
		}
		return nil
	})
	if len(got) != n {
		t.Fatalf("%d of %d files came: %v", len(got), n, err)
	}
}

// An overflow of the event queue is a wake-up like any other: the sweep finds what the events lost.
func TestOverflowWakes(t *testing.T) {
	h := newHints()
	w := &fsnotify.Watcher{Events: make(chan fsnotify.Event), Errors: make(chan error)}
	go h.forward(w)
	w.Errors <- fsnotify.ErrEventOverflow
	<-h.wake
	for range 1000 { // nobody listens; forward must not get stuck
		w.Events <- fsnotify.Event{Name: "a.csv", Op: fsnotify.Write}
	}
	<-h.wake
	close(w.Events)
}
