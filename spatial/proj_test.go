package spatial_test

import (
	"errors"
	"fmt"
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"drumlin/spatial"
)

func lookup(t testing.TB, s string) spatial.Projection {
	t.Helper()
	ref, err := spatial.ParseCRS(s)
	if err != nil {
		t.Fatal(err)
	}
	return ref.Projection
}

func on(t testing.TB, c spatial.CRS, e *spatial.Ellipsoid) spatial.Projection {
	t.Helper()
	p, err := spatial.NewProjectionOn(c, e)
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func ellipsoid(t testing.TB, name string, a, invF float64) *spatial.Ellipsoid {
	t.Helper()
	e, err := spatial.NewEllipsoid(name, a, invF)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// TestPublished holds the projections against worked examples and test series.
func TestPublished(t *testing.T) {
	airy := ellipsoid(t, "Airy 1830", 6377563.396, 299.3249646)
	clarke := ellipsoid(t, "Clarke 1866", 6378206.4, 294.978698213898)
	wgs := ellipsoid(t, "WGS 84", 6378137, 298.257223563)
	grs := ellipsoid(t, "GRS 80", 6378137, 298.257222101)
	// Snyder's spheres have radii 3 and 1; the coordinates scale with them.
	sphere3, sphere1 := ellipsoid(t, "sphere", 3, 0), ellipsoid(t, "sphere", 1, 0)

	british := spatial.CRS{Method: "TM", Lat0: 49, Lon0: -2, K0: 0.9996012717, FE: 400000, FN: -100000}
	rounded := british
	rounded.K0 = 0.9996013
	snyderAlbers := spatial.CRS{Method: "AEA", Lat0: 23, Lon0: -96, Lat1: 29.5, Lat2: 45.5}
	snyderLAEA := spatial.CRS{Method: "LAEA", Lat0: 40, Lon0: -100}
	gigs := on(t, british, wgs)
	laea, australia := lookup(t, "EPSG:3035"), lookup(t, "EPSG:3577")

	for _, c := range []struct {
		source    string
		p         spatial.Projection
		lon, lat  float64
		x, y      float64
		tolerance float64
	}{
		// IOGP Guidance Note 7-2, transverse Mercator, with the defining scale
		// and with the rounded one that the printed example uses; both from PROJ.
		{"9807 defining k0", on(t, british, airy), 0.5, 50.5, 577274.983814, 69740.492267, 2e-6},
		{"9807 rounded k0", on(t, rounded, airy), 0.5, 50.5, 577274.988832, 69740.497072, 2e-6},
		{"9807 as printed", on(t, rounded, airy), 0.5, 50.5, 577274.99, 69740.50, 0.006},
		// IOGP GIGS test series 5101, tolerance 0.03 m.
		{"GIGS 5101", gigs, 3, 80, 496813.178, 3358297.326, 0.03},
		{"GIGS 5101", gigs, 3, 49, 765648.501, -87944.740, 0.03},
		{"GIGS 5101", gigs, 3, 20, 923539.353, -3308151.625, 0.03},
		{"GIGS 5101", gigs, 3, 0, 957087.829, -5527462.686, 0.03},
		{"GIGS 5101", gigs, 3, -60, 678711.584, -12189424.202, 0.03},
		{"GIGS 5101", gigs, -5, 60, 232704.966, 1127751.264, 0.03},
		{"GIGS 5101", gigs, 8, 60, 956351.967, 1166164.180, 0.03},
		{"GIGS 5101", gigs, 8, 0, 1518482.747, -5527462.686, 0.03},
		{"GIGS 5101", gigs, -2, 80, 400000, 3354134.429, 0.03},
		{"GIGS 5101", gigs, -7.5559037, 49.7661327, 0, 0, 0.03},
		// UTM on WGS 84, from PROJ to 1e-6 m.
		{"UTM", lookup(t, "EPSG:32616"), -87.6298, 41.8781, 447741.916717, 4636433.683980, 2e-6},
		{"UTM", lookup(t, "EPSG:32756"), 151.2093, -33.8688, 334368.633648, 6250948.345385, 2e-6},
		{"UTM", lookup(t, "EPSG:32618"), -74.006, 40.7128, 583959.372324, 4507350.998243, 2e-6},
		{"UTM", lookup(t, "EPSG:32631"), 2.3522, 48.8566, 452482.532703, 5411717.176869, 2e-6},
		{"UTM", lookup(t, "EPSG:32630"), -0.1278, 51.5074, 699316.234312, 5710163.758081, 2e-6},
		{"UTM, the next zone", lookup(t, "EPSG:32631"), -0.1278, 51.5074, 282950.215130, 5710891.173000, 2e-6},
		{"UTM", lookup(t, "EPSG:32632"), 9, 0, 500000, 0, 2e-9},
		// Snyder 1987, numerical examples (appendix A), printed to 0.1 m there.
		{"Snyder TM", on(t, spatial.CRS{Method: "TM", Lon0: -75, K0: 0.9996}, clarke), -73.5, 40.5, 127106.467, 4484124.434, 1e-3},
		{"Snyder LAEA sphere", on(t, snyderLAEA, sphere3), 100, -20, -4.2339303, 4.0257775, 1e-7},
		{"Snyder LAEA", on(t, snyderLAEA, clarke), -110, 30, -965932.110, -1056814.927, 1e-3},
		{"Snyder Albers", on(t, snyderAlbers, clarke), -75, 35, 1885472.7258, 1535925.0050, 1e-4},
		{"Snyder Albers sphere", on(t, snyderAlbers, sphere1), -75, 35, 0.2952720, 0.2416774, 1e-7},
		{"Snyder Albers, GRS 80", on(t, snyderAlbers, grs), -75, 35, 1885428.390543, 1535969.285801, 2e-6},
		{"EPSG:5070", lookup(t, "EPSG:5070"), -87.6298, 41.8781, 688894.544229, 2127632.753419, 2e-6},
		// IOGP GIGS test series 5110, tolerance 0.05 m; the first to 30 digits.
		{"30 digits", laea, 5, 50, 3962799.450955, 2999718.853160, 2e-6},
		{"GIGS 5110", laea, 5, 70, 4127824.658, 5214090.649, 0.05},
		{"GIGS 5110", laea, 5, 60, 4041548.13, 4109791.66, 0.05},
		{"GIGS 5110", laea, 5, 40, 3892127.02, 1892578.962, 0.05},
		{"GIGS 5110", laea, 5, 30, 3830117.90, 796781.677, 0.05},
		{"GIGS 5110", laea, 0, 50, 3606514.43, 3036305.967, 0.05},
		{"GIGS 5110", laea, 3, 50, 3819948.288, 3011432.894, 0.05},
		{"GIGS 5110", laea, 8, 50, 4177612.521, 2989464.315, 0.05},
		{"GIGS 5110", laea, 10, 50, 4321000, 2987510.567, 0.05},
		{"false origin", laea, 10, 52, 4321000, 3210000, 1e-8},
		// IOGP GIGS test series 5109, tolerance 0.05 m.
		{"GIGS 5109", australia, 132, -27, 0, -2926820.89, 0.05},
		{"GIGS 5109", australia, 140, 0, 966973.98, -30285.60, 0.05},
		{"GIGS 5109", australia, 140, -20, 832799.36, -2170181.93, 0.05},
		{"GIGS 5109", australia, 140, -40, 693250.21, -4395794.49, 0.05},
		{"GIGS 5109", australia, 140, -60, 567313.29, -6404311.16, 0.05},
		{"GIGS 5109", australia, 140, -80, 486878.674, -7687130.03, 0.05},
		{"GIGS 5109", australia, 120, -60, -850274.75, -6426505.13, 0.05},
		{"GIGS 5109", australia, 170, -60, 2656914.716, -6784621.89, 0.05},
		// IOGP Guidance Note 7-2, from memory, and checked with PROJ 9.1.1:
		// 9801, Jamaica, Clarke 1866, to 0.01 m;
		{"9801 from memory", on(t, spatial.CRS{Method: "LCC", Lat0: 18, Lon0: -77, Lat1: 18, Lat2: 18, K0: 1, FE: 250000, FN: 150000}, clarke),
			-(76 + 56./60 + 37.26/3600), 17 + 55./60 + 55.80/3600, 255966.58, 142493.51, 0.006},
		// 1024, Web Mercator, to 0.01 m.
		{"1024 from memory", lookup(t, "EPSG:3857"), -(100 + 20./60), 24 + 22./60 + 54.433/3600, -11169055.58, 2800000.00, 0.006},
	} {
		xy := c.p.Forward(spatial.LonLats{Lon: []float64{c.lon}, Lat: []float64{c.lat}})
		if math.Abs(xy.X[0]-c.x) > c.tolerance || math.Abs(xy.Y[0]-c.y) > c.tolerance {
			t.Errorf("%s (%g, %g): %.7f, %.7f, want %.7f, %.7f within %g", c.source, c.lon, c.lat, xy.X[0], xy.Y[0], c.x, c.y, c.tolerance)
		}
		g := c.p.Inverse(xy)
		if math.Abs(math.Remainder(g.Lon[0]-c.lon, 360)) > 1e-11 || math.Abs(g.Lat[0]-c.lat) > 1e-11 {
			t.Errorf("%s (%g, %g) comes back as %.12f, %.12f", c.source, c.lon, c.lat, g.Lon[0], g.Lat[0])
		}
	}
}

// everyMethod lists one plane of each kind with how far it reaches.
func everyMethod(t testing.TB) map[string]spatial.Projection {
	return map[string]spatial.Projection{
		"oblique LAEA":    lookup(t, "EPSG:3035"),
		"auto LAEA":       spatial.AutoPlane(178, -21),
		"equatorial LAEA": spatial.AutoPlane(-180, 0),
		"north LAEA":      spatial.AutoPlane(0, 90),
		"south LAEA":      spatial.AutoPlane(30, -90),
		"UTM north":       lookup(t, "EPSG:32660"),
		"UTM south":       lookup(t, "EPSG:32701"),
		"Albers":          lookup(t, "EPSG:5070"),
		"Albers south":    lookup(t, "EPSG:3577"),
		"LCC":             lookup(t, "EPSG:2154"),
		"LCC south":       lookup(t, "EPSG:3112"),
		"web Mercator":    lookup(t, "EPSG:3857"),
	}
}

// TestRoundTrip: there and back again closes to 1e-6 m on the ground wherever
// the projection says it is defined, with two exceptions that are the plane's
// own. Albers flattens latitude towards the poles: a rounding of the plane
// coordinates is 1e-5 m at 0.1 degrees from them and 0.4 m at them. At the edge
// of the domain of LAEA, near the antipode, it is 1e-4 m.
func TestRoundTrip(t *testing.T) {
	for name, p := range everyMethod(t) {
		r := rand.New(rand.NewPCG(1, 2))
		var at []spatial.LonLat
		for range 200000 {
			at = append(at, spatial.LonLat{Lon: 360*r.Float64() - 180, Lat: 180*r.Float64() - 90})
		}
		for _, lat := range []float64{-90, -89.9999, -45, -1e-9, 0, 1e-12, 30, 89.99999, 90} {
			for _, lon := range []float64{-180, -179.9999999, -90, 0, 1e-12, 3, 90, 132, 180, 200, 359, 360} {
				at = append(at, spatial.LonLat{Lon: lon, Lat: lat})
			}
		}
		lon0 := p.CRS().Lon0
		xy := p.Forward(columns(at))
		out := make([]bool, len(at))
		for i := range at {
			if out[i] = math.IsNaN(xy.X[i]); out[i] != math.IsNaN(xy.Y[i]) {
				t.Fatalf("%s: %v gives %g, %g", name, at[i], xy.X[i], xy.Y[i])
			}
		}
		g := p.Inverse(xy)
		worst, inside := 0.0, 0
		for i, w := range at {
			if out[i] {
				if !math.IsNaN(g.Lon[i]) || !math.IsNaN(g.Lat[i]) {
					t.Fatalf("%s: NaN comes back as a place", name)
				}
				continue
			}
			inside++
			limit := 1e-6
			if p.CRS().Method == "LAEA" && groundDistance(w.Lon, w.Lat, lon0+180, -p.CRS().Lat0) < 112000 {
				limit = 1e-4
			}
			if p.CRS().Method == "AEA" && math.Abs(w.Lat) > 89 {
				limit = 1e-5
				if math.Abs(w.Lat) > 89.9 {
					limit = 0.4
				}
			}
			d := groundDistance(g.Lon[i], g.Lat[i], w.Lon, w.Lat)
			if !(d < limit) {
				t.Errorf("%s: %v comes back as %.12f, %.12f: %.3g m off", name, w, g.Lon[i], g.Lat[i], d)
			}
			worst = max(worst, d)
			if g.Lon[i] <= lon0-180 && name != "web Mercator" || g.Lon[i] > lon0+180 {
				t.Errorf("%s: longitude %g about %g", name, g.Lon[i], lon0)
			}
		}
		t.Logf("%-16s %6d of %d inside, worst %.2g m", name, inside, len(at), worst)
	}
}

func TestDomain(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		p        string
		lon, lat float64
		inside   bool
	}{
		{"EPSG:3035", nan, 0, false}, {"EPSG:3035", 0, nan, false}, {"EPSG:3035", 0, 90.0001, false},
		{"EPSG:3035", math.Inf(1), 0, false}, {"EPSG:3035", 1e300, 0, false}, {"EPSG:3035", 0, math.Inf(-1), false},
		{"EPSG:3035", -170, -52, false}, {"EPSG:3035", 190, -52.002, false}, {"EPSG:3035", -170, -51.99, true},
		{"EPSG:3035", 0, 90, true}, {"EPSG:3035", 0, -90, true},
		{"EPSG:6931", 0, -90, false}, {"EPSG:6931", 0, -89.99, true}, {"EPSG:6931", 123, 90, true},
		{"EPSG:32631", 3, 90, true}, {"EPSG:32631", 3, -90, true}, {"EPSG:32631", 48, 0, true}, {"EPSG:32631", 50, 0, false},
		{"EPSG:32631", 93, 60, true}, {"EPSG:32631", 94, 60, false}, {"EPSG:32631", -177, 0, false},
		{"EPSG:2154", 3, 90, true}, {"EPSG:2154", 3, -90, false}, {"EPSG:3112", 3, -90, true}, {"EPSG:3112", 3, 90, false},
		{"EPSG:3857", 0, 85.06, true}, {"EPSG:3857", 0, 85.0601, false}, {"EPSG:3857", 180, -85.06, true},
	} {
		xy := lookup(t, c.p).Forward(spatial.LonLats{Lon: []float64{c.lon}, Lat: []float64{c.lat}})
		if in := !math.IsNaN(xy.X[0]) && !math.IsNaN(xy.Y[0]); in != c.inside || math.IsNaN(xy.X[0]) != math.IsNaN(xy.Y[0]) {
			t.Errorf("%s at %g, %g: %g, %g", c.p, c.lon, c.lat, xy.X[0], xy.Y[0])
		}
	}
	for _, c := range []struct {
		p    string
		x, y float64
	}{
		{"EPSG:3035", nan, 0}, {"EPSG:3035", 2e7, 0}, {"EPSG:3035", math.Inf(1), 0},
		{"EPSG:32631", 1e7, 0}, {"EPSG:32631", 500000, 1.2e7}, {"EPSG:32631", nan, nan},
		{"EPSG:5070", 0, 1.5e7}, {"EPSG:5070", 0, -2e7}, {"EPSG:2154", nan, 1}, {"EPSG:2154", 1e200, 1e200},
		{"EPSG:3857", 0, 2.1e7}, {"EPSG:3857", 5e7, 0},
	} {
		g := lookup(t, c.p).Inverse(spatial.XYs{X: []float64{c.x}, Y: []float64{c.y}})
		if !math.IsNaN(g.Lon[0]) || !math.IsNaN(g.Lat[0]) {
			t.Errorf("%s back from %g, %g: %g, %g", c.p, c.x, c.y, g.Lon[0], g.Lat[0])
		}
	}
}

// TestInPlace: the columns that come back are those that went in.
func TestInPlace(t *testing.T) {
	ps := everyMethod(t)
	ps["plane"] = lookup(t, "plane")
	for name, p := range ps {
		g := spatial.LonLats{Lon: []float64{p.CRS().Lon0}, Lat: []float64{p.CRS().Lat0}}
		xy := p.Forward(g)
		back := p.Inverse(xy)
		if &xy.X[0] != &g.Lon[0] || &xy.Y[0] != &g.Lat[0] || &back.Lon[0] != &g.Lon[0] || &back.Lat[0] != &g.Lat[0] {
			t.Errorf("%s works on other memory", name)
		}
		if a := testing.AllocsPerRun(10, func() { p.Inverse(p.Forward(g)) }); a != 0 {
			t.Errorf("%s allocates %g times", name, a)
		}
		func() {
			defer func() {
				if r := recover(); r == nil || !strings.HasPrefix(fmt.Sprint(r), "spatial: ") {
					t.Errorf("%s: columns of unequal length: %v", name, r)
				}
			}()
			p.Forward(spatial.LonLats{Lon: make([]float64, 2), Lat: make([]float64, 3)})
		}()
	}
}

// TestContinuous: across the antimeridian the plane has no jump, and the way
// back keeps longitudes together.
func TestContinuous(t *testing.T) {
	p := spatial.AutoPlane(178, -21)
	xy := p.Forward(spatial.LonLats{Lon: []float64{179.999, -179.999, 180.001}, Lat: []float64{-20, -20, -20}})
	if d := xy.X[1] - xy.X[0]; d < 200 || d > 220 {
		t.Errorf("0.002 degrees across the antimeridian are %g m", d)
	}
	if d := xy.X[1] - xy.X[2]; math.Abs(d) > 1e-6 {
		t.Errorf("-179.999 and 180.001 are %g m apart", d)
	}
	if g := p.Inverse(xy); math.Abs(g.Lon[1]-180.001) > 1e-11 {
		t.Errorf("longitude %v, want 180.001", g.Lon[1])
	}
}

func TestParseCRS(t *testing.T) {
	for _, c := range []struct{ in, id, method string }{
		{"EPSG:4326", "EPSG:4326", "geographic"}, {"epsg:4258", "EPSG:4258", "geographic"}, {" EPSG:4269 ", "EPSG:4269", "geographic"},
		{"OGC:CRS84", "OGC:CRS84", "geographic"}, {"crs84", "OGC:CRS84", "geographic"},
		{"urn:ogc:def:crs:OGC:1.3:CRS84", "OGC:CRS84", "geographic"}, {"urn:ogc:def:crs:EPSG::3035", "EPSG:3035", "LAEA"},
		{"http://www.opengis.net/def/crs/EPSG/0/32633", "EPSG:32633", "TM"}, {"plane", "", "plane"}, {"EPSG:3857", "EPSG:3857", "WebMercator"},
	} {
		ref, err := spatial.ParseCRS(c.in)
		if err != nil || ref.CRS.ID != c.id || ref.CRS.Method != c.method {
			t.Errorf("%q: %+v, %v", c.in, ref.CRS, err)
		}
		if ref.Geographic != (ref.Projection == nil) || ref.Geographic != (c.method == "geographic") || ref.Plane != (c.method == "plane") {
			t.Errorf("%q: %+v", c.in, ref)
		}
		if ref.Projection != nil && ref.Projection.CRS() != ref.CRS {
			t.Errorf("%q: two CRS: %+v and %+v", c.in, ref.CRS, ref.Projection.CRS())
		}
	}
	for _, c := range []struct {
		in, says string
		kind     error
	}{
		{"EPSG:27700", "OSGB36", spatial.ErrCRSUnsupported}, {"EPSG:28992", "Amersfoort", spatial.ErrCRSUnsupported},
		{"EPSG:31370", "BD72", spatial.ErrCRSUnsupported}, {"EPSG:5514", "Krovak", spatial.ErrCRSUnsupported},
		{"EPSG:2263", "feet", spatial.ErrCRSUnsupported}, {"EPSG:3031", "stereographic", spatial.ErrCRSUnsupported},
		{"EPSG:32600", "UTM", spatial.ErrCRSUnknown}, {"EPSG:32661", "stereographic", spatial.ErrCRSUnsupported},
		{"EPSG:25827", "UTM", spatial.ErrCRSUnknown}, {"EPSG:26924", "UTM", spatial.ErrCRSUnknown}, {"EPSG:-1", "UTM", spatial.ErrCRSUnknown},
		{"EPSG:", "EPSG:n", spatial.ErrCRSUnknown}, {"", "EPSG:n", spatial.ErrCRSUnknown}, {"wgs84", "EPSG:n", spatial.ErrCRSUnknown},
		{"EPSG:99999999999999999999", "EPSG:n", spatial.ErrCRSUnknown}, {"urn:ogc:def:crs:", "EPSG:n", spatial.ErrCRSUnknown},
	} {
		if _, err := spatial.ParseCRS(c.in); !errors.Is(err, c.kind) || !strings.Contains(err.Error(), c.says) {
			t.Errorf("%q: %v", c.in, err)
		}
	}
}

func TestNewProjectionRefuses(t *testing.T) {
	for _, c := range []spatial.CRS{
		{}, {Method: "LAEA"}, {Method: "LAEA", Ellipsoid: "Everest"}, {Method: "Krovak", Ellipsoid: "GRS 80"},
		{Method: "LAEA", Ellipsoid: "GRS 80", Lat0: 91}, {Method: "LAEA", Ellipsoid: "GRS 80", Lon0: math.NaN()},
		{Method: "TM", Ellipsoid: "GRS 80"}, {Method: "TM", Ellipsoid: "GRS 80", K0: -1}, {Method: "TM", Ellipsoid: "GRS 80", K0: 1, FE: math.Inf(1)},
		{Method: "AEA", Ellipsoid: "GRS 80"}, {Method: "AEA", Ellipsoid: "GRS 80", Lat1: 30, Lat2: -30}, {Method: "LCC", Ellipsoid: "GRS 80", Lat1: 90, Lat2: 90},
		{Method: "LCC", Ellipsoid: "GRS 80", Lat0: -90, Lat1: 30, Lat2: 60}, {Method: "geographic", Ellipsoid: "WGS 84"},
	} {
		if p, err := spatial.NewProjection(c); err == nil {
			t.Errorf("%+v gives %v", c, p)
		}
	}
	for name, p := range everyMethod(t) {
		q, err := spatial.NewProjection(p.CRS())
		if err != nil || q.CRS() != p.CRS() {
			t.Errorf("%s does not come back from its own CRS: %v", name, err)
		}
	}
}

func FuzzProjections(f *testing.F) {
	f.Add(0.0, 0.0, 0.0, 0.0, "EPSG:3035")
	f.Add(180.0, -90.0, 1e300, math.Inf(-1), "urn:ogc:def:crs:EPSG::32601")
	f.Add(math.NaN(), 91.0, -4e7, 1e7, "plane")
	ps := everyMethod(f)
	f.Fuzz(func(t *testing.T, lon, lat, x, y float64, crs string) {
		_, _ = spatial.ParseCRS(crs)
		_ = spatial.AutoPlane(lon, lat).CRS()
		_, _ = spatial.ChooseCentre(lon, x, lat, y)
		var c spatial.CentreCounter
		c.Add(spatial.LonLats{Lon: []float64{lon, x}, Lat: []float64{lat, y}})
		_, _ = c.Centre()
		for name, p := range ps {
			g := p.Inverse(spatial.XYs{X: []float64{x}, Y: []float64{y}})
			if math.IsNaN(g.Lon[0]) != math.IsNaN(g.Lat[0]) || math.Abs(g.Lat[0]) > 90.0000001 {
				t.Fatalf("%s back from %g, %g: %g, %g", name, x, y, g.Lon[0], g.Lat[0])
			}
			q := p.Forward(spatial.LonLats{Lon: []float64{lon}, Lat: []float64{lat}})
			if math.IsNaN(q.X[0]) != math.IsNaN(q.Y[0]) || math.IsInf(q.X[0], 0) || math.IsInf(q.Y[0], 0) {
				t.Fatalf("%s at %g, %g: %g, %g", name, lon, lat, q.X[0], q.Y[0])
			}
		}
	})
}

func ExampleProjection() {
	ref, err := spatial.ParseCRS("EPSG:3035")
	if err != nil {
		fmt.Println(err)
		return
	}
	at := spatial.LonLats{Lon: []float64{5}, Lat: []float64{50}}
	xy := ref.Projection.Forward(at)
	fmt.Printf("%.2f %.2f\n", xy.X[0], xy.Y[0])
	back := ref.Projection.Inverse(xy)
	fmt.Printf("%.6f %.6f\n", back.Lon[0], back.Lat[0])
	// Output:
	// 3962799.45 2999718.85
	// 5.000000 50.000000
}
