package cluster

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"syscall"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"
)

const (
	lookEvery    = 20 * time.Millisecond
	firstPause   = 200 * time.Millisecond
	longestPause = 30 * time.Second
	goodLife     = 10 * time.Second // a server that lived shorter is not started again at once
	maxLogBytes  = 8 << 20
)

// Start finds the binaries, initialises the data folder when it is new, takes
// over what an earlier crash left, and returns once the server answers. It
// returns ErrInUse (wrapped) when another process owns the server. After that
// the server is watched: when it dies it is started again, with growing pauses.
func Start(ctx context.Context, cfg Config) (*Server, error) {
	p, err := findPlace(cfg)
	if err != nil {
		return nil, err
	}
	free, err := p.lock()
	if err != nil {
		return nil, err
	}
	s := &Server{cfg: cfg, place: p, owned: true, free: free, quit: make(chan struct{}), done: make(chan struct{})}
	if err := s.begin(ctx); err != nil {
		free()
		return nil, err
	}
	return s, nil
}

// begin does the first start and leaves the supervisor running.
func (s *Server) begin(ctx context.Context) error {
	if err := s.place.initialise(ctx, s.cfg); err != nil {
		return err
	}
	if err := s.place.writeAccess(s.cfg); err != nil {
		return err
	}
	run, err := s.launch(ctx)
	if err != nil {
		return err
	}
	if err := s.makeDatabase(ctx); err != nil {
		run.end(syscall.SIGQUIT)
		return err
	}
	go s.supervise(run)
	return nil
}

// A run is one life of the server process.
type run struct {
	pid  int
	died chan struct{} // closed after the process was reaped
	why  error         // set before died is closed
}

// end sends a signal and waits for the process.
func (r *run) end(sig syscall.Signal) {
	_ = syscall.Kill(r.pid, sig) // it may have died by itself
	<-r.died
}

// launch starts the process and waits until it answers.
func (s *Server) launch(ctx context.Context) (*run, error) {
	if err := s.place.takeOver(ctx, s.cfg); err != nil {
		return nil, err
	}
	r, err := s.place.spawn(s.cfg)
	if err != nil {
		return nil, err
	}
	if err := s.place.waitReady(ctx, r); err != nil {
		select {
		case <-r.died:
		default:
			r.end(syscall.SIGQUIT)
		}
		return nil, err
	}
	s.mu.Lock()
	s.pid = r.pid
	s.mu.Unlock()
	return r, nil
}

// spawn forks the server from a thread that lives as long as the server does:
// the death signal follows the thread that forked, not the process.
func (p *place) spawn(cfg Config) (*run, error) {
	log, err := p.openLog()
	if err != nil {
		return nil, err
	}
	cmd := exec.Command(filepath.Join(p.bin.dir, "postgres"), p.arguments(cfg)...)
	cmd.Dir = p.pg
	cmd.Env = cleanEnv()
	cmd.Stdout, cmd.Stderr = log, log
	cmd.SysProcAttr = &syscall.SysProcAttr{
		Pdeathsig:  syscall.SIGINT, // fast shutdown when we are gone
		Setpgid:    true,           // a terminal's Ctrl-C is for us: we drain first
		Credential: p.credential(),
	}
	r := &run{died: make(chan struct{})}
	started := make(chan error)
	go func() {
		runtime.LockOSThread() // never unlocked: the thread ends with the goroutine
		defer log.Close()
		if err := cmd.Start(); err != nil {
			started <- err
			return
		}
		r.pid = cmd.Process.Pid
		started <- nil
		r.why = cmd.Wait()
		close(r.died)
	}()
	if err := <-started; err != nil {
		return nil, fmt.Errorf("starting %s: %w", cmd.Path, err)
	}
	return r, nil
}

// openLog opens the server's log for appending; a large one is set aside once.
func (p *place) openLog() (*os.File, error) {
	if fi, err := os.Stat(p.logFile); err == nil && fi.Size() > maxLogBytes {
		if err := os.Rename(p.logFile, p.logFile+".1"); err != nil {
			return nil, fmt.Errorf("setting the old server log aside: %w", err)
		}
	}
	f, err := os.OpenFile(p.logFile, os.O_CREATE|os.O_APPEND|os.O_WRONLY, 0o600)
	if err != nil {
		return nil, fmt.Errorf("opening the server's log: %w", err)
	}
	return f, nil
}

// waitReady waits for the ready line of this very process; a stale file looks
// ready at once, so the process number is compared.
func (p *place) waitReady(ctx context.Context, r *run) error {
	tick := time.NewTicker(lookEvery)
	defer tick.Stop()
	for {
		select {
		case <-ctx.Done():
			return fmt.Errorf("waiting for the private server in %s to start: %w", p.pg, ctx.Err())
		case <-r.died:
			return fmt.Errorf("the private server ended while starting (%w); its log %s ends with: %s", orExit(r.why), p.logFile, p.logTail())
		case <-tick.C:
			if f, err := readPIDFile(p.pg); err == nil && f.pid == r.pid && f.status == "ready" {
				return nil
			}
		}
	}
}

func orExit(err error) error {
	if err == nil {
		return errors.New("exit status 0")
	}
	return err
}

func (p *place) logTail() string {
	raw, err := os.ReadFile(p.logFile)
	if err != nil {
		return err.Error()
	}
	return lastLines(string(bytes.ToValidUTF8(raw, nil)), 4)
}

// makeDatabase makes the one database when it is not there.
func (s *Server) makeDatabase(ctx context.Context) error {
	conn, err := pgx.Connect(ctx, strings.Replace(s.URL(), "/"+database+"?", "/postgres?", 1))
	if err != nil {
		return fmt.Errorf("connecting to the private server: %w", err)
	}
	defer conn.Close(context.WithoutCancel(ctx))
	_, err = conn.Exec(ctx, "create database "+database)
	if pg, ok := errors.AsType[*pgconn.PgError](err); ok && pg.Code == "42P04" {
		return nil // it is there
	}
	if err != nil {
		return fmt.Errorf("making database %s: %w", database, err)
	}
	return nil
}

// supervise starts the server again whenever it dies, until Stop.
func (s *Server) supervise(r *run) {
	defer close(s.done)
	pause := firstPause
	for born := time.Now(); ; born = time.Now() {
		select {
		case <-r.died:
		case <-s.quit:
			return
		}
		died := time.Now()
		if died.Sub(born) > goodLife {
			pause = firstPause
		}
		s.mu.Lock()
		s.pid = 0
		stopped := s.stopped
		s.mu.Unlock()
		if stopped {
			return
		}
		why := orExit(r.why).Error()
		s.cfg.say("the private server died (%s); starting it again", why)
		r = s.relaunch(&pause)
		if r == nil {
			return
		}
		away := time.Since(died)
		s.cfg.say("the private server answers again after %s", away.Round(time.Millisecond))
		if s.cfg.Restarted != nil {
			s.cfg.Restarted(why, away)
		}
	}
}

// relaunch tries until the server answers, pausing before each try, longer
// each time; nil when Stop came first. The first pause of all is skipped.
func (s *Server) relaunch(pause *time.Duration) *run {
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	go func() {
		select {
		case <-s.quit:
			cancel()
		case <-ctx.Done():
		}
	}()
	for {
		if *pause > firstPause {
			select {
			case <-s.quit:
				return nil
			case <-time.After(*pause):
			}
		}
		*pause = min(2*(*pause), longestPause)
		r, err := s.launch(ctx)
		if err == nil {
			return r
		}
		if ctx.Err() != nil {
			return nil
		}
		s.cfg.say("starting the private server again failed, next try in %s: %v", *pause, err)
	}
}

// Stop shuts the server down and waits for it: a fast shutdown, an immediate
// one when ctx ends first. A server owned by another process is left alone.
func (s *Server) Stop(ctx context.Context) error {
	if !s.owned {
		return nil
	}
	s.mu.Lock()
	if s.stopped {
		s.mu.Unlock()
		<-s.done
		return nil
	}
	s.stopped = true
	s.mu.Unlock()
	close(s.quit)
	<-s.done
	defer s.free()
	pid := s.PID()
	if pid == 0 {
		return nil
	}
	_ = syscall.Kill(pid, syscall.SIGINT) // it may have died by itself
	if waitGone(ctx, pid, s.place.pg) {
		return nil
	}
	_ = syscall.Kill(pid, syscall.SIGQUIT)
	late, cancel := context.WithTimeout(context.WithoutCancel(ctx), 10*time.Second)
	defer cancel()
	if waitGone(late, pid, s.place.pg) {
		return fmt.Errorf("the private server did not stop in time and was ended hard; it will recover at the next start: %w", ctx.Err())
	}
	return fmt.Errorf("the private server (process %d) does not end: %w", pid, ctx.Err())
}

// waitGone waits until no server process of this data directory has the number.
func waitGone(ctx context.Context, pid int, pgdata string) bool {
	tick := time.NewTicker(lookEvery)
	defer tick.Stop()
	for {
		if !serves(pid, pgdata) {
			return true
		}
		select {
		case <-ctx.Done():
			return false
		case <-tick.C:
		}
	}
}
