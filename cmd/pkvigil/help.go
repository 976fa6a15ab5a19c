package main

import (
	"embed"
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"github.com/spf13/cobra"

	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
	"pkvigil/pipeline/verdict"
)

//go:embed topics/*.md
var topicFiles embed.FS

// topics lists the pages of `pkvigil help TOPIC` with one line each.
func topics() [][2]string {
	return [][2]string{
		{"settings", "every key of the settings file with its default"},
		{"naming", "rules for file names: sixteen situations with the rule for each"},
		{"layouts", "text exports: what is found out, what a layout declares"},
		{"methods", "the computation: formulas and where they come from"},
		{"checks", "what makes a result stand, stand with a note, or be held"},
		{"causes", "the disturbances that are told apart, and how they show"},
		{"views", "what dashboards read: schema readout, notices, example queries"},
		{"messages", "mails and webhooks: when, what fields, how to check the signature"},
		{"service", "running it: unit, signals, health, figures, exit codes, logs"},
		{"upgrade", "new versions, changed numbers, backup and restore"},
		{"cautions", "what this program does not decide"},
	}
}

// help is `pkvigil help`: a topic, or what a command does.
func (a *app) help(root *cobra.Command) *cobra.Command {
	var list strings.Builder
	for _, t := range topics() {
		fmt.Fprintf(&list, "  %-10s %s\n", t[0], t[1])
	}
	return &cobra.Command{
		Use: "help [TOPIC | COMMAND | man DIR]", Short: "A topic, or what a command does",
		Long:    "Topics:\n" + list.String() + "\npkvigil help man DIR writes all of it as manual pages.",
		Example: "  pkvigil help naming\n  pkvigil help checks | less\n  pkvigil help man /usr/local/share/man",
		RunE: func(_ *cobra.Command, args []string) error {
			if len(args) == 0 {
				if err := root.Help(); err != nil {
					return err
				}
				fmt.Fprintf(a.out, "\nTopics of pkvigil help TOPIC:\n%s", list.String())
				return nil
			}
			if args[0] == "man" {
				if len(args) != 2 {
					return &usageError{fmt.Errorf("name the folder for the manual pages: pkvigil help man DIR")}
				}
				return a.writeManual(root, args[1])
			}
			if page, ok := topic(args[0]); ok && len(args) == 1 {
				_, err := io.WriteString(a.out, page)
				return err
			}
			c, rest, err := root.Find(args)
			if err != nil || c == nil || len(rest) > 0 || c == root {
				var words []string
				for _, t := range topics() {
					words = append(words, t[0])
				}
				return &usageError{fmt.Errorf("help %q: expected a command, or one of the topics %s", strings.Join(args, " "), strings.Join(words, ", "))}
			}
			c.InitDefaultHelpFlag()
			return c.Help()
		},
	}
}

// topic gives a page; the parts that mirror the program are made from it.
func topic(name string) (string, bool) {
	if !slices.ContainsFunc(topics(), func(t [2]string) bool { return t[0] == name }) {
		return "", false
	}
	text, err := topicFiles.ReadFile("topics/" + name + ".md")
	if err != nil {
		return "", false
	}
	page := string(text)
	for mark, f := range map[string]func() string{"{{settings}}": settings.Example, "{{limits}}": limitTable, "{{findings}}": findingTable, "{{causes}}": causeTable} {
		page = strings.Replace(page, mark, strings.TrimRight(f(), "\n"), 1)
	}
	return page, true
}

// checkWords says what each check with limits looks at; a test holds the list
// against what the room that judges does.
func checkWords() map[string][2]string { // key -> unit, words
	return map[string][2]string{
		"rungs.usable":          {"rungs", "solutions that take part, less those that further steps ask for"},
		"forms.reached":         {"", "smaller of the two largest shares of the limiting forms"},
		"rungs.near":            {"rungs", "solutions within 0.7 of each pKa"},
		"ladder.gap":            {"pH", "widest step between neighbours inside the transition"},
		"ph.latent":             {"pH", "scatter of the readings about what the spectra ask for"},
		"ph.improbable":         {"", "probability of residuals this large under the usual scatter"},
		"rung.out":              {"", "share of solutions left out"},
		"rung.influence":        {"U", "largest shift of the pKa when one solution is left out"},
		"slope":                 {"", "apparent slope of the titration less 1"},
		"third.component":       {"", "next singular value over the largest that noise gives"},
		"spectra.negative":      {"", "depth of a limiting spectrum below zero, share of its top"},
		"absorbance.ceiling":    {"", "share of the colour change above the absorbance ceiling"},
		"colour.change":         {"A", "largest change of absorbance over the ladder"},
		"clear.window":          {"mAU", "largest offset of a scan where nothing absorbs"},
		"amount.scatter":        {"%", "scatter of the amount of dye between solutions"},
		"amount.trend":          {"%", "change of the amount of dye over the ladder"},
		"wavelength.spread":     {"nm", "displacement of the scans against each other"},
		"temperature":           {"K", "cell temperature less the nominal one"},
		"calibration.age":       {"h", "age of the electrode calibration"},
		"calibration.slope":     {"%", "slope of a calibration segment, of the theoretical slope"},
		"calibration.potential": {"mV", "potential at pH 7"},
		"calibration.residual":  {"pH", "a buffer against the chord of its neighbours"},
		"ph.range":              {"pH", "reach of the ladder beyond the outermost buffer"},
		"ph.delay":              {"min", "between scan and reading, solutions above pH 8"},
		"library":               {"pKa", "pKa with archived limiting spectra less the free one"},
		"uncertainty.target":    {"", "expanded uncertainty over the target"},
		"ladder.nominal":        {"", "share of solutions more than 0.1 off their nominal pH"},
		"ph.name":               {"pH", "pH in the name against the table"},
		"limit.distance":        {"pH", "nearest limiting solution from the pKa (three-solution sets)"},
	}
}

// findingWords says what the checks without a number find; they can be
// switched off by name, and have no limits.
func findingWords() map[string]string {
	return map[string]string{
		"fit":            "the fit settled, and the data fix every pKa",
		"label.exchange": "two labels look exchanged",
		"ladder.shift":   "all pH values fit the ladder better a row up or down",
		"scan.clone":     "one scan holds the numbers of another, digit by digit",
		"scan.doubled":   "two scans are of one solution though their pH differs",
		"scan.foreign":   "a scan belongs to another dye",
		"scan.smoothed":  "a scan was smoothed before it was exported",
		"ph.copy":        "two solutions have one pH to the digit but other spectra",
		"dye.identity":   "the spectra look like another dye than the name says",
		"lot.new":        "a new lot of a reference that has no baseline yet",
		"lot.unknown":    "the compound is not in the settings",
		"second.dye":     "a second dye, with its share and pKa",
		"blank":          "the set has no blank",
		"calibration":    "no electrode calibration is known for the readings",
		"digits.coarse":  "too few decimals were exported",
		"grid":           "the scans share too few wavelengths, or coarse ones",
	}
}

// sortedKeys gives the keys of a map in order.
func sortedKeys[V any](m map[string]V) []string {
	var keys []string
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}

// limitTable is the built-in limits as a table.
func limitTable() string {
	var b strings.Builder
	words := checkWords()
	fmt.Fprintf(&b, "%-22s %-14s %-14s %s\n", "check", "noted outside", "held outside", "of what")
	for _, k := range sortedKeys(words) {
		l, w := verdict.Defaults[k], words[k]
		unit := ""
		if w[0] != "" {
			unit = " (" + w[0] + ")"
		}
		fmt.Fprintf(&b, "%-22s %-14s %s\n    %s%s\n", k, bandWords(l.Note), bandWords(l.Hold), w[1], unit)
	}
	return b.String()
}

// bandWords writes a band as people write limits.
func bandWords(x verdict.Band) string {
	switch {
	case math.IsInf(x.Low, -1) && math.IsInf(x.High, 1):
		return "never"
	case math.IsInf(x.Low, -1):
		return fmt.Sprintf("above %.4g", x.High)
	case math.IsInf(x.High, 1):
		return fmt.Sprintf("below %.4g", x.Low)
	case x.Low == -x.High:
		return fmt.Sprintf("±%.4g", x.High)
	}
	return fmt.Sprintf("%.4g to %.4g", x.Low, x.High)
}

func findingTable() string {
	var b strings.Builder
	words := findingWords()
	for _, k := range sortedKeys(words) {
		fmt.Fprintf(&b, "%-22s %s\n", k, words[k])
	}
	return b.String()
}

// causeTable lists the causes as the program knows them.
func causeTable() string {
	var b strings.Builder
	members := map[string][]string{}
	for _, t := range drift.Traits() {
		members[t.Class] = append(members[t.Class], string(t.Cause))
	}
	for _, t := range drift.Traits() {
		var kinds, shapes, marks []string
		for _, k := range t.Kinds {
			kinds = append(kinds, string(k))
		}
		for _, s := range t.Shapes {
			shapes = append(shapes, string(s))
		}
		if t.Harmless {
			marks = append(marks, "no effect on results")
		}
		if t.Reset != "" {
			marks = append(marks, "a "+string(t.Reset)+" puts it right for a while")
		}
		fmt.Fprintf(&b, "%s\n    %s\n", t.Cause, t.Title)
		if t.Columns == 1 {
			fmt.Fprintf(&b, "    weighed in steps of %.3g %s\n", t.Step, t.Unit)
		}
		fold(&b, "    acts through ", "      ", strings.Join(kinds, " or ")+"; shapes: "+strings.Join(shapes, ", "))
		if others := slices.DeleteFunc(slices.Clone(members[t.Class]), func(c string) bool { return c == string(t.Cause) }); len(others) > 0 {
			fold(&b, "    one kind of reference cannot tell it from ", "      ", strings.Join(others, ", "))
		}
		if len(marks) > 0 {
			fold(&b, "    ", "      ", strings.Join(marks, "; "))
		}
	}
	return b.String()
}

// writeManual writes a page for the program, one for each command and one for
// each topic below dir/man1 and dir/man7.
func (a *app) writeManual(root *cobra.Command, dir string) error {
	for _, d := range []string{"man1", "man7"} {
		if err := os.MkdirAll(filepath.Join(dir, d), 0o755); err != nil {
			return fmt.Errorf("manual pages: %w", err)
		}
	}
	n := 0
	write := func(section int, name, page string) error {
		n++
		file := filepath.Join(dir, fmt.Sprintf("man%d", section), fmt.Sprintf("%s.%d", name, section))
		if err := os.WriteFile(file, []byte(page), 0o644); err != nil {
			return fmt.Errorf("manual pages: %w", err)
		}
		return nil
	}
	if err := write(1, "pkvigil", manualPage(root)); err != nil {
		return err
	}
	for _, c := range root.Commands() {
		if c.Hidden || c.Name() == "completion" {
			continue
		}
		if err := write(1, "pkvigil-"+c.Name(), manualPage(c)); err != nil {
			return err
		}
	}
	for _, t := range topics() {
		page, _ := topic(t[0])
		text := fmt.Sprintf(".TH PKVIGIL-%s 7\n.SH NAME\npkvigil-%s \\- %s\n.SH DESCRIPTION\n.nf\n%s\n.fi\n", strings.ToUpper(t[0]), t[0], roff(t[1]), roff(page))
		if err := write(7, "pkvigil-"+t[0], text); err != nil {
			return err
		}
	}
	fmt.Fprintf(a.out, "%d manual pages in %s; read one with: man -M %s pkvigil\n", n, dir, dir)
	return nil
}

// manualPage is the page of one command.
func manualPage(c *cobra.Command) string {
	name := strings.ReplaceAll(c.CommandPath(), " ", "-")
	var b strings.Builder
	fmt.Fprintf(&b, ".TH %s 1\n.SH NAME\n%s \\- %s\n.SH SYNOPSIS\n%s\n", strings.ToUpper(name), name, roff(c.Short), roff(c.UseLine()))
	long := c.Long
	if long == "" {
		long = c.Short + "."
	}
	fmt.Fprintf(&b, ".SH DESCRIPTION\n.nf\n%s\n.fi\n", roff(long))
	if u := c.LocalFlags().FlagUsages(); u != "" {
		fmt.Fprintf(&b, ".SH OPTIONS\n.nf\n%s.fi\n", roff(u))
	}
	if u := c.InheritedFlags().FlagUsages(); u != "" {
		fmt.Fprintf(&b, ".SH OPTIONS OF EVERY COMMAND\n.nf\n%s.fi\n", roff(u))
	}
	if c.Example != "" {
		fmt.Fprintf(&b, ".SH EXAMPLES\n.nf\n%s\n.fi\n", roff(c.Example))
	}
	b.WriteString(".SH EXIT STATUS\n.nf\n0 done; 1 failed; 2 wrong command line or settings; 3 the database;\n4 what was named does not exist; 10 found something; 130 stopped by a signal\n.fi\n")
	return b.String()
}

// roff escapes text for a manual page.
func roff(s string) string {
	s = strings.NewReplacer(`\`, `\e`, "-", `\-`).Replace(s)
	lines := strings.Split(s, "\n")
	for i, l := range lines {
		if strings.HasPrefix(l, ".") || strings.HasPrefix(l, "'") {
			lines[i] = `\&` + l
		}
	}
	return strings.Join(lines, "\n")
}

// knownChecks refuses limits for a check that does not exist: they would have
// no effect, and nobody would notice.
func knownChecks(set *settings.Settings, text []byte, file string) error {
	limits, findings := sortedKeys(checkWords()), sortedKeys(findingWords())
	for _, x := range set.Checks {
		if slices.Contains(limits, x.Check) || (x.Off && slices.Contains(findings, x.Check)) {
			continue
		}
		e := &settings.Error{File: file, Key: "check", Found: fmt.Sprintf("%q", x.Check), Expected: "a check that pkvigil help checks lists"}
		near := naming.ClosestWord(x.Check, append(limits, findings...))
		e.Example = fmt.Sprintf("check = %q", near)
		if slices.Contains(findings, x.Check) {
			e.Expected, e.Example = "off = true and nothing else: this check has no limits", "off = true"
		}
		for i, line := range strings.Split(string(text), "\n") {
			k, v, ok := strings.Cut(line, "=")
			if ok && strings.TrimSpace(k) == "check" && strings.Contains(v, x.Check) {
				e.Line = i + 1
				break
			}
		}
		return e
	}
	return nil
}
