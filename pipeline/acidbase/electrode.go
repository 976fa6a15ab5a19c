package acidbase

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// A CalPoint is one buffer of a calibration as read.
type CalPoint struct {
	PH           float64 // value of the buffer at its temperature, as the calibration used it
	MilliVolt    float64
	TemperatureC float64 // of the buffer; NaN: that of the calibration
	Lot          string  // key of the bottle or lot; "" gives a key from the nominal pH
}

// A Segment is the straight line between two neighbouring buffers.
type Segment struct {
	LowPH   float64 `json:"low_ph"`
	HighPH  float64 `json:"high_ph"`
	LowMV   float64 `json:"low_mv"`
	HighMV  float64 `json:"high_mv"`
	SlopeMV float64 `json:"slope_mv"` // mV per pH, positive for a working electrode
	Percent float64 `json:"percent"`  // of the Nernst slope
}

// An Electrode is a calibrated glass electrode: pH is a piecewise-linear
// function of potential, the outer segments continued beyond the buffers.
type Electrode struct {
	Points       []CalPoint // ascending pH, potentials brought to TemperatureC
	Segments     []Segment  // len(Points)-1
	TemperatureC float64
	Nernst       float64   // ideal slope at TemperatureC, mV
	PotentialAt7 float64   // mV at pH 7
	OffsetPH     float64   // PotentialAt7 as pH: PotentialAt7 / slope there
	Residual     []float64 // per point, pH: reading of an inner buffer on the chord of its neighbours minus its value; NaN at the ends
	Worst        float64   // residual of largest size, with its sign; NaN with two buffers
}

// A SlopeError says that a calibration cannot be right.
type SlopeError struct {
	Segments []Segment
	Exchange [2]float64 // pH of the two buffers whose exchange would make every slope possible; zero if none does
	Sentence string
}

// Error is the sentence for people.
func (e *SlopeError) Error() string { return e.Sentence }

// Bounds of the slope of a glass electrode in percent of Nernst. Outside them
// a segment is not an aged electrode but a mistake.
const (
	LowestSlope  = 50.0
	HighestSlope = 130.0
)

func possible(percent float64) bool { return percent >= LowestSlope && percent <= HighestSlope }

// Calibrate orders the buffers by pH, brings potentials to tC by the ratio of
// absolute temperatures about the potential at pH 7, and joins neighbours by
// straight lines. At least two buffers 0.5 pH apart are needed. A slope below
// 50 % or above 130 % of Nernst (or of the wrong sign) is a *SlopeError.
func Calibrate(points []CalPoint, tC float64) (*Electrode, error) {
	if math.IsNaN(tC) || tC < -5 || tC > 105 {
		return nil, fmt.Errorf("calibration: temperature %v °C, expected -5 to 105; state the temperature of the buffers", tC)
	}
	pts, err := mergePoints(points, tC)
	if err != nil {
		return nil, err
	}
	e := &Electrode{TemperatureC: tC, Nernst: NernstSlope(tC)}
	e.build(pts)
	e.toTemperature(points)
	for _, s := range e.Segments {
		if !possible(s.Percent) {
			return nil, e.impossible()
		}
	}
	e.Residual = make([]float64, len(e.Points))
	e.Worst = math.NaN()
	for i := range e.Points {
		e.Residual[i] = math.NaN()
		if i == 0 || i == len(e.Points)-1 {
			continue
		}
		lo, p, hi := e.Points[i-1], e.Points[i], e.Points[i+1]
		chord := lo.PH + (p.MilliVolt-lo.MilliVolt)*(hi.PH-lo.PH)/(hi.MilliVolt-lo.MilliVolt)
		e.Residual[i] = chord - p.PH
		if math.IsNaN(e.Worst) || math.Abs(e.Residual[i]) > math.Abs(e.Worst) {
			e.Worst = e.Residual[i]
		}
	}
	return e, nil
}

// mergePoints checks, sorts, and averages repeated readings of one buffer.
func mergePoints(points []CalPoint, tC float64) ([]CalPoint, error) {
	pts := slices.Clone(points)
	for i, p := range pts {
		if math.IsNaN(p.PH) || p.PH < -2 || p.PH > 16 {
			return nil, fmt.Errorf("calibration point %d: buffer pH %v, expected -2 to 16; check the buffer value", i+1, p.PH)
		}
		if math.IsNaN(p.MilliVolt) || math.Abs(p.MilliVolt) > 1500 {
			return nil, fmt.Errorf("calibration point %d: potential %v mV, expected -1500 to 1500; check the column", i+1, p.MilliVolt)
		}
		if math.IsNaN(p.TemperatureC) {
			pts[i].TemperatureC = tC
		}
		if p.Lot == "" {
			pts[i].Lot = fmt.Sprintf("nominal %.2f", p.PH)
		}
	}
	slices.SortStableFunc(pts, func(a, b CalPoint) int {
		switch {
		case a.PH < b.PH:
			return -1
		case a.PH > b.PH:
			return 1
		}
		return 0
	})
	merged := pts[:0]
	counts := make([]float64, 0, len(pts))
	for _, p := range pts {
		last := len(merged) - 1
		if last >= 0 && p.PH-merged[last].PH < 0.05 && p.Lot == merged[last].Lot {
			n := counts[last]
			merged[last].PH = (merged[last].PH*n + p.PH) / (n + 1)
			merged[last].MilliVolt = (merged[last].MilliVolt*n + p.MilliVolt) / (n + 1)
			merged[last].TemperatureC = (merged[last].TemperatureC*n + p.TemperatureC) / (n + 1)
			counts[last]++
			continue
		}
		merged, counts = append(merged, p), append(counts, 1)
	}
	if len(merged) < 2 {
		return nil, fmt.Errorf("calibration: %d different buffer found, expected at least two; calibrate with two buffers that bracket the pKa", len(merged))
	}
	for i := 1; i < len(merged); i++ {
		if d := merged[i].PH - merged[i-1].PH; d < 0.5 {
			return nil, fmt.Errorf("calibration: buffers %.3f and %.3f are %.2f pH apart, expected at least 0.5; give one lot per buffer or leave one out",
				merged[i-1].PH, merged[i].PH, d)
		}
	}
	return merged, nil
}

// build computes segments and the potential at pH 7 from ordered points.
func (e *Electrode) build(pts []CalPoint) {
	e.Points = pts
	e.Segments = e.Segments[:0]
	for i := 1; i < len(pts); i++ {
		lo, hi := pts[i-1], pts[i]
		slope := -(hi.MilliVolt - lo.MilliVolt) / (hi.PH - lo.PH)
		e.Segments = append(e.Segments, Segment{LowPH: lo.PH, HighPH: hi.PH, LowMV: lo.MilliVolt, HighMV: hi.MilliVolt,
			SlopeMV: slope, Percent: 100 * slope / e.Nernst})
	}
	e.PotentialAt7 = e.MilliVolt(7)
	e.OffsetPH = e.PotentialAt7 / e.Segments[e.segmentOf(7)].SlopeMV
}

// toTemperature brings potentials read at other temperatures to that of the
// calibration: an electrode's potential about pH 7 goes as absolute temperature.
func (e *Electrode) toTemperature(original []CalPoint) {
	differs := false
	for _, p := range original {
		differs = differs || (!math.IsNaN(p.TemperatureC) && math.Abs(p.TemperatureC-e.TemperatureC) > 1e-9)
	}
	if !differs {
		return
	}
	asRead := slices.Clone(e.Points)
	for range 4 {
		at7 := e.PotentialAt7
		moved := slices.Clone(asRead)
		for i, p := range asRead {
			ratio := (e.TemperatureC + Kelvin) / (p.TemperatureC + Kelvin)
			moved[i].MilliVolt = at7 + (p.MilliVolt-at7)*ratio
		}
		e.build(moved)
	}
}

// impossible builds the sentence for a calibration that cannot be right, and
// looks for the one exchange of two buffers that would make it possible.
func (e *Electrode) impossible() *SlopeError {
	out := &SlopeError{Segments: slices.Clone(e.Segments)}
	worst := e.Segments[0]
	for _, s := range e.Segments {
		if badness(s.Percent) > badness(worst.Percent) {
			worst = s
		}
	}
	best := math.Inf(1)
	for i := range e.Points {
		for j := i + 1; j < len(e.Points); j++ {
			if score := e.exchanged(i, j); score < best {
				best = score
				out.Exchange = [2]float64{e.Points[i].PH, e.Points[j].PH}
			}
		}
	}
	var b strings.Builder
	fmt.Fprintf(&b, "calibration has slope %.0f %% of theory between pH %.2f and %.2f, expected %.0f to %.0f",
		worst.Percent, worst.LowPH, worst.HighPH, LowestSlope, HighestSlope)
	if math.IsInf(best, 1) {
		b.WriteString("; no exchange of two buffers explains it: check electrode, connection and buffer values, then calibrate again")
	} else {
		fmt.Fprintf(&b, "; buffers %.2f and %.2f interchanged? Calibrate again", out.Exchange[0], out.Exchange[1])
	}
	out.Sentence = b.String()
	return out
}

// badness is how far a slope lies from 100 percent.
func badness(percent float64) float64 { return math.Abs(percent - 100) }

// exchanged scores the calibration with the potentials of two buffers
// exchanged: the largest distance of a slope from 100 %, infinite if impossible.
func (e *Electrode) exchanged(i, j int) float64 {
	mv := make([]float64, len(e.Points))
	for k, p := range e.Points {
		mv[k] = p.MilliVolt
	}
	mv[i], mv[j] = mv[j], mv[i]
	worst := 0.0
	for k := 1; k < len(mv); k++ {
		percent := -100 * (mv[k] - mv[k-1]) / (e.Points[k].PH - e.Points[k-1].PH) / e.Nernst
		if !possible(percent) {
			return math.Inf(1)
		}
		worst = math.Max(worst, badness(percent))
	}
	return worst
}

// segmentOf is the index of the segment that serves a pH; outer ones are continued.
func (e *Electrode) segmentOf(pH float64) int {
	for i := range e.Segments {
		if pH <= e.Segments[i].HighPH {
			return i
		}
	}
	return len(e.Segments) - 1
}

// MilliVolt is the potential at a pH, on the piecewise line.
func (e *Electrode) MilliVolt(pH float64) float64 {
	s := e.Segments[e.segmentOf(pH)]
	return s.LowMV - s.SlopeMV*(pH-s.LowPH)
}

// PH is the pH that belongs to a potential, on the piecewise line.
func (e *Electrode) PH(mV float64) float64 {
	at := len(e.Segments) - 1
	for i, s := range e.Segments {
		if mV >= s.HighMV { // potentials fall with pH
			at = i
			break
		}
	}
	s := e.Segments[at]
	return s.LowPH - (mV-s.LowMV)/s.SlopeMV
}

// Weights writes into w the interpolation weights of the buffers at a pH: the
// reading depends on the buffer values as sum w_j pH_j. They sum to one; beyond
// the outer buffers they go on, so that one is negative. len(w) = len(Points).
func (e *Electrode) Weights(w []float64, pH float64) {
	clear(w)
	i := e.segmentOf(pH)
	s := e.Segments[i]
	t := (pH - s.LowPH) / (s.HighPH - s.LowPH)
	w[i], w[i+1] = 1-t, t
}

// Outside is how far a pH lies beyond the outer buffers; 0 inside.
func (e *Electrode) Outside(pH float64) float64 {
	first, last := e.Points[0].PH, e.Points[len(e.Points)-1].PH
	return math.Max(0, math.Max(first-pH, pH-last))
}

// EffectKind says which input an Effect belongs to.
type EffectKind int

// The inputs of a calibration that move readings together.
const (
	BufferValue  EffectKind = iota // true value of a buffer minus its label, pH
	PointReading                   // error of the potential read in a buffer, mV
	Offset                         // potential drift since the calibration, pH
	SlopeSince                     // relative slope change since the calibration (actual/calibrated - 1)
	Compensation                   // the meter takes the solution too warm, K
)

// An Effect is how one shared input moves readings: the error of reading i is
// S[i] per unit of the input.
type Effect struct {
	Kind  EffectKind
	Lot   string  // BufferValue and PointReading: the buffer's lot
	Label float64 // BufferValue and PointReading: pH of the buffer; else NaN
	Unit  string  // of the input: "pH", "mV", "1", "K"
	S     []float64
}

// Shared gives the effect of every input of the calibration on readings at
// the given pH values:
//
//   - BufferValue, one per lot: buffer true = label + e makes the reading err by
//     -w e, with w the interpolation weight, summed over the buffers of the lot;
//   - PointReading, one per buffer: a potential read too high by 1 mV makes the
//     reading err by +w/k, k the slope of the segment in mV per pH;
//   - Offset: +1 per pH; SlopeSince: pH - 7; Compensation: -(pH - 7)/T.
func (e *Electrode) Shared(ph []float64) []Effect {
	n, m := len(e.Points), len(ph)
	weights := make([]float64, n*m)
	for i, p := range ph {
		e.Weights(weights[i*n:(i+1)*n], p)
	}
	out := make([]Effect, 0, 2*n+3)
	lotAt := make(map[string]int, n)
	for j, p := range e.Points {
		at, seen := lotAt[p.Lot]
		if !seen {
			at = len(out)
			lotAt[p.Lot] = at
			out = append(out, Effect{Kind: BufferValue, Lot: p.Lot, Label: p.PH, Unit: "pH", S: make([]float64, m)})
		}
		for i := range ph {
			out[at].S[i] -= weights[i*n+j]
		}
	}
	for j, p := range e.Points {
		s := make([]float64, m)
		for i, v := range ph {
			s[i] = weights[i*n+j] / e.Segments[e.segmentOf(v)].SlopeMV
		}
		out = append(out, Effect{Kind: PointReading, Lot: p.Lot, Label: p.PH, Unit: "mV", S: s})
	}
	offset, slope, warm := make([]float64, m), make([]float64, m), make([]float64, m)
	for i, v := range ph {
		offset[i], slope[i], warm[i] = 1, v-7, -(v-7)/(e.TemperatureC+Kelvin)
	}
	return append(out,
		Effect{Kind: Offset, Label: math.NaN(), Unit: "pH", S: offset},
		Effect{Kind: SlopeSince, Label: math.NaN(), Unit: "1", S: slope},
		Effect{Kind: Compensation, Label: math.NaN(), Unit: "K", S: warm})
}
