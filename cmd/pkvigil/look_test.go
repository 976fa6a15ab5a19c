package main

import (
	"bytes"
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// bench makes a folder with three sets of an invented dye; the second lacks
// its pH table, and one file of the third is misspelt.
func bench(t *testing.T) string {
	t.Helper()
	dir := filepath.Join(t.TempDir(), "U1")
	if err := os.MkdirAll(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	n := 0
	write := func(name, text string) {
		if err := os.WriteFile(filepath.Join(dir, name), []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	scan := func(ph float64) string {
		n++
		b := "Wavelength (nm),Absorbance\n"
		for nm := 400; nm <= 600; nm += 10 {
			a := 0.5 / (1 + math.Pow(10, 7.2-ph)) * math.Exp(-math.Pow(float64(nm-560)/30, 2))
			b += fmt.Sprintf("%d,%.5f\n", nm, a+1e-5*float64(n))
		}
		return b
	}
	for _, set := range []string{"CRR-104", "CRR-105", "CRR-106"} {
		table := "rung,pH\n"
		for r := 1; r <= 7; r++ {
			name := fmt.Sprintf("%s_r%02d.csv", set, r)
			if set == "CRR-106" && r == 4 {
				name = "CRR-l06_r04.csv"
			}
			write(name, scan(6+0.4*float64(r)))
			table += fmt.Sprintf("%02d,%.2f\n", r, 6+0.4*float64(r))
		}
		write(set+"_blank.csv", scan(0))
		if set != "CRR-105" {
			write(set+"_ph.csv", table)
		}
	}
	return dir
}

// said runs the program and gives its exit code and what it wrote.
func said(t *testing.T, args ...string) (int, string, string) {
	t.Helper()
	var out, err bytes.Buffer
	code := run(t.Context(), args, &out, &err)
	return code, out.String(), err.String()
}

func TestInitThenLook(t *testing.T) {
	dir := bench(t)
	file := filepath.Join(t.TempDir(), "new.toml")
	code, out, errs := said(t, "init", dir, "-s", file)
	if code != exitOK {
		t.Fatalf("init ended with %d: %s", code, errs)
	}
	for _, want := range []string{"wrote " + file, "DOUBTS", "pkvigil watch -s", "CRR-106"} {
		if !strings.Contains(out, want) {
			t.Errorf("init does not say %q:\n%s", want, out)
		}
	}
	if code, _, errs := said(t, "init", dir, "-s", file); code != exitUsage || !strings.Contains(errs, "not overwritten") {
		t.Errorf("a second init ended with %d: %s", code, errs)
	}
	code, out, errs = said(t, "look", "-s", file)
	if code != exitFound {
		t.Fatalf("look ended with %d: %s", code, errs)
	}
	for _, want := range []string{"complete  U1/", "waits for the pH table", "the scan of rung 04", "PARKED (1)", "CRR-l06_r04.csv", "pkvigil adopt", "3 sets: 1 would be computed, 2 wait"} {
		if !strings.Contains(out, want) {
			t.Errorf("look does not say %q:\n%s", want, out)
		}
	}
	for line := range strings.Lines(out) {
		if len([]rune(strings.TrimRight(line, "\n"))) > columns && !strings.Contains(line, dir) {
			t.Errorf("a line of more than %d columns: %s", columns, line)
		}
	}
	if err := os.Rename(filepath.Join(dir, "CRR-l06_r04.csv"), filepath.Join(dir, "CRR-106_r04.csv")); err != nil {
		t.Fatal(err)
	}
	if err := os.WriteFile(filepath.Join(dir, "CRR-105_ph.csv"), []byte("rung,pH\n01,6.4\n02,6.8\n03,7.2\n04,7.6\n05,8\n06,8.4\n07,8.8\n"), 0o644); err != nil {
		t.Fatal(err)
	}
	if code, out, errs := said(t, "look", "-s", file, "--rungs"); code != exitOK || !strings.Contains(out, "pH  6.400") {
		t.Errorf("with everything there look ended with %d: %s\n%s", code, errs, out)
	}
}

func TestLookAnswersMachinesAndCompares(t *testing.T) {
	dir := bench(t)
	file := filepath.Join(t.TempDir(), "p.toml")
	if code, _, errs := said(t, "init", dir, "-s", file); code != exitOK {
		t.Fatal(errs)
	}
	code, out, _ := said(t, "look", "-s", file, "--json")
	var answer struct {
		Version int
		Answer  struct {
			Counts struct{ Files, Parked, Complete int }
			Sets   []struct{ Key, State string }
		}
	}
	if err := json.Unmarshal([]byte(out), &answer); err != nil || code != exitFound || answer.Version != 1 || answer.Answer.Counts.Parked != 1 || len(answer.Answer.Sets) != 3 {
		t.Errorf("%d, %v: %s", code, err, out[:min(len(out), 400)])
	}
	text, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	other := filepath.Join(t.TempDir(), "other.toml")
	if err := os.WriteFile(other, bytes.ReplaceAll(text, []byte(`\d{3})_`), []byte(`[\dl]{3})_`)), 0o644); err != nil {
		t.Fatal(err)
	}
	code, out, errs := said(t, "look", "-s", file, "--rules", other)
	if code != exitFound || !strings.Contains(out, "file U1/CRR-l06_r04.csv") || !strings.Contains(out, "then   taken: CRR-l06 scan 04") {
		t.Errorf("%d: %s%s", code, out, errs)
	}
	if code, out, _ := said(t, "look", "-s", file, "--rules", file); code != exitOK || !strings.Contains(out, "Nothing would be sorted differently") {
		t.Errorf("%d: %s", code, out)
	}
	if code, out, _ := said(t, "look", "-s", file, "--since", "1d"); code != exitFound || !strings.Contains(out, "3 sets") {
		t.Errorf("%d: %s", code, out)
	}
	if code, _, errs := said(t, "look", "-s", file, "--since", "yesterday"); code != exitUsage {
		t.Errorf("%d: %s", code, errs)
	}
	code, out, errs = said(t, "look", "-s", file, "--explain", filepath.Join(dir, "CRR-104_r03.csv"))
	if code != exitOK || !strings.Contains(out, "set CRR-104, rung 03") || !strings.Contains(out, "[[layout]]") {
		t.Errorf("%d: %s%s", code, out, errs)
	}
	if code, out, _ := said(t, "look", "-s", "nowhere.toml", "--explain", filepath.Join(dir, "CRR-104_r03.csv")); code != exitOK || !strings.Contains(out, "[[layout]]") {
		t.Errorf("without settings: %d: %s", code, out)
	}
}

func TestVerifyRecords(t *testing.T) {
	file := filepath.Join(t.TempDir(), "record.json")
	code, out, errs := said(t, "verify", "--record", file)
	if code != exitOK || !strings.Contains(out, ", 0 failed") {
		t.Fatalf("verify ended with %d: %s%s", code, out, errs)
	}
	b, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	var r verifyRecord
	if err := json.Unmarshal(b, &r); err != nil {
		t.Fatal(err)
	}
	if r.Version != 1 || r.At.IsZero() || r.Architecture == "" || !strings.HasPrefix(r.Program, "pkvigil ") || len(r.Rows) < 1000 || r.Rows[0].Source == "" {
		t.Errorf("the record: %+v", r.Groups)
	}
	if code, _, errs := said(t, "verify", "--only", "Nernst", "--record", file); code != exitUsage || !strings.Contains(errs, "not overwritten") {
		t.Errorf("a second record over the first: %d %s", code, errs)
	}
	if code, out, _ := said(t, "verify", "--only", "nernst", "--all"); code != exitOK || !strings.Contains(out, "expected 59.1593") {
		t.Errorf("%d: %s", code, out)
	}
	if code, _, _ := said(t, "verify", "--only", "nothing of the kind"); code != exitUsage {
		t.Errorf("an unknown group ended with %d", code)
	}
}
