package db

import (
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/parse"
)

// OpenSets gives sets gathering or waiting with a summary of what they have, by key.
func (s *Store) OpenSets(ctx context.Context, q Querier) ([]OpenSet, error) {
	return s.openSets(ctx, q, `s.state in ('gathering', 'waiting')`)
}

// OpenSetsOf is OpenSets for the given ids, whatever their state.
func (s *Store) OpenSetsOf(ctx context.Context, q Querier, ids []int64) ([]OpenSet, error) {
	return s.openSets(ctx, q, `s.id = any($1)`, ids)
}

func (s *Store) openSets(ctx context.Context, q Querier, where string, args ...any) ([]OpenSet, error) {
	rows, err := s.on(q).Query(ctx, "select "+setColumns+`,
		coalesce((select jsonb_object_agg(role, n) from (select m.role, count(*) n from member m where m.set_id = s.id and m.active group by 1) x), '{}'),
		array(select distinct m.rung from member m where m.set_id = s.id and m.active and m.scan_id is not null and m.role = 'scan' order by 1),
		array(select distinct m.pos from member m where m.set_id = s.id and m.active and m.scan_id is not null and m.role = 'scan' and m.pos <> '' order by 1),
		coalesce((select jsonb_object_agg(label, n) from (select r.label, count(*) n from member m join reading r on r.file_id = m.file_id
			where m.set_id = s.id and m.active and m.scan_id is null group by 1) x), '{}'),
		exists (select from member m where m.set_id = s.id and m.active and m.role = 'end')
		from sample_set s where `+where+" order by s.key", args...)
	return collect(rows, err, "listing open sets", func(r pgx.Rows) (OpenSet, error) {
		var o OpenSet
		var roles, labels []byte
		targets, done := setTargets(&o.Set)
		if err := r.Scan(append(targets, &roles, &o.Rungs, &o.Positions, &labels, &o.Ended)...); err != nil {
			return o, err
		}
		if err := json.Unmarshal(roles, &o.Roles); err != nil {
			return o, fmt.Errorf("roles of %s: %w", o.Key, err)
		}
		if err := json.Unmarshal(labels, &o.RungPH); err != nil {
			return o, fmt.Errorf("readings of %s: %w", o.Key, err)
		}
		return o, done()
	})
}

const scanColumns = `c.id, c.file_id, c.idx, c.label, g.wavelength_nm, c.absorbance, c.path_mm, c.temperature_c, c.bandwidth_nm, c.measured_at, c.zoned,
	c.decimals, c.scale, c.instrument, c.ph, c.meta`

func scanScan(r pgx.Rows) (ScanRow, error) {
	var c ScanRow
	var path, temp, band, ph *float64
	var measured *time.Time
	var meta []byte
	err := r.Scan(&c.ID, &c.FileID, &c.Index, &c.Label, &c.WavelengthNM, &c.Absorbance, &path, &temp, &band, &measured, &c.Zoned,
		&c.Decimals, &c.Scale, &c.Instrument, &ph, &meta)
	if err != nil {
		return c, err
	}
	if path != nil {
		c.PathMM = *path
	}
	if band != nil {
		c.BandwidthNM = *band
	}
	c.TemperatureC, c.PH, c.Measured = num(temp), num(ph), when(measured)
	if err := json.Unmarshal(meta, &c.Meta); err != nil {
		return c, fmt.Errorf("header of scan %d: %w", c.ID, err)
	}
	if len(c.Meta) == 0 {
		c.Meta = nil
	}
	return c, nil
}

// ScansOf gives the scans of files, by file and position.
func (s *Store) ScansOf(ctx context.Context, q Querier, fileIDs []int64) ([]ScanRow, error) {
	rows, err := s.on(q).Query(ctx, "select "+scanColumns+" from scan c join grid g on g.sha256 = c.grid where c.file_id = any($1) order by c.file_id, c.idx", fileIDs)
	return collect(rows, err, "reading scans", scanScan)
}

// ReadingsOf gives the pH readings of files, by file and position.
func (s *Store) ReadingsOf(ctx context.Context, q Querier, fileIDs []int64) ([]ReadingRow, error) {
	rows, err := s.on(q).Query(ctx, `select id, file_id, idx, label, ph, millivolt, temperature_c, sd, slope_per_min, points, measured_at, zoned, electrode, meter, line
		from reading where file_id = any($1) order by file_id, idx`, fileIDs)
	return collect(rows, err, "reading pH readings", scanReading)
}

// ReadingsBetween gives the pH readings of newest revisions measured in a span
// of time, by moment: for pairing by clock.
func (s *Store) ReadingsBetween(ctx context.Context, q Querier, from, to time.Time) ([]ReadingRow, error) {
	rows, err := s.on(q).Query(ctx, `select r.id, r.file_id, r.idx, r.label, r.ph, r.millivolt, r.temperature_c, r.sd, r.slope_per_min, r.points, r.measured_at,
		r.zoned, r.electrode, r.meter, r.line from reading r join file f on f.id = r.file_id
		where r.measured_at >= $1 and r.measured_at <= $2 and f.state = 'taken' and `+newest+` order by r.measured_at, r.id`, from, to)
	return collect(rows, err, "reading pH readings by clock", scanReading)
}

func scanReading(r pgx.Rows) (ReadingRow, error) {
	var d ReadingRow
	var ph, mv, temp, sd, slope *float64
	var measured *time.Time
	err := r.Scan(&d.ID, &d.FileID, &d.Index, &d.Label, &ph, &mv, &temp, &sd, &slope, &d.Points, &measured, &d.Zoned, &d.Electrode, &d.Meter, &d.Line)
	d.PH, d.MilliVolt, d.TemperatureC, d.SD, d.SlopePerMin, d.Measured = num(ph), num(mv), num(temp), num(sd), num(slope), when(measured)
	return d, err
}

// SheetOf gives the sample-sheet rows of files, by file and position.
func (s *Store) SheetOf(ctx context.Context, q Querier, fileIDs []int64) ([]SheetRow, error) {
	rows, err := s.on(q).Query(ctx, `select file_id, position, set_name, rung, role, compound, lot, dilution, ionic_strength, buffer, cosolvent, cosolvent_pct, ph, line, other
		from sheet_row where file_id = any($1) order by file_id, idx`, fileIDs)
	return collect(rows, err, "reading sample sheets", scanSheet)
}

// SheetRowsOfFolder gives the sample-sheet rows of newest revisions whose path
// lies in the same folder of the root, for sequences that name sets.
func (s *Store) SheetRowsOfFolder(ctx context.Context, q Querier, root, folder string) ([]SheetRow, error) {
	if folder != "" {
		folder += "/"
	}
	rows, err := s.on(q).Query(ctx, `select r.file_id, r.position, r.set_name, r.rung, r.role, r.compound, r.lot, r.dilution, r.ionic_strength, r.buffer, r.cosolvent,
		r.cosolvent_pct, r.ph, r.line, r.other from sheet_row r join file f on f.id = r.file_id
		where f.root = $1 and starts_with(f.path, $2) and strpos(substr(f.path, length($2) + 1), '/') = 0 and `+newest+` order by r.file_id, r.idx`, root, folder)
	return collect(rows, err, "reading sample sheets", scanSheet)
}

func scanSheet(r pgx.Rows) (SheetRow, error) {
	var d SheetRow
	var dilution, ionic, pct, ph *float64
	var other []byte
	err := r.Scan(&d.FileID, &d.Position, &d.Set, &d.Rung, &d.Role, &d.Compound, &d.Lot, &dilution, &ionic, &d.Buffer, &d.Cosolvent, &pct, &ph, &d.Line, &other)
	if err != nil {
		return d, err
	}
	if dilution != nil {
		d.Dilution = *dilution
	}
	d.IonicStrength, d.CosolventPct, d.PH = num(ionic), num(pct), num(ph)
	if err := json.Unmarshal(other, &d.Other); err != nil {
		return d, fmt.Errorf("columns of line %d: %w", d.Line, err)
	}
	if len(d.Other) == 0 {
		d.Other = nil
	}
	return d, nil
}

// LoadSet reads everything a computation of a set needs, in one snapshot.
func (s *Store) LoadSet(ctx context.Context, setID int64) (*SetData, error) {
	var d *SetData
	err := pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		var err error
		d, err = s.loadSet(ctx, tx, setID, nil)
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("loading set %d: %w", setID, err)
	}
	return d, nil
}

// LoadMembers is LoadSet with the members of the given ids in place of the
// active ones: what an earlier result of the set was computed from.
func (s *Store) LoadMembers(ctx context.Context, setID int64, members []int64) (*SetData, error) {
	var d *SetData
	err := pgx.BeginTxFunc(ctx, s.pool, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly}, func(tx pgx.Tx) error {
		var err error
		d, err = s.loadSet(ctx, tx, setID, func(m *Member) bool { return slices.Contains(members, m.ID) })
		return err
	})
	if err != nil {
		return nil, fmt.Errorf("loading set %d: %w", setID, err)
	}
	return d, nil
}

// loadSet reads the members that want picks; nil picks the active ones.
func (s *Store) loadSet(ctx context.Context, tx pgx.Tx, setID int64, want func(*Member) bool) (*SetData, error) {
	if want == nil {
		want = func(m *Member) bool { return m.Active }
	}
	set, err := s.SetByID(ctx, tx, setID)
	if err != nil {
		return nil, err
	}
	d := &SetData{Set: *set}
	rows, err := tx.Query(ctx, "select "+memberColumns+`, f.path, f.root, f.sha256, f.late from member m join file f on f.id = m.file_id
		left join scan c on c.id = m.scan_id where m.set_id = $1
		order by m.role, m.rung, m.rep, f.path, f.revision, c.idx nulls first, m.id`, setID)
	all, err := collect(rows, err, "reading members", scanLoaded)
	if err != nil {
		return nil, err
	}
	scans, err := s.scansOfSet(ctx, tx, setID)
	if err != nil {
		return nil, err
	}
	var tables []int64
	seen := map[int64]bool{}
	for _, m := range all {
		if !want(&m.Member) {
			d.Inactive = append(d.Inactive, m.Member)
			continue
		}
		if m.ScanID != nil {
			c, ok := scans[*m.ScanID]
			if !ok {
				return nil, fmt.Errorf("scan %d of %s has been pruned: take it from the stored bytes again", *m.ScanID, m.Path)
			}
			m.Scan = c
		} else if !seen[m.FileID] {
			seen[m.FileID] = true
			tables = append(tables, m.FileID)
		}
		d.Members = append(d.Members, m)
	}
	if len(tables) > 0 {
		if d.Readings, err = s.ReadingsOf(ctx, tx, tables); err != nil {
			return nil, err
		}
		if d.Sheet, err = s.SheetOf(ctx, tx, tables); err != nil {
			return nil, err
		}
	}
	return d, nil
}

func scanLoaded(r pgx.Rows) (LoadedMember, error) {
	var m LoadedMember
	var sum []byte
	targets, done := memberTargets(&m.Member)
	err := r.Scan(append(targets, &m.Path, &m.Root, &sum, &m.Late)...)
	done()
	copy(m.SHA256[:], sum)
	return m, err
}

// scansOfSet reads the scans of all members. Scans on one grid share one
// slice of wavelengths, which nobody may change.
func (s *Store) scansOfSet(ctx context.Context, tx pgx.Tx, setID int64) (map[int64]*ScanRow, error) {
	rows, err := tx.Query(ctx, "select "+scanColumns+` from member m join scan c on c.id = m.scan_id join grid g on g.sha256 = c.grid
		where m.set_id = $1`, setID)
	all, err := collect(rows, err, "reading scans", scanScan)
	if err != nil {
		return nil, err
	}
	byID := make(map[int64]*ScanRow, len(all))
	for i := range all {
		byID[all[i].ID] = &all[i]
	}
	return byID, nil
}

// CalibrationBefore gives the newest calibration of an electrode at or before a moment, nil when none.
func (s *Store) CalibrationBefore(ctx context.Context, q Querier, electrode string, at time.Time) (*CalibrationRow, error) {
	return first(s.calibrations(ctx, q, `c.electrode = $1 and c.measured_at <= $2 order by c.measured_at desc, c.id desc limit 1`, electrode, at))
}

// CalibrationsOf gives calibrations of an electrode since a moment, oldest first; electrode "" means all, the zero moment ever.
func (s *Store) CalibrationsOf(ctx context.Context, q Querier, electrode string, since time.Time) ([]CalibrationRow, error) {
	return s.calibrations(ctx, q, `($1 = '' or c.electrode = $1) and ($2::timestamptz is null or c.measured_at >= $2) order by c.measured_at, c.id`, electrode, moment(since))
}

// CalibrationByID gives a calibration, nil when none.
func (s *Store) CalibrationByID(ctx context.Context, q Querier, id int64) (*CalibrationRow, error) {
	return first(s.calibrations(ctx, q, `c.id = $1`, id))
}

// calibrations reads those of newest revisions.
func (s *Store) calibrations(ctx context.Context, q Querier, where string, args ...any) ([]CalibrationRow, error) {
	rows, err := s.on(q).Query(ctx, `select c.id, c.file_id, c.electrode, c.meter, c.measured_at, c.zoned, c.meta,
			(select jsonb_agg(to_jsonb(p) order by p.idx) from calibration_point p where p.calibration_id = c.id),
			(select to_jsonb(x) from calibration_figures x where x.calibration_id = c.id order by x.id desc limit 1)
		from calibration c join file f on f.id = c.file_id where f.state = 'taken' and `+newest+` and `+where, args...)
	return collect(rows, err, "reading calibrations", scanCalibration)
}

func scanCalibration(r pgx.Rows) (CalibrationRow, error) {
	var c CalibrationRow
	var measured *time.Time
	var meta, points, figures []byte
	if err := r.Scan(&c.ID, &c.FileID, &c.Electrode, &c.Meter, &measured, &c.Zoned, &meta, &points, &figures); err != nil {
		return c, err
	}
	c.Measured = when(measured)
	if err := json.Unmarshal(meta, &c.Meta); err != nil {
		return c, fmt.Errorf("header of calibration %d: %w", c.ID, err)
	}
	if len(c.Meta) == 0 {
		c.Meta = nil
	}
	var ps []struct {
		Lot          string
		PH           float64
		MilliVolt    float64
		TemperatureC *float64 `json:"temperature_c"`
		Line         int
	}
	if points != nil {
		if err := json.Unmarshal(points, &ps); err != nil {
			return c, fmt.Errorf("points of calibration %d: %w", c.ID, err)
		}
	}
	for _, p := range ps {
		c.Points = append(c.Points, parse.CalibrationPoint{Lot: p.Lot, PH: p.PH, MilliVolt: p.MilliVolt, TemperatureC: num(p.TemperatureC), Line: p.Line})
	}
	if figures == nil {
		return c, nil
	}
	var f struct {
		SlopeAcidPct        *float64 `json:"slope_acid_pct"`
		SlopeBasePct        *float64 `json:"slope_base_pct"`
		Potential7MV        *float64 `json:"potential7_mv"`
		ThirdBufferResidual *float64 `json:"third_buffer_residual"`
		StableS             *float64 `json:"stable_s"`
		Forecast            string   `json:"forecast_limit_night"`
		Text                string   `json:"text"`
	}
	if err := json.Unmarshal(figures, &f); err != nil {
		return c, fmt.Errorf("figures of calibration %d: %w", c.ID, err)
	}
	c.Figures = &CalibrationFigures{SlopeAcidPct: num(f.SlopeAcidPct), SlopeBasePct: num(f.SlopeBasePct), Potential7MV: num(f.Potential7MV),
		ThirdBufferResidual: num(f.ThirdBufferResidual), StableS: num(f.StableS), ForecastLimitNight: f.Forecast, Text: f.Text}
	return c, nil
}

// PutCalibrationFigures stores what was computed from a calibration.
func (s *Store) PutCalibrationFigures(ctx context.Context, tx pgx.Tx, calibrationID int64, f CalibrationFigures, at time.Time) error {
	_, err := tx.Exec(ctx, `insert into calibration_figures (calibration_id, at, slope_acid_pct, slope_base_pct, potential7_mv, third_buffer_residual, stable_s,
			forecast_limit_night, text) values ($1, $2, $3, $4, $5, $6, $7, $8::text::date, $9)`,
		calibrationID, at, opt(f.SlopeAcidPct), opt(f.SlopeBasePct), opt(f.Potential7MV), opt(f.ThirdBufferResidual), opt(f.StableS),
		nightOrNil(f.ForecastLimitNight), f.Text)
	if err != nil {
		return fmt.Errorf("storing the figures of calibration %d: %w", calibrationID, err)
	}
	return nil
}

// EventsBetween gives events in a span of time (both ends included; zero does not narrow), oldest first.
// Events of a file that was exported again count once.
func (s *Store) EventsBetween(ctx context.Context, q Querier, from, to time.Time) ([]EventRow, error) {
	rows, err := s.on(q).Query(ctx, `select e.id, e.file_id, e.instruments, e.at, e.zoned, e.kind, e.resource, e.text, e.by, e.line from event e
		left join file f on f.id = e.file_id
		where ($1::timestamptz is null or e.at >= $1) and ($2::timestamptz is null or e.at <= $2)
			and (f.id is null or (f.state = 'taken' and `+newest+`)) order by e.at, e.id`, moment(from), moment(to))
	return collect(rows, err, "reading events", func(r pgx.Rows) (EventRow, error) {
		var e EventRow
		err := r.Scan(&e.ID, &e.FileID, &e.Instruments, &e.At, &e.Zoned, &e.Kind, &e.Resource, &e.Text, &e.By, &e.Line)
		e.At = e.At.UTC()
		return e, err
	})
}

// ResourceInUse gives the resource of a kind that the newest event at or before
// a moment put in use on an instrument, nil when none did.
func (s *Store) ResourceInUse(ctx context.Context, q Querier, instrument, kind string, at time.Time) (*ResourceUse, error) {
	rows, err := s.on(q).Query(ctx, `select e.resource, e.at, e.id, e.text from event e left join file f on f.id = e.file_id
		where e.kind = $2 and e.at <= $3 and e.resource <> '' and $1 = any(e.instruments)
			and (f.id is null or (f.state = 'taken' and `+newest+`)) order by e.at desc, e.id desc limit 1`, instrument, kind, at)
	return first(collect(rows, err, "looking for the "+kind+" in use", func(r pgx.Rows) (ResourceUse, error) {
		var u ResourceUse
		err := r.Scan(&u.Resource, &u.Since, &u.EventID, &u.Text)
		u.Since = u.Since.UTC()
		return u, err
	}))
}

// PlanOf gives the newest plan of a night; instrument "" means all.
func (s *Store) PlanOf(ctx context.Context, q Querier, night, instrument string) ([]PlanRow, error) {
	rows, err := s.on(q).Query(ctx, `select p.file_id, to_char(p.night, 'YYYY-MM-DD'), p.instrument, p.set_name, p.compound, p.slot, p.line
		from plan_row p join file f on f.id = p.file_id
		where p.night = $1::text::date and ($2 = '' or p.instrument = $2) and f.state = 'taken' and `+newest+` order by p.instrument, p.file_id, p.idx`, night, instrument)
	return collect(rows, err, "reading the plan of "+night, func(r pgx.Rows) (PlanRow, error) {
		var p PlanRow
		err := r.Scan(&p.FileID, &p.Night, &p.Instrument, &p.Set, &p.Compound, &p.Slot, &p.Line)
		return p, err
	})
}
