package rehearse

import (
	"math/rand/v2"
	"time"
)

// Set measures one booking: what the instruments recorded, before anything
// went wrong with files. The result is the same whenever it is asked for.
func (s *Story) Set(b Booking) *Set {
	rng := dice(s.seed, "set", b.Night, b.Key())
	d := s.dyes[b.Dye]
	c := fresh(0.1)
	c.Optics = opticsOf(b.Instrument, b.Night)
	c.CellA = 0.042
	if b.Instrument == instTwo {
		c.CellA = 0.036
	}
	s.lotOf(b, &c)
	c.scatter(Quiet(), rng.NormFloat64)
	step := 2 * time.Minute
	e, believed := s.electrodeAt(b.Instrument, s.lastCalibration(b.Instrument, b.Night))
	c.Offset, c.Eps = s.ageing(b.Instrument, b.Night, b.Begin.Add(13*time.Minute))
	p := Plan{
		Dye: d, Begin: b.Begin, Step: step, GridNM: [3]float64{d.Range[0], d.Range[1], 2},
		Electrode: e, Believed: believed, PathMM: 10, Bandwidth: 2, Decimals: 5,
	}
	set := Measure(p, c, rng)
	set.Instrument, set.Name, set.Stem, set.Night = b.Instrument, b.Set, b.Stem, b.Night
	set.Compound, set.Lot, set.Slot, set.Reference = b.Compound, b.Lot, b.Slot, b.Reference
	return set
}

// lotOf sets what belongs to the dye's lot: constants differ by 0.004 and
// bands by 0.1 nm from lot to lot of a product, purity lies between 92 and
// 97 %. A lot is the same whichever night it is measured.
func (s *Story) lotOf(b Booking, c *Conditions) {
	if b.Reference {
		if b.Compound == "RI-C2" {
			c.Amount, c.Impurity = 0.993, 0.003
		}
		return
	}
	rng := dice(s.seed, "lot", b.Lot)
	c.PKaShift = 0.004 * rng.NormFloat64()
	c.BandShift = 0.1 * rng.NormFloat64()
	c.Amount = 0.92 + 0.05*rng.Float64()
	if b.Lot == impureLot {
		c.Amount = 0.97
		c.SecondDye, c.SecondDPKa, c.SecondNM = 0.04, 0.8, -10
	}
}

// constantsOf are the true mixed constants of a booked set at 25.0 C and the
// nominal ionic strength.
func (s *Story) constantsOf(b Booking) []float64 {
	var c Conditions
	s.lotOf(b, &c)
	var out []float64
	for _, p := range s.dyes[b.Dye].PKa {
		out = append(out, p+c.PKaShift)
	}
	return out
}

// nuisance is what an ordinary night does to a set, in the order in which the
// story's rates are listed. At most one strikes a set.
type nuisance struct {
	key  string
	rate float64
}

// nuisances are the everyday rates per set.
func nuisances() []nuisance {
	return []nuisance{
		{"scan.bubble", 0.04}, {"name.phlate", 0.05}, {"file.copy", 0.03}, {"file.reexport", 0.015},
		{"name.typo", 0.01}, {"file.comma", 0.01}, {"file.cut", 0.01}, {"name.missing", 0.02},
		{"name.swap2", 0.003}, {"name.blankwrong", 0.003},
	}
}

// trouble is what strikes one set.
type trouble struct {
	key  string
	rung int     // 0-based
	size float64 // as the key needs: absorbance, hours
	coin bool    // which of two variants
}

// troubleOf says what strikes a booked set: the script of the story first,
// then chance.
func (s *Story) troubleOf(b Booking, firstSample bool) trouble {
	rng := dice(s.seed, "nuisance", b.Night, b.Key())
	u := rng.Float64()
	t := trouble{rung: rng.IntN(11), size: rng.Float64(), coin: rng.IntN(2) == 0}
	scripted := firstSample && b.Instrument == instOne
	switch {
	case b.Night == nightBubble && b.Key() == "U1/RI-B.open.n003":
		return trouble{key: "scan.bubble", rung: 5, size: 0.09}
	case b.Night == nightLatePH && scripted:
		return trouble{key: "name.phlate", size: 5}
	case b.Night == nightShift && scripted:
		return trouble{key: "name.shift1"}
	case b.Night == nightExchange && scripted:
		return trouble{key: "name.swap2", rung: 4}
	case b.Lot == impureLot:
		return trouble{}
	}
	for _, n := range nuisances() {
		if u < n.rate {
			t.key = n.key
			return t.scaled(rng)
		}
		u -= n.rate
	}
	return trouble{}
}

// scaled turns the drawn number into the size its key needs.
func (t trouble) scaled(rng *rand.Rand) trouble {
	switch t.key {
	case "scan.bubble":
		t.size = 0.05 + 0.45*t.size*t.size
	case "name.phlate":
		t.size = 1 + 9*t.size // hours
	case "file.cut":
		t.size = 0.30 + 0.65*t.size // share of bytes left
	case "file.reexport":
		t.size = 0.02
	case "name.swap2":
		t.rung = rng.IntN(11)
	}
	return t
}
