package bandwidth

import (
	"fmt"
	"math"

	"drumlin/mv"
)

// Criterion is a function of the bandwidth matrix that a selector minimises,
// in the units of the data. The gradient is by the entries of H taken as
// independent, row-major.
type Criterion func(h mv.BandwidthMatrix) (value float64, gradient []float64)

// LSCV returns the least-squares cross-validation criterion,
//
//	psi_0(2H) - 2n/(n-1) psi_0(H) + 2 K_H(0)/(n-1),
//
// whose expectation is exactly MISE(H) - R(f). Cost: two passes over the
// frequencies. Source: Rudemo 1982, Bowman 1984; Sain, Baggerly and Scott 1994.
func LSCV(s Sums) Criterion {
	d, n := s.Dim(), s.EffectiveN()
	return func(h mv.BandwidthMatrix) (float64, []float64) {
		var wide, own [][]float64
		if direct, ok := s.(*DirectSums); ok {
			wide, own = direct.twoScales(h)
		} else {
			wide, own = s.Functionals(multiple(h, 2), 0, 2), s.Functionals(h, 0, 2)
		}
		atZero := kernelAtZero(h)
		grad := make([]float64, d*d)
		a, b := square2(d, wide[1]), square2(d, own[1])
		for ij := range grad {
			grad[ij] = a[ij] - n/(n-1)*b[ij] - atZero/(n-1)*h.InvAt(ij/d, ij%d)
		}
		return wide[0][0] - 2*n/(n-1)*own[0][0] + 2*atZero/(n-1), grad
	}
}

// SCV returns the smoothed cross-validation criterion with pilot G,
//
//	R(K)/(n |H|^1/2) + psi_0(2H+2G) - 2 psi_0(H+2G) + psi_0(2G).
//
// Cost: two passes over the frequencies. Source: Hall, Marron and Park 1992;
// Duong and Hazelton 2005; Chacon and Duong 2011.
func SCV(s Sums, g mv.BandwidthMatrix) Criterion {
	d, n := s.Dim(), s.EffectiveN()
	base := s.Functionals(multiple(g, 2), 0)[0][0]
	return func(h mv.BandwidthMatrix) (float64, []float64) {
		wide := s.Functionals(sum(h, 2, g, 2), 0, 2)
		once := s.Functionals(sum(h, 1, g, 2), 0, 2)
		variance := gaussR(d) / (n * h.SqrtDet())
		grad := make([]float64, d*d)
		a, b := square2(d, wide[1]), square2(d, once[1])
		for ij := range grad {
			grad[ij] = a[ij] - b[ij] - 0.5*variance*h.InvAt(ij/d, ij%d)
		}
		return variance + wide[0][0] - 2*once[0][0] + base, grad
	}
}

// BCV returns a biased cross-validation criterion,
//
//	R(K)/(n |H|^1/2) + 1/4 sum_ijkl H_ij H_kl c_ijkl,
//
// with, for form 1, c_k = n^-2 sum_{i/=j} D^k phi_2H(X_i - X_j) and, for form 2,
// c_k = (n(n-1))^-1 sum_{i/=j} D^k phi_H(X_i - X_j). It tends to 0 as H grows, so
// only a local minimum means something. Cost: a pass over the frequencies.
// Source: Scott and Terrell 1987; Sain, Baggerly and Scott 1994.
func BCV(s Sums, form int) Criterion {
	d, n := s.Dim(), s.EffectiveN()
	c, weight, own := 2.0, 1.0, 1/n
	if form == 2 {
		c, weight, own = 1, n/(n-1), 1/(n-1)
	}
	at4, at6 := newTensor(d, 4), newTensor(d, 6)
	return func(h mv.BandwidthMatrix) (float64, []float64) {
		wide := multiple(h, c)
		psi := s.Functionals(wide, 4, 6)
		z4, z6 := mv.NormalDerivativesAtZero(wide, 4), mv.NormalDerivativesAtZero(wide, 6)
		for i := range z4 {
			z4[i] = weight*psi[0][i] - own*z4[i]
		}
		for i := range z6 {
			z6[i] = weight*psi[1][i] - own*z6[i]
		}
		value, grad := amise(h, at4.spread(z4), n)
		six := at6.spread(z6)
		dd := d * d
		for ab := range dd { // phi_{cH} changes with H too
			var v float64
			for kl := range dd {
				for ij := range dd {
					v += h.At(ij/d, ij%d) * h.At(kl/d, kl%d) * six[(ab*dd+kl)*dd+ij]
				}
			}
			grad[ab] += 0.25 * 0.5 * c * v
		}
		return value, grad
	}
}

// tensor spreads functionals of an order over all index tuples.
type tensor struct{ at []int }

func newTensor(d, r int) tensor {
	pos := positions(d, r)
	n := 1
	for range r {
		n *= d
	}
	t := tensor{make([]int, n)}
	for i := range t.at {
		k := make([]int, d)
		for q, rest := 0, i; q < r; q++ {
			k[rest%d]++
			rest /= d
		}
		t.at[i] = pos[key(k)]
	}
	return t
}

func (t tensor) spread(psi []float64) []float64 {
	out := make([]float64, len(t.at))
	for i, p := range t.at {
		out[i] = psi[p]
	}
	return out
}

// kernelAtZero returns K_H(0) of the Gaussian kernel.
func kernelAtZero(h mv.BandwidthMatrix) float64 {
	return math.Pow(2*math.Pi, -float64(h.Dim())/2) / h.SqrtDet()
}

func multiple(h mv.BandwidthMatrix, c float64) mv.BandwidthMatrix {
	m, err := h.Scaled(c)
	if err != nil {
		panic(fmt.Sprintf("bandwidth: %g times a positive definite matrix: %v", c, err))
	}
	return m
}

// sum returns a*h + b*g.
func sum(h mv.BandwidthMatrix, a float64, g mv.BandwidthMatrix, b float64) mv.BandwidthMatrix {
	e, o := h.Entries(), g.Entries()
	for i := range e {
		e[i] = a*e[i] + b*o[i]
	}
	m, err := mv.NewBandwidthMatrix(h.Dim(), e)
	if err != nil {
		panic(fmt.Sprintf("bandwidth: sum of positive definite matrices: %v", err))
	}
	return m
}

// square2 spreads functionals of order 2 over a d by d matrix.
func square2(d int, psi []float64) []float64 {
	out := make([]float64, d*d)
	at := 0
	for i := range d { // (2,0,..), (1,1,0..), ... : MultiIndices order
		for j := i; j < d; j++ {
			out[i*d+j], out[j*d+i] = psi[at], psi[at]
			at++
		}
	}
	return out
}
