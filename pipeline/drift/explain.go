package drift

import "math"

// explain puts a disturbance into the covariance of the look, so that what is
// left is judged as if it were not there. Its sizes get a prior wide enough for
// what was found.
func (l *look) explain(s *scope, sh Shape, onset int, h hypothesis) {
	tr := l.m.traits[s.trait]
	course := l.course(s, sh, onset)
	if len(l.extra)+tr.Columns > maxExtra {
		return
	}
	x := l.columns(s, course)
	z := make([][][][]float64, tr.Columns)
	for n := range tr.Columns {
		z[n] = l.solve(x[n])
	}
	var q [3]float64
	q[0] = l.inner(x[0], z[0])
	if tr.Columns > 1 {
		q[1], q[2] = l.inner(x[0], z[1]), l.inner(x[1], z[1])
	}
	r := func(i int) float64 {
		t := math.Max(3, math.Abs(h.theta[i])*3)
		return 1 / (t * t)
	}
	if tr.Columns == 1 {
		l.push(z[0], math.Sqrt(1/(q[0]+r(0))))
		return
	}
	// M = (Q + R)^-1 = T T', columns of Z T
	a, b, d := q[0]+r(0), q[1], q[2]+r(1)
	det := a*d - b*b
	if det <= 0 {
		return
	}
	m00, m01, m11 := d/det, -b/det, a/det
	t00 := math.Sqrt(m00)
	t10 := m01 / t00
	t11 := math.Sqrt(math.Max(0, m11-t10*t10))
	first := combine(z[0], z[1], t00, t10)
	l.push(first, 1)
	l.push(z[1], t11)
}

// columns spreads a scope's fingerprint over cells and nights: per column, cell, observation a k-vector.
func (l *look) columns(s *scope, course []float64) [][][][]float64 {
	tr := l.m.traits[s.trait]
	out := make([][][][]float64, tr.Columns)
	for n := range out {
		out[n] = make([][][]float64, len(l.cells))
	}
	for a, i := range s.cells {
		c := l.cells[i].c
		for n := range out {
			out[n][i] = make([][]float64, len(l.cells[i].obs))
			for k, o := range l.cells[i].obs {
				if !s.nights[a][o.night] || course[o.night] == 0 {
					continue
				}
				v := make([]float64, c.k)
				for j := range v {
					if o.have[j] {
						v[j] = course[o.night] * c.cols[s.trait][n*c.k+j]
					}
				}
				out[n][i][k] = v
			}
		}
	}
	return out
}

// solve gives V^-1 x.
func (l *look) solve(x [][][]float64) [][][]float64 {
	out := make([][][]float64, len(l.cells))
	for i := range l.cells {
		c := &l.cells[i]
		if x[i] == nil {
			continue
		}
		w := make([][]float64, len(c.obs))
		for k, o := range c.obs {
			if x[i][k] != nil {
				w[k] = times(o.key.w, x[i][k], c.c.k)
			} else {
				w[k] = make([]float64, c.c.k)
			}
		}
		c.centred(w)
		out[i] = w
	}
	for n := range l.extra {
		f := 0.0
		for i := range l.cells {
			if x[i] == nil {
				continue
			}
			for k, o := range l.cells[i].obs {
				if x[i][k] != nil {
					f += dot(x[i][k], o.z[n])
				}
			}
		}
		if f == 0 {
			continue
		}
		for i := range l.cells {
			c := &l.cells[i]
			if out[i] == nil {
				out[i] = make([][]float64, len(c.obs))
				for k := range out[i] {
					out[i][k] = make([]float64, c.c.k)
				}
			}
			for k, o := range c.obs {
				for j := range out[i][k] {
					out[i][k][j] -= f * o.z[n][j]
				}
			}
		}
	}
	return out
}

func (l *look) inner(x, z [][][]float64) float64 {
	s := 0.0
	for i := range x {
		if x[i] == nil || z[i] == nil {
			continue
		}
		for k := range x[i] {
			if x[i][k] != nil {
				s += dot(x[i][k], z[i][k])
			}
		}
	}
	return s
}

func combine(a, b [][][]float64, fa, fb float64) [][][]float64 {
	out := make([][][]float64, len(a))
	for i := range a {
		if a[i] == nil && b[i] == nil {
			continue
		}
		n := max(len(a[i]), len(b[i]))
		out[i] = make([][]float64, n)
		for k := range n {
			var v []float64
			if a[i] != nil {
				v = make([]float64, len(a[i][k]))
				for j := range v {
					v[j] = fa * a[i][k][j]
				}
			}
			if b[i] != nil {
				if v == nil {
					v = make([]float64, len(b[i][k]))
				}
				for j := range v {
					v[j] += fb * b[i][k][j]
				}
			}
			out[i][k] = v
		}
	}
	return out
}

// push takes f*z out of the precision: V^-1 becomes V^-1 - f^2 z z'.
func (l *look) push(z [][][]float64, f float64) {
	y := 0.0
	for i := range l.cells {
		for k := range l.cells[i].obs {
			o := &l.cells[i].obs[k]
			v := make([]float64, len(o.y))
			if z[i] != nil {
				for j := range v {
					v[j] = f * z[i][k][j]
				}
			}
			o.z = append(o.z, v)
			y += dot(v, o.y)
		}
	}
	n := len(l.extra)
	for i := range l.cells {
		for k := range l.cells[i].obs {
			o := &l.cells[i].obs[k]
			for j := range o.v {
				o.v[j] -= y * o.z[n][j]
			}
		}
	}
	l.extra = append(l.extra, field{y})
}
