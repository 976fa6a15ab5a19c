package pipeline

import (
	"bytes"
	"fmt"
	"math"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"pkvigil/db"
	"pkvigil/db/dbtest"
	"pkvigil/pipeline/rehearse"
)

// A tray is two sets of one night on one autosampler run: names give position
// and moment, a sequence says what stands where, one table has all pH.
type tray struct {
	l     *lab
	scans map[string][]byte // file name -> bytes
	table []byte
	sets  map[string]*rehearse.Set
	rows  []string // of the sequence
}

func newTray(t testing.TB, rules string) *tray {
	t.Helper()
	dyes := rehearse.Dyes()
	sc := &rehearse.Scenario{Seed: 12, Noise: rehearse.Quiet(), Design: rehearse.Design{Dyes: []rehearse.Dye{dyes["CR"], dyes["PR"]}}}
	l := &lab{t: t, base: t.TempDir(), url: dbtest.URL(t), log: &lines{}}
	text := sc.Settings(l.base)
	i := bytes.Index(text, []byte("[[rule]]"))
	j := bytes.Index(text, []byte("[[rule]]\nname = \"calibration\""))
	if i < 0 || j < i {
		t.Fatal("no rules to replace")
	}
	l.text = append(append(bytes.Clone(text[:i]), rules...), text[j:]...)
	l.text = append(l.text, more+fmt.Sprintf("\n[storage]\ndata_dir = %q\n", filepath.Join(l.base, "data"))...)
	l.clock = NewSetClock(time.Date(2026, 3, 2, 17, 0, 0, 0, time.UTC))
	l.open()
	sets, err := sc.Night(1)
	if err != nil {
		t.Fatal(err)
	}
	y := &tray{l: l, scans: map[string][]byte{}, sets: map[string]*rehearse.Set{}}
	table := bytes.NewBufferString("position;pH;temperature (C);read at;electrode\r\n")
	for k, set := range sets {
		letter := string(rune('A' + k))
		name := set.Name
		y.sets[name] = set
		put := func(pos string, sc rehearse.Scan, row string) {
			y.scans["S118_"+pos+"_"+sc.Measured.UTC().Format("20060102T150405")+".csv"] = rehearse.ScanCSV(pos, "U1", sc, time.UTC, rehearse.Locale{})
			y.rows = append(y.rows, pos+";"+row)
		}
		put(letter+"00", set.Blank, name+";;blank")
		for _, r := range set.Rungs {
			put(letter+r.Key, r.Scan, name+";"+r.Key+";")
			fmt.Fprintf(table, "%s;%.3f;%.1f;%s;%s\r\n", letter+r.Key, r.Reading.PH, r.Reading.TemperatureC, r.Reading.At.UTC().Format("2006-01-02T15:04:05"), set.Electrode)
		}
	}
	y.table = table.Bytes()
	if sc.Calibration(1).Electrode == "" {
		t.Fatal("no calibration")
	}
	l.write("METERS/E-1_2026-03-02.csv", rehearse.CalibrationCSV(sc.Calibration(1), time.UTC))
	l.clock.MoveTo(time.Date(2026, 3, 2, 21, 0, 0, 0, time.UTC))
	return y
}

func (y *tray) sequence(without string) []byte {
	b := bytes.NewBufferString("position;set;rung;role\r\n")
	for _, r := range y.rows {
		if without == "" || !strings.HasPrefix(r, without+";") {
			b.WriteString(r + "\r\n")
		}
	}
	return b.Bytes()
}

func (y *tray) writeScans() {
	for name, data := range y.scans {
		y.l.write("U1/"+name, data)
	}
}

// judged holds the sets of the tray to what they were made from.
func (y *tray) judged(t *testing.T) {
	t.Helper()
	for name, set := range y.sets {
		r := y.l.result(name)
		if r == nil {
			t.Fatalf("%s has no result: %+v", name, y.l.set(name).Missing)
		}
		if r.Verdict == db.Held || r.Verdict == db.NoNumber || math.Abs(r.PKa[0].PKa-set.PKa[0]) > 0.03 || len(r.Rungs) != len(set.Rungs) {
			t.Errorf("%s: %s (%s), %d rungs, pKa %.3f of %.3f", name, r.Verdict, r.Headline, len(r.Rungs), r.PKa[0].PKa, set.PKa[0])
		}
	}
}

const trayRules = `[[rule]]
name = "scan"
folders = ["U1"]
pattern = '^(?P<run>S\d+)_(?P<pos>[A-H]\d{2})_(?P<stamp>\d{8}T\d{6})\.csv$'
pair = "key"
pair_by = "pos"

[[rule]]
name = "tables"
folders = ["U1"]
pattern = '^(?P<run>S\d+)_(?P<role>sequence|ph)\.csv$'

`

// Scans that come before their sequence wait, say for what, and are placed by
// themselves when it comes; nothing is needed of a person.
func TestTrayWaitsForItsSequence(t *testing.T) {
	y := newTray(t, trayRules)
	y.writeScans()
	y.l.write("U1/S118_ph.csv", y.table)
	y.l.settle()
	var one string
	for name := range y.scans {
		one = name
	}
	f := y.l.file("U1", one)
	if f.State != db.FileParked || f.Reason == nil || !strings.Contains(f.Reason.Sentence, "sample sheet of run S118 has not come") {
		t.Fatalf("%s is %s: %+v", one, f.State, f.Reason)
	}
	if n := y.l.count(`select count(*) from sample_set`); n != 0 {
		t.Fatalf("%d sets before the sequence", n)
	}
	y.l.write("U1/S118_sequence.csv", y.sequence("A05"))
	y.l.settle()
	if n := y.l.count(`select count(*) from file where state = 'parked'`); n != 1 {
		t.Errorf("%d files parked, expected the one without a row", n)
	}
	for name := range y.scans {
		if strings.Contains(name, "_A05_") {
			if f := y.l.file("U1", name); f.State != db.FileParked {
				t.Errorf("%s is %s", name, f.State)
			}
		}
	}
	y.l.clock.MoveTo(y.l.clock.Now().Add(time.Minute))
	y.l.write("U1/S118_sequence.csv", y.sequence(""))
	y.l.settle()
	y.l.steps(time.Hour)
	if n := y.l.count(`select count(*) from file where state = 'parked'`); n != 0 {
		t.Errorf("%d files still parked", n)
	}
	y.judged(t)
}

// With the sequence there first nothing is ever parked.
func TestTrayAfterItsSequence(t *testing.T) {
	y := newTray(t, trayRules)
	y.l.write("U1/S118_sequence.csv", y.sequence(""))
	y.l.settle()
	y.writeScans()
	y.l.write("U1/S118_ph.csv", y.table)
	y.l.settle()
	y.l.steps(time.Hour)
	if n := y.l.count(`select count(*) from file_state where state = 'parked'`) + y.l.count(`select count(*) from file where state = 'parked'`); n != 0 {
		t.Errorf("%d files were parked", n)
	}
	y.judged(t)
}
