package mvtest

import (
	"math/rand/v2"

	"drumlin/mv"
)

// FiveRidges draws n events, in metres, from five slanted clusters along a
// parabola: x = 1000k + 300u, y = 500k^2 + 100v + 200u, k uniform on {0..4},
// u and v standard normal. With a scale of 150 it is the evaluators' benchmark.
func FiveRidges(rng *rand.Rand, n int) *mv.Sample {
	x, y := make([]float64, n), make([]float64, n)
	for i := range n {
		k := float64(rng.IntN(5))
		u, v := rng.NormFloat64(), rng.NormFloat64()
		x[i], y[i] = 1000*k+300*u, 500*k*k+100*v+200*u
	}
	return must(mv.NewSample([][]float64{x, y}, nil))
}

// GridOver returns a lattice of m nodes an axis over the events' extent widened
// by pad on every side.
func GridOver(s *mv.Sample, m int, pad float64) mv.Lattice {
	d := s.Dim()
	origin, step, n := make([]float64, d), make([]float64, d), make([]int, d)
	for k, c := range s.Columns() {
		lo, hi := c[0], c[0]
		for _, v := range c {
			lo, hi = min(lo, v), max(hi, v)
		}
		origin[k], n[k] = lo-pad, m
		step[k] = (hi - lo + 2*pad) / float64(m-1)
	}
	return must(mv.NewLattice(origin, step, n))
}

func must[T any](v T, err error) T {
	if err != nil {
		panic("mvtest: " + err.Error())
	}
	return v
}
