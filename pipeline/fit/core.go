package fit

import "math"

// core is the state of one minimisation. It minimises
//
//	phi = | W (Y - B E) |^2 + |a|^2 + |k|^2 + |b|^2
//
// over pKa, whitened reading errors a (eta_i = sigma_i a_i + sum_k s_ik u_k b_k),
// whitened log amounts k (kappa_i = u_amount k_i) and whitened shared errors b,
// with the spectra E at their best for every trial (variable projection).
//
// The step is that of Gauss-Newton on all unknowns. Given pKa, b and E the rungs
// are independent, so a_i and k_i are eliminated rung by rung (a 2 x 2 matrix),
// and only the components of E inside the n+1 (+1 with offsets) dimensional row
// space that the pKa can reach take part: the linear system has n + shared +
// (n+1)(n+2) unknowns whatever the number of rungs and wavelengths. Eliminating
// E first instead gives Kaufman's (1975) Jacobian; the step is the same one.
type core struct {
	*reduced
	n, n1, np, q, ne, nb int
	slope                bool // the second entry of p is the apparent slope (n = 1)
	fixed                bool // spectra are given: the last entry of p is the log amount
	full                 bool // residuals from the full matrix, not from the Gram matrix

	ph, sig []float64
	ukap    float64
	shift   []float64 // m*nb: s_ik u_k
	frozen  bool      // a, k and b take no part
	rough   bool      // descend only as far as a start needs
	lambda  float64   // first damping of a descent
	pin     int       // index of a parameter of p held fixed, or -1
	pair    int       // p[pair+1]-p[pair] is held fixed, or -1

	lib  []float64 // n1*n1: coordinates of the given spectra
	lib0 []float64 // n1: their part along v
	libY []float64 // m*n1: data in those coordinates
	rest float64   // sum of squares outside those coordinates

	now, try frame
	a        system
}

// params are the nonlinear unknowns.
type params struct{ p, a, k, b []float64 }

// A frame is everything evaluated at one set of parameters.
type frame struct {
	params
	t, mult             []float64 // m: latent pH, exp(kappa)/r
	bm, bt, bp          []float64 // m*n1, m*n1, np*m*n1
	q, r, ri            []float64 // orthonormal factor of bm
	q0, r0, ri0, e0, b0 []float64 // the same for the rows weighted for the offset direction
	g, psi, l           []float64 // gram*q (m*n1); q'gram q; its factor
	ee                  []float64 // n1*w, q'y: only in full-matrix mode
	c                   []float64 // m*q residual coordinates
	dt, dk, dp          []float64 // m*q, m*q, np*m*q derivative coordinates of the model
	rss, phi            float64
}

// shape sizes the buffers for np parameters and nb shared errors.
func (c *core) shape(np, nb int) {
	c.n1, c.np, c.nb, c.pin, c.pair = c.n+1, np, nb, -1, -1
	c.lambda, c.rough = 1e-3, false
	c.q = c.n1
	if c.base {
		c.q++
	}
	c.ne = c.q * c.n1
	if c.fixed {
		c.ne = 0
	}
	for _, f := range []*frame{&c.now, &c.try} {
		f.shape(c)
	}
	c.a.shape(c.ne + c.np + c.nb)
}

func (f *frame) shape(c *core) {
	m, n1, q := c.m, c.n1, c.q
	f.p, f.a, f.k, f.b = grow(f.p, c.np), grow(f.a, m), grow(f.k, m), grow(f.b, c.nb)
	f.t, f.mult = grow(f.t, m), grow(f.mult, m)
	f.bm, f.bt, f.bp = grow(f.bm, m*n1), grow(f.bt, m*n1), grow(f.bp, c.np*m*n1)
	f.q, f.r, f.ri = grow(f.q, m*n1), grow(f.r, n1*n1), grow(f.ri, n1*n1)
	f.q0, f.r0, f.ri0 = grow(f.q0, m*n1), grow(f.r0, n1*n1), grow(f.ri0, n1*n1)
	f.e0, f.b0 = grow(f.e0, n1), grow(f.b0, m*n1)
	f.g, f.psi, f.l = grow(f.g, m*n1), grow(f.psi, n1*n1), grow(f.l, n1*n1)
	f.c, f.dt, f.dk = grow(f.c, m*q), grow(f.dt, m*q), grow(f.dk, m*q)
	f.dp = grow(f.dp, c.np*m*q)
	if c.full {
		f.ee = grow(f.ee, n1*c.w)
	}
}

// set copies parameters into the frame.
func (f *frame) set(x params) {
	copy(f.p, x.p)
	copy(f.a, x.a)
	copy(f.k, x.k)
	copy(f.b, x.b)
}

// zero sets all but the pKa to nothing.
func (f *frame) zero() {
	clear(f.a)
	clear(f.k)
	clear(f.b)
}

// evaluate computes phi at the frame's parameters, and with deriv the
// coordinates that the step needs.
func (c *core) evaluate(f *frame, deriv bool) {
	c.design(f)
	if c.fixed {
		c.evaluateFixed(f)
		return
	}
	m, n1 := c.m, c.n1
	orthonormalise(f.q, f.r, f.bm, m, n1)
	if c.full {
		c.projectFull(f)
	} else {
		c.projectGram(f)
	}
	if c.base {
		for i := 0; i < m; i++ {
			for j := 0; j < n1; j++ {
				f.b0[i*n1+j] = f.bm[i*n1+j] * c.w0[i]
			}
		}
		orthonormalise(f.q0, f.r0, f.b0, m, n1)
		for j := 0; j < n1; j++ {
			s := 0.0
			for i := 0; i < m; i++ {
				s += f.q0[i*n1+j] * c.y0[i] * c.w0[i]
			}
			f.e0[j] = s
		}
		last := c.q - 1
		for i := 0; i < m; i++ {
			r := c.y0[i] * c.w0[i]
			for j := 0; j < n1; j++ {
				r -= f.q0[i*n1+j] * f.e0[j]
			}
			f.c[i*c.q+last] = r
			f.rss += r * r
		}
	}
	c.penalise(f)
	if deriv {
		c.coordinates(f)
	}
}

// penalise adds the priors.
func (c *core) penalise(f *frame) {
	f.phi = f.rss
	if c.frozen {
		return
	}
	for i := range f.a {
		f.phi += f.a[i]*f.a[i] + f.k[i]*f.k[i]
	}
	for _, b := range f.b {
		f.phi += b * b
	}
}

// design fills the weighted shares of the forms and their derivatives.
func (c *core) design(f *frame) {
	m, n, n1, np := c.m, c.n, c.n1, c.np
	var fr, ft [maxSteps + 1]float64
	var fp [maxSteps * (maxSteps + 1)]float64
	for i := 0; i < m; i++ {
		t := c.ph[i] + c.sig[i]*f.a[i]
		for k := range f.b {
			t += c.shift[i*c.nb+k] * f.b[k]
		}
		x := t
		if c.slope {
			x = f.p[0] + f.p[1]*(t-f.p[0])
		}
		species(x, f.p[:n], fr[:n1], ft[:n1], fp[:n*n1])
		mult := c.rung[i]
		if f.k[i] != 0 {
			mult *= math.Exp(c.ukap * f.k[i])
		}
		if c.fixed {
			mult *= math.Exp(f.p[np-1])
		}
		f.t[i], f.mult[i] = t, mult
		for j := 0; j < n1; j++ {
			d := ft[j]
			if c.slope {
				// x = p + s (t - p): d/dt = s f', d/ds = (t-p) f', d/dp = -s f' in all.
				f.bp[i*n1+j] = -f.p[1] * d * mult
				f.bp[(m+i)*n1+j] = (t - f.p[0]) * d * mult
				d *= f.p[1]
			} else {
				for k := 0; k < n; k++ {
					f.bp[(k*m+i)*n1+j] = fp[k*n1+j] * mult
				}
			}
			f.bm[i*n1+j] = fr[j] * mult
			f.bt[i*n1+j] = d * mult
			if c.fixed {
				f.bp[((np-1)*m+i)*n1+j] = fr[j] * mult
			}
		}
	}
}

// projectGram computes the residual sum of squares from the Gram matrix.
func (c *core) projectGram(f *frame) {
	m, n1 := c.m, c.n1
	for i := 0; i < m; i++ {
		var s [maxSteps + 1]float64
		row := c.gram[i*m : (i+1)*m]
		for l, x := range row {
			ql := f.q[l*n1 : l*n1+n1]
			for j, y := range ql {
				s[j] += x * y
			}
		}
		copy(f.g[i*n1:(i+1)*n1], s[:n1])
	}
	f.rss = c.trace
	for j := 0; j < n1; j++ {
		for k := 0; k <= j; k++ {
			s := 0.0
			for i := 0; i < m*n1; i += n1 {
				s += f.q[i+j] * f.g[i+k]
			}
			f.psi[j*n1+k], f.psi[k*n1+j] = s, s
		}
		f.rss -= f.psi[j*n1+j]
	}
}

// projectFull does the same on the full matrix, without cancellation; g then
// holds the residual times the projected spectra.
func (c *core) projectFull(f *frame) {
	m, n1, w := c.m, c.n1, c.w
	clear(f.ee)
	for i := 0; i < m; i++ {
		row := c.y[i*w : (i+1)*w]
		for j := 0; j < n1; j++ {
			q, e := f.q[i*n1+j], f.ee[j*w:(j+1)*w]
			for l, y := range row {
				e[l] += q * y
			}
		}
	}
	for j := 0; j < n1; j++ {
		for k := 0; k <= j; k++ {
			s := dot(f.ee[j*w:(j+1)*w], f.ee[k*w:(k+1)*w])
			f.psi[j*n1+k], f.psi[k*n1+j] = s, s
		}
	}
	f.rss = 0
	for i := 0; i < m; i++ {
		row := c.y[i*w : (i+1)*w]
		var g [maxSteps + 1]float64
		for l, y := range row {
			for j := 0; j < n1; j++ {
				y -= f.q[i*n1+j] * f.ee[j*w+l]
			}
			f.rss += y * y
			for j := 0; j < n1; j++ {
				g[j] += y * f.ee[j*w+l]
			}
		}
		copy(f.g[i*n1:(i+1)*n1], g[:n1])
	}
}

// coordinates expresses residuals and model derivatives in an orthonormal
// basis of the row space of the spectra (and of the offset direction).
func (c *core) coordinates(f *frame) {
	m, n1, q := c.m, c.n1, c.q
	invertUpper(f.ri, f.r, n1)
	semiCholesky(f.l, f.psi, n1, 1e-15)
	for i := 0; i < m; i++ {
		var res [maxSteps + 1]float64
		for j := 0; j < n1; j++ {
			res[j] = f.g[i*n1+j]
			if !c.full {
				for k := 0; k < n1; k++ {
					res[j] -= f.q[i*n1+k] * f.psi[k*n1+j]
				}
			}
		}
		for j := 0; j < n1; j++ { // res L'^-1, a zero pivot contributes nothing
			s := res[j]
			for k := 0; k < j; k++ {
				s -= f.l[j*n1+k] * f.c[i*q+k]
			}
			if f.l[j*n1+j] == 0 {
				f.c[i*q+j] = 0
			} else {
				f.c[i*q+j] = s / f.l[j*n1+j]
			}
		}
	}
	var x, x0 [(maxSteps + 1) * (maxSteps + 1)]float64
	multiply(x[:], f.ri, f.l, n1) // R^-1 L
	if c.base {
		invertUpper(f.ri0, f.r0, n1)
		for j := 0; j < n1; j++ {
			for k := j; k < n1; k++ {
				x0[j] += f.ri0[j*n1+k] * f.e0[k]
			}
		}
	}
	if !c.frozen {
		c.map1(f.dt, f.bt, x[:], x0[:])
		c.map1(f.dk, f.bm, x[:], x0[:])
	}
	for k := 0; k < c.np; k++ {
		c.map1(f.dp[k*m*q:(k+1)*m*q], f.bp[k*m*n1:(k+1)*m*n1], x[:], x0[:])
	}
}

// multiply writes a*b to dst, all n x n.
func multiply(dst, a, b []float64, n int) {
	for i := 0; i < n; i++ {
		for j := 0; j < n; j++ {
			s := 0.0
			for k := 0; k < n; k++ {
				s += a[i*n+k] * b[k*n+j]
			}
			dst[i*n+j] = s
		}
	}
}

// map1 turns rows of shares (m*n1) into coordinates (m*q).
func (c *core) map1(dst, src, x, x0 []float64) {
	m, n1, q := c.m, c.n1, c.q
	for i := 0; i < m; i++ {
		row := src[i*n1 : (i+1)*n1]
		out := dst[i*q : (i+1)*q]
		clear(out)
		for k, v := range row {
			for j, y := range x[k*n1 : k*n1+n1] {
				out[j] += v * y
			}
		}
		if c.base {
			s := 0.0
			for k, v := range row {
				s += v * x0[k]
			}
			out[q-1] = s * c.w0[i]
		}
	}
}

// evaluateFixed is evaluate for given spectra.
func (c *core) evaluateFixed(f *frame) {
	m, n1, q := c.m, c.n1, c.q
	c.map1(f.dt, f.bt, c.lib, c.lib0)
	c.map1(f.dk, f.bm, c.lib, c.lib0)
	for k := 0; k < c.np; k++ {
		c.map1(f.dp[k*m*q:(k+1)*m*q], f.bp[k*m*n1:(k+1)*m*n1], c.lib, c.lib0)
	}
	f.rss = c.rest
	for i := 0; i < m; i++ {
		for j := 0; j < q; j++ {
			y := 0.0
			if j < n1 {
				y = c.libY[i*n1+j]
			} else {
				y = c.y0[i] * c.w0[i]
			}
			r := y - f.dk[i*q+j]
			f.c[i*q+j] = r
			f.rss += r * r
		}
	}
	c.penalise(f)
}
