package geojson_test

import (
	"bytes"
	"encoding/json"
	"errors"
	"math"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"

	"github.com/paulmach/orb"

	"drumlin/io/geojson"
	"drumlin/spatial"
)

func square(x, y, side float64) orb.Ring {
	return orb.Ring{{x, y}, {x + side, y}, {x + side, y + side}, {x, y + side}, {x, y}}
}

func reversed(r orb.Ring) orb.Ring {
	out := r.Clone()
	out.Reverse()
	return out
}

func regions() []spatial.Region {
	return []spatial.Region{
		{Content: .5, Rule: "events", ThresholdPerKM2: 12.3456789, AreaKM2: 1. / 3, Events: spatial.Count{Estimate: 512.4, Min: 500.2, Max: 520.7},
			EventShare: .5012345678, Weight: 777.25, Mass: .48, MeanPerKM2: 1537.2,
			Shape: orb.MultiPolygon{{square(10, 50, 2), reversed(square(10.5, 50.5, .25))}, {square(20.123456749, -3.00000004, 1)}}},
		{Content: .95, Rule: "events", ThresholdPerKM2: 1e-9, AreaKM2: 2e6, Events: spatial.Count{Estimate: 1000, Min: 999.9999999, Max: 1000.0000001},
			EventShare: .95, Mass: .9, MeanPerKM2: math.NaN(),
			Shape: orb.MultiPolygon{{reversed(square(9, 49, 4)), square(9.5, 49.5, .5)}}}, // wound the wrong way
	}
}

func bands() []spatial.Band {
	return []spatial.Band{
		{FromPerKM2: 1, ToPerKM2: 2, AreaKM2: 10, Events: spatial.Count{Estimate: 15, Min: 12, Max: 18}, Shape: orb.MultiPolygon{{square(179, -17, 1)}, {square(-180, -17, 1)}}},
		{FromPerKM2: 2, ToPerKM2: math.Inf(1), AreaKM2: 3, Events: spatial.Count{Estimate: 20, Min: 20, Max: 20}, Shape: orb.MultiPolygon{{square(179.5, -16.5, .25)}}},
	}
}

func peaks() []spatial.Peak {
	return []spatial.Peak{
		{Rank: 1, Position: spatial.LonLat{Lon: 10.98765432, Lat: 51}, IntensityPerKM2: 40, StandardErrorPerKM2: 2, SmoothingBiasPerKM2: -3, DebiasedPerKM2: 43, EffectiveEvents: 31.5, Region: .5},
		{Rank: 2, Position: spatial.LonLat{Lon: -0.0000000001, Lat: 51.5}, IntensityPerKM2: 30, EffectiveEvents: 22},
	}
}

type writer func(*bytes.Buffer) error

func all(m geojson.Meta) map[string]writer {
	return map[string]writer{
		"regions.geojson":  func(b *bytes.Buffer) error { return geojson.RegionsForTest(b, regions(), false, m) },
		"contours.geojson": func(b *bytes.Buffer) error { return geojson.ContoursForTest(b, bands(), false, m) },
		"peaks.geojson":    func(b *bytes.Buffer) error { return geojson.PeaksForTest(b, peaks(), false, m) },
	}
}

func text(t *testing.T, w writer) string {
	t.Helper()
	var b bytes.Buffer
	if err := w(&b); err != nil {
		t.Fatal(err)
	}
	return b.String()
}

// The duties of RFC 7946, by section, on every kind of file.
func TestRFC7946(t *testing.T) {
	for name, w := range all(geojson.Meta{Weighted: true, Caution: "mind the gap"}) {
		s := text(t, w)
		if again := text(t, w); again != s {
			t.Errorf("%s: other bytes the second time", name)
		}
		var top map[string]json.RawMessage
		if err := json.Unmarshal([]byte(s), &top); err != nil {
			t.Fatalf("%s: %v\n%s", name, err, s)
		}
		for _, no := range []string{"crs", "coordinates", "geometry", "properties"} { // 4, 7.1
			if _, has := top[no]; has {
				t.Errorf("%s has the member %s", name, no)
			}
		}
		var fc struct {
			Type     string
			BBox     []float64
			Features []struct {
				Type, ID   string
				Properties map[string]any
				Geometry   struct {
					Type        string
					Coordinates json.RawMessage
				}
			}
		}
		if err := json.Unmarshal([]byte(s), &fc); err != nil || fc.Type != "FeatureCollection" {
			t.Fatalf("%s: %v", name, err)
		}
		if len(fc.Features) != 2 || len(fc.BBox) != 4 || !strings.HasSuffix(s, "]}\n") || strings.Count(s, "\n{") != 2 {
			t.Errorf("%s: %d features, bbox %v, or the lines are not one feature each:\n%s", name, len(fc.Features), fc.BBox, s)
		}
		for _, f := range fc.Features {
			if f.Type != "Feature" || f.ID == "" || len(f.Properties) == 0 { // 3.2
				t.Errorf("%s: %+v", name, f)
			}
			if f.Geometry.Type == "Point" {
				continue
			}
			var mp orb.MultiPolygon
			if err := json.Unmarshal(f.Geometry.Coordinates, &mp); err != nil || f.Geometry.Type != "MultiPolygon" {
				t.Fatalf("%s: %s, %v", name, f.Geometry.Type, err)
			}
			checkPolygons(t, name, mp)
		}
		for _, c := range regexp.MustCompile(`\[-?[^][,]*,[^][,]*\]`).FindAllString(s, -1) { // 11.2
			if !regexp.MustCompile(`^\[-?\d+(\.\d{0,6}[1-9])?,-?\d+(\.\d{0,6}[1-9])?\]$`).MatchString(c) || strings.Contains(c, "[-0,") {
				t.Errorf("%s: position %s", name, c)
			}
		}
		golden(t, name, s)
	}
}

func checkPolygons(t *testing.T, name string, mp orb.MultiPolygon) {
	t.Helper()
	for _, p := range mp {
		for i, r := range p {
			if len(r) < 4 || r[0] != r[len(r)-1] { // 3.1.6
				t.Errorf("%s: open or short ring %v", name, r)
			}
			if want := orb.CCW; (r.Orientation() == want) != (i == 0) {
				t.Errorf("%s: ring %d winds the wrong way", name, i)
			}
			for _, q := range r {
				if math.Abs(q[0]) > 180 || math.Abs(q[1]) > 90 {
					t.Errorf("%s: position %v", name, q)
				}
			}
		}
	}
}

func golden(t *testing.T, name, s string) {
	t.Helper()
	path := filepath.Join("testdata", name)
	if os.Getenv("DRUMLIN_GOLDEN") == "1" {
		if err := os.WriteFile(path, []byte(s), 0o666); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if s != string(want) {
		t.Errorf("%s differs from testdata: a changed layout is its own commit, made with DRUMLIN_GOLDEN=1\n%s", name, s)
	}
}

func TestProperties(t *testing.T) {
	for _, c := range []struct{ file, want string }{
		{"regions.geojson", `"id":"region-50","properties":{"content":0.5,"rule":"events","threshold_per_km2":12.34568,"area_km2":0.3333333,"events":512,"events_min":500,"events_max":521,"event_share":0.5012346,"mass":0.48,"mean_per_km2":1537.2}`},
		{"regions.geojson", `"threshold_per_km2":1e-09,"area_km2":2000000,"events":1000,"events_min":1000,"events_max":1000,`},
		{"regions.geojson", `"mean_per_km2":null`},
		{"contours.geojson", `"id":"band-2","properties":{"from_per_km2":2,"to_per_km2":null,"area_km2":3,"events":20,"events_min":20,"events_max":20}`},
		{"contours.geojson", `"bbox":[179,-17,-179,-16]`}, // 5.2: west > east across the antimeridian
		{"peaks.geojson", `"id":"peak-1","properties":{"rank":1,"intensity_per_km2":40,"standard_error_per_km2":2,"smoothing_bias_per_km2":-3,"debiased_per_km2":43,"region":0.5,"effective_events":31.5},"geometry":{"type":"Point","coordinates":[10.9876543,51]}`},
		{"peaks.geojson", `"region":null,"effective_events":22},"geometry":{"type":"Point","coordinates":[0,51.5]}`},
		{"peaks.geojson", `"drumlin":{"what":"peaks","unit":"events per km2","min_events":10,"lattice_step_m":[64,64]}`},
	} {
		if s := text(t, all(geojson.Meta{})[c.file]); !strings.Contains(s, c.want) {
			t.Errorf("%s: no %s in\n%s", c.file, c.want, s)
		}
	}
	s := text(t, func(b *bytes.Buffer) error {
		return geojson.RegionsForTest(b, regions()[:1], true, geojson.Meta{Weighted: true, Unit: "events per km2 and year"})
	})
	for _, want := range []string{`"weight":777.25,"mass"`, `"unit":"events per km2 and year"`, `"positions":"metres on a plane without a place, not longitude and latitude"`} {
		if !strings.Contains(s, want) {
			t.Errorf("no %s in\n%s", want, s)
		}
	}
}

func TestEmptyRelease(t *testing.T) {
	var r spatial.Release
	for i, w := range []func() (string, error){
		func() (string, error) {
			var b bytes.Buffer
			err := geojson.WriteRegions(&b, &r, geojson.Meta{})
			return b.String(), err
		},
		func() (string, error) {
			var b bytes.Buffer
			err := geojson.WriteContours(&b, &r, geojson.Meta{})
			return b.String(), err
		},
		func() (string, error) {
			var b bytes.Buffer
			err := geojson.WritePeaks(&b, &r, geojson.Meta{})
			return b.String(), err
		},
	} {
		s, err := w()
		if err != nil || !strings.Contains(s, `"features":[]}`) || strings.Contains(s, "bbox") || !json.Valid([]byte(s)) {
			t.Errorf("%d: %v %s", i, err, s)
		}
	}
}

// What rounding leaves of slivers, spikes and repeats must still be rings.
func TestRounding(t *testing.T) {
	const q = 1e-7
	shape := orb.MultiPolygon{
		{orb.Ring{{0, 0}, {1, 0}, {1, .2 * q}, {1, 1}, {1, 2}, {1, 1}, {0, 1}, {.3 * q, 1}, {0, 0}}}, // repeats and a spike
		{orb.Ring{{5, 5}, {5 + .4*q, 5}, {5, 5 + .4*q}, {5, 5}}},                                     // vanishes
		{orb.Ring{{6, 6}, {7, 6}, {8, 6.1 * q / q * 6 / 6.1}, {6, 6}}},                               // no area
		{orb.Ring{{-1, 9}, {0, 9}, {2, 9}, {2, 11}, {0, 11}, {0, 9}, {-1, 9}}},                       // a spike across the seam
	}
	s := text(t, func(b *bytes.Buffer) error {
		return geojson.RegionsForTest(b, []spatial.Region{{Content: .5, Shape: shape}, {Content: .6, Shape: shape[1:2]}}, false, geojson.Meta{})
	})
	if !strings.Contains(s, `[[[[0,0],[1,0],[1,1],[0,1],[0,0]]],[[[0,9],[2,9],[2,11],[0,11],[0,9]]]]}`) || !strings.Contains(s, `"geometry":null`) {
		t.Error(s)
	}
	s = text(t, func(b *bytes.Buffer) error {
		return geojson.PeaksForTest(b, peaks(), false, geojson.Meta{Decimals: 3})
	})
	if !strings.Contains(s, "[10.988,51]") {
		t.Error(s)
	}
}

func TestBoundingBox(t *testing.T) {
	for _, c := range []struct {
		mp   orb.MultiPolygon
		want string
	}{
		{orb.MultiPolygon{{square(1, 2, 3)}}, "[1,2,4,5]"},
		{orb.MultiPolygon{{square(-100, 2, 3)}, {square(60, 2, 3)}}, "[-100,2,63,5]"},
		{orb.MultiPolygon{{square(-170, 2, 3)}, {square(160, 2, 3)}}, "[160,2,-167,5]"},
		{orb.MultiPolygon{{orb.Ring{{-180, 60}, {180, 60}, {180, 90}, {-180, 90}, {-180, 60}}}}, "[-180,60,180,90]"}, // 5.3
	} {
		s := text(t, func(b *bytes.Buffer) error {
			return geojson.RegionsForTest(b, []spatial.Region{{Content: .5, Shape: c.mp}}, false, geojson.Meta{})
		})
		if !strings.Contains(s, `"bbox":`+c.want) {
			t.Errorf("want %s in %s", c.want, s)
		}
	}
}

func TestWriteErrors(t *testing.T) {
	for _, p := range []orb.Point{{181, 0}, {0, 90.1}, {math.NaN(), 0}, {0, math.Inf(-1)}} {
		r := []spatial.Region{{Content: .5, Shape: orb.MultiPolygon{{orb.Ring{{0, 0}, {1, 0}, p, {0, 0}}}}}}
		err := geojson.RegionsForTest(new(bytes.Buffer), r, false, geojson.Meta{})
		if err == nil || !strings.Contains(err.Error(), "region-50: polygon 1, ring 1: position 3") {
			t.Errorf("%v: %v", p, err)
		}
	}
	broken := errors.New("broken")
	if err := geojson.RegionsForTest(failing{broken}, regions(), false, geojson.Meta{}); !errors.Is(err, broken) {
		t.Error(err)
	}
	if err := geojson.RegionsForTest(new(bytes.Buffer), nil, false, geojson.Meta{Decimals: 8}); err == nil {
		t.Error("8 decimals passed")
	}
}

type failing struct{ err error }

func (f failing) Write([]byte) (int, error) { return 0, f.err }

func TestAppendQuanta(t *testing.T) {
	for _, q := range []int64{0, 1, -1, 10, 9999999, 10000000, -10000001, 1799999999, -1800000000, 123456700, 1 << 52} {
		got := string(geojson.AppendQuanta(nil, q, 7))
		v, err := strconv.ParseFloat(got, 64)
		if err != nil || math.Round(v*1e7) != float64(q) || strings.ContainsAny(got, "eE") {
			t.Errorf("%d: %s", q, got)
		}
	}
}

func TestGDALReads(t *testing.T) {
	if _, err := exec.LookPath("ogrinfo"); err != nil {
		if os.Getenv("DRUMLIN_CI") == "1" {
			t.Fatal("ogrinfo is missing: install gdal-bin")
		}
		t.Skip("ogrinfo is missing: install gdal-bin to run this test")
	}
	for name, want := range map[string][]string{
		"regions.geojson":  {"Geometry: Multi Polygon", "Feature Count: 2", `ID["EPSG",4326]`, "threshold_per_km2: Real", "event_share: Real", "Extent: (9.000000, -3.000000) - (21.123457, 53.000000)"},
		"contours.geojson": {"Geometry: Multi Polygon", "Feature Count: 2", "from_per_km2: ", "to_per_km2: "},
		"peaks.geojson":    {"Geometry: Point", "Feature Count: 2", "rank: Integer", "effective_events: Real"},
	} {
		path := filepath.Join(t.TempDir(), name)
		if err := os.WriteFile(path, []byte(text(t, all(geojson.Meta{})[name])), 0o666); err != nil {
			t.Fatal(err)
		}
		out, err := exec.Command("ogrinfo", "-al", "-so", path).CombinedOutput()
		if err != nil {
			t.Fatalf("%v\n%s", err, out)
		}
		for _, w := range append(want, "GEOGCRS[\"WGS 84\"") {
			if !strings.Contains(string(out), w) {
				t.Errorf("%s: no %q in\n%s", name, w, out)
			}
		}
		if strings.Contains(string(out), "Warning") || strings.Contains(string(out), "ERROR") {
			t.Errorf("%s", out)
		}
	}
}

func BenchmarkWriteRegions(b *testing.B) {
	var ring orb.Ring
	for i := range 100000 {
		a := 2 * math.Pi * float64(i) / 100000
		ring = append(ring, orb.Point{10 + math.Cos(a)*(1+.1*math.Sin(50*a)), 50 + math.Sin(a)*(1+.1*math.Sin(50*a))})
	}
	r := []spatial.Region{{Content: .5, Rule: "events", Shape: orb.MultiPolygon{{append(ring, ring[0])}}}}
	var out bytes.Buffer
	for b.Loop() {
		out.Reset()
		if err := geojson.RegionsForTest(&out, r, false, geojson.Meta{}); err != nil {
			b.Fatal(err)
		}
	}
	b.SetBytes(int64(out.Len()))
}
