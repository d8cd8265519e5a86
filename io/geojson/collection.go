package geojson

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"github.com/paulmach/orb"

	"drumlin/spatial"
)

// pos is a position in whole quanta of 10^-decimals.
type pos struct{ x, y int64 }

// shape is one feature's geometry in quanta. Rings are closed, wound and free
// of repeated positions.
type shape struct {
	id       string
	point    bool
	at       pos
	polygons [][][]pos
}

// collection is everything one file holds, geometry already rounded.
type collection struct {
	what     string
	rule     string
	setting  setting
	meta     Meta
	decimals int
	scale    float64 // 10^decimals
	shapes   []shape
}

func newCollection(what string, s setting, meta Meta) (*collection, error) {
	c := &collection{what: what, setting: s, meta: meta, decimals: meta.Decimals}
	if c.decimals == 0 {
		c.decimals = 7
	}
	if c.decimals < 1 || c.decimals > 7 {
		return nil, fmt.Errorf("geojson: %d decimals asked for; positions take 1 to 7", c.decimals)
	}
	c.scale = math.Pow10(c.decimals)
	return c, nil
}

func (c *collection) add(id string, mp orb.MultiPolygon) error {
	s := shape{id: id}
	for i, p := range mp {
		var poly [][]pos
		for j, r := range p {
			ring, err := c.ring(r, j == 0)
			if err != nil {
				return fmt.Errorf("geojson: %s: polygon %d, ring %d: %w", id, i+1, j+1, err)
			}
			if ring != nil {
				poly = append(poly, ring)
			} else if j == 0 {
				break // without an exterior nothing of the polygon is left
			}
		}
		if poly != nil {
			s.polygons = append(s.polygons, poly)
		}
	}
	c.shapes = append(c.shapes, s)
	return nil
}

func (c *collection) addPoint(id string, p spatial.LonLat) error {
	at, err := c.round(p.Lon, p.Lat)
	if err != nil {
		return fmt.Errorf("geojson: %s: %w", id, err)
	}
	c.shapes = append(c.shapes, shape{id: id, point: true, at: at})
	return nil
}

// round brings a position to whole quanta and checks its range.
func (c *collection) round(x, y float64) (pos, error) {
	qx, qy := math.Round(x*c.scale), math.Round(y*c.scale)
	if c.setting.plane {
		if !(math.Abs(qx) < 1<<53 && math.Abs(qy) < 1<<53) {
			return pos{}, fmt.Errorf("position (%g, %g) cannot be written with %d decimals", x, y, c.decimals)
		}
	} else if !(math.Abs(qx) <= 180*c.scale && math.Abs(qy) <= 90*c.scale) {
		return pos{}, fmt.Errorf("position (%g, %g) is outside the range of degrees; the shape must be cut at the antimeridian first", x, y)
	}
	return pos{int64(qx), int64(qy)}, nil
}

// ring rounds a ring, drops repeated positions and spikes, closes and winds
// it; nil when no area is left.
func (c *collection) ring(r orb.Ring, exterior bool) ([]pos, error) {
	out := make([]pos, 0, len(r)+1)
	for i, p := range r {
		q, err := c.round(p[0], p[1])
		if err != nil {
			return nil, fmt.Errorf("position %d: %w", i+1, err)
		}
		out = push(out, q)
	}
	lo := 0 // the ends meet: trim repeats and spikes across the seam
	for len(out)-lo > 2 {
		if out[len(out)-1] == out[lo] || out[len(out)-2] == out[lo] {
			out = out[:len(out)-1]
		} else if out[len(out)-1] == out[lo+1] {
			lo++
		} else {
			break
		}
	}
	out = out[lo:]
	if len(out) < 3 {
		return nil, nil
	}
	a := area2(out)
	if a == 0 {
		return nil, nil
	}
	if a > 0 != exterior {
		slices.Reverse(out[1:]) // the first position stays first
	}
	return append(out, out[0]), nil
}

// push appends q unless it repeats the last position; a step out and straight
// back over the same position is taken out.
func push(out []pos, q pos) []pos {
	n := len(out)
	switch {
	case n > 0 && out[n-1] == q:
		return out
	case n > 1 && out[n-2] == q:
		return out[:n-1]
	}
	return append(out, q)
}

// area2 is twice the signed area of an open ring, positive anticlockwise,
// taken about the first position so that small rings are exact.
func area2(r []pos) float64 {
	var s float64
	x0, y0 := r[0].x, r[0].y
	for i := 1; i+1 < len(r); i++ {
		s += float64(r[i].x-x0)*float64(r[i+1].y-y0) - float64(r[i+1].x-x0)*float64(r[i].y-y0)
	}
	return s
}

// bbox returns west, south, east, north in quanta, false without positions. In
// degrees it is the narrowest box around all features, so west is greater than
// east when that box crosses the antimeridian.
func (c *collection) bbox() ([4]int64, bool) {
	var spans [][2]int64
	south, north := int64(math.MaxInt64), int64(math.MinInt64)
	for i := range c.shapes {
		s := &c.shapes[i]
		if s.point {
			spans = append(spans, [2]int64{s.at.x, s.at.x})
			south, north = min(south, s.at.y), max(north, s.at.y)
		}
		for _, p := range s.polygons {
			lo, hi := p[0][0].x, p[0][0].x
			for _, q := range p[0] {
				lo, hi = min(lo, q.x), max(hi, q.x)
				south, north = min(south, q.y), max(north, q.y)
			}
			spans = append(spans, [2]int64{lo, hi})
		}
	}
	if len(spans) == 0 {
		return [4]int64{}, false
	}
	slices.SortFunc(spans, func(a, b [2]int64) int {
		return cmp.Or(cmp.Compare(a[0], b[0]), cmp.Compare(a[1], b[1]))
	})
	west, east := spans[0][0], spans[0][1]
	var gap, gapFrom, gapTo int64
	for _, s := range spans[1:] {
		if s[0]-east > gap {
			gap, gapFrom, gapTo = s[0]-east, east, s[0]
		}
		east = max(east, s[1])
	}
	if round := int64(360 * c.scale); !c.setting.plane && gap > west+round-east {
		west, east = gapTo, gapFrom
	}
	return [4]int64{west, south, east, north}, true
}
