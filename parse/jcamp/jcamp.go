// Package jcamp reads JCAMP-DX files of one-dimensional spectra (McDonald and
// Wilks, Appl. Spectrosc. 42 (1988) 151; Lampen et al., Pure Appl. Chem. 71
// (1999) 1549).
package jcamp

import (
	"bytes"
	"fmt"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"pkvigil/parse"
)

// block is one data block.
type block struct {
	labels map[string]string
	order  []parse.Field
	line   int // of its TITLE
	xy     [][]byte
	xyLine int
	form   string // text after ##XYDATA= or ##XYPOINTS=
	kind   string // "XYDATA", "XYPOINTS", ""
	ended  bool
}

// Read reads every data block of a file as one scan.
func Read(name string, data []byte, opt parse.Options) (*parse.Content, error) {
	blocks, complete, err := split(name, data)
	if err != nil {
		return nil, err
	}
	c := &parse.Content{Format: "jcamp-dx", Encoding: "utf-8", Complete: complete}
	for _, b := range blocks {
		if strings.EqualFold(strings.TrimSpace(b.labels["DATATYPE"]), "LINK") {
			continue
		}
		s, remarks, err := b.scan(name, opt)
		if err != nil {
			return nil, err
		}
		c.Scans = append(c.Scans, s)
		c.Remarks = append(c.Remarks, remarks...)
	}
	if len(c.Scans) == 0 {
		return nil, &parse.Error{File: name, Found: "no data block", Expected: "a block with XYDATA or XYPOINTS"}
	}
	if !complete {
		return nil, &parse.Error{File: name, Found: "a file without its closing ##END=", Expected: "as many ##END= as ##TITLE=", Remedy: "the file is cut; export it again"}
	}
	return c, nil
}

func normal(label string) string {
	return strings.Map(func(r rune) rune {
		switch r {
		case ' ', '\t', '-', '/', '_':
			return -1
		}
		return r
	}, strings.ToUpper(label))
}

// split cuts a file into blocks; every TITLE has its END when complete.
func split(name string, data []byte) (blocks []*block, complete bool, err error) {
	data = bytes.TrimPrefix(data, []byte("\xEF\xBB\xBF"))
	data = bytes.ReplaceAll(data, []byte("\r\n"), []byte("\n"))
	data = bytes.ReplaceAll(data, []byte("\r"), []byte("\n"))
	var stack []*block
	table := false
	n := 0
	for raw := range bytes.SplitSeq(data, []byte("\n")) {
		n++
		line := raw
		if i := bytes.Index(line, []byte("$$")); i >= 0 {
			line = line[:i]
		}
		t := bytes.TrimSpace(line)
		if !bytes.HasPrefix(t, []byte("##")) {
			if table && len(stack) > 0 && len(t) > 0 {
				b := stack[len(stack)-1]
				if len(b.xy) == 0 {
					b.xyLine = n
				}
				b.xy = append(b.xy, t)
			}
			continue
		}
		table = false
		label, value, ok := strings.Cut(string(t[2:]), "=")
		if !ok {
			return nil, false, &parse.Error{File: name, Line: n, Found: parse.Show(string(t)), Expected: "##LABEL= value"}
		}
		key, value := normal(label), strings.TrimSpace(value)
		switch key {
		case "TITLE":
			b := &block{labels: map[string]string{"TITLE": value}, line: n}
			blocks, stack = append(blocks, b), append(stack, b)
			continue
		case "END":
			if len(stack) == 0 {
				return nil, false, &parse.Error{File: name, Line: n, Found: "##END= without a ##TITLE=", Expected: "one ##END= per block"}
			}
			stack[len(stack)-1].ended = true
			stack = stack[:len(stack)-1]
			continue
		}
		if len(stack) == 0 {
			continue
		}
		b := stack[len(stack)-1]
		switch key {
		case "XYDATA", "XYPOINTS":
			b.kind, b.form, table = key, value, true
		default:
			b.labels[key] = value
			b.order = append(b.order, parse.Field{Key: strings.TrimSpace(label), Value: value})
		}
	}
	return blocks, len(stack) == 0 && len(blocks) > 0, nil
}

func (b *block) number(name, key string) (float64, error) {
	v, ok := b.labels[key]
	if !ok {
		return 0, &parse.Error{File: name, Line: b.line, Field: key, Found: "nothing", Expected: "a number"}
	}
	f, err := strconv.ParseFloat(strings.Fields(v + " x")[0], 64)
	if err != nil || math.IsNaN(f) || math.IsInf(f, 0) {
		return 0, &parse.Error{File: name, Line: b.line, Field: key, Found: parse.Show(v), Expected: "a number"}
	}
	return f, nil
}

// scan turns a block into a scan in nm and absorbance.
func (b *block) scan(name string, opt parse.Options) (parse.Scan, []parse.Remark, error) {
	s := parse.Scan{Label: b.labels["TITLE"], TemperatureC: math.NaN(), PH: math.NaN(), Decimals: -1, Meta: b.order, Instrument: b.labels["SPECTROMETERDATASYSTEM"]}
	if b.kind == "" {
		return s, nil, &parse.Error{File: name, Line: b.line, Field: "XYDATA", Found: "no table", Expected: "XYDATA or XYPOINTS"}
	}
	xs, ys, err := b.decode(name)
	if err != nil {
		return s, nil, err
	}
	if err := abscissa(name, b, xs); err != nil {
		return s, nil, err
	}
	var remarks []parse.Remark
	if len(xs) > 1 && xs[0] > xs[len(xs)-1] {
		slices.Reverse(xs)
		slices.Reverse(ys)
		remarks = append(remarks, parse.Remark{Line: b.line, Text: "descending abscissae put in ascending order"})
	}
	if s.Scale, err = ordinate(name, b, ys); err != nil {
		return s, nil, err
	}
	s.WavelengthNM, s.Absorbance = xs, ys
	if f, err := b.number(name, "YFACTOR"); err == nil && f < 1 && s.Scale == "absorbance" {
		s.Decimals = max(0, int(math.Round(-math.Log10(f))))
	}
	if v, err := b.number(name, "PATHLENGTH"); err == nil {
		s.PathMM = 10 * v
	}
	if v, err := b.number(name, "TEMPERATURE"); err == nil {
		s.TemperatureC = v
	}
	if v, err := b.number(name, "RESOLUTION"); err == nil {
		s.BandwidthNM = v
	}
	s.Measured, s.Zoned = b.moment(opt.Zone)
	return s, remarks, nil
}

func abscissa(name string, b *block, x []float64) error {
	switch u := normal(b.labels["XUNITS"]); u {
	case "NANOMETERS", "NANOMETRES", "NM":
	case "MICROMETERS", "MICROMETRES", "UM":
		for i := range x {
			x[i] *= 1000
		}
	case "1CM", "CM1", "CM^1":
		for i := range x {
			x[i] = 1e7 / x[i]
		}
	default:
		return &parse.Error{File: name, Line: b.line, Field: "XUNITS", Found: parse.Show(b.labels["XUNITS"]), Expected: "NANOMETERS, MICROMETERS or 1/CM"}
	}
	return nil
}

func ordinate(name string, b *block, y []float64) (string, error) {
	switch u := normal(b.labels["YUNITS"]); u {
	case "ABSORBANCE", "A", "ABS":
		return "absorbance", nil
	case "TRANSMITTANCE", "T", "%TRANSMITTANCE", "PERCENTTRANSMITTANCE", "%T":
		scale, word := 1.0, "transmittance"
		if strings.Contains(u, "%") || strings.Contains(u, "PERCENT") {
			scale, word = 100, "percent transmittance"
		}
		for i := range y {
			if y[i] /= scale; y[i] > 0 {
				y[i] = -math.Log10(y[i])
			} else {
				y[i] = math.NaN()
			}
		}
		return word, nil
	}
	return "", &parse.Error{File: name, Line: b.line, Field: "YUNITS", Found: parse.Show(b.labels["YUNITS"]), Expected: "ABSORBANCE or TRANSMITTANCE"}
}

func (b *block) moment(zone *time.Location) (time.Time, bool) {
	if zone == nil {
		zone = time.UTC
	}
	if v := b.labels["LONGDATE"]; v != "" {
		for _, l := range []string{"2006/01/02 15:04:05 -0700", "2006/01/02 15:04:05-0700"} {
			if t, err := time.Parse(l, v); err == nil {
				return t, true
			}
		}
		for _, l := range []string{"2006/01/02 15:04:05", "2006/01/02 15:04", "2006/01/02"} {
			if t, err := time.ParseInLocation(l, v, zone); err == nil {
				return t, false
			}
		}
	}
	for _, l := range []string{"06/01/02 15:04:05", "2006/01/02 15:04:05"} {
		if t, err := time.ParseInLocation(l, b.labels["DATE"]+" "+b.labels["TIME"], zone); err == nil {
			return t, false
		}
	}
	return time.Time{}, false
}

// decode reads the table: x from FIRSTX and LASTX, y times YFACTOR; the x at
// the beginning of each line and the repeated ordinate of difference form are
// checks.
func (b *block) decode(name string) (x, y []float64, err error) {
	npts, err := b.number(name, "NPOINTS")
	if err != nil {
		return nil, nil, err
	}
	yf, err := b.number(name, "YFACTOR")
	if err != nil {
		return nil, nil, err
	}
	xf, err := b.number(name, "XFACTOR")
	if err != nil {
		return nil, nil, err
	}
	if b.kind == "XYPOINTS" {
		return b.points(name, xf, yf, int(npts))
	}
	first, err := b.number(name, "FIRSTX")
	if err != nil {
		return nil, nil, err
	}
	last, err := b.number(name, "LASTX")
	if err != nil {
		return nil, nil, err
	}
	n := int(npts)
	if n < 2 || n > 10_000_000 {
		return nil, nil, &parse.Error{File: name, Line: b.line, Field: "NPOINTS", Found: fmt.Sprint(npts), Expected: "2 or more"}
	}
	step := (last - first) / float64(n-1)
	diff := false
	for i, line := range b.xy {
		lx, vals, d, err := asdf(line)
		if err != nil {
			return nil, nil, &parse.Error{File: name, Line: b.xyLine + i, Field: "XYDATA", Found: parse.Show(string(line)), Expected: "numbers in one of the ASDF forms", Err: err}
		}
		if diff && len(vals) > 0 { // the last line ended in difference form: its last ordinate is repeated here as a check
			if want := y[len(y)-1]; vals[0] != want {
				return nil, nil, &parse.Error{File: name, Line: b.xyLine + i, Field: "XYDATA", Found: fmt.Sprintf("check ordinate %g", vals[0]), Expected: fmt.Sprintf("%g", want), Remedy: "the table is damaged; export it again"}
			}
			vals = vals[1:]
		}
		at := first + float64(len(y))*step
		if diff || d {
			_ = at
		}
		if math.Abs(lx*xf-at) > math.Abs(step)*0.51+1e-9 && !(diff && math.Abs(lx*xf-(at-step)) <= math.Abs(step)*0.51+1e-9) {
			return nil, nil, &parse.Error{File: name, Line: b.xyLine + i, Field: "XYDATA", Found: fmt.Sprintf("abscissa %g", lx*xf), Expected: fmt.Sprintf("%g", at), Remedy: "a line is missing or doubled; export the file again"}
		}
		y = append(y, vals...)
		diff = d
		if len(y) > n {
			break
		}
	}
	if len(y) != n {
		return nil, nil, &parse.Error{File: name, Line: b.xyLine + len(b.xy) - 1, Field: "NPOINTS", Found: fmt.Sprintf("%d ordinates", len(y)), Expected: fmt.Sprintf("%d", n), Remedy: "the file is cut; export it again"}
	}
	x = make([]float64, n)
	for i := range y {
		x[i] = first + float64(i)*step
		y[i] *= yf
	}
	return x, y, nil
}

func (b *block) points(name string, xf, yf float64, n int) (x, y []float64, err error) {
	for i, line := range b.xy {
		f := strings.FieldsFunc(string(line), func(r rune) bool { return r == ' ' || r == '\t' || r == ',' || r == ';' })
		if len(f)%2 != 0 {
			return nil, nil, &parse.Error{File: name, Line: b.xyLine + i, Field: "XYPOINTS", Found: parse.Show(string(line)), Expected: "pairs x, y"}
		}
		for j := 0; j < len(f); j += 2 {
			a, err1 := strconv.ParseFloat(f[j], 64)
			c, err2 := strconv.ParseFloat(f[j+1], 64)
			if err1 != nil || err2 != nil {
				return nil, nil, &parse.Error{File: name, Line: b.xyLine + i, Field: "XYPOINTS", Found: parse.Show(string(line)), Expected: "numbers"}
			}
			x, y = append(x, a*xf), append(y, c*yf)
		}
	}
	if len(x) != n {
		return nil, nil, &parse.Error{File: name, Line: b.line, Field: "NPOINTS", Found: fmt.Sprint(len(x)), Expected: fmt.Sprint(n)}
	}
	return x, y, nil
}

// asdf reads one line: its abscissa and its ordinates; diff says that the
// line ended in difference form.
func asdf(line []byte) (x float64, y []float64, diff bool, err error) {
	i := 0
	x, i, err = affn(line, i)
	if err != nil {
		return 0, nil, false, err
	}
	last, delta := 0.0, 0.0
	for i < len(line) {
		c := line[i]
		switch {
		case c == ' ' || c == '\t' || c == ',' || c == ';':
			i++
		case c == '?':
			y, last, diff, i = append(y, math.NaN()), math.NaN(), false, i+1
		case c >= '@' && c <= 'I' || c >= 'a' && c <= 'i':
			var v float64
			if v, i, err = pseudo(line, i, '@', 'a'); err != nil {
				return 0, nil, false, err
			}
			y, last, diff = append(y, v), v, false
		case c == '%' || c >= 'J' && c <= 'R' || c >= 'j' && c <= 'r':
			if delta, i, err = pseudo(line, i, 'I', 'j'); err != nil {
				return 0, nil, false, err
			}
			last += delta
			y, diff = append(y, last), true
		case c >= 'S' && c <= 'Z' || c == 's':
			var n int
			if n, i, err = count(line, i); err != nil {
				return 0, nil, false, err
			}
			if len(y) == 0 || n > 1_000_000 {
				return 0, nil, false, fmt.Errorf("a repeat count of %d", n)
			}
			for range n - 1 {
				if diff {
					last += delta
				}
				y = append(y, last)
			}
		default:
			if last, i, err = affn(line, i); err != nil {
				return 0, nil, false, err
			}
			y, diff = append(y, last), false
		}
	}
	return x, y, diff, nil
}

// affn reads a plain number.
func affn(b []byte, i int) (float64, int, error) {
	start := i
	if i < len(b) && (b[i] == '+' || b[i] == '-') {
		i++
	}
	for i < len(b) && (b[i] >= '0' && b[i] <= '9' || b[i] == '.') {
		i++
	}
	if i+1 < len(b) && (b[i] == 'E' || b[i] == 'e') && (b[i+1] == '+' || b[i+1] == '-') {
		i += 2
		for i < len(b) && b[i] >= '0' && b[i] <= '9' {
			i++
		}
	}
	v, err := strconv.ParseFloat(string(b[start:i]), 64)
	if err != nil {
		return 0, i, fmt.Errorf("%q is not a number", b[start:min(len(b), start+12)])
	}
	return v, i, nil
}

// pseudo reads a number whose first character stands for sign and digit. zero
// is the character of +0 (or the one before +1), one that of -1.
func pseudo(b []byte, i int, zero, one byte) (float64, int, error) {
	c, v, sign := b[i], 0.0, 1.0
	switch {
	case c == '%':
	case c >= 'a':
		v, sign = float64(c-one+1), -1
	default:
		v = float64(c - zero)
	}
	for i++; i < len(b) && b[i] >= '0' && b[i] <= '9'; i++ {
		v = 10*v + float64(b[i]-'0')
	}
	if i < len(b) && b[i] == '.' {
		scale := 0.1
		for i++; i < len(b) && b[i] >= '0' && b[i] <= '9'; i++ {
			v += scale * float64(b[i]-'0')
			scale /= 10
		}
	}
	return sign * v, i, nil
}

// count reads a repeat count: S..Z are 1..8, s is 9.
func count(b []byte, i int) (int, int, error) {
	v := 9
	if b[i] != 's' {
		v = int(b[i]-'S') + 1
	}
	for i++; i < len(b) && b[i] >= '0' && b[i] <= '9'; i++ {
		if v > 1_000_000 {
			return 0, i, fmt.Errorf("a repeat count above a million")
		}
		v = 10*v + int(b[i]-'0')
	}
	return v, i, nil
}
