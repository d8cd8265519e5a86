package bandwidth

import (
	"errors"
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
	return PlugInBy(e, Options{Shape: shape, Stages: stages})
}

// Options of the selectors; the zero value is the default.
type Options struct {
	Shape  Shape
	Stages int   // pilot stages of plug-in and smoothed cross-validation, 1 to 6; default DefaultStages
	Frame  Frame // coordinates of the pilots and of the search
	// ScalarPilots keeps every pilot a multiple of the identity in the frame:
	// Duong and Hazelton 2003, every component with its multiplicity.
	ScalarPilots bool
	// Form of biased cross-validation, 1 or 2; default 2, whose minimum exists
	// more often.
	Form int
}

func (o Options) check() error {
	if o.Stages < 0 || o.Stages > 6 {
		return fmt.Errorf("bandwidth: plug-in with %d stages; 1 to 6 are possible", o.Stages)
	}
	if o.Shape != Full && o.Frame == Sphered {
		return fmt.Errorf("bandwidth: a %s matrix in sphered coordinates is not %s in those of the data; use the common scale", o.Shape, o.Shape)
	}
	if o.Form < 0 || o.Form > 2 {
		return fmt.Errorf("bandwidth: form %d of biased cross-validation; there are 1 and 2", o.Form)
	}
	return nil
}

func (o Options) stages() int {
	if o.Stages == 0 {
		return DefaultStages
	}
	return o.Stages
}

// PlugInBy is PlugIn with all options.
func PlugInBy(e Events, opt Options) (Choice, error) {
	c, _, err := plugIn(e, opt)
	return c, err
}

// plugIn also returns the functionals of order 4 in the frame.
func plugIn(e Events, opt Options) (Choice, *frame, error) {
	if err := errors.Join(e.check(), opt.check()); err != nil {
		return Choice{}, nil, err
	}
	f, err := newFrame(opt.Frame, e.dim(), e.Covariance)
	if err != nil {
		return Choice{}, nil, err
	}
	ch, err := runChain(e, f, 2*opt.stages()+2, 4, opt.ScalarPilots)
	if err != nil {
		return Choice{}, nil, fmt.Errorf("bandwidth: plug-in: %w", err)
	}
	c, err := minimiseAMISE(e, f, ch.psi, opt.Shape)
	if err != nil {
		return Choice{}, nil, fmt.Errorf("bandwidth: plug-in: %w", err)
	}
	c.Method, c.Stages, c.Pilots = "plug-in", opt.stages(), ch.pilots
	c.Notes = append(c.Notes, ch.notes...)
	return c, f, nil
}

// minimiseAMISE minimises the estimated AMISE for functionals of order 4 in a
// frame, and returns the matrix in the units of the data.
func minimiseAMISE(e Events, f *frame, psi []float64, shape Shape) (Choice, error) {
	d, n := e.dim(), e.n()
	psi4 := newTensor(d, 4).spread(psi)
	start, err := normalScale(f.s, d, n, 4/((float64(d)+2)*n), 2/(float64(d)+4), Full)
	if err != nil {
		return Choice{}, err
	}
	found, err := minimise(func(h mv.BandwidthMatrix) (float64, []float64) { return amise(h, psi4, n) }, start, shape)
	if err != nil {
		return Choice{}, err
	}
	c := Choice{Shape: shape, Criterion: found.value / f.det, Status: found.status, Evaluations: found.evaluations}
	h, err := f.toData(found.matrix)
	if err != nil {
		return Choice{}, err
	}
	c.Variance = gaussR(d) / (n * h.SqrtDet())
	c.Bias2 = c.Criterion - c.Variance
	return c.finish(e, h)
}

// finish sets the matrix, carried from a sub-sample to all events.
func (c Choice) finish(e Events, h mv.BandwidthMatrix) (Choice, error) {
	c.Matrix = h
	if e.WholeN > 0 && e.WholeN > e.n() {
		d := float64(e.dim())
		k := math.Pow(e.n()/e.WholeN, 2/(d+4))
		c.Matrix = multiple(h, k)
		c.Notes = append(c.Notes, fmt.Sprintf("chosen on a sub-sample of %.0f of %.0f events and multiplied by %.4g", e.n(), e.WholeN, k))
	}
	return c, nil
}

// chained is the outcome of a chain of pilots.
type chained struct {
	psi    []float64 // functionals of the lowest order, in the frame
	pilots []Pilot   // in the units of the data
	notes  []string
}

// runChain estimates the functionals of order bottom from those of the normal
// with the events' covariance, down from order top: a pilot for order top by
// the normal scale rule, the functionals there, a pilot for order top-2 from
// them, and so on in steps of two.
func runChain(e Events, f *frame, top, bottom int, scalar bool) (*chained, error) {
	d, n := e.dim(), e.n()
	out := &chained{}
	for r := top; r >= bottom; r -= 2 {
		g, err := NormalScalePilot(f.s, d, n, r)
		switch {
		case err != nil:
		case scalar && r == top:
			var twice mv.BandwidthMatrix
			if twice, err = mv.NewBandwidthMatrix(d, f.s); err == nil {
				g, err = scalarPilot(r, d, n, mv.NormalDerivativesAtZero(multiple(twice, 2), r+2))
			}
		case scalar:
			g, err = scalarPilot(r, d, n, out.psi)
		case r < top:
			g, err = pilotFor(r, n, out.psi, g)
		}
		if err == nil {
			err = out.step(e, f, r, g)
		}
		if err != nil {
			return nil, fmt.Errorf("pilot of order %d: %w", r, err)
		}
	}
	return out, nil
}

// step estimates the functionals of order r with pilot g of the frame.
func (c *chained) step(e Events, f *frame, r int, g mv.BandwidthMatrix) error {
	real, err := f.toData(g)
	if err != nil {
		return err
	}
	if e.Spectrum != nil {
		free := e.Spectrum.Free()
		for k := range free {
			if need := 7 * math.Sqrt(real.At(k, k)); need > 1.01*free[k] {
				c.notes = append(c.notes, fmt.Sprintf("the pilot of order %d reaches %.4g on axis %d, the transform is free of wrap-around for %.4g", r, need, k+1, free[k]))
			}
		}
	}
	psi := e.Sums().Functionals(real, r)[0]
	c.pilots = append(c.pilots, Pilot{Order: r, Matrix: real, Psi: psi})
	c.psi = f.functionals(r, psi)
	return nil
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
