package rehearse

import "math"

// Noise is how a laboratory scatters when nothing is wrong. All are standard
// deviations.
type Noise struct {
	Absorbance  float64 // absorbance, per point
	ReadPH      float64 // pH, per rung
	SetPH       float64 // pH, common to a set
	Recipe      float64 // pH, how far a solution misses its nominal value
	AmountRung  float64 // relative, dye per rung
	AmountSet   float64 // relative, dye per set
	Clear       float64 // absorbance, offset common to the scans of a set
	Scan        float64 // absorbance, offset of one scan
	Scale       float64 // nm, wavelength scale from set to set
	Temperature float64 // K
	Ionic       float64 // relative, ionic strength of the recipe
	Slope       float64 // relative, electrode slope from one calibration to the next, each branch
	Potential   float64 // mV, electrode potential from one calibration to the next
	CalMV       float64 // mV, reading of one bottle
}

// Quiet is the scatter of the invented laboratory (needs of the story:
// 0.6 mAU, 0.006 and 0.005 in pH, 0.3 % and 0.8 % of dye, clear window
// 0.8 mAU, scale 0.04 nm, 0.1 K, 1 % of ionic strength, 0.25 % of slope,
// 0.8 mV). Of the scatter of slopes the greater part is the electrode's own
// and is calibrated out; the readings of the bottles add the rest.
func Quiet() Noise {
	return Noise{
		Absorbance: 6e-4, ReadPH: 0.006, SetPH: 0.005, Recipe: 0.012,
		AmountRung: 0.003, AmountSet: 0.008, Clear: 8e-4, Scan: 2e-4, Scale: 0.04,
		Temperature: 0.1, Ionic: 0.01, Slope: 0.0024, Potential: 0.8, CalMV: 0.08,
	}
}

// Silent has no scatter at all.
func Silent() Noise { return Noise{} }

// Conditions are everything that shapes one set beyond its dye and ladder.
// The zero value, with Ionic and temperatures filled in by fresh, is an
// undisturbed set without scatter.
type Conditions struct {
	Optics Optics

	// The solutions.
	CellC        float64 // temperature in the cell
	VesselC      float64 // temperature where pH is read and the electrode stands
	Ionic        float64 // true ionic strength, mol/L
	DyeMolar     float64 // mol/L
	Amount       float64 // factor on the dye of the whole set; 0: 1
	AmountTrend  float64 // relative change of dye from first to last rung
	AmountStep   float64 // relative change of dye from the middle of the ladder on
	PKaShift     float64 // of this lot
	BandShift    float64 // nm, of this lot
	Impurity     float64 // share of a constant coloured impurity, of the acid band
	SecondDye    float64 // share of a second dye in the colour change
	SecondDPKa   float64 // its pKa minus the dye's
	SecondNM     float64 // displacement of its bands
	CarryOver    float64 // share of the previous solution left in the cell
	Scatter      float64 // absorbance at 500 nm of turbidity at the lowest rung, fading to zero within two pH units
	DyeStray     float64 // share of the dye's first rung present in the blank
	BlankSmooth  float64 // absorbance at the blue end by which the blank is wrong, smooth
	BaselineA    float64 // flat offset of all scans against the blank
	CellA        float64 // absorbance of cell and solvent at 500 nm, in scans and blank alike
	LampDriftA   float64 // change of baseline from first to last scan
	FadePerMin   float64 // relative loss of dye per minute above pH 11
	Down         bool    // the ladder is measured from the highest rung down
	AmountRungSD float64
	ScanSD       float64

	// The pH.
	SetPH        float64 // error common to all readings of the set
	ReadSD       float64 // scatter of one reading
	RecipeSD     float64
	Offset       float64 // electrode offset since calibration, pH
	Eps          float64 // relative change of slope since calibration
	Lag          float64 // share of the previous step left when the reading is taken
	CO2          float64 // pH lost above 8 between scan and reading, at one proton per molecule
	CompensateK  float64 // the meter believes the solution is this much warmer
	TemperatureK float64 // error of the recorded cell temperature
	FixedTemp    bool    // the temperature probe is unplugged: the table says 25.0 throughout
}

// fresh is an undisturbed set at 25 C.
func fresh(ionic float64) Conditions {
	return Conditions{CellC: 25, VesselC: 25, Ionic: ionic, DyeMolar: 21e-6}
}

// scatter draws the ordinary variation of one set.
func (c *Conditions) scatter(n Noise, normal func() float64) {
	c.Optics.Noise = n.Absorbance * or1(c.Optics.Noise)
	c.Optics.ShiftNM += n.Scale * normal()
	dT := n.Temperature * normal()
	c.CellC += dT
	c.VesselC += dT
	c.Ionic *= 1 + n.Ionic*normal()
	c.Amount = or1(c.Amount) * math.Exp(n.AmountSet*normal())
	c.BaselineA += n.Clear * normal()
	c.SetPH += n.SetPH * normal()
	c.ReadSD, c.RecipeSD = n.ReadPH, n.Recipe
	c.AmountRungSD, c.ScanSD = n.AmountRung, n.Scan
}
