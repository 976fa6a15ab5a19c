package fit

import (
	"fmt"
	"syscall"
	"testing"
)

// processor returns the processor time of this process, which a busy machine
// does not stretch as it stretches the clock.
func processor() float64 {
	var u syscall.Rusage
	if err := syscall.Getrusage(syscall.RUSAGE_SELF, &u); err != nil {
		return 0
	}
	return float64(u.Utime.Nano() + u.Stime.Nano())
}

// timed reports processor time per operation.
func timed(b *testing.B, op func()) {
	b.ReportAllocs()
	op()
	b.ResetTimer()
	t := processor()
	for range b.N {
		op()
	}
	b.ReportMetric((processor()-t)/float64(b.N)/1e3, "cpu-us/op")
}

// BenchmarkPlain: m = 20, pKa and covariance only, given start, no nuisance.
func BenchmarkPlain(b *testing.B) {
	for n := 1; n <= 4; n++ {
		for _, w := range []int{61, 601, 6001} {
			b.Run(fmt.Sprintf("n=%d/w=%d", n, w), func(b *testing.B) {
				p := benchSet(n, w, false, 1)
				benchSolver(b, p)
			})
		}
	}
}

// BenchmarkNuisance: both estimates with latent pH, amounts, offsets and two shared errors.
func BenchmarkNuisance(b *testing.B) {
	for n := 1; n <= 4; n++ {
		b.Run(fmt.Sprintf("n=%d/w=601", n), func(b *testing.B) {
			benchSolver(b, benchSet(n, 601, true, 1))
		})
	}
}

func benchSolver(b *testing.B, p Problem) {
	var s Solver
	var r Result
	timed(b, func() {
		if err := s.Refit(&p, Options{Bare: true}, &r); err != nil || r.Status != Converged {
			b.Fatal(err, r.Status)
		}
	})
	b.ReportMetric(float64(r.Iterations), "iterations")
}

// BenchmarkGonum: the same plain fit with gonum on the full matrix and after a
// singular value decomposition.
func BenchmarkGonum(b *testing.B) {
	for n := 1; n <= 3; n++ {
		for _, way := range []struct {
			name             string
			svd, differences bool
		}{{"full-differences", false, true}, {"full-kaufman", false, false}, {"svd-differences", true, true}, {"svd-kaufman", true, false}} {
			b.Run(fmt.Sprintf("n=%d/%s", n, way.name), func(b *testing.B) {
				p := benchSet(n, 601, false, 1)
				timed(b, func() { newReference(p, way.svd, way.differences).fit(p.Start) })
			})
		}
	}
}

// BenchmarkGram is the reduction alone.
func BenchmarkGram(b *testing.B) {
	p := benchSet(3, 601, true, 1)
	var d reduced
	d.load(&p, 0)
	timed(b, d.product)
}

// BenchmarkSearch is a fit without start values: the scan of the ladder included.
func BenchmarkSearch(b *testing.B) {
	for n := 1; n <= 4; n++ {
		b.Run(fmt.Sprintf("n=%d", n), func(b *testing.B) {
			p := benchSet(n, 601, true, 1)
			p.Start = nil
			benchSolver(b, p)
		})
	}
}

// BenchmarkWhole is Solve with everything that describes the result.
func BenchmarkWhole(b *testing.B) {
	for n := 1; n <= 3; n++ {
		b.Run(fmt.Sprintf("n=%d", n), func(b *testing.B) {
			p := benchSet(n, 601, true, 1)
			p.Start = nil
			var s Solver
			timed(b, func() {
				if _, err := s.Solve(p, Options{}); err != nil {
					b.Fatal(err)
				}
			})
		})
	}
}

// BenchmarkDraw is one Monte Carlo draw with its refit.
func BenchmarkDraw(b *testing.B) {
	for n := 1; n <= 3; n++ {
		b.Run(fmt.Sprintf("n=%d", n), func(b *testing.B) {
			p := benchSet(n, 601, true, 1)
			r, err := Solve(p, Options{Bare: true})
			if err != nil {
				b.Fatal(err)
			}
			b.ReportAllocs()
			b.ResetTimer()
			t := processor()
			if _, err := MonteCarlo(p, r, MCOptions{Draws: b.N, Workers: 1}); err != nil {
				b.Fatal(err)
			}
			b.ReportMetric((processor()-t)/float64(b.N)/1e3, "cpu-us/op")
		})
	}
}

// BenchmarkIteration is one step with evaluation on reduced data: flat in the
// number of wavelengths.
func BenchmarkIteration(b *testing.B) {
	for _, nuisance := range []bool{false, true} {
		for _, w := range []int{61, 601, 6001} {
			b.Run(fmt.Sprintf("nuisance=%v/w=%d", nuisance, w), func(b *testing.B) {
				p := benchSet(3, w, nuisance, 1)
				var s Solver
				if _, err := s.Solve(p, Options{Bare: true}); err != nil {
					b.Fatal(err)
				}
				s.c.frozen = !nuisance
				s.c.evaluate(&s.c.now, true)
				timed(b, func() {
					s.c.step(&s.c.now, &s.c.try, 0)
					s.c.evaluate(&s.c.try, true)
				})
			})
		}
	}
}
