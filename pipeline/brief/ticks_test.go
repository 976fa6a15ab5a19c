package brief

import (
	"math"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

func read(t failer, label string) float64 {
	v, err := strconv.ParseFloat(strings.ReplaceAll(label, "\u2212", "-"), 64)
	if err != nil {
		t.Fatalf("label %q is no number", label)
	}
	return v
}

// TestTicksTellTheTruth: every label read back is its mark, marks lie inside,
// rise by one round step, differ as written, and are as many as asked or few fewer.
func TestTicksTellTheTruth(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		power := rapid.IntRange(-12, 12).Draw(t, "power")
		lo := rapid.Float64Range(-100, 100).Draw(t, "lo") * math.Pow10(power)
		width := rapid.Float64Range(0.001, 200).Draw(t, "width") * math.Pow10(power)
		n := rapid.IntRange(2, 9).Draw(t, "n")
		hi := lo + width
		list := ticks(lo, hi, n)
		if len(list) > n+1 || n >= 4 && len(list) < 2 {
			t.Fatalf("%d marks in [%g, %g], asked for %d", len(list), lo, hi, n)
		}
		seen := map[string]bool{}
		for i, k := range list {
			v := read(t, k.label)
			if math.Abs(v-k.at) > 1e-9*width {
				t.Fatalf("mark at %g reads %q", k.at, k.label)
			}
			if k.at < lo-1e-6*width || k.at > hi+1e-6*width {
				t.Fatalf("mark at %g is outside [%g, %g]", k.at, lo, hi)
			}
			if seen[k.label] {
				t.Fatalf("label %q twice", k.label)
			}
			seen[k.label] = true
			if i > 1 && math.Abs((k.at-list[i-1].at)-(list[1].at-list[0].at)) > 1e-9*width {
				t.Fatalf("marks are not even: %v", list)
			}
		}
	})
}

func TestTicksExamples(t *testing.T) {
	labels := func(list []tick) string {
		var s []string
		for _, k := range list {
			s = append(s, k.label)
		}
		return strings.Join(s, " ")
	}
	for _, c := range []struct {
		lo, hi float64
		n      int
		want   string
	}{{7.17, 7.24, 5, "7.18 7.20 7.22 7.24"}, {-0.03, 0.03, 4, "\u22120.02 0 0.02"}, {380, 760, 6, "400 500 600 700"}, {0, 3e-8, 4, "0 1e-8 2e-8 3e-8"}, {0, 4.2e7, 4, "0 2e7 4e7"}} {
		if got := labels(ticks(c.lo, c.hi, c.n)); got != c.want {
			t.Errorf("ticks(%g, %g, %d) = %s, want %s", c.lo, c.hi, c.n, got, c.want)
		}
	}
	nan := math.NaN()
	for _, c := range [][2]float64{{nan, 1}, {0, nan}, {1, 1}, {2, 1}, {0, math.Inf(1)}, {1e300, 1.7e308}, {1, 1 + 1e-15}} {
		if got := ticks(c[0], c[1], 5); len(got) != 0 {
			t.Errorf("ticks(%g, %g) = %v, want none", c[0], c[1], got)
		}
	}
}

// TestDayTicks: marks are inside, rise, are at most as many as asked, and read
// as the days they stand at.
func TestDayTicks(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		lo := rapid.Float64Range(15000, 25000).Draw(t, "lo")
		hi := lo + rapid.Float64Range(1, 6000).Draw(t, "days")
		n := rapid.IntRange(4, 8).Draw(t, "n")
		list := dayTicks(lo, hi, n)
		if len(list) == 0 || len(list) > n {
			t.Fatalf("%d marks over %.0f days, asked for %d", len(list), hi-lo, n)
		}
		for i, k := range list {
			if k.at < lo || k.at > hi || i > 0 && k.at <= list[i-1].at {
				t.Fatalf("mark %v of [%g, %g]", k, lo, hi)
			}
			if day := dayOf(int(k.at)).Format("2006-01-02"); !strings.HasSuffix(day, k.label) {
				t.Fatalf("%s is labelled %s", day, k.label)
			}
		}
	})
}

func TestNumbers(t *testing.T) {
	// The second significant digit of U decides (GUM, JCGM 100:2008, 7.2.6).
	for _, c := range []struct {
		v, u float64
		want string
	}{{8.19949, 0.0131, "8.199 ± 0.013"}, {9.4121, 0.114, "9.41 ± 0.11"}, {9.4121, 0.0996, "9.41 ± 0.10"}, {4.66, 0.00996, "4.660 ± 0.010"}, {4.66, 2.3, "4.7 ± 2.3"}, {4.66, 31, "5 ± 31"}, {4.66, math.NaN(), "4.660"}, {math.NaN(), 0.01, "– ± 0.010"}} {
		if got := measured(c.v, c.u); got != c.want {
			t.Errorf("measured(%g, %g) = %q, want %q", c.v, c.u, got, c.want)
		}
	}
	if got := fixed(-0.0001, 3); got != "0.000" {
		t.Errorf("negative zero: %q", got)
	}
	for in, want := range map[string]string{"pH readings wrong": "pH readings wrong.", "line 3: found": "Line 3: found.", "n023/a.csv is": "n023/a.csv is.", "": "", "Done!": "Done!"} {
		if got := sentence(in); got != want {
			t.Errorf("sentence(%q) = %q, want %q", in, got, want)
		}
	}
	for p, want := range map[float64]string{0: "0 %", 0.004: "< 1 %", 0.93: "93 %", 0.999: "> 99 %", 1: "100 %"} {
		if got := percent(p); got != want {
			t.Errorf("percent(%g) = %q, want %q", p, got, want)
		}
	}
}

// TestThinned: no point of the stored curve is further from the drawn one than said.
func TestThinned(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var pts []point
		for i, y := range rapid.SliceOfN(rapid.Float64Range(0, 200), 1, 80).Draw(t, "y") {
			if rapid.Bool().Draw(t, "smooth") {
				y = 100 + float64(i%3)*0.05
			}
			pts = append(pts, point{float64(3 * i), y})
		}
		out := thinned(pts)
		for _, q := range pts {
			near := math.Hypot(q.x-out[0].x, q.y-out[0].y)
			for i := 1; i < len(out); i++ {
				near = math.Min(near, distance(q, out[i-1], out[i]))
			}
			if near > thinness+1e-9 {
				t.Fatalf("point %v is %g away from the drawn curve", q, near)
			}
		}
	})
}
