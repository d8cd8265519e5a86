package spatial

import (
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/mv"

	"github.com/paulmach/orb"
)

// starArea is a random star with a star-shaped hole, sometimes two of them.
func starArea(r *rand.Rand, size float64) orb.MultiPolygon {
	star := func(cx, cy, lo, hi float64, n int, clockwise bool) orb.Ring {
		var ring orb.Ring
		for i := range n {
			a := 2 * math.Pi * float64(i) / float64(n)
			if clockwise {
				a = -a
			}
			d := lo + (hi-lo)*r.Float64()
			ring = append(ring, orb.Point{cx + d*math.Cos(a), cy + d*math.Sin(a)})
		}
		return append(ring, ring[0])
	}
	var out orb.MultiPolygon
	parts := 1 + r.IntN(2)
	for k := range parts {
		cx := size * (float64(k)*1.4 - .7*float64(parts-1) + .1*r.Float64())
		p := orb.Polygon{star(cx, 0, .35*size, .65*size, 3+r.IntN(60), false)}
		if r.IntN(2) == 0 {
			p = append(p, star(cx, 0, .05*size, .2*size, 3+r.IntN(9), true))
		}
		out = append(out, p)
	}
	return out
}

func bumps(r *rand.Rand, n int, step float64) mv.Grid {
	l := mv.Lattice{Origin: []float64{-step * float64(n-1) / 2, -step * float64(n-1) / 2}, Step: []float64{step, step}, N: []int{n, n}}
	g := mv.NewGrid(l)
	for range 1 + r.IntN(12) {
		cx, cy := float64(n)*r.Float64(), float64(n)*r.Float64()
		s := float64(n) * (.02 + .15*r.Float64())
		for i := range g.Values {
			x, y := float64(i%n)-cx, float64(i/n)-cy
			g.Values[i] += math.Exp(-(x*x + y*y) / (2 * s * s))
		}
	}
	return g
}

// Faces tile the study area, and every outline is a valid polygon.
func TestClipTilesTheArea(t *testing.T) {
	plane, _ := NewProjection(CRS{Method: "plane"})
	n := 300
	if testing.Short() {
		n = 60
	}
	crossed := 0
	for seed := range n {
		r := rand.New(rand.NewPCG(uint64(seed), 5))
		g := bumps(r, 40+r.IntN(60), 100)
		w, err := NewStudyArea(starArea(r, 100*float64(g.N[0])*(.3+.5*r.Float64())), plane)
		if err != nil {
			t.Fatal(err)
		}
		levels := []float64{.05, .1, .2, .4, .8}
		s, err := NewIsolines(g, levels, IsolineOptions{})
		if err != nil {
			t.Fatal(err)
		}
		c, err := newClip(s, w)
		if err != nil {
			t.Fatalf("seed %d: %v", seed, err)
		}
		crossed += len(c.crossings)
		var sum float64
		for f, a := range c.area {
			if !(a > 0) {
				t.Fatalf("seed %d: face %d has area %g", seed, f, a)
			}
			sum += a
		}
		if math.Abs(sum-w.Area()) > 1e-9*w.Area() {
			t.Fatalf("seed %d: faces cover %g of %g", seed, sum, w.Area())
		}
		var whole float64
		for k := range len(levels) + 1 {
			mp, err := c.outline(func(f int32) bool { return int(c.label[f]) == k })
			if err != nil {
				t.Fatalf("seed %d: %v", seed, err)
			}
			whole += mp.Area()
			up, err := c.outline(func(f int32) bool { return int(c.label[f]) >= k })
			if err != nil {
				t.Fatal(err)
			}
			for _, m := range []MultiPolygon{mp, up} {
				shape, err := ToShape(m, plane)
				if err == nil {
					err = checkOGC(shape)
				}
				if err != nil {
					t.Fatalf("seed %d, label %d: %v", seed, k, err)
				}
			}
		}
		if math.Abs(whole-w.Area()) > 1e-9*w.Area() {
			t.Fatalf("seed %d: bands cover %g of %g", seed, whole, w.Area())
		}
		for range 200 {
			at := XY{g.Coord(0, 0) + r.Float64()*100*float64(g.N[0]-1), g.Coord(1, 0) + r.Float64()*100*float64(g.N[1]-1)}
			f := c.locate(at)
			if (f >= 0) != w.Contains(at) {
				t.Fatalf("seed %d: face %d at %v, inside %v", seed, f, at, w.Contains(at))
			}
			if f >= 0 && int(c.label[f]) != s.Label(s.Locate(at)) {
				t.Fatalf("seed %d: label %d at %v, want %d", seed, c.label[f], at, s.Label(s.Locate(at)))
			}
		}
	}
	t.Logf("%d crossings", crossed)
}
