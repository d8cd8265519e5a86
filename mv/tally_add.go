package mv

import (
	"fmt"
	"math"
)

// A tile's events wait in a buffer until they go to its nodes together. The tile
// (34 kB) then stays in the processor's cache while they are added, where single
// events would miss cache and page tables at nearly every one. mostWaiting
// events, a few for each of the tile's nodes' lines, were fastest; with large
// budgets the buffers are shorter, so that all of them hold allWaiting at most.
const (
	mostWaiting = 2048
	allWaiting  = 1 << 20
)

const recentBits = 6 // edge of the table of recent tiles: 64 by 64

// queue holds events that have a tile but are not yet at their nodes.
type queue struct {
	size   int      // events that a tile's buffer holds
	local  []uint64 // size per tile: grains from the tile's corner, y in the high word, x in the low
	w      []uint64 // their integer weights, nil without weights
	count  []int32  // events waiting, per tile
	recent [1 << (2 * recentBits)]tileSlot
}

// Add bins events at x, y with weights w (nil for 1 each). Every number must
// be finite, |x| and |y| below 2^42 grains and 0 <= w <= 2^42: rows that break
// this are the reader's to set aside, and Add returns an error for the first
// of them, the events before it added. It panics with a shape message when the
// lengths differ, or when weights and the tally's options do not agree.
func (t *Tally) Add(x, y, w []float64) error {
	if len(x) != len(y) || (w != nil) != t.weighted && len(x) > 0 || (w != nil && len(w) != len(x)) {
		panic("mv: tally: lengths of x, y and weights do not match")
	}
	if len(x) > 0 && len(t.tiles) == 0 {
		t.chooseLevel(x, y)
	}
	if t.queue == nil {
		t.queue = &queue{size: min(mostWaiting, max(64, allWaiting/t.budget))}
	}
	q := t.queue
	scale := math.Ldexp(1, -t.grain)
	shift := uint(t.level - t.grain + tileBits)
	mask := int64(1)<<shift - 1
	for i := range x {
		gx, gy := x[i]*scale, y[i]*scale
		if !(math.Abs(gx) < maxCoord && math.Abs(gy) < maxCoord) {
			return fmt.Errorf("mv: tally: event %d at (%g, %g) is not finite or beyond 2^42 grains of %g: %w", i, x[i], y[i], t.Grain(), ErrNotFinite)
		}
		if t.box != nil && !t.box.holds(x[i], y[i]) {
			t.outside++
			continue
		}
		ix, iy := roundInt(gx), roundInt(gy)
		key := tileKey{int32(ix >> shift), int32(iy >> shift)}
		slot := &q.recent[uint32(key.y)<<recentBits&(1<<(2*recentBits)-1)|uint32(key.x)&(1<<recentBits-1)]
		if slot.key != key || slot.pos == 0 {
			pos := t.find(key)
			for pos < 0 { // the budget is passed
				t.Coarsen()
				shift = uint(t.level - t.grain + tileBits)
				mask = int64(1)<<shift - 1
				key = tileKey{int32(ix >> shift), int32(iy >> shift)}
				slot = &q.recent[uint32(key.y)<<recentBits&(1<<(2*recentBits)-1)|uint32(key.x)&(1<<recentBits-1)]
				pos = t.find(key)
			}
			*slot = tileSlot{key, int32(pos) + 1}
		}
		k := int(slot.pos) - 1
		at := k*q.size + int(q.count[k])
		if w != nil {
			if !(w[i] >= 0 && w[i] <= maxWeight) {
				return fmt.Errorf("mv: tally: weight %g of event %d is not between 0 and %g: %w", w[i], i, float64(maxWeight), ErrNotFinite)
			}
			q.w[at] = uint64(math.RoundToEven(w[i] * (1 << weightBits)))
		}
		q.local[at] = uint64(iy&mask)<<32 | uint64(ix&mask)
		t.events++
		if q.count[k]++; int(q.count[k]) == q.size {
			t.settle(k)
		}
	}
	return nil
}

// find returns the position of the tile, made if need be, or -1 when that
// would pass the budget.
func (t *Tally) find(key tileKey) int {
	pos, ok := t.index.find(key)
	if !ok {
		if len(t.tiles) >= t.budget && t.level < t.grain+maxShift {
			return -1
		}
		pos = len(t.tiles)
		t.newTile(key)
	}
	for q := t.queue; len(q.count) <= pos; {
		q.count = append(q.count, 0)
		q.local = append(q.local, make([]uint64, q.size)...)
		if t.weighted {
			q.w = append(q.w, make([]uint64, q.size)...)
		}
	}
	return pos
}

// roundInt rounds to the nearest integer, ties to even, for |v| < 2^50.
func roundInt(v float64) int64 {
	const magic = 3 << 51
	return int64(math.Float64bits(v+magic)) - 0x4338000000000000
}

// chooseLevel raises the step before the first event to where a sample of the
// first batch fits the budget: the events themselves would force it anyway,
// so the final step is the same.
func (t *Tally) chooseLevel(x, y []float64) {
	stride := max(1, len(x)/8192)
	seen := make(map[tileKey]struct{}, t.budget+1)
	scale := math.Ldexp(1, -t.grain)
	for ; t.level < t.grain+maxShift; t.level++ {
		clear(seen)
		shift := uint(t.level - t.grain + tileBits)
		for i := 0; i < len(x) && len(seen) <= t.budget; i += stride {
			gx, gy := x[i]*scale, y[i]*scale
			if math.Abs(gx) < maxCoord && math.Abs(gy) < maxCoord && (t.box == nil || t.box.holds(x[i], y[i])) {
				seen[tileKey{int32(roundInt(gx) >> shift), int32(roundInt(gy) >> shift)}] = struct{}{}
			}
		}
		if len(seen) <= t.budget {
			return
		}
	}
}

// settle brings a tile's waiting events to its nodes.
func (t *Tally) settle(k int) {
	q := t.queue
	n := int(q.count[k])
	q.count[k] = 0
	shift := uint(t.level - t.grain)
	quanta := uint64(n) << (2 * shift)
	if t.pending+quanta > 1<<63 {
		t.normalise()
	}
	t.pending += quanta
	from, to := k*q.size, k*q.size+n
	if t.weighted {
		t.tiles[k].addWeights(q.local[from:to], q.w[from:to], shift)
	}
	t.tiles[k].addEvents(q.local[from:to], shift)
}

// flush brings all waiting events to their nodes and empties the table of
// recent tiles, whose positions may change.
func (t *Tally) flush() {
	q := t.queue
	if q == nil {
		return
	}
	for k, n := range q.count {
		if n > 0 {
			t.settle(k)
		}
	}
	clear(q.recent[:])
}

// addEvents adds events at positions within the tile, in grains.
func (tl *tile) addEvents(local []uint64, shift uint) {
	unit := uint64(1) << shift
	mask := unit - 1
	low := (*[tileNodes]uint64)(tl.low)
	for _, p := range local {
		x, y := p&math.MaxUint32, p>>32
		at := (y>>shift)*tileSide + x>>shift
		fx, fy := x&mask, y&mask
		ex, ey := unit-fx, unit-fy
		a := low[at : at+tileSide+2]
		a[0] += ex * ey
		a[1] += fx * ey
		a[tileSide] += ex * fy
		a[tileSide+1] += fx * fy
	}
}

// addWeights does the same for integer weights.
func (tl *tile) addWeights(local, w []uint64, shift uint) {
	unit := uint64(1) << shift
	mask := unit - 1
	for i, p := range local {
		x, y := p&math.MaxUint32, p>>32
		at := (y>>shift)*tileSide + x>>shift
		fx, fy := x&mask, y&mask
		q := w[i]
		tl.weight.addProduct(q, 1)
		tl.weight2.addProduct(q, q)
		tl.w[at].addProduct(q, (unit-fx)*(unit-fy))
		tl.w[at+1].addProduct(q, fx*(unit-fy))
		tl.w[at+tileSide].addProduct(q, (unit-fx)*fy)
		tl.w[at+tileSide+1].addProduct(q, fx*fy)
	}
}

func (t *Tally) newTile(key tileKey) *tile {
	tl := &tile{key: key, low: make([]uint64, tileNodes)}
	if t.weighted {
		tl.w = make([]uint128, tileNodes)
	}
	t.index.insert(key, len(t.tiles))
	t.tiles = append(t.tiles, tl)
	return tl
}
