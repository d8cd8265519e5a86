package mv

import (
	"context"
	"fmt"
	"math"
	"sort"
)

// AdaptiveOptions steers NewAdaptive; the zero value is the default.
type AdaptiveOptions struct {
	// MinFactor and MaxFactor bound the local factors lambda; 0 means no
	// bound. Without an upper bound a thin tail may be smoothed without limit.
	MinFactor, MaxFactor float64
	// Step groups the factors into classes of equal bandwidth, Step apart in
	// ln(lambda), each evaluated by a tree; 0 means every event keeps its own
	// factor, by the direct sum.
	Step float64
	// Rtol bounds the trees' error, as in TreeOptions; 0 means 1e-6. Unused
	// when Step is 0.
	Rtol float64
	// Workers is the number of goroutines; 0 means one per processor.
	Workers int
}

// Validate reports every setting out of its range.
func (o AdaptiveOptions) Validate() error {
	bad := func(v float64) bool { return !(v >= 0) || math.IsInf(v, 0) }
	if bad(o.MinFactor) || bad(o.MaxFactor) || bad(o.Step) || bad(o.Rtol) || o.Step > 1 || o.Rtol > 0.1 || o.Workers < 0 ||
		(o.MaxFactor > 0 && o.MaxFactor < o.MinFactor) {
		return fmt.Errorf("mv: adaptive: factors from %g to %g, step %g (at most 1), rtol %g (at most 0.1), %d workers; none below 0: %w",
			o.MinFactor, o.MaxFactor, o.Step, o.Rtol, o.Workers, ErrShape)
	}
	return nil
}

// Adaptive is the sample-point estimate of Abramson's square-root law: event i
// is smoothed with lambda_i^2 H,
//
//	lambda_i = (g/f_i)^{1/2},
//
// f_i a pilot density at the event and g the geometric mean of the f_i,
// weighted. So the weighted product of the lambda_i is 1 before clipping, and
// the estimate has mass 1. Immutable, safe to share.
//
// Source: Abramson 1982 (from memory, checked by computation).
type Adaptive struct {
	s       *Sample
	kernel  Kernel
	h       BandwidthMatrix
	opt     AdaptiveOptions
	lambda  []float64
	geo     float64
	white   whitener
	z       []float64
	classes []FactorClass
	trees   []*Tree
}

// FactorClass is a group of events smoothed with the same matrix.
type FactorClass struct {
	Factor float64 // lambda of the class
	Events int
	Weight float64 // sum of their weights
}

// NewAdaptive returns the estimate for the sample with base bandwidth H and
// the pilot density at every event, positive where the weight is: usually a
// fixed-bandwidth estimate at the events, own kernels kept.
func NewAdaptive(s *Sample, k Kernel, h BandwidthMatrix, pilot []float64, opt AdaptiveOptions) (*Adaptive, error) {
	if err := checkModel(s, k, h); err != nil {
		return nil, err
	}
	if err := opt.Validate(); err != nil {
		return nil, err
	}
	if len(pilot) != s.n {
		return nil, fmt.Errorf("mv: adaptive: %d pilot values for %d events: %w", len(pilot), s.n, ErrShape)
	}
	a := &Adaptive{s: s, kernel: k, h: h, opt: opt, lambda: make([]float64, s.n), white: newWhitener(s, h)}
	var mean float64
	for i, f := range pilot {
		w := s.Weight(i)
		if w == 0 {
			continue
		}
		if !(f > 0) || math.IsInf(f, 0) {
			return nil, fmt.Errorf("mv: adaptive: pilot density at event %d is %g; must be positive and finite: %w", i+1, f, ErrNotFinite)
		}
		mean += w / s.sumW * math.Log(f)
	}
	a.geo = math.Exp(mean)
	for i, f := range pilot {
		if s.Weight(i) == 0 {
			a.lambda[i] = 1
			continue
		}
		l := math.Exp(0.5 * (mean - math.Log(f)))
		if opt.MaxFactor > 0 {
			l = min(l, opt.MaxFactor)
		}
		a.lambda[i] = max(l, opt.MinFactor)
	}
	if opt.Step == 0 {
		a.z = a.white.all(s.cols)
		return a, nil
	}
	return a, a.group()
}

// group makes the classes and their trees: class m holds the events whose
// ln(lambda)/step rounds to m, and its factor is exp(m*step).
func (a *Adaptive) group() error {
	members := map[int][]int{}
	for i, l := range a.lambda {
		if a.s.Weight(i) > 0 {
			m := int(math.Round(math.Log(l) / a.opt.Step))
			members[m] = append(members[m], i)
		}
	}
	keys := make([]int, 0, len(members))
	for m := range members {
		keys = append(keys, m)
	}
	sort.Ints(keys)
	for _, m := range keys {
		cols := make([][]float64, a.s.d)
		w := make([]float64, 0, len(members[m]))
		c := FactorClass{Factor: math.Exp(float64(m) * a.opt.Step), Events: len(members[m])}
		for _, i := range members[m] {
			for k := range cols {
				cols[k] = append(cols[k], a.s.cols[k][i])
			}
			w = append(w, a.s.Weight(i))
			c.Weight += a.s.Weight(i)
		}
		if a.s.w == nil {
			w = nil
		}
		part, err := NewSample(cols, w)
		if err != nil {
			return err
		}
		h, err := a.h.Scaled(c.Factor * c.Factor)
		if err != nil {
			return err
		}
		tree, err := NewTree(part, a.kernel, h, TreeOptions{Rtol: a.opt.Rtol, Workers: a.opt.Workers})
		if err != nil {
			return err
		}
		a.classes = append(a.classes, c)
		a.trees = append(a.trees, tree)
	}
	return nil
}

// Dim returns d.
func (a *Adaptive) Dim() int { return a.s.d }

// Factors returns lambda_i for every event, not copied: read only.
func (a *Adaptive) Factors() []float64 { return a.lambda }

// GeometricMean returns g, the weighted geometric mean of the pilot density.
func (a *Adaptive) GeometricMean() float64 { return a.geo }

// Classes returns the classes in ascending order of factor; nil when Step is 0.
func (a *Adaptive) Classes() []FactorClass { return append([]FactorClass(nil), a.classes...) }

// Density implements Evaluator. Without classes it costs n*m*d; with them, one
// tree per class.
func (a *Adaptive) Density(ctx context.Context, dst []float64, queries [][]float64) error {
	m, err := checkQueries(a.s.d, queries)
	if err == nil {
		err = checkDst(dst, m)
	}
	if err != nil {
		return err
	}
	if a.trees != nil {
		part := make([]float64, m)
		clear(dst)
		for i, t := range a.trees {
			if err := t.Density(ctx, part, queries); err != nil {
				return err
			}
			share := a.classes[i].Weight / a.s.sumW
			for j, v := range part {
				dst[j] += share * v
			}
		}
		return nil
	}
	d := a.s.d
	norm := a.kernel.Norm(d) / a.h.SqrtDet() / a.s.sumW
	inv2, scale := make([]float64, a.s.n), make([]float64, a.s.n)
	for i, l := range a.lambda {
		inv2[i] = 1 / (l * l)
		scale[i] = a.s.Weight(i) * norm * math.Pow(l, -float64(d))
	}
	return overChunks(ctx, a.opt.Workers, m, 16, func(_, lo, hi int) {
		q, r2 := make([]float64, d), make([]float64, a.s.n)
		for j := lo; j < hi; j++ {
			a.white.at(q, queries, j)
			distances(r2, a.z, d, q)
			var sum float64
			for i, v := range r2 {
				if u := v * inv2[i]; u < a.cut() {
					sum += scale[i] * a.kernel.Profile(u)
				}
			}
			dst[j] = sum
		}
	})
}

func (a *Adaptive) cut() float64 {
	if a.kernel == Gaussian {
		return maxR2
	}
	return 1
}

// ClassingBound returns a bound on the error the classes cause anywhere, in
// density units; 0 when Step is 0, +Inf for the uniform kernel, which jumps.
// The trees' relative error comes on top.
//
// With u the squared radius at factor lambda and p the profile, the derivative
// of lambda^{-d} p by ln(lambda) is -lambda^{-d} (d p + 2u p'), at most
// c lambda^{-d} in size: c = d for the Gaussian (2u p' is at most 2/e) and
// max(d, 2 max u p (1-u)^{p-1}) for (1-u)^p. Rounding moves ln(lambda) by
// s/2 at most, so an event moves the sum by at most
// (c/d)(e^{ds/2}-1) lambda_i^{-d} K_H(0).
func (a *Adaptive) ClassingBound() float64 {
	if a.trees == nil {
		return 0
	}
	d := float64(a.s.d)
	c := d
	switch a.kernel {
	case Uniform:
		return math.Inf(1)
	case Epanechnikov:
		c = max(d, 2) // at u = 1
	case Biweight:
		c = max(d, 1) // 4u(1-u) at u = 1/2
	case Triweight:
		c = max(d, 8.0/9) // 6u(1-u)^2 at u = 1/3
	}
	var sum float64
	for i, l := range a.lambda {
		sum += a.s.Weight(i) / a.s.sumW * math.Pow(l, -d)
	}
	return c / d * math.Expm1(d*a.opt.Step/2) * sum * a.kernel.Norm(a.s.d) / a.h.SqrtDet()
}
