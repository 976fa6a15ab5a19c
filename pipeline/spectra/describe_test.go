package spectra

import (
	"bufio"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// outside opens a table that lies beside the module, or skips.
func outside(t *testing.T, parts ...string) [][]string {
	t.Helper()
	dir, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	for {
		if _, err := os.Stat(filepath.Join(dir, "go.mod")); err == nil {
			break
		}
		up := filepath.Dir(dir)
		if up == dir {
			t.Skip("no module root found above the test")
		}
		dir = up
	}
	f, err := os.Open(filepath.Join(append([]string{dir, "..", "shared"}, parts...)...))
	if err != nil {
		t.Skipf("the folder of outside figures is not here: %v", err)
	}
	defer f.Close()
	var rows [][]string
	sc := bufio.NewScanner(f)
	sc.Buffer(nil, 1<<22)
	for sc.Scan() {
		if line := strings.TrimSpace(sc.Text()); line != "" {
			rows = append(rows, strings.Split(line, ","))
		}
	}
	return rows
}

func number(t *testing.T, s string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(strings.TrimSpace(s), 64)
	if err != nil {
		t.Fatalf("number %q: %v", s, err)
	}
	return v
}

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: got %.8g, expected %.8g within %.2g", what, got, want, tol)
	}
}

func TestStrayLightTable(t *testing.T) {
	for _, r := range outside(t, "check-values", "chemistry", "stray_light.csv")[1:] {
		s, a := number(t, r[0]), number(t, r[1])
		near(t, "s "+r[0]+", A "+r[1], StrayLight(a, s), number(t, r[2]), 0.00006)
		near(t, "bias", StrayLight(a, s)-a, number(t, r[3]), 0.00006)
		near(t, "back", TrueAbsorbance(StrayLight(a, s), s), a, 1e-6)
	}
	near(t, "ceiling of 0.1 %", StrayLight(60, 0.001), 3.0004, 0.00005)
	if !math.IsNaN(TrueAbsorbance(3.2, 0.001)) {
		t.Error("absorbance above the ceiling was undone")
	}
	rapid.Check(t, func(t *rapid.T) {
		s := math.Pow(10, rapid.Float64Range(-6, -1.5).Draw(t, "log s"))
		limit := math.Pow(10, rapid.Float64Range(-4, -1).Draw(t, "log limit"))
		a := StrayBound(s, limit)
		if d := a - StrayLight(a, s); math.Abs(d-limit) > 1e-9 {
			t.Fatalf("at the bound the error is %g, limit %g", d, limit)
		}
		low := math.Min(a, 0.4)
		if exact, first := StrayLight(low, s)-low, StrayError(low, s); math.Abs(exact-first) > 6*s*math.Abs(first)+1e-15 {
			t.Fatalf("first order %g, exact %g", first, exact)
		}
	})
}

func TestBandwidthTable(t *testing.T) {
	for _, r := range outside(t, "check-values", "chemistry", "bandwidth_error.csv")[1:] {
		ratio, peak := number(t, r[0]), number(t, r[1])
		got := ObservedPeak(peak, 1, ratio)
		near(t, "SBW/NBW "+r[0]+", A "+r[1], got, number(t, r[2]), 0.00002)
		near(t, "ratio", got/peak, number(t, r[3]), 0.00002)
		if ratio <= 0.1 {
			// At a maximum A'' = -8 ln2 A / fwhm^2: relative error -0.46 (B/fwhm)^2.
			second := BandwidthError(0, -8*math.Ln2*peak, ratio)
			near(t, "second order", second, got-peak, 0.02*math.Abs(got-peak))
			near(t, "-0.46 (B/FWHM)^2", second/peak, -0.46*ratio*ratio, 0.003*ratio*ratio)
		}
	}
	near(t, "no slit", ObservedPeak(0.8, 30, 0), 0.8, 0)
}

func TestPhotometricErrorTable(t *testing.T) {
	for _, r := range outside(t, "check-values", "chemistry", "photometric_error_models.csv")[1:] {
		a := number(t, r[0])
		for i, law := range []NoiseLaw{Constant, Shot, Proportional, Mixed} {
			near(t, fmt.Sprintf("A %s, law %d", r[0], law), 100*PhotometricError(a, 0.003, law)/a, number(t, r[2+i]), 0.0006*math.Max(1, a))
		}
	}
	least := func(law NoiseLaw) float64 {
		best, at := math.Inf(1), 0.0
		for a := 0.01; a < 3; a += 0.0001 {
			if e := PhotometricError(a, 0.001, law) / a; e < best {
				best, at = e, a
			}
		}
		return at
	}
	near(t, "minimum, constant noise: T = 1/e", least(Constant), 0.4343, 0.0002)
	near(t, "minimum, shot noise: 2/ln10", least(Shot), 0.8686, 0.0002)
}

// limits gives the two limit spectra of the paper dye, displaced by d nm, with noise.
func limits(x []float64, d, sd float64, rng *rand.Rand) (spectra, sds []float64) {
	dye := paperDye()
	spectra, sds = make([]float64, 2*len(x)), make([]float64, 2*len(x))
	for j := range x {
		spectra[j] = gauss(dye.acid, x[j]-d)
		spectra[len(x)+j] = gauss(dye.base, x[j]-d)
		for f := range 2 {
			sds[f*len(x)+j] = sd
			if sd > 0 {
				spectra[f*len(x)+j] += sd * rng.NormFloat64()
			}
		}
	}
	return spectra, sds
}

// TestScaleShift: a wavelength scale displaced by +d moves every position by d
// and the ratios by the logarithmic slopes at the nominal places; for bands
// about the isosbestic point as here R_B rises and R_A falls.
func TestScaleShift(t *testing.T) {
	x := grid(380, 680, 1)
	clean, _ := limits(x, 0, 0, nil)
	at0 := Describe(x, clean, nil, Nominal{})
	nominal := at0.Used
	w := len(x)
	slope := func(y []float64, nm float64) float64 {
		return (math.Log(ValueAt(x, y, nm+0.5)) - math.Log(ValueAt(x, y, nm-0.5)))
	}
	mean := make([]float64, w)
	for j := range mean {
		mean[j] = (clean[j] + clean[w+j]) / 2
	}
	for _, d := range []float64{-0.5, 0.3, 0.5} {
		moved, _ := limits(x, d, 0, nil)
		c := Describe(x, moved, nil, nominal)
		near(t, "lambda acid", c.LambdaAcid-at0.LambdaAcid, d, 0.003)
		near(t, "lambda base", c.LambdaBase-at0.LambdaBase, d, 0.003)
		near(t, "lambda iso", c.LambdaIso-at0.LambdaIso, d, 0.003)
		// At the maxima ln A does not change to first order: the denominator moves.
		near(t, "ln R_B", c.LnRB-at0.LnRB, d*slope(clean[w:], nominal.IsoNM), 0.0012)
		near(t, "ln R_A", c.LnRA-at0.LnRA, d*slope(clean[:w], nominal.IsoNM), 0.0012)
		near(t, "ln A_iso", c.LnAIso-at0.LnAIso, -d*slope(mean, nominal.IsoNM), 0.0012)
		// needs of the drift table: the slope of absorbance across the ladder.
		tilt := -d * (slope(clean[w:], nominal.IsoNM) - slope(clean[:w], nominal.IsoNM))
		near(t, "tilt at the nominal isosbestic wavelength", c.IsoTilt-at0.IsoTilt, tilt, 0.0015)
		if d > 0 && c.IsoTilt-at0.IsoTilt >= 0 {
			t.Error("a positive shift must tilt the ladder down where base absorption rises with wavelength")
		}
	}
	// Amount moves ln A_iso alone.
	for j := range clean {
		clean[j] *= 1.01
	}
	c := Describe(x, clean, nil, nominal)
	near(t, "amount: ln A_iso", c.LnAIso-at0.LnAIso, math.Log(1.01), 1e-9)
	near(t, "amount: ln R_A", c.LnRA-at0.LnRA, 0, 1e-9)
	near(t, "amount: lambda", c.LambdaIso-at0.LambdaIso, 0, 1e-6)
}

// The stated standard deviations are the scatter under noise.
func TestCharacteristicsSD(t *testing.T) {
	x := grid(380, 680, 1)
	rng := rand.New(rand.NewPCG(4, 4))
	clean, _ := limits(x, 0, 0, nil)
	nominal := Describe(x, clean, nil, Nominal{}).Used
	const n = 600
	var z [6]float64
	for range n {
		noisy, sds := limits(x, 0, 0.002, rng)
		c := Describe(x, noisy, sds, nominal)
		ref := Describe(x, clean, nil, nominal)
		for i, v := range [][3]float64{{c.LambdaAcid, ref.LambdaAcid, c.LambdaAcidSD}, {c.LambdaBase, ref.LambdaBase, c.LambdaBaseSD},
			{c.LambdaIso, ref.LambdaIso, c.LambdaIsoSD}, {c.LnRA, ref.LnRA, c.LnRASD}, {c.LnRB, ref.LnRB, c.LnRBSD}, {c.LnAIso, ref.LnAIso, c.LnAIsoSD}} {
			d := (v[0] - v[1]) / v[2]
			z[i] += d * d / n
		}
	}
	for i, v := range z {
		near(t, fmt.Sprintf("characteristic %d, mean square of z", i), v, 1, 0.25)
	}
}

// Positions come out on any grid, to a hundredth of its step.
func TestBandPositions(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		centre := rapid.Float64Range(430, 620).Draw(t, "centre")
		width := rapid.Float64Range(45, 110).Draw(t, "width")
		step := rapid.SampledFrom([]float64{0.2, 0.5, 1, 2}).Draw(t, "step")
		x := grid(380, 680, step)
		y := make([]float64, len(x))
		for j := range x {
			y[j] = gauss([][3]float64{{0.8, centre, width}}, x[j])
		}
		b := Bands(x, y, nil)
		if len(b) != 1 || math.Abs(b[0].NM-centre) > 0.005 || math.Abs(b[0].Height-0.8) > 0.8*0.0015 {
			t.Fatalf("band at %g: %+v", centre, b)
		}
	})
	if b := Bands([]float64{1, 2}, []float64{1, 2}, nil); b != nil {
		t.Errorf("two points have bands: %v", b)
	}
	flat := make([]float64, 100)
	if b := Bands(grid(400, 499, 1), flat, nil); len(b) != 0 {
		t.Errorf("a flat line has bands: %v", b)
	}
}

func TestIsosbestic(t *testing.T) {
	s := newPaperSet()
	p := prepared(t, s, paperOptions())
	x := p.WavelengthNM
	w := len(x)
	clean, _ := limits(x, 0, 0, nil)
	all := Isosbestic(x, clean[:w], clean[w:], nil, nil, p.A)
	if len(all) == 0 {
		t.Fatal("no crossing found")
	}
	dye := paperDye()
	for _, c := range all {
		d := gauss(dye.base, c.NM) - gauss(dye.acid, c.NM)
		near(t, fmt.Sprintf("forms at %.2f nm", c.NM), d, 0, 3e-4)
		// noise 0.6 mAU, averaged over about 11 points, and the offset of each scan
		if !(c.Spread < 0.0006) || c.Range < c.Spread {
			t.Errorf("spread at %.2f nm is %g", c.NM, c.Spread)
		}
	}
	none := Isosbestic(x, clean[:w], clean[:w], nil, nil, nil)
	if len(none) != 0 {
		t.Errorf("one form crosses itself: %v", none)
	}
}

func TestDyeMatch(t *testing.T) {
	x := grid(380, 680, 2)
	clean, _ := limits(x, 0, 0, nil)
	other := make([]float64, 2*len(x))
	for j := range x {
		other[j] = gauss([][3]float64{{0.7, 425, 70}}, x[j])
		other[len(x)+j] = gauss([][3]float64{{0.9, 560, 60}}, x[j])
	}
	library := []LibraryEntry{{"other", x, other}, {"paper dye", x, clean}, {"elsewhere", grid(200, 300, 1), make([]float64, 101)}}
	rapid.Check(t, func(t *rapid.T) {
		share := rapid.Float64Range(0, 1).Draw(t, "share")
		amount := rapid.Float64Range(0.05, 3).Draw(t, "amount")
		fine := grid(385, 675, 1)
		y := make([]float64, len(fine))
		dye := paperDye()
		for j, v := range fine {
			y[j] = amount * ((1-share)*gauss(dye.acid, v) + share*gauss(dye.base, v))
		}
		m := DyeMatch(fine, y, library)
		if len(m) != 2 || m[0].Name != "paper dye" || m[0].Cosine < 0.9999 || m[1].Cosine > 0.98 {
			t.Fatalf("share %g: %+v", share, m)
		}
		if math.Abs(m[0].Share[1]-share) > 0.02 {
			t.Fatalf("share %g found as %v", share, m[0].Share)
		}
	})
}

// Certified-seawater dye spectra and digitised spectra of other people pass
// through the preparation; the bands lie where the dye's are.
func TestRealSpectra(t *testing.T) {
	rows := outside(t, "data", "real", "phenol_red_digitised", "spectra.csv")
	var rungs []Rung
	for c := 1; c < len(rows[0]); c++ {
		ph := number(t, strings.Trim(rows[0][c], `"pHA_ `))
		tr := Trace{Decimals: -1, Order: c - 1}
		for _, r := range rows[1:] {
			tr.WavelengthNM = append(tr.WavelengthNM, number(t, r[0]))
			tr.Absorbance = append(tr.Absorbance, number(t, r[c]))
		}
		rungs = append(rungs, Rung{Key: rows[0][c], PH: ph, Scans: []Trace{tr}})
	}
	p, err := Prepare(rungs, nil, Options{Ceiling: 3, RangeNM: [2]float64{360, 620}})
	if err != nil {
		t.Fatal(err)
	}
	m, w := len(p.Keys), len(p.WavelengthNM)
	b := Bands(p.WavelengthNM, p.A[(m-1)*w:], nil)
	if len(b) == 0 {
		t.Fatal("no band")
	}
	near(t, "phenol red base form", b[0].NM, 558, 4)
	// Yao & Byrne and others read phenol red at 433 and 558 nm.
	t.Logf("%d rungs, %d wavelengths, noise %.4f, lag %.2f, effective %.0f, left out %v", m, w, rms(p.NoiseWave), p.Lag1, p.Effective, p.LeftOut)
	for _, r := range p.Records {
		t.Log(r.Text)
	}
}

// realColumns reads a table whose first column is wavelength.
func realColumns(t *testing.T, rows [][]string) (x []float64, cols map[string][]float64) {
	t.Helper()
	cols = make(map[string][]float64)
	for _, r := range rows[1:] {
		x = append(x, number(t, r[0]))
		for c := 1; c < len(r); c++ {
			cols[rows[0][c]] = append(cols[rows[0][c]], number(t, r[c]))
		}
	}
	return x, cols
}

// Real bromophenol blue in certified seawater against archived forms of it and
// of m-cresol purple: the right dye each time, by a margin.
func TestRealDyeMatch(t *testing.T) {
	x, ends := realColumns(t, outside(t, "data", "real", "crm_dye_spectra", "end_members.csv"))
	sx, spectra := realColumns(t, outside(t, "data", "real", "crm_dye_spectra", "bpb_2019_spectra.csv"))
	library := []LibraryEntry{
		{"m-cresol purple", x, append(append([]float64(nil), ends["mcp_acid"]...), ends["mcp_base"]...)},
		{"bromophenol blue", x, append(append([]float64(nil), ends["bpb_acid"]...), ends["bpb_base"]...)},
	}
	worst, margin := 1.0, 1.0
	for name, y := range spectra {
		m := DyeMatch(sx, y, library)
		if len(m) != 2 || m[0].Name != "bromophenol blue" {
			t.Errorf("%s: %+v", name, m)
			continue
		}
		worst = math.Min(worst, m[0].Cosine)
		margin = math.Min(margin, m[0].Cosine-m[1].Cosine)
	}
	if len(spectra) != 61 || worst < 0.99 || margin < 0.01 {
		t.Errorf("%d spectra, worst %.4f, margin %.4f", len(spectra), worst, margin)
	}
	// Ratios of bromophenol blue are read at 590 and 436 nm, of m-cresol purple at 578 and 434 nm.
	for name, nm := range map[string]float64{"bpb_base": 590, "mcp_base": 578} {
		b := Bands(x, ends[name], nil)
		if len(b) == 0 {
			t.Fatalf("%s has no band", name)
		}
		near(t, name, b[0].NM, nm, 3.5)
		t.Logf("%s %.2f nm, worst cosine %.5f, margin %.4f", name, b[0].NM, worst, margin)
	}
}

// Fifteen scans of a laboratory photometer, baselines and reference water with
// four decimals: the noise is that of the digits or a little more, and the
// steep bands of water are not taken for steps of the source.
func TestRealBaseline(t *testing.T) {
	x, cols := realColumns(t, outside(t, "data", "real", "photometer_baseline", "series.csv"))
	for name, y := range cols {
		sd := thirdDifferenceSD(y[150:])
		if digits := 1e-4 / math.Sqrt(12); !(sd > digits && sd < 1e-3) {
			t.Errorf("%s from %g nm: noise %g", name, x[150], sd)
		}
		p := &preparation{x: x, blank: y, out: &Prepared{}, use: make([]bool, len(x))}
		p.sourceStep()
		for _, r := range p.out.Records {
			if math.Abs(r.Value) > 0.0015 {
				t.Errorf("%s: %s", name, r.Text)
			}
		}
	}
}
