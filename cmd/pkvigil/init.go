package main

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"
	"time"

	"github.com/spf13/cobra"

	"pkvigil/pipeline"
)

func (a *app) initial() *cobra.Command {
	return &cobra.Command{
		Use: "init FOLDER...", Short: "Propose settings for export folders",
		Long: `Looks at folders, read only, and writes a commented settings file for them: naming
rules from the names it sees, roles, columns and layouts from the files,
instruments, and the compounds as questions. What it could not decide is marked
"# DOUBT:". An existing file is never overwritten. Then it says what the rules
make of the folders and what to do next.`,
		Example: "  pkvigil init /export/U1\n  pkvigil init /export/U1 /export/U2 --settings /etc/pkvigil/pkvigil.toml",
		Args: func(_ *cobra.Command, args []string) error {
			if len(args) == 0 {
				return &usageError{errors.New("name the folders that instruments export to: pkvigil init FOLDER")}
			}
			return nil
		},
		RunE: func(cmd *cobra.Command, args []string) error {
			if _, err := os.Lstat(a.settings); err == nil {
				return &usageError{fmt.Errorf("%s exists and is not overwritten; name another file with --settings", a.settings)}
			}
			p, err := pipeline.ProposeSettings(cmd.Context(), args, pipeline.ProposeOptions{Zone: pipeline.MachineZone(), DataDir: dataDir(), Name: a.settings, Now: time.Now()})
			if err != nil {
				return err
			}
			if err := writeNew(a.settings, p.Text); err != nil {
				return err
			}
			return a.print(map[string]any{"settings": a.settings, "doubts": p.Doubts, "look": p.Look}, func(out io.Writer) { sayInit(out, a.settings, p) })
		},
	}
}

// dataDir is where a private database may lie for the user who runs this.
func dataDir() string {
	if os.Geteuid() == 0 {
		return "/var/lib/pkvigil"
	}
	if home, err := os.UserHomeDir(); err == nil {
		return filepath.Join(home, ".local", "share", "pkvigil")
	}
	return "/var/lib/pkvigil"
}

// writeNew writes a file that must not exist yet.
func writeNew(path string, text []byte) (err error) {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o644)
	if err != nil {
		return fmt.Errorf("settings: %w", err)
	}
	defer func() { err = errors.Join(err, f.Close()) }()
	_, err = f.Write(text)
	return err
}

func sayInit(out io.Writer, file string, p *pipeline.ProposedSettings) {
	sayLook(out, p.Look, false)
	fmt.Fprintf(out, "\nwrote %s\n", file)
	if len(p.Doubts) > 0 {
		fmt.Fprintf(out, "\nDOUBTS (%d), marked in the file\n", len(p.Doubts))
		for _, d := range p.Doubts {
			fold(out, "  - ", "    ", d)
		}
	}
	fmt.Fprintf(out, "\nNEXT\n")
	for _, l := range []string{
		"edit %s: the doubts, and a [[compound]] for every code",
		"pkvigil look -s %s     until nothing surprises you",
		"pkvigil once -s %s     work off what is there",
		"pkvigil watch -s %s    the service",
	} {
		fmt.Fprintln(out, "  "+strings.Replace(l, "%s", file, 1))
	}
}
