package drift

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Quiet nights: the threshold calibrated on one set of series must give no more false
// cases than asked on other series, within the 97.5 % bound of Poisson counts.
func TestQuietNights(t *testing.T) {
	first, nights, runs, check := Night(20000), 24, 80, 80
	if long() {
		nights, runs, check = 40, 300, 300
	}
	last := first + Night(nights) - 1
	f := family()
	l := buildLab(1, []Design{f[0], f[2]}, []string{"RI-A", "RI-C"}, 14, first, last)
	m, err := NewModel(l.cells, Rules{}, Plain)
	if err != nil {
		t.Fatal(err)
	}
	h := l.draw(m, rand.New(rand.NewPCG(3, 4)), first, last, 1, nil)
	calls := 0
	c, err := m.Calibrate(t.Context(), h, CalibrationPlan{Seed: 1, Runs: runs, Progress: func(done, total int) { calls++ }})
	if err != nil {
		t.Fatal(err)
	}
	t.Log(c.Text)
	if calls != runs || c.Threshold > c.Bound || c.Low > c.Threshold || c.High < c.Threshold {
		t.Errorf("threshold %.2f in [%.2f, %.2f], bound %.2f, %d of %d progress calls", c.Threshold, c.Low, c.High, c.Bound, calls, runs)
	}
	rang, at, bound := 0, 0, 0
	for i := range check {
		top, _, err := m.quietRun(h, rand.New(rand.NewPCG(99, uint64(i))))
		if err != nil {
			t.Fatal(err)
		}
		if top > c.High {
			rang++
		}
		if top > c.Threshold {
			at++
		}
		if top > c.Bound {
			bound++
		}
	}
	expected := float64(check*nights) / 365
	limit := poisson975(expected)
	t.Logf("%d other quiet nights: %d false cases above the calibrated threshold, %d above the upper end of its interval, %d above the bound; %.1f tolerable, at most %d by chance (97.5 %%)", check*nights, at, rang, bound, expected, limit)
	if rang > limit || bound > limit || (long() && at > limit) {
		t.Errorf("%d and %d false cases, at most %d", rang, bound, limit)
	}
}

// poisson975 is the count that a Poisson variable of the given mean exceeds with at most 2.5 %.
func poisson975(mean float64) int {
	term := math.Exp(-mean)
	k := 0
	for sum := term; 1-sum > 0.025; sum += term {
		k++
		term *= mean / float64(k)
	}
	return k
}
