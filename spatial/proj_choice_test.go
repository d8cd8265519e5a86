package spatial_test

import (
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/spatial"
)

func TestAutoPlane(t *testing.T) {
	for _, c := range []struct {
		lon, lat   float64
		name       string
		lon0, lat0 float64
	}{
		{178.3, -20.6, "178E 21S", 178, -21}, {-180, 0, "180E 0N", 180, 0}, {359.6, 12.5, "0E 13N", 0, 13},
		{-0.2, -0.4, "0E 0N", 0, 0}, {-87.5, 41.9, "87W 42N", -87, 42}, {10, 93, "10E 90N", 10, 90}, {math.NaN(), math.NaN(), "0E 0N", 0, 0},
	} {
		crs := spatial.AutoPlane(c.lon, c.lat).CRS()
		if want := "Lambert azimuthal equal-area, centre " + c.name + ", WGS 84"; crs.Name != want || crs.Lon0 != c.lon0 || crs.Lat0 != c.lat0 {
			t.Errorf("%g, %g: %+v, want %s", c.lon, c.lat, crs, want)
		}
		if crs.Method != "LAEA" || crs.ID != "" || crs.FE != 0 || crs.FN != 0 || math.Signbit(crs.Lon0) != (c.lon0 < 0) || math.Signbit(crs.Lat0) != (c.lat0 < 0) {
			t.Errorf("%+v", crs)
		}
	}
}

func TestChooseCentre(t *testing.T) {
	for _, c := range []struct {
		lonMin, lonMax, latMin, latMax float64
		want                           spatial.LonLat
		ok                             bool
	}{
		{-0.5, 0.3, 51.3, 51.7, spatial.LonLat{Lon: 0, Lat: 52}, true},
		{177, 182, -20, -16, spatial.LonLat{Lon: 180, Lat: -18}, true},
		{190, 200, 0, 0, spatial.LonLat{Lon: -165, Lat: 0}, true},
		{0, 20, 30, 50, spatial.LonLat{Lon: 10, Lat: 40}, true},
		{0, 20.1, 30, 50, spatial.LonLat{}, false}, {-179, 179, -20, -16, spatial.LonLat{}, false},
		{1, 0, 0, 1, spatial.LonLat{}, false}, {math.NaN(), 1, 0, 1, spatial.LonLat{}, false}, {0, 1, 80, 91, spatial.LonLat{}, false},
	} {
		if got, ok := spatial.ChooseCentre(c.lonMin, c.lonMax, c.latMin, c.latMax); got != c.want || ok != c.ok {
			t.Errorf("%g %g %g %g: %v %v, want %v %v", c.lonMin, c.lonMax, c.latMin, c.latMax, got, ok, c.want, c.ok)
		}
	}
}

func count(lon, lat []float64) *spatial.CentreCounter {
	var c spatial.CentreCounter
	c.Add(spatial.LonLats{Lon: lon, Lat: lat})
	return &c
}

func TestCentreCounter(t *testing.T) {
	same := func(v float64, n int) []float64 {
		s := make([]float64, n)
		for i := range s {
			s[i] = v
		}
		return s
	}
	for _, c := range []struct {
		what     string
		lon, lat []float64
		want     spatial.LonLat
	}{
		{"one", []float64{12.3}, []float64{-45.6}, spatial.LonLat{Lon: 12, Lat: -46}},
		{"both sides of the antimeridian", []float64{179, -179}, []float64{-17, -18}, spatial.LonLat{Lon: 180, Lat: -17}},
		{"mostly east of it", []float64{179, 179, -178}, []float64{-17, -17, -17}, spatial.LonLat{Lon: 179, Lat: -17}},
		{"mostly west of it", []float64{179, -178, -178}, []float64{-17, -17, -17}, spatial.LonLat{Lon: -178, Lat: -17}},
		{"longitudes past 180", []float64{181, 182, 183}, []float64{0, 0, 0}, spatial.LonLat{Lon: -178, Lat: 0}},
		{"a cluster and strays", append(same(24, 60), -150, -120, -90, 0, 90, 150, 0, 0, 0), append(same(60, 60), same(0, 9)...), spatial.LonLat{Lon: 24, Lat: 60}},
		{"null island is no magnet", append(same(-87.6, 55), same(0, 45)...), append(same(41.9, 55), same(0, 45)...), spatial.LonLat{Lon: -88, Lat: 42}},
		{"poles", []float64{0, 0, 0}, []float64{90, 90, -90}, spatial.LonLat{Lon: 0, Lat: 90}},
		{"opposite places tie all round", []float64{0, 180}, []float64{0, 0}, spatial.LonLat{Lon: 0, Lat: 0}},
		{"two far apart", []float64{-10, 10}, []float64{10, -10}, spatial.LonLat{Lon: 0, Lat: 0}},
	} {
		got, ok := count(c.lon, c.lat).Centre()
		if !ok || got != c.want {
			t.Errorf("%s: %v, want %v", c.what, got, c.want)
		}
	}
	c := count([]float64{math.NaN(), 0, 0, math.Inf(1), 541}, []float64{0, math.NaN(), 91, 0, 0})
	if _, ok := c.Centre(); ok || c.Count() != 0 {
		t.Errorf("positions off the globe were counted: %d", c.Count())
	}
}

// TestCentreCounterTurns: turning the globe turns the centre, and neither the
// order of the events nor their split matters.
func TestCentreCounterTurns(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 6))
	const n = 999
	lon, lat := make([]float64, n), make([]float64, n)
	for i := range lon {
		lon[i], lat[i] = math.Floor(20*r.NormFloat64()), 60*r.Float64()
	}
	first, _ := count(lon, lat).Centre()
	for turn := -180.0; turn <= 180; turn += 45 {
		moved := make([]float64, n)
		for i := range lon {
			moved[i] = math.Remainder(lon[i]+turn, 360)
		}
		a, b := count(moved[:300], lat[:300]), count(moved[300:], lat[300:])
		b.Merge(a)
		got, _ := b.Centre()
		if math.Remainder(got.Lon-first.Lon-turn, 360) != 0 || got.Lat != first.Lat || b.Count() != n {
			t.Errorf("turned by %g: %v, want %v turned", turn, got, first)
		}
	}
}

func TestDistortion(t *testing.T) {
	check := func(what string, got, want, tolerance float64) {
		t.Helper()
		if !(math.Abs(got-want) <= tolerance) {
			t.Errorf("%s: %.10f, want %.10f within %g", what, got, want, tolerance)
		}
	}
	utm := spatial.Distortion(lookup(t, "EPSG:32631"), spatial.LonLat{Lon: 3, Lat: 51.5})
	check("UTM meridian scale", utm.MaxScale, 0.9996, 1e-9)
	check("UTM meridian scale", utm.MinScale, 0.9996, 1e-9)
	check("UTM meridian area", utm.AreaScale, 0.99920016, 1e-9) // k0², METHODS 10.4
	check("UTM angles", utm.Angular, 0, 1e-5)
	web := spatial.Distortion(lookup(t, "EPSG:3857"), spatial.LonLat{Lon: 3, Lat: 0})
	check("web Mercator along the equator", web.MinScale, 1, 1e-9)
	check("web Mercator along the meridian", web.MaxScale, 1/(1-0.00669437999014), 1e-9) // a/M = 1/(1-e²)
	for _, p := range []spatial.Projection{spatial.AutoPlane(-100, 40), lookup(t, "EPSG:5070"), lookup(t, "EPSG:6932"), lookup(t, "EPSG:3577")} {
		lon0, lat0 := p.CRS().Lon0, p.CRS().Lat0
		for _, off := range []float64{0, 5, 20, 60} {
			at := spatial.LonLat{Lon: lon0 + off, Lat: math.Copysign(math.Abs(lat0)-off/2, lat0)}
			d := spatial.Distortion(p, at)
			check(fmt.Sprint(p.CRS().Name, at, " area"), d.AreaScale, 1, 1e-8)
			check("product", d.MaxScale*d.MinScale, d.AreaScale, 1e-12)
		}
	}
	// Snyder 1987, table 28, sphere: LAEA at 20 degrees off the centre has
	// k = 1/cos 10°, h = cos 10°; on the ellipsoid within its flattening.
	d := spatial.Distortion(spatial.AutoPlane(0, 90), spatial.LonLat{Lon: 0, Lat: 70})
	check("LAEA at 20 degrees", d.MaxScale, 1/math.Cos(math.Pi/18), 1e-3)
	check("widestBounds promises less than 2 degrees", min(d.Angular, 2), d.Angular, 0)
	if d := spatial.Distortion(lookup(t, "plane"), spatial.LonLat{Lon: 5e5, Lat: 1e6}); d != (spatial.Distort{MaxScale: 1, MinScale: 1, AreaScale: 1}) {
		t.Errorf("plane: %v", d)
	}
	if d := spatial.Distortion(lookup(t, "EPSG:32631"), spatial.LonLat{Lon: 100, Lat: 0}); !math.IsNaN(d.AreaScale) || !math.IsNaN(d.MaxScale) {
		t.Errorf("outside: %v", d)
	}
}

func ExampleAutoPlane() {
	p := spatial.AutoPlane(178.4, -18.1)
	fmt.Println(p.CRS().Name)
	fmt.Println(spatial.Distortion(p, spatial.LonLat{Lon: -178, Lat: -18}))
	// Output:
	// Lambert azimuthal equal-area, centre 178E 18S, WGS 84
	// scale 0.999447 to 1.000553, angles up to 0.063 degrees, areas times 1.000000
}

func ExampleCentreCounter() {
	var c spatial.CentreCounter
	c.Add(spatial.LonLats{Lon: []float64{179.2, 178.9}, Lat: []float64{-17, -18}})
	var other spatial.CentreCounter
	other.Add(spatial.LonLats{Lon: []float64{-179.1, 2.3}, Lat: []float64{-16, -16}})
	c.Merge(&other)
	centre, ok := c.Centre()
	fmt.Println(centre, ok)
	// Output:
	// {179 -16} true
}
