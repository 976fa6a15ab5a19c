package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"github.com/rs/zerolog"
	"github.com/spf13/cobra"

	"pkvigil/db"
	"pkvigil/pipeline"
	"pkvigil/pipeline/settings"
)

// Exit codes, the whole contract with cron and systemd; the README repeats this table.
const (
	exitOK          = 0
	exitFailed      = 1
	exitUsage       = 2   // wrong command line or settings
	exitDatabase    = 3   // the database or its server
	exitUnknown     = 4   // what was named does not exist
	exitFound       = 10  // ran well and found something: probe, again, verify, deeds
	exitInterrupted = 130 // stopped by a signal
)

// errFound says that a command ran well and found something.
var errFound = errors.New("something was found")

// usageError is a wrong command line or settings file.
type usageError struct{ err error }

func (e *usageError) Error() string { return e.err.Error() }
func (e *usageError) Unwrap() error { return e.err }

// app is what every command shares.
type app struct {
	out, err io.Writer
	settings string
	json     bool
	verbose  bool
	debug    bool
}

// run is the program without the process: tests call it too.
func run(ctx context.Context, args []string, stdout, stderr io.Writer) int {
	a := &app{out: stdout, err: stderr}
	root := a.root()
	root.SetArgs(args)
	root.SetOut(stdout)
	root.SetErr(stderr)
	err := root.ExecuteContext(ctx)
	code := exitCode(ctx, err)
	switch code {
	case exitOK, exitFound, exitInterrupted:
	default:
		fmt.Fprintln(stderr, "pkvigil: "+db.Redact(err.Error()))
	}
	return code
}

// exitCode maps errors to numbers; unknown errors count as failure.
func exitCode(ctx context.Context, err error) int {
	var usage *usageError
	var database *pipeline.DatabaseError
	var bad *settings.Error
	switch {
	case err == nil:
		return exitOK
	case errors.Is(err, errFound):
		return exitFound
	case ctx.Err() != nil || errors.Is(err, context.Canceled):
		return exitInterrupted
	case errors.As(err, &usage), errors.As(err, &bad):
		return exitUsage
	case errors.Is(err, pipeline.ErrUnknownObject), errors.Is(err, db.ErrNotFound):
		return exitUnknown
	case errors.As(err, &database), db.Away(err):
		return exitDatabase
	case strings.HasPrefix(err.Error(), "unknown command"), strings.HasPrefix(err.Error(), "unknown flag"), strings.Contains(err.Error(), "arg(s)"):
		return exitUsage
	}
	return exitFailed
}

func (a *app) root() *cobra.Command {
	root := &cobra.Command{
		Use:   "pkvigil",
		Short: "Watches a laboratory's spectra and pH files, fits pKa, and tells when a reference drifts",
		Long: `pkvigil picks up scan and pH files from export folders, matches them into
sample sets, fits the pKa with its uncertainty, judges it, stores everything in
PostgreSQL, and tells when a reference indicator shows that the measuring system
has moved: since when, by how much, what most likely moved, and which results
it touches.

Results support the decisions of qualified people; local rules prevail. Work with
strong acids and bases, solvents and UV lamps asks for the usual protection.`,
		Example: `  pkvigil demo                          sixty nights of an invented laboratory, for real
  pkvigil init /export/U1               propose settings for a folder
  pkvigil look --settings pkvigil.toml  what the rules make of the folders, dry
  pkvigil watch                         the service
  pkvigil why CRR-104                   why a set was held, what would make it stand`,
		SilenceUsage: true, SilenceErrors: true,
		Version: pipeline.Version,
	}
	f := root.PersistentFlags()
	f.StringVarP(&a.settings, "settings", "s", defaultSettings(), "settings file")
	f.BoolVar(&a.json, "json", false, "answer in JSON, for machines")
	f.BoolVarP(&a.verbose, "verbose", "v", false, "log what the service does")
	f.BoolVar(&a.debug, "debug", false, "log everything, the server's own lines included")
	root.AddGroup(&cobra.Group{ID: "run", Title: "Running:"}, &cobra.Group{ID: "ask", Title: "Asking:"}, &cobra.Group{ID: "decide", Title: "Deciding:"}, &cobra.Group{ID: "keep", Title: "Keeping:"})
	for _, c := range []*cobra.Command{a.demo(), a.watch(), a.once(), a.initial()} {
		c.GroupID = "run"
		root.AddCommand(c)
	}
	for _, c := range []*cobra.Command{a.why(), a.trace(), a.since(), a.reach(), a.brief(), a.probe(), a.look()} {
		c.GroupID = "ask"
		root.AddCommand(c)
	}
	for _, c := range []*cobra.Command{a.sign(), a.adopt(), a.note()} {
		c.GroupID = "decide"
		root.AddCommand(c)
	}
	for _, c := range []*cobra.Command{a.again(), a.deeds(), a.schema(), a.rehearse(), a.verify()} {
		c.GroupID = "keep"
		root.AddCommand(c)
	}
	root.SetHelpCommand(a.help(root))
	root.SetFlagErrorFunc(func(_ *cobra.Command, err error) error { return &usageError{err} })
	return root
}

func defaultSettings() string {
	if v := os.Getenv("PKVIGIL_SETTINGS"); v != "" {
		return v
	}
	return "pkvigil.toml"
}

// read reads and checks the settings file.
func (a *app) read() (*settings.Settings, []byte, error) {
	text, err := os.ReadFile(a.settings)
	if err != nil {
		return nil, nil, &usageError{fmt.Errorf("settings: %w; name a file with --settings, or make one with: pkvigil init FOLDER", err)}
	}
	s, err := settings.Read(text, a.settings)
	if err != nil {
		return nil, nil, &usageError{err}
	}
	if err := knownChecks(s, text, a.settings); err != nil {
		return nil, nil, &usageError{err}
	}
	return s, text, nil
}

// logger writes events for people to standard error.
func (a *app) logger(least zerolog.Level) zerolog.Logger {
	switch {
	case a.debug:
		least = zerolog.DebugLevel
	case a.verbose:
		least = zerolog.InfoLevel
	}
	if a.json {
		return zerolog.New(a.err).Level(least).With().Timestamp().Logger()
	}
	_, plain := os.LookupEnv("NO_COLOR")
	return zerolog.New(zerolog.ConsoleWriter{Out: a.err, NoColor: plain || !terminal(a.err), TimeFormat: "15:04:05"}).Level(least).With().Timestamp().Logger()
}

// terminal says whether w is one.
func terminal(w io.Writer) bool {
	f, ok := w.(*os.File)
	if !ok {
		return false
	}
	info, err := f.Stat()
	return err == nil && info.Mode()&os.ModeCharDevice != 0
}

// with opens the service for a command that asks or decides, and closes it.
func (a *app) with(ctx context.Context, cfg pipeline.Config, f func(*pipeline.Service) error) (err error) {
	set, text, err := a.read()
	if err != nil {
		return err
	}
	cfg.Settings, cfg.Text = set, text
	if cfg.Clock == nil {
		cfg.Clock = pipeline.MachineClock{}
	}
	cfg.Log = a.logger(zerolog.WarnLevel)
	s, err := pipeline.Open(ctx, cfg)
	if err != nil {
		return err
	}
	defer func() {
		stop, cancel := context.WithTimeout(context.WithoutCancel(ctx), 30*time.Second)
		defer cancel()
		err = errors.Join(err, s.Close(stop))
	}()
	return f(s)
}

// print answers in JSON or in words.
func (a *app) print(v any, words func(io.Writer)) error {
	if !a.json {
		words(a.out)
		return nil
	}
	b, err := pipeline.Encode(map[string]any{"version": 1, "answer": v})
	if err != nil {
		return err
	}
	var out any
	if err := json.Unmarshal(b, &out); err != nil {
		return err
	}
	e := json.NewEncoder(a.out)
	e.SetIndent("", "  ")
	return e.Encode(out)
}
