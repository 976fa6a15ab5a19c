package verify

import (
	"fmt"
	"math"
	"sync"

	"pkvigil/pipeline/fit"
)

// model gives the model of a StRD problem.
func model(name string) func(b []float64, x float64) float64 {
	switch name {
	case "Misra1a", "BoxBOD":
		return func(b []float64, x float64) float64 { return b[0] * (1 - math.Exp(-b[1]*x)) }
	case "DanWood":
		return func(b []float64, x float64) float64 { return b[0] * math.Pow(x, b[1]) }
	case "Rat42":
		return func(b []float64, x float64) float64 { return b[0] / (1 + math.Exp(b[1]-b[2]*x)) }
	case "Rat43":
		return func(b []float64, x float64) float64 { return b[0] / math.Pow(1+math.Exp(b[1]-b[2]*x), 1/b[3]) }
	case "MGH09":
		return func(b []float64, x float64) float64 { return b[0] * (x*x + x*b[1]) / (x*x + x*b[2] + b[3]) }
	case "MGH10":
		return func(b []float64, x float64) float64 { return b[0] * math.Exp(b[1]/(x+b[2])) }
	case "MGH17":
		return func(b []float64, x float64) float64 { return b[0] + b[1]*math.Exp(-x*b[3]) + b[2]*math.Exp(-x*b[4]) }
	case "Thurber":
		return func(b []float64, x float64) float64 {
			return (b[0] + x*(b[1]+x*(b[2]+x*b[3]))) / (1 + x*(b[4]+x*(b[5]+x*b[6])))
		}
	case "Roszman1":
		return func(b []float64, x float64) float64 { return b[0] - b[1]*x - math.Atan(b[2]/(x-b[3]))/math.Pi }
	}
	return func(b []float64, x float64) float64 { // Eckerle4
		d := (x - b[2]) / b[1]
		return b[0] / b[1] * math.Exp(-0.5*d*d)
	}
}

// strd fits eleven certified problems from both starts: six digits are asked
// of parameters and deviations, nine of the sum of squares.
func strd() []Check {
	g := group{name: "nonlinear least squares", source: "NIST StRD, certified"}
	for _, c := range certificates() {
		m := model(c.name)
		for s, start := range c.start {
			solve := sync.OnceValues(func() (*fit.LMResult, error) {
				r, err := fit.LevenbergMarquardt(func(b, res []float64) {
					for i, y := range c.y {
						res[i] = m(b, c.x[i]) - y
					}
				}, len(c.y), start, fit.LMOptions{})
				if err == nil && r.Status != fit.Converged {
					err = fmt.Errorf("the fit ended with: %v", r.Status)
				}
				return r, err
			})
			get := func(f func(r *fit.LMResult) float64) func() (float64, error) {
				return func() (float64, error) {
					r, err := solve()
					if err != nil {
						return 0, err
					}
					return f(r), nil
				}
			}
			from := fmt.Sprintf("%s from start %d, ", c.name, s+1)
			for k := range c.b {
				g.try(fmt.Sprintf("%sb%d", from, k+1), c.b[k], math.Abs(c.b[k])*1e-6, get(func(r *fit.LMResult) float64 { return r.X[k] }))
				g.try(fmt.Sprintf("%ssd of b%d", from, k+1), c.sd[k], c.sd[k]*1e-6, get(func(r *fit.LMResult) float64 { return r.SD[k] }))
			}
			g.try(from+"sum of squares", c.rss, c.rss*1e-9, get(func(r *fit.LMResult) float64 { return r.RSS }))
		}
	}
	return g.list
}
