package assay

import (
	"fmt"
	"math"
	"slices"
	"strings"
	"time"

	"pkvigil/parse"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/spectra"
)

// clockBefore and clockAfter bound how far a pH reading may be from its scan
// when they are paired by time: a little before, up to ten minutes after
// (common practice, no source).
const (
	clockBefore = 2 * time.Minute
	clockAfter  = 10 * time.Minute
)

// A pairing is the ladder: rungs with scans and one pH each.
type pairing struct {
	rungs   []spectra.Rung
	blanks  []spectra.Trace
	delay   map[string]float64 // minutes from scan to reading
	nameDif map[string]float64 // pH in the name minus pH in the table
	temps   []float64          // of the cell, or of the readings where no scan says
	sd      map[string]float64 // scatter of a stable mean
	left    []spectra.LeftOut
	twice   []string // rungs with two files that are no replicates
	coarse  float64  // step the pH values are printed in, 0.1 when one decimal only
	first   time.Time
	last    time.Time
}

// pair brings scans and pH readings together, by key and never by position.
func pair(in *Input) pairing {
	p := pairing{delay: map[string]float64{}, nameDif: map[string]float64{}, sd: map[string]float64{}}
	byKey := readingsByKey(in)
	groups := map[string][]Solution{}
	var order []string
	for _, s := range in.Solutions {
		p.seen(s.Measured)
		if s.Role == naming.RoleBlank {
			p.blanks = append(p.blanks, trace(s, len(p.blanks)))
			continue
		}
		k := naming.RungKey(s.Rung)
		if groups[k] == nil {
			order = append(order, k)
		}
		groups[k] = append(groups[k], s)
	}
	slices.SortStableFunc(order, func(a, b string) int { return compareRungs(groups[a][0], groups[b][0]) })
	for i, k := range order {
		p.rung(in, groups[k], byKey[k], i)
	}
	p.coarse = coarseness(p.rungs)
	p.exchange(in.Exchange)
	if len(p.temps) == 0 {
		for _, r := range in.Readings {
			if !math.IsNaN(r.TemperatureC) {
				p.temps = append(p.temps, r.TemperatureC)
			}
		}
	}
	return p
}

func (p *pairing) seen(t time.Time) {
	if t.IsZero() {
		return
	}
	if p.first.IsZero() || t.Before(p.first) {
		p.first = t
	}
	if t.After(p.last) {
		p.last = t
	}
}

// compareRungs orders rungs as they are numbered, and by time where they are not.
func compareRungs(a, b Solution) int {
	x, y := naming.RungKey(a.Rung), naming.RungKey(b.Rung)
	if len(x) != len(y) && digits(x) && digits(y) {
		return len(x) - len(y)
	}
	if c := strings.Compare(x, y); c != 0 {
		return c
	}
	return a.Measured.Compare(b.Measured)
}

func digits(s string) bool {
	return s != "" && strings.Trim(s, "0123456789") == ""
}

func readingsByKey(in *Input) map[string][]parse.Reading {
	m := map[string][]parse.Reading{}
	for _, r := range in.Readings {
		k := naming.RungKey(r.Label)
		m[k] = append(m[k], r)
	}
	return m
}

// rung finds the pH of one rung and adds it, or says why it takes no part.
func (p *pairing) rung(in *Input, scans []Solution, readings []parse.Reading, order int) {
	key := scans[0].Rung
	reps := map[string]int{}
	var traces []spectra.Trace
	named := math.NaN()
	for _, s := range scans {
		reps[s.Rep]++
		if reps[s.Rep] == 2 {
			p.twice = append(p.twice, key)
		}
		traces = append(traces, trace(s, order))
		if !math.IsNaN(s.PH) {
			named = s.PH
		}
		if !math.IsNaN(s.Scan.TemperatureC) {
			p.temps = append(p.temps, s.Scan.TemperatureC)
		}
	}
	if in.PairClock {
		readings = byClock(in.Readings, scans[0].Measured)
	}
	table, at := math.NaN(), time.Time{}
	switch {
	case len(readings) == 1:
		table, at = readings[0].PH, readings[0].Measured
		if !math.IsNaN(readings[0].SD) && readings[0].Points > 1 {
			p.sd[key] = readings[0].SD / math.Sqrt(float64(readings[0].Points))
		}
	case len(readings) > 1:
		p.left = append(p.left, spectra.LeftOut{Key: key, Check: "ph.twice", Text: fmt.Sprintf("%d pH readings claim this rung.", len(readings))})
		return
	}
	ph := table
	if math.IsNaN(table) || (in.PHFirst == "name" && !math.IsNaN(named)) {
		ph = named
	}
	if !math.IsNaN(table) && !math.IsNaN(named) {
		p.nameDif[key] = named - table
	}
	if math.IsNaN(ph) {
		p.left = append(p.left, spectra.LeftOut{Key: key, Check: "ph.missing", Text: "no pH row names this rung."})
		return
	}
	if !at.IsZero() && !scans[0].Measured.IsZero() && !repeated(at, in.Home) && !repeated(scans[0].Measured, in.Home) {
		p.delay[key] = at.Sub(scans[0].Measured).Minutes()
	}
	p.rungs = append(p.rungs, spectra.Rung{Key: key, PH: ph, Scans: traces})
}

// repeated says whether a wall clock reading occurs twice in a zone, as in the
// hour of an autumn clock change: a difference of such times says nothing.
func repeated(t time.Time, zone *time.Location) bool {
	if zone == nil {
		return false
	}
	wall := t.In(zone).Format(time.DateTime)
	return t.Add(time.Hour).In(zone).Format(time.DateTime) == wall || t.Add(-time.Hour).In(zone).Format(time.DateTime) == wall
}

// byClock gives the readings that fall into the time window of a scan.
func byClock(all []parse.Reading, scan time.Time) []parse.Reading {
	var in []parse.Reading
	for _, r := range all {
		if d := r.Measured.Sub(scan); !scan.IsZero() && !r.Measured.IsZero() && d >= -clockBefore && d <= clockAfter {
			in = append(in, r)
		}
	}
	return in
}

func trace(s Solution, order int) spectra.Trace {
	return spectra.Trace{
		ID: s.ScanID, Name: s.Path, WavelengthNM: s.Scan.WavelengthNM, Absorbance: s.Scan.Absorbance,
		Decimals: s.Scan.Decimals, PathMM: s.Scan.PathMM, Order: order,
	}
}

// coarseness finds the step of a pH column printed to one decimal.
func coarseness(rungs []spectra.Rung) float64 {
	if len(rungs) < 3 {
		return 0
	}
	for _, r := range rungs {
		if math.Abs(r.PH*10-math.Round(r.PH*10)) > 1e-9 {
			return 0
		}
	}
	return 0.1
}

// exchange applies label exchanges that a person has signed.
func (p *pairing) exchange(pairs [][2]string) {
	for _, x := range pairs {
		i, j := p.find(x[0]), p.find(x[1])
		if i >= 0 && j >= 0 {
			p.rungs[i].PH, p.rungs[j].PH = p.rungs[j].PH, p.rungs[i].PH
		}
	}
}

func (p *pairing) find(key string) int {
	return slices.IndexFunc(p.rungs, func(r spectra.Rung) bool { return naming.RungKey(r.Key) == naming.RungKey(key) })
}

// samePH lists consecutive rungs that carry the same pH to the digit.
func (p *pairing) samePH() [][2]string {
	var out [][2]string
	for i := 1; i < len(p.rungs); i++ {
		if p.rungs[i].PH == p.rungs[i-1].PH {
			out = append(out, [2]string{p.rungs[i-1].Key, p.rungs[i].Key})
		}
	}
	return out
}
