package fit

import (
	"math"
)

// spectra writes the absorbance spectra of the forms and their standard
// deviations, nuisance parameters included, from the state after influences.
func (c *core) spectra(p *Problem, r *Result) {
	n1, w := c.n1, c.w
	r.Spectra, r.SpectraSD = make([]float64, n1*w), make([]float64, n1*w)
	f := &c.now
	if c.fixed {
		amount := math.Exp(f.p[c.np-1])
		for i, x := range p.Library {
			r.Spectra[i] = x * amount
			if p.ULibrary != nil {
				r.SpectraSD[i] = p.ULibrary[i] * amount
			}
		}
		return
	}
	e := c.projected(f)
	for j := 0; j < n1; j++ {
		b0 := 0.0
		for k := j; k < n1; k++ {
			x := f.ri[j*n1+k]
			for l, y := range e[k*w : (k+1)*w] {
				r.Spectra[j*w+l] += x * y
			}
			if c.base {
				b0 += f.ri0[j*n1+k] * f.e0[k]
			}
		}
		for l := range w {
			r.Spectra[j*w+l] = (r.Spectra[j*w+l] + b0*c.v[l]) / c.inv[l]
		}
	}
	c.spectraSD(e, r.SpectraSD)
}

// projected is q'y (n1*w).
func (c *core) projected(f *frame) []float64 {
	n1, w := c.n1, c.w
	e := make([]float64, n1*w)
	for i := 0; i < c.m; i++ {
		row := c.y[i*w : (i+1)*w]
		for j := 0; j < n1; j++ {
			q, out := f.q[i*n1+j], e[j*w:(j+1)*w]
			for l, y := range row {
				out[l] += q * y
			}
		}
	}
	return e
}

// spectraSD: inside the row space the covariance of the spectra is a block of
// the inverse normal matrix; outside it only the noise acts.
func (c *core) spectraSD(e, sd []float64) {
	n1, q, w, f := c.n1, c.q, c.w, &c.now
	n := c.ne + c.np + c.nb
	lowerRows(f.l, e, n1, w) // rows of e become orthonormal
	cov := make([]float64, n*n)
	for k := 0; k < c.ne; k++ {
		x := cov[k*n : (k+1)*n]
		x[k] = 1
		forward(c.a.mat, n, x)
		backward(c.a.mat, n, x)
	}
	small := make([]float64, q*q)
	u := make([]float64, q)
	tri := func(l, g, h int) float64 {
		if l < n1 {
			return f.ri[g*n1+h]
		}
		return f.ri0[g*n1+h]
	}
	for g := 0; g < n1; g++ {
		noise := 0.0
		for h := g; h < n1; h++ {
			noise += f.ri[g*n1+h] * f.ri[g*n1+h]
		}
		for a := 0; a < q; a++ {
			for b := 0; b < q; b++ {
				s := 0.0
				for h := g; h < n1; h++ {
					for k := g; k < n1; k++ {
						s += tri(a, g, h) * cov[(a*n1+h)*n+b*n1+k] * tri(b, g, k)
					}
				}
				small[a*q+b] = s
			}
		}
		for l := range w {
			outside := 1.0
			for a := 0; a < q; a++ {
				if a < n1 {
					u[a] = e[a*w+l]
				} else {
					u[a] = c.v[l]
				}
				outside -= u[a] * u[a]
			}
			s := noise * math.Max(outside, 0)
			for a := range u {
				for b := range u {
					s += u[a] * small[a*q+b] * u[b]
				}
			}
			sd[g*w+l] = math.Sqrt(math.Max(s, 0)) / c.inv[l]
		}
	}
}

// residual writes A minus model minus offset (absorbance, m*w) when out is not
// nil and returns its root mean square.
func (c *core) residual(p *Problem, offset []float64, out []float64) float64 {
	n1, w, f := c.n1, c.w, &c.now
	var e []float64
	var b0 [maxSteps + 1]float64
	if c.fixed {
		e = p.Library
	} else {
		e = make([]float64, n1*w)
		x := c.projected(f)
		for j := 0; j < n1; j++ {
			for k := j; k < n1; k++ {
				for l, y := range x[k*w : (k+1)*w] {
					e[j*w+l] += f.ri[j*n1+k] * y
				}
				if c.base {
					b0[j] += f.ri0[j*n1+k] * f.e0[k]
				}
			}
			for l := range w {
				e[j*w+l] = (e[j*w+l] + b0[j]*c.v[l]) / c.inv[l]
			}
		}
	}
	sum := 0.0
	for i := 0; i < c.m; i++ {
		for l := range w {
			x := p.A[i*w+l] - offset[i]
			for j := 0; j < n1; j++ {
				x -= f.bm[i*n1+j] / c.rung[i] * e[j*w+l]
			}
			sum += x * x
			if out != nil {
				out[i*w+l] = x
			}
		}
	}
	return math.Sqrt(sum / float64(c.m*w))
}

// tracyWidom is the 0.999 quantile of the law of the largest eigenvalue of
// noise about the edge (Tracy & Widom 1996, Johnstone 2001; from memory).
const tracyWidom = 3.27

// components compares singular values with what noise alone would give.
func (c *core) components(opt Options, r *Result) {
	m, w := c.m, c.w
	val := symmetricEigen(append([]float64(nil), c.gram...), m, nil)
	cols := float64(w)
	if c.base {
		cols--
	}
	eff := c.effective(opt.Effective)
	rank := min(m, int(cols))
	if rank < 1 {
		return
	}
	unit := r.NoiseSD / math.Sqrt(float64(m*w))
	rm, rw := math.Sqrt(float64(m)), math.Sqrt(eff)
	r.NoiseEdge = unit * (rm + rw)
	spread := (rm + rw) * math.Cbrt(1/rm+1/rw)
	limit := unit * math.Sqrt((rm+rw)*(rm+rw)+tracyWidom*spread)
	r.Singular = make([]float64, rank)
	for j := range r.Singular {
		r.Singular[j] = unit * math.Sqrt(math.Max(val[j], 0))
		if r.Singular[j] > limit {
			r.Components++
		}
	}
	r.Indicator = malinowski(val[:rank], math.Max(float64(m), cols))
}

// malinowski is the number of components at the minimum of the indicator
// function IND = RE/(c-s)^2, RE = sqrt(sum of eigenvalues beyond s / (r (c-s)))
// for an r x c matrix with r >= c (Malinowski 1977).
func malinowski(eigen []float64, r float64) int {
	c := len(eigen)
	best, at := math.Inf(1), 0
	for s := 1; s < c; s++ {
		sum := 0.0
		for _, l := range eigen[s:] {
			sum += math.Max(l, 0)
		}
		k := float64(c - s)
		if ind := math.Sqrt(sum/(r*k)) / (k * k); ind < best {
			best, at = ind, s
		}
	}
	return at
}

// apparentSlope refits with a free slope of the titration, starting from the
// own-weighted solution in s.one, for one step with free or fixed spectra.
func (s *Solver) apparentSlope(opt Options, r *Result) {
	c := &s.c
	if c.n != 1 || c.fixed {
		return
	}
	c.slope = true
	c.shape(2, 0)
	s.restart()
	c.now.p[1] = 1
	st, _ := c.descend(opt.limit())
	c.influences(&s.inf)
	if st == Converged && s.inf.ok {
		r.Slope, r.SlopeSD = c.now.p[1], math.Sqrt(s.inf.cov[3])
	}
	c.slope = false
	c.shape(1, 0)
	s.restart()
}

// without copies the reduced data with one rung left out.
func (d *reduced) without(src *reduced, out int) {
	m := src.m - 1
	d.m, d.w, d.base, d.v, d.vnorm, d.inv = m, src.w, src.base, src.v, src.vnorm, src.inv
	d.gram = grow(d.gram, m*m)
	d.y0, d.d, d.w0, d.rung = grow(d.y0, m), grow(d.d, m), grow(d.w0, m), grow(d.rung, m)
	for i, a := 0, 0; i < src.m; i++ {
		if i == out {
			continue
		}
		d.y0[a], d.d[a], d.w0[a], d.rung[a] = src.y0[i], src.d[i], src.w0[i], src.rung[i]
		for j, b := 0, 0; j < src.m; j++ {
			if j != out {
				d.gram[a*m+b] = src.gram[i*src.m+j]
				b++
			}
		}
		a++
	}
	d.sums()
}

// drop copies v without element (group) i of size k.
func drop(dst, v []float64, i, k int) []float64 {
	dst = append(dst[:0], v[:i*k]...)
	return append(dst, v[(i+1)*k:]...)
}

// leaveOneOut refits without each rung in turn, warm-started, with the
// weighting of the full estimate that c.now holds.
func (s *Solver) leaveOneOut(shared []Shared, opt Options, r *Result) {
	c := &s.c
	if c.fixed || c.full || c.m < c.n+3 {
		return
	}
	var red reduced
	sub := core{reduced: &red, n: c.n, n1: c.n1, ukap: c.ukap}
	r.LeaveOneOut = make([]float64, c.m)
	for i := 0; i < c.m; i++ {
		red.without(c.reduced, i)
		sub.ph, sub.sig = drop(sub.ph, c.ph, i, 1), drop(sub.sig, c.sig, i, 1)
		sub.shape(c.n, len(shared))
		sub.shift = drop(sub.shift, c.shift, i, len(shared))
		copy(sub.now.p, c.now.p)
		copy(sub.now.b, c.now.b)
		sub.now.a = drop(sub.now.a, c.now.a, i, 1)
		sub.now.k = drop(sub.now.k, c.now.k, i, 1)
		sub.lambda = 0
		if st, _ := sub.descend(opt.limit()); st == Unusable {
			continue
		}
		for k := 0; k < c.n; k++ {
			d := sub.now.p[k] - c.now.p[k]
			if math.Abs(d) > math.Abs(r.LeaveOneOut[i]) {
				r.LeaveOneOut[i] = d
			}
		}
	}
}

// shares writes the share of each form per rung at the latent pH.
func (c *core) shares(r *Result) {
	n1 := c.n1
	r.Alpha = make([]float64, c.m*n1)
	var ft [maxSteps + 1]float64
	for i := 0; i < c.m; i++ {
		species(c.now.t[i], c.now.p[:c.n], r.Alpha[i*n1:(i+1)*n1], ft[:n1], nil)
	}
}
