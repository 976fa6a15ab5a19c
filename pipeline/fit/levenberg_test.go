package fit

import (
	"bufio"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// models are those of the NIST StRD nonlinear regression sets
// (check-values statistics, strd_nls_summary).
var models = map[string]func(b []float64, x []float64) float64{
	"Misra1a":  func(b, x []float64) float64 { return b[0] * (1 - math.Exp(-b[1]*x[0])) },
	"Misra1b":  func(b, x []float64) float64 { return b[0] * (1 - math.Pow(1+b[1]*x[0]/2, -2)) },
	"Misra1c":  func(b, x []float64) float64 { return b[0] * (1 - math.Pow(1+2*b[1]*x[0], -0.5)) },
	"Misra1d":  func(b, x []float64) float64 { return b[0] * b[1] * x[0] / (1 + b[1]*x[0]) },
	"Chwirut1": func(b, x []float64) float64 { return math.Exp(-b[0]*x[0]) / (b[1] + b[2]*x[0]) },
	"Chwirut2": func(b, x []float64) float64 { return math.Exp(-b[0]*x[0]) / (b[1] + b[2]*x[0]) },
	"Lanczos1": lanczos, "Lanczos2": lanczos, "Lanczos3": lanczos,
	"Gauss1": gauss, "Gauss2": gauss, "Gauss3": gauss,
	"DanWood":  func(b, x []float64) float64 { return b[0] * math.Pow(x[0], b[1]) },
	"Kirby2":   func(b, x []float64) float64 { return ratio(b[:3], b[3:], x[0]) },
	"Hahn1":    func(b, x []float64) float64 { return ratio(b[:4], b[4:], x[0]) },
	"Thurber":  func(b, x []float64) float64 { return ratio(b[:4], b[4:], x[0]) },
	"Nelson":   func(b, x []float64) float64 { return b[0] - b[1]*x[0]*math.Exp(-b[2]*x[1]) },
	"MGH09":    func(b, x []float64) float64 { return b[0] * (x[0]*x[0] + x[0]*b[1]) / (x[0]*x[0] + x[0]*b[2] + b[3]) },
	"MGH10":    func(b, x []float64) float64 { return b[0] * math.Exp(b[1]/(x[0]+b[2])) },
	"MGH17":    func(b, x []float64) float64 { return b[0] + b[1]*math.Exp(-x[0]*b[3]) + b[2]*math.Exp(-x[0]*b[4]) },
	"Roszman1": func(b, x []float64) float64 { return b[0] - b[1]*x[0] - math.Atan(b[2]/(x[0]-b[3]))/math.Pi },
	"ENSO": func(b, x []float64) float64 {
		w := 2 * math.Pi * x[0]
		return b[0] + b[1]*math.Cos(w/12) + b[2]*math.Sin(w/12) + b[4]*math.Cos(w/b[3]) + b[5]*math.Sin(w/b[3]) +
			b[7]*math.Cos(w/b[6]) + b[8]*math.Sin(w/b[6])
	},
	"BoxBOD":   func(b, x []float64) float64 { return b[0] * (1 - math.Exp(-b[1]*x[0])) },
	"Rat42":    func(b, x []float64) float64 { return b[0] / (1 + math.Exp(b[1]-b[2]*x[0])) },
	"Rat43":    func(b, x []float64) float64 { return b[0] / math.Pow(1+math.Exp(b[1]-b[2]*x[0]), 1/b[3]) },
	"Eckerle4": func(b, x []float64) float64 { return b[0] / b[1] * math.Exp(-0.5*sq((x[0]-b[2])/b[1])) },
	"Bennett5": func(b, x []float64) float64 { return b[0] * math.Pow(b[1]+x[0], -1/b[2]) },
}

func sq(x float64) float64 { return x * x }

func lanczos(b, x []float64) float64 {
	return b[0]*math.Exp(-b[1]*x[0]) + b[2]*math.Exp(-b[3]*x[0]) + b[4]*math.Exp(-b[5]*x[0])
}

func gauss(b, x []float64) float64 {
	return b[0]*math.Exp(-b[1]*x[0]) + b[2]*math.Exp(-sq((x[0]-b[3])/b[4])) + b[5]*math.Exp(-sq((x[0]-b[6])/b[7]))
}

func ratio(num, den []float64, x float64) float64 {
	var u, v float64
	for i := len(num) - 1; i >= 0; i-- {
		u = u*x + num[i]
	}
	for i := len(den) - 1; i >= 0; i-- {
		v = (v + den[i]) * x
	}
	return u / (1 + v)
}

// certified is one StRD problem.
type certified struct {
	name   string
	start  [2][]float64
	b, sd  []float64
	rss    float64
	x      [][]float64
	y      []float64
	logged bool
}

// digits is the log relative error, at most 11 (the certificate's digits).
func digits(got, want float64) float64 {
	if got == want {
		return 11
	}
	return math.Min(11, -math.Log10(math.Abs(got-want)/math.Abs(want)))
}

// check fits from both starts.
func (c certified) check(t *testing.T) {
	model := models[c.name]
	for s := range c.start {
		residual := func(b, r []float64) {
			for i, y := range c.y {
				r[i] = model(b, c.x[i]) - y
			}
		}
		r, err := LevenbergMarquardt(residual, len(c.y), c.start[s], LMOptions{})
		if err != nil {
			t.Fatalf("%s start %d: %v", c.name, s+1, err)
		}
		par, sd := 11.0, 11.0
		for k := range c.b {
			par = math.Min(par, digits(r.X[k], c.b[k]))
			sd = math.Min(sd, digits(r.SD[k], c.sd[k]))
		}
		sum := digits(r.RSS, c.rss)
		t.Logf("%-9s start %d: %4d iterations, digits %.1f / sd %.1f / RSS %.1f, %v", c.name, s+1, r.Iterations, par, sd, sum, r.Status)
		if r.Status != Converged {
			t.Errorf("%s start %d: %v", c.name, s+1, r.Status)
		}
		if par < 6 {
			t.Errorf("%s start %d: parameters agree to %.1f digits, asked 6", c.name, s+1, par)
		}
		if c.name == "Lanczos1" {
			continue // its certified sum, 1e-25, is rounding, and the deviations follow from the sum
		}
		if sd < 6 || sum < 9 {
			t.Errorf("%s start %d: deviations agree to %.1f digits (asked 6), sum to %.1f (asked 9)", c.name, s+1, sd, sum)
		}
	}
}

// sharedFolder walks up to go.mod and on to ../shared.
func sharedFolder(t testing.TB, parts ...string) string {
	t.Helper()
	dir, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	for {
		if _, err := os.Stat(filepath.Join(dir, "go.mod")); err == nil {
			break
		}
		up := filepath.Dir(dir)
		if up == dir {
			t.Skip("no go.mod above the test")
		}
		dir = up
	}
	path := filepath.Join(append([]string{dir, "..", "shared"}, parts...)...)
	if _, err := os.Stat(path); err != nil {
		t.Skipf("the folder of published data is not here (%v)", err)
	}
	return path
}

// readStRD reads a certificate file of the NIST layout by content.
func readStRD(t *testing.T, path string) certified {
	f, err := os.Open(path)
	if err != nil {
		t.Fatal(err)
	}
	defer f.Close()
	c := certified{name: strings.TrimSuffix(filepath.Base(path), ".dat")}
	c.logged = c.name == "Nelson"
	sc := bufio.NewScanner(f)
	data := false
	num := func(fields []string) []float64 {
		var out []float64
		for _, s := range fields {
			v, err := strconv.ParseFloat(s, 64)
			if err != nil {
				return nil
			}
			out = append(out, v)
		}
		return out
	}
	for sc.Scan() {
		line := sc.Text()
		fields := strings.Fields(line)
		switch {
		case len(fields) > 2 && fields[1] == "=" && strings.HasPrefix(fields[0], "b"):
			if v := num(fields[2:]); len(v) == 4 {
				c.start[0], c.start[1] = append(c.start[0], v[0]), append(c.start[1], v[1])
				c.b, c.sd = append(c.b, v[2]), append(c.sd, v[3])
			}
		case strings.HasPrefix(line, "Residual Sum of Squares:"):
			c.rss = num(fields[4:5])[0]
		case strings.HasPrefix(line, "Data:") && len(fields) <= 4 && strings.Contains(line, "y") && !strings.Contains(line, "Variable"):
			data = true
		case data:
			if v := num(fields); len(v) >= 2 {
				y := v[0]
				if c.logged {
					y = math.Log(y)
				}
				c.y, c.x = append(c.y, y), append(c.x, v[1:])
			}
		}
	}
	return c
}

// TestStRDFiles fits every nonlinear StRD file from both starts.
func TestStRDFiles(t *testing.T) {
	dir := sharedFolder(t, "data", "strd", "nls")
	files, err := filepath.Glob(filepath.Join(dir, "*.dat"))
	if err != nil || len(files) < 20 {
		t.Fatalf("%d files in %s: %v", len(files), dir, err)
	}
	for _, f := range files {
		c := readStRD(t, f)
		if models[c.name] == nil {
			t.Errorf("no model for %s", c.name)
			continue
		}
		c.check(t)
	}
}
