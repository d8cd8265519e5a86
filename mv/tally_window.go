package mv

import (
	"fmt"
	"math"
	"slices"
)

// CoreBox returns the rectangle that a robust extent keeps: on each axis the
// interval that holds the central 95 % of the events, widened by its own width
// on either side (and by a tile's edge at least). The rule is common practice in
// spirit (a fence around a central interval); its numbers are this project's own.
func (t *Tally) CoreBox() Box {
	t.flush()
	var b Box
	edge := math.Ldexp(tileCells, t.level)
	for axis := range 2 {
		lo, hi := t.quantile(axis, 0.025), t.quantile(axis, 0.975)
		pad := math.Max(hi-lo, edge)
		b.Min[axis], b.Max[axis] = lo-pad, hi+pad
	}
	return b
}

// quantile returns the coordinate of the node at which the marginal count of
// an axis passes share q.
func (t *Tally) quantile(axis int, q float64) float64 {
	byTile := map[int32]*[tileSide]float64{}
	for _, tl := range t.tiles {
		k := tl.key.x
		if axis == 1 {
			k = tl.key.y
		}
		m := byTile[k]
		if m == nil {
			m = new([tileSide]float64)
			byTile[k] = m
		}
		for at := range tileNodes {
			i := at % tileSide
			if axis == 1 {
				i = at / tileSide
			}
			m[i] += tl.quantaAt(at)
		}
	}
	keys := make([]int32, 0, len(byTile))
	for k := range byTile {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	target := q * float64(t.events) * math.Ldexp(1, 2*(t.level-t.grain))
	var sum float64
	for _, k := range keys {
		for i, v := range byTile[k] {
			if sum += v; v > 0 && sum >= target {
				return math.Ldexp(float64(int64(k)*tileCells+int64(i)), t.level)
			}
		}
	}
	return 0
}

// TrimStrays drops the events outside CoreBox when they are strays (a slipped
// decimal point, a mistaken origin): at most ten or one in a hundred (and no more than one in twenty), and
// without them the longer axis shrinks by half or more. It returns how many
// went. Extremes that stretch the lattice little are kept.
func (t *Tally) TrimStrays() int64 {
	box := t.CoreBox()
	var strays int64
	all, core := tileSpan{}, tileSpan{}
	for _, tl := range t.tiles {
		all.add(tl.key)
		if t.meets(tl, box) {
			core.add(tl.key)
		} else {
			strays += tl.events(t.level - t.grain)
		}
	}
	if 2*core.longest() > all.longest() {
		return 0
	}
	if strays > max(10, t.events/100) || strays*20 > t.events {
		return 0
	}
	return t.Trim(box)
}

// tileSpan is the range of some tiles on each axis.
type tileSpan struct {
	lo, hi tileKey
	some   bool
}

func (s *tileSpan) add(k tileKey) {
	if !s.some {
		s.lo, s.hi, s.some = k, k, true
		return
	}
	s.lo = tileKey{min(s.lo.x, k.x), min(s.lo.y, k.y)}
	s.hi = tileKey{max(s.hi.x, k.x), max(s.hi.y, k.y)}
}

// longest returns the tiles along the longer axis.
func (s *tileSpan) longest() int64 {
	return 1 + max(int64(s.hi.x)-int64(s.lo.x), int64(s.hi.y)-int64(s.lo.y))
}

// meets reports whether the tile's closed square shares a point with the box.
func (t *Tally) meets(tl *tile, b Box) bool {
	edge := math.Ldexp(tileCells, t.level)
	x, y := float64(tl.key.x)*edge, float64(tl.key.y)*edge
	return x <= b.Max[0] && x+edge >= b.Min[0] && y <= b.Max[1] && y+edge >= b.Min[1]
}

// Trim drops every tile that does not meet the box and returns how many events
// went with them; they count as outside from then on. A tile's events go or
// stay together, so no event is ever cut in two.
func (t *Tally) Trim(b Box) int64 {
	t.flush()
	kept := t.tiles[:0]
	t.index.reset(len(t.tiles))
	var gone int64
	for _, tl := range t.tiles {
		if t.meets(tl, b) {
			t.index.insert(tl.key, len(kept))
			kept = append(kept, tl)
			continue
		}
		gone += tl.events(t.level - t.grain)
	}
	clear(t.tiles[len(kept):])
	t.tiles = kept
	t.events -= gone
	t.outside += gone
	return gone
}

// events returns the number of events in the tile: its quanta over 4^shift.
func (tl *tile) events(shift int) int64 {
	var sum wide
	for i, v := range tl.low {
		sum.add(wide{[3]uint64{v, 0, 0}})
		if tl.high != nil {
			sum.addProduct(uint64(tl.high[i]), 1<<wordBits)
		}
	}
	return int64(math.Ldexp(sum.float(), -2*shift))
}

// Bounds returns the least and greatest node index on each axis that carries
// something, at the tally's own level. It needs at least one event.
func (t *Tally) Bounds() (lo, hi [2]int64) {
	t.flush()
	lo = [2]int64{math.MaxInt64, math.MaxInt64}
	hi = [2]int64{math.MinInt64, math.MinInt64}
	for _, tl := range t.tiles {
		base := [2]int64{int64(tl.key.x) * tileCells, int64(tl.key.y) * tileCells}
		for at, v := range tl.low {
			if v == 0 && (tl.high == nil || tl.high[at] == 0) {
				continue
			}
			for axis, i := range [2]int64{base[0] + int64(at%tileSide), base[1] + int64(at/tileSide)} {
				lo[axis], hi[axis] = min(lo[axis], i), max(hi[axis], i)
			}
		}
	}
	return lo, hi
}

// Grid returns the counts (or, for a weighted tally with weights set, the
// weights) on the dense lattice of nodes lo to hi, both included, at the
// tally's level. Nodes outside hold nothing and what the tally has there is
// left out. ErrTooLarge above 2^28 nodes.
func (t *Tally) Grid(lo, hi [2]int64, weights bool) (Grid, error) {
	t.flush()
	n := [2]int64{hi[0] - lo[0] + 1, hi[1] - lo[1] + 1}
	if n[0] < 1 || n[1] < 1 || n[0]*n[1] > 1<<28 {
		return Grid{}, fmt.Errorf("mv: tally: a grid of %d by %d nodes at step %g: %w", n[0], n[1], t.Step(), ErrTooLarge)
	}
	step := t.Step()
	lat, err := NewLattice([]float64{float64(lo[0]) * step, float64(lo[1]) * step}, []float64{step, step}, []int{int(n[0]), int(n[1])})
	if err != nil {
		return Grid{}, err
	}
	g := NewGrid(lat)
	unit := math.Ldexp(1, -2*(t.level-t.grain))
	// Tiles in a fixed order, so that the shared border nodes add alike always.
	order := make([]*tile, len(t.tiles))
	copy(order, t.tiles)
	slices.SortFunc(order, func(a, b *tile) int {
		if a.key.y != b.key.y {
			return int(a.key.y) - int(b.key.y)
		}
		return int(a.key.x) - int(b.key.x)
	})
	for _, tl := range order {
		for j := range tileSide {
			y := int64(tl.key.y)*tileCells + int64(j) - lo[1]
			if y < 0 || y >= n[1] {
				continue
			}
			row := g.Values[y*n[0] : (y+1)*n[0]]
			for i := range tileSide {
				x := int64(tl.key.x)*tileCells + int64(i) - lo[0]
				if x < 0 || x >= n[0] {
					continue
				}
				at := j*tileSide + i
				if weights && tl.w != nil {
					row[x] += math.Ldexp(tl.w[at].float(), -2*(t.level-t.grain)-weightBits)
				} else if v := tl.quantaAt(at); v != 0 {
					row[x] += v * unit
				}
			}
		}
	}
	return g, nil
}
