package spectra

import (
	"math"
	"sort"
)

// A Crossing is a wavelength where two forms absorb alike.
type Crossing struct {
	NM         float64
	SD         float64 // nm; NaN without standard deviations
	Absorbance float64 // of either form there
	SlopeDiff  float64 // d(base - acid)/d lambda, per nm
	Spread     float64 // standard deviation of the ladder's absorbance there; NaN without a ladder
	Range      float64 // largest minus smallest of it
}

// Isosbestic finds the wavelengths where the acid and the base form absorb
// alike, the best determined first. sdAcid and sdBase may be nil. ladder (m*w,
// row-major, may be nil) gives the spread of the measured absorbances there.
// Crossings where both forms are below 3 % of the highest absorbance, or where
// the difference on either side stays within its noise, are not offered.
func Isosbestic(wavelength, acid, base, sdAcid, sdBase, ladder []float64) []Crossing {
	w := len(wavelength)
	if w < 5 || len(acid) < w || len(base) < w {
		return nil
	}
	diff, sd := make([]float64, w), []float64(nil)
	top, most := 0.0, 0.0
	for j := range w {
		diff[j] = base[j] - acid[j]
		top = math.Max(top, math.Max(acid[j], base[j]))
		most = math.Max(most, math.Abs(diff[j]))
	}
	if sdAcid != nil && sdBase != nil {
		sd = make([]float64, w)
		for j := range w {
			sd[j] = math.Hypot(sdAcid[j], sdBase[j])
		}
	}
	smooth := smoothed(wavelength, diff, 3)
	var out []Crossing
	for j := 1; j < w; j++ {
		if (smooth[j-1] > 0) == (smooth[j] > 0) {
			continue
		}
		if !standsOut(smooth, j, 0.03*most) {
			continue
		}
		c, ok := crossingAt(wavelength, diff, acid, sd, (wavelength[j-1]+wavelength[j])/2)
		if !ok || c.Absorbance < 0.03*top {
			continue
		}
		c.Spread, c.Range = ladderSpread(wavelength, ladder, c.NM)
		out = append(out, c)
	}
	sort.SliceStable(out, func(a, b int) bool { return math.Abs(out[a].SlopeDiff) > math.Abs(out[b].SlopeDiff) })
	return out
}

// standsOut asks that the difference reaches a level on both sides before it crosses again.
func standsOut(y []float64, at int, level float64) bool {
	left, right := false, false
	sign := math.Signbit(y[at])
	for i := at; i < len(y) && math.Signbit(y[i]) == sign; i++ {
		right = right || math.Abs(y[i]) >= level
	}
	for i := at - 1; i >= 0 && math.Signbit(y[i]) != sign; i-- {
		left = left || math.Abs(y[i]) >= level
	}
	return left && right
}

// crossingAt refines a crossing by a local cubic of the difference.
func crossingAt(x, diff, acid, sd []float64, x0 float64) (Crossing, bool) {
	const half = 6.0
	var p localPoly
	for range 8 {
		p = fitLocal(x, diff, sd, x0, half)
		if !p.ok || p.slope(0) == 0 {
			return Crossing{}, false
		}
		step := -p.at(0) / p.slope(0)
		if math.Abs(step) > 2*half {
			return Crossing{}, false
		}
		x0 += step
		if math.Abs(step) < 1e-6 {
			break
		}
	}
	if x0 < x[0] || x0 > x[len(x)-1] {
		return Crossing{}, false
	}
	c := Crossing{NM: x0, SlopeDiff: p.slope(0), SD: math.NaN()}
	if sd != nil {
		c.SD = math.Sqrt(p.variance(p.valueRow(0))) / math.Abs(c.SlopeDiff)
	}
	q := fitLocal(x, acid, nil, x0, half)
	if !q.ok {
		return Crossing{}, false
	}
	c.Absorbance = q.at(0)
	return c, true
}

// ladderSpread is the standard deviation and range of the rungs' absorbance at one wavelength.
func ladderSpread(x, ladder []float64, nm float64) (sd, span float64) {
	w := len(x)
	m := len(ladder) / w
	if m < 2 {
		return math.NaN(), math.NaN()
	}
	sum, sq, lo, hi := 0.0, 0.0, math.Inf(1), math.Inf(-1)
	for i := range m {
		v := ValueAt(x, ladder[i*w:(i+1)*w], nm)
		sum, lo, hi = sum+v, math.Min(lo, v), math.Max(hi, v)
	}
	for i := range m {
		d := ValueAt(x, ladder[i*w:(i+1)*w], nm) - sum/float64(m)
		sq += d * d
	}
	return math.Sqrt(sq / float64(m-1)), hi - lo
}

// ValueAt is the value of a spectrum at a wavelength by a local polynomial over
// ±5 nm; NaN outside the spectrum.
func ValueAt(x, y []float64, nm float64) float64 {
	v, _ := valueAt(x, y, nil, nm)
	return v
}

func valueAt(x, y, sd []float64, nm float64) (value, u float64) {
	if len(x) == 0 || nm < x[0] || nm > x[len(x)-1] {
		return math.NaN(), math.NaN()
	}
	p := fitLocal(x, y, sd, nm, 5)
	if !p.ok {
		return math.NaN(), math.NaN()
	}
	if sd == nil {
		return p.c[0], math.NaN()
	}
	return p.c[0], math.Sqrt(p.variance(p.valueRow(0)))
}

// Nominal are the wavelengths written down for a reference, so that later
// nights read at the same places. A zero takes the place found in the set.
type Nominal struct {
	AcidNM float64 `json:"acid_nm"`
	BaseNM float64 `json:"base_nm"`
	IsoNM  float64 `json:"iso_nm"`
}

// Characteristics describe the limit spectra of one set. A quantity that cannot
// be had (no isosbestic point in range, a colourless form) is NaN with its sd.
type Characteristics struct {
	LambdaAcid, LambdaAcidSD float64 // nm, strongest band of the acid form (nearest the nominal one if given)
	LambdaBase, LambdaBaseSD float64 // nm
	LambdaIso, LambdaIsoSD   float64 // nm
	LnRA, LnRASD             float64 // ln(acid form at nominal acid wavelength / acid form at nominal isosbestic wavelength)
	LnRB, LnRBSD             float64 // ln(base form at nominal base wavelength / base form at nominal isosbestic wavelength)
	LnAIso, LnAIsoSD         float64 // ln of the mean absorbance of the forms at the nominal isosbestic wavelength
	IsoTilt                  float64 // (base - acid)/mean at the nominal isosbestic wavelength: the slope across the ladder that a scale shift gives
	Used                     Nominal // wavelengths read at
}

// Describe gives the characteristics of the limit spectra of the first and the
// last form. spectra is forms*w (acid form first), sds the same or nil.
//
// The ratios are read at the nominal wavelengths, so that a shift of the
// wavelength scale by d shows as d ln S/d lambda times d in each of them: with
// the isosbestic point on the short flank of the base band and the long flank
// of the acid band, LnRB rises and LnRA falls for a positive shift.
func Describe(wavelength, spectra, sds []float64, nominal Nominal) Characteristics {
	w := len(wavelength)
	nan := math.NaN()
	c := Characteristics{nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nan, nominal}
	forms := 0
	if w > 0 {
		forms = len(spectra) / w
	}
	if forms < 2 || w < 5 {
		return c
	}
	acid, base := spectra[:w], spectra[(forms-1)*w:forms*w]
	var sdAcid, sdBase []float64
	if len(sds) >= forms*w {
		sdAcid, sdBase = sds[:w], sds[(forms-1)*w:forms*w]
	}
	if b, ok := nearestBand(Bands(wavelength, acid, sdAcid), nominal.AcidNM); ok {
		c.LambdaAcid, c.LambdaAcidSD = b.NM, b.SD
	}
	if b, ok := nearestBand(Bands(wavelength, base, sdBase), nominal.BaseNM); ok {
		c.LambdaBase, c.LambdaBaseSD = b.NM, b.SD
	}
	if x, ok := nearestCrossing(Isosbestic(wavelength, acid, base, sdAcid, sdBase, nil), nominal.IsoNM, c.LambdaAcid, c.LambdaBase); ok {
		c.LambdaIso, c.LambdaIsoSD = x.NM, x.SD
	}
	fill := func(to *float64, found float64) {
		if *to == 0 {
			*to = found
		}
	}
	fill(&c.Used.AcidNM, c.LambdaAcid)
	fill(&c.Used.BaseNM, c.LambdaBase)
	fill(&c.Used.IsoNM, c.LambdaIso)
	c.ratios(wavelength, acid, base, sdAcid, sdBase)
	return c
}

// ratios fills the three logarithms read at the wavelengths of Used.
func (c *Characteristics) ratios(x, acid, base, sdAcid, sdBase []float64) {
	if math.IsNaN(c.Used.IsoNM) {
		return
	}
	ia, ua := valueAt(x, acid, sdAcid, c.Used.IsoNM)
	ib, ub := valueAt(x, base, sdBase, c.Used.IsoNM)
	iso := (ia + ib) / 2
	if !(iso > 0) {
		return
	}
	uIso := math.Hypot(ua, ub) / 2 / iso
	c.LnAIso, c.LnAIsoSD = math.Log(iso), uIso
	c.IsoTilt = (ib - ia) / iso
	// Each form over itself: a displaced scale moves the two in opposite
	// directions, which the mean of the forms would hide.
	if v, u := valueAt(x, acid, sdAcid, c.Used.AcidNM); v > 0 && ia > 0 {
		c.LnRA, c.LnRASD = math.Log(v/ia), math.Hypot(u/v, ua/ia)
	}
	if v, u := valueAt(x, base, sdBase, c.Used.BaseNM); v > 0 && ib > 0 {
		c.LnRB, c.LnRBSD = math.Log(v/ib), math.Hypot(u/v, ub/ib)
	}
}

// nearestBand is the band nearest a nominal place, within 15 nm, or the strongest without one.
func nearestBand(bands []Band, nominal float64) (Band, bool) {
	if len(bands) == 0 {
		return Band{}, false
	}
	if nominal == 0 || math.IsNaN(nominal) {
		return bands[0], true
	}
	best := bands[0]
	for _, b := range bands {
		if math.Abs(b.NM-nominal) < math.Abs(best.NM-nominal) {
			best = b
		}
	}
	return best, math.Abs(best.NM-nominal) <= 15
}

// nearestCrossing is the crossing nearest a nominal place, within 15 nm; without
// one the crossing between the two bands, else the steepest.
func nearestCrossing(all []Crossing, nominal, acidNM, baseNM float64) (Crossing, bool) {
	if len(all) == 0 {
		return Crossing{}, false
	}
	if nominal == 0 || math.IsNaN(nominal) {
		for _, c := range all {
			if (c.NM-acidNM)*(c.NM-baseNM) < 0 {
				return c, true
			}
		}
		return all[0], true
	}
	best := all[0]
	for _, c := range all {
		if math.Abs(c.NM-nominal) < math.Abs(best.NM-nominal) {
			best = c
		}
	}
	return best, math.Abs(best.NM-nominal) <= 15
}
