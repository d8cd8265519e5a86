package atomicfile_test

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"sync"
	"testing"

	"drumlin/io/internal/atomicfile"
)

// flocks says whether locks die with their holder on this system.
var flocks = runtime.GOOS != "windows" && runtime.GOOS != "solaris" && runtime.GOOS != "aix"

func TestFile(t *testing.T) {
	dir := t.TempDir()
	name := filepath.Join(dir, "x")
	put := func(replace bool, s string) error {
		f, err := atomicfile.Create(name, replace)
		if err != nil {
			return err
		}
		defer f.Abort()
		f.WriteString(s)
		return f.Commit()
	}
	if err := put(false, "one"); err != nil {
		t.Fatal(err)
	}
	if err := put(false, "two"); !errors.Is(err, os.ErrExist) {
		t.Error(err)
	}
	if err := put(true, "three"); err != nil {
		t.Error(err)
	}
	if b, _ := os.ReadFile(name); string(b) != "three" {
		t.Errorf("%q", b)
	}
	// a name taken between Create and Commit is not overwritten
	other := filepath.Join(dir, "y")
	f, err := atomicfile.Create(other, false)
	if err != nil {
		t.Fatal(err)
	}
	os.WriteFile(other, []byte("theirs"), 0o666)
	if err := f.Commit(); !errors.Is(err, os.ErrExist) {
		t.Error(err)
	}
	if b, _ := os.ReadFile(other); string(b) != "theirs" {
		t.Errorf("%q", b)
	}
	if err := f.Commit(); !errors.Is(err, os.ErrClosed) {
		t.Error(err)
	}
	if e, _ := os.ReadDir(dir); len(e) != 2 {
		t.Errorf("left behind: %v", e)
	}
}

func TestLeftoversAreExact(t *testing.T) {
	dir := t.TempDir()
	for _, n := range []string{".drumlin-a-0123456789abcdef.partial", ".drumlin-a-0123456789abcdef.aside", ".drumlin-a-b-0123456789abcdef.partial",
		".drumlin-a-0123456789abcde.partial", ".drumlin-a-0123456789abcdeg.partial", ".drumlin-a.lock", "a", ".drumlin-a-0123456789abcdef-0123456789abcdef.partial"} {
		os.WriteFile(filepath.Join(dir, n), nil, 0o666)
	}
	for base, want := range map[string]int{"a": 1, "a-b": 1, "a-0123456789abcdef": 1, "b": 0} {
		got, err := atomicfile.Leftovers(filepath.Join(dir, base), atomicfile.Partial)
		if err != nil || len(got) != want {
			t.Errorf("%s: %v, %v", base, got, err)
		}
	}
	s := atomicfile.Sibling(filepath.Join(dir, "fresh"), atomicfile.Partial)
	os.WriteFile(s, nil, 0o666)
	if got, _ := atomicfile.Leftovers(filepath.Join(dir, "fresh"), atomicfile.Partial); len(got) != 1 || got[0] != s {
		t.Error(got)
	}
}

// Many writers in a row and at once: never two holders, and no lock is lost.
func TestLockIsExclusive(t *testing.T) {
	target := filepath.Join(t.TempDir(), "out")
	var wg sync.WaitGroup
	var holders, worst, taken int
	var mu sync.Mutex
	count := func(d int) {
		mu.Lock()
		holders += d
		worst = max(worst, holders)
		taken += max(d, 0)
		mu.Unlock()
	}
	for range 8 {
		wg.Go(func() {
			for range 200 {
				l, err := atomicfile.Acquire(target)
				if errors.Is(err, atomicfile.ErrLocked) {
					continue
				}
				if err != nil {
					t.Error(err)
					return
				}
				count(1)
				count(-1)
				if err := l.Release(); err != nil {
					t.Error(err)
				}
			}
		})
	}
	wg.Wait()
	if worst != 1 || taken == 0 {
		t.Errorf("%d holders at once, taken %d times", worst, taken)
	}
	if _, err := os.Stat(atomicfile.LockPath(target)); !errors.Is(err, os.ErrNotExist) {
		t.Error("the lock file stays")
	}
}

// The lock file of a process that is gone is taken over, whatever is in it.
func TestStaleLock(t *testing.T) {
	target := filepath.Join(t.TempDir(), "out")
	host, _ := os.Hostname()
	contents := []string{fmt.Sprintf("%d\n%s\n", 1<<22+1, host)} // above the greatest process id
	if flocks {
		contents = append(contents, "", "junk")
	}
	for _, s := range contents {
		os.WriteFile(atomicfile.LockPath(target), []byte(s), 0o666)
		l, err := atomicfile.Acquire(target)
		if err != nil {
			t.Errorf("%q: %v", s, err)
			continue
		}
		if b, _ := os.ReadFile(atomicfile.LockPath(target)); !strings.HasPrefix(string(b), fmt.Sprint(os.Getpid())) {
			t.Errorf("signed %q", b)
		}
		l.Release()
	}
}
