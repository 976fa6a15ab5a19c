package pipeline

import (
	"context"
	"fmt"
	"maps"
	"math"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"
	"gonum.org/v1/gonum/stat"

	"pkvigil/db"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/chart"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
)

// spoiled are checks that say a reference set was spoiled by itself (a
// bubble, a wrong label): it then says nothing about the system.
var spoiled = map[string]bool{
	"fit": true, "label.exchange": true, "ladder.shift": true, "scan.clone": true, "scan.doubled": true, "blank": true,
	"rungs.usable": true, "forms.reached": true, "clear.window": true, "colour.change": true, "rung.out": true, "ladder.nominal": true,
}

// putPoints stores the characteristics of a reference set as chart points.
func (s *Service) putPoints(ctx context.Context, tx pgx.Tx, data *db.SetData, r *db.Result, out *assay.Outcome, at time.Time) error {
	judged := r.Verdict != db.NoNumber
	for _, c := range r.Checks {
		if c.Outcome == db.Held && spoiled[c.Key] {
			judged = false
		}
	}
	when := r.MeasuredFrom
	if when.IsZero() {
		when = data.Set.LastSeen
	}
	var points []db.Point
	for _, name := range slices.Sorted(maps.Keys(out.Figures)) {
		f := out.Figures[name]
		points = append(points, db.Point{
			Series: db.Series{ScopeKind: db.ScopeInstrument, Scope: data.Set.Instrument, Reference: data.Set.Compound, RefLot: data.Set.Lot, Characteristic: name},
			Unit:   f.Unit, At: when, Night: data.Set.Night, Slot: data.Set.Slot, SetID: &data.Set.ID, ResultID: &r.ID, Value: f.Value, SD: f.SD, Judged: judged,
		})
	}
	return s.store.PutPoints(ctx, tx, points)
}

// calibrated computes the figures of the calibrations in a taken file and
// charts them for the electrode.
func (s *Service) calibrated(ctx context.Context, tx pgx.Tx, it *item, now time.Time) error {
	if it.match.Role != naming.RoleCalibration || it.content == nil {
		return nil
	}
	for i := range it.content.Calibrations {
		c := &it.content.Calibrations[i]
		id := it.taken.Stored.Calibrations[i]
		fig := db.CalibrationFigures{SlopeAcidPct: math.NaN(), SlopeBasePct: math.NaN(), Potential7MV: math.NaN(), ThirdBufferResidual: math.NaN(), StableS: math.NaN()}
		el, err := assay.Calibrate(c)
		if err != nil {
			fig.Text = sentence(err.Error())
			if err := s.store.PutCalibrationFigures(ctx, tx, id, fig, now); err != nil {
				return err
			}
			continue
		}
		mid := 0
		for j, p := range el.Points {
			if math.Abs(p.PH-7) < math.Abs(el.Points[mid].PH-7) {
				mid = j
			}
		}
		fig.Potential7MV = el.PotentialAt7
		if mid > 0 {
			fig.SlopeAcidPct = el.Segments[mid-1].Percent
		}
		if mid < len(el.Segments) {
			fig.SlopeBasePct = el.Segments[mid].Percent
		}
		fig.ThirdBufferResidual = el.Residual[mid]
		if err := s.foresee(ctx, tx, c, &fig); err != nil {
			return err
		}
		if err := s.store.PutCalibrationFigures(ctx, tx, id, fig, now); err != nil {
			return err
		}
		if err := s.store.PutPoints(ctx, tx, electrodePoints(c.Electrode, id, c.Measured, s.laboratory(), fig, el.Points[mid].MilliVolt)); err != nil {
			return err
		}
	}
	return nil
}

func electrodePoints(electrode string, id int64, at time.Time, home *time.Location, fig db.CalibrationFigures, midMV float64) []db.Point {
	if electrode == "" || at.IsZero() {
		return nil
	}
	var out []db.Point
	for _, p := range []struct {
		c    drift.Characteristic
		v    float64
		unit string
	}{
		{drift.SlopeAcid, fig.SlopeAcidPct, "%"}, {drift.SlopeBase, fig.SlopeBasePct, "%"},
		{drift.PotentialMid, midMV, "mV"}, {drift.ThirdBuffer, fig.ThirdBufferResidual, "pH"},
	} {
		if !math.IsNaN(p.v) {
			out = append(out, db.Point{Series: db.Series{ScopeKind: db.ScopeElectrode, Scope: electrode, Characteristic: string(p.c)}, Unit: p.unit,
				At: at, Night: naming.NightOf(at, home, naming.Noon), CalibrationID: &id, Value: p.v, SD: math.NaN(), Judged: true})
		}
	}
	return out
}

// budgetSD is the spread the uncertainty budget promises for one night of a
// characteristic: the repeatability of reference sets that the project's
// simulation study gives; a laboratory's own baseline replaces it.
func budgetSD(c drift.Characteristic) float64 {
	return map[drift.Characteristic]float64{
		drift.PKa: 0.0066, drift.Slope: 0.008, drift.Library: 0.0025, drift.LambdaA: 0.09, drift.LambdaB: 0.046, drift.LambdaIso: 0.055,
		drift.RatioA: 0.0043, drift.RatioB: 0.0043, drift.AmountIso: 0.0084, drift.ClearMean: 0.0008, drift.ClearTrend: 0.001, drift.AmountTrend: 0.003,
		drift.SlopeAcid: 0.25, drift.SlopeBase: 0.25, drift.PotentialMid: 0.9, drift.ThirdBuffer: 0.012, drift.Temperature: 0.15,
	}[c]
}

// A track is one chart: its nightly values and its baseline in force.
type track struct {
	series  db.Series
	unit    string
	nights  []string  // ascending
	values  []float64 // mean of the judged points of the night
	points  [][]db.Point
	stored  *db.Baseline // newest stored version, nil
	base    chart.Baseline
	centre  float64 // of the raw values, squares included as they are
	sd      float64
	judged  int     // nights that may be behind the baseline: the first so many of the chart
	learned int     // nights behind centre and sd
	own     float64 // median of the points' own standard deviations; 0 unknown
}

func trackKey(s db.Series) string {
	return s.ScopeKind + "|" + s.Scope + "|" + s.Reference + "|" + s.RefLot + "|" + s.Characteristic
}

// tracks reads all charts up to a moment.
func (s *Service) tracks(ctx context.Context, q db.Querier, until time.Time) ([]*track, error) {
	points, err := s.store.History(ctx, q, db.PointFilter{}, until)
	if err != nil {
		return nil, err
	}
	baselines, err := s.store.Baselines(ctx, q, db.PointFilter{}, until)
	if err != nil {
		return nil, err
	}
	stored := map[string]*db.Baseline{}
	for i := range baselines {
		stored[trackKey(baselines[i].Series)] = &baselines[i]
	}
	byKey := map[string]*track{}
	for _, p := range points {
		k := trackKey(p.Series)
		t := byKey[k]
		if t == nil {
			t = &track{series: p.Series, unit: p.Unit, stored: stored[k]}
			byKey[k] = t
		}
		i := len(t.nights) - 1
		if i < 0 || t.nights[i] != p.Night {
			j, found := slices.BinarySearch(t.nights, p.Night)
			if !found {
				t.nights = slices.Insert(t.nights, j, p.Night)
				t.points = slices.Insert(t.points, j, nil)
			}
			i = j
		}
		t.points[i] = append(t.points[i], p)
	}
	tonight := ""
	for _, t := range byKey {
		tonight = max(tonight, t.nights[len(t.nights)-1])
	}
	set, _, _ := s.current()
	var out []*track
	for _, k := range slices.Sorted(maps.Keys(byKey)) {
		t := byKey[k]
		t.settle()
		t.learn(set.Charts, tonight)
		out = append(out, t)
	}
	return out, nil
}

// settle averages each night's judged points; a night without any is a gap.
func (t *track) settle() {
	t.values = make([]float64, len(t.nights))
	var own []float64
	for _, ps := range t.points {
		for _, p := range ps {
			if p.Judged && p.SD > 0 {
				own = append(own, p.SD)
			}
		}
	}
	if len(own) > 0 {
		t.own = chart.Median(own)
	}
	for i, ps := range t.points {
		n, sum := 0, 0.0
		for _, p := range ps {
			if p.Judged {
				n, sum = n+1, sum+p.Value
			}
		}
		t.values[i] = math.NaN()
		if n > 0 {
			t.values[i] = sum / float64(n)
		}
	}
}

func (t *track) characteristic() drift.Characteristic {
	return drift.Characteristic(t.series.Characteristic)
}

// scale charts norm-like characteristics as squares.
func (t *track) scale() chart.Scale {
	if t.characteristic().NormLike() {
		return chart.Squares
	}
	return chart.Plain
}

// chartValues are the values as package chart takes them: norms for squares.
func (t *track) chartValues() []chart.Value {
	out := make([]chart.Value, len(t.nights))
	for i, v := range t.values {
		if t.scale() == chart.Squares {
			v = math.Sqrt(math.Max(v, 0))
		}
		out[i] = chart.Value{Night: nightNumber(t.nights[i]), X: v}
	}
	return out
}

// learn finds the baseline in force: the nights a frozen version names, or the
// first nights of the chart. Tonight is never part of what judges it.
func (t *track) learn(c settings.Charts, tonight string) {
	lo, hi := 0, len(t.nights)
	for hi > 0 && t.nights[hi-1] >= tonight {
		hi--
	}
	if b := t.stored; b != nil && !b.FrozenAt.IsZero() {
		for lo < hi && t.nights[lo] < b.FromNight {
			lo++
		}
		for hi > lo && t.nights[hi-1] > b.ToNight {
			hi--
		}
	} else if n := max(c.BaselineNights, 3); hi > n {
		hi = n
	}
	if hi < lo {
		lo = hi
	}
	t.judged = hi
	values := t.chartValues()[lo:hi]
	t.base = chart.LearnOn(t.scale(), values, t.budget())
	var raw []float64
	for _, v := range t.values[lo:hi] {
		if !math.IsNaN(v) {
			raw = append(raw, v)
		}
	}
	t.learned = len(raw)
	r := chart.AlgorithmA(raw)
	prior := t.budget()
	if t.scale() == chart.Squares && len(raw) > 1 {
		// Squares are skewed: a robust centre would lie below their mean, and
		// every later night above it. A square of nine degrees of freedom
		// scatters by 0.47 of itself.
		r.Centre, r.SD = stat.MeanStdDev(raw, nil)
		prior = math.Sqrt(2.0/9) * r.Centre
	}
	t.centre = r.Centre
	n := float64(t.learned)
	sd := r.SD
	if math.IsNaN(sd) || n < 2 {
		sd = prior
	}
	t.sd = math.Sqrt((6*prior*prior + math.Max(n-1, 0)*sd*sd) / (6 + math.Max(n-1, 0)))
}

// since is the first night that the baseline in force may judge: a signed one
// was learnt anew because something had changed, and earlier nights belong to
// the baseline before it.
func (t *track) since() string {
	if b := t.stored; b != nil && b.SignedBy != "" {
		return b.FromNight
	}
	return ""
}

// budget is the spread promised for one night: what the habits of careful work
// give, and what the fit says of its own noise for this very reference.
func (t *track) budget() float64 {
	b := budgetSD(t.characteristic())
	if t.scale() == chart.Squares || b == 0 {
		return b
	}
	return math.Hypot(b, t.own)
}

// chartRules are the chart rules that keep the tolerable rate of false alarms
// over all charts together. Designing them costs a sixth of a second, so the
// last design is kept.
func (s *Service) chartRules(c settings.Charts, charts int) (chart.Rules, error) {
	key := fmt.Sprintf("%v %d", c, charts)
	s.cacheMu.Lock()
	defer s.cacheMu.Unlock()
	if s.rulesKey == key {
		return s.chartDesign, nil
	}
	rules, _, err := designed(c, charts)
	if err != nil {
		return rules, err
	}
	s.chartDesign, s.rulesKey = rules, key
	return rules, nil
}

// judgeCharts judges the newest nights of every chart and stores what the
// charts say: one night as a rule, more where earlier results were replaced; baselines are stored when they change their stage.
func (s *Service) judgeCharts(ctx context.Context, tx pgx.Tx, ts []*track, nights int, now time.Time) ([]chartSignal, error) {
	set, _, _ := s.current()
	rules, err := s.chartRules(set.Charts, chartsPerInstrument)
	if err != nil {
		return nil, err
	}
	var signals []chartSignal
	var rows []db.PointJudgement
	for _, t := range ts {
		id, err := s.keepBaseline(ctx, tx, t, set.Charts, now)
		if err != nil {
			return nil, err
		}
		if !t.base.Usable() {
			continue
		}
		r := rules
		if t.characteristic() == drift.PKa {
			r.ImpactLimit = set.Charts.ImpactLimit
		}
		js := chart.Judge(t.base, t.chartValues(), r)
		last := len(js) - 1
		for i := max(0, len(js)-nights); i <= last; i++ {
			if js[i].NoData {
				continue
			}
			for _, p := range t.points[i] {
				if p.Judged {
					rows = append(rows, judgementRow(p.ID, id, js[i], now))
				}
			}
		}
		if last < 0 || js[last].NoData {
			continue
		}
		for _, f := range js[last].Flags {
			signals = append(signals, chartSignal{Series: t.series, Night: t.nights[last], Rule: f.Rule, Sentence: f.Sentence, Matters: js[last].Matters})
		}
	}
	return signals, s.store.PutPointJudgements(ctx, tx, rows)
}

// chartsPerInstrument is how many charts an instrument is counted to have when
// the tolerable rate is shared out: three references of sixteen characteristics.
const chartsPerInstrument = 48

// A chartSignal is a rule of a chart that fired tonight.
type chartSignal struct {
	db.Series
	Night    string
	Rule     string
	Sentence string
	Matters  bool
}

func judgementRow(point int64, baseline *int64, j chart.Judgement, now time.Time) db.PointJudgement {
	row := db.PointJudgement{PointID: point, BaselineID: baseline, At: now, Centre: j.Centre, SD: j.SD, LimitLow: j.LimitLow, LimitHigh: j.LimitHigh,
		EWMA: j.EWMA, EWMALow: j.EWMALow, EWMAHigh: j.EWMAHigh, CUSUMHigh: j.CusumHigh, CUSUMLow: j.CusumLow, CUSUMLimit: math.NaN()}
	for _, f := range j.Flags {
		row.Flags = append(row.Flags, f.Rule)
	}
	return row
}

// keepBaseline stores a new version when the stage changes, and freezes the
// baseline once it has the nights the settings ask for. From then on only a
// signature makes another.
func (s *Service) keepBaseline(ctx context.Context, tx pgx.Tx, t *track, c settings.Charts, now time.Time) (*int64, error) {
	if b := t.stored; b != nil && !b.FrozenAt.IsZero() {
		return &b.ID, nil
	}
	if t.learned < 3 || !t.base.Usable() {
		return nil, nil
	}
	freeze := t.learned >= max(c.BaselineNights, 3)
	if b := t.stored; b != nil && b.Stage == string(t.base.Stage) && !freeze {
		return &b.ID, nil
	}
	n := max(1, min(t.judged, max(c.BaselineNights, 3)))
	row := &db.Baseline{Series: t.series, Stage: string(t.base.Stage), Centre: t.base.Centre, Spread: t.base.SD, N: t.learned,
		FromNight: t.nights[0], ToNight: t.nights[n-1], At: now, Because: "first nights of this chart"}
	if freeze {
		row.FrozenAt, row.Because = now, fmt.Sprintf("frozen after %d nights, as the settings say", t.learned)
	}
	if err := s.store.PutBaseline(ctx, tx, row); err != nil {
		return nil, err
	}
	t.stored = row
	return &row.ID, nil
}

// nightNumber counts days since 1970-01-01.
func nightNumber(night string) int {
	t, err := time.Parse(time.DateOnly, night)
	if err != nil {
		return 0
	}
	return int(t.Unix() / 86400)
}
