package jcamp

import (
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"testing"

	"pgregory.net/rapid"

	"pkvigil/parse"
)

// same says where two decoded files differ, "" if nowhere.
func same(a, b *File) string {
	if len(a.Blocks) != len(b.Blocks) {
		return fmt.Sprintf("%d and %d blocks", len(a.Blocks), len(b.Blocks))
	}
	// The writer puts blocks inside behind the records of their parent; order and nesting stay.
	for i := range a.Blocks {
		p, q := &a.Blocks[i], &b.Blocks[i]
		if p.Title != q.Title || p.Parent != q.Parent || p.DataType != q.DataType || len(p.Tables) != len(q.Tables) {
			return fmt.Sprintf("block %d: %q %d %q %d and %q %d %q %d", i, p.Title, p.Parent, p.DataType, len(p.Tables), q.Title, q.Parent, q.DataType, len(q.Tables))
		}
		if x, y := kept(p), kept(q); !slices.Equal(x, y) {
			return fmt.Sprintf("block %d: records %q and %q", i, x, y)
		}
		for j := range p.Tables {
			s, t := &p.Tables[j], &q.Tables[j]
			if t.Err != nil {
				return fmt.Sprintf("block %d table %d: %v", i, j, t.Err)
			}
			if s.Kind != t.Kind || s.Steady != t.Steady || s.Page != t.Page || s.XUnits != t.XUnits || s.YUnits != t.YUnits || s.Missing != t.Missing || len(s.Y) != len(t.Y) {
				return fmt.Sprintf("block %d table %d: %v %v %q %q %q %d %d and %v %v %q %q %q %d %d", i, j, s.Kind, s.Steady, s.Page, s.XUnits, s.YUnits, s.Missing, len(s.Y),
					t.Kind, t.Steady, t.Page, t.XUnits, t.YUnits, t.Missing, len(t.Y))
			}
			for k := range s.Y {
				if s.X[k] != t.X[k] || s.Y[k] != t.Y[k] && !(math.IsNaN(s.Y[k]) && math.IsNaN(t.Y[k])) {
					return fmt.Sprintf("block %d table %d point %d: (%v, %v) and (%v, %v)", i, j, k, s.X[k], s.Y[k], t.X[k], t.Y[k])
				}
			}
		}
	}
	return ""
}

// kept are the records of a block that are not used up by its tables.
func kept(b *Block) []string {
	var out []string
	for _, r := range b.Records {
		if !structural(r.key) {
			out = append(out, r.Name+"="+r.Value)
		}
	}
	return out
}

func whole(f *File) bool {
	for i := range f.Blocks {
		for j := range f.Blocks[i].Tables {
			if f.Blocks[i].Tables[j].Err != nil {
				return false
			}
		}
	}
	return true
}

// roundTrip writes a decoded file in both forms and reads it again.
func roundTrip(t interface{ Fatalf(string, ...any) }, f *File) {
	for _, form := range []Forms{AFFN, DIF} {
		text, err := Append(nil, f, form)
		if err != nil {
			t.Fatalf("form %d: %v", form, err)
		}
		g, err := Decode("again", text, parse.Options{})
		if err != nil {
			t.Fatalf("form %d: %v\n%.3000s", form, err, text)
		}
		if d := same(f, g); d != "" {
			t.Fatalf("form %d: %s\n%.3000s", form, d, text)
		}
	}
}

// Real files written back canonically, plain and in differences, read the same.
func TestCorpusWrittenBack(t *testing.T) {
	dir, _, order := corpus(t)
	n := 0
	for i, path := range order {
		if i%4 != 0 && os.Getenv("PKVIGIL_LONG") == "" {
			continue
		}
		data, err := os.ReadFile(filepath.Join(dir, path))
		if err != nil {
			t.Fatal(err)
		}
		f, err := Decode(path, data, parse.Options{})
		if err != nil || !whole(f) {
			continue
		}
		t.Run(path, func(t *testing.T) { roundTrip(t, f) })
		n++
	}
	t.Logf("%d files written back in two forms", n)
}

// Any table of whole numbers, gaps included, written in differences with
// repeat counts reads the same.
func TestDifferencesReadBack(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		n := rapid.IntRange(1, 200).Draw(t, "n")
		wide := rapid.SampledFrom([]int64{2, 30, 5000, 1 << 40}).Draw(t, "range")
		first, step := rapid.Float64Range(-1e4, 1e4).Draw(t, "first"), rapid.SampledFrom([]float64{0.1, -0.5, 1, 2.5, -1.0 / 3}).Draw(t, "step")
		factor := rapid.SampledFrom([]float64{1, 1e-4, -0.1, 1.0 / 3, 1.1920928955078125e-7}).Draw(t, "factor")
		tb := Table{Kind: "XYDATA", Steady: true, XSymbol: "X", YSymbol: "Y", YFactor: factor, XUnits: "NANOMETERS", YUnits: "ABSORBANCE"}
		last := first + float64(n-1)*step
		for i := range n {
			tb.X = append(tb.X, first+float64(i)*(last-first)/float64(max(n-1, 1)))
			y := factor * float64(rapid.Int64Range(-wide, wide).Draw(t, "y"))
			if i > 0 && rapid.IntRange(0, 9).Draw(t, "gap") == 0 {
				y = math.NaN()
				tb.Missing++
			}
			tb.Y = append(tb.Y, y)
		}
		if n > 1 {
			tb.X[n-1] = last
		}
		f := &File{Blocks: []Block{{Title: "t", Parent: -1, Tables: []Table{tb}}}}
		roundTrip(t, f)
	})
}
