package spatial

import "math"

// Area returns the signed area of the ring in square metres, positive when it
// runs anticlockwise. Cost O(vertices).
func (r Ring) Area() float64 {
	if len(r) < 3 {
		return 0
	}
	var sum float64
	o := r[0] // relative coordinates keep the digits of a small ring far from the origin
	for i := 1; i+1 < len(r); i++ {
		sum += (r[i].X-o.X)*(r[i+1].Y-o.Y) - (r[i+1].X-o.X)*(r[i].Y-o.Y)
	}
	return sum / 2
}

// Length returns the length of the closed ring in metres.
func (r Ring) Length() float64 {
	var sum float64
	for i, p := range r {
		q := r[(i+1)%len(r)]
		sum += math.Hypot(q.X-p.X, q.Y-p.Y)
	}
	return sum
}

// Contains reports whether p lies inside the ring, by crossings of the ray
// towards positive X. A point on the ring itself may fall on either side.
func (r Ring) Contains(p XY) bool {
	in := false
	for i, a := range r {
		b := r[(i+1)%len(r)]
		if (a.Y > p.Y) != (b.Y > p.Y) && p.X < a.X+(p.Y-a.Y)/(b.Y-a.Y)*(b.X-a.X) {
			in = !in
		}
	}
	return in
}

// Area returns the area of the polygon net of its holes, square metres.
func (p Polygon) Area() float64 {
	var sum float64
	for _, r := range p {
		sum += r.Area()
	}
	return sum
}

// Contains reports whether at lies in the polygon and in none of its holes.
func (p Polygon) Contains(at XY) bool {
	in := false
	for _, r := range p {
		if r.Contains(at) {
			in = !in
		}
	}
	return in
}

// Area returns the area of all polygons, square metres.
func (m MultiPolygon) Area() float64 {
	var sum float64
	for _, p := range m {
		sum += p.Area()
	}
	return sum
}

// Contains reports whether at lies in one of the polygons.
func (m MultiPolygon) Contains(at XY) bool {
	for _, p := range m {
		if p.Contains(at) {
			return true
		}
	}
	return false
}

// trace follows next from every vertex and writes the rings. Rings are in the
// order of their first vertex, so the result depends on the values alone.
func (s *Isolines) trace() {
	s.ring = make([]int32, len(s.at))
	for v := range s.ring {
		s.ring[v] = -1
	}
	s.order = make([]int32, 0, len(s.at))
	for v := range s.ring {
		if s.ring[v] >= 0 {
			continue
		}
		id := int32(len(s.rings))
		first := int32(len(s.order))
		for w := int32(v); s.ring[w] < 0; w = s.next[w] {
			s.ring[w] = id
			s.order = append(s.order, w)
		}
		s.rings = append(s.rings, ringSpan{first: first, last: int32(len(s.order)), level: s.level[v]})
	}
}

// ringXY returns the vertices of ring r, anticlockwise or clockwise as asked.
// Both directions start at the same vertex and hold the same values.
func (s *Isolines) ringXY(r int, anticlockwise bool) Ring {
	span := s.rings[r]
	ids := s.order[span.first:span.last]
	out := make(Ring, len(ids))
	out[0] = s.at[ids[0]]
	for i := 1; i < len(ids); i++ {
		if anticlockwise == span.high {
			out[i] = s.at[ids[i]]
		} else {
			out[i] = s.at[ids[len(ids)-i]]
		}
	}
	return out
}

// ringArea returns the unsigned area inside ring r.
func (s *Isolines) ringArea(r int) float64 {
	span := s.rings[r]
	ids := s.order[span.first:span.last]
	o := s.at[ids[0]]
	var sum float64
	p := s.at[ids[1]]
	for _, id := range ids[2:] {
		q := s.at[id]
		sum += (p.X-o.X)*(q.Y-o.Y) - (q.X-o.X)*(p.Y-o.Y)
		p = q
	}
	return math.Abs(sum) / 2
}
