package rehearse

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
)

// MarkerFile is the name of the file that shows a share of the story to be mounted.
const MarkerFile = ".quillmere-share"

// awaySuffix names the folder in which a share's files wait while it is away.
const awaySuffix = ".away"

// Folders are the shares of the story.
func Folders() []string { return []string{"U1", "U2", "METERS", "LOG"} }

// Prepare makes the empty shares of the story below base, each with its marker file.
func Prepare(base string) error {
	for _, f := range Folders() {
		if err := os.MkdirAll(filepath.Join(base, f), 0o755); err != nil {
			return fmt.Errorf("rehearse: making share %s: %w", f, err)
		}
		marker := filepath.Join(base, f, MarkerFile)
		if err := os.WriteFile(marker, []byte("share "+f+" of Quillmere Indicator Works\n"), 0o644); err != nil {
			return fmt.Errorf("rehearse: marking share %s: %w", f, err)
		}
	}
	return nil
}

// Apply carries out a deposit that concerns folders below base: writes,
// renames, removals, shares that go and come back. It reports false for the
// acts that are the caller's: signatures and the database. Files are written in
// place, as instruments do, so a watcher may well see them half done.
func Apply(base string, d Deposit) (bool, error) {
	if d.Folder != "" && !fs.ValidPath(d.Folder) || d.Path != "" && !fs.ValidPath(d.Path) {
		return false, fmt.Errorf("rehearse: deposit outside its folder: %s/%s", d.Folder, d.Path)
	}
	root := filepath.Join(base, d.Folder)
	path := filepath.Join(root, filepath.FromSlash(d.Path))
	var err error
	switch d.Act {
	case Write, WritePart:
		err = put(path, d)
	case Rename:
		err = os.Rename(filepath.Join(root, filepath.FromSlash(d.From)), path)
	case Remove:
		err = os.Remove(path)
	case Unmount:
		if err = os.Rename(root, root+awaySuffix); err == nil {
			err = os.Mkdir(root, 0o755)
		}
	case Mount:
		if err = os.Remove(root); err == nil {
			err = os.Rename(root+awaySuffix, root)
		}
	default:
		return false, nil
	}
	if err != nil {
		return true, fmt.Errorf("rehearse: %s %s/%s: %w", d.Act, d.Folder, d.Path, err)
	}
	return true, nil
}

// Remount brings a share back that a replay left away when it was cut off; a
// share that is there stays as it is.
func Remount(base, folder string) error {
	root := filepath.Join(base, folder)
	if _, err := os.Stat(root + awaySuffix); errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err := os.Remove(root); err != nil && !errors.Is(err, fs.ErrNotExist) {
		return fmt.Errorf("rehearse: bringing share %s back: %w", folder, err)
	}
	if err := os.Rename(root+awaySuffix, root); err != nil {
		return fmt.Errorf("rehearse: bringing share %s back: %w", folder, err)
	}
	return nil
}

// put writes bytes and sets the time the file claims.
func put(path string, d Deposit) error {
	if err := os.MkdirAll(filepath.Dir(path), 0o755); err != nil {
		return err
	}
	if err := os.WriteFile(path, d.Bytes, 0o644); err != nil {
		return err
	}
	return os.Chtimes(path, d.ModTime, d.ModTime)
}

// WriteTruth writes truth-NN.json for every night into dir, which should not
// be one of the shares: only the scorer reads it.
func (s *Story) WriteTruth(dir string) error {
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return fmt.Errorf("rehearse: folder for the truth: %w", err)
	}
	for n := 1; n <= storyNights; n++ {
		if err := s.WriteTruthOf(n, dir); err != nil {
			return err
		}
	}
	return nil
}

// WriteTruthOf writes the truth of one night into dir, which must exist.
func (s *Story) WriteTruthOf(night int, dir string) error {
	data, err := json.MarshalIndent(s.TruthOf(night), "", " ")
	if err != nil {
		return fmt.Errorf("rehearse: truth of night %d: %w", night, err)
	}
	name := filepath.Join(dir, fmt.Sprintf("truth-%02d.json", night))
	if err := os.WriteFile(name, append(data, '\n'), 0o644); err != nil {
		return fmt.Errorf("rehearse: truth of night %d: %w", night, err)
	}
	return nil
}

// ReadTruth reads the truth files of a folder for nights from to to; nights
// without a file are left out.
func ReadTruth(dir string, from, to int) ([]Truth, error) {
	var out []Truth
	for n := from; n <= to; n++ {
		data, err := os.ReadFile(filepath.Join(dir, fmt.Sprintf("truth-%02d.json", n)))
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			return nil, fmt.Errorf("rehearse: truth of night %d: %w", n, err)
		}
		var night []Truth
		if err := json.Unmarshal(data, &night); err != nil {
			return nil, fmt.Errorf("rehearse: truth of night %d: %w", n, err)
		}
		out = append(out, night...)
	}
	return out, nil
}
