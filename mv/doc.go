// Package mv estimates densities in d dimensions with kernels and full
// bandwidth matrices, and says how wrong the estimates are. It knows numbers
// only: no coordinates, files, clocks or logs.
//
// # Notation
//
//	X_i, w_i   events, d coordinates each, and their weights; W = sum w_i
//	n          number of events, or the effective number (sum w)^2 / sum w^2
//	m          number of queries, or of lattice nodes
//	K          a radial kernel; R(K) the integral of K^2, mu2(K) its second moment
//	H          bandwidth matrix; K_H(x) = |H|^{-1/2} K(H^{-1/2} x)
//	f          the estimate, f(x) = (1/W) sum_i w_i K_H(x - X_i)
//	phi_S      the normal density with covariance S; Gaussian K_H = phi_H
//	D^k        partial derivative for a multi-index k, |k| its order
//	psi_k      the integral of D^k f times f
//	G          a pilot bandwidth matrix
//
// Vectors of derivatives or functionals of order r stand in the order of
// MultiIndices(d, r).
//
// # Units
//
// Coordinates are in data units (metres for a map). H is in squared data units,
// like a variance: for one scale h, H = h^2 I. Densities are per data unit to
// the power d and integrate to 1; a derivative of order r divides by r more.
//
// # Cost
//
//	operation                              time                     memory
//	NewSample, Moments                     n d^2                    n d
//	Direct: density at m queries           n m d                    n d
//	Direct: derivatives of order <= r      n m C(d+r, r)            n d
//	DirectFunctionals of order r           n^2/2 C(d+r, r)          n d
//	Modes from m starts, s steps each      n m s d^2                n d
//	NewTree                                n log n, n times series  n d + cells
//	Tree: density at m queries             m times cells reached    -
//	Adaptive, exact                        n m d                    n d
//	Adaptive, c classes                    c trees                  n d + cells
//	NormalMixture of c parts: MISE         c^2 d^3                  -
//
// A cell's series is C(p+d, d) numbers, p the order: 10 in the plane, 4 in six
// dimensions. The tree pays in few dimensions; in six its boxes are so wide
// that it is a few times faster than the direct sum, not more.
//
// # Sources
//
// Silverman 1986; Wand & Jones 1995; Marron & Wand 1992; Wand & Jones 1993;
// Marron & Nolan 1988 (canonical scales); Abramson 1982; Chacon, Duong & Wand
// 2011: formulas recalled from memory and each checked numerically, by
// quadrature, finite differences or Monte Carlo; the tests name the source
// beside each number.
package mv
