package spatial_test

import (
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/mv"
	"drumlin/spatial"

	"github.com/paulmach/orb"
	"github.com/peterstace/simplefeatures/geom"
)

// normal is one component of a mixture: weight, mean, variances, correlation.
type normal struct{ w, mx, my, vx, vy, rho float64 }

// mixture is a density in closed form (METHODS.md section 3).
type mixture []normal

func (m mixture) at(x, y float64) float64 {
	var sum float64
	for _, c := range m {
		sx, sy := math.Sqrt(c.vx), math.Sqrt(c.vy)
		u, v := (x-c.mx)/sx, (y-c.my)/sy
		q := 1 - c.rho*c.rho
		sum += c.w * math.Exp(-(u*u-2*c.rho*u*v+v*v)/(2*q)) / (2 * math.Pi * sx * sy * math.Sqrt(q))
	}
	return sum
}

func (m mixture) draw(r *rand.Rand) (x, y float64) {
	u := r.Float64()
	c := m[len(m)-1]
	for _, k := range m {
		if u < k.w {
			c = k
			break
		}
		u -= k.w
	}
	a, b := r.NormFloat64(), r.NormFloat64()
	return c.mx + math.Sqrt(c.vx)*a, c.my + math.Sqrt(c.vy)*(c.rho*a+math.Sqrt(1-c.rho*c.rho)*b)
}

// grid evaluates the mixture on a square lattice; step scales the unit, so
// density is per squared unit of the lattice.
func (m mixture) grid(lo, hi float64, n int, unit float64) mv.Grid {
	step := (hi - lo) / float64(n-1)
	l, err := mv.NewLattice([]float64{lo * unit, lo * unit}, []float64{step * unit, step * unit}, []int{n, n})
	if err != nil {
		panic(err)
	}
	g := mv.NewGrid(l)
	for j := range n {
		for i := range n {
			g.Values[j*n+i] = m.at(lo+step*float64(i), lo+step*float64(j)) / unit / unit
		}
	}
	return g
}

var (
	targetB = mixture{{1, 0, 0, 1, 1, .7}}
	targetE = mixture{{.5, -1, 0, 4. / 9, 4. / 9, 0}, {.5, 1, 0, 4. / 9, 4. / 9, 0}}
	targetH = mixture{{.5, 1, -1, 4. / 9, 4. / 9, .7}, {.5, -1, 1, 4. / 9, 4. / 9, 0}}
	targetI = mixture{{.45, -1.2, 1.2, .36, .36, .3}, {.45, 1.2, -1.2, .36, .36, -.6}, {.1, 0, 0, 1. / 16, 1. / 16, .2}}
)

// targetRing is RING of METHODS.md section 5.
func targetRing() mixture {
	var m mixture
	for k := range 12 {
		a := float64(k) * math.Pi / 6
		m = append(m, normal{1. / 12, 2 * math.Cos(a), 2 * math.Sin(a), .16, .16, 0})
	}
	return m
}

// randomMixture is a seeded mixture of narrow and broad bumps in about [-3, 3].
func randomMixture(r *rand.Rand) mixture {
	n := 1 + r.IntN(9)
	m := make(mixture, n)
	for k := range m {
		s := math.Exp(-1.9 + 1.6*r.Float64())
		e := math.Exp(.8 * (r.Float64() - .5))
		m[k] = normal{1 / float64(n), 3 * (2*r.Float64() - 1), 3 * (2*r.Float64() - 1), s * s * e, s * s / e, 1.6 * (r.Float64() - .5)}
	}
	return m
}

// tilt is a stand-in projection: degrees proportional to metres around a
// place, cheap and exact to invert.
type tilt struct{ lon, lat float64 }

const metresPerDegree = 111_000

func (p tilt) CRS() spatial.CRS { return spatial.CRS{Name: "test", Method: "test"} }
func (p tilt) EqualArea() bool  { return true }
func (p tilt) Forward(q spatial.LonLats) spatial.XYs {
	for i := range q.Lon {
		q.Lon[i], q.Lat[i] = (q.Lon[i]-p.lon)*metresPerDegree, (q.Lat[i]-p.lat)*metresPerDegree
	}
	return spatial.XYs{X: q.Lon, Y: q.Lat}
}

func (p tilt) Inverse(q spatial.XYs) spatial.LonLats {
	for i := range q.X {
		q.X[i], q.Y[i] = p.lon+q.X[i]/metresPerDegree, p.lat+q.Y[i]/metresPerDegree
	}
	return spatial.LonLats{Lon: q.X, Lat: q.Y}
}

// planeToOrb closes the rings of a plane shape.
func planeToOrb(mp spatial.MultiPolygon) orb.MultiPolygon {
	var out orb.MultiPolygon
	for _, p := range mp {
		var q orb.Polygon
		for _, r := range p {
			var ring orb.Ring
			for _, v := range r {
				ring = append(ring, orb.Point{v.X, v.Y})
			}
			q = append(q, append(ring, ring[0]))
		}
		out = append(out, q)
	}
	return out
}

// toGeom builds the shape for the validity judge, without its checks.
func toGeom(mp orb.MultiPolygon) geom.MultiPolygon {
	var ps []geom.Polygon
	for _, p := range mp {
		var rings []geom.LineString
		for _, r := range p {
			xy := make([]float64, 0, 2*len(r))
			for _, v := range r {
				xy = append(xy, v[0], v[1])
			}
			rings = append(rings, geom.NewLineString(geom.NewSequence(xy, geom.DimXY)))
		}
		ps = append(ps, geom.NewPolygon(rings))
	}
	return geom.NewMultiPolygon(ps)
}

// judge fails the test unless the shape is valid and its rings are closed,
// long enough, and turn the way RFC 7946 wants.
func judge(t testing.TB, mp orb.MultiPolygon, what string) {
	t.Helper()
	if err := toGeom(mp).Validate(); err != nil {
		t.Fatalf("%s: not valid: %v", what, err)
	}
	for _, p := range mp {
		for n, r := range p {
			if len(r) < 4 || r[0] != r[len(r)-1] {
				t.Fatalf("%s: ring of %d positions, closed %v", what, len(r), r[0] == r[len(r)-1])
			}
			var a float64
			for i := range r[1:] {
				a += (r[i][0]-r[0][0])*(r[i+1][1]-r[0][1]) - (r[i+1][0]-r[0][0])*(r[i][1]-r[0][1])
			}
			if (a > 0) != (n == 0) || a == 0 {
				t.Fatalf("%s: ring %d has signed area %g", what, n, a/2)
			}
		}
	}
}

// lines draws isolines or fails.
func lines(t testing.TB, g mv.Grid, levels []float64, opt spatial.IsolineOptions) *spatial.Isolines {
	t.Helper()
	s, err := spatial.NewIsolines(g, levels, opt)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func nearly(t testing.TB, what string, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s = %.10g, want %.10g within %g", what, got, want, tol)
	}
}
