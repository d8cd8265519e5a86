package spatial_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"
)

// checkForest tests what must hold for any grid: every node's face has the
// label of its value, the faces share out the window, all polygons are valid,
// and no ring of one level meets a ring of another.
func checkForest(t testing.TB, g mv.Grid, levels []float64, opt spatial.IsolineOptions) *spatial.Isolines {
	t.Helper()
	s := lines(t, g, levels, opt)
	for n, f := range s.NodeFaces() {
		want := 0
		for want < len(levels) && g.Values[n] >= levels[want] {
			want++
		}
		if s.Label(int(f)) != want {
			t.Fatalf("node %d of value %g lies in a face with label %d, want %d", n, g.Values[n], s.Label(int(f)), want)
		}
	}
	byLabel := make([]float64, len(levels)+1)
	for f := range s.Faces() {
		if s.Area(f) <= 0 {
			t.Fatalf("face %d has area %g", f, s.Area(f))
		}
		byLabel[s.Label(f)] += s.Area(f)
		if a := s.Around(f); a >= 0 && max(s.Label(a), s.Label(f))-min(s.Label(a), s.Label(f)) != 1 {
			t.Fatalf("label %d inside label %d", s.Label(f), s.Label(a))
		}
	}
	var sum float64
	for _, a := range byLabel {
		sum += a
	}
	nearly(t, "sum of areas", sum, s.Window(), 1e-9*s.Window())
	for k := range levels {
		judge(t, planeToOrb(s.Superlevel(k)), fmt.Sprint("superlevel ", k))
		band := s.Isoband(k + 1)
		judge(t, planeToOrb(band), fmt.Sprint("band ", k+1))
		nearly(t, "band", band.Area(), byLabel[k+1], 1e-9*s.Window())
	}
	return s
}

func TestForestRandomGrids(t *testing.T) {
	for seed := range 400 {
		r := rand.New(rand.NewPCG(uint64(seed), 9))
		nx, ny := 1+r.IntN(9), 1+r.IntN(9)
		g := gridOf(nx, ny, make([]float64, nx*ny)...)
		coarse := r.IntN(3) // 0: noise, 1: whole numbers (plateaus, values on levels), 2: noise that is positive
		for i := range g.Values {
			switch coarse {
			case 0:
				g.Values[i] = r.NormFloat64()
			case 1:
				g.Values[i] = float64(r.IntN(5))
			case 2:
				g.Values[i] = math.Exp(3 * r.NormFloat64())
			}
		}
		levels := []float64{0, 1, 1 + 1e-15, 2, 3}[r.IntN(3):]
		checkForest(t, g, levels, spatial.IsolineOptions{Linear: r.IntN(4) == 0, Clamp: []float64{0, .01, .125}[r.IntN(3)]})
	}
}

// Locate agrees with the polygons.
func TestLocate(t *testing.T) {
	r := rand.New(rand.NewPCG(4, 4))
	g := randomMixture(r).grid(-4, 4, 60, 1)
	top := slices.Max(g.Values)
	levels := []float64{.02 * top, .1 * top, .3 * top, .31 * top, .32 * top, .7 * top}
	s := checkForest(t, g, levels, spatial.IsolineOptions{})
	shapes := make([]spatial.MultiPolygon, len(levels))
	for k := range levels {
		shapes[k] = s.Superlevel(k)
	}
	for range 5000 {
		at := spatial.XY{X: 8.2*r.Float64() - 4.1, Y: 8.2*r.Float64() - 4.1}
		want := 0
		for k := range levels {
			if shapes[k].Contains(at) {
				want = k + 1
			}
		}
		if got := s.Label(s.Locate(at)); got != want && math.Abs(at.X) < 4 && math.Abs(at.Y) < 4 {
			t.Fatalf("%v: label %d, want %d", at, got, want)
		}
	}
	for _, at := range []spatial.XY{{X: 9}, {X: math.NaN()}, {X: -4.01}} {
		if s.Locate(at) != 0 {
			t.Errorf("%v is not outside", at)
		}
	}
}

func FuzzForest(f *testing.F) {
	f.Add([]byte{3, 2, 2, 2, 2, 0, 2, 2, 2, 2}, uint8(2))
	f.Add([]byte{4, 1, 3, 3, 1, 3, 1, 1, 3, 3, 1, 1, 3}, uint8(5))
	f.Add([]byte{1, 9}, uint8(9))
	f.Fuzz(func(t *testing.T, data []byte, level uint8) {
		if len(data) < 2 || len(data) > 80 {
			t.Skip()
		}
		nx := 1 + int(data[0])%8
		ny := (len(data) - 1) / nx
		if ny == 0 {
			t.Skip()
		}
		g := gridOf(nx, ny, make([]float64, nx*ny)...)
		for i := range g.Values {
			g.Values[i] = float64(data[1+i]) / 4
		}
		a := float64(level) / 4
		checkForest(t, g, []float64{a, a + .25, a + 7}, spatial.IsolineOptions{})
	})
}
