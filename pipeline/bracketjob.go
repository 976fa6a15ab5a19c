package pipeline

import (
	"context"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/alert"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/naming"
)

// markBrackets names the watermark of the newest status row that the brackets know.
const markBrackets = "brackets"

// bracketBack and bracketAhead are how many nights around a night its brackets
// may reach: a long holiday without references lies in between at most.
const (
	bracketBack  = 10
	bracketAhead = 4
)

// brackets decides the brackets of every night to whose results something
// happened since the last time. It runs after the charts have been judged.
func (s *Service) brackets(ctx context.Context, now time.Time) error {
	newest, err := s.store.NewestStatus(ctx, nil)
	if err != nil {
		return err
	}
	var done int64
	if _, err := s.store.Watermark(ctx, nil, markBrackets, &done); err != nil {
		return err
	}
	if newest == done {
		return nil
	}
	// A row of a slower transaction may carry a smaller number than the newest
	// row seen: a few of the earlier ones are looked at again.
	nights, err := s.store.NightsTouched(ctx, nil, done-200)
	if err != nil {
		return err
	}
	byInstrument := map[string][]string{}
	var instruments []string
	for _, n := range nights {
		if byInstrument[n.Instrument] == nil {
			instruments = append(instruments, n.Instrument)
		}
		byInstrument[n.Instrument] = append(byInstrument[n.Instrument], n.Night)
	}
	return s.store.InTx(ctx, func(tx pgx.Tx) error {
		for _, inst := range instruments {
			v := byInstrument[inst] // ascending
			for i := 0; i < len(v); {
				// Nights close together share a look.
				j := i
				for j+1 < len(v) && nightsApart(v[j], v[j+1]) <= 3 {
					j++
				}
				if err := s.bracketsOf(ctx, tx, inst, v[i], v[j], now); err != nil {
					return fmt.Errorf("brackets of %s, nights %s to %s: %w", inst, v[i], v[j], err)
				}
				i = j + 1
			}
		}
		return s.store.PutWatermark(ctx, tx, markBrackets, newest, now)
	})
}

// moveNight counts nights on or back from a night.
func moveNight(night string, by int) string {
	t, err := time.Parse(time.DateOnly, night)
	if err != nil {
		return night
	}
	return t.AddDate(0, 0, by).Format(time.DateOnly)
}

// A lookAt is what the brackets of an instrument are decided from.
type lookAt struct {
	stations []*station
	spans    []span
	unrun    map[string]bool // nights in which planned references were not run and none was good
}

// look reads the references and samples of an instrument around nights from..to.
func (s *Service) look(ctx context.Context, q db.Querier, instrument, from, to string, now time.Time) (*lookAt, error) {
	first := moveNight(from, -bracketBack)
	all, err := s.store.MeasuredSets(ctx, q, first, moveNight(to, bracketAhead), instrument)
	if err != nil {
		return nil, err
	}
	var refs, samples []timed
	for _, m := range all {
		if m.Set.Kind == db.KindReference {
			refs = append(refs, timedSet(m))
		} else {
			samples = append(samples, timedSet(m))
		}
	}
	out := &lookAt{stations: stations(refs, samples), unrun: map[string]bool{}}
	limits, err := s.referenceLimits(ctx, q, instrument, first, now)
	if err != nil {
		return nil, err
	}
	impact := set(s).Charts.ImpactLimit
	good := map[string]bool{}
	for _, st := range out.stations {
		st.settle(func(x timed) (shift, string) { return judgeReference(x, limits, impact) })
		if st.state == stationGood {
			good[st.night] = true
		}
	}
	out.spans = spans(instrument, out.stations, samples)
	for _, m := range all {
		if n := m.Set.Night; !good[n] {
			var gone unrunMark
			known, err := s.store.Watermark(ctx, q, unrunKey(instrument, n), &gone)
			if err != nil {
				return nil, err
			}
			out.unrun[n] = known && len(gone.Missing) > 0
			good[n] = true // asked once
		}
	}
	return out, nil
}

// referenceLimits reads the judged pKa charts of an instrument, by set. Only a
// frozen baseline limits: one still being learnt may have learnt from the very
// disturbance.
func (s *Service) referenceLimits(ctx context.Context, q db.Querier, instrument, from string, now time.Time) (map[int64]db.JudgedPoint, error) {
	f := db.PointFilter{ScopeKind: db.ScopeInstrument, Scope: instrument, Characteristic: string(drift.PKa), FromNight: from}
	baselines, err := s.store.Baselines(ctx, q, f, now)
	if err != nil {
		return nil, err
	}
	frozen := map[string]bool{}
	for _, b := range baselines {
		frozen[trackKey(b.Series)] = !b.FrozenAt.IsZero()
	}
	points, err := s.store.JudgedHistory(ctx, q, f, now)
	if err != nil {
		return nil, err
	}
	out := map[int64]db.JudgedPoint{}
	last := map[string]*db.PointJudgement{}
	for _, p := range points {
		k := trackKey(p.Series)
		if p.Judgement != nil {
			last[k] = p.Judgement
		} else if g := last[k]; g != nil {
			// Several nights taken in at once: only the newest is judged; the limits in force serve for all.
			c := *g
			c.Flags, c.PointID = nil, p.ID
			p.Judgement = &c
		}
		if !frozen[k] {
			p.Judgement = nil
		}
		if p.SetID != nil {
			out[*p.SetID] = p
		}
	}
	return out, nil
}

// judgeReference decides what one reference set says. It fails when its pKa is
// outside the limits of its chart and so far off that results are touched; a
// shift below the impact limit is recorded on the chart and fails nothing.
func judgeReference(x timed, limits map[int64]db.JudgedPoint, impact float64) (shift, string) {
	switch {
	case x.ResultID != 0 && x.Set.State == db.SetFitted:
	case x.Set.State == db.SetWaiting:
		return shift{}, stationSpoiled // what it lacks may never come; if it does, all is decided again
	default:
		return shift{}, stationPending
	}
	bySelf := slices.ContainsFunc(x.HeldBy, func(k string) bool { return spoiled[k] })
	if x.Verdict == db.NoNumber || bySelf || x.Standing.Struck || math.IsNaN(x.PKa) {
		return shift{}, stationSpoiled
	}
	v := shift{Reference: x.Set.Compound, PKa: x.PKa, D: 0, SD: x.U}
	p, ok := limits[x.Set.ID]
	g := p.Judgement
	switch {
	case ok && !p.Judged:
		return shift{}, stationSpoiled
	case ok && g != nil && !math.IsNaN(g.Centre) && g.SD > 0:
		v.PKa, v.D, v.SD = g.Centre, p.Value-g.Centre, g.SD
		outside := p.Value < g.LimitLow || p.Value > g.LimitHigh || len(g.Flags) > 0
		v.Failed = outside && math.Abs(v.D) > impact
		v.Sentence = fmt.Sprintf("%s %+.3f from its usual %.3f", x.Set.Name, v.D, g.Centre)
	case !math.IsNaN(x.Assigned):
		// No settled chart yet: the assigned value and the two uncertainties have to do.
		v.PKa, v.D = x.Assigned, x.PKa-x.Assigned
		v.SD = x.U
		if !math.IsNaN(x.UAssigned) {
			v.SD = math.Hypot(x.U, x.UAssigned)
		}
		v.Failed = math.Abs(v.D) > max(impact, 2*v.SD)
		v.Sentence = fmt.Sprintf("%s %+.3f from its assigned %.3f", x.Set.Name, v.D, x.Assigned)
	}
	if v.Failed {
		return v, stationFailed
	}
	return v, stationGood
}

// bracketsOf decides and stores the brackets of an instrument around nights
// from..to and draws the consequences for results and instrument.
func (s *Service) bracketsOf(ctx context.Context, tx pgx.Tx, instrument, from, to string, now time.Time) error {
	l, err := s.look(ctx, tx, instrument, from, to, now)
	if err != nil {
		return err
	}
	rows, err := s.store.Brackets(ctx, tx, instrument, moveNight(from, -bracketBack-1))
	if err != nil {
		return err
	}
	stored := map[string]db.Bracket{}
	for _, r := range rows {
		stored[r.Key] = r
	}
	low, high := moveNight(from, -1), moveNight(to, 1)
	for i := range l.spans {
		b := &l.spans[i]
		if !slices.ContainsFunc(b.samples, func(x timed) bool { return x.Set.Night >= low && x.Set.Night <= high }) {
			continue
		}
		b.At = now
		was, ok := stored[b.Key]
		delete(stored, b.Key)
		if !ok || !sameBracket(was, b.Bracket) {
			if err := s.store.PutBracket(ctx, tx, &b.Bracket); err != nil {
				return err
			}
			if err := s.store.KeepBracketSets(ctx, tx, b.ID, b.Sets); err != nil {
				return err
			}
		}
		if err := s.doubt(ctx, tx, b, l.unrun, now); err != nil {
			return err
		}
	}
	// A bracket whose sets have all found their place in others holds nothing up.
	for _, b := range stored {
		if len(b.Sets) > 0 && b.Night >= low && b.Night <= high && !slices.ContainsFunc(l.spans, func(x span) bool { return x.Key == b.Key }) {
			if err := s.store.KeepBracketSets(ctx, tx, b.ID, nil); err != nil {
				return err
			}
		}
	}
	return s.shutInstrument(ctx, tx, instrument, l, now)
}

func sameBracket(was, is db.Bracket) bool {
	same := func(a, b *int64) bool { return a == nil && b == nil || a != nil && b != nil && *a == *b }
	if was.State != is.State || was.Run != is.Run || !same(was.OpenedBySet, is.OpenedBySet) || !same(was.ClosedBySet, is.ClosedBySet) {
		return false
	}
	return slices.Equal(was.Sets, is.Sets)
}

// bracketWord begins the reason of every doubt that a bracket raises.
const bracketWord = "bracket "

// proposedWord ends the reason of a doubt that probably does not matter.
const proposedWord = "; proposed as unaffected, for a person to confirm"

// doubt puts the results of a failed bracket in question, and takes the doubt
// back where a following check shows that it was unfounded.
func (s *Service) doubt(ctx context.Context, tx pgx.Tx, b *span, unrun map[string]bool, now time.Time) error {
	for _, x := range b.samples {
		why := ""
		switch {
		case b.State == stationFailed:
			why = b.why()
		case b.State == "open" && unrun[x.Set.Night]:
			why = "no reference of " + b.Instrument + " was good in the night of " + x.Set.Night + ", and planned ones were not run"
		}
		if x.ResultID == 0 || x.Standing.Struck || (why != "") == x.Standing.InQuestion {
			continue
		}
		rows, err := s.store.StatusRows(ctx, tx, x.ResultID)
		if err != nil {
			return err
		}
		mine := bracketWord + b.Key + ":"
		asked := slices.ContainsFunc(rows, func(r db.StatusRow) bool {
			return r.Status == db.StatusInQuestion && r.CaseID == nil && strings.HasPrefix(r.Because, mine)
		})
		row := db.StatusRow{ResultID: x.ResultID, At: now, Actor: "pkvigil"}
		switch {
		case why != "" && !asked:
			row.Status, row.Because = db.StatusInQuestion, mine+" "+why+b.harmTo(x)
		case why == "" && asked && b.State == stationGood && onlyDoubt(rows):
			row.Status, row.Because = db.StatusCleared, mine+" the checks on both sides are good after all"
		default:
			continue
		}
		if err := s.store.PutResultStatus(ctx, tx, row); err != nil {
			return err
		}
	}
	return nil
}

// harmTo words the bound of harm for one result.
func (b *span) harmTo(x timed) string {
	size, bound := b.impact(x.PKa)
	if bound == 0 || math.IsNaN(x.Expanded) {
		return ""
	}
	text := fmt.Sprintf("; this pKa may be off by %.3f, at most %.3f (U %.3f)", size, bound, x.Expanded)
	if bound < x.Expanded/3 {
		text += proposedWord
	}
	return text
}

// onlyDoubt says whether no case keeps a doubt of its own about a result: a
// doubt without a case can only be taken back together with all.
func onlyDoubt(rows []db.StatusRow) bool {
	open := map[int64]bool{}
	for _, r := range rows {
		switch {
		case r.Status == db.StatusCleared && r.CaseID == nil:
			clear(open)
		case r.CaseID == nil:
		case r.Status == db.StatusInQuestion:
			open[*r.CaseID] = true
		case r.Status == db.StatusCleared:
			delete(open, *r.CaseID)
		}
	}
	return len(open) == 0
}

// shutInstrument closes an instrument when the stop rule says so, and tells once.
func (s *Service) shutInstrument(ctx context.Context, tx pgx.Tx, instrument string, l *lookAt, now time.Time) error {
	states, err := s.store.InstrumentStates(ctx, tx)
	if err != nil {
		return err
	}
	st := states[instrument]
	if st.State == "closed" {
		return nil
	}
	why := shut(l.stations, l.spans, st.At)
	if why == nil {
		return nil
	}
	row := db.InstrumentState{Instrument: instrument, State: "closed", At: now, Actor: "pkvigil", Because: why.reason}
	cases, err := s.store.OpenCases(ctx, tx)
	if err != nil {
		return err
	}
	for _, c := range cases {
		if c.Instrument == instrument || c.Instrument == "" {
			row.CaseID = &c.ID
		}
	}
	if err := s.store.PutInstrumentState(ctx, tx, row); err != nil {
		return err
	}
	doubted := 0
	for i := range l.spans {
		if l.spans[i].left == why.station || l.spans[i].right == why.station {
			doubted += len(l.spans[i].samples)
		}
	}
	return s.tell(ctx, tx, fmt.Sprintf("%s|%s|%s", alert.InstrumentShut, instrument, why.station.sets[0].Set.Key), alert.Content{
		Kind: alert.InstrumentShut, Key: instrument, Why: alert.WhyOpened, At: now, Instruments: []string{instrument}, ResultsAll: doubted,
		Sentence: fmt.Sprintf("%s is closed: %s", instrument, why.reason),
		Notes: []string{"Sets go on being computed and stored, but nothing measured from now on stands until a person opens the instrument again.",
			fmt.Sprintf("After a good pair of references: pkvigil sign reopen %s --as NAME --because \"...\"", instrument)},
	}, row.CaseID)
}

// unrunMark says which planned references of a night were not run.
type unrunMark struct {
	Missing []string `json:"missing"`
}

func unrunKey(instrument, night string) string { return "unrun|" + instrument + "|" + night }

// tickUnrun tells, once a night has ended, of planned references that did not
// arrive: one message per instrument and night. Where the folder was blind or
// nothing came at all, that is told instead and this is moot.
func (s *Service) tickUnrun(ctx context.Context, now time.Time) error {
	cfg := set(s)
	if cfg.Laboratory.NightEnds == "" {
		return nil
	}
	zone := cfg.Zone()
	night := naming.NightOf(now, zone, naming.Noon)
	end, err := onNight(night, cfg.Laboratory.NightEnds, zone)
	if err != nil {
		return err
	}
	if now.Before(end) || now.After(end.Add(6*time.Hour)) {
		return nil
	}
	missing, err := s.store.PlannedNotSeen(ctx, nil, night)
	if err != nil {
		return err
	}
	byInstrument := map[string][]string{}
	var order []string
	for _, p := range missing {
		c, _, err := cfg.CompoundOf(p.Set)
		known := err == nil && c != nil
		if !known {
			c = cfg.CompoundByName(p.Compound)
		}
		if p.Slot == "" && (c == nil || !c.Reference) {
			continue
		}
		if byInstrument[p.Instrument] == nil {
			order = append(order, p.Instrument)
		}
		name := p.Set
		if p.Slot != "" && !strings.Contains(name, p.Slot) {
			name += " (" + p.Slot + ")"
		}
		byInstrument[p.Instrument] = append(byInstrument[p.Instrument], name)
	}
	for _, inst := range order {
		if err := s.tellUnrun(ctx, inst, night, byInstrument[inst], now); err != nil {
			return err
		}
	}
	return nil
}

// tellUnrun records and tells that references of an instrument were not run.
func (s *Service) tellUnrun(ctx context.Context, instrument, night string, missing []string, now time.Time) error {
	var known unrunMark
	if ok, err := s.store.Watermark(ctx, nil, unrunKey(instrument, night), &known); err != nil || ok {
		return err
	}
	moot, err := s.mootAbsence(ctx, instrument, night, now)
	if err != nil {
		return err
	}
	return s.store.InTx(ctx, func(tx pgx.Tx) error {
		if err := s.store.PutWatermark(ctx, tx, unrunKey(instrument, night), unrunMark{missing}, now); err != nil {
			return err
		}
		if !moot {
			verb := "was"
			if len(missing) > 1 {
				verb = "were"
			}
			err := s.tell(ctx, tx, fmt.Sprintf("%s|%s %s", alert.ReferenceUnrun, instrument, night), alert.Content{
				Kind: alert.ReferenceUnrun, Key: instrument + " " + night, Why: alert.WhyOpened, At: now, Instruments: []string{instrument},
				Sentence: fmt.Sprintf("planned reference %s of %s %s not run in the night of %s", list(missing), instrument, verb, night),
				Notes:    []string{"Results that lie between the last good reference and the next one are released only after that next one. If no reference of this instrument was good in the night, its results are in question until then."},
			}, nil)
			if err != nil {
				return err
			}
		}
		return s.bracketsOf(ctx, tx, instrument, night, night, now)
	})
}

// mootAbsence says whether a missing reference is explained by a folder that
// cannot be seen or by a night in which nothing came at all.
func (s *Service) mootAbsence(ctx context.Context, instrument, night string, now time.Time) (bool, error) {
	roots, err := s.store.RootStates(ctx, nil)
	if err != nil {
		return false, err
	}
	for _, r := range roots {
		if r.Instrument == instrument && !r.Visible {
			return true, nil
		}
	}
	said, err := s.store.SaidSince(ctx, nil, alert.SilentNight, now.Add(-24*time.Hour))
	if err != nil {
		return false, err
	}
	sets, err := s.store.SetsOfNight(ctx, nil, night, instrument)
	if err != nil {
		return false, err
	}
	return len(said) > 0 && len(sets) == 0, nil
}
