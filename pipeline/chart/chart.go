// Package chart follows the characteristics of reference indicators night by
// night: it learns what is usual (baselines), draws limits around it, says which
// values do not belong (flags), and states how often a flag is raised for nothing
// and how soon a change is seen (run lengths).
//
// Everything here is a pure function of its arguments. The package knows numbers
// and night counts; it knows no instruments, files, clocks or databases, and it
// does not decide whom to tell. A flag records; ringing belongs to package drift.
//
// # Choices that hold throughout
//
//   - Spread is the long-term spread of the nightly values, never the mean moving
//     range: with a day-to-day correlation of 0.5 the moving range gives limits
//     whose in-control run length is 34 nights instead of 370.
//   - Where a baseline is correlated from night to night, individual limits and the
//     exponentially weighted mean keep the values themselves and are widened, since
//     a chemist reads them in the unit of the characteristic; cumulative sums and
//     run tests work on the residuals of a first-order model, since no width repairs
//     a count of neighbours that follow each other.
//   - Limits from few nights are widened by Student's t and by the uncertainty of the
//     centre, so that the stated false-alarm rate also holds for a short baseline.
//   - A night without a value neither clears nor rings: every chart keeps its state.
//
// Published methods carry their authors: Shewhart; Page 1954; Roberts 1959; Brook
// and Evans 1972; Hawkins 1987; Champ and Woodall 1987; ISO 7870 parts 2, 4 and 6;
// ISO 13528 (Algorithm A); Wilson and Hilferty 1931 for squares.
package chart

import "math"

// Value is one night's value of one characteristic.
type Value struct {
	Night int     // number of the night; gaps are nights without a value
	X     float64 // the characteristic in its own unit; NaN means no data
	SD    float64 // its own standard uncertainty in the same unit; 0 or NaN if not known
}

// Scale says in which form a characteristic is charted.
type Scale string

const (
	// Plain charts the value itself.
	Plain Scale = "plain"
	// Squares charts the square of a norm-like characteristic (a standard deviation,
	// a root mean square, a singular value). Contributions to a norm add in
	// quadrature, so a small cause moves the square in proportion to its own square
	// while it hardly moves the norm. Limits are formed on the cube root of the
	// square, which is close to normal for a sum of squares (Wilson and Hilferty,
	// Proc. Natl. Acad. Sci. 17:684, 1931), and are reported as squares.
	Squares Scale = "squares"
)

// toChart returns x on the scale on which limits are formed.
func (s Scale) toChart(x float64) float64 {
	if s == Squares {
		return math.Pow(x*x, 1.0/3)
	}
	return x
}

// spreadToChart converts a small standard deviation of x at x to the charting scale.
func (s Scale) spreadToChart(x, sd float64) float64 {
	if s == Squares {
		if x == 0 {
			return 0
		}
		return 2.0 / 3 * math.Pow(math.Abs(x), -1.0/3) * sd
	}
	return sd
}

// toShow returns a value of the charting scale in the unit that is reported: the
// characteristic's own, or its square.
func (s Scale) toShow(y float64) float64 {
	if s == Squares {
		if y <= 0 {
			return 0
		}
		return y * y * y
	}
	return y
}

// spreadToShow converts a small standard deviation at y on the charting scale to the
// unit that is reported.
func (s Scale) spreadToShow(y, sd float64) float64 {
	if s == Squares {
		return 3 * y * y * sd
	}
	return sd
}

// norm returns the value of the charting scale in the characteristic's own unit.
func (s Scale) norm(y float64) float64 {
	if s == Squares {
		if y <= 0 {
			return 0
		}
		return math.Pow(y, 1.5)
	}
	return y
}

// Differences returns, night by night, what instrument a reads above instrument b for
// the same characteristic and reference, to be charted as a series of its own. Nights
// on which either has no value are left out; several values of one night are averaged
// first. Own uncertainties add in quadrature where both are known.
func Differences(a, b []Value) []Value {
	x, y := nightMeans(a), nightMeans(b)
	var out []Value
	for i, j := 0, 0; i < len(x) && j < len(y); {
		switch {
		case x[i].Night < y[j].Night:
			i++
		case x[i].Night > y[j].Night:
			j++
		default:
			d := Value{Night: x[i].Night, X: x[i].X - y[j].X}
			if x[i].SD > 0 && y[j].SD > 0 {
				d.SD = math.Hypot(x[i].SD, y[j].SD)
			}
			out = append(out, d)
			i, j = i+1, j+1
		}
	}
	return out
}

// nightMeans averages the values of each night, in order of night.
func nightMeans(values []Value) []Value {
	var out []Value
	vs := usableValues(values)
	for i := 0; i < len(vs); {
		m := Value{Night: vs[i].Night}
		n, ss, known := 0.0, 0.0, true
		for ; i < len(vs) && vs[i].Night == m.Night; i++ {
			n, m.X, ss = n+1, m.X+vs[i].X, ss+vs[i].SD*vs[i].SD
			known = known && vs[i].SD > 0
		}
		m.X /= n
		if known {
			m.SD = math.Sqrt(ss) / n
		}
		out = append(out, m)
	}
	return out
}

// finite reports whether x is an ordinary number.
func finite(x float64) bool { return !math.IsNaN(x) && !math.IsInf(x, 0) }
