package pipeline

import (
	"context"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"time"
)

// Health says whether work is being stored: the database answers, and every
// folder this process sweeps was looked at and stored a short while ago.
func (s *Service) Health(ctx context.Context) (bool, map[string]any) {
	facts := map[string]any{"program": Program()}
	v, err := s.store.SchemaVersion(ctx)
	if err != nil {
		facts["database"] = "does not answer"
		return false, facts
	}
	facts["schema"] = v
	roots, err := s.store.RootStates(ctx, nil)
	if err != nil {
		facts["database"] = "does not answer"
		return false, facts
	}
	ok := true
	now := s.clock.Now()
	folders := map[string]any{}
	for _, r := range roots {
		if set(s).FolderByName(r.Root) == nil {
			continue
		}
		age := now.Sub(r.LookedAt)
		folders[r.Root] = map[string]any{"visible": r.Visible, "stored_look_seconds": age.Seconds(), "settling": r.Settling}
		ok = ok && (age < 5*time.Minute || !s.cfg.Sweep)
	}
	facts["folders"] = folders
	return ok, facts
}

// Gauges gives the present numbers for /metrics.
func (s *Service) Gauges(ctx context.Context) (map[string]map[string]float64, error) {
	return s.store.Gauges(ctx, s.clock.Now())
}

// Briefs lists the nights that have a brief, newest first.
func (s *Service) Briefs() []string {
	files, err := filepath.Glob(filepath.Join(set(s).Storage.DataDir, "briefs", "brief-*.html"))
	if err != nil {
		return nil
	}
	var out []string
	for _, f := range files {
		out = append(out, strings.TrimSuffix(strings.TrimPrefix(filepath.Base(f), "brief-"), ".html"))
	}
	slices.Sort(out)
	slices.Reverse(out)
	return out
}

// Brief gives the page of a listed night: the name is looked up in the list
// and never becomes a path by itself.
func (s *Service) Brief(night string) ([]byte, bool) {
	if !slices.Contains(s.Briefs(), night) {
		return nil, false
	}
	b, err := os.ReadFile(filepath.Join(set(s).Storage.DataDir, "briefs", "brief-"+night+".html"))
	return b, err == nil
}
