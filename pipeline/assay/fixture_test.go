package assay

import (
	"math"
	"testing"
	"time"

	"pkvigil/parse"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/rehearse"
	"pkvigil/pipeline/settings"
)

// room is a quiet room that measures one dye, with faults for the first set of night 1.
func room(dye string, faults ...rehearse.Fault) *rehearse.Scenario {
	return &rehearse.Scenario{Seed: 11, Noise: rehearse.Quiet(), Faults: map[int][]rehearse.Fault{1: faults},
		Design: rehearse.Design{Dyes: []rehearse.Dye{rehearse.Dyes()[dye]}, CalibrateEvery: 1}}
}

// night gives the sets of a night.
func night(t testing.TB, sc *rehearse.Scenario, n int) []*rehearse.Set {
	t.Helper()
	sets, err := sc.Night(n)
	if err != nil {
		t.Fatal(err)
	}
	return sets
}

// input states a rehearsed set as the pipeline would after reading its files.
func input(t testing.TB, sc *rehearse.Scenario, set *rehearse.Set) Input {
	t.Helper()
	cfg, err := settings.Read(sc.Settings("/export"), "rehearsal.toml")
	if err != nil {
		t.Fatal(err)
	}
	in := Input{Key: set.Key(), Night: "2026-03-02", Method: cfg.Method, Budget: cfg.Budget, Limits: cfg.Checks, Resources: cfg.Resources,
		Instrument: *cfg.InstrumentByName(set.Instrument), Electrode: set.Electrode, NeedsCalibration: true, Home: time.UTC}
	if in.Compound, in.Lot, err = cfg.CompoundOf(set.Name); err != nil {
		t.Fatal(err)
	}
	id := int64(0)
	scan := func(role, rung string, s rehearse.Scan) {
		id++
		in.Solutions = append(in.Solutions, Solution{FileID: id, ScanID: id, Role: role, Rung: rung, PH: math.NaN(), Path: set.Stem + "_" + rung, Measured: s.Measured,
			Scan: parse.Scan{WavelengthNM: s.WavelengthNM, Absorbance: printed(s), PathMM: s.PathMM, TemperatureC: s.TemperatureC, BandwidthNM: s.BandwidthNM,
				Measured: s.Measured, Decimals: s.Decimals, Scale: "absorbance", PH: math.NaN()}})
	}
	if !set.NoBlank {
		scan(naming.RoleBlank, "", set.Blank)
	}
	for _, r := range set.Rungs {
		if !r.NoScan {
			scan(naming.RoleScan, r.Key, r.Scan)
		}
		if !r.NoRow {
			p := math.Pow(10, float64(r.Reading.Decimals))
			in.Readings = append(in.Readings, parse.Reading{Label: r.Key, PH: math.Round(r.Reading.PH*p) / p, MilliVolt: r.Reading.MV, TemperatureC: r.Reading.TemperatureC,
				SD: math.NaN(), SlopePerMin: math.NaN(), Points: 1, Measured: r.Reading.At, Electrode: set.Electrode, Meter: set.Meter})
		}
	}
	c := sc.Calibration(set.Night)
	in.Calibration = calibration(c)
	return in
}

func calibration(c rehearse.Calibration) *parse.Calibration {
	out := &parse.Calibration{Electrode: c.Electrode, Meter: c.Meter, Measured: c.At}
	for _, p := range c.Points {
		out.Points = append(out.Points, parse.CalibrationPoint{PH: p.Label, MilliVolt: p.MV, TemperatureC: p.TemperatureC, Lot: p.Lot})
	}
	return out
}

// printed rounds a scan as its file would.
func printed(s rehearse.Scan) []float64 {
	p := math.Pow(10, float64(s.Decimals))
	out := make([]float64, len(s.Absorbance))
	for i, a := range s.Absorbance {
		out[i] = math.Round(a*p) / p
	}
	return out
}

// compute computes the first set of night 1.
func compute(t testing.TB, sc *rehearse.Scenario, change ...func(*Input)) *Outcome {
	t.Helper()
	in := input(t, sc, night(t, sc, 1)[0])
	for _, f := range change {
		f(&in)
	}
	return Compute(in)
}
