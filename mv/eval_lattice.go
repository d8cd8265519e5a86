package mv

import (
	"context"
	"fmt"
	"math"
	"sync"

	"drumlin/mv/internal/fft"
)

// LatticeOptions steers NewLatticeEvaluator. The zero value is the default.
type LatticeOptions struct {
	// Rtol and Atol bound the error of the density at every query as those of
	// the tree do: |estimate - f| <= Atol + Rtol*f. Both 0 means Rtol 1e-6.
	Rtol, Atol float64
	// Workers is the number of goroutines; 0 means one per processor the Go
	// runtime uses. It never changes a result.
	Workers int
	// Memory is the most bytes the lattice may take; 0 means 1 GiB.
	Memory int64
	// Alone leaves every query to the lattice, whose error is then at most
	// Bound() whatever Rtol and Atol say.
	Alone bool
}

// Validate reports every setting out of its range.
func (o LatticeOptions) Validate() error {
	if !(o.Rtol >= 0) || !(o.Rtol <= 0.1) || !(o.Atol >= 0) || math.IsInf(o.Atol, 0) || o.Workers < 0 || o.Memory < 0 {
		return fmt.Errorf("mv: lattice evaluator: rtol %g (0 to 0.1), atol %g (finite, at least 0), %d workers, %d bytes (at least 0): %w",
			o.Rtol, o.Atol, o.Workers, o.Memory, ErrShape)
	}
	return nil
}

// LatticeEvaluator evaluates the density by the Fourier transform of the
// events on a lattice, for queries anywhere and every kernel. Its error has a
// bound known before the first query (Bound, in density units); where that is
// not good enough for Rtol and Atol at a query, far in the tails above all, a
// Tree built at the first need answers instead, so the contract is the tree's:
// |estimate - f| <= Atol + Rtol*f for every query. Immutable and safe to share.
//
// Cost: each event and query touches w^d nodes (w is 4 to 14), the transform
// costs the lattice, about 2 extent/scale nodes per axis and decimal digit:
// many events and queries are cheap, in up to three dimensions, four where the
// memory allows.
//
// How it works. Events are spread over the nodes with the centred B-spline b of
// order w, whose transform is sinc^w; the lattice's transform is divided by it,
// which leaves phi(t) = sum w_i exp(-it'X_i)/W; multiplied by the kernel's
// transform k(t) = Transform(d, t'Ht) and divided by sinc^w again, the inverse
// transform's node values are the coefficients of a spline that is the density.
//
// Why the bound holds. Write u_k = t_k step_k/2pi, at most 1/(2s) for
// frequencies kept, s the oversampling. By Poisson's formula spreading adds to
// phi(t) its aliases, at most A(t) = prod_k (1+a(u_k)) - 1 in size with
// a(u) = sum_{j != 0} |u/(u+j)|^w, because |phi| <= 1; reading the spline at a
// query does the same once more. So the error is at most
//
//	(1/V) sum_{t kept} |k(t)| (prod_k (1+a(u_k))^2 - 1)
//	  + (1/V) sum_{t not kept} |k(t)| + periodic copies + rounding,
//
// V the volume of the period. The first sum is computed. The second, for the
// Gaussian, is K_H(0) plus its copies less the sum over the kept; for a compact
// kernel of power p it is bounded through |J_v(s)| <= (2/pi)^{1/2}
// (s^2-v^2)^{-1/4} when p > (d-1)/2, and otherwise there is no bound: Bound is
// +Inf. Where no lattice could meet the tolerance, there is none and the tree
// answers every query, unless Alone is set.
//
// Source: the idea of spreading, transforming and deconvolving is that of
// non-uniform fast Fourier transforms, Dutt & Rokhlin 1993, with B-splines as
// Beylkin 1995 (from memory); the bound is derived above.
type LatticeEvaluator struct {
	s          *Sample
	kernel     Kernel
	h          BandwidthMatrix
	opt        LatticeOptions
	plan       latticePlan
	phi        fft.Half // phi(t) over the squared spline transform, frequencies kept
	freq       [][]float64
	alias      [][]float64 // a(u) per axis and bin
	coef       []float64   // of the density's spline
	bound      float64
	peak       float64 // K_H(0)
	once       sync.Once
	tree       *Tree
	treeErr    error
	rtol, atol float64
}

// NewLatticeEvaluator spreads the sample, transforms it and prepares the
// density. ErrTooLarge, with the numbers, when no lattice fits the memory.
func NewLatticeEvaluator(s *Sample, k Kernel, h BandwidthMatrix, opt LatticeOptions) (*LatticeEvaluator, error) {
	if err := checkModel(s, k, h); err != nil {
		return nil, err
	}
	if err := opt.Validate(); err != nil {
		return nil, err
	}
	if opt.Rtol == 0 && opt.Atol == 0 {
		opt.Rtol = 1e-6
	}
	e := &LatticeEvaluator{s: s, kernel: k, h: h, opt: opt, rtol: opt.Rtol, atol: opt.Atol, peak: k.Norm(s.d) / h.SqrtDet()}
	var err error
	if e.plan, err = planLattice(s, k, h, opt); err != nil {
		return nil, err
	}
	if e.plan.order == 0 {
		e.bound = math.Inf(1)
		return e, nil
	}
	e.transform()
	var aliased, kept float64
	e.coef, aliased, kept = e.field(nil)
	e.bound = aliased + e.cutOff(kept) + e.peak*(e.plan.copies+e.plan.rounding)
	return e, nil
}

// Dim returns d.
func (e *LatticeEvaluator) Dim() int { return e.s.d }

// Kernel returns the kernel.
func (e *LatticeEvaluator) Kernel() Kernel { return e.kernel }

// Bandwidth returns H.
func (e *LatticeEvaluator) Bandwidth() BandwidthMatrix { return e.h }

// Tolerance returns Rtol and Atol as used.
func (e *LatticeEvaluator) Tolerance() (rtol, atol float64) { return e.rtol, e.atol }

// Bound returns the most by which the lattice alone can miss the density
// anywhere, in density units; +Inf where no bound is known.
func (e *LatticeEvaluator) Bound() float64 { return e.bound }

// Nodes returns the nodes per axis, none where the tree answers everything.
func (e *LatticeEvaluator) Nodes() []int { return append([]int(nil), e.plan.nodes...) }

// SplineOrder returns w: an event touches w nodes per axis.
func (e *LatticeEvaluator) SplineOrder() int { return e.plan.order }

// Density implements Evaluator, within the stated bound.
func (e *LatticeEvaluator) Density(ctx context.Context, dst []float64, queries [][]float64) error {
	_, err := e.DensityCount(ctx, dst, queries)
	return err
}

// DensityCount is Density and returns how many queries the tree answered
// because the lattice's bound did not suffice there.
func (e *LatticeEvaluator) DensityCount(ctx context.Context, dst []float64, queries [][]float64) (byTree int, err error) {
	if e.coef != nil {
		if err := e.read(ctx, dst, queries, e.coef); err != nil {
			return 0, err
		}
	} else if m, err := checkQueries(e.s.d, queries); err != nil {
		return 0, err
	} else if err := checkDst(dst, m); err != nil {
		return 0, err
	}
	var open []int
	for i, v := range dst {
		v = max(v, 0)
		dst[i] = v
		if !e.opt.Alone && !(e.bound <= e.atol+e.rtol*(v-e.bound)) {
			open = append(open, i)
		}
	}
	if len(open) == 0 {
		return 0, nil
	}
	e.once.Do(func() {
		e.tree, e.treeErr = NewTree(e.s, e.kernel, e.h, TreeOptions{Rtol: e.opt.Rtol, Atol: e.opt.Atol, Workers: e.opt.Workers})
	})
	if e.treeErr != nil {
		return 0, e.treeErr
	}
	part := make([][]float64, len(queries))
	for k, c := range queries {
		part[k] = make([]float64, len(open))
		for j, i := range open {
			part[k][j] = c[i]
		}
	}
	out := make([]float64, len(open))
	if err := e.tree.Density(ctx, out, part); err != nil {
		return 0, err
	}
	for j, i := range open {
		dst[i] = out[j]
	}
	return len(open), nil
}

// Derivatives writes D^k of the estimate for every multi-index ks[j] into
// dst[j], orders up to 4 for the Gaussian; for compact kernels the rules of
// Direct.Derivatives hold. The lattice answers alone: against direct sums the
// error is about 1e-9 of the derivative's maximum for the default tolerance
// (the tests hold figures), not relative to the value.
func (e *LatticeEvaluator) Derivatives(ctx context.Context, dst [][]float64, queries [][]float64, ks [][]int) error {
	if len(dst) != len(ks) {
		return fmt.Errorf("mv: %d destinations for %d derivatives: %w", len(dst), len(ks), ErrShape)
	}
	for _, k := range ks {
		if r := multiOrder(k); len(k) != e.s.d || r < 0 || r > 4 {
			return fmt.Errorf("mv: derivative %v on a lattice in dimension %d: orders 0 to 4: %w", k, e.s.d, ErrShape)
		}
		if err := differentiable(e.kernel, k); err != nil {
			return err
		}
	}
	if e.coef == nil && len(ks) > 0 {
		return fmt.Errorf("mv: derivatives of the %s kernel on a lattice: none meets rtol %g: ask for the lattice alone: %w", e.kernel, e.rtol, ErrNotDifferentiable)
	}
	for j, k := range ks {
		coef, _, _ := e.field(k)
		if err := e.read(ctx, dst[j], queries, coef); err != nil {
			return err
		}
	}
	return nil
}

// differentiable tells whether a kernel has the derivative: see Derivatives of
// Direct for what a compact kernel has.
func differentiable(k Kernel, index []int) error {
	if r := multiOrder(index); k != Gaussian && r > 0 && (r > 2 || r > k.power()) {
		return fmt.Errorf("mv: derivative %v of the %s kernel: %w", index, k, ErrNotDifferentiable)
	}
	return nil
}
