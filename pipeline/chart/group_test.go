package chart

import (
	"math"
	"math/rand/v2"
	"testing"

	"gonum.org/v1/gonum/mat"
)

// correlated draws rows of p values with common correlation rho.
func correlated(rng *rand.Rand, n, p int, rho float64) [][]float64 {
	rows := make([][]float64, n)
	for i := range rows {
		rows[i] = make([]float64, p)
		common := rng.NormFloat64()
		for j := range p {
			rows[i][j] = math.Sqrt(rho)*common + math.Sqrt(1-rho)*rng.NormFloat64()
		}
	}
	return rows
}

// The group statistic keeps its rate whether correlations come from a design, from
// many nights, or from too few nights to invert a matrix without shrinking.
func TestGroupKeepsItsRate(t *testing.T) {
	rng := rand.New(rand.NewPCG(21, 22))
	const p, rho = 8, 0.6
	design := mat.NewSymDense(p, nil)
	for i := range p {
		for j := i; j < p; j++ {
			design.SetSym(i, j, rho)
		}
		design.SetSym(i, i, 1)
	}
	for _, c := range []struct {
		name   string
		nights int
		design *mat.SymDense
	}{{"design only", 0, design}, {"design, few nights", 12, design}, {"few nights alone", 12, nil}, {"five nights each", 40, nil}, {"both", 60, design}} {
		// Averaged over baselines: a single one may be lucky or not.
		over, total := 0, 0
		baselines := 8
		for k := range baselines {
			g, err := LearnGroup(correlated(rng, c.nights, p, rho), c.design, uint64(k))
			if err != nil {
				t.Fatal(err)
			}
			for _, z := range correlated(rng, 500, p, rho) {
				j, err := g.Judge(z)
				if err != nil {
					t.Fatal(err)
				}
				total++
				if j.P < 0.01 {
					over++
				}
			}
		}
		rate := float64(over) / float64(total)
		t.Logf("%s: %.4f of nights below a chance of 0.01", c.name, rate)
		if rate > 0.02 || rate < 0.003 {
			t.Errorf("%s: rate %.4f, asked 0.01", c.name, rate)
		}
	}
}

func TestGroupSeesWhatSinglesMiss(t *testing.T) {
	rng := rand.New(rand.NewPCG(23, 24))
	g, err := LearnGroup(correlated(rng, 60, 4, 0.8), nil, 1)
	if err != nil {
		t.Fatal(err)
	}
	// Each score within two, but against the correlation.
	j, _ := g.Judge([]float64{1.9, -1.9, 1.9, -1.9})
	with, _ := g.Judge([]float64{1.9, 1.9, 1.9, 1.9})
	t.Log(j.Sentence)
	if j.P > 1e-4 || with.P < 0.01 {
		t.Errorf("against the correlation %.2g, along it %.2g", j.P, with.P)
	}
	odd, _ := g.Judge([]float64{0.2, 0.1, 3.5, 0})
	best := 0
	for i, e := range odd.Excess {
		if e > odd.Excess[best] {
			best = i
		}
	}
	if best != 2 {
		t.Errorf("the odd one out is 3, named %d", best+1)
	}
	part, _ := g.Judge([]float64{0.2, math.NaN(), 0.1, math.NaN()})
	if part.Present != 2 || part.P < 0.05 || !math.IsNaN(part.Excess[1]) {
		t.Errorf("with two of four: %+v", part)
	}
	none, _ := g.Judge([]float64{math.NaN(), math.NaN(), math.NaN(), math.NaN()})
	if none.P != 1 || none.Present != 0 {
		t.Errorf("without data: %+v", none)
	}
	if _, err := g.Judge([]float64{1}); err == nil {
		t.Error("a wrong number of scores was accepted")
	}
	if _, err := LearnGroup([][]float64{{1, 2}, {1}}, nil, 1); err == nil {
		t.Error("ragged rows were accepted")
	}
	if _, err := LearnGroup(nil, nil, 1); err == nil {
		t.Error("nothing to learn from was accepted")
	}
}

// With the correlation known the statistic is chi-squared: for two characteristics of
// correlation r it is (a^2 - 2 r a b + b^2)/(1-r^2).
func TestGroupClosedForm(t *testing.T) {
	design := mat.NewSymDense(2, []float64{4, 1, 1, 1}) // covariance; correlation 0.5
	g, err := LearnGroup(nil, design, 1)
	if err != nil {
		t.Fatal(err)
	}
	j, _ := g.Judge([]float64{1, 2})
	near(t, "T2", j.T2, (1-2+4)/0.75, 1e-12)
	near(t, "P", j.P, math.Exp(-j.T2/2), 1e-12)
	near(t, "excess", j.Excess[0], j.T2-4, 1e-12)
}
