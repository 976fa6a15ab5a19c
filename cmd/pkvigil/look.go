package main

import (
	"fmt"
	"io"
	"math"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"pkvigil/parse"
	"pkvigil/parse/export"
	"pkvigil/pipeline"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
)

// columns is the width that commands print for.
const columns = 80

func (a *app) look() *cobra.Command {
	var since, rules, explain string
	var all bool
	c := &cobra.Command{
		Use: "look", Short: "What the rules make of the folders, without a database",
		Long: `Walks the folders of the settings once, read only, and says set by set what the
rules make of them, as if no further file were to come: what would be computed,
what waits and for what, which files are parked or refused and why. Nothing is
stored. Exits with 10 when something is parked, refused or waiting.`,
		Example: `  pkvigil look --settings pkvigil.toml
  pkvigil look --since 60d --rules new.toml   what other rules would change
  pkvigil look --explain /export/U1/a.csv     how one file is read, line by line`,
		Args: cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if explain != "" {
				return a.explainFile(explain)
			}
			return a.runLook(cmd, since, rules, all)
		},
	}
	c.Flags().StringVar(&since, "since", "", "only files written within this time, for example 60d or 12h")
	c.Flags().StringVar(&rules, "rules", "", "another settings file: show what its rules and layouts would sort differently")
	c.Flags().StringVar(&explain, "explain", "", "a file: how it is read, and a layout to paste")
	c.Flags().BoolVar(&all, "rungs", false, "also list the rungs of every set")
	return c
}

func (a *app) runLook(cmd *cobra.Command, since, rules string, all bool) error {
	set, _, err := a.read()
	if err != nil {
		return err
	}
	now := time.Now()
	var from time.Time
	if since != "" {
		d, err := settings.ParseDuration(since)
		if err != nil || d <= 0 {
			return &usageError{fmt.Errorf("--since %q: expected a length of time such as 60d or 12h", since)}
		}
		from = now.Add(-d)
	}
	l, err := pipeline.LookDry(cmd.Context(), set, now, from)
	if err != nil {
		return err
	}
	if rules != "" {
		return a.compareRules(cmd, set, l, rules, from)
	}
	if err := a.print(l, func(out io.Writer) { sayLook(out, l, all) }); err != nil {
		return err
	}
	if l.Attention() {
		return errFound
	}
	return nil
}

// compareRules looks again with the rules and layouts of another file, at the
// folders of this one.
func (a *app) compareRules(cmd *cobra.Command, set *settings.Settings, l *pipeline.DryLook, file string, from time.Time) error {
	text, err := os.ReadFile(file)
	if err != nil {
		return &usageError{fmt.Errorf("--rules: %w", err)}
	}
	other, err := settings.Read(text, file)
	if err != nil {
		return &usageError{err}
	}
	other.Folders, other.Storage, other.Laboratory, other.Complete = set.Folders, set.Storage, set.Laboratory, set.Complete
	if len(other.Compounds) == 0 {
		other.Compounds = set.Compounds
	}
	with, err := pipeline.LookDry(cmd.Context(), other, l.At, from)
	if err != nil {
		return err
	}
	changes := l.Compare(with)
	err = a.print(map[string]any{"changes": changes, "before": l.Counts, "after": with.Counts}, func(out io.Writer) {
		for _, c := range changes {
			fmt.Fprintf(out, "%-4s %s\n", c.What, c.Name)
			fold(out, "       now    ", "              ", c.Before)
			fold(out, "       then   ", "              ", c.After)
		}
		if len(changes) == 0 {
			fmt.Fprintln(out, "Nothing would be sorted differently.")
		}
		fmt.Fprintf(out, "\n%-6s %6s %6s %8s %8s %6s %9s %8s\n", "", "files", "taken", "parked", "refused", "sets", "complete", "waiting")
		for _, r := range []struct {
			name string
			c    pipeline.DryCounts
		}{{"now", l.Counts}, {"then", with.Counts}} {
			fmt.Fprintf(out, "%-6s %6d %6d %8d %8d %6d %9d %8d\n", r.name, r.c.Files, r.c.Taken, r.c.Parked, r.c.Refused, r.c.Sets, r.c.Complete, r.c.Waiting)
		}
	})
	if err == nil && len(changes) > 0 {
		return errFound
	}
	return err
}

// fold prints text in lines of at most the usual width.
func fold(out io.Writer, first, rest, text string) {
	line, lead := first, len([]rune(first))
	n := lead
	for i, w := range strings.Fields(text) {
		l := len([]rune(w))
		if i > 0 && n+1+l > columns {
			fmt.Fprintln(out, strings.TrimRight(line, " "))
			line, n = rest, len([]rune(rest))
			lead = n
		}
		if n > lead {
			line += " "
			n++
		}
		line += w
		n += l
	}
	fmt.Fprintln(out, strings.TrimRight(line, " "))
}

func sayLook(out io.Writer, l *pipeline.DryLook, all bool) {
	for _, f := range l.Folders {
		if !f.Visible {
			fold(out, "NOT SEEN  ", "          ", f.Why)
			continue
		}
		extra := ""
		if f.Older > 0 {
			extra = fmt.Sprintf(", %d before the time asked for", f.Older)
		}
		if f.Skipped > 0 {
			extra += fmt.Sprintf(", %d links or devices passed over", f.Skipped)
		}
		fold(out, fmt.Sprintf("%-9s ", f.Name), "          ", fmt.Sprintf("%s: %d files, %d litter%s", f.Path, f.Files, f.Litter, extra))
	}
	sayDrySets(out, l, all)
	sayDryFiles(out, l)
	c := l.Counts
	fmt.Fprintf(out, "\n%d files: %d taken, %d parked, %d refused, %d twins, %d not readable now\n", c.Files, c.Taken, c.Parked, c.Refused, c.Twins, c.Waits)
	fmt.Fprintf(out, "%d sets: %d would be computed, %d wait for something\n", c.Sets, c.Complete, c.Waiting)
}

func sayDrySets(out io.Writer, l *pipeline.DryLook, all bool) {
	if len(l.Sets) > 0 {
		fmt.Fprintln(out, "\nSETS")
	}
	doubts := map[string]int{}
	for _, s := range l.Sets {
		fold(out, fmt.Sprintf("  %-9s ", s.State), "            ", s.Key)
		text := fmt.Sprintf("%d rungs", len(s.Rungs))
		for _, r := range s.Roles {
			text += ", " + roleWord(r)
		}
		text += "; pH: " + s.Pairing
		if s.Older > 0 {
			text += fmt.Sprintf("; %d replaced by corrections", s.Older)
		}
		fold(out, "            ", "            ", text)
		if s.State != naming.Complete {
			fold(out, "            waits for ", "              ", strings.Join(s.Missing, ", "))
		}
		if s.Doubt != "" {
			doubts[s.Doubt]++
		}
		if all {
			sayRungs(out, s)
		}
	}
	if len(doubts) > 0 {
		fmt.Fprintf(out, "\nWITHOUT A COMPOUND (%d sets)\n", len(doubts))
		n := 0
		for _, s := range l.Sets {
			if s.Doubt != "" && n < 5 {
				fold(out, "  ", "    ", s.Doubt)
				n++
			}
		}
		if len(doubts) > n {
			fmt.Fprintf(out, "  and %d more\n", len(doubts)-n)
		}
	}
}

func roleWord(r string) string {
	switch r {
	case naming.RolePH:
		return "pH table"
	case naming.RoleEnd:
		return "end mark"
	}
	return r
}

func sayRungs(out io.Writer, s pipeline.DrySet) {
	for _, r := range s.Rungs {
		ph := "  none"
		if !math.IsNaN(r.PH) {
			ph = fmt.Sprintf("%6.3f", r.PH)
		}
		reps := ""
		if r.Scans > 1 {
			reps = fmt.Sprintf("  %d scans", r.Scans)
		}
		fmt.Fprintf(out, "              %-10s pH %s  %s%s\n", r.Rung, ph, r.Path, reps)
	}
}

func sayDryFiles(out io.Writer, l *pipeline.DryLook) {
	if len(l.Parked) > 0 {
		fmt.Fprintf(out, "\nPARKED (%d): no rule, or more than one, says what they are\n", len(l.Parked))
		for _, p := range l.Parked {
			text := p.Suggest
			if text == "" {
				text = p.Why
			}
			fmt.Fprintln(out, "  "+p.Folder+"/"+p.Path)
			text, command, adopt := strings.Cut(text, " Adopt it with: ")
			fold(out, "      ", "      ", text)
			if adopt {
				fmt.Fprintln(out, "      "+command) // whole, to be copied
			}
		}
	}
	if len(l.Refused) > 0 {
		fmt.Fprintf(out, "\nREFUSED (%d): they cannot be read as what their names say\n", len(l.Refused))
		for _, r := range l.Refused {
			where := "  " + r.Folder + "/" + r.Path
			if r.Line > 0 {
				where += fmt.Sprintf(", line %d", r.Line)
			}
			if r.Field != "" {
				where += ", " + r.Field
			}
			fmt.Fprintln(out, where)
			if r.Found == "" && r.Expected == "" {
				fold(out, "      ", "      ", r.Sentence)
				continue
			}
			fold(out, "      found    ", "               ", r.Found)
			fold(out, "      expected ", "               ", r.Expected)
			if r.Remedy != "" {
				fold(out, "      remedy   ", "               ", r.Remedy)
			}
		}
	}
	if len(l.Twins) > 0 {
		fmt.Fprintf(out, "\nTWINS (%d): the same bytes as another file, counted once\n", len(l.Twins))
		for _, t := range l.Twins {
			fold(out, "  ", "      ", t.Folder+"/"+t.Path+" = "+t.Of)
		}
	}
	if len(l.Waits) > 0 {
		fmt.Fprintf(out, "\nNOT READABLE NOW (%d)\n", len(l.Waits))
		for _, w := range l.Waits {
			fold(out, "  ", "      ", w.Folder+"/"+w.Path+": "+w.Why)
		}
	}
	if len(l.Others) > 0 {
		fmt.Fprintf(out, "\nOTHER FILES (%d)\n", len(l.Others))
		for _, o := range l.Others {
			fold(out, fmt.Sprintf("  %-12s ", o.Role), "      ", o.Folder+"/"+o.Path+": "+orWord(o.Holds, "nothing readable"))
		}
	}
}

// explainFile tells how one file is read. Settings are used where there are
// some; without them the file is read as it stands.
func (a *app) explainFile(path string) error {
	data, err := os.ReadFile(path)
	if err != nil {
		return fmt.Errorf("--explain: %w", err)
	}
	name, opt := filepath.Base(path), parse.Options{}
	var said []string
	if _, err := os.Stat(a.settings); err == nil {
		set, _, err := a.read()
		if err != nil {
			return err
		}
		opt.Layouts, opt.Zone, opt.MaxBytes = set.Layouts, set.Zone(), set.Storage.MaxFileMiB<<20
		if folder, rel := folderOf(set, path); folder != nil {
			name, opt.Zone = rel, set.ZoneOf(folder.Name)
			m, err := set.Naming().Match(folder.Name, rel)
			if err != nil {
				said = append(said, err.Error())
			} else {
				opt.Role = m.Role
				said = append(said, fmt.Sprintf("rule %q: role %s, set %s, rung %s", m.Rule, m.Role, orWord(m.Set, "none"), orWord(m.Rung, "none")))
			}
		} else {
			said = append(said, "the file lies in no folder of the settings: no rule is asked")
		}
	}
	report, layout := export.Explain(name, data, opt)
	report = append(said, report...)
	return a.print(map[string]any{"file": path, "report": report, "layout": layout}, func(out io.Writer) {
		fmt.Fprintln(out, path)
		for _, line := range report {
			if len([]rune(line)) > columns-2 && !strings.Contains(line, " = ") {
				fold(out, "  ", "    ", line)
				continue
			}
			fmt.Fprintln(out, "  "+line)
		}
	})
}

// folderOf finds the folder a file lies in and its path relative to it.
func folderOf(set *settings.Settings, path string) (*settings.Folder, string) {
	abs, err := filepath.Abs(path)
	if err != nil {
		return nil, ""
	}
	for i := range set.Folders {
		rel, err := filepath.Rel(set.Folders[i].Path, abs)
		if err == nil && rel != "." && rel != ".." && !strings.HasPrefix(rel, ".."+string(filepath.Separator)) {
			return &set.Folders[i], filepath.ToSlash(rel)
		}
	}
	return nil, ""
}
