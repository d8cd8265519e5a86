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

// From every event the climb ends where the gradient is 0 and the Hessian
// negative definite: to 1e-6 of a scale, judged by the Newton step left.
func TestModesAreMaxima(t *testing.T) {
	s, err := mvtest.Target("L").Sample(rand.New(rand.NewPCG(11, 3)), 400)
	if err != nil {
		t.Fatal(err)
	}
	h := mvtest.Matrix(2, .08, .01, .01, .07)
	e := newDirect(t, s, mv.Gaussian, h)
	modes, err := e.Modes(bg, s.Columns(), mv.ModeOptions{})
	if err != nil {
		t.Fatal(err)
	}
	if len(modes) < 4 {
		t.Fatalf("%d modes of a mixture with four", len(modes))
	}
	starts := 0
	for i, m := range modes {
		starts += m.Starts
		if !m.Converged {
			t.Errorf("mode %d not converged", i)
		}
		if i > 0 && m.Density > modes[i-1].Density {
			t.Error("modes not in descending order")
		}
		mvtest.Near(t, "density at the mode", m.Density, densityAt(t, e, m.At...), 1e-10)
		d := [][]float64{{0}, {0}, {0}, {0}, {0}}
		if err := e.Derivatives(bg, d, column(m.At...), [][]int{{1, 0}, {0, 1}, {2, 0}, {1, 1}, {0, 2}}); err != nil {
			t.Fatal(err)
		}
		gx, gy, a, b, c := d[0][0], d[1][0], d[2][0], d[3][0], d[4][0]
		det := a*c - b*b
		if !(a < 0 && det > 0) {
			t.Errorf("mode %d at %v: Hessian %g %g %g not negative definite", i, m.At, a, b, c)
		}
		step := []float64{-(c*gx - b*gy) / det, -(a*gy - b*gx) / det}
		if r := math.Sqrt(h.Mahalanobis2(step)); r > 1e-6 {
			t.Errorf("mode %d is %g scales from the maximum", i, r)
		}
	}
	if starts != 400 {
		t.Errorf("%d of 400 starts arrived", starts)
	}
}

// One event is its own mode, whatever the kernel; two far apart are two.
func TestModesSimple(t *testing.T) {
	s, err := mv.NewSample([][]float64{{0, 10}, {0, 5}}, []float64{1, 2})
	if err != nil {
		t.Fatal(err)
	}
	for _, k := range []mv.Kernel{mv.Gaussian, mv.Epanechnikov, mv.Biweight, mv.Triweight} {
		e := newDirect(t, s, k, mvtest.Matrix(2, 1, .2, .2, 1))
		modes, err := e.Modes(bg, [][]float64{{0.3, 9.8, 0.1}, {-0.2, 5.1, 0}}, mv.ModeOptions{})
		if err != nil {
			t.Fatal(err)
		}
		if len(modes) != 2 || modes[1].Starts != 2 {
			t.Fatalf("%v: %+v", k, modes)
		}
		mvtest.NearAbs(t, "heavier event", modes[0].At[0], 10, 1e-6)
		mvtest.NearAbs(t, "lighter event", modes[1].At[1], 0, 1e-6)
	}
	e := newDirect(t, s, mv.Uniform, mvtest.P12H(2))
	if _, err := e.Modes(bg, [][]float64{{0}, {0}}, mv.ModeOptions{}); !errors.Is(err, mv.ErrNotDifferentiable) {
		t.Error(err)
	}
	if _, err := e.Modes(bg, [][]float64{{0}, {0}}, mv.ModeOptions{Tolerance: -1}); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	// A start where a compact kernel sees nothing leads nowhere.
	e = newDirect(t, s, mv.Biweight, mvtest.P12H(2))
	if modes, err := e.Modes(bg, [][]float64{{500}, {500}}, mv.ModeOptions{}); err != nil || len(modes) != 0 {
		t.Errorf("%v %v", modes, err)
	}
}

func ExampleMode() {
	s, _ := mv.NewSample([][]float64{{0, 0.1, 4, 4.2, 4.1}}, nil)
	h, _ := mv.ScalarBandwidth(1, 0.5)
	e, _ := mv.NewDirect(s, mv.Gaussian, h, mv.EvalOptions{})
	modes, err := e.Modes(context.Background(), s.Columns(), mv.ModeOptions{})
	if err != nil {
		fmt.Println(err)
	}
	for _, m := range modes {
		fmt.Printf("at %.3f, reached from %d events\n", m.At[0], m.Starts)
	}
	// Output:
	// at 4.100, reached from 3 events
	// at 0.050, reached from 2 events
}

func ExampleModeOptions() {
	fmt.Println(mv.ModeOptions{}.Validate())
	// Output: <nil>
}

func ExampleFactorClass() {
	c := mv.FactorClass{Factor: 1.1, Events: 3, Weight: 3}
	fmt.Printf("%d events smoothed with %.2f H\n", c.Events, c.Factor*c.Factor)
	// Output: 3 events smoothed with 1.21 H
}

func ExampleEvalOptions() {
	fmt.Println(mv.EvalOptions{Workers: -1}.Validate() != nil)
	// Output: true
}
