package jcamp

import (
	"bytes"
	"fmt"
	"math"
	"strconv"
	"testing"

	"pkvigil/parse"
)

// curve is an invented spectrum of n points as one block.
func curve(n int) *File {
	t := Table{Kind: "XYDATA", Steady: true, XSymbol: "X", YSymbol: "Y", YFactor: 1e-5, XUnits: "NANOMETERS", YUnits: "ABSORBANCE"}
	for i := range n {
		x := 200 + 0.1*float64(i)
		a := math.Exp(-sq((x-430)/35)) + 0.7*math.Exp(-sq((x-615)/40)) + 0.01*math.Sin(float64(i)*1.7)
		t.X = append(t.X, x)
		t.Y = append(t.Y, math.Round(a*1e5)*t.YFactor)
	}
	return &File{Blocks: []Block{{Title: "bench", Parent: -1, DataType: "UV/VIS SPECTRUM", Tables: []Table{t},
		Records: []Record{{Name: "DATA TYPE", Value: "UV/VIS SPECTRUM", key: "DATATYPE"}, {Name: "$LOT", Value: "L-1", key: "$LOT"}}}}}
}

func sq(v float64) float64 { return v * v }

// affn writes the tabulated whole numbers plainly, as instruments do.
func affn(f *File) []byte {
	t := &f.Blocks[0].Tables[0]
	n := len(t.Y)
	b := fmt.Appendf(nil, "##TITLE= bench\r\n##JCAMP-DX= 4.24\r\n##DATA TYPE= UV/VIS SPECTRUM\r\n##XUNITS= NANOMETERS\r\n##YUNITS= ABSORBANCE\r\n##XFACTOR= 1\r\n##YFACTOR= 0.00001\r\n##FIRSTX= %g\r\n##LASTX= %g\r\n##NPOINTS= %d\r\n##XYDATA= (X++(Y..Y))\r\n", t.X[0], t.X[n-1], n)
	for i := 0; i < n; {
		from := len(b)
		b = strconv.AppendFloat(b, t.X[i], 'f', 1, 64)
		for i < n && len(b)-from < 72 {
			b = strconv.AppendInt(append(b, ' '), int64(math.Round(t.Y[i]*1e5)), 10)
			i++
		}
		b = append(b, "\r\n"...)
	}
	return append(b, "##END=\r\n"...)
}

// usual reads the numbers of the table of a plain file with the standard
// library: what the reader is measured against.
func usual(data []byte) (y []float64, err error) {
	_, table, _ := bytes.Cut(data, []byte("(X++(Y..Y))\r\n"))
	for line := range bytes.SplitSeq(table, []byte("\r\n")) {
		if bytes.HasPrefix(line, []byte("##")) {
			break
		}
		for i, w := range bytes.Fields(line) {
			v, err := strconv.ParseFloat(string(w), 64)
			if err != nil {
				return nil, err
			}
			if i > 0 {
				y = append(y, v*0.00001)
			}
		}
	}
	return y, nil
}

const benchPoints = 6001

func BenchmarkReadAFFN(b *testing.B) { benchmarkRead(b, affn(curve(benchPoints))) }

func BenchmarkReadDIFDUP(b *testing.B) {
	data, err := Append(nil, curve(benchPoints), DIF)
	if err != nil {
		b.Fatal(err)
	}
	benchmarkRead(b, data)
}

func BenchmarkReadXYPOINTS(b *testing.B) {
	f := curve(benchPoints)
	f.Blocks[0].Tables[0].Steady, f.Blocks[0].Tables[0].Kind = false, "XYPOINTS"
	t := &f.Blocks[0].Tables[0]
	for i := range t.Y {
		t.X[i], t.Y[i] = math.Round(t.X[i]*10)/10, math.Round(t.Y[i]*1e5)/1e5
	}
	data, err := Append(nil, f, AFFN)
	if err != nil {
		b.Fatal(err)
	}
	benchmarkRead(b, data)
}

// BenchmarkUsual reads the plain file of BenchmarkReadAFFN with bytes.Fields
// and strconv.ParseFloat, without any check.
func BenchmarkUsual(b *testing.B) {
	data := affn(curve(benchPoints))
	b.SetBytes(int64(len(data)))
	b.ReportAllocs()
	for b.Loop() {
		if y, err := usual(data); err != nil || len(y) != benchPoints {
			b.Fatal(len(y), err)
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/benchPoints, "ns/point")
}

func benchmarkRead(b *testing.B, data []byte) {
	b.SetBytes(int64(len(data)))
	b.ReportAllocs()
	for b.Loop() {
		c, err := Read("bench", data, parse.Options{})
		if err != nil || len(c.Scans[0].Absorbance) != benchPoints {
			b.Fatal(err)
		}
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/benchPoints, "ns/point")
}
