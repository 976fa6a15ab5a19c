package assay

import (
	"math"

	"gonum.org/v1/gonum/stat"

	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/spectra"
)

// characteristics fills the numbers that charts and dashboards use, under the
// names of package drift.
func (o *Outcome) characteristics(in *Input) {
	nan := math.NaN()
	put := func(c drift.Characteristic, v, sd float64, unit string) {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			o.Figures[string(c)] = Figure{v, sd, unit}
		}
	}
	var nominal spectra.Nominal
	if in.Archive != nil {
		nominal = in.Archive.Nominal
	}
	f, p := o.Fit, o.Prepared
	b := spectra.Describe(p.WavelengthNM, f.Spectra, f.SpectraSD, nominal)
	o.Bands = b
	m := float64(len(p.Keys))
	put(drift.LambdaA, b.LambdaAcid, b.LambdaAcidSD, "nm")
	put(drift.LambdaB, b.LambdaBase, b.LambdaBaseSD, "nm")
	put(drift.LambdaIso, b.LambdaIso, b.LambdaIsoSD, "nm")
	put(drift.RatioA, b.LnRA, b.LnRASD, "1")
	put(drift.RatioB, b.LnRB, b.LnRBSD, "1")
	put(drift.AmountIso, b.LnAIso, b.LnAIsoSD, "1")
	if p.HasClear {
		put(drift.ClearMean, p.ClearMean, nan, "absorbance")
		put(drift.ClearTrend, p.ClearTrend, nan, "absorbance")
	}
	if p.HasBlank && !math.IsNaN(p.BlankSD[1]) {
		put(drift.BlankVar, p.BlankSD[1]*p.BlankSD[1], nan, "absorbance²")
	}
	if f.Steps == 1 && len(f.Own.PKa) > 0 {
		put(drift.PKa, f.Own.PKa[0], math.Sqrt(f.Own.CovOwn[0]), "pH")
		put(drift.Slope, f.Slope, f.SlopeSD, "1")
	}
	if o.Library != nil {
		put(drift.Library, o.Library.PKa-f.Own.PKa[0], nan, "pH")
	}
	if k := f.Own.Kappa; len(k) > 2 {
		v := stat.Variance(k, nil)
		put(drift.AmountVar, v, v*math.Sqrt(2/(m-1)), "1")
		x := make([]float64, len(k))
		for i := range x {
			x[i] = float64(i)/float64(len(x)-1) - 0.5
		}
		_, slope := stat.LinearRegression(x, k, nil, false)
		put(drift.AmountTrend, slope, nan, "1")
	}
	if n := f.Steps + 1; len(f.Singular) > n {
		put(drift.Third, f.Singular[n]*f.Singular[n], nan, "absorbance²")
	}
	if e := f.Own.Eta; len(e) > 3 {
		ss := 0.0
		for _, v := range e {
			ss += v * v
		}
		dof := m - 3
		put(drift.LatentVar, ss/dof, ss/dof*math.Sqrt(2/dof), "pH²")
	}
	if !math.IsNaN(o.TemperatureC) {
		put(drift.Temperature, o.TemperatureC, nan, "°C")
	}
}
