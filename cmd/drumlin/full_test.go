package main_test

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"drumlin/cmd/drumlin/internal/cli"
)

// TestDiskFull writes to file systems that are too small for the bundle, so
// that one or other of its files cannot be finished.
func TestDiskFull(t *testing.T) {
	if runtime.GOOS != "linux" || os.Geteuid() != 0 {
		t.Skip("a full disk is tried on Linux, by root, who may mount a small file system")
	}
	args := []string{"map", eventFile("fiji-quakes.parquet"), "--x", "long", "--y", "lat", "--crs", "EPSG:4326", "--lattice", "256", "--sensitivity=false", "--out"}
	roomy := filepath.Join(t.TempDir(), "map")
	var stderr bytes.Buffer
	if status := cli.Main(append(args, roomy), &bytes.Buffer{}, &stderr); status != 0 {
		t.Fatalf("status %d: %s", status, stderr.String())
	}
	entries, err := os.ReadDir(roomy)
	if err != nil {
		t.Fatal(err)
	}
	var need int64 // in pages, which is how such a file system counts
	for _, e := range entries {
		info, err := e.Info()
		if err != nil {
			t.Fatal(err)
		}
		need += (info.Size() + 4095) / 4096
	}
	for _, share := range []float64{0.03, 0.3, 0.6, 0.85, 0.97} {
		dir := t.TempDir()
		pages := int64(share * float64(need))
		if out, err := exec.Command("mount", "-t", "tmpfs", "-o", fmt.Sprintf("size=%dk", 4*pages), "tmpfs", dir).CombinedOutput(); err != nil {
			demand(t, "no small file system could be mounted: %v: %s", err, out)
		}
		t.Cleanup(func() {
			if out, err := exec.Command("umount", dir).CombinedOutput(); err != nil {
				t.Errorf("umount: %v: %s", err, out)
			}
		})
		var stdout, stderr bytes.Buffer
		status := cli.Main(append(args, filepath.Join(dir, "map")), &stdout, &stderr)
		if status != 8 || !strings.Contains(stderr.String(), "full") || oneLine(stderr.String()) != "" || stdout.Len() > 0 {
			t.Errorf("%d of %d pages: status %d, %s: %q", pages, need, status, oneLine(stderr.String()), stderr.String())
		}
		left, err := os.ReadDir(dir)
		if err != nil || len(left) > 0 {
			t.Errorf("%d of %d pages: %v is left, %v", pages, need, left, err)
		}
	}
}
