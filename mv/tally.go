package mv

import (
	"fmt"
	"math"
	"math/bits"
)

const (
	tileBits  = 6             // cells along a tile's edge: 64
	tileCells = 1 << tileBits // cells
	tileSide  = tileCells + 1 // nodes along a tile's edge, both borders included
	tileNodes = tileSide * tileSide

	// DefaultTiles bounds the occupied tiles of a tally: 256 tiles hold a full
	// square of 1,024 by 1,024 cells in 9 MB, which a processor's cache can hold;
	// events are added twice as fast as with 1,024 tiles.
	DefaultTiles = 256

	wordBits = 48 // a normalised low word holds values below 2^48
	wordMask = 1<<wordBits - 1

	weightBits = 20 // weights are rounded to multiples of 2^-20
	maxWeight  = 1 << 42
	maxCoord   = 1 << 42 // grains
	maxShift   = 22      // the step is at most 2^22 grains
)

// TallyOptions settle what a tally can resolve. The zero value is the default
// for maps in metres.
type TallyOptions struct {
	Grain    int  // coordinates are rounded to 2^Grain data units; default -6 (1.6 cm)
	Finest   int  // finest step is 2^Finest data units; default Grain+6
	Tiles    int  // most occupied tiles before the step is doubled; default DefaultTiles
	Weighted bool // keep a weight at every node beside the count

	// Box limits the tally to the events inside it, borders included; the rest
	// are counted as outside. Nil: no limit.
	Box *Box
}

// Box is a closed axis-aligned rectangle, in data units.
type Box struct{ Min, Max [2]float64 }

func (b *Box) holds(x, y float64) bool {
	return x >= b.Min[0] && x <= b.Max[0] && y >= b.Min[1] && y <= b.Max[1]
}

// Tally holds everything that later stages need from events in the plane:
// weights spread by linear binning over the nodes of an absolute lattice (node
// i of axis k stands at i*2^Level data units), as exact integers. An event is
// rounded to the grain and then gives its four nearest nodes corner weights
// that are whole numbers of quanta, 4^(Level-Grain) in all, so tallies add to
// the same bits in any order, and doubling the step gives to the bit what
// binning on the coarser lattice would have given. The step is the smallest
// whose occupied tiles fit the budget: a property of the set of events, not of
// their order.
//
// A tally is not safe for concurrent use; give each worker its own and Merge.
// Memory: 34 kB per occupied tile of 64 by 64 cells (twice that once a node
// passes 2^62 quanta, plus 68 kB with weights), never the events.
type Tally struct {
	grain, level int
	budget       int
	weighted     bool
	box          *Box

	tiles   []*tile
	index   tileIndex
	pending uint64 // no low word exceeds this

	events, outside int64

	queue *queue // nil before the first Add
}

type tileKey struct{ x, y int32 }

type tile struct {
	key  tileKey
	low  []uint64  // tileNodes quanta, axis 0 fastest
	high []int64   // nil until needed: value = high*2^48 + low
	w    []uint128 // weights, nil without

	weight, weight2 wide // sums of the integer weights of its events and of their squares
}

// NewTally returns an empty tally.
func NewTally(opt TallyOptions) (*Tally, error) {
	if opt.Grain == 0 {
		opt.Grain = -6
	}
	if opt.Finest == 0 {
		opt.Finest = opt.Grain + 6
	}
	if opt.Tiles == 0 {
		opt.Tiles = DefaultTiles
	}
	if opt.Finest < opt.Grain+6 || opt.Finest > opt.Grain+maxShift || opt.Tiles < 4 {
		return nil, fmt.Errorf("mv: tally: grain 2^%d, finest step 2^%d and %d tiles; the step must be 6 to 22 doublings above the grain and 4 tiles are the least: %w",
			opt.Grain, opt.Finest, opt.Tiles, ErrShape)
	}
	t := &Tally{grain: opt.Grain, level: opt.Finest, budget: opt.Tiles, weighted: opt.Weighted, box: opt.Box}
	t.index.reset(64)
	return t, nil
}

// Step returns the distance between nodes, in data units.
func (t *Tally) Step() float64 {
	t.flush()
	return math.Ldexp(1, t.level)
}

// Level returns the exponent of the step: Step = 2^Level.
func (t *Tally) Level() int {
	t.flush()
	return t.level
}

// Grain returns the unit that coordinates were rounded to.
func (t *Tally) Grain() float64 { return math.Ldexp(1, t.grain) }

// Events returns the events held.
func (t *Tally) Events() int64 { return t.events }

// Outside returns the events that fell outside the tally's box or were trimmed.
func (t *Tally) Outside() int64 { return t.outside }

// Tiles returns the occupied tiles.
func (t *Tally) Tiles() int {
	t.flush()
	return len(t.tiles)
}

// Weighted reports whether weights are kept.
func (t *Tally) Weighted() bool { return t.weighted }

// TotalWeight returns the sum of the weights held, the number of events
// without weights.
func (t *Tally) TotalWeight() float64 {
	if !t.weighted {
		return float64(t.events)
	}
	w, _ := t.weights()
	return math.Ldexp(w.float(), -weightBits)
}

// EffectiveN returns (sum w)^2 / sum w^2, the number of events without weights.
func (t *Tally) EffectiveN() float64 {
	if !t.weighted {
		return float64(t.events)
	}
	w, w2 := t.weights()
	if w2.float() == 0 {
		return 0
	}
	return w.float() * w.float() / w2.float()
}

func (t *Tally) weights() (w, w2 wide) {
	t.flush()
	for _, tl := range t.tiles {
		w.add(tl.weight)
		w2.add(tl.weight2)
	}
	return w, w2
}

// normalise moves the high part of every low word into the high word.
func (t *Tally) normalise() {
	for _, tl := range t.tiles {
		for i, v := range tl.low {
			if v > wordMask {
				if tl.high == nil {
					tl.high = make([]int64, tileNodes)
				}
				tl.high[i] += int64(v >> wordBits)
				tl.low[i] = v & wordMask
			}
		}
	}
	t.pending = wordMask
}

// quantaAt returns the node's quanta as a float64 (exact below 2^53).
func (tl *tile) quantaAt(i int) float64 {
	if tl.high == nil || tl.high[i] == 0 {
		return float64(tl.low[i])
	}
	return math.Ldexp(float64(tl.high[i]), wordBits) + float64(tl.low[i])
}

// Merge adds the events of o, which is left in an unspecified state. The grain
// must be the same and both weighted or neither: ErrIncompatible otherwise.
func (t *Tally) Merge(o *Tally) error {
	if t.grain != o.grain || t.weighted != o.weighted {
		return fmt.Errorf("mv: tally: grains 2^%d and 2^%d, weights %t and %t: %w", t.grain, o.grain, t.weighted, o.weighted, ErrIncompatible)
	}
	t.flush()
	o.flush()
	t.outside += o.outside
	if o.events == 0 {
		return nil
	}
	if t.events == 0 {
		outside, budget := t.outside, t.budget
		*t = *o
		t.outside, t.budget = outside, budget
		return nil
	}
	for o.level < t.level {
		o.Coarsen()
	}
	for t.level < o.level {
		t.Coarsen()
	}
	for t.overlapped(o) > t.budget && t.level < t.grain+maxShift {
		t.Coarsen()
		o.Coarsen()
	}
	if t.pending > 1<<61 || o.pending > 1<<61 {
		t.normalise()
		o.normalise()
	}
	for _, src := range o.tiles {
		i, ok := t.index.find(src.key)
		if !ok {
			t.index.insert(src.key, len(t.tiles))
			t.tiles = append(t.tiles, src)
			continue
		}
		t.tiles[i].add(src)
	}
	t.pending += o.pending
	t.events += o.events
	return nil
}

func (t *Tally) overlapped(o *Tally) int {
	n := len(t.tiles)
	for _, tl := range o.tiles {
		if _, ok := t.index.find(tl.key); !ok {
			n++
		}
	}
	return n
}

func (tl *tile) add(o *tile) {
	for i, v := range o.low {
		tl.low[i] += v
	}
	if o.high != nil {
		if tl.high == nil {
			tl.high = make([]int64, tileNodes)
		}
		for i, v := range o.high {
			tl.high[i] += v
		}
	}
	for i := range o.w {
		tl.w[i].add(o.w[i])
	}
	tl.weight.add(o.weight)
	tl.weight2.add(o.weight2)
}

// Clone returns an independent copy.
func (t *Tally) Clone() *Tally {
	t.flush()
	c := *t
	c.queue = nil
	c.tiles = make([]*tile, len(t.tiles))
	c.index.reset(2 * len(t.tiles))
	for i, tl := range t.tiles {
		n := &tile{key: tl.key, low: append([]uint64(nil), tl.low...), weight: tl.weight, weight2: tl.weight2}
		if tl.high != nil {
			n.high = append([]int64(nil), tl.high...)
		}
		if tl.w != nil {
			n.w = append([]uint128(nil), tl.w...)
		}
		c.tiles[i] = n
		c.index.insert(tl.key, i)
	}
	return &c
}

// tileIndex is an open-addressing table from tile keys to positions.
type tileIndex struct {
	slots []tileSlot
	used  int
}

type tileSlot struct {
	key tileKey
	pos int32 // position + 1, 0 where free
}

func (x *tileIndex) reset(room int) {
	x.slots, x.used = make([]tileSlot, 1<<bits.Len(uint(max(64, 4*room)))), 0
}

func (x *tileIndex) start(k tileKey) uint32 {
	h := uint32(k.x)*0x9E3779B1 + uint32(k.y)*0x85EBCA77
	return h ^ h>>15
}

func (x *tileIndex) find(k tileKey) (int, bool) {
	for s := x.start(k); ; s++ {
		slot := x.slots[s&uint32(len(x.slots)-1)]
		if slot.key == k && slot.pos > 0 {
			return int(slot.pos) - 1, true
		}
		if slot.pos == 0 {
			return 0, false
		}
	}
}

func (x *tileIndex) insert(k tileKey, i int) {
	if 2*x.used >= len(x.slots) {
		old := x.slots
		x.reset(len(old))
		for _, o := range old {
			if o.pos > 0 {
				x.insert(o.key, int(o.pos)-1)
			}
		}
	}
	s := x.start(k)
	for x.slots[s&uint32(len(x.slots)-1)].pos > 0 {
		s++
	}
	x.slots[s&uint32(len(x.slots)-1)] = tileSlot{k, int32(i) + 1}
	x.used++
}
