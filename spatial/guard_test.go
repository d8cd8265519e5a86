package spatial_test

import (
	"errors"
	"flag"
	"fmt"
	"math"
	"math/rand/v2"
	"reflect"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"

	"github.com/paulmach/orb"
	"github.com/peterstace/simplefeatures/geom"
)

var long = flag.Bool("long", false, "five times as many random mixtures")

func release(t testing.TB, s study, least float64, proj spatial.Projection) *spatial.Release {
	t.Helper()
	r, err := spatial.Guard(s.Analysis, spatial.Policy{MinEvents: least}, proj)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

// METHODS.md section 5: mass and area of RING above .02 and .05, and that the
// faces share out mass and events without loss.
func TestGuardMeasuresRing(t *testing.T) {
	s := newStudy(targetRing(), 561, 4000, 1000, rand.New(rand.NewPCG(1, 1)))
	s.Regions = []spatial.Threshold{{Content: .67, Density: .05e-6}, {Content: .9, Density: .02e-6}}
	s.BandLevels = []float64{.02e-6, .05e-6}
	r := release(t, s, 0, tilt{10, 50})
	// the bilinear interpolant is off by h² f''/8, about 2e-4 of the mass at this step
	for k, want := range []struct{ area, mass float64 }{{9.6155, .668590}, {16.5380, .904591}} {
		g := r.Regions()[k]
		nearly(t, "area", g.AreaKM2, want.area, 1e-3)
		nearly(t, "mass", g.Mass, want.mass, 3e-4)
		nearly(t, "mean", g.MeanPerKM2, 4000*g.Mass/g.AreaKM2, 1e-6*g.MeanPerKM2)
		nearly(t, "events", g.Events.Estimate, s.inside(g.Plane), 8)
		nearly(t, "plane area", g.Plane.Area(), g.AreaKM2*1e6, 1e-3*want.area)
	}
	b := r.Bands()
	nearly(t, "bands' mass", b[0].Mass+b[1].Mass, r.Regions()[1].Mass, 1e-12)
	nearly(t, "bands' events", b[0].Events.Estimate+b[1].Events.Estimate, r.Regions()[1].Events.Estimate, 1e-8)
	// the border of the two bands holds the same positions in both
	have := map[orb.Point]bool{}
	for _, polygon := range b[0].Shape {
		for _, ring := range polygon {
			for _, p := range ring {
				have[p] = true
			}
		}
	}
	for _, ring := range b[1].Shape[0] {
		for _, p := range ring {
			if !have[p] {
				t.Fatalf("border position %v is not shared", p)
			}
		}
	}
}

// Random mixtures: every shape valid, areas and counts add up, the guard holds.
func TestGuardRandomMixtures(t *testing.T) {
	n := 200
	if testing.Short() {
		n = 40
	}
	if *long {
		n = 1000
	}
	withheld := 0
	for seed := range n {
		r := rand.New(rand.NewPCG(uint64(seed), 7))
		s := newStudy(randomMixture(r), 60+r.IntN(60), 300+r.IntN(400), 1000, r)
		for k, least := range []float64{0, 10, 10} {
			if k == 2 {
				s.FineCounts = s.binned(1 + r.IntN(6))
			}
			proj := tilt{lon: []float64{7, 179.99, -180.02, 540}[seed%4], lat: 47}
			rel, err := spatial.Guard(s.Analysis, spatial.Policy{MinEvents: least}, proj)
			if errors.Is(err, spatial.ErrWithheld) {
				withheld++
				continue
			}
			if err != nil {
				t.Fatalf("seed %d: %v", seed, err)
			}
			checkRelease(t, fmt.Sprintf("seed %d, least %g", seed, least), s, rel, least)
		}
	}
	if withheld > n/10 {
		t.Errorf("%d of %d withheld whole", withheld, n)
	}
}

func checkRelease(t *testing.T, what string, s study, rel *spatial.Release, least float64) {
	t.Helper()
	shape := func(name string, mp spatial.MultiPolygon, deg orb.MultiPolygon, area float64, c spatial.Count) {
		t.Helper()
		name = what + ", " + name
		judge(t, planeToOrb(mp), name+" on the plane")
		judge(t, deg, name+" in degrees")
		nearly(t, name+": area", mp.Area(), area*1e6, 1e-9*area*1e6)
		var a float64 // parsed-back area; the stand-in projection is linear
		for _, p := range deg {
			for _, r := range p {
				for i := range r[1:] {
					a += ((r[i][0]-r[0][0])*(r[i+1][1]-r[0][1]) - (r[i+1][0]-r[0][0])*(r[i][1]-r[0][1])) / 2
				}
				for _, v := range r {
					if math.Abs(v[0]) > 180 {
						t.Fatalf("%s: longitude %g", name, v[0])
					}
				}
			}
		}
		nearly(t, name+": area in degrees", a*metresPerDegree*metresPerDegree, area*1e6, 1e-5*area*1e6+100)
		truth := s.inside(mp)
		if !(c.Min <= truth+1e-9 && truth <= c.Max+1e-9 && c.Min <= c.Estimate && c.Estimate <= c.Max) {
			t.Fatalf("%s: count %+v, true number %g", name, c, truth)
		}
		s.checkParts(t, name, mp, least)
	}
	for k, g := range rel.Regions() {
		shape(fmt.Sprint("region ", g.Content), g.Plane, g.Shape, g.AreaKM2, g.Events)
		if k == 0 {
			continue
		}
		in := rel.Regions()[k-1]
		if in.AreaKM2 > g.AreaKM2 || in.Mass > g.Mass {
			t.Fatalf("%s: region %g is larger than region %g", what, in.Content, g.Content)
		}
		if d := difference(t, in.Shape, g.Shape); d > 1e-9 {
			t.Fatalf("%s: region %g is not inside region %g by %g", what, in.Content, g.Content, d)
		}
	}
	var sum, mass float64
	for _, b := range rel.Bands() {
		shape(fmt.Sprint("band from ", b.FromPerKM2), b.Plane, b.Shape, b.AreaKM2, b.Events)
		sum += b.AreaKM2
		mass += b.Mass
	}
	if least == 0 && len(rel.Bands()) > 0 {
		lowest := lines(t, s.Density, s.BandLevels, spatial.IsolineOptions{Clamp: 1. / 1024}).Superlevel(0)
		nearly(t, what+": bands' area", sum, lowest.Area()/1e6, 1e-9*sum)
	}
	for i, v := range rel.Surface().Values {
		f := s.Density.Values[i] * s.Total * 1e6
		if least == 0 && v != 0 && math.Abs(v-f) > 1e-9*f || least == 0 && v == 0 && f >= s.BandLevels[0]*s.Total*1e6 {
			t.Fatalf("%s: surface %g where the intensity is %g", what, v, f)
		}
	}
	for _, p := range rel.Peaks() {
		if !(p.EffectiveEvents >= least) {
			t.Fatalf("%s: peak on %g events", what, p.EffectiveEvents)
		}
	}
}

// difference is the area of a outside b, by the validity judge's own overlay.
func difference(t *testing.T, a, b orb.MultiPolygon) float64 {
	t.Helper()
	if len(a) == 0 {
		return 0
	}
	d, err := geom.Difference(toGeom(a).AsGeometry(), toGeom(b).AsGeometry())
	if err != nil {
		t.Fatal(err)
	}
	return d.Area()
}

func TestGuardNotByWorkers(t *testing.T) {
	s := newStudy(targetRing(), 301, 3000, 1000, rand.New(rand.NewPCG(3, 3)))
	s.Weights = mv.NewGrid(s.Density.Lattice)
	for i, c := range s.Counts.Values {
		s.Weights.Values[i] = c * (1 + float64(i%7))
		s.Total += s.Weights.Values[i]
	}
	var first *spatial.Release
	for _, w := range []int{1, 2, 3, 8} {
		r, err := spatial.Guard(s.Analysis, spatial.Policy{MinEvents: 10, Workers: w}, tilt{178.99, -20})
		if err != nil {
			t.Fatal(err)
		}
		if first == nil {
			first = r
		}
		if !reflect.DeepEqual(first, r) {
			t.Fatalf("%d workers release something else", w)
		}
	}
	if g := first.Regions()[0]; !(g.Weight > g.Events.Estimate) {
		t.Errorf("weight %g of %g events", g.Weight, g.Events.Estimate)
	}
}

// A bump of 4 events beside one of 400, and a hole with 3 events.
func TestGuardWithholdsPartsAndHoles(t *testing.T) {
	const n = 41
	l, _ := mv.NewLattice([]float64{0, 0}, []float64{100, 100}, []int{n, n})
	s := study{Analysis: spatial.Analysis{Density: mv.NewGrid(l), Counts: mv.NewGrid(l), KernelAtZero: 1}}
	put := func(i, j, half int, density, count float64) {
		for y := j - half; y <= j+half; y++ {
			for x := i - half; x <= i+half; x++ {
				s.Density.Values[y*n+x], s.Counts.Values[y*n+x] = density, count
			}
		}
	}
	put(12, 20, 9, 2e-7, 2)  // a block, 361 nodes of 2 events
	put(12, 20, 3, 5e-8, .1) // with a hollow of 49 nodes, 25 of them surely inside
	put(33, 20, 3, 3e-7, .1) // and a small block apart
	s.Events, s.Total = 730, 730
	s.Regions = []spatial.Threshold{{Content: .5, Density: 2.5e-7}, {Content: .9, Density: 1e-7}}
	s.BandLevels = []float64{1e-7, 2.5e-7}
	s.Peaks = []spatial.Summit{{At: spatial.XY{X: 1200, Y: 2800}, Density: .5}, {At: spatial.XY{X: 3300, Y: 2000}, Density: 1}, {At: spatial.XY{X: 3300, Y: 2000}, Density: .001}}
	r := release(t, s, 10, tilt{0, 0})
	if len(r.Regions()) != 1 || len(r.Regions()[0].Plane) != 1 || len(r.Regions()[0].Plane[0]) != 1 {
		t.Fatalf("regions %+v", r.Regions())
	}
	want := spatial.Withheld{MinEvents: 10, RegionParts: 2, RegionHoles: 1, BandParts: 2, BandHoles: 1, Peaks: 2, Regions: []float64{.5}}
	if got := r.Withheld(); !reflect.DeepEqual(got, want) {
		t.Errorf("withheld %+v, want %+v", got, want)
	}
	if p := r.Peaks(); len(p) != 1 || p[0].Region != .9 || p[0].Rank != 1 || p[0].EffectiveEvents != 365 {
		t.Errorf("peaks %+v", p)
	}
	at := func(i, j int) float64 { return r.Surface().Values[j*n+i] }
	if at(33, 20) != 0 || at(12, 20) != 1e-7*730*1e6 || at(12, 28) != 2e-7*730*1e6 {
		t.Errorf("surface: apart %g, hollow %g, block %g", at(33, 20), at(12, 20), at(12, 28))
	}
	open := release(t, s, 1, tilt{0, 0})
	if len(open.Regions()) != 2 || len(open.Regions()[1].Plane) != 2 || len(open.Regions()[1].Plane[0]) != 2 {
		t.Errorf("without the guard: %+v", open.Regions())
	}
	s.Counts = mv.NewGrid(l)
	if _, err := spatial.Guard(s.Analysis, spatial.Policy{MinEvents: 10}, tilt{0, 0}); !errors.Is(err, spatial.ErrWithheld) {
		t.Errorf("no events: %v", err)
	}
}

func TestGuardRefuses(t *testing.T) {
	good := newStudy(targetB, 41, 100, 1000, rand.New(rand.NewPCG(1, 2))).Analysis
	for _, c := range []struct {
		name  string
		spoil func(*spatial.Analysis)
		want  error
	}{
		{"other lattice", func(a *spatial.Analysis) {
			a.Counts = newStudy(targetB, 42, 10, 1000, rand.New(rand.NewPCG(1, 2))).Counts
		}, mv.ErrShape},
		{"one row", func(a *spatial.Analysis) { a.Density, a.Counts = gridOf(2, 1, 1, 1), gridOf(2, 1, 1, 1) }, mv.ErrShape},
		{"NaN", func(a *spatial.Analysis) {
			a.Density = mv.NewGrid(a.Density.Lattice)
			a.Density.Values[5] = math.NaN()
		}, mv.ErrNotFinite},
		{"zero level", func(a *spatial.Analysis) { a.BandLevels = []float64{0, 1} }, spatial.ErrLevels},
		{"falling levels", func(a *spatial.Analysis) { a.BandLevels = []float64{2, 1} }, spatial.ErrLevels},
		{"zero threshold", func(a *spatial.Analysis) { a.Regions = []spatial.Threshold{{Content: .5}} }, spatial.ErrLevels},
		{"negative events", func(a *spatial.Analysis) { a.Events = -1 }, mv.ErrNotFinite},
	} {
		a := good
		c.spoil(&a)
		if _, err := spatial.Guard(a, spatial.Policy{MinEvents: 10}, tilt{}); !errors.Is(err, c.want) {
			t.Errorf("%s: %v, want %v", c.name, err, c.want)
		}
	}
}

// Zero and constant densities release an empty or whole map, not a fault.
func TestGuardFlat(t *testing.T) {
	l, _ := mv.NewLattice([]float64{0, 0}, []float64{10, 10}, []int{20, 30})
	a := spatial.Analysis{Density: mv.NewGrid(l), Counts: mv.NewGrid(l), Events: 600, Total: 600, BandLevels: []float64{1e-6, 2e-6}}
	for i := range a.Counts.Values {
		a.Counts.Values[i] = 1
	}
	r, err := spatial.Guard(a, spatial.Policy{MinEvents: 10}, tilt{})
	if err != nil || len(r.Bands()) != 0 {
		t.Fatalf("zero density: %v, %d bands", err, len(r.Bands()))
	}
	for i := range a.Density.Values {
		a.Density.Values[i] = 2e-6
	}
	r, err = spatial.Guard(a, spatial.Policy{MinEvents: 10}, tilt{})
	if err != nil || len(r.Bands()) != 1 || r.Bands()[0].FromPerKM2 != 2e-6*600*1e6 {
		t.Fatalf("constant density: %v, %+v", err, r.Bands())
	}
	judge(t, r.Bands()[0].Shape, "constant density")
	if c := r.Bands()[0].Events; c.Min != 600 || c.Max != 600 {
		t.Errorf("constant density: %+v", c)
	}
}

func BenchmarkGuard(b *testing.B) {
	for _, n := range []int{256, 1024} {
		s := newStudy(targetRing(), n, 1_000_000, 5000, rand.New(rand.NewPCG(1, 1)))
		for _, r := range []int{1, 4} {
			if r > 1 {
				s.FineCounts = s.binned(r)
			}
			b.Run(fmt.Sprint(n, "/counts ", r, " times as fine"), func(b *testing.B) {
				for b.Loop() {
					release(b, s, 10, tilt{10, 50})
				}
			})
		}
	}
}

func ExampleGuard() {
	// a block of 5 x 5 nodes with 2 events each on an empty plane
	l, _ := mv.NewLattice([]float64{0, 0}, []float64{100, 100}, []int{11, 11})
	a := spatial.Analysis{Density: mv.NewGrid(l), Counts: mv.NewGrid(l), Events: 50, Total: 50, KernelAtZero: 1e-6,
		RegionRule: "events", Regions: []spatial.Threshold{{Content: .9, Density: 1e-6}}}
	for j := 3; j < 8; j++ {
		for i := 3; i < 8; i++ {
			a.Density.Values[j*11+i], a.Counts.Values[j*11+i] = 4e-6, 2
		}
	}
	plane, _ := spatial.NewProjection(spatial.CRS{Method: "plane"})
	for _, least := range []float64{10, 100} {
		r, err := spatial.Guard(a, spatial.Policy{MinEvents: least}, plane)
		if err != nil {
			fmt.Println(errors.Is(err, spatial.ErrWithheld))
			continue
		}
		g := r.Regions()[0]
		fmt.Printf("%.0f %% region: %.3f km2, %.0f to %.0f events\n", 100*g.Content, g.AreaKM2, g.Events.Min, g.Events.Max)
	}
	// Output:
	// 90 % region: 0.291 km2, 18 to 50 events
	// true
}
