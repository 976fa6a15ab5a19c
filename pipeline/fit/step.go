package fit

import "math"

// system is the small linear system of one step: unknowns are the reachable
// components of the spectra, then the pKa (and slope or amount), then the shared errors.
type system struct {
	mat, rhs, sol, diag []float64
	work                []float64
}

func (s *system) shape(n int) {
	s.mat, s.rhs, s.sol = grow(s.mat, n*n), grow(s.rhs, n), grow(s.sol, n)
	s.diag, s.work = grow(s.diag, n), grow(s.work, n)
}

// small are the per-rung quantities of the elimination of a_i and k_i.
type small struct {
	z   [2][maxSteps + 2]float64 // derivative coordinates times prior sd
	s   [3]float64               // inverse of (1+lambda) I + Z'Z: 11, 12, 22
	any bool
}

// eliminate prepares rung i.
func (c *core) eliminate(f *frame, i int, lambda float64, e *small) {
	q := c.q
	e.any = !c.frozen && (c.sig[i] > 0 || c.ukap > 0)
	if !e.any {
		return
	}
	a, b, d := 1+lambda, 0.0, 1+lambda
	for j := 0; j < q; j++ {
		x, y := f.dt[i*q+j]*c.sig[i], f.dk[i*q+j]*c.ukap
		e.z[0][j], e.z[1][j] = x, y
		a += x * x
		b += x * y
		d += y * y
	}
	det := a*d - b*b
	e.s = [3]float64{d / det, -b / det, a / det}
}

// weigh replaces x (q) by (I + ZZ'/(1+lambda))^-1 x.
func (e *small) weigh(x []float64) {
	if !e.any {
		return
	}
	var u, v float64
	for j, y := range x {
		u += e.z[0][j] * y
		v += e.z[1][j] * y
	}
	u, v = e.s[0]*u+e.s[1]*v, e.s[1]*u+e.s[2]*v
	for j := range x {
		x[j] -= e.z[0][j]*u + e.z[1][j]*v
	}
}

// assemble builds the normal equations at frame f with damping lambda.
// The spectra are never damped: they are at their best already.
func (c *core) assemble(f *frame, lambda float64) {
	m, n1, q, ne, np := c.m, c.n1, c.q, c.ne, c.np
	n := ne + np + c.nb
	mat, rhs := c.a.mat, c.a.rhs
	clear(mat)
	clear(rhs)
	for j := 0; j < ne; j++ {
		mat[j*n+j] = 1
	}
	var e small
	var res [maxSteps + 2]float64
	for i := 0; i < m; i++ {
		c.eliminate(f, i, lambda, &e)
		r := res[:q]
		copy(r, f.c[i*q:(i+1)*q])
		if e.any {
			for j := range r {
				r[j] += (e.z[0][j]*f.a[i] + e.z[1][j]*f.k[i]) / (1 + lambda)
			}
			e.weigh(r)
			c.spectraBlock(f, i, &e)
		}
		for k := 0; k < ne; k++ {
			rhs[k] += c.qrow(f, i, k/n1)[k%n1] * r[k/n1]
		}
		c.columnsBlock(f, i, r, &e)
	}
	for k := 0; k < np; k++ {
		j := ne + k
		c.a.diag[k] = mat[j*n+j]
		mat[j*n+j] *= 1 + lambda
	}
	for k := 0; k < c.nb; k++ {
		j := ne + np + k
		mat[j*n+j] += 1 + lambda
		rhs[j] -= f.b[k]
	}
}

// columnsBlock adds what rung i, with weighted residual r, tells about
// constants and shared errors.
func (c *core) columnsBlock(f *frame, i int, r []float64, e *small) {
	m, n1, q, ne, np := c.m, c.n1, c.q, c.ne, c.np
	n := ne + np + c.nb
	mat, rhs := c.a.mat, c.a.rhs
	var col [maxSteps + 2]float64
	for k := 0; k < np+c.nb; k++ {
		x := col[:q]
		c.column(f, i, k, x)
		row := mat[(ne+k)*n:]
		for j := range x {
			rhs[ne+k] += x[j] * r[j]
		}
		e.weigh(x)
		for l := 0; l < q && ne > 0; l++ {
			qr := c.qrow(f, i, l)
			for g, y := range qr {
				row[l*n1+g] += y * x[l]
			}
		}
		for l := 0; l <= k; l++ {
			s := 0.0
			if l < np {
				for j, y := range f.dp[(l*m+i)*q : (l*m+i)*q+q] {
					s += x[j] * y
				}
			} else {
				sh := c.shift[i*c.nb+l-np]
				for j, y := range f.dt[i*q : i*q+q] {
					s += x[j] * y * sh
				}
			}
			row[ne+l] += s
		}
	}
}

// qrow is the row of the orthonormal factor that belongs to coordinate l.
func (c *core) qrow(f *frame, i, l int) []float64 {
	if l < c.n1 {
		return f.q[i*c.n1 : (i+1)*c.n1]
	}
	return f.q0[i*c.n1 : (i+1)*c.n1]
}

// column writes the model derivative of rung i by unknown k (parameters, then shared errors).
func (c *core) column(f *frame, i, k int, x []float64) {
	q := c.q
	if k < c.np {
		copy(x, f.dp[(k*c.m+i)*q:(k*c.m+i)*q+q])
		return
	}
	s := c.shift[i*c.nb+k-c.np]
	for j := range x {
		x[j] = f.dt[i*q+j] * s
	}
}

// spectraBlock subtracts what the nuisance of rung i takes from the
// information on the spectra (lower triangle).
func (c *core) spectraBlock(f *frame, i int, e *small) {
	n1, q, n := c.n1, c.q, c.ne+c.np+c.nb
	if c.ne == 0 {
		return
	}
	for l := 0; l < q; l++ {
		ql := c.qrow(f, i, l)
		zs0 := e.z[0][l]*e.s[0] + e.z[1][l]*e.s[1]
		zs1 := e.z[0][l]*e.s[1] + e.z[1][l]*e.s[2]
		for k := 0; k <= l; k++ {
			x := zs0*e.z[0][k] + zs1*e.z[1][k]
			qk := c.qrow(f, i, k)
			for g, y := range ql {
				row := c.a.mat[(l*n1+g)*n+k*n1:]
				xy := x * y
				for h, z := range qk {
					row[h] -= xy * z
				}
			}
		}
	}
}

// gradient writes half the negative gradient of phi by p and b to the work
// array and returns the largest component of the gradient in units of its own
// curvature (a pure number: standard deviations from the minimum, one unknown at a time).
func (c *core) gradient(f *frame) float64 {
	m, q := c.m, c.q
	worst := 0.0
	for k := 0; k < c.np; k++ {
		g, h := 0.0, 0.0
		for i := 0; i < m*q; i++ {
			d := f.dp[k*m*q+i]
			g += d * f.c[i]
			h += d * d
		}
		c.a.work[k] = g
		if h > 0 {
			worst = math.Max(worst, math.Abs(g)/math.Sqrt(h))
		}
	}
	if c.frozen {
		return worst
	}
	for k := 0; k < c.nb; k++ {
		g := -f.b[k]
		for i := 0; i < m; i++ {
			for j := 0; j < q; j++ {
				g += f.dt[i*q+j] * c.shift[i*c.nb+k] * f.c[i*q+j]
			}
		}
		c.a.work[c.np+k] = g
		worst = math.Max(worst, math.Abs(g))
	}
	return worst
}

// step solves for the move from f with damping lambda, writes the moved
// parameters to g and returns the predicted decrease of phi and the largest
// move of a pKa; ok is false when the system is singular.
func (c *core) step(f, g *frame, lambda float64) (pred, move float64, ok bool) {
	ne, np := c.ne, c.np
	n := ne + np + c.nb
	sol := c.a.sol
	if c.frozen && ne > 0 && c.pair < 0 && c.pin < 0 {
		if !c.solvePlain(f, lambda) {
			return 0, 0, false
		}
	} else {
		c.assemble(f, lambda)
		c.hold(n)
		if !cholesky(c.a.mat, n) {
			return 0, 0, false
		}
		copy(sol, c.a.rhs)
		forward(c.a.mat, n, sol)
		backward(c.a.mat, n, sol)
	}
	c.gradient(f)
	dp, db := sol[ne:ne+np], sol[ne+np:]
	if c.pair >= 0 {
		dp[c.pair+1] = dp[c.pair]
	}
	for k, d := range dp {
		g.p[k] = f.p[k] + d
		pred += d * (c.a.work[k] + lambda*c.a.diag[k]*d)
		if k < c.n {
			move = math.Max(move, math.Abs(d))
		}
	}
	for k, d := range db {
		g.b[k] = f.b[k] + d
		pred += d * (c.a.work[np+k] + lambda*d)
	}
	if c.frozen {
		copy(g.a, f.a)
		copy(g.k, f.k)
		return pred, move, true
	}
	return pred + c.stepRungs(f, g, lambda, sol), move, true
}

// stepRungs moves readings and amounts rung by rung, given the move sol of the
// rest, and returns their part of the predicted decrease.
func (c *core) stepRungs(f, g *frame, lambda float64, sol []float64) (pred float64) {
	m, q := c.m, c.q
	var e small
	var rr [maxSteps + 2]float64
	for i := 0; i < m; i++ {
		g.a[i], g.k[i] = f.a[i], f.k[i]
		c.eliminate(f, i, lambda, &e)
		if !e.any {
			continue
		}
		r := rr[:q]
		copy(r, f.c[i*q:(i+1)*q])
		ga, gk := -f.a[i], -f.k[i]
		for j := range r {
			ga += e.z[0][j] * r[j]
			gk += e.z[1][j] * r[j]
		}
		c.reduceByMove(f, i, sol, r)
		var u, v float64
		for j := range r {
			u += e.z[0][j] * r[j]
			v += e.z[1][j] * r[j]
		}
		u -= f.a[i]
		v -= f.k[i]
		da, dk := e.s[0]*u+e.s[1]*v, e.s[1]*u+e.s[2]*v
		if c.sig[i] == 0 {
			da = -f.a[i]
		}
		g.a[i] += da
		g.k[i] += dk
		pred += da*(ga+lambda*da) + dk*(gk+lambda*dk)
	}
	return pred
}

// solvePlain solves for the constants alone when nothing else is uncertain: the
// spectra then have unit information, and eliminating them leaves Kaufman's
// projected Jacobian, n x n.
func (c *core) solvePlain(f *frame, lambda float64) bool {
	m, n1, q, np := c.m, c.n1, c.q, c.np
	var x [maxSteps * (maxSteps + 1) * (maxSteps + 2)]float64 // Q'D per constant and coordinate
	h, g := c.a.mat[:np*np], c.a.rhs[:np]
	clear(g)
	for k := 0; k < np; k++ {
		d := f.dp[k*m*q : (k+1)*m*q]
		xk := x[k*q*n1 : (k+1)*q*n1]
		for i := 0; i < m; i++ {
			di := d[i*q : (i+1)*q]
			qi := f.q[i*n1 : (i+1)*n1]
			for l, v := range di[:n1] {
				xl := xk[l*n1 : (l+1)*n1]
				for j, y := range qi {
					xl[j] += v * y
				}
			}
			if c.base {
				xl, v := xk[n1*n1:], di[n1]
				for j, y := range f.q0[i*n1 : (i+1)*n1] {
					xl[j] += v * y
				}
			}
		}
		g[k] = dot(d, f.c[:m*q])
		for l := 0; l <= k; l++ {
			h[k*np+l] = dot(d, f.dp[l*m*q:(l+1)*m*q]) - dot(xk, x[l*q*n1:(l+1)*q*n1])
		}
	}
	for k := 0; k < np; k++ {
		c.a.diag[k] = h[k*np+k]
		h[k*np+k] *= 1 + lambda
	}
	if !cholesky(h, np) {
		return false
	}
	sol := c.a.sol[c.ne : c.ne+np]
	copy(sol, g)
	forward(h, np, sol)
	backward(h, np, sol)
	return true
}

// reduceByMove subtracts from the residual coordinates of rung i what the move
// of spectra, constants and shared errors takes away.
func (c *core) reduceByMove(f *frame, i int, sol, r []float64) {
	n1, q, ne, np := c.n1, c.q, c.ne, c.np
	if ne > 0 {
		for l := 0; l < q; l++ {
			for g, y := range c.qrow(f, i, l) {
				r[l] -= y * sol[l*n1+g]
			}
		}
	}
	for k := 0; k < np; k++ {
		d := sol[ne+k]
		for j := range r {
			r[j] -= f.dp[(k*c.m+i)*q+j] * d
		}
	}
	s := 0.0
	for k := 0; k < c.nb; k++ {
		s += c.shift[i*c.nb+k] * sol[ne+np+k]
	}
	for j := range r {
		r[j] -= f.dt[i*q+j] * s
	}
}

// hold removes pinned unknowns from the system.
func (c *core) hold(n int) {
	ne := c.ne
	mat, rhs := c.a.mat, c.a.rhs
	at := func(i, j int) *float64 {
		if i < j {
			i, j = j, i
		}
		return &mat[i*n+j]
	}
	if c.pair >= 0 { // both constants move together: fold one row into the other
		a, b := ne+c.pair, ne+c.pair+1
		*at(a, a) += *at(b, b) + 2**at(a, b)
		for j := 0; j < n; j++ {
			if j != a && j != b {
				*at(a, j) += *at(b, j)
			}
		}
		rhs[a] += rhs[b]
	}
	k := -1
	switch {
	case c.pair >= 0:
		k = ne + c.pair + 1
	case c.pin >= 0:
		k = ne + c.pin
	default:
		return
	}
	for j := 0; j < n; j++ {
		*at(k, j) = 0
	}
	*at(k, k), rhs[k] = 1, 0
}

// descend runs Levenberg-Marquardt from the parameters in c.now, with damping
// c.lambda at first; c.rough ends it early where a start for another descent
// is all that is wanted.
func (c *core) descend(limit int) (Status, int) {
	c.evaluate(&c.now, true)
	lambda := c.lambda
	if !(c.now.phi < math.Inf(1)) {
		return Unusable, 0
	}
	noise := 1e-14 * c.total
	tolerance := 1e-10
	if c.rough {
		tolerance = 2e-3
	}
	for it := 1; it <= limit; it++ {
		pred, move, ok := c.step(&c.now, &c.try, lambda)
		if !ok {
			if lambda > 1e8 {
				return Undetermined, it
			}
			lambda = math.Max(10*lambda, 1e-3)
			continue
		}
		if move > 3 {
			lambda = math.Max(8*lambda, 1e-4)
			if lambda > 1e12 {
				return HitLimit, it
			}
			continue
		}
		c.evaluate(&c.try, true)
		gain := c.now.phi - c.try.phi
		if !(c.try.phi <= c.now.phi+noise) {
			if lambda > 1e12 {
				return HitLimit, it
			}
			lambda = math.Max(8*lambda, 1e-4)
			continue
		}
		c.now, c.try = c.try, c.now
		if move < tolerance && lambda <= 1e-3 && (c.rough || pred <= 1e-10*(1+1e-6*c.now.phi)+noise) {
			return Converged, it
		}
		switch {
		case gain > 0.75*pred || pred <= noise:
			lambda /= 30
		case gain < 0.25*pred:
			lambda *= 4
		}
		if lambda < 1e-7 {
			lambda = 0
		}
	}
	return HitLimit, limit
}
