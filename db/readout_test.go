package db_test

import (
	"bytes"
	"context"
	"crypto/sha256"
	"errors"
	"fmt"
	"math"
	"net/url"
	"regexp"
	"sort"
	"strings"
	"testing"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"pkvigil/db"
	"pkvigil/db/dbtest"
	"pkvigil/parse"
)

// contract is needs.md section 7: view and the columns dashboards were promised.
var contract = map[string]string{
	"eyes":          "root visible newest_file_at last_poll_at clock_offset_s files_parked complete_up_to",
	"nights":        "night instrument sets_planned sets_seen stands stands_noted held waiting in_question",
	"release_list":  "set_id lot dye pka u k verdict notes decided_at",
	"reasons":       "set_id check_key observed limit_low limit_high unit outcome sentence action",
	"gaps":          "set_id missing_role missing_rung since deadline_at",
	"provenance":    "result_id file_hash path role rung first_seen_at size_bytes rule used left_out_why revision is_current",
	"revisions":     "set_id revision pka u reason by at",
	"chart_points":  "at night value centre sd limit_low limit_high ewma ewma_low ewma_high flag baseline_id ref_lot",
	"cases":         "case_id onset_low_at onset_best_at onset_high_at shape size unit",
	"causes":        "case_id rank cause resource probability log_bayes size size_sd evidence_for evidence_against",
	"reach":         "case_id result_id lot released_at impact impact_upper u resolution",
	"scans":         "set_id rung ph wavelength_nm absorbance used",
	"limit_spectra": "set_id species wavelength_nm value sd",
	"rungs":         "set_id rung ph_read ph_latent residual u amount_factor_pct baseline_mau left_out",
	"lots":          "dye lot measured_night pka u_own u_run u_lab lambda_acid_nm lambda_base_nm ratio",
	"pairs":         "reference night instrument_a instrument_b difference u_difference",
	"electrodes":    "electrode calibrated_at slope_acid_pct slope_base_pct potential7_mv third_buffer_residual stable_s forecast_limit_night",
	"buffers":       "buffer_lot nominal_ph first_used_at last_used_at instruments implied_error u_implied",
	"check_use":     "month check_key n_sets n_held n_lifted",
	"budget":        "result_id component u sensitivity dof shared_key",
	"timing":        "set_id last_scan_at ph_at fitted_at verdict_at delay_min",
	"deeds":         "at actor action object before after reason config_hash program_version",
	"z_check":       "reference instrument window_nights n mean_z sd_z",
	"brackets":      "run_id opened_by_set closed_by_set bracket_state result_id",
	"strays":        "path seen_at nearest_rule nearest_set edit_distance",
}

func TestReadoutContract(t *testing.T) {
	s := dbtest.New(t)
	ctx := t.Context()
	for view, columns := range contract {
		for _, c := range strings.Fields(columns) {
			var n int
			err := s.Pool().QueryRow(ctx, "select count(*) from information_schema.columns where table_schema = 'readout' and table_name = $1 and column_name = $2", view, c).Scan(&n)
			if err != nil || n != 1 {
				t.Errorf("readout.%s.%s is not there (%v)", view, c, err)
			}
		}
	}
	rows, err := s.Pool().Query(ctx, `select c.relname, a.attname, format_type(a.atttypid, null), col_description(c.oid, a.attnum), obj_description(c.oid, 'pg_class')
		from pg_class c join pg_namespace n on n.oid = c.relnamespace join pg_attribute a on a.attrelid = c.oid
		where n.nspname = 'readout' and a.attnum > 0 order by 1, a.attnum`)
	if err != nil {
		t.Fatal(err)
	}
	var view, column, typ string
	var comment, viewComment *string
	seen := map[string]bool{}
	unit := regexp.MustCompile(`pH|pKa|nm|absorbance|second|minute|percent|mV|\(1\)|count|unit|%|0 to 1|L/\(mol cm\)|Coverage|number|Number`)
	_, err = pgx.ForEachRow(rows, []any{&view, &column, &typ, &comment, &viewComment}, func() error {
		seen[view] = true
		if viewComment == nil || !strings.Contains(*viewComment, "Version 1") {
			t.Errorf("readout.%s has no comment with a version", view)
		}
		switch {
		case comment == nil || len(*comment) < 12:
			t.Errorf("readout.%s.%s has no comment", view, column)
		case strings.HasPrefix(typ, "timestamp") && (typ != "timestamp with time zone" || !strings.Contains(*comment, "UTC")):
			t.Errorf("readout.%s.%s is %s: %q; want timestamptz and UTC said", view, column, typ, *comment)
		case strings.HasPrefix(typ, "double") && !unit.MatchString(*comment):
			t.Errorf("readout.%s.%s: the comment names no unit: %q", view, column, *comment)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	for v := range seen {
		if contract[v] == "" {
			t.Errorf("readout.%s is not in the contract of this test", v)
		}
	}
	if len(seen) != len(contract) {
		t.Errorf("%d views, the contract has %d", len(seen), len(contract))
	}
	var fn *string
	if err := s.Pool().QueryRow(ctx, "select obj_description('readout.differences(bigint,bigint)'::regprocedure, 'pg_proc')").Scan(&fn); err != nil || fn == nil {
		t.Errorf("readout.differences: %v, %v", fn, err)
	}
}

// full is build with everything else that views show.
func full(t *testing.T, s *db.Store) *world {
	w := build(t, s)
	ctx := t.Context()
	d := must[*db.SetData](t)(s.LoadSet(ctx, w.sample.ID))
	cal := taken("cal.csv", "calibration", &parse.Content{Calibrations: []parse.Calibration{{Electrode: "E-31", Measured: at(-60), Points: []parse.CalibrationPoint{
		{Lot: "CB-201", PH: 6.865, MilliVolt: 3, TemperatureC: nan}, {Lot: "CB-207", PH: 10.012, MilliVolt: -181, TemperatureC: nan}}}},
		Plan: []parse.Planned{{Night: "2026-03-11", Instrument: "U1", Set: "MCP-L88"}, {Night: "2026-03-11", Instrument: "U1", Set: "TB-9"}}})
	stray := taken("stray.csv", "?", nil)
	stray.File.State, stray.File.NearestRule, stray.File.Distance, stray.File.Reason = db.FileParked, "ladder", 3, &db.Reason{Sentence: "No rule fits."}
	r := w.result(w.sample, 8.4, db.Stands)
	r.SetRevision = 2
	for _, m := range d.Members {
		r.Inputs = append(r.Inputs, db.Input{FileID: m.FileID, ScanID: m.ScanID, Role: m.Role, Rung: m.Rung, Used: true})
	}
	waiting := db.Set{Key: "U1/2026-03-11/wait", Instrument: "U1", Night: "2026-03-11", Name: "wait", FirstSeen: at(3)}
	c := &db.Case{Key: "CB-207/1", Resource: "CB-207", At: at(90), State: db.CaseOpen, Cause: "high buffer", Shape: "step", OnsetLow: "2026-03-10", OnsetBest: "2026-03-11",
		OnsetHigh: "2026-03-11", Size: -0.06, SizeSD: 0.01, Unit: "pH", Sentence: "CB-207 is off.", Impact: 0.03, NextCheck: "fresh bottle"}
	inTx(t, s, func(tx pgx.Tx) error {
		if err := s.TakeBatch(ctx, tx, []*db.Taken{cal, stray}); err != nil {
			return err
		}
		if _, err := s.EnsureSet(ctx, tx, &waiting); err != nil {
			return err
		}
		if _, err := s.PutResult(ctx, tx, r); err != nil {
			return err
		}
		if _, err := s.PutCase(ctx, tx, c); err != nil {
			return err
		}
		p := []db.Point{{Series: db.Series{ScopeKind: db.ScopeInstrument, Scope: "U1", Reference: "RI-C", RefLot: "R1", Characteristic: "pka"}, Unit: "1", At: at(10),
			Night: "2026-03-11", ResultID: &w.results[1].ID, SetID: &w.refs[0].ID, Value: 8.27, SD: 0.004, Judged: true}}
		if err := s.PutPoints(ctx, tx, p); err != nil {
			return err
		}
		b := &db.Baseline{Series: p[0].Series, Stage: db.Young, Centre: 8.27, Spread: 0.005, N: 8, At: at(11)}
		if err := s.PutBaseline(ctx, tx, b); err != nil {
			return err
		}
		return errors.Join(
			s.PutCalibrationFigures(ctx, tx, cal.Stored.Calibrations[0], db.CalibrationFigures{SlopeAcidPct: 99.1, SlopeBasePct: nan, Potential7MV: 1, ThirdBufferResidual: nan, StableS: 40}, at(0)),
			s.SetSetState(ctx, tx, waiting.ID, db.SetWaiting, []db.Missing{{Role: "ph"}}, at(9), at(9)),
			s.PutPointJudgements(ctx, tx, []db.PointJudgement{{PointID: p[0].ID, BaselineID: &b.ID, At: at(12), Centre: 8.27, SD: 0.005, LimitLow: 8.25, LimitHigh: 8.29,
				EWMA: 8.27, EWMALow: 8.26, EWMAHigh: 8.28, CUSUMHigh: nan, CUSUMLow: nan, CUSUMLimit: nan, Flags: []string{"beyond the limit", "seven in a row"}}}),
			s.PutRanking(ctx, tx, c.ID, at(90), []db.RankRow{{Rank: 1, Cause: "high buffer", Resource: "CB-207", Probability: 0.95, LogBayes: 20, Size: -0.06, SizeSD: 0.01, Unit: "pH"}}),
			s.PutReach(ctx, tx, c.ID, at(90), []db.ReachRow{{ResultID: r.ID, Impact: 0.02, ImpactUpper: 0.03, Resolution: db.ReachOpen}}),
			s.PutBracket(ctx, tx, &db.Bracket{Key: "U1/1", Instrument: "U1", Night: "2026-03-11", OpenedBySet: &w.refs[0].ID, State: "good", At: at(5), Sets: []int64{w.sample.ID}}),
			s.AppendDeed(ctx, tx, &db.Deed{At: at(95), Actor: "Ada", Action: "acknowledge", Object: c.Key, Because: "seen", SettingsID: &w.settings, Program: "0.1.0"}))
	})
	w.results[0], w.caseID = r, c.ID
	return w
}

// TestReadoutRows asks every view and compares what it says with what was stored.
func TestReadoutRows(t *testing.T) {
	s := dbtest.New(t)
	w := full(t, s)
	ctx := t.Context()
	for view := range contract {
		var n int
		if err := s.Pool().QueryRow(ctx, "select count(*) from readout."+view).Scan(&n); err != nil || n == 0 {
			t.Errorf("readout.%s: %d rows, %v; want some", view, n, err)
		}
	}
	text := func(sql string, args ...any) string {
		t.Helper()
		var out *string
		if err := s.Pool().QueryRow(ctx, sql, args...).Scan(&out); err != nil {
			t.Fatalf("%s: %v", sql, err)
		}
		if out == nil {
			return "NULL"
		}
		return *out
	}
	for sql, want := range map[string]string{
		"select concat_ws('|', visible, files_parked) from readout.eyes":                                                                           "t|1",
		"select concat_ws('|', sets_planned, sets_seen, references_seen, stands, waiting) from readout.nights where instrument = 'U1'":             "2|3|1|2|1",
		"select concat_ws('|', lot, dye, pka, u, k, verdict, notes[1]) from readout.release_list":                                                  "L88|m-cresol purple|8.4|0.01|2|stands|The clear window is 3.1 mAU off.",
		"select concat_ws('|', missing_role, missing_rung is null) from readout.gaps":                                                              "ph|t",
		"select string_agg(concat_ws('|', path, rule, used, is_current), ' ' order by path) from readout.provenance where is_current":              "U1/MCP-L88_ph.csv|ladder|t|t U1/MCP-L88_r01.csv|ladder|t|t",
		"select string_agg(concat_ws('|', revision, pka, is_current), ' ' order by revision) from readout.revisions where set_id = 1":              "1|8.26|f 2|8.4|t",
		"select concat_ws('|', value, centre, flag, ref_lot) from readout.chart_points":                                                            "8.27|8.27|beyond the limit, seven in a row|R1",
		"select concat_ws('|', onset_low_night, size, unit, state) from readout.cases":                                                             "2026-03-10|-0.06|pH|open",
		"select concat_ws('|', impact, u, resolution, lot) from readout.reach":                                                                     "0.02|0.01|open|L88",
		"select concat_ws('|', rung, ph, cardinality(wavelength_nm), absorbance[2], used) from readout.scans where set_id = 1":                     "01|8.123|41|0.11|t",
		"select concat_ws('|', species, value[2]) from readout.limit_spectra where set_id = 1":                                                     "acid|0.2",
		"select concat_ws('|', reference, instrument_a, instrument_b, round(difference::numeric, 4), sets_a) from readout.pairs":                   "RI-C|U1|U2|-0.0100|1",
		"select concat_ws('|', electrode, slope_acid_pct, slope_base_pct is null, buffer_lots) from readout.electrodes":                            "E-31|99.1|t|{CB-201,CB-207}",
		"select concat_ws('|', nominal_ph, instruments, implied_error, u_implied) from readout.buffers where buffer_lot = 'CB-207'":                "10.012|{U1}|-0.06|0.01",
		"select concat_ws('|', month, n_sets, n_held, n_lifted) from readout.check_use where check_key = 'rungs'":                                  "2026-03-01|3|0|0",
		"select concat_ws('|', component, sensitivity, u_pka, shared_key, dof is null) from readout.budget where bucket = 'lab' and result_id = 1": "middle buffer|0.5|0.005|buffer:CB-201|t",
		"select delay_min::text from readout.timing where set_id = 1":                                                                              "5",
		"select concat_ws('|', actor, action, reason, length(config_hash)) from readout.deeds":                                                     "Ada|acknowledge|seen|64",
		"select concat_ws('|', n, round(mean_z::numeric, 4), sd_z is null) from readout.z_check where instrument = 'U2' and window_nights = 30":    "1|0.8944|t",
		"select concat_ws('|', run_id, opened_by_set, bracket_state) from readout.brackets":                                                        "U1/1|U1/2026-03-11/RI-C|good",
		"select concat_ws('|', path, nearest_rule, edit_distance) from readout.strays":                                                             "stray.csv|ladder|3",
	} {
		if got := text(sql); got != want {
			t.Errorf("%s:\n got %s\nwant %s", sql, got, want)
		}
	}

	// Difference of two references: what they share cancels. By hand: own 0.004 each, own calibrations 0.005 each; buffer in both with equal
	// sensitivities: u^2 = 2*0.004^2 + 2*0.005^2.
	want := math.Sqrt(2*0.004*0.004 + 2*0.005*0.005)
	var diff, u float64
	var keys []string
	err := s.Pool().QueryRow(ctx, "select difference, u_difference, shared_keys from readout.differences($1, $2)", w.results[1].ID, w.results[2].ID).Scan(&diff, &u, &keys)
	if err != nil || math.Abs(diff+0.01) > 1e-12 || math.Abs(u-want) > 1e-12 || fmt.Sprint(keys) != "[buffer:CB-201]" {
		t.Errorf("differences: %v, %v (want %v), %v, %v", diff, u, want, keys, err)
	}
	if got := text("select u_difference::text from readout.pairs"); got != fmt.Sprint(u) {
		var pair float64
		if _, err := fmt.Sscan(got, &pair); err != nil || math.Abs(pair-want) > 1e-12 {
			t.Errorf("pairs: u %s, want %v", got, want)
		}
	}
}

// TestReader: the reader group may read schema readout and nothing else.
func TestReader(t *testing.T) {
	s := dbtest.New(t)
	w := full(t, s)
	ctx := t.Context()
	login := fmt.Sprintf("dash_%d", w.settings)
	password := "it's a \"secret\" \\ 1"
	for range 2 { // the second changes the password
		if err := s.CreateReader(ctx, login, password); err != nil {
			t.Fatal(err)
		}
	}
	u, err := url.Parse(s.Pool().Config().ConnString())
	if err != nil {
		t.Fatal(err)
	}
	bad := *u
	bad.User = url.UserPassword(login, "wrong-"+"word")
	if _, err := db.Open(ctx, db.Config{URL: bad.String()}); err == nil || strings.Contains(err.Error(), "wrong-word") {
		t.Errorf("wrong password: %v", err)
	}
	u.User = url.UserPassword(login, password)
	conn, err := pgx.Connect(ctx, u.String())
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(context.Background())
	for view := range contract {
		if _, err := conn.Exec(ctx, "select * from readout."+view); err != nil {
			t.Errorf("reader cannot read %s: %v", view, err)
		}
	}
	if _, err := conn.Exec(ctx, "select * from differences(1, 2)"); err != nil {
		t.Errorf("reader cannot ask for differences: %v", err)
	}
	refuse := func(sql string) {
		t.Helper()
		_, err := conn.Exec(ctx, sql)
		pg, ok := errors.AsType[*pgconn.PgError](err)
		if !ok || (pg.Code != "42501" && pg.Code != "55000") { // insufficient privilege; view not updatable
			t.Errorf("%s: got %v, want a refusal", sql, err)
		}
	}
	for _, table := range tables(t, s) {
		refuse("select * from pkvigil." + table)
		refuse("delete from pkvigil." + table)
	}
	for _, sql := range []string{"create table readout.mine (n int)", "create table public.mine (n int)", "create schema mine", "delete from readout.strays",
		"delete from readout.budget", "update readout.strays set path = 'x'", "select pkvigil.refuse_change()", "create role other", "copy (select 1) to '/tmp/pkv-reader'",
		"select pg_read_file('PG_VERSION')", "set role pkvigil", "select rolpassword from pg_authid"} {
		refuse(sql)
	}
}

// tables lists the tables and views of schema pkvigil.
func tables(t *testing.T, s *db.Store) []string {
	t.Helper()
	rows, err := s.Pool().Query(t.Context(), "select relname from pg_class where relnamespace = 'pkvigil'::regnamespace and relkind in ('r', 'v', 'p') order by 1")
	if err != nil {
		t.Fatal(err)
	}
	return must[[]string](t)(pgx.CollectRows(rows, pgx.RowTo[string]))
}

// TestDump: every table is in the dump, two histories that differ only in ids
// and moments give equal dumps, and a changed value shows.
func TestDump(t *testing.T) {
	dump := func(s *db.Store) string {
		var b bytes.Buffer
		if err := s.Dump(t.Context(), &b); err != nil {
			t.Fatal(err)
		}
		return b.String()
	}
	one, two := dbtest.New(t), dbtest.New(t)
	full(t, one)
	// The second history spends ids first, takes a moment longer, and fails once in the middle.
	ctx := t.Context()
	wasted := taken("wasted.csv", "wasted", scanOf("w", 1))
	boom := errors.New("boom")
	err := two.InTx(ctx, func(tx pgx.Tx) error { return errors.Join(two.TakeFile(ctx, tx, wasted), boom) })
	if !errors.Is(err, boom) {
		t.Fatal(err)
	}
	full(t, two)
	a, b := dump(one), dump(two)
	if a != b {
		t.Errorf("dumps differ:\n%s", lineDiff(a, b))
	}
	in := map[string]bool{}
	for _, line := range strings.Split(strings.TrimSpace(a), "\n") {
		name, _, _ := strings.Cut(line, "\t")
		in[name] = true
	}
	for _, name := range tables(t, one) {
		switch {
		case strings.HasPrefix(name, "river_"), name == "schema_version", name == "case_now", name == "file_newest", name == "reference_now", name == "reference_mean":
		case name == "root_lease", name == "delivery_attempt": // who held a lease and how often a relay was asked may differ
		case in[name], empty(t, one, name):
		default:
			t.Errorf("table %s is not in the dump", name)
		}
	}
	if _, err := two.Pool().Exec(ctx, "update sample_set set lot = 'other' where key = 'U1/2026-03-11/wait'"); err != nil {
		t.Fatal(err)
	}
	if dump(two) == a {
		t.Error("a changed lot does not show in the dump")
	}
}

func empty(t *testing.T, s *db.Store, table string) bool {
	t.Helper()
	var n int
	if err := s.Pool().QueryRow(t.Context(), "select count(*) from pkvigil."+table).Scan(&n); err != nil {
		t.Fatal(err)
	}
	return n == 0
}

// lineDiff lists lines that only one of two texts has.
func lineDiff(a, b string) string {
	count := map[string]int{}
	for _, l := range strings.Split(a, "\n") {
		count[l]++
	}
	for _, l := range strings.Split(b, "\n") {
		count[l]--
	}
	var out []string
	for l, n := range count {
		if n > 0 {
			out = append(out, "- "+l)
		} else if n < 0 {
			out = append(out, "+ "+l)
		}
	}
	sort.Strings(out)
	return strings.Join(out, "\n")
}

func TestRetireScans(t *testing.T) {
	s := dbtest.New(t)
	w := build(t, s)
	ctx := t.Context()
	for _, c := range []struct {
		night string
		dry   bool
		want  int
	}{{"2026-03-11", false, 0}, {"2026-03-12", true, 3}, {"2026-03-12", false, 3}, {"2026-03-12", false, 0}} {
		inTx(t, s, func(tx pgx.Tx) error {
			p, err := s.RetireScans(ctx, tx, c.night, c.dry)
			if p.Scans != c.want || p.Sets != c.want {
				t.Errorf("before %s, dry %v: %+v, want %d scans", c.night, c.dry, p, c.want)
			}
			return err
		})
	}
	if _, err := s.LoadSet(ctx, w.sample.ID); err == nil || !strings.Contains(err.Error(), "pruned") {
		t.Errorf("loading a pruned set: %v, want that said", err)
	}
	if raw, err := s.Bytes(ctx, nil, sha256.Sum256([]byte("scan of U1MCP-L88"))); err != nil || len(raw) == 0 {
		t.Errorf("the bytes of a pruned scan: %d, %v", len(raw), err)
	}
}
