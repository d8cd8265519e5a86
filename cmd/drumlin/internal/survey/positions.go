package survey

import (
	"cmp"
	"math"
	"math/bits"
	"slices"
	"strconv"
	"strings"
)

const (
	maxPlaces = 1 << 19 // distinct positions held by one worker
	cellBits  = 16      // of the table that bounds the tallest stack
)

// place is a position.
type place struct{ x, y float64 }

// hash mixes a position's bits; its leading bits are as good as random.
func (p place) hash() uint64 {
	h := math.Float64bits(p.x)*0x9e3779b97f4a7c15 ^ bits.RotateLeft64(math.Float64bits(p.y)*0xc2b2ae3d27d4eb4f, 31)
	h ^= h >> 32
	h *= 0xd6e8feb86659fd93
	h ^= h >> 29
	h *= 0xff51afd7ed558ccd
	return h ^ h>>32
}

// positions counts the events at every position. While there are at most
// maxPlaces of them the counts are exact; beyond that only those whose hash
// starts with level zero bits are kept, one in 2^level, with exact counts: a
// random sample of positions that depends on the set alone, not on its order.
// A table of counts by hash bounds the tallest stack from above even then.
type positions struct {
	rows  int64
	level int
	at    map[place]int64
	cells []uint32
}

func newPositions() *positions {
	return &positions{at: map[place]int64{}, cells: make([]uint32, 1<<cellBits)}
}

func (p *positions) add(x, y []float64) {
	p.rows += int64(len(x))
	for i, v := range x {
		q := place{v + 0, y[i] + 0} // + 0 turns -0 into 0
		h := q.hash()
		if c := &p.cells[h&(1<<cellBits-1)]; *c < math.MaxUint32 {
			*c++
		}
		if bits.LeadingZeros64(h) >= p.level {
			p.at[q]++
			p.thin()
		}
	}
}

func (p *positions) thin() {
	for len(p.at) > maxPlaces {
		p.level++
		for q := range p.at {
			if bits.LeadingZeros64(q.hash()) < p.level {
				delete(p.at, q)
			}
		}
	}
}

func (p *positions) merge(o *positions) {
	p.rows += o.rows
	for i, c := range o.cells {
		p.cells[i] += min(c, math.MaxUint32-p.cells[i])
	}
	p.level = max(p.level, o.level)
	for q := range p.at {
		if bits.LeadingZeros64(q.hash()) < p.level {
			delete(p.at, q)
		}
	}
	for q, n := range o.at {
		if bits.LeadingZeros64(q.hash()) >= p.level {
			p.at[q] += n
		}
	}
	p.thin()
}

// scale is what one kept position stands for.
func (p *positions) scale() int64 { return 1 << p.level }

// stack is a position that was counted.
type stack struct {
	place
	rows int64
}

// sorted returns the kept positions, tallest first, in a fixed order.
func (p *positions) sorted() []stack {
	out := make([]stack, 0, len(p.at))
	for q, n := range p.at {
		out = append(out, stack{q, n})
	}
	slices.SortFunc(out, func(a, b stack) int {
		return cmp.Or(cmp.Compare(b.rows, a.rows), cmp.Compare(a.x, b.x), cmp.Compare(a.y, b.y))
	})
	return out
}

// quantiles returns the values below which the shares of the rows lie.
func quantiles(s []stack, axis func(stack) float64, shares ...float64) []float64 {
	order := slices.Clone(s)
	slices.SortFunc(order, func(a, b stack) int { return cmp.Compare(axis(a), axis(b)) })
	var total, sum int64
	for _, v := range order {
		total += v.rows
	}
	out := make([]float64, len(shares))
	k := 0
	for i, share := range shares {
		for k < len(order)-1 && float64(sum+order[k].rows) < share*float64(total) {
			sum += order[k].rows
			k++
		}
		if len(order) > 0 {
			out[i] = axis(order[k])
		}
	}
	return out
}

// decimals counts the digits after the point in the shortest form of a number.
func decimals(v float64) int {
	var b [400]byte
	s := string(strconv.AppendFloat(b[:0], v, 'f', -1, 64))
	if _, frac, ok := strings.Cut(s, "."); ok {
		return len(frac)
	}
	return 0
}
