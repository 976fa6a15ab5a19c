package fit

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"pgregory.net/rapid"
)

// TestSpeciesProperties: for any pH in -2..16 and any spacing, shares lie in
// 0..1 and sum to one, derivatives sum to zero and agree with differences, and
// a common shift of pH and pKa changes nothing.
func TestSpeciesProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 4).Draw(t, "steps")
		ph := rapid.Float64Range(-2, 16).Draw(t, "pH")
		pka := make([]float64, n)
		for k := range pka {
			pka[k] = rapid.Float64Range(-5, 20).Draw(t, "pKa")
		}
		n1 := n + 1
		eval := func(ph float64, pka []float64) (f, ft, fp []float64) {
			f, ft, fp = make([]float64, n1), make([]float64, n1), make([]float64, n*n1)
			species(ph, pka, f, ft, fp)
			return
		}
		f, ft, fp := eval(ph, pka)
		sum, dsum := 0.0, 0.0
		for j := range f {
			if !(f[j] >= 0 && f[j] <= 1) {
				t.Fatalf("share %d is %g", j, f[j])
			}
			sum += f[j]
			dsum += ft[j]
			total := ft[j]
			for k := range n {
				total += fp[k*n1+j]
			}
			if math.Abs(total) > 1e-12 {
				t.Fatalf("pH and pKa derivatives of share %d do not cancel: %g", j, total)
			}
		}
		if math.Abs(sum-1) > 1e-13 || math.Abs(dsum) > 1e-12 {
			t.Fatalf("sum %g, sum of derivatives %g", sum, dsum)
		}
		const h = 1e-5
		up, _, _ := eval(ph+h, pka)
		down, _, _ := eval(ph-h, pka)
		for j := range f {
			if d := (up[j] - down[j]) / (2 * h); math.Abs(d-ft[j]) > 1e-8 {
				t.Fatalf("d share %d / d pH is %g, by differences %g", j, ft[j], d)
			}
		}
		for k := range n {
			x := slices.Clone(pka)
			x[k] += h
			up, _, _ := eval(ph, x)
			x[k] -= 2 * h
			down, _, _ := eval(ph, x)
			for j := range f {
				if d := (up[j] - down[j]) / (2 * h); math.Abs(d-fp[k*n1+j]) > 1e-8 {
					t.Fatalf("d share %d / d pKa %d is %g, by differences %g", j, k, fp[k*n1+j], d)
				}
			}
		}
	})
}

// anySet draws a one- or two-step set of invented data, with amount scatter or without.
func anySet(t *rapid.T, scatter bool) Problem {
	n := rapid.IntRange(1, 2).Draw(t, "steps")
	pka := []float64{rapid.Float64Range(3, 7).Draw(t, "pKa1")}
	if n == 2 {
		pka = append(pka, pka[0]+rapid.Float64Range(1.2, 3.5).Draw(t, "apart"))
	}
	d := design{pka: pka, lo: pka[0] - rapid.Float64Range(1.5, 2.5).Draw(t, "below"), hi: pka[n-1] + rapid.Float64Range(1.5, 2.5).Draw(t, "above"),
		m: rapid.IntRange(6+3*n, 18).Draw(t, "rungs"), w: rapid.IntRange(12, 40).Draw(t, "wavelengths"),
		sigPH: rapid.Float64Range(0.002, 0.02).Draw(t, "sigma"), ukap: rapid.Float64Range(0.001, 0.02).Draw(t, "amount"),
		ub: rapid.Float64Range(1e-4, 2e-3).Draw(t, "baseline"), sigA: rapid.Float64Range(1e-4, 1e-3).Draw(t, "noise"),
		offset: 0.01, slope: 0.004}
	if !scatter {
		d.ukap = 0
	}
	return d.draw(rand.New(rand.NewPCG(rapid.Uint64().Draw(t, "seed"), 1)))
}

// mustSolve fits or stops the property.
func mustSolve(t *rapid.T, p Problem) *Result {
	r, err := Solve(p, Options{Bare: true})
	if err != nil || r.Status != Converged {
		t.Fatalf("%v %v %v", err, r.Status, r.Notes)
	}
	return r
}

// TestWhatMustNotMoveThePKa (needs 3.1): gain, a common flat blank error per
// rung within its prior's reach, the order of wavelengths and of rungs, and the
// scale do not move it; a common shift of all readings moves it by just that.
func TestWhatMustNotMoveThePKa(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := anySet(t, true)
		r := mustSolve(t, p)
		same := func(what string, q Problem, shift, tol float64) {
			s := mustSolve(t, q)
			for k := range r.Full.PKa {
				for _, d := range []float64{s.Full.PKa[k] - r.Full.PKa[k], s.Own.PKa[k] - r.Own.PKa[k]} {
					if math.Abs(d-shift) > tol {
						t.Fatalf("%s moves pKa %d by %g", what, k, d)
					}
				}
				if v := s.Full.CovOwn[k*(p.Steps+1)] / r.Full.CovOwn[k*(p.Steps+1)]; math.Abs(v-1) > 1e-5 {
					t.Fatalf("%s changes the own variance by %g", what, v)
				}
			}
		}
		w, m := len(p.WavelengthNM), len(p.PH)
		q := p
		q.A, q.NoiseWave = slices.Clone(p.A), slices.Clone(p.NoiseWave)
		for i := range q.A {
			q.A[i] *= 1.7
		}
		for j := range q.NoiseWave {
			q.NoiseWave[j] *= 1.7
		}
		q.UBaseline *= 1.7
		same("gain", q, 0, 1e-8)

		q = p
		q.PH = slices.Clone(p.PH)
		for i := range q.PH {
			q.PH[i] += 0.123
		}
		q.Shared = slices.Clone(p.Shared)
		same("a common shift of the readings", q, 0.123, 1e-8)

		q = p
		q.A = make([]float64, len(p.A))
		for i := range m {
			for l := range w {
				q.A[i*w+l] = p.A[i*w+w-1-l]
			}
		}
		same("reversed wavelengths", q, 0, 1e-8)

		q = p
		q.PH, q.A, q.Shared = slices.Clone(p.PH), nil, slices.Clone(p.Shared)
		slices.Reverse(q.PH)
		for i := range m {
			q.A = append(q.A, p.A[(m-1-i)*w:(m-i)*w]...)
		}
		for k := range q.Shared {
			q.Shared[k].S = slices.Clone(q.Shared[k].S)
			slices.Reverse(q.Shared[k].S)
		}
		same("reversed rungs", q, 0, 1e-8)
	})
}

// TestConstantImpurity (needs 3.1): without amount scatter a constant coloured
// impurity is absorbed by the free spectra to rounding.
func TestConstantImpurity(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := anySet(t, false)
		r := mustSolve(t, p)
		w := len(p.WavelengthNM)
		q := p
		q.A = slices.Clone(p.A)
		top := rapid.Float64Range(0, 0.5).Draw(t, "impurity")
		for i := range p.PH {
			for l, nm := range p.WavelengthNM {
				q.A[i*w+l] += band(nm, 470, 30, top)
			}
		}
		s := mustSolve(t, q)
		for k := range r.Full.PKa {
			if d := s.Full.PKa[k] - r.Full.PKa[k]; math.Abs(d) > 1e-7 {
				t.Fatalf("pKa %d moves by %g", k, d)
			}
		}
	})
}

// TestBudgetProperties: rows add up, shared keys occur once per pKa, covariance
// with itself is the shared part, Cov is not below CovOwn.
func TestBudgetProperties(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		p := anySet(t, true)
		r := mustSolve(t, p)
		for _, e := range []*Estimate{&r.Own, &r.Full} {
			for k := range e.PKa {
				rows := ForStep(e.Components, k)
				at := k * (p.Steps + 1)
				if v := Variance(rows) / e.Cov[at]; math.Abs(v-1) > 1e-10 {
					t.Fatalf("rows add to %g of the variance", v)
				}
				if v := Covariance(rows, rows) / (e.Cov[at] - e.CovOwn[at]); math.Abs(v-1) > 1e-8 {
					t.Fatalf("shared part %g", v)
				}
				seen := map[string]int{}
				for _, c := range rows {
					seen[c.Key]++
				}
				for key, n := range seen {
					if n != 1 {
						t.Fatalf("%s occurs %d times", key, n)
					}
				}
			}
		}
		// Both are linearised at their own solution, so this holds up to curvature.
		if r.Full.Cov[0] > r.Own.Cov[0]*1.03 {
			t.Fatalf("full weighting %g is worse than own weighting %g", r.Full.Cov[0], r.Own.Cov[0])
		}
	})
}

// TestBucketsAndDegreesOfFreedom: JCGM 100 H.1-like bookkeeping on plain numbers.
func TestBucketsAndDegreesOfFreedom(t *testing.T) {
	rows := []Component{
		{Key: "a", C: 1, U: 3, DOF: 10, Bucket: "own"},
		{Key: "b", C: -2, U: 2, DOF: 0, Bucket: "run", Shared: true},
		{Key: "c", C: 1, U: 12, DOF: 5, Bucket: "lab", Shared: true},
	}
	within(t, "variance", Variance(rows), 169, 1e-12)
	b := Buckets(rows)
	within(t, "run", b["run"], 4, 1e-12)
	// Welch-Satterthwaite: 13^4 / (3^4/10 + 12^4/5).
	within(t, "effective degrees of freedom", EffectiveDOF(rows), 28561/(8.1+4147.2), 1e-9)
	other := []Component{{Key: "c", C: -0.5, U: 12, Shared: true}, {Key: "a", C: 9, U: 3}}
	within(t, "covariance", Covariance(rows, other), -0.5*144, 1e-12)
}
