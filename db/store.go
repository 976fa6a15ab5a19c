// Package db is the complete record: every file's bytes, every scan and pH
// reading, every set, result, chart point, case, message and deed, in
// PostgreSQL. Schema pkvigil is internal, schema readout is for dashboards.
//
// Rules of the room. Every domain moment is an argument; no SQL here asks the
// server's clock. Moments are stored as timestamptz. Results are insert-only:
// what happens to them later is a row of result_status. Writers take the
// caller's transaction, so that a caller composes what belongs together;
// readers take a Querier, where nil means the pool. A float64 that is NaN in a
// field documented as optional is stored as NULL and read back as NaN.
//
// The package imports pure packages for their types and never pipeline.
package db

import (
	"context"
	"errors"
	"fmt"
	"math"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"
	"github.com/jackc/pgx/v5/pgxpool"
	"github.com/klauspost/compress/zstd"
)

// A Querier reads: a transaction, a connection or the pool.
type Querier interface {
	Exec(ctx context.Context, sql string, args ...any) (pgconn.CommandTag, error)
	Query(ctx context.Context, sql string, args ...any) (pgx.Rows, error)
	QueryRow(ctx context.Context, sql string, args ...any) pgx.Row
}

// Config says which server to use.
type Config struct {
	URL      string // postgres URL or key=value string; may hold a password, which is never shown
	MaxConns int    // 0: the driver's choice
}

// A Store is a pool of connections to one database. It is safe for concurrent use.
type Store struct {
	pool *pgxpool.Pool
	enc  *zstd.Encoder // EncodeAll and DecodeAll are safe for concurrent use
	dec  *zstd.Decoder
}

// Open connects and answers once the server has answered. It neither migrates
// nor checks the schema: see Migrate and CheckSchema.
func Open(ctx context.Context, cfg Config) (*Store, error) {
	pc, err := pgxpool.ParseConfig(cfg.URL)
	if err != nil {
		// The driver's text may quote the URL, so it is not passed on.
		return nil, errors.New("database URL cannot be read: expected postgres://user@host:port/name or key=value pairs; check the variable or file the settings name")
	}
	if cfg.MaxConns > 0 {
		pc.MaxConns = int32(cfg.MaxConns)
	}
	pc.ConnConfig.RuntimeParams["timezone"] = "UTC"
	pc.ConnConfig.RuntimeParams["search_path"] = "pkvigil"
	if pc.ConnConfig.RuntimeParams["application_name"] == "" {
		pc.ConnConfig.RuntimeParams["application_name"] = "pkvigil"
	}
	pool, err := pgxpool.NewWithConfig(ctx, pc)
	if err != nil {
		return nil, fmt.Errorf("opening database: %w", safe(err))
	}
	if err := pool.Ping(ctx); err != nil {
		pool.Close()
		return nil, fmt.Errorf("reaching database %s on %s: %w", pc.ConnConfig.Database, pc.ConnConfig.Host, safe(err))
	}
	enc, err := zstd.NewWriter(nil, zstd.WithEncoderConcurrency(1), zstd.WithEncoderLevel(zstd.SpeedDefault))
	if err != nil {
		pool.Close()
		return nil, fmt.Errorf("making the compressor: %w", err)
	}
	dec, err := zstd.NewReader(nil, zstd.WithDecoderConcurrency(1))
	if err != nil {
		pool.Close()
		return nil, fmt.Errorf("making the decompressor: %w", err)
	}
	return &Store{pool: pool, enc: enc, dec: dec}, nil
}

// Close ends all connections.
func (s *Store) Close() {
	s.pool.Close()
	s.dec.Close()
}

// Pool gives the pool, for the job queue and for listening.
func (s *Store) Pool() *pgxpool.Pool { return s.pool }

// InTx runs f in one transaction: committed when f returns nil, else rolled back.
func (s *Store) InTx(ctx context.Context, f func(pgx.Tx) error) error {
	return pgx.BeginFunc(ctx, s.pool, f)
}

// on gives the querier to read with.
func (s *Store) on(q Querier) Querier {
	if q == nil {
		return s.pool
	}
	return q
}

// opt turns NaN and infinities into NULL.
func opt(x float64) *float64 {
	if math.IsNaN(x) || math.IsInf(x, 0) {
		return nil
	}
	return &x
}

// num turns NULL into NaN.
func num(p *float64) float64 {
	if p == nil {
		return math.NaN()
	}
	return *p
}

// moment turns the zero time into NULL.
func moment(t time.Time) *time.Time {
	if t.IsZero() {
		return nil
	}
	t = t.UTC()
	return &t
}

// when turns NULL into the zero time.
func when(p *time.Time) time.Time {
	if p == nil {
		return time.Time{}
	}
	return p.UTC()
}
