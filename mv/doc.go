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
//	NewLatticeEvaluator                    n w^d + N log N          n d + 40 B a node
//	LatticeEvaluator: density, derivative  m w^d                    8 B a node
//	NewPlan                                n d                      -
//	Tally: n events in the plane           n                        34 kB a tile of 64 x 64
//	Bin                                    n 2^d                    8 B a node
//	NewSpectrum                            N log N                  12 B a padded node
//	Spectrum: surface of any kernel        N log N                  16 B a padded node
//	Spectrum: functionals of order r       live frequencies         -
//	Spectrum: modes                        a surface, then live     -
//	                                       frequencies a step
//	Adaptive, exact                        n m d                    n d
//	Adaptive, c classes                    c trees                  n d + cells
//	NormalMixture of c parts: MISE         c^2 d^3                  -
//
// N is the number of nodes, w the order of a LatticeEvaluator's spline, 4 to 14.
// Measured on one busy core of 2026: a tally takes 24 ns an event, 13 times the
// bare reading of its two columns; with a surface of 863 x 1273 nodes 52 ns at
// n = 10 million; 100,000 events at 16,384 queries take 0.29 s by tree at rtol
// 1e-3, 0.44 s at 1e-6 (57 to 97 times the direct sum's speed), and 0.05 s by
// lattice at 1e-6 of the maximum.
//
// A cell's series is C(p+d, d) numbers, p the order: 10 in the plane, 4 in six
// dimensions. The tree pays in few dimensions; in six its boxes are so wide
// that it is a few times faster than the direct sum, not more.
//
// # Which evaluator
//
// Direct, Tree and LatticeEvaluator keep one contract, |estimate - f| <= Atol +
// Rtol f at every query; NewPlan takes the cheapest and says why. With Atol = 0
// even the farthest tail must be right relative to itself, which only the tree
// and the direct sum can do; a lattice then answers the queries that its proven
// bound allows. An Atol of 1e-6 of the highest density lets it answer all.
//
// # Coverage
//
// How often 95 % intervals of 1.96 standard errors hold the true density, n =
// 1,000, 400 samples, H optimal in AMISE, pilot n^(2/15) H (TestCoverage):
//
//	target, points        estimate   debiased   debiased, its own error
//	A, mode                 0.72       0.89       0.93
//	A, 40 random points     0.90       0.91       0.95
//	E, modes                0.73       0.88       0.91
//	E, random points        0.91       0.91       0.95
//	G, modes                0.73       0.88       0.92
//	G, random points        0.90       0.91       0.95
//	S2, modes               0.53       0.77       0.86
//	S2, random points       0.73       0.73       0.76
//
// An interval around the estimate itself misses most modes' height too often:
// it is an interval for the smoothed density. The debiased value with the
// error that counts the noise of the bias (DebiasedRoughness) comes close to
// what it states, but not where one H serves parts of very different size (S2:
// narrow blocks on a broad field), where the leading term is not the bias.
//
// # Sources
//
// Silverman 1986; Wand & Jones 1995; Marron & Wand 1992; Wand & Jones 1993;
// Marron & Nolan 1988 (canonical scales); Abramson 1982; Chacon, Duong & Wand
// 2011; Dutt & Rokhlin 1993, Beylkin 1995 (non-uniform transforms); Calonico,
// Cattaneo & Farrell 2018 (debiased intervals): formulas recalled from memory and each checked numerically, by
// quadrature, finite differences or Monte Carlo; the tests name the source
// beside each number.
package mv
