package fit

import (
	"math"
	"slices"
	"testing"
)

// TestExchangedNeighbours repeats the simulated result of needs 4.4: a search
// over exchanges finds the right neighbours, at the ends of the ladder too.
func TestExchangedNeighbours(t *testing.T) {
	for i := 0; i < 11; i++ {
		for seed := range uint64(3) {
			p := ladderSet(seed, nil)
			clean, err := Solve(p, Options{Bare: true})
			if err != nil {
				t.Fatal(err)
			}
			p.PH[i], p.PH[i+1] = p.PH[i+1], p.PH[i]
			s, err := LabelSuspects(p)
			if err != nil {
				t.Fatal(err)
			}
			if len(s) == 0 || s[0].Kind != Exchanged || !slices.Equal(s[0].Rungs, []int{i, i + 1}) {
				// Where nothing changes colour an exchange has no effect to see.
				if math.Abs(p.PH[i]-7.1) < 1.7 {
					t.Errorf("exchange of %d and %d not first: %+v", i, i+1, s)
				}
				continue
			}
			within(t, "pKa with labels put right", s[0].PKa[0], clean.Own.PKa[0], 2e-3)
			if s[0].Chi2 > 3*float64(s[0].DOF) || s[0].Now < 3*float64(s[0].DOF) {
				t.Errorf("chi-square %.0f -> %.0f on %d", s[0].Now, s[0].Chi2, s[0].DOF)
			}
		}
	}
}

func TestQuietSetHasNoSuspects(t *testing.T) {
	for seed := range uint64(20) {
		s, err := LabelSuspects(ladderSet(seed, nil), ladderSet(99, func(d *design) { d.sigPH = 0 }).PH)
		if err != nil {
			t.Fatal(err)
		}
		if len(s) > 0 {
			t.Errorf("seed %d: %+v", seed, s[0])
		}
	}
}

// TestShiftedTable: without the nominal ladder a uniform shift is invisible and
// the pKa wrong by one step; with it the shift is named.
func TestShiftedTable(t *testing.T) {
	p := ladderSet(1, nil)
	nominal := slices.Clone(p.PH)
	step := p.PH[1] - p.PH[0]
	for i := range p.PH {
		p.PH[i] += step
	}
	blind, err := LabelSuspects(p)
	if err != nil {
		t.Fatal(err)
	}
	if len(blind) > 0 {
		t.Errorf("a uniform shift cannot be seen without the ladder, yet %+v", blind[0])
	}
	s, err := LabelSuspects(p, nominal)
	if err != nil {
		t.Fatal(err)
	}
	if len(s) == 0 || s[0].Kind != Shifted {
		t.Fatalf("shift not named: %+v", s)
	}
	within(t, "pKa with the table moved back", s[0].PKa[0], 7.1, 0.02)
}

func TestForeignAndRepeatedScan(t *testing.T) {
	p := ladderSet(3, nil)
	w := len(p.WavelengthNM)
	for l, nm := range p.WavelengthNM {
		p.A[5*w+l] += 0.05 * math.Exp(-sq((nm-520)/20)/2)
	}
	s, err := LabelSuspects(p)
	if err != nil {
		t.Fatal(err)
	}
	if len(s) == 0 || s[0].Kind != Foreign || s[0].Rungs[0] != 5 {
		t.Errorf("foreign scan 5 not first: %+v", s)
	}
	p = ladderSet(4, nil)
	copy(p.A[3*w:4*w], p.A[4*w:5*w])
	if s, err = LabelSuspects(p); err != nil {
		t.Fatal(err)
	}
	if !slices.ContainsFunc(s, func(x Suspect) bool { return x.Kind == Repeated && slices.Equal(x.Rungs, []int{3, 4}) }) {
		t.Errorf("repeated scan not named: %+v", s)
	}
}
