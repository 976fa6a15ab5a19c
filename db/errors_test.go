package db

import (
	"errors"
	"fmt"
	"net"
	"os"
	"syscall"
	"testing"

	"github.com/jackc/pgx/v5/pgconn"
)

// TestAwayIsAboutTheServer: trouble with files is no trouble with the server.
func TestAwayIsAboutTheServer(t *testing.T) {
	_, missing := os.Open("/nowhere/at/all")
	for name, c := range map[string]struct {
		err  error
		away bool
	}{
		"nothing":          {nil, false},
		"missing file":     {fmt.Errorf("reading: %w", missing), false},
		"no permission":    {&os.PathError{Op: "open", Path: "x", Err: syscall.EACCES}, false},
		"disk of ours":     {&os.PathError{Op: "write", Path: "x", Err: syscall.ENOSPC}, false},
		"refused":          {&net.OpError{Op: "dial", Net: "tcp", Err: os.NewSyscallError("connect", syscall.ECONNREFUSED)}, true},
		"reset":            {fmt.Errorf("query: %w", syscall.ECONNRESET), true},
		"name unknown":     {&net.DNSError{Err: "no such host", Name: "db"}, true},
		"shutdown":         {&pgconn.PgError{Code: "57P01"}, true},
		"unique violation": {&pgconn.PgError{Code: "23505"}, false},
		"hidden password":  {safe(&net.OpError{Op: "dial", Net: "tcp", Err: errors.New("postgres://a:secret@b")}), true},
	} {
		if Away(c.err) != c.away {
			t.Errorf("%s: away %v", name, !c.away)
		}
	}
}
