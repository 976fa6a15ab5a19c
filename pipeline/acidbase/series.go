package acidbase

import (
	"errors"
	"fmt"
	"math"
)

// A SeriesPoint is one pKa of a series, with the rows of its uncertainty.
// Rows with equal keys in two points are one and the same error.
type SeriesPoint struct {
	Label        string
	PKa          float64
	U            float64 // own standard uncertainty: what is not in Terms
	Terms        []Term
	TemperatureC float64
	Ionic        float64 // mol/L or mol/kg
	Permittivity float64 // of the solvent, for cosolvent series
	WaterMolar   float64 // mol/L of water, for cosolvent series
	UX           float64 // standard uncertainty of the abscissa (ionic strength, K, or relative composition as its effect on pKa is given in UComposition)
	UComposition float64 // pKa: effect of the uncertainty of the composition of this point
}

// A Series is an extrapolated line with its joint uncertainty.
type Series struct {
	Names    []string  // of the coefficients
	Units    []string  // of the coefficients
	Coef     []float64 // the first is the value at the reference condition
	Cov      []float64 // k*k, everything included
	U        float64   // standard uncertainty of Coef[0]
	UOwn     float64   // of it, from what the points do not share
	Terms    []Term    // shared inputs, with their sensitivity on Coef[0], and one own row without a key
	Gain     []float64 // n: d Coef[0] / d pKa of each point
	Residual []float64 // n, pKa
	ZOut     []float64 // n: each point against the line through the others, in its standard uncertainty
	ChiSq    float64
	DOF      int
	Text     string
}

// ErrSeries is wrapped when a series cannot be extrapolated.
var ErrSeries = errors.New("series cannot be extrapolated")

// AtZeroIonicStrength extrapolates mixed constants of an acid form of charge z
// to I = 0 with the fixed slope of a model:
//
//	pKa' - (2z-1) f(I) = pKa0 + b I
//
// b, the specific interaction, is fitted when withSlope is set and three points
// or more are given; without it every point is one estimate of pKa0. The error
// of the model is one draw for all points, largest where I is; the model's
// uncertainty at the mean ionic strength is added when b is not fitted.
func AtZeroIonicStrength(points []SeriesPoint, z int, o RecipeOption, withSlope bool) (*Series, error) {
	n := len(points)
	y, x := make([]float64, n), make([][]float64, n)
	rows := make([][]Term, n)
	own := make([]float64, n)
	for i, p := range points {
		if err := o.Model.Check(p.Ionic); err != nil {
			return nil, fmt.Errorf("%w: point %d: %w", ErrSeries, i+1, err)
		}
		c, err := Convert(p.PKa, Mixed, Thermodynamic, z, Conditions{TemperatureC: p.TemperatureC, Ionic: p.Ionic, UIonic: p.UX, Model: o.Model, Water: o.Water, Basis: o.Basis})
		if err != nil {
			return nil, fmt.Errorf("%w: point %d: %w", ErrSeries, i+1, err)
		}
		y[i], own[i] = c.PKa, math.Hypot(p.U, c.Terms[0].C*p.UX)
		x[i] = []float64{1}
		rows[i] = append(rows[i], p.Terms...)
		if withSlope {
			x[i] = append(x[i], p.Ionic)
		} else {
			rows[i] = append(rows[i], c.Terms[1])
			// One draw for all points, in proportion to each point's own size.
			last := &rows[i][len(rows[i])-1]
			last.C, last.U = last.C*last.U, 1
		}
	}
	names, units := []string{"pKa at I = 0"}, []string{"1"}
	if withSlope {
		names, units = append(names, "specific interaction b"), append(units, "kg/mol")
	}
	s, err := generalised(x, y, own, rows)
	if err != nil {
		return nil, err
	}
	s.Names, s.Units = names, units
	s.Text = fmt.Sprintf("extrapolated to I = 0 from %d points by %s with slope %d f(I)", n, o.Model, 2*z-1)
	return s, nil
}

// OverTemperature fits constants at several temperatures with the enthalpy of
// ionisation at thetaC, and the heat capacity when withCapacity is set (van 't
// Hoff; Clarke & Glew 1966). Coefficients: pKa at thetaC, enthalpy in kJ/mol,
// heat capacity in J/(mol K).
func OverTemperature(points []SeriesPoint, thetaC float64, withCapacity bool) (*Series, error) {
	n := len(points)
	y, x, own := make([]float64, n), make([][]float64, n), make([]float64, n)
	rows := make([][]Term, n)
	for i, p := range points {
		dh, dc := clarkeGlewRow(thetaC, p.TemperatureC)
		y[i], own[i], rows[i] = p.PKa, p.U, p.Terms
		x[i] = []float64{1, dh}
		if withCapacity {
			x[i] = append(x[i], dc)
		}
	}
	s, err := generalised(x, y, own, rows)
	if err != nil {
		return nil, err
	}
	if hasUX(points) {
		// An error of temperature acts through the slope just found.
		for i, p := range points {
			c := 0.0
			if withCapacity {
				c = s.Coef[2] * (p.TemperatureC - thetaC) / 1000
			}
			own[i] = math.Hypot(p.U, DPKaDT(s.Coef[1]+c, p.TemperatureC)*p.UX)
		}
		if s, err = generalised(x, y, own, rows); err != nil {
			return nil, err
		}
	}
	s.Names, s.Units = []string{fmt.Sprintf("pKa at %.4g °C", thetaC), "enthalpy of ionisation"}, []string{"1", "kJ/mol"}
	s.Text = fmt.Sprintf("%d temperatures, enthalpy constant", n)
	if withCapacity {
		s.Names, s.Units = append(s.Names, "heat capacity of ionisation"), append(s.Units, "J/(mol K)")
		s.Text = fmt.Sprintf("%d temperatures, heat capacity constant", n)
	}
	return s, nil
}

func hasUX(points []SeriesPoint) bool {
	for _, p := range points {
		if p.UX > 0 {
			return true
		}
	}
	return false
}

// YasudaShedlovsky extrapolates constants measured in mixtures of water and a
// cosolvent to water (Yasuda 1959, Shedlovsky 1962):
//
//	psKa + log10[H2O] = a/eps + b,  pKa = b + a/epsWater - log10[H2O] of water
//
// psKa belongs to the solvent's own pH scale. Coefficients: pKa in water, then
// a. The uncertainty of each composition is UComposition of the point.
func YasudaShedlovsky(points []SeriesPoint, tC float64) (*Series, error) {
	n := len(points)
	eps0 := PermittivityMM(tC)
	water := math.Log10(Density(tC) / 1000 / molarMassWater)
	y, x, own := make([]float64, n), make([][]float64, n), make([]float64, n)
	rows := make([][]Term, n)
	for i, p := range points {
		if !(p.Permittivity > 1) || !(p.WaterMolar > 0) {
			return nil, fmt.Errorf("%w: point %d: permittivity %v and %v mol/L of water, expected both positive; state them for the mixture", ErrSeries, i+1, p.Permittivity, p.WaterMolar)
		}
		y[i] = p.PKa + math.Log10(p.WaterMolar) - water
		x[i] = []float64{1, 1/p.Permittivity - 1/eps0}
		own[i], rows[i] = math.Hypot(p.U, p.UComposition), p.Terms
	}
	s, err := generalised(x, y, own, rows)
	if err != nil {
		return nil, err
	}
	s.Names, s.Units = []string{"pKa in water", "a"}, []string{"1", "1"}
	s.Text = fmt.Sprintf("extrapolated to water (permittivity %.2f, %.1f mol/L) from %d mixtures after Yasuda and Shedlovsky", eps0, math.Pow(10, water), n)
	return s, nil
}

// generalised solves generalised least squares y = X c with the covariance of
// own variances and shared terms: V = diag(own^2) + sum over keys u^2 c c'.
func generalised(x [][]float64, y, own []float64, rows [][]Term) (*Series, error) {
	n := len(y)
	if n == 0 {
		return nil, fmt.Errorf("%w: no points", ErrSeries)
	}
	k := len(x[0])
	if n < k {
		return nil, fmt.Errorf("%w: %d points for %d coefficients; measure at least %d conditions", ErrSeries, n, k, k)
	}
	keys, load := loadings(rows)
	v := make([]float64, n*n)
	for i := range n {
		if !(own[i] > 0) {
			return nil, fmt.Errorf("%w: point %d has standard uncertainty %v, expected more than 0", ErrSeries, i+1, own[i])
		}
		v[i*n+i] = own[i] * own[i]
		for j := range n {
			for q := range keys {
				v[i*n+j] += load[q][i] * load[q][j]
			}
		}
	}
	l, ok := cholesky(v, n)
	if !ok {
		return nil, fmt.Errorf("%w: the covariance of the points is not positive definite; give each point an uncertainty of its own", ErrSeries)
	}
	normal, gain, ok := normalEquations(l, x, n, k)
	if !ok {
		return nil, fmt.Errorf("%w: the conditions of the points do not fix %d coefficients; spread them further", ErrSeries, k)
	}
	s := &Series{Coef: make([]float64, k), Cov: normal, Residual: make([]float64, n), DOF: n - k, Gain: gain[:n]}
	for c := range k {
		for i := range n {
			s.Coef[c] += gain[c*n+i] * y[i]
		}
	}
	for i := range n {
		s.Residual[i] = y[i]
		for c := range k {
			s.Residual[i] -= x[i][c] * s.Coef[c]
		}
	}
	z := forward(l, s.Residual, n)
	for i := range n {
		s.ChiSq += z[i] * z[i]
		s.UOwn += gain[i] * gain[i] * own[i] * own[i]
	}
	s.U, s.UOwn = math.Sqrt(s.Cov[0]), math.Sqrt(s.UOwn)
	s.terms(keys, load, rows)
	s.leaveOneOut(l, x, n, k)
	return s, nil
}

// loadings gives, per key, its effect in pKa (c times u) on every point.
func loadings(rows [][]Term) (keys []string, load [][]float64) {
	at := map[string]int{}
	for i, terms := range rows {
		for _, t := range terms {
			q, ok := at[t.Key]
			if !ok {
				q = len(keys)
				at[t.Key] = q
				keys = append(keys, t.Key)
				load = append(load, make([]float64, len(rows)))
			}
			load[q][i] += t.C * t.U
		}
	}
	return keys, load
}

// terms writes the budget of the first coefficient: shared keys and own part.
func (s *Series) terms(keys []string, load [][]float64, rows [][]Term) {
	first := map[string]Term{}
	for _, r := range rows {
		for _, t := range r {
			if _, ok := first[t.Key]; !ok {
				first[t.Key] = t
			}
		}
	}
	for q, key := range keys {
		t := first[key]
		effect := 0.0
		for i, g := range s.Gain {
			effect += g * load[q][i]
		}
		t.C = 0
		if t.U > 0 {
			t.C = effect / t.U
		}
		s.Terms = append(s.Terms, t)
	}
	s.Terms = append(s.Terms, Term{Name: "points of the series", C: 1, U: s.UOwn, Unit: "1"})
}

// leaveOneOut compares every point with what the others and the shared errors
// predict for it: with V the covariance and P = V^-1 - V^-1 X (X'V^-1X)^-1 X'V^-1,
// the deviation is (P y)_i / P_ii with variance 1 / P_ii.
func (s *Series) leaveOneOut(l []float64, x [][]float64, n, k int) {
	s.ZOut = make([]float64, n)
	if n <= k {
		return
	}
	unit := make([]float64, n)
	py := backward(l, forward(l, s.Residual, n), n) // V^-1 r = P y
	for i := range n {
		clear(unit)
		unit[i] = 1
		vi := backward(l, forward(l, unit, n), n) // column i of V^-1
		pii := vi[i]
		proj := make([]float64, k) // X' V^-1 e_i
		for c := range k {
			for j := range n {
				proj[c] += x[j][c] * vi[j]
			}
		}
		for c := range k {
			for d := range k {
				pii -= proj[c] * s.Cov[c*k+d] * proj[d]
			}
		}
		if pii > 1e-12*vi[i] {
			s.ZOut[i] = py[i] / math.Sqrt(pii)
		}
	}
}

// normalEquations gives (X'V^-1X)^-1 (k*k) and the gain (X'V^-1X)^-1 X'V^-1 (k*n).
func normalEquations(l []float64, x [][]float64, n, k int) (cov, gain []float64, ok bool) {
	w := make([][]float64, k) // L^-1 X by column
	for c := range k {
		col := make([]float64, n)
		for i := range n {
			col[i] = x[i][c]
		}
		w[c] = forward(l, col, n)
	}
	scale := make([]float64, k)
	nrm := make([]float64, k*k)
	for c := range k {
		for d := range k {
			for i := range n {
				nrm[c*k+d] += w[c][i] * w[d][i]
			}
		}
		scale[c] = math.Sqrt(nrm[c*k+c])
	}
	for c := range k {
		for d := range k {
			nrm[c*k+d] /= scale[c] * scale[d]
		}
	}
	ln, ok := cholesky(nrm, k)
	if !ok {
		return nil, nil, false
	}
	cov, gain = make([]float64, k*k), make([]float64, k*n)
	unit := make([]float64, k)
	for c := range k {
		clear(unit)
		unit[c] = 1
		col := backward(ln, forward(ln, unit, k), k)
		for d := range k {
			cov[d*k+c] = col[d] / (scale[c] * scale[d])
		}
	}
	for c := range k {
		mixed := make([]float64, n)
		for d := range k {
			for i := range n {
				mixed[i] += cov[c*k+d] * w[d][i]
			}
		}
		copy(gain[c*n:(c+1)*n], backward(l, mixed, n))
	}
	return cov, gain, true
}

// cholesky factorises a symmetric positive definite matrix, lower triangle.
func cholesky(a []float64, n int) ([]float64, bool) {
	l := make([]float64, n*n)
	for i := range n {
		for j := 0; j <= i; j++ {
			s := a[i*n+j]
			for p := range j {
				s -= l[i*n+p] * l[j*n+p]
			}
			if i != j {
				l[i*n+j] = s / l[j*n+j]
				continue
			}
			if !(s > 1e-13*a[i*n+i]) {
				return nil, false
			}
			l[i*n+i] = math.Sqrt(s)
		}
	}
	return l, true
}

// forward solves L z = b.
func forward(l, b []float64, n int) []float64 {
	z := make([]float64, n)
	for i := range n {
		s := b[i]
		for p := range i {
			s -= l[i*n+p] * z[p]
		}
		z[i] = s / l[i*n+i]
	}
	return z
}

// backward solves L' x = z.
func backward(l, z []float64, n int) []float64 {
	x := make([]float64, n)
	for i := n - 1; i >= 0; i-- {
		s := z[i]
		for p := i + 1; p < n; p++ {
			s -= l[p*n+i] * x[p]
		}
		x[i] = s / l[i*n+i]
	}
	return x
}
