package main

import (
	"context"
	"errors"
	"fmt"
	"os"
	"os/signal"
	"path/filepath"
	"runtime/debug"
	"syscall"
	"time"

	"github.com/rs/zerolog"
	"github.com/spf13/cobra"

	"pkvigil/pipeline"
	"pkvigil/pipeline/rehearse"
	"pkvigil/pipeline/serve"
	"pkvigil/pipeline/settings"
)

func (a *app) watch() *cobra.Command {
	var only string
	c := &cobra.Command{
		Use: "watch", Short: "The service: sweep, take in, compute, judge, chart, tell",
		Long: `Runs until it is stopped. A first signal stops it gracefully, a second at once.
SIGHUP reads the settings again: they are checked first and taken whole or not at all.`,
		Example: "  pkvigil watch --settings /etc/pkvigil/pkvigil.toml\n  pkvigil watch --only sweep     on the instrument's machine\n  pkvigil watch --only work      on the machines that compute",
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			if only != "" && only != "sweep" && only != "work" {
				return &usageError{fmt.Errorf("--only %q: expected sweep or work", only)}
			}
			a.verbose = true
			return a.serveUntil(cmd.Context(), pipeline.Config{Sweep: only != "work", Work: only != "sweep"})
		},
	}
	c.Flags().StringVar(&only, "only", "", "sweep: only take files in; work: only compute and tell")
	return c
}

// serveUntil runs the service with its page and its reload.
func (a *app) serveUntil(ctx context.Context, cfg pipeline.Config) error {
	return a.with(ctx, cfg, func(s *pipeline.Service) error {
		hup := make(chan os.Signal, 1)
		signal.Notify(hup, syscall.SIGHUP)
		defer signal.Stop(hup)
		go func() {
			for {
				select {
				case <-ctx.Done():
					pipeline.NotifyStopping()
					a.secondSignal()
					return
				case <-hup:
					set, text, err := a.read()
					s.Reload(ctx, set, text, err)
				}
			}
		}()
		if addr := s.Settings().Serve.Listen; addr != "" {
			stop, err := serve.Start(addr, s)
			if err != nil {
				return fmt.Errorf("page: %w", err)
			}
			defer stop()
			fmt.Fprintf(a.err, "page on http://%s/\n", addr)
		}
		err := s.Watch(ctx, func() { pipeline.NotifyReady() })
		if ctx.Err() != nil && errors.Is(err, context.Canceled) {
			return nil // a service that is asked to stop has done its work
		}
		return err
	})
}

// secondSignal ends the process at once when the graceful stop is not awaited.
func (a *app) secondSignal() {
	again := make(chan os.Signal, 1)
	signal.Notify(again, os.Interrupt, syscall.SIGTERM)
	fmt.Fprintln(a.err, "stopping; a second signal ends it at once (nothing is lost)")
	<-again
	os.Exit(exitInterrupted)
}

func (a *app) once() *cobra.Command {
	return &cobra.Command{
		Use: "once", Short: "Work off what is there and exit",
		Long:    "Takes in everything that stands in the folders as final, computes what is whole,\nnames what is missing, and exits.",
		Example: "  pkvigil once --settings pkvigil.toml",
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return a.with(cmd.Context(), pipeline.Config{Sweep: true, Work: true}, func(s *pipeline.Service) error {
				if err := s.Once(cmd.Context()); err != nil {
					return err
				}
				return a.showNights(cmd.Context(), s)
			})
		},
	}
}

func (a *app) showNights(ctx context.Context, s *pipeline.Service) error {
	rows, err := s.Store().NightCounts(ctx, nil, "0001-01-01", "9999-12-31")
	if err != nil {
		return err
	}
	fmt.Fprintf(a.out, "%-11s %-10s %7s %5s %7s %6s %5s %10s %8s\n", "night", "instrument", "planned", "seen", "stands", "noted", "held", "no number", "waiting")
	for _, r := range rows {
		fmt.Fprintf(a.out, "%-11s %-10s %7d %5d %7d %6d %5d %10d %8d\n", r.Night, r.Instrument, r.Planned, r.Seen, r.Stands, r.StandsNoted, r.Held, r.NoNumber, r.Waiting+r.Gathering)
	}
	return nil
}

func (a *app) demo() *cobra.Command {
	var dir string
	var nights int
	var seed uint64
	var keep bool
	c := &cobra.Command{
		Use: "demo", Short: "Sixty nights of an invented laboratory, replayed through the real service",
		Long: `Generates the export files of the invented Quillmere Indicator Works night by
night into real folders and lets the service work on them: watcher, parsers,
database, fit, charts, cases, messages, brief. It differs from watch only in
the clock. At the end it says what the manager should know, how many of the
faults built into the nights were found, and how to look around.`,
		Example: "  pkvigil demo\n  pkvigil demo --nights 12 --dir /tmp/quillmere",
		Args:    cobra.NoArgs,
		RunE: func(cmd *cobra.Command, _ []string) error {
			return a.runDemo(cmd.Context(), dir, nights, seed, keep)
		},
	}
	c.Flags().StringVar(&dir, "dir", "", "folder for the laboratory (default: pkvigil-demo in the user's cache folder)")
	c.Flags().IntVar(&nights, "nights", 60, "how many nights to play")
	c.Flags().Uint64Var(&seed, "seed", 7, "seed of the laboratory; equal seeds give equal files")
	c.Flags().BoolVar(&keep, "keep", false, "keep what an earlier demo left in the folder and refuse to begin")
	return c
}

func (a *app) runDemo(ctx context.Context, dir string, nights int, seed uint64, keep bool) error {
	if dir == "" {
		cache, err := os.UserCacheDir()
		if err != nil {
			cache = os.TempDir()
		}
		dir = filepath.Join(cache, "pkvigil-demo")
	}
	dir, err := filepath.Abs(dir)
	if err != nil {
		return err
	}
	story := rehearse.NewStory(seed)
	if nights < 1 || nights > story.Nights() {
		return &usageError{fmt.Errorf("--nights %d: expected 1 to %d", nights, story.Nights())}
	}
	if err := clearDemo(dir, keep); err != nil {
		return err
	}
	if err := rehearse.Prepare(dir); err != nil {
		return err
	}
	recv, err := startReceiver()
	if err != nil {
		return err
	}
	defer recv.close()
	if err := os.Setenv(secretEnv, recv.secret); err != nil {
		return err
	}
	wires := rehearse.Wires{DataDir: filepath.Join(dir, "data"), WebhookURL: recv.url, WebhookSecretEnv: secretEnv}
	text := story.SettingsWith(dir, wires)
	a.settings = filepath.Join(dir, "pkvigil.toml")
	if err := os.WriteFile(a.settings, text, 0o600); err != nil {
		return err
	}
	set, err := settings.Read(text, a.settings)
	if err != nil {
		return err
	}
	clock := pipeline.NewSetClock(story.Start())
	s, err := pipeline.Open(ctx, pipeline.Config{Settings: set, Text: text, Clock: clock, Log: a.logger(zerolog.ErrorLevel), Sweep: true, Work: true, AskAgain: 6 * time.Hour})
	if err != nil {
		return err
	}
	debug.SetGCPercent(400) // sixty nights in two minutes leave little time for collecting
	start := time.Now()
	fmt.Fprintf(a.err, "%s: %d nights from %s, into %s\n", set.Laboratory.Name, nights, story.Date(1), dir)
	err = pipeline.Replay{Story: story, Base: dir, From: 1, To: nights, Progress: a.progress()}.Run(ctx, s, clock)
	if terminal(a.err) {
		fmt.Fprintln(a.err)
	}
	if err == nil {
		err = a.tellDemo(ctx, s, story, dir, nights, time.Since(start))
	}
	if err == nil {
		a.tellReceived(ctx, s, recv)
		// The receiver ends with the demo: the settings left behind name none.
		err = os.WriteFile(a.settings, story.SettingsWith(dir, rehearse.Wires{DataDir: wires.DataDir}), 0o600)
	}
	stop, cancel := context.WithTimeout(context.WithoutCancel(ctx), 30*time.Second)
	defer cancel()
	return errors.Join(err, s.Close(stop))
}

// tellReceived waits a little for the last deliveries and says what came.
func (a *app) tellReceived(ctx context.Context, s *pipeline.Service, recv *receiver) {
	for range 100 {
		if left, err := s.Store().PendingDeliveries(ctx, nil, 1); err != nil || len(left) == 0 {
			break
		}
		select {
		case <-ctx.Done():
			return
		case <-time.After(50 * time.Millisecond):
		}
	}
	n, twice, refused := recv.counts()
	fmt.Fprintf(a.out, "\n%d messages came to the demo's receiver on this machine, each signed; %d twice, %d with a bad signature.\n", n, twice, refused)
}

// clearDemo removes what an earlier demo left; a folder that is not a demo's is never touched.
func clearDemo(dir string, keep bool) error {
	mark := filepath.Join(dir, ".pkvigil-demo")
	entries, err := os.ReadDir(dir)
	switch {
	case errors.Is(err, os.ErrNotExist):
	case err != nil:
		return err
	case len(entries) == 0:
	default:
		if _, err := os.Stat(mark); err != nil {
			return &usageError{fmt.Errorf("folder %s is not empty and not of an earlier demo; name another with --dir", dir)}
		}
		if keep {
			return &usageError{fmt.Errorf("folder %s holds an earlier demo and --keep was given", dir)}
		}
		for _, e := range entries {
			if err := os.RemoveAll(filepath.Join(dir, e.Name())); err != nil {
				return err
			}
		}
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return err
	}
	return os.WriteFile(mark, []byte("made by pkvigil demo; it removes everything beside this file when it begins again\n"), 0o644)
}

// progress shows how far the replay is: one line that is rewritten on a
// terminal, one line a week elsewhere.
func (a *app) progress() func(pipeline.Progress) {
	tty := terminal(a.err)
	return func(p pipeline.Progress) {
		left := ""
		if p.Night > 3 {
			left = fmt.Sprintf(", about %.0f s left", p.Elapsed.Seconds()/float64(p.Night-1)*float64(p.Of-p.Night+1))
		}
		switch {
		case tty:
			fmt.Fprintf(a.err, "\rnight %2d of %d  %s  %6d files%s      ", p.Night, p.Of, p.Date, p.Files, left)
		case p.Night%7 == 1:
			fmt.Fprintf(a.err, "night %2d of %d  %s  %6d files%s\n", p.Night, p.Of, p.Date, p.Files, left)
		}
	}
}

// tellDemo says what the manager should know, scores the replay against the
// truth, and shows how to look around.
func (a *app) tellDemo(ctx context.Context, s *pipeline.Service, story *rehearse.Story, dir string, nights int, took time.Duration) error {
	sum, err := s.Summary(ctx)
	if err != nil {
		return err
	}
	fmt.Fprintf(a.out, "\n%d files, %d sets computed in %.0f s: %d stand, %d stand with notes, %d held, %d without a number.\n", sum.Files, sum.Results, took.Seconds(), sum.Stands, sum.Noted, sum.Held, sum.NoNumber)
	fmt.Fprintf(a.out, "\nWHAT THE MANAGER SHOULD KNOW\n")
	for _, c := range sum.Cases {
		fmt.Fprintf(a.out, "  %s  %s\n", c.Opened, c.Sentence)
		fmt.Fprintf(a.out, "      most likely: %s (%.0f %%); %s; touches %d result(s)\n", c.Cause, 100*c.Probability, c.State, c.Touched)
	}
	if len(sum.Cases) == 0 {
		fmt.Fprintln(a.out, "  nothing: the measuring system was in control")
	}
	truth, err := rehearse.ReadTruth(filepath.Join(dir, "truth"), 1, nights)
	if err != nil {
		return err
	}
	if len(truth) > 0 {
		found, err := s.Found(ctx, story)
		if err != nil {
			return err
		}
		fmt.Fprintf(a.out, "\nHOW IT DID AGAINST THE TRUTH\n%s\n", rehearse.Score(truth, *found).String())
	}
	fmt.Fprintf(a.out, `
LOOK AROUND
  the last morning's brief   %s
  one set                    pkvigil why %s -s %s
  the database               pkvigil schema reader -s %s
  keep the service running   pkvigil watch -s %s
`, sum.Brief, sum.Example, a.settings, a.settings, a.settings)
	return nil
}
