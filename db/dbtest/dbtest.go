// Package dbtest gives tests a real PostgreSQL: one private server per test
// binary, a fresh database per test cloned from a migrated one. Other code must
// not import it.
package dbtest

import (
	"context"
	"errors"
	"fmt"
	"net/url"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"pkvigil/db"
	"pkvigil/db/cluster"
)

const (
	dirPrefix = "/tmp/pkvt-" // short: the socket's path has a limit
	template  = "pkv_template"
)

// A host is the server of this test binary.
type host struct {
	server *cluster.Server
	dir    string
	next   atomic.Int64
}

// theHost starts the server when the first test asks for it.
var theHost = sync.OnceValues(startHost)

// started remembers a running host for Main.
var started atomic.Pointer[host]

// Main is for TestMain: it runs the tests and takes the server away afterwards.
// Without it the server ends with the process and its folder is removed by the
// next test binary.
//
//	func TestMain(m *testing.M) { os.Exit(dbtest.Main(m)) }
func Main(m *testing.M) int {
	code := m.Run()
	if h := started.Load(); h != nil {
		ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
		defer cancel()
		if err := h.server.Stop(ctx); err != nil {
			fmt.Fprintln(os.Stderr, "stopping the test server:", err)
		}
		if err := os.RemoveAll(h.dir); err != nil {
			fmt.Fprintln(os.Stderr, "removing the test server:", err)
		}
	}
	return code
}

// New gives a store on a fresh migrated database that goes away with the test.
// The test is skipped when no PostgreSQL server binaries are installed, unless
// PKVIGIL_REQUIRE_DB is set.
func New(t testing.TB) *db.Store {
	t.Helper()
	return open(t, fresh(t, template))
}

// NewEmpty is New without the schema, for tests of migrating.
func NewEmpty(t testing.TB) *db.Store {
	t.Helper()
	return open(t, fresh(t, "template0"))
}

// URL is New for tests that open the store themselves: the URL of a fresh migrated database.
func URL(t testing.TB) string {
	t.Helper()
	return fresh(t, template)
}

// Server gives the private server behind the tests of this binary.
func Server(t testing.TB) *cluster.Server {
	t.Helper()
	return get(t).server
}

func open(t testing.TB, url string) *db.Store {
	t.Helper()
	s, err := db.Open(t.Context(), db.Config{URL: url, MaxConns: 8})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(s.Close)
	return s
}

func get(t testing.TB) *host {
	t.Helper()
	h, err := theHost()
	if err != nil {
		if strings.Contains(err.Error(), "no PostgreSQL server binaries") && os.Getenv("PKVIGIL_REQUIRE_DB") == "" {
			t.Skip(err)
		}
		t.Fatal(err)
	}
	return h
}

// fresh clones a database. One whose test failed is kept as long as the server lives.
func fresh(t testing.TB, from string) string {
	t.Helper()
	h := get(t)
	name := fmt.Sprintf("t%d", h.next.Add(1))
	if err := h.admin(t.Context(), "create database "+name+" template "+from+" strategy file_copy"); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		if err := h.admin(context.Background(), "drop database "+name+" with (force)"); err != nil {
			t.Error(err)
		}
	})
	return h.url(name)
}

// url names a database of the server.
func (h *host) url(name string) string {
	u, err := url.Parse(h.server.URL())
	if err != nil {
		return err.Error() // never: the server made it
	}
	u.Path = "/" + name
	return u.String()
}

func (h *host) admin(ctx context.Context, sql string) error {
	conn, err := pgx.Connect(ctx, h.url("postgres"))
	if err != nil {
		return fmt.Errorf("connecting to the test server: %w", err)
	}
	defer conn.Close(context.WithoutCancel(ctx))
	if _, err := conn.Exec(ctx, sql); err != nil {
		return fmt.Errorf("%s: %w", sql, err)
	}
	return nil
}

func startHost() (*host, error) {
	removeStale()
	dir := dirPrefix + strconv.Itoa(os.Getpid())
	if err := os.Mkdir(dir, 0o755); err != nil {
		return nil, fmt.Errorf("making the test server's folder: %w", err)
	}
	ctx, cancel := context.WithTimeout(context.Background(), 90*time.Second)
	defer cancel()
	server, err := cluster.Start(ctx, cluster.Config{DataDir: dir, Settings: map[string]string{
		// A test server may lose everything: nothing outlives the test.
		"fsync": "off", "synchronous_commit": "off", "full_page_writes": "off",
		"shared_buffers": "64MB", "max_connections": "200", "autovacuum": "off", "max_wal_size": "1GB",
	}})
	if err != nil {
		return nil, errors.Join(err, os.RemoveAll(dir))
	}
	h := &host{server: server, dir: dir}
	if err := h.makeTemplate(ctx); err != nil {
		return nil, errors.Join(err, server.Stop(ctx), os.RemoveAll(dir))
	}
	started.Store(h)
	return h, nil
}

// makeTemplate migrates the database that tests clone.
func (h *host) makeTemplate(ctx context.Context) error {
	if err := h.admin(ctx, "create database "+template); err != nil {
		return err
	}
	s, err := db.Open(ctx, db.Config{URL: h.url(template)})
	if err != nil {
		return err
	}
	defer s.Close()
	if _, _, err := s.Migrate(ctx); err != nil {
		return fmt.Errorf("migrating the template: %w", err)
	}
	return nil
}

// removeStale removes folders of test binaries that are gone.
func removeStale() {
	dirs, err := filepath.Glob(dirPrefix + "*")
	if err != nil {
		return
	}
	for _, d := range dirs {
		pid, err := strconv.Atoi(strings.TrimPrefix(d, dirPrefix))
		if err != nil || !errors.Is(syscall.Kill(pid, 0), syscall.ESRCH) {
			continue
		}
		if st, err := cluster.Status(d); err == nil && !st.Running {
			_ = os.RemoveAll(d) // best effort: another binary may be doing the same
		}
	}
}

// A Doomed server belongs to one test, which may kill it.
type Doomed struct{ *cluster.Server }

// Kill ends the server process with -9. Its supervisor starts it again.
func (d Doomed) Kill(t testing.TB) {
	t.Helper()
	if err := syscall.Kill(d.PID(), syscall.SIGKILL); err != nil {
		t.Error(err)
	}
}

// Own starts a durable server for this test alone and gives its URL; the schema is not there yet.
func Own(t testing.TB) (Doomed, string) {
	t.Helper()
	get(t) // skips when there are no binaries
	dir, err := os.MkdirTemp("/tmp", "pkvo-")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.Chmod(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(dir) })
	ctx, cancel := context.WithTimeout(t.Context(), 90*time.Second)
	defer cancel()
	server, err := cluster.Start(ctx, cluster.Config{DataDir: filepath.Join(dir, "d"), Settings: map[string]string{"shared_buffers": "32MB"}})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() {
		ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
		defer cancel()
		if err := server.Stop(ctx); err != nil {
			t.Error(err)
		}
	})
	return Doomed{server}, server.URL()
}
