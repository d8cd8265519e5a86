package spatial_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"

	"github.com/paulmach/orb"
)

// randomArea is a star in degrees about a place, with a hole at times and a
// second part beside it at times; size in degrees of latitude.
func randomArea(r *rand.Rand, lon, lat, size float64) orb.MultiPolygon {
	shrink := math.Cos(lat * math.Pi / 180)
	star := func(cx, lo, hi float64, n int) orb.Ring {
		var ring orb.Ring
		for i := range n {
			a := 2 * math.Pi * float64(i) / float64(n)
			d := lo + (hi-lo)*r.Float64()
			ring = append(ring, orb.Point{lon + (cx+d*math.Cos(a))/shrink, lat + d*math.Sin(a)})
		}
		return append(ring, ring[0])
	}
	var out orb.MultiPolygon
	parts := 1 + r.IntN(2)
	for k := range parts {
		cx := size * (1.3*float64(k) - .65*float64(parts-1))
		p := orb.Polygon{star(cx, .35*size, .6*size, 3+r.IntN(40))}
		if r.IntN(2) == 0 {
			hole := star(cx, .05*size, .2*size, 3+r.IntN(9))
			hole.Reverse()
			p = append(p, hole)
		}
		out = append(out, p)
	}
	return out
}

// within drops the events outside the study area and corrects the density as
// the program does.
func (s *study) within(t testing.TB, w *spatial.StudyArea, h mv.BandwidthMatrix, conserve bool) {
	t.Helper()
	s.events = slices.DeleteFunc(s.events, func(p spatial.XY) bool { return !w.Contains(p) })
	s.Counts = s.binned(1)
	s.Events, s.Total = float64(len(s.events)), float64(len(s.events))
	p, err := w.KernelMass(s.Density.Lattice, 2, h)
	if err != nil {
		t.Fatal(err)
	}
	if conserve {
		w.End(s.Density)
	} else {
		w.Renormalise(s.Density, p[0])
	}
	s.Area = w
	s.Peaks = slices.DeleteFunc(s.Peaks, func(q spatial.Summit) bool { return !w.Contains(q.At) })
}

// Random mixtures in random study areas at the antimeridian, about longitude 0,
// far north and in between: shapes valid, regions nested, bands tile the study
// area, counts within their bounds, the guard holds for every part.
func TestGuardWithinRandomAreas(t *testing.T) {
	n := 300
	if testing.Short() {
		n = 60
	}
	if *long {
		n = 1000
	}
	withheld, parts := 0, 0
	for seed := range n {
		r := rand.New(rand.NewPCG(uint64(seed), 11))
		place := []spatial.LonLat{{Lon: 180, Lat: -17}, {Lon: 0, Lat: 51}, {Lon: 23, Lat: 68}, {Lon: -75, Lat: 3}}[seed%4]
		proj := spatial.AutoPlane(place.Lon, place.Lat)
		size := .25 * math.Exp(r.Float64()) // degrees; the lattice reaches 7 km * unit
		w, err := spatial.NewStudyArea(randomArea(r, place.Lon+.1*r.Float64(), place.Lat, size), proj)
		if err != nil {
			t.Fatalf("seed %d: %v", seed, err)
		}
		s := newStudy(randomMixture(r), 50+r.IntN(50), 600+r.IntN(600), 1e4*math.Exp(r.Float64()), r)
		step := s.Density.Step[0]
		s.within(t, w, matrixOf(t, 9*step*step, 2*step*step, 6*step*step), seed%3 == 0)
		if s.Events < 20 {
			continue
		}
		if seed%2 == 0 {
			s.FineCounts = s.binned(1 + r.IntN(5))
		}
		for _, least := range []float64{0, 10} {
			what := fmt.Sprintf("seed %d, least %g", seed, least)
			rel, err := spatial.Guard(s.Analysis, spatial.Policy{MinEvents: least}, proj)
			if errors.Is(err, spatial.ErrWithheld) {
				withheld++
				continue
			}
			if err != nil {
				t.Fatalf("%s: %v", what, err)
			}
			parts += checkWithin(t, what, s, rel, least)
		}
	}
	t.Logf("%d parts, %d of %d withheld whole", parts, withheld, 2*n)
}

func checkWithin(t *testing.T, what string, s study, rel *spatial.Release, least float64) (parts int) {
	t.Helper()
	shape := func(name string, mp spatial.MultiPolygon, deg orb.MultiPolygon, area float64, c spatial.Count) {
		t.Helper()
		name = what + ", " + name
		judge(t, deg, name+" in degrees")
		nearly(t, name+": area", mp.Area(), area*1e6, 1e-9*area*1e6)
		geodesic := spatial.EllipsoidArea(deg)
		nearly(t, name+": area on the ellipsoid", geodesic, area*1e6, 1e-4*area*1e6+2e4) // chords bent by less than 1e-3 of their length stay straight
		for _, p := range deg {
			for k, ring := range p {
				if (spatial.EllipsoidRingArea(ring) > 0) != (k == 0) {
					t.Fatalf("%s: ring %d runs the wrong way", name, k)
				}
				for _, v := range ring {
					if math.Abs(v[0]) > 180 || math.Abs(v[1]) > 90 {
						t.Fatalf("%s: position %v", name, v)
					}
				}
			}
		}
		truth := s.inside(mp)
		if !(c.Min <= truth+1e-9 && truth <= c.Max+1e-9 && c.Min <= c.Estimate && c.Estimate <= c.Max) {
			t.Fatalf("%s: count %+v, true number %g", name, c, truth)
		}
		for _, p := range mp {
			parts++
			if n := s.inside(spatial.MultiPolygon{p}); n < least {
				t.Fatalf("%s: a part with %g events", name, n)
			}
		}
	}
	for k, g := range rel.Regions() {
		shape(fmt.Sprint("region ", g.Content), g.Plane, g.Shape, g.AreaKM2, g.Events)
		if k == 0 {
			continue
		}
		in := rel.Regions()[k-1]
		if d := difference(t, in.Shape, g.Shape); d > 1e-9 {
			t.Fatalf("%s: region %g is not inside region %g by %g", what, in.Content, g.Content, d)
		}
	}
	var sum, mass, events float64
	for _, b := range rel.Bands() {
		shape(fmt.Sprint("band from ", b.FromPerKM2), b.Plane, b.Shape, b.AreaKM2, b.Events)
		sum += b.AreaKM2
		mass += b.Mass
		events += b.Events.Estimate
	}
	if sum > s.Area.Area()/1e6*(1+1e-9) || events > s.Events*(1+1e-6)+1e-6 {
		t.Fatalf("%s: bands of %g km2 and %g events in a study area of %g km2 and %g", what, sum, events, s.Area.Area()/1e6, s.Events)
	}
	g := rel.Surface()
	for i, v := range g.Values {
		at := spatial.XY{X: g.Coord(0, i%g.N[0]), Y: g.Coord(1, i/g.N[0])}
		if math.IsNaN(v) == s.Area.Contains(at) {
			t.Fatalf("%s: surface %g at %v", what, v, at)
		}
	}
	return parts
}

// With the lowest band below every value, the bands tile the study area.
func TestBandsTileTheStudyArea(t *testing.T) {
	for seed := range 20 {
		r := rand.New(rand.NewPCG(uint64(seed), 3))
		proj := spatial.AutoPlane(179.9, -17)
		w, err := spatial.NewStudyArea(randomArea(r, 179.9, -17, .2), proj)
		if err != nil {
			t.Fatal(err)
		}
		s := newStudy(randomMixture(r), 80, 1000, 2e4, r)
		for i := range s.Density.Values {
			s.Density.Values[i] += 1e-14
		}
		s.BandLevels[0], s.Regions = 1e-15, nil
		s.Area = w
		rel := release(t, s, 0, proj)
		var sum float64
		for _, b := range rel.Bands() {
			sum += b.AreaKM2
		}
		nearly(t, "bands", sum, w.Area()/1e6, 1e-9*sum)
	}
}

// A border on the lattice's own lines, and levels that meet its corners.
func TestGuardAlignedBorder(t *testing.T) {
	plane, _ := spatial.NewProjection(spatial.CRS{Method: "plane"})
	for _, rings := range [][][]float64{unitSquare, lShape, triangle, holed} {
		w := areaOf(t, rings)
		l := latticeOver(-1, 5, .125)
		a := spatial.Analysis{Density: mv.NewGrid(l), Counts: mv.NewGrid(l), Events: 4000, Total: 4000, KernelAtZero: 1, Area: w, RegionRule: "events"}
		for i := range a.Density.Values {
			a.Density.Values[i] = 1 + float64(i%l.N[0])/8 + float64(i/l.N[0])/16
			at := spatial.XY{X: l.Coord(0, i%l.N[0]), Y: l.Coord(1, i/l.N[0])}
			if w.Contains(at) {
				a.Counts.Values[i] = 4
			}
		}
		a.BandLevels = []float64{.5, 1, 2, 2.25, 3, 4.5}
		rel, err := spatial.Guard(a, spatial.Policy{MinEvents: 10}, plane)
		if err != nil {
			t.Fatal(err)
		}
		var sum float64
		for _, b := range rel.Bands() {
			judge(t, b.Shape, "aligned")
			sum += b.AreaKM2
		}
		nearly(t, "aligned", sum*1e6, w.Area(), 1e-9)
	}
}

// BenchmarkGuardWithin is BenchmarkGuard within a study area of 2,000 vertices.
func BenchmarkGuardWithin(b *testing.B) {
	s := newStudy(targetRing(), 1024, 1_000_000, 5000, rand.New(rand.NewPCG(1, 1)))
	var xy []float64
	for i := range 2000 {
		a := 2 * math.Pi * float64(i) / 2000
		d := 12000 + 2000*math.Sin(17*a)
		xy = append(xy, d*math.Cos(a), d*math.Sin(a))
	}
	w := areaOf(b, [][]float64{xy})
	step := s.Density.Step[0]
	s.within(b, w, matrixOf(b, 64*step*step, 0, 64*step*step), false)
	for _, r := range []int{1, 4} {
		if r > 1 {
			s.FineCounts = s.binned(r)
		}
		b.Run(fmt.Sprint("counts ", r, " times as fine"), func(b *testing.B) {
			for b.Loop() {
				release(b, s, 10, spatial.AutoPlane(10, 50))
			}
		})
	}
	b.Run("kernel mass", func(b *testing.B) {
		for b.Loop() {
			kernelMass(b, w, s.Density.Lattice, matrixOf(b, 64*step*step, 0, 64*step*step))
		}
	})
}
