package spectra

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
)

// ErrUnusable is wrapped when a set cannot be prepared at all. The Prepared
// returned with it still holds the records and the rungs left out.
var ErrUnusable = errors.New("set cannot be prepared")

// fewestColumns is the number of wavelengths below which there is no spectrum.
const fewestColumns = 5

// A row is one rung on the common grid.
type row struct {
	key      string
	ph       float64
	order    int
	scans    []Trace
	raw      []float64 // as measured, before path and blank
	a        []float64 // corrected
	decimals int
	offset   float64 // subtracted clear-window mean
	scatter  float64 // absorbance at 500 nm
	shift    float64 // nm
}

// A preparation is the state of one call of Prepare.
type preparation struct {
	opt    Options
	out    *Prepared
	x      []float64  // common grid, wider than the fit's range where scans are
	use    []bool     // columns that take part so far
	rng    [2]float64 // wanted range
	rows   []row
	blank  []float64 // on x; nil without
	blankN int       // scans averaged in it
}

// Prepare turns the scans of one set into the matrix of a fit. Every step that
// changed a number, and every fault found, leaves a Record; a rung that breaks
// a rule written in Options is in LeftOut. Masks take a wavelength out for all
// rungs, and the noise is a product of a rung factor and a wavelength value,
// so that the fit's reduction of the matrix stays exact.
//
// The order of work: faulty scans, common grid, replicates, path length, blank,
// clear window, scatter, masks, alignment, spikes, noise.
func Prepare(rungs []Rung, blanks []Trace, opt Options) (*Prepared, error) {
	p := &preparation{opt: withDefaults(opt), out: &Prepared{ClearMean: math.NaN(), ClearTrend: math.NaN(),
		BlankSD: [3]float64{math.NaN(), math.NaN(), math.NaN()}}}
	p.collect(rungs)
	p.dropClones()
	if len(p.rows) < 2 {
		return p.out, fmt.Errorf("%w: %d usable rungs, expected at least two%s", ErrUnusable, len(p.rows), p.reasons())
	}
	if err := p.toGrid(); err != nil {
		return p.out, err
	}
	p.replicates()
	p.dropLightless()
	p.path()
	p.subtractBlank(blanks)
	p.dropColourless(len(blanks) > 0 || opt.Substitute != nil)
	p.clearWindow()
	p.scatter()
	p.amounts()
	if len(p.rows) < 2 {
		return p.out, fmt.Errorf("%w: %d usable rungs, expected at least two%s", ErrUnusable, len(p.rows), p.reasons())
	}
	p.maskGaps()
	p.maskCeiling()
	if p.columns() < fewestColumns {
		return p.out, fmt.Errorf("%w: %d wavelengths left between %.4g and %.4g nm after masks, expected at least %d; dilute, or widen the range",
			ErrUnusable, p.columns(), p.rng[0], p.rng[1], fewestColumns)
	}
	p.align()
	p.noise()
	if p.columns() < fewestColumns {
		return p.out, fmt.Errorf("%w: %d wavelengths left after masks, expected at least %d", ErrUnusable, p.columns(), fewestColumns)
	}
	p.finish()
	return p.out, nil
}

func withDefaults(o Options) Options {
	if o.Ceiling <= 0 {
		o.Ceiling = 1.5
	}
	if o.NominalMM <= 0 {
		o.NominalMM = 10
	}
	if o.Forms < 2 {
		o.Forms = 2
	}
	if o.MaxOffset <= 0 {
		o.MaxOffset = 0.020
	}
	return o
}

// record notes one thing done or found.
func (p *preparation) record(key, rung string, value float64, unit, format string, args ...any) {
	p.out.Records = append(p.out.Records, Record{Key: key, Rung: rung, Value: value, Unit: unit, Text: fmt.Sprintf(format, args...)})
}

// drop leaves rungs out: those for which the rule returns a sentence.
func (p *preparation) drop(check string, rule func(i int, r *row) string) {
	kept := p.rows[:0]
	texts := make([]string, len(p.rows))
	for i := range p.rows {
		texts[i] = rule(i, &p.rows[i])
	}
	for i := range p.rows {
		if texts[i] == "" {
			kept = append(kept, p.rows[i])
			continue
		}
		p.out.LeftOut = append(p.out.LeftOut, LeftOut{Key: p.rows[i].key, Check: check, Text: texts[i]})
	}
	p.rows = kept
}

// reasons lists why rungs were left out, for an error.
func (p *preparation) reasons() string {
	if len(p.out.LeftOut) == 0 {
		return ""
	}
	var b strings.Builder
	b.WriteString(": ")
	for i, l := range p.out.LeftOut {
		if i == 3 {
			fmt.Fprintf(&b, " and %d more", len(p.out.LeftOut)-3)
			break
		}
		if i > 0 {
			b.WriteString(" ")
		}
		b.WriteString(l.Text)
	}
	return b.String()
}

// columns counts the wavelengths that take part.
func (p *preparation) columns() int {
	n := 0
	for _, u := range p.use {
		if u {
			n++
		}
	}
	return n
}

// collect cleans the scans and leaves out rungs without any.
func (p *preparation) collect(rungs []Rung) {
	for _, r := range rungs {
		w := row{key: r.Key, ph: r.PH, decimals: -1}
		var fault error
		for _, s := range r.Scans {
			t, err := clean(s)
			if err != nil {
				fault = err
				p.record("scan.unreadable", r.Key, 0, "", "A scan of %s was not used: %v.", r.Key, err)
				continue
			}
			w.scans = append(w.scans, t)
		}
		switch {
		case len(w.scans) == 0 && fault != nil:
			p.out.LeftOut = append(p.out.LeftOut, LeftOut{r.Key, "scan.unreadable", fmt.Sprintf("%s left out: %v.", r.Key, fault)})
			continue
		case len(w.scans) == 0:
			p.out.LeftOut = append(p.out.LeftOut, LeftOut{r.Key, "scan.missing", fmt.Sprintf("%s left out: it has no scan.", r.Key)})
			continue
		case math.IsNaN(r.PH) || math.IsInf(r.PH, 0):
			p.out.LeftOut = append(p.out.LeftOut, LeftOut{r.Key, "ph.missing", fmt.Sprintf("%s left out: it has no pH.", r.Key)})
			continue
		}
		slices.SortStableFunc(w.scans, func(a, b Trace) int { return a.Order - b.Order })
		w.order = w.scans[0].Order
		p.rows = append(p.rows, w)
	}
}

// toGrid chooses the common grid and brings every scan onto it.
func (p *preparation) toGrid() error {
	var scans []Trace
	for _, r := range p.rows {
		scans = append(scans, r.scans...)
	}
	p.rng = wanted(scans, p.opt)
	p.drop("grid.short", func(_ int, r *row) string {
		kept := r.scans[:0]
		worst := 1.0
		for _, t := range r.scans {
			if c := covered(t, p.rng); c < leastCover {
				worst = math.Min(worst, c)
				continue
			}
			kept = append(kept, t)
		}
		r.scans = kept
		if len(kept) > 0 {
			return ""
		}
		return fmt.Sprintf("%s left out: its scan covers %.0f %% of %.4g to %.4g nm.", r.key, 100*worst, p.rng[0], p.rng[1])
	})
	if len(p.rows) < 2 {
		return fmt.Errorf("%w: no two rungs share %.0f %% of %.4g to %.4g nm%s; export all scans of a set over one range",
			ErrUnusable, 100*leastCover, p.rng[0], p.rng[1], p.reasons())
	}
	scans = scans[:0]
	for _, r := range p.rows {
		scans = append(scans, r.scans...)
	}
	grid, step, same := commonGrid(scans)
	if len(grid) < fewestColumns || math.Min(grid[len(grid)-1], p.rng[1])-math.Max(grid[0], p.rng[0]) < leastCover*(p.rng[1]-p.rng[0])-step {
		return fmt.Errorf("%w: the scans have less than %.0f %% of %.4g to %.4g nm in common; export all scans of a set over one range",
			ErrUnusable, 100*leastCover, p.rng[0], p.rng[1])
	}
	p.x = grid
	p.use = make([]bool, len(grid))
	for j, nm := range grid {
		p.use[j] = nm >= p.rng[0]-sameNM && nm <= p.rng[1]+sameNM
	}
	if !same {
		p.record("grid.coarsest", "", step, "nm", "The scans have different wavelengths; all were brought to the coarsest common grid, %.4g nm from %.5g to %.5g nm, by a cubic through four points.",
			step, grid[0], grid[len(grid)-1])
	}
	return nil
}

// finish writes the matrix and the numbers that describe it.
func (p *preparation) finish() {
	o, m := p.out, len(p.rows)
	cols := p.usedColumns()
	w := len(cols)
	o.WavelengthNM = make([]float64, w)
	o.A = make([]float64, m*w)
	o.Keys, o.PH = make([]string, m), make([]float64, m)
	o.ClearOffset, o.ShiftNM = make([]float64, m), make([]float64, m)
	if o.ScatterP > 0 {
		o.Scatter = make([]float64, m)
	}
	for i, r := range p.rows {
		o.Keys[i], o.PH[i], o.ClearOffset[i], o.ShiftNM[i] = r.key, r.ph, r.offset, r.shift
		if o.Scatter != nil {
			o.Scatter[i] = r.scatter
		}
		for k, j := range cols {
			o.A[i*w+k] = r.a[j]
		}
	}
	for k, j := range cols {
		o.WavelengthNM[k] = p.x[j]
		o.BestChange = math.Max(o.BestChange, p.change(j))
	}
	if p.blank != nil {
		sd := blankNoise(p.x, p.blank)
		o.BlankNoise = make([]float64, w)
		for k, j := range cols {
			o.BlankNoise[k] = sd[j]
		}
	}
	o.Masked = p.maskedIntervals()
	if p.opt.TopA > 0 {
		p.pathOfSet()
	}
}

// usedColumns lists the indices of the columns that take part.
func (p *preparation) usedColumns() []int {
	cols := make([]int, 0, len(p.use))
	for j, u := range p.use {
		if u {
			cols = append(cols, j)
		}
	}
	return cols
}

// change is the range of the corrected absorbances of one column.
func (p *preparation) change(j int) float64 {
	lo, hi := math.Inf(1), math.Inf(-1)
	for i := range p.rows {
		v := p.rows[i].a[j]
		if !math.IsNaN(v) {
			lo, hi = math.Min(lo, v), math.Max(hi, v)
		}
	}
	return math.Max(0, hi-lo)
}

// maskedIntervals lists the stretches of the wanted range that take no part.
func (p *preparation) maskedIntervals() [][2]float64 {
	var out [][2]float64
	open := false
	for j, nm := range p.x {
		if nm < p.rng[0]-sameNM || nm > p.rng[1]+sameNM || p.use[j] {
			open = false
			continue
		}
		if open {
			out[len(out)-1][1] = nm
		} else {
			out = append(out, [2]float64{nm, nm})
			open = true
		}
	}
	return out
}
