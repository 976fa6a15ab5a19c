package fit

import (
	"errors"
	"fmt"
	"math"
)

// ErrProblem is wrapped by every error about a Problem that cannot be fitted.
var ErrProblem = errors.New("fit: unusable problem")

func bad(format string, args ...any) error {
	return fmt.Errorf("%w: %s", ErrProblem, fmt.Sprintf(format, args...))
}

// check says whether p can be fitted at all.
func check(p *Problem) error {
	m, w, n := len(p.PH), len(p.WavelengthNM), p.Steps
	switch {
	case n < 1 || n > maxSteps:
		return bad("steps: %d, expected 1..%d", n, maxSteps)
	case w < 1:
		return bad("no wavelengths: give at least one column")
	case len(p.A) != m*w:
		return bad("absorbances: %d values, expected %d rungs x %d wavelengths = %d", len(p.A), m, w, m*w)
	case p.Start != nil && len(p.Start) != n:
		return bad("start: %d values, expected %d", len(p.Start), n)
	case p.NoiseRung != nil && len(p.NoiseRung) != m:
		return bad("noise per rung: %d values, expected %d", len(p.NoiseRung), m)
	case p.NoiseWave != nil && len(p.NoiseWave) != w:
		return bad("noise per wavelength: %d values, expected %d", len(p.NoiseWave), w)
	case p.SigmaPH != nil && len(p.SigmaPH) != m:
		return bad("sigma of pH: %d values, expected %d", len(p.SigmaPH), m)
	case p.Library != nil && len(p.Library) != (n+1)*w:
		return bad("library spectra: %d values, expected %d forms x %d wavelengths", len(p.Library), n+1, w)
	case p.ULibrary != nil && len(p.ULibrary) != len(p.Library):
		return bad("uncertainty of library spectra: %d values, expected %d", len(p.ULibrary), len(p.Library))
	case p.Library == nil && m < n+2:
		return bad("rungs: %d, expected at least %d for %d steps with free spectra; add solutions or fix the spectra", m, n+2, n)
	case p.Library != nil && m < 1:
		return bad("no rungs")
	case !(p.UAmount >= 0) || !(p.UBaseline >= 0) || math.IsInf(p.UAmount, 0) || math.IsInf(p.UBaseline, 0):
		return bad("amount scatter %v and baseline %v must be finite and not negative", p.UAmount, p.UBaseline)
	}
	if err := finite("absorbance", p.A); err != nil {
		return err
	}
	if err := errors.Join(finite("pH", p.PH), finite("start", p.Start), finite("library", p.Library),
		positive("noise per rung", p.NoiseRung), positive("noise per wavelength", p.NoiseWave)); err != nil {
		return err
	}
	for i, x := range p.SigmaPH {
		if !(x >= 0) || math.IsInf(x, 0) {
			return bad("sigma of pH %d is %v, expected a number not below zero", i, x)
		}
	}
	return nil
}

// finite refuses NaN and infinities.
func finite(what string, v []float64) error {
	for i, x := range v {
		if x-x != 0 {
			return bad("%s %d is %v: leave out the wavelength for all rungs, or the rung", what, i, x)
		}
	}
	return nil
}

// positive refuses all but finite numbers above zero.
func positive(what string, v []float64) error {
	for i, x := range v {
		if !(x > 0) || x-x != 0 {
			return bad("%s %d is %v, expected a positive number", what, i, x)
		}
	}
	return nil
}

// merge joins shared errors of equal key, because equal keys are one unknown.
func merge(p *Problem) ([]Shared, error) {
	if len(p.Shared) == 0 {
		return nil, nil
	}
	out := make([]Shared, 0, len(p.Shared))
	for _, s := range p.Shared {
		if s.S != nil && len(s.S) != len(p.PH) {
			return nil, bad("shared error %s: %d coefficients, expected one per rung (%d)", s.Key, len(s.S), len(p.PH))
		}
		if s.Direct != nil && len(s.Direct) != p.Steps {
			return nil, bad("shared error %s: %d direct coefficients, expected one per pKa (%d)", s.Key, len(s.Direct), p.Steps)
		}
		if !(s.U >= 0) || math.IsInf(s.U, 0) {
			return nil, bad("shared error %s: standard uncertainty %v", s.Key, s.U)
		}
		at := -1
		for i := range out {
			if out[i].Key == s.Key {
				at = i
			}
		}
		if at < 0 {
			out = append(out, s)
			continue
		}
		if out[at].U != s.U {
			return nil, bad("shared error %s has two standard uncertainties, %v and %v: equal keys are one unknown", s.Key, out[at].U, s.U)
		}
		out[at].S, out[at].Direct = add(out[at].S, s.S), add(out[at].Direct, s.Direct)
	}
	return out, nil
}

// add returns a+b in a new slice; nil counts as zeros.
func add(a, b []float64) []float64 {
	if a == nil {
		return b
	}
	if b == nil {
		return a
	}
	out := make([]float64, len(a))
	for i := range a {
		out[i] = a[i] + b[i]
	}
	return out
}
