package pipeline

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"os/user"
	"path"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/db/job"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/rehearse"
)

// What a person can decide, as the words of `pkvigil sign`.
const (
	actAcknowledge = "acknowledge" // a case: silences repetition, changes no verdict
	actClose       = "close"       // a case
	actLift        = "lift"        // the hold of a result
	actRelease     = "release"     // a result that stands
	actStrike      = "strike"      // a result, for good
	actConfirm     = "confirm"     // a result as unaffected by a case
	actAffected    = "affected"    // a result as affected by a case
	actExchange    = "exchange"    // two labels of a set; it is computed again
	actBaseline    = "baseline"    // a chart's baseline
	actReopen      = "reopen"      // an instrument
	actAdopt       = "adopt"       // a parked file
	actRecompute   = "recompute"   // a set
	actAccept      = "accept"      // a correction the program proposed
)

// A Signature is one decision of a named person.
type Signature struct {
	Verb    string
	Object  []string // what it is about; see Verbs
	As      string
	Because string
}

// Verbs lists what can be signed and what each is about.
func Verbs() [][2]string {
	return [][2]string{
		{actAcknowledge, "CASE                 I know; repetition stops, verdicts stay"},
		{actClose, "CASE                 the disturbance is over"},
		{actLift, "RESULT or SET        the hold does not matter; it may be released"},
		{actRelease, "RESULT, SET or night:2026-09-14   send it out"},
		{actStrike, "RESULT or SET        withdraw it, for good"},
		{actConfirm, "CASE RESULT or BRACKET RESULT   this result is unaffected"},
		{actAffected, "CASE RESULT          this result is affected by the case"},
		{actExchange, "SET RUNG RUNG        labels were exchanged; compute again, both versions stay"},
		{actBaseline, "REFERENCE FROM TO    learn the baseline anew from these nights (YYYY-MM-DD)"},
		{actAccept, "CASE or SET          what was proposed: a buffer's value, an exchange of labels"},
		{actCorrect, "BUFFER PH            the true value of a bottle; its readings are computed again"},
		{actReopen, "INSTRUMENT           results of the instrument may stand again"},
		{actRecompute, "SET                  compute again with the settings in force"},
	}
}

// ErrUnknownObject says that what is to be signed does not exist.
var ErrUnknownObject = errors.New("nothing of that name")

// Sign carries out a decision: the change and its deed in one transaction.
func (s *Service) Sign(ctx context.Context, g Signature) (string, error) {
	if strings.TrimSpace(g.As) == "" || strings.TrimSpace(g.Because) == "" {
		return "", errors.New("a signature needs a name and a reason: --as NAME --because \"...\"")
	}
	if len(g.Object) == 0 {
		return "", errors.New("nothing is named to sign; see pkvigil sign --help")
	}
	var said string
	err := s.store.InTx(ctx, func(tx pgx.Tx) error {
		d := db.Deed{At: s.clock.Now(), Actor: g.As, OSUser: osUser(), Action: g.Verb, Object: strings.Join(g.Object, " "), Because: g.Because, Program: Program()}
		if s.settingsID != 0 {
			d.SettingsID = &s.settingsID
		}
		var err error
		if said, err = s.carryOut(ctx, tx, g, &d); err != nil {
			return err
		}
		return s.store.AppendDeed(ctx, tx, &d)
	})
	return said, err
}

func osUser() string {
	if u, err := user.Current(); err == nil {
		return u.Username
	}
	return ""
}

func (s *Service) carryOut(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	switch g.Verb {
	case actAcknowledge, actClose:
		return s.signCase(ctx, tx, g, d)
	case actLift, actRelease, actStrike:
		return s.signResult(ctx, tx, g, d)
	case actConfirm, actAffected:
		return s.signReach(ctx, tx, g, d)
	case actExchange:
		return s.signExchange(ctx, tx, g, d)
	case actRecompute:
		return s.signRecompute(ctx, tx, g, d)
	case actBaseline:
		return s.signBaseline(ctx, tx, g, d)
	case actReopen:
		return s.signReopen(ctx, tx, g, d)
	case actCorrect:
		return s.signCorrect(ctx, tx, g, d)
	case actAccept:
		return s.signAccept(ctx, tx, g, d)
	}
	var known []string
	for _, v := range Verbs() {
		known = append(known, v[0])
	}
	return "", fmt.Errorf("%q is not a decision; known are %s", g.Verb, strings.Join(known, ", "))
}

// findCase finds a case by number or key.
func (s *Service) findCase(ctx context.Context, q db.Querier, name string) (*db.Case, error) {
	if id, err := strconv.ParseInt(strings.TrimPrefix(name, "case"), 10, 64); err == nil {
		return s.store.CaseByID(ctx, q, id)
	}
	all, err := s.store.Cases(ctx, q, s.clock.Now())
	if err != nil {
		return nil, err
	}
	for i := range slices.Backward(all) {
		if all[i].Key == name || strings.Contains(all[i].Resource, name) {
			return &all[i], nil
		}
	}
	return nil, fmt.Errorf("case %q: %w", name, ErrUnknownObject)
}

func (s *Service) signCase(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	c, err := s.findCase(ctx, tx, g.Object[0])
	if err != nil {
		return "", err
	}
	d.Object, d.Before = "case "+c.Key, c.State
	c.State, c.Actor, c.Because, c.At = db.CaseAcknowledged, g.As, g.Because, d.At
	if g.Verb == actClose {
		c.State = db.CaseClosed
	}
	d.After = c.State
	if _, err := s.store.PutCase(ctx, tx, c); err != nil {
		return "", err
	}
	return fmt.Sprintf("case %s is %s", c.Key, c.State), nil
}

// findResult finds a result by number, or the current result of a set.
func (s *Service) findResult(ctx context.Context, q db.Querier, name string) (*db.Result, *db.Set, error) {
	var r *db.Result
	if id, err := strconv.ParseInt(name, 10, 64); err == nil {
		if r, err = s.store.ResultByID(ctx, q, id); err != nil {
			return nil, nil, fmt.Errorf("result %s: %w", name, err)
		}
		set, err := s.store.SetByID(ctx, q, r.SetID)
		return r, set, err
	}
	set, err := s.FindSet(ctx, q, name)
	if err != nil {
		return nil, nil, err
	}
	if r, err = s.store.CurrentResult(ctx, q, set.ID); err != nil {
		return nil, nil, err
	}
	if r == nil {
		return nil, set, fmt.Errorf("set %s has no result yet: %w", set.Key, ErrUnknownObject)
	}
	return r, set, nil
}

// FindSet finds the one set a person means; several are an error that lists them.
func (s *Service) FindSet(ctx context.Context, q db.Querier, name string) (*db.Set, error) {
	if set, err := s.store.SetByKey(ctx, q, name); err == nil && set != nil {
		return set, nil
	}
	sets, err := s.store.SetsLike(ctx, q, name, 12)
	if err != nil {
		return nil, err
	}
	switch len(sets) {
	case 0:
		return nil, fmt.Errorf("set %q: %w", name, ErrUnknownObject)
	case 1:
		return &sets[0], nil
	}
	var keys []string
	for _, x := range sets {
		keys = append(keys, x.Key)
	}
	return nil, fmt.Errorf("%q names %d sets or more; say which: %s", name, len(sets), strings.Join(keys, ", "))
}

func (s *Service) signResult(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	if night, ok := strings.CutPrefix(g.Object[0], "night:"); ok && g.Verb == actRelease {
		return s.releaseNight(ctx, tx, night, d)
	}
	r, set, err := s.findResult(ctx, tx, g.Object[0])
	if err != nil {
		return "", err
	}
	d.Object, d.Before = fmt.Sprintf("result %d (%s)", r.ID, set.Key), r.Standing.Verdict
	status := map[string]string{actLift: db.StatusLifted, actRelease: db.StatusReleased, actStrike: db.StatusStruck}[g.Verb]
	if g.Verb == actRelease {
		switch v := r.Standing.Verdict; {
		case r.Standing.InQuestion:
			return "", fmt.Errorf("result %d is in question; confirm it first (pkvigil sign confirm CASE %d ...)", r.ID, r.ID)
		case v != db.Stands && v != db.StandsNoted && !r.Standing.Lifted:
			return "", fmt.Errorf("result %d is %s and cannot be released; lift the hold first", r.ID, v)
		}
	}
	d.After = status
	return fmt.Sprintf("result %d of %s is %s", r.ID, set.Key, status), s.store.PutResultStatus(ctx, tx, db.StatusRow{ResultID: r.ID, Status: status, At: d.At, Actor: g.As, Because: g.Because})
}

func (s *Service) signReach(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	if len(g.Object) < 2 {
		return "", errors.New("name the case and the result: pkvigil sign " + g.Verb + " CASE RESULT --as NAME --because WHY")
	}
	if said, ok, err := s.signBracket(ctx, tx, g, d); ok || err != nil {
		return said, err
	}
	c, err := s.findCase(ctx, tx, g.Object[0])
	if err != nil {
		return "", err
	}
	rows, err := s.store.Reach(ctx, tx, c.ID)
	if err != nil {
		return "", err
	}
	var change []db.ReachRow
	for _, row := range rows {
		if g.Object[1] == "all" && row.Resolution == db.ReachProposed || strconv.FormatInt(row.ResultID, 10) == g.Object[1] {
			change = append(change, row)
		}
	}
	if len(change) == 0 {
		return "", fmt.Errorf("case %s does not reach result %s (\"all\" means all proposed as unaffected): %w", c.Key, g.Object[1], ErrUnknownObject)
	}
	d.Object = fmt.Sprintf("case %s: %d result(s)", c.Key, len(change))
	for i := range change {
		d.Before = change[i].Resolution
		change[i].Resolution = db.ReachAffected
		if g.Verb == actConfirm {
			change[i].Resolution = db.ReachUnaffected
			err := s.store.PutResultStatus(ctx, tx, db.StatusRow{ResultID: change[i].ResultID, Status: db.StatusCleared, At: d.At, Actor: g.As, Because: g.Because, CaseID: &c.ID})
			if err != nil {
				return "", err
			}
		}
		d.After = change[i].Resolution
	}
	return fmt.Sprintf("%d result(s) of case %s are %s", len(change), c.Key, d.After), s.store.PutReach(ctx, tx, c.ID, d.At, change)
}

func (s *Service) signExchange(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	if len(g.Object) != 3 {
		return "", errors.New("name the set and the two rungs: pkvigil sign exchange SET RUNG RUNG --as NAME --because WHY")
	}
	set, err := s.FindSet(ctx, tx, g.Object[0])
	if err != nil {
		return "", err
	}
	members, err := s.store.Members(ctx, tx, set.ID)
	if err != nil {
		return "", err
	}
	for _, rung := range g.Object[1:] {
		if !slices.ContainsFunc(members, func(m db.Member) bool {
			return m.Active && m.Role == naming.RoleScan && naming.RungKey(m.Rung) == naming.RungKey(rung)
		}) {
			return "", fmt.Errorf("set %s has no solution %q: %w", set.Key, rung, ErrUnknownObject)
		}
	}
	d.Object, d.Before = set.Key, "labels as exported"
	pair, err := json.Marshal([2]string{g.Object[1], g.Object[2]})
	if err != nil {
		return "", err
	}
	d.After = string(pair)
	return fmt.Sprintf("labels %s and %s of %s are exchanged; it is computed again, the earlier result stays", g.Object[1], g.Object[2], set.Key), s.again(ctx, tx, set, d)
}

func (s *Service) signRecompute(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	set, err := s.FindSet(ctx, tx, g.Object[0])
	if err != nil {
		return "", err
	}
	d.Object = set.Key
	return set.Key + " is computed again", s.again(ctx, tx, set, d)
}

// again asks for a set to be computed as a new revision.
func (s *Service) again(ctx context.Context, tx pgx.Tx, set *db.Set, d *db.Deed) error {
	rev, err := s.store.TouchSet(ctx, tx, set.ID, set.LastSeen)
	if err != nil {
		return err
	}
	if err := s.store.SetSetState(ctx, tx, set.ID, db.SetComplete, nil, set.Deadline, d.At); err != nil {
		return err
	}
	return s.enqueueSet(ctx, tx, job.Set{SetID: set.ID, Revision: rev, At: d.At})
}

// signBaseline learns the baselines of every chart of a reference anew.
func (s *Service) signBaseline(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	if len(g.Object) != 3 {
		return "", errors.New("name the reference and the first and last night: pkvigil sign baseline REFERENCE 2026-09-14 2026-09-27 --as NAME --because WHY")
	}
	ts, err := s.tracks(ctx, tx, d.At)
	if err != nil {
		return "", err
	}
	n := 0
	var refused []string
	for _, t := range ts {
		name := t.series.Scope + "/" + t.series.Reference
		if ok, _ := path.Match(g.Object[0], name); !ok && t.series.Reference != g.Object[0] && t.series.Scope != g.Object[0] {
			continue
		}
		t.stored = &db.Baseline{FrozenAt: d.At, FromNight: g.Object[1], ToNight: g.Object[2]}
		set, _, _ := s.current()
		t.learn(set.Charts, "9999-12-31")
		if t.learned < 3 {
			continue
		}
		if t.base.Refused != "" {
			refused = append(refused, fmt.Sprintf("%s %s: %s", name, t.series.Characteristic, t.base.Refused))
			continue
		}
		b := &db.Baseline{Series: t.series, Stage: string(t.base.Stage), Centre: t.base.Centre, Spread: t.base.SD, N: t.learned, FromNight: g.Object[1], ToNight: g.Object[2],
			SignedBy: g.As, Because: g.Because, FrozenAt: d.At, At: d.At}
		if err := s.store.PutBaseline(ctx, tx, b); err != nil {
			return "", err
		}
		n++
	}
	if n == 0 && len(refused) > 0 {
		return "", fmt.Errorf("no baseline can be learnt: %s", strings.Join(refused, "; "))
	}
	if n == 0 {
		return "", fmt.Errorf("reference %q has no chart with three nights between %s and %s: %w", g.Object[0], g.Object[1], g.Object[2], ErrUnknownObject)
	}
	d.After = fmt.Sprintf("%d charts learnt from %s to %s", n, g.Object[1], g.Object[2])
	if len(refused) > 0 {
		d.After += "; not learnt, and the earlier baselines stay: " + strings.Join(refused, "; ")
	}
	return d.After, nil
}

func (s *Service) signReopen(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (string, error) {
	states, err := s.store.InstrumentStates(ctx, tx)
	if err != nil {
		return "", err
	}
	st, ok := states[g.Object[0]]
	if !ok {
		return "", fmt.Errorf("instrument %q was never closed: %w", g.Object[0], ErrUnknownObject)
	}
	d.Before, d.After = st.State, "open"
	more, err := s.afterReopen(ctx, tx, st, d)
	if err != nil {
		return "", err
	}
	return "instrument " + g.Object[0] + " is open" + more, s.store.PutInstrumentState(ctx, tx, db.InstrumentState{Instrument: g.Object[0], State: "open", At: d.At, Actor: g.As, Because: g.Because})
}

// replaySign carries out a scripted signature of the demo. What it names may
// not exist, because the program may have judged otherwise than the script
// expects; then nothing is signed.
func (s *Service) replaySign(ctx context.Context, at time.Time, g rehearse.Signature) error {
	deeds, err := s.store.Deeds(ctx, nil, "", 50)
	if err != nil {
		return err
	}
	for _, d := range deeds {
		if d.At.Equal(at) && d.Actor == g.As && d.Because == g.Because {
			return nil // signed before the replay was cut off
		}
	}
	_, err = s.signScripted(ctx, g)
	if errors.Is(err, ErrUnknownObject) {
		s.log.Debug().Str("verb", g.Verb).Str("object", g.Object).Msg("scripted signature found nothing to sign")
		return nil
	}
	return err
}
