package delimited

import (
	"fmt"
	"math"
	"strings"
	"testing"
	"time"

	"pkvigil/parse"
)

const phHead = "pH readings, QX-104\nMeter, M-3\nElectrode, E-31\n\nrung,pH,temperature (C),read at,electrode\n"

func ladder(heads string, skip func(i int, row string) string) string {
	var b strings.Builder
	b.WriteString(heads)
	for i := range 12 {
		row := fmt.Sprintf("%02d,%.3f,25.%d,2026-03-11T21:%02d:00,E-31", i+1, 6.2+0.364*float64(i), i%3, 2*i)
		b.WriteString(skip(i, row) + "\n")
	}
	return b.String()
}

func asIs(_ int, row string) string { return row }

func phOptions() parse.Options { return parse.Options{Role: "ph"} }

func TestPHTable(t *testing.T) {
	for name, text := range map[string]string{
		"comma":         ladder(phHead, asIs),
		"semicolon":     strings.ReplaceAll(ladder(phHead, asIs), ",", ";"),
		"decimal comma": strings.NewReplacer(",", ";", ".", ",").Replace(ladder(phHead, asIs)),
		"tab":           strings.ReplaceAll(ladder(phHead, asIs), ",", "\t"),
		"blank lines":   strings.ReplaceAll(ladder(phHead, asIs), "\n", "\n\n"),
		"quoted":        strings.ReplaceAll(ladder(phHead, asIs), ",E-31\n", `,"E-31"`+"\n"),
		"footer":        ladder(phHead, asIs) + "end of report\n",
		"units row":     ladder(strings.Replace(phHead, "temperature (C),read at,electrode\n", "temperature,read at,electrode\n,,°C,,\n", 1), asIs),
		"German":        ladder("Messgerät, x\npH-Meter, M-3\nElektrode, E-31\nPosition,pH-Wert,Temperatur,Zeitpunkt,Elektrode\n", asIs),
	} {
		for _, role := range []string{"ph", ""} {
			c := mustRead(t, text, parse.Options{Role: role})
			if c.Format != "ph-table" || len(c.Readings) != 12 {
				t.Errorf("%s: %s with %d readings", name, c.Format, len(c.Readings))
				continue
			}
			for i, p := range c.Readings {
				at := time.Date(2026, 3, 11, 21, 2*i, 0, 0, time.UTC)
				if p.Label != fmt.Sprintf("%02d", i+1) || math.Abs(p.PH-6.2-0.364*float64(i)) > 1e-9 || math.Abs(p.TemperatureC-25-float64(i%3)/10) > 1e-9 ||
					!p.Measured.Equal(at) || p.Electrode != "E-31" || p.Meter != "M-3" || p.Points != 1 || !math.IsNaN(p.MilliVolt) || !math.IsNaN(p.SD) {
					t.Errorf("%s: row %d is %+v", name, i, p)
				}
			}
		}
	}
	c := mustRead(t, "rung,pH,E (mV)\nr1,4.01,171.2\nr2,7.02,-1.3\n", phOptions())
	if c.Readings[0].MilliVolt != 171.2 || c.Readings[1].MilliVolt != -1.3 {
		t.Errorf("potentials %g %g", c.Readings[0].MilliVolt, c.Readings[1].MilliVolt)
	}
}

// TestPHRows leaves out rows that are no readings and says so
// (file.spreadsheet, ph.typed), and refuses files that are none.
func TestPHRows(t *testing.T) {
	one := func(i int, to string) func(int, string) string {
		return func(k int, row string) string {
			if k != i {
				return row
			}
			f := strings.Split(row, ",")
			f[1] = to
			return strings.Join(f, ",")
		}
	}
	for cell, words := range map[string]string{
		"07. Apr":  "spreadsheet may have changed it",
		"7-Apr":    "spreadsheet may have changed it",
		"7.4.2026": "spreadsheet may have changed it",
		"7..41":    "no number",
		"741":      "is no pH",
		"":         "is empty",
		"n/a":      "no number",
		"-400":     "is no pH",
	} {
		c := mustRead(t, ladder(phHead, one(4, cell)), phOptions())
		if len(c.Readings) != 11 || !remarked(c, words) {
			t.Errorf("%q: %d readings, %v", cell, len(c.Readings), c.Remarks)
		}
		for _, p := range c.Readings {
			if p.Label == "05" {
				t.Errorf("%q: the row is used as pH %g", cell, p.PH)
			}
		}
	}
	mv := func(i int, row string) string { return one(i, fmt.Sprintf("%.1f", 60-21.5*float64(i)))(i, row) }
	dates := func(i int, row string) string { return one(i, fmt.Sprintf("%02d. Apr", i+1))(i, row) }
	good := ladder(phHead, asIs)
	for name, x := range map[string]struct{ text, words string }{
		"millivolts":        {ladder(phHead, mv), "looks like millivolts"}, // ph.mV
		"all dates":         {ladder(phHead, dates), "spreadsheet"},
		"no labels":         {"pH,temperature\n7.1,25\n7.2,25\n", "rows are never assigned by their order"},
		"no heads":          {"r01,7.41\nr02,7.62\n", "name the columns"},
		"heads only":        {phHead, "heads without rows"},
		"comma for both":    {"rung,pH,temperature\n01,6,20,25,0\n02,6,56,25,0\n", "decimal"},
		"cut":               {good[:len(good)-12], "cut short"},
		"cut in a number":   {"rung,pH\n01,6.200\n02,6.5", "cut short"},
		"time in doubt":     {strings.ReplaceAll(good, "2026-03-11T21", "03/11/2026 21"), "time_format"},
		"empty":             {"", "empty"},
		"a scan":            {spectrum("Wavelength (nm),Absorbance\n", "%.1f,%.5f", 41, band), "pH"},
		"single millivolts": {"pH: 177.3\n", "looks like millivolts"},
		"two bare numbers":  {"7.41\n7.62\n", "without heads"},
		"no pH at all":      {"hello\n", "a pH reading"},
	} {
		_, err := Read("ph.csv", []byte(x.text), phOptions())
		if err == nil || !strings.Contains(err.Error(), x.words) {
			t.Errorf("%s: %v does not say %q", name, err, x.words)
		}
	}
	c := mustRead(t, strings.ReplaceAll(good, "2026-03-11T21", "03/11/2026 21"), parse.Options{Role: "ph", Layouts: []parse.Layout{{Name: "us", TimeFormat: "01/02/2006 15:04:05"}}})
	if !c.Readings[1].Measured.Equal(time.Date(2026, 3, 11, 21, 2, 0, 0, time.UTC)) {
		t.Errorf("declared form of time: %v", c.Readings[1].Measured)
	}
	c = mustRead(t, "label here,value,x\na,7.1,25\nb,7.2,25\n", parse.Options{Role: "ph", Layouts: []parse.Layout{{Name: "own", Columns: []string{"label", "ph", "temperature"}}}})
	if len(c.Readings) != 2 || c.Readings[1].Label != "b" || c.Readings[1].PH != 7.2 || c.Readings[1].TemperatureC != 25 {
		t.Errorf("declared columns: %+v", c.Readings)
	}
}

func TestPHSingle(t *testing.T) {
	for text, want := range map[string]float64{
		"7.413\n": 7.413, "7,413": 7.413, "pH 7.41\n": 7.41, "pH: 7,41\nTemperatur: 25,0 °C\n": 7.41,
		"Sample;QX r03\npH;7.41\nTemperature (C);25.0\nmV;-24.1\nElectrode;E-31\nDate;2026-03-11\nTime;21:45:00\n": 7.41,
		"pH value = 10.02\nMeter = M-3\n": 10.02,
	} {
		c := mustRead(t, text, phOptions())
		if c.Format != "ph-single" || len(c.Readings) != 1 || c.Readings[0].PH != want {
			t.Errorf("%q: %s %+v", text, c.Format, c.Readings)
		}
		if strings.Contains(text, "E-31") {
			p := c.Readings[0]
			if p.Label != "QX r03" || p.MilliVolt != -24.1 || p.TemperatureC != 25 || p.Electrode != "E-31" || !p.Measured.Equal(time.Date(2026, 3, 11, 21, 45, 0, 0, time.UTC)) {
				t.Errorf("%+v", p)
			}
		}
	}
}

// series prints a reading every step seconds.
func series(heads, form string, step float64, n int, ph func(s float64) float64) string {
	var b strings.Builder
	b.WriteString(heads)
	for i := range n {
		fmt.Fprintf(&b, form+"\n", step*float64(i), ph(step*float64(i)))
	}
	return b.String()
}

func TestPHSeries(t *testing.T) {
	settle := func(s float64) float64 { return 7.4 + 0.5*math.Exp(-s/20) + 0.001*math.Sin(s) }
	c := mustRead(t, series("Started at,x\nMeasured,2026-03-11T21:45:00\ntime (s),pH\n", "%g,%.4f", 2, 91, settle), phOptions())
	if c.Format != "ph-series" || len(c.Readings) != 1 {
		t.Fatalf("%s, %d readings", c.Format, len(c.Readings))
	}
	p := c.Readings[0]
	var sum, n float64
	for s := 150.0; s <= 180; s += 2 { // the last 30 s of 180
		sum, n = sum+settle(s), n+1
	}
	if math.Abs(p.PH-sum/n) > 1e-4 || p.Points != int(n) || !p.Measured.Equal(time.Date(2026, 3, 11, 21, 48, 0, 0, time.UTC)) {
		t.Errorf("mean %g of %d at %v; want %g of %g", p.PH, p.Points, p.Measured, sum/n, n)
	}
	if !(p.SD > 2e-4 && p.SD < 2e-3) || math.Abs(p.SlopePerMin) > 3e-3 {
		t.Errorf("scatter %g, slope %g per minute", p.SD, p.SlopePerMin)
	}
	ramp := func(s float64) float64 { return 7 + 0.0002*s }
	c = mustRead(t, series("time (min);pH;temperature\n", "%g;%.5f;25.0", 0.05, 61, func(m float64) float64 { return ramp(60 * m) }), phOptions())
	if p := c.Readings[0]; math.Abs(p.SlopePerMin-0.012) > 1e-6 || math.Abs(p.PH-ramp(180-15)) > 1e-9 || math.Abs(p.TemperatureC-25) > 1e-9 {
		t.Errorf("slope %g per minute, want 0.012; mean %g", p.SlopePerMin, p.PH)
	}
	c = mustRead(t, series("time (s),pH\n", "%g,%.5f", 2, 91, func(s float64) float64 { return 7 + 0.001*s }), parse.Options{Role: "ph", StablePH: 0.05})
	if len(c.Readings) != 1 {
		t.Error("a looser rule finds no stable reading")
	}
	// The electrode is lifted at the end: the last stable window counts.
	lifted := func(s float64) float64 {
		if s > 120 {
			return 7.4 + 0.02*(s-120)
		}
		return 7.4
	}
	c = mustRead(t, series("time (s),pH\n", "%g,%.4f", 2, 91, lifted), phOptions())
	if p := c.Readings[0]; math.Abs(p.PH-7.4) > 1e-3 {
		t.Errorf("mean %g, want 7.4", p.PH)
	}
	for name, text := range map[string]string{ // ph.dry, ph.lag
		"never stable": series("time (s),pH\n", "%g,%.4f", 2, 91, func(s float64) float64 { return 7 + 0.3*math.Sin(s/10) }),
		"too short":    series("time (s),pH\n", "%g,%.4f", 2, 8, func(s float64) float64 { return 7 }),
	} {
		if _, err := Read("f", []byte(text), phOptions()); err == nil || !strings.Contains(err.Error(), "never became stable") {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := Read("f", []byte("time (s),pH\n0,7\n2,7\n4,7\n3,7\n5,7\n"), phOptions()); err == nil || !strings.Contains(err.Error(), "times in order") {
		t.Errorf("times out of order: %v", err)
	}
}

// TestPHLog reads a night's log: levels of their own, paired by clock.
func TestPHLog(t *testing.T) {
	var b strings.Builder
	b.WriteString("timestamp,pH,temperature (C)\n")
	start := time.Date(2026, 3, 11, 21, 0, 0, 0, time.UTC)
	for i := range 720 { // an hour, every 5 s, six levels of 10 min, 2 min of transition each
		level := i / 120
		v := 6.0 + 0.4*float64(level)
		if i%120 < 24 && level > 0 {
			v -= 0.4 * (1 - float64(i%120)/24)
		}
		fmt.Fprintf(&b, "%s,%.3f,25.0\n", start.Add(time.Duration(5*i)*time.Second).Format("2006-01-02 15:04:05"), v)
	}
	c := mustRead(t, b.String(), phOptions())
	if len(c.Readings) != 6 || !remarked(c, "6 stable levels") {
		t.Fatalf("%d readings, %v", len(c.Readings), c.Remarks)
	}
	for i, p := range c.Readings {
		if math.Abs(p.PH-6-0.4*float64(i)) > 1e-9 {
			t.Errorf("level %d: %g at %v", i, p.PH, p.Measured)
		}
	}
	// Single readings minutes apart are no series.
	c = mustRead(t, "read at;pH\n2026-03-11 21:00:00;6.21\n2026-03-11 21:12:00;6.57\n2026-03-11 21:25:00;6.93\n", phOptions())
	if c.Format != "ph-table" || len(c.Readings) != 3 {
		t.Errorf("%s, %d readings", c.Format, len(c.Readings))
	}
	// A series per rung in one file.
	b.Reset()
	b.WriteString("rung,time (s),pH\n")
	for r := range 3 {
		for i := range 40 {
			fmt.Fprintf(&b, "r%d,%d,%.3f\n", r+1, 2*i, 6+float64(r)+0.2*math.Exp(-float64(i)/4))
		}
	}
	c = mustRead(t, b.String(), phOptions())
	if c.Format != "ph-series" || len(c.Readings) != 3 || c.Readings[2].Label != "r3" || math.Abs(c.Readings[2].PH-8) > 1e-3 {
		t.Errorf("%s: %+v", c.Format, c.Readings)
	}
}

func TestCalibration(t *testing.T) {
	const head = "Electrode, E-31\nMeter, M-3\nCalibrated, 2026-03-09T17:20:00\n\nbuffer lot,pH,mV,temperature (C)\n"
	const rows = "CB-198,4.005,175.31,25.0\nCB-199,6.865,6.92,25.0\nCB-200,10.012,-178.14,25.1\n"
	for name, text := range map[string]string{
		"comma": head + rows, "semicolon": strings.NewReplacer(", ", "; ", ",", ";").Replace(head + rows),
		"decimal comma": strings.NewReplacer(", ", "; ", ",", ";", ".", ",").Replace(head + rows),
		"nominal":       "Electrode;E-31\nMeter;M-3\nDatum;09.03.2026\nZeit;17:20:00\nPuffer;Sollwert;mV;Temperatur (C)\n" + strings.ReplaceAll(rows, ",", ";"),
		"time in rows":  "electrode,meter,calibrated,buffer lot,pH,mV,temperature (C)\n" + prefixed("E-31,M-3,2026-03-09T17:20:00,", rows),
	} {
		for _, role := range []string{"calibration", ""} {
			c := mustRead(t, text, parse.Options{Role: role})
			if c.Format != "calibration" || len(c.Calibrations) != 1 {
				t.Errorf("%s: %s, %d calibrations", name, c.Format, len(c.Calibrations))
				continue
			}
			k := c.Calibrations[0]
			if k.Electrode != "E-31" || k.Meter != "M-3" || !k.Measured.Equal(time.Date(2026, 3, 9, 17, 20, 0, 0, time.UTC)) || len(k.Points) != 3 {
				t.Errorf("%s: %+v", name, k)
				continue
			}
			if p := k.Points[2]; p.Lot != "CB-200" || p.PH != 10.012 || p.MilliVolt != -178.14 || p.TemperatureC != 25.1 {
				t.Errorf("%s: %+v", name, p)
			}
		}
	}
	two := mustRead(t, "electrode,calibrated,buffer lot,pH,mV\n"+prefixed("E-31,2026-03-09T17:20:00,", "a,4.005,175.3\nb,6.865,6.9\n")+prefixed("E-34,2026-03-09T17:40:00,", "a,4.005,171.3\nb,6.865,4.9\n")+
		prefixed("E-34,2026-03-16T17:40:00,", "a,4.005,171.3\nb,6.865,4.9\n"), parse.Options{})
	if len(two.Calibrations) != 3 {
		t.Errorf("%d calibrations of two electrodes on two days, want 3", len(two.Calibrations))
	}
	for name, x := range map[string]struct{ text, words string }{
		"one buffer":       {head + "CB-198,4.005,175.31,25.0\n", "one buffer"},
		"date for a value": {head + strings.Replace(rows, "6.865", "06. Aug", 1), "spreadsheet"},
		"millivolt as pH":  {head + strings.Replace(rows, "6.865", "686.5", 1), "between -2 and 16"},
		"volts":            {head + strings.Replace(rows, "175.31", "17531", 1), "2000 mV"},
		"cut":              {head + rows[:len(rows)-7], "cut short"},
		"cut in the last":  {head + "CB-198,4.005,175.31\nCB-199,6.865,6.9", "cut short"},
		"no heads":         {rows, "heads naming buffer"},
		"no rows":          {head, "heads without rows"},
		"comma for both":   {strings.ReplaceAll(head+rows, ".", ","), "decimal sign"},
	} {
		_, err := Read("cal.csv", []byte(x.text), parse.Options{Role: "calibration"})
		if err == nil || !strings.Contains(err.Error(), x.words) {
			t.Errorf("%s: %v does not say %q", name, err, x.words)
		}
	}
}

func prefixed(prefix, rows string) string {
	var b strings.Builder
	for row := range strings.Lines(rows) {
		b.WriteString(prefix + row)
	}
	return b.String()
}

func TestSheetEventsPlan(t *testing.T) {
	c := mustRead(t, "position;set;rung;role;compound;lot;dilution;ionic strength (mmol/L);buffer;cosolvent;cosolvent %;pH;shelf\n"+
		"A01;QX-104;01;;cresol red;CR-7;2,5;100;TRIS;methanol;40;8,1;\"top; left\"\nA02;QX-104;;Blank;;;;;TRIS;;;;\n", parse.Options{})
	if c.Format != "sheet" || len(c.Sheet) != 2 {
		t.Fatalf("%s, %d rows", c.Format, len(c.Sheet))
	}
	s := c.Sheet[0]
	if s.Position != "A01" || s.Set != "QX-104" || s.Rung != "01" || s.Compound != "cresol red" || s.Lot != "CR-7" || s.Dilution != 2.5 || s.IonicStrength != 0.1 ||
		s.Buffer != "TRIS" || s.Cosolvent != "methanol" || s.CosolventPct != 40 || s.PH != 8.1 || len(s.Other) != 1 || s.Other[0] != (parse.Field{Key: "shelf", Value: "top; left"}) {
		t.Errorf("%+v", s)
	}
	if s := c.Sheet[1]; s.Role != "blank" || s.Dilution != 0 || !math.IsNaN(s.IonicStrength) || !math.IsNaN(s.PH) {
		t.Errorf("%+v", s)
	}
	c = mustRead(t, "at,kind,resource,instrument,text,by\n2026-03-11T09:00:00,Lamp,L-7,U1,\"changed, \"\"new\"\"\nand aligned\",A. Weld\n2026-03-11T10:00:00Z,buffer,CB-207,,,B\n", parse.Options{})
	if len(c.Events) != 2 || c.Events[0].Kind != "lamp" || c.Events[0].Text != `changed, "new" and aligned` || c.Events[0].Instrument != "U1" || c.Events[0].By != "A. Weld" || c.Events[0].Line != 3 ||
		!c.Events[1].Zoned || c.Events[0].Zoned {
		t.Errorf("%+v", c.Events)
	}
	c = mustRead(t, "night,instrument,set,compound,slot\n2026-03-11,U1,RI-A_n041,RI-A,Open\n12.03.2026,U1,QX-104,,\n", parse.Options{})
	if len(c.Plan) != 2 || c.Plan[0].Slot != "open" || c.Plan[1].Night != "2026-03-12" || c.Plan[1].Set != "QX-104" {
		t.Errorf("%+v", c.Plan)
	}
	for name, x := range map[string]struct{ role, text, words string }{
		"dilution below 1":   {"sheet", "position,set,dilution\nA1,Q,0.5\n", "at least 1"},
		"pH of 77":           {"sheet", "position,set,pH\nA1,Q,77\n", "a pH"},
		"event without kind": {"events", "at,kind,resource\n2026-03-11T09:00:00,,L-7\n", "a kind"},
		"event without time": {"events", "at,kind,resource\n,lamp,L-7\n", "when it happened"},
		"event time unclear": {"events", "at,kind,resource\n03/04/2026 09:00,lamp,L-7\n", "without doubt"},
		"plan without night": {"plan", "night,instrument,set\n03/04/2026,U1,Q\n", "year-month-day"},
		"plan of nothing":    {"plan", "night,instrument,set\n2026-03-11,U1,\n", "neither set nor compound"},
		"sheet of no heads":  {"sheet", "1,2\n3,4\n", "name the columns"},
	} {
		_, err := Read("f.csv", []byte(x.text), parse.Options{Role: x.role})
		if err == nil || !strings.Contains(err.Error(), x.words) {
			t.Errorf("%s: %v does not say %q", name, err, x.words)
		}
	}
}
