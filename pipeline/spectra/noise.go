package spectra

import (
	"math"
	"slices"
)

// thirdDifferenceSD is the noise of a smooth curve from its third differences
// (variance 20 times that of the noise), the outermost outliers left out. It
// takes noise for independent from point to point. NaN for fewer than eight points.
func thirdDifferenceSD(y []float64) float64 {
	if len(y) < 8 {
		return math.NaN()
	}
	sq := make([]float64, 0, len(y))
	for j := 3; j < len(y); j++ {
		d := y[j] - 3*y[j-1] + 3*y[j-2] - y[j-3]
		if !math.IsNaN(d) {
			sq = append(sq, d*d)
		}
	}
	if len(sq) == 0 {
		return math.NaN()
	}
	mid := median(slices.Clone(sq))
	sum, n := 0.0, 0
	for _, v := range sq {
		if v <= 30*mid || mid == 0 {
			sum += v
			n++
		}
	}
	return math.Sqrt(sum / float64(n) / 20)
}

// decimalsOf is the number of decimals of a trace, found from the numbers
// themselves when the file did not tell: -1 when five do not suffice.
func decimalsOf(t Trace) int {
	if t.Decimals >= 0 {
		return t.Decimals
	}
	for d, scale := 0, 1.0; d <= 5; d, scale = d+1, scale*10 {
		ok := true
		for _, v := range t.Absorbance {
			if x := v * scale; !math.IsNaN(x) && math.Abs(x-math.Round(x)) > 1e-7*math.Max(1, math.Abs(x)) {
				ok = false
				break
			}
		}
		if ok {
			return d
		}
	}
	return -1
}

// matrix copies the columns in use into an m*w matrix.
func (p *preparation) matrix() (a []float64, cols []int) {
	cols = p.usedColumns()
	a = make([]float64, 0, len(cols)*len(p.rows))
	for i := range p.rows {
		for _, j := range cols {
			a = append(a, p.rows[i].a[j])
		}
	}
	return a, cols
}

// noise estimates the noise of the matrix, takes spikes out first, and stores
// rung factors, wavelength values, autocorrelation and effective number.
func (p *preparation) noise() {
	p.spikes()
	a, cols := p.matrix()
	m, w := len(p.rows), len(cols)
	o := p.out
	o.NoiseRung, o.NoiseWave = make([]float64, m), make([]float64, w)
	for i := range o.NoiseRung {
		o.NoiseRung[i] = 1
	}
	if m > p.opt.Forms && w > p.opt.Forms+8 {
		p.noiseFromResidual(a, cols)
	} else {
		p.noiseFromDifferences(a, m, w)
	}
	p.floorNoise()
	o.Effective = float64(w)
	if o.Lag1 > 0.2 {
		o.Effective = p.effective(a, cols)
	}
	if o.Lag1 > 0.5 {
		p.record("scan.smoothed", "", o.Lag1, "1", "The instrument smooths: neighbouring wavelengths repeat each other's noise (correlation %.2f); %d wavelengths count as %.0f.", o.Lag1, w, o.Effective)
	}
}

// noiseComponents takes the expected forms, and up to two components more that
// stand above independent noise and run smoothly along the wavelengths: a
// further dye or a displacement. One noisy scan is no component.
func (p *preparation) noiseComponents(a []float64, m, w int) factor {
	k := min(p.opt.Forms, m-1)
	f := factorise(a, m, w, k)
	r := f.residual(a)
	sum, n := 0.0, 0.0
	for i := range m {
		if free := 1 - f.leverage(i); free > 0.05 {
			if sd := thirdDifferenceSD(r[i*w : (i+1)*w]); !math.IsNaN(sd) {
				sum += sd * sd
				n += free
			}
		}
	}
	sd := math.Sqrt(sum / math.Max(n, 1e-9))
	most := min(p.opt.Forms+2, m-2)
	if most <= k {
		return f
	}
	if f.s[k] <= 1.1*sd*(math.Sqrt(float64(m-k))+math.Sqrt(float64(w))) {
		return f
	}
	wide := factorise(a, m, w, most)
	for k < most {
		edge := sd * (math.Sqrt(float64(m-k)) + math.Sqrt(float64(w)))
		v := wide.v[k*w : (k+1)*w]
		if wide.s[k] <= 1.1*edge || dot(v[1:], v[:w-1]) < 0.8 {
			break
		}
		k++
	}
	if k > f.k {
		f = factorise(a, m, w, k)
	}
	return f
}

// noiseFromResidual takes what is left after the leading components as noise:
// per wavelength (a window of 31) times per rung, in two rounds.
func (p *preparation) noiseFromResidual(a []float64, cols []int) {
	m, w := len(p.rows), len(cols)
	f := p.noiseComponents(a, m, w)
	r := f.residual(a)
	free := make([]float64, m)
	total := 0.0
	for i := range free {
		free[i] = math.Max(1-f.leverage(i), 0)
		total += free[i]
	}
	rung, wave := p.out.NoiseRung, p.out.NoiseWave
	column := make([]float64, w)
	for range 3 {
		for j := range w {
			column[j] = 0
			for i := range m {
				d := r[i*w+j] / rung[i]
				column[j] += d * d
			}
			column[j] /= total
		}
		windowed(wave, column, 15)
		if m-f.k < 3 {
			break
		}
		rungFactors(rung, wave, r, free)
	}
	p.out.Lag1 = autocorrelation(r, cols, m, 1)
}

// rungFactors updates the factors of the rungs from residuals scaled by
// wavelength; rungs that the components follow too closely keep one, the
// others are drawn towards one by the equivalent of 20 values. Mean square one.
func rungFactors(rung, wave, r, free []float64) {
	m, w := len(rung), len(wave)
	mean := 0.0
	for i := range m {
		if free[i] < 0.25 {
			rung[i] = 1
			mean += 1 / float64(m)
			continue
		}
		sum := 20.0
		for j := range w {
			if wave[j] > 0 {
				sum += r[i*w+j] * r[i*w+j] / (wave[j] * wave[j])
			}
		}
		rung[i] = sum / (float64(w)*free[i] + 20)
		mean += rung[i] / float64(m)
	}
	for i := range rung {
		rung[i] = math.Sqrt(rung[i] / mean)
	}
}

// windowed writes the root of the mean of v over ±half points into out.
func windowed(out, v []float64, half int) {
	sum, lo, hi := 0.0, 0, 0
	for j := range v {
		for hi < len(v) && hi <= j+half {
			sum += v[hi]
			hi++
		}
		for lo < j-half {
			sum -= v[lo]
			lo++
		}
		out[j] = math.Sqrt(math.Max(sum, 0) / float64(hi-lo))
	}
}

// noiseFromDifferences serves sets with no more rungs than forms: third
// differences of the scans, less what the shape of the mean spectrum leaves.
func (p *preparation) noiseFromDifferences(a []float64, m, w int) {
	mean := make([]float64, w)
	sum := 0.0
	for i := range m {
		if sd := thirdDifferenceSD(a[i*w : (i+1)*w]); !math.IsNaN(sd) {
			sum += sd * sd / float64(m)
		}
		for j := range mean {
			mean[j] += a[i*w+j] / float64(m)
		}
	}
	if shape := thirdDifferenceSD(mean); !math.IsNaN(shape) && m > 1 {
		// mean of scans: shape^2 + sd^2/m; scans: shape^2 + sd^2 on average.
		if own := (sum - shape*shape) * float64(m) / float64(m-1); own > 0 && own < sum {
			sum = own
		}
	}
	for j := range p.out.NoiseWave {
		p.out.NoiseWave[j] = math.Sqrt(sum)
	}
}

// floorNoise keeps the noise at or above what is declared together with the
// step of the printed digits. The estimate holds the digits already; the
// declaration does not, so they are added to it.
func (p *preparation) floorNoise() {
	coarsest := -1
	for _, r := range p.rows {
		if r.decimals >= 0 && (coarsest < 0 || r.decimals < coarsest) {
			coarsest = r.decimals
		}
	}
	digits := 0.0
	if coarsest >= 0 {
		digits = math.Pow(10, -float64(coarsest)) / math.Sqrt(12)
	}
	floor := math.Hypot(p.opt.SigmaA, digits)
	if floor == 0 {
		floor = 1e-7
	}
	mean, raised := 0.0, 0
	for j, s := range p.out.NoiseWave {
		mean += s / float64(len(p.out.NoiseWave))
		if !(s >= floor) {
			p.out.NoiseWave[j] = floor
			raised++
		}
	}
	if digits > 0 && digits > 0.5*mean || coarsest >= 0 && coarsest <= 2 {
		p.record("digits.coarse", "", digits, "absorbance", "Absorbances have %d decimals; their step adds %.2g mAU of noise.", coarsest, 1000*digits)
	}
	if 2*raised > len(p.out.NoiseWave) && p.opt.SigmaA > 0 {
		p.record("noise.declared", "", floor, "absorbance", "The noise found (%.2g mAU) is below the declared one; %.2g mAU is used.", 1000*mean, 1000*floor)
	}
}

// autocorrelation of the rows of r at a lag, over columns that are neighbours
// on the grid.
func autocorrelation(r []float64, cols []int, m, lag int) float64 {
	w := len(cols)
	cross, own, nc, no := 0.0, 0.0, 0.0, 0.0
	for i := range m {
		for j := range w {
			own += r[i*w+j] * r[i*w+j]
			no++
			if j+lag < w && cols[j+lag]-cols[j] == lag {
				cross += r[i*w+j] * r[i*w+j+lag]
				nc++
			}
		}
	}
	if own == 0 || nc == 0 {
		return 0
	}
	return cross / nc / (own / no)
}

// effective is the number of independent wavelengths that carry the same
// information: w / (1 + 2 sum of the autocorrelations).
func (p *preparation) effective(a []float64, cols []int) float64 {
	m, w := len(p.rows), len(cols)
	f := p.noiseComponents(a, m, w)
	r := f.residual(a)
	sum := 0.0
	for lag := 1; lag < min(w/4, 60); lag++ {
		rho := autocorrelation(r, cols, m, lag)
		if rho < 3/math.Sqrt(float64(m*w)) {
			break
		}
		sum += rho
	}
	return math.Max(1, math.Min(float64(w), float64(w)/(1+2*sum)))
}

// blankNoise is the noise of a blank along the wavelengths, from third
// differences in a window.
func blankNoise(x, blank []float64) []float64 {
	n := len(x)
	sq := make([]float64, n)
	for j := range sq {
		lo := max(0, min(j-1, n-4))
		d := blank[lo+3] - 3*blank[lo+2] + 3*blank[lo+1] - blank[lo]
		if !math.IsNaN(d) {
			sq[j] = d * d / 20
		}
	}
	out := make([]float64, n)
	windowed(out, sq, 15)
	return out
}

// spikes masks wavelengths where one scan leaves the plane of the set by more
// than 8 sigma over at most three points while the points beside lie in it.
func (p *preparation) spikes() {
	a, cols := p.matrix()
	m, w := len(p.rows), len(cols)
	if m <= p.opt.Forms || w < 20 {
		return
	}
	r := p.formsSeen(a, m, w, cols).residual(a)
	hit := make(map[int]bool)
	for i := range m {
		row := r[i*w : (i+1)*w]
		sd := thirdDifferenceSD(row)
		if math.IsNaN(sd) || sd == 0 || largest(row) < 7*sd {
			continue
		}
		row = withoutTrend(row)
		for j := range row {
			if math.Abs(row[j]) > 8*sd && isolated(row, j, 4*sd) {
				hit[j] = true
			}
		}
	}
	if len(hit) == 0 || len(hit) > max(3, w/20) {
		return
	}
	for j := range hit {
		p.use[cols[j]] = false
	}
	p.record("scan.spike", "", float64(len(hit)), "wavelengths", "%d wavelengths with an isolated spike in one scan take no part.", len(hit))
}

func largest(row []float64) float64 {
	most := 0.0
	for _, v := range row {
		most = math.Max(most, math.Abs(v))
	}
	return most
}

// withoutTrend takes the running median of 15 points off; the outer seven
// points, which have none, are set to zero.
func withoutTrend(y []float64) []float64 {
	out := make([]float64, len(y))
	var window [15]float64
	for j := 7; j+7 < len(y); j++ {
		copy(window[:], y[j-7:j+8])
		out[j] = y[j] - median(window[:])
	}
	return out
}

// isolated says whether the run of large values about j is at most three long
// and the four points beyond it on each side are quiet.
func isolated(row []float64, j int, quiet float64) bool {
	lo, hi := j, j
	for lo > 0 && math.Abs(row[lo-1]) > quiet {
		lo--
	}
	for hi+1 < len(row) && math.Abs(row[hi+1]) > quiet {
		hi++
	}
	return hi-lo < 3
}
