package rehearse

import (
	"math"
	"strings"
	"testing"

	"pkvigil/parse"
	"pkvigil/parse/export"
)

// Every file of some nights is read by the program's own readers; exactly the
// files that the truth calls refused are refused.
func TestReadersReadTheStory(t *testing.T) {
	s := NewStory(1)
	_, rules := laboratory(t, s)
	for _, night := range []int{1, 3, 11, 24, 28, 41, 50} {
		refused := map[string]bool{}
		for _, tr := range s.TruthOf(night) {
			if tr.Expect == ExpectRefused {
				refused[tr.File] = true
			}
		}
		for _, d := range s.Deposits(night) {
			if d.Act != Write || strings.HasSuffix(d.Path, ".part") {
				continue
			}
			m, err := rules.Match(d.Folder, d.Path)
			if err != nil {
				continue // mistyped; TestEveryFileFitsItsRule looks at those
			}
			c, err := export.Read(d.Path, d.Bytes, parse.Options{Zone: s.Zone(), Role: m.Role})
			if refused[d.Folder+"/"+d.Path] {
				continue // TestReadersRefuseWhatTheyShould looks at those
			}
			if err != nil {
				t.Errorf("night %d: %s/%s: %v", night, d.Folder, d.Path, err)
				continue
			}
			checkContent(t, m.Role, d, c)
		}
	}
}

// Files cut short and files with an ambiguous decimal comma are refused,
// over all nights of several stories.
func TestReadersRefuseWhatTheyShould(t *testing.T) {
	count := 0
	for seed := uint64(1); seed <= 3; seed++ {
		s := NewStory(seed)
		for night := 1; night <= s.Nights(); night++ {
			for _, tr := range s.TruthOf(night) {
				if tr.Expect != ExpectRefused {
					continue
				}
				count++
				for _, d := range s.Deposits(night) {
					if d.Folder+"/"+d.Path != tr.File || d.Act != Write || (d.Note != "cut short" && d.Note != "decimal comma") {
						continue
					}
					if _, err := export.Read(d.Path, d.Bytes, parse.Options{Zone: s.Zone()}); err == nil {
						t.Errorf("seed %d night %d: %s (%s) is read", seed, night, tr.File, d.Note)
					}
				}
			}
		}
	}
	if count < 20 {
		t.Errorf("only %d files to refuse", count)
	}
}

func checkContent(t *testing.T, role string, d Deposit, c *parse.Content) {
	t.Helper()
	n := map[string]int{"scan": len(c.Scans), "blank": len(c.Scans), "ph": len(c.Readings),
		"calibration": len(c.Calibrations), "events": len(c.Events), "plan": len(c.Plan)}[role]
	if n == 0 {
		t.Errorf("%s/%s: nothing of role %s in it (%s)", d.Folder, d.Path, role, c.Format)
	}
	for _, sc := range c.Scans {
		if sc.PathMM != 10 || math.Abs(sc.TemperatureC-25) > 1 || sc.BandwidthNM != 2 || sc.Measured.IsZero() {
			t.Errorf("%s/%s %s: path %g mm, %g C, bandwidth %g nm, measured %s", d.Folder, d.Path, sc.Label, sc.PathMM, sc.TemperatureC, sc.BandwidthNM, sc.Measured)
		}
	}
}

// What is read is what was measured, to the last printed digit, in both formats.
func TestReadersReturnTheNumbers(t *testing.T) {
	s := NewStory(1)
	for _, b := range s.Bookings(3) {
		set := s.Set(b)
		for _, f := range s.exportsOf(set) {
			c, err := export.Read(f.Path, f.Bytes, parse.Options{Zone: s.Zone(), Role: f.Role})
			if err != nil {
				t.Fatal(err)
			}
			if f.Role == "ph" {
				sameReadings(t, set, c.Readings)
				continue
			}
			for _, got := range c.Scans {
				sameScan(t, set, f, got)
			}
		}
	}
}

func sameReadings(t *testing.T, set *Set, got []parse.Reading) {
	t.Helper()
	if len(got) != len(set.Rungs) {
		t.Errorf("%s: %d readings, %d rungs", set.Name, len(got), len(set.Rungs))
		return
	}
	for i, r := range set.Rungs {
		g := got[i]
		if g.Label != r.Key || g.PH != r.Reading.PH || g.Electrode != set.Electrode || !g.Measured.Equal(r.Reading.At) {
			t.Errorf("%s: reading %+v, expected %s %g %s %s", set.Name, g, r.Key, r.Reading.PH, set.Electrode, r.Reading.At)
		}
	}
}

func sameScan(t *testing.T, set *Set, f File, got parse.Scan) {
	t.Helper()
	want := set.Blank
	key := f.Rung
	if key == "" && f.Role == "scan" && got.Label != "blank" {
		key = got.Label[len(got.Label)-2:]
	}
	for _, r := range set.Rungs {
		if r.Key == key {
			want = r.Scan
		}
	}
	if len(got.Absorbance) != len(want.Absorbance) || !got.Measured.Equal(want.Measured) || got.Decimals != want.Decimals {
		t.Errorf("%s %s: %d points at %s with %d decimals, expected %d at %s with %d", f.Path, got.Label,
			len(got.Absorbance), got.Measured, got.Decimals, len(want.Absorbance), want.Measured, want.Decimals)
		return
	}
	for i := range want.Absorbance {
		if got.WavelengthNM[i] != want.WavelengthNM[i] || math.Abs(got.Absorbance[i]-want.Absorbance[i]) > 0.5001e-5 {
			t.Errorf("%s %s: %g nm %g, expected %g nm %g", f.Path, got.Label, got.WavelengthNM[i], got.Absorbance[i], want.WavelengthNM[i], want.Absorbance[i])
			return
		}
	}
}

// Faults of files that ask for refusal are refused by the readers, and those
// that ask for nothing are read.
func TestReadersAgreeWithExpectations(t *testing.T) {
	sc := &Scenario{Seed: 5, Design: Design{Dyes: []Dye{Dyes()["PR"]}}, Noise: Quiet()}
	sets, err := sc.Night(1)
	if err != nil {
		t.Fatal(err)
	}
	before := Files(sets[0], Style{})
	for _, key := range FileFaultKeys() {
		after, err := SpoilFiles(before, Fault{Key: key, Rung: 3}, dice(1, key))
		if err != nil {
			t.Fatal(err)
		}
		refused := ""
		for _, f := range after {
			if f.Role == "ignore" {
				continue
			}
			if _, err := export.Read(f.Path, f.Bytes, parse.Options{Role: f.Role}); err != nil {
				refused += err.Error()
			}
		}
		switch ExpectationOf(key) {
		case ExpectRefused:
			if refused == "" {
				t.Errorf("%s: every file is read", key)
			}
		default:
			if refused != "" {
				t.Errorf("%s: %s", key, refused)
			}
		}
	}
}
