package chart

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/stat/distuv"
)

// Agreement is how a measured reference value agrees with its assigned one.
type Agreement struct {
	Score    float64 // (measured - assigned)/sqrt(u^2 + u_assigned^2)
	Verdict  string  // "agrees", "questionable", "disagrees"
	Sentence string
}

// Agree compares a measured value of standard uncertainty u with an assigned one: the
// zeta score of ISO 13528. Up to 2 agrees, from 2 to 3 is questionable, 3 and beyond
// disagrees.
func Agree(measured, u, assigned, uAssigned float64) Agreement {
	total := math.Hypot(u, uAssigned)
	a := Agreement{Score: (measured - assigned) / total}
	switch s := math.Abs(a.Score); {
	case !(total > 0) || !finite(a.Score):
		a.Score, a.Verdict = math.NaN(), "questionable"
		a.Sentence = "Without an uncertainty nothing can be said about agreement."
		return a
	case s <= 2:
		a.Verdict = "agrees"
	case s < 3:
		a.Verdict = "questionable"
	default:
		a.Verdict = "disagrees"
	}
	a.Sentence = fmt.Sprintf("Measured %.4g against assigned %.4g: %+.2g, %.1f times the standard uncertainty of the difference; %s.", measured, assigned, measured-assigned, math.Abs(a.Score), a.Verdict)
	return a
}

// ScoreSpread says whether the scores of many nights spread as honest uncertainties
// make them: with a root mean square near 1. Below 0.7 the stated uncertainties are
// too large, above 1.2 too small, once the count allows the statement.
type ScoreSpread struct {
	Scores    int
	RMS       float64
	Low, High float64 // 95 % interval of the true root mean square
	Honest    bool    // false only where the interval lies outside 0.7 to 1.2 or RMS does and 20 scores are there
	Sentence  string
}

// Bounds of an honest long-term spread of reference scores.
const (
	HonestLow  = 0.7
	HonestHigh = 1.2
)

// SpreadOfScores judges the long-term spread of agreement scores; NaN are left out.
func SpreadOfScores(scores []float64) ScoreSpread {
	s := ScoreSpread{Honest: true}
	ss := 0.0
	for _, z := range scores {
		if finite(z) {
			s.Scores++
			ss += z * z
		}
	}
	if s.Scores == 0 {
		s.RMS, s.Low, s.High = math.NaN(), math.NaN(), math.NaN()
		s.Sentence = "No scores yet."
		return s
	}
	n := float64(s.Scores)
	s.RMS = math.Sqrt(ss / n)
	chi := distuv.ChiSquared{K: n}
	s.Low, s.High = math.Sqrt(ss/chi.Quantile(0.975)), math.Sqrt(ss/chi.Quantile(0.025))
	enough := s.Scores >= SettledFrom
	switch {
	case s.RMS > HonestHigh && (enough || s.Low > HonestHigh):
		s.Honest = false
		s.Sentence = fmt.Sprintf("Over %s the reference scores spread by %.2f instead of 1: the stated uncertainties are too small.", plural(s.Scores, "night"), s.RMS)
	case s.RMS < HonestLow && (enough || s.High < HonestLow):
		s.Honest = false
		s.Sentence = fmt.Sprintf("Over %s the reference scores spread by %.2f instead of 1: the stated uncertainties are too large.", plural(s.Scores, "night"), s.RMS)
	default:
		s.Sentence = fmt.Sprintf("Over %s the reference scores spread by %.2f (95 %% interval %.2f to %.2f), as they should (%.1f to %.1f).", plural(s.Scores, "night"), s.RMS, s.Low, s.High, HonestLow, HonestHigh)
	}
	return s
}
