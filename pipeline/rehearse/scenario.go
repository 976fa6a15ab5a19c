package rehearse

import (
	"fmt"
	"hash/fnv"
	"math/rand/v2"
	"time"
)

// A Design is a measuring system and what it measures every night.
type Design struct {
	Dyes           []Dye     // each is measured Repeats times a night
	Repeats        int       // 0: 1
	Instrument     string    // "" : "U1"
	Electrode      string    // "" : "E-1"
	Buffers        []Buffer  // nil: 4.005, 6.865, 10.012 exactly right
	CalibrateEvery int       // nights; 0: once, before night 1
	First          time.Time // 18:00 of night 1; zero: a fixed date
	GridNM         [3]float64
	DyeMolar       float64 // 0: 21 umol/L
	PathMM         float64 // 0: 10
	Down           bool    // ladders are measured from the highest rung down
}

// A Scenario is a design, its scatter, and what goes wrong. Equal scenarios
// give equal sets, and every night can be made alone.
type Scenario struct {
	Seed   uint64
	Design Design
	Noise  Noise
	Causes []Cause

	// Faults and FileFaults strike the first set of a night, by night; the
	// keys are those of FaultKeys and of FileFaultKeys.
	Faults     map[int][]Fault
	FileFaults map[int][]Fault
}

// dice are independent random numbers for one purpose.
func dice(seed uint64, purpose ...any) *rand.Rand {
	h := fnv.New64a()
	fmt.Fprintln(h, purpose...)
	return rand.New(rand.NewPCG(seed, h.Sum64()))
}

// calibrated is the night whose evening saw the last calibration before night.
func (sc *Scenario) calibrated(night int) int {
	if e := sc.Design.CalibrateEvery; e > 0 && night >= 1 {
		return (night-1)/e*e + 1
	}
	return 1
}

// bottles are the buffers as a cause has left them in a night.
func (sc *Scenario) bottles(night int) []Buffer {
	b := sc.Design.Buffers
	if b == nil {
		b = []Buffer{{"B-4", 4.005, 4.005}, {"B-7", 6.865, 6.865}, {"B-10", 10.012, 10.012}}
	}
	b = append([]Buffer(nil), b...)
	for _, c := range sc.Causes {
		near, ok := map[CauseKind]float64{BufferLow: 4, BufferMid: 7, BufferHigh: 10}[c.Kind]
		if !ok {
			continue
		}
		for i := range b {
			if b[i].Label > near-1 && b[i].Label < near+1 {
				b[i].True += c.at(night, night)
			}
		}
	}
	return b
}

// electrode is the electrode in a night and what the meter believes about it.
func (sc *Scenario) electrode(night int) (Electrode, Calibration) {
	cal := sc.calibrated(night)
	rng := dice(sc.Seed, "calibration", cal)
	name := sc.electrodeName()
	e := Electrode{Name: name, E7MV: 2, SlopeAcid: 0.992, SlopeBase: 0.988}
	e.E7MV += sc.Noise.Potential * rng.NormFloat64()
	e.SlopeAcid *= 1 + sc.Noise.Slope*rng.NormFloat64()
	e.SlopeBase *= 1 + sc.Noise.Slope*rng.NormFloat64()
	for _, c := range sc.Causes {
		switch c.Kind {
		case ElectrodeAgeing:
			e = e.drifted(0, c.at(cal, 1)/100)
		case ElectrodeSlope:
			// What grew before this calibration has become part of the electrode it sees.
			if cal > c.Onset && c.Shape != Sawtooth {
				e = e.drifted(0, c.at(cal-1, 1)/100)
			}
		case ElectrodeOffset:
			if cal > c.Onset && c.Shape != Sawtooth {
				e = e.drifted(c.at(cal-1, 1), 0)
			}
		}
	}
	believed := Calibrate(e, sc.bottles(cal), 25, func() float64 { return sc.Noise.CalMV * rng.NormFloat64() })
	believed.Electrode, believed.Meter = name, "M-1"
	believed.At = sc.evening(cal).Add(-40 * time.Minute)
	return e, believed
}

// evening is 18:00 of a night.
func (sc *Scenario) evening(night int) time.Time {
	t := sc.Design.First
	if t.IsZero() {
		t = time.Date(2026, 3, 2, 18, 0, 0, 0, time.UTC)
	}
	return t.AddDate(0, 0, night-1)
}

// Calibration is what the meter believes in a night.
func (sc *Scenario) Calibration(night int) Calibration {
	_, c := sc.electrode(night)
	return c
}

// Night makes every set of a night, numbered from 1. It fails only on a cause
// or fault it does not know.
func (sc *Scenario) Night(night int) ([]*Set, error) {
	var out []*Set
	repeats := max(1, sc.Design.Repeats)
	slot := 0
	for _, d := range sc.Design.Dyes {
		for k := 0; k < repeats; k++ {
			s, err := sc.one(night, slot, d)
			if err != nil {
				return nil, err
			}
			s.Name = fmt.Sprintf("%s-%d.n%03d", d.Name, k+1, night)
			s.Stem = fmt.Sprintf("n%03d/%s-%d", night, d.Name, k+1)
			out = append(out, s)
			slot++
		}
	}
	rng := dice(sc.Seed, "fault", night)
	for _, f := range sc.Faults[night] {
		if err := Spoil(out[0], f, rng); err != nil {
			return nil, err
		}
	}
	return out, nil
}

// one measures one set of a night.
func (sc *Scenario) one(night, slot int, d Dye) (*Set, error) {
	rng := dice(sc.Seed, "set", night, slot)
	c := fresh(d.ionic())
	c.Down = sc.Design.Down
	if sc.Design.DyeMolar > 0 {
		c.DyeMolar = sc.Design.DyeMolar
	}
	cal := sc.calibrated(night)
	for _, cause := range sc.Causes {
		if !sc.reaches(cause, d) {
			continue
		}
		at := cause.at(night, cal)
		if cause.Shape != Sawtooth && (cause.Kind == ElectrodeSlope || cause.Kind == ElectrodeOffset) && cal > cause.Onset {
			at -= cause.at(cal-1, 1) // the calibration has taken this part out
		}
		if err := cause.Kind.act(&c, at); err != nil {
			return nil, err
		}
	}
	c.scatter(sc.Noise, rng.NormFloat64)
	e, believed := sc.electrode(night)
	p := Plan{
		Dye: d, Begin: sc.evening(night).Add(time.Duration(slot) * 40 * time.Minute), Step: 2 * time.Minute,
		GridNM: sc.gridFor(d), Electrode: e, Believed: believed, PathMM: 10, Bandwidth: 2, Decimals: 5,
	}
	if sc.Design.PathMM > 0 {
		p.PathMM = sc.Design.PathMM
		c.Optics.Path = or1(c.Optics.Path) * p.PathMM / 10
	}
	s := Measure(p, c, rng)
	s.Instrument, s.Night = sc.instrument(), night
	return s, nil
}

// reaches says whether a cause touches the sets of a dye: causes carried by a
// dye's stock or lot name the dye.
func (sc *Scenario) reaches(c Cause, d Dye) bool {
	switch c.Kind {
	case StockStrength, ConstantImpurity, SecondDye, LowScatter:
		return c.Resource == "" || c.Resource == d.Name
	}
	return true
}

func (sc *Scenario) gridFor(d Dye) [3]float64 {
	if sc.Design.GridNM[1] > 0 {
		return sc.Design.GridNM
	}
	if d.Range[1] > 0 {
		return [3]float64{d.Range[0], d.Range[1], 2}
	}
	return [3]float64{380, 760, 2}
}
