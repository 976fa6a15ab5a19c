// Package export is the single entry to the readers: it recognises an
// exported file by its content and hands it to the reader that knows it.
package export

import (
	"bytes"

	"pkvigil/parse"
	"pkvigil/parse/delimited"
	"pkvigil/parse/jcamp"
)

// Read turns the bytes of one exported file into records. The name is used in
// messages and matched against the patterns of declared layouts; it never
// decides what the file is. Errors are *parse.Error.
func Read(name string, data []byte, opt parse.Options) (*parse.Content, error) {
	if err := parse.CheckSize(name, data, opt); err != nil {
		return nil, err
	}
	if isJCAMP(data) {
		return jcamp.Read(name, data, opt)
	}
	return delimited.Read(name, data, opt)
}

// Explain reads the file as Read does and tells how: one line of text per
// decision, ending with the outcome. The layout declares what was found, for
// the settings; it is empty for formats that describe themselves.
func Explain(name string, data []byte, opt parse.Options) (report []string, layout parse.Layout) {
	if err := parse.CheckSize(name, data, opt); err != nil {
		return []string{"refused: " + err.Error()}, parse.Layout{}
	}
	if !isJCAMP(data) {
		return delimited.Explain(name, data, opt)
	}
	report = []string{"the first label is one of JCAMP-DX: the file describes itself and needs no layout"}
	c, err := jcamp.Read(name, data, opt)
	if err != nil {
		return append(report, "refused: "+err.Error()), parse.Layout{}
	}
	return append(report, delimited.Summary(c)...), parse.Layout{}
}

// isJCAMP tells whether the first non-blank line is a label that opens a
// JCAMP-DX file. Encodings with two bytes per character are seen through.
func isJCAMP(data []byte) bool {
	head := data[:min(len(data), 8192)]
	head = bytes.TrimPrefix(head, []byte("\xEF\xBB\xBF"))
	if len(head) > 1 && (head[0] == 0xFF && head[1] == 0xFE || head[0] == 0xFE && head[1] == 0xFF) {
		head = head[2:]
	}
	head = bytes.ReplaceAll(head, []byte{0}, nil)
	for line := range bytes.SplitSeq(bytes.ReplaceAll(head, []byte{'\r'}, []byte{'\n'}), []byte{'\n'}) {
		line = bytes.TrimSpace(line)
		switch {
		case len(line) == 0 || bytes.HasPrefix(line, []byte("$$")):
			continue
		case !bytes.HasPrefix(line, []byte("##")):
			return false
		}
		label, _, found := bytes.Cut(line[2:], []byte{'='})
		switch normalLabel(label) {
		case "TITLE", "JCAMPDX":
			return found
		}
		// A user label may stand before the title in files of the wild.
	}
	return false
}

// normalLabel drops what the format ignores in labels: case, blanks, dashes,
// slashes and underlines.
func normalLabel(b []byte) string {
	out := make([]byte, 0, len(b))
	for _, c := range bytes.ToUpper(b) {
		switch c {
		case ' ', '\t', '-', '/', '_':
		default:
			out = append(out, c)
		}
	}
	return string(out)
}
