package main_test

import (
	"bufio"
	"context"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strconv"
	"sync"
	"sync/atomic"
	"syscall"
	"testing"
	"time"

	"drumlin/io/events"
	"drumlin/io/parquetfile"
	"drumlin/io/record"
)

// BenchmarkMapAgainstBareScan runs the whole program, with plug-in selection and
// every default output, on a generated extract and
// a bare scan of the same two columns by the same reader, side by side, and
// prints the ratio. DRUMLIN_BENCH_ROWS sets the rows (default 2 million; the
// claims are made at 100 million). Coordinates are metres with two decimals, as
// extracts hold them, from oriented clumps on a broad field, cut to a
// district's box; float64, zstd, row
// groups of a million. DRUMLIN_BENCH_DIGITS=17 keeps every random digit, which
// zstd stores almost raw: the scan is then several times faster and the ratio
// larger.
func BenchmarkMapAgainstBareScan(b *testing.B) {
	rows := 2_000_000
	if v, err := strconv.Atoi(os.Getenv("DRUMLIN_BENCH_ROWS")); err == nil {
		rows = v
	}
	dir := b.TempDir()
	input := filepath.Join(dir, "events.parquet")
	writeBenchFile(b, input, rows, os.Getenv("DRUMLIN_BENCH_DIGITS") == "17")
	program := filepath.Join(dir, "drumlin")
	if out, err := exec.Command("go", "build", "-o", program, ".").CombinedOutput(); err != nil {
		b.Fatalf("building: %v\n%s", err, out)
	}
	var scan, whole, after time.Duration
	var peak int64
	for b.Loop() {
		scan += bareScan(b, input, int64(rows))
		out := filepath.Join(dir, "map")
		cmd := exec.Command(program, "map", input, "--crs", "plane", "--bandwidth", "plug-in", "--out", out, "--quiet")
		from := time.Now()
		if text, err := cmd.CombinedOutput(); err != nil {
			b.Fatalf("map: %v\n%s", err, text)
		}
		whole += time.Since(from)
		if use, ok := cmd.ProcessState.SysUsage().(*syscall.Rusage); ok {
			peak = max(peak, use.Maxrss)
		}
		after += afterTally(b, filepath.Join(out, "run.json"))
		if err := os.RemoveAll(out); err != nil {
			b.Fatal(err)
		}
	}
	n := float64(b.N)
	b.ReportMetric(float64(whole)/float64(scan), "map/scan")
	b.ReportMetric(scan.Seconds()/n, "scan-s")
	b.ReportMetric(whole.Seconds()/n, "map-s")
	b.ReportMetric(after.Seconds()/n, "after-tally-s")
	b.ReportMetric(float64(peak)/1024, "peak-MB")
	b.ReportMetric(0, "ns/op")
}

// writeBenchFile writes clumps and a broad field, a million rows at a time.
func writeBenchFile(tb testing.TB, path string, rows int, full bool) {
	tb.Helper()
	f, err := os.Create(path)
	if err != nil {
		tb.Fatal(err)
	}
	buf := bufio.NewWriterSize(f, 1<<20)
	cols := []parquetfile.Column{{Name: "x", Type: parquetfile.Float64}, {Name: "y", Type: parquetfile.Float64}}
	w, err := parquetfile.NewWriter(onlyWriter{buf}, cols, parquetfile.WriteOptions{})
	if err != nil {
		tb.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(7, 7))
	for done := 0; done < rows; {
		n := min(1_000_000, rows-done)
		x, y := make([]float64, n), make([]float64, n)
		for i := range x {
			for {
				u, v := rng.NormFloat64(), rng.NormFloat64()
				switch k := rng.IntN(10); {
				case k < 4: // broad field
					x[i], y[i] = 20000+14000*u, 30000+12000*v
				case k < 7: // a corridor
					x[i], y[i] = 17000+15000*u-5000*v, 32000+8000*u+7500*v
				default:
					x[i], y[i] = 25000+9000*u, 27000+8500*v+3000*u
				}
				if x[i] > -10000 && x[i] < 50000 && y[i] > 2000 && y[i] < 58000 { // the district's box
					break
				}
			}
			if !full {
				x[i], y[i] = math.Round(x[i]*100)/100, math.Round(y[i]*100)/100
			}
		}
		cols[0].Floats, cols[1].Floats = x, y
		if err := w.WriteRowGroup(cols); err != nil {
			tb.Fatal(err)
		}
		done += n
	}
	for _, step := range []func() error{w.Close, buf.Flush, f.Close} {
		if err := step(); err != nil {
			tb.Fatal(err)
		}
	}
}

// onlyWriter hides Close.
type onlyWriter struct{ w *bufio.Writer }

func (o onlyWriter) Write(p []byte) (int, error) { return o.w.Write(p) }

// bareScan reads the two columns with as many workers as map uses and adds them
// up, so that nothing can be left out.
func bareScan(tb testing.TB, path string, rows int64) time.Duration {
	tb.Helper()
	from := time.Now()
	f, err := parquetfile.Open(path, parquetfile.Options{})
	if err != nil {
		tb.Fatal(err)
	}
	defer f.Close()
	var next, seen atomic.Int64
	var wg sync.WaitGroup
	errs := make([]error, runtime.GOMAXPROCS(0))
	for k := range errs {
		wg.Go(func() {
			for {
				part := int(next.Add(1)) - 1
				if part >= f.Parts() {
					return
				}
				var sum float64
				err := f.Read(context.Background(), part, []string{"x", "y"}, func(b events.Batch) error {
					for i := range b.Columns[0] {
						sum += b.Columns[0][i] + b.Columns[1][i]
					}
					seen.Add(int64(b.Len()))
					return nil
				})
				if err == nil && math.IsNaN(sum) {
					err = fmt.Errorf("part %d adds up to NaN", part)
				}
				if err != nil {
					errs[k] = err
					return
				}
			}
		})
	}
	wg.Wait()
	for _, err := range errs {
		if err != nil {
			tb.Fatal(err)
		}
	}
	if seen.Load() != rows {
		tb.Fatalf("scanned %d rows of %d", seen.Load(), rows)
	}
	return time.Since(from)
}

// afterTally adds the stages that follow the first tally.
func afterTally(tb testing.TB, path string) (sum time.Duration) {
	tb.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		tb.Fatal(err)
	}
	var rec record.Record
	if err := json.Unmarshal(data, &rec); err != nil {
		tb.Fatal(err)
	}
	tallies := 0
	text := ""
	for _, s := range rec.Times.Stages {
		text += fmt.Sprintf(" %s %.3f", s.Name, s.Seconds)
		if s.Name == "tally" {
			tallies++
		}
		if s.Name != "tally" && s.Name != "plane" {
			sum += time.Duration(s.Seconds * float64(time.Second))
		}
	}
	tb.Logf("stages:%s; lattice %v, %.1f steps per minor scale", text, rec.Lattice.Nodes, rec.Bandwidth.StepsPerMinorScale)
	if tallies != 1 {
		tb.Logf("%d passes over the events", tallies)
	}
	return sum
}
