package delimited

import (
	"strings"
	"sync"
	"unicode/utf8"
)

// A lexicon answers what a folded word means without going through the lists.
type lexicon struct {
	words   map[string]uint16 // single words: bits of sense
	phrases []phrase          // several words
	keys    map[string]int    // whole header keys, blanks as underlines
	columns map[string][]int  // whole heads of labelled tables, meanings in order
}

type phrase struct {
	text string // as fold makes it
	bits uint16
}

// Bits of sense a word can have.
const (
	senseWavenumber = 1 << iota
	senseMilli
	senseTransmittance
	senseAbsorbance
	senseOther
	senseWavelength
	senseTime
	sensePercent
	senseNM
	senseUM
	senseAngstrom
)

// lexis builds the lexicon from the word lists, once; it is only read.
var lexis = sync.OnceValue(func() *lexicon {
	l := &lexicon{words: map[string]uint16{}, keys: map[string]int{}, columns: map[string][]int{}}
	for _, s := range [...]struct {
		words string
		bit   uint16
	}{
		{wordsWavenumber, senseWavenumber}, {wordsMilli, senseMilli}, {wordsTransmittance, senseTransmittance},
		{wordsAbsorbance, senseAbsorbance}, {wordsOther, senseOther}, {wordsWavelength, senseWavelength},
		{wordsTime, senseTime}, {wordsPercent, sensePercent}, {wordsNM, senseNM}, {wordsUM, senseUM}, {wordsAngstrom, senseAngstrom},
	} {
		for w := range strings.FieldsSeq(s.words) {
			if strings.Contains(w, "_") {
				l.phrases = append(l.phrases, phrase{" " + strings.ReplaceAll(w, "_", " ") + " ", s.bit})
				continue
			}
			l.words[w] |= s.bit
		}
	}
	for k := keySample; k < keyCount; k++ {
		for w := range strings.FieldsSeq(headerWords(k)) {
			if _, taken := l.keys[w]; !taken {
				l.keys[w] = k
			}
		}
	}
	for c := colRung; c < colCount; c++ {
		for w := range strings.FieldsSeq(colWords(c)) {
			l.columns[w] = append(l.columns[w], c)
		}
	}
	return l
})

// senses joins the senses of all words and phrases in folded text.
func (l *lexicon) senses(folded string) uint16 {
	var bits uint16
	n := 0
	for rest := folded; len(rest) > 1; n++ {
		k := strings.IndexByte(rest[1:], ' ')
		bits |= l.words[rest[1:1+k]]
		rest = rest[1+k:]
	}
	if n > 1 {
		for _, p := range l.phrases {
			if strings.Contains(folded, p.text) {
				bits |= p.bits
			}
		}
	}
	return bits
}

// underlined is folded text with underlines for blanks, without those at the ends.
func underlined(folded string) string {
	if len(folded) < 2 {
		return ""
	}
	w := folded[1 : len(folded)-1]
	if strings.IndexByte(w, ' ') < 0 {
		return w
	}
	return strings.ReplaceAll(w, " ", "_")
}

// foldASCII folds text of ASCII letters into room; ok is false for other text.
func foldASCII(s string, room []byte) (out []byte, ok bool) {
	out = append(room[:0], ' ')
	gap := true
	for i := range len(s) {
		c := s[i]
		switch {
		case c >= utf8.RuneSelf:
			return nil, false
		case c >= 'A' && c <= 'Z':
			c += 'a' - 'A'
		case c >= 'a' && c <= 'z', c-'0' <= 9, c == '%', c == '#':
		default:
			if !gap {
				out = append(out, ' ')
				gap = true
			}
			continue
		}
		out = append(out, c)
		gap = false
	}
	if !gap {
		out = append(out, ' ')
	}
	return out, true
}
