package drift

import (
	"math"
)

// A scene is one noise-free ladder with everything that can be wrong with it.
type scene struct {
	d      Design
	pka    float64
	read   func(p float64) float64 // reading error at true pH
	inCell float64                 // pH in the cell less pH in the vessel
	lag    float64
	carry  float64
	shift  func(w float64) float64 // nm at wavelength w
	stray  float64
	broad  float64 // added variance of the slit, nm^2 / ...: (B2^2-B1^2)/12
	scale  float64
	trend  float64   // relative amount, first to last rung
	fixed  []float64 // added absorbance, same in all rungs
	second float64   // share of a second dye
	turbid float64   // absorbance at 500 nm in a fully acid rung
}

func newScene(d Design) *scene {
	return &scene{d: d, pka: d.PKa, read: func(float64) float64 { return 0 }, scale: 1}
}

// disturb sets one cause; false if the cause does not touch the ladder.
func (s *scene) disturb(c Cause, size float64) bool {
	d := s.d
	switch c {
	case ElectrodeOffset, ElectrodeSlope, Compensation, CO2, BufferLow, BufferMid, BufferHigh:
		s.read = readingError(d, c, size)
	case RoomTemperature, Ionic:
		s.pka += trueShift(d, c, size)
	case CellTemperature:
		s.pka += trueShift(d, c, size)
		s.inCell = d.DPHDT * size
	case ElectrodeLag:
		s.lag = size / 100
	case CarryOver:
		s.carry = size / 100
	case WavelengthShift:
		s.shift = func(float64) float64 { return size }
	case WavelengthTilt:
		w := d.WavelengthNM
		pivot := (w[0] + w[len(w)-1]) / 2
		s.shift = func(x float64) float64 { return size / 100 * (x - pivot) }
	case Stray:
		s.stray = size / 100
	case Bandwidth:
		b := d.BandwidthNM
		s.broad = ((b+size)*(b+size) - b*b) / 12
	case Gain, Path, Stock:
		s.scale = 1 + size/100
	case AmountRise:
		s.trend = size / 100
	case ImpurityConst:
		s.fixed = constantBand(d, size/100)
	case ImpurityAcid:
		s.second = size / 100
	case Scatter:
		s.turbid = size
	default:
		return false
	}
	return true
}

// constantBand is a broad band a little below the acid band, as decomposition
// products of dyes have; its height is the share of the acid band.
func constantBand(d Design, share float64) []float64 {
	mk := nominalMarks(d.WavelengthNM, d.Acid, d.Base)
	out := make([]float64, len(d.WavelengthNM))
	for j, w := range d.WavelengthNM {
		z := (w - (mk.acid - 14)) / 60
		out[j] = share * mk.heightAcid * math.Exp(-z*z/2)
	}
	return out
}

// turbidity is the wavelength dependence of scattering by small particles, 1 at 500 nm.
func turbidity(w float64) float64 { return math.Pow(500/w, 4) }

// measure gives absorbances (m*w) and pH as read.
func (s *scene) measure() (a, ph []float64) {
	d := s.d
	m, w := len(d.Ladder), len(d.WavelengthNM)
	a, ph = make([]float64, m*w), make([]float64, m)
	acid, base := s.seen(d.Acid), s.seen(d.Base)
	var acid2, base2 []float64
	if s.second > 0 {
		acid2 = displaced(d.WavelengthNM, d.Acid, func(float64) float64 { return d.Band })
		base2 = displaced(d.WavelengthNM, d.Base, func(float64) float64 { return d.Band })
	}
	last := 0.0
	for i, p := range d.Ladder {
		al := baseShare(s.pka, p+s.inCell)
		row := a[i*w : (i+1)*w]
		amount := s.scale
		if m > 1 {
			amount *= 1 + s.trend*(float64(i)/float64(m-1)-0.5)
		}
		for j := range row {
			row[j] = amount * (al*base[j] + (1-al)*acid[j])
		}
		if s.second > 0 {
			a2 := baseShare(s.pka+d.Minus, p)
			for j := range row {
				row[j] = (1-s.second)*row[j] + s.second*(a2*base2[j]+(1-a2)*acid2[j])
			}
		}
		s.spoil(row, 1-al)
		if i > 0 && s.carry > 0 {
			for j := range row {
				row[j] = (1-s.carry)*row[j] + s.carry*a[(i-1)*w+j]
			}
		}
		e := s.read(p)
		if i > 0 {
			e += s.lag * (last - (p - d.Ladder[i-1]))
		}
		last = e
		ph[i] = p + e
	}
	return a, ph
}

// spoil applies what acts on a whole row: fixed bands, turbidity, slit, stray light.
func (s *scene) spoil(row []float64, acidShare float64) {
	for j := range row {
		if s.fixed != nil {
			row[j] += s.fixed[j]
		}
		if s.turbid != 0 {
			row[j] += s.turbid * turbidity(s.d.WavelengthNM[j]) * acidShare
		}
	}
	if s.broad != 0 {
		broaden(s.d.WavelengthNM, row, s.broad)
	}
	if s.stray != 0 {
		for j, v := range row {
			row[j] = -math.Log10((math.Pow(10, -v) + s.stray) / (1 + s.stray))
		}
	}
}

// seen displaces a spectrum as a wrong wavelength scale does.
func (s *scene) seen(spec []float64) []float64 {
	if s.shift == nil {
		return spec
	}
	return displaced(s.d.WavelengthNM, spec, s.shift)
}

// broaden adds the second-order effect of a wider triangular slit:
// k (A” - ln10 A'^2), k = (B2^2-B1^2)/12.
func broaden(w, row []float64, k float64) {
	n := len(row)
	out := make([]float64, n)
	copy(out, row)
	for j := 1; j < n-1; j++ {
		l, r := w[j]-w[j-1], w[j+1]-w[j]
		d1 := (row[j+1] - row[j-1]) / (l + r)
		d2 := 2 * ((row[j+1]-row[j])/r - (row[j]-row[j-1])/l) / (l + r)
		out[j] += k * (d2 - math.Ln10*d1*d1)
	}
	copy(row, out)
}

// displaced gives spec read on a scale that shows every wavelength too high by shift(w).
func displaced(w, spec []float64, shift func(float64) float64) []float64 {
	out := make([]float64, len(w))
	for j, x := range w {
		out[j] = cubicAt(w, spec, x-shift(x))
	}
	return out
}

// cubicAt interpolates with the cubic through the four nearest points; outside
// the grid the end value is held.
func cubicAt(w, y []float64, x float64) float64 {
	n := len(w)
	if x <= w[0] {
		return y[0]
	}
	if x >= w[n-1] {
		return y[n-1]
	}
	lo, hi := 0, n-1
	for hi-lo > 1 {
		if m := (lo + hi) / 2; w[m] <= x {
			lo = m
		} else {
			hi = m
		}
	}
	k := max(0, min(n-4, lo-1))
	sum := 0.0
	for i := k; i < k+4; i++ {
		l := y[i]
		for j := k; j < k+4; j++ {
			if j != i {
				l *= (x - w[j]) / (w[i] - w[j])
			}
		}
		sum += l
	}
	return sum
}
