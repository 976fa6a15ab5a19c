package spectra

import (
	"math"
)

// replicates averages the scans of a rung where they agree and brings every
// rung onto the grid. Where they disagree the first one measured is used and
// the difference is recorded.
func (p *preparation) replicates() {
	w := len(p.x)
	for i := range p.rows {
		r := &p.rows[i]
		values := make([][]float64, len(r.scans))
		for k, t := range r.scans {
			values[k] = make([]float64, w)
			resample(values[k], p.x, t)
			if d := decimalsOf(t); d >= 0 && (r.decimals < 0 || d < r.decimals) {
				r.decimals = d
			}
		}
		r.raw = values[0]
		if len(values) == 1 {
			continue
		}
		worst, limit := p.disagreement(values)
		if worst > limit {
			p.record("scan.settling", r.key, worst, "absorbance", "Repeat scans of %s differ by %.0f mAU; only the first was used.", r.key, 1000*worst)
			continue
		}
		mean := make([]float64, w)
		for j := range mean {
			for k := range values {
				mean[j] += values[k][j] / float64(len(values))
			}
		}
		r.raw = mean
		p.record("scan.averaged", r.key, float64(len(values)), "scans", "%s is the mean of %d repeat scans that agree within %.1f mAU.", r.key, len(values), math.Max(0.1, 1000*worst))
	}
}

// disagreement is the largest smoothed difference of a repeat scan from the
// first in the wanted range, and what noise and small differences of amount
// allow: 3 mAU, 1 % of the top, or 2.8 times the noise of the smoothed difference.
func (p *preparation) disagreement(values [][]float64) (worst, limit float64) {
	top, noise := 0.0, 0.0
	for _, v := range values[1:] {
		d := make([]float64, 0, len(v))
		x := make([]float64, 0, len(v))
		for j := range v {
			if p.use[j] && !math.IsNaN(v[j]) && !math.IsNaN(values[0][j]) && values[0][j] < p.opt.Ceiling {
				d = append(d, v[j]-values[0][j])
				x = append(x, p.x[j])
				top = math.Max(top, values[0][j])
			}
		}
		if len(d) < 5 {
			continue
		}
		noise = math.Max(noise, thirdDifferenceSD(d))
		for _, s := range smoothed(x, d, 10*medianStep(x)) {
			worst = math.Max(worst, math.Abs(s))
		}
	}
	return worst, math.Max(math.Max(0.003, 0.01*top), 2.8*noise)
}

// path brings all absorbances to the nominal path length.
func (p *preparation) path() {
	changed, factor := 0, 1.0
	for i := range p.rows {
		r := &p.rows[i]
		r.a = make([]float64, len(r.raw))
		copy(r.a, r.raw)
		if mm := r.scans[0].PathMM; mm > 0 && math.Abs(mm-p.opt.NominalMM) > 1e-6*mm {
			factor = p.opt.NominalMM / mm
			for j := range r.a {
				r.a[j] *= factor
			}
			changed++
		}
	}
	if changed > 0 {
		p.record("path.normalised", "", factor, "1", "%d of %d rungs were measured in another path and multiplied by %.4g to stand for %.4g mm.",
			changed, len(p.rows), factor, p.opt.NominalMM)
	}
}

// subtractBlank averages the blanks, or takes the substitute, and subtracts.
func (p *preparation) subtractBlank(blanks []Trace) {
	key := "blank.subtracted"
	usable := p.usableBlanks(blanks)
	if len(usable) == 0 && p.opt.Substitute != nil {
		usable = p.usableBlanks([]Trace{*p.opt.Substitute})
		key = "blank.substitute"
	}
	if len(usable) == 0 {
		p.record("blank.none", "", 0, "", "No blank was subtracted.")
		return
	}
	w := len(p.x)
	values := make([][]float64, len(usable))
	for k, t := range usable {
		values[k] = make([]float64, w)
		resample(values[k], p.x, t)
		if t.PathMM > 0 && t.PathMM != p.opt.NominalMM {
			for j := range values[k] {
				values[k][j] *= p.opt.NominalMM / t.PathMM
			}
		}
	}
	p.blankSD(values)
	mean := values[0]
	p.blankN = 1
	if len(values) > 1 {
		worst, limit := p.disagreement(values)
		if worst > limit {
			p.record("blank.differ", "", worst, "absorbance", "The %d blanks differ by %.1f mAU; only the first was subtracted.", len(values), 1000*worst)
		} else {
			mean = make([]float64, w)
			for j := range mean {
				for k := range values {
					mean[j] += values[k][j] / float64(len(values))
				}
			}
			p.blankN = len(values)
		}
	}
	p.blank = mean
	p.out.HasBlank = true
	p.sourceStep()
	p.alreadySubtracted()
	for i := range p.rows {
		for j := range mean {
			p.rows[i].a[j] -= mean[j]
		}
	}
	level := make([]float64, 0, w)
	for j, v := range mean {
		if p.use[j] {
			level = append(level, v)
		}
	}
	if key == "blank.substitute" {
		p.record(key, "", median(level), "absorbance", "The set has no blank of its own; %s was subtracted instead (median %.1f mAU).", named(usable[0]), 1000*median(level))
		return
	}
	p.record(key, "", median(level), "absorbance", "A blank of %d scan(s) was subtracted (median %.1f mAU); its noise is common to all rungs.", p.blankN, 1000*median(level))
}

func named(t Trace) string {
	if t.Name == "" {
		return "a substitute blank"
	}
	return t.Name
}

// usableBlanks cleans blanks and keeps those that cover the wanted range.
func (p *preparation) usableBlanks(blanks []Trace) []Trace {
	var out []Trace
	lo, hi := math.Max(p.rng[0], p.x[0]), math.Min(p.rng[1], p.x[len(p.x)-1])
	for _, b := range blanks {
		t, err := clean(b)
		if err != nil {
			p.record("blank.unreadable", "", 0, "", "A blank was not used: %v.", err)
			continue
		}
		if t.WavelengthNM[0] > lo+sameNM || t.WavelengthNM[len(t.WavelengthNM)-1] < hi-sameNM {
			p.record("blank.short", "", covered(t, p.rng), "1", "A blank covers only %.5g to %.5g nm of %.5g to %.5g nm and was not subtracted.",
				t.WavelengthNM[0], t.WavelengthNM[len(t.WavelengthNM)-1], lo, hi)
			continue
		}
		out = append(out, t)
	}
	return out
}

// blankSD gives the noise of the blanks in the blue, middle and red third.
func (p *preparation) blankSD(values [][]float64) {
	cols := p.usedColumns()
	for third := range 3 {
		part := cols[third*len(cols)/3 : (third+1)*len(cols)/3]
		sum, n := 0.0, 0
		for _, v := range values {
			y := make([]float64, len(part))
			for k, j := range part {
				y[k] = v[j]
			}
			if sd := thirdDifferenceSD(y); !math.IsNaN(sd) {
				sum += sd * sd
				n++
			}
		}
		if n > 0 {
			p.out.BlankSD[third] = math.Sqrt(sum / float64(n))
		}
	}
}

// sourceStep looks for a jump of the blank between two neighbouring
// wavelengths, as a change of lamp or filter leaves it, and masks ±3 nm about
// it. A steep band is no step: its slope changes over several points. A spike
// is none either: behind it the level is the old one.
func (p *preparation) sourceStep() {
	const half = 12 // points on each side
	overall := thirdDifferenceSD(p.blank)
	best, at := 0.0, -1
	around := make([]float64, 0, 2*half)
	for j := half + 1; j+half < len(p.x); j++ {
		middle := (p.x[j-1] + p.x[j]) / 2
		left, _ := lineEnd(p.x[j-half:j], p.blank[j-half:j], middle)
		right, _ := lineEnd(p.x[j:j+half], p.blank[j:j+half], middle)
		level := right - left
		if !(math.Abs(level) > math.Max(6*overall, 0.001)) || math.Abs(level) <= math.Abs(best) {
			continue
		}
		around = around[:0]
		for k := j - half; k <= j+half; k++ {
			if k != j {
				around = append(around, p.blank[k]-p.blank[k-1])
			}
		}
		usual := median(around)
		jump := p.blank[j] - p.blank[j-1] - usual
		rough := 0.0
		for _, d := range around {
			rough = math.Max(rough, math.Abs(d-usual))
		}
		// The one difference must hold what the levels say, and stand alone.
		if math.Abs(level-jump) < 4*overall+0.2*math.Abs(level) && rough < 0.6*math.Abs(jump) {
			best, at = level, j
		}
	}
	if at < 0 {
		return
	}
	nm := (p.x[at-1] + p.x[at]) / 2
	for j, x := range p.x {
		if math.Abs(x-nm) <= 3 {
			p.use[j] = false
		}
	}
	p.record("scan.step", "", best, "absorbance", "%.1f mAU step at %.0f nm in the blank; ±3 nm masked.", 1000*best, nm)
}

// lineEnd extrapolates a straight line through few points to a place.
func lineEnd(x, y []float64, at float64) (float64, bool) {
	n, sx, sy := float64(len(x)), 0.0, 0.0
	for i := range x {
		sx += x[i]
		sy += y[i]
	}
	sxx, sxy := 0.0, 0.0
	for i := range x {
		sxx += (x[i] - sx/n) * (x[i] - sx/n)
		sxy += (x[i] - sx/n) * (y[i] - sy/n)
	}
	v := sy/n + sxy/sxx*(at-sx/n)
	return v, !math.IsNaN(v)
}

// alreadySubtracted looks for the blank's shape, inverted, at the bottom of
// the corrected scans: then they had been corrected before.
func (p *preparation) alreadySubtracted() {
	lo, hi := math.Inf(1), math.Inf(-1)
	for j, v := range p.blank {
		if p.use[j] && !math.IsNaN(v) {
			lo, hi = math.Min(lo, v), math.Max(hi, v)
		}
	}
	if hi-lo < 0.010 {
		return // a flat blank tells nothing
	}
	var n, sb, sf, sbb, sbf, below float64
	for j, b := range p.blank {
		if !p.use[j] || math.IsNaN(b) {
			continue
		}
		floor := math.Inf(1)
		for i := range p.rows {
			floor = math.Min(floor, p.rows[i].a[j]-b)
		}
		if math.IsNaN(floor) || b-lo < 0.3*(hi-lo) {
			continue
		}
		n, sb, sf, sbb, sbf = n+1, sb+b, sf+floor, sbb+b*b, sbf+b*floor
		if floor < -0.5*(b-lo) {
			below++
		}
	}
	if n < 5 {
		return
	}
	slope := (sbf - sb*sf/n) / (sbb - sb*sb/n)
	if below > 0.7*n && slope < -0.6 && slope > -1.4 {
		p.record("scan.doubleblank", "", slope, "1", "Scans seem blank-corrected already: after subtraction they fall below zero by the shape of the blank.")
	}
}
