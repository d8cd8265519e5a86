package bandwidth

import (
	"cmp"
	"math"
	"runtime"
	"slices"
	"sync"
	"sync/atomic"

	"drumlin/mv"
)

// farPair is the squared distance in scales beyond which a pair adds nothing to
// a sum: e^-37 is 1e-16.
const farPair = 74

// lowOrders returns the functionals of order 0 and 2 at g, what least-squares
// and smoothed cross-validation with their gradients ask for, in one pass over
// the pairs: with z = L^-1 (x_i - x_j), G = L L', psi_0 sums phi_G and psi_2
// phi_G P(x x' - G)P = phi_G L^-T (z z' - I) L^-1.
func (s *DirectSums) lowOrders(g mv.BandwidthMatrix) [][]float64 {
	parts := s.sumPairs(g, 1)
	return s.functionalsAt(g, parts[:1+g.Dim()*g.Dim()], 1)
}

// twoScales returns the same at 2h and at h, for one exponential a pair: the
// Gaussian at h is the square of that at 2h, but for its height.
func (s *DirectSums) twoScales(h mv.BandwidthMatrix) (wide, own [][]float64) {
	d := h.Dim()
	parts := s.sumPairs(h, 2)
	return s.functionalsAt(multiple(h, 2), parts[1+d*d:], 2), s.functionalsAt(h, parts[:1+d*d], 1)
}

// sumPairs returns, over the pairs i < j, the sums of w_i w_j e and of that with
// z z' (lower triangle), e = exp(-|z|^2/2); for scales 2 the same follows with
// the root of e.
func (s *DirectSums) sumPairs(g mv.BandwidthMatrix, scales int) []float64 {
	d, n := s.sample.Dim(), s.sample.Len()
	z := whiten(s.sample, g)
	w := s.sample.Weights()
	const grain = 64
	chunks := (n + grain - 1) / grain
	size := scales * (1 + d*d)
	parts := make([]float64, chunks*size)
	work := func(c int) {
		for i := c * grain; i < min(n, (c+1)*grain); i++ {
			pairSums(parts[c*size:(c+1)*size], z, w, i, n, d)
		}
	}
	if workers := min(workersOf(s.workers), chunks); workers == 1 {
		for c := range chunks {
			work(c)
		}
	} else {
		var next atomic.Int64
		var wg sync.WaitGroup
		for range workers {
			wg.Go(func() {
				for c := int(next.Add(1)) - 1; c < chunks; c = int(next.Add(1)) - 1 {
					work(c)
				}
			})
		}
		wg.Wait()
	}
	total := make([]float64, size)
	for c := range chunks {
		for k := range total {
			total[k] += parts[c*size+k]
		}
	}
	return total
}

// functionalsAt turns pair sums with z = sqrt(c) M^-1 (x_i - x_j), G = M M', into
// functionals of order 0 and 2 at g, the diagonal terms added.
func (s *DirectSums) functionalsAt(g mv.BandwidthMatrix, pairs []float64, c float64) [][]float64 {
	d := g.Dim()
	total := 2 * pairs[0]
	for i := range s.sample.Len() {
		total += s.sample.Weight(i) * s.sample.Weight(i)
	}
	outer := make([]float64, d*d)
	for a := range d {
		for b := range a + 1 {
			outer[a*d+b] = 2 * pairs[1+a*d+b] / c
			outer[b*d+a] = outer[a*d+b]
		}
		outer[a*d+a] -= total
	}
	scale := kernelAtZero(g) / (s.sample.SumWeights() * s.sample.SumWeights())
	second := congruent(d, invLower(g), outer, true)
	psi2 := make([]float64, 0, d*(d+1)/2)
	for a := range d {
		for b := a; b < d; b++ {
			psi2 = append(psi2, scale*second[a*d+b])
		}
	}
	return [][]float64{{scale * total}, psi2}
}

// pairSums adds the terms of event i with all later ones to part, one or two
// blocks of a sum and a d by d matrix.
func pairSums(part, z, w []float64, i, n, d int) {
	both := len(part) > 1+d*d
	far, rate := float64(farPair), 0.5
	if both {
		far, rate = 2*farPair, 0.25
	}
	wi, wj := 1.0, 1.0
	if w != nil {
		wi = w[i]
	}
	if d == 2 {
		x, y := z[2*i], z[2*i+1]
		var s0, xx, xy, yy, t0, uu, uv, vv float64
		for j := i + 1; j < n; j++ {
			u, v := z[2*j]-x, z[2*j+1]-y
			if u*u > far {
				break // the events are in the order of axis 0
			}
			q := u*u + v*v
			if q > far {
				continue
			}
			e := math.Exp(-rate * q)
			if w != nil {
				wj = w[j]
			}
			p := wj * e
			if both {
				t0 += p
				uu += p * u * u
				uv += p * u * v
				vv += p * v * v
				p *= e
			}
			s0 += p
			xx += p * u * u
			xy += p * u * v
			yy += p * v * v
		}
		for k, v := range []float64{s0, xx, 0, xy, yy, t0, uu, 0, uv, vv}[:len(part)] {
			part[k] += wi * v
		}
		return
	}
	for j := i + 1; j < n; j++ {
		if u := z[j*d] - z[i*d]; u*u > far {
			break
		}
		var q float64
		for k := range d {
			u := z[j*d+k] - z[i*d+k]
			q += u * u
		}
		if q > far {
			continue
		}
		if w != nil {
			wj = w[j]
		}
		e := math.Exp(-rate * q)
		p := wi * wj * e
		if both {
			addOuter(part[1+d*d:], z, i, j, d, p)
			p *= e
		}
		addOuter(part, z, i, j, d, p)
	}
}

// addOuter adds p and p z z' of a pair.
func addOuter(part, z []float64, i, j, d int, p float64) {
	part[0] += p
	for a := range d {
		u := p * (z[j*d+a] - z[i*d+a])
		for b := range a + 1 {
			part[1+a*d+b] += u * (z[j*d+b] - z[i*d+b])
		}
	}
}

func workersOf(asked int) int {
	if asked > 0 {
		return asked
	}
	return runtime.GOMAXPROCS(0)
}

// inOrder returns the sample with its events in the order of their coordinates:
// whitened by a triangular matrix they stay in that order on axis 0, and sums do
// not depend on the order in which events came.
func inOrder(s *mv.Sample) *mv.Sample {
	n, d := s.Len(), s.Dim()
	at := make([]int, n)
	for i := range at {
		at[i] = i
	}
	slices.SortStableFunc(at, func(i, j int) int {
		for k := range d {
			if c := cmp.Compare(s.At(i, k), s.At(j, k)); c != 0 {
				return c
			}
		}
		return cmp.Compare(s.Weight(i), s.Weight(j))
	})
	cols := make([][]float64, d)
	var w []float64
	for k := range cols {
		cols[k] = make([]float64, n)
		for i, from := range at {
			cols[k][i] = s.At(from, k)
		}
	}
	if s.Weights() != nil {
		w = make([]float64, n)
		for i, from := range at {
			w[i] = s.Weight(from)
		}
	}
	out, err := mv.NewSample(cols, w)
	if err != nil {
		return s // cannot be: the values come from a sample
	}
	return out
}
