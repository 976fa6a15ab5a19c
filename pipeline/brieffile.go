package pipeline

import (
	"context"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/alert"
	"pkvigil/pipeline/brief"
	"pkvigil/pipeline/naming"
)

// A briefMark says what the last brief of a night was made of.
type briefMark struct {
	Revision int       `json:"revision"`
	State    string    `json:"state"` // what it said of each set, to see whether an addendum is due
	At       time.Time `json:"at"`
}

// tickBrief writes the brief when its time has come, and an addendum when a
// late file has changed what it says. A brief is never edited.
func (s *Service) tickBrief(ctx context.Context, now time.Time) error {
	cfg := set(s)
	if cfg.Laboratory.BriefAt == "" {
		return nil
	}
	zone := cfg.Zone()
	night := naming.NightOf(now.Add(-12*time.Hour), zone, naming.Noon) // the night that ended this morning
	for _, n := range []string{night, naming.NightOf(now, zone, naming.Noon)} {
		due, err := onNight(n, cfg.Laboratory.BriefAt, zone)
		if err != nil {
			return err
		}
		// Addenda are made on the day of the brief; later changes are in the database and in the next brief.
		if now.Before(due) || now.After(due.Add(18*time.Hour)) {
			continue
		}
		return s.briefOf(ctx, n, now)
	}
	return nil
}

// briefOf writes the brief of a night if there is anything new to say.
func (s *Service) briefOf(ctx context.Context, night string, now time.Time) error {
	key := "brief|" + night
	var mark briefMark
	known, err := s.store.Watermark(ctx, nil, key, &mark)
	if err != nil {
		return err
	}
	state, err := s.nightState(ctx, night)
	if err != nil {
		return err
	}
	if known && mark.State == state || !known && state == "" {
		return nil
	}
	d, err := s.BriefData(ctx, night, now)
	if err != nil {
		return err
	}
	d.Revision = mark.Revision + 1
	if known {
		d.Changes = differences(mark.State, state)
	}
	file, err := s.writeBrief(d)
	if err != nil {
		return err
	}
	return s.store.InTx(ctx, func(tx pgx.Tx) error {
		if err := s.store.PutWatermark(ctx, tx, key, briefMark{Revision: d.Revision, State: state, At: now}, now); err != nil {
			return err
		}
		return s.tell(ctx, tx, fmt.Sprintf("brief|%s|%d", night, d.Revision), alert.Content{Kind: "brief", Key: night, Why: briefWhy(d.Revision), At: now,
			Sentence: d.Headline(), Notes: d.Lines(), Links: []string{filepath.Base(file)}}, nil)
	})
}

func briefWhy(rev int) alert.Why {
	if rev > 1 {
		return alert.Why("addendum")
	}
	return alert.Why("morning")
}

// writeBrief writes the HTML file, whole or not at all.
func (s *Service) writeBrief(d *brief.Data) (string, error) {
	page, err := brief.HTML(*d)
	if err != nil {
		return "", fmt.Errorf("drawing the brief of %s: %w", d.Night, err)
	}
	dir := filepath.Join(set(s).Storage.DataDir, "briefs")
	if err := os.MkdirAll(dir, 0o750); err != nil {
		return "", fmt.Errorf("folder for briefs: %w", err)
	}
	name := "brief-" + d.Night
	if d.Revision > 1 {
		name += fmt.Sprintf("-addendum-%d", d.Revision-1)
	}
	file := filepath.Join(dir, name+".html")
	tmp := file + ".new"
	if err := os.WriteFile(tmp, page, 0o640); err != nil {
		return "", fmt.Errorf("writing the brief: %w", err)
	}
	if err := os.Rename(tmp, file); err != nil {
		return "", fmt.Errorf("writing the brief: %w", err)
	}
	return file, nil
}

// nightState is one line per set of a night: what a brief says of it.
func (s *Service) nightState(ctx context.Context, night string) (string, error) {
	lines, err := s.store.NightLines(ctx, night)
	return strings.Join(lines, "\n"), err
}

// differences lists what changed between two states.
func differences(before, after string) []string {
	was := map[string]string{}
	for _, l := range strings.Split(before, "\n") {
		k, v, _ := strings.Cut(l, " ")
		was[k] = v
	}
	var out []string
	for _, l := range strings.Split(after, "\n") {
		k, v, _ := strings.Cut(l, " ")
		switch w, ok := was[k]; {
		case !ok && k != "":
			out = append(out, k+": now "+v)
		case ok && w != v:
			out = append(out, k+": "+w+" became "+v)
		}
	}
	return out
}

// BriefData gathers everything a brief says about a night.
func (s *Service) BriefData(ctx context.Context, night string, now time.Time) (*brief.Data, error) {
	cfg, _, id := s.current()
	d := &brief.Data{Laboratory: cfg.Laboratory.Name, Night: night, Made: now.In(cfg.Zone()), Revision: 1, Program: Program(), Settings: fmt.Sprint(id)}
	for _, f := range []func(context.Context, *brief.Data, time.Time) error{s.briefCounts, s.briefSets, s.briefAbsent, s.briefCases, s.briefCharts, s.briefBrackets, s.briefForecasts, s.briefFiles} {
		if err := f(ctx, d, now); err != nil {
			return nil, err
		}
	}
	return d, nil
}

func (s *Service) briefCounts(ctx context.Context, d *brief.Data, _ time.Time) error {
	rows, err := s.store.NightCounts(ctx, nil, d.Night, d.Night)
	if err != nil {
		return err
	}
	for _, r := range rows {
		d.Counts = append(d.Counts, brief.Count{Instrument: r.Instrument, Planned: r.Planned, Seen: r.Seen, References: r.References, Stands: r.Stands, Noted: r.StandsNoted,
			Held: r.Held, NoNumber: r.NoNumber, Waiting: r.Waiting + r.Gathering, InQuestion: r.InQuestion, Refused: r.Refused, Parked: r.Parked})
	}
	return nil
}

// briefSets fills the three lists and the references.
func (s *Service) briefSets(ctx context.Context, d *brief.Data, _ time.Time) error {
	results, err := s.store.ResultsBetween(ctx, nil, d.Night, d.Night, "")
	if err != nil {
		return err
	}
	done := map[int64]bool{}
	for _, r := range results {
		done[r.SetID] = true
		if r.Set.Kind == db.KindReference {
			d.InControl.References = append(d.InControl.References, reference(r))
			if r.Verdict != db.Held && r.Verdict != db.NoNumber {
				continue
			}
		}
		full, err := s.store.ResultByID(ctx, nil, r.ID)
		if err != nil {
			return err
		}
		one, err := s.briefSet(ctx, full, r.Set)
		if err != nil {
			return err
		}
		switch one.Verdict {
		case db.Stands, db.StandsNoted, "released":
			d.Go = append(d.Go, *one)
		default:
			d.Look = append(d.Look, *one)
		}
	}
	sets, err := s.store.SetsOfNight(ctx, nil, d.Night, "")
	if err != nil {
		return err
	}
	for _, x := range sets {
		if done[x.ID] && x.State == db.SetFitted {
			continue
		}
		w := brief.Waiting{Key: x.Key, Since: x.LastSeen}
		for _, m := range x.Missing {
			w.Missing = append(w.Missing, m.Text)
		}
		d.Waiting = append(d.Waiting, w)
	}
	return nil
}

func reference(r db.Summary) brief.Reference {
	ref := brief.Reference{Key: r.Set.Key, Instrument: r.Set.Instrument, Title: r.Set.Compound, Slot: r.Set.Slot, Verdict: r.Verdict, PKa: math.NaN(), U: math.NaN(), Assigned: math.NaN(), Centre: math.NaN(), Sentence: r.Headline}
	if len(r.PKa) > 0 {
		ref.PKa, ref.U, ref.Assigned = r.PKa[0].PKa, r.PKa[0].Expanded, r.PKa[0].Assigned
	}
	return ref
}

// briefSet states one result for the brief, with its spectra thinned.
func (s *Service) briefSet(ctx context.Context, r *db.Result, x db.Set) (*brief.Set, error) {
	one := &brief.Set{Key: x.Key, Compound: x.Compound, Lot: x.Lot, Instrument: x.Instrument, ResultID: r.ID, Verdict: r.Standing.Verdict, Headline: r.Headline,
		Constant: r.Constant, TemperatureC: r.TemperatureC, Ionic: r.IonicStrength, IsosbesticNM: r.IsosbesticNM}
	if c := set(s).CompoundByName(x.Compound); c != nil {
		one.Title = c.Title
	}
	for _, c := range r.Checks {
		if c.Outcome != db.Stands {
			one.Notes = append(one.Notes, c.Sentence)
			if c.Outcome != db.StandsNoted && c.Action != "" && !slices.Contains(one.Actions, c.Action) {
				one.Actions = append(one.Actions, c.Action)
			}
		}
	}
	if acts := storedActions(r.Record); len(acts) > 0 {
		one.Actions = acts
	}
	if i := set(s).InstrumentByName(x.Instrument); i != nil {
		one.SigmaPH = i.SigmaPH
	}
	if r.Standing.InQuestion {
		why, err := s.questionOf(ctx, r.ID)
		if err != nil {
			return nil, err
		}
		one.InQuestionWhy = why
	}
	for _, p := range r.PKa {
		one.Constants = append(one.Constants, brief.Constant{Step: p.Step, PKa: p.PKa, U: p.Expanded, K: p.K, UOwn: p.UOwn, URun: p.URun, ULab: p.ULab, Thermo: p.Thermo, UThermo: p.UThermo, Library: p.Library, Anchored: p.Anchored})
	}
	worst := 0.0
	for _, g := range r.Rungs {
		b := brief.Rung{Key: g.Key, PH: g.PHRead, Residual: g.Residual, AmountPct: g.AmountFactorPct, Baseline: g.BaselineMAU}
		if g.LeftOut {
			b.LeftOut = g.LeftOutWhy
			one.Accused = g.Key
		} else if a := math.Abs(g.Residual); a > worst && a > 0.02 && one.Accused == "" {
			worst, one.Accused = a, g.Key
		}
		one.Rungs = append(one.Rungs, b)
	}
	for _, c := range r.Components {
		if c.Step == 0 {
			one.Budget = append(one.Budget, brief.Component{Name: c.Name, UPKa: math.Abs(c.C * c.U), Bucket: c.Bucket})
		}
	}
	for _, l := range r.Spectra {
		x, v := thin(l.WavelengthNM, l.Value)
		_, sd := thin(l.WavelengthNM, l.SD)
		switch l.Species {
		case "acid":
			one.WavelengthNM, one.Acid, one.AcidSD = x, v, sd
		case "base":
			one.Base, one.BaseSD = v, sd
		}
	}
	return one, s.briefFamily(ctx, one, x)
}

// questionOf is the newest reason for which a result is in question.
func (s *Service) questionOf(ctx context.Context, id int64) (string, error) {
	rows, err := s.store.StatusRows(ctx, nil, id)
	if err != nil {
		return "", err
	}
	for _, r := range slices.Backward(rows) {
		if r.Status == db.StatusInQuestion {
			return r.Because, nil
		}
	}
	return "", nil
}

// briefFamily adds the measured spectra on the grid of the limit spectra.
func (s *Service) briefFamily(ctx context.Context, one *brief.Set, x db.Set) error {
	data, err := s.store.LoadSet(ctx, x.ID)
	if err != nil {
		return err
	}
	var blank *db.ScanRow
	for _, m := range data.Members {
		if m.Role == naming.RoleBlank && m.Scan != nil {
			blank = m.Scan
		}
	}
	for _, m := range data.Members {
		if m.Role != naming.RoleScan || m.Scan == nil {
			continue
		}
		if len(one.WavelengthNM) == 0 {
			one.WavelengthNM, _ = thin(m.Scan.WavelengthNM, nil)
		}
		row := make([]float64, len(one.WavelengthNM))
		for i, nm := range one.WavelengthNM {
			row[i] = at(m.Scan, nm)
			if blank != nil {
				row[i] -= at(blank, nm)
			}
		}
		one.Family = append(one.Family, row)
		one.FamilyKeys = append(one.FamilyKeys, m.Rung)
		if !slices.ContainsFunc(one.Rungs, func(g brief.Rung) bool { return naming.RungKey(g.Key) == naming.RungKey(m.Rung) }) {
			one.Rungs = append(one.Rungs, brief.Rung{Key: m.Rung, PH: math.NaN(), Residual: math.NaN(), AmountPct: math.NaN(), Baseline: math.NaN()})
		}
	}
	return nil
}

// at is the absorbance nearest a wavelength.
func at(sc *db.ScanRow, nm float64) float64 {
	i, _ := slices.BinarySearch(sc.WavelengthNM, nm)
	if i >= len(sc.WavelengthNM) || i > 0 && nm-sc.WavelengthNM[i-1] < sc.WavelengthNM[i]-nm {
		i--
	}
	if i < 0 {
		return math.NaN()
	}
	return sc.Absorbance[i]
}

// thinTo is the number of points a drawn spectrum keeps.
const thinTo = 96

func thin(x, y []float64) ([]float64, []float64) {
	step := max(1, (len(x)+thinTo-1)/thinTo)
	var a, b []float64
	for i := 0; i < len(x); i += step {
		a = append(a, x[i])
		if i < len(y) {
			b = append(b, y[i])
		}
	}
	return a, b
}
