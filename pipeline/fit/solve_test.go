package fit

import (
	"math"
	"math/rand/v2"
	"testing"
)

func TestSolveNuisance(t *testing.T) {
	for n, pka := range [][]float64{{7.1}, {5.2, 8.1}, {3.9, 6.2, 8.8}, {3.1, 5.3, 7.6, 9.9}} {
		d := design{pka: pka, lo: pka[0] - 2, hi: pka[n] + 2, m: 14 + 4*n, w: 61,
			sigPH: 0.01, ukap: 0.005, ub: 5e-4, sigA: 5e-4, offset: 0.01, slope: 0.005}
		for seed := range uint64(5) {
			p := d.draw(rand.New(rand.NewPCG(seed, 1)))
			r, err := Solve(p, Options{})
			if err != nil {
				t.Fatal(err)
			}
			if r.Status != Converged {
				t.Errorf("n=%d seed %d: %v after %d iterations", n+1, seed, r.Status, r.Iterations)
			}
			for k := range pka {
				s := math.Sqrt(r.Full.Cov[k*(n+2)])
				if z := (r.Full.PKa[k] - pka[k]) / s; math.Abs(z) > 5 {
					t.Errorf("n=%d seed %d pKa %d: %.5f is %.1f sd from the truth", n+1, seed, k, r.Full.PKa[k], z)
				}
			}
		}
	}
}
