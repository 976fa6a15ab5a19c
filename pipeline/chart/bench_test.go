package chart

import (
	"fmt"
	"testing"
)

// allRules keeps every chart there is.
func allRules() Rules {
	r := DefaultRules()
	r.MovingRange = 4.28
	r.Runs = PatternRuns()
	r.ImpactLimit = 0.02
	return r
}

// BenchmarkNight is one night of one characteristic on running charts: everything
// kept, nothing flagged most of the time.
func BenchmarkNight(b *testing.B) {
	x := noise(31, 4096)
	base := Learn(scaled(noise(32, 30), 8.26, 0.006), 0.0066)
	c := NewChart(base, allRules())
	b.ReportAllocs()
	i := 0
	for b.Loop() {
		c.Next(Value{Night: i, X: base.Centre + 0.004*x[i%4096]})
		i++
	}
}

// BenchmarkLaboratory is a night's evaluation from nothing: three instruments, four
// references, fifteen characteristics, sixty nights of history each, baseline learnt.
func BenchmarkLaboratory(b *testing.B) {
	vs := scaled(noise(33, 60), 8.26, 0.006)
	rules := allRules()
	b.ReportAllocs()
	for b.Loop() {
		for range 3 * 4 * 15 {
			base := Learn(vs[:25], 0.0066)
			Judge(base, vs[25:], rules)
		}
	}
}

// BenchmarkHistory sweeps the length of the history: the cost per night must stay.
func BenchmarkHistory(b *testing.B) {
	base := Learn(scaled(noise(34, 30), 8.26, 0.006), 0.0066)
	for _, n := range []int{60, 600, 6000} {
		vs := scaled(noise(35, n), base.Centre, 0.004)
		b.Run(fmt.Sprintf("nights%d", n), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				Judge(base, vs, allRules())
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/float64(n), "ns/night")
		})
	}
}

func BenchmarkFindChange(b *testing.B) {
	for _, n := range []int{60, 600} {
		vs := scaled(noise(36, n), 0, 1)
		b.Run(fmt.Sprintf("nights%d", n), func(b *testing.B) {
			for b.Loop() {
				FindChange(vs, Known(0, 1))
			}
		})
	}
}

func BenchmarkLimitsFor(b *testing.B) {
	for b.Loop() {
		if _, _, err := LimitsFor(365, 180, DefaultRules()); err != nil {
			b.Fatal(err)
		}
	}
}

// Memory of a running chart does not grow with the nights: no allocation per night
// without a flag.
func TestNightAllocatesNothing(t *testing.T) {
	base := Known(0, 1)
	c := NewChart(base, allRules())
	x := noise(37, 64)
	i := 0
	// Scores within half a standard deviation flag nothing but fifteen close to the
	// centre, which is switched off here.
	c.r.Runs.Inner, c.r.ImpactLimit = 0, 0
	if n := testing.AllocsPerRun(2000, func() {
		c.Next(Value{Night: i, X: 0.2 * x[i%64]})
		i++
	}); n > 0.05 {
		t.Errorf("%.2f allocations per quiet night", n)
	}
}
