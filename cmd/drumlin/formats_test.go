package main_test

import (
	"bytes"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"drumlin/io/parquetfile"
)

// Every vector format of one map, across the antimeridian and within a study
// area: GDAL opens each that it knows and agrees with itself on counts, extent,
// CRS, fields and geometry. GeoParquet, which Debian's GDAL lacks, is opened
// too where its driver is there.
func TestFormatsAgree(t *testing.T) {
	if _, err := exec.LookPath("ogrinfo"); err != nil {
		demand(t, "ogrinfo is not installed: the formats were not compared")
	}
	dir := t.TempDir()
	area, zones := filepath.Join(dir, "area.geojson"), filepath.Join(dir, "zones.geojson")
	text := `{"type":"MultiPolygon","coordinates":[[[[176,-30],[180,-30],[180,-10],[176,-10],[176,-30]]],[[[-180,-30],[-173,-30],[-173,-10],[-180,-10],[-180,-30]]]]}`
	for _, path := range []string{area, zones} {
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	out := filepath.Join(dir, "out")
	mapInProcess(t, eventFile("fiji-quakes.csv"), "--x", "long", "--y", "lat", "--study-area", area, "--zones", zones, "--lattice", "256",
		"--formats", "geojson,geojson-seq,geoparquet,flatgeobuf,geotiff,parquet", "--out", out)
	drivers, err := exec.Command("ogrinfo", "--formats").Output()
	if err != nil {
		t.Fatal(err)
	}
	endings := []string{"geojson", "geojsons", "fgb"}
	if bytes.Contains(drivers, []byte("Parquet")) {
		endings = append(endings, "parquet")
	}
	// The record of each feature, its columns in a fixed order, WKT with 7 digits.
	for _, layer := range []string{"regions", "contours", "peaks", "zones"} {
		var first string
		for _, ending := range endings {
			path := filepath.Join(out, layer+"."+ending)
			said, err := exec.Command("ogrinfo", "-ro", "-al", path).CombinedOutput()
			if err != nil || bytes.Contains(said, []byte("ERROR")) || bytes.Contains(said, []byte("Warning")) {
				t.Fatalf("ogrinfo %s: %v\n%.2000s", path, err, said)
			}
			if s := essence(string(said)); first == "" {
				first = s
			} else if s != first {
				t.Errorf("%s differs from %s.geojson:\n%.1500s\n--- and ---\n%.1500s", filepath.Base(path), layer, s, first)
			}
		}
		if !strings.Contains(first, "4326") || !regexp.MustCompile(`Feature Count: [1-9]`).MatchString(first) {
			t.Errorf("%s:\n%.1000s", layer, first)
		}
	}
	checkParquetLayer(t, out)
}

var kinds = regexp.MustCompile(`\((Integer|Integer64|Real)\)`)

// essence is what ogrinfo says of counts, extent, CRS and features, in an order
// that does not depend on the format: FlatGeobuf sorts features.
func essence(said string) string {
	var head, features []string
	for line := range strings.Lines(said) {
		line = strings.TrimSpace(line)
		switch {
		case strings.HasPrefix(line, "Feature Count"), strings.HasPrefix(line, "Extent"), strings.HasPrefix(line, `ID["EPSG",4326]`):
			head = append(head, line)
		case strings.HasPrefix(line, "OGRFeature"):
			features = append(features, "")
		case strings.HasPrefix(line, "POINT"), strings.HasPrefix(line, "MULTIPOLYGON"), strings.HasPrefix(line, "id (String)"), strings.HasPrefix(line, "area_km2"), strings.HasPrefix(line, "rank"):
			if n := len(features); n > 0 {
				line = kinds.ReplaceAllString(line, "(number)") // GDAL guesses those of GeoJSON
				features[n-1] += line + "\n"
			}
		}
	}
	slices.Sort(features)
	return strings.Join(append(head, features...), "\n")
}

// checkParquetLayer opens the GeoParquet files with the program's own reader;
// that their content comes back is tested beside their writer.
func checkParquetLayer(t *testing.T, dir string) {
	t.Helper()
	for _, layer := range []string{"regions", "contours"} {
		f, err := parquetfile.Open(filepath.Join(dir, layer+".parquet"), parquetfile.Options{})
		if err != nil {
			t.Fatal(err)
		}
		want := readFeatures(t, filepath.Join(dir, layer+".geojson"))
		if n := f.Info().Rows; n != int64(len(want)) {
			t.Errorf("%s: %d rows, %d features", layer, n, len(want))
		}
		if crs := f.Info().CRS; crs != "EPSG:4326" && crs != "OGC:CRS84" && crs != "" {
			t.Errorf("%s: CRS %q", layer, crs)
		}
		f.Close()
	}
}
