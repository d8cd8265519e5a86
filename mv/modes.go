package mv

import (
	"context"
	"fmt"
	"math"
	"sort"
)

// Mode is a local maximum of a density estimate.
type Mode struct {
	At         []float64 // data units
	Density    float64
	Starts     int  // how many starting points climbed to it
	Iterations int  // steps of the longest of those climbs
	Converged  bool // false when the step limit ended every climb to it
}

// ModeOptions steers Modes; the zero value is the default.
type ModeOptions struct {
	// Tolerance is the step, in scales (Mahalanobis units of H), below which a
	// climb ends; 0 means 1e-6.
	Tolerance float64
	// Merge is the distance, in scales, within which two climbs end at the
	// same mode; 0 means 1e-3.
	Merge float64
	// MaxIterations limits one climb; 0 means 2000.
	MaxIterations int
}

// Validate reports negative settings.
func (o ModeOptions) Validate() error {
	if o.Tolerance < 0 || o.Merge < 0 || o.MaxIterations < 0 || math.IsNaN(o.Tolerance+o.Merge) {
		return fmt.Errorf("mv: modes: tolerance %g, merge %g, %d iterations; each must be at least 0: %w", o.Tolerance, o.Merge, o.MaxIterations, ErrShape)
	}
	return nil
}

func (o *ModeOptions) fill() {
	if o.Tolerance == 0 {
		o.Tolerance = 1e-6
	}
	if o.Merge == 0 {
		o.Merge = 1e-3
	}
	if o.MaxIterations == 0 {
		o.MaxIterations = 2000
	}
}

// Modes climbs the estimate from every start (d columns of coordinates) and
// returns the distinct maxima reached, highest first. A step is Newton's where
// the Hessian is negative definite and the step raises the density, else the
// mean shift, which never lowers it. Compact kernels use the mean shift alone;
// the uniform kernel has none and is ErrNotDifferentiable. Starts where the
// density is 0 lead nowhere and are left out. Cost n*d^2 a step; the result
// does not depend on the number of workers.
//
// Source: Fukunaga & Hostetler 1975 for the mean shift (from memory).
func (e *Direct) Modes(ctx context.Context, starts [][]float64, opt ModeOptions) ([]Mode, error) {
	m, err := checkQueries(e.s.d, starts)
	if err == nil {
		err = opt.Validate()
	}
	if err != nil {
		return nil, err
	}
	if e.kernel == Uniform {
		return nil, fmt.Errorf("mv: modes of the uniform kernel: %w", ErrNotDifferentiable)
	}
	opt.fill()
	ends := make([]climbEnd, m)
	err = overChunks(ctx, e.opt.Workers, m, 1, func(i, _, _ int) {
		c := newClimber(e)
		e.white.at(c.x, starts, i)
		ends[i] = c.climb(ctx, opt)
	})
	if err != nil {
		return nil, err
	}
	return e.merge(ends, opt.Merge), nil
}

type climbEnd struct {
	z         []float64 // whitened
	sum       float64   // weighted profile sum
	steps     int
	converged bool
}

// climber works in whitened coordinates, where H is the identity.
type climber struct {
	e               *Direct
	x, y, shift, g  []float64
	hess            []float64
	sumW0, sumShift float64
}

func newClimber(e *Direct) *climber {
	d := e.s.d
	v := make([]float64, 4*d+d*d)
	return &climber{e: e, x: v[:d], y: v[d : 2*d], shift: v[2*d : 3*d], g: v[3*d : 4*d], hess: v[4*d:]}
}

// look fills the profile sum, the mean-shift target, gradient and Hessian at x.
func (c *climber) look(x []float64) {
	d := c.e.s.d
	c.sumW0, c.sumShift = 0, 0
	clear(c.shift)
	clear(c.g)
	clear(c.hess)
	for i := range c.e.s.n {
		z := c.e.z[i*d : i*d+d]
		var r2 float64
		for k, v := range x {
			t := z[k] - v
			r2 += t * t
		}
		w := c.e.s.Weight(i)
		if r2 >= maxR2 || (c.e.kernel != Gaussian && r2 >= 1) {
			continue
		}
		p := w * c.e.kernel.Profile(r2)
		slope := p // proportional to minus the derivative of the profile by r2
		if c.e.kernel != Gaussian {
			slope = w * math.Pow(1-r2, float64(c.e.kernel.power()-1))
		}
		c.sumW0 += p
		c.sumShift += slope
		for a, v := range z {
			c.shift[a] += slope * v
			if c.e.kernel == Gaussian {
				ta := v - x[a]
				c.g[a] += p * ta
				for b := range a + 1 {
					c.hess[a*d+b] += p * ta * (z[b] - x[b])
				}
			}
		}
	}
	for a := range d {
		c.shift[a] /= c.sumShift
		c.hess[a*d+a] -= c.sumW0
	}
}

func (c *climber) climb(ctx context.Context, opt ModeOptions) climbEnd {
	end := climbEnd{}
	for end.steps < opt.MaxIterations && ctx.Err() == nil {
		c.look(c.x)
		if c.sumShift == 0 {
			return climbEnd{}
		}
		end.steps++
		if c.newton() {
			if s := c.e.profileSum(c.y, 0, c.e.s.n); s < c.sumW0*(1-1e-13) {
				copy(c.y, c.shift)
			}
		} else {
			copy(c.y, c.shift)
		}
		var step float64
		for a, v := range c.y {
			t := v - c.x[a]
			step += t * t
		}
		copy(c.x, c.y)
		// The mean shift converges linearly, so its last step understates the
		// way left; a hundredfold smaller step is asked of it.
		limit := opt.Tolerance
		if c.e.kernel != Gaussian {
			limit /= 100
		}
		if math.Sqrt(step) <= limit {
			end.converged = true
			break
		}
	}
	end.z = append([]float64(nil), c.x...)
	end.sum = c.e.profileSum(c.x, 0, c.e.s.n)
	return end
}

// newton puts x minus the Newton step into y when the Hessian is negative
// definite and the step is at most one scale long.
func (c *climber) newton() bool {
	if c.e.kernel != Gaussian {
		return false
	}
	d := c.e.s.d
	// look fills the lower triangle, which is what newtonStep reads.
	step := make([]float64, d)
	if !newtonStep(step, c.g, c.hess) {
		return false
	}
	var size float64
	for _, v := range step {
		size += v * v
	}
	if size > 1 {
		return false
	}
	for a := range d {
		c.y[a] = c.x[a] + step[a]
	}
	return true
}

func (e *Direct) merge(ends []climbEnd, within float64) []Mode {
	d := e.s.d
	var kept []climbEnd
	var modes []Mode
	order := make([]int, 0, len(ends))
	for i, c := range ends {
		if c.z != nil && c.sum > 0 {
			order = append(order, i)
		}
	}
	sort.SliceStable(order, func(a, b int) bool { return ends[order[a]].sum > ends[order[b]].sum })
next:
	for _, i := range order {
		c := ends[i]
		for j, k := range kept {
			var r2 float64
			for a, v := range c.z {
				r2 += (v - k.z[a]) * (v - k.z[a])
			}
			if r2 <= within*within {
				modes[j].Starts++
				modes[j].Iterations = max(modes[j].Iterations, c.steps)
				modes[j].Converged = modes[j].Converged || c.converged
				continue next
			}
		}
		at := make([]float64, d)
		for a := range d {
			at[a] = e.white.centre[a]
			for b := range a + 1 {
				at[a] += e.h.LowerAt(a, b) * c.z[b]
			}
		}
		kept = append(kept, c)
		modes = append(modes, Mode{At: at, Density: e.norm / e.s.sumW * c.sum, Starts: 1, Iterations: c.steps, Converged: c.converged})
	}
	return modes
}
