package settings

import (
	"strings"
	"testing"
)

func TestExampleReads(t *testing.T) {
	s, err := Read([]byte(Example()), "pkvigil.example.toml")
	if err != nil {
		t.Fatal(err)
	}
	c, lot, err := s.CompoundOf("CRR-104")
	if err != nil || c.Name != "CRR" || lot != "CRR-104" {
		t.Fatalf("CompoundOf(CRR-104) = %v, %q, %v", c, lot, err)
	}
}

func TestSeveralFaultsAtOnce(t *testing.T) {
	text := `[laboratory]
zone = "Europe/Viena"

[[folder]]
name = "u1"
path = "/srv/u1"
settel = "5s"
sweep = 15
`
	_, err := Read([]byte(text), "lab.toml")
	if err == nil {
		t.Fatal("accepted")
	}
	t.Log(err)
	if n := strings.Count(err.Error(), "\n") + 1; n != 3 {
		t.Errorf("%d faults reported, 3 are there", n)
	}
}
