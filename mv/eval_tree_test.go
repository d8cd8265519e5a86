package mv_test

import (
	"context"
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/mv"
	"drumlin/mv/mvtest"
)

// clusters draws n weighted events: five random clusters of random shapes, a
// heap of equal events, and a few strays far out.
func clusters(rng *rand.Rand, d, n int) *mv.Sample {
	cols := make([][]float64, d)
	for k := range cols {
		cols[k] = make([]float64, n)
	}
	w := make([]float64, n)
	centre, sd := make([]float64, 5*d), make([]float64, 5*d)
	for i := range centre {
		centre[i], sd[i] = 6*rng.NormFloat64(), 0.2+1.5*rng.Float64()
	}
	for i := range n {
		c := rng.IntN(5)
		w[i] = math.Exp(rng.NormFloat64())
		for k := range d {
			v := centre[c*d+k] + sd[c*d+k]*rng.NormFloat64()
			switch {
			case i%10 == 0: // heaped
				v = centre[k]
			case i%97 == 0: // stray
				v *= 40
			}
			cols[k][i] = v
		}
		if i%13 == 0 {
			w[i] = 0
		}
	}
	s, err := mv.NewSample(cols, w)
	if err != nil {
		panic(err)
	}
	return s
}

// queriesFor draws points near events, in gaps, and far in the tails.
func queriesFor(rng *rand.Rand, s *mv.Sample, m int) [][]float64 {
	q := make([][]float64, s.Dim())
	for k := range q {
		q[k] = make([]float64, m)
	}
	for j := range m {
		i := rng.IntN(s.Len())
		spread := []float64{0, 0.3, 2, 8, 30}[j%5]
		for k := range q {
			q[k][j] = s.At(i, k) + spread*rng.NormFloat64()
		}
	}
	return q
}

// The bound holds for every kernel, d = 1 to 6, random H, weights, heaps,
// strays and far queries; absolute part 0 and relative part down to 1e-10, and
// the absolute part alone. The allowance of 3e-13 is the rounding of the two
// sums, exponents near -700 included; 1e-300 the edge of float64.
func TestTreeBound(t *testing.T) {
	for d := 1; d <= 6; d++ {
		for _, k := range mv.Kernels() {
			t.Run(fmt.Sprintf("%s/d=%d", k, d), func(t *testing.T) {
				rng := rand.New(rand.NewPCG(uint64(d), 77))
				n := 3000
				if testing.Short() {
					n = 1200
				}
				s := clusters(rng, d, n)
				for _, size := range []float64{0.15, 0.8, 4} {
					if k.Compact() {
						size *= 2.5
					}
					h := mvtest.RandomMatrix(rng, d, size)
					q := queriesFor(rng, s, 100)
					m := len(q[0])
					want, got := make([]float64, m), make([]float64, m)
					if err := newDirect(t, s, k, h).Density(bg, want, q); err != nil {
						t.Fatal(err)
					}
					var top float64
					for _, v := range want {
						top = max(top, v)
					}
					for _, o := range []mv.TreeOptions{{}, {Rtol: 0.05}, {Rtol: 1e-10}, {Rtol: 1e-3, LeafSize: 1}, {Atol: 1e-5 * top}, {Rtol: 1e-4, Atol: 1e-8 * top}} {
						tree, err := mv.NewTree(s, k, h, o)
						if err != nil {
							t.Fatal(err)
						}
						if err := tree.Density(bg, got, q); err != nil {
							t.Fatal(err)
						}
						rtol, atol := tree.Tolerance()
						for i, f := range want {
							if e := math.Abs(got[i] - f); !(e <= atol+(rtol+3e-13)*f+1e-300) {
								t.Fatalf("size %g, %+v: query %d: %g, direct %g: error %.3g, allowed %.3g", size, o, i, got[i], f, e, atol+rtol*f)
							}
						}
					}
				}
			})
		}
	}
}

// The logarithm keeps the relative bound where the density underflows.
func TestTreeLogDensity(t *testing.T) {
	rng := rand.New(rand.NewPCG(8, 8))
	for d := 1; d <= 4; d++ {
		s := clusters(rng, d, 2000)
		h := mvtest.RandomMatrix(rng, d, 0.05)
		q := queriesFor(rng, s, 200)
		want, got := make([]float64, 200), make([]float64, 200)
		if err := newDirect(t, s, mv.Gaussian, h).LogDensity(bg, want, q); err != nil {
			t.Fatal(err)
		}
		for _, rtol := range []float64{1e-4, 1e-9} {
			tree, err := mv.NewTree(s, mv.Gaussian, h, mv.TreeOptions{Rtol: rtol})
			if err != nil {
				t.Fatal(err)
			}
			if err := tree.LogDensity(bg, got, q); err != nil {
				t.Fatal(err)
			}
			for i, v := range want {
				mvtest.NearAbs(t, fmt.Sprint("d=", d, " log density ", i), got[i], v, 1.001*rtol+4e-16*math.Abs(v))
			}
		}
	}
}

func TestTreeConforms(t *testing.T) {
	mvtest.Conform(t, func(s *mv.Sample, k mv.Kernel, h mv.BandwidthMatrix) (mv.Evaluator, error) {
		return mv.NewTree(s, k, h, mv.TreeOptions{Rtol: 1e-11, LeafSize: 4})
	}, mvtest.Conformance{Rel: 1e-10})
}

// Awkward sets: one event, all equal, coordinates in geometric progression
// (which a middle cut alone would divide one at a time), a lattice with every
// distance tied at the kernel's edge.
func TestTreeAwkwardSets(t *testing.T) {
	geometric := make([]float64, 2000)
	for i := range geometric {
		geometric[i] = math.Ldexp(float64(1-i%2*2), i/2)
	}
	var gx, gy []float64
	for i := range 900 {
		gx, gy = append(gx, float64(i%30)), append(gy, float64(i/30))
	}
	for name, cols := range map[string][][]float64{
		"one event": {{3}, {4}},
		"all equal": {make([]float64, 500), make([]float64, 500)},
		"geometric": {geometric, geometric},
		"lattice":   {gx, gy},
	} {
		s, err := mv.NewSample(cols, nil)
		if err != nil {
			t.Fatal(err)
		}
		for _, k := range mv.Kernels() {
			h := mvtest.Matrix(2, 4, 0, 0, 4)
			q := [][]float64{{3, 0, 4, 0.5, 1e200, -1e5}, {4, 0, 7, 11.5, 1e200, 12}}
			want, got := make([]float64, 6), make([]float64, 6)
			tree, err := mv.NewTree(s, k, h, mv.TreeOptions{Rtol: 1e-9})
			if err != nil {
				t.Fatal(err)
			}
			if err := errors.Join(newDirect(t, s, k, h).Density(bg, want, q), tree.Density(bg, got, q)); err != nil {
				t.Fatal(err)
			}
			for i, f := range want {
				mvtest.NearAbs(t, fmt.Sprint(name, " ", k, " query ", i), got[i], f, 1.001e-9*f)
			}
		}
	}
}

func TestTreeWorkers(t *testing.T) {
	s := mvtest.FiveRidges(rand.New(rand.NewPCG(1, 2)), 5000)
	h, _ := mv.ScalarBandwidth(2, 150)
	q := mv.LatticePoints(mvtest.GridOver(s, 30, 300))
	var first []float64
	for _, workers := range []int{1, 2, 7} {
		tree, err := mv.NewTree(s, mv.Gaussian, h, mv.TreeOptions{Workers: workers})
		if err != nil {
			t.Fatal(err)
		}
		f := make([]float64, 900)
		if err := tree.Density(bg, f, q); err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = f
		}
		for i := range f {
			if f[i] != first[i] {
				t.Fatalf("%d workers: query %d differs", workers, i)
			}
		}
	}
}

func TestTreeDoor(t *testing.T) {
	s, h := mvtest.P12(2), mvtest.P12H(2)
	for _, o := range []mv.TreeOptions{{Rtol: -1}, {Rtol: 0.5}, {Atol: math.Inf(1)}, {Rtol: math.NaN()}, {Workers: -1}, {LeafSize: -1}} {
		if _, err := mv.NewTree(s, mv.Gaussian, h, o); !errors.Is(err, mv.ErrShape) {
			t.Errorf("%+v: %v", o, err)
		}
	}
	if _, err := mv.NewTree(s, mv.Gaussian, mvtest.P12H(3), mv.TreeOptions{}); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	if _, err := mv.NewTree(s, mv.Kernel(99), h, mv.TreeOptions{}); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	if _, err := mv.NewTree(nil, mv.Gaussian, h, mv.TreeOptions{}); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	tree, err := mv.NewTree(s, mv.Gaussian, h, mv.TreeOptions{})
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(bg)
	cancel()
	if err := tree.Density(ctx, make([]float64, 1), column(0, 0)); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}
}

func ExampleTree() {
	m, _ := mv.NewNormalMixture([]float64{1}, [][]float64{{0, 0}}, [][]float64{{1, 0, 0, 1}})
	s, _ := m.Sample(rand.New(rand.NewPCG(1, 1)), 20000)
	h, _ := mv.ScalarBandwidth(2, 0.2)
	tree, err := mv.NewTree(s, mv.Gaussian, h, mv.TreeOptions{Rtol: 1e-4})
	if err != nil {
		fmt.Println(err)
		return
	}
	f := make([]float64, 1)
	if err := tree.Density(context.Background(), f, [][]float64{{0}, {0}}); err != nil {
		fmt.Println(err)
	}
	fmt.Printf("%.2f\n", f[0])
	// Output: 0.16
}

func ExampleTreeOptions() {
	fmt.Println(mv.TreeOptions{Rtol: 1e-8}.Validate(), mv.TreeOptions{Rtol: 2}.Validate() != nil)
	// Output: <nil> true
}

func ExampleEvaluator() {
	s, _ := mv.NewSample([][]float64{{0, 1, 2}}, nil)
	h, _ := mv.ScalarBandwidth(1, 1)
	direct, _ := mv.NewDirect(s, mv.Gaussian, h, mv.EvalOptions{})
	tree, _ := mv.NewTree(s, mv.Gaussian, h, mv.TreeOptions{})
	for _, e := range []mv.Evaluator{direct, tree} {
		f := make([]float64, 1)
		if err := e.Density(context.Background(), f, [][]float64{{1}}); err != nil {
			fmt.Println(err)
		}
		fmt.Printf("%.6f\n", f[0])
	}
	// Output:
	// 0.294295
	// 0.294295
}
