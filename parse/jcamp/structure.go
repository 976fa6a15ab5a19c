package jcamp

import (
	"bytes"
	"fmt"
	"strconv"
	"strings"

	"pkvigil/parse"
)

// lineEnds turns CR and CR LF into LF. Text without a lone CR is returned as
// it is: a CR before LF counts as a blank.
func lineEnds(text []byte) []byte {
	for i := 0; ; {
		k := bytes.IndexByte(text[i:], '\r')
		if k < 0 {
			return text
		}
		if i += k + 1; i >= len(text) || text[i] != '\n' {
			break
		}
	}
	out := make([]byte, 0, len(text))
	for i := 0; i < len(text); i++ {
		switch {
		case text[i] != '\r':
			out = append(out, text[i])
		case i+1 < len(text) && text[i+1] == '\n':
		default:
			out = append(out, '\n')
		}
	}
	return out
}

// normal gives a label as it is compared: upper case, without blanks, '-',
// '/' and '_'.
func normal(label []byte) string {
	var room [40]byte
	out := room[:0]
	for _, c := range label {
		switch {
		case c == ' ' || c == '\t' || c == '\r' || c == '-' || c == '/' || c == '_':
		case c >= 'a' && c <= 'z':
			out = append(out, c-'a'+'A')
		default:
			out = append(out, c)
		}
	}
	return string(out)
}

func trim(b []byte) []byte { return bytes.Trim(b, " \t\r\v\f\x1a") }

// uncomment cuts a line at "$$".
func uncomment(b []byte) []byte {
	if i := bytes.Index(b, []byte("$$")); i >= 0 {
		return b[:i]
	}
	return b
}

// opensRecord tells whether a line starts a record.
func opensRecord(line []byte) bool {
	for i, c := range line {
		switch c {
		case ' ', '\t', '\r', '\v', '\f', 0x1a: // those that trim drops
		case '#':
			return i+1 < len(line) && line[i+1] == '#'
		default:
			return false
		}
	}
	return false
}

// record is one record of the text: its label line without comment, and the
// lines below it up to the next record.
type record struct {
	head []byte
	body []byte
	line int
}

// next takes the record at pos, which is at the start of a line that opens
// one, and returns the position after it.
func (d *decoder) next(pos, line int) (r record, end, after int) {
	text := d.text
	r.line = line
	nl := bytes.IndexByte(text[pos:], '\n')
	if nl < 0 {
		r.head = text[pos:]
		return r, len(text), line
	}
	r.head = text[pos : pos+nl]
	d.length(line, nl)
	pos, line = pos+nl+1, line+1
	start := pos
	for pos < len(text) {
		nl = bytes.IndexByte(text[pos:], '\n')
		if nl < 0 {
			nl = len(text) - pos
		}
		if opensRecord(text[pos : pos+nl]) {
			break
		}
		d.length(line, nl)
		pos, line = min(pos+nl+1, len(text)), line+1
	}
	r.body = text[start:pos]
	return r, pos, line
}

// length keeps the first of the longest lines.
func (d *decoder) length(line, n int) {
	if n > d.longest {
		d.longest, d.longLine = n, line
	}
}

// manners notes what the text does against the rules for lines and characters.
func (d *decoder) manners(crOnly bool) {
	if d.longest > maxLine+1 { // the CR of a line end may be among them
		d.note(d.longLine, "a line of %d characters; the standard ends them at %d", d.longest, maxLine)
	}
	if crOnly {
		d.note(0, "lines end in CR alone")
	}
	for i, c := range d.text {
		if c >= 0x80 {
			d.note(1+bytes.Count(d.text[:i], []byte{'\n'}), "characters beyond ASCII, read as %s", d.file.Encoding)
			return
		}
	}
}

// structure walks through the records of the file.
func (d *decoder) structure() error {
	pos, line, err := d.preamble()
	if err != nil {
		return err
	}
	for pos < len(d.text) {
		var r record
		r, pos, line = d.next(pos, line)
		if d.count++; d.count > maxRecords {
			return d.fail(r.line, "", "more than "+strconv.Itoa(maxRecords)+" records", "fewer", "split the file")
		}
		if err := d.take(r); err != nil {
			return err
		}
	}
	d.eof = 1 + bytes.Count(bytes.TrimRight(d.text, "\n"), []byte{'\n'})
	return nil
}

// preamble skips blank lines and comments before the first label. A few stray
// characters right before the first label are dropped with a remark.
func (d *decoder) preamble() (pos, line int, err error) {
	for line = 1; pos < len(d.text); line++ {
		nl := bytes.IndexByte(d.text[pos:], '\n')
		if nl < 0 {
			nl = len(d.text) - pos
		}
		raw := d.text[pos : pos+nl]
		if opensRecord(raw) {
			return pos, line, nil
		}
		if t := trim(uncomment(raw)); len(t) > 0 {
			k := bytes.Index(raw, []byte("##TITLE="))
			if line > 1 || k < 1 || k > 8 {
				return 0, 0, d.fail(line, "", parse.Show(t), "##TITLE= as the first record", "the file is damaged or not JCAMP-DX")
			}
			d.note(line, "stray characters before the first label left out: %s", parse.Show(raw[:k]))
			return pos + k, line, nil
		}
		pos = min(pos+nl+1, len(d.text))
	}
	return 0, 0, d.fail(0, "", "no labelled record", "##TITLE= as the first record", "the file is not JCAMP-DX")
}

// take handles one record.
func (d *decoder) take(r record) error {
	head := uncomment(trim(r.head))[2:]
	label, value, found := bytes.Cut(head, []byte{'='})
	key := normal(label)
	if !found {
		switch key {
		case "END":
			d.note(r.line, "##END without its equals sign")
		case "":
			d.note(r.line, "a comment record without its equals sign")
		default:
			return d.fail(r.line, "", parse.Show(trim(r.head)), "##LABEL= value", "the line is damaged")
		}
	}
	switch {
	case key == "TITLE":
		return d.begin(r, value)
	case len(d.open) == 0 && len(d.file.Blocks) == 0:
		return d.fail(r.line, "", parse.Show(trim(r.head)), "##TITLE= as the first record", "the file is damaged or not JCAMP-DX")
	case key == "END":
		return d.end(r)
	case len(d.open) == 0:
		return d.fail(r.line, "", parse.Show(trim(r.head)), "##TITLE= after ##END=", "a title is missing; export the file again")
	}
	at := d.open[len(d.open)-1]
	b := &d.file.Blocks[at]
	if isTable(key) {
		d.table(at, key, value, r)
		return nil
	}
	d.keep(b, r, string(trim(label)), key, value)
	if key == "DATATYPE" {
		b.DataType = parse.Clean(b.get(key))
	}
	d.tuple(len(d.open)-1, key, b.get(key))
	return nil
}

func (d *decoder) begin(r record, value []byte) error {
	if len(d.open) >= maxDepth || len(d.file.Blocks) >= maxBlocks {
		return d.fail(r.line, "TITLE", fmt.Sprintf("block %d, %d deep", len(d.file.Blocks)+1, len(d.open)+1), fmt.Sprintf("at most %d blocks, %d deep", maxBlocks, maxDepth), "split the file")
	}
	parent := -1
	if n := len(d.open); n > 0 {
		parent = d.open[n-1]
	} else if len(d.file.Blocks) == 1 {
		d.note(r.line, "blocks one after another without a block that links them")
	}
	d.file.Blocks = append(d.file.Blocks, Block{Title: text(value, r.body, false), Line: r.line, Parent: parent, index: map[string]int{}})
	d.open = append(d.open, len(d.file.Blocks)-1)
	d.tuples = append(d.tuples, nil)
	return nil
}

func (d *decoder) end(r record) error {
	n := len(d.open)
	if n == 0 {
		return d.fail(r.line, "END", "##END= without a ##TITLE=", "one ##END= per block", "a title is missing; export the file again")
	}
	b := &d.file.Blocks[d.open[n-1]]
	b.Closed = true
	d.finish(b)
	d.open, d.tuples = d.open[:n-1], d.tuples[:n-1]
	if rest := trim(uncomment(r.body)); len(rest) > 0 && len(d.open) == 0 {
		d.note(r.line+1, "text after the closing ##END= left out: %s", parse.Show(rest))
	}
	return nil
}

// text is the value of a record, line by line without comments. Where glue is
// set, a line that ends in '=' is continued without a break.
func text(first, body []byte, glue bool) string {
	first, glue = trim(first), glue && len(body) < 1<<12
	if len(trim(body)) == 0 {
		return string(first)
	}
	var b strings.Builder
	b.Write(first)
	for line := range bytes.SplitSeq(body, []byte{'\n'}) {
		line = trim(uncomment(line))
		if len(line) == 0 {
			continue
		}
		if s := b.String(); glue && strings.HasSuffix(s, "=") && !strings.HasSuffix(s, "$=") {
			b.Reset()
			b.WriteString(s[:len(s)-1])
		} else if b.Len() > 0 {
			b.WriteByte('\n')
		}
		b.Write(line)
	}
	return b.String()
}

// glued tells the records whose long names may be continued by a final '='.
func glued(key string) bool {
	return key == "NAMES" || key == "CASNAME" || key == "IUPACNAME" || key == "MOLFORM"
}

// keep stores a record in its block; the last value of a label counts.
func (d *decoder) keep(b *Block, r record, name, key string, value []byte) {
	v := text(value, r.body, glued(key))
	if i, ok := b.index[key]; ok && key != "" && !(pageLabel(key) && d.section() != nil) && b.Records[i].Value != v {
		if decisive(key) && !d.settled(b, i) {
			b.index["\x00"+key] = len(b.Records) // both values are met before a table uses either
		} else if !strings.HasPrefix(key, "$") {
			d.note(r.line, "%s repeated with another value; the last one counts", parse.Clean(name))
		}
	}
	b.index[key] = len(b.Records)
	b.Records = append(b.Records, Record{Name: name, Value: v, Line: r.line, key: key})
}

// settled tells whether a table stands between record i and the end of what
// was read of the block.
func (d *decoder) settled(b *Block, i int) bool {
	n := len(b.Tables)
	return n > 0 && b.Tables[n-1].Line > b.Records[i].Line
}

// decisive labels set the values of a table: two of them contradict.
func decisive(key string) bool {
	switch key {
	case "XUNITS", "YUNITS", "XFACTOR", "YFACTOR", "FIRSTX", "LASTX", "NPOINTS":
		return true
	}
	return false
}

// closing judges how the file ends. A missing ##END= is accepted with a remark
// where the rest proves that nothing was cut off; else File.Cut says why not.
func (d *decoder) closing() error {
	f := d.file
	f.Complete = len(d.open) == 0
	inner := make([]int, len(f.Blocks)) // blocks one level inside
	tables := 0
	for i := range f.Blocks {
		tables += len(f.Blocks[i].Tables)
		if p := f.Blocks[i].Parent; p >= 0 {
			inner[p]++
		}
	}
	for i := len(d.open) - 1; i >= 0; i-- {
		b := &f.Blocks[d.open[i]]
		d.finish(b)
		if why := d.cut(b, inner[d.open[i]]); why != "" {
			f.Cut = d.fail(d.eof, "END", why, fmt.Sprintf("##END= for the block that begins on line %d", b.Line), "the file is cut; export it again")
			break
		}
		d.note(d.eof, "the ##END= of the block that begins on line %d is missing; what it holds is whole", b.Line)
	}
	for i := range f.Blocks {
		if n := blocks(&f.Blocks[i]); f.Blocks[i].Closed && n > 0 && n != inner[i] {
			d.note(f.Blocks[i].at("BLOCKS"), "BLOCKS says %d, %d are there", n, inner[i])
		}
	}
	switch {
	case tables == 0 && f.Cut != nil:
		return f.Cut
	case tables == 0:
		return d.fail(0, "", "no table of data", "XYDATA, XYPOINTS, PEAK TABLE or NTUPLES", "the file holds descriptions only")
	}
	return nil
}

// cut tells what speaks for a file cut inside an open block, "" if nothing does.
func (d *decoder) cut(b *Block, inner int) string {
	n := len(b.Tables)
	switch {
	case inner > 0 && inner < blocks(b):
		return fmt.Sprintf("%d of %d blocks", inner, blocks(b))
	case n == 0 && inner == 0:
		return "the end of the file inside a block without a table"
	case n == 0:
	case b.Tables[n-1].Declared < 0:
		return "the end of the file in a table that states no number of points"
	case d.text[len(d.text)-1] != '\n':
		return "the end of the file within a line"
	}
	return ""
}

// blocks is the count a link block states, 0 if none.
func blocks(b *Block) int {
	n, err := strconv.Atoi(b.get("BLOCKS"))
	if err != nil || n < 0 {
		return 0
	}
	return n
}
