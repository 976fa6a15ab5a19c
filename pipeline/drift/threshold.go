package drift

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
)

// Threshold bounds the group score of n hypotheses (cause x resource x shape) that
// may ring if one false case in so many nights is tolerable. Under no change a Bayes
// factor for one onset is a martingale, so it ever exceeds b with probability at most 1/b
// (Ville 1939), and the sum over onsets less the number of nights is one too, so it
// exceeds b after b nights on average or later (Pollak 1985). The two parts of the score, the second
// with weight 1/e, together ring in at most (1+1/e) n exp(-threshold) of the
// nights. Calibrate finds the lower value that really gives the rate.
func Threshold(n int, nights float64) float64 {
	return math.Log((1 + 1/math.E) * math.Max(1, float64(n)) * math.Max(1, nights))
}

// SingleThreshold bounds the ln B of one evaluation by itself: ln(20 n w), for n hypotheses
// in w windows, keeps the chance of a false case in that evaluation below 5 %.
func SingleThreshold(n, windows int) float64 {
	return math.Log(20 * float64(max(1, n)) * float64(max(1, windows)))
}

// A CalibrationPlan says how much null simulation to spend.
type CalibrationPlan struct {
	Seed     uint64
	Runs     int // simulated series, each with a baseline of its own; 0: 200
	Nights   int // nights per series; 0: those of the history
	Progress func(done, total int)
}

// A Calibrated threshold with what is known of it.
type Calibrated struct {
	Threshold float64   `json:"threshold"` // ln B
	Low       float64   `json:"low"`       // 90 % interval from the simulation's size
	High      float64   `json:"high"`
	Runs      int       `json:"runs"`
	Nights    int       `json:"nights"` // simulated quiet nights in all
	Bound     float64   `json:"bound"`  // Threshold's value, for comparison
	Maxima    []float64 `json:"maxima"` // largest score of each series, ascending
	Text      string    `json:"text"`
}

// Calibrate simulates the whole procedure on quiet nights (baseline means and
// spreads estimated from as many sets as the cells have, the history's pattern of
// observations, uses and events) and returns the threshold that gives one false
// case in rules.FalseAlarmNights nights per instrument. It ends early, with
// what it has, when ctx ends; fewer than 40 series are an error.
func (m *Model) Calibrate(ctx context.Context, h History, plan CalibrationPlan) (Calibrated, error) {
	runs := plan.Runs
	if runs == 0 {
		runs = 200
	}
	if plan.Nights > 0 && h.First+Night(plan.Nights)-1 < h.Last {
		h.Last = h.First + Night(plan.Nights) - 1
	}
	nights := int(h.Last-h.First) + 1
	h.Masks, h.Watch = nil, nil
	out := Calibrated{}
	for r := range runs {
		if ctx.Err() != nil {
			break
		}
		top, n, err := m.quietRun(h, rand.New(rand.NewPCG(plan.Seed, uint64(r))))
		if err != nil {
			return out, err
		}
		out.Maxima = append(out.Maxima, top)
		out.Bound = Threshold(n, m.tolerable())
		if plan.Progress != nil {
			plan.Progress(r+1, runs)
		}
	}
	out.Runs, out.Nights = len(out.Maxima), len(out.Maxima)*nights
	if out.Runs < 40 {
		return out, fmt.Errorf("drift: only %d of %d quiet series were simulated before the time was up, 40 are needed; use fewer nights or more time", out.Runs, runs)
	}
	slices.Sort(out.Maxima)
	out.quantile(nights, m.tolerable())
	return out, nil
}

// tolerable is the mean number of nights between false cases of all instruments together.
func (m *Model) tolerable() float64 {
	names := map[string]bool{}
	for _, c := range m.cells {
		if c.Kind == ReferenceCell {
			names[c.Instrument] = true
		}
	}
	return m.rules.FalseAlarmNights / math.Max(1, float64(len(names)))
}

// quantile reads the threshold from the maxima: a series of so many nights
// stays silent with probability exp(-nights/tolerable). Beyond the largest maximum
// the tail falls like exp(-ln B), as that of a Bayes factor does.
func (c *Calibrated) quantile(nights int, tolerable float64) {
	n := float64(c.Runs)
	ring := -math.Expm1(-float64(nights) / tolerable)
	at := func(p float64) float64 { // threshold exceeded by a share p of series
		k := p * n
		if k < 1 {
			return c.Maxima[c.Runs-1] - math.Log(math.Max(k, 1e-12))
		}
		i := n - k - 0.5
		lo := int(math.Max(0, math.Min(n-1, math.Floor(i))))
		hi := min(c.Runs-1, lo+1)
		f := math.Max(0, math.Min(1, i-float64(lo)))
		return c.Maxima[lo]*(1-f) + c.Maxima[hi]*f
	}
	sd := math.Sqrt(ring * (1 - ring) / n)
	c.Threshold = at(ring)
	c.High = at(math.Max(ring-1.645*sd, ring/math.Max(2, n*ring)))
	c.Low = at(math.Min(0.999, ring+1.645*sd))
	c.Text = fmt.Sprintf("%d quiet series of %d nights: the group score rings above ln B %.2f (90 %% interval %.2f to %.2f) for one false case in %.0f nights; the bound without simulation is %.2f",
		c.Runs, nights, c.Threshold, c.Low, c.High, tolerable, c.Bound)
}

// quietRun evaluates one quiet series night by night and returns its largest score.
func (m *Model) quietRun(h History, rng *rand.Rand) (top float64, hypotheses int, err error) {
	h.Observations = m.Quiet(h, rng)
	last := h.Last
	top = math.Inf(-1)
	for n := h.First; n <= last; n++ {
		h.Last = n
		s, k, err := m.Score(h)
		if err != nil {
			return 0, 0, err
		}
		top = math.Max(top, s)
		hypotheses = max(hypotheses, k)
	}
	return top, hypotheses, nil
}

// Quiet draws observations with the pattern of h and nothing wrong: baseline
// centre and spread are off by what their number of sets allows, squares of
// norm-like characteristics follow scaled chi-square distributions.
func (m *Model) Quiet(h History, rng *rand.Rand) []Observation {
	made := map[int]*nature{}
	out := make([]Observation, 0, len(h.Observations))
	for _, o := range h.Observations {
		i, ok := m.byKey[o.Cell]
		if !ok {
			continue
		}
		c := &m.cells[i]
		n := made[i]
		if n == nil {
			n = c.nature(rng)
			made[i] = n
		}
		sets := max(1, o.Sets)
		v := make([]float64, c.k)
		addNormal(rng, n.low, v, 1/math.Sqrt(float64(sets)))
		for j := range v {
			v[j] *= n.widen[j]
			if d := n.dof[j]; d > 0 {
				d *= float64(sets)
				v[j] = c.Cell.Centre[j] * (chiSquare(rng, d)/d - 1) * n.widen[j]
			}
		}
		if n.between != nil {
			addNormal(rng, n.between, v, 1)
		}
		for j := range v {
			v[j] += n.centre[j]
			if math.IsNaN(o.Values[j]) {
				v[j] = math.NaN()
			}
		}
		out = append(out, Observation{Cell: o.Cell, Night: o.Night, Sets: sets, Values: v})
	}
	return out
}

// A nature is how one cell really behaves in a quiet series.
type nature struct {
	low, between []float64 // factors of the covariances
	centre       []float64
	widen        []float64 // true sd over the baseline's
	dof          []float64 // of norm-like ones, 0 for Gaussian
}

// nature draws what the baseline of a cell could not know.
func (c *cell) nature(rng *rand.Rand) *nature {
	n := &nature{low: lower(c.Cell.Cov, c.k), centre: make([]float64, c.k), widen: make([]float64, c.k), dof: make([]float64, c.k)}
	if c.NightCov != nil {
		n.between = lower(c.NightCov, c.k)
	}
	shift := make([]float64, c.k)
	if c.base != nil {
		addNormal(rng, lower(c.base, c.k), shift, 1)
	}
	for j, ch := range c.Characteristics {
		n.centre[j] = c.Cell.Centre[j] - shift[j]
		n.widen[j] = 1
		if c.DOF > 0 {
			n.widen[j] = math.Sqrt(c.DOF / math.Max(0.5, chiSquare(rng, c.DOF)))
		}
		if v := c.Cell.Cov[j*c.k+j]; ch.NormLike() && c.Cell.Centre[j] > 0 {
			n.dof[j] = 2 * c.Cell.Centre[j] * c.Cell.Centre[j] / v
		}
	}
	return n
}

// addNormal adds f L z to v.
func addNormal(rng *rand.Rand, low, v []float64, f float64) {
	k := len(v)
	z := make([]float64, k)
	for i := range z {
		z[i] = rng.NormFloat64() * f
	}
	for i := range k {
		for j := 0; j <= i; j++ {
			v[i] += low[i*k+j] * z[j]
		}
	}
}

// chiSquare draws from the chi-square distribution with d degrees of freedom
// (gamma by Marsaglia & Tsang 2000).
func chiSquare(rng *rand.Rand, d float64) float64 {
	a, boost := d/2, 1.0
	if a < 1 {
		boost = math.Pow(rng.Float64(), 1/a)
		a++
	}
	k := a - 1.0/3
	c := 1 / math.Sqrt(9*k)
	for {
		x := rng.NormFloat64()
		v := 1 + c*x
		if v <= 0 {
			continue
		}
		v = v * v * v
		if math.Log(rng.Float64()) < 0.5*x*x+k-k*v+k*math.Log(v) {
			return 2 * k * v * boost
		}
	}
}
