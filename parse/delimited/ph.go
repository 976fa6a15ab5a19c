package delimited

import (
	"bytes"
	"fmt"
	"math"
	"strings"
	"time"

	"pkvigil/parse"
)

// Bounds of a pH reading in aqueous solution with a glass electrode.
const (
	lowestPH  = -2.0
	highestPH = 16.0
)

// ph reads a pH file: a table with labels, a time series, or one reading.
func (r *reader) ph(t *table, kind string) (*parse.Content, error) {
	if t == nil {
		return r.singlePH()
	}
	if err := r.overfull(t); err != nil {
		return nil, err
	}
	if len(t.rows) == 0 {
		return nil, r.refuse(t.header+1, "", "heads without rows", "pH readings below them", "the file may be unfinished; export it again")
	}
	if !t.has(colPH) && !t.has(colMilliVolt) {
		return nil, r.refuse(t.header+1, "", parse.Show(r.src.line(t.header)), "a column of pH", "declare columns in a layout")
	}
	if err := r.cutTable(t); err != nil {
		return nil, err
	}
	f := r.tableFacts(t)
	readings, bad, err := r.phRows(t, f)
	if err != nil {
		return nil, err
	}
	if 2*bad > len(t.rows) || len(readings) == 0 {
		return nil, r.refuse(t.header+1, t.field(colPH), fmt.Sprintf("%d of %d rows that are no pH readings", bad, len(t.rows)), "pH readings",
			"a spreadsheet may have changed the file; export it again from the meter")
	}
	return r.phContent(t, f, readings, kind)
}

// phContent decides between a table of readings and a time series.
func (r *reader) phContent(t *table, f facts, readings []phRow, kind string) (*parse.Content, error) {
	label := labelColumn(t)
	timed := t.has(colElapsed) || t.has(colTime) || t.has(colClock)
	c := &parse.Content{Format: "ph-table"}
	series := kind == "ph-series"
	if kind == "" || kind == "ph" {
		series = timed && t.has(colPH) && r.dense(readings)
	}
	switch {
	case series && !timed:
		return nil, r.refuse(t.header+1, "", parse.Show(r.src.line(t.header)), "a column of times", "declare columns in a layout")
	case series:
		c.Format = "ph-series"
		if err := r.series(c, f, readings); err != nil {
			return nil, err
		}
		return c, nil
	case label == colNone && len(readings) > 1 && !timed:
		return nil, r.refuse(t.header+1, "", parse.Show(r.src.line(t.header)), "a column that names the rung, position or sample of each row",
			"add a column named rung; rows are never assigned by their order")
	}
	seen := map[string]int{}
	for _, row := range readings {
		if l := row.Label; l != "" {
			if at, twice := seen[l]; twice {
				r.remark(row.Line, "%s stands in line %d too", parse.Show(l), at)
			}
			seen[l] = row.Line
		}
		c.Readings = append(c.Readings, row.Reading)
	}
	return c, nil
}

// phRow is a reading with the seconds it was taken at, NaN where only a
// moment is known or nothing.
type phRow struct {
	parse.Reading
	elapsed float64
}

// labelColumn is the meaning that names the rows, the most telling first.
func labelColumn(t *table) int {
	for _, c := range [...]int{colRung, colPosition, colSample, colNumber} {
		if t.has(c) {
			return c
		}
	}
	return colNone
}

// phRows reads the rows. Rows whose pH is no number are left out with a
// remark and counted in bad; a column of millivolts is refused.
func (r *reader) phRows(t *table, f facts) (out []phRow, bad int, err error) {
	label := labelColumn(t)
	wild, numbers := 0, 0
	for _, row := range t.rows {
		p := phRow{Reading: blankReading(f), elapsed: math.NaN()}
		p.Line = row.line
		if over(row, len(t.heads)) {
			r.remark(row.line, "the row has %d fields, the heads %d; not used", len(row.cells), len(t.heads))
			bad++
			continue
		}
		if label != colNone {
			p.Label = t.text(row, label)
		}
		if t.has(colPH) {
			cell := t.at(row, colPH)
			v, _, ok := parse.Float(cell, t.d.point)
			if !ok {
				if r.footer(t, row) {
					continue
				}
				r.badPH(t, row, cell)
				bad++
				continue
			}
			numbers++
			if v < lowestPH || v > highestPH {
				wild++
				r.remark(row.line, "%s: %g is no pH; the row is not used", t.field(colPH), v)
				bad++
				continue
			}
			p.PH = v
		}
		if err := r.phExtras(t, row, &p, f); err != nil {
			return nil, 0, err
		}
		out = append(out, p)
	}
	if wild > 0 && 2*wild >= numbers {
		row := t.rows[0]
		return nil, 0, r.refuse(row.line, t.field(colPH), parse.Show(t.at(row, colPH)), "pH between -2 and 16",
			"the column looks like millivolts; export pH, or declare the column as millivolt in a layout")
	}
	return out, bad, nil
}

func blankReading(f facts) parse.Reading {
	nan := math.NaN()
	return parse.Reading{PH: nan, MilliVolt: nan, TemperatureC: f.temperature, SD: nan, SlopePerMin: nan, Points: 1,
		Electrode: f.electrode, Meter: f.meter, Measured: f.measured, Zoned: f.zoned}
}

// footer tells whether a row is a line of text after the table.
func (r *reader) footer(t *table, row tableRow) bool {
	if len(row.cells) != 1 || len(row.cells[0]) == 0 {
		return false
	}
	r.remark(row.line, "%s is not read", parse.Show(row.cells[0]))
	return true
}

// badPH remarks on a cell that is no pH.
func (r *reader) badPH(t *table, row tableRow, cell []byte) {
	switch {
	case dateLike(cell):
		r.remark(row.line, "%s reads %s; a spreadsheet may have changed it; the row is not used", t.field(colPH), parse.Show(cell))
	case len(cell) == 0:
		r.remark(row.line, "%s is empty; the row is not used", t.field(colPH))
	default:
		r.remark(row.line, "%s reads %s, which is no number; the row is not used", t.field(colPH), parse.Show(cell))
	}
}

// dateLike tells whether a spreadsheet may have made a date of a number.
func dateLike(cell []byte) bool {
	s := string(cell)
	for w := range strings.FieldsFuncSeq(s, func(r rune) bool { return r == ' ' || r == '.' || r == '-' || r == '/' }) {
		if month(w) != "" {
			return true
		}
	}
	return bytes.Count(cell, []byte{'.'}) == 2 && !bytes.Contains(cell, []byte("..")) || bytes.Count(cell, []byte{'-'}) == 2 || bytes.Count(cell, []byte{'/'}) == 2 || bytes.ContainsRune(cell, ':')
}

// phExtras reads the other columns of a row.
func (r *reader) phExtras(t *table, row tableRow, p *phRow, f facts) error {
	for _, x := range [...]struct {
		col int
		to  *float64
	}{{colMilliVolt, &p.MilliVolt}, {colTemperature, &p.TemperatureC}, {colSD, &p.SD}, {colSlope, &p.SlopePerMin}} {
		if cell := t.at(row, x.col); len(cell) > 0 {
			v, k := t.d.number(cell)
			if k == cellText {
				r.remark(row.line, "%s reads %s, which is no number; taken as not stated", t.field(x.col), parse.Show(cell))
				v = math.NaN()
			}
			*x.to = v
		}
	}
	if strings.EqualFold(unitAt(t, colMilliVolt), "V") {
		p.MilliVolt *= 1000
	}
	if n, _, ok := parse.Float(t.at(row, colPoints), '.'); ok && n >= 1 && n < 1e9 {
		p.Points = int(n)
	}
	if e := t.text(row, colElectrode); e != "" {
		p.Electrode = e
	}
	if m := t.text(row, colMeter); m != "" {
		p.Meter = m
	}
	if t.has(colElapsed) {
		v, k := t.d.number(t.at(row, colElapsed))
		if k < parse.Exponential {
			return r.refuse(row.line, t.field(colElapsed), parse.Show(t.at(row, colElapsed)), "a time", "export the file again")
		}
		p.elapsed = v * timeUnit(unitAt(t, colElapsed))
		if !f.measured.IsZero() && math.Abs(p.elapsed) < 1e8 {
			p.Measured = f.measured.Add(time.Duration(p.elapsed * float64(time.Second)))
		}
		return nil
	}
	at, zoned, err := r.rowTime(t, row, f)
	if err != nil {
		return err
	}
	if !at.IsZero() {
		p.Measured, p.Zoned = at, zoned
	}
	return nil
}

func unitAt(t *table, meaning int) string {
	if c := t.col[meaning]; c >= 0 && c < len(t.units) {
		return t.units[c]
	}
	return ""
}

// rowTime joins the columns of date and time of a row; zero where the row
// states none or only a clock time without a date.
func (r *reader) rowTime(t *table, row tableRow, f facts) (time.Time, bool, error) {
	whole, date, clock := t.text(row, colTime), t.text(row, colDate), t.text(row, colClock)
	text := whole
	switch {
	case whole != "" && date != "" && !strings.ContainsAny(whole, "-/"):
		text = date + " " + whole
	case whole == "" && date != "" && clock != "":
		text = date + " " + clock
	case whole == "" && date != "":
		text = date
	case whole == "" && clock != "":
		text = clock
	}
	if text == "" {
		return time.Time{}, false, nil
	}
	if _, ok := timeOfDay(text); ok && r.lay.TimeFormat == "" {
		if f.date == "" {
			r.remark(row.line, "%s is a time without a date; not used", parse.Show(text))
			return time.Time{}, false, nil
		}
		text = f.date + " " + text
	}
	at, zoned, note, err := moment(text, r.lay.TimeFormat, r.opt.Zone)
	if err != nil {
		return at, false, &parse.Error{File: r.src.name, Line: row.line, Field: "time", Found: parse.Show(text), Expected: "a date and a time without doubt",
			Remedy: "declare time_format in a layout", Err: err}
	}
	if note != "" {
		r.remark(row.line, "%s", note)
	}
	return at, zoned, nil
}

// singlePH reads a file with one reading: lines of keys and values, or, where
// the name says that it is a pH file, nothing but a number.
func (r *reader) singlePH() (*parse.Content, error) {
	f := noFacts()
	d := dialect{delim: '\t', point: '.'}
	for _, delim := range [...]byte{';', ',', '\t'} {
		if bytes.IndexByte(r.src.text, delim) >= 0 {
			d.delim = delim
		}
	}
	bare := 0
	for i := range min(len(r.src.spans), 200) {
		line := r.src.line(i)
		if blank(line) {
			continue
		}
		if v, _, ok := number(strings.TrimSpace(string(line))); ok {
			bare++
			f.ph = v
			continue
		}
		e := entryOf(d, line, i+1)
		if rest, ok := cutPH(e.value); ok && e.key == "" {
			e.key, e.value = "pH", rest
		}
		if headerKey(e.key) == keyPH && !math.IsNaN(f.ph) {
			return nil, r.refuse(i+1, "pH", "a second pH", "one reading, or a table with heads", "name the columns, for instance rung,pH")
		}
		if headerKey(e.key) == keyPH && strings.Contains(e.value, ",") && !strings.Contains(e.value, ".") {
			d.point = ','
		}
		r.learn(&f, d.point, i+1, e.key, e.value)
	}
	r.settle(&f)
	if bare > 1 {
		return nil, r.refuse(0, "", fmt.Sprintf("%d numbers without heads", bare), "one reading, or a table with heads", "name the columns, for instance rung,pH")
	}
	if math.IsNaN(f.ph) {
		return nil, r.refuse(0, "", r.opening(), "a pH reading", "name the columns, for instance rung,pH, or declare a layout")
	}
	if f.ph < lowestPH || f.ph > highestPH {
		return nil, r.refuse(0, "pH", fmt.Sprintf("%g", f.ph), "pH between -2 and 16", "the value looks like millivolts; export pH")
	}
	if r.src.open {
		r.remark(len(r.src.spans), "the file does not end with a line end; whether its last number is whole cannot be told")
	}
	out := blankReading(f)
	out.PH, out.MilliVolt, out.Label, out.Line = f.ph, f.mv, f.sample, len(r.src.spans)
	if out.Label == "" {
		out.Label = f.title
	}
	return &parse.Content{Format: "ph-single", Readings: []parse.Reading{out}}, nil
}

func cutPH(word string) (string, bool) {
	if len(word) < 3 || !strings.EqualFold(word[:2], "ph") {
		return "", false
	}
	rest := strings.TrimLeft(word[2:], " =:\t")
	_, _, ok := number(rest)
	return rest, ok
}

// number reads a whole word with either decimal sign.
func number(word string) (float64, int, bool) {
	if v, dec, ok := parse.Float([]byte(word), '.'); ok {
		return v, dec, true
	}
	return parse.Float([]byte(word), ',')
}
