package spectra

import (
	"math"

	"gonum.org/v1/gonum/mat"
)

// A factor is the leading part of a singular value decomposition of an m*w
// matrix, from the eigenvectors of its m*m Gram matrix: exact enough where
// singular values are above 1e-8 of the largest, and cheap for few rows.
type factor struct {
	m, w, k int
	u       []float64 // m*k
	s       []float64 // m, all singular values, descending
	v       []float64 // k*w
}

// factorise decomposes a (m*w, row-major) to k components.
func factorise(a []float64, m, w, k int) factor {
	k = min(k, m)
	f := factor{m: m, w: w, k: k, s: make([]float64, m), u: make([]float64, m*k), v: make([]float64, k*w)}
	gram := mat.NewSymDense(m, nil)
	for i := range m {
		for o := i; o < m; o++ {
			gram.SetSym(i, o, dot(a[i*w:(i+1)*w], a[o*w:(o+1)*w]))
		}
	}
	var eig mat.EigenSym
	if !eig.Factorize(gram, true) {
		return f
	}
	values := eig.Values(nil)
	var vectors mat.Dense
	eig.VectorsTo(&vectors)
	for c := range m {
		f.s[c] = math.Sqrt(math.Max(values[m-1-c], 0))
	}
	for c := range k {
		for i := range m {
			f.u[i*k+c] = vectors.At(i, m-1-c)
		}
		if f.s[c] == 0 {
			continue
		}
		for i := range m {
			scale := f.u[i*k+c] / f.s[c]
			for j := range w {
				f.v[c*w+j] += scale * a[i*w+j]
			}
		}
	}
	return f
}

// residual is a minus its first k components.
func (f factor) residual(a []float64) []float64 {
	r := append([]float64(nil), a...)
	for i := range f.m {
		for c := range f.k {
			scale := f.u[i*f.k+c] * f.s[c]
			for j := range f.w {
				r[i*f.w+j] -= scale * f.v[c*f.w+j]
			}
		}
	}
	return r
}

// leverage is the share of row i that the components follow.
func (f factor) leverage(i int) float64 {
	h := 0.0
	for c := range f.k {
		h += f.u[i*f.k+c] * f.u[i*f.k+c]
	}
	return h
}

// clear is the number of components whose singular value is above a multiple
// of the largest that independent noise of standard deviation sd would give.
func (f factor) clear(sd, multiple float64) int {
	edge := multiple * sd * (math.Sqrt(float64(f.m)) + math.Sqrt(float64(f.w)))
	k := 0
	for k < f.k && f.s[k] > edge {
		k++
	}
	return k
}

// rowNoise is the root mean square of the rows' noise from third differences.
func rowNoise(a []float64, m, w int) float64 {
	sum := 0.0
	for i := range m {
		if sd := thirdDifferenceSD(a[i*w : (i+1)*w]); !math.IsNaN(sd) {
			sum += sd * sd / float64(m)
		}
	}
	return math.Sqrt(sum)
}

// columnSum is the sum of the entries of a left vector.
func (f factor) columnSum(c int) float64 {
	s := 0.0
	for i := range f.m {
		s += f.u[i*f.k+c]
	}
	return s
}

func dot(a, b []float64) float64 {
	s := 0.0
	for j := range a {
		s += a[j] * b[j]
	}
	return s
}
