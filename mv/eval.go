package mv

import (
	"context"
	"fmt"
	"math"
	"runtime"
	"sync"
	"sync/atomic"
)

// Evaluator estimates the density at points:
//
//	f(x) = (1/W) sum_i w_i K_H(x - X_i),  W = sum_i w_i.
//
// Queries are d columns of one length, like those of a Sample; Density writes
// one value per query into dst, in density units (data units to the power -d).
// Lengths that do not go together are ErrShape, a query that is not finite is
// ErrNotFinite, and a cancelled context returns its error. The result does not
// depend on the number of workers. Evaluators are immutable and safe to share.
type Evaluator interface {
	// Dim returns d.
	Dim() int
	// Density writes the estimate at every query into dst.
	Density(ctx context.Context, dst []float64, queries [][]float64) error
}

// EvalOptions steers an evaluator. The zero value is the default.
type EvalOptions struct {
	// Workers is the number of goroutines; 0 means one per processor the Go
	// runtime uses. It never changes a result.
	Workers int
}

// Validate reports a negative worker count.
func (o EvalOptions) Validate() error {
	if o.Workers < 0 {
		return fmt.Errorf("mv: %d workers; must be 0 (all processors) or more: %w", o.Workers, ErrShape)
	}
	return nil
}

func workerCount(asked int) int {
	if asked > 0 {
		return asked
	}
	return runtime.GOMAXPROCS(0)
}

// overChunks calls work(chunk, lo, hi) for the chunks [0,grain), [grain,2*grain)
// ... of [0,n), on the given number of goroutines. Chunks do not depend on the
// number of workers. It stops early when the context is cancelled.
func overChunks(ctx context.Context, workers, n, grain int, work func(chunk, lo, hi int)) error {
	chunks := (n + grain - 1) / grain
	workers = min(workerCount(workers), chunks)
	if workers <= 1 {
		for c := range chunks {
			if err := ctx.Err(); err != nil {
				return err
			}
			work(c, c*grain, min(n, (c+1)*grain))
		}
		return ctx.Err()
	}
	var next atomic.Int64
	var wg sync.WaitGroup
	for range workers {
		wg.Go(func() {
			for ctx.Err() == nil {
				c := int(next.Add(1)) - 1
				if c >= chunks {
					return
				}
				work(c, c*grain, min(n, (c+1)*grain))
			}
		})
	}
	wg.Wait()
	return ctx.Err()
}

// checkQueries returns the number of queries.
func checkQueries(d int, queries [][]float64) (int, error) {
	if len(queries) != d {
		return 0, fmt.Errorf("mv: %d query columns for dimension %d: %w", len(queries), d, ErrShape)
	}
	m := len(queries[0])
	for k, c := range queries {
		if len(c) != m {
			return 0, fmt.Errorf("mv: query column 1 has %d points, column %d has %d: %w", m, k+1, len(c), ErrShape)
		}
		for i, v := range c {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return 0, fmt.Errorf("mv: query %d, column %d is %g: %w", i+1, k+1, v, ErrNotFinite)
			}
		}
	}
	return m, nil
}

func checkDst(dst []float64, m int) error {
	if len(dst) != m {
		return fmt.Errorf("mv: destination of length %d for %d queries: %w", len(dst), m, ErrShape)
	}
	return nil
}

// checkModel tells whether sample, kernel and bandwidth go together.
func checkModel(s *Sample, k Kernel, h BandwidthMatrix) error {
	if s == nil || s.n == 0 {
		return fmt.Errorf("mv: no sample: %w", ErrShape)
	}
	if !k.Valid() {
		return fmt.Errorf("mv: %s is not a kernel: %w", k, ErrShape)
	}
	if h.Dim() != s.d {
		return fmt.Errorf("mv: bandwidth matrix of dimension %d for a sample of dimension %d: %w", h.Dim(), s.d, ErrShape)
	}
	return nil
}

// whitener maps x to L^{-1}(x - centre), H = LL', so that the kernel's argument
// is the plain distance. Events and queries go through the same arithmetic: a
// query equal to an event is at distance exactly 0.
type whitener struct {
	d      int
	centre []float64
	lower  []float64 // L, row-major
}

func newWhitener(s *Sample, h BandwidthMatrix) whitener {
	w := whitener{d: s.d, centre: make([]float64, s.d), lower: h.lower}
	for k, c := range s.cols {
		var sum float64
		for _, v := range c {
			sum += v / float64(s.n)
		}
		w.centre[k] = sum
	}
	return w
}

// at writes the whitened point i of cols into z by forward substitution.
func (w *whitener) at(z []float64, cols [][]float64, i int) {
	for a := range w.d {
		v := cols[a][i] - w.centre[a]
		for b := range a {
			v -= w.lower[a*w.d+b] * z[b]
		}
		z[a] = v / w.lower[a*w.d+a]
	}
}

// all returns the whitened points as rows.
func (w *whitener) all(cols [][]float64) []float64 {
	n := len(cols[0])
	z := make([]float64, n*w.d)
	for i := range n {
		w.at(z[i*w.d:(i+1)*w.d], cols, i)
	}
	return z
}

// LatticePoints returns the nodes of a lattice as query columns, axis 0 fastest.
func LatticePoints(l Lattice) [][]float64 {
	d, n := l.Dim(), l.Len()
	cols := make([][]float64, d)
	every := 1
	for k := range d {
		c := make([]float64, n)
		for i := range c {
			c[i] = l.Coord(k, i/every%l.N[k])
		}
		cols[k], every = c, every*l.N[k]
	}
	return cols
}
