package watcher

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"syscall"
	"testing"
	"time"
)

func TestReadRefusesWhatIsNotTheSettledFile(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv", "12345")
	b.date("a.csv", start())
	b.look(0)
	f := b.look(5 * time.Second).Files[0]
	if data, err := Read(t.Context(), f, 5); err != nil || string(data) != "12345" {
		t.Fatalf("%q, %v", data, err)
	}
	if _, err := Read(t.Context(), f, 4); !errors.Is(err, ErrTooLarge) {
		t.Fatalf("got %v", err)
	}
	b.write("a.csv", "54321") // same size, other time
	if _, err := Read(t.Context(), f, 100); !errors.Is(err, ErrChanged) {
		t.Fatalf("got %v", err)
	}
	b.write("a.csv", "123")
	if _, err := Read(t.Context(), f, 100); !errors.Is(err, ErrChanged) {
		t.Fatalf("got %v", err)
	}
	if err := os.Remove(f.Abs); err != nil {
		t.Fatal(err)
	}
	if _, err := Read(t.Context(), f, 100); !errors.Is(err, fs.ErrNotExist) {
		t.Fatalf("got %v", err)
	}
	if err := syscall.Mkfifo(f.Abs, 0o644); err != nil {
		t.Skipf("no named pipes here: %v", err)
	}
	if _, err := Read(t.Context(), f, 100); !errors.Is(err, ErrChanged) { // without O_NONBLOCK this waits for a writer for ever
		t.Fatalf("got %v", err)
	}
}

func TestClockPutBack(t *testing.T) {
	b := newBench(t, nil)
	b.write("a.csv", "1")
	b.look(0)
	b.look(-time.Hour) // the service's own clock was an hour ahead
	b.want(b.look(5*time.Second), "a.csv")
}

func TestYear1970AndFuture(t *testing.T) {
	b := newBench(t, nil)
	b.write("old.csv", "1")
	b.date("old.csv", time.Unix(0, 0))
	b.write("new.csv", "1")
	b.date("new.csv", start().AddDate(30, 0, 0))
	b.look(0)
	rep := b.look(5 * time.Second)
	if len(rep.Files) != 2 || rep.Files[0].Path != "new.csv" {
		t.Fatalf("%+v", rep.Files)
	}
	b.done(rep.Files)
	b.want(b.look(time.Hour))
}

// The export folder is never written to: its contents, names and times are the
// same after looking, reading and acknowledging.
func TestNothingIsWritten(t *testing.T) {
	b := newBench(t, nil)
	b.write("day/a.csv", "1")
	b.write("b.csv", "22")
	picture := func() string {
		var out []string
		err := filepath.WalkDir(b.dir, func(p string, d fs.DirEntry, err error) error {
			if err != nil {
				return err
			}
			fi, err := d.Info()
			out = append(out, fmt.Sprint(p, fi.Mode(), fi.ModTime().UnixNano(), fi.Size()))
			return err
		})
		if err != nil {
			t.Fatal(err)
		}
		slices.Sort(out)
		return strings.Join(out, "\n")
	}
	before := picture()
	b.look(0)
	rep := b.look(5 * time.Second)
	for _, f := range rep.Files {
		if _, err := Read(t.Context(), f, 100); err != nil {
			t.Fatal(err)
		}
	}
	b.done(rep.Files)
	b.look(time.Minute)
	if after := picture(); after != before {
		t.Fatalf("before:\n%s\nafter:\n%s", before, after)
	}
}

// asked counts how often size and time of files are asked for.
type asked struct {
	disk
	n int
}

func (d *asked) list(dir string, each func(fs.DirEntry) error) error {
	return d.disk.list(dir, func(e fs.DirEntry) error { return each(countingEntry{e, d}) })
}

type countingEntry struct {
	fs.DirEntry
	d *asked
}

func (e countingEntry) Info() (fs.FileInfo, error) {
	e.d.n++
	return e.DirEntry.Info()
}

// Old files cost a share little, and a change of one is still found: after
// five minutes at the latest, at once when looks are further apart.
func TestCalmFilesAreSeldomAsked(t *testing.T) {
	b := newBench(t, nil)
	d := &asked{disk: localDisk{}}
	b.w.roots[0].disk = d
	for i := range 10 {
		b.write(fmt.Sprintf("%d.csv", i), "1")
	}
	b.look(0)
	b.done(b.look(5 * time.Second).Files)
	b.look(time.Second) // takes note of the acknowledgements
	b.look(2 * time.Hour)
	d.n = 0
	for range 40 { // ten minutes
		b.look(15 * time.Second)
	}
	if d.n < 20 || d.n > 30 {
		t.Errorf("10 calm files were asked %d times in ten minutes, twice or thrice each is enough", d.n)
	}
	b.write("3.csv", "rewritten in place")
	for range 21 {
		b.look(15 * time.Second)
	}
	b.want(b.look(15*time.Second), "3.csv")
	// A replay moves in larger steps and must miss nothing.
	b.done(b.look(0).Files)
	b.look(48 * time.Hour)
	b.write("5.csv", "corrected two days later")
	if rep := b.look(6 * time.Minute); gone(rep.Changed) != "5.csv" {
		t.Errorf("changed %v", rep.Changed)
	}
	if err := os.Remove(filepath.Join(b.dir, "7.csv")); err != nil {
		t.Fatal(err)
	}
	if rep := b.look(time.Second); gone(rep.Vanished) != "7.csv" {
		t.Errorf("vanished %v", rep.Vanished)
	}
}

// Another process took files in while this one waited for its lease.
func TestRecall(t *testing.T) {
	known := map[string]Stamp{}
	b := newBench(t, func(_ *Root, o *Options) {
		o.Known = func(context.Context, string) (map[string]Stamp, error) { return known, nil }
	})
	b.write("a.csv", "1")
	b.date("a.csv", start())
	b.write("b.csv", "1")
	b.look(0)
	b.want(b.look(5*time.Second), "a.csv", "b.csv")
	known["a.csv"] = Stamp{1, start()}
	known["b.csv"] = Stamp{1, start()} // with another time: not the same file
	known["archived.csv"] = Stamp{1, start()}
	b.want(b.look(time.Second), "a.csv", "b.csv")
	b.w.Recall("u1")
	rep := b.look(time.Second)
	b.want(rep, "b.csv")
	if len(rep.Vanished) != 0 {
		t.Errorf("vanished %v", rep.Vanished)
	}
}
