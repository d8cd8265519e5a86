package mv

import (
	"fmt"
	"math"
)

// queueSize is how many events wait until they go to their nodes together,
// sorted by tile: one tile (34 kB) stays in the processor's cache while its
// events are added, where unsorted events would miss cache and page tables at
// nearly every one.
const queueSize = 1 << 18

// queue holds events that have a tile but are not yet at their nodes.
type queue struct {
	n     int
	tile  []int32  // per event: its tile
	local []uint64 // per event: grains from the tile's corner, y in the high word, x in the low
	w     []uint64 // per event: integer weight, nil without weights
	count []int32  // per tile: its events in the queue

	sorted  []uint64 // scratch: local by tile
	sortedW []uint64
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
	q := &t.queue
	if q.tile == nil {
		q.tile, q.local, q.sorted = make([]int32, queueSize), make([]uint64, queueSize), make([]uint64, queueSize)
		if t.weighted {
			q.w, q.sortedW = make([]uint64, queueSize), make([]uint64, queueSize)
		}
	}
	scale := math.Ldexp(1, -t.grain)
	shift := uint(t.level - t.grain + tileBits)
	mask := int64(1)<<shift - 1
	last, lastKey := -1, tileKey{}
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
		if key != lastKey || last < 0 {
			at, ok := t.index.find(key)
			for !ok && len(t.tiles) >= t.budget && t.level < t.grain+maxShift {
				t.Coarsen() // the budget is passed
				shift = uint(t.level - t.grain + tileBits)
				mask = int64(1)<<shift - 1
				key = tileKey{int32(ix >> shift), int32(iy >> shift)}
				at, ok = t.index.find(key)
			}
			if !ok {
				at = len(t.tiles)
				t.newTile(key)
			}
			for len(q.count) <= at {
				q.count = append(q.count, 0)
			}
			last, lastKey = at, key
		}
		n := q.n
		if w != nil {
			if !(w[i] >= 0 && w[i] <= maxWeight) {
				return fmt.Errorf("mv: tally: weight %g of event %d is not between 0 and %g: %w", w[i], i, float64(maxWeight), ErrNotFinite)
			}
			q.w[n] = uint64(math.RoundToEven(w[i] * (1 << weightBits)))
		}
		q.tile[n] = int32(last)
		q.local[n] = uint64(iy&mask)<<32 | uint64(ix&mask)
		q.count[last]++
		q.n = n + 1
		t.events++
		if q.n == queueSize {
			t.flush()
		}
	}
	return nil
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

// flush brings the queued events to their nodes.
func (t *Tally) flush() {
	q := &t.queue
	if q.n == 0 {
		return
	}
	shift := uint(t.level - t.grain)
	quanta := uint64(1) << (2 * shift)
	if t.pending+uint64(q.n)*quanta > 1<<63 {
		t.normalise()
	}
	t.pending += uint64(q.n) * quanta

	// Counting sort by tile: count becomes each tile's first slot, then its end.
	var sum int32
	for k, c := range q.count {
		q.count[k] = sum
		sum += c
	}
	for i, k := range q.tile[:q.n] {
		at := q.count[k]
		q.count[k] = at + 1
		q.sorted[at] = q.local[i]
		if q.w != nil {
			q.sortedW[at] = q.w[i]
		}
	}
	var from int32
	for k, to := range q.count {
		if q.w != nil {
			t.tiles[k].addWeights(q.sorted[from:to], q.sortedW[from:to], shift)
		}
		t.tiles[k].addEvents(q.sorted[from:to], shift)
		from = to
	}
	q.n = 0
	clear(q.count)
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
