package pipeline

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"strconv"
	"time"

	"pkvigil/db"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/naming"
)

// Why is the answer to "why this verdict?": the set, its current result with
// every check, and what it waits for.
type Why struct {
	Set      db.Set         `json:"set"`
	Result   *db.Result     `json:"result,omitempty"`
	Actions  []string       `json:"actions,omitempty"`
	Status   []db.StatusRow `json:"status,omitempty"`
	Earlier  []db.Summary   `json:"earlier,omitempty"`
	Inactive []db.Member    `json:"inactive,omitempty"`
}

// Why gathers the answer for a set.
func (s *Service) Why(ctx context.Context, name string) (*Why, error) {
	x, err := s.FindSet(ctx, nil, name)
	if err != nil {
		return nil, err
	}
	w := &Why{Set: *x}
	if w.Result, err = s.store.CurrentResult(ctx, nil, x.ID); err != nil {
		return nil, err
	}
	if w.Result != nil {
		w.Actions = storedActions(w.Result.Record)
		if w.Status, err = s.store.StatusRows(ctx, nil, w.Result.ID); err != nil {
			return nil, err
		}
	}
	if w.Earlier, err = s.store.ResultsOfSet(ctx, nil, x.ID); err != nil {
		return nil, err
	}
	members, err := s.store.Members(ctx, nil, x.ID)
	if err != nil {
		return nil, err
	}
	for _, m := range members {
		if !m.Active {
			w.Inactive = append(w.Inactive, m)
		}
	}
	return w, nil
}

// A Trace leads from a result back to its bytes.
type Trace struct {
	Set         db.Set             `json:"set"`
	Result      *db.Result         `json:"result"`
	Status      []db.StatusRow     `json:"status"`
	Files       []TraceFile        `json:"files"`
	Calibration *db.CalibrationRow `json:"calibration,omitempty"`
	Deeds       []db.Deed          `json:"deeds,omitempty"`
	Record      json.RawMessage    `json:"record"`
}

// A TraceFile is one file of a result.
type TraceFile struct {
	ID       int64     `json:"id"`
	Path     string    `json:"path"`
	SHA256   string    `json:"sha256"`
	Size     int64     `json:"size"`
	Revision int       `json:"revision"`
	Role     string    `json:"role"`
	Rung     string    `json:"rung,omitempty"`
	Rule     string    `json:"rule,omitempty"`
	Used     bool      `json:"used"`
	Why      string    `json:"left_out_why,omitempty"`
	Seen     time.Time `json:"seen_at"`
}

// Trace gathers where a result came from. name is a result's number or a set.
func (s *Service) Trace(ctx context.Context, name string) (*Trace, error) {
	r, x, err := s.findResult(ctx, nil, name)
	if err != nil {
		return nil, err
	}
	t := &Trace{Set: *x, Result: r, Record: r.Record}
	if t.Status, err = s.store.StatusRows(ctx, nil, r.ID); err != nil {
		return nil, err
	}
	for _, in := range r.Inputs {
		f, err := s.store.FileByID(ctx, nil, in.FileID)
		if err != nil {
			return nil, err
		}
		tf := TraceFile{ID: f.ID, Path: f.Root + "/" + f.Path, SHA256: fmt.Sprintf("%x", f.SHA256), Size: f.Size, Revision: f.Revision, Role: in.Role, Rung: in.Rung, Used: in.Used, Why: in.LeftOutWhy, Seen: f.Seen}
		if f.Match != nil {
			tf.Rule = f.Match.Rule
		}
		t.Files = append(t.Files, tf)
	}
	if r.CalibrationID != nil {
		if t.Calibration, err = s.store.CalibrationByID(ctx, nil, *r.CalibrationID); err != nil {
			return nil, err
		}
	}
	t.Deeds, err = s.store.Deeds(ctx, nil, x.Key, 50)
	return t, err
}

// A SinceRow is one night of a chart.
type SinceRow struct {
	Night      string   `json:"night"`
	Instrument string   `json:"instrument"`
	Slot       string   `json:"slot,omitempty"`
	Value      float64  `json:"value"`
	Centre     float64  `json:"centre"`
	SD         float64  `json:"sd"`
	Low        float64  `json:"limit_low"`
	High       float64  `json:"limit_high"`
	Judged     bool     `json:"judged"`
	Flags      []string `json:"flags,omitempty"`
}

// Since is the history of one characteristic of a reference.
type Since struct {
	Reference      string     `json:"reference"`
	Characteristic string     `json:"characteristic"`
	Words          string     `json:"words"`
	Unit           string     `json:"unit"`
	Rows           []SinceRow `json:"rows"`
	Cases          []db.Case  `json:"cases"`
	Exits          []Exit     `json:"exits,omitempty"` // of an electrode: when it leaves its limits
}

// Since gathers the chart of a reference or electrode.
func (s *Service) Since(ctx context.Context, reference, characteristic string) (*Since, error) {
	now := s.clock.Now()
	if characteristic == "" {
		var err error
		if characteristic, err = s.usualOf(ctx, reference); err != nil {
			return nil, err
		}
	}
	points, err := s.store.JudgedHistory(ctx, nil, db.PointFilter{Characteristic: characteristic}, now)
	if err != nil {
		return nil, err
	}
	out := &Since{Reference: reference, Characteristic: characteristic, Words: drift.Characteristic(characteristic).Words()}
	for _, p := range points {
		if p.Reference != reference && p.Scope != reference && p.Scope+"/"+p.Reference != reference {
			continue
		}
		r := SinceRow{Night: p.Night, Instrument: p.Scope, Slot: p.Slot, Value: p.Value, Centre: math.NaN(), SD: math.NaN(), Low: math.NaN(), High: math.NaN(), Judged: p.Judged}
		if j := p.Judgement; j != nil {
			r.Centre, r.SD, r.Low, r.High, r.Flags = j.Centre, j.SD, j.LimitLow, j.LimitHigh, j.Flags
		}
		out.Unit = p.Unit
		out.Rows = append(out.Rows, r)
	}
	if len(out.Rows) == 0 {
		return nil, fmt.Errorf("no %s is charted for %q: %w", characteristic, reference, ErrUnknownObject)
	}
	if out.Cases, err = s.store.OpenCases(ctx, nil); err != nil {
		return nil, err
	}
	out.Exits, err = s.exitsOf(ctx, nil, reference, now)
	return out, err
}

// A CaseReach is a case with what it touches.
type CaseReach struct {
	Case    db.Case      `json:"case"`
	Ranking []db.RankRow `json:"ranking"`
	Rows    []ReachLine  `json:"results"`
}

// A ReachLine is one touched result.
type ReachLine struct {
	db.ReachRow
	Set string  `json:"set"`
	PKa float64 `json:"pka"`
	U   float64 `json:"u"`
}

// Reach gathers what a case touches.
func (s *Service) Reach(ctx context.Context, name string) (*CaseReach, error) {
	c, err := s.findCase(ctx, nil, name)
	if err != nil {
		return nil, err
	}
	out := &CaseReach{Case: *c}
	if out.Ranking, _, err = s.store.Ranking(ctx, nil, c.ID); err != nil {
		return nil, err
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
		l := ReachLine{ReachRow: r, Set: x.Key, PKa: math.NaN(), U: math.NaN()}
		if len(res.PKa) > 0 {
			l.PKa, l.U = res.PKa[0].PKa, res.PKa[0].Expanded
		}
		out.Rows = append(out.Rows, l)
	}
	return out, nil
}

// A Health line is one thing probe looked at.
type Health struct {
	What  string `json:"what"`
	OK    bool   `json:"ok"`
	Found string `json:"found"`
	Do    string `json:"do,omitempty"`
}

// Probe looks whether everything is visible and alive.
func (s *Service) Probe(ctx context.Context) ([]Health, error) {
	var out []Health
	add := func(what string, ok bool, found, do string) {
		if ok {
			do = ""
		}
		out = append(out, Health{what, ok, found, do})
	}
	v, err := s.store.SchemaVersion(ctx)
	if err != nil {
		return nil, err
	}
	add("database", true, "schema version "+strconv.Itoa(v), "")
	cfg := set(s)
	now := s.clock.Now()
	if err := s.newWatcher(); err != nil {
		return nil, err
	}
	rep, err := s.watch.Look(ctx, now)
	if err != nil {
		return nil, err
	}
	for _, st := range rep.States {
		found := fmt.Sprintf("%d files, newest %s", st.Files, ago(now, st.Newest))
		if !st.Visible {
			found = st.Why
		}
		add("folder "+st.Root, st.Visible, found, "mount the share, or correct the path or marker file in the settings")
	}
	roots, err := s.store.RootStates(ctx, nil)
	if err != nil {
		return nil, err
	}
	for _, r := range roots {
		if cfg.FolderByName(r.Root) != nil {
			add("sweep of "+r.Root, now.Sub(r.LookedAt) < 5*time.Minute, "last stored look "+ago(now, r.LookedAt), "is pkvigil watch running?")
		}
	}
	jobs, err := s.store.JobsOpen(ctx, "sets")
	if err != nil {
		return nil, err
	}
	add("sets waiting to be computed", jobs < 200, strconv.Itoa(jobs), "is a worker running?")
	pending, err := s.store.PendingDeliveries(ctx, nil, 100)
	if err != nil {
		return nil, err
	}
	found, bad := "none", false
	for _, d := range pending {
		bad = bad || d.Attempts > 2
		found = fmt.Sprintf("%d, oldest of %s: %s", len(pending), d.Message.At.In(cfg.Zone()).Format("2 Jan 15:04"), d.LastError)
	}
	add("messages not delivered", !bad, found, "look at the relay or receiver; delivery goes on by itself")
	n, broken, err := s.store.VerifyDeeds(ctx)
	if err != nil {
		return nil, err
	}
	add("trail of deeds", broken == nil, fmt.Sprintf("%d entries, chain intact", n), "the trail was altered; see pkvigil deeds")
	return out, nil
}

// ago says how long before now t was.
func ago(now, t time.Time) string {
	if t.IsZero() {
		return "never"
	}
	d := now.Sub(t)
	switch {
	case d < 2*time.Minute:
		return "just now"
	case d < 2*time.Hour:
		return fmt.Sprintf("%.0f min ago", d.Minutes())
	case d < 48*time.Hour:
		return fmt.Sprintf("%.0f h ago", d.Hours())
	}
	return fmt.Sprintf("%.0f days ago", d.Hours()/24)
}

// Note logs an event entered by hand.
func (s *Service) Note(ctx context.Context, e db.EventRow) error {
	if e.At.IsZero() {
		e.At = s.clock.Now()
	}
	if len(e.Instruments) == 0 {
		e.Instruments = s.instrumentsOf(e.Event)
	}
	return s.putEvent(ctx, e)
}

// Night gives the night a moment belongs to.
func (s *Service) Night(t time.Time) string {
	return naming.NightOf(t, set(s).Zone(), naming.Noon)
}

// ResultID finds the result a person means by number or set.
func (s *Service) ResultID(ctx context.Context, name string) (int64, error) {
	r, _, err := s.findResult(ctx, nil, name)
	if err != nil {
		return 0, err
	}
	return r.ID, nil
}

// ReaderHint says how a dashboard reads the database.
func (s *Service) ReaderHint() string {
	where := "the server your settings name"
	if s.server != nil {
		where = s.server.URL()
	}
	return `Views for dashboards live in schema readout; every column has a comment.
  server   ` + where + `
  role     pkvigil_reader (a group: grant it to a login of your own)
           CREATE ROLE dashboard LOGIN PASSWORD '...' IN ROLE pkvigil_reader;
  try      psql "` + where + `" -c 'SELECT * FROM readout.nights ORDER BY night DESC LIMIT 5'
A private server is reached by its unix socket from this machine alone, by the
account that runs it; for dashboards elsewhere name a server of your own in
[storage] and connect there.`
}
