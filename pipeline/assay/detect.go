package assay

import (
	"fmt"
	"math"

	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/verdict"
)

// suspects looks for wrong labels: exchanged readings, a table moved by a row,
// a foreign scan, a scan that is there twice. They are proposals; a person signs.
func (o *Outcome) suspects(in *Input, prob fit.Problem, res *fit.Result) {
	if prob.Steps != 1 || len(prob.PH) < 6 || !o.odd(in, prob, res) {
		return
	}
	var nominal [][]float64
	if n := in.nominal(o.Prepared.Keys); n != nil {
		nominal = append(nominal, n)
		o.Facts.Nominal = n
	}
	found, err := fit.LabelSuspects(prob, nominal...)
	if err != nil {
		return // too few rungs to tell; the other checks speak
	}
	key := func(i int) string { return o.Prepared.Keys[i] }
	if len(found) == 0 || found[0].Odds < leastOdds {
		return
	}
	x := found[0] // the likeliest; proposing more would only confuse
	pka := math.NaN()
	if len(x.PKa) > 0 {
		pka = x.PKa[0]
	}
	switch x.Kind {
	case fit.Exchanged:
		o.Facts.Suspects = append(o.Facts.Suspects, verdict.Suspect{Kind: "exchange", A: key(x.Rungs[0]), B: key(x.Rungs[1]), Odds: x.Odds, PKa: pka})
	case fit.Shifted:
		o.Facts.Suspects = append(o.Facts.Suspects, verdict.Suspect{Kind: "shift", B: fmt.Sprintf("%+d", x.Rows), Odds: x.Odds, PKa: pka})
	case fit.Repeated:
		o.Facts.Doubled = append(o.Facts.Doubled, [2]string{key(x.Rungs[0]), key(x.Rungs[1])})
	case fit.Foreign:
		o.Facts.Foreign = append(o.Facts.Foreign, key(x.Rungs[0]))
	}
}

// leastOdds is the likelihood ratio from which a wrong label is proposed.
const leastOdds = 20

// odd says whether there is a reason to doubt labels: pH residuals beyond the
// usual scatter, or a ladder that is not the nominal one.
func (o *Outcome) odd(in *Input, prob fit.Problem, res *fit.Result) bool {
	chi2 := 0.0
	for i, e := range res.Own.Eta {
		chi2 += e * e / (prob.SigmaPH[i] * prob.SigmaPH[i])
	}
	if dof := len(res.Own.Eta) - 3; dof > 0 && chi2 > 2.5*float64(dof) {
		return true
	}
	n := in.nominal(o.Prepared.Keys)
	o.Facts.Nominal = n
	off := 0
	for i := range n {
		if math.Abs(n[i]-prob.PH[i]) > 0.1 {
			off++
		}
	}
	return off > len(n)/4
}

// furtherDye estimates a hidden second dye where a third component shows.
func (o *Outcome) furtherDye(prob fit.Problem) {
	f := o.Fit
	if f.Steps != 1 || len(f.Singular) < 3 || f.NoiseEdge <= 0 || f.Singular[2] < 1.1*f.NoiseEdge || len(o.Facts.Suspects) > 0 {
		return
	}
	h, err := fit.SecondDye(prob, f, fit.Options{Effective: o.Prepared.Effective})
	if err != nil || !h.Found {
		return
	}
	o.Hidden = h
	o.Facts.Foreign = nil // one cause that explains all rungs counts before a foreign vial
	o.Facts.SecondDyeShare, o.Facts.SecondDyePKa, o.Facts.SecondDyeLimit = h.Share, h.PKa, h.Limit
}

// twoForms adds the two-form result to three-solution sets.
func (o *Outcome) twoForms(prob fit.Problem) {
	if o.Facts.Profile != verdict.ThreeSolution {
		return
	}
	if c, err := fit.Classical(prob); err == nil {
		o.Classical = &Library{PKa: c.PKa, U: c.U, Source: fmt.Sprintf("two-form ratio at %.0f nm", c.WavelengthNM)}
	}
}
