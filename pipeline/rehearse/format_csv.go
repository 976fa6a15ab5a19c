package rehearse

import (
	"bytes"
	"fmt"
	"math"
	"strconv"
	"strings"
	"time"
)

// stamp is how the instruments of the story write a moment: wall clock, no zone.
const stamp = "2006-01-02T15:04:05"

// A Locale says how numbers and columns are written.
type Locale struct {
	Comma     bool   // decimal comma
	Delimiter string // "" : ","
}

func (l Locale) delimiter() string {
	if l.Delimiter == "" {
		return ","
	}
	return l.Delimiter
}

// number prints with fixed decimals.
func (l Locale) number(dst []byte, v float64, decimals int) []byte {
	start := len(dst)
	dst = strconv.AppendFloat(dst, v, 'f', decimals, 64)
	if l.Comma {
		for i := start; i < len(dst); i++ {
			if dst[i] == '.' {
				dst[i] = ','
			}
		}
	}
	return dst
}

// ScanCSV writes one scan as delimited text: a block of keys and values, an
// empty line, column names, one row per wavelength.
func ScanCSV(sample, instrument string, sc Scan, zone *time.Location, l Locale) []byte {
	return scanText(sample, instrument, sc, Style{Zone: zone, Locale: l})
}

// scanText is ScanCSV in a style of writing.
func scanText(sample, instrument string, sc Scan, st Style) []byte {
	l, zone := st.Locale, st.Zone
	d := l.delimiter()
	b := make([]byte, 0, 320+18*len(sc.WavelengthNM))
	line := func(key, value string) {
		b = append(b, key...)
		b = append(b, d...)
		b = append(b, ' ')
		b = append(b, value...)
		b = append(b, "\r\n"...)
	}
	line("Sample", sample)
	line("Instrument", instrument)
	line("Measured", sc.Measured.In(zone).Format(stamp))
	line("Path length (mm)", string(l.number(nil, sc.PathMM, 1)))
	line("Cell temperature (C)", string(l.number(nil, sc.TemperatureC, 1)))
	line("Bandwidth (nm)", string(l.number(nil, sc.BandwidthNM, 1)))
	ordinate, column := "absorbance", "Absorbance"
	if st.Percent {
		ordinate, column = "percent transmittance", "Transmittance (%)"
	}
	line("Ordinate", ordinate)
	line("Points", strconv.Itoa(len(sc.WavelengthNM)))
	b = append(b, "\r\n"...)
	b = append(b, "Wavelength (nm)"+d+column+"\r\n"...)
	for i := range sc.WavelengthNM {
		if st.Descending {
			i = len(sc.WavelengthNM) - 1 - i
		}
		v := sc.Absorbance[i]
		if st.Percent {
			v = 100 * math.Pow(10, -v)
		}
		b = l.number(b, sc.WavelengthNM[i], 1)
		b = append(b, d...)
		b = l.number(b, v, sc.Decimals)
		b = append(b, "\r\n"...)
	}
	return b
}

// PHTable writes the pH table of a set.
func PHTable(s *Set, zone *time.Location, l Locale) []byte {
	d := l.delimiter()
	var b bytes.Buffer
	fmt.Fprintf(&b, "pH readings%s %s\r\n", d, s.Name)
	fmt.Fprintf(&b, "Meter%s %s\r\n", d, s.Meter)
	fmt.Fprintf(&b, "Electrode%s %s\r\n", d, s.Electrode)
	fmt.Fprintf(&b, "\r\n%s\r\n", strings.Join([]string{"rung", "pH", "temperature (C)", "read at", "electrode"}, d))
	for _, r := range s.Rungs {
		if r.NoRow {
			continue
		}
		ph := r.Reading.Text
		if ph == "" {
			ph = string(l.number(nil, r.Reading.PH, r.Reading.Decimals))
		}
		cells := []string{r.Key, ph, string(l.number(nil, r.Reading.TemperatureC, 1)),
			r.Reading.At.In(zone).Format(stamp), s.Electrode}
		b.WriteString(strings.Join(cells, d))
		b.WriteString("\r\n")
	}
	return b.Bytes()
}

// CalibrationCSV writes one calibration.
func CalibrationCSV(c Calibration, zone *time.Location) []byte {
	var b bytes.Buffer
	fmt.Fprintf(&b, "Electrode, %s\r\nMeter, %s\r\nCalibrated, %s\r\n\r\n", c.Electrode, c.Meter, c.At.In(zone).Format(stamp))
	b.WriteString("buffer lot,pH,mV,temperature (C)\r\n")
	for _, p := range c.Points {
		fmt.Fprintf(&b, "%s,%.3f,%.2f,%.1f\r\n", p.Lot, p.Label, p.MV, p.TemperatureC)
	}
	return b.Bytes()
}

// An Event is one line of the laboratory's log.
type Event struct {
	At         time.Time
	Kind       string // "electrode", "buffer", "lamp", "cell", "stock", "lot", "calibration", "service"
	Resource   string
	Instrument string
	Text       string
	By         string
}

// EventsCSV writes the events of a day.
func EventsCSV(events []Event, zone *time.Location) []byte {
	var b bytes.Buffer
	b.WriteString("at,kind,resource,instrument,text,by\r\n")
	for _, e := range events {
		fmt.Fprintf(&b, "%s,%s,%s,%s,\"%s\",%s\r\n", e.At.In(zone).Format(stamp), e.Kind, e.Resource, e.Instrument, e.Text, e.By)
	}
	return b.Bytes()
}

// A Planned set is one line of a night plan.
type Planned struct {
	Instrument, Set, Compound, Slot string
}

// PlanCSV writes the plan of a night that begins on date.
func PlanCSV(date string, rows []Planned) []byte {
	var b bytes.Buffer
	b.WriteString("night,instrument,set,compound,slot\r\n")
	for _, r := range rows {
		fmt.Fprintf(&b, "%s,%s,%s,%s,%s\r\n", date, r.Instrument, r.Set, r.Compound, r.Slot)
	}
	return b.Bytes()
}
