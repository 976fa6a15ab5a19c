package rehearse

import (
	"bytes"
	"math"
	"strconv"
	"strings"
	"testing"
	"time"

	"pgregory.net/rapid"
)

// The ordinates 1 2 3 3 2 1 0 -1 -2 -3 of McDonald & Wilks (1988), table VIIb:
// squeezed 1BCCBA@abc (the first may stay plain) and differences 1JJ%jjjjjj.
func TestPublishedDigits(t *testing.T) {
	y := []int64{1, 2, 3, 3, 2, 1, 0, -1, -2, -3}
	var sqz, dif string
	for i, v := range y {
		sqz += squeezed(v)
		if i > 0 {
			dif += differed(v - y[i-1])
		}
	}
	if sqz != "ABCCBA@abc" || dif != "JJ%jjjjjj" {
		t.Errorf("%s and %s", sqz, dif)
	}
	// From the worked DIFDUP line of the same paper: +21 is K1, +10 J0, +11 J1.
	for v, want := range map[int64]string{21: "K1", 10: "J0", 11: "J1", -12: "j2"} {
		if got := differed(v); got != want {
			t.Errorf("%d is %s, expected %s", v, got, want)
		}
	}
}

// undo decodes a table of differences by the letter of the standard, checking
// every repeated ordinate.
func undo(t *rapid.T, table string) []int64 {
	var out []int64
	var running int64
	pending := false
	for line := range strings.FieldsFuncSeq(table, func(r rune) bool { return r == '\r' || r == '\n' }) {
		if len(line) > 80 {
			t.Fatalf("line of %d characters", len(line))
		}
		i := strings.IndexFunc(line, func(r rune) bool { return r != '.' && (r < '0' || r > '9') })
		for i < len(line) {
			j := i + 1
			for j < len(line) && line[j] >= '0' && line[j] <= '9' {
				j++
			}
			digit, dif := strings.IndexByte("@ABCDEFGHI", line[i]), false
			sign := int64(1)
			if digit < 0 {
				digit, sign = strings.IndexByte("_abcdefghi", line[i]), -1
			}
			if digit < 0 {
				digit, sign, dif = strings.IndexByte("%JKLMNOPQR", line[i]), 1, true
			}
			if digit < 0 {
				digit, sign = strings.IndexByte("_jklmnopqr", line[i]), -1
			}
			v, err := strconv.ParseInt(strconv.Itoa(digit)+line[i+1:j], 10, 64)
			if err != nil {
				t.Fatal(err)
			}
			v *= sign
			switch {
			case dif:
				running += v
				out = append(out, running)
			case pending:
				if v != running {
					t.Fatalf("check ordinate %d, running %d", v, running)
				}
			default:
				running = v
				out = append(out, v)
			}
			pending = dif
			i = j
		}
	}
	return out
}

func TestDifferencesDecode(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		y := rapid.SliceOfN(rapid.Int64Range(-99999, 199999), 2, 120).Draw(t, "ordinates")
		var b bytes.Buffer
		x := make([]float64, len(y))
		for i := range x {
			x[i] = 380 + 2*float64(i)
		}
		differences(&b, x, y)
		got := undo(t, b.String())
		if len(got) != len(y) {
			t.Fatalf("%d ordinates, expected %d", len(got), len(y))
		}
		for i := range y {
			if got[i] != y[i] {
				t.Fatalf("ordinate %d is %d, expected %d", i, got[i], y[i])
			}
		}
	})
}

func TestStylesOfText(t *testing.T) {
	sc := Scan{Measured: time.Date(2026, 9, 14, 21, 45, 33, 0, time.UTC), WavelengthNM: []float64{380, 382}, Absorbance: []float64{0.5, -0.00123},
		PathMM: 10, TemperatureC: 25, BandwidthNM: 2, Decimals: 5}
	zone := time.FixedZone("", 7200)
	plain := string(ScanCSV("PR-1 s01", "U1", sc, zone, Locale{}))
	for _, want := range []string{"Measured, 2026-09-14T23:45:33\r\n", "Path length (mm), 10.0\r\n", "Cell temperature (C), 25.0\r\n",
		"\r\nWavelength (nm),Absorbance\r\n380.0,0.50000\r\n382.0,-0.00123\r\n"} {
		if !strings.Contains(plain, want) {
			t.Errorf("no %q in\n%s", want, plain)
		}
	}
	comma := string(ScanCSV("PR-1 s01", "U1", sc, zone, Locale{Comma: true, Delimiter: ";"}))
	if !strings.HasSuffix(comma, "380,0;0,50000\r\n382,0;-0,00123\r\n") {
		t.Errorf("decimal comma:\n%s", comma)
	}
	percent := string(scanText("PR-1 s01", "U1", sc, Style{Zone: zone, Percent: true, Descending: true}))
	if !strings.HasSuffix(percent, strconv.FormatFloat(100*math.Pow(10, -0.5), 'f', 5, 64)+"\r\n") || !strings.Contains(percent, "percent transmittance") {
		t.Errorf("percent, descending:\n%s", percent)
	}
	if got := string(commas([]byte("382.0,0.21800\r\n"), true)); got != "382,0,21800\r\n" {
		t.Errorf("ambiguous comma: %q", got)
	}
}
