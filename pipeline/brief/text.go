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
	add := func(format string, a ...any) { out = append(out, fmt.Sprintf(format, a...)) }
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

// Text is the brief for a terminal of 80 columns.
func (d *Data) Text() string {
	var b strings.Builder
	p := func(format string, a ...any) { fmt.Fprintf(&b, format+"\n", a...) }
	p("BRIEF of the night of %s, %s", d.Night, d.Laboratory)
	p("%s", wrap(d.Headline()+".", 0))
	section := func(title string, n int) {
		if n > 0 {
			p("\n%s", strings.ToUpper(title))
		}
	}
	section("Changed since the last brief of this night", len(d.Changes))
	for _, c := range d.Changes {
		p("  %s", wrap(c, 2))
	}
	section("Not seen", len(d.NotSeen))
	for _, n := range d.NotSeen {
		p("  %s", wrap(n.What, 2))
		p("     -> %s", wrap(n.Action, 8))
	}
	p("\nIS THE SYSTEM IN CONTROL?")
	p("  %s", wrap(d.InControl.Sentence, 2))
	section("Cases", len(d.Cases))
	for _, c := range d.Cases {
		p("  case %d, %s: %s", c.ID, c.State, wrap(c.Sentence, 4))
		for i, k := range c.Candidates {
			if i < 3 {
				p("     %3.0f %%  %s, %s", 100*k.Probability, k.Title, k.Resource)
			}
		}
		if c.NextCheck != "" {
			p("     next: %s", wrap(c.NextCheck, 11))
		}
		if n := len(c.Results); n > 0 {
			p("     touches %d result(s); pkvigil reach %d", n, c.ID)
		}
	}
	section("Look at these first", len(d.Look))
	for _, s := range d.Look {
		p("  %-34s %-11s %s", s.Key, s.Verdict, s.number())
		p("     %s", wrap(s.Headline, 5))
		for _, a := range s.Actions {
			p("     -> %s", wrap(a, 8))
		}
	}
	section("Can go", len(d.Go))
	for _, s := range d.Go {
		p("  %-34s %-12s %s", s.Key, s.Verdict, s.number())
	}
	section("Did not happen", len(d.Waiting))
	for _, w := range d.Waiting {
		p("  %-34s waits for %s", w.Key, strings.Join(w.Missing, ", "))
	}
	section("Files set aside", len(d.Files))
	for _, f := range d.Files {
		p("  %-8s %s", f.State, wrap(f.Sentence, 11))
	}
	return b.String()
}

// number is the first constant with its expanded uncertainty.
func (s *Set) number() string {
	if len(s.Constants) == 0 {
		return "no number"
	}
	var parts []string
	for _, c := range s.Constants {
		parts = append(parts, fmt.Sprintf("%.3f ± %.3f", c.PKa, c.U))
	}
	return "pKa " + strings.Join(parts, ", ") + " (k = 2)"
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
