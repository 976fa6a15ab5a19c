package db

import (
	"context"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
)

// ResetRunningJobs gives back jobs whose worker is gone and says how many.
// Call it only where no other worker can be running them: at the start of the
// one program that uses a private server.
func (s *Store) ResetRunningJobs(ctx context.Context) (int64, error) {
	tag, err := s.pool.Exec(ctx, `UPDATE pkvigil.river_job SET state = 'available' WHERE state = 'running'`)
	if err != nil {
		return 0, fmt.Errorf("giving back interrupted jobs: %w", safe(err))
	}
	return tag.RowsAffected(), nil
}

// ResetLeases ends all leases on roots. Call it only where no other sweeper can
// be: at the start of the one program that uses a private server.
func (s *Store) ResetLeases(ctx context.Context) error {
	if _, err := s.pool.Exec(ctx, `DELETE FROM pkvigil.root_lease`); err != nil {
		return fmt.Errorf("ending the leases of an interrupted run: %w", safe(err))
	}
	return nil
}

// JobsOpen counts jobs of a queue that are not finished; queue "" means all.
func (s *Store) JobsOpen(ctx context.Context, queue string) (int, error) {
	var n int
	err := s.pool.QueryRow(ctx, `SELECT count(*) FROM pkvigil.river_job
		WHERE state IN ('available','pending','running','retryable','scheduled') AND ($1 = '' OR queue = $1)`, queue).Scan(&n)
	if err != nil {
		return 0, fmt.Errorf("counting open jobs: %w", safe(err))
	}
	return n, nil
}

// FirstStandingReference gives the earliest current result that is not held
// of a reference lot on an instrument, of a night before the given one; 0 when
// there is none. Its limit spectra are the archive later nights are read against.
func (s *Store) FirstStandingReference(ctx context.Context, q Querier, instrument, compound, lot, before string) (int64, error) {
	var id *int64
	err := s.on(q).QueryRow(ctx, `
		SELECT (SELECT r.id FROM pkvigil.result r JOIN pkvigil.sample_set s ON s.id = r.set_id
		        WHERE s.instrument = $1 AND s.compound = $2 AND s.lot = $3 AND s.kind = 'reference' AND s.night < $4::date
		          AND r.verdict IN ('stands', 'stands-noted')
		        ORDER BY s.night, s.key, r.set_revision, r.id LIMIT 1)`, instrument, compound, lot, before).Scan(&id)
	if err != nil {
		return 0, fmt.Errorf("finding archived spectra: %w", safe(err))
	}
	if id == nil {
		return 0, nil
	}
	return *id, nil
}

// DeliveriesOf gives the ids of the deliveries of a message.
func (s *Store) DeliveriesOf(ctx context.Context, q Querier, messageID int64) ([]int64, error) {
	return s.ids(ctx, q, `SELECT id FROM pkvigil.delivery WHERE message_id = $1 ORDER BY id`, messageID)
}

// ids reads one column of ids.
func (s *Store) ids(ctx context.Context, q Querier, sql string, args ...any) ([]int64, error) {
	rows, err := s.on(q).Query(ctx, sql, args...)
	if err != nil {
		return nil, safe(err)
	}
	out, err := pgx.CollectRows(rows, pgx.RowTo[int64])
	if err != nil {
		return nil, fmt.Errorf("reading ids: %w", safe(err))
	}
	return out, nil
}

// LastArrival gives the newest moment a file of a root was first seen at or
// before a moment; zero when there is none.
func (s *Store) LastArrival(ctx context.Context, q Querier, root string, until time.Time) (time.Time, error) {
	var t *time.Time
	err := s.on(q).QueryRow(ctx, `SELECT max(seen_at) FROM pkvigil.file WHERE root = $1 AND seen_at <= $2`, root, until).Scan(&t)
	if err != nil {
		return time.Time{}, fmt.Errorf("finding the last arrival: %w", safe(err))
	}
	return when(t), nil
}

// RecordOf gives the calculation record of a result.
func (s *Store) RecordOf(ctx context.Context, q Querier, resultID int64) ([]byte, error) {
	var raw []byte
	if err := s.on(q).QueryRow(ctx, `SELECT record FROM pkvigil.result WHERE id = $1`, resultID).Scan(&raw); err != nil {
		return nil, fmt.Errorf("calculation record of result %d: %w", resultID, safe(err))
	}
	return raw, nil
}

// SetsWithCalibrations gives the sets whose current result used one of the calibrations.
func (s *Store) SetsWithCalibrations(ctx context.Context, q Querier, calibrations map[int64]bool) ([]int64, error) {
	var ids []int64
	for id := range calibrations {
		ids = append(ids, id)
	}
	return s.ids(ctx, q, `
		SELECT DISTINCT r.set_id FROM pkvigil.result r JOIN pkvigil.standing st ON st.result_id = r.id
		WHERE r.calibration_id = ANY($1) AND st.current ORDER BY 1`, ids)
}

// FilesStored counts the revisions of files that are stored.
func (s *Store) FilesStored(ctx context.Context) (int, error) {
	var n int
	if err := s.pool.QueryRow(ctx, `SELECT count(*) FROM pkvigil.file`).Scan(&n); err != nil {
		return 0, fmt.Errorf("counting files: %w", safe(err))
	}
	return n, nil
}

// EverWaited gives the sets that were waiting for something at some time.
func (s *Store) EverWaited(ctx context.Context) (map[int64]bool, error) {
	ids, err := s.ids(ctx, nil, `SELECT DISTINCT set_id FROM pkvigil.set_state WHERE state = 'waiting'`)
	if err != nil {
		return nil, err
	}
	out := make(map[int64]bool, len(ids))
	for _, id := range ids {
		out[id] = true
	}
	return out, nil
}

// Gauges gives the numbers a monitor watches, by metric and label.
func (s *Store) Gauges(ctx context.Context, now time.Time) (map[string]map[string]float64, error) {
	rows, err := s.pool.Query(ctx, `
		SELECT 'pkvigil_files', state, count(*)::float8 FROM pkvigil.file GROUP BY state
		UNION ALL SELECT 'pkvigil_sets', state, count(*) FROM pkvigil.sample_set GROUP BY state
		UNION ALL SELECT 'pkvigil_results', verdict, count(*) FROM pkvigil.standing WHERE current GROUP BY verdict
		UNION ALL SELECT 'pkvigil_cases', state, count(*) FROM (SELECT DISTINCT ON (case_id) state FROM pkvigil.case_state ORDER BY case_id, id DESC) c GROUP BY state
		UNION ALL SELECT 'pkvigil_jobs_open', queue, count(*) FROM pkvigil.river_job WHERE state IN ('available','pending','running','retryable','scheduled') GROUP BY queue
		UNION ALL SELECT 'pkvigil_oldest_waiting_seconds', '', coalesce(max(extract(epoch FROM $1::timestamptz - last_seen)), 0)::float8 FROM pkvigil.sample_set WHERE state IN ('gathering','waiting')
		UNION ALL SELECT 'pkvigil_deliveries_pending', '', count(*) FROM pkvigil.delivery WHERE state = 'pending'
		UNION ALL SELECT 'pkvigil_deliveries_failing', '', count(*) FROM pkvigil.delivery WHERE state = 'pending' AND attempts > 2
		UNION ALL SELECT 'pkvigil_last_stored_look_seconds', root, extract(epoch FROM $1::timestamptz - looked_at)::float8 FROM pkvigil.root_state
		UNION ALL SELECT 'pkvigil_folder_visible', root, visible::int FROM pkvigil.root_state`, now)
	if err != nil {
		return nil, fmt.Errorf("reading gauges: %w", safe(err))
	}
	out := map[string]map[string]float64{}
	var name, label string
	var v float64
	_, err = pgx.ForEachRow(rows, []any{&name, &label, &v}, func() error {
		if out[name] == nil {
			out[name] = map[string]float64{}
		}
		out[name][label] = v
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("reading gauges: %w", safe(err))
	}
	return out, nil
}

// NightLines gives one line per set of a night: its key and what it amounts
// to now, sorted; a set that is on its way waits. Two equal answers mean that nothing has changed for people.
func (s *Store) NightLines(ctx context.Context, night string) ([]string, error) {
	rows, err := s.pool.Query(ctx, `
		SELECT s.key || ' ' || coalesce(st.verdict || coalesce(' ' || round(p.pka::numeric, 3)::text, ''), CASE WHEN s.state IN ('gathering', 'complete') THEN 'waiting' ELSE s.state END)
		FROM pkvigil.sample_set s
		LEFT JOIN pkvigil.standing st ON st.set_id = s.id AND st.current
		LEFT JOIN pkvigil.result_pka p ON p.result_id = st.result_id AND p.step = 1
		WHERE s.night = $1::date ORDER BY s.key`, night)
	if err != nil {
		return nil, fmt.Errorf("reading night %s: %w", night, safe(err))
	}
	out, err := pgx.CollectRows(rows, pgx.RowTo[string])
	if err != nil {
		return nil, fmt.Errorf("reading night %s: %w", night, safe(err))
	}
	return out, nil
}

// InputOf gives the input hash of a result.
func (s *Store) InputOf(ctx context.Context, resultID int64) ([]byte, error) {
	var sum []byte
	if err := s.pool.QueryRow(ctx, `SELECT input_sha256 FROM pkvigil.result WHERE id = $1`, resultID).Scan(&sum); err != nil {
		return nil, fmt.Errorf("input of result %d: %w", resultID, safe(err))
	}
	return sum, nil
}

// PointsStored counts the chart points, whatever became of their results, and
// the results that lost their standing: when both are as before, no chart can look different.
func (s *Store) PointsStored(ctx context.Context, q Querier) (points, replaced int, err error) {
	err = s.on(q).QueryRow(ctx, `SELECT (SELECT count(*) FROM pkvigil.point), (SELECT count(*) FROM pkvigil.standing WHERE NOT current OR struck)`).Scan(&points, &replaced)
	if err != nil {
		return 0, 0, fmt.Errorf("counting chart points: %w", safe(err))
	}
	return points, replaced, nil
}

// ReferenceNights counts the nights before the given one on which a reference
// gave a result on an instrument.
func (s *Store) ReferenceNights(ctx context.Context, instrument, compound, before string) (int, error) {
	var n int
	err := s.pool.QueryRow(ctx, `SELECT count(DISTINCT s.night) FROM pkvigil.sample_set s JOIN pkvigil.standing st ON st.set_id = s.id AND st.current
		WHERE s.instrument = $1 AND s.compound = $2 AND s.night < $3::date`, instrument, compound, before).Scan(&n)
	if err != nil {
		return 0, fmt.Errorf("counting nights of %s: %w", compound, safe(err))
	}
	return n, nil
}

// FirstStandingOf gives, for every compound measured on an instrument, the
// earliest result that was not held of a night before the given one: its limit
// spectra tell dyes apart.
func (s *Store) FirstStandingOf(ctx context.Context, q Querier, instrument, before string) (map[string]int64, error) {
	rows, err := s.on(q).Query(ctx, `
		SELECT DISTINCT ON (s.compound) s.compound, r.id
		FROM pkvigil.result r JOIN pkvigil.sample_set s ON s.id = r.set_id
		WHERE s.instrument = $1 AND s.compound <> '' AND s.night < $2::date AND r.verdict IN ('stands', 'stands-noted')
		ORDER BY s.compound, s.night, s.key, r.set_revision, r.id`, instrument, before)
	if err != nil {
		return nil, fmt.Errorf("finding archived spectra: %w", safe(err))
	}
	out := map[string]int64{}
	var name string
	var id int64
	if _, err := pgx.ForEachRow(rows, []any{&name, &id}, func() error { out[name] = id; return nil }); err != nil {
		return nil, fmt.Errorf("finding archived spectra: %w", safe(err))
	}
	return out, nil
}
