package delimited

import (
	"bytes"
	"fmt"
	"slices"
	"strings"

	"pkvigil/parse"
)

// A table is a file with a line of heads that say what the columns mean.
type table struct {
	d      dialect
	class  string // "ph", "calibration", "sheet", "events", "plan", "long" or "" where the heads fit nothing
	header int    // index of the line of heads
	heads  []string
	units  []string
	col    [colCount]int // index of the column of each meaning, -1
	rows   []tableRow
	// overlong: there are more rows than any such file has.
	overlong bool
}

const maxRows = 500_000 // rows of a labelled table

type tableRow struct {
	line  int // 1-based line the row ends on
	cells [][]byte
}

// at is the trimmed cell of a meaning in a row, nil without one.
func (t *table) at(row tableRow, meaning int) []byte {
	c := t.col[meaning]
	if c < 0 || c >= len(row.cells) {
		return nil
	}
	return row.cells[c]
}

func (t *table) text(row tableRow, meaning int) string { return parse.Clean(t.at(row, meaning)) }
func (t *table) has(meaning int) bool                  { return t.col[meaning] >= 0 }

// field names a column in messages.
func (t *table) field(meaning int) string {
	if c := t.col[meaning]; c >= 0 && c < len(t.heads) {
		return "column " + parse.Show(t.heads[c])
	}
	return ""
}

// table finds the line of heads of a labelled table: among the first lines
// the one with the most columns that are understood, the earlier of equals.
// want is the kind the file must be, or "" for any. Nil where no line
// qualifies.
func (r *reader) table(want string) *table {
	const search, longestHeads, inData = 120, 8192, 8
	var best *table
	rows := 0 // lines in a row that look like data: heads do not follow them
	for i := range min(search, len(r.src.spans)) {
		line := r.src.line(i)
		if wordy(line) {
			rows = 0
		} else if rows++; rows > inData && r.lay.HeaderLine == 0 {
			break
		}
		if r.lay.HeaderLine > 0 && i != r.lay.HeaderLine-1 || !wordy(line) || len(line) > longestHeads {
			continue
		}
		for _, delim := range [...]byte{'\t', ';', ',', '|', ' '} {
			if d := delimiterByte(r.lay.Delimiter); d != 0 && d != delim || bytes.IndexByte(line, delim) < 0 {
				continue
			}
			if delim == ' ' && bytes.ContainsAny(line, "\t;,|") {
				continue
			}
			if want == "long" && bytes.Count(line, []byte{delim}) < 2 {
				continue
			}
			t := r.headed(i, delim)
			if t == nil || !t.serves(want) {
				continue
			}
			t.class = classOf(want, t.class)
			if best == nil || t.known() > best.known() {
				best = t
			}
		}
	}
	if best != nil {
		r.readRows(best)
	}
	return best
}

// wordy tells whether a line begins like one of heads and not like one of data.
func wordy(line []byte) bool {
	line = bytes.TrimLeft(line, " \t\"")
	return len(line) > 0 && !dataish(line)
}

// dataish tells whether text begins like a number.
func dataish(text []byte) bool {
	for i, c := range text {
		switch {
		case c-'0' <= 9:
			return true
		case i < 2 && (c == '-' || c == '+' || c == '.' || c == ','):
			continue
		}
		return bytes.HasPrefix(text, []byte("\u2212"))
	}
	return false
}

func classOf(want, found string) string {
	switch want {
	case "ph-table", "ph-series":
		return "ph"
	case "":
		return found
	}
	return want
}

// headed reads a line as heads; nil unless they fit one of the kinds.
func (r *reader) headed(i int, delim byte) *table {
	t := &table{d: dialect{delim: delim, point: '.', marks: r.lay.Overflow}, header: i}
	for c := range t.col {
		t.col[c] = -1
	}
	t.heads = t.d.headCells(r.src.line(i))
	if len(t.heads) < 2 {
		return nil
	}
	named := 0
	for c, h := range t.heads {
		meaning, unit := column(h)
		t.units = append(t.units, unit)
		if len(r.lay.Columns) > c {
			meaning = declaredMeaning(r.lay.Columns[c], meaning)
		}
		if _, k := t.d.number([]byte(h)); k >= parse.Exponential {
			return nil
		}
		if meaning != colNone {
			named++
			if t.col[meaning] < 0 {
				t.col[meaning] = c
			}
		}
	}
	if 2*named < len(t.heads) && len(r.lay.Columns) == 0 {
		return nil
	}
	t.class = t.classify()
	return t
}

// declaredMeaning translates a word of Layout.Columns.
func declaredMeaning(word string, found int) int {
	switch word {
	case "":
		return found
	case "skip":
		return colNone
	case "label":
		return colSample
	case "ph":
		return colPH
	case "millivolt":
		return colMilliVolt
	case "temperature":
		return colTemperature
	case "time":
		if found == colElapsed || found == colClock || found == colDate {
			return found
		}
		return colTime
	case "wavelength":
		return colWavelength
	case "absorbance":
		return colOrdinate
	}
	if k, _ := column(word); k != colNone {
		return k
	}
	return found
}

func (t *table) known() int {
	n := 0
	for _, c := range t.col {
		if c >= 0 {
			n++
		}
	}
	return n
}

// classify tells what kind of file the heads make, "" for none.
func (t *table) classify() string {
	time := t.has(colTime) || t.has(colDate) || t.has(colClock)
	place := t.has(colRung) || t.has(colPosition) || t.has(colSample) || t.has(colNumber)
	switch {
	case t.has(colWavelength):
		if t.has(colOrdinate) && (t.has(colSample) || t.has(colRung) || t.has(colPosition) || t.has(colPH) && t.col[colPH] < t.col[colOrdinate]) {
			return "long"
		}
		return ""
	case t.has(colNight) && (t.has(colSet) || t.has(colCompound)):
		return "plan"
	case time && t.has(colKind) && (t.has(colResource) || t.has(colText) || t.has(colBy) || t.has(colInstrument)):
		return "events"
	case t.has(colMilliVolt) && (t.has(colPH) || t.has(colNominal)) && (t.has(colLot) || t.has(colBuffer) || t.has(colNominal)) && !t.has(colRung):
		return "calibration"
	case t.has(colPH) && (time || t.has(colElapsed) || t.has(colMilliVolt) || t.has(colElectrode) || t.has(colTemperature)) && !t.has(colCompound) && !t.has(colDilution):
		return "ph"
	case place && (t.has(colSet) || t.has(colCompound) || t.has(colDilution) || t.has(colIonic) || t.has(colCosolvent) || t.has(colRole) || t.has(colLot) || t.has(colBuffer)):
		return "sheet"
	case place && t.has(colPH):
		return "ph"
	}
	return ""
}

// serves tells whether a table can be read as the kind wanted.
func (t *table) serves(want string) bool {
	switch want {
	case "":
		return t.class != ""
	case "ph", "ph-table", "ph-series":
		return t.has(colPH) || t.has(colMilliVolt)
	case "calibration":
		return t.has(colMilliVolt) && (t.has(colPH) || t.has(colNominal))
	case "sheet":
		return t.has(colPosition) || t.has(colRung) || t.has(colSample) || t.has(colNumber) || t.has(colSet)
	case "events":
		return t.has(colTime) || t.has(colDate)
	case "plan":
		return t.has(colNight) || t.has(colDate)
	}
	return t.class == want
}

// readRows reads the rows below the heads: RFC 4180 records, which may span
// lines inside quotes.
func (r *reader) readRows(t *table) {
	const span = 64
	gap := 0
	for i := t.header + 1; i < len(r.src.spans); i++ {
		line := r.src.line(i)
		if blank(line) {
			gap++
			continue
		}
		if len(t.rows) > 0 && marker(line) == "end" {
			break
		}
		if j := r.closing(i, span); j > i && t.d.delim != ' ' {
			line, i = r.src.text[r.src.spans[i].from:r.src.spans[j].to], j
		}
		cells := t.d.split(line, nil)
		if !slices.ContainsFunc(cells, filledCell) || len(t.rows) == 0 && t.unitsRow(cells) {
			continue
		}
		if len(t.rows) == maxRows {
			t.overlong = true
			break
		}
		t.rows = append(t.rows, tableRow{line: i + 1, cells: cells})
	}
	if gap > 0 && len(t.rows) > 0 {
		r.say(0, "%d blank lines are passed over", gap)
	}
	t.d.point = r.pointOf(t)
	r.found.Delimiter, r.found.Decimal = delimiterWord(t.d.delim), string(rune(t.d.point))
}

// unitsRow tells whether the first row below the heads gives their units:
// nothing but units, and none where names stand.
func (t *table) unitsRow(cells [][]byte) bool {
	text := make([]string, len(cells))
	for i, c := range cells {
		text[i] = string(c)
	}
	if !allUnits(text) {
		return false
	}
	for _, m := range [...]int{colRung, colPosition, colSample, colNumber, colSet, colRole, colCompound, colLot, colBuffer, colCosolvent, colElectrode, colMeter, colKind, colResource, colInstrument, colText, colBy, colNight, colSlot} {
		if c := t.col[m]; c >= 0 && c < len(text) && text[c] != "" {
			return false // a name that looks like a unit
		}
	}
	for i, u := range text {
		if i < len(t.units) && t.units[i] == "" {
			t.units[i] = strings.Trim(u, "[]() ")
			if timeUnit(t.units[i]) > 0 && (t.col[colClock] == i || t.col[colTime] == i) {
				t.col[colElapsed], t.col[colClock], t.col[colTime] = i, drop(t.col[colClock], i), drop(t.col[colTime], i)
			}
		}
	}
	return true
}

func drop(have, i int) int {
	if have == i {
		return -1
	}
	return have
}

// closing finds the line, among the next few, that closes a quote left open
// on line i; i itself where none is open or none closes it.
func (r *reader) closing(i, few int) int {
	open := unclosed(r.src.line(i))
	for j := i; open && j+1 < len(r.src.spans) && j-i < few; {
		j++
		if unclosed(r.src.line(j)) {
			return j
		}
	}
	return i
}

func unclosed(line []byte) bool { return bytes.Count(line, []byte{'"'})%2 == 1 }

// pointOf decides the decimal sign of a table from its numeric columns.
func (r *reader) pointOf(t *table) byte {
	if r.lay.Decimal != "" {
		return r.lay.Decimal[0]
	}
	points, commas := 0, 0
	for _, row := range t.rows {
		for _, m := range [...]int{colPH, colNominal, colMilliVolt, colTemperature, colIonic, colDilution, colPercent, colElapsed, colWavelength, colOrdinate} {
			cell := t.at(row, m)
			_, _, p := parse.Float(cell, '.')
			_, _, c := parse.Float(cell, ',')
			if p && !c {
				points++
			}
			if c && !p {
				commas++
			}
		}
	}
	if commas > points {
		return ','
	}
	return '.'
}

// overfull refuses a table with too many rows, and one whose rows have more
// fields than heads: commas that mark decimals also cut the fields.
func (r *reader) overfull(t *table) error {
	if t.overlong {
		return r.refuse(t.rows[maxRows-1].line, "", "further rows", fmt.Sprintf("at most %d", maxRows), "split the file")
	}
	full := 0
	first := tableRow{}
	for _, row := range t.rows {
		if over(row, len(t.heads)) {
			if full == 0 {
				first = row
			}
			full++
		}
	}
	if 2*full <= len(t.rows) || full == 0 {
		return nil
	}
	cells := make([]string, len(first.cells))
	for i, c := range first.cells {
		cells[i] = parse.Clean(c)
	}
	return r.refuse(first.line, "decimal sign", parse.Show(strings.Join(cells, string(rune(t.d.delim)))),
		fmt.Sprintf("%d fields as there are heads", len(t.heads)), "a comma may both mark decimals and separate fields; export with a semicolon, a tab or a decimal point")
}

// over tells whether a row has more filled fields than there are heads.
func over(row tableRow, heads int) bool {
	return len(row.cells) > heads && slices.ContainsFunc(row.cells[heads:], filledCell)
}

// filledCell tells whether a cell holds something that is kept.
func filledCell(c []byte) bool { return len(c) > 0 && parse.Clean(c) != "" }

// tableFacts reads the header lines above the heads.
func (r *reader) tableFacts(t *table) facts {
	f := noFacts()
	for _, e := range r.entries(t.d, 0, t.header) {
		if !e.marker {
			r.learn(&f, t.d.point, e.line, e.key, e.value)
		}
	}
	r.settle(&f)
	return f
}
