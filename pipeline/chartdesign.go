package pipeline

import (
	"context"
	"fmt"
	"strings"

	"pkvigil/db"
	"pkvigil/pipeline/chart"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/settings"
)

// A ChartDesign is what the charts of a reference cost in false alarms and how
// soon they see a change, with the settings in force.
type ChartDesign struct {
	Reference string       `json:"reference"`
	Design    chart.Design `json:"design"`
	Charts    []DesignUnit `json:"charts"`
}

// A DesignUnit says what one standard deviation of the design is on one chart.
type DesignUnit struct {
	Name  string  `json:"name"`
	Stage string  `json:"stage"`
	N     int     `json:"nights"`
	SD    float64 `json:"sd"`
}

// designed are the chart rules of settings with the design they come from.
func designed(c settings.Charts, charts int) (chart.Rules, chart.Design, error) {
	kinds := chart.DefaultRules()
	if c.Multirule {
		kinds.Runs = chart.Multirule()
	}
	nights := c.FalseAlarmNights
	if nights <= 0 {
		nights = 365
	}
	rules, d, err := chart.LimitsFor(nights, charts, kinds)
	if err != nil {
		return rules, d, fmt.Errorf("chart limits for one false alarm in %g nights over %d charts: %w", nights, charts, err)
	}
	return rules, d, nil
}

// Design gives the run lengths of the charts of a reference as they are set now.
func (s *Service) Design(ctx context.Context, reference string) (*ChartDesign, error) {
	_, d, err := designed(set(s).Charts, chartsPerInstrument)
	if err != nil {
		return nil, err
	}
	out := &ChartDesign{Reference: reference, Design: d}
	all, err := s.store.Baselines(ctx, nil, db.PointFilter{}, s.clock.Now())
	if err != nil {
		return nil, err
	}
	for _, b := range all {
		if b.Reference != reference && b.Scope != reference && b.Scope+"/"+b.Reference != reference {
			continue
		}
		name := scopeName(b.Series) + ": " + drift.Characteristic(b.Characteristic).Words()
		if b.RefLot != "" {
			name += ", lot " + b.RefLot
		}
		out.Charts = append(out.Charts, DesignUnit{Name: name, Stage: b.Stage, N: b.N, SD: b.Spread})
	}
	if len(out.Charts) > 0 {
		return out, nil
	}
	points, err := s.store.History(ctx, nil, db.PointFilter{}, s.clock.Now())
	if err != nil {
		return nil, err
	}
	for _, p := range points {
		if p.Reference == reference || p.Scope == reference || p.Scope+"/"+p.Reference == reference {
			return out, nil // charted, too young for a baseline
		}
	}
	return nil, fmt.Errorf("nothing is charted for %q: %w", reference, ErrUnknownObject)
}

// Text is the design for a terminal.
func (d *ChartDesign) Text() string {
	var b strings.Builder
	fmt.Fprintf(&b, "charts of %s: nights between false flags, and nights until a step is seen (mean)\n", d.Reference)
	for _, l := range d.Design.Lines() {
		fmt.Fprintln(&b, "  "+l)
	}
	if len(d.Charts) == 0 {
		fmt.Fprintln(&b, "no chart has a baseline yet (three nights)")
		return b.String()
	}
	fmt.Fprintln(&b, "one standard deviation (sd) is")
	for _, c := range d.Charts {
		fmt.Fprintf(&b, "  %9.3g  %s (%s, %d nights)\n", c.SD, c.Name, c.Stage, c.N)
	}
	return b.String()
}
