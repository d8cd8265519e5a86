package mv

import (
	"context"
	"fmt"
	"math"
)

// Derivative writes D^k of the density estimate at every query, for a
// multi-index k of d orders; units are density per data unit to the power |k|.
// The Gaussian has every derivative; for compact kernels see Derivatives.
func (e *Direct) Derivative(ctx context.Context, dst []float64, queries [][]float64, k []int) error {
	return e.Derivatives(ctx, [][]float64{dst}, queries, [][]int{k})
}

// Derivatives writes D^k of the estimate for every multi-index ks[j] into
// dst[j], evaluating each kernel once. Orders add up to at most 60 (Gaussian).
//
// A compact kernel has a gradient for p >= 1 and second derivatives for
// p >= 2: continuous for p >= 2 and p = 3 respectively; for the gradient of
// the Epanechnikov and the Hessian of the biweight the formula inside the
// ellipsoid is used and 0 outside, right everywhere but on the boundaries.
// Other orders are ErrNotDifferentiable. Cost n*m per set of indices.
func (e *Direct) Derivatives(ctx context.Context, dst [][]float64, queries [][]float64, ks [][]int) error {
	m, err := checkQueries(e.s.d, queries)
	if err != nil {
		return err
	}
	if len(dst) != len(ks) {
		return fmt.Errorf("mv: %d destinations for %d derivatives: %w", len(dst), len(ks), ErrShape)
	}
	for _, v := range dst {
		if err := checkDst(v, m); err != nil {
			return err
		}
	}
	table, err := newHermiteTable(e.h, ks)
	if err != nil {
		return err
	}
	if e.kernel != Gaussian {
		for _, k := range ks {
			if r := multiOrder(k); r > 2 || r > e.kernel.power() {
				return fmt.Errorf("mv: derivative %v of the %s kernel: %w", k, e.kernel, ErrNotDifferentiable)
			}
		}
	}
	d, scale := e.s.d, e.norm/e.s.sumW
	return overChunks(ctx, e.opt.Workers, m, 8, func(_, lo, hi int) {
		x, scratch, sum := make([]float64, d), table.scratch(), make([]float64, len(ks))
		for q := lo; q < hi; q++ {
			clear(sum)
			for i := range e.s.n {
				w := e.s.Weight(i)
				if w == 0 {
					continue
				}
				for a, c := range e.s.cols {
					x[a] = queries[a][q] - c[i]
				}
				if e.kernel == Gaussian {
					r2, f := table.at(scratch, x)
					if r2 < maxR2 {
						v := w * math.Exp(-0.5*r2)
						for j, at := range table.want {
							sum[j] += v * f[at]
						}
					}
				} else {
					e.addCompact(sum, scratch[:d], x, w, ks)
				}
			}
			for j := range ks {
				dst[j][q] = scale * table.sign[j] * sum[j]
			}
		}
	})
}

// addCompact adds w (-1)^{|k|} D^k (1-u)^p at x, u = x'Px, to sum; z is scratch.
func (e *Direct) addCompact(sum, z, x []float64, w float64, ks [][]int) {
	d := e.s.d
	var u float64
	for i := range z {
		var s float64
		for j, v := range x {
			s += e.h.inv[i*d+j] * v
		}
		z[i] = s
		u += s * x[i]
	}
	if !(u < 1) {
		return
	}
	p := float64(e.kernel.power())
	t := 1 - u
	for j, k := range ks {
		a, b := -1, -1
		for i, v := range k {
			for range v {
				a, b = b, i
			}
		}
		switch {
		case b < 0:
			sum[j] += w * e.kernel.Profile(u)
		case a < 0:
			sum[j] += w * 2 * p * math.Pow(t, p-1) * z[b]
		default:
			sum[j] += w * (-2*p*math.Pow(t, p-1)*e.h.inv[a*d+b] + 4*p*(p-1)*math.Pow(t, p-2)*z[a]*z[b])
		}
	}
}

// Gradient writes the gradient of the estimate at every query: dst[j][q] is
// the derivative along axis j.
func (e *Direct) Gradient(ctx context.Context, dst [][]float64, queries [][]float64) error {
	return e.Derivatives(ctx, dst, queries, MultiIndices(e.s.d, 1))
}

// Hessian writes the distinct second derivatives at every query, in the order
// of MultiIndices(d, 2): for d = 2, xx, xy, yy.
func (e *Direct) Hessian(ctx context.Context, dst [][]float64, queries [][]float64) error {
	return e.Derivatives(ctx, dst, queries, MultiIndices(e.s.d, 2))
}
