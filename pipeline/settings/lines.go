package settings

import (
	"fmt"
	"strings"
)

// lineIndex tells on which line a key stands: "folder[0].settle" -> 12. The
// TOML library keeps positions to itself, so this walks the text once more; it
// is only asked about text that the library has accepted.
type lineIndex map[string]int

// of gives the line of a path, or of the nearest enclosing thing that has one.
func (x lineIndex) of(path string) int {
	for {
		if n, ok := x[path]; ok {
			return n
		}
		cut := strings.LastIndexAny(path, ".[")
		if cut < 0 {
			return 0
		}
		path = path[:cut]
	}
}

// lineWalker is the state of one walk over the text.
type lineWalker struct {
	s     string
	i     int
	line  int
	at    lineIndex
	count map[string]int // elements of each array of tables so far
}

func indexLines(text string) lineIndex {
	w := &lineWalker{s: text, line: 1, at: lineIndex{}, count: map[string]int{}}
	prefix := ""
	for {
		w.space(true)
		if w.i >= len(w.s) {
			return w.at
		}
		if w.s[w.i] == '[' {
			prefix = w.header()
			continue
		}
		w.pair(prefix)
	}
}

// header reads [a.b] or [[a.b]] and gives the path that keys after it live under.
func (w *lineWalker) header() string {
	line := w.line
	array := strings.HasPrefix(w.s[w.i:], "[[")
	w.i++
	if array {
		w.i++
	}
	parts := w.key()
	path := ""
	for n, p := range parts {
		path = join(path, p)
		switch {
		case array && n == len(parts)-1:
			if _, ok := w.at[path]; !ok {
				w.at[path] = line
			}
			w.count[path]++
			path = fmt.Sprintf("%s[%d]", path, w.count[path]-1)
		case w.count[path] > 0:
			path = fmt.Sprintf("%s[%d]", path, w.count[path]-1)
		}
	}
	w.at[path] = line
	for w.i < len(w.s) && w.s[w.i] != '\n' {
		w.i++
	}
	return path
}

// pair reads key = value and notes the line of the key.
func (w *lineWalker) pair(prefix string) {
	line := w.line
	path := prefix
	for _, p := range w.key() {
		path = join(path, p)
		if _, ok := w.at[path]; !ok {
			w.at[path] = line
		}
	}
	w.space(false)
	if w.i < len(w.s) && w.s[w.i] == '=' {
		w.i++
	} else {
		w.i++ // not reached in text the library accepts; go on rather than stand still
	}
	w.value(path)
}

// value passes over a value, noting the keys of inline tables.
func (w *lineWalker) value(path string) {
	w.space(false)
	if w.i >= len(w.s) {
		return
	}
	switch c := w.s[w.i]; c {
	case '"', '\'':
		w.str()
	case '[':
		w.i++
		for n := 0; ; n++ {
			w.sep()
			if w.i >= len(w.s) || w.s[w.i] == ']' {
				w.i++
				return
			}
			element := fmt.Sprintf("%s[%d]", path, n)
			w.at[element] = w.line
			w.value(element)
		}
	case '{':
		w.i++
		for {
			w.sep()
			if w.i >= len(w.s) || w.s[w.i] == '}' {
				w.i++
				return
			}
			w.pair(path)
		}
	default:
		start := w.i
		for w.i < len(w.s) && !strings.ContainsRune(",]}#\r\n", rune(w.s[w.i])) {
			w.i++
		}
		if w.i == start {
			w.i++
		}
	}
}

// key reads a dotted key.
func (w *lineWalker) key() []string {
	var parts []string
	for {
		w.space(false)
		if w.i >= len(w.s) {
			return parts
		}
		if c := w.s[w.i]; c == '"' || c == '\'' {
			parts = append(parts, w.str())
		} else {
			start := w.i
			for w.i < len(w.s) && !strings.ContainsRune(" \t.=]\r\n", rune(w.s[w.i])) {
				w.i++
			}
			parts = append(parts, w.s[start:w.i])
		}
		w.space(false)
		if w.i >= len(w.s) || w.s[w.i] != '.' {
			return parts
		}
		w.i++
	}
}

// str passes over a string of any of the four kinds and gives its raw inside.
func (w *lineWalker) str() string {
	q := w.s[w.i : w.i+1]
	if strings.HasPrefix(w.s[w.i:], strings.Repeat(q, 3)) {
		q = strings.Repeat(q, 3)
	}
	w.i += len(q)
	start := w.i
	for w.i < len(w.s) && !strings.HasPrefix(w.s[w.i:], q) {
		if w.s[w.i] == '\\' && q[0] == '"' {
			w.i++
		}
		if w.i < len(w.s) && w.s[w.i] == '\n' {
			w.line++
		}
		w.i++
	}
	inside := w.s[start:min(w.i, len(w.s))]
	w.i = min(w.i+len(q), len(w.s))
	// A multi-line string may end in up to two quotes of its own.
	for len(q) == 3 && w.i < len(w.s) && w.s[w.i] == q[0] {
		w.i++
	}
	return inside
}

// space passes over blanks and, where newlines are allowed, comments and lines.
func (w *lineWalker) space(newlines bool) {
	for w.i < len(w.s) {
		switch c := w.s[w.i]; {
		case c == ' ' || c == '\t' || c == '\r':
		case c == '\n' && newlines:
			w.line++
		case c == '#' && newlines:
			for w.i < len(w.s) && w.s[w.i] != '\n' {
				w.i++
			}
			continue
		default:
			return
		}
		w.i++
	}
}

// sep passes over what may stand between elements.
func (w *lineWalker) sep() {
	for {
		w.space(true)
		if w.i >= len(w.s) || w.s[w.i] != ',' {
			return
		}
		w.i++
	}
}

func join(prefix, key string) string {
	switch {
	case prefix == "":
		return key
	case key == "":
		return prefix
	}
	return prefix + "." + key
}
