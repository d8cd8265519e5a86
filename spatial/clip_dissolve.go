package spatial

import (
	"container/heap"
	"slices"
)

// joiner keeps the events that are certain in faces while faces join.
type joiner struct {
	m       *measure
	into    []int32
	sure    []float64
	settled []bool    // border nodes already added to a face
	open    [][]int32 // per face: border nodes that touch it and others
}

func newJoiner(m *measure, faces int) *joiner {
	j := &joiner{m: m, into: make([]int32, faces), sure: append([]float64(nil), m.whole...),
		settled: make([]bool, len(m.border)), open: make([][]int32, faces)}
	for f := range j.into {
		j.into[f] = int32(f)
	}
	for b, node := range m.border {
		ts := m.touch[node.first:node.last]
		if len(ts) == 1 {
			j.sure[ts[0].face] += node.count // pieces of one face
			j.settled[b] = true
			continue
		}
		for _, t := range ts {
			j.open[t.face] = append(j.open[t.face], int32(b))
		}
	}
	return j
}

func (j *joiner) find(f int32) int32 {
	for j.into[f] != f {
		j.into[f] = j.into[j.into[f]]
		f = j.into[f]
	}
	return f
}

// join makes f part of another face.
func (j *joiner) join(f, to int32) {
	j.into[f] = to
	j.sure[to] += j.sure[f]
	for _, b := range j.open[f] {
		if j.settled[b] {
			continue
		}
		node := j.m.border[b]
		one := true
		for _, t := range j.m.touch[node.first:node.last] {
			one = one && j.find(t.face) == to
		}
		if one {
			j.sure[to] += node.count
			j.settled[b] = true
		} else {
			j.open[to] = append(j.open[to], b)
		}
	}
	j.open[f] = nil
}

// weakest is a heap of faces by the events they certainly hold, then by number.
// Entries whose face has changed since are stale.
type weakest []weakEntry

type weakEntry struct {
	sure float64
	face int32
}

func (w weakest) Len() int { return len(w) }
func (w weakest) Less(a, b int) bool {
	return w[a].sure < w[b].sure || w[a].sure == w[b].sure && w[a].face < w[b].face
}
func (w weakest) Swap(a, b int) { w[a], w[b] = w[b], w[a] }
func (w *weakest) Push(x any)   { *w = append(*w, x.(weakEntry)) }
func (w *weakest) Pop() any {
	old := *w
	x := old[len(old)-1]
	*w = old[:len(old)-1]
	return x
}

// dissolve does within a study area what Isolines.dissolve does on the whole
// plane: a face that may hold fewer than least events joins a face beside it,
// the lower ones first, of those the one that certainly holds most. The weakest
// face goes first. Faces of one label that come to lie side by side are one.
// What lies below the lowest level and reaches the border stays.
func (c *clip) dissolve(m *measure, least float64) *dissolved {
	n := len(c.label)
	d := &dissolved{label: slices.Clone(c.label)}
	j := newJoiner(m, n)
	d.into = j.into
	if !(least > 1) {
		return d
	}
	beside := make([][]int32, n)
	for k := range c.chains {
		l, r := c.left[k], c.right[k]
		if !slices.Contains(beside[l], r) {
			beside[l] = append(beside[l], r)
		}
		if !slices.Contains(beside[r], l) {
			beside[r] = append(beside[r], l)
		}
	}
	stays := make([]bool, n)
	var queue weakest
	for f := range n {
		stays[f] = c.label[f] == 0 && c.onBorder[f]
		if j.sure[f] < least && !stays[f] {
			queue = append(queue, weakEntry{j.sure[f], int32(f)})
		}
	}
	heap.Init(&queue)
	merge := func(f, to int32) {
		if d.label[f] > d.label[to] {
			d.parts++
		} else {
			d.holes++
		}
		j.join(f, to)
		stays[to] = stays[to] || stays[f] && d.label[to] == 0
		beside[to] = append(beside[to], beside[f]...)
		beside[f] = nil
	}
	for queue.Len() > 0 {
		e := heap.Pop(&queue).(weakEntry)
		f := e.face
		if j.into[f] != f || j.sure[f] != e.sure || stays[f] {
			continue
		}
		to := int32(-1)
		for _, g := range beside[f] {
			if g = j.find(g); g == f || g == to {
				continue
			}
			if to < 0 {
				to = g
				continue
			}
			lowG, lowTo := d.label[g] < d.label[f], d.label[to] < d.label[f]
			if lowG != lowTo {
				if lowG {
					to = g
				}
			} else if j.sure[g] > j.sure[to] || j.sure[g] == j.sure[to] && g < to {
				to = g
			}
		}
		if to < 0 {
			// nothing beside it: a part of the study area with too few events, whole
			if d.label[f] > 0 {
				d.parts++
				d.label[f] = 0
			}
			continue
		}
		merge(f, to)
		for again := true; again; { // what has lost its border to the joined face
			again = false
			for _, g := range beside[to] {
				if g = j.find(g); g != to && d.label[g] == d.label[to] {
					merge(g, to)
					again = true
					break
				}
			}
		}
		var now []int32
		for _, g := range beside[to] {
			if g = j.find(g); g != to && !slices.Contains(now, g) {
				now = append(now, g)
			}
		}
		beside[to] = now
		if j.sure[to] < least && !stays[to] {
			heap.Push(&queue, weakEntry{j.sure[to], to})
		}
	}
	for f := range d.into {
		d.into[f] = j.find(int32(f))
	}
	for f := range d.label {
		d.label[f] = d.label[d.into[f]]
	}
	return d
}
