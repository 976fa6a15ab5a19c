package spectra

import "math"

// StrayLight is the absorbance an instrument shows for a true absorbance a when
// a share s of the light reaches the detector unabsorbed:
// -log10((10^-a + s)/(1 + s)). It tops out near -log10 s.
func StrayLight(a, s float64) float64 {
	return -math.Log10((math.Pow(10, -a) + s) / (1 + s))
}

// StrayError is StrayLight(a, s) - a to first order in s: -(s/ln10)(10^a - 1).
func StrayError(a, s float64) float64 {
	return -s / math.Ln10 * (math.Pow(10, a) - 1)
}

// StrayBound is the highest true absorbance at which stray light s errs by no
// more than limit (absorbance, > 0). +Inf when s is 0.
func StrayBound(s, limit float64) float64 {
	if s <= 0 {
		return math.Inf(1)
	}
	// (T + s)/(1 + s) = T 10^limit, so T = s / ((1+s) 10^limit - 1).
	t := s / ((1+s)*math.Pow(10, limit) - 1)
	return -math.Log10(t)
}

// TrueAbsorbance undoes StrayLight. NaN where the observed value lies at or
// above the stray-light ceiling.
func TrueAbsorbance(observed, s float64) float64 {
	t := math.Pow(10, -observed)*(1+s) - s
	if t <= 0 {
		return math.NaN()
	}
	return -math.Log10(t)
}

// BandwidthError is the error of an absorbance measured with a triangular slit
// of spectral bandwidth b (full width at half height, nm) from the local first
// and second derivatives of the spectrum (per nm and nm^2), to second order:
// (b^2/12)(d2 - ln10 d1^2).
func BandwidthError(d1, d2, b float64) float64 {
	return b * b / 12 * (d2 - math.Ln10*d1*d1)
}

// ObservedPeak is the absorbance shown at the top of a Gaussian band of height
// peak and full width fwhm through a triangular slit of bandwidth b in the same
// unit, by integration of transmittance over the slit.
func ObservedPeak(peak, fwhm, b float64) float64 {
	if b <= 0 {
		return peak
	}
	// Simpson's rule; the slit function has its kink at the centre, so one half suffices.
	const n = 400
	h := b / n
	light, all := 0.0, 0.0
	for i := 0; i <= n; i++ {
		x := h * float64(i)
		weight := 2.0
		switch {
		case i == 0 || i == n:
			weight = 1
		case i%2 == 1:
			weight = 4
		}
		slit := weight * (1 - x/b)
		a := peak * math.Exp(-4*math.Ln2*x*x/(fwhm*fwhm))
		light += slit * math.Pow(10, -a)
		all += slit
	}
	return -math.Log10(light / all)
}

// A NoiseLaw says how the noise of a transmittance depends on it.
type NoiseLaw int

// The laws after Rothman, Crouch & Ingle, Anal. Chem. 47 (1975) 1226.
const (
	Constant     NoiseLaw = iota // dT: thermal, readout
	Shot                         // dT sqrt(T)
	Proportional                 // dT T: source flicker, cell placing
	Mixed                        // dT sqrt(T^2 + T)
)

// PhotometricError is the standard deviation of an absorbance a for a noise
// scale dT of transmittance under a law.
func PhotometricError(a, dT float64, law NoiseLaw) float64 {
	t := math.Pow(10, -a)
	switch law {
	case Shot:
		dT *= math.Sqrt(t)
	case Proportional:
		dT *= t
	case Mixed:
		dT *= math.Sqrt(t*t + t)
	}
	return dT / (math.Ln10 * t)
}
