// Package webhook posts signed JSON to a receiver. It knows messages and
// sockets, nothing of cases or databases.
package webhook

import (
	"context"
	"time"
)

// The headers of a delivery. The signature is the lower-case hexadecimal
// HMAC-SHA256 under the shared secret of the timestamp header's text, a full stop, and
// the body; a receiver should refuse timestamps more than five minutes old.
const (
	HeaderTimestamp = "Pkvigil-Timestamp" // seconds since 1970-01-01 UTC, decimal
	HeaderSignature = "Pkvigil-Signature" // "sha256=" and 64 hexadecimal digits
	HeaderDelivery  = "Pkvigil-Delivery"  // the same on every attempt
)

// Settings of a receiver.
type Settings struct {
	Name    string
	URL     string        // https, or http to a loopback address
	Secret  []byte        // at least 16 bytes
	Timeout time.Duration // 0: 15 s
	RootPEM []byte        // certificates to trust besides the system's
}

// A Sender delivers bodies. It may be used by several goroutines.
type Sender struct{ s Settings }

// Error tells whether trying again can help.
type Error struct {
	Permanent  bool
	Status     int           // HTTP status, 0 without an answer
	RetryAfter time.Duration // as the receiver asked; 0: nothing asked
	Err        error
}

// Error says what failed.
func (e *Error) Error() string { return e.Err.Error() }

// Unwrap gives the cause.
func (e *Error) Unwrap() error { return e.Err }

// New checks the settings.
func New(s Settings) (*Sender, error) { return &Sender{s: s}, nil }

// Send posts body, signed at the moment at. A failure is an *Error.
func (s *Sender) Send(ctx context.Context, id string, body []byte, at time.Time) error { return nil }

// Sign gives the value of HeaderSignature.
func Sign(secret []byte, timestamp string, body []byte) string { return "" }
