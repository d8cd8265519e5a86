package bandwidth

import "drumlin/mv"

// cell is a block of nodes: its weight, mean and scatter about the mean (per
// unit of weight).
type cell struct {
	w       float64
	mean    []float64
	scatter []float64
}

// gatherCells merges node weights into blocks of halving size until each holds
// no more than a share of the weight, or is a single node: fine where events
// are dense, coarse where they are few. All coordinates are divided by unit
// and counted from centre. Cost: O(nodes).
func gatherCells(g mv.Grid, centre []float64, unit, share float64) []cell {
	d := g.Dim()
	type level struct {
		n []int
		w []float64
		m []float64 // first moments, d per block
	}
	base := level{n: g.N, w: g.Values}
	levels := []level{base}
	var total float64
	for _, v := range g.Values {
		total += v
	}
	at := make([]int, d)
	coord := func(at []int, k int) float64 { return (g.Coord(k, at[k]) - centre[k]) / unit }
	for {
		low := levels[len(levels)-1]
		n, size, done := make([]int, d), 1, true
		for k := range n {
			n[k] = (low.n[k] + 1) / 2
			size *= n[k]
			done = done && low.n[k] == 1
		}
		if done {
			break
		}
		up := level{n: n, w: make([]float64, size), m: make([]float64, size*d)}
		clear(at)
		for i, w := range low.w {
			if w != 0 {
				to := 0
				for k := d - 1; k >= 0; k-- {
					to = to*n[k] + at[k]/2
				}
				up.w[to] += w
				for k := range d {
					if low.m == nil {
						up.m[to*d+k] += w * coord(at, k)
					} else {
						up.m[to*d+k] += low.m[i*d+k]
					}
				}
			}
			for k := range at {
				if at[k]++; at[k] < low.n[k] {
					break
				}
				at[k] = 0
			}
		}
		levels = append(levels, up)
	}
	var out []cell
	var visit func(l int, at []int)
	visit = func(l int, at []int) {
		v := levels[l]
		i := 0
		for k := d - 1; k >= 0; k-- {
			i = i*v.n[k] + at[k]
		}
		if v.w[i] == 0 {
			return
		}
		if l > 0 && v.w[i] > share*total {
			for corner := range 1 << d {
				child, inside := make([]int, d), true
				for k := range d {
					child[k] = 2*at[k] + corner>>k&1
					inside = inside && child[k] < levels[l-1].n[k]
				}
				if inside {
					visit(l-1, child)
				}
			}
			return
		}
		c := cell{w: v.w[i] / total, mean: make([]float64, d), scatter: make([]float64, d*d)}
		for k := range d {
			if l == 0 {
				c.mean[k] = coord(at, k)
			} else {
				c.mean[k] = v.m[i*d+k] / v.w[i]
			}
		}
		if l > 0 {
			blockScatter(g, at, l, &c, coord)
		}
		out = append(out, c)
	}
	visit(len(levels)-1, make([]int, d))
	return out
}

// blockScatter fills the scatter of the nodes of one block about its mean.
func blockScatter(g mv.Grid, at []int, l int, c *cell, coord func([]int, int) float64) {
	d := g.Dim()
	var total float64
	node := make([]int, d)
	var walk func(axis, i int)
	walk = func(axis, i int) {
		if axis < 0 {
			w := g.Values[i]
			if w == 0 {
				return
			}
			total += w
			for a := range d {
				for b := range d {
					c.scatter[a*d+b] += w * (coord(node, a) - c.mean[a]) * (coord(node, b) - c.mean[b])
				}
			}
			return
		}
		for v := at[axis] << l; v < min((at[axis]+1)<<l, g.N[axis]); v++ {
			node[axis] = v
			walk(axis-1, i*g.N[axis]+v)
		}
	}
	walk(d-1, 0)
	scaleAll(c.scatter, 1/total)
}
