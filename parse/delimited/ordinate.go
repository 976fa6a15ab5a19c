package delimited

import (
	"fmt"
	"math"

	"pkvigil/parse"
)

const (
	tooHigh   = 10.0 // no photometer reads an absorbance above this
	ceilingAt = 2.5  // a repeated exact maximum from here on is an overflow
	ceilingN  = 3    // so many neighbouring repeats make a ceiling
)

// absorb turns ordinates of quantity q into absorbances in place, masks
// overflows, and refuses what cannot be what it says. scale is the ordinate as
// the file holds it.
func (r *reader) absorb(label, q string, x, y []float64, decs []int8, line int) (scaleWord string, err error) {
	field := ""
	if label != "" {
		field = "trace " + parse.Show(label)
	}
	switch q {
	case qAbsorbance:
		scaleWord = "absorbance"
		if err := r.percentInDisguise(field, y, line); err != nil {
			return "", err
		}
	case qMilli:
		scaleWord = "absorbance"
		scale(y, func(v float64) float64 { return v / 1000 })
		r.remark(line, "absorbances are in thousandths; divided by 1000")
	case qTransmittance, qPercent:
		if q, err = r.whichTransmittance(field, q, y, line); err != nil {
			return "", err
		}
		scaleWord = q
		full := 1.0
		if q == qPercent {
			full = 100
		}
		dark := 0
		scale(y, func(v float64) float64 {
			if v <= 0 {
				dark++
				return math.NaN()
			}
			return -math.Log10(v / full)
		})
		r.remark(line, "%s converted to absorbance", q)
		if dark > 0 {
			r.remark(line, "%d points without light are masked", dark)
		}
	default:
		return "", r.refuse(line, field, parse.Show(q), "absorbance or transmittance", "export absorbance, or declare ordinate in a layout")
	}
	r.mask(field, x, y, decs, line)
	if finite(y) == 0 {
		return "", r.refuse(line, field, "no number", "absorbances", "the instrument saw nothing but overflow; check the cell")
	}
	return scaleWord, nil
}

// percentInDisguise refuses an ordinate that is called absorbance but runs
// like a transmittance in per cent.
func (r *reader) percentInDisguise(field string, y []float64, line int) error {
	n, high, top := 0, 0, 0.0
	for _, v := range y {
		if math.IsNaN(v) || sentinel(v) {
			continue
		}
		n++
		if v > tooHigh {
			high++
			top = max(top, v)
		}
	}
	if high >= 2 && 100*high >= n {
		return r.refuse(line, field, fmt.Sprintf("%d of %d values above %g, the highest %g", high, n, tooHigh, top), "absorbances, as the file says",
			"this looks like transmittance; export absorbance or declare ordinate in a layout")
	}
	return nil
}

// whichTransmittance decides between a fraction and per cent where the header
// says only transmittance: above 2 it cannot be a fraction.
func (r *reader) whichTransmittance(field, q string, y []float64, line int) (string, error) {
	top := math.Inf(-1)
	for _, v := range y {
		if !math.IsNaN(v) {
			top = max(top, v)
		}
	}
	switch {
	case q == qPercent || r.lay.Ordinate != "":
		return q, nil
	case top > 2:
		r.remark(line, "transmittance up to %g can only be in per cent", top)
		return qPercent, nil
	case top >= 0.2 && top <= 1.5:
		r.remark(line, "transmittance up to %g is a fraction", top)
		return qTransmittance, nil
	}
	return "", r.refuse(line, field, fmt.Sprintf("transmittance up to %g", top), "a statement whether fraction or per cent", "declare ordinate in a layout")
}

// sentinel tells whether a value consists of nines only, as instruments write
// where the range ends (common practice, no source).
func sentinel(v float64) bool {
	if v > -9 && v < 9 {
		return false
	}
	switch math.Abs(v) {
	case 9.9, 9.99, 9.999, 9.9999, 9.99999, 9.999999, 99, 99.9, 99.99, 99.999, 99.9999, 99.99999, 999, 999.9, 999.99, 999.999, 999.9999, 9999, 9999.9, 9999.99, 9999.999, 99999, 99999.9:
		return true
	}
	return false
}

// mask sets to NaN what stands for an overflow: nines, values no photometer
// reads, and an exact maximum repeated by neighbours.
func (r *reader) mask(field string, x, y []float64, decs []int8, line int) {
	marks := 0
	for i, v := range y {
		switch {
		case i < len(decs) && decs[i] == cellMissing:
			marks++
		case sentinel(v), math.Abs(v) > tooHigh:
			y[i] = math.NaN()
			marks++
		}
	}
	for {
		n := ceiling(y)
		if n == 0 {
			break
		}
		marks += n
	}
	if marks > 0 {
		lo, hi := math.Inf(1), math.Inf(-1)
		for i, v := range y {
			if math.IsNaN(v) {
				lo, hi = min(lo, x[i]), max(hi, x[i])
			}
		}
		r.remark(line, "%s%d points from %g to %g nm are marked as overflow and masked", prefix(field), marks, lo, hi)
	}
	zero := 0
	for _, v := range y {
		if v == 0 {
			zero++
		}
	}
	if 2*zero > len(y) && len(y) > leastPoints {
		r.remark(line, "%s%d of %d values are exactly 0; if they stand for missing values declare overflow = [\"0\"] in a layout", prefix(field), zero, len(y))
	}
}

func prefix(field string) string {
	if field == "" {
		return ""
	}
	return field + ": "
}

// ceiling masks the greatest value where neighbours repeat it exactly, and
// returns how many points it masked.
func ceiling(y []float64) int {
	top := math.Inf(-1)
	for _, v := range y {
		if v > top {
			top = v
		}
	}
	if !(top >= ceilingAt) {
		return 0
	}
	run, longest := 0, 0
	for _, v := range y {
		if v == top {
			run++
			longest = max(longest, run)
		} else {
			run = 0
		}
	}
	if longest < ceilingN {
		return 0
	}
	n := 0
	for i, v := range y {
		if v == top {
			y[i] = math.NaN()
			n++
		}
	}
	return n
}

// decimals is the resolution a trace was printed with: the most decimals of
// any value, -1 where every value has an exponent.
func decimals(decs []int8) int {
	best := -1
	for _, d := range decs {
		best = max(best, int(d))
	}
	return max(best, -1)
}
