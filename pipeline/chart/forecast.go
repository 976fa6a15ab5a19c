package chart

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Forecast says when a drifting characteristic reaches a limit.
type Forecast struct {
	Leaves           bool    // the slope is surely not zero and points at a limit
	Night, Low, High float64 // night and its 95 % interval; High is +Inf where it may never come
	Limit            float64
	Slope, SlopeSE   float64 // per night
	Sentence         string
}

// ForecastExit fits a straight line to values, which should begin at the onset of a
// drift, and finds the night at which its height reaches low or high, whichever the
// slope points at. The interval is that of Fieller 1940 for a ratio: all nights at
// which the line, within its 95 % band, may stand on the limit. sd is the known spread
// of a value; 0 estimates it from the fit. Three values are needed. Values and limits
// are in the characteristic's own unit.
func ForecastExit(values []Value, sd, low, high float64) Forecast {
	vs := usableValues(values)
	n := len(vs)
	f := Forecast{Night: math.NaN(), Low: math.NaN(), High: math.NaN(), Limit: math.NaN()}
	if n < 3 {
		f.Sentence = "Too few nights for a forecast: three are needed."
		return f
	}
	t, y := make([]float64, n), make([]float64, n)
	for i, v := range vs {
		t[i], y[i] = float64(v.Night), v.X
	}
	l := fitLine(t, y)
	if l.ssT == 0 {
		f.Sentence = "All values are of one night; there is no slope to go by."
		return f
	}
	q := distuv.StudentsT{Mu: 0, Sigma: 1, Nu: float64(n - 2)}.Quantile(0.975)
	spread := l.sd
	if sd > 0 {
		spread, q = sd, quantile(0.975)
	}
	levelVar, slopeVar := spread*spread/float64(n), spread*spread/l.ssT
	f.Slope, f.SlopeSE = l.slope, math.Sqrt(slopeVar)
	f.Limit = high
	if l.slope < 0 {
		f.Limit = low
	}
	d := f.Limit - l.level
	f.Night = l.middle + d/l.slope
	f.Leaves = math.Abs(l.slope) > q*f.SlopeSE
	// (d - slope u)^2 <= q^2 (levelVar + slopeVar u^2) for u = night - middle.
	a := l.slope*l.slope - q*q*slopeVar
	b := d * l.slope
	c := d*d - q*q*levelVar
	root := b*b - a*c
	switch {
	case f.Leaves:
		w := math.Sqrt(max(0, root))
		f.Low, f.High = l.middle+(b-w)/a, l.middle+(b+w)/a
	case root > 0:
		// The band contains a level line: the first night at which it reaches the limit.
		w := math.Sqrt(root)
		f.Low, f.High = l.middle+max((b-w)/a, (b+w)/a), math.Inf(1)
	default:
		f.Low, f.High = t[n-1], math.Inf(1)
	}
	last := vs[n-1].Night
	switch {
	case !f.Leaves:
		f.Sentence = fmt.Sprintf("No sure drift (%+.2g per night, standard error %.2g): the limit %.4g may never be reached, and not before night %.0f.", f.Slope, f.SlopeSE, f.Limit, math.Floor(f.Low))
	case f.Night <= float64(last):
		f.Sentence = fmt.Sprintf("The line through the values reached the limit %.4g near night %.0f (between %.0f and %.0f).", f.Limit, f.Night, f.Low, f.High)
	default:
		f.Sentence = fmt.Sprintf("At %+.2g per night the limit %.4g is reached in night %.0f (between %.0f and %.0f).", f.Slope, f.Limit, f.Night, f.Low, f.High)
	}
	return f
}

// Segment is the stretch between two calibrations.
type Segment struct {
	FirstNight, LastNight, Values int
	Slope, SlopeSE                float64 // per night; SlopeSE is NaN below three values
	Mean                          float64
}

// Sawtooth is a drift that every calibration sets back.
type Sawtooth struct {
	Level, LevelSE float64 // just after a calibration
	Slope, SlopeSE float64 // per night since the last calibration
	SD             float64 // spread about the sawtooth
	P              float64 // two-sided probability of such a slope without one
	Values, Before int     // values used; values before the first calibration, left out
	Segments       []Segment
	Sentence       string
}

// FindSawtooth fits x = level + slope (nights since the last calibration) to values
// by least squares. resets are the nights of calibrations in increasing order; a value
// of that night comes after it. At least three values after the first reset, of more
// than one age, are needed; otherwise the slope is zero and P is one.
func FindSawtooth(values []Value, resets []int) Sawtooth {
	s := Sawtooth{P: 1, SlopeSE: math.NaN(), LevelSE: math.NaN()}
	var age, y []float64
	segment, current := -1, -1
	var segments [][2][]float64
	for _, v := range usableValues(values) {
		for segment+1 < len(resets) && resets[segment+1] <= v.Night {
			segment++
		}
		if segment < 0 {
			s.Before++
			continue
		}
		if segment != current {
			current = segment
			segments = append(segments, [2][]float64{})
			s.Segments = append(s.Segments, Segment{FirstNight: v.Night})
		}
		k := len(segments) - 1
		a := float64(v.Night - resets[segment])
		age, y = append(age, a), append(y, v.X)
		segments[k][0], segments[k][1] = append(segments[k][0], a), append(segments[k][1], v.X)
		s.Segments[k].LastNight = v.Night
	}
	for k, g := range segments {
		l := fitLine(g[0], g[1])
		seg := &s.Segments[k]
		seg.Values, seg.Slope, seg.SlopeSE, seg.Mean = l.n, l.slope, math.NaN(), l.level
		if l.n > 2 {
			seg.SlopeSE = l.slopeSE
		}
	}
	s.Values = len(y)
	if len(y) == 0 {
		s.Sentence = "No value after a calibration."
		return s
	}
	l := fitLine(age, y)
	s.Level = l.at(0)
	if l.n < 3 || l.ssT == 0 {
		s.Sentence = "Too few nights since calibrations to see a drift that calibration sets back."
		return s
	}
	s.Slope, s.SlopeSE, s.SD = l.slope, l.slopeSE, l.sd
	s.LevelSE = math.Hypot(l.levelSE, l.slopeSE*l.middle)
	if l.slopeSE > 0 {
		s.P = studentTwoSided(l.slope/l.slopeSE, float64(l.n-2))
	}
	s.Sentence = fmt.Sprintf("Since calibration the value moves by %+.2g per night (standard error %.2g, chance %.2g), over %s.", s.Slope, s.SlopeSE, s.P, plural(len(s.Segments), "stretch between calibrations"))
	if len(s.Segments) != 1 {
		s.Sentence = fmt.Sprintf("Since calibration the value moves by %+.2g per night (standard error %.2g, chance %.2g), over %d stretches between calibrations.", s.Slope, s.SlopeSE, s.P, len(s.Segments))
	}
	return s
}
