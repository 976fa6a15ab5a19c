package assay

import (
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/spectra"
)

// Problem prepares a set and states its measurement model as Compute does,
// without fitting: for what is estimated from many sets together. Rungs that
// only the fit would leave out take part.
func Problem(in Input) (fit.Problem, error) {
	pr := pair(&in)
	el, err := in.electrode()
	if err == nil {
		el, err = in.corrected(el, &pr)
	}
	if err != nil {
		return fit.Problem{}, err
	}
	prep, err := spectra.Prepare(pr.rungs, pr.blanks, in.preparation())
	if err != nil {
		return fit.Problem{}, err
	}
	p := in.problem(prep, pr, el)
	p.Effective = prep.Effective
	return p, nil
}
