package db

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
)

// PutPoints stores chart points, once each, and fills in their ids.
func (s *Store) PutPoints(ctx context.Context, tx pgx.Tx, points []Point) error {
	if len(points) == 0 {
		return nil
	}
	b := &pgx.Batch{}
	for i := range points {
		p := &points[i]
		// A repeated point changes nothing; the second half finds its id.
		b.Queue(`with n as (insert into point (scope_kind, scope, reference, ref_lot, characteristic, unit, at, night, slot, set_id, result_id, calibration_id, value, sd, judged)
				values ($1, $2, $3, $4, $5, $6, $7, $8::text::date, $9, $10, $11, $12, $13, $14, $15)
				on conflict (scope_kind, scope, reference, ref_lot, characteristic, at, result_id, calibration_id) do nothing returning id)
			select id from n union all
			select id from point where scope_kind = $1 and scope = $2 and reference = $3 and ref_lot = $4 and characteristic = $5 and at = $7
				and result_id is not distinct from $11 and calibration_id is not distinct from $12 limit 1`,
			p.ScopeKind, p.Scope, p.Reference, p.RefLot, p.Characteristic, p.Unit, p.At, p.Night, p.Slot, p.SetID, p.ResultID, p.CalibrationID,
			p.Value, opt(p.SD), p.Judged).QueryRow(func(row pgx.Row) error { return row.Scan(&p.ID) })
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("storing %d chart points: %w", len(points), err)
	}
	return nil
}

const pointColumns = `p.id, p.scope_kind, p.scope, p.reference, p.ref_lot, p.characteristic, p.unit, p.at, p.night, p.slot, p.set_id, p.result_id,
	p.calibration_id, p.value, p.sd, p.judged`

func pointTargets(p *Point) (targets []any, done func()) {
	var night time.Time
	var sd *float64
	return []any{&p.ID, &p.ScopeKind, &p.Scope, &p.Reference, &p.RefLot, &p.Characteristic, &p.Unit, &p.At, &night, &p.Slot, &p.SetID, &p.ResultID,
			&p.CalibrationID, &p.Value, &sd, &p.Judged},
		func() { p.At, p.Night, p.SD = p.At.UTC(), night.Format(time.DateOnly), num(sd) }
}

// historyWhere narrows points of alias p; its arguments are those of historyArgs.
const historyWhere = ` left join standing t on t.result_id = p.result_id
	where p.at <= $1 and ($2 = '' or p.scope_kind = $2) and ($3 = '' or p.scope = $3) and ($4 = '' or p.reference = $4) and ($5 = '' or p.ref_lot = $5)
		and ($6 = '' or p.characteristic = $6) and ($7::text is null or p.night >= $7::text::date)
		and ($8 or p.result_id is null or (t.current and not t.struck))
	order by p.scope_kind, p.scope, p.reference, p.characteristic, p.at, p.id`

func historyArgs(f PointFilter, until time.Time) []any {
	return []any{until, f.ScopeKind, f.Scope, f.Reference, f.RefLot, f.Characteristic, nightOrNil(f.FromNight), f.All}
}

// History gives chart points at or before a moment, by series and time. Points
// of results replaced or struck are left out unless the filter says All.
func (s *Store) History(ctx context.Context, q Querier, f PointFilter, until time.Time) ([]Point, error) {
	rows, err := s.on(q).Query(ctx, "select "+pointColumns+" from point p"+historyWhere, historyArgs(f, until)...)
	return collect(rows, err, "reading chart points", func(r pgx.Rows) (Point, error) {
		var p Point
		targets, done := pointTargets(&p)
		err := r.Scan(targets...)
		done()
		return p, err
	})
}

// JudgedHistory is History with each point's newest judgement.
func (s *Store) JudgedHistory(ctx context.Context, q Querier, f PointFilter, until time.Time) ([]JudgedPoint, error) {
	rows, err := s.on(q).Query(ctx, "select "+pointColumns+`, j.baseline_id, j.at, j.centre, j.sd, j.limit_low, j.limit_high, j.ewma, j.ewma_low, j.ewma_high,
			j.cusum_high, j.cusum_low, j.cusum_limit, j.flags
		from point p left join lateral (select * from point_judgement j where j.point_id = p.id order by j.id desc limit 1) j on true`+historyWhere,
		historyArgs(f, until)...)
	return collect(rows, err, "reading judged chart points", func(r pgx.Rows) (JudgedPoint, error) {
		var p JudgedPoint
		var at *time.Time
		var baseline *int64
		var centre, sd, low, high, ewma, elow, ehigh, chigh, clow, climit *float64
		var flags []string
		targets, done := pointTargets(&p.Point)
		err := r.Scan(append(targets, &baseline, &at, &centre, &sd, &low, &high, &ewma, &elow, &ehigh, &chigh, &clow, &climit, &flags)...)
		done()
		if at != nil {
			p.Judgement = &PointJudgement{PointID: p.ID, BaselineID: baseline, At: at.UTC(), Centre: num(centre), SD: num(sd), LimitLow: num(low),
				LimitHigh: num(high), EWMA: num(ewma), EWMALow: num(elow), EWMAHigh: num(ehigh), CUSUMHigh: num(chigh), CUSUMLow: num(clow),
				CUSUMLimit: num(climit), Flags: flags}
		}
		return p, err
	})
}

// PutBaseline stores the next version of a chart's baseline and fills in id and version.
func (s *Store) PutBaseline(ctx context.Context, tx pgx.Tx, b *Baseline) error {
	err := tx.QueryRow(ctx, `insert into baseline (scope_kind, scope, reference, ref_lot, characteristic, version, stage, centre, spread, n, from_night, to_night,
			signed_by, because, frozen_at, at)
		select $1, $2, $3, $4, $5, coalesce(max(o.version), 0) + 1, $6, $7, $8, $9, $10::text::date, $11::text::date, $12, $13, $14, $15
		from baseline o where o.scope_kind = $1 and o.scope = $2 and o.reference = $3 and o.ref_lot = $4 and o.characteristic = $5
		returning id, version`,
		b.ScopeKind, b.Scope, b.Reference, b.RefLot, b.Characteristic, b.Stage, b.Centre, b.Spread, b.N, nightOrNil(b.FromNight), nightOrNil(b.ToNight),
		b.SignedBy, clean(b.Because), moment(b.FrozenAt), b.At).Scan(&b.ID, &b.Version)
	if err != nil {
		return fmt.Errorf("storing the baseline of %s on %s: %w", b.Characteristic, b.Scope, err)
	}
	return nil
}

// Baselines gives the newest version of each baseline made at or before a
// moment; f narrows as for History, its FromNight and All do not matter.
func (s *Store) Baselines(ctx context.Context, q Querier, f PointFilter, until time.Time) ([]Baseline, error) {
	return s.baselines(ctx, q, `select distinct on (b.scope_kind, b.scope, b.reference, b.ref_lot, b.characteristic) `, `b.at <= $1
		and ($2 = '' or b.scope_kind = $2) and ($3 = '' or b.scope = $3) and ($4 = '' or b.reference = $4) and ($5 = '' or b.ref_lot = $5)
		and ($6 = '' or b.characteristic = $6)
		order by b.scope_kind, b.scope, b.reference, b.ref_lot, b.characteristic, b.version desc`,
		until, f.ScopeKind, f.Scope, f.Reference, f.RefLot, f.Characteristic)
}

// BaselineVersions gives all versions of one chart's baseline, oldest first.
func (s *Store) BaselineVersions(ctx context.Context, q Querier, c Series) ([]Baseline, error) {
	return s.baselines(ctx, q, `select `, `b.scope_kind = $1 and b.scope = $2 and b.reference = $3 and b.ref_lot = $4 and b.characteristic = $5 order by b.version`,
		c.ScopeKind, c.Scope, c.Reference, c.RefLot, c.Characteristic)
}

func (s *Store) baselines(ctx context.Context, q Querier, start, where string, args ...any) ([]Baseline, error) {
	rows, err := s.on(q).Query(ctx, start+`b.id, b.scope_kind, b.scope, b.reference, b.ref_lot, b.characteristic, b.version, b.stage, b.centre, b.spread, b.n,
		b.from_night, b.to_night, b.signed_by, b.because, b.frozen_at, b.at from baseline b where `+where, args...)
	return collect(rows, err, "reading baselines", func(r pgx.Rows) (Baseline, error) {
		var b Baseline
		var from, to, frozen *time.Time
		err := r.Scan(&b.ID, &b.ScopeKind, &b.Scope, &b.Reference, &b.RefLot, &b.Characteristic, &b.Version, &b.Stage, &b.Centre, &b.Spread, &b.N,
			&from, &to, &b.SignedBy, &b.Because, &frozen, &b.At)
		b.FromNight, b.ToNight, b.FrozenAt, b.At = nightText(from), nightText(to), when(frozen), b.At.UTC()
		return b, err
	})
}

// PutPointJudgements stores what charts said of points. A judgement that says
// the same as the newest one of its point adds no row.
func (s *Store) PutPointJudgements(ctx context.Context, tx pgx.Tx, js []PointJudgement) error {
	if len(js) == 0 {
		return nil
	}
	b := &pgx.Batch{}
	for _, j := range js {
		flags := j.Flags
		if flags == nil {
			flags = []string{}
		}
		b.Queue(`insert into point_judgement (point_id, baseline_id, at, centre, sd, limit_low, limit_high, ewma, ewma_low, ewma_high, cusum_high, cusum_low, cusum_limit, flags)
			select $1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14
			where row($2::bigint, $4::float8, $5::float8, $6::float8, $7::float8, $8::float8, $9::float8, $10::float8, $11::float8, $12::float8, $13::float8, $14::text[])
				is distinct from (select row(o.baseline_id, o.centre, o.sd, o.limit_low, o.limit_high, o.ewma, o.ewma_low, o.ewma_high, o.cusum_high, o.cusum_low,
					o.cusum_limit, o.flags) from point_judgement o where o.point_id = $1 order by o.id desc limit 1)`,
			j.PointID, j.BaselineID, j.At, opt(j.Centre), opt(j.SD), opt(j.LimitLow), opt(j.LimitHigh), opt(j.EWMA), opt(j.EWMALow), opt(j.EWMAHigh),
			opt(j.CUSUMHigh), opt(j.CUSUMLow), opt(j.CUSUMLimit), flags)
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("storing %d judgements of points: %w", len(js), err)
	}
	return nil
}
