package rehearse

import (
	"fmt"
	"maps"
	"math"
	"math/rand/v2"
	"slices"
	"time"
)

// A Fault is one thing that goes wrong with one set. Keys are those of the
// failure catalogue.
type Fault struct {
	Key  string
	Rung int     // 0-based index of the rung it strikes, where it strikes one
	Size float64 // see faultTable; 0: a usual size
}

// faultFunc changes a finished set.
type faultFunc func(s *Set, f Fault, rng *rand.Rand)

// faults maps keys of the failure catalogue to what they do to a set in
// memory. Faults of files are in spoil.go.
func faultTable() map[string]faultFunc {
	table := map[string]faultFunc{
		"scan.bubble":      bubble,
		"scan.open":        func(s *Set, f Fault, r *rand.Rand) { level(s, f.Rung, 0, 0.02, r) },
		"scan.blocked":     func(s *Set, f Fault, r *rand.Rand) { level(s, f.Rung, 3.5, 0.2, r) },
		"scan.spike":       spike,
		"scan.wljitter":    jitter,
		"scan.twice":       twice,
		"scan.clone":       func(s *Set, f Fault, _ *rand.Rand) { clone(s, f.Rung) },
		"scan.vial":        vial,
		"scan.step":        func(s *Set, f Fault, _ *rand.Rand) { jumpAt(s, 560, size(f, 0.002)) },
		"scan.doubleblank": doubleBlank,
		"scan.saturated":   saturated,
		"name.swap2":       func(s *Set, f Fault, _ *rand.Rand) { exchange(s, f.Rung, f.Rung+1) },
		"name.shift1":      shiftTable,
		"name.noblank":     func(s *Set, _ Fault, _ *rand.Rand) { s.NoBlank = true },
		"name.phrows":      func(s *Set, f Fault, _ *rand.Rand) { s.Rungs[f.Rung].NoRow = true },
		"name.missing":     func(s *Set, f Fault, _ *rand.Rand) { s.Rungs[f.Rung].NoScan = true },
		"ph.typed":         typed,
		"ph.coarse":        coarse,
		"ph.copy":          func(s *Set, f Fault, _ *rand.Rand) { s.Rungs[f.Rung+1].Reading.PH = s.Rungs[f.Rung].Reading.PH },
		"ph.mV":            millivolts,
		"ph.twoelec":       twoElectrodes,
		"ph.dry":           func(s *Set, f Fault, r *rand.Rand) { s.Rungs[f.Rung].Reading.PH += size(f, 0.3) * r.NormFloat64() },
		"ph.junction":      junction,
		"ph.gap":           gap,
		"chem.nolimits":    func(s *Set, f Fault, _ *rand.Rand) { s.Rungs = s.Rungs[:len(s.Rungs)-int(size(f, 4))] },
		"chem.mixedI":      mixedBuffers,
		"file.coarse":      func(s *Set, f Fault, _ *rand.Rand) { decimals(s, int(size(f, 2))) },
		"file.smoothed":    smoothed,
	}
	maps.Copy(table, solutionFaults())
	maps.Copy(table, lightFaults())
	return table
}

// FaultKeys lists the faults that Spoil knows, in order of the alphabet.
func FaultKeys() []string {
	var keys []string
	for k := range faultTable() {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}

// Spoil lets a fault strike a set.
func Spoil(s *Set, f Fault, rng *rand.Rand) error {
	do, ok := faultTable()[f.Key]
	if !ok {
		return fmt.Errorf("rehearse: unknown fault %q; FaultKeys lists the known ones", f.Key)
	}
	if f.Rung < 0 || f.Rung >= len(s.Rungs) {
		return fmt.Errorf("rehearse: fault %s strikes rung %d of a set of %d", f.Key, f.Rung, len(s.Rungs))
	}
	if last := len(s.Rungs) - 1; (f.Key == "name.swap2" || f.Key == "ph.copy" || f.Key == "scan.twice" || f.Key == "scan.clone") && f.Rung == last {
		return fmt.Errorf("rehearse: fault %s needs a rung after rung %d", f.Key, f.Rung)
	}
	do(s, f, rng)
	return nil
}

func size(f Fault, usual float64) float64 {
	if f.Size == 0 {
		return usual
	}
	return f.Size
}

// bubble: the beam is scattered in one scan. Size is the flat rise.
func bubble(s *Set, f Fault, rng *rand.Rand) {
	rise := size(f, 0.09)
	y := slices.Clone(s.Rungs[f.Rung].Scan.Absorbance)
	for i := range y {
		y[i] += rise + 0.003*rng.NormFloat64()
	}
	s.Rungs[f.Rung].Scan.Absorbance = y
}

func level(s *Set, rung int, at, sd float64, rng *rand.Rand) {
	y := make([]float64, len(s.Rungs[rung].Scan.Absorbance))
	for i := range y {
		y[i] = at + sd*rng.NormFloat64()
	}
	s.Rungs[rung].Scan.Absorbance = y
}

func spike(s *Set, f Fault, rng *rand.Rand) {
	y := slices.Clone(s.Rungs[f.Rung].Scan.Absorbance)
	y[rng.IntN(len(y))] += size(f, 0.1)
	s.Rungs[f.Rung].Scan.Absorbance = y
}

// jitter displaces single scans by Size nm, one standard deviation, by the
// derivative of what was recorded.
func jitter(s *Set, f Fault, rng *rand.Rand) {
	for k := range s.Rungs {
		sc := &s.Rungs[k].Scan
		d := size(f, 0.4) * rng.NormFloat64()
		y := slices.Clone(sc.Absorbance)
		for i := 1; i < len(y)-1; i++ {
			y[i] -= d * (sc.Absorbance[i+1] - sc.Absorbance[i-1]) / (sc.WavelengthNM[i+1] - sc.WavelengthNM[i-1])
		}
		sc.Absorbance = y
	}
}

// twice: the tray did not advance, the same solution was measured again.
func twice(s *Set, f Fault, rng *rand.Rand) {
	y := slices.Clone(s.Rungs[f.Rung].Scan.Absorbance)
	for i := range y {
		y[i] += 8.5e-4 * rng.NormFloat64()
	}
	s.Rungs[f.Rung+1].Scan.Absorbance = y
}

func clone(s *Set, rung int) { s.Rungs[rung+1].Scan.Absorbance = s.Rungs[rung].Scan.Absorbance }

// vial: one vial holds another dye.
func vial(s *Set, f Fault, _ *rand.Rand) {
	y := slices.Clone(s.Rungs[f.Rung].Scan.Absorbance)
	alien := Form{[]Band{{505, 35, 1}}}
	for i, nm := range s.Rungs[f.Rung].Scan.WavelengthNM {
		y[i] = 0.3*y[i] + size(f, 0.5)*alien.at(nm, 0)
	}
	s.Rungs[f.Rung].Scan.Absorbance = y
}

func jumpAt(s *Set, nm, by float64) {
	each(s, func(sc *Scan) {
		for i, x := range sc.WavelengthNM {
			if x >= nm {
				sc.Absorbance[i] += by
			}
		}
	})
}

// each gives every scan of the set, the blank included, to f with a copy of its numbers.
func each(s *Set, f func(sc *Scan)) {
	s.Blank.Absorbance = slices.Clone(s.Blank.Absorbance)
	f(&s.Blank)
	for k := range s.Rungs {
		s.Rungs[k].Scan.Absorbance = slices.Clone(s.Rungs[k].Scan.Absorbance)
		f(&s.Rungs[k].Scan)
	}
}

// doubleBlank: a solvent edge was subtracted once more from every scan.
func doubleBlank(s *Set, f Fault, _ *rand.Rand) {
	for k := range s.Rungs {
		sc := &s.Rungs[k].Scan
		sc.Absorbance = slices.Clone(sc.Absorbance)
		for i, nm := range sc.WavelengthNM {
			sc.Absorbance[i] -= size(f, 0.05) * math.Exp(-(nm-sc.WavelengthNM[0])/40)
		}
	}
}

// saturated multiplies the dye so that the detector reaches its floor.
func saturated(s *Set, f Fault, rng *rand.Rand) {
	for k := range s.Rungs {
		sc := &s.Rungs[k].Scan
		sc.Absorbance = slices.Clone(sc.Absorbance)
		for i, a := range sc.Absorbance {
			t := math.Pow(10, -size(f, 4)*a) + 5e-4*rng.NormFloat64()
			sc.Absorbance[i] = -math.Log10(math.Max(t, 1e-4))
		}
	}
}

func exchange(s *Set, i, j int) {
	s.Rungs[i].Scan, s.Rungs[j].Scan = s.Rungs[j].Scan, s.Rungs[i].Scan
}

// shiftTable moves the pH column by one row; the last row wraps round with the
// value the next solution of an even ladder would have had. Size -1 shifts the
// other way.
func shiftTable(s *Set, f Fault, _ *rand.Rand) {
	n := len(s.Rungs)
	ph := make([]float64, n)
	for i, r := range s.Rungs {
		ph[i] = r.Reading.PH
	}
	step := (ph[n-1] - ph[0]) / float64(n-1)
	for i := range s.Rungs {
		switch {
		case size(f, 1) > 0 && i+1 < n:
			s.Rungs[i].Reading.PH = ph[i+1]
		case size(f, 1) > 0:
			s.Rungs[i].Reading.PH = math.Round(1000*(ph[n-1]+step)) / 1000
		case i > 0:
			s.Rungs[i].Reading.PH = ph[i-1]
		default:
			s.Rungs[i].Reading.PH = math.Round(1000*(ph[0]-step)) / 1000
		}
	}
}

// typed transposes the two first decimals.
func typed(s *Set, f Fault, _ *rand.Rand) {
	r := &s.Rungs[f.Rung].Reading
	h := int(math.Round(r.PH * 100))
	r.PH = float64(h/100) + float64(h%10)/10 + float64(h/10%10)/100
	r.Decimals = 2
}

func coarse(s *Set, f Fault, _ *rand.Rand) {
	d := int(size(f, 1))
	q := math.Pow(10, float64(d))
	for k := range s.Rungs {
		r := &s.Rungs[k].Reading
		r.PH, r.Decimals = math.Round(q*r.PH)/q, d
	}
}

func millivolts(s *Set, _ Fault, _ *rand.Rand) {
	for k := range s.Rungs {
		r := &s.Rungs[k].Reading
		r.PH, r.Decimals = r.MV, 1
	}
}

func twoElectrodes(s *Set, f Fault, _ *rand.Rand) {
	for k := len(s.Rungs) / 2; k < len(s.Rungs); k++ {
		s.Rungs[k].Reading.PH = round3(s.Rungs[k].Reading.PH + size(f, 0.03))
	}
}

func junction(s *Set, f Fault, rng *rand.Rand) {
	for k := range s.Rungs {
		s.Rungs[k].Reading.PH = round3(s.Rungs[k].Reading.PH + size(f, 0.034)*rng.NormFloat64())
	}
}

// gap removes the rungs next to the middle of the ladder.
func gap(s *Set, f Fault, _ *rand.Rand) {
	mid, n := len(s.Rungs)/2, int(size(f, 3))
	s.Rungs = slices.Delete(s.Rungs, max(0, mid-n/2), min(len(s.Rungs), mid-n/2+n))
}

// mixedBuffers: the second half of the ladder has another ionic strength; its
// readings are displaced by Size against the dye.
func mixedBuffers(s *Set, f Fault, _ *rand.Rand) { twoElectrodes(s, Fault{Size: size(f, 0.02)}, nil) }

func decimals(s *Set, d int) { each(s, func(sc *Scan) { sc.Decimals = d }) }

func smoothed(s *Set, f Fault, _ *rand.Rand) {
	each(s, func(sc *Scan) { sc.Absorbance = movingMean(sc.Absorbance, int(size(f, 7))) })
}

func round3(x float64) float64 { return math.Round(1000*x) / 1000 }

// delayed moves the moment a table is there.
func delayed(at time.Time, hours float64) time.Time {
	return at.Add(time.Duration(hours * float64(time.Hour)))
}
