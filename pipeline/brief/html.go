package brief

import (
	"bytes"
	_ "embed" // the page and its style sheet are files beside this one
	"fmt"
	"html/template"
	"strings"
	"unicode/utf8"
)

// mostBytes is the size beyond which pictures of sets that stand are left out,
// and then further ones: a page is to be mailed and opened on a telephone.
const mostBytes = 1_900_000

//go:embed page.gohtml
var pageText string

//go:embed page.css
var styleText string

// HTML draws the brief as one self-contained page: no script, nothing fetched
// from a network, light and dark and print in one style sheet. It stays below
// two million bytes for any night of a laboratory by leaving out pictures, the
// least needed first, and says so on the page. Text from files is never read
// as markup; letters that would turn or hide other letters are made visible.
// It fails only if the page cannot be built at all.
func HTML(d Data) ([]byte, error) {
	page, err := template.New("brief").Funcs(words()).Parse(pageText)
	if err != nil {
		return nil, fmt.Errorf("page of the brief: %w", err)
	}
	var last []byte
	for level := everything; level <= wordsOnly; level++ {
		var b bytes.Buffer
		if err := page.Execute(&b, viewOf(&d, level)); err != nil {
			return nil, fmt.Errorf("page of the brief of %s: %w", d.Night, err)
		}
		last = harmless(b.Bytes())
		if len(last) <= mostBytes {
			break
		}
	}
	return last, nil
}

// harmless replaces what a browser or a reader could stumble over in names
// taken from files: control characters, broken encodings, and marks that turn
// the direction of writing, so that a name reads as it is stored.
func harmless(page []byte) []byte {
	if utf8.Valid(page) && !bytes.ContainsFunc(page, unseen) {
		return page
	}
	return bytes.Map(func(r rune) rune {
		if unseen(r) {
			return utf8.RuneError
		}
		return r
	}, bytes.ToValidUTF8(page, []byte("\uFFFD")))
}

func unseen(r rune) bool {
	switch {
	case r == '\n' || r == '\t':
		return false
	case r < 0x20, r >= 0x7f && r < 0xa0:
		return true
	case r >= 0x202a && r <= 0x202e, r >= 0x2066 && r <= 0x2069, r == 0x200e, r == 0x200f, r == 0x061c:
		return true // turn the direction of writing
	case r == 0x200b, r == 0x2060, r == 0xfeff, r >= 0xfff9 && r <= 0xfffb, r >= 0xe0000 && r <= 0xe007f:
		return true // not seen at all
	case r >= 0xfdd0 && r <= 0xfdef, r&0xfffe == 0xfffe:
		return true // no characters
	}
	return false
}

// glyph is the sign of a verdict, so that colour is never its only carrier.
func glyph(verdict string) string {
	switch verdict {
	case "stands", "released":
		return "●"
	case "stands-noted":
		return "◐"
	case "held":
		return "■"
	case "in-question":
		return "◇"
	case "no number":
		return "○"
	case "struck", "replaced":
		return "×"
	}
	return "·"
}

// tone is the class of a verdict in the style sheet.
func tone(verdict string) string {
	switch verdict {
	case "stands", "released":
		return "calm"
	case "stands-noted":
		return "care"
	case "held", "in-question", "no number", "struck":
		return "stop"
	}
	return "mute"
}

// good says whether a reference with this verdict speaks for the system.
func good(verdict string) bool {
	return verdict == "stands" || verdict == "stands-noted" || verdict == "released"
}

func words() template.FuncMap {
	return template.FuncMap{
		"glyph": glyph, "tone": tone, "fixed": fixed, "signed": signed, "measured": measured, "known": known, "percent": percent,
		"odds": func(p float64) template.HTML { return template.HTML(odds(p)) }, "when": when, "stamp": stamp, "sentence": sentence, "join": strings.Join, "small": small, "capital": capital, "finding": finding, "answer": answer,
	}
}
