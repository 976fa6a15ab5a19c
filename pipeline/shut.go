package pipeline

import (
	"context"
	"fmt"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/brief"
	"pkvigil/pipeline/verdict"
)

// checkClosed is the check that holds what a closed instrument measures.
const checkClosed = "instrument.closed"

// closedFor notes the reason for which the instrument of a set was closed when
// the set was measured; none when it was open. References are computed and
// judged as ever: they are what shows that it may be opened again.
func (s *Service) closedFor(ctx context.Context, u *used, data *db.SetData) error {
	if data.Set.Kind == db.KindReference {
		return nil
	}
	states, err := s.store.InstrumentStates(ctx, nil)
	if err != nil {
		return err
	}
	st, ok := states[data.Set.Instrument]
	if !ok || st.State != "closed" {
		return nil
	}
	var measured time.Time
	for _, m := range data.Members {
		if m.Scan != nil && m.Scan.Measured.After(measured) {
			measured = m.Scan.Measured
		}
	}
	if measured.IsZero() {
		measured = data.Set.LastSeen
	}
	if measured.Before(st.At) {
		return nil // its bracket decides
	}
	u.Closed = st.Because
	return nil
}

// closeReport holds a set of a closed instrument, whatever its own checks say.
func closeReport(out *assay.Outcome, instrument, reason string) {
	r := &out.Report
	if reason == "" || r.Verdict == verdict.NoNumber {
		return
	}
	action := fmt.Sprintf("Measure a good pair of references, then open the instrument: pkvigil sign reopen %s --as NAME --because \"...\"", instrument)
	r.Verdict = verdict.Held
	r.Checks = slices.Insert(slices.Clone(r.Checks), 0, verdict.Check{Key: checkClosed, Note: verdict.Anything(), Hold: verdict.Anything(), Outcome: verdict.Held, Action: action,
		Sentence: fmt.Sprintf("%s was closed when this was measured: %s.", instrument, strings.TrimSuffix(reason, "."))})
	r.Actions = slices.Insert(slices.Clone(r.Actions), 0, action)
}

// afterReopen asks for the sets that only waited for the instrument to be
// computed again: they get the verdict of their own checks.
func (s *Service) afterReopen(ctx context.Context, tx pgx.Tx, was db.InstrumentState, d *db.Deed) (string, error) {
	if was.State != "closed" {
		return "", nil
	}
	all, err := s.store.MeasuredSets(ctx, tx, s.Night(was.At.AddDate(0, 0, -1)), "9999-12-31", was.Instrument)
	if err != nil {
		return "", err
	}
	n := 0
	for _, m := range all {
		if !slices.Contains(m.HeldBy, checkClosed) || m.Standing.Struck {
			continue
		}
		if err := s.again(ctx, tx, &m.Set, d); err != nil {
			return "", err
		}
		n++
	}
	if n == 0 {
		return "", nil
	}
	return fmt.Sprintf("; %d set(s) that waited for it are computed again", n), nil
}

// signBracket confirms results of a bracket as unaffected; ok is false where
// the first object names no bracket.
func (s *Service) signBracket(ctx context.Context, tx pgx.Tx, g Signature, d *db.Deed) (said string, ok bool, err error) {
	inst, _, found := strings.Cut(g.Object[0], "/")
	if !found || len(g.Object) < 2 || g.Verb != actConfirm {
		return "", false, nil
	}
	rows, err := s.store.Brackets(ctx, tx, inst, "0001-01-01")
	if err != nil {
		return "", false, err
	}
	i := slices.IndexFunc(rows, func(b db.Bracket) bool { return b.Key == g.Object[0] })
	if i < 0 {
		return "", false, nil
	}
	n := 0
	for _, id := range rows[i].Sets {
		r, err := s.store.CurrentResult(ctx, tx, id)
		if err != nil {
			return "", true, err
		}
		if r == nil || !r.Standing.InQuestion {
			continue
		}
		history, err := s.store.StatusRows(ctx, tx, r.ID)
		if err != nil {
			return "", true, err
		}
		proposed := slices.ContainsFunc(history, func(h db.StatusRow) bool {
			return h.Status == db.StatusInQuestion && h.CaseID == nil && strings.HasPrefix(h.Because, bracketWord+rows[i].Key+":") && strings.HasSuffix(h.Because, proposedWord)
		})
		if !(g.Object[1] == "all" && proposed || g.Object[1] == strconv.FormatInt(r.ID, 10)) {
			continue
		}
		if !onlyDoubt(history) {
			return "", true, fmt.Errorf("result %d is also in question because of a case; confirm it there: pkvigil sign confirm CASE %d --as NAME --because WHY", r.ID, r.ID)
		}
		if err := s.store.PutResultStatus(ctx, tx, db.StatusRow{ResultID: r.ID, Status: db.StatusCleared, At: d.At, Actor: g.As, Because: g.Because}); err != nil {
			return "", true, err
		}
		n++
	}
	if n == 0 {
		return "", true, fmt.Errorf("bracket %s holds no result %s in question (\"all\" means all proposed as unaffected): %w", rows[i].Key, g.Object[1], ErrUnknownObject)
	}
	d.Object, d.Before, d.After = fmt.Sprintf("bracket %s: %d result(s)", rows[i].Key, n), db.StatusInQuestion, db.ReachUnaffected
	return fmt.Sprintf("%d result(s) of bracket %s are %s", n, rows[i].Key, d.After), true, nil
}

// briefBrackets says which checks of the night could not be judged, which
// brackets failed, and which instruments are closed.
func (s *Service) briefBrackets(ctx context.Context, d *brief.Data, now time.Time) error {
	states, err := s.store.InstrumentStates(ctx, nil)
	if err != nil {
		return err
	}
	for _, inst := range set(s).Instruments {
		if st := states[inst.Name]; st.State == "closed" && !st.At.After(now) {
			d.NotSeen = append(d.NotSeen, brief.Notice{
				What:   fmt.Sprintf("%s is closed since %s: %s. Nothing it has measured since then stands.", inst.Name, st.At.In(d.Made.Location()).Format("2 Jan 15:04"), strings.TrimSuffix(st.Because, ".")),
				Action: fmt.Sprintf("After a good pair of references: pkvigil sign reopen %s --as NAME --because \"...\"", inst.Name)})
		}
		l, err := s.look(ctx, nil, inst.Name, d.Night, d.Night, now)
		if err != nil {
			return err
		}
		for _, st := range l.stations {
			if st.night != d.Night {
				continue
			}
			for _, x := range st.sets {
				if x.ResultID != 0 && x.Set.State == db.SetFitted && !st.tells(x) {
					d.NotSeen = append(d.NotSeen, brief.Notice{What: fmt.Sprintf("Reference %s could not be judged, its own checks failed: %s It says nothing about %s.", x.Set.Key, sentence(x.Headline), inst.Name),
						Action: "Repeat this reference; until another one is good the results around it are not released."})
				}
			}
		}
		for _, b := range l.spans {
			if b.State == stationFailed && slices.ContainsFunc(b.samples, func(x timed) bool { return x.Set.Night == d.Night }) {
				d.Signals = append(d.Signals, fmt.Sprintf("Bracket %s failed (%s): the %d set(s) within are in question. To confirm those proposed as unaffected: pkvigil sign confirm %s all --as NAME --because \"...\"", b.Key, b.why(), len(b.samples), b.Key))
			}
		}
	}
	return nil
}

// tells says whether one set of a station says anything of the system.
func (s *station) tells(x timed) bool {
	return slices.ContainsFunc(s.shifts, func(v shift) bool { return v.Reference == x.Set.Compound })
}
