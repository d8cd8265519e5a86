package spatial

import (
	"fmt"
	"slices"

	"drumlin/mv"
)

// measure is what the faces of Isolines hold: probability, events, weight.
//
// Nodes whose cells all lie in one face are summed into that face at once.
// The others, the border nodes, are kept one by one with the faces their cells
// touch, because bounds for a union of faces are not sums over the faces.
type measure struct {
	mass   []float64 // per face, integral of the bilinear interpolant
	whole  []float64 // per face, events of nodes whose cells all lie in it
	count  []float64 // per face, whole plus the border nodes' shares
	weight []float64 // per face, recorded weight; nil without weights
	border []borderNode
	touch  []touch
}

// borderNode is a node some of whose cells lie in different faces.
type borderNode struct {
	count       float64
	first, last int32 // stretch of touch
}

// touch is one face met by a border node's cells, with the share of the node's
// hat that lies in it; shares of a node add to 1.
type touch struct {
	face  int32
	share float64
}

// measureChunk is what one chunk of rows adds.
type measureChunk struct {
	cells  []cutCell // active cells of all the chunk's rows
	start  []int32   // per row of the chunk, first of cells
	pieces []piece
	sums   []faceSum
	border []borderNode
	touch  []touch
}

type faceSum struct {
	face                int32
	mass, count, weight float64
	whole               bool
}

// measure integrates the density over every face and shares out counts and
// weights (weights may have no values). The three grids have one lattice of at
// least 2 x 2 nodes. Sums are taken in the order of rows, whatever the workers.
func (s *Isolines) measure(counts, weights mv.Grid) (*measure, error) {
	n := s.nx * s.ny
	if s.nx < 2 || s.ny < 2 || len(counts.Values) != n || len(weights.Values) != 0 && len(weights.Values) != n {
		return nil, fmt.Errorf("spatial: %d counts and %d weights on a lattice of %d x %d nodes; needs one per node and 2 x 2 nodes: %w",
			len(counts.Values), len(weights.Values), s.nx, s.ny, mv.ErrShape)
	}
	chunks := make([]measureChunk, chunksOf(s.ny))
	forChunks(s.ny-1, s.opt.Workers, func(c, lo, hi int) {
		buf := make([]corner, 0, 16)
		for j := lo; j < hi; j++ {
			buf = s.cutRow(&chunks[c], j, buf)
		}
	})
	forChunks(s.ny, s.opt.Workers, func(c, lo, hi int) {
		marks := [2][]int32{make([]int32, s.nx+1), make([]int32, s.nx+1)}
		for j := lo; j < hi; j++ {
			s.countRow(chunks, &chunks[c], j, counts.Values, weights.Values, marks)
		}
	})
	m := &measure{mass: make([]float64, len(s.label)), whole: make([]float64, len(s.label)), count: make([]float64, len(s.label))}
	if len(weights.Values) > 0 {
		m.weight = make([]float64, len(s.label))
	}
	var nb, nt int
	for c := range chunks {
		nb, nt = nb+len(chunks[c].border), nt+len(chunks[c].touch)
	}
	m.border, m.touch = make([]borderNode, 0, nb), make([]touch, 0, nt)
	for c := range chunks {
		for _, f := range chunks[c].sums {
			m.mass[f.face] += f.mass
			m.count[f.face] += f.count
			if f.whole {
				m.whole[f.face] += f.count
			}
			if m.weight != nil {
				m.weight[f.face] += f.weight
			}
		}
		base := int32(len(m.touch))
		for _, b := range chunks[c].border {
			m.border = append(m.border, borderNode{b.count, b.first + base, b.last + base})
		}
		m.touch = append(m.touch, chunks[c].touch...)
	}
	return m, nil
}

// cutRow cuts the active cells of lattice cell row j into pieces and sums the
// density over all cells of the row.
func (s *Isolines) cutRow(k *measureChunk, j int, buf []corner) []corner {
	k.start = append(k.start, int32(len(k.cells)))
	lo, up := s.g.Values[j*s.nx:(j+1)*s.nx], s.g.Values[(j+1)*s.nx:(j+2)*s.nx]
	area := s.g.Step[0] * s.g.Step[1]
	span := func(from, to int, face int32) { // cells [from, to), all in one face
		if to <= from {
			return
		}
		var sum float64
		for i := from + 1; i < to; i++ {
			sum += lo[i] + up[i]
		}
		sum = 2*sum + lo[from] + up[from] + lo[to] + up[to]
		k.sums = append(k.sums, faceSum{face: face, mass: area * sum / 4})
	}
	from := 0
	s.scanCells(j+1, func(c *activeCell) {
		i := c.i - 1
		span(from, min(i, s.nx-1), s.faceLeft(c.j, c.bottom))
		from = i + 1
		if i < 0 || i >= s.nx-1 {
			return // a cell of the frame
		}
		first := len(k.pieces)
		buf, k.pieces = s.pieces(c, buf, k.pieces)
		for _, p := range k.pieces[first:] {
			mass := lo[i]*p.hat[0] + lo[i+1]*p.hat[1] + up[i+1]*p.hat[2] + up[i]*p.hat[3]
			k.sums = append(k.sums, faceSum{face: p.face, mass: area * mass})
		}
		k.cells = append(k.cells, cutCell{int32(i), int32(first), int32(len(k.pieces))})
	})
	span(from, s.nx-1, 0)
	return buf
}

// cutCells returns the active cells of lattice cell row j and their pieces.
func cutCells(chunks []measureChunk, j, rows int) ([]cutCell, []piece) {
	if j < 0 || j >= rows {
		return nil, nil
	}
	k := &chunks[j/chunkRows]
	n := j % chunkRows
	last := len(k.cells)
	if n+1 < len(k.start) {
		last = int(k.start[n+1])
	}
	return k.cells[k.start[n]:last], k.pieces
}

// countRow shares out the counts and weights of lattice node row j. marks are
// two rows of zeros and are left so; they point to the active cells below and
// above, counted from 1, shifted by one column.
func (s *Isolines) countRow(chunks []measureChunk, k *measureChunk, j int, counts, weights []float64, marks [2][]int32) {
	var cells [2][]cutCell
	var pieces [2][]piece
	for side := range cells {
		cells[side], pieces[side] = cutCells(chunks, j-1+side, s.ny-1)
		for n, c := range cells[side] {
			marks[side][c.i+1] = int32(n + 1)
		}
	}
	below, above := marks[0], marks[1]
	counts = counts[j*s.nx : (j+1)*s.nx]
	if len(weights) > 0 {
		weights = weights[j*s.nx : (j+1)*s.nx]
	}
	s.eachRun(j, func(lo, hi int, face int32) {
		sum := faceSum{face: face, whole: true}
		for i := lo; i < hi; i++ {
			if below[i]|below[i+1]|above[i]|above[i+1] == 0 {
				sum.count += counts[i]
				if len(weights) > 0 {
					sum.weight += weights[i]
				}
				continue
			}
			if counts[i] == 0 && (len(weights) == 0 || weights[i] == 0) {
				continue
			}
			b := borderNode{count: counts[i], first: int32(len(k.touch))}
			cellsHere := 0.0
			for side := range marks {
				if row := j - 1 + side; row < 0 || row >= s.ny-1 {
					continue
				}
				for left := range 2 { // the cell to the left, then to the right
					col := i - 1 + left
					if col < 0 || col >= s.nx-1 {
						continue
					}
					cellsHere++
					n := marks[side][i+left]
					if n == 0 {
						k.touch = addTouch(k.touch, int(b.first), face, 0.25)
						continue
					}
					at := [2][2]int{{2, 3}, {1, 0}}[side][left] // which corner of the cell this node is
					for _, p := range pieces[side][cells[side][n-1].first:cells[side][n-1].last] {
						k.touch = addTouch(k.touch, int(b.first), p.face, p.hat[at])
					}
				}
			}
			b.last = int32(len(k.touch))
			for n := b.first; n < b.last; n++ {
				t := &k.touch[n]
				t.share = min(max(t.share*4/cellsHere, 0), 1)
				f := faceSum{face: t.face, count: t.share * counts[i]}
				if len(weights) > 0 {
					f.weight = t.share * weights[i]
				}
				k.sums = append(k.sums, f)
			}
			k.border = append(k.border, b)
		}
		if sum.count != 0 || sum.weight != 0 {
			k.sums = append(k.sums, sum)
		}
	})
	for side := range cells {
		for _, c := range cells[side] {
			marks[side][c.i+1] = 0
		}
	}
}

// addTouch adds a share of a face to the stretch of all that starts at first.
func addTouch(all []touch, first int, face int32, share float64) []touch {
	if n := slices.IndexFunc(all[first:], func(t touch) bool { return t.face == face }); n >= 0 {
		all[first+n].share += share
		return all
	}
	return append(all, touch{face, share})
}

// union adds up the faces of a set: probability, events with bounds, weight.
func (m *measure) union(in func(face int32) bool) (mass float64, events Count, weight float64) {
	for f := range m.mass {
		if !in(int32(f)) {
			continue
		}
		mass += m.mass[f]
		events.Estimate += m.count[f]
		events.Min += m.whole[f]
		events.Max += m.whole[f]
		if m.weight != nil {
			weight += m.weight[f]
		}
	}
	for _, b := range m.border {
		all, any := true, false
		for _, t := range m.touch[b.first:b.last] {
			if in(t.face) {
				any = true
			} else {
				all = false
			}
		}
		if all {
			events.Min += b.count
		}
		if any {
			events.Max += b.count
		}
	}
	events.Estimate = min(max(events.Estimate, events.Min), events.Max)
	if m.weight == nil {
		weight = events.Estimate
	}
	return mass, events, weight
}
