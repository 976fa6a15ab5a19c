package drift

import (
	"fmt"
	"math"
)

// Fingerprint gives the change of every characteristic per unit (Trait.Step) of
// a cause, for a reference or electrode with design d: one map per free size
// of the cause. Characteristics that do not move are absent. The ladder is
// simulated without noise on the design's own spectra and refitted with
// est; nil est means Weighted. Without spectra only the causes with a closed form
// are available (pH readings, true constant, scale), and for the others the maps are empty.
func Fingerprint(d Design, c Cause, est Estimator) ([]map[Characteristic]float64, error) {
	tr, ok := TraitOf(c)
	if !ok {
		return nil, fmt.Errorf("drift: no cause named %q; Traits lists them", c)
	}
	s, err := newStudy(d, est)
	if err != nil {
		return nil, err
	}
	return s.fingerprint(tr)
}

// A study is one design with its undisturbed reading, so that many causes can
// be compared with it.
type study struct {
	d     Design
	est   Estimator
	sees  bool // spectra are there
	zero  Reading
	marks marks
	base  map[Characteristic]float64
}

func newStudy(d Design, est Estimator) (*study, error) {
	d = d.filled()
	if est == nil {
		est = Weighted
	}
	s := &study{d: d, est: est, sees: d.optical() == nil}
	if !s.sees {
		return s, nil
	}
	sim := newScene(d)
	s.marks = nominalMarks(d.WavelengthNM, d.Acid, d.Base)
	a, ph := sim.measure()
	var err error
	s.zero, err = est(d, a, ph, library(d))
	if err != nil {
		return nil, fmt.Errorf("undisturbed ladder at pKa %.2f: %w", d.PKa, err)
	}
	s.base = s.values(a, s.zero)
	return s, nil
}

func library(d Design) []float64 { return append(append([]float64(nil), d.Acid...), d.Base...) }

// fingerprint computes the columns of one cause.
func (s *study) fingerprint(tr Trait) ([]map[Characteristic]float64, error) {
	switch tr.Cause {
	case ElectrodeAged:
		var out []map[Characteristic]float64
		for _, c := range []Cause{ElectrodeOffset, ElectrodeSlope} {
			t, _ := TraitOf(c)
			f, err := s.single(t)
			if err != nil {
				return nil, err
			}
			out = append(out, f)
		}
		return out, nil
	case ElectrodeAgeing:
		return []map[Characteristic]float64{{SlopeAcid: -2, SlopeBase: -2}, {PotentialMid: -4}}, nil
	case ReferenceLot:
		return []map[Characteristic]float64{{AmountIso: 0.01}, {RatioA: 0.01, RatioB: 0.01}}, nil
	}
	f, err := s.single(tr)
	return []map[Characteristic]float64{f}, err
}

// single computes the column of a cause with one size.
func (s *study) single(tr Trait) (map[Characteristic]float64, error) {
	f := map[Characteristic]float64{}
	s.records(tr, f)
	if !s.sees {
		s.closed(tr, f)
		return f, nil
	}
	sim := newScene(s.d)
	if !sim.disturb(tr.Cause, tr.Step) {
		return f, nil
	}
	a, ph := sim.measure()
	got, err := s.est(s.d, a, ph, library(s.d))
	if err != nil {
		return nil, fmt.Errorf("%s at pKa %.2f: %w", tr.Cause, s.d.PKa, err)
	}
	for k, v := range s.values(a, got) {
		if dv := v - s.base[k]; math.Abs(dv) > negligible(k) {
			f[k] += dv
		}
	}
	f[Temperature] += 0
	if f[Temperature] == 0 {
		delete(f, Temperature)
	}
	return f, nil
}

// negligible is the size below which a change of a characteristic is rounding of the simulation.
func negligible(c Characteristic) float64 {
	switch {
	case c.NormLike():
		return 1e-10
	case c == LambdaA || c == LambdaB || c == LambdaIso:
		return 1e-4
	}
	return 2e-6
}

// records adds what is recorded outside the ladder: calibration, blank, clear window, thermometer.
func (s *study) records(tr Trait, f map[Characteristic]float64) {
	d := s.d
	switch tr.Cause {
	case BufferLow, BufferMid, BufferHigh:
		bufferRecords(d.Buffers, tr, f)
	case RoomTemperature:
		f[Temperature] = tr.Step
	case Blank:
		f[ClearMean] = tr.Step
	case LampDrift:
		f[ClearTrend] = tr.Step
	case Noise:
		v := d.SigmaA * d.SigmaA
		f[BlankVar] = tr.Step * orElse(d.Centre[BlankVar], v)
		f[Third] = tr.Step * orElse(d.Centre[Third], 0.12*v)
	case Scatter:
		if n := len(d.WavelengthNM); n > 0 && len(d.Ladder) > 0 {
			mean := 0.0
			for _, p := range d.Ladder {
				mean += (1 - baseShare(d.PKa, p)) / float64(len(d.Ladder))
			}
			f[ClearMean] = tr.Step * turbidity(d.WavelengthNM[n-1]) * mean
		}
	}
}

func orElse(v, other float64) float64 {
	if v > 0 && !math.IsNaN(v) {
		return v
	}
	return other
}

// bufferRecords: a bottle whose true value is e above its label makes the
// segment next to it look e/(distance) steeper or flatter, and the potential
// in the mid buffer moves by minus 59.16 mV per pH.
func bufferRecords(b []float64, tr Trait, f map[Characteristic]float64) {
	if len(b) != 3 {
		return
	}
	e := map[string]float64{tr.Role: tr.Step}
	f[SlopeAcid] = 100 * (e["mid"] - e["low"]) / (b[1] - b[0])
	f[SlopeBase] = 100 * (e["high"] - e["mid"]) / (b[2] - b[1])
	f[PotentialMid] = -59.16 * e["mid"]
	w := (b[2] - b[1]) / (b[2] - b[0])
	f[ThirdBuffer] = e["mid"] - w*e["low"] - (1-w)*e["high"]
	for k, v := range f {
		if v == 0 {
			delete(f, k)
		}
	}
}

// closed gives the closed forms for designs without spectra: the free pKa
// follows the reading error at the pKa, the slope its derivative.
func (s *study) closed(tr Trait, f map[Characteristic]float64) {
	d := s.d
	err := readingError(d, tr.Cause, tr.Step)
	const h = 0.5
	at := func(p float64) float64 { return err(p) }
	if v := at(d.PKa); v != 0 {
		f[PKa] = v
	}
	if g := (at(d.PKa+h) - at(d.PKa-h)) / (2 * h); g != 0 {
		f[Slope] = -g / (1 + g)
	}
	switch tr.Cause {
	case RoomTemperature, CellTemperature, Ionic:
		f[PKa] = trueShift(d, tr.Cause, tr.Step)
		if tr.Cause == CellTemperature {
			f[PKa] -= d.DPHDT * tr.Step
		}
	case ElectrodeLag:
		f[PKa] = -lagShift(d.Ladder, tr.Step/100)
	case CarryOver:
		f[PKa] = lagShift(d.Ladder, tr.Step/100)
	case Gain, Path, Stock:
		f[AmountIso] = math.Log1p(tr.Step / 100)
	case WavelengthShift:
		f[LambdaA], f[LambdaB], f[LambdaIso] = tr.Step, tr.Step, tr.Step
	case AmountRise:
		f[AmountTrend] = tr.Step / 100
	}
}

func lagShift(ladder []float64, rho float64) float64 {
	if len(ladder) < 2 {
		return 0
	}
	h := (ladder[len(ladder)-1] - ladder[0]) / float64(len(ladder)-1)
	return rho * h / (1 - rho)
}

// readingError gives the error of a pH reading at true pH p for causes on the side of the electrode.
func readingError(d Design, c Cause, size float64) func(p float64) float64 {
	switch c {
	case ElectrodeOffset:
		return func(float64) float64 { return size }
	case ElectrodeSlope:
		return func(p float64) float64 { return size / 100 * (p - 7) }
	case Compensation:
		return func(p float64) float64 { return -size / (d.TemperatureC + 273.15) * (p - 7) }
	case BufferLow, BufferMid, BufferHigh:
		if len(d.Buffers) != 3 {
			return func(float64) float64 { return 0 }
		}
		j := map[Cause]int{BufferLow: 0, BufferMid: 1, BufferHigh: 2}[c]
		return func(p float64) float64 { return -size * Interpolation(d.Buffers, p)[j] }
	case CO2:
		return func(p float64) float64 {
			return -size * math.Max(0, math.Min(1, (p-d.CO2Above+0.5)))
		}
	}
	return func(float64) float64 { return 0 }
}

// Interpolation gives the weights with which the values of the calibration
// buffers (pH, ascending, at least 2) enter a reading at pH p: linear between
// neighbours, the end segments continued outside.
func Interpolation(buffers []float64, p float64) []float64 {
	w := make([]float64, len(buffers))
	k := 0
	for k < len(buffers)-2 && p > buffers[k+1] {
		k++
	}
	t := (p - buffers[k]) / (buffers[k+1] - buffers[k])
	w[k], w[k+1] = 1-t, t
	return w
}

// trueShift is the change of the constant itself, in pH units.
func trueShift(d Design, c Cause, size float64) float64 {
	switch c {
	case RoomTemperature, CellTemperature:
		return d.DPKaDT * size
	case Ionic:
		return 0.509 * float64(2*d.Charge-1) * (daviesF(d.Ionic*(1+size/100)) - daviesF(d.Ionic))
	}
	return 0
}

// daviesF is the function of ionic strength of Davies (1962) with 0.3.
func daviesF(i float64) float64 {
	r := math.Sqrt(math.Max(0, i))
	return r/(1+r) - 0.3*i
}

func baseShare(pka, ph float64) float64 { return 1 / (1 + math.Pow(10, pka-ph)) }
