package spatial

import (
	"cmp"
	"math"
	"slices"

	"drumlin/mv"
)

// Maximum is a local maximum of a grid, refined between the nodes.
type Maximum struct {
	X, Y  float64 // position in the units of the lattice
	Value float64 // height there
	I, J  int     // node it was found at
}

// FindMaxima returns the local maxima of a two-dimensional grid above floor,
// highest first (ties by node number). A node is one when none of its eight
// neighbours is higher; a plateau of equal nodes counts once, at its first
// node, when no node around it is higher and at least one is lower. Position
// and height are refined by the quadratic with the central differences of the
// 3 x 3 nodes around (of the logarithms, if all are positive: exact for a
// normal density), unless that has no maximum within a step or the node is on
// the border. NaN is lower than everything. Cost O(nodes).
func FindMaxima(g mv.Grid, floor float64) []Maximum {
	nx, ny := g.N[0], g.N[1]
	var out []Maximum
	var seen map[int]bool // nodes of plateaus already judged
	for n, v := range g.Values {
		if !(v > floor) {
			continue
		}
		i, j := n%nx, n/nx
		higher, equal, lower := compareAround(g, i, j, v)
		if higher || !lower && !equal {
			continue
		}
		if equal {
			if seen[n] {
				continue
			}
			if seen == nil {
				seen = map[int]bool{}
			}
			if !plateauIsMaximum(g, n, seen) {
				continue
			}
			out = append(out, Maximum{g.Coord(0, i), g.Coord(1, j), v, i, j})
			continue
		}
		m := Maximum{g.Coord(0, i), g.Coord(1, j), v, i, j}
		if i > 0 && j > 0 && i < nx-1 && j < ny-1 {
			m.refine(g)
		}
		out = append(out, m)
	}
	slices.SortStableFunc(out, func(a, b Maximum) int { return cmp.Compare(b.Value, a.Value) })
	return out
}

// compareAround says whether any neighbour is higher than, equal to or lower
// than v.
func compareAround(g mv.Grid, i, j int, v float64) (higher, equal, lower bool) {
	nx, ny := g.N[0], g.N[1]
	for b := max(j-1, 0); b <= min(j+1, ny-1); b++ {
		for a := max(i-1, 0); a <= min(i+1, nx-1); a++ {
			if a == i && b == j {
				continue
			}
			switch w := g.Values[b*nx+a]; {
			case w > v:
				return true, equal, lower
			case w == v:
				equal = true
			default:
				lower = true
			}
		}
	}
	return false, equal, lower
}

// plateauIsMaximum marks the plateau of node n and judges it.
func plateauIsMaximum(g mv.Grid, n int, seen map[int]bool) bool {
	nx, ny := g.N[0], g.N[1]
	v := g.Values[n]
	seen[n] = true
	todo := []int{n}
	anyHigher, anyLower := false, false
	for len(todo) > 0 {
		n := todo[len(todo)-1]
		todo = todo[:len(todo)-1]
		i, j := n%nx, n/nx
		for b := max(j-1, 0); b <= min(j+1, ny-1); b++ {
			for a := max(i-1, 0); a <= min(i+1, nx-1); a++ {
				k := b*nx + a
				switch w := g.Values[k]; {
				case w > v:
					anyHigher = true
				case w == v:
					if !seen[k] {
						seen[k] = true
						todo = append(todo, k)
					}
				default:
					anyLower = true
				}
			}
		}
	}
	return anyLower && !anyHigher
}

// refine moves the maximum to the top of the quadratic around its node.
func (m *Maximum) refine(g mv.Grid) {
	f, ok := around(g, m.I, m.J)
	if !ok {
		return
	}
	logs := true
	for _, v := range f {
		logs = logs && v > 0
	}
	if logs {
		for n, v := range f {
			f[n] = math.Log(v)
		}
	}
	gx, gy := (f[5]-f[3])/2, (f[7]-f[1])/2
	xx, yy := f[3]-2*f[4]+f[5], f[1]-2*f[4]+f[7]
	xy := (f[8] - f[6] - f[2] + f[0]) / 4
	det := xx*yy - xy*xy
	if !(det > 0) || !(xx < 0) {
		return
	}
	dx, dy := (xy*gy-yy*gx)/det, (xy*gx-xx*gy)/det
	if !(math.Abs(dx) <= 1 && math.Abs(dy) <= 1) {
		return
	}
	top := f[4] + (gx*dx+gy*dy)/2
	if logs {
		top = math.Exp(top)
	}
	m.X += dx * g.Step[0]
	m.Y += dy * g.Step[1]
	m.Value = top
}

// around returns the 3 x 3 values around an inner node, lower row first, and
// whether all are finite.
func around(g mv.Grid, i, j int) (f [9]float64, ok bool) {
	ok = true
	for b := range 3 {
		copy(f[3*b:3*b+3], g.Values[(j+b-1)*g.N[0]+i-1:])
	}
	for _, v := range f {
		ok = ok && v-v == 0
	}
	return f, ok
}

// Sample reads a two-dimensional grid between its nodes: the biquadratic
// through the 3 x 3 nodes around the nearest one; bilinear in the cell where
// that node is on the border or a value is not finite. NaN outside the lattice.
func Sample(g mv.Grid, at XY) float64 {
	nx, ny := g.N[0], g.N[1]
	x, y := (at.X-g.Origin[0])/g.Step[0], (at.Y-g.Origin[1])/g.Step[1]
	if !(x >= 0 && y >= 0 && x <= float64(nx-1) && y <= float64(ny-1)) {
		return math.NaN()
	}
	i, j := int(math.Round(x)), int(math.Round(y))
	if i > 0 && j > 0 && i < nx-1 && j < ny-1 {
		if f, ok := around(g, i, j); ok {
			wx, wy := quadraticWeights(x-float64(i)), quadraticWeights(y-float64(j))
			var sum float64
			for n, v := range f {
				sum += wx[n%3] * wy[n/3] * v
			}
			return sum
		}
	}
	i, j = max(min(int(x), nx-2), 0), max(min(int(y), ny-2), 0)
	u, v := x-float64(i), y-float64(j)
	var sum float64
	for b, wy := range [2]float64{1 - v, v} {
		for a, wx := range [2]float64{1 - u, u} {
			if w := wx * wy; w != 0 { // a node without weight may be missing
				sum += w * g.Values[(j+b)*nx+i+a]
			}
		}
	}
	return sum
}

// quadraticWeights are those of the nodes at -1, 0 and 1 for position t.
func quadraticWeights(t float64) [3]float64 {
	return [3]float64{t * (t - 1) / 2, 1 - t*t, t * (t + 1) / 2}
}
