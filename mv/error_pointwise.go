package mv

import (
	"fmt"
	"math"
)

// Pointwise is what is known of an estimate at one point: leading terms in H,
// right to order tr H for the bias and 1/(n sqrt|H|) for the variance.
//
// Source: Wand & Jones 1995, section 4.3 (from memory, checked against the
// exact values for normal mixtures).
type Pointwise struct {
	Density       float64 // the estimate itself
	Bias          float64 // leading smoothing bias, expectation minus truth
	Variance      float64 // leading sampling variance
	StandardError float64 // its square root
	Debiased      float64 // Density - Bias, at least 0
}

// NewPointwise returns the error terms at a point where the estimate is f and
// the second derivatives of the density (in practice of a pilot estimate) are
// hessian, in the order of MultiIndices(d, 2); n is the effective sample size.
func NewPointwise(k Kernel, h BandwidthMatrix, f float64, hessian []float64, n float64) (Pointwise, error) {
	if d := h.Dim(); len(hessian) != d*(d+1)/2 {
		return Pointwise{}, fmt.Errorf("mv: pointwise error: %d second derivatives in dimension %d, need %d: %w", len(hessian), d, d*(d+1)/2, ErrShape)
	}
	p := Pointwise{Density: f, Bias: LeadingBias(k, h, hessian), Variance: LeadingVariance(k, h, f, n)}
	p.StandardError = math.Sqrt(p.Variance)
	p.Debiased = max(0, f-p.Bias)
	return p, nil
}

// LeadingBias returns mu2(K)/2 tr(H D2f), D2f the second derivatives in the
// order of MultiIndices(d, 2). At a peak it is negative. A pilot estimate
// understates it there. It panics when hessian has not d(d+1)/2 entries.
func LeadingBias(k Kernel, h BandwidthMatrix, hessian []float64) float64 {
	d := h.Dim()
	if len(hessian) != d*(d+1)/2 {
		panic("mv: LeadingBias: second derivatives do not fit the dimension")
	}
	var tr float64
	at := 0
	for i := range d {
		for j := i; j < d; j++ {
			c := 2.0
			if i == j {
				c = 1
			}
			tr += c * h.At(i, j) * hessian[at]
			at++
		}
	}
	return k.Mu2(d) / 2 * tr
}

// LeadingVariance returns R(K) f / (n sqrt|H|), 0 for f below 0.
func LeadingVariance(k Kernel, h BandwidthMatrix, f, n float64) float64 {
	return k.R(h.Dim()) * max(0, f) / (n * h.SqrtDet())
}

// AMISE returns the asymptotic mean integrated squared error of the estimate
// with kernel k, bandwidth H and n (effective) events:
//
//	R(K)/(n sqrt|H|) + mu2(K)^2/4 sum_ijkl H_ij H_kl psi_{e_i+e_j+e_k+e_l},
//
// psi4 the functionals of order 4 in the order of MultiIndices(d, 4). At a
// minimum over any cone of matrices, SquaredBias is d/4 of Variance.
func AMISE(k Kernel, h BandwidthMatrix, psi4 []float64, n float64) (IntegratedError, error) {
	d := h.Dim()
	ks := MultiIndices(d, 4)
	if len(psi4) != len(ks) {
		return IntegratedError{}, fmt.Errorf("mv: AMISE: %d functionals of order 4 in dimension %d, need %d: %w", len(psi4), d, len(ks), ErrShape)
	}
	if !(n > 0) {
		return IntegratedError{}, fmt.Errorf("mv: AMISE: %g events; must be positive: %w", n, ErrShape)
	}
	m := k.Mu2(d)
	e := IntegratedError{Variance: k.R(d) / (n * h.SqrtDet())}
	for i, idx := range ks {
		e.SquaredBias += m * m / 4 * quarticCoefficient(h, idx) * psi4[i]
	}
	e.Total = e.Variance + e.SquaredBias
	return e, nil
}

// quarticCoefficient returns the sum of H_ij H_kl over all ordered (i,j,k,l)
// with e_i+e_j+e_k+e_l = idx.
func quarticCoefficient(h BandwidthMatrix, idx []int) float64 {
	var list [4]int
	at := 0
	for axis, v := range idx {
		for range v {
			list[at] = axis
			at++
		}
	}
	a, b, c, e := list[0], list[1], list[2], list[3]
	// Each of the three pairings stands equally often among the orderings.
	pair := h.At(a, b)*h.At(c, e) + h.At(a, c)*h.At(b, e) + h.At(a, e)*h.At(b, c)
	return Multiplicity(idx) * pair / 3
}

// NormalScale returns the bandwidth matrix that is best in AMISE for the r-th
// derivatives of a normal density with the sample's covariance S,
//
//	(4/((d+2r+2) n))^{2/(d+2r+4)} S,
//
// n effective: r = 0 is the normal reference rule, r = 2 the pilot for second
// derivatives and so for a bias surface. ErrDegenerate for fewer than d+1
// events or a singular covariance.
//
// Source: Wand & Jones 1995; Chacon, Duong & Wand 2011 (from memory).
func NormalScale(s *Sample, r int) (BandwidthMatrix, error) {
	if r < 0 {
		return BandwidthMatrix{}, fmt.Errorf("mv: normal scale for derivatives of order %d: %w", r, ErrShape)
	}
	if err := s.RequireSpread(); err != nil {
		return BandwidthMatrix{}, err
	}
	d, order := float64(s.d), float64(2*r)
	c := math.Pow(4/((d+order+2)*s.EffectiveN()), 2/(d+order+4))
	cov := s.Moments().Covariance()
	for i := range cov {
		cov[i] *= c
	}
	return NewBandwidthMatrix(s.d, cov)
}
