package mv_test

import (
	"context"
	"math"
	"math/rand/v2"
	"testing"

	"drumlin/mv"
)

// clumps returns a seeded sample of two oriented clumps in d dimensions.
func clumps(t testing.TB, seed uint64, d, n int) *mv.Sample {
	t.Helper()
	rng := rand.New(rand.NewPCG(seed, 11))
	cols := make([][]float64, d)
	for i := range n {
		base := rng.NormFloat64()
		for k := range d {
			v := 0.6*base + 0.8*rng.NormFloat64()
			if i%3 == 0 {
				v = 2 + 0.5*rng.NormFloat64()
			}
			cols[k] = append(cols[k], v)
		}
	}
	s, err := mv.NewSample(cols, nil)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// tilted returns an SPD matrix with the given minor scale and axis ratio.
func tilted(t testing.TB, d int, minor, ratio float64) mv.BandwidthMatrix {
	t.Helper()
	h := make([]float64, d*d)
	for i := range d {
		h[i*d+i] = minor * minor
	}
	if d > 1 { // stretch along (1, 1, ...)
		extra := minor * minor * (ratio*ratio - 1) / float64(d)
		for i := range h {
			h[i] += extra
		}
	} else {
		h[0] *= ratio * ratio
	}
	m, err := mv.NewBandwidthMatrix(d, h)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

func spectrumFor(t testing.TB, s *mv.Sample, step float64, coarsen, workers int) *mv.Spectrum {
	t.Helper()
	d := s.Dim()
	steps, margin := make([]float64, d), make([]float64, d)
	for k := range d {
		steps[k], margin[k] = step, 1
	}
	l, err := mv.LatticeAround(s, steps, margin)
	if err != nil {
		t.Fatal(err)
	}
	g, err := mv.Bin(s, l)
	if err != nil {
		t.Fatal(err)
	}
	reach := make([]float64, d)
	for k := range d {
		reach[k] = 7 * 0.9
	}
	sp, err := mv.NewSpectrum(g, mv.SpectrumOptions{Reach: reach, Coarsen: coarsen, Workers: workers})
	if err != nil {
		t.Fatal(err)
	}
	return sp
}

func worst(got, want []float64) (err, top float64) {
	for i := range want {
		err = math.Max(err, math.Abs(got[i]-want[i]))
		top = math.Max(top, math.Abs(want[i]))
	}
	return err, top
}

// The density surface against the direct double sum, at several resolutions.
// The bounds are this project's own measurements with a margin of about two.
func TestDensityAgainstDirect(t *testing.T) {
	for _, c := range []struct {
		d, n, coarsen int
		perScale      float64 // lattice steps of the counts per minor scale
		bound         float64 // of the density's maximum
	}{
		{1, 500, 0, 10, 1e-4},
		{2, 1000, 0, 10, 1e-4}, {2, 1000, 0, 20, 2e-5}, {2, 1000, 0, 5, 5e-4},
		{2, 1000, 1, 20, 2e-5}, {2, 1000, 2, 20, 2e-5},
		{3, 300, 0, 4, 3e-3},
	} {
		s := clumps(t, 1, c.d, c.n)
		h := tilted(t, c.d, 0.25, 3)
		sp := spectrumFor(t, s, 0.25/c.perScale, c.coarsen, 2)
		g := sp.Density(h)
		direct, err := mv.NewDirect(s, mv.Gaussian, h, mv.EvalOptions{})
		if err != nil {
			t.Fatal(err)
		}
		// A thinned set of nodes is enough.
		q := make([][]float64, c.d)
		var got []float64
		for at := 0; at < len(g.Values); at += 1 + len(g.Values)/1500 {
			r := at
			for k := range c.d {
				q[k] = append(q[k], g.Coord(k, r%g.N[k]))
				r /= g.N[k]
			}
			got = append(got, g.Values[at])
		}
		want := make([]float64, len(got))
		if err := direct.Density(context.Background(), want, q); err != nil {
			t.Fatal(err)
		}
		if e, top := worst(got, want); e > c.bound*top {
			t.Errorf("d=%d, %g steps per scale, coarsened %d times: off by %.3g of the maximum, allowed %.3g", c.d, c.perScale, c.coarsen, e/top, c.bound)
		} else {
			t.Logf("d=%d, %g steps per scale, coarsened %d times: %.2g of the maximum", c.d, c.perScale, c.coarsen, e/top)
		}
	}
}

// Functionals against the direct double sum: the design's figures are 5e-4 of
// the vector norm for psi_4 at 3 steps per scale, 2.5e-3 for psi_6.
func TestFunctionalAgainstDirect(t *testing.T) {
	s := clumps(t, 2, 2, 700)
	for _, ratio := range []float64{1, 4, 15} {
		g := tilted(t, 2, 0.2, ratio/2+0.5)
		sp := spectrumFor(t, s, 0.2/8, 0, 2)
		for _, r := range []int{0, 4, 6, 8} {
			want, err := mv.DirectFunctionals(context.Background(), s, g, r, mv.EvalOptions{})
			if err != nil {
				t.Fatal(err)
			}
			got := sp.Functional(r, g)
			var diff, norm float64
			for i, k := range mv.MultiIndices(2, r) {
				diff += mv.Multiplicity(k) * (got[i] - want[i]) * (got[i] - want[i])
				norm += mv.Multiplicity(k) * want[i] * want[i]
			}
			if e := math.Sqrt(diff / norm); e > 1e-3 {
				t.Errorf("order %d, ratio %g: relative error %.3g of the norm", r, ratio, e)
			}
		}
	}
}

// Derivatives and the bias surface against direct sums.
func TestDerivativesAgainstDirect(t *testing.T) {
	s := clumps(t, 3, 2, 800)
	h, pilot := tilted(t, 2, 0.3, 2), tilted(t, 2, 0.4, 1.5)
	sp := spectrumFor(t, s, 0.02, 1, 2)
	lat := sp.Lattice()
	var q [2][]float64
	var at []int
	for i := 0; i < lat.Len(); i += 1 + lat.Len()/1500 {
		at = append(at, i)
		q[0] = append(q[0], lat.Coord(0, i%lat.N[0]))
		q[1] = append(q[1], lat.Coord(1, i/lat.N[0]))
	}
	direct, err := mv.NewDirect(s, mv.Gaussian, pilot, mv.EvalOptions{})
	if err != nil {
		t.Fatal(err)
	}
	bias := make([]float64, len(at))
	for _, k := range [][]int{{1, 0}, {0, 1}, {2, 0}, {1, 1}, {0, 2}, {3, 1}} {
		want := make([]float64, len(at))
		if err := direct.Derivative(context.Background(), want, q[:], k); err != nil {
			t.Fatal(err)
		}
		g := sp.Derivative(pilot, k)
		got := make([]float64, len(at))
		for i, a := range at {
			got[i] = g.Values[a]
		}
		if e, top := worst(got, want); e > 5e-4*top {
			t.Errorf("derivative %v: off by %.3g of its maximum", k, e/top)
		}
		if k[0]+k[1] == 2 {
			c := 0.5 * h.At(0, 0)
			if k[0] == 1 {
				c = h.At(0, 1)
			} else if k[1] == 2 {
				c = 0.5 * h.At(1, 1)
			}
			for i := range bias {
				bias[i] += c * want[i]
			}
		}
	}
	g := sp.SmoothingBias(h, pilot)
	got := make([]float64, len(at))
	for i, a := range at {
		got[i] = g.Values[a]
	}
	if e, top := worst(got, bias); e > 2e-4*top {
		t.Errorf("bias surface: off by %.3g of its maximum", e/top)
	}
}

// The number of workers changes no bit.
func TestSpectrumWorkers(t *testing.T) {
	s := clumps(t, 4, 2, 300)
	h := tilted(t, 2, 0.3, 2)
	one, three := spectrumFor(t, s, 0.05, 0, 1), spectrumFor(t, s, 0.05, 0, 3)
	sameGrid(t, "density", one.Density(h), three.Density(h))
	a, b := one.Functional(4, h), three.Functional(4, h)
	for i := range a {
		if a[i] != b[i] {
			t.Errorf("psi %d: %v and %v", i, a[i], b[i])
		}
	}
}

// A density integrates to 1 where nothing wraps or is cut.
func TestSurfaceMass(t *testing.T) {
	s := clumps(t, 5, 2, 400)
	steps, margin := []float64{0.05, 0.05}, []float64{5, 5}
	l, err := mv.LatticeAround(s, steps, margin)
	if err != nil {
		t.Fatal(err)
	}
	g, err := mv.Bin(s, l)
	if err != nil {
		t.Fatal(err)
	}
	sp, err := mv.NewSpectrum(g, mv.SpectrumOptions{})
	if err != nil {
		t.Fatal(err)
	}
	var sum float64
	dens := sp.Density(tilted(t, 2, 0.3, 2))
	for _, v := range dens.Values {
		sum += v
	}
	if sum *= dens.CellVolume(); math.Abs(sum-1) > 1e-10 {
		t.Errorf("mass %v", sum)
	}
}

func TestDensityQuantile(t *testing.T) {
	v := []float64{0, 5, 3, 9, 1, 7}
	w := []float64{4, 1, 1, 1, 2, 1}
	for _, c := range []struct{ content, want float64 }{{0.1, 9}, {0.2, 7}, {0.35, 3}, {0.4, 3}, {0.55, 1}, {0.95, 0}} {
		got, err := mv.DensityQuantile(v, w, c.content)
		if err != nil || got != c.want {
			t.Errorf("content %g: %g (%v), want %g", c.content, got, err, c.want)
		}
	}
}
