package mv_test

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"
	"time"

	"drumlin/mv"
	"drumlin/mv/mvtest"
)

// BenchmarkTreePlane is the agreed comparison: 100,000 events of the five
// ridges, scale 150, 128 x 128 queries, rtol 1e-6. The direct sum is timed once
// on every 16th query and scaled up; the tree's time includes building it.
func BenchmarkTreePlane(b *testing.B) {
	s := mvtest.FiveRidges(rand.New(rand.NewPCG(1, 2)), 100_000)
	h, err := mv.ScalarBandwidth(2, 150)
	if err != nil {
		b.Fatal(err)
	}
	benchmarkTree(b, s, h, mv.LatticePoints(mvtest.GridOver(s, 128, 300)), 16)
}

func benchmarkTree(b *testing.B, s *mv.Sample, h mv.BandwidthMatrix, queries [][]float64, every int) {
	ctx := context.Background()
	m := len(queries[0])
	part := make([][]float64, len(queries))
	for k, c := range queries {
		for i := 0; i < m; i += every {
			part[k] = append(part[k], c[i])
		}
	}
	for _, kernel := range []mv.Kernel{mv.Gaussian, mv.Epanechnikov, mv.Triweight} {
		b.Run(kernel.String(), func(b *testing.B) {
			bw, err := h.Scaled(mv.Gaussian.Rescale(s.Dim(), kernel))
			if err != nil {
				b.Fatal(err)
			}
			direct, err := mv.NewDirect(s, kernel, bw, mv.EvalOptions{})
			if err != nil {
				b.Fatal(err)
			}
			want := make([]float64, len(part[0]))
			begin := time.Now()
			if err := direct.Density(ctx, want, part); err != nil {
				b.Fatal(err)
			}
			directTime := time.Since(begin).Seconds() * float64(m) / float64(len(part[0]))
			got := make([]float64, m)
			var build time.Duration
			for b.Loop() {
				begin := time.Now()
				tree, err := mv.NewTree(s, kernel, bw, mv.TreeOptions{Rtol: 1e-6})
				if err != nil {
					b.Fatal(err)
				}
				build += time.Since(begin)
				if err := tree.Density(ctx, got, queries); err != nil {
					b.Fatal(err)
				}
			}
			var worst float64
			for i, w := range want {
				if w > 0 {
					worst = max(worst, math.Abs(got[i*every]-w)/w)
				}
			}
			per := b.Elapsed().Seconds() / float64(b.N)
			b.ReportMetric(directTime/per, "times-direct")
			b.ReportMetric(directTime/(per-build.Seconds()/float64(b.N)), "times-direct-built")
			b.ReportMetric(worst/1e-6, "error/bound")
			b.ReportMetric(directTime, "direct-s")
		})
	}
}

// BenchmarkTreeSixDimensions: where no lattice can go. 50,000 events of eight
// clusters in six dimensions, normal reference scale, 2,000 queries at events.
func BenchmarkTreeSixDimensions(b *testing.B) {
	rng := rand.New(rand.NewPCG(6, 6))
	const d, n = 6, 50_000
	cols, queries := make([][]float64, d), make([][]float64, d)
	for k := range cols {
		cols[k], queries[k] = make([]float64, n), make([]float64, 2000)
	}
	for i := range n {
		c := rand.New(rand.NewPCG(uint64(rng.IntN(8)), 1))
		for k := range d {
			cols[k][i] = 5*c.NormFloat64() + rng.NormFloat64()
		}
	}
	for j := range 2000 {
		for k := range d {
			queries[k][j] = cols[k][25*j] + 0.5*rng.NormFloat64()
		}
	}
	s, err := mv.NewSample(cols, nil)
	if err != nil {
		b.Fatal(err)
	}
	h, err := mv.ScalarBandwidth(d, 0.4)
	if err != nil {
		b.Fatal(err)
	}
	benchmarkTree(b, s, h, queries, 10)
}

// BenchmarkPlanePlans is the five ridges by every method in one run, building
// included: 100,000 events, scale 150, 128 x 128 queries, rtol 1e-6 and 1e-3.
// Errors are those against the direct sum on every 64th query.
func BenchmarkPlanePlans(b *testing.B) {
	s := mvtest.FiveRidges(rand.New(rand.NewPCG(1, 2)), 100_000)
	h, err := mv.ScalarBandwidth(2, 150)
	if err != nil {
		b.Fatal(err)
	}
	queries := mv.LatticePoints(mvtest.GridOver(s, 128, 300))
	comparePlans(b, s, h, queries, 64)
}

// BenchmarkSpacePlans is the same in three dimensions: 20,000 events, 8,000
// queries.
func BenchmarkSpacePlans(b *testing.B) {
	s := clumps(b, 3, 3, 20_000)
	comparePlans(b, s, tilted(b, 3, 0.25, 2), mv.LatticePoints(mvtest.GridOver(s, 20, 0.5)), 16)
}

func comparePlans(b *testing.B, s *mv.Sample, h mv.BandwidthMatrix, queries [][]float64, every int) {
	ctx := context.Background()
	m := len(queries[0])
	part := make([][]float64, len(queries))
	for k, c := range queries {
		for i := 0; i < m; i += every {
			part[k] = append(part[k], c[i])
		}
	}
	direct, err := mv.NewDirect(s, mv.Gaussian, h, mv.EvalOptions{})
	if err != nil {
		b.Fatal(err)
	}
	want := make([]float64, len(part[0]))
	begin := time.Now()
	if err := direct.Density(ctx, want, part); err != nil {
		b.Fatal(err)
	}
	directTime := time.Since(begin).Seconds() * float64(m) / float64(len(part[0]))
	peak := slices.Max(want)
	for _, rtol := range []float64{1e-6, 1e-3, 0} { // 0: 1e-6 of the highest density, absolute
		for _, method := range []mv.Method{mv.MethodTree, mv.MethodLattice} {
			b.Run(fmt.Sprintf("%s/rtol=%g", method, rtol), func(b *testing.B) {
				got := make([]float64, m)
				var byTree int
				for b.Loop() {
					o := mv.PlanOptions{Queries: m, Rtol: rtol, Force: method}
					if rtol == 0 {
						o.Atol = 1e-6 * peak
					}
					p, err := mv.NewPlan(s, mv.Gaussian, h, o)
					if err != nil {
						b.Fatal(err)
					}
					e, err := p.Evaluator(s, mv.Gaussian, h)
					if err != nil {
						b.Fatal(err)
					}
					if l, ok := e.(*mv.LatticeEvaluator); ok {
						byTree, err = l.DensityCount(ctx, got, queries)
					} else {
						err = e.Density(ctx, got, queries)
					}
					if err != nil {
						b.Fatal(err)
					}
				}
				var worst float64
				for i, w := range want {
					if e := math.Abs(got[i*every] - w); rtol == 0 {
						worst = max(worst, e/(1e-6*peak))
					} else if w > 0 {
						worst = max(worst, e/w/rtol)
					}
				}
				b.ReportMetric(directTime/(b.Elapsed().Seconds()/float64(b.N)), "times-direct")
				b.ReportMetric(worst, "error/bound")
				b.ReportMetric(float64(byTree)/float64(m), "by-tree")
			})
		}
	}
}
