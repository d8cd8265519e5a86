package spatial

// piece is the part of a cell that lies in one face, with the integrals of the
// four corners' bilinear hats over it, as shares of the cell. Over a whole
// cell each is 1/4; their sum is the piece's share of the cell's area.
type piece struct {
	face int32
	hat  [4]float64
}

// cutCell is an active cell's stretch in a chunk's pieces.
type cutCell struct{ i, first, last int32 }

// corner is one position on the way around a cell: a corner or a vertex.
type corner struct {
	u, v   float64
	mate   int   // position of the chord's other end, -1 for a corner
	vertex int32 // -1 for a corner
	face   int32 // face of the stretch from here to the next position
	done   bool
}

// round lists what lies on a cell's border, anticlockwise from the lower left
// corner. The result uses the memory of buf.
func (s *Isolines) round(c *activeCell, buf []corner) []corner {
	p := buf[:0]
	at := func(n int32) int { // position of a vertex
		switch {
		case n >= c.bottom && n < c.bottom+c.nb:
			return int(1 + n - c.bottom)
		case n >= c.right && n < c.right+c.nr:
			return int(2 + c.nb + n - c.right)
		case n >= c.top && n < c.top+c.nt:
			return int(2 + c.nb + c.nr + c.nt - (n - c.top))
		}
		return int(3 + c.nb + c.nr + c.nt + c.nl - (n - c.left))
	}
	p = append(p, corner{mate: -1, vertex: -1})
	for n := c.bottom; n < c.bottom+c.nb; n++ {
		p = append(p, corner{u: s.t[n], mate: -1, vertex: n})
	}
	p = append(p, corner{u: 1, mate: -1, vertex: -1})
	for n := c.right; n < c.right+c.nr; n++ {
		p = append(p, corner{u: 1, v: s.t[n], mate: -1, vertex: n})
	}
	p = append(p, corner{u: 1, v: 1, mate: -1, vertex: -1})
	for n := c.top + c.nt - 1; n >= c.top; n-- {
		p = append(p, corner{u: s.t[n], v: 1, mate: -1, vertex: n})
	}
	p = append(p, corner{v: 1, mate: -1, vertex: -1})
	for n := c.left + c.nl - 1; n >= c.left; n-- {
		p = append(p, corner{v: s.t[n], mate: -1, vertex: n})
	}
	class := int(c.c[0])
	face := s.faceLeft(c.j, c.bottom)
	for i := range p {
		if n := p[i].vertex; n >= 0 {
			face = s.crossed(face, n)
			if k := int(s.level[n]); class > k { // the inside ends: a chord starts here
				class = k
				m := at(s.next[n])
				p[i].mate, p[m].mate = m, i
			} else {
				class = k + 1
			}
		}
		p[i].face = face
	}
	return p
}

// walk goes once around the piece whose border holds the stretch after
// position start and calls f for each of its positions. Pieces have at least
// one stretch of the cell's border, since chords share no ends.
func walk(p []corner, start int, f func(*corner)) {
	for i := start; ; {
		p[i].done = true
		f(&p[i])
		if i++; i == len(p) {
			i = 0
		}
		if p[i].mate >= 0 {
			f(&p[i])
			i = p[i].mate
		}
		if i == start {
			return
		}
	}
}

// moments sums the integrals of 1, u, v and uv over a polygon.
type moments struct {
	first, last corner
	n           int
	a, u, v, uv float64
}

func (m *moments) add(p *corner) {
	if m.n == 0 {
		m.first = *p
	} else {
		m.side(&m.last, p)
	}
	m.last = *p
	m.n++
}

func (m *moments) side(p, q *corner) {
	c := p.u*q.v - q.u*p.v
	m.a += c
	m.u += (p.u + q.u) * c
	m.v += (p.v + q.v) * c
	m.uv += (p.u*(2*p.v+q.v) + q.u*(p.v+2*q.v)) * c
}

// hats closes the polygon and returns the integrals of the corners' hats.
func (m *moments) hats() [4]float64 {
	m.side(&m.last, &m.first)
	a, u, v, uv := m.a/2, m.u/6, m.v/6, m.uv/24
	return [4]float64{a - u - v + uv, u - uv, uv, v - uv}
}

// pieces appends the pieces of a cell. Two pieces of one face stay apart.
func (s *Isolines) pieces(c *activeCell, buf []corner, out []piece) ([]corner, []piece) {
	p := s.round(c, buf)
	for i := range p {
		if p[i].done {
			continue
		}
		var m moments
		walk(p, i, m.add)
		out = append(out, piece{face: p[i].face, hat: m.hats()})
	}
	return p, out
}

// Locate returns the face that holds a position, 0 outside the lattice.
func (s *Isolines) Locate(at XY) int {
	x := (at.X - s.g.Origin[0]) / s.g.Step[0]
	y := (at.Y - s.g.Origin[1]) / s.g.Step[1]
	if s.nx < 2 || s.ny < 2 || !(x >= 0 && y >= 0 && x <= float64(s.nx-1) && y <= float64(s.ny-1)) {
		return 0
	}
	i, j := min(int(x), s.nx-2), min(int(y), s.ny-2)
	found := int32(-1)
	s.scanCells(j+1, func(c *activeCell) {
		if found >= 0 {
			return
		}
		switch {
		case c.i == i+1:
			p := s.round(c, nil)
			found = p[0].face
			for n := range p {
				if p[n].done {
					continue
				}
				var r Ring
				walk(p, n, func(q *corner) { r = append(r, XY{q.u, q.v}) })
				if r.Contains(XY{x - float64(i), y - float64(j)}) {
					found = p[n].face
				}
			}
		case c.i > i+1:
			found = s.faceLeft(c.j, c.bottom)
		}
	})
	return int(max(found, 0)) // no active cell to the right: the background
}
