package spatial_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"
)

// Finer counts make the bounds tighter and never wrong; counts on the lattice
// itself give the same release as none.
func TestGuardFineCounts(t *testing.T) {
	s := newStudy(targetRing(), 181, 3000, 1000, rand.New(rand.NewPCG(2, 2)))
	plain := release(t, s, 10, tilt{})
	if plain.Withheld().BandParts == 0 {
		t.Error("nothing withheld where bands are narrower than two steps")
	}
	s.FineCounts = s.binned(1)
	same := release(t, s, 10, tilt{})
	if a, b := plain.Withheld(), same.Withheld(); !reflect.DeepEqual(a, b) {
		t.Errorf("withheld %+v and %+v", a, b)
	}
	for k, g := range plain.Regions() {
		h := same.Regions()[k]
		nearly(t, "min", h.Events.Min, g.Events.Min, 1e-8)
		nearly(t, "max", h.Events.Max, g.Events.Max, 1e-8)
	}
	wide := math.Inf(1)
	for _, r := range []int{2, 4, 8} {
		s.FineCounts = s.binned(r)
		var first *spatial.Release
		for _, w := range []int{1, 2, 5} {
			rel, err := spatial.Guard(s.Analysis, spatial.Policy{MinEvents: 10, Workers: w}, tilt{})
			if err != nil {
				t.Fatal(err)
			}
			if first == nil {
				first = rel
			} else if !reflect.DeepEqual(first, rel) {
				t.Fatalf("%d workers release something else", w)
			}
		}
		checkRelease(t, fmt.Sprint("fine ", r), s, first, 10)
		g := first.Regions()[len(first.Regions())-1]
		if d := g.Events.Max - g.Events.Min; d < wide {
			wide = d
		} else {
			t.Errorf("r = %d: bounds %g apart, before %g", r, d, wide)
		}
		if r == 8 && first.Withheld().BandParts+first.Withheld().BandHoles > 1 {
			t.Errorf("r = 8 withholds %+v", first.Withheld())
		}
	}
	s.FineCounts.N = []int{3, 3}
	if _, err := spatial.Guard(s.Analysis, spatial.Policy{}, tilt{}); !errors.Is(err, mv.ErrShape) {
		t.Errorf("counts that do not refine: %v", err)
	}
}

// Lattices as fine as the rounding itself: what is released is valid, or the
// guard says that it cannot be.
func TestGuardAtTheGrainOfDegrees(t *testing.T) {
	failed := 0
	for seed := range 150 {
		r := rand.New(rand.NewPCG(uint64(seed), 11))
		unit := []float64{.05, .2, 1, 5, 20}[seed%5] // step about unit/5 metres; a degree is 111 km
		s := newStudy(randomMixture(r), 70, 300, unit, r)
		rel, err := spatial.Guard(s.Analysis, spatial.Policy{}, tilt{7, 47})
		if err != nil {
			failed++
			continue
		}
		for _, g := range rel.Regions() {
			judge(t, g.Shape, fmt.Sprint("seed ", seed, " region ", g.Content))
		}
		for _, b := range rel.Bands() {
			judge(t, b.Shape, fmt.Sprint("seed ", seed, " band ", b.FromPerKM2))
		}
	}
	t.Logf("%d of 150 refused", failed)
}

func BenchmarkJudge(b *testing.B) {
	s := newStudy(targetRing(), 1024, 100_000, 5000, rand.New(rand.NewPCG(1, 1)))
	r := release(b, s, 10, tilt{10, 50})
	n := 0
	for _, g := range r.Bands() {
		for _, p := range g.Shape {
			for _, q := range p {
				n += len(q)
			}
		}
	}
	b.Logf("%d positions", n)
	for b.Loop() {
		for _, g := range r.Bands() {
			_ = toGeom(g.Shape).Validate()
		}
	}
}

// METHODS.md section 11 item 15: the area read back from the degrees is the
// area reported, to 1e-6; less where a step of 39 m meets the rounding to a
// centimetre, or steps of 20 km leave chords straight in degrees.
func TestGuardAreaReadBack(t *testing.T) {
	for _, c := range []struct{ unit, tol float64 }{{500, 4e-6}, {5_000, 1e-6}, {50_000, 1e-6}, {250_000, 2e-5}} {
		for _, crs := range []spatial.CRS{
			{Method: "LAEA", Ellipsoid: "WGS 84", Lat0: 60, Lon0: 10},
			{Method: "LAEA", Ellipsoid: "WGS 84", Lat0: -18, Lon0: 179},
			{Method: "TM", Ellipsoid: "WGS 84", Lat0: 0, Lon0: 9, K0: .9996, FE: 5e5, FN: -5e6},
		} {
			p, err := spatial.NewProjection(crs)
			if err != nil {
				t.Fatal(err)
			}
			s := newStudy(targetRing(), 181, 3000, c.unit, rand.New(rand.NewPCG(2, 2)))
			for _, g := range release(t, s, 10, p).Regions() {
				what := fmt.Sprintf("%s, unit %g m, region %g", crs.Method, c.unit, g.Content)
				judge(t, g.Shape, what)
				nearly(t, what, spatial.EllipsoidArea(g.Shape)/1e6, g.AreaKM2, c.tol*g.AreaKM2)
				if !p.EqualArea() { // scale .9996 and growing away from the meridian
					nearly(t, what+" plane", g.Plane.Area()/1e6, g.AreaKM2, .1*g.AreaKM2)
				}
			}
		}
	}
}
