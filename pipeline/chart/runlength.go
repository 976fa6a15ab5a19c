package chart

import (
	"math"

	"gonum.org/v1/gonum/integrate/quad"
	"gonum.org/v1/gonum/mat"
)

// Run lengths are counted in values (nights with data) up to and including the one
// that raises the flag, for independent normal values with known centre and spread,
// starting afresh unless stated otherwise. shift is the displacement of the mean in
// standard deviations; scale is the ratio of the actual to the assumed standard
// deviation (1 in control).

// RunLength is the distribution of the number of values until a flag.
type RunLength struct {
	Shift float64
	Mean  float64
	SD    float64 // NaN where only the mean is computed
	SE    float64 // standard error of Mean by simulation; 0 where computed
}

// geometric is the run length of a rule that fires with probability p at each value.
func geometric(shift, p float64) RunLength {
	return RunLength{Shift: shift, Mean: 1 / p, SD: math.Sqrt(1-p) / p}
}

// IndividualsRunLength is the run length of an individuals chart with limits at c
// standard deviations.
func IndividualsRunLength(c, shift, scale float64) RunLength {
	return geometric(shift, below((-c-shift)/scale)+below((-c+shift)/scale))
}

// legendre returns Gauss-Legendre nodes and weights on [a, b].
func legendre(n int, a, b float64) (x, w []float64) {
	x, w = make([]float64, n), make([]float64, n)
	quad.Legendre{}.FixedLocations(x, w, a, b)
	return x, w
}

// solveRun solves L = 1 + K L for the run length from every state, and with the same
// factors the second moment M = 2 L - 1 + K M. k holds K and is overwritten.
func solveRun(k *mat.Dense) (mean, second *mat.VecDense) {
	n, _ := k.Dims()
	for i := range n {
		for j := range n {
			v := -k.At(i, j)
			if i == j {
				v++
			}
			k.Set(i, j, v)
		}
	}
	var lu mat.LU
	lu.Factorize(k)
	ones := mat.NewVecDense(n, nil)
	for i := range n {
		ones.SetVec(i, 1)
	}
	mean, second = mat.NewVecDense(n, nil), mat.NewVecDense(n, nil)
	// A singular system means a run length beyond what double precision can hold;
	// the solver then returns infinities, which callers pass on.
	if err := lu.SolveVecTo(mean, false, ones); err != nil {
		return infinite(n), infinite(n)
	}
	rhs := mat.NewVecDense(n, nil)
	for i := range n {
		rhs.SetVec(i, 2*mean.AtVec(i)-1)
	}
	if err := lu.SolveVecTo(second, false, rhs); err != nil {
		return mean, infinite(n)
	}
	return mean, second
}

func infinite(n int) *mat.VecDense {
	v := mat.NewVecDense(n, nil)
	for i := range n {
		v.SetVec(i, math.Inf(1))
	}
	return v
}

// cusumNodes gives about ten digits for decision limits up to ten.
func cusumNodes(h, scale float64) int {
	return int(min(160, max(40, 12*h/scale)))
}

// OneSidedCusumRunLength is the run length of the upper cumulative sum
// C = max(0, C + z - k), flagged when C > h, started at the given height: the
// integral equation of Page 1954 with its atom at zero, by Gauss-Legendre nodes.
func OneSidedCusumRunLength(k, h, start, shift, scale float64) RunLength {
	n := cusumNodes(h, scale)
	x, w := legendre(n, 0, h)
	row := func(s float64, out []float64) {
		out[0] = below((k - s - shift) / scale)
		for j := range n {
			out[j+1] = w[j] * density((x[j]+k-s-shift)/scale) / scale
		}
	}
	m := mat.NewDense(n+1, n+1, nil)
	row(0, m.RawRowView(0))
	for i := range n {
		row(x[i], m.RawRowView(i+1))
	}
	from := make([]float64, n+1)
	row(start, from)
	mean, second := solveRun(m)
	f := mat.NewVecDense(n+1, from)
	l, q := 1+mat.Dot(f, mean), 0.0
	q = 2*l - 1 + mat.Dot(f, second)
	return RunLength{Shift: shift, Mean: l, SD: math.Sqrt(max(0, q-l*l))}
}

// CusumRunLength is the run length of the two-sided cumulative sum, both sides
// started at zero, or at h/2 with a head start. The sides combine as
// 1/L = 1/L+ + 1/L- and with a head start s as
// (L+(s) L-(0) + L+(0) L-(s) - L+(0) L-(0)) / (L+(0) + L-(0))
// (Lucas and Crosier 1982), exact where one side's signal finds the other at zero.
func CusumRunLength(k, h, shift, scale float64, headStart bool) RunLength {
	up := OneSidedCusumRunLength(k, h, 0, shift, scale).Mean
	down := OneSidedCusumRunLength(k, h, 0, -shift, scale).Mean
	r := RunLength{Shift: shift, SD: math.NaN()}
	if !headStart {
		r.Mean = 1 / (1/up + 1/down)
		return r
	}
	upHead := OneSidedCusumRunLength(k, h, h/2, shift, scale).Mean
	downHead := OneSidedCusumRunLength(k, h, h/2, -shift, scale).Mean
	// (a d + b c - b d)/(b + d) with d possibly enormous: divide through by d.
	// A side that practically never signals, from either start, drops out.
	ratio := func(a, b float64) float64 {
		if math.IsInf(b, 0) {
			return 1
		}
		return a / b
	}
	if up > down {
		up, down, upHead, downHead = down, up, downHead, upHead
	}
	r.Mean = (upHead + up*(ratio(downHead, down)-1)) / (1 + up/down)
	return r
}

// EWMARunLength is the run length of the exponentially weighted mean with constant
// limits at width asymptotic standard deviations (Crowder 1987; Lucas and Saccucci
// 1990), by Gauss-Legendre nodes.
func EWMARunLength(weight, width, shift, scale float64) RunLength {
	h := width * math.Sqrt(weight/(2-weight))
	n := ewmaNodes(weight, h, scale)
	mean, second, from := ewmaSolve(weight, h, shift, scale, n)
	f := mat.NewVecDense(n, from(0))
	l := 1 + mat.Dot(f, mean)
	q := 2*l - 1 + mat.Dot(f, second)
	return RunLength{Shift: shift, Mean: l, SD: math.Sqrt(max(0, q-l*l))}
}

func ewmaNodes(weight, h, scale float64) int {
	return int(min(160, max(40, 8*h/(weight*scale))))
}

// ewmaSolve returns run lengths and second moments at the nodes of [-h, h] and the
// row of transition weights from a mean z.
func ewmaSolve(weight, h, shift, scale float64, n int) (mean, second *mat.VecDense, from func(z float64) []float64) {
	x, w := legendre(n, -h, h)
	s := weight * scale
	row := func(z float64, out []float64) {
		for j := range n {
			out[j] = w[j] * density((x[j]-(1-weight)*z-weight*shift)/s) / s
		}
	}
	m := mat.NewDense(n, n, nil)
	for i := range n {
		row(x[i], m.RawRowView(i))
	}
	mean, second = solveRun(m)
	return mean, second, func(z float64) []float64 {
		out := make([]float64, n)
		row(z, out)
		return out
	}
}

// EWMAExactRunLength is EWMARunLength with the exact limits that widen from the first
// value on, as Judge draws them. The density of the mean is carried from value to
// value until the limits stand still; from there the constant-limit solution holds.
func EWMAExactRunLength(weight, width, shift, scale float64) RunLength {
	const n = 80
	last := width * math.Sqrt(weight/(2-weight))
	limit := func(i int) float64 {
		return last * math.Sqrt(-math.Expm1(2*float64(i)*math.Log1p(-weight)))
	}
	if weight == 1 {
		return EWMARunLength(weight, width, shift, scale)
	}
	s := weight * scale
	total := 1.0 // probability of needing at least one value
	var x, f []float64
	for i := 1; ; i++ {
		xi, wi := legendre(n, -limit(i), limit(i))
		fi := make([]float64, n) // density times weight
		for j := range xi {
			if i == 1 {
				fi[j] = wi[j] * density((xi[j]-weight*shift)/s) / s
				continue
			}
			for l := range x {
				fi[j] += f[l] * density((xi[j]-(1-weight)*x[l]-weight*shift)/s) / s
			}
			fi[j] *= wi[j]
		}
		x, f = xi, fi
		alive := sum(f)
		if alive < 1e-13 {
			break
		}
		if last-limit(i) < 1e-11*last {
			mean, _, from := ewmaSolve(weight, last, shift, scale, n)
			for l := range x {
				total += f[l] * (1 + mat.Dot(mat.NewVecDense(n, from(x[l])), mean))
			}
			break
		}
		total += alive
	}
	return RunLength{Shift: shift, Mean: total, SD: math.NaN()}
}

func sum(x []float64) float64 {
	s := 0.0
	for _, v := range x {
		s += v
	}
	return s
}

// CorrelatedIndividualsRunLength is the run length of an individuals chart on
// first-order correlated values with lag-1 correlation phi, limits at c long-term
// standard deviations and a shift in the same unit, from a stationary start (Kramer
// and Schmid 2000). Limits from the mean moving range lie at c = 3 sqrt(1-phi) only.
func CorrelatedIndividualsRunLength(phi, c, shift float64) RunLength {
	const n = 120
	x, w := legendre(n, -c, c)
	s := math.Sqrt(1 - phi*phi)
	m := mat.NewDense(n, n, nil)
	for i := range n {
		for j := range n {
			m.Set(i, j, w[j]*density((x[j]-shift-phi*(x[i]-shift))/s)/s)
		}
	}
	mean, second := solveRun(m)
	l, q := 1.0, 0.0
	for j := range n {
		l += w[j] * density(x[j]-shift) * mean.AtVec(j)
	}
	q = 2*l - 1
	for j := range n {
		q += w[j] * density(x[j]-shift) * second.AtVec(j)
	}
	return RunLength{Shift: shift, Mean: l, SD: math.Sqrt(max(0, q-l*l))}
}
