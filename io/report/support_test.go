package report_test

import (
	"bytes"
	"math"
	"sync"
	"testing"
	"time"

	"drumlin/io/record"
	"drumlin/io/report"
	"drumlin/mv"
	"drumlin/spatial"
)

// hill is one normal component of an invented set of events.
type hill struct{ x, y, sx, sy, share float64 }

var hills = []hill{
	{-300e3, 200e3, 60e3, 90e3, 0.3}, {-250e3, 150e3, 25e3, 25e3, 0.1}, {200e3, -100e3, 120e3, 50e3, 0.35}, {350e3, 300e3, 40e3, 40e3, 0.2}, {60e3, 330e3, 12e3, 12e3, 0.05},
}

// release draws the hills as if n events had been smoothed with H, on nodes x
// nodes and with so many bands, and lets the guard judge.
func release(t testing.TB, nodes, bands int, proj spatial.Projection, factor float64) *spatial.Release {
	t.Helper()
	const half, n = 800e3, 20000.0
	step := 2 * half / float64(nodes-1)
	lat := mv.Lattice{Origin: []float64{-half, -half}, Step: []float64{step, step}, N: []int{nodes, nodes}}
	d, c := mv.NewGrid(lat), mv.NewGrid(lat)
	top := 0.0
	for j := range nodes {
		for i := range nodes {
			x, y := lat.Coord(0, i), lat.Coord(1, j)
			var v float64
			for _, h := range hills {
				sx, sy := math.Hypot(h.sx, 20e3*math.Sqrt(factor-1)), math.Hypot(h.sy, 20e3*math.Sqrt(factor-1))
				v += h.share / (2 * math.Pi * sx * sy) * math.Exp(-((x-h.x)*(x-h.x)/(sx*sx)+(y-h.y)*(y-h.y)/(sy*sy))/2)
			}
			// ripples give many-vertex borders, as real surfaces have
			v *= 1 + 0.05*math.Sin(x/9e3)*math.Sin(y/11e3)
			d.Values[j*nodes+i] = v
			c.Values[j*nodes+i] = math.Round(n * v * step * step * 1024)
			c.Values[j*nodes+i] /= 1024
			top = max(top, v)
		}
	}
	a := spatial.Analysis{
		Density: d, Counts: c, Events: n, Total: n, KernelAtZero: 1 / (2 * math.Pi * 20e3 * 30e3), RegionRule: "events",
		Regions: []spatial.Threshold{{Content: 0.5, Density: top * 0.3}, {Content: 0.75, Density: top * 0.15}, {Content: 0.95, Density: top * 0.03}},
	}
	for k := range bands {
		a.BandLevels = append(a.BandLevels, top*0.01*math.Pow(90, float64(k)/float64(bands)))
	}
	for _, m := range spatial.FindMaxima(d, top*0.2) {
		a.Peaks = append(a.Peaks, spatial.Summit{At: spatial.XY{X: m.X, Y: m.Y}, Density: m.Value, StandardError: m.Value * 0.07, SmoothingBias: -m.Value * 0.04})
	}
	r, err := spatial.Guard(a, spatial.Policy{MinEvents: 10}, proj)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// testRecord is a record that fits the release.
func testRecord(plane spatial.CRS) *record.Record {
	h := []float64{4e8, 1e8, 1e8, 9e8}
	return &record.Record{
		Program:  record.Program{Name: "drumlin", Version: "0.0", Go: "go"},
		Settings: record.Settings{{Name: "x", Value: "lon"}, {Name: "y", Value: "lat"}, {Name: "weight", Value: ""}, {Name: "content", Value: []float64{50, 75, 95}}},
		Rows:     record.Rows{Read: 20012, Used: 20000, SetAside: []record.SetAside{{Reason: "null-island", Rows: 9}}, OutsideExtent: 3},
		CRS:      record.CRS{Input: "EPSG:4326", Plane: record.Plane{Name: plane.Name, Method: plane.Method, EqualArea: true}, Distortion: &record.Distortion{ScaleLeast: 0.99, ScaleGreatest: 1.01, AreaLeast: 1, AreaGreatest: 1, Angle: 0.4}},
		Tally:    record.Tally{Events: 20000, Weight: 20000, EffectiveN: 20000},
		Lattice:  record.Lattice{Origin: []float64{0, 0}, Step: []float64{1600, 1600}, Nodes: []int{1000, 1000}},
		Bandwidth: record.Bandwidth{Method: "plug-in", Shape: "full", Kernel: "gaussian", Matrix: h, MatrixHex: record.HexFloats(h), Major: 30900, Minor: 18500, Bearing: 12.5,
			Status: "converged", Evaluations: 200, StepsPerMinorScale: 11.5, LatticeError: 1e-5, AMISE: &record.AMISE{SquaredBias: 1.1e-14, Variance: 2.2e-14}},
		Regions:     record.Regions{Rule: "events", Text: record.RegionRuleText("events"), Contents: []float64{0.5, 0.75, 0.95}},
		Sensitivity: []record.Sensitivity{{Factor: 2, Regions: []record.SensitivityRegion{{Content: 0.5, Overlap: 0.8}}}},
		Guard:       record.Guard{MinEvents: 10, FloorPerKM2: 1e-4, RegionParts: 1},
		Warnings:    []string{"the minor scale of H spans 3.9 lattice steps"},
		Cautions:    record.Cautions(),
		Files:       []record.File{{Name: "regions.geojson", Bytes: 12345, SHA256: "00"}},
		Inputs:      []record.Input{{Path: "in/events.parquet", Format: "parquet", Bytes: 1000, Rows: 20012, Digest: record.Digest{Algorithm: "sha256", Scope: record.ScopeWhole, Value: "ab12"}}},
		Workers:     2,
		Times:       record.Times{Started: time.Date(2026, 1, 2, 3, 4, 5, 0, time.UTC)},
	}
}

var proj = spatial.AutoPlane(179, -20)

var coarse = sync.OnceValue(func() *spatial.Release { return release(nil2{}, 200, 8, proj, 1) })

// nil2 stands for a test where none is at hand; it panics.
type nil2 struct{ testing.TB }

func (nil2) Helper()           {}
func (nil2) Fatal(args ...any) { panic(args) }

// page is a full page on a coarse release.
func page(t testing.TB) report.Page {
	t.Helper()
	square := spatial.MultiPolygon{{{{X: -700e3, Y: -600e3}, {X: 700e3, Y: -600e3}, {X: 700e3, Y: 650e3}, {X: -700e3, Y: 650e3}}}}
	return report.Page{
		Record: testRecord(proj.CRS()), Release: coarse(), Projection: proj,
		Period: &report.Period{From: "2025-01-01", Until: "2026-01-01", Zone: "UTC"}, StudyArea: square,
		Context:      [][]spatial.XY{{{X: -2e6, Y: 0}, {X: -100e3, Y: 40e3}, {X: 2e6, Y: 100e3}}, {{X: 5e6, Y: 5e6}, {X: 6e6, Y: 5e6}}},
		Alternatives: []report.Alternative{{Factor: 0.5, Note: "withheld"}, {Factor: 2, Regions: coarse().Regions()}},
		Choices:      []report.Choice{{Method: "plug-in", Shape: "full", Major: 30900, Minor: 18500, Status: "converged", Used: true, EstimatedErrorRatio: 1}, {Method: "normal-reference", Shape: "full", Major: 90000, Minor: 70000, Status: "closed form", EstimatedErrorRatio: 3.4}},
		Profile:      &report.Profile{Name: "likelihood", Factors: []float64{0.5, 1, 2}, Values: []float64{-3, -1, -2}},
		Stability:    []report.Stability{{What: "area of the 50 % region, km²", Value: 1000, Low: 900, High: 1100, Share: 0.9, How: "200 resamples"}},
	}
}

func write(t testing.TB, p report.Page) []byte {
	t.Helper()
	var b bytes.Buffer
	if err := report.WriteHTML(&b, p); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}
