package geoparquet_test

import (
	"strings"
	"testing"

	"drumlin/io/events"
	"drumlin/io/geoparquet"
	"drumlin/io/parquetfile"
)

// BenchmarkPoints reads points in binary, and the same number of rows of a
// column of numbers.
func BenchmarkPoints(b *testing.B) {
	const rows = 1_000_000
	cells := make([][]byte, rows)
	for i := range cells {
		cells[i] = wkbBytes(true, 1, float64(i)*1e-5, float64(i)*-1e-5)
	}
	src, err := geoparquet.Open(withGeo(b, strings.NewReplacer("TYPES ", "[]", "CRS", "").Replace(geoOf), cells), parquetfile.Options{})
	if err != nil {
		b.Fatal(err)
	}
	for name, columns := range map[string][]string{"wkb": {"geometry.x", "geometry.y"}, "float": {"n"}} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				for p := range src.Parts() {
					if err := src.Read(context(), p, columns, func(events.Batch) error { return nil }); err != nil {
						b.Fatal(err)
					}
				}
			}
			b.ReportMetric(float64(rows)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mrows/s")
		})
	}
}
