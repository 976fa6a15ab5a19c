package brief

import (
	"math"
	"strconv"
	"time"
)

// A tick is one mark of an axis with its label.
type tick struct {
	at    float64
	label string
}

// ticks gives up to n+1 round marks inside [lo, hi], at multiples of 1, 2 or 5
// times a power of ten, with as many decimals as tell them apart: a label read
// back gives its mark. It gives none for a range that is empty or not finite.
func ticks(lo, hi float64, n int) []tick {
	span := hi - lo
	if n < 1 || math.IsNaN(span) || math.IsInf(span, 0) || span <= 0 {
		return nil
	}
	// Below this the marks are no longer different floating-point numbers.
	if span < 1e-12*math.Max(math.Abs(lo), math.Abs(hi)) || span < 1e-300 || span > 1e300 {
		return nil
	}
	out := marks(lo, hi, span/float64(n))
	if len(out) < 2 && n >= 4 {
		out = marks(lo, hi, span/float64(2*n)) // a round step can leave one mark where several fit
	}
	return out
}

// marks lists the multiples of the round step at least as large as wanted.
func marks(lo, hi, want float64) []tick {
	unit, power := roundStep(want)
	step := unit * math.Pow10(power)
	first, last := math.Ceil(lo/step-1e-9), math.Floor(hi/step+1e-9)
	var out []tick
	for k := first; k <= last && len(out) < 24; k++ {
		v := k * unit
		out = append(out, tick{k * step, tickLabel(v, power)})
	}
	return out
}

// roundStep is the smallest of 1, 2, 5 times a power of ten that is at least
// the wanted step.
func roundStep(want float64) (unit float64, power int) {
	power = int(math.Floor(math.Log10(want)))
	m := want / math.Pow10(power)
	for _, u := range []float64{1, 2, 5} {
		if m <= u*(1+1e-9) {
			return u, power
		}
	}
	return 1, power + 1
}

// tickLabel writes v * 10^power, v being a whole number, without rounding.
func tickLabel(v float64, power int) string {
	if v == 0 {
		return "0"
	}
	if power >= -6 && power <= 5 {
		return minus(strconv.FormatFloat(v*math.Pow10(power), 'f', max(0, -power), 64))
	}
	digits := strconv.FormatFloat(math.Abs(v), 'f', 0, 64)
	exponent := power + len(digits) - 1
	s := digits[:1]
	if rest := trimZeros(digits[1:]); rest != "" {
		s += "." + rest
	}
	s += "e" + strconv.Itoa(exponent)
	if v < 0 {
		s = "-" + s
	}
	return minus(s)
}

func trimZeros(s string) string {
	for len(s) > 0 && s[len(s)-1] == '0' {
		s = s[:len(s)-1]
	}
	return s
}

// dayTicks gives at most n marks at round dates inside [lo, hi], in days since
// 1970-01-01, labelled month-day, or with the year where the range leaves it.
func dayTicks(lo, hi float64, n int) []tick {
	if n < 1 || !(lo <= hi) || hi-lo > 1e6 {
		return nil
	}
	first, last := int(math.Ceil(lo)), int(math.Floor(hi))
	layout := "01-02"
	if dayOf(first).Year() != dayOf(last).Year() {
		layout, n = "2006-01-02", max(1, n*3/5)
	}
	for _, every := range []int{1, 2, 7, 14} {
		var out []tick
		for d := first; d <= last; d++ {
			// Day 4 after 1970-01-01 was a Monday.
			if (d-4)%every == 0 {
				out = append(out, tick{float64(d), dayOf(d).Format(layout)})
			}
			if len(out) > n {
				break
			}
		}
		if len(out) <= n && len(out) > 0 {
			return out
		}
	}
	return monthTicks(first, last, n, layout)
}

func monthTicks(first, last, n int, layout string) []tick {
	for _, every := range []int{1, 2, 3, 6, 12, 24, 60, 120, 600, 3600} {
		var out []tick
		t := dayOf(first)
		for t = time.Date(t.Year(), t.Month(), 1, 0, 0, 0, 0, time.UTC); ; t = t.AddDate(0, 1, 0) {
			d := daysOf(t)
			if d > last || len(out) > n {
				break
			}
			if d >= first && (t.Year()*12+int(t.Month())-1)%every == 0 {
				out = append(out, tick{float64(d), t.Format(layout)})
			}
		}
		if len(out) <= n {
			return out
		}
	}
	return nil
}

func dayOf(d int) time.Time  { return time.Unix(int64(d)*86400, 0).UTC() }
func daysOf(t time.Time) int { return int(math.Floor(float64(t.Unix()) / 86400)) }
func minus(s string) string {
	if len(s) > 0 && s[0] == '-' {
		return "\u2212" + s[1:]
	}
	return s
}

// decimals is the number of decimals that shows u with two significant digits.
func decimals(u float64) int {
	if !(u > 0) || math.IsInf(u, 0) {
		return 3
	}
	d := 1 - int(math.Floor(math.Log10(u)))
	// 0.0996 to two digits is 0.10.
	if math.Round(u*math.Pow10(d)) >= 100 {
		d--
	}
	return min(max(d, 0), 6)
}

// fixed writes a number with a true minus sign; unknown numbers are a dash.
func fixed(v float64, digits int) string {
	if math.IsNaN(v) || math.IsInf(v, 0) {
		return "\u2013"
	}
	s := strconv.FormatFloat(v, 'f', digits, 64)
	if s[0] == '-' && trimZeros(trimPoint(s[1:])) == "" {
		s = s[1:] // no negative zero
	}
	return minus(s)
}

func trimPoint(s string) string {
	out := make([]byte, 0, len(s))
	for i := range len(s) {
		if s[i] != '.' {
			out = append(out, s[i])
		}
	}
	return string(out)
}

// signed is fixed with a sign always.
func signed(v float64, digits int) string {
	s := fixed(v, digits)
	if v > 0 && s != "\u2013" {
		return "+" + s
	}
	return s
}

// measured writes a value with its expanded uncertainty, both to the second
// significant digit of the uncertainty (GUM, JCGM 100:2008, 7.2.6).
func measured(v, u float64) string {
	if math.IsNaN(u) || u <= 0 {
		return fixed(v, 3)
	}
	d := decimals(u)
	return fixed(v, d) + " ± " + fixed(u, d)
}

// known says whether v is a number.
func known(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
