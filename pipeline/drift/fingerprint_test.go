package drift

import (
	"math"
	"testing"
)

// invented is a dye with bands like those of the sulfonephthaleins; positions
// as in the specification's study, shapes our own.
func invented(pka float64, z int, bandA, bandB, dT, dPH float64) Design {
	d := Design{PKa: pka, Charge: z, DPKaDT: dT, DPHDT: dPH, Buffers: []float64{4.005, 6.865, 10.012}, Ionic: 0.1}
	for i := range 12 {
		d.Ladder = append(d.Ladder, pka-2+4*float64(i)/11)
	}
	for w := 380.0; w <= 760; w += 2 {
		d.WavelengthNM = append(d.WavelengthNM, w)
		g := func(c, s, h float64) float64 { z := (w - c) / s; return h * math.Exp(-z*z/2) }
		d.Acid = append(d.Acid, g(bandA, 38, 0.40)+g(bandA+60, 40, 0.02)+g(340, 30, 0.10))
		d.Base = append(d.Base, g(bandB, 26, 0.85)+g(bandB-38, 34, 0.28)+g(390, 30, 0.12))
	}
	return d
}

func family() []Design {
	return []Design{
		invented(4.66, -1, 444, 616, -0.003, 0), invented(6.02, -1, 434, 574, -0.009, -0.011),
		invented(8.26, -1, 434, 578, -0.014, -0.020), invented(8.90, -1, 435, 596, -0.012, -0.026),
	}
}

func TestDump(t *testing.T) {
	for _, est := range []Estimator{Plain, Weighted} {
		for _, tr := range Traits() {
			for _, d := range family()[:3] {
				f, err := Fingerprint(d, tr.Cause, est)
				if err != nil {
					t.Fatal(err)
				}
				t.Logf("%-18s %.2f", tr.Cause, d.PKa)
				for _, m := range f {
					for k, v := range m {
						t.Logf("      %-22s %+.6f", k, v)
					}
				}
			}
		}
	}
}
