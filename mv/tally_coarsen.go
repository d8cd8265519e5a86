package mv

// Coarsen doubles the step, exactly: a coarse hat is piecewise linear on the
// fine nodes, so per axis coarse node c receives 2*v(2c) + v(2c-1) + v(2c+1)
// at a quarter of the quantum's size in the plane.
func (t *Tally) Coarsen() {
	t.flush()
	if t.pending > 1<<58 {
		t.normalise()
	}
	fine := t.tiles
	t.tiles = make([]*tile, 0, len(fine)/2+1)
	t.index.reset(len(fine))
	t.level++
	for i, src := range fine {
		fine[i] = nil // let the collector have it
		key := tileKey{src.key.x >> 1, src.key.y >> 1}
		var dst *tile
		if at, ok := t.index.find(key); ok {
			dst = t.tiles[at]
		} else {
			dst = t.newTile(key)
		}
		dst.addCoarse(src)
	}
	t.pending *= 16 // a coarse node gathers at most 16 times the largest fine one
}

// addCoarse spreads the nodes of a fine tile over the quarter of dst that it covers.
func (dst *tile) addCoarse(src *tile) {
	const half = tileCells / 2
	offX, offY := half*int(src.key.x&1), half*int(src.key.y&1)
	if src.high != nil && dst.high == nil {
		dst.high = make([]int64, tileNodes)
	}
	for j := range tileSide {
		rows, wy := coarseNodes(j, offY)
		for i := range tileSide {
			at := j*tileSide + i
			low := src.low[at]
			var high int64
			if src.high != nil {
				high = src.high[at]
			}
			var w uint128
			if src.w != nil {
				w = src.w[at]
			}
			if low == 0 && high == 0 && w == (uint128{}) {
				continue
			}
			cols, wx := coarseNodes(i, offX)
			for _, r := range rows[:3-wy] {
				for _, c := range cols[:3-wx] {
					to, k := r*tileSide+c, uint64(wx*wy)
					dst.low[to] += low * k
					if high != 0 {
						dst.high[to] += high * int64(k)
					}
					if src.w != nil {
						dst.w[to].add(w.times(k))
					}
				}
			}
		}
	}
	dst.weight.add(src.weight)
	dst.weight2.add(src.weight2)
}

// coarseNodes returns the coarse nodes that fine node i gives to and the
// weight of each: one node with weight 2 for even i, two with weight 1 for odd.
func coarseNodes(i, off int) (nodes [2]int, weight int) {
	if i%2 == 0 {
		return [2]int{off + i/2}, 2
	}
	return [2]int{off + (i-1)/2, off + (i+1)/2}, 1
}
