package pipeline

import (
	"math"
	"slices"
	"testing"

	"drumlin/spatial"
)

func rectangle(x0, y0, x1, y1 float64) spatial.Ring {
	return spatial.Ring{{X: x0, Y: y0}, {X: x1, Y: y0}, {X: x1, Y: y1}, {X: x0, Y: y1}}
}

// Shared ground over the ground of both, against areas known by hand.
func TestOverlap(t *testing.T) {
	square := spatial.MultiPolygon{{rectangle(0, 0, 10, 10)}}
	hole := rectangle(4, 4, 6, 6)
	slices.Reverse(hole)
	for _, c := range []struct {
		name string
		a, b spatial.MultiPolygon
		want float64
	}{
		{"itself", square, square, 1},
		{"half a side over", square, spatial.MultiPolygon{{rectangle(5, 0, 15, 10)}}, 50.0 / 150},
		{"a corner", square, spatial.MultiPolygon{{rectangle(5, 5, 15, 15)}}, 25.0 / 175},
		{"apart", square, spatial.MultiPolygon{{rectangle(20, 0, 30, 10)}}, 0},
		{"a hole", square, spatial.MultiPolygon{{rectangle(0, 0, 10, 10), hole}}, 0.96},
		{"two parts", square, spatial.MultiPolygon{{rectangle(0, 0, 2, 10)}, {rectangle(8, 0, 10, 10)}}, 0.4},
		{"nothing", nil, nil, 0},
		{"one is nothing", square, nil, 0},
	} {
		// one line in overlapRows may fall on either side of a border
		if got := overlap(c.a, c.b); math.Abs(got-c.want) > 2.0/overlapRows {
			t.Errorf("%s: %.5f, want %.5f", c.name, got, c.want)
		}
		if x, y := overlap(c.a, c.b), overlap(c.b, c.a); math.Abs(x-y) > 1e-12 {
			t.Errorf("%s: %v one way, %v the other", c.name, x, y)
		}
	}
}

// The estimated error at the matrix used is the selector's own, and along c*H
// the parts go as c squared and 1/c.
func TestErrorAt(t *testing.T) {
	e, _, _ := estimated(t, "fiji-quakes.parquet", map[string]string{"x": "long", "y": "lat", "crs": "EPSG:4326"})
	near := func(what string, got, want float64) {
		t.Helper()
		if !(math.Abs(got-want) <= 1e-9*math.Abs(want)) {
			t.Errorf("%s: %g, want %g", what, got, want)
		}
	}
	bias, variance, ok := errorAt(e.Choice, e.Choice.Matrix)
	if !ok {
		t.Fatal("no estimate of the error")
	}
	near("squared bias", bias, e.Choice.Bias2)
	near("variance", variance, e.Choice.Variance)
	wide, err := e.Choice.Matrix.Scaled(2)
	if err != nil {
		t.Fatal(err)
	}
	bias, variance, _ = errorAt(e.Choice, wide)
	near("squared bias at 2 H", bias, 4*e.Choice.Bias2)
	near("variance at 2 H", variance, e.Choice.Variance/2)

	list := choices(e)
	if len(list) < 2 || !list[0].Used || list[1].Used || list[0].EstimatedErrorRatio == 0 {
		t.Fatalf("choices %+v", list)
	}
	near("error of the one used", list[0].EstimatedErrorRatio, 1)
	for _, c := range list[1:] {
		if !(c.EstimatedErrorRatio > 1) {
			t.Errorf("%s: %g times the least estimated error", c.Method, c.EstimatedErrorRatio)
		}
	}

	same, err := e.atFactor(1)
	if err != nil {
		t.Fatal(err)
	}
	if !slices.Equal(same.Density.Values, e.Density.Values) {
		t.Error("the density at 1 H differs from the one at H")
	}
	half, err := e.atFactor(0.5)
	if err != nil {
		t.Fatal(err)
	}
	if slices.Max(half.Density.Values) <= slices.Max(e.Density.Values) || half.Choice.Matrix.At(0, 0) >= e.Choice.Matrix.At(0, 0) {
		t.Error("half of H does not give a steeper surface")
	}
}
