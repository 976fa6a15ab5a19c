package fit

import "math"

// weightedLibrary is the given spectra weighted, with their part along the
// offset direction taken out into part (n1) when offsets are free.
func (c *core) weightedLibrary(p *Problem, part []float64) []float64 {
	n1, w := c.n1, c.w
	e := make([]float64, n1*w)
	for j := 0; j < n1; j++ {
		row := e[j*w : (j+1)*w]
		for l := range row {
			row[l] = p.Library[j*w+l] * c.inv[l]
		}
		part[j] = 0
		if c.base {
			s := dot(row, c.v)
			for l := range row {
				row[l] -= s * c.v[l]
			}
			part[j] = s
		}
	}
	return e
}

// library computes the coordinates of data and given spectra in an orthonormal
// basis of the space of the given spectra; outside it nothing depends on the pKa.
func (c *core) library(p *Problem) {
	n1, w, m := c.n1, c.w, c.m
	c.lib, c.lib0, c.libY = grow(c.lib, n1*n1), grow(c.lib0, n1), grow(c.libY, m*n1)
	e := c.weightedLibrary(p, c.lib0)
	gram := make([]float64, n1*n1)
	for j := 0; j < n1; j++ {
		for k := 0; k <= j; k++ {
			g := dot(e[j*w:(j+1)*w], e[k*w:(k+1)*w])
			gram[j*n1+k], gram[k*n1+j] = g, g
		}
	}
	semiCholesky(c.lib, gram, n1, 1e-15)
	lowerRows(c.lib, e, n1, w)
	c.rest = 0
	for i := 0; i < m; i++ {
		y := c.y[i*w : (i+1)*w]
		c.rest += dot(y, y)
		for j := 0; j < n1; j++ {
			s := dot(y, e[j*w:(j+1)*w])
			c.libY[i*n1+j] = s
			c.rest -= s * s
		}
	}
	c.rest = math.Max(c.rest, 0)
}

// libraryBasis is the orthonormal basis that library uses (n1*w).
func (c *core) libraryBasis(p *Problem) []float64 {
	var part [maxSteps + 1]float64
	e := c.weightedLibrary(p, part[:c.n1])
	lowerRows(c.lib, e, c.n1, c.w)
	return e
}

// lowerRows replaces the rows of e (n*w) by those of l^-1 e; a zero pivot gives a zero row.
func lowerRows(l, e []float64, n, w int) {
	for j := 0; j < n; j++ {
		row := e[j*w : (j+1)*w]
		for k := 0; k < j; k++ {
			x := l[j*n+k]
			for i, y := range e[k*w : (k+1)*w] {
				row[i] -= x * y
			}
		}
		d := l[j*n+j]
		for i := range row {
			if d == 0 {
				row[i] = 0
			} else {
				row[i] /= d
			}
		}
	}
}
