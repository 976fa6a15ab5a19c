package rehearse

import (
	"bytes"
	"encoding/binary"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"time"
	"unicode/utf16"
)

// fileFault changes the files of a set. i is the index of the struck scan.
type fileFault func(files []File, i int, f Fault, rng *rand.Rand) []File

// fileFaultTable maps keys of the failure catalogue to what they do to files.
func fileFaultTable() map[string]fileFault {
	one := func(change func(data []byte, f Fault, rng *rand.Rand) []byte) fileFault {
		return func(files []File, i int, f Fault, rng *rand.Rand) []File {
			files[i].Bytes = change(files[i].Bytes, f, rng)
			return files
		}
	}
	return map[string]fileFault{
		"file.cut":   one(func(b []byte, f Fault, rng *rand.Rand) []byte { return cut(b, size(f, 0.3+0.65*rng.Float64())) }),
		"file.empty": one(func([]byte, Fault, *rand.Rand) []byte { return nil }),
		// Size 1: semicolons between columns; 2: commas, ambiguous.
		"file.comma":       one(func(b []byte, f Fault, _ *rand.Rand) []byte { return commas(b, size(f, 1) > 1) }),
		"file.encoding":    one(func(b []byte, _ Fault, _ *rand.Rand) []byte { return utf16Bytes(b) }),
		"file.sentinel":    one(sentinel),
		"file.otherkind":   one(func([]byte, Fault, *rand.Rand) []byte { return timeTrace() }),
		"file.multi":       one(func(b []byte, _ Fault, _ *rand.Rand) []byte { return nameless(b) }),
		"file.mislabelled": one(func(b []byte, _ Fault, _ *rand.Rand) []byte { return percentCalledAbsorbance(b) }),
		"file.copy":        again(func(f File) File { f.Path = copyName(f.Path); return f }),
		"file.normform": one(func(b []byte, _ Fault, _ *rand.Rand) []byte {
			return bytes.ReplaceAll(b, []byte(" (nm)"), []byte("\u00a0(nm)"))
		}),
		"file.litter":      litter,
		"file.spreadsheet": spreadsheet,
		"name.typo":        renamed(func(p string, rng *rand.Rand) string { return typo(p, rng.IntN(2) == 0) }),
		"name.role":        blankAsRung,
		"name.blankwrong":  blankElsewhere,
		"name.interleaved": interleaved,
		"name.restart":     restarted,
		"clock.skew":       clockShift(func(f Fault) time.Duration { return time.Duration(size(f, 420)) * time.Second }),
		"clock.reset":      clockShift(func(Fault) time.Duration { return -26 * 365 * 24 * time.Hour }),
		"ph.garbled":       garbled,
		"name.phlate": func(files []File, _ int, f Fault, _ *rand.Rand) []File {
			last := len(files) - 1
			files[last].At = delayed(files[last].At, size(f, 5))
			return files
		},
	}
}

// FileFaultKeys lists the faults that SpoilFiles knows, in order of the alphabet.
func FileFaultKeys() []string {
	var keys []string
	for k := range fileFaultTable() {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}

// SpoilFiles lets a fault strike the rendered files of a set. Most strike the
// scan of rung f.Rung (or the compound file). The slice given is not changed.
func SpoilFiles(files []File, f Fault, rng *rand.Rand) ([]File, error) {
	do, ok := fileFaultTable()[f.Key]
	if !ok {
		return nil, fmt.Errorf("rehearse: unknown fault of files %q; FileFaultKeys lists the known ones", f.Key)
	}
	i := slices.IndexFunc(files, func(x File) bool {
		return x.Role == "scan" && (x.Rung == "" || x.Rung == rungKey(f.Rung+1))
	})
	if i < 0 {
		return nil, fmt.Errorf("rehearse: fault %s strikes rung %s, which has no file", f.Key, rungKey(f.Rung+1))
	}
	return do(slices.Clone(files), i, f, rng), nil
}

func again(change func(File) File) fileFault {
	return func(files []File, i int, _ Fault, _ *rand.Rand) []File {
		c := change(files[i])
		c.At = c.At.Add(11 * time.Minute)
		return append(files, c)
	}
}

func renamed(change func(string, *rand.Rand) string) fileFault {
	return func(files []File, i int, _ Fault, rng *rand.Rand) []File {
		files[i].Path = change(files[i].Path, rng)
		return files
	}
}

// utf16Bytes is little-endian UTF-16 with its mark.
func utf16Bytes(b []byte) []byte {
	out := []byte{0xFF, 0xFE}
	for _, u := range utf16.Encode([]rune(string(b))) {
		out = binary.LittleEndian.AppendUint16(out, u)
	}
	return out
}

// sentinel prints "****" for Size neighbouring values in the middle of the table.
func sentinel(b []byte, f Fault, _ *rand.Rand) []byte {
	lines := strings.Split(string(b), "\r\n")
	mid := len(lines) / 2
	for k := range int(size(f, 5)) {
		if at := strings.LastIndexAny(lines[mid+k], ",;"); at >= 0 {
			lines[mid+k] = lines[mid+k][:at+1] + "****"
		}
	}
	return []byte(strings.Join(lines, "\r\n"))
}

// timeTrace is a kinetics export in place of a spectrum.
func timeTrace() []byte {
	var b bytes.Buffer
	b.WriteString("Sample, kinetics\r\nWavelength (nm), 578.0\r\n\r\nTime (s),Absorbance\r\n")
	for i := range 120 {
		fmt.Fprintf(&b, "%d.0,%.5f\r\n", 5*i, 0.8*math.Exp(-float64(i)/60))
	}
	return b.Bytes()
}

// nameless puts three traces beside each other and forgets their names.
func nameless(b []byte) []byte {
	var out bytes.Buffer
	for line := range strings.SplitSeq(string(b), "\r\n") {
		x, y, ok := strings.Cut(line, ",")
		if ok && len(x) > 0 && x[0] >= '0' && x[0] <= '9' {
			fmt.Fprintf(&out, "%s,%s,%s,%s\r\n", x, y, y, y)
		}
	}
	return out.Bytes()
}

// percentCalledAbsorbance converts the numbers and leaves the words.
func percentCalledAbsorbance(b []byte) []byte {
	lines := strings.Split(string(b), "\r\n")
	for i, line := range lines {
		var nm, a float64
		if n, _ := fmt.Sscanf(line, "%f,%f", &nm, &a); n == 2 {
			lines[i] = fmt.Sprintf("%.1f,%.3f", nm, 100*math.Pow(10, -a))
		}
	}
	return []byte(strings.Join(lines, "\r\n"))
}

// litter adds the temporary files that office programs and copiers leave.
func litter(files []File, i int, _ Fault, _ *rand.Rand) []File {
	dir, name, _ := strings.Cut(files[i].Path, "/")
	for _, p := range []string{dir + "/~$" + name, files[i].Path + ".part", dir + "/.DS_Store"} {
		files = append(files, File{Role: "ignore", Path: p, Bytes: []byte("x"), At: files[i].At})
	}
	return files
}

// spreadsheet turns one pH into a date and drops trailing zeros, as a
// spreadsheet does to a table it saves.
func spreadsheet(files []File, _ int, f Fault, _ *rand.Rand) []File {
	last := len(files) - 1
	lines := strings.Split(string(files[last].Bytes), "\r\n")
	for i, line := range lines {
		cells := strings.Split(line, ",")
		if len(cells) < 5 || cells[0] < "00" || cells[0] > "99" {
			continue
		}
		if cells[0] == rungKey(f.Rung+1) {
			cells[1] = "07. Apr"
		} else {
			cells[1] = strings.TrimRight(cells[1], "0")
		}
		lines[i] = strings.Join(cells, ",")
	}
	files[last].Bytes = []byte(strings.Join(lines, "\r\n"))
	return files
}

// garbled: a pH typed as "7..41" or without its point.
func garbled(files []File, _ int, f Fault, _ *rand.Rand) []File {
	last := len(files) - 1
	key := "\r\n" + rungKey(f.Rung+1) + ","
	at := bytes.Index(files[last].Bytes, []byte(key))
	if at < 0 {
		return files
	}
	b := slices.Clone(files[last].Bytes)
	if dot := bytes.IndexByte(b[at+len(key):], '.'); dot >= 0 {
		b = slices.Insert(b, at+len(key)+dot, '.')
	}
	files[last].Bytes = b
	return files
}

// blankAsRung: the blank is exported as solution 00.
func blankAsRung(files []File, _ int, _ Fault, _ *rand.Rand) []File {
	for i := range files {
		if files[i].Role == "blank" {
			files[i].Path = strings.Replace(files[i].Path, "_blank", "_s00", 1)
		}
	}
	return files
}

// blankElsewhere: the blank stands under the name of another lot.
func blankElsewhere(files []File, _ int, _ Fault, _ *rand.Rand) []File {
	for i := range files {
		if files[i].Role == "blank" {
			files[i].Path = strings.Replace(files[i].Path, "_blank", "B_blank", 1)
		}
	}
	return files
}

// interleaved: a second scan of the struck rung arrives under a revision-less
// name that differs in case only, with other numbers.
func interleaved(files []File, i int, _ Fault, _ *rand.Rand) []File {
	f := files[i]
	f.Path = strings.Replace(f.Path, "_s", "_S", 1)
	f.Bytes = stronger(f.Bytes, 1.31)
	f.At = f.At.Add(3 * time.Minute)
	return append(files, f)
}

// restarted: the counter begins again after seven hours and the scans of
// another run overwrite the names.
func restarted(files []File, _ int, _ Fault, _ *rand.Rand) []File {
	for _, f := range slices.Clone(files) {
		if f.Role == "scan" || f.Role == "blank" {
			f.Bytes = stronger(f.Bytes, 1.07)
		}
		f.At = f.At.Add(7 * time.Hour)
		files = append(files, f)
	}
	return files
}

// stronger multiplies the absorbances of a delimited scan.
func stronger(b []byte, by float64) []byte {
	lines := strings.Split(string(b), "\r\n")
	for i, line := range lines {
		var nm, a float64
		if n, _ := fmt.Sscanf(line, "%f,%f", &nm, &a); n == 2 {
			lines[i] = fmt.Sprintf("%.1f,%.5f", nm, a*by)
		}
	}
	return []byte(strings.Join(lines, "\r\n"))
}

// clockShift changes the moments inside every scan file.
func clockShift(by func(Fault) time.Duration) fileFault {
	return func(files []File, _ int, f Fault, _ *rand.Rand) []File {
		const head = "\r\nMeasured, "
		for i := range files {
			b := files[i].Bytes
			at := bytes.Index(b, []byte(head))
			if at < 0 || len(b) < at+len(head)+len(stamp) {
				continue
			}
			from := at + len(head)
			t, err := time.Parse(stamp, string(b[from:from+len(stamp)]))
			if err != nil {
				continue
			}
			b = slices.Clone(b)
			copy(b[from:], t.Add(by(f)).Format(stamp))
			files[i].Bytes = b
		}
		return files
	}
}
