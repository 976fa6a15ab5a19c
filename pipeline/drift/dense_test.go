package drift

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// denseWorld is the same Gaussian model written as plain dense algebra: one big
// covariance over all numbers of all cells and nights.
type denseWorld struct {
	l *look

	n   int
	v   *mat.SymDense
	y   *mat.VecDense
	ch  mat.Cholesky
	row []struct{ cell, obs, j int }
}

func newDense(l *look) *denseWorld {
	d := &denseWorld{l: l}
	for i := range l.cells {
		for k, o := range l.cells[i].obs {
			for j, have := range o.have {
				if have {
					d.row = append(d.row, struct{ cell, obs, j int }{i, k, j})
				}
			}
		}
	}
	d.n = len(d.row)
	d.v, d.y = mat.NewSymDense(d.n, nil), mat.NewVecDense(d.n, nil)
	for a, ra := range d.row {
		c := &l.cells[ra.cell]
		d.y.SetVec(a, c.obs[ra.obs].y[ra.j])
		for b := a; b < d.n; b++ {
			rb := d.row[b]
			if rb.cell != ra.cell {
				break
			}
			k := c.c.k
			v := 0.0
			if c.c.base != nil {
				v = c.c.base[ra.j*k+rb.j]
			}
			if ra.obs == rb.obs {
				v += c.c.cov[ra.j*k+rb.j] / float64(c.obs[ra.obs].sets)
			}
			d.v.SetSym(a, b, v)
		}
	}
	d.ch.Factorize(d.v)
	return d
}

func (d *denseWorld) column(s *scope, course []float64, n int) *mat.VecDense {
	x := mat.NewVecDense(d.n, nil)
	for a, r := range d.row {
		c := &d.l.cells[r.cell]
		for q, i := range s.cells {
			if i == r.cell && s.nights[q][c.obs[r.obs].night] {
				x.SetVec(a, course[c.obs[r.obs].night]*c.c.cols[s.trait][n*c.c.k+r.j])
			}
		}
	}
	return x
}

// lnB of one or two columns against none.
func (d *denseWorld) lnB(cols []*mat.VecDense, tau float64, oneSided bool) float64 {
	n := len(cols)
	q := mat.NewSymDense(n, nil)
	p := mat.NewVecDense(n, nil)
	var z mat.VecDense
	for a := range n {
		_ = d.ch.SolveVecTo(&z, cols[a])
		for b := a; b < n; b++ {
			q.SetSym(a, b, mat.Dot(&z, cols[b]))
		}
		p.SetVec(a, mat.Dot(&z, d.y))
	}
	for a := range n {
		q.SetSym(a, a, q.At(a, a)+1/(tau*tau))
	}
	var ch mat.Cholesky
	ch.Factorize(q)
	var th mat.VecDense
	_ = ch.SolveVecTo(&th, p)
	out := 0.5*mat.Dot(p, &th) - 0.5*ch.LogDet() - float64(n)*math.Log(tau)
	if oneSided {
		out += logTwicePhi(th.AtVec(0) * math.Sqrt(q.At(0, 0)))
	}
	return out
}

// smallLab is two instruments with two references and a patchy history.
func smallLab(t *testing.T, nights int) (*lab, *Model, History) {
	first := Night(20000)
	last := first + Night(nights) - 1
	f := family()
	l := buildLab(2, []Design{f[0], f[2]}, []string{"RI-A", "RI-C"}, 14, first, last)
	l.uses[5].Until = first + 7
	l.uses = append(l.uses, Use{Resource{KindLamp, "L-new"}, "", "U1/RI-A", first + 11, last})
	m, err := NewModel(l.cells, Rules{}, Plain)
	if err != nil {
		t.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(1, 2))
	h := l.draw(m, rng, first, last, 2, []fault{{cause: ElectrodeSlope, res: Resource{KindElectrode, "E-31"}, theta: []float64{0.5}, from: first + 8, to: last}})
	kept := h.Observations[:0]
	for _, o := range h.Observations {
		if rng.Float64() < 0.15 {
			continue
		}
		if rng.Float64() < 0.2 && len(o.Values) > 3 {
			o.Values[rng.IntN(3)] = math.NaN()
		}
		o.Sets = 1 + rng.IntN(3)
		kept = append(kept, o)
	}
	h.Observations = kept
	return l, m, h
}

// Every onset and shape of every hypothesis must weigh the same as in dense
// algebra, before and after an explained cause has gone into the covariance.
func TestScanAgainstDense(t *testing.T) {
	_, m, h := smallLab(t, 12)
	l, err := m.newLook(h)
	if err != nil {
		t.Fatal(err)
	}
	d := newDense(l)
	worst, count := 0.0, 0
	compare := func() {
		for i := range l.scopes {
			s := &l.scopes[i]
			tr := m.traits[s.trait]
			out := l.scan(s, true)
			for k, sh := range tr.Shapes {
				for on, got := range out.lnB[k] {
					if math.IsInf(got, -1) {
						continue
					}
					course := l.course(s, sh, on)
					var cols []*mat.VecDense
					for n := range tr.Columns {
						cols = append(cols, d.column(s, course, n))
					}
					tau := m.rules.Tau
					if sh == ShapeRamp || sh == ShapeSawtooth {
						peak := 0.0
						for _, v := range course {
							peak = math.Max(peak, v)
						}
						tau /= rampLength(int(peak))
					}
					want := d.lnB(cols, tau, tr.OneSided)
					diff := math.Abs(got-want) / (1 + math.Abs(want))
					count++
					if diff > worst {
						worst = diff
					}
					if diff > 1e-6 {
						t.Fatalf("%s on %v, %s from night %d: ln B %.9g, dense %.9g", tr.Cause, s.res, sh, on, got, want)
					}
				}
			}
		}
	}
	compare()
	for i := range l.scopes {
		if c := m.traits[l.scopes[i].trait].Cause; c == ElectrodeSlope || c == ElectrodeAged {
			out := l.scan(&l.scopes[i], false)
			s := &l.scopes[i]
			tr := m.traits[s.trait]
			course := l.course(s, out.shape, out.onset)
			for n := range tr.Columns {
				x := d.column(s, course, n)
				w := math.Max(3, 3*math.Abs(out.best.theta[n]))
				d.v.SymRankOne(d.v, w*w, x)
			}
			d.ch.Factorize(d.v)
			l.explain(s, out.shape, out.onset, out.best)
			compare()
			if l.scopes[i].res.Name == "E-32" {
				break
			}
		}
	}
	t.Logf("%d hypotheses compared, largest relative difference of ln B %.1e", count, worst)
}
