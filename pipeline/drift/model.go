package drift

import (
	"errors"
	"fmt"
	"maps"
	"math"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// ErrCells says that the cells of a model contradict themselves.
var ErrCells = errors.New("drift: cells unusable")

// A Model holds the cells with their fingerprints and covariances, ready to
// evaluate nights. It is not changed by evaluating and may be shared.
type Model struct {
	rules  Rules
	traits []Trait
	cells  []cell
	byKey  map[string]int
}

// A cell is a Cell prepared for arithmetic.
type cell struct {
	Cell
	k     int
	cov   []float64   // k*k, one set, shrunk and widened
	night []float64   // k*k or nil
	prior []float64   // k*k, precision of the centre; nil: exact
	base  []float64   // k*k, covariance of the centre; nil: exact
	cols  [][]float64 // per trait: Columns*k, nil where the cause does not touch the cell
}

// NewModel computes the fingerprints of all causes in all cells (est as in
// Fingerprint) and prepares the covariances.
func NewModel(cells []Cell, rules Rules, est Estimator) (*Model, error) {
	return newModel(cells, rules, est, nil)
}

// Renew makes the model of other cells under the same rules, and takes over the fingerprints of
// those whose design and characteristics have not changed: baselines and
// covariances may have. est must be the estimator m was made with.
func (m *Model) Renew(cells []Cell, est Estimator) (*Model, error) {
	return newModel(cells, m.rules, est, m)
}

func newModel(cells []Cell, rules Rules, est Estimator, old *Model) (*Model, error) {
	m := &Model{rules: DefaultRules(rules), byKey: map[string]int{}}
	for _, t := range Traits() {
		if rules.Causes == nil || slices.Contains(rules.Causes, t.Cause) {
			m.traits = append(m.traits, t)
		}
	}
	for _, c := range cells {
		if _, twice := m.byKey[c.Key]; twice {
			return nil, fmt.Errorf("%w: cell %q is given twice", ErrCells, c.Key)
		}
		p, err := prepare(c, m.rules)
		if err != nil {
			return nil, err
		}
		if p.cols = old.prints(&p); p.cols == nil {
			if err := p.print(m.traits, est); err != nil {
				return nil, fmt.Errorf("fingerprints of %s: %w", c.Key, err)
			}
		}
		m.byKey[c.Key] = len(m.cells)
		m.cells = append(m.cells, p)
	}
	return m, nil
}

// prints finds the fingerprints of an equal cell, nil if there is none.
func (m *Model) prints(p *cell) [][]float64 {
	if m == nil {
		return nil
	}
	i, ok := m.byKey[p.Key]
	if !ok {
		return nil
	}
	o := &m.cells[i]
	if o.Kind != p.Kind || !slices.Equal(o.Characteristics, p.Characteristics) || !sameDesign(o.Design, p.Design) {
		return nil
	}
	for j, ch := range p.Characteristics {
		if ch.NormLike() && o.Cell.Centre[j] != p.Cell.Centre[j] {
			return nil
		}
	}
	return o.cols
}

func sameDesign(a, b *Design) bool {
	if a == b || a == nil || b == nil {
		return a == b
	}
	x, y := *a, *b
	same := slices.Equal(x.Ladder, y.Ladder) && slices.Equal(x.WavelengthNM, y.WavelengthNM) && slices.Equal(x.Acid, y.Acid) &&
		slices.Equal(x.Base, y.Base) && slices.Equal(x.Buffers, y.Buffers) && maps.Equal(x.Centre, y.Centre)
	numbers := func(d Design) [14]float64 {
		return [14]float64{d.PKa, float64(d.Charge), d.Ionic, d.DPKaDT, d.DPHDT, d.TemperatureC, d.CO2Above, d.BandwidthNM,
			d.Minus, d.Band, d.SigmaPH, d.UAmount, d.UBaseline, d.SigmaA}
	}
	return same && numbers(x) == numbers(y)
}

// prepare shrinks the correlations, widens for the degrees of freedom and
// derives the covariance of the centre.
func prepare(c Cell, r Rules) (cell, error) {
	k := len(c.Characteristics)
	p := cell{Cell: c, k: k}
	switch {
	case k == 0 || len(c.Centre) != k || len(c.Cov) != k*k:
		return p, fmt.Errorf("%w: %s has %d characteristics, %d centres and a covariance of %d numbers (%d expected)",
			ErrCells, c.Key, k, len(c.Centre), len(c.Cov), k*k)
	case c.NightCov != nil && len(c.NightCov) != k*k:
		return p, fmt.Errorf("%w: %s has a covariance between nights of %d numbers, %d expected", ErrCells, c.Key, len(c.NightCov), k*k)
	case !(c.N > 0):
		return p, fmt.Errorf("%w: %s has a baseline of %v sets", ErrCells, c.Key, c.N)
	}
	if p.Title == "" {
		p.Title = c.Key
	}
	widen := 1.0
	if c.DOF > 0 {
		widen = c.DOF / math.Max(c.DOF-2, c.DOF/3)
	}
	p.cov = shrunk(c.Cov, k, r.Shrink, widen)
	if c.NightCov != nil {
		p.night = shrunk(c.NightCov, k, r.Shrink, widen)
	}
	if _, ok := inverse(p.cov, k); !ok {
		return p, fmt.Errorf("%w: the covariance of %s is not positive definite; every characteristic needs a spread above 0", ErrCells, c.Key)
	}
	if !math.IsInf(c.N, 1) {
		p.base = slices.Clone(p.cov)
		for i := range p.base {
			p.base[i] /= c.N
			if p.night != nil {
				p.base[i] += p.night[i] / c.N
			}
		}
		p.prior, _ = inverse(p.base, k)
	}
	return p, nil
}

func shrunk(cov []float64, k int, share, widen float64) []float64 {
	out := make([]float64, k*k)
	for i := range k {
		for j := range k {
			v := cov[i*k+j] * widen
			if i != j {
				v *= 1 - share
			}
			out[i*k+j] = v
		}
	}
	return out
}

// print fills cols.
func (c *cell) print(traits []Trait, est Estimator) error {
	d := Design{}
	if c.Design != nil {
		d = *c.Design
	}
	d.Centre = maps.Clone(d.Centre)
	if d.Centre == nil {
		d.Centre = map[Characteristic]float64{}
	}
	for i, ch := range c.Characteristics {
		if ch.NormLike() {
			d.Centre[ch] = c.Centre[i]
		}
	}
	if c.Kind != ReferenceCell {
		d.Ladder, d.WavelengthNM = nil, nil
	}
	s, err := newStudy(d, est)
	if err != nil {
		return err
	}
	c.cols = make([][]float64, len(traits))
	for t, tr := range traits {
		f, err := s.fingerprint(tr)
		if err != nil {
			return err
		}
		col := make([]float64, tr.Columns*c.k)
		any := false
		for n, one := range f {
			for i, ch := range c.Characteristics {
				v := one[ch]
				if c.Kind == ReferenceCell && ch == Temperature {
					v = 0
				}
				col[n*c.k+i] = v
				any = any || v != 0
			}
		}
		if any {
			c.cols[t] = col
		}
	}
	return nil
}

// inverse inverts a symmetric positive definite k*k matrix.
func inverse(a []float64, k int) ([]float64, bool) {
	// scale to unit diagonal first: characteristics differ by many powers of ten
	s := make([]float64, k)
	for i := range k {
		if !(a[i*k+i] > 0) {
			return nil, false
		}
		s[i] = 1 / math.Sqrt(a[i*k+i])
	}
	b := mat.NewSymDense(k, nil)
	for i := range k {
		for j := i; j < k; j++ {
			b.SetSym(i, j, a[i*k+j]*s[i]*s[j])
		}
	}
	var ch mat.Cholesky
	if !ch.Factorize(b) || ch.Cond() > 1e12 {
		return nil, false
	}
	var inv mat.SymDense
	if ch.InverseTo(&inv) != nil {
		return nil, false
	}
	out := make([]float64, k*k)
	for i := range k {
		for j := range k {
			out[i*k+j] = inv.At(i, j) * s[i] * s[j]
		}
	}
	return out, true
}

// lower gives L with a = L L', for a symmetric positive semidefinite k*k matrix.
func lower(a []float64, k int) []float64 {
	l := make([]float64, k*k)
	for i := range k {
		for j := 0; j <= i; j++ {
			s := a[i*k+j]
			for n := range j {
				s -= l[i*k+n] * l[j*k+n]
			}
			switch {
			case i == j:
				l[i*k+i] = math.Sqrt(math.Max(0, s))
			case l[j*k+j] > 0:
				l[i*k+j] = s / l[j*k+j]
			}
		}
	}
	return l
}
