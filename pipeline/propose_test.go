package pipeline

import (
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
	"time"

	"pkvigil/db"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
)

// TestInitPlacesTheSituations: from each of the 16 generated folders a
// proposal is made and used without an edit. Every file must be taken, files
// must share a set exactly when they do in truth, and every set must have what
// its computation needs. At least 14 of the 16 must come out so.
func TestInitPlacesTheSituations(t *testing.T) {
	placed := 0
	for n := 1; n <= 16; n++ {
		dir := filepath.Join(t.TempDir(), "U1")
		files := leave(n)
		deposit(t, dir, files)
		p, err := ProposeSettings(t.Context(), []string{dir}, ProposeOptions{Zone: "Europe/Vienna", DataDir: "/var/lib/pkvigil", Name: "proposed.toml", Now: time.Now()})
		if err != nil {
			t.Errorf("situation %d: %v", n, err)
			continue
		}
		if _, err := settings.Read(p.Text, "proposed.toml"); err != nil {
			t.Errorf("situation %d: %v", n, err)
		}
		faults := misplaced(p.Look, files)
		if len(faults) == 0 {
			placed++
			continue
		}
		t.Logf("situation %d: %d faults, first: %s", n, len(faults), strings.Join(faults[:min(3, len(faults))], "; "))
		if os.Getenv("PKVIGIL_SHOW") != "" {
			t.Logf("%s", p.Text)
		}
	}
	t.Logf("%d of 16 placed without an edit", placed)
	if placed < 14 {
		t.Errorf("%d of 16 situations placed, at least 14 are asked", placed)
	}
}

// misplaced lists what a look says differently from the truth.
func misplaced(l *DryLook, files []leftFile) []string {
	var out []string
	fate := map[string]DryFile{}
	for _, f := range l.Files {
		fate[f.Path] = f
	}
	toSet, toTruth := map[string]string{}, map[string]string{}
	for _, f := range files {
		got, ok := fate[naming.Normal(f.path)]
		if !ok {
			got = fate[f.path]
		}
		want := db.FileTaken
		if f.role == "copy" {
			want = db.FileTwin
		}
		if got.State != want {
			out = append(out, fmt.Sprintf("%s is %q %v", f.path, got.State, got.Places))
			continue
		}
		if f.set == "" || f.role == "copy" {
			continue
		}
		key := ""
		for _, s := range l.Sets {
			if slices.Contains(s.Files, f.path) {
				key = s.Key
			}
		}
		if key == "" {
			out = append(out, f.path+" is in no set")
			continue
		}
		if was, ok := toSet[f.set]; ok && was != key {
			out = append(out, fmt.Sprintf("set %s is split over %s and %s", f.set, was, key))
		}
		if was, ok := toTruth[key]; ok && was != f.set {
			out = append(out, fmt.Sprintf("%s joins %s and %s", key, was, f.set))
		}
		toSet[f.set], toTruth[key] = key, f.set
		if !strings.Contains(strings.Join(got.Places, " "), f.role) && f.role != "scan" {
			out = append(out, fmt.Sprintf("%s is %v, not %s", f.path, got.Places, f.role))
		}
	}
	for _, s := range l.Sets {
		if len(s.Rungs) < 8 || s.Pairing == "none" || strings.Contains(s.Pairing, "without") {
			out = append(out, fmt.Sprintf("%s has %d rungs, pH %s", s.Key, len(s.Rungs), s.Pairing))
		}
	}
	if len(l.Sets) == 0 {
		out = append(out, "no set")
	}
	return out
}

func TestInitMarksItsDoubts(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "export of 'the' \"left\" bench")
	deposit(t, dir, leave(1))
	deposit(t, dir, []leftFile{{path: "notes (draft).pdf", text: "no scan"}, {path: ".hidden", text: "x"}})
	p, err := ProposeSettings(t.Context(), []string{dir}, ProposeOptions{DataDir: "/srv/pk vigil", Name: "p.toml", Now: time.Now()})
	if err != nil {
		t.Fatal(err)
	}
	text := string(p.Text)
	for _, want := range []string{"# DOUBT: This machine does not say", "fits no rule and would be parked", "notes (draft).pdf", "#[[compound]]", "# DOUBT: The instrument is named", "[[instrument]]", "ignore = "} {
		if !strings.Contains(text, want) {
			t.Errorf("the proposal lacks %q:\n%s", want, text)
		}
	}
	if strings.Contains(text, "\n[[compound]]") {
		t.Error("a compound was declared although no file says what it is")
	}
	if n := strings.Count(text, "# DOUBT: "); n < len(p.Doubts) {
		t.Errorf("%d doubts told, %d marked", len(p.Doubts), n)
	}
	for line := range strings.Lines(text) {
		if strings.HasPrefix(line, "#") && len([]rune(line)) > 140 {
			t.Errorf("long comment: %s", line)
		}
	}
	if p.Look.Counts.Parked != 1 || p.Look.Counts.Litter != 1 {
		t.Errorf("parked %d, litter %d; expected one of each", p.Look.Counts.Parked, p.Look.Counts.Litter)
	}
	if _, err := ProposeSettings(t.Context(), []string{t.TempDir()}, ProposeOptions{Name: "p.toml", DataDir: "/x", Now: time.Now()}); err == nil || !strings.Contains(err.Error(), "holds no file") {
		t.Errorf("an empty folder: %v", err)
	}
	if _, err := ProposeSettings(t.Context(), []string{filepath.Join(dir, "nowhere")}, ProposeOptions{Name: "p.toml", DataDir: "/x", Now: time.Now()}); err == nil {
		t.Error("a folder that is not there was accepted")
	}
}
