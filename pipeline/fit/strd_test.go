package fit

import (
	"math"
	"testing"
)

// The figures below are from the NIST StRD nonlinear regression files
// (certified to 11 digits), so that these checks run without them.
var certificates = []certified{
	{name: "Misra1a", start: [2][]float64{{500, 1e-4}, {250, 5e-4}},
		b: []float64{2.3894212918e2, 5.5015643181e-4}, sd: []float64{2.7070075241, 7.2668688436e-6}, rss: 1.2455138894e-1,
		x: column(77.6, 114.9, 141.1, 190.8, 239.9, 289.0, 332.8, 378.4, 434.8, 477.3, 536.8, 593.1, 689.1, 760.0),
		y: []float64{10.07, 14.73, 17.94, 23.93, 29.61, 35.18, 40.02, 44.82, 50.76, 55.05, 61.01, 66.40, 75.47, 81.78}},
	{name: "BoxBOD", start: [2][]float64{{1, 1}, {100, 0.75}},
		b: []float64{2.1380940889e2, 5.4723748542e-1}, sd: []float64{1.2354515176e1, 1.0455993237e-1}, rss: 1.1680088766e3,
		x: column(1, 2, 3, 5, 7, 10), y: []float64{109, 149, 149, 191, 213, 224}},
	{name: "MGH09", start: [2][]float64{{25, 39, 41.5, 39}, {0.25, 0.39, 0.415, 0.39}},
		b:  []float64{1.9280693458e-1, 1.9128232873e-1, 1.2305650693e-1, 1.3606233068e-1},
		sd: []float64{1.1435312227e-2, 1.9633220911e-1, 8.0842031232e-2, 9.0025542308e-2}, rss: 3.0750560385e-4,
		x: column(4, 2, 1, 5e-1, 2.5e-1, 1.67e-1, 1.25e-1, 1e-1, 8.33e-2, 7.14e-2, 6.25e-2),
		y: []float64{1.957e-1, 1.947e-1, 1.735e-1, 1.6e-1, 8.44e-2, 6.27e-2, 4.56e-2, 3.42e-2, 3.23e-2, 2.35e-2, 2.46e-2}},
	{name: "Rat42", start: [2][]float64{{100, 1, 0.1}, {75, 2.5, 0.07}},
		b: []float64{7.2462237576e1, 2.6180768402, 6.7359200066e-2}, sd: []float64{1.7340283401, 8.8295217536e-2, 3.4465663377e-3}, rss: 8.0565229338,
		x: column(9, 14, 21, 28, 42, 57, 63, 70, 79), y: []float64{8.93, 10.8, 18.59, 22.33, 39.35, 56.11, 61.73, 64.62, 67.08}},
	{name: "DanWood", start: [2][]float64{{1, 5}, {0.7, 4}},
		b: []float64{7.6886226176e-1, 3.8604055871}, sd: []float64{1.8281973860e-2, 5.1726610913e-2}, rss: 4.3173084083e-3,
		x: column(1.309, 1.471, 1.490, 1.565, 1.611, 1.680), y: []float64{2.138, 3.421, 3.597, 4.340, 4.882, 5.660}},
	{name: "Eckerle4", start: [2][]float64{{1, 10, 500}, {1.5, 5, 450}},
		b: []float64{1.5543827178, 4.0888321754, 4.5154121844e2}, sd: []float64{1.5408051163e-2, 4.6803020753e-2, 4.6800518816e-2}, rss: 1.4635887487e-3,
		x: column(400, 405, 410, 415, 420, 425, 430, 435, 436.5, 438, 439.5, 441, 442.5, 444, 445.5, 447, 448.5, 450, 451.5, 453,
			454.5, 456, 457.5, 459, 460.5, 462, 463.5, 465, 470, 475, 480, 485, 490, 495, 500),
		y: []float64{0.0001575, 0.0001699, 0.0002350, 0.0003102, 0.0004917, 0.0008710, 0.0017418, 0.0046400, 0.0065895, 0.0097302,
			0.0149002, 0.0237310, 0.0401683, 0.0712559, 0.1264458, 0.2073413, 0.2902366, 0.3445623, 0.3698049, 0.3668534, 0.3106727,
			0.2078154, 0.1164354, 0.0616764, 0.0337200, 0.0194023, 0.0117831, 0.0074357, 0.0022732, 0.0008800, 0.0004579, 0.0002345,
			0.0001586, 0.0001143, 0.0000710}},
}

func column(x ...float64) [][]float64 {
	out := make([][]float64, len(x))
	for i, v := range x {
		out[i] = []float64{v}
	}
	return out
}

// TestStRDCompiled fits the certificates above from both starts.
func TestStRDCompiled(t *testing.T) {
	for _, c := range certificates {
		c.check(t)
	}
}

// TestLevenbergMarquardtWithJacobian: a given Jacobian takes the place of differences.
func TestLevenbergMarquardtWithJacobian(t *testing.T) {
	c := certificates[0]
	calls := 0
	r, err := LevenbergMarquardt(func(b, r []float64) {
		for i, y := range c.y {
			r[i] = models["Misra1a"](b, c.x[i]) - y
		}
	}, len(c.y), c.start[0], LMOptions{Jacobian: func(b, j []float64) {
		calls++
		for i, x := range c.x {
			e := math.Exp(-b[1] * x[0])
			j[2*i], j[2*i+1] = 1-e, b[0]*x[0]*e
		}
	}})
	if err != nil || calls == 0 {
		t.Fatalf("%v, %d calls", err, calls)
	}
	within(t, "b2", r.X[1]/c.b[1], 1, 1e-10)
	if _, err := LevenbergMarquardt(func(_, r []float64) { r[0] = math.NaN() }, 2, []float64{1}, LMOptions{}); err == nil {
		t.Error("a start without finite residuals was accepted")
	}
}
