package spatial

// chord joins two edges of a cell (0 bottom, 1 right, 2 top, 3 left), from the
// one to the other with the higher side on the left.
type chord struct{ from, to uint8 }

// chordTable[joined][mask] lists the chords of a cell whose corners in mask
// are inside (bit 0 lower left, then anticlockwise). joined says whether two
// opposite inside corners belong together.
var chordTable = buildChords()

func buildChords() (table [2][16][]chord) {
	for joined := range table {
		for mask := range 16 {
			in := func(c int) bool { return mask>>(c&3)&1 == 1 }
			for e := range 4 {
				if !in(e) || in(e+1) {
					continue // going round, the inside does not end on edge e
				}
				to := e
				for {
					if joined == 1 {
						to = (to + 1) & 3
					} else {
						to = (to + 3) & 3
					}
					if !in(to) && in(to+1) {
						break
					}
				}
				table[joined][mask] = append(table[joined][mask], chord{uint8(e), uint8(to)})
			}
		}
	}
	return table
}

// draw places all vertices and links each to the one that follows.
func (s *Isolines) draw() {
	forChunks(s.ny+1, s.opt.Workers, func(_, lo, hi int) {
		for j := lo; j < hi; j++ {
			s.scanCells(j, func(c *activeCell) {
				if c.nb > 0 {
					s.placeX(c)
				}
				if c.nl > 0 {
					s.placeY(c)
				}
				s.link(c)
			})
		}
	})
}

func (s *Isolines) placeX(c *activeCell) {
	a, b := c.c[0], c.c[1]
	ts := s.t[c.bottom : c.bottom+c.nb]
	s.crossX(c.i, c.j, a, b, ts)
	x0, x1, y := s.nodeX(c.i), s.nodeX(c.i+1), s.nodeY(c.j)
	for m, t := range ts {
		s.put(c.bottom+int32(m), XY{x0 + t*(x1-x0), y}, a, b, m, c.i)
	}
}

func (s *Isolines) placeY(c *activeCell) {
	a, b := c.c[0], c.c[3]
	ts := s.t[c.left : c.left+c.nl]
	s.crossY(c.i, c.j, a, b, ts)
	x, y0, y1 := s.nodeX(c.i), s.nodeY(c.j), s.nodeY(c.j+1)
	for m, t := range ts {
		s.put(c.left+int32(m), XY{x, y0 + t*(y1-y0)}, a, b, m, c.i)
	}
}

func (s *Isolines) put(v int32, at XY, a, b uint8, m, i int) {
	k := int(a) + m
	if a > b {
		k = int(a) - 1 - m
	}
	s.at[v], s.level[v], s.edge[v] = at, uint8(k), int32(i)
}

// link writes next for the vertices whose chord starts in this cell.
func (s *Isolines) link(c *activeCell) {
	low, high := min(c.c[0], c.c[1], c.c[2], c.c[3]), max(c.c[0], c.c[1], c.c[2], c.c[3])
	var saddle float64
	known := false
	for k := int(low); k < int(high); k++ {
		mask, joined := 0, 0
		for n, v := range c.c {
			if int(v) > k {
				mask |= 1 << n
			}
		}
		if mask == 5 || mask == 10 {
			if !known {
				saddle, known = s.saddle(c), true
			}
			if saddle >= s.levels[k] {
				joined = 1
			}
		}
		for _, h := range chordTable[joined][mask] {
			s.next[c.vertex(h.from, k)] = c.vertex(h.to, k)
		}
	}
}

// vertex returns the vertex of level k on the given edge.
func (c *activeCell) vertex(edge uint8, k int) int32 {
	switch edge {
	case 0:
		return vertexOn(c.bottom, c.c[0], c.c[1], k)
	case 1:
		return vertexOn(c.right, c.c[1], c.c[2], k)
	case 2:
		return vertexOn(c.top, c.c[3], c.c[2], k)
	}
	return vertexOn(c.left, c.c[0], c.c[3], k)
}

// saddle returns the value of the bilinear interpolant at its saddle point.
// Corners can alternate only away from the frame.
func (s *Isolines) saddle(c *activeCell) float64 {
	p := (c.j-1)*s.nx + c.i - 1
	v := s.g.Values
	a, b, d, e := v[p], v[p+1], v[p+s.nx+1], v[p+s.nx]
	// (a d - b e) / (a + d - b - e), taken from a so that large common parts cancel
	return a - (a-b)*(a-e)/((a-b)+(d-e))
}
