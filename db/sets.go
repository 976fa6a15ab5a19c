package db

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"time"

	"github.com/jackc/pgx/v5"
)

const setColumns = `s.id, s.key, s.instrument, s.night, s.name, s.slot, s.run, s.series, s.compound, s.lot, s.kind, s.state, s.revision,
	s.first_seen, s.last_seen, s.last_scan_at, s.ph_at, s.completed_at, s.missing, s.deadline`

// setTargets are the scan targets for setColumns; done fills in what needs converting.
func setTargets(s *Set) (targets []any, done func() error) {
	var night time.Time
	var lastScan, ph, completed, deadline *time.Time
	var missing []byte
	targets = []any{&s.ID, &s.Key, &s.Instrument, &night, &s.Name, &s.Slot, &s.Run, &s.Series, &s.Compound, &s.Lot, &s.Kind, &s.State, &s.Revision,
		&s.FirstSeen, &s.LastSeen, &lastScan, &ph, &completed, &missing, &deadline}
	return targets, func() error {
		s.Night = night.Format(time.DateOnly)
		s.FirstSeen, s.LastSeen = s.FirstSeen.UTC(), s.LastSeen.UTC()
		s.LastScanAt, s.PHAt, s.CompletedAt, s.Deadline = when(lastScan), when(ph), when(completed), when(deadline)
		s.Missing = nil
		if err := json.Unmarshal(missing, &s.Missing); err != nil {
			return fmt.Errorf("what set %s misses: %w", s.Key, err)
		}
		return nil
	}
}

func scanSet(r pgx.Rows) (Set, error) {
	var s Set
	targets, done := setTargets(&s)
	if err := r.Scan(targets...); err != nil {
		return s, err
	}
	return s, done()
}

func (s *Store) sets(ctx context.Context, q Querier, doing, rest string, args ...any) ([]Set, error) {
	rows, err := s.on(q).Query(ctx, "select "+setColumns+" from sample_set s "+rest, args...)
	return collect(rows, err, doing, scanSet)
}

// EnsureSet finds or makes the set with the key of set and fills the rest in
// from the database; a new one starts at revision 0, gathering. The row stays
// locked until the transaction ends. Compound, lot and series that were empty
// are filled in from set when it knows them.
func (s *Store) EnsureSet(ctx context.Context, tx pgx.Tx, set *Set) (made bool, err error) {
	if set.Kind == "" {
		set.Kind = KindSample
	}
	tag, err := tx.Exec(ctx, `insert into sample_set (key, instrument, night, name, slot, run, series, compound, lot, kind, state, revision,
			first_seen, last_seen, missing, deadline)
		values ($1, $2, $3::text::date, $4, $5, $6, $7, $8, $9, $10, 'gathering', 0, $11, $11, '[]', $12)
		on conflict (key) do nothing`,
		set.Key, set.Instrument, set.Night, set.Name, set.Slot, set.Run, set.Series, set.Compound, set.Lot, set.Kind, set.FirstSeen, moment(set.Deadline))
	if err != nil {
		return false, fmt.Errorf("making set %s: %w", set.Key, err)
	}
	made = tag.RowsAffected() == 1
	if !made && (set.Compound != "" || set.Lot != "" || set.Series != "") {
		_, err := tx.Exec(ctx, `update sample_set set compound = case when compound = '' then $2 else compound end,
				lot = case when lot = '' then $3 else lot end, series = case when series = '' then $4 else series end
			where key = $1 and ((compound = '' and $2 <> '') or (lot = '' and $3 <> '') or (series = '' and $4 <> ''))`,
			set.Key, set.Compound, set.Lot, set.Series)
		if err != nil {
			return false, fmt.Errorf("completing set %s: %w", set.Key, err)
		}
	}
	found, err := first(s.sets(ctx, tx, "reading set "+set.Key, `where s.key = $1 for update`, set.Key))
	if err != nil {
		return false, err
	}
	if found == nil {
		return false, fmt.Errorf("reading set %s: %w", set.Key, ErrNotFound)
	}
	*set = *found
	return made, nil
}

// TouchSet counts a change of a set's content: revision+1, last seen. It gives the new revision.
func (s *Store) TouchSet(ctx context.Context, tx pgx.Tx, setID int64, seen time.Time) (revision int, err error) {
	err = tx.QueryRow(ctx, `update sample_set set revision = revision + 1, last_seen = greatest(last_seen, $2) where id = $1 returning revision`, setID, seen).
		Scan(&revision)
	if err != nil {
		return 0, fmt.Errorf("touching set %d: %w", setID, notFound(err))
	}
	return revision, nil
}

// SetSetState moves a set to a state and says what is missing; a row of its
// history is kept when either changed. A zero deadline leaves the old one.
func (s *Store) SetSetState(ctx context.Context, tx pgx.Tx, setID int64, state string, missing []Missing, deadline, at time.Time) error {
	raw, err := jsonList(missing)
	if err != nil {
		return fmt.Errorf("what set %d misses: %w", setID, err)
	}
	_, err = tx.Exec(ctx, `
		with old as (select id, state, missing from sample_set where id = $1 for update),
		new as (
			update sample_set s set state = $2, missing = $3, deadline = coalesce($4, s.deadline),
				completed_at = case when $2 in ('complete', 'fitted') then coalesce(case when old.state in ('complete', 'fitted') then s.completed_at end, $5) else null end
			from old where s.id = old.id
			returning s.id, s.revision)
		insert into set_state (set_id, revision, state, missing, at)
		select new.id, new.revision, $2, $3, $5 from new join old using (id) where old.state <> $2 or old.missing <> $3::jsonb`,
		setID, state, raw, moment(deadline), at)
	if err != nil {
		return fmt.Errorf("moving set %d to %s: %w", setID, state, err)
	}
	return nil
}

// SetTimes stores the newest moment of a scan and the arrival of pH. Zero
// leaves a value as it is, and so does an earlier scan or a later first arrival.
func (s *Store) SetTimes(ctx context.Context, tx pgx.Tx, setID int64, lastScan, ph time.Time) error {
	_, err := tx.Exec(ctx, `update sample_set set last_scan_at = greatest(last_scan_at, $2), ph_at = coalesce(ph_at, $3) where id = $1`,
		setID, moment(lastScan), moment(ph))
	if err != nil {
		return fmt.Errorf("storing the times of set %d: %w", setID, err)
	}
	return nil
}

// SetByID gives a set; ErrNotFound when there is none.
func (s *Store) SetByID(ctx context.Context, q Querier, id int64) (*Set, error) {
	set, err := first(s.sets(ctx, q, "reading a set", `where s.id = $1`, id))
	if err == nil && set == nil {
		return nil, fmt.Errorf("set %d: %w", id, ErrNotFound)
	}
	return set, err
}

// SetByKey gives a set by its key; ErrNotFound when there is none.
func (s *Store) SetByKey(ctx context.Context, q Querier, key string) (*Set, error) {
	set, err := first(s.sets(ctx, q, "reading a set", `where s.key = $1`, key))
	if err == nil && set == nil {
		return nil, fmt.Errorf("set %s: %w", key, ErrNotFound)
	}
	return set, err
}

// SetsLike finds sets whose key or name is the text, or contains it, in this
// order and newest first: for commands that people type.
func (s *Store) SetsLike(ctx context.Context, q Querier, text string, limit int) ([]Set, error) {
	return s.sets(ctx, q, "looking for sets", `where s.key ilike '%' || $1 || '%'
		order by s.key <> $2, s.name <> $2, s.night desc, s.id desc limit $3`, likeText(text), text, limit)
}

// SetsOfNight gives the sets of a night in order of first file; instrument "" means all.
func (s *Store) SetsOfNight(ctx context.Context, q Querier, night, instrument string) ([]Set, error) {
	return s.sets(ctx, q, "listing sets of "+night, `where s.night = $1::text::date and ($2 = '' or s.instrument = $2) order by s.first_seen, s.key`, night, instrument)
}

const memberColumns = `m.id, m.set_id, m.file_id, m.scan_id, m.role, m.rung, m.rep, m.pos, m.ph, m.rev, m.measured_at, m.rule, m.active, m.left_out_why, m.at`

func memberTargets(m *Member) (targets []any, done func()) {
	var measured *time.Time
	return []any{&m.ID, &m.SetID, &m.FileID, &m.ScanID, &m.Role, &m.Rung, &m.Rep, &m.Pos, &m.PH, &m.Rev, &measured, &m.Rule, &m.Active, &m.LeftOutWhy, &m.At},
		func() { m.Measured, m.At = when(measured), m.At.UTC() }
}

func scanMember(r pgx.Rows) (Member, error) {
	var m Member
	targets, done := memberTargets(&m)
	err := r.Scan(targets...)
	done()
	return m, err
}

// Members gives the members of a set, inactive ones included, by role, rung, replicate and order of joining.
func (s *Store) Members(ctx context.Context, q Querier, setID int64) ([]Member, error) {
	rows, err := s.on(q).Query(ctx, "select "+memberColumns+" from member m where m.set_id = $1 order by m.role, m.rung, m.rep, m.id", setID)
	return collect(rows, err, "reading members", scanMember)
}

// MembersOfFile gives the memberships of a file, inactive ones included.
func (s *Store) MembersOfFile(ctx context.Context, q Querier, fileID int64) ([]Member, error) {
	rows, err := s.on(q).Query(ctx, "select "+memberColumns+" from member m where m.file_id = $1 order by m.id", fileID)
	return collect(rows, err, "reading memberships", scanMember)
}

const addMember = `insert into member (set_id, file_id, scan_id, role, rung, rep, pos, ph, rev, measured_at, rule, active, left_out_why, at, changed_at)
	values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $14)
	on conflict (set_id, file_id, scan_id, role, rung) do nothing returning id`

func memberArgs(m *Member) []any {
	return []any{m.SetID, m.FileID, m.ScanID, m.Role, clean(m.Rung), clean(m.Rep), clean(m.Pos), optP(m.PH), m.Rev, moment(m.Measured), m.Rule, m.Active,
		clean(m.LeftOutWhy), m.At}
}

// optP turns a pointer to NaN into NULL.
func optP(p *float64) *float64 {
	if p == nil {
		return nil
	}
	return opt(*p)
}

// AddMember puts a file or trace into a set; the same one again changes nothing and gives the same id.
func (s *Store) AddMember(ctx context.Context, tx pgx.Tx, m *Member) (added bool, err error) {
	err = tx.QueryRow(ctx, addMember, memberArgs(m)...).Scan(&m.ID)
	if err == nil {
		return true, nil
	}
	if !errors.Is(err, pgx.ErrNoRows) {
		return false, fmt.Errorf("adding file %d to set %d: %w", m.FileID, m.SetID, err)
	}
	err = tx.QueryRow(ctx, `select id from member where set_id = $1 and file_id = $2 and scan_id is not distinct from $3 and role = $4 and rung = $5`,
		m.SetID, m.FileID, m.ScanID, m.Role, clean(m.Rung)).Scan(&m.ID)
	if err != nil {
		return false, fmt.Errorf("adding file %d to set %d: %w", m.FileID, m.SetID, err)
	}
	return false, nil
}

// AddMembers is AddMember for many in one round trip; ids are filled in for
// those that are new and stay 0 for those that were there.
func (s *Store) AddMembers(ctx context.Context, tx pgx.Tx, ms []*Member) error {
	if len(ms) == 0 {
		return nil
	}
	b := &pgx.Batch{}
	for _, m := range ms {
		b.Queue(addMember, memberArgs(m)...).QueryRow(func(row pgx.Row) error {
			err := row.Scan(&m.ID)
			if errors.Is(err, pgx.ErrNoRows) {
				return nil
			}
			return err
		})
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("adding %d members: %w", len(ms), err)
	}
	return nil
}

// RetireMember makes a member inactive and says why. Members are never deleted.
func (s *Store) RetireMember(ctx context.Context, tx pgx.Tx, memberID int64, at time.Time, why string) error {
	_, err := tx.Exec(ctx, `update member set active = false, left_out_why = $2, changed_at = $3 where id = $1`, memberID, why, at)
	if err != nil {
		return fmt.Errorf("retiring member %d: %w", memberID, err)
	}
	return nil
}

// RetireFile makes every active member of a file inactive and gives the sets touched, in order of their ids.
func (s *Store) RetireFile(ctx context.Context, tx pgx.Tx, fileID int64, at time.Time, why string) (sets []int64, err error) {
	rows, err := tx.Query(ctx, `with r as (update member set active = false, left_out_why = $2, changed_at = $3 where file_id = $1 and active returning set_id)
		select distinct set_id from r order by 1`, fileID, why, at)
	return collect(rows, err, "retiring a file", func(r pgx.Rows) (id int64, err error) { return id, r.Scan(&id) })
}

// AdoptFile places a file (all its traces) in a set by hand: members are added,
// the file counts as taken, the set is touched. It gives the set's new
// revision. Records must have been stored before (PutContent) when the file had
// none.
func (s *Store) AdoptFile(ctx context.Context, tx pgx.Tx, fileID, setID int64, role, rung string, at time.Time, actor, because string) (revision int, err error) {
	var night time.Time
	if err := tx.QueryRow(ctx, `select night from sample_set where id = $1 for update`, setID).Scan(&night); err != nil {
		return 0, fmt.Errorf("adopting into set %d: %w", setID, notFound(err))
	}
	rows, err := tx.Query(ctx, `select id, measured_at, ph from scan where file_id = $1 order by idx`, fileID)
	scans, err := collect(rows, err, "reading the traces to adopt", func(r pgx.Rows) (m Member, err error) {
		var measured *time.Time
		err = r.Scan(&m.ScanID, &measured, &m.PH)
		m.Measured = when(measured)
		return m, err
	})
	if err != nil {
		return 0, err
	}
	if len(scans) == 0 {
		scans = []Member{{}} // a table, a sheet, a marker
	}
	for _, m := range scans {
		m.SetID, m.FileID, m.Role, m.Rung, m.Rule, m.Active, m.At = setID, fileID, role, rung, "adopted by "+actor, true, at
		if _, err := s.AddMember(ctx, tx, &m); err != nil {
			return 0, err
		}
		// Adopted before and retired since: the person's word counts again.
		if _, err := tx.Exec(ctx, `update member set active = true, left_out_why = '', changed_at = $2 where id = $1 and not active`, m.ID, at); err != nil {
			return 0, fmt.Errorf("adopting file %d: %w", fileID, err)
		}
	}
	if err := s.SetFileState(ctx, tx, fileID, FileTaken, at, actor, because); err != nil {
		return 0, err
	}
	return s.TouchSet(ctx, tx, setID, at)
}
