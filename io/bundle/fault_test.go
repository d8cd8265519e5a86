package bundle_test

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"
	"time"

	"drumlin/io/bundle"
)

func TestRenameFails(t *testing.T) {
	parent := t.TempDir()
	dir := filepath.Join(parent, "out")
	make1(t, dir, "v1", bundle.Options{})
	before := tree(t, parent)
	for fail := 1; fail <= 2; fail++ {
		n := 0
		restore := bundle.SetRename(func(from, to string) error {
			if n++; n == fail {
				return errors.New("no luck")
			}
			return os.Rename(from, to)
		})
		b := create(t, dir, bundle.Options{Replace: true})
		if err := put(b, "a", "a"); err != nil {
			t.Fatal(err)
		}
		err := b.Commit(rec())
		restore()
		if !errors.Is(err, bundle.ErrOutput) {
			t.Error(err)
		}
		if got := tree(t, parent); got != before {
			t.Errorf("rename %d: %q", fail, got)
		}
	}
}

// A killed process leaves a lock and a hidden folder; the next writer clears
// both, and puts back an earlier bundle that was moved aside.
func TestKilled(t *testing.T) {
	if dir := os.Getenv("DRUMLIN_TEST_HANG"); dir != "" {
		b, err := bundle.Create(context.Background(), dir, bundle.Options{Replace: true})
		if err != nil {
			t.Fatal(err)
		}
		put(b, "half", "written")
		fmt.Println("hanging")
		time.Sleep(time.Minute)
	}
	if runtime.GOOS == "windows" {
		t.Skip("kill is not a signal here")
	}
	parent := t.TempDir()
	dir := filepath.Join(parent, "out")
	make1(t, dir, "v1", bundle.Options{})
	cmd := exec.Command(os.Args[0], "-test.run", "TestKilled$")
	cmd.Env = append(os.Environ(), "DRUMLIN_TEST_HANG="+dir)
	out, err := cmd.StdoutPipe()
	if err != nil || cmd.Start() != nil {
		t.Fatal(err)
	}
	if line, _ := io.ReadAll(io.LimitReader(out, 7)); string(line) != "hanging" {
		t.Fatalf("%q", line)
	}
	if _, err := bundle.Create(context.Background(), dir, bundle.Options{Replace: true}); !errors.Is(err, bundle.ErrLocked) || !strings.Contains(err.Error(), fmt.Sprint("process ", cmd.Process.Pid)) {
		t.Error(err)
	}
	cmd.Process.Kill()
	cmd.Wait()
	if got := tree(t, parent); !strings.Contains(got, ".partial/half=written") || !strings.Contains(got, ".lock=") {
		t.Error(got)
	}
	os.Rename(dir, filepath.Join(parent, ".drumlin-out-0123456789abcdef.aside")) // as if killed between the renames
	if _, err := bundle.Create(context.Background(), dir, bundle.Options{}); !errors.Is(err, bundle.ErrExists) {
		t.Error(err)
	}
	if got := tree(t, parent); !strings.HasPrefix(got, "out/groups") || strings.Contains(got, ".drumlin") {
		t.Error(got)
	}
}

// enospc writes a little and then reports a full disk.
type enospc struct {
	w    io.Writer
	left int
	err  error
}

func (e *enospc) Write(p []byte) (int, error) {
	if e.left -= len(p); e.left < 0 {
		return 0, e.err
	}
	return e.w.Write(p)
}

func TestFailingWriter(t *testing.T) {
	parent := t.TempDir()
	broken := errors.New("broken")
	defer bundle.SetSink(func(f *os.File) io.Writer { return &enospc{f, 100000, broken} })()
	b := create(t, filepath.Join(parent, "out"), bundle.Options{})
	err := put(b, "large", strings.Repeat("x", 200000))
	if !errors.Is(err, bundle.ErrOutput) || !errors.Is(err, broken) {
		t.Error(err)
	}
	if err := b.Commit(rec()); !errors.Is(err, bundle.ErrOutput) {
		t.Error(err)
	}
	if e, _ := os.ReadDir(parent); len(e) != 0 {
		t.Error(e)
	}
}

// A disk that stores other bytes is found out.
func TestReadBackDiffers(t *testing.T) {
	defer bundle.SetSink(func(f *os.File) io.Writer { return flip{f} })()
	b := create(t, filepath.Join(t.TempDir(), "out"), bundle.Options{})
	if err := put(b, "a", "abc"); err != nil {
		t.Fatal(err)
	}
	if err := b.Commit(rec()); !errors.Is(err, bundle.ErrOutput) || !strings.Contains(err.Error(), "reads back") {
		t.Error(err)
	}
}

type flip struct{ w io.Writer }

func (f flip) Write(p []byte) (int, error) {
	q := bytes.Clone(p)
	q[0] ^= 1
	return f.w.Write(q)
}
