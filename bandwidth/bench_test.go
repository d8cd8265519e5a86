package bandwidth_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/bandwidth"
	"drumlin/mv"
	"drumlin/mv/mvtest"
)

// BenchmarkSelect times a selector with a full matrix, the spectrum of a 1024
// by 1024 tally at hand, two workers. The cost depends on the lattice and on
// how many of its steps H spans, not on n.
func BenchmarkSelect(b *testing.B) {
	target := mvtest.Target("L")
	s, err := target.Sample(rand.New(rand.NewPCG(1, 1)), 100_000)
	if err != nil {
		b.Fatal(err)
	}
	cov := s.Moments().Covariance()
	lo := []float64{-6, -6}
	l, err := mv.NewLattice(lo, []float64{12.0 / 1023, 12.0 / 1023}, []int{1024, 1024})
	if err != nil {
		b.Fatal(err)
	}
	g, err := mv.Bin(s, l)
	if err != nil {
		b.Fatal(err)
	}
	for _, n := range []float64{1000, 100_000} { // the same spectrum, H for fewer or more events
		sp, err := mv.NewSpectrum(g, mv.SpectrumOptions{Reach: []float64{3 * math.Sqrt(cov[0]), 3 * math.Sqrt(cov[3])}, EffectiveN: n, Workers: 2})
		if err != nil {
			b.Fatal(err)
		}
		e := bandwidth.Events{Spectrum: sp, Covariance: cov, Counts: g}
		for _, m := range []string{"auto", "plug-in", "scv", "lscv", "bcv"} {
			b.Run(m+map[float64]string{1000: "/n=1e3", 100_000: "/n=1e5"}[n], func(b *testing.B) {
				for b.Loop() {
					if _, err := bandwidth.Select(e, m, bandwidth.Options{}); err != nil {
						b.Fatal(err)
					}
				}
			})
		}
	}
}
