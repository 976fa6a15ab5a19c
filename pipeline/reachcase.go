package pipeline

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/alert"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/settings"
)

// A harm joins what a case may have done to a result with the result.
type harm struct {
	drift.Harm
	result db.Summary
}

// reach bounds what a case has done to the results since the last good
// references, stores it, and puts the results it may have touched in question.
func (s *Service) reach(ctx context.Context, tx pgx.Tx, sc *scene, c *drift.Case, row *db.Case, now time.Time) ([]harm, error) {
	if len(c.Explanation.Candidates) == 0 {
		return nil, nil
	}
	from := c.Explanation.Candidates[0].Since.Low - 1
	until := sc.history.Last
	next := drift.Night(0)
	if c.State == drift.Closed {
		until, next = c.Closed, c.Closed
	}
	results, err := s.store.ResultsBetween(ctx, tx, from.String(), until.String(), "")
	if err != nil {
		return nil, err
	}
	known, err := s.store.Reach(ctx, tx, row.ID)
	if err != nil {
		return nil, err
	}
	before := map[int64]db.ReachRow{}
	for _, k := range known {
		before[k.ResultID] = k
	}
	var facts []drift.ResultFacts
	var kept []db.Summary
	for _, r := range results {
		if r.Set.Kind != db.KindSample || len(r.PKa) == 0 || !concerns(c, r.Set.Instrument) {
			continue
		}
		f, err := s.resultFacts(ctx, tx, r)
		if err != nil {
			return nil, err
		}
		facts, kept = append(facts, f), append(kept, r)
	}
	harms, err := sc.model.Reach(c.Explanation, sc.history, from, next, facts)
	if err != nil {
		return nil, err
	}
	byID := map[int64]db.Summary{}
	for _, r := range kept {
		byID[r.ID] = r
	}
	var out []harm
	var rows []db.ReachRow
	for _, h := range harms {
		if h.Bound == 0 && h.Impact == 0 && h.Unaffected && before[h.ID].ResultID == 0 {
			continue // the cause cannot reach it
		}
		out = append(out, harm{h, byID[h.ID]})
		was := before[h.ID]
		row := db.ReachRow{ResultID: h.ID, Impact: h.Impact, ImpactUpper: h.Bound, Resolution: db.ReachOpen}
		if h.Unaffected {
			row.Resolution = db.ReachProposed
		}
		if was.ResultID != 0 && was.Resolution != db.ReachOpen && was.Resolution != db.ReachProposed {
			continue // a person has decided
		}
		if was.ResultID == 0 || was.Resolution != row.Resolution || math.Abs(was.Impact-row.Impact) > 0.0005 || math.Abs(was.ImpactUpper-row.ImpactUpper) > 0.0005 {
			rows = append(rows, row)
		}
		if !h.Unaffected && !byID[h.ID].Standing.InQuestion && was.ResultID == 0 {
			err := s.store.PutResultStatus(ctx, tx, db.StatusRow{ResultID: h.ID, Status: db.StatusInQuestion, At: now, Actor: "pkvigil", Because: row2why(h, c), CaseID: &c.ID})
			if err != nil {
				return nil, err
			}
		}
	}
	return out, s.store.PutReach(ctx, tx, row.ID, now, rows)
}

func row2why(h drift.Harm, c *drift.Case) string {
	return fmt.Sprintf("%s may have moved this pKa by up to %.3f", c.Explanation.Sentence, h.Bound)
}

// concerns says whether a case touches an instrument; a case without
// instruments touches all.
func concerns(c *drift.Case, instrument string) bool {
	return len(c.Instruments) == 0 || slices.Contains(c.Instruments, instrument)
}

// resultFacts is what reach needs to know of a result.
func (s *Service) resultFacts(ctx context.Context, tx pgx.Tx, r db.Summary) (drift.ResultFacts, error) {
	cfg := set(s)
	f := drift.ResultFacts{ID: r.ID, Night: drift.Night(nightNumber(r.Set.Night)), Instrument: r.Set.Instrument, Compound: r.Set.Compound,
		PKa: r.PKa[0].PKa, U: r.PKa[0].Expanded, Released: !r.Standing.ReleasedAt.IsZero()}
	for _, rung := range r.Rungs {
		if !rung.LeftOut {
			f.Ladder = append(f.Ladder, rung.PHRead)
		}
	}
	if c := cfg.CompoundByName(r.Set.Compound); c != nil {
		f.Charge, f.Ionic, f.DPKaDT = c.Charge, c.Ionic, c.DPKaDT
	}
	full, err := s.resultRecord(ctx, tx, r.ID)
	if err != nil {
		return f, err
	}
	if len(full.Fit.Full.Gain) >= len(f.Ladder) && len(f.Ladder) > 0 {
		f.Gain = full.Fit.Full.Gain[:len(f.Ladder)]
	}
	use := func(kind drift.Kind, name, role string) {
		if name != "" {
			f.Resources, f.Roles = append(f.Resources, drift.Resource{Kind: kind, Name: name}), append(f.Roles, role)
		}
	}
	use(drift.KindInstrument, r.Set.Instrument, "")
	use(drift.KindElectrode, full.Used.Electrode, "")
	use(drift.KindLaboratory, cfg.Laboratory.Name, "")
	if i := cfg.InstrumentByName(r.Set.Instrument); i != nil {
		use(drift.KindMeter, i.Meter, "")
		room := i.Room
		if room == "" {
			room = "the laboratory"
		}
		use(drift.KindRoom, room, "")
	}
	if full.Used.CalibrationID != 0 {
		cal, err := s.store.CalibrationByID(ctx, tx, full.Used.CalibrationID)
		if err != nil {
			return f, err
		}
		if cal != nil {
			var ph []float64
			for _, p := range cal.Points {
				ph = append(ph, p.PH)
			}
			for i, p := range cal.Points {
				use(drift.KindBuffer, p.Lot, bufferRole(ph, i))
			}
			if el, err := assay.Calibrate(&cal.Calibration); err == nil {
				for _, p := range el.Points {
					f.Buffers = append(f.Buffers, p.PH)
				}
			}
		}
	}
	return f, nil
}

// storedRecord is the part of a calculation record that others read.
type storedRecord struct {
	Used used `json:"used"`
	Fit  struct {
		Full struct {
			Gain []float64 `json:"gain"`
		} `json:"full"`
	} `json:"fit"`
}

func (s *Service) resultRecord(ctx context.Context, tx pgx.Tx, id int64) (storedRecord, error) {
	s.cacheMu.Lock()
	rec, ok := s.records[id]
	s.cacheMu.Unlock()
	if ok {
		return rec, nil
	}
	raw, err := s.store.RecordOf(ctx, tx, id)
	if err != nil {
		return rec, err
	}
	if err := json.Unmarshal(raw, &rec); err != nil {
		return rec, fmt.Errorf("calculation record of result %d: %w", id, err)
	}
	s.cacheMu.Lock()
	defer s.cacheMu.Unlock()
	if s.records == nil || len(s.records) > 20000 {
		s.records = map[int64]storedRecord{}
	}
	s.records[id] = rec
	return rec, nil
}

// caseContent is what a message about a case may say.
func caseContent(cfg *settings.Settings, row *db.Case, c *drift.Case, changes []drift.Transition, harms []harm, now time.Time) alert.Content {
	e := c.Explanation
	m := alert.Content{Kind: alert.DriftCase, Key: row.Key, CaseID: row.ID, At: now, Instruments: c.Instruments,
		Sentence: e.Sentence, Finding: string(e.Finding), Alike: e.Alike, NextCheck: row.NextCheck, ResultsAll: len(harms)}
	for _, t := range changes {
		if t.Text != "" {
			m.Notes = append(m.Notes, t.Text)
		}
	}
	if len(e.Candidates) > 0 {
		w := e.Candidates[0]
		m.Since = fmt.Sprintf("between %s and %s (90 %%), most likely %s", w.Since.Low.Short(), w.Since.High.Short(), w.Since.Best.Short())
	}
	for _, k := range e.Candidates {
		line := alert.CandidateLine{Title: k.Title, Resource: k.Resource.String(), Probability: k.Probability, For: k.For, Against: k.Against}
		var sizes []string
		for _, a := range k.Now {
			sizes = append(sizes, fmt.Sprintf("%s %+.3g ± %.2g %s", a.Name, a.Size, a.SD, a.Unit))
		}
		line.Size = strings.Join(sizes, ", ")
		m.Candidates = append(m.Candidates, line)
	}
	slices.SortStableFunc(harms, func(a, b harm) int {
		switch {
		case a.Bound > b.Bound:
			return -1
		case a.Bound < b.Bound:
			return 1
		}
		return int(a.ID - b.ID)
	})
	for i, h := range harms {
		if i == 12 {
			break
		}
		l := alert.ResultLine{ID: h.ID, Set: h.result.Set.Key, Compound: h.result.Set.Compound, PKa: h.result.PKa[0].PKa, Impact: h.Impact, Bound: h.Bound, Released: !h.result.Standing.ReleasedAt.IsZero()}
		if h.Unaffected {
			l.Proposed = "unaffected"
		}
		m.Results = append(m.Results, l)
	}
	for _, p := range cfg.People {
		if p.After == 0 && slices.Contains(p.Tells, "cases") {
			m.Responsible = p.Name
			break
		}
	}
	return m
}

func joined(s []string) string { return strings.Join(s, "; ") }
