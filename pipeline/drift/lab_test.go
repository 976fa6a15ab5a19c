package drift

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"sync"
	"testing"
)

// A lab is an invented laboratory: instruments with an electrode each,
// references, and nights drawn from the model's own covariance.
type lab struct {
	designs     []Design
	names       []string
	instruments int
	baseline    float64 // sets
	cells       []Cell
	uses        []Use
	events      []Event
	calibrate   int            // nights between calibrations
	setsOf      map[string]int // sets per night where it differs from draw's
}

var refNames = []string{"RI-A", "RI-B", "RI-C", "RI-E"}

// set-to-set repeatability of one set as the specification's section 3.3
// states it [its simulator], squares of norm-like ones from their usual size.
func repeatability(c Characteristic) (centre, sd float64) {
	switch c {
	case PKa:
		return 0, 0.0066
	case Slope:
		return 1, 0.008
	case Library:
		return 0, 0.0025
	case LambdaA:
		return 440, 0.09
	case LambdaB:
		return 580, 0.046
	case LambdaIso:
		return 490, 0.055
	case RatioA, RatioB:
		return 0.5, 0.0043
	case AmountIso:
		return -1.2, 0.0084
	case ClearMean, ClearTrend:
		return 0, 0.0008
	case AmountVar:
		return 9e-6, 4e-6
	case AmountTrend:
		return 0, 0.003
	case Third:
		return 4.3e-8, 0.5e-8
	case LatentVar:
		return 3.6e-5, 1.5e-5
	case SlopeAcid, SlopeBase:
		return 99, 0.25
	case PotentialMid:
		return 0, 0.8
	case ThirdBuffer:
		return 0, 0.006
	case BlankVar:
		return 3.6e-7, 0.7e-7
	case Temperature:
		return 25, 0.3
	}
	return 0, 1
}

func refCharacteristics() []Characteristic {
	return []Characteristic{PKa, Slope, Library, LambdaA, LambdaB, LambdaIso, RatioA, RatioB, AmountIso,
		ClearMean, ClearTrend, AmountVar, AmountTrend, Third, LatentVar}
}

func newCell(key string, kind CellKind, chars []Characteristic, n float64) Cell {
	c := Cell{Key: key, Kind: kind, Characteristics: chars, N: n}
	k := len(chars)
	c.Cov = make([]float64, k*k)
	for i, ch := range chars {
		mid, sd := repeatability(ch)
		c.Centre = append(c.Centre, mid)
		c.Cov[i*k+i] = sd * sd
	}
	// scale errors move the three positions together
	for i, a := range chars {
		for j, b := range chars {
			if i != j && isLambda(a) && isLambda(b) {
				c.Cov[i*k+j] = 0.04 * 0.04
			}
		}
	}
	return c
}

func isLambda(c Characteristic) bool { return c == LambdaA || c == LambdaB || c == LambdaIso }

// buildLab makes instruments U1.. with the given references; nights is the
// length of uses.
func buildLab(instruments int, refs []Design, names []string, baseline float64, first, last Night) *lab {
	l := &lab{designs: refs, names: names, instruments: instruments, baseline: baseline, calibrate: 7}
	buffers := []float64{4.005, 6.865, 10.012}
	for u := range instruments {
		ins, el := fmt.Sprintf("U%d", u+1), fmt.Sprintf("E-3%d", u+1)
		use := func(k Kind, name, role, cell string) {
			l.uses = append(l.uses, Use{Resource{k, name}, role, cell, first - 200, last})
		}
		for r := range refs {
			c := newCell(ins+"/"+names[r], ReferenceCell, refCharacteristics(), baseline)
			c.Instrument, c.Reference, c.Design = ins, names[r], &refs[r]
			c.Title = names[r] + " on " + ins
			c.Centre[0] = refs[r].PKa
			l.cells = append(l.cells, c)
			use(KindElectrode, el, "", c.Key)
			use(KindMeter, fmt.Sprintf("M-%d", u+1), "", c.Key)
			use(KindLamp, fmt.Sprintf("L-%d", u+1), "", c.Key)
			use(KindCuvette, fmt.Sprintf("C-%d", u+1), "", c.Key)
			use(KindStock, "stock "+names[r], "", c.Key)
			use(KindSeries, "salt", "", c.Key)
			use(KindRoom, "lab", "", c.Key)
			for _, role := range []string{"low", "mid", "high"} {
				use(KindBuffer, "B-"+role, role, c.Key)
			}
		}
		e := newCell(el, ElectrodeCell, []Characteristic{SlopeAcid, SlopeBase, PotentialMid, ThirdBuffer}, math.Max(5, baseline/7))
		e.Instrument, e.Design = ins, &Design{Buffers: buffers}
		e.Title = "electrode " + el
		l.cells = append(l.cells, e)
		use(KindElectrode, el, "", e.Key)
		use(KindMeter, fmt.Sprintf("M-%d", u+1), "", e.Key)
		for _, role := range []string{"low", "mid", "high"} {
			use(KindBuffer, "B-"+role, role, e.Key)
		}
		b := newCell(ins+"/blank", InstrumentCell, []Characteristic{BlankVar}, baseline)
		b.Instrument, b.Title = ins, "blank of "+ins
		l.cells = append(l.cells, b)
		use(KindLamp, fmt.Sprintf("L-%d", u+1), "", b.Key)
	}
	room := newCell("lab", RoomCell, []Characteristic{Temperature}, baseline)
	room.Title = "room"
	l.cells = append(l.cells, room)
	l.uses = append(l.uses, Use{Resource{KindRoom, "lab"}, "", "lab", first - 200, last})
	for n := first; n <= last; n++ {
		if int(n)%l.calibrate == 0 {
			for u := range instruments {
				l.events = append(l.events, Event{Night: n, Kind: EventCalibration, Resource: fmt.Sprintf("E-3%d", u+1), Instrument: fmt.Sprintf("U%d", u+1)})
			}
		}
	}
	return l
}

// reindexed keeps models out of repeated construction.
var modelCache sync.Map

func (l *lab) model(t testing.TB, key string, r Rules) *Model {
	t.Helper()
	if m, ok := modelCache.Load(key); ok {
		return m.(*Model)
	}
	m, err := NewModel(l.cells, r, Plain)
	if err != nil {
		t.Fatal(err)
	}
	modelCache.Store(key, m)
	return m
}

// A fault is a disturbance to simulate: theta times the fingerprint times the course.
type fault struct {
	cause    Cause
	res      Resource
	theta    []float64
	from, to Night
	course   func(n Night) float64
}

// draw simulates the nights: baseline error per cell, set noise, faults.
func (l *lab) draw(m *Model, rng *rand.Rand, first, last Night, sets int, faults []fault) History {
	h := History{First: first, Last: last, Uses: l.uses, Events: l.events}
	for i := range m.cells {
		c := &m.cells[i]
		low := lower(c.Cov, c.k)
		shift := make([]float64, c.k)
		gauss(rng, low, shift, 1/math.Sqrt(c.N))
		for n := first; n <= last; n++ {
			if c.Kind == ElectrodeCell && int(n)%l.calibrate != 0 {
				continue
			}
			s := sets
			if k := l.setsOf[c.Key]; k > 0 {
				s = k
			}
			if c.Kind != ReferenceCell {
				s = 1
			}
			v := make([]float64, c.k)
			gauss(rng, low, v, 1/math.Sqrt(float64(s)))
			for j := range v {
				v[j] += c.Cell.Centre[j] + shift[j]
			}
			for _, f := range faults {
				l.apply(m, i, n, f, v)
			}
			h.Observations = append(h.Observations, Observation{Cell: c.Key, Night: n, Sets: s, Values: v})
		}
	}
	return h
}

func gauss(rng *rand.Rand, low, v []float64, f float64) {
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

func (l *lab) apply(m *Model, i int, n Night, f fault, v []float64) {
	t := slices.IndexFunc(m.traits, func(t Trait) bool { return t.Cause == f.cause })
	c := &m.cells[i]
	if t < 0 || c.cols[t] == nil || n < f.from || n > f.to {
		return
	}
	if !l.used(f.res, m.traits[t].Role, c.Key, n) {
		return
	}
	s := 1.0
	if f.course != nil {
		s = f.course(n)
	}
	for col, th := range f.theta {
		for j := range v {
			v[j] += s * th * c.cols[t][col*c.k+j]
		}
	}
}

func (l *lab) used(r Resource, role, cell string, n Night) bool {
	for _, u := range l.uses {
		if u.Resource == r && u.Role == role && u.Cell == cell && n >= u.From && n <= u.Until {
			return true
		}
	}
	if r.Kind == KindInstrument {
		for _, c := range l.cells {
			if c.Key == cell {
				return c.Instrument == r.Name
			}
		}
	}
	return false
}
