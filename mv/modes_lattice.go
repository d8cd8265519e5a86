package mv

import (
	"context"
	"fmt"
	"math"
	"math/cmplx"
	"slices"

	"gonum.org/v1/gonum/mat"
)

// LatticeMaxima returns the nodes higher than all their neighbours (diagonal
// ones too; of equal neighbours the first) and at least least, as columns of
// coordinates, highest first: where hill climbing starts. Nodes on the border
// of the lattice count. Cost: 3^d looks a node.
func LatticeMaxima(g Grid, least float64) [][]float64 {
	d := g.Dim()
	stride := make([]int, d)
	for k, s := 0, 1; k < d; k++ {
		stride[k] = s
		s *= g.N[k]
	}
	var found []int
	at := make([]int, d)
	var top func(i, axis int, v float64, self int) bool
	top = func(i, axis int, v float64, self int) bool {
		if axis < 0 {
			return v > g.Values[i] || i == self || (v == g.Values[i] && self < i)
		}
		for step := -1; step <= 1; step++ {
			if p := at[axis] + step; p < 0 || p >= g.N[axis] {
				continue
			}
			if !top(i+step*stride[axis], axis-1, v, self) {
				return false
			}
		}
		return true
	}
	for i, v := range g.Values {
		if v >= least && v > 0 && top(i, d-1, v, i) {
			found = append(found, i)
		}
		for k := range at {
			if at[k]++; at[k] < g.N[k] {
				break
			}
			at[k] = 0
		}
	}
	slices.SortStableFunc(found, func(a, b int) int {
		switch va, vb := g.Values[a], g.Values[b]; {
		case va > vb:
			return -1
		case va < vb:
			return 1
		}
		return 0
	})
	out := make([][]float64, d)
	for _, i := range found {
		for k := range d {
			out[k] = append(out[k], g.Coord(k, i/stride[k]%g.N[k]))
		}
	}
	return out
}

// Modes returns the local maxima of the Gaussian estimate with bandwidth
// matrix h that are at least least high, highest first: the lattice's maxima,
// then Newton's steps on the spectrum's own trigonometric sum, which is smooth,
// to Tolerance (1e-6) of a scale of H. Against climbing the direct estimate the
// difference is that of the surfaces (see Spectrum). Cost: a surface, and for
// every step one complex exponential per live frequency.
func (s *Spectrum) Modes(ctx context.Context, h BandwidthMatrix, least float64, opt ModeOptions) ([]Mode, error) {
	if h.Dim() != s.Dim() {
		return nil, fmt.Errorf("mv: modes: matrix of dimension %d for a spectrum of dimension %d: %w", h.Dim(), s.Dim(), ErrShape)
	}
	if err := opt.Validate(); err != nil {
		return nil, err
	}
	opt.fill()
	starts := LatticeMaxima(s.Density(h), least)
	wave := s.newWaves(h)
	modes := make([]Mode, len(starts[0]))
	err := overChunks(ctx, s.workers, len(modes), 1, func(i, _, _ int) {
		x := make([]float64, s.Dim())
		for k := range x {
			x[k] = starts[k][i]
		}
		modes[i] = wave.climb(ctx, h, x, opt)
	})
	if err != nil {
		return nil, err
	}
	return mergeModes(h, modes, least, opt.Merge), nil
}

// mergeModes joins modes within a distance in scales and drops those below least.
func mergeModes(h BandwidthMatrix, modes []Mode, least, within float64) []Mode {
	slices.SortStableFunc(modes, func(a, b Mode) int {
		switch {
		case a.Density > b.Density:
			return -1
		case a.Density < b.Density:
			return 1
		}
		return 0
	})
	var kept []Mode
	diff := make([]float64, h.Dim())
next:
	for _, m := range modes {
		if m.Density < least {
			continue
		}
		for i := range kept {
			for k := range diff {
				diff[k] = m.At[k] - kept[i].At[k]
			}
			if h.Mahalanobis2(diff) <= within*within {
				kept[i].Starts++
				kept[i].Iterations = max(kept[i].Iterations, m.Iterations)
				kept[i].Converged = kept[i].Converged || m.Converged
				continue next
			}
		}
		kept = append(kept, m)
	}
	return kept
}

// waves is the trigonometric sum of the density: its live frequencies, line by
// line along axis 0.
type waves struct {
	s    *Spectrum
	rest [][]float64 // per line: frequencies of the other axes
	from []int
	amp  [][]complex128
}

func (s *Spectrum) newWaves(h BandwidthMatrix) *waves {
	w := &waves{s: s}
	m := h.Entries()
	width := s.half.Width()
	norm := 1.0
	for k := range s.pad {
		norm /= float64(s.pad[k]) * s.lat.Step[k]
	}
	rest := make([]int, s.Dim()-1)
	for row := range s.half.Rows() {
		r := row
		border := false
		for k := range rest {
			rest[k] = r % s.pad[k+1]
			r /= s.pad[k+1]
			border = border || 2*rest[k] == s.pad[k+1]
		}
		a, b, c := s.line(m, rest)
		from, to := live(a, b, c, s.freq[0], width)
		to = min(to, (s.pad[0]+1)/2)
		if from >= to || border {
			continue
		}
		t := make([]float64, len(rest))
		for k, bin := range rest {
			t[k] = s.freq[k+1][bin]
		}
		amp := make([]complex128, to-from)
		for i := range amp {
			f := s.freq[0][from+i]
			v := norm * math.Exp(-0.5*((a*f+2*b)*f+c))
			if from+i > 0 {
				v *= 2 // with its conjugate
			}
			amp[i] = s.half.Data[row*width+from+i] * complex(v, 0)
		}
		w.rest, w.from, w.amp = append(w.rest, t), append(w.from, from), append(w.amp, amp)
	}
	return w
}

// at returns value, gradient and Hessian (row-major) at x.
func (w *waves) at(x []float64) (f float64, grad, hess []float64) {
	s := w.s
	d := s.Dim()
	grad, hess = make([]float64, d), make([]float64, d*d)
	u := x[0] - s.lat.Origin[0]
	turn := cmplx.Exp(complex(0, u*s.freq[0][min(1, len(s.freq[0])-1)]))
	t := make([]float64, d)
	for l, amp := range w.amp {
		angle := u * s.freq[0][w.from[l]]
		for k, v := range w.rest[l] {
			angle += v * (x[k+1] - s.lat.Origin[k+1])
			t[k+1] = v
		}
		z := cmplx.Exp(complex(0, angle))
		// Moments of the axis-0 frequency along the line.
		var m0, m1, m2 complex128
		for i, a := range amp {
			v := a * z
			f0 := complex(s.freq[0][w.from[l]+i], 0)
			m0 += v
			m1 += v * f0
			m2 += v * f0 * f0
			z *= turn
		}
		f += real(m0)
		grad[0] -= imag(m1)
		hess[0] -= real(m2)
		for i := 1; i < d; i++ {
			grad[i] -= t[i] * imag(m0)
			hess[i*d] -= t[i] * real(m1)
			for j := 1; j <= i; j++ {
				hess[i*d+j] -= t[i] * t[j] * real(m0)
			}
		}
	}
	for i := range d {
		for j := i + 1; j < d; j++ {
			hess[i*d+j] = hess[j*d+i]
		}
	}
	return f, grad, hess
}

// climb takes Newton's step where the Hessian is negative definite and the step
// raises the density, halved until it does; else a step along H times the
// gradient, a mean shift.
func (w *waves) climb(ctx context.Context, h BandwidthMatrix, x []float64, opt ModeOptions) Mode {
	d := len(x)
	m := Mode{At: x, Starts: 1}
	f, grad, hess := w.at(x)
	step, trial := make([]float64, d), make([]float64, d)
	for m.Iterations < opt.MaxIterations && ctx.Err() == nil {
		m.Iterations++
		if !newtonStep(step, grad, hess) || h.Mahalanobis2(step) > 1 {
			for i := range d {
				step[i] = 0
				for j := range d {
					step[i] += h.At(i, j) * grad[j] / f
				}
			}
		}
		size := math.Sqrt(h.Mahalanobis2(step))
		if size <= opt.Tolerance {
			m.Converged = true
			break
		}
		for {
			for i := range d {
				trial[i] = x[i] + step[i]
			}
			fNew, gNew, hNew := w.at(trial)
			if fNew >= f*(1-1e-13) {
				copy(x, trial)
				f, grad, hess = fNew, gNew, hNew
				break
			}
			for i := range step {
				step[i] /= 2
			}
			if size /= 2; size <= opt.Tolerance {
				m.Converged = true
				break
			}
		}
		if m.Converged {
			break
		}
	}
	m.Density = f
	return m
}

// newtonStep solves -hess*step = grad; false unless hess is negative definite.
func newtonStep(step, grad, hess []float64) bool {
	d := len(step)
	neg := mat.NewSymDense(d, nil)
	for a := range d {
		for b := range a + 1 {
			neg.SetSym(a, b, -hess[a*d+b])
		}
	}
	var chol mat.Cholesky
	if !chol.Factorize(neg) {
		return false
	}
	v := mat.NewVecDense(d, step)
	return chol.SolveVecTo(v, mat.NewVecDense(d, slices.Clone(grad))) == nil
}
