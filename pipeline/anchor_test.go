package pipeline

import (
	"math"
	"testing"

	"pkvigil/db"
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/rehearse"
)

// The law of propagation by hand: two results share a buffer and a junction;
// their own rows and a key that only one has stay.
func TestAnchoredByHand(t *testing.T) {
	own := []fit.Component{{Key: "noise", C: 1, U: 0.003}, {Key: "buffer:B-10", C: 0.6, U: 0.010, Shared: true}, {Key: "junction:TRIS", C: 1, U: 0.005, Shared: true}, {Key: "impurity:CR-1", C: 1, U: 0.002, Shared: true}}
	its := []fit.Component{{Key: "noise", C: 1, U: 0.004}, {Key: "buffer:B-10", C: 0.5, U: 0.010, Shared: true}, {Key: "junction:TRIS", C: 1, U: 0.005, Shared: true}}
	ref := db.PKa{Step: 1, PKa: 8.290, Assigned: 8.260, UAssigned: 0.004}
	v, u, ok := anchored(8.231, own, ref, its)
	// 0.003² + 0.004² + (0.1·0.010)² + 0.002² + 0.004²
	want := math.Sqrt(9e-6 + 16e-6 + 1e-6 + 4e-6 + 16e-6)
	if !ok || math.Abs(v-8.201) > 1e-12 || math.Abs(u-want) > 1e-12 {
		t.Errorf("%.4f ± %.5f (%v), expected 8.201 ± %.5f", v, u, ok, want)
	}
	for name, r := range map[string]db.PKa{
		"too far":                   {PKa: 6.7, Assigned: 6.7, UAssigned: 0.004},
		"without an assigned value": {PKa: 8.2, Assigned: math.NaN(), UAssigned: math.NaN()},
	} {
		if _, _, ok := anchored(8.231, own, r, its); ok {
			t.Errorf("anchored to a reference %s", name)
		}
	}
}

// On a night on which every reading is 0.03 too high, the plain value is off
// and the anchored one is not; each says which reference it leans on, and both
// come out again from the database.
func TestAnchoredToTheReferenceOfTheNight(t *testing.T) {
	dyes := rehearse.Dyes()
	sc := &rehearse.Scenario{Seed: 9, Noise: rehearse.Quiet(), Design: rehearse.Design{Dyes: []rehearse.Dye{dyes["RI-C"], dyes["CR"], dyes["RI-A"]}},
		Causes: []rehearse.Cause{{Kind: rehearse.ElectrodeOffset, Onset: 2, Until: 2, Size: 0.03}}}
	l := sampleLab(t, sc, "CR")
	truth := dyes["CR"].PKa[0]
	l.night(sc, 1)
	l.night(sc, 2)
	for _, c := range []struct{ set, ref string }{{"CR-1.n001", "U1/2026-03-02/RI-C-1.n001"}, {"CR-1.n002", "U1/2026-03-03/RI-C-1.n002"}} {
		r := l.result(c.set)
		p := r.PKa[0]
		if p.AnchoredTo != c.ref {
			t.Fatalf("%s leans on %q, expected %s", c.set, p.AnchoredTo, c.ref)
		}
		if !(p.UAnchored < p.U) || math.Abs(p.Anchored-truth) > 2*p.UAnchored {
			t.Errorf("%s: %.4f ± %.4f anchored, plain %.4f ± %.4f, true %.4f", c.set, p.Anchored, p.UAnchored, p.PKa, p.U, truth)
		}
		ref := l.result(c.ref).PKa[0]
		if got := p.PKa + ref.Assigned - ref.PKa; math.Abs(got-p.Anchored) > 1e-12 {
			t.Errorf("%s: anchored %.6f, by the numbers of the reference %.6f", c.set, p.Anchored, got)
		}
		if a, err := l.s.Recompute(t.Context(), r.ID); err != nil || !a.Same {
			t.Errorf("again: %+v, %v", a, err)
		}
	}
	p := l.result("CR-1.n002").PKa[0]
	if plain, anch := math.Abs(p.PKa-truth), math.Abs(p.Anchored-truth); anch > plain/2 {
		t.Errorf("on the displaced night: plain off by %.4f, anchored by %.4f", plain, anch)
	}
	// References do not lean on each other, and RI-A is out of reach anyway.
	if q := l.result("RI-A-1.n001").PKa[0]; q.AnchoredTo != "" {
		t.Errorf("a reference leans on %s", q.AnchoredTo)
	}
}

// A sample measured before the reference, or far from it, stays without.
func TestNotAnchored(t *testing.T) {
	dyes := rehearse.Dyes()
	for name, order := range map[string][]rehearse.Dye{
		"reference later": {dyes["CR"], dyes["RI-C"]},
		"out of reach":    {dyes["RI-A"], dyes["CR"]},
	} {
		sc := &rehearse.Scenario{Seed: 10, Noise: rehearse.Quiet(), Design: rehearse.Design{Dyes: order}}
		l := sampleLab(t, sc, "CR")
		l.night(sc, 1)
		if p := l.result("CR-1.n001").PKa[0]; p.AnchoredTo != "" || !math.IsNaN(p.Anchored) {
			t.Errorf("%s: leans on %q", name, p.AnchoredTo)
		}
	}
}
