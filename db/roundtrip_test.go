package db_test

import (
	"crypto/sha256"
	"math"
	"strings"
	"testing"
	"time"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"github.com/jackc/pgx/v5"
	"pgregory.net/rapid"

	"pkvigil/db"
	"pkvigil/db/dbtest"
	"pkvigil/parse"
)

func TestFilesRoundTrip(t *testing.T) {
	s := dbtest.New(t)
	ctx := t.Context()
	content := scanOf("r01", 0.1)
	content.Scans[0].Absorbance[7] = nan // an overflown value
	content.Scans[0].TemperatureC = 25.2
	content.Events = []parse.Event{{At: at(30), Kind: "lamp", Resource: "LA-2", Text: "changed", By: "N. N.", Line: 4}}
	content.Plan = []parse.Planned{{Night: "2026-03-11", Instrument: "U1", Set: "MCP-L88", Compound: "m-cresol purple", Slot: "open", Line: 2}}
	content.Sheet = []parse.Row{{Position: "A05", Set: "MCP-L88", Rung: "05", Dilution: 2, IonicStrength: nan, CosolventPct: nan, PH: nan, Line: 3}}
	content.Calibrations = []parse.Calibration{{Electrode: "E-31", Meter: "M-3", Measured: at(-60), Points: []parse.CalibrationPoint{
		{Lot: "CB-201", PH: 6.865, MilliVolt: 3.2, TemperatureC: nan, Line: 2}, {Lot: "CB-202", PH: 10.012, MilliVolt: -181.7, TemperatureC: 25, Line: 3}}}}
	f := taken("a/b.csv", strings.Repeat("200.0000\t0.1234567\r\n", 50), content)
	f.Instruments = func(parse.Event) []string { return []string{"U1"} }
	twin := taken("a/b (2).csv", "", nil)
	twin.File.SHA256, twin.File.Size, twin.File.State, twin.Twin = f.File.SHA256, f.File.Size, db.FileTwin, f
	odd := taken("a/\xff.csv", "", nil)
	odd.File.State, odd.File.Reason = db.FileRefused, &db.Reason{Found: "0 bytes", Expected: "a scan", Remedy: "export again", Sentence: "The file is empty."}
	inTx(t, s, func(tx pgx.Tx) error { return s.TakeBatch(ctx, tx, []*db.Taken{f, twin, odd}) })

	got := must[*db.File](t)(s.FileByID(ctx, nil, f.File.ID))
	if d := cmp.Diff(&f.File, got, cmpopts.EquateEmpty()); d != "" {
		t.Errorf("file differs (-stored +read):\n%s", d)
	}
	if got := must[*db.File](t)(s.FileByID(ctx, nil, twin.File.ID)); got.TwinOf == nil || *got.TwinOf != f.File.ID {
		t.Errorf("twin points to %v, want %d", got.TwinOf, f.File.ID)
	}
	if got := must[*db.File](t)(s.LatestByPath(ctx, nil, "u1", "a/\xff.csv")); got == nil || got.Path != `a/\xFF.csv` || got.Reason.Sentence != "The file is empty." {
		t.Errorf("file with an odd name: got %+v", got)
	}
	if raw := must[[]byte](t)(s.Bytes(ctx, nil, f.File.SHA256)); string(raw) != string(f.Raw) {
		t.Errorf("bytes differ: %d of %d", len(raw), len(f.Raw))
	}
	scans := must[[]db.ScanRow](t)(s.ScansOf(ctx, nil, []int64{f.File.ID}))
	if len(scans) != 1 || scans[0].ID != f.Stored.Scans[0] {
		t.Fatalf("scans: %+v", scans)
	}
	if d := cmp.Diff(content.Scans[0], scans[0].Scan, cmpopts.EquateNaNs()); d != "" {
		t.Errorf("scan differs (-stored +read):\n%s", d)
	}
	cal := must[*db.CalibrationRow](t)(s.CalibrationBefore(ctx, nil, "E-31", at(0)))
	if cal == nil {
		t.Fatal("calibration not found")
	}
	if d := cmp.Diff(content.Calibrations[0], cal.Calibration, cmpopts.EquateNaNs()); d != "" {
		t.Errorf("calibration differs (-stored +read):\n%s", d)
	}
	if cal := must[*db.CalibrationRow](t)(s.CalibrationBefore(ctx, nil, "E-31", at(-61))); cal != nil {
		t.Errorf("calibration of the future used: %+v", cal)
	}
	if use := must[*db.ResourceUse](t)(s.ResourceInUse(ctx, nil, "U1", "lamp", at(31))); use == nil || use.Resource != "LA-2" {
		t.Errorf("lamp in use: %+v, want LA-2", use)
	}
	if use := must[*db.ResourceUse](t)(s.ResourceInUse(ctx, nil, "U1", "lamp", at(29))); use != nil {
		t.Errorf("lamp in use before the change: %+v, want none", use)
	}
	if plan := must[[]db.PlanRow](t)(s.PlanOf(ctx, nil, "2026-03-11", "")); len(plan) != 1 || plan[0].Planned != content.Plan[0] {
		t.Errorf("plan: %+v", plan)
	}
	if not := must[[]db.NotSeen](t)(s.PlannedNotSeen(ctx, nil, "2026-03-11")); len(not) != 1 || not[0].Set != "MCP-L88" {
		t.Errorf("planned and not seen: %+v", not)
	}
	sheet := must[[]db.SheetRow](t)(s.SheetRowsOfFolder(ctx, nil, "u1", "a"))
	if len(sheet) != 1 || cmp.Diff(content.Sheet[0], sheet[0].Row, cmpopts.EquateNaNs()) != "" {
		t.Errorf("sheet: %+v", sheet)
	}
	if rows := must[[]db.SheetRow](t)(s.SheetRowsOfFolder(ctx, nil, "u1", "")); len(rows) != 0 {
		t.Errorf("sheet rows of another folder: %+v", rows)
	}
}

// TestRevisions rewrites a file: the old revision stays, the new one counts.
func TestRevisions(t *testing.T) {
	s := dbtest.New(t)
	ctx := t.Context()
	one, two, three := taken("x.csv", "one", scanOf("r", 0.1)), taken("x.csv", "two", scanOf("r", 0.2)), taken("x.csv", "three", scanOf("r", 0.3))
	inTx(t, s, func(tx pgx.Tx) error { return s.TakeFile(ctx, tx, one) })
	inTx(t, s, func(tx pgx.Tx) error { return s.TakeBatch(ctx, tx, []*db.Taken{two, three}) })
	if three.File.Revision != 3 || *three.File.Replaces != two.File.ID || *two.File.Replaces != one.File.ID {
		t.Errorf("revisions: %d replaces %d, %d replaces %d", three.File.Revision, *three.File.Replaces, two.File.Revision, *two.File.Replaces)
	}
	known := must[map[string]db.Stamp](t)(s.KnownFiles(ctx, "u1"))
	if st := known["x.csv"]; len(known) != 1 || st.SHA256 != sha256.Sum256([]byte("three")) || !st.ModTime.Equal(at(1)) {
		t.Errorf("known: %+v", known)
	}
	latest := must[map[string]*db.File](t)(s.LatestByPaths(ctx, nil, "u1", []string{"x.csv", "absent"}))
	if len(latest) != 1 || latest["x.csv"].ID != three.File.ID {
		t.Errorf("latest: %+v", latest)
	}
	byHash := must[map[[32]byte]*db.File](t)(s.FilesByHash(ctx, nil, [][32]byte{one.File.SHA256, sha256.Sum256([]byte("absent"))}))
	if len(byHash) != 1 || byHash[one.File.SHA256].ID != one.File.ID {
		t.Errorf("by hash: %+v", byHash)
	}
	var grids int
	if err := s.Pool().QueryRow(ctx, "select count(*) from grid").Scan(&grids); err != nil || grids != 1 {
		t.Errorf("grids stored: %d, %v; want one for three scans", grids, err)
	}
}

// TestAnyText stores whatever a damaged file may hold.
func TestAnyText(t *testing.T) {
	s := dbtest.New(t)
	rapid.Check(t, func(rt *rapid.T) {
		junk := rapid.String()
		bytes := string(rapid.SliceOfN(rapid.Byte(), 1, 40).Draw(rt, "bytes"))
		c := &parse.Content{Scans: []parse.Scan{{Label: bytes, WavelengthNM: []float64{rapid.Float64().Draw(rt, "w")}, Absorbance: []float64{rapid.Float64().Draw(rt, "a")},
			PH: rapid.Float64().Draw(rt, "ph"), TemperatureC: rapid.Float64().Draw(rt, "t"), PathMM: rapid.Float64().Draw(rt, "path"),
			Meta: []parse.Field{{Key: junk.Draw(rt, "key"), Value: bytes}}}}}
		f := taken(bytes, bytes, c)
		f.File.Remarks = []parse.Remark{{Line: 1, Text: bytes}}
		f.File.NearestRule = bytes
		err := s.InTx(t.Context(), func(tx pgx.Tx) error { return s.TakeFile(t.Context(), tx, f) })
		if err != nil {
			rt.Fatal(err)
		}
		got, err := s.FileByID(t.Context(), nil, f.File.ID)
		if err != nil || got.Path != db.PathKey(bytes) {
			rt.Fatalf("got %+v, %v", got, err)
		}
	})
}

func TestSets(t *testing.T) {
	s := dbtest.New(t)
	w := build(t, s)
	ctx := t.Context()
	d := must[*db.SetData](t)(s.LoadSet(ctx, w.sample.ID))
	if len(d.Members) != 2 || d.Members[0].Role != "ph" || d.Members[1].Scan == nil || d.Members[1].Scan.Absorbance[1] != 0.11 || len(d.Readings) != 2 {
		t.Fatalf("loaded: %+v", d)
	}
	if r := d.Readings[1]; r.Label != "02" || r.MilliVolt != -82.5 || !math.IsNaN(r.TemperatureC) || !r.Measured.Equal(at(6)) {
		t.Errorf("reading: %+v", r)
	}
	if w.sample.Revision != 1 || w.sample.State != db.SetComplete || !w.sample.LastScanAt.Equal(at(5)) || !w.sample.CompletedAt.Equal(at(4)) || !w.sample.Deadline.Equal(at(600)) {
		t.Errorf("set: %+v", w.sample)
	}

	// A second claim of the same key finds the set, and the same member again changes nothing.
	again := db.Set{Key: w.sample.Key, Instrument: "U1", Night: "2026-03-11", Name: "MCP-L88", Series: "MCP", FirstSeen: at(50)}
	inTx(t, s, func(tx pgx.Tx) error {
		made, err := s.EnsureSet(ctx, tx, &again)
		if err != nil {
			return err
		}
		if made || again.ID != w.sample.ID || again.Series != "MCP" || again.Lot != "L88" {
			t.Errorf("ensured: made %v, %+v", made, again)
		}
		m := d.Members[1].Member
		m.ID = 0
		added, err := s.AddMember(ctx, tx, &m)
		if added || m.ID != d.Members[1].ID {
			t.Errorf("same member again: added %v, id %d, want %d", added, m.ID, d.Members[1].ID)
		}
		return err
	})

	// Waiting, with what it waits for; adopted file completes it.
	stray := taken("odd name.csv", "stray", nil)
	stray.File.State, stray.File.NearestRule, stray.File.Distance = db.FileParked, "ladder", 4
	stray.File.Reason = &db.Reason{Sentence: "No rule fits."}
	inTx(t, s, func(tx pgx.Tx) error {
		if err := s.TakeFile(ctx, tx, stray); err != nil {
			return err
		}
		return s.SetSetState(ctx, tx, w.sample.ID, db.SetWaiting, []db.Missing{{Role: "scan", Rung: "02"}}, at(700), at(650))
	})
	open := must[[]db.OpenSet](t)(s.OpenSets(ctx, nil))
	if len(open) != 1 || open[0].Roles["scan"] != 1 || open[0].Roles["ph"] != 1 || len(open[0].Rungs) != 1 || open[0].RungPH["02"] != 1 ||
		open[0].Missing[0].Rung != "02" || !open[0].CompletedAt.IsZero() {
		t.Errorf("open sets: %+v", open)
	}
	gaps := must[[]db.Gap](t)(s.Gaps(ctx, nil))
	if len(gaps) != 1 || gaps[0].Rung != "02" || !gaps[0].Since.Equal(at(650)) || !gaps[0].Deadline.Equal(at(700)) {
		t.Errorf("gaps: %+v", gaps)
	}
	inTx(t, s, func(tx pgx.Tx) error {
		if _, err := s.PutContent(ctx, tx, stray.File.ID, scanOf("adopted", 0.3), nil); err != nil {
			return err
		}
		rev, err := s.AdoptFile(ctx, tx, stray.File.ID, w.sample.ID, "scan", "02", at(800), "Ada", "named by hand")
		if rev != 2 {
			t.Errorf("revision after adopting: %d, want 2", rev)
		}
		return err
	})
	d = must[*db.SetData](t)(s.LoadSet(ctx, w.sample.ID))
	if len(d.Members) != 3 || d.Members[2].Rung != "02" || d.Members[2].Scan.Absorbance[0] != 0.3 {
		t.Errorf("after adopting: %+v", d.Members)
	}
	if f := must[*db.File](t)(s.FileByID(ctx, nil, stray.File.ID)); f.State != db.FileTaken {
		t.Errorf("adopted file is %s", f.State)
	}

	// A superseded member stays, inactive, with its reason.
	inTx(t, s, func(tx pgx.Tx) error {
		sets, err := s.RetireFile(ctx, tx, stray.File.ID, at(900), "exported again")
		if len(sets) != 1 || sets[0] != w.sample.ID {
			t.Errorf("sets touched: %v", sets)
		}
		return err
	})
	d = must[*db.SetData](t)(s.LoadSet(ctx, w.sample.ID))
	if len(d.Members) != 2 || len(d.Inactive) != 1 || d.Inactive[0].LeftOutWhy != "exported again" {
		t.Errorf("after retiring: %+v, inactive %+v", d.Members, d.Inactive)
	}
	if _, err := s.Pool().Exec(ctx, "delete from member"); err == nil {
		t.Error("a member could be deleted")
	}
	for text, want := range map[string]string{"MCP-L88": w.sample.Key, "u2/": w.refs[1].Key} {
		if got := must[[]db.Set](t)(s.SetsLike(ctx, nil, text, 1)); len(got) != 1 || got[0].Key != want {
			t.Errorf("sets like %q: %+v, want %s", text, got, want)
		}
	}
	if got := must[[]db.Set](t)(s.SetsLike(ctx, nil, "%", 9)); len(got) != 0 {
		t.Errorf("a percent sign matched %d sets", len(got))
	}
}

func TestLease(t *testing.T) {
	s := dbtest.New(t)
	ctx := t.Context()
	a, b := db.Holder{Host: "m1", PID: 10, Program: "0.1.0"}, db.Holder{Host: "m2", PID: 10, Program: "0.1.0"}
	claim := func(h db.Holder, minute int) (bool, db.Holder) {
		held, other, err := s.ClaimRoot(ctx, "u1", h, at(minute), 5*time.Minute)
		if err != nil {
			t.Fatal(err)
		}
		return held, other
	}
	if held, _ := claim(a, 0); !held {
		t.Error("first claim refused")
	}
	if held, other := claim(b, 4); held || other.Host != "m1" || !other.Since.Equal(at(0)) || !other.Until.Equal(at(5)) {
		t.Errorf("second holder: held %v, other %+v", held, other)
	}
	if held, _ := claim(a, 4); !held {
		t.Error("renewal refused")
	}
	if held, other := claim(b, 8); held || !other.Since.Equal(at(0)) {
		t.Errorf("claim within the renewed lease: held %v, other %+v", held, other)
	}
	if held, _ := claim(b, 9); !held {
		t.Error("lapsed lease not taken over")
	}
	if err := s.ReleaseRoots(ctx, b); err != nil {
		t.Fatal(err)
	}
	if held, _ := claim(a, 10); !held {
		t.Error("released root not free")
	}
}

func TestWatermarkAndSettings(t *testing.T) {
	s := dbtest.New(t)
	ctx := t.Context()
	var got struct{ Night string }
	if ok, err := s.Watermark(ctx, nil, "brief", &got); ok || err != nil {
		t.Errorf("absent watermark: %v, %v", ok, err)
	}
	for _, night := range []string{"2026-03-11", "2026-03-12"} {
		inTx(t, s, func(tx pgx.Tx) error {
			return s.PutWatermark(ctx, tx, "brief", map[string]string{"Night": night}, at(0))
		})
	}
	if ok, err := s.Watermark(ctx, nil, "brief", &got); !ok || err != nil || got.Night != "2026-03-12" {
		t.Errorf("watermark: %v, %v, %+v", ok, err, got)
	}
	one := must[int64](t)(s.PutSettings(ctx, []byte("a = 1"), "0.1.0", at(0)))
	two := must[int64](t)(s.PutSettings(ctx, []byte("a = 2"), "0.1.0", at(1)))
	if again := must[int64](t)(s.PutSettings(ctx, []byte("a = 1"), "0.2.0", at(2))); again != one || two == one {
		t.Errorf("settings ids %d, %d, again %d", one, two, again)
	}
	if raw := must[[]byte](t)(s.Settings(ctx, two)); string(raw) != "a = 2" {
		t.Errorf("settings: %q", raw)
	}
}
