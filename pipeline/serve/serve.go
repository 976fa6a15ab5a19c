// Package serve is the loopback page of a running service: health, metrics in
// the Prometheus text format, and the briefs. It answers from the database and
// from the list of briefs; no part of a request becomes a path.
package serve

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"html"
	"net"
	"net/http"
	"time"

	"github.com/prometheus/client_golang/prometheus"
	"github.com/prometheus/client_golang/prometheus/promhttp"
)

// A Source is what the page asks.
type Source interface {
	// Health says whether work is being stored, and why not.
	Health(ctx context.Context) (ok bool, facts map[string]any)
	// Gauges gives the present numbers by metric name, then label value ("" without a label).
	Gauges(ctx context.Context) (map[string]map[string]float64, error)
	// Briefs lists the nights that have a brief, newest first.
	Briefs() []string
	// Brief gives the page of a listed night.
	Brief(night string) ([]byte, bool)
}

// metric is one gauge with its help and label name ("" = none).
type metric struct{ name, help, label string }

// Metrics lists what /metrics shows.
func metrics() []metric {
	return []metric{
		{"pkvigil_files", "Stored file revisions by state.", "state"},
		{"pkvigil_sets", "Sets by state.", "state"},
		{"pkvigil_results", "Current results by verdict.", "verdict"},
		{"pkvigil_cases", "Cases by state.", "state"},
		{"pkvigil_jobs_open", "Jobs not finished, by queue.", "queue"},
		{"pkvigil_oldest_waiting_seconds", "Age of the oldest set that waits or gathers.", ""},
		{"pkvigil_deliveries_pending", "Messages not delivered yet.", ""},
		{"pkvigil_deliveries_failing", "Messages with more than two failed attempts.", ""},
		{"pkvigil_last_stored_look_seconds", "Age of the newest stored look, by folder.", "folder"},
		{"pkvigil_folder_visible", "1 when a folder is visible, else 0.", "folder"},
	}
}

// collector reads the gauges at each scrape.
type collector struct {
	src   Source
	descs map[string]*prometheus.Desc
	list  []metric
}

func newCollector(src Source) *collector {
	c := &collector{src: src, descs: map[string]*prometheus.Desc{}, list: metrics()}
	for _, m := range c.list {
		var labels []string
		if m.label != "" {
			labels = []string{m.label}
		}
		c.descs[m.name] = prometheus.NewDesc(m.name, m.help, labels, nil)
	}
	return c
}

// Describe sends every description.
func (c *collector) Describe(ch chan<- *prometheus.Desc) {
	for _, m := range c.list {
		ch <- c.descs[m.name]
	}
}

// Collect sends the present numbers; without the database there are none.
func (c *collector) Collect(ch chan<- prometheus.Metric) {
	ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
	defer cancel()
	all, err := c.src.Gauges(ctx)
	if err != nil {
		return
	}
	for _, m := range c.list {
		for label, v := range all[m.name] {
			if m.label == "" {
				ch <- prometheus.MustNewConstMetric(c.descs[m.name], prometheus.GaugeValue, v)
			} else {
				ch <- prometheus.MustNewConstMetric(c.descs[m.name], prometheus.GaugeValue, v, label)
			}
		}
	}
}

// Handler is the page.
func Handler(src Source) http.Handler {
	reg := prometheus.NewRegistry()
	reg.MustRegister(newCollector(src))
	mux := http.NewServeMux()
	mux.Handle("GET /metrics", promhttp.HandlerFor(reg, promhttp.HandlerOpts{MaxRequestsInFlight: 2, Timeout: 8 * time.Second}))
	mux.HandleFunc("GET /health", func(w http.ResponseWriter, r *http.Request) {
		ctx, cancel := context.WithTimeout(r.Context(), 5*time.Second)
		defer cancel()
		ok, facts := src.Health(ctx)
		w.Header().Set("Content-Type", "application/json")
		if !ok {
			w.WriteHeader(http.StatusServiceUnavailable)
		}
		facts["ok"] = ok
		_ = json.NewEncoder(w).Encode(facts) // a client that went away is its own affair
	})
	mux.HandleFunc("GET /brief/{night}", func(w http.ResponseWriter, r *http.Request) {
		page, ok := src.Brief(r.PathValue("night"))
		if !ok {
			http.NotFound(w, r)
			return
		}
		secure(w)
		_, _ = w.Write(page)
	})
	mux.HandleFunc("GET /{$}", func(w http.ResponseWriter, _ *http.Request) {
		secure(w)
		fmt.Fprint(w, "<!doctype html><html lang=\"en\"><meta charset=\"utf-8\"><meta name=\"viewport\" content=\"width=device-width\"><title>pkvigil</title><h1>Briefs</h1><ul>")
		for _, n := range src.Briefs() {
			fmt.Fprintf(w, "<li><a href=\"/brief/%s\">%s</a></li>", html.EscapeString(n), html.EscapeString(n))
		}
		fmt.Fprint(w, "</ul><p><a href=\"/health\">health</a> <a href=\"/metrics\">metrics</a></p>")
	})
	return mux
}

// secure sets the headers of a page: it loads nothing from anywhere.
func secure(w http.ResponseWriter) {
	h := w.Header()
	h.Set("Content-Type", "text/html; charset=utf-8")
	h.Set("Content-Security-Policy", "default-src 'none'; style-src 'unsafe-inline'; img-src data:; frame-ancestors 'none'; base-uri 'none'; form-action 'none'")
	h.Set("X-Content-Type-Options", "nosniff")
	h.Set("Referrer-Policy", "no-referrer")
}

// Start listens on a loopback address and answers until stop is called.
func Start(addr string, src Source) (stop func(), err error) {
	host, _, err := net.SplitHostPort(addr)
	if err != nil {
		return nil, fmt.Errorf("serve.listen %q: %w", addr, err)
	}
	if ip := net.ParseIP(host); host != "localhost" && (ip == nil || !ip.IsLoopback()) {
		return nil, fmt.Errorf("serve.listen %q: only a loopback address is served; put a proxy with access control before it", addr)
	}
	l, err := net.Listen("tcp", addr)
	if err != nil {
		return nil, err
	}
	srv := &http.Server{Handler: Handler(src), ReadHeaderTimeout: 5 * time.Second, ReadTimeout: 10 * time.Second, WriteTimeout: 20 * time.Second, IdleTimeout: time.Minute, MaxHeaderBytes: 16 << 10}
	done := make(chan struct{})
	go func() {
		defer close(done)
		if err := srv.Serve(l); err != nil && !errors.Is(err, http.ErrServerClosed) {
			return
		}
	}()
	return func() {
		ctx, cancel := context.WithTimeout(context.Background(), 5*time.Second)
		defer cancel()
		_ = srv.Shutdown(ctx)
		<-done
	}, nil
}
