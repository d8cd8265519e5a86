package bandwidth

import (
	"fmt"
	"math"

	"drumlin/mv"
)

// Ties says how many pairs of events stand at one place, or closer than the
// lattice tells apart.
type Ties struct {
	Pairs float64 // estimated number of tied pairs m
	Ratio float64 // m/n
	Limit float64 // ratio above which least-squares cross-validation has no minimum
	Scale float64 // length below which a pair counts as tied, data units
}

// PastLimit reports whether least-squares cross-validation collapses.
func (t Ties) PastLimit() bool { return t.Ratio > t.Limit }

// String gives the numbers.
func (t Ties) String() string {
	return fmt.Sprintf("about %.3g pairs of events lie within %.3g of each other, %.3g per event; the limit is %.3g", t.Pairs, t.Scale, t.Ratio, t.Limit)
}

// TieLimit returns the ratio m/n of tied pairs to events above which LSCV tends
// to minus infinity as H shrinks, q/(4-2q) with q = 2^(-d/2): 0.273, 0.167,
// 0.107 for d = 1, 2, 3. Source: Silverman 1986, section 3.4.3, for d = 1; the
// others by the same argument.
func TieLimit(d int) float64 {
	q := math.Pow(2, -float64(d)/2)
	return q / (4 - 2*q)
}

// CountTies estimates the number of tied pairs. With s a length at the limit of
// the lattice and T(s) = psi_0(s^2 I)/phi_(s^2 I)(0), for small s
//
//	T(s) = 1/n + 2m/n^2 + R(f) (2 pi s^2)^(d/2) + ...,
//
// and the last term, the pairs that any density has there, grows by 2^d from s
// to 2s, so that it can be taken off. On direct sums s is 1e-4 of the common
// scale.
func CountTies(e Events) Ties {
	d, n := e.dim(), e.n()
	s := 1e-4 * e.scale()
	if e.Spectrum != nil {
		s = 0
		for _, v := range e.Spectrum.Lattice().Step {
			s = max(s, stepFloor*v)
		}
	}
	at := func(s float64) float64 {
		h, err := mv.ScalarBandwidth(d, s)
		if err != nil {
			return 0
		}
		return e.Sums().Functionals(h, 0)[0][0] / kernelAtZero(h)
	}
	near, far := at(s), at(2*s)
	smooth := max(0, (far-near)/(math.Pow(2, float64(d))-1))
	m := max(0, near-1/n-smooth) * n * n / 2
	return Ties{Pairs: m, Ratio: m / n, Limit: TieLimit(d), Scale: s}
}
