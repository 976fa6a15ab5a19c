package verdict

import (
	"fmt"
	"math"
	"slices"
	"strings"

	"gonum.org/v1/gonum/stat"
	"gonum.org/v1/gonum/stat/distuv"

	"pkvigil/pipeline/fit"
)

// Judge applies every check that concerns the set's profile.
func Judge(f Facts, limits Limits) Report {
	j := &judge{limits: limits}
	if f.Fit == nil || f.Fit.Status == fit.NotRun || f.Fit.Status == fit.Unusable {
		j.noNumber(f)
		return j.report()
	}
	j.fitStatus(f)
	j.labels(f)
	if f.Profile == ThreeSolution {
		j.threeSolution(f)
	} else {
		j.ladder(f)
	}
	j.latentPH(f)
	j.optics(f)
	j.components(f)
	j.electrode(f)
	j.conditions(f)
	j.target(f)
	return j.report()
}

func (j *judge) noNumber(f Facts) {
	why := "the set could not be fitted"
	if f.FitError != nil {
		why = f.FitError.Error()
	}
	j.checks = append(j.checks, Check{Key: "fit", Note: Anything(), Hold: Anything(), Outcome: NoNumber,
		Sentence: fmt.Sprintf("No pKa: %s.", strings.TrimSuffix(why, ".")), Action: "Mend what the sentence names and let the files be taken in again."})
	j.optics(f)
	j.electrode(f)
}

func (j *judge) fitStatus(f Facts) {
	switch f.Fit.Status {
	case fit.Converged:
		j.finding("fit", Stands, fmt.Sprintf("Converged in %d iterations.", f.Fit.Iterations), "")
	case fit.HitLimit:
		j.finding("fit", Held, "The fit did not settle within its iterations.", "Look at the residuals: a form, a label or the number of steps is wrong.")
	case fit.Undetermined:
		j.finding("fit", Held, "The data do not fix every pKa; only a combination is determined. "+strings.Join(f.Fit.Notes, " "),
			"Add solutions between the steps, or state the mean of the two constants only.")
	}
}

func (j *judge) labels(f Facts) {
	for _, s := range f.Suspects {
		switch s.Kind {
		case "exchange":
			j.finding("label.exchange", Held, fmt.Sprintf("%s and %s look exchanged: with them exchanged pKa %.3f and normal residuals (odds %s).", s.A, s.B, s.PKa, odds(s.Odds)),
				fmt.Sprintf("Look at the labels of %s and %s; if exchanged: pkvigil sign exchange %s %s %s --as NAME --because \"...\"", s.A, s.B, f.Set, s.A, s.B))
		case "shift":
			j.finding("ladder.shift", Held, fmt.Sprintf("All pH values match the nominal ladder better %s row(s) away: pKa would be %.3f. Not released.", s.B, s.PKa),
				"Compare the first row of the pH table with the first solution, correct the table and export it again.")
		}
	}
	for _, p := range f.Cloned {
		j.finding("scan.clone", Held, fmt.Sprintf("%s holds the same numbers as %s, digit by digit.", p[1], p[0]), fmt.Sprintf("Export the scan of %s again.", p[1]))
	}
	for _, p := range f.Doubled {
		j.finding("scan.doubled", Held, fmt.Sprintf("%s and %s are the same solution: their spectra agree within noise though their pH differs.", p[0], p[1]), fmt.Sprintf("Scan %s and %s again.", p[0], p[1]))
	}
	for _, k := range f.Foreign {
		j.finding("scan.foreign", Held, fmt.Sprintf("The spectrum of %s does not belong to this dye.", k), fmt.Sprintf("Look at the vial of %s and scan it again.", k))
	}
	for _, p := range f.SamePH {
		j.finding("ph.copy", Noted, fmt.Sprintf("%s and %s have the same pH to the digit, but their spectra differ.", p[0], p[1]), fmt.Sprintf("Look up the reading of %s and %s.", p[0], p[1]))
	}
	if f.BestDye != "" {
		j.finding("dye.identity", Held, fmt.Sprintf("The spectra look like %s (cosine %.5f), not like what the name says.", f.BestDye, f.BestCosine), "Look at the vial and its label.")
	}
	if f.NewLot != "" {
		j.finding("lot.new", Noted, f.NewLot, "Run old and new lot together for five nights, then sign the new baseline.")
	}
	if f.UnknownLot != "" {
		j.finding("lot.unknown", Held, fmt.Sprintf("%s is not a compound of the settings; fitted, not released.", f.UnknownLot), "Add the compound to the settings, or correct the name.")
	}
	if len(f.Nominal) == len(f.PH) && len(f.PH) > 0 {
		off := 0
		for i, p := range f.PH {
			if math.Abs(p-f.Nominal[i]) > 0.1 {
				off++
			}
		}
		j.number("ladder.nominal", float64(off)/float64(len(f.PH)), "1",
			fmt.Sprintf("%d of %d rungs are more than 0.1 from the nominal ladder.", off, len(f.PH)), "Check that the pH table belongs to this set and starts at the first rung.")
	}
	var worst string
	worstDiff := 0.0
	for k, d := range f.NamePHDiff {
		if a := math.Abs(d); a > worstDiff || (a == worstDiff && k < worst) {
			worst, worstDiff = k, a
		}
	}
	if worst != "" {
		j.number("ph.name", worstDiff, "pH", fmt.Sprintf("%s: name and table differ by %.2f in pH.", worst, worstDiff), fmt.Sprintf("Look up which pH of %s is right.", worst))
	}
}

func (j *judge) ladder(f Facts) {
	m, n := len(f.PH), f.Fit.Steps
	pk := f.Fit.Full.PKa
	asked := 7 + 4*(n-1)
	// Each further step asks for four more rungs to stand, three to be noted.
	usable := float64(m - 3*(n-1))
	if m < asked && usable >= 7 {
		usable = 6
	}
	j.number("rungs.usable", usable, "rungs", fmt.Sprintf("Only %d usable solutions for %d step(s); %d are asked for.", m, n, asked),
		fmt.Sprintf("Measure %d more solution(s), best near pH %.2f.", max(1, asked-m), pk[0]))
	if f.Fit.Free {
		j.forms(f)
	}
	for k, p := range pk {
		near, below, above := 0, 0, 0
		for _, ph := range f.PH {
			if math.Abs(ph-p) <= 0.7 {
				near++
				if ph < p {
					below++
				} else {
					above++
				}
			}
		}
		if below == 0 || above == 0 {
			near = min(near, 2)
		}
		j.number("rungs.near", float64(near), "rungs", fmt.Sprintf("%d solution(s) within 0.7 of pKa%s %.2f (%d below, %d above).", below+above, stepName(k, n), p, below, above),
			fmt.Sprintf("Add solutions at pH %.2f and %.2f.", p-0.3, p+0.3))
		lo, hi, gap := largestGap(f.PH, p)
		j.number("ladder.gap", gap, "pH", fmt.Sprintf("No solution between pH %.2f and %.2f.", lo, hi), fmt.Sprintf("Add a solution at pH %.2f.", (lo+hi)/2))
	}
	if n == 1 {
		j.number("slope", f.Fit.Slope-1, "1", fmt.Sprintf("Apparent slope of the titration %.3f ± %.3f instead of 1.", f.Fit.Slope, f.Fit.SlopeSD),
			"A slope off 1 means a further equilibrium, a wrong pH scale or a second dye: check the references of the night first.")
	}
}

// forms checks that both end forms were reached; without them the limiting spectra are extrapolated.
func (j *judge) forms(f Facts) {
	n, m := f.Fit.Steps, len(f.PH)
	if len(f.Fit.Alpha) != m*(n+1) {
		return
	}
	acid, base := 0.0, 0.0
	for i := range m {
		acid = max(acid, f.Fit.Alpha[i*(n+1)])
		base = max(base, f.Fit.Alpha[i*(n+1)+n])
	}
	pk := f.Fit.Full.PKa
	what, ph := fmt.Sprintf("Highest base share is %.2f", base), slices.Max(pk)+1.3
	if acid < base {
		what, ph = fmt.Sprintf("Highest acid share is %.2f", acid), slices.Min(pk)-1.3
	}
	j.number("forms.reached", min(acid, base), "1", fmt.Sprintf("%s; extend the ladder to pH %.1f.", what, ph), fmt.Sprintf("Add a solution at pH %.1f.", ph))
}

func (j *judge) threeSolution(f Facts) {
	lo, hi := slices.Min(f.PH), slices.Max(f.PH)
	pk := f.Fit.Full.PKa[0]
	d := min(pk-lo, hi-pk)
	j.number("limit.distance", d, "pH", fmt.Sprintf("A limiting solution lies only %.2f from the pKa; its form is not pure.", d),
		fmt.Sprintf("Prepare limiting solutions below pH %.1f and above pH %.1f.", pk-2, pk+2))
}

// latentPH looks at how far the pH the spectra ask for lies from what was read.
func (j *judge) latentPH(f Facts) {
	eta := f.Fit.Own.Eta
	m, n := len(eta), f.Fit.Steps
	dof := m - (2*n + 1) // spectra fix the shares up to one affine map per step, pKa is fitted
	if dof > 0 {
		ss := 0.0
		for _, e := range eta {
			ss += e * e
		}
		sd := math.Sqrt(ss / float64(dof))
		worst := worstRung(f.Keys, eta)
		j.number("ph.latent", sd, "pH", fmt.Sprintf("The pH readings scatter by %.3f around what the spectra ask for, most at %s.", sd, worst), fmt.Sprintf("Read the pH of %s again.", worst))
		if f.SigmaPH > 0 {
			p := distuv.ChiSquared{K: float64(dof)}.Survival(ss / (f.SigmaPH * f.SigmaPH))
			j.number("ph.improbable", p, "1", fmt.Sprintf("Residuals this large have probability %.1g under the usual scatter of %.3f.", p, f.SigmaPH), fmt.Sprintf("Read the pH of %s again, and look at its scan.", worst))
		}
	}
	if f.Rungs > 0 {
		var names []string
		for _, l := range f.LeftOut {
			names = append(names, l.Key)
		}
		s := "No rung left out."
		if len(names) > 0 {
			if s = f.LeftOut[0].Text; len(names) > 1 || !strings.HasPrefix(s, names[0]) {
				s = fmt.Sprintf("%s left out: %s", strings.Join(names, ", "), s)
			}
		}
		j.number("rung.out", float64(len(f.LeftOut))/float64(f.Rungs), "1", s, "Prepare and scan again: "+strings.Join(names, ", ")+".")
	}
	if len(f.Fit.LeaveOneOut) == m && len(f.U) > 0 && f.U[0] > 0 && f.Profile != ThreeSolution {
		i := maxAbs(f.Fit.LeaveOneOut)
		j.number("rung.influence", math.Abs(f.Fit.LeaveOneOut[i])/f.U[0], "U", fmt.Sprintf("Leaving out %s alone moves the pKa by %+.3f.", key(f.Keys, i), f.Fit.LeaveOneOut[i]), fmt.Sprintf("Repeat %s and a neighbour of it.", key(f.Keys, i)))
	}
	kappa := f.Fit.Own.Kappa
	if len(kappa) > 2 {
		sd := 100 * stat.StdDev(kappa, nil)
		j.number("amount.scatter", sd, "%", fmt.Sprintf("The amount of dye varies %.1f %% between rungs.", sd), "Pipette the stock by weight, or look for a dilution that was missed.")
		x := make([]float64, len(kappa))
		for i := range x {
			x[i] = float64(i) / float64(len(x)-1)
		}
		_, b := stat.LinearRegression(x, kappa, nil, false)
		j.number("amount.trend", 100*b, "%", fmt.Sprintf("The amount of dye changes by %+.1f %% along the run: evaporation (+) or fading (-).", 100*b), "Cover the solutions; measure up and down the ladder.")
	}
}

func worstRung(keys []string, v []float64) string { return key(keys, maxAbs(v)) }

func maxAbs(v []float64) int {
	best := 0
	for i := range v {
		if math.Abs(v[i]) > math.Abs(v[best]) {
			best = i
		}
	}
	return best
}

func key(keys []string, i int) string {
	if i < len(keys) {
		return keys[i]
	}
	return fmt.Sprintf("rung %d", i+1)
}

func stepName(k, n int) string {
	if n == 1 {
		return ""
	}
	return fmt.Sprint(k + 1)
}

// largestGap returns the widest step of the ladder that touches pKa-1..pKa+1.
// A ladder that ends inside that interval leaves a gap to its end.
func largestGap(ph []float64, pk float64) (lo, hi, gap float64) {
	s := slices.Clone(ph)
	slices.Sort(s)
	if len(s) == 0 {
		return pk - 1, pk + 1, 2
	}
	if s[0] > pk-1 {
		lo, hi, gap = pk-1, s[0], s[0]-(pk-1)
	}
	if last := s[len(s)-1]; last < pk+1 && pk+1-last > gap {
		lo, hi, gap = last, pk+1, pk+1-last
	}
	for i := 1; i < len(s); i++ {
		if s[i] < pk-1 || s[i-1] > pk+1 {
			continue
		}
		if d := s[i] - s[i-1]; d > gap {
			lo, hi, gap = s[i-1], s[i], d
		}
	}
	return lo, hi, gap
}

func odds(v float64) string {
	switch {
	case math.IsInf(v, 1) || v > 1e6:
		return "over a million to 1"
	case v >= 10:
		return fmt.Sprintf("%.0f to 1", v)
	default:
		return fmt.Sprintf("%.1f to 1", v)
	}
}
