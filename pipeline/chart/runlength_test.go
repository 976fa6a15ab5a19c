package chart

import (
	"math"
	"testing"
	"time"
)

func TestScratch(t *testing.T) {
	t.Log(OneSidedCusumRunLength(.5, 5, 0, 0, 1), CusumRunLength(.5, 5, 1, 1, false), CusumRunLength(.5, 4, 0, 1, true))
	t.Log(EWMARunLength(.2, 2.962, 0, 1), EWMARunLength(.03, 2.437, 0, 1), EWMAExactRunLength(.1, 2.814, 0, 1), EWMAExactRunLength(.03, 2.437, 0.5, 1))
	t.Log(CorrelatedIndividualsRunLength(.5, 3*math.Sqrt(.5), 0), CorrelatedIndividualsRunLength(.9, .948683, 0))
	t.Log(IndividualsDriftRunLength(3.069, .1, 0), EWMADriftRunLength(.133, 2.856, .1, 0), EWMADriftRunLength(.133, 2.856, .01, 0), CusumDriftRunLength(.25, 8, .005, 0))
	t.Log(RunsRunLength(3, ZoneRuns(), 0, 1), RunsRunLength(3, ZoneRuns(), 1, 1), RunsRunLength(3, Multirule(), 0, 1))
	t.Log(IndividualsCusumRunLength(3.5, .5, 5, 0, 1), IndividualsEWMARunLength(3.5, .2, 2.962, 0, 1), IndividualsEWMARunLength(3.5, .2, 2.962, 1, 1))
	t.Log(IndividualsRangeRunLength(3, 3.6858865664, 0, 1), IndividualsRangeRunLength(3, 3.6858865664, 1, 1))
	t0 := time.Now()
	r, d, err := LimitsFor(365, 20, Rules{Individuals: 3, EWMAWeight: .2, EWMAWidth: 2.8, CusumSlack: .5, CusumDecision: 5, SelfStarting: 5, MovingRange: 3})
	t.Logf("%+v %+v %v %v", r, d, err, time.Since(t0))
	r, d, err = LimitsFor(365, 20, Rules{Individuals: 3, Runs: Multirule()})
	t.Logf("%+v %+v %v %v", r, d, err, time.Since(t0))
	r, d, err = LimitsFor(365, 20, Rules{Individuals: 3, Runs: PatternRuns()})
	t.Logf("%+v %+v %v %v", r, d, err, time.Since(t0))
	t.Logf("%+v", EstimatedLimits(20, 3))
	t.Logf("%+v", ConstantsFor(10))
	t.Logf("%v", time.Since(t0))
	t.Logf("%+v", Simulate(Known(0, 1), Rules{Individuals: 3, Runs: ZoneRuns()}, Disturbance{}, 5000, 1))
	t.Logf("%v", time.Since(t0))
	t.Log(OrderRunLength(6, 0), OrderRunLength(7, 0), OrderRunLength(0, 14))
}
