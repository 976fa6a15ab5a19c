package delimited

import (
	"fmt"
	"math"
	"strings"
	"time"

	"pkvigil/parse"
)

// need refuses a file without the heads its kind requires.
func (r *reader) need(t *table, what string) error {
	if t == nil {
		return r.refuse(0, "", r.opening(), what, "name the columns, or declare columns in a layout")
	}
	if len(t.rows) == 0 {
		return r.refuse(t.header+1, "", "heads without rows", "rows below them", "the file may be unfinished; export it again")
	}
	if err := r.overfull(t); err != nil {
		return err
	}
	return r.cutTable(t)
}

// calibration reads electrode calibrations: the potential in each buffer.
func (r *reader) calibration(t *table) (*parse.Content, error) {
	if err := r.need(t, "heads naming buffer, pH and mV"); err != nil {
		return nil, err
	}
	f := r.tableFacts(t)
	ph := colPH
	if t.has(colNominal) {
		ph = colNominal
	}
	c := &parse.Content{Format: "calibration"}
	for _, row := range t.rows {
		if over(row, len(t.heads)) {
			return nil, r.refuse(row.line, "", fmt.Sprintf("%d fields", len(row.cells)), fmt.Sprintf("%d as there are heads", len(t.heads)), "export the file again")
		}
		if r.footer(t, row) {
			continue
		}
		p := parse.CalibrationPoint{Line: row.line, TemperatureC: f.temperature}
		var err error
		if p.PH, err = r.must(t, row, ph); err != nil {
			return nil, err
		}
		if p.PH < lowestPH || p.PH > highestPH {
			return nil, r.refuse(row.line, t.field(ph), fmt.Sprintf("%g", p.PH), "pH between -2 and 16", "the column looks like millivolts; correct the heads")
		}
		if p.MilliVolt, err = r.must(t, row, colMilliVolt); err != nil {
			return nil, err
		}
		if strings.EqualFold(unitAt(t, colMilliVolt), "V") {
			p.MilliVolt *= 1000
		}
		if math.Abs(p.MilliVolt) > 2000 {
			return nil, r.refuse(row.line, t.field(colMilliVolt), fmt.Sprintf("%g", p.MilliVolt), "a potential between -2000 and 2000 mV", "check the meter's export")
		}
		if t.has(colTemperature) {
			p.TemperatureC = r.may(t, row, colTemperature)
		}
		if p.Lot = t.text(row, colLot); p.Lot == "" {
			p.Lot = t.text(row, colBuffer)
		}
		if err := r.addPoint(c, t, row, f, p); err != nil {
			return nil, err
		}
	}
	for _, k := range c.Calibrations {
		if len(k.Points) < 2 {
			return nil, r.refuse(k.Points[0].Line, "", "one buffer", "at least two", "a slope cannot be had from one buffer; export the whole calibration")
		}
	}
	if len(c.Calibrations) == 0 {
		return nil, r.refuse(t.header+1, "", "no buffer", "at least two", "export the whole calibration")
	}
	return c, nil
}

// addPoint puts a point to the calibration it belongs to: rows that name
// another electrode or another day begin a new one.
func (r *reader) addPoint(c *parse.Content, t *table, row tableRow, f facts, p parse.CalibrationPoint) error {
	k := parse.Calibration{Electrode: f.electrode, Meter: f.meter, Measured: f.measured, Zoned: f.zoned, Meta: f.meta}
	if e := t.text(row, colElectrode); e != "" {
		k.Electrode = e
	}
	if m := t.text(row, colMeter); m != "" {
		k.Meter = m
	}
	at, zoned, err := r.rowTime(t, row, f)
	if err != nil {
		return err
	}
	if !at.IsZero() {
		k.Measured, k.Zoned = at, zoned
	}
	const same = 4 * time.Hour // buffers of one calibration are read within this
	if n := len(c.Calibrations); n > 0 {
		last := &c.Calibrations[n-1]
		gap := k.Measured.Sub(last.Measured)
		if last.Electrode == k.Electrode && last.Meter == k.Meter && gap >= 0 && gap < same {
			last.Points = append(last.Points, p)
			last.Measured = k.Measured
			return nil
		}
	}
	k.Points = []parse.CalibrationPoint{p}
	c.Calibrations = append(c.Calibrations, k)
	return nil
}

// must reads a number that has to be there.
func (r *reader) must(t *table, row tableRow, meaning int) (float64, error) {
	cell := t.at(row, meaning)
	v, k := t.d.number(cell)
	if k >= parse.Exponential {
		return v, nil
	}
	remedy := "export the file again"
	if dateLike(cell) {
		remedy = "a spreadsheet may have changed it; export the file again"
	}
	return 0, r.refuse(row.line, t.field(meaning), parse.Show(cell), "a number", remedy)
}

// may reads a number that may be missing; NaN then.
func (r *reader) may(t *table, row tableRow, meaning int) float64 {
	cell := t.at(row, meaning)
	v, k := t.d.number(cell)
	if k == cellText {
		r.remark(row.line, "%s reads %s, which is no number; taken as not stated", t.field(meaning), parse.Show(cell))
		return math.NaN()
	}
	return v
}

// sheet reads a sample sheet.
func (r *reader) sheet(t *table) (*parse.Content, error) {
	if err := r.need(t, "heads naming position, set and rung"); err != nil {
		return nil, err
	}
	c := &parse.Content{Format: "sheet"}
	label := labelColumn(t)
	for _, row := range t.rows {
		if over(row, len(t.heads)) {
			return nil, r.refuse(row.line, "", fmt.Sprintf("%d fields", len(row.cells)), fmt.Sprintf("%d as there are heads", len(t.heads)), "quote texts that hold the delimiter")
		}
		s := parse.Row{
			Position: t.text(row, colPosition), Set: t.text(row, colSet), Rung: t.text(row, colRung), Role: strings.ToLower(t.text(row, colRole)),
			Compound: t.text(row, colCompound), Lot: t.text(row, colLot), Buffer: t.text(row, colBuffer), Cosolvent: t.text(row, colCosolvent),
			IonicStrength: math.NaN(), CosolventPct: math.NaN(), PH: math.NaN(), Line: row.line,
		}
		if s.Position == "" && label != colRung {
			s.Position = t.text(row, label)
		}
		if err := r.sheetNumbers(t, row, &s); err != nil {
			return nil, err
		}
		for i, h := range t.heads {
			if i < len(row.cells) && t.unread(i, label) {
				if h == "" {
					h = fmt.Sprintf("column %d", i+1)
				}
				if v := parse.Clean(row.cells[i]); v != "" {
					s.Other = append(s.Other, parse.Field{Key: h, Value: v})
				}
			}
		}
		if saysNothing(s) {
			c.Remarks = append(c.Remarks, parse.Remark{Line: row.line, Text: "a row that says nothing left out"})
			continue
		}
		c.Sheet = append(c.Sheet, s)
	}
	if len(c.Sheet) == 0 {
		return nil, r.refuse(0, "", "rows that say nothing", "rows with a position, set or rung", "fill the sheet in")
	}
	return c, nil
}

// saysNothing is true of a row of a sheet in which no field stands that this program reads.
func saysNothing(s parse.Row) bool {
	return s.Position == "" && s.Set == "" && s.Rung == "" && s.Role == "" && s.Compound == "" && s.Lot == "" && s.Buffer == "" && s.Cosolvent == "" &&
		s.Dilution == 0 && math.IsNaN(s.IonicStrength) && math.IsNaN(s.CosolventPct) && math.IsNaN(s.PH)
}

// unread tells whether no field of a sheet row is made from column i.
func (t *table) unread(i, label int) bool {
	for _, m := range [...]int{colPosition, colSet, colRung, colRole, colCompound, colLot, colBuffer, colCosolvent, colIonic, colPercent, colPH, colDilution} {
		if t.col[m] == i {
			return false
		}
	}
	return !(t.col[colPosition] < 0 && label != colNone && label != colRung && t.col[label] == i)
}

func (r *reader) sheetNumbers(t *table, row tableRow, s *parse.Row) error {
	for _, x := range [...]struct {
		col    int
		to     *float64
		lo, hi float64
		unit   string
	}{
		{colIonic, &s.IonicStrength, 0, 20, "an ionic strength in mol/L"}, {colPercent, &s.CosolventPct, 0, 100, "a percentage"},
		{colPH, &s.PH, lowestPH, highestPH, "a pH"}, {colDilution, &s.Dilution, 1, 1e9, "a factor of at least 1"},
	} {
		cell := t.at(row, x.col)
		if len(cell) == 0 {
			continue
		}
		v, k := t.d.number(cell)
		if k == cellMissing {
			continue
		}
		if u := strings.ToLower(unitAt(t, x.col)); x.col == colIonic && (u == "mm" || u == "mmol/l") {
			v /= 1000
		}
		if k < parse.Exponential || v < x.lo || v > x.hi {
			return r.refuse(row.line, t.field(x.col), parse.Show(cell), x.unit, "correct the sheet")
		}
		*x.to = v
	}
	return nil
}

// events reads a log of what was changed when.
func (r *reader) events(t *table) (*parse.Content, error) {
	if err := r.need(t, "heads naming time, kind and resource"); err != nil {
		return nil, err
	}
	c := &parse.Content{Format: "events"}
	f := r.tableFacts(t)
	for _, row := range t.rows {
		if over(row, len(t.heads)) {
			return nil, r.refuse(row.line, "", fmt.Sprintf("%d fields", len(row.cells)), fmt.Sprintf("%d as there are heads", len(t.heads)), "quote texts that hold the delimiter")
		}
		at, zoned, err := r.rowTime(t, row, f)
		if err != nil {
			return nil, err
		}
		if at.IsZero() {
			return nil, r.refuse(row.line, "time", "no date and time", "when it happened", "complete the row")
		}
		e := parse.Event{At: at, Zoned: zoned, Kind: strings.ToLower(t.text(row, colKind)), Resource: t.text(row, colResource),
			Instrument: t.text(row, colInstrument), Text: t.text(row, colText), By: t.text(row, colBy), Line: row.line}
		if e.Kind == "" {
			return nil, r.refuse(row.line, t.field(colKind), "nothing", "a kind such as lamp, electrode, buffer", "complete the row")
		}
		c.Events = append(c.Events, e)
	}
	return c, nil
}

// plan reads a night plan.
func (r *reader) plan(t *table) (*parse.Content, error) {
	if err := r.need(t, "heads naming night, instrument and set"); err != nil {
		return nil, err
	}
	c := &parse.Content{Format: "plan"}
	night := colNight
	if !t.has(colNight) {
		night = colDate
	}
	for _, row := range t.rows {
		if over(row, len(t.heads)) {
			return nil, r.refuse(row.line, "", fmt.Sprintf("%d fields", len(row.cells)), fmt.Sprintf("%d as there are heads", len(t.heads)), "quote texts that hold the delimiter")
		}
		text := t.text(row, night)
		date, err := calendar(text)
		if err == nil && (date.Year() < 1970 || date.Year() > 2199) {
			err = fmt.Errorf("the year %d is out of range", date.Year())
		}
		if err != nil {
			return nil, &parse.Error{File: r.src.name, Line: row.line, Field: t.field(night), Found: parse.Show(text), Expected: "a date such as 2026-03-11",
				Remedy: "write the night as year-month-day", Err: err}
		}
		p := parse.Planned{Night: date.Format("2006-01-02"), Instrument: t.text(row, colInstrument), Set: t.text(row, colSet), Compound: t.text(row, colCompound),
			Slot: strings.ToLower(t.text(row, colSlot)), Line: row.line}
		if p.Set == "" && p.Compound == "" {
			return nil, r.refuse(row.line, "", "neither set nor compound", "what is planned", "complete the row")
		}
		c.Plan = append(c.Plan, p)
	}
	return c, nil
}
