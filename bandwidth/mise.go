package bandwidth

import (
	"fmt"
	"math"

	"drumlin/mv"
)

// ExactMISE returns the exact mean integrated squared error of the estimate
// from n events of a normal mixture, as a criterion:
//
//	R(K)/(n |H|^1/2) + w'{(1-1/n) O2 - 2 O1 + O0}w,
//	(O_a)_kl = phi_{aH + S_k + S_l}(m_k - m_l),
//
// its gradient by the heat equation. Cost: two normal derivatives per pair of
// components. Source: Wand and Jones 1993.
func ExactMISE(m *mv.NormalMixture, n float64) Criterion {
	d := m.Dim()
	type pair struct {
		w    float64
		diff []float64
		cov  []float64
	}
	var pairs []pair
	for k := range m.Len() {
		wk, mk, sk := m.Component(k)
		for l := range k + 1 {
			wl, ml, sl := m.Component(l)
			p := pair{w: 2 * wk * wl, diff: make([]float64, d), cov: sum(sk, 1, sl, 1).Entries()}
			if l == k {
				p.w = wk * wk
			}
			for i := range p.diff {
				p.diff[i] = mk[i] - ml[i]
			}
			pairs = append(pairs, p)
		}
	}
	zero := make([]int, d)
	rough := m.Functional(zero)
	return func(h mv.BandwidthMatrix) (float64, []float64) {
		variance := gaussR(d) / (n * h.SqrtDet())
		value := variance + rough
		grad, s, g := make([]float64, d*d), make([]float64, d*d), make([]float64, d*d)
		for ij := range grad {
			grad[ij] = -0.5 * variance * h.InvAt(ij/d, ij%d)
		}
		for _, p := range pairs {
			for _, ac := range [2][2]float64{{1, -2}, {2, 1 - 1/n}} {
				a, c := ac[0], ac[1]
				for ij := range s {
					s[ij] = a*h.At(ij/d, ij%d) + p.cov[ij]
				}
				v := normalAndSlope(d, s, p.diff, g)
				value += c * p.w * v
				for ij := range grad {
					grad[ij] += 0.5 * a * c * p.w * g[ij]
				}
			}
		}
		return value, grad
	}
}

// normalAndSlope writes the second derivatives phi_S(x) (P x x' P - P), P = S^-1,
// into g and returns phi_S(x).
func normalAndSlope(d int, s, x, g []float64) float64 {
	if d == 2 {
		det := s[0]*s[3] - s[1]*s[2]
		p, q, r := s[3]/det, -s[1]/det, s[0]/det
		u, w := p*x[0]+q*x[1], q*x[0]+r*x[1]
		v := math.Exp(-0.5*(u*x[0]+w*x[1])) / (2 * math.Pi * math.Sqrt(det))
		g[0], g[1], g[2], g[3] = v*(u*u-p), v*(u*w-q), v*(u*w-q), v*(w*w-r)
		return v
	}
	m, err := mv.NewBandwidthMatrix(d, s)
	if err != nil {
		clear(g)
		return 0
	}
	z := make([]float64, d)
	for i := range d {
		for j := range d {
			z[i] += m.InvAt(i, j) * x[j]
		}
	}
	v := kernelAtZero(m) * math.Exp(-0.5*m.Mahalanobis2(x))
	for ij := range g {
		g[ij] = v * (z[ij/d]*z[ij%d] - m.InvAt(ij/d, ij%d))
	}
	return v
}

// OptimalMatrix minimises ExactMISE from fixed starts, the covariance of the
// mixture scaled for n among them.
func OptimalMatrix(m *mv.NormalMixture, n float64, shape Shape) (Choice, error) {
	d := m.Dim()
	f, err := newFrame(CommonScale, d, m.Covariance())
	if err != nil {
		return Choice{}, err
	}
	nr, err := normalScale(f.s, d, n, 4/((float64(d)+2)*n), 2/(float64(d)+4), Full)
	if err != nil {
		return Choice{}, err
	}
	co := coords{d, shape}
	from := starts(nr, co)
	for _, k := range []float64{0.1, 0.02} {
		from = append(from, starts(multiple(nr, k), co)...)
	}
	crit := ExactMISE(m, n)
	found, err := search{shape: shape, starts: from, descents: 3}.run(f.inFrame(crit), d)
	if err != nil {
		return Choice{}, fmt.Errorf("bandwidth: optimum of a mixture: %w", err)
	}
	h, err := f.toData(found.matrix)
	if err != nil {
		return Choice{}, err
	}
	v := found.value / f.det
	c := Choice{Method: "optimum of a mixture", Shape: shape, Matrix: h, Criterion: v, Status: found.status, Evaluations: found.evaluations}
	c.Variance = gaussR(d) / (n * h.SqrtDet())
	c.Bias2 = v - c.Variance
	return c, nil
}
