package rehearse

import (
	"fmt"
	"math"
)

// A CauseKind names one physical thing that can go wrong with a measuring
// system. The size of a cause is given in the unit of its kind.
type CauseKind string

// The causes, with the unit of their size.
const (
	ElectrodeOffset  CauseKind = "electrode.offset"   // pH read too high since the calibration
	ElectrodeSlope   CauseKind = "electrode.slope"    // % change of slope since the calibration; negative: ageing
	ElectrodeAgeing  CauseKind = "electrode.ageing"   // % change of slope that every calibration removes
	ElectrodeLag     CauseKind = "electrode.lag"      // % of the previous step left when the reading is taken
	BufferLow        CauseKind = "buffer.low"         // pH true minus label, bottle near 4
	BufferMid        CauseKind = "buffer.mid"         // the same, bottle near 7
	BufferHigh       CauseKind = "buffer.high"        // the same, bottle near 10
	MeterCompensates CauseKind = "meter.compensation" // K the meter believes too warm
	RoomTemperature  CauseKind = "room.temperature"   // K, everything
	CellTemperature  CauseKind = "cell.temperature"   // K, cell only
	ScaleShift       CauseKind = "wavelength.shift"   // nm, bands too far to the red
	ScaleTilt        CauseKind = "wavelength.tilt"    // nm per 100 nm
	StrayLight       CauseKind = "stray"              // % of full light
	Bandwidth        CauseKind = "bandwidth"          // nm wider than before
	Gain             CauseKind = "gain"               // % of absorbance, instrument
	PathLength       CauseKind = "path"               // % of path, cell
	StockStrength    CauseKind = "stock"              // % of dye, stock solution
	ConstantImpurity CauseKind = "impurity.constant"  // % of a coloured impurity that does not change
	SecondDye        CauseKind = "impurity.acid"      // % of a second dye, 0.8 pKa units higher, bands 10 nm to the blue
	IonicStrength    CauseKind = "ionic"              // % of the recipe's
	BlankOffset      CauseKind = "blank"              // mAU
	LampDrift        CauseKind = "lamp.drift"         // mAU over a run
	LowScatter       CauseKind = "scatter"            // mAU of turbidity at the lowest rung
	AmountTrend      CauseKind = "amount.trend"       // % of dye from first to last rung
	CarbonDioxide    CauseKind = "co2"                // pH lost at one proton per molecule
	CarryOver        CauseKind = "carry-over"         // % of the previous solution left in the cell
	NoiseRise        CauseKind = "noise"              // factor on the noise minus one
)

// A KindUnit is a kind of cause with the unit of its size.
type KindUnit struct {
	Kind CauseKind
	Unit string
}

// CauseKinds lists every kind with its unit, in the order above.
func CauseKinds() []KindUnit {
	return []KindUnit{
		{ElectrodeOffset, "pH"}, {ElectrodeSlope, "%"}, {ElectrodeAgeing, "%"}, {ElectrodeLag, "%"},
		{BufferLow, "pH"}, {BufferMid, "pH"}, {BufferHigh, "pH"}, {MeterCompensates, "K"},
		{RoomTemperature, "K"}, {CellTemperature, "K"}, {ScaleShift, "nm"}, {ScaleTilt, "nm/100 nm"},
		{StrayLight, "%"}, {Bandwidth, "nm"}, {Gain, "%"}, {PathLength, "%"}, {StockStrength, "%"},
		{ConstantImpurity, "%"}, {SecondDye, "%"}, {IonicStrength, "%"}, {BlankOffset, "mAU"},
		{LampDrift, "mAU"}, {LowScatter, "mAU"}, {AmountTrend, "%"}, {CarbonDioxide, "pH"},
		{CarryOver, "%"}, {NoiseRise, "1"},
	}
}

// A Shape is how a cause grows.
type Shape string

// Shapes in time.
const (
	Step     Shape = "step"     // the whole size from the onset on
	Ramp     Shape = "ramp"     // Size per night since the onset
	Sawtooth Shape = "sawtooth" // Size per night since the onset or the last calibration, whichever is later
)

// A Cause is one disturbance: what, of which thing, when, how much. Buffer
// causes act through calibrations made while they last; offset and slope of an
// electrode are errors until the next calibration, which takes them out.
type Cause struct {
	Kind     CauseKind
	Resource string  // the thing that carries it; "" reaches every set
	Onset    int     // first night
	Until    int     // last night; 0: for ever
	Size     float64 // in the unit of Kind; per night for Ramp and Sawtooth
	Shape    Shape   // "" is Step
}

// at is the size of the cause in a night whose last calibration was made in
// the evening of night calibrated.
func (c Cause) at(night, calibrated int) float64 {
	if night < c.Onset || (c.Until > 0 && night > c.Until) {
		return 0
	}
	switch c.Shape {
	case Ramp:
		return c.Size * float64(night-c.Onset+1)
	case Sawtooth:
		return c.Size * float64(night-max(c.Onset, calibrated))
	}
	return c.Size
}

// act lets a cause of a given size change the conditions of a set. Buffer
// causes and ageing act at the calibration and change nothing here.
func (k CauseKind) act(c *Conditions, size float64) error {
	switch k {
	case ElectrodeOffset:
		c.Offset += size
	case ElectrodeSlope:
		c.Eps += size / 100
	case ElectrodeLag:
		c.Lag += size / 100
	case ElectrodeAgeing, BufferLow, BufferMid, BufferHigh:
	case MeterCompensates:
		c.CompensateK += size
	case RoomTemperature:
		c.CellC += size
		c.VesselC += size
	case CellTemperature:
		c.CellC += size
	case IonicStrength:
		c.Ionic *= 1 + size/100
	case CarbonDioxide:
		c.CO2 += size
	default:
		return k.actOptical(c, size)
	}
	return nil
}

// actOptical are the causes that touch the spectra.
func (k CauseKind) actOptical(c *Conditions, size float64) error {
	o := &c.Optics
	switch k {
	case ScaleShift:
		o.ShiftNM += size
	case ScaleTilt:
		o.TiltNM += size
	case StrayLight:
		o.Stray += size / 100
	case Bandwidth:
		// Variances of slits add: the spectra are known for 2 nm.
		o.WidenNM = math.Sqrt((2+size)*(2+size) - 4)
	case Gain:
		o.Gain = or1(o.Gain) * (1 + size/100)
	case PathLength:
		o.Path = or1(o.Path) * (1 + size/100)
	case StockStrength:
		c.Amount = or1(c.Amount) * (1 + size/100)
	case ConstantImpurity:
		c.Impurity += size / 100
	case SecondDye:
		c.SecondDye, c.SecondDPKa, c.SecondNM = c.SecondDye+size/100, 0.8, -10
	case BlankOffset:
		c.BaselineA += size / 1000
	case LampDrift:
		c.LampDriftA += size / 1000
	case LowScatter:
		c.Scatter += size / 1000
	case AmountTrend:
		c.AmountTrend += size / 100
	case CarryOver:
		c.CarryOver += size / 100
	case NoiseRise:
		o.Noise = or1(o.Noise) * (1 + size)
	default:
		return fmt.Errorf("rehearse: unknown cause %q; CauseKinds lists the known ones", k)
	}
	return nil
}
