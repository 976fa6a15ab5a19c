package db_test

import (
	"crypto/sha256"
	"encoding/json"
	"fmt"
	"math"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/parse"
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/naming"
)

var nan = math.NaN()

// at is a moment of the invented night 2026-03-11, in minutes after 18:00 UTC.
func at(minutes int) time.Time {
	return time.Date(2026, 3, 11, 18, 0, 0, 0, time.UTC).Add(time.Duration(minutes) * time.Minute)
}

func inTx(t testing.TB, s *db.Store, f func(tx pgx.Tx) error) {
	t.Helper()
	if err := s.InTx(t.Context(), f); err != nil {
		t.Fatal(err)
	}
}

func must[T any](t testing.TB) func(v T, err error) T {
	return func(v T, err error) T {
		t.Helper()
		if err != nil {
			t.Fatal(err)
		}
		return v
	}
}

// taken makes a file with its bytes; content may be nil.
func taken(path, bytes string, c *parse.Content) *db.Taken {
	f := db.File{Root: "u1", Path: path, Size: int64(len(bytes)), ModTime: at(1), Seen: at(2), Taken: at(3), SHA256: sha256.Sum256([]byte(bytes)),
		State: db.FileTaken, Format: "delimited", Encoding: "utf-8", Layout: "columns", Distance: -1}
	return &db.Taken{File: f, Raw: []byte(bytes), Content: c}
}

// scanOf makes a content with one trace on the common grid.
func scanOf(label string, base float64) *parse.Content {
	var w, a []float64
	for i := range 41 {
		w = append(w, 400+5*float64(i))
		a = append(a, base+0.01*float64(i))
	}
	return &parse.Content{Format: "delimited", Scans: []parse.Scan{{Label: label, WavelengthNM: w, Absorbance: a, PathMM: 10, TemperatureC: nan,
		Measured: at(5), Decimals: 4, Scale: "absorbance", Instrument: "U1", PH: nan, Meta: []parse.Field{{Key: "operator", Value: "N. N."}}}}}
}

// A world is an invented night: one sample set on U1 and one reference set on
// each of two instruments, with results.
type world struct {
	s        *db.Store
	settings int64
	sample   db.Set
	refs     [2]db.Set
	results  [3]*db.Result
	caseID   int64
}

func build(t *testing.T, s *db.Store) *world {
	t.Helper()
	w := &world{s: s}
	ctx := t.Context()
	w.settings = must[int64](t)(s.PutSettings(ctx, []byte("[laboratory]\nname = \"Quillmere\"\n"), "0.1.0", at(0)))
	if err := s.PutRootState(ctx, db.RootState{Root: "u1", Instrument: "U1", Visible: true, Since: at(0), LookedAt: at(9), Newest: at(1), Files: 3, CompleteUpTo: at(8)}); err != nil {
		t.Fatal(err)
	}
	w.sample = w.set(t, "U1", "MCP-L88", db.KindSample, "m-cresol purple", "L88")
	w.refs[0] = w.set(t, "U1", "RI-C", db.KindReference, "RI-C", "R1")
	w.refs[1] = w.set(t, "U2", "RI-C", db.KindReference, "RI-C", "R1")
	for i, set := range []db.Set{w.sample, w.refs[0], w.refs[1]} {
		w.results[i] = w.result(set, 8.26+0.01*float64(i), db.Stands)
		inTx(t, s, func(tx pgx.Tx) error {
			fresh, err := s.PutResult(ctx, tx, w.results[i])
			if err == nil && !fresh {
				err = fmt.Errorf("first result of %s is not fresh", set.Key)
			}
			return err
		})
	}
	return w
}

// set takes a scan and a pH table in and makes a complete set of them.
func (w *world) set(t *testing.T, instrument, name, kind, compound, lot string) db.Set {
	t.Helper()
	ctx, s := t.Context(), w.s
	set := db.Set{Key: instrument + "/2026-03-11/" + name, Instrument: instrument, Night: "2026-03-11", Name: name, Compound: compound, Lot: lot, Kind: kind,
		FirstSeen: at(2), Deadline: at(600)}
	scan := taken(instrument+"/"+name+"_r01.csv", "scan of "+instrument+name, scanOf("r01", 0.1))
	scan.File.SettingsID = w.settings
	scan.File.Match = &naming.Match{Rule: "ladder", Role: naming.RoleScan, Set: name, Rung: "01", Date: "2026-03-11"}
	ph := taken(instrument+"/"+name+"_ph.csv", "ph of "+instrument+name, &parse.Content{Format: "ph-table", Readings: []parse.Reading{
		{Label: "01", PH: 8.123, MilliVolt: nan, TemperatureC: 25.01, SD: nan, SlopePerMin: nan, Points: 1, Electrode: "E-31", Line: 2},
		{Label: "02", PH: 8.401, MilliVolt: -82.5, TemperatureC: nan, SD: 0.002, SlopePerMin: 0.0001, Points: 7, Measured: at(6), Electrode: "E-31", Line: 3}}})
	ph.File.Match = &naming.Match{Rule: "ladder", Role: naming.RolePH, Set: name}
	inTx(t, s, func(tx pgx.Tx) error {
		if err := s.TakeBatch(ctx, tx, []*db.Taken{scan, ph}); err != nil {
			return err
		}
		if _, err := s.EnsureSet(ctx, tx, &set); err != nil {
			return err
		}
		scanID := scan.Stored.Scans[0]
		if err := s.AddMembers(ctx, tx, []*db.Member{
			{SetID: set.ID, FileID: scan.File.ID, ScanID: &scanID, Role: "scan", Rung: "01", Rule: "ladder", Measured: at(5), Active: true, At: at(3)},
			{SetID: set.ID, FileID: ph.File.ID, Role: "ph", Rule: "ladder", Active: true, At: at(3)}}); err != nil {
			return err
		}
		if _, err := s.TouchSet(ctx, tx, set.ID, at(3)); err != nil {
			return err
		}
		if err := s.SetTimes(ctx, tx, set.ID, at(5), at(3)); err != nil {
			return err
		}
		return s.SetSetState(ctx, tx, set.ID, db.SetComplete, nil, time.Time{}, at(4))
	})
	return *must[*db.Set](t)(s.SetByID(ctx, nil, set.ID))
}

// result invents a result of a set with all its parts.
func (w *world) result(set db.Set, pka float64, verdict string) *db.Result {
	own := 0.003
	if set.Kind == db.KindReference {
		own = 0.004
	}
	members := []db.Input{}
	r := &db.Result{SetID: set.ID, SetRevision: set.Revision, SettingsID: w.settings, Program: "0.1.0 amd64",
		InputSHA256: sha256.Sum256(fmt.Appendf(nil, "%s %v %v", set.Key, set.Revision, pka)), At: at(10), Because: "first computation", Verdict: verdict, Headline: "pKa found",
		Steps: 1, Constant: "mixed", TemperatureC: 25, IonicStrength: 0.1, Slope: 0.999, SlopeSD: 0.004, RMS: 0.0006, LambdaAcidNM: 434.2, LambdaBaseNM: 578.4,
		IsosbesticNM: 484.9, Ratio: 1.91, RungsUsed: 12, MeasuredFrom: at(5), MeasuredTo: at(6),
		PKa: []db.PKa{{Step: 1, PKa: pka, U: 0.01, K: 2, Expanded: 0.02, UOwn: own, URun: 0.005, ULab: 0.008, DOF: math.Inf(1), PKaOwn: pka + 0.001, UPKaOwn: own,
			Thermo: pka + 0.32, UThermo: 0.011, ThermoAtC: 25, Library: nan, ULibrary: nan, Anchored: nan, UAnchored: nan, Classical: nan, UClassical: nan,
			Assigned: 8.27, UAssigned: 0.005}},
		Checks: []db.Check{
			{Key: "rungs", Value: 12, LimitLow: 7, LimitHigh: nan, Unit: "1", Outcome: db.Stands},
			{Key: "clear_window", Value: 3.1, LimitLow: nan, LimitHigh: 3, Unit: "mAU", Outcome: db.StandsNoted, Sentence: "The clear window is 3.1 mAU off.", Action: "Run a blank."}},
		Components: []fit.Component{
			{Key: "noise", Name: "noise", C: 1, U: own, Unit: "1", Bucket: "own"},
			{Key: "buffer:CB-201", Name: "middle buffer", C: 0.5, U: 0.01, Unit: "pH", Bucket: "lab", Shared: true},
			{Key: "calibration:" + set.Instrument, Name: "calibration", C: 1, U: 0.005, Unit: "pH", DOF: 6, Bucket: "run", Shared: true}},
		Rungs: []db.Rung{{Key: "01", PHRead: 8.123, PHLatent: 8.121, Residual: -0.002, U: 0.006, AmountFactorPct: 0.2, BaselineMAU: -0.3, Alpha: []float64{0.4, 0.6}},
			{Key: "02", PHRead: 8.401, PHLatent: nan, Residual: nan, U: nan, AmountFactorPct: nan, BaselineMAU: nan, LeftOut: true, LeftOutWhy: "no scan"}},
		Spectra: []db.LimitSpectrum{{Species: "acid", WavelengthNM: []float64{400, 405}, Value: []float64{0.1, 0.2}, SD: []float64{0.001, 0.001}}},
		Inputs:  members,
		Figures: map[string]db.Figure{"ln_r_a": {Value: -0.4, SD: 0.004, Unit: "1"}},
		Record:  json.RawMessage(`{"iterations": 7, "note": "nul \u0000 here"}`),
	}
	return r
}
