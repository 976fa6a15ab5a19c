package verdict

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/stat/distuv"
)

func (j *judge) optics(f Facts) {
	p := f.Prepared
	switch {
	case f.MissingBlank && f.SubstituteBlank:
		j.finding("blank", Noted, "No blank for "+f.Set+"; the substitute blank of the settings was used.", "Measure the blank of this set.")
	case f.MissingBlank:
		j.finding("blank", Held, "No blank for "+f.Set+".", "Measure the blank of this set, or allow a substitute in the settings.")
	}
	if p == nil {
		return
	}
	j.number("absorbance.ceiling", p.LostInfo, "1", fmt.Sprintf("%.0f %% of the colour change lies above the absorbance ceiling and is not used (highest absorbance %.2f).", 100*p.LostInfo, p.MaxA),
		fmt.Sprintf("Dilute the dye about %.0f times.", math.Max(2, math.Ceil(p.MaxA/1.0))))
	j.number("colour.change", p.BestChange, "absorbance", fmt.Sprintf("The colour change is only %.3f absorbance.", p.BestChange), "Use more dye or a longer path, and check that the ladder spans the transition.")
	worst := 0
	for i := range p.ClearOffset {
		if math.Abs(p.ClearOffset[i]) > math.Abs(p.ClearOffset[worst]) {
			worst = i
		}
	}
	if len(p.ClearOffset) > 0 {
		v := 1000 * math.Abs(p.ClearOffset[worst])
		j.number("clear.window", v, "mAU", fmt.Sprintf("%s stands %.0f mAU off in the clear window; corrected.", key(p.Keys, worst), 1000*p.ClearOffset[worst]), "Look for a bubble, dust or the wrong blank; scan "+key(p.Keys, worst)+" again.")
	}
	if len(p.ShiftNM) > 1 {
		s := slices.Max(p.ShiftNM) - slices.Min(p.ShiftNM)
		j.number("wavelength.spread", s, "nm", fmt.Sprintf("The scans of this set are displaced against each other by up to %.2f nm.", s), "Have the wavelength drive checked; scan the set again.")
	}
	for _, r := range p.Records {
		switch r.Key {
		case "scan.smoothed":
			j.finding("scan.smoothed", Noted, r.Text, "")
		case "digits.coarse":
			j.finding("digits.coarse", Noted, r.Text, "Export more decimals.")
		case "grid.coarsest":
			j.finding("grid", Noted, r.Text, "Use one method for all scans of a set.")
		}
	}
}

// blankNoise is the noise of the subtracted blank, nil where there was none.
func blankNoise(f Facts) []float64 {
	if f.Prepared == nil {
		return nil
	}
	return f.Prepared.BlankNoise
}

func (j *judge) components(f Facts) {
	r := f.Fit
	if n := r.Steps + 1; r.NoiseEdge > 0 && len(r.Singular) > n {
		ratio := r.Singular[n] / r.NoiseEdge
		j.number("third.component", ratio, "1", fmt.Sprintf("%s coloured form shows in the spectra: %.2f mAU where noise alone gives %.2f.", ordinal(n+1), 1000*r.Singular[n], 1000*r.NoiseEdge),
			"Look for a second dye, a further step, or scans displaced in wavelength.")
	}
	if f.SecondDyeShare > f.SecondDyeLimit && f.SecondDyeShare > 0 {
		o := Noted
		if f.SecondDyeShare >= 2*f.SecondDyeLimit || f.SecondDyeShare > 0.03 {
			o = Held
		}
		j.finding("second.dye", o, fmt.Sprintf("About %.0f %% of a second dye, pKa near %.1f.", 100*f.SecondDyeShare, f.SecondDyePKa), "Check the purity of the lot before its pKa is released.")
	}
	if top, depth := negativeDepth(r.Spectra, r.SpectraSD, blankNoise(f)); top > 0 {
		j.number("spectra.negative", depth/top, "1", fmt.Sprintf("A limiting spectrum goes below zero by %.1f mAU beyond its noise.", 1000*depth), "Wrong blank, or dye in the blank: measure the blank again.")
	}
	if !math.IsNaN(f.LibraryDiff) && f.LibraryDiff != 0 {
		j.number("library", f.LibraryDiff, "pKa", fmt.Sprintf("With the archived limiting spectra the pKa differs by %+.3f.", f.LibraryDiff), "Compare the limiting spectra with the archive: wavelength scale, impurity or wrong dye.")
	}
}

// negativeDepth returns the top of the spectra and how far any point lies
// below its noise: three standard deviations for one point, so the quantile
// that keeps the same chance over all points. The noise of the blank is common
// to all rungs; free spectra take it up, and it belongs to theirs here.
func negativeDepth(s, sd, blank []float64) (top, depth float64) {
	if len(s) == 0 {
		return 0, 0
	}
	z := distuv.UnitNormal.Quantile(1 - 0.00135/float64(len(s)))
	for i, v := range s {
		top = math.Max(top, v)
		if i >= len(sd) {
			continue
		}
		u := sd[i]
		if len(blank) > 0 {
			u = math.Hypot(u, blank[i%len(blank)])
		}
		depth = math.Max(depth, -v-z*u)
	}
	return top, depth
}

func ordinal(n int) string {
	if w := []string{2: "A second", 3: "A third", 4: "A fourth", 5: "A fifth"}; n >= 2 && n < len(w) {
		return w[n]
	}
	return fmt.Sprintf("Component %d: a further", n)
}

func (j *judge) electrode(f Facts) {
	c := f.Calibration
	if c == nil {
		if f.NeedsCalibration {
			j.finding("calibration", Held, "No electrode calibration is on record for this set.", "Let the calibration file be taken in, or calibrate.")
		}
		return
	}
	if c.Refused != "" {
		j.finding("calibration", Held, c.Refused, "Calibrate again with the buffers in their right places.")
		return
	}
	j.number("calibration.age", c.AgeHours, "h", fmt.Sprintf("Electrode %s was last calibrated %s before.", c.Electrode, hours(c.AgeHours)), "Calibrate electrode "+c.Electrode+".")
	for _, s := range c.SlopesPct {
		j.number("calibration.slope", s, "%", fmt.Sprintf("A segment of the calibration of %s has a slope of %.1f %%.", c.Electrode, s), "Check buffers and electrode "+c.Electrode+"; calibrate again.")
	}
	j.number("calibration.potential", c.Potential7, "mV", fmt.Sprintf("Electrode %s reads %+.0f mV at pH 7.", c.Electrode, c.Potential7), "Check electrode "+c.Electrode+" and its filling.")
	for _, r := range c.Residuals {
		j.number("calibration.residual", r, "pH", fmt.Sprintf("A buffer of the calibration of %s lies %+.3f off the chord of its neighbours.", c.Electrode, r), "Open a fresh bottle of that buffer and calibrate again.")
	}
	if len(f.PH) > 0 {
		out := math.Max(slices.Max(f.PH)-c.HighestPH, c.LowestPH-slices.Min(f.PH))
		j.number("ph.range", math.Max(0, out), "pH", fmt.Sprintf("The ladder reaches %.1f beyond the outermost calibration buffer.", out), "Calibrate with a buffer beyond the end of the ladder.")
	}
}

func hours(h float64) string {
	if h < 48 {
		return fmt.Sprintf("%.0f h", h)
	}
	return fmt.Sprintf("%.0f days", h/24)
}

func (j *judge) conditions(f Facts) {
	if !math.IsNaN(f.TemperatureC) && f.NominalC != 0 {
		d := f.TemperatureC - f.NominalC
		j.number("temperature", d, "K", fmt.Sprintf("Cell %.1f °C instead of %.1f °C; corrected with the temperature coefficient of the compound where there is one.", f.TemperatureC, f.NominalC), "Check the thermostat and measure again.")
	}
	worst, at := 0.0, ""
	for i, d := range f.DelayMin {
		if i < len(f.PH) && f.PH[i] > 8 && !math.IsNaN(d) && math.Abs(d) > worst {
			worst, at = math.Abs(d), key(f.Keys, i)
		}
	}
	if at != "" {
		j.number("ph.delay", worst, "min", fmt.Sprintf("%.0f min lie between scan and pH reading of %s; carbon dioxide lowers readings above pH 8.", worst, at), "Read the pH right after the scan, under cover.")
	}
}

func (j *judge) target(f Facts) {
	if len(f.U) == 0 || f.Target <= 0 {
		return
	}
	u := slices.Max(f.U)
	var hint []string
	if f.Fit != nil {
		hint = append(hint, "the largest part of the budget is "+largest(f))
	}
	j.number("uncertainty.target", u/f.Target, "1", fmt.Sprintf("Expanded uncertainty %.3f against a target of %.3f; %s.", u, f.Target, strings.Join(hint, "; ")), "Reduce "+largest(f)+".")
}

// largest names the component that contributes most to the first pKa.
func largest(f Facts) string {
	best, name := 0.0, "the pH readings"
	for _, c := range f.Fit.Full.Components {
		if v := math.Abs(c.C * c.U); c.Step == 0 && v > best {
			best, name = v, c.Name
		}
	}
	return name
}
