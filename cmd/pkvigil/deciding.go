package main

import (
	"fmt"
	"io"
	"os"
	"slices"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"pkvigil/db"
	"pkvigil/parse"
	"pkvigil/pipeline"
	"pkvigil/pipeline/brief"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/naming"
)

// signed are the flags of every decision.
type signed struct{ as, because string }

func (g *signed) flags(c *cobra.Command) {
	c.Flags().StringVar(&g.as, "as", "", "who decides (required)")
	c.Flags().StringVar(&g.because, "because", "", "why (required)")
}

func (g *signed) check() error {
	if strings.TrimSpace(g.as) == "" || strings.TrimSpace(g.because) == "" {
		return &usageError{fmt.Errorf("a decision needs a name and a reason: --as \"Anna Berg\" --because \"vials checked\"")}
	}
	return nil
}

func (a *app) sign() *cobra.Command {
	var g signed
	var words strings.Builder
	for _, v := range pipeline.Verbs() {
		fmt.Fprintf(&words, "  %-12s %s\n", v[0], v[1])
	}
	c := &cobra.Command{
		Use: "sign DECISION OBJECT...", Short: "Decide something, with name and reason",
		Long: "Everything a person decides is signed: name, reason, the user of the operating\nsystem and the moment go into the trail of deeds. Nothing is overwritten.\n\nDecisions:\n" + words.String(),
		Example: `  pkvigil sign acknowledge 3 --as "Anna Berg" --because "electrode ordered"
  pkvigil sign exchange CRR-104 r05 r06 --as "Anna Berg" --because "vials found exchanged"
  pkvigil sign release night:2026-09-14 --as "Anna Berg" --because "morning review"`,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) < 2 {
				return &usageError{fmt.Errorf("name a decision and what it is about; see pkvigil sign --help")}
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			if err := g.check(); err != nil {
				return err
			}
			if err := knownDecision(args[0]); err != nil {
				return err
			}
			return a.with(cmd.Context(), pipeline.Config{}, func(s *pipeline.Service) error {
				said, err := s.Sign(cmd.Context(), pipeline.Signature{Verb: args[0], Object: args[1:], As: g.as, Because: g.because})
				if err != nil {
					return err
				}
				return a.print(said, func(out io.Writer) { fmt.Fprintln(out, said) })
			})
		},
	}
	g.flags(c)
	return c
}

// knownDecision refuses a word that is no decision, with the nearest one.
func knownDecision(verb string) error {
	var words []string
	for _, v := range pipeline.Verbs() {
		words = append(words, v[0])
	}
	if slices.Contains(words, verb) {
		return nil
	}
	return &usageError{fmt.Errorf("sign %q: expected a decision, perhaps %s; there are %s", verb, naming.ClosestWord(verb, words), strings.Join(words, ", "))}
}

// eventKinds are the words of `pkvigil note`: what drift looks for.
func eventKinds() []string {
	var out []string
	for _, k := range []drift.EventKind{drift.EventLamp, drift.EventElectrode, drift.EventCalibration, drift.EventBuffer, drift.EventCuvette, drift.EventStock, drift.EventSeries, drift.EventWavelength, drift.EventService} {
		out = append(out, string(k))
	}
	return append(out, "lot")
}

func (a *app) adopt() *cobra.Command {
	var g signed
	var role, rung string
	c := &cobra.Command{
		Use: "adopt FILE SET", Short: "Place a parked file in a set",
		Example: `  pkvigil adopt CRR-l04_r07.csv CRR-104 --rung r07 \
      --as "Anna Berg" --because "typing error in the name"`,
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) != 2 {
				return &usageError{fmt.Errorf("name the file and the set: pkvigil adopt FILE SET")}
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			if err := g.check(); err != nil {
				return err
			}
			return a.with(cmd.Context(), pipeline.Config{}, func(s *pipeline.Service) error {
				said, err := s.Adopt(cmd.Context(), pipeline.Adoption{File: args[0], Set: args[1], Role: role, Rung: rung, As: g.as, Because: g.because})
				if err != nil {
					return err
				}
				return a.print(said, func(out io.Writer) { fmt.Fprintln(out, said) })
			})
		},
	}
	g.flags(c)
	c.Flags().StringVar(&role, "role", "scan", "scan, blank or ph")
	c.Flags().StringVar(&rung, "rung", "", "the solution it is a scan of")
	return c
}

func (a *app) note() *cobra.Command {
	var g signed
	var resource, instrument, at string
	c := &cobra.Command{
		Use: "note KIND TEXT", Short: "Log an event: a new lamp, electrode, buffer, cell, stock, service",
		Long:    "Events change what is in use and make their causes likelier when something moves\nthe same night. Kinds:\n  " + strings.Join(eventKinds(), ", ") + ".",
		Example: `  pkvigil note electrode "new electrode" --resource E-35 --instrument U1 --as "Anna Berg"`,
		Args:    cobra.ExactArgs(2),
		RunE: func(cmd *cobra.Command, args []string) error {
			if strings.TrimSpace(g.as) == "" {
				return &usageError{fmt.Errorf("say who logs it: --as \"Anna Berg\"")}
			}
			if kinds := eventKinds(); !slices.Contains(kinds, args[0]) {
				return &usageError{fmt.Errorf("note %q: expected a kind of event, perhaps %s; there are %s", args[0], naming.ClosestWord(args[0], kinds), strings.Join(kinds, ", "))}
			}
			e := db.EventRow{Event: parse.Event{Kind: args[0], Text: args[1], Resource: resource, By: g.as}}
			if instrument != "" {
				e.Instruments = []string{instrument}
				e.Event.Instrument = instrument
			}
			if at != "" {
				if _, err := time.Parse("2006-01-02 15:04", at); err != nil {
					return &usageError{fmt.Errorf("--at %q: expected a moment like \"2026-09-14 17:30\"", at)}
				}
			}
			return a.with(cmd.Context(), pipeline.Config{}, func(s *pipeline.Service) error {
				if at != "" {
					t, err := time.ParseInLocation("2006-01-02 15:04", at, s.Settings().Zone())
					if err != nil {
						return err
					}
					e.At = t
				}
				if err := s.Note(cmd.Context(), e); err != nil {
					return err
				}
				return a.print("logged", func(out io.Writer) { fmt.Fprintln(out, "logged") })
			})
		},
	}
	c.Flags().StringVar(&g.as, "as", "", "who logs it (required)")
	c.Flags().StringVar(&resource, "resource", "", "the thing by name, e.g. E-35")
	c.Flags().StringVar(&instrument, "instrument", "", "the instrument it concerns")
	c.Flags().StringVar(&at, "at", "", "when, by the laboratory's clock (default now)")
	return c
}

func (a *app) again() *cobra.Command {
	var all bool
	var from, to string
	c := &cobra.Command{
		Use: "again [RESULT]", Short: "Compute stored results again from the database alone and compare the digits",
		Long:    "The same digits are promised for the same program version and processor architecture.\nExits with 10 when a result differs.",
		Example: "  pkvigil again 217\n  pkvigil again --all --from 2026-09-14 --to 2026-09-30",
		Args:    cobra.MaximumNArgs(1),
		RunE: func(cmd *cobra.Command, args []string) error {
			if !all && len(args) != 1 {
				return &usageError{fmt.Errorf("name a result, or give --all")}
			}
			return a.with(cmd.Context(), pipeline.Config{ReadOnly: true}, func(s *pipeline.Service) error {
				var rows []pipeline.Again
				if all {
					if err := s.RecomputeAll(cmd.Context(), from, to, func(r pipeline.Again) { rows = append(rows, r) }); err != nil {
						return err
					}
				} else {
					id, err := s.ResultID(cmd.Context(), args[0])
					if err != nil {
						return err
					}
					r, err := s.Recompute(cmd.Context(), id)
					if err != nil {
						return err
					}
					rows = append(rows, *r)
				}
				differ := 0
				for _, r := range rows {
					if !r.Same {
						differ++
					}
				}
				err := a.print(rows, func(out io.Writer) {
					for _, r := range rows {
						if !r.Same || !all {
							fmt.Fprintf(out, "%8d %-36s stored %.12g, now %.12g, same digits: %v %s\n", r.ResultID, r.Set, r.Stored, r.Now, r.Same, r.Why)
						}
					}
					fmt.Fprintf(out, "%d result(s) computed again, %d differ\n", len(rows), differ)
				})
				if err == nil && differ > 0 {
					return errFound
				}
				return err
			})
		},
	}
	c.Flags().BoolVar(&all, "all", false, "every current result")
	c.Flags().StringVar(&from, "from", "0001-01-01", "with --all: first night")
	c.Flags().StringVar(&to, "to", "9999-12-31", "with --all: last night")
	return c
}

func (a *app) deeds() *cobra.Command {
	var n int
	c := &cobra.Command{
		Use: "deeds [OBJECT]", Short: "Who did what, and whether the trail is unbroken", Args: cobra.MaximumNArgs(1),
		Example: "  pkvigil deeds\n  pkvigil deeds U1/2026-09-14/CRR-104",
		RunE: func(cmd *cobra.Command, args []string) error {
			return a.with(cmd.Context(), pipeline.Config{ReadOnly: true}, func(s *pipeline.Service) error {
				object := ""
				if len(args) == 1 {
					object = args[0]
				}
				rows, err := s.Store().Deeds(cmd.Context(), nil, object, n)
				if err != nil {
					return err
				}
				good, broken, err := s.Store().VerifyDeeds(cmd.Context())
				if err != nil {
					return err
				}
				err = a.print(map[string]any{"deeds": rows, "entries_verified": good, "broken": broken}, func(out io.Writer) {
					for _, d := range rows {
						fmt.Fprintf(out, "%5d  %s  %-12s %-34s by %s (%s): %s\n", d.Seq, d.At.Format("2006-01-02 15:04"), d.Action, d.Object, d.Actor, d.OSUser, d.Because)
					}
					if broken != nil {
						fmt.Fprintf(out, "THE CHAIN IS BROKEN at entry %d (%s, %s): the trail was altered\n", broken.Seq, broken.Action, broken.Object)
						return
					}
					fmt.Fprintf(out, "%d entries, chain intact\n", good)
				})
				if err == nil && broken != nil {
					return errFound
				}
				return err
			})
		},
	}
	c.Flags().IntVar(&n, "last", 40, "how many of the newest to show")
	return c
}

func (a *app) schema() *cobra.Command {
	c := &cobra.Command{
		Use: "schema [show|migrate|reader]", Short: "The database: version, migration, how dashboards connect", Args: cobra.MaximumNArgs(1),
		Long: `show     the version of the schema (default)
migrate  bring a database named by the settings up to date; a private server does it by itself
reader   how a dashboard connects: role pkvigil_reader may read the schema readout
         and nothing else`,
		Example: "  pkvigil schema\n  pkvigil schema migrate\n  pkvigil schema reader",
		RunE: func(cmd *cobra.Command, args []string) error {
			what := "show"
			if len(args) == 1 {
				what = args[0]
			}
			switch what {
			case "show", "reader", "migrate":
			default:
				return &usageError{fmt.Errorf("schema %q: expected show, migrate or reader", what)}
			}
			return a.with(cmd.Context(), pipeline.Config{ReadOnly: true, AnySchema: what == "migrate"}, func(s *pipeline.Service) error {
				switch what {
				case "migrate":
					from, to, err := s.Store().Migrate(cmd.Context())
					if err != nil {
						return err
					}
					return a.print(map[string]int{"from": from, "to": to}, func(out io.Writer) { fmt.Fprintf(out, "schema %d -> %d\n", from, to) })
				case "reader":
					return a.print(s.ReaderHint(), func(out io.Writer) { fmt.Fprintln(out, s.ReaderHint()) })
				default:
					v, err := s.Store().SchemaVersion(cmd.Context())
					if err != nil {
						return err
					}
					return a.print(v, func(out io.Writer) { fmt.Fprintf(out, "schema version %d\n", v) })
				}
			})
		},
	}
	return c
}

// saveHTML writes the page of a brief.
func (a *app) saveHTML(file string, d *brief.Data) error {
	page, err := brief.HTML(*d)
	if err != nil {
		return err
	}
	if err := os.WriteFile(file, page, 0o644); err != nil {
		return fmt.Errorf("writing the brief: %w", err)
	}
	fmt.Fprintf(a.err, "brief of %s written to %s\n", d.Night, file)
	return nil
}
