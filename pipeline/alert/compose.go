package alert

import (
	"bytes"
	"encoding/json"
	"fmt"
	"html/template"
	"math"
	"strings"
	"time"
	"unicode"
)

// Content is everything a message may say. Empty parts are left out.
type Content struct {
	Laboratory  string
	Kind        string // code
	Key         string
	CaseID      int64 // 0: not a case
	Why         Why
	At          time.Time // of the decision, in the laboratory's zone
	Instruments []string
	Sentence    string // with size, unit and direction, no jargon: "pH readings wrong by +0.04 at pH 4.7, growing since 14 Mar"
	Since       string // "between 12 Mar and 15 Mar (90 %)"
	Finding     string // how far the cause is known, a sentence
	Candidates  []CandidateLine
	Alike       []string // what cannot be told apart
	Results     []ResultLine
	ResultsAll  int      // number touched when Results is a selection; 0: len(Results)
	Stopped     []string // what was stopped automatically
	NextCheck   string
	Responsible string
	Links       []string // files: brief, spectra; paths or URLs
	Chart       *Chart
	Answer      []string // command lines; nil: the one that acknowledges the case
	Notes       []string
}

// A CandidateLine is one possible cause.
type CandidateLine struct {
	Title       string   `json:"title"`
	Resource    string   `json:"resource"`
	Probability float64  `json:"probability"`
	Size        string   `json:"size,omitempty"`
	For         []string `json:"for,omitempty"`
	Against     []string `json:"against,omitempty"`
}

// A ResultLine is one touched result.
type ResultLine struct {
	ID       int64   `json:"id"`
	Set      string  `json:"set"`
	Compound string  `json:"compound"`
	PKa      float64 `json:"pka"`
	Impact   float64 `json:"impact"` // pKa
	Bound    float64 `json:"bound"`  // pKa, upper 95 % of its size
	Released bool    `json:"released"`
	Proposed string  `json:"proposed,omitempty"` // "unaffected" or ""
}

// A Chart is the one small drawing of a message.
type Chart struct {
	Title  string
	Unit   string
	Labels []string  // one per value, e.g. dates
	Values []float64 // NaN: gap
	Centre float64
	Low    float64
	High   float64
}

// A Message is ready to send.
type Message struct {
	Subject string
	Text    string
	HTML    string
	JSON    []byte
}

// Limits of a message, so that a night with hundreds of results stays readable.
const (
	subjectRunes = 200
	textRunes    = 1000
	resultLines  = 25
)

// Compose writes subject, text, HTML and JSON. Every string of c is stripped of
// control characters and escaped where it goes; the subject is one line of at
// most 200 characters.
func Compose(c Content) (Message, error) {
	c = c.clean()
	m := Message{Subject: c.subject()}
	var html, js bytes.Buffer
	m.Text = c.text(m.Subject)
	if err := page().Execute(&html, view{Content: c, Subject: m.Subject, SVG: template.HTML(c.Chart.svg())}); err != nil {
		return m, fmt.Errorf("alert: html of %s %s: %w", c.Kind, c.Key, err)
	}
	m.HTML = html.String()
	e := json.NewEncoder(&js)
	e.SetEscapeHTML(true)
	if err := e.Encode(c.document(m.Subject)); err != nil {
		return m, fmt.Errorf("alert: json of %s %s: %w", c.Kind, c.Key, err)
	}
	m.JSON = js.Bytes()
	return m, nil
}

// plain makes one harmless line of s: control and direction-changing characters
// become spaces, runs of spaces one, and it is cut at limit runes.
func plain(s string, limit int) string {
	var b strings.Builder
	space, n := false, 0
	for _, r := range s {
		if unicode.IsControl(r) || unicode.IsSpace(r) || directs(r) || r == unicode.ReplacementChar {
			space = n > 0
			continue
		}
		if n >= limit-1 || (space && n >= limit-2) {
			b.WriteRune('…')
			break
		}
		if space {
			b.WriteByte(' ')
			n++
			space = false
		}
		b.WriteRune(r)
		n++
	}
	return b.String()
}

// directs reports whether r can turn the writing direction or hide text.
func directs(r rune) bool {
	return r >= 0x200b && r <= 0x200f || r >= 0x2028 && r <= 0x202e || r >= 0x2060 && r <= 0x2069 || r == 0xfeff
}

func (c Content) clean() Content {
	one := func(p *string) { *p = plain(*p, textRunes) }
	all := func(p *[]string) {
		out := make([]string, 0, len(*p))
		for _, s := range *p {
			if s = plain(s, textRunes); s != "" {
				out = append(out, s)
			}
		}
		*p = out
	}
	for _, p := range []*string{&c.Laboratory, &c.Kind, &c.Key, &c.Sentence, &c.Since, &c.Finding, &c.NextCheck, &c.Responsible} {
		one(p)
	}
	why := string(c.Why)
	one(&why)
	c.Why = Why(why)
	if c.Answer == nil && c.CaseID != 0 && c.Why != WhyClosed {
		c.Answer = []string{AcknowledgeLine(c.CaseID)}
	}
	for _, p := range []*[]string{&c.Instruments, &c.Alike, &c.Stopped, &c.Links, &c.Answer, &c.Notes} {
		all(p)
	}
	c.Candidates = append([]CandidateLine(nil), c.Candidates...)
	for i := range c.Candidates {
		k := &c.Candidates[i]
		one(&k.Title)
		one(&k.Resource)
		one(&k.Size)
		all(&k.For)
		all(&k.Against)
	}
	if c.ResultsAll < len(c.Results) {
		c.ResultsAll = len(c.Results)
	}
	c.Results = append([]ResultLine(nil), c.Results[:min(len(c.Results), resultLines)]...)
	for i := range c.Results {
		one(&c.Results[i].Set)
		one(&c.Results[i].Compound)
		one(&c.Results[i].Proposed)
	}
	if c.Chart != nil {
		k := *c.Chart
		one(&k.Title)
		one(&k.Unit)
		k.Labels = append([]string(nil), k.Labels...)
		for i := range k.Labels {
			one(&k.Labels[i])
		}
		c.Chart = &k
	}
	return c
}

// AcknowledgeLine is the command that acknowledges a case.
func AcknowledgeLine(id int64) string {
	return fmt.Sprintf(`pkvigil sign acknowledge %d --as NAME --because "..."`, id)
}

// subject is one line in words a laboratory uses.
func (c Content) subject() string {
	s := c.Sentence
	if s == "" {
		if k, ok := KindOf(c.Kind); ok {
			s = k.Title
		} else {
			s = string(c.Why)
		}
	}
	if len(c.Instruments) > 0 {
		s = strings.Join(c.Instruments, ", ") + ": " + s
	}
	switch c.Why {
	case WhyEscalated:
		s = "Nobody has answered: " + s
	case WhyReminder:
		s = "Still there: " + s
	case WhyClosed:
		s = "Over: " + s
	case WhyCause:
		s = "Another cause is likelier now: " + s
	case WhyResource:
		s = "Wider than before: " + s
	case WhyImpact:
		s = "Now above the limit: " + s
	case WhyTest:
		s = "Test: " + s
	}
	tail := ""
	if n := c.ResultsAll; n > 0 {
		tail = fmt.Sprintf("; %s touched", count(n, "result"))
	}
	return plain(s, subjectRunes-len(tail)) + tail
}

func count(n int, what string) string {
	if n == 1 {
		return "1 " + what
	}
	return fmt.Sprintf("%d %ss", n, what)
}

// Digest writes one message out of several.
func Digest(laboratory string, parts []Content, at time.Time) (Message, error) {
	c := Content{
		Laboratory: laboratory, Kind: "summary", Key: "summary", Why: WhyDigest, At: at,
		Sentence: count(len(parts), "further message") + " since the last one",
	}
	for _, p := range parts {
		p = p.clean()
		line := p.subject()
		if p.CaseID != 0 {
			line += fmt.Sprintf(" (case %d)", p.CaseID)
		}
		c.Notes = append(c.Notes, line)
		c.Answer = append(c.Answer, p.Answer...)
	}
	return Compose(c)
}

func percent(p float64) string {
	switch {
	case math.IsNaN(p):
		return "?"
	case p > 0.995:
		return "above 99 %"
	case p < 0.005:
		return "below 1 %"
	}
	return fmt.Sprintf("%.0f %%", 100*p)
}

func (r ResultLine) words() string {
	s := fmt.Sprintf("%s (%s): pKa %.3f, shifted by about %+.3f, at most %.3f", r.Set, r.Compound, r.PKa, r.Impact, r.Bound)
	if r.Released {
		s += ", already released"
	}
	if r.Proposed != "" {
		s += ", proposed as " + r.Proposed
	}
	return s
}
