package acidbase

import (
	"errors"
	"fmt"
	"math"
	"testing"

	"pgregory.net/rapid"
)

// demoElectrode is a three-buffer calibration with chosen slopes.
func demoElectrode(t *testing.T, acid, base float64) *Electrode {
	t.Helper()
	k := NernstSlope(25)
	p := []CalPoint{{10.012, -(10.012-6.865)*k*base - 3, 25, "C"}, {4.005, (6.865-4.005)*k*acid - 3, 25, "A"}, {6.865, -3, 25, "B"}}
	e, err := Calibrate(p, 25)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

func TestCalibrate(t *testing.T) {
	e := demoElectrode(t, 0.99, 0.97)
	near(t, "acid slope", e.Segments[0].Percent, 99, 1e-9)
	near(t, "base slope", e.Segments[1].Percent, 97, 1e-9)
	near(t, "potential at 7", e.PotentialAt7, -3-0.135*0.97*e.Nernst, 1e-9)
	// The middle buffer on the chord of its neighbours.
	chord := 4.005 + (e.Points[0].MilliVolt+3)*(10.012-4.005)/(e.Points[0].MilliVolt-e.Points[2].MilliVolt)
	near(t, "residual of the middle buffer", e.Worst, chord-6.865, 1e-12)
	for _, p := range e.Points {
		near(t, "buffer back", e.PH(p.MilliVolt), p.PH, 1e-12)
	}
	rapid.Check(t, func(t *rapid.T) {
		pH := rapid.Float64Range(0, 14).Draw(t, "pH")
		if got := e.PH(e.MilliVolt(pH)); math.Abs(got-pH) > 1e-10 {
			t.Fatalf("pH %g back as %g", pH, got)
		}
	})
	near(t, "outside", e.Outside(3.5), 0.505, 1e-12)
	near(t, "inside", e.Outside(7), 0, 0)
}

// TestSharedAgainstRecalibration: every effect against a calibration in which
// the input is really wrong.
func TestSharedAgainstRecalibration(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		k := NernstSlope(25)
		label := []float64{1.68, 4.005, 6.865, 10.012}[rapid.IntRange(0, 2).Draw(t, "first"):]
		truth := make([]float64, len(label))
		noise := make([]float64, len(label))
		for j := range label {
			truth[j] = label[j] + rapid.Float64Range(-1e-4, 1e-4).Draw(t, "e")
			noise[j] = rapid.Float64Range(-1e-3, 1e-3).Draw(t, "mV")
		}
		slope := rapid.Float64Range(0.93, 1.02).Draw(t, "slope")
		at := func(pH float64) float64 { return -(pH - 7) * k * slope }
		pts := make([]CalPoint, len(label))
		ideal := make([]CalPoint, len(label))
		for j := range label {
			lot := fmt.Sprint("lot", j)
			pts[j] = CalPoint{label[j], at(truth[j]) + noise[j], 25, lot}
			ideal[j] = CalPoint{label[j], at(label[j]), 25, lot}
		}
		e, err := Calibrate(pts, 25)
		if err != nil {
			t.Fatal(err)
		}
		ref, err := Calibrate(ideal, 25)
		if err != nil {
			t.Fatal(err)
		}
		ph := []float64{rapid.Float64Range(0, 13).Draw(t, "pH")}
		predicted := 0.0
		buffers, readings := 0, 0
		for _, f := range ref.Shared(ph) {
			switch f.Kind {
			case BufferValue:
				predicted += f.S[0] * (truth[buffers] - label[buffers])
				buffers++
			case PointReading:
				predicted += f.S[0] * noise[readings]
				readings++
			}
		}
		got := e.PH(at(ph[0])) - ph[0]
		// Near a kink the reading may fall on the other segment.
		if math.Abs(got-predicted) > 2e-6+0.01*math.Abs(predicted) {
			t.Fatalf("reading error at %g: %g, predicted %g", ph[0], got, predicted)
		}
	})
}

// TestBufferFingerprints: the figures a drift table is built on: high buffer
// -0.05 moves readings at 8.26 by +0.022 and the segment by -1.59 %; compensation
// two kelvin too warm acts as a slope.
func TestBufferFingerprints(t *testing.T) {
	e := demoElectrode(t, 1, 1)
	s := e.Shared([]float64{4.66, 8.26, 8.90})
	high := s[2] // buffers ascending: 4.005, 6.865, 10.012
	if high.Kind != BufferValue || high.Lot != "C" {
		t.Fatalf("third effect is %+v", high)
	}
	near(t, "high buffer -0.05 at 8.26", high.S[1]*-0.05, 0.0220, 0.0003)
	near(t, "high buffer -0.05 at 8.90", high.S[2]*-0.05, 0.0323, 0.0001)
	near(t, "high buffer at 4.66", high.S[0], 0, 0)
	near(t, "segment", -0.05/(10.012-6.865), -0.0159, 0.0001)
	last := s[len(s)-1]
	near(t, "compensation +2 K at 8.26", 2*last.S[1], -0.009, 0.0006)
	near(t, "compensation +2 K at 4.66", 2*last.S[0], 0.016, 0.0006)
	slope := s[len(s)-2]
	near(t, "slope -1 % at 4.66", -0.01*slope.S[0], 0.0234, 0.0001)
	near(t, "slope -1 % at 8.26", -0.01*slope.S[1], -0.0126, 0.0001)
	// A lot used for two buffers counts once, with both weights.
	k := NernstSlope(25)
	two, err := Calibrate([]CalPoint{{4.005, 3 * k, 25, "X"}, {6.865, 0.1 * k, 25, "X"}}, 25)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "one lot for both buffers", two.Shared([]float64{5})[0].S[0], -1, 1e-12)
}

func TestInterchangedBuffers(t *testing.T) {
	k := NernstSlope(25)
	_, err := Calibrate([]CalPoint{{4.005, 3 * k, 25, ""}, {6.865, -3 * k, 25, ""}, {10.012, 0.1 * k, 25, ""}}, 25)
	var s *SlopeError
	if !errors.As(err, &s) {
		t.Fatalf("interchanged buffers gave %v", err)
	}
	if s.Exchange != [2]float64{6.865, 10.012} {
		t.Errorf("exchange %v: %s", s.Exchange, s)
	}
	if _, err = Calibrate([]CalPoint{{4.005, 0, 25, ""}, {6.865, 1, 25, ""}, {10.012, 0.5, 25, ""}}, 25); !errors.As(err, &s) || s.Exchange != [2]float64{} {
		t.Errorf("dead electrode: %v", err)
	}
	for _, bad := range [][]CalPoint{nil, {{7, 0, 25, ""}}, {{7, 0, 25, ""}, {7.1, -6, 25, ""}}, {{7, math.NaN(), 25, ""}, {4, 170, 25, ""}}, {{70, 0, 25, ""}, {4, 170, 25, ""}}} {
		if _, err := Calibrate(bad, 25); err == nil {
			t.Errorf("%v was accepted", bad)
		}
	}
}

// A calibration read in buffers of another temperature is brought to its own.
func TestCalibrationTemperature(t *testing.T) {
	k20 := NernstSlope(20)
	e, err := Calibrate([]CalPoint{{4.0, 3*k20*0.98 + 5, 20, ""}, {7, 5, 20, ""}, {10, -3*k20*0.98 + 5, 20, ""}}, 25)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "percent at 25 °C", e.Segments[0].Percent, 98, 1e-9)
	near(t, "potential at 7", e.PotentialAt7, 5, 1e-9)
}

// TestRealCalibrations: two and a half years of calibrations of a laboratory,
// nominal buffers 4, 7 and 10. Its slopes are ours within what its unstated
// buffer values leave open; the probe it calls faulty stands out by the residual
// of its middle buffer.
func TestRealCalibrations(t *testing.T) {
	rows := outsideData(t, "electrode_history", "calibrations_2020_to_jun2022.csv")
	close, faulty := 0, 0
	for _, r := range rows[1:] {
		tC := number(t, r[6])
		e, err := Calibrate([]CalPoint{{4.005, number(t, r[3]), tC, ""}, {7.01, number(t, r[4]), tC, ""}, {10.04, number(t, r[5]), tC, ""}}, tC)
		if err != nil {
			t.Errorf("%s: %v", r[0], err)
			continue
		}
		chord := (e.Points[0].MilliVolt - e.Points[2].MilliVolt) / (e.Points[2].PH - e.Points[0].PH)
		if math.Abs(chord+number(t, r[2])) < 0.6 {
			close++
		}
		if math.Abs(e.Worst) > 0.15 {
			faulty++
		}
		if r[8] == "faulty probe" && math.Abs(e.Worst) < 0.15 {
			t.Errorf("%s: faulty probe has residual %.3f", r[0], e.Worst)
		}
	}
	n := len(rows) - 1
	if close < n*95/100 {
		t.Errorf("%d of %d slopes agree", close, n)
	}
	if faulty > 3 {
		t.Errorf("%d calibrations look faulty", faulty)
	}
	t.Logf("%d of %d slopes within 0.6 mV, %d with a residual above 0.15", close, n, faulty)
}
