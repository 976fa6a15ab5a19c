package fit

import (
	"math"
	"slices"
)

// compress keeps the dims strongest independent signals of src. Signals from
// number known on are expected to be noise and are scaled so that noise alone
// gives them unit variance: the largest singular value of noise is
// sqrt(m) + sqrt(w), not sqrt(m). What comes out has m values per signal with
// unit noise, so that a sum of squares over it counts rungs and not wavelengths.
func (d *reduced) compress(src *reduced, dims, known int, effective float64) {
	m := src.m
	*d = reduced{m: m, w: dims, base: src.base, v: src.v, vnorm: src.vnorm, inv: src.inv, rung: src.rung,
		d: src.d, w0: src.w0, y0: src.y0, gram: make([]float64, m*m)}
	vec := make([]float64, m*m)
	val := symmetricEigen(slices.Clone(src.gram), m, vec)
	edge := 1 + math.Sqrt(effective/float64(m))
	for j := 0; j < min(dims, m); j++ {
		l := math.Max(val[j], 0)
		if j >= known {
			l /= edge * edge
		}
		for i := 0; i < m; i++ {
			for k := 0; k < m; k++ {
				d.gram[i*m+k] += l * vec[i*m+j] * vec[k*m+j]
			}
		}
	}
	d.sums()
}

// effective is the number of independent columns.
func (d *reduced) effective(told float64) float64 {
	e := float64(d.w)
	if d.base {
		e--
	}
	if told > 0 {
		e = math.Min(e, told)
	}
	return e
}

// ownFit refits with own weighting on reduced data red, from constants start.
// The reading errors, amounts and objective are left in c.now.
func (c *core) ownFit(red *reduced, like *core, ph, start []float64, limit int) Status {
	*c = core{reduced: red, n: len(start), n1: len(start) + 1, ukap: like.ukap, ph: ph, sig: like.sig, now: c.now, try: c.try, a: c.a}
	c.shape(c.n, 0)
	c.now.zero()
	copy(c.now.p, start)
	st, _ := c.descend(limit)
	return st
}
