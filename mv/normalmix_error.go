package mv

import (
	"context"
	"fmt"
	"math"
)

// IntegratedError is an integrated squared error split in two: Variance is the
// integrated variance, SquaredBias the integrated squared bias. Units are
// density, integrated squared (data units to the power -d).
type IntegratedError struct {
	Total       float64
	Variance    float64
	SquaredBias float64
}

// MISE returns the exact mean integrated squared error of the Gaussian
// estimate with bandwidth H from n events of the mixture:
//
//	SquaredBias = w'(O2 - 2 O1 + O0)w,
//	Variance = (4 pi)^{-d/2} |H|^{-1/2} / n - w'O2 w / n,
//	(O_a)_kl = phi_{aH + S_k + S_l}(m_k - m_l).
//
// For weighted events n is the effective size. Cost Len^2 factorizations.
func (m *NormalMixture) MISE(h BandwidthMatrix, n float64) (IntegratedError, error) {
	if err := m.checkBandwidth(h, n); err != nil {
		return IntegratedError{}, err
	}
	zero := make([]int, m.d)
	o0, o1, o2 := m.pairs(nil, 0, zero), m.pairs(&h, 1, zero), m.pairs(&h, 2, zero)
	e := IntegratedError{
		Variance:    (Gaussian.R(m.d)/h.SqrtDet() - o2) / n,
		SquaredBias: o2 - 2*o1 + o0,
	}
	e.Total = e.Variance + e.SquaredBias
	return e, nil
}

// AMISE returns the leading terms of the integrated error, with the exact
// functionals of order 4 of the mixture.
func (m *NormalMixture) AMISE(k Kernel, h BandwidthMatrix, n float64) (IntegratedError, error) {
	if err := m.checkBandwidth(h, n); err != nil {
		return IntegratedError{}, err
	}
	return AMISE(k, h, m.Functionals(4), n)
}

func (m *NormalMixture) checkBandwidth(h BandwidthMatrix, n float64) error {
	if h.Dim() != m.d {
		return fmt.Errorf("mv: normal mixture: bandwidth matrix of dimension %d for a mixture of dimension %d: %w", h.Dim(), m.d, ErrShape)
	}
	if !(n > 0) || math.IsInf(n, 0) {
		return fmt.Errorf("mv: normal mixture: %g events; must be positive: %w", n, ErrShape)
	}
	return nil
}

// ISE returns the exact integrated squared error of the Gaussian estimate of
// this very sample:
//
//	sum_ij v_i v_j phi_{2H}(X_i-X_j) - 2 sum_ik v_i w_k phi_{H+S_k}(X_i-m_k) + R(f),
//
// v the sample's weights divided by their sum. Cost n^2/2.
func (m *NormalMixture) ISE(ctx context.Context, s *Sample, h BandwidthMatrix, opt EvalOptions) (float64, error) {
	if err := checkModel(s, Gaussian, h); err != nil {
		return 0, err
	}
	if err := m.checkBandwidth(h, 1); err != nil {
		return 0, err
	}
	h2, err := h.Scaled(2)
	if err != nil {
		return 0, err
	}
	square, err := DirectFunctionals(ctx, s, h2, 0, opt)
	if err != nil {
		return 0, err
	}
	var cross float64
	x := make([]float64, m.d)
	for c, w := range m.w {
		sum := plus(m.cov[c], &h, 1)
		norm := w * Gaussian.Norm(m.d) / sum.SqrtDet()
		for i := range s.n {
			for k := range x {
				x[k] = s.cols[k][i] - m.mean[c][k]
			}
			cross += s.Weight(i) / s.sumW * norm * math.Exp(-0.5*sum.Mahalanobis2(x))
		}
	}
	return square[0] - 2*cross + m.Functional(make([]int, m.d)), nil
}

// Expectation returns the exact expectation at x of the Gaussian estimate with
// bandwidth H, the mixture smoothed by H: sum_k w_k phi_{S_k+H}(x - m_k). It
// panics when the dimensions differ.
func (m *NormalMixture) Expectation(x []float64, h BandwidthMatrix) float64 {
	if h.Dim() != m.d {
		panic("mv: NormalMixture: bandwidth matrix of another dimension")
	}
	return m.convolved(x, &h, 1, make([]int, m.d))
}

// Variance returns the exact variance at x of the Gaussian estimate from n
// events: (E K_H^2 - (E f)^2)/n with
// E K_H^2 = (4 pi)^{-d/2} |H|^{-1/2} sum_k w_k phi_{S_k+H/2}(x - m_k).
func (m *NormalMixture) Variance(x []float64, h BandwidthMatrix, n float64) float64 {
	mean := m.Expectation(x, h)
	square := Gaussian.R(m.d) / h.SqrtDet() * m.convolved(x, &h, 0.5, make([]int, m.d))
	return (square - mean*mean) / n
}
