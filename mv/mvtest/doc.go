// Package mvtest judges the estimators of package mv: target densities with
// known answers, a small worked data set, a tolerance helper that prints the
// size of an error, and a conformance suite every evaluator must pass. Only
// tests import it.
//
// Notation and units are those of package mv. Targets A to L are the bivariate
// mixtures of Wand & Jones 1993 and the univariate ones those of Marron & Wand
// 1992, both recalled and identical to stored listings of the papers' tables;
// S1 to S3, RING and T1 to T3 are this project's own.
//
// Cost: a conformance run is a few hundred small evaluations, under a second.
package mvtest
