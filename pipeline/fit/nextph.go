package fit

import (
	"fmt"
	"math"
	"slices"
)

// A Rung to add: what one more solution would do for the uncertainty.
type NextRung struct {
	PH     float64   `json:"ph"`
	UNow   []float64 `json:"u_now"`   // n, standard uncertainties now (own part)
	UThen  []float64 `json:"u_then"`  // n, with one more solution at PH
	Factor float64   `json:"factor"`  // of the largest: u then / u now
	Grid   []float64 `json:"grid"`    // pH tried
	Curve  []float64 `json:"curve"`   // Factor at each
	Amount int       `json:"repeats"` // solutions at PH needed to halve the largest u; 0: more than 50
}

// NextPH asks at which pH one more solution would shrink the largest own
// standard uncertainty of a pKa most, by adding the information of an imagined
// rung to the normal matrix at the solution.
func NextPH(p Problem, r *Result) (*NextRung, error) {
	if r == nil || len(r.Full.PKa) != p.Steps || p.Library != nil {
		return nil, fmt.Errorf("%w: the next pH needs a result of the same set with free spectra", ErrProblem)
	}
	if err := check(&p); err != nil {
		return nil, err
	}
	var s Solver
	s.prepareAs(&p, r)
	c := &s.c
	c.shape(c.n, 0)
	c.frozen = false
	c.now.zero()
	copy(c.now.p, r.Own.PKa)
	c.descend(100)
	c.assemble(&c.now, 0)
	n := c.ne + c.np
	home := slices.Clone(c.a.mat)
	now := c.uncertainties(home, n)
	if now == nil {
		return nil, fmt.Errorf("%w: the set does not fix its constants", ErrProblem)
	}
	out := &NextRung{UNow: now, Factor: math.Inf(1)}
	top := slices.Max(now)
	lo, hi := math.Floor(10*slices.Min(p.PH)-10)/10, slices.Max(p.PH)+1
	mat := make([]float64, n*n)
	for k := 0; ; k++ {
		ph := math.Round(10*lo+float64(k)) / 10
		if ph > hi {
			break
		}
		copy(mat, home)
		c.imagine(mat, n, ph, 1)
		u := c.uncertainties(mat, n)
		f := slices.Max(u) / top
		out.Grid, out.Curve = append(out.Grid, ph), append(out.Curve, f)
		if f < out.Factor {
			out.PH, out.UThen, out.Factor = ph, u, f
		}
	}
	for k := 1; k <= 50; k++ {
		copy(mat, home)
		c.imagine(mat, n, out.PH, float64(k))
		if slices.Max(c.uncertainties(mat, n)) <= top/2 {
			out.Amount = k
			break
		}
	}
	return out, nil
}

// uncertainties of the constants from a copy of the normal matrix; nil when singular.
func (c *core) uncertainties(mat []float64, n int) []float64 {
	a := slices.Clone(mat)
	if !cholesky(a, n) {
		return nil
	}
	out := make([]float64, c.n)
	x := make([]float64, n)
	for k := range out {
		clear(x)
		x[c.ne+k] = 1
		forward(a, n, x)
		s := 0.0
		for _, v := range x {
			s += v * v
		}
		out[k] = math.Sqrt(s)
	}
	return out
}

// imagine adds the information of count rungs at pH ph, with the mean reading
// error and noise of the set, to the normal matrix.
func (c *core) imagine(mat []float64, n int, ph, count float64) {
	n1, q, f := c.n1, c.q, &c.now
	var fr, ft [maxSteps + 1]float64
	var fp [maxSteps * (maxSteps + 1)]float64
	species(ph, f.p[:c.n], fr[:n1], ft[:n1], fp[:c.n*n1])
	sig, rung := 0.0, 0.0
	for i := range c.sig {
		sig += c.sig[i] * c.sig[i] / float64(c.m)
		rung += c.rung[i] / float64(c.m)
	}
	sig = math.Sqrt(sig)
	d := 0.0
	for _, v := range c.d {
		d += v / float64(c.m)
	}
	w0 := 1 / math.Sqrt(d)
	var design, design0 [maxSteps + 1]float64
	point := func(row, out []float64) {
		c.place(row, rung, w0, design[:n1], design0[:n1], out[:q])
	}
	var dt, dk [maxSteps + 2]float64
	var dp [maxSteps][maxSteps + 2]float64
	point(ft[:n1], dt[:])
	for k := 0; k < c.n; k++ {
		point(fp[k*n1:(k+1)*n1], dp[k][:])
	}
	point(fr[:n1], dk[:])
	e := small{any: true}
	a, b, g := 1.0, 0.0, 1.0
	for j := 0; j < q; j++ {
		e.z[0][j], e.z[1][j] = dt[j]*sig, dk[j]*c.ukap
		a += e.z[0][j] * e.z[0][j]
		b += e.z[0][j] * e.z[1][j]
		g += e.z[1][j] * e.z[1][j]
	}
	det := a*g - b*b
	e.s = [3]float64{g / det, -b / det, a / det}
	// Columns of this rung: one per unknown, q coordinates each.
	cols := make([]float64, n*q)
	for l := 0; l < q; l++ {
		for j := 0; j < n1; j++ {
			v := design[j]
			if l == n1 {
				v = design0[j]
			}
			cols[(l*n1+j)*q+l] = v
		}
	}
	for k := 0; k < c.n; k++ {
		copy(cols[(c.ne+k)*q:(c.ne+k+1)*q], dp[k][:q])
	}
	x := make([]float64, q)
	for i := 0; i < n; i++ {
		copy(x, cols[i*q:(i+1)*q])
		e.weigh(x)
		for j := 0; j <= i; j++ {
			mat[i*n+j] += count * dot(x, cols[j*q:(j+1)*q])
		}
	}
}

// place maps a row of shares to the coordinates of the solution: times R^-1 it is
// the design of the spectra, times L (or e0) the model.
func (c *core) place(row []float64, rung, w0 float64, design, design0, out []float64) {
	n1, f := c.n1, &c.now
	clear(design)
	clear(design0)
	clear(out)
	for j := 0; j < n1; j++ {
		for k := 0; k < n1; k++ {
			design[j] += row[k] * rung * f.ri[k*n1+j]
			if c.base {
				design0[j] += row[k] * rung * w0 * f.ri0[k*n1+j]
			}
		}
	}
	for j := 0; j < n1; j++ {
		for k := j; k < n1; k++ {
			out[j] += design[k] * f.l[k*n1+j]
		}
	}
	if c.base {
		out[c.q-1] = dot(design0, f.e0)
	}
}
