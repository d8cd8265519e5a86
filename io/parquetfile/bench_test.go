package parquetfile_test

import (
	"context"
	"math/rand/v2"
	"os"
	"path/filepath"
	"runtime"
	"strconv"
	"sync"
	"testing"

	"drumlin/io/events"
	"drumlin/io/parquetfile"
)

// pointFile writes rows of x, y with two clusters, row group by row group.
func pointFile(tb testing.TB, rows, group int, opt parquetfile.WriteOptions) string {
	tb.Helper()
	path := filepath.Join(tb.TempDir(), "points.parquet")
	h, err := os.Create(path)
	if err != nil {
		tb.Fatal(err)
	}
	cols := []parquetfile.Column{{Name: "x", Floats: make([]float64, group)}, {Name: "y", Floats: make([]float64, group)}}
	w, err := parquetfile.NewWriter(h, cols, opt)
	if err != nil {
		tb.Fatal(err)
	}
	r := rand.New(rand.NewPCG(1, 2))
	for at := 0; at < rows; at += group {
		n := min(group, rows-at)
		for i := range n {
			cx := float64(r.IntN(2)) * 3
			cols[0].Floats[i] = cx + r.NormFloat64()
			cols[1].Floats[i] = cx/2 + r.NormFloat64()
		}
		part := []parquetfile.Column{{Name: "x", Floats: cols[0].Floats[:n]}, {Name: "y", Floats: cols[1].Floats[:n]}}
		if err := w.WriteRowGroup(part); err != nil {
			tb.Fatal(err)
		}
	}
	if err := w.Close(); err != nil {
		tb.Fatal(err)
	}
	return path
}

// BenchmarkScan reads 5 million rows of two DOUBLE columns, zstd, plain, row
// groups of a million, with one and with two parts at a time.
func BenchmarkScan(b *testing.B) {
	const rows = 5_000_000
	path := pointFile(b, rows, 1_000_000, parquetfile.WriteOptions{})
	f, err := parquetfile.Open(path, parquetfile.Options{})
	if err != nil {
		b.Fatal(err)
	}
	for _, workers := range []int{1, 2} {
		b.Run("parts="+strconv.Itoa(workers), func(b *testing.B) {
			b.ReportAllocs()
			for b.Loop() {
				parts := make(chan int, f.Parts())
				for p := range f.Parts() {
					parts <- p
				}
				close(parts)
				var wg sync.WaitGroup
				for range workers {
					wg.Go(func() {
						for p := range parts {
							err := f.Read(context.Background(), p, []string{"x", "y"}, func(events.Batch) error { return nil })
							if err != nil {
								b.Error(err)
							}
						}
					})
				}
				wg.Wait()
			}
			perSecond := float64(rows) * float64(b.N) / b.Elapsed().Seconds()
			b.ReportMetric(perSecond/1e6, "Mrows/s")
			b.ReportMetric(perSecond/1e6/float64(min(workers, runtime.NumCPU())), "Mrows/s/core")
			var m runtime.MemStats
			runtime.ReadMemStats(&m)
			b.ReportMetric(float64(m.Sys)/1e6, "MB-from-system")
		})
	}
}
