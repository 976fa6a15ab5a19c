package pipeline

import (
	"context"
	"fmt"
	"math"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/parse"
	"pkvigil/pipeline/acidbase"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/brief"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
	"pkvigil/pipeline/verdict"
)

// forecastBack is how many calibrations of an electrode a forecast looks at:
// with one a week, two months of its life.
const forecastBack = 8

// An electrodeTrait is a figure of a calibration that has a limit.
type electrodeTrait struct {
	check string // of the limit
	words string
	trait drift.Characteristic // of its usual scatter
	value func(*acidbase.Electrode) float64
}

func electrodeTraits() []electrodeTrait {
	return []electrodeTrait{
		{"calibration.slope", "slope on the acid side", drift.SlopeAcid, func(e *acidbase.Electrode) float64 { return segment(e, -1) }},
		{"calibration.slope", "slope on the base side", drift.SlopeBase, func(e *acidbase.Electrode) float64 { return segment(e, 0) }},
		{"calibration.potential", "potential at pH 7", drift.PotentialMid, func(e *acidbase.Electrode) float64 { return e.PotentialAt7 }},
	}
}

// segment is the slope of the segment below (-1) or above (0) the buffer nearest 7, in percent.
func segment(e *acidbase.Electrode, side int) float64 {
	mid := 0
	for i, p := range e.Points {
		if math.Abs(p.PH-7) < math.Abs(e.Points[mid].PH-7) {
			mid = i
		}
	}
	if i := mid + side; i >= 0 && i < len(e.Segments) {
		return e.Segments[i].Percent
	}
	return math.NaN()
}

// An Exit is the forecast of one figure of an electrode.
type Exit struct {
	Electrode string         `json:"electrode"`
	What      string         `json:"what"`
	Low       float64        `json:"limit_low"`
	High      float64        `json:"limit_high"`
	Forecast  drift.Forecast `json:"forecast"`
}

// Sentence says it in words.
func (x Exit) Sentence() string {
	return fmt.Sprintf("Electrode %s: its %s %s", x.Electrode, x.What, x.Forecast.Text)
}

// exits extrapolates the figures of an electrode, from its calibrations up to
// a moment, to the limits beyond which a result no longer plainly stands.
// Figures without a trend are left out; the first to leave comes first.
func exits(cfg *settings.Settings, electrode string, cals []parse.Calibration, now drift.Night) []Exit {
	home := cfg.Zone()
	slices.SortStableFunc(cals, func(a, b parse.Calibration) int { return a.Measured.Compare(b.Measured) })
	if len(cals) > forecastBack {
		cals = cals[len(cals)-forecastBack:]
	}
	var nights []drift.Night
	var electrodes []*acidbase.Electrode
	for i := range cals {
		if el, err := assay.Calibrate(&cals[i]); err == nil {
			nights = append(nights, drift.Night(nightNumber(naming.NightOf(cals[i].Measured, home, naming.Noon))))
			electrodes = append(electrodes, el)
		}
	}
	var out []Exit
	for _, k := range electrodeTraits() {
		var at []drift.Night
		var v, sd []float64
		for i, el := range electrodes {
			if x := k.value(el); !math.IsNaN(x) {
				at, v, sd = append(at, nights[i]), append(v, x), append(sd, budgetSD(k.trait))
			}
		}
		b := noteBand(cfg, k.check)
		f := drift.ForecastExit(at, v, sd, b.Low, b.High, now)
		if f.Known {
			out = append(out, Exit{electrode, k.words, b.Low, b.High, f})
		}
	}
	slices.SortStableFunc(out, func(a, b Exit) int { return int(a.Forecast.Night - b.Forecast.Night) })
	return out
}

// noteBand is the band of a check within which a result plainly stands, as the
// settings have it for everybody.
func noteBand(cfg *settings.Settings, check string) verdict.Band {
	b := verdict.Defaults[check].Note
	for _, l := range cfg.Checks {
		if l.Check != check || l.Compound != "" {
			continue
		}
		switch len(l.Note) {
		case 1:
			b = verdict.Within(l.Note[0])
		case 2:
			b = verdict.Band{Low: l.Note[0], High: l.Note[1]}
		}
	}
	return b
}

// exitsOf is exits with the calibrations of the database up to a moment.
func (s *Service) exitsOf(ctx context.Context, q db.Querier, electrode string, until time.Time) ([]Exit, error) {
	rows, err := s.store.CalibrationsOf(ctx, q, electrode, time.Time{})
	if err != nil {
		return nil, err
	}
	events, err := s.store.EventsBetween(ctx, q, time.Time{}, until)
	if err != nil {
		return nil, err
	}
	var since time.Time // refilled or cleaned: what was before says nothing of what comes
	for _, e := range events {
		if e.Resource == electrode && (e.Kind == "service" || e.Kind == "electrode") {
			since = e.At
		}
	}
	var cals []parse.Calibration
	for _, r := range rows {
		if !r.Measured.IsZero() && !r.Measured.After(until) && !r.Measured.Before(since) {
			cals = append(cals, r.Calibration)
		}
	}
	cfg := set(s)
	return exits(cfg, electrode, cals, drift.Night(nightNumber(naming.NightOf(until, cfg.Zone(), naming.Noon)))), nil
}

// foresee adds to the figures of a calibration the night in which the
// electrode leaves its limits at the present rate.
func (s *Service) foresee(ctx context.Context, tx pgx.Tx, c *parse.Calibration, fig *db.CalibrationFigures) error {
	if c.Electrode == "" || c.Measured.IsZero() {
		return nil
	}
	all, err := s.exitsOf(ctx, tx, c.Electrode, c.Measured)
	if err != nil || len(all) == 0 {
		return err
	}
	fig.ForecastLimitNight, fig.Text = all[0].Forecast.Night.String(), sentence(all[0].Sentence())
	return nil
}

// briefForecasts says of the electrode in use on each instrument when it
// leaves its limits.
func (s *Service) briefForecasts(ctx context.Context, d *brief.Data, now time.Time) error {
	done := map[string]bool{}
	for _, inst := range set(s).Instruments {
		name := inst.Electrode
		use, err := s.store.ResourceInUse(ctx, nil, inst.Name, "electrode", now)
		if err != nil {
			return err
		}
		if use != nil {
			name = use.Resource
		}
		if name == "" || done[name] {
			continue
		}
		done[name] = true
		all, err := s.exitsOf(ctx, nil, name, now)
		if err != nil {
			return err
		}
		for _, x := range all {
			d.Forecasts = append(d.Forecasts, x.Sentence())
		}
	}
	return nil
}

// usualOf is the characteristic that is shown when none is asked for: the pKa,
// or the slope of an electrode.
func (s *Service) usualOf(ctx context.Context, name string) (string, error) {
	cals, err := s.store.CalibrationsOf(ctx, nil, name, time.Time{})
	if err != nil {
		return "", err
	}
	if name != "" && len(cals) > 0 {
		return string(drift.SlopeAcid), nil
	}
	return string(drift.PKa), nil
}
