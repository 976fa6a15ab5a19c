package brief

import "math"

// A frame is the field of a picture with its two axes.
type frame struct {
	*pen
	left, right, top, bottom float64 // paper
	x0, x1, y0, y1           float64 // numbers
}

// A span gathers the range of what is to be drawn.
type span struct{ lo, hi float64 }

func nothing() span { return span{math.Inf(1), math.Inf(-1)} }

func (s *span) take(v ...float64) {
	for _, x := range v {
		if known(x) {
			s.lo, s.hi = math.Min(s.lo, x), math.Max(s.hi, x)
		}
	}
}

func (s span) empty() bool { return s.lo > s.hi }

// widened adds air at both ends; a single value gets a range around it.
func (s span) widened(share float64) span {
	if s.empty() {
		return span{0, 1}
	}
	d := (s.hi - s.lo) * share
	if s.hi-s.lo <= 1e-9*math.Max(math.Abs(s.lo), math.Abs(s.hi)) || s.hi-s.lo < 1e-200 {
		d = math.Max(1e-9, 0.02*math.Max(math.Abs(s.lo), math.Abs(s.hi)))
	}
	return span{math.Max(-1e290, s.lo-d), math.Min(1e290, s.hi+d)}
}

// newFrame lays the field into a picture: room on the left for numbers and
// name of the vertical axis, below for those of the other.
func newFrame(p *pen, x, y span) *frame {
	left := 44.0
	for _, t := range ticks(y.lo, y.hi, 6) {
		left = math.Max(left, 24+letters(t.label))
	}
	return &frame{pen: p, left: left, right: p.w - 10, top: 12, bottom: p.h - 36, x0: x.lo, x1: x.hi, y0: y.lo, y1: y.hi}
}

func (f *frame) px(v float64) float64 { return f.left + (v-f.x0)/(f.x1-f.x0)*(f.right-f.left) }
func (f *frame) py(v float64) float64 { return f.bottom - (v-f.y0)/(f.y1-f.y0)*(f.bottom-f.top) }

func (f *frame) at(x, y float64) point { return point{f.px(x), f.py(y)} }

// rule draws the vertical axis: faint lines across, numbers, name.
func (f *frame) rule(name string) {
	for _, t := range ticks(f.y0, f.y1, 6) {
		y := f.py(t.at)
		f.line("grid", f.left, y, f.right, y)
		f.text("num", "end", f.left-5, y+3.5, t.label)
	}
	f.line("axis", f.left, f.top, f.left, f.bottom)
	f.upright(11, (f.top+f.bottom)/2, name)
}

// foot draws the horizontal axis.
func (f *frame) foot(name string, marks []tick) {
	f.line("axis", f.left, f.bottom, f.right, f.bottom)
	for _, t := range marks {
		x := f.px(t.at)
		f.line("axis", x, f.bottom, x, f.bottom+4)
		f.text("num", "middle", math.Min(x, f.w-letters(t.label)/2-1), f.bottom+15, t.label)
	}
	f.text("name", "middle", (f.left+f.right)/2, f.h-5, name)
}

// letters estimates the width of a label in drawing units.
func letters(s string) float64 { return 6.1 * float64(len([]rune(s))) }

// short cuts a label to n letters.
func short(s string, n int) string {
	r := []rune(s)
	if len(r) <= n {
		return s
	}
	return string(r[:max(1, n-1)]) + "…"
}

// tag writes a label beside a place, on the side where there is room.
func (f *frame) tag(class string, x, y float64, s string) {
	y = math.Max(f.top+9, math.Min(f.bottom-3, y))
	if x+6+letters(s) > f.right {
		f.text(class, "end", x-6, y, s)
		return
	}
	f.text(class, "start", x+6, y, s)
}
