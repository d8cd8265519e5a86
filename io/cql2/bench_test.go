package cql2_test

import (
	"testing"
	"time"

	"drumlin/io/cql2"
	"drumlin/io/events"
)

// BenchmarkEval applies a filter of one text and one number.
func BenchmarkEval(b *testing.B) {
	f, err := cql2.Parse("kind = 'fire' AND n >= 2")
	if err != nil {
		b.Fatal(err)
	}
	p, err := f.Bind(fields, time.UTC)
	if err != nil {
		b.Fatal(err)
	}
	const rows = 32768
	batch := events.Batch{Columns: [][]float64{make([]float64, rows), make([]float64, rows)}, Words: [][]string{{"fire", "flood", "road"}, nil}}
	for i := range rows {
		batch.Columns[0][i], batch.Columns[1][i] = float64(i%3), float64(i%5)
	}
	var s cql2.Scratch
	for b.Loop() {
		p.Eval(batch, 0, &s)
	}
	b.ReportMetric(float64(b.Elapsed().Nanoseconds())/float64(b.N)/rows, "ns/row")
}
