package bandwidth

import (
	"fmt"
	"math"

	"drumlin/mv"
)

// DefaultStages is the number of pilot stages of PlugIn. At n = 1,000 three
// stages come closer to the optimum than two on every target with several
// modes and cost 1 to 2 % on single normals.
const DefaultStages = 3

// PlugIn estimates psi_4 through a chain of pilots and minimises the estimated
// AMISE
//
//	R(K)/(n |H|^1/2) + 1/4 sum_ijkl H_ij H_kl psi_ijkl.
//
// The chain of l stages starts from psi_(2l+4) of the normal with covariance S
// and goes down: each pilot is unconstrained (pilotFor), each functional is a
// sum over the spectrum. stages 0 means DefaultStages. The data are divided by
// one common scale for the search, so the result does not depend on units, nor
// in the plane on the orientation of the axes.
//
// Errors: mv.ErrDegenerate for events without spread. Cost: one pass over the
// frequencies per stage.
//
// Sources: Wand and Jones 1995, section 4.6; Duong and Hazelton 2003; Chacon
// and Duong 2010.
func PlugIn(e Events, shape Shape, stages int) (Choice, error) {
	if err := e.check(); err != nil {
		return Choice{}, err
	}
	if stages == 0 {
		stages = DefaultStages
	}
	if stages < 1 || stages > 6 {
		return Choice{}, fmt.Errorf("bandwidth: plug-in with %d stages; 1 to 6 are possible", stages)
	}
	d, n, unit := e.dim(), e.Spectrum.EffectiveN(), e.scale()
	s := make([]float64, d*d) // covariance in common-scale units
	for i, v := range e.Covariance {
		s[i] = v / (unit * unit)
	}
	c := Choice{Method: "plug-in", Shape: shape, Stages: stages}

	psi, pilots, notes, err := chain(e, s, unit, 2*stages+2, 4)
	if err != nil {
		return Choice{}, fmt.Errorf("bandwidth: plug-in: %w", err)
	}
	c.Pilots, c.Notes = pilots, notes

	psi4 := tensor4(d, psi)
	start, err := normalScale(s, d, n, 4/((float64(d)+2)*n), 2/(float64(d)+4), Full)
	if err != nil {
		return Choice{}, err
	}
	found, err := minimise(func(h mv.BandwidthMatrix) (float64, []float64) { return amise(h, psi4, n) }, start, shape)
	if err != nil {
		return Choice{}, fmt.Errorf("bandwidth: plug-in: %w", err)
	}
	if c.Matrix, err = found.matrix.Scaled(unit * unit); err != nil {
		return Choice{}, fmt.Errorf("bandwidth: plug-in: %w", err)
	}
	per := math.Pow(unit, -float64(d)) // the criterion has the unit of a density
	c.Criterion = found.value * per
	c.Variance = gaussR(d) / (n * c.Matrix.SqrtDet())
	c.Bias2 = c.Criterion - c.Variance
	c.Status, c.Evaluations = found.status, found.evaluations
	return c, nil
}

// chain estimates the functionals of order bottom from those of the normal
// with covariance s, down from order top: a pilot for order top by the normal
// scale rule, its functionals, from them the next pilot, and so on in steps of
// two. s and the functionals returned are in units of the common scale unit,
// the pilots in those of the data.
func chain(e Events, s []float64, unit float64, top, bottom int) (psi []float64, pilots []Pilot, notes []string, err error) {
	d, n := e.dim(), e.Spectrum.EffectiveN()
	free := e.Spectrum.Free()
	for r := top; r >= bottom; r -= 2 {
		g, err := NormalScalePilot(s, d, n, r)
		if err == nil && r < top {
			g, err = pilotFor(r, n, psi, g)
		}
		if err != nil {
			return nil, nil, nil, fmt.Errorf("pilot of order %d: %w", r, err)
		}
		real, err := g.Scaled(unit * unit)
		if err != nil {
			return nil, nil, nil, fmt.Errorf("pilot of order %d: %w", r, err)
		}
		for k := range d {
			if need := 7 * math.Sqrt(real.At(k, k)); need > 1.01*free[k] {
				notes = append(notes, fmt.Sprintf("the pilot of order %d reaches %.4g on axis %d, the transform is free of wrap-around for %.4g", r, need, k+1, free[k]))
			}
		}
		psi = e.Spectrum.Functional(r, real)
		pilots = append(pilots, Pilot{Order: r, Matrix: real, Psi: append([]float64(nil), psi...)})
		for i := range psi {
			psi[i] *= math.Pow(unit, float64(d+r))
		}
	}
	return psi, pilots, notes, nil
}

// tensor4 spreads the functionals of order 4 over all (i, j, k, l).
func tensor4(d int, psi []float64) []float64 {
	pos := positions(d, 4)
	out := make([]float64, d*d*d*d)
	for at := range out {
		k := make([]int, d)
		for r, i := at, 0; i < 4; i++ {
			k[r%d]++
			r /= d
		}
		out[at] = psi[pos[key(k)]]
	}
	return out
}

// amise returns the estimated AMISE and its gradient by the entries of H.
func amise(h mv.BandwidthMatrix, psi4 []float64, n float64) (float64, []float64) {
	d := h.Dim()
	variance := gaussR(d) / (n * h.SqrtDet())
	grad := make([]float64, d*d)
	var bias float64
	for ij := range d * d {
		var s float64
		for kl := range d * d {
			s += h.At(kl/d, kl%d) * psi4[ij*d*d+kl]
		}
		bias += 0.25 * h.At(ij/d, ij%d) * s
		grad[ij] = 0.5*s - 0.5*variance*h.InvAt(ij/d, ij%d)
	}
	return variance + bias, grad
}
