package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math/rand/v2"
	"net/http"
	"net/http/httptest"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"github.com/rs/zerolog"

	"pkvigil/db/dbtest"
	"pkvigil/pipeline"
	"pkvigil/pipeline/rehearse"
	"pkvigil/pipeline/settings"
)

// crashDir names, for the process that a round kills, the folder of its laboratory.
const crashDir = "PKVIGIL_CRASH_DIR"

const (
	crashSeed   = 20 // a laboratory with little to do in its first nights
	crashNights = 2
)

// beKilled makes the test binary the program that the rounds kill, when it was
// started for that; see TestMain.
func beKilled() {
	dir := os.Getenv(crashDir)
	if dir == "" {
		return
	}
	if err := replayUntilDone(dir); err != nil {
		fmt.Fprintln(os.Stderr, err)
		os.Exit(1)
	}
	os.Exit(0)
}

// An ending is what a replay leaves behind when it came to its end.
type ending struct {
	Dump        string
	TwoCurrent  int // sets with two current results
	OkTwice     int // deliveries recorded as done twice
	Undelivered int
	Messages    int
}

// replayUntilDone plays the nights, or what is left of them, and writes the ending.
func replayUntilDone(dir string) error {
	ctx := context.Background()
	file := filepath.Join(dir, "pkvigil.toml")
	text, err := os.ReadFile(file)
	if err != nil {
		return err
	}
	set, err := settings.Read(text, file)
	if err != nil {
		return err
	}
	story := rehearse.NewStory(crashSeed)
	clock := pipeline.NewSetClock(story.Start())
	s, err := pipeline.Open(ctx, pipeline.Config{Settings: set, Text: text, Clock: clock, Log: zerolog.New(os.Stderr).Level(zerolog.WarnLevel), Sweep: true, Work: true})
	if err != nil {
		return err
	}
	end := &ending{}
	err = pipeline.Replay{Story: story, Base: dir, From: 1, To: crashNights}.Run(ctx, s, clock)
	if err == nil {
		err = end.look(ctx, s)
	}
	if err := errors.Join(err, s.Close(ctx)); err != nil {
		return err
	}
	out, err := json.Marshal(end)
	if err != nil {
		return err
	}
	return os.WriteFile(filepath.Join(dir, "ending.json"), out, 0o600)
}

// look waits for the messages and gathers the ending.
func (e *ending) look(ctx context.Context, s *pipeline.Service) error {
	ctx, cancel := context.WithTimeout(ctx, time.Minute)
	defer cancel()
	for {
		n, err := s.Store().JobsOpen(ctx, "messages")
		if err != nil {
			return err
		}
		if n == 0 {
			break
		}
		select {
		case <-ctx.Done():
			return fmt.Errorf("%d messages wait: %w", n, ctx.Err())
		case <-time.After(20 * time.Millisecond):
		}
	}
	var dump bytes.Buffer
	if err := s.Store().Dump(ctx, &dump); err != nil {
		return err
	}
	e.Dump = dump.String()
	return s.Store().Pool().QueryRow(ctx, `select
		(select count(*) from (select set_id from standing where current group by set_id having count(*) > 1) x),
		(select count(*) from (select delivery_id from delivery_attempt where ok group by delivery_id having count(*) > 1) x),
		(select count(*) from delivery where state <> 'delivered'), (select count(*) from message)`).
		Scan(&e.TwoCurrent, &e.OkTwice, &e.Undelivered, &e.Messages)
}

// A screen is the receiver of the messages; it counts the copies of each.
type screen struct {
	mu   sync.Mutex
	seen map[string]int
}

func (s *screen) ServeHTTP(w http.ResponseWriter, r *http.Request) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.seen[r.Header.Get("Pkvigil-Delivery")]++
}

func (s *screen) forget() {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.seen = map[string]int{}
}

// laboratory makes empty shares and settings below dir.
func laboratory(t *testing.T, dir, url string) {
	t.Helper()
	if err := os.RemoveAll(dir); err != nil {
		t.Fatal(err)
	}
	if err := rehearse.Prepare(dir); err != nil {
		t.Fatal(err)
	}
	text := rehearse.NewStory(crashSeed).SettingsWith(dir, rehearse.Wires{DataDir: filepath.Join(dir, "data"), WebhookURL: url, WebhookSecretEnv: "PKVIGIL_CRASH_SECRET"})
	if err := os.WriteFile(filepath.Join(dir, "pkvigil.toml"), text, 0o600); err != nil {
		t.Fatal(err)
	}
}

// A life is one run of the program, from its start to its end.
type life struct {
	cmd  *exec.Cmd
	out  bytes.Buffer
	done chan error
}

func begin(t *testing.T, dir string) *life {
	t.Helper()
	self, err := os.Executable()
	if err != nil {
		t.Fatal(err)
	}
	r := &life{cmd: exec.Command(self), done: make(chan error, 1)}
	r.cmd.Env = append(os.Environ(), crashDir+"="+dir, "PKVIGIL_CRASH_SECRET=a secret of the laboratory's screen")
	r.cmd.Stdout, r.cmd.Stderr = &r.out, &r.out
	if err := r.cmd.Start(); err != nil {
		t.Fatal(err)
	}
	go func() { r.done <- r.cmd.Wait() }()
	return r
}

// finish waits for the end of the replay.
func (r *life) finish(t *testing.T, dir string) ending {
	t.Helper()
	select {
	case err := <-r.done:
		if err != nil {
			t.Fatalf("the replay ended with %v:\n%s", err, r.out.String())
		}
	case <-time.After(3 * time.Minute):
		_ = r.cmd.Process.Kill() // it hangs; the failure below says so
		t.Fatalf("the replay does not come to an end:\n%s", r.out.String())
	}
	raw, err := os.ReadFile(filepath.Join(dir, "ending.json"))
	if err != nil {
		t.Fatal(err)
	}
	var e ending
	if err := json.Unmarshal(raw, &e); err != nil {
		t.Fatal(err)
	}
	return e
}

// kill ends the program after a while with SIGKILL, and the database server
// first or afterwards where a round asks for it. It reports false when the
// replay had come to its end before.
func (r *life) kill(t *testing.T, dir string, after time.Duration, server bool) bool {
	t.Helper()
	select {
	case err := <-r.done:
		if err != nil {
			t.Fatalf("the replay ended with %v:\n%s", err, r.out.String())
		}
		return false
	case <-time.After(after):
	}
	if server && after.Microseconds()%2 == 0 {
		killServer(dir)
		server = false
	}
	if err := r.cmd.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	<-r.done
	if server {
		killServer(dir)
	}
	return true
}

// killServer ends the private server's postmaster with SIGKILL, if it runs.
func killServer(dir string) {
	files, err := filepath.Glob(filepath.Join(dir, "data", "postgres", "*", "postmaster.pid"))
	if err != nil {
		return
	}
	direct, err := filepath.Glob(filepath.Join(dir, "data", "postgres", "postmaster.pid"))
	if err != nil {
		return
	}
	for _, f := range append(files, direct...) {
		b, err := os.ReadFile(f)
		if err != nil {
			continue // it has just gone
		}
		line, _, _ := strings.Cut(string(b), "\n")
		if pid, err := strconv.Atoi(strings.TrimSpace(line)); err == nil && pid > 1 {
			_ = syscall.Kill(pid, syscall.SIGKILL) // gone already is as good
		}
	}
}

// The program and its database server are killed at random moments of the
// replayed nights and started again until the nights are over: every table
// then equals that of an undisturbed run but for surrogate ids and the times
// of our own clock, no set has two current results, no message is told twice.
func TestKilledAtRandomMoments(t *testing.T) {
	rounds := 3
	if os.Getenv("PKVIGIL_LONG") != "" {
		rounds = 20
	}
	dbtest.Server(t) // skips where there is no PostgreSQL
	base, err := os.MkdirTemp("/tmp", "pkvc-")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.Chmod(base, 0o755); err != nil { // the server's account must get through
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(base) })
	sc := &screen{seen: map[string]int{}}
	web := httptest.NewServer(sc)
	t.Cleanup(web.Close)

	dir := filepath.Join(base, "lab") // one name for all rounds: it is part of the settings
	laboratory(t, dir, web.URL)
	start := time.Now()
	want := begin(t, dir).finish(t, dir)
	took := time.Since(start)
	if want.Messages == 0 || strings.Count(want.Dump, "\nresult\t") < 8 {
		t.Fatalf("the undisturbed run has %d messages and a dump of %d lines", want.Messages, strings.Count(want.Dump, "\n"))
	}
	t.Logf("undisturbed: %.1f s, %d lines, %d messages", took.Seconds(), strings.Count(want.Dump, "\n"), want.Messages)
	rng := rand.New(rand.NewPCG(uint64(time.Now().UnixNano()), 1))
	for round := 1; round <= rounds; round++ {
		sc.forget()
		laboratory(t, dir, web.URL)
		var told []string
		for range 1 + rng.IntN(3) {
			after := time.Duration(rng.Int64N(int64(took)))
			server := rng.IntN(2) == 0
			if start := time.Now(); !begin(t, dir).kill(t, dir, after, server) {
				took = min(took, time.Since(start)) // the machine has become quicker
				break
			}
			told = append(told, fmt.Sprintf("%.2f s (server %v)", after.Seconds(), server))
		}
		if len(told) == 0 {
			round-- // it had come to its end before
			continue
		}
		again := time.Now()
		got := begin(t, dir).finish(t, dir)
		t.Logf("round %d: killed after %s; the last run took %.1f s", round, strings.Join(told, ", "), time.Since(again).Seconds())
		compare(t, want.Dump, got.Dump)
		if got.TwoCurrent != 0 || got.OkTwice != 0 || got.Undelivered != 0 || got.Messages != want.Messages {
			t.Errorf("round %d: %d sets with two current results, %d deliveries recorded twice, %d not delivered, %d messages instead of %d",
				round, got.TwoCurrent, got.OkTwice, got.Undelivered, got.Messages, want.Messages)
		}
		if len(sc.seen) != want.Messages {
			t.Errorf("round %d: %d different messages arrived, %d were to be told", round, len(sc.seen), want.Messages)
		}
		for id, n := range sc.seen {
			if n > 1+len(told) {
				t.Errorf("round %d: message %s arrived %d times", round, id, n)
			}
		}
		if t.Failed() {
			return
		}
	}
}

// compare lists the first lines that two dumps do not share.
func compare(t *testing.T, want, got string) {
	t.Helper()
	if want == got {
		return
	}
	w, g := strings.Split(want, "\n"), strings.Split(got, "\n")
	slices.Sort(w)
	slices.Sort(g)
	n := 0
	for _, side := range []struct {
		name string
		a, b []string
	}{{"lost", w, g}, {"new", g, w}} {
		for _, l := range side.a {
			if _, ok := slices.BinarySearch(side.b, l); !ok {
				if n++; n <= 12 {
					t.Errorf("%s: %.600s", side.name, l)
				}
			}
		}
	}
	t.Errorf("%d lines of %d differ from the undisturbed run", n, len(w))
}
