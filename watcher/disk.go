package watcher

import (
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"syscall"
	"time"
)

// disk is what a look asks of the file system. Any of it may block for as long
// as a stale share pleases.
type disk interface {
	lstat(path string) (fs.FileInfo, error)
	// list calls each for every element of a directory, unsorted, until each returns an error.
	list(dir string, each func(fs.DirEntry) error) error
	// probe opens a file and says what it is now.
	probe(path string) (fs.FileInfo, error)
}

// localDisk is the operating system's.
type localDisk struct{}

func (localDisk) lstat(path string) (fs.FileInfo, error) { return os.Lstat(path) }

func (localDisk) list(dir string, each func(fs.DirEntry) error) error {
	d, err := os.Open(dir)
	if err != nil {
		return err
	}
	defer d.Close() // nothing was written, so closing cannot lose anything
	for {
		batch, err := d.ReadDir(1024)
		for _, e := range batch {
			if err := each(e); err != nil {
				return err
			}
		}
		if errors.Is(err, io.EOF) {
			return nil
		}
		if err != nil {
			return err
		}
	}
}

func (localDisk) probe(path string) (fs.FileInfo, error) {
	f, err := openRegular(path)
	if err != nil {
		return nil, err
	}
	defer f.Close()
	return f.Stat()
}

// openRegular opens a file for reading and refuses what is no regular file. It
// does not wait for a writer should a pipe have taken the file's place.
func openRegular(path string) (*os.File, error) {
	f, err := os.OpenFile(path, os.O_RDONLY|syscall.O_NONBLOCK|syscall.O_NOFOLLOW, 0)
	if err != nil {
		return nil, err
	}
	fi, err := f.Stat()
	if err == nil && !fi.Mode().IsRegular() {
		err = fmt.Errorf("%s: %w: it is no regular file", path, ErrChanged)
	}
	if err != nil {
		f.Close()
		return nil, err
	}
	return f, nil
}

// Reasons of Read not to give the bytes now. Do not acknowledge the file on
// ErrChanged: it settles and is offered again.
var (
	ErrChanged  = errors.New("the file is not what it was when it settled")
	ErrTooLarge = errors.New("the file is larger than allowed")
)

// Read reads a settled file whole, at most max bytes, without ever waiting for
// a pipe or device put in its place. It fails with ErrChanged when the file is
// not the one that settled, before or after reading, with ErrTooLarge when it
// is larger than max, and with ctx's error when the share does not answer in time.
func Read(ctx context.Context, f File, max int64) ([]byte, error) {
	type answer struct {
		data []byte
		err  error
	}
	ch := make(chan answer, 1)
	// A read that hangs in the kernel cannot be ended; it is left behind and ends when the share answers.
	go func() {
		data, err := readWhole(f, max)
		ch <- answer{data, err}
	}()
	select {
	case a := <-ch:
		return a.data, a.err
	case <-ctx.Done():
		return nil, fmt.Errorf("reading %s of %s: %w", f.Path, f.Root, ctx.Err())
	}
}

func readWhole(f File, max int64) ([]byte, error) {
	r, err := openRegular(f.Abs)
	if err != nil {
		return nil, fmt.Errorf("opening %s of %s: %w", f.Path, f.Root, err)
	}
	defer r.Close()
	if err := isStill(r, f); err != nil {
		return nil, err
	}
	if f.Size > max {
		return nil, fmt.Errorf("%s of %s has %d bytes, allowed are %d: %w", f.Path, f.Root, f.Size, max, ErrTooLarge)
	}
	data := make([]byte, f.Size)
	if _, err := io.ReadFull(r, data); err != nil {
		return nil, fmt.Errorf("reading %s of %s: %w", f.Path, f.Root, errors.Join(err, shorter(err)))
	}
	// Rename into place leaves r on the old file, so the name is asked as well.
	if err := isStill(r, f); err != nil {
		return nil, err
	}
	fi, err := os.Lstat(f.Abs)
	if err != nil || !stampOf(fi).same(f.stamp()) {
		return nil, fmt.Errorf("%s of %s was replaced while it was read: %w", f.Path, f.Root, ErrChanged)
	}
	return data, nil
}

// shorter says that a file which ended early is not the file that settled.
func shorter(err error) error {
	if errors.Is(err, io.ErrUnexpectedEOF) || errors.Is(err, io.EOF) {
		return ErrChanged
	}
	return nil
}

func isStill(r *os.File, f File) error {
	fi, err := r.Stat()
	if err != nil {
		return fmt.Errorf("asking for size and time of %s of %s: %w", f.Path, f.Root, err)
	}
	if now := stampOf(fi); !now.same(f.stamp()) {
		return fmt.Errorf("%s of %s has now %d bytes of %s, it settled with %d of %s: %w", f.Path, f.Root,
			now.Size, now.Mod.UTC().Format(time.RFC3339), f.Size, f.ModTime.UTC().Format(time.RFC3339), ErrChanged)
	}
	return nil
}

func (f File) stamp() Stamp { return Stamp{Size: f.Size, Mod: f.ModTime} }

func stampOf(fi fs.FileInfo) Stamp { return Stamp{Size: fi.Size(), Mod: fi.ModTime()} }

// same compares to the microsecond.
func (s Stamp) same(o Stamp) bool {
	return s.Size == o.Size && s.Mod.Truncate(time.Microsecond).Equal(o.Mod.Truncate(time.Microsecond))
}
