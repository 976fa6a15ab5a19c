package fit

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/stat/distuv"
)

// A Model is one candidate of ModelChoice.
type Model struct {
	Steps     int     `json:"steps"`
	Result    *Result `json:"result"`
	Gain      float64 `json:"gain"`      // improvement of the corrected criterion over the model before; 0 for the first
	Misfit    float64 `json:"misfit"`    // sum of squares on rungs (see ModelChoice) with the signals that this model can explain
	DOF       int     `json:"dof"`       // its degrees of freedom
	P         float64 `json:"p"`         // chance of a misfit at least as large if the model and the stated errors hold
	Extra     bool    `json:"extra"`     // a further component exceeds the noise edge
	Negative  bool    `json:"negative"`  // a spectrum is negative beyond doubt
	Outside   bool    `json:"outside"`   // a pKa lies more than 0.5 outside the ladder
	Accepted  bool    `json:"accepted"`  // taken in preference to the model before
	Reason    string  `json:"reason"`    // why, or why not
	Undecided bool    `json:"undecided"` // within 2 units of the model before
}

// A Choice is the outcome of ModelChoice.
type Choice struct {
	Steps     int     `json:"steps"`     // the number of steps chosen
	Models    []Model `json:"models"`    // one step, two steps, ...
	Undecided bool    `json:"undecided"` // two models are within 2 units: report both
	Warning   string  `json:"warning,omitempty"`
}

// ModelChoice fits one step, two steps, ... up to maxSteps and goes on to the
// next only if (a) a further component exceeds the noise edge or the misfit of
// the present model is improbable (p < 0.01), (b) a corrected information
// criterion improves by more than 6, (c) the new spectra are not negative
// beyond doubt and (d) every new pKa lies inside the ladder +-0.5. A model that
// improves but still does not explain the set is passed through on the way to
// the next, and is not offered as the answer.
//
// The criterion is that of Akaike with the correction of Hurvich & Tsai (1989)
// on rungs and not on wavelengths: the two models are compared on the n+2
// strongest independent signals of the set, each scaled to unit noise, m
// numbers per signal, with the reading errors and amounts as random effects.
func ModelChoice(p Problem, maxSteps int) (*Choice, error) {
	maxSteps = min(maxSteps, 4)
	if maxSteps < 1 {
		return nil, fmt.Errorf("%w: at least one step", ErrProblem)
	}
	out := &Choice{Steps: 1}
	var s Solver
	going := true
	for n := 1; n <= maxSteps && len(p.PH) >= n+2; n++ {
		q := p
		q.Steps, q.Start, q.Library = n, nil, nil
		if n == p.Steps {
			q.Start = p.Start
		}
		r, err := s.Solve(q, Options{MaxIterations: 100})
		if err != nil {
			return nil, err
		}
		mod := Model{Steps: n, Result: r, Extra: r.Components > n+1}
		if r.Status == Unusable || len(r.Full.PKa) == 0 {
			mod.Reason = "the fit did not come to an end: " + r.Status.String()
			out.Models = append(out.Models, mod)
			break
		}
		mod.inspect(&q, r)
		mod.misfit(&s, &q)
		if n > 1 && len(out.Models) == n-1 {
			prev := &out.Models[n-2]
			mod.Gain = s.criterionGain(&q, prev.Result.Own.PKa, r.Own.PKa)
			mod.judge(prev, going)
			going = going && mod.Gain > 6 && (prev.Extra || prev.P < 0.01)
			if mod.Accepted {
				out.Steps = n
			}
			out.Undecided = out.Undecided || mod.Undecided && (prev.Steps == out.Steps || mod.Accepted)
		} else {
			mod.Accepted, mod.Reason = true, "the simplest model"
		}
		out.Models = append(out.Models, mod)
		if !going {
			break
		}
	}
	if last := out.Models[out.Steps-1]; last.P < 0.01 {
		out.Warning = fmt.Sprintf("No model up to %d steps explains the set within its stated errors (p = %.2g): more than these equilibria, or a wrong pH axis.", len(out.Models), last.P)
	}
	return out, nil
}

// adequate reports whether the misfit can be lived with: not improbable, or
// not beyond what stated errors too small by a factor of 1.4 would give.
func (mod *Model) adequate() bool {
	return !(mod.P < 0.001) || mod.Misfit <= 2*float64(mod.DOF)
}

// inspect fills what can be read off the result.
func (mod *Model) inspect(p *Problem, r *Result) {
	lo, hi := slices.Min(p.PH)-0.5, slices.Max(p.PH)+0.5
	for _, v := range r.Full.PKa {
		if v < lo || v > hi {
			mod.Outside = true
		}
	}
	mod.Negative = negative(r, len(p.WavelengthNM))
}

// negative reports a spectrum below zero by more than three standard
// deviations and 2 % of its top at once.
func negative(r *Result, w int) bool {
	for j := 0; j <= r.Steps && len(r.Spectra) >= (j+1)*w; j++ {
		e, sd := r.Spectra[j*w:(j+1)*w], r.SpectraSD[j*w:(j+1)*w]
		top := 0.0
		for _, v := range e {
			top = math.Max(top, math.Abs(v))
		}
		for l, v := range e {
			if v < -3*sd[l] && v < -0.02*top {
				return true
			}
		}
	}
	return false
}

// misfit is the objective on the n+1 signals that an n-step model can explain.
func (mod *Model) misfit(s *Solver, p *Problem) {
	n := mod.Steps
	var red reduced
	var c core
	s.prepareAs(p, mod.Result)
	dims := min(n+1, p.columns())
	red.compress(&s.red, dims, n+1, 0)
	c.ownFit(&red, &s.c, p.PH, mod.Result.Own.PKa, 200)
	mod.Misfit = c.now.phi
	signals := dims
	if red.base {
		signals++
	}
	mod.DOF = (len(p.PH)-n-1)*signals - n
	mod.P = math.NaN()
	if mod.DOF > 0 {
		mod.P = distuv.ChiSquared{K: float64(mod.DOF)}.Survival(mod.Misfit)
	}
}

// columns is the number of wavelengths left after the offset direction.
func (p *Problem) columns() int {
	if p.UBaseline > 0 {
		return max(len(p.WavelengthNM)-1, 1)
	}
	return len(p.WavelengthNM)
}

// prepareAs reduces p with the noise that r used.
func (s *Solver) prepareAs(p *Problem, r *Result) {
	if err := s.prepare(p, Options{}); err != nil {
		return
	}
	if f := r.NoiseSD / s.noiseSD(); f != 1 && f > 0 {
		s.red.scale(f, p.UBaseline)
	}
}

// criterionGain is the improvement of the corrected criterion from n-1 to n
// steps; p.Steps is n.
func (s *Solver) criterionGain(p *Problem, before, after []float64) float64 {
	n, m := p.Steps, len(p.PH)
	dims := min(n+1, p.columns())
	var red reduced
	red.compress(&s.red, dims, n, s.red.effective(p.Effective))
	signals := dims
	if red.base {
		signals++
	}
	value := func(start []float64) float64 {
		var c core
		c.ownFit(&red, &s.c, p.PH, start, 200)
		k := float64(len(start) + (len(start)+1)*signals)
		rest := float64(m*signals) - k - 1
		if rest <= 0 {
			return math.Inf(1)
		}
		return c.now.phi + 2*k + 2*k*(k+1)/rest
	}
	a, b := value(before), value(after)
	if math.IsInf(b, 1) {
		return math.Inf(-1)
	}
	return a - b
}

// judge decides between this model and the one before.
func (mod *Model) judge(prev *Model, going bool) {
	mod.Undecided = math.Abs(mod.Gain) <= 2
	switch {
	case !going:
		mod.Reason = "a simpler model was enough"
	case mod.Result.Status == Undetermined:
		mod.Reason = "the data do not fix its constants"
	case !prev.Extra && !(prev.P < 0.01):
		mod.Reason = fmt.Sprintf("%d steps leave neither a further component nor an improbable misfit (p = %.2g)", prev.Steps, prev.P)
	case !(mod.Gain > 6):
		mod.Reason = fmt.Sprintf("the criterion on rungs improves by %.1f only, more than 6 is asked", mod.Gain)
	case mod.Negative:
		mod.Reason = "it needs a negative spectrum"
	case mod.Outside:
		mod.Reason = "it needs a pKa outside the ladder"
	case mod.Result.Status != Converged || !mod.adequate():
		mod.Reason = fmt.Sprintf("the criterion on rungs improves by %.1f, but it does not explain the set either", mod.Gain)
	default:
		mod.Accepted = true
		mod.Reason = fmt.Sprintf("the criterion on rungs improves by %.1f", mod.Gain)
	}
}
