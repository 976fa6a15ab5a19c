package db_test

import (
	"errors"
	"strings"
	"sync"
	"testing"

	"pkvigil/db"
	"pkvigil/db/dbtest"
)

func TestMigrate(t *testing.T) {
	s := dbtest.NewEmpty(t)
	ctx := t.Context()
	if err := s.CheckSchema(ctx); err == nil || !strings.Contains(err.Error(), "schema migrate") {
		t.Errorf("empty database: got %v, want advice to migrate", err)
	}
	// Several processes at once: one does it, the others find it done.
	var wg sync.WaitGroup
	errs := make([]error, 4)
	for i := range errs {
		wg.Go(func() { _, _, errs[i] = s.Migrate(ctx) })
	}
	wg.Wait()
	if err := errors.Join(errs...); err != nil {
		t.Fatal(err)
	}
	from, to, err := s.Migrate(ctx)
	if err != nil || from != to || from == 0 {
		t.Errorf("again: from %d to %d, %v; want no change", from, to, err)
	}
	if err := s.CheckSchema(ctx); err != nil {
		t.Error(err)
	}
	if _, err := s.Pool().Exec(ctx, "insert into schema_version (version, name) values ($1, 'future')", to+1); err != nil {
		t.Fatal(err)
	}
	_, _, err = s.Migrate(ctx)
	se, ok := errors.AsType[*db.SchemaError](err)
	if !ok || se.Found != to+1 || !strings.Contains(err.Error(), "newer") {
		t.Errorf("newer schema: got %v, want a refusal", err)
	}
}
