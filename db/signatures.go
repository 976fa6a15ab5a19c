package db

import (
	"context"
	"errors"
	"io"
	"time"

	"github.com/jackc/pgx/v5"
)

var errLater = errors.ErrUnsupported

// NightCounts gives counts per night and instrument, nights from..to inclusive.
func (s *Store) NightCounts(ctx context.Context, q Querier, from, to string) ([]NightCount, error) {
	return nil, errLater
}

// HeldReasons gives the checks that hold or note current results of nights from..to.
func (s *Store) HeldReasons(ctx context.Context, q Querier, from, to string) ([]HeldReason, error) {
	return nil, errLater
}

// Gaps gives what waiting sets wait for.
func (s *Store) Gaps(ctx context.Context, q Querier) ([]Gap, error) { return nil, errLater }

// PlannedNotSeen gives planned sets of a night of which nothing has arrived.
func (s *Store) PlannedNotSeen(ctx context.Context, q Querier, night string) ([]NotSeen, error) {
	return nil, errLater
}

// CheckUse counts checks over nights from..to.
func (s *Store) CheckUse(ctx context.Context, q Querier, from, to string) ([]CheckUse, error) {
	return nil, errLater
}

// Dump writes every table in a canonical form: no surrogate ids, no wall times, sorted.
func (s *Store) Dump(ctx context.Context, w io.Writer) error { return errLater }
