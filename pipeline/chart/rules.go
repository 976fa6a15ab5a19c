package chart

import "fmt"

// Names of the chart rules as people see them. Run tests build theirs from their
// counts (see Runs).
const (
	BeyondLimits  = "beyond the action limits"
	MovingTooFar  = "moved too far since the last value"
	WeightedMean  = "weighted mean out of its limits"
	CumulativeSum = "cumulative sum over its limit"
	SelfStarting  = "self-starting cumulative sum over its limit"
	BeyondImpact  = "beyond the impact limit"
)

// Rules says which charts are kept for a characteristic and how wide they are. The
// zero value keeps none. Widths are for a centre and spread that are known; Judge
// widens them for a short baseline.
type Rules struct {
	// Individuals is the distance of the action limits from the centre in standard
	// deviations (3 by custom); 0 keeps no individuals chart.
	Individuals float64
	// MovingRange is the limit of |x_t - x_(t-1)| in standard deviations of x. The
	// customary upper limit D4 times the mean range is 3.6859. 0 keeps none.
	MovingRange float64
	// EWMAWeight is the weight lambda of the newest value in the exponentially
	// weighted mean and EWMAWidth its limit in standard deviations of that mean,
	// exact for every number of values since the start (Roberts 1959; ISO 7870-6).
	EWMAWeight, EWMAWidth float64
	// CusumSlack k and CusumDecision h, both in standard deviations, make a
	// two-sided tabular cumulative sum (Page 1954; ISO 7870-4). HeadStart begins
	// both sides at h/2 (Lucas and Crosier 1982).
	CusumSlack, CusumDecision float64
	HeadStart                 bool
	// SelfStarting is the decision limit h of the self-starting cumulative sum
	// (Hawkins 1987), which needs no baseline and begins with the third value. Its
	// slack is CusumSlack, or 0.5 if that is 0.
	SelfStarting float64
	// Runs are tests for patterns of neighbouring values.
	Runs Runs
	// ImpactLimit is the deviation that matters for results, in the unit of the
	// characteristic; what is smaller is recorded and matters to nobody. 0 for none.
	ImpactLimit float64
}

// Runs are the tests for patterns. Zones are thirds of the distance between centre
// and action limit, as ISO 7870-2 divides a chart: with limits at three standard
// deviations the zone borders lie at one and two. A value exactly on the centre
// belongs to neither side, borders are not beyond themselves, and equal neighbours
// end a rise or fall. A flag is raised at the value that completes the pattern and
// belongs to it.
type Runs struct {
	TwoOfThree  bool // two of three beyond the outer zone border, same side
	FourOfFive  bool // four of five beyond the inner zone border, same side
	OneSide     int  // so many in a row on one side of the centre; 0 for none
	Monotone    int  // so many in a row rising, or falling
	Alternating int  // so many in a row, up and down in turn
	Inner       int  // so many in a row all within the inner zone border
	Outer       int  // so many in a row all beyond the inner zone border, either side

	// The following three with OneSide 10 and the action limits are the multirule of
	// Westgard, Barry, Hunt and Groth, Clin. Chem. 27:493, 1981.
	TwoBeyond  bool // two in a row beyond the same outer zone border
	Opposite   bool // neighbours beyond opposite outer zone borders
	FourBeyond bool // four in a row beyond the same inner zone border
}

// ZoneRuns are the zone tests in general use with action limits at three standard
// deviations: two of three, four of five, eight on one side (Western Electric 1956).
func ZoneRuns() Runs { return Runs{TwoOfThree: true, FourOfFive: true, OneSide: 8} }

// PatternRuns are the eight tests of Nelson, J. Qual. Technol. 16:237, 1984, without
// the action limits: nine on one side, six rising or falling, fourteen alternating,
// two of three, four of five, fifteen within and eight outside the inner zones.
func PatternRuns() Runs {
	return Runs{TwoOfThree: true, FourOfFive: true, OneSide: 9, Monotone: 6, Alternating: 14, Inner: 15, Outer: 8}
}

// Multirule is the published multirule with one value per night (Clin. Chem.
// 27:493, 1981), to be used with Individuals 3.
func Multirule() Runs {
	return Runs{TwoBeyond: true, Opposite: true, FourBeyond: true, OneSide: 10}
}

// DefaultRules keeps individual limits, the weighted mean and the cumulative sum, the
// widths being those for one false alarm in about 370 values each (weighted mean 0.2,
// 2.864 with exact limits; cumulative sum 0.5, 4.774), and the self-starting sum.
func DefaultRules() Rules {
	return Rules{Individuals: 3, EWMAWeight: 0.2, EWMAWidth: 2.864, CusumSlack: 0.5, CusumDecision: 4.774, SelfStarting: 4.774}
}

// zone is the unit of the zone borders in standard deviations.
func (r Rules) zone() float64 {
	if r.Individuals > 0 {
		return r.Individuals / 3
	}
	return 1
}

// any reports whether a pattern test is on.
func (r Runs) any() bool { return r != Runs{} }

// Names of the pattern tests as people see them.
func twoOfThreeName() string    { return "two of three near the limit on one side" }
func fourOfFiveName() string    { return "four of five away from the centre on one side" }
func oneSideName(n int) string  { return numeral(n) + " in a row on one side" }
func monotoneName(n int) string { return numeral(n) + " in a row rising or falling" }
func alternatingName(n int) string {
	return numeral(n) + " in a row up and down in turn"
}
func innerName(n int) string { return numeral(n) + " in a row close to the centre" }
func outerName(n int) string { return numeral(n) + " in a row away from the centre" }
func twoBeyondName() string  { return "two in a row near the same limit" }
func oppositeName() string   { return "neighbours near opposite limits" }
func fourBeyondName() string { return "four in a row away from the centre on one side" }

// Words lists the rules that are kept, as people see them.
func (r Rules) Words() []string {
	var w []string
	add := func(on bool, name string) {
		if on {
			w = append(w, name)
		}
	}
	add(r.Individuals > 0, BeyondLimits)
	add(r.MovingRange > 0, MovingTooFar)
	add(r.EWMAWeight > 0, WeightedMean)
	add(r.CusumDecision > 0, CumulativeSum)
	add(r.SelfStarting > 0, SelfStarting)
	u := r.Runs
	add(u.TwoOfThree, twoOfThreeName())
	add(u.FourOfFive, fourOfFiveName())
	add(u.OneSide > 0, oneSideName(u.OneSide))
	add(u.Monotone > 0, monotoneName(u.Monotone))
	add(u.Alternating > 0, alternatingName(u.Alternating))
	add(u.Inner > 0, innerName(u.Inner))
	add(u.Outer > 0, outerName(u.Outer))
	add(u.TwoBeyond, twoBeyondName())
	add(u.Opposite, oppositeName())
	add(u.FourBeyond, fourBeyondName())
	add(r.ImpactLimit > 0, BeyondImpact)
	return w
}

// Check says what is wrong with the rules, if anything.
func (r Rules) Check() error {
	for _, v := range []struct {
		name string
		x    float64
	}{
		{"individual limit", r.Individuals}, {"moving range limit", r.MovingRange}, {"weighted mean width", r.EWMAWidth},
		{"cumulative sum slack", r.CusumSlack}, {"cumulative sum limit", r.CusumDecision}, {"self-starting limit", r.SelfStarting}, {"impact limit", r.ImpactLimit},
	} {
		if !finite(v.x) || v.x < 0 {
			return fmt.Errorf("chart rules: the %s is %v; expected a number of at least 0", v.name, v.x)
		}
	}
	if !(r.EWMAWeight >= 0 && r.EWMAWeight <= 1) {
		return fmt.Errorf("chart rules: the weight of the newest value is %v; expected 0 (none) to 1", r.EWMAWeight)
	}
	if r.EWMAWeight > 0 && r.EWMAWidth == 0 {
		return fmt.Errorf("chart rules: a weighted mean with weight %v has no width; give one, or let it follow from the tolerable false alarms", r.EWMAWeight)
	}
	u := r.Runs
	for _, v := range []struct {
		name string
		n    int
	}{{"on one side", u.OneSide}, {"rising or falling", u.Monotone}, {"up and down in turn", u.Alternating}, {"close to the centre", u.Inner}, {"away from the centre", u.Outer}} {
		if v.n < 0 || v.n == 1 || v.n == 2 || v.n > longestRun {
			return fmt.Errorf("chart rules: a run of %d %s; expected 0 (no test) or 3 to %d", v.n, v.name, longestRun)
		}
	}
	return nil
}

// longestRun bounds the length of a run test and the memory a chart keeps.
const longestRun = 64
