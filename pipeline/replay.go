package pipeline

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"time"

	"pkvigil/db"
	"pkvigil/db/cluster"
	"pkvigil/pipeline/rehearse"
)

// replayStep is how much of the night passes between two sweeps of a replay.
// A file settles when two sweeps agree, so it is taken in one step after it
// was written.
const replayStep = 45 * time.Minute

// A Replay plays the nights of an invented laboratory into real folders and
// lets the service work on them as on any other night. It differs from watch
// only in the clock.
type Replay struct {
	Story    *rehearse.Story
	Base     string // folder that holds the shares
	From, To int    // nights, 1-based, both included
	Progress func(Progress)

	been time.Time // up to here an earlier run of the same replay came; zero: nowhere
}

// Progress is how far a replay is.
type Progress struct {
	Night, Of int
	Date      string
	Files     int // deposits so far
	Elapsed   time.Duration
}

// Run plays the nights. The service must have been opened with clock, which
// Run moves. A replay that was cut off goes on where the database says it was:
// what had been written stands in the folders again, and the look it was cut
// off after is taken once more.
func (r Replay) Run(ctx context.Context, s *Service, clock *SetClock) error {
	if err := s.startQueue(ctx); err != nil {
		return err
	}
	truth := filepath.Join(r.Base, "truth")
	if err := os.MkdirAll(truth, 0o755); err != nil {
		return fmt.Errorf("folder for the truth: %w", err)
	}
	first, err := r.resume(ctx, s, clock)
	if err != nil {
		return err
	}
	start := time.Now()
	files := 0
	for n := first; n <= r.To; n++ {
		if r.Progress != nil {
			r.Progress(Progress{Night: n, Of: r.To, Date: r.Story.Date(n), Files: files, Elapsed: time.Since(start)})
		}
		deposits := r.Story.Deposits(n)
		if err := r.night(ctx, s, clock, deposits); err != nil {
			return fmt.Errorf("night %d (%s): %w", n, r.Story.Date(n), err)
		}
		if err := r.Story.WriteTruthOf(n, truth); err != nil {
			return err
		}
		files += len(deposits)
	}
	return nil
}

// resume finds out how far an earlier run came, moves the clock there and
// gives the night to begin with: the one before, whose last files may have
// come after noon.
func (r *Replay) resume(ctx context.Context, s *Service, clock *SetClock) (int, error) {
	roots, err := s.store.RootStates(ctx, nil)
	if err != nil {
		return 0, err
	}
	for _, st := range roots {
		if st.LookedAt.After(r.been) {
			r.been = st.LookedAt
		}
	}
	if r.been.IsZero() {
		return r.From, nil
	}
	for _, f := range rehearse.Folders() {
		if err := rehearse.Remount(r.Base, f); err != nil {
			return 0, err
		}
	}
	clock.MoveTo(r.been)
	return max(r.From, r.Story.NightOf(r.been)-1), nil
}

// step is one sweep at a moment, unless an earlier run has made it.
func (r Replay) step(ctx context.Context, s *Service, clock *SetClock, at time.Time) error {
	if at.Before(r.been) {
		return nil
	}
	return s.step(ctx, clock, at)
}

// night plays one night: deposits in order, a sweep at least every step.
func (r Replay) night(ctx context.Context, s *Service, clock *SetClock, deposits []rehearse.Deposit) error {
	if len(deposits) == 0 {
		return nil
	}
	written := map[string]time.Time{}
	next := deposits[0].At.Add(replayStep)
	for i, d := range deposits {
		for d.At.After(next) {
			if err := r.step(ctx, s, clock, next); err != nil {
				return err
			}
			next = next.Add(replayStep)
			if gap := d.At.Sub(next); gap > 2*replayStep {
				next = next.Add(gap - gap%replayStep - replayStep)
			}
		}
		// What is written over was there to be seen: a sweep every few seconds
		// would have taken it in.
		if key := d.Folder + "/" + d.Path; d.Act == rehearse.Write {
			if at, ok := written[key]; ok && clock.Now().Sub(at) < 2*replayStep {
				for _, before := range []time.Duration{20 * time.Second, time.Second} {
					if err := s.step(ctx, clock, d.At.Add(-before)); err != nil {
						return err
					}
				}
			}
			written[key] = d.At
		}
		clock.MoveTo(d.At)
		if err := r.act(ctx, s, clock, d); err != nil {
			return err
		}
		// A share that is away, a half-written file: the program gets a look at
		// them before the next thing happens.
		if look(d.Act) || (i+1 < len(deposits) && look(deposits[i+1].Act)) {
			if err := r.step(ctx, s, clock, d.At.Add(time.Second)); err != nil {
				return err
			}
		}
	}
	// The morning: the last files settle, sets fall silent, the brief is written.
	last := deposits[len(deposits)-1].At
	morning, err := onNight(r.Story.Date(r.Story.NightOf(deposits[0].At)), "06:31", r.Story.Zone())
	if err != nil {
		return err
	}
	for _, at := range []time.Time{last.Add(10 * time.Minute), last.Add(45 * time.Minute), morning, morning.Add(4 * time.Hour)} {
		if at.After(clock.Now()) || at.Equal(r.been) {
			if err := r.step(ctx, s, clock, at); err != nil {
				return err
			}
		}
	}
	return nil
}

func look(a rehearse.Act) bool {
	switch a {
	case rehearse.WritePart, rehearse.Unmount, rehearse.Mount, rehearse.DatabaseAway, rehearse.DatabaseBack, rehearse.Sign:
		return true
	}
	return false
}

// act carries out one deposit.
func (r Replay) act(ctx context.Context, s *Service, clock *SetClock, d rehearse.Deposit) error {
	done, err := rehearse.Apply(r.Base, d)
	if d.Act == rehearse.Remove && !r.been.IsZero() && errors.Is(err, fs.ErrNotExist) {
		return nil // an earlier run had removed it
	}
	if done || err != nil || d.At.Before(r.been) {
		return err
	}
	switch d.Act {
	case rehearse.DatabaseAway:
		return s.stopServer(ctx)
	case rehearse.DatabaseBack:
		return s.restartServer(ctx)
	case rehearse.Sign:
		return s.replaySign(ctx, d.At, *d.Sign)
	}
	return nil
}

// step is one sweep with everything that follows from it, at a moment.
func (s *Service) step(ctx context.Context, clock *SetClock, at time.Time) error {
	clock.MoveTo(at)
	for {
		rep, err := s.Look(ctx)
		if err != nil {
			return err
		}
		if s.dbAway.Load() || s.serverDown {
			return nil // the night goes on without the database
		}
		if !rep.More {
			break
		}
	}
	for range 2 { // what the first tick completes is computed and judged in the same step
		if err := s.Drain(ctx); err != nil {
			return err
		}
		if err := s.Tick(ctx, clock.Now()); err != nil {
			if db.Away(err) {
				return nil
			}
			return err
		}
		if n, err := s.store.JobsOpen(ctx, "sets"); err == nil && n == 0 {
			return nil // nothing was completed by this tick
		}
	}
	return s.Drain(ctx)
}

// stopServer stops the private server under the running service, as an
// administrator would; with a server of somebody else's nothing is stopped.
func (s *Service) stopServer(ctx context.Context) error {
	if s.server == nil {
		return nil
	}
	s.serverDown = true
	return s.server.Stop(ctx)
}

// restartServer starts the private server again.
func (s *Service) restartServer(ctx context.Context) error {
	if s.server == nil || !s.serverDown {
		return nil
	}
	srv, err := cluster.Start(ctx, s.serverConfig)
	if err != nil {
		return err
	}
	s.server, s.serverDown = srv, false
	return nil
}
