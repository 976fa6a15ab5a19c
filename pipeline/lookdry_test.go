package pipeline

import (
	"fmt"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
)

// lookSettings are settings for one folder with names of the third kind of the cookbook.
func lookSettings(t *testing.T, dir, pattern string) *settings.Settings {
	t.Helper()
	text := fmt.Sprintf("[laboratory]\nzone = \"Europe/Vienna\"\n[[folder]]\nname = \"U1\"\npath = %q\ninstrument = \"U1\"\n[[rule]]\nname = \"sets\"\npattern = '%s'\n[[compound]]\nname = \"CRR\"\ncharge = -1\npka = [8.2]\n[[instrument]]\nname = \"U1\"\n", dir, pattern)
	set, err := settings.Read([]byte(text), "look.toml")
	if err != nil {
		t.Fatal(err)
	}
	return set
}

const lookPattern = `^(?P<set>[A-Z]{2,4}-\d+)_(?:r(?P<rung>\d{2})|(?P<role>blank|ph))(?: \((?P<copy>\d)\))?\.csv$`

// lookFolder is a folder with one whole set and one of every kind of trouble.
func lookFolder(t *testing.T) string {
	dir := t.TempDir()
	l := &leaver{}
	l.ladder("a", "CRR-104_r%02d.csv", "CRR-104_blank.csv", "CRR-104_ph.csv", 1)
	l.ladder("b", "CRR-105_r%02d.csv", "CRR-105_blank.csv", "", 1)
	l.ladder("c", "CRR-106_r%02d.csv", "CRR-106_blank.csv", "CRR-106_ph.csv", 1)
	files := l.files
	for i := range files {
		if files[i].path == "CRR-106_r07.csv" {
			files[i].path = "CRR-l06_r07.csv" // a small L for a one
		}
	}
	files = append(files,
		leftFile{path: "CRR-104_r03 (2).csv", text: files[2].text},
		leftFile{path: "CRR-107_r01.csv", text: "Wavelength (nm),Absorbance\n400,0.1\n401,abc\n402,0.3\n"},
		leftFile{path: "CRR-107_r02.csv", text: files[0].text}, // the numbers of another rung
		leftFile{path: "CRR-104_r09.csv.part", text: "x"},
		leftFile{path: "empty_r01.csv", text: ""},
		leftFile{path: "report.pdf", text: "%PDF"})
	deposit(t, dir, files)
	// The oldest first: which of two equal files counts depends on it.
	for i, f := range files {
		at := time.Date(2026, 3, 11, 20, 0, i, 0, time.UTC)
		if err := os.Chtimes(filepath.Join(dir, f.path), at, at); err != nil {
			t.Fatal(err)
		}
	}
	return dir
}

func TestLookDry(t *testing.T) {
	dir := lookFolder(t)
	set := lookSettings(t, dir, lookPattern)
	before := stamps(t, dir)
	l, err := LookDry(t.Context(), set, time.Now(), time.Time{})
	if err != nil {
		t.Fatal(err)
	}
	if after := stamps(t, dir); after != before {
		t.Errorf("the folder was changed:\n%s\n%s", before, after)
	}
	states := map[string]DrySet{}
	for _, s := range l.Sets {
		states[s.Set] = s
	}
	if s := states["CRR-104"]; s.State != naming.Complete || s.Pairing != "by key from a table" || len(s.Rungs) != 8 || s.Compound != "CRR" || s.Night != "2026-03-11" {
		t.Errorf("CRR-104: %s, pH %s, %d rungs, compound %q, night %s", s.State, s.Pairing, len(s.Rungs), s.Compound, s.Night)
	}
	if s := states["CRR-105"]; s.State != naming.Waiting || strings.Join(s.Missing, "; ") != "the pH table" {
		t.Errorf("CRR-105: %s for %v", s.State, s.Missing)
	}
	if s := states["CRR-106"]; s.State != naming.Waiting || !strings.Contains(strings.Join(s.Missing, "; "), "rung 07") {
		t.Errorf("CRR-106: %s for %v", s.State, s.Missing)
	}
	parked := map[string]DryParked{}
	for _, p := range l.Parked {
		parked[p.Path] = p
	}
	if p := parked["CRR-l06_r07.csv"]; p.Set != "CRR-106" || !strings.Contains(p.Suggest, "pkvigil adopt") {
		t.Errorf("the misspelt file: %+v", p)
	}
	if _, ok := parked["report.pdf"]; !ok || len(parked) != 2 {
		t.Errorf("parked: %+v", l.Parked)
	}
	if len(l.Twins) != 1 || l.Twins[0].Path != "CRR-104_r03 (2).csv" || l.Twins[0].Of != "U1/CRR-104_r03.csv" {
		t.Errorf("twins: %+v", l.Twins)
	}
	refused := map[string]DryRefused{}
	for _, r := range l.Refused {
		refused[r.Path] = r
	}
	if r := refused["CRR-107_r01.csv"]; r.Line != 3 || r.Found == "" || r.Expected == "" || r.Remedy == "" {
		t.Errorf("the spoilt file: %+v", r)
	}
	if r := refused["CRR-107_r02.csv"]; !strings.Contains(r.Sentence, "U1/CRR-104_r01.csv") {
		t.Errorf("the doubled numbers: %+v", r)
	}
	if c := l.Counts; c.Litter != 1 || c.Waits != 1 || c.Complete != 1 || c.Waiting != 2 || !l.Attention() {
		t.Errorf("counts: %+v", c)
	}
}

func stamps(t *testing.T, dir string) string {
	t.Helper()
	var b strings.Builder
	list, err := os.ReadDir(dir)
	if err != nil {
		t.Fatal(err)
	}
	for _, e := range list {
		i, err := e.Info()
		if err != nil {
			t.Fatal(err)
		}
		fmt.Fprintln(&b, e.Name(), i.Size(), i.ModTime())
	}
	return b.String()
}

func TestLookDrySince(t *testing.T) {
	set := lookSettings(t, lookFolder(t), lookPattern)
	l, err := LookDry(t.Context(), set, time.Now(), time.Date(2026, 3, 12, 0, 0, 0, 0, time.UTC))
	if err != nil {
		t.Fatal(err)
	}
	if l.Counts.Files != 0 || l.Folders[0].Older == 0 {
		t.Errorf("%d files younger than the youngest, %d older", l.Counts.Files, l.Folders[0].Older)
	}
}

func TestLookDryCompares(t *testing.T) {
	dir := lookFolder(t)
	a, err := LookDry(t.Context(), lookSettings(t, dir, lookPattern), time.Now(), time.Time{})
	if err != nil {
		t.Fatal(err)
	}
	b, err := LookDry(t.Context(), lookSettings(t, dir, strings.Replace(lookPattern, `\d+)_`, `[\dl]+)_`, 1)), time.Now(), time.Time{})
	if err != nil {
		t.Fatal(err)
	}
	changes := a.Compare(b)
	var text []string
	for _, c := range changes {
		text = append(text, c.What+" "+c.Name+": "+c.Before+" -> "+c.After)
	}
	all := strings.Join(text, "\n")
	if !strings.Contains(all, "file U1/CRR-l06_r07.csv: parked -> taken: CRR-l06 scan 07") || !strings.Contains(all, "set U1/2026-03-11/CRR-l06: not there -> waiting") || len(changes) != 2 {
		t.Errorf("changes:\n%s", all)
	}
	if again := a.Compare(a); len(again) != 0 {
		t.Errorf("a look differs from itself: %v", again)
	}
}

// TestLookDryByClock: one reading near a scan is its pH, two are a question,
// and scans of a run without its sheet are parked with the reason.
func TestLookDryByClock(t *testing.T) {
	dir := t.TempDir()
	l := &leaver{}
	l.byClock(0, "TB2219")
	l.files = append(l.files, leftFile{path: "S118_A05.csv", text: l.scan(7)})
	deposit(t, dir, l.files)
	text := fmt.Sprintf("[laboratory]\nzone = \"Europe/Vienna\"\n[[folder]]\nname = \"U1\"\npath = %q\ninstrument = \"U1\"\n"+
		"[[rule]]\nname = \"scans\"\npair = \"clock\"\npattern = '^(?P<stamp>\\d{8}-\\d{6})-(?P<set>[A-Z]{2}\\d{4})\\.txt$'\n"+
		"[[rule]]\nname = \"log\"\npattern = '^(?P<role>phlog)_(?P<date>\\d{8})\\.csv$'\n"+
		"[[rule]]\nname = \"tray\"\npattern = '^(?P<run>S\\d+)_(?P<pos>[A-H]\\d{2})\\.csv$'\n[[instrument]]\nname = \"U1\"\n", dir)
	set, err := settings.Read([]byte(text), "clock.toml")
	if err != nil {
		t.Fatal(err)
	}
	look := func() *DryLook {
		l, err := LookDry(t.Context(), set, time.Now(), time.Time{})
		if err != nil {
			t.Fatal(err)
		}
		return l
	}
	d := look()
	if len(d.Sets) != 1 || d.Sets[0].Pairing != "by clock" || len(d.Sets[0].Rungs) != 8 {
		t.Fatalf("sets: %+v", d.Sets)
	}
	if len(d.Parked) != 1 || !strings.Contains(d.Parked[0].Why, "sheet of run S118") {
		t.Errorf("parked: %+v", d.Parked)
	}
	log := filepath.Join(dir, "phlog_20260311.csv")
	was, err := os.ReadFile(log)
	if err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(log, []byte(strings.Replace(string(was), "\n2026-03-11 20:45", "\n2026-03-11 20:31:50,7.99,25.0\n2026-03-11 20:45", 1)), 0o644); err != nil {
		t.Fatal(err)
	}
	if s := look().Sets[0]; s.State != naming.Waiting || !strings.Contains(strings.Join(s.Missing, "; "), "instead of several") {
		t.Errorf("two readings for one scan: %s for %v", s.State, s.Missing)
	}
}
