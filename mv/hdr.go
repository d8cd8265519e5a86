package mv

import (
	"fmt"
	"math"
	"slices"
)

// DensityQuantile returns the largest value q with at least the share content
// of the weights at nodes whose value is >= q: with event counts as weights,
// the density on the border of the highest density region that holds that
// share of the events (Hyndman 1996, the density quantile approach, read from
// the nodes of linear binning). values and weights have the same length;
// weights are >= 0 with a positive sum; 0 < content < 1. Cost: O(nodes).
func DensityQuantile(values, weights []float64, content float64) (float64, error) {
	if len(values) != len(weights) || !(content > 0 && content < 1) {
		return 0, fmt.Errorf("mv: density quantile: %d values, %d weights, content %g: %w", len(values), len(weights), content, ErrShape)
	}
	// Positive floats order as their bits do: sum the weights by the leading 16
	// bits, find the bin that holds the quantile, sort only that one.
	const shift = 48
	var bin [1 << 16]float64
	var total float64
	for i, w := range weights {
		if w > 0 {
			bin[math.Float64bits(math.Max(values[i], 0))>>shift] += w
			total += w
		}
	}
	if !(total > 0) {
		return 0, fmt.Errorf("mv: density quantile: weights add to %g: %w", total, ErrDegenerate)
	}
	target := content * total * (1 - 1e-12)
	var above float64
	b := len(bin) - 1
	for ; b > 0 && above+bin[b] < target; b-- {
		above += bin[b]
	}
	type node struct{ value, weight float64 }
	var nodes []node
	for i, w := range weights {
		if v := math.Max(values[i], 0); w > 0 && math.Float64bits(v)>>shift == uint64(b) {
			nodes = append(nodes, node{v, w})
		}
	}
	slices.SortFunc(nodes, func(p, q node) int {
		switch {
		case p.value > q.value:
			return -1
		case p.value < q.value:
			return 1
		}
		return 0
	})
	for _, n := range nodes {
		if above += n.weight; above >= target {
			return n.value, nil
		}
	}
	return nodes[len(nodes)-1].value, nil
}

// LeaveOneOut turns a density quantile over the events into that of the
// leave-one-out densities, with equal weights exactly: an event's own kernel
// contributes atZero/n to the estimate at its place, so its leave-one-out
// density is (n*q - K_H(0))/(n-1), an increasing map. A region cut at that
// value holds its content for events not yet seen, where the plain quantile
// holds too little: content_test.go in bandwidth measures both. n is the
// effective sample size.
func LeaveOneOut(q, n, atZero float64) float64 { return (n*q - atZero) / (n - 1) }

// MassInside returns the integral of the density over the nodes at or above
// the threshold, each standing for a cell.
func MassInside(g Grid, threshold float64) float64 {
	var sum float64
	for _, v := range g.Values {
		if v >= threshold {
			sum += v
		}
	}
	return sum * g.CellVolume()
}
