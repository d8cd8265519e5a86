package main_test

import (
	"bytes"
	"context"
	"encoding/json"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
	"time"
)

// foreignFiles says how the program must end on files that nobody here wrote: the
// statuses of survey and of map. Files that are not listed are surveyed (0) and
// refused by map for want of coordinate columns (4).
var foreignFiles = map[string][2]int{
	// Geometry of another shape, declared so: no points (6).
	"geoparquet-1.1/example.parquet": {0, 6},
	"geoparquet-2/example.parquet":   {0, 6},
	// Points, but two of them: nothing to release (7).
	"geoparquet-1.1/data-point-encoding_native.parquet": {0, 7},
	"geoparquet-1.1/data-point-encoding_wkb.parquet":    {0, 7},
	"geoparquet-2/data-point-encoding_wkb.parquet":      {0, 7},
	// Parquet's own types without a "geo" entry.
	"parquet/geospatial.parquet":          {0, 7},
	"parquet/geospatial-with-nan.parquet": {0, 7},
	"parquet/geography-lines.parquet":     {0, 7},
	"parquet/geography-polygons.parquet":  {0, 7},
	"parquet/geography-points.parquet":    {0, 6}, // all over the globe: the map's frame leaves the plane
	"parquet/crs-default.parquet":         {0, 7},
	"parquet/crs-geography.parquet":       {0, 7},
	"parquet/crs-arbitrary-value.parquet": {0, 7},
	"parquet/crs-projjson.parquet":        {0, 7},
	"parquet/crs-srid.parquet":            {0, 4}, // a CRS that is not known by its number alone
	// Packed or broken as their authors meant.
	"parquet/hadoop_lz4_compressed.parquet":                  {6, 4},
	"parquet/hadoop_lz4_compressed_larger.parquet":           {6, 4},
	"parquet/non_hadoop_lz4_compressed.parquet":              {6, 4},
	"parquet/datapage_v1-corrupt-checksum.parquet":           {5, 4},
	"parquet/rle-dict-uncompressed-corrupt-checksum.parquet": {5, 4},
}

// TestForeignFiles runs the program on every foreign file: it ends in time, with
// the status that fits, a line that says why, and no panic.
func TestForeignFiles(t *testing.T) {
	dir := os.Getenv("DRUMLIN_CONFORMANCE")
	if dir == "" {
		if os.Getenv("DRUMLIN_CI") == "1" {
			t.Fatal("DRUMLIN_CONFORMANCE names no folder: the conformance run must not be left out here")
		}
		t.Skip("the conformance run was left out: DRUMLIN_CONFORMANCE names no folder")
	}
	bin := filepath.Join(t.TempDir(), "drumlin")
	if out, err := exec.Command("go", "build", "-o", bin, ".").CombinedOutput(); err != nil {
		t.Fatalf("%v: %s", err, out)
	}
	var files []string
	err := filepath.WalkDir(dir, func(p string, d os.DirEntry, err error) error {
		if err == nil && strings.HasSuffix(p, ".parquet") {
			files = append(files, p)
		}
		return err
	})
	if err != nil || len(files) < 100 {
		t.Fatalf("%d files, %v", len(files), err)
	}
	for _, path := range files {
		rel, _ := filepath.Rel(dir, path)
		rel = filepath.ToSlash(rel)
		t.Run(rel, func(t *testing.T) {
			want, listed := foreignFiles[rel]
			switch {
			case listed:
			case strings.HasPrefix(rel, "parquet-bad/"):
				want = [2]int{-1, -1} // refused with 4, 5 or 6; read is right for some
			case strings.HasPrefix(rel, "geoparquet-"):
				want = [2]int{0, 6}
			default:
				want = [2]int{0, 4}
			}
			for k, args := range [][]string{{"survey", path, "--json"}, {"map", path, "--out", filepath.Join(t.TempDir(), "map"), "--quiet", "--lattice", "256", "--sensitivity=false"}} {
				ctx, cancel := context.WithTimeout(t.Context(), 120*time.Second)
				defer cancel()
				var stdout, stderr bytes.Buffer
				c := exec.CommandContext(ctx, bin, args...)
				c.Stdout, c.Stderr = &stdout, &stderr
				err := c.Run()
				if ctx.Err() != nil {
					t.Fatalf("%s: no answer after 120 s", args[0])
				}
				status := c.ProcessState.ExitCode()
				switch {
				case want[k] < 0 && (status == 0 || status >= 4 && status <= 7):
				case want[k] != status:
					t.Errorf("%s: status %d, want %d: %v %s", args[0], status, want[k], err, stderr.String())
				}
				said := strings.TrimSpace(stderr.String())
				if k == 1 && status != 0 && (said == "" || strings.Contains(said, "\n") || strings.Contains(said, "goroutine")) {
					t.Errorf("%s: %q", args[0], said)
				}
				if k == 0 && status == 0 && !json.Valid(stdout.Bytes()) {
					t.Errorf("survey: no JSON: %q", stdout.String())
				}
			}
		})
	}
}
