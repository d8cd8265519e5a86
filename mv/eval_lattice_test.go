package mv_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/mv"
	"drumlin/mv/mvtest"
)

func newLattice(t testing.TB, s *mv.Sample, k mv.Kernel, h mv.BandwidthMatrix, o mv.LatticeOptions) *mv.LatticeEvaluator {
	t.Helper()
	e, err := mv.NewLatticeEvaluator(s, k, h, o)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// The lattice alone keeps its stated bound at every query, near events and far
// out, for every kernel that has one; the bound itself is near what was asked.
// Rounding of the direct sum is allowed 3e-13 of the value.
func TestLatticeBound(t *testing.T) {
	for d := 1; d <= 3; d++ {
		for _, k := range mv.Kernels() {
			t.Run(fmt.Sprintf("%s/d=%d", k, d), func(t *testing.T) {
				rng := rand.New(rand.NewPCG(uint64(d), 31))
				cols, w := make([][]float64, d), make([]float64, 400)
				for a := range cols {
					cols[a] = make([]float64, len(w))
					for i := range w {
						cols[a][i] = float64(a) + rng.NormFloat64()
						w[i] = rng.ExpFloat64()
					}
				}
				s, err := mv.NewSample(cols, w)
				if err != nil {
					t.Fatal(err)
				}
				size := 0.5
				if k.Compact() {
					size = 1.5
				}
				h := mvtest.RandomMatrix(rng, d, size)
				q := queriesFor(rng, s, 200)
				want, got := make([]float64, 200), make([]float64, 200)
				if err := newDirect(t, s, k, h).Density(bg, want, q); err != nil {
					t.Fatal(err)
				}
				peak := k.Value(d, 0) / h.SqrtDet()
				for _, rtol := range []float64{1e-2, 1e-4, 1e-6} {
					if rtol < 1e-2 && (k.Compact() || d == 3 && testing.Short()) {
						break // a compact kernel's lattice is the finest the memory holds
					}
					e := newLattice(t, s, k, h, mv.LatticeOptions{Rtol: rtol, Alone: true, Memory: 40 << []int{0, 14, 16, 22}[d]})
					if err := e.Density(bg, got, q); err != nil {
						t.Fatal(err)
					}
					bound := e.Bound()
					if k == mv.Gaussian && !(bound <= rtol*2e-3*peak) {
						t.Errorf("rtol %g: bound %.3g of K_H(0)", rtol, bound/peak)
					}
					if math.IsInf(bound, 1) != (2*power(k) <= d-1) {
						t.Errorf("bound %g of K_H(0)", bound/peak)
					}
					var worst float64
					for i, f := range want {
						worst = max(worst, math.Abs(got[i]-f)-3e-13*f)
					}
					if !(worst <= bound) {
						t.Errorf("rtol %g: off by %.3g of K_H(0), bound %.3g", rtol, worst/peak, bound/peak)
					}
					t.Logf("rtol %g: order %d, nodes %v: off by %.3g of K_H(0), bound %.3g", rtol, e.SplineOrder(), e.Nodes(), worst/peak, bound/peak)
				}
			})
		}
	}
}

// power returns p of a compact kernel, large for the Gaussian.
func power(k mv.Kernel) int {
	return map[mv.Kernel]int{mv.Gaussian: 99, mv.Uniform: 0, mv.Epanechnikov: 1, mv.Biweight: 2, mv.Triweight: 3}[k]
}

// With the tree behind it the contract is the tree's: heaps, strays, weights of
// 0, far queries, all kernels.
func TestLatticeTolerance(t *testing.T) {
	for d := 1; d <= 3; d++ {
		for _, k := range mv.Kernels() {
			rng := rand.New(rand.NewPCG(uint64(d), 78))
			s := clusters(rng, d, 600)
			for _, size := range []float64{0.8, 4} {
				h := mvtest.RandomMatrix(rng, d, []float64{0, 3, 4, 30}[d]*size)
				q := queriesFor(rng, s, 60)
				want, got := make([]float64, 60), make([]float64, 60)
				if err := newDirect(t, s, k, h).Density(bg, want, q); err != nil {
					t.Fatal(err)
				}
				for _, o := range []mv.LatticeOptions{{}, {Rtol: 1e-3}, {Atol: 1e-3 * want[0]}} {
					if d == 3 && o.Rtol == 0 && o.Atol == 0 && testing.Short() {
						continue
					}
					e := newLattice(t, s, k, h, o)
					n, err := e.DensityCount(bg, got, q)
					if err != nil {
						t.Fatal(err)
					}
					rtol, atol := e.Tolerance()
					for i, f := range want {
						if e := math.Abs(got[i] - f); !(e <= atol+(rtol+3e-13)*f+1e-300) {
							t.Fatalf("%s d=%d %+v: query %d: %g, direct %g", k, d, o, i, got[i], f)
						}
					}
					if k == mv.Gaussian && d < 3 && n > 40 {
						t.Errorf("%s d=%d %+v: the tree answered %d of 60", k, d, o, n)
					}
				}
			}
		}
	}
}

// The suite every evaluator passes: with the tree behind it to 1e-3 of every
// value; alone, errors are a part of the highest density. What compact kernels
// cost alone is measured, not proven: their edges ring.
func TestLatticeConforms(t *testing.T) {
	build := func(o mv.LatticeOptions) mvtest.Build {
		return func(s *mv.Sample, k mv.Kernel, h mv.BandwidthMatrix) (mv.Evaluator, error) {
			return mv.NewLatticeEvaluator(s, k, h, o)
		}
	}
	dims := []int{1, 2, 3}
	if testing.Short() {
		dims = dims[:2]
	}
	t.Run("with the tree", func(t *testing.T) {
		mvtest.Conform(t, build(mv.LatticeOptions{Rtol: 1e-4, Memory: 40 << 20}), mvtest.Conformance{Rel: 1e-3, Dims: dims})
	})
	t.Run("alone", func(t *testing.T) {
		mvtest.Conform(t, build(mv.LatticeOptions{Rtol: 1e-3, Alone: true}), mvtest.Conformance{Kernels: []mv.Kernel{mv.Gaussian}, Rel: 1e-6, Floor: 1})
	})
	alone := build(mv.LatticeOptions{Alone: true, Memory: 40 << 15})
	for k, rel := range map[mv.Kernel]float64{mv.Triweight: 5e-5, mv.Biweight: 5e-4, mv.Epanechnikov: 5e-3, mv.Uniform: 0.1} {
		t.Run("alone", func(t *testing.T) {
			mvtest.Conform(t, alone, mvtest.Conformance{Kernels: []mv.Kernel{k}, Dims: []int{1, 2}, Rel: rel, Floor: 1})
		})
	}
}

// Derivatives to order 4 against direct sums, as a part of each one's maximum.
func TestLatticeDerivatives(t *testing.T) {
	for d := 1; d <= 3; d++ {
		s := clumps(t, 9, d, 300)
		h := tilted(t, d, 0.3, 2)
		rng := rand.New(rand.NewPCG(4, 4))
		q := queriesFor(rng, s, 80)
		e, direct := newLattice(t, s, mv.Gaussian, h, mv.LatticeOptions{Alone: true, Rtol: []float64{0, 1e-6, 1e-6, 1e-3}[d]}), newDirect(t, s, mv.Gaussian, h)
		for r := 0; r <= 4; r++ {
			ks := mv.MultiIndices(d, r)
			ks = ks[:min(len(ks), 6)]
			if d == 3 && testing.Short() {
				ks = ks[len(ks)-1:]
			}
			got, want := make([][]float64, len(ks)), make([][]float64, len(ks))
			for j := range ks {
				got[j], want[j] = make([]float64, 80), make([]float64, 80)
			}
			if err := errors.Join(e.Derivatives(bg, got, q, ks), direct.Derivatives(bg, want, q, ks)); err != nil {
				t.Fatal(err)
			}
			for j := range ks {
				if e, top := worst(got[j], want[j]); e > 2e-6*top*[]float64{0, 1, 1, 50}[d] {
					t.Errorf("d=%d %v: off by %.3g of its maximum", d, ks[j], e/top)
				}
			}
		}
	}
	s, h := mvtest.P12(2), mvtest.P12H(2)
	e := newLattice(t, s, mv.Gaussian, h, mv.LatticeOptions{})
	g := [][]float64{{0}, {0}}
	if err := e.Derivatives(bg, g, column(1, 1), [][]int{{1, 0}, {0, 1}}); err != nil {
		t.Fatal(err)
	}
	mvtest.Near(t, "P12 gradient", g[0][0], 0.0529644663908, 1e-8)
	mvtest.Near(t, "P12 gradient", g[1][0], -0.0469829671752, 1e-8)
	if err := e.Derivatives(bg, g[:1], column(1, 1), [][]int{{3, 2}}); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	b := newLattice(t, s, mv.Epanechnikov, h, mv.LatticeOptions{})
	if err := b.Derivatives(bg, g[:1], column(1, 1), [][]int{{2, 0}}); !errors.Is(err, mv.ErrNotDifferentiable) {
		t.Error(err)
	}
}

// The number of workers changes no bit; a lattice too large says so in numbers.
func TestLatticeDoor(t *testing.T) {
	s := clumps(t, 4, 2, 3000)
	h := tilted(t, 2, 0.3, 2)
	q := mv.LatticePoints(mvtest.GridOver(s, 20, 1))
	a, b := make([]float64, 400), make([]float64, 400)
	for workers, dst := range map[int][]float64{1: a, 3: b} {
		if err := newLattice(t, s, mv.Gaussian, h, mv.LatticeOptions{Workers: workers}).Density(bg, dst, q); err != nil {
			t.Fatal(err)
		}
	}
	for i := range a {
		if a[i] != b[i] {
			t.Fatalf("query %d: %v by one worker, %v by three", i, a[i], b[i])
		}
	}
	_, err := mv.NewLatticeEvaluator(clumps(t, 1, 4, 50), mv.Gaussian, tilted(t, 4, 1e-3, 1), mv.LatticeOptions{})
	if !errors.Is(err, mv.ErrTooLarge) {
		t.Error(err)
	}
	t.Log(err)
	for _, o := range []mv.LatticeOptions{{Rtol: 1}, {Rtol: math.NaN()}, {Atol: -1}, {Workers: -1}, {Memory: -1}} {
		if _, err := mv.NewLatticeEvaluator(s, mv.Gaussian, h, o); !errors.Is(err, mv.ErrShape) {
			t.Errorf("%+v: %v", o, err)
		}
	}
	if _, err := mv.NewLatticeEvaluator(s, mv.Gaussian, tilted(t, 3, 1, 1), mv.LatticeOptions{}); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	if err := newLattice(t, s, mv.Gaussian, h, mv.LatticeOptions{}).Density(bg, make([]float64, 1), [][]float64{{math.NaN()}, {1}}); !errors.Is(err, mv.ErrNotFinite) {
		t.Error(err)
	}
}
