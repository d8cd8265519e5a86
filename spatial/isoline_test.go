package spatial_test

import (
	"errors"
	"fmt"
	"math"
	"reflect"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"
)

// METHODS.md section 5, contour geometry: area of the 90 % ellipse of B.
func TestIsolinesAreaOfAnEllipse(t *testing.T) {
	const area, level = 10.33191073, .1 / (2 * math.Pi * .7141428428542850)
	for _, c := range []struct {
		n           int
		linear, own float64 // error of linear interpolation (METHODS.md); bound for the cubic
	}{{41, .0422, .05}, {81, .0112, .0125}, {161, .00225, .0031}, {321, .000624, .0008}} {
		g := targetB.grid(-4, 4, c.n, 1)
		lin := lines(t, g, []float64{level}, spatial.IsolineOptions{Linear: true}).Superlevel(0)
		// the stated figure is to three digits; vertices kept off the nodes move it by less than 2 %
		nearly(t, fmt.Sprintf("linear error, %d nodes", c.n), lin.Area()-area, c.linear, .03*c.linear)
		own := lines(t, g, []float64{level}, spatial.IsolineOptions{}).Superlevel(0)
		// vertices lie on the curve, so only the chords cut: error -L κ h²/12 or so
		nearly(t, fmt.Sprintf("cubic error, %d nodes", c.n), own.Area()-area, -c.own/2, c.own/2)
		if len(own) != 1 || len(own[0]) != 1 {
			t.Fatalf("%d polygons", len(own))
		}
		for _, v := range own[0][0] {
			if r := targetB.at(v.X, v.Y)/level - 1; math.Abs(r) > 1e-3 {
				t.Fatalf("vertex %v off its level by %g", v, r)
			}
		}
	}
}

func TestIsolinesRing(t *testing.T) {
	g := targetRing().grid(-4, 4, 321, 1)
	s := lines(t, g, []float64{.02, .05, .08}, spatial.IsolineOptions{})
	for k, want := range []struct {
		parts, holes int
		area, hole   float64
	}{{1, 1, 16.5380, 5.1692}, {1, 1, 9.6155, 7.7059}, {12, 0, 0, 0}} {
		mp := s.Superlevel(k)
		holes := 0
		for _, p := range mp {
			holes += len(p) - 1
		}
		if len(mp) != want.parts || holes != want.holes {
			t.Errorf("level %d: %d parts, %d holes", k, len(mp), holes)
		}
		judge(t, planeToOrb(mp), fmt.Sprint("level ", k))
		if want.holes == 1 {
			nearly(t, "area", mp.Area(), want.area, 1e-3)
			nearly(t, "hole", -mp[0][1].Area(), want.hole, 1e-3)
		}
	}
	// neighbouring bands share their border to the bit
	for k := 1; k < 3; k++ {
		below, above := map[spatial.XY]bool{}, map[spatial.XY]bool{}
		for set, mp := range map[*map[spatial.XY]bool]spatial.MultiPolygon{&below: s.Isoband(k), &above: s.Isoband(k + 1)} {
			for _, p := range mp {
				for _, r := range p {
					for _, v := range r {
						(*set)[v] = true
					}
				}
			}
		}
		for _, p := range s.Superlevel(k) {
			for _, r := range p {
				for _, v := range r {
					if !below[v] || !above[v] {
						t.Fatalf("vertex %v of level %d is not in both bands", v, k)
					}
				}
			}
		}
	}
	// topology elsewhere between the saddles
	for _, level := range []float64{4e-6, 1e-3, .0718} {
		if mp := lines(t, g, []float64{level}, spatial.IsolineOptions{}).Superlevel(0); len(mp) != 1 || len(mp[0]) != 2 {
			t.Errorf("level %g: %d polygons", level, len(mp))
		}
	}
	for _, level := range []float64{.0720, .0885} {
		if mp := lines(t, g, []float64{level}, spatial.IsolineOptions{}).Superlevel(0); len(mp) != 12 {
			t.Errorf("level %g: %d polygons, want 12", level, len(mp))
		}
	}
}

// METHODS.md section 5: saddles and numbers of pieces.
func TestIsolinesTopology(t *testing.T) {
	for _, c := range []struct {
		name   string
		m      mixture
		level  float64
		pieces int
	}{
		{"E just above its saddle", targetE, .1162576012 * (1 + 1e-6), 2},
		{"E just below its saddle", targetE, .1162576012 * (1 - 1e-6), 1},
		{"H above", targetH, .00888806 * 1.01, 2},
		{"H below", targetH, .00888806 * .99, 1},
		{"I 50 %", targetI, .118860, 3},
		{"I 75 %", targetI, .063549, 2},
		{"I 90 %", targetI, .027470, 1},
	} {
		for _, n := range []int{161, 321} {
			mp := lines(t, c.m.grid(-4, 4, n, 1), []float64{c.level}, spatial.IsolineOptions{}).Superlevel(0)
			if len(mp) != c.pieces {
				t.Errorf("%s, %d nodes: %d pieces, want %d", c.name, n, len(mp), c.pieces)
			}
		}
	}
}

func gridOf(nx, ny int, values ...float64) mv.Grid {
	l, err := mv.NewLattice([]float64{0, 0}, []float64{1, 1}, []int{nx, ny})
	if err != nil {
		panic(err)
	}
	return mv.Grid{Lattice: l, Values: values}
}

func TestIsolinesSmallCases(t *testing.T) {
	for _, c := range []struct {
		name  string
		g     mv.Grid
		parts int
		holes int
	}{
		{"all below", gridOf(2, 2, 0, 0, 0, 0), 0, 0},
		{"all above", gridOf(2, 2, 2, 2, 2, 2), 1, 0},
		{"equal to the level is inside", gridOf(2, 2, 1, 1, 1, 1), 1, 0},
		{"one node", gridOf(1, 1, 2), 1, 0},
		{"a row", gridOf(5, 1, 2, 0, 2, 2, 0), 2, 0},
		{"a column", gridOf(1, 4, 0, 2, 0, 2), 2, 0},
		{"a hole", gridOf(3, 3, 2, 2, 2, 2, 0, 2, 2, 2, 2), 1, 1},
		{"a hole equal to the level is none", gridOf(3, 3, 2, 2, 2, 2, 1, 2, 2, 2, 2), 1, 0},
		{"a saddle that is low", gridOf(2, 2, 1.1, 0, 0, 1.1), 2, 0},
		{"a saddle that is high", gridOf(2, 2, 4, .9, .9, 4), 1, 0},
		{"a saddle at the level joins", gridOf(2, 2, 2, 0, 0, 2), 1, 0},
		{"a plateau", gridOf(4, 4, 0, 0, 0, 0, 0, 1, 1, 0, 0, 1, 1, 0, 0, 0, 0, 0), 1, 0},
	} {
		s := lines(t, c.g, []float64{1}, spatial.IsolineOptions{})
		mp := s.Superlevel(0)
		holes := 0
		for _, p := range mp {
			holes += len(p) - 1
		}
		if len(mp) != c.parts || holes != c.holes {
			t.Errorf("%s: %d parts, %d holes, want %d, %d", c.name, len(mp), holes, c.parts, c.holes)
		}
		judge(t, planeToOrb(mp), c.name)
		var sum float64
		for f := range s.Faces() {
			sum += s.Area(f)
		}
		nearly(t, c.name+": sum of areas", sum, s.Window(), 1e-9*s.Window())
	}
}

func TestIsolinesRefuses(t *testing.T) {
	bad := gridOf(2, 2, 0, 1, math.NaN(), 2)
	for _, c := range []struct {
		name   string
		g      mv.Grid
		levels []float64
		want   error
	}{
		{"NaN", bad, []float64{1}, mv.ErrNotFinite},
		{"infinity", gridOf(2, 1, 0, math.Inf(1)), []float64{1}, mv.ErrNotFinite},
		{"minus infinity", gridOf(2, 1, 0, math.Inf(-1)), []float64{1}, mv.ErrNotFinite},
		{"NaN without levels", bad, nil, mv.ErrNotFinite},
		{"falling levels", gridOf(2, 2, 0, 1, 1, 2), []float64{2, 1}, spatial.ErrLevels},
		{"equal levels", gridOf(2, 2, 0, 1, 1, 2), []float64{1, 1}, spatial.ErrLevels},
		{"NaN level", gridOf(2, 2, 0, 1, 1, 2), []float64{math.NaN()}, spatial.ErrLevels},
		{"too many levels", gridOf(2, 2, 0, 1, 1, 2), make([]float64, 255), spatial.ErrLevels},
		{"too few values", gridOf(2, 2, 0, 1, 1), []float64{1}, mv.ErrShape},
	} {
		if _, err := spatial.NewIsolines(c.g, c.levels, spatial.IsolineOptions{}); !errors.Is(err, c.want) {
			t.Errorf("%s: %v, want %v", c.name, err, c.want)
		}
	}
}

func TestIsolinesNotByWorkers(t *testing.T) {
	g := targetRing().grid(-4, 4, 333, 1000)
	levels := []float64{1e-9, 2e-8, 4e-8, 5e-8, 7e-8, 8e-8}
	a := lines(t, g, levels, spatial.IsolineOptions{Workers: 1})
	for _, w := range []int{2, 3, 16} {
		b := lines(t, g, levels, spatial.IsolineOptions{Workers: w})
		for k := range levels {
			if !reflect.DeepEqual(a.Superlevel(k), b.Superlevel(k)) || !reflect.DeepEqual(a.Isoband(k+1), b.Isoband(k+1)) {
				t.Fatalf("%d workers draw level %d otherwise", w, k)
			}
		}
	}
}

func ExampleIsolines() {
	g := gridOf(4, 4,
		0, 0, 0, 0,
		0, 3, 3, 0,
		0, 3, 3, 0,
		0, 0, 0, 0)
	s, err := spatial.NewIsolines(g, []float64{1, 2}, spatial.IsolineOptions{})
	if err != nil {
		fmt.Println(err)
		return
	}
	fmt.Printf("%d polygon, %.3f at or above 1\n", len(s.Superlevel(0)), s.Superlevel(0).Area())
	fmt.Printf("%d polygon with %d hole between 1 and 2\n", len(s.Isoband(1)), len(s.Isoband(1)[0])-1)
	// Output:
	// 1 polygon, 4.556 at or above 1
	// 1 polygon with 1 hole between 1 and 2
}

func BenchmarkIsolines(b *testing.B) {
	for _, n := range []int{256, 1024, 2048} {
		g := targetRing().grid(-4, 4, n, 1000)
		levels := make([]float64, 11)
		for k := range levels {
			levels[k] = .008e-6 * float64(k+1)
		}
		b.Run(fmt.Sprint(n), func(b *testing.B) {
			for b.Loop() {
				lines(b, g, levels, spatial.IsolineOptions{})
			}
		})
	}
}
