package mv

import "fmt"

// Moments accumulates the weighted mean and scatter of events in one pass, and
// merges: Moments of two parts, merged, are those of the whole up to rounding
// (Chan, Golub and LeVeque's pairwise update; the mean is never subtracted
// from large sums). Not safe for concurrent writes. Make one with NewMoments.
type Moments struct {
	d       int
	rows    int
	w, w2   float64
	mean    []float64
	scatter []float64 // row-major: sum of w (x-mean)(x-mean)'
	delta   []float64
}

// NewMoments returns empty moments in d dimensions.
func NewMoments(d int) *Moments {
	return &Moments{d: d, mean: make([]float64, d), scatter: make([]float64, d*d), delta: make([]float64, d)}
}

// Add adds an event x with weight w >= 0. It panics when len(x) is not d.
func (m *Moments) Add(x []float64, w float64) {
	if len(x) != m.d {
		panic("mv: Moments.Add: length of x is not the dimension")
	}
	m.rows++
	if w == 0 {
		return
	}
	m.update(x, w, w*w)
}

// update merges a point mass of total weight w at x.
func (m *Moments) update(x []float64, w, w2 float64) {
	total := m.w + w
	for k, v := range x {
		m.delta[k] = v - m.mean[k]
	}
	f := m.w * (w / total)
	for i, a := range m.delta {
		for j, b := range m.delta {
			m.scatter[i*m.d+j] += f * a * b
		}
	}
	for k, a := range m.delta {
		m.mean[k] += a * (w / total)
	}
	m.w, m.w2 = total, m.w2+w2
}

// Merge adds the events of o. ErrShape when the dimensions differ.
func (m *Moments) Merge(o *Moments) error {
	if m.d != o.d {
		return fmt.Errorf("mv: moments: merging dimension %d into %d: %w", o.d, m.d, ErrShape)
	}
	m.rows += o.rows
	if o.w == 0 {
		return nil
	}
	for i, v := range o.scatter {
		m.scatter[i] += v
	}
	m.update(o.mean, o.w, o.w2)
	return nil
}

// Dim returns d.
func (m *Moments) Dim() int { return m.d }

// Rows returns the number of events added.
func (m *Moments) Rows() int { return m.rows }

// SumWeights returns the sum of the weights.
func (m *Moments) SumWeights() float64 { return m.w }

// EffectiveN returns (sum w)^2 / sum w^2, or 0 when nothing was added.
func (m *Moments) EffectiveN() float64 {
	if m.w2 == 0 {
		return 0
	}
	return m.w / m.w2 * m.w
}

// Mean returns a copy of the weighted mean, data units.
func (m *Moments) Mean() []float64 { return append([]float64(nil), m.mean...) }

// Scatter returns a row-major copy of the sum of w (x-mean)(x-mean)'.
func (m *Moments) Scatter() []float64 { return append([]float64(nil), m.scatter...) }

// Covariance returns the row-major sample covariance, squared data units:
// scatter / (sum w) * m/(m-1) with m the effective sample size, so the divisor
// is n-1 for equal weights. It is all zero when m is 1 or less.
func (m *Moments) Covariance() []float64 {
	c := m.Scatter()
	f := 0.0
	if e := m.EffectiveN(); e > 1 {
		f = e / (e - 1) / m.w
	}
	for i := range c {
		c[i] *= f
	}
	return c
}
