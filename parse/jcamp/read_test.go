package jcamp

import (
	"errors"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"pkvigil/parse"
)

func readFile(t *testing.T, name string) *parse.Content {
	t.Helper()
	data, err := os.ReadFile(filepath.Join("testdata", name))
	if err != nil {
		t.Fatal(err)
	}
	c, err := Read(name, data, parse.Options{Zone: time.FixedZone("", 3600)})
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func remarked(c *parse.Content, part string) bool {
	for _, r := range c.Remarks {
		if strings.Contains(r.Text, part) {
			return true
		}
	}
	return false
}

func closeTo(a, b float64) bool { return math.Abs(a-b) <= 1e-12*max(1, math.Abs(b)) }

func TestPlainFile(t *testing.T) {
	c := readFile(t, "plain.jdx")
	s := c.Scans[0]
	if !c.Complete || c.Format != "jcamp-dx" || c.Encoding != "utf-8" || len(c.Scans) != 1 || len(c.Remarks) != 0 {
		t.Errorf("%+v", c)
	}
	if s.Label != "Larch blue 3, rung 4" || s.PathMM != 10 || s.TemperatureC != 25.1 || s.BandwidthNM != 2 || s.PH != 6.48 || s.Decimals != 4 || s.Scale != "absorbance" || s.Instrument != "QW photometer 2" {
		t.Errorf("%+v", s)
	}
	if want := time.Date(2026, 3, 9, 20, 14, 5, 0, time.UTC); !s.Measured.Equal(want) || !s.Zoned {
		t.Errorf("measured %s, zoned %v", s.Measured, s.Zoned)
	}
	if n := len(s.Absorbance); n != 21 || s.WavelengthNM[20] != 420 || !closeTo(s.Absorbance[20], 0.3011) || !closeTo(s.WavelengthNM[7], 407) {
		t.Errorf("%v %v", s.WavelengthNM, s.Absorbance)
	}
	lot := false
	for _, f := range s.Meta {
		lot = lot || f == (parse.Field{Key: "$LOT", Value: "LB-0317"})
		if f.Key == "FIRSTX" || f.Key == "XUNITS" {
			t.Errorf("parameter of the table among the facts: %v", f)
		}
	}
	if !lot {
		t.Errorf("the user label is not kept: %v", s.Meta)
	}
}

func TestLinkedFile(t *testing.T) {
	c := readFile(t, "linked.jdx")
	if len(c.Scans) != 2 || !remarked(c, `"INFRARED SPECTRUM" left out`) || !c.Complete {
		t.Fatalf("%d scans, %v", len(c.Scans), c.Remarks)
	}
	s := c.Scans[0] // wavenumbers 20000..25000 are 500..400 nm
	if s.WavelengthNM[0] != 400 || s.WavelengthNM[5] != 500 || !closeTo(s.Absorbance[0], -math.Log10(0.96)) || !math.IsNaN(s.Absorbance[4]) || s.Scale != "transmittance" {
		t.Errorf("%v %v %s", s.WavelengthNM, s.Absorbance, s.Scale)
	}
	if want := time.Date(2026, 3, 9, 20, 14, 5, 0, time.UTC); !s.Measured.Equal(want) || s.Zoned {
		t.Errorf("measured %s", s.Measured)
	}
	s = c.Scans[1]
	if s.PH != 7.41 || s.Scale != "percent transmittance" || !closeTo(s.WavelengthNM[3], 700) || !closeTo(s.Absorbance[2], -math.Log10(0.5)) || !math.IsNaN(s.Absorbance[0]) || !math.IsNaN(s.Absorbance[1]) {
		t.Errorf("%v %v pH %g", s.WavelengthNM, s.Absorbance, s.PH)
	}
	if !remarked(c, "1 transmittances of zero or below") || !remarked(c, "not in the order of the standard") || s.Measured.Day() != 28 || s.Measured.Month() != time.August {
		t.Errorf("%v, measured %s", c.Remarks, s.Measured)
	}
}

func TestPages(t *testing.T) {
	c := readFile(t, "pages.dx")
	if len(c.Scans) != 3 || c.Scans[0].Label != "Kinetics T=0" || c.Scans[2].Label != "Kinetics pH= 7.25" || c.Scans[2].PH != 7.25 || !math.IsNaN(c.Scans[1].PH) {
		t.Fatalf("%+v", c.Scans)
	}
	a, b, p := c.Scans[0], c.Scans[1], c.Scans[2]
	if len(a.Absorbance) != 5 || a.WavelengthNM[0] != 498 || !closeTo(a.Absorbance[4], 0.1) || !closeTo(a.Absorbance[3], 0.11) || !closeTo(a.Absorbance[0], 0.11) {
		t.Errorf("%v %v", a.WavelengthNM, a.Absorbance)
	}
	if len(b.Absorbance) != 3 || b.WavelengthNM[0] != 499 || !closeTo(b.Absorbance[0], 0.101) {
		t.Errorf("%v %v", b.WavelengthNM, b.Absorbance)
	}
	if len(p.Absorbance) != 3 || p.WavelengthNM[1] != 499.5 || !closeTo(p.Absorbance[1], 0.095) {
		t.Errorf("%v %v", p.WavelengthNM, p.Absorbance)
	}
}

func TestCommasAndRows(t *testing.T) {
	c := readFile(t, "commas.jdx")
	s := c.Scans[0]
	if len(s.Absorbance) != 5 || s.WavelengthNM[1] != 401 || !closeTo(s.Absorbance[4], 0.1055) || !remarked(c, "decimal commas") || !remarked(c, "closing parenthesis") || !remarked(c, "counted from 1900") || s.Measured.Year() != 2017 || s.Decimals != 4 {
		t.Errorf("%+v %v", s, c.Remarks)
	}
	c = readFile(t, "row.jdx")
	if s = c.Scans[0]; len(c.Scans) != 1 || s.WavelengthNM[1] != 401 || !remarked(c, "one after another") {
		t.Errorf("%+v %v", s, c.Remarks)
	}
}

// The same text in another encoding reads the same.
func TestEncodings(t *testing.T) {
	wide := []byte{0xFF, 0xFE}
	for _, c := range []byte(sound) {
		wide = append(wide, c, 0)
	}
	for enc, data := range map[string][]byte{"utf-16le": wide, "utf-8": append([]byte("\xEF\xBB\xBF"), sound...)} {
		c, err := Read("t", data, parse.Options{})
		if err != nil || c.Encoding != enc || !closeTo(c.Scans[0].Absorbance[5], 0.6) || !c.Complete {
			t.Errorf("%s: %v, %v", enc, c, err)
		}
	}
	if _, err := Read("t", wide[:len(wide)-1], parse.Options{}); err == nil {
		t.Error("half a character at the end is accepted")
	}
	if _, err := Read("t", []byte(sound), parse.Options{MaxBytes: 100}); err == nil {
		t.Error("a file above the limit is accepted")
	}
}

const sound = "##TITLE= t\n##DATA TYPE= UV/VIS SPECTRUM\n##XUNITS= NANOMETERS\n##YUNITS= ABSORBANCE\n##XFACTOR= 1\n##YFACTOR= 0.01\n##FIRSTX= 400\n##LASTX= 405\n##NPOINTS= 6\n##XYDATA= (X++(Y..Y))\n400 10 20 30\n403 40 50 60\n##END=\n"

// Each deviation from the published text is refused with line and reason, or
// accepted with a remark.
func TestDeviations(t *testing.T) {
	for _, c := range []struct {
		name, old, with string
		refused         string // part of the refusal; "" when accepted
		line            int
		remark          string
	}{
		{"nothing", "", "", "", 0, ""},
		{"no title", "##TITLE= t\n", "", "##TITLE= as the first record", 1, ""},
		{"other kind", "UV/VIS SPECTRUM", "RAMAN SPECTRUM", "RAMAN SPECTRUM", 2, ""},
		{"fluorescence", "UV/VIS SPECTRUM", "FL SPECTRUM", "FL SPECTRUM", 2, ""},
		{"no kind, optical units", "##DATA TYPE= UV/VIS SPECTRUM\n", "", "", 0, "no DATA TYPE"},
		{"unknown abscissa", "NANOMETERS", "X UNITS", "X UNITS", 3, ""},
		{"unit that does not fit", "NANOMETERS", "MICROMETERS", "do", 3, ""},
		{"unknown ordinate", "ABSORBANCE", "ARBITRARY UNITS", "ARBITRARY UNITS", 4, ""},
		{"counts called absorbance", "0.01", "100", "median", 4, ""},
		{"percents called transmittance", "ABSORBANCE\n##XFACTOR= 1\n##YFACTOR= 0.01", "TRANSMITTANCE\n##XFACTOR= 1\n##YFACTOR= 1", "", 0, "can only be percents"},
		{"fractions called percents", "ABSORBANCE", "%T", "fractions", 4, ""},
		{"count too high", "NPOINTS= 6", "NPOINTS= 7", "6 points", 12, ""},
		{"count too low", "NPOINTS= 6", "NPOINTS= 5", "6 or more ordinates", 12, ""},
		{"count not whole", "NPOINTS= 6", "NPOINTS= 5.5", "a whole number", 9, ""},
		{"count with decimals", "NPOINTS= 6", "NPOINTS= 6.000", "", 0, ""},
		{"no count", "##NPOINTS= 6\n", "", "", 0, "no NPOINTS"},
		{"no last abscissa", "##LASTX= 405\n", "##DELTAX= 1\n", "the last abscissa", 10, ""},
		{"no abscissa at all", "##FIRSTX= 400\n##LASTX= 405\n", "", "first and last abscissa", 8, ""},
		{"no factors", "##XFACTOR= 1\n##YFACTOR= 0.01\n", "", "median", 4, ""},
		{"factor zero", "YFACTOR= 0.01", "YFACTOR= 0", "a factor of 0", 10, ""},
		{"factor no number", "YFACTOR= 0.01", "YFACTOR= 0. 01", "one number", 6, ""},
		{"factor with comment", "YFACTOR= 0.01", "YFACTOR= 1E-002 $$ so", "", 0, ""},
		{"two factors", "##FIRSTX= 400\n", "##FIRSTX= 400\n##YFACTOR= 0.1\n", "a second, different value", 8, ""},
		{"same factor twice", "##FIRSTX= 400\n", "##FIRSTX= 400\n##YFACTOR= 0.01\n", "", 0, ""},
		{"factor behind the table", "##END=", "##YFACTOR= 0.1\n##END=", "after the table", 13, ""},
		{"two owners", "##FIRSTX= 400\n", "##OWNER= a\n##OWNER= b\n##FIRSTX= 400\n", "", 0, "OWNER repeated"},
		{"one decimal comma", "FIRSTX= 400", "FIRSTX= 400,0", "mixes decimal signs", 7, ""},
		{"column of another scale", "400 10 20 30\n403", "0.4 10 20 30\n0.403", "disagree about the abscissa", 12, ""},
		{"lines exchanged", "400 10 20 30\n403 40 50 60", "403.0 40 50 60\n400.0 10 20 30", "abscissa", 11, ""},
		{"extremes of another scale", "##FIRSTX", "##MAXY= 60\n##MINY= 10\n##FIRSTX", "scale of the ordinates", 7, ""},
		{"one extreme wrong", "##FIRSTX", "##MAXY= 60\n##FIRSTX", "", 0, "MAXY says 60"},
		{"first ordinate of the last", "##FIRSTX", "##FIRSTY= 0.6\n##FIRSTX", "", 0, "FIRSTY says 0.6"},
		{"number on the label line", "(X++(Y..Y))", "(X++(Y..Y)) 400 10", "alone on the line", 10, ""},
		{"unknown list", "(X++(Y..Y))", "(XY;XY)", "published variable list", 10, ""},
		{"other symbols", "(X++(Y..Y))", "(X++(R..R))", "published variable list", 10, ""},
		{"no list", "(X++(Y..Y))", "", "", 0, "no variable list"},
		{"list not closed", "(X++(Y..Y))", "(X++(Y..Y)", "", 0, "closing parenthesis"},
		{"foreign bytes", "403 40", "403 4x0", "x0", 12, ""},
		{"line without label", "##XUNITS", "##ABC\n##XUNITS", "##LABEL= value", 3, ""},
		{"end without equals", "##END=", "##END", "", 0, "without its equals sign"},
		{"no end", "##END=\n", "", "", 0, "is missing"},
		{"cut within the last line", "\n##END=\n", "", "within a line", 12, ""},
		{"cut in the header", sound[strings.Index(sound, "##XFACTOR"):], "", "inside a block without a table", 4, ""},
		{"end twice", "##END=\n", "##END=\n##END=\n", "without a ##TITLE=", 14, ""},
		{"text behind the end", "##END=\n", "##END=\nhello\n", "", 0, "left out"},
		{"control-Z behind the end", "##END=\n", "##END=\n\x1a", "", 0, ""},
		{"stray byte before the title", "##TITLE= t", "I##TITLE= t", "", 0, "stray characters"},
		{"text before the title", "##TITLE= t", "exported by hand\n##TITLE= t", "##TITLE= as the first record", 1, ""},
		{"only descriptions", sound[strings.Index(sound, "##XUNITS"):], "##END=\n", "no table of data", 0, ""},
		{"empty table", "400 10 20 30\n403 40 50 60\n", "", "an empty table", 10, ""},
		{"page outside a section", "##XYDATA= (X", "##DATA TABLE= (X", "outside NTUPLES", 10, ""},
		{"bandwidth in another way", "##XUNITS", "##RESOLUTION= 2,400; 4,700\n##XUNITS", "", 0, "no single width"},
		{"long line", "##XUNITS", "##OWNER= " + strings.Repeat("o", 90) + "\n##XUNITS", "", 0, "a line of 99 characters"},
		{"windows characters", "##XUNITS", "##OWNER= M\xfcller\n##XUNITS", "", 0, "read as windows-1252"},
		{"wrong class", "##XUNITS", "##DATA CLASS= NTUPLES\n##XUNITS", "", 0, "DATA CLASS says"},
		{"negative factors", "0.01\n##FIRSTX= 400\n##LASTX= 405", "-0.01\n##FIRSTX= -400\n##LASTX= -405", "disagree about the abscissa", 12, ""},
		{"negative ordinate factor", "0.01\n##FIRSTX= 400\n##LASTX= 405\n##NPOINTS= 6\n##XYDATA= (X++(Y..Y))\n400 10 20 30\n403 40 50 60", "-0.01\n##FIRSTX= 400\n##LASTX= 405\n##NPOINTS= 6\n##XYDATA= (X++(Y..Y))\n400-10-20-30\n403-40-50-60", "", 0, "a negative factor"},
		{"several pH", "##XUNITS", "##$PH= 7\n##.SOLVENT NAME= pH 8\n##XUNITS", "", 0, "several values of pH"},
		{"ambiguous date", "##XUNITS", "##DATE= 05/06/2018\n##TIME= 10:00\n##XUNITS", "", 0, "cannot be told apart"},
		{"NUL", "t\n", "\x00\n", "NUL", 1, ""},
	} {
		text := strings.Replace(sound, c.old, c.with, 1)
		got, err := Read("t", []byte(text), parse.Options{})
		if c.refused != "" {
			var e *parse.Error
			if !errors.As(err, &e) || !strings.Contains(e.Error(), c.refused) || e.Line != c.line {
				t.Errorf("%s: %v, expected a refusal of %q on line %d", c.name, err, c.refused, c.line)
			}
			continue
		}
		if err != nil || len(got.Scans[0].Absorbance) != 6 {
			t.Errorf("%s: %v", c.name, err)
			continue
		}
		if s := got.Scans[0]; s.Scale == "absorbance" && !closeTo(s.Absorbance[5], 0.6) {
			t.Errorf("%s: %v", c.name, s.Absorbance)
		}
		if c.remark == "" && len(got.Remarks) > 0 || c.remark != "" && !remarked(got, c.remark) {
			t.Errorf("%s: remarks %v, expected %q", c.name, got.Remarks, c.remark)
		}
	}
}

func TestMoments(t *testing.T) {
	zone := time.FixedZone("", 3600)
	for _, c := range []struct {
		date, clock, want string // "" for none
		zoned             bool
	}{
		{"02/07/10", "09:26:13.00", "2002-07-10T09:26:13+01:00", false},
		{"95/11/30", "16:33", "1995-11-30T16:33:00+01:00", false},
		{"2016/11/22", "10:16:17", "2016-11-22T10:16:17+01:00", false},
		{"2012/02/18 12:31:56.0440 -0500", "", "2012-02-18T12:31:56.044-05:00", true},
		{"2021/03/02 14:25:40-0700", "", "2021-03-02T14:25:40-07:00", true},
		{"1997/08/29  16:47:44.00  +0500", "", "1997-08-29T16:47:44+05:00", true},
		{"09 Jul 2021 16:12:23 (GMT+02:00)", "", "2021-07-09T16:12:23+02:00", true},
		{"26 Mar 2004 08:23:52", "", "2004-03-26T08:23:52+01:00", false},
		{"Mon Feb 01 15:24:11 2021", "", "2021-02-01T15:24:11+01:00", false},
		{"16:32:23, 10/16/2018", "", "2018-10-16T16:32:23+01:00", false},
		{"28/8/2023", "11:05", "2023-08-28T11:05:00+01:00", false},
		{"117/08/16", "16:52:36", "2017-08-16T16:52:36+01:00", false},
		{"03/30/90", "10:47:11", "1990-03-30T10:47:11+01:00", false},
		{"2026-03-09T21:14:05Z", "", "2026-03-09T21:14:05Z", true},
		{"3/14/2024 1:05:09 PM", "", "2024-03-14T13:05:09+01:00", false},
		{"05/06/2018", "10:00", "", false},
		{"March 2017", "10:00", "", false},
		{"1964", "", "", false},
		{"2024/02/30", "10:00", "", false},
		{"2024/02/20", "25:00", "", false},
		{"2024/02/20", "", "", false},
	} {
		got, zoned, why := when(c.date, c.clock, zone)
		if c.want == "" {
			if !got.IsZero() || why == "" {
				t.Errorf("%q %q: %s, expected none with a reason", c.date, c.clock, got)
			}
			continue
		}
		want, err := time.Parse(time.RFC3339Nano, c.want)
		if err != nil {
			t.Fatal(err)
		}
		if !got.Equal(want) || zoned != c.zoned {
			t.Errorf("%q %q: %s zoned %v (%s), expected %s", c.date, c.clock, got, zoned, why, c.want)
		}
	}
}

func TestQuantities(t *testing.T) {
	for text, want := range map[string]float64{"1": 10, "1.0 cm": 10, "10 mm": 10, "0,2 cm": 2, "(0.5 CM)": 0, "500 um": 0.5, "ten": 0, "-1": 0, "1 inch": 0} {
		if got, _ := pathLength(text); !closeTo(got, want) {
			t.Errorf("path length %q is %g mm, expected %g", text, got, want)
		}
	}
	for text, want := range map[string]float64{"25": 25, "298.15 K": 25, "25,5 °C": 25.5, "20 C": 20, "warm": 0, "77 F": 0} {
		if got, _ := temperature(text); !closeTo(got, want) {
			t.Errorf("temperature %q is %g, expected %g", text, got, want)
		}
	}
	for _, c := range []struct {
		text, units string
		want        float64
	}{{"2", "NANOMETERS", 2}, {"2 nm", "1/CM", 2}, {"4", "1/CM", 0}, {"20", "ANGSTROMS", 2}, {"0.002", "MICROMETERS", 2}, {"1,400; 2,700", "NANOMETERS", 0}} {
		if got, _ := bandwidth(c.text, c.units); !closeTo(got, c.want) {
			t.Errorf("resolution %q in %s is %g nm, expected %g", c.text, c.units, got, c.want)
		}
	}
}
