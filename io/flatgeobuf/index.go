package flatgeobuf

import (
	"cmp"
	"encoding/binary"
	"math"
	"slices"

	"github.com/paulmach/orb"
)

// nodeSize is how many children a node of the index has.
const nodeSize = 16

// node is an entry of the index: a box, and where the feature (of a leaf) or
// the first child (of an inner node, by number) stands.
type node struct {
	box    orb.Bound
	offset uint64
}

// hilbertOrder sorts features along the Hilbert curve through the middles of
// their boxes, on a grid of 2^16 cells a side; equal ones keep their order.
func hilbertOrder(boxes []orb.Bound, extent orb.Bound) []int {
	key := make([]uint32, len(boxes))
	order := make([]int, len(boxes))
	scale := func(v, lo, hi float64) uint32 {
		if !(hi > lo) {
			return 0
		}
		return uint32(max(0, min(65535, math.Floor((v-lo)/(hi-lo)*65535))))
	}
	for i, b := range boxes {
		order[i] = i
		c := b.Center()
		key[i] = hilbert(scale(c[0], extent.Min[0], extent.Max[0]), scale(c[1], extent.Min[1], extent.Max[1]))
	}
	slices.SortStableFunc(order, func(a, b int) int { return cmp.Compare(key[b], key[a]) })
	return order
}

// hilbert returns the place of a cell along the curve, by turning the quadrant
// it lies in at every level.
func hilbert(x, y uint32) uint32 {
	var d uint32
	for s := uint32(1 << 15); s > 0; s /= 2 {
		var rx, ry uint32
		if x&s != 0 {
			rx = 1
		}
		if y&s != 0 {
			ry = 1
		}
		d += s * s * ((3 * rx) ^ ry)
		if ry == 0 {
			if rx == 1 {
				x, y = 65535-x, 65535-y
			}
			x, y = y, x
		}
	}
	return d
}

// appendIndex writes the tree, root first, leaves last in the order given.
func appendIndex(out []byte, leaves []node) []byte {
	if len(leaves) == 0 {
		return out
	}
	levels := [][]node{leaves}
	for len(levels[len(levels)-1]) > 1 {
		below := levels[len(levels)-1]
		var up []node
		for i := 0; i < len(below); i += nodeSize {
			n := node{box: below[i].box, offset: uint64(i)}
			for _, c := range below[i:min(i+nodeSize, len(below))] {
				n.box = n.box.Union(c.box)
			}
			up = append(up, n)
		}
		levels = append(levels, up)
	}
	if len(leaves) == 1 { // a leaf and, as every tree has one, a root above it
		levels = append(levels, []node{{leaves[0].box, 0}})
	}
	first := uint64(0) // number of the first node of a level
	for k := len(levels) - 1; k >= 0; k-- {
		next := first + uint64(len(levels[k]))
		for _, n := range levels[k] {
			if k > 0 {
				n.offset += next
			}
			for _, v := range []float64{n.box.Min[0], n.box.Min[1], n.box.Max[0], n.box.Max[1]} {
				out = binary.LittleEndian.AppendUint64(out, math.Float64bits(v))
			}
			out = binary.LittleEndian.AppendUint64(out, n.offset)
		}
		first = next
	}
	return out
}
