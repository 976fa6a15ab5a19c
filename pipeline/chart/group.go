package chart

import (
	"fmt"
	"math"
	"math/rand/v2"

	"gonum.org/v1/gonum/mat"
	"gonum.org/v1/gonum/stat/distuv"
)

// nightsPerCharacteristic is how many nights each characteristic needs before the
// observed correlations replace those foretold by the reference's design.
const nightsPerCharacteristic = 5

// leastShrink is the least weight of the target in a shrunk correlation matrix.
const leastShrink = 0.1

// nullDraws is the number of draws from which the distribution of the group statistic
// without a change is fitted.
const nullDraws = 2000

// Group judges all characteristics of a reference, or of an instrument, at once: the
// T-squared statistic of Hotelling 1947 of the night's scores with a shrunk
// correlation matrix. It sees changes that no single characteristic shows, and it does
// not ring more often for having many of them.
type Group struct {
	P, Nights int
	Shrink    float64 // weight of the target
	Target    string  // "design" or "independent"
	corr      *mat.SymDense
	mean, dof float64 // of the null distribution: a scaled F with P and dof (0: chi-squared)
}

// GroupJudgement is the group statistic of one night.
type GroupJudgement struct {
	T2       float64
	Present  int       // characteristics with a value; the others take no part
	P        float64   // probability of so large a statistic without a change
	Excess   []float64 // what T2 would lose without each characteristic; NaN where absent
	Sentence string
}

// LearnGroup learns the correlation of scores. rows holds one row per baseline night
// and one column per characteristic: scores from Judge, NaN where there is none.
// design is the correlation matrix that the reference's design foretells, or nil.
// Until there are five nights per characteristic the design's correlations are used
// as they are; without a design, and later on, the observed ones are shrunk towards
// the design, or towards independence, by the weight of Schaefer and Strimmer 2005,
// at least a tenth. The rows of scores should be standard normal while nothing
// changes; seed makes the calibration of the limit reproducible.
func LearnGroup(rows [][]float64, design *mat.SymDense, seed uint64) (*Group, error) {
	p := 0
	if len(rows) > 0 {
		p = len(rows[0])
	} else if design != nil {
		p = design.SymmetricDim()
	}
	if p == 0 {
		return nil, fmt.Errorf("group chart: neither baseline nights nor a design to learn from")
	}
	for i, r := range rows {
		if len(r) != p {
			return nil, fmt.Errorf("group chart: night %d of the baseline has %d characteristics; expected %d", i+1, len(r), p)
		}
	}
	target, name := identity(p), "independent"
	if design != nil {
		if design.SymmetricDim() != p {
			return nil, fmt.Errorf("group chart: the design describes %d characteristics; expected %d", design.SymmetricDim(), p)
		}
		target, name = toCorrelation(design), "design"
	}
	g := &Group{P: p, Nights: len(rows), Target: name, Shrink: 1}
	if design == nil || len(rows) >= nightsPerCharacteristic*p {
		r, noise, signal := observed(rows, target)
		g.Shrink = 1
		if signal > 0 {
			g.Shrink = min(1, max(leastShrink, noise/signal))
		}
		g.corr = g.mix(r, target)
	} else {
		g.corr = target
	}
	if err := g.calibrate(target, seed); err != nil {
		return nil, err
	}
	return g, nil
}

func identity(p int) *mat.SymDense {
	m := mat.NewSymDense(p, nil)
	for i := range p {
		m.SetSym(i, i, 1)
	}
	return m
}

func toCorrelation(c *mat.SymDense) *mat.SymDense {
	p := c.SymmetricDim()
	r := mat.NewSymDense(p, nil)
	for i := range p {
		for j := i; j < p; j++ {
			r.SetSym(i, j, c.At(i, j)/math.Sqrt(c.At(i, i)*c.At(j, j)))
		}
	}
	return r
}

// observed returns the correlations of pairs present together, about zero, and the
// sums of their sampling variances and of their squared distances from the target.
func observed(rows [][]float64, target *mat.SymDense) (r *mat.SymDense, noise, signal float64) {
	p := target.SymmetricDim()
	r = identity(p)
	for i := range p {
		for j := i + 1; j < p; j++ {
			var xy, xx, yy, n float64
			for _, row := range rows {
				if finite(row[i]) && finite(row[j]) {
					xy, xx, yy, n = xy+row[i]*row[j], xx+row[i]*row[i], yy+row[j]*row[j], n+1
				}
			}
			if n < 3 || xx == 0 || yy == 0 {
				r.SetSym(i, j, target.At(i, j))
				continue
			}
			c := xy / math.Sqrt(xx*yy)
			r.SetSym(i, j, c)
			noise += (1 - c*c) * (1 - c*c) / (n - 1)
			d := c - target.At(i, j)
			signal += d * d
		}
	}
	return r, noise, signal
}

// mix shrinks r towards the target, further than asked where pairs with gaps would
// otherwise leave the matrix without a Cholesky factor.
func (g *Group) mix(r, target *mat.SymDense) *mat.SymDense {
	m := mat.NewSymDense(g.P, nil)
	for {
		for i := range g.P {
			for j := i; j < g.P; j++ {
				m.SetSym(i, j, (1-g.Shrink)*r.At(i, j)+g.Shrink*target.At(i, j))
			}
		}
		var c mat.Cholesky
		if g.Shrink >= 1 || c.Factorize(m) && c.Cond() < 1e10 {
			return m
		}
		g.Shrink = min(1, g.Shrink+0.1)
	}
}

// calibrate draws baselines and nights without a change, takes them through the same
// learning, and fits a scaled F distribution to the statistic by its first two
// moments.
func (g *Group) calibrate(target *mat.SymDense, seed uint64) error {
	var root mat.Cholesky
	if !root.Factorize(g.corr) {
		return fmt.Errorf("group chart: the correlations of the design contradict each other (the matrix is not positive definite)")
	}
	g.mean, g.dof = float64(g.P), 0
	if g.Shrink >= 1 {
		return nil
	}
	var lower mat.TriDense
	root.LTo(&lower)
	rng := rand.New(rand.NewPCG(seed, 0xda3e39cb94b95bdb))
	draw := func(out []float64) {
		e := make([]float64, g.P)
		for i := range e {
			e[i] = rng.NormFloat64()
		}
		for i := range out {
			out[i] = 0
			for j := 0; j <= i; j++ {
				out[i] += lower.At(i, j) * e[j]
			}
		}
	}
	rows := make([][]float64, g.Nights)
	for i := range rows {
		rows[i] = make([]float64, g.P)
	}
	z := make([]float64, g.P)
	var s1, s2 float64
	for range nullDraws {
		for _, r := range rows {
			draw(r)
		}
		draw(z)
		r, _, _ := observed(rows, target)
		trial := &Group{P: g.P, Shrink: g.Shrink}
		trial.corr = trial.mix(r, target)
		t2, _ := trial.statistic(z)
		s1, s2 = s1+t2, s2+t2*t2
	}
	m := s1 / nullDraws
	v := s2/nullDraws - m*m
	g.mean = m
	p := float64(g.P)
	if ratio := v / (m * m); p*ratio > 2.02 {
		g.dof = max(4.5, (2*(p-2)+4*p*ratio)/(p*ratio-2))
	}
	return nil
}

// statistic returns T-squared over the scores present and the excess of each.
func (g *Group) statistic(z []float64) (t2 float64, excess []float64) {
	var at []int
	for i, v := range z {
		if finite(v) {
			at = append(at, i)
		}
	}
	excess = make([]float64, len(z))
	for i := range excess {
		excess[i] = math.NaN()
	}
	if len(at) == 0 {
		return math.NaN(), excess
	}
	sub := mat.NewSymDense(len(at), nil)
	v := mat.NewVecDense(len(at), nil)
	for i, a := range at {
		v.SetVec(i, z[a])
		for j := i; j < len(at); j++ {
			sub.SetSym(i, j, g.corr.At(a, at[j]))
		}
	}
	var c mat.Cholesky
	if !c.Factorize(sub) {
		return math.NaN(), excess
	}
	var x mat.VecDense
	if err := c.SolveVecTo(&x, v); err != nil {
		return math.NaN(), excess
	}
	var inv mat.SymDense
	if err := c.InverseTo(&inv); err != nil {
		return math.NaN(), excess
	}
	for i, a := range at {
		excess[a] = x.AtVec(i) * x.AtVec(i) / inv.At(i, i)
	}
	return mat.Dot(&x, v), excess
}

// Judge judges one night's scores, one for each characteristic in the order of the
// baseline, NaN where there is none. With fewer than all present the null distribution
// is scaled to their number. A night without any has P 1 and says nothing.
func (g *Group) Judge(z []float64) (GroupJudgement, error) {
	if len(z) != g.P {
		return GroupJudgement{}, fmt.Errorf("group chart: %d scores; expected %d", len(z), g.P)
	}
	j := GroupJudgement{P: 1}
	j.T2, j.Excess = g.statistic(z)
	for _, v := range z {
		if finite(v) {
			j.Present++
		}
	}
	if j.Present == 0 {
		j.Sentence = "No characteristic has a value this night."
		return j, nil
	}
	p, q := float64(g.P), float64(j.Present)
	relative := j.T2 / (g.mean * q / p) // mean 1 without a change
	if g.dof == 0 {
		j.P = distuv.ChiSquared{K: q}.Survival(relative * q)
	} else {
		f := distuv.F{D1: q, D2: g.dof}
		j.P = f.Survival(relative * g.dof / (g.dof - 2))
	}
	j.Sentence = fmt.Sprintf("Taken together, the %d characteristics lie %.1f times as far from the centre as on an average night (chance %.2g).", j.Present, math.Sqrt(relative), j.P)
	return j, nil
}
