package mv

import (
	"fmt"
	"math"
)

// Functional returns the density functionals
//
//	psi_k(G) = n^-2 sum_i sum_j w_i w_j D^k phi_G(X_i - X_j),  |k| = r even,
//
// diagonal terms included, in the order of MultiIndices(d, r), as a weighted
// sum of |phi(t)|^2 over the frequencies. r = 0 gives the integral of the
// product that cross-validation needs. Cost: one exponential per live
// frequency. Unit: data units to the power -(d+r).
//
// Source: Parseval's identity; Wand and Jones 1995, section 3.5, for psi.
func (s *Spectrum) Functional(r int, g BandwidthMatrix) []float64 {
	d := s.Dim()
	if g.Dim() != d || r < 0 || r%2 != 0 {
		panic(fmt.Sprintf("mv: functional: order %d and matrix of dimension %d for a spectrum of dimension %d", r, g.Dim(), d))
	}
	index := MultiIndices(d, r)
	m := g.Entries()
	rows := s.half.Rows()
	part := make([]float64, rows*len(index))
	width := s.half.Width()
	s.eachRow(func(row int, rest []int) {
		a, b, c := s.line(m, rest)
		from, to := live(a, b, c, s.freq[0], width)
		if from >= to {
			return
		}
		// Moments of t0 along the line, then the monomials of the other axes.
		moment := make([]float64, r+1)
		power := s.power[row*width : (row+1)*width]
		for i := from; i < to; i++ {
			t := s.freq[0][i]
			v := power[i] * math.Exp(-0.5*((a*t+2*b)*t+c))
			for q := range moment {
				moment[q] += v
				v *= t
			}
		}
		out := part[row*len(index) : (row+1)*len(index)]
		for j, k := range index {
			v := moment[k[0]]
			for axis, bin := range rest {
				for range k[axis+1] {
					v *= s.freq[axis+1][bin]
				}
			}
			out[j] = v
		}
	})
	sum := make([]float64, len(index))
	for row := range rows {
		for j := range sum {
			sum[j] += part[row*len(index)+j]
		}
	}
	scale := 1.0
	for k := range d {
		scale /= float64(s.pad[k]) * s.lat.Step[k]
	}
	if r%4 == 2 {
		scale = -scale // i^r
	}
	for j := range sum {
		sum[j] *= scale
	}
	return sum
}
