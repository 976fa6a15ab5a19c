package spectra

import (
	"math"
	"sort"
)

// A Band is one maximum of a spectrum.
type Band struct {
	NM       float64 // position by a local parabola
	SD       float64 // standard deviation of the position, nm; NaN without sd
	Height   float64 // absorbance at the top
	HeightSD float64
	Curve    float64 // second derivative at the top, per nm^2, negative
}

// bandHalf is the half width of the window in nm over which positions are
// fitted. It is wide enough that noise of 1 mAU leaves a few hundredths of a
// nanometre and narrow enough that the asymmetry of dye bands costs less.
const bandHalf = 10.0

// Bands finds the maxima of a spectrum that stand out by at least 2 % of the
// highest absorbance above the higher of their two valleys, strongest first.
// wavelength is ascending in nm, sd (may be nil) the standard deviation of
// each value. Positions come from a local polynomial fit (Savitzky & Golay
// 1964): cubic over ±10 nm, the root of its derivative.
func Bands(wavelength, spectrum, sd []float64) []Band {
	n := min(len(wavelength), len(spectrum))
	if n < 5 {
		return nil
	}
	top := 0.0
	for _, a := range spectrum[:n] {
		top = math.Max(top, a)
	}
	smooth := smoothed(wavelength[:n], spectrum[:n], 4)
	var out []Band
	for i := 1; i < n-1; i++ {
		if !(smooth[i] > smooth[i-1] && smooth[i] >= smooth[i+1]) {
			continue
		}
		if prominence(smooth, i) < 0.02*top {
			continue
		}
		if b, ok := peakAt(wavelength[:n], spectrum[:n], sd, wavelength[i]); ok {
			out = append(out, b)
		}
	}
	sort.SliceStable(out, func(a, b int) bool { return out[a].Height > out[b].Height })
	return out
}

// prominence is the height of a maximum above the higher of its two valleys.
func prominence(y []float64, at int) float64 {
	left, right := y[at], y[at]
	for i := at; i >= 0 && y[i] <= y[at]; i-- {
		left = math.Min(left, y[i])
	}
	for i := at; i < len(y) && y[i] <= y[at]; i++ {
		right = math.Min(right, y[i])
	}
	return y[at] - math.Max(left, right)
}

// smoothed is a moving mean over ±half nm: only to find where to look.
func smoothed(x, y []float64, half float64) []float64 {
	out := make([]float64, len(y))
	lo, hi, sum, count := 0, 0, 0.0, 0
	for i := range y {
		for hi < len(y) && x[hi] <= x[i]+half {
			if !math.IsNaN(y[hi]) {
				sum += y[hi]
				count++
			}
			hi++
		}
		for x[lo] < x[i]-half {
			if !math.IsNaN(y[lo]) {
				sum -= y[lo]
				count--
			}
			lo++
		}
		out[i] = sum / float64(max(count, 1))
	}
	return out
}

// peakAt fits a cubic about x0 and returns its maximum; the window follows the
// maximum until it is centred on it.
func peakAt(x, y, sd []float64, x0 float64) (Band, bool) {
	var p localPoly
	for range 6 {
		p = fitLocal(x, y, sd, x0, bandHalf)
		if !p.ok {
			return Band{}, false
		}
		step, ok := p.extremum()
		if !ok || math.Abs(step) > bandHalf {
			return Band{}, false
		}
		x0 += step
		if math.Abs(step) < 1e-4 {
			break
		}
	}
	p = fitLocal(x, y, sd, x0, bandHalf)
	if !p.ok {
		return Band{}, false
	}
	step, ok := p.extremum()
	if !ok {
		return Band{}, false
	}
	b := Band{NM: x0 + step, Height: p.at(step), Curve: 2*p.c[2] + 6*p.c[3]*step, SD: math.NaN(), HeightSD: math.NaN()}
	if b.Curve >= 0 {
		return Band{}, false
	}
	if sd != nil {
		// d position = -d slope / curvature.
		b.SD = math.Sqrt(p.variance(p.slopeRow(step))) / math.Abs(b.Curve)
		b.HeightSD = math.Sqrt(p.variance(p.valueRow(step)))
	}
	return b, true
}

// A localPoly is a cubic in (x - x0) fitted to the values near x0.
type localPoly struct {
	c   [4]float64
	cov [4][4]float64 // covariance of c for the given sd
	ok  bool
}

// fitLocal fits a cubic (lower order if few points) to the values within half nm
// of x0, with weights that fall to zero at the edge of the window: as the window
// follows a maximum, points come and go without a jump.
func fitLocal(x, y, sd []float64, x0, half float64) localPoly {
	var p localPoly
	lo, hi := localWindow(x, x0, half)
	k := 4
	if hi-lo < 7 {
		k = 3
	}
	if hi-lo < 4 {
		return p
	}
	scale := math.Max(x[hi-1]-x0, x0-x[lo])
	if scale <= 0 {
		return p
	}
	// On a sparse grid the edge lies beyond the outermost points, so that all count.
	edge := 1.25 * half
	if hi-lo <= 6 {
		edge = 1.25 * scale
	}
	var nrm, mid [4][4]float64
	var rhs [4]float64
	used := 0
	for i := lo; i < hi; i++ {
		if math.IsNaN(y[i]) {
			continue
		}
		used++
		basis := powers((x[i] - x0) / scale)
		weight := taper((x[i] - x0) / edge)
		noise := 0.0
		if sd != nil {
			noise = weight * weight * sd[i] * sd[i]
		}
		for a := range k {
			rhs[a] += weight * basis[a] * y[i]
			for b := range k {
				nrm[a][b] += weight * basis[a] * basis[b]
				mid[a][b] += noise * basis[a] * basis[b]
			}
		}
	}
	inv, ok := invertSmall(nrm, k)
	if used < k+1 || !ok {
		return p
	}
	p.ok = true
	unit := [4]float64{1, 1 / scale, 1 / (scale * scale), 1 / (scale * scale * scale)}
	for a := range k {
		for b := range k {
			p.c[a] += inv[a][b] * rhs[b] * unit[a]
			// The weights are not those of the noise: the covariance is the sandwich.
			for c := range k {
				for d := range k {
					p.cov[a][b] += inv[a][c] * mid[c][d] * inv[d][b] * unit[a] * unit[b]
				}
			}
		}
	}
	return p
}

// localWindow gives the points within 1.25 half of x0, at least five where there are five.
func localWindow(x []float64, x0, half float64) (lo, hi int) {
	lo = sort.SearchFloat64s(x, x0-1.25*half)
	hi = sort.SearchFloat64s(x, x0+1.25*half)
	for hi-lo < 5 && (lo > 0 || hi < len(x)) {
		if lo > 0 && (hi >= len(x) || x0-x[lo-1] <= x[hi]-x0) {
			lo--
		} else {
			hi++
		}
	}
	return lo, hi
}

// taper is one at the centre and zero with its slope at one.
func taper(t float64) float64 {
	u := math.Max(0, 1-t*t)
	return u * u
}

func powers(t float64) [4]float64 { return [4]float64{1, t, t * t, t * t * t} }

// extremum is the offset from x0 of the maximum of the cubic nearest x0.
func (p localPoly) extremum() (float64, bool) {
	b, c, d := p.c[1], p.c[2], p.c[3]
	if math.Abs(d) < 1e-15*math.Abs(c) || d == 0 {
		if c >= 0 {
			return 0, false
		}
		return -b / (2 * c), true
	}
	disc := c*c - 3*b*d
	if disc < 0 {
		return 0, false
	}
	// The root with negative second derivative, in the form without cancellation.
	root := math.Sqrt(disc)
	if c < 0 {
		return b / (root - c), true
	}
	return -(c + root) / (3 * d), true
}

func (p localPoly) at(t float64) float64 {
	return p.c[0] + t*(p.c[1]+t*(p.c[2]+t*p.c[3]))
}

func (p localPoly) slope(t float64) float64 { return p.c[1] + t*(2*p.c[2]+3*t*p.c[3]) }

func (p localPoly) valueRow(t float64) [4]float64 { return powers(t) }

func (p localPoly) slopeRow(t float64) [4]float64 { return [4]float64{0, 1, 2 * t, 3 * t * t} }

func (p localPoly) variance(row [4]float64) float64 {
	s := 0.0
	for a := range row {
		for b := range row {
			s += row[a] * row[b] * p.cov[a][b]
		}
	}
	return math.Max(s, 0)
}

// invertSmall inverts the leading k x k block of a symmetric positive matrix.
func invertSmall(m [4][4]float64, k int) ([4][4]float64, bool) {
	var inv [4][4]float64
	for i := range k {
		inv[i][i] = 1
	}
	for c := range k {
		pivot := c
		for r := c + 1; r < k; r++ {
			if math.Abs(m[r][c]) > math.Abs(m[pivot][c]) {
				pivot = r
			}
		}
		if math.Abs(m[pivot][c]) < 1e-14 {
			return inv, false
		}
		m[c], m[pivot] = m[pivot], m[c]
		inv[c], inv[pivot] = inv[pivot], inv[c]
		d := m[c][c]
		for j := range k {
			m[c][j] /= d
			inv[c][j] /= d
		}
		for r := range k {
			if r == c {
				continue
			}
			f := m[r][c]
			for j := range k {
				m[r][j] -= f * m[c][j]
				inv[r][j] -= f * inv[c][j]
			}
		}
	}
	return inv, true
}
