package spatial

import (
	"math"

	"github.com/paulmach/orb"
)

// EllipsoidArea returns the area in square metres, on WGS 84, of polygons in
// degrees whose edges are straight in longitude and latitude, as RFC 7946 has
// them. Holes are taken off whatever way rings are wound. Longitudes are used
// as they stand: a polygon across the antimeridian is either cut there or runs
// on past 180. Good to about 1e-12 of the area, and 1e-8 m² for small rings.
func EllipsoidArea(m orb.MultiPolygon) float64 {
	var sum float64
	for _, polygon := range m {
		for i, ring := range polygon {
			a := math.Abs(EllipsoidRingArea(ring))
			if i > 0 {
				a = -a
			}
			sum += a
		}
	}
	return sum
}

// EllipsoidRingArea is the signed area of one ring in square metres, positive
// when it runs anticlockwise. The ring may repeat its first position or not.
//
// The authalic cylinder keeps areas, so the area is the integral of
// Rq² sin β(φ) dλ around the ring. Along a straight edge φ is linear in λ:
// each edge gives its Δλ times the mean of sin β over its latitudes, by
// five-point Gauss-Legendre quadrature on steps of at most half a radian,
// whose error is below rounding.
func EllipsoidRingArea(r orb.Ring) float64 {
	if len(r) < 3 {
		return 0
	}
	e := wgs84
	// Heights are counted from the first position, so that small rings do not
	// become differences of large strips.
	base, _ := e.authalic(sincosDegrees(r[0].Lat()))
	var sum float64
	last := r[len(r)-1]
	for _, p := range r {
		if d := p.Lon() - last.Lon(); d != 0 {
			sum -= d * (e.meanAuthalicSine(last.Lat()*radians, p.Lat()*radians) - base)
		}
		last = p
	}
	return sum * radians * e.rq * e.rq
}

// gaussLegendre holds the nodes on [-1, 1] and weights of five points.
var gaussLegendre = [5][2]float64{
	{0, 128. / 225},
	{0.5384693101056831, 0.47862867049936647},
	{-0.5384693101056831, 0.47862867049936647},
	{0.9061798459386640, 0.23692688505618908},
	{-0.9061798459386640, 0.23692688505618908},
}

// meanAuthalicSine is the mean of sin β over latitudes from a to b in radians.
func (e *Ellipsoid) meanAuthalicSine(a, b float64) float64 {
	if a == b {
		s, _ := e.authalic(math.Sincos(a))
		return s
	}
	steps := math.Ceil(math.Abs(b-a) / 0.5)
	half := (b - a) / steps / 2
	var sum float64
	for i := 0.0; i < steps; i++ {
		mid := a + (2*i+1)*half
		for _, g := range gaussLegendre {
			s, _ := e.authalic(math.Sincos(mid + half*g[0]))
			sum += g[1] * s
		}
	}
	return sum / (2 * steps)
}
