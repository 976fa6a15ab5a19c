package acidbase

import (
	"errors"
	"math"
	"math/rand/v2"
	"testing"
)

// TestSeriesCoverage: the stated uncertainty of each extrapolation is the
// scatter it really has, with a shared calibration error in it.
func TestSeriesCoverage(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 5))
	kinds := map[string]struct {
		points func(shared float64) []SeriesPoint
		solve  func([]SeriesPoint) (*Series, error)
		truth  float64
	}{
		"ionic strength": {
			points: func(shared float64) []SeriesPoint {
				var out []SeriesPoint
				for _, i := range []float64{0.01, 0.02, 0.04, 0.07, 0.1} {
					c, _ := Convert(8.1+0.2*i, Thermodynamic, Mixed, -1, Conditions{TemperatureC: 25, Ionic: i})
					out = append(out, SeriesPoint{PKa: c.PKa + shared + 0.004*rng.NormFloat64(), U: 0.004, TemperatureC: 25, Ionic: i})
				}
				return out
			},
			solve: func(p []SeriesPoint) (*Series, error) { return AtZeroIonicStrength(p, -1, RecipeOption{}, true) },
			truth: 8.1,
		},
		"temperature": {
			points: func(shared float64) []SeriesPoint {
				var out []SeriesPoint
				for _, c := range []float64{10, 15, 20, 25, 30, 40} {
					out = append(out, SeriesPoint{PKa: ClarkeGlew(8.1, 20, -150, 25, c) + shared + 0.004*rng.NormFloat64(), U: 0.004, TemperatureC: c})
				}
				return out
			},
			solve: func(p []SeriesPoint) (*Series, error) { return OverTemperature(p, 25, true) },
			truth: 8.1,
		},
		"cosolvent": {
			points: func(shared float64) []SeriesPoint {
				var out []SeriesPoint
				water := math.Log10(Density(25) / 1000 / molarMassWater)
				for _, x := range []float64{0.2, 0.3, 0.4, 0.5, 0.6} {
					eps, molar := 78.3-45*x, 55.3*(1-x)
					y := 4.2 + water + 110*(1/eps-1/PermittivityMM(25)) - math.Log10(molar)
					out = append(out, SeriesPoint{PKa: y + shared + 0.02*rng.NormFloat64(), U: 0.01, UComposition: math.Sqrt(0.0003), Permittivity: eps, WaterMolar: molar})
				}
				return out
			},
			solve: func(p []SeriesPoint) (*Series, error) { return YasudaShedlovsky(p, 25) },
			truth: 4.2,
		},
	}
	for name, k := range kinds {
		const sets = 4000
		inside, chi, own := 0, 0.0, 0.0
		var last *Series
		for range sets {
			shared := 0.01 * rng.NormFloat64()
			p := k.points(shared)
			for i := range p {
				p[i].Terms = []Term{{Key: "calibration", C: 1, U: 0.01, Unit: "pH"}}
			}
			s, err := k.solve(p)
			if err != nil {
				t.Fatal(err)
			}
			if math.Abs(s.Coef[0]-k.truth) < 1.96*s.U {
				inside++
			}
			chi += s.ChiSq / float64(s.DOF) / sets
			own += (s.Coef[0] - k.truth - shared) * (s.Coef[0] - k.truth - shared) / sets
			last = s
		}
		near(t, name+" coverage", float64(inside)/sets, 0.95, 0.012)
		near(t, name+" chi square per degree", chi, 1, 0.06)
		near(t, name+" own uncertainty", math.Sqrt(own)/last.UOwn, 1, 0.05)
		near(t, name+" budget", Combined(last.Terms), last.U, 1e-9)
		near(t, name+" shared sensitivity", last.Terms[0].C, 1, 1e-6)
	}
}

// An outlier is named by its distance from the line of the others.
func TestSeriesLeaveOneOut(t *testing.T) {
	var p []SeriesPoint
	for i, c := range []float64{5, 12, 20, 28, 36, 44} {
		p = append(p, SeriesPoint{PKa: VantHoff(7, 15, 25, c), U: 0.004, TemperatureC: c})
		if i == 3 {
			p[i].PKa += 0.06
		}
	}
	s, err := OverTemperature(p, 25, false)
	if err != nil {
		t.Fatal(err)
	}
	for i, z := range s.ZOut {
		if i == 3 && math.Abs(z) < 8 {
			t.Errorf("point %d: %g", i, z)
		}
		if i != 3 && math.Abs(z) >= math.Abs(s.ZOut[3]) {
			t.Errorf("point %d stands out more than the outlier: %v", i, s.ZOut)
		}
	}
	if _, err := OverTemperature(p[:1], 25, false); !errors.Is(err, ErrSeries) {
		t.Errorf("one point for two coefficients: %v", err)
	}
	if _, err := OverTemperature([]SeriesPoint{p[0], p[0]}, 25, false); !errors.Is(err, ErrSeries) {
		t.Errorf("one temperature twice: %v", err)
	}
}

// The five-point cosolvent series 20..60 % gives 1.34 sigma at 0 % when the
// abscissa is the fraction itself: the intercept formula of a straight line.
func TestInterceptFormula(t *testing.T) {
	x := [][]float64{{1, 0.2}, {1, 0.3}, {1, 0.4}, {1, 0.5}, {1, 0.6}}
	own := []float64{1, 1, 1, 1, 1}
	s, err := generalised(x, []float64{1, 2, 3, 4, 5}, own, make([][]Term, 5))
	if err != nil {
		t.Fatal(err)
	}
	near(t, "intercept", s.U, 1.34, 0.005)
}
