package jcamp

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"pkvigil/parse"
)

// The 53 ordinates of McDonald and Wilks, Appl. Spectrosc. 42 (1988) 151,
// Table VI, in the forms printed there: plain, difference with repeat counts,
// and the latter scaled by XFACTOR.
const (
	table6 = "0 0 0 0 2 4 4 4 7 5 4 4 5 5 7 10 11 11 6 5 7 6 9 9 7 10 10 9 10 11 12 15 16 16 14 17 38 38 35 38 42 47 54 59 66 75 78 88 96 104 110 121 128"
	pac6   = "599.860 0 0 0 0 2 4 4 4 7 5 4 4 5 5 7 10 11 11 6 5 7 6 9 9 7\n" +
		"648.081 10 10 9 10 11 12 15 16 16 14 17 38 38 35 38 42 47 54\n" +
		"682.799 59 66 75 78 88 96 104 110 121 128\n"
	dup6 = "599.860@VKT%TLkj%J%KLJ%njKjL%kL%jJULJ%kLK1%lLMNPNPRLJ0QTOJ1P\n700.158A28            $$ check line\n"
	idx6 = "311@VKT%TLkj%J%KLJ%njKjL%kL%jJULJ%kLK1%lLMNPNPRLJ0QTOJ1P\n363A28\n"
)

func spectrum(xfactor, yfactor, first, last string, n int, table string) string {
	return fmt.Sprintf("##TITLE= t\n##DATA TYPE= UV/VIS SPECTRUM\n##XUNITS= NANOMETERS\n##YUNITS= ABSORBANCE\n##XFACTOR= %s\n##YFACTOR= %s\n##FIRSTX= %s\n##LASTX= %s\n##NPOINTS= %d\n##XYDATA= (X++(Y..Y))\n%s##END=\n",
		xfactor, yfactor, first, last, n, table)
}

func decodeOne(t *testing.T, text string) *Table {
	t.Helper()
	f, err := Decode("t", []byte(text), parse.Options{})
	if err != nil {
		t.Fatal(err)
	}
	tb := &f.Blocks[0].Tables[0]
	if tb.Err != nil {
		t.Fatal(tb.Err)
	}
	return tb
}

func TestPublishedTable(t *testing.T) {
	var want []float64
	for _, w := range strings.Fields(table6) {
		v, _, _ := parse.Float([]byte(w), '.')
		want = append(want, 0.001*v)
	}
	for name, text := range map[string]string{
		"plain":  spectrum("1", "0.001", "599.860", "700.158", 53, pac6),
		"difdup": spectrum("1", "0.001", "599.860", "700.158", 53, dup6),
		"scaled": spectrum("1.92881", "0.001", "599.860", "700.158", 53, idx6),
	} {
		tb := decodeOne(t, text)
		sum := 0.0
		for i, v := range tb.Y {
			if sum += v; v != want[i] {
				t.Errorf("%s: ordinate %d is %g, expected %g", name, i, v, want[i])
			}
		}
		// Sum and second abscissa as computed for the digest of the standard.
		if len(tb.Y) != 53 || math.Abs(sum-1.489) > 1e-12 || math.Abs(tb.X[1]-601.788807692) > 5e-10 || tb.X[52] != 700.158 {
			t.Errorf("%s: %d points, sum %g, x[1] %.9f", name, len(tb.Y), sum, tb.X[1])
		}
	}
}

// Table VIIb of the same paper: 1 2 3 3 2 1 0 -1 -2 -3 in every form.
func TestPublishedForms(t *testing.T) {
	want := []float64{1, 2, 3, 3, 2, 1, 0, -1, -2, -3}
	for _, c := range []struct {
		line  string
		forms Forms
	}{
		{"400+1+2+3+3+2+1+0-1-2-3\n", AFFN},
		{"400 1 2 3 3 2 1 0-1-2-3\n", AFFN},
		{"400 1BCCBA@abc\n", AFFN | SQZ},
		{"400ABCCBA@abc\n", SQZ},
		{"400 1JJ%jjjjjj\n409c\n", AFFN | SQZ | DIF},
		{"400 1JT%jX\n409c\n", AFFN | SQZ | DIF | DUP},
	} {
		tb := decodeOne(t, spectrum("1", "1", "400", "409", 10, c.line))
		if len(tb.Y) != 10 || tb.Forms != c.forms {
			t.Errorf("%q: %d ordinates, forms %b", c.line, len(tb.Y), tb.Forms)
			continue
		}
		for i, v := range tb.Y {
			if v != want[i] {
				t.Errorf("%q: ordinate %d is %g, expected %g", c.line, i, v, want[i])
			}
		}
	}
}

// Rules that readers get wrong, each on a table of a few ordinates from 400 on.
func TestRulesOfTheForms(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		name, table string
		want        []float64
		found       string // of the refusal where want is nil
	}{
		{"repeat of an actual ordinate", "400 50V\n", []float64{50, 50, 50, 50}, ""},
		{"repeat of a difference counts differences", "400E0%U\n403E0\n", []float64{50, 50, 50, 50}, ""},
		{"a count behind a check ordinate repeats that ordinate", "400A655J1\n401A666TL1\n403A697\n", []float64{1655, 1666, 1666, 1697}, ""},
		{"a check ordinate is no point", "400AJ\n401BJ\n402C\n", []float64{1, 2, 3}, ""},
		{"the last check line may be absent", "400AJJ\n", []float64{1, 2, 3}, ""},
		{"missing ordinates count", "400A?C?T\n", []float64{1, nan, 3, nan, nan}, ""},
		{"after a gap an actual ordinate", "400AJ?B\n404C\n", []float64{1, 2, nan, 2, 3}, ""},
		{"exponent with its sign", "400 1.5E+01 2e-1\n", []float64{15, 0.2}, ""},
		{"E without a sign is a five", "400E1e2 3E1\n", []float64{51, -52, 3, 51}, ""},
		{"decimals behind a first digit", "400A.25j.5\n401a.25\n", nil, "check ordinate -1.25"},
		{"decimals add up", "400A.25j.5\n401@.75\n", nil, "check ordinate 0.75"},
		{"decimals in differences", "400A.25k.5\n401a.25\n", []float64{1.25, -1.25}, ""},
		{"comment inside a line", "400 1 $$ 2 3\n401 4\n", []float64{1, 4}, ""},
		{"comma ends a number", "400 1,2,3\n", []float64{1, 2, 3}, ""},
		{"wrong check ordinate", "400AJJ\n402DJ\n403E\n", nil, "check ordinate 4"},
		{"no check ordinate", "400AJJ\n403JJ\n", nil, "a difference"},
		{"difference at the start", "400JJ\n", nil, "a difference"},
		{"difference after a gap", "400A?J\n", nil, "a difference"},
		{"count at the start", "400T\n", nil, "a repeat count"},
		{"count after a count", "400ATT\n", nil, "a repeat count after a repeat count"},
		{"exponent of a squeezed number", "400A1E+05\n", nil, "E+"},
		{"squeezed five before a sign", "400 1 E+5\n", nil, "E+5"},
		{"more digits than exact", "400A999999999999999\n", nil, "A9999"},
		{"letters", "400 1 x2\n", nil, "x2"},
		{"no abscissa", "A400\n", nil, "A400"},
		{"abscissa alone", "400 1\n401\n", nil, "an abscissa alone"},
		{"lost line", "400.0 1 2\n404.0 5 6\n406.0 7 8\n408.0 1 2\n411.0 1\n", nil, "abscissa 4"},
	} {
		n := len(c.want)
		if c.want == nil {
			n = 9
			if strings.Contains(c.name, "decimals") {
				n = 2
			}
		}
		text := spectrum("1", "1", "400", fmt.Sprint(400+n-1), n, c.table)
		f, err := Decode("t", []byte(text), parse.Options{})
		if err != nil {
			t.Fatal(err)
		}
		tb := &f.Blocks[0].Tables[0]
		if c.want == nil {
			if tb.Err == nil || !strings.Contains(tb.Err.Error(), "found") || !strings.Contains(tb.Err.Error(), c.found) || !strings.Contains(tb.Err.Error(), "t:1") {
				t.Errorf("%s: %v, expected a refusal of %q with its line", c.name, tb.Err, c.found)
			}
			continue
		}
		if tb.Err != nil || len(tb.Y) != n {
			t.Errorf("%s: %v, %v", c.name, tb.Y, tb.Err)
			continue
		}
		for i, v := range tb.Y {
			if !same64(v, c.want[i]) {
				t.Errorf("%s: %v, expected %v", c.name, tb.Y, c.want)
				break
			}
		}
	}
}

// The scanner of plain numbers agrees with the exact one of package parse.
func FuzzPlain(f *testing.F) {
	for _, s := range []string{"1", "-12.5", "+.5", "1.5E-05", "123456789012345678", "0.1000000000000000055", "1e5", "12E", "1.", "9007199254740993"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		v, dec, end := plain([]byte(s), 0, '.')
		if end == 0 {
			return
		}
		w, d, ok := parse.Float([]byte(s[:end]), '.')
		if !ok || w != v || d != dec {
			t.Fatalf("%q: %v with %d decimals, expected %v with %d", s[:end], v, dec, w, d)
		}
	})
}
