package mv

import (
	"context"
	"fmt"
	"math"
)

// TreeOptions steers NewTree. The zero value is the default.
type TreeOptions struct {
	// Rtol and Atol bound the error of the density at every query:
	// |estimate - f| <= Atol + Rtol*f. Atol is in density units. Both 0 means
	// Rtol 1e-6; Rtol 0 with a positive Atol means the absolute bound alone.
	Rtol, Atol float64
	// Workers is the number of goroutines for building and evaluating; 0 means
	// one per processor the Go runtime uses. It never changes a result.
	Workers int
	// LeafSize is the number of events below which a cell is not divided; 0
	// means a size that suits the dimension.
	LeafSize int
}

// Validate reports every setting out of its range.
func (o TreeOptions) Validate() error {
	if !(o.Rtol >= 0) || !(o.Rtol <= 0.1) || !(o.Atol >= 0) || math.IsInf(o.Atol, 0) || o.Workers < 0 || o.LeafSize < 0 {
		return fmt.Errorf("mv: tree: rtol %g (0 to 0.1), atol %g (finite, at least 0), %d workers, leaf size %d (at least 0): %w",
			o.Rtol, o.Atol, o.Workers, o.LeafSize, ErrShape)
	}
	return nil
}

// Tree evaluates the density within a bound that holds for every query and
// every kernel: |estimate - f| <= Atol + Rtol*f, f the direct sum. It is a k-d
// tree over the events in coordinates whitened by H, where every kernel is
// round. Immutable, safe to share. Build n log n, memory n*d plus series for
// the cells; a query costs the cells its kernel reaches, not n.
//
// Why the bound holds. Write f = (c/W) sum_i w_i p(|q-x_i|^2) with profile p, W
// the sum of weights. Cells are visited nearer first. At any moment low is a
// proven lower bound of the sum: the term of one event, or the sum so far less
// all error granted so far. Put tau = (Rtol*low + A)/W, A being Atol in units of
// the sum; low only grows, so tau only grows, and at the end
// W*tau <= Rtol*sum + A. A cell of weight w is finished without its events when
// its error is proven to be at most w*tau. The cells so finished are disjoint,
// so their errors add to at most W*tau: the bound. The proofs for one cell:
//
//   - Left out: every event is at least the distance D to the cell's box away,
//     so the cell gives at most w p(D^2). Compact kernels: 0 for D >= 1, and the
//     distances are rounded monotonely, so no event is misjudged.
//   - Gaussian by series: with s = q - centre and y = x - centre,
//     exp(-|q-x|^2/2) = exp(-|s|^2/2) exp(-|y|^2/2) exp(s'y), and |s'y| <= T =
//     sum_k |s_k| b_k, b the half widths of the box. On [-T, T] the Chebyshev
//     series of exp, cut after order p, errs by at most 2 sum_{k>p} I_k(T), as
//     exp(Tx) = I_0(T) + 2 sum I_k(T) T_k(x) and |T_k| <= 1. A polynomial in s'y
//     needs only the cell's moments sum w exp(-|y|^2/2) y^k, |k| <= p. So the
//     error is at most exp(-|s|^2/2) M_0 2 sum_{k>p} I_k(T), and p is the least
//     that suffices.
//   - Compact by moments: a cell wholly within the ball sees one polynomial
//     (1-|s-y|^2)^p, which its moments give exactly.
//
// Each proof carries an allowance for rounding (2e-15 of the sum of absolute
// terms), so the bound is met for Rtol down to about 1e-12; below that both
// sums are uncertain by their own rounding. Gaussian sums are scaled by the
// nearest event, so the relative bound also holds where the density would
// underflow, in LogDensity; a density below 1e-300 is as exact as its float64.
type Tree struct {
	kernel     Kernel
	h          BandwidthMatrix
	d          int
	rtol, atol float64
	workers    int
	leaf       int
	white      whitener
	norm, logN float64
	sumW       float64

	z     []float64 // whitened events in tree order, row-major
	w     []float64 // their weights, nil when all are 1
	nodes []treeNode
	box   []float64 // per node: d lows, d highs
	plan  *seriesPlan
	mom   []float64
}

// treeNode is a cell. The left child follows its parent.
type treeNode struct {
	lo, hi int32   // events
	right  int32   // right child, 0 for a leaf
	axis   int32   // of the cut
	mom    int32   // offset of its moments in units of plan.size, -1 for none
	cut    float64 // events left of it have a smaller coordinate
	w      float64 // weight
	lnM0   float64 // Gaussian: ln(M_0/w)
}

// NewTree builds the tree. Events of weight 0 are dropped.
func NewTree(s *Sample, k Kernel, h BandwidthMatrix, opt TreeOptions) (*Tree, error) {
	if err := checkModel(s, k, h); err != nil {
		return nil, err
	}
	if err := opt.Validate(); err != nil {
		return nil, err
	}
	if s.n > math.MaxInt32/2 {
		return nil, fmt.Errorf("mv: tree of %d events: %w", s.n, ErrTooLarge)
	}
	if opt.Rtol == 0 && opt.Atol == 0 {
		opt.Rtol = 1e-6
	}
	t := &Tree{
		kernel: k, h: h, d: s.d, rtol: opt.Rtol, atol: opt.Atol, workers: opt.Workers, leaf: opt.LeafSize,
		white: newWhitener(s, h), sumW: s.sumW,
		norm: k.Norm(s.d) / h.SqrtDet(), logN: math.Log(k.Norm(s.d)) - h.LogDet()/2,
	}
	t.plan = newSeriesPlan(k, s.d)
	if t.leaf == 0 {
		t.leaf = t.plan.leaf
	}
	t.build(s)
	return t, nil
}

// Dim returns d.
func (t *Tree) Dim() int { return t.d }

// Kernel returns the kernel.
func (t *Tree) Kernel() Kernel { return t.kernel }

// Bandwidth returns H.
func (t *Tree) Bandwidth() BandwidthMatrix { return t.h }

// Tolerance returns Rtol and Atol as used.
func (t *Tree) Tolerance() (rtol, atol float64) { return t.rtol, t.atol }

// Density implements Evaluator, within the stated bound.
func (t *Tree) Density(ctx context.Context, dst []float64, queries [][]float64) error {
	return t.each(ctx, dst, queries, t.atol, func(sum, r2 float64) float64 {
		return t.norm / t.sumW * (sum * math.Exp(-0.5*r2))
	})
}

// LogDensity writes the logarithm of the density. Atol is not used: the error
// is at most about Rtol (1e-6 when Rtol is 0), however small the density. Where
// a compact kernel gives 0 it writes -Inf.
func (t *Tree) LogDensity(ctx context.Context, dst []float64, queries [][]float64) error {
	c := t.logN - math.Log(t.sumW)
	return t.each(ctx, dst, queries, 0, func(sum, r2 float64) float64 {
		return c + math.Log(sum) - 0.5*r2
	})
}

func (t *Tree) each(ctx context.Context, dst []float64, queries [][]float64, atol float64, value func(sum, r2 float64) float64) error {
	m, err := checkQueries(t.d, queries)
	if err == nil {
		err = checkDst(dst, m)
	}
	if err != nil {
		return err
	}
	return overChunks(ctx, t.workers, m, 64, func(_, lo, hi int) {
		q := t.newQuery(atol)
		for i := lo; i < hi; i++ {
			t.white.at(q.q, queries, i)
			if t.kernel == Gaussian {
				dst[i] = value(q.gaussian())
			} else {
				dst[i] = value(q.compact(), 0)
			}
		}
	})
}
