package bandwidth

import (
	"errors"
	"fmt"
	"math"

	"gonum.org/v1/gonum/mat"

	"drumlin/mv"
)

// Shape is the form that a bandwidth matrix may take.
type Shape int

// Shapes of bandwidth matrices.
const (
	Full     Shape = iota // any symmetric positive definite matrix
	Diagonal              // one scale per axis
	Scalar                // h*h*I
)

var shapeNames = []string{"full", "diagonal", "scalar"}

// String returns "full", "diagonal" or "scalar".
func (s Shape) String() string { return shapeNames[s] }

// ParseShape is the inverse of String.
func ParseShape(name string) (Shape, error) {
	for i, n := range shapeNames {
		if n == name {
			return Shape(i), nil
		}
	}
	return 0, fmt.Errorf("bandwidth: shape %q is none of full, diagonal, scalar", name)
}

// ErrNoMinimum: a criterion without a usable minimum for these data.
var ErrNoMinimum = errors.New("no minimum")

// Status says how a search ended.
type Status int

// Ends of a search.
const (
	Closed    Status = iota // a closed form, nothing was searched
	Converged               // a minimum, found from every start
	Several                 // several local minima; the lowest was taken
	Stopped                 // the search ended before it converged
	Border                  // the criterion falls up to the border of the search
)

// String names the status for people.
func (s Status) String() string {
	return [...]string{"closed form", "converged", "several minima, lowest taken", "stopped before convergence", "at the border of the search"}[s]
}

// Pilot is one stage of a selector.
type Pilot struct {
	Order  int // of the functional it estimates
	Matrix mv.BandwidthMatrix
	Psi    []float64 // the functional there, in the order of mv.MultiIndices
}

// Choice is a bandwidth matrix with its evidence. All values are in the units
// of the data.
type Choice struct {
	Method      string
	Shape       Shape
	Stages      int
	Matrix      mv.BandwidthMatrix
	Pilots      []Pilot // from the first stage to the last
	Criterion   float64 // value of the criterion at Matrix (estimated AMISE for plug-in)
	Variance    float64 // its integrated variance part, R(K)/(n |H|^1/2)
	Bias2       float64 // its integrated squared bias part
	Status      Status
	Evaluations int
	Notes       []string
	// Isolated are the positions of events so far from all others that they widen
	// the matrix (likelihood cross-validation). They are single events: for the
	// analyst's own eyes, never for a file that is handed on.
	Isolated [][]float64
	// Unresolved is the scale at which the lattice stopped the search of a
	// criterion that falls further, data units; a finer lattice may show a minimum
	// below. 0 where no search was stopped.
	Unresolved float64
}

// gaussR returns R(K) of the Gaussian kernel, (4 pi)^(-d/2). Source: closed form.
func gaussR(d int) float64 { return math.Pow(4*math.Pi, -float64(d)/2) }

// Events is what selectors work on: pair sums and second moments of the events.
type Events struct {
	Spectrum *mv.Spectrum // pair sums by frequencies
	// Direct gives pair sums by the events: used when Spectrum is nil and, where it
	// holds all events, by least-squares cross-validation, which looks at scales
	// that a lattice may not resolve.
	Direct     *DirectSums
	Covariance []float64 // S, row-major, divisor n-1
	// Sample holds events for likelihood cross-validation, which is no pair sum;
	// nil where it is not asked for. It may be a sub-sample.
	Sample *mv.Sample
	// Counts are the node weights behind the spectrum; with them the mixture
	// pilot of Auto is fitted. No values: it is left out.
	Counts mv.Grid
	// WholeN is the effective size of all events where Direct is a sub-sample; 0
	// otherwise.
	WholeN float64

	workers int
}

// Sums returns the pair sums.
func (e Events) Sums() Sums {
	if e.Spectrum != nil {
		return e.Spectrum
	}
	return e.Direct
}

// close returns the events with pair sums that resolve small scales.
func (e Events) close() Events {
	if e.Direct != nil && e.Spectrum != nil && e.Direct.EffectiveN() > 0.999*e.Spectrum.EffectiveN() {
		e.Spectrum = nil
	}
	return e
}

func (e Events) dim() int { return e.Sums().Dim() }

// n returns the effective size of the events that the pair sums rest on.
func (e Events) n() float64 { return e.Sums().EffectiveN() }

// scale returns sqrt(tr S / d), the common scale by which every selector
// divides the data, so that its result does not depend on their unit or, in
// the plane, on the orientation of the axes.
func (e Events) scale() float64 { return commonScale(e.dim(), e.Covariance) }

func commonScale(d int, cov []float64) float64 {
	var tr float64
	for i := range d {
		tr += cov[i*d+i]
	}
	return math.Sqrt(tr / float64(d))
}

// check refuses events without spread.
func (e Events) check() error {
	if e.Spectrum == nil && e.Direct == nil {
		return fmt.Errorf("bandwidth: no events: %w", mv.ErrDegenerate)
	}
	d := e.dim()
	n := e.n()
	if n < float64(d+1) {
		return fmt.Errorf("bandwidth: %g events (effective) in %d dimensions, at least %d are needed: %w", n, d, d+1, mv.ErrDegenerate)
	}
	if s := e.scale(); !(s > 0) {
		return fmt.Errorf("bandwidth: all events at one point: %w", mv.ErrDegenerate)
	}
	s, err := mv.NewBandwidthMatrix(d, e.Covariance)
	if err == nil {
		v := s.Eigenvalues()
		if v[d-1] > 1e-8*v[0] {
			return nil
		}
		err = fmt.Errorf("principal variances %.6g to %.6g", v[0], v[d-1])
	}
	return fmt.Errorf("bandwidth: the events lie on a line or close to it (%w): %w", err, mv.ErrDegenerate)
}

// wholeN returns the effective size of all events.
func (e Events) wholeN() float64 {
	if e.WholeN > 0 {
		return e.WholeN
	}
	return e.n()
}

// eigen returns the eigenvalues and orthonormal eigenvectors (columns,
// row-major) of a symmetric positive definite matrix.
func eigen(d int, m []float64) (values, vectors []float64, err error) {
	var e mat.EigenSym
	if !e.Factorize(mat.NewSymDense(d, append([]float64(nil), m...)), true) {
		return nil, nil, fmt.Errorf("bandwidth: no principal axes of %v: %w", m, mv.ErrDegenerate)
	}
	var v mat.Dense
	e.VectorsTo(&v)
	return e.Values(nil), append([]float64(nil), v.RawMatrix().Data...), nil
}
