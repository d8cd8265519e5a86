package geotiff_test

import (
	"encoding/json"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"drumlin/io/geotiff"
	"drumlin/spatial"
)

// tool runs a program of GDAL, the independent reader. Without it the test is
// skipped, but not in CI.
func tool(t *testing.T, name string, args ...string) string {
	t.Helper()
	if _, err := exec.LookPath(name); err != nil {
		if os.Getenv("DRUMLIN_CI") == "1" {
			t.Fatalf("%s is missing: install gdal-bin", name)
		}
		t.Skipf("%s is missing: install gdal-bin to run this test", name)
	}
	cmd := exec.Command(name, args...)
	var complaints strings.Builder
	cmd.Stderr = &complaints
	out, err := cmd.Output()
	if err != nil || complaints.Len() > 0 {
		t.Fatalf("%s %v: %v\n%s", name, args, err, complaints.String())
	}
	return string(out)
}

func onDisk(t *testing.T, s spatial.Surface) string {
	name := filepath.Join(t.TempDir(), "surface.tif")
	if err := os.WriteFile(name, write(t, s, geotiff.Options{}), 0o666); err != nil {
		t.Fatal(err)
	}
	return name
}

func TestGDALReadsPixels(t *testing.T) {
	s := bumps(laea, 600, 500)
	name := onDisk(t, s)
	for _, n := range [][2]int{{0, 0}, {599, 0}, {0, 499}, {180, 350}, {599, 499}, {420, 200}} {
		x, y := s.Coord(0, n[0]), s.Coord(1, n[1])
		out := strings.TrimSpace(tool(t, "gdallocationinfo", "-valonly", "-geoloc", name, num(x), num(y)))
		got, err := strconv.ParseFloat(out, 64)
		want := s.Values[n[1]*600+n[0]]
		if err != nil || !(math.Abs(got-want) <= 1e-6*want || got != got && want != want) {
			t.Errorf("node %v at (%g, %g): %q, want %g", n, x, y, out, want)
		}
	}
}

func num(x float64) string { return strconv.FormatFloat(x, 'f', -1, 64) }

func TestGDALReadsLayout(t *testing.T) {
	var info struct {
		Bands []struct {
			Block         []int
			Type          string
			Description   string
			Unit          string
			NoDataValue   any `json:"noDataValue"`
			Overviews     []struct{ Size []int }
			ColorInterp   string `json:"colorInterpretation"`
			ComputedStats any
		}
		GeoTransform []float64
		Metadata     map[string]map[string]string
	}
	out := tool(t, "gdalinfo", "-json", onDisk(t, bumps(laea, 1100, 900)))
	if err := json.Unmarshal([]byte(out), &info); err != nil {
		t.Fatal(err)
	}
	b := info.Bands[0]
	if len(info.Bands) != 1 || b.Type != "Float32" || b.Block[0] != 256 || b.Unit != "events per km2" ||
		b.Description != "event intensity" || len(b.Overviews) != 3 || b.NoDataValue != "NaN" {
		t.Errorf("%+v", info.Bands)
	}
	want := []float64{-31032, 64, 0, 4000 + 128*899.5, 0, -128}
	for i, v := range info.GeoTransform {
		if v != want[i] {
			t.Fatalf("geotransform %v, want %v", info.GeoTransform, want)
		}
	}
	if info.Metadata[""]["AREA_OR_POINT"] != "Area" || info.Metadata["IMAGE_STRUCTURE"]["COMPRESSION"] != "DEFLATE" {
		t.Errorf("metadata %v", info.Metadata)
	}
}

// Every plane comes back with all its parameters, as the WKT that GDAL makes
// of the keys.
func TestGDALReadsCRS(t *testing.T) {
	for _, c := range []struct {
		crs  spatial.CRS
		want []string
	}{
		{laea, []string{`BASEGEOGCRS["WGS 84"`, `METHOD["Lambert Azimuthal Equal Area",ID["EPSG",9820]]`,
			`"Latitude of natural origin",-21,`, `"Longitude of natural origin",178,`, `"False easting",0,`, `"False northing",0,`, `LENGTHUNIT["metre",1`}},
		{spatial.CRS{Name: "LAEA shifted", Method: "LAEA", Ellipsoid: "WGS 84", Lon0: -3.25, Lat0: 54.5, FE: 400000, FN: -100000},
			[]string{`"Latitude of natural origin",54.5,`, `"Longitude of natural origin",-3.25,`, `"False easting",400000,`, `"False northing",-100000,`}},
		{spatial.CRS{Name: "Albers", Method: "AEA", Ellipsoid: "WGS 84", Lon0: 132, Lat0: 1, Lat1: -18, Lat2: -36, FE: 5, FN: 6},
			[]string{`METHOD["Albers Equal Area"`, `"Latitude of false origin",1,`, `"Longitude of false origin",132,`,
				`"Latitude of 1st standard parallel",-18,`, `"Latitude of 2nd standard parallel",-36,`, `"Easting at false origin",5,`, `"Northing at false origin",6,`}},
		{spatial.CRS{Name: "TM", Method: "TM", Ellipsoid: "WGS 84", Lon0: -2, Lat0: 49, K0: .9996012717, FE: 400000, FN: -100000},
			[]string{`METHOD["Transverse Mercator"`, `"Latitude of natural origin",49,`, `"Longitude of natural origin",-2,`,
				`"Scale factor at natural origin",0.9996012717,`, `"False easting",400000,`, `"False northing",-100000,`}},
		{spatial.CRS{Name: "LCC", Method: "LCC", Ellipsoid: "WGS 84", Lon0: 10, Lat0: 52, Lat1: 35, Lat2: 65, FE: 4000000, FN: 2800000},
			[]string{`METHOD["Lambert Conic Conformal (2SP)"`, `"Latitude of false origin",52,`, `"Longitude of false origin",10,`,
				`"Latitude of 1st standard parallel",35,`, `"Latitude of 2nd standard parallel",65,`, `"Easting at false origin",4000000,`, `"Northing at false origin",2800000,`}},
		{spatial.CRS{Name: "LCC one", Method: "LCC", Ellipsoid: "WGS 84", Lon0: 10, Lat0: 52, Lat1: 52, Lat2: 52, K0: .9999},
			[]string{`METHOD["Lambert Conic Conformal (1SP)"`, `"Latitude of natural origin",52,`, `"Scale factor at natural origin",0.9999,`}},
		{spatial.CRS{Name: "GRS", Method: "LAEA", Ellipsoid: "GRS 80", Lon0: 10, Lat0: 52}, []string{`GRS 1980`, `298.257222101`}},
		{spatial.CRS{ID: "EPSG:3035", Name: "any", Method: "LAEA", Ellipsoid: "GRS 80"}, []string{`PROJCRS["ETRS89-extended / LAEA Europe"`, `ID["EPSG",3035]`}},
		{spatial.CRS{ID: "EPSG:32631", Name: "any", Method: "TM", Ellipsoid: "WGS 84"}, []string{`UTM zone 31N`, `ID["EPSG",32631]`}},
		{spatial.CRS{ID: "EPSG:3857", Name: "any", Method: "WebMercator", Ellipsoid: "WGS 84"}, []string{`Pseudo-Mercator`, `ID["EPSG",3857]`}},
		{spatial.CRS{ID: "EPSG:4326", Name: "any", Method: "geographic", Ellipsoid: "WGS 84"}, []string{`GEOGCRS["WGS 84"`, `ID["EPSG",4326]`}},
		{spatial.CRS{Name: "plane, metres without a place", Method: "plane"}, []string{`ENGCRS["plane without a place, metres"`, `LENGTHUNIT["metre",1`}},
	} {
		out := tool(t, "gdalinfo", onDisk(t, bumps(c.crs, 40, 30)))
		_, wkt, _ := strings.Cut(out, "Coordinate System is:")
		wkt, _, _ = strings.Cut(wkt, "Data axis")
		wkt = regexp.MustCompile(`\s*\n\s*`).ReplaceAllString(wkt, "")
		for _, w := range c.want {
			if !strings.Contains(wkt, w) {
				t.Errorf("%s %s: no %s in\n%s", c.crs.Name, c.crs.ID, w, wkt)
			}
		}
		if c.crs.Method == "plane" && strings.Contains(wkt, "GEOG") {
			t.Errorf("a plane without a place got a place: %s", wkt)
		}
	}
}
