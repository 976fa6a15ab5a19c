package rehearse

import (
	"bytes"
	"fmt"
	"math"
	"strconv"
	"time"
)

// An Encoding is one of the published forms of an XYDATA table
// (McDonald & Wilks, Appl. Spectrosc. 42 (1988) 151).
type Encoding int

// The two forms the instruments of the story use.
const (
	AFFN   Encoding = iota // plain numbers
	Differ                 // DIF: first value of a line in SQZ, then differences, checked by repetition
)

// ScanJCAMP writes one scan as a JCAMP-DX 5.01 block (Lampen et al., Pure
// Appl. Chem. 71 (1999) 1549) titled title.
func ScanJCAMP(title, instrument string, sc Scan, zone *time.Location, enc Encoding) []byte {
	var b bytes.Buffer
	n := len(sc.WavelengthNM)
	scale := math.Pow(10, float64(sc.Decimals))
	y := make([]int64, n)
	lo, hi := int64(math.MaxInt64), int64(math.MinInt64)
	for i, a := range sc.Absorbance {
		y[i] = int64(math.Round(a * scale))
		lo, hi = min(lo, y[i]), max(hi, y[i])
	}
	rec := func(label, format string, args ...any) {
		fmt.Fprintf(&b, "##%s= ", label)
		fmt.Fprintf(&b, format, args...)
		b.WriteString("\r\n")
	}
	actual := func(v int64) string { return strconv.FormatFloat(float64(v)/scale, 'f', sc.Decimals, 64) }
	rec("TITLE", "%s", title)
	rec("JCAMP-DX", "5.01")
	rec("DATA TYPE", "UV/VIS SPECTRUM")
	rec("DATA CLASS", "XYDATA")
	rec("ORIGIN", "Quillmere Indicator Works, control laboratory")
	rec("OWNER", "Quillmere Indicator Works")
	rec("LONG DATE", "%s", sc.Measured.In(zone).Format("2006/01/02 15:04:05 -0700"))
	rec("SPECTROMETER/DATA SYSTEM", "%s", instrument)
	rec("RESOLUTION", "%.1f", sc.BandwidthNM)
	rec("PATH LENGTH", "%s", strconv.FormatFloat(sc.PathMM/10, 'f', 2, 64))
	rec("TEMPERATURE", "%.1f", sc.TemperatureC)
	rec("XUNITS", "NANOMETERS")
	rec("YUNITS", "ABSORBANCE")
	rec("XFACTOR", "1.0")
	rec("YFACTOR", "%s", strconv.FormatFloat(1/scale, 'f', sc.Decimals, 64))
	rec("FIRSTX", "%.1f", sc.WavelengthNM[0])
	rec("LASTX", "%.1f", sc.WavelengthNM[n-1])
	rec("DELTAX", "%.1f", sc.WavelengthNM[1]-sc.WavelengthNM[0])
	rec("NPOINTS", "%d", n)
	rec("FIRSTY", "%s", actual(y[0]))
	rec("MAXY", "%s", actual(hi))
	rec("MINY", "%s", actual(lo))
	b.WriteString("##XYDATA= (X++(Y..Y))\r\n")
	if enc == Differ {
		differences(&b, sc.WavelengthNM, y)
	} else {
		plain(&b, sc.WavelengthNM, y)
	}
	b.WriteString("##END=\r\n")
	return b.Bytes()
}

// plain writes blank-separated numbers, at most 80 characters a line.
func plain(b *bytes.Buffer, x []float64, y []int64) {
	for i := 0; i < len(y); {
		line := strconv.AppendFloat(nil, x[i], 'f', 1, 64)
		for i < len(y) {
			item := strconv.FormatInt(y[i], 10)
			if len(line)+1+len(item) > 80 {
				break
			}
			line = append(append(line, ' '), item...)
			i++
		}
		b.Write(line)
		b.WriteString("\r\n")
	}
}

// differences writes the DIF form. A line that ends in a difference is
// followed by one that begins with the same abscissa and the same ordinate
// written out, as a check; the last line is such a check alone.
func differences(b *bytes.Buffer, x []float64, y []int64) {
	line := strconv.AppendFloat(nil, x[0], 'f', 1, 64)
	line = append(line, squeezed(y[0])...)
	for i := 1; i < len(y); i++ {
		item := differed(y[i] - y[i-1])
		if len(line)+len(item) > 80 {
			b.Write(line)
			b.WriteString("\r\n")
			line = strconv.AppendFloat(line[:0], x[i-1], 'f', 1, 64)
			line = append(line, squeezed(y[i-1])...)
		}
		line = append(line, item...)
	}
	b.Write(line)
	b.WriteString("\r\n")
	if n := len(y); n > 1 {
		fmt.Fprintf(b, "%.1f%s\r\n", x[n-1], squeezed(y[n-1]))
	}
}

// squeezed is a number whose first digit carries sign and separator.
func squeezed(v int64) string { return pseudo(v, "@ABCDEFGHI", "@abcdefghi") }

// differed is a difference in the same manner.
func differed(v int64) string { return pseudo(v, "%JKLMNOPQR", "%jklmnopqr") }

func pseudo(v int64, up, down string) string {
	table := up
	if v < 0 {
		table, v = down, -v
	}
	s := []byte(strconv.FormatInt(v, 10))
	s[0] = table[s[0]-'0']
	return string(s)
}

// LinkJCAMP joins blocks into one compound file.
func LinkJCAMP(title string, blocks [][]byte) []byte {
	var b bytes.Buffer
	fmt.Fprintf(&b, "##TITLE= %s\r\n##JCAMP-DX= 5.01\r\n##DATA TYPE= LINK\r\n##BLOCKS= %d\r\n", title, len(blocks))
	b.WriteString("##ORIGIN= Quillmere Indicator Works, control laboratory\r\n##OWNER= Quillmere Indicator Works\r\n")
	for _, block := range blocks {
		b.Write(block)
	}
	b.WriteString("##END=\r\n")
	return b.Bytes()
}
