package drift

import "math"

// Threshold bounds the ln B at which a group score of n hypotheses (cause x
// resource x shape) may ring if a false case in one of nights nights is
// tolerable: a Bayes factor for one onset is a martingale under no change, so it
// ever exceeds b with probability at most 1/b (Ville 1939), and n of them start
// each night. Calibrate finds the lower value that really gives the rate.
func Threshold(n int, nights float64) float64 {
	return math.Log(math.Max(1, float64(n)) * math.Max(1, nights))
}

// A CalibrationPlan says how much null simulation to spend.
type CalibrationPlan struct {
	Seed     uint64
	Runs     int // simulated series, each with a baseline of its own; 0: 200
	Nights   int // nights per series; 0: those of the history
	Progress func(done, total int)
}

// A Calibrated threshold with what is known of it.
type Calibrated struct {
	Threshold float64 `json:"threshold"` // ln B
	Low, High float64 // 90 % interval of it from the simulation's size
	Runs      int     `json:"runs"`
	Nights    int     `json:"nights"` // simulated quiet nights in all
	Bound     float64 `json:"bound"`  // Threshold's value, for comparison
	Text      string  `json:"text"`
}
