package mv

import (
	"fmt"
	"math"
	"math/bits"
)

// Sample is n events in d dimensions with weights, immutable: NewSample copies
// what it is given, and slices a Sample hands out must not be written to. It
// is safe to share. Units are those of the data. The zero value is empty and
// no operation accepts it.
type Sample struct {
	n, d  int
	cols  [][]float64 // d columns of length n
	w     []float64   // nil: every weight is 1
	sumW  float64
	sumW2 float64
}

// NewSample returns the sample whose coordinate k of event i is cols[k][i] and
// whose weights are w; nil w means 1 for every event. At least one column and
// one event, columns of one length, finite coordinates, finite weights of at
// least 0 with a positive sum: anything else is ErrShape or ErrNotFinite (or
// ErrDegenerate for weights that sum to 0), naming the place. Cost n*d, copied.
func NewSample(cols [][]float64, w []float64) (*Sample, error) {
	d := len(cols)
	if d == 0 {
		return nil, fmt.Errorf("mv: sample: no columns; need at least 1: %w", ErrShape)
	}
	n := len(cols[0])
	if n == 0 {
		return nil, fmt.Errorf("mv: sample: %d columns with no events: %w", d, ErrDegenerate)
	}
	if hi, size := bits.Mul64(uint64(n), uint64(d)); hi != 0 || size > math.MaxInt/8 {
		return nil, fmt.Errorf("mv: sample: %d events times %d columns: %w", n, d, ErrTooLarge)
	}
	s := &Sample{n: n, d: d, cols: make([][]float64, d)}
	back := make([]float64, n*d)
	for k, c := range cols {
		if len(c) != n {
			return nil, fmt.Errorf("mv: sample: column 1 has %d events, column %d has %d: %w", n, k+1, len(c), ErrShape)
		}
		for i, v := range c {
			if math.IsNaN(v) || math.IsInf(v, 0) {
				return nil, fmt.Errorf("mv: sample: event %d, column %d is %g: %w", i+1, k+1, v, ErrNotFinite)
			}
		}
		s.cols[k] = back[k*n : (k+1)*n : (k+1)*n]
		copy(s.cols[k], c)
	}
	if w == nil {
		s.sumW, s.sumW2 = float64(n), float64(n)
		return s, nil
	}
	if len(w) != n {
		return nil, fmt.Errorf("mv: sample: %d events, %d weights: %w", n, len(w), ErrShape)
	}
	for i, v := range w {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			return nil, fmt.Errorf("mv: sample: weight %d is %g: %w", i+1, v, ErrNotFinite)
		}
		if v < 0 {
			return nil, fmt.Errorf("mv: sample: weight %d is %g; a weight must be at least 0: %w", i+1, v, ErrShape)
		}
		s.sumW += v
		s.sumW2 += v * v
	}
	if !(s.sumW > 0) || !(s.sumW2 > 0) {
		return nil, fmt.Errorf("mv: sample: %d weights sum to %g; the sum must be positive: %w", n, s.sumW, ErrDegenerate)
	}
	if math.IsInf(s.sumW, 0) || math.IsInf(s.sumW2, 0) {
		return nil, fmt.Errorf("mv: sample: weights or their squares sum to %g and %g; divide them by a constant: %w", s.sumW, s.sumW2, ErrNotFinite)
	}
	s.w = append([]float64(nil), w...)
	return s, nil
}

// Len returns n, the number of events.
func (s *Sample) Len() int { return s.n }

// Dim returns d.
func (s *Sample) Dim() int { return s.d }

// At returns coordinate k of event i, both counted from 0.
func (s *Sample) At(i, k int) float64 { return s.cols[k][i] }

// Columns returns the d columns, not copied: read only. They can be passed as
// queries to an Evaluator.
func (s *Sample) Columns() [][]float64 { return s.cols }

// Row writes event i into dst and returns it; a nil dst is allocated.
func (s *Sample) Row(dst []float64, i int) []float64 {
	if dst == nil {
		dst = make([]float64, s.d)
	}
	for k, c := range s.cols {
		dst[k] = c[i]
	}
	return dst
}

// Weight returns the weight of event i.
func (s *Sample) Weight(i int) float64 {
	if s.w == nil {
		return 1
	}
	return s.w[i]
}

// Weights returns the weights, not copied: read only. It is nil when every
// weight is 1 because none were given.
func (s *Sample) Weights() []float64 { return s.w }

// SumWeights returns the sum of the weights.
func (s *Sample) SumWeights() float64 { return s.sumW }

// EffectiveN returns the effective sample size, (sum w)^2 / sum w^2; n when all
// weights are equal.
func (s *Sample) EffectiveN() float64 {
	if s.w == nil {
		return float64(s.n)
	}
	return s.sumW / s.sumW2 * s.sumW
}

// Moments returns the weighted mean and scatter of the events. Cost n*d^2.
func (s *Sample) Moments() *Moments {
	m := NewMoments(s.d)
	x := make([]float64, s.d)
	for i := range s.n {
		m.Add(s.Row(x, i), s.Weight(i))
	}
	return m
}

// RequireSpread returns ErrDegenerate, with the numbers, when the sample has
// fewer than d+1 events or its covariance is not positive definite: no full
// bandwidth matrix can be chosen from it.
func (s *Sample) RequireSpread() error {
	if s.n < s.d+1 {
		return fmt.Errorf("mv: sample: %d events in %d dimensions; need at least %d: %w", s.n, s.d, s.d+1, ErrDegenerate)
	}
	c := s.Moments().Covariance()
	if _, err := NewBandwidthMatrix(s.d, c); err != nil {
		return fmt.Errorf("mv: sample: covariance %s of %d events is singular; they lie on a line, plane or point: %w", formatSquare(s.d, c), s.n, ErrDegenerate)
	}
	return nil
}
