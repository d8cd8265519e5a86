// Package bandwidth chooses bandwidth matrices for kernel density estimates,
// each with the evidence that a reviewer asks for.
//
// Notation: H the bandwidth matrix, G a pilot, psi_r the density functionals of
// order r, n the effective sample size, d the dimension, S the sample
// covariance (divisor n-1). Units: H and G in squared data units.
//
// Every selector reads a spectrum of binned events, so its cost depends on the
// lattice and never on n:
//
//	plug-in, l stages   l sums over the frequencies, then closed forms
//	normal reference    closed form
//
// Sources: Wand and Jones 1995, Kernel Smoothing; Duong and Hazelton 2003 (full
// plug-in matrices); Chacon and Duong 2010 (unconstrained pilots).
package bandwidth
