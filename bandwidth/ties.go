package bandwidth

import (
	"fmt"
	"math"

	"drumlin/mv"
)

// Ties says how many pairs of events stand at one place, or agree on one axis
// among neighbours, closer than the lattice tells apart.
type Ties struct {
	Pairs float64 // estimated number of tied pairs m
	Ratio float64 // m/n
	Limit float64 // ratio above which least-squares cross-validation has no minimum
	Scale float64 // length below which a pair counts as tied, data units
	Axis  int     // 0: at one place; k: on axis k, rounded there
}

// PastLimit reports whether least-squares cross-validation collapses.
func (t Ties) PastLimit() bool { return t.Ratio > t.Limit }

// String gives the numbers.
func (t Ties) String() string {
	where := "lie"
	if t.Axis > 0 {
		where = fmt.Sprintf("are neighbours and on axis %d lie", t.Axis)
	}
	return fmt.Sprintf("about %.3g pairs of events %s within %.3g of each other, %.3g per event; the limit is %.3g", t.Pairs, where, t.Scale, t.Ratio, t.Limit)
}

// TieLimit returns the ratio m/n of tied pairs to events above which LSCV tends
// to minus infinity as H shrinks, q/(4-2q) with q = 2^(-d/2): 0.273, 0.167,
// 0.107 for d = 1, 2, 3. Source: Silverman 1986, section 3.4.3, for d = 1; the
// others by the same argument.
func TieLimit(d int) float64 {
	q := math.Pow(2, -float64(d)/2)
	return q / (4 - 2*q)
}

// CountTies estimates the number of tied pairs. With s one step of the lattice
// and T(s) = psi_0(G)/phi_G(0), G = s^2 I, T(s) is 1/n + 2m/n^2 and the pairs
// that the density has at that distance anyway. Those grow by a power p of s,
// p = d for a smooth density, less where the events lie along lines or in small
// blocks; three scales s, 2s, 4s give p and the limit at s = 0:
//
//	m = n^2/2 (T(s) - 1/n - (T(2s) - T(s))/(2^p - 1)),
//	2^p = (T(4s) - T(2s))/(T(2s) - T(s)), kept between 2^(1/2) and 2^d.
//
// Coordinates rounded on one axis collapse the criterion along it: for each
// axis the same is done with G = s^2 there and the scales of half the normal
// reference on the others, against the limit of one dimension. What is nearest
// to its limit is returned.
//
// On direct sums s is 1e-4 of the common scale. Coordinates rounded to the very
// nodes of the lattice are overrated up to twofold, having no spread that the
// deconvolution of linear binning could undo. Source: derived here; p is the
// correlation dimension of Grassberger and Procaccia 1983.
func CountTies(e Events) Ties {
	d, n := e.dim(), e.n()
	s := 1e-4 * e.scale()
	if e.Spectrum != nil {
		s = 0
		for _, v := range e.Spectrum.Lattice().Step {
			s = max(s, v)
		}
	}
	worst := Ties{Scale: s, Limit: TieLimit(d)}
	shrink := math.Pow(4/((float64(d)+2)*n), 2/(float64(d)+4)) / 4
	for axis := range d + 1 {
		if axis > 0 && d == 1 {
			break
		}
		diag := make([]float64, d)
		at := func(s float64) float64 {
			for k := range diag {
				diag[k] = s * s
				if axis > 0 && axis != k+1 {
					diag[k] = max(s*s, shrink*e.Covariance[k*d+k])
				}
			}
			h, err := mv.DiagonalBandwidth(diag)
			if err != nil {
				return 0
			}
			return e.Sums().Functionals(h, 0)[0][0] / kernelAtZero(h)
		}
		t := Ties{Scale: s, Limit: TieLimit(d), Axis: axis}
		power := float64(d)
		if axis > 0 {
			t.Limit, power = TieLimit(1), 1
		}
		t1, t2, t4 := at(s), at(2*s), at(4*s)
		smooth := 0.0
		if t2 > t1 {
			growth := math.Min(math.Max((t4-t2)/(t2-t1), math.Sqrt2), math.Pow(2, power))
			smooth = (t2 - t1) / (growth - 1)
		}
		t.Pairs = max(0, t1-1/n-smooth) * n * n / 2
		t.Ratio = t.Pairs / n
		if t.Ratio/t.Limit > worst.Ratio/worst.Limit {
			worst = t
		}
	}
	return worst
}
