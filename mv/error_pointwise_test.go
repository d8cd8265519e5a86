package mv_test

import (
	"errors"
	"math"
	"testing"

	"drumlin/mv"
	"drumlin/mv/mvtest"
)

func normalScale(t testing.TB, s *mv.Sample, r int) mv.BandwidthMatrix {
	t.Helper()
	h, err := mv.NormalScale(s, r)
	if err != nil {
		t.Fatal(err)
	}
	return h
}

// Normal reference matrices of METHODS section 0 and 4.1, computed there; the
// last equals scipy's gaussian_kde with its Silverman rule.
func TestNormalScale(t *testing.T) {
	mvtest.Near(t, "d=1", normalScale(t, mvtest.P12(1), 0).At(0, 0), 0.5779121993, 1e-9)
	h3 := normalScale(t, mvtest.P12(3), 0)
	for i, row := range [][]float64{{0.6419966944, 0.3193384026, 0.3469808491}, {0, 0.3870641439, 0.2463707308}, {0, 0, 0.28135188}} {
		for j := i; j < 3; j++ {
			mvtest.Near(t, "d=3", h3.At(i, j), row[j], 1e-9)
		}
	}
	// r = 2 is (4/((d+6)n))^{2/(d+8)} S, the pilot for a bias surface.
	s := mvtest.P12(2)
	mvtest.Near(t, "pilot", normalScale(t, s, 2).At(0, 1), math.Pow(4/(8*12.0), 0.2)*0.6922727273, 1e-9)

	s, err := mv.NewSample(readColumns(t, "../testdata/events/faithful.csv", []string{"eruptions", "waiting"}, 0), nil)
	if err != nil {
		t.Fatal(err)
	}
	h := normalScale(t, s, 0)
	mvtest.Printed(t, "faithful H11", h.At(0, 0), 0.20106241, 8)
	mvtest.Printed(t, "faithful H12", h.At(0, 1), 2.15732759, 9)
	mvtest.Printed(t, "faithful H22", h.At(1, 1), 28.52553387, 10)
	e := newDirect(t, s, mv.Gaussian, h)
	mvtest.Near(t, "faithful f(3.5,70)", densityAt(t, e, 3.5, 70), 0.00958840961098, 1e-11)
	mvtest.Near(t, "faithful f(2,54)", densityAt(t, e, 2, 54), 0.0161361176518, 1e-11)
	mvtest.Near(t, "faithful f(4.4,80)", densityAt(t, e, 4.4, 80), 0.0273186766973, 1e-11)
	mvtest.Near(t, "faithful f(1,30)", densityAt(t, e, 1, 30), 6.54482045947e-05, 1e-11)
	mvtest.Near(t, "faithful integral of f^2", functionals(t, s, combine(2, h, 0, h), 0)[0], 0.0119955381342, 1e-11)

	one, _ := mv.NewSample([][]float64{{1}, {2}}, nil)
	if _, err := mv.NormalScale(one, 0); !errors.Is(err, mv.ErrDegenerate) {
		t.Error(err)
	}
	if _, err := mv.NormalScale(s, -1); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
}

func TestErrorDoor(t *testing.T) {
	h := mvtest.P12H(2)
	if _, err := mv.NewPointwise(mv.Gaussian, h, 1, []float64{1}, 10); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	if _, err := mv.AMISE(mv.Gaussian, h, []float64{1}, 10); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	if _, err := mv.AMISE(mv.Gaussian, h, make([]float64, 5), 0); !errors.Is(err, mv.ErrShape) {
		t.Error(err)
	}
	p, err := mv.NewPointwise(mv.Gaussian, h, 0.1, []float64{9, 0, 9}, 10)
	if err != nil || p.Debiased != 0 {
		t.Errorf("a debiased density below 0: %+v, %v", p, err)
	}
}

// The AMISE expansion in the plane, written out as in METHODS 2.2, and in
// three dimensions by the sum over all four indices.
func TestAMISEExpansion(t *testing.T) {
	h := workedH()
	p := []float64{3, -1, 2, .5, 7}
	a, b, c := h.At(0, 0), h.At(0, 1), h.At(1, 1)
	want := (a*a*p[0] + c*c*p[4] + (2*a*c+4*b*b)*p[2] + 4*a*b*p[1] + 4*b*c*p[3]) / 4
	e, err := mv.AMISE(mv.Gaussian, h, p, 100)
	if err != nil {
		t.Fatal(err)
	}
	mvtest.Near(t, "d=2", e.SquaredBias, want, 1e-14)

	h = mvtest.P12H(3)
	psi := map[[3]int]float64{}
	var list []float64
	for i, k := range mv.MultiIndices(3, 4) {
		psi[[3]int(k)] = math.Cos(float64(i))
		list = append(list, math.Cos(float64(i)))
	}
	want = 0
	for i := range 3 {
		for j := range 3 {
			for k := range 3 {
				for l := range 3 {
					var idx [3]int
					for _, v := range []int{i, j, k, l} {
						idx[v]++
					}
					want += h.At(i, j) * h.At(k, l) * psi[idx] / 4
				}
			}
		}
	}
	if e, err = mv.AMISE(mv.Gaussian, h, list, 100); err != nil {
		t.Fatal(err)
	}
	mvtest.Near(t, "d=3", e.SquaredBias, want, 1e-13)
}

// Gradient and Hessian, and leave-one-out with weights, in their own shapes.
func TestDirectShapes(t *testing.T) {
	s, h := mvtest.P12(2), mvtest.P12H(2)
	e := newDirect(t, s, mv.Gaussian, h)
	g, hess := [][]float64{{0}, {0}}, [][]float64{{0}, {0}, {0}}
	if err := errors.Join(e.Gradient(bg, g, column(1, 1)), e.Hessian(bg, hess, column(1, 1))); err != nil {
		t.Fatal(err)
	}
	mvtest.Near(t, "gradient", g[1][0], -0.0469829671752, 1e-11)
	mvtest.Near(t, "Hessian", hess[1][0], 0.0261837354860, 1e-11)

	pair, err := mv.NewSample([][]float64{{0, 1, 90}}, []float64{1, 3, 0})
	if err != nil {
		t.Fatal(err)
	}
	for _, k := range []mv.Kernel{mv.Gaussian, mv.Biweight} {
		e := newDirect(t, pair, k, mvtest.Matrix(1, 4))
		f, l := make([]float64, 3), make([]float64, 3)
		if err := errors.Join(e.LeaveOneOut(bg, f), e.LogLeaveOneOut(bg, l)); err != nil {
			t.Fatal(err)
		}
		// Each event sees the other alone.
		for i := range 2 {
			mvtest.Near(t, "leave one out", f[i], k.Value(1, 0.25)/2, 1e-14)
			mvtest.Near(t, "its logarithm", l[i], math.Log(k.Value(1, 0.25)/2), 1e-14)
		}
		if math.IsInf(l[2], -1) != (k == mv.Biweight) {
			t.Errorf("%v: logarithm %g at an event with no neighbour", k, l[2])
		}
	}
	single, _ := mv.NewSample([][]float64{{5, 7}}, []float64{1, 0})
	f := make([]float64, 2)
	if err := newDirect(t, single, mv.Gaussian, mvtest.Matrix(1, 4)).LeaveOneOut(bg, f); err != nil || f[0] != 0 {
		t.Errorf("the only event sees %g, %v", f[0], err)
	}
}
