package chart

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// IndividualsCusumRunLength is the run length of a two-sided cumulative sum with
// action limits at c on the single value: a two-dimensional Markov chain over both
// sums (Lucas, J. Qual. Technol. 14:51, 1982) on grids of 30 and 60 states a side,
// extrapolated in the square of the grid width.
func IndividualsCusumRunLength(c, k, h, shift, scale float64) RunLength {
	coarse := pairChain(c, k, h, shift, scale, 30).run(shift)
	fine := pairChain(c, k, h, shift, scale, 60).run(shift)
	x := func(a, b float64) float64 { return b + (b-a)/3 }
	return RunLength{Shift: shift, Mean: x(coarse.Mean, fine.Mean), SD: x(coarse.SD, fine.SD)}
}

// pairChain builds the chain over the pairs (upper sum, lower sum) on a grid of m
// states a side, the first being zero.
func pairChain(c, k, h, shift, scale float64, m int) *chain {
	width := 2 * h / float64(2*m-1)
	type pair struct{ up, down int }
	index := map[pair]int32{{}: 0}
	states := []pair{{}}
	ch := &chain{}
	place := func(s float64) int { return max(0, int(math.Floor(s/width+0.5))) }
	var cuts []float64
	for i := 0; i < len(states); i++ {
		up, down := float64(states[i].up)*width, float64(states[i].down)*width
		// z at which a sum leaves the chart or the value passes its limit bounds the
		// row; in between, cuts lie where a sum changes its state.
		low, high := max(-c, down-k-h), min(c, h-up+k)
		cuts = append(cuts[:0], low, high)
		for g := 0; g < m; g++ {
			edge := (float64(g) + 0.5) * width
			if z := edge - up + k; z > low && z < high {
				cuts = append(cuts, z)
			}
			if z := down - k - edge; z > low && z < high {
				cuts = append(cuts, z)
			}
		}
		slices.Sort(cuts)
		var to []int32
		var p []float64
		for j := 1; j < len(cuts); j++ {
			if cuts[j]-cuts[j-1] < 1e-12 {
				continue
			}
			z := (cuts[j] + cuts[j-1]) / 2
			next := pair{place(up + z - k), place(down - z - k)}
			n, known := index[next]
			if !known {
				n = int32(len(states))
				index[next] = n
				states = append(states, next)
			}
			to, p = append(to, n), append(p, between((cuts[j-1]-shift)/scale, (cuts[j]-shift)/scale))
		}
		ch.to, ch.p = append(ch.to, to), append(ch.p, p)
	}
	return ch
}

// panels is a piecewise Gauss-Legendre rule for integral equations whose kernel is
// cut off at borders that move with the state: L(x) = 1 + integral of L(y) k(x,y)
// over y from low(x) to high(x). Inside each panel L is interpolated, so that a
// border in its midst costs no accuracy.
type panels struct {
	edges [][2]float64
	x, w  [][]float64
	q     int
}

func newPanels(breaks []float64, q int) *panels {
	slices.Sort(breaks)
	p := &panels{q: q}
	for i := 1; i < len(breaks); i++ {
		if breaks[i]-breaks[i-1] < 1e-9 {
			continue
		}
		x, w := legendre(q, breaks[i-1], breaks[i])
		p.edges = append(p.edges, [2]float64{breaks[i-1], breaks[i]})
		p.x, p.w = append(p.x, x), append(p.w, w)
	}
	return p
}

// row writes the weights of the integral of L(y) k(y) over [low, high].
func (p *panels) row(low, high float64, k func(y float64) float64, out []float64) {
	clear(out)
	for i, e := range p.edges {
		a, b := max(low, e[0]), min(high, e[1])
		if b <= a {
			continue
		}
		part := out[i*p.q : (i+1)*p.q]
		if a == e[0] && b == e[1] {
			for j, y := range p.x[i] {
				part[j] += p.w[i][j] * k(y)
			}
			continue
		}
		ys, ws := legendre(p.q, a, b)
		for s, y := range ys {
			interpolate(p.x[i], y, ws[s]*k(y), part)
		}
	}
}

// interpolate adds f times the Lagrange polynomials of nodes x at y to out.
func interpolate(x []float64, y, f float64, out []float64) {
	for j := range x {
		l := f
		for m := range x {
			if m != j {
				l *= (y - x[m]) / (x[j] - x[m])
			}
		}
		out[j] += l
	}
}

// solve returns the run length: first for every node with the kernel of its x, then
// from the start with the kernel given for it.
func (p *panels) solve(shift float64, bounds func(x float64) (low, high float64), kernel func(x, y float64) float64, start func(y float64) float64, startLow, startHigh float64) RunLength {
	n := len(p.edges) * p.q
	m := mat.NewDense(n, n, nil)
	for i := range p.edges {
		for j, x := range p.x[i] {
			low, high := bounds(x)
			p.row(low, high, func(y float64) float64 { return kernel(x, y) }, m.RawRowView(i*p.q+j))
		}
	}
	mean, second := solveRun(m)
	from := make([]float64, n)
	p.row(startLow, startHigh, start, from)
	f := mat.NewVecDense(n, from)
	l := 1 + mat.Dot(f, mean)
	q := 2*l - 1 + mat.Dot(f, second)
	return RunLength{Shift: shift, Mean: l, SD: math.Sqrt(max(0, q-l*l))}
}

// IndividualsEWMARunLength is the run length of an exponentially weighted mean with
// constant limits together with action limits at c on the single value.
func IndividualsEWMARunLength(c, weight, width, shift, scale float64) RunLength {
	h := width * math.Sqrt(weight/(2-weight))
	var breaks []float64
	const parts = 6
	for i := range parts + 1 {
		breaks = append(breaks, -h+2*h*float64(i)/parts)
	}
	// The reach of the single value ends at the limit of the mean here; L bends there,
	// and more gently where that place is reached from.
	for bend, i := (h-weight*c)/(1-weight), 0; i < 3 && math.Abs(bend) < h; i++ {
		breaks = append(breaks, bend, -bend)
		bend = (bend - weight*c) / (1 - weight)
	}
	p := newPanels(breaks, 12)
	s := weight * scale
	kernel := func(x, y float64) float64 { return density((y-(1-weight)*x-weight*shift)/s) / s }
	return p.solve(shift,
		func(x float64) (float64, float64) {
			return max(-h, (1-weight)*x-weight*c), min(h, (1-weight)*x+weight*c)
		},
		kernel, func(y float64) float64 { return kernel(0, y) }, max(-h, -weight*c), min(h, weight*c))
}

// IndividualsRangeRunLength is the run length of individual limits at c together with
// a limit d on the moving range, both in standard deviations (Crowder 1987). Limits
// of 3 and D4 times the mean range (3.6859) raise a false flag every 105 values.
func IndividualsRangeRunLength(c, d, shift, scale float64) RunLength {
	breaks := []float64{-c, c, 0, -c / 2, c / 2}
	for b := c - d; b > -c && len(breaks) < 40; b -= d {
		breaks = append(breaks, b)
	}
	for i, n := 0, len(breaks); i < n; i++ {
		breaks = append(breaks, -breaks[i])
	}
	p := newPanels(breaks, 16)
	kernel := func(y float64) float64 { return density((y-shift)/scale) / scale }
	return p.solve(shift,
		func(x float64) (float64, float64) { return max(-c, x-d), min(c, x+d) },
		func(_, y float64) float64 { return kernel(y) }, kernel, -c, c)
}

// OrderRunLength is the run length of one test on rise and fall: monotone values in a
// row rising or falling, or alternating values in a row going up and down in turn
// (the other argument 0). It does not depend on the distribution and hence on no
// constant shift.
func OrderRunLength(monotone, alternating int) RunLength {
	if monotone > 0 {
		return orderRun(monotone, func(_ bool, length int) (same, turned int) { return length + 1, 2 })
	}
	return orderRun(alternating, func(_ bool, length int) (same, turned int) { return 2, length + 1 })
}

// orderRun solves for f_j(u), the values still to come when the last value was u on
// the unit interval, was reached by a rise, and ends a pattern of j values; by
// symmetry f_j(1-u) holds after a fall. next gives the pattern lengths after another
// rise and after a turn.
func orderRun(need int, next func(up bool, length int) (same, turned int)) RunLength {
	const q = 20
	x, w := legendre(q, 0, 1)
	n := (need - 1) * q // lengths 1 .. need-1
	m := mat.NewDense(n, n, nil)
	at := func(length int) int { return (length - 1) * q }
	for length := 1; length < need; length++ {
		same, turned := next(true, length)
		if length == 1 {
			same, turned = 2, 2
		}
		for i, u := range x {
			row := m.RawRowView(at(length) + i)
			if same < need {
				ys, ws := legendre(q, u, 1)
				for s, y := range ys {
					interpolate(x, y, ws[s], row[at(same):at(same)+q])
				}
			}
			if turned < need {
				ys, ws := legendre(q, 0, u)
				for s, y := range ys {
					interpolate(x, 1-y, ws[s], row[at(turned):at(turned)+q])
				}
			}
		}
	}
	mean, second := solveRun(m)
	l, q2 := 1.0, 0.0
	for i := range x {
		l += w[i] * mean.AtVec(i)
		q2 += w[i] * second.AtVec(i)
	}
	q2 += 2*l - 1
	return RunLength{Mean: l, SD: math.Sqrt(max(0, q2-l*l))}
}
