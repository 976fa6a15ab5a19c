package rehearse

import (
	"fmt"
	"path"
	"slices"
	"strconv"
	"strings"
)

// Wires are the places outside the laboratory that a replay wants to reach.
// Empty fields are left out of the settings.
type Wires struct {
	DataDir          string // where the program keeps its data
	MailHost         string // a relay on this machine, spoken to in clear
	MailPort         int
	WebhookURL       string
	WebhookSecretEnv string // environment variable with the signing secret
	Listen           string // address of the status page
}

// Settings is the complete settings file of the laboratory, for shares below
// base (an absolute, slash-separated path), without mail and webhook.
func (s *Story) Settings(base string) []byte { return s.SettingsWith(base, Wires{}) }

// SettingsWith is Settings with places to send messages to.
func (s *Story) SettingsWith(base string, to Wires) []byte {
	w := &tomlWriter{}
	w.text("# Settings of the invented laboratory Quillmere Indicator Works.")
	w.comment = false
	w.table("laboratory", "name", "Quillmere Indicator Works", "zone", "Europe/Vienna",
		"night_begins", "18:00", "night_ends", "06:00", "brief_at", "06:30")
	s.folders(w, base)
	s.rules(w)
	s.compounds(w)
	s.instruments(w)
	s.resources(w)
	w.table("complete", "roles", []string{"blank", "ph"}, "rungs_min", 7, "silence", "10m", "every_row", true, "deadline", "45m")
	w.text("\n# Readings of one set scatter together by 0.005; bottles are better than usual here.")
	w.table("method", "activity", "davies", "report_at", 25.0, "constant", "mixed", "coverage_factor", 2.0,
		"absorbance_ceiling", 1.5, "calibration_age_hold", "192h")
	w.table("budget", "u_buffer", 0.003, "u_calibration_mv", 0.1, "u_drift_per_day", 0.001, "u_junction", 0.005,
		"u_temperature", 0.1, "u_activity_rel", 0.06, "u_stray", 0.0003, "u_impurity", 0.002)
	w.text("\n# Electrodes are calibrated every Monday.")
	w.list("check", "check", "calibration.age", "note_when", []float64{192}, "hold_when", []float64{240})
	w.text("\n# The thymol blue ladder ends 0.9 above the highest buffer; a carbonate-hydroxide solution has shown the line to hold there.")
	w.list("check", "check", "ph.range", "compound", sampleCompounds()["TB"], "note_when", []float64{1.0}, "hold_when", []float64{1.5})
	w.table("charts", "false_alarm_nights", 365.0, "impact_limit", 0.02, "baseline_nights", 14, "young_nights", 8)
	people(w, to)
	outside(w, to)
	return w.b
}

// people are told by mail only where there is a relay.
func people(w *tomlWriter, to Wires) {
	add := func(name, address string, tells []string, more ...any) {
		rows := []any{"name", name, "tells", tells}
		if to.MailHost != "" {
			rows = append(rows, "mail", address+"@quillmere.example")
		}
		w.list("person", append(rows, more...)...)
	}
	add(metrologist, "metrology", []string{"cases", "absence", "brief"})
	add(manager, "manager", []string{"cases", "brief"}, "after", "72h")
	add(analyst, "night", []string{"absence", "brief"})
}

func outside(w *tomlWriter, to Wires) {
	if to.DataDir != "" {
		w.table("storage", "data_dir", to.DataDir)
	}
	if to.MailHost != "" {
		w.table("mail", "host", to.MailHost, "port", to.MailPort, "from", "pkvigil@quillmere.example", "tls", "off")
	}
	if to.WebhookURL != "" {
		w.list("webhook", "name", "laboratory screen", "url", to.WebhookURL, "secret_env", to.WebhookSecretEnv)
	}
	if to.Listen != "" {
		w.table("serve", "listen", to.Listen)
	}
}

func (s *Story) folders(w *tomlWriter, base string) {
	for _, f := range Folders() {
		rows := []any{"name", f, "path", path.Join(base, f), "marker_file", MarkerFile, "settle", "2s", "sweep", "5s", "zone", "Europe/Vienna"}
		if f == instOne || f == instTwo {
			rows = append(rows, "instrument", f, "expect_first", "18:20", "silence_deadline", "2h")
		}
		w.list("folder", rows...)
	}
}

func (s *Story) rules(w *tomlWriter) {
	w.text("\n# n041/CR-1656_s05.csv: night, lot, solution. A copy made by hand ends in \" (2)\".")
	w.list("rule", "name", "sample", "folders", []string{instOne, instTwo},
		"pattern", raw(`^n(?P<night>\d{3})/(?P<set>[A-Z]{2,3}-\d{4})_(?:s(?P<rung>\d{2})|(?P<role>blank|ph))(?: \((?P<copy>\d)\))?\.(?:csv|jdx)$`),
		"set", "${set}.n${night}", "pair", "key",
		"example", []string{"n041/CR-1656_s05.csv", "n041/CR-1656_ph.csv", "n012/BCG-1201_blank.jdx", "n003/PR-1049_s11 (2).csv"})
	w.text("\n# n041/RI-C.open_s05.csv: night, reference, place in the night, solution.")
	w.list("rule", "name", "reference", "folders", []string{instOne, instTwo},
		"pattern", raw(`^n(?P<night>\d{3})/(?P<ref>RI-[A-D]2?)\.(?P<slot>open|mid|close)_(?:s(?P<rung>\d{2})|(?P<role>blank|ph))(?: \((?P<copy>\d)\))?\.csv$`),
		"set", "${ref}.${slot}.n${night}", "pair", "key",
		"example", []string{"n041/RI-C.open_s05.csv", "n060/RI-C2.close_blank.csv", "n001/RI-A.open_ph.csv"})
	w.text("\n# n041/RI-C.open.jdx: all scans of a reference in one file; blocks are called blank, s01, s02 ...")
	w.list("rule", "name", "reference-file", "folders", []string{instTwo},
		"pattern", raw(`^n(?P<night>\d{3})/(?P<ref>RI-[A-D]2?)\.(?P<slot>open|mid|close)(?: \((?P<copy>\d)\))?\.jdx$`),
		"column", raw(`^(?:s(?P<rung>\d{2})|(?P<role>blank))$`),
		"set", "${ref}.${slot}.n${night}", "pair", "key",
		"example", []string{"n041/RI-C.open.jdx", "n010/RI-D.open (2).jdx"})
	w.list("rule", "name", "calibration", "folders", []string{"METERS"}, "role", "calibration",
		"pattern", raw(`^E-\d{2}_(?P<date>\d{4}-\d{2}-\d{2})\.csv$`), "example", []string{"E-31_2026-09-14.csv"})
	w.list("rule", "name", "events", "folders", []string{"LOG"}, "role", "events",
		"pattern", raw(`^events_(?P<date>\d{4}-\d{2}-\d{2})\.csv$`), "example", []string{"events_2026-09-14.csv"})
	w.list("rule", "name", "plan", "folders", []string{"LOG"}, "role", "plan",
		"pattern", raw(`^plan_(?P<date>\d{4}-\d{2}-\d{2})\.csv$`), "example", []string{"plan_2026-09-14.csv"})
}

// compounds writes references and products.
func (s *Story) compounds(w *tomlWriter) {
	w.text("\n# References, measured to watch the system.")
	for _, name := range []string{"RI-A", "RI-B", "RI-C", "RI-C2", "RI-D"} {
		b := reference(1, name, "open")
		d := s.dyes[b.Dye]
		since := s.Date(1)
		if name == "RI-C2" {
			since = s.Date(nightNewLot)
		}
		w.list("compound", append(compoundKeys(d, name, `^`+name+`\.`),
			"lot", b.Lot, "reference", true, "reference_lot", b.Lot, "since", since,
			"assigned", d.PKa[0], "u_assigned", 0.004, "fixed_model", true)...)
	}
	w.text("\n# Products, by lot.")
	for _, key := range []string{"BCG", "BCP", "PR", "CR", "TB"} {
		d := s.dyes[key]
		w.list("compound", append(compoundKeys(d, sampleCompounds()[key], `^(?P<lot>`+key+`-\d{4})\.`), "lot", "${lot}")...)
	}
}

// compoundKeys are the keys common to references and products.
func compoundKeys(d Dye, name, sets string) []any {
	return []any{
		"name", name, "title", d.Title, "sets", raw(sets), "charge", d.Charge, "steps", len(d.PKa), "pka", d.PKa,
		"dpka_dt", slopeOf(d), "ladder_nominal", d.Ladder, "clear_window", d.Clear[:], "range", d.Range[:],
		"ionic_strength", d.ionic(), "u_ionic_rel", 0.01, "medium", d.Buffer, "temperature", 25.0, "target_u", 0.05,
		"path_mm", 10.0, "concentration", 21e-6,
	}
}

// slopeOf is the temperature coefficient of the first constant.
func slopeOf(d Dye) float64 {
	if len(d.DPKaDT) == 0 {
		return 0
	}
	return d.DPKaDT[0]
}

func (s *Story) instruments(w *tomlWriter) {
	for _, inst := range []string{instOne, instTwo} {
		cell, lamp, lo := "F-2", "L-12", 380.0
		if inst == instTwo {
			cell, lamp, lo = "K-7", "L-21", 300.0
		}
		w.list("instrument", "name", inst, "range", []float64{lo, 760}, "absorbance_ceiling", 1.5, "sigma_absorbance", 0.0006,
			"electrode", electrodeOf(inst, 1), "meter", meterOf(inst), "lamp", lamp, "cell", cell, "room", "night room",
			"sigma_ph", 0.006, "u_amount", 0.003, "u_baseline", 0.0008)
	}
}

// resources writes what sets share.
func (s *Story) resources(w *tomlWriter) {
	both := []string{instOne, instTwo}
	add := func(name, kind string, shared []string, from, until int, more ...any) {
		rows := []any{"name", name, "kind", kind, "shared_by", shared, "from", s.Date(from)}
		if until > 0 {
			rows = append(rows, "until", s.Date(until))
		}
		w.list("resource", append(rows, more...)...)
	}
	add("E-31", "electrode", []string{instOne}, 1, nightReplaced)
	add("E-35", "electrode", []string{instOne}, nightReplaced, 0)
	add("E-34", "electrode", []string{instTwo}, 1, 0)
	add("M-3", "meter", []string{instOne}, 1, 0)
	add("M-5", "meter", []string{instTwo}, 1, 0)
	add("L-12", "lamp", []string{instOne}, 1, nightLamp)
	add("L-13", "lamp", []string{instOne}, nightLamp, 0)
	add("L-21", "lamp", []string{instTwo}, 1, 0)
	add("F-2", "cell", []string{instOne}, 1, 0)
	add("K-7", "cell", []string{instTwo}, 1, 0)
	add("night room", "room", both, 1, 0)
	all := bottles()
	for i, b := range all {
		until := 0
		for _, later := range all[i+1:] {
			if later.label == b.label && until == 0 {
				until = later.from
			}
		}
		add(b.lot, "buffer", both, b.from, until, "value", b.label, "u", 0.003)
	}
	for _, name := range []string{"RI-A", "RI-B", "RI-C", "RI-C2", "RI-D"} {
		from, until := 1, 0
		switch name {
		case "RI-C":
			until = nightOldLotEnds
		case "RI-C2":
			from = nightNewLot
		}
		add(reference(1, name, "open").Lot, "stock", []string{name}, from, until)
	}
}

// raw is text for a literal string.
type raw string

// tomlWriter writes tables in the order given.
type tomlWriter struct {
	b       []byte
	comment bool // the last line is a comment that belongs to the next table
}

func (w *tomlWriter) text(s string) {
	w.b = append(append(w.b, s...), '\n')
	w.comment = strings.HasPrefix(strings.TrimLeft(s, "\n"), "#")
}

func (w *tomlWriter) table(name string, rows ...any) { w.block("["+name+"]", rows) }

func (w *tomlWriter) list(name string, rows ...any) { w.block("[["+name+"]]", rows) }

func (w *tomlWriter) block(head string, rows []any) {
	if !w.comment {
		w.b = append(w.b, '\n')
	}
	w.text(head)
	for pair := range slices.Chunk(rows, 2) {
		w.text(fmt.Sprintf("%s = %s", pair[0], tomlValue(pair[1])))
	}
}

func tomlValue(v any) string {
	switch x := v.(type) {
	case raw:
		return "'" + string(x) + "'"
	case string:
		return strconv.Quote(x)
	case float64:
		t := strconv.FormatFloat(x, 'g', -1, 64)
		if !strings.ContainsAny(t, ".e") {
			t += ".0"
		}
		return t
	case []float64:
		return "[" + joined(x, func(f float64) string { return tomlValue(f) }) + "]"
	case []string:
		return "[" + joined(x, strconv.Quote) + "]"
	}
	return fmt.Sprint(v)
}

func joined[T any](list []T, show func(T) string) string {
	parts := make([]string, len(list))
	for i, v := range list {
		parts[i] = show(v)
	}
	return strings.Join(parts, ", ")
}
