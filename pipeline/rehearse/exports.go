package rehearse

import (
	"bytes"
	"fmt"
	"strings"
	"time"
)

// A File is one file an instrument writes.
type File struct {
	Role  string // "scan", "blank", "ph"
	Rung  string // of a scan file that holds one rung
	Path  string // relative to the instrument's folder
	Bytes []byte
	At    time.Time // when it is complete
}

// A Style is how an instrument writes.
type Style struct {
	JCAMP      bool     // JCAMP-DX instead of delimited text
	Encoding   Encoding // of JCAMP-DX tables
	Linked     bool     // all scans of a set in one compound file
	Locale     Locale   // of delimited text
	Percent    bool     // delimited text: percent transmittance
	Descending bool     // delimited text: from long to short wavelengths
	Zone       *time.Location
}

// path is the name of a file of a set: the stem, then what it holds.
func (s *Set) path(what, ext string) string { return s.Stem + "_" + what + ext }

// Files renders a set: its blank, its scans and its pH table, in order of
// time. The pH table is delimited text in every style.
func Files(set *Set, st Style) []File {
	if st.Zone == nil {
		st.Zone = time.UTC
	}
	var out []File
	if st.Linked {
		out = append(out, compoundFile(set, st))
	} else {
		out = singleFiles(set, st)
	}
	last := set.End()
	if n := len(out); n > 0 && out[n-1].At.After(last) {
		last = out[n-1].At
	}
	return append(out, File{Role: "ph", Path: set.path("ph", ".csv"), Bytes: PHTable(set, st.Zone, st.Locale), At: last.Add(25 * time.Second)})
}

// render writes one scan by itself.
func render(set *Set, what string, sc Scan, st Style) []byte {
	title := what
	if set.Lot != "" {
		title = set.Lot + " " + what
	}
	if st.JCAMP {
		return ScanJCAMP(title, set.Instrument, sc, st.Zone, st.Encoding)
	}
	return scanText(title, set.Instrument, sc, st)
}

// singleFiles writes a file for every scan.
func singleFiles(set *Set, st Style) []File {
	var out []File
	ext := ".csv"
	if st.JCAMP {
		ext = ".jdx"
	}
	if !set.NoBlank {
		out = append(out, File{Role: "blank", Path: set.path("blank", ext), Bytes: render(set, "blank", set.Blank, st), At: set.Blank.Measured.Add(6 * time.Second)})
	}
	for _, r := range set.Rungs {
		if r.NoScan {
			continue
		}
		what := "s" + r.Key
		out = append(out, File{Role: "scan", Rung: r.Key, Path: set.path(what, ext), Bytes: render(set, what, r.Scan, st), At: r.Scan.Measured.Add(6 * time.Second)})
	}
	return out
}

// compoundFile writes all scans of a set into one file when the last is there.
func compoundFile(set *Set, st Style) File {
	var blocks [][]byte
	if !set.NoBlank {
		blocks = append(blocks, ScanJCAMP("blank", set.Instrument, set.Blank, st.Zone, st.Encoding))
	}
	at := set.Blank.Measured
	for _, r := range set.Rungs {
		if r.NoScan {
			continue
		}
		blocks = append(blocks, ScanJCAMP("s"+r.Key, set.Instrument, r.Scan, st.Zone, st.Encoding))
		if r.Scan.Measured.After(at) {
			at = r.Scan.Measured
		}
	}
	return File{Role: "scan", Path: set.Stem + ".jdx", Bytes: LinkJCAMP(set.Name, blocks), At: at.Add(9 * time.Second)}
}

// exportsOf renders a set of the story as its instrument does. U1 writes
// delimited text, one file a scan; U2 writes JCAMP-DX, one file a scan for
// samples and one compound file for references.
func (s *Story) exportsOf(set *Set) []File {
	st := Style{Zone: s.zone}
	if set.Instrument == instTwo {
		st.JCAMP, st.Encoding, st.Linked = true, Differ, set.Reference
		if set.Slot == "close" {
			st.Encoding = AFFN
		}
	}
	return Files(set, st)
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
