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

// row is one line of the specification's fingerprint table (section 3.3, made
// by simulation with plain least squares and spectra of another shape): pKa of
// the three references, slope in percent, positions in nm, ratios and amount in
// percent, library less free. NaN: not stated, or a range (then its middle with the tolerance covering it).
type row struct {
	cause       Cause
	pka         [3]float64
	n           float64 // percent, reference 8.26; NaN not compared
	lambda      [3]float64
	ra, rb, iso float64 // percent
	lib         float64
	segments    [2]float64
}

func table() []row {
	nan := math.NaN()
	none := [3]float64{}
	return []row{
		{ElectrodeOffset, [3]float64{.020, .020, .020}, 0, none, 0, 0, 0, 0, [2]float64{}},
		{ElectrodeSlope, [3]float64{.023, .010, -.013}, 1.0, none, nan, nan, 0, 0, [2]float64{}},
		{BufferLow, [3]float64{-.023, -.009, 0}, 0, none, nan, nan, 0, 0, [2]float64{-1.05, 0}},
		{BufferMid, [3]float64{-.007, -.022, -.017}, -1.0, none, nan, nan, 0, 0, [2]float64{1.05, -.95}},
		{BufferHigh, [3]float64{0, -.001, .022}, -1.6, none, nan, nan, 0, 0, [2]float64{0, -1.59}},
		{ElectrodeAgeing, [3]float64{}, 0, none, 0, 0, 0, 0, [2]float64{-2, -2}},
		{Compensation, [3]float64{.016, .007, -.009}, .68, none, nan, nan, 0, 0, [2]float64{}},
		{RoomTemperature, [3]float64{-.003, -.009, -.014}, 0, none, 0, 0, 0, 0, [2]float64{}},
		{CellTemperature, [3]float64{-.003, .002, .006}, 0, none, 0, 0, 0, 0, [2]float64{}},
		{WavelengthShift, none, 0, [3]float64{.5, .5, .5}, -3.1, 3.0, 0, nan, [2]float64{}},
		{WavelengthTilt, none, 0, [3]float64{-.25, .06, -.1}, .7, -.7, 0, -.001, [2]float64{}},
		{Stray, [3]float64{-.0017, -.0017, -.0017}, .06, none, -.06, -.42, -.2, .0024, [2]float64{}},
		{Bandwidth, [3]float64{-.0002, -.0002, -.0002}, 0, none, -.25, -.35, .2, .0006, [2]float64{}},
		{Gain, none, 0, none, 0, 0, 1, 0, [2]float64{}},
		{ImpurityConst, none, 0, [3]float64{-.15, 0, 0}, nan, -2.1, 2.1, .023, [2]float64{}}, // its band is ours
		{ImpurityAcid, [3]float64{.018, .018, .018}, -1.7, [3]float64{-.34, -.22, -.26}, 1.5, -1.7, -.2, .003, [2]float64{}},
		{Ionic, [3]float64{-.009, -.009, -.009}, 0, none, 0, 0, 0, 0, [2]float64{}},
		{AmountRise, [3]float64{.008, .008, .008}, -.6, [3]float64{0, 0, -.15}, 0, 0, 0, -.008, [2]float64{}},
		{ElectrodeLag, [3]float64{-.011, -.011, -.011}, 0, none, 0, 0, 0, 0, [2]float64{}},
		{CarryOver, [3]float64{.011, .011, .011}, -.5, none, 0, 0, 0, 0, [2]float64{}},
	}
}

// The pH side does not depend on the shapes of spectra and must agree to the
// table's last digit; the optical side depends on them and must agree in
// sign and within a factor of two where the table has a size.
func TestFingerprintTable(t *testing.T) {
	for _, r := range table() {
		for i, d := range family()[:3] {
			cols, err := Fingerprint(d, r.cause, Plain)
			if err != nil {
				t.Fatal(err)
			}
			f := map[Characteristic]float64{}
			for _, c := range cols {
				for k, v := range c {
					f[k] += v
				}
			}
			close := func(what string, got, want, abs float64) {
				if !math.IsNaN(want) && math.Abs(got-want) > abs {
					t.Errorf("%s at pKa %.2f: %s %+.5f, the table has %+.5f", r.cause, d.PKa, what, got, want)
				}
			}
			rough := func(what string, got, want, nothing float64) {
				switch {
				case math.IsNaN(want):
				case want == 0:
					close(what, got, 0, nothing)
				case got*want < 0 || math.Abs(got) > 2.2*math.Abs(want)+nothing/2 || math.Abs(got) < 0.45*math.Abs(want)-nothing/2:
					t.Errorf("%s at pKa %.2f: %s %+.5f, the table has %+.5f", r.cause, d.PKa, what, got, want)
				}
			}
			close("pKa", f[PKa], r.pka[i], 0.0008)
			if i == 2 {
				close("slope, %", 100*f[Slope], r.n, 0.11)
			}
			close("slope of the acid segment", f[SlopeAcid], r.segments[0], 0.006)
			close("slope of the alkaline segment", f[SlopeBase], r.segments[1], 0.006)
			for k, c := range []Characteristic{LambdaA, LambdaB, LambdaIso} {
				rough(string(c), f[c], r.lambda[k], 0.08)
			}
			rough("acid ratio, %", 100*f[RatioA], r.ra, 0.16)
			rough("base ratio, %", 100*f[RatioB], r.rb, 0.24)
			rough("amount, %", 100*f[AmountIso], r.iso, 0.25)
			rough("library", f[Library], r.lib, 0.0012)
		}
	}
}

// With the estimator of the charts, in which amounts and readings have errors
// of their own, the same disturbances must move what they moved before.
func TestWeightedFingerprints(t *testing.T) {
	for _, d := range family()[:3] {
		for _, c := range []Cause{ElectrodeOffset, ElectrodeSlope, RoomTemperature, WavelengthShift, Gain, ImpurityConst, ImpurityAcid, AmountRise, ElectrodeLag, CarryOver} {
			p, err := Fingerprint(d, c, Plain)
			if err != nil {
				t.Fatal(err)
			}
			w, err := Fingerprint(d, c, Weighted)
			if err != nil {
				t.Fatal(err)
			}
			if d.PKa < 5 {
				t.Logf("%s at %.2f: pKa %+.5f weighted, %+.5f plain; slope %+.4f, %+.4f; library %+.5f, %+.5f; amount trend %+.4f", c, d.PKa,
					w[0][PKa], p[0][PKa], w[0][Slope], p[0][Slope], w[0][Library], p[0][Library], w[0][AmountTrend])
			}
			switch c {
			case ElectrodeOffset, ElectrodeSlope, RoomTemperature, ElectrodeLag:
				if math.Abs(w[0][PKa]-p[0][PKa]) > 0.001 {
					t.Errorf("%s at %.2f: pKa %+.5f weighted, %+.5f plain", c, d.PKa, w[0][PKa], p[0][PKa])
				}
			case WavelengthShift, Gain, ImpurityConst:
				if math.Abs(w[0][PKa]) > 0.0002 {
					t.Errorf("%s at %.2f moves the free pKa by %+.5f", c, d.PKa, w[0][PKa])
				}
			case AmountRise:
				// the prior of the amounts is 0.3 %, so most of it is taken for pH errors
				if w[0][AmountTrend] < 0.0005 || w[0][PKa] > p[0][PKa] {
					t.Errorf("%s at %.2f: trend of the amount %+.4f, 0.02 went in; pKa %+.5f", c, d.PKa, w[0][AmountTrend], w[0][PKa])
				}
			}
		}
	}
}

// Without spectra the closed forms stand in for the simulation.
func TestClosedForms(t *testing.T) {
	for _, d := range family()[:3] {
		bare := d
		bare.WavelengthNM, bare.Acid, bare.Base = nil, nil, nil
		for _, tr := range Traits() {
			if tr.Columns != 1 {
				continue
			}
			f, err := Fingerprint(d, tr.Cause, Plain)
			if err != nil {
				t.Fatal(err)
			}
			g, err := Fingerprint(bare, tr.Cause, nil)
			if err != nil {
				t.Fatal(err)
			}
			if _, has := g[0][PKa]; has && math.Abs(g[0][PKa]-f[0][PKa]) > 0.003 {
				t.Errorf("%s at %.2f: pKa %+.5f in closed form, %+.5f simulated", tr.Cause, d.PKa, g[0][PKa], f[0][PKa])
			}
		}
	}
	if _, err := Fingerprint(family()[0], "gremlins", nil); err == nil {
		t.Error("an unknown cause has a fingerprint")
	}
}
