package watcher

import (
	"context"
	"errors"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"
)

// start is the moment at which tests begin to look; the files' own times come
// from the real disk, as they would.
func start() time.Time { return time.Date(2026, 3, 11, 21, 0, 0, 0, time.UTC) }

// bench is one root in a temporary folder and a clock of its own.
type bench struct {
	t   *testing.T
	dir string
	w   *Watcher
	now time.Time
}

func newBench(t *testing.T, change func(*Root, *Options)) *bench {
	t.Helper()
	b := &bench{t: t, dir: t.TempDir(), now: start()}
	r := Root{Name: "u1", Path: b.dir, Settle: 5 * time.Second}
	var o Options
	if change != nil {
		change(&r, &o)
	}
	b.w = New([]Root{r}, o)
	return b
}

func (b *bench) write(name, text string) {
	b.t.Helper()
	p := filepath.Join(b.dir, name)
	if err := os.MkdirAll(filepath.Dir(p), 0o755); err != nil {
		b.t.Fatal(err)
	}
	if err := os.WriteFile(p, []byte(text), 0o644); err != nil {
		b.t.Fatal(err)
	}
}

// date gives a file a modification time, so that no test depends on the disk's clock.
func (b *bench) date(name string, at time.Time) {
	b.t.Helper()
	if err := os.Chtimes(filepath.Join(b.dir, name), at, at); err != nil {
		b.t.Fatal(err)
	}
}

// look lets so much time pass and looks.
func (b *bench) look(after time.Duration) Report {
	b.t.Helper()
	b.now = b.now.Add(after)
	rep, err := b.w.Look(context.Background(), b.now)
	if err != nil {
		b.t.Fatal(err)
	}
	return rep
}

func (b *bench) done(files []File) {
	for _, f := range files {
		b.w.Done(f.Root, f.Path, f.Size, f.ModTime)
	}
}

func names(files []File) string {
	var out []string
	for _, f := range files {
		out = append(out, f.Path)
	}
	slices.Sort(out)
	return strings.Join(out, " ")
}

func gone(list []Gone) string {
	var out []string
	for _, g := range list {
		out = append(out, g.Path)
	}
	return strings.Join(out, " ")
}

// want fails unless the report offers exactly these files.
func (b *bench) want(rep Report, paths ...string) {
	b.t.Helper()
	slices.Sort(paths)
	if got := names(rep.Files); got != strings.Join(paths, " ") {
		b.t.Fatalf("offered %q, want %q (state %+v)", got, paths, rep.States)
	}
}

func TestFileSettlesWhenTwoLooksAgree(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv", "1;2\n")
	b.want(b.look(0))
	if rep := b.look(2 * time.Second); rep.Next != b.now.Add(3*time.Second) {
		t.Fatalf("next look at %v, the file settles 3 s later at %v", rep.Next, b.now.Add(3*time.Second))
	}
	rep := b.look(3 * time.Second)
	b.want(rep, "a.csv")
	if f := rep.Files[0]; f.Size != 4 || f.Abs != filepath.Join(b.dir, "a.csv") || !f.Seen.Equal(start()) || f.Early {
		t.Fatalf("wrong particulars: %+v", f)
	}
}

func TestOfferedUntilAcknowledged(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv", "1")
	b.look(0)
	rep := b.look(5 * time.Second)
	b.want(rep, "a.csv")
	b.want(b.look(time.Second), "a.csv") // the caller could not commit
	b.done(rep.Files)
	b.want(b.look(time.Minute))
	b.want(b.look(time.Hour))
}

func TestSlowWriter(t *testing.T) {
	b := newBench(t, nil)
	text := ""
	for range 20 {
		text += "400.0;0.1234\n"
		b.write("slow.csv", text)
		b.want(b.look(4 * time.Second))
	}
	b.want(b.look(4 * time.Second))
	rep := b.look(4 * time.Second)
	b.want(rep, "slow.csv")
	if rep.Files[0].Size != int64(len(text)) {
		t.Fatalf("settled with %d bytes of %d", rep.Files[0].Size, len(text))
	}
}

func TestStillGrowingIsToldAfterHalfAnHour(t *testing.T) {
	b := newBench(t, nil)
	text := ""
	for i := range 40 {
		text += "x"
		b.write("slow.csv", text)
		rep := b.look(time.Minute)
		// Touched a moment before this look, so it cannot have settled; the sentence comes after 30 minutes.
		if want := i >= 30; (len(rep.Waits) == 1) != want {
			t.Fatalf("minute %d: waits %+v", i, rep.Waits)
		}
	}
}

func TestRenameIntoPlace(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv.part", "123")
	rep := b.look(0)
	if rep.States[0].Litter != 1 || rep.States[0].Files != 0 {
		t.Fatalf("a partial file is litter: %+v", rep.States[0])
	}
	b.look(10 * time.Second)
	if err := os.Rename(filepath.Join(b.dir, "a.csv.part"), filepath.Join(b.dir, "a.csv")); err != nil {
		t.Fatal(err)
	}
	b.want(b.look(time.Second))
	b.want(b.look(5*time.Second), "a.csv")
}

func TestReplacedFileSettlesAgain(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv", "old")
	b.look(0)
	b.done(b.look(5 * time.Second).Files)
	b.write("a.csv", "newer")
	rep := b.look(time.Second)
	b.want(rep)
	if gone(rep.Changed) != "a.csv" || !rep.Changed[0].Taken {
		t.Fatalf("changed: %+v", rep.Changed)
	}
	if rep := b.look(5 * time.Second); names(rep.Files) != "a.csv" || rep.Files[0].Size != 5 {
		t.Fatalf("the new content was not offered: %+v", rep.Files)
	}
}

func TestSameSizeOtherTimeSettlesAgain(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv", "old")
	b.date("a.csv", start())
	b.look(0)
	b.done(b.look(5 * time.Second).Files)
	b.write("a.csv", "new")
	b.date("a.csv", start().Add(time.Second))
	if rep := b.look(time.Second); gone(rep.Changed) != "a.csv" {
		t.Fatal("a rewrite of the same size went unnoticed")
	}
	b.want(b.look(5*time.Second), "a.csv")
}

func TestAcknowledgedTooLateForTheOldContent(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv", "old")
	b.look(0)
	files := b.look(5 * time.Second).Files
	b.write("a.csv", "replaced")
	b.look(time.Second)
	b.done(files) // of the old content
	if rep := b.look(time.Second); gone(rep.Changed) != "a.csv" {
		t.Fatalf("changed: %+v", rep.Changed)
	}
	b.want(b.look(5*time.Second), "a.csv")
}

func TestEmptyFileWaits(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv", "")
	b.look(0)
	rep := b.look(2 * time.Minute)
	b.want(rep)
	if len(rep.Waits) != 1 || rep.Waits[0].Why != "a.csv is empty." {
		t.Fatalf("waits: %+v", rep.Waits)
	}
	b.write("a.csv", "filled")
	b.look(time.Second)
	b.want(b.look(5*time.Second), "a.csv")
}

func TestEndMarkSettlesAtOnce(t *testing.T) {
	b := newBench(t, func(r *Root, _ *Options) { r.EndMarks = []string{"*.jdx"} })
	b.write("a.jdx", "##TITLE=x")
	b.write("b.csv", "1")
	rep := b.look(0)
	b.want(rep, "a.jdx")
	if !rep.Files[0].Early {
		t.Fatal("offered at first sight without saying so")
	}
	rep = b.look(5 * time.Second) // its end record was not there, nobody acknowledged it
	b.want(rep, "a.jdx", "b.csv")
	for _, f := range rep.Files {
		if f.Early {
			t.Fatalf("%s has settled and says early", f.Path)
		}
	}
}

func TestKnownFilesAreNotOfferedAfterRestart(t *testing.T) {
	b := newBench(t, func(r *Root, o *Options) {
		at := start().Add(123456789 * time.Nanosecond)
		o.Known = func(context.Context, string) (map[string]Stamp, error) {
			// A database keeps microseconds.
			return map[string]Stamp{"a.csv": {3, at.Truncate(time.Microsecond)}, "b.csv": {9, at}, "archived.csv": {1, at}}, nil
		}
	})
	at := start().Add(123456789 * time.Nanosecond)
	b.write("a.csv", "old")
	b.date("a.csv", at)
	b.write("b.csv", "other")
	b.date("b.csv", at)
	rep := b.look(0)
	if gone(rep.Changed) != "b.csv" || len(rep.Vanished) != 0 {
		t.Fatalf("changed %v, vanished %v", rep.Changed, rep.Vanished)
	}
	b.want(b.look(5*time.Second), "b.csv")
}

func TestUnknownHistoryKeepsTheRootBlind(t *testing.T) {
	fails := true
	b := newBench(t, func(r *Root, o *Options) {
		o.Known = func(context.Context, string) (map[string]Stamp, error) {
			if fails {
				return nil, errors.New("the database is away")
			}
			return nil, nil
		}
	})
	b.write("a.csv", "1")
	rep := b.look(0)
	if rep.States[0].Visible || !strings.Contains(rep.States[0].Why, "database is away") {
		t.Fatalf("state %+v", rep.States[0])
	}
	fails = false
	b.look(time.Second)
	b.want(b.look(5*time.Second), "a.csv")
}

func TestLitterIsCountedAndIgnored(t *testing.T) {
	b := newBench(t, func(r *Root, _ *Options) { r.Ignore = []string{"*.bak", "Report*"} })
	for _, n := range []string{"~$a.xlsx", "a.part", "b.tmp", ".DS_Store", "c.crdownload", ".~lock.a.ods#", "Thumbs.db", "d.CSV.BAK",
		"report 7.pdf", "e.csv~", "f.lock", "._a.csv"} {
		b.write(n, "x")
	}
	b.write(".snapshot/a.csv", "x")
	b.write("real.csv", "x")
	rep := b.look(0)
	if s := rep.States[0]; s.Litter != 12 || s.Files != 1 {
		t.Fatalf("litter %d of 12, files %d of 1", s.Litter, s.Files)
	}
	b.want(b.look(5*time.Second), "real.csv")
}
