package drift
import ("testing";"encoding/json";"os")
func TestQuick(t *testing.T) {
	_, m, h := bigLab(t, 40)
	ev, err := m.Evaluate(h)
	if err != nil { t.Fatal(err) }
	b, _ := json.MarshalIndent(ev, "", " ")
	os.WriteFile("/tmp/ev.json", b, 0o644)
	for _, e := range ev.Explanations { t.Logf("%s | %s %.2f P=%.3f chi=%.1f/%d next %+v alike %v", e.Sentence, e.Finding, e.ClassProbability, e.P, e.ChiSquare, e.DOF, e.Next, e.Alike)
	 for _, c := range e.Candidates { t.Logf("   %s %v p=%.3f lnB=%.1f since %v..%v..%v %v for %q against %q", c.Title, c.Resource, c.Probability, c.LnB, c.Since.Low, c.Since.Best, c.Since.High, c.Now, c.For, c.Against) } }
	t.Log(ev.Score, ev.Threshold, ev.Hypotheses)
}
