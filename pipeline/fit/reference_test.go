package fit

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// reference fits pKa alone (no nuisance, unit noise) with gonum matrices:
// Gauss-Newton with step halving on the Kaufman Jacobian, or with forward
// differences of the projected residual. It is an oracle and a yardstick.
type reference struct {
	y           *mat.Dense // m x w, or m x m after the singular value decomposition
	ph          []float64
	n           int
	differences bool
}

// newReference takes the full matrix, or compresses it losslessly to m x m.
func newReference(p Problem, svd, differences bool) *reference {
	m, w := len(p.PH), len(p.WavelengthNM)
	y := mat.NewDense(m, w, append([]float64(nil), p.A...))
	if svd {
		var d mat.SVD
		if !d.Factorize(y, mat.SVDThin) {
			panic("singular value decomposition failed")
		}
		var u mat.Dense
		d.UTo(&u)
		val := d.Values(nil)
		_, k := u.Dims()
		for i := range m {
			for j := range k {
				u.Set(i, j, u.At(i, j)*val[j])
			}
		}
		y = &u
	}
	return &reference{y: y, ph: p.PH, n: p.Steps, differences: differences}
}

// shares is the m x (n+1) matrix of the forms and its derivatives by pKa, from
// the textbook products and not from species.
func (r *reference) shares(pka []float64) (*mat.Dense, []*mat.Dense) {
	m, n := len(r.ph), r.n
	f := mat.NewDense(m, n+1, nil)
	df := make([]*mat.Dense, n)
	for k := range df {
		df[k] = mat.NewDense(m, n+1, nil)
	}
	for i, ph := range r.ph {
		term := make([]float64, n+1)
		sum := 0.0
		for j := 0; j <= n; j++ {
			e := 0.0
			for k := 0; k < j; k++ {
				e += ph - pka[k]
			}
			term[j] = math.Pow(10, e)
			sum += term[j]
		}
		for j := 0; j <= n; j++ {
			f.Set(i, j, term[j]/sum)
		}
		for k := 0; k < n; k++ {
			lost := 0.0
			for j := k + 1; j <= n; j++ {
				lost += f.At(i, j)
			}
			for j := 0; j <= n; j++ {
				own := 0.0
				if j > k {
					own = 1
				}
				df[k].Set(i, j, -math.Ln10*f.At(i, j)*(own-lost))
			}
		}
	}
	return f, df
}

// project returns the projected residual, its sum of squares, spectra and q.
func (r *reference) project(pka []float64) (res *mat.Dense, rss float64, e, q *mat.Dense, df []*mat.Dense) {
	f, df := r.shares(pka)
	m, n1 := f.Dims()
	var qr mat.QR
	qr.Factorize(f)
	var full mat.Dense
	qr.QTo(&full)
	q = mat.DenseCopyOf(full.Slice(0, m, 0, n1))
	var qy, fit mat.Dense
	qy.Mul(q.T(), r.y)
	fit.Mul(q, &qy)
	res = &mat.Dense{}
	res.Sub(r.y, &fit)
	e = &mat.Dense{}
	if err := qr.SolveTo(e, false, r.y); err != nil {
		panic(err)
	}
	norm := mat.Norm(res, 2)
	return res, norm * norm, e, q, df
}

// fit returns pKa, covariance scaled by the residual variance and the sum of squares.
func (r *reference) fit(start []float64) (pka []float64, cov *mat.SymDense, rss float64, iterations int) {
	pka = append([]float64(nil), start...)
	res, rss, e, q, df := r.project(pka)
	var h *mat.SymDense
	for iterations = 1; iterations <= 60; iterations++ {
		jac := make([]*mat.Dense, r.n)
		for k := range jac {
			jac[k] = &mat.Dense{}
			if r.differences {
				x := append([]float64(nil), pka...)
				x[k] += 1e-7
				moved, _, _, _, _ := r.project(x)
				jac[k].Sub(moved, res)
				jac[k].Scale(-1e7, jac[k])
				continue
			}
			var qt, back mat.Dense
			jac[k].Mul(df[k], e)
			qt.Mul(q.T(), jac[k])
			back.Mul(q, &qt)
			jac[k].Sub(jac[k], &back)
		}
		h = mat.NewSymDense(r.n, nil)
		g := mat.NewVecDense(r.n, nil)
		for k := range jac {
			g.SetVec(k, inner(jac[k], res))
			for l := 0; l <= k; l++ {
				h.SetSym(k, l, inner(jac[k], jac[l]))
			}
		}
		var chol mat.Cholesky
		if !chol.Factorize(h) {
			break
		}
		var step mat.VecDense
		if err := chol.SolveVecTo(&step, g); err != nil {
			break
		}
		size, scale := mat.Norm(&step, math.Inf(1)), 1.0
		if size > 1 {
			scale = 1 / size
		}
		for range 20 {
			x := append([]float64(nil), pka...)
			for k := range x {
				x[k] += scale * step.AtVec(k)
			}
			r2, s2, e2, q2, d2 := r.project(x)
			if s2 <= rss*(1+1e-12) {
				pka, res, rss, e, q, df = x, r2, s2, e2, q2, d2
				break
			}
			scale /= 2
		}
		if size < 1e-10 {
			break
		}
	}
	cov = mat.NewSymDense(r.n, nil)
	var chol mat.Cholesky
	if chol.Factorize(h) {
		_ = chol.InverseTo(cov)
	}
	return pka, cov, rss, iterations
}

// inner is the sum of products of the elements.
func inner(a, b *mat.Dense) float64 {
	s := 0.0
	x, y := a.RawMatrix(), b.RawMatrix()
	for i := 0; i < x.Rows; i++ {
		u, v := x.Data[i*x.Stride:i*x.Stride+x.Cols], y.Data[i*y.Stride:i*y.Stride+y.Cols]
		for j := range u {
			s += u[j] * v[j]
		}
	}
	return s
}

var benchPKa = [][]float64{{7.1}, {5.2, 8.1}, {4.1, 6.3, 8.7}, {3.6, 5.4, 7.4, 9.3}}

// benchSet is m = 20 by w wavelengths with noise 2e-4.
func benchSet(n, w int, nuisance bool, seed uint64) Problem {
	d := design{pka: benchPKa[n-1], lo: benchPKa[n-1][0] - 2, hi: benchPKa[n-1][n-1] + 2, m: 20, w: w, sigA: 2e-4}
	if nuisance {
		d.sigPH, d.ukap, d.ub, d.offset, d.slope = 0.008, 0.003, 5e-4, 0.01, 0.004
	}
	p := d.draw(rand.New(rand.NewPCG(seed, 77)))
	p.Start = make([]float64, n)
	for k := range p.Start {
		p.Start[k] = benchPKa[n-1][k] + 0.2
	}
	if !nuisance {
		p.SigmaPH = nil
	}
	return p
}

// TestAgainstGonum: pKa to 1e-8 and standard errors to 1e-6 of two independent
// implementations on the full matrix and after a singular value decomposition.
func TestAgainstGonum(t *testing.T) {
	for n := 1; n <= 4; n++ {
		for seed := range uint64(4) {
			p := benchSet(n, 121, false, seed)
			r, err := Solve(p, Options{Bare: true})
			if err != nil || r.Status != Converged {
				t.Fatalf("n=%d: %v %v", n, err, r.Status)
			}
			for _, svd := range []bool{false, true} {
				pka, cov, rss, _ := newReference(p, svd, false).fit(p.Start)
				for k := range pka {
					within(t, "pKa", r.Full.PKa[k], pka[k], 1e-8)
					// gonum's covariance is for unit noise: ours for noise 2e-4.
					ref := 2e-4 * math.Sqrt(cov.At(k, k))
					got := math.Sqrt(r.Full.Cov[k*(n+1)])
					within(t, "standard error", got/ref, 1, 1e-6)
				}
				within(t, "sum of squares", r.Full.Objective*4e-8/rss, 1, 1e-8)
			}
		}
	}
}
