package drift

import (
	"fmt"
	"math"
)

// A Forecast says when a characteristic will leave its limits.
type Forecast struct {
	Night Night  `json:"night"` // best estimate; 0: no trend towards a limit
	Low   Night  `json:"low"`   // 90 % interval
	High  Night  `json:"high"`  // 0: may never happen
	Known bool   `json:"known"` // false: no trend that could be extrapolated
	Text  string `json:"text"`
}

// ForecastExit extrapolates a straight line through the points (nights ascending,
// values with standard deviations, at least 3) to the limits low and high. Where the points
// scatter more than their standard deviations say, these are widened. The interval is
// where the 5 % and 95 % bounds of the line itself cross the limit.
func ForecastExit(nights []Night, values, sd []float64, low, high float64, now Night) Forecast {
	n := len(nights)
	if n < 3 || len(values) != n || len(sd) != n {
		return Forecast{Text: "too few points for a forecast"}
	}
	var sw, sx, sy, sxx, sxy float64
	for i, t := range nights {
		w := 1 / (sd[i] * sd[i])
		x := float64(t - now)
		sw, sx, sy, sxx, sxy = sw+w, sx+w*x, sy+w*values[i], sxx+w*x*x, sxy+w*x*values[i]
	}
	det := sw*sxx - sx*sx
	if !(det > 0) {
		return Forecast{Text: "too few points for a forecast"}
	}
	a, b := (sxx*sy-sx*sxy)/det, (sw*sxy-sx*sy)/det
	vaa, vab, vbb := sxx/det, -sx/det, sw/det
	chi := 0.0
	for i, t := range nights {
		r := (values[i] - a - b*float64(t-now)) / sd[i]
		chi += r * r
	}
	if f := chi / float64(n-2); f > 1 {
		vaa, vab, vbb = vaa*f, vab*f, vbb*f
	}
	if math.Abs(b) < 2*math.Sqrt(vbb) {
		return Forecast{Text: "no trend"}
	}
	limit, dir := high, 1.0
	if b < 0 {
		limit, dir = low, -1
	}
	if math.IsNaN(limit) || math.IsInf(limit, 0) {
		return Forecast{Text: "no limit in the direction of the trend"}
	}
	cross := func(k float64) Night { // first night on which line + k sd is outside
		for x := 0; x <= 400; x++ {
			t := float64(x)
			s := math.Sqrt(math.Max(0, vaa+2*vab*t+vbb*t*t))
			if dir*(a+b*t-limit)+k*s >= -1e-9*math.Abs(limit) { // a limit met exactly is met
				return now + Night(x)
			}
		}
		return 0
	}
	f := Forecast{Night: cross(0), Low: cross(1.645), High: cross(-1.645), Known: true}
	switch {
	case f.Night == 0:
		return Forecast{Text: "the trend does not reach a limit within 400 nights"}
	case f.Night == now:
		f.Text = "outside its limits now"
	case f.High == 0:
		f.Text = fmt.Sprintf("leaves its limits in %d nights or later", f.Low-now)
	case f.Low == f.High:
		f.Text = fmt.Sprintf("leaves its limits on %s", f.Night.Short())
	default:
		f.Text = fmt.Sprintf("leaves its limits in %d to %d nights (%s to %s)", f.Low-now, f.High-now, f.Low.Short(), f.High.Short())
	}
	return f
}
