package rehearse

import (
	"math"
	"math/rand/v2"
)

// Optics is a spectrophotometer as it really is during one set. The zero value
// is perfect and silent.
type Optics struct {
	ShiftNM     float64 // bands appear this much too far to the red
	TiltNM      float64 // additional displacement per 100 nm above TiltAboutNM
	TiltAboutNM float64 // 0: 570
	Stray       float64 // stray radiant energy as a fraction of full light
	WidenNM     float64 // bandwidth of a triangular slit beyond the one the spectra are known for
	Gain        float64 // factor on absorbance; 0: 1
	Path        float64 // factor on path length; 0: 1
	Noise       float64 // absorbance, one standard deviation per point
	NoiseBlue   float64 // additional noise factor at the blue end: Noise*(1+NoiseBlue) there
	Floor       float64 // noise of the dark signal as a fraction of full light; 0: none
	Ceiling     float64 // absorbance the detector cannot exceed; 0: none
	StepNM      float64 // wavelength of the change of sources; 0: none
	StepA       float64 // jump there, absorbance
	FringeA     float64 // amplitude of interference fringes, absorbance
	Smooth      int     // points of a moving average applied by the instrument; 0 or 1: none
}

// or1 reads a factor whose zero means one.
func or1(f float64) float64 {
	if f == 0 {
		return 1
	}
	return f
}

// truly is the wavelength the light really has when the scale says nm.
func (o Optics) truly(nm float64) float64 {
	about := o.TiltAboutNM
	if about == 0 {
		about = 570
	}
	return nm - o.ShiftNM - o.TiltNM*(nm-about)/100
}

// grid is the scale from lo to hi in steps.
func grid(lo, hi, step float64) []float64 {
	n := int(math.Round((hi-lo)/step)) + 1
	x := make([]float64, n)
	for i := range x {
		x[i] = lo + float64(i)*step
	}
	return x
}

// record turns true absorbances, sampled where the light really is, into what
// the instrument stores. curve is called for wavelengths between grid points
// when the slit is wide. The result is a new slice.
func (o Optics) record(x []float64, curve func(nm float64) float64, rng *rand.Rand) []float64 {
	y := make([]float64, len(x))
	for i, nm := range x {
		a := o.slit(o.truly(nm), curve)
		if o.Stray > 0 {
			a = -math.Log10((math.Pow(10, -a) + o.Stray) / (1 + o.Stray))
		}
		a *= or1(o.Gain)
		if o.StepA != 0 && nm >= o.StepNM {
			a += o.StepA
		}
		if o.FringeA != 0 {
			a += o.FringeA * math.Sin(2*math.Pi*9000/nm)
		}
		if o.Noise > 0 {
			blue := o.NoiseBlue * (x[len(x)-1] - nm) / (x[len(x)-1] - x[0])
			a += o.Noise * (1 + blue) * rng.NormFloat64()
		}
		y[i] = o.limit(a, rng)
	}
	return movingMean(y, o.Smooth)
}

// slit averages transmittance over the extra width of a triangular slit.
func (o Optics) slit(nm float64, curve func(float64) float64) float64 {
	if o.WidenNM <= 0 {
		return curve(nm)
	}
	const half = 6
	var t, w float64
	for k := -half; k <= half; k++ {
		f := float64(k) / half
		g := 1 - math.Abs(f)
		t += g * math.Pow(10, -curve(nm+f*o.WidenNM))
		w += g
	}
	return -math.Log10(t / w)
}

// limit lets the dark noise and the ceiling of the detector act.
func (o Optics) limit(a float64, rng *rand.Rand) float64 {
	if o.Floor > 0 {
		t := math.Pow(10, -a) + o.Floor*rng.NormFloat64()
		a = -math.Log10(math.Max(t, 1e-6))
	}
	if o.Ceiling > 0 && a > o.Ceiling {
		a = o.Ceiling
	}
	return a
}

// movingMean is the plain moving average over n points, shorter at the ends.
func movingMean(y []float64, n int) []float64 {
	if n < 2 {
		return y
	}
	out := make([]float64, len(y))
	for i := range y {
		lo, hi := max(0, i-n/2), min(len(y), i+n/2+1)
		var s float64
		for _, v := range y[lo:hi] {
			s += v
		}
		out[i] = s / float64(hi-lo)
	}
	return out
}
