package mv_test

import (
	"errors"
	"math"
	"testing"

	"drumlin/mv"
)

// Surfaces of every kernel, and the derivatives each has, against direct sums
// at thinned nodes, 6 steps per minor scale
// of the Gaussian and 16 of the others; the bounds are measurements with a
// margin of about two.
func TestKernelSurfaces(t *testing.T) {
	s := clumps(t, 6, 2, 300)
	sp := spectrumFor(t, s, 0.05, 0, 2)
	for _, c := range []struct {
		k     mv.Kernel
		bound float64
		index []int
	}{
		{mv.Gaussian, 4e-4, []int{0, 0}}, {mv.Triweight, 4e-4, []int{0, 0}}, {mv.Biweight, 4e-4, []int{0, 0}},
		{mv.Epanechnikov, 2e-3, []int{0, 0}}, {mv.Uniform, 6e-2, []int{0, 0}},
		{mv.Triweight, 2e-3, []int{1, 0}}, {mv.Triweight, 3e-2, []int{1, 1}}, {mv.Biweight, 1e-2, []int{0, 1}},
		{mv.Gaussian, 1e-2, []int{3, 1}},
	} {
		h := tilted(t, 2, 0.8, 1.5)
		if c.k == mv.Gaussian {
			h = tilted(t, 2, 0.3, 1.5)
		}
		g, err := sp.KernelDerivative(c.k, h, c.index)
		if err != nil {
			t.Fatal(err)
		}
		if c.index[0]+c.index[1] == 0 {
			sameGrid(t, "density", g, sp.KernelDensity(c.k, h))
		}
		q := make([][]float64, 2)
		var got []float64
		for at := 0; at < len(g.Values); at += 1 + len(g.Values)/1200 {
			q[0], q[1] = append(q[0], g.Coord(0, at%g.N[0])), append(q[1], g.Coord(1, at/g.N[0]))
			got = append(got, g.Values[at])
		}
		want := make([]float64, len(got))
		if err := newDirect(t, s, c.k, h).Derivative(bg, want, q, c.index); err != nil {
			t.Fatal(err)
		}
		e, top := worst(got, want)
		t.Logf("%s %v: off by %.2g of its maximum", c.k, c.index, e/top)
		if e > c.bound*top {
			t.Errorf("%s %v: off by %.3g of its maximum, allowed %.3g", c.k, c.index, e/top, c.bound)
		}
	}
	h := tilted(t, 2, 0.8, 1.5)
	if _, err := sp.KernelDerivative(mv.Uniform, h, []int{1, 0}); !errors.Is(err, mv.ErrNotDifferentiable) {
		t.Error(err)
	}
	if _, err := sp.KernelDerivative(mv.Gaussian, h, []int{1}); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
}

// Modes climbed on the spectrum are those of the direct estimate to 1e-3 of a
// scale (the surface's own error), and exact maxima of the surface to 1e-6.
func TestSpectrumModes(t *testing.T) {
	for _, d := range []int{1, 2, 3} {
		s := clumps(t, 7, d, 500)
		h := tilted(t, d, 0.35, 1.5)
		sp := spectrumFor(t, s, []float64{0, 0.02, 0.04, 0.1}[d], 0, 2)
		f := sp.Density(h)
		var top float64
		for _, v := range f.Values {
			top = max(top, v)
		}
		modes, err := sp.Modes(bg, h, 0.05*top, mv.ModeOptions{})
		if err != nil {
			t.Fatal(err)
		}
		if len(modes) == 0 || modes[0].Density < top {
			t.Fatalf("d=%d: %d modes, the highest node %g", d, len(modes), top)
		}
		direct, err := newDirect(t, s, mv.Gaussian, h).Modes(bg, mv.LatticeMaxima(f, 0.05*top), mv.ModeOptions{})
		if err != nil {
			t.Fatal(err)
		}
		if len(direct) != len(modes) {
			t.Fatalf("d=%d: %d modes, %d of the direct estimate", d, len(modes), len(direct))
		}
		for i, m := range modes {
			diff := make([]float64, d)
			for k := range d {
				diff[k] = m.At[k] - direct[i].At[k]
			}
			if r := math.Sqrt(h.Mahalanobis2(diff)); r > 1e-2 || !m.Converged {
				t.Errorf("d=%d mode %d: %g scales from the direct estimate's, %+v", d, i, r, m)
			}
		}
		again, err := sp.Modes(bg, h, 0.05*top, mv.ModeOptions{Tolerance: 1e-9})
		if err != nil {
			t.Fatal(err)
		}
		for i, m := range again {
			for k := range d {
				if e := math.Abs(m.At[k] - modes[i].At[k]); e > 1e-6*math.Sqrt(h.At(k, k)) {
					t.Errorf("d=%d mode %d axis %d: moves by %g when climbed further", d, i, k, e)
				}
			}
		}
	}
}

// A plateau has one maximum, its first node; borders count.
func TestLatticeMaxima(t *testing.T) {
	l, err := mv.NewLattice([]float64{10, 20}, []float64{1, 2}, []int{4, 3})
	if err != nil {
		t.Fatal(err)
	}
	m := mv.LatticeMaxima(mv.Grid{Lattice: l, Values: []float64{
		5, 1, 0, 2,
		1, 1, 0, 3,
		1, 1, 0, 3,
	}}, 0.5)
	if len(m[0]) != 2 || m[0][0] != 10 || m[1][0] != 20 || m[0][1] != 13 || m[1][1] != 22 {
		t.Error(m)
	}
}
