package webhook

import (
	"context"
	"encoding/pem"
	"errors"
	"io"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"
	"time"
)

func key() []byte { return []byte("a shared secret of enough bytes") }

func when() time.Time { return time.Date(2026, 3, 14, 6, 30, 0, 0, time.UTC) }

func rootOf(s *httptest.Server) []byte {
	return pem.EncodeToMemory(&pem.Block{Type: "CERTIFICATE", Bytes: s.Certificate().Raw})
}

func TestDeliverySigned(t *testing.T) {
	body := []byte(`{"version":1,"subject":"U1"}`)
	calls := 0
	s := httptest.NewTLSServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		calls++
		got, err := io.ReadAll(r.Body)
		if err != nil || string(got) != string(body) {
			t.Errorf("body %q, %v", got, err)
		}
		if err := Verify(key(), r.Header.Get(HeaderTimestamp), r.Header.Get(HeaderSignature), got, when().Add(time.Minute)); err != nil {
			t.Error(err)
		}
		if r.Header.Get(HeaderDelivery) != "case-7--Bcc" || r.Header.Get("Content-Type") != "application/json" || r.Method != http.MethodPost {
			t.Errorf("headers %v", r.Header)
		}
		w.WriteHeader(http.StatusNoContent)
	}))
	defer s.Close()
	out, err := New(Settings{Name: "board", URL: s.URL, Secret: key(), RootPEM: rootOf(s)})
	if err != nil {
		t.Fatal(err)
	}
	if err := out.Send(t.Context(), "case-7\r\nBcc", body, when()); err != nil {
		t.Fatal(err)
	}
	if calls != 1 {
		t.Errorf("%d calls", calls)
	}
}

// The digest was made with another program.
func TestSignatureKnown(t *testing.T) {
	// openssl dgst -sha256 -hmac "a shared secret of enough bytes" over `1773469800.{"version":1}`
	const want = "ba0699929dad337c6e8734394217eac90c759e03fea88461c993a4baa2a998f3"
	if got := Sign(key(), "1773469800", []byte(`{"version":1}`)); got != SignaturePrefix+want {
		t.Errorf("%s", got)
	}
}

func TestVerifyRefuses(t *testing.T) {
	stamp, body := "1773469800", []byte("x")
	good := Sign(key(), stamp, body)
	at := time.Unix(1773469800, 0)
	if err := Verify(key(), stamp, good, body, at); err != nil {
		t.Fatal(err)
	}
	for name, err := range map[string]error{
		"old":       Verify(key(), stamp, good, body, at.Add(6*time.Minute)),
		"future":    Verify(key(), stamp, good, body, at.Add(-6*time.Minute)),
		"body":      Verify(key(), stamp, good, []byte("y"), at),
		"timestamp": Verify(key(), "1773469801", good, body, at),
		"text":      Verify(key(), "now", good, body, at),
		"key":       Verify([]byte("another secret of enough bytes!"), stamp, good, body, at),
		"empty":     Verify(key(), stamp, "", body, at),
	} {
		if !errors.Is(err, ErrSignature) {
			t.Errorf("%s: %v", name, err)
		}
	}
}

func TestRetryOrNot(t *testing.T) {
	for status, permanentWanted := range map[int]bool{
		200: false, 202: false, 301: false, 307: false, 400: true, 401: false, 403: false, 404: false, 408: false, 409: false,
		410: true, 413: true, 422: true, 425: false, 429: false, 500: false, 502: false, 503: false,
	} {
		hops := 0
		s := httptest.NewServer(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
			hops++
			w.Header().Set("Location", "/elsewhere")
			w.Header().Set("Retry-After", "120")
			w.WriteHeader(status)
			_, _ = io.WriteString(w, strings.Repeat("answer\n", 100_000))
		}))
		out, err := New(Settings{Name: "board", URL: s.URL + "/hook?token=hidden", Secret: key()})
		if err != nil {
			t.Fatal(err)
		}
		err = out.Send(t.Context(), "1", []byte("{}"), when())
		s.Close()
		if status < 300 {
			if err != nil {
				t.Errorf("%d: %v", status, err)
			}
			continue
		}
		e, ok := errors.AsType[*Error](err)
		if !ok || e.Permanent != permanentWanted || e.Status != status || e.RetryAfter != 2*time.Minute {
			t.Errorf("%d: %+v", status, e)
			continue
		}
		if hops != 1 {
			t.Errorf("%d: followed to %d requests", status, hops)
		}
		if len(err.Error()) > 400 || strings.Contains(err.Error(), "\n") || strings.Contains(err.Error(), "hidden") {
			t.Errorf("%d: %q", status, err.Error())
		}
	}
}

func TestFailuresAreNotPermanent(t *testing.T) {
	wait := make(chan struct{})
	slow := httptest.NewServer(http.HandlerFunc(func(_ http.ResponseWriter, r *http.Request) {
		_, _ = io.ReadAll(r.Body)
		select {
		case <-wait:
		case <-r.Context().Done():
		}
	}))
	defer slow.Close()
	defer close(wait)
	strange := httptest.NewTLSServer(http.NotFoundHandler()) // its certificate is not trusted
	defer strange.Close()
	gone := httptest.NewServer(http.NotFoundHandler())
	gone.Close()
	for name, u := range map[string]string{"slow": slow.URL, "unknown authority": strange.URL, "away": gone.URL + "/?token=hidden"} {
		out, err := New(Settings{Name: name, URL: u, Secret: key(), Timeout: 300 * time.Millisecond})
		if err != nil {
			t.Fatal(err)
		}
		e, ok := errors.AsType[*Error](out.Send(t.Context(), "1", nil, when()))
		if !ok || e.Permanent || e.Status != 0 || strings.Contains(e.Error(), "hidden") {
			t.Errorf("%s: %v", name, e)
		}
	}
	ctx, cancel := context.WithCancel(t.Context())
	cancel()
	out, err := New(Settings{Name: "slow", URL: slow.URL, Secret: key()})
	if err != nil {
		t.Fatal(err)
	}
	if err := out.Send(ctx, "1", nil, when()); !errors.Is(err, context.Canceled) {
		t.Errorf("%v", err)
	}
}

func TestSettings(t *testing.T) {
	for name, s := range map[string]Settings{
		"plain http far away": {URL: "http://board.example/x", Secret: key()},
		"no scheme":           {URL: "board.example/x", Secret: key()},
		"other scheme":        {URL: "ftp://board.example/x", Secret: key()},
		"short secret":        {URL: "https://board.example/x", Secret: []byte("short")},
		"not a url":           {URL: "https://bo ard\x7f", Secret: key()},
		"no certificate":      {URL: "https://board.example/x", Secret: key(), RootPEM: []byte("x")},
	} {
		if _, err := New(s); !errors.Is(err, ErrSettings) {
			t.Errorf("%s: %v", name, err)
		}
	}
}
