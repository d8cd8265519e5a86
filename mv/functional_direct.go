package mv

import (
	"context"
	"math"
)

// DirectFunctionals returns the kernel estimates of the functionals of order r,
//
//	psi_k(G) = W^{-2} sum_i sum_j w_i w_j D^k phi_G(X_i - X_j),  |k| = r,
//
// one for each k of MultiIndices(d, r), diagonal terms kept. Odd orders are 0
// by symmetry. r = 0 gives the double sum of phi_G itself, so the integral of
// the squared Gaussian estimate with bandwidth H is order 0 at G = 2H. Cost
// n^2/2 kernels; the result does not depend on the number of workers. This is
// the oracle for the sums over frequencies.
//
// Source: Wand & Jones 1995, section 3.5 (from memory, checked two ways).
func DirectFunctionals(ctx context.Context, s *Sample, g BandwidthMatrix, r int, opt EvalOptions) ([]float64, error) {
	if err := checkModel(s, Gaussian, g); err != nil {
		return nil, err
	}
	if err := opt.Validate(); err != nil {
		return nil, err
	}
	ks := MultiIndices(s.d, r)
	table, err := newHermiteTable(g, ks)
	if err != nil {
		return nil, err
	}
	out := make([]float64, len(ks))
	if r%2 == 1 {
		return out, nil
	}
	const grain = 16
	parts := make([][]float64, (s.n+grain-1)/grain)
	err = overChunks(ctx, opt.Workers, s.n, grain, func(chunk, lo, hi int) {
		x, scratch, sum := make([]float64, s.d), table.scratch(), make([]float64, len(ks))
		row := make([]float64, len(ks))
		for i := lo; i < hi; i++ {
			clear(row)
			for j := i + 1; j < s.n; j++ {
				for a, c := range s.cols {
					x[a] = c[i] - c[j]
				}
				q, f := table.at(scratch, x)
				if q < maxR2 {
					v := 2 * s.Weight(j) * math.Exp(-0.5*q)
					for k, at := range table.want {
						row[k] += v * f[at]
					}
				}
			}
			clear(x)
			_, f := table.at(scratch, x)
			for k, at := range table.want {
				sum[k] += s.Weight(i) * (row[k] + s.Weight(i)*f[at])
			}
		}
		parts[chunk] = sum
	})
	if err != nil {
		return nil, err
	}
	scale := Gaussian.Norm(s.d) / g.SqrtDet() / s.sumW / s.sumW
	for _, p := range parts {
		for k, v := range p {
			out[k] += scale * v
		}
	}
	return out, nil
}
