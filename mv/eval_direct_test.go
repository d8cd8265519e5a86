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

var bg = context.Background()

func newDirect(t testing.TB, s *mv.Sample, k mv.Kernel, h mv.BandwidthMatrix) *mv.Direct {
	t.Helper()
	e, err := mv.NewDirect(s, k, h, mv.EvalOptions{})
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// column wraps one point as query columns.
func column(x ...float64) [][]float64 {
	q := make([][]float64, len(x))
	for k, v := range x {
		q[k] = []float64{v}
	}
	return q
}

func densityAt(t testing.TB, e mv.Evaluator, x ...float64) float64 {
	t.Helper()
	var out [1]float64
	if err := e.Density(bg, out[:], column(x...)); err != nil {
		t.Fatal(err)
	}
	return out[0]
}

func functionals(t testing.TB, s *mv.Sample, g mv.BandwidthMatrix, r int) []float64 {
	t.Helper()
	v, err := mv.DirectFunctionals(bg, s, g, r, mv.EvalOptions{})
	if err != nil {
		t.Fatal(err)
	}
	return v
}

func combine(a float64, h mv.BandwidthMatrix, b float64, g mv.BandwidthMatrix) mv.BandwidthMatrix {
	e := h.Entries()
	for i, v := range g.Entries() {
		e[i] = a*e[i] + b*v
	}
	return mvtest.Matrix(h.Dim(), e...)
}

// Values of METHODS section 0, computed there by two routes.
func TestDirectWorkedDensity(t *testing.T) {
	const rel = 2e-12 // twelve printed digits
	p1 := newDirect(t, mvtest.P12(1), mv.Gaussian, mvtest.P12H(1))
	mvtest.Near(t, "d=1 f(1)", densityAt(t, p1, 1), 0.271394610998, rel)
	p2 := newDirect(t, mvtest.P12(2), mv.Gaussian, mvtest.P12H(2))
	mvtest.Near(t, "f(0,0)", densityAt(t, p2, 0, 0), 0.182369325152, rel)
	mvtest.Near(t, "f(1,1)", densityAt(t, p2, 1, 1), 0.105771256382, 4*rel)
	mvtest.Near(t, "f(2.5,2)", densityAt(t, p2, 2.5, 2), 0.0509608333725, rel)
	mvtest.Near(t, "f(-1.5,3)", densityAt(t, p2, -1.5, 3), 5.46810068632e-11, rel)
	p3 := newDirect(t, mvtest.P12(3), mv.Gaussian, mvtest.P12H(3))
	mvtest.Near(t, "d=3 f(0)", densityAt(t, p3, 0, 0, 0), 0.141973744566, 4*rel)
	mvtest.Near(t, "d=3 f(1,1,.5)", densityAt(t, p3, 1, 1, 0.5), 0.0648023813499, rel)

	for _, c := range []struct {
		k    mv.Kernel
		c    float64
		a, b float64
	}{
		{mv.Epanechnikov, 1, 0.562559669217, 0.121496552880},
		{mv.Biweight, 1, 0.781054373411, 0.0722904489636},
		{mv.Epanechnikov, 2.4018739103 * 2.4018739103, 0.153370744047, 0.105768898425},
	} {
		h, err := mvtest.P12H(2).Scaled(c.c)
		if err != nil {
			t.Fatal(err)
		}
		e := newDirect(t, mvtest.P12(2), c.k, h)
		mvtest.Near(t, c.k.String()+" (0,0)", densityAt(t, e, 0, 0), c.a, 4*rel)
		mvtest.Near(t, c.k.String()+" (1,1)", densityAt(t, e, 1, 1), c.b, 4*rel)
	}
}

func TestDirectWorkedDerivatives(t *testing.T) {
	check := func(s *mv.Sample, h mv.BandwidthMatrix, x []float64, r int, want ...float64) {
		t.Helper()
		ks := mv.MultiIndices(s.Dim(), r)
		dst := make([][]float64, len(ks))
		for i := range dst {
			dst[i] = make([]float64, 1)
		}
		if err := newDirect(t, s, mv.Gaussian, h).Derivatives(bg, dst, column(x...), ks); err != nil {
			t.Fatal(err)
		}
		for i, w := range want {
			mvtest.Near(t, fmt.Sprintf("D^%v at %v", ks[i], x), dst[i][0], w, 1e-11)
		}
	}
	s, h := mvtest.P12(2), mvtest.P12H(2)
	check(s, h, []float64{1, 1}, 1, 0.0529644663908, -0.0469829671752)
	check(s, h, []float64{1, 1}, 2, -0.110721398861, 0.0261837354860, 0.153988419351)
	check(s, h, []float64{0, 0}, 1, 0.0557129886328, 0.0406990285844)
	check(s, h, []float64{0, 0}, 2, -0.440534502753, 0.431380469239, -1.12866418894)
	check(mvtest.P12(3), mvtest.P12H(3), []float64{1, 1, 0.5}, 1, -0.0102650021012, 0.0157262724148, 0.0572839620745)
	check(s, h, []float64{1, 1}, 0, 0.105771256382)
}

// Every derivative of every kernel that has one, against central differences
// of the order below.
func TestDirectDerivativesByDifferences(t *testing.T) {
	rng := rand.New(rand.NewPCG(5, 6))
	for _, k := range []mv.Kernel{mv.Gaussian, mv.Epanechnikov, mv.Biweight, mv.Triweight} {
		for d := 1; d <= 3; d++ {
			cols, w := make([][]float64, d), make([]float64, 20)
			for a := range cols {
				cols[a] = make([]float64, 20)
				for i := range cols[a] {
					cols[a][i], w[i] = rng.NormFloat64(), rng.Float64()
				}
			}
			s, err := mv.NewSample(cols, w)
			if err != nil {
				t.Fatal(err)
			}
			size := 1.0
			if k.Compact() {
				size = 3
			}
			e := newDirect(t, s, k, mvtest.RandomMatrix(rng, d, size))
			top := map[mv.Kernel]int{mv.Gaussian: 4, mv.Epanechnikov: 1, mv.Biweight: 2, mv.Triweight: 2}[k]
			for r := 1; r <= top; r++ {
				for _, idx := range mv.MultiIndices(d, r) {
					axis := 0
					for idx[axis] == 0 {
						axis++
					}
					low := append([]int(nil), idx...)
					low[axis]--
					x := make([]float64, d)
					for a := range x {
						x[a] = 0.5 * rng.NormFloat64()
					}
					const step = 1e-5
					var v [3]float64
					for i, at := range []float64{0, step, -step} {
						q := append([]float64(nil), x...)
						q[axis] += at
						n := low
						if i == 0 {
							n = idx
						}
						if err := e.Derivative(bg, v[i:i+1], column(q...), n); err != nil {
							t.Fatal(err)
						}
					}
					// Differences are good to step^2 and to rounding/step.
					mvtest.NearAbs(t, fmt.Sprintf("%s d=%d D^%v", k, d, idx), v[0], (v[1]-v[2])/(2*step), 2e-6*(1+math.Abs(v[0])))
				}
			}
		}
	}
}

func TestDirectDerivativeRefusals(t *testing.T) {
	s, h := mvtest.P12(2), mvtest.P12H(2)
	var out [1]float64
	for _, c := range []struct {
		k   mv.Kernel
		idx []int
	}{{mv.Uniform, []int{1, 0}}, {mv.Epanechnikov, []int{1, 1}}, {mv.Triweight, []int{3, 0}}} {
		if err := newDirect(t, s, c.k, h).Derivative(bg, out[:], column(0, 0), c.idx); !errors.Is(err, mv.ErrNotDifferentiable) {
			t.Errorf("%v %v: %v", c.k, c.idx, err)
		}
	}
	e := newDirect(t, s, mv.Gaussian, h)
	for _, idx := range [][]int{{1}, {-1, 1}, {40, 40}} {
		if err := e.Derivative(bg, out[:], column(0, 0), idx); !errors.Is(err, mv.ErrShape) {
			t.Errorf("index %v: %v", idx, err)
		}
	}
	if err := e.Density(bg, out[:], column(0)); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	if err := e.Density(bg, out[:], column(0, math.NaN())); !errors.Is(err, mv.ErrNotFinite) {
		t.Error(err)
	}
	if err := e.Density(bg, nil, column(0, 0)); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	ctx, cancel := context.WithCancel(bg)
	cancel()
	if err := e.Density(ctx, out[:], column(0, 0)); !errors.Is(err, context.Canceled) {
		t.Error(err)
	}
}

func TestDirectLogDensity(t *testing.T) {
	e := newDirect(t, mvtest.P12(2), mv.Gaussian, mvtest.P12H(2))
	q := [][]float64{{0, 1, -1.5, 40}, {0, 1, 3, -60}}
	f, l := make([]float64, 4), make([]float64, 4)
	if err := errors.Join(e.Density(bg, f, q), e.LogDensity(bg, l, q)); err != nil {
		t.Fatal(err)
	}
	for i := range 3 {
		mvtest.NearAbs(t, "log density", l[i], math.Log(f[i]), 1e-13)
	}
	if f[3] != 0 || !(l[3] < -700) || math.IsInf(l[3], 0) {
		t.Errorf("far query: density %g, logarithm %g", f[3], l[3])
	}
}

// The result is the same to the bit for any number of workers.
func TestDirectWorkers(t *testing.T) {
	s := mvtest.FiveRidges(rand.New(rand.NewPCG(1, 2)), 700)
	h, _ := mv.ScalarBandwidth(2, 150)
	q := mv.LatticePoints(mvtest.GridOver(s, 20, 300))
	var first, firstPsi []float64
	for _, workers := range []int{1, 2, 5} {
		e, err := mv.NewDirect(s, mv.Gaussian, h, mv.EvalOptions{Workers: workers})
		if err != nil {
			t.Fatal(err)
		}
		f := make([]float64, 400)
		if err := e.Density(bg, f, q); err != nil {
			t.Fatal(err)
		}
		psi, err := mv.DirectFunctionals(bg, s, h, 4, mv.EvalOptions{Workers: workers})
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first, firstPsi = f, psi
		}
		for i := range f {
			if f[i] != first[i] {
				t.Fatalf("%d workers: query %d differs", workers, i)
			}
		}
		for i := range psi {
			if psi[i] != firstPsi[i] {
				t.Fatalf("%d workers: functional %d differs", workers, i)
			}
		}
	}
}

func TestDirectConforms(t *testing.T) {
	mvtest.Conform(t, func(s *mv.Sample, k mv.Kernel, h mv.BandwidthMatrix) (mv.Evaluator, error) {
		return mv.NewDirect(s, k, h, mv.EvalOptions{})
	}, mvtest.Conformance{Rel: 1e-10})
}

func ExampleDirect() {
	s, _ := mv.NewSample([][]float64{{0, 1}, {0, 0}}, nil)
	h, _ := mv.ScalarBandwidth(2, 0.5)
	e, err := mv.NewDirect(s, mv.Gaussian, h, mv.EvalOptions{Workers: 1})
	if err != nil {
		fmt.Println(err)
		return
	}
	f := make([]float64, 2)
	if err := e.Density(context.Background(), f, [][]float64{{0.5, 3}, {0, 0}}); err != nil {
		fmt.Println(err)
	}
	fmt.Printf("%.5f %.5f\n", f[0], f[1])
	// Output: 0.38613 0.00011
}
