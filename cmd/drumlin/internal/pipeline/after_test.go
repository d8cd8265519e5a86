package pipeline

import (
	"context"
	"math/rand/v2"
	"testing"

	"drumlin/mv"
)

// BenchmarkEstimateAfterTally is what happens between the tally and the
// regions: spectrum, plug-in selection, density and bias, on about 1024² nodes.
// Its cost does not depend on the number of events.
func BenchmarkEstimateAfterTally(b *testing.B) {
	ta, err := mv.NewTally(mv.TallyOptions{})
	if err != nil {
		b.Fatal(err)
	}
	rng := rand.New(rand.NewPCG(1, 1))
	const n = 4_000_000
	x, y := make([]float64, n), make([]float64, n)
	for i := range x {
		for {
			u, v := rng.NormFloat64(), rng.NormFloat64()
			x[i], y[i] = 20000+14000*u, 30000+12000*v
			if i%3 == 0 {
				x[i], y[i] = 17000+15000*u-5000*v, 32000+8000*u+7500*v
			}
			if x[i] > -10000 && x[i] < 50000 && y[i] > 2000 && y[i] < 58000 {
				break
			}
		}
	}
	if err := ta.Add(x, y, nil); err != nil {
		b.Fatal(err)
	}
	for b.Loop() {
		m := &estimator{tally: ta, sel: Selection{Method: "plug-in"}, workers: 2, progress: func(string) {}}
		e, err := m.estimate(context.Background())
		if err != nil {
			b.Fatal(err)
		}
		if e.Nodes < 900 || e.Nodes > 1500 {
			b.Fatalf("%d nodes", e.Nodes)
		}
	}
}
