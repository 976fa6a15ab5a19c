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

const caseColumns = `c.id, c.key, c.opened_at, c.resource, c.instrument, c.at, c.actor, c.because, c.state, c.cause, c.class, c.shape,
	c.onset_low, c.onset_best, c.onset_high, c.size, c.size_sd, c.unit, c.sentence, c.impact, c.next_check, c.evaluation`

func scanCase(r pgx.Rows) (Case, error) {
	var c Case
	var low, best, high *time.Time
	var size, sd, impact *float64
	var evaluation []byte
	err := r.Scan(&c.ID, &c.Key, &c.OpenedAt, &c.Resource, &c.Instrument, &c.At, &c.Actor, &c.Because, &c.State, &c.Cause, &c.Class, &c.Shape,
		&low, &best, &high, &size, &sd, &c.Unit, &c.Sentence, &impact, &c.NextCheck, &evaluation)
	c.OpenedAt, c.At = c.OpenedAt.UTC(), c.At.UTC()
	c.OnsetLow, c.OnsetBest, c.OnsetHigh = nightText(low), nightText(best), nightText(high)
	c.Size, c.SizeSD, c.Impact = num(size), num(sd), num(impact)
	if evaluation != nil {
		c.Evaluation = json.RawMessage(evaluation)
	}
	return c, err
}

func (s *Store) cases(ctx context.Context, q Querier, doing, rest string, args ...any) ([]Case, error) {
	rows, err := s.on(q).Query(ctx, "select "+caseColumns+" from case_now c "+rest, args...)
	return collect(rows, err, doing, scanCase)
}

// PutCase opens a case (by its key) or adds a state row to it when anything but
// moment, actor and reason differs from the last. It fills in ID and OpenedAt.
func (s *Store) PutCase(ctx context.Context, tx pgx.Tx, c *Case) (changed bool, err error) {
	if c.Actor == "" {
		c.Actor = program
	}
	if c.OpenedAt.IsZero() {
		c.OpenedAt = c.At
	}
	// A conflict would use up a number, and people name cases by theirs.
	_, err = tx.Exec(ctx, `insert into drift_case (key, resource, instrument, opened_at)
		select $1, $2, $3, $4 where not exists (select from drift_case where key = $1) on conflict (key) do nothing`,
		c.Key, c.Resource, c.Instrument, c.OpenedAt)
	if err != nil {
		return false, fmt.Errorf("opening case %s: %w", c.Key, err)
	}
	if err := tx.QueryRow(ctx, `select id, opened_at from drift_case where key = $1 for update`, c.Key).Scan(&c.ID, &c.OpenedAt); err != nil {
		return false, fmt.Errorf("opening case %s: %w", c.Key, err)
	}
	c.OpenedAt = c.OpenedAt.UTC()
	last, err := s.caseNow(ctx, tx, `where c.id = $1`, c.ID)
	if err != nil {
		return false, err
	}
	if last != nil && sameCase(last, c) {
		return false, nil
	}
	_, err = tx.Exec(ctx, `insert into case_state (case_id, at, actor, because, state, cause, class, shape, onset_low, onset_best, onset_high, size, size_sd, unit,
			sentence, impact, next_check, evaluation)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9::text::date, $10::text::date, $11::text::date, $12, $13, $14, $15, $16, $17, $18)`,
		c.ID, c.At, c.Actor, clean(c.Because), c.State, c.Cause, c.Class, c.Shape, nightOrNil(c.OnsetLow), nightOrNil(c.OnsetBest), nightOrNil(c.OnsetHigh),
		opt(c.Size), opt(c.SizeSD), c.Unit, clean(c.Sentence), opt(c.Impact), c.NextCheck, rawOrNil(c.Evaluation))
	if err != nil {
		return false, fmt.Errorf("storing the state of case %s: %w", c.Key, err)
	}
	return true, s.Notify(ctx, tx, ChannelCase, map[string]any{"case": c.ID, "state": c.State})
}

func sameCase(a, b *Case) bool {
	same := func(x, y float64) bool { return x == y || (math.IsNaN(x) && opt(y) == nil) }
	return a.State == b.State && a.Cause == b.Cause && a.Class == b.Class && a.Shape == b.Shape && a.OnsetLow == b.OnsetLow && a.OnsetBest == b.OnsetBest &&
		a.OnsetHigh == b.OnsetHigh && same(a.Size, b.Size) && same(a.SizeSD, b.SizeSD) && a.Unit == b.Unit && a.Sentence == b.Sentence &&
		same(a.Impact, b.Impact) && a.NextCheck == b.NextCheck && sameJSON(a.Evaluation, b.Evaluation)
}

// sameJSON compares documents whatever their layout and the order of their keys.
func sameJSON(a, b json.RawMessage) bool {
	if len(a) == 0 || len(b) == 0 {
		return len(a) == len(b)
	}
	var x, y any
	if json.Unmarshal(a, &x) != nil || json.Unmarshal(b, &y) != nil {
		return false
	}
	ra, errA := json.Marshal(x)
	rb, errB := json.Marshal(y)
	return errA == nil && errB == nil && bytes.Equal(ra, rb)
}

func (s *Store) caseNow(ctx context.Context, q Querier, where string, args ...any) (*Case, error) {
	return first(s.cases(ctx, q, "reading a case", where, args...))
}

// CaseByID gives a case as it stands; ErrNotFound when there is none.
func (s *Store) CaseByID(ctx context.Context, q Querier, id int64) (*Case, error) {
	c, err := s.caseNow(ctx, q, `where c.id = $1`, id)
	if err == nil && c == nil {
		return nil, fmt.Errorf("case %d: %w", id, ErrNotFound)
	}
	return c, err
}

// CaseByKey gives a case as it stands; ErrNotFound when there is none.
func (s *Store) CaseByKey(ctx context.Context, q Querier, key string) (*Case, error) {
	c, err := s.caseNow(ctx, q, `where c.key = $1`, key)
	if err == nil && c == nil {
		return nil, fmt.Errorf("case %s: %w", key, ErrNotFound)
	}
	return c, err
}

// OpenCases gives cases not closed, oldest first.
func (s *Store) OpenCases(ctx context.Context, q Querier) ([]Case, error) {
	return s.cases(ctx, q, "listing open cases", `where c.state <> 'closed' order by c.opened_at, c.id`)
}

// Cases gives all cases opened at or before a moment, oldest first, as they stood then.
func (s *Store) Cases(ctx context.Context, q Querier, until time.Time) ([]Case, error) {
	rows, err := s.on(q).Query(ctx, "select "+caseColumns+` from (
			select distinct on (d.id) d.id, d.key, d.opened_at, d.resource, d.instrument, z.at, z.actor, z.because, z.state, z.cause, z.class, z.shape,
				z.onset_low, z.onset_best, z.onset_high, z.size, z.size_sd, z.unit, z.sentence, z.impact, z.next_check, z.evaluation
			from drift_case d join case_state z on z.case_id = d.id where z.at <= $1 order by d.id, z.id desc) c
		order by c.opened_at, c.id`, until)
	return collect(rows, err, "listing cases", scanCase)
}

// CaseHistory gives the states a case went through, in order.
func (s *Store) CaseHistory(ctx context.Context, q Querier, caseID int64) ([]Case, error) {
	rows, err := s.on(q).Query(ctx, "select "+caseColumns+` from (
			select d.id, d.key, d.opened_at, d.resource, d.instrument, z.id as state_id, z.at, z.actor, z.because, z.state, z.cause, z.class, z.shape,
				z.onset_low, z.onset_best, z.onset_high, z.size, z.size_sd, z.unit, z.sentence, z.impact, z.next_check, z.evaluation
			from drift_case d join case_state z on z.case_id = d.id where d.id = $1) c order by c.state_id`, caseID)
	return collect(rows, err, "reading the history of a case", scanCase)
}

// PutRanking stores one evaluation of a case's candidates; the same moment again changes nothing.
func (s *Store) PutRanking(ctx context.Context, tx pgx.Tx, caseID int64, at time.Time, rows []RankRow) error {
	b := &pgx.Batch{}
	for _, r := range rows {
		b.Queue(`insert into case_ranking (case_id, at, rank, cause, resource, probability, log_bayes, size, size_sd, unit, evidence_for, evidence_against)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12) on conflict do nothing`,
			caseID, at, r.Rank, r.Cause, r.Resource, r.Probability, opt(r.LogBayes), opt(r.Size), opt(r.SizeSD), r.Unit, clean(r.For), clean(r.Against))
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("storing the ranking of case %d: %w", caseID, err)
	}
	return nil
}

// Ranking gives the newest ranking of a case, first first, and its moment.
func (s *Store) Ranking(ctx context.Context, q Querier, caseID int64) ([]RankRow, time.Time, error) {
	var at time.Time
	rows, err := s.on(q).Query(ctx, `select k.at, k.rank, k.cause, k.resource, k.probability, k.log_bayes, k.size, k.size_sd, k.unit, k.evidence_for, k.evidence_against
		from case_ranking k where k.case_id = $1 and k.at = (select max(x.at) from case_ranking x where x.case_id = $1) order by k.rank`, caseID)
	all, err := collect(rows, err, "reading a ranking", func(r pgx.Rows) (RankRow, error) {
		var w RankRow
		var lb, size, sd *float64
		err := r.Scan(&at, &w.Rank, &w.Cause, &w.Resource, &w.Probability, &lb, &size, &sd, &w.Unit, &w.For, &w.Against)
		w.LogBayes, w.Size, w.SizeSD = num(lb), num(size), num(sd)
		return w, err
	})
	return all, at.UTC(), err
}

// PutReach stores which results a case touches; a later row for a result
// counts. A row that says the same as the last adds nothing.
func (s *Store) PutReach(ctx context.Context, tx pgx.Tx, caseID int64, at time.Time, rows []ReachRow) error {
	b := &pgx.Batch{}
	for _, r := range rows {
		b.Queue(`insert into case_reach (case_id, at, result_id, impact, impact_upper, resolution)
			select $1, $2, $3, $4, $5, $6 where row($4::float8, $5::float8, $6::text) is distinct from (select row(o.impact, o.impact_upper, o.resolution)
				from case_reach o where o.case_id = $1 and o.result_id = $3 order by o.id desc limit 1)`,
			caseID, at, r.ResultID, opt(r.Impact), opt(r.ImpactUpper), r.Resolution)
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("storing the reach of case %d: %w", caseID, err)
	}
	return nil
}

// Reach gives the newest row of each result a case touches, by result.
func (s *Store) Reach(ctx context.Context, q Querier, caseID int64) ([]ReachRow, error) {
	rows, err := s.on(q).Query(ctx, `select distinct on (result_id) result_id, impact, impact_upper, resolution from case_reach where case_id = $1
		order by result_id, id desc`, caseID)
	return collect(rows, err, "reading the reach of a case", func(r pgx.Rows) (ReachRow, error) {
		var w ReachRow
		var impact, upper *float64
		err := r.Scan(&w.ResultID, &impact, &upper, &w.Resolution)
		w.Impact, w.ImpactUpper = num(impact), num(upper)
		return w, err
	})
}

// PutBracket stores a bracket as it is now, by key, and fills in its id. Sets
// are added, never taken out.
func (s *Store) PutBracket(ctx context.Context, tx pgx.Tx, b *Bracket) error {
	err := tx.QueryRow(ctx, `insert into bracket (key, instrument, night, run, opened_by_set, closed_by_set, state, at) values ($1, $2, $3::text::date, $4, $5, $6, $7, $8)
		on conflict (key) do update set opened_by_set = excluded.opened_by_set, closed_by_set = excluded.closed_by_set, state = excluded.state, at = excluded.at
		returning id`, b.Key, b.Instrument, b.Night, b.Run, b.OpenedBySet, b.ClosedBySet, b.State, b.At).Scan(&b.ID)
	if err != nil {
		return fmt.Errorf("storing bracket %s: %w", b.Key, err)
	}
	_, err = tx.Exec(ctx, `insert into bracket_set (bracket_id, set_id) select $1, unnest($2::bigint[]) on conflict do nothing`, b.ID, b.Sets)
	if err != nil {
		return fmt.Errorf("storing the sets of bracket %s: %w", b.Key, err)
	}
	return nil
}

// Brackets gives the brackets of an instrument since a night, oldest first.
func (s *Store) Brackets(ctx context.Context, q Querier, instrument, sinceNight string) ([]Bracket, error) {
	rows, err := s.on(q).Query(ctx, `select b.id, b.key, b.instrument, to_char(b.night, 'YYYY-MM-DD'), b.run, b.opened_by_set, b.closed_by_set, b.state, b.at,
			array(select x.set_id from bracket_set x where x.bracket_id = b.id order by 1)
		from bracket b where b.instrument = $1 and b.night >= $2::text::date order by b.night, b.id`, instrument, sinceNight)
	return collect(rows, err, "reading brackets", func(r pgx.Rows) (Bracket, error) {
		var b Bracket
		err := r.Scan(&b.ID, &b.Key, &b.Instrument, &b.Night, &b.Run, &b.OpenedBySet, &b.ClosedBySet, &b.State, &b.At, &b.Sets)
		b.At = b.At.UTC()
		return b, err
	})
}

// PutInstrumentState adds a row about an instrument being open or closed, when that is news.
func (s *Store) PutInstrumentState(ctx context.Context, tx pgx.Tx, st InstrumentState) error {
	var last string
	err := tx.QueryRow(ctx, `select state from instrument_state where instrument = $1 order by id desc limit 1`, st.Instrument).Scan(&last)
	if err != nil && !errors.Is(err, pgx.ErrNoRows) {
		return fmt.Errorf("storing the state of instrument %s: %w", st.Instrument, err)
	}
	if last == st.State {
		return nil
	}
	_, err = tx.Exec(ctx, `insert into instrument_state (instrument, state, at, actor, because, case_id) values ($1, $2, $3, $4, $5, $6)`,
		st.Instrument, st.State, st.At, st.Actor, clean(st.Because), st.CaseID)
	if err != nil {
		return fmt.Errorf("storing the state of instrument %s: %w", st.Instrument, err)
	}
	return nil
}

// InstrumentStates gives the newest state of every instrument that has one; an instrument without is open.
func (s *Store) InstrumentStates(ctx context.Context, q Querier) (map[string]InstrumentState, error) {
	rows, err := s.on(q).Query(ctx, `select distinct on (instrument) instrument, state, at, actor, because, case_id from instrument_state order by instrument, id desc`)
	all, err := collect(rows, err, "reading instrument states", func(r pgx.Rows) (InstrumentState, error) {
		var st InstrumentState
		err := r.Scan(&st.Instrument, &st.State, &st.At, &st.Actor, &st.Because, &st.CaseID)
		st.At = st.At.UTC()
		return st, err
	})
	if err != nil {
		return nil, err
	}
	states := make(map[string]InstrumentState, len(all))
	for _, st := range all {
		states[st.Instrument] = st
	}
	return states, nil
}
