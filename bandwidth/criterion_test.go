package bandwidth_test

import (
	"context"
	"encoding/json"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"drumlin/bandwidth"
	"drumlin/mv"
	"drumlin/mv/mvtest"
)

func matrix(t testing.TB, d int, h ...float64) mv.BandwidthMatrix {
	t.Helper()
	m, err := mv.NewBandwidthMatrix(d, h)
	if err != nil {
		t.Fatal(err)
	}
	return m
}

// sampleOf makes a sample of columns.
func sampleOf(t testing.TB, cols ...[]float64) *mv.Sample {
	t.Helper()
	s, err := mv.NewSample(cols, nil)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func value(c bandwidth.Criterion, h mv.BandwidthMatrix) float64 { v, _ := c(h); return v }

// Criteria on the twelve points of METHODS.md, section 0, computed there by two
// routes; relative tolerance 1e-10.
func TestCriteriaOnTwelvePoints(t *testing.T) {
	for _, c := range []struct {
		d                     int
		h, g                  []float64
		lscv, scv, bcv1, bcv2 float64
	}{
		{2, []float64{.25, .10, .10, .16}, []float64{.20, .05, .05, .12}, 0.00382922920638, 0.0434422204380, 0.0303397879196, 0.0291690419274},
		{3, []float64{.25, .10, .05, .10, .16, .02, .05, .02, .20}, []float64{.20, .05, .03, .05, .12, .01, .03, .01, .15}, 0.000659373966512, 0.0353708300433, 0, 0.0290099436172},
		{1, []float64{.25}, []float64{.16}, -0.137523231301, 0.0483915078772, 0, 0},
	} {
		sums := bandwidth.NewDirectSums(mvtest.P12(c.d), 1)
		h, g := matrix(t, c.d, c.h...), matrix(t, c.d, c.g...)
		near(t, fmt.Sprintf("d=%d LSCV", c.d), value(bandwidth.LSCV(sums), h), c.lscv, 1e-10)
		near(t, fmt.Sprintf("d=%d SCV", c.d), value(bandwidth.SCV(sums, g), h), c.scv, 1e-10)
		if c.bcv1 != 0 {
			near(t, "BCV1", value(bandwidth.BCV(sums, 1), h), c.bcv1, 1e-10)
		}
		if c.bcv2 != 0 {
			near(t, fmt.Sprintf("d=%d BCV2", c.d), value(bandwidth.BCV(sums, 2), h), c.bcv2, 1e-10)
		}
	}
}

// BCV1 on the eruptions, METHODS.md 4.3 (closed form of the univariate case),
// and LSCV there with divisor n(n-1).
func TestCriteriaOnEruptions(t *testing.T) {
	sums := bandwidth.NewDirectSums(sampleOf(t, column(t, "faithful.csv", "eruptions")), 1)
	for _, c := range []struct{ h, bcv, lscv float64 }{
		{.1, 0.0122430222998, -0.428455242275}, {.2, 0.0114660423265, -0.418498628038}, {.3, 0.0157242956811, -0.398496710666},
	} {
		h := matrix(t, 1, c.h*c.h)
		near(t, "BCV1", value(bandwidth.BCV(sums, 1), h), c.bcv, 1e-10)
		near(t, "LSCV", value(bandwidth.LSCV(sums), h), c.lscv, 1e-10)
	}
}

// Gradients against central differences of the values, for random matrices;
// the differences are good to about 1e-8.
func TestCriteriaGradients(t *testing.T) {
	rng := rand.New(rand.NewPCG(1, 2))
	for d := 1; d <= 4; d++ {
		s := mvtest.P12(min(d, 3))
		if d == 4 {
			cols := append([][]float64(nil), s.Columns()...)
			cols = append(cols, []float64{.3, -.5, 1, .2, 0, .4, -.7, -1, .1, .9, .6, -.2})
			s = sampleOf(t, cols...)
		}
		sums := bandwidth.NewDirectSums(s, 1)
		lcv, err := bandwidth.LikelihoodCV(s)
		if err != nil {
			t.Fatal(err)
		}
		crit := map[string]bandwidth.Criterion{
			"LSCV": bandwidth.LSCV(sums), "SCV": bandwidth.SCV(sums, mvtest.RandomMatrix(rng, d, 0.5)),
			"BCV1": bandwidth.BCV(sums, 1), "BCV2": bandwidth.BCV(sums, 2), "likelihood": lcv,
		}
		for range 2 {
			h := mvtest.RandomMatrix(rng, d, 0.7)
			for name, c := range crit {
				_, g := c(h)
				for i := range d {
					for j := range i + 1 {
						const step = 1e-4
						e := h.Entries()
						at := func(v float64) float64 {
							w := append([]float64(nil), e...)
							w[i*d+j] += v
							if i != j {
								w[j*d+i] += v
							}
							return value(c, matrix(t, d, w...))
						}
						got := (8*(at(step)-at(-step)) - (at(2*step) - at(-2*step))) / (12 * step)
						want := g[i*d+j]
						if i != j {
							want += g[j*d+i]
						}
						if math.Abs(got-want) > 1e-7*(math.Abs(want)+math.Abs(value(c, h))) {
							t.Errorf("d=%d %s: derivative by H%d%d is %.10g by differences, %.10g by formula", d, name, i+1, j+1, got, want)
						}
					}
				}
			}
		}
	}
}

type statsmodelsCase struct {
	Data    string
	Rows    int
	Columns []string
	H       []float64
	Imse    float64
	Loo     float64 `json:"loo_log_likelihood"`
}

func statsmodelsCases(t *testing.T) []statsmodelsCase {
	t.Helper()
	b, err := os.ReadFile("../testdata/reference/statsmodels_cv.json")
	if err != nil {
		t.Fatal(err)
	}
	var f struct{ Cases []statsmodelsCase }
	if err := json.Unmarshal(b, &f); err != nil {
		t.Fatal(err)
	}
	return f.Cases
}

// LSCV and the leave-one-out likelihood against a general statistics library's
// values (diagonal H): direct sums to 1e-10, the spectrum to 1e-4, from 16
// lattice steps per scale (at 10 steps the integer minutes of one column, folded
// back by the lattice, leave 2e-4).
func TestCriteriaAgainstStatsmodels(t *testing.T) {
	for _, c := range statsmodelsCases(t) {
		var cols [][]float64
		diag, step := make([]float64, len(c.H)), make([]float64, len(c.H))
		for i, name := range c.Columns {
			cols = append(cols, column(t, c.Data, name)[:c.Rows])
			diag[i], step[i] = c.H[i]*c.H[i], c.H[i]/16
		}
		s := sampleOf(t, cols...)
		h, err := mv.DiagonalBandwidth(diag)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "imse", value(bandwidth.LSCV(bandwidth.NewDirectSums(s, 1)), h), c.Imse, 1e-10)
		near(t, "imse by spectrum", value(bandwidth.LSCV(spectrumOf(t, s, step, h)), h), c.Imse, 1e-4)
		lcv, err := bandwidth.LikelihoodCV(s)
		if err != nil {
			t.Fatal(err)
		}
		near(t, "leave-one-out log-likelihood", -value(lcv, h)*float64(c.Rows), c.Loo, 1e-10)
	}
}

// spectrumOf bins a sample with the given steps, free of wrap-around for 7
// scales of sums up to six times h.
func spectrumOf(t testing.TB, s *mv.Sample, step []float64, h mv.BandwidthMatrix) *mv.Spectrum {
	t.Helper()
	margin, reach := make([]float64, s.Dim()), make([]float64, s.Dim())
	for k := range reach {
		margin[k] = step[k]
		reach[k] = 7 * math.Sqrt(6*h.At(k, k))
	}
	l, err := mv.LatticeAround(s, step, margin)
	if err != nil {
		t.Fatal(err)
	}
	g, err := mv.Bin(s, l)
	if err != nil {
		t.Fatal(err)
	}
	sp, err := mv.NewSpectrum(g, mv.SpectrumOptions{Reach: reach, Workers: 2})
	if err != nil {
		t.Fatal(err)
	}
	return sp
}

// The spectrum against direct double sums over random matrices, rotated and
// elongated up to 20:1. From 8 lattice steps per minor scale: criteria to 1e-4
// of the sum of their parts, functionals to 5e-3 of their vector norm; from 16
// steps functionals to 2e-3, gradients to 1e-3 of the norm of their parts. BCV2
// looks at order 4 and 6 with the narrow H itself as pilot: three times as much.
// The error is linear binning's: per event about 0.037 (t step)^2, random.
func TestSpectrumAgainstDirect(t *testing.T) {
	const n = 700
	rounds := 8
	if testing.Short() {
		rounds = 2
	}
	rng := rand.New(rand.NewPCG(3, 4))
	targets := []string{"D", "G", "L", "S1", "S3"}
	for round := range rounds {
		s, err := mvtest.Target(targets[round%len(targets)]).Sample(rng, n)
		if err != nil {
			t.Fatal(err)
		}
		minor := 0.15 + 0.2*rng.Float64()
		long := minor * (1 + 19*rng.Float64()*rng.Float64())
		if round == 0 {
			long = 20 * minor
		}
		h := tilted(t, long, minor, math.Pi*rng.Float64())
		g := tilted(t, long*0.8, minor*1.1, math.Pi*rng.Float64())
		wide := matrix(t, 2, math.Max(h.At(0, 0), g.At(0, 0)), 0, 0, math.Max(h.At(1, 1), g.At(1, 1)))
		direct := bandwidth.NewDirectSums(s, 2)
		for _, steps := range []float64{8, 16} {
			sp := spectrumOf(t, s, []float64{minor / steps, minor / steps}, wide)
			for _, r := range []int{0, 2, 4, 6, 8} {
				a, b := sp.Functionals(h, r)[0], direct.Functionals(h, r)[0]
				allowed := map[float64]float64{8: 5e-3, 16: 2e-3}[steps]
				if e := apartness(a, b, 0); e > allowed {
					t.Errorf("round %d, %g steps: functionals of order %d are off by %.2g of their norm", round, steps, r, e)
				}
			}
			for name, pair := range map[string][2]bandwidth.Criterion{
				"LSCV": {bandwidth.LSCV(sp), bandwidth.LSCV(direct)}, "SCV": {bandwidth.SCV(sp, g), bandwidth.SCV(direct, g)},
				"BCV1": {bandwidth.BCV(sp, 1), bandwidth.BCV(direct, 1)}, "BCV2": {bandwidth.BCV(sp, 2), bandwidth.BCV(direct, 2)},
			} {
				v, gv := pair[0](h)
				w, gw := pair[1](h)
				variance := 1 / (n * 4 * math.Pi * h.SqrtDet())
				if name == "LSCV" {
					variance *= 4 // 2 K_H(0)/n
				}
				slack := 1.0
				if name == "BCV2" {
					slack = 3
				}
				if math.Abs(v-w) > slack*1e-4*(math.Abs(w)+variance) {
					t.Errorf("round %d (%.3g by %.3g), %g steps: %s is %.8g by the spectrum, %.8g directly", round, long, minor, steps, name, v, w)
				}
				if e := apartness(gv, gw, variance/2/(minor*minor)); steps == 16 && e > slack*1e-3 {
					t.Errorf("round %d (%.3g by %.3g): gradient of %s is off by %.2g of its norm", round, long, minor, name, e)
				}
			}
		}
	}
}

// apartness returns the norm of a-b over that of b, or over floor if larger.
func apartness(a, b []float64, floor float64) float64 {
	var diff, norm float64
	for i := range a {
		diff += (a[i] - b[i]) * (a[i] - b[i])
		norm += b[i] * b[i]
	}
	return math.Sqrt(diff) / math.Max(math.Sqrt(norm), floor)
}

// tilted returns the matrix with the given scales, the major axis at an angle.
func tilted(t testing.TB, major, minor, angle float64) mv.BandwidthMatrix {
	t.Helper()
	s, c := math.Sincos(angle)
	a, b := major*major, minor*minor
	return matrix(t, 2, a*c*c+b*s*s, (a-b)*s*c, (a-b)*s*c, a*s*s+b*c*c)
}

// The direct likelihood criterion against the evaluator's leave-one-out
// densities, with weights.
func TestLikelihoodAgainstEvaluator(t *testing.T) {
	s, err := mv.NewSample(mvtest.P12(2).Columns(), []float64{1, 2, .5, 1, 3, 1, 1, 2, 1, .2, 1, 1})
	if err != nil {
		t.Fatal(err)
	}
	h := matrix(t, 2, .25, .1, .1, .16)
	e, err := mv.NewDirect(s, mv.Gaussian, h, mv.EvalOptions{Workers: 1})
	if err != nil {
		t.Fatal(err)
	}
	l := make([]float64, s.Len())
	if err := e.LogLeaveOneOut(context.Background(), l); err != nil {
		t.Fatal(err)
	}
	var want float64
	for i, v := range l {
		want -= s.Weight(i) * v / s.SumWeights()
	}
	c, err := bandwidth.LikelihoodCV(s)
	if err != nil {
		t.Fatal(err)
	}
	near(t, "likelihood criterion", value(c, h), want, 1e-12)
}
