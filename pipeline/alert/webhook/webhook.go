// Package webhook posts signed JSON to a receiver. It knows messages and
// sockets, nothing of cases or databases.
package webhook

import (
	"bytes"
	"context"
	"crypto/hmac"
	"crypto/sha256"
	"crypto/tls"
	"crypto/x509"
	"encoding/hex"
	"errors"
	"fmt"
	"io"
	"net"
	"net/http"
	"net/url"
	"strconv"
	"strings"
	"time"
)

// The headers of a delivery. The signature is "sha256=" and the lower-case
// hexadecimal HMAC-SHA256, under the shared secret, of the timestamp header's text,
// a full stop, and the body. A receiver should compare in constant time and refuse
// timestamps more than five minutes old; Verify does both.
const (
	HeaderTimestamp = "Pkvigil-Timestamp" // seconds since 1970-01-01 UTC, decimal
	HeaderSignature = "Pkvigil-Signature"
	HeaderDelivery  = "Pkvigil-Delivery" // the same on every attempt, to recognise repeats
)

// SignaturePrefix stands before the hexadecimal digits.
const SignaturePrefix = "sha256="

// answerLimit is how much of a receiver's answer is read.
const answerLimit = 4 << 10

// Settings of a receiver.
type Settings struct {
	Name    string
	URL     string        // https, or http to a loopback address
	Secret  []byte        // at least 16 bytes
	Timeout time.Duration // 0: 15 s
	RootPEM []byte        // certificates to trust besides the system's
}

// A Sender delivers bodies. It may be used by several goroutines.
type Sender struct {
	s Settings
	c *http.Client
}

// ErrSettings says that a receiver cannot be used as described.
var ErrSettings = errors.New("webhook: settings unusable")

// An Error of a delivery. Permanent means that the receiver understood and will
// never take this body (4xx other than 401, 403, 404, 408, 409, 425, 429); what a person
// can put right, such as a wrong secret, a moved path or a wrong certificate, is not permanent.
type Error struct {
	Permanent  bool
	Status     int           // HTTP status, 0 without an answer
	RetryAfter time.Duration // as the receiver asked; 0: nothing asked
	Err        error
}

// Error says what failed and whether it will be tried again.
func (e *Error) Error() string {
	if e.Permanent {
		return fmt.Sprintf("webhook refused for good: %v", e.Err)
	}
	return fmt.Sprintf("webhook not delivered yet: %v", e.Err)
}

// Unwrap gives the cause.
func (e *Error) Unwrap() error { return e.Err }

// New checks the settings.
func New(s Settings) (*Sender, error) {
	u, err := url.Parse(s.URL)
	switch {
	case err != nil:
		return nil, fmt.Errorf("%w: url of %s cannot be read", ErrSettings, s.Name) // the URL may hold a token: it is not repeated
	case u.Host == "" || (u.Scheme != "https" && u.Scheme != "http"):
		return nil, fmt.Errorf("%w: url of %s must begin with https://", ErrSettings, s.Name)
	case u.Scheme == "http" && !loopback(u.Hostname()):
		return nil, fmt.Errorf("%w: %s uses http to %s; http is possible to this machine only", ErrSettings, s.Name, u.Hostname())
	case len(s.Secret) < 16:
		return nil, fmt.Errorf("%w: the secret of %s has %d bytes, at least 16 are needed", ErrSettings, s.Name, len(s.Secret))
	}
	if s.Timeout == 0 {
		s.Timeout = 15 * time.Second
	}
	conf := &tls.Config{MinVersion: tls.VersionTLS12}
	if len(s.RootPEM) > 0 {
		roots, err := x509.SystemCertPool()
		if err != nil {
			roots = x509.NewCertPool()
		}
		if !roots.AppendCertsFromPEM(s.RootPEM) {
			return nil, fmt.Errorf("%w: no certificate found in the PEM text of %s", ErrSettings, s.Name)
		}
		conf.RootCAs = roots
	}
	t := &http.Transport{
		Proxy: http.ProxyFromEnvironment, TLSClientConfig: conf, ForceAttemptHTTP2: true, DisableKeepAlives: true, MaxResponseHeaderBytes: 64 << 10,
		ResponseHeaderTimeout: s.Timeout, TLSHandshakeTimeout: s.Timeout,
	}
	return &Sender{s: s, c: &http.Client{
		Transport: t, Timeout: s.Timeout,
		CheckRedirect: func(*http.Request, []*http.Request) error { return http.ErrUseLastResponse },
	}}, nil
}

func loopback(host string) bool {
	if host == "localhost" {
		return true
	}
	ip := net.ParseIP(host)
	return ip != nil && ip.IsLoopback()
}

// Send posts body, signed at the moment at; id names the delivery on every
// attempt. A failure is an *Error.
func (s *Sender) Send(ctx context.Context, id string, body []byte, at time.Time) error {
	req, err := http.NewRequestWithContext(ctx, http.MethodPost, s.s.URL, bytes.NewReader(body))
	if err != nil {
		return &Error{Permanent: true, Err: fmt.Errorf("request to %s: %w", s.s.Name, hideURL(err))}
	}
	stamp := strconv.FormatInt(at.Unix(), 10)
	req.Header.Set("Content-Type", "application/json")
	req.Header.Set("User-Agent", "pkvigil")
	req.Header.Set(HeaderTimestamp, stamp)
	req.Header.Set(HeaderSignature, Sign(s.s.Secret, stamp, body))
	req.Header.Set(HeaderDelivery, token(id))
	res, err := s.c.Do(req)
	if err != nil {
		return &Error{Err: fmt.Errorf("%s: %w", s.s.Name, hideURL(err))}
	}
	defer res.Body.Close()
	answer, _ := io.ReadAll(io.LimitReader(res.Body, answerLimit)) // a broken answer does not unsay the status
	if res.StatusCode >= 200 && res.StatusCode < 300 {
		return nil
	}
	return &Error{
		Permanent: permanent(res.StatusCode), Status: res.StatusCode, RetryAfter: retryAfter(res.Header.Get("Retry-After"), at),
		Err: fmt.Errorf("%s answered %d: %s", s.s.Name, res.StatusCode, excerpt(answer)),
	}
}

// hideURL takes the address out of an error: it may hold a token.
func hideURL(err error) error {
	if e, ok := errors.AsType[*url.Error](err); ok {
		return e.Err
	}
	return err
}

func permanent(status int) bool {
	switch status {
	case http.StatusUnauthorized, http.StatusForbidden, http.StatusNotFound, http.StatusRequestTimeout,
		http.StatusConflict, http.StatusTooEarly, http.StatusTooManyRequests:
		return false
	}
	return status >= 400 && status < 500
}

// retryAfter reads seconds or a date; at most a day is believed.
func retryAfter(s string, at time.Time) time.Duration {
	var d time.Duration
	if n, err := strconv.Atoi(strings.TrimSpace(s)); err == nil {
		d = time.Duration(n) * time.Second
	} else if t, err := http.ParseTime(s); err == nil {
		d = t.Sub(at)
	}
	return max(0, min(d, 24*time.Hour))
}

// excerpt shows the beginning of an answer on one line.
func excerpt(b []byte) string {
	s := strings.Map(func(r rune) rune {
		if r < ' ' || r == 0x7f {
			return ' '
		}
		return r
	}, strings.ToValidUTF8(string(b), "?"))
	if r := []rune(s); len(r) > 200 {
		s = string(r[:200]) + "…"
	}
	return strings.TrimSpace(s)
}

// token keeps what may stand in a header.
func token(s string) string {
	return strings.Map(func(r rune) rune {
		if r > ' ' && r < 0x7f {
			return r
		}
		return '-'
	}, s)
}

// Sign gives the value of HeaderSignature.
func Sign(secret []byte, timestamp string, body []byte) string {
	m := hmac.New(sha256.New, secret)
	m.Write([]byte(timestamp))
	m.Write([]byte{'.'})
	m.Write(body)
	return SignaturePrefix + hex.EncodeToString(m.Sum(nil))
}

// ErrSignature says that a delivery is not ours or is too old.
var ErrSignature = errors.New("webhook: signature or timestamp wrong")

// Verify is for receivers: it checks the two header values against the body, at the moment now.
func Verify(secret []byte, timestamp, signature string, body []byte, now time.Time) error {
	n, err := strconv.ParseInt(timestamp, 10, 64)
	if err != nil {
		return fmt.Errorf("%w: timestamp %q", ErrSignature, timestamp)
	}
	if d := now.Sub(time.Unix(n, 0)); d > 5*time.Minute || d < -5*time.Minute {
		return fmt.Errorf("%w: sent %v ago", ErrSignature, d)
	}
	if !hmac.Equal([]byte(signature), []byte(Sign(secret, timestamp, body))) {
		return ErrSignature
	}
	return nil
}
