// Package cluster runs a private PostgreSQL server: initialised once in a data
// directory, reached by a unix socket only its own account can enter, started
// with the program, restarted when it dies, stopped with the program.
//
// It uses the server binaries of the distribution and never deletes or
// converts data of another major version.
package cluster

import (
	"context"
	"errors"
	"io"
	"time"
)

// Config says where the server lives.
type Config struct {
	DataDir string    // made when absent; absolute or relative
	RunDir  string    // directory of the socket; "": a short one is chosen
	BinDir  string    // directory of initdb and postgres; "": found
	Account string    // account to run as when started by root; "": postgres, else pkvigil (made), else nobody
	Log     io.Writer // what the program has to say about the server, line by line; nil: nothing

	// Restarted is called after the server died and was started again, with
	// the reason and how long it was away. nil: not told.
	Restarted func(why string, away time.Duration)

	// Settings are extra server settings, name to value, for tests and small machines.
	Settings map[string]string
}

// A Server is a running private server.
type Server struct{}

// Start finds the binaries, initialises the data directory when it is new,
// takes over what an earlier crash left, and answers once the server answers.
func Start(ctx context.Context, cfg Config) (*Server, error) { return nil, errors.ErrUnsupported }

// URL is the connection string of database pkvigil; it holds no secret.
func (s *Server) URL() string { return "" }

// SocketDir is the directory of the unix socket.
func (s *Server) SocketDir() string { return "" }

// PID is the process of the postmaster, 0 while it is down.
func (s *Server) PID() int { return 0 }

// Stop shuts the server down and waits for it.
func (s *Server) Stop(ctx context.Context) error { return errors.ErrUnsupported }

// A State is what can be said of a data directory without starting anything.
type State struct {
	Initialised bool
	Version     string // major version of the data, "15"
	Running     bool
	PID         int
	SocketDir   string
	URL         string // how to reach it when running
}

// Status looks at a data directory.
func Status(dataDir string) (State, error) { return State{}, errors.ErrUnsupported }
