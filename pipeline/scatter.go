package pipeline

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"slices"
	"strings"

	"pkvigil/db"
	"pkvigil/pipeline/assay"
	"pkvigil/pipeline/fit"
)

// scatterSets is how many of the newest undisturbed reference sets an estimate
// of scatter uses, and scatterNights how far back they may lie.
const (
	scatterSets   = 40
	scatterNights = 180
)

// A Scatter is what many reference sets of an instrument say of the scatter of
// its pH readings and of the amount of dye, beside what the settings declare.
// It is a proposal: nothing uses it until a person writes it into the settings.
type Scatter struct {
	Instrument      string         `json:"instrument"`
	From            string         `json:"from_night"`
	To              string         `json:"to_night"`
	Found           fit.RemlResult `json:"found"`
	DeclaredSigmaPH float64        `json:"declared_sigma_ph"` // 0: not declared
	DeclaredUAmount float64        `json:"declared_u_amount"`
}

// Scatter estimates the scatter of an instrument from its newest undisturbed
// reference sets: those that stand, with every rung, from checks that were good.
func (s *Service) Scatter(ctx context.Context, instrument string) (*Scatter, error) {
	inst := set(s).InstrumentByName(instrument)
	if inst == nil {
		return nil, fmt.Errorf("instrument %q is not in the settings: %w", instrument, ErrUnknownObject)
	}
	now := s.clock.Now()
	tonight := s.Night(now)
	l, err := s.look(ctx, nil, instrument, moveNight(tonight, -scatterNights), tonight, now)
	if err != nil {
		return nil, err
	}
	var use []db.Measured
	for _, st := range slices.Backward(l.stations) {
		for _, x := range st.sets {
			v := x.Standing.Verdict
			if st.state == stationGood && (v == db.Stands || v == db.StandsNoted) && len(use) < scatterSets {
				use = append(use, x.Measured)
			}
		}
	}
	out := &Scatter{Instrument: instrument, DeclaredSigmaPH: inst.SigmaPH, DeclaredUAmount: inst.UAmount}
	var problems []fit.Problem
	for _, m := range use {
		p, err := s.problemOf(ctx, m)
		if err != nil {
			return nil, fmt.Errorf("set %s: %w", m.Set.Key, err)
		}
		if p == nil {
			continue
		}
		problems = append(problems, *p)
		if out.From == "" || m.Set.Night < out.From {
			out.From = m.Set.Night
		}
		out.To = max(out.To, m.Set.Night)
	}
	r, err := fit.Reml(problems)
	if err != nil {
		return nil, fmt.Errorf("scatter of %s: %w", instrument, err)
	}
	out.Found = *r
	return out, nil
}

// problemOf states the problem of a stored result again, as it was computed;
// nil where a rung was left out of it.
func (s *Service) problemOf(ctx context.Context, m db.Measured) (*fit.Problem, error) {
	r, err := s.store.ResultByID(ctx, nil, m.ResultID)
	if err != nil {
		return nil, err
	}
	if slices.ContainsFunc(r.Rungs, func(g db.Rung) bool { return g.LeftOut }) {
		return nil, nil
	}
	var rec struct {
		Used     used        `json:"used"`
		Exchange [][2]string `json:"exchanged_labels"`
	}
	if err := json.Unmarshal(r.Record, &rec); err != nil {
		return nil, fmt.Errorf("calculation record of result %d: %w", r.ID, err)
	}
	in, _, err := s.inputOf(ctx, &m.Set, r, rec.Used)
	if err != nil {
		return nil, err
	}
	in.Exchange, in.Corrections = rec.Exchange, rec.Used.Corrections
	p, err := assay.Problem(*in)
	return &p, err
}

// Text is the estimate for a terminal.
func (c *Scatter) Text() string {
	var b strings.Builder
	fmt.Fprintf(&b, "scatter of %s from %d undisturbed reference sets of the nights %s to %s\n", c.Instrument, c.Found.Sets, c.From, c.To)
	line := func(what, key string, found, u, declared float64, scale float64, unit string) {
		fmt.Fprintf(&b, "  %-32s %8.4g ± %.2g %s", what, scale*found, scale*u, unit)
		switch {
		case declared <= 0:
			fmt.Fprintf(&b, "   not declared; write %s = %.3g", key, found)
		case math.Abs(found-declared) <= 2*u:
			fmt.Fprintf(&b, "   declared %.4g: they agree", scale*declared)
		default:
			fmt.Fprintf(&b, "   declared %.4g: they differ by %.1f of its standard uncertainties; proposed %s = %.3g", scale*declared, math.Abs(found-declared)/u, key, found)
		}
		fmt.Fprintln(&b)
	}
	line("scatter of one pH reading", "sigma_ph", c.Found.SigmaPH, c.Found.USigmaPH, c.DeclaredSigmaPH, 1, "")
	line("scatter of the amount, %", "u_amount", c.Found.UAmount, c.Found.UUAmount, c.DeclaredUAmount, 100, "%")
	fmt.Fprintln(&b, "  This is a proposal: results use what the settings declare until a person changes it there.")
	return b.String()
}
