package acidbase

import (
	"bufio"
	"math"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"
)

// outside opens a table of published figures that lies beside the module, or skips.
func outside(t *testing.T, name string) [][]string {
	t.Helper()
	return table(t, "check-values", "chemistry", name)
}

// outsideData opens a real file that lies beside the module, or skips.
func outsideData(t *testing.T, folder, name string) [][]string {
	t.Helper()
	return table(t, "data", "real", folder, name)
}

func table(t *testing.T, parts ...string) [][]string {
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
			t.Skip("no module root found above the test")
		}
		dir = up
	}
	f, err := os.Open(filepath.Join(append([]string{dir, "..", "shared"}, parts...)...))
	if err != nil {
		t.Skipf("the folder of outside figures is not here: %v", err)
	}
	defer f.Close()
	var rows [][]string
	for sc := bufio.NewScanner(f); sc.Scan(); {
		if line := strings.TrimSpace(sc.Text()); line != "" {
			rows = append(rows, strings.Split(line, ","))
		}
	}
	return rows
}

func number(t *testing.T, s string) float64 {
	t.Helper()
	v, err := strconv.ParseFloat(s, 64)
	if err != nil {
		t.Fatalf("number %q: %v", s, err)
	}
	return v
}

func near(t *testing.T, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s: got %.8g, expected %.8g within %.2g", what, got, want, tol)
	}
}

// TestDyeEquations compares with the 115 companion figures computed from the
// printed coefficients.
func TestDyeEquations(t *testing.T) {
	keys := map[string]string{
		"mCP Clayton&Byrne 1993": "mcp-1993", "mCP Liu et al. 2011 (ln T)": "mcp-2011", "mCP Mueller&Rehder 2018": "mcp-2018",
		"thymol blue Zhang&Byrne 1996 (memory)": "tb-1996", "BCG Yao&Byrne 1998": "bcg-1993", "BCP Yao&Byrne 1998": "bcp-1998",
		"BCP purified Hudson-Heck 2021 (pH_SW)": "bcp-2021", "BPB Nand&Ellwood 2018": "bpb-2018",
		"BCP freshwater Yao&Byrne 2001": "bcp-2001", "phenol red freshwater Yao&Byrne 2001": "pr-2001",
		"cresol red Byrne&Breland 1989 (memory)": "cr-1989",
	}
	rows := outside(t, "dye_equation_check_values.csv")
	for _, r := range rows[1:] {
		e, ok := DyeEquationNamed(keys[r[0]])
		if !ok {
			t.Fatalf("no equation for %q", r[0])
		}
		c := DyeCondition{TempC: number(t, r[2])}
		if r[1] != "" {
			c.Salinity = number(t, r[1])
		}
		if r[3] != "" {
			c.Ionic = number(t, r[3])
		}
		ratio := number(t, r[4])
		got := e.PH(ratio, c)
		near(t, strings.Join(r, " "), got, number(t, r[5]), 0.00006)
		near(t, "inverse "+r[0], e.Ratio(got, c), ratio, 1e-9)
	}
	if len(rows) < 100 {
		t.Errorf("%d rows read", len(rows)-1)
	}
}

func TestPrintedDyeFigures(t *testing.T) {
	c := DyeCondition{Salinity: 35, TempC: 25}
	e, _ := DyeEquationNamed("mcp-2018")
	near(t, "Müller & Rehder 2018, S 35, 25 °C, R 1 (printed)", e.PH(1, c), 7.6713, 0.00005)
	near(t, "Liu et al. 2011, -log K2 e2 with ln T", mcp2011(c).pk, 7.6479, 0.00005)
	near(t, "Clayton & Byrne 1993 pK2", DyeEquations()[0].terms(c).pk, 8.0056, 0.00005)
	near(t, "TRIS, DelValls & Dickson 1998 (8.0936 from memory)", TrisPH(35, 25), 8.09355, 0.000006)
	near(t, "2-aminopyridine, Dickson et al. 2007 (6.7866 from memory)", AminopyridinePH(35, 25), 6.78658, 0.000006)
	near(t, "E -67 mV against TRIS -72.4 mV (printed)", PotentiometricPH(TrisPH(35, 25), -67, -72.4, 25), 8.00227, 0.000006)
}
