package db

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
)

// A NightOn is one night of one instrument.
type NightOn struct {
	Night      string // YYYY-MM-DD
	Instrument string
}

// NewestStatus gives the number of the newest status row of any result, 0 when
// there is none.
func (s *Store) NewestStatus(ctx context.Context, q Querier) (int64, error) {
	var id int64
	if err := s.on(q).QueryRow(ctx, `select coalesce(max(id), 0) from result_status`).Scan(&id); err != nil {
		return 0, fmt.Errorf("looking for new results: %w", safe(err))
	}
	return id, nil
}

// NightsTouched lists the nights of instruments to whose results anything
// happened after a status row, by instrument and night.
func (s *Store) NightsTouched(ctx context.Context, q Querier, after int64) ([]NightOn, error) {
	rows, err := s.on(q).Query(ctx, `select distinct to_char(s.night, 'YYYY-MM-DD'), s.instrument from result_status h join result r on r.id = h.result_id
		join sample_set s on s.id = r.set_id where h.id > $1 order by 2, 1`, after)
	return collect(rows, err, "listing nights with new results", func(r pgx.Rows) (NightOn, error) {
		var n NightOn
		return n, r.Scan(&n.Night, &n.Instrument)
	})
}

// A Measured set is a set with what matters of its current result for the
// order of a night. NaN: absent.
type Measured struct {
	Set       Set
	ResultID  int64 // 0: no result yet
	Verdict   string
	Headline  string
	HeldBy    []string // keys of the checks that hold it
	From, To  time.Time
	PKa       float64 // first constant, as reported
	U         float64
	Expanded  float64
	Assigned  float64
	UAssigned float64
	Standing  Standing // InQuestion, Struck and Verdict only
}

// MeasuredSets gives the sets of an instrument of nights from..to (YYYY-MM-DD,
// inclusive), by night and first file.
func (s *Store) MeasuredSets(ctx context.Context, q Querier, from, to, instrument string) ([]Measured, error) {
	rows, err := s.on(q).Query(ctx, "select "+setColumns+`, coalesce(r.id, 0), coalesce(r.verdict, ''), coalesce(r.headline, ''),
			array(select c.key from result_check c where c.result_id = r.id and c.outcome = 'held' order by c.idx),
			r.measured_from, r.measured_to, p.pka, p.u, p.expanded, p.assigned, p.u_assigned,
			coalesce(t.in_question, false), coalesce(t.struck, false), coalesce(t.verdict, '')
		from sample_set s left join standing t on t.set_id = s.id and t.current left join result r on r.id = t.result_id
		left join result_pka p on p.result_id = r.id and p.step = 1
		where s.instrument = $3 and s.night between $1::text::date and $2::text::date order by s.night, s.first_seen, s.key`, from, to, instrument)
	return collect(rows, err, "listing measured sets", func(rows pgx.Rows) (Measured, error) {
		var m Measured
		var start, end *time.Time
		var pka, u, expanded, assigned, uAssigned *float64
		targets, done := setTargets(&m.Set)
		err := rows.Scan(append(targets, &m.ResultID, &m.Verdict, &m.Headline, &m.HeldBy, &start, &end, &pka, &u, &expanded, &assigned, &uAssigned,
			&m.Standing.InQuestion, &m.Standing.Struck, &m.Standing.Verdict)...)
		if err != nil {
			return m, err
		}
		m.From, m.To = when(start), when(end)
		m.PKa, m.U, m.Expanded, m.Assigned, m.UAssigned = num(pka), num(u), num(expanded), num(assigned), num(uAssigned)
		return m, done()
	})
}

// ParkedOfRun gives the newest revisions of parked files of a root whose name
// gives a run, by path.
func (s *Store) ParkedOfRun(ctx context.Context, q Querier, root, run string) ([]File, error) {
	return s.files(ctx, q, "listing files that wait for a sheet", `where f.state = 'parked' and f.root = $1 and f.match ->> 'run' = $2 and `+newest+` order by f.path`, root, run)
}

// KeepBracketSets takes every set but these out of a bracket: a reference that
// comes late may divide it.
func (s *Store) KeepBracketSets(ctx context.Context, tx pgx.Tx, bracketID int64, sets []int64) error {
	if sets == nil {
		sets = []int64{}
	}
	if _, err := tx.Exec(ctx, `delete from bracket_set where bracket_id = $1 and set_id <> all($2)`, bracketID, sets); err != nil {
		return fmt.Errorf("dividing bracket %d: %w", bracketID, err)
	}
	return nil
}
