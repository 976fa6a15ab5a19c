package rehearse

import (
	"fmt"
	"math"
	"slices"
	"time"
)

// A CosolventLaw is how a pKa depends on the composition of a mixed solvent:
// psKa + log10[H2O] = A/eps + B (Yasuda 1959, Shedlovsky 1962). WaterPKa fixes
// B; A is Slope.
type CosolventLaw struct {
	WaterPKa float64
	Slope    float64 // A; of the order of 100 for acids in methanol and water
}

// waterMolar and Permittivity describe mixtures of water and methanol at 25 C
// by volume fraction. They are smooth interpolations between the pure liquids
// (78.30 and 32.66; 55.3 mol/L of water), good enough for invented data and
// stated so that an analysis of the same series can use the same numbers.
func waterMolar(fraction float64) float64 { return 55.3 * (1 - fraction) }

// Permittivity is the relative permittivity of water with a volume fraction of
// methanol, in this room.
func Permittivity(fraction float64) float64 {
	return 78.30 - 39.5*fraction - 6.14*fraction*fraction
}

// At is the pKa at a volume fraction of cosolvent below 1.
func (l CosolventLaw) At(fraction float64) float64 {
	b := l.WaterPKa + math.Log10(waterMolar(0)) - l.Slope/Permittivity(0)
	return l.Slope/Permittivity(fraction) + b - math.Log10(waterMolar(fraction))
}

// CosolventSeries measures one dye at several volume fractions of cosolvent in
// one night. compositionError is added to the fraction a set really has; nil
// means none. Sets are named like "HX31-M40".
func (sc *Scenario) CosolventSeries(night int, d Dye, law CosolventLaw, fractions, compositionError []float64) ([]*Set, error) {
	var out []*Set
	for i, f := range fractions {
		really := f
		if i < len(compositionError) {
			really += compositionError[i]
		}
		if really < 0 || really >= 1 {
			return nil, fmt.Errorf("rehearse: cosolvent fraction %g of set %d, expected 0 up to below 1", really, i+1)
		}
		mixed := d
		mixed.PKa = []float64{law.At(really)}
		mixed.Ladder = EvenLadder([]float64{law.At(f)}, -2, 2, len(d.Ladder))
		s, err := sc.one(night, i, mixed)
		if err != nil {
			return nil, err
		}
		s.Name = fmt.Sprintf("%s-M%02.0f", d.Name, 100*f)
		s.Stem = fmt.Sprintf("n%03d/%s", night, s.Name)
		out = append(out, s)
	}
	return out, nil
}

// TemperatureSeries measures one dye at several temperatures (C) in one night;
// calibration, vessel and cell all have that temperature. Constants follow the
// dye's temperature coefficients, which are those at 25 C. The true constants
// of each set are stated at its own temperature.
func (sc *Scenario) TemperatureSeries(night int, d Dye, celsius []float64) ([]*Set, error) {
	var out []*Set
	for i, t := range celsius {
		warm := *sc
		warm.Causes = append(slices.Clone(sc.Causes), Cause{Kind: RoomTemperature, Size: t - 25})
		s, err := warm.one(night, i, d)
		if err != nil {
			return nil, err
		}
		s.Name = fmt.Sprintf("%s-T%.1f", d.Name, t)
		s.Stem = fmt.Sprintf("n%03d/%s", night, s.Name)
		s.PKa = d.constants(t, d.ionic())
		out = append(out, s)
	}
	return out, nil
}

// A Violet is an invented dye of n steps with pKa given, one form darker and
// redder than the last, so that every form has a colour of its own.
func Violet(name string, pka []float64, charge int) Dye {
	d := Dye{
		Name: name, Title: fmt.Sprintf("invented dye of %d steps", len(pka)), PKa: slices.Clone(pka), Charge: charge,
		DPKaDT: make([]float64, len(pka)), Buffer: "mixed buffers",
		Ladder: EvenLadder(pka, -2, 2, 8+6*len(pka)), Range: [2]float64{380, 760}, Clear: [2]float64{735, 760},
	}
	tops := []float64{428, 506, 590, 632, 470}
	for j := range len(pka) + 1 {
		h := 16000 + 7000*float64(j)
		d.Forms = append(d.Forms, Form{[]Band{{tops[j%len(tops)], 26, h}, {tops[j%len(tops)] - 38, 28, 0.25 * h}}})
	}
	return d
}

// Between makes the middle form of a two-step dye the mixture share*base +
// (1-share)*acid, so that the spectra carry two components only and the two
// constants cannot be had separately at one spacing: -log10(share(1-share)).
func Between(d Dye, share float64) Dye {
	if len(d.Forms) != 3 {
		return d
	}
	var mid []Band
	for _, b := range d.Forms[0].Bands {
		b.Molar *= 1 - share
		mid = append(mid, b)
	}
	for _, b := range d.Forms[2].Bands {
		b.Molar *= share
		mid = append(mid, b)
	}
	d.Forms = []Form{d.Forms[0], {mid}, d.Forms[2]}
	return d
}

// ThreeSolutions gives a dye the classical design: acid form, base form and
// one or more solutions between.
func ThreeSolutions(d Dye, between ...float64) Dye {
	first, last := d.PKa[0], d.PKa[len(d.PKa)-1]
	d.Ladder = append(append([]float64{first - 3}, between...), last+3)
	return d
}

// Export renders the sets of a night as files, with every fault of files that
// the scenario names striking the first set, as deposits into the folder of
// its instrument. The naming rule of such files is RulePattern.
func (sc *Scenario) Export(night int, st Style) ([]Deposit, error) {
	sets, err := sc.Night(night)
	if err != nil {
		return nil, err
	}
	var out []Deposit
	for i, s := range sets {
		files := Files(s, st)
		if i == 0 {
			for _, f := range sc.FileFaults[night] {
				if files, err = SpoilFiles(files, f, dice(sc.Seed, "files", night, f.Key)); err != nil {
					return nil, err
				}
			}
		}
		for _, f := range files {
			out = append(out, Deposit{At: f.At, Act: Write, Folder: s.Instrument, Path: f.Path, Bytes: f.Bytes, ModTime: f.At, Note: f.Role})
		}
	}
	if cal := sc.calibrated(night); cal == night {
		c := sc.Calibration(night)
		at := c.At.Add(2 * time.Minute)
		out = append(out, Deposit{At: at, Act: Write, Folder: "METERS", ModTime: at, Note: "calibration",
			Path: fmt.Sprintf("%s_%s.csv", c.Electrode, c.At.Format(time.DateOnly)), Bytes: CalibrationCSV(c, c.At.Location())})
	}
	slices.SortStableFunc(out, func(a, b Deposit) int { return a.At.Compare(b.At) })
	return out, nil
}

// RulePattern sorts the files that Export makes; the set's name is
// "${set}.n${night}" as the sets of Night are called.
const RulePattern = `^n(?P<night>\d{3})/(?P<set>[A-Z][A-Za-z0-9-]*)_(?:s(?P<rung>\d{2})|(?P<role>blank|ph))(?: \((?P<copy>\d)\))?\.(?:csv|jdx)$`
