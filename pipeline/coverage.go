package pipeline

import (
	"fmt"
	"math"
	"strings"

	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/settings"
)

// A NamedDesign is a design whose coverage can be rehearsed.
type NamedDesign struct {
	Name string
	fit.Design
}

// CoverageDesigns are the designs of a laboratory: one per compound that has a
// nominal ladder, with the scatter its instruments declare and a shared offset
// and slope of the electrode. Without settings they are usual ones.
func CoverageDesigns(set *settings.Settings) []NamedDesign {
	var out []NamedDesign
	if set != nil {
		for _, c := range set.Compounds {
			if len(c.Ladder) < 5 || len(c.PKa) != max(1, c.Steps) {
				continue
			}
			d := usual(c.PKa, c.Ladder)
			if len(set.Instruments) > 0 {
				i := set.Instruments[0]
				d.SigmaPH, d.UAmount, d.UBaseline, d.NoiseA = positive(i.SigmaPH, d.SigmaPH), positive(i.UAmount, d.UAmount), positive(i.UBaseline, d.UBaseline), positive(i.SigmaA, d.NoiseA)
			}
			out = append(out, NamedDesign{c.Name, d})
		}
	}
	if len(out) > 0 {
		return out
	}
	for _, m := range []int{7, 12, 24} {
		out = append(out, NamedDesign{fmt.Sprintf("one step, %d rungs", m), usual([]float64{8.2}, even(6.2, 10.2, m))})
	}
	return append(out, NamedDesign{"two steps, 16 rungs", usual([]float64{6.0, 8.2}, even(4.2, 10.2, 16))})
}

func positive(v, d float64) float64 {
	if v > 0 {
		return v
	}
	return d
}

func even(from, to float64, m int) []float64 {
	out := make([]float64, m)
	for i := range out {
		out[i] = from + (to-from)*float64(i)/float64(m-1)
	}
	return out
}

// usual is a design with the scatter of careful work (common practice, no source).
func usual(pka, ladder []float64) fit.Design {
	d := fit.Design{PKa: pka, Jitter: 0.05, PH: ladder, SigmaPH: 0.006, UAmount: 0.003, UBaseline: 0.0008, NoiseA: 0.0006}
	for nm := 380.0; nm <= 700; nm += 4 {
		d.WavelengthNM = append(d.WavelengthNM, nm)
	}
	one, slope := make([]float64, len(ladder)), make([]float64, len(ladder))
	for i, p := range ladder {
		one[i], slope[i] = 1, p-7
	}
	d.Shared = []fit.Shared{
		{Key: "offset", Name: "offset of the electrode", U: 0.008, Unit: "pH", DOF: math.Inf(1), S: one, Bucket: "run"},
		{Key: "slope", Name: "slope of the electrode", U: 0.004, Unit: "1", DOF: math.Inf(1), S: slope, Bucket: "run"},
	}
	return d
}

// CoverageText states a coverage report for people.
func CoverageText(name string, r *fit.CoverageReport) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s: %d sets, %d did not converge\n", name, r.Sets, r.Failed)
	for _, x := range r.Rows {
		fmt.Fprintf(&b, "  pKa%d %-5s  random part %5.2f %%, total %5.2f %% of true values within the stated 95 %%; variance %.3f of the bound\n",
			x.Step+1, x.Weighting, 100*x.Random, 100*x.Total, x.Ratio)
	}
	return b.String()
}
