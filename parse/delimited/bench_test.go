package delimited

import (
	"bytes"
	"crypto/sha256"
	"encoding/csv"
	"fmt"
	"strconv"
	"strings"
	"testing"

	"pkvigil/parse"
)

// benchFile is a scan of n points as instruments export it.
func benchFile(n int, delim string) []byte {
	var b strings.Builder
	b.WriteString(strings.ReplaceAll(head+"Wavelength (nm),Absorbance\n", ",", delim))
	for i := range n {
		fmt.Fprintf(&b, "%.4f%s%.7f\r\n", 300+0.5*float64(i), delim, 0.1+0.0007*float64(i%997))
	}
	return []byte(b.String())
}

// BenchmarkRead runs beside the usual pair, encoding/csv with
// strconv.ParseFloat, and a hash of the same bytes.
func BenchmarkRead(b *testing.B) {
	for _, n := range []int{131, 601, 4001} {
		data := benchFile(n, ",")
		run := func(name string, f func()) {
			b.Run(fmt.Sprintf("%s/%d", name, n), func(b *testing.B) {
				b.SetBytes(int64(len(data)))
				b.ReportAllocs()
				for b.Loop() {
					f()
				}
			})
		}
		run("read", func() {
			if _, err := Read("f", data, parse.Options{Role: "scan"}); err != nil {
				b.Fatal(err)
			}
		})
		run("csv+strconv", func() { benchPair(b, data) })
		run("sha256", func() { sha256.Sum256(data) })
	}
}

func benchPair(b *testing.B, data []byte) {
	r := csv.NewReader(bytes.NewReader(data))
	r.FieldsPerRecord = -1
	r.ReuseRecord = true
	var x, y []float64
	for {
		rec, err := r.Read()
		if err != nil {
			break
		}
		v, err := strconv.ParseFloat(rec[0], 64)
		if err != nil {
			continue
		}
		a, err := strconv.ParseFloat(rec[1], 64)
		if err != nil {
			b.Fatal(err)
		}
		x, y = append(x, v), append(y, a)
	}
	if len(x) < 100 || len(y) != len(x) {
		b.Fatal("not read")
	}
}

// TestReadAllocs: allocations do not grow with the points.
func TestReadAllocs(t *testing.T) {
	count := func(n int) float64 {
		data := benchFile(n, ",")
		return testing.AllocsPerRun(20, func() {
			if _, err := Read("f", data, parse.Options{Role: "scan"}); err != nil {
				t.Fatal(err)
			}
		})
	}
	few, many := count(601), count(6001)
	if many > few+16 {
		t.Errorf("%g allocations for 601 points, %g for 6001", few, many)
	}
	t.Logf("%g allocations for 601 points, %g for 6001", few, many)
}
