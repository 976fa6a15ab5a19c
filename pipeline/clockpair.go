package pipeline

import (
	"context"
	"fmt"
	"slices"
	"strings"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
	"pkvigil/pipeline/verdict"
)

// A pH reading belongs to a scan by clock when it was taken from a little
// before to ten minutes after it (common practice, no source).
const (
	readBefore = 2 * time.Minute
	readAfter  = 10 * time.Minute
)

// loggedPH says whether a file is a pH log of its own: its name gives neither
// set nor run, and its rows find their scans by clock.
func loggedPH(m naming.Match) bool {
	return m.Role == naming.RolePH && m.Set == "" && m.Run == ""
}

// clockRung names a scan that is paired by clock and has no number after its moment.
func clockRung(m naming.Match, rule naming.Rule, at time.Time) naming.Match {
	if rule.Pair == "clock" && m.Rung == "" && m.Role == naming.RoleScan && !at.IsZero() {
		m.Rung = at.UTC().Format("20060102T150405")
	}
	return m
}

// waitingForClock lists the open sets of an instrument that the readings of a log may belong to.
func waitingForClock(it *item, open []db.OpenSet) []int64 {
	var first, last time.Time
	for _, r := range it.content.Readings {
		if r.Measured.IsZero() {
			continue
		}
		if first.IsZero() || r.Measured.Before(first) {
			first = r.Measured
		}
		if r.Measured.After(last) {
			last = r.Measured
		}
	}
	var out []int64
	for _, o := range open {
		mine := it.folder == nil || it.folder.Instrument == "" || it.folder.Instrument == o.Instrument
		if mine && !first.IsZero() && o.LastScanAt.After(first.Add(-time.Hour)) && o.LastScanAt.Before(last.Add(3*time.Hour)) {
			out = append(out, o.ID)
		}
	}
	return out
}

// clockReadings gives the logged readings around the scans of a set, on the
// clock of the scans; files narrows to those files, nil finds them.
func (s *Service) clockReadings(ctx context.Context, q db.Querier, cfg *settings.Settings, instrument, scanRoot string, scans []time.Time, files []int64) ([]db.ReadingRow, []int64, error) {
	scans = slices.DeleteFunc(slices.Clone(scans), time.Time.IsZero)
	if len(scans) == 0 {
		return nil, nil, nil
	}
	ahead := func(root string) time.Duration {
		if f := cfg.FolderByName(root); f != nil {
			return f.ClockAhead
		}
		return 0
	}
	var rows []db.ReadingRow
	var err error
	if files != nil {
		rows, err = s.store.ReadingsOf(ctx, q, files)
	} else {
		const slack = 24 * time.Hour // clocks of two machines may be that far apart
		rows, err = s.store.ReadingsBetween(ctx, q, slices.MinFunc(scans, time.Time.Compare).Add(-slack), slices.MaxFunc(scans, time.Time.Compare).Add(slack))
	}
	if err != nil {
		return nil, nil, err
	}
	logs := map[int64]*db.File{}
	var out []db.ReadingRow
	var used []int64
	for _, r := range rows {
		f, ok := logs[r.FileID]
		if !ok {
			if f, err = s.store.FileByID(ctx, q, r.FileID); err != nil {
				return nil, nil, err
			}
			if folder := cfg.FolderByName(f.Root); f.Match == nil || !loggedPH(*f.Match) || folder != nil && folder.Instrument != "" && folder.Instrument != instrument {
				f = nil
			}
			logs[r.FileID] = f
		}
		if f == nil || r.Measured.IsZero() {
			continue
		}
		r.Measured = r.Measured.Add(ahead(scanRoot) - ahead(f.Root))
		if slices.ContainsFunc(scans, func(t time.Time) bool { return inWindow(r.Measured, t) }) {
			out = append(out, r)
			if !slices.Contains(used, r.FileID) {
				used = append(used, r.FileID)
			}
		}
	}
	slices.Sort(used)
	return out, used, nil
}

func inWindow(reading, scan time.Time) bool {
	d := reading.Sub(scan)
	return d >= -readBefore && d <= readAfter
}

// pairedByClock tells completeness which scans of a set have their reading in a log.
func (s *Service) pairedByClock(ctx context.Context, tx pgx.Tx, o db.OpenSet, members []db.Member, p *naming.Progress) error {
	cfg, rules, _ := s.current()
	var scans []time.Time
	var at []int // of p.Members
	root, n := "", -1
	for _, m := range members {
		if !m.Active {
			continue
		}
		n++
		if rule, ok := rules.Rule(m.Rule); !ok || rule.Pair != "clock" || m.Role != naming.RoleScan {
			continue
		}
		if root == "" {
			f, err := s.store.FileByID(ctx, tx, m.FileID)
			if err != nil {
				return err
			}
			root = f.Root
		}
		scans, at = append(scans, m.Measured), append(at, n)
	}
	if len(scans) == 0 {
		return nil
	}
	readings, _, err := s.clockReadings(ctx, tx, cfg, o.Instrument, root, scans, nil)
	if err != nil {
		return err
	}
	for i, t := range scans {
		if slices.ContainsFunc(readings, func(r db.ReadingRow) bool { return inWindow(r.Measured, t) }) {
			p.Members[at[i]].HasPH = true
		}
	}
	return nil
}

// readByClock adds the logged readings to the input of a set paired by clock.
// files nil finds them and notes them; else those are taken.
func (s *Service) readByClock(ctx context.Context, cfg *settings.Settings, in *assay.Input, u *used, data *db.SetData) error {
	if !in.PairClock {
		return nil
	}
	var scans []time.Time
	root := ""
	for _, m := range data.Members {
		if m.Scan != nil && m.Role == naming.RoleScan {
			scans, root = append(scans, m.Scan.Measured), m.Root
		}
	}
	rows, files, err := s.clockReadings(ctx, nil, cfg, data.Set.Instrument, root, scans, u.Logs)
	if err != nil {
		return err
	}
	for _, r := range rows {
		in.Readings = append(in.Readings, r.Reading)
	}
	u.Logs = files
	return nil
}

// holdTwice holds a set in which two readings claim a scan: which one is meant
// only a person knows.
func holdTwice(out *assay.Outcome) {
	var keys []string
	for _, l := range out.LeftOut {
		if l.Check == "ph.twice" {
			keys = append(keys, l.Key)
		}
	}
	r := &out.Report
	if len(keys) == 0 || r.Verdict == verdict.NoNumber {
		return
	}
	action := "Say which reading belongs to " + strings.Join(keys, ", ") + ": export the log again without the other."
	r.Verdict = verdict.Held
	r.Checks = slices.Insert(slices.Clone(r.Checks), 0, verdict.Check{Key: "ph.twice", Note: verdict.Anything(), Hold: verdict.Anything(), Outcome: verdict.Held, Action: action,
		Sentence: fmt.Sprintf("Two or more pH readings claim %s; none was used.", strings.Join(keys, ", "))})
	r.Actions = slices.Insert(slices.Clone(r.Actions), 0, action)
}
