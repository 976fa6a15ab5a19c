package jcamp

import (
	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"pkvigil/parse"
)

// seeds are the invented files of testdata.
func seeds(f *testing.F) {
	paths, err := filepath.Glob("testdata/*.*dx")
	if err != nil || len(paths) == 0 {
		f.Fatalf("no seeds: %v", err)
	}
	for _, p := range paths {
		b, err := os.ReadFile(p)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(b)
	}
}

// A file that decodes, written back canonically in both forms, reads the same.
func FuzzDecode(f *testing.F) {
	seeds(f)
	f.Fuzz(func(t *testing.T, data []byte) {
		d, err := Decode("f", data, parse.Options{})
		if err != nil || !whole(d) {
			return
		}
		points := 0
		for i := range d.Blocks {
			for j := range d.Blocks[i].Tables {
				points += len(d.Blocks[i].Tables[j].Y)
			}
		}
		if points > 1<<20+4*len(data) {
			t.Fatalf("%d points from %d bytes", points, len(data))
		}
		if points > 1<<14 {
			return // legal, but slow to write out
		}
		roundTrip(t, d)
	})
}

// Scans obey what records promise, and read the same from the canonical file.
func FuzzRead(f *testing.F) {
	seeds(f)
	f.Fuzz(func(t *testing.T, data []byte) {
		c, err := Read("f", data, parse.Options{})
		if err != nil {
			return
		}
		d, err := Decode("f", data, parse.Options{})
		if err != nil {
			t.Fatalf("read but not decoded: %v", err)
		}
		for i := range c.Scans {
			s := &c.Scans[i]
			if len(s.WavelengthNM) != len(s.Absorbance) || len(s.WavelengthNM) == 0 {
				t.Fatalf("%d wavelengths, %d absorbances", len(s.WavelengthNM), len(s.Absorbance))
			}
			for j, x := range s.WavelengthNM {
				if !(x >= 50 && x <= 20000) || j > 0 && x <= s.WavelengthNM[j-1] || math.IsInf(s.Absorbance[j], 0) {
					t.Fatalf("point %d: %g nm, %g", j, x, s.Absorbance[j])
				}
			}
			if s.PathMM < 0 || s.BandwidthNM < 0 || math.IsInf(s.PathMM, 0) {
				t.Fatalf("path %g mm, bandwidth %g nm", s.PathMM, s.BandwidthNM)
			}
		}
		text, err := Append(nil, d, DIF)
		if err != nil {
			t.Fatal(err)
		}
		again, err := Read("again", text, parse.Options{})
		if err != nil {
			t.Fatalf("%v\n%.3000s", err, text)
		}
		if len(again.Scans) != len(c.Scans) {
			t.Fatalf("%d scans, then %d", len(c.Scans), len(again.Scans))
		}
		for i := range c.Scans {
			if a, b := &c.Scans[i], &again.Scans[i]; a.Label != b.Label || !slices.Equal(a.WavelengthNM, b.WavelengthNM) || a.Scale != b.Scale || !slices.Equal(a.Meta, b.Meta) ||
				a.PathMM != b.PathMM || !same64(a.PH, b.PH) || !same64(a.TemperatureC, b.TemperatureC) || a.BandwidthNM != b.BandwidthNM || !a.Measured.Equal(b.Measured) ||
				!slices.EqualFunc(a.Absorbance, b.Absorbance, same64) {
				t.Fatalf("%+v\n%+v", a, b)
			}
		}
	})
}

func same64(a, b float64) bool { return a == b || a != a && b != b }

// FuzzTable puts text below an otherwise sound header, where most of what can
// go wrong happens.
func FuzzTable(f *testing.F) {
	for _, s := range []string{"400@VKT%TLkj\n410A2\n", "400 1 2 3 4\n404 5 6 7 8 9\n", "400+1-2+3\n403?B%T\n", "400A.5j.5\n401A\n", "400 1.5E-05 2,3\n", "400E5e5\n"} {
		f.Add(s, uint8(0), uint16(11))
	}
	f.Add("400, 1; 401, 2\n402 3 403, ?", uint8(1), uint16(4))
	f.Fuzz(func(t *testing.T, table string, kind uint8, n uint16) {
		list := "##XYDATA= (X++(Y..Y))"
		if kind&1 == 1 {
			list = "##XYPOINTS= (XY..XY)"
		}
		head := "##TITLE= t\n##DATA TYPE= UV/VIS SPECTRUM\n##XUNITS= NANOMETERS\n##YUNITS= ABSORBANCE\n##XFACTOR= 1\n##YFACTOR= 0.001\n##FIRSTX= 400\n"
		if kind&2 == 0 {
			head += "##NPOINTS= " + number(float64(n)) + "\n"
		}
		if kind&4 == 0 {
			head += "##LASTX= " + number(399+float64(n)) + "\n"
		} else {
			head += "##DELTAX= 1\n"
		}
		d, err := Decode("f", []byte(head+list+"\n"+table+"\n##END=\n"), parse.Options{})
		if err != nil || !whole(d) || len(d.Blocks[0].Tables[0].Y) > 1<<14 {
			return
		}
		roundTrip(t, d)
	})
}
