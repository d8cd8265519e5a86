package bandwidth

import (
	"fmt"
	"math"
	"slices"

	"drumlin/mv"
)

// Divisor is that of the double sums in the univariate rules.
type Divisor int

// Divisors.
const (
	SquareN    Divisor = iota // n^2: Wand and Jones 1995
	NTimesLess                // n(n-1): Sheather and Jones 1991, and R's functions
)

// Univariate holds a sorted column for the classical rules of one dimension.
// All return the scale h of a Gaussian kernel, H = h^2, by exact double sums,
// n^2/2 kernels each.
type Univariate struct {
	x       []float64
	divisor Divisor
	sd, iqr float64
}

// NewUnivariate sorts a copy of x. Errors: mv.ErrDegenerate for fewer than two
// values or no spread between the quartiles.
func NewUnivariate(x []float64, divisor Divisor) (*Univariate, error) {
	u := &Univariate{x: slices.Sorted(slices.Values(x)), divisor: divisor}
	n := float64(len(x))
	if len(x) < 2 {
		return nil, fmt.Errorf("bandwidth: univariate rules need two values: %w", mv.ErrDegenerate)
	}
	var mean, square float64
	for _, v := range u.x {
		mean += v / n
	}
	for _, v := range u.x {
		square += (v - mean) * (v - mean)
	}
	u.sd, u.iqr = math.Sqrt(square/(n-1)), u.quantile(0.75)-u.quantile(0.25)
	if !(u.sd > 0) || !(u.iqr > 0) {
		return nil, fmt.Errorf("bandwidth: standard deviation %g, distance of the quartiles %g: %w", u.sd, u.iqr, mv.ErrDegenerate)
	}
	return u, nil
}

// quantile interpolates linearly between order statistics.
func (u *Univariate) quantile(p float64) float64 {
	at := p * float64(len(u.x)-1)
	i := min(int(at), len(u.x)-2)
	return u.x[i] + (at-float64(i))*(u.x[i+1]-u.x[i])
}

// scale returns min(sd, IQR/by).
func (u *Univariate) scale(by float64) float64 { return math.Min(u.sd, u.iqr/by) }

// Rule0 returns 0.9 min(sd, IQR/1.34) n^(-1/5). Source: Silverman 1986, eq. 3.31.
func (u *Univariate) Rule0() float64 {
	return 0.9 * u.scale(1.34) * math.Pow(float64(len(u.x)), -0.2)
}

// Rule returns 1.06 min(sd, IQR/1.34) n^(-1/5). Source: Scott 1992.
func (u *Univariate) Rule() float64 {
	return 1.06 * u.scale(1.34) * math.Pow(float64(len(u.x)), -0.2)
}

// Psi estimates the functional of order r with scale g, r even up to 8, the
// terms with i = j kept.
func (u *Univariate) Psi(r int, g float64) float64 {
	n := float64(len(u.x))
	var pairs float64
	for i, x := range u.x {
		for _, y := range u.x[i+1:] {
			z := (y - x) / g
			if z > 39 {
				break
			}
			pairs += hermite(r, z) * math.Exp(-0.5*z*z)
		}
	}
	sum := (2*pairs + n*hermite(r, 0)) / math.Sqrt(2*math.Pi) / math.Pow(g, float64(r+1))
	if u.divisor == NTimesLess {
		return sum / (n * (n - 1))
	}
	return sum / (n * n)
}

// hermite returns the probabilists' Hermite polynomial.
func hermite(r int, x float64) float64 {
	a, b := 1.0, x
	if r == 0 {
		return a
	}
	for k := 1; k < r; k++ {
		a, b = b, x*b-float64(k)*a
	}
	return b
}

// PlugIn returns the two-stage direct plug-in scale. Source: Wand and Jones
// 1995, section 3.6.1; Sheather and Jones 1991.
func (u *Univariate) PlugIn() float64 {
	n, s, root := float64(len(u.x)), u.scale(1.349), math.Sqrt(2*math.Pi)
	psi8 := 105 / (32 * math.Sqrt(math.Pi) * math.Pow(s, 9))
	g1 := math.Pow(30/(root*psi8*n), 1.0/9)
	g2 := math.Pow(-6/(root*u.Psi(6, g1)*n), 1.0/7)
	return math.Pow(1/(2*math.Sqrt(math.Pi)*u.Psi(4, g2)*n), 0.2)
}

// SolveTheEquation returns the h that solves
//
//	h = (1/(2 sqrt(pi) n psi4(a(h))))^(1/5),  a(h) = 1.357 (psi4(a)/-psi6(b))^(1/7) h^(5/7),
//
// a = 1.24 s n^(-1/7), b = 1.23 s n^(-1/9), with the rounded constants of the
// paper. ErrNoMinimum when it has no solution between a hundredth and ten
// times the rule of thumb. Source: Sheather and Jones 1991.
func (u *Univariate) SolveTheEquation() (float64, error) {
	n, s := float64(len(u.x)), u.scale(1.349)
	ratio := u.Psi(4, 1.24*s*math.Pow(n, -1.0/7)) / -u.Psi(6, 1.23*s*math.Pow(n, -1.0/9))
	c := 1.357 * math.Pow(ratio, 1.0/7)
	f := func(h float64) float64 {
		return math.Pow(1/(2*math.Sqrt(math.Pi)*n*u.Psi(4, c*math.Pow(h, 5.0/7))), 0.2) - h
	}
	lo, hi := 0.01*u.Rule(), 10*u.Rule()
	flo, fhi := f(lo), f(hi)
	if !(flo*fhi < 0) {
		return 0, fmt.Errorf("bandwidth: solve-the-equation has no solution from %g to %g: %w", lo, hi, ErrNoMinimum)
	}
	for range 200 {
		mid := (lo + hi) / 2
		if v := f(mid); v*flo > 0 {
			lo = mid
		} else {
			hi = mid
		}
		if hi-lo < 1e-12*hi {
			break
		}
	}
	return (lo + hi) / 2, nil
}

// UnbiasedCV returns the lowest local minimum of least-squares cross-validation
// with the divisor chosen for its second sum, BiasedCV that of the first form
// of biased cross-validation; ErrNoMinimum where the criterion has none in the
// range searched.
func (u *Univariate) UnbiasedCV() (float64, error) {
	n := float64(len(u.x))
	square := &Univariate{x: u.x}
	own := n * n
	if u.divisor == NTimesLess {
		own = n * (n - 1)
	}
	return u.least(func(h float64) float64 {
		pairs := square.Psi(0, h)*n*n - n/(h*math.Sqrt(2*math.Pi)) // i /= j
		return square.Psi(0, math.Sqrt2*h) - 2*pairs/own
	})
}

// BiasedCV: see UnbiasedCV. Source: Scott and Terrell 1987.
func (u *Univariate) BiasedCV() (float64, error) {
	n := float64(len(u.x))
	square := &Univariate{x: u.x}
	return u.least(func(h float64) float64 {
		psi := square.Psi(4, math.Sqrt2*h) - hermite(4, 0)/(n*math.Sqrt(2*math.Pi)*math.Pow(math.Sqrt2*h, 5))
		return 1/(2*math.Sqrt(math.Pi)*n*h) + 0.25*math.Pow(h, 4)*psi
	})
}

// least returns the lowest local minimum of f inside the range from a tenth of
// the oversmoothing scale 1.144 sd n^(-1/5) to one and a half times it. Repeated
// values can make f lower still below that range: CountTies tells.
func (u *Univariate) least(f func(h float64) float64) (float64, error) {
	const points = 60
	top := 1.144 * u.sd * math.Pow(float64(len(u.x)), -0.2)
	lo, hi := 0.1*top, 1.5*top
	at := func(i int) float64 { return lo * math.Pow(hi/lo, float64(i)/(points-1)) }
	v := make([]float64, points)
	best := -1
	for i := range v {
		v[i] = f(at(i))
		if i > 1 && v[i-1] < v[i-2] && v[i-1] < v[i] && (best < 0 || v[i-1] < v[best]) {
			best = i - 1
		}
	}
	if best < 0 {
		return 0, fmt.Errorf("bandwidth: the criterion has no minimum from %g to %g: %w", lo, hi, ErrNoMinimum)
	}
	a, b := at(best-1), at(best+1)
	const golden = 0.6180339887498949
	x, y := b-golden*(b-a), a+golden*(b-a)
	fx, fy := f(x), f(y)
	for b-a > 1e-9*b {
		if fx < fy {
			b, y, fy = y, x, fx
			x = b - golden*(b-a)
			fx = f(x)
		} else {
			a, x, fx = x, y, fy
			y = a + golden*(b-a)
			fy = f(y)
		}
	}
	return (a + b) / 2, nil
}
