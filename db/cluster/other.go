//go:build !linux

package cluster

import (
	"context"
	"errors"
)

var errLinux = errors.New("the private server needs Linux; name the URL of a running PostgreSQL server in the settings")

// Start needs Linux.
func Start(ctx context.Context, cfg Config) (*Server, error) { return nil, errLinux }

// Stop has nothing to stop.
func (s *Server) Stop(ctx context.Context) error { return nil }

// Status needs Linux.
func Status(dataDir string) (State, error) { return State{}, errLinux }
