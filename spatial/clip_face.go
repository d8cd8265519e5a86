package spatial

import (
	"cmp"
	"fmt"
	"math"
	"slices"
)

// loop is one ring of a face's border, the face on the left.
type loop struct {
	ring     Ring
	area     float64 // signed
	lo, hi   XY
	label    int     // -1 if no level curve says it
	halves   []int32 // half edges it consists of
	arcs     []int32
	bareRing int32 // ring of the border it is, -1 otherwise
}

func newLoop(r Ring) loop {
	l := loop{ring: r, area: r.Area(), label: -1, bareRing: -1, lo: r[0], hi: r[0]}
	for _, v := range r {
		l.lo.X, l.lo.Y = min(l.lo.X, v.X), min(l.lo.Y, v.Y)
		l.hi.X, l.hi.Y = max(l.hi.X, v.X), max(l.hi.Y, v.Y)
	}
	return l
}

// enclosing returns which of the outer loops is the smallest that contains a hole.
func enclosing(outer []loop, h *loop) int {
	best := -1
	for n := range outer {
		o := &outer[n]
		if o.area < -h.area*(1+1e-12) || h.lo.X < o.lo.X || h.lo.Y < o.lo.Y || h.hi.X > o.hi.X || h.hi.Y > o.hi.Y {
			continue
		}
		if (best < 0 || o.area < outer[best].area) && o.ring.Contains(h.ring[0]) {
			best = n
		}
	}
	return best
}

// faces finds all faces with their labels and areas.
func (c *clip) faces() error {
	used := make([]bool, 2*len(c.chains))
	all := func(int32) bool { return true }
	var outer, holes []loop
	add := func(l loop) {
		if l.area > 0 {
			outer = append(outer, l)
		} else {
			holes = append(holes, l)
		}
	}
	for h := range used {
		if used[h] {
			continue
		}
		var arcs []int32
		ring, err := c.cycle(int32(h), all, used, func(arc int32) { arcs = append(arcs, arc) })
		if err != nil {
			return err
		}
		l := newLoop(ring)
		l.arcs = arcs
		l.halves = append(l.halves, int32(h))
		for _, a := range arcs { // every stretch of border ends at another half edge
			next := a + 1
			if r := c.crossings[a].ring; next == c.first[r+1] {
				next = c.first[r]
			}
			g := 2 * c.crossings[next].chain
			if !c.crossings[next].enters {
				g++
			}
			if g != int32(h) {
				l.halves = append(l.halves, g)
			}
		}
		for _, g := range l.halves {
			k := int(c.chains[g/2].level)
			if g&1 == 0 {
				k++
			}
			if l.label >= 0 && l.label != k {
				return fmt.Errorf("spatial: a face of labels %d and %d: %w", l.label, k, errClip)
			}
			l.label = k
		}
		add(l)
	}
	for r := range c.w.rings {
		if c.first[r] == c.first[r+1] {
			l := newLoop(c.w.rings[r])
			l.bareRing = int32(r)
			add(l)
		}
	}
	return c.nest(outer, holes)
}

// nest gives every hole to the face around it and fills in the faces.
func (c *clip) nest(outer, holes []loop) error {
	n := len(outer)
	c.label, c.area, c.onBorder = make([]uint8, n), make([]float64, n), make([]bool, n)
	c.left, c.right = make([]int32, len(c.chains)), make([]int32, len(c.chains))
	c.arc, c.bare = make([]int32, len(c.crossings)), make([]int32, len(c.w.rings))
	for r := range c.bare {
		c.bare[r] = -1
	}
	label := make([]int, n)
	take := func(f int, l *loop) error {
		c.area[f] += l.area
		if l.label >= 0 {
			if label[f] >= 0 && label[f] != l.label {
				return fmt.Errorf("spatial: a face of labels %d and %d: %w", label[f], l.label, errClip)
			}
			label[f] = l.label
		}
		for _, h := range l.halves {
			if h&1 == 0 {
				c.left[h/2] = int32(f)
			} else {
				c.right[h/2] = int32(f)
			}
		}
		for _, a := range l.arcs {
			c.arc[a] = int32(f)
		}
		if l.bareRing >= 0 {
			c.bare[l.bareRing] = int32(f)
		}
		c.onBorder[f] = c.onBorder[f] || l.bareRing >= 0 || len(l.arcs) > 0
		return nil
	}
	for f := range outer {
		label[f] = -1
	}
	for f := range outer {
		if err := take(f, &outer[f]); err != nil {
			return err
		}
	}
	for i := range holes {
		f := enclosing(outer, &holes[i])
		if f < 0 {
			return fmt.Errorf("spatial: a hole in no face: %w", errClip)
		}
		if err := take(f, &holes[i]); err != nil {
			return err
		}
	}
	for f, k := range label {
		if k < 0 {
			k = c.s.Label(c.s.Locate(outer[f].ring[0]))
		}
		c.label[f] = uint8(k)
	}
	return nil
}

// outline returns the polygons of a set of faces. Their borders hold all
// crossings, so that neighbours have the same vertices.
func (c *clip) outline(in func(face int32) bool) (MultiPolygon, error) {
	active := func(k int32) bool { return in(c.left[k]) != in(c.right[k]) }
	used := make([]bool, 2*len(c.chains))
	var outer, holes []loop
	add := func(r Ring) {
		if l := newLoop(r); l.area > 0 {
			outer = append(outer, l)
		} else {
			holes = append(holes, l)
		}
	}
	for k := range c.chains {
		if !active(int32(k)) {
			continue
		}
		h := int32(2 * k)
		if !in(c.left[k]) {
			h++
		}
		if used[h] {
			continue
		}
		r, err := c.cycle(h, active, used, func(int32) {})
		if err != nil {
			return nil, err
		}
		add(r)
	}
	for r, ring := range c.w.rings {
		lo, hi := c.first[r], c.first[r+1]
		if lo == hi {
			if in(c.bare[r]) {
				add(ring)
			}
			continue
		}
		whole := in(c.arc[lo])
		for n := lo; n < hi && whole; n++ {
			whole = !active(c.crossings[n].chain)
		}
		if whole {
			add(c.along(Ring{c.crossings[lo].at}, lo, lo))
		}
	}
	out := make(MultiPolygon, len(outer))
	for n := range outer {
		out[n] = Polygon{outer[n].ring}
	}
	for i := range holes {
		n := enclosing(outer, &holes[i])
		if n < 0 {
			return nil, fmt.Errorf("spatial: a hole in no part: %w", errClip)
		}
		out[n] = append(out[n], holes[i].ring)
	}
	return out, nil
}

// rowFaces lists where a horizontal line changes its face, from west to east.
type rowFaces []rowChange

type rowChange struct {
	x    float64
	face int32 // east of it, -1 beyond the border
}

// eachSegment calls f for every segment of every chain, with the faces on its
// left and right, and of the border, where there is none on the right (-1).
func (c *clip) eachSegment(f func(a, b XY, left, right int32)) {
	for n := range c.chains {
		k := &c.chains[n]
		for i := range k.pts {
			if i+1 < len(k.pts) {
				f(k.pts[i], k.pts[i+1], c.left[n], c.right[n])
			} else if k.from < 0 {
				f(k.pts[i], k.pts[0], c.left[n], c.right[n])
			}
		}
	}
	c.eachBorder(func(a, b XY, face int32) { f(a, b, face, -1) })
}

// eachBorder does the same for the border alone.
func (c *clip) eachBorder(f func(a, b XY, face int32)) {
	for r, ring := range c.w.rings {
		lo, hi := c.first[r], c.first[r+1]
		if lo == hi {
			for i, a := range ring {
				f(a, ring[(i+1)%len(ring)], c.bare[r])
			}
			continue
		}
		for n := lo; n < hi; n++ {
			next := n + 1
			if next == hi {
				next = lo
			}
			a := c.crossings[n].at
			steps := int(c.crossings[next].edge) - int(c.crossings[n].edge)
			if steps < 0 || steps == 0 && next <= n {
				steps += len(ring)
			}
			for i := range steps {
				b := ring[(int(c.crossings[n].edge)+1+i)%len(ring)]
				f(a, b, c.arc[n])
				a = b
			}
			f(a, c.crossings[next].at, c.arc[n])
		}
	}
}

// locate returns the face at a position, -1 outside the study area. O(vertices).
func (c *clip) locate(at XY) int32 {
	best, face := math.Inf(-1), int32(-1)
	c.eachSegment(func(a, b XY, left, right int32) {
		if (a.Y > at.Y) == (b.Y > at.Y) {
			return
		}
		lo, hi, east := a, b, right
		if a.Y > b.Y {
			lo, hi, east = b, a, left
		}
		if x := lo.X + (at.Y-lo.Y)/(hi.Y-lo.Y)*(hi.X-lo.X); x <= at.X && x > best {
			best, face = x, east
		}
	})
	return face
}

// eachNodeRow calls f for every row of lattice nodes with where its faces
// change, in units of columns.
func (c *clip) eachNodeRow(workers int, f func(j int, changes rowFaces)) {
	g := c.s.g
	rows := make([]rowFaces, c.s.ny)
	c.eachSegment(func(a, b XY, left, right int32) {
		u := XY{(a.X - g.Origin[0]) / g.Step[0], (a.Y - g.Origin[1]) / g.Step[1]}
		v := XY{(b.X - g.Origin[0]) / g.Step[0], (b.Y - g.Origin[1]) / g.Step[1]}
		east := right
		if u.Y > v.Y {
			u, v, east = v, u, left
		}
		for j := max(0, int(math.Ceil(u.Y))); j < c.s.ny && float64(j) < v.Y; j++ {
			rows[j] = append(rows[j], rowChange{u.X + (float64(j)-u.Y)/(v.Y-u.Y)*(v.X-u.X), east})
		}
	})
	forChunks(c.s.ny, workers, func(_, lo, hi int) {
		for j := lo; j < hi; j++ {
			slices.SortStableFunc(rows[j], func(a, b rowChange) int { return cmp.Compare(a.x, b.x) })
			f(j, rows[j])
		}
	})
}
