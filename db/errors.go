package db

import (
	"context"
	"errors"
	"io"
	"net"
	"regexp"
	"strings"
	"syscall"

	"github.com/jackc/pgx/v5/pgconn"
)

// ErrNotFound says that no such row exists.
var ErrNotFound = errors.New("not found")

// Away says whether err is trouble with the server and not with the work: a
// lost or refused connection, a shutdown, too many connections, a full disk, a
// deadlock. The same work may be tried again later, unchanged.
func Away(err error) bool {
	if err == nil || errors.Is(err, context.Canceled) {
		return false
	}
	if pg, ok := errors.AsType[*pgconn.PgError](err); ok {
		return awayCode(pg.Code)
	}
	if _, ok := errors.AsType[*pgconn.ConnectError](err); ok {
		return true
	}
	if e, ok := errors.AsType[net.Error](err); ok {
		// The bare number of a system call is a net.Error too: a file that is missing is no lost server.
		number, bare := e.(syscall.Errno)
		return !bare || number == syscall.ECONNREFUSED || number == syscall.ECONNRESET || number == syscall.EPIPE
	}
	if errors.Is(err, io.EOF) || errors.Is(err, io.ErrUnexpectedEOF) || errors.Is(err, net.ErrClosed) ||
		errors.Is(err, context.DeadlineExceeded) {
		return true
	}
	return pgconn.SafeToRetry(err) || strings.Contains(err.Error(), "conn closed")
}

// awayCode sorts SQLSTATE codes: classes 08 (connection), 53 (resources: disk,
// memory, connections), 57P (operator intervention), 58 (system error outside
// the server), 40 (serialisation, deadlock) and 25006 (read-only standby) pass.
func awayCode(code string) bool {
	switch {
	case strings.HasPrefix(code, "08"), strings.HasPrefix(code, "53"), strings.HasPrefix(code, "58"):
		return true
	case strings.HasPrefix(code, "57P"), code == "40001", code == "40P01", code == "25006", code == "55P03":
		return true
	}
	return false
}

// Full says whether err means that the server's disk is full.
func Full(err error) bool {
	pg, ok := errors.AsType[*pgconn.PgError](err)
	return ok && pg.Code == "53100"
}

// safe removes what looks like a password from an error's text and keeps its
// chain only when the text was clean.
func safe(err error) error {
	if err == nil {
		return nil
	}
	text := err.Error()
	clean := Redact(text)
	if clean == text {
		return err
	}
	return &redacted{text: clean, away: Away(err)}
}

// A redacted error has lost its chain with its secret.
type redacted struct {
	text string
	away bool
}

func (r *redacted) Error() string { return r.text }

// Timeout makes a redacted connection error count as one (net.Error).
func (r *redacted) Timeout() bool { return r.away }

// Temporary completes net.Error.
func (r *redacted) Temporary() bool { return r.away }

// Redact blanks passwords in a URL or key=value string.
func Redact(text string) string {
	text = regexp.MustCompile(`(://[^:/@\s]*):[^@\s]*@`).ReplaceAllString(text, "$1:***@")
	return regexp.MustCompile(`(?i)(password\s*=\s*)('[^']*'|[^\s&]+)`).ReplaceAllString(text, "$1***")
}
