package delimited

import (
	"bytes"
	"fmt"

	"pkvigil/parse"
)

const (
	maxLine   = 1 << 20 // bytes in one line
	maxLines  = 4 << 20 // lines in one file
	maxFields = 1 << 15 // fields in one line
)

// source is the decoded text of a file and where its lines lie.
type source struct {
	name  string
	text  []byte
	spans []span
	open  bool // the last line has no line end
}

type span struct{ from, to uint32 }

func (s *source) line(i int) []byte { return s.text[s.spans[i].from:s.spans[i].to] }

// cut finds the lines: LF, CR LF and lone CR all end one.
func cut(name string, text []byte) (*source, error) {
	s := &source{name: name, text: text}
	s.spans = make([]span, 0, min(bytes.Count(text, []byte{'\n'})+1, maxLines))
	s.open = len(text) > 0 && text[len(text)-1] != '\n' && text[len(text)-1] != '\r'
	returns := bytes.Count(text, []byte{'\r'})
	paired, err := s.lines(false)
	if err == nil && paired != returns { // some CR stands without LF and ends a line itself
		s.spans = s.spans[:0]
		_, err = s.lines(true)
	}
	return s, err
}

// lines fills s.spans and counts the CR taken off before a LF.
func (s *source) lines(lone bool) (paired int, err error) {
	text := s.text
	feed := -1 // the next LF, looked for once however many CR stand before it
	for at := 0; at < len(text); {
		end, next := len(text), len(text)
		if feed < at {
			if k := bytes.IndexByte(text[at:], '\n'); k >= 0 {
				feed = at + k
			} else {
				feed = len(text)
			}
		}
		if feed < len(text) {
			end, next = feed, feed+1
		}
		if !lone && end > at && text[end-1] == '\r' && end < len(text) {
			end--
			paired++
		} else if lone {
			if k := bytes.IndexByte(text[at:end], '\r'); k >= 0 {
				if at+k+1 < end {
					next = at + k + 1
				}
				end = at + k
			}
		}
		if end-at > maxLine {
			return 0, &parse.Error{File: s.name, Line: len(s.spans) + 1, Found: fmt.Sprintf("a line of %d bytes", end-at),
				Expected: fmt.Sprintf("lines of at most %d", maxLine), Remedy: "this is no table of text; check the export"}
		}
		if len(s.spans) == maxLines {
			return 0, &parse.Error{File: s.name, Line: maxLines, Found: "more lines than that",
				Expected: fmt.Sprintf("at most %d lines", maxLines), Remedy: "split the export"}
		}
		s.spans = append(s.spans, span{uint32(at), uint32(end)})
		at = next
	}
	return paired, nil
}

// blank tells whether a line holds nothing but blanks and the delimiters that
// spreadsheet programs leave in empty rows.
func blank(line []byte) bool {
	for _, c := range line {
		switch c {
		case ' ', '\t', ',', ';', '"':
		default:
			return false
		}
	}
	return true
}

// silence replaces NUL bytes, which some writers pad fixed fields with, by
// blanks and tells how many there were.
func silence(text []byte) ([]byte, int) {
	n := bytes.Count(text, []byte{0})
	if n == 0 {
		return text, 0
	}
	return bytes.ReplaceAll(text, []byte{0}, []byte{' '}), n
}
