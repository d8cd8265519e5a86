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

func pilotAtEvents(t testing.TB, s *mv.Sample, k mv.Kernel, h mv.BandwidthMatrix) []float64 {
	t.Helper()
	f := make([]float64, s.Len())
	if err := newDirect(t, s, k, h).Density(bg, f, s.Columns()); err != nil {
		t.Fatal(err)
	}
	return f
}

func newAdaptive(t testing.TB, s *mv.Sample, k mv.Kernel, h mv.BandwidthMatrix, pilot []float64, o mv.AdaptiveOptions) *mv.Adaptive {
	t.Helper()
	a, err := mv.NewAdaptive(s, k, h, pilot, o)
	if err != nil {
		t.Fatal(err)
	}
	return a
}

// METHODS 8.1, computed there: isotropic pilot h = 0.6 with the own kernel
// kept, base h = 0.5; then pilot and base H of section 0.
func TestAdaptiveWorked(t *testing.T) {
	s := mvtest.P12(2)
	pilot := pilotAtEvents(t, s, mv.Gaussian, mvtest.Matrix(2, .36, 0, 0, .36))
	base := mvtest.Matrix(2, .25, 0, 0, .25)
	a := newAdaptive(t, s, mv.Gaussian, base, pilot, mv.AdaptiveOptions{})
	mvtest.Near(t, "geometric mean", a.GeometricMean(), 0.0802648409056, 2e-12)
	logs := 0.0
	for i, want := range []float64{.77954935, .83232299, 1.01631497, .86963375, 1.02822657, 1.01734397, 1.26173605, 1.24260643, .79741189, .95042383, 1.2562271, 1.11679345} {
		mvtest.NearAbs(t, fmt.Sprint("lambda ", i+1), a.Factors()[i], want, 0.51e-8)
		logs += math.Log(a.Factors()[i])
	}
	mvtest.NearAbs(t, "logarithm of the product", logs, 0, 1e-14)
	mvtest.Near(t, "f(0,0)", densityAt(t, a, 0, 0), 0.205931887075, 4e-12)
	mvtest.Near(t, "f(1,1)", densityAt(t, a, 1, 1), 0.0960952388043, 4e-12)
	mvtest.Near(t, "f(2.5,2)", densityAt(t, a, 2.5, 2), 0.0534378864156, 4e-12)
	fixed := newDirect(t, s, mv.Gaussian, base)
	mvtest.Near(t, "fixed f(0,0)", densityAt(t, fixed, 0, 0), .149268079951, 4e-12)
	mvtest.Near(t, "fixed f(1,1)", densityAt(t, fixed, 1, 1), .0995841755234, 4e-12)
	mvtest.Near(t, "fixed f(2.5,2)", densityAt(t, fixed, 2.5, 2), .0686994225334, 4e-12)

	h := mvtest.P12H(2)
	full := newAdaptive(t, s, mv.Gaussian, h, pilotAtEvents(t, s, mv.Gaussian, h), mv.AdaptiveOptions{})
	mvtest.Near(t, "full matrix f(0,0)", densityAt(t, full, 0, 0), 0.278015807735, 4e-12)
	mvtest.Near(t, "full matrix f(1,1)", densityAt(t, full, 1, 1), 0.0915214809458, 4e-12)

	// Classes: ln(lambda)/s rounded to a whole number. The same section's values
	// of f(1,1) at four steps, to the digits printed.
	for _, c := range []struct{ step, want float64 }{{.2, .0981263}, {.1, .0965100}, {.05, .0970060}, {.025, .0954756}} {
		got := newAdaptive(t, s, mv.Gaussian, base, pilot, mv.AdaptiveOptions{Step: c.step, Rtol: 1e-10})
		mvtest.NearAbs(t, fmt.Sprint("classes of ", c.step), densityAt(t, got, 1, 1), c.want, 0.51e-7)
		mvtest.NearAbs(t, fmt.Sprint("classes of ", c.step, " against exact"), densityAt(t, got, 1, 1), 0.0960952388043, got.ClassingBound())
	}
}

// The stated bound of the classes holds for every kernel that has one, and
// shrinks with the step; the mass stays 1.
func TestAdaptiveClasses(t *testing.T) {
	rng := rand.New(rand.NewPCG(4, 4))
	for _, k := range []mv.Kernel{mv.Gaussian, mv.Epanechnikov, mv.Biweight, mv.Triweight} {
		for d := 1; d <= 3; d++ {
			s := clusters(rng, d, 400)
			size := 0.7
			if k.Compact() {
				size = 2
			}
			h := mvtest.RandomMatrix(rng, d, size)
			pilot := pilotAtEvents(t, s, mv.Gaussian, mvtest.RandomMatrix(rng, d, 1))
			q := queriesFor(rng, s, 150)
			m := len(q[0])
			want, got := make([]float64, m), make([]float64, m)
			exact := newAdaptive(t, s, k, h, pilot, mv.AdaptiveOptions{MaxFactor: 6})
			if err := exact.Density(bg, want, q); err != nil {
				t.Fatal(err)
			}
			for _, step := range []float64{0.4, 0.1, 0.02} {
				a := newAdaptive(t, s, k, h, pilot, mv.AdaptiveOptions{MaxFactor: 6, Step: step, Rtol: 1e-9})
				if err := a.Density(bg, got, q); err != nil {
					t.Fatal(err)
				}
				for i, f := range want {
					mvtest.NearAbs(t, fmt.Sprint(k, " d=", d, " step ", step, " query ", i), got[i], f, a.ClassingBound()+2e-9*f)
				}
				events, weight := 0, 0.0
				for _, c := range a.Classes() {
					events, weight = events+c.Events, weight+c.Weight
				}
				mvtest.Near(t, "weight of the classes", weight, s.SumWeights(), 1e-12)
			}
		}
	}
}

func TestAdaptiveMassAndClipping(t *testing.T) {
	s := mvtest.P12(1)
	pilot := pilotAtEvents(t, s, mv.Gaussian, mvtest.P12H(1))
	for _, o := range []mv.AdaptiveOptions{{}, {Step: 0.1}, {MinFactor: 0.9, MaxFactor: 1.1}} {
		a := newAdaptive(t, s, mv.Gaussian, mvtest.P12H(1), pilot, o)
		l := mvtest.GridOver(s, 2000, 12)
		f := make([]float64, 2000)
		if err := a.Density(bg, f, mv.LatticePoints(l)); err != nil {
			t.Fatal(err)
		}
		var sum float64
		for _, v := range f {
			sum += v * l.CellVolume()
		}
		mvtest.NearAbs(t, "mass", sum, 1, 1e-6) // the trees' default bound
		for _, v := range a.Factors() {
			if o.MaxFactor > 0 && (v > o.MaxFactor || v < o.MinFactor) {
				t.Errorf("factor %g outside its bounds", v)
			}
		}
	}
	// Equal pilot values: the plain estimate.
	flat := make([]float64, 12)
	for i := range flat {
		flat[i] = 0.3
	}
	a := newAdaptive(t, s, mv.Gaussian, mvtest.P12H(1), flat, mv.AdaptiveOptions{})
	mvtest.Near(t, "flat pilot", densityAt(t, a, 1), 0.271394610998, 2e-12)
}

// The law removes the leading bias: with the true density as pilot, N(0,1) at
// 0, within |u| <= 3.5, by quadrature. METHODS 8.1, computed there.
func TestAdaptiveBiasOrder(t *testing.T) {
	for _, c := range []struct{ h, fixed, square float64 }{
		{.2, -.00774719, 9.4655e-4}, {.1, -.00197987, 5.3797e-5}, {.05, -.00049774, 1.1804e-6}, {.025, -.00012461, 5.9e-8},
	} {
		phi := func(u float64) float64 { return math.Exp(-u*u/2) / math.Sqrt(2*math.Pi) }
		const n = 70000
		var fixed, square float64
		for i := range n {
			u := -3.5 + 7*(float64(i)+.5)/n
			f := phi(u)
			fixed += 7.0 / n * f * phi(u/c.h) / c.h
			h := c.h * math.Sqrt(phi(0)/f)
			square += 7.0 / n * f * phi(u/h) / h
		}
		mvtest.NearAbs(t, fmt.Sprint("fixed bias at h=", c.h), fixed-phi(0), c.fixed, 1e-8)
		mvtest.NearAbs(t, fmt.Sprint("square-root law at h=", c.h), square-phi(0), c.square, 1e-7)
	}
}

// With a flat pilot every factor is 1 and the estimate is the plain one.
func TestAdaptiveConforms(t *testing.T) {
	for _, step := range []float64{0, 0.1} {
		mvtest.Conform(t, func(s *mv.Sample, k mv.Kernel, h mv.BandwidthMatrix) (mv.Evaluator, error) {
			flat := make([]float64, s.Len())
			for i := range flat {
				flat[i] = 0.25
			}
			return mv.NewAdaptive(s, k, h, flat, mv.AdaptiveOptions{Step: step, Rtol: 1e-11})
		}, mvtest.Conformance{Rel: 1e-10, Dims: []int{1, 2}})
	}
}

func TestAdaptiveDoor(t *testing.T) {
	s, h := mvtest.P12(1), mvtest.P12H(1)
	pilot := pilotAtEvents(t, s, mv.Gaussian, h)
	for _, o := range []mv.AdaptiveOptions{{Step: -1}, {Step: 2}, {MinFactor: 2, MaxFactor: 1}, {Rtol: math.NaN()}, {Workers: -1}, {MaxFactor: math.Inf(1)}} {
		if _, err := mv.NewAdaptive(s, mv.Gaussian, h, pilot, o); !errors.Is(err, mv.ErrShape) {
			t.Errorf("%+v: %v", o, err)
		}
	}
	if _, err := mv.NewAdaptive(s, mv.Gaussian, h, pilot[:3], mv.AdaptiveOptions{}); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	pilot[4] = 0
	if _, err := mv.NewAdaptive(s, mv.Gaussian, h, pilot, mv.AdaptiveOptions{}); !errors.Is(err, mv.ErrNotFinite) {
		t.Error(err)
	}
}

func ExampleAdaptive() {
	s, _ := mv.NewSample([][]float64{{0, 0.1, 0.2, 5}}, nil)
	h, _ := mv.ScalarBandwidth(1, 0.5)
	pilot, _ := mv.NewDirect(s, mv.Gaussian, h, mv.EvalOptions{})
	f := make([]float64, 4)
	if err := pilot.Density(context.Background(), f, s.Columns()); err != nil {
		fmt.Println(err)
	}
	a, err := mv.NewAdaptive(s, mv.Gaussian, h, f, mv.AdaptiveOptions{Step: 0.05, MaxFactor: 3})
	if err != nil {
		fmt.Println(err)
		return
	}
	for _, c := range a.Classes() {
		fmt.Printf("%d events at factor %.2f\n", c.Events, c.Factor)
	}
	// Output:
	// 3 events at factor 0.86
	// 1 events at factor 1.49
}

func ExampleAdaptiveOptions() {
	fmt.Println(mv.AdaptiveOptions{Step: -0.1}.Validate() != nil)
	// Output: true
}
