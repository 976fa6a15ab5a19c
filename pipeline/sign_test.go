package pipeline

import (
	"errors"
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/pipeline/rehearse"
)

// nights plays whole nights of a scenario, files and mornings.
func (l *lab) nights(sc *rehearse.Scenario, from, to int) {
	l.t.Helper()
	for n := from; n <= to; n++ {
		l.clock.MoveTo(time.Date(2026, 3, 1+n, 23, 0, 0, 0, time.UTC))
		l.put(exports(l.t, sc, n))
		l.settle()
		l.steps(8*time.Hour, time.Minute)
	}
}

// refuses expects an error that says something.
func refuses(t *testing.T, said string, err error, says string) {
	t.Helper()
	if err == nil || !strings.Contains(err.Error(), says) {
		t.Errorf("said %q with error %v, expected an error with %q", said, err, says)
	}
}

// Every decision of a person: what it does, what it refuses, and its deed.
func TestSigning(t *testing.T) {
	sc := quiet(rehearse.Fault{Key: "name.swap2", Rung: 4})
	sc.Design.CalibrateEvery = 1
	l := newLab(t, sc, "")
	l.nights(sc, 1, 5)
	if r := l.result("PR-1.n001"); r.Verdict != db.Held {
		t.Fatalf("exchanged labels: %s", r.Verdict)
	}

	t.Run("needs name, reason and object", func(t *testing.T) {
		_, err := l.s.Sign(t.Context(), Signature{Verb: "lift", Object: []string{"PR-1.n001"}, Because: "x"})
		refuses(t, "", err, "name and a reason")
		_, err = l.s.Sign(t.Context(), Signature{Verb: "lift", Object: []string{"PR-1.n001"}, As: "x", Because: " "})
		refuses(t, "", err, "name and a reason")
		_, err = l.s.Sign(t.Context(), Signature{Verb: "lift", As: "x", Because: "y"})
		refuses(t, "", err, "nothing is named")
		said, err := l.sign("praise", "PR-1.n001")
		refuses(t, said, err, "not a decision")
		if _, err := l.sign("lift", "PR-7"); !errors.Is(err, ErrUnknownObject) {
			t.Errorf("an unknown set: %v", err)
		}
		said, err = l.sign("lift", "PR-1")
		refuses(t, said, err, "say which")
		if n, _, err := l.s.store.VerifyDeeds(t.Context()); n != 0 || err != nil {
			t.Errorf("%d deeds of refused decisions, %v", n, err)
		}
	})
	t.Run("release refuses held", func(t *testing.T) {
		said, err := l.sign("release", "PR-1.n001")
		refuses(t, said, err, "held and cannot be released")
	})
	t.Run("lift, then release", func(t *testing.T) {
		l.signed("lift", "PR-1.n001")
		l.signed("release", "PR-1.n001")
		if r := l.result("PR-1.n001"); !r.Standing.Lifted || r.Standing.ReleasedBy != "Anna Berg" || r.Verdict != db.Held {
			t.Errorf("standing %+v, computed %s", r.Standing, r.Verdict)
		}
	})
	t.Run("accept the proposed exchange", func(t *testing.T) {
		before := l.result("PR-1.n001")
		l.signed("accept", "PR-1.n001")
		after := l.result("PR-1.n001")
		if after.ID == before.ID || after.Verdict != db.Stands || math.Abs(after.PKa[0].PKa-7.8) > after.PKa[0].Expanded {
			t.Errorf("after the exchange: result %d %s %.4f, before %d", after.ID, after.Verdict, after.PKa[0].PKa, before.ID)
		}
		if after.Standing.Lifted || !after.Standing.ReleasedAt.IsZero() {
			t.Errorf("what was decided about the earlier number went over to the new one: %+v", after.Standing)
		}
	})
	t.Run("exchange back by hand", func(t *testing.T) {
		l.signed("exchange", "PR-1.n001", "05", "06")
		if r := l.result("PR-1.n001"); r.Verdict != db.Held {
			t.Errorf("labels exchanged back: %s", r.Verdict)
		}
		said, err := l.sign("exchange", "PR-1.n001", "05")
		refuses(t, said, err, "two rungs")
		l.signed("exchange", "PR-1.n001", "05", "06")
		if r := l.result("PR-1.n001"); r.Verdict != db.Stands {
			t.Errorf("and once more: %s", r.Verdict)
		}
		said, err = l.sign("exchange", "PR-1.n001", "05", "77")
		refuses(t, said, err, "77")
	})
	t.Run("accept without a proposal", func(t *testing.T) {
		if _, err := l.sign("accept", "PR-1.n002"); !errors.Is(err, ErrUnknownObject) {
			t.Errorf("accepted what was not proposed: %v", err)
		}
	})
	t.Run("strike", func(t *testing.T) {
		l.signed("strike", "PR-1.n003")
		if r := l.result("PR-1.n003"); !r.Standing.Struck || r.Standing.Verdict != "struck" {
			t.Errorf("standing %+v", r.Standing)
		}
		said, err := l.sign("release", "PR-1.n003")
		refuses(t, said, err, "struck")
	})
	t.Run("recompute", func(t *testing.T) {
		before := l.result("PR-1.n002")
		l.signed("recompute", "PR-1.n002")
		after := l.result("PR-1.n002")
		if after.ID == before.ID || after.SetRevision <= before.SetRevision || after.PKa[0].PKa != before.PKa[0].PKa {
			t.Errorf("result %d of revision %d gives %g, before %d of %d %g", after.ID, after.SetRevision, after.PKa[0].PKa, before.ID, before.SetRevision, before.PKa[0].PKa)
		}
	})
	t.Run("baseline", func(t *testing.T) {
		said := l.signed("baseline", "U1/*", "2026-03-02", "2026-03-05")
		if !strings.Contains(said, "charts learnt from 2026-03-02 to 2026-03-05") {
			t.Errorf("said %q", said)
		}
		if n := l.count(`select count(*) from baseline where signed_by = 'Anna Berg'`); n < 5 {
			t.Errorf("%d charts have a signed baseline", n)
		}
		if _, err := l.sign("baseline", "U9/*", "2026-03-02", "2026-03-05"); !errors.Is(err, ErrUnknownObject) {
			t.Errorf("a baseline of nothing: %v", err)
		}
	})
	t.Run("correct a buffer", func(t *testing.T) {
		before := l.result("PR-1.n004")
		said := l.signed("correct", "B-10", "9.952")
		after := l.result("PR-1.n004")
		// Readings at the pKa move by the weight of the bottle there, (7.8-6.865)/(10.012-6.865) = 0.297; the
		// rungs above move more, those below 6.865 not at all.
		if d := before.PKa[0].PKa - after.PKa[0].PKa; d < 0.297*0.060-0.002 || d > 0.5*0.060 {
			t.Errorf("%s: pKa moved by %+.4f, expected about %+.4f", said, -d, -0.297*0.060)
		}
		l.signed("correct", "B-10", "10.012")
		if back := l.result("PR-1.n004"); back.PKa[0].PKa != before.PKa[0].PKa || back.ID == before.ID {
			t.Errorf("with the label's value again pKa is %.9f, it was %.9f", back.PKa[0].PKa, before.PKa[0].PKa)
		}
		said, err := l.sign("correct", "B-10", "4")
		refuses(t, said, err, "further away")
		if _, err := l.sign("correct", "B-11", "4"); !errors.Is(err, ErrUnknownObject) {
			t.Errorf("an unknown bottle: %v", err)
		}
	})
	t.Run("cases", func(t *testing.T) { signCases(t, l) })
	t.Run("release a night", func(t *testing.T) {
		said := l.signed("release", "night:2026-03-05")
		if !strings.Contains(said, "released") {
			t.Errorf("said %q", said)
		}
	})
	t.Run("results repeat after decisions", func(t *testing.T) { repeats(t, l) })
	t.Run("trail", func(t *testing.T) {
		n, broken, err := l.s.store.VerifyDeeds(t.Context())
		if err != nil || broken != nil || n < 12 {
			t.Fatalf("%d deeds, broken %v, %v", n, broken, err)
		}
		// A deed changed behind the program's back is seen.
		if _, err := l.s.store.Pool().Exec(t.Context(), `alter table deed disable trigger user; update deed set because = 'nothing' where seq = 3`); err != nil {
			t.Fatal(err)
		}
		if _, broken, err := l.s.store.VerifyDeeds(t.Context()); err != nil || broken == nil || broken.Seq != 3 {
			t.Errorf("a changed deed is not seen: %v %v", broken, err)
		}
	})
}

// signCases signs about a case that reaches two results.
func signCases(t *testing.T, l *lab) {
	a, b := l.result("PR-1.n004"), l.result("PR-1.n005")
	c := &db.Case{Key: "buffer B-10 2026-03-05", OpenedAt: l.clock.Now(), Resource: "buffer B-10", At: l.clock.Now(), Actor: "pkvigil", State: db.CaseOpen,
		Sentence: "Buffer B-10 reads 0.060 low.", Evaluation: []byte(`{}`), Size: math.NaN(), SizeSD: math.NaN()}
	err := l.s.store.InTx(t.Context(), func(tx pgx.Tx) error {
		if _, err := l.s.store.PutCase(t.Context(), tx, c); err != nil {
			return err
		}
		for _, id := range []int64{a.ID, b.ID} {
			if err := l.s.store.PutResultStatus(t.Context(), tx, db.StatusRow{ResultID: id, Status: db.StatusInQuestion, At: l.clock.Now(), Actor: "pkvigil", Because: "case", CaseID: &c.ID}); err != nil {
				return err
			}
		}
		if err := l.s.store.PutInstrumentState(t.Context(), tx, db.InstrumentState{Instrument: "U1", State: "closed", At: l.clock.Now(), Actor: "pkvigil", Because: "case"}); err != nil {
			return err
		}
		return l.s.store.PutReach(t.Context(), tx, c.ID, l.clock.Now(), []db.ReachRow{{ResultID: a.ID, Impact: 0.001, ImpactUpper: 0.003, Resolution: db.ReachProposed},
			{ResultID: b.ID, Impact: 0.02, ImpactUpper: 0.04, Resolution: db.ReachOpen}})
	})
	if err != nil {
		t.Fatal(err)
	}
	said, err := l.sign("release", "PR-1.n004")
	refuses(t, said, err, "in question")
	l.signed("acknowledge", "B-10")
	if got, err := l.s.store.CaseByID(t.Context(), nil, c.ID); err != nil || got.State != db.CaseAcknowledged {
		t.Errorf("acknowledged: %+v %v", got, err)
	}
	l.signed("confirm", fmt.Sprint(c.ID), "all")
	if r := l.result("PR-1.n004"); r.Standing.InQuestion {
		t.Error("confirmed as unaffected, and still in question")
	}
	if r := l.result("PR-1.n005"); !r.Standing.InQuestion {
		t.Error("what was not proposed as unaffected was confirmed with the rest")
	}
	l.signed("affected", fmt.Sprint(c.ID), fmt.Sprint(b.ID))
	l.signed("release", "PR-1.n004")
	said, err = l.sign("confirm", fmt.Sprint(c.ID), "999999")
	refuses(t, said, err, "does not reach")
	l.signed("reopen", "U1")
	if _, err := l.sign("reopen", "U7"); !errors.Is(err, ErrUnknownObject) {
		t.Errorf("an instrument that was never closed: %v", err)
	}
	l.signed("close", "B-10")
	if got, err := l.s.store.CaseByID(t.Context(), nil, c.ID); err != nil || got.State != db.CaseClosed {
		t.Errorf("closed: %+v %v", got, err)
	}
}

// repeats computes every current result again, in a service of its own that
// has the database alone.
func repeats(t *testing.T, l *lab) {
	t.Helper()
	s, err := Open(t.Context(), func() Config { c := l.config(); c.Sweep, c.Work, c.ReadOnly = false, false, true; return c }())
	if err != nil {
		t.Fatal(err)
	}
	defer closeService(t, s)
	n := 0
	err = s.RecomputeAll(t.Context(), "0001-01-01", "9999-12-31", func(a Again) {
		n++
		if !a.Same || a.OtherProgram {
			t.Errorf("%s: stored %.17g, now %.17g: %s", a.Set, a.Stored, a.Now, a.Why)
		}
	})
	if err != nil {
		t.Fatal(err)
	}
	if want := l.count(`select count(*) from standing where current`); n != want || n == 0 {
		t.Errorf("%d results computed again, %d are current", n, want)
	}
}
