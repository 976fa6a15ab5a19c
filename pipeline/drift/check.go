package drift

import "math"

// A test that a laboratory can make, with what each cause would do to it per
// unit of the cause, and the standard deviation of its outcome.
type trial struct {
	text string
	sd   float64
	unit map[Cause]float64
}

// trials are the checks of common practice (no source). The effects are those of
// section "fingerprints" on an ordinary ladder of 12 rungs from -2 to +2.
func trials() []trial {
	return []trial{
		{"measure a wavelength standard (holmium or didymium): it does not depend on chemistry", 0.05,
			map[Cause]float64{WavelengthShift: 0.5, WavelengthTilt: 0.25}},
		{"calibrate again with freshly opened bottles of another lot and repeat one reference", 0.009,
			map[Cause]float64{BufferLow: 0.02, BufferMid: 0.02, BufferHigh: 0.022, ElectrodeOffset: 0.02, ElectrodeSlope: 0.02, ElectrodeAged: 0.025}},
		{"read one buffer of another lot with the calibration in force, without calibrating", 0.005,
			map[Cause]float64{BufferLow: 0.03, BufferMid: 0.03, BufferHigh: 0.05}},
		{"repeat one reference in descending pH", 0.0093,
			map[Cause]float64{ElectrodeLag: 0.0228, CarryOver: -0.0214, AmountRise: 0.0168}},
		{"run a reference of another charge type, such as a nitrophenol, in ten sets", 0.0025,
			map[Cause]float64{Ionic: 0.0063}},
		{"repeat one reference in a second cell", 0.0084, map[Cause]float64{Path: 0.01, Blank: 0.005, CarryOver: 0.011}},
		{"repeat one reference from a fresh stock", 0.0084,
			map[Cause]float64{Stock: 0.01, ImpurityConst: 0.021, ImpurityAcid: 0.018, ReferenceLot: 0.01, Scatter: 0.05}},
		{"measure one scan again diluted 1 to 3", 0.001, map[Cause]float64{Stray: 0.004}},
		{"read the same solution with a second meter and electrode", 0.006,
			map[Cause]float64{ElectrodeOffset: 0.02, ElectrodeSlope: 0.0126, ElectrodeAged: 0.02, Compensation: 0.0085, ElectrodeLag: 0.0114}},
		{"compare the thermometer of the cell with a second one", 0.15, map[Cause]float64{CellTemperature: 1, RoomTemperature: 1}},
		{"compare the meter's temperature with a thermometer in the vessel", 0.15, map[Cause]float64{Compensation: 2}},
		{"measure a neutral filter of known absorbance", 0.002, map[Cause]float64{Gain: 0.01, Stray: 0.003}},
		{"repeat the scans of three rungs at once and after ten minutes with the cover on", 0.002,
			map[Cause]float64{CO2: 0.02, LampDrift: 0.005}},
		{"scan water against water five times", 0.0002, map[Cause]float64{Noise: 0.0006, LampDrift: 0.002, Blank: 0.005}},
	}
}

// next finds the check that would best decide between the two leading
// causes; nil where none separates them by two standard deviations.
func (l *look) next(r *ranked) *Check {
	if len(r.list) < 2 {
		return nil
	}
	a := r.list[0]
	b, found := a, false
	for _, c := range r.list[1:min(len(r.list), shown)] {
		if !l.nested(a, c) {
			b, found = c, true
			break
		}
	}
	if !found {
		return nil
	}
	ca, cb := l.m.traits[a.out.s.trait].Cause, l.m.traits[b.out.s.trait].Cause
	size := func(c rankedCause) float64 {
		s, _ := latest(l.course(c.out.s, c.shape, c.onset))
		return s * math.Max(math.Abs(c.h.theta[0]), math.Abs(c.h.theta[1]))
	}
	sign := func(c rankedCause) float64 {
		if c.h.theta[0] < 0 {
			return -1
		}
		return 1
	}
	var best *Check
	for _, t := range trials() {
		d := math.Abs(t.unit[ca]*size(a)*sign(a)-t.unit[cb]*size(b)*sign(b)) / t.sd
		if best == nil || d > best.Separation {
			best = &Check{Text: t.text, Separation: d, Between: [2]Cause{ca, cb}}
		}
	}
	if best == nil || best.Separation < 2 {
		return nil
	}
	return best
}

// nested reports whether b is a special case of a: no check between them is wanted.
func (l *look) nested(a, b rankedCause) bool {
	ca, cb := l.m.traits[a.out.s.trait].Cause, l.m.traits[b.out.s.trait].Cause
	return a.out.s.res == b.out.s.res && electrodeSize(ca) && electrodeSize(cb)
}
