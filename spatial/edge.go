package spatial

import (
	"fmt"
	"math"

	"drumlin/mv"
)

// gauss2 are the points of two-point quadrature on [0, 1], each of weight 1/2,
// exact for cubics.
var gauss2 = [2]float64{.5 - .28867513459481288225, .5 + .28867513459481288225}

// Mask returns, at every node of a planar lattice, the area in square metres
// that the study area takes of the node's hat (the product of 1-|u| on each
// axis): the whole cell inside, 0 outside. It is the linear binning of the
// study area's uniform density, exactly: an integral around the border.
func (w *StudyArea) Mask(l mv.Lattice) mv.Grid {
	g := mv.NewGrid(l)
	nx, ny := l.N[0], l.N[1]
	full := make([]float64, nx*ny) // goes to the node and all west of it
	o, s := XY{l.Origin[0], l.Origin[1]}, XY{l.Step[0], l.Step[1]}
	for _, r := range w.rings {
		for i, p := range r {
			q := r[(i+1)%len(r)]
			// cell row 0 lies south of the first node row
			a := XY{(p.X - o.X) / s.X, (p.Y-o.Y)/s.Y + 1}
			b := XY{(q.X - o.X) / s.X, (q.Y-o.Y)/s.Y + 1}
			eachCell(a, b, ny+1, func(i, j int, a, b XY) {
				if i < -1 {
					return
				}
				dy := b.Y - a.Y
				for _, t := range gauss2 {
					u := a.X + t*(b.X-a.X) - float64(i)
					v := a.Y + t*dy - float64(j)
					for k, hat := range [2]float64{1 - v, v} {
						row := j - 1 + k
						c := hat * dy / 2
						if row < 0 || row >= ny || c == 0 {
							continue
						}
						line := g.Values[row*nx : (row+1)*nx]
						if i >= 0 && i < nx {
							line[i] += c * (1 - (1-u)*(1-u)/2)
						}
						if i+1 < nx && i+1 >= 0 {
							line[i+1] += c * u * u / 2
						}
						if i > 0 {
							full[row*nx+min(i, nx)-1] += c
						}
					}
				}
			})
		}
	}
	cell := l.CellVolume()
	for j := range ny {
		var sum float64
		for i := nx - 1; i >= 0; i-- {
			n := j*nx + i
			sum += full[n]
			v := (g.Values[n] + sum) * cell
			if v < 1e-9*cell {
				v = 0 // rounding
			}
			g.Values[n] = min(v, cell)
		}
	}
	return g
}

const (
	maskReach   = 7.5     // scales beyond which a Gaussian kernel holds nothing
	maskSteps   = 10      // steps of the mask that a kernel's minor scale should span
	maskNodes   = 1 << 24 // of the refined mask, at most
	maskRefine  = 2       // doublings, at most
	leastInside = 1e-12
)

// KernelMass returns p(x), the mass inside the study area of the Gaussian
// kernel with each of the matrices centred at every node of a lattice:
//
//	p_H(x) = integral over W of K_H(x - u) du
//
// Source: Diggle 1985; Jones 1993. The mask is convolved through its transform,
// at most four times finer than the lattice; against closed forms the error is
// about 1e-6 where a kernel's minor scale spans 10 steps of the mask
// (see the tests).
func (w *StudyArea) KernelMass(l mv.Lattice, workers int, hs ...mv.BandwidthMatrix) ([]mv.Grid, error) {
	wide, minor := [2]float64{}, math.Inf(1)
	for _, h := range hs {
		for k := range 2 {
			wide[k] = max(wide[k], maskReach*math.Sqrt(h.At(k, k)))
		}
		minor = min(minor, h.Ellipse().Minor)
	}
	out := make([]mv.Grid, len(hs))
	m := mv.Lattice{Origin: make([]float64, 2), Step: make([]float64, 2), N: make([]int, 2)}
	var before [2]int
	for k := range 2 {
		before[k] = int(math.Ceil(wide[k] / l.Step[k]))
		m.Origin[k] = l.Origin[k] - float64(before[k])*l.Step[k]
		m.Step[k] = l.Step[k]
		m.N[k] = l.N[k] + 2*before[k]
	}
	coarsen := 0
	for coarsen < maskRefine && minor < maskSteps*max(m.Step[0], m.Step[1]) && 4*m.Len() <= maskNodes {
		coarsen++
		for k := range 2 {
			m.N[k] = (m.N[k]-1)*2 + 1
			m.Step[k] /= 2
		}
	}
	mask := w.Mask(m)
	var total float64
	for _, v := range mask.Values {
		total += v
	}
	if !(total > 0) {
		return nil, fmt.Errorf("spatial: the study area does not meet the lattice of the events: %w", ErrStudyArea)
	}
	s, err := mv.NewSpectrum(mask, mv.SpectrumOptions{Reach: []float64{0, 0}, Coarsen: coarsen, Workers: workers})
	if err != nil {
		return nil, err
	}
	for n, h := range hs {
		d := s.Density(h)
		p := mv.NewGrid(l)
		for j := range l.N[1] {
			from := d.Values[(j+before[1])*d.N[0]+before[0]:]
			to := p.Values[j*l.N[0] : (j+1)*l.N[0]]
			for i := range to {
				to[i] = max(leastInside, min(1, from[i]*total))
			}
		}
		out[n] = p
	}
	return out, nil
}

// near returns which nodes lie within reach nodes of the mask's support.
func near(mask mv.Grid, reach int) []bool {
	nx, ny := mask.N[0], mask.N[1]
	across := make([]bool, nx*ny)
	out := make([]bool, nx*ny)
	for j := range ny {
		last := -1 << 30
		row, to := mask.Values[j*nx:(j+1)*nx], across[j*nx:(j+1)*nx]
		for i, v := range row {
			if v > 0 {
				last = i
			}
			to[i] = i-last <= reach
		}
		last = 1 << 30
		for i := nx - 1; i >= 0; i-- {
			if row[i] > 0 {
				last = i
			}
			to[i] = to[i] || last-i <= reach
		}
	}
	for j := range ny {
		for k := max(0, j-reach); k <= min(ny-1, j+reach); k++ {
			from, to := across[k*nx:(k+1)*nx], out[j*nx:(j+1)*nx]
			for i, v := range from {
				to[i] = to[i] || v
			}
		}
	}
	return out
}

// edgeRim is how many nodes beyond the border a corrected density goes on, so
// that contours run through the border as they would without it.
const edgeRim = 3

// Renormalise divides a density by the kernel mass inside the study area, in
// place, and ends it edgeRim nodes beyond the border.
func (w *StudyArea) Renormalise(density, inside mv.Grid) {
	for i, p := range inside.Values {
		density.Values[i] /= p
	}
	w.End(density)
}

// End sets a density to 0 beyond the rim of the study area, in place.
func (w *StudyArea) End(density mv.Grid) {
	for i, keep := range near(w.Mask(density.Lattice), edgeRim) {
		if !keep {
			density.Values[i] = 0
		}
	}
}

// Conserve divides node weights by the kernel mass inside the study area (the
// event-side form: each event is weighted by 1/p at its place), in place. The
// estimate from them holds all its mass inside.
func (w *StudyArea) Conserve(weights, inside mv.Grid) {
	for i, p := range inside.Values {
		if weights.Values[i] != 0 {
			weights.Values[i] /= p
		}
	}
}

// MassInside returns the integral of a density over the study area.
func (w *StudyArea) MassInside(density mv.Grid) float64 {
	var sum float64
	for i, m := range w.Mask(density.Lattice).Values {
		sum += m * density.Values[i]
	}
	return sum
}
