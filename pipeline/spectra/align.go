package spectra

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/mat"
)

// The rules for displaced scans.
const (
	alignMost = 0.3  // nm: a larger displacement is reported, not mended
	alignSeen = 0.05 // nm: a smaller one is left as it is
	alignSure = 7    // standard deviations to first order: noise of the spectra themselves makes these a third too small
)

// align finds how far each scan is displaced in wavelength relative to the
// set: what the set's components leave of a scan, compared with the derivative
// of its spectrum. Displacements up to 0.3 nm are mended when Options allow it.
//
// A displacement common to all scans is invisible here and has no effect on
// the fit.
func (p *preparation) align() {
	if len(p.rows) < p.opt.Forms+2 || p.columns() < 20 {
		return
	}
	var sd []float64
	total := make([]float64, len(p.rows))
	mended := map[string]float64{}
	for round := range 3 {
		delta, u := p.displacement()
		if delta == nil {
			return
		}
		sd = u
		moved := false
		for i := range p.rows {
			r := &p.rows[i]
			now := total[i] + delta[i]
			r.shift = now
			if math.Abs(now) < alignSure*sd[i] {
				r.shift = total[i] // not sure: nothing, or what was mended before
			}
			if !p.opt.Align || math.Abs(now) > alignMost || math.Abs(delta[i]) < math.Max(alignSure*sd[i], alignSeen/(1+2*float64(round))) {
				continue
			}
			y := make([]float64, len(r.a))
			shifted(y, p.x, r.a, delta[i])
			r.a = y
			total[i] = now
			mended[r.key] = now
			moved = true
		}
		if !moved {
			break
		}
	}
	p.reportShifts(sd, mended)
}

// reportShifts records what was mended and what was too large to mend.
func (p *preparation) reportShifts(sd []float64, mended map[string]float64) {
	var large []string
	most, largest := 0.0, 0.0
	for i, r := range p.rows {
		if _, ok := mended[r.key]; ok {
			most = math.Max(most, math.Abs(r.shift))
			continue
		}
		if math.Abs(r.shift) > math.Max(alignSure*sd[i], alignSeen) && (math.Abs(r.shift) > alignMost || !p.opt.Align) {
			large = append(large, r.key)
			largest = math.Max(largest, math.Abs(r.shift))
		}
	}
	if len(mended) > 0 {
		p.record("scan.aligned", "", most, "nm", "%d scans were displaced by up to %.2f nm and brought back.", len(mended), most)
	}
	if len(large) > 0 {
		verb := "are"
		if len(large) == 1 {
			verb = "is"
		}
		p.record("scan.jitter", "", largest, "nm", "%s %s displaced by up to %.2f nm.", list(large), verb, largest)
	}
}

// list joins names for a sentence: "r04", "r04 and r09", "r04, r09 and 3 more".
func list(names []string) string {
	switch n := len(names); {
	case n == 1:
		return names[0]
	case n <= 4:
		return strings.Join(names[:n-1], ", ") + " and " + names[n-1]
	default:
		return fmt.Sprintf("%s and %d more", strings.Join(names[:3], ", "), n-3)
	}
}

// displacement solves for all displacements at once: the residual of the
// components is -(I - H) D G, with H the projection on the left vectors, D the
// displacements and G the part of the derivatives outside the components. The
// direction in which all scans move together is null and set to zero.
func (p *preparation) displacement() (delta, sd []float64) {
	a, cols := p.matrix()
	m, w := len(p.rows), len(cols)
	f := p.formsSeen(a, m, w, cols)
	if f.k == 0 || f.k > m-2 {
		return nil, nil
	}
	q := f.rightBasis()
	r := f.residual(a)
	g := p.derivatives(f, cols)
	for i := range m {
		removeBasis(r[i*w:(i+1)*w], q)
		removeBasis(g[i*w:(i+1)*w], q)
	}
	normal := mat.NewSymDense(m, nil)
	rhs := make([]float64, m)
	for i := range m {
		for o := i; o < m; o++ {
			h := 0.0
			for c := range f.k {
				h += f.u[i*f.k+c] * f.u[o*f.k+c]
			}
			if i == o {
				h -= 1
			}
			normal.SetSym(i, o, -h*dot(g[i*w:(i+1)*w], g[o*w:(o+1)*w]))
		}
		rhs[i] = -dot(r[i*w:(i+1)*w], g[i*w:(i+1)*w])
	}
	variance := dot(r, r) / float64(max(1, (m-f.k)*(w-len(q))))
	delta, sd = pseudoSolve(normal, rhs, variance)
	if delta == nil {
		return nil, nil
	}
	// The zero of the displacements is where half of the colour lies on either side.
	weight := make([]float64, m)
	for i := range m {
		weight[i] = dot(g[i*w:(i+1)*w], g[i*w:(i+1)*w])
	}
	zero := weightedMedian(delta, weight)
	most := math.Sqrt(slices.Max(weight))
	for i := range m {
		delta[i] -= zero
		if !flanksAgree(r[i*w:(i+1)*w], g[i*w:(i+1)*w], most) {
			delta[i] = 0
		}
	}
	return delta, sd
}

// pseudoSolve solves a symmetric system without its null directions; sd are the
// standard deviations for a residual variance. Nil when the system is empty.
func pseudoSolve(normal *mat.SymDense, rhs []float64, variance float64) (x, sd []float64) {
	m := len(rhs)
	var eig mat.EigenSym
	if !eig.Factorize(normal, true) {
		return nil, nil
	}
	values := eig.Values(nil)
	var vec mat.Dense
	eig.VectorsTo(&vec)
	if !(values[m-1] > 0) {
		return nil, nil
	}
	x, sd = make([]float64, m), make([]float64, m)
	for c := range m {
		if values[c] < 1e-6*values[m-1] {
			continue
		}
		b := 0.0
		for i := range m {
			b += vec.At(i, c) * rhs[i]
		}
		for i := range m {
			x[i] += vec.At(i, c) * b / values[c]
			sd[i] += vec.At(i, c) * vec.At(i, c) * variance / values[c]
		}
	}
	for i := range sd {
		sd[i] = math.Sqrt(sd[i])
	}
	return x, sd
}

// weightedMedian is the smallest value at which half of the weight is reached.
func weightedMedian(v, weight []float64) float64 {
	order := make([]int, len(v))
	total := 0.0
	for i := range order {
		order[i] = i
		total += weight[i]
	}
	slices.SortFunc(order, func(a, b int) int { return compare(v[a], v[b]) })
	sum := 0.0
	for _, i := range order {
		sum += weight[i]
		if sum >= total/2 {
			return v[i]
		}
	}
	return 0
}

// flanksAgree says whether rising and falling flanks give a displacement of one
// sign. Another disturbance of a scan does not; a scan with a tenth of the
// colour of the strongest says nothing.
func flanksAgree(r, g []float64, most float64) bool {
	var rise, fall [2]float64
	for j := range g {
		side := &rise
		if g[j] < 0 {
			side = &fall
		}
		side[0] -= r[j] * g[j]
		side[1] += g[j] * g[j]
	}
	if math.Sqrt(rise[1]+fall[1]) < 0.1*most || rise[1] == 0 || fall[1] == 0 {
		return false
	}
	a, b := rise[0]/rise[1], fall[0]/fall[1]
	return a*b > 0 && math.Min(math.Abs(a), math.Abs(b)) > 0.3*math.Max(math.Abs(a), math.Abs(b))
}

// rightBasis is an orthonormal basis of the components and a constant.
func (f factor) rightBasis() [][]float64 {
	var q [][]float64
	for c := range f.k {
		q = extend(q, append([]float64(nil), f.v[c*f.w:(c+1)*f.w]...))
	}
	one := make([]float64, f.w)
	for j := range one {
		one[j] = 1
	}
	return extend(q, one)
}

// extend adds what v holds beyond an orthonormal basis to it; v is used up.
func extend(q [][]float64, v []float64) [][]float64 {
	norm := math.Sqrt(dot(v, v))
	removeBasis(v, q)
	removeBasis(v, q)
	left := math.Sqrt(dot(v, v))
	if !(left > 1e-8*norm) {
		return q
	}
	for j := range v {
		v[j] /= left
	}
	return append(q, v)
}

// removeBasis projects a row off an orthonormal basis.
func removeBasis(row []float64, q [][]float64) {
	for _, v := range q {
		s := dot(row, v)
		for j := range row {
			row[j] -= s * v[j]
		}
	}
}

// formsSeen decomposes the set into the components that are forms. A colourless
// form adds none, and noise in its place would pass for displacements. A clear
// component beyond the expected ones is a form too (a step or a dye that nobody
// announced) unless it is rough along the wavelengths, or looks like the
// derivative of the others: that is what displaced scans leave.
func (p *preparation) formsSeen(a []float64, m, w int, cols []int) factor {
	wide := factorise(a, m, w, min(p.opt.Forms+2, m))
	clear := wide.clear(rowNoise(a, m, w), 3)
	k := min(p.opt.Forms, clear)
	for k > 0 && k < clear {
		f := wide.first(k)
		q := f.rightBasis()
		v := append([]float64(nil), wide.v[k*w:(k+1)*w]...)
		if dot(v[1:], v[:w-1]) < 0.8 {
			break // a spike or one noisy scan
		}
		removeBasis(v, q)
		whole := dot(v, v)
		d := p.componentSlopes(f, cols)
		var slopes [][]float64
		for c := range k {
			row := d[c*w : (c+1)*w]
			removeBasis(row, q)
			slopes = extend(slopes, row)
		}
		removeBasis(v, slopes)
		if dot(v, v) < 0.3*whole {
			break
		}
		k++
	}
	return wide.first(k)
}

// first is the same decomposition with fewer components.
func (f factor) first(k int) factor {
	out := factor{m: f.m, w: f.w, k: k, s: f.s, v: f.v[:k*f.w], u: make([]float64, f.m*k)}
	for i := range f.m {
		copy(out.u[i*k:(i+1)*k], f.u[i*f.k:i*f.k+k])
	}
	return out
}

// componentSlopes are the derivatives of the right vectors, per nm, k*w: the
// slope of a straight line through up to five points.
func (p *preparation) componentSlopes(f factor, cols []int) []float64 {
	w := f.w
	d := make([]float64, f.k*w)
	x := make([]float64, w)
	for j, c := range cols {
		x[j] = p.x[c]
	}
	for c := range f.k {
		for j := range w {
			lo, hi := max(0, j-2), min(w-1, j+2)
			n, sx, sy := float64(hi-lo+1), 0.0, 0.0
			for k := lo; k <= hi; k++ {
				sx += x[k]
				sy += f.v[c*w+k]
			}
			sxx, sxy := 0.0, 0.0
			for k := lo; k <= hi; k++ {
				sxx += (x[k] - sx/n) * (x[k] - sx/n)
				sxy += (x[k] - sx/n) * (f.v[c*w+k] - sy/n)
			}
			d[c*w+j] = sxy / sxx
		}
	}
	return d
}

// derivatives of the scans as the components see them, per nm, m*w.
func (p *preparation) derivatives(f factor, cols []int) []float64 {
	w := f.w
	d := p.componentSlopes(f, cols)
	out := make([]float64, f.m*w)
	for i := range f.m {
		for c := range f.k {
			scale := f.u[i*f.k+c] * f.s[c]
			for j := range w {
				out[i*w+j] += scale * d[c*w+j]
			}
		}
	}
	return out
}
