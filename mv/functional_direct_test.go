package mv_test

import (
	"fmt"
	"math"
	"testing"

	"drumlin/mv"
	"drumlin/mv/mvtest"
)

// meanLeaveOneOut returns the mean over events of the leave-one-out density.
func meanLeaveOneOut(t testing.TB, s *mv.Sample, h mv.BandwidthMatrix) float64 {
	t.Helper()
	f := make([]float64, s.Len())
	if err := newDirect(t, s, mv.Gaussian, h).LeaveOneOut(bg, f); err != nil {
		t.Fatal(err)
	}
	var sum float64
	for _, v := range f {
		sum += v
	}
	return sum / float64(s.Len())
}

func lscv(t testing.TB, s *mv.Sample, h mv.BandwidthMatrix) float64 {
	t.Helper()
	return functionals(t, s, combine(2, h, 0, h), 0)[0] - 2*meanLeaveOneOut(t, s, h)
}

func scv(t testing.TB, s *mv.Sample, h, g mv.BandwidthMatrix) float64 {
	t.Helper()
	return mv.Gaussian.R(s.Dim())/(float64(s.Len())*h.SqrtDet()) + functionals(t, s, combine(2, h, 2, g), 0)[0] -
		2*functionals(t, s, combine(1, h, 2, g), 0)[0] + functionals(t, s, combine(0, h, 2, g), 0)[0]
}

func plugin(t testing.TB, s *mv.Sample, h, g mv.BandwidthMatrix) float64 {
	t.Helper()
	e, err := mv.AMISE(mv.Gaussian, h, functionals(t, s, g, 4), float64(s.Len()))
	if err != nil {
		t.Fatal(err)
	}
	return e.Total
}

// bcv evaluates biased cross-validation: scale 2 for the first form, 1 for the
// second. The diagonal is taken out of the functionals: D^k phi(0).
func bcv(t testing.TB, s *mv.Sample, h mv.BandwidthMatrix, scale float64) float64 {
	t.Helper()
	n, d := float64(s.Len()), s.Dim()
	g := combine(scale, h, 0, h)
	origin, err := mv.NewNormalMixture([]float64{1}, [][]float64{make([]float64, d)}, [][]float64{g.Entries()})
	if err != nil {
		t.Fatal(err)
	}
	psi, at0 := functionals(t, s, g, 4), origin.Derivatives(make([]float64, d), 4)
	for i := range psi {
		psi[i] -= at0[i] / n
		if scale == 1 {
			psi[i] *= n / (n - 1)
		}
	}
	e, err := mv.AMISE(mv.Gaussian, h, psi, n)
	if err != nil {
		t.Fatal(err)
	}
	return e.Total
}

// Values of METHODS section 0, computed there by two routes.
func TestFunctionalsWorkedPlane(t *testing.T) {
	s, h, g := mvtest.P12(2), mvtest.P12H(2), mvtest.P12G(2)
	const rel = 1e-11
	mvtest.Near(t, "integral of f^2", functionals(t, s, combine(2, h, 0, h), 0)[0], 0.0872935409901, rel)
	mvtest.Near(t, "leave-one-out mean", meanLeaveOneOut(t, s, h), 0.0417321558919, rel)
	mvtest.Near(t, "LSCV", lscv(t, s, h), 0.00382922920638, 2e-11)
	mvtest.Near(t, "SCV", scv(t, s, h, g), 0.0434422204380, rel)
	mvtest.Near(t, "BCV1", bcv(t, s, h, 2), 0.0303397879196, rel)
	mvtest.Near(t, "BCV2", bcv(t, s, h, 1), 0.0291690419274, rel)
	mvtest.Near(t, "plug-in objective", plugin(t, s, h, g), 0.317159497318, rel)
	for i, w := range []float64{6.76053415396, -2.56378763359, 6.08468822355, -6.92477940183, 25.8734276369} {
		mvtest.Near(t, fmt.Sprint("psi", mv.MultiIndices(2, 4)[i]), functionals(t, s, g, 4)[i], w, rel)
	}
	for i, w := range []float64{-208.966449425, 86.3446487403, -123.928667774, 127.350255806, -244.099484854, 383.133525452, -1321.41745272} {
		mvtest.Near(t, fmt.Sprint("psi", mv.MultiIndices(2, 6)[i]), functionals(t, s, g, 6)[i], w, rel)
	}
}

func TestFunctionalsWorkedLineAndSpace(t *testing.T) {
	const rel = 1e-11
	s := mvtest.P12(1)
	mvtest.Near(t, "d=1 LSCV", lscv(t, s, mvtest.P12H(1)), -0.137523231301, rel)
	mvtest.Near(t, "d=1 SCV", scv(t, s, mvtest.P12H(1), mvtest.P12G(1)), 0.0483915078772, rel)
	mvtest.Near(t, "d=1 psi4", functionals(t, s, mvtest.P12H(1), 4)[0], 0.391215673705, rel)
	mvtest.Near(t, "d=1 psi6", functionals(t, s, mvtest.P12H(1), 6)[0], -9.13749529344, rel)

	s = mvtest.P12(3)
	h, g := mvtest.P12H(3), mvtest.P12G(3)
	mvtest.Near(t, "d=3 LSCV", lscv(t, s, h), 0.000659373966512, 1e-10)
	mvtest.Near(t, "d=3 SCV", scv(t, s, h, g), 0.0353708300433, rel)
	mvtest.Near(t, "d=3 BCV2", bcv(t, s, h, 1), 0.0290099436172, rel)
	mvtest.Near(t, "d=3 plug-in objective", plugin(t, s, h, g), 0.58808801167, rel)
	psi := map[string]float64{}
	for i, v := range functionals(t, s, g, 4) {
		psi[fmt.Sprint(mv.MultiIndices(3, 4)[i])] = v
	}
	for k, w := range map[string]float64{"[4 0 0]": 9.002417455, "[3 1 0]": -3.142693002, "[2 1 1]": 0.02491908066, "[1 2 1]": -0.7150561068, "[0 0 4]": 12.97180717} {
		mvtest.Near(t, "psi"+k, psi[k], w, 1e-9) // ten printed digits
	}
}

// psi_k is also the mean over events of D^k of the estimate: an odd order is 0
// and an even one agrees with the derivative evaluator, weights included.
func TestFunctionalsAgainstDerivatives(t *testing.T) {
	cols := mvtest.P12(3).Columns()
	w := []float64{1, 2, 0, 3, .5, 1, 1, 2, 4, 1, .2, 1}
	s, err := mv.NewSample(cols, w)
	if err != nil {
		t.Fatal(err)
	}
	g := mvtest.P12G(3)
	for r := 0; r <= 4; r++ {
		ks := mv.MultiIndices(3, r)
		dst := make([][]float64, len(ks))
		for i := range dst {
			dst[i] = make([]float64, s.Len())
		}
		if err := newDirect(t, s, mv.Gaussian, g).Derivatives(bg, dst, s.Columns(), ks); err != nil {
			t.Fatal(err)
		}
		psi := functionals(t, s, g, r)
		for i := range ks {
			var sum float64
			for j, v := range dst[i] {
				sum += w[j] / s.SumWeights() * v
			}
			mvtest.NearAbs(t, fmt.Sprint("psi", ks[i]), psi[i], sum, 1e-11)
		}
	}
}

// psi_k for a normal density with covariance S is D^k phi_{2S}(0). METHODS
// 4.5, computed there.
func TestNormalFunctionals(t *testing.T) {
	m, err := mv.NewNormalMixture([]float64{1}, [][]float64{{3, 4}}, [][]float64{{1, .5, .5, 2}})
	if err != nil {
		t.Fatal(err)
	}
	for r, want := range map[int][]float64{
		4: {0.05892726288, -0.01473181572, 0.0122765131, -0.00736590786, 0.01473181572},
		6: {-0.1683636082, 0.04209090206, -0.02525454124, 0.01367954317, -0.01262727062, 0.01052272551, -0.02104545103},
	} {
		for i, w := range want {
			mvtest.Near(t, fmt.Sprint("psi", mv.MultiIndices(2, r)[i]), m.Functionals(r)[i], w, 1e-9)
		}
	}
	mvtest.Near(t, "psi80", m.Functional([]int{8, 0}), 0.6734544329, 1e-9)
	mvtest.Near(t, "psi44", m.Functional([]int{4, 4}), 0.02946363144, 1e-9)
	mvtest.Near(t, "psi08", m.Functional([]int{0, 8}), 0.04209090206, 1e-9)
}

// Least-squares criterion and leave-one-out log likelihood of every case of
// testdata/reference/statsmodels_cv.json (statsmodels KDEMultivariate).
func TestReferenceCrossValidation(t *testing.T) {
	var ref struct {
		Cases []struct {
			Data    string
			Rows    int
			Columns []string
			H       []float64
			IMSE    float64
			LogLike float64 `json:"loo_log_likelihood"`
		}
	}
	readJSON(t, "../testdata/reference/statsmodels_cv.json", &ref)
	if len(ref.Cases) == 0 {
		t.Fatal("no cases")
	}
	for _, c := range ref.Cases {
		cols := readColumns(t, "../testdata/events/"+c.Data, c.Columns, c.Rows)
		s, err := mv.NewSample(cols, nil)
		if err != nil {
			t.Fatal(err)
		}
		diag := make([]float64, len(c.H))
		for i, v := range c.H {
			diag[i] = v * v
		}
		h, err := mv.DiagonalBandwidth(diag)
		if err != nil {
			t.Fatal(err)
		}
		name := fmt.Sprint(c.Data, c.Columns, c.H)
		mvtest.Near(t, name+" least squares", lscv(t, s, h), c.IMSE, 1e-10)
		l := make([]float64, s.Len())
		if err := newDirect(t, s, mv.Gaussian, h).LogLeaveOneOut(bg, l); err != nil {
			t.Fatal(err)
		}
		var sum float64
		for _, v := range l {
			sum += v
		}
		if !math.IsInf(sum, 0) {
			mvtest.Near(t, name+" log likelihood", sum, c.LogLike, 1e-11)
		}
	}
}
