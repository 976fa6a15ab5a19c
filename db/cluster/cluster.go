// Package cluster runs a private PostgreSQL server: initialised once below a
// data folder, reached by a unix socket that only its own account (and root)
// can enter, started with the program, restarted when it dies, stopped with
// the program.
//
// It uses the server binaries of the distribution and never deletes or
// converts data of another major version. Layout of the data folder: pg (the
// server's files), run (the socket, when the path is short enough), log, and a
// lock file that says which process owns the server.
package cluster

import (
	"context"
	"errors"
	"fmt"
	"io"
	"net/url"
	"path/filepath"
	"sync"
	"time"
)

// Names inside the server.
const (
	superuser  = "pkvigil"
	database   = "pkvigil"
	socketPort = "5432" // part of the socket's name unless Listen names another
)

// ErrInUse says that another process owns the server of this data folder.
// Use connects to it instead.
var ErrInUse = errors.New("another process runs the server of this data folder")

// Config says where the server lives.
type Config struct {
	DataDir string    // made when absent; absolute or relative
	RunDir  string    // directory of the socket; "": a short one is chosen
	BinDir  string    // directory of initdb and postgres; "": found
	Account string    // account to run as when started by root; "": postgres, else pkvigil (made), else nobody
	Listen  string    // "" (default): no TCP; "127.0.0.1:5433": readers with a password may connect there
	Log     io.Writer // what there is to say about the server, line by line; nil: nothing

	// Restarted is called after the server died and was started again, with
	// the reason and how long it was away. nil: not told.
	Restarted func(why string, away time.Duration)

	// Settings are extra server settings, name to value; they win.
	Settings map[string]string
}

// A Server is a private server that this process started, or that another
// process owns and this one only uses.
type Server struct {
	cfg   Config
	place place

	mu      sync.Mutex
	pid     int
	stopped bool

	owned bool
	quit  chan struct{} // closed by Stop
	done  chan struct{} // closed when the supervisor has ended
	free  func()        // gives the lock back
}

// place is where things lie and who owns them.
type place struct {
	data    string // absolute
	pg      string
	run     string
	port    string // also part of the socket's name
	logFile string
	bin     binaries
	account string // name of the account the server runs as
	uid     int
	gid     int
	asRoot  bool // started by root: change to uid and gid
}

// URL is the connection string of the database; it holds no secret.
func (s *Server) URL() string { return socketURL(s.place.run, s.place.port) }

// SocketDir is the directory of the unix socket.
func (s *Server) SocketDir() string { return s.place.run }

// LogFile is where the server writes its own log.
func (s *Server) LogFile() string { return s.place.logFile }

// Owned says whether this process started the server and will stop it.
func (s *Server) Owned() bool { return s.owned }

// PID is the process of the server, 0 while it is down.
func (s *Server) PID() int {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.pid
}

// A State is what can be said of a data folder without starting anything.
type State struct {
	Initialised bool
	Version     string // major version that wrote the data, "15"
	Running     bool
	PID         int
	Owner       int // process that owns the server, 0: none
	SocketDir   string
	URL         string // how to reach it when running

	port string
}

// Use gives the running server of the data folder when some process owns one,
// else starts it. Stop ends only what this process started.
func Use(ctx context.Context, cfg Config) (*Server, error) {
	st, err := Status(cfg.DataDir)
	if err != nil {
		return nil, err
	}
	if st.Running && st.Owner != 0 {
		return &Server{cfg: cfg, place: place{run: st.SocketDir, port: st.port, logFile: logFileOf(cfg.DataDir)}, pid: st.PID}, nil
	}
	return Start(ctx, cfg)
}

// socketURL names the database behind a socket directory.
func socketURL(dir, port string) string {
	q := url.Values{"host": {dir}, "port": {port}}
	return "postgres://" + superuser + "@/" + database + "?" + q.Encode()
}

// logFileOf is where the server of a data folder writes its log.
func logFileOf(dataDir string) string {
	return filepath.Join(dataDir, "log", "postgresql.log")
}

// say writes one line about the server.
func (c Config) say(format string, args ...any) {
	if c.Log != nil {
		fmt.Fprintf(c.Log, format+"\n", args...)
	}
}
