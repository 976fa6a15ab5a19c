package chart

import (
	"math"
	"math/rand/v2"
	"testing"
)

// Intervals must cover what they say: onset 90 %, size 95 %.
func TestChangeCoverage(t *testing.T) {
	rng := rand.New(rand.NewPCG(11, 12))
	for _, c := range []struct {
		shape Shape
		size  float64
	}{{Step, 1.5}, {Step, 3}, {Drift, 0.2}} {
		const runs = 800
		onset, size, chosen := 0, 0, 0
		for range runs {
			true0 := 20 + rng.IntN(15)
			var vs []Value
			for i := 1; i <= 45; i++ {
				x := rng.NormFloat64()
				if c.shape == Step && i > true0 {
					x += c.size
				}
				if c.shape == Drift && i > true0 {
					x += c.size * float64(i-true0)
				}
				vs = append(vs, Value{Night: i, X: x})
			}
			b := Known(0, 1)
			var found Change
			first := true0
			if c.shape == Step {
				found, first = FindStep(vs, b), true0+1
			} else {
				found = FindDrift(vs, b)
			}
			if found.OnsetLow <= first && first <= found.OnsetHigh {
				onset++
			}
			if found.SizeLow <= c.size && c.size <= found.SizeHigh {
				size++
			}
			if FindChange(vs, b).Shape == c.shape {
				chosen++
			}
		}
		t.Logf("%s of %v: onset covered %.3f, size covered %.3f, shape right %.3f", c.shape, c.size, float64(onset)/runs, float64(size)/runs, float64(chosen)/runs)
		if onset < runs*87/100 || size < runs*91/100 || chosen < runs*60/100 {
			t.Errorf("%s of %v: onset %d, size %d, shape %d of %d", c.shape, c.size, onset, size, chosen, runs)
		}
	}
}

func TestForecast(t *testing.T) {
	rng := rand.New(rand.NewPCG(13, 14))
	const runs, slope = 1000, 0.1
	covered := 0
	for range runs {
		var vs []Value
		for i := range 12 {
			vs = append(vs, Value{Night: i + 1, X: slope*float64(i+1) + 0.3*rng.NormFloat64()})
		}
		// The line itself stands on 3 in night 30.
		if f := ForecastExit(vs, 0, -3, 3); f.Low <= 30 && 30 <= f.High {
			covered++
		}
	}
	t.Logf("forecast intervals covering the true night: %.3f", float64(covered)/runs)
	if covered < 930 || covered > 970 {
		t.Errorf("%d of %d intervals cover the true night, want 95 %%", covered, runs)
	}
	var exact []Value
	for i := range 5 {
		exact = append(exact, Value{Night: 10 * i, X: -0.02 * float64(10*i)})
	}
	f := ForecastExit(exact, 0.001, -1, 1)
	if !f.Leaves || f.Limit != -1 {
		t.Fatalf("%+v", f)
	}
	near(t, "falling line", f.Night, 50, 1e-9)
	flat := ForecastExit([]Value{{1, 0.1, 0}, {2, -0.1, 0}, {3, 0.1, 0}, {4, -0.1, 0}}, 0, -1, 1)
	if flat.Leaves || !math.IsInf(flat.High, 1) {
		t.Errorf("no drift, but %s", flat.Sentence)
	}
	if f := ForecastExit(exact[:2], 0, -1, 1); f.Leaves || f.Sentence == "" {
		t.Errorf("two values: %+v", f)
	}
}

func TestSawtooth(t *testing.T) {
	rng := rand.New(rand.NewPCG(15, 16))
	resets := []int{5, 12, 20, 27}
	var vs []Value
	age := 0
	for night := 1; night <= 32; night++ {
		age++
		for _, r := range resets {
			if r == night {
				age = 0
			}
		}
		vs = append(vs, Value{Night: night, X: 8.26 + 0.004*float64(age) + 0.002*rng.NormFloat64()})
	}
	s := FindSawtooth(vs, resets)
	t.Log(s.Sentence)
	if math.Abs(s.Slope-0.004) > 3*s.SlopeSE || s.P > 1e-6 || s.Before != 4 || len(s.Segments) != 4 || s.Values != 28 {
		t.Errorf("%+v", s)
	}
	if math.Abs(s.Level-8.26) > 3*s.LevelSE {
		t.Errorf("level %.4f +- %.4f, true 8.26", s.Level, s.LevelSE)
	}
	for _, g := range s.Segments {
		if math.Abs(g.Slope-0.004) > 4*g.SlopeSE {
			t.Errorf("segment %+v", g)
		}
	}
	quiet := FindSawtooth(scaled(noise(17, 32), 8.26, 0.002), resets)
	if quiet.P < 0.01 {
		t.Errorf("a sawtooth in quiet nights: %s", quiet.Sentence)
	}
	if none := FindSawtooth(vs[:3], resets); none.Values != 0 || none.P != 1 {
		t.Errorf("before any calibration: %+v", none)
	}
}

func TestDifferences(t *testing.T) {
	a := []Value{{1, 8.26, 0.003}, {2, 8.27, 0.003}, {4, 8.25, 0}, {5, math.NaN(), 0}, {6, 8.20, 0}, {6, 8.30, 0}}
	b := []Value{{6, 8.24, 0.004}, {1, 8.25, 0.004}, {3, 8.25, 0.004}, {4, 8.26, 0.004}, {5, 8.2, 0}}
	want := []Value{{1, 0.01, 0.005}, {4, -0.01, 0}, {6, 0.01, 0}}
	got := Differences(a, b)
	if len(got) != len(want) {
		t.Fatalf("%v", got)
	}
	for i, w := range want {
		if got[i].Night != w.Night {
			t.Errorf("night %d, want %d", got[i].Night, w.Night)
		}
		near(t, "difference", got[i].X, w.X, 1e-12)
		near(t, "its uncertainty", got[i].SD, w.SD, 1e-12)
	}
}

// The intervals against brute force: the likelihood of every onset integrated over the
// size on a grid.
func TestOnsetAgainstIntegration(t *testing.T) {
	for seed := range uint64(40) {
		x := noise(seed+300, 14)
		for i := 8; i < len(x); i++ {
			x[i] += 1.2
		}
		got := FindStep(series(x), Known(0, 1))
		weight := make([]float64, len(x))
		var total, mean, second float64
		for first := range x {
			for d := -8.0; d <= 8; d += 0.01 {
				l := 0.0
				for _, v := range x[first:] {
					l += v*d - d*d/2
				}
				p := math.Exp(l)
				weight[first] += p
				total, mean, second = total+p, mean+p*d, second+p*d*d
			}
		}
		low, high, held := len(x), -1, 0.0
		left := append([]float64(nil), weight...)
		for held < 0.9*total {
			best := 0
			for i := range left {
				if left[i] > left[best] {
					best = i
				}
			}
			held += left[best]
			left[best] = -1
			low, high = min(low, best), max(high, best)
		}
		if got.OnsetLow != low+1 || got.OnsetHigh != high+1 {
			t.Errorf("series %d: onset %d to %d, by integration %d to %d", seed, got.OnsetLow, got.OnsetHigh, low+1, high+1)
		}
		mean /= total
		spread := math.Sqrt(second/total - mean*mean)
		near(t, "size low", got.SizeLow, mean-1.96*spread, 1e-3)
		near(t, "size high", got.SizeHigh, mean+1.96*spread, 1e-3)
	}
}
