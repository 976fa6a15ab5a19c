package fit

import (
	"encoding/json"
	"math"
)

// Covariance of two pKa from their budgets: the sum over common shared keys of
// c_a c_b u_a u_b. a and b are the rows of one pKa each (see ForStep). Rows
// that belong to one set alone are never common.
func Covariance(a, b []Component) float64 {
	s := 0.0
	for _, x := range a {
		if !x.Shared {
			continue
		}
		for _, y := range b {
			if y.Shared && y.Key == x.Key {
				s += x.C * y.C * x.U * y.U
			}
		}
	}
	return s
}

// ForStep returns the rows of pKa step (0-based).
func ForStep(rows []Component, step int) []Component {
	var out []Component
	for _, r := range rows {
		if r.Step == step {
			out = append(out, r)
		}
	}
	return out
}

// Variance is the sum of squares of the contributions of the rows of one pKa.
func Variance(rows []Component) float64 {
	s := 0.0
	for _, r := range rows {
		s += r.C * r.C * r.U * r.U
	}
	return s
}

// Buckets sums the contributions of one pKa for people: standard uncertainties
// by Bucket ("own", "run", "lab"). An unnamed bucket counts as "lab".
func Buckets(rows []Component) map[string]float64 {
	out := map[string]float64{}
	for _, r := range rows {
		b := r.Bucket
		if b == "" {
			b = "lab"
		}
		out[b] += r.C * r.C * r.U * r.U
	}
	for k, v := range out {
		out[k] = math.Sqrt(v)
	}
	return out
}

// EffectiveDOF is the Welch-Satterthwaite number of degrees of freedom of the
// combined uncertainty of one pKa (JCGM 100, G.4); +Inf when no row is finite.
func EffectiveDOF(rows []Component) float64 {
	var v, d float64
	for _, r := range rows {
		x := r.C * r.C * r.U * r.U
		v += x
		if r.DOF > 0 && !math.IsInf(r.DOF, 0) {
			d += x * x / r.DOF
		}
	}
	if d == 0 {
		return math.Inf(1)
	}
	return v * v / d
}

// plainResult has the fields of Result without its methods.
type plainResult Result

// jsonResult hides the fields that may be NaN or infinite, which JSON cannot
// say, behind ones that are written as null.
type jsonResult struct {
	*plainResult
	Slope     *float64 `json:"slope"`
	SlopeSD   *float64 `json:"slope_sd"`
	Condition *float64 `json:"condition"`
}

// MarshalJSON writes the result; a slope or condition that is not finite becomes null.
func (r Result) MarshalJSON() ([]byte, error) {
	finite := func(v float64) *float64 {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil
		}
		return &v
	}
	return json.Marshal(jsonResult{(*plainResult)(&r), finite(r.Slope), finite(r.SlopeSD), finite(r.Condition)})
}

// UnmarshalJSON reads what MarshalJSON wrote: a null slope is NaN, a null condition +Inf.
func (r *Result) UnmarshalJSON(b []byte) error {
	v := jsonResult{plainResult: (*plainResult)(r)}
	if err := json.Unmarshal(b, &v); err != nil {
		return err
	}
	get := func(p *float64, otherwise float64) float64 {
		if p == nil {
			return otherwise
		}
		return *p
	}
	r.Slope, r.SlopeSD = get(v.Slope, math.NaN()), get(v.SlopeSD, math.NaN())
	r.Condition = get(v.Condition, math.Inf(1))
	return nil
}
