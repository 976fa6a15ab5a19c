package pipeline

import (
	"context"
	"fmt"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/alert"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
)

// Tick does what time alone asks for: sets that fell silent are complete or
// waiting, references that came are judged, absences are told, the brief is
// written when it is due. It is safe to call as often as one likes.
func (s *Service) Tick(ctx context.Context, now time.Time) error {
	s.tickMu.Lock()
	defer s.tickMu.Unlock()
	if err := s.tickSets(ctx, now); err != nil {
		return fmt.Errorf("looking at open sets: %w", err)
	}
	if !s.cfg.Sweep && !s.cfg.Work {
		return nil
	}
	busy, err := s.store.JobsOpen(ctx, "sets")
	if err != nil {
		return err
	}
	if busy == 0 || s.overdue(now) {
		s.evalDue = time.Time{}
		if err := s.evaluate(ctx, now); err != nil {
			return fmt.Errorf("evaluating the references: %w", err)
		}
		if err := s.brackets(ctx, now); err != nil {
			return err
		}
	}
	if err := s.tickAbsence(ctx, now); err != nil {
		return fmt.Errorf("looking for what is absent: %w", err)
	}
	if err := s.tickUnrun(ctx, now); err != nil {
		return fmt.Errorf("looking for references not run: %w", err)
	}
	if busy == 0 {
		if err := s.tickBrief(ctx, now); err != nil {
			return fmt.Errorf("writing the brief: %w", err)
		}
	}
	return nil
}

// overdue says whether the evaluation has waited ten minutes for the queue to
// run empty: on a busy instrument it never may.
func (s *Service) overdue(now time.Time) bool {
	if s.evalDue.IsZero() {
		s.evalDue = now.Add(10 * time.Minute)
	}
	return now.After(s.evalDue)
}

// tickSets moves open sets on.
func (s *Service) tickSets(ctx context.Context, now time.Time) error {
	open, err := s.store.OpenSets(ctx, nil)
	if err != nil {
		return err
	}
	open = slices.DeleteFunc(open, func(o db.OpenSet) bool { return !s.mayMove(o, now) })
	if len(open) == 0 {
		return nil
	}
	return s.store.InTx(ctx, func(tx pgx.Tx) error {
		var ids []int64
		for _, o := range open {
			ids = append(ids, o.ID)
		}
		return s.assemble(ctx, tx, ids, now)
	})
}

// A condition is something absent or wrong that may be told.
type condition struct {
	kind, key, instrument string
	present               bool
	since                 time.Time
	sentence              string
	notes                 []string
}

// tickAbsence tells of blind folders, silent nights and references not run.
func (s *Service) tickAbsence(ctx context.Context, now time.Time) error {
	cfg := set(s)
	roots, err := s.store.RootStates(ctx, nil)
	if err != nil {
		return err
	}
	var all []condition
	blind := map[string]bool{}
	for _, r := range roots {
		f := cfg.FolderByName(r.Root)
		if f == nil {
			continue
		}
		blind[r.Root] = !r.Visible
		all = append(all, condition{kind: alert.RootBlind, key: r.Root, instrument: r.Instrument, present: !r.Visible, since: r.Since,
			sentence: fmt.Sprintf("folder %s is not visible since %s: %s", r.Root, r.Since.In(cfg.Zone()).Format("15:04"), r.Why),
			notes:    []string{"Nothing from " + r.Root + " can be seen until it is back. Files taken before are safe; nothing is inferred from their absence."}})
	}
	for _, f := range cfg.Folders {
		c, err := s.silence(ctx, cfg, f, blind[f.Name], now)
		if err != nil {
			return err
		}
		if c != nil {
			all = append(all, *c)
		}
	}
	for _, c := range all {
		if err := s.tellCondition(ctx, c, now); err != nil {
			return err
		}
	}
	return s.tellUndelivered(ctx, now)
}

// silence judges whether a folder that should have filled tonight is silent.
func (s *Service) silence(ctx context.Context, cfg *settings.Settings, f settings.Folder, blind bool, now time.Time) (*condition, error) {
	if f.ExpectFrom == "" || f.Silence <= 0 || blind {
		return nil, nil
	}
	zone := cfg.Zone()
	night := naming.NightOf(now, zone, naming.Noon)
	first, err := onNight(night, f.ExpectFrom, zone)
	if err != nil {
		return nil, err
	}
	end, err := onNight(night, cfg.Laboratory.NightEnds, zone)
	if err != nil {
		return nil, err
	}
	if now.Before(first.Add(f.Silence)) || now.After(end) {
		return nil, nil
	}
	last, err := s.store.LastArrival(ctx, nil, f.Name, now)
	if err != nil {
		return nil, err
	}
	said := "no file so far"
	if !last.IsZero() {
		said = "the last file came " + last.In(zone).Format("2 Jan 15:04")
	}
	return &condition{kind: alert.SilentNight, key: f.Name + " " + night, instrument: f.Instrument, present: last.Before(first.Add(-2 * time.Hour)), since: first,
		sentence: fmt.Sprintf("no file from %s tonight; %s, usually the first comes by %s", f.Name, said, f.ExpectFrom)}, nil
}

// onNight is a clock time of a night: times before noon belong to the next morning.
func onNight(night, clock string, zone *time.Location) (time.Time, error) {
	t, err := time.ParseInLocation("2006-01-02 15:04", night+" "+clock, zone)
	if err != nil {
		return t, fmt.Errorf("clock time %q: %w", clock, err)
	}
	if t.Hour() < 12 {
		t, err = time.ParseInLocation("2006-01-02 15:04", t.AddDate(0, 0, 1).Format(time.DateOnly)+" "+clock, zone)
	}
	return t, err
}

// tellCondition speaks when a condition has lasted, and once when it is over.
func (s *Service) tellCondition(ctx context.Context, c condition, now time.Time) error {
	kind, _ := alert.KindOf(c.kind)
	mark := "condition|" + c.kind + "|" + c.key
	var said struct {
		Since time.Time `json:"since"`
		Told  bool      `json:"told"`
	}
	known, err := s.store.Watermark(ctx, nil, mark, &said)
	if err != nil {
		return err
	}
	content := alert.Content{Kind: c.kind, Key: c.key, At: now, Sentence: c.sentence, Notes: c.notes}
	if c.instrument != "" {
		content.Instruments = []string{c.instrument}
	}
	switch {
	case c.present && (!known || !said.Told) && now.Sub(c.since) >= kind.Hold:
		content.Why, said.Since, said.Told = alert.WhyOpened, c.since, true
	case !c.present && known && said.Told:
		content.Why, said.Told = alert.WhyClosed, false
		content.Sentence = strings.ToLower(kind.Title[:1]) + kind.Title[1:] + " is over: " + c.key
	default:
		return nil
	}
	return s.store.InTx(ctx, func(tx pgx.Tx) error {
		if err := s.store.PutWatermark(ctx, tx, mark, said, now); err != nil {
			return err
		}
		return s.tell(ctx, tx, fmt.Sprintf("%s|%s|%s|%s", c.kind, c.key, said.Since.UTC().Format(time.RFC3339), content.Why), content, nil)
	})
}

// tellUndelivered reports a receiver that is down through the others.
func (s *Service) tellUndelivered(ctx context.Context, now time.Time) error {
	pending, err := s.store.PendingDeliveries(ctx, nil, 500)
	if err != nil {
		return err
	}
	down := map[string]time.Time{}
	text := map[string]string{}
	for _, d := range pending {
		if d.Attempts >= 3 && now.Sub(d.Message.At) > 15*time.Minute && d.Message.Kind != alert.DeliveryFailing {
			if t, ok := down[d.Sink]; !ok || d.Message.At.Before(t) {
				down[d.Sink], text[d.Sink] = d.Message.At, d.LastError
			}
		}
	}
	var sinks []string
	for k := range down {
		sinks = append(sinks, k)
	}
	slices.Sort(sinks)
	for _, k := range sinks {
		c := condition{kind: alert.DeliveryFailing, key: k, present: true, since: down[k], sentence: fmt.Sprintf("messages to %s cannot be delivered since %s: %s", sinkKind(k), down[k].In(set(s).Zone()).Format("2 Jan 15:04"), text[k])}
		if err := s.tellCondition(ctx, c, now); err != nil {
			return err
		}
	}
	return nil
}

// tellAway says, once the database is back, that it was away.
func (s *Service) tellAway(ctx context.Context, from, to time.Time, waiting int) error {
	zone := set(s).Zone()
	return s.store.InTx(ctx, func(tx pgx.Tx) error {
		return s.tell(ctx, tx, "database.away|"+from.UTC().Format(time.RFC3339), alert.Content{Kind: "database.away", Key: "database", Why: alert.WhyClosed, At: to,
			Sentence: fmt.Sprintf("the database was away from %s to %s; %d files waited in their folders and were taken in afterwards", from.In(zone).Format("15:04"), to.In(zone).Format("15:04"), waiting),
			Notes:    []string{"A file that was overwritten meanwhile in its folder is lost to us; the export folder is the spool."}}, nil)
	})
}
