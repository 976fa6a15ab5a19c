package watcher

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"
)

func TestMarkerFile(t *testing.T) {
	b := newBench(t, func(r *Root, _ *Options) { r.MarkerFile = "share/.here" })
	b.write("a.csv", "1")
	rep := b.look(0)
	s := rep.States[0]
	if s.Visible || !strings.Contains(s.Why, "share/.here") || !s.Since.Equal(start()) {
		t.Fatalf("state %+v", s)
	}
	b.write("share/.here", "")
	rep = b.look(time.Minute)
	if s := rep.States[0]; !s.Visible || s.Why != "" || !s.Since.Equal(start().Add(time.Minute)) || s.Files != 1 || s.Litter != 0 {
		t.Fatalf("state %+v", s)
	}
	b.done(b.look(5 * time.Second).Files)
	// The share goes: an empty folder is in its place.
	if err := os.RemoveAll(b.dir); err != nil {
		t.Fatal(err)
	}
	if err := os.Mkdir(b.dir, 0o755); err != nil {
		t.Fatal(err)
	}
	rep = b.look(time.Minute)
	if rep.States[0].Visible || len(rep.Vanished) != 0 {
		t.Fatalf("an unmounted share is not a deletion: %+v, vanished %v", rep.States[0], rep.Vanished)
	}
	// It comes back with one file gone in earnest and one new.
	b.write("share/.here", "")
	b.write("b.csv", "2")
	rep = b.look(time.Minute)
	if gone(rep.Vanished) != "a.csv" || !rep.Vanished[0].Taken {
		t.Fatalf("vanished %v", rep.Vanished)
	}
	b.want(b.look(5*time.Second), "b.csv")
}

func TestFolderVanishesAndReturns(t *testing.T) {
	b := newBench(t, nil)
	b.write("day/a.csv", "1")
	b.write("day/b.csv", "1")
	b.look(0)
	rep := b.look(5 * time.Second)
	b.done(rep.Files[:1])
	left := rep.Files[1].Path
	away := b.dir + ".away"
	if err := os.Rename(b.dir, away); err != nil {
		t.Fatal(err)
	}
	rep = b.look(time.Minute)
	if s := rep.States[0]; s.Visible || !strings.Contains(s.Why, "is not there") || len(rep.Files) != 0 || len(rep.Vanished) != 0 {
		t.Fatalf("%+v, files %v, vanished %v", s, rep.Files, rep.Vanished)
	}
	if rep = b.look(time.Minute); !rep.States[0].Since.Equal(start().Add(65 * time.Second)) {
		t.Fatalf("blind since %v", rep.States[0].Since)
	}
	if err := os.Rename(away, b.dir); err != nil {
		t.Fatal(err)
	}
	rep = b.look(time.Minute)
	b.want(rep, left) // nothing lost, nothing twice
	if !rep.States[0].Visible || len(rep.Changed)+len(rep.Vanished) != 0 {
		t.Fatalf("%+v", rep)
	}
}

func TestAllGoneAtOnceWithoutMarkerIsBlind(t *testing.T) {
	b := newBench(t, nil)
	for i := range emptied {
		b.write(fmt.Sprintf("%d.csv", i), "1")
	}
	b.look(0)
	b.done(b.look(5 * time.Second).Files)
	for i := range emptied {
		if err := os.Remove(filepath.Join(b.dir, fmt.Sprintf("%d.csv", i))); err != nil {
			t.Fatal(err)
		}
	}
	rep := b.look(time.Minute)
	if rep.States[0].Visible || len(rep.Vanished) != 0 || !strings.Contains(rep.States[0].Why, "held 5 files") {
		t.Fatalf("%+v, vanished %v", rep.States[0], rep.Vanished)
	}
	b.write("new.csv", "1")
	if rep = b.look(time.Minute); !rep.States[0].Visible || len(rep.Vanished) != emptied {
		t.Fatalf("%+v, vanished %v", rep.States[0], rep.Vanished)
	}
}

func TestSubfolderRemovedAndMadeAgain(t *testing.T) {
	b := newBench(t, nil)
	b.write("day/a.csv", "1")
	b.write("keep.csv", "1")
	b.look(0)
	b.done(b.look(5 * time.Second).Files)
	if err := os.RemoveAll(filepath.Join(b.dir, "day")); err != nil {
		t.Fatal(err)
	}
	if rep := b.look(time.Second); gone(rep.Vanished) != "day/a.csv" {
		t.Fatalf("vanished %v", rep.Vanished)
	}
	b.write("day/b.csv", "1")
	b.look(time.Second)
	b.want(b.look(5*time.Second), "day/b.csv")
}

func TestPipesLinksAndLoopsAreNotOpened(t *testing.T) {
	b := newBench(t, nil)
	if err := syscall.Mkfifo(filepath.Join(b.dir, "pipe.csv"), 0o644); err != nil {
		t.Skipf("no named pipes here: %v", err)
	}
	b.write("sub/real.csv", "1")
	for link, target := range map[string]string{"loop": ".", "sub/up": "..", "alias.csv": "sub/real.csv", "nowhere.csv": "gone.csv"} {
		if err := os.Symlink(target, filepath.Join(b.dir, link)); err != nil {
			t.Fatal(err)
		}
	}
	b.look(0)
	rep := b.look(5 * time.Second)
	b.want(rep, "sub/real.csv")
	if s := rep.States[0]; s.Skipped != 5 || s.Files != 1 {
		t.Fatalf("%+v", s)
	}
	if len(rep.Waits) != 4 { // the links are named, the pipe is only counted
		t.Fatalf("waits %+v", rep.Waits)
	}
}

func TestRootMayBeALink(t *testing.T) {
	real := t.TempDir()
	link := filepath.Join(t.TempDir(), "share")
	if err := os.Symlink(real, link); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(real, "a.csv"), []byte("1"), 0o644); err != nil {
		t.Fatal(err)
	}
	w := New([]Root{{Name: "u1", Path: link}}, Options{})
	_, _ = w.Look(t.Context(), start())
	rep, err := w.Look(t.Context(), start().Add(time.Second))
	if err != nil || names(rep.Files) != "a.csv" {
		t.Fatalf("%+v, %v", rep, err)
	}
}

func TestCaseAndUnicodeRenames(t *testing.T) {
	b := newBench(t, nil)
	// Composed and decomposed form of the same name, and capitals.
	old, renamed := "Gr\u00fcn 1.csv", "GRU\u0308N 1.CSV"
	b.write(old, "1")
	b.look(0)
	b.done(b.look(5 * time.Second).Files)
	if err := os.Rename(filepath.Join(b.dir, old), filepath.Join(b.dir, renamed)); err != nil {
		t.Fatal(err)
	}
	rep := b.look(time.Minute)
	if len(rep.Renamed) != 1 || rep.Renamed[0].From != old || rep.Renamed[0].To != renamed || len(rep.Vanished) != 0 {
		t.Fatalf("renamed %v, vanished %v", rep.Renamed, rep.Vanished)
	}
	b.want(b.look(time.Minute)) // taken already
	// On a disk that tells them apart, two spellings side by side are two files.
	b.write("x.csv", "1")
	b.write("X.csv", "2")
	b.look(time.Second)
	rep = b.look(5 * time.Second)
	if runtime.GOOS == "linux" {
		b.want(rep, "x.csv", "X.csv")
	}
}

// lockedDisk refuses to open one file, as a virus scanner or a writer would.
type lockedDisk struct {
	disk
	name string
	err  error
}

func (d *lockedDisk) probe(path string) (fs.FileInfo, error) {
	if d.err != nil && filepath.Base(path) == d.name {
		return nil, &fs.PathError{Op: "open", Path: path, Err: d.err}
	}
	return d.disk.probe(path)
}

func TestLockedFileIsTriedAgain(t *testing.T) {
	b := newBench(t, nil)
	lock := &lockedDisk{disk: localDisk{}, name: "a.csv", err: fs.ErrPermission}
	b.w.roots[0].disk = lock
	b.write("a.csv", "1")
	b.write("b.csv", "1")
	b.look(0)
	rep := b.look(5 * time.Second)
	b.want(rep, "b.csv")
	b.done(rep.Files)
	tries, at := 0, b.now
	for range 200 {
		rep = b.look(5 * time.Second)
		b.want(rep)
		if d := b.w.roots[0].entries["a.csv"].pending; d.tries > tries {
			tries, at = d.tries, b.now
		}
	}
	if tries < 4 || tries > 12 {
		t.Fatalf("%d tries in 1000 s; the pauses ought to grow to five minutes", tries)
	}
	if s := rep.States[0]; s.Stuck != 1 || s.Settling != 0 {
		t.Fatalf("%+v", s)
	}
	if len(rep.Waits) != 1 || rep.Waits[0].Why != "Cannot read a.csv for 16 min (permission denied)." {
		t.Fatalf("waits %+v", rep.Waits)
	}
	lock.err = nil
	b.want(b.look(at.Add(5*time.Minute).Sub(b.now)), "a.csv")
}

func TestUnreadableSubfolderHidesNothing(t *testing.T) {
	b := newBench(t, nil)
	b.write("day/a.csv", "1")
	b.write("b.csv", "1")
	b.look(0)
	b.done(b.look(5 * time.Second).Files)
	b.w.roots[0].disk = &deadDir{localDisk{}, filepath.Join(b.dir, "day")}
	rep := b.look(time.Minute)
	if len(rep.Vanished) != 0 || !rep.States[0].Visible || len(rep.Waits) != 1 || !strings.Contains(rep.Waits[0].Why, "day") {
		t.Fatalf("vanished %v, waits %+v", rep.Vanished, rep.Waits)
	}
	b.w.roots[0].disk = localDisk{}
	if rep = b.look(time.Minute); len(rep.Files)+len(rep.Vanished)+len(rep.Changed) != 0 {
		t.Fatalf("%+v", rep)
	}
}

// deadDir fails to list one directory.
type deadDir struct {
	disk
	dir string
}

func (d *deadDir) list(dir string, each func(fs.DirEntry) error) error {
	if dir == d.dir {
		return &fs.PathError{Op: "open", Path: dir, Err: syscall.EIO}
	}
	return d.disk.list(dir, each)
}

// hungDisk blocks every listing until it is released, as a stale handle does.
type hungDisk struct {
	disk
	release chan struct{}
	once    sync.Once
	entered chan struct{}
}

func (d *hungDisk) list(dir string, each func(fs.DirEntry) error) error {
	d.once.Do(func() { close(d.entered) })
	<-d.release
	return d.disk.list(dir, each)
}

func TestHungRootDoesNotStallOthers(t *testing.T) {
	dirs := []string{t.TempDir(), t.TempDir(), t.TempDir()}
	w := New([]Root{{Name: "u1", Path: dirs[0]}, {Name: "hung", Path: dirs[1]}, {Name: "u2", Path: dirs[2]}}, Options{Answer: 20 * time.Millisecond})
	for _, d := range dirs {
		if err := os.WriteFile(filepath.Join(d, "a.csv"), []byte("1"), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	stale := &hungDisk{disk: localDisk{}, release: make(chan struct{}), entered: make(chan struct{})}
	w.roots[1].disk = stale
	look := func(at time.Duration) Report {
		rep, err := w.Look(t.Context(), start().Add(at))
		if err != nil {
			t.Fatal(err)
		}
		return rep
	}
	rep := look(0)
	if s := rep.States[1]; s.Visible || !strings.Contains(s.Why, "does not answer") {
		t.Fatalf("%+v", s)
	}
	before := runtime.NumGoroutine()
	for i := range 20 {
		rep = look(time.Duration(i+1) * time.Second)
	}
	if n := runtime.NumGoroutine(); n > before+2 {
		t.Fatalf("%d goroutines after 20 looks, %d after one: each look leaves one behind", n, before)
	}
	if len(rep.Files) != 2 || !rep.States[0].Visible || !rep.States[2].Visible {
		t.Fatalf("the others suffer: %+v", rep)
	}
	w.Done("hung", "a.csv", 1, start()) // must not block either
	close(stale.release)
	w.opt.Answer = 30 * time.Second
	rep = look(time.Minute)
	if !rep.States[1].Visible || !rep.States[1].Since.Equal(start().Add(time.Minute)) {
		t.Fatalf("%+v", rep.States[1])
	}
}

func TestCalledOffLookDoesNoHarm(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv", "1")
	stale := &hungDisk{disk: localDisk{}, release: make(chan struct{}), entered: make(chan struct{})}
	b.w.roots[0].disk = stale
	ctx, cancel := context.WithCancel(t.Context())
	go func() {
		<-stale.entered
		cancel()
	}()
	if _, err := b.w.Look(ctx, b.now); !errors.Is(err, context.Canceled) {
		t.Fatalf("got %v", err)
	}
	close(stale.release)
	rep := b.look(time.Second)
	if !rep.States[0].Visible || rep.States[0].Files != 1 {
		t.Fatalf("%+v", rep.States[0])
	}
	b.want(b.look(5*time.Second), "a.csv")
}

func TestNewestFirstAndRootsInTurns(t *testing.T) {
	dirs := []string{t.TempDir(), t.TempDir()}
	w := New([]Root{{Name: "old", Path: dirs[0]}, {Name: "u1", Path: dirs[1]}}, Options{MaxFiles: 6})
	for i := range 20 { // a backlog, dated by a clock that is years ahead
		p := filepath.Join(dirs[0], fmt.Sprintf("b%02d.csv", i))
		at := start().AddDate(3, 0, -i)
		if err := os.WriteFile(p, []byte("1"), 0o644); err != nil {
			t.Fatal(err)
		}
		if err := os.Chtimes(p, at, at); err != nil {
			t.Fatal(err)
		}
	}
	for i := range 3 {
		p := filepath.Join(dirs[1], fmt.Sprintf("tonight%d.csv", i))
		if err := os.WriteFile(p, []byte("1"), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	if _, err := w.Look(t.Context(), start()); err != nil {
		t.Fatal(err)
	}
	rep, err := w.Look(t.Context(), start().Add(time.Second))
	if err != nil {
		t.Fatal(err)
	}
	if got := names(rep.Files); got != "b00.csv b01.csv b02.csv tonight0.csv tonight1.csv tonight2.csv" || !rep.More {
		t.Fatalf("%s, more %v", got, rep.More)
	}
	seen := map[string]bool{}
	for i := 2; rep.More || len(rep.Files) > 0; i++ {
		for _, f := range rep.Files {
			if seen[f.Path] {
				t.Fatalf("%s came twice", f.Path)
			}
			seen[f.Path] = true
			w.Done(f.Root, f.Path, f.Size, f.ModTime)
		}
		if rep, err = w.Look(t.Context(), start().Add(time.Duration(i)*time.Second)); err != nil || i > 10 {
			t.Fatalf("look %d: %v", i, err)
		}
	}
	if len(seen) != 23 {
		t.Fatalf("%d of 23 files came", len(seen))
	}
}

func TestFiftyThousandFilesAtOnce(t *testing.T) {
	if testing.Short() {
		t.Skip("writes 50,000 files")
	}
	const n = 50_000
	b := newBench(t, func(_ *Root, o *Options) { o.MaxFiles = 5000 })
	for i := range 100 {
		if err := os.Mkdir(filepath.Join(b.dir, fmt.Sprint(i)), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	old := start().AddDate(-1, 0, 0)
	for i := range n {
		// Links of one file are 50,000 names with a fraction of the disk work.
		p := filepath.Join(b.dir, fmt.Sprint(i%100), fmt.Sprintf("%d.csv", i))
		if i < 100 {
			b.write(fmt.Sprintf("%d/%d.csv", i%100, i), "1")
			b.date(fmt.Sprintf("%d/%d.csv", i%100, i), old)
			continue
		}
		if err := os.Link(filepath.Join(b.dir, fmt.Sprint(i%100), fmt.Sprintf("%d.csv", i%100)), p); err != nil {
			t.Skipf("this disk has no links: %v", err)
		}
	}
	b.write("tonight.csv", "22")
	b.date("tonight.csv", start())
	b.look(0)
	began := time.Now()
	rep := b.look(5 * time.Second)
	if len(rep.Files) != 5000 || rep.Files[0].Path != "tonight.csv" || !rep.More {
		t.Fatalf("%d files, first %s", len(rep.Files), rep.Files[0].Path)
	}
	seen := map[string]bool{}
	looks := 1
	for len(rep.Files) > 0 {
		for _, f := range rep.Files {
			if seen[f.Path] {
				t.Fatalf("%s came twice", f.Path)
			}
			seen[f.Path] = true
		}
		b.done(rep.Files)
		rep = b.look(100 * time.Millisecond)
		looks++
	}
	if len(seen) != n+1 {
		t.Fatalf("%d of %d files came", len(seen), n+1)
	}
	t.Logf("%d files in %d looks, %v", n+1, looks, time.Since(began).Round(time.Millisecond))
}
