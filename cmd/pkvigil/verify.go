package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"pkvigil/pipeline"
	"pkvigil/pipeline/verify"
)

// verifyRecord is the dated record of one verification.
type verifyRecord struct {
	Version      int              `json:"version"` // of this form
	At           time.Time        `json:"at"`
	Program      string           `json:"program"`
	Architecture string           `json:"architecture"`
	System       string           `json:"system"`
	Compiler     string           `json:"compiler"`
	Checks       int              `json:"checks"`
	Failed       int              `json:"failed"`
	Groups       []verify.Summary `json:"groups"`
	Rows         []verify.Row     `json:"rows"`
}

func (a *app) verify() *cobra.Command {
	var record, only string
	var all bool
	c := &cobra.Command{
		Use: "verify", Short: "Published checks, run on this installation",
		Long: `Computes figures from the literature with the installed program and compares:
activity coefficients, water, buffers, indicator equations, indicator problems,
certified regression problems, examples of the GUM, control charts and others.
A row passes when it agrees within half a unit of its last printed digit, or
more closely where more digits are known. Exits with 10 when a row fails.`,
		Example: "  pkvigil verify\n  pkvigil verify --all --only buffers\n  pkvigil verify --record verification.json",
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			checks := verify.Checks()
			if only != "" {
				checks = checksOf(checks, only)
				if len(checks) == 0 {
					return &usageError{fmt.Errorf("--only %q: no group of checks has this in its name; pkvigil verify lists them", only)}
				}
			}
			rows, err := verify.Run(cmd.Context(), checks)
			if err != nil {
				return err
			}
			r := verifyRecord{Version: 1, At: time.Now().UTC(), Program: "pkvigil " + pipeline.Version, Architecture: runtime.GOARCH, System: runtime.GOOS, Compiler: runtime.Version(),
				Checks: len(rows), Failed: len(verify.Failed(rows)), Groups: verify.Summarize(rows), Rows: rows}
			if record != "" {
				if err := writeRecord(record, r); err != nil {
					return err
				}
			}
			if err := a.print(r, func(out io.Writer) { sayVerify(out, r, all) }); err != nil {
				return err
			}
			if r.Failed > 0 {
				return errFound
			}
			return nil
		},
	}
	c.Flags().BoolVar(&all, "all", false, "print every row, not only groups and failures")
	c.Flags().StringVar(&only, "only", "", "only groups with this in their name")
	c.Flags().StringVar(&record, "record", "", "write a dated record in JSON to this file; an existing one is not overwritten")
	return c
}

func checksOf(checks []verify.Check, word string) []verify.Check {
	var out []verify.Check
	for _, c := range checks {
		if strings.Contains(strings.ToLower(c.Group), strings.ToLower(word)) {
			out = append(out, c)
		}
	}
	return out
}

// writeRecord writes the record as a new file, whole or not at all.
func writeRecord(path string, r verifyRecord) (err error) {
	b, err := pipeline.Encode(r)
	if err != nil {
		return err
	}
	if _, err := os.Lstat(path); err == nil {
		return &usageError{fmt.Errorf("--record: %s exists; records are not overwritten", path)}
	}
	tmp, err := os.CreateTemp(filepath.Dir(path), ".record-*")
	if err != nil {
		return fmt.Errorf("--record: %w", err)
	}
	defer os.Remove(tmp.Name())
	_, err = tmp.Write(append(b, '\n'))
	err = errors.Join(err, tmp.Chmod(0o644), tmp.Sync(), tmp.Close())
	if err == nil {
		err = os.Link(tmp.Name(), path)
	}
	if err != nil {
		return fmt.Errorf("--record: %w", err)
	}
	return nil
}

func sayVerify(out io.Writer, r verifyRecord, all bool) {
	fmt.Fprintf(out, "%s %s, %s/%s, %s\n\n", r.Program, r.At.Format("2006-01-02 15:04 UTC"), r.System, r.Architecture, r.Compiler)
	if all {
		sayRows(out, r.Rows)
		fmt.Fprintln(out)
	}
	fmt.Fprintf(out, "%-36s %7s %7s %13s  %s\n", "group", "checks", "failed", "least digits", "")
	for _, g := range r.Groups {
		word := "pass"
		if g.Failed > 0 {
			word = "FAIL"
		}
		fmt.Fprintf(out, "%-36s %7d %7d %13.1f  %s\n", g.Group, g.Checks, g.Failed, g.Digits, word)
	}
	if bad := verify.Failed(r.Rows); len(bad) > 0 {
		fmt.Fprintf(out, "\nFAILED\n")
		sayRows(out, bad)
	}
	fmt.Fprintf(out, "\n%d checks, %d failed\n", r.Checks, r.Failed)
}

// sayRows prints two lines a row: what and whence, then the numbers.
func sayRows(out io.Writer, rows []verify.Row) {
	group := ""
	for _, r := range rows {
		if r.Group != group {
			group = r.Group
			fmt.Fprintf(out, "%s\n", group)
		}
		word := "pass"
		if !r.Pass {
			word = "FAIL"
		}
		fold(out, "  ", "    ", r.Check+"  ("+r.Source+")")
		if r.Error != "" {
			fold(out, "    FAIL  ", "          ", r.Error)
			continue
		}
		fmt.Fprintf(out, "    %s  expected %-16.12g got %-16.12g %4.1f digits\n", word, r.Expected, r.Got, r.Digits)
	}
}
