package rehearse

import (
	"bytes"
	"fmt"
	"strings"
	"time"
)

// An export is one file an instrument writes.
type export struct {
	role  string // "scan", "blank", "ph"
	rung  string
	path  string
	bytes []byte
	at    time.Time
}

// path is the name of a file of a set: the stem, then what it holds.
func (s *Set) path(what, ext string) string { return s.Stem + "_" + what + ext }

// exportsOf renders a set as the files of its instrument. U1 writes delimited
// text, one file a scan; U2 writes JCAMP-DX, one file a scan for samples and
// one compound file for references. The pH table is text on both.
func (s *Story) exportsOf(set *Set) []export {
	var out []export
	if set.Instrument == instTwo && set.Reference {
		out = append(out, s.compound(set))
	} else {
		out = s.single(set)
	}
	last := out[len(out)-1].at
	if end := set.End(); end.After(last) {
		last = end
	}
	return append(out, export{
		role: "ph", path: set.path("ph", ".csv"), bytes: PHTable(set, s.zone, Locale{}), at: last.Add(25 * time.Second),
	})
}

// single writes a file for every scan.
func (s *Story) single(set *Set) []export {
	var out []export
	render := func(what string, sc Scan) []byte {
		title := set.Lot + " " + what
		if set.Instrument == instTwo {
			return ScanJCAMP(title, set.Instrument, sc, s.zone, Differ)
		}
		return ScanCSV(title, set.Instrument, sc, s.zone, Locale{})
	}
	ext := ".csv"
	if set.Instrument == instTwo {
		ext = ".jdx"
	}
	if !set.NoBlank {
		out = append(out, export{role: "blank", path: set.path("blank", ext), bytes: render("blank", set.Blank), at: set.Blank.Measured.Add(6 * time.Second)})
	}
	for _, r := range set.Rungs {
		if r.NoScan {
			continue
		}
		what := "s" + r.Key
		out = append(out, export{role: "scan", rung: r.Key, path: set.path(what, ext), bytes: render(what, r.Scan), at: r.Scan.Measured.Add(6 * time.Second)})
	}
	return out
}

// compound writes all scans of a set into one file when the last is there.
func (s *Story) compound(set *Set) export {
	enc := AFFN
	if set.Slot == "open" {
		enc = Differ
	}
	var blocks [][]byte
	if !set.NoBlank {
		blocks = append(blocks, ScanJCAMP("blank", set.Instrument, set.Blank, s.zone, enc))
	}
	at := set.Blank.Measured
	for _, r := range set.Rungs {
		if r.NoScan {
			continue
		}
		blocks = append(blocks, ScanJCAMP("s"+r.Key, set.Instrument, r.Scan, s.zone, enc))
		if r.Scan.Measured.After(at) {
			at = r.Scan.Measured
		}
	}
	return export{role: "scan", path: set.Stem + ".jdx", bytes: LinkJCAMP(set.Name, blocks), at: at.Add(9 * time.Second)}
}

// typo spoils the lot in a file name as a hand at a keyboard would: a letter
// for a digit that looks like it, or the dash forgotten.
func typo(path string, coin bool) string {
	dir, name, _ := strings.Cut(path, "/")
	if coin || !strings.ContainsAny(name, "10") {
		return dir + "/" + strings.Replace(name, "-", "", 1)
	}
	if i := strings.IndexByte(name, '1'); i >= 0 {
		return dir + "/" + name[:i] + "l" + name[i+1:]
	}
	return dir + "/" + strings.Replace(name, "0", "O", 1)
}

// commas rewrites a delimited scan as a computer with other language settings
// would: decimal commas, and either semicolons or, ambiguously, commas between
// columns and wavelengths without decimals ("412,0,21804").
func commas(scan []byte, ambiguous bool) []byte {
	var b bytes.Buffer
	for line := range strings.SplitAfterSeq(string(scan), "\n") {
		key, value, found := strings.Cut(line, ",")
		if !found {
			b.WriteString(line)
			continue
		}
		sep := ";"
		if ambiguous {
			sep = ","
			key = strings.TrimSuffix(key, ".0")
		}
		fmt.Fprint(&b, strings.ReplaceAll(key, ".", ","), sep, strings.ReplaceAll(value, ".", ","))
	}
	return b.Bytes()
}

// cut keeps a share of a file, as a full disk or a broken connection would.
func cut(data []byte, share float64) []byte { return data[:int(share*float64(len(data)))] }

// copyName is the name an operating system gives a second copy.
func copyName(path string) string {
	i := strings.LastIndexByte(path, '.')
	return path[:i] + " (2)" + path[i:]
}
