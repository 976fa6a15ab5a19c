package delimited

import (
	"bytes"
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"pkvigil/parse"
)

// An entry is one line of the header block or footer: a key with one value,
// a key with a value per column, or a free line (no key).
type entry struct {
	line   int // 1-based
	key    string
	cells  [][]byte // the cells as the dialect cuts them, the key first; nil where a colon or equals sign split the line
	value  string
	marker bool
}

// entries reads lines from..to-1 as header lines.
func (r *reader) entries(d dialect, from, to int) []entry {
	var out []entry
	for i := from; i < to; i++ {
		line := r.src.line(i)
		if blank(line) {
			continue
		}
		out = append(out, entryOf(d, line, i+1))
	}
	return out
}

func entryOf(d dialect, line []byte, number int) entry {
	e := entry{line: number}
	if m := marker(line); m != "" {
		e.value, e.marker = m, true
		return e
	}
	cells := d.split(line, nil)
	for len(cells) > 0 && len(cells[len(cells)-1]) == 0 {
		cells = cells[:len(cells)-1]
	}
	if d.delim != ' ' && len(cells) >= 2 && !keyed(cells[0]) {
		e.key = strings.TrimRight(parse.Clean(cells[0]), " :=")
		e.cells = cells
		var rest []string
		for _, c := range cells[1:] {
			rest = append(rest, parse.Clean(c))
		}
		e.value = strings.Join(rest, strings.TrimLeft(string(rune(d.delim))+" ", "\t"))
		if len(rest) == 1 {
			e.value = rest[0]
		}
		return e
	}
	text := parse.Clean(bytes.Trim(bytes.TrimSpace(line), `"`+string(d.delim)))
	text = strings.TrimLeft(text, "#;%! ")
	if k := strings.IndexAny(text, ":="); k > 0 {
		e.key, e.value = strings.TrimSpace(text[:k]), strings.TrimSpace(strings.Trim(text[k+1:], `" `))
		return e
	}
	e.value = text
	return e
}

// keyed tells whether a cell itself holds "key: value".
func keyed(cell []byte) bool {
	k := bytes.IndexByte(cell, ':')
	return k > 0 && k < len(cell)-1 && (cell[k+1] == ' ' || cell[k+1] == '\t') && !(cell[k-1] >= '0' && cell[k-1] <= '9')
}

// marker tells whether a line is a mark that begins or ends data: a word such
// as "begin" or "end" between brackets or arrows.
func marker(line []byte) string {
	t := bytes.TrimSpace(line)
	if len(t) < 3 || len(t) > 80 {
		return ""
	}
	switch t[0] {
	case '>', '[', '<', '#', '=', '*', '-':
		f := fold(string(t))
		switch {
		case says(f, "end fin ende extremo eof fine"):
			return "end"
		case says(f, "begin data start comienza daten donnees datos beginn"):
			return "begin"
		}
	}
	return ""
}

// facts are what a header says about one scan or table.
type facts struct {
	sample       string
	title        string // stands in where no sample is named
	instrument   string
	electrode    string
	meter        string
	mode         string // what the header says the ordinate is
	modeLine     int
	axis         string // what it says the abscissa is
	measured     time.Time
	zoned        bool
	date, clock  string
	dateLine     int
	pathMM       float64
	temperature  float64
	bandwidthNM  float64
	ph, mv       float64
	points       int
	first, final float64
	meta         []parse.Field
}

func noFacts() facts {
	nan := math.NaN()
	return facts{temperature: nan, ph: nan, mv: nan, first: nan, final: nan}
}

// learn takes one key and value into the facts. What is not understood, or
// understood but not usable without a guess, is kept as a header field.
func (r *reader) learn(f *facts, point byte, line int, key, value string) {
	switch {
	case value == "" && key == "":
		return
	case key == "" && ordinate(quantity(value)) && mere(value), key != "" && (value == "" || value[0] == '[') && ordinate(quantity(key)) && mere(key):
		f.mode, f.modeLine = key+value, line
	}
	keep := func() { f.meta = append(f.meta, parse.Field{Key: key, Value: value}) }
	if value == "" {
		keep()
		return
	}
	switch headerKey(key) {
	case keySample:
		if f.sample == "" {
			f.sample = value
			return
		}
		keep()
	case keyTitle:
		f.title = value
		keep()
	case keyMeasured:
		r.learnTime(f, line, key, value)
	case keyDate:
		f.date, f.dateLine = value, line
		if strings.Contains(value, ":") {
			r.learnTime(f, line, key, value)
			f.date = ""
		}
	case keyClock:
		f.clock = value
		if len(value) > 8 && strings.ContainsAny(value, "/.-") {
			r.learnTime(f, line, key, value)
			f.clock = ""
		}
	case keyInstrument:
		f.instrument = value
	case keyElectrode:
		f.electrode = value
	case keyMeter:
		f.meter = value
	case keyMode:
		if q := quantity(value); q != qUnknown || f.mode == "" {
			f.mode, f.modeLine = value, line
		}
		keep()
	case keyAxis:
		f.axis = value
		keep()
	case keyPath, keyTemperature, keyBandwidth, keyPH, keyMilliVolt, keyPoints, keyFirst, keyLast:
		if !r.learnNumber(f, point, line, key, value) {
			keep()
		}
	default:
		keep()
	}
}

func (r *reader) learnTime(f *facts, line int, key, value string) {
	t, zoned, note, err := moment(value, r.lay.TimeFormat, r.opt.Zone)
	if err != nil {
		r.remark(line, "%s: %v; the time is not used", key, err)
		f.meta = append(f.meta, parse.Field{Key: key, Value: value})
		return
	}
	if note != "" {
		r.remark(line, "%s: %s", key, note)
	}
	f.measured, f.zoned = t, zoned
}

// learnNumber takes a numeric fact; false leaves it among the header fields.
func (r *reader) learnNumber(f *facts, point byte, line int, key, value string) bool {
	v, rest, ok := numberIn(value, point)
	if !ok {
		return false
	}
	_, unit := unitOf(key)
	if unit == "" {
		unit = rest
	}
	switch headerKey(key) {
	case keyPath:
		mm := millimetres(unit)
		if mm == 0 {
			r.remark(line, "%s: %s states no unit and is not used; expected for instance \"10 mm\"", key, parse.Show(value))
			return false
		}
		if v*mm <= 0 || v*mm > 1e4 {
			r.remark(line, "%s: %s mm is no path length and is not used", key, parse.Show(value))
			return false
		}
		f.pathMM = v * mm
	case keyTemperature:
		return r.learnTemperature(f, line, key, v, unit)
	case keyBandwidth:
		if !strings.EqualFold(unit, "nm") || v <= 0 {
			return false
		}
		f.bandwidthNM = v
	case keyPH:
		f.ph = v
	case keyMilliVolt:
		if !strings.EqualFold(unit, "mV") && !strings.Contains(strings.ToLower(key), "mv") {
			return false
		}
		f.mv = v
	case keyPoints:
		if v != math.Trunc(v) || v < 1 || v > 1e8 {
			return false
		}
		f.points = int(v)
	case keyFirst:
		f.first = v
		return false
	case keyLast:
		f.final = v
		return false
	}
	return true
}

// learnTemperature accepts a temperature in degrees Celsius that a solution
// can have; detectors are far colder and their readings stay header fields.
func (r *reader) learnTemperature(f *facts, line int, key string, v float64, unit string) bool {
	switch strings.ToUpper(strings.Trim(unit, "°º. ")) {
	case "K":
		v -= 273.15
	case "C", "CELSIUS", "DEG C", "GRAD C":
	case "":
		r.remark(line, "%s: %g states no unit; taken as degrees Celsius", key, v)
	default:
		return false
	}
	if v < -5 || v > 105 {
		r.remark(line, "%s: %g C is no temperature of an aqueous solution and is not used", key, v)
		return false
	}
	f.temperature = v
	return true
}

// settle joins a date and a clock time given on separate lines.
func (r *reader) settle(f *facts) {
	if !f.measured.IsZero() || f.date == "" {
		return
	}
	text := strings.TrimSpace(f.date + " " + f.clock)
	if f.clock == "" {
		if t, err := calendar(f.date); err == nil {
			f.meta = append(f.meta, parse.Field{Key: "date", Value: t.Format("2006-01-02")})
			return
		}
	}
	r.learnTime(f, f.dateLine, "date", text)
}

// remark records what was accepted although it deviates. Repeated remarks of
// a damaged file are bounded.
func (r *reader) remark(line int, format string, args ...any) {
	const most = 200
	if len(r.remarks) > most {
		return
	}
	m := parse.Remark{Line: line, Text: fmt.Sprintf(format, args...)}
	if slices.Contains(r.remarks, m) { // traces on one axis repeat its remarks
		return
	}
	if len(r.remarks) == most {
		m = parse.Remark{Text: "further remarks are left out"}
	}
	r.remarks = append(r.remarks, m)
	r.say(m.Line, "%s", m.Text)
}

// say tells the report of Explain what was decided.
func (r *reader) say(line int, format string, args ...any) {
	if !r.telling {
		return
	}
	text := fmt.Sprintf(format, args...)
	if line > 0 {
		text = fmt.Sprintf("line %d: %s", line, text)
	}
	r.said = append(r.said, text)
}

// refuse builds the error that refuses the file.
func (r *reader) refuse(line int, field, found, expected, remedy string) error {
	return &parse.Error{File: r.src.name, Line: line, Field: field, Found: found, Expected: expected, Remedy: remedy}
}
