package drift

import (
	"errors"
	"fmt"
	"math"
)

// ErrNoFit says that a simulated ladder could not be fitted.
var ErrNoFit = errors.New("drift: simulated ladder could not be fitted")

// Plain is unweighted least squares with free spectra (variable projection,
// Golub & Pereyra 1973; Kaufman 1975) and fixed amounts. Fingerprints for charts of
// the program are made with Weighted; Plain is there for comparison.
func Plain(d Design, a, ph, lib []float64) (Reading, error) {
	w := len(d.WavelengthNM)
	p, err := project(a, ph, w, []float64{d.PKa, 1}, 1)
	if err != nil {
		return Reading{}, err
	}
	q, err := project(a, ph, w, []float64{p.par[0], 1}, 2)
	if err != nil {
		return Reading{}, err
	}
	return Reading{
		PKa: p.par[0], Slope: q.par[1], LibraryPKa: libraryPKa(a, ph, lib, w, d.PKa),
		Spectra: p.e, Residual: p.rms,
	}, nil
}

// projection is the outcome of one separable fit.
type projection struct {
	par []float64 // pKa, slope
	e   []float64 // 2*w
	rms float64
}

// project fits pKa (and the slope if free is 2) by Gauss-Newton on the
// projected residual.
func project(a, ph []float64, w int, start []float64, free int) (projection, error) {
	par := append([]float64(nil), start...)
	m := len(ph)
	var out projection
	for range 60 {
		f, df := shares(par, ph, free)
		e, ok := regress(f, a, m, w)
		if !ok {
			return out, fmt.Errorf("%w: forms not separated at pKa %.2f", ErrNoFit, par[0])
		}
		h, g, ss := normal(f, df, e, a, m, w)
		step, ok := solve2(h, g, free)
		if !ok {
			return out, fmt.Errorf("%w: pKa not determined", ErrNoFit)
		}
		size := 0.0
		for k := range free {
			s := math.Max(-0.5, math.Min(0.5, step[k]))
			par[k] += s
			size = math.Max(size, math.Abs(s))
		}
		out = projection{par: par, e: e, rms: math.Sqrt(ss / float64(m*w))}
		if size < 1e-10 {
			return out, nil
		}
	}
	return out, fmt.Errorf("%w: no convergence", ErrNoFit)
}

// shares gives F (m*2: acid, base) and the derivatives of the base share (m per parameter).
func shares(par, ph []float64, free int) (f []float64, df [2][]float64) {
	m := len(ph)
	f = make([]float64, 2*m)
	for k := range free {
		df[k] = make([]float64, m)
	}
	for i, p := range ph {
		al := 1 / (1 + math.Pow(10, par[1]*(par[0]-p)))
		f[2*i], f[2*i+1] = 1-al, al
		s := math.Ln10 * al * (1 - al)
		df[0][i] = -s * par[1]
		if free > 1 {
			df[1][i] = s * (p - par[0])
		}
	}
	return f, df
}

// regress gives E = F+ A, 2*w.
func regress(f, a []float64, m, w int) ([]float64, bool) {
	inv, ok := gram2(f, m)
	if !ok {
		return nil, false
	}
	e := make([]float64, 2*w)
	for i := range m {
		c0 := inv[0]*f[2*i] + inv[1]*f[2*i+1]
		c1 := inv[1]*f[2*i] + inv[2]*f[2*i+1]
		for j := range w {
			v := a[i*w+j]
			e[j] += c0 * v
			e[w+j] += c1 * v
		}
	}
	return e, true
}

// gram2 inverts F'F, returned as xx, xy, yy.
func gram2(f []float64, m int) ([3]float64, bool) {
	var xx, xy, yy float64
	for i := range m {
		xx += f[2*i] * f[2*i]
		xy += f[2*i] * f[2*i+1]
		yy += f[2*i+1] * f[2*i+1]
	}
	det := xx*yy - xy*xy
	if det < 1e-9*xx*yy || det <= 0 {
		return [3]float64{}, false
	}
	return [3]float64{yy / det, -xy / det, xx / det}, true
}

// normal gives the normal equations of the projected problem. The model's
// derivative is P df (E_base - E_acid), P the projector on the complement of F.
func normal(f []float64, df [2][]float64, e, a []float64, m, w int) (h [3]float64, g [2]float64, ss float64) {
	inv, _ := gram2(f, m)
	var pd [2][]float64
	for k := range df {
		if df[k] == nil {
			continue
		}
		var s0, s1 float64
		for i := range m {
			s0 += f[2*i] * df[k][i]
			s1 += f[2*i+1] * df[k][i]
		}
		c0, c1 := inv[0]*s0+inv[1]*s1, inv[1]*s0+inv[2]*s1
		pd[k] = make([]float64, m)
		for i := range m {
			pd[k][i] = df[k][i] - c0*f[2*i] - c1*f[2*i+1]
		}
	}
	dd := 0.0
	for j := range w {
		x := e[w+j] - e[j]
		dd += x * x
	}
	for i := range m {
		rx := 0.0
		for j := range w {
			r := a[i*w+j] - f[2*i]*e[j] - f[2*i+1]*e[w+j]
			ss += r * r
			rx += r * (e[w+j] - e[j])
		}
		for k := range pd {
			if pd[k] != nil {
				g[k] += pd[k][i] * rx
			}
		}
	}
	h[0] = dot(pd[0], pd[0]) * dd
	if pd[1] != nil {
		h[1], h[2] = dot(pd[0], pd[1])*dd, dot(pd[1], pd[1])*dd
	}
	return h, g, ss
}

func solve2(h [3]float64, g [2]float64, free int) ([2]float64, bool) {
	if free == 1 {
		if h[0] <= 0 {
			return [2]float64{}, false
		}
		return [2]float64{g[0] / h[0]}, true
	}
	det := h[0]*h[2] - h[1]*h[1]
	if det <= 0 {
		return [2]float64{}, false
	}
	return [2]float64{(h[2]*g[0] - h[1]*g[1]) / det, (h[0]*g[1] - h[1]*g[0]) / det}, true
}

func dot(a, b []float64) float64 {
	s := 0.0
	for i := range a {
		s += a[i] * b[i]
	}
	return s
}

// libraryPKa regresses each rung on the archived spectra, so that amounts do
// not matter, and fits the share of the base form against pH.
func libraryPKa(a, ph, lib []float64, w int, start float64) float64 {
	m := len(ph)
	f := make([]float64, 2*w)
	for j := range w {
		f[2*j], f[2*j+1] = lib[j], lib[w+j]
	}
	inv, ok := gram2(f, w)
	if !ok {
		return math.NaN()
	}
	al := make([]float64, m)
	for i := range m {
		var s0, s1 float64
		for j := range w {
			s0 += f[2*j] * a[i*w+j]
			s1 += f[2*j+1] * a[i*w+j]
		}
		xa, xb := inv[0]*s0+inv[1]*s1, inv[1]*s0+inv[2]*s1
		al[i] = xb / (xa + xb)
	}
	pka := start
	for range 50 {
		var num, den float64
		for i, p := range ph {
			s := baseShare(pka, p)
			g := -math.Ln10 * s * (1 - s)
			num += g * (al[i] - s)
			den += g * g
		}
		step := num / den
		pka += math.Max(-0.5, math.Min(0.5, step))
		if math.Abs(step) < 1e-11 {
			break
		}
	}
	return pka
}
