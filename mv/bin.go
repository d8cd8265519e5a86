package mv

import (
	"fmt"
	"math"
)

// Bin spreads a sample over the nodes of a lattice by linear binning in any
// dimension: each row gives its 2^d nearest nodes the product of the hat
// weights. Every row must lie within the lattice: ErrShape names the first that
// does not. For events in the plane at scale use a Tally, whose sums are exact.
// Cost: O(n 2^d).
func Bin(s *Sample, l Lattice) (Grid, error) {
	d := l.Dim()
	if s.Dim() != d {
		return Grid{}, fmt.Errorf("mv: bin: sample of dimension %d on a lattice of dimension %d: %w", s.Dim(), d, ErrShape)
	}
	g := NewGrid(l)
	base, frac := make([]int, d), make([]float64, d)
	for i := range s.Len() {
		for k := range d {
			u := (s.At(i, k) - l.Origin[k]) / l.Step[k]
			f := math.Floor(u)
			if f == float64(l.N[k]-1) && u == f && f > 0 {
				f-- // on the last node
			}
			if f < 0 || int(f) > l.N[k]-2 {
				return Grid{}, fmt.Errorf("mv: bin: row %d, column %d: %g is outside the lattice, %g to %g: %w", i, k, s.At(i, k), l.Origin[k], l.Coord(k, l.N[k]-1), ErrShape)
			}
			base[k], frac[k] = int(f), u-f
		}
		w := s.Weight(i)
		for corner := range 1 << d {
			at, stride, v := 0, 1, w
			for k := range d {
				bit := corner >> k & 1
				at += (base[k] + bit) * stride
				stride *= l.N[k]
				if bit == 1 {
					v *= frac[k]
				} else {
					v *= 1 - frac[k]
				}
			}
			g.Values[at] += v
		}
	}
	return g, nil
}

// LatticeAround returns the lattice with the given steps that covers the
// sample with the given margin beyond it on each axis (data units).
func LatticeAround(s *Sample, step, margin []float64) (Lattice, error) {
	d := s.Dim()
	origin, n := make([]float64, d), make([]int, d)
	for k := range d {
		lo, hi := math.Inf(1), math.Inf(-1)
		for _, v := range s.Columns()[k] {
			lo, hi = math.Min(lo, v), math.Max(hi, v)
		}
		origin[k] = lo - margin[k]
		nodes := math.Ceil((hi-lo+2*margin[k])/step[k]) + 2
		if !(nodes < 1<<31) {
			return Lattice{}, fmt.Errorf("mv: lattice: axis %d would need %g nodes: %w", k, nodes, ErrTooLarge)
		}
		n[k] = int(nodes)
	}
	return NewLattice(origin, step, n)
}
