package pipeline

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

// A leftFile is one file of a generated folder and what it means.
type leftFile struct {
	path string
	set  string // of the truth; only which files share one matters; "" for files of runs and logs
	role string
	text string
}

// leaver writes the files of one naming situation; all data are invented.
type leaver struct {
	files []leftFile
	n     int
}

func (l *leaver) add(path, set, role, text string) {
	l.files = append(l.files, leftFile{path, set, role, text})
}

// bands is an invented one-step dye of pKa 7.2; the last place tells files apart.
func (l *leaver) bands(ph float64, blank bool) []float64 {
	l.n++
	var out []float64
	base := 1 / (1 + math.Pow(10, 7.2-ph))
	for nm := 400.0; nm <= 600; nm += 10 {
		a := 0.001
		if !blank {
			a += 0.6*(1-base)*math.Exp(-math.Pow((nm-430)/30, 2)) + 0.8*base*math.Exp(-math.Pow((nm-560)/30, 2))
		}
		out = append(out, a+1e-5*float64(l.n%997))
	}
	return out
}

func (l *leaver) scan(ph float64) string {
	var b strings.Builder
	b.WriteString("Wavelength (nm),Absorbance\n")
	for i, a := range l.bands(ph, ph == 0) {
		fmt.Fprintf(&b, "%d,%.5f\n", 400+10*i, a)
	}
	return b.String()
}

// wide is one file with a column per label; a label that says blank is one.
func (l *leaver) wide(labels []string) string {
	var b strings.Builder
	b.WriteString("Quantity,Absorbance\nWavelength (nm)")
	for _, x := range labels {
		b.WriteString("," + x)
	}
	b.WriteString("\n")
	var cols [][]float64
	for i, x := range labels {
		cols = append(cols, l.bands(6+0.3*float64(i%8), strings.Contains(x, "blank")))
	}
	for i := range cols[0] {
		fmt.Fprintf(&b, "%d", 400+10*i)
		for _, c := range cols {
			fmt.Fprintf(&b, ",%.5f", c[i])
		}
		b.WriteString("\n")
	}
	return b.String()
}

func (l *leaver) blocks(title string) string {
	var b strings.Builder
	fmt.Fprintf(&b, "##TITLE= %s\n##JCAMP-DX= 5.01\n##DATA TYPE= LINK\n##BLOCKS= 9\n##ORIGIN= x\n##OWNER= y\n", title)
	for k := range 9 {
		name, ph := fmt.Sprintf("solution %d", k), 5.5+0.4*float64(k)
		if k == 0 {
			name, ph = "blank", 0
		}
		fmt.Fprintf(&b, "##TITLE= %s\n##JCAMP-DX= 5.01\n##DATA TYPE= UV/VIS SPECTRUM\n##ORIGIN= x\n##OWNER= y\n", name)
		if k > 0 {
			fmt.Fprintf(&b, "##$PH= %.2f\n", ph)
		}
		v := l.bands(ph, k == 0)
		fmt.Fprintf(&b, "##XUNITS= NANOMETERS\n##YUNITS= ABSORBANCE\n##XFACTOR= 1\n##YFACTOR= 0.00001\n##FIRSTX= 400\n##LASTX= 600\n##NPOINTS= %d\n##FIRSTY= %.5f\n##XYDATA= (X++(Y..Y))\n", len(v), v[0])
		for i, a := range v {
			fmt.Fprintf(&b, "%d %.0f\n", 400+10*i, a*1e5)
		}
		b.WriteString("##END=\n")
	}
	return b.String() + "##END=\n"
}

func phTable(key string, keys []string) string {
	var b strings.Builder
	fmt.Fprintf(&b, "%s,pH,temperature (C)\n", key)
	for i, k := range keys {
		fmt.Fprintf(&b, "%s,%.2f,25.0\n", k, 6+0.37*float64(i+1))
	}
	return b.String()
}

// leave makes the folder of one of the 16 situations of the requirements:
// five sets (or runs) of eight rungs, with what belongs to them.
func leave(situation int) []leftFile {
	l := &leaver{n: 50 * situation}
	for k := range 5 {
		code := []string{"PHR", "CRR", "TB", "MCP", "PHR"}[k]
		set := fmt.Sprintf("%s-%d", code, 2207+13*k)
		l.situation(situation, k, code, set)
	}
	return l.files
}

// ladder adds eight scans, a blank and a pH table under names of the given forms.
func (l *leaver) ladder(set, scan, blank, table string, from int) {
	var keys []string
	for r := from; r < from+8; r++ {
		ph := 6 + 0.37*float64(r-from+1)
		l.add(fmt.Sprintf(scan, r), set, "scan", l.scan(ph))
		name := fmt.Sprintf(scan, r)
		digits := strings.Index(scan, "%0")
		key := name[digits : digits+int(scan[digits+2]-'0')]
		keys = append(keys, key)
	}
	l.add(blank, set, "blank", l.scan(0))
	if table != "" {
		l.add(table, set, "ph", phTable("rung", keys))
	}
}

func (l *leaver) situation(n, k int, code, set string) {
	plain := strings.ReplaceAll(set, "-", "")
	ph := func(r int) float64 { return 6 + 0.37*float64(r) }
	switch n {
	case 1:
		l.add(set+"_blank.csv", set, "blank", l.scan(0))
		for r := 1; r <= 8; r++ {
			l.add(fmt.Sprintf("%s_r%02d_pH%.2f.csv", set, r, ph(r)), set, "scan", l.scan(ph(r)))
		}
	case 2:
		lot := fmt.Sprintf("20260311_%s_L%d_", code, 88+k)
		for _, rep := range []string{"a", "b"} {
			l.add(lot+"blk_"+rep+".txt", lot, "blank", l.scan(0))
			for r := 1; r <= 8; r++ {
				l.add(lot+strings.Replace(fmt.Sprintf("%.2f", ph(r)), ".", "p", 1)+"_"+rep+".txt", lot, "scan", l.scan(ph(r)))
			}
		}
	case 3:
		dir := fmt.Sprintf("2026-03-%02d/%s/", 11+k/3, set)
		l.ladder(set, dir+"scan_%04d.csv", dir+"blank.csv", dir+"ph.csv", 1)
	case 4, 5, 10:
		l.runs(n, k, set)
	case 6:
		l.byClock(k, plain)
	case 7:
		for _, ref := range []string{"RI-A", "RI-B", "RI-C"} {
			name := fmt.Sprintf("%s_night%03d", ref, 41+k)
			l.add(name+".jdx", name, "scan", l.blocks(name))
		}
	case 8:
		l.ladder(plain, "TIT_"+plain+"_%03d.csv", "TIT_"+plain+"_blank.csv", "TIT_"+plain+".pht", 0)
	case 9:
		for _, slot := range []string{"open", "close"} {
			s := fmt.Sprintf("REF-%c_n%03d_%s_", 'A'+k, 41+k, slot)
			l.ladder(s, s+"r%02d.csv", s+"blank.csv", s+"ph.csv", 1)
		}
	case 11:
		name := []string{"Kresolrot Los 17", "Phenolrot Los 4", "Thymolblau Los 22", "Kresolrot Los 18", "Grün Los 3"}[k]
		for r := 1; r <= 8; r++ {
			comma := strings.Replace(fmt.Sprintf("%.2f", ph(r)), ".", ",", 1)
			text := l.scan(ph(r))
			l.add(name+" – pH "+comma+".csv", name, "scan", text)
			if r == 3 {
				l.add(name+" – pH "+comma+" (2).csv", name, "copy", text)
			}
		}
	case 12:
		l.ladder(set, set+"_r%02d.csv", set+"_blank.csv", set+"_ph.csv", 1)
		l.add(set+"_r04_v2.csv", set, "scan", l.scan(ph(4)))
		if k == 1 {
			l.add(set+"_r05_corr.csv", set, "scan", l.scan(ph(5)))
		}
	case 13:
		s := fmt.Sprintf("HX%d_M%02d_", 31+k/2, 10*(k%3))
		l.ladder(s, s+"r%02d.csv", s+"blank.csv", s+"ph.csv", 1)
	case 14:
		s := fmt.Sprintf("HX%d_T%s_", 31+k/2, []string{"15", "25", "37.5"}[k%3])
		l.ladder(s, s+"r%02d.csv", s+"blank.csv", s+"ph.csv", 1)
	case 15:
		var labels []string
		for _, s := range []string{"TB-2219", "CR-2220", "PR-2221"} {
			s = fmt.Sprintf("%s%d", s[:len(s)-1], k)
			labels = append(labels, s+"|blank")
			for r := 1; r <= 8; r++ {
				labels = append(labels, fmt.Sprintf("%s|r%02d|%.2f", s, r, ph(r)))
			}
		}
		l.add(fmt.Sprintf("night_202603%02d.csv", 11+k), "", "columns", l.wide(labels))
	case 16:
		order := fmt.Sprintf("Q26-%05d-%d", 417+k, k)
		l.ladder(order, order+"_R%02d.csv", order+"_BL.csv", order+"_PH.csv", 1)
	}
}

// runs are the situations where a sheet says which set stands where.
func (l *leaver) runs(n, k int, set string) {
	sheet, table := "position,set,rung,role,pH\n", []string{}
	row := func(pos, rung, role string) {
		ph := ""
		if n == 10 && role == "" { // here the job list says the pH as well
			ph = fmt.Sprintf("%.2f", 6.37+0.37*float64(len(table)))
		}
		sheet += fmt.Sprintf("%s,%s,%s,%s,%s\n", pos, set, rung, role, ph)
		if role == "" {
			table = append(table, pos)
		}
	}
	switch n {
	case 4:
		run := fmt.Sprintf("S%d", 118+k)
		for r := 0; r <= 8; r++ {
			pos := fmt.Sprintf("%c%02d", 'A'+r/4, 1+r%6)
			rung, role, ph := fmt.Sprintf("%02d", r), "", 6+0.37*float64(r)
			if r == 0 {
				rung, role, ph = "", "blank", 0
			}
			row(pos, rung, role)
			l.add(fmt.Sprintf("%s_%s_20260311T21%02d33.csv", run, pos, 10*k+r), set, "scan", l.scan(ph))
		}
		l.add(run+"_sequence.csv", "", "sheet", sheet)
		l.add(run+"_ph.csv", "", "ph", phTable("position", table))
	case 5:
		plate := fmt.Sprintf("PLT%04d", 42+k)
		row("A1", "", "blank")
		for r := 2; r <= 9; r++ {
			row(fmt.Sprintf("A%d", r), fmt.Sprintf("%02d", r), "")
		}
		l.add(plate+"_run1.csv", "", "columns", l.wide(append([]string{"A1"}, table...)))
		l.add(plate+"_map.csv", "", "sheet", sheet)
		l.add(plate+"_ph.csv", "", "ph", phTable("position", table))
	case 10:
		dir := fmt.Sprintf("U%d/export/2603%02d/", 1+k%2, 11+k)
		for r := 1; r <= 9; r++ {
			rung, role, ph := fmt.Sprintf("%02d", r), "", 6+0.37*float64(r)
			if r == 9 {
				rung, role, ph = "", "blank", 0
			}
			row(fmt.Sprint(r), rung, role)
			l.add(fmt.Sprintf("%sSample%d.csv", dir, r), fmt.Sprintf("%s %d", set, k), "scan", l.scan(ph))
		}
		l.add(dir+"jobs.csv", "", "sheet", sheet)
	}
}

// byClock leaves scans with a time in their names and one log of the meter a
// day. A quarter of an hour lies between scans: closer ones share their readings.
func (l *leaver) byClock(k int, set string) {
	log := "time,pH,temperature (C)\n"
	for r := 1; r <= 8; r++ {
		l.add(fmt.Sprintf("202603%02d-%02d%02d33-%s.txt", 11+k, 20+r/4, 15*(r%4), set), set, "scan", l.scan(6+0.37*float64(r)))
		log += fmt.Sprintf("2026-03-%02d %02d:%02d:50,%.2f,25.0\n", 11+k, 20+r/4, 15*(r%4), 6+0.37*float64(r))
	}
	l.add(fmt.Sprintf("phlog_202603%02d.csv", 11+k), "", "ph", log)
}

// deposit writes the files into a folder.
func deposit(t *testing.T, dir string, files []leftFile) {
	t.Helper()
	for _, f := range files {
		path := filepath.Join(dir, filepath.FromSlash(f.path))
		if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile(path, []byte(f.text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
}
