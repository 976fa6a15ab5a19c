package db

import (
	"context"
	"crypto/sha256"
	"encoding/binary"
	"errors"
	"fmt"
	"strconv"
	"time"

	"github.com/jackc/pgx/v5"
)

// deedLock serialises the trail.
const deedLock = 0x706b64656564 // "pkdeed"

// AppendDeed adds to the trail and fills in sequence and hashes. Deeds are
// serialised until the transaction ends, so append last.
func (s *Store) AppendDeed(ctx context.Context, tx pgx.Tx, d *Deed) error {
	if _, err := tx.Exec(ctx, `select pg_advisory_xact_lock($1)`, int64(deedLock)); err != nil {
		return fmt.Errorf("waiting for the trail: %w", err)
	}
	var prev []byte
	var seq int64
	err := tx.QueryRow(ctx, `select seq, hash from deed order by seq desc limit 1`).Scan(&seq, &prev)
	if err != nil && !errors.Is(err, pgx.ErrNoRows) {
		return fmt.Errorf("reading the end of the trail: %w", err)
	}
	d.Prev = [32]byte{}
	copy(d.Prev[:], prev)
	d.Seq = seq + 1
	d.At = d.At.UTC().Truncate(time.Microsecond) // what the server keeps
	d.Actor, d.OSUser, d.Action, d.Object, d.Before, d.After, d.Because = clean(d.Actor), clean(d.OSUser), clean(d.Action), clean(d.Object), clean(d.Before), clean(d.After), clean(d.Because)
	d.Hash = d.sum()
	_, err = tx.Exec(ctx, `insert into deed (seq, at, actor, os_user, action, object, before, after, because, settings_id, program, prev, hash)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13)`,
		d.Seq, d.At, d.Actor, d.OSUser, d.Action, d.Object, d.Before, d.After, d.Because, d.SettingsID, d.Program, d.Prev[:], d.Hash[:])
	if err != nil {
		return fmt.Errorf("adding to the trail: %w", err)
	}
	return nil
}

// sum is SHA-256 over the previous hash and every field, each preceded by its
// length, so that no two entries share a text.
func (d *Deed) sum() [32]byte {
	h := sha256.New()
	h.Write(d.Prev[:])
	settings := ""
	if d.SettingsID != nil {
		settings = strconv.FormatInt(*d.SettingsID, 10)
	}
	for _, field := range []string{strconv.FormatInt(d.Seq, 10), d.At.UTC().Format(time.RFC3339Nano), d.Actor, d.OSUser, d.Action, d.Object, d.Before, d.After,
		d.Because, settings, d.Program} {
		var n [8]byte
		binary.BigEndian.PutUint64(n[:], uint64(len(field)))
		h.Write(n[:])
		h.Write([]byte(field))
	}
	return [32]byte(h.Sum(nil))
}

const deedColumns = `seq, at, actor, os_user, action, object, before, after, because, settings_id, program, prev, hash`

func scanDeed(r pgx.Rows) (Deed, error) {
	var d Deed
	var prev, hash []byte
	err := r.Scan(&d.Seq, &d.At, &d.Actor, &d.OSUser, &d.Action, &d.Object, &d.Before, &d.After, &d.Because, &d.SettingsID, &d.Program, &prev, &hash)
	d.At = d.At.UTC()
	copy(d.Prev[:], prev)
	copy(d.Hash[:], hash)
	return d, err
}

// VerifyDeeds walks the chain: n entries are good; broken is the first that is
// not, nil when all are. Entries missing at the end cannot be seen from the
// chain alone: compare n and the last hash with what was noted elsewhere.
func (s *Store) VerifyDeeds(ctx context.Context) (n int, broken *Deed, err error) {
	rows, err := s.pool.Query(ctx, `select `+deedColumns+` from deed order by seq`)
	if err != nil {
		return 0, nil, fmt.Errorf("walking the trail: %w", err)
	}
	defer rows.Close()
	var prev [32]byte
	for rows.Next() {
		d, err := scanDeed(rows)
		if err != nil {
			return n, nil, fmt.Errorf("walking the trail: %w", err)
		}
		if d.Seq != int64(n)+1 || d.Prev != prev || d.sum() != d.Hash {
			return n, &d, nil
		}
		prev = d.Hash
		n++
	}
	if err := rows.Err(); err != nil {
		return n, nil, fmt.Errorf("walking the trail: %w", err)
	}
	return n, nil, nil
}

// Deeds gives the newest entries, newest first; object "" means all.
func (s *Store) Deeds(ctx context.Context, q Querier, object string, limit int) ([]Deed, error) {
	rows, err := s.on(q).Query(ctx, `select `+deedColumns+` from deed where $1 = '' or object = $1 order by seq desc limit $2`, object, limit)
	return collect(rows, err, "reading the trail", scanDeed)
}
