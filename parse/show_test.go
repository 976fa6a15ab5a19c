package parse

import (
	"errors"
	"strings"
	"testing"
	"unicode"

	"pgregory.net/rapid"
)

func TestShow(t *testing.T) {
	for in, want := range map[string]string{
		"0.412":                   `"0.412"`,
		"\x1b]0;title\x07\x1b[2J": `"\x1b]0;title\a\x1b[2J"`,
		"a\u202eb":                `"a\u202eb"`,
		"µm":                      `"µm"`,
		strings.Repeat("x", 200):  `"` + strings.Repeat("x", shownRunes) + `…"`,
	} {
		if got := Show(in); got != want {
			t.Errorf("%q shown as %s, want %s", in, got, want)
		}
	}
	for in, want := range map[string]string{
		"  S1\t":                       "S1",
		"\x1b[31mred\x1b[0m":           "[31mred[0m",
		"=cmd|' /C calc'!A0":           "=cmd|' /C calc'!A0",
		"<script>alert(1)</script>":    "<script>alert(1)</script>",
		"a\u00a0b\nc":                  "a b c",
		"\u202ecod.exe":                "cod.exe",
		strings.Repeat("long ", 10000): strings.TrimRight(strings.Repeat("long ", 400), " "),
	} {
		if got := Clean(in); got != want {
			t.Errorf("%.40q kept as %.80q, want %.40q", in, got, want)
		}
	}
}

// TestHarmless: whatever bytes stand in a file or its name, nothing of what
// is kept or said can steer a terminal.
func TestHarmless(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		raw := string(rapid.SliceOf(rapid.Byte()).Draw(t, "bytes"))
		e := &Error{File: raw, Line: 3, Found: Show(raw), Expected: "x", Remedy: "y", Err: errors.New("cause")}
		for _, s := range []string{Show(raw), Clean(raw), e.Error()} {
			for _, r := range s {
				if r != ' ' && !unicode.IsPrint(r) {
					t.Fatalf("%q holds %q", s, r)
				}
			}
		}
	})
}
