package rehearse

import (
	"path"
	"time"
)

// Settings is a settings file for the files that Export makes, below base: the
// instrument's folder and METERS, one rule for the sets, one for calibrations,
// and every dye of the design as a reference whose constants are assigned.
func (sc *Scenario) Settings(base string) []byte {
	w := &tomlWriter{}
	inst := sc.instrument()
	w.text("# Settings of a rehearsal.")
	w.comment = false
	w.table("laboratory", "name", "rehearsal", "zone", sc.evening(1).Location().String())
	w.list("folder", "name", inst, "path", path.Join(base, inst), "instrument", inst, "settle", "2s", "sweep", "5s")
	w.list("folder", "name", "METERS", "path", path.Join(base, "METERS"), "settle", "2s", "sweep", "5s")
	w.list("rule", "name", "set", "folders", []string{inst}, "pattern", raw(RulePattern), "set", "${set}.n${night}", "pair", "key")
	w.list("rule", "name", "calibration", "folders", []string{"METERS"}, "role", "calibration",
		"pattern", raw(`^E-\d{1,2}_(?P<date>\d{4}-\d{2}-\d{2})\.csv$`))
	for _, d := range sc.Design.Dyes {
		rows := append(compoundKeys(d, d.Name, `^`+d.Name+`-\d+\.`), "fixed_model", true)
		if len(d.PKa) == 1 {
			rows = append(rows, "reference", true, "reference_lot", d.Name+" lot 1", "since", sc.evening(1).Format(time.DateOnly),
				"assigned", d.PKa[0], "u_assigned", 0.004)
		}
		if len(d.Ladder) < 6 {
			rows = append(rows, "profile", "three-solution")
		}
		w.list("compound", rows...)
	}
	n := sc.Noise
	g := sc.gridFor(sc.Design.Dyes[0])
	w.list("instrument", "name", inst, "range", []float64{g[0], g[1]}, "sigma_absorbance", max(n.Absorbance, 1e-5),
		"electrode", sc.electrodeName(), "meter", "M-1", "sigma_ph", max(n.ReadPH, 0.001), "u_amount", max(n.AmountRung, 1e-4), "u_baseline", max(n.Scan, 1e-4))
	return w.b
}

func (sc *Scenario) instrument() string {
	if sc.Design.Instrument == "" {
		return instOne
	}
	return sc.Design.Instrument
}

func (sc *Scenario) electrodeName() string {
	if sc.Design.Electrode == "" {
		return "E-1"
	}
	return sc.Design.Electrode
}
