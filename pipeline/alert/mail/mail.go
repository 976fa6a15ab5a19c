// Package mail hands messages to a mail relay. It knows messages and sockets,
// nothing of cases or databases.
package mail

import (
	"context"
	"crypto/tls"
	"crypto/x509"
	"errors"
	"fmt"
	"net"
	netmail "net/mail"
	"net/textproto"
	"strings"
	"sync"
	"time"

	gomail "github.com/wneessen/go-mail"
	"github.com/wneessen/go-mail/smtp"
)

// The ways to protect the connection.
const (
	StartTLS = "starttls" // default; a relay that does not offer it is refused
	Implicit = "implicit"
	Off      = "off" // loopback only
)

// Settings of a relay.
type Settings struct {
	Host     string
	Port     int    // 0: 587 with STARTTLS, 465 with implicit TLS, 25 when off
	From     string // address, with or without a name
	User     string // "": no authentication
	Password string
	TLS      string        // StartTLS when empty
	Timeout  time.Duration // for the whole delivery; 0: 30 s
	RootPEM  []byte        // certificates to trust besides the system's
	Helo     string        // name we greet with; "": localhost
}

// A Letter is one mail to one person, so that a bad address costs one letter.
type Letter struct {
	To      string
	Subject string
	Text    string
	HTML    string // "": text only
	// ID makes the Message-ID, the same on every attempt, so that a letter sent twice
	// after a crash can be recognised; "" for a random one.
	ID   string
	Date time.Time // zero: the moment of sending
}

// A Sender delivers letters. It may be used by several goroutines.
type Sender struct {
	s    Settings
	from string
	tls  *tls.Config
}

// ErrSettings says that a relay cannot be used as described.
var ErrSettings = errors.New("mail: settings unusable")

// An Error of a delivery. Permanent means that this letter can never be
// delivered as it is (the relay refuses the address or the letter). A relay that is
// away, busy, refuses the password or shows a wrong certificate is not permanent:
// a person can put it right, and the letter is still wanted then.
type Error struct {
	Permanent bool
	Code      int // SMTP reply, 0 without one
	Err       error
}

// Error says what failed and whether it will be tried again.
func (e *Error) Error() string {
	if e.Permanent {
		return fmt.Sprintf("mail refused for good: %v", e.Err)
	}
	return fmt.Sprintf("mail not delivered yet: %v", e.Err)
}

// Unwrap gives the cause.
func (e *Error) Unwrap() error { return e.Err }

// New checks the settings.
func New(s Settings) (*Sender, error) {
	if s.TLS == "" {
		s.TLS = StartTLS
	}
	if s.Timeout == 0 {
		s.Timeout = 30 * time.Second
	}
	if s.Helo == "" {
		s.Helo = "localhost"
	}
	switch {
	case s.Host == "":
		return nil, fmt.Errorf("%w: no host", ErrSettings)
	case s.TLS == Off && !loopback(s.Host):
		return nil, fmt.Errorf("%w: tls = %q is possible for a relay on this machine only, host is %q; use %q", ErrSettings, Off, s.Host, StartTLS)
	case s.TLS != Off && s.TLS != StartTLS && s.TLS != Implicit:
		return nil, fmt.Errorf("%w: tls = %q, one of %q, %q, %q expected", ErrSettings, s.TLS, StartTLS, Implicit, Off)
	case s.Port < 0 || s.Port > 65535:
		return nil, fmt.Errorf("%w: port %d", ErrSettings, s.Port)
	}
	if s.Port == 0 {
		s.Port = map[string]int{StartTLS: 587, Implicit: 465, Off: 25}[s.TLS]
	}
	from, err := address(s.From)
	if err != nil {
		return nil, fmt.Errorf("%w: from: %v", ErrSettings, err)
	}
	out := &Sender{s: s, from: from}
	if s.TLS != Off {
		roots, err := pool(s.RootPEM)
		if err != nil {
			return nil, err
		}
		out.tls = &tls.Config{ServerName: s.Host, MinVersion: tls.VersionTLS12, RootCAs: roots}
	}
	return out, nil
}

// pool is the system's certificates with those in pem; nil stands for the system's alone.
func pool(pem []byte) (*x509.CertPool, error) {
	if len(pem) == 0 {
		return nil, nil
	}
	roots, err := x509.SystemCertPool()
	if err != nil {
		roots = x509.NewCertPool()
	}
	if !roots.AppendCertsFromPEM(pem) {
		return nil, fmt.Errorf("%w: no certificate found in the PEM text", ErrSettings)
	}
	return roots, nil
}

func loopback(host string) bool {
	if host == "localhost" {
		return true
	}
	ip := net.ParseIP(host)
	return ip != nil && ip.IsLoopback()
}

// address checks one address and writes it in the form a header takes.
func address(s string) (string, error) {
	if strings.ContainsAny(s, "\r\n\x00") {
		return "", fmt.Errorf("address %q contains a line break", s)
	}
	a, err := netmail.ParseAddress(s)
	if err != nil {
		return "", fmt.Errorf("address %q: %w", s, err)
	}
	return a.String(), nil
}

// Send delivers one letter. A failure is an *Error.
func (s *Sender) Send(ctx context.Context, l Letter) error {
	ctx, cancel := context.WithTimeout(ctx, s.s.Timeout)
	defer cancel()
	msg, err := s.message(l)
	if err != nil {
		return &Error{Permanent: true, Err: err}
	}
	line := &line{tls: s.tls, implicit: s.s.TLS == Implicit}
	stop := context.AfterFunc(ctx, line.cut)
	defer stop()
	c, err := gomail.NewClient(s.s.Host, append(s.options(), gomail.WithDialContextFunc(line.dial))...)
	if err != nil {
		return &Error{Err: fmt.Errorf("relay %s: %w", s.s.Host, err)}
	}
	conn, err := c.DialToSMTPClientWithContext(ctx)
	if err != nil {
		if ctx.Err() != nil {
			err = errors.Join(ctx.Err(), err)
		}
		return &Error{Code: code(err), Err: fmt.Errorf("relay %s:%d: %w", s.s.Host, s.s.Port, err)}
	}
	err = c.SendWithSMTPClient(conn, msg)
	quit(c, conn)
	if err == nil {
		return nil
	}
	if ctx.Err() != nil {
		err = errors.Join(ctx.Err(), err)
	}
	return &Error{Permanent: refused(err), Code: code(err), Err: fmt.Errorf("relay %s:%d: %w", s.s.Host, s.s.Port, err)}
}

// A line is the connection of one delivery. The client holds a lock while it
// waits for the relay, so only closing the connection itself ends a wait.
type line struct {
	tls      *tls.Config
	implicit bool
	mu       sync.Mutex
	conn     net.Conn
	over     bool
}

func (l *line) dial(ctx context.Context, network, addr string) (net.Conn, error) {
	c, err := new(net.Dialer).DialContext(ctx, network, addr)
	if err != nil {
		return nil, err
	}
	l.mu.Lock()
	l.conn = c
	over := l.over
	l.mu.Unlock()
	if over {
		_ = c.Close()
		return nil, context.Canceled
	}
	if !l.implicit {
		return c, nil
	}
	t := tls.Client(c, l.tls)
	if err := t.HandshakeContext(ctx); err != nil {
		_ = c.Close()
		return nil, fmt.Errorf("tls: %w", err)
	}
	return t, nil
}

func (l *line) cut() {
	l.mu.Lock()
	defer l.mu.Unlock()
	l.over = true
	if l.conn != nil {
		_ = l.conn.Close()
	}
}

// quit ends the session politely; the letter has already been accepted or refused, so its failure changes nothing.
func quit(c *gomail.Client, conn *smtp.Client) {
	if err := c.CloseWithSMTPClient(conn); err != nil {
		_ = conn.Close()
	}
}

func (s *Sender) options() []gomail.Option {
	o := []gomail.Option{
		gomail.WithPort(s.s.Port), gomail.WithTimeout(s.s.Timeout), gomail.WithHELO(s.s.Helo), gomail.WithoutNoop(),
	}
	switch s.s.TLS {
	case Implicit:
		o = append(o, gomail.WithSSL())
	case Off:
		o = append(o, gomail.WithTLSPolicy(gomail.NoTLS))
	default:
		o = append(o, gomail.WithTLSPolicy(gomail.TLSMandatory), gomail.WithTLSConfig(s.tls))
	}
	if s.s.User != "" {
		o = append(o, gomail.WithOpportunisticSMTPAuth(gomail.SMTPAuthSCRAMSHA256, gomail.SMTPAuthPlain, gomail.SMTPAuthLogin), gomail.WithUsername(s.s.User), gomail.WithPassword(s.s.Password))
	}
	return o
}

// message builds the letter; nothing in it can add a header.
func (s *Sender) message(l Letter) (*gomail.Msg, error) {
	m := gomail.NewMsg(gomail.WithNoDefaultUserAgent())
	to, err := address(l.To)
	if err != nil {
		return nil, err
	}
	if err := m.From(s.from); err != nil {
		return nil, fmt.Errorf("from: %w", err)
	}
	if err := m.To(to); err != nil {
		return nil, fmt.Errorf("to: %w", err)
	}
	m.Subject(oneLine(l.Subject))
	if l.ID != "" {
		m.SetMessageIDWithValue(identifier(l.ID) + "@" + s.domain())
	} else {
		m.SetMessageID()
	}
	if l.Date.IsZero() {
		m.SetDate()
	} else {
		m.SetDateWithValue(l.Date)
	}
	m.SetGenHeader("Auto-Submitted", "auto-generated")
	m.SetBodyString(gomail.TypeTextPlain, l.Text)
	if l.HTML != "" {
		m.AddAlternativeString(gomail.TypeTextHTML, l.HTML)
	}
	return m, nil
}

// oneLine turns every control character into a space.
func oneLine(s string) string {
	return strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f || r == 0x85 || r == 0x2028 || r == 0x2029 {
			return ' '
		}
		return r
	}, s)
}

// identifier keeps what may stand on the left of a Message-ID.
func identifier(s string) string {
	return strings.Map(func(r rune) rune {
		switch {
		case r >= 'a' && r <= 'z', r >= 'A' && r <= 'Z', r >= '0' && r <= '9', r == '.', r == '-', r == '_':
			return r
		}
		return '-'
	}, s)
}

func (s *Sender) domain() string {
	a, err := netmail.ParseAddress(s.from)
	if err != nil {
		return "localhost"
	}
	return a.Address[strings.LastIndexByte(a.Address, '@')+1:]
}

// refused reports whether the relay said that it will never take this letter.
func refused(err error) bool {
	n := code(err)
	if n == 530 || n == 534 || n == 535 || n == 538 { // about us, not about the letter
		return false
	}
	return n >= 500 && n < 600
}

// code finds the SMTP reply in an error, 0 if there is none.
func code(err error) int {
	if e, ok := errors.AsType[*gomail.SendError](err); ok && e.ErrorCode() != 0 {
		return e.ErrorCode()
	}
	if e, ok := errors.AsType[*textproto.Error](err); ok {
		return e.Code
	}
	return 0
}
