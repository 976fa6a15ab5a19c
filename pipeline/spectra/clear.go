package spectra

import (
	"fmt"
	"math"
	"slices"
)

// clearColumns lists the columns inside the clear windows.
func (p *preparation) clearColumns() []int {
	var cols []int
	for j, nm := range p.x {
		for _, win := range p.opt.Clear {
			if nm >= win[0]-sameNM && nm <= win[1]+sameNM {
				cols = append(cols, j)
				break
			}
		}
	}
	return cols
}

// clearWindow takes the mean of each scan where nothing absorbs, leaves out
// scans that stand apart there, and subtracts it from the others.
//
// A scan stands apart when its offset differs from the median of the set by
// more than MaxOffset; what all scans share comes from the blank and is named
// as such, not held against each of them.
func (p *preparation) clearWindow() {
	cols := p.clearColumns()
	m := len(p.rows)
	if len(p.opt.Clear) > 0 && len(cols) == 0 {
		p.record("clear.outside", "", 0, "", "No clear window lies inside the scans (%.5g to %.5g nm); no offset was subtracted.", p.x[0], p.x[len(p.x)-1])
	}
	if len(cols) == 0 {
		return
	}
	offset := make([]float64, m)
	for i, r := range p.rows {
		v := make([]float64, 0, len(cols))
		for _, j := range cols {
			v = append(v, r.a[j])
		}
		offset[i] = trimmedMean(v)
	}
	shared := median(slices.Clone(offset))
	if math.IsNaN(shared) {
		p.record("clear.outside", "", 0, "", "The blank does not cover the clear window; no offset was subtracted.")
		return
	}
	for i := range p.rows {
		p.rows[i].offset = offset[i]
	}
	p.drop("scan.bubble", func(i int, r *row) string {
		if d := math.Abs(offset[i] - shared); d > p.opt.MaxOffset || math.IsNaN(d) {
			return fmt.Sprintf("%s left out: baseline %.0f mAU, bubble likely.", r.key, 1000*offset[i])
		}
		return ""
	})
	p.out.HasClear = true
	worst := 0.0
	for i := range p.rows {
		r := &p.rows[i]
		worst = math.Max(worst, math.Abs(r.offset))
		for j := range r.a {
			r.a[j] -= r.offset
		}
	}
	p.clearSummary(worst)
}

// clearSummary gives mean and trend of the offsets and says what was done.
func (p *preparation) clearSummary(worst float64) {
	if len(p.rows) == 0 {
		return
	}
	n := float64(len(p.rows))
	mean, first, last, at := 0.0, math.Inf(1), math.Inf(-1), 0.0
	for _, r := range p.rows {
		mean += r.offset / n
		at += float64(r.order) / n
		first, last = math.Min(first, float64(r.order)), math.Max(last, float64(r.order))
	}
	sxx, sxy, rest := 0.0, 0.0, 0.0
	for _, r := range p.rows {
		d := float64(r.order) - at
		sxx += d * d
		sxy += d * (r.offset - mean)
	}
	p.out.ClearMean = mean
	if sxx > 0 && n > 2 {
		p.out.ClearTrend = sxy / sxx * (last - first)
		for _, r := range p.rows {
			d := r.offset - mean - sxy/sxx*(float64(r.order)-at)
			rest += d * d
		}
	}
	p.record("clear.offset", "", worst, "absorbance", "The mean in the clear window was subtracted from each scan (mean %.1f mAU, largest %.1f mAU).", 1000*mean, 1000*worst)
	spread := math.Sqrt(rest / math.Max(1, n-2))
	if math.Abs(mean) > 0.003 && math.Abs(mean) > 3*spread {
		p.record("scan.blankdirty", "", mean, "absorbance", "All scans share a %.0f mAU offset from the blank.", 1000*mean)
	}
	if sd := spread * (last - first) / math.Sqrt(sxx); sxx > 0 && math.Abs(p.out.ClearTrend) > 0.003 && math.Abs(p.out.ClearTrend) > 3*sd {
		p.record("scan.warmup", "", p.out.ClearTrend, "absorbance", "Baseline drifted %.0f mAU over the run.", 1000*p.out.ClearTrend)
	}
}

// trimmedMean leaves out the outer tenth on either side; sorts its argument. NaN if any value is missing.
func trimmedMean(v []float64) float64 {
	if len(v) == 0 || slices.ContainsFunc(v, math.IsNaN) {
		return math.NaN()
	}
	slices.Sort(v)
	cut := len(v) / 10
	s := 0.0
	for _, x := range v[cut : len(v)-cut] {
		s += x
	}
	return s / float64(len(v)-2*cut)
}

// scatter looks in the clear windows for a rise towards short wavelengths,
// s (500/lambda)^p on a flat offset, as particles give it. One short window
// cannot tell it from an offset; then nothing is said. It is removed on
// request only.
func (p *preparation) scatter() {
	cols := p.clearColumns()
	if !p.out.HasClear || len(cols) < 8 {
		return
	}
	lo, hi := p.x[cols[0]], p.x[cols[len(cols)-1]]
	if hi/lo < 1.08 {
		return
	}
	best, power := math.Inf(1), 0.0
	for e := 1.0; e <= 4; e += 0.5 {
		if rest := p.scatterFit(cols, e, nil, nil); rest < best {
			best, power = rest, e
		}
	}
	m := len(p.rows)
	size, sd := make([]float64, m), make([]float64, m)
	p.scatterFit(cols, power, size, sd)
	if !p.clearIsClear(cols, power) {
		return
	}
	onset, count, largest := math.NaN(), 0, 0.0
	low := 0
	for i, r := range p.rows {
		if math.Abs(size[i]) < 5*sd[i] || size[i] < 0.003 {
			continue
		}
		count++
		largest = math.Max(largest, size[i])
		if math.IsNaN(onset) || r.ph > onset {
			onset = r.ph
		}
		if r.ph < p.medianPH() {
			low++
		}
	}
	if count == 0 {
		return
	}
	p.out.ScatterP = power
	for i := range p.rows {
		p.rows[i].scatter = size[i]
	}
	side := fmt.Sprintf("in %d rungs", count)
	if low == count && count < m {
		side = fmt.Sprintf("up to pH %.1f", onset)
	}
	p.record("scan.precip", "", largest, "absorbance", "A rise as λ^-%.1f towards short wavelengths of up to %.0f mAU at 500 nm shows %s: particles or a precipitate.", power, 1000*largest, side)
	if p.opt.Scatter {
		p.removeScatter(cols, size, power)
	}
}

// removeScatter subtracts the rise found from each scan.
func (p *preparation) removeScatter(cols []int, size []float64, power float64) {
	for i := range p.rows {
		r := &p.rows[i]
		mean := 0.0
		for _, j := range cols {
			mean += math.Pow(500/p.x[j], power) / float64(len(cols))
		}
		// The offset taken before was the mean of rise and offset together.
		for j, nm := range p.x {
			r.a[j] -= size[i] * (math.Pow(500/nm, power) - mean)
		}
	}
	p.record("scatter.removed", "", power, "1", "The λ^-%.1f rise was subtracted from each scan.", power)
}

// clearIsClear says whether offset and rise describe the clear windows down to
// the noise. Where they do not, the tail of a band reaches in.
func (p *preparation) clearIsClear(cols []int, power float64) bool {
	var tails []string
	for i := range p.rows {
		y := make([]float64, len(cols))
		for k, j := range cols {
			y[k] = p.rows[i].a[j]
		}
		sd := thirdDifferenceSD(y)
		one := preparation{x: p.x, rows: p.rows[i : i+1]}
		rest := one.scatterFit(cols, power, nil, nil)
		// rest/sd^2 is chi square on n-2 degrees; the factor leaves room for noise that neighbours share
		if n := float64(len(cols)); rest > 3*n*sd*sd {
			tails = append(tails, p.rows[i].key)
		}
	}
	if len(tails) == 0 {
		return true
	}
	p.record("clear.absorbs", "", float64(len(tails)), "rungs", "The clear window is not clear in %s: something absorbs there.", list(tails))
	return false
}

// scatterFit fits offset and rise to every rung in the clear columns; returns
// the residual sum of squares and, if asked, sizes and standard deviations.
func (p *preparation) scatterFit(cols []int, power float64, size, sd []float64) float64 {
	n, st := float64(len(cols)), 0.0
	t := make([]float64, len(cols))
	for k, j := range cols {
		t[k] = math.Pow(500/p.x[j], power)
		st += t[k] / n
	}
	stt := 0.0
	for k := range t {
		t[k] -= st
		stt += t[k] * t[k]
	}
	total := 0.0
	for i, r := range p.rows {
		mean, sty := 0.0, 0.0
		for k, j := range cols {
			mean += r.a[j] / n
			sty += t[k] * r.a[j]
		}
		slope := sty / stt
		rest := 0.0
		for k, j := range cols {
			d := r.a[j] - mean - slope*t[k]
			rest += d * d
		}
		total += rest
		if size != nil {
			size[i], sd[i] = slope, math.Sqrt(rest/(n-2)/stt)
		}
	}
	return total
}

func (p *preparation) medianPH() float64 {
	v := make([]float64, len(p.rows))
	for i, r := range p.rows {
		v[i] = r.ph
	}
	return median(v)
}

// maskGaps takes out wavelengths where a scan has no value, and leaves out a
// scan that lacks more than a fifth of them.
func (p *preparation) maskGaps() {
	in := p.columns()
	p.drop("scan.gaps", func(_ int, r *row) string {
		gaps := 0
		for j, v := range r.a {
			if p.use[j] && math.IsNaN(v) {
				gaps++
			}
		}
		if gaps*5 > in {
			return fmt.Sprintf("%s left out: %d of %d values are missing or overflown.", r.key, gaps, in)
		}
		return ""
	})
	masked := 0
	for j := range p.x {
		if !p.use[j] {
			continue
		}
		for i := range p.rows {
			if math.IsNaN(p.rows[i].a[j]) {
				p.use[j] = false
				masked++
				break
			}
		}
	}
	if masked > 0 {
		p.record("mask.gaps", "", float64(masked), "wavelengths", "%d wavelengths without a value in some scan take no part.", masked)
	}
}

// maskCeiling takes out wavelengths whose measured absorbance is above the
// ceiling in any rung. What counts is what the detector saw: before blank and path.
func (p *preparation) maskCeiling() {
	all, lost := 0.0, 0.0
	masked, rungs := 0, make(map[string]bool)
	lo, hi := math.Inf(1), math.Inf(-1)
	for j, nm := range p.x {
		if nm < p.rng[0]-sameNM || nm > p.rng[1]+sameNM {
			continue
		}
		c := p.change(j)
		all += c * c
		if p.use[j] {
			for i := range p.rows {
				v := p.rows[i].raw[j]
				p.out.MaxA = math.Max(p.out.MaxA, v)
				if v > p.opt.Ceiling {
					rungs[p.rows[i].key] = true
				}
			}
			if p.above(j) {
				p.use[j] = false
				masked++
				lo, hi = math.Min(lo, nm), math.Max(hi, nm)
			}
		}
		if !p.use[j] {
			lost += c * c
		}
	}
	if all > 0 {
		p.out.LostInfo = lost / all
	}
	if masked > 0 {
		p.record("mask.ceiling", "", p.out.LostInfo, "1", "%.4g–%.4g nm above %.2g in %d rungs not used (%.0f %% of the colour change); dilute about %.2g×.",
			lo, hi, p.opt.Ceiling, len(rungs), 100*p.out.LostInfo, math.Ceil(2*p.out.MaxA/p.opt.Ceiling)/2)
	}
}

func (p *preparation) above(j int) bool {
	for i := range p.rows {
		if p.rows[i].raw[j] > p.opt.Ceiling {
			return true
		}
	}
	return false
}
