package drift

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

func bigLab(t testing.TB, nights int) (*lab, *Model, History) {
	first := Night(20000)
	last := first + Night(nights) - 1
	l := buildLab(3, family(), refNames, 20, first, last)
	m := l.model(t, "big", Rules{})
	h := l.draw(m, rand.New(rand.NewPCG(7, uint64(nights))), first, last, 3, []fault{{cause: WavelengthShift, res: Resource{KindInstrument, "U1"}, theta: []float64{1.2}, from: last - 2, to: last}})
	return l, m, h
}

// BenchmarkNight is one night's whole evaluation: 3 instruments, 4 references,
// 15 characteristics, 60 nights of history, all causes, onsets and shapes.
func BenchmarkNight(b *testing.B) {
	_, m, h := bigLab(b, 60)
	b.ReportAllocs()
	for b.Loop() {
		if _, err := m.Evaluate(h); err != nil {
			b.Fatal(err)
		}
	}
}

// BenchmarkScore is the group score of the same night alone, with histories of
// several lengths: its cost must grow with them linearly.
func BenchmarkScore(b *testing.B) {
	for _, nights := range []int{15, 60, 120, 240} {
		_, m, h := bigLab(b, nights)
		b.Run(fmt.Sprintf("nights=%d", nights), func(b *testing.B) {
			for b.Loop() {
				if _, _, err := m.Score(h); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

// BenchmarkScoreDense is the same group score with one covariance matrix per
// cell in dense gonum algebra, factored once, and a solve for every hypothesis: the
// plain way to write it. 60 nights take minutes, so they are behind PKVIGIL_LONG.
func BenchmarkScoreDense(b *testing.B) {
	lengths := []int{15}
	if long() {
		lengths = append(lengths, 60)
	}
	for _, nights := range lengths {
		_, m, h := bigLab(b, nights)
		b.Run(fmt.Sprintf("nights=%d", nights), func(b *testing.B) {
			for b.Loop() {
				if _, err := denseScore(m, h); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}

// denseCell is the covariance of one cell over all its nights.
type denseCell struct {
	ch   mat.Cholesky
	vy   *mat.VecDense // V^-1 y
	rows []struct{ obs, j int }
}

func denseScore(m *Model, h History) (float64, error) {
	l, err := m.newLook(h)
	if err != nil {
		return 0, err
	}
	cells := make([]denseCell, len(l.cells))
	for i := range l.cells {
		cells[i].fill(&l.cells[i])
	}
	best := math.Inf(-1)
	for i := range l.scopes {
		s := &l.scopes[i]
		tr := m.traits[s.trait]
		for _, sh := range tr.Shapes {
			for on := range l.nights {
				course := l.course(s, sh, on)
				if b := denseOne(l, cells, s, tr, sh, course); b > best {
					best = b
				}
			}
		}
	}
	return best, nil
}

func (d *denseCell) fill(s *seen) {
	k := s.c.k
	for n, o := range s.obs {
		for j, have := range o.have {
			if have {
				d.rows = append(d.rows, struct{ obs, j int }{n, j})
			}
		}
	}
	n := len(d.rows)
	if n == 0 {
		return
	}
	v, y := mat.NewSymDense(n, nil), mat.NewVecDense(n, nil)
	for a, ra := range d.rows {
		y.SetVec(a, s.obs[ra.obs].y[ra.j])
		for b := a; b < n; b++ {
			rb := d.rows[b]
			x := s.c.base[ra.j*k+rb.j]
			if ra.obs == rb.obs {
				x += s.c.cov[ra.j*k+rb.j] / float64(s.obs[ra.obs].sets)
			}
			v.SetSym(a, b, x)
		}
	}
	d.ch.Factorize(v)
	d.vy = mat.NewVecDense(n, nil)
	_ = d.ch.SolveVecTo(d.vy, y)
}

func denseOne(l *look, cells []denseCell, s *scope, tr Trait, sh Shape, course []float64) float64 {
	var q [3]float64
	var p [2]float64
	peak := 1.0
	for _, v := range course {
		peak = math.Max(peak, v)
	}
	for a, i := range s.cells {
		d := &cells[i]
		n := len(d.rows)
		x := mat.NewDense(n, tr.Columns, nil)
		for r, row := range d.rows {
			night := l.cells[i].obs[row.obs].night
			if !s.nights[a][night] {
				continue
			}
			for c := range tr.Columns {
				x.Set(r, c, course[night]*l.cells[i].c.cols[s.trait][c*l.cells[i].c.k+row.j])
			}
		}
		var z, xx mat.Dense
		_ = d.ch.SolveTo(&z, x)
		xx.Mul(x.T(), &z)
		q[0] += xx.At(0, 0)
		p[0] += mat.Dot(x.ColView(0), d.vy)
		if tr.Columns > 1 {
			q[1] += xx.At(0, 1)
			q[2] += xx.At(1, 1)
			p[1] += mat.Dot(x.ColView(1), d.vy)
		}
	}
	tau := l.m.rules.Tau
	if sh == ShapeRamp || sh == ShapeSawtooth {
		tau /= rampLength(int(peak))
	}
	a := sums{p: p, q: q}
	return a.weigh(tr.Columns, 0, tau, tr.OneSided).lnB
}

// The dense way must give the same best hypothesis as the fast one.
func TestDenseScoreAgrees(t *testing.T) {
	_, m, h := smallLab(t, 8)
	want, err := denseScore(m, h)
	if err != nil {
		t.Fatal(err)
	}
	l, err := m.newLook(h)
	if err != nil {
		t.Fatal(err)
	}
	got := math.Inf(-1)
	outs, _ := l.scanAll(false)
	for i := range outs {
		got = math.Max(got, outs[i].best.lnB)
	}
	if math.Abs(got-want) > 1e-6*math.Abs(want) {
		t.Errorf("ln B %.10g, dense %.10g", got, want)
	}
}

// BenchmarkNightCalibrations is BenchmarkNight where calibrations are known to differ.
func BenchmarkNightCalibrations(b *testing.B) {
	l, _, h := bigLab(b, 60)
	m, err := NewModel(l.cells, Rules{CalibrationPH: 0.002}, Plain)
	if err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		if _, err := m.Evaluate(h); err != nil {
			b.Fatal(err)
		}
	}
}
