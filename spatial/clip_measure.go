package spatial

import (
	"cmp"
	"math"
	"slices"

	"drumlin/mv"
)

// primitive is the integral of a bilinear interpolant from the west along the
// rows of a lattice, so that its integral over a polygon is one around the
// polygon's border (Green's theorem): exact, with two-point quadrature on every
// piece of a side within one cell.
type primitive struct {
	g   mv.Grid
	sum []float64 // per node: integral along its row from the first node, in steps
}

func newPrimitive(g mv.Grid) *primitive {
	p := &primitive{g: g, sum: make([]float64, len(g.Values))}
	nx := g.N[0]
	for j := range g.N[1] {
		row, sum := g.Values[j*nx:(j+1)*nx], p.sum[j*nx:(j+1)*nx]
		for i := 1; i < nx; i++ {
			sum[i] = sum[i-1] + (row[i-1]+row[i])/2
		}
	}
	return p
}

// along returns the integral of the primitive over dy from a to b.
func (p *primitive) along(a, b XY) float64 {
	nx, ny := p.g.N[0], p.g.N[1]
	o, s := p.g.Origin, p.g.Step
	u := XY{(a.X - o[0]) / s[0], (a.Y - o[1]) / s[1]}
	v := XY{(b.X - o[0]) / s[0], (b.Y - o[1]) / s[1]}
	var total float64
	eachCell(u, v, ny-1, func(i, j int, u, v XY) {
		if i < 0 {
			return
		}
		lo, hi := j*nx, (j+1)*nx
		for _, t := range gauss2 {
			y := u.Y + t*(v.Y-u.Y) - float64(j)
			below, above := p.sum[lo+nx-1], p.sum[hi+nx-1]
			if i < nx-1 {
				x := u.X + t*(v.X-u.X) - float64(i)
				f := func(n int) float64 {
					return p.sum[n] + x*p.g.Values[n] + x*x/2*(p.g.Values[n+1]-p.g.Values[n])
				}
				below, above = f(lo+i), f(hi+i)
			}
			total += ((1-y)*below + y*above) * (v.Y - u.Y) / 2
		}
	})
	return total * s[0] * s[1]
}

// measure is what the faces hold. Events all lie in the study area, so a node
// with an area smaller than its cell has its events closer together.
func (c *clip) measure(density, counts, weights, fine mv.Grid, workers int) (*measure, error) {
	mask := c.w.Mask(density.Lattice)
	spread := func(g mv.Grid) *primitive {
		d := mv.NewGrid(g.Lattice)
		for i, v := range g.Values {
			if v != 0 && mask.Values[i] > 0 {
				d.Values[i] = v / mask.Values[i]
			}
		}
		return newPrimitive(d)
	}
	n := len(c.label)
	m := &measure{mass: make([]float64, n), whole: make([]float64, n), count: make([]float64, n)}
	c.integrate(m.mass, newPrimitive(density))
	c.integrate(m.count, spread(counts))
	if len(weights.Values) > 0 {
		m.weight = make([]float64, n)
		c.integrate(m.weight, spread(weights))
	}
	r := 1
	if len(fine.Values) > 0 {
		var err error
		if r, err = c.s.refine(fine); err != nil {
			return nil, err
		}
	} else {
		fine = counts
	}
	c.bound(m, fine, r, workers)
	return m, nil
}

func (c *clip) integrate(to []float64, p *primitive) {
	c.eachSegment(func(a, b XY, left, right int32) {
		if a.Y == b.Y {
			return
		}
		v := p.along(a, b)
		to[left] += v
		if right >= 0 {
			to[right] -= v
		}
	})
	for f, v := range to {
		to[f] = max(0, v)
	}
}

// fineMark says that a curve or the border passes a fine cell.
type fineMark struct {
	col         int32
	left, right int32
}

// bound sums fine node counts for certain: a node counts for a face when what
// its four cells have of the study area lies in that face.
func (c *clip) bound(m *measure, fine mv.Grid, r, workers int) {
	nx, ny := fine.N[0]-1, fine.N[1]-1 // cells
	marks := make([][]fineMark, ny)
	rows := make([]rowFaces, ny)
	o, s := fine.Origin, fine.Step
	const hair = 1e-6
	c.eachSegment(func(a, b XY, left, right int32) {
		u := XY{(a.X - o[0]) / s[0], (a.Y - o[1]) / s[1]}
		v := XY{(b.X - o[0]) / s[0], (b.Y - o[1]) / s[1]}
		eachCell(XY{u.X, u.Y + 1}, XY{v.X, v.Y + 1}, ny+2, func(i, j int, p, q XY) {
			j--
			x0, x1 := math.Floor(min(p.X, q.X)-hair), math.Floor(max(p.X, q.X)+hair)
			y0, y1 := math.Floor(min(p.Y, q.Y)-1-hair), math.Floor(max(p.Y, q.Y)-1+hair)
			for y := max(0, int(y0)); y <= min(ny-1, int(y1)); y++ {
				for x := max(0, int(x0)); x <= min(nx-1, int(x1)); x++ {
					marks[y] = append(marks[y], fineMark{int32(x), left, right})
				}
			}
			if j < 0 || j >= ny {
				return
			}
			mid := float64(j) + 1.5
			if (p.Y > mid) != (q.Y > mid) {
				east := right
				if p.Y > q.Y {
					east = left
				}
				rows[j] = append(rows[j], rowChange{p.X + (mid-p.Y)/(q.Y-p.Y)*(q.X-p.X), east})
			}
		})
	})
	chunks := make([]measureChunk, chunksOf(ny+1))
	forChunks(ny+1, workers, func(n, lo, hi int) {
		below, above := newFineCells(c.s.nx, r), newFineCells(c.s.nx, r)
		if lo > 0 {
			fillClipRow(below, nx, marks[lo-1], rows[lo-1])
		}
		for j := lo; j < hi; j++ {
			var top, under *fineCells
			if j < ny {
				fillClipRow(above, nx, marks[j], rows[j])
				top = above
			}
			if j > 0 {
				under = below
			}
			countFine(&chunks[n], fine, j, under, 0, top, 0)
			below, above = above, below
		}
	})
	m.collect(chunks)
}

// fillClipRow fills the first row of f from the marks of a row of fine cells.
// Beyond the border a cell has no face: an empty set.
func fillClipRow(f *fineCells, nx int, marks []fineMark, changes rowFaces) {
	f.sets = append(f.sets[:0], nil)
	slices.SortStableFunc(changes, func(a, b rowChange) int { return cmp.Compare(a.x, b.x) })
	face := int32(-1)
	k := 0
	for i := range nx {
		for k < len(changes) && changes[k].x < float64(i)+.5 {
			face = changes[k].face
			k++
		}
		f.face[i] = face // -1 is the empty set
	}
	slices.SortStableFunc(marks, func(a, b fineMark) int { return cmp.Compare(a.col, b.col) })
	for n := 0; n < len(marks); {
		col := marks[n].col
		var set []int32
		for ; n < len(marks) && marks[n].col == col; n++ {
			for _, g := range [2]int32{marks[n].left, marks[n].right} {
				if g >= 0 && !slices.Contains(set, g) {
					set = append(set, g)
				}
			}
		}
		if len(set) == 1 {
			f.face[col] = set[0]
			continue
		}
		f.face[col] = int32(-1 - len(f.sets))
		f.sets = append(f.sets, set)
	}
}

// collect turns chunks of fine rows into the sums behind the bounds.
func (m *measure) collect(chunks []measureChunk) {
	clear(m.whole)
	m.border, m.touch = nil, nil
	for c := range chunks {
		for _, f := range chunks[c].sums {
			m.whole[f.face] += f.count
		}
		base := int32(len(m.touch))
		for _, b := range chunks[c].border {
			if b.first == b.last {
				continue // nothing of the study area in reach
			}
			m.border = append(m.border, borderNode{b.count, b.first + base, b.last + base})
		}
		m.touch = append(m.touch, chunks[c].touch...)
	}
}
