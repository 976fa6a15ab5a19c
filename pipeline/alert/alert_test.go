package alert

import (
	"encoding/json"
	"encoding/xml"
	"io"
	"math"
	"strings"
	"testing"
	"time"
	"unicode"

	"pgregory.net/rapid"
)

func at(h, m int) time.Time { return time.Date(2026, 3, 14, h, m, 0, 0, time.UTC) }

func TestDecide(t *testing.T) {
	blindU2 := State{Kind: RootBlind, Key: "U2", Instrument: "U2", Presence: Present, Since: at(1, 0)}
	for name, c := range map[string]struct {
		now    State
		last   Said
		active []State
		at     time.Time
		why    Why
		speak  bool
	}{
		"blind a minute":       {now: blindU2, at: at(1, 1), why: WhyHolding},
		"blind six minutes":    {now: blindU2, at: at(1, 6), why: WhyOpened, speak: true},
		"blind, said":          {now: blindU2, last: Said{WhyOpened, at(1, 6)}, at: at(5, 0), why: WhyNothingNew},
		"blind half a day":     {now: blindU2, last: Said{WhyOpened, at(1, 6)}, at: at(13, 6), why: WhyReminder, speak: true},
		"blind, acknowledged":  {now: State{Kind: RootBlind, Presence: Present, Since: at(1, 0), Acknowledged: true}, last: Said{WhyOpened, at(1, 6)}, at: at(13, 6), why: WhyKnown},
		"back a minute":        {now: State{Kind: RootBlind, Presence: Gone, Since: at(4, 40)}, last: Said{WhyOpened, at(1, 6)}, at: at(4, 41), why: WhyHolding},
		"back":                 {now: State{Kind: RootBlind, Presence: Gone, Since: at(4, 40)}, last: Said{WhyOpened, at(1, 6)}, at: at(4, 43), why: WhyClosed, speak: true},
		"back, never said":     {now: State{Kind: RootBlind, Presence: Gone, Since: at(4, 40)}, at: at(9, 0), why: WhyNothingNew},
		"back, all clear said": {now: State{Kind: RootBlind, Presence: Gone, Since: at(4, 40)}, last: Said{WhyClosed, at(4, 43)}, at: at(9, 0), why: WhyNothingNew},
		"blind again":          {now: State{Kind: RootBlind, Presence: Present, Since: at(5, 0)}, last: Said{WhyClosed, at(4, 43)}, at: at(5, 6), why: WhyOpened, speak: true},
		"no data clears nothing": {now: State{Kind: RootBlind, Presence: Unknown, Since: at(4, 40)}, last: Said{WhyOpened, at(1, 6)},
			at: at(9, 0), why: WhyNoData},
		"silent because blind":   {now: State{Kind: SilentNight, Instrument: "U2", Presence: Present, Since: at(20, 20)}, active: []State{blindU2}, at: at(20, 20), why: WhyMoot},
		"silent elsewhere":       {now: State{Kind: SilentNight, Instrument: "U1", Presence: Present, Since: at(20, 20)}, active: []State{blindU2}, at: at(20, 20), why: WhyOpened, speak: true},
		"unrun because silent":   {now: State{Kind: ReferenceUnrun, Instrument: "U1", Presence: Present}, active: []State{{Kind: SilentNight, Instrument: "U1", Presence: Present}}, at: at(23, 0), why: WhyMoot},
		"unrun":                  {now: State{Kind: ReferenceUnrun, Instrument: "U1", Presence: Present}, active: []State{{Kind: SilentNight, Instrument: "U1", Presence: Gone}}, at: at(23, 0), why: WhyOpened, speak: true},
		"case opened":            {now: State{Kind: DriftCase, Presence: Present, Changes: []Why{WhyOpened}}, at: at(6, 0), why: WhyOpened, speak: true},
		"case, nothing":          {now: State{Kind: DriftCase, Presence: Present}, last: Said{WhyOpened, at(6, 0)}, at: at(23, 0), why: WhyNothingNew},
		"case opened and closed": {now: State{Kind: DriftCase, Presence: Gone, Changes: []Why{WhyOpened, WhyImpact, WhyClosed}}, at: at(6, 0), why: WhyClosed, speak: true},
		"case wider and larger":  {now: State{Kind: DriftCase, Presence: Present, Changes: []Why{WhyImpact, WhyResource}}, last: Said{WhyOpened, at(6, 0)}, at: at(7, 0), why: WhyResource, speak: true},
		"case without data":      {now: State{Kind: DriftCase, Presence: Unknown, Changes: []Why{WhyClosed}}, at: at(6, 0), why: WhyNoData},
		"case unanswered":        {now: State{Kind: DriftCase, Presence: Present, Escalate: true}, last: Said{WhyOpened, at(6, 0)}, at: at(7, 0), why: WhyEscalated, speak: true},
		"case answered":          {now: State{Kind: DriftCase, Presence: Present, Escalate: true, Acknowledged: true}, last: Said{WhyOpened, at(6, 0)}, at: at(7, 0), why: WhyKnown},
		"escalated once":         {now: State{Kind: DriftCase, Presence: Present, Escalate: true}, last: Said{WhyEscalated, at(6, 0)}, at: at(23, 0), why: WhyNothingNew},
		"waiting set":            {now: State{Kind: SetWaiting, Presence: Present}, at: at(6, 0), why: WhyQuiet},
	} {
		if why, speak := Decide(c.now, c.last, c.active, c.at); why != c.why || speak != c.speak {
			t.Errorf("%s: %q, %v; %q, %v expected", name, why, speak, c.why, c.speak)
		}
	}
}

// Every kind depends on kinds that exist, and never on itself.
func TestKinds(t *testing.T) {
	seen := map[string]bool{}
	for _, k := range Kinds() {
		if seen[k.Code] || k.Title == "" || k.Tells == "" {
			t.Errorf("%+v", k)
		}
		seen[k.Code] = true
		for _, n := range k.Needs {
			if _, ok := KindOf(n); !ok || n == k.Code {
				t.Errorf("%s needs %q", k.Code, n)
			}
		}
	}
}

func TestPace(t *testing.T) {
	now := at(12, 0)
	sent := []Waiting{{"a", WhyOpened, at(6, 0)}, {"b", WhyOpened, now.Add(-13 * time.Hour)}, {"old", WhyOpened, now.Add(-25 * time.Hour)}}
	waiting := []Waiting{
		{"a", WhyImpact, at(11, 0)}, {"b", WhyCause, at(10, 0)}, {"b", WhyImpact, at(11, 0)}, {"c", WhyOpened, at(9, 0)},
		{"d", WhyOpened, at(9, 1)}, {"e", WhyOpened, at(9, 2)}, {"f", WhyOpened, at(9, 3)}, {"test", WhyTest, at(11, 59)},
	}
	p := Pace(waiting, sent, now, Rules{})
	check := func(name string, got, want []int) {
		t.Helper()
		if len(got) != len(want) {
			t.Fatalf("%s: %v, %v expected", name, got, want)
		}
		for i := range got {
			if got[i] != want[i] {
				t.Fatalf("%s: %v, %v expected", name, got, want)
			}
		}
	}
	check("sent", p.Send, []int{3, 4, 5, 6, 7})
	check("merged", p.Merged, []int{1})
	check("digest", p.Digest, []int{2}) // two of today and four now make six
	check("hold", p.Hold, []int{0})
	if !p.Next.Equal(at(18, 0)) || p.Why[0] != WhyPaced {
		t.Errorf("next %v, %v", p.Next, p.Why)
	}
	sent = append(sent, Waiting{"summary", WhyDigest, at(11, 0)})
	for i := range 6 {
		sent = append(sent, Waiting{string(rune('p' + i)), WhyOpened, at(10, i)})
	}
	p = Pace([]Waiting{{"z", WhyOpened, now}}, sent, now, Rules{})
	check("full", p.Hold, []int{0})
	if p.Why[0] != WhyFull || !p.Next.Equal(at(11, 0).Add(24*time.Hour)) {
		t.Errorf("%v, next %v", p.Why, p.Next)
	}
}

// Every waiting message has exactly one fate, and the caps hold.
func TestPaceProperty(t *testing.T) {
	now := at(12, 0)
	item := rapid.Custom(func(t *rapid.T) Waiting {
		return Waiting{rapid.StringMatching(`[a-d]`).Draw(t, "key"), rapid.SampledFrom([]Why{WhyOpened, WhyImpact, WhyDigest}).Draw(t, "why"),
			now.Add(-time.Duration(rapid.IntRange(0, 40*60).Draw(t, "minutes")) * time.Minute)}
	})
	rapid.Check(t, func(t *rapid.T) {
		waiting, sent := rapid.SliceOfN(item, 0, 20).Draw(t, "waiting"), rapid.SliceOfN(item, 0, 20).Draw(t, "sent")
		p := Pace(waiting, sent, now, Rules{})
		fate := make([]int, len(waiting))
		for _, list := range [][]int{p.Send, p.Digest, p.Merged, p.Hold} {
			for _, i := range list {
				fate[i]++
			}
		}
		for i, n := range fate {
			if n != 1 {
				t.Fatalf("message %d has %d fates", i, n)
			}
		}
		day := 0
		for _, s := range sent {
			if now.Sub(s.At) < 24*time.Hour && s.Why != WhyDigest {
				day++
			}
		}
		if len(p.Send) > max(0, 6-day) {
			t.Fatalf("%d sent after %d today", len(p.Send), day)
		}
		if len(p.Hold) > 0 && !p.Next.After(now) {
			t.Fatalf("waits until %v", p.Next)
		}
	})
}

func full() Content {
	return Content{
		Laboratory: "Quillmere", Kind: DriftCase, Key: "case 7", CaseID: 7, Why: WhyOpened, At: at(6, 30), Instruments: []string{"U1"},
		Sentence: "pH readings wrong by +0.04 at pH 4.7, growing since 14 Mar", Since: "12 Mar to 15 Mar (90 %)",
		Finding: "The electrode is the cause with 96 %.",
		Candidates: []CandidateLine{
			{Title: "electrode drifted since its calibration", Resource: "electrode E-31", Probability: 0.96, Size: "+0.021 pH", For: []string{"U2 did not move"}, Against: []string{"slope of RI-B"}},
			{Title: "carry-over in the cell", Resource: "cell C-1", Probability: 0.004},
		},
		Alike:   []string{"offset and lag"},
		Results: []ResultLine{{ID: 12, Set: "TB-2219", Compound: "thymol blue", PKa: 8.9, Impact: 0.039, Bound: 0.051, Released: true}}, ResultsAll: 6,
		Stopped: []string{"release of U1"}, NextCheck: "calibrate again", Responsible: "night shift", Links: []string{"brief-2026-03-14.html"},
		Chart: &Chart{Title: "pKa of RI-A on U1", Unit: "pH", Labels: []string{"12 Mar", "13 Mar", "14 Mar"}, Values: []float64{4.66, math.NaN(), 4.70}, Centre: 4.66, Low: 4.64, High: 4.68},
	}
}

func TestCompose(t *testing.T) {
	m, err := Compose(full())
	if err != nil {
		t.Fatal(err)
	}
	if want := "U1: pH readings wrong by +0.04 at pH 4.7, growing since 14 Mar; 6 results touched"; m.Subject != want {
		t.Errorf("subject %q", m.Subject)
	}
	for _, part := range []string{
		`pkvigil sign acknowledge 7 --as NAME --because "..."`, "96 %: electrode drifted since its calibration (electrode E-31), +0.021 pH", "below 1 %: carry-over", "for: U2 did not move",
		"against: slope of RI-B", "offset and lag", "TB-2219 (thymol blue): pKa 8.900, shifted by about +0.039, at most 0.051, already released", "and 5 more",
		"release of U1", "Next best check: calibrate again", "night shift", "brief-2026-03-14.html", "12 Mar to 15 Mar (90 %)", "14 Mar 4.7", "13 Mar -",
	} {
		if !strings.Contains(m.Text, part) {
			t.Errorf("text lacks %q:\n%s", part, m.Text)
		}
	}
	for _, part := range []string{"pkvigil sign acknowledge 7 --as NAME", "<svg", "</svg>", "thymol blue", "and 5 more"} {
		if !strings.Contains(m.HTML, part) {
			t.Errorf("html lacks %q:\n%s", part, m.HTML)
		}
	}
	var d Document
	if err := json.Unmarshal(m.JSON, &d); err != nil {
		t.Fatal(err)
	}
	if d.Version != 1 || d.ResultsTotal != 6 || d.CaseID != 7 || len(d.Candidates) != 2 || d.Subject != m.Subject || d.At != "2026-03-14T06:30:00Z" || len(d.Chart.Values) != 3 {
		t.Errorf("%+v", d)
	}
	if !strings.Contains(string(m.JSON), "null") {
		t.Error("a gap in the chart is not null")
	}
}

func TestSubjects(t *testing.T) {
	for why, want := range map[Why]string{
		WhyEscalated: "Nobody has answered: U1: pH", WhyClosed: "Over: U1: pH", WhyReminder: "Still there: U1", WhyCause: "Another cause", WhyImpact: "Now above the limit",
	} {
		c := full()
		c.Why = why
		m, err := Compose(c)
		if err != nil || !strings.HasPrefix(m.Subject, want) {
			t.Errorf("%q: %q, %v", why, m.Subject, err)
		}
	}
	m, err := Compose(Content{Kind: SilentNight, Why: WhyOpened, Instruments: []string{"U1"}})
	if err != nil || m.Subject != "U1: nothing arrives" {
		t.Errorf("%q, %v", m.Subject, err)
	}
}

func TestDigest(t *testing.T) {
	a := full()
	b := full()
	b.CaseID, b.Sentence = 8, "wavelength scale displaced by +0.60 nm since 3 Apr"
	m, err := Digest("Quillmere", []Content{a, b}, at(7, 0))
	if err != nil {
		t.Fatal(err)
	}
	for _, part := range []string{"2 further messages", "displaced by +0.60 nm", "(case 7)", "pkvigil sign acknowledge 8", "Reason for this message: summary"} {
		if !strings.Contains(m.Text, part) {
			t.Errorf("lacks %q:\n%s", part, m.Text)
		}
	}
}

// Names out of files cannot break a line, add a header, open a tag or spoil the
// JSON: the HTML has exactly the elements that a harmless message of the same shape has.
func TestHostileNames(t *testing.T) {
	hostile := rapid.OneOf(rapid.String(), rapid.SampledFrom([]string{
		"<script>alert(1)</script>", "x\r\nBcc: all@else.example", `"><img src=x onerror=y>`, "</title></text></svg><b>", "\u202egnirts", "a\x00b", "{{.}}", "&amp;<", strings.Repeat("long ", 500),
	}))
	fill := func(s func(string) string) Content {
		c := full()
		c.Laboratory, c.Key, c.Sentence, c.Since, c.Finding = s("lab"), s("key"), s("sentence"), s("since"), s("finding")
		c.Instruments = []string{s("instrument")}
		c.Candidates[0].Title, c.Candidates[0].Resource, c.Candidates[0].For[0] = s("title"), s("resource"), s("for")
		c.Results[0].Set, c.Results[0].Compound = s("set"), s("compound")
		c.Links, c.Notes, c.NextCheck, c.Responsible = []string{s("link")}, []string{s("note")}, s("check"), s("person")
		c.Chart.Title, c.Chart.Labels[0] = s("chart"), s("label")
		return c
	}
	rapid.Check(t, func(t *rapid.T) {
		m, err := Compose(fill(func(n string) string { return "x" + hostile.Draw(t, n) }))
		if err != nil {
			t.Fatal(err)
		}
		if n := len([]rune(m.Subject)); n > 200 || n == 0 {
			t.Fatalf("subject of %d characters", n)
		}
		for _, r := range m.Subject {
			if unicode.IsControl(r) || directs(r) {
				t.Fatalf("subject %q", m.Subject)
			}
		}
		for _, r := range m.Text {
			if r != '\n' && (unicode.IsControl(r) || directs(r)) {
				t.Fatalf("text has %q", r)
			}
		}
		want, err := Compose(fill(func(n string) string { return "x" + n }))
		if err != nil {
			t.Fatal(err)
		}
		if a, b := elements(t, m.HTML), elements(t, want.HTML); a != b {
			t.Fatalf("elements\n%s\nexpected\n%s\n%s", a, b, m.HTML)
		}
		if strings.Count(m.Text, "\n") != strings.Count(want.Text, "\n") {
			t.Fatalf("lines changed:\n%s", m.Text)
		}
		var d Document
		if err := json.Unmarshal(m.JSON, &d); err != nil || strings.ContainsAny(string(m.JSON[:len(m.JSON)-1]), "\n<") {
			t.Fatalf("%v\n%s", err, m.JSON)
		}
	})
}

// elements lists the opened elements of a page with their attribute names.
func elements(t *rapid.T, page string) string {
	t.Helper()
	d := xml.NewDecoder(strings.NewReader(page))
	d.Strict, d.AutoClose, d.Entity = false, xml.HTMLAutoClose, xml.HTMLEntity
	var b strings.Builder
	for {
		tok, err := d.Token()
		if err == io.EOF {
			return b.String()
		}
		if err != nil {
			t.Fatalf("%v in\n%s", err, page)
		}
		if e, ok := tok.(xml.StartElement); ok {
			b.WriteString(e.Name.Local)
			for _, a := range e.Attr {
				b.WriteString(" " + a.Name.Local)
			}
			b.WriteByte('\n')
		}
	}
}

// Bad numbers never spoil a message.
func TestNotNumbers(t *testing.T) {
	c := full()
	c.Candidates[0].Probability = math.NaN()
	c.Results[0].Bound = math.Inf(1)
	c.Chart.Values = []float64{math.NaN(), math.Inf(1)}
	c.Chart.Low = math.NaN()
	m, err := Compose(c)
	if err != nil || !json.Valid(m.JSON) {
		t.Fatalf("%v\n%s", err, m.JSON)
	}
	c.Chart.Values, c.Chart.Labels = nil, nil
	if m, err = Compose(c); err != nil || strings.Contains(m.HTML, "<svg") {
		t.Fatalf("%v", err)
	}
}
