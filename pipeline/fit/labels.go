package fit

import (
	"fmt"
	"math"
	"slices"
	"sort"

	"gonum.org/v1/gonum/stat/distuv"
)

// Kinds of label error that LabelSuspects looks for.
const (
	Exchanged = "exchanged" // the readings of two rungs are exchanged
	Shifted   = "shifted"   // the whole pH table is moved by one row
	Foreign   = "foreign"   // one scan does not belong to this set
	Repeated  = "repeated"  // two scans are the same measurement
)

// A Suspect is one explanation of a set that does not fit, proposed and never applied.
type Suspect struct {
	Kind   string    `json:"kind"`
	Rungs  []int     `json:"rungs,omitempty"` // 0-based
	Rows   int       `json:"rows,omitempty"`  // Shifted: +1 if each scan belongs to the reading one row further down, -1 one up
	Odds   float64   `json:"odds"`            // to 1, against the labels as they are; capped at 1e6
	PKa    []float64 `json:"pka"`             // own-weighted, with the labels put so
	Chi2   float64   `json:"chi2"`            // misfit on rungs with the labels put so
	DOF    int       `json:"dof"`
	Now    float64   `json:"chi2_now"` // misfit on rungs as labelled
	Text   string    `json:"text"`
	logOdd float64
}

// oddsCap: beyond a million to one the model and not the data would be speaking.
const oddsCap = 1e6

// nominalSD is how far a solution may lie from its nominal pH; our choice.
const nominalSD = 0.1

// LabelSuspects looks for exchanged readings (any pair), a pH table moved by
// one row, a scan that is not of this set and a scan that is there twice. It
// judges by the sum of squares on rungs (the n+1 signals of the model with
// unit noise, reading errors and amounts as random effects), never on
// wavelengths. The readings that the nominal ladder would lead to expect may be
// given as one more argument: without it a uniform shift cannot be seen on an
// even ladder, because every pKa is then wrong by one step and the fit perfect.
// The list holds what has odds above 1, most likely first.
func LabelSuspects(p Problem, nominal ...[]float64) ([]Suspect, error) {
	var s Solver
	r, err := s.Solve(p, Options{Bare: true})
	if err != nil {
		return nil, err
	}
	if len(r.Own.PKa) == 0 {
		return nil, fmt.Errorf("%w: no fit to judge the labels by: %v", ErrProblem, r.Status)
	}
	d := detective{p: &p, solver: &s, start: r.Own.PKa}
	d.prepare(r)
	out := append(d.exchanges(), d.strangers()...)
	out = append(out, d.twins()...)
	if len(nominal) > 0 && len(nominal[0]) > 0 {
		out = append(out, d.shifts(nominal[0])...)
	}
	out = slices.DeleteFunc(out, func(x Suspect) bool { return !(x.logOdd > 0) })
	sort.SliceStable(out, func(i, j int) bool { return out[i].logOdd > out[j].logOdd })
	for i := range out {
		out[i].Odds = math.Min(math.Exp(math.Min(out[i].logOdd, 50)), oddsCap)
	}
	return out, nil
}

// detective holds the set on rungs.
type detective struct {
	p      *Problem
	solver *Solver
	red    reduced
	core   core
	start  []float64
	now    float64
	dof    int
}

func (d *detective) prepare(r *Result) {
	n := d.p.Steps
	d.solver.prepareAs(d.p, r)
	dims := min(n+1, d.p.columns())
	d.red.compress(&d.solver.red, dims, n+1, 0)
	d.now = d.fit(d.p.PH)
	signals := dims
	if d.red.base {
		signals++
	}
	d.dof = (len(d.p.PH)-n-1)*signals - n
}

// fit is the misfit with readings ph; the constants are left in d.core.
func (d *detective) fit(ph []float64) float64 {
	d.core.ownFit(&d.red, &d.solver.c, ph, d.start, 60)
	return d.core.now.phi
}

// odds turns a drop of misfit into log odds. A misfit that stays improbable
// even with the new labels speaks for neither, so the drop counts in units of
// the misfit per degree of freedom that remains.
func (d *detective) odds(chi2, prior float64) float64 {
	scale := 1.0
	if d.dof > 0 {
		scale = math.Max(1, chi2/float64(d.dof))
	}
	return (d.now-chi2)/(2*scale) + math.Log(prior)
}

// exchanges tries every pair. Neighbours are the likelier slip: half of the
// prior of one exchange in a hundred sets belongs to them.
func (d *detective) exchanges() []Suspect {
	m := len(d.p.PH)
	var out []Suspect
	order := make([]int, m)
	for i := range order {
		order[i] = i
	}
	ph := slices.Clone(d.p.PH)
	for i := 0; i < m; i++ {
		for j := i + 1; j < m; j++ {
			if d.p.PH[i] == d.p.PH[j] {
				continue
			}
			ph[i], ph[j] = d.p.PH[j], d.p.PH[i]
			chi2 := d.fit(ph)
			ph[i], ph[j] = d.p.PH[i], d.p.PH[j]
			prior := 0.005 / float64(m-1)
			if j > i+1 && m > 2 {
				prior = 0.005 / (float64((m-1)*(m-2)) / 2)
			}
			out = append(out, Suspect{Kind: Exchanged, Rungs: []int{i, j}, PKa: slices.Clone(d.core.now.p[:d.p.Steps]),
				Chi2: chi2, DOF: d.dof, Now: d.now, logOdd: d.odds(chi2, prior),
				Text: fmt.Sprintf("The readings %.2f and %.2f of rungs %d and %d look exchanged.", d.p.PH[i], d.p.PH[j], i+1, j+1)})
		}
	}
	return out
}

// shifts compares the readings with the nominal ladder moved by one row.
func (d *detective) shifts(nominal []float64) []Suspect {
	m := len(d.p.PH)
	if len(nominal) != m {
		return nil
	}
	fitTo := func(rows int) (float64, int) {
		s, n := 0.0, 0
		for i := range m {
			if k := i + rows; k >= 0 && k < m {
				s += sq2((d.p.PH[i] - nominal[k]) / nominalSD)
				n++
			}
		}
		return s, n
	}
	here, n0 := fitTo(0)
	var out []Suspect
	for _, rows := range []int{1, -1} {
		there, n := fitTo(rows)
		if n == 0 {
			continue
		}
		// The readings stand one row off: scan i was made at the reading of row i-rows.
		a, keep := slices.Clone(d.p.A), slices.Clone(d.p.PH)
		w := len(d.p.WavelengthNM)
		q := *d.p
		var ph, sig, rung []float64
		q.A = nil
		for i := range m {
			k := i - rows
			if k < 0 || k >= m {
				continue
			}
			ph = append(ph, keep[k])
			q.A = append(q.A, a[i*w:(i+1)*w]...)
			if d.p.SigmaPH != nil {
				sig = append(sig, d.p.SigmaPH[k])
			}
			if d.p.NoiseRung != nil {
				rung = append(rung, d.p.NoiseRung[i])
			}
		}
		q.PH, q.SigmaPH, q.NoiseRung, q.Shared, q.Start = ph, sig, rung, nil, nil
		s := Suspect{Kind: Shifted, Rows: -rows, Now: d.now, DOF: d.dof,
			logOdd: (here/float64(n0)-there/float64(n))*float64(n)/2 + math.Log(0.005)}
		r, err := Solve(q, Options{Bare: true})
		if err != nil || len(r.Own.PKa) == 0 {
			continue
		}
		s.PKa = r.Own.PKa
		var sv Solver
		e := detective{p: &q, solver: &sv, start: r.Own.PKa}
		e.prepare(r)
		s.Chi2, s.DOF = e.now, e.dof
		s.Text = fmt.Sprintf("The pH table looks moved by one row: each reading agrees with the nominal pH of the row %s.", map[int]string{1: "below", -1: "above"}[rows])
		out = append(out, s)
	}
	return out
}

// strangers asks for each rung whether its spectrum lies outside what the
// others span: its distance from them against the noise.
func (d *detective) strangers() []Suspect {
	c := &d.solver.c
	m, n1 := c.m, c.n1
	free := c.columnsLeft() - n1
	if m < n1+3 || free < 3 {
		return nil
	}
	var out []Suspect
	for i := 0; i < m; i++ {
		dist := c.distance(i)
		// Noise of the rung itself, and of the others through their combination.
		t := dist / float64(free)
		if t <= 1 {
			continue
		}
		z := math.Sqrt(2*dist) - math.Sqrt(2*float64(free)-1) // Fisher's approximation
		ph, sig := drop(nil, d.p.PH, i, 1), drop(nil, c.sig, i, 1)
		var red reduced
		red.without(&d.red, i)
		like := *c
		like.sig = sig
		var sub core
		sub.ownFit(&red, &like, ph, d.start, 60)
		chi2 := sub.now.phi
		dof := d.dof - (d.dof+d.p.Steps)/(m-n1)
		out = append(out, Suspect{Kind: Foreign, Rungs: []int{i}, PKa: slices.Clone(sub.now.p[:d.p.Steps]),
			Chi2: chi2, DOF: dof, Now: d.now, logOdd: z*z/2*sign(z) + math.Log(0.005/float64(m)) - 12,
			Text: fmt.Sprintf("Scan %d has a spectrum that no mixture of the other solutions gives.", i+1)})
	}
	if len(out) < 2 {
		return out
	}
	// One foreign scan disturbs the span of the others: keep the worst only.
	best := 0
	for i := range out {
		if out[i].logOdd > out[best].logOdd {
			best = i
		}
	}
	return out[best : best+1]
}

func sign(x float64) float64 {
	if x < 0 {
		return -1
	}
	return 1
}

// columnsLeft is the number of wavelengths beyond the offset direction.
func (c *core) columnsLeft() int {
	if c.base {
		return c.w - 1
	}
	return c.w
}

// distance is the squared distance of rung i from the n+1 strongest signals of the others.
func (c *core) distance(i int) float64 {
	m, n1 := c.m, c.n1
	var red reduced
	red.without(c.reduced, i)
	k := m - 1
	vec := make([]float64, k*k)
	val := symmetricEigen(slices.Clone(red.gram), k, vec)
	rest := c.gram[i*m+i]
	lever := 1.0
	for j := 0; j < n1; j++ {
		if val[j] <= 0 {
			continue
		}
		s, a := 0.0, 0
		for l := 0; l < m; l++ {
			if l == i {
				continue
			}
			s += c.gram[i*m+l] * vec[a*k+j]
			a++
		}
		rest -= s * s / val[j]
		lever += s * s / (val[j] * val[j])
	}
	return math.Max(rest, 0) / lever
}

// twins finds rungs whose spectra agree better than two measurements of
// solutions at these readings can: the same file twice.
func (d *detective) twins() []Suspect {
	c := &d.solver.c
	m := c.m
	var out []Suspect
	free := float64(c.columnsLeft())
	if free < 8 {
		return nil
	}
	for i := 0; i < m; i++ {
		for j := i + 1; j < m; j++ {
			ri, rj := c.rung[i], c.rung[j]
			// Difference of the unweighted rows, over the noise of a difference.
			dist := c.gram[i*m+i]/(ri*ri) + c.gram[j*m+j]/(rj*rj) - 2*c.gram[i*m+j]/(ri*rj)
			dist /= 1/(ri*ri) + 1/(rj*rj)
			if dist > free/4 { // two real scans differ by their noise at least
				continue
			}
			p := distuv.ChiSquared{K: free}.CDF(math.Max(dist, 1e-300))
			out = append(out, Suspect{Kind: Repeated, Rungs: []int{i, j}, PKa: slices.Clone(d.start), Chi2: d.now, Now: d.now, DOF: d.dof,
				logOdd: -math.Log(math.Max(p, 1e-30)) + math.Log(0.005/float64(m)),
				Text:   fmt.Sprintf("Scans %d and %d agree better than their noise allows: the same measurement twice.", i+1, j+1)})
		}
	}
	return out
}
