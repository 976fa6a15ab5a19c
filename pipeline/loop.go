package pipeline

import (
	"context"
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"slices"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/watcher"
)

const (
	tickEvery = 15 * time.Second // how often time alone is looked at
	leaseFor  = 2 * time.Minute  // a sweeper that is gone this long is replaced
)

// newWatcher makes the watcher for the folders of the settings.
func (s *Service) newWatcher() error {
	set, _, _ := s.current()
	var roots []watcher.Root
	for _, f := range set.Folders {
		abs, err := filepath.Abs(f.Path)
		if err != nil {
			return fmt.Errorf("folder %s: %w", f.Name, err)
		}
		roots = append(roots, watcher.Root{Name: f.Name, Path: abs, MarkerFile: f.MarkerFile, Settle: f.Settle, Ignore: f.Ignore})
	}
	s.watch = watcher.New(roots, watcher.Options{Known: s.knownFiles, AskAgain: s.cfg.AskAgain})
	return nil
}

// knownFiles tells the watcher what is stored already.
func (s *Service) knownFiles(ctx context.Context, root string) (map[string]watcher.Stamp, error) {
	known, err := s.store.KnownFiles(ctx, root)
	if err != nil {
		return nil, err
	}
	out := make(map[string]watcher.Stamp, len(known))
	for p, k := range known {
		out[p] = watcher.Stamp{Size: k.Size, Mod: k.ModTime}
	}
	return out, nil
}

func (s *Service) acknowledge(f watcher.File) {
	if s.watch != nil {
		s.watch.Done(f.Root, f.Path, f.Size, f.ModTime)
	}
}

// holder names this process for leases.
func (s *Service) holder() db.Holder {
	host, err := os.Hostname()
	if err != nil {
		host = "unknown host"
	}
	return db.Holder{Host: host, PID: os.Getpid(), Program: Program()}
}

// Watch sweeps, computes and tells until ctx ends. ready is called once
// everything runs.
func (s *Service) Watch(ctx context.Context, ready func()) error {
	if err := s.startQueue(ctx); err != nil {
		return err
	}
	if err := s.enqueuePending(ctx); err != nil {
		return err
	}
	if s.cfg.Sweep {
		if err := s.newWatcher(); err != nil {
			return err
		}
		s.defers("leases", func(ctx context.Context) error { return s.store.ReleaseRoots(ctx, s.holder()) })
	}
	if ready != nil {
		ready()
	}
	go s.tickLoop(ctx)
	if !s.cfg.Sweep {
		<-ctx.Done()
		return nil
	}
	every := 15 * time.Second
	set, _, _ := s.current()
	for _, f := range set.Folders {
		if f.Sweep > 0 && f.Sweep < every {
			every = f.Sweep
		}
	}
	err := s.watch.Run(ctx, watcher.RunOptions{Every: every, Now: s.clock.Now}, func(ctx context.Context, r watcher.Report) error {
		s.handle(ctx, r)
		return nil
	})
	if ctx.Err() != nil {
		return nil
	}
	return err
}

// tickLoop looks at the time until ctx ends.
func (s *Service) tickLoop(ctx context.Context) {
	t := time.NewTicker(tickEvery)
	defer t.Stop()
	for {
		err := s.Tick(ctx, s.clock.Now())
		if ctx.Err() == nil {
			s.once.note(s.log, "the clockwork", err)
		}
		if err == nil && !s.cfg.Sweep {
			beat() // a process that only computes stores no looks
		}
		select {
		case <-ctx.Done():
			return
		case <-t.C:
		}
	}
}

// handle deals with one report of the watcher. Trouble with the database
// leaves the files where they are: the export folder is the spool.
func (s *Service) handle(ctx context.Context, r watcher.Report) {
	r.Files = s.leased(ctx, r)
	got, err := s.TakeIn(ctx, r.Files)
	if ctx.Err() != nil {
		return
	}
	s.once.note(s.log, "taking files in", err)
	s.once.begun(s.log, "files that cannot be taken yet", waits(r))
	away := err != nil && db.Away(err)
	s.dbAway.Store(away)
	switch now := s.clock.Now(); {
	case away && s.awaySince.IsZero():
		s.awaySince = now
	case !away && err == nil && !s.awaySince.IsZero():
		from := s.awaySince
		s.awaySince = time.Time{}
		s.once.note(s.log, "telling that the database was away", s.tellAway(ctx, from, now, len(r.Files)))
	}
	if got.Taken+got.Parked+got.Refused+got.Twin > 0 {
		s.log.Info().Int("taken", got.Taken).Int("twin", got.Twin).Int("parked", got.Parked).Int("refused", got.Refused).Msg("files")
	}
	if err == nil {
		err = s.putStates(ctx, r)
		s.once.note(s.log, "recording the state of the folders", err)
		if err == nil {
			beat()
		}
	}
}

// waits says why files that stand in the folders cannot be taken yet: empty,
// locked, growing for long, links.
func waits(r watcher.Report) map[string]string {
	out := map[string]string{}
	for _, w := range r.Waits {
		out[w.Root+"/"+w.Path] = w.Why
	}
	return out
}

// leased keeps the files of roots this process may sweep: one sweeper per root.
func (s *Service) leased(ctx context.Context, r watcher.Report) []watcher.File {
	var roots []string
	for _, st := range r.States {
		roots = append(roots, st.Root)
	}
	claims, err := s.store.ClaimRoots(ctx, roots, s.holder(), s.clock.Now(), leaseFor)
	if ctx.Err() != nil {
		return nil
	}
	s.once.note(s.log, "claiming the folders", err)
	for _, root := range roots {
		c := claims[root]
		var wait error
		if err == nil && !c.Held {
			wait = fmt.Errorf("process %d on %s sweeps it since %s; waiting for its lease", c.Other.PID, c.Other.Host, c.Other.Since.Format(time.RFC3339))
		}
		s.once.note(s.log, "sweeping folder "+root, wait)
		switch {
		case err == nil && c.Held && !s.holds[root]:
			s.watch.Recall(root) // what another process took in meanwhile is known now
			s.holds[root] = true
		case err == nil && !c.Held:
			delete(s.holds, root)
		}
	}
	if err != nil {
		// The database is away: taking in will say so itself, and take nothing.
		return r.Files
	}
	return slices.DeleteFunc(slices.Clone(r.Files), func(f watcher.File) bool { return !s.holds[f.Root] })
}

// putStates records what the look saw of each root.
func (s *Service) putStates(ctx context.Context, r watcher.Report) error {
	cfg := set(s)
	rows := make([]db.RootState, 0, len(r.States))
	for _, st := range r.States {
		row := db.RootState{Root: st.Root, Visible: st.Visible, Why: st.Why, Since: st.Since, LookedAt: st.LookedAt, Newest: st.Newest, Files: st.Files, Settling: st.Settling, Litter: st.Litter}
		if f := cfg.FolderByName(st.Root); f != nil {
			row.Instrument, row.ClockOffset = f.Instrument, f.ClockAhead
		}
		if st.Visible && st.Settling == 0 && !r.More {
			row.CompleteUpTo = st.LookedAt
		}
		rows = append(rows, row)
	}
	return s.store.PutRootStates(ctx, rows)
}

// Look is one sweep at the clock's time, for the replay and for once.
func (s *Service) Look(ctx context.Context) (watcher.Report, error) {
	if s.watch == nil {
		if err := s.newWatcher(); err != nil {
			return watcher.Report{}, err
		}
	}
	r, err := s.watch.Look(ctx, s.clock.Now())
	if err != nil {
		return r, err
	}
	s.handle(ctx, r)
	return r, nil
}

// Drain waits until no set waits to be computed.
func (s *Service) Drain(ctx context.Context) error {
	pause := 5 * time.Millisecond
	for {
		n, err := s.store.JobsOpen(ctx, "sets")
		switch {
		case err != nil && !db.Away(err):
			return err
		case err == nil && n == 0:
			return nil
		}
		select {
		case <-ctx.Done():
			return ctx.Err()
		case <-time.After(pause):
		}
		pause = min(pause*3/2, 100*time.Millisecond)
	}
}

// Once works off what is there and returns. What stands in the folders is
// taken as final: a set that lacks nothing is computed without waiting for
// silence, one that lacks something is reported as waiting.
func (s *Service) Once(ctx context.Context) error {
	s.final.Store(true)
	if err := s.startQueue(ctx); err != nil {
		return err
	}
	// The next run shall not have to wait until the leases of this one lapse.
	s.defers("leases", func(ctx context.Context) error { return s.store.ReleaseRoots(ctx, s.holder()) })
	if err := s.enqueuePending(ctx); err != nil {
		return err
	}
	for {
		r, err := s.Look(ctx)
		if err != nil {
			return err
		}
		if s.dbAway.Load() {
			return &DatabaseError{Err: errors.New("the database does not answer; nothing was lost, the files stay in their folders")}
		}
		settling := 0
		for _, st := range r.States {
			settling += st.Settling
		}
		if !r.More && settling == 0 && len(r.Files) == 0 {
			break
		}
		wait := 50 * time.Millisecond
		if !r.More && settling > 0 {
			wait = max(wait, min(time.Until(r.Next), 10*time.Second))
		}
		select {
		case <-ctx.Done():
			return ctx.Err()
		case <-time.After(wait):
		}
	}
	if err := s.Tick(ctx, s.clock.Now()); err != nil {
		return err
	}
	if err := s.Drain(ctx); err != nil {
		return err
	}
	return s.Tick(ctx, s.clock.Now())
}

// enqueuePending makes sure that every stored message that is not delivered
// has a job: a crash between commit and queue cannot happen, but jobs of a
// queue that was emptied by hand can be gone.
func (s *Service) enqueuePending(ctx context.Context) error {
	if s.queue == nil {
		return nil
	}
	pending, err := s.store.PendingDeliveries(ctx, nil, 1000)
	if err != nil {
		return err
	}
	var ids []int64
	for _, d := range pending {
		ids = append(ids, d.ID)
	}
	return s.store.InTx(ctx, func(tx pgx.Tx) error { return s.enqueueDeliveries(ctx, tx, ids) })
}
