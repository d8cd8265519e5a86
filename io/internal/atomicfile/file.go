package atomicfile

import (
	"bufio"
	"errors"
	"fmt"
	"os"
	"path/filepath"
)

// File is one file being written under a hidden name. Close it with Commit or
// Abort; Abort after Commit does nothing, so it can be deferred.
type File struct {
	*bufio.Writer
	f       *os.File
	target  string
	replace bool
	done    bool
}

// Create opens a hidden file beside target. Without replace, an existing
// target is os.ErrExist, now and again at Commit.
func Create(target string, replace bool) (*File, error) {
	if err := absent(target, replace); err != nil {
		return nil, err
	}
	f, err := os.OpenFile(Sibling(target, Partial), os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o666)
	if err != nil {
		return nil, err
	}
	return &File{bufio.NewWriterSize(f, 1<<16), f, target, replace, false}, nil
}

func absent(target string, replace bool) error {
	info, err := os.Lstat(target)
	switch {
	case errors.Is(err, os.ErrNotExist):
		return nil
	case err != nil:
		return err
	case !replace:
		return &os.PathError{Op: "create", Path: target, Err: os.ErrExist}
	case !info.Mode().IsRegular():
		return fmt.Errorf("%s is not a regular file: %w", target, os.ErrExist)
	}
	return nil
}

// Commit flushes the file to the disk and gives it its name. On any error the
// hidden file is removed.
func (f *File) Commit() error {
	if f.done {
		return os.ErrClosed
	}
	defer f.Abort()
	if err := f.Flush(); err != nil {
		return err
	}
	if err := f.f.Sync(); err != nil {
		return err
	}
	if err := f.f.Close(); err != nil {
		return err
	}
	if f.replace {
		if err := absent(f.target, true); err != nil {
			return err
		}
		if err := os.Rename(f.f.Name(), f.target); err != nil {
			return err
		}
	} else if err := place(f.f.Name(), f.target); err != nil {
		return err
	}
	f.done = true
	return SyncDir(filepath.Dir(f.target))
}

// place gives the file at from the name to unless that is taken. A hard link
// cannot overwrite; where there are none, a check and a rename must do.
func place(from, to string) error {
	err := os.Link(from, to)
	if err == nil {
		return os.Remove(from)
	}
	if errors.Is(err, os.ErrExist) {
		return err
	}
	if err := absent(to, false); err != nil {
		return err
	}
	return os.Rename(from, to)
}

// Abort closes and removes the hidden file.
func (f *File) Abort() {
	if f.done {
		return
	}
	f.done = true
	f.f.Close()
	_ = os.Remove(f.f.Name()) // what stays is cleared by the next writer
}
