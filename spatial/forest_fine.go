package spatial

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"drumlin/mv"
)

// fineCells says in which face, or faces, the fine cells of one cell row lie:
// each cell of the density's lattice is r x r fine ones.
type fineCells struct {
	r    int
	face []int32   // r rows of (nx-1) r fine cells: a face, or -1-n for the set sets[n]
	sets [][]int32 // faces a fine cell may touch, when a curve passes through it
	cut  [][]int32 // scratch: faces by fine cell of one cell
	hits []fineHit // scratch: where curves cross one line
	buf  []corner
}

type fineHit struct {
	u float64
	v int32 // a vertex of the curve
}

// refine returns how many times finer than the lattice of s the counts are, or
// an error unless they are its refinement: the same corner nodes, and r - 1
// more nodes in every gap.
func (s *Isolines) refine(counts mv.Grid) (int, error) {
	bad := func() (int, error) {
		return 0, fmt.Errorf("spatial: fine counts on %v nodes do not refine a lattice of %d x %d: %w", counts.N, s.nx, s.ny, mv.ErrShape)
	}
	if counts.Dim() != 2 || s.nx < 2 || s.ny < 2 || len(counts.Values) != counts.Len() {
		return bad()
	}
	r := (counts.N[0] - 1) / (s.nx - 1)
	if r < 1 || r > 64 || counts.N[0] != (s.nx-1)*r+1 || counts.N[1] != (s.ny-1)*r+1 {
		return bad()
	}
	for k := range 2 {
		if math.Abs(counts.Origin[k]-s.g.Origin[k]) > 1e-6*s.g.Step[k] || math.Abs(counts.Step[k]*float64(r)-s.g.Step[k]) > 1e-9*s.g.Step[k] {
			return bad()
		}
	}
	return r, nil
}

// boundFine replaces the sums behind Count.Min and Count.Max by those of finer
// counts: a fine node counts for certain when its own four cells, r times
// smaller, lie in the face.
func (m *measure) boundFine(s *Isolines, counts mv.Grid) error {
	r, err := s.refine(counts)
	if err != nil {
		return err
	}
	chunks := make([]measureChunk, chunksOf(s.ny-1))
	forChunks(s.ny-1, s.opt.Workers, func(c, lo, hi int) {
		below, above := newFineCells(s.nx, r), newFineCells(s.nx, r)
		if lo > 0 {
			s.fineRow(below, lo-1)
		}
		for j := lo; j < hi; j++ {
			s.fineRow(above, j)
			for k := range r {
				under := below
				if k > 0 {
					under = above
				} else if j == 0 {
					under = nil
				}
				countFine(&chunks[c], counts, j*r+k, under, (k+r-1)%r, above, k)
			}
			below, above = above, below
		}
		if hi == s.ny-1 {
			countFine(&chunks[c], counts, hi*r, below, r-1, nil, 0)
		}
	})
	m.collect(chunks)
	return nil
}

func newFineCells(nx, r int) *fineCells {
	return &fineCells{r: r, face: make([]int32, (nx-1)*r*r), cut: make([][]int32, r*r)}
}

// fineRow fills f for lattice cell row j.
func (s *Isolines) fineRow(f *fineCells, j int) {
	r, wide := f.r, (s.nx-1)*f.r
	f.sets = f.sets[:0]
	span := func(from, to int, face int32) {
		for k := range r {
			row := f.face[k*wide+from*r : k*wide+to*r]
			for i := range row {
				row[i] = face
			}
		}
	}
	from := 0
	s.scanCells(j+1, func(c *activeCell) {
		i := c.i - 1
		if to := min(i, s.nx-1); to > from {
			span(from, to, s.faceLeft(c.j, c.bottom))
		}
		from = i + 1
		if i >= 0 && i < s.nx-1 {
			s.fineCell(f, c, i*r, wide)
		}
	})
	if from < s.nx-1 {
		span(from, s.nx-1, 0)
	}
}

// fineCell fills the fine cells of one active cell, the first in column col.
// Along the middle of each fine row the faces change where curves cross it; a
// fine cell that a curve passes through touches the faces on both its sides.
func (s *Isolines) fineCell(f *fineCells, c *activeCell, col, wide int) {
	r := f.r
	scale := float64(r)
	p := s.round(c, f.buf)
	f.buf = p
	for k := range f.cut {
		f.cut[k] = f.cut[k][:0]
	}
	for n := range p {
		if p[n].mate > n {
			f.mark(s.ring[p[n].vertex]+1, s.outer[s.ring[p[n].vertex]], &p[n], &p[p[n].mate])
		}
	}
	for k := range r {
		y := (float64(k) + .5) / scale
		face := p[0].face
		for n := len(p) - 1; n >= 0 && p[n].u == 0 && p[n].vertex >= 0 && p[n].v < y; n-- { // up the left edge
			face = s.crossed(face, p[n].vertex)
		}
		f.hits = f.hits[:0]
		for n := range p {
			if p[n].mate <= n {
				continue
			}
			a, b := &p[n], &p[p[n].mate]
			if (a.v < y) != (b.v < y) {
				f.hits = append(f.hits, fineHit{a.u + (y-a.v)/(b.v-a.v)*(b.u-a.u), a.vertex})
			}
		}
		if len(f.hits) > 1 {
			slices.SortFunc(f.hits, func(a, b fineHit) int { return cmp.Compare(a.u, b.u) })
		}
		hits := f.hits
		for i := range r {
			x := (float64(i) + .5) / scale
			for len(hits) > 0 && hits[0].u < x {
				face = s.crossed(face, hits[0].v)
				hits = hits[1:]
			}
			at := k*wide + col + i
			set := f.cut[k*r+i]
			if len(set) == 0 {
				f.face[at] = face
				continue
			}
			f.face[at] = int32(-1 - len(f.sets))
			f.sets = append(f.sets, slices.Clone(set))
		}
	}
}

// mark notes two faces at every fine cell that the chord from a to b passes,
// taking in a little more on each side for rounding.
func (f *fineCells) mark(inner, outer int32, a, b *corner) {
	const hair = 1e-9
	if a.v > b.v {
		a, b = b, a
	}
	n := float64(f.r)
	first, last := max(int((a.v-hair)*n), 0), min(int((b.v+hair)*n), f.r-1)
	for k := first; k <= last; k++ {
		lo, hi := max(a.v, float64(k)/n-hair), min(b.v, float64(k+1)/n+hair)
		u0, u1 := a.u, b.u
		if d := b.v - a.v; d > 1e-12 {
			u0, u1 = a.u+(lo-a.v)/d*(b.u-a.u), a.u+(hi-a.v)/d*(b.u-a.u)
		}
		if u0 > u1 {
			u0, u1 = u1, u0
		}
		for i := max(int((u0-hair)*n), 0); i <= min(int((u1+hair)*n), f.r-1); i++ {
			set := &f.cut[k*f.r+i]
			for _, face := range [2]int32{inner, outer} {
				if !slices.Contains(*set, face) {
					*set = append(*set, face)
				}
			}
		}
	}
}

// countFine adds fine node row j, which lies between row b of the cells below
// and row a of the cells above (nil beyond the border).
func countFine(k *measureChunk, counts mv.Grid, j int, below *fineCells, b int, above *fineCells, a int) {
	nx := counts.N[0]
	wide := nx - 1
	row := counts.Values[j*nx : (j+1)*nx]
	var sides [2]*fineCells
	var faces [2][]int32
	n := 0
	if below != nil {
		sides[n], faces[n] = below, below.face[b*wide:(b+1)*wide]
		n++
	}
	if above != nil {
		sides[n], faces[n] = above, above.face[a*wide:(a+1)*wide]
		n++
	}
	if n == 1 {
		sides[1], faces[1] = sides[0], faces[0]
	}
	sum := faceSum{face: -1}
	for i, v := range row {
		if v == 0 {
			continue
		}
		l, r := max(i-1, 0), min(i, wide-1)
		q := faces[0][l]
		if q >= 0 && q == faces[0][r] && q == faces[1][l] && q == faces[1][r] {
			if q != sum.face {
				if sum.face >= 0 {
					k.sums = append(k.sums, sum)
				}
				sum = faceSum{face: q}
			}
			sum.count += v
			continue
		}
		first := len(k.touch)
		for m := range sides {
			for _, q := range [2]int32{faces[m][l], faces[m][r]} {
				if q >= 0 {
					k.touch = addTouch(k.touch, first, q, 0)
					continue
				}
				for _, g := range sides[m].sets[-1-q] {
					k.touch = addTouch(k.touch, first, g, 0)
				}
			}
		}
		k.border = append(k.border, borderNode{v, int32(first), int32(len(k.touch))})
	}
	if sum.face >= 0 {
		k.sums = append(k.sums, sum)
	}
}
