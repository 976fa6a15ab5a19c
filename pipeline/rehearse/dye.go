package rehearse

import "math"

// A Band is one Gaussian absorption band.
type Band struct {
	CentreNM float64
	WidthNM  float64 // standard deviation of the Gaussian
	Molar    float64 // molar absorption coefficient at the top, L/(mol cm)
}

// A Form is the spectrum of one species, a sum of bands.
type Form struct{ Bands []Band }

// at is the molar absorption coefficient at a wavelength, with every band
// displaced by shift nm.
func (f Form) at(nm, shift float64) float64 {
	var e float64
	for _, b := range f.Bands {
		z := (nm - b.CentreNM - shift) / b.WidthNM
		if z > -7 && z < 7 {
			e += b.Molar * math.Exp(-0.5*z*z)
		}
	}
	return e
}

// A Dye is an absorbing acid with n steps and n+1 forms.
type Dye struct {
	Name   string
	Title  string
	Forms  []Form    // n+1, most protonated first
	PKa    []float64 // n mixed constants at 25.0 C and Ionic
	Charge int       // of the most protonated form
	DPKaDT []float64 // n, 1/K
	Ionic  float64   // mol/L the constants hold for; 0: 0.1
	Ladder []float64 // nominal pH of the rungs
	Buffer string    // medium
	DPHDT  float64   // temperature coefficient of the pH of the medium, 1/K
	Range  [2]float64
	Clear  [2]float64
}

// ionic is the ionic strength the constants hold for.
func (d Dye) ionic() float64 {
	if d.Ionic > 0 {
		return d.Ionic
	}
	return 0.1
}

// constants are the mixed pKa at a temperature and an ionic strength.
func (d Dye) constants(t, ionic float64) []float64 {
	out := make([]float64, len(d.PKa))
	for j, p := range d.PKa {
		slope := 0.0
		if j < len(d.DPKaDT) {
			slope = d.DPKaDT[j]
		}
		out[j] = p + slope*(t-25) + shiftIonic(d.Charge-j, d.ionic(), ionic, 25)
	}
	return out
}

// EvenLadder is a ladder of n rungs from the first constant plus lo to the
// last constant plus hi, rounded to hundredths as a recipe would be.
func EvenLadder(pka []float64, lo, hi float64, n int) []float64 {
	from, to := pka[0]+lo, pka[len(pka)-1]+hi
	out := make([]float64, n)
	for i := range out {
		p := from
		if n > 1 {
			p += (to - from) * float64(i) / float64(n-1)
		}
		out[i] = math.Round(p*100) / 100
	}
	return out
}

// twoForm assembles a one-step dye of the sulfonephthalein kind.
func twoForm(name, title, buffer string, pka, slope, dphdt float64, acid, base []Band) Dye {
	return Dye{
		Name: name, Title: title, Buffer: buffer, DPHDT: dphdt,
		Forms: []Form{{acid}, {base}}, PKa: []float64{pka}, DPKaDT: []float64{slope}, Charge: -1,
		Ladder: EvenLadder([]float64{pka}, -2, 2, 12),
		Range:  [2]float64{380, 760}, Clear: [2]float64{730, 760},
	}
}

// Dyes are the indicators of the demo, by name. Constants, band positions and
// temperature coefficients are near handbook values (from memory); the shapes
// are invented.
func Dyes() map[string]Dye {
	acid := func(top, h float64) []Band {
		return []Band{{top, 31, h}, {top - 46, 24, 0.27 * h}}
	}
	base := func(top, h float64) []Band {
		return []Band{{top, 24, h}, {top - 36, 26, 0.30 * h}, {392, 22, 0.16 * h}}
	}
	list := []Dye{
		twoForm("RI-A", "bromocresol green", "acetate-formate", 4.66, -0.003, 0.0002, acid(444, 17500), base(616.5, 38000)),
		twoForm("RI-B", "chlorophenol red", "MES", 6.02, -0.009, -0.011, acid(434, 18500), base(574.5, 36500)),
		twoForm("RI-C", "m-cresol purple", "TRIS", 8.26, -0.014, -0.028, acid(434, 18200), base(578.5, 37500)),
		twoForm("BCP", "bromocresol purple", "MES", 6.30, -0.008, -0.011, acid(432, 17800), base(588.5, 39500)),
		twoForm("PR", "phenol red", "HEPES", 7.80, -0.012, -0.014, acid(433, 19500), base(558.5, 37000)),
		twoForm("CR", "cresol red", "TRIS", 8.20, -0.013, -0.028, acid(434, 18800), base(573.0, 38500)),
		twoForm("TB", "thymol blue", "TRIS-glycinate", 8.90, -0.013, -0.026, acid(436, 18000), base(596.5, 40500)),
		twoForm("BCG", "bromocresol green", "acetate-formate", 4.66, -0.003, 0.0002, acid(444, 17500), base(616.5, 38000)),
		nitrophenol(),
	}
	out := make(map[string]Dye, len(list))
	for _, d := range list {
		out[d.Name] = d
	}
	return out
}

// nitrophenol is the reference whose acid form carries no charge.
func nitrophenol() Dye {
	return Dye{
		Name: "RI-D", Title: "4-nitrophenol", Buffer: "MOPS", DPHDT: -0.015,
		Forms: []Form{
			{[]Band{{317, 21, 9800}, {286, 16, 2500}}},
			{[]Band{{400.5, 21, 18300}, {372, 18, 3000}}},
		},
		PKa: []float64{7.06}, DPKaDT: []float64{-0.011}, Charge: 0,
		Ladder: EvenLadder([]float64{7.06}, -2, 2, 12),
		Range:  [2]float64{300, 500}, Clear: [2]float64{484, 500},
	}
}
