package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// dense is the brute-force form of the model: every absorbance is one entry of
// a long vector, offsets are integrated out by their dense covariance, and
// nothing is eliminated by structure.
type dense struct {
	p    Problem
	m, w int
	invs []*mat.SymDense // inverse w x w covariance of each rung, offset included
}

func newDense(p Problem) *dense {
	d := &dense{p: p, m: len(p.PH), w: len(p.WavelengthNM)}
	for i := range d.m {
		c := mat.NewSymDense(d.w, nil)
		r := 1.0
		if p.NoiseRung != nil {
			r = p.NoiseRung[i]
		}
		for a := range d.w {
			for b := a; b < d.w; b++ {
				v := p.UBaseline * p.UBaseline
				if a == b {
					v += sq(r * p.NoiseWave[a])
				}
				c.SetSym(a, b, v)
			}
		}
		var ch mat.Cholesky
		if !ch.Factorize(c) {
			panic("covariance of one rung")
		}
		inv := mat.NewSymDense(d.w, nil)
		if err := ch.InverseTo(inv); err != nil {
			panic(err)
		}
		d.invs = append(d.invs, inv)
	}
	return d
}

// rows gives the amount-weighted shares at the latent pH (m x n1) and their derivative by pH.
func (d *dense) rows(pka, eta, kappa []float64) (b, bt *mat.Dense, bp []*mat.Dense) {
	n := len(pka)
	ph := make([]float64, d.m)
	for i := range ph {
		ph[i] = d.p.PH[i] + eta[i]
	}
	ref := reference{ph: ph, n: n}
	f, df := ref.shares(pka)
	bt = mat.NewDense(d.m, n+1, nil)
	for i := range d.m {
		for j := 0; j <= n; j++ {
			mean := 0.0
			for k := 0; k <= n; k++ {
				mean += float64(k) * f.At(i, k)
			}
			bt.Set(i, j, math.Ln10*f.At(i, j)*(float64(j)-mean)*math.Exp(kappa[i]))
		}
	}
	for i := range d.m {
		for j := 0; j <= n; j++ {
			f.Set(i, j, f.At(i, j)*math.Exp(kappa[i]))
			for k := range df {
				df[k].Set(i, j, df[k].At(i, j)*math.Exp(kappa[i]))
			}
		}
	}
	return f, bt, df
}

// spectra by dense generalised least squares, and the sum of squares that remains.
func (d *dense) spectra(b *mat.Dense) (e *mat.Dense, rss float64) {
	_, n1 := b.Dims()
	k := n1 * d.w
	h, g := mat.NewSymDense(k, nil), mat.NewVecDense(k, nil)
	for i := range d.m {
		for j := range n1 {
			for a := range d.w {
				v := 0.0
				for c := range d.w {
					v += d.invs[i].At(a, c) * d.p.A[i*d.w+c]
				}
				g.SetVec(j*d.w+a, g.AtVec(j*d.w+a)+b.At(i, j)*v)
				for l := range n1 {
					for c := range d.w {
						if l*d.w+c >= j*d.w+a {
							h.SetSym(j*d.w+a, l*d.w+c, h.At(j*d.w+a, l*d.w+c)+b.At(i, j)*b.At(i, l)*d.invs[i].At(a, c))
						}
					}
				}
			}
		}
	}
	var ch mat.Cholesky
	if !ch.Factorize(h) {
		panic("normal matrix of the spectra")
	}
	var x mat.VecDense
	if err := ch.SolveVecTo(&x, g); err != nil {
		panic(err)
	}
	e = mat.NewDense(n1, d.w, append([]float64(nil), x.RawVector().Data...))
	for i := range d.m {
		res := mat.NewVecDense(d.w, nil)
		for a := range d.w {
			v := d.p.A[i*d.w+a]
			for j := range n1 {
				v -= b.At(i, j) * e.At(j, a)
			}
			res.SetVec(a, v)
		}
		rss += mat.Inner(res, d.invs[i], res)
	}
	return e, rss
}

// covariance is the generalised least squares covariance of the pKa with the
// readings, amounts, offsets and shared errors all in the dense covariance of
// the data; told selects what the weighting knows, truth what happens.
func (d *dense) covariance(r *Result, est *Estimate, told bool) *mat.Dense {
	n, n1, size := d.p.Steps, d.p.Steps+1, d.m*d.w
	b, bt, bp := d.rows(est.PKa, est.Eta, est.Kappa)
	e, _ := d.spectra(b)
	x := mat.NewDense(size, n+n1*d.w, nil)
	jt, jk := mat.NewDense(size, d.m, nil), mat.NewDense(size, d.m, nil)
	for i := range d.m {
		for a := range d.w {
			row := i*d.w + a
			for j := range n1 {
				for k := range n {
					x.Set(row, k, x.At(row, k)+bp[k].At(i, j)*e.At(j, a))
				}
				x.Set(row, n+j*d.w+a, b.At(i, j))
				jt.Set(row, i, jt.At(row, i)+bt.At(i, j)*e.At(j, a))
				jk.Set(row, i, jk.At(row, i)+b.At(i, j)*e.At(j, a))
			}
		}
	}
	truth := mat.NewSymDense(size, nil)
	for i := range d.m {
		var c mat.SymDense
		var ch mat.Cholesky
		ch.Factorize(d.invs[i])
		_ = ch.InverseTo(&c)
		for a := range d.w {
			for q := a; q < d.w; q++ {
				truth.SetSym(i*d.w+a, i*d.w+q, c.At(a, q))
			}
		}
	}
	eta := mat.NewSymDense(d.m, nil)
	for i := range d.m {
		eta.SetSym(i, i, sq(d.p.SigmaPH[i]))
	}
	addRandom := func(v *mat.SymDense, j *mat.Dense, s mat.Symmetric) {
		var t, u mat.Dense
		t.Mul(j, s)
		u.Mul(&t, j.T())
		for a := range size {
			for q := a; q < size; q++ {
				v.SetSym(a, q, v.At(a, q)+u.At(a, q))
			}
		}
	}
	addRandom(truth, jt, eta)
	kap := mat.NewSymDense(d.m, nil)
	for i := range d.m {
		kap.SetSym(i, i, sq(d.p.UAmount))
	}
	addRandom(truth, jk, kap)
	weight := mat.NewSymDense(size, nil)
	weight.CopySym(truth)
	shared := mat.NewSymDense(d.m, nil)
	for _, s := range d.p.Shared {
		for i := range d.m {
			for l := i; l < d.m; l++ {
				shared.SetSym(i, l, shared.At(i, l)+s.S[i]*s.S[l]*s.U*s.U)
			}
		}
	}
	addRandom(truth, jt, shared)
	if told {
		weight.CopySym(truth)
	}
	var ch mat.Cholesky
	if !ch.Factorize(weight) {
		panic("dense covariance")
	}
	var vx, h, inv mat.Dense
	if err := ch.SolveTo(&vx, x); err != nil {
		panic(err)
	}
	h.Mul(x.T(), &vx)
	if err := inv.Inverse(&h); err != nil {
		panic(err)
	}
	var tr, tv, out mat.Dense // inv x' V^-1 truth V^-1 x inv
	tr.Mul(&vx, &inv)
	tv.Mul(truth, &tr)
	out.Mul(tr.T(), &tv)
	return &out
}

// oracleSet is small enough for dense matrices.
func oracleSet(n int, seed uint64) Problem {
	pka := benchPKa[n-1]
	d := design{pka: pka, lo: pka[0] - 2, hi: pka[n-1] + 2, m: 7 + 2*n, w: 9,
		sigPH: 0.01, ukap: 0.006, ub: 2e-3, sigA: 4e-4, offset: 0.012, slope: 0.006}
	p := d.draw(rand.New(rand.NewPCG(seed, uint64(n))))
	p.NoiseRung = make([]float64, len(p.PH))
	for i := range p.NoiseRung {
		p.NoiseRung[i] = 0.7 + 0.1*float64(i%5)
		p.SigmaPH[i] *= 0.8 + 0.1*float64(i%4)
	}
	for j := range p.NoiseWave {
		p.NoiseWave[j] *= 0.6 + 0.12*float64(j)
	}
	return p
}

// TestObjectiveAgainstDense: the offset marginalised through one special
// direction and the Gram matrix give the brute-force objective at any point.
func TestObjectiveAgainstDense(t *testing.T) {
	for n := 1; n <= 3; n++ {
		p := oracleSet(n, 5)
		d := newDense(p)
		rng := rand.New(rand.NewPCG(9, uint64(n)))
		var s Solver
		if err := s.prepare(&p, Options{}); err != nil {
			t.Fatal(err)
		}
		c := &s.c
		c.shape(n, 0)
		for range 5 {
			eta, kappa := make([]float64, d.m), make([]float64, d.m)
			pen := 0.0
			c.frozen = false
			for k := range n {
				c.now.p[k] = benchPKa[n-1][k] + 0.3*rng.NormFloat64()
			}
			for i := range d.m {
				c.now.a[i], c.now.k[i] = rng.NormFloat64(), rng.NormFloat64()
				eta[i], kappa[i] = p.SigmaPH[i]*c.now.a[i], p.UAmount*c.now.k[i]
				pen += sq(c.now.a[i]) + sq(c.now.k[i])
			}
			c.evaluate(&c.now, false)
			b, _, _ := d.rows(c.now.p, eta, kappa)
			_, rss := d.spectra(b)
			within(t, "objective over brute force", c.now.phi/(rss+pen), 1, 1e-9)
		}
	}
}

// TestCovarianceAgainstDense: covariance of both estimates, with what the
// weighting did not know included, to 1e-6 of the brute-force sandwich.
func TestCovarianceAgainstDense(t *testing.T) {
	for n := 1; n <= 3; n++ {
		p := oracleSet(n, 8)
		r, err := Solve(p, Options{})
		if err != nil || r.Status != Converged {
			t.Fatalf("%v %v", err, r.Status)
		}
		d := newDense(p)
		for name, e := range map[string]*Estimate{"own": &r.Own, "full": &r.Full} {
			want := d.covariance(r, e, name == "full")
			for k := range n {
				for l := range n {
					scale := math.Sqrt(want.At(k, k) * want.At(l, l))
					within(t, name+" covariance", e.Cov[k*n+l]/scale, want.At(k, l)/scale, 1e-6)
				}
				within(t, name+" budget adds up", Variance(ForStep(e.Components, k))/e.Cov[k*(n+1)], 1, 1e-12)
				sum := 0.0
				for i := range d.m {
					sum += e.Gain[k*d.m+i]
				}
				within(t, name+" gains of a common shift", sum, 1, 1e-6)
			}
			for j := range r.SpectraSD {
				if k := n + j; name == "full" {
					within(t, "spectrum sd", r.SpectraSD[j]/math.Sqrt(want.At(k, k)), 1, 1e-5)
				}
			}
		}
	}
}

// TestMinimumAgainstGeneralSolver: the structured descent ends where the
// general Levenberg-Marquardt ends that knows nothing of the structure.
func TestMinimumAgainstGeneralSolver(t *testing.T) {
	for n := 1; n <= 2; n++ {
		p := oracleSet(n, 21)
		r, err := Solve(p, Options{Bare: true})
		if err != nil || r.Status != Converged {
			t.Fatalf("%v %v", err, r.Status)
		}
		for _, shared := range [][]Shared{nil, p.Shared} {
			est := &r.Own
			if shared != nil {
				est = &r.Full
			}
			got := generalFit(t, p, shared)
			for k := range n {
				within(t, "pKa", est.PKa[k], got.X[k], 1e-8)
			}
			within(t, "objective", est.Objective/got.RSS, 1, 1e-9)
		}
	}
}

// generalFit minimises over pKa, spectra, readings, amounts, offsets and shared errors at once.
func generalFit(t *testing.T, p Problem, shared []Shared) *LMResult {
	t.Helper()
	m, w, n := len(p.PH), len(p.WavelengthNM), p.Steps
	n1 := n + 1
	unknowns := n + 3*m + len(shared) + n1*w
	residual := func(x, r []float64) {
		pka, a, k, o := x[:n], x[n:n+m], x[n+m:n+2*m], x[n+2*m:n+3*m]
		b, e := x[n+3*m:n+3*m+len(shared)], x[n+3*m+len(shared):]
		ph := make([]float64, m)
		for i := range ph {
			ph[i] = p.PH[i] + p.SigmaPH[i]*a[i]
			for q, s := range shared {
				ph[i] += s.S[i] * s.U * b[q]
			}
		}
		f, _ := (&reference{ph: ph, n: n}).shares(pka)
		at := 0
		for i := range m {
			for l := range w {
				v := 0.0
				for j := range n1 {
					v += f.At(i, j) * e[j*w+l]
				}
				r[at] = (p.A[i*w+l] - math.Exp(p.UAmount*k[i])*v - p.UBaseline*o[i]) / (p.NoiseRung[i] * p.NoiseWave[l])
				at++
			}
		}
		for _, v := range [][]float64{a, k, o, b} {
			at += copy(r[at:], v)
		}
	}
	start := make([]float64, unknowns)
	copy(start, p.Start)
	if p.Start == nil {
		copy(start, benchPKa[n-1])
	}
	for j := range n1 {
		for l, nm := range p.WavelengthNM {
			start[n+3*m+len(shared)+j*w+l] = spectrumOf(j, nm)
		}
	}
	out, err := LevenbergMarquardt(residual, m*w+3*m+len(shared), start, LMOptions{})
	if err != nil || out.Status != Converged {
		t.Fatalf("general solver: %v %v", err, out.Status)
	}
	return out
}

// TestGainIsDerivative: with errorless data the gains are the derivatives of
// the estimate by the readings.
func TestGainIsDerivative(t *testing.T) {
	for n := 1; n <= 3; n++ {
		pka := benchPKa[n-1]
		d := design{pka: pka, lo: pka[0] - 2, hi: pka[n-1] + 2, m: 8 + 2*n, w: 21}
		p := d.draw(rand.New(rand.NewPCG(1, 1)))
		for i := range p.SigmaPH {
			p.SigmaPH[i] = 0.01 + 0.002*float64(i%3)
		}
		for j := range p.NoiseWave {
			p.NoiseWave[j] = 5e-4
		}
		p.UAmount, p.UBaseline = 0.005, 1e-3
		ones, lean := make([]float64, len(p.PH)), make([]float64, len(p.PH))
		for i, v := range p.PH {
			ones[i], lean[i] = 1, v-7
		}
		p.Shared = []Shared{{Key: "o", U: 0.01, S: ones}, {Key: "s", U: 0.004, S: lean}}
		r, err := Solve(p, Options{Bare: true})
		if err != nil || r.Status != Converged {
			t.Fatalf("%v %v", err, r.Status)
		}
		for i := range p.PH {
			const h = 1e-5
			q := p
			q.PH = append([]float64(nil), p.PH...)
			q.PH[i] += h
			up, _ := Solve(q, Options{Bare: true})
			q.PH[i] -= 2 * h
			down, _ := Solve(q, Options{Bare: true})
			for k := range n {
				at := k*len(p.PH) + i
				within(t, "own gain", r.Own.Gain[at], (up.Own.PKa[k]-down.Own.PKa[k])/(2*h), 2e-5)
				within(t, "full gain", r.Full.Gain[at], (up.Full.PKa[k]-down.Full.PKa[k])/(2*h), 2e-5)
			}
		}
	}
}

// TestConstrainedAgreesWhereItDoesNotBite: the path for non-negative spectra,
// which eliminates nothing, repeats both estimates and their covariances.
func TestConstrainedAgreesWhereItDoesNotBite(t *testing.T) {
	for n := 1; n <= 3; n++ {
		p := oracleSet(n, 3)
		for i := range p.A {
			p.A[i] += 0.3 // lifts every spectrum clear of zero
		}
		free, err := Solve(p, Options{Bare: true})
		if err != nil || free.Status != Converged {
			t.Fatalf("%v %v", err, free.Status)
		}
		p.NonNegative = true
		r, err := Solve(p, Options{Bare: true})
		if err != nil || r.Status != Converged {
			t.Fatalf("%v %v %v", err, r.Status, r.Notes)
		}
		for _, pair := range [][2]*Estimate{{&r.Own, &free.Own}, {&r.Full, &free.Full}} {
			for k := range n {
				within(t, "pKa", pair[0].PKa[k], pair[1].PKa[k], 1e-7)
				within(t, "variance", pair[0].Cov[k*(n+1)]/pair[1].Cov[k*(n+1)], 1, 1e-5)
				within(t, "own variance", pair[0].CovOwn[k*(n+1)]/pair[1].CovOwn[k*(n+1)], 1, 1e-5)
			}
			within(t, "objective", pair[0].Objective/pair[1].Objective, 1, 1e-9)
		}
	}
}
