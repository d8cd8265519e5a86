package bundle_test

import (
	"context"
	"encoding/json"
	"errors"
	"io"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"drumlin/io/bundle"
	"drumlin/io/geojson"
	"drumlin/io/geotiff"
	"drumlin/mv"
	"drumlin/spatial"
)

// release passes two hills of 4,000 events through the guard.
func release(t testing.TB, p spatial.Projection, nodes int) *spatial.Release {
	t.Helper()
	step := 20000 / float64(nodes)
	l, err := mv.NewLattice([]float64{-10000, -10000}, []float64{step, step}, []int{nodes, nodes})
	if err != nil {
		t.Fatal(err)
	}
	const n = 4000
	f := mv.NewGrid(l)
	c := mv.NewGrid(l)
	hill := func(x, y, cx, cy, s float64) float64 {
		return math.Exp(-((x-cx)*(x-cx)+(y-cy)*(y-cy))/(2*s*s)) / (2 * math.Pi * s * s)
	}
	top := 0.
	for i := range f.Values {
		x, y := l.Coord(0, i%nodes), l.Coord(1, i/nodes)
		f.Values[i] = .7*hill(x, y, -2000, 1000, 1500) + .3*hill(x, y, 4000, -3000, 1000)
		c.Values[i] = n * f.Values[i] * l.CellVolume()
		top = max(top, f.Values[i])
	}
	r, err := spatial.Guard(spatial.Analysis{
		Density: f, Counts: c, Events: n, Total: n, KernelAtZero: top / 20, RegionRule: "events",
		Regions:    []spatial.Threshold{{Content: .5, Density: top * .45}, {Content: .95, Density: top * .05}},
		BandLevels: []float64{top * .05, top * .3, top * .6},
		Peaks:      []spatial.Summit{{At: spatial.XY{X: -2000, Y: 1000}, Density: top, StandardError: top / 10, SmoothingBias: -top / 20}},
	}, spatial.Policy{MinEvents: 10}, p)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func writeAll(t testing.TB, dir string, r *spatial.Release, workers int) {
	t.Helper()
	ctx := context.Background()
	b, err := bundle.Create(ctx, dir, bundle.Options{Replace: true})
	if err != nil {
		t.Fatal(err)
	}
	defer b.Abort()
	for name, write := range map[string]func(io.Writer) error{
		"regions.geojson":  func(w io.Writer) error { return geojson.WriteRegions(w, r, geojson.Meta{}) },
		"contours.geojson": func(w io.Writer) error { return geojson.WriteContours(w, r, geojson.Meta{}) },
		"peaks.geojson":    func(w io.Writer) error { return geojson.WritePeaks(w, r, geojson.Meta{}) },
		"surface.tif": func(w io.Writer) error {
			return geotiff.Write(ctx, w, r, geotiff.Options{Workers: workers})
		},
	} {
		w, err := b.File(name)
		if err != nil {
			t.Fatal(err)
		}
		if err := errors.Join(write(w), w.Close()); err != nil {
			t.Fatal(err)
		}
	}
	if err := b.Commit(rec()); err != nil {
		t.Fatal(err)
	}
}

// A bundle of a real release, east and west of the antimeridian and on a plane
// without a place: the same bytes twice, and GDAL opens every file in it.
func TestReleaseToBundle(t *testing.T) {
	for name, p := range map[string]spatial.Projection{
		"antimeridian": spatial.AutoPlane(180, -17),
		"plane":        planeWithoutPlace(t),
	} {
		parent := t.TempDir()
		r := release(t, p, 300)
		one, two := filepath.Join(parent, "one"), filepath.Join(parent, "two")
		writeAll(t, one, r, 1)
		writeAll(t, two, release(t, p, 300), 3)
		for _, f := range []string{"regions.geojson", "contours.geojson", "peaks.geojson", "surface.tif", bundle.RecordName} {
			a, err := os.ReadFile(filepath.Join(one, f))
			if err != nil {
				t.Fatal(err)
			}
			if b, err := os.ReadFile(filepath.Join(two, f)); err != nil || string(a) != string(b) {
				t.Errorf("%s: %s differs between two equal runs (%v)", name, f, err)
			}
		}
		text, _ := os.ReadFile(filepath.Join(one, "regions.geojson"))
		var fc struct {
			BBox     []float64
			Features []struct{ ID string }
		}
		if err := json.Unmarshal(text, &fc); err != nil || len(fc.Features) != 2 || fc.Features[0].ID != "region-50" {
			t.Fatalf("%s: %v\n%.400s", name, err, text)
		}
		if (name == "antimeridian") != (fc.BBox[0] > fc.BBox[2]) || (name == "plane") != strings.Contains(string(text), "without a place") {
			t.Errorf("%s: bbox %v", name, fc.BBox)
		}
		gdal(t, "Feature Count: 2", "ogrinfo", "-al", "-so", filepath.Join(one, "regions.geojson"))
		gdal(t, "Size is 300, 300", "gdalinfo", filepath.Join(one, "surface.tif"))
	}
}

func planeWithoutPlace(t *testing.T) spatial.Projection {
	t.Helper()
	p, err := spatial.NewProjection(spatial.CRS{Name: "plane, metres without a place", Method: "plane"})
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func gdal(t *testing.T, want, name string, args ...string) {
	t.Helper()
	if _, err := exec.LookPath(name); err != nil {
		if os.Getenv("DRUMLIN_CI") == "1" {
			t.Fatalf("%s is missing: install gdal-bin", name)
		}
		t.Logf("%s is missing: install gdal-bin to run this part", name)
		return
	}
	out, err := exec.Command(name, args...).CombinedOutput()
	if err != nil || !strings.Contains(string(out), want) || strings.Contains(string(out), "Warning") {
		t.Errorf("%s %v: %v, no %q in\n%s", name, args, err, want, out)
	}
}
