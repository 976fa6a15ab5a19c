package rehearse

import (
	"math"
	"strings"
	"testing"
	"time"
)

// The calendar of the story: Mondays, the night of the clock change, and the
// scripted nights of the requirements' table.
func TestCalendar(t *testing.T) {
	s := NewStory(1)
	if s.Nights() != 60 || s.Start().Weekday() != time.Monday {
		t.Fatalf("%d nights from a %s", s.Nights(), s.Start().Weekday())
	}
	for _, n := range []int{1, 8, 15, 22, 29, 36, 43, 50, 57} {
		for _, inst := range []string{"U1", "U2"} {
			if !s.calibrates(inst, n) {
				t.Errorf("%s is not calibrated in night %d", inst, n)
			}
		}
	}
	if a, b := s.day(nightClock), s.day(nightClock+1); a.Weekday() != time.Saturday || b.Sub(a) != 24*time.Hour {
		t.Errorf("night %d begins on %s", nightClock, a)
	}
	if begin, end := s.at(nightClock, 18, 0), s.at(nightClock, 6, 0); end.Sub(begin) != 13*time.Hour {
		t.Errorf("the night of the clock change lasts %s, expected 13h", end.Sub(begin))
	}
}

// In the repeated hour wall clocks run backwards while the true order holds.
func TestRepeatedHour(t *testing.T) {
	s := NewStory(1)
	backwards := false
	var last string
	for _, d := range s.Deposits(nightClock) {
		i := strings.Index(string(d.Bytes), "\r\nMeasured, ")
		if d.Folder != instOne || d.Act != Write || i < 0 || d.Note != "scan" {
			continue
		}
		at := string(d.Bytes[i+12 : i+12+len(stamp)])
		backwards = backwards || at < last
		last = at
	}
	if !backwards {
		t.Error("no scan of U1 falls into the repeated hour")
	}
}

func acts(s *Story, night int, act Act) []Deposit {
	var out []Deposit
	for _, d := range s.Deposits(night) {
		if d.Act == act {
			out = append(out, d)
		}
	}
	return out
}

func clock(s *Story, d Deposit) string { return d.At.In(s.zone).Format("15:04") }

func TestOutages(t *testing.T) {
	s := NewStory(1)
	for _, c := range []struct {
		night int
		act   Act
		at    string
	}{{24, Unmount, "01:12"}, {24, Mount, "04:40"}, {57, DatabaseAway, "01:00"}, {57, DatabaseBack, "02:30"}} {
		found := acts(s, c.night, c.act)
		if len(found) != 1 || clock(s, found[0]) != c.at {
			t.Errorf("night %d: %d times %s, expected once at %s", c.night, len(found), c.act, c.at)
		}
	}
	for _, n := range []int{1, 24, 41, 57, 58, 59, 60} {
		count := map[string]int{}
		for _, d := range acts(s, n, Write) {
			count[d.Folder]++
		}
		if silent := n == 59; (count["U1"] == 0) != silent || count["U2"] == 0 || count["LOG"] == 0 {
			t.Errorf("night %d: %v files", n, count)
		}
	}
	planned := 0
	for _, b := range s.Bookings(59) {
		if b.Instrument == "U1" {
			planned++
		}
	}
	if planned == 0 {
		t.Error("the silent night has no plan, so nothing could be missed")
	}
}

// During the outage of the share nothing is written where nobody can see it,
// and everything measured meanwhile is there within a minute of its return.
func TestUnmountedShareCatchesUp(t *testing.T) {
	s := NewStory(1)
	away, back := s.at(24, 1, 12), s.at(24, 4, 40)
	late := 0
	for _, d := range acts(s, 24, Write) {
		if d.Folder != "U2" {
			continue
		}
		if !d.At.Before(away) && d.At.Before(back) {
			t.Errorf("%s written at %s", d.Path, d.At)
		}
		if d.ModTime.Before(back) && d.At.After(back) {
			late++
			if d.At.Sub(back) > time.Minute {
				t.Errorf("%s appears %s after the return", d.Path, d.At.Sub(back))
			}
		}
	}
	if late == 0 {
		t.Error("nothing was measured while the share was away")
	}
}

// Displacements of the references, mean over stories with different seeds,
// against the figures of the requirements' table: night 18 +.020/+.013/+.003,
// night 21 +.039/+.027/+.007, night 27 +.046/+.031/+.006, night 41 C +.026
// with slope -1.9 %, A 0, B -.001; lot TB-2219 +.024 and -2.2 %.
func TestScriptedDisplacements(t *testing.T) {
	const seeds = 12
	for _, c := range []struct {
		night          int
		inst, compound string
		want, slope    float64
	}{
		{5, "U1", "RI-A", 0, 0}, {5, "U2", "RI-C", 0, 0},
		{18, "U1", "RI-A", 0.020, 0.45}, {18, "U1", "RI-B", 0.013, 0.45}, {18, "U1", "RI-C", 0.003, 0.45},
		{21, "U1", "RI-A", 0.039, 0.9}, {21, "U1", "RI-B", 0.027, 0.9}, {21, "U1", "RI-C", 0.007, 0.9},
		{21, "U2", "RI-A", 0, 0}, {22, "U1", "RI-A", 0, 0},
		{27, "U1", "RI-A", 0.046, 1.1}, {27, "U1", "RI-B", 0.031, 1.1}, {27, "U1", "RI-C", 0.006, 1.1},
		{28, "U1", "RI-A", 0, 0}, {35, "U1", "RI-C", 0, 0},
		{41, "U1", "RI-C", 0.026, -1.9}, {41, "U2", "RI-C", 0.026, -1.9}, {41, "U2", "RI-A", 0, 0}, {41, "U1", "RI-B", -0.001, 0},
		{46, "U1", "RI-C", 0, 0}, {49, "U1", "RI-C2", 0, 0},
	} {
		var pka, slope, k float64
		for seed := uint64(1); seed <= seeds; seed++ {
			s := NewStory(seed)
			for _, b := range s.Bookings(c.night) {
				if b.Instrument != c.inst || b.Compound != c.compound {
					continue
				}
				p, n := plainFit(s.Set(b), s.dyes[b.Dye].PKa[0], 0)
				pka, slope, k = pka+p-s.dyes[b.Dye].PKa[0], slope+100*(n-1), k+1
			}
		}
		pka, slope = pka/k, slope/k
		// One set scatters by 0.0066 and 0.8 %; four standard errors.
		if math.Abs(pka-c.want) > 4*0.0066/math.Sqrt(k)+0.001 {
			t.Errorf("night %d %s %s: pKa moved by %+.4f, expected %+.3f", c.night, c.inst, c.compound, pka, c.want)
		}
		if math.Abs(slope-c.slope) > 4*0.8/math.Sqrt(k)+0.1 {
			t.Errorf("night %d %s %s: slope moved by %+.2f %%, expected %+.2f", c.night, c.inst, c.compound, slope, c.slope)
		}
	}
}

// The blank-corrected band of a mean of scans moves by 0.60 nm with the lamp
// and comes back to 0.05 nm.
func TestLampMovesTheBands(t *testing.T) {
	position := func(night int) float64 {
		var sum, k float64
		for seed := uint64(1); seed <= 8; seed++ {
			s := NewStory(seed)
			for _, b := range s.Bookings(night) {
				if b.Instrument == "U1" && b.Compound == "RI-C" {
					sum, k = sum+top(s.Set(b)), k+1
				}
			}
		}
		return sum / k
	}
	before := position(30)
	for night, want := range map[int]float64{34: 0.60, 36: 0.60, 37: 0.05, 44: 0.05} {
		if got := position(night) - before; math.Abs(got-want) > 0.06 {
			t.Errorf("night %d: band moved by %+.3f nm, expected %+.2f", night, got, want)
		}
	}
}

// top is the position of the base band in the last rung: centre of a parabola
// through the 40 nm about the highest point.
func top(s *Set) float64 {
	sc := s.Rungs[len(s.Rungs)-1].Scan
	best := 0
	for i, a := range sc.Absorbance {
		if a > sc.Absorbance[best] {
			best = i
		}
	}
	var s0, s1, s2, s3, s4, y0, y1, y2 float64
	for i := best - 7; i <= best+7; i++ {
		x, y := sc.WavelengthNM[i]-578, sc.Absorbance[i]-s.Blank.Absorbance[i]
		s0, s1, s2, s3, s4 = s0+1, s1+x, s2+x*x, s3+x*x*x, s4+x*x*x*x
		y0, y1, y2 = y0+y, y1+y*x, y2+y*x*x
	}
	det := func(a, b, c, d, e, f, g, h, i float64) float64 {
		return a*(e*i-f*h) - b*(d*i-f*g) + c*(d*h-e*g)
	}
	lin := det(s0, y0, s2, s1, y1, s3, s2, y2, s4)
	quad := det(s0, s1, y0, s1, s2, y1, s2, s3, y2)
	return 578 - lin/(2*quad)
}

// The base segment of both calibrations of night 41 is 1.9 % short.
func TestBadBufferShowsInTheCalibration(t *testing.T) {
	s := NewStory(1)
	for _, inst := range []string{"U1", "U2"} {
		_, before := s.electrodeAt(inst, s.lastCalibration(inst, 40))
		_, bad := s.electrodeAt(inst, 41)
		_, after := s.electrodeAt(inst, 46)
		if got := 100 * (bad.SegmentSlope(2)/before.SegmentSlope(2) - 1); math.Abs(got+1.9) > 1.2 {
			t.Errorf("%s: base segment moved by %+.2f %%, expected -1.9", inst, got)
		}
		if got := 100 * (after.SegmentSlope(2)/before.SegmentSlope(2) - 1); math.Abs(got) > 1.2 {
			t.Errorf("%s: base segment of night 46 off by %+.2f %%", inst, got)
		}
		if bad.Points[3].Lot != "CB-207" || after.Points[3].Lot != "CB-208" {
			t.Errorf("%s: lots %s and %s", inst, bad.Points[3].Lot, after.Points[3].Lot)
		}
	}
}

// Everyday nuisances come at the rates of the story, over several seeds.
func TestNuisanceRates(t *testing.T) {
	count, sets := map[string]int{}, 0
	for seed := uint64(1); seed <= 4; seed++ {
		for _, tr := range NewStory(seed).Truth() {
			if tr.Kind == KindPKa {
				sets++
			} else {
				count[tr.Key]++
			}
		}
	}
	for _, n := range nuisances() {
		want := n.rate * float64(sets)
		if got := float64(count[n.key]); math.Abs(got-want) > 4*math.Sqrt(want)+6 {
			t.Errorf("%s: %.0f in %d sets, expected %.0f", n.key, got, sets, want)
		}
	}
}

// The second dye of TB-2219 raises pKa, flattens the slope, and the lot is the
// same on both instruments.
func TestImpureLot(t *testing.T) {
	var pka, slope, k float64
	on := map[string]bool{}
	for seed := uint64(1); seed <= 6; seed++ {
		s := NewStory(seed)
		for n := nightImpureFirst; n <= nightImpureLast; n++ {
			for _, b := range s.Bookings(n) {
				if b.Lot != impureLot {
					continue
				}
				on[b.Instrument] = true
				set := s.Set(b)
				p, m := plainFit(set, 8.9, 0)
				pka, slope, k = pka+p-set.PKa[0], slope+100*(m-1), k+1
			}
		}
	}
	if k != 24 || len(on) != 2 {
		t.Fatalf("%.0f sets of the lot on %d instruments, expected 24 on 2", k, len(on))
	}
	if pka /= k; math.Abs(pka-0.024) > 0.006 {
		t.Errorf("pKa moved by %+.4f, expected +0.024", pka)
	}
	if slope /= k; math.Abs(slope+2.2) > 0.7 {
		t.Errorf("slope moved by %+.2f %%, expected -2.2", slope)
	}
}

// The truth made without measuring names the same files as the deposits.
func TestTruthMatchesDeposits(t *testing.T) {
	s := NewStory(2)
	for n := 1; n <= s.Nights(); n += 4 {
		paths := map[string]bool{}
		for _, d := range s.Deposits(n) {
			paths[d.Folder+"/"+d.Path] = true
		}
		for _, tr := range s.TruthOf(n) {
			if tr.File != "" && !paths[tr.File] {
				t.Errorf("night %d: %s names %s, which is not written", n, tr.Key, tr.File)
			}
		}
		if want := s.play(n, false).truth; len(want) != len(s.TruthOf(n)) {
			t.Errorf("night %d: %d truths while measuring, %d without", n, len(want), len(s.TruthOf(n)))
		}
	}
}
