package delimited

import (
	"fmt"
	"math"
	"slices"
	"time"

	"pkvigil/parse"
)

const (
	defaultStablePH  = 0.01
	defaultStableFor = 30 * time.Second
	leastStable      = 3                // readings in a stable window
	nightLog         = 15 * time.Minute // a series without labels lasting longer is a log of several solutions
)

func (r *reader) stability() (ph, seconds float64) {
	ph, d := r.opt.StablePH, r.opt.StableFor
	if ph <= 0 {
		ph = defaultStablePH
	}
	if d <= 0 {
		d = defaultStableFor
	}
	return ph, d.Seconds()
}

// stamps gives each reading the seconds since the first; ok is false where a
// reading has no time.
func stamps(rows []phRow) (at []float64, ok bool) {
	at = make([]float64, len(rows))
	for i, p := range rows {
		switch {
		case !math.IsNaN(p.elapsed):
			at[i] = p.elapsed
		case !p.Measured.IsZero():
			at[i] = p.Measured.Sub(rows[0].Measured).Seconds()
		default:
			return nil, false
		}
	}
	return at, true
}

// dense tells whether the readings follow one another so closely that they
// are a time series: at least half of the steps shorter than half the time
// the reading must be stable, and labels, if any, that repeat.
func (r *reader) dense(rows []phRow) bool {
	if len(rows) < leastStable {
		return false
	}
	labels := map[string]bool{}
	for _, p := range rows {
		labels[p.Label] = true
	}
	if len(labels) > 1 && len(rows) < leastStable*len(labels) && !counted(rows) {
		return false
	}
	at, ok := stamps(rows)
	if !ok {
		return false
	}
	_, window := r.stability()
	short := 0
	for i := 1; i < len(at); i++ {
		if d := at[i] - at[i-1]; d >= 0 && d <= window/2 {
			short++
		}
	}
	return 2*short >= len(at)-1
}

// counted tells whether the labels merely number the rows.
func counted(rows []phRow) bool {
	var prev float64
	for i, p := range rows {
		v, dec, ok := parse.Float([]byte(p.Label), '.')
		if !ok || dec != 0 || i > 0 && v != prev+1 {
			return false
		}
		prev = v
	}
	return true
}

// series turns readings in time into stable means: one for each label, or
// without labels one for the file, or one for each level of a night's log.
func (r *reader) series(c *parse.Content, f facts, rows []phRow) error {
	if counted(rows) {
		for i := range rows {
			rows[i].Label = f.sample
		}
	}
	for from := 0; from < len(rows); {
		to := from + 1
		for to < len(rows) && rows[to].Label == rows[from].Label {
			to++
		}
		if err := r.oneSeries(c, rows[from:to], from == 0 && to == len(rows)); err != nil {
			return err
		}
		from = to
	}
	return nil
}

func (r *reader) oneSeries(c *parse.Content, rows []phRow, alone bool) error {
	at, ok := stamps(rows)
	if !ok {
		return r.refuse(rows[0].Line, "time", "a row without a time", "a time for every reading", "export the file again")
	}
	for i := 1; i < len(at); i++ {
		if at[i] < at[i-1] {
			return r.refuse(rows[i].Line, "time", "a time before the one above it", "times in order", "export the log of one run")
		}
	}
	ph, window := r.stability()
	ends := stableEnds(rows, at, ph, window)
	if len(ends) == 0 {
		last := rows[len(rows)-1]
		lo, hi := last.PH, last.PH
		for i, p := range rows {
			if at[len(at)-1]-at[i] <= window {
				lo, hi = min(lo, p.PH), max(hi, p.PH)
			}
		}
		return r.refuse(last.Line, "pH", fmt.Sprintf("a reading that moved by %.3g in its last %g s", hi-lo, min(window, at[len(at)-1]-at[0])),
			fmt.Sprintf("less than %g in %g s", ph, window), "the reading never became stable; wait longer, or declare the stability rule")
	}
	if !alone || rows[0].Label != "" || at[len(at)-1]-at[0] < nightLog.Seconds() {
		ends = ends[len(ends)-1:]
	} else if len(ends) > 1 {
		r.remark(0, "%d stable levels in this log; each is a reading of its own", len(ends))
	}
	for _, e := range ends {
		c.Readings = append(c.Readings, stable(rows, at, e, window))
	}
	return nil
}

// stableEnds finds the last row of each stretch in which every window of the
// given seconds stays within less than ph. Two deques keep the extremes of the
// window, so that the time is linear in the readings.
func stableEnds(rows []phRow, at []float64, ph, window float64) []int {
	var high, low []int
	var ends []int
	from, was := 0, false
	for i := range rows {
		for len(high) > 0 && rows[high[len(high)-1]].PH <= rows[i].PH {
			high = high[:len(high)-1]
		}
		for len(low) > 0 && rows[low[len(low)-1]].PH >= rows[i].PH {
			low = low[:len(low)-1]
		}
		high, low = append(high, i), append(low, i)
		for from+1 <= i && at[i]-at[from+1] >= window { // the shortest span that still covers the window
			from++
		}
		high, low = trimFront(high, from), trimFront(low, from)
		is := at[i]-at[from] >= window && i-from+1 >= leastStable && rows[high[0]].PH-rows[low[0]].PH < ph
		if was && !is {
			ends = append(ends, i-1)
		}
		was = is
	}
	if was {
		ends = append(ends, len(rows)-1)
	}
	return ends
}

func trimFront(q []int, from int) []int {
	k := slices.IndexFunc(q, func(i int) bool { return i >= from })
	return q[max(k, 0):]
}

// stable averages the window that ends with row end.
func stable(rows []phRow, at []float64, end int, window float64) parse.Reading {
	from := end
	for from > 0 && at[end]-at[from] < window {
		from--
	}
	part := rows[from : end+1]
	n := float64(len(part))
	var mean, tbar, temp, mv float64
	for i, p := range part {
		mean += p.PH / n
		tbar += (at[from+i] - at[end]) / n
		temp += p.TemperatureC / n
		mv += p.MilliVolt / n
	}
	var ss, st, tt float64
	for i, p := range part {
		d, t := p.PH-mean, at[from+i]-at[end]-tbar
		ss += d * d
		st += d * t
		tt += t * t
	}
	out := part[len(part)-1].Reading
	out.PH, out.TemperatureC, out.MilliVolt = mean, temp, mv
	out.SD, out.Points = math.Sqrt(ss/(n-1)), len(part)
	if tt > 0 {
		out.SlopePerMin = 60 * st / tt
	}
	return out
}
