package spatial

import (
	"fmt"
	"math"
)

// bender turns the rings of a plane into rounded degrees and adds vertices
// where a straight chord of the plane is bent in degrees.
type bender struct {
	proj Projection
	all  bool // look at every chord: rings share some, and must agree on them
	one  XYs  // a single position, reused
}

func newBender(p Projection) *bender {
	return &bender{proj: p, one: XYs{X: make([]float64, 1), Y: make([]float64, 1)}}
}

func (b *bender) inverse(p XY) LonLat {
	b.one.X[0], b.one.Y[0] = p.X, p.Y
	ll := b.proj.Inverse(b.one)
	return LonLat{ll.Lon[0], ll.Lat[0]}
}

// ring rounds one ring whose vertices stand at lon, lat; longitudes are made
// continuous from the first vertex on.
func (b *bender) ring(xy Ring, lon, lat []float64) (gridRing, error) {
	bent := b.all || b.sample(xy, lon, lat)
	out := make(gridRing, 0, len(xy))
	shift, before := 0.0, 0.0
	for i, x := range lon {
		if x-x != 0 || lat[i]-lat[i] != 0 {
			return nil, fmt.Errorf("spatial: vertex %.0f, %.0f m lies outside the domain of %s: %w", xy[i].X, xy[i].Y, b.proj.CRS().Name, ErrUnsupportedGeometry)
		}
		if i > 0 {
			shift += stepTurn(x + shift - before)
		}
		before = x + shift
		at := LonLat{before, lat[i]}
		out = append(out, roundDegrees(at))
		if bent && i+1 < len(lon) {
			next := LonLat{lon[i+1] + shift, lat[i+1]}
			next.Lon += stepTurn(next.Lon - at.Lon)
			out = b.chord(out, xy[i], xy[i+1], at, next, 12)
		}
	}
	last := lon[0] + stepTurn(lon[0]-before)
	turns := math.Round((last - lon[0]) / 360)
	if math.Abs(turns) > 1 {
		return nil, fmt.Errorf("spatial: a ring goes %g times around a pole: %w", turns, ErrUnsupportedGeometry)
	}
	if n := len(xy) - 1; bent && n > 0 {
		out = b.chord(out, xy[n], xy[0], LonLat{before, lat[n]}, LonLat{last, lat[0]}, 12)
	}
	if turns != 0 {
		out = append(out, gridPoint{out[0].x + int64(turns)*turn, out[0].y})
	}
	return out, nil
}

// stepTurn returns the whole turns that bring a step of longitude within half
// a turn.
func stepTurn(d float64) float64 {
	if d > 180 || d < -180 {
		return math.Remainder(d, 360) - d
	}
	return 0
}

func roundDegrees(p LonLat) gridPoint {
	return gridPoint{int64(math.Round(p.Lon * degreeUnits)), int64(math.Round(p.Lat * degreeUnits))}
}

// sample reports whether any of a few chords is bent: the longest and every
// sixteenth, all of a short ring.
func (b *bender) sample(xy Ring, lon, lat []float64) bool {
	stride := 16
	if len(xy) < 64 {
		stride = 1
	}
	longest, most := 0, 0.0
	test := func(i int) bool {
		k := (i + 1) % len(xy)
		p, q := LonLat{lon[i], lat[i]}, LonLat{lon[k], lat[k]}
		q.Lon += stepTurn(q.Lon - p.Lon)
		_, bent := b.middle(xy[i], xy[k], p, q)
		return bent
	}
	for i, p := range xy {
		q := xy[(i+1)%len(xy)]
		if d := math.Abs(q.X-p.X) + math.Abs(q.Y-p.Y); d > most {
			longest, most = i, d
		}
		if i%stride == 0 && test(i) {
			return true
		}
	}
	return len(xy) > 0 && test(longest)
}

// middle returns where the middle of a chord stands and whether that is off
// the straight line in degrees by more than the tolerance.
func (b *bender) middle(a, c XY, p, q LonLat) (LonLat, bool) {
	m := b.inverse(XY{(a.X + c.X) / 2, (a.Y + c.Y) / 2})
	mid := LonLat{(p.Lon + q.Lon) / 2, (p.Lat + q.Lat) / 2}
	m.Lon += 360 * math.Round((mid.Lon-m.Lon)/360)
	shrink := math.Cos(mid.Lat * math.Pi / 180)
	off := math.Hypot((m.Lon-mid.Lon)*shrink, m.Lat-mid.Lat)
	return m, off > 1e-7+1e-3*math.Hypot((q.Lon-p.Lon)*shrink, q.Lat-p.Lat)
}

// chord appends the vertices needed strictly between two ends, by halves, so
// that both directions get the same ones.
func (b *bender) chord(out gridRing, a, c XY, p, q LonLat, depth int) gridRing {
	if depth == 0 {
		return out
	}
	m, bent := b.middle(a, c, p, q)
	if !bent || m.Lon-m.Lon != 0 || m.Lat-m.Lat != 0 {
		return out
	}
	h := XY{(a.X + c.X) / 2, (a.Y + c.Y) / 2}
	out = b.chord(out, a, h, p, m, depth-1)
	out = append(out, roundDegrees(m))
	return b.chord(out, h, c, m, q, depth-1)
}
