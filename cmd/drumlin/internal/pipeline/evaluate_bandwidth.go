package pipeline

import (
	"errors"
	"fmt"
	"math"

	"drumlin/bandwidth"
	"drumlin/io/events"
	"drumlin/io/record"
	"drumlin/mv"
)

const (
	mostSelectorColumns = 4       // beyond, the functionals of order 10 are thousands of sums
	lattices            = 3       // dimensions in which a lattice carries the selectors
	mostSelectorNodes   = 1 << 23 // of a refined lattice
)

// fewEvents is the number of events, by columns, up to which direct sums are
// quick and no lattice is needed.
var fewEvents = [...]int{0, 2000, 2000, 300}

// chooseBandwidth settles H, in the kernel's own terms, and the bias's pilot.
func (e *evaluation) chooseBandwidth() (err error) {
	if e.kernel, err = mv.ParseKernel(e.s.Kernel); err != nil {
		return err
	}
	d := len(e.s.Columns)
	b := &e.out.Bandwidth
	b.Kernel, b.Shape = e.kernel.String(), e.s.Shape
	if e.s.Fixed() {
		b.Method, b.Shape = "fixed", "full"
		if e.h, err = fixedMatrix(d, e.s.Matrix, e.s.Scale); err != nil {
			return &events.Fault{Kind: events.ErrSetting, What: "the bandwidth matrix cannot be used", Remedy: "give a symmetric positive definite matrix", Cause: err}
		}
		e.g = widerPilot(e.sample, e.h, e.kernel)
	} else {
		if err := e.sample.RequireSpread(); err != nil {
			return err
		}
		shape, err := bandwidth.ParseShape(e.s.Shape)
		if err != nil {
			return err
		}
		c, pilot, err := e.selectFor(shape)
		if err != nil {
			return err
		}
		b.Method, b.Notes = c.Method, c.Notes
		e.g = pilot
		if e.h, err = c.Matrix.Scaled(mv.Gaussian.Rescale(d, e.kernel)); err != nil {
			return err
		}
	}
	b.Matrix, b.Pilot = e.h.Entries(), e.g.Entries()
	b.MatrixHex = record.HexFloats(b.Matrix)
	return nil
}

func fixedMatrix(d int, upper []float64, scale float64) (mv.BandwidthMatrix, error) {
	if scale != 0 {
		return mv.ScalarBandwidth(d, scale)
	}
	h := make([]float64, d*d)
	at := 0
	for i := range d {
		for j := i; j < d; j++ {
			h[i*d+j], h[j*d+i] = upper[at], upper[at]
			at++
		}
	}
	return mv.NewBandwidthMatrix(d, h)
}

// widerPilot is the pilot for second derivatives beside a given H: H, as a
// Gaussian's, in the ratio n^(2/(d+4)-2/(d+8)) of the rates at which the best
// matrices of a density and of its second derivatives shrink.
func widerPilot(s *mv.Sample, h mv.BandwidthMatrix, k mv.Kernel) mv.BandwidthMatrix {
	d := float64(s.Dim())
	g, err := h.Scaled(k.Rescale(s.Dim(), mv.Gaussian) * math.Pow(s.EffectiveN(), 2/(d+4)-2/(d+8)))
	if err != nil {
		return h
	}
	return g
}

// selectFor runs the selector asked for. Pair sums come from the events when
// they are few, from a lattice's spectrum up to three columns, and from a
// sub-sample of the events in four.
func (e *evaluation) selectFor(shape bandwidth.Shape) (c bandwidth.Choice, pilot mv.BandwidthMatrix, err error) {
	d, n := e.sample.Dim(), e.sample.EffectiveN()
	cov := e.sample.Moments().Covariance()
	if e.s.Bandwidth == "normal-reference" || d > mostSelectorColumns {
		if e.s.Bandwidth != "normal-reference" {
			return c, pilot, &events.Fault{Kind: events.ErrUnsupported, What: fmt.Sprintf("%s over %d columns is not offered, %d are the most", e.s.Bandwidth, d, mostSelectorColumns),
				Remedy: "use --bandwidth normal-reference or give --matrix"}
		}
		c, err = bandwidth.NormalReference(bandwidth.FromSample(e.sample, e.s.Workers), shape)
		if err != nil {
			return c, pilot, err
		}
		pilot, err = bandwidth.HessianPilot(cov, d, n)
		return c, pilot, err
	}
	in := bandwidth.FromSample(e.sample, e.s.Workers)
	onLattice := d <= lattices && e.sample.Len() > fewEvents[d]
	nodes := [...][]int{nil, {1 << 14}, {1024, 1024}, {160, 160, 160}}
	for pass := 0; ; pass++ {
		if onLattice {
			if in, err = e.spectral(cov, n, nodes[d]); err != nil {
				return c, pilot, err
			}
		}
		if c, err = chooseBy(e.s.Bandwidth, in, bandwidth.Options{Shape: shape}); err != nil {
			return c, pilot, err
		}
		if !onLattice {
			break
		}
		// A lattice too coarse for H is refined once, axis by axis.
		finer, short := nodesFor(c.Matrix, in.Spectrum.Lattice())
		if !short {
			break
		}
		if pass == 0 && finer != nil {
			nodes[d] = finer
			continue
		}
		lat := in.Spectrum.Lattice()
		for k, name := range e.s.Columns {
			if steps := stepsPerScale(c.Matrix, lat, k); steps < stepsWanted {
				c.Notes = append(c.Notes, fmt.Sprintf("H spans %.2g steps of the selector's lattice on column %s, fewer than %g; far strays may be the reason", steps, name, stepsWanted))
			}
		}
		break
	}
	if d > lattices {
		return c, widerPilot(e.sample, c.Matrix, mv.Gaussian), nil
	}
	p, err := bandwidth.Hessian(in)
	if errors.Is(err, bandwidth.ErrNoMinimum) {
		pilot, err = bandwidth.HessianPilot(cov, d, n)
		return c, pilot, err
	}
	return c, p.Matrix, err
}

func chooseBy(name string, in bandwidth.Events, opt bandwidth.Options) (bandwidth.Choice, error) {
	switch name {
	case "plug-in":
		return bandwidth.PlugInBy(in, opt)
	case "scv":
		return bandwidth.SmoothedCV(in, opt)
	case "lscv":
		return bandwidth.LeastSquaresCV(in, opt)
	case "bcv":
		return bandwidth.BiasedCV(in, opt)
	case "likelihood-cv":
		return bandwidth.LikelihoodCrossValidation(in, opt)
	}
	return bandwidth.Choice{}, fmt.Errorf("no selector %q", name)
}

// stepsPerScale returns how many lattice steps H's narrowest section along an
// axis spans, a scale wide.
func stepsPerScale(h mv.BandwidthMatrix, lat mv.Lattice, k int) float64 {
	return 1 / (math.Sqrt(h.InvAt(k, k)) * lat.Step[k])
}

// nodesFor returns the nodes per axis that would show H with half as many
// steps again as wanted, nil when they are too many, and whether the lattice
// has too few.
func nodesFor(h mv.BandwidthMatrix, lat mv.Lattice) (nodes []int, short bool) {
	total := 1.0
	for k, n := range lat.N {
		steps := stepsPerScale(h, lat, k)
		short = short || steps < stepsWanted
		want := max(64, math.Ceil(float64(n)*1.5*stepsWanted/steps))
		total *= want
		nodes = append(nodes, int(min(want, 1<<20)))
	}
	if total > mostSelectorNodes {
		return nil, short
	}
	return nodes, short
}

// spectral bins the sample on a lattice over its extent.
func (e *evaluation) spectral(cov []float64, n float64, nodes []int) (in bandwidth.Events, err error) {
	d := e.sample.Dim()
	widest, err := bandwidth.NormalScalePilot(cov, d, n, bandwidth.WidestOrder)
	if err != nil {
		return in, fmt.Errorf("the events lie at one place or on a line: %w", mv.ErrDegenerate)
	}
	step, margin, reach := make([]float64, d), make([]float64, d), make([]float64, d)
	for k, c := range e.sample.Columns() {
		lo, hi := c[0], c[0]
		for _, v := range c {
			lo, hi = min(lo, v), max(hi, v)
		}
		step[k] = (hi - lo) / float64(nodes[k]-2)
		reach[k] = kernelReach * math.Sqrt(widest.At(k, k))
	}
	lat, err := mv.LatticeAround(e.sample, step, margin)
	if err != nil {
		return in, err
	}
	counts, err := mv.Bin(e.sample, lat)
	if err != nil {
		return in, err
	}
	sp, err := mv.NewSpectrum(counts, mv.SpectrumOptions{Reach: reach, EffectiveN: n, Workers: max(1, e.s.Workers)})
	if err != nil {
		return in, err
	}
	return bandwidth.Events{Spectrum: sp, Covariance: cov, Sample: e.sample, Counts: counts}, nil
}
