package parse

import (
	"bytes"
	"encoding/binary"
	"errors"
	"strings"
	"testing"
	"unicode/utf16"
	"unicode/utf8"

	"golang.org/x/text/encoding/simplifiedchinese"
)

const sample = "Temperature;25,1 °C\r\nWellenlänge [nm];Extinktion\r\n400,0;0,1234\r\n402,0;−0,0012\r\n"

func utf16Text(s string, order binary.AppendByteOrder, mark bool) []byte {
	var out []byte
	if mark {
		out = order.AppendUint16(out, 0xFEFF)
	}
	for _, u := range utf16.Encode([]rune(s)) {
		out = order.AppendUint16(out, u)
	}
	return out
}

func TestDecode(t *testing.T) {
	german := strings.ReplaceAll(sample, "−", "-")
	latin := func(s string) []byte {
		var out []byte
		for _, r := range s {
			out = append(out, byte(r))
		}
		return out
	}
	chinese := "波长,吸光度\n400,0.1\n"
	gbk, err := simplifiedchinese.GBK.NewEncoder().Bytes([]byte(chinese))
	if err != nil {
		t.Fatal(err)
	}
	for name, x := range map[string]struct {
		data     []byte
		declared string
		enc      string
		text     string
	}{
		"utf-8":                 {[]byte(sample), "", UTF8, sample},
		"utf-8 with mark":       {[]byte("\uFEFF" + sample), "", UTF8, sample},
		"utf-16le with mark":    {utf16Text(sample, binary.LittleEndian, true), "", UTF16LE, sample},
		"utf-16be with mark":    {utf16Text(sample, binary.BigEndian, true), "", UTF16BE, sample},
		"utf-16le without mark": {utf16Text(sample, binary.LittleEndian, false), "", UTF16LE, sample},
		"utf-16be without mark": {utf16Text(sample, binary.BigEndian, false), "", UTF16BE, sample},
		"utf-16le declared":     {utf16Text(sample, binary.LittleEndian, true), UTF16LE, UTF16LE, sample},
		"utf-16le pairs":        {utf16Text("𝜆,A\n400,1\n", binary.LittleEndian, true), "", UTF16LE, "𝜆,A\n400,1\n"},
		"windows-1252":          {latin(german), "", Windows1252, german},
		"windows-1252 euro":     {[]byte("a \x80"), "", Windows1252, "a €"},
		"latin-1 declared":      {latin(german), "latin-1", "latin-1", german},
		"gbk declared":          {gbk, "gbk", "gbk", chinese},
		"utf-8 declared, mark":  {[]byte("\uFEFFa"), UTF8, UTF8, "a"},
	} {
		text, enc, err := Decode("f", x.data, x.declared)
		if err != nil || enc != x.enc || string(text) != x.text {
			t.Errorf("%s: %q as %s, %v; want %q as %s", name, text, enc, err, x.text, x.enc)
		}
	}
	for name, x := range map[string]struct {
		data     []byte
		declared string
	}{
		"replacement character": {[]byte("a\uFFFDb"), ""},
		"undefined in 1252":     {[]byte("a\x81b\xE4"), ""},
		"odd length":            {[]byte("\xFF\xFEa\x00b"), ""},
		"lone surrogate":        {[]byte("\xFF\xFE\x00\xD8a\x00"), ""},
		"half pair at the end":  {[]byte("\xFF\xFEa\x00\x00\xD8"), ""},
		"utf-32":                {[]byte("\xFF\xFE\x00\x00a\x00\x00\x00"), ""},
		"not utf-8 as declared": {[]byte("a\xE4b"), UTF8},
		"unknown":               {[]byte("a"), "runes"},
	} {
		_, _, err := Decode("f", x.data, x.declared)
		if e, ok := errors.AsType[*Error](err); !ok || e.File != "f" || e.Found == "" || e.Expected == "" || e.Remedy == "" {
			t.Errorf("%s: %v", name, err)
		}
	}
	plain := []byte("400,0.1\n")
	if n := testing.AllocsPerRun(50, func() { Decode("f", plain, "") }); n != 0 {
		t.Errorf("plain text costs %g allocations", n)
	}
}

func FuzzEncoding(f *testing.F) {
	f.Add([]byte(sample), "")
	f.Add(utf16Text(sample, binary.LittleEndian, true), "")
	f.Add(utf16Text(sample, binary.BigEndian, false), "")
	f.Add([]byte("\xFF\xFE\x00\xD8a\x00"), "")
	f.Add([]byte("a\x81"), "windows-1252")
	f.Add([]byte("\xB2\xA8"), "gbk")
	f.Fuzz(func(t *testing.T, data []byte, declared string) {
		text, enc, err := Decode("f", data, declared)
		if err != nil {
			if _, ok := errors.AsType[*Error](err); !ok {
				t.Fatalf("%v is no *Error", err)
			}
			return
		}
		if !utf8.Valid(text) || bytes.Contains(text, []byte("\uFFFD")) || enc == "" {
			t.Fatalf("%q as %q is no clean text", text, enc)
		}
		again, _, err := Decode("f", text, UTF8)
		if err != nil || !bytes.Equal(again, bytes.TrimPrefix(text, []byte("\uFEFF"))) {
			t.Fatalf("the text does not read back: %q, %v", again, err)
		}
		switch enc { // two-byte text written back is the text again
		case UTF16LE:
			if back := utf16Text(string(text), binary.LittleEndian, true); !bytes.Equal(back[2:], bytes.TrimPrefix(data, back[:2])) {
				t.Fatalf("%q written back differs from %q", back, data)
			}
		case UTF16BE:
			if back := utf16Text(string(text), binary.BigEndian, true); !bytes.Equal(back[2:], bytes.TrimPrefix(data, back[:2])) {
				t.Fatalf("%q written back differs from %q", back, data)
			}
		}
	})
}
