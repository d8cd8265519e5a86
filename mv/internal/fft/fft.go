// Package fft transforms real arrays in several dimensions, on top of gonum's
// one-dimensional transforms. Axis 0 varies fastest and is the one halved by
// the symmetry of a real array. Every line is transformed by one worker alone,
// so results do not depend on the number of workers.
//
// Cost: O(P log P) for P padded nodes; lines known to be zero and frequencies
// not wanted are skipped.
package fft

import (
	"sync"
	"sync/atomic"

	"gonum.org/v1/gonum/dsp/fourier"
)

// GoodSize returns the least even number >= n whose only prime factors are 2,
// 3 and 5: other lengths are slow, a large prime quadratically so.
func GoodSize(n int) int {
	for m := max(2, n+n%2); ; m += 2 {
		r := m
		for _, p := range []int{2, 3, 5} {
			for r%p == 0 {
				r /= p
			}
		}
		if r == 1 {
			return m
		}
	}
}

// Frequency returns the signed index of bin k out of p: 0, 1, ..., p/2, -(p/2-1), ..., -1.
func Frequency(k, p int) int {
	if k <= p/2 {
		return k
	}
	return k - p
}

// Parallel calls work(i, state) for i in [0, n), split over the workers, each
// with its own state from setup.
func Parallel[S any](n, workers int, setup func() S, work func(i int, state S)) {
	workers = max(1, min(workers, n))
	if workers == 1 {
		s := setup()
		for i := range n {
			work(i, s)
		}
		return
	}
	var next atomic.Int64
	chunk := max(1, n/(8*workers))
	var wg sync.WaitGroup
	for range workers {
		wg.Go(func() {
			s := setup()
			for {
				lo := int(next.Add(int64(chunk))) - chunk
				if lo >= n {
					return
				}
				for i := lo; i < min(n, lo+chunk); i++ {
					work(i, s)
				}
			}
		})
	}
	wg.Wait()
}

// Half is the non-redundant half of a real array's transform: sizes K[0] =
// Keep[0]/2+1 and K[j] = Keep[j] for j > 0. Only the Keep lowest frequencies
// of each axis are held (Keep[j] <= P[j], even).
type Half struct {
	Keep []int
	Data []complex128 // axis 0 fastest, length product of K
}

// Rows returns the number of lines along axis 0.
func (h Half) Rows() int {
	r := 1
	for _, k := range h.Keep[1:] {
		r *= k
	}
	return r
}

// Width returns the frequencies held on axis 0.
func (h Half) Width() int { return h.Keep[0]/2 + 1 }

// Forward returns sum_l x_l exp(-2 pi i k.l/P) for the frequencies kept. x has
// n[j] <= p[j] nodes per axis, axis 0 fastest, and is zero beyond.
func Forward(x []float64, n, p, keep []int, workers int) Half {
	d := len(n)
	width := keep[0]/2 + 1
	rows := 1
	for _, m := range n[1:] {
		rows *= m
	}
	cur := make([]complex128, rows*width)
	type lineState struct {
		fft  *fourier.FFT
		in   []float64
		coef []complex128
	}
	Parallel(rows, workers, func() *lineState {
		return &lineState{fourier.NewFFT(p[0]), make([]float64, p[0]), make([]complex128, p[0]/2+1)}
	}, func(i int, s *lineState) {
		line := x[i*n[0] : (i+1)*n[0]]
		zero := true
		for _, v := range line {
			if v != 0 {
				zero = false
				break
			}
		}
		if zero {
			return
		}
		copy(s.in, line)
		clear(s.in[n[0]:])
		s.fft.Coefficients(s.coef, s.in)
		copy(cur[i*width:(i+1)*width], s.coef[:width])
	})
	inner := width
	for axis := 1; axis < d; axis++ {
		outer := 1
		for _, m := range n[axis+1:] {
			outer *= m
		}
		cur = lines(cur, inner, n[axis], keep[axis], outer, p[axis], workers, forward)
		inner *= keep[axis]
	}
	return Half{Keep: append([]int(nil), keep...), Data: cur}
}

// Inverse returns the unnormalised inverse transform of h at the first n[j]
// nodes of each axis of a lattice of Keep nodes. It uses h.Data as scratch.
func Inverse(h Half, n []int, workers int) []float64 {
	d := len(n)
	cur := h.Data
	for axis := d - 1; axis >= 1; axis-- {
		inner := h.Width()
		for _, k := range h.Keep[1:axis] {
			inner *= k
		}
		outer := 1
		for _, m := range n[axis+1:] {
			outer *= m
		}
		cur = lines(cur, inner, h.Keep[axis], n[axis], outer, h.Keep[axis], workers, inverse)
	}
	width, p0 := h.Width(), h.Keep[0]
	rows := len(cur) / width
	out := make([]float64, rows*n[0])
	type lineState struct {
		fft *fourier.FFT
		seq []float64
	}
	Parallel(rows, workers, func() *lineState {
		return &lineState{fourier.NewFFT(p0), make([]float64, p0)}
	}, func(i int, s *lineState) {
		s.fft.Sequence(s.seq, cur[i*width:(i+1)*width])
		copy(out[i*n[0]:(i+1)*n[0]], s.seq[:n[0]])
	})
	return out
}

type direction int

const (
	forward direction = iota
	inverse
)

// lines transforms the middle axis of an array [outer][m][inner] with length
// p, zero-padded, and returns [outer][q][inner] with the q lowest frequencies
// (forward) or the first q nodes (inverse).
func lines(x []complex128, inner, m, q, outer, p, workers int, dir direction) []complex128 {
	const block = 8 // columns gathered together, so that each fetched cache line is used whole
	blocks := (inner + block - 1) / block
	out := make([]complex128, outer*q*inner)
	type state struct {
		fft *fourier.CmplxFFT
		buf [block][]complex128
	}
	Parallel(outer*blocks, workers, func() *state {
		s := &state{fft: fourier.NewCmplxFFT(p)}
		for b := range s.buf {
			s.buf[b] = make([]complex128, p)
		}
		return s
	}, func(i int, s *state) {
		o, b0 := i/blocks, (i%blocks)*block
		w := min(block, inner-b0)
		var live [block]bool
		for j := range m {
			src := x[(o*m+j)*inner+b0:]
			for b := range w {
				v := src[b]
				s.buf[b][j] = v
				live[b] = live[b] || v != 0
			}
		}
		for b := range w {
			if !live[b] {
				continue
			}
			clear(s.buf[b][m:])
			if dir == forward {
				s.fft.Coefficients(s.buf[b], s.buf[b])
			} else {
				s.fft.Sequence(s.buf[b], s.buf[b])
			}
		}
		for k := range q {
			from := k
			if dir == forward && q < p && k > q/2 {
				from = p - q + k
			}
			dst := out[(o*q+k)*inner+b0:]
			for b := range w {
				if live[b] {
					dst[b] = s.buf[b][from]
				}
			}
		}
	})
	return out
}
