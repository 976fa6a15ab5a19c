package brief

import (
	"fmt"
	"math"
	"time"
)

// A night of an invented laboratory with something of everything in it.
func fullNight() Data {
	zone := time.FixedZone("", 2*3600)
	d := Data{
		Laboratory: "Test bench of Ostermoor", Night: "2026-09-14", Made: time.Date(2026, 9, 15, 6, 30, 0, 0, zone), Revision: 2,
		Changes: []string{"U1/2026-09-14/PR-1018.n001: waiting became stands 7.802"}, Program: "pkvigil 1.0", Settings: "7",
		CompleteUpTo: time.Date(2026, 9, 15, 6, 28, 0, 0, zone),
		NotSeen: []Notice{{"Folder /exports/u2 is not visible since 2026-09-15 01:12: the marker file is missing", "Mount the share again; nothing is lost, the files are taken in when it is back."},
			{"Planned set U1/2026-09-14/TB-2219 on U1: nothing has arrived", "Look at the instrument."}},
		InControl: Control{Known: true, Sentence: "No. U1: pH readings wrong by +0.04 at pH 4.7", References: []Reference{
			{Key: "U1/2026-09-14/RI-A.open", Title: "RI-A", Instrument: "U1", Slot: "open", Verdict: "stands", PKa: 4.699, U: 0.013, Assigned: 4.66, Centre: 4.658, Sentence: "Above its centre by 0.041."},
			{Key: "U1/2026-09-14/RI-C.close", Title: "RI-C", Instrument: "U1", Slot: "close", Verdict: "held", PKa: 8.267, U: 0.014, Assigned: 8.26, Centre: math.NaN(), Sentence: "A bubble in rung 04."},
			{Key: "U2/2026-09-14/RI-A.open", Title: "RI-A", Instrument: "U2", Slot: "open", Verdict: "no number", PKa: math.NaN(), U: math.NaN(), Assigned: 4.66, Centre: math.NaN()}}},
		Counts:    []Count{{Instrument: "U1", Planned: 14, Seen: 13, References: 5, Stands: 8, Noted: 2, Held: 2, NoNumber: 1, Waiting: 1}},
		Waiting:   []Waiting{{Key: "U1/2026-09-14/PR-1050", Missing: []string{"the scan of rung 08 (it has a pH)", "the blank"}, Since: time.Date(2026, 9, 15, 2, 10, 0, 0, zone)}},
		Signals:   []string{"RI-B on U2 amount: beyond the action limit"},
		Forecasts: []string{"Electrode E-31 leaves its limit of 0.05 pH about 2026-09-20 (18 to 24)"},
		Files: []File{{"u1/CR 1048_s07 (2).jdx", "parked", "no rule fits the name", "Nearest is scan; adopt it to U1/2026-09-14/CR-1048."},
			{"u1/PR-1049_s03.csv", "refused", "line 312: found 2 columns, expected 3", "Export the file again."}},
		Messages: []Message{{time.Date(2026, 9, 15, 0, 12, 0, 0, zone), "U1: pH readings wrong by +0.04 at pH 4.7, growing since 2026-09-08", "delivered"}},
	}
	c := driftingChart()
	d.Charts = []Chart{c, quietChart()}
	d.Cases = []Case{{ID: 3, Sentence: "Electrode E-31 on U1 reads too high by 0.04 at pH 4.7, growing", State: "open", Resource: "electrode E-31", Since: "between 2026-09-06 and 2026-09-09 (90 %)",
		Finding: "named", NextCheck: "Measure buffer 4.005 from a fresh bottle", Opened: time.Date(2026, 9, 10, 22, 0, 0, 0, zone), Answer: `pkvigil sign acknowledge 3 --as NAME --because "..."`,
		Alike: []string{"offset", "lag"}, Charts: []Chart{c}, Candidates: []Candidate{
			{Title: "electrode ageing between calibrations", Resource: "E-31", Size: "slope −0.9 ± 0.1 %, offset +0.018 ± 0.004", Probability: 0.93, For: "pKa of RI-A and RI-B rise together; RI-C hardly moves", Against: "no change of the calibration slope yet"},
			{Title: "buffer 4.005 off", Resource: "CB-201", Probability: 0.05, For: "RI-A moved most", Against: "U2 uses the same bottle and is quiet"}, {Title: "none of these", Probability: 0.004}},
		Results: []Touched{{Set: "U1/2026-09-14/BCG-1020", ResultID: 88, PKa: 4.694, Impact: 0.038, Bound: 0.045, Resolution: "in question", Verdict: "in-question", Released: true}}},
		{ID: 2, Sentence: "Wavelength scale of U1 off by 0.6 nm", State: "closed"}}
	for i := range 3 {
		s := oneSet(fmt.Sprintf("U1/2026-09-14/TB-%d", 1025+i), 12, 6.1+float64(i))
		s.Verdict, s.Headline, s.Actions = "held", "The latent pH of rung r06 is off by +0.11", []string{"Measure the pH of r06 again", "Rescan r06 if its pH is right"}
		s.Accused, s.Rungs[5].Residual = "r06", 0.11
		s.Rungs[8].LeftOut, s.Rungs[8].Residual = "baseline 92 mAU, bubble likely", math.NaN()
		s.Notes = []string{s.Headline, "Solutions reach only 0.86 of the base form."}
		d.Look = append(d.Look, s)
	}
	question := oneSet("U1/2026-09-14/BCG-1020", 12, 4.694)
	question.Verdict, question.ResultID = "in-question", 88
	d.Look = append(d.Look, question, Set{Key: "U2/2026-09-14/XX-1", Compound: "XX", Instrument: "U2", Verdict: "no number", Headline: "No spectrum could be used", TemperatureC: math.NaN(), Ionic: math.NaN(), IsosbesticNM: math.NaN()})
	for i := range 8 {
		s := oneSet(fmt.Sprintf("U1/2026-09-14/CR-%d", 1040+i), 12, 8.2)
		if i == 2 {
			s.Verdict, s.Notes = "stands-noted", []string{"02 left out: baseline 492 mAU, bubble likely."}
		}
		d.Go = append(d.Go, s)
	}
	two := oneSet("U2/2026-09-14/PHN-7", 16, 7.5)
	two.Constants = append(two.Constants, Constant{Step: 2, PKa: 9.412, U: 0.11, K: 2.13, Thermo: 9.61, UThermo: 0.12, Library: math.NaN(), Anchored: 9.405})
	d.Go = append(d.Go, two)
	return d
}

// oneSet is a set of invented bands over a ladder about a pKa.
func oneSet(key string, rungs int, pka float64) Set {
	s := Set{Key: key, Compound: "CR", Title: "cresol red", Lot: "L-12", Instrument: "U1", ResultID: 12, Verdict: "stands", Headline: "All checks passed.", Constant: "mixed", TemperatureC: 25.04, Ionic: 0.1, IsosbesticNM: 481.3, SigmaPH: 0.008,
		Constants: []Constant{{Step: 1, PKa: pka, U: 0.0131, K: 2, UOwn: 0.003, URun: 0.004, ULab: 0.0042, Thermo: pka + 0.21, UThermo: 0.016, Library: pka - 0.002, Anchored: math.NaN()}},
		Budget: []Component{{"value of buffer CB-201 (pH 6.865)", 0.0041, "lab"}, {"residual liquid-junction potential", 0.0035, "lab"}, {"temperature of the cell", 0.0014, "run"}, {"electrode slope", 0.0022, "run"},
			{"readings of this set", 0.0021, "own"}, {"noise of absorbance", 0.0002, "own"}}}
	band := func(x, at, w, h float64) float64 { return h * math.Exp(-(x-at)*(x-at)/(2*w*w)) }
	for x := 380.0; x <= 760; x += 4 {
		s.WavelengthNM = append(s.WavelengthNM, x)
		s.Acid = append(s.Acid, band(x, 434, 34, 0.42)+band(x, 385, 20, 0.1))
		s.Base = append(s.Base, band(x, 573, 27, 0.86)+band(x, 400, 25, 0.08))
		s.AcidSD = append(s.AcidSD, 0.004+0.01*band(x, 560, 60, 1))
		s.BaseSD = append(s.BaseSD, 0.006)
	}
	for j := 20; j < len(s.Acid); j++ { // the forms cross right of the acid band
		if s.Acid[j] < s.Base[j] {
			s.IsosbesticNM = s.WavelengthNM[j-1] + 4*(s.Acid[j-1]-s.Base[j-1])/(s.Acid[j-1]-s.Base[j-1]+s.Base[j]-s.Acid[j])
			break
		}
	}
	for i := range rungs {
		ph := pka - 2 + 4*float64(i)/float64(max(1, rungs-1))
		a := 1 / (1 + math.Pow(10, pka-ph))
		var y []float64
		for j := range s.WavelengthNM {
			y = append(y, (1-a)*s.Acid[j]+a*s.Base[j])
		}
		k := fmt.Sprintf("r%02d", i+1)
		s.Family, s.FamilyKeys = append(s.Family, y), append(s.FamilyKeys, k)
		s.Rungs = append(s.Rungs, Rung{Key: k, PH: ph, Residual: 0.009 * math.Sin(float64(3*i)), AmountPct: 0.2 * math.Cos(float64(i)), Baseline: 0.4 * math.Sin(float64(i))})
	}
	return s
}

func driftingChart() Chart {
	c := Chart{Title: "RI-A on U1: pKa", Unit: "pH", Centre: 4.658, Low: 4.638, High: 4.678, Assigned: 4.66, OnsetLow: "2026-09-06", OnsetHigh: "2026-09-09"}
	ewma := c.Centre
	for i := range 60 {
		t := time.Date(2026, 7, 17, 0, 0, 0, 0, time.UTC).AddDate(0, 0, i)
		v, flag := 4.658+0.006*math.Sin(float64(7*i)), ""
		if i > 50 {
			v += 0.005 * float64(i-50)
		}
		ewma = 0.8*ewma + 0.2*v
		if ewma > 4.666 {
			flag = "weighted mean beyond its limit"
		}
		if v > c.High {
			flag = "beyond the action limit and weighted mean beyond its limit"
		}
		if i == 20 {
			v = math.NaN()
		}
		if i == 33 {
			v, flag = 5.4, "beyond the action limit"
		}
		c.Nights, c.Values, c.EWMA, c.Flags = append(c.Nights, t.Format(time.DateOnly)), append(c.Values, v), append(c.EWMA, ewma), append(c.Flags, flag)
	}
	return c
}

func quietChart() Chart {
	return Chart{Title: "RI-C on U2: wavelength of the base band", Unit: "nm", Nights: []string{"2026-09-11", "2026-09-12", "2026-09-14"}, Values: []float64{578.02, 578.05, 577.98}, EWMA: []float64{578, 578.01, 578.01},
		Centre: math.NaN(), Low: math.NaN(), High: math.NaN(), Assigned: math.NaN(), Flags: []string{"", "", ""}}
}
