package spatial

import (
	"cmp"
	"math/big"
	"slices"
)

// gridPolygon is an exterior ring (anticlockwise) and its holes (clockwise) in
// rounded degrees, longitudes continuous.
type gridPolygon []gridRing

// cutWorld cuts the polygon along every antimeridian it crosses and moves the
// parts into [-180, 180] degrees. A vertex exactly on an antimeridian is first
// moved one unit (1e-7 degree) east, so that no ring touches the cut.
func (p gridPolygon) cutWorld() ([]gridPolygon, error) {
	lo, hi := p[0].rangeX()
	half := turn / 2
	if lo >= -half && hi <= half {
		return []gridPolygon{p}, nil
	}
	world := func(x int64) int64 { // which world a longitude lies in
		k := (x + half) / turn
		if (x+half)%turn < 0 {
			k--
		}
		return k
	}
	if k := world(lo); hi <= k*turn+half { // one world, though not the middle one
		q := make(gridPolygon, len(p))
		for i, r := range p {
			q[i] = r.shifted(-k * turn)
		}
		return []gridPolygon{q}, nil
	}
	rest := gridPolygon{}
	for _, r := range p {
		q := slices.Clone(r)
		for i := range q {
			if (q[i].x+half)%turn == 0 {
				q[i].x++
			}
		}
		if q = tidy(q); q != nil {
			rest = append(rest, q)
		} else if len(rest) == 0 {
			return nil, nil
		}
	}
	var out []gridPolygon
	todo := []gridPolygon{rest}
	for len(todo) > 0 {
		q := todo[0]
		todo = todo[1:]
		lo, hi := q[0].rangeX()
		if lo == hi {
			continue
		}
		k := world(lo)
		if edge := k*turn + half; hi > edge {
			west, east, err := q.cutAt(edge)
			if err != nil {
				return nil, err
			}
			out = append(out, shiftAll(west, -k*turn)...)
			todo = append(todo, east...)
			continue
		}
		out = append(out, shiftAll([]gridPolygon{q}, -k*turn)...)
	}
	return out, nil
}

func shiftAll(ps []gridPolygon, by int64) []gridPolygon {
	for _, p := range ps {
		for i, r := range p {
			p[i] = r.shifted(by)
		}
	}
	return ps
}

// crossing is where a ring crosses the cut.
type crossing struct {
	y    int64
	east bool // the ring goes east
	west int  // chain on the west side that ends (east) or starts (!east) here
	far  int  // chain on the east side that starts (east) or ends (!east) here
}

// cutAt splits the polygon at x = edge, on which no vertex lies. Along the cut
// the crossings, sorted by latitude, bound what lies inside by twos: the west
// side goes up the cut from the first to the second, the east side down.
func (p gridPolygon) cutAt(edge int64) (west, east []gridPolygon, err error) {
	var chains [2][]gridRing // 0 west, 1 east
	var whole [2][]gridRing  // rings that do not cross
	var cross []crossing
	for n, r := range p {
		lo, hi := r.rangeX()
		if hi < edge || lo > edge {
			side := 0
			if lo > edge {
				side = 1
			}
			if n == 0 {
				return nil, nil, errTouch // the caller asks only for exteriors that cross
			}
			whole[side] = append(whole[side], r)
			continue
		}
		chains, cross = r.split(edge, chains, cross)
	}
	slices.SortStableFunc(cross, func(a, b crossing) int { return cmp.Compare(a.y, b.y) })
	for i := 0; i+1 < len(cross); i++ { // of two at one place, the one that fits comes first
		if wrong := cross[i].east != (i%2 == 0); wrong && cross[i+1].y == cross[i].y {
			cross[i], cross[i+1] = cross[i+1], cross[i]
		}
	}
	next := [2]map[int]int{{}, {}}
	for i := 0; i < len(cross); i += 2 {
		if i+1 >= len(cross) || !cross[i].east || cross[i+1].east {
			return nil, nil, errTouch
		}
		next[0][cross[i].west] = cross[i+1].west
		next[1][cross[i+1].far] = cross[i].far
	}
	var sides [2][]gridPolygon
	for side := range sides {
		used := make([]bool, len(chains[side]))
		for c := range chains[side] {
			var loop gridRing
			for k := c; !used[k]; k = next[side][k] {
				used[k] = true
				loop = append(loop, chains[side][k]...)
			}
			if loop = tidy(loop); loop != nil {
				sides[side] = append(sides[side], gridPolygon{loop})
			}
		}
		for _, h := range whole[side] {
			for i, q := range sides[side] {
				if q[0].contains(h[0]) {
					sides[side][i] = append(q, h)
					break
				}
			}
		}
	}
	return sides[0], sides[1], nil
}

// split breaks a ring that crosses the cut into chains that start and end on
// it, and appends them and the crossings.
func (r gridRing) split(edge int64, chains [2][]gridRing, cross []crossing) ([2][]gridRing, []crossing) {
	side := func(p gridPoint) int {
		if p.x > edge {
			return 1
		}
		return 0
	}
	start := 0 // the first vertex after a crossing
	for side(r[start]) == side(r[(start+len(r)-1)%len(r)]) {
		start++
	}
	before := r[(start+len(r)-1)%len(r)]
	entry := gridPoint{edge, latitudeAt(before, r[start], edge)}
	firstCross := len(cross)
	cross = append(cross, crossing{y: entry.y, east: side(r[start]) == 1})
	chain := gridRing{entry}
	at := firstCross // where the chain started
	finish := func(end int) {
		s := side(chain[1])
		chains[s] = append(chains[s], chain)
		id := len(chains[s]) - 1
		for _, c := range []int{at, end} {
			if s == 0 {
				cross[c].west = id
			} else {
				cross[c].far = id
			}
		}
	}
	for n := range r {
		p, q := r[(start+n)%len(r)], r[(start+n+1)%len(r)]
		chain = append(chain, p)
		if side(p) == side(q) {
			continue
		}
		y := latitudeAt(p, q, edge)
		chain = append(chain, gridPoint{edge, y})
		if n == len(r)-1 {
			finish(firstCross)
			break
		}
		cross = append(cross, crossing{y: y, east: side(q) == 1})
		finish(len(cross) - 1)
		at = len(cross) - 1
		chain = gridRing{{edge, y}}
	}
	return chains, cross
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
