package spatial

import (
	"errors"
	"fmt"
	"math"
	"slices"

	"github.com/paulmach/orb"
	"github.com/peterstace/simplefeatures/geom"
)

// ErrStudyArea reports polygons that cannot be a study area.
var ErrStudyArea = errors.New("study area not usable")

// StudyArea is where events could be observed: polygons with holes on the plane
// of the estimate. Immutable and safe to share.
type StudyArea struct {
	plane MultiPolygon
	rings []Ring // all of them, the area on the left
	area  float64
	lo    XY
	hi    XY
	unit  float64   // positions are whole multiples of it, a power of two
	whole [][]point // rings in units
	find  *locator
}

// point is a position in whole units of a StudyArea.
type point = gridPoint

const (
	areaBits    = 36     // of a position in units
	borderBend  = 0.1    // metres by which a straight border in degrees may be missed
	borderParts = 1 << 9 // at most that many parts of one side
)

// NewStudyArea takes polygons in degrees (metres for a plane without a place)
// to the plane. Every polygon must be valid in the sense of OGC Simple Features;
// the error says what is wrong and where. Polygons that overlap or share a side
// become one, as does an area cut at the antimeridian. Sides, straight in
// degrees, get more vertices where the plane bends them by more than 0.1 m.
//
// Errors: ErrStudyArea; ErrUnsupportedGeometry for a place outside the
// projection's domain.
func NewStudyArea(shape orb.MultiPolygon, proj Projection) (*StudyArea, error) {
	if len(shape) == 0 {
		return nil, fmt.Errorf("spatial: no polygon: %w", ErrStudyArea)
	}
	for i, p := range shape {
		if err := geomPolygon(p).Validate(); err != nil {
			return nil, fmt.Errorf("spatial: polygon %d is not valid: %w: %w", i+1, err, ErrStudyArea)
		}
	}
	w := &StudyArea{}
	flat := make(MultiPolygon, len(shape))
	var most float64
	for i, p := range shape {
		for _, r := range p {
			ring, err := borderOnPlane(r, proj)
			if err != nil {
				return nil, err
			}
			for _, v := range ring {
				most = max(most, math.Abs(v.X), math.Abs(v.Y))
			}
			flat[i] = append(flat[i], ring)
		}
	}
	w.unit = math.Ldexp(1, int(math.Ceil(math.Log2(max(most, 1e-9))))-areaBits)
	for i := range flat {
		flat[i] = w.snap(flat[i])
	}
	flat = slices.DeleteFunc(flat, func(p Polygon) bool { return len(p) == 0 })
	flat, err := w.unite(flat)
	if err != nil {
		return nil, err
	}
	return w, w.finish(flat)
}

func geomRing(r orb.Ring) geom.LineString {
	xy := make([]float64, 0, 2*len(r))
	for _, v := range r {
		xy = append(xy, v[0], v[1])
	}
	return geom.NewLineString(geom.NewSequence(xy, geom.DimXY))
}

func geomPolygon(p orb.Polygon) geom.Polygon {
	rings := make([]geom.LineString, len(p))
	for i, r := range p {
		rings[i] = geomRing(r)
	}
	return geom.NewPolygon(rings)
}

func planeGeom(p Polygon) geom.Polygon {
	o := make(orb.Polygon, len(p))
	for i, r := range p {
		for _, v := range r {
			o[i] = append(o[i], orb.Point{v.X, v.Y})
		}
		o[i] = append(o[i], o[i][0])
	}
	return geomPolygon(o)
}

// borderOnPlane projects a closed ring, with more vertices where its straight
// sides bend.
func borderOnPlane(r orb.Ring, proj Projection) (Ring, error) {
	if len(r) < 4 {
		return nil, fmt.Errorf("spatial: a ring of %d positions: %w", len(r), ErrStudyArea)
	}
	if proj.CRS().Method == "plane" {
		out := make(Ring, 0, len(r)-1)
		for _, v := range r[:len(r)-1] {
			out = append(out, XY{v[0], v[1]})
		}
		return out, nil
	}
	one := LonLats{Lon: make([]float64, 1), Lat: make([]float64, 1)}
	forward := func(v orb.Point) XY {
		one.Lon[0], one.Lat[0] = v[0], v[1]
		if v[0] == -180 {
			one.Lon[0] = 180 // both sides of a cut at the antimeridian become the same
		}
		q := proj.Forward(one)
		return XY{q.X[0], q.Y[0]}
	}
	var out Ring
	var bad *orb.Point
	var side func(a, b orb.Point, p, q XY, parts int)
	side = func(a, b orb.Point, p, q XY, parts int) {
		if parts >= borderParts {
			return
		}
		m := orb.Point{(a[0] + b[0]) / 2, (a[1] + b[1]) / 2}
		at := forward(m)
		if at.X-at.X != 0 {
			bad = &m
			return
		}
		if math.Hypot(at.X-(p.X+q.X)/2, at.Y-(p.Y+q.Y)/2) < borderBend {
			// a side may be bent twice and pass through its middle all the same
			if parts > 0 || math.Hypot(q.X-p.X, q.Y-p.Y) < 1e4 {
				return
			}
		}
		side(a, m, p, at, 2*parts+1)
		out = append(out, at)
		side(m, b, at, q, 2*parts+1)
	}
	last := forward(r[0])
	for i, v := range r[:len(r)-1] {
		if last.X-last.X != 0 {
			return nil, fmt.Errorf("spatial: border at %g, %g lies outside the domain of %s: %w", v[0], v[1], proj.CRS().Name, ErrUnsupportedGeometry)
		}
		next := forward(r[i+1])
		out = append(out, last)
		if next.X-next.X == 0 {
			side(v, r[i+1], last, next, 0)
		}
		last = next
	}
	if bad != nil {
		return nil, fmt.Errorf("spatial: border at %g, %g lies outside the domain of %s: %w", bad[0], bad[1], proj.CRS().Name, ErrUnsupportedGeometry)
	}
	return out, nil
}

// snap rounds to whole units and drops what vanishes.
func (w *StudyArea) snap(p Polygon) Polygon {
	var out Polygon
	for i, r := range p {
		g := make(gridRing, len(r))
		for n, v := range r {
			g[n] = w.toUnits(v)
		}
		if g = tidy(g); g == nil {
			if i == 0 {
				return nil
			}
			continue
		}
		ring := make(Ring, len(g))
		for n, v := range g {
			ring[n] = XY{float64(v.x) * w.unit, float64(v.y) * w.unit}
		}
		if (ring.Area() > 0) != (i == 0) {
			slices.Reverse(ring)
		}
		out = append(out, ring)
	}
	return out
}

func (w *StudyArea) toUnits(v XY) point {
	return point{int64(math.Round(v.X / w.unit)), int64(math.Round(v.Y / w.unit))}
}

// unite makes one area of several polygons.
func (w *StudyArea) unite(flat MultiPolygon) (MultiPolygon, error) {
	if len(flat) > 1 {
		all := make([]geom.Geometry, len(flat))
		for i, p := range flat {
			all[i] = planeGeom(p).AsGeometry()
		}
		g, err := geom.UnionMany(all)
		if err != nil {
			return nil, fmt.Errorf("spatial: its polygons cannot be united: %w: %w", err, ErrStudyArea)
		}
		flat = w.polygonsOf(g)
	}
	if len(flat) == 0 {
		return nil, fmt.Errorf("spatial: nothing is left of its polygons on the plane: %w", ErrStudyArea)
	}
	parts := make([]geom.Polygon, len(flat))
	for i, p := range flat {
		parts[i] = planeGeom(p)
	}
	if err := geom.NewMultiPolygon(parts).Validate(); err != nil {
		return nil, fmt.Errorf("spatial: not valid on the plane: %w: %w", err, ErrStudyArea)
	}
	return flat, nil
}

// polygonsOf returns the polygons of a geometry in whole units; what has no area
// is left out.
func (w *StudyArea) polygonsOf(g geom.Geometry) MultiPolygon {
	var out MultiPolygon
	add := func(q geom.Polygon) {
		if q.IsEmpty() {
			return
		}
		var p Polygon
		for _, r := range append([]geom.LineString{q.ExteriorRing()}, interiors(q)...) {
			seq := r.Coordinates()
			var ring Ring
			for n := range seq.Length() - 1 {
				ring = append(ring, XY{seq.GetXY(n).X, seq.GetXY(n).Y})
			}
			p = append(p, ring)
		}
		if p = w.snap(p); p != nil {
			out = append(out, p)
		}
	}
	switch {
	case g.IsPolygon():
		add(g.MustAsPolygon())
	case g.IsMultiPolygon():
		m := g.MustAsMultiPolygon()
		for n := range m.NumPolygons() {
			add(m.PolygonN(n))
		}
	case g.IsGeometryCollection():
		c := g.MustAsGeometryCollection()
		for n := range c.NumGeometries() {
			out = append(out, w.polygonsOf(c.GeometryN(n))...)
		}
	}
	return out
}

func interiors(q geom.Polygon) []geom.LineString {
	var out []geom.LineString
	for n := range q.NumInteriorRings() {
		out = append(out, q.InteriorRingN(n))
	}
	return out
}

// finish fills in what follows from the polygons.
func (w *StudyArea) finish(flat MultiPolygon) error {
	w.plane = flat
	w.area = flat.Area()
	w.lo, w.hi = flat[0][0][0], flat[0][0][0]
	for _, p := range flat {
		for _, r := range p {
			w.rings = append(w.rings, r)
			units := make([]point, len(r))
			for n, v := range r {
				units[n] = w.toUnits(v)
				w.lo.X, w.lo.Y = min(w.lo.X, v.X), min(w.lo.Y, v.Y)
				w.hi.X, w.hi.Y = max(w.hi.X, v.X), max(w.hi.Y, v.Y)
			}
			w.whole = append(w.whole, units)
		}
	}
	w.find = newLocator(w)
	return nil
}

// Area returns the area net of holes, square metres.
func (w *StudyArea) Area() float64 { return w.area }

// Plane returns the polygons on the plane. The slices must not be changed.
func (w *StudyArea) Plane() MultiPolygon { return w.plane }

// Bounds returns the least and greatest corner.
func (w *StudyArea) Bounds() (lo, hi XY) { return w.lo, w.hi }

// Vertices returns how many vertices all rings have together.
func (w *StudyArea) Vertices() (n int) {
	for _, r := range w.rings {
		n += len(r)
	}
	return n
}

// Contains reports whether a position lies in the area; on the border either
// may come out. Cost: O(1) but near the border.
func (w *StudyArea) Contains(at XY) bool { return w.find.contains(at) }

// AreaCentre proposes the centre of a plane for polygons in degrees: the middle
// of the narrowest box around them, in whole degrees.
func AreaCentre(shape orb.MultiPolygon) LonLat {
	type span struct{ lo, hi float64 }
	var spans []span
	south, north := 90.0, -90.0
	for _, p := range shape {
		b := p[0].Bound()
		spans = append(spans, span{b.Min[0], b.Max[0]})
		south, north = min(south, b.Min[1]), max(north, b.Max[1])
	}
	if len(spans) == 0 {
		return LonLat{}
	}
	slices.SortFunc(spans, func(a, b span) int {
		switch {
		case a.lo < b.lo:
			return -1
		case a.lo > b.lo:
			return 1
		}
		return 0
	})
	west, east := spans[0].lo, spans[0].hi
	var gap, from, to float64
	for _, s := range spans[1:] {
		if s.lo-east > gap {
			gap, from, to = s.lo-east, east, s.lo
		}
		east = max(east, s.hi)
	}
	if gap > west+360-east {
		west, east = to, from+360
	}
	return LonLat{Lon: wholeLongitude(west + (east-west)/2), Lat: whole((south + north) / 2)}
}
