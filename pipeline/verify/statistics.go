package verify

import (
	"fmt"
	"math"

	"pkvigil/pipeline/chart"
)

func series(x []float64) []chart.Value {
	out := make([]chart.Value, len(x))
	for i, v := range x {
		out[i] = chart.Value{Night: i + 1, X: v}
	}
	return out
}

func limits() []Check {
	g := group{name: "control limits"}
	x := []float64{49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1}
	mr := 0.0
	for i := 1; i < len(x); i++ {
		mr += math.Abs(x[i]-x[i-1]) / 9
	}
	judge := func(d2 float64) chart.Judgement {
		return chart.Judge(chart.Known(50.81, mr/d2), series(x), chart.Rules{Individuals: 3})[0]
	}
	g.source = "NIST/SEMATECH e-Handbook 6.3.2.2 (printed 55.8041, 45.8159 with d2 = 1.128)"
	g.is("flow rate, upper limit", 55.8040898345, 1e-9, func() float64 { return judge(1.128).LimitHigh })
	g.is("flow rate, lower limit", 45.8159101655, 1e-9, func() float64 { return judge(1.128).LimitLow })
	g.source = "e-Handbook 6.3.2.2 with exact constants, computed"
	g.is("flow rate, upper limit, exact d2", 55.8024116801, 1e-9, func() float64 { return judge(chart.ConstantsFor(2).D2).LimitHigh })
	g.is("flow rate, limit of the moving range", 6.13382104844, 1e-9, func() float64 { return chart.ConstantsFor(2).TopD * mr })
	for _, r := range [][]float64{
		{2, 0.7978845608, 1.1283791671, 0.8525024664, 1.8799712060, 2.6586807764}, {3, 0.8862269255, 1.6925687506, 0.8883680040, 1.0233267079, 1.9544100476},
		{5, 0.9399856030, 2.3259289473, 0.8640819411, 0.5768193341, 1.4272992929}, {10, 0.9726592741, 3.0775054617, 0.7970506735, 0.3082637252, 0.9753500771},
		{25, 0.9896403756, 3.9306292195, 0.7084407659, 0.1526473159, 0.6062808418},
	} {
		g.source = "ISO 7870-2 constants, computed"
		k := func() chart.Constants { return chart.ConstantsFor(int(r[0])) }
		g.is(fmt.Sprintf("c4(%g)", r[0]), r[1], 6e-11, func() float64 { return k().C4 })
		g.is(fmt.Sprintf("d2(%g)", r[0]), r[2], 6e-9, func() float64 { return k().D2 })
		g.is(fmt.Sprintf("d3(%g)", r[0]), r[3], 6e-9, func() float64 { return k().D3 })
		g.is(fmt.Sprintf("A2(%g)", r[0]), r[4], 6e-9, func() float64 { return k().A2 })
		g.is(fmt.Sprintf("A3(%g)", r[0]), r[5], 6e-9, func() float64 { return k().A3 })
	}
	for n, want := range []float64{7.252072299, 4.294091192, 3.532363, 3.334652, 3.092899} {
		count := []int{5, 10, 20, 30, 100}[n]
		g.source = "prediction limit, Student 1908, computed"
		g.is(fmt.Sprintf("factor for the next value after %d", count), want, 6e-7, func() float64 { return chart.PredictionFactor(count, 3) })
	}
	return g.list
}

func textbook() []float64 {
	return []float64{9.45, 7.99, 9.29, 11.66, 12.16, 10.18, 8.04, 11.46, 9.2, 10.34, 9.03, 11.47, 10.51, 9.4, 10.08, 9.37, 10.62, 10.31, 8.52, 10.84, 10.9, 9.33, 12.29, 11.5, 10.6, 11.08, 10.38, 11.62, 11.31, 10.52}
}

func handbookCharts() []Check {
	g := group{name: "weighted mean and cumulative sum"}
	x := []float64{52.0, 47.0, 53.0, 49.3, 50.1, 47.0, 51.0, 50.1, 51.2, 50.5, 49.6, 47.6, 49.9, 51.3, 47.8, 51.2, 52.6, 52.4, 53.6, 52.1}
	ewma := func() []chart.Judgement {
		return chart.Judge(chart.Known(50, 2.0539), series(x), chart.Rules{EWMAWeight: .3, EWMAWidth: 3})
	}
	g.source = "e-Handbook 6.3.2.4, printed to 2 decimals"
	for i, want := range []float64{50.60, 49.52, 50.56, 50.18, 50.16, 49.21, 49.75, 49.85, 50.26, 50.33, 50.11, 49.36, 49.52, 50.05, 49.38, 49.92, 50.73, 51.23, 51.94, 51.99} {
		g.is(fmt.Sprintf("weighted mean, run %d", i+1), want, 0.0051, func() float64 { return ewma()[i].EWMA })
	}
	g.source = "Roberts 1959, exact limits, computed"
	for _, p := range [][2]float64{{0, 1.84851}, {1, 2.25639401212}, {4, 2.55161146007}, {19, 2.58843091412}} {
		i, want := int(p[0]), p[1]
		g.is(fmt.Sprintf("half width of the limits, run %d", i+1), want, 2e-6, func() float64 { return ewma()[i].EWMAHigh - 50 })
	}
	c := []float64{324.925, 324.675, 324.725, 324.350, 325.350, 325.225, 324.125, 324.525, 325.225, 324.600, 324.625, 325.150, 328.325, 327.250, 327.825, 328.500, 326.675, 327.775, 326.875, 328.350}
	cusum := func() []chart.Judgement {
		return chart.Judge(chart.Known(325, 1), series(c), chart.Rules{CusumSlack: .3175, CusumDecision: 4.1959})
	}
	g.source = "e-Handbook 6.3.2.3, printed to 2 decimals, further digits computed"
	for _, p := range [][2]float64{{12, 3.0075}, {13, 4.94}, {14, 7.4475}, {15, 10.63}, {16, 11.9875}, {17, 14.445}, {18, 16.0025}, {19, 19.035}} {
		i, want := int(p[0]), p[1]
		g.is(fmt.Sprintf("upper sum, group %d", i+1), want, 1e-9, func() float64 { return cusum()[i].CusumHigh })
	}
	for _, p := range [][2]float64{{1, 0.0075}, {3, 0.3325}, {6, 0.5575}, {7, 0.715}, {8, 0.1725}, {9, 0.255}, {10, 0.3125}} {
		i, want := int(p[0]), p[1]
		g.is(fmt.Sprintf("lower sum, group %d", i+1), want, 1e-9, func() float64 { return cusum()[i].CusumLow })
	}
	text := func() []chart.Judgement {
		return chart.Judge(chart.Known(10, 1), series(textbook()), chart.Rules{CusumSlack: .5, CusumDecision: 5})
	}
	g.source = "Montgomery, Introduction to Statistical Quality Control, Table 9.1"
	for _, p := range [][2]float64{{3, 1.16}, {4, 2.82}, {5, 2.50}, {22, 1.79}, {23, 2.79}, {24, 2.89}, {25, 3.47}, {26, 3.35}, {27, 4.47}, {28, 5.28}} {
		i, want := int(p[0]), p[1]
		g.is(fmt.Sprintf("textbook series, upper sum %d", i+1), want, 1e-9, func() float64 { return text()[i].CusumHigh })
	}
	g.is("textbook series, values since the sum was zero", 7, 0, func() float64 { return float64(text()[28].CusumHighSince) })
	g.source = "Hawkins 1987, Quesenberry 1991, computed"
	for i, want := range []float64{0.3446263039, 1.660087901, 1.202167666, 0.03438044903, -1.097765456, 0.8707279783} {
		g.is(fmt.Sprintf("self-starting score %d", i+3), want, 1e-8, func() float64 { return chart.SelfStart(textbook())[i+2] })
	}
	g.source = "Samuel, Pignatiello & Calvin 1998, computed"
	step := func() chart.Change { return chart.FindStep(series(textbook()[:29]), chart.Known(10, 1)) }
	g.is("change after value", 22, 0, func() float64 { return float64(step().Last) })
	g.is("level after the change", 11.2542857143, 1e-9, func() float64 { return step().After })
	return g.list
}

func runLengths() []Check {
	g := group{name: "run lengths"}
	zone := func(r chart.Runs) func() float64 {
		return func() float64 { return chart.RunsRunLength(3, r, 0, 1).Mean }
	}
	for _, c := range []struct {
		name, source string
		want         float64
		got          func() float64
	}{
		{"limits at 3", "Shewhart, computed", 370.3983473, func() float64 { return chart.IndividualsRunLength(3, 0, 1).Mean }},
		{"limits at 3, shift 1", "Shewhart, computed", 43.89468172, func() float64 { return chart.IndividualsRunLength(3, 1, 1).Mean }},
		{"cumulative sum 0.5 3, one side", "Brook & Evans 1972 prints 117.59", 117.5957042, func() float64 { return chart.OneSidedCusumRunLength(.5, 3, 0, 0, 1).Mean }},
		{"cumulative sum 0.5 3, one side, shift 1.5", "Brook & Evans 1972 prints 3.75", 3.7491084, func() float64 { return chart.OneSidedCusumRunLength(.5, 3, 0, 1.5, 1).Mean }},
		{"cumulative sum 0.5 4", "Lucas & Crosier 1982 prints 168", 167.68379, func() float64 { return chart.CusumRunLength(.5, 4, 0, 1, false).Mean }},
		{"cumulative sum 0.5 4, shift 1", "Lucas & Crosier 1982 prints 8.38", 8.3831319, func() float64 { return chart.CusumRunLength(.5, 4, 1, 1, false).Mean }},
		{"cumulative sum 0.5 4, head start", "Lucas & Crosier 1982 prints 149", 148.69565, func() float64 { return chart.CusumRunLength(.5, 4, 0, 1, true).Mean }},
		{"cumulative sum 0.5 5", "Montgomery prints 465 (from memory)", 465.44351, func() float64 { return chart.CusumRunLength(.5, 5, 0, 1, false).Mean }},
		{"weighted mean 0.5 3.071", "Lucas & Saccucci 1990 print 500", 499.90601, func() float64 { return chart.EWMARunLength(.5, 3.071, 0, 1).Mean }},
		{"weighted mean 0.2 2.962", "Lucas & Saccucci 1990 print 500 (from memory)", 499.73512, func() float64 { return chart.EWMARunLength(.2, 2.962, 0, 1).Mean }},
		{"weighted mean 0.2 2.962, shift 1", "Lucas & Saccucci 1990 print 10.5 (from memory)", 10.541666, func() float64 { return chart.EWMARunLength(.2, 2.962, 1, 1).Mean }},
		{"weighted mean 0.03 2.437, shift 0.25", "Lucas & Saccucci 1990 print 76.7", 76.72574, func() float64 { return chart.EWMARunLength(.03, 2.437, .25, 1).Mean }},
		{"two of three", "Champ & Woodall 1987 print 225.44", 225.43841, zone(chart.Runs{TwoOfThree: true})},
		{"four of five", "Champ & Woodall 1987 print 166.05", 166.05452, zone(chart.Runs{FourOfFive: true})},
		{"eight on one side", "Champ & Woodall 1987 print 152.73", 152.73007, zone(chart.Runs{OneSide: 8})},
		{"all four zone tests", "Champ & Woodall 1987 print 91.75 (from memory)", 91.750773, zone(chart.ZoneRuns())},
		{"multirule, one value a night", "Clin. Chem. 27 (1981) 493, computed", 182.9976, zone(chart.Runs{TwoBeyond: true, FourBeyond: true, OneSide: 10})},
		{"six rising or falling", "computed", 421.5986260, func() float64 { return chart.OrderRunLength(6, 0).Mean }},
		{"fourteen up and down", "computed", 601.0078040, func() float64 { return chart.OrderRunLength(0, 14).Mean }},
		{"correlation 0.5, limits from the moving range", "Kramer & Schmid 2000, computed", 34.23314, func() float64 {
			return chart.CorrelatedIndividualsRunLength(.5, 3*math.Sqrt(.5), 0).Mean
		}},
		{"correlation 0.4, long-term limits", "Kramer & Schmid 2000 print 515.44", 515.45079, func() float64 { return chart.CorrelatedIndividualsRunLength(.4, 3.09023, 0).Mean }},
		{"limits and moving range", "Crowder 1987, computed", 105.33093, func() float64 { return chart.IndividualsRangeRunLength(3, 3.685886566, 0, 1).Mean }},
		{"limits 2.992 and moving range 4.139", "Rigdon, Cruthis & Champ 1994 print 200", 200.05735, func() float64 { return chart.IndividualsRangeRunLength(2.992, 4.139, 0, 1).Mean }},
		{"drift 0.1, limits at 3.069", "Aerne, Champ & Rigdon 1991, computed", 19.109587, func() float64 { return chart.IndividualsDriftRunLength(3.069, .1, 1).Mean }},
	} {
		g.source = c.source
		g.is(c.name, c.want, 2e-7*c.want, c.got)
	}
	return g.list
}

func robust() []Check {
	g := group{name: "robust centre and spread"}
	for _, c := range []struct {
		name, source string
		x            []float64
		centre, sd   float64
	}{
		{"24 copper results", "Analyst 114 (1989) 1693; Algorithm A of ISO 13528, computed",
			[]float64{2.90, 3.10, 3.40, 3.40, 3.70, 3.70, 2.80, 2.50, 2.40, 2.40, 2.70, 2.20, 5.28, 3.37, 3.03, 3.03, 28.95, 3.77, 3.40, 2.20, 3.50, 3.60, 3.70, 3.70}, 3.20556592273, 0.67415010003},
		{"31 nickel results", "Analyst 114 (1989) 1693; Algorithm A of ISO 13528, computed",
			[]float64{5.2, 6.5, 6.9, 7.0, 7.0, 7.0, 7.4, 8.0, 8.0, 8.0, 8.0, 8.5, 9.0, 9.0, 10.0, 11.0, 11.0, 12.0, 12.0, 13.7, 14.0, 14.0, 14.0, 16.0, 17.0, 17.0, 18.0, 24.0, 28.0, 34.0, 125.0}, 11.732640758127, 5.263550078245},
		{"seven results", "Analytical Methods Committee 2001 (data from memory), computed", []float64{4.5, 4.9, 5.6, 4.2, 6.2, 5.2, 9.9}, 5.386489230095, 1.145956920381},
	} {
		g.source = c.source
		g.is(c.name+", centre", c.centre, 1e-10, func() float64 { return chart.AlgorithmA(c.x).Centre })
		g.is(c.name+", spread", c.sd, 1e-10, func() float64 { return chart.AlgorithmA(c.x).SD })
	}
	return g.list
}

func outliers() []Check {
	g := group{name: "outliers"}
	one := []float64{199.31, 199.53, 200.19, 200.82, 201.92, 201.95, 202.18, 245.57}
	g.source = "Grubbs 1969; e-Handbook 1.3.5.17.1 prints 2.4687 and 2.032"
	g.is("one outlier, G", 2.46876461121, 1e-10, func() float64 { return chart.GrubbsTest(one, 0.05, false).G })
	g.is("one outlier, critical value", 2.03165200155, 1e-9, func() float64 { return chart.GrubbsTest(one, 0.05, false).Critical })
	g.is("one outlier, two-sided critical value", 2.12664508720, 1e-9, func() float64 { return chart.GrubbsTest(one, 0.05, true).Critical })
	many := []float64{-0.25, 0.68, 0.94, 1.15, 1.2, 1.26, 1.26, 1.34, 1.38, 1.43, 1.49, 1.49, 1.55, 1.56, 1.58, 1.65, 1.69, 1.7, 1.76, 1.77, 1.81, 1.91, 1.94, 1.96, 1.99, 2.06, 2.09, 2.1, 2.14, 2.15, 2.23, 2.24, 2.26, 2.35, 2.37, 2.4, 2.47, 2.54, 2.62, 2.64, 2.9, 2.92, 2.92, 2.93, 3.21, 3.26, 3.3, 3.59, 3.68, 4.3, 4.64, 5.34, 5.42, 6.01}
	steps := func() []chart.Removal { _, s := chart.ManyOutliers(many, 10, 0.05); return s }
	g.source = "Rosner 1983; e-Handbook 1.3.5.17.3, further digits computed"
	for i, r := range [][2]float64{{3.118906049, 3.158793941}, {2.942973114, 3.151430023}, {3.179423937, 3.143889685}, {2.810181144, 3.136164956}, {2.815579563, 3.128247334},
		{2.848171628, 3.120127738}, {2.279327055, 3.111796454}, {2.310366059, 3.103243078}, {2.101580651, 3.094456447}, {2.067178078, 3.085424571}} {
		g.is(fmt.Sprintf("deviate %d", i+1), r[0], 1e-9, func() float64 { return steps()[i].R })
		g.is(fmt.Sprintf("critical value %d", i+1), r[1], 1e-8, func() float64 { return steps()[i].Critical })
	}
	g.is("number of outliers", 3, 0, func() float64 { out, _ := chart.ManyOutliers(many, 10, 0.05); return float64(len(out)) })
	return g.list
}

func trends() []Check {
	g := group{name: "trend and normality"}
	x, y := []float64{1, 2, 3, 4, 10, 12, 18}, []float64{9, 15, 19, 20, 45, 55, 78}
	g.source = "Sen 1968"
	g.is("slope", 4, 1e-12, func() float64 { s, _, _ := chart.SenSlope(x, y, 0.93); return s })
	g.source = "Mann 1945, Kendall 1975, computed"
	g.is("Z of the trend", 3.00375704593, 1e-10, func() float64 { return chart.TestTrend(x, y).Z })
	g.is("exact probability of the trend", 0.000396825397, 1e-11, func() float64 { return chart.TestTrend(x, y).P })
	t := []float64{1, 2, 3, 4, 5, 6, 7, 8, 9, 10, 11, 12}
	tied := []float64{7.103, 7.101, 7.106, 7.104, 7.104, 7.109, 7.107, 7.112, 7.110, 7.115, 7.113, 7.118}
	g.is("variance with ties", 211.666666667, 1e-8, func() float64 { return chart.TestTrend(t, tied).Variance })
	g.source = "Gilbert 1987, computed"
	g.is("slope with ties", 0.00143181818182, 1e-13, func() float64 { s, _, _ := chart.SenSlope(t, tied, 0.95); return s })
	g.is("lower limit of the slope", 0.001, 1e-11, func() float64 { _, s, _ := chart.SenSlope(t, tied, 0.95); return s })
	g.is("upper limit of the slope", 0.00171287656, 1e-9, func() float64 { _, _, s := chart.SenSlope(t, tied, 0.95); return s })
	base := []float64{7.1069, 7.1255, 7.1173, 7.1213, 7.1171, 7.1247, 7.1168, 7.1283, 7.1192, 7.1264, 7.1058, 7.1245, 7.1299, 7.1152, 7.1172, 7.1211, 7.1139, 7.1307, 7.1357, 7.1204, 7.1247, 7.1152, 7.1110, 7.1188, 7.1242, 7.1334, 7.1268, 7.1282, 7.1168, 7.1222}
	g.source = "Anderson & Darling, D'Agostino & Stephens 1986; computed twice independently"
	g.is("normality, A2", 0.176590692818, 1e-10, func() float64 { return chart.TestNormality(base).A2 })
	g.is("normality, adjusted", 0.181446936871, 1e-10, func() float64 { return chart.TestNormality(base).Adjusted })
	g.is("normality, probability", 0.913733812446, 1e-9, func() float64 { return chart.TestNormality(base).P })
	g.source = "NIST StRD definition of lag-1, computed twice independently"
	g.is("lag-1 correlation", -0.049706470732, 1e-10, func() float64 { return chart.Lag1(base) })
	g.source = "Wald & Wolfowitz 1940, computed twice independently"
	g.is("runs, Z", 1.48644670591, 1e-10, func() float64 { return chart.RunsAbout(base, chart.Median(base)).Z })
	return g.list
}
