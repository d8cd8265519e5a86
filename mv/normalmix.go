package mv

import (
	"fmt"
	"math"
	"math/rand/v2"
)

// NormalMixture is a mixture of normal densities, f = sum_k w_k phi_{S_k}(x - m_k):
// a target whose every functional, expectation and mean integrated squared
// error is known exactly. Weights are divided by their sum. Immutable, safe to
// share; the zero value is not usable.
//
// Source: Marron & Wand 1992; Wand & Jones 1993, 1995 section 4.4 (from memory,
// checked by quadrature and Monte Carlo).
type NormalMixture struct {
	d    int
	w    []float64
	mean [][]float64
	cov  []BandwidthMatrix
}

// NewNormalMixture returns the mixture with the given positive weights, means
// of length d and row-major covariances of length d*d, which are copied.
func NewNormalMixture(weights []float64, means, covs [][]float64) (*NormalMixture, error) {
	if len(weights) == 0 || len(means) != len(weights) || len(covs) != len(weights) {
		return nil, fmt.Errorf("mv: normal mixture: %d weights, %d means, %d covariances; must be the same and at least 1: %w", len(weights), len(means), len(covs), ErrShape)
	}
	m := &NormalMixture{d: len(means[0])}
	var sum float64
	for i, w := range weights {
		if !(w > 0) || math.IsInf(w, 0) {
			return nil, fmt.Errorf("mv: normal mixture: weight %d is %g; must be positive: %w", i+1, w, ErrShape)
		}
		sum += w
	}
	for i, w := range weights {
		if len(means[i]) != m.d {
			return nil, fmt.Errorf("mv: normal mixture: mean %d has length %d, mean 1 has %d: %w", i+1, len(means[i]), m.d, ErrShape)
		}
		for _, v := range means[i] {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return nil, fmt.Errorf("mv: normal mixture: mean %d is %v: %w", i+1, means[i], ErrNotFinite)
			}
		}
		cov, err := NewBandwidthMatrix(m.d, covs[i])
		if err != nil {
			return nil, fmt.Errorf("mv: normal mixture: covariance %d: %w", i+1, err)
		}
		m.w = append(m.w, w/sum)
		m.mean = append(m.mean, append([]float64(nil), means[i]...))
		m.cov = append(m.cov, cov)
	}
	return m, nil
}

// Dim returns d.
func (m *NormalMixture) Dim() int { return m.d }

// Len returns the number of components.
func (m *NormalMixture) Len() int { return len(m.w) }

// Component returns the weight, a copy of the mean, and the covariance of
// component i.
func (m *NormalMixture) Component(i int) (float64, []float64, BandwidthMatrix) {
	return m.w[i], append([]float64(nil), m.mean[i]...), m.cov[i]
}

// Density returns f(x). It panics when len(x) is not d.
func (m *NormalMixture) Density(x []float64) float64 {
	return m.convolved(x, nil, 0, make([]int, m.d))
}

// Derivative returns D^k f(x). It panics when x or k has not length d.
func (m *NormalMixture) Derivative(x []float64, k []int) float64 {
	return m.convolved(x, nil, 0, k)
}

// Derivatives returns D^k f(x) for every k of MultiIndices(d, r).
func (m *NormalMixture) Derivatives(x []float64, r int) []float64 {
	ks := MultiIndices(m.d, r)
	out := make([]float64, len(ks))
	for i, k := range ks {
		out[i] = m.convolved(x, nil, 0, k)
	}
	return out
}

// convolved returns D^k of the mixture with a*h added to every covariance.
func (m *NormalMixture) convolved(x []float64, h *BandwidthMatrix, a float64, k []int) float64 {
	if len(x) != m.d || len(k) != m.d {
		panic("mv: NormalMixture: length of x or of the multi-index is not the dimension")
	}
	diff := make([]float64, m.d)
	var f float64
	for c, w := range m.w {
		for j, v := range x {
			diff[j] = v - m.mean[c][j]
		}
		f += w * normalDerivative(plus(m.cov[c], h, a), diff, k)
	}
	return f
}

// plus returns s + a*h, s itself when h is nil or a is 0. Sums of positive
// definite matrices with a >= 0 are positive definite.
func plus(s BandwidthMatrix, h *BandwidthMatrix, a float64) BandwidthMatrix {
	if h == nil || a == 0 {
		return s
	}
	sum := s.Entries()
	for i, v := range h.h {
		sum[i] += a * v
	}
	out, err := NewBandwidthMatrix(s.d, sum)
	if err != nil {
		panic("mv: sum of positive definite matrices: " + err.Error())
	}
	return out
}

// normalDerivative returns D^k phi_S(x).
func normalDerivative(s BandwidthMatrix, x []float64, k []int) float64 {
	t, err := newHermiteTable(s, [][]int{k})
	if err != nil {
		panic(err.Error())
	}
	q, f := t.at(t.scratch(), x)
	return t.sign[0] * f[t.want[0]] * math.Exp(-0.5*(q+s.logDet)) * Gaussian.Norm(s.d)
}

// Functional returns psi_k, the integral of D^k f times f:
// sum_ab w_a w_b D^k phi_{S_a+S_b}(m_a - m_b). |k| = 0 gives R(f), the integral
// of f^2.
func (m *NormalMixture) Functional(k []int) float64 { return m.pairs(nil, 0, k) }

// Functionals returns psi_k for every k of MultiIndices(d, r).
func (m *NormalMixture) Functionals(r int) []float64 {
	ks := MultiIndices(m.d, r)
	out := make([]float64, len(ks))
	for i, k := range ks {
		out[i] = m.pairs(nil, 0, k)
	}
	return out
}

// pairs returns sum_ab w_a w_b D^k phi_{a*H+S_a+S_b}(m_a - m_b).
func (m *NormalMixture) pairs(h *BandwidthMatrix, a float64, k []int) float64 {
	diff := make([]float64, m.d)
	var sum float64
	for i, wi := range m.w {
		for j, wj := range m.w {
			for c := range diff {
				diff[c] = m.mean[i][c] - m.mean[j][c]
			}
			s := plus(plus(m.cov[i], &m.cov[j], 1), h, a)
			sum += wi * wj * normalDerivative(s, diff, k)
		}
	}
	return sum
}

// Mean returns the mean of the mixture.
func (m *NormalMixture) Mean() []float64 {
	mean := make([]float64, m.d)
	for c, w := range m.w {
		for k, v := range m.mean[c] {
			mean[k] += w * v
		}
	}
	return mean
}

// Covariance returns the row-major covariance of the mixture.
func (m *NormalMixture) Covariance() []float64 {
	mean, cov := m.Mean(), make([]float64, m.d*m.d)
	for c, w := range m.w {
		for i := range m.d {
			for j := range m.d {
				cov[i*m.d+j] += w * (m.cov[c].At(i, j) + (m.mean[c][i]-mean[i])*(m.mean[c][j]-mean[j]))
			}
		}
	}
	return cov
}

// Sample draws n independent events with rng: for each one uniform number
// chooses the component, then d standard normals follow.
func (m *NormalMixture) Sample(rng *rand.Rand, n int) (*Sample, error) {
	if n < 1 {
		return nil, fmt.Errorf("mv: normal mixture: %d events asked; need at least 1: %w", n, ErrShape)
	}
	cols := make([][]float64, m.d)
	for k := range cols {
		cols[k] = make([]float64, n)
	}
	u := make([]float64, m.d)
	for i := range n {
		c, p := 0, rng.Float64()
		for c < len(m.w)-1 && p >= m.w[c] {
			p -= m.w[c]
			c++
		}
		for k := range u {
			u[k] = rng.NormFloat64()
		}
		for k := range cols {
			v := m.mean[c][k]
			for j := range k + 1 {
				v += m.cov[c].LowerAt(k, j) * u[j]
			}
			cols[k][i] = v
		}
	}
	return NewSample(cols, nil)
}
