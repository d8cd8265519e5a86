package mv

import (
	"fmt"
	"math"
)

// Lattice is a regular set of nodes in d dimensions. Axis 0 varies fastest in
// every flat slice that goes with it: node (i0, i1, ...) stands at
// i0 + N[0]*(i1 + N[1]*(...)), and its coordinate on axis k is
// Origin[k] + Step[k]*i_k. Units are those of the data. A Lattice is a value:
// copies share the three slices, which nobody changes after construction.
type Lattice struct {
	Origin []float64 // coordinate of node 0, per axis
	Step   []float64 // distance between nodes, per axis, positive
	N      []int     // nodes per axis, at least 1
}

// NewLattice checks the three slices and returns the lattice.
func NewLattice(origin, step []float64, n []int) (Lattice, error) {
	d := len(n)
	if d == 0 || len(origin) != d || len(step) != d {
		return Lattice{}, fmt.Errorf("mv: lattice: %d origins, %d steps and %d node counts; all must be the same and at least 1: %w",
			len(origin), len(step), d, ErrShape)
	}
	for k := range n {
		if n[k] < 1 || !(step[k] > 0) || math.IsInf(step[k], 0) || math.IsNaN(origin[k]) || math.IsInf(origin[k], 0) {
			return Lattice{}, fmt.Errorf("mv: lattice: axis %d has origin %g, step %g, %d nodes; needs finite numbers, a positive step and a node: %w",
				k, origin[k], step[k], n[k], ErrShape)
		}
	}
	return Lattice{Origin: origin, Step: step, N: n}, nil
}

// Dim returns the number of axes d.
func (l Lattice) Dim() int { return len(l.N) }

// Len returns the number of nodes.
func (l Lattice) Len() int {
	n := 1
	for _, m := range l.N {
		n *= m
	}
	return n
}

// Coord returns the coordinate of index i on axis k.
func (l Lattice) Coord(k, i int) float64 { return l.Origin[k] + l.Step[k]*float64(i) }

// CellVolume returns the product of the steps, in data units to the power d.
func (l Lattice) CellVolume() float64 {
	v := 1.0
	for _, s := range l.Step {
		v *= s
	}
	return v
}

// Grid is a value at every node of a lattice: node weights, a density, an
// error. len(Values) == Lattice.Len(), axis 0 fastest.
type Grid struct {
	Lattice
	Values []float64
}

// NewGrid returns a grid of zeros on the lattice.
func NewGrid(l Lattice) Grid { return Grid{Lattice: l, Values: make([]float64, l.Len())} }

// Moments returns the weighted mean and covariance (row-major, divisor n-1
// with n the effective sample size) of node weights. Linear binning keeps the
// mean and adds about step^2/6 to each variance; that is taken off again.
func (g Grid) Moments(n float64) (mean, cov []float64, err error) {
	d := g.Dim()
	var total float64
	mean, cov = make([]float64, d), make([]float64, d*d)
	at := make([]int, d)
	each := func(f func(w float64)) {
		clear(at)
		for _, w := range g.Values {
			if w != 0 {
				f(w)
			}
			for k := range at {
				if at[k]++; at[k] < g.N[k] {
					break
				}
				at[k] = 0
			}
		}
	}
	each(func(w float64) {
		total += w
		for k := range d {
			mean[k] += w * float64(at[k])
		}
	})
	if !(total > 0) || !(n > 1) {
		return nil, nil, fmt.Errorf("mv: moments: weights add to %g, effective sample size %g: %w", total, n, ErrDegenerate)
	}
	for k := range d {
		mean[k] /= total
	}
	each(func(w float64) {
		for i := range d {
			for j := range i + 1 {
				cov[i*d+j] += w * (float64(at[i]) - mean[i]) * (float64(at[j]) - mean[j])
			}
		}
	})
	for i := range d {
		for j := range i + 1 {
			c := cov[i*d+j] / total * n / (n - 1)
			if i == j {
				c = math.Max(0, c-1.0/6)
			}
			c *= g.Step[i] * g.Step[j]
			cov[i*d+j], cov[j*d+i] = c, c
		}
	}
	for k := range d {
		mean[k] = g.Coord(k, 0) + mean[k]*g.Step[k]
	}
	return mean, cov, nil
}
