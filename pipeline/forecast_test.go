package pipeline

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"pkvigil/pipeline/rehearse"
)

// An electrode whose slope on the acid side falls by 0.2 % a night reaches the
// limit of 95 % on a night that the numbers give, and that is said on every
// way a person may ask; one that does not age has no forecast.
func TestElectrodeLeavesItsLimits(t *testing.T) {
	dyes := rehearse.Dyes()
	sc := &rehearse.Scenario{Seed: 5, Noise: rehearse.Quiet(), Design: rehearse.Design{Dyes: []rehearse.Dye{dyes["RI-A"]}}}
	l := sampleLab(t, sc)
	bottles := []rehearse.Buffer{{Lot: "B-4", Label: 4.005, True: 4.005}, {Lot: "B-7", Label: 6.865, True: 6.865}, {Lot: "B-10", Label: 10.012, True: 10.012}}
	wobble := 0.0
	noise := func() float64 { wobble = -wobble + 0.01; return wobble }
	start := time.Date(2026, 3, 2, 17, 0, 0, 0, time.UTC)
	var aged, sound rehearse.Calibration
	for i := range 5 {
		at := start.AddDate(0, 0, 4*i)
		l.clock.MoveTo(at)
		for _, e := range []rehearse.Electrode{{Name: "E-1", E7MV: 2, SlopeAcid: 0.99 - 0.002*4*float64(i), SlopeBase: 0.99}, {Name: "E-2", E7MV: 2, SlopeAcid: 0.99, SlopeBase: 0.99}} {
			c := rehearse.Calibrate(e, bottles, 25, noise)
			c.Meter, c.At = "M-1", at
			l.write(fmt.Sprintf("METERS/%s_%s.csv", e.Name, at.Format(time.DateOnly)), rehearse.CalibrationCSV(c, time.UTC))
			if e.Name == "E-1" {
				aged = c
			} else {
				sound = c
			}
		}
		l.steps(time.Minute, time.Minute)
	}
	if len(aged.Points) != 3 || len(sound.Points) != 3 {
		t.Fatal("no calibrations")
	}
	// 99 % on 2 March, 0.2 % a night: 95 % twenty nights later.
	want := time.Date(2026, 3, 22, 0, 0, 0, 0, time.UTC)
	rows, err := l.s.store.CalibrationsOf(t.Context(), nil, "E-1", time.Time{})
	if err != nil || len(rows) != 5 {
		t.Fatalf("%d calibrations, %v", len(rows), err)
	}
	if f := rows[1].Figures; f == nil || f.ForecastLimitNight != "" {
		t.Errorf("a forecast from two calibrations: %+v", f)
	}
	got, err := time.Parse(time.DateOnly, rows[4].Figures.ForecastLimitNight)
	if err != nil || math.Abs(got.Sub(want).Hours()) > 48 {
		t.Errorf("limit reached on %q, expected about %s", rows[4].Figures.ForecastLimitNight, want.Format(time.DateOnly))
	}
	v, err := l.s.Since(t.Context(), "E-1", "")
	if err != nil || len(v.Exits) != 1 || !strings.Contains(v.Exits[0].Sentence(), "leaves its limits in") {
		t.Fatalf("since: %+v, %v", v, err)
	}
	if x := v.Exits[0]; x.What != "slope on the acid side" || x.Low != 95 || x.High != 102 {
		t.Errorf("exit %+v", x)
	}
	sound2, err := l.s.Since(t.Context(), "E-2", "")
	if err != nil || len(sound2.Exits) != 0 {
		t.Errorf("a sound electrode: %+v, %v", sound2, err)
	}
	d, err := l.s.BriefData(t.Context(), "2026-03-18", l.clock.Now())
	if err != nil || !strings.Contains(d.Text(), "Electrode E-1: its slope on the acid side leaves its limits") {
		t.Errorf("brief: %v\n%s", err, d.Text())
	}
	if strings.Contains(d.Text(), "E-2") {
		t.Error("the brief tells of an electrode that is in order")
	}
}

// The scatter found from reference sets is the one they were made with, and
// nothing but the command shows it.
func TestScatterIsProposed(t *testing.T) {
	dyes := rehearse.Dyes()
	noise := rehearse.Quiet()
	noise.ReadPH, noise.AmountRung = 0.009, 0.004
	sc := &rehearse.Scenario{Seed: 6, Noise: noise, Design: rehearse.Design{Dyes: []rehearse.Dye{dyes["RI-A"]}, Repeats: 14}}
	l := sampleLab(t, sc)
	// What is declared is wrong by a third.
	for i := range l.s.set.Instruments {
		l.s.set.Instruments[i].SigmaPH, l.s.set.Instruments[i].UAmount = 0.006, 0.004
	}
	if _, err := l.s.Scatter(t.Context(), "U9"); err == nil {
		t.Error("an instrument nobody knows has a scatter")
	}
	l.night(sc, 1)
	if _, err := l.s.Scatter(t.Context(), "U1"); err == nil || !strings.Contains(err.Error(), "20") {
		t.Errorf("fourteen sets were enough: %v", err)
	}
	l.night(sc, 2)
	c, err := l.s.Scatter(t.Context(), "U1")
	if err != nil {
		t.Fatal(err)
	}
	f := c.Found
	if math.Abs(f.SigmaPH-0.009) > 3*f.USigmaPH || math.Abs(f.UAmount-0.004) > 3*f.UUAmount {
		t.Errorf("found %.4f ± %.4f and %.4f ± %.4f, made with 0.009 and 0.004", f.SigmaPH, f.USigmaPH, f.UAmount, f.UUAmount)
	}
	if f.USigmaPH > 0.001 {
		t.Errorf("uncertainty %.4f of %d sets", f.USigmaPH, f.Sets)
	}
	text := c.Text()
	if !strings.Contains(text, "proposed sigma_ph = ") || !strings.Contains(text, "until a person changes it") {
		t.Errorf("text:\n%s", text)
	}
	if l.s.set.Instruments[0].SigmaPH != 0.006 {
		t.Error("the proposal was used")
	}
	r := l.result("RI-A-1.n002")
	if g := r.Rungs[0].U; g != 0.006 {
		t.Errorf("a result used %.4f, declared is 0.006", g)
	}
	if _, err := l.s.Design(t.Context(), "nothing"); err == nil {
		t.Error("a design of nothing")
	}
	d, err := l.s.Design(t.Context(), "RI-A")
	if err != nil {
		t.Fatal(err)
	}
	if d.Design.AtLeast < 365*chartsPerInstrument*0.99 {
		t.Errorf("one false flag in %.0f values, asked for one in %d nights over %d charts", d.Design.AtLeast, 365, chartsPerInstrument)
	}
	for _, row := range d.Design.Rows {
		for i := 1; i < len(row.Shifted); i++ {
			if row.Shifted[i].Mean > row.Shifted[i-1].Mean+1e-9 {
				t.Errorf("%s: a larger step is seen later", row.Rule)
			}
		}
	}
	if !strings.Contains(d.Text(), "in control") {
		t.Errorf("text:\n%s", d.Text())
	}
}
