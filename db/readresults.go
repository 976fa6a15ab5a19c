package db

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/pipeline/fit"
)

const resultColumns = `r.id, r.set_id, r.set_revision, r.settings_id, r.program, r.input_sha256, r.at, r.because, r.by, r.verdict, r.headline, r.steps, r.constant,
	r.temperature_c, r.ionic_strength, r.slope, r.slope_sd, r.rms, r.lambda_acid_nm, r.lambda_base_nm, r.isosbestic_nm, r.ratio, r.rungs_used,
	r.calibration_id, r.measured_from, r.measured_to, t.current, t.in_question, t.lifted, t.struck, t.released_at, t.released_by, t.verdict`

func resultTargets(r *Result) (targets []any, done func()) {
	var sum []byte
	var temp, ionic, slope, slopeSD, rms, la, lb, iso, ratio *float64
	var from, to, released *time.Time
	t := &r.Standing
	targets = []any{&r.ID, &r.SetID, &r.SetRevision, &r.SettingsID, &r.Program, &sum, &r.At, &r.Because, &r.By, &r.Verdict, &r.Headline, &r.Steps, &r.Constant,
		&temp, &ionic, &slope, &slopeSD, &rms, &la, &lb, &iso, &ratio, &r.RungsUsed, &r.CalibrationID, &from, &to,
		&t.Current, &t.InQuestion, &t.Lifted, &t.Struck, &released, &t.ReleasedBy, &t.Verdict}
	return targets, func() {
		copy(r.InputSHA256[:], sum)
		r.At = r.At.UTC()
		r.TemperatureC, r.IonicStrength, r.Slope, r.SlopeSD, r.RMS = num(temp), num(ionic), num(slope), num(slopeSD), num(rms)
		r.LambdaAcidNM, r.LambdaBaseNM, r.IsosbesticNM, r.Ratio = num(la), num(lb), num(iso), num(ratio)
		r.MeasuredFrom, r.MeasuredTo, t.ReleasedAt = when(from), when(to), when(released)
	}
}

// CurrentResult gives the current result of a set with all its parts, nil when none.
func (s *Store) CurrentResult(ctx context.Context, q Querier, setID int64) (*Result, error) {
	return s.wholeResult(ctx, q, `t.set_id = $1 and t.current`, setID)
}

// ResultByID gives a result with all its parts; ErrNotFound when there is none.
func (s *Store) ResultByID(ctx context.Context, q Querier, id int64) (*Result, error) {
	r, err := s.wholeResult(ctx, q, `r.id = $1`, id)
	if err == nil && r == nil {
		return nil, fmt.Errorf("result %d: %w", id, ErrNotFound)
	}
	return r, err
}

func (s *Store) wholeResult(ctx context.Context, q Querier, where string, args ...any) (*Result, error) {
	rows, err := s.on(q).Query(ctx, "select "+resultColumns+", r.record from result r join standing t on t.result_id = r.id where "+where, args...)
	r, err := first(collect(rows, err, "reading a result", func(rows pgx.Rows) (Result, error) {
		var r Result
		var record []byte
		targets, done := resultTargets(&r)
		err := rows.Scan(append(targets, &record)...)
		done()
		if record != nil {
			r.Record = json.RawMessage(record)
		}
		return r, err
	}))
	if err != nil || r == nil {
		return nil, err
	}
	byID := map[int64]*Result{r.ID: r}
	if err := s.fillParts(ctx, q, byID); err != nil {
		return nil, err
	}
	return r, s.fillSpectra(ctx, q, byID)
}

// ResultsOfSet gives all results of a set, oldest first, without spectra and record.
func (s *Store) ResultsOfSet(ctx context.Context, q Querier, setID int64) ([]Summary, error) {
	return s.summaries(ctx, q, `r.set_id = $1 order by r.id`, setID)
}

// ResultsBetween gives the current results of nights from..to (YYYY-MM-DD,
// inclusive), without spectra and record, by night, instrument and first file;
// instrument "" means all.
func (s *Store) ResultsBetween(ctx context.Context, q Querier, from, to, instrument string) ([]Summary, error) {
	return s.summaries(ctx, q, `t.current and s.night between $1::text::date and $2::text::date and ($3 = '' or s.instrument = $3)
		order by s.night, s.instrument, s.first_seen, s.key`, from, to, instrument)
}

// ResultsOfCompound is ResultsBetween for one compound.
func (s *Store) ResultsOfCompound(ctx context.Context, q Querier, compound, from, to string) ([]Summary, error) {
	return s.summaries(ctx, q, `t.current and s.compound = $1 and s.night between $2::text::date and $3::text::date
		order by s.night, s.instrument, s.first_seen, s.key`, compound, from, to)
}

// ResultsOfIDs gives results without spectra and record, by id.
func (s *Store) ResultsOfIDs(ctx context.Context, q Querier, ids []int64) ([]Summary, error) {
	return s.summaries(ctx, q, `r.id = any($1) order by r.id`, ids)
}

func (s *Store) summaries(ctx context.Context, q Querier, where string, args ...any) ([]Summary, error) {
	rows, err := s.on(q).Query(ctx, "select "+resultColumns+", "+setColumns+
		" from result r join standing t on t.result_id = r.id join sample_set s on s.id = r.set_id where "+where, args...)
	all, err := collect(rows, err, "listing results", func(rows pgx.Rows) (Summary, error) {
		var m Summary
		rt, rdone := resultTargets(&m.Result)
		st, sdone := setTargets(&m.Set)
		if err := rows.Scan(append(rt, st...)...); err != nil {
			return m, err
		}
		rdone()
		return m, sdone()
	})
	if err != nil {
		return nil, err
	}
	byID := make(map[int64]*Result, len(all))
	for i := range all {
		byID[all[i].Result.ID] = &all[i].Result
	}
	return all, s.fillParts(ctx, q, byID)
}

// eachPart runs a query whose first column is a result id and hands every row
// to the result it belongs to.
func (s *Store) eachPart(ctx context.Context, q Querier, byID map[int64]*Result, doing, sql string, read func(pgx.Rows, *int64) (func(*Result), error)) error {
	ids := make([]int64, 0, len(byID))
	for id := range byID {
		ids = append(ids, id)
	}
	rows, err := s.on(q).Query(ctx, sql, ids)
	if err != nil {
		return fmt.Errorf("%s: %w", doing, err)
	}
	defer rows.Close()
	for rows.Next() {
		var id int64
		add, err := read(rows, &id)
		if err != nil {
			return fmt.Errorf("%s: %w", doing, err)
		}
		add(byID[id])
	}
	if err := rows.Err(); err != nil {
		return fmt.Errorf("%s: %w", doing, err)
	}
	return nil
}

func (s *Store) fillParts(ctx context.Context, q Querier, byID map[int64]*Result) error {
	if len(byID) == 0 {
		return nil
	}
	if err := s.eachPart(ctx, q, byID, "reading pKa", `select result_id, step, pka, u, k, expanded, u_own, u_run, u_lab, dof, pka_own, u_pka_own, thermo, u_thermo,
			thermo_at_c, library, u_library, anchored, u_anchored, anchored_to, classical, u_classical, assigned, u_assigned
		from result_pka where result_id = any($1) order by result_id, step`, readPKa); err != nil {
		return err
	}
	if err := s.eachPart(ctx, q, byID, "reading checks", `select result_id, key, rung, value, limit_low, limit_high, unit, outcome, sentence, action
		from result_check where result_id = any($1) order by result_id, idx`, readCheck); err != nil {
		return err
	}
	if err := s.eachPart(ctx, q, byID, "reading components", `select result_id, step, key, name, c, u, unit, dof, bucket, shared
		from result_component where result_id = any($1) order by result_id, idx`, readComponent); err != nil {
		return err
	}
	if err := s.eachPart(ctx, q, byID, "reading rungs", `select result_id, key, ph_read, ph_latent, residual, u, amount_factor_pct, baseline_mau, alpha, left_out, left_out_why
		from result_rung where result_id = any($1) order by result_id, idx`, readRung); err != nil {
		return err
	}
	if err := s.eachPart(ctx, q, byID, "reading inputs", `select result_id, file_id, scan_id, role, rung, used, left_out_why
		from result_input where result_id = any($1) order by result_id, idx`, readInput); err != nil {
		return err
	}
	return s.eachPart(ctx, q, byID, "reading figures", `select result_id, name, value, sd, unit from result_figure where result_id = any($1)`, readFigure)
}

func readPKa(rows pgx.Rows, id *int64) (func(*Result), error) {
	var p PKa
	var dof, own, uOwn, th, uTh, thC, lib, uLib, anch, uAnch, cl, uCl, as, uAs *float64
	err := rows.Scan(id, &p.Step, &p.PKa, &p.U, &p.K, &p.Expanded, &p.UOwn, &p.URun, &p.ULab, &dof, &own, &uOwn, &th, &uTh, &thC,
		&lib, &uLib, &anch, &uAnch, &p.AnchoredTo, &cl, &uCl, &as, &uAs)
	p.DOF = math.Inf(1)
	if dof != nil {
		p.DOF = *dof
	}
	p.PKaOwn, p.UPKaOwn, p.Thermo, p.UThermo, p.ThermoAtC = num(own), num(uOwn), num(th), num(uTh), num(thC)
	p.Library, p.ULibrary, p.Anchored, p.UAnchored = num(lib), num(uLib), num(anch), num(uAnch)
	p.Classical, p.UClassical, p.Assigned, p.UAssigned = num(cl), num(uCl), num(as), num(uAs)
	return func(r *Result) { r.PKa = append(r.PKa, p) }, err
}

func readCheck(rows pgx.Rows, id *int64) (func(*Result), error) {
	var c Check
	var v, lo, hi *float64
	err := rows.Scan(id, &c.Key, &c.Rung, &v, &lo, &hi, &c.Unit, &c.Outcome, &c.Sentence, &c.Action)
	c.Value, c.LimitLow, c.LimitHigh = num(v), num(lo), num(hi)
	return func(r *Result) { r.Checks = append(r.Checks, c) }, err
}

func readComponent(rows pgx.Rows, id *int64) (func(*Result), error) {
	var c fit.Component
	var dof *float64
	err := rows.Scan(id, &c.Step, &c.Key, &c.Name, &c.C, &c.U, &c.Unit, &dof, &c.Bucket, &c.Shared)
	c.Step-- // package fit counts from 0
	if dof != nil {
		c.DOF = *dof
	}
	return func(r *Result) { r.Components = append(r.Components, c) }, err
}

func readRung(rows pgx.Rows, id *int64) (func(*Result), error) {
	var g Rung
	var read, latent, residual, u, amount, base *float64
	err := rows.Scan(id, &g.Key, &read, &latent, &residual, &u, &amount, &base, &g.Alpha, &g.LeftOut, &g.LeftOutWhy)
	g.PHRead, g.PHLatent, g.Residual, g.U, g.AmountFactorPct, g.BaselineMAU = num(read), num(latent), num(residual), num(u), num(amount), num(base)
	if len(g.Alpha) == 0 {
		g.Alpha = nil
	}
	return func(r *Result) { r.Rungs = append(r.Rungs, g) }, err
}

func readInput(rows pgx.Rows, id *int64) (func(*Result), error) {
	var in Input
	err := rows.Scan(id, &in.FileID, &in.ScanID, &in.Role, &in.Rung, &in.Used, &in.LeftOutWhy)
	return func(r *Result) { r.Inputs = append(r.Inputs, in) }, err
}

func readFigure(rows pgx.Rows, id *int64) (func(*Result), error) {
	var name string
	var f Figure
	var sd *float64
	err := rows.Scan(id, &name, &f.Value, &sd, &f.Unit)
	f.SD = num(sd)
	return func(r *Result) {
		if r.Figures == nil {
			r.Figures = map[string]Figure{}
		}
		r.Figures[name] = f
	}, err
}

func (s *Store) fillSpectra(ctx context.Context, q Querier, byID map[int64]*Result) error {
	return s.eachPart(ctx, q, byID, "reading spectra", `select x.result_id, x.species, g.wavelength_nm, x.value, x.sd, x.molar
		from result_spectrum x join grid g on g.sha256 = x.grid where x.result_id = any($1) order by x.result_id, x.idx`,
		func(rows pgx.Rows, id *int64) (func(*Result), error) {
			var x LimitSpectrum
			err := rows.Scan(id, &x.Species, &x.WavelengthNM, &x.Value, &x.SD, &x.Molar)
			if len(x.SD) == 0 {
				x.SD = nil
			}
			return func(r *Result) { r.Spectra = append(r.Spectra, x) }, err
		})
}

// SpectraOf gives the limit spectra of one result.
func (s *Store) SpectraOf(ctx context.Context, q Querier, resultID int64) ([]LimitSpectrum, error) {
	r := &Result{ID: resultID}
	err := s.fillSpectra(ctx, q, map[int64]*Result{resultID: r})
	return r.Spectra, err
}
