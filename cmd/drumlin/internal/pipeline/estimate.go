package pipeline

import (
	"context"
	"fmt"
	"math"

	"drumlin/bandwidth"
	"drumlin/mv"
)

const (
	autoNodes    = 1024 // nodes along the longer axis to begin with
	mostNodes    = 4096 // and at most, when the lattice is chosen here
	stepsWanted  = 4.0  // lattice steps that H's minor scale should span
	stepsFloor   = 2.0  // under this H is floored
	marginScales = 4.0  // the lattice goes on this many scales beyond the events
	kernelReach  = 7.0  // a Gaussian is zero, for double precision, beyond this many scales
	wantedError  = 3e-5 // of the density's maximum, from binning
	countRefine  = 2    // doublings by which events are counted finer than the lattice
	manyEvents   = 5e4  // above, one doubling does: a border cuts off a smaller share
	cheapEvents  = 2e6  // up to here another pass over the events costs little
)

// Selection says how the bandwidth matrix is found.
type Selection struct {
	Method string // one of bandwidth.Methods, or "fixed"
	Shape  bandwidth.Shape
	Fixed  mv.BandwidthMatrix // for "fixed"
	Sample *mv.Sample         // for "likelihood-cv"
}

func (s Selection) choose(e bandwidth.Events) (bandwidth.Choice, error) {
	if s.Method == "fixed" {
		return bandwidth.Choice{Method: "fixed", Shape: s.Shape, Matrix: s.Fixed, Notes: []string{"given, not chosen from the events"}}, nil
	}
	e.Sample = s.Sample
	return bandwidth.Select(e, s.Method, bandwidth.Options{Shape: s.Shape})
}

// Estimate is the density with its errors on one lattice, and how it came about.
type Estimate struct {
	Choice        bandwidth.Choice
	BiasPilot     bandwidth.Choice // for the Hessian behind Bias
	Density       mv.Grid          // per square metre, integrates to 1
	Bias          mv.Grid          // leading smoothing bias
	Counts        mv.Grid          // events at the nodes
	Weights       mv.Grid          // weights at the nodes, no values without weights
	FineCounts    mv.Grid          // the same events up to countRefine doublings finer, for tight bounds of counts
	Events        float64
	Total         float64 // weight
	EffectiveN    float64
	StepsPerScale float64 // lattice steps that H's minor scale spans
	SpectrumStep  float64 // step of the tally that the spectrum was made from, metres
	LatticeError  float64 // expected error from binning, share of the density's maximum
	Floored       bool    // H was widened to stepsFloor lattice steps
	Nodes         int     // along the longer axis
	Spectrum      *mv.Spectrum
	Covariance    []float64
	Edge          edge
	Inside        mv.Grid // kernel mass inside the study area; no values without edge correction
	InsideHalf    mv.Grid // the same for H/2, for the standard error
	nodes         mv.Grid // what the spectrum was made from
	options       mv.SpectrumOptions
}

// finerNeeded asks for another pass over the events with a tally that resolves
// 2^Level metres inside Box.
type finerNeeded struct {
	Level int
	Box   mv.Box
}

func (f *finerNeeded) Error() string {
	return fmt.Sprintf("a tally with a step of %g m is needed", math.Ldexp(1, f.Level))
}

// KernelAtZero returns K_H(0).
func (e *Estimate) KernelAtZero() float64 { return 1 / (2 * math.Pi * e.Choice.Matrix.SqrtDet()) }

// stepsAsked returns the lattice steps of the scale that the selector asked for:
// H's minor scale, or that at which the lattice stopped its search.
func (e *Estimate) stepsAsked() float64 {
	if u := e.Choice.Unresolved; u > 0 {
		return min(e.StepsPerScale, u/e.Choice.Matrix.Ellipse().Minor*e.StepsPerScale)
	}
	return e.StepsPerScale
}

// estimator carries what the steps of one estimate share.
type estimator struct {
	tally     *mv.Tally
	sel       Selection
	nodes     int // asked for, 0 = choose
	workers   int
	canRepeat bool // another pass over the events is possible
	edge      edge
	progress  func(stage string)
}

// leastEvents is how few events still make a map.
const leastEvents = 3

// estimate turns a finished, trimmed tally into the density and its errors.
func (m *estimator) estimate(ctx context.Context) (*Estimate, error) {
	lo, hi := m.tally.Bounds()
	base := m.tally.Level()
	n := m.tally.EffectiveN()
	if m.tally.Events() < leastEvents {
		return nil, fmt.Errorf("%d events are too few for a map: %w", m.tally.Events(), mv.ErrDegenerate)
	}
	target := m.nodes
	if target == 0 {
		target = autoNodes
	}
	// A first look on a coarse lattice gives the spread, and so the margin.
	cov, err := m.covariance(lo, hi, base, n)
	if err != nil {
		return nil, err
	}
	margin := marginFor(m.sel, cov, n)
	level := base
	// Steps are powers of two: take the one whose node count is nearest in ratio.
	most := int(math.Sqrt2 * float64(target))
	for nodesAt(lo, hi, base, level, margin) > most {
		level++
	}
	for level > base-8 && nodesAt(lo, hi, base, level-1, margin) <= most {
		level--
	}
	if base > level-m.refine() && m.cheapRepeat() {
		return nil, m.again(lo, hi, level-m.refine())
	}
	level = max(level, base)
	fine := level
	for {
		if err := ctx.Err(); err != nil {
			return nil, err
		}
		m.progress("bandwidth")
		e, spectrum, err := m.at(lo, hi, base, level, fine, margin, cov)
		if err != nil {
			return nil, err
		}
		if m.nodes == 0 && e.stepsAsked() < stepsWanted && nodesAt(lo, hi, base, level-1, margin) <= mostNodes {
			if level > base {
				level--
				fine = min(fine, level)
				continue
			}
			if m.canRepeat {
				return nil, m.again(lo, hi, level-1-m.refine())
			}
		}
		if want := wantedLevel(e, level); want < fine {
			switch {
			case want >= base:
				fine = want
				continue
			case fine > base && !m.canRepeat:
				fine = base
				continue
			case m.cheapRepeat():
				return nil, m.again(lo, hi, min(want, level-m.refine()))
			}
		}
		if fine := max(base, level-m.refine()); fine < level {
			if e.FineCounts, err = m.gridAligned(lo, hi, base, fine, level, margin, false); err != nil {
				return nil, err
			}
		}
		if err := m.floor(e); err != nil {
			return nil, err
		}
		m.progress("surface")
		e.Spectrum, e.Covariance, e.Edge = spectrum, cov, m.edge
		if err := e.surface(true); err != nil {
			return nil, err
		}
		if m.edge.area != nil && e.Choice.Method != "fixed" {
			e.Choice.Notes = append(e.Choice.Notes, "chosen from the events as they are, without correction at the edge of the study area")
		}
		if e.BiasPilot, err = bandwidth.Hessian(bandwidth.Events{Spectrum: spectrum, Covariance: cov}); err != nil {
			return nil, err
		}
		e.Bias = spectrum.SmoothingBias(e.Choice.Matrix, e.BiasPilot.Matrix)
		return e, nil
	}
}

// refine returns the doublings by which events are counted finer than the lattice.
func (m *estimator) refine() int {
	if m.tally.Events() > manyEvents {
		return countRefine - 1
	}
	return countRefine
}

// cheapRepeat reports whether another pass is worth while for a finer lattice
// that nothing but its look or the last digits would need.
func (m *estimator) cheapRepeat() bool {
	return m.canRepeat && (m.nodes > 0 || m.tally.Events() <= cheapEvents)
}

// again asks for a finer tally around the events.
func (m *estimator) again(lo, hi [2]int64, level int) error {
	step := m.tally.Step()
	f := &finerNeeded{Level: level}
	for k := range 2 {
		f.Box.Min[k], f.Box.Max[k] = float64(lo[k])*step, float64(hi[k])*step
	}
	return f
}

// wantedLevel returns the level at which the error of binning is expected to be
// small enough. The expectation is a fit to measurements against direct sums on
// real sets: 9e-4 of the density's maximum at 4.4 steps per minor scale, 7e-5 at
// 10, 2e-5 at 17, all for about 1,000 events; it falls as n^-1/2, being the
// noise of the frequencies beyond the lattice's.
func wantedLevel(e *Estimate, level int) int {
	need := math.Cbrt(binningError(1, e.EffectiveN) / wantedError)
	down := int(math.Ceil(math.Log2(need / e.StepsPerScale)))
	most := int(math.Floor(math.Log2(float64(mostNodes) / float64(e.Nodes))))
	return level - min(max(0, down), max(0, most))
}

func binningError(steps, n float64) float64 {
	return 0.077 * math.Sqrt(1000/n) / (steps * steps * steps)
}

// covariance returns the second moments, read at the coarsest level that still
// has 256 nodes along the longer axis.
func (m *estimator) covariance(lo, hi [2]int64, base int, n float64) ([]float64, error) {
	level := base
	for max(hi[0]-lo[0], hi[1]-lo[1])>>(level-base) > 512 {
		level++
	}
	g, err := m.grid(lo, hi, base, level, [2]float64{}, m.tally.Weighted())
	if err != nil {
		return nil, err
	}
	_, cov, err := g.Moments(n)
	return cov, err
}

// marginFor returns how far the lattice goes on beyond the events: marginScales
// scales of the normal reference matrix, which is wider than what a selector
// will find, or of the fixed one.
func marginFor(sel Selection, cov []float64, n float64) (margin [2]float64) {
	c := math.Pow(n, -1.0/3)
	for k := range 2 {
		v := c * cov[k*2+k]
		if sel.Method == "fixed" {
			v = sel.Fixed.At(k, k)
		}
		margin[k] = marginScales * math.Sqrt(v)
	}
	return margin
}

// nodesAt returns the nodes along the longer axis at a level.
func nodesAt(lo, hi [2]int64, base, level int, margin [2]float64) int {
	var n int
	for k := range 2 {
		n = max(n, int(math.Ceil((math.Ldexp(float64(hi[k]-lo[k]), base)+2*margin[k])/math.Ldexp(1, level)))+2)
	}
	return n
}

// grid returns the tally's nodes at a level, with margins, its first node a
// multiple of the level's step.
func (m *estimator) grid(lo, hi [2]int64, base, level int, margin [2]float64, weights bool) (mv.Grid, error) {
	return m.gridAligned(lo, hi, base, level, level, margin, weights)
}

func (m *estimator) gridAligned(lo, hi [2]int64, base, level, align int, margin [2]float64, weights bool) (mv.Grid, error) {
	var from, to [2]int64
	for k := range 2 {
		wide := math.Ldexp(1, align)
		ratio := int64(1) << (align - level)
		from[k] = int64(math.Floor((math.Ldexp(float64(lo[k]), base)-margin[k])/wide)) * ratio
		to[k] = int64(math.Ceil((math.Ldexp(float64(hi[k]), base)+margin[k])/wide)) * ratio
	}
	t := m.tally
	if level > t.Level() {
		t = t.Clone()
		for t.Level() < level {
			t.Coarsen()
		}
	}
	return t.Grid(from, to, weights)
}

// at makes the spectrum for surfaces at a level from the tally at a finer one
// and chooses the bandwidth matrix.
func (m *estimator) at(lo, hi [2]int64, base, level, fine int, margin [2]float64, cov []float64) (*Estimate, *mv.Spectrum, error) {
	weighted := m.tally.Weighted()
	nodes, err := m.gridAligned(lo, hi, base, fine, level, margin, weighted)
	if err != nil {
		return nil, nil, err
	}
	n := m.tally.EffectiveN()
	e := &Estimate{
		Events: float64(m.tally.Events()), Total: m.tally.TotalWeight(), EffectiveN: n,
		SpectrumStep: math.Ldexp(1, fine), Nodes: nodesAt(lo, hi, base, level, margin),
	}
	widest, err := bandwidth.NormalScalePilot(cov, 2, n, bandwidth.WidestOrder)
	if err != nil {
		return nil, nil, fmt.Errorf("the events lie at one place or on a line: %w", mv.ErrDegenerate)
	}
	reach := make([]float64, 2)
	for k := range reach {
		v := widest.At(k, k)
		if m.sel.Method == "fixed" {
			v = max(v, m.sel.Fixed.At(k, k))
		}
		reach[k] = max(0, kernelReach*math.Sqrt(v)-margin[k])
	}
	e.nodes, e.options = nodes, mv.SpectrumOptions{Reach: reach, Coarsen: level - fine, EffectiveN: n, Workers: m.workers}
	spectrum, err := mv.NewSpectrum(nodes, e.options)
	if err != nil {
		return nil, nil, err
	}
	if fine == level {
		e.Counts = nodes
		if weighted {
			e.Weights = nodes
			e.Counts, err = m.grid(lo, hi, base, level, margin, false)
		}
	} else {
		if e.Counts, err = m.grid(lo, hi, base, level, margin, false); err == nil && weighted {
			e.Weights, err = m.grid(lo, hi, base, level, margin, true)
		}
	}
	if err != nil {
		return nil, nil, err
	}
	at := e.Counts
	if weighted {
		at = e.Weights
	}
	if e.Choice, err = m.sel.choose(bandwidth.Events{Spectrum: spectrum, Covariance: cov, Counts: at}); err != nil {
		return nil, nil, err
	}
	e.StepsPerScale = e.Choice.Matrix.Ellipse().Minor / math.Ldexp(1, level)
	e.LatticeError = binningError(e.StepsPerScale*math.Ldexp(1, level-fine), n)
	return e, spectrum, nil
}

// floor widens a matrix that the lattice cannot show: below stepsFloor steps
// per minor scale the surface would be that of the lattice, not of H.
func (m *estimator) floor(e *Estimate) error {
	if e.StepsPerScale >= stepsFloor {
		return nil
	}
	step := e.Counts.Step[0]
	c := (stepsFloor*stepsFloor - e.StepsPerScale*e.StepsPerScale) * step * step
	h := e.Choice.Matrix.Entries()
	h[0] += c
	h[3] += c
	wide, err := mv.NewBandwidthMatrix(2, h)
	if err != nil {
		return fmt.Errorf("flooring the bandwidth matrix: %w", err)
	}
	e.Choice.Matrix = wide
	e.Choice.Notes = append(e.Choice.Notes, fmt.Sprintf("floored: the minor scale was %.3g lattice steps, now %g (H plus %.6g m2 on both axes)", e.StepsPerScale, stepsFloor, c))
	e.Floored = true
	e.StepsPerScale = wide.Ellipse().Minor / step
	return nil
}

// clampNegative takes off the tiny negative values that a transform leaves
// where the density is zero.
func clampNegative(v []float64) {
	for i, x := range v {
		if x < 0 {
			v[i] = 0
		}
	}
}
