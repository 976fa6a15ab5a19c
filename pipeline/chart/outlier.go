package chart

import (
	"math"
	"slices"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"
)

// Grubbs is the result of the test for one outlier.
type Grubbs struct {
	Index    int     // of the farthest value
	G        float64 // its distance from the mean in standard deviations
	Critical float64
	Outlier  bool
}

// GrubbsTest tests whether the value farthest from the mean is an outlier (Grubbs
// 1969) at the level alpha, one-sided or two-sided. Three values are needed.
func GrubbsTest(x []float64, alpha float64, twoSided bool) Grubbs {
	g := Grubbs{Index: -1, G: math.NaN(), Critical: math.NaN()}
	if len(x) < 3 {
		return g
	}
	g.Index, g.G = farthest(x)
	g.Critical = GrubbsCritical(len(x), alpha, twoSided)
	g.Outlier = g.G > g.Critical
	return g
}

// GrubbsCritical is (n-1)/sqrt(n) sqrt(t^2/(n-2+t^2)) with the upper alpha/n
// (one-sided) or alpha/(2n) point t of Student's distribution on n-2.
func GrubbsCritical(n int, alpha float64, twoSided bool) float64 {
	f := float64(n)
	p := alpha / f
	if twoSided {
		p /= 2
	}
	t := -distuv.StudentsT{Mu: 0, Sigma: 1, Nu: f - 2}.Quantile(p)
	return (f - 1) / math.Sqrt(f) * math.Sqrt(t*t/(f-2+t*t))
}

func farthest(x []float64) (index int, distance float64) {
	m, s := stat.MeanStdDev(x, nil)
	if !(s > 0) {
		return 0, 0
	}
	for i, v := range x {
		if d := math.Abs(v-m) / s; d > distance {
			index, distance = i, d
		}
	}
	return index, distance
}

// Removal is one step of the generalised test for several outliers.
type Removal struct {
	Index       int // in the original data
	Value       float64
	R, Critical float64
}

// ManyOutliers applies the generalised extreme studentised deviate test (Rosner,
// Technometrics 25:165, 1983) for up to most outliers at the level alpha: values are
// taken away one by one, and the number of outliers is the largest step at which the
// deviate exceeds its critical value, whatever the steps before it said. It returns
// the indexes of the outliers in order of removal, and all steps.
func ManyOutliers(x []float64, most int, alpha float64) (outliers []int, steps []Removal) {
	rest := slices.Clone(x)
	where := make([]int, len(x))
	for i := range where {
		where[i] = i
	}
	n := float64(len(x))
	count := 0
	for i := 1; i <= most && len(rest) > 2; i++ {
		k, r := farthest(rest)
		f := n - float64(i)
		p := alpha / (2 * (f + 1))
		t := -distuv.StudentsT{Mu: 0, Sigma: 1, Nu: f - 1}.Quantile(p)
		critical := f * t / math.Sqrt((f-1+t*t)*(f+1))
		steps = append(steps, Removal{Index: where[k], Value: rest[k], R: r, Critical: critical})
		if r > critical {
			count = i
		}
		rest, where = slices.Delete(rest, k, k+1), slices.Delete(where, k, k+1)
	}
	for _, s := range steps[:count] {
		outliers = append(outliers, s.Index)
	}
	return outliers, steps
}
