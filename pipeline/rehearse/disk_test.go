package rehearse

import (
	"os"
	"path/filepath"
	"reflect"
	"strings"
	"testing"
)

func TestApplyPlaysANight(t *testing.T) {
	base := t.TempDir()
	if err := Prepare(base); err != nil {
		t.Fatal(err)
	}
	s := NewStory(1)
	away, marker := false, filepath.Join(base, "U2", MarkerFile)
	for _, d := range s.Deposits(nightUnmounted) {
		done, err := Apply(base, d)
		if err != nil {
			t.Fatal(err)
		}
		if done == (d.Act == Sign || d.Act == DatabaseAway || d.Act == DatabaseBack) {
			t.Errorf("%s: done %v", d.Act, done)
		}
		switch d.Act {
		case Unmount:
			away = true
			entries, err := os.ReadDir(filepath.Join(base, "U2"))
			if err != nil || len(entries) != 0 {
				t.Errorf("share away, but it holds %d entries (%v)", len(entries), err)
			}
		case Mount:
			away = false
			if _, err := os.Stat(marker); err != nil {
				t.Errorf("share back without its marker: %v", err)
			}
		case Write:
			if away && d.Folder == "U2" {
				t.Errorf("%s written while its share is away", d.Path)
			}
		}
	}
	last := map[string]Deposit{}
	for _, d := range s.Deposits(nightUnmounted) {
		if d.Act == Write && !strings.HasSuffix(d.Path, ".part") {
			last[filepath.Join(base, d.Folder, d.Path)] = d
		}
	}
	for path, d := range last {
		info, err := os.Stat(path)
		if err != nil {
			t.Fatal(err)
		}
		if !info.ModTime().Equal(d.ModTime) || info.Size() != int64(len(d.Bytes)) {
			t.Errorf("%s has %d bytes of %s, expected %d of %s", d.Path, info.Size(), info.ModTime(), len(d.Bytes), d.ModTime)
		}
	}
}

func TestApplyStaysInside(t *testing.T) {
	base := t.TempDir()
	for _, d := range []Deposit{
		{Act: Write, Folder: "U1", Path: "../../x"}, {Act: Write, Folder: "..", Path: "x"}, {Act: Remove, Folder: "U1", Path: "/etc/passwd"},
	} {
		if _, err := Apply(base, d); err == nil {
			t.Errorf("%s/%s is accepted", d.Folder, d.Path)
		}
	}
}

func TestTruthOnDisk(t *testing.T) {
	dir := t.TempDir()
	s := NewStory(3)
	for _, n := range []int{9, 11} {
		if err := s.WriteTruthOf(n, dir); err != nil {
			t.Fatal(err)
		}
	}
	got, err := ReadTruth(dir, 9, 11)
	if err != nil {
		t.Fatal(err)
	}
	if want := append(s.TruthOf(9), s.TruthOf(11)...); !reflect.DeepEqual(got, want) {
		t.Errorf("%d truths read, %d written, or they differ", len(got), len(want))
	}
	if err := os.WriteFile(filepath.Join(dir, "truth-10.json"), []byte("{"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadTruth(dir, 9, 11); err == nil {
		t.Error("a damaged truth file is accepted")
	}
}
