package db

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/binary"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"
	"unicode/utf8"

	"github.com/jackc/pgx/v5"

	"pkvigil/parse"
)

// TakeFile stores one file, its bytes and its records, and fills in the ids.
func (s *Store) TakeFile(ctx context.Context, tx pgx.Tx, t *Taken) error {
	return s.TakeBatch(ctx, tx, []*Taken{t})
}

// TakeBatch stores many files in three round trips. It fails or succeeds as
// one; on failure the caller rolls back and takes each file under a savepoint.
// Revision and Replaces are given by the store, later entries of the same path
// following earlier ones.
func (s *Store) TakeBatch(ctx context.Context, tx pgx.Tx, ts []*Taken) error {
	if len(ts) == 0 {
		return nil
	}
	if err := s.number(ctx, tx, ts); err != nil {
		return err
	}
	b := &pgx.Batch{}
	s.queueContents(b, ts)
	for _, t := range ts {
		if err := queueFile(b, &t.File); err != nil {
			return err
		}
	}
	queueGrids(b, gridsOf(ts))
	for _, t := range ts {
		if t.Content != nil {
			if err := queueContent(b, t.File.ID, t.Content, t.Stored, t.Instruments); err != nil {
				return fmt.Errorf("%s: %w", t.File.Path, err)
			}
		}
	}
	roots := map[string]int{}
	for _, t := range ts {
		roots[t.File.Root]++
	}
	for root, n := range roots {
		payload, err := json.Marshal(map[string]any{"root": root, "files": n})
		if err != nil {
			return fmt.Errorf("telling of new files: %w", err)
		}
		b.Queue(`select pg_notify($1, $2)`, ChannelFile, string(payload))
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("storing %d files: %w", len(ts), err)
	}
	return nil
}

// PutContent stores the records of a file that is already there: a parked one
// that was adopted, or one whose pruned scans are wanted again.
func (s *Store) PutContent(ctx context.Context, tx pgx.Tx, fileID int64, c *parse.Content, instruments func(parse.Event) []string) (Stored, error) {
	t := &Taken{Content: c}
	t.File.ID = fileID
	if err := s.numberRecords(ctx, tx, []*Taken{t}); err != nil {
		return Stored{}, err
	}
	b := &pgx.Batch{}
	b.Queue(`update file set format = $2, encoding = $3, layout = $4 where id = $1`, fileID, c.Format, c.Encoding, c.Layout)
	queueGrids(b, gridsOf([]*Taken{t}))
	if err := queueContent(b, fileID, c, t.Stored, instruments); err != nil {
		return Stored{}, err
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return Stored{}, fmt.Errorf("storing the records of file %d: %w", fileID, err)
	}
	return t.Stored, nil
}

// number gives ids, revisions and predecessors to the files and ids to their records.
func (s *Store) number(ctx context.Context, tx pgx.Tx, ts []*Taken) error {
	rootsAt, pathsAt := make([]string, len(ts)), make([]string, len(ts))
	for i, t := range ts {
		t.File.Path = PathKey(t.File.Path)
		rootsAt[i], pathsAt[i] = t.File.Root, t.File.Path
	}
	type last struct {
		id  int64
		rev int
	}
	known := map[[2]string]last{}
	rows, err := tx.Query(ctx, `select f.root, f.path, f.id, f.revision from file f
		join (select distinct r, p from unnest($1::text[], $2::text[]) u(r, p)) u on f.root = u.r and f.path = u.p
		where not exists (select from file n where n.replaces = f.id)`, rootsAt, pathsAt)
	if err != nil {
		return fmt.Errorf("looking for earlier revisions: %w", err)
	}
	var key [2]string
	var l last
	_, err = pgx.ForEachRow(rows, []any{&key[0], &key[1], &l.id, &l.rev}, func() error {
		known[key] = l
		return nil
	})
	if err != nil {
		return fmt.Errorf("looking for earlier revisions: %w", err)
	}
	if err := s.numberRecords(ctx, tx, ts); err != nil {
		return err
	}
	for _, t := range ts {
		f := &t.File
		if t.Twin != nil {
			f.TwinOf = new(t.Twin.File.ID)
		}
		key := [2]string{f.Root, f.Path}
		f.Revision, f.Replaces = 1, nil
		if l, ok := known[key]; ok {
			f.Revision, f.Replaces = l.rev+1, new(l.id)
		}
		known[key] = last{id: f.ID, rev: f.Revision}
	}
	return nil
}

// numberRecords draws ids from the tables' sequences in one round trip. Files
// that have an id already keep it.
func (s *Store) numberRecords(ctx context.Context, tx pgx.Tx, ts []*Taken) error {
	var nFile, nScan, nReading, nCal, nEvent int
	for _, t := range ts {
		if t.File.ID == 0 {
			nFile++
		}
		if c := t.Content; c != nil {
			nScan += len(c.Scans)
			nReading += len(c.Readings)
			nCal += len(c.Calibrations)
			nEvent += len(c.Events)
		}
	}
	var files, scans, readings, cals, events []int64
	err := tx.QueryRow(ctx, `select
		array(select nextval(pg_get_serial_sequence('file', 'id')) from generate_series(1, $1)),
		array(select nextval(pg_get_serial_sequence('scan', 'id')) from generate_series(1, $2)),
		array(select nextval(pg_get_serial_sequence('reading', 'id')) from generate_series(1, $3)),
		array(select nextval(pg_get_serial_sequence('calibration', 'id')) from generate_series(1, $4)),
		array(select nextval(pg_get_serial_sequence('event', 'id')) from generate_series(1, $5))`,
		nFile, nScan, nReading, nCal, nEvent).Scan(&files, &scans, &readings, &cals, &events)
	if err != nil {
		return fmt.Errorf("numbering records: %w", err)
	}
	cut := func(ids *[]int64, n int) []int64 {
		head := (*ids)[:n:n]
		*ids = (*ids)[n:]
		return head
	}
	for _, t := range ts {
		if t.File.ID == 0 {
			t.File.ID = cut(&files, 1)[0]
		}
		t.Stored = Stored{}
		if c := t.Content; c != nil {
			t.Stored = Stored{Scans: cut(&scans, len(c.Scans)), Readings: cut(&readings, len(c.Readings)),
				Calibrations: cut(&cals, len(c.Calibrations)), Events: cut(&events, len(c.Events))}
		}
	}
	return nil
}

// queueContents stores bytes once per hash. They are sorted by hash, so that
// two batches that share bytes wait for each other in one order.
func (s *Store) queueContents(b *pgx.Batch, ts []*Taken) {
	seen := make(map[[32]byte]bool, len(ts))
	order := make([]*Taken, 0, len(ts))
	for _, t := range ts {
		if !seen[t.File.SHA256] {
			seen[t.File.SHA256] = true
			order = append(order, t)
		}
	}
	slices.SortFunc(order, func(a, b *Taken) int { return bytes.Compare(a.File.SHA256[:], b.File.SHA256[:]) })
	for _, t := range order {
		// For bytes known before, Raw may be nil: nothing is stored then, and the foreign key watches.
		if t.Raw == nil && t.File.Size > 0 {
			continue
		}
		b.Queue(`insert into content (sha256, size, zstd) values ($1, $2, $3) on conflict do nothing`,
			t.File.SHA256[:], int64(len(t.Raw)), s.enc.EncodeAll(t.Raw, make([]byte, 0, len(t.Raw)/3+64)))
	}
}

func queueFile(b *pgx.Batch, f *File) error {
	match, err := jsonOrNil(f.Match)
	if err != nil {
		return fmt.Errorf("match of %s: %w", f.Path, err)
	}
	reason, err := jsonOrNil(f.Reason)
	if err != nil {
		return fmt.Errorf("reason of %s: %w", f.Path, err)
	}
	remarks, err := jsonList(f.Remarks)
	if err != nil {
		return fmt.Errorf("remarks of %s: %w", f.Path, err)
	}
	b.Queue(`insert into file (id, root, path, revision, size, mod_time, seen_at, taken_at, sha256, state, format, encoding, layout, match,
			replaces, twin_of, reason, nearest_rule, nearest_set, distance, remarks, late, settings_id)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16, $17, $18, $19, $20, $21, $22, $23)`,
		f.ID, f.Root, f.Path, f.Revision, f.Size, moment(f.ModTime), f.Seen, f.Taken, f.SHA256[:], f.State, f.Format, f.Encoding, f.Layout, match,
		f.Replaces, f.TwinOf, reason, clean(f.NearestRule), clean(f.NearestSet), atLeast0(f.Distance), remarks, f.Late, idOrNil(f.SettingsID))
	return nil
}

// gridsOf gives every wavelength grid once, by its hash.
func gridsOf(ts []*Taken) map[[32]byte][]float64 {
	grids := map[[32]byte][]float64{}
	for _, t := range ts {
		if t.Content == nil {
			continue
		}
		for i := range t.Content.Scans {
			w := t.Content.Scans[i].WavelengthNM
			grids[gridSum(w)] = w
		}
	}
	return grids
}

// gridSum is the SHA-256 of the wavelengths as little-endian float64.
func gridSum(w []float64) [32]byte {
	buf := make([]byte, 0, 8*len(w))
	for _, x := range w {
		buf = binary.LittleEndian.AppendUint64(buf, math.Float64bits(x))
	}
	return sha256.Sum256(buf)
}

func queueGrids(b *pgx.Batch, grids map[[32]byte][]float64) {
	keys := make([][32]byte, 0, len(grids))
	for k := range grids {
		keys = append(keys, k)
	}
	slices.SortFunc(keys, func(a, b [32]byte) int { return bytes.Compare(a[:], b[:]) })
	for _, k := range keys {
		b.Queue(`insert into grid (sha256, wavelength_nm) values ($1, $2) on conflict do nothing`, k[:], grids[k])
	}
}

// queueContent queues the records of one file.
func queueContent(b *pgx.Batch, fileID int64, c *parse.Content, ids Stored, instruments func(parse.Event) []string) error {
	for i := range c.Scans {
		if err := queueScan(b, ids.Scans[i], fileID, i, &c.Scans[i]); err != nil {
			return err
		}
	}
	for i := range c.Readings {
		r := &c.Readings[i]
		b.Queue(`insert into reading (id, file_id, idx, label, ph, millivolt, temperature_c, sd, slope_per_min, points, measured_at, zoned, electrode, meter, line)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15)`,
			ids.Readings[i], fileID, i, clean(r.Label), opt(r.PH), opt(r.MilliVolt), opt(r.TemperatureC), opt(r.SD), opt(r.SlopePerMin), r.Points,
			moment(r.Measured), r.Zoned, clean(r.Electrode), clean(r.Meter), r.Line)
	}
	for i := range c.Calibrations {
		if err := queueCalibration(b, ids.Calibrations[i], fileID, i, &c.Calibrations[i]); err != nil {
			return err
		}
	}
	for i := range c.Sheet {
		r := &c.Sheet[i]
		other, err := jsonList(r.Other)
		if err != nil {
			return fmt.Errorf("row %d: %w", r.Line, err)
		}
		b.Queue(`insert into sheet_row (file_id, idx, position, set_name, rung, role, compound, lot, dilution, ionic_strength, buffer, cosolvent, cosolvent_pct, ph, line, other)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16)`,
			fileID, i, clean(r.Position), clean(r.Set), clean(r.Rung), clean(r.Role), clean(r.Compound), clean(r.Lot), above0(r.Dilution),
			opt(r.IonicStrength), clean(r.Buffer), clean(r.Cosolvent), opt(r.CosolventPct), opt(r.PH), r.Line, other)
	}
	for i := range c.Events {
		var on []string
		if instruments != nil {
			on = instruments(c.Events[i])
		}
		queueEvent(b, ids.Events[i], &fileID, on, &c.Events[i])
	}
	for i := range c.Plan {
		p := &c.Plan[i]
		b.Queue(`insert into plan_row (file_id, idx, night, instrument, set_name, compound, slot, line) values ($1, $2, $3::text::date, $4, $5, $6, $7, $8)`,
			fileID, i, p.Night, clean(p.Instrument), clean(p.Set), clean(p.Compound), clean(p.Slot), p.Line)
	}
	return nil
}

func queueScan(b *pgx.Batch, id, fileID int64, idx int, c *parse.Scan) error {
	if len(c.Absorbance) != len(c.WavelengthNM) || len(c.WavelengthNM) == 0 {
		return fmt.Errorf("trace %q: found %d absorbances for %d wavelengths, expected as many, at least one", c.Label, len(c.Absorbance), len(c.WavelengthNM))
	}
	meta, err := jsonList(c.Meta)
	if err != nil {
		return fmt.Errorf("trace %q: %w", c.Label, err)
	}
	grid := gridSum(c.WavelengthNM)
	b.Queue(`insert into scan (id, file_id, idx, label, grid, absorbance, path_mm, temperature_c, bandwidth_nm, measured_at, zoned, decimals, scale, instrument, ph, meta)
		values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10, $11, $12, $13, $14, $15, $16)`,
		id, fileID, idx, clean(c.Label), grid[:], c.Absorbance, above0(c.PathMM), opt(c.TemperatureC), above0(c.BandwidthNM), moment(c.Measured), c.Zoned,
		c.Decimals, c.Scale, clean(c.Instrument), opt(c.PH), meta)
	return nil
}

func queueCalibration(b *pgx.Batch, id, fileID int64, idx int, c *parse.Calibration) error {
	meta, err := jsonList(c.Meta)
	if err != nil {
		return fmt.Errorf("calibration of %s: %w", c.Electrode, err)
	}
	b.Queue(`insert into calibration (id, file_id, idx, electrode, meter, measured_at, zoned, meta) values ($1, $2, $3, $4, $5, $6, $7, $8)`,
		id, fileID, idx, clean(c.Electrode), clean(c.Meter), moment(c.Measured), c.Zoned, meta)
	for i, p := range c.Points {
		b.Queue(`insert into calibration_point (calibration_id, idx, lot, ph, millivolt, temperature_c, line) values ($1, $2, $3, $4, $5, $6, $7)`,
			id, i, clean(p.Lot), p.PH, p.MilliVolt, opt(p.TemperatureC), p.Line)
	}
	return nil
}

func queueEvent(b *pgx.Batch, id int64, fileID *int64, instruments []string, e *parse.Event) {
	if instruments == nil {
		instruments = []string{}
	}
	b.Queue(`insert into event (id, file_id, at, zoned, kind, resource, instruments, text, by, line) values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10)`,
		id, fileID, e.At, e.Zoned, clean(e.Kind), clean(e.Resource), instruments, clean(e.Text), clean(e.By), e.Line)
}

// PutEvents stores events entered by command and fills in their ids.
func (s *Store) PutEvents(ctx context.Context, tx pgx.Tx, events []EventRow) error {
	if len(events) == 0 {
		return nil
	}
	var ids []int64
	err := tx.QueryRow(ctx, `select array(select nextval(pg_get_serial_sequence('event', 'id')) from generate_series(1, $1))`, len(events)).Scan(&ids)
	if err != nil {
		return fmt.Errorf("numbering events: %w", err)
	}
	b := &pgx.Batch{}
	for i := range events {
		events[i].ID = ids[i]
		queueEvent(b, ids[i], events[i].FileID, events[i].Instruments, &events[i].Event)
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("storing events: %w", err)
	}
	return nil
}

// clean makes text that the server takes: it refuses NUL and bytes that are not UTF-8.
func clean(text string) string {
	for i := 0; i < len(text); i++ {
		if text[i] == 0 || text[i] >= 0x80 {
			return string(bytes.ReplaceAll(bytes.ToValidUTF8([]byte(text), []byte("\uFFFD")), []byte{0}, []byte("\uFFFD")))
		}
	}
	return text
}

// PathKey is how a path is stored: as it is when it is valid UTF-8, else with
// its odd bytes written out as \xNN, so that every path has a key of its own.
// Look paths up in KnownFiles by their key.
func PathKey(path string) string {
	if utf8.ValidString(path) && strings.IndexByte(path, 0) < 0 {
		return path
	}
	var b strings.Builder
	for i := 0; i < len(path); {
		r, n := utf8.DecodeRuneInString(path[i:])
		if (r == utf8.RuneError && n == 1) || r == 0 {
			fmt.Fprintf(&b, `\x%02X`, path[i])
		} else {
			b.WriteString(path[i : i+n])
		}
		i += n
	}
	return b.String()
}

// above0 turns what a file did not state (0, or less) into NULL.
func above0(x float64) *float64 {
	if !(x > 0) {
		return nil
	}
	return opt(x)
}

func atLeast0(n int) *int {
	if n < 0 {
		return nil
	}
	return &n
}

func idOrNil(id int64) *int64 {
	if id == 0 {
		return nil
	}
	return &id
}

// jsonOrNil is NULL for nil. NUL characters, which jsonb refuses, are replaced.
func jsonOrNil[T any](v *T) ([]byte, error) {
	if v == nil {
		return nil, nil
	}
	return jsonText(v)
}

// jsonList is [] for nil.
func jsonList[T any](v []T) ([]byte, error) {
	if v == nil {
		return []byte("[]"), nil
	}
	return jsonText(v)
}

func jsonText(v any) ([]byte, error) {
	raw, err := json.Marshal(v)
	if err != nil {
		return nil, fmt.Errorf("encoding: %w", err)
	}
	return bytes.ReplaceAll(raw, []byte(`\u0000`), []byte(`\ufffd`)), nil
}

// nightText gives a date as text, "" for NULL.
func nightText(p *time.Time) string {
	if p == nil {
		return ""
	}
	return p.Format(time.DateOnly)
}

// nightOrNil is NULL for "".
func nightOrNil(night string) *string {
	if night == "" {
		return nil
	}
	return &night
}
