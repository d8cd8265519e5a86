package mvtest

import (
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/mv"
)

// Build makes the evaluator under test.
type Build func(s *mv.Sample, k mv.Kernel, h mv.BandwidthMatrix) (mv.Evaluator, error)

// Conformance says what Conform asks. The zero value asks everything of every
// kernel in one to three dimensions to 1e-9.
type Conformance struct {
	Kernels []mv.Kernel
	Dims    []int
	// Rel is the error allowed between two evaluations that should be equal,
	// relative to the larger of the value and Floor times the highest density.
	Rel float64
	// Floor, as a part of the highest density, below which errors are absolute;
	// 0 asks relative agreement in the far tail too.
	Floor float64
}

// Conform runs the properties every evaluator has: mass 1; equivariance to
// shifts, scaling and rotation; permutation of the events; a duplicate equals
// a weight of 2; H = h^2 I equals the scalar h; a diagonal Gaussian H is the
// product of its axes; agreement with the plain sum of Kernel.Value.
func Conform(t *testing.T, build Build, c Conformance) {
	t.Helper()
	if c.Kernels == nil {
		c.Kernels = mv.Kernels()
	}
	if c.Dims == nil {
		c.Dims = []int{1, 2, 3}
	}
	if c.Rel == 0 {
		c.Rel = 1e-9
	}
	for _, k := range c.Kernels {
		for _, d := range c.Dims {
			t.Run(fmt.Sprintf("%s/d=%d", k, d), func(t *testing.T) {
				x := &conformer{Conformance: c, t: t, build: build, k: k, d: d, rng: rand.New(rand.NewPCG(uint64(d), uint64(k)))}
				x.run()
			})
		}
	}
}

type conformer struct {
	Conformance
	t     *testing.T
	build Build
	k     mv.Kernel
	d     int
	rng   *rand.Rand
}

func (x *conformer) density(s *mv.Sample, h mv.BandwidthMatrix, q [][]float64) []float64 {
	x.t.Helper()
	e, err := x.build(s, x.k, h)
	if err != nil {
		x.t.Fatal(err)
	}
	out := make([]float64, len(q[0]))
	if err := e.Density(context.Background(), out, q); err != nil {
		x.t.Fatal(err)
	}
	return out
}

func (x *conformer) same(what string, got, want []float64, factor float64) {
	x.t.Helper()
	var top float64
	for _, v := range want {
		top = max(top, math.Abs(v))
	}
	for i, v := range want {
		size := max(math.Abs(v), x.Floor*top)
		if e := math.Abs(got[i]*factor - v); !(e <= x.Rel*size+1e-290) {
			x.t.Errorf("%s: query %d: %.12g, want %.12g: relative %.3g, allowed %.3g", what, i, got[i]*factor, v, e/size, x.Rel)
			return
		}
	}
}

// columns draws n points of d coordinates.
func (x *conformer) columns(n int, sd float64) [][]float64 {
	c := make([][]float64, x.d)
	for k := range c {
		c[k] = make([]float64, n)
		for i := range c[k] {
			c[k][i] = sd * x.rng.NormFloat64()
		}
	}
	return c
}

// RandomMatrix draws a positive definite matrix with eigenvalues near size^2,
// the largest up to about 30 times the smallest.
func RandomMatrix(rng *rand.Rand, d int, size float64) mv.BandwidthMatrix {
	a := make([]float64, d*d)
	for i := range a {
		a[i] = rng.NormFloat64()
	}
	h := times(d, a, transpose(d, a))
	for i := range d {
		h[i*d+i] += 0.3 * float64(d)
	}
	for i := range h {
		h[i] *= size * size / float64(d)
	}
	return Matrix(d, h...)
}

// RandomRotation draws an orthogonal matrix, row-major.
func RandomRotation(rng *rand.Rand, d int) []float64 {
	r := make([]float64, d*d)
	for i := range d {
		for {
			for k := range d {
				r[i*d+k] = rng.NormFloat64()
			}
			for range 2 {
				for j := range i {
					var dot float64
					for k := range d {
						dot += r[i*d+k] * r[j*d+k]
					}
					for k := range d {
						r[i*d+k] -= dot * r[j*d+k]
					}
				}
			}
			var n float64
			for k := range d {
				n += r[i*d+k] * r[i*d+k]
			}
			if n > 1e-3 {
				for k := range d {
					r[i*d+k] /= math.Sqrt(n)
				}
				break
			}
		}
	}
	return r
}

func times(d int, a, b []float64) []float64 {
	c := make([]float64, d*d)
	for i := range d {
		for j := range d {
			for k := range d {
				c[i*d+j] += a[i*d+k] * b[k*d+j]
			}
		}
	}
	return c
}

func transpose(d int, a []float64) []float64 {
	b := make([]float64, d*d)
	for i := range d {
		for j := range d {
			b[j*d+i] = a[i*d+j]
		}
	}
	return b
}

// apply maps the points by y = Ax + b.
func apply(a []float64, cols [][]float64, b float64) [][]float64 {
	d, n := len(cols), len(cols[0])
	out := make([][]float64, d)
	for k := range out {
		out[k] = make([]float64, n)
		for i := range n {
			v := b * float64(k+1)
			for j := range d {
				v += a[k*d+j] * cols[j][i]
			}
			out[k][i] = v
		}
	}
	return out
}

func (x *conformer) run() {
	const n = 60
	d := x.d
	// A compact kernel is given a wider matrix so that its sums are not empty;
	// the uniform kernel jumps, so queries stay clear of its edges by chance.
	size := 0.8
	if x.k.Compact() {
		size = 2.2
	}
	cols, q := x.columns(n, 1.5), x.columns(25, 2)
	w := make([]float64, n)
	for i := range w {
		w[i] = 0.2 + x.rng.Float64()
	}
	s := must(mv.NewSample(cols, w))
	h := RandomMatrix(x.rng, d, size)
	base := x.density(s, h, q)

	plain := make([]float64, len(base))
	diff := make([]float64, d)
	for j := range plain {
		for i := range n {
			for k := range d {
				diff[k] = q[k][j] - cols[k][i]
			}
			plain[j] += w[i] / s.SumWeights() * x.k.Value(d, h.Mahalanobis2(diff)) / h.SqrtDet()
		}
	}
	x.same("plain sum", base, plain, 1)

	id := make([]float64, d*d)
	for k := range d {
		id[k*d+k] = 1
	}
	x.same("shift", x.density(must(mv.NewSample(apply(id, cols, 7), w)), h, apply(id, q, 7)), base, 1)

	for k := range d {
		id[k*d+k] = 250
	}
	h2 := must(h.Scaled(250 * 250))
	x.same("scale", x.density(must(mv.NewSample(apply(id, cols, 0), w)), h2, apply(id, q, 0)), base, math.Pow(250, float64(d)))

	r := RandomRotation(x.rng, d)
	turned := Matrix(d, times(d, times(d, r, h.Entries()), transpose(d, r))...)
	x.same("rotation", x.density(must(mv.NewSample(apply(r, cols, 0), w)), turned, apply(r, q, 0)), base, 1)

	perm := x.rng.Perm(n)
	pc, pw := make([][]float64, d), make([]float64, n)
	for k := range pc {
		pc[k] = make([]float64, n)
	}
	for i, p := range perm {
		pw[i] = w[p]
		for k := range d {
			pc[k][i] = cols[k][p]
		}
	}
	x.same("permutation", x.density(must(mv.NewSample(pc, pw)), h, q), base, 1)

	twice, once := make([][]float64, d), make([]float64, n)
	for k := range d {
		twice[k] = append(append([]float64(nil), cols[k]...), cols[k][0])
	}
	for i := range once {
		once[i] = 1
	}
	once[0] = 2
	x.same("duplicate is weight 2", x.density(must(mv.NewSample(twice, nil)), h, q), x.density(must(mv.NewSample(cols, once)), h, q), 1)

	x.scalarAndProduct(s, q)
	x.mass(s, h)
}

func (x *conformer) scalarAndProduct(s *mv.Sample, q [][]float64) {
	d := x.d
	diag := make([]float64, d*d)
	for k := range d {
		diag[k*d+k] = 4
	}
	x.same("H = h^2 I", x.density(s, Matrix(d, diag...), q), x.density(s, must(mv.ScalarBandwidth(d, 2)), q), 1)
	if x.k != mv.Gaussian {
		return
	}
	want := make([]float64, len(q[0]))
	for k := range d {
		diag[k*d+k] = 0.5 + float64(k)
	}
	for j := range want {
		for i := range s.Len() {
			p := s.Weight(i) / s.SumWeights()
			for k := range d {
				v := diag[k*d+k]
				u := q[k][j] - s.At(i, k)
				p *= math.Exp(-u*u/(2*v)) / math.Sqrt(2*math.Pi*v)
			}
			want[j] += p
		}
	}
	x.same("diagonal H is a product", x.density(s, Matrix(d, diag...), q), want, 1)
}

// mass integrates over a lattice, in the line and the plane. The rule is exact
// to rounding for the Gaussian; the edge of a compact kernel of power p costs
// about a power p+1 of the step, a jump less.
func (x *conformer) mass(s *mv.Sample, h mv.BandwidthMatrix) {
	if x.d > 2 {
		return
	}
	m, pad, rel := 2000, 1.0, 1e-5
	if x.d == 2 {
		m, rel = 160, 1e-3
	}
	switch x.k {
	case mv.Gaussian:
		pad, rel = 9, max(1e-10, x.Rel)
		if x.d == 2 {
			m = 250
		}
	case mv.Uniform:
		rel = 5e-3
	}
	l := GridOver(s, m, pad*math.Sqrt(h.Eigenvalues()[0]))
	var sum float64
	for _, v := range x.density(s, h, mv.LatticePoints(l)) {
		sum += v
	}
	NearAbs(x.t, "mass", sum*l.CellVolume(), 1, rel)
}
