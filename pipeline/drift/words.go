package drift

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// a trace is the course of one characteristic against what a cause predicts.
type trace struct {
	cell, j   int
	predicted float64 // on the last night the cause showed
	observed  float64
	sd        float64
	inScope   bool
}

// traces estimates, for every cell observed since the onset, how large each
// characteristic's change is in the cause's own course, others' share taken off.
func (l *look) traces(c rankedCause, others [][][]float64) []trace {
	s := c.out.s
	tr := l.m.traits[s.trait]
	course := l.course(s, c.shape, c.onset)
	peak, _ := latest(course)
	var out []trace
	for i := range l.cells {
		cl := &l.cells[i]
		a := slices.Index(s.cells, i)
		for j := range cl.c.k {
			var sy, ss, s1 float64
			for k, o := range cl.obs {
				if !o.have[j] || course[o.night] == 0 || (a >= 0 && !s.nights[a][o.night]) {
					continue
				}
				w := float64(o.sets) / cl.c.cov[j*cl.c.k+j]
				f := course[o.night]
				sy += w * f * (o.y[j] - others[i][k][j])
				ss += w * f * f
				s1 += w * f
			}
			if ss == 0 {
				continue
			}
			t := trace{cell: i, j: j, observed: peak * sy / ss, inScope: a >= 0}
			v := 1 / ss
			if cl.c.base != nil {
				v += cl.c.base[j*cl.c.k+j] * (s1 / ss) * (s1 / ss)
			}
			t.sd = math.Abs(peak) * math.Sqrt(v)
			if a >= 0 {
				for n := range tr.Columns {
					t.predicted += peak * c.h.theta[n] * cl.c.cols[s.trait][n*cl.c.k+j]
				}
			}
			out = append(out, t)
		}
	}
	return out
}

// touched lists what a cause does, strongest first.
func (l *look) touched(c rankedCause, others [][][]float64) []Touched {
	ts := l.traces(c, others)
	slices.SortStableFunc(ts, func(a, b trace) int { return compareDown(math.Abs(a.predicted)/a.sd, math.Abs(b.predicted)/b.sd) })
	var out []Touched
	for _, t := range ts {
		ch := l.cells[t.cell].c.Characteristics[t.j]
		if t.predicted == 0 || (math.Abs(t.predicted) < t.sd && ch != PKa) {
			continue
		}
		out = append(out, Touched{l.cells[t.cell].c.Key, ch, t.predicted, t.observed, t.sd})
	}
	return out
}

func compareDown(a, b float64) int {
	switch {
	case a > b:
		return -1
	case a < b:
		return 1
	}
	return 0
}

// evidence says in words what speaks for and against a cause.
func (l *look) evidence(c rankedCause, others [][][]float64, leads bool) (yes, no []string) {
	ts := l.traces(c, others)
	name := func(t trace) string {
		cl := l.cells[t.cell].c
		return cl.Title + ": " + cl.Characteristics[t.j].Words()
	}
	slices.SortStableFunc(ts, func(a, b trace) int { return compareDown(math.Abs(a.predicted)/a.sd, math.Abs(b.predicted)/b.sd) })
	for _, t := range ts {
		ch := l.cells[t.cell].c.Characteristics[t.j]
		off := math.Hypot(t.sd, modelError*t.predicted)
		if len(yes) < 3 && math.Abs(t.predicted) > 1.5*t.sd && t.observed*t.predicted > 0 && math.Abs(t.observed-t.predicted) < 2.5*off {
			yes = append(yes, fmt.Sprintf("%s moved by %s (expected %s)", name(t), signed(ch, t.observed), signed(ch, t.predicted)))
		}
	}
	slices.SortStableFunc(ts, func(a, b trace) int {
		return compareDown(math.Abs(a.predicted-a.observed)/a.sd, math.Abs(b.predicted-b.observed)/b.sd)
	})
	for _, t := range ts {
		ch := l.cells[t.cell].c.Characteristics[t.j]
		off := math.Hypot(t.sd, modelError*t.predicted)
		if len(no) >= 3 || math.Abs(t.observed-t.predicted) < 3*off {
			continue
		}
		if t.predicted != 0 {
			no = append(no, fmt.Sprintf("%s moved by %s where %s was expected", name(t), signed(ch, t.observed), signed(ch, t.predicted)))
		} else {
			no = append(no, fmt.Sprintf("%s moved by %s, which this does not explain", name(t), signed(ch, t.observed)))
		}
	}
	if leads {
		if quiet := l.outside(c, ts); quiet != "" {
			yes = append(yes, quiet)
		}
	}
	return yes, no
}

// outside names instruments that did not use the resource and have not moved.
func (l *look) outside(c rankedCause, ts []trace) string {
	in := map[string]bool{}
	for _, i := range c.out.s.cells {
		in[l.cells[i].c.Instrument] = true
	}
	// A cell that used the resource but cannot feel the cause says nothing either way.
	for i := range l.cells {
		for n := c.onset; n < l.nights && !in[l.cells[i].c.Instrument]; n++ {
			in[l.cells[i].c.Instrument] = l.usedBy(c.out.s.res, l.m.traits[c.out.s.trait].Role, i, n)
		}
	}
	moved := map[string]bool{}
	var others []string
	for _, t := range ts {
		name := l.cells[t.cell].c.Instrument
		if name == "" || in[name] {
			continue
		}
		if !slices.Contains(others, name) {
			others = append(others, name)
		}
		if math.Abs(t.observed) > 3.5*t.sd {
			moved[name] = true
		}
	}
	others = slices.DeleteFunc(others, func(n string) bool { return moved[n] })
	if len(others) == 0 {
		return ""
	}
	slices.Sort(others)
	return fmt.Sprintf("%s did not use %v and did not move", strings.Join(others, ", "), c.out.s.res)
}

// signed writes a change of a characteristic with its unit.
func signed(c Characteristic, v float64) string {
	switch c {
	case PKa, Library, ThirdBuffer:
		return fmt.Sprintf("%+.3f", v)
	case Slope, AmountTrend:
		return fmt.Sprintf("%+.2f %%", 100*v)
	case RatioA, RatioB, AmountIso:
		return fmt.Sprintf("%+.2f %%", 100*math.Expm1(v))
	case LambdaA, LambdaB, LambdaIso:
		return fmt.Sprintf("%+.2f nm", v)
	case ClearMean, ClearTrend:
		return fmt.Sprintf("%+.4f", v)
	case SlopeAcid, SlopeBase:
		return fmt.Sprintf("%+.2f %%", v)
	case PotentialMid:
		return fmt.Sprintf("%+.1f mV", v)
	case Temperature:
		return fmt.Sprintf("%+.2f K", v)
	}
	return fmt.Sprintf("%+.2g (square)", v)
}

// loggedText finds the event that raised the odds.
func (l *look) loggedText(s *scope, onset int) string {
	for _, e := range l.h.Events {
		n := int(e.Night - l.h.First)
		if n < onset-1 || n > onset+1 || !slices.Contains(l.m.traits[s.trait].Events, e.Kind) || !l.concerns(e, s) {
			continue
		}
		what := e.Text
		if what == "" {
			what = strings.TrimSpace(string(e.Kind) + " " + e.Resource)
		}
		return fmt.Sprintf("logged on %s: %s", e.Night.Short(), what)
	}
	return fmt.Sprintf("%v first used on %s", s.res, l.night(onset).Short())
}

// alike names candidates that these data cannot tell from the first.
func (l *look) alike(r *ranked) []string {
	top := r.list[0]
	name := func(c rankedCause) string {
		return fmt.Sprintf("%s (%v)", l.m.traits[c.out.s.trait].Title, c.out.s.res)
	}
	var out []string
	for i, c := range r.list[1:] {
		if i > 12 || len(out) == 4 {
			break
		}
		p := math.Exp(c.weight - r.total)
		if l.m.traits[c.out.s.trait].Cause == ElectrodeAged || l.m.traits[top.out.s.trait].Cause == ElectrodeAged && l.sameClass(top, c) {
			continue
		}
		if p > 0.05 && (top.weight-c.weight < 3) {
			out = append(out, fmt.Sprintf("%s cannot be told from %s on these data", name(top), name(c)))
		}
	}
	return out
}

// sentence states size, unit, direction and time without jargon.
func (l *look) sentence(c rankedCause, e Explanation) string {
	tr := l.m.traits[c.out.s.trait]
	if e.Finding == NoneKnown {
		return "references moved in a way none of the known causes explains" + l.when(c)
	}
	return l.what(tr, c, e) + l.when(c)
}

func (l *look) when(c rankedCause) string {
	from := l.night(c.onset).Short()
	switch c.shape {
	case ShapeRamp, ShapeSawtooth:
		return ", growing since " + from
	case ShapeUntil:
		_, last := latest(l.course(c.out.s, c.shape, c.onset))
		return fmt.Sprintf(" from %s to %s", from, l.night(last).Short())
	}
	return " since " + from
}

func (l *look) what(tr Trait, c rankedCause, e Explanation) string {
	course := l.course(c.out.s, c.shape, c.onset)
	s, _ := latest(course)
	size := sizes(tr, c.h, s)[0]
	cell, shift := l.worst(e.Touched)
	switch tr.Cause {
	case ElectrodeAged, ElectrodeOffset, ElectrodeSlope, ElectrodeLag, BufferLow, BufferMid, BufferHigh, Compensation, CO2:
		if cell != nil {
			return fmt.Sprintf("pH readings wrong by %+.*f at pH %.1f", places(shift), shift, cell.Design.PKa)
		}
	case RoomTemperature, CellTemperature:
		return fmt.Sprintf("temperature off by %+.1f K", size.Size)
	case WavelengthShift:
		return fmt.Sprintf("wavelength scale displaced by %+.2f nm", size.Size)
	case WavelengthTilt:
		return fmt.Sprintf("wavelength scale stretched by %+.2f nm in 100 nm", size.Size)
	case Gain, Path, Stock:
		return fmt.Sprintf("absorbances changed by %+.1f %%", size.Size)
	case Stray:
		return fmt.Sprintf("stray light up by %.2f %%", size.Size)
	case ImpurityAcid:
		return fmt.Sprintf("about %.1f %% of a second dye in %v", size.Size, c.out.s.res)
	case ImpurityConst:
		return fmt.Sprintf("about %.1f %% extra absorption in %v", size.Size, c.out.s.res)
	case Noise:
		return fmt.Sprintf("noise %.1f times the usual", math.Sqrt(math.Max(0, 1+size.Size)))
	case ReferenceLot:
		return fmt.Sprintf("%v behaves like a new lot of the reference", c.out.s.res)
	case ElectrodeAgeing:
		return fmt.Sprintf("%v ages (slope %+.1f %%), and its calibrations remove it", c.out.s.res, size.Size)
	}
	if cell != nil && math.Abs(shift) >= 0.001 {
		return fmt.Sprintf("pKa of %s shifted by %+.*f", cell.Title, places(shift), shift)
	}
	return fmt.Sprintf("%s: %+.3g %s", tr.Title, size.Size, size.Unit)
}

func places(v float64) int {
	if math.Abs(v) < 0.02 {
		return 3
	}
	return 2
}

// worst finds the reference whose pKa is moved most.
func (l *look) worst(ts []Touched) (*cell, float64) {
	var best *cell
	shift := 0.0
	for _, t := range ts {
		if t.Characteristic != PKa || math.Abs(t.Predicted) <= math.Abs(shift) {
			continue
		}
		c := &l.m.cells[l.m.byKey[t.Cell]]
		if c.Design != nil {
			best, shift = c, t.Predicted
		}
	}
	return best, shift
}
