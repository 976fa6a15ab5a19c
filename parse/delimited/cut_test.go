package delimited

import (
	"fmt"
	"math"
	"strings"
	"testing"

	"pkvigil/parse"
)

// TestCutAnywhere cuts files after every byte (file.cut): what is still
// accepted holds no number that the whole file does not hold at that place.
func TestCutAnywhere(t *testing.T) {
	trimmed := func(form string) string { // trailing zeros dropped, as spreadsheets do
		var b strings.Builder
		b.WriteString("Wavelength (nm)" + form + "Absorbance\n")
		for i := range 41 {
			fmt.Fprintf(&b, "%g%s%g\n", 400+2.5*float64(i), form, math.Round(band(i)*1e4)/1e4)
		}
		return b.String()
	}
	var rows strings.Builder
	rows.WriteString("Mode\tAbsorbance\nSample")
	for i := range 41 {
		fmt.Fprintf(&rows, "\t%d", 400+2*i)
	}
	for k := range 3 {
		fmt.Fprintf(&rows, "\nr%d", k)
		for i := range 41 {
			fmt.Fprintf(&rows, "\t%.4f", float64(k+1)*band(i))
		}
	}
	rows.WriteString("\n")
	long := "Sample;Wavelength (nm);Absorbance\n"
	for i := range 20 {
		long += fmt.Sprintf("S%d;%d;%.4f\n", i/10, 400+2*(i%10), band(i))
	}
	for name, x := range map[string]struct {
		text string
		role string
	}{
		"fixed decimals":  {spectrum(head+"Points,41\nWavelength (nm),Absorbance\n", "%.1f,%.5f", 41, band), "scan"},
		"no count":        {spectrum(head+"Wavelength (nm),Absorbance\n", "%.1f,%.5f", 41, band), "scan"},
		"exponents":       {spectrum("Wavelength (nm);Absorbance\n", "%.1f;%.4E", 41, band), "scan"},
		"trimmed zeros":   {trimmed(","), "scan"},
		"decimal comma":   {comma(trimmed(";")), "scan"},
		"CR LF":           {strings.ReplaceAll(trimmed("\t"), "\n", "\r\n"), "scan"},
		"trailing comma":  {strings.ReplaceAll(trimmed(","), "\n", ",\n"), "scan"},
		"several columns": {spectrum("nm,S1 Abs,S2 Abs\n", "%.1f,%.5f,0.25", 41, band), "scan"},
		"rows":            {rows.String(), "scan"},
		"long":            {long, "scan"},
		"pH table":        {ladder(phHead, asIs), "ph"},
		"pH last":         {"rung,temperature (C),pH\n01,25,7.41\n02,25,7.6\n03,25,7.832\n", "ph"},
		"pH trimmed":      {"rung;pH\n1;7,1\n2;7,25\n3;7,416\n4;7,5\n", "ph"},
		"calibration":     {"Electrode,E-31\nbuffer lot,pH,mV\nCB-198,4.005,175.31\nCB-199,6.865,6.92\nCB-200,10.012,-178.1\n", "calibration"},
		"time last":       {"rung,pH,read at\n01,7.1,2026-03-11T21:40:10\n02,7.2,2026-03-11T21:45:20\n", "ph"},
		"plan":            {"set,instrument,night\nQX,U1,2026-03-11\nQY,U1,2026-03-12\n", "plan"},
	} {
		whole, err := Read("f", []byte(x.text), parse.Options{Role: x.role})
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		accepted, silent := 0, 0
		for k := 1; k < len(x.text); k++ {
			c, err := Read("f", []byte(x.text[:k]), parse.Options{Role: x.role})
			if err != nil {
				continue
			}
			accepted++
			if w := invented(whole, c); w != "" {
				t.Errorf("%s cut after byte %d (%q): %s", name, k, tail(x.text[:k]), w)
			}
			if x.text[k-1] != '\n' && x.text[k-1] != '\r' && len(c.Remarks) == 0 {
				silent++
			}
		}
		if silent > 0 {
			t.Errorf("%s: %d cuts inside a line are accepted without a remark", name, silent)
		}
		t.Logf("%s: %d of %d cuts still accepted", name, accepted, len(x.text)-1)
	}
}

func tail(s string) string { return s[max(0, len(s)-24):] }

// invented names a value of c that the whole content does not hold there.
func invented(whole, c *parse.Content) string {
	for _, s := range c.Scans {
		for _, w := range whole.Scans {
			if w.Label != s.Label {
				continue
			}
			at := map[float64]float64{}
			for i, x := range w.WavelengthNM {
				at[x] = w.Absorbance[i]
			}
			for i, x := range s.WavelengthNM {
				v, ok := at[x]
				if !ok || v != s.Absorbance[i] && !math.IsNaN(s.Absorbance[i]) {
					return fmt.Sprintf("%g at %g nm", s.Absorbance[i], x)
				}
			}
		}
	}
	for i, p := range c.Readings {
		if w := whole.Readings[i]; p.PH != w.PH || p.Label != w.Label || !p.Measured.Equal(w.Measured) || p.Electrode != w.Electrode {
			return fmt.Sprintf("reading %+v", p)
		}
	}
	for i, k := range c.Calibrations {
		for j, p := range k.Points {
			if w := whole.Calibrations[i].Points[j]; fmt.Sprint(p) != fmt.Sprint(w) {
				return fmt.Sprintf("point %+v", p)
			}
		}
	}
	for i, p := range c.Plan {
		if p != whole.Plan[i] {
			return fmt.Sprintf("planned %+v", p)
		}
	}
	return ""
}
