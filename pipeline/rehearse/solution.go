package rehearse

import (
	"math"
	"math/rand/v2"
	"slices"
)

// solutionFaults are the faults of the amount of dye: they multiply scans.
func solutionFaults() map[string]faultFunc {
	return map[string]faultFunc{
		// From the struck rung on the cell is another one; Size is its relative path less one.
		"scan.cuvette": func(s *Set, f Fault, _ *rand.Rand) {
			scale(s, func(i int) float64 {
				if i < f.Rung {
					return 1
				}
				return 1 + size(f, -0.018)
			})
		},
		// Size is the path relative to the stated one.
		"scan.path": func(s *Set, f Fault, _ *rand.Rand) { scale(s, func(int) float64 { return size(f, 0.2) }) },
		// Size is the relative change of dye from first to last rung.
		"scan.evap": func(s *Set, f Fault, _ *rand.Rand) { rampAmount(s, size(f, 0.02)) },
		"scan.fade": func(s *Set, f Fault, _ *rand.Rand) { rampAmount(s, -size(f, 0.02)) },
		// Size is the relative scatter of the amount of dye.
		"chem.amount": func(s *Set, f Fault, rng *rand.Rand) {
			scale(s, func(int) float64 { return math.Exp(size(f, 0.024) * rng.NormFloat64()) })
		},
		// Edge wells of a plate of four columns read high.
		"scan.platerow": func(s *Set, f Fault, _ *rand.Rand) {
			scale(s, func(i int) float64 {
				if i%4 == 0 || i%4 == 3 {
					return 1 + size(f, 0.03)
				}
				return 1
			})
		},
	}
}

// lightFaults are the faults of what scatters, absorbs or drifts besides the dye.
func lightFaults() map[string]faultFunc {
	return map[string]faultFunc{
		// Size is the absorbance by which the baseline starts high; it decays over the first scans.
		"scan.warmup": func(s *Set, f Fault, _ *rand.Rand) {
			lift(s, func(i int, _ float64) float64 { return size(f, 0.006) * math.Exp(-float64(i)/4) })
		},
		// Condensation on a cold cell scatters in the first three scans.
		"scan.fog": func(s *Set, f Fault, _ *rand.Rand) {
			lift(s, func(i int, nm float64) float64 {
				if i > 2 {
					return 0
				}
				return size(f, 0.08) * math.Exp(-float64(i)) * 500 / nm
			})
		},
		"scan.precip": precipitate,
		// The dye fades above pH 11; Size is the loss per rung.
		"chem.slow": func(s *Set, f Fault, _ *rand.Rand) {
			n := 0
			scale(s, func(i int) float64 {
				if s.Rungs[i].TruePH < 11 {
					return 1
				}
				n++
				return math.Exp(-size(f, 0.06) * float64(n))
			})
		},
		"chem.none": noTransition,
		"scan.fringe": func(s *Set, f Fault, _ *rand.Rand) {
			lift(s, func(_ int, nm float64) float64 { return size(f, 0.003) * math.Sin(2*math.Pi*9000/nm) })
		},
		"scan.blankdirty": blankDirty,
		"name.blankdye":   blankWithDye,
		// The temperature probe is unplugged: every row says 25.0.
		"ph.atc": func(s *Set, _ Fault, _ *rand.Rand) {
			for i := range s.Rungs {
				s.Rungs[i].Reading.TemperatureC = 25
			}
		},
		// Size is the excess of the cell's recorded temperature, K.
		"chem.thermo": func(s *Set, f Fault, _ *rand.Rand) {
			each(s, func(sc *Scan) { sc.TemperatureC += size(f, 2.3) })
		},
		// Two solutions of the second half bind to another buffer: bands 4 nm to the red.
		"chem.complex": func(s *Set, f Fault, _ *rand.Rand) {
			for i := len(s.Rungs) / 2; i < len(s.Rungs); i++ {
				displace(&s.Rungs[i].Scan, size(f, 4))
			}
		},
	}
}

// scale multiplies every rung's absorbance by a factor of its index.
func scale(s *Set, factor func(i int) float64) {
	for i := range s.Rungs {
		k := factor(i)
		y := slices.Clone(s.Rungs[i].Scan.Absorbance)
		for j := range y {
			y[j] *= k
		}
		s.Rungs[i].Scan.Absorbance = y
	}
}

func rampAmount(s *Set, whole float64) {
	n := float64(max(1, len(s.Rungs)-1))
	scale(s, func(i int) float64 { return 1 + whole*(float64(i)/n-0.5) })
}

// lift adds an absorbance that depends on the rung and the wavelength.
func lift(s *Set, by func(i int, nm float64) float64) {
	for i := range s.Rungs {
		sc := &s.Rungs[i].Scan
		y := slices.Clone(sc.Absorbance)
		for j, nm := range sc.WavelengthNM {
			y[j] += by(i, nm)
		}
		sc.Absorbance = y
	}
}

// displace moves a scan along the wavelength axis by linear interpolation.
func displace(sc *Scan, nm float64) {
	y := slices.Clone(sc.Absorbance)
	n := len(y)
	for j := range y {
		at := float64(j) - nm/(sc.WavelengthNM[1]-sc.WavelengthNM[0])
		k := min(max(int(math.Floor(at)), 0), n-2)
		w := min(max(at-float64(k), 0), 1)
		y[j] = (1-w)*sc.Absorbance[k] + w*sc.Absorbance[k+1]
	}
	sc.Absorbance = y
}

// precipitate: the acid form comes out of the first rungs, which lose dye and
// scatter. Size is the share lost in the first rung.
func precipitate(s *Set, f Fault, _ *rand.Rand) {
	loss := func(i int) float64 { return size(f, 0.35) * math.Max(0, 1-float64(i)/3) }
	scale(s, func(i int) float64 { return 1 - loss(i) })
	lift(s, func(i int, nm float64) float64 { return 0.12 * loss(i) * math.Pow(500/nm, 3) })
}

// noTransition: the indicator does not change colour within the ladder.
func noTransition(s *Set, _ Fault, rng *rand.Rand) {
	first := s.Rungs[0].Scan.Absorbance
	for i := range s.Rungs {
		y := slices.Clone(first)
		for j := range y {
			y[j] += 6e-4 * rng.NormFloat64()
		}
		s.Rungs[i].Scan.Absorbance = y
	}
}

// blankDirty adds a smooth curve to the blank, so that all scans lack it.
func blankDirty(s *Set, f Fault, _ *rand.Rand) {
	y := slices.Clone(s.Blank.Absorbance)
	for j, nm := range s.Blank.WavelengthNM {
		y[j] += size(f, 0.006) * math.Pow(500/nm, 2)
	}
	s.Blank.Absorbance = y
}

// blankWithDye: a share of the first solution is in the blank.
func blankWithDye(s *Set, f Fault, _ *rand.Rand) {
	y := slices.Clone(s.Blank.Absorbance)
	for j := range y {
		y[j] += size(f, 0.03) * (s.Rungs[0].Scan.Absorbance[j] - s.Blank.Absorbance[j])
	}
	s.Blank.Absorbance = y
}

// SwapBuffers gives a calibration in which the outer two buffers were taken
// for each other: the slope it implies is impossible.
func SwapBuffers(c Calibration) Calibration {
	c.Points = slices.Clone(c.Points)
	if n := len(c.Points); n > 1 {
		c.Points[0].MV, c.Points[n-1].MV = c.Points[n-1].MV, c.Points[0].MV
	}
	return c
}

// ExchangeTables gives two sets each other's pH readings, as far as both go.
func ExchangeTables(a, b *Set) {
	for i := range min(len(a.Rungs), len(b.Rungs)) {
		a.Rungs[i].Reading, b.Rungs[i].Reading = b.Rungs[i].Reading, a.Rungs[i].Reading
	}
}
