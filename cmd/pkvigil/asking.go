package main

import (
	"fmt"
	"io"
	"math"
	"strings"

	"github.com/spf13/cobra"

	"pkvigil/db"
	"pkvigil/pipeline"
)

func one(use string) cobra.PositionalArgs {
	return func(cmd *cobra.Command, args []string) error {
		if len(args) != 1 {
			return &usageError{fmt.Errorf("name one %s: pkvigil %s", use, cmd.Use)}
		}
		return nil
	}
}

func (a *app) why() *cobra.Command {
	return &cobra.Command{
		Use: "why SET", Short: "Why a set stands or is held, and what would make it stand", Args: one("set"),
		Example: "  pkvigil why CRR-104\n  pkvigil why U1/2026-09-14/CRR-104 --json",
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.with(cmd.Context(), pipeline.Config{ReadOnly: true}, func(s *pipeline.Service) error {
				w, err := s.Why(cmd.Context(), args[0])
				if err != nil {
					return err
				}
				return a.print(w, func(out io.Writer) { sayWhy(out, w) })
			})
		},
	}
}

func sayWhy(out io.Writer, w *pipeline.Why) {
	fmt.Fprintf(out, "%s  (%s, revision %d, %s)\n", w.Set.Key, orWord(w.Set.Compound, "unknown compound"), w.Set.Revision, w.Set.State)
	if w.Result == nil {
		var lacks []string
		for _, m := range w.Set.Missing {
			lacks = append(lacks, m.Text)
		}
		fmt.Fprintf(out, "  not computed yet: %s\n", orWord(strings.Join(lacks, ", "), "waiting for the files to fall silent"))
		return
	}
	r := w.Result
	fmt.Fprintf(out, "  %s: %s\n", strings.ToUpper(r.Standing.Verdict), r.Headline)
	for _, p := range r.PKa {
		fmt.Fprintf(out, "  pKa%s = %.4f ± %.4f (k = %.2g), %s constant", step(p.Step, len(r.PKa)), p.PKa, p.Expanded, p.K, r.Constant)
		if !math.IsNaN(r.IonicStrength) {
			fmt.Fprintf(out, ", I = %.3g mol/L", r.IonicStrength)
		}
		if !math.IsNaN(r.TemperatureC) {
			fmt.Fprintf(out, ", cell %.1f °C", r.TemperatureC)
		}
		if p.AnchoredTo != "" {
			fmt.Fprintf(out, "\n       anchored to %s: %.4f ± %.4f (k = %.2g)", p.AnchoredTo, p.Anchored, p.K*p.UAnchored, p.K)
		}
		fmt.Fprintf(out, "\n       u: own %.4f, run %.4f, laboratory %.4f", p.UOwn, p.URun, p.ULab)
		if !math.IsNaN(p.Thermo) {
			fmt.Fprintf(out, "; thermodynamic at %.0f °C: %.3f ± %.3f", p.ThermoAtC, p.Thermo, p.K*p.UThermo)
		}
		fmt.Fprintln(out)
	}
	for _, c := range r.Checks {
		if c.Outcome == db.Stands {
			continue
		}
		fmt.Fprintf(out, "  %-12s %-20s %s\n", c.Outcome, c.Key, c.Sentence)
		if !math.IsNaN(c.Value) {
			fmt.Fprintf(out, "               %-20s found %.4g %s, limit %s\n", "", c.Value, c.Unit, limits(c))
		}
	}
	if len(w.Actions) > 0 {
		fmt.Fprintln(out, "  what would make it stand:")
		for _, x := range w.Actions {
			fmt.Fprintf(out, "    - %s\n", x)
		}
	}
	passed := 0
	for _, c := range r.Checks {
		if c.Outcome == db.Stands {
			passed++
		}
	}
	fmt.Fprintf(out, "  %d further check(s) passed; pkvigil trace %d shows where it came from\n", passed, r.ID)
	if len(w.Earlier) > 1 {
		fmt.Fprintln(out, "  all results of this set:")
		for _, e := range w.Earlier {
			pka := "no number"
			if len(e.PKa) > 0 {
				pka = fmt.Sprintf("%.4f ± %.4f", e.PKa[0].PKa, e.PKa[0].Expanded)
			}
			fmt.Fprintf(out, "    %6d  revision %d  %s  %-12s %s\n", e.ID, e.SetRevision, pka, e.Standing.Verdict, e.Because)
		}
	}
}

func limits(c db.Check) string {
	switch {
	case math.IsNaN(c.LimitLow) && math.IsNaN(c.LimitHigh):
		return "none"
	case math.IsNaN(c.LimitLow):
		return fmt.Sprintf("at most %.4g", c.LimitHigh)
	case math.IsNaN(c.LimitHigh):
		return fmt.Sprintf("at least %.4g", c.LimitLow)
	}
	return fmt.Sprintf("%.4g to %.4g", c.LimitLow, c.LimitHigh)
}

func step(k, n int) string {
	if n == 1 {
		return ""
	}
	return fmt.Sprint(k)
}

func orWord(s, d string) string {
	if s == "" {
		return d
	}
	return s
}

func (a *app) trace() *cobra.Command {
	return &cobra.Command{
		Use: "trace RESULT", Short: "Where a number came from: files, settings, calibration, record", Args: one("result or set"),
		Example: "  pkvigil trace 217\n  pkvigil trace CRR-104 --json > record.json",
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.with(cmd.Context(), pipeline.Config{ReadOnly: true}, func(s *pipeline.Service) error {
				t, err := s.Trace(cmd.Context(), args[0])
				if err != nil {
					return err
				}
				return a.print(t, func(out io.Writer) { sayTrace(out, t) })
			})
		},
	}
}

func sayTrace(out io.Writer, t *pipeline.Trace) {
	r := t.Result
	fmt.Fprintf(out, "result %d of %s, %s\n", r.ID, t.Set.Key, r.Standing.Verdict)
	fmt.Fprintf(out, "  computed %s by %s because: %s\n", r.At.Format("2006-01-02 15:04:05 MST"), r.Program, r.Because)
	fmt.Fprintf(out, "  settings version %d, input %x\n", r.SettingsID, r.InputSHA256[:8])
	if c := t.Calibration; c != nil {
		fmt.Fprintf(out, "  electrode %s, calibrated %s with", c.Electrode, c.Measured.Format("2006-01-02 15:04"))
		for _, p := range c.Points {
			fmt.Fprintf(out, " %s (%.3f: %.1f mV)", p.Lot, p.PH, p.MilliVolt)
		}
		fmt.Fprintln(out)
	}
	fmt.Fprintln(out, "  files:")
	for _, f := range t.Files {
		state := "used"
		if !f.Used {
			state = "not used: " + f.Why
		}
		fmt.Fprintf(out, "    %.12s  %-6s %-5s %s (revision %d) %s\n", f.SHA256, f.Role, f.Rung, f.Path, f.Revision, state)
	}
	if len(r.Components) > 0 {
		fmt.Fprintln(out, "  uncertainty budget (pKa):")
		for _, c := range r.Components {
			if c.Step == 0 {
				fmt.Fprintf(out, "    %.5f  %-4s %s\n", math.Abs(c.C*c.U), c.Bucket, c.Name)
			}
		}
	}
	fmt.Fprintln(out, "  what happened to it:")
	for _, x := range t.Status {
		fmt.Fprintf(out, "    %s  %-12s by %s: %s\n", x.At.Format("2006-01-02 15:04"), x.Status, x.Actor, x.Because)
	}
	for _, d := range t.Deeds {
		fmt.Fprintf(out, "    %s  %-12s by %s: %s\n", d.At.Format("2006-01-02 15:04"), d.Action, d.Actor, d.Because)
	}
}

func (a *app) since() *cobra.Command {
	var what string
	var design, scatter bool
	c := &cobra.Command{
		Use: "since REFERENCE", Short: "The chart of a reference or electrode, night by night", Args: one("reference, instrument/reference or electrode"),
		Example: "  pkvigil since RI-C\n  pkvigil since U1/RI-C --of lambda_base\n  pkvigil since E-31 --of electrode_slope_base\n  pkvigil since RI-C --design\n  pkvigil since U1 --scatter",
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.with(cmd.Context(), pipeline.Config{ReadOnly: true}, func(s *pipeline.Service) error {
				switch {
				case design:
					v, err := s.Design(cmd.Context(), args[0])
					if err != nil {
						return err
					}
					return a.print(v, func(out io.Writer) { fmt.Fprint(out, v.Text()) })
				case scatter:
					v, err := s.Scatter(cmd.Context(), args[0])
					if err != nil {
						return err
					}
					return a.print(v, func(out io.Writer) { fmt.Fprint(out, v.Text()) })
				}
				v, err := s.Since(cmd.Context(), args[0], what)
				if err != nil {
					return err
				}
				return a.print(v, func(out io.Writer) { saySince(out, v) })
			})
		},
	}
	c.Flags().StringVar(&what, "of", "", "characteristic (default pka; of an electrode electrode_slope_acid)")
	c.Flags().BoolVar(&design, "design", false, "run lengths of its charts as set, in and out of control")
	c.Flags().BoolVar(&scatter, "scatter", false, "of an instrument: scatter of readings and amounts from its reference sets, beside what is declared")
	return c
}

// saySince prints the chart with a small drawing: the position between the
// limits, | centre, [ ] limits.
func saySince(out io.Writer, v *pipeline.Since) {
	fmt.Fprintf(out, "%s of %s, %s\n", v.Words, v.Reference, v.Unit)
	for _, r := range v.Rows {
		mark := ""
		if !r.Judged {
			mark = "(spoiled by its own set, not judged)"
		}
		fmt.Fprintf(out, "%s %-6s %-5s %10.4f  %s %s%s\n", r.Night, r.Instrument, r.Slot, r.Value, strip(r), strings.Join(r.Flags, "; "), mark)
	}
	for _, x := range v.Exits {
		fmt.Fprintf(out, "%s (limits %.4g to %.4g)\n", x.Sentence(), x.Low, x.High)
	}
	for _, c := range v.Cases {
		fmt.Fprintf(out, "open case %d: %s\n", c.ID, c.Sentence)
	}
}

func strip(r pipeline.SinceRow) string {
	const half = 14
	if math.IsNaN(r.Centre) || math.IsNaN(r.High) || r.High <= r.Low {
		return strings.Repeat(" ", 2*half+3)
	}
	row := []byte(" [" + strings.Repeat(".", 2*half-1) + "] ")
	row[half+1] = '|'
	pos := half + 1 + int(math.Round((r.Value-r.Centre)/(r.High-r.Centre)*float64(half)))
	row[min(max(pos, 0), len(row)-1)] = '*'
	return string(row)
}

func (a *app) reach() *cobra.Command {
	return &cobra.Command{
		Use: "reach CASE", Short: "Which results a case touches, and by how much", Args: one("case"),
		Example: "  pkvigil reach 3",
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.with(cmd.Context(), pipeline.Config{ReadOnly: true}, func(s *pipeline.Service) error {
				v, err := s.Reach(cmd.Context(), args[0])
				if err != nil {
					return err
				}
				return a.print(v, func(out io.Writer) {
					fmt.Fprintf(out, "case %d (%s): %s\n", v.Case.ID, v.Case.State, v.Case.Sentence)
					for _, k := range v.Ranking {
						fmt.Fprintf(out, "  %3.0f %%  %-28s %-20s %s\n", 100*k.Probability, k.Cause, k.Resource, k.For)
					}
					fmt.Fprintf(out, "  %8s %-36s %18s %9s %9s  %s\n", "result", "set", "pKa", "impact", "at most", "resolution")
					for _, r := range v.Rows {
						fmt.Fprintf(out, "  %8d %-36s %9.3f ± %.3f %+9.4f %9.4f  %s\n", r.ResultID, r.Set, r.PKa, r.U, r.Impact, r.ImpactUpper, r.Resolution)
					}
				})
			})
		},
	}
}

func (a *app) brief() *cobra.Command {
	var html string
	c := &cobra.Command{
		Use: "brief [NIGHT]", Short: "The morning report of a night", Args: cobra.MaximumNArgs(1),
		Example: "  pkvigil brief\n  pkvigil brief 2026-09-14 --html brief.html",
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.with(cmd.Context(), pipeline.Config{ReadOnly: true}, func(s *pipeline.Service) error {
				night := ""
				if len(args) == 1 {
					night = args[0]
				}
				d, err := s.BriefFor(cmd.Context(), night)
				if err != nil {
					return err
				}
				if html != "" {
					return a.saveHTML(html, d)
				}
				return a.print(d, func(out io.Writer) { fmt.Fprint(out, d.Text()) })
			})
		},
	}
	c.Flags().StringVar(&html, "html", "", "write the page to this file")
	return c
}

func (a *app) probe() *cobra.Command {
	var mail bool
	c := &cobra.Command{
		Use: "probe", Short: "Is everything visible and alive?", Args: cobra.NoArgs,
		Long:    "Looks at folders, database, queue, messages and trail. Exits with 10 when\nsomething needs attention.",
		Example: "  pkvigil probe\n  pkvigil probe --mail     also sends a test message to every receiver",
		RunE: func(cmd *cobra.Command, _ []string) error {
			return a.with(cmd.Context(), pipeline.Config{ReadOnly: true}, func(s *pipeline.Service) error {
				v, err := s.Probe(cmd.Context())
				if err != nil {
					return err
				}
				if mail {
					for sink, err := range s.TestMessage(cmd.Context()) {
						h := pipeline.Health{What: "test message to " + sink, OK: err == nil, Found: "delivered"}
						if err != nil {
							h.Found, h.Do = db.Redact(err.Error()), "check host, port, TLS and secret of this receiver"
						}
						v = append(v, h)
					}
				}
				bad := false
				err = a.print(v, func(out io.Writer) {
					for _, h := range v {
						word := "ok"
						if !h.OK {
							word = "LOOK"
						}
						fmt.Fprintf(out, "%-4s  %-30s %s\n", word, h.What, h.Found)
						if h.Do != "" {
							fmt.Fprintf(out, "      %-30s -> %s\n", "", h.Do)
						}
					}
				})
				for _, h := range v {
					bad = bad || !h.OK
				}
				if err == nil && bad {
					return errFound
				}
				return err
			})
		},
	}
	c.Flags().BoolVar(&mail, "mail", false, "send a test message to every receiver")
	return c
}
