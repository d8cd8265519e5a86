package spatial_test

import (
	"fmt"
	"math"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"
)

// METHODS.md section 5, mode heights and places.
func TestFindMaxima(t *testing.T) {
	type mode struct{ x, y, f float64 }
	for _, c := range []struct {
		name  string
		m     mixture
		modes []mode
	}{
		{"E", targetE, []mode{{-.975496, 0, .18114784}, {.975496, 0, .18114784}}},
		{"H", targetH, []mode{{.999947, -.999947, .25074129}, {-1, 1, .17904931}}},
		{"I", targetI, []mode{{.007817, -.007817, .28130633}, {1.2, -1.2, .24867960}, {-1.199943, 1.199943, .20856093}}},
	} {
		got := spatial.FindMaxima(c.m.grid(-4.013, 4, 321, 1), 0)
		if len(got) != len(c.modes) {
			t.Fatalf("%s: %d maxima, want %d: %v", c.name, len(got), len(c.modes), got)
		}
		for _, want := range c.modes {
			best := math.Inf(1)
			var at spatial.Maximum
			for _, m := range got {
				if d := math.Hypot(m.X-want.x, m.Y-want.y); d < best {
					best, at = d, m
				}
			}
			// central differences leave an error of second order in the step, .025:
			// here below 0.004 of a step and 1e-5 of the height
			nearly(t, c.name+" place", best, 0, 1e-4)
			nearly(t, c.name+" height", at.Value, want.f, 1e-5*want.f)
		}
	}
	if got := spatial.FindMaxima(targetRing().grid(-4, 4, 321, 1), .01); len(got) != 12 {
		t.Errorf("RING: %d maxima", len(got))
	} else {
		for _, m := range got {
			nearly(t, "RING height", m.Value, .08880225629, 1e-6)
			nearly(t, "RING radius", math.Hypot(m.X, m.Y), 1.981909, 1e-4)
		}
	}
}

func TestFindMaximaPlateaus(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		name string
		g    mv.Grid
		want int
	}{
		{"constant", gridOf(3, 3, 1, 1, 1, 1, 1, 1, 1, 1, 1), 0},
		{"one node", gridOf(1, 1, 1), 0},
		{"a row", gridOf(5, 1, 0, 2, 0, 1, 0), 2},
		{"a flat top", gridOf(4, 3, 0, 0, 0, 0, 0, 2, 2, 0, 0, 0, 0, 0), 1},
		{"a flat shoulder", gridOf(4, 3, 0, 0, 0, 0, 0, 2, 2, 3, 0, 0, 0, 0), 1},
		{"two flat tops", gridOf(5, 1, 2, 2, 1, 2, 2), 2},
		{"NaN is low", gridOf(3, 1, nan, 1, nan), 1},
		{"at the corner", gridOf(2, 2, 2, 1, 1, 0), 1},
	} {
		if got := spatial.FindMaxima(c.g, 0); len(got) != c.want {
			t.Errorf("%s: %v, want %d", c.name, got, c.want)
		}
	}
}

func TestSample(t *testing.T) {
	g := gridOf(6, 5, make([]float64, 30)...)
	f := func(x, y float64) float64 { return 1 + x - 2*y + .3*x*x - .2*y*y + .5*x*y + .1*x*x*y*y }
	for j := range 5 {
		for i := range 6 {
			g.Values[j*6+i] = f(float64(i), float64(j))
		}
	}
	for _, p := range []spatial.XY{{X: 2, Y: 2}, {X: 2.3, Y: 1.7}, {X: .5, Y: .5}, {X: 4.49, Y: 3.2}, {X: 0, Y: 0}, {X: 5, Y: 4}} {
		nearly(t, fmt.Sprint(p), spatial.Sample(g, p), f(p.X, p.Y), 1e-12)
	}
	nearly(t, "bilinear at the border", spatial.Sample(g, spatial.XY{X: .25, Y: 2}), .75*f(0, 2)+.25*f(1, 2), 1e-12)
	if v := spatial.Sample(g, spatial.XY{X: 5.1, Y: 2}); v == v {
		t.Errorf("outside: %g", v)
	}
	g.Values[0] = math.NaN()
	nearly(t, "beside a hole", spatial.Sample(g, spatial.XY{X: 1, Y: 1}), f(1, 1), 1e-12)
	if v := spatial.Sample(gridOf(3, 1, 1, 2, 3), spatial.XY{X: .5}); v != 1.5 {
		t.Errorf("a row: %g", v)
	}
}

func ExampleFindMaxima() {
	g := gridOf(5, 3,
		0, 0, 0, 0, 0,
		0, 3, 1, 2, 0,
		0, 0, 0, 0, 0)
	for _, m := range spatial.FindMaxima(g, 0) {
		fmt.Printf("node (%d, %d): %.3f at (%.3f, %.3f)\n", m.I, m.J, m.Value, m.X, m.Y)
	}
	// Output:
	// node (1, 1): 3.025 at (1.100, 1.000)
	// node (3, 1): 2.042 at (2.833, 1.000)
}
