//go:build linux

package cluster

import (
	"bytes"
	"context"
	"errors"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strconv"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
)

// small makes a server start quickly; fsync stays on where a test is about crashes.
func small(extra ...string) map[string]string {
	m := map[string]string{"shared_buffers": "16MB", "max_wal_size": "128MB", "fsync": "off"}
	for i := 0; i+1 < len(extra); i += 2 {
		m[extra[i]] = extra[i+1]
	}
	return m
}

// shortDir makes a folder with a short path that an unprivileged account may enter.
func shortDir(t *testing.T) string {
	t.Helper()
	if _, err := findBinaries(""); err != nil {
		if os.Getenv("PKVIGIL_REQUIRE_DB") != "" {
			t.Fatal(err)
		}
		t.Skip(err)
	}
	dir, err := os.MkdirTemp("/tmp", "pkvc")
	if err != nil {
		t.Fatal(err)
	}
	if err := os.Chmod(dir, 0o755); err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { os.RemoveAll(dir) })
	return dir
}

func start(t *testing.T, cfg Config) *Server {
	t.Helper()
	ctx, cancel := context.WithTimeout(t.Context(), 60*time.Second)
	defer cancel()
	s, err := Start(ctx, cfg)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { stop(t, s) })
	return s
}

func stop(t *testing.T, s *Server) {
	t.Helper()
	ctx, cancel := context.WithTimeout(context.Background(), 30*time.Second)
	defer cancel()
	if err := s.Stop(ctx); err != nil {
		t.Error(err)
	}
}

func query(t *testing.T, url, sql string) string {
	t.Helper()
	conn, err := pgx.Connect(t.Context(), url)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(context.Background())
	var out string
	if err := conn.QueryRow(t.Context(), sql).Scan(&out); err != nil {
		t.Fatal(err)
	}
	return out
}

func exec1(t *testing.T, url, sql string) {
	t.Helper()
	conn, err := pgx.Connect(t.Context(), url)
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close(context.Background())
	if _, err := conn.Exec(t.Context(), sql); err != nil {
		t.Fatal(err)
	}
}

// TestLives walks one data folder through start, use by a second party,
// kill -9 of the server, stop, a second start, and stale leftovers.
func TestLives(t *testing.T) {
	dir := shortDir(t)
	var said syncBuffer
	back := make(chan time.Duration, 4)
	cfg := Config{DataDir: filepath.Join(dir, "d"), Log: &said, Settings: small("fsync", "on"),
		Restarted: func(_ string, away time.Duration) { back <- away }}
	s := start(t, cfg)

	for setting, want := range map[string]string{
		"data_checksums": "on", "server_encoding": "UTF8", "listen_addresses": "", "full_page_writes": "on",
		"synchronous_commit": "on", "unix_socket_permissions": "0700", "lc_collate": "C", "wal_level": "minimal",
	} {
		if got := query(t, s.URL(), "select current_setting('"+setting+"')"); got != want {
			t.Errorf("%s: got %q, want %q", setting, got, want)
		}
	}
	if fi, err := os.Stat(s.SocketDir()); err != nil || fi.Mode().Perm() != 0o700 {
		t.Errorf("socket folder: %v, %v; want mode 0700", fi, err)
	}
	exec1(t, s.URL(), "create table kept (n int); insert into kept values (7)")

	if _, err := Start(t.Context(), cfg); !errors.Is(err, ErrInUse) {
		t.Errorf("second start: got %v, want ErrInUse", err)
	}
	guest, err := Use(t.Context(), cfg)
	if err != nil || guest.Owned() {
		t.Fatalf("Use of a running server: %v, owned %v", err, guest != nil && guest.Owned())
	}
	if got := query(t, guest.URL(), "select n::text from kept"); got != "7" {
		t.Errorf("guest reads %q, want 7", got)
	}
	stop(t, guest)
	if st, err := Status(cfg.DataDir); err != nil || !st.Running || st.Owner != os.Getpid() || st.PID != s.PID() {
		t.Errorf("status while running: %+v, %v", st, err)
	}

	// kill -9 of the server alone: it comes back by itself and says so.
	old := s.PID()
	if err := syscall.Kill(old, syscall.SIGKILL); err != nil {
		t.Fatal(err)
	}
	select {
	case <-back:
	case <-time.After(30 * time.Second):
		t.Fatalf("server not started again within 30 s; said: %s", said.String())
	}
	if s.PID() == old || s.PID() == 0 {
		t.Errorf("process after restart: %d, before: %d", s.PID(), old)
	}
	if got := query(t, s.URL(), "select n::text from kept"); got != "7" {
		t.Errorf("after kill -9: read %q, want 7", got)
	}
	if !strings.Contains(said.String(), "died") {
		t.Errorf("nothing said about the death: %q", said.String())
	}

	stop(t, s)
	if st, err := Status(cfg.DataDir); err != nil || st.Running || !st.Initialised || st.Owner != 0 {
		t.Errorf("status after stop: %+v, %v", st, err)
	}

	// Leftovers: the number in the process file belongs to a living stranger
	// of the server's own account; a socket lock belongs to root.
	stranger := exec.Command("sleep", "60")
	if s.place.asRoot {
		stranger.SysProcAttr = &syscall.SysProcAttr{Credential: s.place.credential()}
	}
	if err := stranger.Start(); err != nil {
		t.Fatal(err)
	}
	defer func() { _ = stranger.Process.Kill(); _ = stranger.Wait() }()
	pidText := strconv.Itoa(stranger.Process.Pid) + "\n" + s.place.pg + "\n1\n5432\n" + s.place.run + "\n\n  123 456\nready   \n"
	writeFile(t, filepath.Join(s.place.pg, "postmaster.pid"), pidText)
	writeFile(t, filepath.Join(s.place.run, ".s.PGSQL.5432.lock"), pidText)
	writeFile(t, filepath.Join(s.place.run, ".s.PGSQL.5432"), "")
	s2 := start(t, cfg)
	if got := query(t, s2.URL(), "select n::text from kept"); got != "7" {
		t.Errorf("second start: read %q, want 7", got)
	}
	stop(t, s2)

	// A process file cut off by a full disk.
	writeFile(t, filepath.Join(s.place.pg, "postmaster.pid"), "")
	s3 := start(t, cfg)
	stop(t, s3)
}

func writeFile(t *testing.T, path, text string) {
	t.Helper()
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
}

// TestOrphan kills the owning program with -9, as the test binary run again:
// the server must go with it or be taken over, and the data must be there.
func TestOrphan(t *testing.T) {
	if dir := os.Getenv("PKVIGIL_TEST_OWNER"); dir != "" {
		s, err := Start(context.Background(), Config{DataDir: dir, Settings: small("fsync", "on")})
		if err != nil {
			t.Fatal(err)
		}
		exec1(t, s.URL(), "create table kept (n int); insert into kept values (11)")
		if err := os.WriteFile(filepath.Join(dir, "up"), []byte(strconv.Itoa(s.PID())), 0o644); err != nil {
			t.Fatal(err)
		}
		select {} // until killed
	}
	dir := filepath.Join(shortDir(t), "d")
	child := exec.Command(os.Args[0], "-test.run=^TestOrphan$")
	child.Env = append(os.Environ(), "PKVIGIL_TEST_OWNER="+dir)
	var out bytes.Buffer
	child.Stdout, child.Stderr = &out, &out
	if err := child.Start(); err != nil {
		t.Fatal(err)
	}
	deadline := time.NewTimer(60 * time.Second)
	tick := time.NewTicker(20 * time.Millisecond)
	defer tick.Stop()
	for up := false; !up; {
		select {
		case <-deadline.C:
			_ = child.Process.Kill()
			t.Fatalf("owner did not come up: %s", out.String())
		case <-tick.C:
			_, err := os.Stat(filepath.Join(dir, "up"))
			up = err == nil
		}
	}
	if err := child.Process.Kill(); err != nil {
		t.Fatal(err)
	}
	_ = child.Wait() // killed
	s := start(t, Config{DataDir: dir, Settings: small("fsync", "on")})
	if got := query(t, s.URL(), "select n::text from kept"); got != "11" {
		t.Errorf("after the owner was killed: read %q, want 11", got)
	}
}

func TestOtherMajorVersion(t *testing.T) {
	dir := shortDir(t)
	pg := filepath.Join(dir, "pg")
	if err := os.Mkdir(pg, 0o700); err != nil {
		t.Fatal(err)
	}
	writeFile(t, filepath.Join(pg, "PG_VERSION"), "9\n")
	writeFile(t, filepath.Join(pg, "precious"), "data")
	_, err := Start(t.Context(), Config{DataDir: dir})
	if err == nil {
		t.Fatal("started on data of another major version")
	}
	for _, want := range []string{"version 9", "pg_dump", "pg_restore", "nothing was changed"} {
		if !strings.Contains(err.Error(), want) {
			t.Errorf("error %q does not mention %q", err, want)
		}
	}
	if raw, err := os.ReadFile(filepath.Join(pg, "precious")); err != nil || string(raw) != "data" {
		t.Errorf("data touched: %q, %v", raw, err)
	}
}

func TestNoBinaries(t *testing.T) {
	_, err := Start(t.Context(), Config{DataDir: t.TempDir(), BinDir: t.TempDir()})
	if err == nil || !strings.Contains(err.Error(), "apt-get install postgresql") {
		t.Errorf("got %v, want how to install", err)
	}
}

func TestForeignFolder(t *testing.T) {
	dir := shortDir(t)
	if err := os.Mkdir(filepath.Join(dir, "pg"), 0o700); err != nil {
		t.Fatal(err)
	}
	writeFile(t, filepath.Join(dir, "pg", "thesis.txt"), "years of work")
	if _, err := Start(t.Context(), Config{DataDir: dir}); err == nil || !strings.Contains(err.Error(), "PG_VERSION") {
		t.Errorf("got %v, want a refusal naming PG_VERSION", err)
	}
	if raw, err := os.ReadFile(filepath.Join(dir, "pg", "thesis.txt")); err != nil || string(raw) != "years of work" {
		t.Errorf("data touched: %q, %v", raw, err)
	}
}

func TestClosedParent(t *testing.T) {
	if os.Geteuid() != 0 {
		t.Skip("only root changes the account")
	}
	dir := shortDir(t)
	if err := os.Chmod(dir, 0o700); err != nil {
		t.Fatal(err)
	}
	_, err := Start(t.Context(), Config{DataDir: filepath.Join(dir, "d")})
	if err == nil || !strings.Contains(err.Error(), "may not enter "+dir) {
		t.Errorf("got %v, want the folder that stands in the way", err)
	}
}

// TestLongPath runs below a path too long for a socket, as nobody when root
// starts it, with TCP for readers.
func TestLongPath(t *testing.T) {
	dir := filepath.Join(shortDir(t), strings.Repeat("long", 22))
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	listen := l.Addr().String()
	l.Close()
	cfg := Config{DataDir: dir, Listen: listen, Settings: small()}
	if os.Geteuid() == 0 {
		cfg.Account = "nobody"
	}
	s := start(t, cfg)
	if n := len(s.SocketDir()); n > s.place.maxSocketDir() {
		t.Errorf("socket folder %s has %d bytes, want at most %d", s.SocketDir(), n, s.place.maxSocketDir())
	}
	run := s.SocketDir()
	t.Cleanup(func() { os.RemoveAll(run) })
	exec1(t, s.URL(), "create role pkvigil_reader nologin")
	exec1(t, s.URL(), "create role dash login password 'for-the-test' in role pkvigil_reader")
	if got := query(t, "postgres://dash:for-the-test@"+listen+"/pkvigil?sslmode=disable", "select current_user::text"); got != "dash" {
		t.Errorf("reader over TCP is %q", got)
	}
	if got := query(t, strings.Replace(s.URL(), "pkvigil@", "dash:for-the-test@", 1), "select current_user::text"); got != "dash" {
		t.Errorf("reader over the socket is %q", got)
	}
	for _, url := range []string{
		"postgres://dash:wrong@" + listen + "/pkvigil?sslmode=disable",
		"postgres://pkvigil@" + listen + "/pkvigil?sslmode=disable", // the owner has no business on TCP
		strings.Replace(s.URL(), "pkvigil@", "dash@", 1),
	} {
		if conn, err := pgx.Connect(t.Context(), url); err == nil {
			conn.Close(context.Background())
			t.Errorf("let in: %s", url)
		}
	}
	if _, err := Start(t.Context(), Config{DataDir: dir, RunDir: dir}); err == nil || !strings.Contains(err.Error(), "shorter") {
		t.Errorf("long run folder: got %v, want a refusal", err)
	}
}

func TestParseMajor(t *testing.T) {
	for text, want := range map[string]int{
		"postgres (PostgreSQL) 15.18 (Debian 15.18-0+deb12u1)\n": 15,
		"postgres (PostgreSQL) 18beta1\n":                        18,
		"postgres (PostgreSQL) 9.6.24\n":                         9,
	} {
		if got, err := parseMajor(text); err != nil || got != want {
			t.Errorf("%q: got %d, %v, want %d", text, got, err, want)
		}
	}
	if _, err := parseMajor("something else"); err == nil {
		t.Error("accepted a text without a version")
	}
}

// A syncBuffer may be written and read at once.
type syncBuffer struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (s *syncBuffer) Write(p []byte) (int, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.b.Write(p)
}

func (s *syncBuffer) String() string {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.b.String()
}
