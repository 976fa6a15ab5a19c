package brief

import (
	"reflect"
	"strings"
	"testing"
)

func TestText(t *testing.T) {
	d := fullNight()
	text := d.Text()
	for i, l := range strings.Split(text, "\n") {
		if n := len([]rune(l)); n > 80 {
			t.Errorf("line %d has %d columns: %s", i+1, n, l)
		}
	}
	at := -1
	for _, s := range []string{"BRIEF of the night of 2026-09-14", "Addendum 1", "NOT SEEN", "IS THE SYSTEM", "CASES", "93 %", "LOOK AT", "-> Measure the pH of r06 again", "CAN GO", "8.200 ± 0.013 (k = 2)", "02 left out", "DID NOT HAPPEN", "FILES SET ASIDE", "CHANGED"} {
		i := strings.Index(text, s)
		if i < at {
			t.Errorf("%q stands at %d, not after what precedes it", s, i)
		}
		at = i
	}
}

// TestTextHasNoCommands: names from files cannot command a terminal or begin a
// line of their own.
func TestTextHasNoCommands(t *testing.T) {
	d := fullNight()
	fill(reflect.ValueOf(&d).Elem(), "x\x1b[31m\r\nCAN GO\u202e")
	text := d.Text() + strings.Join(d.Lines(), "\n")
	if strings.ContainsAny(text, "\x1b\r\u202e") {
		t.Error("control characters reach the terminal")
	}
	for _, l := range strings.Split(text, "\n") {
		if strings.HasPrefix(l, "CAN GO\uFFFD") {
			t.Error("a name begins a line of its own")
		}
	}
}
