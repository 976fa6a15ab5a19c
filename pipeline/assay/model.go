package assay

import (
	"fmt"
	"math"
	"slices"

	"pkvigil/parse"
	"pkvigil/pipeline/acidbase"
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/spectra"
	"pkvigil/pipeline/verdict"
)

// Defaults of what settings may leave out: typical of careful work (common practice, no source).
const (
	defaultSigmaPH   = 0.006  // pH, reading repeatability
	defaultUAmount   = 0.003  // relative scatter of the dye between rungs
	defaultUBaseline = 0.0008 // absorbance
	defaultSigmaA    = 0.0006 // absorbance
	uncalibrated     = 0.03   // pH, standard uncertainty of readings without a calibration on record
)

func or(v, d float64) float64 {
	if v > 0 {
		return v
	}
	return d
}

// steps is the number of constants to fit.
func (in *Input) steps() int {
	if in.Compound != nil && in.Compound.Steps > 0 {
		return in.Compound.Steps
	}
	return 1
}

// dpkadt is the temperature coefficient of the compound, 0 when unknown.
func (in *Input) dpkadt() float64 {
	c := in.Compound
	switch {
	case c == nil:
		return 0
	case c.DPKaDT != 0:
		return c.DPKaDT
	case c.EnthalpyKJ != 0:
		return acidbase.DPKaDT(c.EnthalpyKJ, 25)
	}
	return 0
}

// problem states the measurement model of a prepared set.
func (in *Input) problem(p *spectra.Prepared, pr pairing, el *acidbase.Electrode) fit.Problem {
	m := len(p.Keys)
	sigma := make([]float64, m)
	for i, k := range p.Keys {
		s := or(in.Instrument.SigmaPH, defaultSigmaPH)
		if pr.coarse > 0 {
			s = math.Hypot(s, pr.coarse/math.Sqrt(12))
		}
		sigma[i] = math.Hypot(s, pr.sd[k])
	}
	return fit.Problem{
		WavelengthNM: p.WavelengthNM, A: p.A, PH: p.PH, Steps: in.steps(), Start: in.start(),
		NoiseRung: p.NoiseRung, NoiseWave: p.NoiseWave, SigmaPH: sigma,
		UAmount: or(in.Instrument.UAmount, defaultUAmount), UBaseline: or(in.Instrument.UBaseline, defaultUBaseline),
		Shared: in.shared(p.PH, el),
	}
}

// start gives the expected constants only where the fit cannot find them by
// itself: a start that is wrong costs nothing with one step and misleads with more.
func (in *Input) start() []float64 { return nil }

// shared lists everything this set has in common with others, each once.
func (in *Input) shared(ph []float64, el *acidbase.Electrode) []fit.Shared {
	m, n := len(ph), in.steps()
	one := make([]float64, m)
	direct := make([]float64, n)
	for i := range one {
		one[i] = 1
	}
	for k := range direct {
		direct[k] = 1
	}
	inf := math.Inf(1)
	var out []fit.Shared
	if el == nil {
		out = append(out, fit.Shared{Key: "uncalibrated:" + in.Instrument.Name + ":" + in.Night, Name: "no calibration on record", U: uncalibrated, Unit: "pH", DOF: inf, S: one, Bucket: "run"})
	} else {
		out = append(out, in.calibrationErrors(ph, el)...)
	}
	medium := "medium"
	if in.Compound != nil && in.Compound.Medium != "" {
		medium = in.Compound.Medium
	}
	if u := in.Budget.UJunction; u > 0 {
		out = append(out, fit.Shared{Key: "junction:" + medium, Name: "residual liquid-junction potential", U: u, Unit: "pH", DOF: inf, S: one, Bucket: "lab"})
	}
	if d := in.dpkadt(); d != 0 && in.Budget.UTemperature > 0 {
		out = append(out, fit.Shared{Key: "temperature:" + in.Instrument.Name + ":" + in.Night, Name: "temperature of the cell", U: in.Budget.UTemperature, Unit: "K", DOF: inf, Direct: scaled(direct, -d), Bucket: "run"})
	}
	if c := in.Compound; c != nil && c.Ionic > 0 && c.UIonicRel > 0 {
		if conv, err := acidbase.Convert(7, acidbase.Thermodynamic, acidbase.Mixed, c.Charge, in.conditions(25)); err == nil && len(conv.Terms) > 0 {
			out = append(out, fit.Shared{Key: "ionic:" + medium, Name: "ionic strength of the ladder", U: c.Ionic * c.UIonicRel, Unit: "mol/L", DOF: inf, Direct: scaled(direct, -conv.Terms[0].C), Bucket: "run"})
		}
	}
	if u := in.Budget.UImpurity; u > 0 {
		out = append(out, fit.Shared{Key: "impurity:" + in.lotKey(), Name: "second dye below its detection limit", U: u, Unit: "pH", DOF: inf, Direct: direct, Bucket: "own"})
	}
	return out
}

func (in *Input) lotKey() string {
	if in.Compound == nil {
		return in.Key
	}
	return in.Compound.Name + ":" + in.Lot
}

func scaled(v []float64, by float64) []float64 {
	out := slices.Clone(v)
	for i := range out {
		out[i] *= by
	}
	return out
}

// calibrationErrors are the errors of the buffers, of the potentials read in
// them, and of the drift since.
func (in *Input) calibrationErrors(ph []float64, el *acidbase.Electrode) []fit.Shared {
	inf := math.Inf(1)
	cal := "calibration:" + in.Electrode + ":" + in.Calibration.Measured.UTC().Format("2006-01-02T15:04")
	var out []fit.Shared
	for _, e := range el.Shared(ph) {
		switch e.Kind {
		case acidbase.BufferValue:
			u := in.Budget.UBuffer
			for _, r := range in.Resources {
				if r.Kind == "buffer" && r.Name == e.Lot && r.U > 0 {
					u = r.U
				}
			}
			if u > 0 {
				out = append(out, fit.Shared{Key: "buffer:" + e.Lot, Name: fmt.Sprintf("value of buffer %s (pH %.3f)", e.Lot, e.Label), U: u, Unit: "pH", DOF: inf, S: e.S, Bucket: "lab"})
			}
		case acidbase.PointReading:
			if u := in.Budget.UCalibration; u > 0 {
				out = append(out, fit.Shared{Key: fmt.Sprintf("%s:%.3f", cal, e.Label), Name: fmt.Sprintf("potential read in buffer pH %.3f", e.Label), U: u, Unit: "mV", DOF: inf, S: e.S, Bucket: "run"})
			}
		case acidbase.Offset:
			days := math.Max(in.ageHours(), 0) / 24
			if u := in.Budget.UDriftPerDay * days; u > 0 {
				out = append(out, fit.Shared{Key: "drift:" + cal, Name: "drift of the electrode since its calibration", U: u, Unit: "pH", DOF: inf, S: e.S, Bucket: "run"})
			}
		}
	}
	return out
}

// ageHours is the time from the calibration to the first scan; 0 unknown.
func (in *Input) ageHours() float64 {
	if in.Calibration == nil || in.Calibration.Measured.IsZero() {
		return 0
	}
	var first float64
	for _, s := range in.Solutions {
		if !s.Measured.IsZero() {
			h := s.Measured.Sub(in.Calibration.Measured).Hours()
			if first == 0 || h < first {
				first = h
			}
		}
	}
	return first
}

// conditions of the ladder for conversions between kinds of constant.
func (in *Input) conditions(tC float64) acidbase.Conditions {
	c := acidbase.Conditions{TemperatureC: tC}
	if m, err := acidbase.ParseModel(in.Method.Activity); err == nil {
		c.Model = m
	}
	if in.Compound != nil {
		c.Ionic, c.UIonic = in.Compound.Ionic, in.Compound.Ionic*in.Compound.UIonicRel
		medium := in.Compound.Medium
		if medium == "" {
			medium = "medium"
		}
		c.IonicKey = "ionic:" + medium
	}
	return c
}

// Calibrate turns a recorded calibration into an electrode.
func Calibrate(c *parse.Calibration) (*acidbase.Electrode, error) {
	tC := 25.0
	var pts []acidbase.CalPoint
	n, sum := 0, 0.0
	for _, p := range c.Points {
		pts = append(pts, acidbase.CalPoint{PH: p.PH, MilliVolt: p.MilliVolt, TemperatureC: p.TemperatureC, Lot: p.Lot})
		if !math.IsNaN(p.TemperatureC) {
			n, sum = n+1, sum+p.TemperatureC
		}
	}
	if n > 0 {
		tC = sum / float64(n)
	}
	return acidbase.Calibrate(pts, tC)
}

// calibrationFacts is what the checks see of a calibration.
func (in *Input) calibrationFacts(el *acidbase.Electrode, refused error) *verdict.Calibration {
	if in.Calibration == nil {
		return nil
	}
	c := &verdict.Calibration{Electrode: in.Electrode, AgeHours: in.ageHours()}
	if refused != nil {
		c.Refused = refused.Error()
		return c
	}
	for _, s := range el.Segments {
		c.SlopesPct = append(c.SlopesPct, s.Percent)
	}
	c.Potential7 = el.PotentialAt7
	for _, r := range el.Residual {
		if !math.IsNaN(r) {
			c.Residuals = append(c.Residuals, r)
		}
	}
	c.LowestPH, c.HighestPH = el.Points[0].PH, el.Points[len(el.Points)-1].PH
	return c
}

// limits turns the settings' overrides into the limits of this set.
func (in *Input) limits() verdict.Limits {
	out := verdict.Limits{}
	for k, v := range verdict.Defaults {
		out[k] = v
	}
	if h := in.Method.CalibrationAge.Hours(); h > 0 {
		l := out["calibration.age"]
		l.Hold = verdict.AtMost(h)
		if l.Note.High > h {
			l.Note = l.Hold
		}
		out["calibration.age"] = l
	}
	for pass := range 2 { // general limits first, then those of the compound or instrument
		for _, s := range in.Limits {
			forAll := s.Compound == ""
			mine := s.Compound == in.Instrument.Name || (in.Compound != nil && s.Compound == in.Compound.Name)
			if (pass == 0) != forAll || (!forAll && !mine) {
				continue
			}
			l := out[s.Check]
			if b, ok := band(s.Note, l.Note); ok {
				l.Note = b
			}
			if b, ok := band(s.Hold, l.Hold); ok {
				l.Hold = b
			}
			l.Off = s.Off
			out[s.Check] = l
		}
	}
	return out
}

// band reads one or two numbers; one number takes the side the default has.
func band(v []float64, def verdict.Band) (verdict.Band, bool) {
	switch len(v) {
	case 1:
		switch {
		case math.IsInf(def.High, 1):
			return verdict.AtLeast(v[0]), true
		case math.IsInf(def.Low, -1):
			return verdict.AtMost(v[0]), true
		}
		return verdict.Within(v[0]), true
	case 2:
		return verdict.Band{Low: v[0], High: v[1]}, true
	}
	return def, false
}

// instrumentCeiling is the absorbance above which wavelengths take no part.
func (in *Input) instrumentCeiling() float64 {
	if in.Instrument.Ceiling > 0 {
		return in.Instrument.Ceiling
	}
	return in.Method.Ceiling
}

// preparation are the options for the spectra.
func (in *Input) preparation() spectra.Options {
	o := spectra.Options{Ceiling: in.instrumentCeiling(), SigmaA: or(in.Instrument.SigmaA, defaultSigmaA), Forms: in.steps() + 1}
	if c := in.Compound; c != nil {
		if len(c.Range) == 2 {
			o.RangeNM = [2]float64{c.Range[0], c.Range[1]}
		}
		for i := 0; i+1 < len(c.Clear); i += 2 {
			o.Clear = append(o.Clear, [2]float64{c.Clear[i], c.Clear[i+1]})
		}
		o.NominalMM = c.PathMM
	}
	if in.Method.SubstituteBlank {
		o.Substitute = in.Substitute
	}
	return o
}
