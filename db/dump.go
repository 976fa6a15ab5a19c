package db

import (
	"bufio"
	"context"
	_ "embed" // the dump's statements
	"errors"
	"fmt"
	"io"
	"sort"
	"strings"

	"github.com/jackc/pgx/v5"
)

//go:embed dump.sql
var dumpSQL string

// dumpHelpers are temporary functions that give natural keys for ids.
const dumpHelpers = `
	create function pg_temp.set_key(bigint) returns text language sql stable as 'select key from pkvigil.sample_set where id = $1';
	create function pg_temp.file_key(bigint) returns text language sql stable as 'select root || ''/'' || path || ''#'' || revision from pkvigil.file where id = $1';
	create function pg_temp.case_key(bigint) returns text language sql stable as 'select key from pkvigil.drift_case where id = $1';
	create function pg_temp.calibration_key(bigint) returns text language sql stable as
		'select pg_temp.file_key(file_id) || ''#'' || idx from pkvigil.calibration where id = $1';
	create function pg_temp.result_key(bigint) returns text language sql stable as
		'select pg_temp.set_key(r.set_id) || ''#'' || r.program || ''#'' || (select encode(s.sha256, ''hex'') from pkvigil.settings s where s.id = r.settings_id)
			from pkvigil.result r where r.id = $1';
	create function pg_temp.point_key(bigint) returns text language sql stable as
		'select concat_ws(''/'', p.scope_kind, p.scope, p.reference, p.ref_lot, p.characteristic, p.night, pg_temp.set_key(p.set_id), pg_temp.calibration_key(p.calibration_id))
			from pkvigil.point p where p.id = $1';`

// A dumpTable is one statement of dump.sql.
type dumpTable struct{ name, sql string }

// dumpTables splits dump.sql.
func dumpTables() []dumpTable {
	var ts []dumpTable
	for _, part := range strings.Split(dumpSQL, "-- table: ")[1:] {
		name, sql, _ := strings.Cut(part, "\n")
		for _, f := range []string{"set_key(", "file_key(", "case_key(", "calibration_key(", "result_key(", "point_key("} {
			sql = strings.ReplaceAll(sql, f, "pg_temp."+f)
		}
		ts = append(ts, dumpTable{name: strings.TrimSpace(name), sql: strings.TrimSuffix(strings.TrimSpace(sql), ";")})
	}
	return ts
}

// Dump writes every table in a canonical form, sorted: ids are replaced by
// natural keys; moments of our own clock, counters and what depends on how
// files were batched (revision counters, results that have been replaced) are
// left out. Two runs over the same files that must agree have equal dumps. The
// job queue's tables are not part of it.
func (s *Store) Dump(ctx context.Context, w io.Writer) error {
	out := bufio.NewWriter(w)
	err := s.InTx(ctx, func(tx pgx.Tx) error {
		if _, err := tx.Exec(ctx, `set transaction isolation level repeatable read`); err != nil {
			return fmt.Errorf("dumping: %w", err)
		}
		if _, err := tx.Conn().PgConn().Exec(ctx, dumpHelpers).ReadAll(); err != nil {
			return fmt.Errorf("dumping: %w", err)
		}
		for _, t := range dumpTables() {
			if err := dumpOne(ctx, tx, t, out); err != nil {
				return err
			}
		}
		return errDumped
	})
	if !errors.Is(err, errDumped) {
		return err
	}
	if err := out.Flush(); err != nil {
		return fmt.Errorf("writing the dump: %w", err)
	}
	return nil
}

// errDumped rolls the dump's transaction back, and its helper functions with it.
var errDumped = errors.New("dumped")

func dumpOne(ctx context.Context, tx pgx.Tx, t dumpTable, out *bufio.Writer) error {
	rows, err := tx.Query(ctx, "select x::text from ("+t.sql+") d(x)")
	if err != nil {
		return fmt.Errorf("dumping %s: %w", t.name, err)
	}
	lines, err := pgx.CollectRows(rows, pgx.RowTo[string])
	if err != nil {
		return fmt.Errorf("dumping %s: %w", t.name, err)
	}
	sort.Strings(lines)
	for _, l := range lines {
		fmt.Fprintf(out, "%s\t%s\n", t.name, l) // a failed write shows at Flush
	}
	return nil
}
