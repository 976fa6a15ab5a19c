package brief

import (
	"fmt"
	"math"
	"slices"
	"strings"
)

// residualPicture draws the latent pH residual of each rung in the order of
// pH, with the band expected of it; "" without a residual.
func residualPicture(id string, s *Set) string {
	list := slices.Clone(s.Rungs)
	slices.SortStableFunc(list, byPH)
	y, out := nothing(), 0
	worst, worstKey := 0.0, ""
	for _, r := range list {
		y.take(r.Residual)
		if a := math.Abs(r.Residual); known(r.Residual) && a > worst {
			worst, worstKey = a, r.Key
		}
		if r.LeftOut != "" {
			out++
		}
	}
	if y.empty() {
		return ""
	}
	about := fmt.Sprintf("Latent pH residual of %d rungs; largest %s at rung %s", len(list), fixed(worst, 3), worstKey)
	if out > 0 {
		about += fmt.Sprintf("; %d left out", out)
	}
	reach := math.Max(y.hi, -y.lo)
	sigma := 0.0
	if known(s.SigmaPH) && s.SigmaPH > 0 {
		sigma = s.SigmaPH
		about += fmt.Sprintf("; band of two standard deviations, %s", fixed(2*sigma, 3))
	}
	reach = math.Max(reach, math.Max(2.4*sigma, 0.01))
	p := draw(id, "Latent pH residuals of "+s.Key, about+".", 360, 236)
	f := newFrame(p, span{-0.6, float64(len(list)) - 0.4}, span{-reach, reach}.widened(0.09))
	if sigma > 0 {
		f.rect("expected", f.left, f.py(2*sigma), f.right-f.left, f.py(-2*sigma)-f.py(2*sigma))
	}
	f.rule("pH residual")
	f.line("zero", f.left, f.py(0), f.right, f.py(0))
	f.rungFoot(list)
	if sigma > 0 {
		f.text("note halo", "end", f.right-3, f.py(2*sigma)-4, "± 2 s expected")
	}
	for i, r := range list {
		f.stem(float64(i), r, r.Key == s.Accused && r.Key != "")
	}
	return p.svg()
}

// stem draws one rung: a stalk from zero to its residual. A left out rung is a
// cross, an accused one a square with its number.
func (f *frame) stem(x float64, r Rung, accused bool) {
	v := r.Residual
	if !known(v) {
		if r.LeftOut != "" {
			f.mark(cross, "mark bad", f.px(x), f.py(0), 4)
		}
		return
	}
	q := f.at(x, v)
	class, shape := "mark", rune(dot)
	switch {
	case r.LeftOut != "":
		class, shape = "mark bad", cross
	case accused:
		class, shape = "mark bad full", square
	}
	f.line("stalk", q.x, f.py(0), q.x, q.y)
	f.mark(shape, class, q.x, q.y, 3.6)
	if accused || r.LeftOut != "" {
		f.tag("flag", q.x, q.y+4, signed(v, 3))
	}
}

// rungFoot writes rung and pH below each stalk, as many as there is room for.
func (f *frame) rungFoot(list []Rung) {
	f.line("axis", f.left, f.bottom, f.right, f.bottom)
	wide := 4.0
	for _, r := range list {
		wide = math.Max(wide, math.Min(6, float64(len([]rune(r.Key)))))
	}
	step := 1
	for (f.right-f.left)/float64(max(1, len(list)))*float64(step) < wide*5.9 && step < len(list) {
		step++
	}
	for i, r := range list {
		x := f.px(float64(i))
		f.line("axis", x, f.bottom, x, f.bottom+3)
		if i%step != 0 {
			continue
		}
		f.text("num", "middle", x, f.bottom+13, short(r.Key, 6))
		if known(r.PH) {
			f.text("num", "middle", x, f.bottom+24, fixed(r.PH, 1))
		}
	}
	f.text("name", "start", 2, f.bottom+13, "rung")
	f.text("name", "start", 2, f.bottom+24, "pH")
}

// A bar is one row of the picture of a budget.
type bar struct {
	name, bucket string
	u            float64
}

// budgetRows bounds the rows of one picture; the rest is one row.
const budgetRows = 9

// bars orders a budget by size and joins what is beyond the picture's rows as
// the root of the sum of squares.
func bars(budget []Component) []bar {
	var out []bar
	for _, c := range budget {
		if known(c.UPKa) && c.UPKa != 0 {
			out = append(out, bar{c.Name, c.Bucket, math.Abs(c.UPKa)})
		}
	}
	slices.SortStableFunc(out, func(a, b bar) int {
		switch {
		case a.u > b.u:
			return -1
		case a.u < b.u:
			return 1
		}
		return strings.Compare(a.name, b.name)
	})
	if len(out) <= budgetRows {
		return out
	}
	sum := 0.0
	for _, c := range out[budgetRows-1:] {
		sum = math.Hypot(sum, c.u)
	}
	return append(out[:budgetRows-1:budgetRows-1], bar{fmt.Sprintf("%d smaller ones together", len(out)-budgetRows+1), "", sum})
}

// budgetPicture draws the contributions to u(pKa); "" without any.
func budgetPicture(id string, s *Set) string {
	list := bars(s.Budget)
	if len(list) == 0 {
		return ""
	}
	about := "Contributions to the standard uncertainty of pKa, largest first:"
	for i, c := range list {
		if i > 0 {
			about += ","
		}
		about += " " + c.name + " " + fixed(c.u, decimals(c.u))
		if w := bucketWords(c.bucket); w != "" {
			about += " (" + w + ")"
		}
	}
	const row = 30
	p := draw(id, "Uncertainty budget of "+s.Key, about+".", 360, float64(len(list))*row+44)
	x := nothing()
	x.take(0, list[0].u)
	f := newFrame(p, span{0, x.hi * 1.18}, span{0, 1})
	f.left, f.top = 12, 4
	f.foot("contribution to u(pKa)", ticks(f.x0, f.x1, 4))
	for _, t := range ticks(f.x0, f.x1, 4) {
		f.line("grid", f.px(t.at), f.top, f.px(t.at), f.bottom)
	}
	f.line("axis", f.left, f.top, f.left, f.bottom)
	for i, c := range list {
		y := f.top + float64(i)*row
		f.text("note halo", "start", f.left+4, y+11, short(c.name, 56))
		f.rect("bar "+bucketClass(c.bucket), f.left, y+15, f.px(c.u)-f.left, 9)
		f.text("num", "start", f.px(c.u)+4, y+23, fixed(c.u, decimals(c.u)))
	}
	return p.svg()
}

// bucketWords says with what a component is shared.
func bucketWords(b string) string {
	switch b {
	case "own":
		return "this set"
	case "run":
		return "shared in the run"
	case "lab":
		return "shared in the laboratory"
	}
	return b
}

func bucketClass(b string) string {
	switch b {
	case "own", "run", "lab":
		return b
	}
	return "rest"
}
