package mv_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"drumlin/mv"
	"drumlin/mv/mvtest"
)

// A plan depends on the sizes: few pairs go direct, many in the plane to the
// lattice, many dimensions and compact kernels to the tree; it can be forced,
// and every method keeps the tolerance.
func TestPlan(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 3))
	plane := mvtest.FiveRidges(rng, 20_000)
	h, _ := mv.ScalarBandwidth(2, 150)
	wide, _ := h.Scaled(6)
	tiny, _ := h.Scaled(1e-8)
	six := clusters(rng, 6, 30_000)
	for _, c := range []struct {
		s    *mv.Sample
		k    mv.Kernel
		h    mv.BandwidthMatrix
		o    mv.PlanOptions
		want mv.Method
	}{
		{mvtest.P12(2), mv.Gaussian, mvtest.P12H(2), mv.PlanOptions{Queries: 10}, mv.MethodDirect},
		{plane, mv.Gaussian, h, mv.PlanOptions{}, mv.MethodLattice},
		{plane, mv.Gaussian, h, mv.PlanOptions{Queries: 3}, mv.MethodDirect},
		{plane, mv.Uniform, wide, mv.PlanOptions{}, mv.MethodTree},
		{plane, mv.Gaussian, tiny, mv.PlanOptions{}, mv.MethodTree},
		{plane, mv.Gaussian, h, mv.PlanOptions{Memory: 1 << 16}, mv.MethodTree},
		{six, mv.Gaussian, tilted(t, 6, 1, 1), mv.PlanOptions{}, mv.MethodTree},
		{plane, mv.Gaussian, h, mv.PlanOptions{Force: mv.MethodTree}, mv.MethodTree},
		{plane, mv.Gaussian, h, mv.PlanOptions{Force: mv.MethodDirect, Queries: 100}, mv.MethodDirect},
	} {
		p, err := mv.NewPlan(c.s, c.k, c.h, c.o)
		if err != nil {
			t.Fatal(err)
		}
		if p.Method != c.want || p.Forced != (c.o.Force != mv.MethodAuto) || !strings.HasPrefix(p.String(), c.want.String()) {
			t.Errorf("%+v: want %s, got %s", c.o, c.want, p)
		}
		again, _ := mv.NewPlan(c.s, c.k, c.h, c.o)
		if p.String() != again.String() {
			t.Error("two plans for one problem")
		}
		e, err := p.Evaluator(c.s, c.k, c.h)
		if err != nil {
			t.Fatal(err)
		}
		q := queriesFor(rng, c.s, 20)
		got, want := make([]float64, 20), make([]float64, 20)
		if err := errors.Join(e.Density(bg, got, q), newDirect(t, c.s, c.k, c.h).Density(bg, want, q)); err != nil {
			t.Fatal(err)
		}
		for i, f := range want {
			if !(math.Abs(got[i]-f) <= (p.Rtol+3e-13)*f+1e-300) {
				t.Errorf("%s: %g, direct %g", p, got[i], f)
			}
		}
	}
	if _, err := mv.NewPlan(plane, mv.Gaussian, h, mv.PlanOptions{Queries: -1}); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	for _, m := range []mv.Method{mv.MethodAuto, mv.MethodDirect, mv.MethodTree, mv.MethodLattice} {
		if got, err := mv.ParseMethod(strings.ToUpper(m.String())); err != nil || got != m {
			t.Error(got, err)
		}
	}
	if _, err := mv.ParseMethod("fast"); err == nil {
		t.Error("a plan named fast")
	}
}

func ExampleNewPlan() {
	s := mvtest.P12(2)
	p, err := mv.NewPlan(s, mv.Gaussian, mvtest.P12H(2), mv.PlanOptions{Queries: 3})
	if err != nil {
		panic(err)
	}
	e, err := p.Evaluator(s, mv.Gaussian, mvtest.P12H(2))
	if err != nil {
		panic(err)
	}
	f := make([]float64, 3)
	if err := e.Density(bg, f, [][]float64{{0, 1, 2.5}, {0, 1, 2}}); err != nil {
		panic(err)
	}
	fmt.Printf("%s, because %s: %.4f\n", p.Method, p.Reason, f)
	// Output: direct, because so few pairs that nothing is gained by preparing: [0.1824 0.1058 0.0510]
}

func ExampleNewLatticeEvaluator() {
	e, err := mv.NewLatticeEvaluator(mvtest.P12(2), mv.Gaussian, mvtest.P12H(2), mv.LatticeOptions{Rtol: 1e-6, Alone: true})
	if err != nil {
		panic(err)
	}
	f := make([]float64, 1)
	if err := e.Density(bg, f, [][]float64{{1}, {1}}); err != nil {
		panic(err)
	}
	fmt.Printf("%.9f, wrong by less than 1e-9: %t\n", f[0], e.Bound() < 1e-9)
	// Output: 0.105771256, wrong by less than 1e-9: true
}
