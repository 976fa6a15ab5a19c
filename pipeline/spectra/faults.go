package spectra

import (
	"fmt"
	"math"
	"slices"
)

// dropClones leaves out a rung whose scan holds, digit by digit, the numbers of
// an earlier rung, and a repeat scan that holds those of another.
func (p *preparation) dropClones() {
	owner := make(map[uint64][]int) // hash of the numbers -> rungs already kept
	p.drop("scan.clone", func(i int, r *row) string {
		kept := r.scans[:0]
		text := ""
		for _, t := range r.scans {
			twin := -1
			for _, o := range owner[digest(t)] {
				if slices.ContainsFunc(p.rows[o].scans, func(s Trace) bool { return identical(s, t) }) || (o == i && slices.ContainsFunc(kept, func(s Trace) bool { return identical(s, t) })) {
					twin = o
					break
				}
			}
			switch {
			case twin < 0:
				owner[digest(t)] = append(owner[digest(t)], i)
				kept = append(kept, t)
			case twin == i:
				p.record("scan.repeated", r.key, 1, "", "%s holds one scan twice; it was counted once.", r.key)
			default:
				text = fmt.Sprintf("%s holds the same numbers as %s.", r.key, p.rows[twin].key)
				p.record("scan.clone", r.key, 1, "", "%s", text)
				p.out.Records[len(p.out.Records)-1].Other = p.rows[twin].key
			}
		}
		r.scans = kept
		if len(kept) > 0 {
			return ""
		}
		return text
	})
}

// digest is an FNV-1a hash of the absorbances' bits.
func digest(t Trace) uint64 {
	h := uint64(14695981039346656037)
	for _, v := range t.Absorbance {
		h = (h ^ math.Float64bits(v)) * 1099511628211
	}
	return h
}

// identical says whether two traces hold the same numbers; a trace without
// any variation proves nothing.
func identical(a, b Trace) bool {
	if len(a.Absorbance) != len(b.Absorbance) {
		return false
	}
	varies := false
	for j, v := range a.Absorbance {
		if v != b.Absorbance[j] && !(math.IsNaN(v) && math.IsNaN(b.Absorbance[j])) {
			return false
		}
		varies = varies || v != a.Absorbance[0]
	}
	return varies
}

// inRange collects the values of the columns in use that are not missing.
func (p *preparation) inRange(y []float64) []float64 {
	out := make([]float64, 0, len(y))
	for j, v := range y {
		if p.use[j] && !math.IsNaN(v) {
			out = append(out, v)
		}
	}
	return out
}

// dropLightless leaves out scans taken with the light path blocked: high
// absorbance at nine tenths of the wavelengths, where others have none.
func (p *preparation) dropLightless() {
	floor := make([]float64, len(p.rows))
	for i, r := range p.rows {
		floor[i] = quantile(p.inRange(r.raw), 0.1)
	}
	usual := median(slices.Clone(floor))
	p.drop("scan.blocked", func(i int, r *row) string {
		if floor[i] > 2.5 && (usual < 1.5 || floor[i] > usual+1) {
			return fmt.Sprintf("%s left out: it has no light.", r.key)
		}
		return ""
	})
}

// dropColourless leaves out scans without a dye band whose neighbours in pH
// have one. A form without colour at the end of a ladder is not a fault: there
// the band fades tenfold per pH unit and step, two steps at least allowed for.
func (p *preparation) dropColourless(blanks bool) {
	m := len(p.rows)
	if m < 3 {
		return
	}
	height, noise := make([]float64, m), make([]float64, m)
	for i, r := range p.rows {
		v := p.inRange(r.a)
		noise[i] = thirdDifferenceSD(v)
		height[i] = quantile(v, 0.98) - quantile(v, 0.05)
		// A flat noisy scan is as high as its noise; take that off.
		height[i] = math.Max(0, height[i]-4*noise[i])
	}
	usual, usualNoise := median(slices.Clone(height)), median(slices.Clone(noise))
	byPH := make([]int, m)
	for i := range byPH {
		byPH[i] = i
	}
	slices.SortFunc(byPH, func(a, b int) int { return compare(p.rows[a].ph, p.rows[b].ph) })
	faded := make([]bool, m)
	for at, i := range byPH {
		if height[i] > 0.05*usual {
			continue
		}
		expected := func(o int) float64 {
			return height[o] * math.Pow(10, -float64(max(p.opt.Forms-1, 2))*math.Abs(p.rows[i].ph-p.rows[o].ph))
		}
		least := math.Inf(1)
		if at > 0 {
			least = math.Min(least, expected(byPH[at-1]))
		}
		if at+1 < m {
			least = math.Min(least, expected(byPH[at+1]))
		}
		faded[i] = height[i] < 0.2*least && least > 5*usualNoise
	}
	p.dropFaded(faded, noise, usualNoise, blanks)
}

// dropFaded leaves out the scans without a band: with a light leak when they
// are wild as well, else perhaps a blank under a rung's name.
func (p *preparation) dropFaded(faded []bool, noise []float64, usualNoise float64, blanks bool) {
	leak := make(map[string]bool)
	for i, r := range p.rows {
		if faded[i] {
			leak[r.key] = noise[i] > 10*usualNoise || median(p.inRange(r.a)) < -0.02
		}
	}
	p.drop("scan.open", func(_ int, r *row) string {
		if leak[r.key] {
			return fmt.Sprintf("%s has no dye band and a light leak.", r.key)
		}
		return ""
	})
	p.drop("scan.nodye", func(_ int, r *row) string {
		if _, found := leak[r.key]; !found {
			return ""
		}
		if blanks {
			return fmt.Sprintf("%s has no dye band.", r.key)
		}
		return fmt.Sprintf("%s has no dye band; is it the blank?", r.key)
	})
}

func compare(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// amounts compares the amount of dye times path of each rung with what the
// other rungs say, and leaves out a rung that is off by more than a factor of
// 1.5: another cell or a failed addition, beyond what an amount factor may mend.
func (p *preparation) amounts() {
	m := len(p.rows)
	if m < 4 {
		return
	}
	var cols []int
	for j := range p.x {
		ok := p.use[j]
		for i := range p.rows {
			ok = ok && !math.IsNaN(p.rows[i].a[j]) && p.rows[i].raw[j] <= p.opt.Ceiling
		}
		if ok {
			cols = append(cols, j)
		}
	}
	if len(cols) < fewestColumns {
		return
	}
	all := make([]float64, 0, m*len(cols))
	for i := range p.rows {
		for _, j := range cols {
			all = append(all, p.rows[i].a[j])
		}
	}
	sd := rowNoise(all, m, len(cols))
	others := make([]float64, 0, len(all))
	amount := make([]float64, m)
	for i := range p.rows {
		w := len(cols)
		others = append(append(others[:0], all[:i*w]...), all[(i+1)*w:]...)
		amount[i] = amountFromOthers(all[i*w:(i+1)*w], others, min(p.opt.Forms, m-1), sd)
	}
	p.drop("scan.path", func(i int, r *row) string {
		f := amount[i]
		if math.IsNaN(f) || (f > 1/1.5 && f < 1.5) {
			return ""
		}
		text := fmt.Sprintf("Absorbance of %s is %.2f of normal; %s", r.key, f, pathGuess(f))
		p.record("scan.path", r.key, f, "1", "%s", text)
		return text
	})
}

// pathGuess words what a factor may come from.
func pathGuess(f float64) string {
	for _, usual := range []float64{0.1, 0.2, 0.5, 2, 5, 10} {
		if math.Abs(f/usual-1) < 0.08 {
			return "other path length?"
		}
	}
	return "amount of dye or path is off."
}

// amountFromOthers is the amount of one scan relative to the others: the linear
// measure of a spectrum that gives one for all of them, read on this scan. NaN
// when noise sd leaves the measure undetermined (a form without colour), when
// the others do not agree on one, or when the scan has another shape.
func amountFromOthers(own, others []float64, forms int, sd float64) float64 {
	w := len(own)
	m := len(others) / w
	f := factorise(others, m, w, forms)
	if f.k < 2 || f.clear(sd, 5) < f.k {
		return math.NaN()
	}
	spread, amount, norm, left := 0.0, 0.0, 0.0, 0.0
	for o := range m {
		one := 0.0
		for k := range f.k {
			one += f.u[o*f.k+k] * f.columnSum(k)
		}
		spread = math.Max(spread, math.Abs(one-1))
	}
	rest := slices.Clone(own)
	for k := range f.k {
		score := 0.0
		for j := range own {
			score += own[j] * f.v[k*w+j]
		}
		for j := range rest {
			rest[j] -= score * f.v[k*w+j]
		}
		amount += score / f.s[k] * f.columnSum(k)
	}
	for j := range own {
		norm, left = norm+own[j]*own[j], left+rest[j]*rest[j]
	}
	if spread > 0.05 || left > 0.01*norm || amount <= 0 {
		return math.NaN()
	}
	return amount
}

// pathOfSet compares the highest absorbance of the set with what is usual.
func (p *preparation) pathOfSet() {
	top := 0.0
	for _, a := range p.out.A {
		top = math.Max(top, a)
	}
	f := top / p.opt.TopA
	if f > 1/1.5 && f < 1.5 {
		return
	}
	p.record("scan.path", "", f, "1", "Absorbance is %.2f of normal; %s", f, pathGuess(f))
}
