package pipeline

import (
	"bytes"
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"maps"
	"math"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/acidbase"
	"pkvigil/pipeline/alert"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
)

// lookBack is how many nights of history an evaluation looks at: long enough
// for a slow drift, short enough that a settled past does not cost.
const lookBack = 35

// markEvaluated names the watermark of the last evaluation.
const markEvaluated = "evaluated"

// An evaluated mark says what the last evaluation saw.
type evaluated struct {
	Points   int    `json:"points"`
	Replaced int    `json:"replaced"`
	Night    string `json:"night"`
}

// evaluate asks, when reference results or calibrations are new, whether the
// measuring system is in control, and moves the cases on. It waits until no
// set is being computed, so that it sees the references of the moment
// together. Everything it decides is stored in one transaction.
func (s *Service) evaluate(ctx context.Context, now time.Time) error {
	points, replaced, err := s.store.PointsStored(ctx, nil)
	if err != nil {
		return err
	}
	var last evaluated
	if _, err := s.store.Watermark(ctx, nil, markEvaluated, &last); err != nil {
		return err
	}
	if points == 0 || points == last.Points && replaced == last.Replaced {
		return nil
	}
	ts, err := s.tracks(ctx, nil, now)
	if err != nil {
		return err
	}
	night := ""
	for _, t := range ts {
		night = max(night, t.nights[len(t.nights)-1])
	}
	if night == "" {
		return nil // points of the future: a clock is wrong
	}
	scene, err := s.scene(ctx, ts, night, now)
	if err != nil {
		return err
	}
	return s.store.InTx(ctx, func(tx pgx.Tx) error {
		nights := 1
		if replaced != last.Replaced {
			nights = lookBack
		}
		signals, err := s.judgeCharts(ctx, tx, ts, nights, now)
		if err != nil {
			return err
		}
		if err := s.judgeSystem(ctx, tx, scene, signals, now); err != nil {
			return err
		}
		return s.store.PutWatermark(ctx, tx, markEvaluated, evaluated{Points: points, Replaced: replaced, Night: night}, now)
	})
}

// A scene is what one evaluation of the measuring system looks at.
type scene struct {
	model   *drift.Model
	history drift.History
	night   string
	cells   []drift.Cell
}

// scene builds cells, observations, uses and events from the charts. It is nil
// where no cell has a baseline yet.
func (s *Service) scene(ctx context.Context, ts []*track, night string, now time.Time) (*scene, error) {
	set, _, _ := s.current()
	sc := &scene{night: night}
	groups := map[string][]*track{}
	for _, t := range ts {
		k := t.series.ScopeKind + "|" + t.series.Scope + "|" + t.series.Reference + "|" + t.series.RefLot
		groups[k] = append(groups[k], t)
	}
	last := drift.Night(nightNumber(night))
	sc.history = drift.History{First: last - lookBack, Last: last}
	for _, k := range slices.Sorted(maps.Keys(groups)) {
		cell, obs, err := s.cell(ctx, set, groups[k], sc.history.First)
		if err != nil {
			return nil, err
		}
		if cell == nil {
			continue
		}
		sc.cells = append(sc.cells, *cell)
		sc.history.Observations = append(sc.history.Observations, obs...)
	}
	if len(sc.cells) == 0 {
		return nil, nil
	}
	if err := s.uses(ctx, set, sc, now); err != nil {
		return nil, err
	}
	if err := s.follow(ctx, sc, now); err != nil {
		return nil, err
	}
	var err error
	sc.model, err = s.model(sc.cells, set.Charts.FalseAlarmNights)
	return sc, err
}

// model gives the fingerprints of all causes for the cells. They are costly
// and change only with a baseline, so the last one is kept.
func (s *Service) model(cells []drift.Cell, nights float64) (*drift.Model, error) {
	key, err := encode(cells)
	if err != nil {
		return nil, err
	}
	s.cacheMu.Lock()
	defer s.cacheMu.Unlock()
	if s.lastModel == nil || !bytes.Equal(key, s.lastCells) {
		var m *drift.Model
		if s.lastModel != nil {
			m, err = s.lastModel.Renew(cells, drift.Weighted)
		} else {
			m, err = drift.NewModel(cells, drift.Rules{FalseAlarmNights: nights, CalibrationPH: calibrationPH}, drift.Weighted)
		}
		if err != nil {
			return nil, err
		}
		s.lastModel, s.lastCells = m, key
	}
	return s.lastModel, nil
}

// calibrationPH is how far readings move from one calibration to the next in
// control: 0.3 mV in each buffer (common practice, no source).
const calibrationPH = 0.005

// prints gives the fingerprints of the habits for a design, once per design.
func (s *Service) prints(d *drift.Design) map[drift.Cause][]map[drift.Characteristic]float64 {
	s.cacheMu.Lock()
	defer s.cacheMu.Unlock()
	if p, ok := s.habitPrints[d]; ok {
		return p
	}
	p := map[drift.Cause][]map[drift.Characteristic]float64{}
	for cause := range habits() {
		if cols, err := drift.Fingerprint(*d, cause, drift.Weighted); err == nil {
			p[cause] = cols
		}
	}
	if s.habitPrints == nil {
		s.habitPrints = map[*drift.Design]map[drift.Cause][]map[drift.Characteristic]float64{}
	}
	s.habitPrints[d] = p
	return p
}

// least is the number of baseline nights a characteristic needs before it may
// speak about causes; with fewer its centre is too uncertain to accuse anything.
const least = 5

// cell makes one cell of the tracks of one scope and reference.
func (s *Service) cell(ctx context.Context, set *settings.Settings, ts []*track, first drift.Night) (*drift.Cell, []drift.Observation, error) {
	one := ts[0].series
	c := &drift.Cell{Kind: drift.ReferenceCell, Instrument: one.Scope, Reference: one.Reference, Key: one.Scope + "/" + one.Reference + "/" + one.RefLot}
	title := one.Reference
	if comp := set.CompoundByName(one.Reference); comp != nil && comp.Title != "" {
		title = comp.Title
	}
	c.Title = title + " on " + one.Scope
	need := least
	if one.ScopeKind == db.ScopeElectrode {
		c.Kind, c.Instrument, c.Key, c.Title = drift.ElectrodeCell, "", "electrode/"+one.Scope, "calibrations of electrode "+one.Scope
		need = 2 // a calibration a week: waiting for five would cost a month
		buffers, err := s.buffersOf(ctx, one.Scope)
		if err != nil {
			return nil, nil, err
		}
		c.Design = &drift.Design{Buffers: buffers}
	}
	var use []*track
	for _, t := range ts {
		known := c.Kind != drift.ReferenceCell || charted(t.characteristic())
		if known && t.learned >= need && t.sd > 0 && !math.IsNaN(t.centre) {
			use = append(use, t)
		}
	}
	if len(use) == 0 {
		return nil, nil, nil
	}
	k := len(use)
	c.N = math.Inf(1)
	for _, t := range use {
		c.Characteristics = append(c.Characteristics, t.characteristic())
		c.Centre = append(c.Centre, t.centre)
		c.N = math.Min(c.N, float64(t.learned))
	}
	c.DOF = c.N + 5
	if c.Kind == drift.ReferenceCell {
		d, err := s.design(ctx, set, one)
		if err != nil {
			return nil, nil, err
		}
		c.Design = d
	}
	c.Cov = s.covariance(c, use)
	return c, observations(c.Key, use, k, first), nil
}

// buffersOf gives the low, mid and high buffer of the newest calibration of an electrode.
func (s *Service) buffersOf(ctx context.Context, electrode string) ([]float64, error) {
	cals, err := s.store.CalibrationsOf(ctx, nil, electrode, time.Time{})
	if err != nil {
		return nil, err
	}
	for _, c := range slices.Backward(cals) {
		var ph []float64
		for _, p := range c.Points {
			ph = append(ph, p.PH)
		}
		if b := threeBuffers(ph); len(b) == 3 {
			return b, nil
		}
	}
	return []float64{4.005, 6.865, 10.012}, nil
}

// threeBuffers picks the low, mid and high buffer of a calibration.
func threeBuffers(ph []float64) []float64 {
	var out []float64
	for _, role := range []string{"low", "mid", "high"} {
		for i := range ph {
			if bufferRole(ph, i) == role {
				out = append(out, ph[i])
			}
		}
	}
	return out
}

// charted says whether a characteristic speaks about causes.
func charted(c drift.Characteristic) bool {
	switch c {
	case drift.BlankVar, drift.Temperature:
		return false
	}
	return true
}

// observations are the nightly values of a cell.
func observations(key string, use []*track, k int, first drift.Night) []drift.Observation {
	byNight := map[string][]float64{}
	for i, t := range use {
		for j, n := range t.nights {
			if drift.Night(nightNumber(n)) < first || math.IsNaN(t.values[j]) || n < t.since() {
				continue
			}
			if byNight[n] == nil {
				byNight[n] = make([]float64, k)
				for l := range k {
					byNight[n][l] = math.NaN()
				}
			}
			byNight[n][i] = t.values[j]
		}
	}
	var out []drift.Observation
	for _, n := range slices.Sorted(maps.Keys(byNight)) {
		out = append(out, drift.Observation{Cell: key, Night: drift.Night(nightNumber(n)), Sets: 1, Values: byNight[n]})
	}
	return out
}

// habits are the ordinary night-to-night movements behind the correlations of
// characteristics, in units of each cause's step: 0.04 nm of the wavelength
// scale, 0.1 K, 1 % of ionic strength, 0.8 % of the stock, 0.005 in pH, 0.1 %
// of the electrode slope. They give the correlation only; the spread is the
// observed one.
func habits() map[drift.Cause]float64 {
	return map[drift.Cause]float64{drift.WavelengthShift: 0.08, drift.RoomTemperature: 0.1, drift.Ionic: 0.1, drift.Stock: 0.8,
		drift.ElectrodeOffset: 0.25, drift.ElectrodeSlope: 0.1, drift.AmountRise: 0.1, drift.Blank: 0.15}
}

// covariance combines the correlation that the design implies with the spread
// that the baseline shows.
func (s *Service) covariance(c *drift.Cell, use []*track) []float64 {
	k := len(use)
	cov := make([]float64, k*k)
	own := make([]float64, k*k)
	for i, t := range use {
		own[i*k+i] = 0.25 * t.sd * t.sd // a quarter of the variance is the set's own noise at least
	}
	if c.Kind == drift.ReferenceCell && c.Design != nil {
		prints, sizes := s.prints(c.Design), habits()
		for _, cause := range slices.Sorted(maps.Keys(prints)) {
			size := sizes[cause]
			for _, f := range prints[cause] {
				for i := range use {
					for j := range use {
						own[i*k+j] += f[use[i].characteristic()] * f[use[j].characteristic()] * size * size
					}
				}
			}
		}
	}
	for i := range use {
		for j := range use {
			r := own[i*k+j] / math.Sqrt(own[i*k+i]*own[j*k+j])
			cov[i*k+j] = r * use[i].sd * use[j].sd
		}
	}
	return cov
}

// design describes a reference for the fingerprints, from its archived limit
// spectra and the settings.
func (s *Service) design(ctx context.Context, set *settings.Settings, one db.Series) (*drift.Design, error) {
	key := "design|" + one.Scope + "|" + one.Reference + "|" + one.RefLot
	s.cacheMu.Lock()
	d := s.designs[key]
	s.cacheMu.Unlock()
	if d != nil {
		return d, nil
	}
	comp := set.CompoundByName(one.Reference)
	id, err := s.store.FirstStandingReference(ctx, nil, one.Scope, one.Reference, one.RefLot, "9999-12-31")
	if err != nil || id == 0 || comp == nil {
		return &drift.Design{}, err
	}
	r, err := s.store.ResultByID(ctx, nil, id)
	if err != nil {
		return nil, err
	}
	a := archiveFrom(r)
	if a == nil || len(r.PKa) == 0 {
		return &drift.Design{}, nil
	}
	d = &drift.Design{PKa: r.PKa[0].PKa, Charge: comp.Charge, WavelengthNM: a.WavelengthNM, Acid: a.Acid, Base: a.Base, Ionic: comp.Ionic,
		DPKaDT: comp.DPKaDT, TemperatureC: comp.Temperature}
	for _, rung := range r.Rungs {
		if !rung.LeftOut {
			d.Ladder = append(d.Ladder, rung.PHRead)
		}
	}
	if i := set.InstrumentByName(one.Scope); i != nil {
		d.SigmaPH, d.UAmount, d.UBaseline, d.SigmaA = i.SigmaPH, i.UAmount, i.UBaseline, i.SigmaA
	}
	if r.CalibrationID != nil {
		cals, err := s.store.CalibrationsOf(ctx, nil, "", time.Time{})
		if err != nil {
			return nil, err
		}
		for _, cal := range cals {
			if cal.ID != *r.CalibrationID {
				continue
			}
			if el, err := assay.Calibrate(&cal.Calibration); err == nil {
				d.Buffers = threeBuffers(phOf(el.Points))
			}
		}
	}
	if len(d.Buffers) != 3 {
		d.Buffers = []float64{4.005, 6.865, 10.012}
	}
	s.cacheMu.Lock()
	defer s.cacheMu.Unlock()
	if s.designs == nil {
		s.designs = map[string]*drift.Design{}
	}
	s.designs[key] = d
	return d, nil
}

// uses fills in which cell depended on which resource on which nights, and
// what was logged.
func (s *Service) uses(ctx context.Context, set *settings.Settings, sc *scene, now time.Time) error {
	home := set.Zone()
	events, err := s.store.EventsBetween(ctx, nil, time.Unix(0, 0).UTC(), now)
	if err != nil {
		return err
	}
	cals, err := s.store.CalibrationsOf(ctx, nil, "", time.Unix(0, 0).UTC())
	if err != nil {
		return err
	}
	night := func(t time.Time) drift.Night { return drift.Night(nightNumber(naming.NightOf(t, home, naming.Noon))) }
	for _, e := range events {
		ev := drift.Event{Night: night(e.At), Kind: drift.EventKind(e.Kind), Resource: e.Resource, Text: e.Text}
		if len(e.Instruments) == 1 {
			ev.Instrument = e.Instruments[0]
		}
		sc.history.Events = append(sc.history.Events, ev)
	}
	for _, c := range cals {
		sc.history.Events = append(sc.history.Events, drift.Event{Night: night(c.Measured), Kind: drift.EventCalibration, Resource: c.Electrode, Text: "calibration of " + c.Electrode})
	}
	slices.SortStableFunc(sc.history.Events, func(a, b drift.Event) int { return cmp.Compare(a.Night, b.Night) })
	for _, c := range sc.cells {
		switch c.Kind {
		case drift.ReferenceCell:
			s.referenceUses(set, sc, c, events, cals, night)
		case drift.ElectrodeCell:
			name := c.Key[len("electrode/"):]
			sc.use(drift.Resource{Kind: drift.KindElectrode, Name: name}, "", c.Key, sc.history.First, sc.history.Last)
			for _, cal := range cals {
				if cal.Electrode == name {
					n := night(cal.Measured)
					sc.bufferUses(cal, c.Key, n, n)
				}
			}
		}
	}
	return nil
}

func (sc *scene) use(r drift.Resource, role, cell string, from, until drift.Night) {
	from, until = max(from, sc.history.First), min(until, sc.history.Last)
	if r.Name != "" && from <= until {
		sc.history.Uses = append(sc.history.Uses, drift.Use{Resource: r, Role: role, Cell: cell, From: from, Until: until})
	}
}

// referenceUses lists what a reference on an instrument depends on.
func (s *Service) referenceUses(set *settings.Settings, sc *scene, c drift.Cell, events []db.EventRow, cals []db.CalibrationRow, night func(time.Time) drift.Night) {
	first, last := sc.history.First, sc.history.Last
	inst := set.InstrumentByName(c.Instrument)
	if inst == nil {
		inst = &settings.Instrument{Name: c.Instrument}
	}
	sc.use(drift.Resource{Kind: drift.KindInstrument, Name: c.Instrument}, "", c.Key, first, last)
	sc.use(drift.Resource{Kind: drift.KindMeter, Name: inst.Meter}, "", c.Key, first, last)
	room := inst.Room
	if room == "" {
		room = "the laboratory"
	}
	sc.use(drift.Resource{Kind: drift.KindRoom, Name: room}, "", c.Key, first, last)
	sc.use(drift.Resource{Kind: drift.KindLaboratory, Name: set.Laboratory.Name}, "", c.Key, first, last)
	sc.use(drift.Resource{Kind: drift.KindStock, Name: c.Key[len(c.Instrument)+1:]}, "", c.Key, first, last)
	series := "reference ladders"
	if comp := set.CompoundByName(c.Reference); comp != nil && comp.Medium != "" {
		series = comp.Medium
	}
	sc.use(drift.Resource{Kind: drift.KindSeries, Name: series}, "", c.Key, first, last)
	for _, k := range []struct {
		kind drift.Kind
		word string
		name string
	}{{drift.KindLamp, "lamp", inst.Lamp}, {drift.KindCuvette, "cell", inst.Cell}} {
		for _, t := range timeline(events, c.Instrument, k.word, k.name, first, last, night) {
			sc.use(drift.Resource{Kind: k.kind, Name: t.name}, "", c.Key, t.from, t.until)
		}
	}
	for _, t := range timeline(events, c.Instrument, "electrode", inst.Electrode, first, last, night) {
		sc.use(drift.Resource{Kind: drift.KindElectrode, Name: t.name}, "", c.Key, t.from, t.until)
		for i, cal := range cals {
			if cal.Electrode != t.name {
				continue
			}
			until := t.until
			for _, next := range cals[i+1:] {
				if next.Electrode == t.name {
					until = min(until, night(next.Measured)-1)
					break
				}
			}
			sc.bufferUses(cal, c.Key, max(night(cal.Measured), t.from), until)
		}
	}
}

// bufferUses lists the buffers a calibration was made with and their places.
func (sc *scene) bufferUses(cal db.CalibrationRow, cell string, from, until drift.Night) {
	var ph []float64
	for _, p := range cal.Points {
		ph = append(ph, p.PH)
	}
	for i, p := range cal.Points {
		if role := bufferRole(ph, i); role != "" && p.Lot != "" {
			sc.use(drift.Resource{Kind: drift.KindBuffer, Name: p.Lot}, role, cell, from, until)
		}
	}
}

// bufferRole names the place of a buffer: mid is the one nearest 7, low and
// high its neighbours; others have none.
func bufferRole(ph []float64, i int) string {
	order := make([]int, len(ph))
	for j := range order {
		order[j] = j
	}
	slices.SortFunc(order, func(a, b int) int { return cmp.Compare(ph[a], ph[b]) })
	mid := 0
	for j := range order {
		if math.Abs(ph[order[j]]-7) < math.Abs(ph[order[mid]]-7) {
			mid = j
		}
	}
	switch slices.Index(order, i) - mid {
	case -1:
		return "low"
	case 0:
		return "mid"
	case 1:
		return "high"
	}
	return ""
}

func phOf(pts []acidbase.CalPoint) []float64 {
	out := make([]float64, len(pts))
	for i, p := range pts {
		out[i] = p.PH
	}
	return out
}

// A stretch is a resource in use from one night to another.
type stretch struct {
	name        string
	from, until drift.Night
}

// timeline lists the resources of a kind that an instrument used, from the
// settings and the events that put others in use.
func timeline(events []db.EventRow, instrument, kind, initial string, first, last drift.Night, night func(time.Time) drift.Night) []stretch {
	out := []stretch{{initial, first, last}}
	for _, e := range events {
		if e.Kind != kind || e.Resource == "" || !slices.Contains(e.Instruments, instrument) {
			continue
		}
		n := night(e.At)
		out[len(out)-1].until = n - 1
		out = append(out, stretch{e.Resource, n, last})
	}
	return slices.DeleteFunc(out, func(t stretch) bool { return t.name == "" || t.until < first || t.until < t.from })
}

// follow tells the history what the cases so far mean for it: closed ones are
// taken out of the observations, open ones are watched.
func (s *Service) follow(ctx context.Context, sc *scene, now time.Time) error {
	rows, err := s.store.Cases(ctx, nil, now)
	if err != nil {
		return err
	}
	cases := make([]drift.Case, len(rows))
	for i, r := range rows {
		if cases[i], err = caseOf(r); err != nil {
			return err
		}
	}
	sc.history.Follow(cases)
	return nil
}

// caseOf brings a stored case back; what a person decided since counts.
func caseOf(r db.Case) (drift.Case, error) {
	var c drift.Case
	if err := json.Unmarshal(r.Evaluation, &c); err != nil {
		return c, fmt.Errorf("case %s: stored evaluation: %w", r.Key, err)
	}
	c.ID = r.ID
	switch {
	case r.State == db.CaseAcknowledged && c.State == drift.Open:
		c.State, c.AckBy, c.AckWhy = drift.Acknowledged, r.Actor, r.Because
	case r.State == db.CaseClosed && c.State != drift.Closed:
		c.State, c.ClosedWhy = drift.Closed, r.Because
		c.Closed = drift.NightOf(r.At)
	}
	return c, nil
}

// judgeSystem evaluates the night, moves the cases on, and speaks where a
// change of a case is a reason to.
func (s *Service) judgeSystem(ctx context.Context, tx pgx.Tx, sc *scene, signals []chartSignal, now time.Time) error {
	if sc == nil {
		return nil
	}
	set, _, _ := s.current()
	ev, err := sc.model.Evaluate(sc.history)
	if err != nil {
		return fmt.Errorf("evaluating night %s: %w", sc.night, err)
	}
	ev.Explanations = oneUnknown(ev.Explanations)
	rows, err := s.store.OpenCases(ctx, tx)
	if err != nil {
		return err
	}
	open := make([]drift.Case, len(rows))
	for i, r := range rows {
		if open[i], err = caseOf(r); err != nil {
			return err
		}
	}
	next, changes := drift.Update(open, ev, sc.history.Events, nil, drift.CaseRules{ImpactLimit: set.Charts.ImpactLimit})
	byIndex := map[int][]drift.Transition{}
	for _, t := range changes {
		byIndex[t.Index] = append(byIndex[t.Index], t)
	}
	for i := range next {
		var prev *db.Case
		if i < len(rows) {
			prev = &rows[i]
		}
		if err := s.keepCase(ctx, tx, sc, ev, prev, &next[i], byIndex[i], now); err != nil {
			return err
		}
	}
	return s.store.PutWatermark(ctx, tx, "signals", signals, now)
}

// oneUnknown keeps the first of several disturbances that no known cause
// explains: what the second pass finds in its rest is of the same making.
func oneUnknown(all []drift.Explanation) []drift.Explanation {
	seen := false
	return slices.DeleteFunc(slices.Clone(all), func(e drift.Explanation) bool {
		if e.Finding != drift.NoneKnown {
			return false
		}
		again := seen
		seen = true
		return again
	})
}

// keepCase stores a case as it now is, its ranking and reach, and tells.
func (s *Service) keepCase(ctx context.Context, tx pgx.Tx, sc *scene, ev drift.Evaluation, prev *db.Case, c *drift.Case, changes []drift.Transition, now time.Time) error {
	row, err := caseRow(sc.night, prev, c, now)
	if err != nil {
		return err
	}
	if _, err := s.store.PutCase(ctx, tx, row); err != nil {
		return err
	}
	c.ID = row.ID
	if len(changes) > 0 || prev == nil {
		if err := s.store.PutRanking(ctx, tx, row.ID, now, ranking(c)); err != nil {
			return err
		}
	}
	harms, err := s.reach(ctx, tx, sc, c, row, now)
	if err != nil {
		return err
	}
	return s.sayCase(ctx, tx, sc.night, row, c, changes, harms, now)
}

// betweenMails is the least pause between two messages about one case that
// neither open, close nor escalate it.
const betweenMails = 12 * time.Hour

// sayCase speaks of what changed in a case since anything was last said of
// it; what may not be said yet is kept and said later.
func (s *Service) sayCase(ctx context.Context, tx pgx.Tx, night string, row *db.Case, c *drift.Case, changes []drift.Transition, harms []harm, now time.Time) error {
	mark := "unsaid|" + row.Key
	var unsaid []drift.Transition
	if _, err := s.store.Watermark(ctx, tx, mark, &unsaid); err != nil {
		return err
	}
	had := len(unsaid)
	unsaid = append(unsaid, changes...)
	if len(unsaid) == 0 {
		return nil
	}
	state := alert.State{Kind: alert.DriftCase, Key: row.Key, Presence: alert.Present, Acknowledged: c.State == drift.Acknowledged}
	for _, t := range unsaid {
		state.Changes = append(state.Changes, whyOf(t.Change))
	}
	var last alert.Said
	said, err := s.store.LastSaid(ctx, tx, row.ID)
	if err != nil {
		return err
	}
	if said != nil {
		last = alert.Said{Why: alert.Why(said.Reason), At: said.At}
	}
	why, speak := alert.Decide(state, last, nil, now)
	urgent := why == alert.WhyOpened || why == alert.WhyClosed || why == alert.WhyEscalated
	if !speak || !urgent && now.Sub(last.At) < betweenMails {
		if len(unsaid) == had {
			return nil
		}
		return s.store.PutWatermark(ctx, tx, mark, unsaid, now)
	}
	content := caseContent(set(s), row, c, unsaid, harms, now)
	content.Why = why
	if err := s.tell(ctx, tx, fmt.Sprintf("case|%s|%s|%s", row.Key, night, why), content, &row.ID); err != nil {
		return err
	}
	return s.store.PutWatermark(ctx, tx, mark, []drift.Transition{}, now)
}

func set(s *Service) *settings.Settings { v, _, _ := s.current(); return v }

// caseRow states a case as a row.
func caseRow(night string, prev *db.Case, c *drift.Case, now time.Time) (*db.Case, error) {
	raw, err := encode(c)
	if err != nil {
		return nil, err
	}
	row := &db.Case{Key: fmt.Sprintf("%s %s", c.Resource, c.Opened), OpenedAt: now, Resource: c.Resource.String(), At: now, Actor: "pkvigil", State: string(c.State),
		Impact: c.Impact, Sentence: c.Explanation.Sentence, Evaluation: raw, Size: math.NaN(), SizeSD: math.NaN()}
	if len(c.Instruments) == 1 {
		row.Instrument = c.Instruments[0]
	}
	if prev != nil {
		row.ID, row.Key, row.OpenedAt, row.Resource, row.Instrument = prev.ID, prev.Key, prev.OpenedAt, prev.Resource, prev.Instrument
	}
	if c.State == drift.Closed {
		row.Because = c.ClosedWhy
	}
	if len(c.Explanation.Candidates) > 0 {
		w := c.Explanation.Candidates[0]
		row.Cause, row.Class, row.Shape = string(w.Cause), c.Explanation.Class, string(w.Shape)
		row.OnsetLow, row.OnsetBest, row.OnsetHigh = w.Since.Low.String(), w.Since.Best.String(), w.Since.High.String()
		if len(w.Now) > 0 {
			row.Size, row.SizeSD, row.Unit = w.Now[0].Size, w.Now[0].SD, w.Now[0].Unit
		}
	}
	if c.Explanation.Next != nil {
		row.NextCheck = c.Explanation.Next.Text
	}
	return row, nil
}

// ranking states the candidates of a case as rows.
func ranking(c *drift.Case) []db.RankRow {
	var out []db.RankRow
	for i, k := range c.Explanation.Candidates {
		r := db.RankRow{Rank: i + 1, Cause: string(k.Cause), Resource: k.Resource.String(), Probability: k.Probability, LogBayes: k.LnB, Size: math.NaN(), SizeSD: math.NaN(), For: joined(k.For), Against: joined(k.Against)}
		if len(k.Now) > 0 {
			r.Size, r.SizeSD, r.Unit = k.Now[0].Size, k.Now[0].SD, k.Now[0].Unit
		}
		out = append(out, r)
	}
	return out
}

// whyOf maps a change of a case to the reason for speaking.
func whyOf(c drift.Change) alert.Why {
	switch c {
	case drift.ChangeOpened:
		return alert.WhyOpened
	case drift.ChangeCause:
		return alert.WhyCause
	case drift.ChangeImpact:
		return alert.WhyImpact
	case drift.ChangeResource:
		return alert.WhyResource
	case drift.ChangeEscalated:
		return alert.WhyEscalated
	}
	return alert.WhyClosed
}
