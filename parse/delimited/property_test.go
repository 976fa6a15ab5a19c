package delimited

import (
	"bytes"
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"

	"pkvigil/parse"
)

// drawScan invents a scan with every field that Write keeps.
func drawScan(t *rapid.T, label string) parse.Scan {
	n := rapid.IntRange(leastPoints, 60).Draw(t, "points")
	s := parse.Scan{Label: label, PH: math.NaN(), TemperatureC: math.NaN(), Instrument: rapid.SampledFrom([]string{"", "U1", "U 2, left"}).Draw(t, "instrument")}
	x := rapid.Float64Range(150, 900).Draw(t, "first")
	for range n {
		s.WavelengthNM = append(s.WavelengthNM, x)
		x += rapid.Float64Range(1e-3, 5).Draw(t, "step")
		y := rapid.Float64Range(-0.5, 2.4).Draw(t, "absorbance")
		if rapid.IntRange(0, 20).Draw(t, "missing") == 0 {
			y = math.NaN()
		}
		s.Absorbance = append(s.Absorbance, y)
	}
	if finite(s.Absorbance) == 0 {
		s.Absorbance[0] = 0.1
	}
	if rapid.Bool().Draw(t, "facts") {
		s.PathMM = rapid.SampledFrom([]float64{1, 2, 5, 10, 50, 0.5}).Draw(t, "path")
		s.TemperatureC = rapid.Float64Range(-5, 105).Draw(t, "temperature")
		s.BandwidthNM = rapid.Float64Range(0.1, 10).Draw(t, "bandwidth")
		s.PH = rapid.Float64Range(-2, 16).Draw(t, "pH")
		s.Measured = time.Unix(rapid.Int64Range(0, 4e9).Draw(t, "second"), rapid.Int64Range(0, 999999999).Draw(t, "nanosecond"))
		s.Zoned = rapid.Bool().Draw(t, "zoned")
	}
	return s
}

// TestWriteScans: scans written canonically read back to the same digits.
func TestWriteScans(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		c := &parse.Content{Format: "delimited"}
		labels := rapid.SliceOfNDistinct(rapid.StringMatching(`[A-Za-zµ][A-Za-z0-9 |",;._\-]{0,12}[A-Za-z0-9]`), 1, 4, rapid.ID).Draw(t, "labels")
		for _, l := range labels {
			c.Scans = append(c.Scans, drawScan(t, l))
		}
		var out bytes.Buffer
		if err := Write(&out, c, nil); err != nil {
			t.Fatal(err)
		}
		back, err := Read("f", out.Bytes(), parse.Options{Role: "scan"})
		if err != nil {
			if len(labels) > 1 && strings.Contains(err.Error(), "without names") {
				return // a drawn name is the word for a quantity
			}
			t.Fatalf("%v\n%s", err, out.Bytes())
		}
		if d := difference(c, back); d != "" {
			t.Fatal(d)
		}
	})
}

// TestDialects: the same table in every unambiguous dialect gives the same digits.
func TestDialects(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		s := drawScan(t, "S1 Abs")
		dec := rapid.IntRange(1, 9).Draw(t, "decimals")
		var texts []string
		for _, d := range []dialect{{delim: ',', point: '.'}, {delim: ';', point: '.'}, {delim: ';', point: ','}, {delim: '\t', point: '.'}, {delim: '\t', point: ','}, {delim: ' ', point: '.'}, {delim: ' ', point: ','}} {
			var b strings.Builder
			fmt.Fprintf(&b, "nm%cAbs\n", d.delim)
			for i, x := range s.WavelengthNM {
				y := "OVER"
				if !math.IsNaN(s.Absorbance[i]) {
					y = strconv.FormatFloat(s.Absorbance[i], 'f', dec, 64)
				}
				row := strconv.FormatFloat(x, 'f', 9, 64) + string(d.delim) + y
				if d.point == ',' {
					row = strings.ReplaceAll(row, ".", ",")
				}
				b.WriteString(row + "\n")
			}
			texts = append(texts, b.String())
		}
		var first *parse.Content
		for _, text := range texts {
			c, err := Read("f", []byte(text), parse.Options{})
			if err != nil {
				t.Fatalf("%v\n%s", err, text)
			}
			if first == nil {
				first = c
			} else if d := difference(first, c); d != "" {
				t.Fatalf("%s\n%s", d, text)
			}
		}
	})
}

// TestWriteRecords does the same for the other kinds of content.
func TestWriteRecords(t *testing.T) {
	word := rapid.StringMatching(`[A-Za-z][A-Za-z0-9\-"; ,<>=]{0,10}[A-Za-z0-9]`)
	maybe := func(t *rapid.T, g *rapid.Generator[float64], name string) float64 {
		if rapid.Bool().Draw(t, "with "+name) {
			return g.Draw(t, name)
		}
		return math.NaN()
	}
	at := func(t *rapid.T) (time.Time, bool) {
		return time.Unix(rapid.Int64Range(0, 4e9).Draw(t, "second"), 0), rapid.Bool().Draw(t, "zoned")
	}
	rapid.Check(t, func(t *rapid.T) {
		var c parse.Content
		n := rapid.IntRange(2, 8).Draw(t, "rows")
		switch rapid.IntRange(0, 4).Draw(t, "kind") {
		case 0:
			c.Format = "ph-table"
			for i := range n {
				p := parse.Reading{Label: fmt.Sprintf("r%02d", i), PH: rapid.Float64Range(-2, 16).Draw(t, "pH"), MilliVolt: maybe(t, rapid.Float64Range(-500, 500), "mV"),
					TemperatureC: maybe(t, rapid.Float64Range(0, 90), "T"), SD: maybe(t, rapid.Float64Range(0, 0.1), "sd"), SlopePerMin: maybe(t, rapid.Float64Range(-1, 1), "slope"),
					Points: rapid.IntRange(1, 99).Draw(t, "n"), Electrode: word.Draw(t, "electrode"), Meter: word.Draw(t, "meter")}
				p.Measured, p.Zoned = at(t)
				c.Readings = append(c.Readings, p)
			}
		case 1:
			c.Format = "calibration"
			k := parse.Calibration{Electrode: word.Draw(t, "electrode"), Meter: word.Draw(t, "meter")}
			k.Measured, k.Zoned = at(t)
			for range n {
				k.Points = append(k.Points, parse.CalibrationPoint{Lot: word.Draw(t, "lot"), PH: rapid.Float64Range(-2, 16).Draw(t, "pH"), MilliVolt: rapid.Float64Range(-1999, 1999).Draw(t, "mV"),
					TemperatureC: maybe(t, rapid.Float64Range(0, 90), "T")})
			}
			c.Calibrations = []parse.Calibration{k}
		case 2:
			c.Format = "sheet"
			for range n {
				c.Sheet = append(c.Sheet, parse.Row{Position: word.Draw(t, "position"), Set: word.Draw(t, "set"), Rung: word.Draw(t, "rung"), Role: "blank", Compound: word.Draw(t, "compound"),
					Lot: word.Draw(t, "lot"), Dilution: rapid.Float64Range(1, 100).Draw(t, "dilution"), IonicStrength: maybe(t, rapid.Float64Range(0, 3), "I"), Buffer: word.Draw(t, "buffer"),
					Cosolvent: word.Draw(t, "cosolvent"), CosolventPct: maybe(t, rapid.Float64Range(0, 100), "percent"), PH: maybe(t, rapid.Float64Range(-2, 16), "pH"),
					Other: []parse.Field{{Key: "shelf", Value: word.Draw(t, "shelf")}}})
			}
		case 3:
			c.Format = "events"
			for range n {
				e := parse.Event{Kind: "lamp", Resource: word.Draw(t, "resource"), Instrument: word.Draw(t, "instrument"), Text: word.Draw(t, "text"), By: word.Draw(t, "by")}
				e.At, e.Zoned = at(t)
				c.Events = append(c.Events, e)
			}
		default:
			c.Format = "plan"
			for i := range n {
				c.Plan = append(c.Plan, parse.Planned{Night: fmt.Sprintf("2026-03-%02d", i+1), Instrument: word.Draw(t, "instrument"), Set: word.Draw(t, "set"), Compound: word.Draw(t, "compound"), Slot: "open"})
			}
		}
		var out bytes.Buffer
		if err := Write(&out, &c, nil); err != nil {
			t.Fatal(err)
		}
		back, err := Read("f", out.Bytes(), parse.Options{Role: roleOf(c.Format)})
		if err != nil {
			t.Fatalf("%v\n%s", err, out.Bytes())
		}
		if d := difference(&c, back); d != "" {
			t.Fatalf("%s\n%s", d, out.Bytes())
		}
	})
}

func TestWriteNothing(t *testing.T) {
	if err := Write(&bytes.Buffer{}, &parse.Content{Format: "delimited"}, nil); err == nil {
		t.Error("content without records is written")
	}
}
