package brief

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"
)

// nightPlaces puts nights on an axis of days, or in their order where one is
// not a date.
func nightPlaces(nights []string) (at []float64, dates bool) {
	at = make([]float64, len(nights))
	for i, n := range nights {
		t, err := time.Parse(time.DateOnly, n)
		if err != nil {
			for j := range at {
				at[j] = float64(j)
			}
			return at, false
		}
		at[i] = float64(daysOf(t))
	}
	return at, true
}

// rules takes apart the flags of a night, which come as one list in words.
func rules(flags string) []string {
	var out []string
	for _, part := range strings.Split(flags, ", ") {
		for _, r := range strings.Split(part, " and ") {
			if r = strings.TrimSpace(r); r != "" && !slices.Contains(out, r) {
				out = append(out, r)
			}
		}
	}
	return out
}

// A flagged is one rule of a chart with the nights it flags; rules have letters
// in the order in which they appear.
type flagged struct {
	Letter, Words, Nights string
	first, last           string
	count                 int
}

// flagKey lists the rules that flag nights of a chart, with their letters.
func flagKey(c *Chart) []flagged {
	var out []flagged
	for i := range min(len(c.Flags), len(c.Nights)) {
		for _, r := range rules(c.Flags[i]) {
			at := slices.IndexFunc(out, func(f flagged) bool { return f.Words == r })
			if at < 0 {
				at = len(out)
				letter := fmt.Sprint(at + 1)
				if at < 26 {
					letter = string(rune('a' + at))
				}
				out = append(out, flagged{Letter: letter, Words: r, first: c.Nights[i]})
			}
			out[at].last, out[at].count = c.Nights[i], out[at].count+1
		}
	}
	for i := range out {
		f := &out[i]
		switch f.Nights = f.first; {
		case f.count == 2:
			f.Nights += ", " + f.last
		case f.count > 2:
			f.Nights += fmt.Sprintf(" to %s, %d nights", f.last, f.count)
		}
	}
	return out
}

// flagLabel is the letters of one night's flags.
func flagLabel(key []flagged, flags string) string {
	s := ""
	for _, k := range key {
		if slices.Contains(rules(flags), k.Words) {
			s += k.Letter
		}
	}
	return s
}

// controlRange is the vertical range: limits, weighted mean and most values. A
// few values far outside do not press the rest flat; they are drawn as arrows.
func controlRange(c *Chart) span {
	y := nothing()
	y.take(c.Low, c.High, c.Centre)
	w := y.hi - y.lo
	base := span{y.lo - w, y.hi + w}
	y.take(c.EWMA...)
	y.take(c.Values...)
	if sorted := slices.DeleteFunc(slices.Clone(c.Values), func(v float64) bool { return !known(v) }); w > 0 && known(w) && len(sorted) > 0 {
		slices.Sort(sorted)
		aside := len(sorted) / 20
		base.take(c.EWMA...)
		base.take(sorted[aside], sorted[len(sorted)-1-aside])
		y.lo, y.hi = math.Max(y.lo, base.lo), math.Min(y.hi, base.hi)
	}
	if known(c.Assigned) && !y.empty() {
		// An assigned value far away is said below the picture, not drawn.
		if w := y.hi - y.lo; c.Assigned > y.lo-w && c.Assigned < y.hi+w {
			y.take(c.Assigned)
		}
	}
	return y.widened(0.08)
}

// controlPicture draws a control chart: nightly values, weighted mean, centre,
// the space beyond the action limits, flagged nights, and the interval in which
// a case began. It is "" without a night.
func controlPicture(id string, c *Chart) string {
	at, dates := nightPlaces(c.Nights)
	if len(at) == 0 {
		return ""
	}
	x := nothing()
	x.take(at...)
	p := draw(id, "Control chart, "+c.Title, controlWords(c), 360, 222)
	f := newFrame(p, span{x.lo - 0.7, x.hi + 0.7}, controlRange(c))
	f.rule(c.axis())
	f.beyond(c.Low, c.High)
	f.onset(c, at, dates)
	f.nightFoot(c, x, dates)
	f.level("centre", c.Centre)
	f.level("limit", c.Low)
	f.level("limit", c.High)
	f.level("assigned", c.Assigned)
	f.curve("c mean", f.points(at, f.inside(c.EWMA)))
	f.nightMarks(c, at)
	return p.svg()
}

// unit is the unit as written after a number: a pKa is a bare number, though
// it is counted in units of pH.
func (c *Chart) unit() string {
	if c.Unit == "1" || c.Unit == "pH" && strings.HasSuffix(c.Title, "pKa") {
		return ""
	}
	return c.Unit
}

// axis names the vertical axis: what is charted and its unit, as far as there
// is room.
func (c *Chart) axis() string {
	_, name, _ := strings.Cut(c.Title, ": ")
	switch u := c.unit(); {
	case name == "" && u == "":
		return "value"
	case u == "":
		return short(name, 30)
	case name == "" || len([]rune(name+u)) > 27:
		return u
	default:
		return name + " / " + u
	}
}

// number writes a value with the decimals that the limits of its chart call for.
func (c *Chart) number(v float64) string {
	if w := c.High - c.Low; known(w) && w > 1e-4 && w < 1e6 && known(v) && math.Abs(v) < 1e9 {
		return fixed(v, decimals(w/4))
	}
	return general(v)
}

// controlWords describes a chart for people who hear it.
func controlWords(c *Chart) string {
	n := 0
	last := math.NaN()
	for _, v := range c.Values {
		if known(v) {
			n, last = n+1, v
		}
	}
	s := fmt.Sprintf("%d nights from %s to %s, %d with a value", len(c.Nights), c.Nights[0], c.Nights[len(c.Nights)-1], n)
	if known(last) {
		s += ", the last " + c.number(last)
	}
	if known(c.Centre) {
		s += "; centre " + c.number(c.Centre)
	}
	if known(c.Low) && known(c.High) {
		s += "; action limits " + c.number(c.Low) + " and " + c.number(c.High)
	}
	if k := flagKey(c); len(k) > 0 {
		s += fmt.Sprintf("; %d kinds of flag, listed below", len(k))
	}
	if c.OnsetLow != "" {
		s += "; onset between " + c.OnsetLow + " and " + c.OnsetHigh
	}
	return s + "."
}

// general writes a number to five significant digits.
func general(v float64) string {
	if !known(v) {
		return "\u2013"
	}
	if v == 0 {
		return "0"
	}
	e := int(math.Floor(math.Log10(math.Abs(v))))
	if e < -4 || e > 7 {
		return minus(strings.Replace(fmt.Sprintf("%.2e", v), "e-0", "e\u2212", 1))
	}
	return fixed(v, min(max(4-e, 0), 8))
}

// level draws a straight line across, if it is in the field.
func (f *frame) level(class string, v float64) {
	if known(v) && v >= f.y0 && v <= f.y1 {
		f.line(class, f.left, f.py(v), f.right, f.py(v))
	}
}

// beyond hatches what lies outside the action limits.
func (f *frame) beyond(low, high float64) {
	if known(high) && high < f.y1 {
		f.rect("beyond", f.left, f.top, f.right-f.left, f.py(math.Max(high, f.y0))-f.top)
	}
	if known(low) && low > f.y0 {
		y := f.py(math.Min(low, f.y1))
		f.rect("beyond", f.left, y, f.right-f.left, f.bottom-y)
	}
}

// onset shades the interval in which a case began.
func (f *frame) onset(c *Chart, at []float64, dates bool) {
	if c.OnsetLow == "" {
		return
	}
	low, high := f.night(c, c.OnsetLow, at, dates), f.night(c, c.OnsetHigh, at, dates)
	if !known(low) || !known(high) {
		return
	}
	a := math.Max(f.left, f.px(math.Min(low, high)-0.5))
	b := math.Min(f.right, f.px(math.Max(low, high)+0.5))
	if b <= a {
		return
	}
	f.rect("onset", a, f.top, b-a, f.bottom-f.top)
	f.line("began", a, f.top, b, f.top)
	f.line("began", a, f.top, a, f.top+6)
	f.line("began", b, f.top, b, f.top+6)
	if b+3+letters("began") > f.right {
		f.text("note halo", "end", a-3, f.top+10, "began")
		return
	}
	f.text("note halo", "start", b+3, f.top+10, "began")
}

func (f *frame) night(c *Chart, night string, at []float64, dates bool) float64 {
	if dates {
		if t, err := time.Parse(time.DateOnly, night); err == nil {
			return float64(daysOf(t))
		}
		return math.NaN()
	}
	for i, n := range c.Nights {
		if n == night {
			return at[i]
		}
	}
	return math.NaN()
}

func (f *frame) nightFoot(c *Chart, x span, dates bool) {
	first, last := c.Nights[0], c.Nights[len(c.Nights)-1]
	if !dates {
		f.foot("nights "+short(first, 16)+" to "+short(last, 16), nil)
		return
	}
	name := "night " + first
	if first != last {
		name = "nights " + first + " to " + last
	}
	f.foot(name, dayTicks(x.lo, x.hi, 6))
}

// inside makes what is outside the field a gap, so that no line leaves it.
func (f *frame) inside(v []float64) []float64 {
	out := make([]float64, len(v))
	for i, y := range v {
		out[i] = y
		if !(y >= f.y0 && y <= f.y1) {
			out[i] = math.NaN()
		}
	}
	return out
}

// nightMarks draws the values: rings, flagged ones full diamonds with their
// letter, those outside the field arrows at its edge with their value.
func (f *frame) nightMarks(c *Chart, at []float64) {
	key := flagKey(c)
	r := math.Max(1.8, math.Min(3.4, (f.right-f.left)/float64(len(at))/2.2))
	lettered, before := math.Inf(-1), ""
	var labels []func() // written last, above the marks
	for i, v := range c.Values[:min(len(c.Values), len(at))] {
		flag := ""
		if i < len(c.Flags) {
			flag = c.Flags[i]
		}
		if !known(v) {
			if flag != "" {
				f.text("flag", "middle", f.px(at[i]), f.bottom-4, flagLabel(key, flag))
			}
			continue
		}
		q, label := f.nightMark(at[i], v, r, flag != ""), flagLabel(key, flag)
		far := v > f.y1 || v < f.y0
		// Where nights are too close for letters of their own, those of the first speak for the next; the key below has all.
		if half := letters(label) / 2; !far && (flag == "" || q.x-half < lettered || flag == before && q.x-half < lettered+30) {
			continue
		}
		if far {
			label = strings.TrimSpace(label + " " + c.number(v))
		}
		y := q.y - r - 5
		if y < f.top+8 {
			y = q.y + r + 12
		}
		half := letters(label) / 2
		labels = append(labels, func() {
			f.text("flag", "middle", math.Max(f.left+half, math.Min(f.right-half, q.x)), y, label)
		})
		lettered, before = q.x+half+1, flag
	}
	for _, write := range labels {
		write()
	}
}

// nightMark draws one value and says where.
func (f *frame) nightMark(at, v, r float64, flag bool) point {
	q := f.at(at, v)
	shape, class := rune(dot), "mark"
	if flag {
		shape, class, r = diamond, "mark bad full", r+1.2
	}
	switch {
	case v > f.y1:
		shape, q.y, r = upward, f.top+5, r+1
	case v < f.y0:
		shape, q.y, r = down, f.bottom-5, r+1
	}
	f.mark(shape, class, q.x, q.y, r)
	return q
}
