package verdict

// Defaults are the limits used where the settings give none. Sources: the
// simulation study and the trade habits the project's needs rest on; limits
// marked ours are nobody's rule.
var Defaults = Limits{
	// u(pKa)/sigma(pH) of a ladder from -2 to +2 is 0.64 with 5 rungs, 0.52 with
	// 7, 0.39 with 12; below 5 neither scatter nor an outlier can be judged.
	// Counted after subtracting the rungs that further steps ask for.
	"rungs.usable": {Note: AtLeast(7), Hold: AtLeast(5)},
	// Smaller of the two largest end-form shares. One end at 0.76 doubles u.
	"forms.reached": {Note: AtLeast(0.90), Hold: AtLeast(0.75)},
	"rungs.near":    {Note: AtLeast(3), Hold: AtLeast(2)},
	"ladder.gap":    {Note: AtMost(0.5), Hold: AtMost(0.8)},    // pH, ours
	"ph.latent":     {Note: AtMost(0.015), Hold: AtMost(0.03)}, // pH; careful work reaches 0.005-0.01 (common practice, no source)
	// Probability of residuals this large under the declared scatter.
	"ph.improbable":  {Note: AtLeast(0.01), Hold: AtLeast(0.0001)},
	"rung.out":       {Note: AtMost(0), Hold: AtMost(0.125)}, // share of rungs left out: one in eight
	"rung.influence": {Note: AtMost(0.5), Hold: AtMost(1)},   // in units of U
	"slope":          {Note: Within(0.025), Hold: Within(0.05)},
	// Ratio of the next singular value to the edge of noise (Marchenko & Pastur 1967).
	"third.component":    {Note: AtMost(1.15), Hold: AtMost(2)},
	"spectra.negative":   {Note: AtMost(0), Hold: AtMost(0.02)},      // depth below -3 sd, share of the top
	"absorbance.ceiling": {Note: AtMost(0), Hold: AtMost(0.30)},      // share of the colour change lost
	"colour.change":      {Note: AtLeast(0.10), Hold: AtLeast(0.03)}, // absorbance
	"clear.window":       {Note: AtMost(5), Hold: AtMost(20)},        // mAU
	"amount.scatter":     {Note: AtMost(1), Hold: AtMost(5)},         // %
	"amount.trend":       {Note: Within(2), Hold: Within(5)},         // % over the ladder
	"wavelength.spread":  {Note: AtMost(0.15), Hold: AtMost(0.3)},    // nm
	"temperature":        {Note: Within(0.3), Hold: Within(1)},       // K from nominal
	"calibration.age":    {Note: AtMost(24), Hold: AtMost(72)},       // h, common practice, no source
	// Slope 95-102 %, potential +-30 mV: common practice, no source; the wide
	// bands lie inside the acceptance windows of pharmacopoeias (90-105 %).
	"calibration.slope":     {Note: Band{95, 102}, Hold: Band{92, 103}},
	"calibration.potential": {Note: Within(30), Hold: Within(45)},     // mV at pH 7
	"calibration.residual":  {Note: Within(0.02), Hold: Within(0.04)}, // pH, ours
	"ph.range":              {Note: AtMost(0.5), Hold: AtMost(1.5)},   // pH beyond the outermost buffer
	"ph.delay":              {Note: AtMost(15), Hold: AtMost(60)},     // min, rungs above pH 8
	"library":               {Note: Within(0.010), Hold: Within(0.02)},
	"uncertainty.target":    {Note: AtMost(1), Hold: AtMost(2)},       // U over target
	"ladder.nominal":        {Note: AtMost(0.25), Hold: AtMost(0.5)},  // share of rungs more than 0.1 off nominal
	"ph.name":               {Note: AtMost(0.02), Hold: AtMost(0.05)}, // pH, name against table
	"limit.distance":        {Note: AtLeast(2), Hold: AtLeast(1.5)},   // pH, three-solution sets
}
