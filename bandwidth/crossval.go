package bandwidth

import (
	"errors"
	"fmt"
	"math"

	"drumlin/mv"
)

// stepFloor is the least scale of a search on a spectrum, in lattice steps:
// below it criteria are those of the lattice, not of the events.
const stepFloor = 1.5

// LeastSquaresCV minimises LSCV from several starts around the normal reference
// and the plug-in matrix. Past the tie limit (TieLimit) the criterion falls
// without end as H shrinks, and it may fall to the lattice's own scale before;
// the plug-in matrix is returned then: Method says so, and a note why. Variance and Bias2 are not separated: Criterion is that of LSCV,
// MISE - R(f) in expectation.
func LeastSquaresCV(e Events, opt Options) (Choice, error) {
	if err := errors.Join(e.check(), opt.check()); err != nil {
		return Choice{}, err
	}
	near := e.close()
	ties := CountTies(near)
	if ties.PastLimit() {
		c, err := PlugInBy(e, opt)
		c.Notes = append([]string{fmt.Sprintf("least-squares cross-validation was asked: %s; it has no minimum on such data, and the plug-in matrix was taken instead", ties)}, c.Notes...)
		return c, err
	}
	c, err := searchAround(e, near, opt, "lscv", LSCV(near.Sums()))
	if err == nil && c.Status == Border {
		evaluated, stopped := c.Evaluations, c.Matrix.Eigenvalues()
		c, err = PlugInBy(e, opt)
		c.Evaluations += evaluated
		if near.Spectrum != nil {
			c.Unresolved = math.Sqrt(stopped[len(stopped)-1])
		}
		c.Notes = append([]string{fmt.Sprintf("least-squares cross-validation was asked: its criterion falls down to the least scale that was searched (%s); the plug-in matrix was taken instead", ties)}, c.Notes...)
	}
	return c, err
}

// SmoothedCV minimises SCV with the pilot G = G_4/2, G_4 being the last pilot
// of plug-in with the same options.
func SmoothedCV(e Events, opt Options) (Choice, error) {
	p, f, err := plugIn(e, opt)
	if err != nil {
		return Choice{}, err
	}
	g := multiple(p.Pilots[len(p.Pilots)-1].Matrix, 0.5)
	start, err := f.fromData(unthinned(e, p.Matrix))
	if err != nil {
		return Choice{}, err
	}
	c, err := f.descendFrom(e, opt.Shape, SCV(e.Sums(), g), starts(start, coords{f.d, opt.Shape}), 2, 0)
	if err != nil {
		return Choice{}, fmt.Errorf("bandwidth: scv: %w", err)
	}
	c.Method, c.Stages, c.Pilots = "scv", opt.stages(), p.Pilots
	for _, note := range p.Notes {
		if e.WholeN == 0 {
			c.Notes = append(c.Notes, note)
		}
	}
	c.Variance = gaussR(e.dim()) / (e.n() * unthinned(e, c.Matrix).SqrtDet())
	c.Bias2 = c.Criterion - c.Variance
	return c, nil
}

// BiasedCV minimises BCV locally. ErrNoMinimum when every descent runs off to
// large matrices: such samples exist.
func BiasedCV(e Events, opt Options) (Choice, error) {
	if err := errors.Join(e.check(), opt.check()); err != nil {
		return Choice{}, err
	}
	form := opt.Form
	if form == 0 {
		form = 2
	}
	c, err := searchAround(e, e, opt, "bcv", BCV(e.Sums(), form))
	if err == nil && c.Status == Border {
		return c, fmt.Errorf("bandwidth: bcv: the criterion has no local minimum between the lattice and twice the normal reference: %w", ErrNoMinimum)
	}
	return c, err
}

// searchAround minimises a criterion from starts around the plug-in matrix and
// the normal reference, with walls at the lattice's resolution and at a
// multiple of the normal reference. e gives the starts, near the floor.
func searchAround(e, near Events, opt Options, method string, f Criterion) (Choice, error) {
	p, fr, err := plugIn(e, opt)
	if err != nil {
		return Choice{}, fmt.Errorf("bandwidth: %s: start: %w", method, err)
	}
	pi, err := fr.fromData(unthinned(e, p.Matrix))
	if err != nil {
		return Choice{}, err
	}
	d, n := e.dim(), e.n()
	nr, err := normalScale(fr.s, d, n, 4/((float64(d)+2)*n), 2/(float64(d)+4), Full)
	if err != nil {
		return Choice{}, err
	}
	co := coords{d, opt.Shape}
	from := starts(pi, co)
	for _, k := range []float64{0.15, 0.05} {
		from = append(from, co.from(multiple(pi, k)))
	}
	from = append(from, co.from(nr))
	high, descents := 0.0, 2
	if method == "bcv" { // the lowest start lies on the slope to infinity
		high, descents = 4*nr.Eigenvalues()[0], 0
		from = [][]float64{co.from(multiple(pi, 0.1)), co.from(multiple(pi, 0.4)), co.from(pi), co.from(multiple(nr, 0.5))}
	}
	c, err := fr.descendFrom(near, opt.Shape, f, from, descents, high)
	if err != nil {
		return Choice{}, fmt.Errorf("bandwidth: %s: %w", method, err)
	}
	c.Method = method
	return c, nil
}

// unthinned undoes finish: the matrix for the events that the sums rest on.
func unthinned(e Events, h mv.BandwidthMatrix) mv.BandwidthMatrix {
	if e.WholeN > e.n() {
		return multiple(h, math.Pow(e.WholeN/e.n(), 2/(float64(e.dim())+4)))
	}
	return h
}

// descendFrom minimises a criterion of the data in the frame.
func (f *frame) descendFrom(e Events, shape Shape, crit Criterion, from [][]float64, descents int, high float64) (Choice, error) {
	s := search{shape: shape, starts: from, descents: descents, low: f.floor(e), high: high}
	found, err := s.run(f.inFrame(crit), f.d)
	if err != nil {
		return Choice{}, err
	}
	h, err := f.toData(found.matrix)
	if err != nil {
		return Choice{}, err
	}
	c := Choice{Shape: shape, Criterion: found.value / f.det, Status: found.status, Evaluations: found.evaluations}
	return c.finish(e, h)
}

// floor returns the least eigenvalue of a matrix in the frame: stepFloor
// lattice steps along the axis where they are longest; for direct sums a
// millionth of the normal reference's scale, which is past every tie.
func (f *frame) floor(e Events) float64 {
	s, err := mv.NewBandwidthMatrix(f.d, congruent(f.d, f.a, identity(f.d), false))
	if err != nil {
		return 0
	}
	longest := 1e-3 * math.Sqrt(e.Covariance[0]) * math.Pow(e.n(), -1/float64(f.d+4))
	if e.Spectrum != nil {
		longest = 0
		for _, v := range e.Spectrum.Lattice().Step {
			longest = max(longest, stepFloor*v)
		}
	}
	least := s.Eigenvalues()[f.d-1] // of A A', squared data units per frame unit
	if f.round {
		least = f.a[0] * f.a[0]
	}
	return longest * longest / least
}

func identity(d int) []float64 {
	m := make([]float64, d*d)
	for i := range d {
		m[i*d+i] = 1
	}
	return m
}

// fromData returns A^-1 h A^-T.
func (f *frame) fromData(h mv.BandwidthMatrix) (mv.BandwidthMatrix, error) {
	inv, err := inverse(f.d, f.a)
	if err != nil {
		return h, err
	}
	return mv.NewBandwidthMatrix(f.d, congruent(f.d, inv, h.Entries(), false))
}

func inverse(d int, a []float64) ([]float64, error) {
	m, err := mv.NewBandwidthMatrix(d, a) // symmetric in every frame
	if err != nil {
		return nil, fmt.Errorf("bandwidth: frame: %w", err)
	}
	out := make([]float64, d*d)
	for i := range d {
		for j := range d {
			out[i*d+j] = m.InvAt(i, j)
		}
	}
	return out, nil
}

func scaleAll(v []float64, c float64) []float64 {
	for i := range v {
		v[i] *= c
	}
	return v
}

// inFrame carries a criterion of the data to the frame.
func (f *frame) inFrame(crit Criterion) Criterion {
	return func(h mv.BandwidthMatrix) (float64, []float64) {
		real, err := f.toData(h)
		if err != nil {
			return math.Inf(1), make([]float64, f.d*f.d)
		}
		v, g := crit(real)
		return v * f.det, scaleAll(f.gradient(g), f.det)
	}
}
