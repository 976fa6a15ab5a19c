package pipeline

import (
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"pkvigil/db"
	"pkvigil/pipeline/brief"
	"pkvigil/pipeline/drift"
)

func storedActions(raw json.RawMessage) []string {
	var rec struct {
		Actions []string `json:"actions"`
	}
	if json.Unmarshal(raw, &rec) != nil {
		return nil // a record without actions has none to show
	}
	return rec.Actions
}

// briefAbsent lists what was not seen.
func (s *Service) briefAbsent(ctx context.Context, d *brief.Data, now time.Time) error {
	roots, err := s.store.RootStates(ctx, nil)
	if err != nil {
		return err
	}
	for _, r := range roots {
		if !r.Visible {
			d.NotSeen = append(d.NotSeen, brief.Notice{What: fmt.Sprintf("Folder %s is not visible since %s: %s", r.Root, r.Since.In(d.Made.Location()).Format("2 Jan 15:04"), r.Why), Action: "Mount the share again; nothing is lost, the files are taken in when it is back."})
		} else if d.CompleteUpTo.IsZero() || r.CompleteUpTo.Before(d.CompleteUpTo) {
			d.CompleteUpTo = r.CompleteUpTo.In(d.Made.Location())
		}
	}
	said, err := s.store.SaidSince(ctx, nil, "", now.Add(-24*time.Hour))
	if err != nil {
		return err
	}
	for _, m := range said {
		delivered := "stored; no receiver"
		if m.Delivered {
			delivered = "delivered"
		} else if n := len(sinksFor(set(s), "cases", "")); n > 0 {
			delivered = "not delivered yet"
		}
		if m.Kind != "brief" {
			d.Messages = append(d.Messages, brief.Message{At: m.At.In(d.Made.Location()), Subject: m.Subject, Delivered: delivered})
		}
	}
	missing, err := s.store.PlannedNotSeen(ctx, nil, d.Night)
	if err != nil {
		return err
	}
	for _, p := range missing {
		what := fmt.Sprintf("Planned set %s on %s: nothing has arrived", p.Set, p.Instrument)
		if p.Slot != "" {
			what = fmt.Sprintf("Planned reference %s (%s) on %s: nothing has arrived", p.Set, p.Slot, p.Instrument)
		}
		d.NotSeen = append(d.NotSeen, brief.Notice{What: what + ".", Action: "Look at the instrument; if it was not measured, decide on a rerun while the solutions are alive."})
	}
	for _, w := range d.Waiting {
		what := w.Key + " waits"
		if len(w.Missing) > 0 {
			what = w.Key + " lacks " + list(w.Missing)
		}
		d.NotSeen = append(d.NotSeen, brief.Notice{What: what + ".", Action: "It is computed as soon as that arrives."})
	}
	return nil
}

func list(v []string) string {
	switch n := len(v); n {
	case 0:
		return ""
	case 1:
		return v[0]
	default:
		out := v[0]
		for _, x := range v[1 : n-1] {
			out += ", " + x
		}
		return out + " and " + v[n-1]
	}
}

// briefCases lists open cases and those closed in the night.
func (s *Service) briefCases(ctx context.Context, d *brief.Data, now time.Time) error {
	all, err := s.store.Cases(ctx, nil, now)
	if err != nil {
		return err
	}
	for _, c := range all {
		if c.State == db.CaseClosed && now.Sub(c.At) > 24*time.Hour {
			continue
		}
		one, err := s.briefCase(ctx, c, d)
		if err != nil {
			return err
		}
		d.Cases = append(d.Cases, *one)
	}
	judged := false
	for _, r := range d.InControl.References {
		judged = judged || r.Verdict == db.Stands || r.Verdict == db.StandsNoted
	}
	open := slices.ContainsFunc(d.Cases, func(c brief.Case) bool { return c.State != db.CaseClosed })
	switch {
	case open:
		d.InControl.Known = true
		d.InControl.Sentence = fmt.Sprintf("No. %s", d.Cases[0].Sentence)
	case !judged && len(d.InControl.References) == 0:
		d.InControl.Sentence = "Not known: no reference was measured in this night."
	default:
		d.InControl.Known, d.InControl.Yes = true, true
		d.InControl.Sentence = "Yes, as far as the references of this night show."
	}
	return nil
}

func (s *Service) briefCase(ctx context.Context, c db.Case, d *brief.Data) (*brief.Case, error) {
	one := &brief.Case{ID: c.ID, Sentence: c.Sentence, State: c.State, Resource: c.Resource, NextCheck: c.NextCheck, Opened: c.OpenedAt.In(d.Made.Location()),
		Answer: fmt.Sprintf("pkvigil sign acknowledge %d --as NAME --because \"...\"", c.ID)}
	dc, err := caseOf(c)
	if err != nil {
		return nil, err
	}
	e := dc.Explanation
	one.Finding, one.Alike = string(e.Finding), e.Alike
	if c.State == db.CaseAcknowledged {
		one.Acknowledged = c.Actor + ": " + c.Because
	}
	if len(e.Candidates) > 0 {
		w := e.Candidates[0].Since
		one.Since = fmt.Sprintf("between %s and %s (90 %%)", w.Low.Short(), w.High.Short())
	}
	for i, k := range e.Candidates {
		if i == 6 {
			break
		}
		b := brief.Candidate{Title: k.Title, Resource: k.Resource.String(), Probability: k.Probability, For: joined(k.For), Against: joined(k.Against)}
		for _, a := range k.Now {
			b.Size += fmt.Sprintf("%s %+.3g ± %.2g %s ", a.Name, a.Size, a.SD, a.Unit)
		}
		one.Candidates = append(one.Candidates, b)
	}
	rows, err := s.store.Reach(ctx, nil, c.ID)
	if err != nil {
		return nil, err
	}
	for _, r := range rows {
		res, err := s.store.ResultByID(ctx, nil, r.ResultID)
		if err != nil {
			return nil, err
		}
		x, err := s.store.SetByID(ctx, nil, res.SetID)
		if err != nil {
			return nil, err
		}
		t := brief.Touched{Set: x.Key, ResultID: r.ResultID, Verdict: res.Standing.Verdict, Released: !res.Standing.ReleasedAt.IsZero(), PKa: math.NaN(), Impact: r.Impact, Bound: r.ImpactUpper, Resolution: r.Resolution}
		if len(res.PKa) > 0 {
			t.PKa = res.PKa[0].PKa
		}
		one.Results = append(one.Results, t)
	}
	return one, nil
}

// chartsDrawn bounds the charts of one brief.
const chartsDrawn = 14

// briefCharts draws the pKa of every reference measured in the night, and
// every chart with a signal in it.
func (s *Service) briefCharts(ctx context.Context, d *brief.Data, now time.Time) error {
	points, err := s.store.JudgedHistory(ctx, nil, db.PointFilter{}, now)
	if err != nil {
		return err
	}
	groups := map[string][]db.JudgedPoint{}
	var keys []string
	for _, p := range points {
		if p.Night > d.Night {
			continue
		}
		k := trackKey(p.Series)
		if groups[k] == nil {
			keys = append(keys, k)
		}
		groups[k] = append(groups[k], p)
	}
	type ranked struct {
		c      brief.Chart
		weight int
	}
	var all []ranked
	for _, k := range keys {
		ps := groups[k]
		if ps[len(ps)-1].Night != d.Night {
			continue
		}
		weight := 0
		if ps[0].Characteristic == string(drift.PKa) {
			weight = 1
		}
		if f := flags(ps[len(ps)-1]); len(f) > 0 {
			weight += 2
			d.Signals = append(d.Signals, fmt.Sprintf("%s %s: %s.", scopeName(ps[0].Series), drift.Characteristic(ps[0].Characteristic).Words(), list(f)))
		}
		if weight > 0 {
			all = append(all, ranked{chartOf(ps), weight})
		}
	}
	slices.SortStableFunc(all, func(a, b ranked) int { return b.weight - a.weight })
	for i, r := range all {
		if i < chartsDrawn {
			d.Charts = append(d.Charts, r.c)
		}
	}
	return s.caseCharts(ctx, d, groups)
}

// chartsPerCase bounds the charts drawn for one case.
const chartsPerCase = 3

// caseCharts draws for each case the characteristics that speak most, with the
// nights between which it began.
func (s *Service) caseCharts(ctx context.Context, d *brief.Data, groups map[string][]db.JudgedPoint) error {
	for i := range d.Cases {
		row, err := s.store.CaseByID(ctx, nil, d.Cases[i].ID)
		if err != nil {
			return err
		}
		c, err := caseOf(*row)
		if err != nil {
			return err
		}
		lead, ok := c.Lead()
		if !ok {
			continue
		}
		touched := slices.Clone(c.Explanation.Touched)
		slices.SortStableFunc(touched, func(a, b drift.Touched) int {
			return cmp.Compare(weightOf(b), weightOf(a))
		})
		for _, t := range touched {
			ps := groups[seriesOfCell(t.Cell, t.Characteristic)]
			if len(ps) == 0 || len(d.Cases[i].Charts) == chartsPerCase {
				continue
			}
			ch := chartOf(ps)
			ch.OnsetLow, ch.OnsetHigh = lead.Since.Low.String(), lead.Since.High.String()
			d.Cases[i].Charts = append(d.Cases[i].Charts, ch)
		}
	}
	return nil
}

// weightOf is how loudly a characteristic speaks, in standard deviations.
func weightOf(t drift.Touched) float64 {
	if !(t.SD > 0) {
		return 0
	}
	return math.Abs(t.Observed) / t.SD
}

// seriesOfCell is the key of the chart behind a cell's characteristic.
func seriesOfCell(cell string, c drift.Characteristic) string {
	if name, ok := strings.CutPrefix(cell, "electrode/"); ok {
		return trackKey(db.Series{ScopeKind: db.ScopeElectrode, Scope: name, Characteristic: string(c)})
	}
	parts := strings.SplitN(cell, "/", 3)
	if len(parts) != 3 {
		return ""
	}
	return trackKey(db.Series{ScopeKind: db.ScopeInstrument, Scope: parts[0], Reference: parts[1], RefLot: parts[2], Characteristic: string(c)})
}

func flags(p db.JudgedPoint) []string {
	if p.Judgement == nil {
		return nil
	}
	return p.Judgement.Flags
}

func scopeName(x db.Series) string {
	if x.Reference == "" {
		return x.Scope
	}
	return x.Reference + " on " + x.Scope
}

// chartOf draws a series: nightly means of its judged points.
func chartOf(ps []db.JudgedPoint) brief.Chart {
	c := brief.Chart{Title: scopeName(ps[0].Series) + ": " + drift.Characteristic(ps[0].Characteristic).Words(), Unit: ps[0].Unit, Centre: math.NaN(), Low: math.NaN(), High: math.NaN(), Assigned: math.NaN()}
	norm := drift.Characteristic(ps[0].Characteristic).NormLike()
	i := 0
	for i < len(ps) {
		j, n, sum, flag, ewma := i, 0, 0.0, "", math.NaN()
		for ; j < len(ps) && ps[j].Night == ps[i].Night; j++ {
			if ps[j].Judged {
				n, sum = n+1, sum+ps[j].Value
			}
			if g := ps[j].Judgement; g != nil {
				ewma, c.Centre, c.Low, c.High = g.EWMA, g.Centre, g.LimitLow, g.LimitHigh
				flag = list(g.Flags)
			}
		}
		v := math.NaN()
		if n > 0 {
			v = sum / float64(n)
		}
		c.Nights, c.Values, c.EWMA, c.Flags = append(c.Nights, ps[i].Night), append(c.Values, v), append(c.EWMA, ewma), append(c.Flags, flag)
		i = j
	}
	if norm {
		c.Title += " (square)"
	}
	return c
}

// briefFiles lists files of the night that were not simply taken.
func (s *Service) briefFiles(ctx context.Context, d *brief.Data, now time.Time) error {
	from := now.Add(-24 * time.Hour)
	for _, state := range []string{db.FileRefused, db.FileParked, db.FileTwin} {
		files, err := s.store.FilesIn(ctx, nil, state, from, now)
		if err != nil {
			return err
		}
		for _, f := range files {
			b := brief.File{Path: f.Root + "/" + f.Path, State: f.State}
			if f.Reason != nil {
				b.Sentence, b.Remedy = f.Reason.Sentence, f.Reason.Remedy
			}
			d.Files = append(d.Files, b)
		}
	}
	return nil
}
