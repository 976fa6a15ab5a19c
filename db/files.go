package db

import (
	"context"
	"encoding/json"
	"fmt"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/pipeline/naming"
)

const fileColumns = `f.id, f.root, f.path, f.size, f.mod_time, f.seen_at, f.taken_at, f.sha256, f.state, f.format, f.encoding, f.layout, f.match,
	f.revision, f.replaces, f.twin_of, f.reason, f.nearest_rule, f.nearest_set, f.distance, f.remarks, f.late, f.settings_id`

// newest keeps only the last revision of each path.
const newest = `not exists (select from file n where n.replaces = f.id)`

func scanFile(r pgx.Rows) (File, error) {
	var f File
	var mod *time.Time
	var sum, match, reason, remarks []byte
	var distance *int
	var settings *int64
	err := r.Scan(&f.ID, &f.Root, &f.Path, &f.Size, &mod, &f.Seen, &f.Taken, &sum, &f.State, &f.Format, &f.Encoding, &f.Layout, &match,
		&f.Revision, &f.Replaces, &f.TwinOf, &reason, &f.NearestRule, &f.NearestSet, &distance, &remarks, &f.Late, &settings)
	if err != nil {
		return f, err
	}
	copy(f.SHA256[:], sum)
	f.ModTime, f.Seen, f.Taken = when(mod), f.Seen.UTC(), f.Taken.UTC()
	f.Distance = -1
	if distance != nil {
		f.Distance = *distance
	}
	if settings != nil {
		f.SettingsID = *settings
	}
	if match != nil {
		f.Match = new(naming.Match)
		if err := json.Unmarshal(match, f.Match); err != nil {
			return f, fmt.Errorf("match of file %d: %w", f.ID, err)
		}
	}
	if reason != nil {
		f.Reason = new(Reason)
		if err := json.Unmarshal(reason, f.Reason); err != nil {
			return f, fmt.Errorf("reason of file %d: %w", f.ID, err)
		}
	}
	if err := json.Unmarshal(remarks, &f.Remarks); err != nil {
		return f, fmt.Errorf("remarks of file %d: %w", f.ID, err)
	}
	return f, nil
}

// files runs a query for fileColumns of alias f.
func (s *Store) files(ctx context.Context, q Querier, doing, rest string, args ...any) ([]File, error) {
	rows, err := s.on(q).Query(ctx, "select "+fileColumns+" from file f "+rest, args...)
	return collect(rows, err, doing, scanFile)
}

// FileByHash gives the first taken file with these bytes, nil when none.
func (s *Store) FileByHash(ctx context.Context, q Querier, sum [32]byte) (*File, error) {
	return first(s.files(ctx, q, "looking for bytes", `where f.sha256 = $1 and f.state = 'taken' order by f.id limit 1`, sum[:]))
}

// FilesByHash gives, for each hash known, the first taken file with these bytes.
func (s *Store) FilesByHash(ctx context.Context, q Querier, sums [][32]byte) (map[[32]byte]*File, error) {
	keys := make([][]byte, len(sums))
	for i := range sums {
		keys[i] = sums[i][:]
	}
	all, err := s.files(ctx, q, "looking for bytes",
		`where f.id in (select min(g.id) from file g where g.sha256 = any($1) and g.state = 'taken' group by g.sha256)`, keys)
	if err != nil {
		return nil, err
	}
	found := make(map[[32]byte]*File, len(all))
	for i := range all {
		found[all[i].SHA256] = &all[i]
	}
	return found, nil
}

// LatestByPath gives the newest revision of a path, nil when none.
func (s *Store) LatestByPath(ctx context.Context, q Querier, root, path string) (*File, error) {
	return first(s.files(ctx, q, "looking for "+path, `where f.root = $1 and f.path = $2 order by f.revision desc limit 1`, root, PathKey(path)))
}

// LatestByPaths gives the newest revision of each path known, by its PathKey.
func (s *Store) LatestByPaths(ctx context.Context, q Querier, root string, paths []string) (map[string]*File, error) {
	keys := make([]string, len(paths))
	for i, p := range paths {
		keys[i] = PathKey(p)
	}
	all, err := s.files(ctx, q, "looking for paths of "+root, `where f.root = $1 and f.path = any($2) and `+newest, root, keys)
	if err != nil {
		return nil, err
	}
	found := make(map[string]*File, len(all))
	for i := range all {
		found[all[i].Path] = &all[i]
	}
	return found, nil
}

// FileByID gives a file; ErrNotFound when there is none.
func (s *Store) FileByID(ctx context.Context, q Querier, id int64) (*File, error) {
	f, err := first(s.files(ctx, q, "reading a file", `where f.id = $1`, id))
	if err == nil && f == nil {
		return nil, fmt.Errorf("file %d: %w", id, ErrNotFound)
	}
	return f, err
}

// FilesLike finds newest revisions whose path is, ends in, or contains the
// text, in this order of preference: for commands that people type.
func (s *Store) FilesLike(ctx context.Context, q Querier, text string, limit int) ([]File, error) {
	return s.files(ctx, q, "looking for files", `where f.path like '%' || $1 || '%' and `+newest+`
		order by f.path <> $2, f.path not like '%' || $1, f.seen_at desc, f.id limit $3`, likeText(text), text, limit)
}

// likeText makes a text match itself in LIKE.
func likeText(text string) string {
	return strings.NewReplacer(`\`, `\\`, `%`, `\%`, `_`, `\_`).Replace(text)
}

// FilesIn gives newest revisions in a state, seen from (inclusive) to
// (exclusive), oldest first; zero moments do not narrow.
func (s *Store) FilesIn(ctx context.Context, q Querier, state string, from, to time.Time) ([]File, error) {
	return s.files(ctx, q, "listing files", `where f.state = $1 and ($2::timestamptz is null or f.seen_at >= $2)
		and ($3::timestamptz is null or f.seen_at < $3) and `+newest+` order by f.seen_at, f.id`, state, moment(from), moment(to))
}

// SetFileState changes the state of a file and keeps a row about it.
func (s *Store) SetFileState(ctx context.Context, tx pgx.Tx, fileID int64, state string, at time.Time, actor, why string) error {
	tag, err := tx.Exec(ctx, `with f as (update file set state = $2 where id = $1 returning id)
		insert into file_state (file_id, state, at, actor, why) select id, $2, $3, $4, $5 from f`, fileID, state, at, actor, why)
	if err != nil {
		return fmt.Errorf("changing file %d to %s: %w", fileID, state, err)
	}
	if tag.RowsAffected() == 0 {
		return fmt.Errorf("changing file %d to %s: %w", fileID, state, ErrNotFound)
	}
	return nil
}

// Bytes gives the raw bytes of a hash; ErrNotFound when they are not stored.
func (s *Store) Bytes(ctx context.Context, q Querier, sum [32]byte) ([]byte, error) {
	var packed []byte
	var size int64
	err := s.on(q).QueryRow(ctx, `select zstd, size from content where sha256 = $1`, sum[:]).Scan(&packed, &size)
	if err != nil {
		return nil, fmt.Errorf("reading bytes %x: %w", sum, notFound(err))
	}
	raw, err := s.dec.DecodeAll(packed, make([]byte, 0, size))
	if err != nil {
		return nil, fmt.Errorf("unpacking bytes %x: %w", sum, err)
	}
	return raw, nil
}
