package fit

import (
	"math"
	"os"
	"testing"
)

// studies are designs that would stand under the checks of a laboratory.
// Invented; the sizes of the errors are typical (needs 5.4).
func studies() map[string]Design {
	base := func(pka []float64, ph []float64) Design {
		d := Design{PKa: pka, Jitter: 0.15, PH: ph, WavelengthNM: lin(380, 700, 41),
			SigmaPH: 0.01, UAmount: 0.005, UBaseline: 5e-4, NoiseA: 6e-4}
		lean := make([]float64, len(ph))
		for i, v := range ph {
			lean[i] = v - 7
		}
		d.Shared = []Shared{{Key: "offset", U: 0.01, Unit: "pH", S: fill(1, len(ph))}, {Key: "slope", U: 0.005, Unit: "1", S: lean}}
		return d
	}
	amount := base([]float64{7.2}, lin(5.2, 9.2, 24))
	amount.UAmount = 0.02
	even := base([]float64{6.6}, lin(4.6, 8.6, 9))
	even.UAmount, even.SigmaPH = 0.001, 0.006
	return map[string]Design{
		"one step, 5 rungs":               base([]float64{7}, lin(5.2, 8.8, 5)),
		"one step, 9 rungs, even amounts": even,
		"one step, 12 rungs":              base([]float64{8.3}, lin(6.3, 10.3, 12)),
		"one step, 24 rungs, 2 % amounts": amount,
		"three solutions":                 base([]float64{7}, []float64{3.5, 7.1, 10.5}),
		"five solutions":                  base([]float64{7}, []float64{3.5, 6.7, 7.1, 7.4, 10.5}),
		"two steps":                       base([]float64{5.5, 8}, lin(3.5, 10, 16)),
		"three steps":                     base([]float64{4, 6.2, 8.8}, lin(2, 10.8, 24)),
	}
}

// TestCoverage: the stated 95 % intervals hold the truth, random part and total
// separately, shared offset and slope counted once, and the mean squared error is
// that of the marginal Cramer-Rao bound. The short form asks what a few hundred
// sets can show (binomial bounds of four standard errors); PKVIGIL_LONG=1 runs
// 5,000 sets per design and asks 94..96 % and 10 %.
func TestCoverage(t *testing.T) {
	sets, long := 300, os.Getenv("PKVIGIL_LONG") != ""
	if long {
		sets = 5000
	}
	for name, d := range studies() {
		if !long && len(d.PKa) == 3 {
			sets = 120
		} else if !long {
			sets = 300
		}
		seen := 0
		r, err := Coverage(d, CoverageOptions{Sets: sets, Seed: 2024, Workers: 2, Progress: func(done, total int) { seen = done }})
		if err != nil {
			t.Fatal(err)
		}
		if seen != sets || r.Failed > 0 {
			t.Errorf("%s: %d of %d done, %d failed", name, seen, sets, r.Failed)
		}
		for _, row := range r.Rows {
			t.Logf("%-32s pKa %d %-4s random %.4f total %.4f sd %.5f bound %.5f ratio %.3f stated %.3f",
				name, row.Step+1, row.Weighting, row.Random, row.Total, row.SD, row.Bound, row.Ratio, row.Stated)
			low, high := 0.94, 0.96
			slack := 0.10
			if !long {
				se := 4 * math.Sqrt(0.95*0.05/float64(sets))
				low, high = 0.95-se, math.Min(0.95+se, 1)
				slack = 4 * math.Sqrt(2/float64(sets))
			}
			if row.Random < low || row.Random > high || row.Total < low || row.Total > high {
				t.Errorf("%s pKa %d %s: coverage random %.4f total %.4f, asked %.3f..%.3f", name, row.Step+1, row.Weighting, row.Random, row.Total, low, high)
			}
			if row.Weighting == "full" && math.Abs(row.Ratio-1) > slack {
				t.Errorf("%s pKa %d: mean squared error %.3f of the bound", name, row.Step+1, row.Ratio)
			}
			// An estimate that does not know of the shared errors cannot be better.
			if row.Weighting == "own" && row.Stated < 0.99 {
				t.Errorf("%s pKa %d: own weighting states %.3f of the bound", name, row.Step+1, row.Stated)
			}
		}
	}
}

// TestSharedWeightingPays: for two and more steps the spectra fix the
// differences, so knowing the shared slope and offset makes the estimate
// markedly better, by what the stated variances say.
func TestSharedWeightingPays(t *testing.T) {
	d := studies()["three steps"]
	r, err := Coverage(d, CoverageOptions{Sets: 60, Seed: 1, Workers: 2})
	if err != nil {
		t.Fatal(err)
	}
	if own := r.Rows[0]; own.Weighting != "own" || own.Stated < 1.3 {
		t.Errorf("first pKa, own weighting: stated variance %.2f of the bound", own.Stated)
	}
}

// TestCoverageWhenToldWrong: what becomes of the 95 % interval when sigma_pH or
// u_amount are wrong by a factor of two.
func TestCoverageWhenToldWrong(t *testing.T) {
	d := studies()["one step, 12 rungs"]
	d.Shared = nil
	for _, c := range []struct {
		name        string
		sigma, kap  float64
		least, most float64
	}{
		{"half sigma", 0.5, 1, 0.55, 0.84}, // 1.96/2 standard deviations would be 67 %
		{"twice sigma", 2, 1, 0.985, 1},
		{"half amount", 1, 0.5, 0.80, 0.96},
		{"twice amount", 1, 2, 0.94, 1},
	} {
		e := d
		e.ToldSigmaPH, e.ToldUAmount = c.sigma, c.kap
		r, err := Coverage(e, CoverageOptions{Sets: 400, Seed: 3, Workers: 2})
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("%-12s coverage %.3f", c.name, r.Rows[1].Total)
		if v := r.Rows[1].Total; v < c.least || v > c.most {
			t.Errorf("%s: coverage %.3f, expected %.2f..%.2f", c.name, v, c.least, c.most)
		}
	}
}

// TestCoverageRepeats: same seed, same numbers, whatever the workers.
func TestCoverageRepeats(t *testing.T) {
	d := studies()["one step, 5 rungs"]
	a, err := Coverage(d, CoverageOptions{Sets: 60, Seed: 9, Workers: 1})
	if err != nil {
		t.Fatal(err)
	}
	b, _ := Coverage(d, CoverageOptions{Sets: 60, Seed: 9, Workers: 2})
	for i := range a.Rows {
		if a.Rows[i] != b.Rows[i] {
			t.Errorf("%+v\n%+v", a.Rows[i], b.Rows[i])
		}
	}
	stop := make(chan struct{})
	close(stop)
	c, err := Coverage(d, CoverageOptions{Sets: 60, Seed: 9, Stop: stop})
	if err != nil || c.Sets-c.Failed != 0 {
		t.Errorf("a stopped study goes on: %+v %v", c, err)
	}
}

// TestObjectiveIsChiSquare: over many sets of a right model the misfit on rungs
// has the stated chi-square law (Kolmogorov distance of its p values).
func TestObjectiveIsChiSquare(t *testing.T) {
	const sets = 150
	var ps []float64
	for seed := range uint64(sets) {
		p := ladderSet(seed+500, func(d *design) { d.w = 41 })
		var s Solver
		r, err := s.Solve(p, Options{Bare: true})
		if err != nil {
			t.Fatal(err)
		}
		m := Model{Steps: 1, Result: r}
		m.misfit(&s, &p)
		ps = append(ps, m.P)
	}
	worst := 0.0
	for _, x := range ps {
		below := 0.0
		for _, y := range ps {
			if y <= x {
				below += 1.0 / sets
			}
		}
		worst = math.Max(worst, math.Abs(below-x))
	}
	// Kolmogorov 1933: 0.1 % point of sqrt(n) D is 1.95.
	if worst*math.Sqrt(sets) > 1.95 {
		t.Errorf("the misfit is not chi-square: distance %.3f", worst)
	}
}
