package rehearse

import (
	"fmt"
	"time"
)

// People of the invented laboratory.
const (
	manager     = "Ottilie Brandmayr"
	analyst     = "Jannis Feldkirch"
	metrologist = "Mira Holub"
)

// scaleOff is by how much the scale of U1 was wrong after the lamp change,
// scaleLeft what the adjustment left, badBuffer the error of bottle CB-207.
const (
	scaleOff  = 0.60 // nm
	scaleLeft = 0.05 // nm
	badBuffer = -0.06
)

// bottle is one buffer bottle with the night it was opened.
type bottle struct {
	lot   string
	label float64
	from  int
}

// bottles are in order of opening; the latest of a label is in use.
func bottles() []bottle {
	return []bottle{
		{"CB-198", 1.679, 1}, {"CB-199", 4.005, 1}, {"CB-200", 6.865, 1}, {"CB-201", 10.012, 1},
		{"CB-202", 4.005, 8}, {"CB-203", 6.865, 29}, {"CB-204", 1.679, 29}, {"CB-206", 4.005, 36},
		{"CB-207", 10.012, nightBadBuffer}, {"CB-205", 6.865, 43}, {"CB-208", 10.012, nightGoodBuffer},
	}
}

// buffersInUse are the bottles a calibration in a night is made with.
func (s *Story) buffersInUse(night int) []Buffer {
	latest := map[float64]bottle{}
	for _, b := range bottles() {
		if b.from <= night {
			latest[b.label] = b
		}
	}
	var out []Buffer
	for _, label := range []float64{1.679, 4.005, 6.865, 10.012} {
		b := latest[label]
		e := 0.001 * dice(s.seed, "buffer", b.lot).NormFloat64()
		if b.lot == "CB-207" {
			e = badBuffer
		}
		out = append(out, Buffer{Lot: b.lot, Label: label, True: label + e})
	}
	return out
}

// electrodeOf is the electrode on an instrument in a night.
func electrodeOf(inst string, night int) string {
	switch {
	case inst == instTwo:
		return "E-34"
	case night >= nightReplaced:
		return "E-35"
	}
	return "E-31"
}

func meterOf(inst string) string {
	if inst == instTwo {
		return "M-5"
	}
	return "M-3"
}

// calibrates says whether an instrument's electrode is calibrated in the evening of a night.
func (s *Story) calibrates(inst string, night int) bool {
	if s.day(night).Weekday() == time.Monday || night == nightBadBuffer || night == nightGoodBuffer {
		return true
	}
	return inst == instOne && night == nightReplaced
}

// lastCalibration is the night of the calibration in force.
func (s *Story) lastCalibration(inst string, night int) int {
	for !s.calibrates(inst, night) {
		night--
	}
	return night
}

// ageing is how far E-31 has drifted at a moment since the calibration in
// force: pH offset and relative slope. Days count from the middle of the night
// in which the drift began.
func (s *Story) ageing(inst string, night int, t time.Time) (offset, eps float64) {
	if inst != instOne || night < nightDrift || night >= nightReplaced {
		return 0, 0
	}
	begin, perOffset, perEps := s.at(nightDrift, 0, 0), 0.003, -0.0015
	if night >= nightRefill {
		begin, perOffset, perEps = s.at(nightRefill, 0, 0), 0.004, -0.0022
	}
	days := max(0, t.Sub(begin).Hours()/24)
	return perOffset * days, perEps * days
}

// electrodeAt is an electrode as it was at the calibration of a night, and
// what the meter made of it.
func (s *Story) electrodeAt(inst string, calNight int) (Electrode, Calibration) {
	name := electrodeOf(inst, calNight)
	start := map[string]Electrode{
		"E-31": {name, 3.1, 0.992, 0.988},
		"E-34": {name, -1.6, 0.993, 0.990},
		"E-35": {name, 1.2, 0.996, 0.993},
	}[name]
	n := Quiet()
	rng := dice(s.seed, "calibration", inst, calNight)
	start.E7MV += n.Potential * rng.NormFloat64()
	start.SlopeAcid *= 1 + n.Slope*rng.NormFloat64()
	start.SlopeBase *= 1 + n.Slope*rng.NormFloat64()
	at := s.at(calNight, 17, 12)
	if name == "E-31" && calNight >= nightRefill {
		// What drifted before is now part of the electrode the calibration
		// sees; the refilling moved the potential further, to -4 mV in all.
		offset, eps := s.ageing(inst, nightRefill-1, s.at(nightRefill, 17, 12))
		start = start.drifted(offset, eps)
		start.E7MV -= 4 - nernstMV(25)*offset
	}
	c := Calibrate(start, s.buffersInUse(calNight), 25, func() float64 { return n.CalMV * rng.NormFloat64() })
	c.Meter, c.At = meterOf(inst), at
	if inst == instTwo {
		c.At = at.Add(14 * time.Minute)
	}
	return start, c
}

// opticsOf is an instrument's optics in a night.
func opticsOf(inst string, night int) Optics {
	if inst == instTwo {
		return Optics{ShiftNM: 0.08, Stray: 0.0002, Gain: 0.996, Noise: 1}
	}
	o := Optics{ShiftNM: -0.05, Stray: 0.0003, Gain: 1, Noise: 1}
	if night >= nightLamp {
		o.Noise = 0.7
		if night < nightRealigned {
			o.ShiftNM += scaleOff
		} else {
			o.ShiftNM += scaleLeft
		}
	}
	return o
}

// Events are what people entered into the log before a night began.
func (s *Story) Events(night int) []Event {
	var out []Event
	add := func(hour, minute int, kind, resource, inst, text, by string) {
		out = append(out, Event{s.at(night, hour, minute), kind, resource, inst, text, by})
	}
	if night == 1 {
		add(17, 2, "electrode", "E-31", instOne, "in use on meter M-3", metrologist)
		add(17, 2, "electrode", "E-34", instTwo, "in use on meter M-5", metrologist)
		add(17, 3, "lamp", "L-12", instOne, "in use, 640 h", metrologist)
		add(17, 3, "lamp", "L-21", instTwo, "in use, 210 h", metrologist)
		add(17, 4, "cell", "F-2", instOne, "flow cell in use", metrologist)
		add(17, 4, "cell", "K-7", instTwo, "cell set in use", metrologist)
	}
	for _, b := range bottles() {
		if b.from == night {
			add(17, 6, "buffer", b.lot, "", fmt.Sprintf("bottle opened, label pH %.3f at 25 C", b.label), analyst)
		}
	}
	for _, inst := range []string{instOne, instTwo} {
		if s.calibrates(inst, night) {
			add(17, 12, "calibration", electrodeOf(inst, night), inst, "calibrated in four buffers", analyst)
		}
	}
	switch night {
	case nightRefill:
		add(17, 5, "service", "E-31", instOne, "electrode refilled and rinsed before the calibration", analyst)
	case nightReplaced:
		add(17, 5, "electrode", "E-35", instOne, "new electrode on meter M-3 in place of E-31", metrologist)
	case nightLamp:
		add(17, 8, "lamp", "L-13", instOne, "new lamp in place of L-12", metrologist)
	case nightRealigned:
		add(17, 8, "wavelength", instOne, instOne, "wavelength scale adjusted", metrologist)
	case nightGoodBuffer:
		add(17, 7, "buffer", "CB-207", "", "bottle withdrawn, true value 9.952 by comparison", metrologist)
	case nightNewLot:
		add(17, 9, "lot", "RI-C2", "", "new lot RC-12 of m-cresol purple, measured beside RC-11 for five nights", metrologist)
	}
	return out
}
