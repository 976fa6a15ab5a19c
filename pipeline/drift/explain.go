package drift

import (
	"math"
	"slices"
)

// explain puts a disturbance into the covariance of the look, so that what is
// left is judged as if it were not there. Its sizes get a prior wide enough for
// what was found.
func (l *look) explain(s *scope, sh Shape, onset int, h hypothesis) {
	var sd [2]float64
	for i := range sd {
		sd[i] = math.Max(3, math.Abs(h.theta[i])*3)
	}
	l.absorb(s, l.course(s, sh, onset), sd)
}

// absorb takes sizes of a scope's fingerprint with the given prior sd out of the precision.
func (l *look) absorb(s *scope, course []float64, sd [2]float64) {
	tr := l.m.traits[s.trait]
	if len(l.extra)+tr.Columns > maxExtra {
		return
	}
	x := l.columns(s, course)
	z := make([][][][]float64, tr.Columns)
	for n := range tr.Columns {
		z[n] = l.solve(x[n])
	}
	q0 := l.inner(x[0], z[0]) + 1/(sd[0]*sd[0])
	if tr.Columns == 1 {
		l.push(z[0], math.Sqrt(1/q0))
		return
	}
	// M = (Q + R)^-1 = T T', columns of Z T
	b, d := l.inner(x[0], z[1]), l.inner(x[1], z[1])+1/(sd[1]*sd[1])
	det := q0*d - b*b
	if det <= 0 {
		return
	}
	m00, m01, m11 := d/det, -b/det, q0/det
	t00 := math.Sqrt(m00)
	t10 := m01 / t00
	t11 := math.Sqrt(math.Max(0, m11-t10*t10))
	first := combine(z[0], z[1], t00, t10)
	l.push(first, 1)
	l.push(z[1], t11)
}

// usual puts the ordinary differences between calibrations into the
// covariance: for every electrode and stretch from one calibration to the next, an
// offset and a slope that all its references share. The newest come first where there are too many.
func (l *look) usual() {
	sd := l.m.rules.CalibrationPH
	if sd <= 0 {
		return
	}
	type stretch struct {
		s      *scope
		course []float64
		from   int
		sd     float64
	}
	var all []stretch
	for i := range l.scopes {
		s := &l.scopes[i]
		size := 0.0
		switch l.m.traits[s.trait].Cause {
		case ElectrodeOffset:
			size = sd / 0.02
		case ElectrodeSlope: // two readings, buffers about 3 pH apart, in percent
			size = sd * math.Sqrt2 / 3 * 100
		default:
			continue
		}
		for from := 0; from < l.nights; {
			to := from + 1
			for to < l.nights && !s.reset[to] {
				to++
			}
			course := make([]float64, l.nights)
			for t := from; t < to; t++ {
				course[t] = 1
			}
			all = append(all, stretch{s, course, from, size})
			from = to
		}
	}
	slices.SortStableFunc(all, func(a, b stretch) int { return b.from - a.from })
	for i, x := range all {
		if i == maxExtra-2*maxCauses {
			return
		}
		l.absorb(x.s, x.course, [2]float64{x.sd})
	}
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
				if x[i][k] != nil && o.z[n] != nil {
					f += dot(x[i][k], o.z[n])
				}
			}
		}
		if f == 0 {
			continue
		}
		for i := range l.cells {
			c := &l.cells[i]
			if len(c.obs) == 0 || c.obs[0].z[n] == nil {
				continue
			}
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
			if z[i] == nil {
				o.z = append(o.z, nil)
				continue
			}
			v := make([]float64, len(o.y))
			for j := range v {
				v[j] = f * z[i][k][j]
			}
			o.z = append(o.z, v)
			y += dot(v, o.y)
		}
	}
	n := len(l.extra)
	for i := range l.cells {
		for k := range l.cells[i].obs {
			o := &l.cells[i].obs[k]
			for j, v := range o.z[n] {
				o.v[j] -= y * v
			}
		}
	}
	l.extra = append(l.extra, field{y})
}
