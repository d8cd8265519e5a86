package geojson_test

import (
	"bytes"
	"errors"
	"strings"
	"testing"

	"github.com/paulmach/orb"

	"drumlin/io/geojson"
	"drumlin/spatial"
)

const (
	good  = `[[[0,0],[1,0],[1,1],[0,1],[0,0]]]`
	wrong = `[[[0,0],[0,1],[1,1],[1,0],[0,0]],[[0.2,0.2],[0.4,0.2],[0.4,0.4],[0.2,0.2]]]`
)

func TestReadPolygons(t *testing.T) {
	for name, c := range map[string]struct {
		in    string
		n     int // features
		first string
	}{
		"bare polygon":  {`{"type":"Polygon","coordinates":` + good + `}`, 1, ""},
		"byte order":    {"\xef\xbb\xbf" + `{"type":"Polygon","coordinates":` + good + `}`, 1, ""},
		"wrong winding": {`{"type":"Polygon","coordinates":` + wrong + `}`, 1, ""},
		"feature":       {`{"type":"Feature","id":7,"properties":{"name":"Ölsitz"},"geometry":{"type":"MultiPolygon","coordinates":[` + good + `]}}`, 1, "Ölsitz"},
		"collection": {`{"type":"FeatureCollection","crs":{"type":"name","properties":{"name":"urn:ogc:def:crs:OGC:1.3:CRS84"}},"features":[
			{"type":"Feature","id":"a","properties":null,"geometry":{"type":"Polygon","coordinates":` + wrong + `}},
			{"type":"Feature","properties":{},"geometry":null},
			{"type":"Feature","properties":{"Geometry":1},"geometry":{"type":"GeometryCollection","geometries":[{"type":"Polygon","coordinates":` + good + `}]}}]}`, 2, "a"},
		"third number": {`{"type":"Polygon","coordinates":[[[0,0,5],[1,0,5],[1,1,5],[0,0,5]]]}`, 1, ""},
	} {
		got, err := geojson.ReadPolygons(strings.NewReader(c.in))
		if err != nil || len(got) != c.n {
			t.Errorf("%s: %d features, %v", name, len(got), err)
			continue
		}
		if n := got[0].Name("label", "name"); n != c.first {
			t.Errorf("%s: name %q", name, n)
		}
		checkPolygons(t, name, got[0].Shape)
	}
}

func TestReadPolygonsErrors(t *testing.T) {
	poly := func(c string) string { return `{"type":"Polygon","coordinates":` + c + `}` }
	for _, c := range []struct {
		in, want string
		kind     error
	}{
		{``, "byte 0", geojson.ErrMalformed},
		{`{"type":"Polygon"`, "byte 17", geojson.ErrMalformed},
		{`[1]`, "not a JSON object", geojson.ErrMalformed},
		{`null`, "null", geojson.ErrMalformed},
		{`{}`, "not a GeoJSON type", geojson.ErrMalformed},
		{`{"type":"Topology"}`, "TopoJSON", geojson.ErrUnsupported},
		{`{"type":"Point","coordinates":[1,2]}`, "a Point where polygons", geojson.ErrUnsupported},
		{`{"type":"FeatureCollection","features":[]}`, "no polygon", geojson.ErrUnsupported},
		{`{"type":"FeatureCollection"}`, "features is not", geojson.ErrMalformed},
		{`{"type":"FeatureCollection","features":[{"type":"Feature","geometry":` + poly(good) + `},{"type":"Feature","geometry":` + poly(`[[[0,0],[1,0],[1,1],[0,1]]]`) + `}]}`,
			"feature 2: ring 1: the ring is open", geojson.ErrMalformed},
		{`{"type":"MultiPolygon","coordinates":[` + good + `,[[[0,0],[1,0],["x",1],[0,0]]]]}`, "polygon 2: ring 1: position 3", geojson.ErrMalformed},
		{poly(`[[[0,0],[1,null],[1,1],[0,0]]]`), "position 2", geojson.ErrMalformed},
		{poly(`[[[0,0],[1],[1,1],[0,0]]]`), "position 2: one number", geojson.ErrMalformed},
		{poly(`[[[0,0],[],[1,1],[0,0]]]`), "position 2", geojson.ErrMalformed},
		{poly(`[[[0,0],[1e400,0],[1,1],[0,0]]]`), "position 2", geojson.ErrMalformed},
		{poly(`[[[0,0],[1,0],[0,0]]]`), "3 positions", geojson.ErrMalformed},
		{poly(`[[[0,0],[1,1],[2,2],[0,0]]]`), "without area", geojson.ErrMalformed},
		{poly(`[[[500000,0],[500001,0],[500001,1],[500000,0]]]`), "not longitude and latitude", geojson.ErrUnsupported},
		{poly(`5`), "no array of rings", geojson.ErrMalformed},
		{`{"type":"Polygon"}`, "no array of rings", geojson.ErrMalformed},
		{`{"type":"Polygon","crs":{"properties":{"name":"EPSG:3035"}},"coordinates":` + good + `}`, "crs member", geojson.ErrUnsupported},
		{strings.Repeat(`{"type":"GeometryCollection","geometries":[`, 9) + strings.Repeat(`]}`, 9), "nested deeper", geojson.ErrUnsupported},
	} {
		_, err := geojson.ReadPolygons(strings.NewReader(c.in))
		if !errors.Is(err, c.kind) || !strings.Contains(err.Error(), c.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%.80s: %v; want %q", c.in, err, c.want)
		}
	}
	in := poly(good)
	if _, err := (geojson.Reader{MaxPositions: 4}).Polygons(strings.NewReader(in)); !errors.Is(err, geojson.ErrTooLarge) {
		t.Error(err)
	}
	if _, err := (geojson.Reader{MaxBytes: 40}).Polygons(strings.NewReader(in)); !errors.Is(err, geojson.ErrTooLarge) {
		t.Error(err)
	}
	if _, err := (geojson.Reader{Plane: true}).Polygons(strings.NewReader(poly(`[[[500000,0],[500001,0],[500001,1],[500000,0]]]`))); err != nil {
		t.Error(err)
	}
}

// What is written is read back the same.
func TestRoundTrip(t *testing.T) {
	var b bytes.Buffer
	if err := geojson.RegionsForTest(&b, regions(), false, geojson.Meta{}); err != nil {
		t.Fatal(err)
	}
	got, err := geojson.ReadPolygons(&b)
	if err != nil || len(got) != 2 || got[0].ID != "region-50" {
		t.Fatal(got, err)
	}
	if !orb.Equal(got[0].Shape[0], regions()[0].Shape[0]) {
		t.Error(got[0].Shape[0])
	}
}

// Whatever is read can be written and read again, and its rings are rings.
func FuzzReadPolygons(f *testing.F) {
	for _, s := range []string{
		`{"type":"Polygon","coordinates":` + good + `}`,
		`{"type":"MultiPolygon","coordinates":[` + wrong + `,` + good + `]}`,
		`{"type":"Feature","id":1e3,"properties":{"a":[null]},"geometry":{"type":"Polygon","coordinates":` + wrong + `}}`,
		`{"type":"FeatureCollection","features":[{"type":"Feature","geometry":null}]}`,
		`{"type":"GeometryCollection","geometries":[{"type":"Polygon","coordinates":[[[0 , 0],[1e-7,0],[1,1,4],[0,0]]]}]}`,
	} {
		f.Add([]byte(s))
	}
	f.Fuzz(func(t *testing.T, data []byte) {
		got, err := geojson.Reader{MaxBytes: 1 << 16, MaxPositions: 1000}.Polygons(bytes.NewReader(data))
		if err != nil {
			if !errors.Is(err, geojson.ErrMalformed) && !errors.Is(err, geojson.ErrUnsupported) && !errors.Is(err, geojson.ErrTooLarge) {
				t.Fatalf("error without a kind: %v", err)
			}
			return
		}
		for _, n := range got {
			for _, p := range n.Shape {
				for i, r := range p {
					if len(r) < 4 || r[0] != r[len(r)-1] {
						t.Fatalf("ring %v", r)
					}
					if i == 0 && len(p) == 0 {
						t.Fatal("polygon without an exterior")
					}
				}
			}
			var b bytes.Buffer
			err := geojson.RegionsForTest(&b, []spatial.Region{{Content: .5, Shape: n.Shape}}, true, geojson.Meta{})
			if err != nil {
				t.Fatal(err)
			}
			if _, err := (geojson.Reader{Plane: true}).Polygons(&b); err != nil && !errors.Is(err, geojson.ErrUnsupported) {
				t.Fatalf("%v\n%s", err, b.String())
			}
		}
	})
}
