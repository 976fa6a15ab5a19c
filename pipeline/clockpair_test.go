package pipeline

import (
	"bytes"
	"fmt"
	"math"
	"path/filepath"
	"slices"
	"testing"
	"time"

	"pkvigil/db"
	"pkvigil/db/dbtest"
	"pkvigil/pipeline/rehearse"
)

const clockRules = `[[rule]]
name = "scan"
folders = ["U1"]
pattern = '^(?P<stamp>\d{8}-\d{6})-(?P<set>[A-Z]{2,4}-\d+\.n\d+)(?:-(?P<role>blank))?\.csv$'
pair = "clock"

[[rule]]
name = "log"
folders = ["U1"]
pattern = '^(?P<role>phlog)_(?P<date>\d{8})\.csv$'

`

// A pH log pairs with scans by clock across files: nothing is complete before
// it has come, every scan finds its one reading, two candidates hold the set.
func TestPairedByClockAcrossFiles(t *testing.T) {
	dyes := rehearse.Dyes()
	sc := &rehearse.Scenario{Seed: 13, Noise: rehearse.Quiet(), Design: rehearse.Design{Dyes: []rehearse.Dye{dyes["PR"]}, Repeats: 2}}
	l := &lab{t: t, base: t.TempDir(), url: dbtest.URL(t), log: &lines{}}
	text := sc.Settings(l.base)
	i, j := bytes.Index(text, []byte("[[rule]]")), bytes.Index(text, []byte("[[rule]]\nname = \"calibration\""))
	if i < 0 || j < i {
		t.Fatal("no rules to replace")
	}
	l.text = append(append(bytes.Clone(text[:i]), clockRules...), text[j:]...)
	l.text = append(l.text, more+fmt.Sprintf("\n[storage]\ndata_dir = %q\n", filepath.Join(l.base, "data"))...)
	l.clock = NewSetClock(time.Date(2026, 3, 2, 17, 0, 0, 0, time.UTC))
	l.open()
	l.write("METERS/E-1_2026-03-02.csv", rehearse.CalibrationCSV(sc.Calibration(1), time.UTC))
	sets, err := sc.Night(1)
	if err != nil {
		t.Fatal(err)
	}
	l.clock.MoveTo(time.Date(2026, 3, 3, 3, 0, 0, 0, time.UTC))
	log := bytes.NewBufferString("read at;pH;temperature (C);electrode\r\n")
	at := time.Date(2026, 3, 2, 18, 0, 0, 0, time.UTC)
	for k, set := range sets {
		put := func(scan rehearse.Scan, tail string) {
			at = at.Add(15 * time.Minute)
			scan.Measured = at
			l.write("U1/"+at.Format("20060102-150405")+"-"+set.Name+tail+".csv", rehearse.ScanCSV(set.Name, "U1", scan, time.UTC, rehearse.Locale{}))
		}
		put(set.Blank, "-blank")
		for n, r := range set.Rungs {
			put(r.Scan, "")
			fmt.Fprintf(log, "%s;%.3f;%.1f;%s\r\n", at.Add(3*time.Minute).Format("2006-01-02T15:04:05"), r.Reading.PH, r.Reading.TemperatureC, set.Electrode)
			if k == 1 && n == 5 {
				fmt.Fprintf(log, "%s;%.3f;%.1f;%s\r\n", at.Add(5*time.Minute).Format("2006-01-02T15:04:05"), r.Reading.PH+0.04, r.Reading.TemperatureC, set.Electrode)
			}
		}
	}
	l.settle()
	for _, set := range sets {
		if x := l.set(set.Name); x.State != db.SetGathering && x.State != db.SetWaiting || len(x.Missing) == 0 {
			t.Fatalf("%s is %s before its log, missing %+v", set.Name, x.State, x.Missing)
		}
	}
	l.write("U1/phlog_20260302.csv", log.Bytes())
	l.settle()
	l.steps(time.Hour)

	good := l.result(sets[0].Name)
	if good == nil || good.Verdict == db.Held || len(good.Rungs) != len(sets[0].Rungs) || math.Abs(good.PKa[0].PKa-sets[0].PKa[0]) > 0.03 {
		t.Fatalf("one reading for each scan: %+v, set %+v", good, l.set(sets[0].Name))
	}
	twice := l.result(sets[1].Name)
	if twice == nil || twice.Verdict != db.Held || !slices.ContainsFunc(twice.Checks, func(c db.Check) bool { return c.Key == "ph.twice" }) {
		t.Fatalf("two candidates for one scan: %+v", twice)
	}
	for _, r := range []*db.Result{good, twice} {
		if a, err := l.s.Recompute(t.Context(), r.ID); err != nil || !a.Same {
			t.Errorf("again: %+v, %v", a, err)
		}
	}
	if n := l.count(`select count(*) from sample_set`); n != len(sets) {
		t.Errorf("%d sets, the log made one of its own", n)
	}
}
