package rehearse

import (
	"math"
	"math/rand/v2"
	"time"
)

// A Scan is one spectrum as the instrument stores it.
type Scan struct {
	Measured     time.Time
	WavelengthNM []float64
	Absorbance   []float64
	PathMM       float64
	TemperatureC float64
	BandwidthNM  float64
	Decimals     int // printed
}

// A Reading is one row of a pH table.
type Reading struct {
	At           time.Time
	PH           float64
	MV           float64
	TemperatureC float64
	Decimals     int
	Text         string // printed instead of the number when not ""
}

// A Rung is one solution of a set.
type Rung struct {
	Key     string // "01" ...
	Nominal float64
	TruePH  float64 // in the vessel
	Amount  float64 // factor on the nominal amount of dye
	Share   []float64
	Scan    Scan
	Reading Reading
	NoScan  bool // the scan is missing
	NoRow   bool // the row of the table is missing
}

// A Set is one measured ladder, in memory.
type Set struct {
	Instrument string
	Name       string // without instrument
	Stem       string // beginning of the file names, with folder
	Compound   string
	Lot        string
	Slot       string
	Night      int
	Electrode  string
	Meter      string
	Begin      time.Time
	Blank      Scan
	NoBlank    bool
	Rungs      []Rung
	PKa        []float64 // true mixed constants at 25.0 C and nominal ionic strength
	Reference  bool
}

// Key is the set's name with its instrument.
func (s *Set) Key() string { return s.Instrument + "/" + s.Name }

// End is when the last reading was taken.
func (s *Set) End() time.Time {
	end := s.Begin
	for _, r := range s.Rungs {
		if r.Reading.At.After(end) {
			end = r.Reading.At
		}
		if r.Scan.Measured.After(end) {
			end = r.Scan.Measured
		}
	}
	return end
}

// A Plan says what is to be measured and with what.
type Plan struct {
	Dye       Dye
	Begin     time.Time
	Step      time.Duration // between scans
	GridNM    [3]float64    // from, to, step
	Electrode Electrode     // as it is during the set, drift since calibration included by Conditions
	Believed  Calibration   // what the meter believes
	PathMM    float64
	Bandwidth float64
	Decimals  int
}

// Measure makes a set from its plan and conditions. Every number comes from
// rng, so equal arguments give equal sets.
func Measure(p Plan, c Conditions, rng *rand.Rand) *Set {
	m := measurement{plan: p, cond: c, rng: rng}
	s := &Set{Compound: p.Dye.Name, Begin: p.Begin, Electrode: p.Believed.Electrode, Meter: p.Believed.Meter}
	for _, pk := range p.Dye.PKa {
		s.PKa = append(s.PKa, pk+c.PKaShift)
	}
	m.prepare()
	s.Rungs = make([]Rung, len(p.Dye.Ladder))
	for i := range s.Rungs {
		s.Rungs[i] = m.solution(i)
	}
	m.cell(s.Rungs)
	s.Blank = m.scan(p.Begin, m.blank(s.Rungs[0]))
	for k := range s.Rungs {
		i := k
		if c.Down {
			i = len(s.Rungs) - 1 - k
		}
		at := p.Begin.Add(time.Duration(k+1) * p.Step)
		s.Rungs[i].Scan = m.scan(at, m.absorbance(&s.Rungs[i], k))
	}
	m.readings(s.Rungs)
	return s
}

// measurement is the state of one set while it is made.
type measurement struct {
	plan   Plan
	cond   Conditions
	rng    *rand.Rand
	k      []float64 // acidity constants in the cell
	second []float64 // of the second dye
	x      []float64
}

func (m *measurement) prepare() {
	d, c := m.plan.Dye, m.cond
	for _, pk := range d.constants(c.CellC, c.Ionic) {
		m.k = append(m.k, math.Pow(10, -(pk+c.PKaShift)))
		m.second = append(m.second, math.Pow(10, -(pk+c.PKaShift+c.SecondDPKa)))
	}
	g := m.plan.GridNM
	m.x = grid(g[0], g[1], g[2])
}

// solution mixes rung i.
func (m *measurement) solution(i int) Rung {
	d, c := m.plan.Dye, m.cond
	n := len(d.Ladder)
	r := Rung{Key: rungKey(i + 1), Nominal: d.Ladder[i]}
	r.TruePH = r.Nominal + c.RecipeSD*m.rng.NormFloat64()
	r.Amount = or1(c.Amount) * math.Exp(c.AmountRungSD*m.rng.NormFloat64())
	pos := 0.0
	if n > 1 {
		pos = float64(i)/float64(n-1) - 0.5
	}
	if c.Down {
		pos = -pos
	}
	r.Amount *= 1 + c.AmountTrend*pos
	if pos >= 0 && c.AmountStep != 0 {
		r.Amount *= 1 + c.AmountStep
	}
	// The pH in the cell differs from that in the vessel when their temperatures do.
	inCell := r.TruePH + d.DPHDT*(c.CellC-c.VesselC)
	r.Share = make([]float64, len(d.Forms))
	shares(r.Share, math.Pow(10, -inCell), m.k)
	return r
}

// cell lets each solution be diluted by what the previous one left behind.
// The cell is rinsed with the first solution.
func (m *measurement) cell(rungs []Rung) {
	rho := m.cond.CarryOver
	if rho == 0 {
		return
	}
	n := len(rungs)
	for k := 1; k < n; k++ {
		i, before := k, k-1
		if m.cond.Down {
			i, before = n-1-k, n-k
		}
		for j := range rungs[i].Share {
			rungs[i].Share[j] = (1-rho)*rungs[i].Share[j] + rho*rungs[before].Share[j]
		}
	}
}

// absorbance is the true curve of a rung, the order-th solution measured.
func (m *measurement) absorbance(r *Rung, order int) func(nm float64) float64 {
	d, c := m.plan.Dye, m.cond
	cl := c.DyeMolar * r.Amount * or1(c.Optics.Path)
	var other []float64
	if c.SecondDye > 0 {
		other = make([]float64, len(d.Forms))
		shares(other, math.Pow(10, -r.TruePH), m.second)
	}
	flat := c.BaselineA + c.ScanSD*m.rng.NormFloat64()
	if n := len(d.Ladder); n > 1 {
		flat += c.LampDriftA * (float64(order)/float64(n-1) - 0.5)
	}
	turbid := 0.0
	if c.Scatter > 0 {
		turbid = c.Scatter * math.Max(0, 1-(r.TruePH-d.Ladder[0])/2)
	}
	if c.FadePerMin > 0 && r.TruePH > 11 {
		cl *= math.Exp(-c.FadePerMin * float64(order) * m.plan.Step.Minutes())
	}
	return func(nm float64) float64 {
		var e float64
		for j, f := range d.Forms {
			e += (1 - c.SecondDye) * r.Share[j] * f.at(nm, c.BandShift)
			if other != nil {
				e += c.SecondDye * other[j] * f.at(nm, c.BandShift+c.SecondNM)
			}
		}
		if c.Impurity > 0 {
			e += c.Impurity * impurityBand(d).at(nm, 0)
		}
		a := cl*e + flat + cellCurve(c.CellA, nm)
		if turbid > 0 {
			a += turbid * math.Pow(500/nm, 3)
		}
		return a
	}
}

// impurityBand is a broad yellow band that does not change with pH.
func impurityBand(d Dye) Form {
	b := d.Forms[0].Bands[0]
	return Form{[]Band{{b.CentreNM + 15, 55, 1.3 * b.Molar}}}
}

// blank is the curve of the blank solution in the same cell.
func (m *measurement) blank(first Rung) func(nm float64) float64 {
	c, d := m.cond, m.plan.Dye
	lo, hi := m.x[0], m.x[len(m.x)-1]
	return func(nm float64) float64 {
		a := cellCurve(c.CellA, nm)
		if c.DyeStray > 0 {
			for j, f := range d.Forms {
				a += c.DyeStray * c.DyeMolar * first.Share[j] * f.at(nm, c.BandShift)
			}
		}
		if c.BlankSmooth != 0 {
			z := (hi - nm) / (hi - lo)
			a += c.BlankSmooth * (0.3 + 0.7*z*z)
		}
		return a
	}
}

// cellCurve is what windows and solvent absorb and scatter.
func cellCurve(at500, nm float64) float64 {
	if at500 == 0 {
		return 0
	}
	q := 500 / nm
	return at500 * (0.85 + 0.15*q*q*q)
}

// scan lets the instrument record a curve.
func (m *measurement) scan(at time.Time, curve func(float64) float64) Scan {
	p, c := m.plan, m.cond
	return Scan{
		Measured: at.Truncate(time.Second), WavelengthNM: m.x,
		Absorbance: c.Optics.record(m.x, curve, m.rng),
		PathMM:     p.PathMM, BandwidthNM: p.Bandwidth, Decimals: p.Decimals,
		TemperatureC: math.Round(10*(c.CellC+c.TemperatureK)) / 10,
	}
}

// readings takes the pH of every solution, a little after its scan.
func (m *measurement) readings(rungs []Rung) {
	p, c := m.plan, m.cond
	e := p.Electrode.drifted(c.Offset, c.Eps)
	n := len(rungs)
	shown := 0.0
	for k := 0; k < n; k++ {
		i := k
		if c.Down {
			i = n - 1 - k
		}
		r := &rungs[i]
		pH := r.TruePH
		if c.CO2 != 0 {
			pH -= c.CO2 * carbonDioxide(pH)
		}
		// What the membrane has reached: it keeps a share of the previous step.
		if k == 0 {
			shown = pH
			if c.Lag != 0 && n > 1 {
				shown -= c.Lag / (1 - c.Lag) * (p.Dye.Ladder[1] - p.Dye.Ladder[0]) * sign(!c.Down)
			}
		} else {
			shown = (1-c.Lag)*pH + c.Lag*shown
		}
		mv := e.Potential(shown, c.VesselC)
		read := p.Believed.Read(mv, c.VesselC+c.CompensateK) + c.SetPH + c.ReadSD*m.rng.NormFloat64()
		t := math.Round(10*(c.VesselC+c.CompensateK)) / 10
		if c.FixedTemp {
			t = 25
		}
		r.Reading = Reading{
			At: r.Scan.Measured.Add(50 * time.Second).Truncate(time.Second),
			PH: math.Round(read*1000) / 1000, MV: math.Round(mv*10) / 10, TemperatureC: t, Decimals: 3,
		}
	}
}

func sign(up bool) float64 {
	if up {
		return 1
	}
	return -1
}

// rungKey is the name of the i-th solution, 1-based.
func rungKey(i int) string { return string([]byte{byte('0' + i/10%10), byte('0' + i%10)}) }
