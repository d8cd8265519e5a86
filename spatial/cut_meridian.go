package spatial

import (
	"cmp"
	"math/big"
	"slices"
)

// gridPolygon is an exterior ring (anticlockwise) and its holes (clockwise) in
// rounded degrees, longitudes continuous.
type gridPolygon []gridRing

const (
	halfTurn = turn / 2
	polarLat = int64(90 * degreeUnits)
)

// world returns which turn a longitude lies in: 0 for [-180, 180).
func world(x int64) int64 {
	k := (x + halfTurn) / turn
	if (x+halfTurn)%turn < 0 {
		k--
	}
	return k
}

// cutWorld cuts the polygon along the antimeridian and moves the parts into
// [-180, 180] degrees. A vertex exactly on the antimeridian of a polygon that
// crosses it is first moved one unit (1e-7 degree) east, so that no ring
// touches the cut. A polygon around a pole goes up to the pole along the cut.
func (p gridPolygon) cutWorld() ([]gridPolygon, error) {
	polar := slices.ContainsFunc(p, gridRing.winds)
	lo, hi := p[0].rangeX()
	k := world(lo)
	if !polar && lo >= -halfTurn && hi <= halfTurn {
		k = 0
	}
	if !polar && hi <= k*turn+halfTurn {
		q := make(gridPolygon, len(p))
		for i, r := range p {
			q[i] = r.shifted(-k * turn)
		}
		return []gridPolygon{q}, nil
	}
	var c meridianCut
	for i, r := range p {
		r = slices.Clone(r)
		for n := range r {
			if (r[n].x+halfTurn)%turn == 0 {
				r[n].x++
			}
		}
		if r = tidy(r); r != nil {
			c.add(r)
		} else if i == 0 {
			return nil, nil
		}
	}
	return c.join()
}

// meridianCut holds the pieces of one polygon's rings, all within one world.
// Of the two borders, 0 is the western (-180) and 1 the eastern (180).
type meridianCut struct {
	chains []gridRing
	ends   []landing    // where each chain ends
	whole  []gridRing   // rings that do not reach the cut
	border [2][]landing // starts and ends on each border
}

// landing is a chain's start or end on a border.
type landing struct {
	y     int64
	side  int
	start bool
	chain int
}

// add splits a ring at the cut, or keeps it whole.
func (c *meridianCut) add(r gridRing) {
	n := len(r)
	if r.winds() {
		n-- // the last position is the first, a turn on
	}
	after := func(i int) gridPoint { // the position that follows, longitudes continuous
		if i+1 < len(r) {
			return r[i+1]
		}
		return r[0]
	}
	first := -1 // the first side of the ring that crosses
	for i := range n {
		if world(r[i].x) != world(after(i).x) {
			first = i
			break
		}
	}
	if first < 0 {
		c.whole = append(c.whole, r.shifted(-world(r[0].x)*turn))
		return
	}
	var chain gridRing
	var from landing
	for m := range n + 1 {
		i := (first + m) % n
		p, q := r[i], after(i)
		k := world(p.x)
		if m > 0 {
			chain = append(chain, gridPoint{p.x - k*turn, p.y})
		}
		if world(q.x) == k {
			continue
		}
		east := q.x > p.x
		edge := k*turn - halfTurn
		out := landing{side: 0}
		if east {
			edge += turn
			out.side = 1
		}
		out.y = latitudeAt(p, q, edge)
		if m > 0 {
			out.chain = len(c.chains)
			from.chain = out.chain
			c.chains = append(c.chains, append(chain, gridPoint{borderX(out.side), out.y}))
			c.ends = append(c.ends, out)
			c.border[from.side] = append(c.border[from.side], from)
			c.border[out.side] = append(c.border[out.side], out)
		}
		from = landing{y: out.y, side: 1 - out.side, start: true}
		chain = gridRing{{borderX(from.side), from.y}}
	}
}

func borderX(side int) int64 { return (2*int64(side) - 1) * halfTurn }

// join closes the chains along the borders with the inside on the left: up the
// eastern border, down the western, and over a pole where a border has no
// further start. Rings that did not reach the cut become holes of the part that
// contains them. Parts further east come first.
func (c *meridianCut) join() ([]gridPolygon, error) {
	for side, b := range c.border {
		slices.SortStableFunc(b, func(x, y landing) int {
			if side == 0 {
				x, y = y, x // order of travel: downwards
			}
			return cmp.Compare(x.y, y.y)
		})
		open := len(b) > 0 && b[0].start // the first start belongs to a way over the pole
		for i := 0; i+1 < len(b); i++ {  // of two at one place, the one that fits comes first
			if want := (i%2 == 0) == open; b[i].start != want && b[i+1].y == b[i].y {
				b[i], b[i+1] = b[i+1], b[i]
			}
		}
		for i := 1; i < len(b); i++ {
			if b[i].start == b[i-1].start {
				return nil, errTouch
			}
		}
	}
	follow := func(at landing) (chain int, way gridRing, ok bool) {
		b := c.border[at.side]
		i := slices.Index(b, at) + 1
		if i < len(b) {
			return b[i].chain, nil, true
		}
		other := c.border[1-at.side] // over the pole and back on the other border
		if len(other) == 0 || !other[0].start {
			return 0, nil, false
		}
		pole := borderX(at.side) / halfTurn * polarLat
		return other[0].chain, gridRing{{borderX(at.side), pole}, {borderX(1 - at.side), pole}}, true
	}
	var out []gridPolygon
	used := make([]bool, len(c.chains))
	for n := range c.chains {
		var loop gridRing
		for k := n; !used[k]; {
			used[k] = true
			loop = append(loop, c.chains[k]...)
			next, way, ok := follow(c.ends[k])
			if !ok || used[next] && next != n {
				return nil, errTouch
			}
			loop = append(loop, way...)
			k = next
		}
		if loop = tidy(loop); loop != nil {
			out = append(out, gridPolygon{loop})
		}
	}
	slices.SortStableFunc(out, func(p, q gridPolygon) int {
		_, a := p[0].rangeX()
		_, b := q[0].rangeX()
		return cmp.Compare(b, a)
	})
	for _, h := range c.whole {
		if i := slices.IndexFunc(out, func(q gridPolygon) bool { return q[0].contains(h[0]) }); i >= 0 {
			out[i] = append(out[i], h)
		}
	}
	return out, nil
}

// latitudeAt returns the rounded latitude where the segment meets x = edge. It
// does not depend on the segment's direction.
func latitudeAt(p, q gridPoint, edge int64) int64 {
	if p.x > q.x {
		p, q = q, p
	}
	// round half up of p.y + (q.y-p.y)(edge-p.x)/(q.x-p.x), exactly
	den := q.x - p.x
	num := new(big.Int).Mul(big.NewInt(2*(q.y-p.y)), big.NewInt(edge-p.x))
	num.Add(num, big.NewInt(den))
	return p.y + num.Div(num, big.NewInt(2*den)).Int64()
}

// contains reports whether p lies inside the ring (rays towards positive x).
func (g gridRing) contains(p gridPoint) bool {
	in := false
	for i, a := range g {
		b := g[(i+1)%len(g)]
		if (a.y > p.y) == (b.y > p.y) {
			continue
		}
		if s := turnOf(a, b, p); (s > 0) == (b.y > a.y) && s != 0 {
			in = !in
		}
	}
	return in
}

// winds reports whether the ring goes around a pole. Such a ring is kept open:
// its last position is its first, a whole turn of longitude on.
func (g gridRing) winds() bool {
	n := len(g) - 1
	return n > 0 && g[0].y == g[n].y && (g[n].x-g[0].x == turn || g[0].x-g[n].x == turn)
}
