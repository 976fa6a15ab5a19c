package settings

import (
	"fmt"
	"regexp"
	"slices"
	"strings"
	"time"
)

func (c *checker) compounds() {
	var names []string
	for i := range c.s.Compounds {
		x := &c.s.Compounds[i]
		names = append(names, x.Name)
		c.compound(i, x)
		c.compoundSpectra(i, x)
	}
	c.named("compound", names)
}

func (c *checker) compound(i int, x *Compound) {
	p := func(k string) string { return at("compound", i, k) }
	re, err := x.pattern()
	if err != nil {
		c.wrong(p("sets"), fmt.Sprintf("%q (%v)", x.Sets, err), "a regular expression in RE2 syntax on the set name")
	} else {
		x.sets = re
		for _, g := range regexp.MustCompile(`\$\{(\w+)\}`).FindAllStringSubmatch(x.Lot, -1) {
			if !slices.Contains(re.SubexpNames(), g[1]) {
				c.wrong(p("lot"), fmt.Sprintf("%q", x.Lot), fmt.Sprintf("only groups that the sets pattern has; it has no %q", g[1]))
			}
		}
	}
	// A wrong charge falsifies every correction for activity, and no value is so common that it could be assumed.
	if !c.set[p("charge")] {
		c.wrong(p("charge"), "nothing", "the charge of the acid form")
	}
	c.between(p("charge"), float64(x.Charge), -8, 8, "")
	c.between(p("steps"), float64(x.Steps), 1, 4, "")
	if len(x.PKa) > 0 && len(x.PKa) != x.Steps {
		c.wrong(p("pka"), fmt.Sprintf("%d values", len(x.PKa)), fmt.Sprintf("as many as steps says: %d", x.Steps))
	}
	for _, v := range x.PKa {
		c.between(p("pka"), v, -2, 16, "")
	}
	c.ascending(p("pka"), x.PKa, 1)
	c.ascending(p("ladder_nominal"), x.Ladder, 2)
	for _, v := range x.Ladder {
		c.between(p("ladder_nominal"), v, -2, 16, "pH")
	}
	if x.Assigned != 0 {
		c.between(p("assigned"), x.Assigned, -2, 16, "")
		if x.UAssigned <= 0 {
			c.wrong(p("u_assigned"), "nothing", "the standard uncertainty of the assigned value")
		}
	}
	c.between(p("u_assigned"), x.UAssigned, 0, 1, "")
	c.between(p("dpka_dt"), x.DPKaDT, -0.2, 0.2, "per kelvin")
	c.between(p("enthalpy_kj"), x.EnthalpyKJ, -200, 200, "kJ/mol")
	c.between(p("ionic_strength"), x.Ionic, 0, 5, "mol/L")
	c.between(p("u_ionic_rel"), x.UIonicRel, 0, 1, "")
	c.between(p("temperature"), x.Temperature, -20, 110, "C")
	c.between(p("target_u"), x.Target, 0.001, 2, "")
	c.between(p("path_mm"), x.PathMM, 0.01, 1000, "mm")
	c.between(p("concentration"), x.Molar, 0, 1, "mol/L")
	c.date(p("since"), x.Since)
	c.word(p("profile"), x.Profile, "ladder", "three-solution")
}

func (c *checker) compoundSpectra(i int, x *Compound) {
	p := func(k string) string { return at("compound", i, k) }
	c.wavelengths(p("range"), x.Range, 2)
	if len(x.Clear)%2 != 0 {
		c.wrong(p("clear_window"), fmt.Sprintf("%d numbers", len(x.Clear)), "pairs of wavelengths in nm: from, to")
		return
	}
	for k := 0; k+1 < len(x.Clear); k += 2 {
		c.wavelengths(p("clear_window"), x.Clear[k:k+2], 2)
	}
}

// wavelengths demands nothing or a range from, to in nm.
func (c *checker) wavelengths(path string, v []float64, n int) {
	if len(v) == 0 {
		return
	}
	if len(v) != n || v[0] >= v[1] || v[0] < 100 || v[1] > 5000 {
		c.wrong(path, fmt.Sprint(v), "two wavelengths in nm, the shorter first")
	}
}

func (c *checker) ascending(path string, v []float64, least int) {
	if len(v) == 0 {
		return
	}
	if len(v) < least {
		c.wrong(path, fmt.Sprintf("%d value", len(v)), fmt.Sprintf("at least %d", least))
	}
	for i := 1; i < len(v); i++ {
		if v[i] < v[i-1] {
			c.wrong(path, fmt.Sprintf("%g after %g", v[i], v[i-1]), "values in ascending order")
			return
		}
	}
}

func (c *checker) instruments() {
	for i, x := range c.s.Instruments {
		p := func(k string) string { return at("instrument", i, k) }
		c.wavelengths(p("range"), x.RangeNM, 2)
		c.between(p("absorbance_ceiling"), x.Ceiling, 0.1, 6, "absorbance")
		c.between(p("sigma_absorbance"), x.SigmaA, 0, 0.1, "absorbance")
		c.between(p("sigma_ph"), x.SigmaPH, 0.0001, 0.5, "pH")
		c.between(p("u_amount"), x.UAmount, 0, 0.5, "")
		c.between(p("u_baseline"), x.UBaseline, 0, 0.5, "absorbance")
	}
	c.named("instrument", c.instrumentNames())
}

func (c *checker) resources() {
	var names []string
	known := c.instrumentNames()
	for _, x := range c.s.Compounds {
		known = append(known, x.Name)
	}
	for i, x := range c.s.Resources {
		p := func(k string) string { return at("resource", i, k) }
		names = append(names, x.Name)
		if x.Kind == "" {
			c.wrong(p("kind"), "nothing", "what kind of thing it is")
		}
		for _, n := range x.SharedBy {
			if !slices.Contains(known, n) {
				c.refer(p("shared_by"), n, "instrument]] or [[compound", known)
			}
		}
		c.between(p("value"), x.Value, -2, 16, "pH")
		c.between(p("u"), x.U, 0, 10, "")
		c.date(p("from"), x.From)
		c.date(p("until"), x.Until)
		if x.From != "" && x.Until != "" && x.Until < x.From {
			c.wrong(p("until"), fmt.Sprintf("%q, before from = %q", x.Until, x.From), "a later date")
		}
	}
	c.named("resource", names)
}

func (c *checker) method() {
	m, b, h := c.s.Method, c.s.Budget, c.s.Charts
	c.word("method.activity", m.Activity, "davies", "guentelberg", "extended")
	c.word("method.constant", m.Constant, "mixed", "thermodynamic")
	c.between("method.report_at", m.ReportAt, 0, 100, "C")
	c.between("method.coverage_factor", m.CoverageK, 1, 4, "")
	c.between("method.absorbance_ceiling", m.Ceiling, 0.1, 6, "absorbance")
	if m.MonteCarlo != 0 {
		c.between("method.monte_carlo", float64(m.MonteCarlo), 200, 1e6, "draws, or 0 for where it is needed only,")
	}
	c.span("method.calibration_age_hold", m.CalibrationAge, time.Minute, 366*24*time.Hour)
	for _, k := range []struct {
		key   string
		v, hi float64
	}{
		{"u_buffer", b.UBuffer, 1}, {"u_calibration_mv", b.UCalibration, 50}, {"u_drift_per_day", b.UDriftPerDay, 1},
		{"u_junction", b.UJunction, 1}, {"u_temperature", b.UTemperature, 20}, {"u_activity_rel", b.UActivity, 1},
		{"u_stray", b.UStray, 0.1}, {"u_impurity", b.UImpurity, 1},
	} {
		c.between("budget."+k.key, k.v, 0, k.hi, "")
	}
	c.between("charts.false_alarm_nights", h.FalseAlarmNights, 5, 1e5, "nights")
	c.between("charts.impact_limit", h.ImpactLimit, 0, 2, "pKa")
	c.between("charts.young_nights", float64(h.YoungNights), 3, 100, "nights")
	c.between("charts.baseline_nights", float64(h.BaselineNights), 5, 500, "nights")
	if h.BaselineNights < h.YoungNights {
		c.wrong("charts.baseline_nights", fmt.Sprint(h.BaselineNights), fmt.Sprintf("not fewer than young_nights (%d)", h.YoungNights))
	}
}

// limits checks the overrides of checks. Which checks there are is known to
// the room that judges; here only the shape counts.
func (c *checker) limits() {
	for i, x := range c.s.Checks {
		p := func(k string) string { return at("check", i, k) }
		if x.Check == "" {
			c.wrong(p("check"), "nothing", "the name of a check")
		}
		if x.Compound != "" && c.s.CompoundByName(x.Compound) == nil && c.s.InstrumentByName(x.Compound) == nil {
			var names []string
			for _, y := range c.s.Compounds {
				names = append(names, y.Name)
			}
			c.refer(p("compound"), x.Compound, "compound]] or [[instrument", append(names, c.instrumentNames()...))
		}
		for _, l := range []struct {
			key string
			v   []float64
		}{{"note_when", x.Note}, {"hold_when", x.Hold}} {
			if len(l.v) > 2 || (len(l.v) == 2 && l.v[0] >= l.v[1]) {
				c.wrong(p(l.key), fmt.Sprint(l.v), "one value, or a low and a high one")
			}
		}
		if !x.Off && len(x.Note) == 0 && len(x.Hold) == 0 {
			c.fault(at("check", i, "check"), fmt.Sprintf("%q without a limit", x.Check), "note_when, hold_when or off = true", "hold_when = [0.04]")
		}
	}
}

func (c *checker) layouts() {
	var names []string
	for i, x := range c.s.Layouts {
		p := func(k string) string { return at("layout", i, k) }
		names = append(names, x.Name)
		if x.Files != "" {
			if _, err := regexp.Compile(x.Files); err != nil {
				c.wrong(p("files"), fmt.Sprintf("%q (%v)", x.Files, err), "a regular expression in RE2 syntax on the path")
			}
		}
		c.word(p("encoding"), x.Encoding, "", "utf-8", "utf-16le", "utf-16be", "windows-1252", "latin-1")
		c.word(p("delimiter"), x.Delimiter, "", ",", ";", "tab", "space")
		c.word(p("decimal"), x.Decimal, "", ".", ",")
		c.word(p("thousands"), x.Thousands, "", ".", ",", "'", "space")
		if x.Decimal != "" && x.Decimal == x.Thousands {
			c.wrong(p("thousands"), fmt.Sprintf("%q, the decimal sign too", x.Thousands), "another sign")
		}
		if x.Decimal == "," && x.Delimiter == "," {
			c.wrong(p("delimiter"), `"," with a decimal comma`, "another delimiter, or a decimal point")
		}
		c.word(p("shape"), x.Shape, "", "columns", "pairs", "rows", "long", "ph-table", "ph-series", "calibration", "sheet", "events", "plan")
		c.word(p("abscissa"), x.Abscissa, "", "nm", "um", "angstrom", "1/cm")
		c.word(p("ordinate"), x.Ordinate, "", "absorbance", "transmittance", "percent transmittance", "counts")
		c.between(p("header_line"), float64(x.HeaderLine), 0, 10000, "")
		c.between(p("first_line"), float64(x.FirstLine), 0, 10000, "")
		for _, w := range x.Columns {
			c.word(p("columns"), strings.ToLower(w), "wavelength", "absorbance", "skip", "label", "ph", "millivolt", "temperature", "time", "sample", "reference", "dark")
		}
	}
	c.named("layout", names)
}
