package fit

import (
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// ladderSet is the usual one-step set of these tests: 12 rungs of step 0.364.
func ladderSet(seed uint64, change func(*design)) Problem {
	d := design{pka: []float64{7.1}, lo: 5.1, hi: 9.104, m: 12, w: 81, sigPH: 0.008, ukap: 0.003, ub: 5e-4, sigA: 6e-4}
	if change != nil {
		change(&d)
	}
	return d.draw(rand.New(rand.NewPCG(seed, 4)))
}

// TestMonteCarloAgainstLinear: where the model is nearly linear both agree, the
// interval is near +-1.96 u, and the numbers do not depend on the workers.
func TestMonteCarloAgainstLinear(t *testing.T) {
	for n := 1; n <= 3; n++ {
		p := benchSet(n, 101, true, 11)
		r, err := Solve(p, Options{Bare: true})
		if err != nil || r.Status != Converged {
			t.Fatalf("%v %v", err, r.Status)
		}
		a, err := MonteCarlo(p, r, MCOptions{Draws: 2500, Seed: 5, Workers: 2, Keep: true})
		if err != nil {
			t.Fatal(err)
		}
		b, err := MonteCarlo(p, r, MCOptions{Draws: 500, Seed: 5, Workers: 1, Keep: true})
		if err != nil {
			t.Fatal(err)
		}
		for k, s := range a.Steps {
			if !slices.Equal(s.Draws[:500], b.Steps[k].Draws) {
				t.Error("the draws depend on the number of workers")
			}
			within(t, "mean", (s.Mean-r.Full.PKa[k])/s.Linear, 0, 0.15)
			within(t, "u over linear", s.U/s.Linear, 1, 0.055) // 2500 draws: 1.4 % standard error
			within(t, "interval", (s.High-s.Low)/(2*1.96*s.U), 1, 0.07)
			if s.Differs {
				t.Error("said to differ from linear propagation")
			}
		}
		if a.Failed > 0 {
			t.Errorf("%d refits failed", a.Failed)
		}
	}
}

// TestMonteCarloSharesDraws: two sets of one calibration have draws with the
// covariance that their budgets state.
func TestMonteCarloSharesDraws(t *testing.T) {
	var draws [2][]float64
	var rows [2][]Component
	for i := range draws {
		p := benchSet(1, 61, true, uint64(i+1))
		r, err := Solve(p, Options{Bare: true})
		if err != nil {
			t.Fatal(err)
		}
		mc, err := MonteCarlo(p, r, MCOptions{Draws: 4000, Seed: uint64(i) + 100, Keep: true, Workers: 2})
		if err != nil {
			t.Fatal(err)
		}
		draws[i], rows[i] = mc.Steps[0].Draws, ForStep(r.Full.Components, 0)
	}
	ma, ua := meanSD(draws[0])
	mb, ub := meanSD(draws[1])
	cov := 0.0
	for i := range draws[0] {
		cov += (draws[0][i] - ma) * (draws[1][i] - mb) / float64(len(draws[0])-1)
	}
	want := Covariance(rows[0], rows[1])
	within(t, "correlation of the draws", cov/(ua*ub), want/math.Sqrt(Variance(rows[0])*Variance(rows[1])), 0.03)
	if want < 0.5*Variance(rows[0]) {
		t.Error("the shared offset should dominate here")
	}
}

func TestMonteCarloAdaptive(t *testing.T) {
	p := benchSet(1, 41, true, 2)
	r, err := Solve(p, Options{Bare: true})
	if err != nil {
		t.Fatal(err)
	}
	mc, err := MonteCarlo(p, r, MCOptions{Draws: 1000, Adaptive: true, Max: 30000, Seed: 1, Workers: 2})
	if err != nil {
		t.Fatal(err)
	}
	if !mc.Stable || mc.Draws < 2000 {
		t.Errorf("stable %v after %d draws", mc.Stable, mc.Draws)
	}
}

// lin is an even ladder.
func lin(lo, hi float64, n int) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = lo + (hi-lo)*float64(i)/float64(n-1)
	}
	return x
}

func fill(v float64, n int) []float64 {
	x := make([]float64, n)
	for i := range x {
		x[i] = v
	}
	return x
}

func TestModelChoice(t *testing.T) {
	for n := 1; n <= 3; n++ {
		right := 0
		const sets = 5
		for seed := range uint64(sets) {
			p := benchSet(n, 61, true, seed)
			p.Start = nil
			c, err := ModelChoice(p, 4)
			if err != nil {
				t.Fatal(err)
			}
			if c.Steps == n {
				right++
			} else {
				for _, m := range c.Models {
					t.Logf("n=%d: %d steps: misfit %.1f on %d, p %.2g, gain %.1f: %s", n, m.Steps, m.Misfit, m.DOF, m.P, m.Gain, m.Reason)
				}
			}
		}
		if right < sets-1 {
			t.Errorf("n=%d: right in %d of %d", n, right, sets)
		}
	}
}

// TestSecondDye: below the stated limit nothing is claimed, above it share and
// pKa come out.
func TestSecondDye(t *testing.T) {
	make2 := func(share float64, seed uint64) Problem {
		p := ladderSet(seed, func(d *design) { d.m, d.lo, d.hi = 16, 4.8, 9.6 })
		w := len(p.WavelengthNM)
		for i, ph := range p.PH {
			b := 1 / (1 + math.Pow(10, 8.3-ph))
			for l, nm := range p.WavelengthNM {
				change := spectrumOf(1, nm-15) - spectrumOf(0, nm-15)
				p.A[i*w+l] += share * (spectrumOf(0, nm-15) + b*change)
			}
		}
		return p
	}
	for _, c := range []struct {
		share float64
		found bool
	}{{0, false}, {0.002, false}, {0.06, true}} {
		p := make2(c.share, 12)
		r, err := Solve(p, Options{})
		if err != nil {
			t.Fatal(err)
		}
		h, err := SecondDye(p, r, Options{})
		if err != nil {
			t.Fatal(err)
		}
		t.Logf("share %.3f: found %v share %.4f pKa %.2f +- %.2f limit %.4f third %.2f: %s", c.share, h.Found, h.Share, h.PKa, h.UPKa, h.Limit, h.Third, h.Text)
		if h.Found != c.found || h.Limit < 0.002 || h.Limit > 0.05 {
			t.Errorf("share %.3f: %+v", c.share, h.Text)
		}
		if c.found {
			within(t, "share", h.Share, c.share, 0.35*c.share)
			within(t, "pKa", h.PKa, 8.3, 0.25)
			within(t, "main", h.Main, 7.1, 0.03)
			if len(h.Spectrum) != len(p.WavelengthNM) {
				t.Error("no spectrum")
			}
		}
	}
}

// TestNextPH: what the imagined rung promises is what a real one brings.
func TestNextPH(t *testing.T) {
	p := ladderSet(2, func(d *design) { d.lo, d.hi = 5.1, 7.6 })
	r, err := Solve(p, Options{Bare: true})
	if err != nil {
		t.Fatal(err)
	}
	next, err := NextPH(p, r)
	if err != nil {
		t.Fatal(err)
	}
	within(t, "u now", next.UNow[0], math.Sqrt(r.Own.CovOwn[0]), 1e-6)
	if next.PH < 8 {
		t.Errorf("the ladder ends at 7.6 and the base form is missing, yet pH %.1f is proposed", next.PH)
	}
	rng := rand.New(rand.NewPCG(8, 8))
	d := design{pka: []float64{7.1}, lo: next.PH, hi: next.PH + 1e-9, m: 2, w: 81, sigPH: 0.008, ukap: 0.003, ub: 5e-4, sigA: 6e-4}
	one := d.draw(rng)
	w := len(p.WavelengthNM)
	p.PH, p.A, p.SigmaPH = append(p.PH, one.PH[0]), append(p.A, one.A[:w]...), append(p.SigmaPH, 0.008)
	after, err := Solve(p, Options{Bare: true})
	if err != nil {
		t.Fatal(err)
	}
	within(t, "u then over promised", math.Sqrt(after.Own.CovOwn[0])/next.UThen[0], 1, 0.1)
}

// TestReml: reading noise and amounts of 40 sets come back although single sets
// shrink their residuals; wrong starts do not matter.
func TestReml(t *testing.T) {
	var sets []Problem
	for seed := range uint64(40) {
		p := ladderSet(seed+100, func(d *design) { d.sigPH, d.ukap, d.w, d.offset = 0.012, 0.006, 41, 0.01 })
		for i := range p.SigmaPH {
			p.SigmaPH[i] = 0.005
		}
		p.UAmount = 0.02
		sets = append(sets, p)
	}
	r, err := Reml(sets)
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%+v", r)
	within(t, "sigma pH in standard errors", (r.SigmaPH-0.012)/r.USigmaPH, 0, 3)
	within(t, "u amount in standard errors", (r.UAmount-0.006)/r.UUAmount, 0, 3)
	if r.USigmaPH > 0.12*r.SigmaPH || r.UUAmount > 0.12*r.UAmount {
		t.Errorf("standard errors %.2g and %.2g are too large for 40 sets", r.USigmaPH, r.UUAmount)
	}
	if _, err := Reml(sets[:19]); err == nil {
		t.Error("19 sets were accepted")
	}
}

// TestNonNegative: a spectrum that noise or a wrong blank pushes below zero is
// held at zero, the others follow, and the objective can only rise.
func TestNonNegative(t *testing.T) {
	p := ladderSet(7, func(d *design) { d.sigA, d.hi = 2e-3, 7.6 })
	for i := range p.A {
		p.A[i] -= 0.02
	}
	free, err := Solve(p, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if slices.Min(free.Spectra) >= 0 {
		t.Fatal("the case does not bite")
	}
	p.NonNegative = true
	r, err := Solve(p, Options{})
	if err != nil || r.Status != Converged {
		t.Fatalf("%v %v %v", err, r.Status, r.Notes)
	}
	if slices.Min(r.Spectra) < 0 || r.Full.Objective < free.Full.Objective || !r.FullMatrix || len(r.Notes) == 0 {
		t.Errorf("least spectrum %g, objective %g against %g", slices.Min(r.Spectra), r.Full.Objective, free.Full.Objective)
	}
}

// TestNonNegativeIsOptimal compares with the definition: no feasible direction
// improves (Karush 1939, Kuhn & Tucker 1951).
func TestNonNegativeIsOptimal(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 9))
	for range 300 {
		n, m := 1+rng.IntN(5), 8
		b, y := make([]float64, m*n), make([]float64, m)
		for i := range b {
			b[i] = rng.Float64()
		}
		for i := range y {
			y[i] = rng.NormFloat64()
		}
		bb, by, x := make([]float64, n*n), make([]float64, n), make([]float64, n)
		for i := range m {
			for j := range n {
				by[j] += b[i*n+j] * y[i]
				for k := range n {
					bb[j*n+k] += b[i*n+j] * b[i*n+k]
				}
			}
		}
		nonNegative(bb, by, n, x)
		for j := range n {
			g := by[j] - dot(bb[j*n:(j+1)*n], x)
			if x[j] < 0 || (x[j] > 0 && math.Abs(g) > 1e-9) || (x[j] == 0 && g > 1e-9) {
				t.Fatalf("x %v gradient %g at %d", x, g, j)
			}
		}
	}
}

// TestFullMatrixFallback: without noise the Gram matrix loses the sum of
// squares; the full matrix is used and says so.
func TestFullMatrixFallback(t *testing.T) {
	for n := 1; n <= 3; n++ {
		pka := benchPKa[n-1]
		d := design{pka: pka, lo: pka[0] - 2, hi: pka[n-1] + 2, m: 18, w: 101}
		p := d.draw(rand.New(rand.NewPCG(1, 2)))
		p.NoiseWave, p.SigmaPH = nil, nil
		rng := rand.New(rand.NewPCG(5, 5))
		for i := range p.A {
			p.A[i] += 1e-9 * rng.NormFloat64()
		}
		r, err := Solve(p, Options{})
		if err != nil || r.Status != Converged || !r.FullMatrix {
			t.Fatalf("n=%d %v %v full %v", n, err, r.Status, r.FullMatrix)
		}
		_, _, rss, _ := newReference(p, false, false).fit(pka)
		within(t, "noise found", r.NoiseSD/1e-9, 1, 0.1)
		within(t, "sum of squares", r.Full.Objective*sq(r.NoiseSD)/rss, 1, 1e-6)
		for k := range pka {
			within(t, "pKa", r.Full.PKa[k], pka[k], 1e-8)
		}
	}
}

// TestLeaveOneOut against fits of the shortened problem.
func TestLeaveOneOut(t *testing.T) {
	p := ladderSet(5, func(d *design) { d.offset, d.slope = 0.01, 0.004 })
	r, err := Solve(p, Options{})
	if err != nil {
		t.Fatal(err)
	}
	w := len(p.WavelengthNM)
	for _, i := range []int{0, 4, 11} {
		q := p
		q.PH, q.SigmaPH = drop(nil, p.PH, i, 1), drop(nil, p.SigmaPH, i, 1)
		q.A = drop(nil, p.A, i, w)
		q.Shared = slices.Clone(p.Shared)
		for k := range q.Shared {
			q.Shared[k].S = drop(nil, p.Shared[k].S, i, 1)
		}
		s, err := Solve(q, Options{Bare: true})
		if err != nil {
			t.Fatal(err)
		}
		within(t, "change", r.LeaveOneOut[i], s.Full.PKa[0]-r.Full.PKa[0], 1e-8)
	}
}

// TestSlope: electrode slope actual/calibrated 1 + e gives n = 1/(1+e) (needs 3.2).
func TestSlope(t *testing.T) {
	d := design{pka: []float64{8.26}, lo: 6.2, hi: 10.3, m: 14, w: 61}
	p := d.draw(rand.New(rand.NewPCG(2, 2)))
	p.NoiseWave = fill(3e-4, 61)
	p.SigmaPH, p.UAmount, p.UBaseline = fill(0.008, 14), 0.003, 5e-4
	for i, v := range p.PH {
		p.PH[i] = v - 0.01*(v-7)
	}
	r, err := Solve(p, Options{})
	if err != nil || r.Status != Converged {
		t.Fatalf("%v %v", err, r.Status)
	}
	within(t, "apparent slope", r.Slope, 1/0.99, 1e-6)
	within(t, "pKa", r.Own.PKa[0], 8.26-0.0126, 5e-4)
	if !(r.SlopeSD > 0.001 && r.SlopeSD < 0.02) {
		t.Errorf("sd of the slope %g", r.SlopeSD)
	}
}

// TestLibraryFit: given spectra, the wavelength-independent amount stays free and
// the pKa of each rung counts once.
func TestLibraryFit(t *testing.T) {
	p := ladderSet(9, func(d *design) { d.offset = 0.01 })
	for j := range 2 {
		for _, nm := range p.WavelengthNM {
			p.Library = append(p.Library, 0.8*spectrumOf(j, nm)) // archived at another concentration
			p.ULibrary = append(p.ULibrary, 1e-3)
		}
	}
	r, err := Solve(p, Options{})
	if err != nil || r.Status != Converged {
		t.Fatalf("%v %v", err, r.Status)
	}
	if r.Free || math.Abs(r.Full.PKa[0]-7.1) > 4*math.Sqrt(r.Full.Cov[0]) {
		t.Errorf("library pKa %.4f +- %.4f", r.Full.PKa[0], math.Sqrt(r.Full.Cov[0]))
	}
	within(t, "budget adds up", Variance(ForStep(r.Full.Components, 0))/r.Full.Cov[0], 1, 1e-9)
	// The archived spectra matter by what a change of them does.
	row := r.Own.Components[slices.IndexFunc(r.Own.Components, func(c Component) bool { return c.Key == OwnLibrary })]
	sum := 0.0
	for j := range p.Library {
		q := p
		q.Library = slices.Clone(p.Library)
		q.Library[j] += 1e-3
		s, err := Solve(q, Options{Bare: true})
		if err != nil {
			t.Fatal(err)
		}
		sum += sq(s.Own.PKa[0] - r.Own.PKa[0])
	}
	within(t, "library row", row.C*row.U/math.Sqrt(sum), 1, 0.02)
}

func TestNoColourChange(t *testing.T) {
	p := ladderSet(3, func(d *design) { d.lo, d.hi = 2, 3.5 })
	r, err := Solve(p, Options{})
	if err != nil {
		t.Fatal(err)
	}
	if r.Status != Undetermined || len(r.Notes) == 0 {
		t.Errorf("%v %v", r.Status, r.Notes)
	}
}

// TestRefusals: every unusable input wraps ErrProblem.
func TestRefusals(t *testing.T) {
	good := golden()
	for name, change := range map[string]func(*Problem){
		"no steps":         func(p *Problem) { p.Steps = 0 },
		"five steps":       func(p *Problem) { p.Steps = 5 },
		"two rungs":        func(p *Problem) { p.PH, p.A = p.PH[:2], p.A[:16] },
		"short row":        func(p *Problem) { p.A = p.A[:95] },
		"not a number":     func(p *Problem) { p.A = slices.Clone(p.A); p.A[7] = math.NaN() },
		"negative noise":   func(p *Problem) { p.NoiseWave = fill(-1, 8) },
		"sigma too short":  func(p *Problem) { p.SigmaPH = fill(0.01, 3) },
		"zero data":        func(p *Problem) { p.A = fill(0, 96) },
		"two sizes of one": func(p *Problem) { p.Shared = []Shared{{Key: "a", U: 1}, {Key: "a", U: 2}} },
		"shared too short": func(p *Problem) { p.Shared = []Shared{{Key: "a", U: 1, S: fill(1, 3)}} },
	} {
		p := good
		change(&p)
		r, err := Solve(p, Options{})
		if !errors.Is(err, ErrProblem) || r.Status != Unusable {
			t.Errorf("%s: %v, %v", name, err, r.Status)
		}
	}
}

// TestDirectAndEqualKeys: equal keys are one unknown, and a direct effect joins
// what comes through the readings with its sign.
func TestDirectAndEqualKeys(t *testing.T) {
	p := ladderSet(1, nil)
	ones := fill(1, len(p.PH))
	p.Shared = []Shared{{Key: "t", U: 0.1, S: fill(-0.02, len(p.PH)), Direct: []float64{0.013}}}
	r, err := Solve(p, Options{Bare: true})
	if err != nil {
		t.Fatal(err)
	}
	row := r.Full.Components[slices.IndexFunc(r.Full.Components, func(c Component) bool { return c.Key == "t" })]
	within(t, "coefficient", row.C, -0.007, 1e-6)
	p.Shared = []Shared{{Key: "o", U: 0.01, S: ones}, {Key: "o", U: 0.01, S: fill(-1, len(p.PH))}}
	if r, err = Solve(p, Options{Bare: true}); err != nil {
		t.Fatal(err)
	}
	within(t, "cancelling halves of one unknown", r.Full.Cov[0]/r.Full.CovOwn[0], 1, 1e-12)
}
