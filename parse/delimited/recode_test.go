package delimited

import (
	"encoding/binary"
	"strings"
	"unicode/utf16"
)

// recodings writes text in the encodings and with the line ends met in exports.
func recodings(text string) map[string][]byte {
	wide := func(order binary.AppendByteOrder, mark bool) []byte {
		var out []byte
		if mark {
			out = order.AppendUint16(out, 0xFEFF)
		}
		for _, u := range utf16.Encode([]rune(text)) {
			out = order.AppendUint16(out, u)
		}
		return out
	}
	return map[string][]byte{
		"utf-8 with mark":       []byte("\uFEFF" + text),
		"utf-16le with mark":    wide(binary.LittleEndian, true),
		"utf-16be with mark":    wide(binary.BigEndian, true),
		"utf-16le without mark": wide(binary.LittleEndian, false),
		"utf-16be without mark": wide(binary.BigEndian, false),
		"cr lf":                 []byte(strings.ReplaceAll(text, "\n", "\r\n")),
		"cr":                    []byte(strings.ReplaceAll(text, "\n", "\r")),
	}
}
