package serve

import (
	"context"
	"encoding/json"
	"errors"
	"io"
	"net"
	"net/http"
	"net/http/httptest"
	"strings"
	"testing"
)

// A bench answers what a test wants to hear.
type bench struct {
	ok     bool
	gauges map[string]map[string]float64
	err    error
	asked  []string
}

func (b *bench) Health(context.Context) (bool, map[string]any) {
	return b.ok, map[string]any{"database": "answers"}
}

func (b *bench) Gauges(context.Context) (map[string]map[string]float64, error) {
	return b.gauges, b.err
}

func (b *bench) Briefs() []string { return []string{"2026-09-15", "2026-09-14", `<b>"x"</b>`} }

func (b *bench) Brief(night string) ([]byte, bool) {
	b.asked = append(b.asked, night)
	return []byte("<!doctype html><title>brief of " + night + "</title>"), night == "2026-09-14"
}

func get(t *testing.T, h http.Handler, method, target string) (*http.Response, string) {
	t.Helper()
	w := httptest.NewRecorder()
	h.ServeHTTP(w, httptest.NewRequestWithContext(t.Context(), method, target, nil))
	res := w.Result()
	body, err := io.ReadAll(res.Body)
	if err != nil {
		t.Fatal(err)
	}
	return res, string(body)
}

func TestHealth(t *testing.T) {
	for ok, status := range map[bool]int{true: http.StatusOK, false: http.StatusServiceUnavailable} {
		res, body := get(t, Handler(&bench{ok: ok}), "GET", "/health")
		var facts map[string]any
		if err := json.Unmarshal([]byte(body), &facts); err != nil {
			t.Fatal(err)
		}
		if res.StatusCode != status || facts["ok"] != ok || facts["database"] != "answers" {
			t.Errorf("healthy %v: status %d, %v", ok, res.StatusCode, facts)
		}
	}
}

func TestMetrics(t *testing.T) {
	b := &bench{gauges: map[string]map[string]float64{
		"pkvigil_files":              {"taken": 391, "parked": 2},
		"pkvigil_deliveries_pending": {"": 3},
		"pkvigil_unknown":            {"": 1},
	}}
	res, body := get(t, Handler(b), "GET", "/metrics")
	if res.StatusCode != http.StatusOK {
		t.Fatalf("status %d: %s", res.StatusCode, body)
	}
	for _, want := range []string{`pkvigil_files{state="taken"} 391`, `pkvigil_files{state="parked"} 2`, "pkvigil_deliveries_pending 3", "# HELP pkvigil_files Stored file revisions by state.", "# TYPE pkvigil_files gauge"} {
		if !strings.Contains(body, want) {
			t.Errorf("%q is missing in\n%s", want, body)
		}
	}
	if strings.Contains(body, "pkvigil_unknown") {
		t.Error("a gauge without help is shown")
	}
	// Without the database the page answers, and shows nothing that is not so.
	b.err = errors.New("away")
	if res, body := get(t, Handler(b), "GET", "/metrics"); res.StatusCode != http.StatusOK || strings.Contains(body, "pkvigil_files{") {
		t.Errorf("status %d without the database:\n%s", res.StatusCode, body)
	}
}

func TestEveryMetricHasAName(t *testing.T) {
	seen := map[string]bool{}
	for _, m := range metrics() {
		if seen[m.name] || !strings.HasPrefix(m.name, "pkvigil_") || !strings.HasSuffix(m.help, ".") {
			t.Errorf("metric %+v", m)
		}
		seen[m.name] = true
	}
}

func TestBriefs(t *testing.T) {
	b := &bench{}
	h := Handler(b)
	res, body := get(t, h, "GET", "/brief/2026-09-14")
	if res.StatusCode != http.StatusOK || !strings.Contains(body, "brief of 2026-09-14") {
		t.Errorf("status %d: %s", res.StatusCode, body)
	}
	if p := res.Header.Get("Content-Security-Policy"); !strings.Contains(p, "default-src 'none'") || res.Header.Get("X-Content-Type-Options") != "nosniff" {
		t.Errorf("headers %v", res.Header)
	}
	res, body = get(t, h, "GET", "/")
	if res.StatusCode != http.StatusOK || !strings.Contains(body, `href="/brief/2026-09-15"`) || strings.Contains(body, "<b>") {
		t.Errorf("status %d: %s", res.StatusCode, body)
	}
}

// No part of a request becomes a path, and only what is offered is answered.
func TestNothingElse(t *testing.T) {
	b := &bench{}
	h := Handler(b)
	for _, c := range []struct {
		method, target string
		status         int
	}{
		{"GET", "/brief/2026-09-13", http.StatusNotFound},
		{"GET", "/brief/", http.StatusNotFound},
		{"GET", "/brief/..%2f..%2fetc%2fpasswd", http.StatusNotFound},
		{"GET", "/brief/2026-09-14/more", http.StatusNotFound},
		{"GET", "/briefs", http.StatusNotFound},
		{"GET", "/debug/pprof/", http.StatusNotFound},
		{"GET", "/favicon.ico", http.StatusNotFound},
		{"POST", "/health", http.StatusMethodNotAllowed},
		{"DELETE", "/brief/2026-09-14", http.StatusMethodNotAllowed},
		{"PUT", "/", http.StatusMethodNotAllowed},
	} {
		if res, body := get(t, h, c.method, c.target); res.StatusCode != c.status {
			t.Errorf("%s %s: status %d (%.80s), expected %d", c.method, c.target, res.StatusCode, body, c.status)
		}
	}
	for _, n := range b.asked {
		if strings.ContainsAny(n, "\x00") {
			t.Errorf("asked for %q", n)
		}
	}
}

func TestOnlyLoopback(t *testing.T) {
	for _, addr := range []string{"0.0.0.0:0", ":0", "192.0.2.7:0", "[::]:0", "example.org:80", "nonsense", "127.0.0.1"} {
		if stop, err := Start(addr, &bench{}); err == nil {
			stop()
			t.Errorf("%s is served", addr)
		}
	}
}

// The page answers on a loopback address until it is stopped; a port in use is an error.
func TestStart(t *testing.T) {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	addr := l.Addr().String()
	if stop, err := Start(addr, &bench{}); err == nil {
		stop()
		t.Error("a port in use is served")
	}
	if err := l.Close(); err != nil {
		t.Fatal(err)
	}
	stop, err := Start(addr, &bench{ok: true})
	if err != nil {
		t.Fatal(err)
	}
	res, err := http.Get("http://" + addr + "/health")
	if err != nil {
		t.Fatal(err)
	}
	res.Body.Close()
	if res.StatusCode != http.StatusOK {
		t.Errorf("status %d", res.StatusCode)
	}
	stop()
	if res, err := http.Get("http://" + addr + "/health"); err == nil {
		res.Body.Close()
		t.Error("answers after it was stopped")
	}
}
