package chart

import "math"

// chain is a Markov chain over the states in which nothing has been flagged yet
// (Brook and Evans, Biometrika 59:539, 1972). Rows are sparse; what is missing from a
// row's sum is the probability of a flag.
type chain struct {
	to [][]int32
	p  [][]float64
}

// run returns the run length from state 0. Survival is summed value by value until
// its ratio stands still; from there it falls geometrically, which is summed in
// closed form.
func (c *chain) run(shift float64) RunLength {
	n := len(c.to)
	v, u := make([]float64, n), make([]float64, n)
	v[0] = 1
	mean, second, alive, ratio := 0.0, 0.0, 1.0, 0.0
	still := 0
	for t := 0; t < 2_000_000; t++ {
		mean += alive
		second += float64(2*t+1) * alive
		clear(u)
		for i, p := range v {
			if p == 0 {
				continue
			}
			to, pr := c.to[i], c.p[i]
			for k := range to {
				u[to[k]] += p * pr[k]
			}
		}
		v, u = u, v
		next := sum(v)
		if next < 1e-16 {
			break
		}
		r := next / alive
		// Measured on the probability of a flag, since that is what run lengths ask.
		// (While no pattern can be complete yet the ratio stands still at one.)
		if 1-r > 1e-14 && math.Abs(r-ratio) <= 1e-9*(1-r)+5e-16 {
			still++
		} else {
			still = 0
		}
		alive, ratio = next, r
		// Longer than any pattern, lest the calm before one is possible passes for the end.
		if still > longestRun {
			// alive r^0, alive r^1, ... at values t+1, t+2, ...
			q := 1 - r
			mean += alive / q
			second += alive * (float64(2*t+3)/q + 2*r/(q*q))
			break
		}
	}
	return RunLength{Shift: shift, Mean: mean, SD: math.Sqrt(max(0, second-mean*mean))}
}

// memory is what run tests on zones remember of the past.
type memory struct {
	threeUp, threeDown uint8 // last two values beyond the outer border
	fiveUp, fiveDown   uint8 // last four beyond the inner border
	side               int8  // signed count on one side
	outer              int8  // side of the last value beyond the outer border, 0 if it was not
	four               int8  // signed count beyond the inner border
	inside, outside    uint8 // counts within and beyond the inner border
}

// step takes a value of the given zone (side and number of borders passed, 0 to 3)
// and says whether a test fires.
func (m memory) step(r Runs, individuals bool, sign int8, zone int) (memory, bool) {
	fired := individuals && zone == 3
	bit := func(on bool) uint8 {
		if on {
			return 1
		}
		return 0
	}
	var n memory
	beyondOuter, beyondInner := zone >= 2, zone >= 1
	if r.TwoOfThree {
		up, down := bit(sign > 0 && beyondOuter), bit(sign < 0 && beyondOuter)
		fired = fired || up == 1 && m.threeUp != 0 || down == 1 && m.threeDown != 0
		n.threeUp, n.threeDown = (m.threeUp<<1|up)&3, (m.threeDown<<1|down)&3
	}
	if r.FourOfFive {
		up, down := bit(sign > 0 && beyondInner), bit(sign < 0 && beyondInner)
		fired = fired || up == 1 && ones(m.fiveUp) >= 3 || down == 1 && ones(m.fiveDown) >= 3
		n.fiveUp, n.fiveDown = (m.fiveUp<<1|up)&15, (m.fiveDown<<1|down)&15
	}
	if r.OneSide > 0 {
		n.side = extend(m.side, sign)
		fired = fired || abs(int(n.side)) >= r.OneSide
	}
	if r.TwoBeyond || r.Opposite {
		if beyondOuter {
			n.outer = sign
		}
		fired = fired || r.TwoBeyond && n.outer*m.outer > 0 || r.Opposite && n.outer*m.outer < 0
	}
	if r.FourBeyond {
		if beyondInner {
			n.four = extend(m.four, sign)
		}
		fired = fired || abs(int(n.four)) >= 4
	}
	if r.Inner > 0 && !beyondInner {
		n.inside = m.inside + 1
		fired = fired || int(n.inside) >= r.Inner
	}
	if r.Outer > 0 && beyondInner {
		n.outside = m.outside + 1
		fired = fired || int(n.outside) >= r.Outer
	}
	return n, fired
}

// extend counts on along a side or starts anew on the other.
func extend(count, sign int8) int8 {
	if count*sign > 0 {
		return count + sign
	}
	return sign
}

func ones(b uint8) int {
	n := 0
	for ; b != 0; b &= b - 1 {
		n++
	}
	return n
}

// RunsRunLength is the run length of run tests on zones, with action limits at c
// standard deviations (0 for none), by enumeration of the states the tests can
// remember (Champ and Woodall, Technometrics 29:393, 1987). Tests on rise and fall
// are not zone tests and are left out here; see OrderRunLength.
func RunsRunLength(c float64, r Runs, shift, scale float64) RunLength {
	unit := 1.0
	if c > 0 {
		unit = c / 3
	}
	return zoneChain(r, c > 0, unit, shift, scale).run(shift)
}

// zoneChain enumerates the states reachable from the start.
func zoneChain(r Runs, individuals bool, unit, shift, scale float64) *chain {
	type symbol struct {
		sign int8
		zone int
		p    float64
	}
	var symbols []symbol
	for zone := range 4 {
		low, high := float64(zone)*unit, float64(zone+1)*unit
		if zone == 3 {
			high = math.Inf(1)
		}
		symbols = append(symbols,
			symbol{1, zone, between((low-shift)/scale, (high-shift)/scale)},
			symbol{-1, zone, between((low+shift)/scale, (high+shift)/scale)})
	}
	index := map[memory]int32{{}: 0}
	states := []memory{{}}
	c := &chain{}
	for i := 0; i < len(states); i++ {
		var to []int32
		var p []float64
		for _, s := range symbols {
			next, fired := states[i].step(r, individuals, s.sign, s.zone)
			if fired || s.p == 0 {
				continue
			}
			k, known := index[next]
			if !known {
				k = int32(len(states))
				index[next] = k
				states = append(states, next)
			}
			to, p = append(to, k), append(p, s.p)
		}
		c.to, c.p = append(c.to, to), append(c.p, p)
	}
	return c
}
