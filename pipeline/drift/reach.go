package drift

// A ResultFacts is what Reach needs to know of one stored result.
type ResultFacts struct {
	ID         int64
	Night      Night
	Instrument string
	Compound   string
	PKa        float64
	U          float64   // expanded uncertainty
	Ladder     []float64 // m, pH as read
	Gain       []float64 // m, d pKa / d pH reading; nil: 1/m each
	Charge     int
	Ionic      float64
	DPKaDT     float64
	DPHDT      float64
	Buffers    []float64  // pH of the calibration in force
	Free       bool       // free spectra: optical causes do not reach it
	Resources  []Resource // what it used; Role as in Use
	Roles      []string   // parallel to Resources, "" except for buffers
	Released   bool
}

// Harm is what a case may have done to one result.
type Harm struct {
	ID         int64   `json:"id"`
	Impact     float64 `json:"impact"`     // pKa, of the likeliest cause
	Bound      float64 `json:"bound"`      // pKa, upper 95 % of the absolute impact over all causes with at least 5 %
	Cause      Cause   `json:"cause"`      // the cause that sets the bound
	Limit      float64 `json:"limit"`      // U/3
	Unaffected bool    `json:"unaffected"` // proposed; a person signs
	Corrected  float64 `json:"corrected"`  // pKa less the impact, where the cause is a buffer value; NaN else
	Why        string  `json:"why"`
}

// Reach bounds the harm of an explanation to the results between the last good
// and the next good reference night.
func Reach(e Explanation, h History, lastGood, nextGood Night, results []ResultFacts) []Harm {
	return nil
}

// A Forecast says when a characteristic will leave its limits.
type Forecast struct {
	Night Night  `json:"night"` // best estimate
	Low   Night  `json:"low"`   // 90 % interval
	High  Night  `json:"high"`  // 0: may never happen
	Known bool   `json:"known"` // false: no trend that could be extrapolated
	Text  string `json:"text"`
}

// ForecastExit extrapolates a straight line through the points (nights ascending,
// values with standard deviations) to the limits low and high.
func ForecastExit(nights []Night, values, sd []float64, low, high float64, now Night) Forecast {
	return Forecast{}
}
