package pipeline

import (
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/rs/zerolog"

	"pkvigil/db"
	"pkvigil/db/cluster"
	"pkvigil/db/dbtest"
	"pkvigil/pipeline/rehearse"
	"pkvigil/pipeline/settings"
)

// Two nights of the story, replayed: every fault built into them is found,
// nobody is accused without a reason, what stands holds the truth, the folders
// hold what was deposited and nothing else, and every number comes out again.
func TestNightsOfTheStory(t *testing.T) {
	const first, last = 8, 9 // among others a pH table five hours late
	story := rehearse.NewStory(7)
	base := t.TempDir()
	if err := rehearse.Prepare(base); err != nil {
		t.Fatal(err)
	}
	l := &lab{t: t, base: base, url: dbtest.URL(t), log: &lines{}}
	l.text = story.SettingsWith(base, rehearse.Wires{DataDir: filepath.Join(base, "data")})
	l.clock = NewSetClock(time.Date(2026, 9, 13+first, 0, 0, 0, 0, story.Zone()))
	set, err := settings.Read(l.text, "story.toml")
	if err != nil {
		t.Fatal(err)
	}
	l.s, err = Open(t.Context(), Config{Settings: set, Text: l.text, Clock: l.clock, Log: zerolog.New(l.log).Level(zerolog.WarnLevel), Sweep: true, Work: true, URL: l.url})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { closeService(t, l.s) })
	if err := (Replay{Story: story, Base: base, From: first, To: last}).Run(t.Context(), l.s, l.clock); err != nil {
		t.Fatal(err)
	}

	truth, err := rehearse.ReadTruth(filepath.Join(base, "truth"), first, last)
	if err != nil {
		t.Fatal(err)
	}
	found, err := l.s.Found(t.Context(), story)
	if err != nil {
		t.Fatal(err)
	}
	card := rehearse.Score(truth, *found)
	if card.Missed() > 0 || card.FalselyAccused() > 0 || len(card.FalseFiles) > 0 {
		t.Errorf("%s", card)
	}
	if 10*card.CoveredAll < 9*card.AllStanding || card.AllStanding < 15 {
		t.Errorf("%d of %d intervals of standing results hold the truth", card.CoveredAll, card.AllStanding)
	}
	sameAsDeposited(t, story, base, first, last)
	repeats(t, l)
	if n, all := l.count(`select count(distinct key) from message`), l.count(`select count(*) from message`); n != all || all == 0 {
		t.Errorf("%d messages with %d keys", all, n)
	}
	if n := l.count(`select count(*) from (select set_id from standing where current group by set_id having count(*) > 1) x`); n != 0 {
		t.Errorf("%d sets have two current results", n)
	}
	if s := l.log.String(); strings.Contains(s, `"error"`) {
		t.Errorf("the log of undisturbed nights has errors:\n%s", s)
	}

	// Played once more over the same folders and database, nothing is new.
	before := dump(t, l.s.store)
	if err := (Replay{Story: story, Base: base, From: first, To: last}).Run(t.Context(), l.s, l.clock); err != nil {
		t.Fatal(err)
	}
	if after := dump(t, l.s.store); after != before {
		t.Error("the same nights once more change the record")
	}
}

// sameAsDeposited compares the shares with what instruments and people did to them.
func sameAsDeposited(t *testing.T, story *rehearse.Story, base string, first, last int) {
	t.Helper()
	want := map[string]string{}
	for _, f := range rehearse.Folders() {
		want[f+"/"+rehearse.MarkerFile] = "share " + f + " of Quillmere Indicator Works\n"
	}
	for n := first; n <= last; n++ {
		for _, d := range story.Deposits(n) {
			p := d.Folder + "/" + d.Path
			switch d.Act {
			case rehearse.Write, rehearse.WritePart:
				want[p] = string(d.Bytes)
			case rehearse.Rename:
				want[p] = want[d.Folder+"/"+d.From]
				delete(want, d.Folder+"/"+d.From)
			case rehearse.Remove:
				delete(want, p)
			}
		}
	}
	seen := 0
	for _, folder := range rehearse.Folders() {
		err := filepath.WalkDir(filepath.Join(base, folder), func(p string, d fs.DirEntry, err error) error {
			if err != nil || d.IsDir() {
				return err
			}
			rel, err := filepath.Rel(base, p)
			if err != nil {
				return err
			}
			b, err := os.ReadFile(p)
			if err != nil {
				return err
			}
			seen++
			if w, ok := want[filepath.ToSlash(rel)]; !ok || w != string(b) {
				t.Errorf("%s is not as it was deposited (known: %v)", rel, ok)
			}
			return nil
		})
		if err != nil {
			t.Fatal(err)
		}
	}
	if seen != len(want) {
		t.Errorf("%d files stand in the shares, %d were deposited", seen, len(want))
	}
}

// The brief is written in the morning, once; a late file makes an addendum
// that says what changed; the brief itself is never touched again.
func TestBriefAndAddendum(t *testing.T) {
	sc := quiet()
	l := newLab(t, sc, "")
	ds := exports(t, sc, 1)
	l.clock.MoveTo(time.Date(2026, 3, 2, 20, 0, 0, 0, time.UTC))
	l.put(ds, "_ph.")
	l.settle()
	l.steps(2*time.Hour, 8*time.Hour) // 06:17 at last
	if b := l.s.Briefs(); len(b) != 0 {
		t.Fatalf("briefs before their time: %v", b)
	}
	l.steps(20 * time.Minute)
	night := "2026-03-02"
	page, ok := l.s.Brief(night)
	if !ok || !strings.Contains(string(page), "PR-1.n001") {
		t.Fatalf("briefs %v; the set that waits is in it: %v", l.s.Briefs(), ok)
	}
	l.steps(10*time.Minute, time.Hour)
	if n := l.count(`select count(*) from message where kind = 'brief'`); n != 1 {
		t.Errorf("the brief was told %d times", n)
	}
	l.put(ds)
	l.settle()
	l.steps(time.Minute)
	again, _ := l.s.Brief(night)
	if string(again) != string(page) {
		t.Error("the brief was edited")
	}
	add, ok := l.s.Brief(night + "-addendum-1")
	if !ok || !strings.Contains(string(add), "became") && !strings.Contains(string(add), "now") {
		t.Errorf("briefs %v; the addendum says what changed: %v", l.s.Briefs(), ok)
	}
	l.steps(time.Hour, time.Hour)
	var reasons string
	if err := l.s.store.Pool().QueryRow(t.Context(), `select string_agg(reason, ',' order by id) from message where kind = 'brief'`).Scan(&reasons); err != nil || reasons != "morning,addendum" {
		t.Errorf("told as %q, %v", reasons, err)
	}
}

// A folder that another process sweeps is left alone until its lease lapses;
// that is said once.
func TestOneSweeperPerFolder(t *testing.T) {
	sc := quiet()
	l := newLab(t, sc, "")
	other := db.Holder{Host: "bench-2", PID: 4711, Program: Program()}
	lease := func() {
		if held, _, err := l.s.store.ClaimRoot(t.Context(), "U1", other, l.clock.Now(), leaseFor); err != nil || !held {
			t.Fatalf("the other sweeper got %v, %v", held, err)
		}
	}
	lease()
	l.put(exports(t, sc, 1))
	for range 4 {
		l.steps(20 * time.Second)
		lease()
	}
	if n := l.count(`select count(*) from file where root = 'U1'`); n != 0 {
		t.Errorf("%d files were taken from a folder that another sweeps", n)
	}
	if n := l.count(`select count(*) from file where root = 'METERS'`); n != 1 {
		t.Errorf("%d files were taken from the folder that nobody else sweeps", n)
	}
	if n := strings.Count(l.log.String(), "process 4711 on bench-2 sweeps it"); n != 1 {
		t.Errorf("the other sweeper was named %d times", n)
	}
	l.steps(leaseFor+time.Second, time.Minute, 15*time.Minute)
	if r := l.result("PR-1.n001"); r == nil || r.Verdict != db.Stands {
		t.Errorf("after the lease lapsed the set gives %+v", r)
	}
	if !strings.Contains(l.log.String(), "sweeping folder U1 works again") {
		t.Error("the end of the wait was not said")
	}
}

// What the other sweeper took in meanwhile is not taken again.
func TestSweeperTakesOver(t *testing.T) {
	sc := quiet()
	l := newLab(t, sc, "")
	ds := exports(t, sc, 1)
	l.put(ds)
	l.settle()
	first := l.s
	files := l.count(`select count(*) from file`)
	l.open() // a second service on the same folders and database
	l.settle()
	l.clock.MoveTo(l.clock.Now().Add(time.Hour))
	l.put(exports(t, sc, 2))
	l.settle()
	if n := l.count(`select count(*) from file`); n != 2*files-1 { // the calibration is of the first night
		t.Errorf("%d files are known, two nights have %d", n, 2*files-1)
	}
	if n := l.count(`select count(*) from file where revision > 1`); n != 0 {
		t.Errorf("%d files have a second revision", n)
	}
	// The first wakes up again: nothing is left for it.
	for range 3 {
		if err := first.step(t.Context(), l.clock, l.clock.Now().Add(time.Minute)); err != nil {
			t.Fatal(err)
		}
	}
	if n := l.count(`select count(*) from file`); n != 2*files-1 {
		t.Errorf("two sweepers made %d files", n)
	}
	if n := l.count(`select count(*) from result`); n != 2 {
		t.Errorf("two sweepers made %d results of two sets", n)
	}
}

// The database is away for an hour: the program stays up, says so once, takes
// in nothing it cannot store, catches up, and tells it once.
func TestDatabaseAway(t *testing.T) {
	sc := quiet()
	own := newOwnLab(t, sc)
	ds := exports(t, sc, 1)
	own.put(ds, "_ph.", "_s1")
	own.watch(time.Minute, time.Minute)
	taken := own.count(`select count(*) from file`)
	if taken == 0 {
		t.Fatal("nothing was taken while the database was there")
	}
	if err := own.s.server.Stop(t.Context()); err != nil {
		t.Fatal(err)
	}
	own.put(ds)
	own.watch(10*time.Minute, time.Minute, 20*time.Minute, 20*time.Minute, 10*time.Minute)
	if ok, facts := own.s.Health(t.Context()); ok || facts["database"] != "does not answer" {
		t.Errorf("health says %v, %v", ok, facts)
	}
	srv, err := cluster.Start(t.Context(), own.s.serverConfig)
	if err != nil {
		t.Fatal(err)
	}
	own.s.server = srv
	own.watch(time.Minute, time.Minute, 15*time.Minute, time.Minute, 15*time.Minute)
	if err := own.s.Drain(t.Context()); err != nil {
		t.Fatal(err)
	}
	if r := own.result("PR-1.n001"); r == nil || r.Verdict != db.Stands {
		t.Errorf("after the outage the set gives %+v", r)
	}
	if n := own.count(`select count(*) from file`); n != len(ds) {
		t.Errorf("%d files are known of %d", n, len(ds))
	}
	if n := own.count(`select count(*) from message where kind = 'database.away'`); n != 1 {
		t.Errorf("told %d times that the database was away", n)
	}
	log := own.log.String()
	for _, what := range []string{"taking files in fails", "the clockwork fails"} {
		if n := strings.Count(log, what); n != 1 {
			t.Errorf("%q was logged %d times:\n%s", what, n, log)
		}
	}
	if !strings.Contains(log, "taking files in works again") {
		t.Error("the end of the outage was not logged")
	}
}

// newOwnLab is a lab with a private server of its own.
func newOwnLab(t *testing.T, sc *rehearse.Scenario) *lab {
	t.Helper()
	dbtest.Server(t) // skips where there is no PostgreSQL
	base, err := os.MkdirTemp("/tmp", "pkvl-")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(base) })
	if err := os.Chmod(base, 0o755); err != nil { // the server's account must get through
		t.Fatal(err)
	}
	l := &lab{t: t, base: base, log: &lines{}, clock: NewSetClock(time.Date(2026, 3, 2, 20, 0, 0, 0, time.UTC))}
	for _, f := range []string{"U1", "METERS"} {
		if err := os.MkdirAll(filepath.Join(base, f), 0o755); err != nil {
			t.Fatal(err)
		}
	}
	l.text = append(sc.Settings(base), more+fmt.Sprintf("\n[storage]\ndata_dir = %q\n", filepath.Join(base, "data"))...)
	l.open()
	return l
}

// watch lets time pass as the service's own loops do: a look and a tick at
// each moment, whatever the database says.
func (l *lab) watch(pieces ...time.Duration) {
	l.t.Helper()
	for _, d := range pieces {
		l.clock.MoveTo(l.clock.Now().Add(d))
		if _, err := l.s.Look(l.t.Context()); err != nil {
			l.t.Fatalf("the look ended: %v", err)
		}
		l.s.once.note(l.s.log, "the clockwork", l.s.Tick(l.t.Context(), l.clock.Now()))
	}
}

// A message with a known key is not told twice, whoever asks.
func TestNothingIsToldTwice(t *testing.T) {
	l := newLab(t, quiet(), "")
	c := condition{kind: "root.blind", key: "U1", instrument: "U1", present: true, since: l.clock.Now().Add(-time.Hour), sentence: "folder U1 is not visible"}
	for range 3 {
		if err := l.s.tellCondition(t.Context(), c, l.clock.Now()); err != nil {
			t.Fatal(err)
		}
	}
	if n := l.count(`select count(*) from message`); n != 1 {
		t.Errorf("%d messages", n)
	}
	c.present = false
	for range 2 {
		if err := l.s.tellCondition(t.Context(), c, l.clock.Now().Add(time.Hour)); err != nil {
			t.Fatal(err)
		}
	}
	var kinds []string
	rows, err := l.s.store.Pool().Query(t.Context(), `select reason from message order by id`)
	if err != nil {
		t.Fatal(err)
	}
	if kinds, err = pgx.CollectRows(rows, pgx.RowTo[string]); err != nil || !slices.Equal(kinds, []string{"opened", "closed"}) {
		t.Errorf("told %v, %v", kinds, err)
	}
}
