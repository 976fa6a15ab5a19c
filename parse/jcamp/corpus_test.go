package jcamp

import (
	"encoding/csv"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"pkvigil/parse"
)

// shared finds a folder of real files beside the module, which are not part of it.
func shared(t testing.TB, elem ...string) string {
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
			t.Skip("no go.mod above the test: the module root is not known")
		}
		dir = up
	}
	path := filepath.Join(append([]string{dir, "..", "shared"}, elem...)...)
	if _, err := os.Stat(path); err != nil {
		t.Skipf("the shared files are not here: %v", err)
	}
	return path
}

// expected is one row of the table of expected results: one table of a file.
type expected struct {
	path, page, status string
	block, table       int
	n, missing         int
	points             [5]struct {
		i    int
		x, y float64
	}
	sum, lo, hi float64
	bare        bool // no table is expected at all
}

func corpus(t testing.TB) (dir string, rows map[string][]expected, order []string) {
	dir = shared(t, "data", "jcamp")
	f, err := os.Open(filepath.Join(dir, "expected.csv"))
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	all, err := csv.NewReader(f).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	col := map[string]int{}
	for i, h := range all[0] {
		col[h] = i
	}
	rows = map[string][]expected{}
	for _, r := range all[1:] {
		str := func(k string) string { return r[col[k]] }
		num := func(k string) float64 { v, _ := strconv.ParseFloat(r[col[k]], 64); return v }
		e := expected{path: str("path"), page: str("page"), status: str("status"), block: int(num("block")), table: int(num("table")), bare: str("table") == "",
			n: int(num("npoints")), missing: int(num("n_missing")), sum: num("sum_y"), lo: num("min_y"), hi: num("max_y")}
		for i := range e.points {
			e.points[i].i, e.points[i].x, e.points[i].y = int(num(fmt.Sprintf("i%d", i))), num(fmt.Sprintf("x%d", i)), num(fmt.Sprintf("y%d", i))
		}
		if _, ok := rows[e.path]; !ok {
			order = append(order, e.path)
		}
		rows[e.path] = append(rows[e.path], e)
	}
	return dir, rows, order
}

// near compares at relative 1e-9; the table of expected results is rounded to
// 12 decimals.
func near(a, b float64) bool {
	return math.Abs(a-b) <= max(1e-9*max(math.Abs(a), math.Abs(b)), 0.501e-12)
}

// differs says how a decoded table deviates from the expected one.
func differs(t *Table, e expected) string {
	if len(t.Y) != e.n || t.Missing != e.missing {
		return fmt.Sprintf("%d points, %d missing; expected %d, %d", len(t.Y), t.Missing, e.n, e.missing)
	}
	for _, p := range e.points {
		if !near(t.X[p.i], p.x) && math.Abs(t.X[p.i]-p.x) > 1e-9*math.Abs(t.X[len(t.X)-1]-t.X[0]) || !near(t.Y[p.i], p.y) {
			return fmt.Sprintf("point %d is (%.12g, %.12g), expected (%.12g, %.12g)", p.i, t.X[p.i], t.Y[p.i], p.x, p.y)
		}
	}
	sum, lo, hi, largest := 0.0, math.Inf(1), math.Inf(-1), 0.0
	for _, v := range t.Y {
		if v == v {
			sum, lo, hi, largest = sum+v, min(lo, v), max(hi, v), max(largest, math.Abs(v))
		}
	}
	if math.Abs(sum-e.sum) > 1e-9*float64(e.n)*largest || !near(lo, e.lo) || !near(hi, e.hi) {
		return fmt.Sprintf("sum %.12g, extremes %.12g and %.12g; expected %.12g, %.12g, %.12g", sum, lo, hi, e.sum, e.lo, e.hi)
	}
	return ""
}

// The real files decode to the numbers that an independent decoder found;
// damaged tables are refused; those that contradict themselves carry a remark.
func TestCorpus(t *testing.T) {
	dir, rows, order := corpus(t)
	counts := map[string]int{}
	for _, path := range order {
		data, err := os.ReadFile(filepath.Join(dir, path))
		if err != nil {
			t.Fatal(err)
		}
		f, err := Decode(path, data, parse.Options{})
		tally := map[string]int{}
		why, remarks := "", 0
		if err != nil {
			why = err.Error()
		} else {
			remarks = len(f.Remarks)
		}
		for _, e := range rows[path] {
			result := judge(f, err, e)
			counts[e.status+" "+result.outcome]++
			tally[result.outcome]++
			remarks += result.remarks
			if result.why != "" {
				why = result.why
			}
			if result.wrong != "" {
				t.Errorf("%s block %d table %d %s (%s): %s", path, e.block, e.table, e.page, e.status, result.wrong)
			}
		}
		c, rerr := Read(path, data, parse.Options{})
		scans := "refused"
		if rerr == nil {
			scans = fmt.Sprintf("%d scans", len(c.Scans))
		} else if why == "" {
			why = rerr.Error()
		}
		t.Logf("%-9s %4d tables decoded, %4d refused, %4d remarks; %s; %s", path, tally["decoded"], tally["refused"], remarks, scans, why)
	}
	t.Logf("tables: %v", counts)
}

type judgement struct {
	outcome, why, wrong string
	remarks             int
}

// judge compares what became of a table with what is expected of it.
func judge(f *File, err error, e expected) judgement {
	if err != nil {
		j := judgement{outcome: "refused", why: err.Error()}
		if e.status == "ok" {
			j.wrong = "refused: " + err.Error()
		}
		return j
	}
	if e.bare || e.block >= len(f.Blocks) || e.table >= len(f.Blocks[e.block].Tables) {
		return judgement{outcome: "lost", wrong: "there is no such table"}
	}
	tb := &f.Blocks[e.block].Tables[e.table]
	if tb.Err != nil {
		j := judgement{outcome: "refused", why: tb.Err.Error()}
		if e.status == "ok" {
			j.wrong = "refused: " + j.why
		} else if !strings.Contains(j.why, ":") {
			j.wrong = "refused without a place: " + j.why
		}
		return j
	}
	j := judgement{outcome: "decoded", remarks: len(tb.Remarks)}
	if tb.Doubt != nil {
		j.why = "in doubt: " + tb.Doubt.Error()
	}
	switch {
	case e.status == "error":
		j.wrong = "a damaged table is decoded"
	case e.status == "suspect" && len(tb.Remarks) == 0:
		j.wrong = "a table that contradicts itself has no remark"
	default:
		j.wrong = differs(tb, e)
	}
	return j
}
