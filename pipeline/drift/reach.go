package drift

import (
	"fmt"
	"math"
	"slices"
)

// A ResultFacts is what Reach needs to know of one stored result.
type ResultFacts struct {
	ID         int64
	Night      Night
	Instrument string
	Compound   string
	PKa        float64
	U          float64   // expanded uncertainty
	Ladder     []float64 // m, pH as read, in the order measured; nil: the pKa alone
	Gain       []float64 // m, d pKa / d pH reading; nil: 1/m each
	Charge     int       // of the acid form
	Ionic      float64   // mol/L; 0: 0.1
	DPKaDT     float64
	DPHDT      float64
	Buffers    []float64  // pH of the calibration in force; nil: the case's references have it
	Resources  []Resource // what it used
	Roles      []string   // parallel to Resources, "" except for buffers; nil: none
	Released   bool
}

// Harm is what a case may have done to one result.
type Harm struct {
	ID         int64   `json:"id"`
	Impact     float64 `json:"impact"`     // pKa, of the likeliest cause, observed less undisturbed
	Bound      float64 `json:"bound"`      // pKa, upper 95 % of the absolute impact over all causes with at least 5 %
	Cause      Cause   `json:"cause"`      // the cause that sets the bound
	Limit      float64 `json:"limit"`      // U/3
	Unaffected bool    `json:"unaffected"` // proposed; a person signs
	Corrected  float64 `json:"corrected"`  // pKa less the impact, where the likeliest cause is a buffer value; NaN else
	Why        string  `json:"why"`
}

// Reach bounds the harm of an explanation to the results measured after the last
// good and before the next good reference night (nextGood 0: none yet), given
// the history it was found in. Results outside that span are not returned.
func (m *Model) Reach(e Explanation, h History, lastGood, nextGood Night, results []ResultFacts) ([]Harm, error) {
	l, err := m.newLook(h)
	if err != nil {
		return nil, err
	}
	var out []Harm
	for _, r := range results {
		if r.Night <= lastGood || (nextGood != 0 && r.Night >= nextGood) {
			continue
		}
		out = append(out, l.harm(e, r))
	}
	return out, nil
}

func (l *look) harm(e Explanation, r ResultFacts) Harm {
	h := Harm{ID: r.ID, Limit: r.U / 3, Corrected: math.NaN()}
	lead, _ := e.Lead()
	unknown := 0.0
	var reasons []string
	for _, c := range e.Candidates {
		if c.Cause == Unknown {
			unknown = c.Probability
			continue
		}
		leads := c.Cause == lead.Cause && c.Resource == lead.Resource
		if c.Probability < 0.05 && !leads {
			continue
		}
		mean, upper, why := l.effect(c, r)
		if leads {
			h.Impact = mean
			if tr, _ := TraitOf(c.Cause); tr.Role != "" {
				h.Corrected = r.PKa - mean
			}
		}
		if upper > h.Bound || h.Cause == "" {
			h.Bound, h.Cause = math.Max(h.Bound, upper), c.Cause
		}
		reasons = append(reasons, why)
	}
	h.Unaffected = h.Bound < h.Limit && unknown < 0.05 && e.Finding != NoneKnown && len(reasons) > 0
	switch {
	case e.Finding == NoneKnown || unknown >= 0.05:
		h.Why = "the cause is not known, so no bound can be given"
	case len(reasons) == 0:
		h.Why = "no cause is likely enough to bound its harm"
	case h.Unaffected:
		h.Why = fmt.Sprintf("at most %.4f, below a third of the expanded uncertainty (%.4f): %s", h.Bound, h.Limit, reasons[0])
	default:
		h.Why = fmt.Sprintf("up to %.4f, above a third of the expanded uncertainty (%.4f)", h.Bound, h.Limit)
	}
	return h
}

// effect gives the expected impact of one cause on one result and the upper 95 % bound of its size.
func (l *look) effect(c Candidate, r ResultFacts) (mean, bound float64, why string) {
	tr, ok := TraitOf(c.Cause)
	if !ok || len(c.Theta) == 0 {
		return 0, 0, ""
	}
	if !usedByResult(c.Resource, tr.Role, r) {
		return 0, 0, fmt.Sprintf("did not use %v", c.Resource)
	}
	f := l.sensitivity(tr, r)
	if math.Abs(f[0])+math.Abs(f[1]) < 1e-12 {
		if tr.Optical || tr.Harmless {
			return 0, 0, tr.Title + ": does not reach a pKa whose spectra are free"
		}
		return 0, 0, tr.Title + ": does not act on this ladder"
	}
	theta := [2]float64{c.Theta[0]}
	cov := [3]float64{c.ThetaCov[0]}
	if len(c.Theta) > 1 {
		theta[1], cov[1], cov[2] = c.Theta[1], c.ThetaCov[1], c.ThetaCov[3]
	}
	s := l.size(c, c.Since.Best, r.Night)
	mean = s * (f[0]*theta[0] + f[1]*theta[1])
	early := l.size(c, c.Since.Low, r.Night)
	bound = upper(f, theta, cov, math.Max(math.Abs(s), math.Abs(early)))
	if s == 0 && early == 0 {
		return 0, 0, "measured before it began"
	}
	return mean, bound, fmt.Sprintf("its own sensitivity to %s is small", tr.Title)
}

func usedByResult(res Resource, role string, r ResultFacts) bool {
	for i, x := range r.Resources {
		if x == res && (role == "" || i >= len(r.Roles) || r.Roles[i] == role) {
			return true
		}
	}
	switch res.Kind {
	case KindLaboratory:
		return true
	case KindInstrument:
		return r.Instrument == res.Name
	case KindStock:
		return false
	}
	// a kind that the result does not declare at all cannot be excluded
	return !slices.ContainsFunc(r.Resources, func(x Resource) bool { return x.Kind == res.Kind })
}

// size gives the course of a candidate at a night, with another onset.
func (l *look) size(c Candidate, onset, night Night) float64 {
	for i := range l.scopes {
		s := &l.scopes[i]
		if l.m.traits[s.trait].Cause != c.Cause || s.res != c.Resource {
			continue
		}
		from := max(0, int(onset-l.h.First))
		n := int(night - l.h.First)
		if n < 0 || from >= l.nights {
			return 0
		}
		return l.course(s, c.Shape, from)[min(n, l.nights-1)]
	}
	if night < onset {
		return 0
	}
	return 1
}

// sensitivity gives the change of the result's pKa per unit of the cause, from
// its own ladder and gains; where only a simulation tells, that of the nearest reference.
func (l *look) sensitivity(tr Trait, r ResultFacts) [2]float64 {
	switch tr.Cause {
	case ElectrodeAged:
		return [2]float64{r.through(ElectrodeOffset, 0.02, r.Buffers), r.through(ElectrodeSlope, -1, r.Buffers)}
	case ElectrodeOffset, ElectrodeSlope, Compensation, CO2:
		return [2]float64{r.through(tr.Cause, tr.Step, r.Buffers)}
	case BufferLow, BufferMid, BufferHigh:
		b := r.Buffers
		if len(b) != 3 {
			b = l.calibration()
		}
		return [2]float64{r.through(tr.Cause, tr.Step, b)}
	case RoomTemperature, Ionic:
		return [2]float64{trueShift(r.design(), tr.Cause, tr.Step)}
	case CellTemperature:
		return [2]float64{trueShift(r.design(), tr.Cause, tr.Step) - r.DPHDT*tr.Step}
	case ElectrodeLag:
		return [2]float64{r.lagging(tr.Step / 100)}
	case WavelengthShift, WavelengthTilt, Gain, Path, Stock, ImpurityConst, ReferenceLot, Blank, LampDrift, Noise, ElectrodeAgeing:
		return [2]float64{}
	}
	return [2]float64{l.nearest(tr, r.PKa)}
}

func (r ResultFacts) design() Design {
	return Design{PKa: r.PKa, Charge: r.Charge, Ionic: r.Ionic, DPKaDT: r.DPKaDT, DPHDT: r.DPHDT}.filled()
}

// through carries a reading error at each rung through the fit's gains.
func (r ResultFacts) through(c Cause, size float64, buffers []float64) float64 {
	d := r.design()
	d.Buffers = buffers
	e := readingError(d, c, size)
	if len(r.Ladder) == 0 {
		return e(r.PKa)
	}
	sum := 0.0
	for i, p := range r.Ladder {
		sum += r.gain(i) * e(p)
	}
	return sum
}

func (r ResultFacts) gain(i int) float64 {
	if len(r.Gain) == len(r.Ladder) {
		return r.Gain[i]
	}
	return 1 / float64(len(r.Ladder))
}

// lagging is the shift by readings that keep a share rho of each step.
func (r ResultFacts) lagging(rho float64) float64 {
	sum, last := 0.0, 0.0
	for i, p := range r.Ladder {
		if i > 0 {
			last = rho * (last - (p - r.Ladder[i-1]))
		}
		sum += r.gain(i) * last
	}
	return sum
}

// calibration gives the buffers of the references.
func (l *look) calibration() []float64 {
	for i := range l.m.cells {
		if d := l.m.cells[i].Design; d != nil && len(d.Buffers) == 3 {
			return d.Buffers
		}
	}
	return nil
}

// nearest is the effect on the reference of nearest pKa.
func (l *look) nearest(tr Trait, pka float64) float64 {
	best, out := math.Inf(1), 0.0
	t := slices.IndexFunc(l.m.traits, func(x Trait) bool { return x.Cause == tr.Cause })
	for i := range l.m.cells {
		c := &l.m.cells[i]
		j := slices.Index(c.Characteristics, PKa)
		if t < 0 || j < 0 || c.Design == nil || c.cols[t] == nil {
			continue
		}
		if d := math.Abs(c.Design.PKa - pka); d < best {
			best, out = d, c.cols[t][j]
		}
	}
	return out
}
