package fit

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/blas"
	"gonum.org/v1/gonum/blas/blas64"
)

// reduced is a set after weighting: the m x m Gram matrix of the weighted
// columns and, when each rung may carry a flat offset, its part along the
// weighted direction of that offset kept apart.
//
// With y_ij = A_ij/(r_i s_j) a flat offset o_i adds (o_i/r_i)(1/s_j): along the
// unit vector v ~ 1/s_j it is a random number of variance u_o^2 |1/s|^2/r_i^2 on
// top of the unit noise, and orthogonal to v it is nothing. So integrating the
// offsets out exactly means: w-1 columns with unit noise (their Gram matrix is
// gram), and one column (y0) whose rows have variance d_i = 1 + u_o^2|1/s|^2/r_i^2.
type reduced struct {
	m, w  int
	base  bool
	y     []float64 // m*w weighted absorbances, without the part along v when base
	v     []float64 // w, unit vector along 1/s
	vnorm float64   // |1/s|
	gram  []float64 // m*m
	y0    []float64 // m
	d     []float64 // m, variance of y0 per rung
	w0    []float64 // m, 1/sqrt(d)
	inv   []float64 // w, 1/s_j as used in the fit
	rung  []float64 // m, 1/r_i
	trace float64   // of gram
	total float64   // weighted sum of squares of everything
}

// grow returns a slice of length n, reusing s when it is long enough.
func grow(s []float64, n int) []float64 {
	if cap(s) < n {
		return make([]float64, n)
	}
	return s[:n]
}

// load weights the absorbances of p with unit noise where p states none.
func (d *reduced) load(p *Problem, effective float64) {
	m, w := len(p.PH), len(p.WavelengthNM)
	d.m, d.w, d.base = m, w, p.UBaseline > 0
	d.inv, d.rung, d.v = grow(d.inv, w), grow(d.rung, m), grow(d.v, w)
	d.y, d.gram = grow(d.y, m*w), grow(d.gram, m*m)
	d.y0, d.d, d.w0 = grow(d.y0, m), grow(d.d, m), grow(d.w0, m)
	inflate := 1.0
	if effective > 0 && effective < float64(w) {
		inflate = math.Sqrt(float64(w) / effective)
	}
	for j := range d.inv {
		s := 1.0
		if p.NoiseWave != nil {
			s = p.NoiseWave[j]
		}
		d.inv[j] = 1 / (s * inflate)
	}
	for i := range d.rung {
		d.rung[i] = 1
		if p.NoiseRung != nil {
			d.rung[i] = 1 / p.NoiseRung[i]
		}
	}
	for i := 0; i < m; i++ {
		row, in, r := d.y[i*w:(i+1)*w], p.A[i*w:(i+1)*w], d.rung[i]
		for j, a := range in {
			row[j] = a * d.inv[j] * r
		}
	}
	d.split(p.UBaseline)
	d.product()
}

// split takes the part along the flat offset out of y.
func (d *reduced) split(u float64) {
	m, w := d.m, d.w
	v2 := 0.0
	for _, x := range d.inv {
		v2 += x * x
	}
	d.vnorm = math.Sqrt(v2)
	for j, x := range d.inv {
		d.v[j] = x / d.vnorm
	}
	for i := 0; i < m; i++ {
		d.y0[i], d.d[i], d.w0[i] = 0, 1, 1
		if !d.base {
			continue
		}
		row := d.y[i*w : (i+1)*w]
		s := 0.0
		for j, x := range row {
			s += x * d.v[j]
		}
		for j := range row {
			row[j] -= s * d.v[j]
		}
		d.y0[i] = s
		d.variance(i, u)
	}
}

// variance sets the variance of the part along v of rung i.
func (d *reduced) variance(i int, u float64) {
	o := u * d.vnorm * d.rung[i]
	d.d[i] = 1 + o*o
	d.w0[i] = 1 / math.Sqrt(d.d[i])
}

// product fills the Gram matrix.
func (d *reduced) product() {
	m, w := d.m, d.w
	blas64.Syrk(blas.NoTrans, 1, blas64.General{Rows: m, Cols: w, Stride: w, Data: d.y}, 0,
		blas64.Symmetric{N: m, Stride: m, Data: d.gram, Uplo: blas.Lower})
	for i := 0; i < m; i++ {
		for k := 0; k < i; k++ {
			d.gram[k*m+i] = d.gram[i*m+k]
		}
	}
	d.sums()
}

// sums refreshes the traces.
func (d *reduced) sums() {
	d.trace, d.total = 0, 0
	for i := 0; i < d.m; i++ {
		d.trace += d.gram[i*d.m+i]
		d.total += d.y0[i] * d.y0[i] / d.d[i]
	}
	d.total += d.trace
}

// dot is the inner product of two rows.
func dot(a, b []float64) float64 {
	b = b[:len(a)]
	s := 0.0
	for j, x := range a {
		s += x * b[j]
	}
	return s
}

// scale divides all by a noise that has only now become known.
func (d *reduced) scale(sigma, ubase float64) {
	f := 1 / sigma
	for j := range d.inv {
		d.inv[j] *= f
	}
	d.vnorm *= f
	for i := range d.y {
		d.y[i] *= f
	}
	for i := range d.gram {
		d.gram[i] *= f * f
	}
	for i := range d.y0 {
		d.y0[i] *= f
		if d.base {
			d.variance(i, ubase)
		}
	}
	d.sums()
}

// rankNoise estimates the noise as what is left of the weighted data beyond
// forms+0 singular values; ok is false when nothing is left over.
func (d *reduced) rankNoise(forms int) (sigma float64, ok bool) {
	w := d.w
	if d.base {
		w--
	}
	free := (d.m - forms) * (w - forms)
	if free <= 0 {
		return 0, false
	}
	val := symmetricEigen(slices.Clone(d.gram), d.m, nil)
	s := 0.0
	for _, l := range val[forms:] {
		s += math.Max(l, 0)
	}
	s = math.Sqrt(s / float64(free))
	return s, s > 0
}
