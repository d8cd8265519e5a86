package spatial

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"github.com/paulmach/orb"
)

// ErrUnsupportedGeometry reports a shape that cannot be written in degrees: it
// leaves the projection's domain or goes around a pole more than once.
var ErrUnsupportedGeometry = errors.New("geometry not supported")

// errTouch reports rings that meet after rounding.
var errTouch = errors.New("rings touch or cross after rounding")

// gridPoint is a rounded position: units of 1e-7 degree, or of a millimetre on
// a plane without a place. Whole numbers make every later test exact.
type gridPoint struct{ x, y int64 }

// gridRing is a ring of rounded positions, the first not repeated, none equal
// to the one before.
type gridRing []gridPoint

const (
	degreeUnits = 1e7
	metreUnits  = 1e3
	turn        = int64(360 * degreeUnits)
)

// ToShape takes polygons from the plane to degrees as RFC 7946 wants them:
// seven decimals, closed, exterior rings anticlockwise and holes clockwise, no
// repeated positions, cut at the antimeridian into parts within [-180, 180].
// Rings that vanish in rounding are dropped. Chords that would bend by more
// than a thousandth of their length (plus 1e-7 degree) get more vertices, the
// same whichever way the ring runs. On a plane without a place the numbers
// stay metres, rounded to a millimetre, and nothing is cut.
//
// Errors: ErrUnsupportedGeometry for a ring outside the projection's domain or
// more than once around a pole; an error when rings meet each other after rounding, so
// what comes back is valid in the sense of OGC Simple Features as long as the
// holes of mp lie inside their exteriors. A polygon around a pole gets the pole
// as a side, from -180 to 180 at latitude 90. Cost: one inverse per vertex plus
// O(n log n).
func ToShape(mp MultiPolygon, proj Projection) (orb.MultiPolygon, error) {
	return toShape(mp, proj, false)
}

// toShape is ToShape; with lax, rings may touch (a study area's border may).
func toShape(mp MultiPolygon, proj Projection, lax bool) (orb.MultiPolygon, error) {
	var rings []Ring
	for _, p := range mp {
		rings = append(rings, p...)
	}
	grid, err := roundAll(rings, proj, lax)
	if err != nil {
		return nil, err
	}
	if !lax {
		if err := checkRings(grid); err != nil {
			return nil, fmt.Errorf("spatial: shape: %w", err)
		}
	}
	o := make(outline, len(mp))
	n := int32(0)
	for i, p := range mp {
		for range p {
			o[i] = append(o[i], n)
			n++
		}
	}
	return assemble(o, grid, proj)
}

// roundRings takes rings to rounded degrees (or millimetres), all vertices in
// one call of Inverse. A ring that vanishes becomes nil. Longitudes of a ring
// are continuous.
func roundRings(rings []Ring, proj Projection) ([]gridRing, error) {
	return roundAll(rings, proj, false)
}

// roundAll is roundRings; with shared, stretches that rings have in common come
// out the same in all of them.
func roundAll(rings []Ring, proj Projection, shared bool) ([]gridRing, error) {
	out := make([]gridRing, len(rings))
	if proj.CRS().Method == "plane" {
		for r, ring := range rings {
			g := make(gridRing, len(ring))
			for i, p := range ring {
				g[i] = gridPoint{int64(math.Round(p.X * metreUnits)), int64(math.Round(p.Y * metreUnits))}
			}
			out[r] = tidy(g)
		}
		return out, nil
	}
	var n int
	for _, ring := range rings {
		n += len(ring)
	}
	xy := XYs{X: make([]float64, 0, n), Y: make([]float64, 0, n)}
	for _, ring := range rings {
		for _, p := range ring {
			xy.X, xy.Y = append(xy.X, p.X), append(xy.Y, p.Y)
		}
	}
	ll := proj.Inverse(xy)
	b := newBender(proj)
	b.all = shared
	first := 0
	for r, ring := range rings {
		lon, lat := ll.Lon[first:first+len(ring)], ll.Lat[first:first+len(ring)]
		first += len(ring)
		g, err := b.ring(ring, lon, lat)
		if err != nil {
			return nil, err
		}
		if g.winds() && ring.Area() < 0 {
			slices.Reverse(g)
		}
		out[r] = tidy(g)
	}
	return out, nil
}

// tidy drops repeated positions, and returns nil if no area is left.
func tidy(g gridRing) gridRing {
	out := g[:0]
	for _, p := range g {
		if len(out) == 0 || out[len(out)-1] != p {
			out = append(out, p)
		}
	}
	for len(out) > 1 && out[0] == out[len(out)-1] {
		out = out[:len(out)-1]
	}
	if len(out) < 3 || out.area() == 0 && !out.winds() {
		return nil
	}
	return out
}

// area returns twice the signed area in squared units. Sums of products of
// differences below 2^53 are exact for any ring of a map's detail; the sign is
// what matters here.
func (g gridRing) area() float64 {
	var sum float64
	o := g[0]
	for i := 1; i+1 < len(g); i++ {
		sum += float64(g[i].x-o.x)*float64(g[i+1].y-o.y) - float64(g[i+1].x-o.x)*float64(g[i].y-o.y)
	}
	return sum
}

// oriented returns the ring anticlockwise or clockwise, from its first vertex.
// A ring around a pole comes from roundRings anticlockwise.
func (g gridRing) oriented(anticlockwise bool) gridRing {
	if g.winds() {
		if !anticlockwise {
			g = slices.Clone(g)
			slices.Reverse(g)
		}
		return g
	}
	if (g.area() > 0) == anticlockwise {
		return g
	}
	out := make(gridRing, len(g))
	out[0] = g[0]
	for i := 1; i < len(g); i++ {
		out[i] = g[len(g)-i]
	}
	return out
}

func (g gridRing) rangeX() (lo, hi int64) {
	lo, hi = g[0].x, g[0].x
	for _, p := range g {
		lo, hi = min(lo, p.x), max(hi, p.x)
	}
	return lo, hi
}

// assemble makes the shape of an outline from its rings in rounded units.
func assemble(o outline, rings []gridRing, proj Projection) (orb.MultiPolygon, error) {
	plane := proj.CRS().Method == "plane"
	unit := degreeUnits
	if plane {
		unit = metreUnits
	}
	out := make(orb.MultiPolygon, 0, len(o))
	var parts []gridPolygon
	anyCut := false
	for _, ids := range o {
		if rings[ids[0]] == nil {
			continue
		}
		p := gridPolygon{rings[ids[0]].oriented(true)}
		lo, hi := p[0].rangeX()
		for _, id := range ids[1:] {
			h := rings[id]
			if h == nil {
				continue
			}
			if !plane {
				h = h.beside(lo, hi)
			}
			p = append(p, h.oriented(false))
		}
		if plane {
			parts = append(parts, p)
			continue
		}
		cut, err := p.cutWorld()
		if err != nil {
			return nil, fmt.Errorf("spatial: cut at the antimeridian: %w", err)
		}
		anyCut = anyCut || len(cut) > 1 || p[0].winds()
		parts = append(parts, cut...)
	}
	if anyCut {
		var all []gridRing
		for _, p := range parts {
			all = append(all, p...)
		}
		if err := checkRings(all); err != nil {
			return nil, fmt.Errorf("spatial: cut at the antimeridian: %w", err)
		}
	}
	for _, p := range parts {
		poly := make(orb.Polygon, len(p))
		for i, r := range p {
			ring := make(orb.Ring, len(r)+1)
			for n, v := range r {
				ring[n] = orb.Point{float64(v.x) / unit, float64(v.y) / unit}
			}
			ring[len(r)] = ring[0]
			poly[i] = ring
		}
		out = append(out, poly)
	}
	return out, nil
}

// beside returns the ring shifted by whole turns so that it lies over [lo, hi].
func (g gridRing) beside(lo, hi int64) gridRing {
	a, b := g.rangeX()
	k := int64(math.Round(float64((lo+hi)-(a+b)) / 2 / float64(turn)))
	if k == 0 || a >= lo && b <= hi {
		return g
	}
	return g.shifted(k * turn)
}

func (g gridRing) shifted(by int64) gridRing {
	if by == 0 {
		return g
	}
	out := make(gridRing, len(g))
	for i, p := range g {
		out[i] = gridPoint{p.x + by, p.y}
	}
	return out
}
