package fit

import "math"

// Keys of the budget rows that belong to one set alone.
const (
	OwnReading  = "own:ph-reading"
	OwnAmount   = "own:amount"
	OwnNoise    = "own:absorbance"
	OwnBaseline = "own:baseline"
	OwnLibrary  = "own:library"
)

// influence holds what the pKa of one estimate answers to.
type influence struct {
	np   int
	inv  []float64 // np*N rows of the inverse normal matrix
	t    []float64 // np*m*q: d p / d data coordinate
	cov  []float64 // np*np, priors and noise together
	cond float64
	ok   bool
}

// influences factors the undamped normal matrix at the solution.
func (c *core) influences(inf *influence) {
	m, q, ne, np := c.m, c.q, c.ne, c.np
	n := ne + np + c.nb
	inf.np = np
	inf.inv, inf.t = grow(inf.inv, np*n), grow(inf.t, np*m*q)
	inf.cov = grow(inf.cov, np*np)
	c.assemble(&c.now, 0)
	inf.ok = cholesky(c.a.mat, n)
	if !inf.ok {
		inf.cond = math.Inf(1)
		return
	}
	for k := 0; k < np; k++ {
		x := inf.inv[k*n : (k+1)*n]
		clear(x)
		x[ne+k] = 1
		forward(c.a.mat, n, x)
		backward(c.a.mat, n, x)
		copy(inf.cov[k*np:(k+1)*np], x[ne:ne+np])
	}
	var e small
	var buf [maxSteps + 2]float64
	for i := 0; i < m; i++ {
		c.eliminate(&c.now, i, 0, &e)
		for k := 0; k < np; k++ {
			x := inf.inv[k*n : (k+1)*n]
			out := inf.t[(k*m+i)*q : (k*m+i)*q+q]
			clear(out)
			for l := 0; l < q && ne > 0; l++ {
				for g, y := range c.qrow(&c.now, i, l) {
					out[l] += x[l*c.n1+g] * y
				}
			}
			for j := 0; j < np+c.nb; j++ {
				c.column(&c.now, i, j, buf[:q])
				for l := range out {
					out[l] += x[ne+j] * buf[l]
				}
			}
			e.weigh(out)
		}
	}
	inf.cond = scaledCondition(inf.cov, np, c.n)
}

// scaledCondition is the condition number of the leading n x n part of the
// inverse of cov after scaling to unit diagonal, which equals that of the
// correlation matrix of cov.
func scaledCondition(cov []float64, stride, n int) float64 {
	if n == 1 {
		if cov[0] > 0 && !math.IsInf(cov[0], 0) {
			return 1
		}
		return math.Inf(1)
	}
	var buf [maxSteps * maxSteps]float64
	var vals [maxSteps]float64
	r, val := buf[:n*n], vals[:n]
	for i := 0; i < n; i++ {
		for j := 0; j < n; j++ {
			r[i*n+j] = cov[i*stride+j] / math.Sqrt(cov[i*stride+i]*cov[j*stride+j])
		}
	}
	eigenInto(val, r, n, nil)
	if !(val[n-1] > 0) {
		return math.Inf(1)
	}
	return val[0] / val[n-1]
}

// fill writes the estimate at c.now to out. Shared errors enter the variance
// once each, by their signed coefficient, whether or not they took part in
// the weighting.
func (c *core) fill(p *Problem, shared []Shared, inf *influence, out *Estimate) {
	m, n := c.m, c.n
	f := &c.now
	out.PKa = append(out.PKa[:0], f.p[:n]...)
	out.Gain = grow(out.Gain, n*m)
	out.Cov, out.CovOwn = grow(out.Cov, n*n), grow(out.CovOwn, n*n)
	out.Components = out.Components[:0]
	for k := 0; k < n; k++ {
		for i := 0; i < m; i++ {
			g := 0.0
			for l := 0; l < c.q; l++ {
				g -= inf.t[(k*m+i)*c.q+l] * f.dt[i*c.q+l]
			}
			out.Gain[k*m+i] = g
		}
	}
	var own [4]float64
	for k := 0; k < n; k++ {
		for l := 0; l < n; l++ {
			parts := c.ownParts(inf, out.Gain, k, l)
			s := 0.0
			for _, v := range parts {
				s += v
			}
			out.CovOwn[k*n+l], out.Cov[k*n+l] = s, s
			if k == l {
				own = parts
			}
		}
		c.ownRows(p, k, own, out)
		for _, sh := range shared {
			out.Components = append(out.Components, sh.component(k, out.Gain[k*m:(k+1)*m]))
		}
	}
	out.addShared(shared, n, m)
	out.Eta, out.Kappa, out.Baseline = grow(out.Eta, m), grow(out.Kappa, m), grow(out.Baseline, m)
	for i := 0; i < m; i++ {
		out.Eta[i] = f.t[i] - c.ph[i]
		out.Kappa[i] = c.ukap * f.k[i]
		out.Baseline[i] = 0
		if c.base {
			// Posterior mean of the offset, given the residual along its direction.
			out.Baseline[i] = f.c[i*c.q+c.q-1] / c.w0[i] * (1 - 1/c.d[i]) / (c.vnorm * c.rung[i])
		}
	}
	out.Objective = f.phi
}

// addShared adds every shared error to the covariance once, by its coefficients.
func (e *Estimate) addShared(shared []Shared, n, m int) {
	for _, sh := range shared {
		for k := 0; k < n; k++ {
			ck := sh.coefficient(k, e.Gain[k*m:(k+1)*m])
			for l := 0; l < n; l++ {
				e.Cov[k*n+l] += ck * sh.coefficient(l, e.Gain[l*m:(l+1)*m]) * sh.U * sh.U
			}
		}
	}
}

// ownParts is the covariance of pKa k and l from reading, amount, noise, baseline.
func (c *core) ownParts(inf *influence, gain []float64, k, l int) (part [4]float64) {
	m, q, f := c.m, c.q, &c.now
	for i := 0; i < m; i++ {
		tk, tl := inf.t[(k*m+i)*q:(k*m+i)*q+q], inf.t[(l*m+i)*q:(l*m+i)*q+q]
		part[0] += gain[k*m+i] * gain[l*m+i] * c.sig[i] * c.sig[i]
		var ak, al float64
		for j := 0; j < q; j++ {
			ak += tk[j] * f.dk[i*q+j]
			al += tl[j] * f.dk[i*q+j]
			v := tk[j] * tl[j]
			if c.base && j == q-1 {
				part[2] += v / c.d[i]
				part[3] += v * (1 - 1/c.d[i])
			} else {
				part[2] += v
			}
		}
		part[1] += ak * al * c.ukap * c.ukap
	}
	return part
}

// ownRows appends the budget rows of one set alone.
func (c *core) ownRows(p *Problem, k int, own [4]float64, out *Estimate) {
	sig := 0.0
	for _, s := range c.sig {
		sig += s * s
	}
	sig = math.Sqrt(sig / float64(c.m))
	noise := 0.0
	for _, v := range c.inv {
		noise += 1 / (v * v)
	}
	noise = math.Sqrt(noise / float64(c.w))
	row := func(key, name, unit string, u, variance float64) {
		coef := 0.0
		if u > 0 {
			coef = math.Sqrt(math.Max(variance, 0)) / u
		}
		out.Components = append(out.Components, Component{
			Key: key, Name: name, Step: k, C: coef, U: u, Unit: unit, Bucket: "own"})
	}
	row(OwnReading, "pH reading", "pH", sig, own[0])
	row(OwnAmount, "amount of dye", "1", c.ukap, own[1])
	row(OwnNoise, "absorbance noise", "absorbance", noise, own[2])
	row(OwnBaseline, "baseline", "absorbance", p.UBaseline, own[3])
}

// coefficient is d pKa_k / d unknown: through the readings and directly.
func (s *Shared) coefficient(k int, gain []float64) float64 {
	c := 0.0
	if s.S != nil {
		c = dot(gain, s.S)
	}
	if s.Direct != nil {
		c += s.Direct[k]
	}
	return c
}

// component is the budget row of the shared error for pKa k.
func (s *Shared) component(k int, gain []float64) Component {
	dof := s.DOF
	if math.IsInf(dof, 1) {
		dof = 0
	}
	return Component{Key: s.Key, Name: s.Name, Step: k, C: s.coefficient(k, gain),
		U: s.U, Unit: s.Unit, DOF: dof, Bucket: s.Bucket, Shared: true}
}

// libraryRow adds what the uncertainty of given spectra contributes. Their
// errors are taken as independent between wavelengths and forms.
func (c *core) libraryRow(p *Problem, inf *influence, out *Estimate) {
	if !c.fixed || p.ULibrary == nil {
		return
	}
	n, n1, w, q := c.n, c.n1, c.w, c.q
	basis := c.libraryBasis(p)
	sens := make([]float64, n*n1*w) // d pKa_k / d library_j at wavelength l
	for k := 0; k < n; k++ {
		for i := 0; i < c.m; i++ {
			t := inf.t[(k*c.m+i)*q : (k*c.m+i)*q+q]
			for l := range w {
				x := 0.0
				for a := 0; a < n1; a++ {
					x += t[a] * basis[a*w+l]
				}
				if c.base {
					x += t[q-1] * c.w0[i] * c.v[l]
				}
				for j := 0; j < n1; j++ {
					sens[(k*n1+j)*w+l] -= x * c.now.bm[i*n1+j] * c.inv[l]
				}
			}
		}
	}
	u := 0.0
	for _, v := range p.ULibrary {
		u += v * v
	}
	u = math.Sqrt(u / float64(len(p.ULibrary)))
	for k := 0; k < n; k++ {
		for l := 0; l < n; l++ {
			s := 0.0
			for j, v := range p.ULibrary {
				s += sens[k*n1*w+j] * sens[l*n1*w+j] * v * v
			}
			out.CovOwn[k*n+l] += s
			out.Cov[k*n+l] += s
			if k == l && u > 0 {
				out.Components = append(out.Components, Component{Key: OwnLibrary, Name: "archived spectra",
					Step: k, C: math.Sqrt(s) / u, U: u, Unit: "absorbance", Bucket: "own"})
			}
		}
	}
}
