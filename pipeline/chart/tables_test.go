package chart

import (
	"encoding/csv"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// shared returns the path of a file beside the module, skipping the test where the
// published tables are not laid out.
func shared(t *testing.T, parts ...string) string {
	t.Helper()
	dir, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	for {
		if _, err := os.Stat(filepath.Join(dir, "go.mod")); err == nil {
			break
		}
		up := filepath.Dir(dir)
		if up == dir {
			t.Fatal("no go.mod above the package")
		}
		dir = up
	}
	path := filepath.Join(append([]string{dir, "..", "shared"}, parts...)...)
	if _, err := os.Stat(path); err != nil {
		t.Skipf("the table %s is not beside this source tree; the rows compiled into the tests are checked elsewhere", filepath.Join(parts...))
	}
	return path
}

// table reads a comma-separated file whose comment lines begin with #.
func table(t *testing.T, parts ...string) []map[string]string {
	t.Helper()
	f, err := os.Open(shared(t, parts...))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	r := csv.NewReader(f)
	r.Comment = '#'
	r.FieldsPerRecord = -1
	rows, err := r.ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	var out []map[string]string
	for _, row := range rows[1:] {
		m := map[string]string{}
		for i, name := range rows[0] {
			if i < len(row) {
				m[name] = row[i]
			}
		}
		out = append(out, m)
	}
	if len(out) == 0 {
		t.Fatalf("no rows in %v", parts)
	}
	return out
}

// figures reads one of the tables of published and recomputed statistics.
func figures(t *testing.T, name string) []map[string]string {
	t.Helper()
	return table(t, "check-values", "statistics", name)
}

func number(t *testing.T, s string) float64 {
	t.Helper()
	x, err := strconv.ParseFloat(strings.TrimSpace(s), 64)
	if err != nil {
		t.Fatalf("not a number: %q", s)
	}
	return x
}

// near fails unless got is want within a relative tolerance (absolute below one).
func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if math.IsNaN(got) || math.Abs(got-want) > tol*max(1, math.Abs(want)) {
		t.Errorf("%s: got %.10g, want %.10g", what, got, want)
	}
}
