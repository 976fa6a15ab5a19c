package db

import (
	"context"
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
)

// PutSettings stores a settings file, once per content, and gives its id.
func (s *Store) PutSettings(ctx context.Context, toml []byte, program string, at time.Time) (int64, error) {
	sum := sha256.Sum256(toml)
	if toml == nil {
		toml = []byte{}
	}
	_, err := s.pool.Exec(ctx, `insert into settings (sha256, toml, program, at) values ($1, $2, $3, $4) on conflict (sha256) do nothing`,
		sum[:], toml, program, at)
	if err != nil {
		return 0, fmt.Errorf("storing settings: %w", err)
	}
	var id int64
	if err := s.pool.QueryRow(ctx, `select id from settings where sha256 = $1`, sum[:]).Scan(&id); err != nil {
		return 0, fmt.Errorf("storing settings: %w", err)
	}
	return id, nil
}

// Settings gives a stored settings file.
func (s *Store) Settings(ctx context.Context, id int64) ([]byte, error) {
	var toml []byte
	err := s.pool.QueryRow(ctx, `select toml from settings where id = $1`, id).Scan(&toml)
	if err != nil {
		return nil, fmt.Errorf("settings version %d: %w", id, notFound(err))
	}
	return toml, nil
}

// notFound turns the driver's word for it into ours.
func notFound(err error) error {
	if errors.Is(err, pgx.ErrNoRows) {
		return ErrNotFound
	}
	return err
}

// ClaimRoot takes or renews the lease on a root until at+ttl. held is false
// when another holder's lease runs; other says whose.
func (s *Store) ClaimRoot(ctx context.Context, root string, h Holder, at time.Time, ttl time.Duration) (held bool, other Holder, err error) {
	return claimRoot(ctx, s.pool, root, h, at, ttl)
}

// A Claim is what came of claiming one root.
type Claim struct {
	Held  bool
	Other Holder // who holds it, when not Held
}

// ClaimRoots is ClaimRoot for several roots, in one transaction that does not
// wait for the disk: a lease that a crash of the server takes back lapses all the sooner.
func (s *Store) ClaimRoots(ctx context.Context, roots []string, h Holder, at time.Time, ttl time.Duration) (map[string]Claim, error) {
	out := make(map[string]Claim, len(roots))
	err := s.unhurried(ctx, func(tx pgx.Tx) error {
		for _, r := range roots {
			var c Claim
			var err error
			if c.Held, c.Other, err = claimRoot(ctx, tx, r, h, at, ttl); err != nil {
				return err
			}
			out[r] = c
		}
		return nil
	})
	return out, err
}

// unhurried runs f in a transaction whose commit does not wait for the disk.
// Only for what a crash may take back without harm.
func (s *Store) unhurried(ctx context.Context, f func(pgx.Tx) error) error {
	return s.InTx(ctx, func(tx pgx.Tx) error {
		if _, err := tx.Exec(ctx, `set local synchronous_commit = off`); err != nil {
			return err
		}
		return f(tx)
	})
}

func claimRoot(ctx context.Context, q Querier, root string, h Holder, at time.Time, ttl time.Duration) (held bool, other Holder, err error) {
	// Zero rows: the row belongs to somebody else whose lease has not lapsed.
	tag, err := q.Exec(ctx, `
		insert into root_lease as l (root, host, pid, program, since, until) values ($1, $2, $3, $4, $5, $6)
		on conflict (root) do update set host = $2, pid = $3, program = $4, until = $6,
			since = case when l.host = $2 and l.pid = $3 then l.since else $5 end
		where (l.host = $2 and l.pid = $3) or l.until <= $5`,
		root, h.Host, h.PID, h.Program, at, at.Add(ttl))
	if err != nil {
		return false, Holder{}, fmt.Errorf("claiming root %s: %w", root, err)
	}
	if tag.RowsAffected() == 1 {
		return true, Holder{}, nil
	}
	err = q.QueryRow(ctx, `select host, pid, program, since, until from root_lease where root = $1`, root).
		Scan(&other.Host, &other.PID, &other.Program, &other.Since, &other.Until)
	if err != nil && !errors.Is(err, pgx.ErrNoRows) { // released in between: the next claim gets it
		return false, Holder{}, fmt.Errorf("claiming root %s: %w", root, err)
	}
	other.Since, other.Until = other.Since.UTC(), other.Until.UTC()
	return false, other, nil
}

// ReleaseRoots ends all leases of a holder.
func (s *Store) ReleaseRoots(ctx context.Context, h Holder) error {
	if _, err := s.pool.Exec(ctx, `delete from root_lease where host = $1 and pid = $2`, h.Host, h.PID); err != nil {
		return fmt.Errorf("releasing roots: %w", err)
	}
	return nil
}

// PutRootState stores what the last look at a root found.
func (s *Store) PutRootState(ctx context.Context, st RootState) error {
	return putRootState(ctx, s.pool, st)
}

// PutRootStates is PutRootState for several roots, in one transaction that
// does not wait for the disk: the next look tells the same again.
func (s *Store) PutRootStates(ctx context.Context, sts []RootState) error {
	return s.unhurried(ctx, func(tx pgx.Tx) error {
		for _, st := range sts {
			if err := putRootState(ctx, tx, st); err != nil {
				return err
			}
		}
		return nil
	})
}

func putRootState(ctx context.Context, q Querier, st RootState) error {
	_, err := q.Exec(ctx, `
		insert into root_state (root, instrument, visible, why, since, looked_at, newest_at, files, settling, litter, complete_up_to, clock_offset_s)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12)
		on conflict (root) do update set instrument = excluded.instrument, visible = excluded.visible, why = excluded.why, since = excluded.since,
			looked_at = excluded.looked_at, newest_at = excluded.newest_at, files = excluded.files, settling = excluded.settling,
			litter = excluded.litter, complete_up_to = coalesce(excluded.complete_up_to, root_state.complete_up_to),
			clock_offset_s = excluded.clock_offset_s`,
		st.Root, st.Instrument, st.Visible, st.Why, moment(st.Since), moment(st.LookedAt), moment(st.Newest), st.Files, st.Settling, st.Litter,
		moment(st.CompleteUpTo), st.ClockOffset.Seconds())
	if err != nil {
		return fmt.Errorf("storing the state of root %s: %w", st.Root, err)
	}
	return nil
}

// RootStates gives the states of all roots by name.
func (s *Store) RootStates(ctx context.Context, q Querier) ([]RootState, error) {
	rows, err := s.on(q).Query(ctx, `select root, instrument, visible, why, since, looked_at, newest_at, files, settling, litter, complete_up_to, clock_offset_s
		from root_state order by root`)
	return collect(rows, err, "reading root states", func(r pgx.Rows) (RootState, error) {
		var st RootState
		var since, looked, newest, upTo *time.Time
		var offset float64
		err := r.Scan(&st.Root, &st.Instrument, &st.Visible, &st.Why, &since, &looked, &newest, &st.Files, &st.Settling, &st.Litter, &upTo, &offset)
		st.Since, st.LookedAt, st.Newest, st.CompleteUpTo = when(since), when(looked), when(newest), when(upTo)
		st.ClockOffset = time.Duration(offset * float64(time.Second))
		return st, err
	})
}

// KnownFiles gives the newest revision of every path of a root.
func (s *Store) KnownFiles(ctx context.Context, root string) (map[string]Stamp, error) {
	rows, err := s.pool.Query(ctx, `select distinct on (path) path, id, size, mod_time, sha256, state from file where root = $1 order by path, revision desc`, root)
	if err != nil {
		return nil, fmt.Errorf("listing known files of %s: %w", root, err)
	}
	defer rows.Close()
	known := map[string]Stamp{}
	for rows.Next() {
		var path string
		var st Stamp
		var mod *time.Time
		var sum []byte
		if err := rows.Scan(&path, &st.FileID, &st.Size, &mod, &sum, &st.State); err != nil {
			return nil, fmt.Errorf("listing known files of %s: %w", root, err)
		}
		st.ModTime = when(mod)
		copy(st.SHA256[:], sum)
		known[path] = st
	}
	if err := rows.Err(); err != nil {
		return nil, fmt.Errorf("listing known files of %s: %w", root, err)
	}
	return known, nil
}

// collect reads all rows with scan, wrapping errors with what was being done.
func collect[T any](rows pgx.Rows, err error, doing string, scan func(pgx.Rows) (T, error)) ([]T, error) {
	if err != nil {
		return nil, fmt.Errorf("%s: %w", doing, err)
	}
	defer rows.Close()
	var all []T
	for rows.Next() {
		v, err := scan(rows)
		if err != nil {
			return nil, fmt.Errorf("%s: %w", doing, err)
		}
		all = append(all, v)
	}
	if err := rows.Err(); err != nil {
		return nil, fmt.Errorf("%s: %w", doing, err)
	}
	return all, nil
}

// first gives a pointer to the only row, nil when there is none.
func first[T any](all []T, err error) (*T, error) {
	if err != nil || len(all) == 0 {
		return nil, err
	}
	return &all[0], nil
}

// Watermark gives the state stored under a key; ok is false when there is none.
func (s *Store) Watermark(ctx context.Context, q Querier, key string, into any) (ok bool, err error) {
	var raw []byte
	err = s.on(q).QueryRow(ctx, `select state from watermark where key = $1`, key).Scan(&raw)
	if errors.Is(err, pgx.ErrNoRows) {
		return false, nil
	}
	if err != nil {
		return false, fmt.Errorf("reading watermark %s: %w", key, err)
	}
	if err := json.Unmarshal(raw, into); err != nil {
		return false, fmt.Errorf("reading watermark %s: %w", key, err)
	}
	return true, nil
}

// PutWatermark stores a state under a key.
func (s *Store) PutWatermark(ctx context.Context, tx pgx.Tx, key string, state any, at time.Time) error {
	raw, err := json.Marshal(state)
	if err != nil {
		return fmt.Errorf("storing watermark %s: %w", key, err)
	}
	_, err = tx.Exec(ctx, `insert into watermark (key, state, at) values ($1, $2, $3)
		on conflict (key) do update set state = excluded.state, at = excluded.at`, key, raw, at)
	if err != nil {
		return fmt.Errorf("storing watermark %s: %w", key, err)
	}
	return nil
}

// Channels of NOTIFY. Payloads are small JSON objects.
const (
	ChannelFile   = "pkvigil_file"   // {"files":n,"root":...}
	ChannelResult = "pkvigil_result" // {"set":id,"result":id,"verdict":...}
	ChannelCase   = "pkvigil_case"   // {"case":id,"state":...}
)

// Notify tells listeners when the transaction commits. Files, results and cases tell by themselves.
func (s *Store) Notify(ctx context.Context, tx pgx.Tx, channel string, payload any) error {
	raw, err := json.Marshal(payload)
	if err != nil {
		return fmt.Errorf("telling %s: %w", channel, err)
	}
	if _, err := tx.Exec(ctx, `select pg_notify($1, $2)`, channel, string(raw)); err != nil {
		return fmt.Errorf("telling %s: %w", channel, err)
	}
	return nil
}

// Listen calls f for each notice on the channels until ctx ends (nil) or the connection is lost.
func (s *Store) Listen(ctx context.Context, channels []string, f func(channel string, payload json.RawMessage)) error {
	conn, err := s.pool.Acquire(ctx)
	if err != nil {
		return fmt.Errorf("connecting to listen: %w", safe(err))
	}
	c := conn.Hijack() // a listening connection must not go back to the pool
	defer c.Close(context.WithoutCancel(ctx))
	for _, ch := range channels {
		if _, err := c.Exec(ctx, "listen "+pgx.Identifier{ch}.Sanitize()); err != nil {
			return fmt.Errorf("listening on %s: %w", ch, err)
		}
	}
	for {
		n, err := c.WaitForNotification(ctx)
		if ctx.Err() != nil {
			return nil
		}
		if err != nil {
			return fmt.Errorf("listening: %w", err)
		}
		f(n.Channel, json.RawMessage(n.Payload))
	}
}
