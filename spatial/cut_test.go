package spatial_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"slices"
	"testing"

	"drumlin/spatial"

	"github.com/paulmach/orb"
)

// box is a ring in degrees put on the plane of a stand-in projection.
func boxRing(p tilt, west, south, east, north float64) spatial.Ring {
	var r spatial.Ring
	for _, c := range [][2]float64{{west, south}, {east, south}, {east, north}, {west, north}} {
		r = append(r, spatial.XY{X: (c[0] - p.lon) * metresPerDegree, Y: (c[1] - p.lat) * metresPerDegree})
	}
	return r
}

func reversed(r spatial.Ring) spatial.Ring {
	r = slices.Clone(r)
	slices.Reverse(r)
	return r
}

// extent returns west, south, east, north of a polygon.
func extent(p orb.Polygon) [4]float64 {
	b := p.Bound()
	return [4]float64{b.Min[0], b.Min[1], b.Max[0], b.Max[1]}
}

// METHODS.md 10.6 item 4: the box 40-50 N, 170 E-170 W.
func TestToShapeCutsTheBox(t *testing.T) {
	for _, lon := range []float64{0, 175, -175, 360} {
		p := tilt{lon, 0}
		west := 170 + 360*math.Round((lon-175)/360) // continuous around the projection's meridian
		mp, err := spatial.ToShape(spatial.MultiPolygon{{boxRing(p, west, 40, west+20, 50)}}, p)
		if err != nil {
			t.Fatal(err)
		}
		judge(t, mp, "box")
		if len(mp) != 2 || extent(mp[0]) != [4]float64{170, 40, 180, 50} || extent(mp[1]) != [4]float64{-180, 40, -170, 50} {
			t.Errorf("centre %g: %v", lon, mp)
		}
		if len(mp[0][0]) != 5 || len(mp[1][0]) != 5 {
			t.Errorf("centre %g: %v", lon, mp)
		}
	}
}

func TestToShapeCutsHoles(t *testing.T) {
	p := tilt{180, 0}
	mp, err := spatial.ToShape(spatial.MultiPolygon{{
		boxRing(p, 170, 0, 190, 20),
		reversed(boxRing(p, 171, 1, 173, 3)),   // wholly west
		reversed(boxRing(p, 187, 1, 188, 2)),   // wholly east
		reversed(boxRing(p, 178, 5, 182, 9)),   // across
		reversed(boxRing(p, 175, 11, 180, 12)), // its side on the cut
		reversed(boxRing(p, 180, 14, 185, 15)), // the same from the east
	}, {boxRing(p, 179, 6, 181, 7)}}, p) // an island in a hole, across as well
	if err != nil {
		t.Fatal(err)
	}
	judge(t, mp, "holes")
	var west, east float64
	holes := 0
	for _, q := range mp {
		if a := toGeom(orb.MultiPolygon{q}).Area(); extent(q)[0] >= 0 {
			west += a
		} else {
			east += a
		}
		holes += len(q) - 1
	}
	nearly(t, "west", west, 200-4-8-5+1, 1e-5)
	nearly(t, "east", east, 200-1-8-5+1, 1e-5)
	// a part and an island on each side; the hole that ends on the cut from the
	// west becomes a bay, the one from the east keeps a hair of 1e-7 degree
	if len(mp) != 4 || holes != 3 {
		t.Errorf("%d parts, %d holes", len(mp), holes)
	}
}

// Positions on the cut are the same number on both sides.
func TestToShapeSharesLatitudes(t *testing.T) {
	g := targetRing().grid(-4, 4, 90, 20_000)
	s := lines(t, g, []float64{.01 / 4e8, .03 / 4e8, .08 / 4e8}, spatial.IsolineOptions{})
	p := tilt{180.0123, -16}
	for k := range 3 {
		mp, err := spatial.ToShape(s.Superlevel(k), p)
		if err != nil {
			t.Fatal(err)
		}
		judge(t, mp, fmt.Sprint("level ", k))
		on := map[float64][]float64{}
		for _, q := range mp {
			for _, r := range q {
				for _, v := range r[1:] {
					if math.Abs(v[0]) == 180 {
						on[v[0]] = append(on[v[0]], v[1])
					}
					if math.Abs(v[0]) > 180 || math.Abs(v[0]*1e7-math.Round(v[0]*1e7)) > 1e-5 {
						t.Fatalf("longitude %v", v[0])
					}
				}
			}
		}
		slices.Sort(on[180])
		slices.Sort(on[-180])
		if len(on[180]) == 0 || !reflect.DeepEqual(on[180], on[-180]) {
			t.Errorf("level %d: %v and %v on the cut", k, on[180], on[-180])
		}
	}
}

func TestToShapeMany(t *testing.T) {
	for seed := range 60 {
		r := rand.New(rand.NewPCG(uint64(seed), 3))
		g := randomMixture(r).grid(-5, 5, 70, 30_000)
		top := slices.Max(g.Values)
		s := lines(t, g, []float64{top * .05, top * .2, top * .5}, spatial.IsolineOptions{})
		p := tilt{180 + 3*(r.Float64()-.5), 10}
		for k := range 3 {
			mp, err := spatial.ToShape(s.Superlevel(k), p)
			if err != nil {
				t.Fatal(err)
			}
			judge(t, mp, fmt.Sprint("seed ", seed, " level ", k))
			want := s.Superlevel(k).Area() / metresPerDegree / metresPerDegree
			nearly(t, fmt.Sprint("seed ", seed, " level ", k, " area"), toGeom(mp).Area(), want, 1e-5*want)
		}
	}
}

func TestToShapeRealPlane(t *testing.T) {
	fiji, err := spatial.NewProjection(spatial.CRS{Method: "LAEA", Ellipsoid: "WGS 84", Lat0: -17, Lon0: 179})
	if err != nil {
		t.Fatal(err)
	}
	g := targetRing().grid(-4, 4, 161, 100_000)
	s := lines(t, g, []float64{2e-12, 5e-12}, spatial.IsolineOptions{})
	for k := range 2 {
		mp, err := spatial.ToShape(s.Superlevel(k), fiji)
		if err != nil {
			t.Fatal(err)
		}
		judge(t, mp, "Fiji")
		if len(mp) < 2 {
			t.Errorf("level %d not cut: %d parts", k, len(mp))
		}
	}
	// a long side of a plane is bent in degrees: more vertices, the same in both directions
	r := spatial.Ring{{-5e5, -5e5}, {5e5, -5e5}, {5e5, 5e5}, {-5e5, 5e5}}
	a, err := spatial.ToShape(spatial.MultiPolygon{{r}}, fiji)
	if err != nil {
		t.Fatal(err)
	}
	b, err := spatial.ToShape(spatial.MultiPolygon{{reversed(r)}}, fiji)
	if err != nil {
		t.Fatal(err)
	}
	judge(t, a, "square")
	na, nb := 0, 0
	for i := range a {
		na, nb = na+len(a[i][0]), nb+len(b[i][0])
	}
	if na < 12 || na != nb {
		t.Errorf("square has %d and %d positions", na, nb)
	}
	pole, err := spatial.NewProjection(spatial.CRS{Method: "LAEA", Ellipsoid: "WGS 84", Lat0: 90})
	if err != nil {
		t.Fatal(err)
	}
	// beside the pole, across the meridian opposite the centre
	beside := spatial.Ring{{-2e5, 3e5}, {2e5, 3e5}, {2e5, 5e5}, {-2e5, 5e5}}
	mp, err := spatial.ToShape(spatial.MultiPolygon{{beside}}, pole)
	if err != nil {
		t.Fatal(err)
	}
	judge(t, mp, "beside the pole")
	// outside the domain
	if _, err := spatial.ToShape(spatial.MultiPolygon{{spatial.Ring{{1e9, 0}, {1.1e9, 0}, {1e9, 1e8}}}}, fiji); !errors.Is(err, spatial.ErrUnsupportedGeometry) {
		t.Errorf("outside the domain: %v", err)
	}
}

// Rings around a pole, with holes around it and beside it, north and south.
func TestToShapePoles(t *testing.T) {
	for _, lat := range []float64{90, 82, -90, -85} {
		for _, lon := range []float64{0, 180, 77} {
			p, err := spatial.NewProjection(spatial.CRS{Method: "LAEA", Ellipsoid: "WGS 84", Lat0: lat, Lon0: lon})
			if err != nil {
				t.Fatal(err)
			}
			for k, m := range []mixture{{{1, .2, .1, 1, 1, 0}}, targetRing(), randomMixture(rand.New(rand.NewPCG(8, 8)))} {
				g := m.grid(-6, 6, 121, 500_000)
				top := slices.Max(g.Values)
				s := lines(t, g, []float64{.02 * top, .1 * top, .5 * top}, spatial.IsolineOptions{})
				for n := range 6 {
					plane := s.Superlevel(n / 2)
					if n%2 == 1 {
						plane = s.Isoband(n/2 + 1)
					}
					mp, err := spatial.ToShape(plane, p)
					if err != nil {
						t.Fatalf("centre %g %g, mixture %d, shape %d: %v", lat, lon, k, n, err)
					}
					judge(t, mp, fmt.Sprint("centre ", lat, lon, " mixture ", k, " shape ", n))
					// chords of 50 km in degrees against chords on the plane
					nearly(t, fmt.Sprint("centre ", lat, lon, " mixture ", k, " shape ", n, " area"), spatial.EllipsoidArea(mp), plane.Area(), 2e-4*plane.Area())
				}
			}
		}
	}
}

func TestToShapeEdgeCases(t *testing.T) {
	p := tilt{0, 0}
	tiny := spatial.Ring{{0, 0}, {.001, 0}, {.001, .001}}
	mp, err := spatial.ToShape(spatial.MultiPolygon{{tiny}, {boxRing(p, 1, 1, 2, 2), tiny}}, p)
	if err != nil || len(mp) != 1 || len(mp[0]) != 1 {
		t.Errorf("vanishing rings: %v, %v", mp, err)
	}
	if mp, err := spatial.ToShape(nil, p); err != nil || mp == nil || len(mp) != 0 {
		t.Errorf("nothing: %v, %v", mp, err)
	}
	bow := spatial.Ring{{0, 0}, {1000, 1000}, {1000, 0}, {0, 1500}}
	if _, err := spatial.ToShape(spatial.MultiPolygon{{bow}}, p); err == nil {
		t.Error("a ring that crosses itself was let through")
	}
	touching := spatial.MultiPolygon{{boxRing(p, 0, 0, 1, 1)}, {boxRing(p, 1, 1, 2, 2)}}
	if _, err := spatial.ToShape(touching, p); err == nil {
		t.Error("rings that touch were let through")
	}
	plane, err := spatial.NewProjection(spatial.CRS{Method: "plane"})
	if err != nil {
		t.Fatal(err)
	}
	mp, err = spatial.ToShape(spatial.MultiPolygon{{spatial.Ring{{0, 0}, {5e6, .00049}, {5e6, 7.0006}}}}, plane)
	want := orb.MultiPolygon{{{{0, 0}, {5e6, 0}, {5e6, 7.001}, {0, 0}}}}
	if err != nil || !reflect.DeepEqual(mp, want) {
		t.Errorf("plane: %v, %v", mp, err)
	}
}

func ExampleToShape() {
	p := tilt{lon: 180} // a projection, here a toy with 111 km to the degree
	shape, err := spatial.ToShape(spatial.MultiPolygon{{boxRing(p, 170, 40, 190, 50)}}, p)
	fmt.Println(err)
	for _, part := range shape {
		fmt.Println(part)
	}
	// Output:
	// <nil>
	// [[[180 50] [170 50] [170 40] [180 40] [180 50]]]
	// [[[-180 40] [-170 40] [-170 50] [-180 50] [-180 40]]]
}
