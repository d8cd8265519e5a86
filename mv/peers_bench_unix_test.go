//go:build unix

package mv_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"syscall"
	"testing"

	"drumlin/mv"
	"drumlin/mv/mvtest"
)

// cpuSeconds is the processor time used so far: what a busy machine does not
// change, where the wall clock lies.
func cpuSeconds() float64 {
	var u syscall.Rusage
	if syscall.Getrusage(syscall.RUSAGE_SELF, &u) != nil {
		return math.NaN()
	}
	return float64(u.Utime.Sec+u.Stime.Sec) + float64(u.Utime.Usec+u.Stime.Usec)/1e6
}

// metered runs work as a benchmark and reports processor seconds per run.
func metered(b *testing.B, work func()) float64 {
	begin := cpuSeconds()
	for b.Loop() {
		work()
	}
	per := (cpuSeconds() - begin) / float64(b.N)
	b.ReportMetric(per, "cpu-s/op")
	return per
}

// BenchmarkPeerRidges is our side of testdata/gen/peers.py: the five ridges,
// 100,000 events, scale 150, 128 x 128 queries, building included.
func BenchmarkPeerRidges(b *testing.B) {
	s := mvtest.FiveRidges(rand.New(rand.NewPCG(1, 2)), 100_000)
	h, err := mv.ScalarBandwidth(2, 150)
	if err != nil {
		b.Fatal(err)
	}
	q := mv.LatticePoints(mvtest.GridOver(s, 128, 300))
	got := make([]float64, len(q[0]))
	for _, method := range []mv.Method{mv.MethodTree, mv.MethodLattice} {
		for _, tol := range []mv.PlanOptions{{Rtol: 1e-3}, {Rtol: 1e-6}, {Atol: 1e-12}} {
			b.Run(fmt.Sprintf("%s/rtol=%g,atol=%g", method, tol.Rtol, tol.Atol), func(b *testing.B) {
				tol.Force, tol.Workers = method, 1
				metered(b, func() {
					p, err := mv.NewPlan(s, mv.Gaussian, h, tol)
					if err != nil {
						b.Fatal(err)
					}
					e, err := p.Evaluator(s, mv.Gaussian, h)
					if err != nil {
						b.Fatal(err)
					}
					if err := e.Density(context.Background(), got, q); err != nil {
						b.Fatal(err)
					}
				})
			})
		}
	}
}

// ridgeColumns draws the five ridges without a Sample's checks.
func ridgeColumns(n int) (x, y []float64) {
	rng := rand.New(rand.NewPCG(3, 4))
	x, y = make([]float64, n), make([]float64, n)
	for i := range n {
		k := float64(rng.IntN(5))
		u, v := rng.NormFloat64(), rng.NormFloat64()
		x[i], y[i] = 1000*k+300*u, 500*k*k+100*v+200*u
	}
	return x, y
}

// BenchmarkPeerSurface: 10 million events to a density on about 1024 x 1024
// nodes, by tally and spectrum, beside the bare reading of the two columns; its
// error against direct sums at nodes spread over the mass.
func BenchmarkPeerSurface(b *testing.B) {
	n := 10_000_000
	if testing.Short() {
		n = 200_000
	}
	x, y := ridgeColumns(n)
	h, err := mv.ScalarBandwidth(2, 150)
	if err != nil {
		b.Fatal(err)
	}
	var sink float64
	b.Run("read", func(b *testing.B) {
		per := metered(b, func() {
			var sum float64
			for i, v := range x {
				sum += v + y[i]
			}
			sink += sum
		})
		b.ReportMetric(per/float64(n)*1e9, "cpu-ns/event")
	})
	var f mv.Grid
	tally := func() mv.Grid {
		t, err := mv.NewTally(mv.TallyOptions{Finest: 3}) // 8 m
		if err != nil {
			b.Fatal(err)
		}
		for at := 0; at < n; at += 32768 {
			if err := t.Add(x[at:min(n, at+32768)], y[at:min(n, at+32768)], nil); err != nil {
				b.Fatal(err)
			}
		}
		lo, hi := t.Bounds()
		g, err := t.Grid(lo, hi, false)
		if err != nil {
			b.Fatal(err)
		}
		return g
	}
	b.Run("tally", func(b *testing.B) {
		per := metered(b, func() { tally() })
		b.ReportMetric(per/float64(n)*1e9, "cpu-ns/event")
	})
	b.Run("tally and surface", func(b *testing.B) {
		per := metered(b, func() {
			sp, err := mv.NewSpectrum(tally(), mv.SpectrumOptions{Reach: []float64{1050, 1050}})
			if err != nil {
				b.Fatal(err)
			}
			f = sp.Density(h)
		})
		b.ReportMetric(per/float64(n)*1e9, "cpu-ns/event")
		b.ReportMetric(float64(f.N[0]), "nodes-x")
		b.ReportMetric(float64(f.N[1]), "nodes-y")
		s, err := mv.NewSample([][]float64{x, y}, nil)
		if err != nil {
			b.Fatal(err)
		}
		direct, err := mv.NewDirect(s, mv.Gaussian, h, mv.EvalOptions{})
		if err != nil {
			b.Fatal(err)
		}
		var q [2][]float64
		var got []float64
		var top float64
		for _, v := range f.Values {
			top = max(top, v)
		}
		for at := 12345; at < len(f.Values) && len(got) < 12; at += len(f.Values) / 97 {
			if f.Values[at] > top/100 {
				q[0], q[1] = append(q[0], f.Coord(0, at%f.N[0])), append(q[1], f.Coord(1, at/f.N[0]))
				got = append(got, f.Values[at])
			}
		}
		want := make([]float64, len(got))
		if err := direct.Density(context.Background(), want, q[:]); err != nil {
			b.Fatal(err)
		}
		e, _ := worst(got, want)
		b.ReportMetric(1e9*e/top, "error-1e-9-of-max")
	})
	_ = sink
}

// BenchmarkSurfaceSpace: a million events in space to a density on about 128^3
// nodes, by Bin and a spectrum.
func BenchmarkSurfaceSpace(b *testing.B) {
	n := 1_000_000
	if testing.Short() {
		n = 50_000
	}
	s := clumps(b, 3, 3, n)
	h := tilted(b, 3, 0.3, 1.5)
	steps, margin := []float64{0.08, 0.08, 0.08}, []float64{0, 0, 0}
	l, err := mv.LatticeAround(s, steps, margin)
	if err != nil {
		b.Fatal(err)
	}
	per := metered(b, func() {
		g, err := mv.Bin(s, l)
		if err != nil {
			b.Fatal(err)
		}
		sp, err := mv.NewSpectrum(g, mv.SpectrumOptions{Reach: []float64{2, 2, 2}})
		if err != nil {
			b.Fatal(err)
		}
		sp.Density(h)
	})
	b.ReportMetric(per/float64(n)*1e9, "cpu-ns/event")
	b.ReportMetric(float64(l.Len()), "nodes")
}
