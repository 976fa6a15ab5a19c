// Package verify runs published checks on the very code that is installed:
// figures from the literature are compiled in, the program computes them anew,
// and every row says what was expected, what came out and whether it passes.
//
// A row compares one number. Its tolerance is half a unit of the last printed
// digit where the figure is printed, and tighter where the figure was computed
// independently to more digits; it is always less than one per cent of the
// figure, so that an error of one per cent in any of them is noticed.
//
// The package is pure: it knows no file, database, queue, logger or clock.
package verify

import (
	"context"
	"fmt"
	"math"
	"slices"
)

// A Check is one figure and the way the program computes it.
type Check struct {
	Group    string
	Name     string
	Source   string  // author and year; says "computed" or "from memory" where that is so
	Expected float64 // unit as in Name
	Within   float64 // largest difference that passes, same unit
	Got      func() (float64, error)
}

// A Row is the outcome of one check.
type Row struct {
	Group    string  `json:"group"`
	Check    string  `json:"check"`
	Source   string  `json:"source"`
	Expected float64 `json:"expected"`
	Got      float64 `json:"got"` // NaN when it could not be computed
	Within   float64 `json:"within"`
	Digits   float64 `json:"digits"` // decimal digits that agree, 0 to 15
	Pass     bool    `json:"pass"`
	Error    string  `json:"error,omitempty"`
}

// A Summary counts the rows of one group.
type Summary struct {
	Group  string  `json:"group"`
	Checks int     `json:"checks"`
	Failed int     `json:"failed"`
	Digits float64 `json:"digits"` // fewest that agree in a row
}

// Checks lists all checks, group by group.
func Checks() []Check {
	var out []Check
	for _, group := range []func() []Check{
		activity, water, nernst, buffers, acids, recipes, constants, dyes, photometry,
		indicators, multiwavelength, york, strd, guideH2, guideH3, distributions,
		limits, handbookCharts, runLengths, robust, outliers, trends, numberForms,
	} {
		out = append(out, group()...)
	}
	return out
}

// Run makes the checks in their order. A check that panics fails.
func Run(ctx context.Context, checks []Check) ([]Row, error) {
	rows := make([]Row, 0, len(checks))
	for _, c := range checks {
		if err := ctx.Err(); err != nil {
			return rows, err
		}
		rows = append(rows, c.run())
	}
	return rows, nil
}

func (c Check) run() (r Row) {
	r = Row{Group: c.Group, Check: c.Name, Source: c.Source, Expected: c.Expected, Within: c.Within, Got: math.NaN()}
	defer func() {
		if p := recover(); p != nil {
			r.Pass, r.Error = false, fmt.Sprintf("stopped: %v", p)
		}
	}()
	got, err := c.Got()
	if err != nil {
		r.Error = err.Error()
		return r
	}
	r.Got = got
	r.Digits = agreed(got, c.Expected)
	r.Pass = math.Abs(got-c.Expected) <= c.Within
	return r
}

// agreed is the number of decimal digits in which two numbers agree.
func agreed(got, want float64) float64 {
	const most = 15
	if got == want {
		return most
	}
	scale := math.Abs(want)
	if scale == 0 {
		scale = 1
	}
	return min(most, max(0, -math.Log10(math.Abs(got-want)/scale)))
}

// Summarize counts the rows group by group, in their order.
func Summarize(rows []Row) []Summary {
	var out []Summary
	for _, r := range rows {
		i := slices.IndexFunc(out, func(s Summary) bool { return s.Group == r.Group })
		if i < 0 {
			out = append(out, Summary{Group: r.Group, Digits: math.Inf(1)})
			i = len(out) - 1
		}
		s := &out[i]
		s.Checks++
		s.Digits = min(s.Digits, r.Digits)
		if !r.Pass {
			s.Failed++
		}
	}
	return out
}

// Failed gives the rows that do not pass.
func Failed(rows []Row) []Row {
	var out []Row
	for _, r := range rows {
		if !r.Pass {
			out = append(out, r)
		}
	}
	return out
}

// group gathers checks of one group.
type group struct {
	name, source string
	list         []Check
}

// is adds a check whose number needs no error.
func (g *group) is(name string, want, within float64, got func() float64) {
	g.try(name, want, within, func() (float64, error) { return got(), nil })
}

// try adds a check whose number may not come about.
func (g *group) try(name string, want, within float64, got func() (float64, error)) {
	g.list = append(g.list, Check{Group: g.name, Name: name, Source: g.source, Expected: want, Within: within, Got: got})
}
