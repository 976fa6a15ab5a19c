package fit

import (
	"fmt"
	"math"
)

// A RemlResult holds the scatter of an instrument and method estimated from many sets.
type RemlResult struct {
	SigmaPH  float64 `json:"sigma_ph"` // standard deviation of one pH reading
	USigmaPH float64 `json:"u_sigma_ph"`
	UAmount  float64 `json:"u_amount"` // relative standard deviation of the amount of dye between rungs
	UUAmount float64 `json:"u_u_amount"`
	Sets     int     `json:"sets"`
	Rounds   int     `json:"rounds"`
	LogLik   float64 `json:"log_lik"` // restricted log likelihood, up to a constant
}

// remlSets is the least number of sets: fewer do not tell reading errors from amounts.
const remlSets = 20

// Reml estimates the reading noise and the scatter of amounts by restricted
// maximum likelihood (Patterson & Thompson 1971) over at least 20 sets. The
// shrunken residuals of one set underestimate both; integrating spectra, pKa
// and shared errors out of the likelihood does not. Each set's SigmaPH and
// UAmount serve as start only and are taken to be common to all sets; noise and
// offsets are as stated in each set.
func Reml(sets []Problem) (*RemlResult, error) {
	if len(sets) < remlSets {
		return nil, fmt.Errorf("fit: %d sets, at least %d are needed to tell reading errors from amounts; declare both until then", len(sets), remlSets)
	}
	v := [2]float64{math.Log(0.01), math.Log(0.005)}
	if s := sets[0].SigmaPH; len(s) > 0 && s[0] > 0 {
		v[0] = math.Log(s[0])
	}
	if u := sets[0].UAmount; u > 0 {
		v[1] = math.Log(u)
	}
	out := &RemlResult{}
	for out.Rounds = 1; out.Rounds <= 12; out.Rounds++ {
		lin, err := linearise(sets, math.Exp(v[0]), math.Exp(v[1]))
		if err != nil {
			return nil, err
		}
		out.Sets = len(lin)
		if len(lin) < remlSets {
			return nil, fmt.Errorf("fit: only %d of %d sets could be fitted, at least %d are needed", len(lin), len(sets), remlSets)
		}
		next, hess, best := climb(lin, v)
		move := math.Max(math.Abs(next[0]-v[0]), math.Abs(next[1]-v[1]))
		v = next
		out.LogLik = best
		out.SigmaPH, out.UAmount = math.Exp(v[0]), math.Exp(v[1])
		det := hess[0]*hess[2] - hess[1]*hess[1]
		out.USigmaPH = out.SigmaPH * math.Sqrt(math.Max(-hess[2]/det, 0))
		out.UUAmount = out.UAmount * math.Sqrt(math.Max(-hess[0]/det, 0))
		if move < 1e-3 {
			break
		}
	}
	return out, nil
}

// linearise fits every set with the present values and keeps its state.
func linearise(sets []Problem, sigma, amount float64) ([]*Solver, error) {
	var out []*Solver
	for i := range sets {
		p := sets[i]
		if err := check(&p); err != nil {
			return nil, fmt.Errorf("set %d: %w", i, err)
		}
		shared, err := merge(&p)
		if err != nil {
			return nil, fmt.Errorf("set %d: %w", i, err)
		}
		p.SigmaPH, p.UAmount = make([]float64, len(p.PH)), amount
		for k := range p.SigmaPH {
			p.SigmaPH[k] = sigma
		}
		s := &Solver{}
		if err := s.prepare(&p, Options{}); err != nil {
			continue
		}
		s.c.plain(&p)
		found, _ := s.locate(&p, Options{}, nil, true)
		r := &Result{}
		if s.own(found, Options{}, r) != Converged {
			continue
		}
		s.c.equip(shared)
		s.restart()
		if st, _ := s.c.descend(200); st != Converged {
			continue
		}
		s.trim()
		out = append(out, s)
	}
	return out, nil
}

// trim lets go of what the likelihood does not need.
func (s *Solver) trim() { s.red.y, s.c.try = nil, frame{} }

// restricted is the restricted log likelihood of one linearised set for other
// scatters: -1/2 [ sum log|V_i| + log|X'V^-1 X| + r'V^-1 r ] over the constants,
// spectra (flat) and shared errors (with their prior).
func (c *core) restricted(sigma, amount float64) float64 {
	f := &c.now
	s0, u0 := c.sig[0], c.ukap
	for i := range c.sig {
		c.sig[i] = sigma
	}
	c.ukap = amount
	defer func() {
		for i := range c.sig {
			c.sig[i] = s0
		}
		c.ukap = u0
	}()
	n := c.ne + c.np + c.nb
	m, q := c.m, c.q
	clear(c.a.mat)
	clear(c.a.rhs)
	total := 0.0
	// Pseudo-data at zero reading error, amount and shared error.
	pseudo := make([]float64, m*q)
	keepA, keepK, keepB := append([]float64(nil), f.a...), append([]float64(nil), f.k...), append([]float64(nil), f.b...)
	keepC := append([]float64(nil), f.c...)
	for i := 0; i < m; i++ {
		shift := 0.0
		for k := range keepB {
			shift += c.shift[i*c.nb+k] * keepB[k]
		}
		for j := 0; j < q; j++ {
			pseudo[i*q+j] = keepC[i*q+j] + f.dt[i*q+j]*(s0*keepA[i]+shift) + f.dk[i*q+j]*u0*keepK[i]
		}
	}
	copy(f.c, pseudo)
	clear(f.a)
	clear(f.k)
	clear(f.b)
	c.assemble(f, 0)
	var e small
	var buf [maxSteps + 2]float64
	for i := 0; i < m; i++ {
		c.eliminate(f, i, 0, &e)
		x := buf[:q]
		copy(x, f.c[i*q:(i+1)*q])
		e.weigh(x)
		total += dot(x, f.c[i*q:(i+1)*q])
		if e.any { // log|I + ZZ'| = -log det of the inverse 2 x 2
			total -= math.Log(e.s[0]*e.s[2] - e.s[1]*e.s[1])
		}
	}
	copy(f.c, keepC)
	copy(f.a, keepA)
	copy(f.k, keepK)
	copy(f.b, keepB)
	if !cholesky(c.a.mat, n) {
		return math.Inf(-1)
	}
	copy(c.a.sol, c.a.rhs)
	forward(c.a.mat, n, c.a.sol)
	for k := 0; k < n; k++ {
		total -= c.a.sol[k] * c.a.sol[k]
		total += 2 * math.Log(c.a.mat[k*n+k])
	}
	return -total / 2
}

// climb maximises the sum over sets by Newton steps in the logarithms, with
// differences for derivatives; it returns the second derivatives (11, 12, 22).
func climb(lin []*Solver, v [2]float64) (at [2]float64, hess [3]float64, best float64) {
	f := func(a, b float64) float64 {
		s := 0.0
		for _, l := range lin {
			s += l.c.restricted(math.Exp(a), math.Exp(b))
		}
		return s
	}
	const h = 0.02
	at = v
	for range 30 {
		c := f(at[0], at[1])
		xp, xm := f(at[0]+h, at[1]), f(at[0]-h, at[1])
		yp, ym := f(at[0], at[1]+h), f(at[0], at[1]-h)
		xy := (f(at[0]+h, at[1]+h) - f(at[0]+h, at[1]-h) - f(at[0]-h, at[1]+h) + f(at[0]-h, at[1]-h)) / (4 * h * h)
		gx, gy := (xp-xm)/(2*h), (yp-ym)/(2*h)
		hess = [3]float64{(xp - 2*c + xm) / (h * h), xy, (yp - 2*c + ym) / (h * h)}
		best = c
		a, b, d := hess[0], hess[1], hess[2]
		// Away from the top the curvature may have the wrong sign: then climb along the gradient.
		det := a*d - b*b
		var dx, dy float64
		if a < 0 && det > 0 {
			dx, dy = -(d*gx-b*gy)/det, -(a*gy-b*gx)/det
		} else {
			g := math.Hypot(gx, gy)
			if g == 0 {
				return at, hess, best
			}
			dx, dy = 0.5*gx/g, 0.5*gy/g
		}
		if s := math.Max(math.Abs(dx), math.Abs(dy)); s > 1 {
			dx, dy = dx/s, dy/s
		}
		for range 20 {
			if f(at[0]+dx, at[1]+dy) >= c-1e-9 {
				break
			}
			dx, dy = dx/2, dy/2
		}
		at[0] += dx
		at[1] += dy
		at[0], at[1] = math.Max(at[0], math.Log(1e-6)), math.Max(at[1], math.Log(1e-7))
		if math.Max(math.Abs(dx), math.Abs(dy)) < 1e-5 {
			return at, hess, best
		}
	}
	return at, hess, best
}
