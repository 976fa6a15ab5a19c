package brief

import (
	"fmt"
	"strings"
)

// Headline is the night in one sentence.
func (d *Data) Headline() string { return "night " + d.Night + ": " + d.summary() }

// summary is the headline without its night.
func (d *Data) summary() string {
	control := "in control"
	switch {
	case !d.InControl.Known:
		control = "not known to be in control"
	case !d.InControl.Yes:
		control = "not in control"
	}
	s := fmt.Sprintf("%d can go, %d to look at first, %d did not happen; the measuring system is %s", len(d.Go), len(d.Look), len(d.Waiting), control)
	switch n := len(d.NotSeen) - len(d.Waiting); {
	case n == 1:
		s += "; one more thing was not seen"
	case n > 1:
		s += fmt.Sprintf("; %d more things were not seen", n)
	}
	return s
}

// Lines says the most important things, one line each, for a mail.
func (d *Data) Lines() []string {
	var out []string
	add := func(format string, a ...any) { out = append(out, plain(fmt.Sprintf(format, a...))) }
	for _, c := range d.Changes {
		add("Changed: %s", c)
	}
	for _, n := range d.NotSeen {
		add("Not seen: %s", n.What)
	}
	for _, c := range d.Cases {
		add("Case %d (%s): %s", c.ID, c.State, c.Sentence)
	}
	for _, s := range d.Look {
		add("Look at %s: %s", s.Key, s.Headline)
	}
	if n := len(d.Files); n > 0 {
		add("%d file(s) refused, parked or counted once; see the brief.", n)
	}
	return out
}

// plain makes one line of a text, without letters that would command a
// terminal or hide others.
func plain(s string) string { return string(harmless([]byte(strings.Join(strings.Fields(s), " ")))) }

// Text is the brief for a terminal of 80 columns.
func (d *Data) Text() string {
	t := &teller{}
	t.line(0, "BRIEF of the night of %s, %s", d.Night, d.Laboratory)
	if d.Revision > 1 {
		t.line(0, "Addendum %d to the first brief of this night.", d.Revision-1)
	}
	t.line(0, "%s.", capital(d.summary()))
	t.head("Not seen", len(d.NotSeen))
	for _, n := range d.NotSeen {
		t.line(2, "%s", n.What)
		t.todo(n.Action)
	}
	t.head("Is the system in control?", 1)
	t.line(2, "%s", d.InControl.Sentence)
	for _, r := range d.InControl.References {
		if !good(r.Verdict) {
			t.line(2, "%s: %s. %s", r.Label(), r.Verdict, r.Sentence)
		}
	}
	for _, f := range d.Forecasts {
		t.line(2, "%s", sentence(f))
	}
	t.cases(d)
	t.sets(d)
	t.head("Signals without a case", len(d.Signals))
	for _, s := range d.Signals {
		t.line(2, "%s", s)
	}
	t.head("Files set aside", len(d.Files))
	for _, f := range d.Files {
		t.line(2, "%s: %s. %s", f.State, f.Path, sentence(f.Sentence))
		t.todo(f.Remedy)
	}
	t.head("Changed since the last brief of this night", len(d.Changes))
	for _, c := range d.Changes {
		t.line(2, "%s", c)
	}
	if !d.CompleteUpTo.IsZero() {
		t.line(0, "")
		t.line(0, "Complete up to %s.", stamp(d.CompleteUpTo))
	}
	return string(harmless([]byte(t.b.String())))
}

// A teller writes lines for a terminal.
type teller struct{ b strings.Builder }

// line writes a paragraph, its later lines set in as deep as the first.
func (t *teller) line(indent int, format string, a ...any) {
	t.b.WriteString(strings.Repeat(" ", indent) + wrap(fmt.Sprintf(format, a...), indent) + "\n")
}

// todo writes what to do, if anything.
func (t *teller) todo(s string) {
	if s != "" {
		t.b.WriteString("     -> " + wrap(s, 8) + "\n")
	}
}

// head begins a part that has something in it.
func (t *teller) head(title string, n int) {
	if n > 0 {
		t.b.WriteString("\n" + strings.ToUpper(title) + "\n")
	}
}

// causesTold is how many causes of a case the terminal names.
const causesTold = 3

func (t *teller) cases(d *Data) {
	t.head("Cases", len(d.Cases))
	for _, c := range d.Cases {
		t.line(2, "case %d, %s: %s", c.ID, c.State, c.Sentence)
		if c.Since != "" {
			t.line(5, "began %s", c.Since)
		}
		for i, k := range c.Candidates {
			if i < causesTold {
				t.line(5, "%s  %s, %s", percent(k.Probability), k.Title, k.Resource)
			}
		}
		if c.NextCheck != "" {
			t.line(5, "next: %s", c.NextCheck)
		}
		if n := len(c.Results); n > 0 {
			t.line(5, "touches %d result(s); pkvigil reach %d", n, c.ID)
		}
	}
}

// row writes a key, a verdict and what is said of it in columns, or what is
// said below where it does not fit.
func (t *teller) row(key, verdict, said string) {
	l := fmt.Sprintf("  %-34s", plain(key))
	if verdict != "" {
		l += fmt.Sprintf(" %-12s", plain(verdict))
	}
	said = plain(said)
	if len([]rune(l))+1+len([]rune(said)) <= 80 {
		t.b.WriteString(l + " " + said + "\n")
		return
	}
	t.b.WriteString(strings.TrimRight(l, " ") + "\n")
	t.line(5, "%s", said)
}

func (t *teller) sets(d *Data) {
	t.head("Look at these first", len(d.Look))
	for _, s := range d.Look {
		t.row(s.Key, s.Verdict, s.number())
		t.line(5, "%s", s.Headline)
		if s.InQuestionWhy != "" {
			t.line(5, "in question: %s", s.InQuestionWhy)
		}
		for _, a := range s.Actions {
			t.todo(a)
		}
	}
	t.head("Can go", len(d.Go))
	for _, s := range d.Go {
		t.row(s.Key, s.Verdict, s.number())
		for _, n := range s.Notes {
			t.line(5, "%s", n)
		}
	}
	t.head("Did not happen", len(d.Waiting))
	for _, w := range d.Waiting {
		t.row(w.Key, "", "waits for "+strings.Join(w.Missing, ", "))
	}
}

// number is the constants of a set with their expanded uncertainty.
func (s *Set) number() string {
	var parts []string
	k := ""
	for _, n := range numbers(s) {
		parts = append(parts, n.Value)
		k = n.K
	}
	if len(parts) == 0 {
		return "no number"
	}
	return "pKa " + strings.Join(parts, ", ") + " (k = " + k + ")"
}

// wrap breaks text at 78 columns, later lines indented.
func wrap(s string, indent int) string {
	const width = 78
	var b strings.Builder
	col := indent
	for i, w := range strings.Fields(s) {
		n := len([]rune(w))
		switch {
		case i == 0:
		case col+1+n > width:
			b.WriteString("\n" + strings.Repeat(" ", indent))
			col = indent
		default:
			b.WriteByte(' ')
			col++
		}
		b.WriteString(w)
		col += n
	}
	return b.String()
}
