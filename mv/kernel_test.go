package mv_test

import (
	"fmt"
	"math"
	"testing"

	"drumlin/mv"
	"drumlin/mv/mvtest"
)

// Table of one-dimensional constants: Silverman 1986 Table 3.1, Wand & Jones
// 1995 Table 2.1 (from memory, each number computed and checked here). The
// columns are R, mu2, mu4, efficiency, canonical scale and its ratio to the
// Gaussian's.
func TestKernelConstantsLine(t *testing.T) {
	for _, c := range []struct {
		k                         mv.Kernel
		r, mu2, mu4, eff, can, ra float64
	}{
		{mv.Gaussian, 1 / (2 * math.Sqrt(math.Pi)), 1, 3, 0.95119855, 0.77638836, 1},
		{mv.Epanechnikov, 3.0 / 5, 1.0 / 5, 3.0 / 35, 1, 1.7187719, 2.2138044},
		{mv.Biweight, 5.0 / 7, 1.0 / 7, 1.0 / 21, 0.99390140, 2.0361680, 2.6226153},
		{mv.Triweight, 350.0 / 429, 1.0 / 9, 1.0 / 33, 0.98668097, 2.3121668, 2.9781059},
		{mv.Uniform, 1.0 / 2, 1.0 / 3, 1.0 / 5, 0.92951600, 1.3509600, 1.7400571},
	} {
		n := c.k.String()
		mvtest.Near(t, n+" R", c.k.R(1), c.r, 1e-14)
		mvtest.Near(t, n+" mu2", c.k.Mu2(1), c.mu2, 1e-15)
		mvtest.Near(t, n+" mu4", c.k.Mu4(1), c.mu4, 1e-15)
		mvtest.Printed(t, n+" efficiency", c.k.Efficiency(1), c.eff, 8)
		mvtest.Printed(t, n+" canonical", c.k.Canonical(1), c.can, 8)
		mvtest.Printed(t, n+" canonical ratio", c.k.Canonical(1)/mv.Gaussian.Canonical(1), c.ra, 8)
	}
}

// Table of radial kernels in two to four dimensions: derived for this project
// and checked by radial quadrature to 1e-15. The d=2 ratios 2.40, 2.78, 3.12
// are also Silverman 1986 Table 4.1 (from memory).
func TestKernelConstantsRadial(t *testing.T) {
	pi := math.Pi
	for _, c := range []struct {
		d                        int
		k                        mv.Kernel
		c, r, mu2, eff, can, rat float64
	}{
		{2, mv.Uniform, 1 / pi, 1 / pi, 1.0 / 4, 0.88888889, 1.3116814, 2},
		{2, mv.Epanechnikov, 2 / pi, 4 / (3 * pi), 1.0 / 6, 1, 1.5752466, 2.4018739},
		{2, mv.Biweight, 3 / pi, 9 / (5 * pi), 1.0 / 8, 0.98765432, 1.8227080, 2.7791932},
		{2, mv.Triweight, 4 / pi, 16 / (7 * pi), 1.0 / 10, 0.97222222, 2.0432053, 3.1153989},
		{2, mv.Gaussian, 1 / (2 * pi), 1 / (4 * pi), 1, 0.88888889, 0.65584069, 1},
		{3, mv.Uniform, 3 / (4 * pi), 3 / (4 * pi), 1.0 / 5, 0.86240230, 1.2907315, 2.2201427},
		{3, mv.Epanechnikov, 15 / (8 * pi), 0.341046306625, 1.0 / 7, 1, 1.4952563, 2.5719386},
		{3, mv.Biweight, 105 / (32 * pi), 0.506402091656, 1.0 / 9, 0.98182608, 1.6999094, 2.9239555},
		{3, mv.Triweight, 315 / (64 * pi), 0.701172126908, 1.0 / 11, 0.95814376, 1.8858872, 3.2438494},
		{3, mv.Gaussian, math.Pow(2*pi, -1.5), math.Pow(4*pi, -1.5), 1, 0.82031582, 0.58137323, 1},
		{4, mv.Epanechnikov, 0.607927101854, 0.303963550927, 1.0 / 8, 1, 1.4491895, 2.7285232},
		{4, mv.Gaussian, math.Pow(2*pi, -2), 0.00633257397765, 1, 0.75, 0.53112597, 1},
	} {
		n := fmt.Sprintf("%s d=%d ", c.k, c.d)
		mvtest.Near(t, n+"constant", c.k.Norm(c.d), c.c, 1e-11)
		mvtest.Near(t, n+"R", c.k.R(c.d), c.r, 1e-11)
		mvtest.Near(t, n+"mu2", c.k.Mu2(c.d), c.mu2, 1e-15)
		mvtest.Printed(t, n+"efficiency", c.k.Efficiency(c.d), c.eff, 8)
		mvtest.Printed(t, n+"canonical", c.k.Canonical(c.d), c.can, 8)
		mvtest.Printed(t, n+"canonical ratio", c.k.Canonical(c.d)/mv.Gaussian.Canonical(c.d), c.rat, 8)
	}
	// Rescale rule, Gaussian to Epanechnikov in the plane: the square of the
	// printed ratio, so good to its rounding of 2e-8.
	mvtest.Near(t, "rescale", mv.Gaussian.Rescale(2, mv.Epanechnikov), 2.4018739*2.4018739, 4.2e-8)
}

// radial integrates g(r) r^(d-1) times the area of the unit sphere over the
// support, by Simpson's rule on a smooth substitution.
func radial(k mv.Kernel, d int, g func(r float64) float64) float64 {
	top := 1.0
	if k == mv.Gaussian {
		top = 14
	}
	const n = 20000
	h := top / n
	var sum float64
	for i := 0; i <= n; i++ {
		c := 2.0 + 2*float64(i%2)
		if i == 0 || i == n {
			c = 1
		}
		r := min(float64(i)*h, top*(1-1e-16))
		sum += c * g(r) * math.Pow(r, float64(d-1))
	}
	lg, _ := math.Lgamma(float64(d) / 2)
	return sum * h / 3 * 2 * math.Pow(math.Pi, float64(d)/2) / math.Exp(lg)
}

func TestKernelConstantsByQuadrature(t *testing.T) {
	for _, k := range mv.Kernels() {
		for d := 1; d <= 6; d++ {
			n := fmt.Sprintf("%s d=%d ", k, d)
			v := func(r float64) float64 { return k.Value(d, r*r) }
			// Simpson with 20000 steps: about 1e-13; 1e-12 asked.
			mvtest.Near(t, n+"mass", radial(k, d, v), 1, 1e-12)
			mvtest.Near(t, n+"R", radial(k, d, func(r float64) float64 { return v(r) * v(r) }), k.R(d), 1e-12)
			mvtest.Near(t, n+"mu2", radial(k, d, func(r float64) float64 { return r * r * v(r) })/float64(d), k.Mu2(d), 1e-12)
			// The mean of u_1^4 over the sphere of radius r is 3 r^4/(d(d+2)).
			mvtest.Near(t, n+"mu4", radial(k, d, func(r float64) float64 { return r * r * r * r * v(r) })*3/float64(d*(d+2)), k.Mu4(d), 1e-12)
		}
	}
}

// The transform along one axis is the cosine transform of the kernel's
// marginal. For (1-|x|^2)^p on the ball in d dimensions the marginal is the
// one-dimensional kernel of power p+(d-1)/2, so quadrature in one dimension
// checks every d.
func TestKernelTransform(t *testing.T) {
	for _, k := range mv.Kernels() {
		if k == mv.Gaussian {
			mvtest.Near(t, "gaussian transform", k.Transform(3, 2.5), math.Exp(-1.25), 1e-15)
			continue
		}
		p := map[mv.Kernel]float64{mv.Uniform: 0, mv.Epanechnikov: 1, mv.Biweight: 2, mv.Triweight: 3}[k]
		for d := 1; d <= 7; d++ {
			e := p + float64(d-1)/2
			// u = sin(theta) makes the integrand smooth: cos^(2e+1).
			const n = 4000
			var norm float64
			sum := map[float64]float64{}
			freq := []float64{0, 0.01, 0.7, 1.9, 3.3, 5.5, 8, 12, 20, 45}
			for i := range n {
				th := (float64(i) + 0.5) / n * math.Pi / 2
				m := math.Pow(math.Cos(th), 2*e+1)
				norm += m
				for _, s := range freq {
					sum[s] += m * math.Cos(s*math.Sin(th))
				}
			}
			for _, s := range freq {
				// The midpoint rule on a non-periodic end costs about (pi/2n)^2.
				mvtest.NearAbs(t, fmt.Sprintf("%s d=%d transform at %g", k, d, s), k.Transform(d, s*s), sum[s]/norm, 3e-7)
			}
		}
	}
	for _, s := range []float64{1e-9, 0.3, 1, 1.4999, 1.5001, 4, 30} {
		mvtest.NearAbs(t, "uniform d=1 is sin(s)/s", mv.Uniform.Transform(1, s*s), math.Sin(s)/s, 1e-15)
		want := 3 * (math.Sin(s) - s*math.Cos(s)) / (s * s * s)
		if s > 0.1 {
			mvtest.NearAbs(t, "uniform d=3", mv.Uniform.Transform(3, s*s), want, 1e-13)
			mvtest.NearAbs(t, "epanechnikov d=1", mv.Epanechnikov.Transform(1, s*s), want, 1e-13)
			mvtest.NearAbs(t, "uniform d=2", mv.Uniform.Transform(2, s*s), 2*math.J1(s)/s, 1e-14)
		}
	}
	// The two branches, series and recurrence, meet without a step.
	for _, k := range mv.Kernels()[1:] {
		for d := 1; d <= 12; d++ {
			nu := float64(d)/2 + map[mv.Kernel]float64{mv.Uniform: 0, mv.Epanechnikov: 1, mv.Biweight: 2, mv.Triweight: 3}[k]
			at := (nu + 1) * (nu + 1)
			a, b := k.Transform(d, at), k.Transform(d, at*(1+1e-15))
			mvtest.NearAbs(t, fmt.Sprintf("%s d=%d branches", k, d), b, a, 1e-13)
		}
	}
}

func TestKernelNamesAndEdges(t *testing.T) {
	for _, k := range mv.Kernels() {
		got, err := mv.ParseKernel(k.String())
		if err != nil || got != k {
			t.Errorf("ParseKernel(%q) = %v, %v", k.String(), got, err)
		}
		if k != mv.Gaussian && (k.Value(2, 1) != 0 || k.Value(2, 1.5) != 0 || k.SupportRadius() != 1) {
			t.Errorf("%v: not 0 from its edge on", k)
		}
	}
	if _, err := mv.ParseKernel("box"); err == nil {
		t.Error("ParseKernel accepted an unknown name")
	}
	if !math.IsInf(mv.Gaussian.SupportRadius(), 1) {
		t.Error("the Gaussian has no edge")
	}
}

func ExampleKernel() {
	h := mv.Gaussian.Rescale(2, mv.Epanechnikov)
	fmt.Printf("R(K) %.4f, mu2 %.4f; a Gaussian H times %.3f smooths alike\n", mv.Epanechnikov.R(2), mv.Epanechnikov.Mu2(2), h)
	// Output: R(K) 0.4244, mu2 0.1667; a Gaussian H times 5.769 smooths alike
}

// The product of one-dimensional Epanechnikov kernels against the radial one:
// the figures were computed for the design by two routes and agree with .982,
// .953 and .916 of Wand and Jones 1995, Table 4.1 (from memory). Both sides come
// from the constants: R of a product is R(1)^d, its second moment that of one axis.
func TestProductKernelEfficiency(t *testing.T) {
	k := mv.Epanechnikov
	for d, want := range map[int]float64{2: 0.98243792, 3: 0.95316381, 4: 0.91617100} {
		half := float64(d) / 2
		got := k.R(d) * math.Pow(k.Mu2(d), half) / (math.Pow(k.R(1), float64(d)) * math.Pow(k.Mu2(1), half))
		mvtest.NearAbs(t, fmt.Sprintf("d = %d", d), got, want, 5e-9)
	}
}
