package mv

import (
	"errors"
	"fmt"
	"math"
	"strings"
)

// ErrNotDifferentiable: a derivative asked of a kernel that has none of that order.
var ErrNotDifferentiable = errors.New("kernel not differentiable to that order")

// Kernel is a radial kernel K on d-dimensional space with mass 1: K(x) depends
// on |x| only, and K_H(x) = |H|^{-1/2} K(H^{-1/2} x) is what smooths the data.
// The compact kernels are c (1 - |x|^2)^p on the unit ball, zero outside, with
// p = 0 (uniform), 1 (Epanechnikov), 2 (biweight), 3 (triweight); the Gaussian
// is the zero value. All constants are per dimension d >= 1; a method given
// d < 1 panics.
//
// A bandwidth matrix means something else for each kernel: Canonical and
// Rescale convert.
type Kernel uint8

// The kernels.
const (
	Gaussian Kernel = iota
	Epanechnikov
	Biweight
	Triweight
	Uniform
)

// Kernels lists every kernel once, Gaussian first.
func Kernels() []Kernel { return []Kernel{Gaussian, Epanechnikov, Biweight, Triweight, Uniform} }

var kernelNames = [...]string{"gaussian", "epanechnikov", "biweight", "triweight", "uniform"}

// String returns the lower-case name.
func (k Kernel) String() string {
	if int(k) < len(kernelNames) {
		return kernelNames[k]
	}
	return fmt.Sprintf("kernel(%d)", uint8(k))
}

// ParseKernel is the inverse of String; capitals do not matter.
func ParseKernel(name string) (Kernel, error) {
	for i, s := range kernelNames {
		if strings.EqualFold(s, name) {
			return Kernel(i), nil
		}
	}
	return 0, fmt.Errorf("mv: no kernel named %q; the names are %s", name, strings.Join(kernelNames[:], ", "))
}

// Valid reports whether k is one of the kernels listed.
func (k Kernel) Valid() bool { return int(k) < len(kernelNames) }

// Compact reports whether the kernel vanishes outside a ball.
func (k Kernel) Compact() bool { return k != Gaussian }

// power returns the p of (1 - r^2)^p for a compact kernel.
func (k Kernel) power() int {
	switch k {
	case Uniform:
		return 0
	case Epanechnikov:
		return 1
	case Biweight:
		return 2
	case Triweight:
		return 3
	}
	panic("mv: not a compact kernel: " + k.String())
}

// gammaHalf returns the Gamma function at m/2, m >= 1, by its recurrence.
func gammaHalf(m int) float64 {
	if m < 1 {
		panic("mv: kernel dimension must be at least 1")
	}
	g, i := 1.0, 2
	if m%2 == 1 {
		g, i = math.Sqrt(math.Pi), 1
	}
	for ; i < m; i += 2 {
		g *= float64(i) / 2
	}
	return g
}

func factorial(n int) float64 {
	f := 1.0
	for i := 2; i <= n; i++ {
		f *= float64(i)
	}
	return f
}

// Norm returns the constant in front of the profile: (2 pi)^{-d/2}, or
// c = Gamma(d/2+p+1) / (pi^{d/2} p!).
func (k Kernel) Norm(d int) float64 {
	if k == Gaussian {
		return math.Pow(2*math.Pi, -float64(d)/2)
	}
	p := k.power()
	return gammaHalf(d+2*p+2) / (math.Pow(math.Pi, float64(d)/2) * factorial(p))
}

// R returns R(K), the integral of K^2: (4 pi)^{-d/2}, or
// c^2 pi^{d/2} (2p)! / Gamma(d/2+2p+1).
func (k Kernel) R(d int) float64 {
	if k == Gaussian {
		return math.Pow(4*math.Pi, -float64(d)/2)
	}
	p := k.power()
	c := k.Norm(d)
	return c * c * math.Pow(math.Pi, float64(d)/2) * factorial(2*p) / gammaHalf(d+4*p+2)
}

// Mu2 returns the second moment: the integral of u u' K(u) is Mu2 times the
// identity. It is 1 for the Gaussian and 1/(d+2p+2) for a compact kernel.
func (k Kernel) Mu2(d int) float64 {
	if k == Gaussian {
		return 1
	}
	return 1 / float64(d+2*k.power()+2)
}

// Mu4 returns the integral of u_1^4 K(u): 3, or 3/((d+2p+2)(d+2p+4)).
func (k Kernel) Mu4(d int) float64 {
	if k == Gaussian {
		return 3
	}
	a := float64(d + 2*k.power())
	return 3 / ((a + 2) * (a + 4))
}

// SupportRadius returns the r beyond which K is 0: 1, or +Inf for the Gaussian.
func (k Kernel) SupportRadius() float64 {
	if k == Gaussian {
		return math.Inf(1)
	}
	return 1
}

// Canonical returns the canonical scale delta0 = (R(K)/Mu2(K)^2)^{1/(d+4)}.
// Scales divided by their canonical scales are comparable between kernels.
func (k Kernel) Canonical(d int) float64 {
	m := k.Mu2(d)
	return math.Pow(k.R(d)/(m*m), 1/float64(d+4))
}

// Rescale returns the factor by which a bandwidth matrix made for k is to be
// multiplied to smooth alike with kernel to: (delta0(to)/delta0(k))^2.
func (k Kernel) Rescale(d int, to Kernel) float64 {
	r := to.Canonical(d) / k.Canonical(d)
	return r * r
}

// Efficiency returns the sample-size efficiency relative to the Epanechnikov
// kernel of the same dimension, R* Mu2*^{d/2} / (R Mu2^{d/2}), at most 1.
func (k Kernel) Efficiency(d int) float64 {
	p := float64(d) / 2
	return Epanechnikov.R(d) * math.Pow(Epanechnikov.Mu2(d), p) / (k.R(d) * math.Pow(k.Mu2(d), p))
}

// Value returns K at squared radius r2 = |x|^2.
func (k Kernel) Value(d int, r2 float64) float64 { return k.Norm(d) * k.Profile(r2) }

// Profile returns K/Norm at squared radius r2: exp(-r2/2) or (1-r2)^p, which is
// 1 at the centre. A compact kernel is exactly 0 from r2 = 1 on.
func (k Kernel) Profile(r2 float64) float64 {
	if k == Gaussian {
		return math.Exp(-r2 / 2)
	}
	if !(r2 < 1) {
		return 0
	}
	t := 1 - r2
	switch k {
	case Epanechnikov:
		return t
	case Biweight:
		return t * t
	case Triweight:
		return t * t * t
	}
	return 1
}
