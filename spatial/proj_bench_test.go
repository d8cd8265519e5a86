package spatial_test

import (
	"math/rand/v2"
	"testing"

	"drumlin/spatial"
)

// BenchmarkProjection gives the cost of a position, there and back, on columns
// of 4096.
func BenchmarkProjection(b *testing.B) {
	const n = 4096
	for _, c := range []struct{ name, code string }{
		{"LAEA", "EPSG:3035"}, {"TM", "EPSG:32632"}, {"Albers", "EPSG:5070"}, {"LCC", "EPSG:2154"}, {"WebMercator", "EPSG:3857"},
	} {
		p := lookup(b, c.code)
		r := rand.New(rand.NewPCG(3, 4))
		lon, lat := make([]float64, n), make([]float64, n)
		for i := range lon {
			lon[i], lat[i] = p.CRS().Lon0+8*r.Float64()-4, 45+10*r.Float64()-5
		}
		x, y := append([]float64(nil), lon...), append([]float64(nil), lat...)
		p.Forward(spatial.LonLats{Lon: x, Lat: y})
		u, v := make([]float64, n), make([]float64, n)
		b.Run(c.name+"/forward", func(b *testing.B) {
			for b.Loop() {
				copy(u, lon)
				copy(v, lat)
				p.Forward(spatial.LonLats{Lon: u, Lat: v})
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/n, "ns/point")
		})
		b.Run(c.name+"/inverse", func(b *testing.B) {
			for b.Loop() {
				copy(u, x)
				copy(v, y)
				p.Inverse(spatial.XYs{X: u, Y: v})
			}
			b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/n, "ns/point")
		})
	}
}
