package spatial_test

import (
	"fmt"
	"math"
	"testing"

	"drumlin/spatial"

	"github.com/paulmach/orb"
)

// box is a ring with straight edges in longitude and latitude, anticlockwise.
func box(west, south, east, north float64) orb.Ring {
	return orb.Ring{{west, south}, {east, south}, {east, north}, {west, north}, {west, south}}
}

// TestEllipsoidArea: closed forms between parallels, WGS 84, METHODS 10.4.
func TestEllipsoidArea(t *testing.T) {
	for _, c := range []struct {
		ring      orb.Ring
		want      float64
		tolerance float64 // relative; the values have 3 to 6 decimals
	}{
		{box(-180, -90, 180, 90), 510065621724088.5, 1e-14},
		{box(0, 0, 1, 1), 12308463893.975, 1e-12},
		{box(7, 45, 8, 46), 8686494956.670, 1e-12},
		{box(0, 51, 1, 52), 7725699592.585, 1e-12},
		{box(179, 59, 180, 60), 6309805669.031, 1e-12},
		{box(-0.01, 51.50, 0, 51.51), 772496.264959, 2e-12},
	} {
		if got := spatial.EllipsoidRingArea(c.ring); math.Abs(got/c.want-1) > c.tolerance {
			t.Errorf("%v: %.6f, want %.6f", c.ring, got, c.want)
		}
	}
	// A hole is taken off whatever its winding; parts add.
	outer, hole := box(0, 51, 1, 52), box(0.25, 51.25, 0.5, 51.5)
	open := hole[:4]
	m := orb.MultiPolygon{{outer, hole}, {hole}}
	if got := spatial.EllipsoidArea(m); math.Abs(got/7725699592.585-1) > 1e-12 {
		t.Errorf("polygon, its hole and the hole's filling: %.3f", got)
	}
	back := append(orb.Ring(nil), hole...)
	back.Reverse()
	if a, b, c := spatial.EllipsoidRingArea(hole), spatial.EllipsoidRingArea(back), spatial.EllipsoidRingArea(open); math.Abs(a/b+1) > 1e-12 || a != c {
		t.Errorf("wound one way %.3f, the other %.3f, unclosed %.3f", a, b, c)
	}
	for _, r := range []orb.Ring{nil, {}, {{1, 2}}, {{1, 2}, {3, 4}}, {{1, 2}, {3, 4}, {1, 2}}} {
		if got := spatial.EllipsoidRingArea(r); math.Abs(got) > 1e-4 {
			t.Errorf("%v has area %g", r, got)
		}
	}
	// A slanted edge: halves of a box cut by its diagonal add to the box, and
	// cutting the diagonal into a thousand pieces changes neither.
	low := orb.Ring{{0, -80}, {40, -80}, {40, 85}}
	high := orb.Ring{{0, -80}, {40, 85}, {0, 85}}
	whole := spatial.EllipsoidRingArea(box(0, -80, 40, 85))
	if got := spatial.EllipsoidRingArea(low) + spatial.EllipsoidRingArea(high); math.Abs(got/whole-1) > 1e-13 {
		t.Errorf("halves %.3f, whole %.3f", got, whole)
	}
	fine := orb.Ring{{0, -80}, {40, -80}, {40, 85}}
	for i := 999; i > 0; i-- {
		fine = append(fine, orb.Point{0.04 * float64(i), -80 + 0.165*float64(i)})
	}
	if a, b := spatial.EllipsoidRingArea(low), spatial.EllipsoidRingArea(fine); math.Abs(a/b-1) > 1e-13 {
		t.Errorf("one edge %.3f, a thousand %.3f", a, b)
	}
}

// TestEqualArea: the cell 0-1°E, 51-52°N with n points a side on EPSG:3035,
// its plane area against the ellipsoid's (GRS 80), METHODS 10.4; the same cell
// on other planes.
func TestEqualArea(t *testing.T) {
	const cell = 7725699592.641
	p := lookup(t, "EPSG:3035")
	for _, c := range []struct {
		n    int
		want float64
	}{
		{1, 7725330840.711}, {4, 7725676545.451}, {16, 7725698152.191}, {64, 7725699502.613}, {1024, 7725699592.289},
	} {
		if got := planeArea(p, 0, 51, 1, 52, c.n); math.Abs(got-c.want) > 2e-3 {
			t.Errorf("%d points a side: %.3f, want %.3f", c.n, got, c.want)
		}
	}
	for _, c := range []struct {
		code   string
		west   float64
		want   float64 // ratio to the ground
		within float64
	}{
		{"EPSG:3035", 0, 1, 1e-9}, {"EPSG:32631", 2.5, 0.999210016, 1e-9}, {"EPSG:32631", 5, 0.999949292, 1e-9}, {"EPSG:3857", 0, 2.576784, 1e-6},
	} {
		p := lookup(t, c.code)
		if got := planeArea(p, c.west, 51, c.west+1, 52, 4096) / cell; math.Abs(got-c.want) > c.within {
			t.Errorf("%s, cell at %g: ratio %.9f, want %.9f", c.code, c.west, got, c.want)
		}
	}
}

// planeArea is the area on the plane of a cell whose sides are cut in n.
func planeArea(p spatial.Projection, west, south, east, north float64, n int) float64 {
	var g spatial.LonLats
	corner := box(west, south, east, north)
	for k := range 4 {
		for i := range n {
			f := float64(i) / float64(n)
			g.Lon = append(g.Lon, corner[k][0]+f*(corner[k+1][0]-corner[k][0]))
			g.Lat = append(g.Lat, corner[k][1]+f*(corner[k+1][1]-corner[k][1]))
		}
	}
	xy := p.Forward(g)
	var sum float64
	x0, y0 := xy.X[0], xy.Y[0]
	for i := range xy.X {
		j := (i + 1) % len(xy.X)
		sum += (xy.X[i]-x0)*(xy.Y[j]-y0) - (xy.X[j]-x0)*(xy.Y[i]-y0)
	}
	return sum / 2
}

func ExampleEllipsoidArea() {
	m := orb.MultiPolygon{{orb.Ring{{0, 51}, {1, 51}, {1, 52}, {0, 52}, {0, 51}}}}
	fmt.Printf("%.3f km²\n", spatial.EllipsoidArea(m)/1e6)
	// Output:
	// 7725.700 km²
}
