package spatial_test

import (
	"fmt"
	"math"
	"testing"

	"drumlin/spatial"
)

func byName(t testing.TB, name string) *spatial.Ellipsoid {
	t.Helper()
	e, ok := spatial.EllipsoidByName(name)
	if !ok {
		t.Fatalf("no ellipsoid %q", name)
	}
	return e
}

// TestEllipsoidSizes: METHODS 10.4.
func TestEllipsoidSizes(t *testing.T) {
	for _, c := range []struct {
		name                   string
		area, radius, quadrant float64
	}{
		{"WGS 84", 510065621724088.5, 6371007.1809185, 10001965.729313},
		{"GRS 80", 510065621718491.2, 6371007.1808835, 10001965.729230},
	} {
		e := byName(t, c.name)
		if math.Abs(e.Area()/c.area-1) > 1e-14 || math.Abs(e.AuthalicRadius()-c.radius) > 1e-7 || math.Abs(e.MeridianQuadrant()-c.quadrant) > 1e-6 {
			t.Errorf("%s: area %.1f, radius %.7f, quadrant %.6f", c.name, e.Area(), e.AuthalicRadius(), e.MeridianQuadrant())
		}
	}
}

// TestAuxiliaryLatitudes holds the series against the closed forms: q of
// Snyder 3-12 for the authalic latitude, 3-1 for the conformal one.
func TestAuxiliaryLatitudes(t *testing.T) {
	for _, name := range []string{"WGS 84", "Clarke 1866", "Krassowsky 1940"} {
		e := byName(t, name)
		f := e.Flattening()
		ec := math.Sqrt(f * (2 - f))
		q := func(s float64) float64 {
			return (1 - ec*ec) * (s/(1-ec*ec*s*s) + math.Atanh(ec*s)/ec)
		}
		for lat := -90.0; lat <= 90; lat += 0.25 {
			phi := lat * math.Pi / 180
			s, c := math.Sincos(phi)
			sb, cb := spatial.AuthalicPair(e, s, c)
			if want := q(s) / q(1); math.Abs(sb-want) > 4e-16 {
				t.Errorf("%s %g: sin β %.17g, want %.17g", name, lat, sb, want)
			}
			if d := sb*sb + cb*cb - 1; math.Abs(d) > 1e-15 {
				t.Errorf("%s %g: sin² + cos² - 1 = %g", name, lat, d)
			}
			if got := spatial.BackFromAuthalic(e, sb, cb); math.Abs(got-phi) > 1e-15 {
				t.Errorf("%s %g: back from authalic off by %g", name, lat, got-phi)
			}
			if math.Abs(lat) == 90 {
				continue
			}
			tau := math.Sinh(math.Asinh(s/c) - ec*math.Atanh(ec*s))
			if got := spatial.BackFromConformal(e, tau, 1); math.Abs(got-phi) > 1e-15 {
				t.Errorf("%s %g: back from conformal off by %g", name, lat, got-phi)
			}
		}
	}
}

// TestKrueger holds the order-6 coefficients against the Fourier coefficients
// of rectifying less conformal latitude, by quadrature to 30 digits (WGS 84).
// The seventh, which is left out, is 4.11e-20: with cosh 14η' at η' = 0.9, the
// edge of the domain, that is 3.9e-8 m. The sixth lacks its own terms in n^7 and
// on, 1.7e-8 m there: together below the 1e-7 m that the projection promises.
func TestKrueger(t *testing.T) {
	want := [6]float64{
		0.00083773182062446983, 7.60852777357248916e-7, 1.1976455032424921e-9,
		2.42917068039731315e-12, 5.71181836915410392e-15, 1.47999802705256198e-17,
	}
	for j, got := range spatial.Krueger(byName(t, "WGS 84")) {
		// What is cut from coefficient j at order 7, weighed with cosh 2jη'.
		if off := math.Abs(got-want[j]) * math.Cosh(1.8*float64(j+1)) * 6378137; off > 2e-8 {
			t.Errorf("coefficient %d: %.17g, want %.17g, %.2g m", j+1, got, want[j], off)
		}
	}
}

func TestNewEllipsoidRefuses(t *testing.T) {
	for _, c := range [][2]float64{{0, 298}, {-1, 298}, {math.NaN(), 298}, {6e6, 100}, {6e6, -298}, {6e6, math.NaN()}, {math.Inf(1), 0}, {6e6, math.Inf(1)}} {
		if _, err := spatial.NewEllipsoid("wrong", c[0], c[1]); err == nil {
			t.Errorf("a = %g, 1/f = %g was taken", c[0], c[1])
		}
	}
	if e := ellipsoid(t, "ball", 2, 0); math.Abs(e.Area()-16*math.Pi) > 1e-13 || e.Name() != "ball" || e.SemiMajor() != 2 {
		t.Errorf("sphere of radius 2: %g", e.Area())
	}
	if _, ok := spatial.EllipsoidByName("Everest"); ok {
		t.Error("Everest is known")
	}
}

func ExampleEllipsoid() {
	e, _ := spatial.EllipsoidByName("WGS 84")
	fmt.Printf("%s: %.0f km², authalic radius %.3f m\n", e.Name(), e.Area()/1e6, e.AuthalicRadius())
	// Output:
	// WGS 84: 510065622 km², authalic radius 6371007.181 m
}
