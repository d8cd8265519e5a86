package spatial

import (
	"cmp"
	"errors"
	"fmt"
	"math"
	"slices"
)

// errClip reports curves and a border that do not fit together; other levels do.
var errClip = errors.New("level curves and the border of the study area cannot be told apart")

// clip is the study area cut up by level curves: faces with labels like those
// of Isolines, but none of them beyond the border.
//
// Every level curve is split where it crosses the border into chains within the
// study area. Curves never meet each other, so the crossings alone, in their
// order along the border, say how chains and stretches of border make faces: at
// the end of a chain the way goes on along the border, area on the left, to the
// next crossing. What crosses what is decided in whole units with exact
// arithmetic; a vertex on the border counts as if the border were moved by an
// infinitesimal amount to the north-east.
type clip struct {
	w         *StudyArea
	s         *Isolines
	chains    []clipChain
	crossings []crossing // in order along each ring of the border
	first     []int32    // per ring of the border and one more: its first crossing
	left      []int32    // per chain: face on the higher side
	right     []int32
	arc       []int32 // per crossing: face along the border up to the next
	bare      []int32 // per ring of the border: face along it, if nothing crosses
	label     []uint8 // per face
	area      []float64
	onBorder  []bool // per face: it reaches the border of the study area
}

// clipChain is a piece of a level curve within the study area, the higher side
// on the left; closed when it meets no border.
type clipChain struct {
	pts      []XY
	level    uint8
	from, to int32 // crossings; -1 when closed
}

// crossing is where a level curve passes the border.
type crossing struct {
	ring, edge int32
	t          float64 // along the side of the border
	at         XY
	chain      int32
	enters     bool // the chain begins here
}

// newClip cuts the study area by the curves of s.
func newClip(s *Isolines, w *StudyArea) (*clip, error) {
	c := &clip{w: w, s: s}
	c.split()
	if err := c.order(); err != nil {
		return nil, err
	}
	return c, c.faces()
}

// hit is a crossing as it is found along a curve.
type hit struct {
	seg        int // of the curve
	u          float64
	ring, edge int32
	t          float64
	at         XY
	enters     bool
}

// split finds all crossings and makes the chains.
func (c *clip) split() {
	look := newBorderCells(c.w, c.s)
	for r := range c.s.rings {
		span := c.s.rings[r]
		ids := c.s.order[span.first:span.last]
		var hits []hit
		for n, id := range ids {
			p, q := c.s.at[id], c.s.at[ids[(n+1)%len(ids)]]
			hits = look.cross(hits, n, p, q)
		}
		if len(hits) == 0 {
			if c.w.Contains(c.s.at[ids[0]]) {
				pts := make([]XY, len(ids))
				for n, id := range ids {
					pts[n] = c.s.at[id]
				}
				c.chains = append(c.chains, clipChain{pts: pts, level: span.level, from: -1, to: -1})
			}
			continue
		}
		slices.SortFunc(hits, func(a, b hit) int { return cmp.Or(cmp.Compare(a.seg, b.seg), cmp.Compare(a.u, b.u)) })
		for n, h := range hits {
			if !h.enters {
				continue
			}
			end := hits[(n+1)%len(hits)]
			if end.enters {
				c.chains = append(c.chains, clipChain{level: span.level, from: -2}) // order reports it
				continue
			}
			pts := []XY{h.at}
			for k := (h.seg + 1) % len(ids); ; k = (k + 1) % len(ids) {
				if h.seg == end.seg && h.u <= end.u {
					break
				}
				pts = append(pts, c.s.at[ids[k]])
				if k == end.seg {
					break
				}
			}
			pts = append(pts, end.at)
			id := int32(len(c.chains))
			c.chains = append(c.chains, clipChain{pts: pts, level: span.level})
			c.crossings = append(c.crossings,
				crossing{h.ring, h.edge, h.t, h.at, id, true}, crossing{end.ring, end.edge, end.t, end.at, id, false})
		}
	}
}

// order sorts the crossings along the border.
func (c *clip) order() error {
	for _, k := range c.chains {
		if k.from == -2 {
			return errClip
		}
	}
	slices.SortStableFunc(c.crossings, func(a, b crossing) int {
		return cmp.Or(cmp.Compare(a.ring, b.ring), cmp.Compare(a.edge, b.edge), cmp.Compare(a.t, b.t))
	})
	c.first = make([]int32, len(c.w.rings)+1)
	for n, x := range c.crossings {
		c.first[x.ring+1] = int32(n + 1)
		k := &c.chains[x.chain]
		if x.enters {
			k.from = int32(n)
		} else {
			k.to = int32(n)
		}
	}
	for r := range c.w.rings {
		c.first[r+1] = max(c.first[r+1], c.first[r])
	}
	return nil
}

// borderCells finds the sides of the border in a cell of the lattice.
type borderCells struct {
	w      *StudyArea
	s      *Isolines
	nx, ny int // cells, with one more on every side
	start  []int32
	sides  []borderSide
}

type borderSide struct{ ring, edge int32 }

func newBorderCells(w *StudyArea, s *Isolines) *borderCells {
	b := &borderCells{w: w, s: s, nx: s.nx + 1, ny: s.ny + 1}
	type entry struct {
		cell int32
		side borderSide
	}
	var all []entry
	for r, ring := range w.rings {
		for i := range ring {
			last := int32(-1)
			eachCell(b.cell(ring[i]), b.cell(ring[(i+1)%len(ring)]), b.ny, func(x, y int, _, _ XY) {
				if x < 0 || x >= b.nx {
					return
				}
				if n := int32(y*b.nx + x); n != last {
					all = append(all, entry{n, borderSide{int32(r), int32(i)}})
					last = n
				}
			})
		}
	}
	slices.SortStableFunc(all, func(p, q entry) int { return cmp.Compare(p.cell, q.cell) })
	b.start = make([]int32, b.nx*b.ny+1)
	b.sides = make([]borderSide, len(all))
	for n, e := range all {
		b.start[e.cell+1] = int32(n + 1)
		b.sides[n] = e.side
	}
	for n := range b.nx * b.ny {
		b.start[n+1] = max(b.start[n+1], b.start[n])
	}
	return b
}

// cell returns a position in units of cells; cell 0 lies outside the lattice.
func (b *borderCells) cell(p XY) XY {
	g := b.s.g
	return XY{(p.X-g.Origin[0])/g.Step[0] + 1, (p.Y-g.Origin[1])/g.Step[1] + 1}
}

// cross appends where the border crosses segment n of a curve.
func (b *borderCells) cross(out []hit, n int, p, q XY) []hit {
	const hair = 1e-5
	u, v := b.cell(p), b.cell(q)
	at := func(x float64, n int) int { return max(0, min(n-1, int(math.Floor(x)))) }
	x0, x1 := at(min(u.X, v.X)-hair, b.nx), at(max(u.X, v.X)+hair, b.nx)
	y0, y1 := at(min(u.Y, v.Y)-hair, b.ny), at(max(u.Y, v.Y)+hair, b.ny)
	have := len(out)
	var pi, qi point
	for y := y0; y <= y1; y++ {
		for x := x0; x <= x1; x++ {
			list := b.sides[b.start[y*b.nx+x]:b.start[y*b.nx+x+1]]
			if len(list) == 0 {
				continue
			}
			pi, qi = b.w.toUnits(p), b.w.toUnits(q)
		next:
			for _, e := range list {
				for _, h := range out[have:] {
					if h.ring == e.ring && h.edge == e.edge {
						continue next
					}
				}
				if h, ok := b.w.crossing(e, pi, qi); ok {
					h.seg = n
					out = append(out, h)
				}
			}
		}
	}
	return out
}

// crossing says whether and where the segment from p to q crosses a side.
func (w *StudyArea) crossing(e borderSide, p, q point) (hit, bool) {
	ring := w.whole[e.ring]
	a, b := ring[e.edge], ring[(int(e.edge)+1)%len(ring)]
	if max(p.x, q.x) < min(a.x, b.x) || min(p.x, q.x) > max(a.x, b.x) || max(p.y, q.y) < min(a.y, b.y) || min(p.y, q.y) > max(a.y, b.y) {
		return hit{}, false
	}
	sp, sq := sideOf(a, b, p), sideOf(a, b, q)
	if sp == sq || endOf(p, q, a) == endOf(p, q, b) {
		return hit{}, false
	}
	bx, by := float64(b.x-a.x), float64(b.y-a.y)
	qx, qy := float64(q.x-p.x), float64(q.y-p.y)
	ax, ay := float64(p.x-a.x), float64(p.y-a.y)
	den := bx*qy - by*qx
	t, u := .5, .5
	if den != 0 {
		t = max(0, min(1, (ax*qy-ay*qx)/den))
		u = max(0, min(1, (ax*by-ay*bx)/den))
	}
	at := XY{(float64(a.x) + t*bx) * w.unit, (float64(a.y) + t*by) * w.unit}
	return hit{u: u, ring: e.ring, edge: e.edge, t: t, at: at, enters: sq > 0}, true
}

// sideOf returns 1 when p lies left of the side from a to b of the border, else
// -1; on the line, as if the border were a little further north-east.
func sideOf(a, b, p point) int {
	if s := turnOf(a, b, p); s != 0 {
		return s
	}
	return cmp.Or(cmp.Compare(b.y, a.y), cmp.Compare(a.x, b.x), -1)
}

// endOf is the same for a vertex a of the border and a segment from p to q.
func endOf(p, q, a point) int {
	if s := turnOf(p, q, a); s != 0 {
		return s
	}
	return cmp.Or(cmp.Compare(p.y, q.y), cmp.Compare(q.x, p.x), -1)
}

// along appends the border after crossing n up to crossing m, without both ends
// but with every other vertex and crossing on the way.
func (c *clip) along(out []XY, n, m int32) []XY {
	ring := c.w.rings[c.crossings[n].ring]
	lo, hi := c.first[c.crossings[n].ring], c.first[c.crossings[n].ring+1]
	for k := n; ; {
		x := &c.crossings[k]
		next := k + 1
		if next == hi {
			next = lo
		}
		y := &c.crossings[next]
		steps := int(y.edge) - int(x.edge)
		if steps < 0 || steps == 0 && next <= k {
			steps += len(ring)
		}
		for i := range steps {
			out = append(out, ring[(int(x.edge)+1+i)%len(ring)])
		}
		if next == m {
			return out
		}
		out = append(out, y.at)
		k = next
	}
}

// cycle follows the border of one face, or of a set of faces when only some
// chains are active, from a half edge: chain k forward (2k, the higher side on
// the left) or backward (2k+1). It returns the ring, area on the left, and
// marks the half edges used; visit hears of every stretch of border.
func (c *clip) cycle(start int32, active func(chain int32) bool, used []bool, visit func(arc int32)) (Ring, error) {
	var out Ring
	for h := start; ; {
		if used[h] {
			return nil, fmt.Errorf("spatial: half edge met twice: %w", errClip)
		}
		used[h] = true
		k := &c.chains[h/2]
		if k.from < 0 {
			out = append(out, k.pts...)
			if h&1 == 1 {
				slices.Reverse(out)
			}
			return out, nil
		}
		end := k.to
		if h&1 == 0 {
			out = append(out, k.pts...)
		} else {
			end = k.from
			for n := len(k.pts) - 1; n >= 0; n-- {
				out = append(out, k.pts[n])
			}
		}
		lo, hi := c.first[c.crossings[end].ring], c.first[c.crossings[end].ring+1]
		next := end
		for {
			visit(next)
			if next++; next == hi {
				next = lo
			}
			if active(c.crossings[next].chain) {
				break
			}
			if next == end {
				return nil, errClip
			}
		}
		out = c.along(out, end, next)
		x := c.crossings[next]
		if h = 2 * x.chain; !x.enters {
			h++
		}
		if h == start {
			return out, nil
		}
	}
}
