package delimited

import (
	"fmt"
	"strings"
	"time"

	"pkvigil/parse"
)

// Forms of dates that leave no doubt about day and month.
var clearDates = [...]string{
	"2006-01-02", "2006/01/02", "2006.01.02", "2.1.2006", "2.1.06",
	"2-Jan-2006", "2 Jan 2006", "Jan 2 2006", "2-Jan-06", "2 Jan 06", "20060102",
}

// Forms of the time of day.
var clocks = [...]string{"15:04:05", "15:04", "3:04:05 PM", "3:04:05PM", "3:04 PM", "150405"}

// moment reads a date with time as the file writes it. layout is a declared
// Go reference layout or "". A wall clock without zone is read in zone; note
// tells of an hour that the zone's clock change repeats or skips. err says why
// nothing could be read, for instance because day and month could both be
// meant.
func moment(text, layout string, zone *time.Location) (t time.Time, zoned bool, note string, err error) {
	if zone == nil {
		zone = time.UTC
	}
	text = strings.Join(strings.Fields(text), " ")
	if layout != "" {
		t, err = time.ParseInLocation(layout, text, zone)
		if err != nil {
			return time.Time{}, false, "", fmt.Errorf("%s does not follow the declared form %q", parse.Show(text), layout)
		}
		zoned = strings.Contains(layout, "Z07") || strings.Contains(layout, "-07")
		if !zoned {
			note = doubt(t, zone)
		}
		return plausible(t, zoned, note, text)
	}
	if len(text) > 10 && text[0]-'0' <= 9 {
		if t, zoned, ok := standard(text, zone); ok {
			if !zoned {
				note = doubt(t, zone)
				if u, _, _ := standard(text, time.UTC); u.Hour() != t.Hour() {
					note = skipped(text)
				}
			}
			return plausible(t, zoned, note, text)
		}
	}
	day, clock, zoneName := dissect(text)
	date, err := calendar(day)
	if err != nil {
		return time.Time{}, false, "", err
	}
	h, ok := timeOfDay(clock)
	if !ok {
		return time.Time{}, false, "", fmt.Errorf("%s holds no time that can be read", parse.Show(text))
	}
	switch zoneName {
	case "UTC", "GMT", "Z":
		zone, zoned = time.UTC, true
	case "CET":
		zone, zoned = time.FixedZone("CET", 3600), true
	case "CEST":
		zone, zoned = time.FixedZone("CEST", 7200), true
	case "":
	default:
		note = fmt.Sprintf("zone name %s has several meanings and is not used", parse.Show(zoneName))
	}
	t = time.Date(date.Year(), date.Month(), date.Day(), h.Hour(), h.Minute(), h.Second(), h.Nanosecond(), zone)
	if d := doubt(t, zone); !zoned && d != "" {
		note = d
	}
	if !zoned && t.Hour() != h.Hour() {
		note = skipped(text)
	}
	return plausible(t, zoned, note, text)
}

func skipped(text string) string {
	return fmt.Sprintf("%s was skipped on the night of the clock change; pair by number, not by time", parse.Show(text))
}

// standard reads the forms that begin with the year.
func standard(text string, zone *time.Location) (t time.Time, zoned, ok bool) {
	forms := [...]string{"2006-01-02T15:04:05.999999999", "2006-01-02 15:04:05.999999999", "2006-01-02T15:04", "2006-01-02 15:04", "20060102T150405", "20060102150405", "20060102-150405"}
	if tail := text[10:]; strings.ContainsAny(tail, "Z+") || strings.LastIndexByte(tail, '-') > 2 {
		for _, form := range [...]string{time.RFC3339Nano, "2006-01-02 15:04:05.999999999Z07:00", "2006-01-02 15:04:05.999999999 Z07:00", "2006-01-02 15:04:05 -0700", "2006-01-02T15:04:05-0700", "20060102T150405Z07:00", "2006-01-02T15:04Z07:00"} {
			if t, err := time.Parse(form, text); err == nil {
				return t, true, true
			}
		}
	}
	for _, form := range forms {
		if t, err := time.ParseInLocation(form, text, zone); err == nil {
			return t, false, true
		}
	}
	return time.Time{}, false, false
}

func plausible(t time.Time, zoned bool, note, text string) (time.Time, bool, string, error) {
	if t.Year() < 1970 || t.Year() > 2199 {
		return time.Time{}, false, "", fmt.Errorf("%s lies in the year %d", parse.Show(text), t.Year())
	}
	return t, zoned, note, nil
}

// doubt tells whether the wall clock of t occurs twice in its zone: whether
// at another moment, d away, the zone's offset differs by just d.
func doubt(t time.Time, zone *time.Location) string {
	if zone == time.UTC {
		return ""
	}
	_, own := t.In(zone).Zone()
	for _, d := range [...]time.Duration{-time.Hour, time.Hour, -30 * time.Minute, 30 * time.Minute} {
		if _, other := t.Add(d).In(zone).Zone(); own-other == int(d/time.Second) {
			return fmt.Sprintf("%s occurs twice on the night of the clock change; pair by number, not by time", t.In(zone).Format("2006-01-02 15:04:05"))
		}
	}
	return ""
}

// dissect splits "Mon Sep 16 02:15:43 2013", "03-23-2011, 12:15:51 PM" and
// the like into the words of the date, of the clock, and the name of a zone.
func dissect(text string) (day, clock, zone string) {
	text = strings.NewReplacer(",", " ", "_", " ").Replace(text)
	var days []string
	for w := range strings.FieldsSeq(text) {
		up := strings.ToUpper(strings.Trim(w, "."))
		switch {
		case strings.Contains(w, ":"):
			clock = w
		case up == "AM" || up == "PM" || up == "A.M" || up == "P.M":
			clock += " " + strings.ReplaceAll(up, ".", "")
		case weekday(up):
		case month(up) == "" && len(up) >= 1 && len(up) <= 5 && isUpper(w) && len(days) > 0:
			zone = up
		default:
			days = append(days, w)
		}
	}
	return strings.Join(days, " "), clock, zone
}

func isUpper(w string) bool {
	for _, r := range w {
		if r < 'A' || r > 'Z' {
			return false
		}
	}
	return w != ""
}

func weekday(up string) bool {
	for _, d := range [...]string{"MON", "TUE", "WED", "THU", "FRI", "SAT", "SUN", "MO", "DI", "MI", "DO", "FR", "SA", "SO"} {
		if up == d || len(up) > 5 && strings.HasPrefix(up, d) && strings.HasSuffix(up, "DAY") {
			return true
		}
	}
	return false
}

// month gives the English abbreviation of a month named in one of several languages.
func month(word string) string {
	w := strings.TrimSpace(fold(word))
	for _, m := range [...]struct{ name, words string }{
		{"Jan", "jan january januar janvier enero ene gennaio gen"}, {"Feb", "feb february februar fevrier fevr febrero febbraio"},
		{"Mar", "mar march marz maerz mrz mars marzo"}, {"Apr", "apr april avril avr abril abr aprile"},
		{"May", "may mai mayo maggio mag"}, {"Jun", "jun june juni juin junio giugno giu"},
		{"Jul", "jul july juli juillet juil julio luglio lug"}, {"Aug", "aug august aout agosto ago"},
		{"Sep", "sep sept september septembre septiembre settembre set"}, {"Oct", "oct october oktober okt octobre octubre ottobre ott"},
		{"Nov", "nov november novembre noviembre"}, {"Dec", "dec december dezember dez decembre diciembre dic dicembre"},
	} {
		if oneOf(w, m.words) {
			return m.name
		}
	}
	return ""
}

// calendar reads a date. Where both day first and month first give a date,
// and the two differ, it refuses.
func calendar(text string) (time.Time, error) {
	words := strings.FieldsFunc(text, func(r rune) bool { return r == ' ' })
	for i, w := range words {
		for part := range strings.SplitSeq(w, "-") {
			if m := month(strings.TrimSuffix(part, ".")); m != "" {
				words[i] = strings.Replace(w, part, m, 1)
			}
		}
	}
	text = strings.Join(words, " ")
	if f := strings.Fields(text); len(f) == 3 && strings.HasSuffix(f[0], ".") {
		text = strings.TrimSuffix(f[0], ".") + " " + f[1] + " " + f[2]
	}
	for _, form := range clearDates {
		if t, err := time.Parse(form, text); err == nil {
			return t, nil
		}
	}
	var found []time.Time
	for _, forms := range [...][2]string{{"2/1/2006", "1/2/2006"}, {"2/1/06", "1/2/06"}, {"2-1-2006", "1-2-2006"}, {"2-1-06", "1-2-06"}} {
		for _, form := range forms {
			if t, err := time.Parse(form, text); err == nil && (len(found) == 0 || !found[0].Equal(t)) {
				found = append(found, t)
			}
		}
		if len(found) > 0 {
			break
		}
	}
	switch len(found) {
	case 1:
		return found[0], nil
	case 2:
		return time.Time{}, fmt.Errorf("%s can be %s or %s", parse.Show(text), found[0].Format("2 January 2006"), found[1].Format("2 January 2006"))
	}
	return time.Time{}, fmt.Errorf("%s is no date that can be read", parse.Show(text))
}

// timeOfDay reads a clock time; an empty one is midnight only for callers that allow it.
func timeOfDay(text string) (time.Time, bool) {
	for _, form := range clocks {
		if t, err := time.Parse(form, text); err == nil {
			return t, true
		}
	}
	return time.Time{}, false
}
