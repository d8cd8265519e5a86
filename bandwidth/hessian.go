package bandwidth

import (
	"fmt"

	"drumlin/mv"
)

// WidestOrder is the highest order of functional that a default run estimates:
// the normal scale pilot for it is the widest matrix that its sums use.
const WidestOrder = 10

// Hessian returns the pilot with which second derivatives of the density, and
// so the smoothing bias, are estimated: it minimises the asymptotic mean
// integrated squared error of the whole Hessian,
//
//	n^-1 sum_ab D^(2ea+2eb) phi_2G(0) + 1/4 sum_abijkl G_ij G_kl psi_(aabbijkl),
//
// the functionals of order 8 from a chain of two pilots. Where a density has
// several modes the normal scale rule (HessianPilot) would flatten them all and
// call the bias nothing. Errors as PlugIn.
//
// Source: the criterion of Chacon, Duong and Wand 2011 for derivatives of
// order 2, its variance written by Parseval as values of a normal density.
func Hessian(e Events) (Choice, error) {
	if err := e.check(); err != nil {
		return Choice{}, err
	}
	f, err := newFrame(CommonScale, e.dim(), e.Covariance)
	if err != nil {
		return Choice{}, err
	}
	d, n := e.dim(), e.n()
	ch, err := runChain(e, f, WidestOrder, 8, false)
	if err != nil {
		return Choice{}, fmt.Errorf("bandwidth: hessian pilot: %w", err)
	}
	start, err := HessianPilot(f.s, d, n)
	if err != nil {
		return Choice{}, err
	}
	psi4 := laplacianTwice(d, ch.psi)
	order4, order6 := mv.MultiIndices(d, 4), positions(d, 6)
	found, err := minimise(func(g mv.BandwidthMatrix) (float64, []float64) {
		_, grad := amise(g, psi4, n)
		var value float64
		for ij := range d * d { // the bias part of amise, without its variance
			grad[ij] += 0.5 * gaussR(d) / (n * g.SqrtDet()) * g.InvAt(ij/d, ij%d)
			value += 0.5 * g.At(ij/d, ij%d) * grad[ij]
		}
		twice, err := g.Scaled(2)
		if err != nil {
			return 0, grad
		}
		v4, v6 := mv.NormalDerivativesAtZero(twice, 4), mv.NormalDerivativesAtZero(twice, 6)
		for q, k := range order4 {
			c := pairings(k)
			if c == 0 {
				continue
			}
			value += c * v4[q] / n
			for ij := range d * d {
				up := append([]int(nil), k...)
				up[ij/d]++
				up[ij%d]++
				grad[ij] += c * v6[order6[key(up)]] / n
			}
		}
		return value, grad
	}, start, Full)
	if err != nil {
		return Choice{}, fmt.Errorf("bandwidth: hessian pilot: %w", err)
	}
	c := Choice{Method: "plug-in for second derivatives", Shape: Full, Stages: 2, Pilots: ch.pilots, Notes: ch.notes, Criterion: found.value, Status: found.status, Evaluations: found.evaluations}
	c.Matrix, err = f.toData(found.matrix)
	return c, err
}

// pairings returns how many ordered pairs (a, b) have 2e_a + 2e_b = k, |k| = 4.
func pairings(k []int) float64 {
	twos := 0
	for _, v := range k {
		switch v {
		case 4:
			return 1
		case 2:
			twos++
		}
	}
	if twos == 2 {
		return 2
	}
	return 0
}

// laplacianTwice returns the tensor sum_ab psi_(aabbijkl) over all (i, j, k, l)
// from the functionals of order 8.
func laplacianTwice(d int, psi8 []float64) []float64 {
	pos := positions(d, 8)
	contracted := make([]float64, 0, len(psi8))
	for _, k := range mv.MultiIndices(d, 4) {
		var sum float64
		for a := range d {
			for b := range d {
				up := append([]int(nil), k...)
				up[a] += 2
				up[b] += 2
				sum += psi8[pos[key(up)]]
			}
		}
		contracted = append(contracted, sum)
	}
	return newTensor(d, 4).spread(contracted)
}

// positions maps the multi-indices of an order to their places.
func positions(d, r int) map[string]int {
	pos := map[string]int{}
	for i, k := range mv.MultiIndices(d, r) {
		pos[key(k)] = i
	}
	return pos
}
