package settings

import (
	_ "embed"
	"errors"
	"fmt"
	"reflect"
	"strings"

	"github.com/BurntSushi/toml"
)

//go:embed example.toml
var exampleText string

// Example is the documented example file: every key with its default. It reads
// without an error.
func Example() string { return exampleText }

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

// Errors takes the single faults out of an error of Read.
func Errors(err error) []*Error {
	var out []*Error
	var walk func(error)
	walk = func(err error) {
		if e, ok := err.(*Error); ok {
			out = append(out, e)
			return
		}
		if many, ok := err.(interface{ Unwrap() []error }); ok {
			for _, e := range many.Unwrap() {
				walk(e)
			}
			return
		}
		if inner := errors.Unwrap(err); inner != nil {
			walk(inner)
		}
	}
	if err != nil {
		walk(err)
	}
	return out
}

// Read reads a settings file. name is used in errors only. Defaults are filled
// in. All faults are returned at once, joined, each an *Error in the order of
// the lines; only broken TOML ends the reading at its first fault.
func Read(data []byte, name string) (*Settings, error) {
	text := string(data)
	tree := map[string]any{}
	if _, err := toml.Decode(text, &tree); err != nil {
		return nil, syntaxError(err, name)
	}
	b := &binder{file: name, lines: indexLines(text), set: map[string]bool{}, bad: map[string]bool{}, names: itemNames(tree)}
	s := Defaults()
	b.table(reflect.ValueOf(s).Elem(), tree, "")
	wrongTypes := len(b.errs)
	b.bound = true
	c := &checker{binder: b, s: s}
	c.all(wrongTypes == 0)
	if len(b.errs) > 0 {
		return nil, b.joined()
	}
	return s, nil
}

func syntaxError(err error, name string) error {
	e := &Error{File: name, Found: err.Error(), Expected: "a TOML file", Example: `[laboratory]`}
	var p toml.ParseError
	if errors.As(err, &p) {
		e.Line, e.Found = p.Position.Line, p.Message
		if p.LastKey != "" {
			e.Key = p.LastKey
		}
	}
	// A message of the library may quote the line; a line may hold a secret.
	if secretWord(e.Key) || secretWord(e.Found) {
		e.Found = "a line that is no TOML"
	}
	return e
}

// itemNames gives the name of each element of a list of tables: "folder[0]" -> "U1".
func itemNames(tree map[string]any) map[string]string {
	out := map[string]string{}
	for k, v := range tree {
		list, ok := v.([]map[string]any)
		if !ok {
			continue
		}
		for i, m := range list {
			if n, ok := m["name"].(string); ok {
				out[fmt.Sprintf("%s[%d]", k, i)] = n
			}
		}
	}
	return out
}

// exampleLine finds the line of the example file that shows a key.
func exampleLine(path, key string) string {
	table := stripIndex(path)
	current := ""
	for line := range strings.Lines(exampleText) {
		line = strings.TrimSpace(line)
		bare := strings.TrimSpace(strings.TrimPrefix(line, "#"))
		if strings.HasPrefix(line, "[") {
			current = strings.Trim(strings.SplitN(line, "#", 2)[0], "[] ")
			continue
		}
		k, v, ok := strings.Cut(bare, "=")
		if ok && current == table && strings.TrimSpace(k) == key && !strings.Contains(strings.TrimSpace(k), " ") {
			return key + " = " + strings.TrimSpace(v)
		}
	}
	return ""
}
