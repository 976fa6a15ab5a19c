package parse

import (
	"fmt"
	"math"
	"strconv"
	"strings"
	"testing"

	"pgregory.net/rapid"
)

// same compares a number with strconv, to the bit.
func same(t testing.TB, s string, point byte) {
	t.Helper()
	v, _, ok := Float([]byte(s), point)
	dotted := s
	if point == ',' {
		dotted = strings.Replace(strings.ReplaceAll(s, ".", "!"), ",", ".", 1)
	}
	dotted = strings.Replace(dotted, "\u2212", "-", 1)
	want, err := strconv.ParseFloat(dotted, 64)
	plain := strings.Trim(dotted, "+-0123456789.eE") == "" // strconv also takes words, hexadecimals and underlines
	if accept := err == nil && plain; ok != accept {
		t.Fatalf("%q: accepted %v, want %v", s, ok, accept)
	}
	if ok && math.Float64bits(v) != math.Float64bits(want) {
		t.Fatalf("%q: %v (%x), strconv gives %v (%x)", s, v, math.Float64bits(v), want, math.Float64bits(want))
	}
}

func TestFloat(t *testing.T) {
	for _, s := range []string{
		"0", "-0", "-0.000000", "+1", "1.", ".5", "-.5", ".", "", "-", "+", "e5", "1e", "1e+", "1e5", "1E-05", "3.733005E+000", "1..2", "1,2", "0x10", "1_0", "inf", "NaN",
		"9007199254740991", "9007199254740992", "9007199254740993", "0.1", "123456789012345678", "1234567890123456789012", "1e22", "1e23", "-14.56424103398058",
		"1e308", "1e309", "-1e400", "1e-320", "1e-400", "0.000000000000000000000000000001", "179769313486231570000000000000000", "5.13514E-02", "1e99999999999", "\u22120.12", "\u2212", "00001.50",
	} {
		same(t, s, '.')
		same(t, strings.ReplaceAll(s, ".", ","), ',')
	}
	for s, want := range map[string]int{"412": 0, "0.4127": 4, "-1.50": 2, "1E-3": Exponential, "1.": 0, ".125": 3} {
		if _, dec, ok := Float([]byte(s), '.'); !ok || dec != want {
			t.Errorf("%q: %d decimals, want %d", s, dec, want)
		}
	}
	if v, _, n := Prefix([]byte("0.25;1"), '.'); v != 0.25 || n != 4 {
		t.Errorf("%g after %d bytes", v, n)
	}
}

// TestFloatIdentity compares printed numbers of many kinds with strconv.
func TestFloatIdentity(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		v := rapid.Float64().Draw(t, "value")
		format := rapid.SampledFrom([]byte{'f', 'e', 'g', 'E'}).Draw(t, "format")
		if format == 'f' && math.Abs(v) > 1e40 {
			format = 'e'
		}
		s := strconv.FormatFloat(v, format, rapid.IntRange(-1, 25).Draw(t, "precision"), 64)
		if math.IsInf(v, 0) || math.IsNaN(v) {
			return
		}
		got, _, ok := Float([]byte(s), '.')
		want, err := strconv.ParseFloat(s, 64)
		if ok != (err == nil) || ok && math.Float64bits(got) != math.Float64bits(want) {
			t.Fatalf("%q: %v, strconv gives %v", s, got, want)
		}
	})
	n := 0
	for i := range 200_000 { // the numbers of real exports: fixed decimals
		s := strconv.FormatFloat(float64(i)*1.7320508e-3-5, 'f', i%9, 64)
		got, _, _ := Float([]byte(s), '.')
		if want, _ := strconv.ParseFloat(s, 64); math.Float64bits(got) != math.Float64bits(want) {
			t.Fatalf("%q: %v, strconv gives %v", s, got, want)
		}
		n++
	}
	t.Logf("%d numbers of fixed decimals identical to strconv", n)
}

// TestFloatAllocs holds the reader of numbers to no allocation.
func TestFloatAllocs(t *testing.T) {
	for _, s := range []string{"200.0000", "-0.1234567", "3.733005E+000", "12345678901234567.5", "1e-300", "-14.564241033980581"} {
		b := []byte(s)
		if n := testing.AllocsPerRun(100, func() { Float(b, '.') }); n != 0 {
			t.Errorf("%q: %g allocations", s, n)
		}
	}
}

func FuzzFloat(f *testing.F) {
	for _, s := range []string{"0.1234567", "-1e-5", "1e22", "9007199254740993", "1,5", ".", "\u22121", "1e999", "00000000000000000000000000001", "1.e+08"} {
		f.Add(s, true)
	}
	f.Fuzz(func(t *testing.T, s string, point bool) {
		if len(s) > 2000 {
			return
		}
		if point {
			same(t, s, '.')
		} else {
			same(t, s, ',')
		}
	})
}

func numbers() ([][]byte, int) {
	var out [][]byte
	bytes := 0
	for i := range 1000 {
		s := fmt.Sprintf("%.7f", 0.0001234*float64(i*7919%100000)-0.01)
		out = append(out, []byte(s))
		bytes += len(s)
	}
	return out, bytes
}

func BenchmarkFloat(b *testing.B) {
	in, n := numbers()
	b.SetBytes(int64(n))
	b.ReportAllocs()
	for b.Loop() {
		for _, s := range in {
			Float(s, '.')
		}
	}
}

func BenchmarkStrconv(b *testing.B) {
	in, n := numbers()
	b.SetBytes(int64(n))
	b.ReportAllocs()
	for b.Loop() {
		for _, s := range in {
			if _, err := strconv.ParseFloat(string(s), 64); err != nil {
				b.Fatal(err)
			}
		}
	}
}
