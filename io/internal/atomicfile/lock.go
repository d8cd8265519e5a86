package atomicfile

import (
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strconv"
	"strings"
)

// ErrLocked: another writer holds the lock.
var ErrLocked = errors.New("locked by another writer")

// Lock is the right to write one target. Release it exactly once.
type Lock struct {
	path string
	f    *os.File
}

// LockPath returns where the lock of a target lies.
func LockPath(target string) string {
	return filepath.Join(filepath.Dir(target), prefix+filepath.Base(target)+".lock")
}

// Acquire takes the lock of target without waiting. The lock is a file beside
// the target that holds the process id and, where the system can, an advisory
// lock that dies with its holder, so the lock of a killed process is taken
// over. Where it cannot, a lock is stale when its process on this host is
// gone. It returns ErrLocked, naming the holder, when another writer has it.
func Acquire(target string) (*Lock, error) {
	path := LockPath(target)
	for range 10 {
		f, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE|os.O_EXCL, 0o666)
		fresh := err == nil
		if errors.Is(err, os.ErrExist) {
			f, err = os.OpenFile(path, os.O_RDWR, 0)
			if errors.Is(err, os.ErrNotExist) {
				continue // released between the two calls
			}
		}
		if err != nil {
			return nil, err
		}
		got, able, err := tryFlock(f)
		if err != nil {
			f.Close()
			return nil, err
		}
		if able && !got || !able && !fresh && !gone(holder(f)) {
			h := holder(f)
			f.Close()
			return nil, fmt.Errorf("%s is held by %s: %w", path, h, ErrLocked)
		}
		// The file may have been removed by its last holder since it was opened.
		mine, err := sameFile(f, path)
		if err != nil || !mine {
			f.Close()
			if err != nil {
				return nil, err
			}
			continue
		}
		if err := sign(f); err != nil {
			_ = os.Remove(path)
			f.Close()
			return nil, err
		}
		return &Lock{path, f}, nil
	}
	return nil, fmt.Errorf("%s changes hands too fast: %w", path, ErrLocked)
}

// Release gives the lock back and removes its file.
func (l *Lock) Release() error {
	err := os.Remove(l.path) // before the unlock, so nobody locks a removed file for long
	closeErr := l.f.Close()
	if err != nil && !errors.Is(err, os.ErrNotExist) {
		err = os.Remove(l.path) // systems that do not remove open files
	}
	return errors.Join(err, closeErr)
}

func sameFile(f *os.File, path string) (bool, error) {
	a, err := f.Stat()
	if err != nil {
		return false, err
	}
	b, err := os.Stat(path)
	if errors.Is(err, os.ErrNotExist) {
		return false, nil
	}
	if err != nil {
		return false, err
	}
	return os.SameFile(a, b), nil
}

// owner is who wrote a lock file.
type owner struct {
	pid  int
	host string
}

func (o owner) String() string {
	if o.pid == 0 {
		return "an unnamed process"
	}
	return fmt.Sprintf("process %d on %s", o.pid, o.host)
}

func sign(f *os.File) error {
	host, _ := os.Hostname()
	if err := f.Truncate(0); err != nil {
		return err
	}
	_, err := f.WriteAt([]byte(fmt.Sprintf("%d\n%s\n", os.Getpid(), host)), 0)
	return err
}

func holder(f *os.File) owner {
	b, _ := io.ReadAll(io.NewSectionReader(f, 0, 1024))
	first, rest, _ := strings.Cut(string(b), "\n")
	pid, err := strconv.Atoi(first)
	if err != nil {
		return owner{}
	}
	return owner{pid, strings.TrimSpace(rest)}
}

// gone reports whether the holder certainly no longer runs.
func gone(o owner) bool {
	host, err := os.Hostname()
	return err == nil && o.pid > 0 && o.host == host && !running(o.pid)
}
