package pipeline

import (
	"context"
	"crypto/sha256"
	"encoding/json"
	"errors"
	"fmt"
	"maps"
	"math"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/db/job"
	"pkvigil/parse"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
	"pkvigil/pipeline/spectra"
	"pkvigil/pipeline/verdict"
)

// computeSet loads, computes, judges and stores one set; done is called in
// the transaction that stores the result. A job for an older revision than
// the set now has does nothing: the newer revision has a job of its own.
func (s *Service) computeSet(ctx context.Context, a job.Set, done func(context.Context, pgx.Tx) error) error {
	data, err := s.store.LoadSet(ctx, a.SetID)
	if err != nil {
		return fmt.Errorf("loading set %d: %w", a.SetID, err)
	}
	if data.Set.Revision != a.Revision {
		return s.store.InTx(ctx, func(tx pgx.Tx) error { return done(ctx, tx) })
	}
	in, used, err := s.input(ctx, data)
	if err != nil {
		return fmt.Errorf("set %s: %w", data.Set.Key, err)
	}
	out := assay.Compute(*in)
	if err := s.findAnchor(ctx, in, used, data, out); err != nil {
		return fmt.Errorf("set %s: %w", data.Set.Key, err)
	}
	res, err := s.result(ctx, data, in, used, out, a.At)
	if err != nil {
		return fmt.Errorf("set %s: %w", data.Set.Key, err)
	}
	return s.store.InTx(ctx, func(tx pgx.Tx) error {
		// The set may have changed while it was computed; then the newer job decides its state.
		now, err := s.store.SetByID(ctx, tx, data.Set.ID)
		if err != nil {
			return err
		}
		if _, err := s.store.PutResult(ctx, tx, res); err != nil {
			return err
		}
		if now.Revision == a.Revision {
			if err := s.store.SetSetState(ctx, tx, data.Set.ID, db.SetFitted, nil, time.Time{}, a.At); err != nil {
				return err
			}
			if data.Set.Kind == db.KindReference {
				if err := s.putPoints(ctx, tx, data, res, out, a.At); err != nil {
					return err
				}
			}
		}
		return done(ctx, tx)
	})
}

// used names what a computation read besides the members, so that it can be
// repeated from the database alone.
type used struct {
	Closed        string             `json:"instrument_closed,omitempty"` // why the instrument was closed
	AnchorID      int64              `json:"anchor_result_id,omitempty"`
	Logs          []int64            `json:"log_file_ids,omitempty"` // whose readings were paired by clock
	SettingsID    int64              `json:"settings_id"`
	CalibrationID int64              `json:"calibration_id,omitempty"`
	ArchiveID     int64              `json:"archive_result_id,omitempty"`
	OtherIDs      []int64            `json:"other_result_ids,omitempty"`
	MemberIDs     []int64            `json:"member_ids"`
	Electrode     string             `json:"electrode,omitempty"`
	NewLot        string             `json:"new_lot,omitempty"`
	Corrections   map[string]float64 `json:"buffer_corrections,omitempty"`
}

// input gathers everything a computation reads.
func (s *Service) input(ctx context.Context, data *db.SetData) (*assay.Input, *used, error) {
	set, rules, id := s.current()
	u := &used{SettingsID: id}
	in := baseInput(set, data)
	var first time.Time
	var err error
	for _, m := range data.Members {
		u.MemberIDs = append(u.MemberIDs, m.ID)
		if m.Scan == nil {
			continue
		}
		in.Solutions = append(in.Solutions, solution(m))
		if t := m.Scan.Measured; !t.IsZero() && (first.IsZero() || t.Before(first)) {
			first = t
		}
		if r, ok := rules.Rule(m.Rule); ok && m.Role == naming.RoleScan {
			switch r.Pair {
			case "name", "inside":
				in.PHFirst = "name"
			case "clock":
				in.PairClock = true
			}
		}
	}
	if first.IsZero() {
		first = data.Set.FirstSeen
	}
	if err := s.readByClock(ctx, set, in, u, data); err != nil {
		return nil, nil, err
	}
	if err := s.closedFor(ctx, u, data); err != nil {
		return nil, nil, err
	}
	if err := s.electrodeOf(ctx, in, u, data, first); err != nil {
		return nil, nil, err
	}
	if err := s.archiveOf(ctx, in, u, data); err != nil {
		return nil, nil, err
	}
	if err := s.othersOf(ctx, in, u, data); err != nil {
		return nil, nil, err
	}
	if u.NewLot, err = s.newLot(ctx, set, in, data); err != nil {
		return nil, nil, err
	}
	in.NewLot = u.NewLot
	ex, err := s.signedExchanges(ctx, data.Set.Key)
	if err != nil {
		return nil, nil, err
	}
	in.Exchange = ex
	if in.Calibration != nil {
		var lots []string
		for _, p := range in.Calibration.Points {
			if p.Lot != "" {
				lots = append(lots, p.Lot)
			}
		}
		if in.Corrections, err = s.corrections(ctx, nil, lots); err != nil {
			return nil, nil, err
		}
		u.Corrections = in.Corrections
	}
	return in, u, nil
}

// pairedNights is how long an old and a new lot of a reference run together.
const pairedNights = 5

// newLot says so when a reference is of a lot that an older one of the same
// substance precedes on this instrument, and has not run for five nights yet:
// its amount and ratios may step, its pKa may not.
func (s *Service) newLot(ctx context.Context, cfg *settings.Settings, in *assay.Input, data *db.SetData) (string, error) {
	c := in.Compound
	if c == nil || !c.Reference || c.Title == "" {
		return "", nil
	}
	for _, old := range cfg.Compounds {
		if !old.Reference || old.Title != c.Title || old.Name == c.Name {
			continue
		}
		before, err := s.store.FirstStandingReference(ctx, nil, data.Set.Instrument, old.Name, old.RefLot, data.Set.Night)
		if err != nil || before == 0 {
			return "", err
		}
		nights, err := s.store.ReferenceNights(ctx, data.Set.Instrument, c.Name, data.Set.Night)
		if err != nil {
			return "", err
		}
		if nights < pairedNights {
			return fmt.Sprintf("%s is a new lot of %s beside %s (%d of %d nights together): amount and ratios may differ, the pKa may not. A new lot, or something else?", c.Name, c.Title, old.Name, nights, pairedNights), nil
		}
	}
	return "", nil
}

// baseInput is the part of the input that settings and set give.
func baseInput(set *settings.Settings, data *db.SetData) *assay.Input {
	in := &assay.Input{
		Key: data.Set.Key, Night: data.Set.Night, Lot: data.Set.Lot, Method: set.Method, Budget: set.Budget, Limits: set.Checks,
		Resources: set.Resources, Home: set.Zone(),
	}
	if c, lot, err := set.CompoundOf(data.Set.Name); err == nil && c != nil {
		in.Compound = c
		if in.Lot == "" {
			in.Lot = lot
		}
	}
	if i := set.InstrumentByName(data.Set.Instrument); i != nil {
		in.Instrument = *i
	} else {
		in.Instrument.Name = data.Set.Instrument
	}
	for _, r := range data.Readings {
		in.Readings = append(in.Readings, r.Reading)
	}
	for _, r := range set.Rules {
		if r.Role == naming.RoleCalibration {
			in.NeedsCalibration = true
		}
	}
	return in
}

func solution(m db.LoadedMember) assay.Solution {
	sol := assay.Solution{FileID: m.FileID, ScanID: m.Scan.ID, Role: m.Role, Rung: m.Rung, Rep: m.Rep, PH: math.NaN(), Path: m.Root + "/" + m.Path, Measured: m.Scan.Measured, Scan: m.Scan.Scan}
	if m.PH != nil {
		sol.PH = *m.PH
	}
	return sol
}

// electrodeOf finds the electrode that read the pH and its calibration in force.
func (s *Service) electrodeOf(ctx context.Context, in *assay.Input, u *used, data *db.SetData, at time.Time) error {
	for _, r := range in.Readings {
		if r.Electrode != "" {
			in.Electrode = r.Electrode
			break
		}
	}
	if in.Electrode == "" {
		use, err := s.store.ResourceInUse(ctx, nil, data.Set.Instrument, "electrode", at)
		if err != nil {
			return err
		}
		if use != nil {
			in.Electrode = use.Resource
		} else {
			in.Electrode = in.Instrument.Electrode
		}
	}
	u.Electrode = in.Electrode
	if in.Electrode == "" {
		return nil
	}
	cal, err := s.store.CalibrationBefore(ctx, nil, in.Electrode, at)
	if err != nil || cal == nil {
		return err
	}
	u.CalibrationID = cal.ID
	in.Calibration = &cal.Calibration
	return nil
}

// archiveOf finds the archived limit spectra: those of the first reference
// set of the same lot on the same instrument that was not held.
func (s *Service) archiveOf(ctx context.Context, in *assay.Input, u *used, data *db.SetData) error {
	if in.Compound == nil || !in.Compound.Reference {
		return nil
	}
	id, err := s.store.FirstStandingReference(ctx, nil, data.Set.Instrument, data.Set.Compound, data.Set.Lot, data.Set.Night)
	if err != nil || id == 0 {
		return err
	}
	r, err := s.store.ResultByID(ctx, nil, id)
	if err != nil {
		return err
	}
	u.ArchiveID = id
	in.Archive = archiveFrom(r)
	return nil
}

// othersOf finds what the dyes of this instrument look like, so that a vial
// with the wrong one is noticed.
func (s *Service) othersOf(ctx context.Context, in *assay.Input, u *used, data *db.SetData) error {
	if in.Compound == nil {
		return nil
	}
	ids, err := s.store.FirstStandingOf(ctx, nil, data.Set.Instrument, data.Set.Night)
	if err != nil || ids[in.Compound.Name] == 0 {
		return err // without its own spectrum nothing can be told
	}
	for _, name := range slices.Sorted(maps.Keys(ids)) {
		u.OtherIDs = append(u.OtherIDs, ids[name])
	}
	in.Others, err = s.library(ctx, u.OtherIDs)
	return err
}

// library loads the archived spectra of results; each is read once.
func (s *Service) library(ctx context.Context, ids []int64) ([]spectra.LibraryEntry, error) {
	var out []spectra.LibraryEntry
	for _, id := range ids {
		if e, ok := s.dyes.Load(id); ok {
			out = append(out, e.(spectra.LibraryEntry))
			continue
		}
		r, err := s.store.ResultByID(ctx, nil, id)
		if err != nil {
			return nil, err
		}
		set, err := s.store.SetByID(ctx, nil, r.SetID)
		if err != nil {
			return nil, err
		}
		for _, l := range r.Spectra {
			if l.Species == "base" {
				e := spectra.LibraryEntry{Name: set.Compound, WavelengthNM: l.WavelengthNM, Spectra: l.Value}
				s.dyes.Store(id, e)
				out = append(out, e)
			}
		}
	}
	return out, nil
}

func archiveFrom(r *db.Result) *assay.Archive {
	a := &assay.Archive{Source: fmt.Sprintf("result %d", r.ID), Nominal: spectra.Nominal{AcidNM: zeroNaN(r.LambdaAcidNM), BaseNM: zeroNaN(r.LambdaBaseNM), IsoNM: zeroNaN(r.IsosbesticNM)}}
	for _, l := range r.Spectra {
		switch l.Species {
		case "acid":
			a.WavelengthNM, a.Acid, a.SDAcid = l.WavelengthNM, l.Value, l.SD
		case "base":
			a.Base, a.SDBase = l.Value, l.SD
		}
	}
	if len(a.Acid) == 0 || len(a.Acid) != len(a.Base) {
		return nil
	}
	return a
}

func zeroNaN(v float64) float64 {
	if math.IsNaN(v) {
		return 0
	}
	return v
}

// signedExchanges lists label exchanges that persons have signed for a set.
func (s *Service) signedExchanges(ctx context.Context, key string) ([][2]string, error) {
	deeds, err := s.store.Deeds(ctx, nil, key, 1000)
	if err != nil {
		return nil, err
	}
	var out [][2]string
	for _, d := range slices.Backward(deeds) {
		if d.Action != actExchange {
			continue
		}
		var pair [2]string
		if json.Unmarshal([]byte(d.After), &pair) == nil {
			out = append(out, pair)
		}
	}
	return out, nil
}

// record is the calculation record: enough to repeat the computation from the
// database and to see every step of it.
type record struct {
	Program   string            `json:"program"`
	Used      used              `json:"used"`
	Prepared  []spectra.Record  `json:"prepared"`
	LeftOut   []spectra.LeftOut `json:"left_out,omitempty"`
	Masked    [][2]float64      `json:"masked_nm,omitempty"`
	Effective float64           `json:"effective_wavelengths"`
	Grid      [3]float64        `json:"grid_nm"` // first, last, number
	Fit       any               `json:"fit,omitempty"`
	WithAll   any               `json:"fit_with_all_rungs,omitempty"`
	Suspects  []verdict.Suspect `json:"label_suspects,omitempty"`
	Actions   []string          `json:"actions,omitempty"`
	Thermo    []string          `json:"thermodynamic,omitempty"`
	Exchange  [][2]string       `json:"exchanged_labels,omitempty"`
	Error     string            `json:"error,omitempty"`
}

// result states an outcome as rows.
func (s *Service) result(ctx context.Context, data *db.SetData, in *assay.Input, u *used, out *assay.Outcome, at time.Time) (*db.Result, error) {
	holdTwice(out)
	closeReport(out, data.Set.Instrument, u.Closed)
	rec, err := recordOf(in, u, out)
	if err != nil {
		return nil, err
	}
	r := &db.Result{
		SetID: data.Set.ID, SetRevision: data.Set.Revision, SettingsID: u.SettingsID, Program: Program(), At: at, By: "pkvigil",
		Because: because(data.Set), Verdict: string(out.Report.Verdict), Headline: out.Report.Headline(), Constant: "mixed",
		Steps: 1, TemperatureC: out.TemperatureC, IonicStrength: math.NaN(), Slope: math.NaN(), SlopeSD: math.NaN(), RMS: math.NaN(),
		LambdaAcidNM: math.NaN(), LambdaBaseNM: math.NaN(), IsosbesticNM: math.NaN(), Ratio: math.NaN(),
		Record: rec, Figures: map[string]db.Figure{},
	}
	if in.Compound != nil {
		r.Steps = max(1, in.Compound.Steps)
		if in.Compound.Ionic > 0 {
			r.IonicStrength = in.Compound.Ionic
		}
	}
	if u.CalibrationID != 0 {
		r.CalibrationID = &u.CalibrationID
	}
	for _, m := range data.Members {
		if m.Scan != nil && !m.Scan.Measured.IsZero() {
			t := m.Scan.Measured
			if r.MeasuredFrom.IsZero() || t.Before(r.MeasuredFrom) {
				r.MeasuredFrom = t
			}
			if t.After(r.MeasuredTo) {
				r.MeasuredTo = t
			}
		}
	}
	if r.InputSHA256, err = s.inputHash(ctx, data, u, in.Exchange); err != nil {
		return nil, err
	}
	r.Inputs = inputs(data, out)
	r.Checks = checks(out.Report)
	if out.Fit != nil && len(out.Constants) > 0 {
		numbers(r, in, out)
		if err := s.anchor(ctx, r, in.Compound, u.AnchorID); err != nil {
			return nil, err
		}
	} else if r.Verdict != db.NoNumber {
		return nil, errors.New("a verdict without a number")
	}
	for k, f := range out.Figures {
		r.Figures[k] = db.Figure{Value: f.Value, SD: f.SD, Unit: f.Unit}
	}
	return r, nil
}

func because(d db.Set) string {
	if d.Revision <= 1 || d.State == db.SetGathering {
		return "first computation"
	}
	return fmt.Sprintf("content of the set changed (revision %d)", d.Revision)
}

// numbers fills what only a fitted set has.
func numbers(r *db.Result, in *assay.Input, out *assay.Outcome) {
	f, p := out.Fit, out.Prepared
	r.Steps, r.Slope, r.SlopeSD, r.RMS, r.RungsUsed = f.Steps, f.Slope, f.SlopeSD, f.Own.RMS, len(p.Keys)
	r.LambdaAcidNM, r.LambdaBaseNM, r.IsosbesticNM = out.Bands.LambdaAcid, out.Bands.LambdaBase, out.Bands.LambdaIso
	if !math.IsNaN(out.Bands.LnRB) {
		r.Ratio = math.Exp(out.Bands.LnRB)
	}
	nan := math.NaN()
	for _, c := range out.Constants {
		k := db.PKa{
			Step: c.Step, PKa: c.PKa, U: c.U, K: c.K, Expanded: c.Expanded, UOwn: c.UOwn, URun: c.URun, ULab: c.ULab, DOF: c.DOF,
			PKaOwn: c.Own, UPKaOwn: c.UOwnWeighted, Thermo: c.Thermo, UThermo: c.UThermo, ThermoAtC: c.ThermoC,
			Library: nan, ULibrary: nan, Anchored: nan, UAnchored: nan, Classical: nan, UClassical: nan, Assigned: nan, UAssigned: nan,
		}
		if out.Library != nil && c.Step == 1 {
			k.Library, k.ULibrary = out.Library.PKa, out.Library.U
		}
		if out.Classical != nil && c.Step == 1 {
			k.Classical, k.UClassical = out.Classical.PKa, out.Classical.U
		}
		if in.Compound != nil && in.Compound.Assigned != 0 && c.Step == 1 {
			k.Assigned, k.UAssigned = in.Compound.Assigned, in.Compound.UAssigned
		}
		r.PKa = append(r.PKa, k)
		r.Components = append(r.Components, c.Components...)
	}
	n := f.Steps + 1
	for i, key := range p.Keys {
		row := db.Rung{Key: key, PHRead: p.PH[i], PHLatent: p.PH[i] + f.Own.Eta[i], Residual: f.Own.Eta[i], U: math.NaN(),
			AmountFactorPct: 100 * math.Expm1(f.Own.Kappa[i]), BaselineMAU: 1000 * f.Own.Baseline[i]}
		if len(f.Alpha) == n*len(p.Keys) {
			row.Alpha = slices.Clone(f.Alpha[i*n : (i+1)*n])
		}
		if in.Instrument.SigmaPH > 0 {
			row.U = in.Instrument.SigmaPH
		}
		r.Rungs = append(r.Rungs, row)
	}
	for _, l := range out.LeftOut {
		r.Rungs = append(r.Rungs, db.Rung{Key: l.Key, PHRead: readPH(in.Readings, l.Key), PHLatent: nan, Residual: nan, U: nan, AmountFactorPct: nan, BaselineMAU: nan, LeftOut: true, LeftOutWhy: l.Text})
	}
	w := len(p.WavelengthNM)
	for i := range n {
		if len(f.Spectra) >= (i+1)*w {
			l := db.LimitSpectrum{Species: speciesName(i, f.Steps), WavelengthNM: p.WavelengthNM, Value: f.Spectra[i*w : (i+1)*w]}
			if len(f.SpectraSD) >= (i+1)*w {
				l.SD = f.SpectraSD[i*w : (i+1)*w]
			}
			r.Spectra = append(r.Spectra, l)
		}
	}
}

// speciesName names the forms: acid, base, and those between by number.
func speciesName(i, steps int) string {
	switch i {
	case 0:
		return "acid"
	case steps:
		return "base"
	}
	return fmt.Sprintf("intermediate %d", i)
}

func readPH(rs []parse.Reading, key string) float64 {
	for _, r := range rs {
		if naming.RungKey(r.Label) == naming.RungKey(key) {
			return r.PH
		}
	}
	return math.NaN()
}

func checks(rep verdict.Report) []db.Check {
	var out []db.Check
	for _, c := range rep.Checks {
		d := db.Check{Key: c.Key, Value: c.Value, LimitLow: math.NaN(), LimitHigh: math.NaN(), Unit: c.Unit, Outcome: string(c.Outcome), Sentence: c.Sentence, Action: c.Action}
		b := c.Note
		if c.Outcome == verdict.Held {
			b = c.Hold
		}
		if !math.IsInf(b.Low, 0) {
			d.LimitLow = b.Low
		}
		if !math.IsInf(b.High, 0) {
			d.LimitHigh = b.High
		}
		if c.Unit == "" {
			d.Value = math.NaN()
		}
		out = append(out, d)
	}
	return out
}

// inputs lists every member with whether it was used.
func inputs(data *db.SetData, out *assay.Outcome) []db.Input {
	left := map[string]string{}
	for _, l := range out.LeftOut {
		left[naming.RungKey(l.Key)] = l.Text
	}
	var rows []db.Input
	for _, m := range data.Members {
		row := db.Input{FileID: m.FileID, ScanID: m.ScanID, Role: m.Role, Rung: m.Rung, Used: out.Fit != nil}
		if out.Fit == nil {
			row.LeftOutWhy = "the set has no number" // its checks say why
		}
		if why, ok := left[naming.RungKey(m.Rung)]; ok && m.Role == naming.RoleScan {
			row.Used, row.LeftOutWhy = false, why
		}
		rows = append(rows, row)
	}
	for _, m := range data.Inactive {
		rows = append(rows, db.Input{FileID: m.FileID, ScanID: m.ScanID, Role: m.Role, Rung: m.Rung, LeftOutWhy: m.LeftOutWhy})
	}
	return rows
}

// inputHash covers the bytes of every member and everything else that was
// read, by natural names: the same input has the same hash in every database.
func (s *Service) inputHash(ctx context.Context, data *db.SetData, u *used, ex [][2]string) ([32]byte, error) {
	var b strings.Builder
	for _, m := range data.Members {
		fmt.Fprintf(&b, "%s|%s|%s|%x|%v\n", m.Role, m.Rung, m.Rep, m.SHA256, m.ScanID != nil)
	}
	text, err := s.settingsText(ctx, u.SettingsID)
	if err != nil {
		return [32]byte{}, err
	}
	fmt.Fprintf(&b, "settings %s electrode %s exchange %v buffers %v\n", settings.Hash(text), u.Electrode, ex, u.Corrections)
	if len(u.Logs) > 0 {
		rows, err := s.store.ReadingsOf(ctx, nil, u.Logs)
		if err != nil {
			return [32]byte{}, err
		}
		for _, r := range rows {
			fmt.Fprintf(&b, "logged %s %v\n", r.Measured.UTC().Format(time.RFC3339Nano), r.PH)
		}
	}
	if u.AnchorID != 0 {
		sum, err := s.store.InputOf(ctx, u.AnchorID)
		if err != nil {
			return [32]byte{}, err
		}
		fmt.Fprintf(&b, "anchor %x\n", sum)
	}
	if u.Closed != "" {
		fmt.Fprintf(&b, "instrument closed: %s\n", u.Closed)
	}
	if u.CalibrationID != 0 {
		c, err := s.store.CalibrationByID(ctx, nil, u.CalibrationID)
		if err != nil {
			return [32]byte{}, err
		}
		if c != nil {
			fmt.Fprintf(&b, "calibration %s %s %v\n", c.Electrode, c.Measured.UTC().Format(time.RFC3339), c.Points)
		}
	}
	if u.ArchiveID != 0 {
		sum, err := s.store.InputOf(ctx, u.ArchiveID)
		if err != nil {
			return [32]byte{}, err
		}
		fmt.Fprintf(&b, "archive %x\n", sum)
	}
	return sha256.Sum256([]byte(b.String())), nil
}

// settingsText gives a stored settings file; the one in force is at hand.
func (s *Service) settingsText(ctx context.Context, id int64) ([]byte, error) {
	s.mu.Lock()
	text, now := s.text, s.settingsID
	s.mu.Unlock()
	if id == now && len(text) > 0 {
		return text, nil
	}
	return s.store.Settings(ctx, id)
}

func recordOf(in *assay.Input, u *used, out *assay.Outcome) (json.RawMessage, error) {
	rec := record{Program: Program(), Used: *u, LeftOut: out.LeftOut, Suspects: out.Facts.Suspects, Actions: out.Report.Actions, Exchange: in.Exchange}
	if p := out.Prepared; p != nil {
		rec.Prepared, rec.Masked, rec.Effective = p.Records, p.Masked, p.Effective
		if w := len(p.WavelengthNM); w > 0 {
			rec.Grid = [3]float64{p.WavelengthNM[0], p.WavelengthNM[w-1], float64(w)}
		}
	}
	if out.Fit != nil {
		rec.Fit = lean(out.Fit)
	}
	if out.WithAll != nil {
		rec.WithAll = lean(out.WithAll)
	}
	for _, c := range out.Constants {
		if c.ThermoText != "" {
			rec.Thermo = append(rec.Thermo, c.ThermoText)
		}
	}
	if out.Err != nil {
		rec.Error = out.Err.Error()
	}
	return encode(rec)
}

// lean is a fit without its spectra, which have rows of their own.
func lean(r *fit.Result) fit.Result {
	c := *r
	c.Spectra, c.SpectraSD, c.Residual = nil, nil, nil
	return c
}
