package parse

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"unicode/utf16"
	"unicode/utf8"

	"golang.org/x/text/encoding"
	"golang.org/x/text/encoding/charmap"
	"golang.org/x/text/encoding/htmlindex"
)

// Names of the encodings Decode tells apart by itself.
const (
	UTF8        = "utf-8"
	UTF16LE     = "utf-16le"
	UTF16BE     = "utf-16be"
	Windows1252 = "windows-1252"
)

// DefaultMaxBytes is the largest input read when Options.MaxBytes is 0.
const DefaultMaxBytes = 64 << 20

// hardMaxBytes keeps offsets in a text within 32 bits whatever is configured.
const hardMaxBytes = 1 << 30

const redo = "export the file again, or declare its encoding in a layout"

// CheckSize refuses empty input and input above Options.MaxBytes.
func CheckSize(name string, data []byte, opt Options) error {
	limit := opt.MaxBytes
	if limit <= 0 {
		limit = DefaultMaxBytes
	}
	limit = min(limit, hardMaxBytes)
	if len(data) == 0 {
		return &Error{File: name, Found: "an empty file", Expected: "an export", Remedy: "it is read when it grows"}
	}
	if int64(len(data)) > limit {
		return &Error{File: name, Found: fmt.Sprintf("%d bytes", len(data)), Expected: fmt.Sprintf("at most %d", limit),
			Remedy: "split the export or raise max_file_mib"}
	}
	return nil
}

// Decode turns the bytes of an export into UTF-8 text without a byte-order
// mark and names the encoding. declared is the encoding a layout states, or
// "": then a byte-order mark decides, next the pattern of NUL bytes, next
// whether the bytes are valid UTF-8, else Windows-1252. Text with characters
// that cannot be decoded is refused, since a lost character may have been a
// digit or a sign. Plain UTF-8 is returned without copying.
func Decode(name string, data []byte, declared string) (text []byte, enc string, err error) {
	enc, body := detect(data)
	if declared != "" {
		if enc != declared || len(body) == len(data) {
			body = data
		}
		enc = declared
	}
	switch enc {
	case UTF8, "utf8", "us-ascii", "ascii":
		enc = UTF8
		if !utf8.Valid(body) {
			return nil, enc, &Error{File: name, Line: lineOf(body, firstBad(body)), Found: "bytes that are not UTF-8", Expected: "text in " + enc, Remedy: redo}
		}
		text = body
	case UTF16LE:
		text, err = wide(name, body, binary.LittleEndian)
	case UTF16BE:
		text, err = wide(name, body, binary.BigEndian)
	case "utf-32":
		return nil, enc, &Error{File: name, Found: "a UTF-32 byte-order mark", Expected: "UTF-8, UTF-16 or an 8-bit encoding", Remedy: redo}
	default:
		text, err = narrow(name, body, enc)
	}
	if err != nil {
		return nil, enc, err
	}
	if n := bytes.Count(text, []byte("\uFFFD")); n > 0 {
		return nil, enc, &Error{File: name, Line: lineOf(text, bytes.Index(text, []byte("\uFFFD"))), Found: fmt.Sprintf("%d characters that cannot be decoded", n),
			Expected: "text in " + enc, Remedy: redo}
	}
	return text, enc, nil
}

func detect(data []byte) (enc string, body []byte) {
	switch {
	case bytes.HasPrefix(data, []byte{0xEF, 0xBB, 0xBF}):
		return UTF8, data[3:]
	case bytes.HasPrefix(data, []byte{0xFF, 0xFE, 0, 0}), bytes.HasPrefix(data, []byte{0, 0, 0xFE, 0xFF}):
		return "utf-32", data
	case bytes.HasPrefix(data, []byte{0xFF, 0xFE}):
		return UTF16LE, data[2:]
	case bytes.HasPrefix(data, []byte{0xFE, 0xFF}):
		return UTF16BE, data[2:]
	}
	head := data[:min(len(data), 4096)]
	if bytes.IndexByte(head, 0) >= 0 {
		var odd, even int
		for i, c := range head {
			if c == 0 {
				if i&1 == 1 {
					odd++
				} else {
					even++
				}
			}
		}
		pairs := len(head) / 2
		switch {
		case 5*odd > 2*pairs && 20*even < odd:
			return UTF16LE, data
		case 5*even > 2*pairs && 20*odd < even:
			return UTF16BE, data
		}
	}
	if utf8.Valid(data) {
		return UTF8, data
	}
	return Windows1252, data
}

// wide decodes UTF-16. An odd length or half a surrogate pair means that the
// file was cut inside a character.
func wide(name string, data []byte, order binary.ByteOrder) ([]byte, error) {
	if len(data)%2 != 0 {
		return nil, &Error{File: name, Found: "an odd number of bytes", Expected: "whole UTF-16 characters",
			Remedy: "the file seems cut short; export it again"}
	}
	out := make([]byte, 0, len(data)/2+len(data)/16)
	for i := 0; i < len(data); i += 2 {
		u := rune(order.Uint16(data[i:]))
		if u < 0x80 {
			out = append(out, byte(u))
			continue
		}
		if utf16.IsSurrogate(u) {
			low := rune(utf8.RuneError)
			if i+4 <= len(data) {
				low = rune(order.Uint16(data[i+2:]))
			}
			u = utf16.DecodeRune(u, low)
			i += 2
		}
		out = utf8.AppendRune(out, u)
	}
	return out, nil
}

func narrow(name string, data []byte, enc string) ([]byte, error) {
	var e encoding.Encoding
	switch enc {
	case Windows1252, "cp1252":
		e = charmap.Windows1252
	case "latin-1", "latin1", "iso-8859-1":
		e = charmap.ISO8859_1
	default:
		var err error
		if e, err = htmlindex.Get(enc); err != nil {
			return nil, &Error{File: name, Field: "encoding", Found: Show(enc), Expected: `an encoding by its registered name, such as "utf-16le" or "windows-1252"`,
				Remedy: "correct the layout", Err: err}
		}
	}
	text, err := e.NewDecoder().Bytes(data)
	if err != nil {
		return nil, &Error{File: name, Expected: "text in " + enc, Remedy: redo, Err: err}
	}
	return text, nil
}

func firstBad(b []byte) int {
	for i := 0; i < len(b); {
		r, n := utf8.DecodeRune(b[i:])
		if r == utf8.RuneError && n == 1 {
			return i
		}
		i += n
	}
	return 0
}

// lineOf counts the line byte offset at lies on.
func lineOf(b []byte, at int) int {
	return 1 + bytes.Count(b[:max(0, min(at, len(b)))], []byte{'\n'})
}
