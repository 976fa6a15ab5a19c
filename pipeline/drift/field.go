package drift

import (
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
)

// A look is one evaluation: the observations weighted by their precision,
// with the error of each frozen centre taken out of the covariance.
//
// For one cell, with observations y_t of precision W_t and a centre of
// covariance B, V^-1 x = W_t x_t - W_t C sum(W x), C = (B^-1 + sum W)^-1. All
// that a hypothesis needs are sums over nights, so its cost is linear in nights.
type look struct {
	m      *Model
	h      History
	nights int // Last-First+1
	cells  []seen
	extra  []field // explained disturbances in the covariance, orthonormal: V^-1 = V0^-1 - sum z z'
	uses   map[useKey][]bool
	scopes []scope
	named  map[string][]Resource
}

// seen is a cell with its observations in this look.
type seen struct {
	c    *cell
	obs  []obs
	chol []float64 // k*k lower factor of C, nil when the centre is exact
	comb []float64 // k*k C
	keys []*precision
}

// A precision is W for one pattern of missing values and number of sets.
type precision struct {
	id   string
	w    []float64 // k*k, zero rows where missing
	cols []product // per trait
}

// A product is what one precision makes of one fingerprint.
type product struct {
	wj []float64 // columns*k: W j
	q  [3]float64
	g  []float64 // columns*k: L' W j
}

type obs struct {
	night int // from History.First
	key   *precision
	sets  int
	y     []float64 // k, deviation from the centre, 0 where missing
	have  []bool
	v     []float64   // k: V^-1 y, after the extra fields
	z     [][]float64 // per extra field: k
}

// A field is one disturbance over all cells and nights, and its product with y.
type field struct{ y float64 }

// newLook sorts the observations into cells and weighs them.
func (m *Model) newLook(h History) (*look, error) {
	if h.Last < h.First {
		return nil, fmt.Errorf("drift: history from %v to %v is empty", h.First, h.Last)
	}
	l := &look{m: m, h: h, nights: int(h.Last-h.First) + 1, cells: make([]seen, len(m.cells)), named: map[string][]Resource{}}
	for i := range m.cells {
		l.cells[i].c = &m.cells[i]
	}
	l.indexUses()
	for _, o := range h.Observations {
		if o.Night < h.First || o.Night > h.Last {
			continue
		}
		i, ok := m.byKey[o.Cell]
		if !ok {
			return nil, fmt.Errorf("drift: observation of unknown cell %q in night %v", o.Cell, o.Night)
		}
		if err := l.take(i, o); err != nil {
			return nil, err
		}
	}
	for i := range l.cells {
		l.cells[i].settle()
	}
	l.findScopes()
	l.usual()
	return l, nil
}

func (l *look) take(i int, o Observation) error {
	s := &l.cells[i]
	c := s.c
	if len(o.Values) != c.k {
		return fmt.Errorf("drift: %s in night %v has %d values, the cell has %d characteristics", o.Cell, o.Night, len(o.Values), c.k)
	}
	n := int(o.Night - l.h.First)
	x := obs{night: n, sets: max(1, o.Sets), y: make([]float64, c.k), have: make([]bool, c.k)}
	any := false
	for j, v := range o.Values {
		x.have[j] = !math.IsNaN(v) && !math.IsInf(v, 0)
		if x.have[j] {
			x.y[j] = v - c.Centre[j]
		}
	}
	l.mask(i, n, x.have)
	for j := range x.have {
		if !x.have[j] {
			x.y[j] = 0
		}
		any = any || x.have[j]
	}
	if !any {
		return nil
	}
	k, err := s.precision(x, o.Variance, l.m.traits)
	if err != nil {
		return fmt.Errorf("drift: %s in night %v: %w", o.Cell, o.Night, err)
	}
	x.key = k
	s.obs = append(s.obs, x)
	return nil
}

// mask takes out what an explained, closed disturbance touched.
func (l *look) mask(i, n int, have []bool) {
	c := &l.m.cells[i]
	for _, mk := range l.h.Masks {
		night := l.h.First + Night(n)
		if night < mk.From || night > mk.Until {
			continue
		}
		t := slices.IndexFunc(l.m.traits, func(t Trait) bool { return t.Cause == mk.Cause })
		if t < 0 {
			if mk.Cause == Unknown && l.usedBy(mk.Resource, "", i, n) {
				clear(have)
			}
			continue
		}
		if c.cols[t] == nil || !l.usedBy(mk.Resource, l.m.traits[t].Role, i, n) {
			continue
		}
		for col := range l.m.traits[t].Columns {
			for j := range have {
				if math.Abs(c.cols[t][col*c.k+j]) > 0.2*math.Sqrt(c.cov[j*c.k+j]) {
					have[j] = false
				}
			}
		}
	}
}

// precision finds or makes W for an observation.
func (s *seen) precision(x obs, variance []float64, traits []Trait) (*precision, error) {
	var id strings.Builder
	id.WriteString(strconv.Itoa(x.sets))
	for j, h := range x.have {
		if !h {
			fmt.Fprintf(&id, ",%d", j)
		}
	}
	for _, v := range variance {
		id.WriteByte(';')
		id.WriteString(strconv.FormatFloat(v, 'g', 4, 64))
	}
	key := id.String()
	for _, k := range s.keys {
		if k.id == key {
			return k, nil
		}
	}
	c := s.c
	var idx []int
	for j, h := range x.have {
		if h {
			idx = append(idx, j)
		}
	}
	n := len(idx)
	sub := make([]float64, n*n)
	for a, i := range idx {
		for b, j := range idx {
			v := c.cov[i*c.k+j] / float64(x.sets) * factor(c, variance, i, x.sets) * factor(c, variance, j, x.sets)
			if c.night != nil {
				v += c.night[i*c.k+j]
			}
			sub[a*n+b] = v
		}
	}
	inv, ok := inverse(sub, n)
	if !ok {
		return nil, fmt.Errorf("%w: covariance of the night is not positive definite", ErrCells)
	}
	p := &precision{id: key, w: make([]float64, c.k*c.k)}
	for a, i := range idx {
		for b, j := range idx {
			p.w[i*c.k+j] = inv[a*n+b]
		}
	}
	s.keys = append(s.keys, p)
	return p, nil
}

// factor scales the sd of characteristic i to the variance the night itself states.
func factor(c *cell, variance []float64, i, sets int) float64 {
	if i >= len(variance) || !(variance[i] > 0) {
		return 1
	}
	return math.Sqrt(variance[i] * float64(sets) / c.cov[i*c.k+i])
}

// settle computes C, V^-1 y and the products with the fingerprints.
func (s *seen) settle() {
	c, k := s.c, s.c.k
	slices.SortStableFunc(s.obs, func(a, b obs) int { return a.night - b.night })
	if len(s.obs) == 0 {
		return
	}
	if c.prior != nil {
		p := slices.Clone(c.prior)
		for _, o := range s.obs {
			for i, v := range o.key.w {
				p[i] += v
			}
		}
		if inv, ok := inverse(p, k); ok {
			s.comb, s.chol = inv, lower(inv, k)
		}
	}
	for _, key := range s.keys {
		key.cols = make([]product, len(c.cols))
		for t, col := range c.cols {
			if col != nil {
				key.cols[t] = s.product(key, col)
			}
		}
	}
	w := make([][]float64, len(s.obs))
	for i, o := range s.obs {
		w[i] = times(o.key.w, o.y, k)
	}
	s.centred(w)
	for i := range s.obs {
		s.obs[i].v = w[i]
	}
}

// centred turns W x into V^-1 x in place.
func (s *seen) centred(w [][]float64) {
	if s.comb == nil {
		return
	}
	k := s.c.k
	sum := make([]float64, k)
	for _, x := range w {
		for j, v := range x {
			sum[j] += v
		}
	}
	u := times(s.comb, sum, k)
	cache := map[*precision][]float64{}
	for i := range w {
		key := s.obs[i].key
		d, ok := cache[key]
		if !ok {
			d = times(key.w, u, k)
			cache[key] = d
		}
		for j := range w[i] {
			w[i][j] -= d[j]
		}
	}
}

func (s *seen) product(key *precision, col []float64) product {
	k := s.c.k
	n := len(col) / k
	p := product{wj: make([]float64, n*k)}
	if s.chol != nil {
		p.g = make([]float64, n*k)
	}
	for a := range n {
		wj := times(key.w, col[a*k:(a+1)*k], k)
		copy(p.wj[a*k:], wj)
		if s.chol == nil {
			continue
		}
		for i := range k { // L' wj
			sum := 0.0
			for j := i; j < k; j++ {
				sum += s.chol[j*k+i] * wj[j]
			}
			p.g[a*k+i] = sum
		}
	}
	p.q[0] = dot(col[:k], p.wj[:k])
	if n > 1 {
		p.q[1] = dot(col[:k], p.wj[k:])
		p.q[2] = dot(col[k:], p.wj[k:])
	}
	return p
}

func times(a, x []float64, k int) []float64 {
	out := make([]float64, k)
	for i := range k {
		row := a[i*k : (i+1)*k]
		sum := 0.0
		for j, v := range row {
			sum += v * x[j]
		}
		out[i] = sum
	}
	return out
}
