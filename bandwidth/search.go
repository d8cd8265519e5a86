package bandwidth

import (
	"fmt"
	"math"

	"gonum.org/v1/gonum/optimize"

	"drumlin/mv"
)

// objective is a criterion over matrices: its value and its gradient with
// respect to the entries of H taken as independent, row-major.
type objective func(h mv.BandwidthMatrix) (value float64, gradient []float64)

// minimum is the end of a search.
type minimum struct {
	matrix      mv.BandwidthMatrix
	value       float64
	status      Status
	evaluations int
}

// minimise searches for the least value of f from several fixed starts around
// h0: h0, half and twice it, a multiple of the identity, and both signs of a
// strong correlation, since a start on a diagonal matrix is a stationary point
// of the correlation for symmetric data. Quasi-Newton steps (BFGS) in
// log-Cholesky coordinates with the analytic gradient; the data must have been
// divided by a common scale.
func minimise(f objective, h0 mv.BandwidthMatrix, shape Shape) (minimum, error) {
	d := h0.Dim()
	c := coords{d, shape}
	best := minimum{value: math.Inf(1), status: Stopped}
	var ends []float64
	var spots []mv.BandwidthMatrix
	for _, x0 := range starts(h0, c) {
		evaluations := 0
		eval := func(x []float64) (float64, []float64) {
			h, err := mv.NewBandwidthMatrix(d, c.matrix(x))
			if err != nil {
				return math.Inf(1), make([]float64, len(x))
			}
			v, g := f(h)
			return v, c.pull(x, g)
		}
		unit, _ := eval(x0)
		if unit = math.Abs(unit); unit == 0 || math.IsInf(unit, 0) || math.IsNaN(unit) {
			continue
		}
		problem := optimize.Problem{
			Func: func(x []float64) float64 { evaluations++; v, _ := eval(x); return v / unit },
			Grad: func(dst, x []float64) {
				_, g := eval(x)
				for i := range dst {
					dst[i] = g[i] / unit
				}
			},
		}
		res, err := optimize.Minimize(problem, x0, &optimize.Settings{GradientThreshold: 1e-10, MajorIterations: 300}, &optimize.BFGS{})
		if res == nil || math.IsNaN(res.F) || math.IsInf(res.F, 0) {
			continue
		}
		best.evaluations += evaluations
		v, g := eval(res.X)
		var slope float64
		for _, gi := range g {
			slope = max(slope, math.Abs(gi)/unit)
		}
		h, merr := mv.NewBandwidthMatrix(d, c.matrix(res.X))
		if merr != nil {
			continue
		}
		// A line search that cannot improve on the last bits is an end, not a failure.
		settled := err == nil || slope < 1e-6
		if settled {
			ends, spots = append(ends, v), append(spots, h)
		}
		if v < best.value {
			best.value, best.matrix, best.status = v, h, Converged
			if !settled {
				best.status = Stopped
			}
		}
	}
	if best.matrix.Dim() == 0 {
		return best, fmt.Errorf("bandwidth: the criterion has no finite value at any start: %w", ErrNoMinimum)
	}
	if best.status == Converged {
		for i, v := range ends {
			if v > best.value+1e-4*math.Abs(best.value) && apart(spots[i], best.matrix) {
				best.status = Several
			}
		}
	}
	return best, nil
}

// apart reports whether two matrices differ by more than 5 % of a diagonal entry.
func apart(a, b mv.BandwidthMatrix) bool {
	for i := range a.Dim() {
		for j := range a.Dim() {
			if math.Abs(a.At(i, j)-b.At(i, j)) > 0.05*math.Sqrt(b.At(i, i)*b.At(j, j)) {
				return true
			}
		}
	}
	return false
}

// starts returns the coordinates to search from.
func starts(h0 mv.BandwidthMatrix, c coords) [][]float64 {
	d := c.d
	var out [][]float64
	add := func(entries []float64) {
		if h, err := mv.NewBandwidthMatrix(d, entries); err == nil {
			out = append(out, c.from(h))
		}
	}
	scaled := func(k float64) []float64 {
		e := h0.Entries()
		for i := range e {
			e[i] *= k
		}
		return e
	}
	add(scaled(1))
	add(scaled(0.5))
	add(scaled(2))
	level := math.Exp(h0.LogDet() / float64(d))
	round := make([]float64, d*d)
	for i := range d {
		round[i*d+i] = level
	}
	add(round)
	if c.shape == Full && d > 1 {
		for _, rho := range []float64{0.7, -0.7} {
			e := append([]float64(nil), round...)
			for i := range d - 1 {
				e[i*d+i+1], e[(i+1)*d+i] = rho*level/float64(d-1), rho*level/float64(d-1)
			}
			add(e)
		}
	}
	return out
}
