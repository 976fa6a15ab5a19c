package rehearse

import (
	"math"
	"testing"
)

// plainFit is least squares with free limit spectra: for a trial pKa and slope
// the spectra are eliminated; pKa and slope are found by Newton steps on
// differences. It belongs to the tests alone and knows nothing of the program's fit.
func plainFit(s *Set, start float64, x0 int) (pka, slope float64) {
	m := len(s.Rungs)
	w := len(s.Rungs[0].Scan.Absorbance)
	cost := func(p, n float64) float64 {
		// Columns 1 and alpha, orthonormalised.
		c := make([]float64, m)
		var mean float64
		for i, r := range s.Rungs {
			c[i] = 1 / (1 + math.Pow(10, n*(p-r.Reading.PH)))
			mean += c[i] / float64(m)
		}
		var norm float64
		for i := range c {
			c[i] -= mean
			norm += c[i] * c[i]
		}
		var sum float64
		for j := x0; j < w; j++ {
			var yBar, proj, sq float64
			for i, r := range s.Rungs {
				yBar += r.Scan.Absorbance[j] / float64(m)
				proj += c[i] * r.Scan.Absorbance[j]
			}
			for _, r := range s.Rungs {
				d := r.Scan.Absorbance[j] - yBar
				sq += d * d
			}
			sum += sq - proj*proj/norm
		}
		return sum
	}
	pka, slope = start, 1
	const h = 1e-3
	for range 8 {
		f := func(a, b float64) float64 { return cost(pka+a*h, slope+b*h) }
		f0, fp, fm, gp, gm := f(0, 0), f(1, 0), f(-1, 0), f(0, 1), f(0, -1)
		a := (fp - 2*f0 + fm) / (h * h)
		c := (gp - 2*f0 + gm) / (h * h)
		b := (f(1, 1) - f(1, -1) - f(-1, 1) + f(-1, -1)) / (4 * h * h)
		u, v := (fp-fm)/(2*h), (gp-gm)/(2*h)
		det := a*c - b*b
		pka -= (c*u - b*v) / det
		slope -= (a*v - b*u) / det
	}
	return pka, slope
}

// plainPKa is the same with the slope fixed at one, as the requirements'
// fingerprint table was made.
func plainPKa(s *Set, start float64) float64 {
	m := len(s.Rungs)
	cost := func(p float64) float64 {
		c := make([]float64, m)
		var mean, norm, sum float64
		for i, r := range s.Rungs {
			c[i] = 1 / (1 + math.Pow(10, p-r.Reading.PH))
			mean += c[i] / float64(m)
		}
		for i := range c {
			c[i] -= mean
			norm += c[i] * c[i]
		}
		for j := range s.Rungs[0].Scan.Absorbance {
			var yBar, proj, sq float64
			for i, r := range s.Rungs {
				yBar += r.Scan.Absorbance[j] / float64(m)
				proj += c[i] * r.Scan.Absorbance[j]
			}
			for _, r := range s.Rungs {
				d := r.Scan.Absorbance[j] - yBar
				sq += d * d
			}
			sum += sq - proj*proj/norm
		}
		return sum
	}
	p := start
	const h = 1e-3
	for range 8 {
		a, b, c := cost(p-h), cost(p), cost(p+h)
		p -= h / 2 * (c - a) / (c - 2*b + a)
	}
	return p
}

// quietRoom measures one dye with one cause and no scatter. Readings are not
// rounded away: 0.001 in pH averages out over twelve rungs to 0.0003.
func quietRoom(t *testing.T, d Dye, causes ...Cause) *Set {
	t.Helper()
	for i := range causes {
		if causes[i].Kind == ElectrodeOffset || causes[i].Kind == ElectrodeSlope {
			causes[i].Onset = 2 // after the only calibration, in the evening of night 1
		}
	}
	sc := &Scenario{Seed: 3, Design: Design{Dyes: []Dye{d}}, Noise: Silent(), Causes: causes}
	sets, err := sc.Night(2)
	if err != nil {
		t.Fatal(err)
	}
	return sets[0]
}

func TestUndisturbedSetGivesItsConstant(t *testing.T) {
	for name, d := range Dyes() {
		s := quietRoom(t, d)
		p, n := plainFit(s, d.PKa[0], 0)
		if math.Abs(p-d.PKa[0]) > 3e-4 || math.Abs(n-1) > 5e-4 {
			t.Errorf("%s: pKa %.5f slope %.5f, expected %.3f and 1", name, p, n, d.PKa[0])
		}
	}
}

// Figures of the requirements' section 3.2 and 3.3 (derived and simulated
// there with plain least squares), for pKa 4.66, 6.02, 8.26 and 8.90.
func TestCausesMovePKaAsTheEquationsSay(t *testing.T) {
	dyes := []Dye{Dyes()["RI-A"], Dyes()["RI-B"], Dyes()["RI-C"], Dyes()["TB"]}
	nan := math.NaN()
	for _, c := range []struct {
		kind   CauseKind
		size   float64
		want   [4]float64
		within float64
	}{
		{ElectrodeOffset, 0.02, [4]float64{0.020, 0.020, 0.020, 0.020}, 0.0004},
		{ElectrodeSlope, -1, [4]float64{0.0234, 0.0098, -0.0126, -0.0190}, 0.0005},
		{BufferLow, 0.03, [4]float64{-0.023, -0.009, 0, 0}, 0.0012},
		{BufferMid, 0.03, [4]float64{-0.007, -0.022, -0.017, -0.011}, 0.0012},
		{BufferHigh, -0.05, [4]float64{0, -0.001, 0.0220, 0.0323}, 0.0012},
		{ElectrodeAgeing, -2, [4]float64{0, 0, 0, 0}, 0.0004},
		{MeterCompensates, 2, [4]float64{0.016, 0.007, -0.009, nan}, 0.0008},
		{RoomTemperature, 1, [4]float64{-0.003, -0.009, -0.014, nan}, 0.0005},
		{ElectrodeLag, 3, [4]float64{-0.0114, -0.0114, -0.0114, -0.0114}, 0.0006},
		{CarryOver, 3, [4]float64{0.0107, 0.0107, 0.0107, 0.0107}, 0.0008},
		{IonicStrength, 10, [4]float64{-0.0094, -0.0094, -0.0094, -0.0094}, 0.0006},
		{ScaleShift, 0.5, [4]float64{0, 0, 0, 0}, 0.0004},
		{ScaleTilt, 0.2, [4]float64{0, 0, 0, 0}, 0.0004},
		{Gain, 1, [4]float64{0, 0, 0, 0}, 0.0004},
		{PathLength, 1, [4]float64{0, 0, 0, 0}, 0.0004},
		{StockStrength, 1, [4]float64{0, 0, 0, 0}, 0.0004},
		{ConstantImpurity, 2, [4]float64{0, 0, 0, 0}, 0.0004},
		{BlankOffset, 5, [4]float64{0, 0, 0, 0}, 0.0004},
		{StrayLight, 0.2, [4]float64{-0.0017, -0.0017, -0.0017, -0.0017}, 0.0008},
		{Bandwidth, 2, [4]float64{-0.0002, -0.0002, -0.0002, -0.0002}, 0.0006},
		{SecondDye, 3, [4]float64{0.018, 0.018, 0.018, 0.018}, 0.003},
		{AmountTrend, 2, [4]float64{0.0084, 0.0084, 0.0084, 0.0084}, 0.003},
		{CarbonDioxide, 0.02, [4]float64{0, 0, -0.017, nan}, 0.003},
		{LowScatter, 10, [4]float64{-0.001, -0.001, -0.001, nan}, 0.0015},
	} {
		for i, d := range dyes {
			if math.IsNaN(c.want[i]) {
				continue
			}
			got := plainPKa(quietRoom(t, d, Cause{Kind: c.kind, Size: c.size}), d.PKa[0]) - plainPKa(quietRoom(t, d), d.PKa[0])
			if math.Abs(got-c.want[i]) > c.within {
				t.Errorf("%s %g: pKa %.2f moved by %+.4f, expected %+.4f +- %.4f", c.kind, c.size, d.PKa[0], got, c.want[i], c.within)
			}
		}
	}
}

// Slopes n of the titration, per cent, from the same sections.
func TestCausesMoveSlopeAsTheEquationsSay(t *testing.T) {
	dyes := []Dye{Dyes()["RI-A"], Dyes()["RI-B"], Dyes()["RI-C"], Dyes()["TB"]}
	for _, c := range []struct {
		kind   CauseKind
		size   float64
		want   [4]float64
		within float64
	}{
		{ElectrodeOffset, 0.02, [4]float64{0, 0, 0, 0}, 0.05},
		{ElectrodeSlope, -1, [4]float64{1.0, 1.0, 1.0, 1.0}, 0.05},
		{BufferMid, 0.03, [4]float64{1.06, 1.14, -0.99, -0.94}, 0.12},
		{BufferHigh, -0.05, [4]float64{0, 0, -1.6, -1.6}, 0.12},
		{MeterCompensates, 2, [4]float64{0.68, 0.68, 0.68, 0.68}, 0.05},
		{ElectrodeLag, 3, [4]float64{0, 0, 0, 0}, 0.05},
		{CarryOver, 3, [4]float64{-0.5, -0.5, -0.5, -0.5}, 0.35},
		{SecondDye, 3, [4]float64{-1.7, -1.7, -1.7, -1.7}, 0.4},
		{AmountTrend, 2, [4]float64{-0.57, -0.57, -0.57, -0.57}, 0.25},
		{ScaleShift, 0.5, [4]float64{0, 0, 0, 0}, 0.03},
	} {
		for i, d := range dyes {
			_, n0 := plainFit(quietRoom(t, d), d.PKa[0], 0)
			_, n1 := plainFit(quietRoom(t, d, Cause{Kind: c.kind, Size: c.size}), d.PKa[0], 0)
			if got := 100 * (n1 - n0); math.Abs(got-c.want[i]) > c.within {
				t.Errorf("%s %g: slope of pKa %.2f moved by %+.2f %%, expected %+.2f +- %.2f", c.kind, c.size, d.PKa[0], got, c.want[i], c.within)
			}
		}
	}
}

// Segment slopes of the calibration, per cent, from the same sections.
func TestBuffersMoveSegmentSlopes(t *testing.T) {
	slopes := func(causes ...Cause) (acid, base float64) {
		sc := &Scenario{Seed: 3, Noise: Silent(), Causes: causes}
		c := sc.Calibration(2)
		return c.SegmentSlope(0), c.SegmentSlope(1)
	}
	a0, b0 := slopes()
	for _, c := range []struct {
		cause      Cause
		acid, base float64
	}{
		{Cause{Kind: BufferLow, Size: 0.03}, -1.05, 0},
		{Cause{Kind: BufferMid, Size: 0.03}, 1.05, -0.95},
		{Cause{Kind: BufferHigh, Size: -0.05}, 0, -1.59},
		{Cause{Kind: ElectrodeAgeing, Size: -2}, -2, -2},
		{Cause{Kind: ElectrodeOffset, Size: 0.02, Onset: 2}, 0, 0},
	} {
		a, b := slopes(c.cause)
		if math.Abs(100*(a/a0-1)-c.acid) > 0.02 || math.Abs(100*(b/b0-1)-c.base) > 0.02 {
			t.Errorf("%s: segment slopes moved by %+.2f and %+.2f %%, expected %+.2f and %+.2f",
				c.cause.Kind, 100*(a/a0-1), 100*(b/b0-1), c.acid, c.base)
		}
	}
}

// What drifted before a calibration is taken out by it and shows in its millivolts.
func TestCalibrationTakesDriftOut(t *testing.T) {
	d := Dyes()["RI-A"]
	sc := &Scenario{Seed: 3, Design: Design{Dyes: []Dye{d}, CalibrateEvery: 7}, Noise: Silent(),
		Causes: []Cause{{Kind: ElectrodeOffset, Onset: 3, Size: 0.02}}}
	for _, c := range []struct {
		night int
		want  float64
	}{{2, 0}, {3, 0.02}, {7, 0.02}, {8, 0}, {10, 0}} {
		sets, err := sc.Night(c.night)
		if err != nil {
			t.Fatal(err)
		}
		if got := plainPKa(sets[0], d.PKa[0]) - d.PKa[0]; math.Abs(got-c.want) > 5e-4 {
			t.Errorf("night %d: pKa moved by %+.4f, expected %+.4f", c.night, got, c.want)
		}
	}
	before, after := sc.Calibration(1), sc.Calibration(8)
	if moved := after.Points[1].MV - before.Points[1].MV; math.Abs(moved+0.02*nernstMV(25)) > 0.02 {
		t.Errorf("calibration of night 8 moved by %.3f mV, expected %.3f", moved, -0.02*nernstMV(25))
	}
}

// The down ladder reverses lag and carry-over, and nothing else.
func TestDownLadderReverses(t *testing.T) {
	d := Dyes()["RI-C"]
	for _, c := range []struct {
		kind     CauseKind
		reverses bool
	}{{ElectrodeLag, true}, {CarryOver, true}, {RoomTemperature, false}, {BufferHigh, false}} {
		moved := func(down bool) float64 {
			size := 3.0
			if c.kind == BufferHigh {
				size = -0.05
			}
			sc := &Scenario{Seed: 3, Design: Design{Dyes: []Dye{d}, Down: down}, Noise: Silent(), Causes: []Cause{{Kind: c.kind, Size: size}}}
			sets, err := sc.Night(1)
			if err != nil {
				t.Fatal(err)
			}
			return plainPKa(sets[0], d.PKa[0]) - d.PKa[0]
		}
		up, down := moved(false), moved(true)
		if math.Abs(up) < 0.005 {
			t.Errorf("%s: no effect (%+.4f)", c.kind, up)
		}
		want := up
		if c.reverses {
			want = -up
		}
		if math.Abs(down-want) > 0.0006 {
			t.Errorf("%s: up %+.4f, down %+.4f, expected %+.4f", c.kind, up, down, want)
		}
	}
}

// Ionic strength +10 % by charge type: -0.0094, -0.0031, +0.0031 for z = -1,
// 0, +1 by the slope at 0.1 mol/L (the finite step is 5 % less, since f bends).
func TestIonicStrengthByChargeType(t *testing.T) {
	for z, want := range map[int]float64{-1: -0.0094, 0: -0.0031, 1: 0.0031} {
		if got := 100 * shiftIonic(z, 0.1, 0.1001, 25); math.Abs(got-want) > 5e-5 {
			t.Errorf("z = %d: %+.5f, expected %+.4f", z, got, want)
		}
	}
	// f(0.1) = 0.210 and, for z = -1, an activity correction of 0.32.
	if f := daviesTerm(0.1); math.Abs(f-0.210) > 5e-4 {
		t.Errorf("f(0.1) = %.4f, expected 0.210", f)
	}
	if got := Thermodynamic(4.66, -1, 0.1, 25); math.Abs(got-(4.66+3*0.509*0.2102)) > 2e-4 {
		t.Errorf("thermodynamic constant %.4f", got)
	}
}

// One kJ/mol is -5.9e-4 per K; the Nernst slope at 25 C is 59.16 mV.
func TestSmallPhysics(t *testing.T) {
	if got := EnthalpySlope(1, 25); math.Abs(got+5.88e-4) > 2e-6 {
		t.Errorf("van 't Hoff %.3e", got)
	}
	if got := nernstMV(25); math.Abs(got-59.159) > 0.001 {
		t.Errorf("Nernst slope %.4f mV", got)
	}
}

// Stray light in numbers: s = 0.1 % lets A = 2 read 1.9591 (-log10(0.01099)).
func TestStrayLightCompresses(t *testing.T) {
	o := Optics{Stray: 0.001}
	y := o.record([]float64{500, 502}, func(float64) float64 { return 2 }, nil)
	if want := -math.Log10(0.011 / 1.001); math.Abs(y[0]-want) > 1e-12 {
		t.Errorf("A = %.5f, expected %.5f", y[0], want)
	}
}

// A wider slit lowers the top of a Gaussian band by 0.46 (B/FWHM)^2 of its
// height; widening from 2 to 4 nm takes away the difference.
func TestBandwidthFlattensTop(t *testing.T) {
	const sd, top = 20.0, 0.02 // low absorbance, so that transmittance averages like absorbance
	fwhm := sd * 2 * math.Sqrt(2*math.Ln2)
	c := Conditions{}
	if err := Bandwidth.act(&c, 2); err != nil {
		t.Fatal(err)
	}
	band := Form{[]Band{{500, sd, top}}}
	y := c.Optics.record([]float64{500, 502}, func(nm float64) float64 { return band.at(nm, 0) }, nil)
	want := -0.46 * (16 - 4) / (fwhm * fwhm)
	if got := y[0]/top - 1; math.Abs(got/want-1) > 0.06 {
		t.Errorf("top lower by %.5f, expected %.5f", got, want)
	}
}
