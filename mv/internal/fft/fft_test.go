package fft_test

import (
	"math"
	"math/cmplx"
	"math/rand/v2"
	"testing"

	"drumlin/mv/internal/fft"
)

// naive is the definition of the transform, summed term by term.
func naive(x []float64, n, p, k []int) complex128 {
	var s complex128
	idx := make([]int, len(n))
	for _, v := range x {
		var phase float64
		for j := range n {
			phase += float64(idx[j]*k[j]) / float64(p[j])
		}
		s += complex(v, 0) * cmplx.Exp(complex(0, -2*math.Pi*phase))
		for j := range n {
			if idx[j]++; idx[j] < n[j] {
				break
			}
			idx[j] = 0
		}
	}
	return s
}

func TestForwardMatchesDefinition(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for _, c := range []struct{ n, p, keep []int }{
		{[]int{5}, []int{8}, []int{8}},
		{[]int{7}, []int{12}, []int{6}},
		{[]int{5, 4}, []int{8, 10}, []int{8, 10}},
		{[]int{5, 4}, []int{12, 10}, []int{6, 4}},
		{[]int{3, 4, 2}, []int{4, 6, 4}, []int{4, 6, 4}},
		{[]int{3, 4, 5}, []int{6, 6, 8}, []int{4, 6, 4}},
	} {
		size := 1
		for _, m := range c.n {
			size *= m
		}
		x := make([]float64, size)
		for i := range x {
			x[i] = rng.NormFloat64()
		}
		for _, workers := range []int{1, 3} {
			h := fft.Forward(x, c.n, c.p, c.keep, workers)
			k := make([]int, len(c.n))
			for pos, got := range h.Data {
				r := pos
				for j := range k {
					w := c.keep[j]
					if j == 0 {
						w = c.keep[0]/2 + 1
					}
					k[j] = fft.Frequency(r%w, c.keep[j])
					r /= w
				}
				if want := naive(x, c.n, c.p, k); cmplx.Abs(got-want) > 1e-12*float64(size) {
					t.Fatalf("n=%v p=%v keep=%v k=%v: got %v, want %v", c.n, c.p, c.keep, k, got, want)
				}
			}
		}
	}
}

func TestInverseUndoesForward(t *testing.T) {
	rng := rand.New(rand.NewPCG(3, 4))
	n, p := []int{9, 7, 3}, []int{12, 8, 6}
	x := make([]float64, 9*7*3)
	for i := range x {
		x[i] = rng.NormFloat64()
	}
	back := fft.Inverse(fft.Forward(x, n, p, p, 2), n, 2)
	for i := range x {
		if got := back[i] / float64(12*8*6); math.Abs(got-x[i]) > 1e-13 {
			t.Fatalf("node %d: %g back as %g", i, x[i], got)
		}
	}
}

func TestGoodSize(t *testing.T) {
	for n, want := range map[int]int{1: 2, 7: 8, 11: 12, 1025: 1080, 1729: 1800, 1728: 1728} {
		if got := fft.GoodSize(n); got != want {
			t.Errorf("GoodSize(%d) = %d, want %d", n, got, want)
		}
	}
}

func BenchmarkForward1728(b *testing.B) {
	x := make([]float64, 1024*1024)
	for i := range x {
		x[i] = float64(i % 7)
	}
	for b.Loop() {
		fft.Forward(x, []int{1024, 1024}, []int{1728, 1728}, []int{1728, 1728}, 2)
	}
}
