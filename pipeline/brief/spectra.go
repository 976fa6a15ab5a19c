package brief

import (
	"fmt"
	"math"
	"slices"
)

// shades is the number of steps between the look of the most acid rung and
// that of the most basic.
const shades = 8

// A spectrum is one curve of a family with the rung it belongs to.
type spectrum struct {
	rung  Rung
	y     []float64
	shade int // 0 most acid
}

// family pairs each spectrum with its rung and orders them by pH, rungs of
// unknown pH first as they came.
func family(s *Set) []spectrum {
	var out []spectrum
	for i, y := range s.Family {
		r := Rung{PH: math.NaN(), Residual: math.NaN()}
		switch {
		case len(s.FamilyKeys) == len(s.Family):
			r.Key = s.FamilyKeys[i]
			if j := slices.IndexFunc(s.Rungs, func(g Rung) bool { return g.Key == r.Key }); j >= 0 {
				r = s.Rungs[j]
			}
		case len(s.Rungs) == len(s.Family):
			r = s.Rungs[i]
		}
		out = append(out, spectrum{rung: r, y: y})
	}
	slices.SortStableFunc(out, func(a, b spectrum) int { return byPH(a.rung, b.rung) })
	for i := range out {
		out[i].shade = i * (shades - 1) / max(1, len(out)-1)
	}
	return out
}

func byPH(a, b Rung) int {
	switch {
	case !known(a.PH) && !known(b.PH) || a.PH == b.PH:
		return 0
	case !known(a.PH) || a.PH < b.PH:
		return -1
	}
	return 1
}

// grid is the wavelength range of a set where anything is drawn.
func wavelengths(s *Set) span {
	x := nothing()
	x.take(s.WavelengthNM...)
	return x
}

// familyPicture draws the measured spectra of a set, the isosbestic point and
// the accused rung; "" if there is nothing to draw.
func familyPicture(id string, s *Set) string {
	list := family(s)
	x, y := wavelengths(s), nothing()
	for _, c := range list {
		y.take(c.y[:min(len(c.y), len(s.WavelengthNM))]...)
	}
	if x.empty() || y.empty() {
		return ""
	}
	y.take(0)
	about := fmt.Sprintf("%d absorbance spectra from %s to %s nm", len(list), fixed(x.lo, 0), fixed(x.hi, 0))
	if r := phRange(list); r != "" {
		about += ", pH " + r
	}
	if known(s.IsosbesticNM) && s.IsosbesticNM > 0 {
		about += fmt.Sprintf("; isosbestic point at %s nm", fixed(s.IsosbesticNM, 1))
	}
	if s.Accused != "" {
		about += "; rung " + s.Accused + " in contrast"
	}
	p := draw(id, "Spectra of "+s.Key, about+".", 360, 236)
	f := newFrame(p, flat(x), y.widened(0.06))
	f.top = 26 // room for the key of pH and the isosbestic point
	f.rule("absorbance")
	f.foot("wavelength / nm", ticks(f.x0, f.x1, 6))
	var accused *spectrum
	for i, c := range list {
		if c.rung.Key == s.Accused && s.Accused != "" {
			accused = &list[i]
			continue
		}
		f.curve(fmt.Sprintf("c s%d", c.shade), f.points(s.WavelengthNM, c.y))
	}
	if accused != nil {
		pts := f.points(s.WavelengthNM, accused.y)
		f.curve("c accused", pts)
		if q, ok := highest(pts); ok {
			f.tag("flag", q.x, q.y-6, short(s.Accused, 14))
		}
	}
	f.isosbestic(s.IsosbesticNM, s.WavelengthNM, list)
	f.scale(list, s.IsosbesticNM)
	return p.svg()
}

// flat makes a single wavelength a range.
func flat(x span) span {
	if x.hi > x.lo {
		return x
	}
	return x.widened(0)
}

func phRange(list []spectrum) string {
	r := nothing()
	for _, c := range list {
		r.take(c.rung.PH)
	}
	if r.empty() {
		return ""
	}
	return fixed(r.lo, 2) + " to " + fixed(r.hi, 2)
}

// points puts a curve on the paper; missing values are gaps.
func (f *frame) points(x, y []float64) []point {
	out := make([]point, 0, len(x))
	for i := range min(len(x), len(y)) {
		out = append(out, f.at(x[i], y[i]))
	}
	return out
}

func highest(pts []point) (point, bool) {
	best, ok := point{}, false
	for _, q := range pts {
		if finite(q) && (!ok || q.y < best.y) {
			best, ok = q, true
		}
	}
	return best, ok
}

// isosbestic marks the point where the spectra cross: a ring at the median
// absorbance there, a line up from it and its wavelength.
func (f *frame) isosbestic(nm float64, x []float64, list []spectrum) {
	if !known(nm) || nm < f.x0 || nm > f.x1 || nm <= 0 {
		return
	}
	var there []float64
	for _, c := range list {
		if v := between(x, c.y, nm); known(v) {
			there = append(there, v)
		}
	}
	if len(there) == 0 {
		return
	}
	slices.Sort(there)
	q := f.at(nm, there[len(there)/2])
	f.line("iso", q.x, f.top-4, q.x, q.y-5)
	f.mark(dot, "ring", q.x, q.y, 5)
	label := "isosbestic " + fixed(nm, 1) + " nm"
	half := letters(label) / 2
	f.text("note", "middle", math.Max(f.left+half-6, math.Min(f.right-half, q.x)), f.top-8, label)
}

// between interpolates a curve on an ascending or descending grid.
func between(x, y []float64, at float64) float64 {
	for i := 1; i < min(len(x), len(y)); i++ {
		a, b := x[i-1], x[i]
		if (a <= at && at <= b || b <= at && at <= a) && a != b {
			return y[i-1] + (y[i]-y[i-1])*(at-a)/(b-a)
		}
	}
	return math.NaN()
}

// scale says, above the field, which look is which pH.
func (f *frame) scale(list []spectrum, nm float64) {
	lo, hi := math.NaN(), math.NaN()
	for _, c := range list {
		if known(c.rung.PH) {
			if math.IsNaN(lo) {
				lo = c.rung.PH
			}
			hi = c.rung.PH
		}
	}
	if math.IsNaN(lo) || len(list) < 2 {
		return
	}
	// The key stands on the side that the isosbestic label leaves free.
	x, y := f.right-letters("4.00 10.0")-8*shades, f.top-8
	if known(nm) && f.px(nm) > (f.left+f.right)/2 {
		x = f.left
	}
	low := "pH " + fixed(lo, 1)
	f.text("note", "start", x, y, low)
	x += letters(low)
	for i := range shades {
		f.line(fmt.Sprintf("c s%d", i), x, y-3.5, x+8, y-3.5)
		x += 8
	}
	f.text("note", "start", x+3, y, fixed(hi, 1))
}

// A limit is the spectrum of one form with its deviation.
type limit struct {
	name, class string
	y, sd       []float64
}

func limits(s *Set) []limit {
	var out []limit
	if len(s.Acid) > 0 {
		out = append(out, limit{"acid form", "acid", s.Acid, s.AcidSD})
	}
	for _, b := range s.Between {
		out = append(out, limit{b.Name, "mid", b.Value, b.SD})
	}
	if len(s.Base) > 0 {
		out = append(out, limit{"base form", "base", s.Base, s.BaseSD})
	}
	return out
}

// limitPicture draws the spectra of the forms with bands of two standard
// deviations; "" if there are none.
func limitPicture(id string, s *Set) string {
	list := limits(s)
	x, y := wavelengths(s), nothing()
	names := ""
	for i, l := range list {
		if i > 0 {
			names += ", "
		}
		names += l.name
		for j, v := range l.y {
			y.take(v, v+2*deviation(l.sd, j), v-2*deviation(l.sd, j))
		}
	}
	if x.empty() || y.empty() {
		return ""
	}
	y.take(0)
	about := "Calculated spectra of " + names
	if s.Banded() {
		about += ", each with a band of plus and minus two standard deviations"
	}
	p := draw(id, "Limit spectra of "+s.Key, about+".", 360, 236)
	f := newFrame(p, flat(x), y.widened(0.06))
	f.rule("absorbance, all in one form")
	f.foot("wavelength / nm", ticks(f.x0, f.x1, 6))
	for _, l := range list {
		if !s.Banded() {
			break
		}
		low, high := make([]float64, len(l.y)), make([]float64, len(l.y))
		for j, v := range l.y {
			d := 2 * deviation(l.sd, j)
			low[j], high[j] = v-d, v+d
		}
		f.ribbon("band "+l.class, f.points(s.WavelengthNM, low), f.points(s.WavelengthNM, high))
	}
	var taken []point
	for _, l := range list {
		pts := f.points(s.WavelengthNM, l.y)
		f.curve("c "+l.class, pts)
		if q, ok := highest(pts); ok {
			at := q.y - 5
			for _, t := range taken {
				if math.Abs(t.x-q.x) < 70 && math.Abs(t.y-at) < 12 {
					at = t.y + 13
				}
			}
			f.tag("note halo", q.x, at, short(l.name, 18))
			taken = append(taken, point{q.x, at})
		}
	}
	return p.svg()
}

// Banded says whether the deviation of any limit spectrum is known.
func (s *Set) Banded() bool {
	return slices.ContainsFunc(limits(s), func(l limit) bool {
		for i := range l.y {
			if deviation(l.sd, i) > 0 {
				return true
			}
		}
		return false
	})
}

func deviation(sd []float64, i int) float64 {
	if i < len(sd) && known(sd[i]) && sd[i] > 0 {
		return sd[i]
	}
	return 0
}
