package rehearse

import (
	"bytes"
	"testing"
	"time"
)

func TestWholeStoryIsQuickAndOrdered(t *testing.T) {
	s := NewStory(1)
	files, size := 0, 0
	begin := time.Now()
	for n := 1; n <= s.Nights(); n++ {
		var last time.Time
		for _, d := range s.Deposits(n) {
			if d.At.Before(last) {
				t.Fatalf("night %d: %s %s comes before its predecessor", n, d.Act, d.Path)
			}
			last = d.At
			if got := s.NightOf(d.At); got != n {
				t.Errorf("night %d: %s %s/%s at %s belongs to night %d", n, d.Act, d.Folder, d.Path, d.At, got)
			}
			if d.Act == Write {
				files++
				size += len(d.Bytes)
			}
		}
	}
	t.Logf("%d files, %d bytes in %s", files, size, time.Since(begin))
	if files < 11000 || files > 17000 {
		t.Errorf("%d files in the story, expected 11,000 to 17,000", files)
	}
}

func TestSameSeedSameBytes(t *testing.T) {
	for _, night := range []int{24, 41} {
		a, b, c := NewStory(7).Deposits(night), NewStory(7).Deposits(night), NewStory(8).Deposits(night)
		if len(a) != len(b) {
			t.Fatalf("night %d: %d and %d deposits", night, len(a), len(b))
		}
		differs := len(a) != len(c)
		for i := range a {
			if !a[i].At.Equal(b[i].At) || a[i].Path != b[i].Path || !bytes.Equal(a[i].Bytes, b[i].Bytes) {
				t.Fatalf("night %d deposit %d differs between equal seeds: %s", night, i, a[i].Path)
			}
			differs = differs || !bytes.Equal(a[i].Bytes, c[i].Bytes)
		}
		if !differs {
			t.Errorf("night %d is the same for another seed", night)
		}
	}
}
