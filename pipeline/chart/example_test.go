package chart_test

import (
	"fmt"

	"pkvigil/pipeline/chart"
)

// Handbook series about 325 with a step after the twelfth group: the cumulative sum
// signals at group 14 and dates the change.
func ExampleJudge() {
	x := []float64{324.925, 324.675, 324.725, 324.350, 325.350, 325.225, 324.125, 324.525, 325.225, 324.600, 324.625, 325.150, 328.325, 327.250}
	var history []chart.Value
	for i, v := range x {
		history = append(history, chart.Value{Night: i + 1, X: v})
	}
	for _, j := range chart.Judge(chart.Known(325, 0.635), history, chart.Rules{CusumSlack: 0.5, CusumDecision: 6.608}) {
		for _, f := range j.Flags {
			fmt.Printf("night %d: %s, since night %d\n%s\n", j.Night, f.Rule, f.Since, f.Sentence)
		}
	}
	// Output:
	// night 14: cumulative sum over its limit, since night 13
	// Small deviations above the centre have added up to 7.8 standard deviations over 2 values since night 13; the limit is 6.6.
}

// One false alarm in 365 nights, all ten charts of an instrument together.
func ExampleLimitsFor() {
	rules, design, err := chart.LimitsFor(365, 10, chart.Rules{Individuals: 3, CusumSlack: 0.5, CusumDecision: 5})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("limits %.2f, cumulative sum %.2f\n", rules.Individuals, rules.CusumDecision)
	for _, row := range design.Rows {
		fmt.Printf("%s: %.0f nights in control, %.1f after a step of two\n", row.Rule, row.InControl, row.Shifted[3].Mean)
	}
	// Output:
	// limits 3.81, cumulative sum 7.74
	// beyond the action limits: 7300 nights in control, 28.7 after a step of two
	// cumulative sum over its limit: 7300 nights in control, 5.8 after a step of two
}
