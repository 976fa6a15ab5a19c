// Package drift says which physical cause best explains the signals of the
// reference charts, since when, how large, and how much harm it does to each
// result. A hypothesis is a cause on a resource with an onset; its fingerprint
// is computed from the design of each reference, its scope from which cells
// used the resource on which night, and its weight of evidence is a Gaussian
// Bayes factor against "no change".
//
// The package is pure: it knows no file, database, queue, logger or clock.
package drift

import "slices"

// A Characteristic is a number charted for a reference, an electrode, an
// instrument or a room. Norm-like ones are charted as squares, because
// independent disturbances add in their squares.
type Characteristic string

// The characteristics and their units.
const (
	PKa          Characteristic = "pka"                  // pH; free spectra, own-weighted
	Slope        Characteristic = "slope"                // 1; apparent slope of the titration
	Library      Characteristic = "library_less_free"    // pH; pKa with archived spectra less the free one
	LambdaA      Characteristic = "lambda_acid"          // nm; band of the acid form
	LambdaB      Characteristic = "lambda_base"          // nm; band of the base form
	LambdaIso    Characteristic = "lambda_isosbestic"    // nm
	RatioA       Characteristic = "ln_ratio_acid"        // ln of acid band over absorbance at the nominal isosbestic point
	RatioB       Characteristic = "ln_ratio_base"        // ln of base band over the same
	AmountIso    Characteristic = "ln_amount"            // ln of the mean absorbance at the nominal isosbestic point
	ClearMean    Characteristic = "clear_mean"           // absorbance; mean of the clear window
	ClearTrend   Characteristic = "clear_trend"          // absorbance over the run
	AmountVar    Characteristic = "amount_var"           // squared sd of the amount factors
	AmountTrend  Characteristic = "amount_trend"         // relative change of the amount over the run
	Third        Characteristic = "third_squared"        // absorbance squared; third singular value over sqrt(m w), squared
	LatentVar    Characteristic = "latent_var"           // pH squared; squared sd of the latent pH errors
	SlopeAcid    Characteristic = "electrode_slope_acid" // percent of the theoretical slope, low to mid buffer
	SlopeBase    Characteristic = "electrode_slope_base" // percent, mid to high buffer
	PotentialMid Characteristic = "electrode_mv_mid"     // mV in the mid buffer
	ThirdBuffer  Characteristic = "third_buffer"         // pH; mid buffer read on the chord of its neighbours, less its value
	BlankVar     Characteristic = "blank_var"            // absorbance squared; squared sd of the blank
	Temperature  Characteristic = "temperature"          // degrees C
)

// NormLike reports whether c is a square of a norm-like quantity.
func (c Characteristic) NormLike() bool {
	return c == AmountVar || c == Third || c == LatentVar || c == BlankVar
}

// Words names c for people.
func (c Characteristic) Words() string {
	if w, ok := characteristicWords()[c]; ok {
		return w
	}
	return string(c)
}

func characteristicWords() map[Characteristic]string {
	return map[Characteristic]string{
		PKa: "pKa", Slope: "slope of the titration", Library: "pKa with archived spectra less free pKa",
		LambdaA: "acid band position", LambdaB: "base band position", LambdaIso: "isosbestic wavelength",
		RatioA: "acid band ratio", RatioB: "base band ratio", AmountIso: "absorbance at the isosbestic point",
		ClearMean: "clear window", ClearTrend: "trend of the clear window", AmountVar: "scatter of the amount of dye",
		AmountTrend: "trend of the amount of dye", Third: "third component", LatentVar: "scatter of the pH readings",
		SlopeAcid: "electrode slope, acid side", SlopeBase: "electrode slope, alkaline side",
		PotentialMid: "electrode potential in the mid buffer", ThirdBuffer: "mid buffer against its neighbours",
		BlankVar: "noise of the blank", Temperature: "recorded temperature",
	}
}

// A Cause is the key of a physical cause.
type Cause string

// The causes. Buffer causes mean that the bottle's true value differs from its label.
const (
	ElectrodeOffset Cause = "electrode.offset"
	ElectrodeSlope  Cause = "electrode.slope"
	ElectrodeAged   Cause = "electrode.aged"   // offset and slope since calibration, two free sizes
	ElectrodeAgeing Cause = "electrode.ageing" // calibrated out: slopes and potential of the calibration only
	ElectrodeLag    Cause = "electrode.lag"
	BufferLow       Cause = "buffer.low"
	BufferMid       Cause = "buffer.mid"
	BufferHigh      Cause = "buffer.high"
	Compensation    Cause = "meter.compensation"
	RoomTemperature Cause = "room.temperature"
	CellTemperature Cause = "cell.temperature"
	WavelengthShift Cause = "wavelength.shift"
	WavelengthTilt  Cause = "wavelength.tilt"
	Stray           Cause = "stray"
	Bandwidth       Cause = "bandwidth"
	Gain            Cause = "gain"
	Path            Cause = "path"
	Stock           Cause = "stock"
	ImpurityConst   Cause = "impurity.constant"
	ImpurityAcid    Cause = "impurity.acid" // a second dye with a pKa of its own
	Ionic           Cause = "ionic"
	Blank           Cause = "blank"
	LampDrift       Cause = "lamp.drift"
	Scatter         Cause = "scatter"
	AmountRise      Cause = "amount.trend"
	CO2             Cause = "co2"
	CarryOver       Cause = "carry-over"
	Noise           Cause = "noise"
	ReferenceLot    Cause = "reference.lot"
	Unknown         Cause = "none of the known causes"
)

// A Kind says what sort of thing a resource is.
type Kind string

// The kinds of resource.
const (
	KindElectrode  Kind = "electrode"
	KindBuffer     Kind = "buffer" // a lot; its place is the Role of a Use
	KindMeter      Kind = "meter"
	KindRoom       Kind = "room"
	KindInstrument Kind = "instrument"
	KindCuvette    Kind = "cell"
	KindLamp       Kind = "lamp"
	KindStock      Kind = "stock"  // lot of a reference dye
	KindSeries     Kind = "series" // recipe of the ladder's buffers
	KindLaboratory Kind = "laboratory"
)

// A Trait is what is known of a cause before any measurement.
type Trait struct {
	Cause Cause
	Title string // for people
	// Step is the size of one unit in Unit, with its sign: sizes are Step times
	// the dimensionless theta, whose prior is N(0, tau^2).
	Step     float64
	Unit     string
	Kinds    []Kind // resource it acts through; the first kind that is declared is used
	Role     string // of a buffer: "low", "mid", "high"
	OneSided bool   // only positive theta is possible
	Columns  int    // free sizes, 1 or 2
	Class    string // causes that one kind of reference cannot tell apart
	Events   []EventKind
	Reset    EventKind // what puts the reading right without removing the cause; "" none
	Shapes   []Shape
	Optical  bool // acts on absorbances, not on pH or the true constant
	Harmless bool // no effect on results
}

// Traits lists every cause. The order is the order of presentation among equals.
func Traits() []Trait {
	all := []Shape{ShapeStep, ShapeRamp, ShapeSawtooth, ShapeUntil}
	level := []Shape{ShapeStep, ShapeRamp, ShapeUntil}
	step := []Shape{ShapeStep, ShapeUntil}
	ph := []EventKind{EventElectrode, EventCalibration}
	lamp := []EventKind{EventLamp, EventService}
	wave := []EventKind{EventLamp, EventWavelength, EventService}
	stock := []EventKind{EventStock}
	el, ins := []Kind{KindElectrode, KindInstrument}, []Kind{KindInstrument}
	dye := []Kind{KindStock}
	buf := []Kind{KindBuffer}
	bufEv := []EventKind{EventBuffer, EventCalibration}
	return []Trait{
		{Cause: ElectrodeAged, Title: "electrode drifted since its calibration (offset and slope)", Step: 1, Unit: "units", Kinds: el, Columns: 2, Class: "electrode since calibration", Events: ph, Reset: EventCalibration, Shapes: all},
		{Cause: ElectrodeOffset, Title: "electrode offset since calibration", Step: 0.02, Unit: "pH", Kinds: el, Columns: 1, Class: "offset, lag or ionic strength", Events: ph, Reset: EventCalibration, Shapes: all},
		{Cause: ElectrodeSlope, Title: "electrode slope since calibration", Step: -1, Unit: "%", Kinds: el, Columns: 1, Class: "slope or compensation", Events: ph, Reset: EventCalibration, Shapes: all},
		{Cause: ElectrodeAgeing, Title: "electrode ages, and each calibration removes it", Step: 1, Unit: "units", Kinds: el, Columns: 2, Class: "ageing calibrated out", Events: []EventKind{EventElectrode}, Shapes: level, Harmless: true},
		{Cause: ElectrodeLag, Title: "readings taken before the electrode settled", Step: 3, Unit: "% of a step", Kinds: el, OneSided: true, Columns: 1, Class: "offset, lag or ionic strength", Events: []EventKind{EventElectrode, EventService}, Shapes: level},
		{Cause: BufferLow, Title: "low buffer off its label", Step: 0.03, Unit: "pH", Kinds: buf, Role: "low", Columns: 1, Class: "low buffer", Events: bufEv, Shapes: step},
		{Cause: BufferMid, Title: "mid buffer off its label", Step: 0.03, Unit: "pH", Kinds: buf, Role: "mid", Columns: 1, Class: "mid buffer", Events: bufEv, Shapes: step},
		{Cause: BufferHigh, Title: "high buffer off its label", Step: -0.05, Unit: "pH", Kinds: buf, Role: "high", Columns: 1, Class: "high buffer", Events: bufEv, Shapes: step},
		{Cause: Compensation, Title: "temperature compensation of the meter off", Step: 2, Unit: "K", Kinds: []Kind{KindMeter, KindInstrument}, Columns: 1, Class: "slope or compensation", Events: []EventKind{EventService}, Shapes: level},
		{Cause: RoomTemperature, Title: "everything warmer or colder", Step: 1, Unit: "K", Kinds: []Kind{KindRoom, KindLaboratory}, Columns: 1, Class: "room temperature", Shapes: level},
		{Cause: CellTemperature, Title: "cell warmer or colder than the pH vessel", Step: 1, Unit: "K", Kinds: ins, Columns: 1, Class: "cell temperature", Events: []EventKind{EventService}, Shapes: level},
		{Cause: WavelengthShift, Title: "wavelength scale displaced", Step: 0.5, Unit: "nm", Kinds: ins, Columns: 1, Class: "wavelength displacement", Events: wave, Shapes: level, Optical: true},
		{Cause: WavelengthTilt, Title: "wavelength scale stretched", Step: 0.2, Unit: "nm per 100 nm", Kinds: ins, Columns: 1, Class: "wavelength stretch", Events: wave, Shapes: level, Optical: true},
		{Cause: Stray, Title: "stray light", Step: 0.2, Unit: "%", Kinds: ins, OneSided: true, Columns: 1, Class: "stray light", Events: lamp, Shapes: level, Optical: true},
		{Cause: Bandwidth, Title: "spectral bandwidth wider", Step: 2, Unit: "nm", Kinds: ins, OneSided: true, Columns: 1, Class: "bandwidth", Events: []EventKind{EventService}, Shapes: step, Optical: true},
		{Cause: Gain, Title: "absorbance scale of the instrument", Step: 1, Unit: "%", Kinds: ins, Columns: 1, Class: "gain, path or stock", Events: lamp, Shapes: level, Optical: true},
		{Cause: Path, Title: "path length of the cell", Step: 1, Unit: "%", Kinds: []Kind{KindCuvette, KindInstrument}, Columns: 1, Class: "gain, path or stock", Events: []EventKind{EventCuvette}, Shapes: step, Optical: true},
		{Cause: Stock, Title: "strength of the dye stock", Step: 1, Unit: "%", Kinds: dye, Columns: 1, Class: "gain, path or stock", Events: stock, Shapes: level, Optical: true},
		{Cause: ImpurityConst, Title: "extra absorption that does not change with pH", Step: 2, Unit: "%", Kinds: dye, OneSided: true, Columns: 1, Class: "constant impurity", Events: stock, Shapes: level, Optical: true},
		{Cause: ImpurityAcid, Title: "second dye in the stock", Step: 3, Unit: "%", Kinds: dye, OneSided: true, Columns: 1, Class: "second dye", Events: stock, Shapes: level},
		{Cause: ReferenceLot, Title: "new lot of the reference: amount and ratio only", Step: 1, Unit: "%", Kinds: dye, Columns: 2, Class: "reference lot", Events: stock, Shapes: step, Optical: true, Harmless: true},
		{Cause: Ionic, Title: "ionic strength of the ladder", Step: 10, Unit: "%", Kinds: []Kind{KindSeries, KindLaboratory}, Columns: 1, Class: "offset, lag or ionic strength", Events: []EventKind{EventSeries}, Shapes: step},
		{Cause: Blank, Title: "blank or baseline displaced", Step: 0.005, Unit: "absorbance", Kinds: []Kind{KindCuvette, KindInstrument}, Columns: 1, Class: "blank", Events: []EventKind{EventCuvette, EventLamp}, Shapes: level, Optical: true, Harmless: true},
		{Cause: LampDrift, Title: "lamp drifts within a run", Step: 0.005, Unit: "absorbance per run", Kinds: []Kind{KindLamp, KindInstrument}, Columns: 1, Class: "lamp drift", Events: lamp, Shapes: level, Optical: true, Harmless: true},
		{Cause: Scatter, Title: "turbidity at the acid end", Step: 0.010, Unit: "absorbance", Kinds: dye, OneSided: true, Columns: 1, Class: "turbidity", Events: stock, Shapes: step, Optical: true},
		{Cause: AmountRise, Title: "amount of dye changes along the run", Step: 2, Unit: "% per run", Kinds: ins, Columns: 1, Class: "amount trend", Events: []EventKind{EventService}, Shapes: level},
		{Cause: CO2, Title: "carbon dioxide taken up before reading", Step: 0.02, Unit: "pH", Kinds: ins, OneSided: true, Columns: 1, Class: "carbon dioxide", Events: []EventKind{EventService}, Shapes: level},
		{Cause: CarryOver, Title: "carry-over in the cell", Step: 3, Unit: "%", Kinds: []Kind{KindCuvette, KindInstrument}, OneSided: true, Columns: 1, Class: "carry-over", Events: []EventKind{EventCuvette, EventService}, Shapes: level},
		{Cause: Noise, Title: "noise of the instrument", Step: 3, Unit: "times its variance", Kinds: []Kind{KindLamp, KindInstrument}, OneSided: true, Columns: 1, Class: "noise", Events: lamp, Shapes: level, Optical: true, Harmless: true},
	}
}

// TraitOf finds the trait of a cause.
func TraitOf(c Cause) (Trait, bool) {
	all := Traits()
	i := slices.IndexFunc(all, func(t Trait) bool { return t.Cause == c })
	if i < 0 {
		return Trait{}, false
	}
	return all[i], true
}
