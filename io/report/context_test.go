package report_test

import (
	"bytes"
	"errors"
	"math"
	"strings"
	"testing"

	"drumlin/io/report"
	"drumlin/spatial"
)

func TestReadContext(t *testing.T) {
	lines, err := report.ReadContext(strings.NewReader(`{"type":"FeatureCollection","features":[
		{"type":"Feature","properties":null,"geometry":{"type":"LineString","coordinates":[[1,2],[3,4,5]]}},
		{"type":"Feature","geometry":null},
		{"type":"Feature","geometry":{"type":"GeometryCollection","geometries":[{"type":"Point","coordinates":[0,0]},
			{"type":"Polygon","coordinates":[[[0,0],[1,0],[1,1],[0,0]],[[0.1,0.1],[0.2,0.1],[0.1,0.2],[0.1,0.1]]]},
			{"type":"MultiPolygon","coordinates":[[[[5,5],[6,5],[6,6],[5,5]]]]}]}}]}`))
	if err != nil || len(lines) != 4 || len(lines[0].Lon) != 2 || lines[0].Lat[1] != 4 || lines[3].Lon[1] != 6 {
		t.Fatalf("%v, %v", lines, err)
	}
	for _, bad := range []string{"", "[]", "{}", `{"type":"Line"}`, `{"type":"LineString","coordinates":[[1]]}`, `{"type":"LineString","coordinates":7}`, `{"type":"Polygon","coordinates":[1]}`,
		strings.Repeat(`{"type":"GeometryCollection","geometries":[`, 40) + strings.Repeat("]}", 40)} {
		if _, err := report.ReadContext(strings.NewReader(bad)); !errors.Is(err, report.ErrContext) {
			t.Errorf("%.40q: %v", bad, err)
		}
	}
}

// Lines come to the plane in parts, across the antimeridian in one, and those
// out of sight cost the page nothing.
func TestContextLines(t *testing.T) {
	lines := []spatial.LonLats{
		{Lon: []float64{178, 179, -179, -178}, Lat: []float64{-20, -20, -20, -20}},
		{Lon: []float64{170, math.NaN(), 171, 172}, Lat: []float64{-20, 0, -20, -20}},
		{Lon: []float64{-2, -0.5, 1, 2}, Lat: []float64{20, 20, 20, 20}}, // passes the far side of the plane
	}
	out := report.ContextLines(lines, proj)
	if len(out) < 3 || len(out[0]) != 4 || len(out[1]) != 2 {
		t.Fatalf("%d parts: %v", len(out), out)
	}
	if lines[0].Lon[0] != 178 {
		t.Error("the input was changed")
	}
	for _, l := range out {
		for i := 1; i < len(l); i++ {
			if d := math.Hypot(l[i].X-l[i-1].X, l[i].Y-l[i-1].Y); d > 5e6 {
				t.Errorf("a step of %.0f m", d)
			}
		}
	}
	p := page(t)
	p.Context = nil
	bare := write(t, p)
	p.Context = report.ContextLines(lines[2:], proj)
	if b := write(t, p); bytes.Contains(b, []byte(`class="context"`)) || len(b) > len(bare)+200 {
		t.Error("lines out of sight are on the page")
	}
}

func FuzzReadContext(f *testing.F) {
	f.Add([]byte(`{"type":"LineString","coordinates":[[1,2],[3,4,5]]}`))
	f.Add([]byte(`{"type":"Feature","geometry":{"type":"Polygon","coordinates":[[[0,0],[1e300,0],[1,1]]]}}`))
	f.Fuzz(func(t *testing.T, b []byte) {
		lines, err := report.ReadContext(bytes.NewReader(b))
		if err == nil {
			report.ContextLines(lines, proj)
		}
	})
}
