package fit

import (
	"fmt"
	"math"
)

// A Line is a straight line y = Intercept + Slope x through points uncertain in
// both coordinates.
type Line struct {
	Slope, Intercept     float64
	USlope, UIntercept   float64 // standard errors from the stated uncertainties alone
	Covariance           float64 // of slope and intercept, same basis
	S                    float64 // weighted sum of squared residuals
	MSWD                 float64 // S/(n-2); NaN for two points
	SDSlope, SDIntercept float64 // the standard errors times sqrt(MSWD)
	Iterations           int
}

// York fits the line by the unified equations of York, Evensen, Martinez &
// De Basabe Delgado (Am. J. Phys. 72, 367, 2004). sx and sy are standard
// uncertainties; r, the correlations of the errors of x and y of each point,
// may be nil.
func York(x, y, sx, sy, r []float64) (*Line, error) {
	n := len(x)
	if n < 2 || len(y) != n || len(sx) != n || len(sy) != n || (r != nil && len(r) != n) {
		return nil, fmt.Errorf("fit: a line needs at least two points with both uncertainties; got %d, %d, %d, %d values", n, len(y), len(sx), len(sy))
	}
	for i := range x {
		if !(sx[i] >= 0) || !(sy[i] >= 0) || sx[i]+sy[i] == 0 || math.IsNaN(x[i]+y[i]) {
			return nil, fmt.Errorf("fit: point %d (%v +- %v, %v +- %v) needs finite values and an uncertainty", i, x[i], sx[i], y[i], sy[i])
		}
	}
	b := slopeStart(x, y)
	w, beta := make([]float64, n), make([]float64, n)
	var xm, ym float64
	l := &Line{}
	for l.Iterations = 1; l.Iterations <= 200; l.Iterations++ {
		xm, ym = yorkWeights(b, x, y, sx, sy, r, w, beta)
		var up, down float64
		for i := range x {
			up += w[i] * beta[i] * (y[i] - ym)
			down += w[i] * beta[i] * (x[i] - xm)
		}
		if down == 0 {
			return nil, fmt.Errorf("fit: all points have the same x: no line")
		}
		next := up / down
		done := math.Abs(next-b) <= 1e-15*math.Abs(next)
		b = next
		if done {
			break
		}
	}
	xm, ym = yorkWeights(b, x, y, sx, sy, r, w, beta)
	l.Slope, l.Intercept = b, ym-b*xm
	var sw, swx, swu float64
	for i := range x {
		sw += w[i]
		swx += w[i] * (xm + beta[i])
	}
	at := swx / sw // mean of the adjusted points
	for i := range x {
		u := xm + beta[i] - at
		swu += w[i] * u * u
		d := y[i] - b*x[i] - l.Intercept
		l.S += w[i] * d * d
	}
	l.USlope = math.Sqrt(1 / swu)
	l.UIntercept = math.Sqrt(1/sw + at*at/swu)
	l.Covariance = -at / swu
	l.MSWD = math.NaN()
	if n > 2 {
		l.MSWD = l.S / float64(n-2)
	}
	f := math.Sqrt(l.MSWD)
	l.SDSlope, l.SDIntercept = l.USlope*f, l.UIntercept*f
	return l, nil
}

// slopeStart is the ordinary regression slope.
func slopeStart(x, y []float64) float64 {
	n := float64(len(x))
	var mx, my, up, down float64
	for i := range x {
		mx += x[i] / n
		my += y[i] / n
	}
	for i := range x {
		up += (x[i] - mx) * (y[i] - my)
		down += (x[i] - mx) * (x[i] - mx)
	}
	if down == 0 {
		return 1
	}
	return up / down
}

// yorkWeights fills the weights W_i and the displacements beta_i for slope b
// and returns the weighted means.
func yorkWeights(b float64, x, y, sx, sy, r, w, beta []float64) (xm, ym float64) {
	sum := 0.0
	corr := func(i int) float64 {
		if r == nil {
			return 0
		}
		return r[i]
	}
	for i := range x {
		w[i] = 1 / (sy[i]*sy[i] + b*b*sx[i]*sx[i] - 2*b*corr(i)*sx[i]*sy[i])
		sum += w[i]
		xm += w[i] * x[i]
		ym += w[i] * y[i]
	}
	xm, ym = xm/sum, ym/sum
	for i := range x {
		u, v := x[i]-xm, y[i]-ym
		// W [ U/w(Y) + b V/w(X) - (b U + V) r/alpha ]
		beta[i] = w[i] * (u*sy[i]*sy[i] + b*v*sx[i]*sx[i] - (b*u+v)*corr(i)*sx[i]*sy[i])
	}
	return xm, ym
}
