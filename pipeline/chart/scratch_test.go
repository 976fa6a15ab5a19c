package chart

import (
	"math/rand/v2"
	"testing"
)

func TestScratchShort(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	r := Rules{Individuals: 3, EWMAWeight: .2, EWMAWidth: 2.864, CusumSlack: .5, CusumDecision: 4.774, SelfStarting: 4.774, MovingRange: 4.28, Runs: Runs{OneSide: 9, TwoOfThree: true}}
	for _, n := range []int{0, 7, 8, 12, 19, 20, 30, 60} {
		count := map[string]int{}
		runs, nights := 3000, 100
		refused := 0
		for range runs {
			vs := make([]Value, n)
			for i := range vs {
				vs[i] = Value{Night: i, X: rng.NormFloat64()}
			}
			b := Learn(vs, 1)
			if n == 0 {
				b = Known(0, 1)
			}
			if !b.Usable() {
				refused++
				continue
			}
			c := NewChart(b, r)
			seen := map[string]bool{}
			for i := range nights {
				for _, f := range c.Next(Value{Night: 100 + i, X: rng.NormFloat64()}).Flags {
					if !seen[f.Rule] {
						seen[f.Rule] = true
						count[f.Rule]++
					}
				}
			}
		}
		s := map[string]float64{}
		for k, v := range count {
			s[k[:min(len(k), 16)]] = float64(int(1000*float64(v)/float64(runs-refused))) / 1000
		}
		t.Logf("n %d refused %d: %v", n, refused, s)
	}
}
