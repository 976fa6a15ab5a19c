package pipeline

import (
	"context"
	"encoding/json"
	"fmt"
	"path/filepath"
	"slices"
	"strings"
	"time"

	"pkvigil/db"
	"pkvigil/pipeline/brief"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/rehearse"
	"pkvigil/pipeline/settings"
)

// A Summary is the whole history in a few numbers and sentences.
type Summary struct {
	Files, Results, Stands, Noted, Held, NoNumber int
	Cases                                         []CaseLine
	Brief                                         string // file of the newest brief
	Example                                       string // a set worth looking at
}

// A CaseLine is one case in a line.
type CaseLine struct {
	Opened, Sentence, Cause, State string
	Probability                    float64
	Touched                        int
}

// Summary gathers what a manager should know of everything stored.
func (s *Service) Summary(ctx context.Context) (*Summary, error) {
	out := &Summary{}
	results, err := s.store.ResultsBetween(ctx, nil, "0001-01-01", "9999-12-31", "")
	if err != nil {
		return nil, err
	}
	for _, r := range results {
		out.Results++
		switch r.Verdict {
		case db.Stands:
			out.Stands++
		case db.StandsNoted:
			out.Noted++
		case db.Held:
			out.Held++
			if r.Set.Kind == db.KindSample {
				out.Example = r.Set.Key
			}
		default:
			out.NoNumber++
		}
	}
	if out.Example == "" && len(results) > 0 {
		out.Example = results[len(results)-1].Set.Key
	}
	if out.Files, err = s.store.FilesStored(ctx); err != nil {
		return nil, err
	}
	cases, err := s.store.Cases(ctx, nil, s.clock.Now())
	if err != nil {
		return nil, err
	}
	zone := set(s).Zone()
	for _, c := range cases {
		l := CaseLine{Opened: c.OpenedAt.In(zone).Format("2 Jan"), Sentence: c.Sentence, Cause: c.Cause + ", " + c.Resource, State: c.State}
		rank, _, err := s.store.Ranking(ctx, nil, c.ID)
		if err != nil {
			return nil, err
		}
		if len(rank) > 0 {
			l.Cause, l.Probability = rank[0].Cause+", "+rank[0].Resource, rank[0].Probability
		}
		rows, err := s.store.Reach(ctx, nil, c.ID)
		if err != nil {
			return nil, err
		}
		l.Touched = len(rows)
		out.Cases = append(out.Cases, l)
	}
	briefs, err := filepath.Glob(filepath.Join(set(s).Storage.DataDir, "briefs", "brief-*.html"))
	if err == nil && len(briefs) > 0 {
		slices.Sort(briefs)
		out.Brief = briefs[len(briefs)-1]
	}
	return out, nil
}

// BriefFor gathers the brief of a night; "" means the newest night with sets.
func (s *Service) BriefFor(ctx context.Context, night string) (*brief.Data, error) {
	if night == "" {
		counts, err := s.store.NightCounts(ctx, nil, "0001-01-01", "9999-12-31")
		if err != nil {
			return nil, err
		}
		for _, c := range counts {
			night = max(night, c.Night)
		}
		if night == "" {
			return nil, fmt.Errorf("no night is stored yet: %w", ErrUnknownObject)
		}
	}
	if _, err := time.Parse(time.DateOnly, night); err != nil {
		return nil, fmt.Errorf("night %q: expected a date like 2026-09-14: %w", night, ErrUnknownObject)
	}
	end, err := onNight(night, "11:59", set(s).Zone())
	if err != nil {
		return nil, err
	}
	// What was said and set aside is looked up around the morning of that night.
	if now := s.clock.Now(); now.Before(end) {
		end = now
	}
	return s.BriefData(ctx, night, end)
}

// Reload takes new settings whole or not at all.
func (s *Service) Reload(ctx context.Context, next *settings.Settings, text []byte, readErr error) {
	if readErr != nil {
		s.log.Error().Err(readErr).Msg("settings not taken; the earlier ones stay in force")
		return
	}
	id, err := s.store.PutSettings(ctx, text, Program(), s.clock.Now())
	if err != nil {
		s.log.Error().Err(err).Msg("settings not taken; the database did not store them")
		return
	}
	s.adopt(next)
	s.mu.Lock()
	s.settingsID, s.text = id, text
	s.mu.Unlock()
	s.log.Info().Int64("version", id).Msg("settings read again; folders and workers change at the next start")
}

// Found states what the program reported in the plain words of the scorer.
func (s *Service) Found(ctx context.Context, story *rehearse.Story) (*rehearse.Found, error) {
	out := &rehearse.Found{}
	for _, f := range []func(context.Context, *rehearse.Story, *rehearse.Found) error{s.foundCases, s.foundSets, s.foundFiles, s.foundAbsences} {
		if err := f(ctx, story, out); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// storyNight numbers a date as the story does.
func storyNight(story *rehearse.Story, date string) int {
	return nightNumber(date) - nightNumber(story.Date(1)) + 1
}

func (s *Service) foundCases(ctx context.Context, story *rehearse.Story, out *rehearse.Found) error {
	cases, err := s.store.Cases(ctx, nil, s.clock.Now())
	if err != nil {
		return err
	}
	zone := set(s).Zone()
	night := func(t time.Time) int { return storyNight(story, naming.NightOf(t, zone, 17*time.Hour)) }
	said, err := s.store.SaidSince(ctx, nil, "drift.case", time.Unix(0, 0).UTC())
	if err != nil {
		return err
	}
	for _, c := range cases {
		_, name, _ := strings.Cut(c.Resource, " ")
		if name == "" {
			name = c.Resource
		}
		f := rehearse.FoundCase{Cause: c.Cause, Resource: name, Onset: storyNight(story, c.OnsetBest), Opened: night(c.OpenedAt)}
		if c.State == db.CaseClosed {
			f.Closed = night(c.At)
		}
		rank, _, err := s.store.Ranking(ctx, nil, c.ID)
		if err != nil {
			return err
		}
		for _, r := range rank {
			if r.Rank == 1 { // the thing accused now, not the one the case was opened with
				if _, f.Resource, _ = strings.Cut(r.Resource, " "); f.Resource == "" {
					f.Resource = r.Resource
				}
			}
			if r.Rank > 1 {
				f.Others = append(f.Others, r.Cause)
			}
		}
		for _, m := range said {
			if strings.HasPrefix(m.Key, "case|"+c.Key+"|") {
				f.Messages++
				if m.Reason == "opened" {
					f.Openings++
				}
			}
		}
		out.Cases = append(out.Cases, f)
	}
	return nil
}

// storySet names a set as the story does: instrument and name, with its slot and night where it has them.
func storySet(x db.Set) string { return x.Instrument + "/" + x.Name }

func (s *Service) foundSets(ctx context.Context, _ *rehearse.Story, out *rehearse.Found) error {
	results, err := s.store.ResultsBetween(ctx, nil, "0001-01-01", "9999-12-31", "")
	if err != nil {
		return err
	}
	waited, err := s.store.EverWaited(ctx)
	if err != nil {
		return err
	}
	seen := map[int64]bool{}
	for _, r := range results {
		seen[r.SetID] = true
		f := rehearse.FoundSet{Set: storySet(r.Set), Verdict: r.Standing.Verdict, Revision: r.SetRevision, Waited: waited[r.SetID]}
		for _, c := range r.Checks {
			if c.Outcome != db.Stands {
				f.Checks = append(f.Checks, c.Key)
				f.Asked = f.Asked || c.Key == "label.exchange" || c.Key == "ladder.shift" || c.Key == "lot.unknown" || c.Key == "lot.new"
			}
		}
		raw, err := s.store.RecordOf(ctx, nil, r.ID)
		if err != nil {
			return err
		}
		var rec storedRecord
		if err := json.Unmarshal(raw, &rec); err != nil {
			return fmt.Errorf("calculation record of result %d: %w", r.ID, err)
		}
		f.Corrected = len(rec.Used.Corrections) > 0
		for _, p := range r.PKa {
			f.PKa, f.U = append(f.PKa, p.PKa), append(f.U, p.Expanded)
		}
		for _, g := range r.Rungs {
			if g.LeftOut {
				f.LeftOut = append(f.LeftOut, g.Key)
			}
		}
		out.Sets = append(out.Sets, f)
	}
	open, err := s.store.OpenSets(ctx, nil)
	if err != nil {
		return err
	}
	for _, o := range open {
		if !seen[o.ID] {
			out.Sets = append(out.Sets, rehearse.FoundSet{Set: storySet(o.Set), Verdict: "waiting", Revision: o.Revision, Waited: true})
		}
	}
	return nil
}

func (s *Service) foundFiles(ctx context.Context, _ *rehearse.Story, out *rehearse.Found) error {
	for _, state := range []string{db.FileRefused, db.FileParked, db.FileTwin} {
		files, err := s.store.FilesIn(ctx, nil, state, time.Unix(0, 0).UTC(), s.clock.Now())
		if err != nil {
			return err
		}
		for _, f := range files {
			out.Files = append(out.Files, rehearse.FoundFile{File: f.Root + "/" + f.Path, State: f.State})
		}
	}
	return nil
}

func (s *Service) foundAbsences(ctx context.Context, story *rehearse.Story, out *rehearse.Found) error {
	said, err := s.store.SaidSince(ctx, nil, "", time.Unix(0, 0).UTC())
	if err != nil {
		return err
	}
	zone := set(s).Zone()
	for _, m := range said {
		parts := strings.Split(m.Key, "|")
		key := map[string]string{"root.blind": "share.gone", "night.silent": "night.silent", "database.away": "db.down", "reference.unrun": "ref.absent"}[m.Kind]
		if key == "" || len(parts) < 2 || m.Kind != "database.away" && m.Reason == "closed" {
			continue
		}
		resource, _, _ := strings.Cut(parts[1], " ")
		out.Absences = append(out.Absences, rehearse.FoundAbsence{Key: key, Resource: resource, Night: storyNight(story, naming.NightOf(m.At, zone, 17*time.Hour))})
	}
	return nil
}
