package assay

import (
	"fmt"
	"math"
	"slices"

	"pkvigil/pipeline/acidbase"
	"pkvigil/pipeline/fit"
	"pkvigil/pipeline/naming"
	"pkvigil/pipeline/spectra"
	"pkvigil/pipeline/verdict"
)

// Outcome is a computed and judged set.
type Outcome struct {
	Report   verdict.Report
	Facts    verdict.Facts
	Prepared *spectra.Prepared
	Fit      *fit.Result // nil when nothing could be fitted
	Err      error       // why not

	Constants    []Constant // one per step
	Bands        spectra.Characteristics
	Library      *Library    // nil without an archive
	Classical    *Library    // two-form result of a three-solution set; nil else
	Hidden       *fit.Hidden // a second dye; nil none
	Figures      map[string]Figure
	LeftOut      []spectra.LeftOut
	WithAll      *fit.Result // before rungs were left out; nil when none was
	TemperatureC float64     // NaN unknown
	Delay        map[string]float64
	Electrode    *acidbase.Electrode
}

// A Constant is one stated pKa with its uncertainty and its relatives.
type Constant struct {
	Step                     int     // from 1
	PKa                      float64 // mixed, at ReportC where the temperature coefficient is known
	U                        float64 // combined standard uncertainty
	K                        float64
	Expanded                 float64
	UOwn, URun, ULab         float64
	DOF                      float64
	Own, UOwnWeighted        float64 // own-weighted estimate and its own uncertainty
	Thermo, UThermo, ThermoC float64 // NaN when it cannot be stated
	ThermoText               string
	Components               []fit.Component // of PKa; the activity terms belong to Thermo alone
	ThermoTerms              []acidbase.Term
}

// A Library pKa uses archived limit spectra.
type Library struct {
	PKa, U float64
	Source string
}

// A Figure is a number worth a name.
type Figure struct {
	Value, SD float64 // SD NaN: unknown
	Unit      string
}

// Compute computes one set.
func Compute(in Input) *Outcome {
	out := &Outcome{Figures: map[string]Figure{}, TemperatureC: math.NaN()}
	pr := pair(&in)
	out.Delay = pr.delay
	out.TemperatureC = mean(pr.temps)
	el, calErr := in.electrode()
	el, err := in.corrected(el, &pr)
	if err != nil {
		calErr = err
	}
	out.Electrode = el
	out.Facts = in.facts(pr, el, calErr, out.TemperatureC)
	prep, err := spectra.Prepare(pr.rungs, pr.blanks, in.preparation())
	if err != nil {
		return out.fail(&in, err)
	}
	out.Prepared = prep
	out.LeftOut = append(pr.left, prep.LeftOut...)
	out.describePreparation(pr)
	if len(prep.Keys) < 3 {
		return out.fail(&in, fmt.Errorf("%d solutions with scan and pH are usable, at least 3 are needed", len(prep.Keys)))
	}
	prob := in.problem(prep, pr, el)
	res, err := fit.Solve(prob, fit.Options{Effective: prep.Effective})
	if err != nil {
		out.Facts.Fit = res
		return out.fail(&in, err)
	}
	if len(res.Full.PKa) == 0 || len(res.Own.PKa) == 0 {
		return out.fail(&in, fmt.Errorf("no constant can be found between pH %.2f and %.2f: the colour does not change as one over this ladder; extend it across the pKa",
			slices.Min(prep.PH), slices.Max(prep.PH)))
	}
	res, prob = out.leaveOut(&in, pr, el, prob, res)
	out.Fit, out.Facts.Fit = res, res
	out.Facts.Keys, out.Facts.PH, out.Facts.Prepared = out.Prepared.Keys, out.Prepared.PH, out.Prepared
	out.Facts.SigmaPH = rms(prob.SigmaPH)
	out.state(&in)
	out.archiveCheck(&in, prob)
	out.furtherDye(prob)
	out.twoForms(prob)
	out.Facts.LeftOut = out.LeftOut
	out.Facts.Rungs = len(out.Prepared.Keys) + len(out.LeftOut)
	out.Report = verdict.Judge(out.Facts, in.limits())
	out.characteristics(&in)
	return out
}

// fail judges a set that has no number.
func (o *Outcome) fail(in *Input, err error) *Outcome {
	o.Err, o.Facts.FitError, o.Facts.Prepared = err, err, o.Prepared
	o.Facts.LeftOut = o.LeftOut
	o.Report = verdict.Judge(o.Facts, in.limits())
	return o
}

func (in *Input) electrode() (*acidbase.Electrode, error) {
	if in.Calibration == nil {
		return nil, nil
	}
	return Calibrate(in.Calibration)
}

// corrected reads every pH again with the signed values of the buffers.
func (in *Input) corrected(el *acidbase.Electrode, pr *pairing) (*acidbase.Electrode, error) {
	if el == nil || len(in.Corrections) == 0 {
		return el, nil
	}
	c := *in.Calibration
	c.Points = slices.Clone(c.Points)
	for i, p := range c.Points {
		if v, ok := in.Corrections[p.Lot]; ok {
			c.Points[i].PH = v
		}
	}
	right, err := Calibrate(&c)
	if err != nil {
		return el, err
	}
	for i, r := range pr.rungs {
		pr.rungs[i].PH = right.PH(el.MilliVolt(r.PH))
	}
	return right, nil
}

// facts gathers what the checks need besides the fit.
func (in *Input) facts(pr pairing, el *acidbase.Electrode, calErr error, tC float64) verdict.Facts {
	f := verdict.Facts{
		Set: in.Key, Profile: verdict.Ladder, TemperatureC: tC, LibraryDiff: math.NaN(), NamePHDiff: pr.nameDif, SamePH: pr.samePH(),
		Calibration: in.calibrationFacts(el, calErr), NeedsCalibration: in.NeedsCalibration,
		MissingBlank: len(pr.blanks) == 0,
	}
	f.SubstituteBlank = f.MissingBlank && in.Method.SubstituteBlank && in.Substitute != nil
	f.NewLot = in.NewLot
	if c := in.Compound; c != nil {
		if c.Profile == string(verdict.ThreeSolution) {
			f.Profile = verdict.ThreeSolution
		}
		f.NominalC, f.Target = c.Temperature, c.Target
	} else {
		f.UnknownLot = in.Key
	}
	for _, k := range pr.twice {
		f.Cloned = append(f.Cloned, [2]string{k, k + " (a second file)"})
	}
	for _, r := range pr.rungs {
		if d, ok := pr.delay[r.Key]; ok {
			f.DelayMin = append(f.DelayMin, d)
		} else {
			f.DelayMin = append(f.DelayMin, math.NaN())
		}
	}
	return f
}

// describePreparation copies what the preparation found into facts and figures.
func (o *Outcome) describePreparation(pr pairing) {
	for _, r := range o.Prepared.Records {
		switch r.Key {
		case "scan.clone":
			o.Facts.Cloned = append(o.Facts.Cloned, [2]string{r.Other, r.Rung})
		}
	}
}

// leaveOut applies the one rule by which a rung may take no part for its pH:
// a latent pH error above five standard deviations and above 0.05. At most
// one rung in eight and two rounds; the result with all rungs is kept. Where
// an exchange of labels explains the trouble, nothing is left out: that is for
// a person to decide.
func (o *Outcome) leaveOut(in *Input, pr pairing, el *acidbase.Electrode, prob fit.Problem, res *fit.Result) (*fit.Result, fit.Problem) {
	o.suspects(in, prob, res)
	if len(o.Facts.Suspects) > 0 || o.Facts.Profile == verdict.ThreeSolution {
		return res, prob
	}
	most := min(2, len(o.Prepared.Keys)/8)
	all := res
	for range most {
		worst, size := -1, 0.0
		for i, e := range res.Own.Eta {
			if a := math.Abs(e); a > 0.05 && a > 5*prob.SigmaPH[i] && a > size {
				worst, size = i, a
			}
		}
		if worst < 0 {
			break
		}
		key := o.Prepared.Keys[worst]
		o.LeftOut = append(o.LeftOut, spectra.LeftOut{Key: key, Check: "ph.outlier",
			Text: fmt.Sprintf("its pH reading %.3f lies %+.3f from what its spectrum asks for, more than five times the usual scatter.", o.Prepared.PH[worst], -res.Own.Eta[worst])})
		o.Prepared = without(o.Prepared, worst)
		prob = in.problem(o.Prepared, pr, el)
		next, err := fit.Solve(prob, fit.Options{Effective: o.Prepared.Effective})
		if err != nil || len(next.Full.PKa) == 0 {
			break
		}
		res, o.WithAll = next, all
	}
	return res, prob
}

// without returns a copy of p that lacks rung i.
func without(p *spectra.Prepared, i int) *spectra.Prepared {
	q := *p
	w := len(p.WavelengthNM)
	q.A = append(slices.Clone(p.A[:i*w]), p.A[(i+1)*w:]...)
	q.Keys = slices.Delete(slices.Clone(p.Keys), i, i+1)
	q.PH = slices.Delete(slices.Clone(p.PH), i, i+1)
	for _, f := range []*[]float64{&q.NoiseRung, &q.ClearOffset, &q.ShiftNM, &q.Scatter} {
		if len(*f) == len(p.Keys) {
			*f = slices.Delete(slices.Clone(*f), i, i+1)
		}
	}
	return &q
}

// nominal gives the nominal ladder of the rungs that took part, nil if it does not fit.
func (in *Input) nominal(keys []string) []float64 {
	c := in.Compound
	if c == nil || len(c.Ladder) == 0 {
		return nil
	}
	out := make([]float64, len(keys))
	for i, k := range keys {
		n := 0
		if _, err := fmt.Sscanf(naming.RungKey(k), "%d", &n); err != nil || n < 1 || n > len(c.Ladder) {
			return nil
		}
		out[i] = c.Ladder[n-1]
	}
	return out
}

// state turns the fit into stated constants.
func (o *Outcome) state(in *Input) {
	k := or(in.Method.CoverageK, 2)
	full, own := &o.Fit.Full, &o.Fit.Own
	n := o.Fit.Steps
	for s := range min(n, len(full.PKa)) {
		c := Constant{Step: s + 1, PKa: full.PKa[s], K: k, Own: own.PKa[s], UOwnWeighted: math.Sqrt(own.CovOwn[s*n+s]),
			Thermo: math.NaN(), UThermo: math.NaN(), ThermoC: math.NaN()}
		byBucket := map[string]float64{}
		var u4 float64
		for _, comp := range full.Components {
			if comp.Step != s {
				continue
			}
			c.Components = append(c.Components, comp)
			v := comp.C * comp.C * comp.U * comp.U
			byBucket[comp.Bucket] += v
			if comp.DOF > 0 && !math.IsInf(comp.DOF, 1) {
				u4 += v * v / comp.DOF
			}
		}
		c.U = math.Sqrt(full.Cov[s*n+s])
		c.UOwn, c.URun, c.ULab = math.Sqrt(byBucket["own"]), math.Sqrt(byBucket["run"]), math.Sqrt(byBucket["lab"])
		c.DOF = math.Inf(1)
		if u4 > 0 {
			c.DOF = math.Pow(c.U, 4) / u4
		}
		o.toReport(in, &c)
		c.Expanded = c.K * c.U
		o.Constants = append(o.Constants, c)
		o.Facts.U = append(o.Facts.U, c.Expanded)
	}
}

// toReport brings a constant to the temperature of the report and states the thermodynamic one.
func (o *Outcome) toReport(in *Input, c *Constant) {
	at := o.TemperatureC
	report := or(in.Method.ReportAt, 25)
	d := in.dpkadt()
	if !math.IsNaN(at) && d != 0 {
		c.PKa += d * (report - at)
	} else if !math.IsNaN(at) {
		report = at // no coefficient: the constant is stated for the temperature it was measured at
	}
	comp := in.Compound
	if comp == nil || comp.Ionic <= 0 {
		return
	}
	z := comp.Charge - (c.Step - 1)
	conv, err := acidbase.Convert(c.PKa, acidbase.Mixed, acidbase.Thermodynamic, z, in.conditions(report))
	if err != nil {
		c.ThermoText = err.Error()
		return
	}
	c.Thermo, c.ThermoC, c.ThermoText, c.ThermoTerms = conv.PKa, report, conv.Text, conv.Terms
	// The ionic strength is one unknown: its effect on the ladder and on the
	// correction are added with their signs before squaring.
	u2 := c.U * c.U
	for _, t := range conv.Terms {
		cross := 0.0
		for _, b := range c.Components {
			if b.Key == t.Key {
				cross += 2 * b.C * b.U * t.C * t.U
			}
		}
		u2 += t.C*t.C*t.U*t.U + cross
	}
	c.UThermo = math.Sqrt(math.Max(u2, 0))
}

// archiveCheck compares with the archived limit spectra of the compound.
func (o *Outcome) archiveCheck(in *Input, prob fit.Problem) {
	if a := in.Archive; a != nil && o.Fit.Steps == 1 {
		if lib, u, ok := a.on(prob.WavelengthNM); ok {
			p := prob
			p.Library, p.ULibrary = lib, u
			if r, err := fit.Solve(p, fit.Options{Effective: o.Prepared.Effective, Bare: true}); err == nil && r.Status == fit.Converged {
				o.Library = &Library{PKa: r.Own.PKa[0], U: math.Sqrt(r.Own.CovOwn[0]), Source: a.Source}
				if in.Compound != nil && in.Compound.Reference {
					o.Facts.LibraryDiff = r.Own.PKa[0] - o.Fit.Own.PKa[0]
				}
			}
		}
	}
	w := len(prob.WavelengthNM)
	if len(in.Others) > 0 && len(o.Fit.Spectra) >= 2*w {
		base := o.Fit.Spectra[len(o.Fit.Spectra)-w:]
		own := ""
		if in.Compound != nil {
			own = in.Compound.Name
		}
		best := spectra.DyeMatch(prob.WavelengthNM, base, in.Others)
		if len(best) > 0 && best[0].Name != own && best[0].Cosine > 0.999 {
			for _, l := range best {
				if l.Name == own && best[0].Cosine-l.Cosine > 0.001 {
					o.Facts.BestDye, o.Facts.BestCosine = best[0].Name, best[0].Cosine
				}
			}
		}
	}
}

// on gives the archived spectra on another grid, acid form first; ok is false where they do not cover it.
func (a *Archive) on(grid []float64) (lib, u []float64, ok bool) {
	if len(grid) == 0 || len(a.WavelengthNM) < 2 || grid[0] < a.WavelengthNM[0]-1e-9 || grid[len(grid)-1] > a.WavelengthNM[len(a.WavelengthNM)-1]+1e-9 {
		return nil, nil, false
	}
	for _, s := range [][]float64{a.Acid, a.Base} {
		lib = append(lib, interpolate(a.WavelengthNM, s, grid)...)
	}
	if len(a.SDAcid) == len(a.Acid) && len(a.SDBase) == len(a.Base) {
		for _, s := range [][]float64{a.SDAcid, a.SDBase} {
			u = append(u, interpolate(a.WavelengthNM, s, grid)...)
		}
	}
	return lib, u, true
}

// interpolate is piecewise linear; grids of one instrument coincide and then it copies.
func interpolate(x, y, at []float64) []float64 {
	out := make([]float64, len(at))
	for i, v := range at {
		j := min(max(1, lowerBound(x, v)), len(x)-1)
		t := (v - x[j-1]) / (x[j] - x[j-1])
		out[i] = y[j-1] + t*(y[j]-y[j-1])
	}
	return out
}

func lowerBound(x []float64, v float64) int {
	i, _ := slices.BinarySearch(x, v)
	return i
}

func mean(v []float64) float64 {
	if len(v) == 0 {
		return math.NaN()
	}
	s := 0.0
	for _, x := range v {
		s += x
	}
	return s / float64(len(v))
}

func rms(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x * x
	}
	return math.Sqrt(s / float64(max(1, len(v))))
}
