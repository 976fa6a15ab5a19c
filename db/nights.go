package db

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
)

// NightCounts gives counts per night and instrument, nights from..to
// inclusive, by night and instrument. A refused or parked file counts towards
// the date its name gives, else towards the date twelve hours before it was
// seen (UTC), and towards the instrument of its root.
func (s *Store) NightCounts(ctx context.Context, q Querier, from, to string) ([]NightCount, error) {
	rows, err := s.on(q).Query(ctx, `
		with aside as (
			select case when f.match ->> 'date' ~ '^\d{4}-\d\d-\d\d$' then (f.match ->> 'date')::date
					else ((f.seen_at at time zone 'UTC') - interval '12 hours')::date end as night,
				coalesce(r.instrument, '') as instrument,
				count(*) filter (where f.state = 'refused') as refused, count(*) filter (where f.state = 'parked') as parked
			from file f left join root_state r on r.root = f.root
			where f.state in ('refused', 'parked') and `+newest+` group by 1, 2)
		select to_char(coalesce(n.night, a.night), 'YYYY-MM-DD'), coalesce(n.instrument, a.instrument), coalesce(n.sets_planned, 0), coalesce(n.sets_seen, 0),
			coalesce(n.references_seen, 0), coalesce(n.stands, 0), coalesce(n.stands_noted, 0), coalesce(n.held, 0), coalesce(n.no_number, 0),
			coalesce(n.waiting, 0), coalesce(n.gathering, 0), coalesce(n.in_question, 0), coalesce(a.refused, 0), coalesce(a.parked, 0)
		from readout.nights n full join aside a on a.night = n.night and a.instrument = n.instrument
		where coalesce(n.night, a.night) between $1::text::date and $2::text::date order by 1, 2`, from, to)
	return collect(rows, err, "counting nights", func(r pgx.Rows) (NightCount, error) {
		var n NightCount
		err := r.Scan(&n.Night, &n.Instrument, &n.Planned, &n.Seen, &n.References, &n.Stands, &n.StandsNoted, &n.Held, &n.NoNumber, &n.Waiting, &n.Gathering,
			&n.InQuestion, &n.Refused, &n.Parked)
		return n, err
	})
}

// HeldReasons gives the checks that hold or note current results of nights
// from..to, by night, instrument, set and order of the checks.
func (s *Store) HeldReasons(ctx context.Context, q Querier, from, to string) ([]HeldReason, error) {
	rows, err := s.on(q).Query(ctx, `select s.id, s.key, t.result_id, c.key, c.rung, c.value, c.limit_low, c.limit_high, c.unit, c.outcome, c.sentence, c.action
		from standing t join sample_set s on s.id = t.set_id join result_check c on c.result_id = t.result_id
		where t.current and c.outcome <> 'stands' and s.night between $1::text::date and $2::text::date
		order by s.night, s.instrument, s.first_seen, s.key, c.idx`, from, to)
	return collect(rows, err, "listing reasons", func(r pgx.Rows) (HeldReason, error) {
		var h HeldReason
		var v, lo, hi *float64
		err := r.Scan(&h.SetID, &h.SetKey, &h.ResultID, &h.Key, &h.Rung, &v, &lo, &hi, &h.Unit, &h.Outcome, &h.Sentence, &h.Action)
		h.Value, h.LimitLow, h.LimitHigh = num(v), num(lo), num(hi)
		return h, err
	})
}

// Gaps gives what gathering and waiting sets lack, by set.
func (s *Store) Gaps(ctx context.Context, q Querier) ([]Gap, error) {
	rows, err := s.on(q).Query(ctx, `select s.id, s.key, coalesce(m ->> 'role', ''), coalesce(m ->> 'rung', ''), coalesce(m ->> 'text', ''),
			(select max(h.at) from set_state h where h.set_id = s.id), s.deadline
		from sample_set s cross join lateral jsonb_array_elements(s.missing) with ordinality u(m, i)
		where s.state in ('gathering', 'waiting') order by s.night, s.key, u.i`)
	return collect(rows, err, "listing gaps", func(r pgx.Rows) (Gap, error) {
		var g Gap
		var since, deadline *time.Time
		err := r.Scan(&g.SetID, &g.SetKey, &g.Role, &g.Rung, &g.Text, &since, &deadline)
		g.Since, g.Deadline = when(since), when(deadline)
		return g, err
	})
}

// PlannedNotSeen gives planned sets of a night of which nothing has arrived:
// no set of that night and instrument has the planned name and slot.
func (s *Store) PlannedNotSeen(ctx context.Context, q Querier, night string) ([]NotSeen, error) {
	rows, err := s.on(q).Query(ctx, `select distinct to_char(p.night, 'YYYY-MM-DD'), p.instrument, p.set_name, p.compound, p.slot
		from plan_row p join file f on f.id = p.file_id
		where p.night = $1::text::date and f.state = 'taken' and `+newest+`
			and not exists (select from sample_set s where s.night = p.night and s.instrument = p.instrument and s.name = p.set_name
				and (p.slot = '' or s.slot = p.slot)) order by 2, 5, 3`, night)
	return collect(rows, err, "listing what did not happen", func(r pgx.Rows) (NotSeen, error) {
		var n NotSeen
		return n, r.Scan(&n.Night, &n.Instrument, &n.Set, &n.Compound, &n.Slot)
	})
}

// CheckUse counts checks over the current results of nights from..to, most often held first.
func (s *Store) CheckUse(ctx context.Context, q Querier, from, to string) ([]CheckUse, error) {
	rows, err := s.on(q).Query(ctx, `select c.key, count(distinct s.id), count(distinct s.id) filter (where c.outcome = 'held'),
			count(distinct s.id) filter (where c.outcome = 'held' and t.lifted)
		from standing t join sample_set s on s.id = t.set_id join result_check c on c.result_id = t.result_id
		where t.current and s.night between $1::text::date and $2::text::date group by 1 order by 3 desc, 1`, from, to)
	return collect(rows, err, "counting checks", func(r pgx.Rows) (CheckUse, error) {
		var u CheckUse
		return u, r.Scan(&u.Check, &u.Sets, &u.Held, &u.Lifted)
	})
}

// A Pruned says what RetireScans took away, or would.
type Pruned struct {
	Scans int
	Sets  int
	Bytes int64 // of the arrays
}

// RetireScans takes the arrays of scans of sets of nights before a night out of
// the database; with dry it only counts. The files' bytes stay, so that
// PutContent can bring the scans back. Scans of open sets, and of files that no
// set has, stay.
func (s *Store) RetireScans(ctx context.Context, tx pgx.Tx, beforeNight string, dry bool) (Pruned, error) {
	const old = `from scan c where exists (select from member m where m.scan_id = c.id)
		and not exists (select from member m join sample_set s on s.id = m.set_id where m.scan_id = c.id
			and (s.night >= $1::text::date or s.state in ('gathering', 'waiting')))`
	var p Pruned
	err := tx.QueryRow(ctx, `select count(*), coalesce(sum(pg_column_size(c.absorbance)), 0),
		(select count(distinct m.set_id) from member m where m.scan_id in (select c.id `+old+`)) `+old, beforeNight).Scan(&p.Scans, &p.Bytes, &p.Sets)
	if err != nil {
		return p, fmt.Errorf("counting scans before %s: %w", beforeNight, err)
	}
	if dry || p.Scans == 0 {
		return p, nil
	}
	if _, err := tx.Exec(ctx, `delete from scan where id in (select c.id `+old+`)`, beforeNight); err != nil {
		return p, fmt.Errorf("pruning scans before %s: %w", beforeNight, err)
	}
	return p, nil
}
