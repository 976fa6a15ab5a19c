package fit

import (
	"fmt"
	"math"
	"math/bits"
)

// constrained fits with spectra >= 0. For every trial each wavelength gets its
// non-negative least squares spectrum (by comparing all faces, exact for up to
// five forms); wavelengths with the same forms at zero share a projector, so the
// normal equations are sums over few groups. Offsets are explicit unknowns
// here, because the constraint couples the offset direction with the others.
// The number of unknowns is n + shared + 3m and nothing is eliminated: this path
// is taken only on request and only where the constraint bites.
type constrained struct {
	*core
	y      []float64 // m*w weighted, offset direction included
	off    []float64 // m, whitened offsets
	uo     float64
	e      []float64 // n1*w, weighted spectra
	mask   []uint8   // w, forms that are free
	groups map[uint8][]float64
	gamma  []float64 // m*(n1+1)
	rss    float64
	phi    float64
	n3, nx int
}

// newConstrained starts from the unconstrained solution in c.
func newConstrained(c *core, p *Problem) *constrained {
	m, w := c.m, c.w
	k := &constrained{core: c, y: make([]float64, m*w), off: make([]float64, m), uo: p.UBaseline,
		e: make([]float64, c.n1*w), mask: make([]uint8, w), gamma: make([]float64, m*(c.n1+1)),
		n3: c.np + c.nb + 3*m, nx: c.n1 + 1}
	for i := 0; i < m; i++ {
		// A reading without error still needs its derivative for the shared ones.
		c.sig[i] = math.Max(c.sig[i], 1e-9)
		for l := range w {
			k.y[i*w+l] = c.y[i*w+l] + c.y0[i]*c.v[l]
		}
		if c.base {
			o := c.now.c[i*c.q+c.q-1] / c.w0[i] * (1 - 1/c.d[i]) / (c.vnorm * c.rung[i])
			k.off[i] = o / k.uo
		}
	}
	return k
}

// evaluate computes spectra, groups, residual moments and phi at frame f and offsets off.
func (k *constrained) evaluate(f *frame, off []float64) {
	c, m, n1, w := k.core, k.m, k.n1, k.w
	c.design(f)
	k.groups = map[uint8][]float64{}
	clear(k.gamma)
	k.rss = 0
	bb := make([]float64, n1*n1)
	for j := 0; j < n1; j++ {
		for l := 0; l < n1; l++ {
			for i := 0; i < m; i++ {
				bb[j*n1+l] += f.bm[i*n1+j] * f.bm[i*n1+l]
			}
		}
	}
	col, by, x := make([]float64, m), make([]float64, n1), make([]float64, k.nx)
	for l := range w {
		clear(by)
		for i := 0; i < m; i++ {
			col[i] = k.y[i*w+l] - off[i]*k.uo*c.rung[i]*c.inv[l]
			for j := 0; j < n1; j++ {
				by[j] += f.bm[i*n1+j] * col[i]
			}
		}
		k.mask[l] = nonNegative(bb, by, n1, x[:n1])
		x[n1] = c.inv[l]
		g := k.groups[k.mask[l]]
		if g == nil {
			g = make([]float64, k.nx*k.nx)
			k.groups[k.mask[l]] = g
		}
		for a, u := range x {
			for b, v := range x {
				g[a*k.nx+b] += u * v
			}
		}
		for j := 0; j < n1; j++ {
			k.e[j*w+l] = x[j]
		}
		for i := 0; i < m; i++ {
			r := col[i]
			for j := 0; j < n1; j++ {
				r -= f.bm[i*n1+j] * x[j]
			}
			k.rss += r * r
			for a, u := range x {
				k.gamma[i*k.nx+a] += r * u
			}
		}
	}
	f.rss = k.rss
	c.penalise(f)
	k.phi = f.phi
	for _, o := range off {
		k.phi += o * o
	}
}

// nonNegative solves min |b x - y| with x >= 0 from bb = b'b and by = b'y and
// returns the set of free forms. All faces are compared, the full one first.
func nonNegative(bb, by []float64, n int, x []float64) uint8 {
	best, face := math.Inf(1), uint8(0)
	var a [(maxSteps + 1) * (maxSteps + 1)]float64
	var t, z [maxSteps + 1]float64
	var idx [maxSteps + 1]int
	clear(x)
	for s := 1<<n - 1; s >= 0; s-- {
		k := 0
		for j := 0; j < n; j++ {
			if s>>j&1 == 1 {
				idx[k] = j
				k++
			}
		}
		for i := 0; i < k; i++ {
			t[i] = by[idx[i]]
			for j := 0; j <= i; j++ {
				a[i*k+j] = bb[idx[i]*n+idx[j]]
			}
		}
		if k > 0 && !cholesky(a[:k*k], k) {
			continue
		}
		if k > 0 {
			forward(a[:k*k], k, t[:k])
			backward(a[:k*k], k, t[:k])
		}
		value, ok := 0.0, true
		for i := 0; i < k; i++ {
			value -= t[i] * by[idx[i]]
			ok = ok && t[i] >= 0
		}
		if !ok || value >= best {
			continue
		}
		best, face = value, uint8(s)
		clear(z[:n])
		for i := 0; i < k; i++ {
			z[idx[i]] = t[i]
		}
		copy(x, z[:n])
		if s == 1<<n-1 {
			break // the unconstrained solution is feasible
		}
	}
	return face
}

// row writes the derivative of the weighted model of rung i by unknown u in
// terms of (spectra, 1/s); false: the unknown does not touch this rung.
func (k *constrained) row(f *frame, i, u int, x []float64) bool {
	c, n1, m := k.core, k.n1, k.m
	clear(x)
	switch {
	case u < c.np:
		copy(x, f.bp[(u*m+i)*n1:(u*m+i)*n1+n1])
	case u < c.np+c.nb:
		for j := 0; j < n1; j++ {
			x[j] = f.bt[i*n1+j] * c.shift[i*c.nb+u-c.np]
		}
	default:
		u -= c.np + c.nb
		if u%m != i {
			return false
		}
		switch u / m {
		case 0:
			for j := 0; j < n1; j++ {
				x[j] = f.bt[i*n1+j] * c.sig[i]
			}
		case 1:
			for j := 0; j < n1; j++ {
				x[j] = f.bm[i*n1+j] * c.ukap
			}
		default:
			x[n1] = k.uo * c.rung[i]
		}
	}
	return true
}

// normal fills the data part of the normal matrix (n3*n3, full symmetric) and
// half the negative gradient including the priors.
func (k *constrained) normal(f *frame, off, mat, grad []float64) {
	m, nx, n3 := k.m, k.nx, k.n3
	clear(mat)
	rows := make([]float64, n3*m*nx)
	touch := make([]bool, n3*m)
	for u := 0; u < n3; u++ {
		grad[u] = -k.value(f, off, u)
		for i := 0; i < m; i++ {
			r := rows[(u*m+i)*nx : (u*m+i+1)*nx]
			if touch[u*m+i] = k.row(f, i, u, r); touch[u*m+i] {
				grad[u] += dot(r, k.gamma[i*nx:(i+1)*nx])
			}
		}
	}
	proj := make([]float64, m*m)
	for face, psi := range k.groups {
		k.projector(f, face, proj)
		k.accumulate(mat, rows, touch, proj, psi)
	}
	for u := 0; u < n3; u++ {
		for v := 0; v < u; v++ {
			mat[v*n3+u] = mat[u*n3+v]
		}
	}
}

// projector fills I - P for the forms that are free in face.
func (k *constrained) projector(f *frame, face uint8, proj []float64) {
	m, n1 := k.m, k.n1
	q, r, sub := make([]float64, m*n1), make([]float64, n1*n1), make([]float64, 0, m*n1)
	cnt := bits.OnesCount8(face)
	for i := 0; i < m; i++ {
		for j := 0; j < n1; j++ {
			if face>>j&1 == 1 {
				sub = append(sub, f.bm[i*n1+j])
			}
		}
	}
	orthonormalise(q, r, sub, m, cnt)
	for i := 0; i < m; i++ {
		for l := 0; l < m; l++ {
			proj[i*m+l] = -dot(q[i*cnt:(i+1)*cnt], q[l*cnt:(l+1)*cnt])
		}
		proj[i*m+i]++
	}
}

// accumulate adds one group: for unknowns u, v the trace of
// (I-P) rows_u psi rows_v'.
func (k *constrained) accumulate(mat, rows []float64, touch []bool, proj, psi []float64) {
	m, nx, n3 := k.m, k.nx, k.n3
	t, z := make([]float64, m*nx), make([]float64, m*nx)
	for u := 0; u < n3; u++ {
		clear(t)
		for l := 0; l < m; l++ {
			if !touch[u*m+l] {
				continue
			}
			for i := 0; i < m; i++ {
				for a, x := range rows[(u*m+l)*nx : (u*m+l+1)*nx] {
					t[i*nx+a] += proj[i*m+l] * x
				}
			}
		}
		for i := 0; i < m; i++ {
			for a := 0; a < nx; a++ {
				z[i*nx+a] = dot(t[i*nx:(i+1)*nx], psi[a*nx:(a+1)*nx])
			}
		}
		for v := 0; v <= u; v++ {
			s := 0.0
			for i := 0; i < m; i++ {
				if touch[v*m+i] {
					s += dot(rows[(v*m+i)*nx:(v*m+i+1)*nx], z[i*nx:(i+1)*nx])
				}
			}
			mat[u*n3+v] += s
		}
	}
}

// value is the whitened value of unknown u; constants have no prior.
func (k *constrained) value(f *frame, off []float64, u int) float64 {
	c := k.core
	switch {
	case u < c.np:
		return 0
	case u < c.np+c.nb:
		return f.b[u-c.np]
	}
	u -= c.np + c.nb
	switch u / k.m {
	case 0:
		return f.a[u%k.m]
	case 1:
		return f.k[u%k.m]
	}
	return off[u%k.m]
}

// move writes f+step to g and off+step to offTry.
func (k *constrained) move(f, g *frame, off, offTry, step []float64) (largest float64) {
	c, m := k.core, k.m
	for j := range g.p {
		g.p[j] = f.p[j] + step[j]
		largest = math.Max(largest, math.Abs(step[j]))
	}
	for j := range g.b {
		g.b[j] = f.b[j] + step[c.np+j]
	}
	s := step[c.np+c.nb:]
	for i := 0; i < m; i++ {
		g.a[i], g.k[i], offTry[i] = f.a[i]+s[i], f.k[i]+s[m+i], off[i]+s[2*m+i]
	}
	return largest
}

// descend is Levenberg-Marquardt on all unknowns but the spectra.
func (k *constrained) descend(limit int) (Status, int) {
	c, n3 := k.core, k.n3
	mat, a, grad, step := make([]float64, n3*n3), make([]float64, n3*n3), make([]float64, n3), make([]float64, n3)
	off := make([]float64, k.m)
	k.evaluate(&c.now, k.off)
	lambda := 1e-4
	for it := 1; it <= limit; it++ {
		k.normal(&c.now, k.off, mat, grad)
		best := k.phi
		for {
			copy(a, mat)
			for u := 0; u < n3; u++ {
				if u >= c.np {
					a[u*n3+u]++
				}
				a[u*n3+u] *= 1 + lambda
			}
			if !cholesky(a, n3) {
				return Undetermined, it
			}
			copy(step, grad)
			forward(a, n3, step)
			backward(a, n3, step)
			largest := k.move(&c.now, &c.try, k.off, off, step)
			k.evaluate(&c.try, off)
			if k.phi <= best+1e-14*c.total {
				c.now, c.try = c.try, c.now
				k.off, off = off, k.off
				lambda /= 20
				if lambda < 1e-8 {
					lambda = 0
				}
				if largest < 1e-9 && lambda < 1e-4 {
					return Converged, it
				}
				break
			}
			if lambda > 1e12 {
				return HitLimit, it
			}
			lambda = math.Max(10*lambda, 1e-4)
		}
	}
	return HitLimit, limit
}

// fill writes the constrained estimate; the forms at zero stay at zero.
func (k *constrained) fill(p *Problem, shared []Shared, out *Estimate) bool {
	c, m, n, n3 := k.core, k.m, k.core.n, k.n3
	k.evaluate(&c.now, k.off)
	mat, grad := make([]float64, n3*n3), make([]float64, n3)
	k.normal(&c.now, k.off, mat, grad)
	a := append([]float64(nil), mat...)
	for u := c.np; u < n3; u++ {
		a[u*n3+u]++
	}
	if !cholesky(a, n3) {
		return false
	}
	inf := influence{np: n}
	resp := make([]float64, n*n3) // H^-1 A, rows of the constants
	for j := 0; j < n; j++ {
		x := make([]float64, n3)
		x[j] = 1
		forward(a, n3, x)
		backward(a, n3, x)
		inf.inv = append(inf.inv, x...)
		for u := 0; u < n3; u++ {
			resp[j*n3+u] = dot(x, mat[u*n3:(u+1)*n3])
		}
	}
	out.PKa = append([]float64(nil), c.now.p[:n]...)
	out.Gain, out.Cov, out.CovOwn = make([]float64, n*m), make([]float64, n*n), make([]float64, n*n)
	out.Components = nil
	at := c.np + c.nb
	for j := 0; j < n; j++ {
		for i := 0; i < m; i++ {
			// A reading error moves the model like minus the latent error.
			out.Gain[j*m+i] = -resp[j*n3+at+i] / c.sig[i]
		}
	}
	for j := 0; j < n; j++ {
		for l := 0; l < n; l++ {
			var part [4]float64
			for i := 0; i < m; i++ {
				part[0] += out.Gain[j*m+i] * out.Gain[l*m+i] * c.sig[i] * c.sig[i]
				part[1] += resp[j*n3+at+m+i] * resp[l*n3+at+m+i]
				part[3] += resp[j*n3+at+2*m+i] * resp[l*n3+at+2*m+i]
			}
			part[2] = dot(resp[j*n3:(j+1)*n3], inf.inv[l*n3:(l+1)*n3])
			s := part[0] + part[1] + part[2] + part[3]
			out.CovOwn[j*n+l], out.Cov[j*n+l] = s, s
			if j == l {
				c.ownRows(p, j, part, out)
				for _, sh := range shared {
					out.Components = append(out.Components, sh.component(j, out.Gain[j*m:(j+1)*m]))
				}
			}
		}
	}
	out.addShared(shared, n, m)
	out.Eta, out.Kappa, out.Baseline = make([]float64, m), make([]float64, m), make([]float64, m)
	for i := 0; i < m; i++ {
		out.Eta[i], out.Kappa[i], out.Baseline[i] = c.now.t[i]-c.ph[i], c.ukap*c.now.k[i], k.uo*k.off[i]
	}
	out.Objective = k.phi
	return true
}

// constrain redoes both estimates with spectra >= 0, from the unconstrained ones.
func (s *Solver) constrain(p *Problem, shared []Shared, opt Options, r *Result) {
	c := &s.c
	bound := 0
	for pass, est := range [2]*Estimate{&r.Own, &r.Full} {
		if pass == 0 {
			c.equip(nil)
		} else {
			c.equip(shared)
		}
		s.restart()
		c.evaluate(&c.now, true)
		k := newConstrained(c, p)
		st, it := k.descend(opt.limit())
		r.Iterations += it
		if st != Converged || !k.fill(p, shared, est) {
			r.Status = st
			r.Notes = append(r.Notes, "The fit with non-negative spectra did not come to an end: "+st.String())
			return
		}
		k.report(p, est, r)
		bound = 0
		for _, v := range k.e {
			if v == 0 {
				bound++
			}
		}
	}
	r.FullMatrix = true
	r.Notes = append(r.Notes, fmt.Sprintf("Spectra constrained to be non-negative: %d of %d values stand at zero.", bound, c.n1*c.w))
}

// report replaces spectra and residual by the constrained ones.
func (k *constrained) report(p *Problem, est *Estimate, r *Result) {
	c, n1, w := k.core, k.n1, k.w
	sum := 0.0
	if len(r.Spectra) != n1*w {
		r.Spectra = make([]float64, n1*w)
	}
	for j := 0; j < n1; j++ {
		for l := range w {
			r.Spectra[j*w+l] = k.e[j*w+l] / c.inv[l]
		}
	}
	for i := 0; i < c.m; i++ {
		for l := range w {
			x := p.A[i*w+l] - est.Baseline[i]
			for j := 0; j < n1; j++ {
				x -= c.now.bm[i*n1+j] / c.rung[i] * r.Spectra[j*w+l]
			}
			sum += x * x
			if r.Residual != nil {
				r.Residual[i*w+l] = x
			}
		}
	}
	est.RMS = math.Sqrt(sum / float64(c.m*w))
}
