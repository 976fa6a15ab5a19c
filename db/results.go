package db

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"time"

	"github.com/jackc/pgx/v5"
)

// PutResult stores a result with all its parts, makes it current and the
// earlier one replaced. The same set revision, settings, program and input
// again store nothing: fresh is false and ID is that of the stored one. A
// result of an older set revision than the current one's is stored as replaced.
// The set's row is locked until the transaction ends.
func (s *Store) PutResult(ctx context.Context, tx pgx.Tx, r *Result) (fresh bool, err error) {
	if r.By == "" {
		r.By = program
	}
	var locked int64
	if err := tx.QueryRow(ctx, `select id from sample_set where id = $1 for update`, r.SetID).Scan(&locked); err != nil {
		return false, fmt.Errorf("storing a result of set %d: %w", r.SetID, notFound(err))
	}
	err = tx.QueryRow(ctx, `insert into result (set_id, set_revision, settings_id, program, input_sha256, at, because, by, verdict, headline, steps, constant,
			temperature_c, ionic_strength, slope, slope_sd, rms, lambda_acid_nm, lambda_base_nm, isosbestic_nm, ratio, rungs_used, calibration_id,
			measured_from, measured_to, record)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16, $17, $18, $19, $20, $21, $22, $23, $24, $25, $26)
		on conflict (set_id, set_revision, settings_id, program, input_sha256) do nothing returning id`,
		r.SetID, r.SetRevision, r.SettingsID, r.Program, r.InputSHA256[:], r.At, r.Because, r.By, r.Verdict, clean(r.Headline), r.Steps, r.Constant,
		opt(r.TemperatureC), opt(r.IonicStrength), opt(r.Slope), opt(r.SlopeSD), opt(r.RMS), above0(r.LambdaAcidNM), above0(r.LambdaBaseNM),
		above0(r.IsosbesticNM), opt(r.Ratio), r.RungsUsed, r.CalibrationID, moment(r.MeasuredFrom), moment(r.MeasuredTo), rawOrNil(r.Record)).Scan(&r.ID)
	if errors.Is(err, pgx.ErrNoRows) {
		err = tx.QueryRow(ctx, `select id from result where set_id = $1 and set_revision = $2 and settings_id = $3 and program = $4 and input_sha256 = $5`,
			r.SetID, r.SetRevision, r.SettingsID, r.Program, r.InputSHA256[:]).Scan(&r.ID)
		if err != nil {
			return false, fmt.Errorf("finding the stored result of set %d: %w", r.SetID, err)
		}
		return false, nil
	}
	if err != nil {
		return false, fmt.Errorf("storing a result of set %d: %w", r.SetID, err)
	}
	if err := putParts(ctx, tx, r); err != nil {
		return false, fmt.Errorf("storing the parts of a result of set %d: %w", r.SetID, err)
	}
	if err := s.supersede(ctx, tx, r); err != nil {
		return false, err
	}
	return true, s.Notify(ctx, tx, ChannelResult, map[string]any{"set": r.SetID, "result": r.ID, "verdict": r.Verdict})
}

// program is the actor of what no person did.
const program = "pkvigil"

// supersede settles which result of the set is current.
func (s *Store) supersede(ctx context.Context, tx pgx.Tx, r *Result) error {
	var old int64
	var oldRevision int
	err := tx.QueryRow(ctx, `select r.id, r.set_revision from standing t join result r on r.id = t.result_id where t.set_id = $1 and t.current`, r.SetID).
		Scan(&old, &oldRevision)
	if err != nil && !errors.Is(err, pgx.ErrNoRows) {
		return fmt.Errorf("looking for the current result of set %d: %w", r.SetID, err)
	}
	newer := errors.Is(err, pgx.ErrNoRows) || oldRevision <= r.SetRevision
	_, err = tx.Exec(ctx, `insert into standing (result_id, set_id, current, in_question, lifted, struck, released_by, verdict)
		values ($1, $2, false, false, false, false, '', 'replaced')`, r.ID, r.SetID)
	if err != nil {
		return fmt.Errorf("storing the standing of result %d: %w", r.ID, err)
	}
	if !newer {
		return s.PutResultStatus(ctx, tx, StatusRow{ResultID: r.ID, Status: StatusReplaced, At: r.At, Actor: r.By,
			Because: "a result of a later revision was there first"})
	}
	if old != 0 {
		if err := s.PutResultStatus(ctx, tx, StatusRow{ResultID: old, Status: StatusReplaced, At: r.At, Actor: r.By, Because: r.Because}); err != nil {
			return err
		}
	}
	return s.PutResultStatus(ctx, tx, StatusRow{ResultID: r.ID, Status: StatusCurrent, At: r.At, Actor: r.By, Because: r.Because})
}

// MakeCurrent makes a stored result the current one of its set again.
func (s *Store) MakeCurrent(ctx context.Context, tx pgx.Tx, resultID int64, at time.Time, actor, because string) error {
	var current *int64
	err := tx.QueryRow(ctx, `select (select t.result_id from standing t where t.set_id = r.set_id and t.current) from result r where r.id = $1`, resultID).Scan(&current)
	if err != nil {
		return fmt.Errorf("making result %d current: %w", resultID, notFound(err))
	}
	if current != nil && *current == resultID {
		return nil
	}
	if current != nil {
		if err := s.PutResultStatus(ctx, tx, StatusRow{ResultID: *current, Status: StatusReplaced, At: at, Actor: actor, Because: because}); err != nil {
			return err
		}
	}
	return s.PutResultStatus(ctx, tx, StatusRow{ResultID: resultID, Status: StatusCurrent, At: at, Actor: actor, Because: because})
}

// PutResultStatus adds a row to what happened to a result and brings its
// standing up to date. A doubt that the same case has raised already adds no
// row. A doubt is cleared per case; cleared without a case clears all.
func (s *Store) PutResultStatus(ctx context.Context, tx pgx.Tx, row StatusRow) error {
	fail := func(err error) error {
		return fmt.Errorf("result %d, %s: %w", row.ResultID, row.Status, err)
	}
	var t Standing
	var computed string
	var released *time.Time
	err := tx.QueryRow(ctx, `select t.current, t.in_question, t.lifted, t.struck, t.released_at, t.released_by, r.verdict
		from standing t join result r on r.id = t.result_id where t.result_id = $1 for update of t`, row.ResultID).
		Scan(&t.Current, &t.InQuestion, &t.Lifted, &t.Struck, &released, &t.ReleasedBy, &computed)
	if err != nil {
		return fail(notFound(err))
	}
	switch row.Status {
	case StatusCurrent:
		t.Current = true
	case StatusReplaced:
		t.Current = false
	case StatusInQuestion:
		doubts, err := openDoubts(ctx, tx, row.ResultID)
		if err != nil {
			return fail(err)
		}
		if doubts[caseKey(row.CaseID)] {
			return nil
		}
		t.InQuestion = true
	case StatusCleared:
		doubts, err := openDoubts(ctx, tx, row.ResultID)
		if err != nil {
			return fail(err)
		}
		delete(doubts, caseKey(row.CaseID))
		t.InQuestion = len(doubts) > 0 && row.CaseID != nil
	case StatusLifted:
		t.Lifted = true
	case StatusStruck:
		t.Struck = true
	case StatusReleased:
		released, t.ReleasedBy = &row.At, row.Actor
	default:
		return fail(fmt.Errorf("found status %q, expected one of the words of package db", row.Status))
	}
	_, err = tx.Exec(ctx, `insert into result_status (result_id, status, at, actor, because, case_id) values ($1, $2, $3, $4, $5, $6)`,
		row.ResultID, row.Status, row.At, row.Actor, clean(row.Because), row.CaseID)
	if err != nil {
		return fail(err)
	}
	_, err = tx.Exec(ctx, `update standing set current = $2, in_question = $3, lifted = $4, struck = $5, released_at = $6, released_by = $7, verdict = $8
		where result_id = $1`, row.ResultID, t.Current, t.InQuestion, t.Lifted, t.Struck, released, t.ReleasedBy, t.amount(computed))
	if err != nil {
		return fail(err)
	}
	return nil
}

// caseKey is 0 for a doubt without a case.
func caseKey(id *int64) int64 {
	if id == nil {
		return 0
	}
	return *id
}

// openDoubts gives the cases that have raised a doubt about a result and not taken it back.
func openDoubts(ctx context.Context, tx pgx.Tx, resultID int64) (map[int64]bool, error) {
	rows, err := tx.Query(ctx, `select coalesce(case_id, 0), status from result_status
		where result_id = $1 and status in ('in-question', 'cleared') order by id`, resultID)
	if err != nil {
		return nil, fmt.Errorf("reading doubts: %w", err)
	}
	doubts := map[int64]bool{}
	var id int64
	var status string
	_, err = pgx.ForEachRow(rows, []any{&id, &status}, func() error {
		switch {
		case status == StatusInQuestion:
			doubts[id] = true
		case id == 0:
			clear(doubts)
		default:
			delete(doubts, id)
		}
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("reading doubts: %w", err)
	}
	return doubts, nil
}

// amount is what a result with this computed verdict amounts to.
func (t Standing) amount(computed string) string {
	switch {
	case t.Struck:
		return "struck"
	case !t.Current:
		return "replaced"
	case t.InQuestion:
		return "in-question"
	case t.Lifted && computed == Held:
		return StandsNoted
	}
	return computed
}

// StatusRows gives what happened to a result, in order.
func (s *Store) StatusRows(ctx context.Context, q Querier, resultID int64) ([]StatusRow, error) {
	rows, err := s.on(q).Query(ctx, `select result_id, status, at, actor, because, case_id from result_status where result_id = $1 order by id`, resultID)
	return collect(rows, err, "reading status rows", func(r pgx.Rows) (StatusRow, error) {
		var w StatusRow
		err := r.Scan(&w.ResultID, &w.Status, &w.At, &w.Actor, &w.Because, &w.CaseID)
		w.At = w.At.UTC()
		return w, err
	})
}

// putParts stores everything of a result but its head in one round trip.
func putParts(ctx context.Context, tx pgx.Tx, r *Result) error {
	b := &pgx.Batch{}
	for _, p := range r.PKa {
		queuePKa(b, r.ID, p)
	}
	for i, c := range r.Checks {
		b.Queue(`insert into result_check (result_id, idx, key, rung, value, limit_low, limit_high, unit, outcome, sentence, action)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11)`,
			r.ID, i, c.Key, clean(c.Rung), opt(c.Value), opt(c.LimitLow), opt(c.LimitHigh), c.Unit, c.Outcome, clean(c.Sentence), clean(c.Action))
	}
	for i, c := range r.Components {
		b.Queue(`insert into result_component (result_id, idx, step, key, name, c, u, unit, dof, bucket, shared) values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11)`,
			r.ID, i, c.Step+1, clean(c.Key), clean(c.Name), c.C, c.U, c.Unit, above0(c.DOF), c.Bucket, c.Shared)
	}
	for i, g := range r.Rungs {
		b.Queue(`insert into result_rung (result_id, idx, key, ph_read, ph_latent, residual, u, amount_factor_pct, baseline_mau, alpha, left_out, left_out_why)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12)`,
			r.ID, i, clean(g.Key), opt(g.PHRead), opt(g.PHLatent), opt(g.Residual), opt(g.U), opt(g.AmountFactorPct), opt(g.BaselineMAU),
			listOrEmpty(g.Alpha), g.LeftOut, clean(g.LeftOutWhy))
	}
	grids := map[[32]byte][]float64{}
	for i, x := range r.Spectra {
		if len(x.WavelengthNM) == 0 || len(x.Value) != len(x.WavelengthNM) || (x.SD != nil && len(x.SD) != len(x.WavelengthNM)) {
			return fmt.Errorf("spectrum %s: found %d values and %d deviations for %d wavelengths, expected as many", x.Species, len(x.Value), len(x.SD), len(x.WavelengthNM))
		}
		grids[gridSum(x.WavelengthNM)] = r.Spectra[i].WavelengthNM
	}
	queueGrids(b, grids)
	for i, x := range r.Spectra {
		grid := gridSum(x.WavelengthNM)
		b.Queue(`insert into result_spectrum (result_id, idx, species, grid, value, sd, molar) values ($1, $2, $3, $4, $5, $6, $7)`,
			r.ID, i, x.Species, grid[:], x.Value, listOrEmpty(x.SD), x.Molar)
	}
	for i, in := range r.Inputs {
		b.Queue(`insert into result_input (result_id, idx, file_id, scan_id, role, rung, used, left_out_why) values ($1, $2, $3, $4, $5, $6, $7, $8)`,
			r.ID, i, in.FileID, in.ScanID, in.Role, clean(in.Rung), in.Used, clean(in.LeftOutWhy))
	}
	for name, f := range r.Figures {
		if opt(f.Value) != nil { // a figure that could not be told is not one
			b.Queue(`insert into result_figure (result_id, name, value, sd, unit) values ($1, $2, $3, $4, $5)`, r.ID, name, f.Value, opt(f.SD), f.Unit)
		}
	}
	if b.Len() == 0 {
		return nil
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("writing: %w", err)
	}
	return nil
}

func queuePKa(b *pgx.Batch, resultID int64, p PKa) {
	// Zero is as good as unknown for numbers that come with an uncertainty: an
	// uncertainty of zero does not exist.
	pair := func(v, u float64) (*float64, *float64) {
		if !(u > 0) || math.IsNaN(v) {
			return nil, nil
		}
		return opt(v), opt(u)
	}
	own, uOwn := pair(p.PKaOwn, p.UPKaOwn)
	thermo, uThermo := pair(p.Thermo, p.UThermo)
	at := opt(p.ThermoAtC)
	if thermo == nil {
		at = nil
	}
	library, uLibrary := pair(p.Library, p.ULibrary)
	anchored, uAnchored := pair(p.Anchored, p.UAnchored)
	classical, uClassical := pair(p.Classical, p.UClassical)
	assigned, uAssigned := pair(p.Assigned, p.UAssigned)
	if assigned == nil && p.Assigned != 0 {
		assigned = opt(p.Assigned)
	}
	b.Queue(`insert into result_pka (result_id, step, pka, u, k, expanded, u_own, u_run, u_lab, dof, pka_own, u_pka_own, thermo, u_thermo, thermo_at_c,
			library, u_library, anchored, u_anchored, anchored_to, classical, u_classical, assigned, u_assigned)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16, $17, $18, $19, $20, $21, $22, $23, $24)`,
		resultID, p.Step, p.PKa, p.U, p.K, p.Expanded, p.UOwn, p.URun, p.ULab, above0(p.DOF), own, uOwn, thermo, uThermo, at,
		library, uLibrary, anchored, uAnchored, p.AnchoredTo, classical, uClassical, assigned, uAssigned)
}

// listOrEmpty is an empty array for nil.
func listOrEmpty(x []float64) []float64 {
	if x == nil {
		return []float64{}
	}
	return x
}

// rawOrNil is NULL for an empty message.
func rawOrNil(raw json.RawMessage) []byte {
	if len(raw) == 0 {
		return nil
	}
	return bytes.ReplaceAll(raw, []byte(`\u0000`), []byte(`\ufffd`)) // jsonb refuses NUL
}
