package bandwidth

import (
	"cmp"
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/optimize"

	"drumlin/mv"
)

// minimum is the end of a search.
type minimum struct {
	matrix      mv.BandwidthMatrix
	value       float64
	status      Status
	evaluations int
}

// search says where and how widely a criterion is minimised.
type search struct {
	shape  Shape
	starts [][]float64
	// descents is the number of starts, best first, from which a descent is
	// made; 0 means all. The criterion is evaluated at every start anyway.
	descents int
	// low and high bound the eigenvalues of H; beyond them a steep wall stands.
	// 0 means none. With high set, an end at the wall counts only where no
	// descent ends elsewhere: a local minimum is wanted.
	low, high float64
}

// minimise searches for the least value of f from several fixed starts around
// h0: h0, half and twice it, a multiple of the identity, and both signs of a
// strong correlation, since a start on a diagonal matrix is a stationary point
// of the correlation for symmetric data. Quasi-Newton steps (BFGS) in
// log-Cholesky coordinates with the analytic gradient; the data must have been
// divided by a common scale.
func minimise(f Criterion, h0 mv.BandwidthMatrix, shape Shape) (minimum, error) {
	return search{shape: shape, starts: starts(h0, coords{h0.Dim(), shape})}.run(f, h0.Dim())
}

func (s search) run(f Criterion, d int) (minimum, error) {
	c := coords{d, s.shape}
	best := minimum{value: math.Inf(1), status: Stopped}
	eval := func(x []float64) (float64, []float64) {
		h, err := mv.NewBandwidthMatrix(d, c.matrix(x))
		if err != nil {
			return math.Inf(1), make([]float64, len(x))
		}
		best.evaluations++
		v, g := f(h)
		return v, c.pull(x, g)
	}
	type point struct {
		x    []float64
		v    float64
		unit float64
	}
	var points []point
	for _, x := range s.starts {
		v, g := eval(x)
		if math.IsInf(v, 0) || math.IsNaN(v) {
			continue
		}
		var slope float64
		for _, gi := range g {
			slope = max(slope, math.Abs(gi))
		}
		// A criterion that can be 0 anywhere is scaled by its slope too.
		points = append(points, point{x, v, max(math.Abs(v), slope)})
	}
	slices.SortStableFunc(points, func(p, q point) int { return cmp.Compare(p.v, q.v) })
	if s.descents > 0 && len(points) > s.descents {
		points = points[:s.descents]
	}
	var ends []minimum
	for _, p := range points {
		if p.unit == 0 {
			continue
		}
		end, ok := s.descend(eval, c, p.x, p.unit)
		if !ok {
			continue
		}
		if end.status != Stopped {
			ends = append(ends, end)
		}
		lower := end.value < best.value
		if s.high > 0 && best.matrix.Dim() > 0 && (end.status == Border) != (best.status == Border) {
			lower = best.status == Border
		}
		if lower {
			best.value, best.matrix, best.status = end.value, end.matrix, end.status
		}
	}
	if best.matrix.Dim() == 0 {
		return best, fmt.Errorf("bandwidth: the criterion has no finite value at any start: %w", ErrNoMinimum)
	}
	if best.status == Converged {
		for _, end := range ends {
			if end.value > best.value+1e-4*math.Abs(best.value) && apart(end.matrix, best.matrix) {
				best.status = Several
			}
		}
	}
	return best, nil
}

// descend makes one descent from x. The criterion is divided by unit.
func (s search) descend(eval func([]float64) (float64, []float64), c coords, x []float64, unit float64) (minimum, bool) {
	d := c.d
	var lastX, lastG []float64
	var lastV float64
	at := func(x []float64) (float64, []float64) {
		if lastX == nil || !slices.Equal(x, lastX) {
			lastX = append(lastX[:0], x...)
			lastV, lastG = eval(x)
			lastV /= unit
			for i := range lastG {
				lastG[i] /= unit
			}
			if v, g := s.wall(c, x); v > 0 {
				lastV += v
				for i := range lastG {
					lastG[i] += g[i]
				}
			}
		}
		return lastV, lastG
	}
	problem := optimize.Problem{
		Func: func(x []float64) float64 { v, _ := at(x); return v },
		Grad: func(dst, x []float64) { _, g := at(x); copy(dst, g) },
	}
	settings := &optimize.Settings{GradientThreshold: 1e-9, MajorIterations: 300, Converger: &optimize.FunctionConverge{Relative: 1e-12, Absolute: 1e-15, Iterations: 4}}
	res, err := optimize.Minimize(problem, x, settings, &optimize.BFGS{})
	if res == nil || math.IsNaN(res.F) || math.IsInf(res.F, 0) {
		return minimum{}, false
	}
	h, merr := mv.NewBandwidthMatrix(d, c.matrix(res.X))
	if merr != nil {
		return minimum{}, false
	}
	v, g := at(res.X)
	var slope float64
	for _, gi := range g {
		slope = max(slope, math.Abs(gi))
	}
	end := minimum{matrix: h, value: v * unit, status: Converged}
	wall, _ := s.wall(c, res.X)
	switch {
	case wall > 0:
		end.status = Border
	// A line search that cannot improve on the last bits is an end, not a failure.
	case err != nil && slope > 1e-5:
		end.status = Stopped
	}
	return end, true
}

// wall returns 0 within the bounds on the eigenvalues of H and beyond them the
// squared logarithm of the excess, with its gradient by the coordinates.
func (s search) wall(c coords, x []float64) (float64, []float64) {
	if s.low == 0 && s.high == 0 {
		return 0, nil
	}
	d := c.d
	values, vectors, err := eigen(d, c.matrix(x))
	if err != nil {
		return 0, nil
	}
	var v float64
	grad := make([]float64, d*d)
	for k, l := range values {
		var e, slope float64
		switch {
		case s.low > 0 && l < s.low:
			e = math.Log(s.low / math.Max(l, 1e-300))
			slope = -2 * e / math.Max(l, 1e-300)
		case s.high > 0 && l > s.high:
			e = math.Log(l / s.high)
			slope = 2 * e / l
		default:
			continue
		}
		v += 10 * e * e
		for i := range d {
			for j := range d {
				grad[i*d+j] += 10 * slope * vectors[i*d+k] * vectors[j*d+k]
			}
		}
	}
	if v == 0 {
		return 0, nil
	}
	return v, c.pull(x, grad)
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
