package verify

import (
	"context"
	"errors"
	"math"
	"slices"
	"testing"
	"time"
)

func TestAllPublishedChecksPass(t *testing.T) {
	start := time.Now()
	rows, err := Run(t.Context(), Checks())
	if err != nil {
		t.Fatal(err)
	}
	for _, r := range Failed(rows) {
		t.Errorf("%s: %s (%s): expected %.12g within %.2g, got %.12g %s", r.Group, r.Check, r.Source, r.Expected, r.Within, r.Got, r.Error)
	}
	if took := time.Since(start); took > 5*time.Second {
		t.Errorf("the checks took %v, at most 5 s are asked", took)
	}
	if len(rows) < 1000 || len(Summarize(rows)) < 20 {
		t.Errorf("%d checks in %d groups", len(rows), len(Summarize(rows)))
	}
	seen := map[string]bool{}
	for _, r := range rows {
		if r.Source == "" || r.Check == "" {
			t.Errorf("%s: a check without name or source: %q", r.Group, r.Check)
		}
		key := r.Group + r.Check + r.Source
		if seen[key] {
			t.Errorf("%s: %q twice", r.Group, r.Check)
		}
		seen[key] = true
	}
}

// TestEveryFigureIsNoticed: with any expected figure one per cent off, its row
// must fail while the program's side stays as it is.
func TestEveryFigureIsNoticed(t *testing.T) {
	for _, c := range Checks() {
		for _, factor := range []float64{0.99, 1.01} {
			off := c
			off.Expected *= factor
			if off.run().Pass {
				t.Errorf("%s: %s: a figure of %g passes for %g (within %.2g)", c.Group, c.Name, off.Expected, c.Expected, c.Within)
			}
		}
	}
}

func TestRowsSayWhatFails(t *testing.T) {
	checks := []Check{
		{Group: "a", Name: "right", Expected: 2, Within: 0.1, Got: func() (float64, error) { return 2.05, nil }},
		{Group: "a", Name: "no number", Expected: 2, Within: 0.1, Got: func() (float64, error) { return math.NaN(), nil }},
		{Group: "b", Name: "error", Expected: 2, Within: 0.1, Got: func() (float64, error) { return 2, errors.New("no") }},
		{Group: "b", Name: "panic", Expected: 2, Within: 0.1, Got: func() (float64, error) { panic("stop") }},
	}
	rows, err := Run(t.Context(), checks)
	if err != nil {
		t.Fatal(err)
	}
	pass := []bool{true, false, false, false}
	for i, r := range rows {
		if r.Pass != pass[i] {
			t.Errorf("%s: pass %v", r.Check, r.Pass)
		}
	}
	if s := Summarize(rows); len(s) != 2 || s[0].Failed != 1 || s[1].Failed != 2 {
		t.Errorf("summary %+v", Summarize(rows))
	}
	if rows[2].Error != "no" || rows[3].Error != "stopped: stop" {
		t.Errorf("reasons %q, %q", rows[2].Error, rows[3].Error)
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := Run(ctx, checks); !errors.Is(err, context.Canceled) {
		t.Errorf("a stopped run: %v", err)
	}
	if !slices.ContainsFunc(rows, func(r Row) bool { return r.Digits > 1.5 && r.Digits < 1.7 }) {
		t.Errorf("digits of the first row: %v", rows[0].Digits)
	}
}
