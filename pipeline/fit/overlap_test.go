package fit

import (
	"math"
	"math/rand/v2"
	"testing"
)

// overlapSet has two steps dp apart about pH 7 on 24 rungs; the intermediate lies
// half way between the end spectra (rank 2) or has a colour of its own (rank 3).
func overlapSet(dp float64, rank int) Problem {
	rng := rand.New(rand.NewPCG(5, 1))
	p := Problem{Steps: 2, PH: lin(4.5, 9.5, 24), SigmaPH: fill(0.005, 24), NoiseWave: fill(2e-4, 61)}
	for l := range 61 {
		p.WavelengthNM = append(p.WavelengthNM, 400+5*float64(l))
	}
	f, ft := make([]float64, 3), make([]float64, 3)
	for _, v := range p.PH {
		species(v+0.005*rng.NormFloat64(), []float64{7 - dp/2, 7 + dp/2}, f, ft, nil)
		for _, nm := range p.WavelengthNM {
			acid, base := band(nm, 450, 40, 0.6), band(nm, 600, 40, 0.9)
			between := (acid + base) / 2
			if rank == 3 {
				between = band(nm, 520, 40, 0.7)
			}
			p.A = append(p.A, f[0]*acid+f[1]*between+f[2]*base+2e-4*rng.NormFloat64())
		}
	}
	return p
}

// TestOverlapUncertainty repeats the simulated table of needs 4.6:
// u(pKa1)/sigma_pH for overlapping steps, rank 2 (intermediate half way) and rank 3.
func TestOverlapUncertainty(t *testing.T) {
	for _, c := range []struct{ dp, want float64 }{{0.3, 2.7}, {0.8, 3.7}, {1, 1.8}, {1.5, 0.85}, {2, 0.60}} {
		r, err := Solve(overlapSet(c.dp, 2), Options{})
		if err != nil || r.Status != Converged {
			t.Fatalf("%v: %v %v", c.dp, err, r.Status)
		}
		within(t, "rank 2: u over sigma", math.Sqrt(r.Own.CovOwn[0])/0.005/c.want, 1, 0.15)
		within(t, "difference", (r.Own.PKa[1]-r.Own.PKa[0]-c.dp)/math.Sqrt(r.Own.CovOwn[0]+r.Own.CovOwn[3]-2*r.Own.CovOwn[1]), 0, 3)
	}
	for _, dp := range []float64{0.3, 0.602, 1} {
		r, err := Solve(overlapSet(dp, 3), Options{})
		if err != nil || r.Status != Converged {
			t.Fatalf("%v: %v %v", dp, err, r.Status)
		}
		if u := math.Sqrt(r.Own.CovOwn[0]) / 0.005; u < 0.25 || u > 0.5 {
			t.Errorf("rank 3, difference %.3f: u over sigma %.2f, expected 0.3..0.5", dp, u)
		}
	}
	r, err := Solve(overlapSet(0.60206, 2), Options{})
	if err != nil || r.Status != Undetermined || r.Overlap == nil {
		t.Fatalf("the trap: %v %v", err, r.Status)
	}
	within(t, "one step instead", r.Overlap.Single, 7, 0.005)
}

// TestNoiseFromTheSet: where no noise is stated it is found in spite of reading
// errors, amounts and offsets, which rank n+1 holds.
func TestNoiseFromTheSet(t *testing.T) {
	for n := 1; n <= 3; n++ {
		p := benchSet(n, 201, true, 6)
		p.NoiseWave = nil
		r, err := Solve(p, Options{Bare: true})
		if err != nil || r.Status != Converged {
			t.Fatalf("%v %v", err, r.Status)
		}
		within(t, "noise", r.NoiseSD/2e-4, 1, 0.05)
	}
}

// TestPlainFitAllocates at most twice, whatever the number of wavelengths.
func TestPlainFitAllocates(t *testing.T) {
	p := benchSet(3, 601, false, 1)
	var s Solver
	var r Result
	run := func() {
		if err := s.Refit(&p, Options{Bare: true}, &r); err != nil {
			t.Fatal(err)
		}
	}
	run()
	if a := testing.AllocsPerRun(20, run); a > 2 {
		t.Errorf("%.0f allocations", a)
	}
}

// TestEffectiveWavelengths: noise that the instrument smooths over k points
// counts as w/k wavelengths; the variance from noise grows by k.
func TestEffectiveWavelengths(t *testing.T) {
	p := benchSet(1, 201, false, 6)
	a, err := Solve(p, Options{Bare: true})
	if err != nil {
		t.Fatal(err)
	}
	p.Effective = 201.0 / 4
	b, err := Solve(p, Options{Bare: true})
	if err != nil {
		t.Fatal(err)
	}
	within(t, "variance", b.Full.Cov[0]/a.Full.Cov[0], 4, 1e-6)
}

// TestStatisticalTrap: two equal independent groups whose intermediate lies half
// way are one step exactly (needs 4.6): reported as that, mean right.
func TestStatisticalTrap(t *testing.T) {
	rng := rand.New(rand.NewPCG(6, 6))
	ph := lin(4.5, 9.5, 24)
	p := Problem{Steps: 2, PH: ph, UAmount: 0.002, UBaseline: 2e-4, SigmaPH: fill(0.005, 24)}
	for l := range 61 {
		nm := 400 + 5*float64(l)
		p.WavelengthNM, p.NoiseWave = append(p.WavelengthNM, nm), append(p.NoiseWave, 2e-4)
	}
	for _, v := range ph {
		x := math.Pow(10, v+rng.NormFloat64()*0.005-7.1)
		amount := math.Exp(0.002 * rng.NormFloat64())
		for _, nm := range p.WavelengthNM {
			a := (band(nm, 450, 40, 0.6) + band(nm, 600, 40, 0.9)*x) / (1 + x)
			p.A = append(p.A, a*amount+2e-4*rng.NormFloat64())
		}
	}
	r, err := Solve(p, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if r.Status != Undetermined || r.Overlap == nil {
		t.Fatalf("%v, %+v", r.Status, r.Overlap)
	}
	o := r.Overlap
	if o.High-o.Low < 0.3 || o.Meaning == "" {
		t.Errorf("interval %+v", o)
	}
	q := p
	q.Steps = 1
	one, err := Solve(q, Options{})
	if err != nil || one.Status != Converged {
		t.Fatalf("%v %v", err, one.Status)
	}
	within(t, "one-step pKa", one.Full.PKa[0], 7.1, 0.01)
	// The true pair, 7.1 -+ 0.301, must be inside what is said.
	if o.Low > 0.602+0.1 {
		t.Errorf("difference 0.602 is not inside %.3f..%.3f", o.Low, o.High)
	}
	c, err := ModelChoice(p, 3)
	if err != nil {
		t.Fatal(err)
	}
	if c.Steps != 1 {
		t.Errorf("model choice: %d steps", c.Steps)
	}
}
