package db

import (
	"context"
	"embed"
	"errors"
	"fmt"
	"io/fs"
	"strconv"
	"strings"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"
	"github.com/riverqueue/river/riverdriver/riverpgxv5"
	"github.com/riverqueue/river/rivermigrate"
)

//go:embed migrations/*.sql
var migrationFiles embed.FS

// migrateLock is the advisory lock that lets one process migrate at a time.
const migrateLock = 0x706b7669676d // "pkvigm"

// QueueSchema is where the job queue's own tables live.
const QueueSchema = "pkvigil"

// A SchemaError says that program and schema do not fit.
type SchemaError struct {
	Found, Expected int // versions
}

// Error says what to do.
func (e *SchemaError) Error() string {
	switch {
	case e.Found == 0:
		return "the database has no pkvigil schema yet: run pkvigil schema migrate"
	case e.Found > e.Expected:
		return fmt.Sprintf("the database has schema version %d, newer than this program knows (%d): install the newer program; nothing was changed", e.Found, e.Expected)
	}
	return fmt.Sprintf("the database has schema version %d, this program needs %d: run pkvigil schema migrate", e.Found, e.Expected)
}

type migration struct {
	version int
	name    string
	sql     string
}

// migrations gives the embedded steps; their numbers are 1, 2, ... without gaps.
func migrations() ([]migration, error) {
	names, err := fs.Glob(migrationFiles, "migrations/*.sql") // sorted
	if err != nil {
		return nil, fmt.Errorf("listing migrations: %w", err)
	}
	var ms []migration
	for i, n := range names {
		base := strings.TrimPrefix(n, "migrations/")
		number, _, _ := strings.Cut(base, "_")
		v, err := strconv.Atoi(number)
		if err != nil || v != i+1 {
			return nil, fmt.Errorf("migration %s: expected number %d", base, i+1)
		}
		sql, err := migrationFiles.ReadFile(n)
		if err != nil {
			return nil, fmt.Errorf("reading migration %s: %w", base, err)
		}
		ms = append(ms, migration{version: v, name: base, sql: string(sql)})
	}
	return ms, nil
}

// Migrate brings the schema to the newest version this program knows, the job
// queue's tables included, under an advisory lock. It refuses a schema newer
// than the program. from and to are the versions before and after.
func (s *Store) Migrate(ctx context.Context) (from, to int, err error) {
	ms, err := migrations()
	if err != nil {
		return 0, 0, err
	}
	conn, err := s.pool.Acquire(ctx)
	if err != nil {
		return 0, 0, fmt.Errorf("connecting to migrate: %w", safe(err))
	}
	defer conn.Release()
	if _, err := conn.Exec(ctx, "select pg_advisory_lock($1)", int64(migrateLock)); err != nil {
		return 0, 0, fmt.Errorf("waiting for the migration lock: %w", err)
	}
	defer func() {
		// A lost connection has lost the lock with it.
		_, _ = conn.Exec(context.WithoutCancel(ctx), "select pg_advisory_unlock($1)", int64(migrateLock))
	}()
	from, err = schemaVersion(ctx, conn)
	if err != nil {
		return 0, 0, err
	}
	if from > len(ms) {
		return from, from, &SchemaError{Found: from, Expected: len(ms)}
	}
	if from == 0 {
		if err := prepareSchema(ctx, conn.Conn()); err != nil {
			return 0, 0, err
		}
	}
	to = from
	for _, m := range ms[from:] {
		if err := applyMigration(ctx, conn.Conn(), m); err != nil {
			return from, to, err
		}
		to = m.version
	}
	if err := s.migrateQueue(ctx); err != nil {
		return from, to, err
	}
	return from, to, grantReader(ctx, conn.Conn())
}

func prepareSchema(ctx context.Context, conn *pgx.Conn) error {
	return pgx.BeginFunc(ctx, conn, func(tx pgx.Tx) error {
		_, err := tx.Conn().PgConn().Exec(ctx, `
			create schema if not exists pkvigil;
			create schema if not exists readout;
			create table if not exists pkvigil.schema_version (
				version int primary key, name text not null, at timestamptz not null default now());`).ReadAll()
		if err != nil {
			return fmt.Errorf("making schemas pkvigil and readout: %w; the account needs the right to create schemas in this database", err)
		}
		return nil
	})
}

func applyMigration(ctx context.Context, conn *pgx.Conn, m migration) error {
	return pgx.BeginFunc(ctx, conn, func(tx pgx.Tx) error {
		if _, err := tx.Conn().PgConn().Exec(ctx, m.sql).ReadAll(); err != nil {
			if pg, ok := errors.AsType[*pgconn.PgError](err); ok && pg.Position > 0 {
				line := 1 + strings.Count(m.sql[:min(int(pg.Position), len(m.sql))], "\n")
				return fmt.Errorf("migration %s, line %d: %w", m.name, line, err)
			}
			return fmt.Errorf("migration %s: %w", m.name, err)
		}
		_, err := tx.Exec(ctx, "insert into pkvigil.schema_version (version, name) values ($1, $2)", m.version, m.name)
		if err != nil {
			return fmt.Errorf("recording migration %s: %w", m.name, err)
		}
		return nil
	})
}

func (s *Store) migrateQueue(ctx context.Context) error {
	m, err := rivermigrate.New(riverpgxv5.New(s.pool), &rivermigrate.Config{Schema: QueueSchema})
	if err != nil {
		return fmt.Errorf("preparing the job queue's migrations: %w", err)
	}
	if _, err := m.Migrate(ctx, rivermigrate.DirectionUp, nil); err != nil {
		return fmt.Errorf("migrating the job queue: %w", err)
	}
	return nil
}

// SchemaVersion gives the version of the database's schema, 0 when there is none.
func (s *Store) SchemaVersion(ctx context.Context) (int, error) { return schemaVersion(ctx, s.pool) }

func schemaVersion(ctx context.Context, q Querier) (int, error) {
	var there bool
	if err := q.QueryRow(ctx, "select to_regclass('pkvigil.schema_version') is not null").Scan(&there); err != nil {
		return 0, fmt.Errorf("looking for the schema: %w", err)
	}
	if !there {
		return 0, nil
	}
	var v int
	if err := q.QueryRow(ctx, "select coalesce(max(version), 0) from pkvigil.schema_version").Scan(&v); err != nil {
		return 0, fmt.Errorf("reading the schema version: %w", err)
	}
	return v, nil
}

// CheckSchema is nil when the database has exactly the schema this program
// knows, else a *SchemaError that says what to do.
func (s *Store) CheckSchema(ctx context.Context) error {
	ms, err := migrations()
	if err != nil {
		return err
	}
	v, err := s.SchemaVersion(ctx)
	if err != nil {
		return err
	}
	if v != len(ms) {
		return &SchemaError{Found: v, Expected: len(ms)}
	}
	return nil
}

// grantReader gives the reader group its rights, when the group exists.
func grantReader(ctx context.Context, conn *pgx.Conn) error {
	var there bool
	if err := conn.QueryRow(ctx, "select exists (select from pg_roles where rolname = 'pkvigil_reader')").Scan(&there); err != nil {
		return fmt.Errorf("looking for the reader role: %w", err)
	}
	if !there {
		return nil
	}
	_, err := conn.PgConn().Exec(ctx, `
		grant usage on schema readout to pkvigil_reader;
		grant select on all tables in schema readout to pkvigil_reader;
		grant execute on all functions in schema readout to pkvigil_reader;`).ReadAll()
	if err != nil {
		return fmt.Errorf("granting the reader role its rights: %w", err)
	}
	return nil
}

// CreateReader makes a login role (or gives an existing one a new password)
// that may read schema readout and nothing else.
func (s *Store) CreateReader(ctx context.Context, login, password string) error {
	if login == "" || password == "" {
		return errors.New("a reader needs a name and a password")
	}
	return s.InTx(ctx, func(tx pgx.Tx) error {
		conn := tx.Conn()
		if err := grantReader(ctx, conn); err != nil {
			return err
		}
		var there bool
		if err := tx.QueryRow(ctx, "select exists (select from pg_roles where rolname = $1)", login).Scan(&there); err != nil {
			return fmt.Errorf("looking for role %s: %w", login, err)
		}
		quoted, err := conn.PgConn().EscapeString(password)
		if err != nil {
			return errors.New("the password has characters the server cannot take")
		}
		verb := "create"
		if there {
			verb = "alter"
		}
		role := pgx.Identifier{login}.Sanitize()
		// The statement holds the password, so the server's error, which may quote it, is not passed on.
		if _, err := tx.Exec(ctx, verb+" role "+role+" login nosuperuser nocreatedb nocreaterole password '"+quoted+"'"); err != nil {
			return fmt.Errorf("making role %s failed (%s)", login, sqlState(err))
		}
		if _, err := tx.Exec(ctx, "grant pkvigil_reader to "+role); err != nil {
			return fmt.Errorf("making %s a reader: %w", login, err)
		}
		if _, err := tx.Exec(ctx, "alter role "+role+" set search_path = readout"); err != nil {
			return fmt.Errorf("pointing %s at schema readout: %w", login, err)
		}
		return nil
	})
}

// sqlState is the bare code of a server error.
func sqlState(err error) string {
	if pg, ok := errors.AsType[*pgconn.PgError](err); ok {
		return "SQLSTATE " + pg.Code
	}
	return "no answer from the server"
}
