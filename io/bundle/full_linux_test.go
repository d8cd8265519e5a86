package bundle_test

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"

	"drumlin/io/bundle"
)

// A real full disk: a file system of 64 kB in memory, which needs the right to
// mount; without it TestFailingWriter stands in.
func TestDiskFull(t *testing.T) {
	disk := t.TempDir()
	if err := syscall.Mount("tmpfs", disk, "tmpfs", 0, "size=64k"); err != nil {
		if os.Getenv("DRUMLIN_CI") == "1" {
			t.Fatalf("no right to mount a small disk (%v); the check must not be left out here", err)
		}
		t.Skipf("left out: no right to mount a small disk (%v)", err)
	}
	defer syscall.Unmount(disk, 0)
	b := create(t, filepath.Join(disk, "out"), bundle.Options{})
	err := put(b, "large", strings.Repeat("x", 1<<20))
	if !errors.Is(err, bundle.ErrOutput) || !errors.Is(err, syscall.ENOSPC) || !strings.Contains(err.Error(), "full, make room") || strings.Contains(err.Error(), "\n") {
		t.Error(err)
	}
	if err := b.Abort(); err != nil {
		t.Error(err)
	}
	if e, _ := os.ReadDir(disk); len(e) != 0 {
		t.Error(e)
	}
	make1(t, filepath.Join(disk, "out"), "fits", bundle.Options{}) // there is room again
}
