package rehearse

import (
	"math"
	"sort"
	"time"
)

// hinge is the pH of the middle buffer, where the two branches of a real
// electrode meet in this model.
const hinge = 6.865

// An Electrode is a glass electrode as it really is at one moment.
type Electrode struct {
	Name      string
	E7MV      float64 // potential at pH 7 by the base branch
	SlopeAcid float64 // practical slope below the middle buffer, 1 = Nernst
	SlopeBase float64 // above it
}

// Potential is what the electrode gives at a true pH and t C, in mV.
func (e Electrode) Potential(pH, t float64) float64 {
	k := nernstMV(t)
	mid := e.E7MV + k*e.SlopeBase*(7-hinge)
	if pH < hinge {
		return mid - k*e.SlopeAcid*(pH-hinge)
	}
	return mid - k*e.SlopeBase*(pH-hinge)
}

// drifted is the electrode after the potential moved by offset (in pH as read)
// and both slopes by the relative amount eps: a meter that does not know
// reads offset + eps*(pH-7) too high.
func (e Electrode) drifted(offset, eps float64) Electrode {
	e.E7MV -= nernstMV(25) * offset
	e.SlopeAcid *= 1 + eps
	e.SlopeBase *= 1 + eps
	return e
}

// A Buffer is one bottle of pH standard.
type Buffer struct {
	Lot   string
	Label float64 // pH the label claims at 25 C
	True  float64 // pH it has
}

// A CalPoint is one line of a calibration as recorded.
type CalPoint struct {
	Lot          string
	Label        float64 // pH the calibration used
	MV           float64
	TemperatureC float64
}

// A Calibration is what the meter believes about an electrode.
type Calibration struct {
	Electrode string
	Meter     string
	At        time.Time
	Points    []CalPoint // ascending pH
}

// Calibrate dips an electrode into bottles. noise gives the reading error of
// each bottle in mV.
func Calibrate(e Electrode, bottles []Buffer, t float64, noise func() float64) Calibration {
	c := Calibration{Electrode: e.Name}
	for _, b := range bottles {
		mv := e.Potential(b.True, t) + noise()
		c.Points = append(c.Points, CalPoint{b.Lot, b.Label, math.Round(mv*100) / 100, t})
	}
	sort.Slice(c.Points, func(i, j int) bool { return c.Points[i].Label < c.Points[j].Label })
	return c
}

// Read turns a potential into the pH the meter shows: straight lines between
// the buffers, the outer ones continued. believed is the temperature the
// meter compensates for, t the temperature of the calibration being 25 C.
func (c Calibration) Read(mv, believed float64) float64 {
	n := len(c.Points)
	i := 0
	for i < n-2 && mv < c.Points[i+1].MV {
		i++
	}
	a, b := c.Points[i], c.Points[i+1]
	pH := a.Label + (mv-a.MV)*(b.Label-a.Label)/(b.MV-a.MV)
	return 7 + (pH-7)*(25+zeroC)/(believed+zeroC)
}

// Weights are the interpolation weights of the buffers at a pH: a bottle whose
// true value is e above its label makes the reading w*e too low.
func (c Calibration) Weights(pH float64) []float64 {
	n := len(c.Points)
	w := make([]float64, n)
	i := 0
	for i < n-2 && pH > c.Points[i+1].Label {
		i++
	}
	lo, hi := c.Points[i].Label, c.Points[i+1].Label
	w[i+1] = (pH - lo) / (hi - lo)
	w[i] = 1 - w[i+1]
	return w
}

// SegmentSlope is the practical slope of the segment from point i to i+1
// relative to Nernst.
func (c Calibration) SegmentSlope(i int) float64 {
	a, b := c.Points[i], c.Points[i+1]
	return (a.MV - b.MV) / (b.Label - a.Label) / nernstMV((a.TemperatureC+b.TemperatureC)/2)
}
