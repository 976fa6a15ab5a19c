package brief

import (
	"html"
	"math"
	"strconv"
	"strings"
)

// A point is a place on the paper, in drawing units.
type point struct{ x, y float64 }

// A pen writes one SVG picture. Colours, line styles and letters come from the
// style sheet of the page, so that a picture follows light, dark and print.
type pen struct {
	b    strings.Builder
	w, h float64
}

// draw begins a picture of w x h units; 360 units are a phone's width, so that
// letters are never smaller than drawn. The description is what the picture
// shows, for people who hear it.
func draw(id, title, about string, w, h float64) *pen {
	p := &pen{w: w, h: h}
	p.b.WriteString(`<svg class="pic" role="img" viewBox="0 0 ` + coord(w) + " " + coord(h) + `" aria-labelledby="` + id + `t ` + id + `d"><title id="` + id + `t">`)
	p.b.WriteString(html.EscapeString(title) + `</title><desc id="` + id + `d">` + html.EscapeString(about) + `</desc>`)
	return p
}

// svg ends the picture.
func (p *pen) svg() string { p.b.WriteString("</svg>"); return p.b.String() }

// coord writes a coordinate to a tenth of a unit, always finite.
func coord(v float64) string {
	if math.IsNaN(v) {
		return "0"
	}
	v = math.Round(math.Max(-9999, math.Min(9999, v))*10) / 10
	if v == 0 {
		return "0"
	}
	return strconv.FormatFloat(v, 'f', -1, 64)
}

func (p *pen) line(class string, x1, y1, x2, y2 float64) {
	p.b.WriteString(`<path class="` + class + `" d="M` + coord(x1) + " " + coord(y1) + "L" + coord(x2) + " " + coord(y2) + `"/>`)
}

func (p *pen) rect(class string, x, y, w, h float64) {
	p.b.WriteString(`<rect class="` + class + `" x="` + coord(x) + `" y="` + coord(y) + `" width="` + coord(math.Max(0, w)) + `" height="` + coord(math.Max(0, h)) + `"/>`)
}

// text writes letters; anchor is start, middle or end.
func (p *pen) text(class, anchor string, x, y float64, s string) {
	p.b.WriteString(`<text class="` + class + `" x="` + coord(x) + `" y="` + coord(y) + `" text-anchor="` + anchor + `">` + html.EscapeString(s) + `</text>`)
}

// upright writes the title of a vertical axis.
func (p *pen) upright(x, y float64, s string) {
	p.b.WriteString(`<text class="name" text-anchor="middle" transform="translate(` + coord(x) + " " + coord(y) + `) rotate(-90)">` + html.EscapeString(s) + `</text>`)
}

// Shapes of a mark.
const (
	dot     = 'o'
	diamond = 'd'
	square  = 's'
	cross   = 'x'
	upward  = '^'
	down    = 'v'
)

// mark draws a shape of radius r.
func (p *pen) mark(shape rune, class string, x, y, r float64) {
	c := coord
	d := ""
	switch shape {
	case dot:
		p.b.WriteString(`<circle class="` + class + `" cx="` + c(x) + `" cy="` + c(y) + `" r="` + c(r) + `"/>`)
		return
	case square:
		p.rect(class, x-r, y-r, 2*r, 2*r)
		return
	case diamond:
		d = "M" + c(x) + " " + c(y-r) + "L" + c(x+r) + " " + c(y) + "L" + c(x) + " " + c(y+r) + "L" + c(x-r) + " " + c(y) + "Z"
	case cross:
		d = "M" + c(x-r) + " " + c(y-r) + "L" + c(x+r) + " " + c(y+r) + "M" + c(x-r) + " " + c(y+r) + "L" + c(x+r) + " " + c(y-r)
	case upward:
		d = "M" + c(x) + " " + c(y-r) + "L" + c(x+r) + " " + c(y+r) + "L" + c(x-r) + " " + c(y+r) + "Z"
	case down:
		d = "M" + c(x) + " " + c(y+r) + "L" + c(x+r) + " " + c(y-r) + "L" + c(x-r) + " " + c(y-r) + "Z"
	}
	p.b.WriteString(`<path class="` + class + `" d="` + d + `"/>`)
}

// thinness is how far, in drawing units, a thinned curve may leave the one it
// stands for: less than the width of a line.
const thinness = 0.12

// curve draws points joined; one that is not finite is a gap, and one alone
// between gaps is a short stroke, so that it is seen.
func (p *pen) curve(class string, pts []point) {
	d := p.strokes(pts)
	if d != "" {
		p.b.WriteString(`<path class="` + class + `" d="` + d + `"/>`)
	}
}

func (p *pen) strokes(pts []point) string {
	var d strings.Builder
	for _, run := range runs(pts) {
		if len(run) == 1 {
			run = []point{{run[0].x - 1, run[0].y}, {run[0].x + 1, run[0].y}}
		}
		writeRun(&d, thinned(run))
	}
	return d.String()
}

// writeRun writes one unbroken stroke in relative tenths, the shortest form.
func writeRun(d *strings.Builder, run []point) {
	px, py := math.Round(run[0].x*10), math.Round(run[0].y*10)
	d.WriteString("M" + tenths(px) + " " + tenths(py) + "l")
	for i, q := range run[1:] {
		x, y := math.Round(q.x*10), math.Round(q.y*10)
		if i > 0 {
			d.WriteByte(' ')
		}
		d.WriteString(tenths(x-px) + " " + tenths(y-py))
		px, py = x, y
	}
}

func tenths(v float64) string { return coord(v / 10) }

// ribbon fills the space between two curves over the same x, gap by gap.
func (p *pen) ribbon(class string, low, high []point) {
	var d strings.Builder
	both := make([]point, len(low))
	for i := range low {
		both[i] = low[i]
		if !finite(high[i]) {
			both[i].y = math.NaN()
		}
	}
	at := 0
	for at < len(both) {
		if !finite(both[at]) {
			at++
			continue
		}
		end := at
		for end < len(both) && finite(both[end]) {
			end++
		}
		if end-at > 1 {
			edge := thinned(high[at:end])
			back := thinned(low[at:end])
			for i := len(back) - 1; i >= 0; i-- {
				edge = append(edge, back[i])
			}
			writeRun(&d, edge)
			d.WriteString("Z")
		}
		at = end
	}
	if d.Len() > 0 {
		p.b.WriteString(`<path class="` + class + `" d="` + d.String() + `"/>`)
	}
}

func finite(q point) bool { return known(q.x) && known(q.y) }

// runs splits points at gaps.
func runs(pts []point) [][]point {
	var out [][]point
	from := -1
	for i, q := range pts {
		switch {
		case finite(q) && from < 0:
			from = i
		case !finite(q) && from >= 0:
			out, from = append(out, pts[from:i]), -1
		}
	}
	if from >= 0 {
		out = append(out, pts[from:])
	}
	return out
}

// thinned leaves out the points that the straight line between their
// neighbours passes closer than thinness (Douglas & Peucker 1973).
func thinned(pts []point) []point {
	if len(pts) < 3 {
		return append([]point(nil), pts...)
	}
	keep := make([]bool, len(pts))
	keep[0], keep[len(pts)-1] = true, true
	stack := [][2]int{{0, len(pts) - 1}}
	for len(stack) > 0 {
		a, b := stack[len(stack)-1][0], stack[len(stack)-1][1]
		stack = stack[:len(stack)-1]
		worst, at := thinness, -1
		for i := a + 1; i < b; i++ {
			if d := distance(pts[i], pts[a], pts[b]); d > worst {
				worst, at = d, i
			}
		}
		if at >= 0 {
			keep[at] = true
			stack = append(stack, [2]int{a, at}, [2]int{at, b})
		}
	}
	var out []point
	for i, k := range keep {
		if k {
			out = append(out, pts[i])
		}
	}
	return out
}

// distance of q from the stretch between a and b.
func distance(q, a, b point) float64 {
	dx, dy := b.x-a.x, b.y-a.y
	l := dx*dx + dy*dy
	if l == 0 {
		return math.Hypot(q.x-a.x, q.y-a.y)
	}
	t := math.Max(0, math.Min(1, ((q.x-a.x)*dx+(q.y-a.y)*dy)/l))
	return math.Hypot(q.x-a.x-t*dx, q.y-a.y-t*dy)
}
