package db

import (
	"context"
	"fmt"
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
