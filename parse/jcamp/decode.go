// Package jcamp reads and writes JCAMP-DX files of one-dimensional spectra:
// version 4.24 (McDonald and Wilks, Appl. Spectrosc. 42 (1988) 151) and the
// additions of 5.00 and 5.01 (Lampen et al., Appl. Spectrosc. 48 (1994) 1545;
// Pure Appl. Chem. 71 (1999) 1549).
//
// Decode turns any such file into blocks and tables, whatever its kind of
// spectrum. Read makes scans of the ultraviolet and visible ones. What a file
// does against the published text is accepted with a remark where its values
// stay beyond doubt, else refused with line and reason.
package jcamp

import (
	"bytes"
	"fmt"

	"pkvigil/parse"
)

// A File is a decoded file.
type File struct {
	Encoding string // as in parse.Content
	Blocks   []Block
	Remarks  []parse.Remark // of the file and its blocks; those of a table are with the table
	Complete bool           // every block was closed by its ##END=
	// Cut is why a file without its last ##END= seems cut short (*parse.Error);
	// nil where everything announced is there.
	Cut error
}

// A Block is what stands between ##TITLE= and its ##END=, without the blocks
// inside it. Blocks are listed in the order of their titles.
type Block struct {
	Title    string
	Line     int    // of the title
	Parent   int    // index of the block around it, -1 at the top
	DataType string // "LINK" for a block that only holds others
	Records  []Record
	Tables   []Table
	Closed   bool // its ##END= was seen

	index map[string]int // normalised label: last record of that label
}

// A Record is one labelled record that is not a table. Lines of the value are
// joined by '\n', without comments and surrounding blanks.
type Record struct {
	Name  string // label as written
	Value string
	Line  int

	key string
}

// Value gives the text of the last record with the label; spelling variants
// (case, blanks, '-', '/', '_') count as one label.
func (b *Block) Value(label string) (string, bool) {
	i, ok := b.index[normal([]byte(label))]
	if !ok {
		return "", false
	}
	return b.Records[i].Value, true
}

func (b *Block) get(key string) string {
	if i, ok := b.index[key]; ok {
		return b.Records[i].Value
	}
	return ""
}

// at is the line of a label, or that of the block.
func (b *Block) at(key string) int {
	if i, ok := b.index[key]; ok {
		return b.Records[i].Line
	}
	return b.Line
}

// Forms tells which forms of numbers a table uses.
type Forms uint8

// The forms of the published text. DUP goes with any of the others.
const (
	AFFN Forms = 1 << iota // plain numbers, packed or not
	SQZ                    // first digit carries sign and separator
	DIF                    // differences
	DUP                    // repeat counts
)

// A Table is one table of data in actual values: factors are applied.
type Table struct {
	Kind             string // normalised label: "XYDATA", "XYPOINTS", "PEAKTABLE", "PEAKASSIGNMENTS", "RADATA" or "DATATABLE"
	List             string // variable list as written, "(X++(Y..Y))"
	Steady           bool   // abscissae at equal steps, from the header; else one per ordinate
	Page             string // text of ##PAGE= in NTUPLES
	XSymbol, YSymbol string // "X" and "Y" but in NTUPLES
	XUnits, YUnits   string
	Line             int

	X, Y     []float64 // equal lengths, in table order; Y is NaN where missing
	YFactor  float64   // actual ordinate per tabulated one
	Declared int       // count the header states, -1 if none
	Decimals int       // most decimals of a tabulated ordinate; -1: written with exponents
	Forms    Forms
	Missing  int // ordinates given as missing

	Remarks []parse.Remark
	// Err is why the table cannot be read (*parse.Error); X and Y are nil then.
	Err error
	// Doubt is a contradiction between table and header that leaves the
	// published reading possible but unsafe (*parse.Error). Scans are not made
	// of such a table.
	Doubt error
}

// limits on what a hostile file can ask for
const (
	maxDepth   = 64
	maxBlocks  = 1 << 16
	maxRecords = 1 << 19
	maxRemarks = 200
	maxPoints  = 1 << 25
)

// decoder is the state of one Decode.
type decoder struct {
	name   string
	text   []byte
	file   *File
	open   []int // blocks not yet closed, innermost last
	tuples []*tuples
	budget int // points that may still be decoded
	count  int // records so far
	eof    int // last line

	longest, longLine int // length and number of the longest line
}

// Decode reads the structure and all tables of a file. Damage inside a table
// is reported in the table; damage to the structure, or a file without any
// table, is an error (*parse.Error). Memory is bounded by the size of the
// file: repeat counts and declared counts allocate nothing beyond a fixed
// share of it.
func Decode(name string, data []byte, opt parse.Options) (*File, error) {
	if err := parse.CheckSize(name, data, opt); err != nil {
		return nil, err
	}
	text, enc, err := parse.Decode(name, data, "")
	if err != nil {
		return nil, err
	}
	if i := bytes.IndexByte(text, 0); i >= 0 {
		return nil, &parse.Error{File: name, Line: 1 + bytes.Count(text[:i], []byte{'\n'}), Found: "a NUL character", Expected: "printable text", Remedy: "the file is damaged; export it again"}
	}
	d := &decoder{name: name, text: lineEnds(text), file: &File{Encoding: enc}}
	d.budget = min(1<<20+4*len(data), maxPoints)
	if err := d.structure(); err != nil {
		return nil, err
	}
	if err := d.closing(); err != nil {
		return nil, err
	}
	d.manners(len(text) > 0 && bytes.IndexByte(text, '\n') < 0)
	return d.file, nil
}

func (d *decoder) fail(line int, field, found, expected, remedy string) *parse.Error {
	return &parse.Error{File: d.name, Line: line, Field: field, Found: found, Expected: expected, Remedy: remedy}
}

func (d *decoder) note(line int, format string, args ...any) {
	switch n := len(d.file.Remarks); {
	case n < maxRemarks:
		d.file.Remarks = append(d.file.Remarks, parse.Remark{Line: line, Text: fmt.Sprintf(format, args...)})
	case n == maxRemarks:
		d.file.Remarks = append(d.file.Remarks, parse.Remark{Text: "further remarks left out"})
	}
}

func (t *Table) note(line int, format string, args ...any) {
	t.Remarks = append(t.Remarks, parse.Remark{Line: line, Text: fmt.Sprintf(format, args...)})
}
