package mv

import (
	"context"
	"math"
)

// build fills the tree: events in tree order, cells in preorder, moments.
func (t *Tree) build(s *Sample) {
	d := t.d
	if s.w == nil {
		t.z = t.white.all(s.cols)
	} else {
		for i := range s.n {
			if s.w[i] > 0 {
				t.w = append(t.w, s.w[i])
			}
		}
		t.z = make([]float64, len(t.w)*d)
		at := 0
		for i := range s.n {
			if s.w[i] > 0 {
				t.white.at(t.z[at:at+d], s.cols, i)
				at += d
			}
		}
	}
	n := len(t.z) / d
	t.nodes = make([]treeNode, 0, 4*n/t.leaf+8)
	t.box = make([]float64, 0, cap(t.nodes)*2*d)
	t.divide(0, n, 0)
	var with []int32
	for i := range t.nodes {
		node := &t.nodes[i]
		node.mom = -1
		if int(node.hi-node.lo) >= t.plan.few && t.useful(i) {
			node.mom = int32(len(with))
			with = append(with, int32(i))
		}
	}
	t.mom = make([]float64, len(with)*t.plan.size)
	// The background context is never cancelled: building cannot fail.
	_ = overChunks(context.Background(), t.workers, len(with), 8, func(_, lo, hi int) {
		y, mono := make([][lanes]float64, d), make([][lanes]float64, t.plan.start[t.plan.order+1])
		for _, i := range with[lo:hi] {
			t.moments(int(i), y, mono)
		}
	})
}

// useful tells whether a cell is small enough for its moments to be used: a
// kernel must be able to hold the cell, or the series to converge across it.
func (t *Tree) useful(i int) bool {
	b := t.box[2*t.d*i:]
	var diag float64
	for k := range t.d {
		half := (b[t.d+k] - b[k]) / 2
		diag += half * half
	}
	if t.kernel == Gaussian {
		return diag <= 1.5*float64(t.d)
	}
	return diag < 1
}

// divide makes the cell of events lo..hi and its children. The cut is the
// middle of the longest side, which keeps cells near cubes; deeper than 48
// levels, where that may crawl, it is the median.
func (t *Tree) divide(lo, hi, depth int) {
	d := t.d
	at := len(t.nodes)
	t.nodes = append(t.nodes, treeNode{lo: int32(lo), hi: int32(hi)})
	t.box = append(t.box, t.z[lo*d:lo*d+d]...)
	t.box = append(t.box, t.z[lo*d:lo*d+d]...)
	box := t.box[2*d*at : 2*d*at+2*d]
	low, high := box[:d], box[d:]
	for i := lo; i < hi; i++ {
		for k, v := range t.z[i*d : i*d+d] {
			if v < low[k] {
				low[k] = v
			}
			if v > high[k] {
				high[k] = v
			}
		}
	}
	weight := float64(hi - lo)
	if t.w != nil {
		weight = 0
		for _, v := range t.w[lo:hi] {
			weight += v
		}
	}
	t.nodes[at].w = weight
	axis, width, diag := 0, 0.0, 0.0
	for k := range d {
		side := high[k] - low[k]
		diag += side * side
		if side > width {
			axis, width = k, side
		}
	}
	if hi-lo <= t.leaf || width == 0 || (diag < 1e-2 && hi-lo < 32*t.leaf) {
		return
	}
	cut := low[axis] + width/2
	if depth > 48 {
		cut = t.median(lo, hi, axis)
	}
	// A cut must leave events on both sides.
	if !(cut > low[axis]) {
		cut = high[axis]
	}
	mid := t.partition(lo, hi, axis, cut)
	t.nodes[at].axis, t.nodes[at].cut = int32(axis), cut
	t.divide(lo, mid, depth+1)
	t.nodes[at].right = int32(len(t.nodes))
	t.divide(mid, hi, depth+1)
}

// partition puts the events with coordinate < cut first and returns their end.
func (t *Tree) partition(lo, hi, axis int, cut float64) int {
	d := t.d
	for lo < hi {
		if t.z[lo*d+axis] < cut {
			lo++
			continue
		}
		hi--
		t.swap(lo, hi)
	}
	return lo
}

func (t *Tree) swap(i, j int) {
	if i == j {
		return
	}
	d := t.d
	a, b := t.z[i*d:i*d+d], t.z[j*d:j*d+d]
	for k, v := range a {
		a[k], b[k] = b[k], v
	}
	if t.w != nil {
		t.w[i], t.w[j] = t.w[j], t.w[i]
	}
}

// median selects the coordinate of the middle event (Hoare's selection).
func (t *Tree) median(lo, hi, axis int) float64 {
	d, want := t.d, (lo+hi)/2
	l, r := lo, hi-1
	for l < r {
		pivot := t.z[(l+r)/2*d+axis]
		i, j := l, r
		for i <= j {
			for t.z[i*d+axis] < pivot {
				i++
			}
			for t.z[j*d+axis] > pivot {
				j--
			}
			if i <= j {
				t.swap(i, j)
				i++
				j--
			}
		}
		switch {
		case want <= j:
			r = j
		case want >= i:
			l = i
		default:
			l = r
		}
	}
	return t.z[want*d+axis]
}

// lanes is how many events moments takes at once.
const lanes = 4

// moments computes the moments of node i about the centre of its box.
func (t *Tree) moments(i int, y, mono [][lanes]float64) {
	d, p := t.d, t.plan
	node := &t.nodes[i]
	box := t.box[2*d*i : 2*d*i+2*d]
	m := t.mom[int(node.mom)*p.size : (int(node.mom)+1)*p.size]
	for e := int(node.lo); e < int(node.hi); e += lanes {
		var w, r2 [lanes]float64 // lanes past the end keep weight 0
		for l := range min(lanes, int(node.hi)-e) {
			w[l] = 1
			if t.w != nil {
				w[l] = t.w[e+l]
			}
			for k, v := range t.z[(e+l)*d : (e+l)*d+d] {
				u := v - (box[k]+box[d+k])/2
				y[k][l] = u
				r2[l] += u * u
			}
			if t.kernel == Gaussian {
				w[l] *= math.Exp(-0.5 * r2[l])
			}
		}
		p.fillLanes(mono, y, w)
		if t.kernel == Gaussian {
			m := m[:len(mono)]
			for j := range mono {
				v := &mono[j]
				m[j] += (v[0] + v[1]) + (v[2] + v[3])
			}
			continue
		}
		at, f := 0, [lanes]float64{1, 1, 1, 1}
		for b := 0; b <= p.order; b++ {
			block := m[at : at+p.start[p.order-b+1]]
			for j := range block {
				v := &mono[j]
				block[j] += (f[0]*v[0] + f[1]*v[1]) + (f[2]*v[2] + f[3]*v[3])
			}
			at += len(block)
			for l := range f {
				f[l] *= r2[l]
			}
		}
	}
	if t.kernel == Gaussian {
		for j := range m {
			m[j] *= p.multi[j]
		}
		node.lnM0 = math.Log(m[0] / node.w)
		return
	}
	at := 0
	for b := 0; b <= p.order; b++ {
		block := m[at : at+p.start[p.order-b+1]]
		for j := range block {
			block[j] *= p.multi[j]
		}
		at += len(block)
	}
}
