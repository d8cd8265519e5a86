package mv

import "math"

// NormalDerivatives returns D^k phi_S(x) for every |k| = r, in the order of
// MultiIndices(d, r).
func NormalDerivatives(s BandwidthMatrix, x []float64, r int) []float64 {
	ks := MultiIndices(s.d, r)
	t, err := newHermiteTable(s, ks)
	if err != nil {
		panic(err.Error())
	}
	q, f := t.at(t.scratch(), x)
	peak := math.Exp(-0.5*(q+s.logDet)) * Gaussian.Norm(s.d)
	out := make([]float64, len(ks))
	for i := range out {
		out[i] = t.sign[i] * f[t.want[i]] * peak
	}
	return out
}

// NormalDerivativesAtZero returns D^k phi_S(0) for every |k| = r.
func NormalDerivativesAtZero(s BandwidthMatrix, r int) []float64 {
	return NormalDerivatives(s, make([]float64, s.d), r)
}
