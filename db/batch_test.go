package db_test

import (
	"errors"
	"fmt"
	"sync"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/db/dbtest"
)

// TestBatchFallback: one bad file spoils a batch and nothing of it stays; taken
// one by one under savepoints, the bad one fails alone.
func TestBatchFallback(t *testing.T) {
	s := dbtest.New(t)
	ctx := t.Context()
	bad := taken("bad.csv", "bad", scanOf("r", 0.1))
	bad.Content.Scans[0].Absorbance = bad.Content.Scans[0].Absorbance[:3]
	refused := taken("refused.csv", "refused", nil)
	refused.File.State = db.FileRefused // without a reason: the schema refuses
	batch := []*db.Taken{taken("a.csv", "a", scanOf("r", 0.1)), bad, refused, taken("b.csv", "b", scanOf("r", 0.2))}
	for _, wrong := range []*db.Taken{bad, refused} {
		if err := s.InTx(ctx, func(tx pgx.Tx) error { return s.TakeBatch(ctx, tx, []*db.Taken{batch[0], wrong, batch[3]}) }); err == nil || db.Away(err) {
			t.Errorf("a batch with %s: %v, want an error of the work", wrong.File.Path, err)
		}
	}
	if known := must[map[string]db.Stamp](t)(s.KnownFiles(ctx, "u1")); len(known) != 0 {
		t.Errorf("a failed batch left %v", known)
	}
	var failed []string
	inTx(t, s, func(tx pgx.Tx) error {
		for _, f := range batch {
			if err := pgx.BeginFunc(ctx, tx, func(sub pgx.Tx) error { return s.TakeFile(ctx, sub, f) }); err != nil {
				failed = append(failed, f.File.Path)
			}
		}
		return nil
	})
	known := must[map[string]db.Stamp](t)(s.KnownFiles(ctx, "u1"))
	if fmt.Sprint(failed) != "[bad.csv refused.csv]" || len(known) != 2 || known["a.csv"].FileID != batch[0].File.ID {
		t.Errorf("failed %v, known %v", failed, known)
	}
}

// TestBatchesAtOnce lets batches of different roots that share bytes and grids
// run at once, in opposite orders: they must not lock each other out.
func TestBatchesAtOnce(t *testing.T) {
	s := dbtest.New(t)
	ctx := t.Context()
	var wg sync.WaitGroup
	errs := make([]error, 4)
	for g := range errs {
		wg.Go(func() {
			for round := range 5 {
				var batch []*db.Taken
				for i := range 20 {
					k := i
					if g%2 == 1 {
						k = 19 - i
					}
					f := taken(fmt.Sprintf("f%d-%d.csv", round, k), fmt.Sprintf("bytes %d %d", round, k), scanOf("r", 0.1))
					f.Content.Scans[0].WavelengthNM[0] = 300 + float64(k) // a grid of its own
					f.File.Root = fmt.Sprintf("root%d", g)
					batch = append(batch, f)
				}
				errs[g] = errors.Join(errs[g], s.InTx(ctx, func(tx pgx.Tx) error { return s.TakeBatch(ctx, tx, batch) }))
			}
		})
	}
	wg.Wait()
	if err := errors.Join(errs...); err != nil {
		t.Fatal(err)
	}
	var contents, grids, files int
	err := s.Pool().QueryRow(ctx, "select (select count(*) from content), (select count(*) from grid), (select count(*) from file)").Scan(&contents, &grids, &files)
	if err != nil || contents != 100 || grids != 20 || files != 400 {
		t.Errorf("contents %d, grids %d, files %d, %v; want 100, 20, 400", contents, grids, files, err)
	}
}

// TestSmallQuestions asks the questions that the service and its monitor ask.
func TestSmallQuestions(t *testing.T) {
	s := dbtest.New(t)
	w := full(t, s)
	ctx := t.Context()
	if n := must[int64](t)(s.ResetRunningJobs(ctx)); n != 0 {
		t.Errorf("interrupted jobs: %d", n)
	}
	if n := must[int](t)(s.JobsOpen(ctx, "")); n != 0 {
		t.Errorf("open jobs: %d", n)
	}
	if id := must[int64](t)(s.FirstStandingReference(ctx, nil, "U1", "RI-C", "R1", "2026-03-12")); id != w.results[1].ID {
		t.Errorf("first standing reference: %d, want %d", id, w.results[1].ID)
	}
	if id := must[int64](t)(s.FirstStandingReference(ctx, nil, "U1", "RI-C", "R1", "2026-03-11")); id != 0 {
		t.Errorf("reference before the first night: %d", id)
	}
	if last := must[time.Time](t)(s.LastArrival(ctx, nil, "u1", at(100))); !last.Equal(at(2)) {
		t.Errorf("last arrival: %v", last)
	}
	if raw := must[[]byte](t)(s.RecordOf(ctx, nil, w.results[1].ID)); len(raw) == 0 {
		t.Error("no record")
	}
	if ids := must[[]int64](t)(s.SetsWithCalibrations(ctx, nil, map[int64]bool{1: true})); len(ids) != 0 {
		t.Errorf("sets with the calibration: %v", ids)
	}
	if n := must[int](t)(s.FilesStored(ctx)); n != 8 {
		t.Errorf("files stored: %d, want 8", n)
	}
	if ever := must[map[int64]bool](t)(s.EverWaited(ctx)); len(ever) != 1 {
		t.Errorf("ever waited: %v", ever)
	}
	g := must[map[string]map[string]float64](t)(s.Gauges(ctx, at(100)))
	if g["pkvigil_files"]["parked"] != 1 || g["pkvigil_cases"]["open"] != 1 || g["pkvigil_folder_visible"]["u1"] != 1 {
		t.Errorf("gauges: %v", g)
	}
	counts := must[[]db.NightCount](t)(s.NightCounts(ctx, nil, "2026-03-01", "2026-03-31"))
	if len(counts) != 2 || counts[0].Planned != 2 || counts[0].Parked != 1 || counts[0].Waiting != 1 {
		t.Errorf("counts: %+v", counts)
	}
	held := must[[]db.HeldReason](t)(s.HeldReasons(ctx, nil, "2026-03-11", "2026-03-11"))
	if len(held) != 3 || held[0].Key != "clear_window" || held[0].LimitHigh != 3 {
		t.Errorf("reasons: %+v", held)
	}
	use := must[[]db.CheckUse](t)(s.CheckUse(ctx, nil, "2026-03-01", "2026-03-31"))
	if len(use) != 2 || use[0].Sets != 3 || use[0].Held != 0 {
		t.Errorf("check use: %+v", use)
	}
	if not := must[[]db.NotSeen](t)(s.PlannedNotSeen(ctx, nil, "2026-03-11")); len(not) != 1 || not[0].Set != "TB-9" {
		t.Errorf("planned and not seen: %+v", not)
	}
	if got := must[[]db.File](t)(s.FilesIn(ctx, nil, db.FileParked, at(0), at(10))); len(got) != 1 || got[0].NearestRule != "ladder" || got[0].Distance != 3 {
		t.Errorf("parked: %+v", got)
	}
	if got := must[[]db.File](t)(s.FilesLike(ctx, nil, "_r01", 5)); len(got) != 3 {
		t.Errorf("files like _r01: %d, want 3", len(got))
	}
	if got := must[[]db.Summary](t)(s.ResultsOfCompound(ctx, nil, "RI-C", "2026-03-01", "2026-03-31")); len(got) != 2 || got[0].Set.Instrument != "U1" || got[1].Figures["ln_r_a"].Value != -0.4 {
		t.Errorf("results of RI-C: %d", len(got))
	}
	if got := must[[]db.EventRow](t)(s.EventsBetween(ctx, nil, time.Time{}, time.Time{})); len(got) != 0 {
		t.Errorf("events: %+v", got)
	}
	states := must[[]db.RootState](t)(s.RootStates(ctx, nil))
	if len(states) != 1 || states[0].Instrument != "U1" || !states[0].CompleteUpTo.Equal(at(8)) {
		t.Errorf("roots: %+v", states)
	}
}
