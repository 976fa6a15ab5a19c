package main

import (
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"time"

	"github.com/spf13/cobra"

	"pkvigil/pipeline"
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/rehearse"
)

func (a *app) rehearse() *cobra.Command {
	var dir string
	var from, to, sets int
	var seed uint64
	var coverage bool
	c := &cobra.Command{
		Use: "rehearse", Short: "An instrument room on paper: exports with known truth, and coverage of the stated intervals",
		Long: `Writes the export files of nights of the invented laboratory, with the truth
beside them, for a laboratory's own validation. With --coverage it simulates
sets of a design and says how often the stated 95 % interval holds the truth.`,
		Example: "  pkvigil rehearse --dir /tmp/nights --from 1 --to 14\n  pkvigil rehearse --coverage --sets 2000",
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if coverage {
				if sets < 1 || sets > 1_000_000 {
					return &usageError{fmt.Errorf("--sets %d: expected 1 to 1000000", sets)}
				}
				return a.coverage(cmd, sets, seed)
			}
			if dir == "" {
				return &usageError{fmt.Errorf("name a folder with --dir, or ask for --coverage")}
			}
			story := rehearse.NewStory(seed)
			if from < 1 || to < from || to > story.Nights() {
				return &usageError{fmt.Errorf("--from %d --to %d: expected nights within 1 to %d", from, to, story.Nights())}
			}
			if err := rehearse.Prepare(dir); err != nil {
				return err
			}
			n := 0
			for night := from; night <= to; night++ {
				for _, d := range story.Deposits(night) {
					if _, err := rehearse.Apply(dir, d); err != nil {
						return err
					}
					n++
				}
				if err := os.MkdirAll(filepath.Join(dir, "truth"), 0o755); err != nil {
					return err
				}
				if err := story.WriteTruthOf(night, filepath.Join(dir, "truth")); err != nil {
					return err
				}
			}
			file := filepath.Join(dir, "pkvigil.toml")
			if err := os.WriteFile(file, story.SettingsWith(dir, rehearse.Wires{DataDir: filepath.Join(dir, "data")}), 0o600); err != nil {
				return err
			}
			fmt.Fprintf(a.out, "%d deposits of nights %d to %d in %s; work them off with: pkvigil once -s %s\n", n, from, to, dir, file)
			return nil
		},
	}
	f := c.Flags()
	f.StringVar(&dir, "dir", "", "folder to write to")
	f.IntVar(&from, "from", 1, "first night")
	f.IntVar(&to, "to", 1, "last night")
	f.IntVar(&sets, "sets", 1000, "with --coverage: sets to simulate per design")
	f.Uint64Var(&seed, "seed", 7, "seed; equal seeds give equal files and numbers")
	f.BoolVar(&coverage, "coverage", false, "simulate how often the stated interval holds the truth")
	return c
}

// coverage simulates the laboratory's designs and prints what the intervals hold.
func (a *app) coverage(cmd *cobra.Command, sets int, seed uint64) error {
	set, _, err := a.read()
	if err != nil && cmd.Flags().Changed("settings") {
		return err
	}
	all := map[string]*fit.CoverageReport{}
	for _, d := range pipeline.CoverageDesigns(set) {
		start := time.Now()
		rep, err := fit.Coverage(d.Design, fit.CoverageOptions{Sets: sets, Seed: seed, Workers: runtime.NumCPU(), Stop: cmd.Context().Done(), Progress: func(done, total int) {
			if terminal(a.err) {
				fmt.Fprintf(a.err, "\r%-30s %6d of %d sets, %.0f s ", d.Name, done, total, time.Since(start).Seconds())
			}
		}})
		if terminal(a.err) {
			fmt.Fprint(a.err, "\r\033[K")
		}
		if err != nil {
			return err
		}
		if all[d.Name] = rep; !a.json {
			fmt.Fprint(a.out, pipeline.CoverageText(d.Name, rep))
		}
		if cmd.Context().Err() != nil {
			return cmd.Context().Err()
		}
	}
	if a.json {
		return a.print(all, func(io.Writer) {})
	}
	return nil
}
