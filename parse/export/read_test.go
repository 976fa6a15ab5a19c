package export

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"pkvigil/parse"
	"pkvigil/parse/jcamp"
)

// TestIsJCAMP decides by content alone.
func TestIsJCAMP(t *testing.T) {
	for text, want := range map[string]bool{
		"##TITLE= QX\n##JCAMP-DX= 5.01\n": true,
		"\r\n\r\n##TITLE=\r\n":            true,
		"$$ a comment\n##title=x\n":       true,
		"##JCAMP-DX=4.24\n":               true,
		"\uFEFF##TITLE=x\n":               true,
		"##T I_T-L/E = x\n":               true,
		"\xFF\xFE#\x00#\x00T\x00I\x00T\x00L\x00E\x00=\x00x\x00\n\x00": true,
		"##OWNER=y\n##TITLE=x\n":                  true,
		"Wavelength (nm),Absorbance\n##TITLE=x\n": false,
		"#TITLE=x\n": false,
		"##TITLE\n":  false,
		"":           false,
	} {
		if got := isJCAMP([]byte(text)); got != want {
			t.Errorf("%q: %v, want %v", text, got, want)
		}
	}
}

// TestRead reads every kind through the one entry; the name decides nothing.
func TestRead(t *testing.T) {
	for text, format := range map[string]string{
		"Wavelength (nm),Absorbance\n400,0.1\n401,0.2\n402,0.3\n403,0.2\n404,0.1\n": "delimited",
		"rung,pH,temperature (C)\n01,6.2,25\n02,6.6,25\n":                           "ph-table",
		"buffer lot,pH,mV\na,4.005,175\nb,6.865,7\n":                                "calibration",
		"position,set,rung\nA1,QX,01\n":                                             "sheet",
		"at,kind,resource\n2026-03-11T09:00:00,lamp,L-7\n":                          "events",
		"night,instrument,set\n2026-03-11,U1,QX\n":                                  "plan",
	} {
		c, err := Read("misleading.jdx", []byte(text), parse.Options{})
		if err != nil || c.Format != format {
			t.Errorf("%q: %v, want %s", text, err, format)
			continue
		}
		if report, _ := Explain("misleading.jdx", []byte(text), parse.Options{}); len(report) < 3 {
			t.Errorf("%q: the report is %q", text, report)
		}
	}
	for text, words := range map[string]string{"": "empty", "hello": "wavelength axis"} {
		_, err := Read("x", []byte(text), parse.Options{})
		if e, ok := errors.AsType[*parse.Error](err); !ok || !strings.Contains(e.Error(), words) {
			t.Errorf("%q: %v", text, err)
		}
		if report, _ := Explain("x", []byte(text), parse.Options{}); !strings.Contains(strings.Join(report, "\n"), "refused") {
			t.Errorf("%q: %q", text, report)
		}
	}
}

// TestDispatch hands JCAMP-DX to its reader: both entries agree.
func TestDispatch(t *testing.T) {
	const text = "##TITLE= QX\n##JCAMP-DX= 4.24\n##DATA TYPE= UV/VIS SPECTRUM\n##ORIGIN= x\n##OWNER= y\n##XUNITS= NANOMETERS\n##YUNITS= ABSORBANCE\n##XFACTOR= 1\n##YFACTOR= 0.001\n" +
		"##FIRSTX= 400\n##LASTX= 404\n##NPOINTS= 5\n##FIRSTY= 0.1\n##XYDATA= (X++(Y..Y))\n400 100 200 300 200 100\n##END=\n"
	want, werr := jcamp.Read("x.csv", []byte(text), parse.Options{})
	got, gerr := Read("x.csv", []byte(text), parse.Options{})
	if (werr == nil) != (gerr == nil) || werr == nil && (got.Format != want.Format || len(got.Scans) != len(want.Scans)) {
		t.Errorf("%v, %v: the entry does not hand on what the reader gives", werr, gerr)
	}
	if werr != nil && werr.Error() != gerr.Error() {
		t.Errorf("%v became %v", werr, gerr)
	}
}

// TestSharedFolders never panics and always refuses with a reason, whatever
// real export is given under whatever role.
func TestSharedFolders(t *testing.T) {
	root := filepath.Join("..", "..", "..", "shared", "data")
	if _, err := os.Stat(root); err != nil {
		t.Skipf("the folder of real exports is not here: %v", err)
	}
	read, refused := 0, 0
	err := filepath.WalkDir(root, func(path string, d os.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		data, err := os.ReadFile(path)
		if err != nil {
			return err
		}
		for _, role := range []string{"", "scan", "ph", "calibration", "sheet", "events", "plan"} {
			c, err := Read(d.Name(), data, parse.Options{Role: role})
			if err != nil {
				if e, ok := errors.AsType[*parse.Error](err); !ok || e.Error() == "" {
					t.Errorf("%s as %q: %v", d.Name(), role, err)
				}
				refused++
				continue
			}
			if role == "" && len(c.Scans) == 0 {
				t.Logf("%s: %s, %d readings, %d calibrations, %d rows, %d events, %d planned", d.Name(), c.Format, len(c.Readings), len(c.Calibrations), len(c.Sheet), len(c.Events), len(c.Plan))
			}
			read++
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%d readings of a file under a role succeeded, %d were refused", read, refused)
}
