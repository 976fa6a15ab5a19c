package settings

import (
	"fmt"
	"strings"
)

// An Error is one fault of a settings file.
type Error struct {
	File     string
	Line     int    // 1-based; 0: the whole file
	Key      string // dotted, with the name of the item: `folder "U1".settle`
	Found    string
	Expected string
	Example  string // a right line, may be empty
}

// Error gives one sentence.
func (e *Error) Error() string {
	var b strings.Builder
	b.WriteString(e.File)
	if e.Line > 0 {
		fmt.Fprintf(&b, ":%d", e.Line)
	}
	if e.Key != "" {
		fmt.Fprintf(&b, ": %s", e.Key)
	}
	if e.Found != "" {
		fmt.Fprintf(&b, ": found %s", e.Found)
	}
	if e.Expected != "" {
		fmt.Fprintf(&b, ", expected %s", e.Expected)
	}
	if e.Example != "" {
		fmt.Fprintf(&b, "; for example: %s", e.Example)
	}
	return b.String()
}

// Read reads a settings file. name is used in errors only. Defaults are filled
// in. All faults are returned at once, joined, each an *Error.
func Read(data []byte, name string) (*Settings, error) { panic("being written") }

// Example is the documented example file: every key with its default.
func Example() string { panic("being written") }
