package assay

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"pkvigil/parse"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
	"pkvigil/pipeline/verdict"
)

// A ladder on one side of the pKa shows no colour change: there is no number,
// and a sentence says why. Invented data.
func TestLadderWithoutColourChange(t *testing.T) {
	for _, from := range []float64{2, 3, 9.8, 11} {
		for seed := range uint64(6) {
			rng := rand.New(rand.NewPCG(seed, 1))
			in := Input{Key: "U1/2026-01-01/X", Compound: &settings.Compound{Name: "X", Charge: -1, Steps: 1, PKa: []float64{7.8}}, Instrument: settings.Instrument{Name: "U1"}}
			scan := func(a float64) parse.Scan {
				s := parse.Scan{TemperatureC: math.NaN(), PH: math.NaN(), Decimals: 5}
				for nm := 380.0; nm <= 700; nm += 2 {
					band := func(at float64) float64 { return math.Exp(-(nm - at) * (nm - at) / 1800) }
					y := a*band(560) + 0.4*(1-a)*band(433) + 0.0006*rng.NormFloat64()
					s.WavelengthNM, s.Absorbance = append(s.WavelengthNM, nm), append(s.Absorbance, y)
				}
				return s
			}
			blank := scan(0)
			for i := range blank.Absorbance {
				blank.Absorbance[i] = 0.0006 * rng.NormFloat64()
			}
			in.Solutions = append(in.Solutions, Solution{Role: naming.RoleBlank, PH: math.NaN(), Scan: blank})
			for i := range 12 {
				ph := from + 0.227*float64(i)
				rung := fmt.Sprintf("%02d", i+1)
				in.Solutions = append(in.Solutions, Solution{ScanID: int64(i + 1), Role: naming.RoleScan, Rung: rung, PH: math.NaN(), Scan: scan(1 / (1 + math.Pow(10, 7.8-ph)))})
				in.Readings = append(in.Readings, parse.Reading{Label: rung, PH: ph + 0.006*rng.NormFloat64(), MilliVolt: math.NaN(), TemperatureC: math.NaN(), SD: math.NaN(), Points: 1})
			}
			out := Compute(in)
			if v := out.Report.Verdict; v != verdict.NoNumber && v != verdict.Held || out.Report.Headline() == "" {
				t.Errorf("from pH %.1f, seed %d: %s: %s", from, seed, v, out.Report.Headline())
			}
		}
	}
}
