package drift

import (
	"math"
	"math/rand/v2"
	"slices"
	"testing"
)

// series draws nights standard normal values with a step after the quiet ones.
func series(rng *rand.Rand, quiet, nights int, step float64) []float64 {
	x := make([]float64, nights)
	for i := range x {
		x[i] = rng.NormFloat64()
		if i >= quiet {
			x[i] += step
		}
	}
	return x
}

// cusum gives the larger of the two tabular sums with reference value k after each night.
func cusum(x []float64, k float64) []float64 {
	out := make([]float64, len(x))
	var up, down float64
	for i, v := range x {
		up, down = math.Max(0, up+v-k), math.Max(0, down-v-k)
		out[i] = math.Max(up, down)
	}
	return out
}

// single is one reference with one characteristic of unit sd and an assigned centre.
func single(t *testing.T) *Model {
	t.Helper()
	d := family()[2]
	d.WavelengthNM, d.Acid, d.Base = nil, nil, nil
	c := Cell{Key: "x", Kind: ReferenceCell, Instrument: "U1", Reference: "RI-C", Characteristics: []Characteristic{PKa}, Centre: []float64{0}, Cov: []float64{0.01 * 0.01}, N: math.Inf(1), Design: &d}
	m, err := NewModel([]Cell{c}, Rules{Causes: []Cause{ElectrodeOffset}}, nil)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// scores gives the group score after each night.
func scores(t *testing.T, m *Model, x []float64) []float64 {
	h := History{First: 20000}
	out := make([]float64, len(x))
	for i, v := range x {
		h.Last = h.First + Night(i)
		h.Observations = append(h.Observations, Observation{Cell: "x", Night: h.Last, Sets: 1, Values: []float64{0.01 * v}})
		s, _, err := m.Score(h)
		if err != nil {
			t.Fatal(err)
		}
		out[i] = s
	}
	return out
}

func firstAbove(s []float64, limit float64, from int) int {
	for i := from; i < len(s); i++ {
		if s[i] > limit {
			return i - from + 1
		}
	}
	return len(s) - from
}

// TestDelay compares the group score on one characteristic and one cause with
// the CUSUM tuned to each step (k = half the step), both set to ring in the same share of
// quiet series. The score does not know the size of the step in advance.
func TestDelay(t *testing.T) {
	m := single(t)
	runs, nights, quiet := 150, 50, 20
	if long() {
		runs = 3000
	}
	ring := -math.Expm1(-float64(nights) / 365)
	limit := func(max []float64) float64 {
		slices.Sort(max)
		return max[len(max)-1-int(ring*float64(len(max)))]
	}
	var tops []float64
	for i := range runs {
		tops = append(tops, slices.Max(scores(t, m, series(rand.New(rand.NewPCG(31, uint64(i))), nights, nights, 0))))
	}
	ours := limit(tops)
	t.Logf("one characteristic, one cause: rings above ln B %.2f; the bound for its hypotheses is %.2f", ours, Threshold(3, 365))
	for _, step := range []float64{1, 1.5, 2, 3} {
		tops = tops[:0]
		for i := range 20 * runs {
			tops = append(tops, slices.Max(cusum(series(rand.New(rand.NewPCG(32, uint64(i))), nights, nights, 0), step/2)))
		}
		theirs := limit(tops)
		var a, b, n float64
		for i := range runs {
			x := series(rand.New(rand.NewPCG(33, uint64(i))), quiet, quiet+nights, step)
			s, c := scores(t, m, x), cusum(x, step/2)
			if firstAbove(s[:quiet], ours, 0) < quiet || firstAbove(c[:quiet], theirs, 0) < quiet {
				continue
			}
			a += float64(firstAbove(s, ours, quiet))
			b += float64(firstAbove(c, theirs, quiet))
			n++
		}
		t.Logf("step of %.1f sd: seen after %.2f nights, by the tuned CUSUM (h %.2f) after %.2f: ratio %.3f", step, a/n, theirs, b/n, a/b)
		most := 1.2 // few runs leave a few per cent of chance in the ratio
		if long() {
			most = 1.1
		}
		if a/b > most {
			t.Errorf("step of %.1f sd: %.2f nights against %.2f", step, a/n, b/n)
		}
	}
}
