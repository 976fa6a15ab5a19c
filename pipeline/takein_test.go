package pipeline

import (
	"bytes"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"pkvigil/db"
)

// The states of files: taken, twin, parked, refused; touched is no state.
func TestStatesOfFiles(t *testing.T) {
	sc := quiet()
	l := newLab(t, sc, "")
	ds := exports(t, sc, 1)
	l.put(ds)
	one := find(t, ds, "_s05.csv")
	l.write("U1/"+strings.TrimSuffix(one.Path, ".csv")+" (2).csv", one.Bytes)
	l.write("U1/n001/holiday.csv", []byte("nothing of ours\n"))
	l.write("U1/n001/PR-9_s01.csv", one.Bytes[:len(one.Bytes)/2])
	before := listing(t, filepath.Join(l.base, "U1")) + listing(t, filepath.Join(l.base, "METERS"))
	l.settle()

	for _, c := range []struct{ path, state, says string }{
		{one.Path, db.FileTaken, ""},
		{strings.TrimSuffix(one.Path, ".csv") + " (2).csv", db.FileTwin, "byte-identical"},
		{"n001/holiday.csv", db.FileParked, "holiday.csv"},
		{"n001/PR-9_s01.csv", db.FileRefused, "PR-9_s01.csv"},
	} {
		f := l.file("U1", c.path)
		if f.State != c.state {
			t.Errorf("%s is %s, expected %s", c.path, f.State, c.state)
		}
		if c.says != "" && (f.Reason == nil || !strings.Contains(f.Reason.Sentence, c.says)) {
			t.Errorf("%s: reason %+v, expected %q in it", c.path, f.Reason, c.says)
		}
	}
	if f := l.file("U1", "n001/PR-9_s01.csv"); f.Reason == nil || f.Reason.Expected == "" || f.Reason.Remedy == "" {
		t.Errorf("a refusal lacks what was expected or what to do: %+v", f.Reason)
	}
	r := l.result("PR-1.n001")
	if r == nil || r.Verdict != db.Stands || math.Abs(r.PKa[0].PKa-7.8) > r.PKa[0].Expanded {
		t.Fatalf("result %+v", r)
	}
	if len(r.Rungs) != 12 || len(r.Inputs) != 14 { // twelve scans, blank, table
		t.Errorf("%d rungs, %d inputs", len(r.Rungs), len(r.Inputs))
	}

	// Touched: another time, the same bytes. Nothing new is stored.
	files, results := l.count(`select count(*) from file`), l.count(`select count(*) from result`)
	if err := os.Chtimes(filepath.Join(l.base, "U1", one.Path), l.clock.Now(), l.clock.Now().Add(time.Hour)); err != nil {
		t.Fatal(err)
	}
	l.steps(2*time.Hour, time.Minute, time.Minute)
	if f, r := l.count(`select count(*) from file`), l.count(`select count(*) from result`); f != files || r != results {
		t.Errorf("a touched file makes %d files and %d results of %d and %d", f, r, files, results)
	}
	if err := os.Chtimes(filepath.Join(l.base, "U1", one.Path), one.ModTime, one.ModTime); err != nil {
		t.Fatal(err)
	}
	if after := listing(t, filepath.Join(l.base, "U1")) + listing(t, filepath.Join(l.base, "METERS")); after != before {
		t.Error("the export folders were written to")
	}
}

// Exported again with other numbers: a revision; its result replaces the earlier one, which stays.
func TestExportedAgain(t *testing.T) {
	sc := quiet()
	l := newLab(t, sc, "")
	ds := exports(t, sc, 1)
	l.put(ds)
	l.settle()
	first := l.result("PR-1.n001")
	table := find(t, ds, "_ph.csv")
	again := bytes.Replace(table.Bytes, []byte("7.6"), []byte("7.7"), 1)
	if bytes.Equal(again, table.Bytes) {
		t.Fatalf("the table holds no 7.6: %s", table.Bytes)
	}
	l.write("U1/"+table.Path, again)
	l.settle()
	if f := l.file("U1", table.Path); f.Revision != 2 || f.Replaces == nil {
		t.Errorf("revision %d, replaces %v", f.Revision, f.Replaces)
	}
	second := l.result("PR-1.n001")
	if second.ID == first.ID || second.SetRevision <= first.SetRevision || !strings.Contains(second.Because, "changed") {
		t.Fatalf("result %d of revision %d because %q after result %d of revision %d", second.ID, second.SetRevision, second.Because, first.ID, first.SetRevision)
	}
	old, err := l.s.store.ResultByID(t.Context(), nil, first.ID)
	if err != nil {
		t.Fatal(err)
	}
	if old.Standing.Current || old.Standing.Verdict != "replaced" || old.PKa[0].PKa != first.PKa[0].PKa {
		t.Errorf("the earlier result is now %+v with %v", old.Standing, old.PKa)
	}
	// The first bytes again are a third revision, and give the first number again.
	l.write("U1/"+table.Path, table.Bytes)
	l.settle()
	if third := l.result("PR-1.n001"); third.PKa[0].PKa != first.PKa[0].PKa || third.ID == first.ID {
		t.Errorf("with the first table back pKa is %.6f, it was %.6f", third.PKa[0].PKa, first.PKa[0].PKa)
	}
	if n := l.count(`select count(*) from standing where current`); n != 1 {
		t.Errorf("%d current results of one set", n)
	}
}

// A set without its table waits and says for what; the table completes it.
func TestLatePHTable(t *testing.T) {
	sc := quiet()
	l := newLab(t, sc, "")
	ds := exports(t, sc, 1)
	l.put(ds, "_ph.")
	l.steps(time.Minute, time.Minute, 20*time.Minute)
	if x := l.set("PR-1.n001"); x.State != db.SetGathering || len(x.Missing) == 0 {
		t.Errorf("after 20 minutes the set is %s, missing %v", x.State, x.Missing)
	}
	l.steps(40 * time.Minute)
	x := l.set("PR-1.n001")
	if x.State != db.SetWaiting || len(x.Missing) != 1 || !strings.Contains(x.Missing[0].Text, "pH") || x.Missing[0].Role != "ph" {
		t.Errorf("after an hour the set is %s, missing %v", x.State, x.Missing)
	}
	if l.result("PR-1.n001") != nil {
		t.Error("a set without pH has a result")
	}
	l.steps(5 * time.Hour)
	l.put(ds)
	l.settle()
	if r := l.result("PR-1.n001"); r == nil || r.Verdict != db.Stands {
		t.Errorf("with its table the set gives %+v", r)
	}
	if x := l.set("PR-1.n001"); x.State != db.SetFitted || len(x.Missing) != 0 {
		t.Errorf("the set is %s, missing %v", x.State, x.Missing)
	}
}

// A mistyped name is parked with the set and the place it fits, and adopted by a person.
func TestTypoIsParkedAndAdopted(t *testing.T) {
	for name, together := range map[string]bool{"in one batch": true, "later": false} {
		t.Run(name, func(t *testing.T) {
			sc := quiet()
			l := newLab(t, sc, "")
			ds := exports(t, sc, 1)
			one := find(t, ds, "_s05.csv")
			wrong := strings.Replace(one.Path, "PR-1", "PR-l", 1)
			l.put(ds, one.Path)
			if !together {
				l.settle()
			}
			l.write("U1/"+wrong, one.Bytes)
			l.settle()
			f := l.file("U1", wrong)
			if f.State != db.FileParked && f.State != db.FileTaken {
				t.Fatalf("%s is %s", wrong, f.State)
			}
			if f.State == db.FileTaken {
				t.Fatalf("%s was taken for %+v", wrong, f.Match)
			}
			if f.NearestSet != "PR-1.n001" || !strings.Contains(f.Reason.Sentence, "PR-1") {
				t.Errorf("suggested is set %q, rule %q, distance %d: %s", f.NearestSet, f.NearestRule, f.Distance, f.Reason.Sentence)
			}
			l.steps(time.Hour)
			if x := l.set("PR-1.n001"); x.State != db.SetWaiting || !strings.Contains(x.Missing[0].Text, "05") {
				t.Errorf("the set is %s, missing %v", x.State, x.Missing)
			}
			if _, err := l.s.Adopt(t.Context(), Adoption{File: wrong, Set: "PR-1.n001", Rung: "05", As: "Anna Berg"}); err == nil {
				t.Error("adopted without a reason")
			}
			said, err := l.s.Adopt(t.Context(), Adoption{File: wrong, Set: "PR-1.n001", Rung: "05", As: "Anna Berg", Because: "typing error"})
			if err != nil {
				t.Fatal(err)
			}
			l.settle()
			r := l.result("PR-1.n001")
			if r == nil || r.Verdict != db.Stands || len(r.Rungs) != 12 {
				t.Fatalf("after %q: %+v", said, r)
			}
			if f := l.file("U1", wrong); f.State != db.FileTaken {
				t.Errorf("the adopted file is %s", f.State)
			}
			if _, err := l.s.Adopt(t.Context(), Adoption{File: wrong, Set: "PR-1.n001", Rung: "05", As: "Anna Berg", Because: "twice"}); err == nil {
				t.Error("adopted twice")
			}
			if n, broken, err := l.s.store.VerifyDeeds(t.Context()); err != nil || broken != nil || n != 1 {
				t.Errorf("%d deeds, broken %v, %v", n, broken, err)
			}
		})
	}
}

// A file that the database will not have fails alone.
func TestPoisonFailsAlone(t *testing.T) {
	sc := quiet()
	l := newLab(t, sc, "")
	ds := exports(t, sc, 1)
	poison := find(t, ds, "_s07.csv")
	_, err := l.s.store.Pool().Exec(t.Context(), `
		create function pkvigil.poison() returns trigger language plpgsql as $$ begin
			if exists (select 1 from pkvigil.file f where f.id = new.file_id and f.path like '%\_s07.csv') then raise exception 'poison'; end if;
			return new; end $$;
		create trigger poison before insert on pkvigil.scan for each row execute function pkvigil.poison()`)
	if err != nil {
		t.Fatal(err)
	}
	l.put(ds)
	l.settle()
	f := l.file("U1", poison.Path)
	if f.State != db.FileRefused || !strings.Contains(f.Reason.Sentence, "database") {
		t.Errorf("the poison is %s: %+v", f.State, f.Reason)
	}
	if n, all := l.count(`select count(*) from file where state = 'taken'`), len(ds); n != all-1 {
		t.Errorf("%d of %d others were taken", n, all-1)
	}
	if n := l.count(`select count(*) from file`); n != len(ds) {
		t.Errorf("%d files are stored, %d were there", n, len(ds))
	}
	if n := strings.Count(l.log.String(), "storing file by file"); n != 1 {
		t.Errorf("said %d times", n)
	}
}

// Hostile names and bytes: each is stored or refused by itself, none stops the night.
func TestHostileFiles(t *testing.T) {
	sc := quiet()
	l := newLab(t, sc, "")
	ds := exports(t, sc, 1)
	l.put(ds)
	one := find(t, ds, "_s05.csv")
	hostile := map[string][]byte{
		"U1/n001/\xff\xfe.csv":                           one.Bytes,
		"U1/n001/'; drop table file; --.csv":             []byte("x"),
		"U1/n001/<script>alert(1)<_script>.csv":          []byte("y"),
		"U1/n001/PR-8_s01.csv":                           []byte("Sample,\x00\x00\r\n1,2\r\n"),
		"U1/n001/PR-8_s03.csv":                           bytes.Repeat([]byte{0xff, 0xd8, 0x00}, 4000),
		"U1/n001/PR-8_ph.csv":                            []byte("\r\n\r\n,,,,\r\nNaN,Inf,-Inf\r\n"),
		"METERS/E-1_2026-03-05.csv":                      []byte("Electrode,E-1\r\nBuffer,mV\r\n4,NaN\r\n"),
		"U1/n001/" + strings.Repeat("long", 50) + ".csv": []byte("z"),
		"U1/n001/line\nbreak.csv":                        []byte("w"),
	}
	for p, b := range hostile {
		l.write(p, b)
	}
	l.settle()
	if r := l.result("PR-1.n001"); r == nil || r.Verdict != db.Stands {
		t.Errorf("beside hostile files the set gives %+v", r)
	}
	for p := range hostile {
		root, path, _ := strings.Cut(p, "/")
		if f, err := l.s.store.LatestByPath(t.Context(), nil, root, path); err != nil || f == nil {
			t.Errorf("%q is not known (%v)", p, err)
		}
	}
	if n := l.count(`select count(*) from file where state in ('parked', 'refused', 'twin') and reason is null`); n != 0 {
		t.Errorf("%d files were set aside without a reason", n)
	}
	// Started again, it knows every one of them.
	files := l.count(`select count(*) from file`)
	l.open()
	l.settle()
	if n := l.count(`select count(*) from file`); n != files {
		t.Errorf("started again, %d files became %d", files, n)
	}
	l.steps(24 * time.Hour)
	for _, night := range l.s.Briefs() {
		page, _ := l.s.Brief(night)
		if bytes.Contains(page, []byte("<script>alert")) {
			t.Errorf("the brief of %s carries a script", night)
		}
	}
	if len(l.s.Briefs()) == 0 {
		t.Error("no brief was written")
	}
}
