package delimited

import (
	"bufio"
	"fmt"
	"io"
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"pkvigil/parse"
)

const wall = "2006-01-02T15:04:05.999999999"

// Write puts content into canonical form, which Read reads back to the same
// records: UTF-8, comma, decimal point, shortest exact numbers. Scans are
// written in long form; header fields that no record has a place for (Meta)
// and the number of decimals printed are not written. Times that named no zone
// are written as the wall clock of zone; nil is UTC. Content of one kind only
// is written; an empty one is an error.
func Write(w io.Writer, c *parse.Content, zone *time.Location) error {
	if zone == nil {
		zone = time.UTC
	}
	out := &writer{w: bufio.NewWriter(w), zone: zone}
	switch {
	case len(c.Scans) > 0:
		out.scans(c.Scans)
	case len(c.Readings) > 0:
		out.readings(c.Readings)
	case len(c.Calibrations) > 0:
		out.calibrations(c.Calibrations)
	case len(c.Sheet) > 0:
		out.sheet(c.Sheet)
	case len(c.Events) > 0:
		out.events(c.Events)
	case len(c.Plan) > 0:
		out.plan(c.Plan)
	default:
		return fmt.Errorf("writing %s: no records", c.Format)
	}
	if err := out.w.Flush(); err != nil {
		return fmt.Errorf("writing %s: %w", c.Format, err)
	}
	return nil
}

type writer struct {
	w    *bufio.Writer
	zone *time.Location
}

// row writes one line; bufio keeps the first error for Flush.
func (o *writer) row(cells ...string) {
	for i, c := range cells {
		if i > 0 {
			o.w.WriteByte(',')
		}
		if strings.ContainsAny(c, "\",;\t|\n\r") || c != strings.TrimSpace(c) {
			c = `"` + strings.ReplaceAll(c, `"`, `""`) + `"`
		}
		o.w.WriteString(c)
	}
	o.w.WriteByte('\n')
}

func (o *writer) moment(t time.Time, zoned bool) string {
	switch {
	case t.IsZero():
		return ""
	case zoned:
		return t.Format(time.RFC3339Nano)
	}
	return t.In(o.zone).Format(wall)
}

// figure writes the shortest decimal that reads back to v; nothing for NaN.
func figure(v float64) string {
	if math.IsNaN(v) {
		return ""
	}
	return strconv.FormatFloat(v, 'g', -1, 64)
}

// positive is figure with nothing for zero.
func positive(v float64) string {
	if v == 0 {
		return ""
	}
	return figure(v)
}

func (o *writer) scans(scans []parse.Scan) {
	o.row("Sample", "Measured", "Path length (mm)", "Cell temperature (C)", "Bandwidth (nm)", "Instrument", "pH", "Wavelength (nm)", "Absorbance")
	for _, s := range scans {
		head := []string{s.Label, o.moment(s.Measured, s.Zoned), positive(s.PathMM), figure(s.TemperatureC), positive(s.BandwidthNM), s.Instrument, figure(s.PH)}
		for i, x := range s.WavelengthNM {
			y := "NaN"
			if v := s.Absorbance[i]; !math.IsNaN(v) {
				y = figure(v)
			}
			o.row(append(head, figure(x), y)...)
		}
	}
}

// readings leaves the column of pH out where there are only potentials.
func (o *writer) readings(rs []parse.Reading) {
	cells := []string{"rung", "pH", "mV", "temperature (C)", "sd", "slope per min", "points", "read at", "electrode", "meter"}
	onlyMV := !slices.ContainsFunc(rs, func(p parse.Reading) bool { return !math.IsNaN(p.PH) })
	put := func(cells []string) {
		if onlyMV {
			cells = slices.Delete(cells, 1, 2)
		}
		o.row(cells...)
	}
	put(cells)
	for _, p := range rs {
		put([]string{p.Label, figure(p.PH), figure(p.MilliVolt), figure(p.TemperatureC), figure(p.SD), figure(p.SlopePerMin), strconv.Itoa(p.Points),
			o.moment(p.Measured, p.Zoned), p.Electrode, p.Meter})
	}
}

func (o *writer) calibrations(cs []parse.Calibration) {
	o.row("electrode", "meter", "calibrated", "buffer lot", "pH", "mV", "temperature (C)")
	for _, k := range cs {
		for _, p := range k.Points {
			o.row(k.Electrode, k.Meter, o.moment(k.Measured, k.Zoned), p.Lot, figure(p.PH), figure(p.MilliVolt), figure(p.TemperatureC))
		}
	}
}

func (o *writer) sheet(rows []parse.Row) {
	heads := []string{"position", "set", "rung", "role", "compound", "lot", "dilution", "ionic strength (mol/L)", "buffer", "cosolvent", "cosolvent %", "pH"}
	place := map[string][]int{} // the columns of a key, one for each time a row holds it
	column := func(seen map[string]int, key string) int {
		k := seen[key]
		seen[key]++
		if k == len(place[key]) {
			place[key] = append(place[key], len(heads))
			heads = append(heads, key)
		}
		return place[key][k]
	}
	for _, s := range rows {
		seen := map[string]int{}
		for _, f := range s.Other {
			column(seen, f.Key)
		}
	}
	o.row(heads...)
	for _, s := range rows {
		cells := make([]string, len(heads))
		copy(cells, []string{s.Position, s.Set, s.Rung, s.Role, s.Compound, s.Lot, positive(s.Dilution), figure(s.IonicStrength), s.Buffer, s.Cosolvent, figure(s.CosolventPct), figure(s.PH)})
		seen := map[string]int{}
		for _, f := range s.Other {
			cells[column(seen, f.Key)] = f.Value
		}
		o.row(cells...)
	}
}

func (o *writer) events(es []parse.Event) {
	o.row("at", "kind", "resource", "instrument", "text", "by")
	for _, e := range es {
		o.row(o.moment(e.At, e.Zoned), e.Kind, e.Resource, e.Instrument, e.Text, e.By)
	}
}

func (o *writer) plan(ps []parse.Planned) {
	o.row("night", "instrument", "set", "compound", "slot")
	for _, p := range ps {
		o.row(p.Night, p.Instrument, p.Set, p.Compound, p.Slot)
	}
}
