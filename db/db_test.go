package db_test

import (
	"os"
	"testing"

	"pkvigil/db/dbtest"
)

func TestMain(m *testing.M) { os.Exit(dbtest.Main(m)) }
