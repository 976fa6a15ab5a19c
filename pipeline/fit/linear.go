package fit

import "math"

// cholesky overwrites the lower triangle of the symmetric n x n matrix a
// (row-major, only the lower triangle is read) with its Cholesky factor and
// reports whether a is positive definite to working precision.
func cholesky(a []float64, n int) bool {
	for j := 0; j < n; j++ {
		rj := a[j*n : j*n+j+1]
		d := rj[j]
		for _, v := range rj[:j] {
			d -= v * v
		}
		if !(d > 1e-15*math.Abs(rj[j])) || math.IsInf(d, 0) {
			return false
		}
		d = math.Sqrt(d)
		rj[j] = d
		inv := 1 / d
		for i := j + 1; i < n; i++ {
			ri := a[i*n : i*n+j+1]
			s := ri[j]
			for k, v := range rj[:j] {
				s -= ri[k] * v
			}
			ri[j] = s * inv
		}
	}
	return true
}

// forward solves L x = b in place for the lower triangle l of order n.
func forward(l []float64, n int, b []float64) {
	for i := 0; i < n; i++ {
		s := b[i]
		ri := l[i*n : i*n+i]
		for k, v := range ri {
			s -= v * b[k]
		}
		b[i] = s / l[i*n+i]
	}
}

// backward solves L' x = b in place.
func backward(l []float64, n int, b []float64) {
	for i := n - 1; i >= 0; i-- {
		x := b[i] / l[i*n+i]
		b[i] = x
		ri := l[i*n : i*n+i]
		for k, v := range ri {
			b[k] -= v * x
		}
	}
}

// semiCholesky writes to l the lower factor of the positive semidefinite n x n
// matrix a. Directions below tol times the largest diagonal element get a zero
// column, so that a spectrum which is a combination of the others does no harm.
func semiCholesky(l, a []float64, n int, tol float64) {
	top := 0.0
	for i := 0; i < n; i++ {
		top = math.Max(top, a[i*n+i])
	}
	for j := 0; j < n; j++ {
		d := a[j*n+j]
		for k := 0; k < j; k++ {
			d -= l[j*n+k] * l[j*n+k]
		}
		for i := 0; i < j; i++ {
			l[i*n+j] = 0
		}
		if d <= tol*top {
			for i := j; i < n; i++ {
				l[i*n+j] = 0
			}
			continue
		}
		d = math.Sqrt(d)
		l[j*n+j] = d
		for i := j + 1; i < n; i++ {
			s := a[i*n+j]
			for k := 0; k < j; k++ {
				s -= l[i*n+k] * l[j*n+k]
			}
			l[i*n+j] = s / d
		}
	}
}

// orthonormalise factors the m x c matrix b into q (orthonormal columns) and r
// (upper, c x c) by modified Gram-Schmidt done twice. A column that depends on
// those before it gets zeros in q and a zero on the diagonal of r.
func orthonormalise(q, r, b []float64, m, c int) {
	copy(q[:m*c], b[:m*c])
	for k := range r[:c*c] {
		r[k] = 0
	}
	for k := 0; k < c; k++ {
		before := 0.0
		for i := k; i < m*c; i += c {
			before += q[i] * q[i]
		}
		for pass := 0; pass < 2; pass++ {
			for l := 0; l < k; l++ {
				s := 0.0
				for i := 0; i < m*c; i += c {
					s += q[i+l] * q[i+k]
				}
				r[l*c+k] += s
				for i := 0; i < m*c; i += c {
					q[i+k] -= s * q[i+l]
				}
			}
			if k == 0 {
				break
			}
		}
		after := 0.0
		for i := k; i < m*c; i += c {
			after += q[i] * q[i]
		}
		if after <= 1e-26*before || after == 0 {
			for i := k; i < m*c; i += c {
				q[i] = 0
			}
			continue
		}
		d := math.Sqrt(after)
		r[k*c+k] = d
		for i := k; i < m*c; i += c {
			q[i] /= d
		}
	}
}

// invertUpper writes the inverse of the upper triangle r (c x c) to dst; a zero
// on the diagonal gives a zero row and column.
func invertUpper(dst, r []float64, c int) {
	for k := range dst[:c*c] {
		dst[k] = 0
	}
	for k := 0; k < c; k++ {
		if r[k*c+k] == 0 {
			continue
		}
		dst[k*c+k] = 1 / r[k*c+k]
		for i := k - 1; i >= 0; i-- {
			if r[i*c+i] == 0 {
				continue
			}
			s := 0.0
			for l := i + 1; l <= k; l++ {
				s += r[i*c+l] * dst[l*c+k]
			}
			dst[i*c+k] = -s / r[i*c+i]
		}
	}
}

// symmetricEigen returns the eigenvalues (descending) and, when vec is not nil,
// the eigenvectors (columns of vec, n x n) of the symmetric matrix a by cyclic
// Jacobi rotations; a is overwritten. Small eigenvalues keep their digits
// relative to the largest.
func symmetricEigen(a []float64, n int, vec []float64) []float64 {
	val := make([]float64, n)
	eigenInto(val, a, n, vec)
	return val
}

// eigenInto is symmetricEigen without allocation.
func eigenInto(val, a []float64, n int, vec []float64) {
	if vec != nil {
		for i := range vec[:n*n] {
			vec[i] = 0
		}
		for i := 0; i < n; i++ {
			vec[i*n+i] = 1
		}
	}
	for sweep := 0; sweep < 60; sweep++ {
		off, diag := 0.0, 0.0
		for i := 0; i < n; i++ {
			diag += a[i*n+i] * a[i*n+i]
			for j := 0; j < i; j++ {
				off += a[i*n+j] * a[i*n+j]
			}
		}
		if off <= 1e-34*diag {
			break
		}
		for p := 0; p < n-1; p++ {
			for q := p + 1; q < n; q++ {
				rotate(a, n, vec, p, q)
			}
		}
	}
	for i := range val {
		val[i] = a[i*n+i]
	}
	for i := 0; i < n; i++ { // selection sort carries the vectors along
		best := i
		for j := i + 1; j < n; j++ {
			if val[j] > val[best] {
				best = j
			}
		}
		val[i], val[best] = val[best], val[i]
		if vec != nil && best != i {
			for r := 0; r < n; r++ {
				vec[r*n+i], vec[r*n+best] = vec[r*n+best], vec[r*n+i]
			}
		}
	}
}

// rotate annihilates a[p][q] of a full symmetric matrix.
func rotate(a []float64, n int, vec []float64, p, q int) {
	apq := a[p*n+q]
	if apq == 0 {
		return
	}
	theta := (a[q*n+q] - a[p*n+p]) / (2 * apq)
	t := 1 / (math.Abs(theta) + math.Sqrt(theta*theta+1))
	if theta < 0 {
		t = -t
	}
	c := 1 / math.Sqrt(t*t+1)
	s := t * c
	for k := 0; k < n; k++ {
		x, y := a[k*n+p], a[k*n+q]
		a[k*n+p], a[k*n+q] = c*x-s*y, s*x+c*y
	}
	for k := 0; k < n; k++ {
		x, y := a[p*n+k], a[q*n+k]
		a[p*n+k], a[q*n+k] = c*x-s*y, s*x+c*y
	}
	a[p*n+q], a[q*n+p] = 0, 0
	if vec != nil {
		for k := 0; k < n; k++ {
			x, y := vec[k*n+p], vec[k*n+q]
			vec[k*n+p], vec[k*n+q] = c*x-s*y, s*x+c*y
		}
	}
}
