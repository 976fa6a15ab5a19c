package mail

import (
	"context"
	"errors"
	"io"
	"mime"
	"mime/multipart"
	netmail "net/mail"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

func letter() Letter {
	return Letter{
		To: "Night shift <night@quillmere.example>", Subject: "U1: pH readings wrong by +0.04 at pH 4.7; 6 results touched",
		Text: "what happened\n.\nafter a lonely full stop\n", HTML: "<p>what happened</p>", ID: "case-7-opened", Date: time.Date(2026, 3, 14, 6, 30, 0, 0, time.UTC),
	}
}

func sender(t *testing.T, r *relay, change func(*Settings)) *Sender {
	t.Helper()
	host, port := r.start(t)
	s := Settings{Host: host, Port: port, From: "pkvigil <pkvigil@quillmere.example>", Timeout: 5 * time.Second, RootPEM: r.pem}
	if change != nil {
		change(&s)
	}
	out, err := New(s)
	if err != nil {
		t.Fatal(err)
	}
	return out
}

func TestDelivery(t *testing.T) {
	for name, c := range map[string]struct {
		relay  *relay
		change func(*Settings)
		secure bool
	}{
		"starttls":           {&relay{startTLS: true}, nil, true},
		"password":           {&relay{startTLS: true, auth: "lab\x00secret"}, func(s *Settings) { s.User, s.Password = "lab", "secret" }, true},
		"implicit":           {&relay{implicit: true}, func(s *Settings) { s.TLS = Implicit }, true},
		"implicit, password": {&relay{implicit: true, auth: "lab\x00secret"}, func(s *Settings) { s.TLS, s.User, s.Password = Implicit, "lab", "secret" }, true},
		"plain":              {&relay{}, func(s *Settings) { s.TLS, s.RootPEM = Off, nil }, false},
		"localhost":          {&relay{startTLS: true}, func(s *Settings) { s.Host = "localhost" }, true},
	} {
		t.Run(name, func(t *testing.T) {
			s := sender(t, c.relay, c.change)
			if err := s.Send(t.Context(), letter()); err != nil {
				t.Fatal(err)
			}
			got := c.relay.got()
			if len(got) != 1 || c.relay.secure[0] != c.secure {
				t.Fatalf("%d letters, secure %v", len(got), c.relay.secure)
			}
			m, err := netmail.ReadMessage(strings.NewReader(got[0]))
			if err != nil {
				t.Fatal(err)
			}
			subject, err := new(mime.WordDecoder).DecodeHeader(m.Header.Get("Subject"))
			if err != nil || subject != letter().Subject {
				t.Errorf("subject %q, %v", subject, err)
			}
			if id := m.Header.Get("Message-ID"); id != "<case-7-opened@quillmere.example>" {
				t.Errorf("message id %q", id)
			}
			if d, err := m.Header.Date(); err != nil || !d.Equal(letter().Date) {
				t.Errorf("date %v, %v", d, err)
			}
			parts := alternatives(t, m)
			if parts["text/plain"] != letter().Text || parts["text/html"] != letter().HTML {
				t.Errorf("parts %q", parts)
			}
			if e := c.relay.envelope; len(e) != 1 || !strings.Contains(e[0], "<pkvigil@quillmere.example>") || !strings.Contains(e[0], "<night@quillmere.example>") {
				t.Errorf("envelope %q", e)
			}
		})
	}
}

func alternatives(t *testing.T, m *netmail.Message) map[string]string {
	t.Helper()
	kind, p, err := mime.ParseMediaType(m.Header.Get("Content-Type"))
	if err != nil || kind != "multipart/alternative" {
		t.Fatalf("content type %q, %v", kind, err)
	}
	out := map[string]string{}
	r := multipart.NewReader(m.Body, p["boundary"])
	for {
		part, err := r.NextPart() // decodes quoted-printable
		if errors.Is(err, io.EOF) {
			return out
		}
		if err != nil {
			t.Fatal(err)
		}
		b, err := io.ReadAll(part)
		if err != nil {
			t.Fatal(err)
		}
		kind, _, _ := mime.ParseMediaType(part.Header.Get("Content-Type"))
		out[kind] = strings.ReplaceAll(string(b), "\r\n", "\n")
	}
}

// A caller that gives up is not kept waiting by a relay that says nothing.
func TestCancelled(t *testing.T) {
	for _, mute := range []string{"EHLO", "MAIL", "DATA", "QUIT"} {
		s := sender(t, &relay{startTLS: true, mute: mute}, func(s *Settings) { s.Timeout = time.Minute })
		ctx, cancel := context.WithTimeout(t.Context(), 200*time.Millisecond)
		begin := time.Now()
		err := s.Send(ctx, letter())
		cancel()
		if took := time.Since(begin); took > 5*time.Second {
			t.Errorf("silent at %s: %v", mute, took)
		}
		if mute == "QUIT" { // accepted by then
			if err != nil {
				t.Errorf("silent at QUIT: %v", err)
			}
		} else if !errors.Is(err, context.DeadlineExceeded) {
			t.Errorf("silent at %s: %v", mute, err)
		}
	}
}

// What a relay says decides whether the letter is tried again.
func TestRetryOrNot(t *testing.T) {
	for name, c := range map[string]struct {
		relay     *relay
		change    func(*Settings)
		permanent bool
		code      int
	}{
		"no such person":     {relay: &relay{startTLS: true, say: map[string]string{"RCPT": "550 5.1.1 no such person"}}, permanent: true, code: 550},
		"mailbox full":       {relay: &relay{startTLS: true, say: map[string]string{"RCPT": "452 4.2.2 mailbox full"}}, code: 452},
		"sender refused":     {relay: &relay{startTLS: true, say: map[string]string{"MAIL": "553 5.1.8 not you"}}, permanent: true, code: 553},
		"greylisted":         {relay: &relay{startTLS: true, say: map[string]string{"RCPT": "450 4.7.1 come back"}}, code: 450},
		"too big":            {relay: &relay{startTLS: true, say: map[string]string{"END": "552 5.3.4 too big"}}, permanent: true, code: 552},
		"disk of relay full": {relay: &relay{startTLS: true, say: map[string]string{"END": "451 4.3.0 try later"}}, code: 451},
		"busy":               {relay: &relay{say: map[string]string{"GREET": "421 busy"}}, code: 421},
		"closed":             {relay: &relay{say: map[string]string{"GREET": "554 no"}}, code: 554},
		"no starttls":        {relay: &relay{}},
		"wrong password":     {relay: &relay{startTLS: true, auth: "lab\x00right"}, change: func(s *Settings) { s.User, s.Password = "lab", "wrong" }, code: 535},
		"unknown authority":  {relay: &relay{startTLS: true}, change: func(s *Settings) { s.RootPEM = nil }},
		"silent":             {relay: &relay{startTLS: true, mute: "RCPT"}, change: func(s *Settings) { s.Timeout = 300 * time.Millisecond }},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			s := sender(t, c.relay, c.change)
			err := s.Send(t.Context(), letter())
			e, ok := errors.AsType[*Error](err)
			if !ok {
				t.Fatalf("%v", err)
			}
			if e.Permanent != c.permanent || e.Code != c.code {
				t.Errorf("permanent %v, code %d: %v", e.Permanent, e.Code, err)
			}
			if n := len(c.relay.got()); n != 0 {
				t.Errorf("%d letters arrived", n)
			}
			if strings.Contains(err.Error(), "wrong\x00") || strings.Contains(err.Error(), "secret") {
				t.Errorf("the error tells the password: %v", err)
			}
		})
	}
}

func TestRelayAway(t *testing.T) {
	r := &relay{}
	s := sender(t, r, nil)
	_ = r.listener.Close()
	e, ok := errors.AsType[*Error](s.Send(t.Context(), letter()))
	if !ok || e.Permanent {
		t.Fatalf("%v", e)
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	if e, ok := errors.AsType[*Error](s.Send(ctx, letter())); !ok || e.Permanent || !errors.Is(e, context.Canceled) {
		t.Fatalf("%v", e)
	}
}

func TestSettings(t *testing.T) {
	ok := Settings{Host: "relay.example", From: "a@b.example"}
	for name, change := range map[string]func(*Settings){
		"no host":        func(s *Settings) { s.Host = "" },
		"off far away":   func(s *Settings) { s.TLS = Off },
		"unknown":        func(s *Settings) { s.TLS = "ssl" },
		"no from":        func(s *Settings) { s.From = "" },
		"from with line": func(s *Settings) { s.From = "a@b.example\r\nBcc: x@y.example" },
		"no certificate": func(s *Settings) { s.RootPEM = []byte("nothing") },
		"port":           func(s *Settings) { s.Port = 70000 },
	} {
		s := ok
		change(&s)
		if _, err := New(s); !errors.Is(err, ErrSettings) {
			t.Errorf("%s: %v", name, err)
		}
	}
	for tls, port := range map[string]int{"": 587, Implicit: 465} {
		s := ok
		s.TLS = tls
		if out, err := New(s); err != nil || out.s.Port != port {
			t.Errorf("tls %q: port %d, %v", tls, out.s.Port, err)
		}
	}
}

// Whatever the names in a letter are, it has the headers we wrote and no other.
func TestNoHeaderInjection(t *testing.T) {
	s, err := New(Settings{Host: "127.0.0.1", From: "a@b.example"})
	if err != nil {
		t.Fatal(err)
	}
	text := rapid.OneOf(rapid.String(), rapid.StringMatching(`[a-z \r\n:]{0,60}`), rapid.Just("x\r\nBcc: all@else.example\r\n\r\nbody"))
	rapid.Check(t, func(t *rapid.T) {
		l := Letter{To: "c@d.example", Subject: text.Draw(t, "subject"), Text: text.Draw(t, "text"), ID: text.Draw(t, "id")}
		m, err := s.message(l)
		if err != nil {
			t.Fatal(err)
		}
		var b strings.Builder
		if _, err := m.WriteTo(&b); err != nil {
			t.Fatal(err)
		}
		got, err := netmail.ReadMessage(strings.NewReader(b.String()))
		if err != nil {
			t.Fatal(err)
		}
		for h := range got.Header {
			switch h {
			case "Subject", "From", "To", "Date", "Message-Id", "Mime-Version", "Content-Type", "Content-Transfer-Encoding", "Auto-Submitted":
			default:
				t.Fatalf("header %q from subject %q, id %q", h, l.Subject, l.ID)
			}
		}
	})
	for _, to := range []string{"c@d.example\r\nBcc: x@y.example", "c@d.example, x@y.example", "", "a b"} {
		e, ok := errors.AsType[*Error](s.Send(t.Context(), Letter{To: to}))
		if !ok || !e.Permanent {
			t.Errorf("address %q: %v", to, e)
		}
	}
}
