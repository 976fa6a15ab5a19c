package pipeline

import (
	"bytes"
	"context"
	"crypto/sha256"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/rs/zerolog"

	"pkvigil/db"
	"pkvigil/db/dbtest"
	"pkvigil/pipeline/rehearse"
	"pkvigil/pipeline/settings"
)

func TestMain(m *testing.M) { os.Exit(dbtest.Main(m)) }

// more is what a lab's settings say besides what a scenario's say.
const more = `
[complete]
roles = ["blank", "ph"]
rungs_min = 7
silence = "10m"
every_row = true
deadline = "45m"

[serve]
listen = ""
`

// lines is a log that tests read while it is written.
type lines struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *lines) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.Write(p)
}

func (l *lines) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.String()
}

// A lab is a service on real folders and a real database, with a clock that
// the test moves.
type lab struct {
	t     testing.TB
	base  string
	url   string
	text  []byte
	clock *SetClock
	log   *lines
	s     *Service
}

// newLab opens a service on empty folders for the files of a scenario.
func newLab(t testing.TB, sc *rehearse.Scenario, extra string) *lab {
	t.Helper()
	l := &lab{t: t, base: t.TempDir(), url: dbtest.URL(t), log: &lines{}}
	for _, f := range []string{"U1", "METERS"} {
		if err := os.MkdirAll(filepath.Join(l.base, f), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	// Lots are letters, a dash and a number here, so that a mistyped one fits no rule.
	rules := bytes.Replace(sc.Settings(l.base), []byte(`(?P<set>[A-Z][A-Za-z0-9-]*)`), []byte(`(?P<set>[A-Z]{2,3}(?:-[A-D])?-\d+)`), 1)
	l.text = append(rules, more+extra+fmt.Sprintf("\n[storage]\ndata_dir = %q\n", filepath.Join(l.base, "data"))...)
	l.clock = NewSetClock(time.Date(2026, 3, 2, 17, 0, 0, 0, time.UTC))
	l.open()
	return l
}

// config is what the lab's service is opened with.
func (l *lab) config() Config {
	l.t.Helper()
	set, err := settings.Read(l.text, "lab.toml")
	if err != nil {
		l.t.Fatal(err)
	}
	return Config{Settings: set, Text: l.text, Clock: l.clock, Log: zerolog.New(l.log).Level(zerolog.InfoLevel), Sweep: true, Work: true, URL: l.url}
}

// open opens the service and lets it work; it is closed with the test.
func (l *lab) open() {
	l.t.Helper()
	s, err := Open(l.t.Context(), l.config())
	if err != nil {
		l.t.Fatal(err)
	}
	l.s = s
	l.t.Cleanup(func() { closeService(l.t, s) })
	if err := s.startQueue(l.t.Context()); err != nil {
		l.t.Fatal(err)
	}
}

func closeService(t testing.TB, s *Service) {
	ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
	defer cancel()
	if err := s.Close(ctx); err != nil {
		t.Error(err)
	}
}

// write puts a file into a folder, as an instrument would.
func (l *lab) write(path string, data []byte) {
	l.t.Helper()
	file := filepath.Join(l.base, filepath.FromSlash(path))
	if err := os.MkdirAll(filepath.Dir(file), 0o755); err != nil {
		l.t.Fatal(err)
	}
	if err := os.WriteFile(file, data, 0o644); err != nil {
		l.t.Fatal(err)
	}
	if err := os.Chtimes(file, l.clock.Now(), l.clock.Now()); err != nil {
		l.t.Fatal(err)
	}
}

// put writes deposits but those whose path holds one of the words.
func (l *lab) put(ds []rehearse.Deposit, but ...string) {
	l.t.Helper()
	for _, d := range ds {
		skip := false
		for _, w := range but {
			skip = skip || strings.Contains(d.Path, w)
		}
		if skip {
			continue
		}
		if _, err := rehearse.Apply(l.base, d); err != nil {
			l.t.Fatal(err)
		}
	}
}

// steps lets time pass, with a sweep and what follows from it after each piece.
func (l *lab) steps(pieces ...time.Duration) {
	l.t.Helper()
	for _, d := range pieces {
		if err := l.s.step(l.t.Context(), l.clock, l.clock.Now().Add(d)); err != nil {
			l.t.Fatal(err)
		}
	}
}

// settle lets files settle, be taken in, and whole sets be computed.
func (l *lab) settle() { l.t.Helper(); l.steps(time.Minute, time.Minute, 15*time.Minute) }

// file is the newest revision of a path.
func (l *lab) file(root, path string) *db.File {
	l.t.Helper()
	f, err := l.s.store.LatestByPath(l.t.Context(), nil, root, path)
	if err != nil {
		l.t.Fatal(err)
	}
	if f == nil {
		l.t.Fatalf("%s/%s is not known", root, path)
	}
	return f
}

// set is the only set of a name.
func (l *lab) set(name string) *db.Set {
	l.t.Helper()
	x, err := l.s.FindSet(l.t.Context(), nil, name)
	if err != nil {
		l.t.Fatal(err)
	}
	return x
}

// result is the current result of a set, nil without one.
func (l *lab) result(name string) *db.Result {
	l.t.Helper()
	r, err := l.s.store.CurrentResult(l.t.Context(), nil, l.set(name).ID)
	if err != nil {
		l.t.Fatal(err)
	}
	return r
}

// sign signs and gives what was said.
func (l *lab) sign(verb string, object ...string) (string, error) {
	l.t.Helper()
	return l.s.Sign(l.t.Context(), Signature{Verb: verb, Object: object, As: "Anna Berg", Because: "looked at"})
}

// signed is sign that must work, with what follows from it computed.
func (l *lab) signed(verb string, object ...string) string {
	l.t.Helper()
	said, err := l.sign(verb, object...)
	if err != nil {
		l.t.Fatalf("%s %v: %v", verb, object, err)
	}
	l.steps(time.Minute)
	return said
}

// count runs a query that gives one number.
func (l *lab) count(sql string, args ...any) int {
	l.t.Helper()
	var n int
	if err := l.s.store.Pool().QueryRow(l.t.Context(), sql, args...).Scan(&n); err != nil {
		l.t.Fatal(err)
	}
	return n
}

// dump is the canonical dump of a store.
func dump(t testing.TB, s *db.Store) string {
	t.Helper()
	var b bytes.Buffer
	if err := s.Dump(t.Context(), &b); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// listing is every entry below a folder with its bytes, mode and time.
func listing(t testing.TB, dir string) string {
	t.Helper()
	var b strings.Builder
	err := filepath.WalkDir(dir, func(p string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		info, err := d.Info()
		if err != nil {
			return err
		}
		fmt.Fprintf(&b, "%s %v %v", p, info.Mode(), info.ModTime().UnixNano())
		if info.Mode().IsRegular() {
			data, err := os.ReadFile(p)
			if err != nil {
				return err
			}
			fmt.Fprintf(&b, " %x", sha256.Sum256(data))
		}
		b.WriteByte('\n')
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// quiet is a quiet room that measures phenol red once a night, with faults.
func quiet(faults ...rehearse.Fault) *rehearse.Scenario {
	return &rehearse.Scenario{Seed: 11, Noise: rehearse.Quiet(), Faults: map[int][]rehearse.Fault{1: faults},
		Design: rehearse.Design{Dyes: []rehearse.Dye{rehearse.Dyes()["PR"]}}}
}

// exports are the files of a night.
func exports(t testing.TB, sc *rehearse.Scenario, night int) []rehearse.Deposit {
	t.Helper()
	ds, err := sc.Export(night, rehearse.Style{})
	if err != nil {
		t.Fatal(err)
	}
	return ds
}

// find gives the bytes of the deposit whose path ends so.
func find(t testing.TB, ds []rehearse.Deposit, end string) rehearse.Deposit {
	t.Helper()
	for _, d := range ds {
		if strings.HasSuffix(d.Path, end) {
			return d
		}
	}
	t.Fatalf("no deposit ends in %s", end)
	return rehearse.Deposit{}
}
