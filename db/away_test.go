package db_test

import (
	"context"
	"errors"
	"fmt"
	"net"
	"strings"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"
	"github.com/jackc/pgx/v5/pgconn"

	"pkvigil/db"
	"pkvigil/db/dbtest"
)

func TestAwayByCode(t *testing.T) {
	for code, want := range map[string]bool{
		"57P01": true, "57P03": true, "53100": true, "53300": true, "08006": true, "40P01": true, "58030": true,
		"23505": false, "23514": false, "42P01": false, "42501": false, "22021": false,
	} {
		if got := db.Away(fmt.Errorf("storing: %w", &pgconn.PgError{Code: code})); got != want {
			t.Errorf("%s: away %v, want %v", code, got, want)
		}
	}
	if !db.Full(&pgconn.PgError{Code: "53100"}) || db.Full(&pgconn.PgError{Code: "53300"}) {
		t.Error("a full disk is 53100 and nothing else")
	}
	if db.Away(nil) || db.Away(errors.New("bad file")) || db.Away(context.Canceled) || db.Away(db.ErrNotFound) {
		t.Error("errors of the work count as trouble with the server")
	}
}

// TestAwayForReal cuts connections in the ways a server does.
func TestAwayForReal(t *testing.T) {
	s := dbtest.New(t)
	ctx := t.Context()
	err := s.InTx(ctx, func(tx pgx.Tx) error {
		var pid int
		if err := tx.QueryRow(ctx, "select pg_backend_pid()").Scan(&pid); err != nil {
			return err
		}
		if _, err := s.Pool().Exec(ctx, "select pg_terminate_backend($1)", pid); err != nil {
			return err
		}
		_, err := tx.Exec(ctx, "select 1")
		return err
	})
	if !db.Away(err) {
		t.Errorf("terminated connection: %v does not count as away", err)
	}
	if err := s.InTx(ctx, func(tx pgx.Tx) error { _, err := tx.Exec(ctx, "select 1"); return err }); err != nil {
		t.Errorf("the store does not recover: %v", err)
	}

	// Nobody listens there.
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	addr := l.Addr().String()
	l.Close()
	secret := "hunter" + "2"
	_, err = db.Open(ctx, db.Config{URL: "postgres://u:" + secret + "@" + addr + "/x?sslmode=disable"})
	if err == nil || !db.Away(err) || strings.Contains(err.Error(), secret) {
		t.Errorf("refused connection: %v", err)
	}
	// One that listens and hangs up.
	l, err = net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	go func() {
		for {
			c, err := l.Accept()
			if err != nil {
				return
			}
			c.Close()
		}
	}()
	_, err = db.Open(ctx, db.Config{URL: "postgres://u:" + secret + "@" + l.Addr().String() + "/x?sslmode=disable"})
	if err == nil || !db.Away(err) || strings.Contains(err.Error(), secret) {
		t.Errorf("hung-up connection: %v", err)
	}
	for _, bad := range []string{"postgres://u:" + secret + "@host:notaport/x", "://" + secret, "host=x password=" + secret + " port=abc"} {
		if _, err := db.Open(ctx, db.Config{URL: bad}); err == nil || strings.Contains(err.Error(), secret) {
			t.Errorf("unreadable URL: %v", err)
		}
	}
}

func TestRedact(t *testing.T) {
	for in, want := range map[string]string{
		"dial postgres://ada:s3cret@db:5432/x failed":     "dial postgres://ada:***@db:5432/x failed",
		"user=ada password=s3cret host=db":                "user=ada password=*** host=db",
		"user=ada password='s3 cret' host=db":             "user=ada password=*** host=db",
		"postgres://db/x?user=a&password=s3cret&port=5":   "postgres://db/x?user=a&password=***&port=5",
		"nothing to hide at http://example.org/path?a=b:": "nothing to hide at http://example.org/path?a=b:",
	} {
		if got := db.Redact(in); got != want {
			t.Errorf("%q: got %q, want %q", in, got, want)
		}
	}
}

// TestServerDies kills the server of a store in the middle of a transaction:
// the error counts as away, what was committed is there, what was not is not.
func TestServerDies(t *testing.T) {
	srv, url := dbtest.Own(t)
	ctx := t.Context()
	s, err := db.Open(ctx, db.Config{URL: url})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if _, _, err := s.Migrate(ctx); err != nil {
		t.Fatal(err)
	}
	if err := s.InTx(ctx, func(tx pgx.Tx) error { return s.TakeFile(ctx, tx, taken("kept.csv", "kept", scanOf("r", 0.1))) }); err != nil {
		t.Fatal(err)
	}
	err = s.InTx(ctx, func(tx pgx.Tx) error {
		if err := s.TakeFile(ctx, tx, taken("lost.csv", "lost", scanOf("r", 0.2))); err != nil {
			return err
		}
		srv.Kill(t)
		// The backend of this transaction outlives the postmaster by an instant.
		for deadline := time.Now().Add(20 * time.Second); time.Now().Before(deadline); {
			if _, err := tx.Exec(ctx, "select 1"); err != nil {
				return err
			}
		}
		return errors.New("the backend outlived its server")
	})
	if !db.Away(err) {
		t.Errorf("server killed: %v does not count as away", err)
	}
	deadline := time.Now().Add(30 * time.Second)
	var known map[string]db.Stamp
	for {
		known, err = s.KnownFiles(ctx, "u1")
		if err == nil {
			break
		}
		if !db.Away(err) {
			t.Fatalf("while the server is away: %v does not count as away", err)
		}
		if time.Now().After(deadline) {
			t.Fatalf("server not back within 30 s: %v", err)
		}
	}
	if _, ok := known["kept.csv"]; !ok || len(known) != 1 {
		t.Errorf("after the crash: %v, want kept.csv alone", known)
	}
}

// BenchmarkTakeBatch takes files of 601 points in, 200 to a transaction.
func BenchmarkTakeBatch(b *testing.B) {
	s := dbtest.New(b)
	c := scanOf("r", 0.1)
	sc := &c.Scans[0]
	sc.WavelengthNM, sc.Absorbance = nil, nil
	for i := range 601 {
		sc.WavelengthNM = append(sc.WavelengthNM, 200+float64(i))
		sc.Absorbance = append(sc.Absorbance, 0.1234567+1e-4*float64(i*7919%601))
	}
	text := strings.Repeat("200.0000\t0.1234567\r\n", 600)
	n := 0
	for b.Loop() {
		batch := make([]*db.Taken, 200)
		for i := range batch {
			n++
			batch[i] = taken(fmt.Sprintf("f%d.csv", n), fmt.Sprintf("%d\t%s", n, text), c)
		}
		if err := s.InTx(b.Context(), func(tx pgx.Tx) error { return s.TakeBatch(b.Context(), tx, batch) }); err != nil {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(n)/b.Elapsed().Seconds(), "files/s")
}
