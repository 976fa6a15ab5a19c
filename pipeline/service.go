package pipeline

import (
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"sync/atomic"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/riverqueue/river"
	"github.com/rs/zerolog"

	"pkvigil/db"
	"pkvigil/db/cluster"
	"pkvigil/pipeline/chart"
	"pkvigil/pipeline/drift"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/settings"
	"pkvigil/watcher"
)

// Program names the version and architecture that results are made with: the
// same digits are promised for the same name.
func Program() string { return "pkvigil " + Version + " " + runtime.GOARCH }

// Config is what a service is opened with.
type Config struct {
	Settings  *settings.Settings
	Text      []byte // the settings file as read
	Clock     Clock
	Log       zerolog.Logger
	Sweep     bool          // look at the folders and take files in
	Work      bool          // compute sets and deliver messages
	AskAgain  time.Duration // see watcher.Options; 0: its default
	URL       string        // database to use; "" takes what the settings say, or a private server
	AnySchema bool          // do not refuse an older schema: for the command that migrates it
	ReadOnly  bool          // no schema changes, no queue: for commands that only ask
}

// A Service is the running program: it owns the watcher, the queue and the
// connection to the database.
type Service struct {
	cfg    Config
	log    zerolog.Logger
	clock  Clock
	store  *db.Store
	server *cluster.Server // private server, nil when the settings name one
	queue  *river.Client[pgx.Tx]

	mu         sync.Mutex // guards what a reload replaces
	set        *settings.Settings
	settingsID int64
	text       []byte // the settings in force as read
	rules      *naming.Rules

	watch        *watcher.Watcher
	once         onChange
	holds        map[string]bool // roots whose lease this process has; owned by the sweep
	serverConfig cluster.Config
	serverDown   bool // the replay stopped the private server on purpose
	tickMu       sync.Mutex
	evalDue      time.Time // when an evaluation that waits for the queue has waited enough; guarded by tickMu
	awaySince    time.Time // since when take-in finds the database away; owned by the sweep
	due          sync.Map  // set id -> dueAt
	dyes         sync.Map  // result id -> spectra.LibraryEntry
	cacheMu      sync.Mutex
	designs      map[string]*drift.Design // archived designs by instrument, reference and lot
	records      map[int64]storedRecord
	lastModel    *drift.Model
	lastCells    []byte
	rulesKey     string
	chartDesign  chart.Rules
	habitPrints  map[*drift.Design]map[drift.Cause][]map[drift.Characteristic]float64
	dbAway       atomic.Bool // the last take-in found the database away
	final        atomic.Bool // what stands in the folders is all there will be

	stops []stop
}

// A stop is one named step of the way down.
type stop struct {
	name string
	f    func(context.Context) error
}

// Open connects to the database, or starts the private server, brings a
// private schema up to date and makes the queue ready. Nothing runs yet.
func Open(ctx context.Context, cfg Config) (*Service, error) {
	s := &Service{cfg: cfg, log: cfg.Log, clock: cfg.Clock, holds: map[string]bool{}}
	if s.clock == nil {
		s.clock = MachineClock{}
	}
	ok := false
	defer func() {
		if !ok {
			s.Close(context.WithoutCancel(ctx))
		}
	}()
	s.adopt(cfg.Settings)
	s.text = cfg.Text
	if err := s.connect(ctx); err != nil {
		return nil, err
	}
	if !cfg.ReadOnly {
		id, err := s.store.PutSettings(ctx, cfg.Text, Program(), s.clock.Now())
		if err != nil {
			return nil, fmt.Errorf("storing the settings: %w", err)
		}
		s.settingsID = id
		if err := s.openQueue(ctx); err != nil {
			return nil, err
		}
	}
	ok = true
	return s, nil
}

// adopt takes over settings.
func (s *Service) adopt(set *settings.Settings) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.set, s.rules = set, set.Naming()
}

// current returns the settings in force.
func (s *Service) current() (*settings.Settings, *naming.Rules, int64) {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.set, s.rules, s.settingsID
}

// zone returns the zone of a folder's clock.
func (s *Service) zone(folder string) *time.Location {
	set, _, _ := s.current()
	return set.ZoneOf(folder)
}

// laboratory returns the laboratory's zone.
func (s *Service) laboratory() *time.Location {
	set, _, _ := s.current()
	return set.Zone()
}

// connect opens the database the settings name, or starts the private server.
func (s *Service) connect(ctx context.Context) error {
	url := s.cfg.URL
	if url == "" {
		var err error
		if url, err = databaseURL(s.set.Storage); err != nil {
			return err
		}
	}
	private := url == ""
	if private {
		dir, err := filepath.Abs(filepath.Join(s.set.Storage.DataDir, "postgres"))
		if err != nil {
			return fmt.Errorf("data folder: %w", err)
		}
		logTo := s.log.With().Str("part", "postgres").Logger()
		s.serverConfig = cluster.Config{DataDir: dir, Log: lineLogger{logTo}}
		begin := cluster.Use // a command joins the server of a running service
		if s.cfg.Sweep || s.cfg.Work {
			begin = cluster.Start
		}
		srv, err := begin(ctx, s.serverConfig)
		if err != nil {
			return &DatabaseError{Err: err}
		}
		s.server = srv
		s.defers("private PostgreSQL server", func(ctx context.Context) error { return s.server.Stop(ctx) })
		url = srv.URL()
	}
	store, err := db.Open(ctx, db.Config{URL: url, MaxConns: 4 + 2*s.workers()})
	if err != nil {
		return &DatabaseError{Err: err}
	}
	s.store = store
	s.defers("database connections", func(context.Context) error { store.Close(); return nil })
	if private && !s.cfg.ReadOnly {
		from, to, err := store.Migrate(ctx)
		if err != nil {
			return &DatabaseError{Err: fmt.Errorf("bringing the schema up to date: %w", err)}
		}
		if from != to {
			s.log.Info().Int("from", from).Int("to", to).Msg("schema brought up to date")
		}
	}
	if s.cfg.AnySchema {
		return nil
	}
	if err := store.CheckSchema(ctx); err != nil {
		return &DatabaseError{Err: err}
	}
	return nil
}

// databaseURL reads the URL from where the settings say; "" means a private server.
func databaseURL(st settings.Storage) (string, error) {
	if st.DatabaseURLEnv != "" {
		if v := os.Getenv(st.DatabaseURLEnv); v != "" {
			return v, nil
		}
		return "", &settings.Error{File: "settings", Key: "storage.database_url_env", Found: fmt.Sprintf("%s, and that variable is empty", st.DatabaseURLEnv), Expected: "a variable that holds the address of a server; without the key a private server is used"}
	}
	if st.DatabaseURLFile != "" {
		info, err := os.Stat(st.DatabaseURLFile)
		if err != nil {
			return "", fmt.Errorf("settings: storage.database_url_file: %w", err)
		}
		if info.Mode().Perm()&0o077 != 0 {
			return "", &settings.Error{File: "settings", Key: "storage.database_url_file", Found: fmt.Sprintf("%s, which others can read (mode %o)", st.DatabaseURLFile, info.Mode().Perm()), Expected: "a file that only the service can read: chmod 600 it"}
		}
		b, err := os.ReadFile(st.DatabaseURLFile)
		if err != nil {
			return "", fmt.Errorf("settings: storage.database_url_file: %w", err)
		}
		return strings.TrimSpace(string(b)), nil
	}
	return "", nil
}

// A DatabaseError is trouble with the database or its server at start.
type DatabaseError struct{ Err error }

func (e *DatabaseError) Error() string { return "database: " + e.Err.Error() }

// Unwrap returns the cause.
func (e *DatabaseError) Unwrap() error { return e.Err }

// workers is how many sets are computed at once.
func (s *Service) workers() int {
	if n := s.set.Storage.Workers; n > 0 {
		return n
	}
	return max(1, runtime.NumCPU())
}

// Store gives the database, for commands that list.
func (s *Service) Store() *db.Store { return s.store }

// Settings gives the settings in force.
func (s *Service) Settings() *settings.Settings { set, _, _ := s.current(); return set }

// defers registers how to stop something at the moment it starts.
func (s *Service) defers(name string, f func(context.Context) error) {
	s.stops = append(s.stops, stop{name, f})
}

// Close stops what was started, newest first, skipping nothing.
func (s *Service) Close(ctx context.Context) error {
	var err error
	for i := len(s.stops) - 1; i >= 0; i-- {
		if e := s.stops[i].f(ctx); e != nil && !errors.Is(e, context.Canceled) {
			err = errors.Join(err, fmt.Errorf("stopping %s: %w", s.stops[i].name, e))
		}
	}
	s.stops = nil
	return err
}

// lineLogger turns lines written by the server into log events.
type lineLogger struct{ log zerolog.Logger }

func (l lineLogger) Write(p []byte) (int, error) {
	for line := range strings.Lines(string(p)) {
		if line = strings.TrimSpace(line); line != "" {
			l.log.Debug().Msg(line)
		}
	}
	return len(p), nil
}

var _ io.Writer = lineLogger{}
