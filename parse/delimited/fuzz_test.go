package delimited

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"slices"
	"strings"
	"testing"
	"time"
	"unicode"

	"pkvigil/parse"
)

// readBack is the property of every fuzz target: input is refused with an
// error that can be shown, or what was read, written canonically, reads the
// same; and what is kept cannot steer a terminal.
func readBack(t *testing.T, data []byte, opt parse.Options) {
	t.Helper()
	opt.MaxBytes = 1 << 20
	c, err := Read("fuzz", data, opt)
	if err != nil {
		e, ok := errors.AsType[*parse.Error](err)
		if !ok || e.File != "fuzz" {
			t.Fatalf("%v is no *parse.Error of the file", err)
		}
		harmless(t, err.Error())
		return
	}
	for _, m := range c.Remarks {
		harmless(t, m.Text)
	}
	for _, s := range c.Scans {
		sane(t, s)
		if len(s.WavelengthNM) < leastPoints {
			return // only a declared layout reads so few
		}
	}
	var out bytes.Buffer
	if err := Write(&out, c, opt.Zone); err != nil {
		t.Fatal(err)
	}
	opt.Layouts = nil
	opt.MaxBytes = 0
	opt.Role = roleOf(c.Format)
	again, err := Read("fuzz", out.Bytes(), opt)
	if err != nil {
		t.Fatalf("written back it is refused: %v\n%s", err, out.Bytes())
	}
	if d := difference(c, again); d != "" {
		t.Fatalf("written back it differs: %s\n%s", d, out.Bytes())
	}
}

func roleOf(format string) string {
	switch {
	case format == "delimited":
		return "scan"
	case strings.HasPrefix(format, "ph"):
		return "ph"
	}
	return format
}

func harmless(t *testing.T, s string) {
	t.Helper()
	for _, r := range s {
		if r != ' ' && !unicode.IsPrint(r) {
			t.Fatalf("%q holds %q", s, r)
		}
	}
}

func sane(t *testing.T, s parse.Scan) {
	t.Helper()
	harmless(t, s.Label)
	if len(s.WavelengthNM) != len(s.Absorbance) || len(s.WavelengthNM) < leastDeclared {
		t.Fatalf("%d wavelengths, %d absorbances", len(s.WavelengthNM), len(s.Absorbance))
	}
	for i, x := range s.WavelengthNM {
		if !(x >= 100 && x <= 4000) || i > 0 && !(x > s.WavelengthNM[i-1]) {
			t.Fatalf("wavelengths %v", s.WavelengthNM)
		}
		if math.Abs(s.Absorbance[i]) > tooHigh {
			t.Fatalf("absorbance %g", s.Absorbance[i])
		}
	}
	for _, f := range s.Meta {
		harmless(t, f.Key+f.Value)
	}
}

// difference compares what Write keeps.
func difference(a, b *parse.Content) string {
	strip := func(c *parse.Content) string {
		var o strings.Builder
		at := func(t time.Time, zoned bool) string { return fmt.Sprint(t.UnixNano(), zoned) }
		for _, s := range c.Scans {
			fmt.Fprintln(&o, "scan", s.Label, at(s.Measured, s.Zoned && !s.Measured.IsZero()), s.PathMM, s.TemperatureC, s.BandwidthNM, s.Instrument, s.PH, s.WavelengthNM, s.Absorbance)
		}
		for _, p := range c.Readings {
			fmt.Fprintln(&o, "reading", p.Label, p.PH, p.MilliVolt, p.TemperatureC, p.SD, p.SlopePerMin, p.Points, at(p.Measured, p.Zoned && !p.Measured.IsZero()), p.Electrode, p.Meter)
		}
		for _, k := range c.Calibrations {
			fmt.Fprintln(&o, "calibration", k.Electrode, k.Meter, at(k.Measured, k.Zoned && !k.Measured.IsZero()))
			for _, p := range k.Points {
				fmt.Fprintln(&o, "point", p.Lot, p.PH, p.MilliVolt, p.TemperatureC)
			}
		}
		for _, r := range c.Sheet {
			r.Line = 0
			r.Other = slices.SortedStableFunc(slices.Values(r.Other), func(a, b parse.Field) int { return strings.Compare(a.Key, b.Key) })
			fmt.Fprintf(&o, "row %+v\n", r)
		}
		for _, e := range c.Events {
			e.Line = 0
			fmt.Fprintln(&o, "event", at(e.At, e.Zoned), e.Kind, e.Resource, e.Instrument, e.Text, e.By)
		}
		for _, p := range c.Plan {
			p.Line = 0
			fmt.Fprintf(&o, "plan %+v\n", p)
		}
		return o.String()
	}
	x, y := strip(a), strip(b)
	if x == y {
		return ""
	}
	xs, ys := strings.Split(x, "\n"), strings.Split(y, "\n")
	for i := range xs {
		if i >= len(ys) || xs[i] != ys[i] {
			other := ""
			if i < len(ys) {
				other = ys[i]
			}
			return fmt.Sprintf("%.600q became %.600q", xs[i], other)
		}
	}
	return fmt.Sprintf("%d lines became %d", len(xs), len(ys))
}

func FuzzDelimited(f *testing.F) {
	plain := "Wavelength (nm),Absorbance\n"
	for _, s := range []string{
		spectrum(head+plain, "%.1f,%.5f", 8, band), comma(spectrum("nm;Abs\n", "%.1f;%.5f", 8, band)), spectrum("Wavelength (nm)\t%T\n", "%.1f\t%.3f", 8, percent),
		comma(spectrum(plain, "%.1f,%.3f", 8, band)), spectrum("Points,9\nMode,Absorbance\nnm,S1,S2\n", "%.0f,%.3f,0.25", 8, band),
		spectrum("QX r01,,QX r02,\nWavelength (nm),Abs,Wavelength (nm),Abs\n", "%.1f,%.5f,500,0.2", 1, band) + "402,0.1,502,0.2\n404,0.2,504,0.3\n406,0.2,506,0.3\n408,0.2,508,0.3\n",
		"Mode\tAbsorbance\nSample\t400\t402\t404\t406\t408\t410\t412\t414\t416\t418\t420\nS1\t1\t2\t3\t4\t5\t6\t7\t8\t9\t1\t2\n",
		"Sample;pH;Wavelength (nm);Absorbance\nS1;7;400;0.1\nS1;7;402;0.2\nS1;7;404;0.2\nS1;7;406;0.2\nS1;7;408;0.1\n",
		"cm-1;A\n25000;****\n24900;0.1\n24800;3.000\n24700;3.000\n24600;3.000\n24500;9.999\n",
		"Measured: 2026-10-25T02:30:00\nTemperature: 25,1 °C\nPath: 1 cm\nnm Abs\n400 1,0\n401 1,1\n402 1,2\n403 1,3\n404 1,4\n",
		"\xFF\xFEn\x00m\x00;\x00A\x00\n\x00",
	} {
		f.Add([]byte(s), "")
		f.Add([]byte(s), "scan")
	}
	f.Fuzz(func(t *testing.T, data []byte, role string) {
		if role != "scan" && role != "blank" {
			role = ""
		}
		readBack(t, data, parse.Options{Role: role})
		readBack(t, data, parse.Options{Role: "scan", Layouts: []parse.Layout{{Name: "x", Abscissa: "nm", Ordinate: "absorbance", Overflow: []string{"0"}}}})
	})
}

func FuzzPH(f *testing.F) {
	for _, s := range []string{ladder(phHead, asIs), "time (s),pH\n0,7\n10,7\n20,7\n30,7\n40,7.001\n", "7.41\n", "pH: 7,41\nTemperature: 25 °C\nDate: 11.03.2026 21:45\n",
		"rung;pH;mV;sd;points\n1;07. Apr;3;;\n2;7,4;4;0,001;8\n3;7,6;-4;;\n", "read at;pH\n2026-03-11 21:00:00;6.21\n2026-03-11 21:12:00;6.57\n2026-03-11 21:25:00;6.93\n",
		"rung,time (min),pH,electrode\na,0,7,E\na,0.5,7,E\na,1,7,E\nb,0,8,E\nb,0.5,8,E\nb,1,8,E\n"} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, data []byte) { readBack(t, data, parse.Options{Role: "ph"}) })
}

func FuzzCalibration(f *testing.F) {
	f.Add([]byte("Electrode, E-31\nMeter, M-3\nCalibrated, 2026-03-09T17:20:00\nbuffer lot,pH,mV,temperature (C)\nCB-198,4.005,175.31,25.0\nCB-199,6.865,6.92,25.0\n"))
	f.Add([]byte("electrode;calibrated;Puffer;Sollwert;E (V)\nE;2026-03-09 17:20;a;4,005;0,1753\nE;2026-03-09 17:30;b;6,865;0,0069\n"))
	f.Fuzz(func(t *testing.T, data []byte) { readBack(t, data, parse.Options{Role: "calibration"}) })
}

func FuzzSheet(f *testing.F) {
	f.Add([]byte("position,set,rung,role,compound,lot,dilution,ionic strength (mol/L),buffer,cosolvent,cosolvent %,pH,shelf\nA01,Q,01,,c,l,2,0.1,T,m,40,8.1,\"a,\nb\"\n"), 0)
	f.Add([]byte("at,kind,resource,instrument,text,by\n2026-03-11T09:00:00,lamp,L-7,U1,\"changed, \"\"new\"\"\",A. Weld\n"), 1)
	f.Add([]byte("night,instrument,set,compound,slot\n2026-03-11,U1,RI-A_n041,RI-A,open\n"), 2)
	f.Fuzz(func(t *testing.T, data []byte, kind int) {
		readBack(t, data, parse.Options{Role: [...]string{"sheet", "events", "plan"}[uint(kind)%3]})
	})
}
