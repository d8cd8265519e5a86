package mv

import (
	"fmt"
	"math"
)

// ErrorSurfaces is what is known of an estimate at every node: the fields of
// Pointwise as grids on the spectrum's lattice, in density units (the variance
// in their square), and the standard error of the debiased value.
type ErrorSurfaces struct {
	Density       Grid
	Bias          Grid // leading smoothing bias, expectation minus truth
	Variance      Grid // leading sampling variance
	StandardError Grid // its square root
	Debiased      Grid // Density - Bias, at least 0
	// DebiasedStandardError counts the noise of the estimated bias too; it is
	// the one to put around Debiased. Source: DebiasedVariance.
	DebiasedStandardError Grid
}

// Errors returns the Gaussian estimate with bandwidth matrix h and its errors,
// the bias from second derivatives with their own pilot g. Negative densities
// that a transform leaves where there is nothing are set to 0. Cost: two
// surfaces.
func (s *Spectrum) Errors(h, g BandwidthMatrix) (ErrorSurfaces, error) {
	if h.Dim() != s.Dim() || g.Dim() != s.Dim() {
		return ErrorSurfaces{}, fmt.Errorf("mv: errors: matrices of dimension %d and %d for a spectrum of dimension %d: %w", h.Dim(), g.Dim(), s.Dim(), ErrShape)
	}
	roughness := DebiasedRoughness(h, g)
	e := ErrorSurfaces{
		Density: s.Density(h), Bias: s.SmoothingBias(h, g),
		Variance: NewGrid(s.lat), StandardError: NewGrid(s.lat), Debiased: NewGrid(s.lat), DebiasedStandardError: NewGrid(s.lat),
	}
	for i, f := range e.Density.Values {
		f = max(0, f)
		e.Density.Values[i] = f
		e.Variance.Values[i] = LeadingVariance(Gaussian, h, f, s.n)
		e.StandardError.Values[i] = math.Sqrt(e.Variance.Values[i])
		e.Debiased.Values[i] = max(0, f-e.Bias.Values[i])
		e.DebiasedStandardError.Values[i] = math.Sqrt(roughness * f / s.n)
	}
	return e, nil
}

// DebiasedRoughness returns the integral of L^2 for the kernel
//
//	L = phi_H - 1/2 sum_ij H_ij D^(ei+ej) phi_G,
//
// whose average over the events is the debiased Gaussian estimate with pilot G:
//
//	phi_2H(0) - sum_ij H_ij D^(ei+ej) phi_(H+G)(0)
//	  + 1/4 sum_ijkl H_ij H_kl D^(ei+ej+ek+el) phi_2G(0).
//
// The debiased value's leading variance is f/n times it. Source: derived; the
// integrals are convolutions of normal densities at 0. Calonico, Cattaneo and
// Farrell 2018 (from memory) show why intervals must count the noise of the
// bias. It panics when the dimensions differ.
func DebiasedRoughness(h, g BandwidthMatrix) float64 {
	d := h.Dim()
	if g.Dim() != d {
		panic("mv: DebiasedRoughness: matrices of different dimension")
	}
	sum := func(a float64, x BandwidthMatrix, b float64, y BandwidthMatrix) BandwidthMatrix {
		m := x.Entries()
		for i := range m {
			m[i] = a*m[i] + b*y.h[i]
		}
		out, err := NewBandwidthMatrix(d, m)
		if err != nil {
			panic(err.Error()) // a sum of positive definite matrices
		}
		return out
	}
	total := NormalDerivativesAtZero(sum(1, h, 1, h), 0)[0]
	for i, v := range NormalDerivativesAtZero(sum(1, h, 1, g), 2) {
		k := MultiIndices(d, 2)[i]
		var list [2]int
		at := 0
		for axis, e := range k {
			for range e {
				list[at] = axis
				at++
			}
		}
		total -= Multiplicity(k) * h.At(list[0], list[1]) * v
	}
	for i, v := range NormalDerivativesAtZero(sum(1, g, 1, g), 4) {
		total += quarticCoefficient(h, MultiIndices(d, 4)[i]) * v / 4
	}
	return total
}
