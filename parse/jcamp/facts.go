package jcamp

import (
	"regexp"
	"strconv"
	"strings"
	"time"

	"pkvigil/parse"
)

// structural labels describe the table and are used up by decoding; whatever
// else a header says is kept with the scan.
func structural(key string) bool {
	switch key {
	case "XUNITS", "YUNITS", "XFACTOR", "YFACTOR", "FIRSTX", "LASTX", "DELTAX", "NPOINTS", "FIRSTY", "LASTY", "MAXX", "MINX", "MAXY", "MINY", "DATACLASS", "END":
		return true
	}
	return pageLabel(key)
}

// facts reads what the header says about sample and measurement. What cannot
// be read is left unset with a remark and stays in Meta as text.
func (m *maker) facts(b *Block, t *Table, s *parse.Scan) {
	for i := range b.Records {
		r := &b.Records[i]
		if r.Value == "" || structural(r.key) || r.key == "SPECTROMETERDATASYSTEM" {
			continue
		}
		name := parse.Clean(r.Name)
		if r.key == "" {
			name = "comment"
		}
		s.Meta = append(s.Meta, parse.Field{Key: name, Value: parse.Clean(r.Value)})
	}
	s.Measured, s.Zoned = m.moment(b)
	if v := b.get("PATHLENGTH"); v != "" {
		if mm, ok := pathLength(v); ok {
			if s.PathMM = mm; mm >= 50 {
				m.note(b.at("PATHLENGTH"), "PATH LENGTH %s is read as %s mm; the standard's unit is cm", parse.Show(v), number(mm))
			}
		} else {
			m.note(b.at("PATHLENGTH"), "PATH LENGTH not read: %s", parse.Show(v))
		}
	}
	if v := b.get("TEMPERATURE"); v != "" {
		if c, ok := temperature(v); ok {
			s.TemperatureC = c
		} else {
			m.note(b.at("TEMPERATURE"), "TEMPERATURE not read: %s", parse.Show(v))
		}
	}
	if v := b.get("RESOLUTION"); v != "" {
		if nm, ok := bandwidth(v, t.XUnits); ok {
			s.BandwidthNM = nm
		} else {
			m.note(b.at("RESOLUTION"), "RESOLUTION is no single width in nm: %s", parse.Show(v))
		}
	}
	m.acidity(b, t, s)
}

// quantity cuts a text into its number and its unit. A decimal comma between
// digits is read as such, since a single number cannot hold a separator.
func quantity(text string) (v float64, unit string, ok bool) {
	b := []byte(strings.TrimSpace(text))
	v, _, n := parse.Prefix(b, '.')
	if n > 0 && n < len(b) && b[n] == ',' {
		v, _, n = parse.Prefix(b, ',')
	}
	return v, strings.TrimSpace(string(b[n:])), n > 0
}

// pathLength gives mm. The standard's unit is cm; one that is written counts.
func pathLength(text string) (float64, bool) {
	v, unit, ok := quantity(text)
	if !ok || !(v > 0) || v > 1e5 {
		return 0, false
	}
	switch strings.ToLower(strings.Trim(unit, "()[]. ")) {
	case "", "cm", "centimeter", "centimeters", "centimetre", "centimetres":
		return 10 * v, true
	case "mm", "millimeter", "millimeters", "millimetre", "millimetres":
		return v, true
	case "um", "µm", "μm", "micrometers", "micrometres", "microns":
		return v / 1000, true
	}
	return 0, false
}

// temperature gives degrees Celsius, the standard's unit; one that is written counts.
func temperature(text string) (float64, bool) {
	v, unit, ok := quantity(text)
	if !ok {
		return 0, false
	}
	switch strings.ToUpper(strings.Trim(unit, "()[]. ")) {
	case "", "C", "°C", "ºC", "° C", "DEG C", "DEGC", "DEGREES C", "CELSIUS":
	case "K", "KELVIN":
		v -= 273.15
	default:
		return 0, false
	}
	return v, v >= -273.15 && v < 5000
}

// bandwidth gives a resolution in nm: one number in the unit of the abscissa,
// or one that names nm. A width in 1/cm is no single width in nm.
func bandwidth(text, xunits string) (float64, bool) {
	v, unit, ok := quantity(text)
	if !ok || !(v > 0) {
		return 0, false
	}
	if unit == "" {
		unit = xunits
	}
	factor, known := abscissaUnit(unit)
	if !known || factor == 0 {
		return 0, false
	}
	return v * factor, v*factor < 1000
}

// pH as a word with its number, in running text.
var acidityText = regexp.MustCompile(`\bpH\s*(?:=|:|of|is|value)?\s*(-?\d{1,2}(?:[.,]\d+)?)`)

// pH as the variable of a page.
var acidityPage = regexp.MustCompile(`^[pP][hH]\s*=\s*(-?\d{1,2}(?:\.\d+)?)$`)

// acidity takes the pH of a block: from a label of that name, or from the
// record of the solvent, the only place the standard has for it, or from the
// page of NTUPLES named by its pH. Two different values are none.
func (m *maker) acidity(b *Block, t *Table, s *parse.Scan) {
	var values []float64
	line := 0
	take := func(text string, at int) {
		v, err := strconv.ParseFloat(strings.Replace(text, ",", ".", 1), 64)
		if err != nil || v < -2 || v > 16 {
			m.note(at, "pH not read: %s", parse.Show(text))
			return
		}
		line = at
		for _, o := range values {
			if o == v {
				return
			}
		}
		values = append(values, v)
	}
	for i := range b.Records {
		r := &b.Records[i]
		switch strings.TrimLeft(r.key, "$.") {
		case "PH", "PHVALUE", "PHMEASURED", "SAMPLEPH":
			v, unit, ok := quantity(r.Value)
			if !ok || unit != "" && !strings.EqualFold(unit, "pH") {
				m.note(r.Line, "pH not read: %s", parse.Show(r.Value))
				continue
			}
			take(strconv.FormatFloat(v, 'g', -1, 64), r.Line)
		case "SOLVENTNAME":
			for _, g := range acidityText.FindAllStringSubmatch(r.Value, 4) {
				take(g[1], r.Line)
			}
		}
	}
	if g := acidityPage.FindStringSubmatch(t.Page); g != nil {
		take(g[1], t.Line)
	}
	switch len(values) {
	case 0:
	case 1:
		s.PH = values[0]
	default:
		m.note(line, "several values of pH; none is taken")
	}
}

// moment reads LONG DATE, else DATE with TIME. The text stays in Meta.
func (m *maker) moment(b *Block) (time.Time, bool) {
	zone := m.opt.Zone
	if zone == nil {
		zone = time.UTC
	}
	for _, key := range [...]string{"LONGDATE", "DATE"} {
		v := b.get(key)
		if v == "" {
			continue
		}
		t, zoned, why := when(v, b.get("TIME"), zone)
		if why != "" {
			m.note(b.at(key), "%s %s: %s", key, parse.Show(v), why)
		}
		if !t.IsZero() {
			return t, zoned
		}
	}
	return time.Time{}, false
}

var (
	ymd    = regexp.MustCompile(`^(\d{2,4})[-/.](\d{1,2})[-/.](\d{1,2})$`)
	other  = regexp.MustCompile(`^(\d{1,2})[-/.](\d{1,2})[-/.](\d{4}|\d{2})$`)
	clock  = regexp.MustCompile(`(\d{1,2}:\d{2}(?::\d{2}(?:\.\d+)?)?)(\s*[AaPp][Mm]\b)?`)
	offset = regexp.MustCompile(`(?:\(?(?:GMT|UTC)?\s*([-+])(\d{2}):?(\d{2})\)?|(Z|GMT|UTC))$`)
)

// when reads a date with the time of day and offset that stand beside it.
// why says what is unusual about it, or why the moment is zero.
func when(text, clockText string, zone *time.Location) (t time.Time, zoned bool, why string) {
	s := strings.TrimSpace(text)
	hour := clock.FindString(s)
	if hour != "" {
		i := strings.Index(s, hour)
		behind := strings.TrimSpace(s[i+len(hour):])
		if g := offset.FindStringSubmatch(behind); g != nil {
			zone, zoned = shift(g), true
			behind = strings.TrimSpace(strings.TrimSuffix(behind, g[0]))
		}
		s = strings.Trim(strings.TrimSpace(s[:i])+" "+behind, " ,;T")
	} else if hour = clock.FindString(clockText); hour == "" {
		return time.Time{}, false, "no time of day"
	} else if g := offset.FindStringSubmatch(strings.TrimSpace(clockText)); g != nil {
		zone, zoned = shift(g), true
	}
	day, why := date(s)
	if day.IsZero() {
		return day, false, why
	}
	h, err := timeOfDay(hour)
	if err != nil {
		return time.Time{}, false, "no time of day: " + parse.Show(hour)
	}
	return time.Date(day.Year(), day.Month(), day.Day(), h.Hour(), h.Minute(), h.Second(), h.Nanosecond(), zone), zoned, why
}

// shift makes a zone of the parts of an offset.
func shift(g []string) *time.Location {
	if g[4] != "" {
		return time.UTC
	}
	h, _ := strconv.Atoi(g[2])
	mins, _ := strconv.Atoi(g[3])
	sec := 3600*h + 60*mins
	if g[1] == "-" {
		sec = -sec
	}
	return time.FixedZone("", sec)
}

func timeOfDay(s string) (t time.Time, err error) {
	s = strings.ToUpper(strings.ReplaceAll(s, " ", ""))
	for _, layout := range [...]string{"15:04:05", "15:04", "3:04:05PM", "3:04PM"} {
		if t, err = time.Parse(layout, s); err == nil {
			return t, nil
		}
	}
	return t, err
}

// date reads a day. Published is YY/MM/DD or YYYY/MM/DD; other orders count
// where only one of them is a date at all.
func date(s string) (day time.Time, why string) {
	for _, layout := range [...]string{"2 Jan 2006", "2-Jan-2006", "2 January 2006", "Jan 2 2006", "Jan 2, 2006", "January 2, 2006", "Mon Jan 2 2006", "Monday, 2 January 2006", "02-Jan-06"} {
		if t, err := time.Parse(layout, strings.Join(strings.Fields(s), " ")); err == nil {
			return t, ""
		}
	}
	if g := ymd.FindStringSubmatch(s); g != nil {
		y, _ := strconv.Atoi(g[1])
		switch len(g[1]) {
		case 2:
			if y += 1900; y < 1970 {
				y += 100
			}
		case 3: // years since 1900, as some writers count
			if y += 1900; y < 2000 || y > 2099 {
				return time.Time{}, "no date"
			}
			why = "the year is counted from 1900"
		}
		if t, ok := civil(y, g[2], g[3]); ok {
			return t, why
		}
	}
	g := other.FindStringSubmatch(s)
	if g == nil {
		return time.Time{}, "no date in a known form"
	}
	y, _ := strconv.Atoi(g[3])
	if len(g[3]) == 2 {
		if y += 1900; y < 1970 {
			y += 100
		}
	}
	a, dm := civil(y, g[2], g[1])
	c, md := civil(y, g[1], g[2])
	switch {
	case dm && md && !a.Equal(c):
		return time.Time{}, "day and month cannot be told apart"
	case dm:
		return a, "not in the order of the standard"
	case md:
		return c, "not in the order of the standard"
	}
	return time.Time{}, "no date"
}

// civil makes a day of a year, a month and a day that exist.
func civil(y int, month, day string) (time.Time, bool) {
	mo, _ := strconv.Atoi(month)
	dd, _ := strconv.Atoi(day)
	t := time.Date(y, time.Month(mo), dd, 0, 0, 0, 0, time.UTC)
	return t, mo >= 1 && mo <= 12 && t.Day() == dd && t.Month() == time.Month(mo)
}
