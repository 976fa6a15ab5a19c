package fit

import (
	"fmt"
	"math"
)

// LMOptions bound a general minimisation. The zero value is right for most.
type LMOptions struct {
	MaxIterations int                    // 0: 2000
	Jacobian      func(x, jac []float64) // fills m*n, row-major; nil: differences of fourth order
}

// LMResult is the outcome of LevenbergMarquardt.
type LMResult struct {
	Status     Status
	X          []float64 // n
	SD         []float64 // n, sqrt of the diagonal of Cov
	Cov        []float64 // n*n, RSS/(m-n) times the inverse of J'J
	RSS        float64
	DOF        int
	Iterations int
	Gradient   float64 // largest cosine between the residual and a column of the Jacobian at the end
}

// LevenbergMarquardt minimises the sum of squares of the m residuals that
// residual(x, r) writes to r, from start. Each step solves the damped linear
// problem by orthogonal factorisation (Levenberg 1944, Marquardt 1963; scaling
// and trust region of Moré 1978). A residual that is not finite
// counts as a step too far.
func LevenbergMarquardt(residual func(x, r []float64), m int, start []float64, opt LMOptions) (*LMResult, error) {
	n := len(start)
	if n == 0 || m < n {
		return nil, fmt.Errorf("fit: %d residuals for %d unknowns: at least as many residuals as unknowns are needed", m, n)
	}
	if opt.MaxIterations <= 0 {
		opt.MaxIterations = 2000
	}
	l := lm{f: residual, m: m, n: n, x: append([]float64(nil), start...), jf: opt.Jacobian,
		r: make([]float64, m), rt: make([]float64, m), xt: make([]float64, n), xd: make([]float64, n),
		j: make([]float64, m*n), jt: make([]float64, m*n),
		d: make([]float64, n), a: make([]float64, (m+n)*n), b: make([]float64, m+n), s: make([]float64, n),
		p: [4][]float64{make([]float64, m), make([]float64, m), make([]float64, m), make([]float64, m)}}
	l.f(l.x, l.r)
	l.rss = dot(l.r, l.r)
	if math.IsNaN(l.rss) || math.IsInf(l.rss, 0) {
		return nil, fmt.Errorf("fit: the residuals are not finite at the start %v", start)
	}
	out := &LMResult{Status: HitLimit, DOF: m - n}
	out.Iterations, out.Status = l.run(opt.MaxIterations)
	l.polish()
	l.finish(out)
	return out, nil
}

// lm is the state of one minimisation.
type lm struct {
	f            func(x, r []float64)
	jf           func(x, j []float64)
	m, n         int
	x, xt, r, rt []float64
	xd           []float64 // where differences are taken
	j, jt, d     []float64 // Jacobian here and at the trial; largest column norms so far
	a, b, s      []float64 // augmented system and step
	p            [4][]float64
	rss, lambda  float64
	tiny         int
}

// run iterates to convergence.
func (l *lm) run(limit int) (int, Status) {
	l.jacobian(l.x)
	l.j, l.jt = l.jt, l.j
	l.scale()
	radius := 0.1 * l.length(l.x)
	if radius == 0 {
		radius = 1
	}
	for it := 1; it <= limit; it++ {
		pred, rel, size := l.bounded(radius)
		if math.IsNaN(pred) {
			return it, Undetermined
		}
		if it == 1 {
			radius = math.Min(radius, size)
		}
		l.f(l.xt, l.rt)
		rss := dot(l.rt, l.rt)
		gain := (l.rss - rss) / pred
		better := rss <= l.rss && !math.IsInf(rss, 0) && l.jacobian(l.xt)
		switch {
		case !better || gain < 0.25:
			shrink := 0.5
			if !better && !(rss < 100*l.rss) {
				shrink = 0.1
			}
			radius = shrink * math.Min(radius, 10*size)
		case gain > 0.75 || l.lambda == 0:
			radius = 2 * size
		}
		if !better {
			// At the floor of rounding no step is better: an undamped move of no size ends it.
			if rel < 1e-13 || (rel < 1e-9 && pred < 1e-14*l.rss) {
				return it, Converged
			}
			if radius == 0 {
				return it, HitLimit
			}
			continue
		}
		l.x, l.xt, l.r, l.rt = l.xt, l.x, l.rt, l.r
		l.tiny++
		if l.rss-rss > 1e-15*l.rss {
			l.tiny = 0
		}
		l.j, l.jt = l.jt, l.j
		l.scale()
		l.rss = rss
		if rel < 1e-14 || l.tiny >= 8 || l.rss == 0 {
			return it, Converged
		}
	}
	return limit, HitLimit
}

// polish takes undamped steps at the end. There the sum of squares is flat to
// rounding and cannot judge a step, so the gradient does.
func (l *lm) polish() {
	for range 12 {
		before := l.slope(l.j, l.r)
		if pred, _ := l.step(0); math.IsNaN(pred) {
			return
		}
		l.f(l.xt, l.rt)
		rss := dot(l.rt, l.rt)
		if !(rss <= l.rss*(1+1e-9)) || !l.jacobian(l.xt) || !(l.slope(l.jt, l.rt) < 0.5*before) {
			return
		}
		l.x, l.xt, l.r, l.rt, l.j, l.jt, l.rss = l.xt, l.x, l.rt, l.r, l.jt, l.j, rss
	}
}

// slope is the largest cosine between the residual and a column of the Jacobian.
func (l *lm) slope(j, r []float64) float64 {
	norm := math.Sqrt(dot(r, r))
	worst := 0.0
	for k := 0; k < l.n; k++ {
		var g, s float64
		for i := 0; i < l.m; i++ {
			g += j[i*l.n+k] * r[i]
			s += j[i*l.n+k] * j[i*l.n+k]
		}
		if norm > 0 && s > 0 {
			worst = math.Max(worst, math.Abs(g)/(norm*math.Sqrt(s)))
		}
	}
	return worst
}

// length is |D x|.
func (l *lm) length(x []float64) float64 {
	s := 0.0
	for k, v := range x {
		s += l.d[k] * l.d[k] * v * v
	}
	return math.Sqrt(s)
}

// bounded finds the damping for which the scaled step is about as long as
// radius, or none when the undamped step is shorter. 1/|Ds| is nearly linear in
// the damping, so a guarded secant on it needs a few solutions only.
func (l *lm) bounded(radius float64) (pred, rel, size float64) {
	l.lambda = 0
	pred, rel = l.step(0)
	size = l.length(l.s)
	if !math.IsNaN(pred) && size <= 1.1*radius {
		return pred, rel, size
	}
	var a, fa float64 // lower bracket: damping and 1/size
	if !math.IsNaN(pred) {
		fa = 1 / size
	}
	b := 1e-3
	for range 60 {
		l.lambda = b
		pred, rel = l.step(b)
		size = l.length(l.s)
		if math.IsNaN(pred) || size <= 1.1*radius {
			break
		}
		a, fa = b, 1/size
		b *= 10
	}
	fb := 1 / size
	for range 30 {
		if size >= 0.9*radius && size <= 1.1*radius {
			break
		}
		next := a + (1/radius-fa)*(b-a)/(fb-fa)
		if !(next > a+0.01*(b-a) && next < b-0.01*(b-a)) {
			next = (a + b) / 2
			if a == 0 {
				next = b / 100
			}
		}
		l.lambda = next
		pred, rel = l.step(next)
		size = l.length(l.s)
		if size > radius {
			a, fa = next, 1/size
		} else {
			b, fb = next, 1/size
		}
	}
	return pred, rel, size
}

// jacobian fills jt at x; false means that an unknown has lost all influence
// there (a plateau), which counts as a step too far.
func (l *lm) jacobian(x []float64) bool {
	if l.jf != nil {
		l.jf(x, l.jt)
	} else {
		l.differences(x)
	}
	for k := 0; k < l.n; k++ {
		if s := l.column(l.jt, k); !(s > 1e-14*l.d[k]) || math.IsInf(s, 0) {
			return false
		}
	}
	return true
}

// column is the norm of column k.
func (l *lm) column(j []float64, k int) float64 {
	s := 0.0
	for i := k; i < l.m*l.n; i += l.n {
		s += j[i] * j[i]
	}
	return math.Sqrt(s)
}

// scale keeps the largest column norms so far.
func (l *lm) scale() {
	for k := range l.d {
		if s := l.column(l.j, k); s > l.d[k] && !math.IsInf(s, 0) {
			l.d[k] = s
		}
		if l.d[k] == 0 {
			l.d[k] = 1
		}
	}
}

// differences: f' = [8 (f+ - f-) - (f++ - f--)] / 12h.
func (l *lm) differences(x []float64) {
	at := l.xd
	copy(at, x)
	for k := 0; k < l.n; k++ {
		h := 1e-4 * math.Abs(x[k])
		if l.d[k] > 0 { // a value near zero says nothing about its scale; its standard deviation does
			h = math.Max(h, math.Min(1e-4, 1e-3*math.Sqrt(l.rss/float64(l.m))/l.d[k]))
		}
		if h == 0 {
			h = 1e-4
		}
		for q, step := range [4]float64{-2, -1, 1, 2} {
			at[k] = x[k] + step*h
			l.f(at, l.p[q])
		}
		at[k] = x[k]
		for i := 0; i < l.m; i++ {
			d := (8*(l.p[2][i]-l.p[1][i]) - (l.p[3][i] - l.p[0][i])) / (12 * h)
			if math.IsNaN(d) || math.IsInf(d, 0) {
				d = 0
			}
			l.jt[i*l.n+k] = d
		}
	}
}

// step writes the trial point to xt; it returns the predicted decrease and the
// largest relative change of an unknown.
func (l *lm) step(lambda float64) (pred, rel float64) {
	m, n := l.m, l.n
	copy(l.a, l.j)
	clear(l.a[m*n:])
	clear(l.b)
	for i, r := range l.r {
		l.b[i] = -r
	}
	for k := 0; k < n; k++ {
		l.a[(m+k)*n+k] = math.Sqrt(lambda) * l.d[k]
	}
	if !leastSquares(l.a, l.b, m+n, n, l.s) {
		return math.NaN(), 0
	}
	// |r|^2 - |r + Js|^2 = -2 r.Js - |Js|^2, and -r.Js = |Js|^2 + lambda |Ds|^2.
	for k, s := range l.s {
		l.xt[k] = l.x[k] + s
		rel = math.Max(rel, math.Abs(s)/(math.Abs(l.x[k])+1e-30))
		pred += 2 * lambda * l.d[k] * l.d[k] * s * s
	}
	for i := 0; i < m; i++ {
		js := dot(l.j[i*n:(i+1)*n], l.s)
		pred += js * js
	}
	return pred, rel
}

// leastSquares solves min |a x - b| by Householder reflections; a (m*n) and b are destroyed.
func leastSquares(a, b []float64, m, n int, x []float64) bool {
	for k := 0; k < n; k++ {
		s := 0.0
		for i := k; i < m; i++ {
			s = math.Hypot(s, a[i*n+k])
		}
		if s == 0 || math.IsNaN(s) || math.IsInf(s, 0) {
			return false
		}
		if a[k*n+k] > 0 {
			s = -s
		}
		// v = a_k - s e_k, kept in a; v'v = -2 s v_k.
		a[k*n+k] -= s
		vk := a[k*n+k]
		for j := k + 1; j < n; j++ {
			t := 0.0
			for i := k; i < m; i++ {
				t += a[i*n+k] * a[i*n+j]
			}
			t /= s * vk
			for i := k; i < m; i++ {
				a[i*n+j] += t * a[i*n+k]
			}
		}
		t := 0.0
		for i := k; i < m; i++ {
			t += a[i*n+k] * b[i]
		}
		t /= s * vk
		for i := k; i < m; i++ {
			b[i] += t * a[i*n+k]
		}
		a[k*n+k] = s
	}
	for k := n - 1; k >= 0; k-- {
		t := b[k]
		for j := k + 1; j < n; j++ {
			t -= a[k*n+j] * x[j]
		}
		x[k] = t / a[k*n+k]
		if math.IsNaN(x[k]) || math.IsInf(x[k], 0) {
			return false
		}
	}
	return true
}

// finish fills the covariance from an undamped factorisation.
func (l *lm) finish(out *LMResult) {
	m, n := l.m, l.n
	out.X, out.RSS = append([]float64(nil), l.x...), l.rss
	out.Gradient = l.slope(l.j, l.r)
	copy(l.a, l.j)
	clear(l.b)
	out.SD, out.Cov = make([]float64, n), make([]float64, n*n)
	if !leastSquares(l.a, l.b, m, n, l.s) {
		for k := range out.SD {
			out.SD[k] = math.Inf(1)
		}
		out.Status = Undetermined
		return
	}
	inv := make([]float64, n*n)
	for k := 0; k < n; k++ {
		for j := 0; j < k; j++ {
			l.a[k*n+j] = 0
		}
	}
	invertUpper(inv, l.a, n)
	v := 0.0
	if out.DOF > 0 {
		v = l.rss / float64(out.DOF)
	}
	for i := 0; i < n; i++ {
		for j := 0; j < n; j++ {
			for k := max(i, j); k < n; k++ {
				out.Cov[i*n+j] += v * inv[i*n+k] * inv[j*n+k]
			}
		}
		out.SD[i] = math.Sqrt(out.Cov[i*n+i])
	}
}
