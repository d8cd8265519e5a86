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
	return s.Functionals(g, r)[0]
}

// Functionals returns the functionals of several even orders at one matrix in
// a single pass: the exponentials are shared. Otherwise as Functional.
func (s *Spectrum) Functionals(g BandwidthMatrix, orders ...int) [][]float64 {
	d := s.Dim()
	top, size := 0, 0
	index := make([][][]int, len(orders))
	for o, r := range orders {
		if g.Dim() != d || r < 0 || r%2 != 0 {
			panic(fmt.Sprintf("mv: functional: order %d and matrix of dimension %d for a spectrum of dimension %d", r, g.Dim(), d))
		}
		top = max(top, r)
		index[o] = MultiIndices(d, r)
		size += len(index[o])
	}
	m := g.Entries()
	rows := s.half.Rows()
	part := make([]float64, rows*size)
	width := s.half.Width()
	s.eachRow(func(row int, rest []int) {
		a, b, c := s.line(m, rest)
		from, to := live(a, b, c, s.freq[0], width)
		if from >= to {
			return
		}
		// Moments of t0 along the line, then the monomials of the other axes.
		var room [16]float64
		moment := room[:min(top+1, len(room))]
		if top+1 > len(room) {
			moment = make([]float64, top+1)
		}
		lineMoments(moment, s.power[row*width+from:row*width+to], s.freq[0][from:to], a, b, c)
		out := part[row*size : (row+1)*size]
		for _, ks := range index {
			for j, k := range ks {
				v := moment[k[0]]
				for axis, bin := range rest {
					for range k[axis+1] {
						v *= s.freq[axis+1][bin]
					}
				}
				out[j] = v
			}
			out = out[len(ks):]
		}
	})
	sum := make([]float64, size)
	for row := range rows {
		for j := range sum {
			sum[j] += part[row*size+j]
		}
	}
	scale := 1.0
	for k := range d {
		scale /= float64(s.pad[k]) * s.lat.Step[k]
	}
	out := make([][]float64, len(orders))
	for o, r := range orders {
		sign := scale
		if r%4 == 2 {
			sign = -scale // i^r
		}
		out[o] = sum[:len(index[o]):len(index[o])]
		for j := range out[o] {
			out[o][j] *= sign
		}
		sum = sum[len(index[o]):]
	}
	return out
}

// lineMoments adds sum_i power_i exp(-(a t_i^2 + 2 b t_i + c)/2) t_i^q to
// moment[q]. The frequencies are evenly spaced, so the exponentials follow by
// two products each, from a fresh start every chunk: relative error below 1e-12.
func lineMoments(moment, power, freq []float64, a, b, c float64) {
	const chunk = 32
	if len(freq) < 2 {
		addMoments(moment, power, freq, math.Exp(-0.5*((a*freq[0]+2*b)*freq[0]+c)), 1, 1)
		return
	}
	step := freq[1] - freq[0]
	curve := math.Exp(-a * step * step)
	for from := 0; from < len(freq); from += chunk {
		to := min(from+chunk, len(freq))
		t := freq[from]
		value := math.Exp(-0.5 * ((a*t+2*b)*t + c))
		ratio := math.Exp(-0.5 * step * (2*a*t + a*step + 2*b))
		addMoments(moment, power[from:to], freq[from:to], value, ratio, curve)
	}
}

// addMoments adds a chunk whose Gaussian factor starts at value, grows by ratio,
// and that by curve.
func addMoments(moment, power, freq []float64, value, ratio, curve float64) {
	power = power[:len(freq)]
	switch len(moment) {
	case 1:
		var m0 float64
		for _, p := range power {
			m0 += p * value
			value *= ratio
			ratio *= curve
		}
		moment[0] += m0
	case 3:
		var m0, m1, m2 float64
		for i, t := range freq {
			v := power[i] * value
			w := v * t
			m0 += v
			m1 += w
			m2 += w * t
			value *= ratio
			ratio *= curve
		}
		moment[0] += m0
		moment[1] += m1
		moment[2] += m2
	default:
		for i, t := range freq {
			v := power[i] * value
			for q := range moment {
				moment[q] += v
				v *= t
			}
			value *= ratio
			ratio *= curve
		}
	}
}
