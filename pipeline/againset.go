package pipeline

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"math"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/settings"
)

// An Again is the outcome of computing a stored result a second time.
type Again struct {
	ResultID     int64   `json:"result_id"`
	Set          string  `json:"set"`
	Same         bool    `json:"same"`    // record and numbers agree to the last digit
	Program      string  `json:"program"` // that made the stored result
	OtherProgram bool    `json:"other_program"`
	Stored       float64 `json:"stored_pka"`
	Now          float64 `json:"pka_now"`
	Difference   float64 `json:"difference"`
	Why          string  `json:"why,omitempty"`
}

// Recompute computes a stored result again from the database alone: the bytes
// of its files as stored, the settings, calibration and archive it names.
func (s *Service) Recompute(ctx context.Context, id int64) (*Again, error) {
	r, err := s.store.ResultByID(ctx, nil, id)
	if err != nil {
		return nil, err
	}
	x, err := s.store.SetByID(ctx, nil, r.SetID)
	if err != nil {
		return nil, err
	}
	out := &Again{ResultID: id, Set: x.Key, Program: r.Program, OtherProgram: r.Program != Program(), Stored: math.NaN(), Now: math.NaN()}
	if len(r.PKa) > 0 {
		out.Stored = r.PKa[0].PKa
	}
	var rec struct {
		Used     used        `json:"used"`
		Exchange [][2]string `json:"exchanged_labels"`
	}
	if err := json.Unmarshal(r.Record, &rec); err != nil {
		return nil, fmt.Errorf("calculation record of result %d: %w", id, err)
	}
	in, data, err := s.inputOf(ctx, x, r, rec.Used)
	if err != nil {
		return nil, fmt.Errorf("result %d: %w", id, err)
	}
	in.Exchange, in.Corrections, in.NewLot = rec.Exchange, rec.Used.Corrections, rec.Used.NewLot
	now := assay.Compute(*in)
	again, err := s.result(ctx, data, in, &rec.Used, now, r.At)
	if err != nil {
		return nil, err
	}
	if len(again.PKa) > 0 {
		out.Now = again.PKa[0].PKa
	}
	out.Difference = out.Now - out.Stored
	a, b := normalise(r.Record), normalise(again.Record)
	out.Same = bytes.Equal(a, b) && (out.Now == out.Stored || math.IsNaN(out.Now) && math.IsNaN(out.Stored))
	if !out.Same {
		out.Why = "the calculation record differs"
		if out.OtherProgram {
			out.Why = "made by " + r.Program + ", computed now by " + Program()
		}
	}
	return out, nil
}

// normalise brings JSON that went through the database into one form; the
// program's name is left out, it is compared by itself.
func normalise(raw json.RawMessage) []byte {
	var v map[string]any
	d := json.NewDecoder(bytes.NewReader(raw))
	d.UseNumber()
	if d.Decode(&v) != nil {
		return raw
	}
	delete(v, "program")
	walkNumbers(v)
	b, err := json.Marshal(v)
	if err != nil {
		return raw
	}
	return b
}

// walkNumbers turns number texts into float64, so that 1e-05 and 0.00001 are the same.
func walkNumbers(v any) any {
	switch x := v.(type) {
	case map[string]any:
		for k, e := range x {
			x[k] = walkNumbers(e)
		}
	case []any:
		for i, e := range x {
			x[i] = walkNumbers(e)
		}
	case json.Number:
		if f, err := x.Float64(); err == nil {
			if f == 0 {
				return 0.0 // the database keeps no negative zero
			}
			return f
		}
	}
	return v
}

// inputOf rebuilds the input of a stored result.
func (s *Service) inputOf(ctx context.Context, x *db.Set, r *db.Result, u used) (*assay.Input, *db.SetData, error) {
	text, err := s.store.Settings(ctx, u.SettingsID)
	if err != nil {
		return nil, nil, err
	}
	cfg, err := settings.Read(text, fmt.Sprintf("stored settings %d", u.SettingsID))
	if err != nil {
		return nil, nil, err
	}
	data, err := s.store.LoadMembers(ctx, x.ID, u.MemberIDs)
	if err != nil {
		return nil, nil, err
	}
	data.Set.Revision = r.SetRevision
	in := baseInput(cfg, data)
	for _, m := range data.Members {
		if m.Scan == nil {
			continue
		}
		in.Solutions = append(in.Solutions, solution(m))
		if rule, ok := cfg.Naming().Rule(m.Rule); ok && m.Role == "scan" {
			switch rule.Pair {
			case "name", "inside":
				in.PHFirst = "name"
			case "clock":
				in.PairClock = true
			}
		}
	}
	if err := s.readByClock(ctx, cfg, in, &u, data); err != nil {
		return nil, nil, err
	}
	in.Electrode = u.Electrode
	if u.CalibrationID != 0 {
		cal, err := s.store.CalibrationByID(ctx, nil, u.CalibrationID)
		if err != nil {
			return nil, nil, err
		}
		if cal == nil {
			return nil, nil, fmt.Errorf("calibration %d is gone: %w", u.CalibrationID, db.ErrNotFound)
		}
		in.Calibration = &cal.Calibration
	}
	if len(u.OtherIDs) > 0 {
		if in.Others, err = s.library(ctx, u.OtherIDs); err != nil {
			return nil, nil, err
		}
	}
	if u.ArchiveID != 0 {
		a, err := s.store.ResultByID(ctx, nil, u.ArchiveID)
		if err != nil {
			return nil, nil, err
		}
		in.Archive = archiveFrom(a)
	}
	return in, data, nil
}

// RecomputeAll computes every current result of nights from..to again and
// tells of each through f.
func (s *Service) RecomputeAll(ctx context.Context, from, to string, f func(Again)) error {
	results, err := s.store.ResultsBetween(ctx, nil, from, to, "")
	if err != nil {
		return err
	}
	for _, r := range results {
		a, err := s.Recompute(ctx, r.ID)
		if err != nil {
			return err
		}
		f(*a)
	}
	return ctx.Err()
}

// putEvent stores an event and its deed.
func (s *Service) putEvent(ctx context.Context, e db.EventRow) error {
	return s.store.InTx(ctx, func(tx pgx.Tx) error {
		if err := s.store.PutEvents(ctx, tx, []db.EventRow{e}); err != nil {
			return err
		}
		return s.store.AppendDeed(ctx, tx, &db.Deed{At: s.clock.Now(), Actor: e.By, OSUser: osUser(), Action: "note", Object: e.Kind + " " + e.Resource, After: e.Text, Because: "logged by command", Program: Program()})
	})
}
