package fit

import (
	"fmt"
	"math"
	"math/rand/v2"
	"sync"
)

// A Design is an experiment on paper: what a laboratory does, with the sizes
// of everything that goes wrong. Spectra of the forms may be given (from an
// earlier Result); nil: broad invented bands.
type Design struct {
	PKa          []float64 // n, centre of the constants that are drawn
	Jitter       float64   // the constants of each set are moved together by up to +-Jitter
	PH           []float64 // m, nominal ladder
	WavelengthNM []float64 // w
	Spectra      []float64 // (n+1)*w absorbance, or nil

	SigmaPH   float64 // standard deviation of one pH reading
	UAmount   float64 // relative standard deviation of the amount of dye
	UBaseline float64 // absorbance
	NoiseA    float64 // absorbance
	Shared    []Shared

	// What the fit is told, as factors of what is true; 0 stands for 1.
	ToldSigmaPH, ToldUAmount float64
}

// CoverageOptions size a coverage study.
type CoverageOptions struct {
	Sets     int                   // 0: 5000
	Seed     uint64                // same seed, same numbers, for any number of workers
	Workers  int                   // 0: 1
	Progress func(done, total int) // called now and then from one goroutine at a time; may be nil
	Stop     <-chan struct{}       // closing it ends the study early; may be nil
}

// A CoverageRow is the outcome for one pKa under one weighting.
type CoverageRow struct {
	Step      int     // 0-based
	Weighting string  // "own" or "full"
	Sets      int     // converged sets
	Random    float64 // share of sets whose 95 % interval of the random part covers
	Total     float64 // share of sets whose 95 % interval of everything covers
	Bias      float64 // mean error, pKa
	SD        float64 // of the error, pKa
	Bound     float64 // square root of the mean Cramer-Rao bound (latent pH, amounts, offsets and shared errors integrated out)
	Ratio     float64 // mean squared error in units of that bound
	Stated    float64 // mean stated variance in units of that bound
}

// A CoverageReport is the outcome of Coverage.
type CoverageReport struct {
	Rows   []CoverageRow
	Sets   int // asked
	Failed int // did not converge
}

// outcome is one simulated set.
type outcome struct {
	ok                        bool
	err, rnd, vOwn, vAll, crb [2][maxSteps]float64
}

// Coverage simulates sets of the design, fits each and counts how often the
// stated intervals hold the truth. The bound is the marginal one: the
// information of the noise-free set with all nuisance integrated out.
func Coverage(d Design, opt CoverageOptions) (*CoverageReport, error) {
	if opt.Sets <= 0 {
		opt.Sets = 5000
	}
	if len(d.PKa) < 1 || len(d.PKa) > maxSteps || len(d.PH) < len(d.PKa)+2 || len(d.WavelengthNM) == 0 || !(d.NoiseA > 0) {
		return nil, fmt.Errorf("%w: a design needs 1..%d pKa, at least n+2 rungs, wavelengths and noise > 0", ErrProblem, maxSteps)
	}
	if d.Spectra == nil {
		d.Spectra = inventedSpectra(len(d.PKa)+1, d.WavelengthNM)
	}
	out := make([]outcome, opt.Sets)
	inBlocks(opt.Sets, 25, opt.Workers, opt.Progress, opt.Stop, func(from, to int) {
		var s Solver
		for i := from; i < to; i++ {
			out[i] = d.simulate(&s, opt.Seed, uint64(i))
		}
	})
	return d.count(out), nil
}

// inBlocks calls work on blocks of size from up to workers goroutines. What a
// block computes must depend on its bounds only.
func inBlocks(total, size, workers int, progress func(int, int), stop <-chan struct{}, work func(from, to int)) {
	var mu sync.Mutex
	next, done := 0, 0
	take := func() (int, int, bool) {
		mu.Lock()
		defer mu.Unlock()
		select {
		case <-stop:
			return 0, 0, false
		default:
		}
		if next >= total {
			return 0, 0, false
		}
		from := next
		next = min(next+size, total)
		return from, next, true
	}
	var wg sync.WaitGroup
	for range max(workers, 1) {
		wg.Go(func() {
			for {
				from, to, ok := take()
				if !ok {
					return
				}
				work(from, to)
				mu.Lock()
				done += to - from
				if progress != nil {
					progress(done, total)
				}
				mu.Unlock()
			}
		})
	}
	wg.Wait()
}

// inventedSpectra are overlapping Gaussian bands on a weak slope.
func inventedSpectra(forms int, nm []float64) []float64 {
	e := make([]float64, forms*len(nm))
	lo, span := nm[0], math.Max(nm[len(nm)-1]-nm[0], 1)
	for j := range forms {
		for l, x := range nm {
			u := (x - lo) / span
			at := 0.15 + 0.7*float64(j)/math.Max(1, float64(forms-1))
			g := (u - at) / 0.11
			h := (u - 0.05 - 0.1*float64(j%3)) / 0.08
			e[j*len(nm)+l] = (0.6+0.1*float64(j))*math.Exp(-g*g/2) + 0.15*math.Exp(-h*h/2) + 0.03*(1-u)
		}
	}
	return e
}

// simulate draws one set and fits it.
func (d *Design) simulate(s *Solver, seed, index uint64) (o outcome) {
	rng := rand.New(rand.NewPCG(seed, index))
	n, m, w := len(d.PKa), len(d.PH), len(d.WavelengthNM)
	told := func(v, f float64) float64 {
		if f > 0 {
			return v * f
		}
		return v
	}
	truth := make([]float64, n)
	move := (2*rng.Float64() - 1) * d.Jitter
	for k := range truth {
		truth[k] = d.PKa[k] + move
	}
	delta := make([]float64, len(d.Shared))
	for k, sh := range d.Shared {
		delta[k] = rng.NormFloat64() * sh.U
	}
	p := Problem{WavelengthNM: d.WavelengthNM, A: make([]float64, m*w), PH: make([]float64, m), Steps: n,
		NoiseWave: make([]float64, w), SigmaPH: make([]float64, m), Shared: d.Shared,
		UAmount: told(d.UAmount, d.ToldUAmount), UBaseline: d.UBaseline}
	clean := p
	clean.A, clean.PH, clean.SigmaPH = make([]float64, m*w), d.PH, make([]float64, m)
	clean.UAmount, clean.Start = d.UAmount, truth
	for l := range p.NoiseWave {
		p.NoiseWave[l] = d.NoiseA
	}
	for i := range m {
		p.SigmaPH[i], clean.SigmaPH[i] = told(d.SigmaPH, d.ToldSigmaPH), d.SigmaPH
		p.PH[i] = d.PH[i] + rng.NormFloat64()*d.SigmaPH
		for k, sh := range d.Shared {
			if sh.S != nil {
				p.PH[i] += sh.S[i] * delta[k]
			}
		}
		d.scan(rng, i, truth, p.A[i*w:(i+1)*w], clean.A[i*w:(i+1)*w])
	}
	r, err := s.Solve(p, Options{Bare: true})
	if err != nil || r.Status != Converged {
		return o
	}
	c, err := s.Solve(clean, Options{Bare: true})
	if err != nil || c.Status != Converged {
		return o
	}
	o.ok = true
	for q, e := range [2]*Estimate{&r.Own, &r.Full} {
		for k := range n {
			direct := 0.0
			shared := 0.0
			for j, sh := range d.Shared {
				shared += sh.coefficient(k, e.Gain[k*m:(k+1)*m]) * delta[j]
				if sh.Direct != nil {
					direct += sh.Direct[k] * delta[j]
				}
			}
			o.err[q][k] = e.PKa[k] + direct - truth[k]
			o.rnd[q][k] = o.err[q][k] - shared
			o.vOwn[q][k], o.vAll[q][k] = e.CovOwn[k*(n+1)], e.Cov[k*(n+1)]
			o.crb[q][k] = c.Full.Cov[k*(n+1)]
		}
	}
	return o
}

// scan draws the absorbances of rung i, with and without errors.
func (d *Design) scan(rng *rand.Rand, i int, truth, out, clean []float64) {
	n1, w := len(truth)+1, len(d.WavelengthNM)
	var f, ft [maxSteps + 1]float64
	species(d.PH[i], truth, f[:n1], ft[:n1], nil)
	amount := math.Exp(rng.NormFloat64() * d.UAmount)
	base := rng.NormFloat64() * d.UBaseline
	for l := range w {
		a := 0.0
		for j := range n1 {
			a += f[j] * d.Spectra[j*w+l]
		}
		clean[l] = a
		out[l] = a*amount + base + rng.NormFloat64()*d.NoiseA
	}
}

// count sums up.
func (d *Design) count(out []outcome) *CoverageReport {
	rep := &CoverageReport{Sets: len(out)}
	for _, o := range out {
		if !o.ok {
			rep.Failed++
		}
	}
	good := float64(len(out) - rep.Failed)
	for q, name := range [2]string{"own", "full"} {
		for k := range d.PKa {
			row := CoverageRow{Step: k, Weighting: name, Sets: int(good)}
			var bound, square, stated float64
			for _, o := range out {
				if !o.ok {
					continue
				}
				if math.Abs(o.rnd[q][k]) <= 1.959963985*math.Sqrt(o.vOwn[q][k]) {
					row.Random += 1 / good
				}
				if math.Abs(o.err[q][k]) <= 1.959963985*math.Sqrt(o.vAll[q][k]) {
					row.Total += 1 / good
				}
				row.Bias += o.err[q][k] / good
				square += o.err[q][k] * o.err[q][k] / good
				bound += o.crb[q][k] / good
				row.Ratio += o.err[q][k] * o.err[q][k] / o.crb[q][k] / good
				stated += o.vAll[q][k] / o.crb[q][k] / good
			}
			row.SD = math.Sqrt(math.Max(square-row.Bias*row.Bias, 0))
			row.Bound, row.Stated = math.Sqrt(bound), stated
			rep.Rows = append(rep.Rows, row)
		}
	}
	return rep
}
