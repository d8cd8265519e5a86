package mv

import (
	"context"
	"math"
)

// maxR2 is the squared radius beyond which exp(-r2/2) is below the smallest
// positive float64, so the Gaussian is 0 to the last bit.
const maxR2 = 1491

// Direct evaluates every kernel at every query: the oracle by which the other
// evaluators are judged. Cost n*m*d, memory n*d, nothing is truncated. It also
// gives derivatives, modes and leave-one-out values. Immutable, safe to share.
type Direct struct {
	s      *Sample
	kernel Kernel
	h      BandwidthMatrix
	opt    EvalOptions
	white  whitener
	z      []float64 // whitened events, row-major
	w      []float64 // weights, or nil
	norm   float64   // K's constant / sqrt|H|
	logN   float64   // its logarithm
}

// NewDirect returns the direct evaluator of the sample.
func NewDirect(s *Sample, k Kernel, h BandwidthMatrix, opt EvalOptions) (*Direct, error) {
	if err := checkModel(s, k, h); err != nil {
		return nil, err
	}
	if err := opt.Validate(); err != nil {
		return nil, err
	}
	e := &Direct{s: s, kernel: k, h: h, opt: opt, white: newWhitener(s, h), w: s.w}
	e.z = e.white.all(s.cols)
	e.logN = math.Log(k.Norm(s.d)) - h.LogDet()/2
	e.norm = k.Norm(s.d) / h.SqrtDet()
	return e, nil
}

// Dim returns d.
func (e *Direct) Dim() int { return e.s.d }

// Kernel returns the kernel.
func (e *Direct) Kernel() Kernel { return e.kernel }

// Bandwidth returns H.
func (e *Direct) Bandwidth() BandwidthMatrix { return e.h }

// Density implements Evaluator.
func (e *Direct) Density(ctx context.Context, dst []float64, queries [][]float64) error {
	return e.each(ctx, dst, queries, func(q []float64, _ int) float64 {
		return e.norm / e.s.sumW * e.profileSum(q, 0, e.s.n)
	})
}

// LogDensity writes the logarithm of the density, in log-sum-exp form for the
// Gaussian: it stays finite where the density itself underflows to 0. Where a
// compact kernel gives 0 it writes -Inf.
func (e *Direct) LogDensity(ctx context.Context, dst []float64, queries [][]float64) error {
	logW := math.Log(e.s.sumW)
	return e.each(ctx, dst, queries, func(q []float64, _ int) float64 {
		return e.logN - logW + e.logProfileSum(q, -1)
	})
}

// LeaveOneOut writes, for every event i, the density at X_i estimated from the
// other events: sum_{j != i} w_j K_H(X_i - X_j) / (W - w_i). An event that
// holds all the weight gets 0. Cost n^2*d.
func (e *Direct) LeaveOneOut(ctx context.Context, dst []float64) error {
	return e.each(ctx, dst, e.s.cols, func(q []float64, i int) float64 {
		rest := e.s.sumW - e.s.Weight(i)
		if !(rest > 0) {
			return 0
		}
		return e.norm / rest * (e.profileSum(q, 0, i) + e.profileSum(q, i+1, e.s.n))
	})
}

// LogLeaveOneOut writes the logarithms of the leave-one-out densities, finite
// for the Gaussian however isolated the event, -Inf where there is no other.
func (e *Direct) LogLeaveOneOut(ctx context.Context, dst []float64) error {
	return e.each(ctx, dst, e.s.cols, func(q []float64, i int) float64 {
		rest := e.s.sumW - e.s.Weight(i)
		if !(rest > 0) {
			return math.Inf(-1)
		}
		return e.logN - math.Log(rest) + e.logProfileSum(q, i)
	})
}

// each calls value with every query, whitened, and its index.
func (e *Direct) each(ctx context.Context, dst []float64, queries [][]float64, value func(q []float64, i int) float64) error {
	m, err := checkQueries(e.s.d, queries)
	if err == nil {
		err = checkDst(dst, m)
	}
	if err != nil {
		return err
	}
	return overChunks(ctx, e.opt.Workers, m, 16, func(_, lo, hi int) {
		q := make([]float64, e.s.d)
		for i := lo; i < hi; i++ {
			e.white.at(q, queries, i)
			dst[i] = value(q, i)
		}
	})
}

// distances writes the squared whitened distances from q to the rows of z. The
// conversions forbid fused operations, so that every architecture rounds as
// the tree's boxes do.
func distances(r2 []float64, z []float64, d int, q []float64) {
	switch d {
	case 1:
		q0 := q[0]
		for i, v := range z[:len(r2)] {
			t := q0 - v
			r2[i] = t * t
		}
	case 2:
		q0, q1 := q[0], q[1]
		z = z[:2*len(r2)]
		for i := range r2 {
			t, u := q0-z[2*i], q1-z[2*i+1]
			r2[i] = float64(t*t) + float64(u*u)
		}
	default:
		q = q[:d]
		for i := range r2 {
			row := z[i*d : i*d+d]
			var sum float64
			for k, v := range q {
				t := v - row[k]
				sum += float64(t * t)
			}
			r2[i] = sum
		}
	}
}

// profileSum returns sum of w_i times the profile over events lo..hi.
func (e *Direct) profileSum(q []float64, lo, hi int) float64 {
	return profileSum(e.kernel, e.s.d, q, e.z, e.w, lo, hi)
}

func profileSum(k Kernel, d int, q, z, w []float64, lo, hi int) float64 {
	const block = 256
	var buf [block]float64
	var total float64
	for ; lo < hi; lo += block {
		r2 := buf[:min(block, hi-lo)]
		distances(r2, z[lo*d:], d, q)
		// One partial sum a block keeps the rounding error near sqrt(n/256).
		var sum float64
		switch {
		case k == Gaussian && w == nil:
			for _, r := range r2 {
				if r < maxR2 {
					sum += math.Exp(-0.5 * r)
				}
			}
		case k == Gaussian:
			for i, r := range r2 {
				if r < maxR2 {
					sum += w[lo+i] * math.Exp(-0.5*r)
				}
			}
		default:
			for i, r := range r2 {
				if r < 1 {
					v := k.Profile(r)
					if w != nil {
						v *= w[lo+i]
					}
					sum += v
				}
			}
		}
		total += sum
	}
	return total
}

// logProfileSum returns the logarithm of the sum of w_i times the profile over
// all events but skip.
func (e *Direct) logProfileSum(q []float64, skip int) float64 {
	if e.kernel != Gaussian {
		if skip < 0 {
			return math.Log(e.profileSum(q, 0, e.s.n))
		}
		return math.Log(e.profileSum(q, 0, skip) + e.profileSum(q, skip+1, e.s.n))
	}
	const block = 256
	var buf [block]float64
	// Running log-sum-exp: total = sum * exp(-low/2), low the least r2 so far.
	low, sum := math.Inf(1), 0.0
	for lo := 0; lo < e.s.n; lo += block {
		r2 := buf[:min(block, e.s.n-lo)]
		distances(r2, e.z[lo*e.s.d:], e.s.d, q)
		for i, r := range r2 {
			w := e.s.Weight(lo + i)
			if lo+i == skip || w == 0 {
				continue
			}
			if r < low {
				sum *= math.Exp(-0.5 * (low - r))
				low = r
			}
			sum += w * math.Exp(-0.5*(r-low))
		}
	}
	if sum == 0 {
		return math.Inf(-1)
	}
	return math.Log(sum) - 0.5*low
}
